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
        Objects with ``material``, ``thickness_mm``, ``spread_deg`` and, on the first
        one at least, ``width_mm`` and ``length_mm`` (the heated face). A later layer
        without a footprint starts with the width that the heat has reached; one with
        a footprint starts there again, but never narrower than what is reached
        unless its own size limits it.
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
        if layer.width_mm is not None:
            width, length = layer.width_mm * 1e-3, layer.length_mm * 1e-3
        if width is None:
            raise InputError(f"{where}[{number}]", "no footprint", "width_mm and length_mm on the first layer (the heated face)")
        thick = layer.thickness_mm * 1e-3
        widen = 2.0 * np.tan(np.radians(layer.spread_deg))
        edges = np.linspace(0.0, thick, cells + 1)
        w, h = width + widen * edges, length + widen * edges
        r_cell = _slab_resistance(w, h, edges, material.k_w_per_m_k)
        # Simpson's rule is exact: the area is a parabola of depth
        middle = (w[1:] + w[:-1]) * (h[1:] + h[:-1]) / 4.0
        volume = np.diff(edges) * (w[1:] * h[1:] + 4.0 * middle + w[:-1] * h[:-1]) / 6.0
        c_cell = volume * material.rho_kg_per_m3 * material.c_j_per_kg_k
        for r, c in zip(r_cell.tolist(), c_cell.tolist()):
            c_border[-1] += 0.5 * c
            r_out.append(r)
            c_border.append(0.5 * c)
        shares.append(float(r_cell.sum()))
        width, length = w[-1], h[-1]
    return StackLadder(CauerLadder(np.array(r_out), np.array(c_border[:-1])), c_border[-1], tuple(shares))


def _slab_resistance(w, h, z, k):
    """Integral of dz/(k w h) with w and h straight lines of depth, per cell."""
    dz = np.diff(z)
    w0, w1, h0, h1 = w[:-1], w[1:], h[:-1], h[1:]
    widen = (w1 - w0) / dz
    # w h1 - w1 h0 changes sign with the aspect ratio; a square has its own limit
    cross = w1 * h0 - w0 * h1
    scale = np.maximum(w0 * h0, 1e-300)
    straight = np.abs(widen) * dz < 1e-9 * w0
    square = np.abs(cross) < 1e-9 * scale
    with np.errstate(divide="ignore", invalid="ignore"):
        oblong = dz * np.log((w1 * h0) / (w0 * h1)) / cross
    exact_square = dz / (w0 * w1) * (w0 / h0)
    return np.where(straight, dz / (w0 * h0), np.where(square, exact_square, oblong)) / k
