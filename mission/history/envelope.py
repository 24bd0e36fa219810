"""The history that is kept: an envelope of bounded size, and the peaks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .march import RowEnvelope


@dataclass(frozen=True)
class JunctionHistory:
    """Temperatures and losses of a mission; b time buckets, n chips.

    Attributes
    ----------
    edge_s : ndarray, shape (b + 1,)
        Borders of the buckets.
    t_min_c, t_max_c, case_min_c, case_max_c, loss_w : ndarray, shape (b, n)
        Extremes of junction and case points, mean losses.
    coolant_c : ndarray, shape (b,)
        Mean coolant temperature.
    r_sink_k_per_w : ndarray, shape (b,)
        Mean resistance from sink surface to coolant; NaN where nobody gave one.
    phase_id : ndarray, shape (b,)
        Phase that holds most of the bucket.
    peak_c, peak_time_s, peak_phase_id, lowest_c, case_peak_c, energy_j : ndarray, shape (n,)
        Highest junction temperature, end of the row that holds it, its phase; lowest
        junction temperature; highest case temperature; loss energy of the mission.
    above_s, longest_above_s : ndarray, shape (n,)
        Time above the watched temperature in all and at a stretch, in steps of up to a second; zero if none is watched.
    beyond_data_s : ndarray, shape (n,)
        Time in which the junction stood outside the temperatures of the data-sheet
        curves, so that losses were extended in a straight line.
    """

    chips: tuple[str, ...]
    phases: tuple[str, ...]
    duration_s: float
    edge_s: np.ndarray
    t_min_c: np.ndarray
    t_max_c: np.ndarray
    case_min_c: np.ndarray
    case_max_c: np.ndarray
    loss_w: np.ndarray
    coolant_c: np.ndarray
    r_sink_k_per_w: np.ndarray
    phase_id: np.ndarray
    peak_c: np.ndarray
    peak_time_s: np.ndarray
    peak_phase_id: np.ndarray
    lowest_c: np.ndarray
    case_peak_c: np.ndarray
    energy_j: np.ndarray
    beyond_data_s: np.ndarray
    above_s: np.ndarray
    longest_above_s: np.ndarray

    @property
    def hottest(self) -> int:
        """Index of the chip with the highest junction temperature."""
        return int(np.argmax(self.peak_c))

    def to_frame(self):
        """One row per bucket: times, phase, coolant, resistance of the sink, and per chip minimum, maximum, case extremes and mean loss."""
        import pandas as pd

        columns = {"start_s": self.edge_s[:-1], "end_s": self.edge_s[1:],
                   "phase": np.array(self.phases, dtype=object)[self.phase_id], "coolant_c": self.coolant_c, "sink_k_per_w": self.r_sink_k_per_w}
        for i, chip in enumerate(self.chips):
            columns[f"{chip} t_vj_min_c"] = self.t_min_c[:, i]
            columns[f"{chip} t_vj_max_c"] = self.t_max_c[:, i]
            columns[f"{chip} t_case_min_c"] = self.case_min_c[:, i]
            columns[f"{chip} t_case_max_c"] = self.case_max_c[:, i]
            columns[f"{chip} loss_w"] = self.loss_w[:, i]
        return pd.DataFrame(columns)


class EnvelopeBuilder:
    """Gathers row envelopes into at most ``n_buckets`` equal stretches of time."""

    def __init__(self, duration_s: float, chips, phases, data_c, *, n_buckets: int = 8640):
        self.duration_s, self.chips, self.phases, self.data_c = float(duration_s), tuple(chips), tuple(phases), data_c
        n = len(self.chips)
        self.above_s, self.longest_above_s, self._above_now = np.zeros(n), np.zeros(n), np.zeros(n)
        self._above_first, self._was_below = np.zeros(n), np.zeros(n, bool)
        b = self._b = int(n_buckets)
        self._width = self.duration_s / b
        self._temps = np.empty((4, b, n))
        self._temps[::2], self._temps[1::2] = np.inf, -np.inf
        self._loss, self._coolant, self._sink = np.zeros((b, n)), np.zeros(b), np.zeros(b)
        self._phase_time = np.zeros((b, len(self.phases)))
        self.peak_c, self.peak_time_s, self.peak_phase_id = np.full(n, -np.inf), np.zeros(n), np.zeros(n, np.int64)
        self.lowest_c, self.case_peak_c = np.full(n, np.inf), np.full(n, -np.inf)
        self.energy_j, self.beyond_data_s = np.zeros(n), np.zeros(n)

    def add(self, rows: RowEnvelope, r_sink_k_per_w=np.nan) -> None:
        """Take the rows of one block; ``r_sink_k_per_w``: resistance of the sink in each of them, (rows,) [K/W]."""
        self._r_rows = np.broadcast_to(np.asarray(r_sink_k_per_w, float), rows.start_s.shape)
        span = rows.end_s - rows.start_s
        best = np.argmax(rows.t_max_c, axis=0)
        chip = np.arange(len(self.chips))
        higher = rows.t_max_c[best, chip] > self.peak_c
        self.peak_c = np.where(higher, rows.t_max_c[best, chip], self.peak_c)
        self.peak_time_s = np.where(higher, rows.end_s[best], self.peak_time_s)
        self.peak_phase_id = np.where(higher, rows.phase_id[best], self.peak_phase_id)
        self.lowest_c = np.minimum(self.lowest_c, rows.t_min_c.min(axis=0))
        self.case_peak_c = np.maximum(self.case_peak_c, rows.case_max_c.max(axis=0))
        self.energy_j += rows.loss_j.sum(axis=0)
        low, high = self.data_c
        working = rows.loss_j > 1e-6 * np.maximum(span, 1e-12)[:, None]
        self.beyond_data_s += (((rows.t_min_c < low) | (rows.t_max_c > high)) & working).T @ span
        self._watch(rows)
        first = np.minimum((rows.start_s / self._width + 1e-9).astype(int), self._b - 1)
        last = np.clip(np.ceil(rows.end_s / self._width - 1e-9).astype(int) - 1, first, self._b - 1)
        inside = first == last
        self._gather(first[inside], rows, inside, span[inside], 1.0)
        for r in np.flatnonzero(~inside):
            here = np.arange(first[r], last[r] + 1)
            edges = np.clip(np.array([here, here + 1]) * self._width, rows.start_s[r], rows.end_s[r])
            part = edges[1] - edges[0]
            pick = np.full(here.size, r)
            self._gather(here, rows, pick, part, (part / span[r])[:, None])

    def _watch(self, rows):
        """Stretches above the watched temperature, across rows and blocks."""
        above, span = rows.piece_above, rows.piece_s
        if not span.size:
            return
        self.above_s += above.T @ span
        for chip in range(above.shape[1]):
            mine = above[:, chip]
            if not mine.any():
                self._above_now[chip], self._was_below[chip] = 0.0, True
                continue
            begins = np.concatenate([[True], mine[1:] != mine[:-1]])
            stretch = np.add.reduceat(span, np.flatnonzero(begins))
            hot = mine[begins]
            if hot[0]:
                stretch[0] += self._above_now[chip]
                if not self._was_below[chip]:
                    self._above_first[chip] = stretch[0]
            self._was_below[chip] |= not hot.all()
            self.longest_above_s[chip] = max(self.longest_above_s[chip], stretch[hot].max())
            self._above_now[chip] = stretch[-1] if hot[-1] else 0.0

    def join_ends(self) -> None:
        """The mission repeats: what lasts beyond its end goes on at its start."""
        joined = self._above_now + self._above_first
        self.longest_above_s = np.where((self._above_now > 0.0) & ~self._was_below, np.inf, np.maximum(self.longest_above_s, joined))

    def _gather(self, bucket, rows, pick, span, share):
        if bucket.size == 0:
            return
        temps = (rows.t_min_c[pick], rows.t_max_c[pick], rows.case_min_c[pick], rows.case_max_c[pick])
        starts = np.flatnonzero(np.concatenate([[True], bucket[1:] != bucket[:-1]]))
        here = bucket[starts]
        for k, values in enumerate(temps):
            gather = np.minimum if k % 2 == 0 else np.maximum
            self._temps[k, here] = gather(self._temps[k, here], gather.reduceat(values, starts))
        self._loss[here] += np.add.reduceat(rows.loss_j[pick] * share, starts)
        self._coolant[here] += np.add.reduceat(rows.coolant_c[pick] * span, starts)
        self._sink[here] += np.add.reduceat(self._r_rows[pick] * span, starts)
        np.add.at(self._phase_time, (bucket, rows.phase_id[pick].astype(int)), span)

    def finish(self, end_s: float | None = None) -> JunctionHistory:
        """The history up to ``end_s`` (default: the whole mission); buckets that no row touched are left out."""
        end = self.duration_s if end_s is None else end_s
        time = self._phase_time.sum(axis=1)
        used = time > 0.0
        width = self._width
        # a bucket shorter than a row shows the row's extremes; one without any row cannot occur within the mission
        edge = np.append(np.flatnonzero(used) * width, min(end, self.duration_s))
        return JunctionHistory(
            self.chips, self.phases, float(end), edge, *(self._temps[k][used] for k in range(4)),
            self._loss[used] / time[used, None], self._coolant[used] / time[used], self._sink[used] / time[used], self._phase_time[used].argmax(axis=1),
            self.peak_c, self.peak_time_s, self.peak_phase_id, self.lowest_c, self.case_peak_c, self.energy_j, self.beyond_data_s,
            self.above_s, self.longest_above_s,
        )
