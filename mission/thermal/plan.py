"""From what a study says of its cooling to levels, and to the level of every moment.

A level is one network: one setting of the cooling at one coolant temperature with grease of one age. Which one holds is decided by
the row (flow, coolant temperature, fault, age of the grease) and, within a group of levels, by the temperature of the sink (stages of
a fan, a law, still air that draws the better the hotter the fins). Quantities that change smoothly are followed in steps.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import product
from typing import Annotated, NamedTuple

import numpy as np
from pydantic import Field

from ..device import PowerModule
from ..errors import InputError, RangeError
from .build import full_and_reduced, inverter_modes
from .cooling import FixedCooling, FosterCooling, SinkPath, sink_ladder, with_resistance
from .levels import CoolingLevels, LevelGroup
from .networks import CauerLadder
from .sinks import FanSink, LiquidPlate, NaturalSink, SinkPoint, TableSink, flow_m3_per_s_of, sink_point

CoolingSpec = Annotated[FixedCooling | FosterCooling | TableSink | FanSink | NaturalSink | LiquidPlate, Field(discriminator="kind")]
#: Kinds whose resistance is reckoned.
COMPUTED = (TableSink, FanSink, NaturalSink, LiquidPlate)

#: A quantity that changes smoothly is followed in steps that change the resistance by this share.
STEP = 0.02
#: Rises over which still air is followed [K], and how much of a rise lies between the step up and the step down.
_STILL_K, _STILL_GAP = (2.0, 250.0), 0.05
#: More than this times the fresh grease is no grease any more; on plates :mod:`mission.thermal.plates` has a bound of its own.
_MOST_PASTE = 5.0


class Setting(NamedTuple):
    """What a level is set to: ``what`` is "given", "speed", "flow" [m3/s], "resistance" [K/W] or "still air" (rise of the surface [K])."""

    what: str
    value: float = 0.0

    def words(self, liquid: bool) -> str:
        """For people."""
        if self.what == "given":
            return "as given"
        if self.what == "flow":
            return f"{self.value * 60000.0:.4g} l/min" if liquid else f"{self.value * 3600.0:.4g} m3/h"
        return {"speed": f"{100.0 * self.value:.3g} % speed", "resistance": f"{self.value:.4g} K/W given", "still air": f"still air, {self.value:.3g} K rise"}[self.what]


class Level(NamedTuple):
    """One level: setting, coolant at the inlet [degC], factor on the grease."""

    setting: Setting
    coolant_c: float | None
    paste: float


@dataclass(frozen=True)
class LevelState:
    """A level worked out.

    Attributes
    ----------
    words : str
    r_th_k_per_w : float
        From the surface to the coolant at the inlet, for all the heat [K/W] (a row of sinks: the mean).
    path : SinkPath
    point : SinkPoint or None
        Where the resistance was reckoned.
    """

    words: str
    r_th_k_per_w: float
    path: SinkPath
    point: SinkPoint | None


class CoolingPlan:
    """Levels of a study's cooling.

    Parameters
    ----------
    spec : any kind of cooling
    module : PowerModule
    coolant_c : tuple of float
        Lowest and highest coolant temperature of the duty [degC].
    flow_m3_per_s : tuple of float, optional
        Lowest and highest flow above zero that the duty has a column for.
    stands_still : bool
        Whether that column has rows without flow.
    duration_s : float
        Of the mission.
    materials : dict of Material
    relative_tolerance : float
        Of the reduction.

    Raises
    ------
    InputError, RangeError
        Parts that do not go together.
    """

    def __init__(self, spec, module: PowerModule, *, coolant_c: tuple[float, float], flow_m3_per_s: tuple[float, float] | None = None, stands_still: bool = False,
                 duration_s: float = 0.0, materials=None, relative_tolerance: float = 1e-3):
        self.spec, self.module, self._materials, self._tolerance = spec, module, materials, relative_tolerance
        self._states: dict[int, LevelState] = {}
        #: File that speaks of this cooling, put in front of what later turns out to be wrong with it.
        self.source = ""
        self._coolant = 0.5 * (coolant_c[0] + coolant_c[1])
        self._flows, self._stands_still = flow_m3_per_s, stands_still
        _check_parts(spec, module, flow_m3_per_s, stands_still)
        for number, one in enumerate(spec.fault, 1):
            if duration_s > 0.0 and one.at_s >= duration_s:
                raise InputError(f"cooling.fault[{number}].at_s", f"{one.at_s:g} s", f"a time before the mission's end at {duration_s:.6g} s", "times count from the start of the mission, in seconds")
        if spec.grease is not None and float(spec.grease.factor(duration_s)) > _MOST_PASTE:
            raise RangeError("cooling.grease", f"a factor of {float(spec.grease.factor(duration_s)):.3g} on the resistance at the mission's end", f"at most {_MOST_PASTE:g}",
                             "check growth, per_h (hours) and age_h; grease that far gone is a module that is no longer cooled")
        self._paste, self._paste_s = _paste_steps(spec.grease, duration_s)
        self._coolants, self._coolant_borders = self._coolant_steps(coolant_c)
        self._flow_values, self._flow_borders = self._flow_steps()
        #: Times at which rows must be cut [s].
        self.cut_s = np.unique([*self._paste_s, *(t for f in spec.fault for t in (f.at_s, f.until_s) if t is not None and 0.0 < t < duration_s)])
        #: What is left of the flow, without fault and with each kind of fault.
        self._left = (1.0, *sorted({f.share for f in spec.fault}))
        numbers: dict[Level, int] = {}
        known: dict[tuple, tuple] = {}
        groups = []
        for left, paste, coolant, flow in product(self._left, self._paste, self._coolants, self._flow_values):
            if (left, coolant, flow) not in known:
                known[left, coolant, flow] = self._inside(left, coolant, flow)
            inside, borders = known[left, coolant, flow]
            groups.append(LevelGroup(tuple(numbers.setdefault(Level(s, coolant, paste), len(numbers)) for s in inside), *borders))
        self.levels = list(numbers)
        self.groups = tuple(groups)
        self._shape = (len(self._left), len(self._paste), len(self._coolants), len(self._flow_values))
        if len(self.levels) > 1 and self._in_a_row():
            raise InputError("cooling.positions", f"{spec.positions} positions with a cooling that changes", "one position, or a cooling that stays",
                             "modules in a row feel each other through the coolant; that is reckoned for one flow only")
        if spec.stage:
            r = [self.state(k).r_th_k_per_w for k in self.groups[0].levels]
            for number, (weak, strong) in enumerate(zip(r, r[1:]), 2):
                if strong >= weak:
                    raise InputError(f"cooling.stage[{number}]", f"a stage of {strong:.4g} K/W after one of {weak:.4g} K/W", "stages that cool better from one to the next", "weakest first")
        if any(len(g.levels) > 1 for g in groups) and not isinstance(self.state(0).path.ladders[0], CauerLadder):
            raise InputError("cooling.heat_capacity_j_per_k", "a sink without heat capacity, whose stages follow its temperature", "the heat capacity of the sink",
                             "without it the surface would jump with every stage")

    @property
    def computed(self) -> bool:
        """Whether the resistance is reckoned, not given."""
        return isinstance(self.spec, COMPUTED)

    @property
    def liquid(self) -> bool:
        """Whether the coolant is known to be a liquid."""
        return getattr(self.spec, "fluid", "air") not in ("air", None)

    # what a row says ------------------------------------------------------------------------------------------------------------

    def groups_of(self, time_s, coolant_c, flow_m3_per_s=None, before: int | None = None) -> np.ndarray:
        """Group of every row, which must not reach over a time of ``cut_s``; arrays of shape (n,).

        ``before``: group of the row before the first. A coolant or flow that hardly leaves its step stays in it, so that a noisy column does
        not change the cooling with every row; the resistance is then right within a whole step instead of half a one.
        """
        time_s = np.asarray(time_s, float)
        fault = np.zeros(time_s.shape, int)
        for one in self.spec.fault:
            fault[(time_s >= one.at_s - 1e-9) & (time_s < (np.inf if one.until_s is None else one.until_s) - 1e-9)] = self._left.index(one.share, 1)
        paste = np.searchsorted(self._paste_s, time_s + 1e-9, side="right")
        places = (None, None) if before is None else np.unravel_index(before, self._shape)[2:]
        coolant = _settled(self._coolant_borders, coolant_c, places[0])
        flow = np.zeros(time_s.shape, int)
        if self._flows is not None:
            flow = np.where(np.asarray(flow_m3_per_s) == 0.0, len(self._flow_values) - 1, _settled(self._flow_borders, flow_m3_per_s, places[1]))
        return np.ravel_multi_index((fault, paste, coolant, flow), self._shape)

    # levels worked out ----------------------------------------------------------------------------------------------------------

    def state(self, k: int) -> LevelState:
        """Level ``k`` worked out."""
        if k not in self._states:
            try:
                self._states[k] = self._work_out(self.levels[k])
            except InputError as err:
                raise err.at(self.source) if self.source else err from None
        return self._states[k]

    def sound_group(self) -> LevelGroup:
        """Group at the start of the mission, without fault, at the largest flow of the duty and the middle of the coolant's range."""
        return self.groups[int(np.ravel_multi_index((0, 0, len(self._coolants) // 2, len(self._flow_values) - 1 - self._stands_still), self._shape))]

    def networks(self) -> CoolingLevels:
        """The networks that the march goes through."""
        known = None

        def build(k):
            nonlocal known
            full, known = full_and_reduced(self.module, self.state(k).path, materials=self._materials, relative_tolerance=self._tolerance, like=known)
            return full, known

        if len(self.levels) == 1:
            return CoolingLevels.fixed(inverter_modes(self.module, self.state(0).path, materials=self._materials, relative_tolerance=self._tolerance))
        return CoolingLevels(build, len(self.levels), self.groups)

    def _work_out(self, level: Level) -> LevelState:
        point, path = self._point(level.setting, level.coolant_c), None
        if point is not None:
            r, capacity = point.r_th_k_per_w, point.heat_capacity_j_per_k
            if self._in_a_row():
                path = _row_of_sinks(self.spec, point)
            else:
                ladder = r if capacity is None else CauerLadder(np.array([r]), np.array([capacity]))
        elif isinstance(self.spec, COMPUTED):
            r = level.setting.value
            capacity = self._capacity()
            ladder = r if capacity is None else CauerLadder(np.array([r]), np.array([capacity]))
        else:
            ladder = sink_ladder(self.spec)
            if level.setting.what == "resistance":
                ladder = with_resistance(ladder, level.setting.value, "cooling.r_th_k_per_w")
            r = float(ladder.r_k_per_w.sum()) if isinstance(ladder, CauerLadder) else ladder
        path = path or SinkPath((ladder,))
        return LevelState(level.setting.words(self.liquid), r,
                          replace(path, paste=level.paste, chip_losses=self.spec.sink_sees == "chip-losses"), point)

    def _capacity(self):
        """Heat capacity of the metal, whatever flows [J/K]."""
        if isinstance(self.spec, TableSink) or self.spec.heat_capacity_j_per_k is not None:
            return self.spec.heat_capacity_j_per_k
        from .layers import load_materials

        metal = (load_materials() if self._materials is None else self._materials)[self.spec.material]
        return metal.rho_kg_per_m3 * metal.c_j_per_kg_k * self.spec.metal_m3

    def _point(self, setting: Setting, coolant_c) -> SinkPoint | None:
        """What a reckoned sink does at a setting; None where a resistance is given."""
        if not isinstance(self.spec, COMPUTED) or setting.what == "resistance":
            return None
        how = {"inlet_c": self._coolant if coolant_c is None else coolant_c, "materials": self._materials}
        if setting.what == "still air":
            return sink_point(_still_fins(self.spec, how["inlet_c"] + setting.value), **how)
        if setting.what == "speed":
            return sink_point(self.spec, speed_ratio=setting.value, **how)
        return sink_point(self.spec, flow_m3_per_s=setting.value if setting.what == "flow" else None, **how)

    def _in_a_row(self) -> bool:
        return isinstance(self.spec, LiquidPlate) and self.spec.positions > 1

    # steps ----------------------------------------------------------------------------------------------------------------------

    def _r(self, setting, coolant_c=None) -> float:
        point = self._point(setting, coolant_c)
        return setting.value if point is None else point.r_th_k_per_w

    def _coolant_steps(self, coolant_c):
        """Coolant temperatures at which levels are reckoned, and the borders between them."""
        low, high = coolant_c
        law = self.spec.law if self.spec.law is not None and self.spec.law.watch == "coolant" else None
        if not isinstance(self.spec, COMPUTED) or (isinstance(self.spec, TableSink) and law is None) or high - low < 0.1 or self._in_a_row():
            return (self._coolant,), np.empty(0)
        if self._follows_rise() or self.spec.stage or (self.spec.law is not None and law is None):
            trial = self._inside(1.0, low, self._middle_flow())[0][0]
            return _steps(lambda c: self._r(trial, c), np.linspace(low, high, 9))
        return _steps(lambda c: self._r(self._setting(self._middle_flow(), c), c), np.union1d(np.linspace(low, high, 17), law.at_c if law else []).clip(low, high))

    def _middle_flow(self):
        return None if self._flows is None else float(np.sqrt(self._flows[0] * self._flows[1]))

    def _flow_steps(self):
        """Flows at which levels are reckoned, and the borders; the last one stands for no flow where there are rows without."""
        if self._flows is None:
            return (None,), np.empty(0)
        low, high = self._flows
        values, borders = ((low,), np.empty(0)) if high / low < 1.001 else _steps(lambda v: self._r(Setting("flow", v)), np.geomspace(low, high, 25))
        return ((*values, 0.0) if self._stands_still else values), borders

    def _setting(self, flow, coolant_c) -> Setting:
        """Setting by what a row says, without fault, stage or rise."""
        law = self.spec.law
        if flow is not None:
            return Setting("flow", flow)
        if law is not None and law.watch == "coolant":
            return _law_setting(law, coolant_c)
        return Setting("given")

    def _follows_rise(self) -> bool:
        return isinstance(self.spec, NaturalSink) and self.spec.heat_w is None and self.spec.surface_c is None

    def _inside(self, left, coolant_c, flow):
        """Settings among which the sink's temperature chooses where a share ``left`` of the flow is left, and (up, down, on rise) of their borders."""
        spec = self.spec
        if flow == 0.0 or left == 0.0:
            if spec.stopped.r_th_k_per_w is not None:
                return [Setting("resistance", spec.stopped.r_th_k_per_w)], ()
            return self._still(coolant_c)
        if left < 1.0:
            inside, borders = self._inside(1.0, coolant_c, flow)
            return [_less(spec, one, left) for one in inside], borders
        if self._follows_rise():
            return self._still(coolant_c)
        if spec.stage:
            return [_stage_setting(s) for s in spec.stage], (tuple(s.up_above_c for s in spec.stage[:-1]), tuple(s.down_below_c for s in spec.stage[1:]))
        if spec.law is not None and spec.law.watch == "surface":
            at, borders = _steps(lambda t: self._r(_law_setting(spec.law, t), coolant_c), np.union1d(np.linspace(spec.law.at_c[0], spec.law.at_c[-1], 33), spec.law.at_c))
            return [_law_setting(spec.law, t) for t in at], (tuple(borders), tuple(borders - spec.law.hysteresis))
        return [self._setting(flow, coolant_c)], ()

    def _still(self, coolant_c):
        rise, borders = _steps(lambda r: self._r(Setting("still air", r), coolant_c), np.geomspace(*_STILL_K, 41))
        return [Setting("still air", r) for r in rise], (tuple(borders * (1.0 + 0.5 * _STILL_GAP)), tuple(borders * (1.0 - 0.5 * _STILL_GAP)), True)


def _steps(resistance, x):
    """Values of ``x`` (rising) for steps of ``STEP`` in the resistance, and the borders between them."""
    r = np.log([resistance(float(v)) for v in x])
    way = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(r)))])
    count = max(1, int(np.ceil(way[-1] / STEP - 1e-9)))
    way += 1e-9 * np.arange(way.size)  # flat parts belong to the step before
    at = np.interp(way[-1] * (np.arange(count) + 0.5) / count, way, x)
    return tuple(at.tolist()), np.interp(way[-1] * np.arange(1, count) / count, way, x)


def _settled(borders, values, before):
    """Step of each value; it stays while the value goes beyond a border by less than half of the step behind it."""
    values = np.asarray(values, float)
    if borders.size == 0:
        return np.zeros(values.shape, int)
    width = np.diff(borders, prepend=2.0 * borders[0] - borders[1] if borders.size > 1 else borders[0], append=2.0 * borders[-1] - borders[-2] if borders.size > 1 else borders[0])
    least, most = np.searchsorted(borders + 0.5 * width[1:], values), np.searchsorted(borders - 0.5 * width[:-1], values)
    plain = np.searchsorted(borders, values)
    place = int(plain[0]) if before is None else int(before)
    out = np.empty(values.size, int)
    for k, (low, own, high) in enumerate(zip(least.tolist(), plain.tolist(), most.tolist())):
        place = place if low <= place <= high else own
        out[k] = place
    return out


def _stage_setting(stage) -> Setting:
    if stage.speed_ratio is not None:
        return Setting("speed", stage.speed_ratio)
    if stage.r_th_k_per_w is not None:
        return Setting("resistance", stage.r_th_k_per_w)
    return Setting("flow", float(flow_m3_per_s_of(stage)))


def _law_setting(law, t_c: float) -> Setting:
    course = law.speed_ratio if law.speed_ratio is not None else flow_m3_per_s_of(law)
    return Setting("flow" if law.speed_ratio is None else "speed", float(np.interp(t_c, law.at_c, course)))


def _has_curve(spec) -> bool:
    return getattr(spec, "fan", None) is not None or getattr(spec, "pump", None) is not None


def _less(spec, setting: Setting, share: float) -> Setting:
    """What a fault leaves of a setting."""
    where = "cooling.fault.share"
    if setting.what == "resistance":
        raise InputError(where, f"{share:g} beside stages given as resistances", "0 with [cooling.stopped], or stages by speed or flow", "nothing says what a part of the flow would do")
    if setting.what == "given":
        if _has_curve(spec):
            setting = Setting("speed", 1.0)
        else:
            setting = Setting("flow", spec.at_m3_per_s if isinstance(spec, TableSink) else float(flow_m3_per_s_of(spec)))
    if setting.what == "speed" and setting.value * share < 0.05:
        raise RangeError(where, f"{share:g} of a speed of {setting.value:g}", "at least a twentieth of the speed of the curve, or 0", "take 0, with [cooling.stopped]")
    if isinstance(spec, TableSink) and setting.value * share < spec.table_m3_per_s[0] * (1.0 - 1e-9):
        raise RangeError(where, f"{share:g}, which leaves {setting.value * share * 60000.0:.4g} l/min", f"a flow of the table, from {spec.table_m3_per_s[0] * 60000.0:.4g} l/min on, or 0",
                         "take 0, with [cooling.stopped], or extend the table")
    return Setting(setting.what, setting.value * share)


def _still_fins(spec, surface_c: float) -> NaturalSink:
    """The fins as they stand in still air."""
    shape = {n: getattr(spec, n) for n in ("base_mm", "fin_count", "fin_mm", "gap_mm", "fin_height_mm", "length_mm", "width_mm", "material", "k_w_per_m_k",
                                           "altitude_m", "footprint", "heat_capacity_j_per_k")}
    own = isinstance(spec, NaturalSink)
    return NaturalSink(kind="plate-fin-natural", surface_c=surface_c, emissivity=spec.emissivity if own else spec.stopped.emissivity,
                       surroundings_c=spec.surroundings_c if own else None, **shape)


def _paste_steps(grease, duration_s):
    """Factors on the grease and the times at which they change [s]."""
    if grease is None:
        return (1.0,), np.empty(0)
    first, last = (float(grease.factor(t)) for t in (0.0, duration_s))
    count = max(1, int(np.ceil(np.log(last / first) / STEP - 1e-9)))
    if count == 1:
        return (float(grease.factor(0.5 * duration_s)),), np.empty(0)
    factor = first * (last / first) ** (np.arange(2 * count + 1) / (2 * count))
    hours = grease.per_h * ((factor[2:-1:2] - 1.0) / grease.growth) ** (1.0 / grease.exponent) - grease.age_h
    return tuple(factor[1::2].tolist()), 3600.0 * hours


def _row_of_sinks(spec: LiquidPlate, point: SinkPoint) -> SinkPath:
    """Each module on its own part of the plate; what the coolant takes up of one warms the next."""
    place = ["abc".index(leg) for leg in spec.legs_along_flow]
    ladders: list = [None] * 3
    for n, position in enumerate(point.positions):  # each with a like part of the heat
        r = (position.surface_rise_k_per_w - position.coolant_rise_k_per_w) * spec.positions
        ladders[place[n]] = CauerLadder(np.array([r]), np.array([point.heat_capacity_j_per_k / spec.positions]))
    return SinkPath(tuple(ladders), coolant_rise_k_per_w=point.outlet_rise_k_per_w, first_to_last=tuple(place))


def _check_parts(spec, module, flows, stands_still) -> None:
    kind = f"'{spec.kind}'"
    flowing = isinstance(spec, (TableSink, FanSink, LiquidPlate))
    settings = [(f"cooling.stage[{k}]", s) for k, s in enumerate(spec.stage, 1)] + ([("cooling.law", spec.law)] if spec.law is not None else [])
    for where, one in settings:
        if one.speed_ratio is not None and not _has_curve(spec):
            raise InputError(f"{where}.speed_ratio", f"a speed with kind = {kind} and no curve of a fan or pump", "a curve (fan or pump), or a flow or resistance")
        if (one.flow_l_per_min is not None or one.flow_m3_per_h is not None) and not flowing:
            raise InputError(f"{where}", f"a flow with kind = {kind}", "flow-table, plate-fin-fan or liquid-plate", "give r_th_k_per_w for every stage instead")
    if flows is not None or stands_still:
        if not flowing:
            raise InputError("cooling.kind", f"{kind} beside a flow column in the duty", "flow-table, plate-fin-fan or liquid-plate", "take the column out of duty.columns, or choose such a kind")
        if isinstance(spec, TableSink) and flows is not None:
            low, high = spec.table_m3_per_s[[0, -1]]
            for one in flows:
                if not low * (1 - 1e-9) <= one <= high * (1 + 1e-9):
                    factor, unit = (60000.0, "l/min") if spec.flow_l_per_min is not None else (3600.0, "m3/h")
                    raise RangeError("duty.columns.flow", f"{factor * one:.4g} {unit} in the duty", f"{factor * low:.4g} to {factor * high:.4g} {unit}, the flows of the table",
                                     "check the unit of the column; the table is not continued beyond its ends")
        own = [n for n in ("stage", "law", "fan", "pump", "at_l_per_min", "at_m3_per_h") if getattr(spec, n, None)]
        own += [n for n in ("flow_l_per_min", "flow_m3_per_h") if not isinstance(spec, TableSink) and getattr(spec, n, None)]
        if own:
            raise InputError(f"cooling.{own[0]}", f"{own[0]} beside a flow column in the duty", "one of the two", "take the column out of duty.columns, or the field out of [cooling]")
        if stands_still and spec.stopped is None:
            raise InputError("cooling.stopped", "no section stopped, and rows without flow in the duty", "what cools then", "add [cooling.stopped] with r_th_k_per_w")
    if spec.fault and not flowing and any(f.share > 0.0 for f in spec.fault):
        raise InputError("cooling.fault.share", f"a share of the flow with kind = {kind}, which has none", "0, with [cooling.stopped]")
    if spec.stopped is not None:
        if all(f.share > 0.0 for f in spec.fault) and not stands_still:
            raise InputError("cooling.stopped", "a section stopped that nothing leads to", "a fault with share 0, or rows of a flow column at 0", "add [[cooling.fault]], or take it out")
        if spec.stopped.emissivity is not None and not isinstance(spec, FanSink):
            raise InputError("cooling.stopped.emissivity", f"an emissivity with kind = {kind}", "emissivity with kind = 'plate-fin-fan' only", "give r_th_k_per_w")
    if isinstance(spec, NaturalSink) and (spec.stage or spec.fault or spec.law is not None):
        raise InputError("cooling.kind", "still air with stages, a law or a fault", "none of these: nothing is driven", "choose kind = 'plate-fin-fan'")
    if spec.grease is not None and module.case_to_sink is None:
        raise InputError("cooling.grease", f"ageing grease, and no case_to_sink in {module.name}", "a module with a case-to-sink resistance", "its thermal branches hold the grease already")
    if spec.sink_sees == "chip-losses" and isinstance(spec, COMPUTED):
        raise InputError("cooling.sink_sees", f"'chip-losses' with kind = {kind}", "'heat-leaving'", "a reckoned sink takes the heat that reaches it")
    if isinstance(spec, LiquidPlate) and (spec.positions > 1) != (spec.legs_along_flow is not None):
        raise RangeError("cooling.legs_along_flow", "nothing beside several positions" if spec.legs_along_flow is None else "an order with one position",
                         "the order in which the coolant reaches the modules, with three positions", 'e.g. legs_along_flow = ["a", "b", "c"]')
    if isinstance(spec, LiquidPlate) and spec.positions > 1 and (spec.positions != 3 or module.arrangement == "six-pack"):
        raise InputError("cooling.positions", f"{spec.positions} positions under {module.name}",
                         "1" if module.arrangement == "six-pack" else "1, or 3: one for each leg", "a six-pack is one module" if module.arrangement == "six-pack" else "")
    if isinstance(spec, LiquidPlate) and spec.heat_shares is not None:
        raise InputError("cooling.heat_shares", "shares in a study", "no such field", "the heat of each module comes from its losses: take it out")
