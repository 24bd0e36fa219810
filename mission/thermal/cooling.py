"""Cooling as the user gives it: what lies between the sink surface and the coolant, and what changes it during a mission."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Literal

import numpy as np
from pydantic import Field, model_validator

from ..errors import InputError, RangeError
from ..tomlfile import FileModel
from .networks import CauerLadder, FosterNetwork, foster_to_cauer, merge_close_branches

# A number in quotes or a true/false is a slip, not a number.
_Positive = Annotated[float, Field(strict=True, gt=0)]
_NotNegative = Annotated[float, Field(strict=True, ge=0)]
_Surface = Annotated[float, Field(strict=True, ge=-60, le=250)]
_Speed = Annotated[float, Field(strict=True, ge=0.05, le=2)]


class Setting(FileModel):
    """How strong the cooling is at a stage: speed of fan or pump over that of its curve, a flow, or a resistance. One of them."""

    speed_ratio: _Speed | None = None
    flow_l_per_min: _Positive | None = None
    flow_m3_per_h: _Positive | None = None
    r_th_k_per_w: _Positive | None = None

    @model_validator(mode="after")
    def _one(self):
        given = [n for n in ("speed_ratio", "flow_l_per_min", "flow_m3_per_h", "r_th_k_per_w") if getattr(self, n) is not None]
        if len(given) != 1:
            raise RangeError("speed_ratio", " and ".join(given) if given else "no setting", "one of speed_ratio, flow_l_per_min, flow_m3_per_h, r_th_k_per_w")
        return self


class Stage(Setting):
    """One stage of a fan or pump that is switched by the sink's surface temperature.

    ``up_above_c``: above it the next stage is taken (not on the last one); ``down_below_c``: below it the one before (not on the first).
    """

    up_above_c: _Surface | None = None
    down_below_c: _Surface | None = None


class Law(FileModel):
    """Speed or flow over a temperature, straight between the points and constant beyond them.

    ``watch``: the sink's ``surface`` or the ``coolant`` at its inlet. It is followed in steps that change the sink's resistance by no
    more than 2 %; over the surface a step down needs ``hysteresis_k`` (1 K) less than the step up.
    """

    watch: Literal["surface", "coolant"]
    at_c: tuple[_Surface, ...] = Field(min_length=2, max_length=60)
    speed_ratio: tuple[_Speed, ...] | None = None
    flow_l_per_min: tuple[_Positive, ...] | None = None
    flow_m3_per_h: tuple[_Positive, ...] | None = None
    hysteresis_k: Annotated[float, Field(strict=True, ge=0.2, le=30)] | None = None

    @model_validator(mode="after")
    def _sensible(self):
        given = [n for n in ("speed_ratio", "flow_l_per_min", "flow_m3_per_h") if getattr(self, n) is not None]
        if len(given) != 1:
            raise RangeError("speed_ratio", " and ".join(given) if given else "no course", "one of speed_ratio, flow_l_per_min, flow_m3_per_h")
        if len(getattr(self, given[0])) != len(self.at_c):
            raise RangeError(given[0], f"{len(getattr(self, given[0]))} values beside {len(self.at_c)} temperatures", "one for every temperature", "complete the shorter list")
        rising("at_c", self.at_c)
        course = getattr(self, given[0])
        for k, (a, b) in enumerate(zip(course, course[1:]), 2):
            if b < a:
                raise RangeError(given[0], f"{b:g} at point {k} after {a:g}", "a course that does not fall with temperature", "check the order of the points")
        if self.watch == "coolant" and self.hysteresis_k is not None:
            raise RangeError("hysteresis_k", f"{self.hysteresis_k:g} K with watch = 'coolant'", "no hysteresis there", "the coolant does not feel the flow: take it out")
        return self

    @property
    def hysteresis(self) -> float:
        """How much the surface must fall below a step before it is taken back [K]."""
        return 1.0 if self.hysteresis_k is None else self.hysteresis_k


class Fault(FileModel):
    """A blocked fan or a pump that stops, from a time in the mission on, in every mission.

    ``share`` of the speed (where a curve is given) or of the flow that is left; 0 needs a section ``stopped``.
    """

    at_s: _NotNegative
    until_s: _Positive | None = None
    share: Annotated[float, Field(strict=True, ge=0, lt=1)] = 0.0

    @model_validator(mode="after")
    def _order(self):
        if self.until_s is not None and self.until_s <= self.at_s:
            raise RangeError("until_s", f"{self.until_s:g} s at a fault that begins at {self.at_s:g} s", "a time after the beginning", "times count from the start of the mission")
        return self


class Stopped(FileModel):
    """What cools when nothing flows: a given resistance, or (plate fins that stand upright) still air between the fins with radiation."""

    r_th_k_per_w: _Positive | None = None
    emissivity: Annotated[float, Field(strict=True, ge=0, le=1)] | None = None

    @model_validator(mode="after")
    def _one(self):
        if (self.r_th_k_per_w is None) == (self.emissivity is None):
            raise RangeError("r_th_k_per_w", "neither r_th_k_per_w nor emissivity" if self.r_th_k_per_w is None else "both r_th_k_per_w and emissivity", "one of the two")
        return self


class Grease(FileModel):
    """Ageing of the thermal grease: case-to-sink resistances times 1 + growth ((age + time in the mission)/per_h)^exponent.

    ``growth``: share by which the resistance has grown after ``per_h`` hours; ``exponent``: 1 for a steady course, below 1 for one that slows
    down. The course is the user's, from tests of the grease; there is none of general validity.
    """

    growth: _NotNegative
    per_h: _Positive
    exponent: Annotated[float, Field(strict=True, gt=0, le=3)] = 1.0
    age_h: _NotNegative = 0.0

    def factor(self, time_s):
        """Factor on the resistance at ``time_s`` into the mission (any shape) [s]."""
        return 1.0 + self.growth * ((self.age_h + np.asarray(time_s, float) / 3600.0) / self.per_h) ** self.exponent


def rising(name: str, values) -> None:
    """Refuse values that do not rise from point to point."""
    for k, (a, b) in enumerate(zip(values, values[1:]), 2):
        if b <= a:
            raise RangeError(name, f"{b:g} at point {k} after {a:g}", "values that rise from point to point", "sort the points")


class CoolingBase(FileModel):
    """What every kind of cooling has.

    ``sink_sees``: ``heat-leaving`` (default, correct: the sink takes the heat that comes out of
    the module, later than it enters the chips) or ``chip-losses`` (the sink takes the losses at
    once; for data that were made so, and for comparing with hand calculations).
    ``stage``, ``law``, ``fault``, ``stopped``, ``grease``: what changes during the mission; see there.
    """

    sink_sees: Literal["heat-leaving", "chip-losses"] = "heat-leaving"
    coolant_c: Annotated[float, Field(strict=True, ge=-60, le=150)] | None = None
    stage: tuple[Stage, ...] = ()
    law: Law | None = None
    fault: tuple[Fault, ...] = ()
    stopped: Stopped | None = None
    grease: Grease | None = None

    @model_validator(mode="after")
    def _changes_fit(self):
        if self.stage and self.law is not None:
            raise RangeError("law", "a law beside stages", "stages or a law, one of the two", "take one out")
        if len(self.stage) == 1:
            raise RangeError("stage", "one stage", "two or more, or none", "give its setting under [cooling] itself")
        for number, one in enumerate(self.stage, 1):
            for name, wanted, which in (("up_above_c", number < len(self.stage), "last"), ("down_below_c", number > 1, "first")):
                if wanted != (getattr(one, name) is not None):
                    raise RangeError(f"stage[{number}].{name}", "nothing" if wanted else f"{getattr(one, name):g} degC",
                                     f"a temperature on every stage but the {which}", "add it" if wanted else "take it out")
        for number, (low, high) in enumerate(zip(self.stage, self.stage[1:]), 2):
            if high.down_below_c >= low.up_above_c - 0.2:
                raise RangeError(f"stage[{number}].down_below_c", f"{high.down_below_c:g} degC below a stage that ends at {low.up_above_c:g} degC",
                                 "at least 0.2 K less than up_above_c of the stage before", "without a gap the stages would chatter")
        for name, values in (("up_above_c", [s.up_above_c for s in self.stage[:-1]]), ("down_below_c", [s.down_below_c for s in self.stage[1:]])):
            for number, (a, b) in enumerate(zip(values, values[1:]), 2 if name == "up_above_c" else 3):
                if b <= a:
                    raise RangeError(f"stage[{number}].{name}", f"{b:g} degC after {a:g} degC", "thresholds that rise from stage to stage", "weakest stage first")
        spans = sorted((f.at_s, np.inf if f.until_s is None else f.until_s) for f in self.fault)
        for (_, end), (begin, _) in zip(spans, spans[1:]):
            if begin < end:
                raise RangeError("fault", f"a fault at {begin:g} s inside another", "faults one after the other", "check at_s and until_s")
        if any(f.share == 0.0 for f in self.fault) and self.stopped is None:
            raise RangeError("stopped", "no section stopped beside a fault that leaves no flow", "what cools then", "add [cooling.stopped] with r_th_k_per_w")
        if self.sink_sees == "chip-losses" and self.changes:
            raise RangeError("sink_sees", "'chip-losses' with a cooling that changes", "'heat-leaving'", "only masses that store heat can go from one cooling to another")
        return self

    @property
    def changes(self) -> bool:
        """Whether the file says that something changes during the mission."""
        return bool(self.stage or self.fault) or self.law is not None or self.grease is not None


class FixedCooling(CoolingBase):
    """One resistance from sink surface to coolant for the whole inverter, with an optional heat capacity of the sink."""

    kind: Literal["fixed"]
    r_th_k_per_w: _Positive
    heat_capacity_j_per_k: _Positive | None = None


class FosterCooling(CoolingBase):
    """Foster branches from sink surface to coolant for the whole inverter."""

    kind: Literal["foster"]
    r_k_per_w: list[_Positive] = Field(min_length=1, max_length=8)
    tau_s: list[_Positive] = Field(min_length=1, max_length=8)

    @model_validator(mode="after")
    def _same_length(self):
        if len(self.r_k_per_w) != len(self.tau_s):
            raise RangeError("tau_s", f"{len(self.tau_s)} values beside {len(self.r_k_per_w)} resistances", "one time constant for every resistance")
        return self


def sink_ladder(spec) -> CauerLadder | float:
    """Ladder from sink surface to coolant, or a bare resistance [K/W] where no capacity is given."""
    if isinstance(spec, FixedCooling):
        if spec.heat_capacity_j_per_k is None:
            return spec.r_th_k_per_w
        return CauerLadder(np.array([spec.r_th_k_per_w]), np.array([spec.heat_capacity_j_per_k]))
    if isinstance(spec, FosterCooling):
        return foster_to_cauer(merge_close_branches(FosterNetwork(np.array(spec.r_k_per_w), np.array(spec.tau_s))))
    raise InputError("cooling.kind", f"{spec!r}", "fixed or foster")


@dataclass(frozen=True)
class SinkPath:
    """What the network needs to know of a cooling at one level.

    Attributes
    ----------
    ladders : tuple
        From a mounting surface to the coolant, as :func:`sink_ladder` gives them: one for all modules, or one for each of
        the three modules of a bridge, in the order of the legs a, b, c.
    paste : float
        Factor on the module's case-to-sink resistances: above 1 for aged grease.
    coolant_rise_k_per_w : float
        Rise of the coolant over each watt that a sink gives to it, felt by the sinks behind; 0: they do not stand in a row.
    first_to_last : tuple of int
        Numbers of the sinks in the order in which the coolant reaches them.
    chip_losses : bool
        Whether the sink is driven by the losses at once.
    """

    ladders: tuple[CauerLadder | float, ...]
    paste: float = 1.0
    coolant_rise_k_per_w: float = 0.0
    first_to_last: tuple[int, ...] = ()
    chip_losses: bool = False

    @property
    def r_th_k_per_w(self) -> tuple[float, ...]:
        """Steady resistance of each ladder [K/W]."""
        return tuple(float(s.r_k_per_w.sum()) if isinstance(s, CauerLadder) else float(s) for s in self.ladders)


def sink_path(cooling) -> SinkPath:
    """The path of a given cooling; a :class:`SinkPath` is handed through."""
    return cooling if isinstance(cooling, SinkPath) else SinkPath((sink_ladder(cooling),), chip_losses=cooling.sink_sees == "chip-losses")


def with_resistance(ladder: CauerLadder | float, r_th_k_per_w: float, where: str) -> CauerLadder | float:
    """The same masses with another film: the last resistance of a ladder changes so that the whole is ``r_th_k_per_w``.

    Raises
    ------
    InputError
        Less than what the ladder has before its film.
    """
    if not isinstance(ladder, CauerLadder):
        return r_th_k_per_w
    inside = float(ladder.r_k_per_w[:-1].sum())
    if r_th_k_per_w <= inside:
        raise InputError(where, f"{r_th_k_per_w:g} K/W", f"more than {inside:.4g} K/W, which lie inside the sink", "the branches of the sink hold that much before its last stage")
    return CauerLadder(np.append(ladder.r_k_per_w[:-1], r_th_k_per_w - inside), ladder.c_j_per_k)
