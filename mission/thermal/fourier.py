"""Chips on a stack of plates: heat conduction in three dimensions, solved exactly.

All plates have the same footprint and insulated sides, the chips are rectangles of even
heat flux on the top face, and the bottom gives its heat to a coolant through one area
resistance. Temperature is then a double cosine series over the footprint; each term
needs only a one-dimensional problem through the depth, solved here in closed form for
any decay rate s (s = 0: steady).

The series is not cut off. The depth solution depends on the term only by p, the square of
its wave number, and is a mixture of Gaussians exp(-p v) with weights m(v) >= 0. For one v
the double series is a product of a series in x and one in y, and both are known to rounding
(few cosines where v is large, few mirror images where it is small). What remains is one
smooth integral over v, done by Gauss panels that double in size; m(v) comes from the
depth solution by a contour integral. :meth:`FourierStack.series_r_th_k_per_w` sums the
plain series instead and says what it leaves out.

The way over time needs no cells either: Z(s) and its slope at real s from zero to
one over the shortest time of interest fix a network of exact modes (see :class:`FourierNetwork`).

Plates of different footprint, and chips whose own body matters beside its footprint, are
not covered: a chip modelled as the first plate spreads heat beyond its edges.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np

from ..checks import require_range
from ..errors import InputError, RangeError, near_match
from .modes import ReducedNetwork, reduce_coupled, unreduced

#: Nodes of the contour integral for m(v); its error falls by 3.9 per node until rounding (about 1e-13).
_CONTOUR_NODES = 24
#: Gauss nodes in each panel of the integral over v.
_PANEL_NODES = 10
#: Shortest time at which a network can be asked to be right [s].
_FASTEST_S = 1e-6
#: Ratios of neighbouring decay rates at which the network is made exact, tried in turn; and how far beyond the shortest time of interest they go.
_RATE_STEPS = ((2.6, 1.0), (2.1, 4.0), (1.7, 16.0))


@dataclass(frozen=True)
class PlateLayer:
    """One plate that covers the whole footprint.

    Attributes
    ----------
    k_w_per_m_k, rho_kg_per_m3, c_j_per_kg_k : float
        Conductivity (the same in all directions), density, specific heat.
    thickness_mm : float
    contact_below_mm2_k_per_w : float
        Area resistance of the joint to the next plate (below the last one: to what cools) [mm2 K/W].
    """

    k_w_per_m_k: float
    rho_kg_per_m3: float
    c_j_per_kg_k: float
    thickness_mm: float
    contact_below_mm2_k_per_w: float = 0.0

    def __post_init__(self):
        for name, unit in (("k_w_per_m_k", "W/(m K)"), ("rho_kg_per_m3", "kg/m3"), ("c_j_per_kg_k", "J/(kg K)"), ("thickness_mm", "mm")):
            require_range(name, getattr(self, name), low=0.0, low_open=True, unit=unit)
        require_range("contact_below_mm2_k_per_w", self.contact_below_mm2_k_per_w, low=0.0, unit="mm2 K/W")


@dataclass(frozen=True)
class Source:
    """A rectangle on the top face that gives off its heat evenly; ``x_mm``, ``y_mm`` are its centre, counted from a corner of the stack."""

    x_mm: float
    y_mm: float
    width_mm: float
    length_mm: float
    name: str = ""

    def __post_init__(self):
        for name in ("x_mm", "y_mm", "width_mm", "length_mm"):
            require_range(name, getattr(self, name), low=0.0, low_open=True, unit="mm")


def plate_layers(layers, materials, *, where: str = "layer") -> tuple[PlateLayer, ...]:
    """Plates from named materials.

    Parameters
    ----------
    layers : sequence
        Objects with ``material`` and ``thickness_mm``, top first; ``contact_below_mm2_k_per_w`` if they have it.
        Their ``width_mm`` must be empty: one footprint holds for all.
    materials : dict of Material

    Returns
    -------
    tuple of PlateLayer

    Raises
    ------
    InputError
        Unknown material; a layer with a footprint of its own.

    Examples
    --------
    >>> from types import SimpleNamespace
    >>> from mission.thermal.layers import shipped_materials
    >>> plate_layers([SimpleNamespace(material="copper", thickness_mm=3.0)], shipped_materials())[0].k_w_per_m_k
    394.0
    """
    out = []
    for number, layer in enumerate(layers, 1):
        found = materials.get(layer.material)
        if found is None:
            raise InputError(f"{where}[{number}].material", f"'{layer.material}'", "one of " + ", ".join(sorted(materials)),
                             near_match(layer.material, materials))
        if getattr(layer, "width_mm", None) is not None:
            raise InputError(f"{where}[{number}].width_mm", f"{layer.width_mm:g} mm", "no footprint of its own; all plates are as large as the stack",
                             "leave width_mm and length_mm out, or use stack_ladder, which takes layers of different size")
        out.append(PlateLayer(found.k_w_per_m_k, found.rho_kg_per_m3, found.c_j_per_kg_k, layer.thickness_mm,
                              getattr(layer, "contact_below_mm2_k_per_w", 0.0)))
    return tuple(out)


class SeriesSum(NamedTuple):
    """Result of the plain double cosine series.

    Attributes
    ----------
    r_th_k_per_w : ndarray, shape (n, n)
    tail_k_per_w : float
        Estimate of the largest error of an entry; infinite after a single doubling.
    modes : tuple of int
        Cosines along x and y.
    """

    r_th_k_per_w: np.ndarray
    tail_k_per_w: float
    modes: tuple[int, int]


class SourceRises(NamedTuple):
    """Rises over the coolant of every source: mean and largest [K], and where the largest is; all of shape (n,)."""

    mean_k: np.ndarray
    max_k: np.ndarray
    x_mm: np.ndarray
    y_mm: np.ndarray


@dataclass(frozen=True)
class FourierStack:
    """Plates, sources on them, a coolant under them.

    Attributes
    ----------
    width_mm, length_mm : float
        Footprint along x and y, the same for all plates; the sides are insulated.
    layers : tuple of PlateLayer
        Heated plate first.
    sources : tuple of Source
    r_area_mm2_k_per_w : float
        From the bottom face to the coolant, 1e6 over the heat transfer coefficient in W/(m2 K) [mm2 K/W].
    accuracy : int
        1, or 2 for twice the panels and more contour nodes.

    Notes
    -----
    Relative error of resistances about 1e-9 (1e-6 for a point nearer to an edge of a source than a hundredth of the first plate's
    thickness); ``accuracy=2`` shows it. Material data do not change with temperature.

    References
    ----------
    .. [1] H. S. Carslaw, J. C. Jaeger, "Conduction of Heat in Solids", 2nd ed., Oxford 1959 (product of heat kernels, mirror images).
    .. [2] Y. S. Muzychka, J. R. Culham, M. M. Yovanovich, J. Electron. Packag. 125 (2003) 178-185 (double cosine series of a flux channel).
    .. [3] L. N. Trefethen, J. A. C. Weideman, T. Schmelzer, BIT 46 (2006) 653-670 (the contour, from memory; tested against exact inverses).

    Examples
    --------
    >>> plate = PlateLayer(200.0, 2700.0, 900.0, 1.3)
    >>> stack = FourierStack(100.0, 100.0, (plate,), (Source(50.0, 50.0, 25.0, 25.0),), 1.0e4)
    >>> float(stack.r_th_k_per_w()[0, 0].round(5))
    1.52698
    """

    width_mm: float
    length_mm: float
    layers: tuple[PlateLayer, ...]
    sources: tuple[Source, ...]
    r_area_mm2_k_per_w: float
    accuracy: int = 1

    def __post_init__(self):
        for name, unit in (("width_mm", "mm"), ("length_mm", "mm"), ("r_area_mm2_k_per_w", "mm2 K/W")):
            require_range(name, getattr(self, name), low=0.0, low_open=True, unit=unit)
        object.__setattr__(self, "layers", tuple(self.layers))
        object.__setattr__(self, "sources", tuple(self.sources))
        if not self.layers:
            raise InputError("layers", "none", "at least one plate")
        if not self.sources:
            raise InputError("sources", "none", "at least one source")
        slack = 1e-9 * max(self.width_mm, self.length_mm)
        for number, s in enumerate(self.sources, 1):
            for low, high, side, name in ((s.x_mm - s.width_mm / 2, s.x_mm + s.width_mm / 2, self.width_mm, "x_mm"),
                                          (s.y_mm - s.length_mm / 2, s.y_mm + s.length_mm / 2, self.length_mm, "y_mm")):
                if low < -slack or high > side + slack:
                    raise RangeError(f"sources[{number}].{name}", f"a source from {low:g} to {high:g} mm", f"0 to {side:g} mm, the footprint",
                                     "x_mm and y_mm are the centre, counted from a corner of the stack")
            for other, o in enumerate(self.sources[: number - 1], 1):
                if (2 * abs(s.x_mm - o.x_mm) < s.width_mm + o.width_mm - slack) and (2 * abs(s.y_mm - o.y_mm) < s.length_mm + o.length_mm - slack):
                    raise InputError(f"sources[{number}]", f"a source that overlaps source {other}", "sources side by side", "check the centres")

    # steady -------------------------------------------------------------------------------------------------------------------

    @property
    def n_sources(self) -> int:
        return len(self.sources)

    def r_th_k_per_w(self, at: str = "mean") -> np.ndarray:
        """Steady self and mutual resistances over the coolant.

        Parameters
        ----------
        at : {"mean", "centre", "hottest", "case"}
            Where the temperature of source i is taken: mean over it, at its centre, at the point that is hottest when it is heated
            alone, or mean over its shadow on the bottom face.

        Returns
        -------
        ndarray, shape (n, n)
            Rise at i per watt in j [K/W]; symmetric for "mean".
        """
        return self._transfer(0.0, at)

    def rise_k(self, power_w, x_mm, y_mm, *, layer: int = 1, depth_mm: float = 0.0) -> np.ndarray:
        """Steady rise over the coolant on a grid of points.

        Parameters
        ----------
        power_w : array_like, shape (n,)
            Heat of every source [W].
        x_mm, y_mm : array_like, shapes (n_x,) and (n_y,)
            Counted from a corner of the stack.
        layer : int
            Plate, 1 is the heated one, -1 the last.
        depth_mm : float
            Below the upper face of that plate; 0 to its thickness.

        Returns
        -------
        ndarray, shape (n_y, n_x)
            [K]
        """
        power = self._power(power_w)
        x = require_range("x_mm", np.atleast_1d(x_mm), low=0.0, high=self.width_mm, unit="mm") * 1e-3
        y = require_range("y_mm", np.atleast_1d(y_mm), low=0.0, high=self.length_mm, unit="mm") * 1e-3
        number = layer - 1 if layer > 0 else len(self.layers) + layer
        if not 0 <= number < len(self.layers) or layer == 0:
            raise RangeError("layer", f"{layer}", f"1 to {len(self.layers)}, or -1 for the last")
        require_range("depth_mm", depth_mm, low=0.0, high=self.layers[number].thickness_mm, unit="mm")
        return self._points(power, x, y, (number, depth_mm * 1e-3))

    def temperature_map_c(self, power_w, coolant_c: float, *, n_x: int = 121, n_y: int = 61, layer: int = -1, depth_mm: float | None = None):
        """Map of the temperature of one plane; default: the bottom face of the last plate.

        Returns
        -------
        x_mm, y_mm : ndarray, shapes (n_x,) and (n_y,)
        t_c : ndarray, shape (n_y, n_x)
        """
        x, y = np.linspace(0.0, self.width_mm, n_x), np.linspace(0.0, self.length_mm, n_y)
        if depth_mm is None:
            depth_mm = self.layers[layer - 1 if layer > 0 else layer].thickness_mm
        return x, y, coolant_c + self.rise_k(power_w, x, y, layer=layer, depth_mm=depth_mm)

    def source_rises_k(self, power_w) -> SourceRises:
        """Mean and largest rise over the coolant of every source, all heated together.

        The largest is sought on a grid of 9 x 9 points, then on two finer ones about the best point;
        what that misses is below 1e-4 of the difference between largest and mean.
        """
        power = self._power(power_w)
        found = np.array([self._hottest(power, i) for i in range(self.n_sources)])
        return SourceRises(self.r_th_k_per_w() @ power, found[:, 0], found[:, 1] * 1e3, found[:, 2] * 1e3)

    def series_r_th_k_per_w(self, *, tolerance: float = 1e-4, modes_max: int = 4096) -> SeriesSum:
        """Steady resistance matrix by the plain double cosine series, for comparison.

        Cosines are doubled until the tail estimate is below ``tolerance`` times the largest self resistance. Terms fall at least with the square
        of the wave number, so the tail is at most about what the last doubling brought; half of what the one before brought guards against luck.

        Parameters
        ----------
        tolerance : float
        modes_max : int
            Most cosines along one side.

        Returns
        -------
        SeriesSum
            If ``modes_max`` came first, ``tail_k_per_w`` says what was reached.
        """
        side = np.array([self.width_mm, self.length_mm]) * 1e-3
        count = np.maximum(8, np.round(16 * side / side.min())).astype(int)
        known, before = None, np.inf
        while True:
            found = self._series(count, side)
            if known is not None:
                brought = float(np.abs(found - known).max())
                tail, before = max(brought, 0.5 * before), brought
                if tail <= tolerance * found.diagonal().max() or 2 * count.max() > modes_max:
                    return SeriesSum(found, tail, (int(count[0]), int(count[1])))
            known, count = found, 2 * count

    def _series(self, count, side):
        means = []
        for axis in (0, 1):
            low, high = self._edges[axis].T
            wave = np.pi * np.arange(count[axis]) / side[axis]
            half, centre = 0.5 * (high - low), 0.5 * (high + low)
            weight = np.where(np.arange(count[axis]) == 0, 1.0, 2.0) / side[axis]
            means.append((wave, np.sqrt(weight)[:, None] * np.cos(np.outer(wave, centre)) * np.sinc(np.outer(wave, half) / np.pi)))
        (wave_x, mean_x), (wave_y, mean_y) = means
        p = wave_x[:, None] ** 2 + wave_y**2
        g = np.empty(p.shape)
        p[0, 0] = p.ravel()[1:].min()
        g[:] = self._depth.surface(p, 0.0)[0]
        g[0, 0] = self._depth.uniform(0.0).top
        n = self.n_sources
        pair_x = (mean_x[:, :, None] * mean_x[:, None, :]).reshape(count[0], n * n)
        pair_y = (mean_y[:, :, None] * mean_y[:, None, :]).reshape(count[1], n * n)
        return ((g @ pair_y) * pair_x).sum(axis=0).reshape(n, n)

    # over time ----------------------------------------------------------------------------------------------------------------

    def step_response_k_per_w(self, time_s, *, at: str = "mean") -> np.ndarray:
        """Rise at source i, ``time_s`` after 1 W was switched on in source j.

        Parameters
        ----------
        time_s : array_like, shape (t,)
            Right from 1e-5 s on; for earlier times make a :meth:`network` with a smaller ``fastest_s``.
        at : {"mean", "centre", "case"}
            As for :meth:`r_th_k_per_w`.

        Returns
        -------
        ndarray, shape (t, n, n)
            [K/W]
        """
        return self._network.step_response_k_per_w(time_s, at=at)

    def network(self, *, fastest_s: float = 1e-5, case_layer: int = -1, tolerance: float = 2e-3) -> FourierNetwork:
        """The stack as modes, for the march: see :meth:`FourierNetwork.reduced`.

        Parameters
        ----------
        fastest_s : float
            Shortest time at which the response must be right [s], 1e-6 or more.
        case_layer : int
            Plate on whose lower face the case points lie (1 the heated one, -1 the last).
        tolerance : float
            Rates are added until the stated error is below this share of the steady self resistance, at most twice; ``error`` says what was reached.
        """
        require_range("fastest_s", fastest_s, low=_FASTEST_S, unit="s")
        require_range("tolerance", tolerance, low=0.0, low_open=True)
        number = case_layer - 1 if case_layer > 0 else len(self.layers) + case_layer
        if not 0 <= number < len(self.layers) or case_layer == 0:
            raise RangeError("case_layer", f"{case_layer}", f"1 to {len(self.layers)}, or -1 for the last")
        for ratio, beyond in _RATE_STEPS:
            found = _network_of(self, fastest_s, number, ratio, beyond)
            if found.error <= tolerance:
                break
        return found

    @cached_property
    def _network(self) -> FourierNetwork:
        return self.network()

    # inside -------------------------------------------------------------------------------------------------------------------

    def _power(self, power_w):
        power = require_range("power_w", power_w)
        if power.shape != (self.n_sources,):
            raise RangeError("power_w", f"shape {power.shape}", f"({self.n_sources},), one value per source")
        return power

    @cached_property
    def _depth(self) -> _Depth:
        below = np.array([p.contact_below_mm2_k_per_w for p in self.layers], float)
        below[-1] += self.r_area_mm2_k_per_w
        return _Depth(
            np.array([p.k_w_per_m_k for p in self.layers]), np.array([p.rho_kg_per_m3 * p.c_j_per_kg_k for p in self.layers]),
            np.array([p.thickness_mm for p in self.layers]) * 1e-3,
            below * 1e-6, _CONTOUR_NODES + 6 * (self.accuracy - 1))

    @cached_property
    def _sides(self):
        return self.width_mm * 1e-3, self.length_mm * 1e-3

    @cached_property
    def _edges(self):
        """Low and high edge of every source [m], along x and y; shapes (n, 2)."""
        x = np.array([[s.x_mm - s.width_mm / 2, s.x_mm + s.width_mm / 2] for s in self.sources]) * 1e-3
        y = np.array([[s.y_mm - s.length_mm / 2, s.y_mm + s.length_mm / 2] for s in self.sources]) * 1e-3
        return x, y

    @cached_property
    def _rule(self):
        """Nodes u = sqrt(v) [m] and weights of the integral over v, shape (q,)."""
        depth = self._depth
        # down to a small part of the first plate, of a source, and of the way that heat goes in the shortest time that a network may ask for
        way = 0.05 * np.sqrt(depth.k[0] / depth.heat[0] * _FASTEST_S)
        first = min(way, depth.thick[0] / 64.0, *(np.diff(e).min() / 64.0 for e in self._edges))
        last = 6.5 / np.pi * max(self._sides)
        panels = max(2, int(np.ceil(np.log2(last / first)))) * self.accuracy
        borders = np.concatenate([[0.0], np.geomspace(first, last, panels + 1)])
        node, weight = np.polynomial.legendre.leggauss(_PANEL_NODES)
        half = 0.5 * np.diff(borders)[:, None]
        u = (0.5 * (borders[1:] + borders[:-1])[:, None] + half * node).ravel()
        return u, 2.0 * u * (half * weight).ravel()

    @cached_property
    def _mean_weights(self):
        """Weights over v of mean i per watt in j, the even part taken off; shape (q, n, n) [1/m2 and the rule's weight]."""
        u, weight = self._rule
        return weight[:, None, None] * (self._product(u, self._edges) - 1.0 / np.prod(self._sides))

    def _product(self, u, places):
        (x, y), (width, length) = places, self._sides
        return _lateral(u, width, x, self._edges[0]) * _lateral(u, length, y, self._edges[1])

    @cached_property
    def _weights_at(self):
        return {"mean": self._mean_weights, "case": self._mean_weights}

    def _weights(self, at):
        known = self._weights_at
        if at not in known:
            if at == "centre":
                places = [np.repeat(e.mean(axis=1)[:, None], 2, axis=1) for e in self._edges]
            elif at == "hottest":
                spots = np.array([self._hottest(np.eye(self.n_sources)[i], i)[1:] for i in range(self.n_sources)])
                places = [np.repeat(spots[:, [axis]], 2, axis=1) for axis in (0, 1)]
            else:
                raise InputError("at", f"'{at}'", "'mean', 'centre', 'hottest' or 'case'", near_match(at, ("mean", "centre", "hottest", "case")))
            u, weight = self._rule
            known[at] = weight[:, None, None] * (self._product(u, places) - 1.0 / np.prod(self._sides))
        return known[at]

    def _transfer(self, s, at):
        """Z(s) from every source to ``at``, shape (n, n)."""
        weights = self._weights(at)
        u = self._rule[0]
        if at == "case":
            place = (len(self.layers) - 1, None)
            mixture, even = self._depth.mixture_at(u**2, s, place), self._depth.uniform(s, place).place
        else:
            mixture, even = self._depth.mixture(u**2, s)[0], self._depth.uniform(s).top
        return even / np.prod(self._sides) + np.tensordot(mixture, weights, 1)

    def _points(self, power, x, y, place):
        """Rises on a grid, shape (len(y), len(x)) [K]."""
        u, weight = self._rule
        width, length = self._sides
        if place == (0, 0.0):
            mixture, even = self._depth.mixture(u**2, 0.0)[0], self._depth.uniform(0.0).top
        else:
            mixture, even = self._depth.mixture_at(u**2, 0.0, place), self._depth.uniform(0.0, place).place
        along_x = _lateral(u, width, np.column_stack([x, x]), self._edges[0])  # (q, n_x, n)
        along_y = _lateral(u, length, np.column_stack([y, y]), self._edges[1])
        scale = (weight * mixture)[:, None] * power
        grid = (along_y * scale[:, None, :]).transpose(1, 0, 2).reshape(y.size, -1) @ along_x.transpose(0, 2, 1).reshape(-1, x.size)
        return grid + (even - (weight * mixture).sum()) * power.sum() / (width * length)

    def _hottest(self, power, i):
        """Largest rise over source i [K] and where it is [m]."""
        box = [list(self._edges[axis][i]) for axis in (0, 1)]
        for _ in range(4):
            x, y = np.linspace(*box[0], 9), np.linspace(*box[1], 9)
            rise = self._points(power, x, y, (0, 0.0))
            row, column = np.unravel_index(rise.argmax(), rise.shape)
            best = rise[row, column], x[column], y[row]
            box = [[x[max(column - 1, 0)], x[min(column + 1, 8)]], [y[max(row - 1, 0)], y[min(row + 1, 8)]]]
        return best


# through the depth ------------------------------------------------------------------------------------------------------------


class _Uniform(NamedTuple):
    """Even heat on the whole top face, per W/m2: rise of top and chosen plane [K m2/W], share of the heat that leaves below."""

    top: complex
    place: complex
    out: complex


@dataclass(frozen=True)
class _Depth:
    """One-dimensional problem (k T')' = (p k + s rho c) T through all plates.

    ``k``, ``heat`` (rho c), ``thick`` [m] and ``below`` (area resistance under each plate, the last one to the coolant [m2 K/W]) have
    shape (layers,). Everything is written with exp(-2 g t), g = sqrt(p + s rho c/k), so nothing overflows.
    """

    k: np.ndarray
    heat: np.ndarray
    thick: np.ndarray
    below: np.ndarray
    contour_nodes: int

    def surface(self, p, s):
        """Rise of the top per flux into it [m2 K/W], and its slope over s; ``p`` of any shape, not 0 where s = 0."""
        z, dz = None, 0.0
        for k, heat, t, r in zip(self.k[::-1], self.heat[::-1], self.thick[::-1], self.below[::-1]):
            z = r if z is None else z + r
            g = np.sqrt(p + s * heat / k)
            dg = 0.5 * heat / k / g
            own = 1.0 / (k * g)
            e = np.exp(-2.0 * t * g)
            de = -2.0 * t * dg * e
            down, up = 1.0 - e, 1.0 + e
            top, bottom = z * up + own * down, own * up + z * down
            dtop = dz * up + z * de + own * (-dg / g * down - de)
            dbottom = own * (-dg / g * up + de) + dz * down - z * de
            z, dz = own * top / bottom, own * (dtop - top * dbottom / bottom - dg / g * top) / bottom
        return z, dz

    def at(self, p, s, place):
        """Rise of a plane per flux into the top [m2 K/W]; ``place`` is (plate from 0, depth in it [m] or None for its lower face)."""
        number, depth = place
        depth = self.thick[number] if depth is None else depth
        z, seen = None, {}
        for n in range(self.k.size - 1, -1, -1):
            z = self.below[n] if z is None else z + self.below[n]
            g = np.sqrt(p + s * self.heat[n] / self.k[n])
            own = 1.0 / (self.k[n] * g)
            e = np.exp(-2.0 * self.thick[n] * g)
            seen[n] = g, own, z, 1.0 + e + z / own * (1.0 - e)
            z = own * (z * (1.0 + e) + own * (1.0 - e)) / (own * (1.0 + e) + z * (1.0 - e))
        flux = 1.0
        for n in range(number):
            g, _, _, scale = seen[n]
            flux = flux * 2.0 * np.exp(-g * self.thick[n]) / scale
        g, own, z, scale = seen[number]
        e = np.exp(-2.0 * g * (self.thick[number] - depth))
        return flux * np.exp(-g * depth) * (z * (1.0 + e) + own * (1.0 - e)) / scale

    def _contour(self, v, s, function):
        """Weights m(v) of exp(-p v) in ``function(p)``: inverse Laplace transform over p, all singularities at p <= -floor."""
        floor = s * (self.heat / self.k).min()
        n = self.contour_nodes
        angle = np.pi * np.arange(1, n, 2) / n
        z = n * (0.5017 * angle / np.tan(0.6407 * angle) - 0.6122 + 0.2645j * angle)
        dz = n * (0.5017 / np.tan(0.6407 * angle) - 0.5017 * 0.6407 * angle / np.sin(0.6407 * angle) ** 2 + 0.2645j)
        weight = 2.0 / n * np.exp(z) * dz
        scale = np.exp(-floor * v) / v
        return [scale * (f @ weight).imag for f in function(z / v[:, None] - floor)]

    def mixture(self, v, s):
        """m(v) of the top face and its slope over s, shapes (q,)."""
        return self._contour(v, s, lambda p: self.surface(p, s))

    def mixture_at(self, v, s, place):
        """m(v) of a plane."""
        return self._contour(v, s, lambda p: (self.at(p, s, place),))[0]

    def mixture_of_products(self, v, rates, place):
        """m(v) of the product of what a plane does at two rates; a dictionary by pairs of their numbers, first not above second."""
        pairs = [(a, b) for a in range(len(rates)) for b in range(a, len(rates))]

        def products(p):
            rise = [self.at(p, s, place) for s in rates]
            return (rise[a] * rise[b] for a, b in pairs)

        return dict(zip(pairs, self._contour(v, 0.0, products)))

    def uniform(self, s, place=(0, 0.0)) -> _Uniform:
        """The term p = 0."""
        number, depth = place
        depth = self.thick[number] if depth is None else depth
        if s == 0.0:
            drops = self.thick / self.k + self.below
            left = drops[number:].sum() - depth / self.k[number]
            return _Uniform(drops.sum(), left, 1.0)
        out = self.at(0.0, s, (self.k.size - 1, None)) / self.below[-1]
        return _Uniform(self.surface(0.0, s)[0], self.at(0.0, s, place), out)

    def from_below(self, s, place):
        """Even heat into the lower face of the stack, per W/m2: rise there and in a plane [m2 K/W]."""
        number, depth = place
        depth = self.thick[number] if depth is None else depth
        if s == 0.0:
            return self.below[-1], self.below[-1]
        y, share = 0.0, None  # conductance of what lies above, per area; rise of the plane over the rise of the present lower face
        for n in range(self.k.size):
            g = np.sqrt(s * self.heat[n] / self.k[n])
            for t in ((depth, self.thick[n] - depth) if n == number else (self.thick[n],)):
                own = 1.0 / (self.k[n] * g)
                e = np.exp(-2.0 * g * t)
                scale = 1.0 + e + y * own * (1.0 - e)
                if share is not None:
                    share = share * 2.0 * np.exp(-g * t) / scale
                y = (y * (1.0 + e) + (1.0 - e) / own) / scale
                if n == number and share is None:
                    share = 1.0
            if n < self.k.size - 1:
                if share is not None:
                    share = share / (1.0 + self.below[n] * y)
                y = y / (1.0 + self.below[n] * y)
        z = 1.0 / (y + 1.0 / self.below[-1])
        return z, z * share


def _lateral(u, side, a, b):
    """Mean over b of the heat kernel of a line of length ``side`` with insulated ends, taken as mean over a.

    Parameters
    ----------
    u : ndarray, shape (q,)
        Root of the kernel's age [m].
    side : float
    a, b : ndarray, shapes (n_a, 2) and (n_b, 2)
        Low and high ends [m]; where both ends of all a are equal, the kernel is taken at points.

    Returns
    -------
    ndarray, shape (q, n_a, n_b)
        [1/m]
    """
    from scipy.special import erf

    points = bool((a[:, 0] == a[:, 1]).all())
    out = np.empty((u.size, len(a), len(b)))
    far = u > 0.1 * side
    if far.any():
        wave = np.pi * np.arange(22) / side
        means = [np.cos(np.outer(wave, e.mean(axis=1))) * np.sinc(np.outer(wave, 0.5 * np.diff(e, axis=1)[:, 0]) / np.pi) for e in (a, b)]
        decay = np.exp(-np.outer(u[far], wave) ** 2) * (np.where(wave == 0.0, 1.0, 2.0) / side)
        out[far] = (decay @ (means[0][:, :, None] * means[1][:, None, :]).reshape(wave.size, -1)).reshape(-1, len(a), len(b))
    near = ~far
    w = u[near][:, None, None]
    total = np.zeros((w.size, len(a), len(b)))
    low_a, high_a = a[:, 0][:, None], a[:, 1][:, None]
    for turn in (-1, 0, 1):
        for low, high in ((2 * turn * side + b[:, 0], 2 * turn * side + b[:, 1]), (2 * turn * side - b[:, 1], 2 * turn * side - b[:, 0])):
            if points:
                total += 0.5 * (erf((low_a - low) / (2.0 * w)) - erf((low_a - high) / (2.0 * w)))
            else:
                for d, sign in ((high_a - low, 1.0), (high_a - high, -1.0), (low_a - low, -1.0), (low_a - high, 1.0)):
                    d = d[None]
                    total += sign * (0.5 * d * erf(d / (2.0 * w)) + w / np.sqrt(np.pi) * np.exp(-((d / (2.0 * w)) ** 2)))
    out[near] = total / (b[:, 1] - b[:, 0]) if points else total / ((b[:, 1] - b[:, 0]) * (high_a - low_a))
    return out


# network ----------------------------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class FourierNetwork:
    """The stack as decaying modes; takes the place of a :class:`mission.thermal.FullNetwork`.

    The temperature field is written in the shapes that the stack takes when heat enters as exp(s t), at a row of rates s from zero up,
    for each source and for even heat from the coolant's side. Heat capacity and conductance between two such shapes are
    differences of Z(s), so that no cells and no cut series are needed; Z(s) and its slope are met at every s, the steady state
    (s = 0) and an even temperature of the whole stack exactly. Eigenvalues of the pair of matrices are the modes.

    Attributes
    ----------
    lam_per_s : ndarray, shape (m,)
        Decay rates, rising [1/s].
    junction, case, centre : ndarray, shape (n, m)
        Output of each mode as mean over a source, mean over its shadow on the case plane, at its centre; ``junction.T`` is also the heat input.
    coolant : ndarray, shape (m,)
        What a unit temperature of the whole stack is in modes.
    error : float
        Largest difference of a mean step response, from ``fastest_s`` on, over the steady self resistance, from a network with only
        every second rate; the error of this one is smaller (tested).
    under : ndarray, shape (m, m)
        Mean of the product of two modes over the lower face of the stack.
    r_under_k_per_w : float
        From that whole face to the coolant.
    """

    lam_per_s: np.ndarray
    junction: np.ndarray
    case: np.ndarray
    centre: np.ndarray
    coolant: np.ndarray
    error: float
    under: np.ndarray
    r_under_k_per_w: float

    @property
    def n_chips(self) -> int:
        return self.junction.shape[0]

    def conductance_w_per_k(self, r_under_k_per_w: float) -> np.ndarray:
        """How fast modes decay into each other with another resistance under the stack, shape (m, m) [1/s]; diagonal with its own.

        The shapes of the modes stay, so this is exact only for the stack's own resistance; energy closes in any case. Measured on a copper plate of 3 mm with
        twelve chips: resistances off by 0.1 % of the steady self resistance at 0.7 to 1.3 times its own, 0.5 % at 2 times, 1.7 % at 3 times.
        """
        require_range("r_under_k_per_w", r_under_k_per_w, low=0.0, low_open=True, unit="K/W")
        return np.diag(self.lam_per_s) + (1.0 / r_under_k_per_w - 1.0 / self.r_under_k_per_w) * self.under

    def modes(self):
        """Decay rates, junction and case outputs, even temperature; as :meth:`mission.thermal.FullNetwork.modes`."""
        return self.lam_per_s, self.junction, self.case, self.coolant

    def r_th_k_per_w(self) -> np.ndarray:
        """Steady self and mutual resistances over the coolant, shape (n, n) [K/W]."""
        return (self.junction / self.lam_per_s) @ self.junction.T

    def step_response_k_per_w(self, time_s, *, at: str = "mean") -> np.ndarray:
        """Rise at i after 1 W was switched on in j, shape (t, n, n) [K/W]."""
        time = require_range("time_s", np.atleast_1d(time_s), low=0.0, unit="s")
        rows = {"mean": self.junction, "centre": self.centre, "case": self.case}
        if at not in rows:
            raise InputError("at", f"'{at}'", "'mean', 'centre' or 'case'", near_match(at, rows))
        return _steps(time, self.lam_per_s, rows[at], self.junction)

    def reduced(self, *, relative_tolerance: float = 0.01) -> ReducedNetwork:
        """Fewer modes for the march, see :func:`mission.thermal.modes.reduce_coupled`.

        Parameters
        ----------
        relative_tolerance : float
            Wanted bound, as a share of the steady rise with all chips heated alike. A bound on what any course of powers can do is
            far above the error of a step. Case points (steady) and the answer to a coolant step may miss by five times as much.

        Returns
        -------
        ReducedNetwork
            All modes, unreduced, where as many shared modes as the march has room for do not meet the tolerance.
        """
        found = reduce_coupled(self, relative_tolerance=relative_tolerance)
        return found if found.relative_bound <= relative_tolerance else unreduced(self)


def _steps(time, lam, rows, junction):
    n, m = junction.shape
    grow = -np.expm1(-np.outer(time, lam)) / lam
    pairs = (rows[:, None, :] * junction[None, :, :]).reshape(n * n, m)
    return (grow @ pairs.T).reshape(time.size, n, n)


def _network_of(stack, fastest_s, case, ratio, beyond):
    depth, area, n = stack._depth, np.prod(stack._sides), stack.n_sources
    place, bottom = (case, None), (depth.k.size - 1, None)
    # slowest: the whole stack against the coolant; its mean delay from above is close to it
    tiny = 1e-20  # slopes of the even terms by a step into the complex plane, which loses no digit
    delay = float(-_slopes_at_rest(depth)[0] / depth.uniform(0.0).top)
    low, high = 0.3 / delay, max(beyond / fastest_s, 3.0 / delay)
    count = int(np.ceil(np.log(high / low) / np.log(ratio))) + 1
    rates = np.concatenate([[0.0], np.geomspace(low, high, count + (count % 2 == 0))])
    u = stack._rule[0]
    mean, centre = stack._weights("mean"), stack._weights("centre")
    z, slope, z_case, z_centre, z_under = [], [], [], [], []
    for s in rates:
        top, dtop = depth.mixture(u**2, s)
        full, dfull = np.zeros((n + 1, n + 1)), np.zeros((n + 1, n + 1))
        at_case, at_centre = np.zeros((n, n + 1)), np.zeros((n, n + 1))
        even = depth.uniform(s, place)
        below, below_case = depth.from_below(s, place)
        full[:n, :n] = even.top / area + np.tensordot(top, mean, 1)
        full[n, :n] = full[:n, n] = depth.below[-1] * even.out / area
        full[n, n] = below / area
        at_case[:, :n] = even.place / area + np.tensordot(depth.mixture_at(u**2, s, place), mean, 1)
        at_case[:, n] = below_case / area
        at_centre[:, :n] = even.top / area + np.tensordot(top, centre, 1)
        at_centre[:, n] = full[0, n]
        if s > 0.0:
            step = depth.uniform(s + 1j * tiny * s, place)
            d_top, d_out = step.top.imag / (tiny * s), step.out.imag / (tiny * s)
            d_below = depth.from_below(s + 1j * tiny * s, place)[0].imag / (tiny * s)
        else:
            d_top, d_out, d_below = _slopes_at_rest(depth)
        dfull[:n, :n] = d_top / area + np.tensordot(dtop, mean, 1)
        dfull[n, :n] = dfull[:n, n] = depth.below[-1] * d_out / area
        dfull[n, n] = d_below / area
        z_under.append(np.append(np.full(n, depth.uniform(s, bottom).place), below))
        for store, value in ((z, full), (slope, dfull), (z_case, at_case), (z_centre, at_centre)):
            store.append(value)
    parts = rates, np.array(z), np.array(slope), np.array(z_case), np.array(z_centre)
    *every, shape = _galerkin(*parts)
    half = _galerkin(*(p[np.r_[0, 1 : rates.size : 2]] for p in parts))
    time = np.geomspace(fastest_s, 20.0 * delay, 60)
    gap = _steps(time, every[0], every[1], every[1]) - _steps(time, half[0], half[1], half[1])
    # products of two shapes on the lower face; every term's is an analytic function of p, as that of one shape
    even = np.array(z_under) / area  # (rates, ports)
    under = even[:, :, None, None] * even
    pairs = depth.mixture_of_products(u**2, rates, bottom)
    for (a, b), mixture in pairs.items():
        under[a, :n, b, :n] += np.tensordot(mixture, mean, 1) / area
        under[b, :n, a, :n] = under[a, :n, b, :n].T
    size = rates.size * (n + 1)
    return FourierNetwork(*every, float(np.abs(gap).max() / z[0][:n, :n].diagonal().min()), shape.T @ under.reshape(size, size) @ shape, depth.below[-1] / area)


def _slopes_at_rest(depth):
    """Slopes at s = 0 of the even terms: rise of the top, share of heat that leaves, rise of the lower face."""
    bottom = depth.below + np.append(np.cumsum((depth.thick / depth.k + depth.below)[:0:-1])[::-1], 0.0)
    top = bottom + depth.thick / depth.k
    load, r = depth.heat * depth.thick, depth.below[-1]
    return -(load * (top**2 + top * bottom + bottom**2) / 3.0).sum(), -(load * (top + bottom) / 2.0).sum(), -load.sum() * r**2


def _galerkin(rates, z, slope, z_case, z_centre):
    """Modes from Z(s) and its slope at real rates.

    Between the shapes of rates s and r: capacity (Z(s) - Z(r))/(r - s), conductance (r Z(r) - s Z(s))/(r - s), so both matrices come from Z alone.
    The even temperature, which is the shape of heat from below at rate 0, is kept as it is, so that energy closes to rounding. Other shapes that
    add nothing (their conductance is below 1e-11 of what it was before the others were taken off) are left out.
    """
    count, ports = z.shape[0], z.shape[1]
    n = ports - 1
    gap = rates[None, :] - rates[:, None]
    safe = np.where(gap == 0.0, 1.0, gap)[:, :, None, None]
    same = (gap == 0.0)[:, :, None, None]
    capacity = np.where(same, -slope[:, None], (z[:, None] - z[None, :]) / safe)
    flow = rates[:, None, None] * z
    conductance = np.where(same, (z + rates[:, None, None] * slope)[:, None], (flow[None, :] - flow[:, None]) / safe)
    size = count * ports
    capacity, conductance = (m.transpose(0, 2, 1, 3).reshape(size, size) for m in (capacity, conductance))
    scale = 1.0 / np.sqrt(conductance.diagonal())
    conductance = conductance * np.outer(scale, scale)
    even = conductance[n].copy()  # its part in every shape
    conductance = conductance - np.outer(even, even)
    weight, vector = np.linalg.eigh(0.5 * (conductance + conductance.T))
    keep = weight > 1e-11 * weight[-1]
    rest = vector[:, keep] / np.sqrt(weight[keep])
    rest[n] -= even @ rest
    basis = scale[:, None] * np.column_stack([np.eye(size)[n], rest])
    tau = basis.T @ capacity @ basis
    tau, turn = np.linalg.eigh(0.5 * (tau + tau.T))
    tau, turn = np.maximum(tau, 1e-3 / rates[-1])[::-1], turn[:, ::-1]
    shape = basis @ turn / np.sqrt(tau)
    junction, case, centre = (m.transpose(1, 0, 2).reshape(-1, size)[:n] @ shape for m in (z, z_case, z_centre))
    # the even shape is a whole at z[0, n, n] = 1/scale[n]**2
    return 1.0 / tau, junction, case, centre, scale[n] * turn[0] * np.sqrt(tau), shape
