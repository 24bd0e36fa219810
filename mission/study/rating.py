"""Largest current that a module carries for ever on a given cooling: over switching frequency, over output frequency, at standstill."""

from __future__ import annotations

from dataclasses import dataclass, replace
from types import SimpleNamespace

import numpy as np

from ..checks import require_range
from ..device import current_sharing
from ..errors import InputError, MissionError, NoStableTemperature, RangeError
from ..history import ElectrothermalMarch, HeldPoint, MarchSettings, MarchState, worst_standstill_rad
from ..losses import DEAD_SHARE_MAX, build_tables, current_reach_a
from ..machine import OperatingPoints
from .verdicts import junction_limit_c

#: The current is found within this share of the module's peak rating.
WITHIN = 1e-4
JUNCTION, PEAK = "junction temperature", "peak current rating"


@dataclass(frozen=True)
class RatingPoint:
    """What the load looks like where a current is rated.

    Attributes
    ----------
    mod_index, base_frequency_hz : float
        Modulation index at and above the base frequency; below it falls in proportion to the output
        frequency, down to ``mod_index_low`` at standstill.
    power_factor : float
        Cosine of the displacement; negative: generating.
    coolant_c, dc_voltage_v, frequency_hz, switching_frequency_hz : float
        ``frequency_hz`` = 0 is a standstill at its worst angle. Schedules of the study may lower the switching frequency.
    """

    frequency_hz: float
    switching_frequency_hz: float
    coolant_c: float
    dc_voltage_v: float
    mod_index: float = 0.9
    base_frequency_hz: float = 50.0
    mod_index_low: float = 0.02
    power_factor: float = 0.85

    def modulation_index(self) -> float:
        """Modulation index at the output frequency."""
        return max(self.mod_index * min(1.0, self.frequency_hz / self.base_frequency_hz), min(self.mod_index_low, self.mod_index))


@dataclass(frozen=True)
class Rating:
    """Largest current at one point.

    Attributes
    ----------
    current_a : float
        [A rms]; zero if even no load is too hot.
    limited_by : str
        ``"junction temperature"`` or ``"peak current rating"``.
    chip : str
        Hottest chip at that current.
    t_vj_max_c : float
        Its highest temperature in the periodic state, ripple included [degC].
    point : RatingPoint
    cooling : str
        Setting of the cooling that the sink's temperature keeps there, without faults, with the grease of the mission's start.
    """

    current_a: float
    limited_by: str
    chip: str
    t_vj_max_c: float
    point: RatingPoint
    cooling: str = "as given"


class RatingBench:
    """A study's module, modulation and cooling, ready to find largest currents.

    Parameters
    ----------
    study : Study
        Its duty and machine are not used; its junction and current limits are, and its schedules over output
        frequency and current. A derating by junction temperature is left out: at the limit it would act already.

    Examples
    --------
    >>> import mission
    >>> bench = RatingBench(mission.load_study("profiles/ferry-hour.toml"))
    >>> point = RatingPoint(frequency_hz=0.0, switching_frequency_hz=5000.0, coolant_c=40.0, dc_voltage_v=600.0)
    >>> still, turning = bench.largest_current(point), bench.largest_current(replace(point, frequency_hz=50.0))
    >>> still.current_a < turning.current_a
    True
    """

    def __init__(self, study):
        self.study = study
        spec, module = study.spec, study.module
        self.tables = build_tables(module, spec.inverter.modulation, **spec.inverter.table_options())
        self._plans: dict[float, tuple] = {}
        self._engines: dict[tuple, tuple] = {}
        self.limit_c = junction_limit_c(study)
        peak = module.ratings.i_peak_repetitive_a if spec.limits.i_peak_max_a is None else spec.limits.i_peak_max_a
        self.peak_a = min(peak, current_reach_a(module))
        self._settings = MarchSettings(f_slow_hz=spec.march.slow_below_hz, steps_per_period=spec.march.steps_per_period, t_stop_c=1000.0)
        low, high = study.coolant_range_c()
        self._cool(0.5 * (low + high))

    def _cool(self, coolant_c: float, place: int = -1):
        """Take the cooling at a coolant temperature, at a place among the levels that its sink chooses from (-1: the strongest); returns the plan and the group."""
        coolant_c = float(coolant_c)
        if coolant_c not in self._plans:
            plan = self.study.cooling_plan(coolant_c)
            self._plans[coolant_c] = plan, plan.networks(), plan.sound_group()
        plan, networks, group = self._plans[coolant_c]
        level = group.levels[place]
        if (coolant_c, level) not in self._engines:
            network = networks.network(level)
            self._engines[coolant_c, level] = network, ElectrothermalMarch(self.tables, network, self._settings)
        self.network, self._engine = self._engines[coolant_c, level]
        self._cooling = plan.state(level)
        return group

    def periodic_peak_c(self, point: RatingPoint, i_peak_a: float) -> np.ndarray:
        """Highest temperature of every chip in the periodic state on the cooling taken last, shape (n,) [degC]; infinite where none is stable.

        Where the module states a spread of parallel chips it is that of the favoured one. A standstill is taken at its
        worst angle. Schedules over output frequency and current lower the switching frequency of the point.
        """
        phi = float(np.arccos(point.power_factor))
        m, n = point.modulation_index(), self.network.n_chips
        load = {"i_peak_a": i_peak_a, "mod_index": m, "phi_rad": phi, "frequency_hz": point.frequency_hz, "dc_voltage_v": point.dc_voltage_v,
                "switching_frequency_hz": self.switching_hz(point, i_peak_a)}
        still = point.frequency_hz == 0.0
        theta = worst_standstill_rad(self.tables, self.network, t_vj_c=self.limit_c, **load) if still and i_peak_a > 0.0 else 0.5 * np.pi
        state = HeldPoint(self.tables, self.network, theta_rad=theta, **load).settle(point.coolant_c)
        if not state.exists:
            return np.full(n, np.inf)
        self._heat_w = float(state.loss_w.sum())
        if still or i_peak_a == 0.0:
            return self._with_favoured(state.t_vj_c, point.coolant_c + self.network.r_case_k_per_w() @ state.loss_w, i_peak_a)
        net, f = self.network, point.frequency_hz
        states = MarchState((net.rho_local / net.lam_local_per_s * state.loss_w).ravel(), net.b_shared @ state.loss_w / net.lam_shared_per_s, point.coolant_c)
        # whole periods, long enough for the local modes to feel their own swing
        periods = max(1, round(0.2 * f)) if f < self._engine.settings.f_slow_hz else max(4, round(f))
        row = OperatingPoints(*(np.array([v]) for v in (f, 1.0, i_peak_a, m, phi, 0.0, np.nan, np.nan, np.nan, np.nan, 0.0, 0.0)))
        peak = state.t_vj_c
        for _ in range(60):
            self._engine.start(point.coolant_c, states=states)
            before = self._engine.states
            try:
                rows = self._engine.add_block(row, dt_s=[periods / f], phase_id=[0], coolant_c=point.coolant_c,
                                              switching_frequency_hz=load["switching_frequency_hz"], dc_voltage_v=point.dc_voltage_v)
            except NoStableTemperature:
                return np.full(n, np.inf)
            self._engine.finish()
            new = rows.t_max_c[0]
            if np.abs(new - peak).max() < 0.02:
                return self._with_favoured(new, rows.case_max_c[0], i_peak_a)
            peak, states = new, self._engine.periodic_start(before, periods / f)
        raise MissionError(f"the periodic state at {f:g} Hz and {i_peak_a:.4g} A peak was not found in 60 rounds; the last two differ by more than 0.02 K")

    def switching_hz(self, point: RatingPoint, i_peak_a: float) -> float:
        """Switching frequency of a point, lowered by the study's schedules over output frequency and current [Hz]."""
        load = SimpleNamespace(frequency_hz=np.array([point.frequency_hz]), i_peak_a=np.array([float(i_peak_a)]))
        return min(point.switching_frequency_hz, float(self.study.spec.inverter.scheduled_hz(load)[0]))

    def _with_favoured(self, t_vj_c, case_c, i_peak_a):
        out = t_vj_c.copy()
        for number, pair in enumerate(self.study.module.chip_pairs()):
            part = getattr(self.study.module, pair.place)
            if part.parallel is None or i_peak_a == 0.0:
                continue
            chips = slice(6 * number, 6 * number + 6)
            hot = 6 * number + int(np.argmax(t_vj_c[chips]))
            sharing = current_sharing(part.on_state, part.parallel.chips, part.parallel.on_state_spread_v, current_a=i_peak_a, t_vj_c=t_vj_c[hot],
                                      local_rise_k=max(t_vj_c[hot] - case_c[hot], 0.0))
            out[hot] = t_vj_c[hot] + sharing.hotter_k if sharing.settles else np.inf
        return out

    def largest_current(self, point: RatingPoint) -> Rating:
        """Largest rms current for which every chip stays at or below the junction limit for ever.

        Raises
        ------
        RangeError
            A frequency, modulation index or power factor outside its range.
        """
        self._check(point)
        group = self._cool(point.coolant_c)
        if not group.up_c:
            return self._largest(point)
        place, known = 0, {}
        while True:
            self._cool(point.coolant_c, place)
            known[place] = self._largest(point)
            # from cold, a level holds until the sink is too hot for it; of two that send each other away the weaker counts
            least, most = group.allowed(point.coolant_c + self._surface_rise_k, point.coolant_c)
            wanted = least if place < least else min(place, most)
            if wanted in known:
                return known[min(wanted, place)]
            place = wanted

    def _largest(self, point: RatingPoint) -> Rating:
        low, high = 0.0, self.peak_a
        peak = self.periodic_peak_c(point, high)
        if peak.max() <= self.limit_c:
            self._surface_rise_k = self._heat_w * self._cooling.r_th_k_per_w
            return self._rating(point, high, PEAK, peak)
        peak_low = self.periodic_peak_c(point, 0.0)
        self._surface_rise_k = 0.0
        if peak_low.max() > self.limit_c:
            return self._rating(point, 0.0, JUNCTION, peak_low)
        while high - low > WITHIN * self.peak_a:
            middle = 0.5 * (low + high)
            peak = self.periodic_peak_c(point, middle)
            if peak.max() <= self.limit_c:
                low, peak_low, self._surface_rise_k = middle, peak, self._heat_w * self._cooling.r_th_k_per_w
            else:
                high = middle
        return self._rating(point, low, JUNCTION, peak_low)

    def over_switching_frequency(self, point: RatingPoint, hz) -> list[Rating]:
        """Largest currents over the switching frequency."""
        return [self.largest_current(replace(point, switching_frequency_hz=float(f))) for f in np.atleast_1d(hz)]

    def over_output_frequency(self, point: RatingPoint, hz) -> list[Rating]:
        """Largest currents over the output frequency; 0 is the standstill."""
        return [self.largest_current(replace(point, frequency_hz=float(f))) for f in np.atleast_1d(hz)]

    def _rating(self, point, i_peak, why, peak):
        hot = int(np.argmax(peak))
        return Rating(float(i_peak / np.sqrt(2.0)), why, self.study.module.chip_names()[hot], float(peak[hot]), point, self._cooling.words)

    def _check(self, point):
        require_range("frequency_hz", point.frequency_hz, low=0.0, high=2000.0, unit="Hz")
        require_range("switching_frequency_hz", point.switching_frequency_hz, low=0.0, high=200e3, unit="Hz")
        dead = 1e-6 * self.study.spec.inverter.dead_time_us
        if dead * point.switching_frequency_hz > DEAD_SHARE_MAX:
            raise RangeError("switching_frequency_hz", f"{point.switching_frequency_hz:g} Hz with a dead time of {1e6 * dead:g} us",
                             f"at most {DEAD_SHARE_MAX / dead:g} Hz, where the dead time takes a tenth of the period")
        require_range("base_frequency_hz", point.base_frequency_hz, low=0.0, low_open=True, unit="Hz")
        require_range("power_factor", point.power_factor, low=-1.0, high=1.0)
        require_range("mod_index", point.mod_index, low=0.0, high=self.study.spec.inverter.mod_index_max * (1 + 1e-9))
        require_range("dc_voltage_v", point.dc_voltage_v, low=0.0, low_open=True, unit="V")
        require_range("coolant_c", point.coolant_c, low=-60.0, high=250.0, unit="degC")


def rating_point(study, **given) -> RatingPoint:
    """A point from what a study states, the rest from ``given`` (fields of :class:`RatingPoint`).

    Raises
    ------
    InputError
        The study states no coolant or link voltage, and ``given`` neither.
    """
    spec = study.spec
    values = {"frequency_hz": 50.0, "switching_frequency_hz": spec.inverter.switching_frequency_hz, "coolant_c": spec.cooling.coolant_c,
              "dc_voltage_v": spec.inverter.dc_voltage_v, "mod_index": min(0.9, spec.inverter.mod_index_max)}
    values |= {k: v for k, v in given.items() if v is not None}
    for name, words in (("coolant_c", "coolant temperature"), ("dc_voltage_v", "DC-link voltage")):
        if values[name] is None:
            # the profile has it as a column: its highest value is the hard case
            if name not in study.profile.ranges:
                raise InputError(f"{study.source}", f"no {words}", f"a {words}", f"give {name}")
            values[name] = float(study.profile.ranges[name][1])
    return RatingPoint(**values)
