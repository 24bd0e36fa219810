"""Limits and target: what is met, by how much."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..device import current_sharing, gate_drive_power_w, gate_peak_current_a, turn_off_peak_v


@dataclass(frozen=True)
class Verdict:
    """One limit held against its result.

    Attributes
    ----------
    what : str
    value, limit : float
        NaN for a value that could not be reckoned; the limit then counts as missed.
    unit : str
    met : bool
    margin : float
        Positive when met, in the same unit (life: years).
    where : str
        Chip, time or failure mode that decides.
    """

    what: str
    value: float
    limit: float
    unit: str
    met: bool
    margin: float
    where: str


def _at_most(what, value, limit, unit, where):
    return Verdict(what, float(value), float(limit), unit, bool(value <= limit), float(limit - value), where)


def _at_least(what, value, limit, unit, where):
    return Verdict(what, float(value), float(limit), unit, bool(value >= limit), float(value - limit), where)


def verdicts(result) -> tuple[Verdict, ...]:
    """Every limit and the target of a result: junction, current, voltage, gate, stability, life."""
    study, ratings, limits = result.study, result.study.module.ratings, result.study.spec.limits
    out = [*_junction(result), *_parallel(result)]
    i_max = ratings.i_peak_repetitive_a if limits.i_peak_max_a is None else limits.i_peak_max_a
    out.append(_at_most("highest peak phase current", result.i_peak_max_a, i_max, "A", "duty"))
    out += [*_overshoot(result), *_gate(result), *_stability(result)]
    target = study.spec.lifetime.target_years
    if target is not None:
        worst = result.ledger.worst()
        if worst is None:
            out.append(Verdict("life", float("nan"), target, "years", False, float("nan"), "no failure mode, in the study or in the module, to judge by"))
        else:
            out.append(_at_least("life", worst.life_years, target, "years", f"{worst.chip}, {worst.mode}"))
    return tuple(out)


def junction_limit_c(study) -> float:
    """Junction limit that a study is held against: its own, else the module's continuous one [degC]."""
    own = study.spec.limits.t_vj_max_c
    return float(study.module.ratings.t_vj_op_max_c if own is None else own)


def _junction(result):
    """Continuous limit, overload where the module permits one, and the coldest junction where it matters."""
    history, ratings, own = result.history, result.study.module.ratings, result.study.spec.limits.t_vj_max_c
    hot = history.hottest
    peak = history.peak_c[hot]
    where = f"{history.chips[hot]} at {history.peak_time_s[hot]:.6g} s in '{history.phases[history.peak_phase_id[hot]]}'"
    if own is not None or ratings.t_vj_overload_c is None or peak <= ratings.t_vj_op_max_c:
        yield _at_most("highest junction temperature", peak, junction_limit_c(result.study), "degC", where)
    else:
        yield _at_most("highest junction temperature (overload)", peak, ratings.t_vj_overload_c, "degC", where)
        long, often = int(np.argmax(history.longest_above_s)), int(np.argmax(history.above_s))
        above = f"above {ratings.t_vj_op_max_c:g} degC"
        yield _at_most(f"longest time {above}", history.longest_above_s[long], ratings.overload_longest_s, "s", history.chips[long])
        yield _at_most(f"share of the time {above}", 100.0 * history.above_s[often] / history.duration_s, 100.0 * ratings.overload_share, "%",
                       history.chips[often])
    cold = int(np.argmin(history.lowest_c))
    if history.lowest_c[cold] < ratings.t_vj_op_min_c:
        yield _at_least("lowest junction temperature", history.lowest_c[cold], ratings.t_vj_op_min_c, "degC", history.chips[cold])


def _parallel(result):
    """The favoured one of parallel chips, where the module file states a spread."""
    module, point = result.study.module, result.hot_point
    own = result.study.spec.limits.t_vj_max_c
    limit = junction_limit_c(result.study)
    if own is None and module.ratings.t_vj_overload_c is not None and result.history.peak_c.max() > module.ratings.t_vj_op_max_c:
        limit = module.ratings.t_vj_overload_c  # the overload and its time are judged above
    for number, pair in enumerate(module.chip_pairs()):
        part = getattr(module, pair.place)
        if part.parallel is None:
            continue
        chips = slice(6 * number, 6 * number + 6)
        hot = 6 * number + int(np.argmax(point.t_vj_c[chips]))
        t, rise = point.t_vj_c[hot], max(point.t_vj_c[hot] - point.case_c[hot], 0.0)
        sharing = current_sharing(part.on_state, part.parallel.chips, part.parallel.on_state_spread_v, current_a=point.i_peak_a, t_vj_c=t, local_rise_k=rise)
        where = f"{result.history.chips[hot]}: {sharing.share:.2f} of an equal share" + ("" if sharing.settles else ", and drawing more and more")
        one = _at_most(f"favoured parallel chip ({pair.place.replace('_', ' ')})", t + sharing.hotter_k, limit, "degC", where)
        yield one if sharing.settles else Verdict(one.what, one.value, one.limit, one.unit, False, one.margin, where)


def _overshoot(result):
    """Peak voltage at turn-off, where stray inductance and fall time are known."""
    module, inverter = result.study.module, result.study.spec.inverter
    if module.switching is None or inverter.stray_inductance_nh is None:
        return
    loop_h = module.switching.stray_inductance_h + 1e-9 * inverter.stray_inductance_nh
    commutated = result.dc_voltage_max_v / (module.levels - 1)
    peak = turn_off_peak_v(commutated, result.i_peak_max_a, loop_h, module.switching.fall_time_s)
    if module.arrangement == "t-type-leg":
        # an outer switch blocks the whole link while its counterpart conducts
        peak = max(peak, result.dc_voltage_max_v)
    yield _at_most("turn-off peak voltage", peak, module.ratings.v_ces_v, "V", f"{1e9 * loop_h:.4g} nH, {result.i_peak_max_a:.4g} A, link {result.dc_voltage_max_v:g} V")


def gate_figures(result) -> tuple[float, float]:
    """Mean power [W] and peak current [A] that one gate asks of its driver, at the highest switching frequency of the duty."""
    gate, inverter = result.study.module.gate, result.study.spec.inverter
    r_on = gate.r_on_ohm if inverter.r_gate_on_ohm is None else inverter.r_gate_on_ohm
    r_off = gate.r_off_ohm if inverter.r_gate_off_ohm is None else inverter.r_gate_off_ohm
    return (float(gate_drive_power_w(gate.charge_c, gate.v_on_v, gate.v_off_v, result.switching_frequency_max_hz)),
            float(gate_peak_current_a(gate.v_on_v, gate.v_off_v, gate.r_internal_ohm, min(r_on, r_off))))


def _gate(result):
    """What a gate asks against what the study's driver can deliver."""
    driver = result.study.spec.inverter.driver
    if driver is None:
        return
    power, current = gate_figures(result)
    yield _at_most("gate power", power, driver.power_w, "W", f"one gate at {result.switching_frequency_max_hz:g} Hz")
    yield _at_most("peak gate current", current, driver.peak_current_a, "A", "upper bound: voltage swing over all gate resistors")


@dataclass(frozen=True)
class Stability:
    """Feedback of losses and temperature at the hottest point of the mission.

    Attributes
    ----------
    loop_gain : float
        With the temperatures that the chips really had there; a disturbance dies out below 1.
    settles_at_c : float or None
        Hottest mean junction if that point lasted for ever; None if no stable temperature exists.
    runaway_coolant_c : float or None
        Coolant from which on that point, lasting for ever, runs away; None if it never does.
    coolant_c : float
        Coolant at that point.
    cooling : str
        Setting of the cooling at that point, where it has several; it is taken to stay.
    """

    loop_gain: float
    settles_at_c: float | None
    runaway_coolant_c: float | None
    coolant_c: float
    cooling: str = ""

    @property
    def words(self) -> str:
        """One sentence."""
        if self.settles_at_c is None:
            fate = "held for ever, no stable temperature exists"
        else:
            fate = f"held for ever, its hottest chip settles with a mean of {self.settles_at_c:.0f} degC"
        if self.runaway_coolant_c is None:
            coolant = "no coolant temperature makes it run away"
        else:
            coolant = f"it runs away with a coolant above {self.runaway_coolant_c:.0f} degC (now {self.coolant_c:.0f} degC)"
        kept = f", with the cooling of that moment ({self.cooling})" if self.cooling else ""
        return f"thermal stability at the hottest point of the mission{kept}: loop gain {self.loop_gain:.2f} (stable below 1); {fate}; {coolant}"


def stability(result) -> Stability:
    """Thermal stability at the hottest point of a result."""
    point = result.hot_point
    held = point.held(result.tables, result.network)
    state = held.settle(point.coolant_c)
    return Stability(held.loop_gain(point.t_vj_c), float(state.t_vj_c.max()) if state.exists else None, held.runaway_coolant_c(point.coolant_c), point.coolant_c,
                     result.cooling.plan.state(point.level).words if len(result.cooling.plan.levels) > 1 else "")


def _stability(result):
    point = result.hot_point
    gain = point.held(result.tables, result.network).loop_gain(point.t_vj_c)
    one = _at_most("loop gain of losses and temperature", gain, 1.0, "", f"hottest point of the mission, at {point.end_s:.6g} s")
    yield Verdict(one.what, one.value, one.limit, one.unit, gain < 1.0, one.margin, one.where)


#: Air that warms by more than this is no longer at its inlet's temperature [K].
_AIR_WARMS_K = 30.0


def cooling_flags(result) -> tuple[str, ...]:
    """What to mistrust in the cooling: what its levels say, and what only the heat of the run shows."""
    record, history, spec = result.cooling, result.history, result.study.spec.cooling
    out = list(record.flags)
    points = [(one, one.state.point) for one in record.used if one.state.point is not None and one.state.point.outlet_rise_k_per_w is not None]
    if points:
        # heat that flows for minutes: the sink does not see shorter peaks
        width = max(1, int(np.ceil(120.0 * history.coolant_c.size / history.duration_s)))
        heat = np.convolve(history.loss_w.sum(axis=1), np.ones(width) / width, mode="same").max()
        least = max(points, key=lambda p: p[1].outlet_rise_k_per_w)
        rise = heat * least[1].outlet_rise_k_per_w
        hot = float(history.coolant_c.max()) + rise
        liquid = record.plan.liquid
        if liquid and hot > 100.0:
            out.append(f"at {heat:.4g} W and the weakest flow that held ({least[0].state.words}) the coolant would leave at {hot:.0f} degC; boiling is not reckoned")
        elif liquid and float(history.case_peak_c.max()) > 110.0:
            out.append(f"the case reaches {history.case_peak_c.max():.0f} degC over a liquid; whether it boils at the channel walls is not reckoned")
        elif not liquid and rise > _AIR_WARMS_K:
            out.append(f"at {heat:.4g} W and the weakest flow that held ({least[0].state.words}) the air warms by {rise:.0f} K")
        mean = history.energy_j.sum() / history.duration_s
        if spec.heat_w is not None and not 0.5 * mean <= spec.heat_w <= 1.2 * heat:
            out.append(f"fluid properties are taken at heat_w = {spec.heat_w:g} W; the run gives {mean:.4g} W in the mean and up to {heat:.4g} W over two minutes")
    return tuple(out)
