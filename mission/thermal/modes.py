"""From the full network to the few modes that the march needs, with a stated error.

Fast modes live in one chip; slow modes are shared by all. The reduced network
therefore has two parts:

* local modes, per chip: x' = -lam x + p_chip, seen only by that chip;
* shared modes: x' = -lam x + b . p, seen by every chip and case point.

The exact modes are grouped by decay rate. In each group the part that couples
chips is kept as few shared directions, what remains on the diagonal goes to
the local modes of each chip. Steady resistances stay exact on the diagonal.
The error is stated as a bound: |dT_i| <= sum_j L1(h_ij - h'_ij) max p_j, with the
norm of the impulse-response difference integrated over a fine time grid.
Chips on a common plate need another way to the same two parts, :func:`reduce_coupled`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..errors import InputError
from .assembly import FullNetwork

#: Most shared modes, and local ones of a chip, that the march has room for.
MOST_SHARED, MOST_LOCAL = 96, 16
#: In this time after a pulse a chip's own response shall go through its local modes, because those alone take part when the march turns
#: a mean into a ripple of 5 Hz and more; after the second time shared modes carry what they carry best [s].
_OWN_UNTIL_S, _SHARED_FROM_S = 0.05, 1.0
#: Shares of the room for shared modes that are tried in turn.
_SHARES_OF_ROOM = (0.25, 0.35, 0.45, 0.55, 0.7, 0.85, 1.0)


@dataclass(frozen=True)
class ReducedNetwork:
    """Modes for the march; n chips, L local modes a chip, S shared modes.

    Attributes
    ----------
    lam_local_per_s, rho_local, rho_case_local : ndarray, shape (L, n)
        Decay rates [1/s] and output weights [K/J] at junction and case point.
    lam_shared_per_s : ndarray, shape (S,)
    b_shared : ndarray, shape (S, n)
        Heat input of the shared modes.
    c_shared, c_case_shared : ndarray, shape (n, S)
    g_coolant : ndarray, shape (S,)
        A rise of the coolant by 1 K lowers shared mode s by ``g_coolant[s]``.
    g_coolant_local : ndarray, shape (L, n)
        The same for local modes, as their share of the junction's rise over the coolant [K/K].
    bound_k_per_w : ndarray, shape (n, n)
        Error bound of junction i per watt in chip j.
    relative_bound : float
        Largest bound over the matching steady rise, all chips heated alike.
    coolant_bound : float
        Largest error of a junction per kelvin of a coolant step.
    case_bound : float
        Largest steady error of a case point over its rise, all chips heated alike. Heat is kept within it: what case points show
        over all times differs from the heat put in by at most the bound times n chips times the most that one of them got.
    case_coolant_bound : float
        Largest error of a case point per kelvin of a coolant step; it is largest where a sink
        without heat capacity lets the coolant through at once.
    n_full : int
        Number of modes before reduction.
    n_mutual : int
        How many of the last shared modes are mutual branches given as such (:func:`mission.thermal.with_mutual`), not part of the network below; the
        warming of the coolant by modules in a row counts with them.
    grouping : tuple or None
        How the modes were grouped, for the same reduction of a like network.
    """

    lam_local_per_s: np.ndarray
    rho_local: np.ndarray
    rho_case_local: np.ndarray
    lam_shared_per_s: np.ndarray
    b_shared: np.ndarray
    c_shared: np.ndarray
    c_case_shared: np.ndarray
    g_coolant: np.ndarray
    g_coolant_local: np.ndarray
    bound_k_per_w: np.ndarray
    relative_bound: float
    coolant_bound: float
    case_bound: float
    case_coolant_bound: float
    n_full: int
    n_mutual: int = 0
    grouping: tuple | None = None

    @property
    def n_chips(self) -> int:
        return self.c_shared.shape[0]

    @property
    def n_modes(self) -> int:
        """Modes kept, local ones counted for every chip."""
        return self.lam_local_per_s.size + self.lam_shared_per_s.size

    @property
    def rates_per_s(self) -> np.ndarray:
        """Decay rates of a state: local modes (mode by mode, chips within), then shared ones, shape (L n + S,)."""
        return np.concatenate([self.lam_local_per_s.ravel(), self.lam_shared_per_s])

    @property
    def g_state(self) -> np.ndarray:
        """What a rise of the coolant by 1 K takes off a state, in the order of :attr:`rates_per_s`."""
        return np.concatenate([self.g_coolant_local.ravel(), self.g_coolant])

    @property
    def case_share_local(self) -> np.ndarray:
        """Part of each local mode that its case point sees, where the junction sees it whole, shape (L, n)."""
        own = self.rho_local != 0.0
        return np.where(own, self.rho_case_local / np.where(own, self.rho_local, 1.0), 0.0)

    def r_th_k_per_w(self) -> np.ndarray:
        """Steady self and mutual resistances over the coolant, shape (n, n)."""
        shared = self.c_shared @ (self.b_shared / self.lam_shared_per_s[:, None])
        return shared + np.diag((self.rho_local / self.lam_local_per_s).sum(axis=0))

    def r_case_k_per_w(self) -> np.ndarray:
        """Steady rise of case point i per watt in chip j, shape (n, n)."""
        shared = self.c_case_shared @ (self.b_shared / self.lam_shared_per_s[:, None])
        return shared + np.diag((self.rho_case_local / self.lam_local_per_s).sum(axis=0))

    def error_bound_k(self, power_max_w) -> np.ndarray:
        """Bound of the junction error [K] for powers that never exceed ``power_max_w`` (n,) [W]."""
        return self.bound_k_per_w @ np.broadcast_to(np.asarray(power_max_w, float), (self.n_chips,))


def unreduced(full: FullNetwork) -> ReducedNetwork:
    """All exact modes as shared modes; for checks and for small networks."""
    lam, junction, case, coolant = full.modes()
    n = full.n_chips
    empty = np.zeros((0, n))
    return ReducedNetwork(
        empty, empty, empty, lam, junction.T.copy(), junction, case, coolant, empty,
        np.zeros((n, n)), 0.0, 0.0, 0.0, 0.0, lam.size,
    )


def reduce_to_modes(full: FullNetwork, *, relative_tolerance: float = 1e-3, like: ReducedNetwork | None = None) -> ReducedNetwork:
    """Reduce until the bound meets ``relative_tolerance``.

    Parameters
    ----------
    full : FullNetwork
    relative_tolerance : float
        Wanted bound, as a share of the steady rise with all chips heated alike. Per kelvin
        of a coolant step five times as much is allowed, because a coolant changes slowly.
    like : ReducedNetwork, optional
        Of a network that differs little: its grouping is tried first, and taken if it meets the tolerance.

    Returns
    -------
    ReducedNetwork
        The smallest that meets the tolerance among the groupings tried; if none
        does, the most accurate one. ``relative_bound`` says what was reached.
    """
    lam, junction, case, coolant = _settling_modes(full)
    if like is not None and like.grouping is not None:
        trial = _reduce(lam, junction, case, coolant, *like.grouping)
        if _rank(trial, relative_tolerance)[0] == 0:
            return trial
    best = None
    for gap in (1.1, 1.02, 1.002, 1.0001):
        if gap < 1.02 and _rank(best, relative_tolerance)[0] == 0:
            break  # finer groups only where they are needed
        n_groups = len(_groups(lam, gap))
        for share in (0.5, 0.1):
            # the fewest slow groups whose coupling must be kept, by bisection
            low, high = 0, n_groups
            while low < high:
                middle = (low + high) // 2
                trial = _reduce(lam, junction, case, coolant, gap, share * relative_tolerance, middle)
                if _rank(trial, relative_tolerance)[0] == 0:
                    high = middle
                else:
                    low = middle + 1
                if best is None or _rank(trial, relative_tolerance) < _rank(best, relative_tolerance):
                    best = trial
    return best


def _settling_modes(full):
    lam, junction, case, coolant = full.modes()
    if lam[0] <= 1e-12 * lam[-1]:
        raise InputError("thermal network", f"a mode that never settles ({lam[0]:.3g} 1/s beside {lam[-1]:.3g} 1/s)",
                         "time constants within twelve decades", "check resistances and heat capacities for wrong units")
    return lam, junction, case, coolant


def reduce_coupled(full, *, relative_tolerance: float = 1e-3, most_shared: int = MOST_SHARED, like: ReducedNetwork | None = None) -> ReducedNetwork:
    """Reduce a network whose chips feel each other over all time scales, as on a common plate.

    There the exact modes form no groups that could be joined, as :func:`reduce_to_modes` does. Instead the network is projected on
    the directions that hold most of what is left of the responses after the time at which neighbours first matter (balanced truncation
    with a delayed start), and on the even temperature and what becomes of it when the coolant changes. That gives rates and heat inputs of the
    shared modes. Their outputs are fitted to what each chip and case point feels of the others' heat and of the coolant, steady
    resistances almost exactly. Local modes then carry the rest of each chip's own response, with its steady resistance exact.

    Parameters
    ----------
    full : FullNetwork, or another object with its ``modes()`` and ``n_chips``
    relative_tolerance : float
        Wanted bound, as a share of the steady rise with all chips heated alike. Case points (steady) and the answer to a coolant
        step may miss by five times as much.
    most_shared : int
        Room for shared modes.
    like : ReducedNetwork, optional
        Of a network that differs little: its number of modes is tried first, and taken if it is as good.

    Returns
    -------
    ReducedNetwork
        The first within the tolerance as more and more shared modes are tried; if not even ``most_shared`` of them suffice, the most accurate
        one. ``relative_bound`` says what was reached: on a plate with twelve chips 1 % with 50, 0.4 % with 81.
    """
    problem = _Coupled(full)
    if like is not None and like.grouping is not None:
        trial = problem.reduced(*like.grouping, relative_tolerance)
        if _misses(trial) <= max(relative_tolerance, 1.2 * _misses(like)):
            return trial
    room, best = min(most_shared, problem.lam.size), None
    for share in _SHARES_OF_ROOM:
        for number in range(len(problem.starts_s)):
            trial = problem.reduced(max(1, int(share * room)), number, relative_tolerance)
            if best is None or _misses(trial) < _misses(best):
                best = trial
        if _misses(best) <= relative_tolerance:
            break
    return best


def _misses(net):
    """What is held against the tolerance of :func:`reduce_coupled`."""
    return max(net.relative_bound, 0.2 * max(net.coolant_bound, net.case_bound, net.case_coolant_bound))


class _Coupled:
    """Exact responses of a network on a grid of times, and reductions of it; n chips, K modes, t times."""

    #: Fields that the shared modes hold in any case: the even temperature, and this many that are left of it when the coolant changed.
    _SMOOTHINGS = 4

    def __init__(self, full):
        self.lam, self.junction, self.case, self.coolant = lam, junction, case, coolant = _settling_modes(full)
        n = self.n = full.n_chips
        self.ends = np.concatenate([junction, case])
        self.steady = (self.ends / lam) @ junction.T  # (2n, n)
        self.scale = np.tile(self.steady[:n].sum(axis=1), 2)
        self.time = np.geomspace(1e-3 / lam[-1], 60.0 / lam[0], 400)
        decay = np.exp(-np.outer(self.time, lam))
        pairs = (self.ends[:, None, :] * junction).reshape(2 * n * n, lam.size)
        self.impulse = (decay @ pairs.T).reshape(-1, 2 * n, n)
        self.cooling = decay @ (self.ends * coolant).T  # (t, 2n)
        # neighbours matter from the time on at which they add a thousandth
        rise = (-np.expm1(-np.outer(self.time, lam)) / lam) @ (pairs.reshape(2 * n, n, -1)[:n].sum(axis=1) - junction**2).T
        felt = (rise > 1e-3 * self.scale[:n]).any(axis=1)
        matter = min(self.time[felt.argmax()], 1.0 / lam[0]) if felt.any() else 1.0 / lam[0]
        self.starts_s = (0.35 * matter, 0.1 * matter)
        self._directions: dict[float, np.ndarray] = {}

    def _held(self, start):
        """Directions of the state space, those first that hold most of the responses after ``start``; (K, k)."""
        if start not in self._directions:
            slow = self.lam < 20.0 / start  # the others have died away
            together = self.lam[slow][:, None] + self.lam[slow]
            # case points count nearly as much as junctions
            seen = np.concatenate([self.junction, 0.3 * self.case * (self.scale[: self.n] / self.steady[self.n :].sum(axis=1))[:, None]])[:, slow]
            out = np.zeros((self.lam.size, int(slow.sum())))
            out[slow] = np.linalg.eigh((seen.T @ seen) * np.exp(-start * together) / together)[1][:, ::-1]
            self._directions[start] = out
        return self._directions[start]

    def reduced(self, count: int, number: int, tolerance: float) -> ReducedNetwork:
        """With ``count`` shared modes, directions of what is left after start ``number``, and as many local modes as help to meet ``tolerance``."""
        lam, n, time, start = self.lam, self.n, self.time, self.starts_s[number]
        even = self.coolant[:, None] / np.column_stack([np.ones(lam.size), *(1.0 + lam / lam[0] / 8.0**k for k in range(self._SMOOTHINGS))])
        basis = np.linalg.qr(np.column_stack([even, self._held(start)])[:, :count])[0]
        rate, turn = np.linalg.eigh(basis.T @ (lam[:, None] * basis))
        basis = basis @ turn
        right, g = (self.junction @ basis).T, basis.T @ self.coolant
        decay = np.exp(-np.outer(time, rate))
        left = self._outputs(self.ends @ basis, right, g, rate, decay, start)
        gap = self.impulse - np.einsum("ts,is,sj->tij", decay, left, right, optimize=True)
        own = np.arange(n)
        steady_own = (left / rate * np.tile(right.T, (2, 1))).sum(axis=1)
        rest = gap[:, np.arange(2 * n), np.tile(own, 2)]
        rest_steady = self.steady[np.arange(2 * n), np.tile(own, 2)] - steady_own
        at_coolant = np.abs(self.cooling - decay @ (left * g).T).max(axis=0)
        slowest = max(min(0.1 / start, 1.0 / _SHARED_FROM_S), 0.5 * lam[0])
        for most in (MOST_LOCAL // 2, 3 * MOST_LOCAL // 4, MOST_LOCAL):
            fast = np.geomspace(slowest, max(0.3 * lam[-1], 10.0 * slowest), most)
            rho = np.array([_fit(time, fast, rest[:, i], rest_steady[i])[0] for i in range(2 * n)])
            error = gap[:, :n].copy()
            error[:, own, own] -= np.exp(-np.outer(time, fast)) @ rho[:n].T
            bound = l1_norm(time, error.reshape(time.size, -1)).reshape(n, n)
            relative = float((bound.sum(axis=1) / self.scale[:n]).max())
            if relative <= tolerance:
                break
        lam_l = np.repeat(fast[:, None], n, axis=1)
        case_error = _case_steady_error(lam, self.junction, self.case, lam_l, rho[n:].T, rate, left[n:], right)
        return ReducedNetwork(lam_l, rho[:n].T.copy(), rho[n:].T.copy(), rate, right, left[:n].copy(), left[n:].copy(), g, np.zeros_like(lam_l), bound,
                              relative, float(at_coolant[:n].max()), float(case_error), float(at_coolant[n:].max()), lam.size, grouping=(count, number))

    def _outputs(self, left, right, g, rate, decay, start):
        """Outputs of the shared modes: those of the projection, mended by least squares.

        Rows are t h(t) for the heat of every other chip, the steady resistances (heavy), the coolant step, and lightly the own response: none early,
        all of it late.
        """
        n = self.n
        use = self.time > 0.02 * start
        time, late = self.time[use], self.time[use] > _SHARED_FROM_S
        rows = ((decay[use] * time[:, None])[:, None, :] * right.T).transpose(1, 0, 2)  # (n, t, S)
        light = np.where(late, 0.1, np.where(time < _OWN_UNTIL_S, 0.3, 0.0))
        own = rows.transpose(0, 2, 1) @ rows
        own_light = (rows * light[:, None] ** 2).transpose(0, 2, 1) @ rows
        settled = 30.0 * right.T / rate
        step = decay * g
        every, every_step, every_settled = own.sum(axis=0), step.T @ step, settled.T @ settled
        for i in range(2 * n):
            j, weight = i % n, (0.3 * self.scale[i]) ** 2
            want = self.impulse[use, i].T * time  # (n, t)
            want[j, ~late] = 0.0
            miss = want - rows @ left[i]
            miss[j] *= light**2
            miss_settled = 30.0 * self.steady[i] - settled @ left[i]
            miss_settled[j] = 0.0
            square = every - own[j] + own_light[j] + weight * every_step + every_settled - np.outer(settled[j], settled[j])
            seen = np.tensordot(miss, rows, 2) + settled.T @ miss_settled + weight * step.T @ (self.cooling[:, i] - step @ left[i])
            size = np.sqrt(np.maximum(square.diagonal(), 1e-24 * square.diagonal().max()))
            # little change where the rows leave a choice
            left[i] += np.linalg.solve(square / np.outer(size, size) + 1e-6 * np.eye(rate.size), seen / size) / size
        return left


def _rank(trial, tolerance):
    """Sort key: within the tolerance first, then fewest modes, else smallest error."""
    # a coolant changes by kelvins in minutes, a junction by tens of kelvins in a second
    worst = max(trial.relative_bound, 0.2 * trial.coolant_bound)
    return (0, trial.lam_local_per_s.size + trial.lam_shared_per_s.size * trial.n_chips) if worst <= tolerance else (1, worst)


def _groups(lam, gap):
    """Split rising decay rates where the next is more than ``gap`` times faster."""
    cuts = np.flatnonzero(lam[1:] > gap * lam[:-1]) + 1
    return np.split(np.arange(lam.size), cuts)


def _reduce(lam, junction, case, coolant, gap, tolerance, coupled):
    n, n_full = junction.shape
    ends = np.concatenate([junction, case])  # (2n, K): junctions, then case points
    steady = (ends / lam) @ ends.T
    row_scale = np.abs(steady[:n, :n]).sum(axis=1)
    row_scale = np.concatenate([row_scale, row_scale])
    lam_s, left, right = [], [], []
    groups = _groups(lam, gap)[:coupled]
    for group in groups:
        part = ends[:, group]
        dc = (part / lam[group]) @ part.T
        first_moment = np.trace((part / lam[group] ** 2) @ part.T)
        if first_moment == 0.0:
            continue
        # one decay rate for the group that keeps steady gain and mean delay
        rate = np.trace(dc) / first_moment
        u, sign = _coupling_directions(dc, n, tolerance * row_scale / len(groups))
        for k in range(sign.size):
            lam_s.append(rate)
            left.append(u[:, k] * sign[k] * rate)
            right.append(u[:n, k])
    s = len(lam_s)
    lam_s = np.array(lam_s)
    left = np.array(left).T if s else np.zeros((2 * n, 0))
    right = np.array(right) if s else np.zeros((0, n))

    time = np.geomspace(1e-3 / lam[-1], 40.0 / lam[0], 300)
    decay_full = np.exp(-np.outer(time, lam))
    decay_s = np.exp(-np.outer(time, lam_s))
    lam_l, rho, rho_case = _local_modes(lam, junction, case, lam_s, left, right, time, tolerance * row_scale)

    g, g_local, coolant_error, case_coolant_error = _coolant_weights(ends, coolant, decay_full, decay_s, left, lam_l, rho, rho_case, time)
    case_error = _case_steady_error(lam, junction, case, lam_l, rho_case, lam_s, left[n:], right)
    bound = _bound(lam, junction, lam_l, rho, lam_s, left[:n], right)
    relative = float((bound.sum(axis=1) / row_scale[:n]).max())
    return ReducedNetwork(
        lam_l, rho, rho_case, lam_s, right, left[:n].copy(), left[n:].copy(), g, g_local, bound, relative, float(coolant_error),
        float(case_error), float(case_coolant_error), n_full, grouping=(gap, tolerance, coupled),
    )


def _coolant_weights(ends, coolant, decay_full, decay_s, left, lam_l, rho, rho_case, time):
    """What a coolant step of 1 K takes off the shared and the local modes, and the largest junction and case errors it leaves.

    Together the modes must carry "everything at 1 K over the coolant" and let it decay.
    """
    n = rho.shape[1]
    want = decay_full @ (ends * coolant).T  # (time, 2n)
    s = left.shape[1]
    heavy = 100.0  # the start value, so that temperatures do not jump with the coolant
    g = np.zeros(s)
    if s:
        rows = (left[:, None, :] * decay_s[None, :, :]).reshape(-1, s)
        g = np.linalg.lstsq(np.vstack([rows, left * heavy]), np.concatenate([want.T.reshape(-1), np.full(2 * n, heavy)]), rcond=1e-10)[0]
    rest = want[:, :n] - decay_s @ (left[:n] * g).T
    start = 1.0 - left[:n] @ g
    g_local = np.zeros_like(lam_l)
    for i in range(n):
        own = rho[:, i] != 0.0
        decay = np.exp(-np.outer(time, lam_l[own, i]))
        g_local[own, i] = np.linalg.lstsq(np.vstack([decay, np.full(own.sum(), heavy)]), np.append(rest[:, i], heavy * start[i]), rcond=1e-8)[0]
        rest[:, i] -= decay @ g_local[own, i]
    case_rest = want[:, n:] - decay_s @ (left[n:] * g).T
    for i in range(n):
        own = rho[:, i] != 0.0
        case_rest[:, i] -= np.exp(-np.outer(time, lam_l[own, i])) @ (g_local[own, i] * rho_case[own, i] / rho[own, i])
    return g, g_local, np.abs(rest).max(), np.abs(case_rest).max()


def _case_steady_error(lam, junction, case, lam_l, rho_case, lam_s, c_s, b_s):
    """Largest steady error of a case point over its rise, all chips heated alike."""
    steady = (case / lam) @ junction.T
    reduced = (c_s / lam_s) @ b_s + np.diag((rho_case / lam_l).sum(axis=0))
    return (np.abs(reduced - steady).sum(axis=1) / steady.sum(axis=1)).max()


def _coupling_directions(dc, n, allowed):
    """Fewest directions u with signs so that dc - u diag(sign) u.T couples no chip with another.

    Works like a principal-factor analysis: the diagonal (a chip with its own
    case point) is free, because local modes can carry it.
    """
    free = np.zeros_like(dc, dtype=bool)
    idx = np.arange(2 * n)
    free[idx, idx] = True
    free[idx[:n], idx[n:]] = True
    free[idx[n:], idx[:n]] = True
    diagonal = np.where(free, dc, 0.0)

    def attempt(rank):
        """Directions of a rank, whether they suffice."""
        own = diagonal
        known = np.inf
        for turn in range(1 if rank == 0 else 40):
            value, vector = np.linalg.eigh(dc - own)
            order = np.argsort(-np.abs(value))[:rank]
            fitted = (vector[:, order] * value[order]) @ vector[:, order].T
            left_over = np.where(free, 0.0, np.abs(dc - fitted)).sum(axis=1)
            found = vector[:, order] * np.sqrt(np.abs(value[order])), np.sign(value[order])
            worst = (left_over / allowed).max()
            if worst <= 1.0:
                return found, True
            new = np.where(free, dc - fitted, 0.0)
            # far off and no longer getting closer: this rank will not do
            if np.abs(new - own).max() < 0.01 * allowed.min() or (turn % 5 == 4 and worst > 0.9 * known and worst > 1.5):
                break
            if turn % 5 == 4:
                known = worst
            own = new
        return found, False

    # ranks 0, 1, 2, 4, 8 ... until one suffices, then the smallest by halving
    low, high = -1, 0
    found, good = attempt(0)
    while not good and high < n:
        low, high = high, min(max(1, 2 * high), n)
        found, good = attempt(high)
    while good and high - low > 1:
        middle = (low + high) // 2
        trial, fits = attempt(middle)
        if fits:
            found, high = trial, middle
        else:
            low = middle
    return found


def _local_modes(lam, junction, case, lam_s, left, right, time, allowed):
    """Few exponentials for what the shared modes leave of each chip's response to its own heat."""
    n = junction.shape[0]
    # equal chips give equal modes, which the eigensolver mixes at will: only their sums mean something
    first = np.concatenate([[0], np.flatnonzero(np.diff(lam) > 1e-7 * lam[1:]) + 1])
    rate = lam[first]
    decay = np.exp(-np.outer(time, rate))
    decay_s = np.exp(-np.outer(time, lam_s))
    steady_s = left * right.T[np.r_[0:n, 0:n]] / lam_s
    known: dict[tuple, tuple] = {}
    fits = []
    for i in range(n):
        own = np.add.reduceat(junction[i] ** 2, first)
        own_case = np.add.reduceat(case[i] * junction[i], first)
        shared, shared_case = left[i] * right[:, i], left[n + i] * right[:, i]
        key = tuple(np.concatenate([own, own_case, shared, shared_case]).round(9 - int(np.log10(own.max()))))
        if key not in known:
            known[key] = _one_chip(
                rate, own / rate, decay @ own - decay_s @ shared, (own / rate).sum() - steady_s[i].sum(),
                decay @ own_case - decay_s @ shared_case, (own_case / rate).sum() - steady_s[n + i].sum(), time, 0.3 * allowed[i])
        fits.append(known[key])
    most = max(f[0].size for f in fits)
    lam_l = np.ones((most, n))
    rho_l = np.zeros((most, n))
    rho_c = np.zeros((most, n))
    for i, (rates, rho, rho_case) in enumerate(fits):
        lam_l[: rates.size, i] = rates
        rho_l[: rates.size, i] = rho
        rho_c[: rates.size, i] = rho_case
    return lam_l, rho_l, rho_c


def _one_chip(lam, weight, impulse, end, impulse_case, end_case, time, allowed):
    """Rates and weights of one chip: as few as meet ``allowed``."""
    for rates in _cluster_levels(lam, weight, 12):
        rho, miss = _fit(time, rates, impulse, end)
        if miss <= allowed:
            break
    # a slow rate that the shared modes already carry is not needed twice
    while rates.size > 1:
        fewer = np.delete(rates, np.argmin(np.abs(rho / rates)))
        rho_fewer, miss_fewer = _fit(time, fewer, impulse, end)
        if miss_fewer > max(allowed, miss):
            break
        rates, rho = fewer, rho_fewer
    return rates, rho, _fit(time, rates, impulse_case, end_case)[0]


def _fit(time, rates, impulse, end):
    """Weights of given decay rates for an impulse response whose integral is ``end``, and the L1 norm of the miss.

    Fitted on t h(t), the response per decade of time; the integral (the steady
    resistance) is a heavy row.
    """
    decay = np.exp(-np.outer(time, rates))
    heavy = 1000.0 * np.sqrt(time.size)
    rows = np.vstack([decay * time[:, None], heavy / rates]) * rates
    rho = np.linalg.lstsq(rows, np.append(impulse * time, heavy * end), rcond=1e-10)[0] * rates
    return rho, float(l1_norm(time, (impulse - decay @ rho)[:, None])[0])


def fewer_rates(rate_per_s, weight, most: int):
    """The same courses with fewer decay rates.

    Parameters
    ----------
    rate_per_s : ndarray, shape (s,)
    weight : ndarray, shape (s, n)
        Of n courses sum of w exp(-r t).
    most : int
        Rates wanted, evenly spaced in their logarithm from the slowest to the fastest; with no more than that many given, nothing changes.

    Returns
    -------
    rate_per_s : ndarray, shape (k,)
    weight : ndarray, shape (k, n)
        Fitted; integrals of the courses stay.

    Examples
    --------
    >>> rate, weight = fewer_rates(np.geomspace(1.0, 100.0, 50), np.ones((50, 1)), 8)
    >>> round(float(weight[:, 0] @ np.exp(-rate * 0.1)), 2), round(float(np.exp(-np.geomspace(1.0, 100.0, 50) * 0.1).sum()), 2)
    (19.81, 19.85)
    """
    if rate_per_s.size <= most:
        return rate_per_s, weight
    fewer = np.geomspace(rate_per_s.min(), rate_per_s.max(), most)
    time = np.geomspace(0.01 / rate_per_s.max(), 20.0 / rate_per_s.min(), 240)
    course, end = np.exp(-np.outer(time, rate_per_s)) @ weight, (weight / rate_per_s[:, None]).sum(axis=0)
    return fewer, np.column_stack([_fit(time, fewer, c, e)[0] for c, e in zip(course.T, end)])


def l1_norm(time, response):
    """Integral of |response| over time, columns apart, on a logarithmic grid; before the first point it is constant."""
    size = np.abs(response)
    return np.trapezoid(size * time[:, None], np.log(time), axis=0) + size[0] * time[0]


def _cluster_levels(lam, weight, most):
    """Rates that stand for the modes of one chip: one of them, then two, up to ``most``.

    Neighbouring modes are joined, least loss first; a joint time constant is the
    weighted mean, so that the mean delay is kept.
    """
    keep = weight > 1e-7 * weight.sum()
    rate, w = lam[keep].copy(), weight[keep].copy()
    levels = [rate] if rate.size <= most else []
    while rate.size > 1:
        gap = np.log(rate[1:] / rate[:-1])
        k = int(np.argmin(gap**2 * (w[:-1] * w[1:]) / (w[:-1] + w[1:])))
        total = w[k] + w[k + 1]
        joint = total / (w[k] / rate[k] + w[k + 1] / rate[k + 1])
        rate = np.concatenate([rate[:k], [joint], rate[k + 2:]])
        w = np.concatenate([w[:k], [total], w[k + 2:]])
        if rate.size <= most:
            levels.append(rate)
    return levels[::-1]


def _bound(lam, junction, lam_l, rho, lam_s, c_s, b_s):
    """L1 norms of impulse-response differences, shape (n, n), on a fine logarithmic grid."""
    n = junction.shape[0]
    every = np.concatenate([lam, lam_l.ravel(), lam_s])
    time = np.geomspace(1e-3 / every.max(), 60.0 / every.min(), 500)
    decay = np.exp(-np.outer(time, lam))
    decay_s = np.exp(-np.outer(time, lam_s))
    bound = np.empty((n, n))
    for j in range(n):
        error = decay @ (junction * junction[j]).T - decay_s @ (c_s * b_s[:, j]).T
        error[:, j] -= np.exp(-np.outer(time, lam_l[:, j])) @ rho[:, j]
        bound[:, j] = l1_norm(time, error)
    return bound
