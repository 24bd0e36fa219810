"""Limits of a study beside the junction's: overload, cold, voltage, gate, parallel chips, stability; schedules and the joint of a mission."""

import numpy as np
import pytest

import mission
import mission.show
import mission.study
from mission.device import load_module, save_module
from mission.errors import InputError
from mission.history import HeldPoint

from .good_study import DIRECT_DUTY, direct_study, toml_text, write

STEADY = "t,I,f,m,cos_phi\n" + "".join(f"{t},200,50,0.8,0.85\n" for t in range(0, 60, 5))
INVERTER = {"dc_voltage_v": 600, "switching_frequency_hz": 5000, "modulation": "space-vector"}


def study(folder, csv=STEADY, module=None, ratings=None, **sections):
    """A direct study on heron-300, or on a changed copy of another module."""
    files = {"duty.csv": csv}
    if module is not None or ratings is not None:
        one = load_module(module or "heron-300")
        if ratings is not None:
            one = one.model_copy(update={"ratings": one.ratings.model_copy(update=ratings)})
        write(folder, files)
        save_module(one, folder / "module.toml")
        sections["module"] = {"file": "module.toml"}
    write(folder, {**files, "study.toml": toml_text(direct_study(**sections))})
    return mission.load_study(folder / "study.toml")


def verdict(result, what):
    found = [v for v in result.verdicts if v.what.startswith(what)]
    assert len(found) == 1, [v.what for v in result.verdicts]
    return found[0]


def test_overload_is_judged_by_height_length_and_share(tmp_path):
    """30 s under load of 60 s, hot enough to pass a continuous limit set just below: whole rows count."""
    csv = "t,I,f,m,cos_phi\n0,0,0,0.05,1\n20,260,50,0.8,0.85\n25,260,50,0.8,0.85\n40,0,0,0.05,1\n60,0,0,0.05,1\n"
    plain = mission.run(study(tmp_path / "a", csv))
    peak = float(plain.history.peak_c.max())
    allowed = {"t_vj_op_max_c": peak - 3.0, "t_vj_overload_c": peak + 5.0, "overload_longest_s": 30.0, "overload_share": 0.5}
    good = mission.run(study(tmp_path / "b", csv, ratings=allowed))
    assert verdict(good, "highest junction temperature (overload)").limit == peak + 5.0
    longest = verdict(good, "longest time above")
    assert longest.met and 4.0 < longest.value <= 21.0  # the later part of the load, and a moment beyond it
    assert verdict(good, "share of the time above").value == pytest.approx(100.0 * longest.value / good.history.duration_s)
    for change, what in (({"overload_longest_s": 3.0}, "longest time above"), ({"overload_share": 0.05}, "share of the time above"),
                         ({"t_vj_overload_c": peak - 1.0}, "highest junction temperature")):
        bad = mission.run(study(tmp_path / what.split()[0], csv, ratings=allowed | change))
        assert not verdict(bad, what).met and not bad.ok
    # a limit of the study's own goes before the module's two
    own = mission.run(study(tmp_path / "own", csv, ratings=allowed, limits={"t_vj_max_c": float(peak) - 1.0}))
    assert not verdict(own, "highest junction temperature").met and not [v for v in own.verdicts if "time above" in v.what]


def test_cold_junctions_are_told(tmp_path):
    csv = "t,I,f,m,cos_phi\n" + "".join(f"{t},0,0,0.05,1\n" for t in range(0, 600, 50)) + "600,200,50,0.8,0.85\n601,0,0,0.05,1\n602,0,0,0.05,1\n"
    cold = mission.run(study(tmp_path, csv, cooling={"kind": "fixed", "r_th_k_per_w": 0.02, "coolant_c": -55.0}))
    assert not verdict(cold, "lowest junction temperature").met


def test_overshoot_and_gate(tmp_path):
    inverter = INVERTER | {"stray_inductance_nh": 30.0, "driver": {"power_w": 0.2, "peak_current_a": 5.0}}
    module = load_module("swift-400")
    result = mission.run(study(tmp_path, module="swift-400", inverter=inverter))
    loop = module.switching.stray_inductance_h + 30e-9
    # analytic: V + L 0.8 I/t_f; Q dV f; dV/R
    want = 600.0 + loop * 0.8 * 200.0 * np.sqrt(2.0) / module.switching.fall_time_s
    assert verdict(result, "turn-off peak voltage").value == pytest.approx(want)
    g = module.gate
    assert verdict(result, "gate power").value == pytest.approx(g.charge_c * (g.v_on_v - g.v_off_v) * 5000.0)
    current = verdict(result, "peak gate current")
    assert current.value == pytest.approx((g.v_on_v - g.v_off_v) / (g.r_internal_ohm + min(g.r_on_ohm, g.r_off_ohm))) and not current.met
    high = mission.run(study(tmp_path / "high", module="swift-400", inverter=inverter | {"dc_voltage_v": 1100.0}))
    assert not verdict(high, "turn-off peak voltage").met


def test_other_gate_resistors_cost_what_the_data_sheet_says(tmp_path):
    module = load_module("swift-400")
    table = module.switch.turn_on.gate_resistor
    base = mission.run(study(tmp_path / "a", module="swift-400", inverter=INVERTER | {"switching_frequency_hz": 20000}))
    slow = mission.run(study(tmp_path / "b", module="swift-400", inverter=INVERTER | {"switching_frequency_hz": 20000, "r_gate_on_ohm": table.r_ohm[-1]}))
    assert slow.history.energy_j.sum() > 1.1 * base.history.energy_j.sum()
    with pytest.raises(InputError, match="r_gate_on_ohm"):
        mission.run(study(tmp_path / "c", module="swift-400", inverter=INVERTER | {"r_gate_on_ohm": 999.0}))
    with pytest.raises(InputError, match="the module's own"):
        mission.run(study(tmp_path / "d", inverter=INVERTER | {"r_gate_on_ohm": 9.0}))


def test_parallel_chips_and_their_limit(tmp_path):
    result = mission.run(study(tmp_path, module="swift-400"))
    one = verdict(result, "favoured parallel chip (switch)")
    assert one.value > result.history.peak_c.max() and "of an equal share" in one.where


def test_loop_gain_and_what_holds_for_ever(tmp_path):
    """At a steady load the hottest point is the duty itself: it settles where the march stands."""
    result = mission.run(study(tmp_path))
    found = mission.study.stability(result)
    assert verdict(result, "loop gain").value == found.loop_gain and 0.0 < found.loop_gain < 1.0
    hot = result.history.hottest
    assert result.history.t_min_c[-1, hot] < found.settles_at_c < result.history.t_max_c[-1, hot]  # a mean, between the ends of the ripple
    held = result.hot_point.held(result.tables, result.network)
    assert isinstance(held, HeldPoint) and "loop gain" in found.words


def test_a_target_without_failure_modes_is_missed_in_words(tmp_path):
    module = load_module("heron-300").model_copy(update={"failure_mode": ()})
    write(tmp_path, {"duty.csv": STEADY})
    save_module(module, tmp_path / "module.toml")
    write(tmp_path, {"study.toml": toml_text(direct_study(module={"file": "module.toml"}, lifetime={"missions_per_year": 10, "target_years": 5}))})
    result = mission.run(mission.load_study(tmp_path / "study.toml"))
    life = verdict(result, "life")
    assert not life.met and np.isnan(life.value) and "no failure mode" in life.where and not result.ok


def test_a_mission_without_current_lives_without_end(tmp_path):
    idle = mission.run(study(tmp_path, "t,I,f,m,cos_phi\n0,0,0,0.05,1\n50,0,0,0.05,1\n100,0,0,0.05,1\n"))
    assert all(row.damage_per_mission == 0.0 and row.life_years == np.inf for row in idle.ledger.rows())


def test_a_load_that_goes_on_through_the_joint_invents_no_peak(tmp_path):
    """*Analytic*: a steady load repeated for ever is a steady load, wherever in the period the file ends.

    2 Hz for 10.3 s: the mission ends in the middle of a period, on another chip than it began.
    """
    csv = "t,I,f,m,cos_phi\n0,200,2,0.1,0.85\n5,200,2,0.1,0.85\n10.3,200,2,0.1,0.85\n"
    cooling = {"kind": "fixed", "r_th_k_per_w": 0.02, "coolant_c": 40}
    odd = mission.run(study(tmp_path / "odd", csv, cooling=cooling))
    even = mission.run(study(tmp_path / "even", csv.replace("10.3", "10"), cooling=cooling))
    assert odd.history.peak_c.max() == pytest.approx(even.history.peak_c.max(), abs=0.15)
    assert odd.history.lowest_c.min() == pytest.approx(even.history.lowest_c.min(), abs=0.15)


def test_schedules_lower_the_switching_frequency(tmp_path):
    slow = [{"over": "output-frequency", "at": [0.0, 10.0], "hz": [1000.0, 5000.0]}, {"over": "current", "at": [100.0, 300.0], "hz": [5000.0, 3000.0]}]

    def with_schedule(name, schedule, csv=STEADY):
        folder = tmp_path / name
        write(folder, {"duty.csv": csv})
        text = toml_text(direct_study(duty=DIRECT_DUTY, inverter=INVERTER))
        for one in schedule:
            text += "\n[[inverter.schedule]]\n" + "".join(f"{k} = {v!r}\n".replace("'", '"') for k, v in one.items())
        write(folder, {"study.toml": text})
        return mission.load_study(folder / "study.toml")

    scheduled = mission.run(with_schedule("a", slow))
    fixed = mission.run(with_schedule("b", []).changed("inverter", switching_frequency_hz=4000.0))  # 200 A: half-way between 5000 and 3000 Hz
    np.testing.assert_allclose(scheduled.history.energy_j, fixed.history.energy_j, rtol=1e-9)
    # derating by temperature: between full and lowest frequency, and steady where the two meet
    hot = with_schedule("c", [{"over": "junction", "at": [60.0, 90.0], "hz": [5000.0, 1000.0]}])
    derated = mission.run(hot)
    full = mission.run(with_schedule("d", []))
    low = mission.run(with_schedule("e", []).changed("inverter", switching_frequency_hz=1000.0))
    energy = [r.history.energy_j.sum() for r in (low, derated, full)]
    assert energy == sorted(energy) and energy[0] < 0.98 * energy[1] < 0.96 * energy[2]
    for bad, words in (([{"over": "speed", "at": [0.0, 1.0], "hz": [1.0, 2.0]}], "output-frequency"),
                       ([{"over": "current", "at": [1.0, 1.0], "hz": [1.0, 2.0]}], "rise from point to point"),
                       ([{"over": "current", "at": [1.0], "hz": [1.0]}], "at least two values")):
        with pytest.raises(InputError, match=words):
            with_schedule("bad", bad)


def test_a_refused_cycle_is_named_with_chip_and_time(tmp_path):
    modes = [{"name": "wires", "acts_on": "junction", "model": "lesit-1997-refit", "options": {"outside_range": "refuse"}}]
    one = study(tmp_path, lifetime={"missions_per_year": 10, "failure_mode": modes})
    with pytest.raises(InputError, match=r"study.toml: failure mode 'wires', [SD]-[abc]-(up|lo), cycle that begins at .* s: found a cycle with range_k"):
        mission.run(one)


def test_own_resistances_under_every_chip_cannot_meet_the_losses_at_once(tmp_path):
    own = {"per": "switch-and-diode", "r_th_switch_k_per_w": 0.02, "r_th_diode_k_per_w": 0.03}
    heron = load_module("heron-300")
    module = heron.model_validate({**heron.model_dump(), "case_to_sink": own})
    write(tmp_path, {"duty.csv": STEADY})
    save_module(module, tmp_path / "module.toml")
    cooling = {"kind": "fixed", "r_th_k_per_w": 0.02, "coolant_c": 40, "sink_sees": "chip-losses"}
    write(tmp_path, {"study.toml": toml_text(direct_study(module={"file": "module.toml"}, cooling=cooling))})
    with pytest.raises(InputError, match="would show the whole ripple"):
        mission.run(mission.load_study(tmp_path / "study.toml"))


@pytest.mark.parametrize(("change", "words"), [
    ({"overmodulation": True, "modulation": "clamp-30"}, "false for modulations that hold a phase"),
    ({"dead_time_us": 40.0}, "a tenth of the switching period"),
    ({"driver": {"power_w": 0.0, "peak_current_a": 1.0}}, "power_w"),
    ({"modulation": "clamp"}, "clamp-60-voltage-peak"),
])
def test_what_an_inverter_section_gets_wrong(tmp_path, change, words):
    with pytest.raises(InputError, match=words):
        study(tmp_path, inverter=INVERTER | change)


def test_overmodulation_admits_more_voltage(tmp_path):
    csv = STEADY.replace("0.8,", "1.25,")
    with pytest.raises(InputError, match="allow overmodulation"):
        study(tmp_path / "a", csv)
    result = mission.run(study(tmp_path / "b", csv, inverter=INVERTER | {"overmodulation": True}))
    assert result.mod_index_max == 1.25
    assert not any("linear range" in line for line in mission.show.build_document(result).rests_on)


@pytest.mark.parametrize(("name", "v_dc"), [("tern-300", 600.0), ("plover-300", 600.0), ("curlew-300", 800.0), ("dunlin-300", 600.0), ("swift-400", 600.0)])
def test_every_kind_of_module_goes_all_the_way(tmp_path, name, v_dc):
    """From the duty to the files of the report."""
    one = study(tmp_path, module=name, inverter=INVERTER | {"dc_voltage_v": v_dc, "dead_time_us": 1.0})
    result = mission.run(one)
    n = len(one.module.chip_names())
    assert result.history.peak_c.shape == (n,) and result.ledger.worst().life_years > 0.0
    names = {p.name for p in result.save(tmp_path / "out")}
    assert {"report.html", "result.json", "temperatures.png", "losses.svg"} <= names
    text = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert one.module.chip_names()[-1] in text


def overload_of(seconds_hot, folder, csv, **sections):
    """Longest stretch above a limit that the load passes in its last part."""
    peak = float(mission.run(study(folder / "plain", csv, **sections)).history.peak_c.max())
    ratings = {"t_vj_op_max_c": peak - 4.0, "t_vj_overload_c": peak + 5.0, "overload_longest_s": seconds_hot, "overload_share": 1.0}
    return mission.run(study(folder / "watched", csv, ratings=ratings, **sections))


def test_overload_does_not_depend_on_how_a_log_is_cut(tmp_path):
    """0.2 Hz: each chip passes the limit once in every period, for a moment; one long row or many short ones tell the same."""
    one = overload_of(60.0, tmp_path / "one", "t,I,f,m,cos_phi\n0,200,0.2,0.05,0.85\n50,200,0.2,0.05,0.85\n100,200,0.2,0.05,0.85\n")
    many = "t,I,f,m,cos_phi\n" + "".join(f"{0.5 * k:g},200,0.2,0.05,0.85\n" for k in range(201))
    cut = overload_of(60.0, tmp_path / "many", many)
    longest = [float(r.history.longest_above_s.max()) for r in (one, cut)]
    assert longest[0] < 5.0 and abs(longest[0] - longest[1]) <= 1.0


def test_overload_goes_on_through_the_joint(tmp_path):
    """Loaded at its end and at its start: one stretch of a repeated mission."""
    csv = "t,I,f,m,cos_phi\n0,200,50,0.8,0.85\n20,0,0,0.05,1\n60,0,0,0.05,1\n80,200,50,0.8,0.85\n130,200,50,0.8,0.85\n140,200,50,0.8,0.85\n"
    once = overload_of(600.0, tmp_path, csv, march={"start": "coolant"}).history.longest_above_s.max()
    joined = overload_of(600.0, tmp_path / "joint", csv).history.longest_above_s.max()
    assert joined > once + 5.0


def test_the_hot_point_has_the_frequency_and_the_angle_that_were_in_force(tmp_path):
    write(tmp_path, {"duty.csv": STEADY})
    text = toml_text(direct_study(inverter=INVERTER | {"switching_frequency_hz": 20000}))
    write(tmp_path, {"study.toml": text + '\n[[inverter.schedule]]\nover = "junction"\nat = [60, 90]\nhz = [20000, 2000]\n'})
    derated = mission.run(mission.load_study(tmp_path / "study.toml"))
    assert derated.hot_point.switching_frequency_hz < 15000.0
    still = mission.run(study(tmp_path / "still", "t,I,f,m,cos_phi\n" + "".join(f"{t},150,0,0.02,0.85\n" for t in range(0, 400, 40)),
                              march={"start_angle_deg": 37.0}))
    assert np.degrees(still.hot_point.theta_rad) % 360.0 == pytest.approx(37.0)
    assert mission.study.stability(still).settles_at_c == pytest.approx(float(still.history.peak_c.max()), abs=0.1)


def test_few_carriers_are_told_and_a_useless_inductance_refused(tmp_path):
    few = mission.run(study(tmp_path / "few", inverter=INVERTER | {"switching_frequency_hz": 300}))
    assert few.carriers_min == pytest.approx(6.0) and any("switching periods in an output period" in s for s in mission.show.build_document(few).rests_on)
    with pytest.raises(InputError, match="no section switching in Heron 300"):
        study(tmp_path / "stray", inverter=INVERTER | {"stray_inductance_nh": 30.0})


def test_check_refuses_what_a_run_would(tmp_path):
    """Curves at more temperatures than the march has room for."""
    heron = load_module("heron-300").model_dump()
    for number, (part, name) in enumerate((("switch", "on_state"), ("switch", "turn_on"), ("switch", "turn_off"), ("diode", "on_state"), ("diode", "recovery"))):
        for k, curve in enumerate(heron[part][name]["curve"]):
            curve["t_vj_c"] = 25.0 + 50.0 * k + number
    module = load_module("heron-300").model_validate(heron)
    write(tmp_path, {"duty.csv": STEADY})
    save_module(module, tmp_path / "module.toml")
    write(tmp_path, {"study.toml": toml_text(direct_study(module={"file": "module.toml"}))})
    with pytest.raises(InputError, match="study.toml: module: found .* curves at 15 different temperatures"):
        mission.study.check_parts(mission.load_study(tmp_path / "study.toml"))


@pytest.mark.slow
def test_long_rows_are_marched_in_parts(tmp_path):
    """*Analytic*: thirty rows of a quarter of an hour, derated every 0.1 s, are 270 000 pieces; memory does not hold them all at once."""
    import tracemalloc

    csv = "t,I,f,m,cos_phi\n" + "".join(f"{900 * k},200,50,0.8,0.85\n" for k in range(31))
    duty = {**DIRECT_DUTY, "longest_step_s": 1000}
    write(tmp_path, {"duty.csv": csv})
    write(tmp_path, {"study.toml": toml_text(direct_study(duty=duty, march={"start": "coolant"}))
                     + '\n[[inverter.schedule]]\nover = "junction"\nat = [60, 90]\nhz = [5000, 2000]\n'})
    one = mission.load_study(tmp_path / "study.toml")
    mission.run(study(tmp_path / "warm", STEADY))  # compiled before memory is looked at
    tracemalloc.start()
    result = mission.run(one, keep_cycles=False)
    most = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert result.complete and most < 600e6
