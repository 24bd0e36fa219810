"""From the cooling section to levels: which one holds when, and that following in steps is close enough."""

import numpy as np
import pytest

from mission.device import load_module
from mission.errors import InputError
from mission.thermal import CauerLadder, CoolingPlan, CoolingSpec
from mission.thermal.sinks import sink_point
from mission.tomlfile import FileModel, parse_model

from .test_sinks import FAN, FINS, NATURAL, PLATE, PUMP, TABLE

HERON = load_module("heron-300")
LEG = HERON.model_copy(update={"arrangement": "half-bridge"})
STAGES = [{"speed_ratio": 0.4, "up_above_c": 55.0}, {"speed_ratio": 0.7, "up_above_c": 65.0, "down_below_c": 48.0}, {"speed_ratio": 1.0, "down_below_c": 58.0}]


class Wrapper(FileModel):
    cooling: CoolingSpec


def plan(data, module=HERON, *, coolant=(40.0, 40.0), **more):
    data = {k: v for k, v in data.items() if v is not None}
    data.pop("coolant_c", None)
    return CoolingPlan(parse_model({"cooling": data}, Wrapper, "study.toml").cooling, module, coolant_c=coolant, **more)


def resistance(found, time_s=0.0, coolant=40.0, flow=None):
    """Surface-to-coolant resistance of the first level of a row's group."""
    group = found.groups_of([time_s], [coolant], None if flow is None else [flow])[0]
    return found.state(found.groups[group].levels[0]).r_th_k_per_w


def test_a_given_resistance_is_one_level():
    one = plan({"kind": "fixed", "r_th_k_per_w": 0.02, "heat_capacity_j_per_k": 900.0})
    assert len(one.levels) == len(one.groups) == 1 and one.cut_s.size == 0
    assert one.state(0).r_th_k_per_w == 0.02 and one.state(0).point is None


@pytest.mark.parametrize("data", [FAN, PLATE, {**NATURAL, "heat_w": 60.0}, TABLE], ids=["fan", "plate", "still air", "table"])
def test_a_reckoned_sink_is_what_its_rule_says(data):
    state = plan(data).state(0)
    want = sink_point(parse_model({"cooling": {k: v for k, v in data.items() if k != "coolant_c"}}, Wrapper, "x").cooling, inlet_c=40.0)
    assert state.r_th_k_per_w == want.r_th_k_per_w and state.point.flags == want.flags
    ladder = state.path.ladders[0]
    if want.heat_capacity_j_per_k is None:
        assert ladder == want.r_th_k_per_w
    else:
        assert (ladder.r_k_per_w[0], ladder.c_j_per_k[0]) == (want.r_th_k_per_w, want.heat_capacity_j_per_k)


def test_stages_are_one_group_with_its_thresholds():
    found = plan({**FAN, "stage": STAGES})
    group, = found.groups
    assert group == ((0, 1, 2), (55.0, 65.0), (48.0, 58.0), False)
    r = [found.state(k).r_th_k_per_w for k in range(3)]
    assert r[0] > r[1] > r[2] and len({found.state(k).path.ladders[0].c_j_per_k[0] for k in range(3)}) == 1


def test_stages_by_given_resistance_change_the_film_of_a_foster_sink():
    """By hand: all masses and the inner resistances of the ladder stay, the last resistance takes the difference."""
    found = plan({"kind": "foster", "r_k_per_w": [0.004, 0.006, 0.010], "tau_s": [0.5, 5.0, 60.0],
                  "stage": [{"r_th_k_per_w": 0.06, "up_above_c": 50.0}, {"r_th_k_per_w": 0.025, "down_below_c": 40.0}]})
    a, b = (found.state(k).path.ladders[0] for k in range(2))
    np.testing.assert_array_equal(a.c_j_per_k, b.c_j_per_k)
    np.testing.assert_array_equal(a.r_k_per_w[:-1], b.r_k_per_w[:-1])
    assert a.r_k_per_w.sum() == pytest.approx(0.06) and b.r_k_per_w.sum() == pytest.approx(0.025)
    with pytest.raises(InputError, match="lie inside the sink"):
        plan({"kind": "foster", "r_k_per_w": [0.004, 0.006, 0.010], "tau_s": [0.5, 5.0, 60.0],
              "stage": [{"r_th_k_per_w": 0.06, "up_above_c": 50.0}, {"r_th_k_per_w": 0.001, "down_below_c": 40.0}]}).state(1)


@pytest.mark.parametrize("data", [TABLE, FAN, PLATE], ids=["table", "fan", "plate"])
def test_a_flow_column_is_followed_within_the_step(data):
    data = {k: v for k, v in data.items() if k not in ("at_l_per_min", "fan", "flow_l_per_min")} | ({"flow_l_per_min": data["flow_l_per_min"]} if data is TABLE else {})
    low, high = (np.array([2.0, 10.0]) / 60000.0) if data["kind"] != "plate-fin-fan" else np.array([60.0, 300.0]) / 3600.0
    found = plan(data, flow_m3_per_s=(low, high))
    spec = found.spec
    for flow in np.geomspace(low, high, 23):
        want = sink_point(spec, inlet_c=40.0, flow_m3_per_s=flow).r_th_k_per_w
        assert resistance(found, flow=flow) == pytest.approx(want, rel=0.0125)  # half a step, and the coarser grid where the kind of flow turns


def test_a_noisy_flow_does_not_change_the_level_with_every_row():
    found = plan({k: v for k, v in TABLE.items() if k != "at_l_per_min"}, flow_m3_per_s=(2.0 / 60000, 10.0 / 60000))
    rng = np.random.default_rng(4)
    border = found._flow_borders[len(found._flow_borders) // 2]
    flow = border * (1.0 + 0.004 * rng.standard_normal(1000))
    groups = found.groups_of(np.arange(1000.0), np.full(1000, 40.0), flow)
    assert np.count_nonzero(np.diff(groups)) < 10 and np.count_nonzero(np.diff(np.searchsorted([border], flow))) > 300
    slow = np.geomspace(2.0, 10.0, 500) / 60000
    groups = found.groups_of(np.arange(500.0), np.full(500, 40.0), slow)
    apart = found.groups_of([0.0], [40.0], slow[:1])[0]
    for k, q in enumerate(slow):  # row by row as in one go
        apart = found.groups_of([float(k)], [40.0], [q], before=int(apart))[0]
        assert apart == groups[k]
        want = np.exp(np.interp(np.log(q), np.log(found.spec.table_m3_per_s), np.log(found.spec.r_th_k_per_w)))
        assert found.state(found.groups[groups[k]].levels[0]).r_th_k_per_w == pytest.approx(want, rel=0.022)


def test_rows_without_flow_have_their_own_level():
    data = {k: v for k, v in TABLE.items() if k != "at_l_per_min"}
    found = plan({**data, "heat_capacity_j_per_k": 900.0, "stopped": {"r_th_k_per_w": 0.9}}, flow_m3_per_s=(2.0 / 60000, 10.0 / 60000), stands_still=True)
    assert resistance(found, flow=0.0) == 0.9 and resistance(found, flow=10.0 / 60000) == pytest.approx(0.018, rel=0.011)


def test_a_coolant_column_is_followed_within_the_step():
    found = plan(PLATE, coolant=(5.0, 75.0))
    assert len(found.levels) > 5  # glycol is much thicker when cold
    for coolant in np.linspace(5.0, 75.0, 15):
        assert resistance(found, coolant=coolant) == pytest.approx(sink_point(found.spec, inlet_c=coolant).r_th_k_per_w, rel=0.0125)


def test_still_air_follows_the_rise_of_its_sink():
    found = plan({k: v for k, v in NATURAL.items() if k != "heat_w"})
    group, = found.groups
    assert group.on_rise and len(group.levels) > 20 and all(u > d for u, d in zip(group.up_c, group.down_c))
    low = 2.0
    for k, up in zip(group.levels, group.up_c):
        spec = parse_model({"cooling": {**{n: v for n, v in NATURAL.items() if n not in ("heat_w", "coolant_c")}, "surface_c": 40.0 + np.sqrt(low * up)}}, Wrapper, "x").cooling
        assert found.state(k).r_th_k_per_w == pytest.approx(sink_point(spec, inlet_c=40.0).r_th_k_per_w, rel=0.02)
        low = up


def test_a_law_over_the_surface_and_one_over_the_coolant():
    law = {"watch": "surface", "at_c": [40.0, 60.0], "speed_ratio": [0.3, 1.0], "hysteresis_k": 1.5}
    over_surface = plan({**FAN, "law": law})
    group, = over_surface.groups
    np.testing.assert_allclose(np.array(group.up_c) - group.down_c, 1.5)
    assert all(40.0 < u < 60.0 for u in group.up_c)
    speeds = [over_surface.levels[k].setting.value for k in group.levels]
    assert all(b > a for a, b in zip(speeds, speeds[1:])) and 0.3 < speeds[0] < speeds[-1] < 1.0
    over_coolant = plan({**FAN, "law": {k: v for k, v in {**law, "watch": "coolant"}.items() if k != "hysteresis_k"}}, coolant=(30.0, 70.0))
    assert all(len(g.levels) == 1 for g in over_coolant.groups)
    for coolant in (31.0, 45.0, 52.0, 66.0):
        speed = float(np.interp(coolant, [40.0, 60.0], [0.3, 1.0]))
        assert resistance(over_coolant, coolant=coolant) == pytest.approx(sink_point(over_coolant.spec, inlet_c=coolant, speed_ratio=speed).r_th_k_per_w, rel=0.015)


def test_a_fault_holds_from_its_time_to_its_end():
    found = plan({**FAN, "fault": [{"at_s": 100.0, "until_s": 200.0}, {"at_s": 300.0, "share": 0.5}], "stopped": {"r_th_k_per_w": 0.8}}, duration_s=400.0)
    assert found.cut_s.tolist() == [100.0, 200.0, 300.0]
    whole = sink_point(found.spec, inlet_c=40.0).r_th_k_per_w
    half = sink_point(found.spec, inlet_c=40.0, speed_ratio=0.5).r_th_k_per_w
    assert [resistance(found, t) for t in (0.0, 100.0, 199.0, 200.0, 299.9, 300.0)] == [whole, 0.8, 0.8, whole, whole, half]


def test_a_fault_leaves_a_share_of_every_stage():
    """Less flow cools worse: half of a stage at 0.4 of the speed is 0.2, not half of full speed."""
    found = plan({**FAN, "stage": STAGES, "fault": [{"at_s": 100.0, "until_s": 150.0, "share": 0.5}, {"at_s": 200.0, "share": 0.5}]}, duration_s=400.0)
    assert len(found.groups) == 2 and found.groups[1].up_c == found.groups[0].up_c
    assert [found.levels[k].setting.value for k in found.groups[1].levels] == pytest.approx([0.2, 0.35, 0.5])
    for a, b in zip(*(g.levels for g in found.groups)):
        assert found.state(b).r_th_k_per_w > found.state(a).r_th_k_per_w


def test_levels_do_not_multiply_needlessly():
    """Like faults share their levels, and what grease does not change is reckoned once."""
    found = plan({**FAN, "fault": [{"at_s": 100.0 * k, "until_s": 100.0 * k + 10.0} for k in range(1, 9)], "stopped": {"emissivity": 0.8},
                  "grease": {"growth": 0.5, "per_h": 1.0}}, duration_s=3600.0)
    assert len(found.levels) == len(set(found.levels)) and found._shape[0] == 2
    steps = len(found._paste)
    assert len(found.groups) == 2 * steps and len(found.levels) < steps * 300


@pytest.mark.parametrize("air", [-58.0, 55.0, 140.0])
def test_still_air_of_any_temperature(air):
    found = plan({k: v for k, v in NATURAL.items() if k != "heat_w"}, coolant=(air, air))
    group, = found.groups
    assert found.state(group.levels[0]).r_th_k_per_w > found.state(group.levels[-1]).r_th_k_per_w


def test_a_stopped_fan_leaves_its_fins_in_still_air():
    found = plan({**FAN, "fault": [{"at_s": 10.0}], "stopped": {"emissivity": 0.85}}, duration_s=100.0)
    group = found.groups[found.groups_of([50.0], [40.0])[0]]
    want = parse_model({"cooling": {"kind": "plate-fin-natural", **{k: v for k, v in FINS.items() if k != "coolant_c"}, "emissivity": 0.85,
                                    "surface_c": 40.0 + found.levels[group.levels[10]].setting.value}}, Wrapper, "x").cooling
    assert group.on_rise and found.state(group.levels[10]).r_th_k_per_w == sink_point(want, inlet_c=40.0).r_th_k_per_w


def test_grease_ages_in_steps_that_stay_within_two_percent():
    """By hand: factor 1 + 0.3 ((1000 + t)/4000)^0.5 between 1000 and 9000 hours."""
    found = plan({"kind": "fixed", "r_th_k_per_w": 0.02, "heat_capacity_j_per_k": 900.0,
                  "grease": {"growth": 0.3, "per_h": 4000.0, "exponent": 0.5, "age_h": 1000.0}}, duration_s=8000.0 * 3600.0)
    assert len(found.levels) >= 9 and len(found.cut_s) == len(found.levels) - 1
    for hours in np.linspace(0.0, 7999.0, 40):
        group = found.groups[found.groups_of([hours * 3600.0], [40.0])[0]]
        assert found.levels[group.levels[0]].paste == pytest.approx(1.0 + 0.3 * ((1000.0 + hours) / 4000.0) ** 0.5, rel=0.0101)
    short = plan({"kind": "fixed", "r_th_k_per_w": 0.02, "grease": {"growth": 0.3, "per_h": 4000.0, "age_h": 8000.0}}, duration_s=3600.0)
    assert len(short.levels) == 1 and short.state(0).path.paste == pytest.approx(1.6, rel=1e-3)


def test_modules_in_a_row_add_up_to_the_plate():
    """By hand: with equal heats, the mean of the three surfaces over the inlet is the plate's resistance for all the heat."""
    found = plan({**PLATE, "positions": 3, "legs_along_flow": ["b", "c", "a"]}, LEG)
    path, point = found.state(0).path, found.state(0).point
    assert path.first_to_last == (1, 2, 0) and path.coolant_rise_k_per_w == point.outlet_rise_k_per_w
    r = np.array([ladder.r_k_per_w[0] for ladder in path.ladders])
    surface = r / 3.0 + path.coolant_rise_k_per_w * np.array([2.0, 0.0, 1.0]) / 3.0
    assert surface.mean() == pytest.approx(point.r_th_k_per_w, rel=1e-9)
    assert all(isinstance(ladder, CauerLadder) for ladder in path.ladders)


NO_FAN = {k: v for k, v in FAN.items() if k != "fan"}
REFUSED = [
    ("speed without a curve", {**NO_FAN, "flow_m3_per_h": 200.0, "stage": STAGES}, {}, ["stage[1].speed_ratio", "no curve"]),
    ("flow of a given resistance", {"kind": "fixed", "r_th_k_per_w": 0.1, "law": {"watch": "surface", "at_c": [40.0, 60.0], "flow_l_per_min": [3.0, 6.0]}}, {}, ["cooling.law", "'fixed'"]),
    ("stages without heat capacity", {"kind": "fixed", "r_th_k_per_w": 0.1, "stage": [{"r_th_k_per_w": 0.1, "up_above_c": 50.0}, {"r_th_k_per_w": 0.05, "down_below_c": 40.0}]}, {},
     ["heat_capacity_j_per_k", "without it the surface would jump"]),
    ("flow column beside a fan curve", FAN, {"flow_m3_per_s": (0.01, 0.02)}, ["cooling.fan", "flow column"]),
    ("flow column beside a flow", PLATE, {"flow_m3_per_s": (1e-4, 2e-4)}, ["cooling.flow_l_per_min", "flow column"]),
    ("flow column with a given resistance", {"kind": "fixed", "r_th_k_per_w": 0.1}, {"flow_m3_per_s": (1e-4, 2e-4)}, ["cooling.kind", "'fixed'"]),
    ("no flow and nothing said", {k: v for k, v in TABLE.items() if k != "at_l_per_min"}, {"flow_m3_per_s": (1e-4, 1.5e-4), "stands_still": True}, ["cooling.stopped", "rows without flow"]),
    ("stopped that nothing leads to", {**FAN, "stopped": {"r_th_k_per_w": 1.0}}, {}, ["cooling.stopped", "nothing leads to"]),
    ("emissivity of a liquid plate", {**PLATE, "fault": [{"at_s": 1.0}], "stopped": {"emissivity": 0.5}}, {}, ["stopped.emissivity", "'liquid-plate'"]),
    ("share of a given resistance", {"kind": "fixed", "r_th_k_per_w": 0.1, "fault": [{"at_s": 1.0, "share": 0.5}]}, {}, ["fault.share", "'fixed'"]),
    ("stages in still air", {**NATURAL, "stage": [{"r_th_k_per_w": 0.1, "up_above_c": 50.0}, {"r_th_k_per_w": 0.05, "down_below_c": 40.0}]}, {}, ["cooling.kind", "still air"]),
    ("chip losses of a reckoned sink", {**FAN, "sink_sees": "chip-losses"}, {}, ["sink_sees", "'heat-leaving'"]),
    ("positions under a six-pack", {**PLATE, "positions": 3, "legs_along_flow": ["a", "b", "c"]}, {}, ["cooling.positions", "Heron 300"]),
    ("positions without an order", {**PLATE, "positions": 3}, {"module": LEG}, ["legs_along_flow", "nothing beside several positions"]),
    ("two positions", {**PLATE, "positions": 2, "legs_along_flow": ["a", "b", "c"]}, {"module": LEG}, ["cooling.positions", "one for each leg"]),
    ("row that changes", {**{k: v for k, v in PLATE.items() if k != "flow_l_per_min"}, "pump": PUMP, "positions": 3, "legs_along_flow": ["a", "b", "c"], "stage": STAGES}, {"module": LEG},
     ["cooling.positions", "a cooling that changes"]),
    ("table without a flow", {k: v for k, v in TABLE.items() if k != "at_l_per_min"}, {}, ["at_l_per_min", "no flow at which the sink works"]),
    ("flow outside the table", {**{k: v for k, v in TABLE.items() if k != "at_l_per_min"}}, {"flow_m3_per_s": (1.0 / 60000, 5.0 / 60000)}, ["duty.columns.flow", "1 l/min in the duty", "2 to 10 l/min"]),
    ("shares of the heat in a study", {**PLATE, "positions": 3, "legs_along_flow": ["a", "b", "c"], "heat_shares": [0.5, 0.3, 0.2]}, {"module": LEG}, ["heat_shares", "comes from its losses"]),
    ("stages that cool worse and worse", {**FAN, "stage": [{**STAGES[0], "speed_ratio": 1.0}, {**STAGES[1], "speed_ratio": 0.5}, {**STAGES[2], "speed_ratio": 0.3}]}, {},
     ["cooling.stage[2]", "cool better from one to the next"]),
    ("fault after the end", {**FAN, "fault": [{"at_s": 500.0}], "stopped": {"r_th_k_per_w": 1.0}}, {}, ["cooling.fault[1].at_s", "before the mission's end at 100 s"]),
    ("stopped beside a part of the flow", {**FAN, "fault": [{"at_s": 5.0, "share": 0.5}], "stopped": {"r_th_k_per_w": 1.0}}, {}, ["cooling.stopped", "nothing leads to"]),
    ("part of hardly any speed", {**FAN, "fault": [{"at_s": 5.0, "share": 0.01}]}, {}, ["cooling.fault.share", "twentieth"]),
    ("part of the flow below the table", {**TABLE, "fault": [{"at_s": 5.0, "share": 0.1}]}, {}, ["cooling.fault.share", "from 2 l/min on"]),
    ("part of a resistance", {"kind": "flow-table", **{k: TABLE[k] for k in ("flow_l_per_min", "r_th_k_per_w")}, "heat_capacity_j_per_k": 900.0, "fault": [{"at_s": 5.0, "share": 0.5}],
                              "stage": [{"r_th_k_per_w": 0.1, "up_above_c": 50.0}, {"r_th_k_per_w": 0.05, "down_below_c": 40.0}]}, {}, ["cooling.fault.share", "given as resistances"]),
    ("grease beyond all measure", {"kind": "fixed", "r_th_k_per_w": 0.1, "grease": {"growth": 50.0, "per_h": 0.01}}, {}, ["cooling.grease", "at most 5"]),
    ("grease of a module to the sink", {"kind": "fixed", "r_th_k_per_w": 0.1, "grease": {"growth": 0.1, "per_h": 100.0}}, {"module": HERON.model_copy(update={"case_to_sink": None})},
     ["cooling.grease", "no case_to_sink"]),
]


@pytest.mark.parametrize(("data", "how", "fragments"), [c[1:] for c in REFUSED], ids=[c[0] for c in REFUSED])
def test_parts_that_do_not_go_together_are_refused(data, how, fragments):
    how = dict(how)
    with pytest.raises(InputError) as caught:
        plan(data, how.pop("module", HERON), duration_s=100.0, **how).state(0)
    missing = [f for f in fragments if f not in str(caught.value)]
    assert not missing, f"{missing} not in: {caught.value}"
