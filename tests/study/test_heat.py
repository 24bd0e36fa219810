"""The way of the heat: every number against sums by hand, the plate's own solution, or the march at rest."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

import mission
from mission.device import load_module, to_toml
from mission.errors import InputError, NoStableTemperature
from mission.show.thermal_figures import stack_drops
from mission.study import review_heat, stability
from mission.study.heat import WARMED_BEFORE, _resting_level
from mission.thermal import LevelGroup, conductivity_effect, plate_stack, shipped_materials
from mission.thermal.build import chip_ladder

from ..thermal.test_plates import half_bridge
from .good_study import module_text
from .test_cooling_in_studies import FAN, STAGES, load, rows

STEADY = rows([*((t, 150, 50, 0.8, 0.85) for t in range(0, 400, 4)), (400, 150, 50, 0.8, 0.85)])
WORK = rows([(0, 150, 50, 0.8, 0.85), (20, 0, 0, 0.05, 1), (30, 220, 20, 0.4, 0.8), (34, 0, 0, 0.05, 1), (60, 0, 0, 0.05, 1)])
FIXED = {"kind": "fixed", "r_th_k_per_w": 0.02, "heat_capacity_j_per_k": 500, "coolant_c": 40}
PLATE = {"kind": "liquid-plate", "channel_count": 20, "channel_width_mm": 3, "channel_height_mm": 6, "web_mm": 2, "base_mm": 5, "length_mm": 200,
         "fluid": "water", "flow_l_per_min": 12, "coolant_c": 40}


def result(folder, csv=WORK, *, module=None, name="heron-300", cooling=FIXED, start="repeat", **sections):
    if module is not None:
        folder.mkdir(parents=True, exist_ok=True)
        (folder / "own.toml").write_text(module, encoding="utf-8")
    return mission.run(load(folder, csv, cooling=cooling, start=start, module={"name": name} if module is None else {"file": "own.toml"}, **sections))


def layered():
    """Heron with silicon, solder and copper under its switches."""
    data = load_module("heron-300").model_dump(mode="python", exclude_none=True)
    data["switch"]["thermal"] = {"reference": "case", "layer": [
        {"material": "silicon", "thickness_mm": 0.12, "width_mm": 25.0, "length_mm": 12.0}, {"material": "solder-snag", "thickness_mm": 0.1},
        {"material": "copper", "thickness_mm": 3.0, "spread_deg": 45.0}]}
    return type(load_module("heron-300")).model_validate(data)


def adds_up(review):
    for way in review.ways:
        k = way.chip
        assert way.steps[0].upper_c == pytest.approx(review.junction_c[k], abs=1e-6)
        assert way.steps[-1].lower_c == pytest.approx(review.coolant_c, abs=1e-6)
        assert all(a.lower_c == pytest.approx(b.upper_c, abs=1e-6) for a, b in zip(way.steps, way.steps[1:]))
        for step in way.steps:
            if np.isfinite(step.heat_w):
                assert step.drop_k == pytest.approx(step.heat_w * step.r_k_per_w, abs=1e-6), step.name


def test_branches_by_hand(tmp_path):
    """Analytic: 0.110 and 0.180 K/W of the module file for the chip's own loss, 0.009 and the sink's 0.02 K/W for the sum of all."""
    run = result(tmp_path)
    review = review_heat(run)
    loss = run.history.energy_j / run.history.duration_s
    assert review.coolant_c == pytest.approx(40.0) and review.level == 0 and review.wavers is None and review.plate is None
    np.testing.assert_allclose(review.loss_w, loss)
    np.testing.assert_allclose(review.surface_c, 40.0 + 0.02 * loss.sum())
    np.testing.assert_allclose(review.case_c, 40.0 + 0.029 * loss.sum())
    np.testing.assert_allclose(review.junction_c, 40.0 + 0.029 * loss.sum() + loss * np.repeat([0.110, 0.180], 6), rtol=1e-9)
    switch, diode = review.ways
    assert (switch.place, diode.place) == ("switch", "diode") and switch.chip == np.argmax(loss[:6]) and diode.chip == 6 + np.argmax(loss[6:])
    assert [s.name for s in switch.steps] == ["junction to case", "case to sink", "sink to coolant"] and not switch.layers
    np.testing.assert_allclose([s.drop_k for s in diode.steps], [0.180 * diode.loss_w, 0.009 * loss.sum(), 0.02 * loss.sum()], rtol=1e-8)
    np.testing.assert_allclose(review.r_junction_k_per_w, 0.029 + np.diag(np.repeat([0.110, 0.180], 6)), rtol=1e-9)
    np.testing.assert_allclose(review.r_case_k_per_w, np.full((12, 12), 0.029), rtol=1e-9)
    adds_up(review)


def test_a_steady_duty_rests_where_the_review_says(tmp_path):
    """The march over a duty that never changes, against resistances times mean losses."""
    run = result(tmp_path, STEADY)
    review = review_heat(run)
    within = 2e-3 * (review.junction_c - 40.0).max()
    np.testing.assert_allclose(review.case_c, run.history.case_peak_c, atol=within)
    assert (review.junction_c < run.history.peak_c + within).all() and (review.junction_c > run.history.lowest_c - within).all()
    # without ripple that stays the same, so the held point is the mean again but for the feedback of the ripple
    np.testing.assert_allclose(review_heat(run, held=True).junction_c, review.junction_c, atol=0.5)


def test_mean_coolant_by_hand(tmp_path):
    csv = rows([(0, 100, 50, 0.8, 0.85, 20), (10, 0, 0, 0.05, 1, 50), (39, 0, 0, 0.05, 1, 50)], "t,I,f,m,cos_phi,T")
    run = result(tmp_path, csv, cooling={k: v for k, v in FIXED.items() if k != "coolant_c"}, columns={"coolant": {"column": "T", "unit": "degC"}})
    assert review_heat(run).coolant_c == pytest.approx((10 * 20 + 30 * 50) / 40, rel=1e-3)


def test_held_point_rests(tmp_path):
    """Losses are those at the temperatures that they lead to."""
    run = result(tmp_path)
    review = review_heat(run, held=True)
    at = run.hot_point.held(run.tables, run.network)
    np.testing.assert_allclose(at.loss_w(review.junction_c), review.loss_w, rtol=1e-4)
    assert review.junction_c.max() == pytest.approx(stability(run).settles_at_c, abs=review.network.error_bound_k(review.loss_w).max())
    np.testing.assert_allclose(review.surface_c, 40.0 + 0.02 * review.loss_w.sum())
    adds_up(review)


def test_held_point_that_runs_away_is_told(tmp_path):
    csv = rows([(0, 250, 50, 0.8, 0.85), (1, 0, 0, 0.05, 1), (20, 0, 0, 0.05, 1)])
    run = result(tmp_path, csv, cooling={**FIXED, "r_th_k_per_w": 0.9, "heat_capacity_j_per_k": 1e5}, start="coolant")
    assert review_heat(run).junction_c.max() < 250.0
    words = "no stable temperature below 1000 degC exists .* lasts for ever; losses run away with a coolant above .*now 40 degC.*900 K/kW"
    with pytest.raises(NoStableTemperature, match=words):
        review_heat(run, held=True)


def test_layers_against_the_stack_alone(tmp_path):
    """The stack's own drops, found without the network; conductivities by the function for whole stacks."""
    module = layered()
    run = result(tmp_path, module=to_toml(module))
    review = review_heat(run)
    way, materials = review.ways[0], shipped_materials()
    stack = chip_ladder(module.switch.thermal, materials, "")
    total = review.loss_w.sum()
    alone = stack_drops(stack, ["silicon", "solder", "copper"], power_w=way.loss_w, cooling=review.state.path, coolant_c=40.0,
                        case_to_sink_k_per_w=0.009, interface_power_w=total, sink_power_w=total)
    assert stack_drops(stack, "abc", power_w=1.0, cooling=0.5, coolant_c=40.0)[-1].drop_k == pytest.approx(0.5)
    assert [s.name for s in way.steps] == ["silicon, 0.12 mm", "solder-snag, 0.1 mm", "copper, 3 mm", "case to sink", "sink to coolant"]
    np.testing.assert_allclose([s[1:3] for s in way.steps], [(d.upper_c, d.lower_c) for d in alone], atol=1e-6)
    for k, layer in enumerate(way.layers):
        assert layer.drop_k == pytest.approx(way.steps[k].drop_k) and layer.r_k_per_w == pytest.approx(stack.r_layers_k_per_w[k])
        effect = conductivity_effect(module.switch.thermal.layer, materials, layer.mean_c).layers[k]
        assert layer.has_law == (k != 1)
        if layer.has_law:
            assert layer.k_there_w_per_m_k == pytest.approx(effect.k_at_w_per_m_k) and layer.change_percent == pytest.approx(effect.change_percent)
    assert 10.0 < way.layers[0].change_percent < 30.0
    adds_up(review)


def test_conductivity_beyond_its_law_is_not_reckoned(tmp_path):
    """Fins that hardly cool: layers above 230 degC, where the law of silicon ends."""
    run = result(tmp_path, STEADY, module=to_toml(layered()), cooling={**FIXED, "r_th_k_per_w": 0.15, "coolant_c": 120}, start="coolant")
    review = review_heat(replace(run, history=replace(run.history, energy_j=3.0 * run.history.energy_j)))
    silicon = review.ways[0].layers[0]
    assert silicon.mean_c > 230.0 and silicon.has_law and np.isnan(silicon.k_there_w_per_m_k)


def test_plate_of_a_six_pack_against_its_own_solution(tmp_path):
    run = result(tmp_path, name="avocet-300")
    review = review_heat(run)
    stack = plate_stack(run.study.module)  # ends at the sink's surface
    surface = 40.0 + 0.02 * review.loss_w.sum()
    rise = review.case_c - surface
    # the network's plate is right to 1 % of a chip's rise over the sink
    np.testing.assert_allclose(rise, stack.r_th_k_per_w("case") @ review.loss_w, rtol=0.01)
    for way in review.ways:
        face = way.steps[6].upper_c
        assert [s.name for s in way.steps[6:]] == ["plate", "case to sink", "sink to coolant"]
        assert face - surface == pytest.approx((stack.r_th_k_per_w() @ review.loss_w)[way.chip], rel=0.01)
        assert [layer.part for layer in way.layers] == 6 * ["chip"] + ["plate"] and way.layers[6].upper_c == face
    plate = review.plate
    assert plate.source == review.hottest and plate.stack == stack and plate.surface_c == pytest.approx(surface)
    exact = plate.spreading.set_index(["method", "rise"]).r_th_k_per_w["exact", "mean"]
    assert exact == pytest.approx(stack.r_th_k_per_w()[plate.source, plate.source])
    adds_up(review)


def test_modules_in_a_row_on_their_plates(tmp_path):
    """Energy by hand: each sink carries the heat of its leg, and the coolant comes to it warmed by the legs before."""
    cooling = {**PLATE, "positions": 3, "legs_along_flow": ["a", "c", "b"]}
    run = result(tmp_path, module=to_toml(half_bridge()), cooling=cooling)
    review = review_heat(run)
    legs = (np.arange(12) % 6) // 2
    heat = [review.loss_w[legs == k].sum() for k in range(3)]
    rise = review.state.point.outlet_rise_k_per_w
    inlet = 40.0 + rise * np.array([0.0, heat[0] + heat[2], heat[0]])
    np.testing.assert_allclose(review.coolant_at_c, inlet[legs])
    sinks = review.full.out_surface @ np.linalg.solve(review.full.g_w_per_k, review.full.out_junction.T) @ review.loss_w
    np.testing.assert_allclose(review.surface_c, (inlet + sinks)[legs], rtol=1e-9)
    leg = legs[review.hottest]
    assert leg == 1
    plate = review.plate
    assert plate.power_w.tolist() == review.loss_w[legs == leg].tolist()
    assert plate.stack.sources[plate.source].name == review.chips[review.hottest].replace("-b-", "-")
    np.testing.assert_allclose(review.case_c[legs == leg], plate.surface_c + plate.stack.r_th_k_per_w("case") @ plate.power_w,
                               atol=0.01 * (review.case_c - review.surface_c).max())
    warmed = {way.name: [s for s in way.steps if s.name == WARMED_BEFORE] for way in review.ways}
    assert all(bool(steps) == ("-a-" not in name) for name, steps in warmed.items())
    adds_up(review)


def test_coupled_chips_by_hand(tmp_path):
    text = module_text() + '\n[[coupling]]\nheated = "S-up"\nfelt = "D-up"\nr_k_per_w = [0.012, 0.006]\ntau_s = [0.09, 0.6]\n'
    review = review_heat(result(tmp_path, module=text))
    for way in review.ways:
        felt = next((s for s in way.steps if s.name == "heat of other chips"), None)
        other = (way.chip + 6) % 12
        assert felt.drop_k == pytest.approx(0.018 * review.loss_w[other] if way.chip % 2 == 0 else 0.0, abs=1e-6)
    adds_up(review)


@pytest.mark.parametrize(("name", "kinds"), [("kite-300", 2), ("tern-300", 1), ("curlew-300", 5)])
def test_every_kind_of_chip_has_its_way(tmp_path, name, kinds):
    review = review_heat(result(tmp_path, name=name, inverter={"dc_voltage_v": 600, "switching_frequency_hz": 5000, "modulation": "space-vector"}))
    assert len(review.ways) == kinds and all(way.name == review.chips[way.chip] for way in review.ways)
    if name == "kite-300":  # its data end at the sink
        assert [s.name for s in review.ways[0].steps] == ["junction to sink", "sink to coolant"]
        assert review.case_c == pytest.approx(review.surface_c)
    if name == "curlew-300":  # three modules: each its own paste
        legs = (np.arange(30) % 6) // 2
        way = review.ways[0]
        assert way.steps[1].heat_w == pytest.approx(review.loss_w[legs == (way.chip % 6) // 2].sum())
    adds_up(review)


def test_driven_by_the_losses_at_once_rests_at_the_same(tmp_path):
    review = review_heat(result(tmp_path, cooling={**FIXED, "sink_sees": "chip-losses"}))
    assert review.full is None
    np.testing.assert_allclose(review.r_junction_k_per_w, 0.029 + np.diag(np.repeat([0.110, 0.180], 6)), rtol=1e-9)
    adds_up(review)


def test_aged_grease_is_in_the_drop(tmp_path):
    """1 + 0.5 (40000/20000) = 2 times 0.009 K/W; the mission's minute adds nothing."""
    review = review_heat(result(tmp_path, cooling={**FIXED, "grease": {"growth": 0.5, "per_h": 20000.0, "age_h": 40000.0}}))
    assert review.ways[0].steps[1].drop_k == pytest.approx(0.018 * review.loss_w.sum(), rel=1e-6)
    adds_up(review)


def test_grease_under_a_plate_is_in_its_pictures(tmp_path):
    review = review_heat(result(tmp_path, name="avocet-300", cooling={**FIXED, "grease": {"growth": 0.5, "per_h": 20000.0, "age_h": 20000.0}}))
    assert review.plate.stack.r_area_mm2_k_per_w == pytest.approx(1.5 * 0.0046 * 160.0 * 108.0, rel=1e-6)


def test_held_fan_rests_at_the_stage_that_its_surface_asks_for(tmp_path):
    """The mission's hottest moment comes with the weak stage; held, the sink grows warm enough for the strong one, and by hand stays there."""
    csv = rows([(0, 0, 0, 0.05, 1), (600, 220, 50, 0.8, 0.85), (604, 0, 0, 0.05, 1), (1200, 0, 0, 0.05, 1)])
    run = result(tmp_path, csv, cooling={**FAN, "stage": STAGES})
    assert run.hot_point.level == 0
    cold, hot = review_heat(run), review_heat(run, held=True)
    assert (cold.state.words, hot.state.words) == ("40 % speed", "100 % speed")
    for review, low, high in ((cold, -np.inf, 45.0), (hot, 40.0, np.inf)):
        surface = 30.0 + review.loss_w.sum() * review.state.r_th_k_per_w
        assert low < surface < high and review.surface_c == pytest.approx(np.full(12, surface))
    # losses are those at the temperatures on the strong stage
    at = run.hot_point.held(run.tables, hot.network)
    np.testing.assert_allclose(at.loss_w(hot.junction_c), hot.loss_w, rtol=1e-4)


def test_held_point_goes_on_to_a_stage_that_lets_it_rest(tmp_path):
    """On 0.9 K/W it runs away; with 0.05 K/W the surface stays below 150 degC, where the third stage would begin."""
    stages = [{"r_th_k_per_w": 0.9, "up_above_c": 60}, {"r_th_k_per_w": 0.05, "up_above_c": 150, "down_below_c": 50},
              {"r_th_k_per_w": 0.01, "down_below_c": 100}]
    csv = rows([(0, 220, 50, 0.8, 0.85), (1, 0, 0, 0.05, 1), (20, 0, 0, 0.05, 1)])
    run = result(tmp_path, csv, cooling={**FIXED, "heat_capacity_j_per_k": 1e5, "stage": stages}, start="coolant")
    assert run.hot_point.level == 0 and not run.hot_point.held(run.tables, run.network).settle(40.0).exists
    review = review_heat(run, held=True)
    assert review.level == 1 and 50.0 < 40.0 + 0.05 * review.loss_w.sum() < 150.0
    adds_up(review)


class Plan:
    """Three stages of 0.4, 0.2 and 0.1 K/W."""

    def __init__(self, up=(60.0, 60.0), down=(50.0, 50.0), on_rise=False):
        self.groups = (LevelGroup((9,)), LevelGroup((3, 4, 5), up, down, on_rise))

    def state(self, k):
        return SimpleNamespace(r_th_k_per_w={9: 1.0, 3: 0.4, 4: 0.2, 5: 0.1}[k])


@pytest.mark.parametrize(("power", "start", "more", "level", "other"), [
    (1000.0, 9, {}, 9, None),  # alone in its group
    (50.0, 3, {}, 3, None),  # 40 degC
    (50.0, 5, {}, 3, None),  # 25 and 30 degC: down to the weakest
    (160.0, 3, {}, 4, None),  # 84 degC: up; 52 degC: stays
    (160.0, 5, {}, 4, None),  # 36 degC: down
    (1000.0, 3, {}, 5, None),
    (120.0, 3, {}, 4, 3),  # 68 degC: up; 44 degC: down again, for ever
    (160.0, 3, {"on_rise": True, "up": (70.0, 70.0), "down": (20.0, 20.0)}, 3, None),  # a rise of 64 K
])
def test_where_the_cooling_rests_by_hand(power, start, more, level, other):
    assert _resting_level(Plan(**more), start, 20.0, lambda k: np.full(2, power / 2)) == (level, other)


def test_no_temperature_asks_for_the_strongest():
    assert _resting_level(Plan(), 3, 20.0, lambda k: np.full(2, np.nan)) == (5, None)


def test_a_stopped_run_is_refused(tmp_path):
    with pytest.raises(InputError, match="a whole mission"):
        review_heat(replace(result(tmp_path), complete=False))
