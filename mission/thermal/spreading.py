"""How heat widens below a chip: the shortcuts of the trade, beside the exact solution.

Four answers to one question, the steady resistance of one chip on a stack whose bottom is cooled: heat that goes straight down, heat that fills the
whole footprint at once, heat that widens at an angle, and a closed form for a round source on a round plate. The first two are bounds of the
mean: walls around the column under the chip can only hinder the heat, sheets of perfect conductor between the plates can only help it.
"""

from __future__ import annotations

from dataclasses import dataclass
from types import SimpleNamespace

import numpy as np

from ..checks import require_range
from ..errors import InputError, RangeError, near_match
from .fourier import FourierStack
from .layers import stack_ladder


@dataclass(frozen=True)
class ClosedForm:
    """Result of :func:`closed_form`.

    Attributes
    ----------
    spreading_mean_k_per_w, spreading_max_k_per_w : float
        What the narrow source adds to the mean and to the largest rise [K/W].
    plate_k_per_w : float
        Thickness over conductivity and plate area [K/W].
    outside_k_per_w : float
        From the lower face to the coolant [K/W].
    wave_number_per_m : float
    """

    spreading_mean_k_per_w: float
    spreading_max_k_per_w: float
    plate_k_per_w: float
    outside_k_per_w: float
    wave_number_per_m: float

    @property
    def r_mean_k_per_w(self) -> float:
        """Mean rise of the source over the coolant, per watt."""
        return self.spreading_mean_k_per_w + self.plate_k_per_w + self.outside_k_per_w

    @property
    def r_max_k_per_w(self) -> float:
        """Largest rise of the source over the coolant, per watt."""
        return self.spreading_max_k_per_w + self.plate_k_per_w + self.outside_k_per_w


def closed_form(source_area_mm2: float, plate_area_mm2: float, thickness_mm: float, k_w_per_m_k: float, outside_k_per_w: float) -> ClosedForm:
    """Spreading in one plate by the closed form of 1995.

    Parameters
    ----------
    source_area_mm2, plate_area_mm2 : float
        Rectangles count as circles of the same area.
    thickness_mm, k_w_per_m_k : float
    outside_k_per_w : float
        From the lower face of the whole plate to the coolant [K/W].

    Returns
    -------
    ClosedForm

    Raises
    ------
    RangeError
        A source larger than the plate; a number that is not above zero.

    Notes
    -----
    For a source in the middle of a plate of similar shape; an eccentric source, neighbours and layers are outside the formula.
    The authors state an error below ten percent (from memory).

    References
    ----------
    .. [1] S. Lee, S. Song, V. Au, K. P. Moran, "Constriction/spreading resistance model for electronics packaging", ASME/JSME Thermal
       Engineering Conference 1995, vol. 4, 199-206.

    Examples
    --------
    >>> found = closed_form(625.0, 1e4, 1.3, 200.0, 1.0)
    >>> round(found.spreading_max_k_per_w, 5), round(found.wave_number_per_m, 3)
    (0.65658, 95.683)
    """
    for name, value, unit in (
        ("source_area_mm2", source_area_mm2, "mm2"), ("plate_area_mm2", plate_area_mm2, "mm2"), ("thickness_mm", thickness_mm, "mm"),
        ("k_w_per_m_k", k_w_per_m_k, "W/(m K)"), ("outside_k_per_w", outside_k_per_w, "K/W"),
    ):
        require_range(name, value, low=0.0, low_open=True, unit=unit)
    if source_area_mm2 > plate_area_mm2 * (1.0 + 1e-9):
        raise RangeError("source_area_mm2", f"{source_area_mm2:g} mm2", f"at most {plate_area_mm2:g} mm2, the plate")
    a, b, t = np.sqrt(source_area_mm2 / np.pi) * 1e-3, np.sqrt(plate_area_mm2 / np.pi) * 1e-3, thickness_mm * 1e-3
    narrow = min(a / b, 1.0)
    wave = np.pi + 1.0 / (np.sqrt(np.pi) * narrow)
    biot = 1.0 / (np.pi * k_w_per_m_k * b * outside_k_per_w)
    slope = np.tanh(wave * t / b)
    phi = (slope + wave / biot) / (1.0 + wave / biot * slope)
    unit = 1.0 / (np.sqrt(np.pi) * k_w_per_m_k * a)
    return ClosedForm(float(0.5 * (1.0 - narrow) ** 1.5 * phi * unit), float((1.0 - narrow) / np.sqrt(np.pi) * phi * unit),
                      float(t / (k_w_per_m_k * plate_area_mm2 * 1e-6)), float(outside_k_per_w), float(wave / b))


def straight_down_k_per_w(stack: FourierStack, chip: int = 0) -> float:
    """Heat stays in the column under the chip, down to the coolant [K/W]; never below the exact mean."""
    source = stack.sources[chip]
    return _through_k_mm2_per_w(stack) / (source.width_mm * source.length_mm)


def whole_footprint_k_per_w(stack: FourierStack) -> float:
    """Heat fills every plate at once [K/W]; never above the exact mean."""
    return _through_k_mm2_per_w(stack) / (stack.width_mm * stack.length_mm)


def _through_k_mm2_per_w(stack):
    return stack.r_area_mm2_k_per_w + sum(1e3 * p.thickness_mm / p.k_w_per_m_k + p.contact_below_mm2_k_per_w for p in stack.layers)


def by_angle_k_per_w(stack: FourierStack, chip: int = 0, *, spread_deg=45.0, outside: str = "reached") -> float:
    """Heat widens at an angle in every plate, as :func:`mission.thermal.stack_ladder` has it.

    Joints have the cross-section that the heat has reached there.

    Parameters
    ----------
    stack : FourierStack
    chip : int
        Number of the source, from 0; the others give no heat.
    spread_deg : float or sequence of float
        For all plates, or for each [degrees], 0 to 60.
    outside : {"reached", "footprint"}
        Cross-section of the way from the bottom to the coolant: what the heat has reached there, or the whole footprint.

    Returns
    -------
    float
        [K/W]

    Notes
    -----
    A shortcut: the angle is not a property of a material. Heat may widen to the footprint on all sides, as if the chip sat in the middle. The poorer
    the cooling, the further heat really goes along the last plate, and the further apart are the two readings of ``outside``.
    """
    if outside not in ("reached", "footprint"):
        raise InputError("outside", f"'{outside}'", "'reached' or 'footprint'", near_match(outside, ("reached", "footprint")))
    source = stack.sources[chip]
    angles = np.broadcast_to(require_range("spread_deg", spread_deg, low=0.0, high=60.0, unit="degrees"), (len(stack.layers),))
    width, length = source.width_mm, source.length_mm
    layers, joints = [], 0.0
    for number, (plate, angle) in enumerate(zip(stack.layers, angles)):
        own = (width, length) if number == 0 else (stack.width_mm, stack.length_mm)
        layers.append(SimpleNamespace(material=number, thickness_mm=plate.thickness_mm, width_mm=own[0], length_mm=own[1], spread_deg=angle))
    # the first entry's size is the heated face, so a slice of no weight in front leaves the limits to the plates themselves
    first = SimpleNamespace(**vars(layers[0]))
    first.thickness_mm, layers[0].width_mm, layers[0].length_mm = 1e-9 * first.thickness_mm, stack.width_mm, stack.length_mm
    materials = {number: plate for number, plate in enumerate(stack.layers)}
    shares = stack_ladder([first, *layers], materials, cells=1).r_layers_k_per_w
    for plate, angle in zip(stack.layers, angles):
        grown = 2.0 * plate.thickness_mm * np.tan(np.radians(angle))
        width, length = min(width + grown, stack.width_mm), min(length + grown, stack.length_mm)
        joints += plate.contact_below_mm2_k_per_w / (width * length)
    foot = width * length if outside == "reached" else stack.width_mm * stack.length_mm
    return float(sum(shares) + joints + stack.r_area_mm2_k_per_w / foot)


def closed_form_of_stack(stack: FourierStack, chip: int = 0) -> ClosedForm:
    """The closed form on one plate that stands for all: as thick as all together, with their resistance in series.

    Joints between plates count as resistance of that plate; the last joint belongs to the way out. A poor conductor within the
    stack (ceramic, paste) makes the stand-in worse; :func:`compare_spreading` shows by how much.
    """
    source, area = stack.sources[chip], stack.width_mm * stack.length_mm
    outside = stack.r_area_mm2_k_per_w + stack.layers[-1].contact_below_mm2_k_per_w
    thick = sum(p.thickness_mm for p in stack.layers)
    k = 1e3 * thick / (_through_k_mm2_per_w(stack) - outside)
    return closed_form(source.width_mm * source.length_mm, area, thick, k, outside / area)


def compare_spreading(stack: FourierStack, chip: int = 0, *, spread_deg=45.0):
    """The shortcuts beside the exact solution, one chip heated.

    Parameters
    ----------
    stack : FourierStack
    chip : int
        Number of the source, from 0.
    spread_deg : float or sequence of float
        As for :func:`by_angle_k_per_w`.

    Returns
    -------
    DataFrame
        Columns ``method``, ``rise`` ("mean" over the chip or "maximum"), ``r_th_k_per_w``, and ``difference_percent``
        from the exact value of the same rise.

    Examples
    --------
    >>> from mission.thermal.fourier import PlateLayer, Source
    >>> plates = (PlateLayer(390.0, 8930.0, 385.0, 0.3), PlateLayer(24.0, 3780.0, 830.0, 0.38), PlateLayer(390.0, 8930.0, 385.0, 3.0))
    >>> table = compare_spreading(FourierStack(60.0, 40.0, plates, (Source(30.0, 20.0, 12.0, 10.0),), 200.0))
    >>> table[table.rise == "mean"].set_index("method").difference_percent.round(0).astype(int).to_dict()
    {'exact': 0, 'straight down': 522, 'whole footprint': -69, 'angle': 148, 'angle, then footprint': -22, 'closed form': 26}
    """
    import pandas as pd

    if not 0 <= chip < stack.n_sources:
        raise RangeError("chip", f"{chip}", f"0 to {stack.n_sources - 1}")
    mean = float(stack.r_th_k_per_w()[chip, chip])
    most = float(stack.source_rises_k(np.eye(stack.n_sources)[chip]).max_k[chip])
    closed = closed_form_of_stack(stack, chip)
    rows = [
        ("exact", "mean", mean),
        ("straight down", "mean", straight_down_k_per_w(stack, chip)),
        ("whole footprint", "mean", whole_footprint_k_per_w(stack)),
        ("angle", "mean", by_angle_k_per_w(stack, chip, spread_deg=spread_deg)),
        ("angle, then footprint", "mean", by_angle_k_per_w(stack, chip, spread_deg=spread_deg, outside="footprint")),
        ("closed form", "mean", closed.r_mean_k_per_w),
        ("exact", "maximum", most), ("closed form", "maximum", closed.r_max_k_per_w),
    ]
    table = pd.DataFrame(rows, columns=["method", "rise", "r_th_k_per_w"])
    exact = np.where(table["rise"] == "mean", mean, most)
    table["difference_percent"] = 100.0 * (table["r_th_k_per_w"] / exact - 1.0)
    return table
