"""From a checked study to a result: one pass over the duty, block by block."""

from __future__ import annotations

import re
import time
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from ..cycles import CycleCounter, CycleTable, RippleClasses
from ..errors import InputError, MissionError
from ..history import MOST_PIECES, ElectrothermalMarch, EnvelopeBuilder, HeldPoint, JunctionHistory, MarchSettings
from ..lifetime import DamageLedger
from ..losses import LossTables, build_tables
from ..machine import Shortfall, operating_points
from ..thermal import CoolingPlan, LevelState, ReducedNetwork
from .cyclemap import CycleMap
from .spec import Study

BLOCK_ROWS = 65536
#: A repeated mission starts and ends at the same temperatures within this [K], or this share of its largest swing.
PERIODIC_WITHIN_K, PERIODIC_WITHIN_SHARE = 0.02, 0.002
MAX_PASSES = 40
#: Rows whose peaks differ by less than this are equally hot [K].
HOT_ALIKE_K = 0.1

Progress = Callable[[float, str], None]


class Stopped(MissionError):
    """Raised inside a run to end it early; what is done so far is kept."""


@dataclass(frozen=True)
class HotPoint:
    """The row with the highest junction temperature, as an operating point; n chips.

    ``t_vj_c`` and ``case_c`` (n,): highest temperatures in that row. ``level``: that of the cooling at its end. ``end_s``: its end in the mission, ``theta_rad``: angle of
    the current of phase a there. The switching frequency is the one in force, derating included.
    """

    i_peak_a: float
    mod_index: float
    phi_rad: float
    frequency_hz: float
    direction: float
    switching_frequency_hz: float
    dc_voltage_v: float
    coolant_c: float
    end_s: float
    phase_id: int
    theta_rad: float
    level: int
    t_vj_c: np.ndarray
    case_c: np.ndarray

    def held(self, tables, network):
        """The point on a network, as if it lasted for ever: a :class:`mission.history.HeldPoint`."""
        return HeldPoint(tables, network, i_peak_a=self.i_peak_a, mod_index=self.mod_index, phi_rad=self.phi_rad, frequency_hz=self.frequency_hz,
                         direction=self.direction, switching_frequency_hz=self.switching_frequency_hz, dc_voltage_v=self.dc_voltage_v, theta_rad=self.theta_rad)


@dataclass(frozen=True)
class LevelTime:
    """A level of the cooling and how long it held."""

    level: int
    time_s: float
    state: LevelState


@dataclass(frozen=True)
class CoolingRecord:
    """What the cooling did in the mission.

    Attributes
    ----------
    plan : CoolingPlan
    used : tuple of LevelTime
        Levels that held, longest first.
    changes : tuple of (float, int)
        Times [s] and levels entered, the first thousand.
    n_changes : int
    move_error : float
        Largest difference that a change made to a junction, over its rise; see :class:`mission.thermal.Move`.
    """

    plan: CoolingPlan
    used: tuple[LevelTime, ...]
    changes: tuple[tuple[float, int], ...]
    n_changes: int
    move_error: float

    @property
    def flags(self) -> tuple[str, ...]:
        """What to mistrust in the levels that held, each said once, with the share of the time where it is not all of it."""
        # flags carry numbers of their own level; the one that held longest speaks for all of its kind
        whole, said = sum(u.time_s for u in self.used), {}
        for one in self.used:
            for text in () if one.state.point is None else one.state.point.flags:
                kind = re.sub(r"[0-9][0-9.,e+-]*", "#", text)
                first, time_s = said.get(kind, (text, 0.0))
                said[kind] = first, time_s + one.time_s
        return tuple(text if time_s >= 0.9995 * whole else f"{text} ({time_s / whole:.1%} of the time)" for text, time_s in said.values())

    @property
    def sources(self) -> tuple[str, ...]:
        """Where the rules come from."""
        return tuple(dict.fromkeys(w for one in self.used if one.state.point is not None for w in one.state.point.sources))


@dataclass(frozen=True)
class MissionResult:
    """Everything that a run leaves.

    Attributes
    ----------
    study : Study
    history : JunctionHistory
    ledger : DamageLedger
    cycle_map : CycleMap
        Cycles and damage by range and mean, for every failure mode.
    network : ReducedNetwork
        The one in force at the hottest point.
    cooling : CoolingRecord
    shortfall : Shortfall
        What a machine with ``beyond = "limit"`` could not deliver.
    tables : LossTables
    cycles : CycleTable or None
        Every counted cycle, if they were kept in memory.
    hot_point : HotPoint
        Operating point of the row that holds the highest junction temperature.
    i_peak_max_a : float
        Highest peak phase current of the duty.
    dc_voltage_max_v, switching_frequency_max_hz, coolant_max_c : float
    mod_index_max, frequency_max_hz : float
    carriers_min : float
        Fewest switching periods in an output period under load.
    complete : bool
        False when the run was stopped before the mission's end.
    passes : int
        How often the mission was marched until it closed on itself.
    closes_within_k : float
        Largest temperature difference between start and end, or what is left to the start that would repeat itself.
    closed : bool
        False when a mission that should repeat did not close on its start.
    wall_s : float
        Time the run took.
    """

    study: Study
    history: JunctionHistory
    ledger: DamageLedger
    cycle_map: CycleMap
    network: ReducedNetwork
    cooling: CoolingRecord
    shortfall: Shortfall
    tables: LossTables
    cycles: CycleTable | None
    hot_point: HotPoint
    i_peak_max_a: float
    dc_voltage_max_v: float
    switching_frequency_max_hz: float
    coolant_max_c: float
    mod_index_max: float
    frequency_max_hz: float
    carriers_min: float
    complete: bool
    passes: int
    closes_within_k: float
    closed: bool
    wall_s: float

    @property
    def ok(self) -> bool:
        """Whether every limit and the target are met."""
        return all(v.met for v in self.verdicts)

    @cached_property
    def verdicts(self):
        """Limits and target with their margins; see :mod:`mission.study.verdicts`."""
        from .verdicts import verdicts

        return verdicts(self)

    @cached_property
    def cooling_flags(self) -> tuple[str, ...]:
        """What to mistrust in the cooling; see :func:`mission.study.verdicts.cooling_flags`."""
        from .verdicts import cooling_flags

        return cooling_flags(self)

    def save(self, folder) -> list:
        """Write all files of the result into ``folder``; returns their paths."""
        from ..show import save_result

        return save_result(self, folder)

    def _repr_html_(self) -> str:
        from ..show.tables import result_html

        return result_html(self)


def run(study: Study, *, progress: Progress | None = None, keep_cycles: bool = True, cycle_sink=None) -> MissionResult:
    """March the mission, count cycles, add up damage.

    Parameters
    ----------
    study : Study
    progress : callable, optional
        Called with the share done (0 to 1 in each pass) and a word; may raise
        ``KeyboardInterrupt`` or :class:`Stopped` to end the run early.
    keep_cycles : bool
        Keep every cycle in memory (``result.cycles``). Switch off for very long duties.
    cycle_sink : callable, optional
        Receives every block of counted cycles as a ``CycleTable``.

    Returns
    -------
    MissionResult

    Raises
    ------
    NoStableTemperature
        The losses run away.
    InputError
        An operating point that the machine or the module cannot reach.

    Examples
    --------
    >>> import mission
    >>> result = mission.run(mission.load_study("profiles/ferry-hour.toml"))  # doctest: +SKIP
    >>> result.ledger.worst().life_years  # doctest: +SKIP
    """
    begin = time.perf_counter()
    spec = study.spec
    tables = build_tables(study.module, spec.inverter.modulation, **spec.inverter.table_options())
    plan = study.cooling_plan()
    networks = plan.networks()
    settings = MarchSettings(f_slow_hz=spec.march.slow_below_hz, steps_per_period=spec.march.steps_per_period,
                             watch_c=np.inf if study.module.ratings.t_vj_overload_c is None else study.module.ratings.t_vj_op_max_c)
    states, theta = None, np.radians(spec.march.start_angle_deg)
    known, seeker = None, _StartSeeker()
    for passes in range(1, MAX_PASSES + 1):
        one = _Pass(study, tables, plan, networks, settings, states, theta, progress, passes, keep_cycles, cycle_sink)
        one.march()
        if not one.complete or spec.march.start == "coolant":
            closed = True
            break
        swing = float((one.envelope.peak_c - one.envelope.lowest_c).max())
        states, off_k = seeker.next(one) if networks.count > 1 else one.next_start()
        one.closes_within_k = max(one.closes_within_k, off_k)
        closed = one.closes_within_k <= max(PERIODIC_WITHIN_K, PERIODIC_WITHIN_SHARE * swing)
        if closed or seeker.exhausted:
            break
        if one.loaded_joint:
            # the current goes on through the joint, and so does its angle
            theta = one.engine.angle_rad
        # with losses that hardly depend on temperature the closing value falls fast; stop when it no longer does
        if networks.count == 1 and known is not None and passes > 4 and one.closes_within_k > 0.9 * known:
            break
        known = one.closes_within_k
    if one.complete and spec.march.start == "repeat":
        one.envelope.join_ends()
    one.close(spec.lifetime.residue)
    return MissionResult(
        study, one.envelope.finish(one.marched_s), one.ledger, one.cycle_map, networks.network(one.hot_point.level), one.cooling_record(networks), one.shortfall, tables, one.kept(),
        one.hot_point, one.i_peak_max, one.dc_voltage_max, one.fsw_max, one.coolant_max, one.mod_index_max, one.frequency_max, one.carriers_min, one.complete, passes, one.closes_within_k, closed, time.perf_counter() - begin,
    )


class _StartSeeker:
    """Seeks the start that repeats itself where the cooling changes.

    What the sink's surface gains over a pass is a function of where it starts. The first steps go where the modes of the levels met would
    go; once one start gains and another loses, the next lies between them (regula falsi, Illinois rule). A controller that switches
    differently from pass to pass may have no such start.
    """

    def __init__(self):
        self._gains = self._loses = None  # (start, what is gained) on either side
        self._side = 0
        self.exhausted = False

    def next(self, one):
        """States to begin the next pass with, and the distance from this pass's start [K]."""
        engine, start = one.engine, one.start_surface_c
        end = engine.surface_c()
        gain = end - start
        if gain >= 0.0:
            self._gains = [start, gain]
            if self._side == 1 and self._loses is not None:
                self._loses[1] *= 0.5
            self._side = 1
        else:
            self._loses = [start, gain]
            if self._side == -1 and self._gains is not None:
                self._gains[1] *= 0.5
            self._side = -1
        far = engine.surface_c(one.next_states(1.0)) - end
        if self._gains is None or self._loses is None:
            # not beyond what still resembles the levels that were met
            reach = 2.0 * abs(end - one.coolant_start_c) + 20.0
            target = end + float(np.clip(far, -reach, reach))
        else:
            (a, up), (b, down) = self._gains, self._loses
            target = b - down * (b - a) / (down - up) if down != up else 0.5 * (a + b)
            self.exhausted = abs(a - b) < 0.5 * PERIODIC_WITHIN_K and abs(gain) > PERIODIC_WITHIN_K
        return one.next_states((target - end) / far if abs(far) > 1e-9 else 0.0), abs(target - start)


class _Pass:
    """One march over the mission with everything that is recorded on the way."""

    def __init__(self, study, tables, plan, networks, settings, states, theta, progress, number, keep, sink):
        self.study, self.tables, self.plan, self.number = study, tables, plan, number
        self._progress, self._states, self._theta, self._keep, self._sink = progress, states, theta, keep, sink
        profile = study.profile
        chips = self.chips = study.module.chip_names()
        self.counter = CycleCounter(2 * len(chips))
        self.ripple = RippleClasses()
        self.ledger = DamageLedger(study.modes, chips, profile.phases, missions_per_year=study.spec.lifetime.missions_per_year)
        self.cycle_map = CycleMap(study.modes, len(chips))
        self.envelope = EnvelopeBuilder(profile.duration_s, chips, profile.phases, tables.temperature_data_c)
        self.engine = ElectrothermalMarch(tables, networks, settings, derating=study.spec.inverter.derating, on_points=self._points, on_ripple=self._ripples)
        self.i_peak_max = self.mod_index_max = self.frequency_max = self.dc_voltage_max = self.fsw_max = 0.0
        self.coolant_max, self.hot_c, self.hot_point, self.loaded_joint, self.carriers_min = -np.inf, -np.inf, None, False, np.inf
        self.shortfall = Shortfall()
        self._group, self._levelled = None, networks.count > 1  # group of the cooling in the latest row
        self.complete, self.marched_s, self._tables_kept = True, 0.0, []

    def _points(self, p):
        self.counter.push(p.signal, p.t_c, p.time_s, p.phase_id, p.half_period_s, p.ripple_k)

    def _ripples(self, r):
        n = len(self.chips)
        table = CycleTable.ripple(
            signal=np.tile(np.arange(n, dtype=np.int16), r.half_period_s.size), range_k=r.range_k.ravel(), mean_c=r.mean_c.ravel(),
            heating_s=np.repeat(r.half_period_s, n), start_s=np.repeat(r.start_s, n), end_s=np.repeat(r.end_s, n),
            phase_id=np.repeat(r.phase_id, n), count=r.count.ravel())
        self._account(table)
        self.ripple.add(table)

    def _account(self, table):
        try:
            damage = self.ledger.add(table)
        except InputError as err:
            raise err.at(self.study.source) from None
        self.cycle_map.add(table, damage)

    def _take(self, table):
        self._account(table)
        if self._keep:
            self._tables_kept.append(table)
        if self._sink is not None:
            self._sink(table)

    def march(self):
        spec, profile = self.study.spec, self.study.profile
        v_study, coolant = spec.inverter.dc_voltage_v, spec.cooling.coolant_c
        first = True
        try:
            for block in profile.blocks(BLOCK_ROWS):
                n = block.dt_s.size
                v_dc = block.columns["dc_voltage_v"] if v_study is None else np.full(n, v_study)
                t_cool = block.columns["coolant_c"] if coolant is None else np.full(n, coolant)
                points = operating_points(block, spec.machine, dc_voltage_v=v_study, mod_index_max=spec.inverter.mod_index_max,
                                          where=profile.source)
                self.shortfall += Shortfall.of(points, block.time_s, block.dt_s)
                row, start_s, dt_s = cut_rows(block.time_s, block.dt_s, self.plan.cut_s)
                if row.size > n:
                    points, v_dc, t_cool, n = points.rows(row), v_dc[row], t_cool[row], row.size
                phase_id = block.phase_id[row]
                group = self.plan.groups_of(start_s, t_cool, block.columns["flow_m3_per_s"][row] if "flow_m3_per_s" in block.columns else None,
                                            self._group)
                self._group = int(group[-1])
                if first:
                    self.engine.start(float(t_cool[0]), theta_rad=self._theta, states=self._states, group=int(group[0]))
                    starts_loaded = bool(points.i_peak_a[0] > 0.0)
                    self._start_states = self.engine.states
                    self._start_c = self.engine.junction_c
                    if self._levelled:
                        self.start_surface_c, self.coolant_start_c = self.engine.surface_c(), float(t_cool[0])
                    first = False
                # hand the kernel a few thousand rows at a time, fewer of long ones, so that a stop is heard between them and cycles do not pile up
                work = np.concatenate([[0], np.cumsum(self.engine.pieces(points, dt_s))])
                a = 0
                while a < n:
                    enough = int(np.searchsorted(work, work[a] + MOST_PIECES, side="right")) - 1
                    b = slice(a, min(a + 8192, n, max(enough, a + 1)))
                    a = b.stop
                    part = points.rows(b)
                    fsw = spec.inverter.switching_hz(part)
                    rows = self.engine.add_block(part, dt_s=dt_s[b], phase_id=phase_id[b], coolant_c=t_cool[b],
                                                 switching_frequency_hz=fsw, dc_voltage_v=v_dc[b], group=group[b])
                    self._note_hottest(rows, part, v_dc[b])
                    self.fsw_max = max(self.fsw_max, float(fsw.max()))
                    turning = (part.frequency_hz > 0.0) & (part.i_peak_a > 0.0)
                    if turning.any():
                        self.carriers_min = min(self.carriers_min, float((rows.switching_hz / np.where(turning, part.frequency_hz, 1.0))[turning].min()))
                    levels, back = np.unique(rows.level, return_inverse=True)
                    self.envelope.add(rows, np.array([self.plan.state(int(k)).r_th_k_per_w for k in levels])[back])
                    self.marched_s = float(rows.end_s[-1])
                    self._take(self.counter.drain())
                    if self._progress is not None:
                        self._progress(self.marched_s / profile.duration_s, f"pass {self.number}")
                self.i_peak_max = max(self.i_peak_max, float(points.i_peak_a.max()))
                self.dc_voltage_max = max(self.dc_voltage_max, float(v_dc.max()))
                self.coolant_max = max(self.coolant_max, float(t_cool.max()))
                self.mod_index_max = max(self.mod_index_max, float(points.mod_index.max()))
                self.frequency_max = max(self.frequency_max, float(points.frequency_hz.max()))
        except (KeyboardInterrupt, Stopped):
            if first or self.marched_s == 0.0:
                raise
            self.complete = False
        self.engine.finish()
        self.loaded_joint = starts_loaded and self.engine.loaded
        ends, began = self.engine.junction_c, self._start_c
        if self.loaded_joint:
            # the angle is another one at the next start: only the mean of the three legs can agree
            ends, began = (t.reshape(-1, 3, 2).mean(axis=1) for t in (ends, began))
        self.closes_within_k = float(np.abs(ends - began).max()) if self.complete else float("nan")

    def _note_hottest(self, rows, points, v_dc):
        hot = rows.t_max_c.max(axis=1)
        # the first moment of a pause is as hot as the end of the load before it: the load is the point that matters
        alike = np.flatnonzero((hot >= hot.max() - HOT_ALIKE_K) & (points.i_peak_a > 0.0))
        k = int(alike[0]) if alike.size else int(np.argmax(hot))
        if hot[k] > self.hot_c + (0.0 if alike.size else HOT_ALIKE_K):
            self.hot_c = float(hot[k])
            self.hot_point = HotPoint(*(float(v[k]) for v in (points.i_peak_a, points.mod_index, points.phi_rad, points.frequency_hz, points.direction,
                                                               rows.switching_hz, v_dc, rows.coolant_c, rows.end_s)),
                                      int(rows.phase_id[k]), float(rows.theta_rad[k]), int(rows.level[k]), rows.t_max_c[k].copy(), rows.case_max_c[k].copy())

    def next_states(self, far):
        return self.engine.periodic_start(self._start_states, self.marched_s, far)

    def cooling_record(self, networks):
        time_s, changes = self.engine.level_time_s, self.engine.changes
        used = sorted(np.flatnonzero(time_s > 0.0).tolist(), key=lambda k: -time_s[k])
        return CoolingRecord(self.plan, tuple(LevelTime(k, float(time_s[k]), self.plan.state(k)) for k in used), tuple(changes), self.engine.n_changes,
                             networks.largest_move_error)

    def next_start(self):
        """Start of the mission if it were repeated for ever, and how far it lies from this pass's start [K]."""
        engine = self.engine
        found = engine.periodic_start(self._start_states, self.marched_s)
        local, shared = found.local - self._start_states.local, found.shared - self._start_states.shared
        off = local.reshape(engine.network.lam_local_per_s.shape).sum(axis=0) + engine.network.c_shared @ shared
        if self.loaded_joint:
            off = off.reshape(-1, 3, 2).mean(axis=1)
        return found, float(np.abs(off).max())

    def close(self, residue):
        self._take(self.counter.drain())
        self._take(self.counter.finish(residue if self.complete else "half", period_s=self.marched_s))
        classes = self.ripple.to_table()
        if self._keep:
            self._tables_kept.append(classes)
        if self._sink is not None:
            self._sink(classes)

    def kept(self):
        return CycleTable.concat(self._tables_kept) if self._keep else None


def cut_rows(start_s, dt_s, cut_s):
    """Rows cut at given times.

    Parameters
    ----------
    start_s, dt_s : ndarray, shape (n,)
        Rows one after the other [s].
    cut_s : ndarray, shape (c,)
        Rising [s].

    Returns
    -------
    row : ndarray of int, shape (m,)
        Which row each part belongs to.
    start_s, dt_s : ndarray, shape (m,)

    Examples
    --------
    >>> [v.tolist() for v in cut_rows(np.array([0.0, 10.0]), np.array([10.0, 5.0]), np.array([4.0, 10.0]))]
    [[0, 0, 1], [0.0, 4.0, 10.0], [4.0, 6.0, 5.0]]
    """
    end_s = start_s + dt_s
    row = np.searchsorted(end_s, cut_s, side="left")
    inside = (row < start_s.size)
    row, cut_s = row[inside], cut_s[inside]
    inside = (cut_s > start_s[row] + 1e-9) & (cut_s < end_s[row] - 1e-9)
    row, cut_s = row[inside], cut_s[inside]
    which = np.insert(np.arange(start_s.size), row + 1, row)
    begin = np.insert(start_s, row + 1, cut_s)
    stop = np.insert(end_s, row, cut_s)
    return which, begin, np.where(np.isin(which, row), stop - begin, dt_s[which])
