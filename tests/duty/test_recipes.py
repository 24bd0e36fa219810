"""Recipes: energies and torques by hand and by integration, the doors of study files and of Python, and what is refused."""

import pickle

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad

import mission
from mission.duty import RECIPES, LoadShare, recipe, s_curve
from mission.duty.making import GRAVITY_M_PER_S2, check_spectrum, loads_in_turn
from mission.errors import InputError, RangeError
from mission.study.spec import StudySpec
from mission.tomlfile import parse_model

from ..study.good_study import study, toml_text, write

G = 9.80665
HOIST = {"load_kg": 4000.0, "hook_kg": 200.0, "drum_radius_m": 0.25, "falls": 2, "gear_ratio": 30.0, "efficiency": 0.86, "inertia_kg_m2": 0.6, "speed_m_per_s": 0.5,
         "acceleration_m_per_s2": 0.3, "jerk_m_per_s3": 0.6, "lift_height_m": 12.0, "pause_top_s": 20.0, "cycles_per_hour": 20.0}
LIFT = {"rated_load_kg": 800.0, "car_kg": 1100.0, "height_m": 30.0, "trips_per_day": 400, "travel_share": 0.4, "sheave_radius_m": 0.24, "roping": 2, "efficiency": 0.9,
        "inertia_kg_m2": 0.8, "speed_m_per_s": 1.6, "acceleration_m_per_s2": 0.9, "jerk_m_per_s3": 1.2, "service_hours": 16.0, "spectrum": [{"share": 1.0, "load": 0.25}]}
VEHICLE = {"mass_kg": 12000.0, "rotating_mass_factor": 1.08, "drag_area_m2": 5.0, "rolling_coefficient": 0.008, "wheel_radius_m": 0.48, "gear_ratio": 12.0, "efficiency": 0.93,
           "electric_braking_share": 0.7, "time_s": [0.0, 12.0, 40.0, 52.0, 70.0], "speed_m_per_s": [0.0, 12.0, 12.0, 0.0, 0.0]}
PUMP = {"rated_speed_rpm": 1480.0, "rated_torque_nm": 250.0, "inertia_kg_m2": 1.2, "static_head_share": 0.4, "shutoff_head_share": 1.3, "shutoff_torque_share": 0.5, "ramp_s": 20.0,
        "demand": [{"at_h": 0.0, "flow": 0.0}, {"at_h": 5.0, "flow": 0.6}, {"at_h": 8.0, "flow": 1.0}, {"at_h": 20.0, "flow": 0.6}]}
FAN = {"rated_speed_rpm": 980.0, "rated_torque_nm": 60.0, "inertia_kg_m2": 4.0, "ramp_s": 30.0, "demand": [{"at_h": 0.0, "flow": 0.3}, {"at_h": 7.0, "flow": 0.9}]}
CONVEYOR = {"torque_nm": 300.0, "speed_rpm": 750.0, "start_load_share": 1.4, "inertia_kg_m2": 5.0, "start_s": 8.0, "stop_s": 5.0, "hours": 10.0,
            "runs": [{"at_h": 1.0, "lasts_h": 3.0}, {"at_h": 5.0, "lasts_h": 4.0}],
            "jams": [{"at_h": 2.0, "lasts_s": 15.0, "torque_nm": 700.0}, {"at_h": 6.5, "lasts_s": 30.0, "torque_nm": 500.0, "speed_share": 0.2, "slows_s": 2.0}]}
DUTY_TYPE = {"type": "S3", "torque_nm": 80.0, "speed_rpm": 1500.0, "duty_factor": 0.4}
ALL = {"hoist": HOIST, "lift": LIFT, "vehicle": VEHICLE, "pump": PUMP, "fan": FAN, "conveyor": CONVEYOR, "duty-type": DUTY_TYPE}


def rows(kind, values, **changes):
    return recipe(kind, **{**values, **changes}).profile().to_frame()


def energy_j(frame, *phases):
    chosen = frame[frame.phase.isin(phases)] if phases else frame
    return float((chosen.torque_nm * chosen.speed_rad_s * chosen.dt_s).sum())


# --------------------------------------------------------------- every recipe
def test_the_list_is_complete():
    assert ALL.keys() == RECIPES.keys()


@pytest.mark.parametrize("kind", ALL)
def test_a_study_file_and_python_make_the_same_duty(kind, tmp_path):
    table = study(duty={"recipe": kind, **ALL[kind]})
    table["cooling"]["coolant_c"] = 40.0
    write(tmp_path, {"study.toml": toml_text(table)})
    path = tmp_path / "study.toml"
    found, expected = mission.load_study(path).profile, recipe(kind, **ALL[kind]).profile()
    assert (found.phases, found.notes, found.source, found.name) == (expected.phases, expected.notes, f"recipe '{kind}'", kind)
    assert found.to_frame().equals(expected.to_frame())
    assert found.quantities == {"torque_nm", "speed_rad_s"}


@pytest.mark.parametrize("kind", ALL)
def test_blocks_cut_nothing_and_profiles_travel(kind):
    duty = recipe(kind, **ALL[kind]).profile()
    whole = duty.to_frame()
    for one in (duty, pickle.loads(pickle.dumps(duty))):
        blocks = list(one.blocks(7))
        assert max(b.dt_s.size for b in blocks) <= 7
        np.testing.assert_array_equal(np.concatenate([b.columns["torque_nm"] for b in blocks]), whole.torque_nm)
        np.testing.assert_array_equal(np.concatenate([b.time_s for b in blocks]), whole.time_s)


@pytest.mark.parametrize("kind", ALL)
def test_a_section_survives_its_own_dump(kind):
    spec = recipe(kind, **ALL[kind])
    assert parse_model(spec.model_dump(exclude_none=True), RECIPES[kind], "again") == spec


def test_scaled():
    winch = recipe("hoist", **HOIST)
    assert winch.scaled(load_kg=1.1, lift_height_m=0.5).load_kg == pytest.approx(4400.0)
    assert winch.scaled(falls=2.0).falls == 4 and winch.falls == 2
    trip = recipe("vehicle", **VEHICLE).scaled(speed_m_per_s=0.5)
    assert trip.speed_m_per_s == (0.0, 6.0, 6.0, 0.0, 0.0)
    for factors, match in [({"load": 2.0}, "load: found no such field.*did you mean 'load_kg'"), ({"falls": 1.3}, "field falls: found value 2.6; allowed: a whole number"),
                           ({"load_kg": -1.0}, "field load_kg: found value -4000.0; allowed: a number above 0"), ({"hold": 2.0}, "hold: found 'brake'; allowed: a number"),
                           ({"load_kg": float("nan")}, "load_kg: found a factor nan"), ({"cycles_per_hour": 9.0}, "cycles_per_hour: found 180 cycles of")]:
        with pytest.raises(InputError, match=match):
            winch.scaled(**factors)


# ----------------------------------------------------------------- spectrum
@given(st.lists(st.integers(1, 40), min_size=1, max_size=6), st.integers(1, 300))
@settings(max_examples=150, deadline=None)
def test_loads_never_are_a_whole_cycle_off_their_share(weights, count):
    spectrum = tuple(LoadShare(share=w / sum(weights), load=1.0) for w in weights)
    turns = loads_in_turn(spectrum, count)
    for k, s in enumerate(spectrum):
        assert (np.abs(np.cumsum(turns == k) - s.share * np.arange(1, count + 1)) < 1.0 + 1e-6).all()
    if count % sum(weights) == 0:
        assert np.bincount(turns, minlength=len(weights)).tolist() == [w * count // sum(weights) for w in weights]


def test_spectrum_must_add_up():
    with pytest.raises(RangeError, match="spectrum: found shares that add up to 0.9; allowed: shares that add up to 1"):
        check_spectrum((LoadShare(share=0.9, load=1.0),))


# -------------------------------------------------------------------- hoist
def test_energy_of_a_lift_by_hand():
    """Analytic: without inertia and with gentle ramps lifting takes m g h / efficiency plus nothing, as the load ends at rest.

    While the ramp down gives back, the gear still drives (the force stays upwards), so the kinetic energy passes it in the same direction twice and cancels.
    """
    frame = rows("hoist", HOIST, inertia_kg_m2=0.0, step_s=0.01)
    work = 4200.0 * G * 12.0
    assert energy_j(frame, "lift start", "lift", "lift stop") / 20 == pytest.approx(work / 0.86, rel=1e-5)
    assert energy_j(frame, "lower start", "lower", "lower stop") / 20 == pytest.approx(-work * 0.86, rel=1e-5)
    assert energy_j(frame, "held", "rest") == 0.0


def test_inertia_at_the_shaft_costs_nothing_over_a_move():
    """Analytic: it is accelerated and braked in front of the gear, without loss."""
    with_it, without = (energy_j(rows("hoist", HOIST, inertia_kg_m2=j, step_s=0.01)) for j in (2.0, 0.0))
    assert with_it == pytest.approx(without, rel=1e-6)
    frame = rows("hoist", HOIST, inertia_kg_m2=2.0, step_s=0.01)
    way = 0.25 / (2 * 30)
    steady, top = 4200 * G * way / 0.86, 4200 * (G + 0.3) * way / 0.86 + 2.0 * 0.3 / way
    assert frame[frame.phase == "lift"].torque_nm.tolist() == pytest.approx([steady] * 20)
    assert frame.torque_nm.max() == pytest.approx(top, rel=1e-12)  # the held acceleration is kept exactly
    assert frame[frame.phase == "lower"].torque_nm.iloc[0] == pytest.approx(4200 * G * way * 0.86)
    assert frame[frame.phase == "lower"].speed_rad_s.iloc[0] == pytest.approx(-0.5 / way)


def test_work_of_the_start_against_integration():
    """Independent: power integrated over the exact move by quadrature; the rows' errors in the two pieces of changing acceleration cancel."""
    move, way = s_curve(12.0, 0.5, 0.3, 0.6), 0.25 / 60
    rise = 0.5 / 0.3 + 0.3 / 0.6

    def power(t):
        _, v, a = (float(x) for x in move.at(t))
        return 4200.0 * (G + a) * v / 0.86 + 0.6 * a / way * v / way

    exact = sum(quad(power, a, b)[0] for a, b in ((0.0, 0.5), (0.5, rise - 0.5), (rise - 0.5, rise)))
    for step in (1.0, 0.25, 0.03):
        assert energy_j(rows("hoist", HOIST, step_s=step), "lift start") / 20 == pytest.approx(exact, rel=1e-8)


def test_holding_and_what_comes_down():
    brake, electric = rows("hoist", HOIST), rows("hoist", HOIST, hold="electric")
    assert (brake[brake.phase == "held"].torque_nm == 0.0).all()
    held = electric[electric.phase == "held"]
    assert held.torque_nm.tolist() == pytest.approx([4200 * G * 0.25 / 60] * 20) and (held.speed_rad_s == 0.0).all() and held.dt_s.tolist() == pytest.approx([20.0] * 20)
    hook = rows("hoist", HOIST, lowers="hook")
    assert hook[hook.phase == "lower"].torque_nm.iloc[0] == pytest.approx(200 * G * 0.25 / 60 * 0.86)


def test_cycles_and_spectrum():
    duty = recipe("hoist", **HOIST, hours=2.0, spectrum=[{"share": 0.25, "load": 1.0}, {"share": 0.75, "load": 0.5}]).profile()
    frame = duty.to_frame()
    lifts = frame[frame.phase == "lift"]
    assert duty.duration_s == 7200.0 and len(lifts) == 40
    masses = lifts.torque_nm * 0.86 / (G * 0.25 / 60) - 200.0
    assert sorted(masses.round(6)) == [2000.0] * 30 + [4000.0] * 10
    assert lifts.time_s.iloc[1] - lifts.time_s.iloc[0] == pytest.approx(180.0)
    assert (frame[frame.phase == "lift"].speed_rad_s * frame[frame.phase == "lift"].torque_nm > 0).all()  # driving
    assert (frame[frame.phase == "lower"].speed_rad_s * frame[frame.phase == "lower"].torque_nm < 0).all()  # generating


# --------------------------------------------------------------------- lift
def test_a_balanced_trip_needs_only_friction_free_acceleration():
    """Analytic: with the load that the counterweight balances the steady torque is zero, and the peak is that of the masses and the rotor."""
    frame = rows("lift", LIFT, spectrum=[{"share": 1.0, "load": 0.5}], step_s=0.02)
    way = 0.24 / 2
    assert frame[frame.phase.isin(["up", "down"])].torque_nm.abs().max() == 0.0
    mass = 400 + 1100 + 1100 + 400
    assert frame.torque_nm.max() == pytest.approx(mass * 0.9 * way / 0.9 + 0.8 * 0.9 / way, rel=1e-12)
    assert frame[frame.phase == "up stop"].torque_nm.min() == pytest.approx(-(mass * 0.9 * way * 0.9 + 0.8 * 0.9 / way), rel=1e-12)


def test_signs_and_day_of_a_lift():
    """By hand: an almost empty car is lighter than its counterweight, so it drives downwards and generates upwards."""
    lift = recipe("lift", **LIFT)
    duty, frame = lift.profile(), lift.profile().to_frame()
    way, force = 0.12, (0.25 - 0.5) * 800 * G
    up, down = frame[frame.phase == "up"], frame[frame.phase == "down"]
    assert len(up) == len(down) == 200 and duty.duration_s == 86400.0 and lift.way_m == pytest.approx(12.0)
    assert up.torque_nm.iloc[0] == pytest.approx(force * way * 0.9) and up.speed_rad_s.iloc[0] == pytest.approx(1.6 / way)
    assert down.torque_nm.iloc[0] == pytest.approx(force * way / 0.9) and down.speed_rad_s.iloc[0] == pytest.approx(-1.6 / way)
    assert (frame.speed_rad_s * frame.dt_s).sum() * way == pytest.approx(0.0, abs=1e-6)
    assert (frame[frame.speed_rad_s > 0].eval("speed_rad_s * dt_s")).sum() * way == pytest.approx(200 * 12.0)
    starts = frame[(frame.phase == "up start") & (frame.phase.shift() != "up start")].time_s
    assert starts.iloc[1] - starts.iloc[0] == pytest.approx(2 * 16 * 3600 / 400)
    last_way = frame[frame.phase != "landing"]
    assert last_way.time_s.max() < 16 * 3600


def test_a_lift_by_its_usage_category():
    values = {k: v for k, v in LIFT.items() if k not in ("trips_per_day", "travel_share")}
    lift = recipe("lift", **values, usage_category=4)
    assert lift.trips == 750 and lift.way_m == pytest.approx(0.44 * 30)
    two_days = {**values, "service_hours": 24.0, "usage_category": 2}
    with pytest.raises(InputError, match="field days: found 125 trips in 1 days; allowed: an even number.*days = 2"):
        recipe("lift", **two_days)
    assert recipe("lift", **two_days, days=2).profile().duration_s == 172800.0


# ------------------------------------------------------------------ vehicle
def test_vehicle_energy_by_hand():
    """Analytic: a trapezoid of the speed on the level, every force integrated on paper (drag: the integral of v^3)."""
    frame = rows("vehicle", VEHICLE, step_s=0.05)
    m, v, a = 12000.0, 12.0, 1.0
    rolling = m * G * 0.008
    rise = (m * 1.08 * a + rolling) * 72.0 + 0.5 * 1.2 * 5.0 * v**4 / (4 * a)  # 72 m
    cruise = (rolling + 0.5 * 1.2 * 5.0 * v**2) * v * 28.0
    fall = (rolling - m * 1.08 * a) * 72.0 + 0.5 * 1.2 * 5.0 * v**4 / (4 * a)
    assert energy_j(frame, "drive") == pytest.approx((rise + cruise) / 0.93, rel=1e-5)
    assert energy_j(frame, "brake") == pytest.approx(fall * 0.93 * 0.7, rel=1e-5)
    assert energy_j(frame, "stand") == 0.0 and (frame[frame.phase == "stand"].speed_rad_s == 0.0).all()
    assert (frame.speed_rad_s * frame.dt_s).sum() * 0.48 / 12 == pytest.approx(2 * 72.0 + 28 * 12.0, rel=1e-12)


def test_grades_and_routes():
    """By hand: climbing adds m g times the height; a route of one grade is that grade; the height of a row over an edge is shared."""
    flat, hill = (energy_j(rows("vehicle", VEHICLE, electric_braking_share=0.0, grade=g)) for g in (0.0, 0.05))
    lone = {**VEHICLE, "rolling_coefficient": 0.0, "drag_area_m2": 0.0, "electric_braking_share": 1.0, "time_s": [0.0, 50.0], "speed_m_per_s": [10.0, 10.0]}
    sine = 0.05 / np.hypot(1, 0.05)
    assert energy_j(rows("vehicle", lone, grade=0.05)) == pytest.approx(12000 * G * 500 * sine / 0.93)
    assert energy_j(rows("vehicle", lone, grade=-0.05)) == pytest.approx(-12000 * G * 500 * sine * 0.93)
    assert hill > flat
    same = rows("vehicle", VEHICLE, route=[{"to_m": 200.0, "grade": 0.05}, {"to_m": 480.0, "grade": 0.05}])
    np.testing.assert_allclose(same.torque_nm, rows("vehicle", VEHICLE, grade=0.05).torque_nm, rtol=1e-12)
    mixed = rows("vehicle", lone, route=[{"to_m": 245.0, "grade": 0.05}, {"to_m": 600.0, "grade": 0.0}])
    assert energy_j(mixed) == pytest.approx(12000 * G * 245 * sine / 0.93)
    assert (mixed.torque_nm[24] / mixed.torque_nm[0], mixed.torque_nm[25]) == pytest.approx((0.5, 0.0))
    with pytest.raises(InputError, match="field duty.route: found a route of 400 m for a trace of 480 m"):
        rows("vehicle", VEHICLE, route=[{"to_m": 400.0, "grade": 0.05}])


def test_trace_from_a_file_with_units(tmp_path):
    (tmp_path / "town.csv").write_text("t;v\n0;0\n0,2;43,2\n0,5;0\n", encoding="utf-8")
    values = {k: v for k, v in VEHICLE.items() if k not in ("time_s", "speed_m_per_s")}
    table = {**values, "file": "town.csv", "delimiter": ";", "decimal": ",", "repeats": 3,
             "columns": {"time": {"column": "t", "unit": "min"}, "road_speed": {"column": "v", "unit": "km/h"}}}
    duty = recipe("vehicle", **table).profile(tmp_path)
    frame = duty.to_frame()
    once = rows("vehicle", values, time_s=[0.0, 12.0, 30.0], speed_m_per_s=[0.0, 12.0, 0.0])
    assert duty.duration_s == 90.0 and len(frame) == 3 * len(once) and "from town.csv, driven 3 times" in duty.notes[1]
    np.testing.assert_allclose(frame.torque_nm[-len(once):], once.torque_nm, rtol=1e-12)
    for line, words in [("0,3;43,x", "line 4, column 'v': found value '43,x'"), ("0,1;1", "line 4, column 't'.*times that rise"), ("0,5;-3", "line 4, column 'v': found value -3 km/h; allowed: 0 to 540 km/h"),
                        ("9;0", "a step of 528 s after 0.2 min")]:
        (tmp_path / "town.csv").write_text(f"t;v\n0;0\n0,2;43,2\n{line}\n", encoding="utf-8")
        with pytest.raises(InputError, match=words):
            recipe("vehicle", **table).profile(tmp_path)
    (tmp_path / "town.csv").write_text("t;speed\n0;0\n0,2;43,2\n", encoding="utf-8")
    with pytest.raises(InputError, match="field duty.columns.road_speed.column: found no column 'v'"):
        recipe("vehicle", **table).profile(tmp_path)
    (tmp_path / "town.csv").write_text("t;v\n0;0\n", encoding="utf-8")
    with pytest.raises(InputError, match="town.csv: found a single row; allowed: at least two rows"):
        recipe("vehicle", **table).profile(tmp_path)
    (tmp_path / "town.csv").write_text("t;v\n0;0\n0,2;43,2\n", encoding="utf-8")
    with pytest.raises(InputError, match="field duty.repeats: found 3 repeats of a trace that begins at 0 and ends at 12 m/s"):
        recipe("vehicle", **table).profile(tmp_path)


@pytest.mark.parametrize("cycle, kmh, metres", [("class1", 64.4, 8097.56), ("class2", 123.1, 22649.14), ("class3a", 131.3, 23193.58), ("class3b", 131.3, 23266.28), ("nedc", 120.0, 11013.2)])
def test_published_cycles(cycle, kmh, metres):
    """Published: WLTC and NEDC, lengths as summed from the series of the package wltp 0.1.2a0 (European Commission, JRC).

    The package is no part of the tests' own needs, as it asks for old ones: install it without them (``pip install --no-deps wltp==0.1.2a0``) to run this.
    """
    cycles = pytest.importorskip("wltp.cycles", reason="pip install --no-deps wltp==0.1.2a0")
    data = {"class3a": "class3.class_data_a", "class3b": "class3.class_data_b", "nedc": "nedc.cycle_data"}.get(cycle, f"{cycle}.class_data")
    module, function = data.split(".")
    trace = getattr(__import__(f"{cycles.__name__}.{module}", fromlist=[function]), function)()["cycle"]
    v = [x / 3.6 for x in trace]
    frame = rows("vehicle", VEHICLE, time_s=[float(k) for k in range(len(v))], speed_m_per_s=v, mass_kg=1500.0, drag_area_m2=0.65, electric_braking_share=1.0)
    way = frame.speed_rad_s * frame.dt_s * 0.48 / 12
    assert max(trace) == pytest.approx(kmh, abs=0.05)
    assert way.sum() == pytest.approx(metres, abs=1.0)
    # independent: work at the wheels from the resistances of every second; kinetic energy ends where it began
    mean = np.add(v[1:], v[:-1]) / 2
    drag = 0.5 * 1.2 * 0.65 * (mean**3).sum()
    assert np.where(frame.torque_nm > 0, 0.93, 1 / 0.93) @ (frame.torque_nm * frame.speed_rad_s * frame.dt_s) == pytest.approx(drag + 1500 * G * 0.008 * way.sum(), rel=1e-9)


# ------------------------------------------------------------ pump and fan
def test_affinity_laws_by_hand():
    """Analytic: n^2 = (s + (c - s) q^2) / c with s = 0.4, c = 1.3; t = n^2 (0.5 + 0.5 q / n)."""
    pump = recipe("pump", **PUMP)
    n = ((0.4 + 0.9 * 0.36) / 1.3) ** 0.5
    assert float(pump.speed_share(0.6)) == pytest.approx(n) and float(pump.torque_share(n)) == pytest.approx(n * n * 0.5 + 0.5 * n * 0.6)
    frame = pump.profile().to_frame()
    held = frame[frame.phase == "flow 60 %"]
    assert held.torque_nm.tolist() == pytest.approx([250 * (n * n * 0.5 + 0.3 * n)] * 2) and held.speed_rad_s.iloc[0] == pytest.approx(n * 1480 * np.pi / 30)
    full = frame[frame.phase == "flow 100 %"]
    assert full.torque_nm.iloc[0] == pytest.approx(250.0) and full.speed_rad_s.iloc[0] == pytest.approx(1480 * np.pi / 30)
    off = frame[frame.phase == "off"]
    assert off.torque_nm.iloc[0] == 0.0 and off.time_s.iloc[0] == pytest.approx(20 * n) and frame.dt_s.sum() == pytest.approx(86400.0)


@given(st.floats(0.0, 0.95), st.floats(1.01, 3.0), st.floats(0.05, 1.0), st.floats(0.05, 1.5))
@settings(max_examples=200, deadline=None)
def test_the_pump_meets_the_system(static, shutoff, torque, flow):
    """Independent of the solved formula: at the speed found, the curve of the pump and that of the system give the same head."""
    pump = recipe("pump", **{**PUMP, "static_head_share": static, "shutoff_head_share": shutoff, "shutoff_torque_share": torque})
    n = float(pump.speed_share(flow))
    assert shutoff * n * n - (shutoff - 1) * flow**2 == pytest.approx(static + (1 - static) * flow**2, rel=1e-9)
    assert float(pump.flow_share(n)) == pytest.approx(flow, rel=1e-6)
    assert float(pump.torque_share(2 * n)) > 3.99 * float(pump.torque_share(n)) - 1e-12 if static else float(pump.torque_share(2 * n)) == pytest.approx(4 * float(pump.torque_share(n)))
    assert float(pump.flow_share(0.999 * np.sqrt(static / shutoff))) == 0.0


def test_run_up_of_a_fan():
    """Analytic: constant acceleration, so the torque is T n^2 + J w / ramp; kinetic energy and the integral of n^3 make the work."""
    frame = rows("fan", FAN, step_s=0.1)
    w, up = 980 * np.pi / 30, frame[frame.phase == "run up"]
    assert up.dt_s.sum() == pytest.approx(0.6 * 30)
    work = 4.0 * w**2 * (0.9**2 - 0.3**2) / 2 + 60 * w * 30 * (0.9**4 - 0.3**4) / 4
    assert energy_j(up) == pytest.approx(work, rel=1e-5)
    assert frame[frame.phase == "flow 90 %"].torque_nm.iloc[0] == pytest.approx(60 * 0.81)
    assert frame[frame.phase == "run down"].torque_nm.min() < 0.0  # braked by the drive, as the ramp is faster than the fan runs down by itself


# ---------------------------------------------------------------- conveyor
def test_conveyor_course_by_hand():
    duty = recipe("conveyor", **CONVEYOR).profile()
    frame, w = duty.to_frame(), 750 * np.pi / 30
    time = dict(zip(duty.phases, duty.time_by_phase_s))
    assert time == pytest.approx({"rest": 3 * 3600, "start": 16, "run": 7 * 3600 - 16 - 10 - (1 + 15 + 8) - (2 + 30 + 0.8 * 8), "jam": 16 + 32, "restart": 8 + 6.4, "stop": 10})
    start = frame[frame.phase == "start"]
    assert start.torque_nm.to_numpy() == pytest.approx(np.full(len(start), 1.4 * 300 + 5 * w / 8))
    assert energy_j(start) / 2 == pytest.approx((1.4 * 300 + 5 * w / 8) * w * 8 / 2)
    jams = frame[frame.phase == "jam"]
    assert sorted(set(jams.torque_nm)) == [500.0, 700.0] and jams.time_s.iloc[0] == pytest.approx(7200.0)
    assert jams[(jams.torque_nm == 700.0) & (jams.dt_s > 1)].speed_rad_s.tolist() == [0.0]
    assert jams[(jams.torque_nm == 500.0) & (jams.dt_s > 2)].speed_rad_s.tolist() == pytest.approx([0.2 * w])
    assert frame[frame.phase == "stop"].torque_nm.iloc[0] == pytest.approx(300 - 5 * w / 5)


# ----------------------------------------------------------------- refusals
REFUSED = [
    ("hoist", {"acceleration_m_per_s2": 9.9}, "acceleration_m_per_s2: found 9.9 m/s2; allowed: below 9.80665 m/s2.*slack"),
    ("hoist", {"cycles_per_hour": 60.0}, r"cycles_per_hour: found 60 cycles of 72.3\d* s; allowed: at most 49.7\d* cycles an hour"),
    ("hoist", {"hours": 0.33}, "hours: found 6.6 cycles; allowed: a whole number of cycles"),
    ("hoist", {"hours": 0.01}, "hours: found 0.2 cycles"),
    ("hoist", {"spectrum": [{"share": 0.5, "load": 1.0}]}, "spectrum: found shares that add up to 0.5"),
    ("hoist", {"spectrum": []}, "spectrum"),
    ("hoist", {"spectrum": [{"share": 1.0, "load": 7.0}]}, r"spectrum\[1\].load: found value 7.0; allowed: a number at most 1.5"),
    ("hoist", {"hold": "magnet"}, "hold: found value 'magnet'; allowed: one of brake, electric"),
    ("hoist", {"efficiency": "0.9"}, "efficiency: found value '0.9'; allowed: a number"),
    ("hoist", {"falls": 2.5}, "falls: found value 2.5; allowed: a whole number"),
    ("lift", {"usage_category": 3}, "trips_per_day: found trips_per_day beside usage_category"),
    ("lift", {"travel_share": None}, "travel_share: found nothing; allowed: usage_category, or"),
    ("lift", {"trips_per_day": 401}, "days: found 401 trips in 1 days; allowed: an even number of trips.*days = 2"),
    ("lift", {"trips_per_day": 401, "days": 2}, "service_hours: found 16 h with half a pair"),
    ("lift", {"trips_per_day": 9000}, "service_hours: found 9000 trips of"),
    ("vehicle", {"time_s": None}, "file: found no speed trace"),
    ("vehicle", {"file": "a.csv"}, "columns: found nothing; allowed: file and columns together"),
    ("vehicle", {"file": "a.csv", "columns": {"time": {"column": "t", "unit": "s"}, "road_speed": {"column": "v", "unit": "m/s"}}}, "file: found a file beside time_s"),
    ("vehicle", {"time_s": [0.0, 1.0]}, "time_s: found 2 values beside 5 in speed_m_per_s"),
    ("vehicle", {"time_s": [0.0, 12.0, 12.0, 52.0, 70.0]}, "time_s: found 12 s at point 3 after 12 s"),
    ("vehicle", {"time_s": [0.0, 12.0, 40.0, 52.0, 700.0]}, "time_s: found 700 s at point 5 after 52 s; allowed: times that rise, by at most 60 s"),
    ("vehicle", {"speed_m_per_s": [0.0, -12.0, 12.0, 0.0, 0.0]}, r"speed_m_per_s\[2\]: found value -12.0; allowed: a number at least 0"),
    ("vehicle", {"speed_m_per_s": [0.0, 200.0, 12.0, 0.0, 0.0]}, "speed_m_per_s: found 200 m/s at point 2; allowed: at most 150 m/s"),
    ("vehicle", {"grade": 0.01, "route": [{"to_m": 900.0, "grade": 0.0}]}, "route: found a route beside a constant grade"),
    ("vehicle", {"route": [{"to_m": 900.0, "grade": 0.0}, {"to_m": 800.0, "grade": 0.0}]}, "route: found to_m = 800 m at stretch 2 after 900 m"),
    ("vehicle", {"route": []}, "route: found an empty list"),
    ("vehicle", {"delimiter": "x"}, "delimiter: found 'x'"),
    ("pump", {"demand": [{"at_h": 1.0, "flow": 1.0}]}, "demand: found at_h = 1 at point 1; allowed: 0"),
    ("pump", {"demand": [{"at_h": 0.0, "flow": 1.0}, {"at_h": 0.0, "flow": 0.5}]}, "demand: found at_h = 0 at point 2 after 0"),
    ("pump", {"demand": [{"at_h": 0.0, "flow": 0.0}, {"at_h": 0.001, "flow": 1.0}]}, "ramp_s: found a change of speed of 20 s at point 1 of the demand; allowed: at most 3.6 s"),
    ("pump", {"shutoff_head_share": 1.0}, "shutoff_head_share: found value 1.0; allowed: a number above 1"),
    ("fan", {"static_head_share": 0.3}, "static_head_share"),
    ("conveyor", {"runs": [{"at_h": 1.0, "lasts_h": 3.0}, {"at_h": 3.0, "lasts_h": 1.0}]}, "runs: found at_h = 3 at run 2, before the run before it ends at 4 h"),
    ("conveyor", {"hours": 8.0}, "runs: found run 2 ends at 9 h; allowed: at most hours = 8 h"),
    ("conveyor", {"start_s": 4 * 3600.0}, "runs: found run 1 of 10800 s; allowed: at least 14405 s"),
    ("conveyor", {"jams": [{"at_h": 4.5, "lasts_s": 5.0, "torque_nm": 9.0}]}, "jams: found jam 1, from 4.5 h .* allowed: within the full speed of one run"),
    ("conveyor", {"jams": [{"at_h": 2.0, "lasts_s": 50.0, "torque_nm": 9.0}, {"at_h": 2.01, "lasts_s": 5.0, "torque_nm": 9.0}]}, "jams: found at_h = 2.01 at jam 2, before full speed"),
]


@pytest.mark.parametrize("kind, changes, match", REFUSED, ids=[f"{k}-{next(iter(c))}-{n}" for n, (k, c, _) in enumerate(REFUSED)])
def test_refused_in_words(kind, changes, match):
    values = {k: v for k, v in {**ALL[kind], **changes}.items() if v is not None}
    if "time_s" in changes and changes["time_s"] is None:
        values.pop("speed_m_per_s")
    with pytest.raises(InputError, match=match) as found:
        recipe(kind, **values)
    assert str(found.value).startswith(f"recipe '{kind}', field ")


@pytest.mark.parametrize("duty, match", [
    ({"recipe": "hoits", **HOIST}, "study.toml, field duty.recipe: found value 'hoits'; allowed: one of hoist, lift, .*did you mean 'hoist'"),
    ({"recipe": 3}, "field duty.recipe: found value 3"),
    ({"recipe": "hoist", **HOIST, "drum_radius": 0.2}, "field duty.drum_radius: found the unknown key 'drum_radius'; allowed: one of acceleration_m_per_s2, .*did you mean 'drum_radius_m'"),
    ({"recipe": "fan", **FAN, "load_kg": 3.0}, "field duty.load_kg: found the key 'load_kg', which belongs to recipe = 'hoist'"),
    ({"recipe": "hoist"}, "field duty.(speed_m_per_s|load_kg): found nothing; allowed: this key is required"),
    ({"file": "duty.csv", "colums": {}}, "field duty.colums: found the unknown key 'colums'; allowed: one of columns, decimal, delimiter, encoding, file, last_row_lasts_s, longest_step_s, name, recipe.*'columns'"),
    ({"columns": {}}, "field duty.file: found nothing"),
    ("day.csv", "field duty"),
], ids=range(8))
def test_refused_in_a_study(duty, match):
    table = study()
    table["duty"] = duty
    with pytest.raises(InputError, match=match):
        parse_model(table, StudySpec, "study.toml")


def test_too_many_rows_are_refused(monkeypatch):
    monkeypatch.setattr("mission.duty.making.MOST_ROWS", 1000)
    with pytest.raises(InputError, match="field duty.step_s: found more than 1,000 rows; allowed: fewer"):
        recipe("hoist", **HOIST, step_s=0.01).profile()


def test_unknown_recipe_from_python():
    with pytest.raises(InputError, match="recipe: found 'pmup'; allowed: one of hoist, .*did you mean 'pump'"):
        recipe("pmup")


def test_gravity():
    assert GRAVITY_M_PER_S2 == G  # published: CGPM 1901, standard acceleration of free fall
