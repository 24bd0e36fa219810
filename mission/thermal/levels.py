"""Cooling that changes: one network for every level of cooling, and the way of the state from one to the next.

The temperatures of all masses go on without a jump when a fan changes its speed; what changes is how they go on. A few reduced modes
do not tell the temperatures of all masses, so the march keeps the exact modes of the full network beside them, driven by the mean
losses of its rows. At a change the field of masses is the same in the modes of the other level (an orthogonal turn), and the reduced
state of that level is the one whose junctions and case points go on as this field would (least squares). What the reduced state
knows beyond the row means, the ripple of the moment above all, is carried over as the course that it would have taken.
"""

from __future__ import annotations

from functools import cached_property
from typing import NamedTuple

import numpy as np

from ..errors import InputError
from .coupling import without_mutual
from .modes import ReducedNetwork

#: Lengths of heating that the surface is fitted to, and times after a change at which the new state must be right.
_HISTORIES, _AFTER = 36, 72
#: Mixtures of histories that reach the outputs by less than this share of the strongest are held small.
_RIDGE = 1e-5
#: Slowest modes whose memory of a mission's start is followed through its changes.
SLOW_MODES = 12


class Move(NamedTuple):
    """What happens to states when one level gives way to another.

    Attributes
    ----------
    turn : ndarray, shape (k, k)
        Modes of the full network: new = turn @ old.
    rest : ndarray, shape (r_new, r_old)
        Reduced modes, for what the field does not hold. Local modes (scaled with their output weight; mode by mode, chips within), then shared.
    error : float
        Largest difference that the new reduced state makes to a junction afterwards, over the steady rise of the hottest, for chips heated one
        by one or all together for any length of time before.
    """

    turn: np.ndarray
    rest: np.ndarray
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

    def allowed(self, surface_c: float, coolant_c: float) -> tuple[int, int]:
        """First and last place of the levels that a sink surface keeps, over a coolant [degC]."""
        watched = surface_c - coolant_c if self.on_rise else surface_c
        return int(np.searchsorted(self.up_c, watched)), int(np.searchsorted(self.down_c, watched, side="right"))


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

    def field(self, k: int):
        """Full modes of level ``k``: decay rates [1/s] (K,), heat inputs (n, K), an even temperature of 1 K (K,), and the reduced state of a field (r, K)."""
        one = self._level(k)
        return one.lam, one.junction, one.coolant, one.reader

    @property
    def largest_move_error(self) -> float:
        """Largest error of the moves made so far; 0 without any."""
        return max((m.error for m in self._moves.values()), default=0.0)

    def move(self, a: int, b: int) -> Move:
        """What happens to the states when level ``a`` gives way to level ``b``.

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
        # mutual branches are the same at every level and no part of the full network: their modes go over as they are
        self.full, self.reduced, self.plain = full, reduced, without_mutual(reduced)
        self.lam, self.vectors = full.shapes()
        _, self.junction, self.case, self.coolant = full.modes()

    @property
    def slowest_s(self) -> float:
        return 1.0 / self.lam[0]

    def histories(self, lengths):
        """Fields (modes, h) and reduced states (r, h) after each chip, and all together, was heated for ``lengths``; and a coolant step that long ago."""
        net = self.plain
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
        net = self.plain
        n, t = net.n_chips, np.asarray(after)[:, None]
        own, ratio = net.rho_local != 0.0, net.case_share_local
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
        # from before anything fades, lest a fast mode hide what a slower one does
        quick = 0.1 / max(self.plain.lam_local_per_s.max(), self.plain.lam_shared_per_s.max(initial=0.0))
        return np.concatenate([[0.0], np.geomspace(quick, 8.0 * self.slowest_s, _AFTER - 1)])

    @cached_property
    def lengths(self) -> np.ndarray:
        """Times of heating that stand for all histories [s]."""
        return np.concatenate([np.geomspace(0.1 * self.after[1], 12.0 * self.slowest_s, _HISTORIES - 1), [60.0 * self.slowest_s]])

    @cached_property
    def natural(self):
        """How a state is found for a course of the outputs (rows): the state (r, rows) in that course's place, and the weight of the rows.

        Many states do the same to the outputs. The one taken is a mixture of those that heating leads to, as small a mixture as will do:
        local and shared modes that fight each other would fade apart between the steps of the march.
        """
        weight = np.full(self.after.size, 1.0)
        weight[0] = 10.0  # no jump in the moment itself
        weight = np.tile(np.repeat(weight, self.reduced.n_chips), 2)[:, None]
        base, course = np.linalg.qr(self.outputs(self.after)[0] * weight)
        _, states = self.histories(self.lengths)
        left, size, right = np.linalg.svd(course @ states, full_matrices=False)
        back = states @ (right.T * (size / (size**2 + (_RIDGE * size[0]) ** 2))) @ left.T
        return back @ base.T, weight

    @cached_property
    def reader(self) -> np.ndarray:
        """Reduced state (r, modes) that goes on as a field would; mutual branches, which a field does not know, stay at rest."""
        find, weight = self.natural
        return np.pad(find @ (self.outputs(self.after)[1] * weight), ((0, self.reduced.n_mutual), (0, 0)))

    @cached_property
    def surface(self) -> np.ndarray:
        """Sink surfaces in reduced modes, (m, r)."""
        fields, states = self.histories(self.lengths)
        want = self.full.out_surface @ (self.vectors / np.sqrt(self.full.c_j_per_k)[:, None]) @ fields
        scale = np.abs(states).max(axis=1, keepdims=True)
        left, size, right = np.linalg.svd(states / scale, full_matrices=False)
        found = (want @ right.T * (size / (size**2 + (1e-5 * size[0]) ** 2))) @ left.T / scale.T
        return np.pad(found, ((0, 0), (0, self.reduced.n_mutual)))


def _move(old: _Level, new: _Level) -> Move:
    if old.full.c_j_per_k.shape != new.full.c_j_per_k.shape or not np.allclose(old.full.c_j_per_k, new.full.c_j_per_k, rtol=1e-9):
        raise InputError("cooling levels", "masses that differ from level to level", "the same heat capacities at every level",
                         "give every level the heat capacity of the same sink")
    turn = new.vectors.T @ old.vectors
    find, weight = new.natural
    n = old.reduced.n_mutual
    rest = np.pad(find @ (old.outputs(new.after)[0] * weight), ((0, n), (0, n)))
    rest[rest.shape[0] - n:, rest.shape[1] - n:] = np.eye(n)
    fields, _ = old.histories(np.sqrt(old.lengths[1:] * old.lengths[:-1]))
    # between the times that the state was fitted to
    after = np.concatenate([[0.0], np.sqrt(new.after[1:-1] * new.after[2:])])
    reduced, full = new.outputs(after)
    junctions = slice(0, after.size * new.reduced.n_chips)
    miss = (reduced[junctions] @ new.reader[:reduced.shape[1]] - full[junctions]) @ (turn @ fields)
    return Move(turn, rest, float(np.abs(miss).max()))
