"""Mutual heating given as curves: chips that warm each other on the way to the case, beside their own branches.

Each mutual branch R (1 - exp(-t/tau)) is a mode of its own that two chips share. All branches of one time constant make a
symmetric matrix; its eigenvectors are the fewest modes that stand for it exactly.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..checks import require_range
from ..device import PowerModule
from ..device.coupling import check_mutual_branches, check_mutual_resistances, coupled_chips
from ..errors import InputError
from .layers import load_materials, stack_ladder
from .modes import ReducedNetwork
from .networks import FosterNetwork

#: Eigenvalues of a group below this share of its largest are rounding.
_NO_MODE = 1e-9


@dataclass(frozen=True)
class MutualBranches:
    """Rise of one chip per watt in another as a sum of branches R (1 - exp(-t/tau)), R of either sign.

    A mutual curve begins flat, so that exact branches of it never all have one sign. Their sum is above zero and the
    curve stays above zero (see :func:`mission.device.coupling.check_mutual_branches`).

    Attributes
    ----------
    r_k_per_w, tau_s : ndarray, shape (n,)
        [K/W], not zero; [s], above zero, in any order.
    """

    r_k_per_w: np.ndarray
    tau_s: np.ndarray

    def __post_init__(self):
        r = require_range("r_k_per_w", np.atleast_1d(self.r_k_per_w), unit="K/W")
        tau = require_range("tau_s", np.atleast_1d(self.tau_s), low=0.0, low_open=True, unit="s")
        if r.shape == tau.shape and r.ndim == 1:
            order = np.argsort(tau)
            r, tau = r[order], tau[order]
        check_mutual_branches(r, tau)
        object.__setattr__(self, "r_k_per_w", r)
        object.__setattr__(self, "tau_s", tau)


def with_mutual(network: ReducedNetwork, mutual: Mapping[tuple[int, int], MutualBranches | FosterNetwork]) -> ReducedNetwork:
    """Put mutual branches into a network, exactly: no reduction error comes with them.

    Parameters
    ----------
    network : ReducedNetwork
    mutual : dict
        (i, j), two chip numbers in any order, each pair once -> branches of the rise of one per watt in the other. They act both ways.

    Returns
    -------
    ReducedNetwork
        With shared modes added: for every time constant as many as the matrix of its branches has eigenvalues (up to one a chip; two for
        a lone pair), so branches with common time constants cost least.

    Raises
    ------
    InputError
        A chip number that does not exist, a chip with itself, a pair given twice.

    Notes
    -----
    The branches only add to junctions. Heat that leaves towards the sink stays that of the chips' own branches, and so
    do case points; what the coolant does is left as it was. Data that end at the case or the sink say no more: the mutual rise counts from that point.
    ``bound_k_per_w`` stays as it was; ``relative_bound`` is still true, as steady rises only grow.

    In fast rotation the march makes a chip's ripple of its own heat only. What the neighbours' ripple adds is left out: of a swing of 26 K
    at 8 Hz, with every chip of a leg coupled to each other by a fifth of its own resistance, 0.8 K at the valley and 0.1 K at the peak (measured
    against the march along the angle); at 25 Hz 0.1 K.
    """
    n = network.n_chips
    by_tau: dict[float, np.ndarray] = {}
    seen = set()
    for (i, j), branches in mutual.items():
        if not (0 <= i < n and 0 <= j < n) or i == j:
            raise InputError("mutual", f"chips {i} and {j}", f"two different chips out of 0 to {n - 1}", "check the numbers")
        if (j, i) in seen:
            raise InputError("mutual", f"chips {i} and {j} twice", "each pair once", "branches act both ways: remove one")
        seen.add((i, j))
        for r, tau in zip(branches.r_k_per_w, branches.tau_s):
            matrix = by_tau.setdefault(float(tau), np.zeros((n, n)))
            matrix[i, j] += r
            matrix[j, i] += r
    lam, heat, rise = [np.zeros(0)], [np.zeros((0, n))], [np.zeros((n, 0))]
    for tau, matrix in by_tau.items():
        value, vector = np.linalg.eigh(matrix)
        keep = np.abs(value) > _NO_MODE * np.abs(value).max()
        shape = vector[:, keep] * np.sqrt(np.abs(value[keep]))
        lam.append(np.full(shape.shape[1], 1.0 / tau))
        heat.append(shape.T)
        rise.append(shape * np.sign(value[keep]) / tau)
    lam, heat, rise = np.concatenate(lam), np.vstack(heat), np.hstack(rise)
    return replace(
        network, lam_shared_per_s=np.append(network.lam_shared_per_s, lam), b_shared=np.vstack([network.b_shared, heat]),
        c_shared=np.hstack([network.c_shared, rise]), c_case_shared=np.hstack([network.c_case_shared, np.zeros_like(rise)]),
        g_coolant=np.append(network.g_coolant, np.zeros_like(lam)), n_full=network.n_full + lam.size, n_mutual=network.n_mutual + lam.size)


def without_mutual(network: ReducedNetwork) -> ReducedNetwork:
    """The network as it was before :func:`with_mutual`."""
    if network.n_mutual == 0:
        return network
    s = network.lam_shared_per_s.size - network.n_mutual
    return replace(network, lam_shared_per_s=network.lam_shared_per_s[:s], b_shared=network.b_shared[:s], c_shared=network.c_shared[:, :s],
                   c_case_shared=network.c_case_shared[:, :s], g_coolant=network.g_coolant[:s], n_full=network.n_full - network.n_mutual, n_mutual=0)


def module_mutual(module: PowerModule, *, materials=None) -> dict[tuple[int, int], MutualBranches]:
    """The couplings of a module file by chip numbers, for :func:`with_mutual`.

    Parameters
    ----------
    module : PowerModule
    materials : dict, optional
        For chips given as layers; default: the shipped ones.

    Raises
    ------
    RangeError
        Mutual resistances that the chips' own do not allow; see :func:`mission.device.coupling.check_mutual_resistances`.
    """
    pairs = coupled_chips(module)
    if not pairs:
        return {}
    own = []
    for pair in module.chip_pairs():
        thermal = pair.thermal
        if thermal.layer:
            materials = load_materials() if materials is None else materials
            shares = stack_ladder(thermal.layer, materials, cells=thermal.cells_per_layer, where=f"{pair.place}.thermal.layer").r_layers_k_per_w
        own += 6 * [sum(shares if thermal.layer else thermal.r_k_per_w)]
    mutual = {chips: MutualBranches(np.array(module.coupling[k].r_k_per_w), np.array(module.coupling[k].tau_s)) for chips, k in pairs.items()}
    check_mutual_resistances(own, {chips: float(b.r_k_per_w.sum()) for chips, b in mutual.items()}, module.chip_names(),
                             {chips: f"coupling[{k + 1}]" for chips, k in pairs.items()})
    return mutual


def matrix_modes(branches: Sequence[Sequence[FosterNetwork | MutualBranches | None]]) -> ReducedNetwork:
    """Modes of data given as a full matrix of curves, chip over coolant, with no sink behind it.

    Parameters
    ----------
    branches : n rows of n
        ``branches[i][j]``: rise of chip i per watt in chip j, over the coolant; None where two chips do not feel each other. One of
        ``[i][j]`` and ``[j][i]`` is enough; both must be the same.

    Returns
    -------
    ReducedNetwork
        Exact: own branches as local modes, mutual ones as shared modes. Case points are the coolant. Such data do not say how a change of
        the coolant arrives: all chips follow it at once.

    Raises
    ------
    InputError, RangeError
        Not a square, a chip without a curve of its own, two directions that differ, resistances that no body can have.

    Examples
    --------
    >>> own, mutual = FosterNetwork([0.1], [0.5]), FosterNetwork([0.02], [2.0])
    >>> matrix_modes([[own, mutual], [None, own]]).r_th_k_per_w().round(9).tolist()
    [[0.1, 0.02], [0.02, 0.1]]
    """
    n = len(branches)
    names = [f"chip {i}" for i in range(n)]
    mutual, places = {}, {}
    for i, row in enumerate(branches):
        if len(row) != n:
            raise InputError(f"branches[{i}]", f"{len(row)} entries", f"{n}, as there are rows", "give a square")
        if not isinstance(row[i], FosterNetwork):
            raise InputError(f"branches[{i}][{i}]", "no own curve" if row[i] is None else f"{type(row[i]).__name__}", "a FosterNetwork: own branches are above zero", "enter it")
        for j in range(i):
            here, there = row[j], branches[j][i]
            if here is not None and there is not None and not _same(here, there):
                raise InputError(f"branches[{i}][{j}]", f"other branches than branches[{j}][{i}]", "the same both ways",
                                 "a watt in one chip warms the other as much as a watt there warms the first: enter the mean of both")
            if here is not None or there is not None:
                mutual[j, i] = here if there is None else there
                places[j, i] = f"branches[{i}][{j}]" if there is None else f"branches[{j}][{i}]"
    if n == 0:
        raise InputError("branches", "no chip", "at least one")
    own = [branches[i][i] for i in range(n)]
    check_mutual_resistances([b.r_total_k_per_w for b in own], {chips: float(b.r_k_per_w.sum()) for chips, b in mutual.items()}, names, places)
    most = max(b.tau_s.size for b in own)
    lam, rho, none = np.ones((most, n)), np.zeros((most, n)), np.zeros((n, 0))
    for i, b in enumerate(own):
        lam[: b.tau_s.size, i] = 1.0 / b.tau_s
        rho[: b.tau_s.size, i] = b.r_k_per_w / b.tau_s
    alone = ReducedNetwork(lam, rho, np.zeros_like(rho), np.zeros(0), none.T, none, none, np.zeros(0), np.zeros_like(rho), np.zeros((n, n)), 0.0, 0.0, 0.0, 0.0,
                           sum(b.tau_s.size for b in own))
    return with_mutual(alone, mutual)


def _same(one, other) -> bool:
    return np.array_equal(one.r_k_per_w, other.r_k_per_w) and np.array_equal(one.tau_s, other.tau_s)
