"""The data of a power module as a checked, frozen model.

A module file holds what a data sheet prints: ratings, gate data, on-state and
energy curves at several temperatures, thermal branches, and the failure modes
with the lifetime model to use for each. All units are in the key names.
"""

from __future__ import annotations

import math
from itertools import pairwise
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field, field_validator, model_validator

from ..errors import RangeError
from ..tomlfile import FileModel
from .curves import broken_line

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

    @model_validator(mode="after")
    def _sensible(self):
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
        if len(self.curve) < 2:
            raise RangeError(
                "curve",
                f"{len(self.curve)} curve{'' if len(self.curve) == 1 else 's'}",
                "curves at two or more junction temperatures",
                "add a [[...curve]] section; where the data sheet gives one temperature only, "
                "repeat it at a second one on purpose",
            )
        for k, (a, b) in enumerate(pairwise(self.curve), 2):
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
        return np.array([c.t_vj_c for c in self.curve])

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
        current = np.unique(np.concatenate([c.current_a for c in self.curve]))
        return self.t_vj_c, current, np.stack([broken_line(c.current_a, c.values, current) for c in self.curve])

    @property
    def current_data_a(self) -> tuple[float, float]:
        """First and last current that every curve covers [A]."""
        return max(c.current_a[0] for c in self.curve), min(c.current_a[-1] for c in self.curve)


class OnStateCurves(_Curves):
    """On-state voltage by current and temperature."""

    curve: tuple[OnStateCurve, ...]


class EnergyCurves(_Curves):
    """Switching energy by current and temperature, measured at ``v_ref_v``."""

    v_ref_v: Positive
    voltage_exponent: Annotated[float, Field(strict=True, ge=0, le=3)]
    curve: tuple[EnergyCurve, ...]


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
    """The way of the heat from one switch or one diode, heated alone: Foster branches of a data sheet, or layers."""

    reference: Literal["case", "sink"]
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


class SwitchData(FileModel):
    """One switch: the transistor of one arm, all its parallel chips together."""

    on_state: OnStateCurves
    turn_on: EnergyCurves
    turn_off: EnergyCurves
    thermal: ChipThermal


class DiodeData(FileModel):
    """One freewheeling diode, all its parallel chips together."""

    on_state: OnStateCurves
    recovery: EnergyCurves
    thermal: ChipThermal


class CaseToSinkModule(FileModel):
    """One resistance under the whole module, which all its chips share."""

    per: Literal["module"]
    r_th_k_per_w: Positive


class CaseToSinkChips(FileModel):
    """A resistance of its own under every switch and every diode."""

    per: Literal["switch-and-diode"]
    r_th_switch_k_per_w: Positive
    r_th_diode_k_per_w: Positive


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


class PowerModule(FileModel):
    """A power module with six switches and six diodes, or a half-bridge of which three are used.

    Attributes mirror the keys of the file, e.g. ``module.switch.on_state.curve[0].voltage_v``.
    Curves and thermal branches are per switch and per diode. ``wires`` is None when the
    file says nothing about them.
    """

    format: Literal[1]
    name: Text
    technology: Text
    kind: Literal["igbt"]
    arrangement: Literal["six-pack", "half-bridge"]
    source: Text
    ratings: Ratings
    gate: Gate
    switch: SwitchData
    diode: DiodeData
    case_to_sink: CaseToSink | None = None
    wires: Wires | None = None
    failure_mode: tuple[FailureMode, ...] = ()

    @model_validator(mode="after")
    def _sensible(self):
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
        sides = (self.switch.thermal.reference, self.diode.thermal.reference)
        if sides[0] != sides[1]:
            raise RangeError(
                "diode.thermal.reference",
                f"switch.thermal.reference = '{sides[0]}' and diode.thermal.reference = '{sides[1]}'",
                "the same reference for both",
                "use the branches that end at the same place",
            )
        if sides[0] == "case" and self.case_to_sink is None:
            raise RangeError(
                "case_to_sink",
                "no section case_to_sink, and thermal branches that end at the case",
                "a section [case_to_sink]",
                'enter the resistance of the thermal paste, or the branches to the sink with reference = "sink"',
            )
        if sides[0] == "sink" and self.case_to_sink is not None:
            raise RangeError(
                "case_to_sink",
                "a section case_to_sink, and thermal branches that end at the sink",
                "no section case_to_sink",
                'the branches hold the paste already: remove the section, or set reference = "case"',
            )
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

    def on_state_curves(self) -> dict[str, OnStateCurves]:
        """On-state curves by their place in the file."""
        return {"switch.on_state": self.switch.on_state, "diode.on_state": self.diode.on_state}

    def energy_curves(self) -> dict[str, EnergyCurves]:
        """Energy curves by their place in the file."""
        return {
            "switch.turn_on": self.switch.turn_on,
            "switch.turn_off": self.switch.turn_off,
            "diode.recovery": self.diode.recovery,
        }

    @property
    def notes(self) -> tuple[str, ...]:
        """What results must repeat: where the data are extended, and data that look odd but may be right."""
        from .notes import module_notes

        return module_notes(self)
