"""``result.json``: a documented, versioned account of a run.

``ResultDocument`` is the schema; ``mission schema`` prints it as JSON schema.
Within one ``schema_version`` fields are only added.
"""

from __future__ import annotations

import math
import platform
from importlib.metadata import PackageNotFoundError, version

from pydantic import BaseModel, ConfigDict, Field

from .. import __version__

SCHEMA_VERSION = 1
_LIBRARIES = ("numpy", "scipy", "numba", "pandas", "pyarrow", "pydantic", "matplotlib")


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


class LimitEntry(_Part):
    """A limit or the target, held against the result."""

    what: str
    value: float | None = Field(description="null: without end (a life without damage), or not known when the limit is missed")
    limit: float
    unit: str
    met: bool
    margin: float | None = Field(description="positive when met, in the same unit; null: without end, or not known")
    where: str = Field(description="chip, time or failure mode that decides")


class ChipEntry(_Part):
    """One chip over the mission."""

    chip: str
    peak_c: float = Field(description="highest junction temperature [degC]")
    peak_time_s: float = Field(description="end of the duty row that holds it [s from mission start]")
    peak_phase: str
    lowest_c: float
    case_peak_c: float = Field(description="highest temperature of the case (or sink) point under the chip [degC]")
    energy_j: float = Field(description="loss energy of the mission [J]")
    mean_loss_w: float
    beyond_data_s: float = Field(description="time under load outside the temperatures of the data-sheet curves [s]")


class SwingEntry(_Part):
    """The single counted swing that costs most each time it happens."""

    range_k: float
    min_c: float
    max_c: float
    heating_s: float
    start_s: float
    phase: str
    damage: float


class LedgerEntry(_Part):
    """One chip under one failure mode."""

    chip: str
    mode: str
    acts_on: str
    model: str
    damage_per_mission: float
    life_missions: float | None = Field(description="null: no damage")
    life_years: float | None = Field(description="null: no damage")
    cycles: float
    outside_share: float = Field(description="share of the damage from cycles outside the tested range of the coefficients, 0 to 1")
    worst_swing: SwingEntry | None
    damage_by_phase: dict[str, float]
    damage_by_kind: dict[str, float] = Field(description="closed, residue, ripple (output-frequency cycles beyond one per row)")
    damage_by_choice: dict[str, float] = Field(description="damage had an explicit choice of the model been made otherwise")
    left_out_damage: float = Field(description="damage of swings below the mode's threshold, not in damage_per_mission")


class ModelEntry(_Part):
    """A lifetime model as it was used."""

    mode: str
    acts_on: str
    chips: str
    model: str
    source: str
    life_means: str
    tested_range: dict[str, tuple[float, float]]
    options: dict
    threshold_k: float | None


class NetworkEntry(_Part):
    """The thermal network as it was marched."""

    modes_full: int
    modes_kept: int
    local_modes_per_chip: int
    shared_modes: int
    relative_bound: float = Field(description="error bound of junction rises over the steady rise, all chips heated alike")
    error_bound_k: float = Field(description="the same bound [K] if every chip had its highest mean loss of the mission all the time")
    coolant_bound: float = Field(description="largest junction error per kelvin of a coolant step")
    case_bound: float = Field(description="largest steady error of a case point over its rise")
    case_coolant_bound: float = Field(description="largest case-point error per kelvin of a coolant step")
    r_th_k_per_w: list[list[float]] = Field(description="steady self and mutual resistances, junction over coolant")


class LevelEntry(_Part):
    """One level of the cooling that held."""

    setting: str
    r_th_k_per_w: float = Field(description="sink surface to coolant at the inlet, for all the heat")
    grease_factor: float = Field(description="on the module's case-to-sink resistances")
    time_s: float
    coolant_c: float | None = Field(description="coolant at the inlet that it was reckoned for [degC]; null: given, not reckoned")
    flow_m3_per_s: float | None
    pressure_drop_pa: float | None
    regime: str | None = Field(description="kind of flow in the channels")


class ChangeEntry(_Part):
    """A change of the cooling."""

    time_s: float
    setting: str


class CoolingEntry(_Part):
    """The cooling as it was marched."""

    kind: str
    levels: list[LevelEntry] = Field(description="levels that held, longest first")
    changes: int
    first_changes: list[ChangeEntry] = Field(description="at most twenty")
    change_error: float = Field(description="largest error that a change put into a junction, over the steady rise of its heat")
    flags: list[str] = Field(description="use of correlations outside their range, in the transition band, and the like")
    sources: list[str]


class PhaseEntry(_Part):
    """One phase of the duty."""

    phase: str
    time_s: float


class DutyEntry(_Part):
    """The duty as it was read."""

    name: str
    source: str
    rows: int
    duration_s: float
    phases: list[PhaseEntry]
    ranges: dict[str, tuple[float, float]]
    notes: list[str]
    i_peak_max_a: float
    mod_index_max: float
    frequency_max_hz: float


class StabilityEntry(_Part):
    """Feedback of losses and temperature at the hottest point of the mission."""

    loop_gain: float = Field(description="with the temperatures there; a disturbance dies out below 1")
    settles_at_c: float | None = Field(description="hottest mean junction if that point lasted for ever [degC]; null: no stable temperature exists")
    runaway_coolant_c: float | None = Field(description="coolant from which on that point, lasting for ever, runs away [degC]; null: never")
    coolant_c: float
    words: str


class ResultDocument(_Part):
    """Everything a run says, apart from the long tables."""

    schema_version: int = SCHEMA_VERSION
    program: str
    study: str
    study_file: str
    complete: bool = Field(description="false: stopped before the mission's end; lives then stand for the part that was marched")
    passes: int = Field(description="how often the mission was marched until it closed on itself")
    closes_within_k: float | None = Field(description="largest junction difference between start and end, or what is left to the start that repeats itself [K]")
    closed: bool = Field(description="false: a mission that should repeat did not close on its start; a cooling that switches differently from pass to pass does that")
    ok: bool = Field(description="every limit and the target met")
    limits: list[LimitEntry]
    duty: DutyEntry
    module: str
    module_source: str
    chips: list[ChipEntry]
    ledger: list[LedgerEntry]
    models: list[ModelEntry]
    network: NetworkEntry
    cooling: CoolingEntry
    gate_power_per_switch_w: float
    gate_peak_current_a: float
    thermal_stability: StabilityEntry
    rests_on: list[str] = Field(description="what the numbers rest on: extrapolation, choices, simplifications")
    cautions: list[str]
    inputs: dict = Field(description="the study file as it was understood")
    versions: dict[str, str]


CAUTIONS = (
    "Results are engineering estimates. Verify temperatures and life on the real device before anyone relies on them.",
    "A drive's DC link is at lethal voltage and stays charged after the supply is off: let it discharge, prove it dead, earth it before touching.",
    "Modules, sinks and coolant lines run hot enough to burn; a module that fails can burst.",
    "Local codes, the makers' instructions and licensed practice rule over anything printed here.",
)


NOT_CLOSED = ("the mission does not close on its start: {:.3g} K are left after {}; a cooling that switches differently from mission to mission does that. "
              "Temperatures and damage stand for one of these missions; give several of them as one duty")


def rests_on(result) -> list[str]:
    """What the result rests on, in sentences for the report."""
    study, history, tables, net = result.study, result.history, result.tables, result.network
    out = []
    for mode in study.modes:
        out.append(f"{mode.name}: {mode.model.name}, life = {mode.model.life_means}; {mode.model.source}; tested range: {mode.model.tested_text()}")
    out.extend(result.ledger.warnings())
    if result.i_peak_max_a > tables.current_data_end_a:
        out.append(f"the duty reaches {result.i_peak_max_a:.4g} A peak; the first data-sheet curve ends at {tables.current_data_end_a:g} A and is extended in a straight line")
    low, high = tables.temperature_data_c
    worst = int(history.beyond_data_s.argmax())
    if history.beyond_data_s[worst] > 0.0:
        out.append(f"{history.chips[worst]} is under load for {history.beyond_data_s[worst]:.4g} s ({history.beyond_data_s[worst] / history.duration_s:.1%} of the mission) "
                   f"outside {low:g} to {high:g} degC, the temperatures of the data-sheet curves; losses are extended in a straight line there")
    out.extend(result.shortfall.words())
    out.extend(_how_losses(study))
    if result.carriers_min < FEW_CARRIERS:
        out.append(f"losses: down to {result.carriers_min:.3g} switching periods in an output period; losses are means over a switching period and mean little below {FEW_CARRIERS}")
    if study.spec.cooling.sink_sees == "chip-losses":
        out.append("heat: the sink is driven by the chips' losses at once (cooling.sink_sees = chip-losses), not by the heat that leaves the module")
    elif study.module.plate is not None:
        out.append("heat: layers under each chip with spreading at fixed angles (a shortcut of the trade) down to a plate that is solved in three dimensions; heat enters it "
                   "evenly over the face that a chip's layers end with, and leaves through even paste to a sink surface of one temperature")
    elif any(pair.thermal.layer for pair in study.module.chip_pairs()):
        out.append("heat: layers under each chip with spreading at fixed angles (a shortcut of the trade); the sink takes the heat that leaves them")
    else:
        out.append("heat: data-sheet branches turned into ladders, so that case and sink take the heat that leaves the chips, not the heat that enters")
    out.extend(_how_heat(result))
    if net.case_coolant_bound > 0.02 and any(m.acts_on == "case" for m in study.modes):
        out.append(f"heat: with a sink that stores no heat, case points follow a coolant step with an error of up to {net.case_coolant_bound:.0%} of the step; "
                   "give the sink's heat capacity if the coolant jumps")
    if not result.complete:
        out.append("the run did not reach the mission's end, so it could not close on its start; the residue is counted as half cycles")
    elif study.spec.march.start == "repeat":
        passes = f"{result.passes} pass{'es' if result.passes > 1 else ''}"
        if result.closed:
            out.append(f"the mission repeats: start and end temperatures agree within {result.closes_within_k:.2g} K after {passes}")
        else:
            out.append(NOT_CLOSED.format(result.closes_within_k, passes))
    else:
        out.append(f"the mission starts with everything at the coolant's temperature and ends {result.closes_within_k:.3g} K away from its start")
    out.append("residue of the rainflow count: closed by repeating the mission" if study.spec.lifetime.residue == "repeat" else
               "residue of the rainflow count: half cycles")
    out.append(f"electrical angle carried through the mission from {study.spec.march.start_angle_deg:g} degrees; which chip holds a standstill load depends on it")
    if not result.complete:
        out.append(f"the run was stopped at {history.duration_s:.6g} s: what is shown stands for that part only")
    out.extend(f"module: {note}" for note in study.module.notes)
    out.extend(f"duty: {note}" for note in study.profile.notes)
    return out


#: With fewer switching periods in an output period, means over a switching period say little.
FEW_CARRIERS = 10


def _how_losses(study):
    """What the losses rest on, in sentences."""
    inverter, module = study.spec.inverter, study.module
    reach = "up to six-step" if inverter.overmodulation else "linear range"
    if inverter.dead_time_us == 0.0:
        dead = "dead time and current ripple are neglected"
    else:
        dead = (f"dead time of {inverter.dead_time_us:g} us, " + ("its voltage corrected by the control" if inverter.dead_time_compensated
                                                                     else "which moves share from switches to diodes") + "; current ripple is neglected")
    yield f"losses: {inverter.modulation.value} modulation, {reach}; {dead}; curves are linear between their points"
    if inverter.schedule:
        over = ", ".join({"output-frequency": "output frequency", "current": "phase current", "junction": "junction temperature"}[s.over] for s in inverter.schedule)
        yield f"losses: the switching frequency follows {over}; straight between the points of the schedule, constant beyond them"
    if module.levels == 3:
        yield "losses: three-level legs with a balanced midpoint; each commutation sees half the DC voltage"
    if module.kind == "reverse-conducting-igbt":
        yield "losses: the gate does not change the reverse on-state of the reverse-conducting chips"


def _end(value):
    return None if not math.isfinite(value) else float(value)


def build_document(result) -> ResultDocument:
    """The account of a result."""
    from ..study.verdicts import gate_figures, stability

    study, history, net = result.study, result.history, result.network
    gate_w, gate_a = gate_figures(result)
    steady = stability(result)
    mean_loss = history.energy_j / history.duration_s
    peak_loss = history.loss_w.max(axis=0)
    chips = [ChipEntry(
        chip=c, peak_c=float(history.peak_c[i]), peak_time_s=float(history.peak_time_s[i]), peak_phase=history.phases[int(history.peak_phase_id[i])],
        lowest_c=float(history.lowest_c[i]), case_peak_c=float(history.case_peak_c[i]), energy_j=float(history.energy_j[i]),
        mean_loss_w=float(mean_loss[i]), beyond_data_s=float(history.beyond_data_s[i])) for i, c in enumerate(history.chips)]
    ledger = [LedgerEntry(
        chip=r.chip, mode=r.mode, acts_on=r.acts_on, model=r.model, damage_per_mission=r.damage_per_mission, life_missions=_end(r.life_missions),
        life_years=_end(r.life_years), cycles=r.cycles, outside_share=r.outside_share,
        worst_swing=SwingEntry(range_k=r.worst_range_k, min_c=r.worst_min_c, max_c=r.worst_max_c, heating_s=r.worst_heating_s, start_s=r.worst_start_s,
                               phase=r.worst_phase, damage=r.worst_damage) if r.worst_damage > 0.0 else None,
        damage_by_phase=r.damage_by_phase, damage_by_kind=r.damage_by_kind, damage_by_choice=r.damage_by_choice,
        left_out_damage=r.left_out_damage) for r in result.ledger.rows()]
    models = [ModelEntry(
        mode=m.name, acts_on=m.acts_on, chips=m.chips, model=m.model.name, source=m.model.source, life_means=m.model.life_means,
        tested_range=m.model.tested_range, options=dict(m.model.options), threshold_k=m.threshold_k) for m in study.modes]
    return ResultDocument(
        program=f"kelvinledger {__version__}", study=study.name, study_file=study.source, complete=result.complete, passes=result.passes,
        closes_within_k=_end(result.closes_within_k), closed=result.closed, ok=result.ok,
        limits=[LimitEntry(what=v.what, value=_end(v.value), limit=v.limit, unit=v.unit, met=v.met, margin=_end(v.margin), where=v.where)
                for v in result.verdicts],
        duty=DutyEntry(
            name=study.profile.name, source=study.profile.source, rows=study.profile.rows, duration_s=study.profile.duration_s,
            phases=[PhaseEntry(phase=p, time_s=t) for p, t in zip(study.profile.phases, study.profile.time_by_phase_s)],
            ranges=study.profile.ranges, notes=list(study.profile.notes), i_peak_max_a=result.i_peak_max_a,
            mod_index_max=result.mod_index_max, frequency_max_hz=result.frequency_max_hz),
        module=study.module.name, module_source=study.module.source, chips=chips, ledger=ledger, models=models,
        network=NetworkEntry(
            modes_full=net.n_full, modes_kept=net.n_modes, local_modes_per_chip=net.lam_local_per_s.shape[0], shared_modes=net.lam_shared_per_s.size,
            relative_bound=net.relative_bound, error_bound_k=float(net.error_bound_k(peak_loss).max()), coolant_bound=net.coolant_bound,
            case_bound=net.case_bound, case_coolant_bound=net.case_coolant_bound,
            r_th_k_per_w=net.r_th_k_per_w().tolist()),
        cooling=_cooling(result), gate_power_per_switch_w=gate_w, gate_peak_current_a=gate_a,
        thermal_stability=StabilityEntry(loop_gain=steady.loop_gain, settles_at_c=steady.settles_at_c, runaway_coolant_c=steady.runaway_coolant_c,
                                         coolant_c=steady.coolant_c, words=steady.words),
        rests_on=rests_on(result), cautions=list(CAUTIONS),
        inputs=study.spec.model_dump(mode="json", exclude_none=True), versions=_versions(),
    )


def _cooling(result) -> CoolingEntry:
    record = result.cooling
    levels = []
    for one in record.used:
        s, p = one.state, one.state.point
        levels.append(LevelEntry(
            setting=s.words, r_th_k_per_w=s.r_th_k_per_w, grease_factor=s.path.paste, time_s=one.time_s, coolant_c=None if p is None else p.inlet_c,
            flow_m3_per_s=None if p is None else p.flow_m3_per_s, pressure_drop_pa=None if p is None else p.pressure_drop_pa, regime=None if p is None else p.regime))
    changes = [ChangeEntry(time_s=t, setting=record.plan.state(k).words) for t, k in record.changes[:20]]
    return CoolingEntry(kind=record.plan.spec.kind, levels=levels, changes=record.n_changes, first_changes=changes, change_error=record.move_error,
                        flags=list(result.cooling_flags), sources=list(record.sources))


def _how_heat(result):
    """What sink and cooling rest on, in sentences."""
    spec, record, net, asked = result.study.spec.cooling, result.cooling, result.network, result.study.spec.march.network_tolerance
    if record.used[0].state.path.coolant_rise_k_per_w > 0.0:
        yield ("heat: a sink of its own under each module, the coolant reaching them in the order " + ", ".join(spec.legs_along_flow)
               + "; heat conducted along the plate from one to the other is left out")
    else:
        yield "heat: one sink temperature for all chips"
    yield (f"heat: {net.n_full} modes reduced to {net.lam_local_per_s.shape[0]} local ones a chip and {net.lam_shared_per_s.size} shared, "
           f"error of a junction at most {net.relative_bound:.2%} of its rise" + ("" if net.relative_bound <= asked else f"; {asked:.2%} was asked for (march.network_tolerance)"))
    if record.n_changes:
        yield (f"cooling: {record.n_changes} changes between {len(record.used)} levels; a change leaves every mass at its temperature, and junctions right to "
               f"{record.move_error:.2%} of their steady rise")
    if any(len(g.levels) > 1 for g in record.plan.groups):
        yield "cooling: the sink's surface is looked at once a second; what changes smoothly is followed in steps of 2 % of the resistance"
    if spec.fault:
        yield "cooling: the fault happens in every mission; its life stands for missions with it"
    if spec.grease is not None:
        factors = [one.state.path.paste for one in record.used]
        span = f"{min(factors):.3g}" + (f" to {max(factors):.3g}" if max(factors) > min(factors) else "")
        yield f"cooling: case-to-sink resistances times {span} for the age of the grease, a course that the study states"
    if record.plan.computed and spec.heat_w is None and spec.kind not in ("flow-table", "plate-fin-natural"):
        yield "cooling: fluid properties at the inlet temperature, as no heat_w is given; the coolant's own rise is in the resistance"
    for text in result.cooling_flags:
        yield f"cooling, to be mistrusted: {text}"


def _versions() -> dict[str, str]:
    out = {"kelvinledger": __version__, "python": platform.python_version()}
    for name in _LIBRARIES:
        try:
            out[name] = version(name)
        except PackageNotFoundError:
            continue
    return out
