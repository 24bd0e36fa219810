"""Flux of a saturated synchronous machine, and its line of most torque per ampere."""

from __future__ import annotations

from functools import cached_property, lru_cache

import numpy as np

from ..errors import InputError
from .searching import close_in, highest
from .spec import CurrentTable, DqTable

#: Points on the line of most torque per ampere. Between them it is straight: torque and size are kept exactly,
#: the torque per ampere is short of the best by less than 1e-5.
_LINE_POINTS = 512
#: How far rounding may step over the edge of a table.
_EDGE = 1e-12


class FluxMap:
    """Flux linkages over the currents; NaN outside the table.

    Attributes
    ----------
    low_a, high_a : float
        Ends of i_d.
    """

    def __init__(self, table: DqTable | CurrentTable):
        self._dq = isinstance(table, DqTable)
        if self._dq:
            self._i_d, self._i_q = np.array(table.i_d_a), np.array(table.i_q_a)
            self._psi_d, self._psi_q = table.flux_wb()
            self.low_a, self.high_a = float(self._i_d[0]), float(self._i_d[-1])
            self._size = float(np.hypot(max(-self.low_a, self.high_a), self._i_q[-1]))
        else:
            self._i = np.array(table.i_peak_a)
            self._values = [np.array(v) for v in (table.l_d_h, table.l_q_h, table.psi_pm_wb)]
            self._size = float(self._i[-1])
            self.low_a, self.high_a = -self._size, self._size

    @property
    def words(self) -> str:
        """Where the table ends."""
        if self._dq:
            return f"i_d {self.low_a:g} to {self.high_a:g} A, i_q up to {self._i_q[-1]:g} A (peak)"
        return f"up to {self._size:g} A (peak)"

    def top_a(self, i_d_a):
        """Largest i_q of the table at an i_d [A]."""
        if self._dq:
            return np.full(np.shape(i_d_a), self._i_q[-1])
        return np.sqrt(np.maximum(self._size**2 - np.square(i_d_a), 0.0))

    def flux_wb(self, i_d_a, i_q_a):
        """psi_d, psi_q of currents [A]; arrays of one shape [Wb]."""
        i_d, i_q = np.broadcast_arrays(np.asarray(i_d_a, float), np.asarray(i_q_a, float))
        outside = self._beyond_a(i_d, i_q) > _EDGE * self._size
        if not self._dq:
            size = np.hypot(i_d, i_q)
            l_d, l_q, psi = (np.interp(size, self._i, v) for v in self._values)
            return np.where(outside, np.nan, psi + l_d * i_d), np.where(outside, np.nan, l_q * i_q)
        k, u = _between(self._i_d, i_d)
        j, v = _between(self._i_q, np.abs(i_q))
        w = ((1 - u) * (1 - v), u * (1 - v), (1 - u) * v, u * v)
        psi_d, psi_q = (
            w[0] * t[k, j] + w[1] * t[k + 1, j] + w[2] * t[k, j + 1] + w[3] * t[k + 1, j + 1] for t in (self._psi_d, self._psi_q)
        )
        return np.where(outside, np.nan, psi_d), np.where(outside, np.nan, np.copysign(1.0, i_q) * psi_q)

    def cross(self, i_d_a, i_q_a):
        """psi_d i_q - psi_q i_d: torque over 3/2 pole pairs [N m]; NaN outside the table."""
        psi_d, psi_q = self.flux_wb(i_d_a, i_q_a)
        return psi_d * i_q_a - psi_q * i_d_a

    def on_edge(self, i_d_a, i_q_a):
        """Whether currents lie on the edge of the table, where the best of them would not be known to be the best."""
        return ~(self._beyond_a(i_d_a, i_q_a) < -1e-6 * self._size)

    def _beyond_a(self, i_d, i_q):
        """By how much currents lie outside the table, negative inside [A]."""
        if self._dq:
            return np.maximum(np.maximum(self.low_a - i_d, i_d - self.high_a), np.abs(i_q) - self._i_q[-1])
        return np.hypot(i_d, i_q) - self._size

    @cached_property
    def line(self):
        """Most torque per ampere: i_d, i_q, size [A] and cross product of the points.

        From nothing to where the torque stops rising, or where the line leaves a table over both currents.
        """
        size = np.linspace(0.0, self._size, _LINE_POINTS)

        def score(angle):
            i_d, i_q = size * np.cos(angle), size * np.sin(angle)
            beyond = self._beyond_a(i_d, i_q)
            return np.where(beyond > 0.0, -np.maximum(beyond, 0.0) - self._size, np.nan_to_num(self.cross(i_d, i_q)))

        angles = np.linspace(0.0, np.pi, 361)
        scan = np.array([score(a) for a in angles])
        best = angles[np.argmax(scan, axis=0)]
        step = angles[1]
        top, value = highest(score, np.maximum(best - step, 0.0), np.minimum(best + step, np.pi), steps=60)
        angle = np.where(value >= scan.max(axis=0), top, best)
        i_d, i_q = size * np.cos(angle), size * np.sin(angle)
        cross = np.where(size > 0.0, score(angle), 0.0)
        left = np.diff(cross) <= 0.0
        if self._dq:
            left |= self.on_edge(i_d, i_q)[1:]
        end = int(np.argmax(np.append(left, True))) + 1
        if end < 2:
            raise InputError("field machine.saturation", "a table without torque", "magnets, or more flux along q than along d", "check the table")
        return i_d[:end], i_q[:end], size[:end], cross[:end]

    def on_line(self, quantity, wanted):
        """Currents on the line where its size (``"size"``) or cross product (``"cross"``) is ``wanted`` (>= 0); NaN beyond its end."""
        i_d, i_q, size, cross = self.line
        known = size if quantity == "size" else cross
        wanted = np.asarray(wanted, float)
        inside = wanted <= known[-1] * (1.0 + _EDGE)
        target = np.minimum(np.where(inside, wanted, 0.0), known[-1])
        k, share = _between(known, target)
        if quantity == "size":
            x, y = i_d[k] + share * (i_d[k + 1] - i_d[k]), i_q[k] + share * (i_q[k + 1] - i_q[k])
            scale = np.divide(target, np.hypot(x, y), out=np.ones_like(x), where=target > 0.0)
            x, y = x * scale, y * scale
        else:
            def at(u):
                return i_d[k] + u * (i_d[k + 1] - i_d[k]), i_q[k] + u * (i_q[k + 1] - i_q[k])

            share = np.where(target > 0.0, close_in(lambda u: target - self.cross(*at(u)), np.zeros(k.shape), np.ones(k.shape)), 0.0)
            x, y = at(share)
        return np.where(inside, x, np.nan), np.where(inside, y, np.nan)


@lru_cache(maxsize=16)
def flux_map(table: DqTable | CurrentTable) -> FluxMap:
    """The map of a table, made once."""
    return FluxMap(table)


def _between(points, x):
    """Number of the stretch that holds x, and the share of it; the first and last go on for rounding's sake."""
    k = np.clip(np.searchsorted(points, x, side="right") - 1, 0, points.size - 2)
    return k, np.clip((x - points[k]) / (points[k + 1] - points[k]), 0.0, 1.0)
