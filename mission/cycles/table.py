"""Counted cycles as flat arrays."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np

CLOSED, RESIDUE, RIPPLE = 0, 1, 2
KIND_WORDS = ("closed", "residue", "ripple")


@dataclass(frozen=True)
class CycleTable:
    """Cycles, one entry each; all arrays of equal length.

    Attributes
    ----------
    signal : ndarray of int16
        Chip number for junctions, number of chips more for the case points under them.
    range_k, mean_c, min_c, max_c : ndarray
        Swing and where it lies.
    heating_s : ndarray
        Time from valley to peak.
    start_s, end_s : ndarray
        Times of its two points; beyond the mission's end where it closes in the repetition.
    phase_id : ndarray of int16
        Phase at its peak.
    count : ndarray
        How often (half cycles 0.5; ripple by the hundred).
    kind : ndarray of uint8
        0 closed within the mission, 1 from the residue, 2 output-frequency ripple.
    """

    signal: np.ndarray
    range_k: np.ndarray
    mean_c: np.ndarray
    min_c: np.ndarray
    max_c: np.ndarray
    heating_s: np.ndarray
    start_s: np.ndarray
    end_s: np.ndarray
    phase_id: np.ndarray
    count: np.ndarray
    kind: np.ndarray

    def __len__(self) -> int:
        return self.signal.size

    @staticmethod
    def empty() -> CycleTable:
        """No cycles."""
        z = np.zeros(0)
        return CycleTable(z.astype(np.int16), z, z, z, z, z, z, z, z.astype(np.int16), z, z.astype(np.uint8))

    @staticmethod
    def concat(tables) -> CycleTable:
        """Tables one after the other."""
        tables = [t for t in tables if len(t)]
        if not tables:
            return CycleTable.empty()
        return CycleTable(*(np.concatenate([getattr(t, f.name) for t in tables]) for f in fields(CycleTable)))

    def select(self, keep) -> CycleTable:
        """The entries that a mask or an index array picks."""
        return CycleTable(*(getattr(self, f.name)[keep] for f in fields(CycleTable)))

    @staticmethod
    def ripple(*, signal, range_k, mean_c, heating_s, start_s, end_s, phase_id, count) -> CycleTable:
        """Ripple cycles; entries without count or range are left out (they are none)."""
        keep = (count > 0.0) & (range_k > 0.0)
        r, m = range_k[keep], mean_c[keep]
        return CycleTable(signal[keep].astype(np.int16), r, m, m - 0.5 * r, m + 0.5 * r, heating_s[keep], start_s[keep], end_s[keep],
                          phase_id[keep].astype(np.int16), count[keep], np.full(r.size, RIPPLE, np.uint8))

    def to_frame(self, signal_names=None, phases=None):
        """As a DataFrame; names of signals and phases in words where they are given."""
        import pandas as pd

        data = {f.name: getattr(self, f.name) for f in fields(CycleTable)}
        if signal_names is not None:
            data["signal"] = np.asarray(signal_names, dtype=object)[self.signal]
        if phases is not None:
            data["phase"] = np.asarray(phases, dtype=object)[data.pop("phase_id")]
        data["kind"] = np.asarray(KIND_WORDS, dtype=object)[self.kind]
        return pd.DataFrame(data)


class RippleClasses:
    """Merges ripple cycles into classes, so that memory does not grow with the mission.

    A class holds cycles of one signal and phase whose range (2 %), minimum (2 K) and
    heating time (5 %) agree; it keeps their number and count-weighted means. Damage is
    not taken from the classes but from the cycles before they are merged.
    """

    def __init__(self):
        self._key = np.zeros(0, np.int64)
        self._sums = np.zeros((0, 6))
        self._span = np.zeros((0, 2))

    def add(self, table: CycleTable) -> None:
        """Take a block of ripple cycles."""
        if not len(table):
            return
        level = np.floor(np.log(np.maximum(table.range_k, 1e-3)) / np.log(1.02)).astype(np.int64) + 400
        low = np.floor(table.min_c / 2.0).astype(np.int64) + 200
        heat = np.floor(np.log(np.maximum(table.heating_s, 1e-6)) / np.log(1.05)).astype(np.int64) + 300
        key = (((table.signal.astype(np.int64) * 32768 + table.phase_id) * 1024 + level) * 512 + low) * 1024 + heat
        w = table.count
        sums = np.stack([w, w * table.range_k, w * table.mean_c, w * table.min_c, w * table.max_c, w * table.heating_s], axis=1)
        key = np.concatenate([self._key, key])
        sums = np.concatenate([self._sums, sums])
        span = np.concatenate([self._span, np.stack([table.start_s, table.end_s], axis=1)])
        order = np.argsort(key, kind="stable")
        first = np.flatnonzero(np.concatenate([[True], np.diff(key[order]) != 0]))
        self._key = key[order][first]
        self._sums = np.add.reduceat(sums[order], first)
        self._span = np.stack([np.minimum.reduceat(span[order, 0], first), np.maximum.reduceat(span[order, 1], first)], axis=1)

    def to_table(self) -> CycleTable:
        """The classes as ripple cycles with their counts."""
        if not self._key.size:
            return CycleTable.empty()
        rest = self._key // 1024 // 512 // 1024
        n = self._sums[:, 0]
        mean = self._sums[:, 1:] / n[:, None]
        return CycleTable((rest // 32768).astype(np.int16), *(mean[:, k] for k in range(5)), self._span[:, 0], self._span[:, 1],
                          (rest % 32768).astype(np.int16), n, np.full(n.size, RIPPLE, np.uint8))
