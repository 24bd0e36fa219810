"""Means over a fundamental period of any on-state curve and any energy curve.

With i = I sin(theta) over the conducting half wave, the share of the upper
switch is (1 + sum_h M_h sin(h (theta + phi)))/2. All odd harmonics keep only
their part that is even about the current's peak, so that

    switch: A + sum_h M_h cos(h phi) B_h      diode: A - sum_h M_h cos(h phi) B_h

    A = 1/(4 pi) int v i dtheta,   B_h = 1/(4 pi) int v i sin(h theta) dtheta

holds for every curve, straight or not. (With a straight line and no injection
it is the formula of F. Casanellas, IEE Proc.-Electr. Power Appl. 141(5), 1994.)
"""

from __future__ import annotations

import numpy as np

from ..checks import require_range
from ..device import PowerModule, on_state_voltage_v, switching_energy_j
from ..errors import RangeError
from .modulation import Modulation

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(24)


def half_wave_angles(i_peak_a, knots_a):
    """Angles and weights that integrate any curve with kinks at ``knots_a`` over a quarter wave.

    Parameters
    ----------
    i_peak_a : ndarray, shape (n,)
    knots_a : ndarray, shape (k,)
        Currents where the curve has a kink.

    Returns
    -------
    theta, weight : ndarray, shape (n, p)
        Gauss-Legendre points between the kinks; the weights sum to pi/2.
    """
    i = np.asarray(i_peak_a, float)[:, None]
    knots = np.asarray(knots_a, float)[None, :]
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        ratio = np.where(i > 0.0, knots / np.where(i > 0.0, i, 1.0), 1.0)
    borders = np.arcsin(np.clip(ratio, 0.0, 1.0))
    # two more borders keep the high harmonics resolved where the curve has no kink
    fixed = np.broadcast_to(np.array([0.0, np.pi / 6, np.pi / 3, np.pi / 2]), (i.shape[0], 4))
    borders = np.sort(np.concatenate([fixed, borders], axis=1), axis=1)
    half = 0.5 * np.diff(borders, axis=1)[..., None]
    middle = 0.5 * (borders[:, 1:] + borders[:, :-1])[..., None]
    theta = (middle + half * _NODES).reshape(i.shape[0], -1)
    weight = (half * _WEIGHTS).reshape(i.shape[0], -1)
    return theta, weight


def conduction_integrals_w(curves, i_peak_a, t_vj_c, harmonics):
    """A and B_h of one on-state curve.

    Parameters
    ----------
    curves : on-state curves of a module file
    i_peak_a : array_like, shape (n,)
        Peak phase current [A], >= 0.
    t_vj_c : float
        Junction temperature [degC].
    harmonics : sequence of int
        Odd orders h.

    Returns
    -------
    ndarray, shape (n, 1 + len(harmonics))
        A, then B_h [W].
    """
    i = require_range("i_peak_a", np.atleast_1d(i_peak_a), low=0.0, unit="A")
    knots = np.unique(np.concatenate([c.current_a for c in curves.curve]))
    theta, weight = half_wave_angles(i, knots)
    current = i[:, None] * np.sin(theta)
    power = on_state_voltage_v(curves, current, t_vj_c) * current * weight
    out = np.empty((i.size, 1 + len(harmonics)))
    out[:, 0] = power.sum(axis=1)
    for k, h in enumerate(harmonics, 1):
        out[:, k] = (power * np.sin(h * theta)).sum(axis=1)
    return out / (2.0 * np.pi)  # two quarter waves over 4 pi


def mean_energy_j(curves, i_peak_a, t_vj_c):
    """Energy per switching averaged over the whole period (the other half wave counts as zero), shape (n,) [J]."""
    i = require_range("i_peak_a", np.atleast_1d(i_peak_a), low=0.0, unit="A")
    knots = np.unique(np.concatenate([c.current_a for c in curves.curve]))
    theta, weight = half_wave_angles(i, knots)
    energy = switching_energy_j(curves, i[:, None] * np.sin(theta), t_vj_c)
    return np.where(i > 0.0, (energy * weight).sum(axis=1) / np.pi, 0.0)


def voltage_factor(curves, v_dc_v):
    """Energies over their reference voltage: (V_dc/V_ref)^k, [-]."""
    return (np.asarray(v_dc_v, float) / curves.v_ref_v) ** curves.voltage_exponent


def mean_losses_w(module: PowerModule, modulation: Modulation, *, i_peak_a, mod_index, phi_rad, t_switch_c, t_diode_c,
                  switching_frequency_hz, v_dc_v):
    """Mean losses of one switch and one diode over a fundamental period, exact for the curves of the file.

    Parameters
    ----------
    module : PowerModule
    modulation : Modulation
    i_peak_a, mod_index, phi_rad : array_like, shape (n,)
        Peak phase current [A]; modulation index; displacement [rad], positive when
        the current lags, beyond 90 degrees when generating.
    t_switch_c, t_diode_c : float
        Junction temperatures [degC].
    switching_frequency_hz, v_dc_v : float

    Returns
    -------
    dict of ndarray, shape (n,)
        ``switch_conduction``, ``switch_switching``, ``diode_conduction``,
        ``diode_switching`` [W].

    Raises
    ------
    RangeError
        Negative current, or modulation index beyond the linear range.

    Notes
    -----
    Dead time and current ripple are neglected. Temperature is held over the period;
    the march adds what the ripple of the temperature changes.
    """
    i = require_range("i_peak_a", np.atleast_1d(i_peak_a), low=0.0, unit="A")
    m = require_range("mod_index", mod_index, low=0.0, high=modulation.mod_index_max * (1 + 1e-9))
    phi = require_range("phi_rad", phi_rad)
    require_range("v_dc_v", v_dc_v, low=0.0, low_open=True, unit="V")
    try:
        i, m, phi = np.broadcast_arrays(i, m, phi)
    except ValueError:
        raise RangeError("i_peak_a, mod_index, phi_rad", f"shapes {np.shape(i_peak_a)}, {np.shape(mod_index)}, {np.shape(phi_rad)}",
                         "equal lengths, or single numbers") from None
    series = modulation.harmonics()
    orders = list(series)
    turn = np.stack([m * amount * np.cos(h * phi) for h, amount in series.items()], axis=1)
    switch = conduction_integrals_w(module.switch.on_state, i, t_switch_c, orders)
    diode = conduction_integrals_w(module.diode.on_state, i, t_diode_c, orders)
    f = float(require_range("switching_frequency_hz", switching_frequency_hz, low=0.0, unit="Hz"))
    on, off, rec = module.switch.turn_on, module.switch.turn_off, module.diode.recovery
    return {
        "switch_conduction": switch[:, 0] + (turn * switch[:, 1:]).sum(axis=1),
        "switch_switching": f * (mean_energy_j(on, i, t_switch_c) * voltage_factor(on, v_dc_v)
                                 + mean_energy_j(off, i, t_switch_c) * voltage_factor(off, v_dc_v)),
        "diode_conduction": diode[:, 0] - (turn * diode[:, 1:]).sum(axis=1),
        "diode_switching": f * mean_energy_j(rec, i, t_diode_c) * voltage_factor(rec, v_dc_v),
    }
