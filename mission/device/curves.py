"""Reading voltages and energies off data-sheet curves.

A curve is a broken line through the points of the data sheet. Between two
temperatures the value is a straight line in temperature. Beyond the last
points, and beyond the coldest and hottest curve, the last straight piece goes
on; :func:`outside_data` tells where that happens.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..checks import require_range


def on_state_voltage_v(curves, current_a, t_vj_c):
    """On-state voltage of one chip.

    Parameters
    ----------
    curves : OnStateCurves
        E.g. ``module.switch.on_state``.
    current_a : array_like
        Current through the chip [A], >= 0; any shape.
    t_vj_c : array_like
        Junction temperature [degC]; broadcast against ``current_a``.

    Returns
    -------
    ndarray
        Voltage [V] in the common shape. A curve extended below its first point
        stops at zero.

    Raises
    ------
    RangeError
        Negative current, NaN or infinity; names the argument and the first bad index.

    Notes
    -----
    Extension over temperature is not held at zero: far outside the data it may
    go negative, which the caller has to refuse.
    """
    return _interpolate(curves, current_a, t_vj_c)


def switching_energy_j(curves, current_a, t_vj_c):
    """Energy of one switching event at the reference voltage of the curves.

    Parameters
    ----------
    curves : EnergyCurves
        E.g. ``module.switch.turn_on``.
    current_a, t_vj_c : array_like
        As for :func:`on_state_voltage_v` [A], [degC].

    Returns
    -------
    ndarray
        Energy [J] at ``curves.v_ref_v``. A curve extended below its first point
        stops at zero.

    Raises
    ------
    RangeError
        Negative current, NaN or infinity; names the argument and the first bad index.
    """
    return _interpolate(curves, current_a, t_vj_c)


def temperature_coefficient_v_per_k(curves, current_a, t_vj_c):
    """How the on-state voltage changes with temperature at a fixed current.

    Parameters
    ----------
    curves : OnStateCurves
    current_a, t_vj_c : array_like
        As for :func:`on_state_voltage_v` [A], [degC].

    Returns
    -------
    ndarray
        Slope between the two curves around ``t_vj_c`` [V/K]; at a temperature of the
        data sheet that of the piece above it. Negative: a hotter chip drops less and so
        draws current from its neighbours; positive: parallel chips share by themselves.

    Raises
    ------
    RangeError
        Negative current, NaN or infinity.
    """
    i, t = _checked(current_a, t_vj_c)
    t_data = curves.t_vj_c
    k, _ = _bracket(t_data, t)
    along = np.stack([broken_line(c.current_a, c.values, i) for c in curves.points])
    cold = np.take_along_axis(along, k[None], axis=0)[0]
    hot = np.take_along_axis(along, k[None] + 1, axis=0)[0]
    return (hot - cold) / (t_data[k + 1] - t_data[k])


def on_state_crossing_a(curves) -> float | None:
    """Current at which the coldest and the hottest on-state curve cross.

    Parameters
    ----------
    curves : OnStateCurves

    Returns
    -------
    float or None
        [A]; above it the hotter curve lies higher for good, below it lower. None if the
        curves do not cross inside their common points (or only touch at zero current).

    Examples
    --------
    >>> from mission.device import load_module
    >>> round(on_state_crossing_a(load_module("heron-300").switch.on_state))
    113
    """
    first, last = curves.current_data_a
    _, current, values = curves.on_grid()
    keep = (current >= first) & (current <= last)
    current, gap = current[keep], (values[-1] - values[0])[keep]
    up = np.flatnonzero((gap[:-1] <= 0.0) & (gap[1:] > 0.0))
    if up.size == 0:
        return None
    j = up[-1]
    if gap[j] == 0.0 and current[j] == 0.0:
        return None
    return float(current[j] - gap[j] * (current[j + 1] - current[j]) / (gap[j + 1] - gap[j]))


@dataclass(frozen=True)
class OutsideData:
    """Where a look-up rests on straight-line extension; boolean arrays of one common shape.

    Attributes
    ----------
    current_low, current_high : ndarray of bool
        Below the first or above the last point of a curve that is used.
    temperature_low, temperature_high : ndarray of bool
        Below the coldest or above the hottest curve.
    """

    current_low: np.ndarray
    current_high: np.ndarray
    temperature_low: np.ndarray
    temperature_high: np.ndarray

    @property
    def any(self) -> np.ndarray:
        """Outside in one way or another."""
        return self.current_low | self.current_high | self.temperature_low | self.temperature_high


def outside_data(curves, current_a, t_vj_c) -> OutsideData:
    """Tell which inputs lie outside the points of the data sheet.

    Parameters
    ----------
    curves : OnStateCurves or EnergyCurves
    current_a, t_vj_c : array_like
        As for :func:`on_state_voltage_v` [A], [degC].

    Returns
    -------
    OutsideData

    Raises
    ------
    RangeError
        Negative current, NaN or infinity.
    """
    i, t = _checked(current_a, t_vj_c)
    t_data = np.array([c.t_vj_c for c in curves.points])
    first = np.array([c.current_a[0] for c in curves.points])
    last = np.array([c.current_a[-1] for c in curves.points])
    k, share = _bracket(t_data, t)
    # at a temperature of the data sheet only that one curve counts
    low, high = np.zeros(i.shape, bool), np.zeros(i.shape, bool)
    for side, used in ((k, share != 1.0), (k + 1, share != 0.0)):
        low |= used & (i < first[side])
        high |= used & (i > last[side])
    return OutsideData(low, high, t < t_data[0], t > t_data[-1])


def _checked(current_a, t_vj_c):
    i = require_range("current_a", current_a, low=0.0, unit="A")
    t = require_range("t_vj_c", t_vj_c, unit="degC")
    return np.broadcast_arrays(i, t)


def _bracket(t_data, t):
    """Index of the colder curve and the share of the hotter one; beyond 0..1 when extended."""
    k = np.clip(np.searchsorted(t_data, t, side="right") - 1, 0, t_data.size - 2)
    return k, (t - t_data[k]) / (t_data[k + 1] - t_data[k])


def _interpolate(curves, current_a, t_vj_c):
    i, t = _checked(current_a, t_vj_c)
    k, share = _bracket(np.array([c.t_vj_c for c in curves.points]), t)
    along = np.stack([broken_line(c.current_a, c.values, i) for c in curves.points])
    cold = np.take_along_axis(along, k[None], axis=0)[0]
    hot = np.take_along_axis(along, k[None] + 1, axis=0)[0]
    return cold + share * (hot - cold)


def broken_line(x_points, y_points, x):
    """Piecewise linear through the points, end pieces extended, never below zero.

    Parameters
    ----------
    x_points, y_points : sequence of float, length >= 2
        ``x_points`` rising.
    x : ndarray

    Returns
    -------
    ndarray
        Same shape as ``x``.

    Examples
    --------
    >>> broken_line([10.0, 20.0, 30.0], [1.0, 3.0, 4.0], np.array([0.0, 7.5, 15.0, 50.0])).tolist()
    [0.0, 0.5, 2.0, 6.0]
    """
    xp, yp = np.asarray(x_points, float), np.asarray(y_points, float)
    k = np.clip(np.searchsorted(xp, x, side="right") - 1, 0, xp.size - 2)
    slope = np.diff(yp) / np.diff(xp)
    return np.maximum(yp[k] + slope[k] * (x - xp[k]), 0.0)
