"""Layer stacks: from thickness, footprint and material to a ladder.

Heat goes straight down and widens at an angle per layer. Each layer is cut
into cells; capacities sit on the cell borders (half of each neighbour), so
that the heated face is a node of its own.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np
from pydantic import Field, model_validator

from ..errors import InputError, RangeError, near_match
from ..tomlfile import FileModel, read_model
from .networks import CauerLadder

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(16)


class ConductivityLaw(FileModel):
    """Conductivity over temperature: k (T_ref/T)^exponent with T in kelvin, where k is that of the material.

    ``t_min_c`` and ``t_max_c`` end the range in which the law was tested; beyond it nothing is reckoned.
    """

    t_ref_c: float = Field(gt=-273.15)
    exponent: float = Field(ge=-3, le=3)
    t_min_c: float = Field(ge=-200)
    t_max_c: float = Field(le=1000)
    source: str
    page_or_clause: str

    @model_validator(mode="after")
    def _sensible(self):
        if not self.t_min_c <= self.t_ref_c <= self.t_max_c:
            raise RangeError("t_ref_c", f"{self.t_ref_c:g} degC", f"{self.t_min_c:g} to {self.t_max_c:g} degC, the tested range", "correct one of the three")
        return self


class Material(FileModel):
    """Thermal data of one material; ``k_over_t`` says how the conductivity changes, where that is known."""

    k_w_per_m_k: float = Field(gt=0)
    rho_kg_per_m3: float = Field(gt=0)
    c_j_per_kg_k: float = Field(gt=0)
    source: str
    page_or_clause: str
    tested_range: str
    k_over_t: ConductivityLaw | None = None

    def at(self, t_c: float) -> Material:
        """The material with its conductivity at ``t_c`` [degC]; itself where no law is known.

        Raises
        ------
        RangeError
            A temperature outside the tested range of the law.

        Notes
        -----
        One constant stands for a conductivity that changes through the layer. With a law of exponent n, taken at the mean of the
        two faces (T in kelvin), the rise across a slab comes out too large by n (n + 1)/24 (rise/T)^2: silicon (n = 1.3) with
        40 K across at a mean of 125 degC by 0.13 %, with 120 K by 1.15 % (exact: the transform of G. Kirchhoff, in H. S. Carslaw and
        J. C. Jaeger 1959, ch. 1). Taken d kelvin too cold it comes out too small by n d/T: with 20 K by 6.5 %.

        Examples
        --------
        >>> round(shipped_materials()["silicon"].at(125.0).k_w_per_m_k, 1)
        102.4
        >>> shipped_materials()["alsic"].at(125.0).k_w_per_m_k
        175.0
        """
        law = self.k_over_t
        if law is None:
            return self
        if not law.t_min_c <= t_c <= law.t_max_c:
            raise RangeError("conductivity", f"{t_c:g} degC", f"{law.t_min_c:g} to {law.t_max_c:g} degC, where its law was tested",
                             "choose a temperature inside, or give the material a constant of your own")
        k = self.k_w_per_m_k * ((law.t_ref_c + 273.15) / (t_c + 273.15)) ** law.exponent
        # the same law from its new reference on, so that a second call means the same
        return self.model_copy(update={"k_w_per_m_k": k, "k_over_t": law.model_copy(update={"t_ref_c": float(t_c)})})


class MaterialFile(FileModel):
    """A file of materials."""

    format: int = Field(ge=1, le=1)
    material: dict[str, Material]


@lru_cache
def shipped_materials() -> dict[str, Material]:
    """Materials that come with the package, by name.

    Examples
    --------
    >>> shipped_materials()["copper"].k_w_per_m_k
    394.0
    """
    return read_model(Path(__file__).with_name("materials.toml"), MaterialFile).material


def load_materials(path=None) -> dict[str, Material]:
    """The shipped materials, with those of a user's file put over them."""
    if path is None:
        return dict(shipped_materials())
    return {**shipped_materials(), **read_model(path, MaterialFile).material}


def materials_at(materials: Mapping[str, Material], t_c: float) -> dict[str, Material]:
    """All materials with their conductivity at one temperature [degC], see :meth:`Material.at`; those without a law stay.

    Raises
    ------
    RangeError
        Outside the tested range of a law; the material is named.

    Examples
    --------
    >>> hot = materials_at(shipped_materials(), 125.0)
    >>> round(hot["copper"].k_w_per_m_k, 1), hot["thermal-paste"].k_w_per_m_k
    (386.1, 1.0)
    """
    if not math.isfinite(t_c):
        raise RangeError("t_c", f"{t_c:g}", "a finite temperature in degC")
    out = {}
    for name, material in materials.items():
        try:
            out[name] = material.at(t_c)
        except RangeError as err:
            raise err.at(f"material {name}") from None
    return out


@dataclass(frozen=True)
class StackLadder:
    """A stack as a ladder; ``c_end_j_per_k`` is the capacity that sits on its lower face.

    ``error_k_per_w``: a step response misses by no more than this at any time because layers are cut into cells; see :func:`stack_ladder`.
    """

    ladder: CauerLadder
    c_end_j_per_k: float
    r_layers_k_per_w: tuple[float, ...]
    error_k_per_w: float = 0.0


def stack_ladder(layers, materials: dict[str, Material], *, cells: int = 6, where: str = "layer") -> StackLadder:
    """Cut a stack, heated face first, into a ladder.

    Parameters
    ----------
    layers : sequence
        Objects with ``material``, ``thickness_mm``, ``spread_deg``, and ``width_mm`` and
        ``length_mm``: on the first one the heated face, on a later one the size of that layer,
        which the widening heat cannot pass. A later layer without a size has room enough.
    materials : dict of Material
    cells : int
        Cells per layer. Steady resistances do not depend on them (to 1e-7); what transients do, see the notes.

    Returns
    -------
    StackLadder

    Raises
    ------
    InputError
        Unknown material, missing footprint of the first layer.

    Notes
    -----
    Widening at a fixed angle is a shortcut of the trade; 45 degrees is common
    practice for layers much thinner than the footprint.

    A step response misses most at the time in which heat crosses a cell: by at most a quarter of the cell's resistance times the root
    of the growth of its area, for the largest cell (0.18 to 0.21 measured, random stacks with the lower face held). ``error_k_per_w`` is
    that number. Twice the cells take off half to three quarters of the error. With six cells a single layer misses by 3 % of its share, from a tenth of its
    time constant on by 1 %; a soldered module of eight layers by 0.06 % of the whole.
    """
    r_out: list[float] = []
    c_border = [0.0]
    shares = []
    coarsest = 0.0
    width = length = None
    for number, layer in enumerate(layers, 1):
        material = materials.get(layer.material)
        if material is None:
            raise InputError(f"{where}[{number}].material", f"'{layer.material}'", "one of " + ", ".join(sorted(materials)),
                             near_match(layer.material, materials))
        limit = (np.inf, np.inf)
        if layer.width_mm is not None:
            own = (layer.width_mm * 1e-3, layer.length_mm * 1e-3)
            if width is None:
                width, length = own
            else:
                limit = own
                width, length = min(width, own[0]), min(length, own[1])
        if width is None:
            raise InputError(f"{where}[{number}]", "no footprint", "width_mm and length_mm on the first layer (the heated face)")
        thick = layer.thickness_mm * 1e-3
        widen = 2.0 * np.tan(np.radians(layer.spread_deg))
        edges = np.linspace(0.0, thick, cells + 1)
        shape = _Spread(width, length, widen, *limit)
        for top, bottom in zip(edges[:-1].tolist(), edges[1:].tolist()):
            r, volume = shape.cell(top, bottom)
            c = volume * material.rho_kg_per_m3 * material.c_j_per_kg_k
            c_border[-1] += 0.5 * c
            r_out.append(r / material.k_w_per_m_k)
            c_border.append(0.5 * c)
            growth = math.prod(shape.at(bottom)) / math.prod(shape.at(top))
            coarsest = max(coarsest, r_out[-1] * math.sqrt(growth))
        shares.append(sum(r_out[-cells:]))
        width, length = shape.at(thick)
    return StackLadder(CauerLadder(np.array(r_out), np.array(c_border[:-1])), c_border[-1], tuple(shares), 0.25 * coarsest)


@dataclass(frozen=True)
class LayerEffect:
    """What a temperature does to one layer, or to all (``material`` "total", conductivities NaN).

    Attributes
    ----------
    material : str
    k_data_w_per_m_k, k_at_w_per_m_k : float
        As the data say it and at the temperature asked for.
    r_data_k_per_w, r_at_k_per_w : float
        Resistance with either.
    """

    material: str
    k_data_w_per_m_k: float
    k_at_w_per_m_k: float
    r_data_k_per_w: float
    r_at_k_per_w: float

    @property
    def change_percent(self) -> float:
        """Change of the resistance [%]."""
        return 100.0 * (self.r_at_k_per_w / self.r_data_k_per_w - 1.0)


@dataclass(frozen=True)
class ConductivityEffect:
    """Layers from the heated face down, and their sum, with conductivities of the data and at ``t_c`` [degC]."""

    t_c: float
    layers: tuple[LayerEffect, ...]
    total: LayerEffect


def conductivity_effect(layers, materials: Mapping[str, Material], t_c: float, *, where: str = "layer") -> ConductivityEffect:
    """How much the resistance of a stack changes when its conductivities are taken at a temperature.

    Parameters
    ----------
    layers, materials, where
        As for :func:`stack_ladder`.
    t_c : float
        One temperature for all layers [degC]; see :meth:`Material.at` for what that leaves out.

    Returns
    -------
    ConductivityEffect

    Raises
    ------
    InputError
        As :func:`stack_ladder`; RangeError outside the tested range of a material of the stack.

    Examples
    --------
    >>> from mission.device import LayerSpec
    >>> die = LayerSpec(material="silicon", thickness_mm=0.15, width_mm=10.0, length_mm=10.0)
    >>> solder = LayerSpec(material="solder-snag", thickness_mm=0.1)
    >>> effect = conductivity_effect([die, solder], shipped_materials(), 125.0)
    >>> [(row.material, round(row.change_percent, 1)) for row in (*effect.layers, effect.total)]
    [('silicon', 44.5), ('solder-snag', 0.0), ('total', 16.3)]
    """
    as_data = stack_ladder(layers, materials, cells=1, where=where).r_layers_k_per_w
    used = {layer.material: materials[layer.material] for layer in layers}
    hot = materials_at(used, t_c)
    at_t = stack_ladder(layers, hot, cells=1, where=where).r_layers_k_per_w
    rows = tuple(LayerEffect(layer.material, used[layer.material].k_w_per_m_k, hot[layer.material].k_w_per_m_k, data, at)
                 for layer, data, at in zip(layers, as_data, at_t))
    return ConductivityEffect(float(t_c), rows, LayerEffect("total", math.nan, math.nan, sum(as_data), sum(at_t)))


@dataclass(frozen=True)
class _Spread:
    """Cross-section that heat takes up in a layer: widening from the upper face, no wider than the layer."""

    width: float
    length: float
    widen: float
    width_limit: float
    length_limit: float

    def at(self, z):
        """Width and length at depth ``z`` (float or array) [m]."""
        return np.minimum(self.width + self.widen * z, self.width_limit), np.minimum(self.length + self.widen * z, self.length_limit)

    def cell(self, top: float, bottom: float) -> tuple[float, float]:
        """Integral of dz/(width length) [1/m] and volume [m3] between two depths."""
        borders = [top, bottom]
        if self.widen > 0.0:
            # where a side reaches the layer's edge the integrand has a kink
            borders += [z for z in ((self.width_limit - self.width) / self.widen, (self.length_limit - self.length) / self.widen) if top < z < bottom]
        borders.sort()
        r = volume = 0.0
        for a, b in zip(borders[:-1], borders[1:]):
            w, h = self.at(0.5 * (a + b) + 0.5 * (b - a) * _NODES)
            r += 0.5 * (b - a) * float((_WEIGHTS / (w * h)).sum())
            volume += 0.5 * (b - a) * float((_WEIGHTS * w * h).sum())
        return r, volume
