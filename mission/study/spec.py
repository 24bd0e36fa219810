"""The study file: one TOML that says what is to be reckoned."""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from functools import cached_property
from pathlib import Path
from typing import Annotated, Literal

import numpy as np
from pydantic import Field, model_validator

from .. import device
from ..device import PowerModule, shipped_modules
from ..duty import DutySource, MissionProfile, read_profile
from ..errors import InputError, RangeError, near_match
from ..lifetime import FailureMode, resolve_modes
from ..losses import MOD_INDEX_SIX_STEP, Modulation
from ..machine import MachineSpec
from ..thermal import CoolingPlan, CoolingSpec, load_materials, materials_at
from ..tomlfile import FileModel, parse_model, read_model, read_toml

#: A study finds shipped modules by name whatever the current folder holds.
_SHIPPED = Path(device.__file__).parent / "modules"
_Positive = Annotated[float, Field(gt=0)]


class ModuleRef(FileModel):
    """Which module: a shipped one by name, or a file of the user's; ``materials``: a file of further layer materials;
    ``conductivity_at_c``: temperature at which materials with a law over temperature have their conductivity (one value, held)."""

    name: str | None = None
    file: str | None = None
    materials: str | None = None
    conductivity_at_c: Annotated[float, Field(ge=-60, le=250)] | None = None

    @model_validator(mode="after")
    def _one(self):
        if (self.name is None) == (self.file is None):
            raise RangeError("module", "neither name nor file" if self.name is None else "both name and file",
                             "either name (a shipped module) or file (a path that counts from the study file)")
        return self


class ScheduleSpec(FileModel):
    """Highest switching frequency over a quantity: straight between the points, constant beyond them.

    ``over``: output frequency [Hz], phase current [A rms], or junction temperature of the hottest
    chip [degC], which makes it a derating.
    """

    over: Literal["output-frequency", "current", "junction"]
    at: tuple[float, ...]
    hz: tuple[_Positive, ...]

    @model_validator(mode="after")
    def _sensible(self):
        if len(self.at) < 2 or len(self.at) != len(self.hz):
            raise RangeError("at", f"{len(self.at)} values in at beside {len(self.hz)} in hz", "at least two values, and a frequency for each",
                             "complete the shorter list")
        for k, (a, b) in enumerate(zip(self.at, self.at[1:]), 2):
            if b <= a:
                raise RangeError("at", f"{b:g} at point {k} after {a:g}", "values that rise from point to point", "sort the points")
        low, high, unit, hint = {"output-frequency": (0.0, 5e3, "Hz", "frequencies are in Hz"), "current": (0.0, 20e3, "A rms", "currents are in A rms"),
                                 "junction": (-60.0, 250.0, "degC", "temperatures are in degrees Celsius")}[self.over]
        for one in self.at:
            if not low <= one <= high:
                raise RangeError("at", f"{one:g} {unit}", f"{low:g} to {high:g} {unit}", hint)
        if max(self.hz) > 200e3:
            raise RangeError("hz", f"{max(self.hz):g} Hz", "at most 200000 Hz", "frequencies are in Hz")
        return self


class DriverSpec(FileModel):
    """What the gate driver can deliver to one gate."""

    power_w: _Positive
    peak_current_a: _Positive


class InverterSpec(FileModel):
    """How the bridge is driven."""

    switching_frequency_hz: float = Field(gt=0, le=200e3)
    modulation: Modulation
    dc_voltage_v: float | None = Field(default=None, gt=0, le=20e3)
    overmodulation: bool = False
    dead_time_us: float = Field(default=0.0, ge=0, le=50)
    dead_time_compensated: bool = False
    r_gate_on_ohm: float | None = Field(default=None, ge=0, le=1000)
    r_gate_off_ohm: float | None = Field(default=None, ge=0, le=1000)
    stray_inductance_nh: float | None = Field(default=None, ge=0, le=10e3)
    driver: DriverSpec | None = None
    schedule: tuple[ScheduleSpec, ...] = ()

    @model_validator(mode="after")
    def _together(self):
        if self.overmodulation and self.modulation.holds:
            raise RangeError("overmodulation", f"true with modulation = '{self.modulation.value}'", "false for modulations that hold a phase",
                             "choose sine, third-harmonic, third-harmonic-quarter or space-vector")
        if self.dead_time_us * 1e-6 * self.switching_frequency_hz > 0.1:
            raise RangeError("dead_time_us", f"{self.dead_time_us:g} us at {self.switching_frequency_hz:g} Hz",
                             "at most a tenth of the switching period", "dead time is in microseconds, the frequency in Hz")
        names = [s.over for s in self.schedule]
        for name in names:
            if names.count(name) > 1:
                raise RangeError("schedule", f"{names.count(name)} schedules over '{name}'", "one for each quantity", "join their points")
        return self

    @property
    def mod_index_max(self) -> float:
        """Largest modulation index that the bridge makes."""
        return MOD_INDEX_SIX_STEP if self.overmodulation else self.modulation.mod_index_max

    def switching_hz(self, points):
        """Switching frequency of operating points: the fixed one, lowered by the schedules over output frequency and current [Hz]."""
        return np.minimum(self.switching_frequency_hz, self.scheduled_hz(points))

    def scheduled_hz(self, points):
        """What the schedules over output frequency and current allow at most; infinite without any [Hz]."""
        out = np.full(points.frequency_hz.shape, np.inf)
        for one in self.schedule:
            if one.over != "junction":
                quantity = points.frequency_hz if one.over == "output-frequency" else points.i_peak_a / np.sqrt(2.0)
                out = np.minimum(out, np.interp(quantity, one.at, one.hz))
        return out

    @property
    def derating(self):
        """Temperatures [degC] and highest switching frequencies [Hz] of the schedule over the junction, or None."""
        for one in self.schedule:
            if one.over == "junction":
                return np.array(one.at), np.array(one.hz)
        return None

    def table_options(self) -> dict:
        """What the loss tables need to know."""
        return {"overmodulation": self.overmodulation, "dead_time_s": 1e-6 * self.dead_time_us, "dead_time_compensated": self.dead_time_compensated,
                "r_gate_on_ohm": self.r_gate_on_ohm, "r_gate_off_ohm": self.r_gate_off_ohm}


class MarchSpec(FileModel):
    """How finely the temperatures are marched; the defaults suit most duties."""

    start: Literal["repeat", "coolant"] = "repeat"
    start_angle_deg: float = Field(default=0.0, ge=-360, le=360)
    slow_below_hz: float = Field(default=5.0, ge=0.1, le=1000)
    steps_per_period: int = Field(default=128, ge=32, le=4096)
    network_tolerance: float = Field(default=1e-3, gt=0, le=0.05)


class LifetimeSpec(FileModel):
    """What the mission means per year, and what wears out."""

    missions_per_year: _Positive
    target_years: _Positive | None = None
    residue: Literal["repeat", "half"] = "repeat"
    failure_mode: tuple[FailureMode, ...] | None = None


class LimitSpec(FileModel):
    """Limits that are stricter (or laxer) than the module's ratings."""

    t_vj_max_c: float | None = Field(default=None, ge=-40, le=300)
    i_peak_max_a: _Positive | None = None


class StudySpec(FileModel):
    """A study file, field by field."""

    format: Literal[1]
    name: str = Field(min_length=1)
    duty: DutySource
    machine: MachineSpec
    module: ModuleRef
    inverter: InverterSpec
    cooling: CoolingSpec
    lifetime: LifetimeSpec
    limits: LimitSpec = LimitSpec()
    march: MarchSpec = MarchSpec()


@dataclass(frozen=True)
class Study:
    """A checked study: the file's content, the module and the profile it names.

    Attributes
    ----------
    spec : StudySpec
    module : PowerModule
    profile : MissionProfile
    modes : tuple of FailureMode
        The study's own, else the module's.
    source : str
        File that the study was read from.
    """

    spec: StudySpec
    module: PowerModule
    profile: MissionProfile
    modes: tuple
    source: str
    folder: Path

    @property
    def name(self) -> str:
        """Name of the study."""
        return self.spec.name

    def materials(self) -> dict:
        """Materials for layer stacks: the shipped ones, and the study's own over them."""
        own, at_c = self.spec.module.materials, self.spec.module.conductivity_at_c
        materials = load_materials(None if own is None else self.folder / own)
        if at_c is None:
            return materials
        used = {layer.material for pair in self.module.chip_pairs() for layer in pair.thermal.layer}
        used |= {layer.material for layer in self.module.plate.layer} if self.module.plate is not None else set()
        return {**materials, **materials_at({n: m for n, m in materials.items() if n in used}, at_c)}

    def coolant_range_c(self) -> tuple[float, float]:
        """Lowest and highest coolant temperature of the duty [degC]."""
        given = self.spec.cooling.coolant_c
        return self.profile.ranges["coolant_c"] if given is None else (given, given)

    def cooling_plan(self, coolant_c: float | None = None) -> CoolingPlan:
        """Levels of the cooling, and which holds when; at one ``coolant_c`` [degC] in place of the duty's, if given."""
        return self._plan if coolant_c is None else self._planned((coolant_c, coolant_c))

    @cached_property
    def _plan(self) -> CoolingPlan:
        return self._planned(self.coolant_range_c())

    def _planned(self, coolant_c: tuple[float, float]) -> CoolingPlan:
        flow = self.profile.ranges.get("flow_m3_per_s")
        still = flow is not None and flow[0] == 0.0
        if still:
            running = [v[v > 0.0].min(initial=np.inf) for v in (b.columns["flow_m3_per_s"] for b in self.profile.blocks())]
            flow = (float(min(running)), flow[1])
            if not np.isfinite(flow[0]):
                raise InputError(f"{self.profile.source}, column for flow", "no flow at all", "a flow in some rows", "take the column out and give the sink as it stands without flow")
        try:
            plan = CoolingPlan(self.spec.cooling, self.module, coolant_c=coolant_c, flow_m3_per_s=flow, stands_still=still,
                               duration_s=self.profile.duration_s, materials=self.materials(), relative_tolerance=self.spec.march.network_tolerance)
        except InputError as err:
            raise err.at(self.source) from None
        plan.source = self.source
        return plan

    def with_profile(self, profile: MissionProfile) -> Study:
        """The same study on another duty."""
        changed = replace(self, profile=profile)
        _check_together(changed)
        return changed

    def changed(self, section: str, **values) -> Study:
        """The same study with other values in one section of the file, checked like the file.

        Examples
        --------
        A study at another switching frequency: ``study.changed("inverter", switching_frequency_hz=4000)``.
        """
        data = self.spec.model_dump(mode="python", exclude_none=True)
        if section not in StudySpec.model_fields:
            raise InputError("section", f"'{section}'", "one of " + ", ".join(StudySpec.model_fields))
        if not isinstance(data[section], dict):
            raise InputError("section", f"'{section}', which is a single value", "one of " + ", ".join(k for k, v in data.items() if isinstance(v, dict)))
        old = data[section]
        if "kind" in values and values["kind"] != old.get("kind"):
            # fields of another kind mean nothing here; what every kind has stays
            known = {"coolant_c", "sink_sees", "grease"} if section == "cooling" else set()
            old = {k: v for k, v in old.items() if k in known}
        data[section] = {**old, **values}
        spec = parse_model(data, StudySpec, self.source)
        return _assemble(spec, self.source, self.folder, profile=self.profile if section != "duty" else None)


def load_study(path) -> Study:
    """Read and check a study file with everything it names.

    Parameters
    ----------
    path : path-like
        A TOML file; paths in it count from its folder.

    Returns
    -------
    Study

    Raises
    ------
    InputError
        First thing that the study, module, profile or a coefficient file gets wrong.
    """
    path = Path(path)
    spec = parse_model(read_toml(path), StudySpec, str(path))
    return _assemble(spec, str(path), path.parent)


def _assemble(spec: StudySpec, source: str, folder: Path, profile=None) -> Study:
    if spec.module.name is None:
        module = read_model(folder / spec.module.file, PowerModule)
    elif spec.module.name in shipped_modules():
        module = read_model(_SHIPPED / f"{spec.module.name}.toml", PowerModule)
    else:
        raise InputError(f"{source}, field module.name", f"'{spec.module.name}'", "a shipped module: " + ", ".join(shipped_modules()),
                         near_match(spec.module.name, shipped_modules()) or "give file = \"...\" for a module file of your own")
    if profile is None:
        try:
            profile = read_profile(spec.duty, folder)
        except InputError as err:
            if not err.where.startswith("field "):
                raise
            raise InputError(f"{source}, {err.where}", err.found, err.allowed, err.advice) from None
    study = Study(spec, module, profile, (), source, folder)
    _check_together(study)
    if spec.module.conductivity_at_c is not None and not any(pair.thermal.layer for pair in module.chip_pairs()):
        raise InputError(f"{source}, field module.conductivity_at_c", f"{spec.module.conductivity_at_c:g} degC, and no layers in {module.name}",
                         "a module given by layers", "data-sheet branches hold the conductivities they were measured with: take the field out")
    if spec.module.materials is not None:
        load_materials(folder / spec.module.materials)
    modes = resolve_modes(spec.lifetime.failure_mode, module, folder=folder, where=source)
    return replace(study, modes=modes)


def _check_together(study: Study) -> None:
    """What only shows when the parts are put together."""
    spec, profile, module = study.spec, study.profile, study.module
    has = profile.quantities
    if spec.cooling.coolant_c is None and "coolant_c" not in has:
        raise InputError(f"{study.source}, section cooling", "no coolant temperature", "cooling.coolant_c, or a coolant column in duty.columns",
                         "add coolant_c = ... (degC) under [cooling], or name the column")
    if spec.cooling.coolant_c is not None and "coolant_c" in has:
        raise InputError(f"{study.source}, field cooling.coolant_c", f"{spec.cooling.coolant_c:g} degC beside a coolant column in the profile",
                         "one of the two", "remove coolant_c, or take the column out of duty.columns")
    if spec.inverter.dc_voltage_v is None and "dc_voltage_v" not in has:
        raise InputError(f"{study.source}, section inverter", "no DC-link voltage", "inverter.dc_voltage_v, or a dc_voltage column in duty.columns",
                         "add dc_voltage_v = ... under [inverter]")
    if spec.inverter.dc_voltage_v is not None and "dc_voltage_v" in has:
        raise InputError(f"{study.source}, field inverter.dc_voltage_v", f"{spec.inverter.dc_voltage_v:g} V beside a dc_voltage column in the profile",
                         "one of the two", "remove one of them")
    from_duty = "dc_voltage_v" in has
    top = profile.ranges["dc_voltage_v"][1] if from_duty else spec.inverter.dc_voltage_v
    if top >= module.v_dc_limit_v:
        where = f"{profile.source}, column '{spec.duty.columns.dc_voltage.column}'" if from_duty and spec.duty.columns.dc_voltage else f"{study.source}, field inverter.dc_voltage_v"
        raise InputError(where, f"{top:g} V", f"below {'twice ' if module.arrangement == 'npc-leg' else ''}the blocking voltage of {module.name}, {module.ratings.v_ces_v:g} V",
                         "check the unit, or choose a module of a higher voltage class")
    if spec.inverter.stray_inductance_nh is not None and module.switching is None:
        raise InputError(f"{study.source}, field inverter.stray_inductance_nh", f"{spec.inverter.stray_inductance_nh:g} nH, and no section switching in {module.name}",
                         "a module file with [switching] (its own inductance and fall time)", "add the section to the module file, or take the field out")
    needs = {"synchronous": ("speed_rad_s",), "induction": ("speed_rad_s",), "induction-vf": ("frequency_hz" if "frequency_hz" in has else "speed_rad_s",),
             "direct": ("frequency_hz", "mod_index", "phi_rad", "current_a")}[spec.machine.kind]
    words = {"speed_rad_s": "speed", "frequency_hz": "frequency", "mod_index": "mod_index", "phi_rad": "displacement or power_factor", "current_a": "current"}
    for quantity in needs:
        if quantity not in has:
            raise InputError(f"{study.source}, section duty.columns", f"no column for {words[quantity]}",
                             f"{words[quantity]}, which machine.kind = '{spec.machine.kind}' needs", "map the column, or choose another machine.kind")
    if spec.machine.kind != "direct":
        if ("current_a" in has) == ("torque_nm" in has):
            raise InputError(f"{study.source}, section duty.columns", "both current and torque" if "current_a" in has else "neither current nor torque",
                             "current or torque, one of them", "map one of the two columns")
        extra = {"speed_rad_s", "frequency_hz", "mod_index", "phi_rad"} - set(needs) & has
    else:
        extra = {"speed_rad_s", "torque_nm"} & has
    if extra:
        raise InputError(f"{study.source}, section duty.columns", f"a column for {', '.join(sorted(extra))}",
                         f"no such column with machine.kind = '{spec.machine.kind}', which would ignore it", "take it out of duty.columns")
    if spec.machine.kind == "direct" and profile.ranges["mod_index"][1] > spec.inverter.mod_index_max * (1 + 1e-9):
        raise InputError(f"{profile.source}, column for mod_index", f"{profile.ranges['mod_index'][1]:.6g}",
                         f"at most {spec.inverter.mod_index_max:.5g} with modulation = '{spec.inverter.modulation.value}'",
                         "check the definition (peak phase voltage over half the DC voltage), choose space-vector modulation, or allow overmodulation")


def check_rows(study: Study) -> None:
    """Turn every row into an operating point, so that one which the machine or the module cannot reach is found without a run."""
    from ..losses import current_reach_a
    from ..machine import operating_points

    module, source = study.module, study.profile.source
    reach = current_reach_a(module)
    inverter = study.spec.inverter
    for block in study.profile.blocks():
        try:
            points = operating_points(block, study.spec.machine, dc_voltage_v=inverter.dc_voltage_v,
                                      mod_index_max=inverter.mod_index_max, where=source)
        except InputError as err:
            row = re.match(r", row (\d+)", err.where.removeprefix(source))
            if row is None:
                raise
            # the machine counts rows; the reader of a CSV file counts lines
            where = f"{source}, {study.profile.place(int(row[1]) - 1)}{err.where.removeprefix(source)[row.end():]}"
            raise InputError(where, err.found, err.allowed, err.advice) from None
        if points.i_peak_a.max() > reach:
            k = int(np.argmax(points.i_peak_a > reach))
            raise InputError(f"{source}, {study.profile.place(block.first_row + k)} (t = {block.time_s[k]:g} s)", f"a peak current of {points.i_peak_a[k]:.4g} A",
                             f"at most {reach:.4g} A (twice the end of the curves of {module.name})", "check the unit (rms or peak), or choose a larger module")


def check_parts(study: Study) -> None:
    """Build the loss tables and the thermal network once, so that parts which do not go together are found without a run."""
    from ..history import check_fit
    from ..losses import build_tables

    plan = study.cooling_plan()
    try:
        tables = build_tables(study.module, study.spec.inverter.modulation, **study.spec.inverter.table_options())
        networks = plan.networks()
        for group in plan.groups:  # first and last level of each, which are the extremes
            for level in {group.levels[0], group.levels[-1]} if len(plan.groups) <= 4 else {group.levels[0]}:
                plan.state(level)
        check_fit(tables, networks.network(0))
        for level in {plan.groups[0].levels[0], plan.groups[-1].levels[-1]} if len(plan.levels) > 1 else ():
            networks.network(level)
    except InputError as err:
        raise (err if err.where.startswith(study.source) else err.at(study.source)) from None
