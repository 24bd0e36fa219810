"""Cooling reckoned from what it is made of: resistance against flow, plate fins with a fan or without, liquid plates.

Every kind is a section of a TOML file (a frozen model, told apart by ``kind``); :func:`sink_point` turns it into a
:class:`SinkPoint` at an inlet temperature and, where known, a heat. What is taken, and what is not:

- ``r_th_k_per_w`` leads from the mean of the mounting surface to the coolant *at the inlet*, for the total heat:
  half of the coolant's own rise (or what the correlation puts in its place) is inside.
- Heat enters the base evenly, unless a ``footprint`` is given: then the crowding under it comes on top by the closed form of
  Lee et al. 1995, each footprint in the middle of its own tile of the base; or it is left out, and the result says so.
- Correlations are used inside their range; outside, and between laminar and turbulent, the result carries a sentence in ``flags``.
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Annotated, Literal

import numpy as np
from pydantic import Field, model_validator

from ..checks import require_range
from ..errors import InputError, RangeError, near_match
from ..tomlfile import FileModel
from . import fluids_data as fd
from .cooling import CoolingBase, rising
from .layers import load_materials

_Positive = Annotated[float, Field(strict=True, gt=0)]
_NotNegative = Annotated[float, Field(strict=True, ge=0)]
#: Lengths in millimetres: a sink, not a chip and not a house. Metres written by mistake fall below.
_Side = Annotated[float, Field(strict=True, ge=5, le=3000)]
_Thin = Annotated[float, Field(strict=True, ge=0.05, le=100)]
_Gap = Annotated[float, Field(strict=True, ge=0.1, le=100)]
_Altitude = Annotated[float, Field(strict=True, ge=-400, le=6000)]
_Curve = Annotated[tuple[_NotNegative, ...], Field(min_length=2, max_length=60)]
_Table = Annotated[tuple[_Positive, ...], Field(min_length=2, max_length=60)]

_M3_PER_H, _L_PER_MIN = 1.0 / 3600.0, 1.0 / 60000.0

SOURCE_TEERTSTRA = ("P. Teertstra, M. M. Yovanovich, J. R. Culham, T. Lemczyk, Analytical forced convection modeling of plate fin heat sinks, "
                    "SEMI-THERM 1999 (film to inlet air; formula and tested range from memory)")
SOURCE_BAR_COHEN = "A. Bar-Cohen, W. M. Rohsenow, J. Heat Transfer 106, 1984, 116-123 (even plates, film to inlet air)"
SOURCE_CHURCHILL_CHU = "S. W. Churchill, H. H. S. Chu, Int. J. Heat Mass Transfer 18, 1975, 1323-1329 (vertical plate; library ht)"
SOURCE_RADIATION = "grey enclosure of channel walls and opening, view factors of rectangles in closed form; law of radiation from library ht"
SOURCE_ENDS = "sharp contraction and widening at the ends of the channels (library fluids)"
#: Range of the channel Reynolds number in which Teertstra et al. compared with measurements (from memory).
TEERTSTRA_RANGE = (0.26, 175.0)


# --- what the user writes ---------------------------------------------------------------------------------------------


class FlowCurve(FileModel):
    """Pressure that a fan or pump holds against flow, at full speed; straight between the points, refused beyond them.

    ``flow_m3_per_h`` or ``flow_l_per_min``: flow at the mover's inlet, rising from point to point; ``pressure_pa``: static pressure.
    ``at_density_kg_per_m3``: density the curve was taken at (by default 1.2 for a fan, 998 for a pump); pressure scales with density.
    """

    flow_m3_per_h: _Curve | None = None
    flow_l_per_min: _Curve | None = None
    pressure_pa: _Curve
    at_density_kg_per_m3: Annotated[float, Field(strict=True, gt=0, le=2000)] | None = None

    @model_validator(mode="after")
    def _sensible(self):
        name = _one_of(self, "flow_m3_per_h", "flow_l_per_min")
        flow = getattr(self, name)
        if len(flow) != len(self.pressure_pa):
            raise RangeError(
                "pressure_pa", f"{len(self.pressure_pa)} values beside {len(flow)} flows", "one pressure for every flow", "complete the shorter list"
            )
        rising(name, flow)
        if self.pressure_pa[0] <= self.pressure_pa[-1]:
            raise RangeError("pressure_pa", f"{self.pressure_pa[0]:g} Pa at the first point and {self.pressure_pa[-1]:g} Pa at the last",
                             "a pressure that falls from the smallest to the largest flow", "check the order of the points")
        return self

    @property
    def flow_m3_per_s(self) -> np.ndarray:
        """Flows [m3/s], shape (points,)."""
        return flow_m3_per_s_of(self, "flow")


class Duct(FileModel):
    """A duct before or behind the sink that carries the whole flow.

    ``loss_coefficient``: bends, grilles and filters, in dynamic pressures of the duct.
    """

    width_mm: _Side
    height_mm: _Side
    length_mm: Annotated[float, Field(strict=True, ge=0, le=20000)] = 0.0
    loss_coefficient: Annotated[float, Field(strict=True, ge=0, le=100)] = 0.0


class Footprint(FileModel):
    """Size of the heated faces on the base, all alike and spread evenly over it."""

    length_mm: _Positive
    width_mm: _Positive
    count: Annotated[int, Field(strict=True, ge=1, le=48)] = 1


class _Sink(CoolingBase):
    """What every kind has.

    ``heat_w``: total heat for which properties and the coolant's rise are taken; ``heat_capacity_j_per_k``: of the sink,
    in place of what geometry and material give.
    """

    heat_w: _Positive | None = None
    heat_capacity_j_per_k: _Positive | None = None


class TableSink(_Sink):
    """A given resistance against flow: straight on logarithmic axes between the points, refused outside them.

    The table holds surface to coolant inlet, for the total heat. ``at_...`` is the flow that the sink gets, in the table's unit.
    ``fluid``: what flows, needed only for the coolant's own rise.
    """

    kind: Literal["flow-table"]
    flow_l_per_min: _Table | None = None
    flow_m3_per_h: _Table | None = None
    r_th_k_per_w: _Table
    pressure_drop_pa: _Table | None = None
    at_l_per_min: _Positive | None = None
    at_m3_per_h: _Positive | None = None
    fluid: Literal["air", "water", "water-glycol", "water-propylene-glycol"] | None = None
    glycol_mass_share: Annotated[float, Field(strict=True, ge=0.1, le=0.6)] | None = None
    altitude_m: _Altitude = 0.0

    @model_validator(mode="after")
    def _sensible(self):
        name = _one_of(self, "flow_l_per_min", "flow_m3_per_h")
        flow = getattr(self, name)
        rising(name, flow)
        for other in ("r_th_k_per_w", "pressure_drop_pa"):
            column = getattr(self, other)
            if column is not None and len(column) != len(flow):
                raise RangeError(other, f"{len(column)} values beside {len(flow)} flows", "one value for every flow", "complete the shorter list")
        for k, (a, b) in enumerate(zip(self.r_th_k_per_w, self.r_th_k_per_w[1:]), 2):
            if b > a:
                raise RangeError("r_th_k_per_w", f"{b:g} K/W at point {k} after {a:g}", "a resistance that does not rise with flow",
                                 "check the order of the points")
        at = "at" + name.removeprefix("flow")
        other = "at_m3_per_h" if at == "at_l_per_min" else "at_l_per_min"
        if getattr(self, other) is not None:
            raise RangeError(at, f"{other} beside a table in {name}", f"{at}, in the unit of the table", f"give {at} = ...")
        if getattr(self, at) is not None:
            _in_table(at, getattr(self, at), flow)
        if self.fluid is not None:
            _share_fits(self.fluid, self.glycol_mass_share, "fluid")
        elif self.glycol_mass_share is not None:
            raise RangeError("glycol_mass_share", f"{self.glycol_mass_share:g} without a fluid", "a share beside fluid = 'water-glycol'",
                             "add fluid, or remove the share")
        return self

    @property
    def table_m3_per_s(self) -> np.ndarray:
        """Flows of the table [m3/s], shape (points,)."""
        return flow_m3_per_s_of(self, "flow")

    @property
    def at_m3_per_s(self) -> float:
        """Flow that the sink gets [m3/s]."""
        if self.at_l_per_min is None and self.at_m3_per_h is None:
            raise RangeError("cooling.at_l_per_min", "no flow at which the sink works", "at_l_per_min or at_m3_per_h, in the unit of the table")
        return float(flow_m3_per_s_of(self, "at"))


class _Finned(_Sink):
    """Straight plate fins on a rectangular base; the channels run along ``length_mm``. Width: fins and the gaps between them."""

    base_mm: _Thin
    fin_count: Annotated[int, Field(strict=True, ge=2, le=1000)]
    fin_mm: _Thin
    gap_mm: _Gap
    fin_height_mm: Annotated[float, Field(strict=True, ge=1, le=500)]
    length_mm: _Side
    width_mm: _Side | None = None
    material: str = "aluminium"
    k_w_per_m_k: Annotated[float, Field(strict=True, gt=0, le=3000)] | None = None
    altitude_m: _Altitude = 0.0
    footprint: Footprint | None = None

    @model_validator(mode="after")
    def _fits(self):
        need = self.fin_count * self.fin_mm + (self.fin_count - 1) * self.gap_mm
        if self.width_mm is not None and need > self.width_mm * 1.0001:
            raise RangeError("width_mm", f"{self.width_mm:g} mm for {self.fin_count} fins that need {need:g} mm",
                             f"at least {need:g} mm, or fewer or closer fins", "check fin_count, fin_mm and gap_mm")
        if self.width_mm is not None and need < 0.8 * self.width_mm:
            raise RangeError("width_mm", f"{self.width_mm:g} mm for {self.fin_count} fins that take {need:g} mm",
                             "fins over at least four fifths of the width", "check fin_count, fin_mm and gap_mm, or leave width_mm out")
        if need > 3000:
            raise RangeError(
                "fin_count", f"{self.fin_count} fins, {need:g} mm wide together", "a sink of at most 3000 mm", "check fin_count, fin_mm and gap_mm"
            )
        if self.footprint is not None:
            _footprint_fits(self.footprint, self.length_mm, self.width_mm or need)
        return self

    @property
    def width_m(self) -> float:
        """Width of the base [m]."""
        return 1e-3 * (self.width_mm or self.fin_count * self.fin_mm + (self.fin_count - 1) * self.gap_mm)

    @property
    def channel(self) -> fd.RectChannel:
        """One gap between two fins, closed over the tips."""
        return fd.RectChannel(self.gap_mm * 1e-3, self.fin_height_mm * 1e-3, self.length_mm * 1e-3)

    @property
    def metal_m3(self) -> float:
        """Volume of base and fins [m3]."""
        return 1e-3 * self.length_mm * (self.width_m * self.base_mm * 1e-3 + self.fin_count * self.fin_mm * self.fin_height_mm * 1e-6)


class FanSink(_Finned):
    """Plate fins with a fan: all air goes through the channels, whose tips a shroud closes.

    Either ``fan`` (a curve that meets the pressure drop of duct and channels) or ``flow_m3_per_h`` (taken at inlet density); neither
    where the duty, stages or a law give the flow.
    ``outer_faces_cooled``: whether the outer faces of the first and last fin lie in the same stream.
    """

    kind: Literal["plate-fin-fan"]
    fan: FlowCurve | None = None
    flow_m3_per_h: _Positive | None = None
    duct: Duct | None = None
    outer_faces_cooled: bool = False

    @model_validator(mode="after")
    def _one_flow(self):
        _at_most_one(self, "fan", "flow_m3_per_h")
        return self


class NaturalSink(_Finned):
    """Plate fins standing upright in still air, channels vertical and open in front; convection and radiation.

    The resistance depends on the rise: it is held at a heat (``heat_w``) or a surface temperature (``surface_c``) if one is given;
    without either a mission follows the rise of the surface, step by step.
    ``surroundings_c``: what the sink radiates to; default: the air's temperature.
    """

    kind: Literal["plate-fin-natural"]
    emissivity: Annotated[float, Field(strict=True, ge=0, le=1)]
    surface_c: Annotated[float, Field(strict=True, ge=-60, le=400)] | None = None
    surroundings_c: Annotated[float, Field(strict=True, ge=-60, le=150)] | None = None

    @model_validator(mode="after")
    def _one_load(self):
        _at_most_one(self, "heat_w", "surface_c")
        return self


class LiquidPlate(_Sink):
    """Parallel rectangular channels under the mounting face, one after another in width, all along ``length_mm``.

    ``base_mm``: metal between face and channels; ``web_mm``: between channels; ``floor_mm``: below them (only for the heat capacity).
    Either ``pump`` (a curve that meets the pressure drop) or ``flow_l_per_min``. ``loop_pa`` at ``loop_l_per_min``: pressure
    drop of hoses and cooler outside, growing with the square of flow. ``loss_coefficient``: ends of the channels, in dynamic
    pressures of the channel. ``positions``: modules one behind the other along the flow; ``heat_shares``: their parts of the heat.
    ``legs_along_flow``: in a study with three modules in a row, which leg gets the coolant first, second, third.
    """

    kind: Literal["liquid-plate"]
    channel_count: Annotated[int, Field(strict=True, ge=1, le=1000)]
    channel_width_mm: _Gap
    channel_height_mm: _Gap
    web_mm: _Thin
    base_mm: _Thin
    floor_mm: _Thin = 2.0
    length_mm: _Side
    width_mm: _Side | None = None
    material: str = "aluminium"
    k_w_per_m_k: Annotated[float, Field(strict=True, gt=0, le=3000)] | None = None
    fluid: Literal["water", "water-glycol", "water-propylene-glycol"]
    glycol_mass_share: Annotated[float, Field(strict=True, ge=0.1, le=0.6)] | None = None
    flow_l_per_min: _Positive | None = None
    pump: FlowCurve | None = None
    loop_pa: _Positive | None = None
    loop_l_per_min: _Positive | None = None
    loss_coefficient: Annotated[float, Field(strict=True, ge=0, le=100)] | None = None
    positions: Annotated[int, Field(strict=True, ge=1, le=48)] = 1
    heat_shares: Annotated[tuple[_NotNegative, ...], Field(min_length=1, max_length=48)] | None = None
    legs_along_flow: tuple[Literal["a", "b", "c"], Literal["a", "b", "c"], Literal["a", "b", "c"]] | None = None
    footprint: Footprint | None = None

    @model_validator(mode="after")
    def _fits(self):
        _at_most_one(self, "flow_l_per_min", "pump")
        _share_fits(self.fluid, self.glycol_mass_share, "fluid")
        need = self.channel_count * self.channel_width_mm + (self.channel_count - 1) * self.web_mm
        if self.width_mm is not None and need > self.width_mm * 1.0001:
            raise RangeError("width_mm", f"{self.width_mm:g} mm for {self.channel_count} channels that need {need:g} mm",
                             f"at least {need:g} mm, or fewer channels", "check channel_count, channel_width_mm and web_mm")
        if (self.width_mm or need) > 3000 or (self.width_mm or need) < 1:
            raise RangeError("channel_count", f"channels that take {need:g} mm", "a plate of 1 to 3000 mm width",
                             "check channel_count, channel_width_mm and web_mm")
        if self.width_mm is not None and need < 0.5 * self.width_mm:
            raise RangeError("width_mm", f"{self.width_mm:g} mm for {self.channel_count} channels that take {need:g} mm",
                             "channels under at least half of the width",
                             "the face is taken as evenly cooled; give the width that the channels lie under")
        if (self.loop_pa is None) != (self.loop_l_per_min is None):
            raise RangeError("loop_pa", "loop_pa or loop_l_per_min alone", "both or neither", "give the pressure drop and the flow it belongs to")
        if self.heat_shares is not None:
            if len(self.heat_shares) != self.positions:
                raise RangeError("heat_shares", f"{len(self.heat_shares)} shares for {self.positions} positions", "one share for every position",
                                 "complete the list")
            if abs(sum(self.heat_shares) - 1.0) > 1e-6:
                raise RangeError(
                    "heat_shares", f"shares that add up to {sum(self.heat_shares):g}", "shares that add up to 1", "divide them by their sum"
                )
        if self.legs_along_flow is not None and len(set(self.legs_along_flow)) < 3:
            raise RangeError("legs_along_flow", ", ".join(self.legs_along_flow), "each of a, b, c once")
        if self.footprint is not None:
            _footprint_fits(self.footprint, self.length_mm, self.width_mm or need)
        return self

    @property
    def width_m(self) -> float:
        """Width of the cooled face [m]."""
        return 1e-3 * (self.width_mm or self.channel_count * self.channel_width_mm + (self.channel_count - 1) * self.web_mm)

    @property
    def channel(self) -> fd.RectChannel:
        """One channel."""
        return fd.RectChannel(self.channel_width_mm * 1e-3, self.channel_height_mm * 1e-3, self.length_mm * 1e-3)

    @property
    def metal_m3(self) -> float:
        """Volume of metal [m3]; the liquid is left out."""
        whole = self.width_m * 1e-3 * (self.base_mm + self.channel_height_mm + self.floor_mm)
        return 1e-3 * self.length_mm * (whole - self.channel_count * self.channel.area_m2)


SinkSpec = Annotated[TableSink | FanSink | NaturalSink | LiquidPlate, Field(discriminator="kind")]


def _at_most_one(spec, first: str, second: str) -> None:
    if getattr(spec, first) is not None and getattr(spec, second) is not None:
        raise RangeError(first, f"both {first} and {second}", "one of the two", f"give {first} or {second}")


def _one_of(spec, first: str, second: str) -> str:
    _at_most_one(spec, first, second)
    if getattr(spec, first) is None and getattr(spec, second) is None:
        raise RangeError(first, f"neither {first} nor {second}", "one of the two", f"give {first} or {second}")
    return first if getattr(spec, first) is not None else second


def _in_table(name: str, value: float, table) -> None:
    if not table[0] * (1 - 1e-9) <= value <= table[-1] * (1 + 1e-9):
        raise RangeError(name, f"{value:g}", f"{table[0]:g} to {table[-1]:g}, the flows of the table",
                         "extend the table by measurement; it is not continued beyond its ends")


def _share_fits(fluid: str, share, name: str) -> None:
    mixed = fluid in ("water-glycol", "water-propylene-glycol")
    if mixed and share is None:
        raise RangeError("glycol_mass_share", f"nothing beside {name} = '{fluid}'", "a mass share of 0.1 to 0.6", "add glycol_mass_share = 0.5")
    if not mixed and share is not None:
        raise RangeError("glycol_mass_share", f"{share:g} beside {name} = '{fluid}'", f"no share, or {name} = 'water-glycol'",
                         "remove the share, or change the fluid")


def _footprint_fits(footprint: Footprint, length_mm: float, width_mm: float) -> None:
    area = footprint.count * footprint.length_mm * footprint.width_mm
    if footprint.length_mm > length_mm or footprint.width_mm > width_mm * 1.0001 or area > length_mm * width_mm * 1.0001:
        raise RangeError("footprint", f"{footprint.count} of {footprint.length_mm:g} x {footprint.width_mm:g} mm",
                         f"what fits on {length_mm:g} x {width_mm:g} mm", "check the sizes; length runs along the flow")


def flow_m3_per_s_of(spec, stem: str = "flow"):
    """Flow or flows of a section [m3/s], from whichever of its fields ``<stem>_l_per_min`` and ``<stem>_m3_per_h`` is given."""
    liters = getattr(spec, f"{stem}_l_per_min", None)
    return np.asarray(liters, float) * _L_PER_MIN if liters is not None else np.asarray(getattr(spec, f"{stem}_m3_per_h"), float) * _M3_PER_H


# --- what comes back --------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class PlatePosition:
    """One module of several along a plate; ``number`` 1 gets the coolant first.

    Attributes
    ----------
    coolant_c, coolant_rise_k_per_w : float
        Coolant where the position begins [degC], with the rise of the heat upstream; that rise over the *total* heat [K/W].
    surface_rise_k_per_w : float
        Mean surface of the position above the plate's inlet, over the total heat [K/W].
    """

    number: int
    coolant_c: float
    coolant_rise_k_per_w: float
    surface_rise_k_per_w: float


@dataclass(frozen=True)
class SinkPoint:
    """A sink at work. ``None`` stands where a kind does not know a quantity.

    Attributes
    ----------
    kind : str
    r_th_k_per_w : float
        Mean surface to coolant at the inlet, for the total heat [K/W]; base and (where handed over) spreading inside.
    r_base_k_per_w, r_spreading_k_per_w : float or None
        Shares of it [K/W].
    inlet_c, heat_w, surface_c : float or None
        Inlet [degC], total heat [W] and mean surface temperature [degC] it was reckoned for; without heat the properties
        are those at the inlet.
    flow_m3_per_s, pressure_drop_pa : float or None
        Flow at inlet density [m3/s]; pressure over the mover [Pa] (ducts, loop and channels).
    outlet_rise_k, outlet_rise_k_per_w : float or None
        Coolant's own rise from inlet to outlet [K], and per watt [K/W].
    film_w_per_m2_k, fin_efficiency : float or None
        Film coefficient [W/(m2 K)] (air: referred to the inlet temperature; liquid: to the mean of the coolant; natural
        convection: radiation included), and efficiency of the fins or webs.
    reynolds, regime : float, str or None
        On the hydraulic diameter; ``laminar``, ``transition``, ``turbulent`` or ``edge`` (short channel above 2300).
    radiated_share : float or None
        Part of the heat that radiation takes.
    heat_capacity_j_per_k : float or None
        Of the metal [J/K].
    positions : tuple of PlatePosition
        Liquid plates only.
    flags, sources : tuple of str
        What to mistrust, in sentences; and where the rules come from.
    """

    kind: str
    r_th_k_per_w: float
    r_base_k_per_w: float | None = None
    r_spreading_k_per_w: float | None = None
    inlet_c: float | None = None
    heat_w: float | None = None
    surface_c: float | None = None
    flow_m3_per_s: float | None = None
    pressure_drop_pa: float | None = None
    outlet_rise_k: float | None = None
    outlet_rise_k_per_w: float | None = None
    film_w_per_m2_k: float | None = None
    fin_efficiency: float | None = None
    reynolds: float | None = None
    regime: str | None = None
    radiated_share: float | None = None
    heat_capacity_j_per_k: float | None = None
    positions: tuple[PlatePosition, ...] = ()
    flags: tuple[str, ...] = ()
    sources: tuple[str, ...] = ()


@dataclass(frozen=True)
class OperatingCurve:
    """For a picture of fan or pump against system.

    Attributes
    ----------
    flow_m3_per_s, mover_pa, system_pa : ndarray, shape (n,)
        Flows [m3/s] from zero or the curve's first point to its last, and both pressures there [Pa]; ``mover_pa`` is None
        where a flow is given and no curve.
    point_flow_m3_per_s, point_pa : float
        Where they meet.
    """

    flow_m3_per_s: np.ndarray
    mover_pa: np.ndarray | None
    system_pa: np.ndarray
    point_flow_m3_per_s: float
    point_pa: float


@dataclass(frozen=True)
class NaturalDependence:
    """How a sink in still air depends on its rise; arrays of shape (n,).

    ``rise_k`` [K] of the surface over the air, ``heat_w`` [W], ``r_th_k_per_w`` [K/W], ``radiated_share`` (part of the heat).
    """

    rise_k: np.ndarray
    heat_w: np.ndarray
    r_th_k_per_w: np.ndarray
    radiated_share: np.ndarray


# --- one door for all kinds -------------------------------------------------------------------------------------------


def sink_point(spec, *, inlet_c: float | None = None, heat_w: float | None = None, flow_m3_per_s: float | None = None, speed_ratio: float = 1.0,
               materials=None, spreading: Callable[..., float] | Literal[False] | None = None) -> SinkPoint:
    """Resistance and operating point of a sink.

    Parameters
    ----------
    spec : TableSink, FanSink, NaturalSink or LiquidPlate
    inlet_c : float, optional
        Coolant at the inlet, or still air [degC]; default: ``spec.coolant_c``.
    heat_w : float, optional
        Total heat [W]; default: ``spec.heat_w``. Without it properties are taken at the inlet. For natural convection it
        replaces what the file gives (heat or surface temperature).
    flow_m3_per_s : float, optional
        Flow that is forced through [m3/s], in place of the fan, the pump or the flow in the file.
    speed_ratio : float
        Speed of fan or pump over the speed of its curve, 0.05 to 2: flow goes with it, pressure with its square.
    materials : dict of Material, optional
        Default: the shipped ones.
    spreading : callable or False, optional
        ``spreading(source_m2, tile_m2, thickness_m, k_w_per_m_k, r_tile_k_per_w)`` -> extra resistance (mean over the footprint) of
        one footprint on its tile of the base [K/W], where ``r_tile_k_per_w`` is what one tile has below the base. Default: the
        closed form of :mod:`mission.thermal.spreading`; False leaves it out, with a flag.

    Returns
    -------
    SinkPoint

    Raises
    ------
    InputError
        No inlet temperature, unknown material, curves that do not meet.
    RangeError
        A number outside what the rules or the properties stand for.
    """
    fd.need_libraries()
    rule = {TableSink: _table_point, FanSink: _fan_point, NaturalSink: _natural_point, LiquidPlate: _plate_point}.get(type(spec))
    if rule is None:
        raise InputError("cooling.kind", f"{type(spec).__name__}", "flow-table, plate-fin-fan, plate-fin-natural or liquid-plate")
    inlet_c = _inlet(spec, inlet_c)
    if heat_w is None:
        heat_w = spec.heat_w
    else:
        require_range("heat_w", heat_w, low=0.0, low_open=True, unit="W")
    if flow_m3_per_s is not None:
        require_range("flow_m3_per_s", flow_m3_per_s, low=0.0, low_open=True, unit="m3/s")
    require_range("speed_ratio", speed_ratio, low=0.05, high=2.0)
    _mover_is_there(spec, flow_m3_per_s, speed_ratio)
    if type(spec) is TableSink:
        return _table_point(spec, inlet_c, heat_w, flow_m3_per_s)
    metal = _metal(spec, materials)
    point = rule(spec, inlet_c, heat_w, flow_m3_per_s, speed_ratio, metal[0])
    capacity = spec.heat_capacity_j_per_k or metal[1] * spec.metal_m3
    return _with_spreading(replace(point, heat_capacity_j_per_k=capacity), spec, metal[0], spreading)


def operating_curve(
    spec, *, inlet_c: float | None = None, heat_w: float | None = None, speed_ratio: float = 1.0, points: int = 101
) -> OperatingCurve:
    """Arrays for a picture of fan or pump against system.

    Parameters
    ----------
    spec : FanSink or LiquidPlate
    inlet_c, heat_w, speed_ratio
        As for :func:`sink_point`. The system is drawn with the properties at the operating point.
    points : int
        Number of flows, at least 3; the corners of the curve are added.

    Returns
    -------
    OperatingCurve

    Raises
    ------
    InputError
        A kind without flow, or curves that do not meet.
    """
    fd.need_libraries()
    if not isinstance(spec, (FanSink, LiquidPlate)):
        raise InputError(
            "cooling.kind", f"'{getattr(spec, 'kind', type(spec).__name__)}'", "plate-fin-fan or liquid-plate", "only these have a system to draw"
        )
    require_range("points", points, low=3, high=100000)
    require_range("speed_ratio", speed_ratio, low=0.05, high=2.0)
    _mover_is_there(spec, None, speed_ratio)
    inlet_c = _inlet(spec, inlet_c)
    stream = (_FanStream if isinstance(spec, FanSink) else _PlateStream)(spec, inlet_c, spec.heat_w if heat_w is None else heat_w)
    flow, _ = stream.settle(None, speed_ratio)
    mover = stream.mover(speed_ratio)
    if mover is None:
        grid = np.linspace(0.0, 1.5 * flow, points)
        pressure = None
    else:
        grid = np.union1d(np.linspace(mover.flow[0], mover.flow[-1], points), mover.flow)
        pressure = mover.pressure_pa(grid)
    return OperatingCurve(grid, pressure, np.array([stream.system_pa(v) for v in grid]), flow, stream.system_pa(flow))


def natural_dependence(spec: NaturalSink, rise_k=None, *, inlet_c: float | None = None, materials=None) -> NaturalDependence:
    """Resistance in still air over the rise of the surface.

    Parameters
    ----------
    spec : NaturalSink
    rise_k : array_like, shape (n,), optional
        Rises of the mounting surface over the air [K], 0.01 to 300; default: 5 to 100 in 20 steps.
    inlet_c : float, optional
        Air [degC]; default: ``spec.coolant_c``.
    materials : dict of Material, optional

    Returns
    -------
    NaturalDependence

    Raises
    ------
    RangeError
        A rise outside the range.
    """
    fd.need_libraries()
    if not isinstance(spec, NaturalSink):
        raise InputError(
            "cooling.kind", f"'{getattr(spec, 'kind', type(spec).__name__)}'", "plate-fin-natural", "other kinds depend on flow: use operating_curve"
        )
    rise = np.atleast_1d(require_range("rise_k", np.linspace(5.0, 100.0, 20) if rise_k is None else rise_k, low=0.01, high=300.0, unit="K"))
    inlet_c = _inlet(spec, inlet_c)
    k, _ = _metal(spec, materials)
    states = [_solve_fins(spec, inlet_c, k, rise_k=float(r)) for r in rise]
    heat = np.array([s.heat_w for s in states])
    return NaturalDependence(rise, heat, rise / heat, np.array([s.radiated_w / s.heat_w for s in states]))


def _inlet(spec, inlet_c):
    if inlet_c is None:
        inlet_c = spec.coolant_c
    if inlet_c is None:
        raise InputError("cooling.coolant_c", "nothing", "a coolant temperature at the inlet in degC", "add coolant_c, or hand over inlet_c")
    return float(require_range("inlet_c", inlet_c, low=-60.0, high=150.0, unit="degC"))


def _mover_is_there(spec, flow_m3_per_s, speed_ratio) -> None:
    if flow_m3_per_s is not None and isinstance(spec, NaturalSink):
        raise InputError("flow_m3_per_s", f"{flow_m3_per_s:g} m3/s for still air", "no flow with kind = 'plate-fin-natural'",
                         "choose kind = 'plate-fin-fan' for forced air")
    if speed_ratio != 1.0 and (flow_m3_per_s is not None or (getattr(spec, "fan", None) is None and getattr(spec, "pump", None) is None)):
        raise InputError("speed_ratio", f"{speed_ratio:g} where no fan or pump curve is used", "1", "give a fan or pump curve, or scale the flow")


def _metal(spec, materials) -> tuple[float, float]:
    """Conductivity [W/(m K)] and heat capacity of a volume [J/(m3 K)]."""
    materials = load_materials() if materials is None else materials
    material = materials.get(spec.material)
    if material is None:
        raise InputError("cooling.material", f"'{spec.material}'", "one of " + ", ".join(sorted(materials)), near_match(spec.material, materials))
    return spec.k_w_per_m_k or material.k_w_per_m_k, material.rho_kg_per_m3 * material.c_j_per_kg_k


def _closed_form():
    """Mean spreading after Lee et al. with its source; (False, "") where the package has no such module."""
    try:
        from .spreading import closed_form
    except ImportError:
        return False, ""

    def mean(source_m2, tile_m2, thickness_m, k_w_per_m_k, r_tile_k_per_w):
        return closed_form(min(source_m2, tile_m2) * 1e6, tile_m2 * 1e6, thickness_m * 1e3, k_w_per_m_k, r_tile_k_per_w).spreading_mean_k_per_w

    return mean, "S. Lee, S. Song, V. Au, K. P. Moran, ASME/JSME Thermal Engineering Conference 1995, vol. 4, 199-206 (spreading in the base)"


def _with_spreading(point: SinkPoint, spec, k: float, spreading) -> SinkPoint:
    if spec.footprint is None:
        return point
    base = spec.width_m * spec.length_mm * 1e-3
    count = spec.footprint.count
    source = spec.footprint.length_mm * spec.footprint.width_mm * 1e-6
    if spreading is None:
        spreading, source_words = _closed_form()
    else:
        source_words = "spreading resistance as handed over"
    if not spreading:
        if count * source > 0.999 * base:
            return point
        words = (f"the footprint covers {100 * count * source / base:.0f} % of the base, "
                 "and the crowding of heat under it is not in this resistance; it comes on top")
        return replace(point, flags=(*point.flags, words))
    extra = float(spreading(source, base / count, spec.base_mm * 1e-3, k, (point.r_th_k_per_w - point.r_base_k_per_w) * count)) / count
    total = point.r_th_k_per_w + extra
    positions = tuple(replace(p, surface_rise_k_per_w=p.surface_rise_k_per_w + extra * share * len(point.positions))
                      for p, share in zip(point.positions, _shares(spec) if point.positions else ()))
    return replace(point, r_th_k_per_w=total, r_spreading_k_per_w=extra, positions=positions, sources=(*point.sources, source_words),
                   surface_c=None if point.heat_w is None else point.inlet_c + total * point.heat_w)


# --- resistance against flow ------------------------------------------------------------------------------------------


def _table_point(spec: TableSink, inlet_c, heat_w, flow_m3_per_s) -> SinkPoint:
    flow = spec.at_m3_per_s if flow_m3_per_s is None else float(flow_m3_per_s)
    table = spec.table_m3_per_s
    _in_table("flow_m3_per_s", flow, table)

    def read(column):
        return None if column is None else float(np.exp(np.interp(np.log(flow), np.log(table), np.log(column))))

    r = read(spec.r_th_k_per_w)
    rise_per_w = None
    sources, flags = ["resistance against flow as given"], []
    if spec.fluid is not None:
        if spec.fluid == "air":
            fluid = fd.air_state(inlet_c, fd.air_pressure_pa(spec.altitude_m))
            sources.append(fd.SOURCE_AIR)
            if spec.altitude_m > 500:
                flags.append(f"the table is used as it stands at {spec.altitude_m:g} m; thinner air carries less heat at the same flow")
        else:
            fluid = fd.coolant_state(spec.fluid, inlet_c, spec.glycol_mass_share or 0.0)
            sources.append(fd.SOURCE_LIQUID)
        rise_per_w = 1.0 / (fluid.rho_kg_per_m3 * fluid.cp_j_per_kg_k * flow)
        if r < 0.5 * rise_per_w:
            flags.append(
                f"the table's {r:.4g} K/W is less than half of the coolant's own rise, {rise_per_w:.4g} K/W; it does not count from the inlet"
            )
    return SinkPoint(spec.kind, r, inlet_c=inlet_c, heat_w=heat_w, surface_c=None if heat_w is None else inlet_c + r * heat_w, flow_m3_per_s=flow,
                     pressure_drop_pa=read(spec.pressure_drop_pa), outlet_rise_k_per_w=rise_per_w,
                     outlet_rise_k=None if heat_w is None or rise_per_w is None else heat_w * rise_per_w,
                     heat_capacity_j_per_k=spec.heat_capacity_j_per_k, flags=tuple(flags), sources=tuple(sources))


# --- where mover and system meet --------------------------------------------------------------------------------------


class _Mover:
    """A fan or pump at a speed and a density: flow goes with the speed, pressure with its square and with the density."""

    def __init__(self, curve: FlowCurve, speed_ratio: float, density: float, default_density: float):
        self.flow = curve.flow_m3_per_s * speed_ratio
        self.pressure = np.asarray(curve.pressure_pa, float) * speed_ratio**2 * density / (curve.at_density_kg_per_m3 or default_density)

    def pressure_pa(self, flow):
        """Pressure [Pa] at ``flow`` [m3/s], any shape."""
        return np.interp(flow, self.flow, self.pressure)


def _meet(mover: _Mover, system_pa, where: str) -> tuple[float, tuple[str, ...]]:
    """Flow at which mover and system agree: the largest one, which is the stable one."""
    from scipy.optimize import brentq

    def excess(v):
        return float(mover.pressure_pa(v)) - system_pa(v)

    grid = np.union1d(np.linspace(mover.flow[0], mover.flow[-1], 65), mover.flow)
    left = np.array([excess(v) for v in grid])
    crossings = np.flatnonzero((left[:-1] > 0) & (left[1:] <= 0))
    if left[-1] > 0:
        raise InputError(where, f"a curve that still has {left[-1]:.4g} Pa to spare at its end, {grid[-1] * 3600:.4g} m3/h",
                         "a curve that reaches the pressure drop of the system",
                         "continue the curve to the flow without back pressure, or add what else resists the flow")
    if crossings.size == 0:
        raise InputError(
            where,
            f"a curve whose first point, {grid[0] * 3600:.4g} m3/h, already lies {-left[0]:.4g} Pa below the pressure drop of the system",
            "a curve that begins above it",
            "add points at smaller flow, or open the system",
        )
    k = crossings[-1]
    flow = brentq(excess, grid[k], grid[k + 1], xtol=1e-15, rtol=1e-13)
    flags = []
    if crossings.size > 1:
        flags.append(f"the curve meets the system {crossings.size} times; the largest flow is taken, and the mover may settle at a smaller one")
    slope = np.interp(flow * 1.001, mover.flow, mover.pressure) - np.interp(flow * 0.999, mover.flow, mover.pressure)
    if slope > 0:
        flags.append("the mover works where its curve rises with flow, which may be unsteady")
    return flow, tuple(flags)


class _Stream(ABC):
    """Flow through a sink: what mover and system agree on, with the properties at the coolant's mean temperature."""

    where = ""
    default_density = 1.2

    def __init__(self, spec, inlet_c: float, heat_w: float | None):
        self.spec, self.inlet_c, self.heat_w = spec, inlet_c, heat_w
        self.inlet = self.mean = self.state(inlet_c)

    @abstractmethod
    def state(self, t_c: float) -> fd.FluidState: ...

    @abstractmethod
    def curve(self) -> FlowCurve | None: ...

    @abstractmethod
    def given_m3_per_s(self) -> float: ...

    @abstractmethod
    def system_pa(self, flow: float) -> float: ...

    def mover(self, speed_ratio: float) -> _Mover | None:
        return None if self.curve() is None else _Mover(self.curve(), speed_ratio, self.inlet.rho_kg_per_m3, self.default_density)

    def settle(self, flow_m3_per_s, speed_ratio: float) -> tuple[float, tuple[str, ...]]:
        """Flow [m3/s] at inlet density and what there is to say; afterwards ``mean`` holds the properties at the mean temperature."""
        mover = self.mover(speed_ratio) if flow_m3_per_s is None else None
        flow = flow_m3_per_s if flow_m3_per_s is not None else None if mover else self.given_m3_per_s()
        flags: tuple[str, ...] = ()
        for _ in range(60):
            if mover:
                flow, flags = _meet(mover, self.system_pa, self.where)
            half_rise = 0.0 if self.heat_w is None else 0.5 * self.heat_w / (self.inlet.rho_kg_per_m3 * flow * self.mean.cp_j_per_kg_k)
            t_c = self.inlet_c + half_rise
            if abs(t_c - self.mean.t_c) < 1e-9:
                return flow, flags
            try:
                self.mean = self.state(t_c)
            except RangeError as err:
                raise RangeError("heat_w", f"{self.heat_w:g} W, which warms the coolant to a mean of {t_c:.4g} degC", err.allowed,
                                 "raise the flow, or lower the heat") from None
        return flow, (*flags, "flow and warming of the coolant did not settle to the last digit")


class _FanStream(_Stream):
    where = "cooling.fan"

    def __init__(self, spec: FanSink, inlet_c, heat_w):
        from fluids.fittings import contraction_sharp, diffuser_sharp

        self.p_pa = fd.air_pressure_pa(spec.altitude_m)
        self.gaps = spec.fin_count - 1
        open_share = self.gaps * spec.gap_mm * 1e-3 / spec.width_m
        self.loss = float(contraction_sharp(Di1=1.0, Di2=math.sqrt(open_share)) + diffuser_sharp(Di1=math.sqrt(open_share), Di2=1.0))
        self.duct = None if spec.duct is None else fd.RectChannel(spec.duct.width_mm * 1e-3, spec.duct.height_mm * 1e-3, spec.duct.length_mm * 1e-3)
        super().__init__(spec, inlet_c, heat_w)

    def state(self, t_c):
        return fd.air_state(t_c, self.p_pa)

    def curve(self):
        return self.spec.fan

    def given_m3_per_s(self):
        _one_of(self.spec, "flow_m3_per_h", "fan")
        return self.spec.flow_m3_per_h * _M3_PER_H

    def system_pa(self, flow):
        mass = self.inlet.rho_kg_per_m3 * flow
        total = fd.channel_pressure_pa(mass / self.gaps, self.spec.channel, self.mean, self.loss)
        if self.duct is not None:
            if self.duct.length_m > 0.0:
                total += fd.channel_pressure_pa(mass, self.duct, self.inlet, self.spec.duct.loss_coefficient)
            else:
                total += self.spec.duct.loss_coefficient * 0.5 * self.inlet.rho_kg_per_m3 * (flow / self.duct.area_m2) ** 2
        return total


class _PlateStream(_Stream):
    where = "cooling.pump"
    default_density = 998.0

    def __init__(self, spec: LiquidPlate, inlet_c, heat_w):
        if spec.loss_coefficient is None:
            from fluids.fittings import entrance_sharp, exit_normal

            self.loss = float(entrance_sharp() + exit_normal())
        else:
            self.loss = spec.loss_coefficient
        super().__init__(spec, inlet_c, heat_w)

    def state(self, t_c):
        return fd.coolant_state(self.spec.fluid, t_c, self.spec.glycol_mass_share or 0.0)

    def curve(self):
        return self.spec.pump

    def given_m3_per_s(self):
        _one_of(self.spec, "flow_l_per_min", "pump")
        return self.spec.flow_l_per_min * _L_PER_MIN

    def system_pa(self, flow):
        total = fd.channel_pressure_pa(self.inlet.rho_kg_per_m3 * flow / self.spec.channel_count, self.spec.channel, self.mean, self.loss)
        if self.spec.loop_pa is not None:
            total += self.spec.loop_pa * (flow / (self.spec.loop_l_per_min * _L_PER_MIN)) ** 2
        return total


def _band_flags(what: str, re: float, pr: float, word: str) -> tuple[str, ...]:
    if word == "transition":
        return (
            f"the Reynolds number in the {what}, {re:.0f}, lies between {fd.RE_LAMINAR:.0f} and {fd.RE_TURBULENT:.0f}, "
            "where flow may be laminar or turbulent: "
            "film and friction are read from a straight line between the two",
        )
    if word == "edge":
        return (
            f"the {what} are so short that boundary layers from their edge govern at Reynolds number {re:.0f}; "
            "the laminar rule for them is used beyond its range",
        )
    if word == "turbulent" and (re > 5e6 or not 0.5 < pr < 2000):
        return (f"Reynolds number {re:.3g} or Prandtl number {pr:.3g} lies outside the range of the turbulent rule (up to 5e6; 0.5 to 2000)",)
    return ()


# --- plate fins with a fan --------------------------------------------------------------------------------------------


def fin_efficiency(film_w_per_m2_k: float, height_m: float, thickness_m: float, k_w_per_m_k: float, length_m: float = math.inf) -> float:
    """Efficiency of a straight fin cooled on both faces, no heat through its tip.

    Parameters
    ----------
    film_w_per_m2_k : float
        Film coefficient, mean of both faces [W/(m2 K)].
    height_m, thickness_m : float
        From root to tip, and across [m].
    k_w_per_m_k : float
        Conductivity [W/(m K)].
    length_m : float
        Along the root [m]; finite: both ends are cooled like the faces.

    Notes
    -----
    tanh(m H)/(m H) with m^2 = 2 h (L + t)/(k L t): textbook fin, one-dimensional (film times thickness over conductivity well below 1).

    Examples
    --------
    >>> round(fin_efficiency(26.2969, 0.04, 0.001, 201.0, 0.15), 6)
    0.879749
    """
    ends = 0.0 if math.isinf(length_m) else thickness_m / length_m
    mh = height_m * math.sqrt(2.0 * film_w_per_m2_k * (1.0 + ends) / (k_w_per_m_k * thickness_m))
    return math.tanh(mh) / mh if mh > 1e-6 else 1.0 - mh**2 / 3.0


def teertstra_nusselt(re_star: float, pr: float) -> float:
    """Nusselt number (on the gap, film to *inlet* air) of laminar flow through plate fins.

    Parameters
    ----------
    re_star : float
        Speed times gap over kinematic viscosity, times gap over length.
    pr : float
        Prandtl number.

    Notes
    -----
    Source: Teertstra et al. 1999. Long channels saturate at half of ``re_star pr``, where the air leaves as warm as the
    fins: the air's own warming is inside, and nothing is to be added for it.

    Examples
    --------
    >>> round(teertstra_nusselt(15.1038, 0.707), 4)
    2.9996
    """
    saturated = 0.5 * re_star * pr
    edge = 0.664 * math.sqrt(re_star) * pr ** (1 / 3) * math.sqrt(1.0 + 3.65 / math.sqrt(re_star))
    low, high = min(saturated, edge), max(saturated, edge)
    return low * (1.0 + (low / high) ** 3) ** (-1 / 3)


def fin_film(speed_m_per_s: float, channel: fd.RectChannel, air: fd.FluidState) -> tuple[float, float, str]:
    """Film coefficient in the gaps of plate fins, referred to the air at the inlet.

    Parameters
    ----------
    speed_m_per_s : float
        Mean speed in the gap, at the density of ``air`` [m/s].
    channel : RectChannel
        Width: gap; height: fin height.
    air : FluidState
        At the mean temperature of the air.

    Returns
    -------
    film_w_per_m2_k, reynolds, band : float, float, str

    Notes
    -----
    Laminar: :func:`teertstra_nusselt`. Turbulent: Gnielinski on the hydraulic diameter with entrance, turned from mean air to inlet
    air by the number of transfer units. See :func:`mission.thermal.fluids_data.by_band`.
    """
    re = speed_m_per_s * channel.hydraulic_m / air.nu_m2_per_s
    gap, wetted = channel.width_m, channel.length_m * (2 * channel.height_m + channel.width_m)

    def laminar(r):
        return teertstra_nusselt(r * gap / channel.hydraulic_m * gap / channel.length_m, air.pr) * air.k_w_per_m_k / gap

    def turbulent(r):
        carried = r * air.nu_m2_per_s / channel.hydraulic_m * channel.area_m2 * air.rho_kg_per_m3 * air.cp_j_per_kg_k
        film = fd.nusselt_turbulent(r, air.pr, channel.hydraulic_m / channel.length_m) * air.k_w_per_m_k / channel.hydraulic_m
        return carried / wetted * -math.expm1(-film * wetted / carried)

    film, band = fd.by_band(re, laminar, turbulent)
    return film, re, band


def finned_resistance(film_w_per_m2_k: float, *, fin_count: int, fin_m: float, channel: fd.RectChannel, k_w_per_m_k: float,
                      outer_faces: bool = True) -> tuple[float, float]:
    """Resistance from the root of plate fins to the air that the film refers to, and the fins' efficiency.

    Parameters
    ----------
    film_w_per_m2_k : float
        [W/(m2 K)]
    fin_count, fin_m : int, float
        Number and thickness [m] of the fins; there is a gap less than fins.
    channel : RectChannel
        One gap.
    k_w_per_m_k : float
        [W/(m K)]
    outer_faces : bool
        Whether the outer faces of the two outer fins are cooled as well.

    Returns
    -------
    r_k_per_w, efficiency : float, float

    Notes
    -----
    Fin faces (with efficiency) and the root area between the fins, both at the root's temperature; tips carry nothing.
    """
    eta = fin_efficiency(film_w_per_m2_k, channel.height_m, fin_m, k_w_per_m_k, channel.length_m)
    faces = 2 * (fin_count if outer_faces else fin_count - 1)
    area = channel.length_m * (faces * channel.height_m * eta + (fin_count - 1) * channel.width_m)
    return 1.0 / (film_w_per_m2_k * area), eta


def _fan_point(spec: FanSink, inlet_c, heat_w, flow_m3_per_s, speed_ratio, k) -> SinkPoint:
    stream = _FanStream(spec, inlet_c, heat_w)
    flow, flags = stream.settle(flow_m3_per_s, speed_ratio)
    air, channel = stream.mean, spec.channel
    mass = stream.inlet.rho_kg_per_m3 * flow
    speed = mass / (air.rho_kg_per_m3 * stream.gaps * channel.area_m2)
    film, re, band = fin_film(speed, channel, air)
    r_film, eta = finned_resistance(
        film, fin_count=spec.fin_count, fin_m=spec.fin_mm * 1e-3, channel=channel, k_w_per_m_k=k, outer_faces=spec.outer_faces_cooled
    )
    carried = mass * air.cp_j_per_kg_k
    flags = [*flags, *_band_flags("gaps", re, air.pr, band)]
    if r_film * carried < 1.0:
        r_film = 1.0 / carried
        flags.append("the air leaves as warm as the fins: its own rise limits the sink, and more or longer fins change nothing")
    re_star = re * channel.width_m**2 / (channel.hydraulic_m * channel.length_m)
    if band in ("laminar", "edge") and not TEERTSTRA_RANGE[0] <= re_star <= TEERTSTRA_RANGE[1]:
        flags.append(
            f"the channel Reynolds number {re_star:.3g} (gap over length) lies outside {TEERTSTRA_RANGE[0]:g} to {TEERTSTRA_RANGE[1]:g}, "
            "where the rule was tested"
        )
    if speed > 0.2 * 340.0:
        flags.append(f"the air in the gaps is as fast as {speed:.0f} m/s; its compression is not reckoned")
    r_base = spec.base_mm * 1e-3 / (k * spec.width_m * channel.length_m)
    total = r_base + r_film
    sources = [SOURCE_TEERTSTRA] if band in ("laminar", "edge", "transition") else []
    sources += [fd.SOURCE_GNIELINSKI] if band in ("turbulent", "transition") else []
    sources += [fd.SOURCE_BAND] if band == "transition" else []
    sources += [fd.SOURCE_APPARENT, fd.SOURCE_SHAH_LONDON] if band != "turbulent" else []
    return SinkPoint(spec.kind, total, r_base_k_per_w=r_base, inlet_c=inlet_c, heat_w=heat_w,
                     surface_c=None if heat_w is None else inlet_c + total * heat_w, flow_m3_per_s=flow, pressure_drop_pa=stream.system_pa(flow),
                     outlet_rise_k=None if heat_w is None else heat_w / carried, outlet_rise_k_per_w=1.0 / carried, film_w_per_m2_k=film,
                     fin_efficiency=eta, reynolds=re, regime=band, flags=tuple(flags), sources=(*sources, SOURCE_ENDS, fd.SOURCE_AIR))


# --- plate fins in still air ------------------------------------------------------------------------------------------


def view_factor_opposite(a_m: float, b_m: float, distance_m: float) -> float:
    """View factor between equal, aligned, parallel rectangles a x b [m] at a distance [m]. Closed form, exact (textbook).

    Examples
    --------
    >>> round(view_factor_opposite(1.0, 1.0, 1.0), 4)
    0.1998
    """
    x, y = a_m / distance_m, b_m / distance_m
    xs, ys = math.sqrt(1 + x * x), math.sqrt(1 + y * y)
    s = (
        0.5 * math.log1p(x * x * y * y / (1 + x * x + y * y))
        + x * ys * math.atan(x / ys)
        + y * xs * math.atan(y / xs)
        - x * math.atan(x)
        - y * math.atan(y)
    )
    return max(2.0 / (math.pi * x * y) * s, 0.0)


def view_factor_corner(common_m: float, from_m: float, to_m: float) -> float:
    """View factor from a rectangle (common edge x ``from_m``) to one at a right angle to it (common edge x ``to_m``) [m].

    Closed form, exact (textbook).

    Examples
    --------
    >>> round(view_factor_corner(1.0, 1.0, 1.0), 4)
    0.2
    """
    w, h = from_m / common_m, to_m / common_m
    w2, h2, s2 = w * w, h * h, w * w + h * h
    logs = math.log((1 + w2) * (1 + h2) / (1 + s2)) + w2 * math.log(w2 * (1 + s2) / ((1 + w2) * s2)) + h2 * math.log(h2 * (1 + s2) / ((1 + h2) * s2))
    return (w * math.atan(1 / w) + h * math.atan(1 / h) - math.sqrt(s2) * math.atan(1 / math.sqrt(s2)) + 0.25 * logs) / (math.pi * w)


def channel_exchange_m2(channel: fd.RectChannel, emissivity: float) -> float:
    """Black area [m2] that radiates as much as one channel open in front and at both ends.

    Walls of one temperature and ``emissivity`` (0 to 1) against cold black surroundings: an enclosure of two surfaces. What leaves
    through one opening and comes in by another is taken off exactly, with the view factors between the openings.
    """
    if emissivity == 0.0:
        return 0.0
    b, h, length = channel.width_m, channel.height_m, channel.length_m
    walls = length * (2 * h + b)
    front, end = length * b, h * b
    between = 4 * end * view_factor_corner(b, h, length) + 2 * end * view_factor_opposite(b, h, length)
    seen = front + 2 * end - between
    return 1.0 / ((1.0 - emissivity) / (emissivity * walls) + 1.0 / seen)


@dataclass(frozen=True)
class _FinState:
    rise_k: float
    heat_w: float
    radiated_w: float
    film_w_per_m2_k: float
    efficiency: float
    rayleigh_gap: float
    rayleigh_length: float


def bar_cohen_nusselt(rayleigh: float) -> float:
    """Nusselt number (on the gap, film to inlet air) of a vertical channel between plates of one temperature.

    ``rayleigh``: on the gap, times gap over length. Source: Bar-Cohen and Rohsenow 1984; laminar, two plates.

    Examples
    --------
    >>> round(bar_cohen_nusselt(1e-2) / (1e-2 / 24), 3), round(bar_cohen_nusselt(1e6) / (0.59 * 1e6**0.25), 2)
    (1.0, 1.0)
    """
    return (576.0 / rayleigh**2 + 2.873 / math.sqrt(rayleigh)) ** -0.5


def _fin_state(spec: NaturalSink, air_c: float, k: float, root_rise_k: float) -> _FinState:
    """Heat of the fins when their root stands ``root_rise_k`` above the air."""
    from ht import q_rad
    from ht.conv_free_immersed import Nu_vertical_plate_Churchill

    air = fd.air_state(round(air_c + 0.5 * root_rise_k, 9), fd.air_pressure_pa(spec.altitude_m))
    channel, gaps, fin = spec.channel, spec.fin_count - 1, spec.fin_mm * 1e-3
    length, height = channel.length_m, channel.height_m
    drive = 9.80665 * root_rise_k / (air.t_c + 273.15) / air.nu_m2_per_s**2  # Grashof number over length cubed; ideal gas
    ra_gap = drive * channel.width_m**4 / length * air.pr
    ra_length = drive * length**3 * air.pr
    inner = bar_cohen_nusselt(ra_gap) * air.k_w_per_m_k / channel.width_m
    outer = float(Nu_vertical_plate_Churchill(air.pr, ra_length / air.pr)) * air.k_w_per_m_k / length
    surroundings_c = air_c if spec.surroundings_c is None else spec.surroundings_c
    flux = float(q_rad(1.0, air_c + root_rise_k + 273.15, surroundings_c + 273.15)) / root_rise_k  # of a black face, per kelvin of rise
    walls = length * (2 * height + channel.width_m)
    inner_rad = flux * channel_exchange_m2(channel, spec.emissivity) / walls
    outer_rad = flux * spec.emissivity
    # q = sum of film, area, efficiency; between fins both faces are alike, at the ends one looks outwards
    h_in, h_out = max(inner + inner_rad, 0.0), max(outer + outer_rad, 0.0)
    eta_in = fin_efficiency(h_in, height, fin, k)
    eta_end = fin_efficiency(0.5 * (h_in + h_out), height, fin, k)
    area_in = length * ((2 * gaps - 2) * height * eta_in + 2 * height * eta_end + gaps * channel.width_m)
    area_out = 2 * length * height * eta_end
    tips = length * fin * ((spec.fin_count - 2) * eta_in + 2 * eta_end) * outer_rad
    heat = root_rise_k * ((inner + inner_rad) * area_in + (outer + outer_rad) * area_out + tips)
    radiated = root_rise_k * (inner_rad * area_in + outer_rad * area_out + tips)
    return _FinState(root_rise_k, heat, radiated, inner + inner_rad, eta_in, ra_gap, ra_length)


def _solve_fins(spec: NaturalSink, air_c: float, k: float, *, rise_k: float | None = None, heat_w: float | None = None) -> _FinState:
    """State with the mounting surface ``rise_k`` above the air, or at ``heat_w``."""
    from scipy.optimize import brentq

    r_base = spec.base_mm * 1e-3 / (k * spec.width_m * spec.length_mm * 1e-3)
    if rise_k is not None:
        if _fin_state(spec, air_c, k, rise_k).heat_w <= 0.0:
            raise RangeError("surroundings_c", f"{spec.surroundings_c:g} degC, from which the sink takes up more than it gives away",
                             "colder surroundings or a larger rise", "check the temperature, or shield the sink")

        def excess(root_rise_k):
            return root_rise_k + r_base * _fin_state(spec, air_c, k, root_rise_k).heat_w - rise_k

        low = 1e-3 * rise_k
        if excess(low) > 0.0:
            raise RangeError("surroundings_c", f"{spec.surroundings_c:g} degC, which cool the fins below the air at a rise of {rise_k:g} K",
                             "a rise that keeps all of the sink above the air", "take a larger rise, or warmer surroundings")
        root = brentq(excess, low, rise_k, xtol=1e-12, rtol=1e-12)
        return _fin_state(spec, air_c, k, root)
    low, high = 1e-3, 300.0
    if _fin_state(spec, air_c, k, high).heat_w < heat_w:
        raise RangeError("heat_w", f"{heat_w:g} W, which needs a rise of more than {high:g} K",
                         f"at most {_fin_state(spec, air_c, k, high).heat_w:.4g} W", "take a larger sink or a fan; check the unit of the heat")
    if _fin_state(spec, air_c, k, low).heat_w > heat_w:
        raise RangeError("heat_w", f"{heat_w:g} W, less than the sink takes up from its surroundings", "a heat that keeps the sink above the air",
                         "check surroundings_c")
    return _fin_state(spec, air_c, k, brentq(lambda r: _fin_state(spec, air_c, k, r).heat_w - heat_w, low, high, xtol=1e-12, rtol=1e-12))


def _natural_point(spec: NaturalSink, inlet_c, heat_w, flow_m3_per_s, speed_ratio, k) -> SinkPoint:
    if heat_w is not None:
        state = _solve_fins(spec, inlet_c, k, heat_w=heat_w)
    else:
        _one_of(spec, "surface_c", "heat_w")
        if spec.surface_c - inlet_c < 0.01:
            raise RangeError(
                "surface_c", f"{spec.surface_c:g} degC in air of {inlet_c:g} degC", "a surface warmer than the air", "raise surface_c, or give heat_w"
            )
        if spec.surface_c - inlet_c > 300.0:
            raise RangeError("surface_c", f"{spec.surface_c:g} degC in air of {inlet_c:g} degC", "a rise of at most 300 K", "check the unit")
        state = _solve_fins(spec, inlet_c, k, rise_k=spec.surface_c - inlet_c)
    channel = spec.channel
    r_base = spec.base_mm * 1e-3 / (k * spec.width_m * channel.length_m)
    total = r_base + state.rise_k / state.heat_w
    flags = []
    if channel.height_m < 2 * channel.width_m:
        flags.append("the fins are lower than two gaps: air comes in from the front, which the rule for two plates does not know")
    if state.rayleigh_length > 1e9:
        flags.append(
            f"the Rayleigh number on the length, {state.rayleigh_length:.2g}, is above 1e9: "
            "the boundary layer turns turbulent, the rule for the gaps is laminar"
        )
    if state.rayleigh_gap < 0.2 or state.rayleigh_gap > 1e5:
        flags.append(
            f"the Rayleigh number on the gap, {state.rayleigh_gap:.2g}, lies outside about 0.2 to 1e5, "
            "where the rule for two plates was compared with measurements (range from memory)"
        )
    sources = (SOURCE_BAR_COHEN, SOURCE_CHURCHILL_CHU, *((SOURCE_RADIATION,) if spec.emissivity > 0 else ()), fd.SOURCE_AIR)
    return SinkPoint(spec.kind, total, r_base_k_per_w=r_base, inlet_c=inlet_c, heat_w=state.heat_w, surface_c=inlet_c + total * state.heat_w,
                     film_w_per_m2_k=state.film_w_per_m2_k, fin_efficiency=state.efficiency, radiated_share=state.radiated_w / state.heat_w,
                     flags=tuple(flags), sources=sources)


# --- liquid plate -----------------------------------------------------------------------------------------------------


def _shares(spec: LiquidPlate) -> np.ndarray:
    return np.full(spec.positions, 1.0 / spec.positions) if spec.heat_shares is None else np.asarray(spec.heat_shares, float)


def _plate_point(spec: LiquidPlate, inlet_c, heat_w, flow_m3_per_s, speed_ratio, k) -> SinkPoint:
    stream = _PlateStream(spec, inlet_c, heat_w)
    flow, flags = stream.settle(flow_m3_per_s, speed_ratio)
    liquid, channel, count = stream.mean, spec.channel, spec.channel_count
    mass = stream.inlet.rho_kg_per_m3 * flow
    re = mass / (count * channel.area_m2 * liquid.rho_kg_per_m3) * channel.hydraulic_m / liquid.nu_m2_per_s
    nusselt, band = fd.by_band(re, lambda r: fd.nusselt_laminar(r, liquid.pr, channel),
                               lambda r: fd.nusselt_turbulent(r, liquid.pr, channel.hydraulic_m / channel.length_m))
    film = nusselt * liquid.k_w_per_m_k / channel.hydraulic_m
    # webs are fins with a face in either channel; the floor is left out, and so is the outside of the outer channels
    eta = fin_efficiency(film, channel.height_m, spec.web_mm * 1e-3, k)
    r_film = 1.0 / (film * channel.length_m * (count * channel.width_m + 2 * (count - 1) * channel.height_m * eta))
    r_base = spec.base_mm * 1e-3 / (k * spec.width_m * channel.length_m)
    per_w = 1.0 / (mass * liquid.cp_j_per_kg_k)
    shares = _shares(spec)
    upstream = np.concatenate([[0.0], np.cumsum(shares)[:-1]])
    surface = (upstream + 0.5 * shares) * per_w + shares * spec.positions * (r_base + r_film)
    positions = tuple(
        PlatePosition(n + 1, float(inlet_c + (heat_w or 0.0) * per_w * upstream[n]), float(per_w * upstream[n]), float(surface[n]))
        for n in range(spec.positions)
    )
    total = float(surface.mean())
    flags = [*flags, *_band_flags("channels", re, liquid.pr, band)]
    wall = surface - shares * spec.positions * r_base
    if heat_w is not None and inlet_c + heat_w * wall.max() > 100.0:
        flags.append(f"the channel walls reach {inlet_c + heat_w * wall.max():.0f} degC; boiling is not reckoned")
    if band == "laminar" and liquid.pr < 0.1:
        flags.append(f"Prandtl number {liquid.pr:.3g} lies below 0.1, the range of the laminar rule")
    sources = [fd.SOURCE_COMBINED, fd.SOURCE_SHAH_LONDON, fd.SOURCE_APPARENT] if band in ("laminar", "edge", "transition") else []
    sources += [fd.SOURCE_GNIELINSKI] if band in ("turbulent", "transition") else []
    sources += [fd.SOURCE_BAND] if band == "transition" else []
    return SinkPoint(spec.kind, total, r_base_k_per_w=r_base, inlet_c=inlet_c, heat_w=heat_w,
                     surface_c=None if heat_w is None else inlet_c + total * heat_w, flow_m3_per_s=flow, pressure_drop_pa=stream.system_pa(flow),
                     outlet_rise_k=None if heat_w is None else heat_w * per_w, outlet_rise_k_per_w=per_w, film_w_per_m2_k=film, fin_efficiency=eta,
                     reynolds=re, regime=band, positions=positions, flags=tuple(flags), sources=(*sources, fd.SOURCE_LIQUID))
