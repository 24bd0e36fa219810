"""The data of a power module as a checked, frozen model.

A module file holds what a data sheet prints: ratings, gate data, on-state and
energy curves at several temperatures, thermal branches, and the failure modes
with the lifetime model to use for each. All units are in the key names.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field, field_validator, model_validator

from ..errors import RangeError
from ..tomlfile import FileModel
from .coupling import Coupling, check_coupling
from .curves import broken_line
from .plate import PlateSpec, check_plate

# A number in quotes or a true/false is a slip, not a number.
Number = Annotated[float, Field(strict=True)]
Positive = Annotated[float, Field(strict=True, gt=0)]
NotNegative = Annotated[float, Field(strict=True, ge=0)]
Numbers = tuple[Number, ...]
Text = Annotated[str, Field(min_length=1)]

#: Energy over (reference voltage x nominal current) [s]. Real chips lie between 0.05 and 3 microseconds;
#: millijoules entered as joules come out a thousand times higher.
ENERGY_TIME_LIMIT_S = 20e-6


class Ratings(FileModel):
    """What the module may do."""

    v_ces_v: Positive
    i_nominal_a: Positive
    i_peak_repetitive_a: Positive
    t_vj_op_max_c: Number
    t_vj_op_min_c: Number
    t_vj_overload_c: Number | None = None
    overload_longest_s: Positive | None = None
    overload_share: Annotated[float, Field(strict=True, gt=0, le=1)] | None = None

    @model_validator(mode="after")
    def _sensible(self):
        overload = (self.t_vj_overload_c, self.overload_longest_s, self.overload_share)
        if any(v is None for v in overload) and any(v is not None for v in overload):
            raise RangeError(
                "t_vj_overload_c",
                "only some of t_vj_overload_c, overload_longest_s, overload_share",
                "all three or none",
                "a permitted overload needs its temperature, its longest time and its share of the time",
            )
        if self.t_vj_overload_c is not None:
            _plausible_temperature("t_vj_overload_c", self.t_vj_overload_c)
            if self.t_vj_overload_c <= self.t_vj_op_max_c:
                raise RangeError(
                    "t_vj_overload_c",
                    f"t_vj_overload_c = {self.t_vj_overload_c:g} degC not above t_vj_op_max_c = {self.t_vj_op_max_c:g} degC",
                    "an overload temperature above the continuous one",
                    "leave the three overload keys out where the data sheet permits none",
                )
        if self.i_peak_repetitive_a < self.i_nominal_a:
            raise RangeError(
                "i_peak_repetitive_a",
                f"i_peak_repetitive_a = {self.i_peak_repetitive_a:g} A below i_nominal_a = {self.i_nominal_a:g} A",
                "a repetitive peak current of at least the nominal current",
                "check whether the two were exchanged",
            )
        if self.t_vj_op_max_c <= self.t_vj_op_min_c:
            raise RangeError(
                "t_vj_op_max_c",
                f"t_vj_op_max_c = {self.t_vj_op_max_c:g} degC not above t_vj_op_min_c = {self.t_vj_op_min_c:g} degC",
                "a highest junction temperature above the lowest",
                "check whether the two were exchanged",
            )
        _plausible_temperature("t_vj_op_max_c", self.t_vj_op_max_c)
        _plausible_temperature("t_vj_op_min_c", self.t_vj_op_min_c)
        return self


class Gate(FileModel):
    """Gate data of one switch; the charge belongs to the swing from ``v_off_v`` to ``v_on_v``."""

    charge_c: Annotated[float, Field(strict=True, gt=0, le=1e-3)]
    v_on_v: Number
    v_off_v: Number
    r_internal_ohm: NotNegative
    r_on_ohm: NotNegative
    r_off_ohm: NotNegative

    @model_validator(mode="after")
    def _sensible(self):
        if self.v_on_v <= self.v_off_v:
            raise RangeError(
                "v_on_v",
                f"v_on_v = {self.v_on_v:g} V not above v_off_v = {self.v_off_v:g} V",
                "a turn-on voltage above the turn-off voltage",
                "v_off_v is often negative: check its sign",
            )
        for name in ("r_on_ohm", "r_off_ohm"):
            if self.r_internal_ohm + getattr(self, name) <= 0:
                raise RangeError(
                    name,
                    f"r_internal_ohm and {name} both zero",
                    "some resistance in the gate loop",
                    "enter at least one of them",
                )
        return self


def _plausible_temperature(name, t_c):
    if not -80.0 <= t_c <= 260.0:
        raise RangeError(
            name,
            f"{name} = {t_c:g} degC",
            "-80 to 260 degC",
            "check whether it was meant in kelvin; this key is in degrees Celsius",
        )


class _Curve(FileModel):
    t_vj_c: Number
    current_a: Numbers

    @field_validator("t_vj_c")
    @classmethod
    def _celsius(cls, value):
        _plausible_temperature("t_vj_c", value)
        return value

    @field_validator("current_a")
    @classmethod
    def _current(cls, value):
        if len(value) < 2:
            raise RangeError(
                "current_a",
                f"{len(value)} point{'' if len(value) == 1 else 's'}",
                "at least 2 points",
                "add points of the data-sheet curve",
            )
        if value[0] < 0:
            raise RangeError(
                "current_a",
                f"the negative current {value[0]:g} A at point 1",
                "currents of at least 0 A",
                "enter the curve of the conducting direction",
            )
        for k, (a, b) in enumerate(pairwise(value), 2):
            if b <= a:
                raise RangeError(
                    "current_a",
                    f"{b:g} A at point {k} after {a:g} A",
                    "currents that rise from point to point",
                    "sort the points and remove doubles",
                )
        return value

    def _same_length(self, name):
        n, m = len(self.current_a), len(self.values)
        if n != m:
            raise RangeError(
                name,
                f"{m} values in {name} beside {n} in current_a",
                "one value for every current",
                "complete the shorter list",
            )

    def _not_falling(self, name, unit):
        for k, (a, b) in enumerate(pairwise(self.values), 2):
            if b < a:
                raise RangeError(
                    name,
                    f"{name} falling from {a:g} to {b:g} {unit} at point {k}",
                    "values that do not fall with rising current",
                    "check the point against the data sheet",
                )


class OnStateCurve(_Curve):
    """On-state voltage over current at one junction temperature."""

    voltage_v: Numbers

    @property
    def values(self) -> tuple[float, ...]:
        """The voltages [V]."""
        return self.voltage_v

    @model_validator(mode="after")
    def _sensible(self):
        self._same_length("voltage_v")
        for k, v in enumerate(self.voltage_v, 1):
            if v <= 0:
                raise RangeError(
                    "voltage_v",
                    f"{v:g} V at point {k}",
                    "on-state voltages above 0 V",
                    "start the curve at its offset voltage, or leave out the point at the origin",
                )
        self._not_falling("voltage_v", "V")
        return self


class EnergyCurve(_Curve):
    """Energy of one switching event over current at one junction temperature."""

    energy_j: Numbers

    @property
    def values(self) -> tuple[float, ...]:
        """The energies [J]."""
        return self.energy_j

    @model_validator(mode="after")
    def _sensible(self):
        self._same_length("energy_j")
        for k, e in enumerate(self.energy_j, 1):
            if e < 0:
                raise RangeError("energy_j", f"{e:g} J at point {k}", "energies of at least 0 J", "correct the sign")
        self._not_falling("energy_j", "J")
        return self


class _Curves(FileModel):
    """A curve for each of at least two temperatures."""

    @model_validator(mode="after")
    def _temperatures(self):
        if getattr(self, "line", ()) and self.curve:
            for k, (one, two) in enumerate(pairwise(self.line), 2):
                if two.t_vj_c <= one.t_vj_c:
                    raise RangeError("line", f"t_vj_c = {two.t_vj_c:g} degC in line {k} after {one.t_vj_c:g} degC",
                                     "temperatures that rise from line to line", "sort the lines from cold to hot")
        if len(self.points) < 2:
            raise RangeError(
                "curve",
                f"{len(self.points)} curve{'' if len(self.points) == 1 else 's'}",
                "curves at two or more junction temperatures",
                "add a [[...curve]] section; where the data sheet gives one temperature only, "
                "repeat it at a second one on purpose",
            )
        for k, (a, b) in enumerate(pairwise(self.points), 2):
            if b.t_vj_c <= a.t_vj_c:
                raise RangeError(
                    "curve",
                    f"t_vj_c = {b.t_vj_c:g} degC in curve {k} after {a.t_vj_c:g} degC",
                    "temperatures that rise from curve to curve",
                    "sort the curves from cold to hot",
                )
        return self

    @property
    def t_vj_c(self) -> np.ndarray:
        """Temperatures of the curves, rising [degC], shape (k,)."""
        return np.array([c.t_vj_c for c in self.points])

    def on_grid(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """All curves on the union of their currents.

        Returns
        -------
        t_vj_c : ndarray, shape (k,)
        current_a : ndarray, shape (n,)
            Every current at which one of the curves has a point.
        values : ndarray, shape (k, n)
            Voltages [V] or energies [J]. A curve that starts later or ends
            sooner than the others is extended in a straight line.
        """
        current = np.unique(np.concatenate([c.current_a for c in self.points]))
        return self.t_vj_c, current, np.stack([broken_line(c.current_a, c.values, current) for c in self.points])

    @property
    def current_data_a(self) -> tuple[float, float]:
        """First and last current that every curve covers [A]."""
        return max(c.current_a[0] for c in self.points), min(c.current_a[-1] for c in self.points)


class OnStateLine(FileModel):
    """Straight-line parameters at one temperature: v0 + r i, from zero to ``current_end_a``."""

    t_vj_c: Number
    v0_v: Positive
    r_ohm: NotNegative
    current_end_a: Positive

    @field_validator("t_vj_c")
    @classmethod
    def _celsius(cls, value):
        _plausible_temperature("t_vj_c", value)
        return value

    @field_validator("r_ohm")
    @classmethod
    def _ohms(cls, value):
        if value > 10.0:
            raise RangeError("r_ohm", f"{value:g} ohm", "at most 10 ohm", "r_ohm is in ohm, not milliohm")
        return value

    def as_curve(self) -> OnStateCurve:
        """The line as a curve of two points."""
        end = self.current_end_a
        return OnStateCurve(t_vj_c=self.t_vj_c, current_a=(0.0, end), voltage_v=(self.v0_v, self.v0_v + self.r_ohm * end))


class OnStateCurves(_Curves):
    """On-state voltage by current and temperature: points, straight lines, or both.

    Points count where there are any; lines beside them are only shown. A file
    with lines alone gets two-point curves in ``points``.
    """

    curve: tuple[OnStateCurve, ...] = ()
    line: tuple[OnStateLine, ...] = ()

    @property
    def points(self) -> tuple[OnStateCurve, ...]:
        """The curves that count."""
        return self.curve or tuple(one.as_curve() for one in self.line)


class GateResistorCurve(FileModel):
    """Energy over the external gate resistor, at the reference current and a hot junction."""

    r_ref_ohm: NotNegative
    r_ohm: Numbers
    energy_j: Numbers

    @model_validator(mode="after")
    def _sensible(self):
        if len(self.r_ohm) < 2 or len(self.r_ohm) != len(self.energy_j):
            raise RangeError(
                "r_ohm",
                f"{len(self.r_ohm)} resistors beside {len(self.energy_j)} energies",
                "at least two resistors, and one energy for each",
                "complete the shorter list",
            )
        for k, (a, b) in enumerate(pairwise(self.r_ohm), 2):
            if b <= a:
                raise RangeError("r_ohm", f"{b:g} ohm at point {k} after {a:g} ohm", "resistors that rise from point to point", "sort the points")
        for k, e in enumerate(self.energy_j, 1):
            if e <= 0.0:
                raise RangeError("energy_j", f"{e:g} J at point {k}", "energies above 0 J", "correct the point")
        if self.r_ohm[0] < 0.0:
            raise RangeError("r_ohm", f"{self.r_ohm[0]:g} ohm", "resistors of at least 0 ohm", "correct the sign")
        if not self.r_ohm[0] <= self.r_ref_ohm <= self.r_ohm[-1]:
            raise RangeError(
                "r_ref_ohm",
                f"{self.r_ref_ohm:g} ohm",
                f"{self.r_ohm[0]:g} to {self.r_ohm[-1]:g} ohm, where the curve runs",
                "enter the resistor at which the energy curves were measured",
            )
        return self

    def factor(self, r_ohm: float) -> float:
        """Energy with this resistor over energy with the one of the energy curves, [-]; refused outside the points."""
        if not self.r_ohm[0] <= r_ohm <= self.r_ohm[-1]:
            raise RangeError(
                "gate resistor",
                f"{r_ohm:g} ohm",
                f"{self.r_ohm[0]:g} to {self.r_ohm[-1]:g} ohm, where the data sheet gives energies",
                "choose a resistor inside, or extend the curve with measured points",
            )
        at = np.interp([r_ohm, self.r_ref_ohm], self.r_ohm, self.energy_j)
        return float(at[0] / at[1])


class EnergyCurves(_Curves):
    """Switching energy by current and temperature, measured at ``v_ref_v``."""

    v_ref_v: Positive
    voltage_exponent: Annotated[float, Field(strict=True, ge=0, le=3)]
    curve: tuple[EnergyCurve, ...]
    gate_resistor: GateResistorCurve | None = None

    @property
    def points(self) -> tuple[EnergyCurve, ...]:
        """The curves that count."""
        return self.curve


class LayerSpec(FileModel):
    """One layer under a chip, seen from the heated face down."""

    material: Text
    thickness_mm: Annotated[float, Field(strict=True, gt=0, le=100)]
    width_mm: Annotated[float, Field(strict=True, gt=0, le=1000)] | None = None
    length_mm: Annotated[float, Field(strict=True, gt=0, le=1000)] | None = None
    spread_deg: Annotated[float, Field(strict=True, ge=0, le=60)] = 0.0

    @model_validator(mode="after")
    def _footprint(self):
        if (self.width_mm is None) != (self.length_mm is None):
            raise RangeError(
                "width_mm", "only one of width_mm and length_mm", "both, or none of them", "enter the missing side"
            )
        return self


class ChipThermal(FileModel):
    """The way of the heat from one switch or one diode, heated alone: Foster branches of a data sheet, or layers.

    ``reference``: where they end; layers that end on the plate of the section ``[plate]`` have "plate".
    """

    reference: Literal["case", "sink", "plate"]
    r_k_per_w: tuple[Positive, ...] = ()
    tau_s: tuple[Positive, ...] = ()
    layer: tuple[LayerSpec, ...] = ()
    cells_per_layer: Annotated[int, Field(strict=True, ge=2, le=40)] = 6

    @model_validator(mode="after")
    def _sensible(self):
        if self.layer:
            if self.r_k_per_w or self.tau_s:
                raise RangeError(
                    "layer",
                    "layers beside r_k_per_w or tau_s",
                    "branches or layers, one of the two",
                    "remove one of them",
                )
            if self.layer[0].width_mm is None:
                raise RangeError(
                    "layer",
                    "no footprint on layer 1",
                    "width_mm and length_mm of the heated face on the first layer",
                    "enter the size of the chips",
                )
            return self
        if not self.r_k_per_w:
            raise RangeError(
                "r_k_per_w", "an empty list", "at least one branch, or layers", "enter the branches of the data sheet"
            )
        if len(self.r_k_per_w) != len(self.tau_s):
            raise RangeError(
                "tau_s",
                f"{len(self.tau_s)} values in tau_s beside {len(self.r_k_per_w)} in r_k_per_w",
                "one time constant for every resistance",
                "complete the shorter list",
            )
        for k, (a, b) in enumerate(pairwise(self.tau_s), 2):
            if b <= a:
                raise RangeError(
                    "tau_s",
                    f"{b:g} s at branch {k} after {a:g} s",
                    "time constants that rise from branch to branch",
                    "sort the branches from fast to slow, resistances along with them",
                )
        return self


class ParallelChips(FileModel):
    """Chips side by side in one position; ``on_state_spread_v``: how much lower the best one's on-state voltage
    lies than that of the others at its share of the nominal current."""

    chips: Annotated[int, Field(strict=True, ge=2, le=64)]
    on_state_spread_v: Annotated[float, Field(strict=True, ge=0, le=1)]


class SwitchData(FileModel):
    """One switch: the transistor of one arm, all its parallel chips together.

    ``reverse`` (MOSFET only): from source to drain with the gate on. Without it the
    channel is taken to conduct alike both ways, with the body diode beside it.
    """

    on_state: OnStateCurves
    turn_on: EnergyCurves
    turn_off: EnergyCurves
    thermal: ChipThermal
    reverse: OnStateCurves | None = None
    parallel: ParallelChips | None = None


class DiodeData(FileModel):
    """One freewheeling diode, all its parallel chips together.

    No ``thermal`` where it is part of the switch's chip (body diode, reverse-conducting
    IGBT); no ``recovery`` for a silicon carbide Schottky diode.
    """

    on_state: OnStateCurves
    recovery: EnergyCurves | None = None
    thermal: ChipThermal | None = None
    parallel: ParallelChips | None = None


class SwitchingData(FileModel):
    """What the turn-off overshoot needs: the module's own inductance, and its fall time at nominal current (90 to 10 %)."""

    stray_inductance_h: Annotated[float, Field(strict=True, ge=0, le=1e-5)]
    fall_time_s: Annotated[float, Field(strict=True, gt=0, le=1e-5)]


class CaseToSinkModule(FileModel):
    """One resistance under the whole module, which all its chips share."""

    per: Literal["module"]
    r_th_k_per_w: Positive


class CaseToSinkChips(FileModel):
    """A resistance of its own under every switch and every diode (under every chip where one chip is both)."""

    per: Literal["switch-and-diode"]
    r_th_switch_k_per_w: Positive
    r_th_diode_k_per_w: Positive | None = None


CaseToSink = Annotated[CaseToSinkModule | CaseToSinkChips, Field(discriminator="per")]


class Wires(FileModel):
    """Bond wires; some lifetime models ask for them."""

    diameter_um: Annotated[float, Field(strict=True, ge=10, le=1000)]
    feet_per_switch: Annotated[int, Field(strict=True, ge=1)]
    feet_per_diode: Annotated[int, Field(strict=True, ge=1)]
    loop_aspect_ratio: Annotated[float, Field(strict=True, gt=0, le=2)]


class FailureMode(FileModel):
    """What wears out, on which swings, by which lifetime model.

    Stands in a module file (``[[failure_mode]]``) or in a study (``[[lifetime.failure_mode]]``).
    ``threshold_k``: swings below it are left out and what they would cost is reported.
    """

    name: Text
    acts_on: Literal["junction", "case"]
    chips: Literal["all", "switches", "diodes"] = "all"
    model: Text
    options: dict[str, Any] = Field(default_factory=dict)
    threshold_k: Annotated[float, Field(strict=True, ge=0, le=100)] | None = None

    @field_validator("options")
    @classmethod
    def _plain(cls, value):
        for key, item in value.items():
            for one in item if isinstance(item, list) else [item]:
                if not isinstance(one, (str, bool, int, float)):
                    raise RangeError(
                        key,
                        f"{type(one).__name__} for option '{key}'",
                        "a number, text, true or false, or a list of them",
                        "write options as plain values",
                    )
                if isinstance(one, float) and not math.isfinite(one):
                    raise RangeError(key, f"{one} for option '{key}'", "a finite number", "correct the value")
        return value


#: Devices whose diode is a part of the switch's chip.
ONE_CHIP_KINDS = ("reverse-conducting-igbt", "mosfet")
THREE_LEVEL = ("npc-leg", "t-type-leg")


@dataclass(frozen=True)
class ChipPair:
    """Two like chips of a leg, one above and one below: what the stages below know a chip by.

    Attributes
    ----------
    name : str
        First part of the chip's name: S, D; SO, SI, DO, DI, DC in three-level legs.
    place : str
        Section of the file that holds its thermal data.
    is_diode : bool
    thermal : ChipThermal
    """

    name: str
    place: str
    is_diode: bool
    thermal: ChipThermal


class PowerModule(FileModel):
    """The module, or the three modules, of a three-phase bridge.

    Attributes mirror the keys of the file, e.g. ``module.switch.on_state.curve[0].voltage_v``.
    Curves and thermal branches are per switch and per diode. Three-level legs: ``switch`` and
    ``diode`` are the outer pair, ``inner_switch`` and ``inner_diode`` the pair next to the
    output (npc-leg) or the midpoint switch (t-type-leg), ``clamp_diode`` the diodes to the midpoint.
    ``wires`` is None when the file says nothing about them.
    """

    format: Literal[1]
    name: Text
    technology: Text
    kind: Literal["igbt", "igbt-schottky", "reverse-conducting-igbt", "mosfet"]
    arrangement: Literal["six-pack", "half-bridge", "npc-leg", "t-type-leg"]
    source: Text
    ratings: Ratings
    gate: Gate
    switching: SwitchingData | None = None
    switch: SwitchData
    diode: DiodeData
    inner_switch: SwitchData | None = None
    inner_diode: DiodeData | None = None
    clamp_diode: DiodeData | None = None
    case_to_sink: CaseToSink | None = None
    plate: PlateSpec | None = None
    coupling: tuple[Coupling, ...] = ()
    wires: Wires | None = None
    failure_mode: tuple[FailureMode, ...] = ()

    @model_validator(mode="after")
    def _sensible(self):
        self._check_parts()
        nominal = self.ratings.i_nominal_a
        for place, curves in self.energy_curves().items():
            if curves.v_ref_v >= self.ratings.v_ces_v:
                raise RangeError(
                    place,
                    f"{place}.v_ref_v = {curves.v_ref_v:g} V at a blocking voltage "
                    f"v_ces_v = {self.ratings.v_ces_v:g} V",
                    "a reference voltage below the blocking voltage",
                    "enter the DC voltage of the energy curves",
                )
            for k, c in enumerate(curves.curve, 1):
                limit = ENERGY_TIME_LIMIT_S * curves.v_ref_v * max(nominal, c.current_a[-1])
                if c.energy_j[-1] > limit:
                    raise RangeError(
                        place,
                        f"{c.energy_j[-1]:g} J at {c.current_a[-1]:g} A in {place}.curve[{k}]",
                        f"at most {limit:.3g} J for such a chip",
                        "energies are in joules, not millijoules",
                    )
        for place, curves in self.energy_curves().items():
            if curves.gate_resistor is not None:
                try:
                    curves.gate_resistor.factor(self.gate_resistor_ohm(place))
                except RangeError as err:
                    key = "gate.r_off_ohm" if place.endswith("turn_off") else "gate.r_on_ohm"
                    raise RangeError(key, f"{key} = {self.gate_resistor_ohm(place):g} ohm", err.allowed, err.advice) from None
        first, *others = self.chip_pairs()
        for pair in others:
            if pair.thermal.reference != first.thermal.reference:
                raise RangeError(
                    f"{pair.place}.thermal.reference",
                    f"{first.place}.thermal.reference = '{first.thermal.reference}' and {pair.place}.thermal.reference = '{pair.thermal.reference}'",
                    "the same reference for all chips",
                    "use the branches that end at the same place",
                )
        if first.thermal.reference == "case" and self.case_to_sink is None:
            raise RangeError(
                "case_to_sink",
                "no section case_to_sink, and thermal branches that end at the case",
                "a section [case_to_sink]",
                'enter the resistance of the thermal paste, or the branches to the sink with reference = "sink"',
            )
        if first.thermal.reference == "sink" and self.case_to_sink is not None:
            raise RangeError(
                "case_to_sink",
                "a section case_to_sink, and thermal branches that end at the sink",
                "no section case_to_sink",
                'the branches hold the paste already: remove the section, or set reference = "case"',
            )
        check_plate(self)
        if self.case_to_sink is not None and self.case_to_sink.per == "switch-and-diode":
            has_diodes = any(p.is_diode for p in self.chip_pairs())
            if has_diodes != (self.case_to_sink.r_th_diode_k_per_w is not None):
                raise RangeError(
                    "case_to_sink.r_th_diode_k_per_w",
                    "no r_th_diode_k_per_w, and diodes with chips of their own" if has_diodes else "r_th_diode_k_per_w, and no diode chips",
                    "a resistance for every kind of chip there is",
                    "enter it" if has_diodes else f"kind = '{self.kind}' has one chip for both jobs: remove the key",
                )
        check_coupling(self)
        names = [f.name for f in self.failure_mode]
        for name in names:
            if names.count(name) > 1:
                raise RangeError(
                    "failure_mode",
                    f"{names.count(name)} failure modes named '{name}'",
                    "a name of its own for every failure mode",
                    "rename one of them",
                )
        return self

    def _check_parts(self):
        """The sections that this kind and this arrangement need, and no others."""
        three = self.arrangement in THREE_LEVEL
        if three and self.one_chip:
            raise RangeError(
                "kind",
                f"kind = '{self.kind}' with arrangement = '{self.arrangement}'",
                "igbt or igbt-schottky in three-level legs",
                "three-level legs of one-chip devices are not modelled",
            )
        wanted = {"inner_switch": three, "inner_diode": three, "clamp_diode": self.arrangement == "npc-leg"}
        for name, needed in wanted.items():
            if needed != (getattr(self, name) is not None):
                raise RangeError(
                    name,
                    f"no section {name}" if needed else f"a section {name}",
                    f"{'a' if needed else 'no'} section {name} with arrangement = '{self.arrangement}'",
                    "add it" if needed else "remove it, or correct the arrangement",
                )
        for name in ("diode", "inner_diode", "clamp_diode"):
            diode = getattr(self, name)
            if diode is None:
                continue
            if self.one_chip != (diode.thermal is None):
                raise RangeError(
                    f"{name}.thermal",
                    f"a section {name}.thermal" if self.one_chip else f"no section {name}.thermal",
                    f"{'no' if self.one_chip else 'a'} section {name}.thermal with kind = '{self.kind}'",
                    "its heat arises in the switch's chip: remove the section" if self.one_chip else "enter the branches of the diode",
                )
            if self.one_chip and diode.parallel is not None:
                raise RangeError(f"{name}.parallel", f"a section {name}.parallel", f"no such section with kind = '{self.kind}'",
                                 "switch and diode are one chip: give the spread under switch.parallel")
            if diode.recovery is None and self.kind != "igbt-schottky":
                raise RangeError(
                    f"{name}.recovery",
                    f"no section {name}.recovery",
                    f"recovery energies with kind = '{self.kind}'",
                    "only a silicon carbide Schottky diode (kind = \"igbt-schottky\") goes without",
                )
        for name in ("switch", "inner_switch"):
            switch = getattr(self, name)
            if switch is not None and switch.reverse is not None and self.kind != "mosfet":
                raise RangeError(f"{name}.reverse", f"a section {name}.reverse", "reverse curves with kind = 'mosfet' only", "remove the section")

    @property
    def one_chip(self) -> bool:
        """Whether switch and diode are one chip."""
        return self.kind in ONE_CHIP_KINDS

    @property
    def levels(self) -> int:
        """Voltage levels of the leg: 2 or 3."""
        return 3 if self.arrangement in THREE_LEVEL else 2

    @property
    def v_dc_limit_v(self) -> float:
        """Link voltage that the chips no longer block: the switches of a midpoint-clamped leg share it between them [V]."""
        return self.ratings.v_ces_v * (2.0 if self.arrangement == "npc-leg" else 1.0)

    def chip_pairs(self) -> tuple[ChipPair, ...]:
        """The pairs of chips of a leg, in the order of their numbers; chip number = 6 pair + 2 leg + (0 upper, 1 lower)."""
        if self.levels == 2:
            pairs = [ChipPair("S", "switch", False, self.switch.thermal)]
            return tuple(pairs if self.one_chip else [*pairs, ChipPair("D", "diode", True, self.diode.thermal)])
        pairs = [ChipPair("SO", "switch", False, self.switch.thermal), ChipPair("SI", "inner_switch", False, self.inner_switch.thermal),
                 ChipPair("DO", "diode", True, self.diode.thermal), ChipPair("DI", "inner_diode", True, self.inner_diode.thermal)]
        if self.clamp_diode is not None:
            pairs.append(ChipPair("DC", "clamp_diode", True, self.clamp_diode.thermal))
        return tuple(pairs)

    def chip_names(self) -> tuple[str, ...]:
        """Names of all chips of the bridge, e.g. S-a-up, S-a-lo, S-b-up."""
        return tuple(f"{pair.name}-{leg}-{side}" for pair in self.chip_pairs() for leg in "abc" for side in ("up", "lo"))

    def diode_chips(self) -> np.ndarray:
        """Which of the chips are diodes only, shape (n,) of bool."""
        return np.repeat([pair.is_diode for pair in self.chip_pairs()], 6)

    def _parts(self):
        return {n: getattr(self, n) for n in ("switch", "diode", "inner_switch", "inner_diode", "clamp_diode") if getattr(self, n) is not None}

    def on_state_curves(self) -> dict[str, OnStateCurves]:
        """On-state curves by their place in the file."""
        out = {f"{name}.on_state": part.on_state for name, part in self._parts().items()}
        if self.switch.reverse is not None:
            out["switch.reverse"] = self.switch.reverse
        return out

    def energy_curves(self) -> dict[str, EnergyCurves]:
        """Energy curves by their place in the file."""
        out = {}
        for name, part in self._parts().items():
            for key in ("turn_on", "turn_off", "recovery"):
                if getattr(part, key, None) is not None:
                    out[f"{name}.{key}"] = getattr(part, key)
        return out

    def gate_resistor_ohm(self, place: str) -> float:
        """External gate resistor that an energy depends on: the turn-on one also for recovery [ohm]."""
        return self.gate.r_off_ohm if place.endswith("turn_off") else self.gate.r_on_ohm

    @property
    def notes(self) -> tuple[str, ...]:
        """What results must repeat: where the data are extended, and data that look odd but may be right."""
        from .notes import module_notes

        return module_notes(self)
