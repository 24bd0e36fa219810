"""Losses over a fundamental period, exact for any on-state curve, any energy curve, every leg and modulation.

The period is cut wherever something has a kink or a jump: where the current
passes a point of a curve, changes its sign, where a phase begins or ends to be
held or clipped, where the reference of a three-level leg changes its sign. Every
piece is smooth and is integrated by Gauss-Legendre points.

For modulations whose zero sequence is proportional to the modulation index the
mean conduction losses of a two-level leg also have the closed form

    switch: A + sum_h M_h cos(h phi) B_h      diode: A - sum_h M_h cos(h phi) B_h

    A = 1/(4 pi) int v i dtheta,   B_h = 1/(4 pi) int v i sin(h theta) dtheta

over the half wave, whatever the curve. (With a straight line and no injection
it is the formula of F. Casanellas, IEE Proc.-Electr. Power Appl. 141(5), 1994.)
:func:`conduction_integrals_w` gives A and B_h.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..checks import require_range
from ..device import PowerModule, on_state_voltage_v, switching_energy_j
from ..errors import RangeError
from . import legs
from .modulation import Modulation, held_phase, phase_reference, reference_for

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(24)
_FEW, _FEW_WEIGHTS = np.polynomial.legendre.leggauss(8)


@dataclass(frozen=True)
class LegLosses:
    """Losses of every chip of one leg; p positions.

    Attributes
    ----------
    positions : tuple of str
        Names of the chips, e.g. S-up, S-lo, D-up, D-lo.
    conduction_w, switching_w : ndarray, shape (p, n)
    """

    positions: tuple[str, ...]
    conduction_w: np.ndarray
    switching_w: np.ndarray

    @property
    def total_w(self) -> np.ndarray:
        """Conduction and switching together, shape (p, n) [W]."""
        return self.conduction_w + self.switching_w


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
    # two more borders keep the high harmonics resolved where the curve has no kink
    fixed = np.broadcast_to(np.array([0.0, np.pi / 6, np.pi / 3, np.pi / 2]), (i.shape[0], 4))
    borders = np.sort(np.concatenate([fixed, _knot_angles(i, knots_a)], axis=1), axis=1)
    half = 0.5 * np.diff(borders, axis=1)[..., None]
    middle = 0.5 * (borders[:, 1:] + borders[:, :-1])[..., None]
    theta = (middle + half * _NODES).reshape(i.shape[0], -1)
    weight = (half * _WEIGHTS).reshape(i.shape[0], -1)
    return theta, weight


def _knot_angles(i_peak, knots_a):
    """Angles of the first quarter wave where a current passes given values, (n, 1) and (k,) -> (n, k)."""
    knots = np.asarray(knots_a, float)[None, :]
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        ratio = np.where(i_peak > 0.0, knots / np.where(i_peak > 0.0, i_peak, 1.0), 1.0)
    return np.arcsin(np.clip(ratio, 0.0, 1.0))


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
    knots = np.unique(np.concatenate([c.current_a for c in curves.points]))
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
    knots = np.unique(np.concatenate([c.current_a for c in curves.points]))
    theta, weight = half_wave_angles(i, knots)
    energy = switching_energy_j(curves, i[:, None] * np.sin(theta), t_vj_c)
    return np.where(i > 0.0, (energy * weight).sum(axis=1) / np.pi, 0.0)


def voltage_factor(curves, v_commutated_v):
    """Energies over their reference voltage: (V/V_ref)^k, [-]."""
    return (np.asarray(v_commutated_v, float) / curves.v_ref_v) ** curves.voltage_exponent


def gate_factors(module: PowerModule, places, r_gate_on_ohm=None, r_gate_off_ohm=None) -> np.ndarray:
    """What other gate resistors than those of the energy curves make of the energies, one factor a curve.

    Parameters
    ----------
    module : PowerModule
    places : sequence of str
        Energy curves by their place in the file, e.g. ``"switch.turn_on"``.
    r_gate_on_ohm, r_gate_off_ohm : float, optional
        External resistors; default those of the module file [ohm].

    Raises
    ------
    RangeError
        Another resistor than the file's where the data sheet gives no curve over it, or one outside that curve.
    """
    curves = module.energy_curves()
    out = np.ones(len(places))
    for k, place in enumerate(places):
        name = "r_gate_off_ohm" if place.endswith("turn_off") else "r_gate_on_ohm"
        asked = r_gate_off_ohm if name == "r_gate_off_ohm" else r_gate_on_ohm
        used = module.gate_resistor_ohm(place) if asked is None else float(asked)
        table = curves[place].gate_resistor
        if table is None:
            if asked is not None and used != module.gate_resistor_ohm(place):
                raise RangeError(name, f"{used:g} ohm", f"{module.gate_resistor_ohm(place):g} ohm, the module's own",
                                 f"{place} of '{module.name}' has no section gate_resistor: add one, or leave the resistor as it is")
            continue
        try:
            out[k] = table.factor(used)
        except RangeError as err:
            raise RangeError(name, err.found, err.allowed, f"{err.advice} ({place} of '{module.name}')") from None
    return out


@dataclass(frozen=True)
class _Case:
    """Checked inputs of a leg, one operating point a row."""

    plan: legs.LegPlan
    modulation: Modulation
    i_peak: np.ndarray
    reference: np.ndarray
    clip_first: np.ndarray
    clip_last: np.ndarray
    phi: np.ndarray
    t_c: np.ndarray  # (positions,)
    fsw: np.ndarray
    f: np.ndarray
    scale: np.ndarray  # (energies, n), without the switching frequency
    dead: float
    compensated: bool


def leg_losses_w(module: PowerModule, modulation: Modulation, *, i_peak_a, mod_index, phi_rad, t_vj_c, switching_frequency_hz, v_dc_v,
                 frequency_hz=None, dead_time_s=0.0, dead_time_compensated=False, overmodulation=False, r_gate_on_ohm=None,
                 r_gate_off_ohm=None) -> LegLosses:
    """Mean losses of every chip of a leg over a fundamental period.

    Parameters
    ----------
    module : PowerModule
        Of any kind and arrangement.
    modulation : Modulation
    i_peak_a, mod_index, phi_rad : array_like, shape (n,)
        Peak phase current [A]; modulation index (fundamental peak phase voltage over half
        the DC voltage); displacement [rad], positive when the current lags, beyond 90
        degrees when generating.
    t_vj_c : float or array_like, shape (p,)
        Junction temperatures, one for all or one a position [degC].
    switching_frequency_hz, v_dc_v : array_like
    frequency_hz : array_like, optional
        Output frequency; needed in overmodulation only, where a reference that moves fast makes more
        edges its way than against it, down to a single one in six-step. Without it the carrier is taken as much faster.
    dead_time_s : float
        Time in which both switches of a pair are off [s].
    dead_time_compensated : bool
        Whether the control corrects the voltage that the dead time costs.
    overmodulation : bool
        Allow a modulation index up to 4/pi, see :func:`mission.losses.reference_for`.
    r_gate_on_ohm, r_gate_off_ohm : float, optional
        Other gate resistors than the module file's.

    Returns
    -------
    LegLosses

    Raises
    ------
    RangeError
        Names the argument, the first bad index and value.

    Notes
    -----
    Current ripple is neglected. Temperature is held over the period; the march adds what its
    ripple changes. A three-level leg commutates half the DC voltage, its midpoint is taken
    as balanced.

    Examples
    --------
    >>> from mission.device import load_module
    >>> one = leg_losses_w(load_module("heron-300"), Modulation.CLAMP_120_UPPER, i_peak_a=300.0, mod_index=0.8, phi_rad=0.4, t_vj_c=125.0,
    ...                    switching_frequency_hz=5000.0, v_dc_v=600.0)
    >>> one.positions
    ('S-up', 'S-lo', 'D-up', 'D-lo')
    >>> bool(one.total_w[0, 0] != one.total_w[1, 0])
    True
    """
    case = _case(module, modulation, i_peak_a, mod_index, phi_rad, t_vj_c, switching_frequency_hz, v_dc_v, frequency_hz, dead_time_s,
                 dead_time_compensated, overmodulation, r_gate_on_ohm, r_gate_off_ohm)
    n = case.i_peak.size
    out = np.zeros((2, len(case.plan.positions), n))
    for a in range(0, n, 256):  # bounded memory
        part = slice(a, min(a + 256, n))
        theta, weight = _period_points(case, part)
        for total, values in zip(out, _at_angles(case, part, theta)):
            total[:, part] = (values * weight).sum(axis=2) / (2.0 * np.pi)
    return LegLosses(case.plan.positions, out[0], out[1])


def leg_losses_at_angle_w(module: PowerModule, modulation: Modulation, theta_rad, **point) -> LegLosses:
    """Losses of a leg along the angle of its current, averaged over a switching period only.

    Parameters
    ----------
    module : PowerModule
    modulation : Modulation
    theta_rad : array_like, shape (a,)
        Angle of the phase current i = I sin(theta) [rad].
    **point
        One operating point, as for :func:`leg_losses_w`.

    Returns
    -------
    LegLosses
        Arrays of shape (p, a).

    Raises
    ------
    RangeError
        As :func:`leg_losses_w`; more than one operating point.
    """
    order = ("i_peak_a", "mod_index", "phi_rad", "t_vj_c", "switching_frequency_hz", "v_dc_v", "frequency_hz", "dead_time_s",
             "dead_time_compensated", "overmodulation", "r_gate_on_ohm", "r_gate_off_ohm")
    default = {"frequency_hz": None, "dead_time_s": 0.0, "dead_time_compensated": False, "overmodulation": False, "r_gate_on_ohm": None,
               "r_gate_off_ohm": None}
    for name in point:
        if name not in order:
            raise TypeError(f"leg_losses_at_angle_w has no argument '{name}'")
    given = default | point
    case = _case(module, modulation, *(given[name] for name in order))
    if case.i_peak.size != 1:
        raise RangeError("i_peak_a", f"{case.i_peak.size} operating points", "one")
    theta = require_range("theta_rad", np.atleast_1d(theta_rad))
    conduction, switching = _at_angles(case, slice(0, 1), theta[None, :])
    return LegLosses(case.plan.positions, conduction[:, 0], switching[:, 0])


def _case(module, modulation, i_peak_a, mod_index, phi_rad, t_vj_c, fsw, v_dc_v, frequency_hz, dead_time_s, compensated, overmodulation,
          r_on, r_off):
    i = require_range("i_peak_a", np.atleast_1d(i_peak_a), low=0.0, unit="A")
    phi = require_range("phi_rad", np.atleast_1d(phi_rad))
    most = modulation.mod_index_max
    if not overmodulation:
        require_range("mod_index", mod_index, low=0.0, high=most * (1 + 1e-9))
    reference, first, last = reference_for(modulation, mod_index)
    fsw = require_range("switching_frequency_hz", np.atleast_1d(fsw), low=0.0, unit="Hz")
    v = require_range("v_dc_v", np.atleast_1d(v_dc_v), low=0.0, low_open=True, unit="V")
    f = np.zeros(1) if frequency_hz is None else require_range("frequency_hz", np.atleast_1d(frequency_hz), low=0.0, unit="Hz")
    dead = float(require_range("dead_time_s", dead_time_s, low=0.0, unit="s"))
    if dead * fsw.max(initial=0.0) > 0.1:
        raise RangeError("dead_time_s", f"{dead:g} s at {fsw.max():g} Hz", "at most a tenth of the switching period", "dead time is in seconds, not microseconds")
    try:
        i, reference, first, last, phi, fsw, v, f = np.broadcast_arrays(i, reference, first, last, phi, fsw, v, f)
    except ValueError:
        raise RangeError("i_peak_a, mod_index, phi_rad", f"shapes {np.shape(i_peak_a)}, {np.shape(mod_index)}, {np.shape(phi_rad)}",
                         "equal lengths, or single numbers") from None
    plan = legs.leg_plan(module)
    t = require_range("t_vj_c", t_vj_c, unit="degC")
    if t.ndim > 1 or (t.ndim == 1 and t.size != len(plan.positions)):
        raise RangeError("t_vj_c", f"shape {t.shape}", f"one temperature, or one for each of {', '.join(plan.positions)}")
    gate = gate_factors(module, plan.energy_places, r_on, r_off)
    scale = np.stack([g * voltage_factor(c, v / (plan.levels - 1)) for g, c in zip(gate, plan.energies)])
    return _Case(plan, modulation, i, reference, first, last, phi, np.broadcast_to(t, (len(plan.positions),)), fsw, f, scale, dead, bool(compensated))


def _period_points(case, part):
    """Gauss-Legendre points of a whole period between everything that has a kink or a jump, (n, p)."""
    i, phi = case.i_peak[part, None], case.phi[part, None]
    knots = np.unique(np.concatenate([legs.current_knots_a(curves, case.t_c) for curves in (*case.plan.voltages, *case.plan.energies)]))
    quarter = _knot_angles(i, knots)
    from_current = np.concatenate([quarter, np.pi - quarter, np.pi + quarter, 2.0 * np.pi - quarter], axis=1)
    shift = case.modulation.shift_rad(phi)
    first, last = case.clip_first[part, None], case.clip_last[part, None]
    x = np.concatenate([shift + np.arange(12) * np.pi / 6, np.broadcast_to(np.arange(12) * np.pi / 6, (i.shape[0], 12))]
                       + [s * a + b for a in (first, last) for s, b in ((1, 0), (-1, np.pi), (1, np.pi), (-1, 2 * np.pi))], axis=1)
    x = np.mod(x, 2.0 * np.pi)
    if case.modulation is Modulation.THIRD_HARMONIC_QUARTER:
        top = np.arcsin(np.sqrt(7.0 / 12.0))  # between two of its highest points the reference only rises or only falls
        x = np.concatenate([x, np.broadcast_to([top, np.pi - top, np.pi + top, 2 * np.pi - top], (i.shape[0], 4))], axis=1)
    pieces = np.sort(x, axis=1)
    if case.plan.levels == 3:
        x = np.concatenate([x, _crossings(case, part, pieces, np.zeros((i.shape[0], 1)))], axis=1)
    if case.dead > 0.0 and not case.compensated:
        dead = case.dead * case.fsw[part, None]
        for level in (1.0 - 2.0 * dead, 2.0 * dead - 1.0) if case.plan.levels == 2 else (dead, -dead, 1.0 - dead, dead - 1.0):
            x = np.concatenate([x, _crossings(case, part, pieces, level)], axis=1)
    ends = np.broadcast_to([0.0, np.pi, 2.0 * np.pi], (i.shape[0], 3))
    borders = np.sort(np.concatenate([from_current, np.mod(x - phi, 2.0 * np.pi), ends], axis=1), axis=1)
    half = 0.5 * np.diff(borders, axis=1)[..., None]
    middle = 0.5 * (borders[:, 1:] + borders[:, :-1])[..., None]
    return (middle + half * _FEW).reshape(i.shape[0], -1), (half * _FEW_WEIGHTS).reshape(i.shape[0], -1)


def _crossings(case, part, x, level):
    """Where the reference passes a level (n, 1) inside the pieces between sorted angles ``x``; other pieces give their end."""
    low, high = x, np.concatenate([x[:, 1:], x[:, :1] + 2.0 * np.pi], axis=1)
    span = high - low
    low, high = low + 1e-9 * span, high - 1e-9 * span

    def positive(at):
        return phase_reference(case.modulation, at, case.reference[part, None], case.phi[part, None]) >= level

    begins = positive(low)
    for _ in range(50):
        middle = 0.5 * (low + high)
        same = positive(middle) == begins
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    return np.mod(0.5 * (low + high), 2.0 * np.pi)


def _at_angles(case, part, theta):
    """Conduction and switching losses of every position, each (positions, n, angles) [W]."""
    plan = case.plan
    col = (slice(None), None)
    i_peak, phi, fsw = case.i_peak[part][col], case.phi[part][col], case.fsw[part][col]
    current = i_peak * np.sin(theta)
    size = np.abs(current)
    flow = np.where(np.sin(theta) >= 0.0, legs.FLOW_OUT, legs.FLOW_IN)
    x = theta + phi
    wanted = phase_reference(case.modulation, x, case.reference[part][col], phi)
    r = np.clip(wanted, -1.0, 1.0)
    # at the very edge of the linear range the peak still switches; clipped stretches do not, nor a three-level leg at zero
    switches = np.abs(wanted) <= np.where(case.clip_first[part][col] < np.pi / 2, 1.0, 1.0 + 1e-9)
    if case.modulation.holds:
        switches = held_phase(case.modulation, x, phi)[0] != 0
    if plan.levels == 3:
        switches = switches & (r != 0.0)
    # a pulse of the switch that takes the current over never comes if it is shorter than the dead time
    dead = case.dead * fsw
    above = 0.5 * (1.0 + r) if plan.levels == 2 else np.where(r >= 0.0, r, 1.0 + r)
    taking = np.where(flow == legs.FLOW_OUT, above, 1.0 - above)
    gone = switches & (taking <= dead) & (dead > 0.0) & (not case.compensated)
    dead = dead * switches
    switches = switches & ~gone
    move = 0.0 if case.compensated else np.where(flow == legs.FLOW_OUT, -dead, dead)  # to the upper state of the pair
    if plan.levels == 2:
        upper = np.clip(0.5 * (1.0 + r) + move, 0.0, 1.0)
        share = {legs.P: upper, legs.Z: np.zeros_like(r), legs.N: 1.0 - upper}
    else:
        upper = np.clip(np.where(r >= 0.0, r, 1.0 + r) + move, 0.0, 1.0)
        share = {legs.P: np.where(r >= 0.0, upper, 0.0), legs.Z: np.where(r >= 0.0, 1.0 - upper, upper), legs.N: np.where(r >= 0.0, 0.0, 1.0 - upper)}
    idle = np.where(flow == legs.FLOW_OUT, share[legs.N], share[legs.P])
    share[legs.DEAD] = np.minimum(np.where(gone, taking + dead, 2.0 * dead), idle)
    share[legs.N_GATED] = share[legs.N] - share[legs.DEAD]
    share[legs.P_GATED] = share[legs.P] - share[legs.DEAD]
    conduction = np.zeros((len(plan.positions), *theta.shape))
    switching = np.zeros_like(conduction)
    for position, curve, way, where in plan.conduction:
        v = legs.voltage_v(plan.voltages[curve], size, case.t_c[position])
        conduction[position] += np.where(flow == way, share[where] * v * size, 0.0)
    rising, falling = _edges(case, part, x)
    above = r >= 0.0
    loaded = i_peak > 0.0
    for position, curve, way, side, edge in plan.switching:
        energy = switching_energy_j(plan.energies[curve], size, case.t_c[position]) * case.scale[curve, part][col]
        here = (flow == way) & switches & loaded
        if side != legs.ANY:
            here &= above == (side == legs.ABOVE)
        # with the current flowing out a rising edge takes it over
        often = rising if (edge == legs.ON) == (way == legs.FLOW_OUT) else falling
        switching[position] += np.where(here, energy * fsw * often, 0.0)
    return conduction, switching


def _edges(case, part, x):
    """Rising and falling edges in a switching period: one each; in overmodulation more the way the reference moves.

    Over a stretch in which the reference climbs by d there are (levels - 1) d/2 more rising edges than falling ones, whatever
    the carrier; from rail to rail in less than half a switching period a single one is left.
    """
    f, fsw = case.f[part][:, None], case.fsw[part][:, None]
    ends = (phase_reference(case.modulation, x + side, case.reference[part][:, None], case.phi[part][:, None]) for side in (1e-7, -1e-7))
    slope = np.subtract(*ends) / 2e-7
    lean = np.where(fsw > 0.0, slope * (case.plan.levels - 1) * 2.0 * np.pi * f / (4.0 * np.where(fsw > 0.0, fsw, 1.0)), 0.0)
    # in the linear range the carrier is taken as much faster than the reference
    lean = np.where(case.clip_first[part][:, None] < np.pi / 2, lean, 0.0)
    return np.where(lean > 1.0, 2.0 * lean, np.maximum(1.0 + lean, 0.0)), np.where(lean < -1.0, -2.0 * lean, np.maximum(1.0 - lean, 0.0))


def mean_losses_w(module: PowerModule, modulation: Modulation, *, i_peak_a, mod_index, phi_rad, t_switch_c, t_diode_c,
                  switching_frequency_hz, v_dc_v):
    """Mean losses of one upper switch and one lower diode of a two-level leg over a fundamental period.

    Parameters
    ----------
    module : PowerModule
        Two-level, with diodes of their own.
    modulation : Modulation
    i_peak_a, mod_index, phi_rad, switching_frequency_hz, v_dc_v
        As for :func:`leg_losses_w`.
    t_switch_c, t_diode_c : float
        Junction temperatures [degC].

    Returns
    -------
    dict of ndarray, shape (n,)
        ``switch_conduction``, ``switch_switching``, ``diode_conduction``,
        ``diode_switching`` [W].

    Raises
    ------
    RangeError
        Negative current, modulation index beyond the linear range, or another kind of leg.
    """
    if module.levels != 2 or module.one_chip:
        raise RangeError("module", f"kind '{module.kind}', arrangement '{module.arrangement}'", "a two-level leg with diodes of their own", "use leg_losses_w")
    one = leg_losses_w(module, modulation, i_peak_a=i_peak_a, mod_index=mod_index, phi_rad=phi_rad, t_vj_c=[t_switch_c] * 2 + [t_diode_c] * 2,
                       switching_frequency_hz=switching_frequency_hz, v_dc_v=v_dc_v)
    return {"switch_conduction": one.conduction_w[0], "switch_switching": one.switching_w[0],
            "diode_conduction": one.conduction_w[3], "diode_switching": one.switching_w[3]}
