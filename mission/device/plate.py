"""The section ``[plate]`` of a module file: chips side by side on a plate, or on several plates of one footprint.

Coordinates count from a corner of the plate. A chip's own ``thermal`` section (``reference = "plate"``) holds the layers between
its heated face and the plate; the face that the heat leaves them by is the rectangle that heats the plate.
"""

from __future__ import annotations

import math
from collections import Counter
from typing import Annotated, NamedTuple

from pydantic import Field

from ..errors import RangeError, near_match
from ..tomlfile import FileModel

_Side = Annotated[float, Field(strict=True, gt=0, le=1000)]
_Place = Annotated[float, Field(strict=True, ge=0, le=1000)]
_Text = Annotated[str, Field(min_length=1)]


class PlateLayerSpec(FileModel):
    """One layer as large as the plate; ``contact_below_mm2_k_per_w``: area resistance of the joint under it."""

    material: _Text
    thickness_mm: Annotated[float, Field(strict=True, gt=0, le=100)]
    contact_below_mm2_k_per_w: Annotated[float, Field(strict=True, ge=0, le=10000)] = 0.0


class PlateChip(FileModel):
    """Where a chip sits: the centre of its rectangle."""

    name: _Text
    x_mm: _Place
    y_mm: _Place


class PlateSpec(FileModel):
    """Layers, the chips' side first, and the chips on them; ``width_mm`` goes along x, ``length_mm`` along y, as for the chips' layers.

    A six-pack names its chips with the leg ("S-a-up"). A half-bridge or leg file describes the plate of one of three like
    modules, and its chips go without the leg ("S-up").
    """

    width_mm: _Side
    length_mm: _Side
    layer: Annotated[tuple[PlateLayerSpec, ...], Field(min_length=1)]
    chip: Annotated[tuple[PlateChip, ...], Field(min_length=1)]


class ChipFace(NamedTuple):
    """Rectangle by which a chip's heat enters the plate; ``x_mm``, ``y_mm`` are its centre."""

    name: str
    x_mm: float
    y_mm: float
    width_mm: float
    length_mm: float


def lower_face_mm(layers) -> tuple[float, float]:
    """Width and length of the face that the heat leaves a stack of layers by.

    Parameters
    ----------
    layers : sequence of LayerSpec
        Heated face first; widening and sizes as :func:`mission.thermal.stack_ladder` has them.

    Examples
    --------
    >>> from mission.device import LayerSpec
    >>> chip = LayerSpec(material="silicon", thickness_mm=0.1, width_mm=10.0, length_mm=8.0)
    >>> island = LayerSpec(material="copper", thickness_mm=0.3, width_mm=10.4, length_mm=20.0, spread_deg=45.0)
    >>> [round(side, 6) for side in lower_face_mm([chip, island])]
    [10.4, 8.6]
    """
    sides = [layers[0].width_mm, layers[0].length_mm]
    for number, layer in enumerate(layers):
        room = [math.inf, math.inf] if number == 0 or layer.width_mm is None else [layer.width_mm, layer.length_mm]
        grown = 2.0 * layer.thickness_mm * math.tan(math.radians(layer.spread_deg))
        sides = [min(side + grown, limit) for side, limit in zip(sides, room)]
    return sides[0], sides[1]


def plate_chip_names(module) -> tuple[str, ...]:
    """Names of the chips on one plate of a module, in the order of their numbers, e.g. S-a-up of a six-pack or S-up of a half-bridge."""
    if module.arrangement == "six-pack":
        return module.chip_names()
    return tuple(f"{pair.name}-{side}" for pair in module.chip_pairs() for side in ("up", "lo"))


def chip_faces(module) -> tuple[ChipFace, ...]:
    """Rectangles that heat the plate, in the order of :func:`plate_chip_names`."""
    per_pair = {pair.name: lower_face_mm(pair.thermal.layer) for pair in module.chip_pairs()}
    places = {chip.name: chip for chip in module.plate.chip}
    return tuple(ChipFace(name, places[name].x_mm, places[name].y_mm, *per_pair[name.split("-")[0]]) for name in plate_chip_names(module))


def check_plate(module) -> None:
    """Refuse a module whose plate and other sections do not go together.

    Raises
    ------
    RangeError
        A plate without chips' layers down to it, or the other way round; no paste per module; chips that are missing, unknown, doubled,
        beyond the edge or over each other.
    """
    pairs, plate = module.chip_pairs(), module.plate
    for pair in pairs:
        place, thermal = f"{pair.place}.thermal", pair.thermal
        if plate is None and thermal.reference == "plate":
            raise RangeError("plate", f"no section plate, and {place}.reference = 'plate'", "a section [plate] with layers and chips",
                             'add it, or give branches or layers down to the case with reference = "case"')
        if plate is not None and thermal.reference != "plate":
            raise RangeError("plate", f"a section plate, and {place}.reference = '{thermal.reference}'", "reference = \"plate\" for every chip",
                             "give each chip's layers down to the plate, or remove the section plate")
        if plate is not None and not thermal.layer:
            raise RangeError(f"{place}", "r_k_per_w and tau_s beside a section plate", "layers",
                             "data-sheet branches hold a plate already: give the layers between chip and plate, or remove the section plate")
    if plate is None:
        return
    if module.case_to_sink is None or module.case_to_sink.per != "module":
        found = "no section case_to_sink" if module.case_to_sink is None else f"case_to_sink.per = '{module.case_to_sink.per}'"
        raise RangeError("case_to_sink", f"{found} beside a section plate", 'case_to_sink with per = "module"',
                         "enter the resistance of the paste under one whole plate; it is spread evenly over the plate's lower face")
    allowed = plate_chip_names(module)
    for name, times in Counter(chip.name for chip in plate.chip).items():
        if name not in allowed:
            raise RangeError("plate.chip", f"a chip named '{name}'", "one of " + ", ".join(allowed), near_match(name, allowed))
        if times > 1:
            raise RangeError("plate.chip", f"{times} chips named '{name}'", "every chip once", "rename or remove one of them")
    missing = [name for name in allowed if name not in {chip.name for chip in plate.chip}]
    if missing:
        raise RangeError("plate.chip", "no place for " + ", ".join(missing), "a section [[plate.chip]] for every chip of a plate", "add name, x_mm and y_mm")
    _check_places(chip_faces(module), plate)


def _check_places(faces, plate):
    slack = 1e-9 * max(plate.width_mm, plate.length_mm)
    for number, face in enumerate(faces):
        for centre, size, side, name in ((face.x_mm, face.width_mm, plate.width_mm, "x_mm"), (face.y_mm, face.length_mm, plate.length_mm, "y_mm")):
            low, high = centre - size / 2, centre + size / 2
            if low < -slack or high > side + slack:
                raise RangeError("plate.chip", f"{face.name} from {low:g} to {high:g} mm along {name[0]}, where its layers end", f"0 to {side:g} mm, the plate",
                                 "x_mm and y_mm are the centre, counted from a corner; widening layers (spread_deg) need room too")
        for other in faces[:number]:
            if (2 * abs(face.x_mm - other.x_mm) < face.width_mm + other.width_mm - slack
                    and 2 * abs(face.y_mm - other.y_mm) < face.length_mm + other.length_mm - slack):
                raise RangeError("plate.chip", f"{face.name} ({face.width_mm:g} x {face.length_mm:g} mm where its layers end) over {other.name}", "chips side by side",
                                 "check the centres; limit how far layers widen with width_mm and length_mm, or let the plate begin higher up")
