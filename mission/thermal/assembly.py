"""Chips, cases and sink joined into one state-space model.

The network is a graph of nodes with heat capacities and conductances, referred
to the coolant: C dy/dt = -G y + E p with y = T - T_coolant. Points without
capacity (the case of a data sheet) are eliminated exactly and recovered as
outputs.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from ..checks import require_range
from ..errors import InputError
from .networks import CauerLadder


@dataclass(frozen=True)
class Spot:
    """A temperature within a body: the sum of its nodes' temperatures with ``weight`` (m,), which add up to 1."""

    first: int
    weight: np.ndarray


@dataclass
class NetworkBuilder:
    """Collects nodes and conductances; :meth:`build` gives the full network."""

    _c: list[float] = field(default_factory=list)
    _edges: list[tuple[int, int, float]] = field(default_factory=list)
    _to_spots: list[tuple[int, Spot, float]] = field(default_factory=list)
    _bodies: list[tuple[int, np.ndarray, int]] = field(default_factory=list)
    _to_coolant: list[tuple[int, float]] = field(default_factory=list)

    def node(self, c_j_per_k: float = 0.0) -> int:
        """Add a node; returns its number. Capacity 0 marks a point without mass."""
        self._c.append(float(c_j_per_k))
        return len(self._c) - 1

    def add_capacity(self, a: int, c_j_per_k: float) -> None:
        """Add heat capacity at a node."""
        self._c[a] += float(c_j_per_k)

    def body(self, c_j_per_k: np.ndarray, g_w_per_k: np.ndarray, surface: int) -> int:
        """Add a body of m nodes that stands on node ``surface``; returns the number of its first node.

        Parameters
        ----------
        c_j_per_k : ndarray, shape (m,)
        g_w_per_k : ndarray, shape (m, m)
            Symmetric: heat that its nodes give off, by their temperatures over the surface. What the rows add up to goes to the surface.
        surface : int
        """
        first = len(self._c)
        self._c.extend(c_j_per_k.tolist())
        self._bodies.append((first, g_w_per_k, surface))
        return first

    def resistance(self, a: int, b: int | Spot, r_k_per_w: float) -> None:
        """Join a node to another, or to a spot of a body."""
        require_range("r_k_per_w", r_k_per_w, low=0.0, low_open=True, unit="K/W")
        (self._to_spots if isinstance(b, Spot) else self._edges).append((a, b, 1.0 / r_k_per_w))

    def to_coolant(self, a: int, r_k_per_w: float) -> None:
        """Join a node to the coolant."""
        require_range("r_k_per_w", r_k_per_w, low=0.0, low_open=True, unit="K/W")
        self._to_coolant.append((a, 1.0 / r_k_per_w))

    def ladder(self, ladder: CauerLadder, end: int | Spot | None) -> int:
        """Add a ladder that ends at node or spot ``end`` (None: at the coolant); returns its heated node."""
        nodes = [self.node(c) for c in ladder.c_j_per_k]
        for k, r in enumerate(ladder.r_k_per_w):
            if k + 1 < len(nodes):
                self.resistance(nodes[k], nodes[k + 1], r)
            elif end is None:
                self.to_coolant(nodes[k], r)
            else:
                self.resistance(nodes[k], end, r)
        return nodes[0]

    def _reaches_coolant(self) -> bool:
        reached = {a for a, _ in self._to_coolant}
        waiting = list(reached)
        beside: dict[int, list[int]] = {}
        for a, b, _ in self._edges:
            beside.setdefault(a, []).append(b)
            beside.setdefault(b, []).append(a)
        for a, spot, _ in self._to_spots:
            beside.setdefault(spot.first, []).append(a)
        for first, g, surface in self._bodies:
            beside.setdefault(surface, []).extend(range(first, first + len(g)))
        while waiting:
            for other in beside.get(waiting.pop(), []):
                if other not in reached:
                    reached.add(other)
                    waiting.append(other)
        return len(reached) == len(self._c)

    def build(self, heated: list[int], watched: list[int | Spot], surfaces: list[int] | tuple[int, ...] = ()) -> FullNetwork:
        """Assemble with heat entering at ``heated``, case points ``watched`` (one a chip) and sink ``surfaces``."""
        n = len(self._c)
        c = np.array(self._c)
        g = np.zeros((n, n))
        for a, b, y in self._edges:
            g[a, a] += y
            g[b, b] += y
            g[a, b] -= y
            g[b, a] -= y
        for a, spot, y in self._to_spots:
            own = slice(spot.first, spot.first + spot.weight.size)
            g[a, a] += y
            g[a, own] -= y * spot.weight
            g[own, a] -= y * spot.weight
            g[own, own] += y * np.outer(spot.weight, spot.weight)
        for first, inner, surface in self._bodies:
            own, out = slice(first, first + len(inner)), inner.sum(axis=1)
            g[own, own] += inner
            g[surface, own] -= out
            g[own, surface] -= out
            g[surface, surface] += out.sum()
        for a, y in self._to_coolant:
            g[a, a] += y
        mass = np.flatnonzero(c > 0.0)
        bare = np.flatnonzero(c == 0.0)
        if any(c[h] == 0.0 for h in heated):
            raise InputError("thermal network", "a heated point without heat capacity", "every chip has a capacity")
        if not self._reaches_coolant():
            raise InputError("thermal network", "a node without a way to the coolant", "a path of resistances from every node to the coolant", "join it")
        # points without mass: y_bare = recover @ y_mass, exactly
        recover = np.zeros((n, mass.size))
        recover[mass, np.arange(mass.size)] = 1.0
        g_mass = g[np.ix_(mass, mass)]
        if bare.size:
            part = -np.linalg.solve(g[np.ix_(bare, bare)], g[np.ix_(bare, mass)])
            recover[bare] = part
            g_mass = g_mass + g[np.ix_(mass, bare)] @ part
        return FullNetwork(
            c_j_per_k=c[mass],
            g_w_per_k=0.5 * (g_mass + g_mass.T),
            out_junction=recover[np.asarray(heated)],
            out_case=np.array([w.weight @ recover[w.first : w.first + w.weight.size] if isinstance(w, Spot) else recover[w] for w in watched]),
            out_surface=recover[np.asarray(surfaces, int)],
        )


@dataclass(frozen=True)
class FullNetwork:
    """C dy/dt = -G y + E p, y = T - T_coolant, with n_s nodes and n chips.

    Attributes
    ----------
    c_j_per_k : ndarray, shape (n_s,)
    g_w_per_k : ndarray, shape (n_s, n_s)
        Symmetric, includes the paths to the coolant.
    out_junction, out_case : ndarray, shape (n, n_s)
        Rows that pick junction and case temperatures; the heat of chip i enters
        where row i of ``out_junction`` stands.
    out_surface : ndarray, shape (m, n_s)
        Rows that pick the temperatures of the sink surfaces.
    """

    c_j_per_k: np.ndarray
    g_w_per_k: np.ndarray
    out_junction: np.ndarray
    out_case: np.ndarray
    out_surface: np.ndarray

    @property
    def n_chips(self) -> int:
        return self.out_junction.shape[0]

    def r_th_k_per_w(self) -> np.ndarray:
        """Steady self and mutual resistances, junction over coolant, shape (n, n) [K/W]."""
        return self.out_junction @ np.linalg.solve(self.g_w_per_k, self.out_junction.T)

    def modes(self):
        """Exact real modes.

        Returns
        -------
        lam_per_s : ndarray, shape (n_s,)
            Decay rates, rising.
        junction, case : ndarray, shape (n, n_s)
            Output of each mode; ``junction.T`` is also the heat input.
        coolant : ndarray, shape (n_s,)
            What a unit temperature of all nodes is in modes.
        """
        root = np.sqrt(self.c_j_per_k)
        lam, vec = self.shapes()
        shape = vec / root[:, None]
        return lam, self.out_junction @ shape, self.out_case @ shape, vec.T @ root

    def shapes(self):
        """Decay rates, rising [1/s], and orthonormal shapes times the root of the capacity; shapes (n_s,) and (n_s, n_s)."""
        root = np.sqrt(self.c_j_per_k)
        return np.linalg.eigh(self.g_w_per_k / np.outer(root, root))

    def step_response_k_per_w(self, time_s, chip: int) -> np.ndarray:
        """Junction rises per watt in ``chip`` [K/W], shape (len(time_s), n)."""
        lam, junction, _, _ = self.modes()
        t = np.asarray(time_s, float)[:, None]
        grow = -np.expm1(-t * lam) / lam
        return grow @ (junction * junction[chip]).T
