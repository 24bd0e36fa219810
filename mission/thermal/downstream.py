"""Modules in a row on one liquid plate: what the coolant takes up of one, the next ones feel.

Each module stands on a sink of its own; the coolant that reaches it is warmer by what the modules before have given off. Heat reaches
the coolant late (through the module and the metal), and a warmer coolant reaches the chips late again; both ways are known exactly from
the modes of one leg, and their convolution is put beside the network as a few more shared modes.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from .assembly import FullNetwork
from .modes import ReducedNetwork, l1_norm

#: Decay rates that are tried: from this share of the slowest rate of a leg, so many of them, this far apart.
_SLOWEST, _COUNTS, _RATIO = 0.7, (3, 4, 5, 6, 7, 8, 10), 2.2


def with_coolant_rise(network: ReducedNetwork, full: FullNetwork, rise_k_per_w: float, first_to_last, *, relative_tolerance: float = 1e-3) -> ReducedNetwork:
    """Let the heat of each leg's module warm the coolant of those behind it.

    Parameters
    ----------
    network, full : ReducedNetwork, FullNetwork
        Three legs that share nothing.
    rise_k_per_w : float
        Rise of the coolant over each watt that it has taken up [K/W].
    first_to_last : tuple of int
        Legs in the order in which the coolant reaches them.
    relative_tolerance : float
        Wanted error of what is added, as a share of the steady rise.

    Returns
    -------
    ReducedNetwork
        With more shared modes; their error is in the bound.

    Notes
    -----
    Heat that a module takes up or gives back because its own coolant changes is not passed on; it vanishes in the steady state and is
    smaller than the rise that is passed on by the ratio of the coolant's rise to the resistance of one sink. The time that
    the coolant takes along the plate (seconds) and conduction along the metal are left out.
    """
    legs = _legs(full)
    n = full.n_chips
    chips = [np.flatnonzero((np.arange(n) % 6) // 2 == leg) for leg in range(3)]
    slowest = min(part[0][0] for part in legs)
    fastest = max(part[0][-1] for part in legs)
    time = np.geomspace(1e-2 / fastest, 60.0 / slowest, 320)
    pairs = [(a, b) for place, a in enumerate(first_to_last) for b in first_to_last[place + 1:]]
    steady = np.tile(network.r_th_k_per_w().sum(axis=1), 2)
    whole = {}
    for a, b in pairs:
        whole[a, b] = rise_k_per_w * _passed_on(legs[a], legs[b], time)
        steady[np.concatenate([chips[b], n + chips[b]])] += rise_k_per_w * chips[a].size
    for count in _COUNTS:
        rates = _SLOWEST * slowest * _RATIO ** np.arange(count)
        lam, b_rows, c_rows, miss = _fitted(rates, time, whole, chips, n, rise_k_per_w, 0.1 * relative_tolerance * steady.min() / n)
        if (miss[:n].sum(axis=1) / steady[:n]).max() <= relative_tolerance:
            break
    bound = network.bound_k_per_w + miss[:n]
    return replace(network, lam_shared_per_s=np.append(network.lam_shared_per_s, lam), b_shared=np.vstack([network.b_shared, b_rows]),
                   c_shared=np.hstack([network.c_shared, c_rows[:n]]), c_case_shared=np.hstack([network.c_case_shared, c_rows[n:]]),
                   g_coolant=np.append(network.g_coolant, np.zeros(lam.size)), n_full=network.n_full + lam.size, n_mutual=network.n_mutual + lam.size,
                   bound_k_per_w=bound, relative_bound=float((bound.sum(axis=1) / steady[:n]).max()))


def _legs(full: FullNetwork):
    """Modes of each leg alone: decay rates, rise of junctions and case points (2 p, K), heat inputs (p, K), an even temperature (K,)."""
    from scipy.sparse import csr_matrix
    from scipy.sparse.csgraph import connected_components

    _, part = connected_components(csr_matrix(full.g_w_per_k != 0.0), directed=False)
    leg_of_chip = (np.arange(full.n_chips) % 6) // 2
    out = []
    for leg in range(3):
        mine = np.flatnonzero(leg_of_chip == leg)
        nodes = np.flatnonzero(np.isin(part, part[np.abs(full.out_junction[mine]).max(axis=0) > 0.0]))
        alone = FullNetwork(full.c_j_per_k[nodes], full.g_w_per_k[np.ix_(nodes, nodes)], full.out_junction[np.ix_(mine, nodes)],
                            full.out_case[np.ix_(mine, nodes)], full.out_surface[leg:leg + 1, nodes])
        lam, junction, case, even = alone.modes()
        out.append((lam, np.vstack([junction, case]), junction, even))
    return out


def _passed_on(before, behind, time):
    """Impulse responses (time, 2 p, p) of junctions and case points behind, per watt in the chips before and per K/W of the coolant."""
    lam_a, _, heat, even_a = before
    lam_b, ends, _, even_b = behind
    leaves = heat * (even_a * lam_a)  # of each chip's heat, in the modes before
    follows = ends * (even_b * lam_b)
    at_once = 1.0 - ends @ even_b  # where a sink stores nothing
    out = np.empty((time.size, ends.shape[0], heat.shape[0]))
    gap = lam_a[:, None] - lam_b
    close = np.abs(gap) < 1e-9 * lam_b
    safe = np.where(close, 1.0, gap)
    for k, t in enumerate(time):
        fade_a, fade_b = np.exp(-lam_a * t), np.exp(-lam_b * t)
        both = np.where(close, t * fade_b, (fade_b - fade_a[:, None]) / safe)
        out[k] = follows @ both.T @ leaves.T + np.outer(at_once, leaves @ fade_a)
    return out


def _fitted(rates, time, whole, chips, n, rise, allowed):
    """Shared modes of given rates: (lam, heat inputs, outputs of junctions and case points, L1 norms of what is missed)."""
    decay = np.exp(-np.outer(time, rates))
    heavy = 1000.0 * np.sqrt(time.size)
    rows = np.vstack([decay * time[:, None], heavy / rates]) * rates
    weight = np.zeros((rates.size, 2 * n, n))
    for (a, b), response in whole.items():
        flat = response.reshape(time.size, -1)
        target = np.vstack([flat * time[:, None], np.full(flat.shape[1], heavy * rise)])
        ends = np.concatenate([chips[b], n + chips[b]])
        weight[:, ends[:, None], chips[a]] = (np.linalg.lstsq(rows, target, rcond=1e-9)[0] * rates[:, None]).reshape(rates.size, ends.size, -1)
    lam, heat, out = [], [], []
    for rate, matrix in zip(rates, weight):
        left, size, right = np.linalg.svd(matrix, full_matrices=False)
        keep = size / rate > allowed
        lam += [rate] * int(keep.sum())
        heat.append(right[keep])
        out.append((left * size)[:, keep])
    lam, heat, out = np.array(lam), np.vstack(heat), np.hstack(out)
    fade = np.exp(-np.outer(time, lam))
    miss = np.zeros((2 * n, n))
    for (a, b), response in whole.items():
        ends = np.concatenate([chips[b], n + chips[b]])
        made = np.einsum("tm,im,mj->tij", fade, out[ends], heat[:, chips[a]])
        miss[ends[:, None], chips[a]] = l1_norm(time, (response - made).reshape(time.size, -1)).reshape(ends.size, -1)
    return lam, heat, out, miss
