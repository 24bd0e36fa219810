"""Largest currents, and results side by side."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import mission
import mission.machine
from mission.errors import InputError, RangeError
from mission.history import HeldPoint
from mission.losses import Modulation
from mission.study import RatingBench, compare, rating_point


@pytest.fixture(scope="module")
def study():
    return mission.load_study("profiles/ferry-hour.toml")


@pytest.fixture(scope="module")
def bench(study):
    return RatingBench(study)


def constant(study, rating, seconds=600.0):
    """The rated load as a duty of its own."""
    p = rating.point
    frame = pd.DataFrame({"t": np.arange(0.0, seconds + 1.0, 50.0), "i": rating.current_a, "f": p.frequency_hz, "m": p.modulation_index(), "pf": p.power_factor})
    duty = mission.profile_from_frame(frame, {
        "time": {"column": "t", "unit": "s"}, "current": {"column": "i", "unit": "A rms"}, "frequency": {"column": "f", "unit": "Hz"},
        "mod_index": {"column": "m"}, "power_factor": {"column": "pf"}})
    spec = study.spec.model_copy(update={"machine": mission.machine.DirectPoints(kind="direct"),
                                         "cooling": study.spec.cooling.model_copy(update={"coolant_c": p.coolant_c})})
    return replace(study, spec=spec, profile=duty)


@pytest.mark.parametrize("f", [0.3, 4.0, 20.0])
def test_a_rated_current_run_as_a_mission_reaches_the_limit(study, bench, f):
    """*Independent route*: the whole chain on the constant load, closed on itself."""
    rating = bench.largest_current(replace(rating_point(study), frequency_hz=f))
    result = mission.run(constant(study, rating))
    assert result.history.peak_c.max() == pytest.approx(bench.limit_c, abs=0.3)
    more = mission.run(constant(study, replace(rating, current_a=1.03 * rating.current_a)))
    assert more.history.peak_c.max() > bench.limit_c + 0.5


def test_standstill_is_the_worst_and_more_switching_costs_current(study, bench):
    point = rating_point(study)
    over_f = [r.current_a for r in bench.over_output_frequency(point, [0.0, 0.1, 1.0, 5.0, 20.0])]
    assert over_f == sorted(over_f)
    over_fsw = [r.current_a for r in bench.over_switching_frequency(point, [1000.0, 4000.0, 16000.0])]
    assert over_fsw == sorted(over_fsw, reverse=True)
    cold = bench.largest_current(replace(point, coolant_c=-40.0, switching_frequency_hz=100.0))
    assert cold.limited_by == "peak current rating" and cold.current_a == pytest.approx(600.0 / np.sqrt(2.0))
    assert bench.largest_current(replace(point, coolant_c=145.0)).current_a == 0.0
    with pytest.raises(RangeError, match="power_factor"):
        bench.largest_current(replace(point, power_factor=1.5))


@pytest.mark.parametrize("modulation", list(Modulation))
def test_a_standstill_at_no_angle_is_worse_than_rated(study, modulation):
    """Clamps: which phase is held decides as much as the peak of the current (*analytic*: all angles tried one by one)."""
    bench = RatingBench(study.changed("inverter", modulation=modulation.value))
    point = replace(rating_point(study), frequency_hz=0.0)
    rated = bench.largest_current(point)
    load = {"i_peak_a": np.sqrt(2.0) * rated.current_a, "mod_index": point.mod_index_low, "phi_rad": np.arccos(point.power_factor), "frequency_hz": 0.0,
            "switching_frequency_hz": point.switching_frequency_hz, "dc_voltage_v": point.dc_voltage_v}
    hottest = [HeldPoint(bench.tables, bench.network, theta_rad=a, **load).settle(point.coolant_c).t_vj_c.max() for a in np.radians(np.arange(0.5, 360.0, 3.7))]
    assert max(hottest) <= bench.limit_c + 0.3 and max(hottest) > bench.limit_c - 3.0
    slow = bench.largest_current(replace(point, frequency_hz=0.05))
    assert rated.current_a <= slow.current_a * 1.01


def test_schedules_lower_the_switching_frequency_of_a_rating(study):
    data = study.spec.inverter.model_dump(exclude_none=True) | {"schedule": [{"over": "output-frequency", "at": [0.0, 5.0], "hz": [1000.0, 1000.0]}]}
    scheduled = RatingBench(study.changed("inverter", **data))
    slow = RatingBench(study.changed("inverter", switching_frequency_hz=1000.0))
    point = replace(rating_point(study), frequency_hz=1.0)
    assert scheduled.largest_current(point).current_a == pytest.approx(slow.largest_current(replace(point, switching_frequency_hz=1000.0)).current_a, rel=1e-3)
    late = RatingBench(study.changed("inverter", dead_time_us=10.0))
    with pytest.raises(RangeError, match="a tenth of the period"):
        late.largest_current(replace(point, switching_frequency_hz=30e3))


def test_sides_repeat_their_results(study):
    slow = study.changed("inverter", switching_frequency_hz=2500.0)
    results = [mission.run(s) for s in (study, slow)]
    found = compare(results, ["5 kHz", "2.5 kHz"])
    for side, r in zip(found.sides, results, strict=True):
        assert side.energy_kwh == pytest.approx(r.history.energy_j.sum() / 3.6e6)
        assert side.switch_energy_kwh + side.diode_energy_kwh == pytest.approx(side.energy_kwh)
        assert side.shortest_years == r.ledger.worst().life_years and side.peak_c == r.history.peak_c.max()
    assert found.sides[1].energy_kwh < found.sides[0].energy_kwh
    assert found.notes == ("inverter.switching_frequency_hz: 5000 with 5 kHz, 2500 with 2.5 kHz",)
    assert list(found.to_frame()["name"]) == ["5 kHz", "2.5 kHz"] and "5 kHz" in found._repr_html_()
    with pytest.raises(InputError, match="at least two"):
        compare(results[:1])
    with pytest.raises(InputError, match="names"):
        compare(results, ["one"])
    other = mission.run(study.changed("lifetime", missions_per_year=1.0))
    with pytest.raises(InputError, match="same duty"):
        compare([results[0], other])
