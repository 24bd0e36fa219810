"""Cooling in whole studies: stages, faults, flow columns, ageing grease, conductivity over temperature."""

import json

import numpy as np
import pytest

import mission
from mission.errors import InputError
from mission.show import build_document
from mission.show.text import check_text, result_text
from mission.study import load_study
from mission.study.run import cut_rows
from mission.thermal import FosterNetwork, foster_to_cauer
from mission.thermal.sinks import sink_point

from .good_study import DIRECT_DUTY, direct_study, module_text, toml_text, write

FAN = {"kind": "plate-fin-fan", "base_mm": 12, "fin_count": 50, "fin_mm": 1.5, "gap_mm": 4, "fin_height_mm": 60, "length_mm": 200, "coolant_c": 30,
       "fan": {"flow_m3_per_h": [0, 200, 400, 600, 800, 900], "pressure_pa": [420, 400, 350, 260, 110, 0]}}
STAGES = [{"speed_ratio": 0.4, "up_above_c": 45}, {"speed_ratio": 1.0, "down_below_c": 40}]


def load(folder, csv, *, columns=None, start="coolant", **sections):
    duty = {**DIRECT_DUTY, "last_row_lasts_s": 1.0, "longest_step_s": 1e5, "columns": {**DIRECT_DUTY["columns"], **(columns or {})}}
    write(folder, {"study.toml": toml_text(direct_study(duty=duty, march={"start": start}, **sections)), "duty.csv": csv})
    return load_study(folder / "study.toml")


def rows(values, header="t,I,f,m,cos_phi"):
    return header + "\n" + "\n".join(",".join(f"{x:g}" for x in row) for row in values) + "\n"


LOADED = rows([(0, 150, 50, 0.8, 0.85), (900, 0, 0, 0.05, 1), (1800, 150, 50, 0.8, 0.85), (2700, 0, 0, 0.05, 1), (3600, 0, 0, 0.05, 1)])


def test_fan_stages_hold_and_are_told(tmp_path):
    study = load(tmp_path, LOADED, cooling={**FAN, "stage": STAGES}, start="repeat")
    result = mission.run(study)
    record = result.cooling
    assert record.n_changes >= 4 and {u.state.words for u in record.used} == {"40 % speed", "100 % speed"}
    assert sum(u.time_s for u in record.used) == pytest.approx(result.history.duration_s)
    document = build_document(result)
    json.dumps(document.model_dump())
    assert document.cooling.changes == record.n_changes and len(document.cooling.levels) == 2
    assert document.cooling.change_error < 0.002
    assert any("changes between 2 levels" in t for t in document.rests_on) and any("Teertstra" in t for t in document.cooling.sources)
    text = result_text(result)
    assert "40 % speed:" in text and "100 % speed:" in text
    assert "of 2 levels" in check_text(study)
    # between the coolings that always hold one stage
    weak, strong = (mission.run(load(tmp_path / name, LOADED, cooling={**FAN, "fan": {**FAN["fan"], "flow_m3_per_h": [s * v for v in FAN["fan"]["flow_m3_per_h"]],
                                                                                       "pressure_pa": [s * s * v for v in FAN["fan"]["pressure_pa"]]}}, start="repeat"))
                    for name, s in (("weak", 0.4), ("strong", 1.0)))
    assert strong.history.case_peak_c.max() < result.history.case_peak_c.max() < weak.history.case_peak_c.max()
    assert result.closes_within_k < 0.3


def test_stopped_cooling_warms_as_one_mass_does(tmp_path):
    """By hand: sink and module as one mass, heated evenly, after the flow has stopped: P R (1 - exp(-t/(R C))) towards the new rest."""
    r, stopped, c = 0.02, 0.3, 4000.0
    csv = rows([*((t, 60, 50, 0.8, 0.85) for t in range(0, 3600, 10)), (3600, 0, 0, 0.05, 1)])
    result = mission.run(load(tmp_path, csv, cooling={"kind": "fixed", "r_th_k_per_w": r, "heat_capacity_j_per_k": c, "coolant_c": 30,
                                                      "fault": [{"at_s": 2000, "until_s": 2600}], "stopped": {"r_th_k_per_w": stopped}}))
    history = result.history
    edge = history.edge_s
    power = history.loss_w.sum(axis=1)
    module = result.study.module
    grease = module.case_to_sink.r_th_k_per_w
    # the module's own masses go along with its case
    c += 6 * sum(foster_to_cauer(FosterNetwork(p.thermal.r_k_per_w, p.thermal.tau_s)).c_j_per_k.sum() for p in module.chip_pairs())
    rise, middle = 0.0, []
    for k, p in enumerate(power):
        over = stopped if 2000.0 <= edge[k] < 2600.0 else r
        dt = edge[k + 1] - edge[k]
        rise = p * over + (rise - p * over) * np.exp(-dt / (over * c))
        middle.append(30.0 + rise + p * grease)
    # a row's extreme stands in each of its buckets: compare where the row ends
    last = np.flatnonzero(np.floor(edge[1:] / 10.0 + 1e-9) > np.floor(edge[:-1] / 10.0 + 1e-9)) - 1
    middle, real = np.array(middle)[last], np.where(np.diff(middle, prepend=0.0) > 0.0, history.case_max_c.max(axis=1), history.case_min_c.max(axis=1))[last]
    steady = (edge[1:][last] > 1500.0) & (edge[1:][last] < 3600.0)
    assert middle[steady].max() - 30.0 > 30.0
    # heat is 0.5 s late in the ladders of the module
    np.testing.assert_allclose(real[steady], middle[steady], atol=0.015 * (middle.max() - 30.0))
    assert [t for t, _ in result.cooling.changes] == pytest.approx([2000.0, 2600.0])


def test_fault_inside_a_row_cuts_it(tmp_path):
    csv = rows([(0, 60, 50, 0.8, 0.85), (1000, 0, 0, 0.05, 1)])
    result = mission.run(load(tmp_path, csv, cooling={"kind": "fixed", "r_th_k_per_w": 0.02, "heat_capacity_j_per_k": 500, "coolant_c": 30, "fault": [{"at_s": 123.25, "until_s": 150.5}],
                                                      "stopped": {"r_th_k_per_w": 0.2}}))
    assert [t for t, _ in result.cooling.changes] == pytest.approx([123.25, 150.5])
    assert [u.time_s for u in result.cooling.used] == pytest.approx([1001.0 - 27.25, 27.25])


def test_rows_are_cut_where_asked():
    row, start, dt = cut_rows(np.array([0.0, 1.0, 5.0]), np.array([1.0, 4.0, 5.0]), np.array([0.0, 0.5, 1.0, 2.0, 3.0, 10.0, 99.0]))
    assert row.tolist() == [0, 0, 1, 1, 1, 2] and start.tolist() == [0.0, 0.5, 1.0, 2.0, 3.0, 5.0] and dt.tolist() == [0.5, 0.5, 1.0, 1.0, 2.0, 5.0]
    row, start, dt = cut_rows(np.array([0.1]), np.array([0.2]), np.empty(0))
    assert (row.tolist(), start.tolist(), dt.tolist()) == ([0], [0.1], [0.2])


TABLE = {"kind": "flow-table", "flow_l_per_min": [2, 5, 10, 20], "r_th_k_per_w": [0.05, 0.028, 0.018, 0.012], "heat_capacity_j_per_k": 800, "coolant_c": 40}


def test_a_flow_column_that_stays_is_a_given_flow(tmp_path):
    csv = rows([(0, 150, 50, 0.8, 0.85, 5), (300, 0, 0, 0.05, 1, 5), (400, 0, 0, 0.05, 1, 5)], "t,I,f,m,cos_phi,q")
    plain = rows([(0, 150, 50, 0.8, 0.85), (300, 0, 0, 0.05, 1), (400, 0, 0, 0.05, 1)])
    column = {"flow": {"column": "q", "unit": "l/min"}}
    a = mission.run(load(tmp_path / "a", csv, columns=column, cooling=TABLE))
    b = mission.run(load(tmp_path / "b", plain, cooling={**TABLE, "at_l_per_min": 5}))
    np.testing.assert_allclose(a.history.peak_c, b.history.peak_c, atol=1e-9)
    assert a.cooling.n_changes == 0


def test_a_flow_column_that_changes_moves_the_case(tmp_path):
    """At rest by hand: losses times the table's resistance at the row's flow, and the paste."""
    flows = ((0, 600, 20), (600, 1200, 5), (1200, 1230, 0), (1230, 1900, 10))
    csv = rows([*((t, 120, 50, 0.8, 0.85, q) for a, b, q in flows for t in range(a, b, 10)), (1900, 0, 0, 0.05, 1, 10)], "t,I,f,m,cos_phi,q")
    result = mission.run(load(tmp_path, csv, columns={"flow": {"column": "q", "unit": "l/min"}}, cooling={**TABLE, "stopped": {"r_th_k_per_w": 0.9}}))
    history = result.history
    for at, r in ((590.0, 0.012), (1190.0, 0.028), (1890.0, 0.018)):
        k = int(np.searchsorted(history.edge_s, at)) - 1
        want = 40.0 + history.loss_w[k].sum() * (r + result.study.module.case_to_sink.r_th_k_per_w)
        assert history.case_max_c[k].max() == pytest.approx(want, abs=0.011 * (want - 40.0))
        assert history.r_sink_k_per_w[k] == pytest.approx(r, rel=0.0101)
    k = int(np.searchsorted(history.edge_s, 1225.0)) - 1
    assert history.r_sink_k_per_w[k] == 0.9
    assert "sink_k_per_w" in history.to_frame()


def test_flow_column_refuses_what_the_table_does_not_hold(tmp_path):
    csv = rows([(0, 120, 50, 0.8, 0.85, 25), (600, 0, 0, 0.05, 1, 5)], "t,I,f,m,cos_phi,q")
    with pytest.raises(InputError, match="2 to 20, the flows of the table|flows of the table"):
        mission.run(load(tmp_path, csv, columns={"flow": {"column": "q", "unit": "l/min"}}, cooling=TABLE))


def test_aged_grease_is_a_larger_case_to_sink_resistance(tmp_path):
    """By hand: grown by half, as 1 + 0.5 (20000/20000)."""
    plain = {"kind": "fixed", "r_th_k_per_w": 0.02, "coolant_c": 40}
    aged = mission.run(load(tmp_path / "a", LOADED, cooling={**plain, "grease": {"growth": 0.5, "per_h": 20000, "age_h": 20000}}))
    study = load(tmp_path / "b", LOADED, cooling=plain)
    fresh = mission.run(study)
    paste = study.module.case_to_sink.r_th_k_per_w
    k = 500
    for result, r in ((aged, 0.02 + 1.5 * paste), (fresh, 0.02 + paste)):
        assert result.history.case_max_c[k].max() - 40.0 == pytest.approx(result.history.loss_w[k].sum() * r, rel=0.005)
    assert any("times 1.5 for the age of the grease" in t for t in build_document(aged).rests_on)
    assert aged.ledger.worst().life_years < fresh.ledger.worst().life_years


def test_a_computed_sink_takes_its_coolant_column(tmp_path):
    csv = rows([(0, 120, 50, 0.8, 0.85, 10), (900, 120, 50, 0.8, 0.85, 70), (1800, 0, 0, 0.05, 1, 70)], "t,I,f,m,cos_phi,T")
    plate = {"kind": "liquid-plate", "channel_count": 20, "channel_width_mm": 3, "channel_height_mm": 6, "web_mm": 2, "base_mm": 5, "length_mm": 200, "fluid": "water-glycol",
             "glycol_mass_share": 0.5, "flow_l_per_min": 6}
    study = load(tmp_path, csv, columns={"coolant": {"column": "T", "unit": "degC"}}, cooling=plate)
    result = mission.run(study)
    for at, coolant in ((890.0, 10.0), (1790.0, 70.0)):
        k = int(np.searchsorted(result.history.edge_s, at)) - 1
        assert result.history.r_sink_k_per_w[k] == pytest.approx(sink_point(study.spec.cooling, inlet_c=coolant).r_th_k_per_w, rel=0.0125)
    assert any(u.state.point.regime for u in result.cooling.used)


def test_conductivity_of_hot_silicon_makes_hotter_chips(tmp_path):
    write(tmp_path, {"cold.toml": module_text("avocet-300").replace('"silicon-hot"', '"silicon"')})
    study = load(tmp_path, LOADED, module={"file": "cold.toml"})
    hot = study.changed("module", conductivity_at_c=125.0)
    assert hot.materials()["silicon"].k_w_per_m_k < study.materials()["silicon"].k_w_per_m_k
    a, b = mission.run(study), mission.run(hot)
    assert 0.05 < b.history.peak_c.max() - a.history.peak_c.max() < 5.0
    with pytest.raises(InputError, match="conductivity_at_c.*no layers"):
        load(tmp_path / "foster", LOADED, module={"name": "heron-300", "conductivity_at_c": 125})


def test_rating_takes_the_strongest_stage(tmp_path):
    from mission.study import RatingBench

    bench = RatingBench(load(tmp_path / "a", LOADED, cooling={**FAN, "stage": STAGES}))
    plain = RatingBench(load(tmp_path / "b", LOADED, cooling=FAN))
    np.testing.assert_allclose(bench.network.r_th_k_per_w(), plain.network.r_th_k_per_w(), rtol=1e-6)


STILL = {"kind": "plate-fin-natural", "base_mm": 12, "fin_count": 50, "fin_mm": 1.5, "gap_mm": 10, "fin_height_mm": 60, "length_mm": 250, "emissivity": 0.8, "coolant_c": 30}


@pytest.mark.slow
@pytest.mark.parametrize(("cooling", "current", "times"), [
    ({**FAN, "heat_capacity_j_per_k": 8000, "law": {"watch": "surface", "at_c": [40, 70], "speed_ratio": [0.3, 1.0]}}, 250, 150),
    ({**STILL, "heat_capacity_j_per_k": 8000}, 120, 500)], ids=["law", "still air"])
def test_a_short_mission_on_a_slow_sink_starts_where_many_of_them_end(tmp_path, cooling, current, times):
    """Against the march itself: the same twenty seconds many times from the coolant's temperature."""
    once = [(0, current, 50, 0.8, 0.85), (10, 0, 0, 0.05, 1)]
    repeated = mission.run(load(tmp_path / "a", rows([*once, (20, 0, 0, 0.05, 1)]).replace("\n20,", "\n19,"), cooling=cooling, start="repeat"), keep_cycles=False)
    many = rows([(t + 20 * k, *rest) for k in range(times) for t, *rest in once] + [(20 * times - 1, 0, 0, 0.05, 1)])
    end = mission.run(load(tmp_path / "b", many, cooling=cooling), keep_cycles=False).history
    last = end.edge_s[:-1] > end.duration_s - 45.0
    assert repeated.closed
    assert repeated.history.peak_c.max() == pytest.approx(end.t_max_c[last].max(), abs=0.01 * (end.t_max_c[last].max() - 30.0))


def test_a_mission_that_does_not_close_says_so(tmp_path):
    """Two stages that send each other away on a slow sink: which of them holds differs from mission to mission."""
    cooling = {"kind": "fixed", "r_th_k_per_w": 0.05, "heat_capacity_j_per_k": 20000, "coolant_c": 30,
               "stage": [{"r_th_k_per_w": 0.08, "up_above_c": 62}, {"r_th_k_per_w": 0.03, "down_below_c": 61}]}
    result = mission.run(load(tmp_path, rows([(0, 150, 50, 0.8, 0.85), (60, 150, 50, 0.8, 0.85)]), cooling=cooling, start="repeat"), keep_cycles=False)
    document = build_document(result)
    assert not result.closed and not document.closed
    assert any("does not close on its start" in t for t in document.rests_on) and "does not close on its start" in result_text(result)


def test_a_stage_survives_steps_of_the_coolant(tmp_path):
    """By hand: inside the gap between the thresholds nothing but the sink's own temperature may change the stage."""
    coolant = [*np.linspace(45.0, -20.0, 60), *np.linspace(-20.0, 45.0, 60)]
    csv = rows([(10 * k, 170, 50, 0.8, 0.85, c) for k, c in enumerate(coolant)] + [(1200, 0, 0, 0.05, 1, 45)], "t,I,f,m,cos_phi,T")
    cooling = {k: v for k, v in FAN.items() if k != "coolant_c"} | {"stage": [{"speed_ratio": 0.3, "up_above_c": 55}, {"speed_ratio": 1.0, "down_below_c": -15}]}
    study = load(tmp_path, csv, columns={"coolant": {"column": "T", "unit": "degC"}}, cooling=cooling)
    result = mission.run(study)
    speeds = [study.cooling_plan().levels[level].setting.value for _, level in result.cooling.changes]
    assert len(result.cooling.used) > 3  # several steps of the coolant
    assert sum(a != b for a, b in zip(speeds, speeds[1:])) <= 2 and 1.0 in speeds


def test_the_hottest_point_is_one_under_load(tmp_path):
    result = mission.run(load(tmp_path, rows([(0, 200, 50, 0.8, 0.85), (30, 0, 0, 0.05, 1), (60, 0, 0, 0.05, 1)]), cooling={"kind": "fixed", "r_th_k_per_w": 0.02, "coolant_c": 30}))
    assert result.hot_point.i_peak_a > 0.0 and result.hot_point.end_s <= 30.0


def test_rating_takes_the_stage_and_the_coolant_that_hold(tmp_path):
    """Against studies that have only that stage, or only that coolant."""
    from dataclasses import replace

    from mission.study import RatingBench, rating_point

    never = [{"speed_ratio": 0.3, "up_above_c": 240}, {"speed_ratio": 1.0, "down_below_c": 40}]
    staged = load(tmp_path / "a", LOADED, cooling={**FAN, "stage": never})
    weak = load(tmp_path / "b", LOADED, cooling={**FAN, "law": {"watch": "coolant", "at_c": [20, 60], "speed_ratio": [0.3, 0.3]}})
    found, want = (RatingBench(s).largest_current(rating_point(s)) for s in (staged, weak))
    assert found.current_a == pytest.approx(want.current_a, rel=2e-3) and found.cooling == "30 % speed"
    law = {**FAN, "law": {"watch": "coolant", "at_c": [20, 60], "speed_ratio": [0.3, 1.0]}}
    bench = RatingBench(load(tmp_path / "c", LOADED, cooling=law))
    for coolant in (22.0, 50.0):
        own = load(tmp_path / f"d{coolant:g}", LOADED, cooling={**law, "coolant_c": coolant})
        got = bench.largest_current(replace(rating_point(bench.study), coolant_c=coolant))
        assert got.current_a == pytest.approx(RatingBench(own).largest_current(rating_point(own)).current_a, rel=2e-3)


def test_a_liquid_that_would_boil_is_flagged(tmp_path):
    plate = {"kind": "liquid-plate", "channel_count": 20, "channel_width_mm": 3, "channel_height_mm": 6, "web_mm": 2, "base_mm": 5, "length_mm": 200, "fluid": "water",
             "flow_l_per_min": 0.4, "coolant_c": 80}
    result = mission.run(load(tmp_path, LOADED, cooling=plate))
    assert any("boiling is not reckoned" in t for t in build_document(result).cooling.flags) and "boiling is not reckoned" in result_text(result)


def test_another_kind_of_cooling_by_change(tmp_path):
    study = load(tmp_path, LOADED, cooling={**FAN, "stage": STAGES})
    changed = study.changed("cooling", kind="fixed", r_th_k_per_w=0.03)
    assert changed.spec.cooling.r_th_k_per_w == 0.03 and changed.spec.cooling.coolant_c == 30 and not changed.spec.cooling.stage


def test_every_kind_is_refused_in_words_and_not_by_a_traceback(tmp_path):
    with pytest.raises(InputError, match="study.toml"):
        mission.run(load(tmp_path, LOADED, cooling={**FAN, "fan": {"flow_m3_per_h": [0, 100], "pressure_pa": [4000, 3000]}}))
