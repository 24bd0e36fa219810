"""Layer stacks: from thickness, footprint and material to a ladder.

Heat goes straight down and widens at an angle per layer. Each layer is cut
into cells; capacities sit on the cell borders (half of each neighbour), so
that the heated face is a node of its own.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np
from pydantic import Field

from ..errors import InputError, near_match
from ..tomlfile import FileModel, read_model
from .networks import CauerLadder

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(16)


class Material(FileModel):
    """Thermal data of one material."""

    k_w_per_m_k: float = Field(gt=0)
    rho_kg_per_m3: float = Field(gt=0)
    c_j_per_kg_k: float = Field(gt=0)
    source: str
    page_or_clause: str
    tested_range: str


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


@dataclass(frozen=True)
class StackLadder:
    """A stack as a ladder; ``c_end_j_per_k`` is the capacity that sits on its lower face."""

    ladder: CauerLadder
    c_end_j_per_k: float
    r_layers_k_per_w: tuple[float, ...]


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
        Cells per layer. Six keep the error of a transient below about one percent
        of a layer's own share after a tenth of its time constant; doubling them
        shows what is left.

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
    """
    r_out: list[float] = []
    c_border = [0.0]
    shares = []
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
        shares.append(sum(r_out[-cells:]))
        width, length = shape.at(thick)
    return StackLadder(CauerLadder(np.array(r_out), np.array(c_border[:-1])), c_border[-1], tuple(shares))


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
