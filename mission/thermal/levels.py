"""Cooling that changes: one network for every level of cooling, and the way of the state from one to the next.

The temperatures of all masses go on without a jump when a fan changes its speed; what changes is how they go on. A level's full
network knows them all, its reduced one only a few modes. A state of reduced modes stands for the field that the history behind it
has left; :meth:`CoolingLevels.move` finds the state of another level whose junction and case points go on as that field would.
Both halves are least squares over the same histories: each chip heated for a hundredth of its fastest time constant up to for ever,
and a coolant step that long ago.
"""

from __future__ import annotations

from functools import cached_property
from typing import NamedTuple

import numpy as np

from ..errors import InputError
from .modes import ReducedNetwork

#: Lengths of heating that a move is fitted to, and times afterwards at which it must be right.
_HISTORIES, _AFTER = 36, 48


class Move(NamedTuple):
    """From the state of one level to that of another.

    Attributes
    ----------
    matrix : ndarray, shape (r_new, r_old)
        Local modes (scaled with their output weight; mode by mode, chips within) and then shared modes.
    error : float
        Largest difference that the move makes to a junction afterwards, over its rise before, for chips heated one by one
        or all together for any length of time, and at the lengths between those that it was fitted to.
    """

    matrix: np.ndarray
    error: float


class LevelGroup(NamedTuple):
    """Levels among which the temperature of the sink chooses, weakest cooling first.

    Attributes
    ----------
    levels : tuple of int
    up_c, down_c : tuple of float
        Of each border between neighbours: the next level is taken above ``up_c``, and left again below ``down_c``.
    on_rise : bool
        The thresholds stand for the rise of the sink over the coolant [K], not for its temperature [degC].
    """

    levels: tuple[int, ...]
    up_c: tuple[float, ...] = ()
    down_c: tuple[float, ...] = ()
    on_rise: bool = False


class CoolingLevels:
    """Networks of one inverter at several levels of cooling.

    Parameters
    ----------
    build : callable
        ``build(k)`` -> (FullNetwork, ReducedNetwork) of level k; called once for every level that is needed.
    count : int
        Number of levels.
    groups : sequence of LevelGroup
        Which levels belong together; a duty says for every row which group holds. Default: every level on its own.
    """

    def __init__(self, build, count: int, groups=None):
        self._build, self.count = build, count
        self.groups = tuple(LevelGroup((k,)) for k in range(count)) if groups is None else tuple(groups)
        self._levels: dict[int, _Level] = {}
        self._moves: dict[tuple[int, int], Move] = {}

    @classmethod
    def fixed(cls, network: ReducedNetwork) -> CoolingLevels:
        """One level only, given as a reduced network."""
        one = cls(None, 1)
        one._only = network
        return one

    _only: ReducedNetwork | None = None

    def _level(self, k: int) -> _Level:
        if k not in self._levels:
            self._levels[k] = _Level(*self._build(k))
        return self._levels[k]

    def network(self, k: int) -> ReducedNetwork:
        """Reduced network of level ``k``."""
        return self._level(k).reduced if self._only is None else self._only

    def full(self, k: int):
        """Full network of level ``k``."""
        return self._level(k).full

    def surface(self, k: int) -> np.ndarray:
        """Rise of each sink surface over the coolant, in the modes of level ``k``; shape (m, r)."""
        return self._level(k).surface

    def move(self, a: int, b: int) -> Move:
        """How the state goes on when level ``a`` gives way to level ``b``.

        Raises
        ------
        InputError
            Levels whose masses differ.
        """
        if (a, b) not in self._moves:
            self._moves[a, b] = _move(self._level(a), self._level(b))
        return self._moves[a, b]


class _Level:
    """One level with what its moves need."""

    def __init__(self, full, reduced: ReducedNetwork):
        self.full, self.reduced = full, reduced
        self.lam, self.vectors = full.shapes()
        _, self.junction, self.case, self.coolant = full.modes()

    @property
    def slowest_s(self) -> float:
        return 1.0 / self.lam[0]

    def histories(self, lengths):
        """Fields (modes, h) and reduced states (r, h) after each chip, and all together, was heated for ``lengths``; and a coolant step that long ago."""
        net = self.reduced
        n, lam_l, lam_s = net.n_chips, net.lam_local_per_s, net.lam_shared_per_s
        t = np.asarray(lengths)
        grow = -np.expm1(-np.outer(self.lam, t)) / self.lam[:, None]
        grow_s = -np.expm1(-np.outer(lam_s, t)) / lam_s[:, None]
        steady = (self.junction / self.lam) @ self.junction.T
        fields, states = [], []
        for heat in [*np.eye(n), np.ones(n)]:
            heat = heat / (steady @ heat).max()
            local = (net.rho_local * heat)[:, :, None] * -np.expm1(-lam_l[:, :, None] * t) / lam_l[:, :, None]
            fields.append((self.junction.T @ heat)[:, None] * grow)
            states.append(np.concatenate([local.reshape(-1, t.size), (net.b_shared @ heat)[:, None] * grow_s]))
        # what was warm when the coolant became colder by 1 K
        fields.append(self.coolant[:, None] * np.exp(-np.outer(self.lam, t)))
        local = net.g_coolant_local[:, :, None] * np.exp(-lam_l[:, :, None] * t)
        states.append(np.concatenate([local.reshape(-1, t.size), net.g_coolant[:, None] * np.exp(-np.outer(lam_s, t))]))
        return np.hstack(fields), np.hstack(states)

    def outputs(self, after):
        """What junctions and case points do ``after`` a time without heat: rows for the reduced state and for the full modes."""
        net = self.reduced
        n, t = net.n_chips, np.asarray(after)[:, None]
        own = net.rho_local != 0.0
        ratio = np.where(own, net.rho_case_local / np.where(own, net.rho_local, 1.0), 0.0)
        fade = np.exp(-t[:, :, None] * net.lam_local_per_s)  # (time, L, n)
        local = np.zeros((2, after.size, n, *net.lam_local_per_s.shape))
        chips = np.arange(n)
        local[0][:, chips, :, chips] = np.moveaxis(fade * own, 2, 0)
        local[1][:, chips, :, chips] = np.moveaxis(fade * ratio, 2, 0)
        fade_s = np.exp(-t * net.lam_shared_per_s)[:, None, :]
        shared = np.stack([fade_s * net.c_shared, fade_s * net.c_case_shared])
        fade_full = np.exp(-t * self.lam)[:, None, :]
        full = np.stack([fade_full * self.junction, fade_full * self.case])
        rows = 2 * after.size * n
        return np.hstack([local.reshape(rows, -1), shared.reshape(rows, -1)]), full.reshape(rows, -1)

    @cached_property
    def after(self) -> np.ndarray:
        """Times at which a move must be right [s]; the first is the moment itself."""
        quick = max(1e-3 * self.slowest_s / self.lam.size, 0.05 / self.lam[-1])
        return np.concatenate([[0.0], np.geomspace(quick, 8.0 * self.slowest_s, _AFTER - 1)])

    @cached_property
    def reader(self) -> np.ndarray:
        """Reduced state (r, modes) that goes on as a field of full modes would."""
        reduced, full = self.outputs(self.after)
        weight = np.full(self.after.size, 1.0)
        weight[0] = 10.0  # no jump in the moment itself
        weight = np.tile(np.repeat(weight, self.reduced.n_chips), 2)[:, None]
        return np.linalg.pinv(reduced * weight, rcond=1e-7) @ (full * weight)

    @cached_property
    def surface(self) -> np.ndarray:
        """Sink surfaces in reduced modes, (m, r)."""
        fields, states = self.histories(self.lengths)
        want = self.full.out_surface @ (self.vectors / np.sqrt(self.full.c_j_per_k)[:, None]) @ fields
        return want @ np.linalg.pinv(states, rcond=1e-9)

    @cached_property
    def lengths(self) -> np.ndarray:
        return np.concatenate([np.geomspace(0.01 / self.lam[-1], 12.0 * self.slowest_s, _HISTORIES - 1), [60.0 * self.slowest_s]])


def _move(old: _Level, new: _Level) -> Move:
    if old.full.c_j_per_k.shape != new.full.c_j_per_k.shape or not np.allclose(old.full.c_j_per_k, new.full.c_j_per_k, rtol=1e-9):
        raise InputError("cooling levels", "masses that differ from level to level", "the same heat capacities at every level",
                         "give every level the heat capacity of the same sink")
    turn = new.vectors.T @ old.vectors
    fields, states = old.histories(old.lengths)
    matrix = (new.reader @ turn @ fields) @ np.linalg.pinv(states, rcond=1e-9)
    between = np.sqrt(old.lengths[1:] * old.lengths[:-1])
    fields, states = old.histories(between)
    after = np.concatenate([[0.0], np.sqrt(new.after[1:-1] * new.after[2:])])
    reduced, full = new.outputs(after)
    junctions = slice(0, after.size * new.reduced.n_chips)
    miss = reduced[junctions] @ matrix @ states - full[junctions] @ turn @ fields
    rise = (old.junction @ fields).max(axis=0)
    return Move(matrix, float(np.abs(miss / np.maximum(rise, 1e-12)).max()))
