"""Rainflow counting, streaming, after the four-point method; and the published forms for single series."""

from __future__ import annotations

import numpy as np

from ..checks import require_range
from ..errors import InputError, RangeError
from .table import CLOSED, RESIDUE, CycleTable

#: Stands for an attribute that was not given: zero at every point.
_NONE = np.zeros(1)
_PIECE = 16384


class CycleCounter:
    """Counts the cycles of several signals that arrive in blocks.

    Parameters
    ----------
    n_signals : int

    Notes
    -----
    Four-point method: of four successive turning points the inner pair is a cycle
    when its range is not above either neighbour's. What is left, the residue, is
    closed by repeating the mission (A. Amzallag et al., Int. J. Fatigue 16 (1994)
    287-293) or counted as half cycles (ASTM E1049-85). The result does not depend on
    where blocks end.

    In the repetition only the points of the residue are known: a rise that closes a fall
    there is taken as one straight line. A large cycle lasts from its valley to its peak,
    whatever smaller ones lie between; of equal peaks the first one counts.
    """

    def __init__(self, n_signals: int):
        self._stack = [np.empty((64, 5)) for _ in range(n_signals)]
        self._depth = [0] * n_signals
        self._heading = [0] * n_signals
        self._latest_s = [0.0] * n_signals
        self._room = np.empty((0, 8))
        self._out: list[tuple[int, np.ndarray, int]] = []

    def push(self, signal, t_c, time_s, phase_id=None, half_period_s=None, ripple_k=None) -> None:
        """Add samples of one signal, in order of time.

        Parameters
        ----------
        signal : int
        t_c, time_s : array_like, shape (n,)
            Temperature [degC] and time [s]; need not be turning points. Between samples
            a straight line is assumed: the more samples, the better the heating times.
        phase_id : array_like of int, optional
            Phase of the duty at each sample.
        half_period_s, ripple_k : array_like, optional
            Where the sample stands for fast rotation: half an output period and the
            ripple range there; swings no larger than the ripple take this heating time.

        Raises
        ------
        RangeError
            A temperature or time that is not finite, arrays of unlike shape, no such signal.
        """
        if not 0 <= signal < len(self._stack):
            raise RangeError("signal", f"{signal}", f"0 to {len(self._stack) - 1}")
        t_c, time_s = np.asarray(t_c, float), np.asarray(time_s, float)
        if t_c.ndim != 1:
            raise RangeError("t_c", f"shape {t_c.shape}", "one dimension")
        for name, values, what in (("t_c", t_c, "temperature"), ("time_s", time_s, "time")):
            if not np.isfinite(values).all():
                bad = int(np.flatnonzero(~np.isfinite(values))[0])
                raise RangeError(f"{name}[{bad}]", f"{values.flat[bad]}", f"a finite {what}", "correct the series; nothing is filled in")
        extra = [_NONE if v is None else np.asarray(v, float) for v in (phase_id, half_period_s, ripple_k)]
        for name, values in zip(("time_s", "phase_id", "half_period_s", "ripple_k"), (time_s, *extra)):
            if values is not _NONE and values.shape != t_c.shape:
                raise RangeError(name, f"shape {values.shape}", f"shape {t_c.shape}, as t_c")
        # pieces that stay in the cache
        for a in range(0, t_c.size, _PIECE):
            b = slice(a, a + _PIECE)
            self._count(signal, t_c[b], time_s[b], [v if v is _NONE else v[b] for v in extra], CLOSED)

    def _count(self, signal, t_c, time_s, extra, kind):
        from .kernels import count

        depth = self._depth[signal]
        need = depth + t_c.size + 1
        if need > self._stack[signal].shape[0]:
            bigger = np.empty((2 * need, 5))
            bigger[:depth] = self._stack[signal][:depth]
            self._stack[signal] = bigger
        if self._room.shape[0] < need // 2 + 1:
            self._room = np.empty((need + 2, 8))
        self._depth[signal], self._heading[signal], self._latest_s[signal], closed = count(
            t_c, time_s, *extra, self._stack[signal], depth, self._heading[signal], self._latest_s[signal], self._room)
        if closed:
            self._out.append((signal, self._room[:closed].copy(), kind))

    def drain(self) -> CycleTable:
        """Cycles closed since the last call."""
        tables = [_table(signal, cycles, kind, 1.0) for signal, cycles, kind in self._out]
        self._out = []
        return CycleTable.concat(tables)

    def residue(self, signal) -> np.ndarray:
        """What is not closed yet: temperatures of the points on the stack [degC]."""
        return self._stack[signal][: self._depth[signal], 0].copy()

    def finish(self, residue: str = "repeat", *, period_s: float) -> CycleTable:
        """Close what is left.

        Parameters
        ----------
        residue : {"repeat", "half"}
            Count what closes when the mission repeats, or half cycles.
        period_s : float
            Length of the mission; times in the repetition stand this much later.

        Raises
        ------
        InputError
            Another word; a length of the mission that is not finite, or shorter than the samples.
        """
        if residue not in ("repeat", "half"):
            raise InputError("residue", f"'{residue}'", "repeat or half")
        require_range("period_s", period_s, low=0.0, unit="s")
        before = self.drain()
        tables = [before] if len(before) else []
        for signal in range(len(self._stack)):
            rest = self._stack[signal][: self._depth[signal]].copy()
            if rest.shape[0] < 2:
                continue
            if residue == "repeat":
                columns = [np.ascontiguousarray(rest[:, k]) for k in range(5)]
                # the repetition may not begin before the end, be it by rounding
                span_s = self._latest_s[signal] - columns[1][0]
                require_range("period_s", period_s, low=span_s * (1.0 - 1e-6), unit="s")
                self._count(signal, columns[0], columns[1] + max(period_s, span_s), columns[2:], RESIDUE)
                tables.append(self.drain())
            else:
                tables.append(_table(signal, _half_cycles(rest), RESIDUE, 0.5))
            self._depth[signal] = self._heading[signal] = 0
        return CycleTable.concat(tables)


def _half_cycles(rest):
    """Pairs of a residue; a fall takes the time in which the rise after it, else the rise before it, covers its range."""
    a, b = rest[:-1], rest[1:]
    span = b[:, 1] - a[:, 1]
    rising = b[:, 0] > a[:, 0]
    heating = span.copy()
    for k in np.flatnonzero(~rising):
        rise = k + 1 if k + 1 < rising.size else k - 1
        if rise >= 0:
            heating[k] = span[rise] * min(1.0, (a[k, 0] - b[k, 0]) / (b[rise, 0] - a[rise, 0]))
    peak = np.where(rising[:, None], b, a)
    size = np.abs(b[:, 0] - a[:, 0])
    from .kernels import RIPPLE_REACH

    heating = np.where((peak[:, 3] > 0.0) & (size <= RIPPLE_REACH * peak[:, 4]), peak[:, 3], heating)
    return np.stack([size, 0.5 * (a[:, 0] + b[:, 0]), np.minimum(a[:, 0], b[:, 0]), peak[:, 0], heating, a[:, 1], b[:, 1], peak[:, 2]], axis=1)


def _table(signal, cycles, kind, count):
    n = cycles.shape[0]
    return CycleTable(np.full(n, signal, np.int16), *(cycles[:, k] for k in range(7)), cycles[:, 7].astype(np.int16),
                      np.full(n, count), np.full(n, kind, np.uint8))


def turning_points(series) -> np.ndarray:
    """Ends and reversals of a series; plateaus count once.

    Examples
    --------
    >>> turning_points([1, 2, 2, 3, 1, 1, 4]).tolist()
    [1.0, 3.0, 1.0, 4.0]
    """
    x = np.asarray(series, float)
    if x.ndim != 1:
        raise RangeError("series", f"shape {x.shape}", "one dimension")
    if not np.isfinite(x).all():
        raise RangeError("series", "a value that is not finite", "finite numbers")
    x = x[np.concatenate([[True], np.diff(x) != 0.0])] if x.size else x
    if x.size < 3:
        return x
    step = np.diff(x)
    return x[np.concatenate([[True], step[1:] * step[:-1] < 0.0, [True]])]


def rainflow_astm(series) -> np.ndarray:
    """Cycles and half cycles of a series by the procedure of ASTM E1049-85, 5.4.4.

    Parameters
    ----------
    series : array_like, shape (n,)

    Returns
    -------
    ndarray, shape (m, 3)
        Range, mean, count (1 or 0.5), in the order in which they are counted.

    Examples
    --------
    >>> rainflow_astm([-2, 1, -3, 5, -1, 3, -4, 4, -2])[:2].tolist()
    [[3.0, -0.5, 0.5], [4.0, -1.0, 0.5]]
    """
    out: list[tuple[float, float, float]] = []
    points: list[float] = []
    for value in turning_points(series):
        points.append(float(value))
        while len(points) >= 3:
            x, y = abs(points[-1] - points[-2]), abs(points[-2] - points[-3])
            if x < y:
                break
            mean = 0.5 * (points[-2] + points[-3])
            if len(points) == 3:
                out.append((y, mean, 0.5))
                points.pop(0)
            else:
                out.append((y, mean, 1.0))
                del points[-3:-1]
    out.extend((abs(b - a), 0.5 * (a + b), 0.5) for a, b in zip(points, points[1:]))
    return np.array(out).reshape(-1, 3)


def rainflow_four_point(series) -> tuple[np.ndarray, np.ndarray]:
    """Closed cycles (range, mean), shape (m, 2), and residue of a series by the four-point method.

    Examples
    --------
    >>> cycles, residue = rainflow_four_point([-2, 1, -3, 5, -1, 3, -4, 4, -2])
    >>> cycles.tolist(), residue.tolist()
    ([[4.0, 1.0]], [-2.0, 1.0, -3.0, 5.0, -4.0, 4.0, -2.0])
    """
    x = turning_points(series)
    counter = CycleCounter(1)
    counter.push(0, x, np.arange(x.size, dtype=float))
    table = counter.drain()
    return np.stack([table.range_k, table.mean_c], axis=1), counter.residue(0)
