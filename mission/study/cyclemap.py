"""Cycles and damage sorted by range and mean: what the cycle pictures draw."""

from __future__ import annotations

import numpy as np

RANGE_EDGE_K = np.concatenate([[0.0, 0.5, 1.0], np.arange(2.0, 202.0, 2.0), [np.inf]])
MEAN_EDGE_C = np.concatenate([[-np.inf], np.arange(-60.0, 252.0, 4.0), [np.inf]])


class CycleMap:
    """Two-way tables of cycle counts and damage; m failure modes, n chips.

    Attributes
    ----------
    count : ndarray, shape (2 n, ranges, means)
        Cycles of junctions, then of case points.
    damage : ndarray, shape (m, n, ranges, means)
    """

    def __init__(self, modes, n_chips: int):
        self._modes, self._n = modes, n_chips
        shape = (RANGE_EDGE_K.size - 1, MEAN_EDGE_C.size - 1)
        self.count = np.zeros((2 * n_chips, *shape))
        self.damage = np.zeros((len(modes), n_chips, *shape))

    def add(self, table, damage) -> None:
        """Sort one block of cycles in, with its damage (modes, n) from the ledger."""
        if table.signal.size == 0:
            return
        r = np.clip(np.searchsorted(RANGE_EDGE_K, table.range_k, side="right") - 1, 0, RANGE_EDGE_K.size - 2)
        m = np.clip(np.searchsorted(MEAN_EDGE_C, table.mean_c, side="right") - 1, 0, MEAN_EDGE_C.size - 2)
        flat = (table.signal.astype(np.int64) * (RANGE_EDGE_K.size - 1) + r) * (MEAN_EDGE_C.size - 1) + m
        self.count += np.bincount(flat, weights=table.count, minlength=self.count.size).reshape(self.count.shape)
        per = self.damage[0].size if len(self._modes) else 0
        chip = (table.signal.astype(np.int64) % self._n * (RANGE_EDGE_K.size - 1) + r) * (MEAN_EDGE_C.size - 1) + m
        for number in range(len(self._modes)):
            self.damage[number] += np.bincount(chip, weights=damage[number], minlength=per).reshape(self.damage[number].shape)
