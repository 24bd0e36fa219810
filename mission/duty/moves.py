"""Moves with limited acceleration and jerk, in closed form, and what rows make of them.

The way is in metres or in radians; speed, acceleration and jerk belong to it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..checks import require_range
from ..errors import RangeError

#: What is shorter than this is rounding, no piece and no row [s].
NOTHING_S = 1e-7
RISE, EVEN, FALL = 0, 1, 2


@dataclass(frozen=True)
class Move:
    """Pieces of constant jerk, one after the other; all arrays of shape (n,).

    Attributes
    ----------
    lasts_s : length of each piece, above zero
    way, speed, acceleration : at the start of each piece
    jerk : constant over each piece
    part : RISE where the speed grows in size, EVEN where it is constant, FALL where it falls

    Examples
    --------
    >>> move = s_curve(1.0, 1.0, 1.0)  # one metre, at the full speed for an instant only
    >>> move.duration_s, move.lasts_s.tolist()
    (2.0, [1.0, 1.0])
    >>> [float(a) for a in move.at(0.5)]  # way, speed, acceleration
    [0.125, 0.5, 1.0]
    """

    lasts_s: np.ndarray
    way: np.ndarray
    speed: np.ndarray
    acceleration: np.ndarray
    jerk: np.ndarray
    part: np.ndarray

    @property
    def duration_s(self) -> float:
        """Length of the whole move [s]."""
        return float(self.lasts_s.sum())

    def at(self, time_s):
        """Way, speed and acceleration at some times; where a piece ends the next one holds.

        Parameters
        ----------
        time_s : array_like
            0 to ``duration_s``. [s]

        Returns
        -------
        way, speed, acceleration : ndarray

        Raises
        ------
        RangeError
            A time outside the move.
        """
        t = require_range("time_s", time_s, low=0.0, high=self.duration_s * (1.0 + 1e-12), unit="s")
        ends = np.cumsum(self.lasts_s)
        k = np.minimum(np.searchsorted(ends, t, side="right"), ends.size - 1)
        t = t - (ends - self.lasts_s)[k]
        v, a, j = self.speed[k], self.acceleration[k], self.jerk[k]
        return self.way[k] + t * (v + t * (a / 2.0 + t * j / 6.0)), v + t * (a + t * j / 2.0), a + t * j

    def rows(self, step_s):
        """The move as rows that hold: means of speed and acceleration over each row.

        Every piece is cut evenly into rows of at most ``step_s``; a piece of constant speed is one row. So the way and the
        change of speed of every row are exact, and so is the peak acceleration where it is held. Where it only touches its top
        the highest row lies below it, by at most half a step times the jerk; the highest speed of a move without a stretch of
        constant speed likewise, by at most half a step times the acceleration.

        Parameters
        ----------
        step_s : float
            Longest row while the speed changes. [s]

        Returns
        -------
        dt_s, speed, acceleration : ndarray, shape (n,)
        part : ndarray of int, shape (n,)
            RISE, EVEN or FALL.

        Examples
        --------
        >>> dt, speed, acceleration, part = s_curve(4.0, 2.0, 2.0).rows(0.5)
        >>> dt.tolist(), speed.tolist(), part.tolist()
        ([0.5, 0.5, 1.0, 0.5, 0.5], [0.5, 1.5, 2.0, 1.5, 0.5], [0, 0, 1, 2, 2])
        >>> float(dt @ speed)
        4.0
        """
        require_range("step_s", step_s, low=0.0, low_open=True, unit="s")
        count = np.where(self.part == EVEN, 1, np.maximum(np.ceil(self.lasts_s / step_s - 1e-9), 1)).astype(int)
        k = np.repeat(np.arange(count.size), count)
        dt = (self.lasts_s / count)[k]
        a = dt * (np.arange(k.size) - (np.cumsum(count) - count)[k])
        b = a + dt
        speed = self.speed[k] + self.acceleration[k] * (a + b) / 2.0 + self.jerk[k] * (a * a + a * b + b * b) / 6.0
        return dt, speed, self.acceleration[k] + self.jerk[k] * (a + b) / 2.0, self.part[k]


def ramp_time_s(change, acceleration, jerk=None) -> float:
    """Time that a change of speed takes from even running to even running [s].

    Examples
    --------
    >>> ramp_time_s(2.0, 1.0), ramp_time_s(2.0, 1.0, 2.0), ramp_time_s(2.0, 10.0, 2.0)
    (2.0, 2.5, 2.0)
    """
    return float(sum(_ramp_pieces(change, acceleration, jerk)[0]))


def _ramp_pieces(change, acceleration, jerk):
    """Lengths and jerks of the pieces of a change of speed, and the acceleration that it reaches."""
    change = abs(change)
    if jerk is None:
        return [change / acceleration], [0.0], acceleration
    top = min(acceleration, np.sqrt(change * jerk))
    if top <= 0.0:
        return [0.0, 0.0, 0.0], [0.0, 0.0, 0.0], 0.0
    return [top / jerk, change / top - top / jerk, top / jerk], [jerk, 0.0, -jerk], top


def ramp(start, end, acceleration, jerk=None) -> Move:
    """A change of speed.

    Parameters
    ----------
    start, end : float
        Speeds of one sign, or zero.
    acceleration : float
        Largest one, > 0; it is reached if the change is large enough for the jerk.
    jerk : float, optional
        Largest one, > 0; without it the acceleration jumps.

    Returns
    -------
    Move
        Empty if the speed does not change.

    Raises
    ------
    RangeError
        Speeds of different signs; an acceleration or a jerk that is not above zero.

    Examples
    --------
    >>> ramp(2.0, 1.0, 1.0).rows(0.5)[1].tolist()
    [1.75, 1.25]
    """
    require_range("acceleration", acceleration, low=0.0, low_open=True)
    if jerk is not None:
        require_range("jerk", jerk, low=0.0, low_open=True)
    if start * end < 0.0:
        raise RangeError("end", f"a speed of {end:g} after {start:g}", "speeds of one sign", "reverse by two ramps, to standstill and from it")
    return _pieces([(start, end, _ramp_pieces(end - start, acceleration, jerk))])


def s_curve(way, speed, acceleration, jerk=None) -> Move:
    """The fastest move from rest to rest within limits.

    Up to seven pieces of constant jerk. A short way reaches neither the speed nor, if it is shorter still, the acceleration.

    Parameters
    ----------
    way : float
        Not zero; negative ways go back.
    speed, acceleration : float
        Largest ones, > 0.
    jerk : float, optional
        Largest one, > 0; without it the acceleration jumps (trapezoid of the speed).

    Returns
    -------
    Move

    Raises
    ------
    RangeError
        A way of zero, or a limit that is not above zero.

    Notes
    -----
    With T the time of a ramp to the speed v a move needs the way v T for its two ramps, T = v / a + a / j for v >= a^2 / j
    and 2 sqrt(v / j) below. Solved for v where the way is shorter.

    References
    ----------
    .. [1] L. Biagiotti, C. Melchiorri, "Trajectory Planning for Automatic Machines and Robots", Springer, 2008, section 3.4
       (double S; from memory).

    Examples
    --------
    >>> s_curve(10.0, 2.0, 1.0, 2.0).duration_s  # 10 m / 2 m/s + one ramp of 2.5 s
    7.5
    >>> short = s_curve(0.5, 2.0, 1.0, 2.0)  # d = 2 a^3 / j^2: the acceleration is just reached
    >>> round(short.duration_s, 12), round(float(short.at(1.0)[1]), 12)
    (2.0, 0.5)
    """
    require_range("way", abs(way), low=0.0, low_open=True)
    require_range("speed", speed, low=0.0, low_open=True)
    require_range("acceleration", acceleration, low=0.0, low_open=True)
    if jerk is not None:
        require_range("jerk", jerk, low=0.0, low_open=True)
    distance, top, even = abs(way), speed, 0.0
    if distance >= top * ramp_time_s(top, acceleration, jerk):
        even = distance / top - ramp_time_s(top, acceleration, jerk)
    elif jerk is None:
        top = np.sqrt(distance * acceleration)
    elif distance >= 2.0 * acceleration**3 / jerk**2:
        # v^2 / a + v a / j = d, written so that nothing cancels
        b = acceleration**2 / jerk
        top = 2.0 * distance * acceleration / (b + np.sqrt(b * b + 4.0 * distance * acceleration))
    else:
        top = np.cbrt(distance**2 * jerk / 4.0)
    top = float(np.copysign(top, way))
    ramps = _ramp_pieces(top, acceleration, jerk)
    return _pieces([(0.0, top, ramps), (top, top, ([even], [0.0], 0.0)), (top, 0.0, ramps)])


def _pieces(stretches) -> Move:
    """Join stretches (speed at start, speed at end, lengths and jerks of the pieces), without those that last for no time."""
    columns = []
    way = 0.0
    for start, end, (lengths, jerks, top) in stretches:
        sign = np.sign(end - start)
        part = EVEN if sign == 0.0 else RISE if abs(end) > abs(start) else FALL
        speed, acceleration = start, 0.0 if len(lengths) == 3 else sign * top
        for length, size in zip(lengths, jerks):
            jerk = sign * size
            if length > NOTHING_S:
                columns.append((length, way, speed, acceleration, jerk, part))
            way += length * (speed + length * (acceleration / 2.0 + length * jerk / 6.0))
            speed += length * (acceleration + length * jerk / 2.0)
            acceleration += length * jerk
    table = np.array(columns, float).reshape(-1, 6).T
    return Move(*table[:5], table[5].astype(int))
