"""Standard duties: the courses of S1 to S10, classes of crane mechanisms, usage of lifts; published figures and figures worked out by hand."""

import numpy as np
import pytest

from mission.duty import LIFT_USAGE, LoadShare, lift_usage, lift_usage_of_trips, load_spectrum, mechanism_group, recipe, structure_class
from mission.duty.standard import CYCLE_S, DUTY_FACTORS, S2_TIMES_S
from mission.errors import InputError, RangeError

LOAD = {"torque_nm": 80.0, "speed_rpm": 1500.0}
SPEED = 1500 * np.pi / 30


def duty(type_, **values):
    return recipe("duty-type", type=type_, **values).profile()


def times(profile):
    return dict(zip(profile.phases, profile.time_by_phase_s))


# --------------------------------------------------- IEC 60034-1, S1 to S10
def test_cycle_and_preferred_values():
    """Published: IEC 60034-1 (from memory): 10 minutes; 15, 25, 40, 60 %; S2 of 10, 30, 60, 90 minutes."""
    assert CYCLE_S == 600.0 and DUTY_FACTORS == (0.15, 0.25, 0.4, 0.6) and [t / 60 for t in S2_TIMES_S] == [10, 30, 60, 90]


def test_s1_and_s2():
    assert times(duty("S1", **LOAD, load_s=3600.0)) == {"load": 3600.0}
    short = duty("S2", **LOAD, load_s=1800.0, rest_s=7200.0)
    assert times(short) == {"load": 1800.0, "rest": 7200.0} and short.ranges["torque_nm"] == (0.0, 80.0)


@pytest.mark.parametrize("factor, on, off", [(0.15, 90, 510), (0.25, 150, 450), (0.4, 240, 360), (0.6, 360, 240)])
def test_s3_and_s6(factor, on, off):
    """Analytic, with S3-40 % = 240 s + 360 s and S6-25 % = 150 s + 450 s among them."""
    s3, s6 = duty("S3", **LOAD, duty_factor=factor), duty("S6", **LOAD, duty_factor=factor, no_load_torque_nm=6.0)
    assert times(s3) == pytest.approx({"load": on, "rest": off}) and times(s6) == pytest.approx({"load": on, "no load": off})
    assert s3.to_frame().speed_rad_s.tolist() == pytest.approx([SPEED, 0.0])  # at rest it stands ...
    assert s6.to_frame().speed_rad_s.tolist() == pytest.approx([SPEED, SPEED])  # ... without load it turns
    assert s6.to_frame().torque_nm.tolist() == [80.0, 6.0]


def test_s4_start_counts_as_load():
    frame = duty("S4", **LOAD, duty_factor=0.25, inertia_kg_m2=1.5, start_s=4.0).to_frame()
    assert frame.groupby("phase").dt_s.sum().to_dict() == pytest.approx({"start": 4.0, "load": 146.0, "rest": 450.0})
    start = frame[frame.phase == "start"]
    assert start.torque_nm.to_numpy() == pytest.approx(np.full(40, 80 + 1.5 * SPEED / 4))
    # analytic: load work over half the final angle, and kinetic energy
    assert (start.torque_nm * start.speed_rad_s * start.dt_s).sum() == pytest.approx(80 * SPEED * 4 / 2 + 1.5 * SPEED**2 / 2)


def test_s5_brakes_electrically_and_is_not_s6():
    """The wrong text that goes round gives S5 the words of S6: it has starts, electric braking, and rest at standstill."""
    profile = duty("S5", **LOAD, duty_factor=0.4, inertia_kg_m2=1.5, start_s=4.0, brake_s=2.0, cycles=3)
    frame = profile.to_frame()
    assert times(profile) == pytest.approx({"start": 12.0, "load": 3 * 234.0, "braking": 6.0, "rest": 3 * 360.0})
    braking = frame[frame.phase == "braking"]
    assert braking.torque_nm.to_numpy() == pytest.approx(np.full(60, 80 - 1.5 * SPEED / 2))
    assert (braking.torque_nm * braking.speed_rad_s < 0.0).all() and (frame[frame.phase == "rest"].speed_rad_s == 0.0).all()


def test_s7_never_rests():
    profile = duty("S7", **LOAD, inertia_kg_m2=1.5, start_s=4.0, brake_s=2.0, cycle_s=60.0)
    assert times(profile) == pytest.approx({"start": 4.0, "load": 54.0, "braking": 2.0})


STEPS = [{"torque_nm": 50.0, "speed_rpm": 1500.0, "lasts_s": 100.0}, {"torque_nm": 120.0, "speed_rpm": 600.0, "lasts_s": 60.0}, {"torque_nm": -20.0, "speed_rpm": 900.0, "lasts_s": 40.0}]


def test_s8_changes_speed_and_load_together():
    profile = duty("S8", step=STEPS, inertia_kg_m2=0.8, change_s=5.0, cycles=2)
    assert times(profile) == pytest.approx({"change to 1": 10.0, "step 1": 190.0, "change to 2": 10.0, "step 2": 110.0, "change to 3": 10.0, "step 3": 70.0})
    frame = profile.to_frame()
    rpm = np.pi / 30
    for k, torque, rise in ((1, 50.0, 600.0), (2, 120.0, -900.0), (3, -20.0, 300.0)):
        assert frame[frame.phase == f"change to {k}"].torque_nm.iloc[0] == pytest.approx(torque + 0.8 * rise * rpm / 5)


def test_s9_happens_once_and_s10_jumps():
    s9 = duty("S9", step=[*STEPS, {"torque_nm": 300.0, "speed_rpm": 900.0, "lasts_s": 10.0}], inertia_kg_m2=0.8, change_s=5.0)
    assert s9.duration_s == pytest.approx(210.0) and "change to 1" not in s9.phases and s9.ranges["torque_nm"][1] == 300.0
    s10 = duty("S10", step=[*STEPS, {"torque_nm": 0.0, "speed_rpm": 0.0, "lasts_s": 30.0}], cycles=4)
    assert s10.rows == 16 and s10.duration_s == pytest.approx(4 * 230.0)


@pytest.mark.parametrize("values, match", [
    ({"type": "S3", **LOAD}, "duty_factor: found nothing; allowed: torque_nm, speed_rpm, duty_factor, which type = 'S3' needs"),
    ({"type": "S3", **LOAD, "duty_factor": 40.0}, "duty_factor: found value 40.0; allowed: a number below 1"),
    ({"type": "S1", **LOAD, "load_s": 60.0, "duty_factor": 0.4}, "duty_factor: found duty_factor with type = 'S1'; allowed: torque_nm, speed_rpm, load_s with it"),
    ({"type": "S11", **LOAD}, "type: found value 'S11'; allowed: one of S1, S2"),
    ({"type": "S4", **LOAD, "duty_factor": 0.25, "cycle_s": 10.0, "inertia_kg_m2": 1.0, "start_s": 3.0}, "start_s: found start and braking of 3 s in 2.5 s that are not rest"),
    ({"type": "S5", **LOAD, "duty_factor": 0.4, "inertia_kg_m2": 0.5, "start_s": 3.0, "brake_s": 2.0}, r"brake_s: found 2 s, in which the load brakes by itself \(40.73 N m of driving left\); allowed: below 0.9817 s"),
    ({"type": "S8", "step": STEPS, "inertia_kg_m2": 0.5, "change_s": 40.0}, "step: found lasts_s = 40 s at step 3; allowed: above change_s = 40 s"),
    ({"type": "S9", "step": STEPS, "inertia_kg_m2": 0.5, "change_s": 4.0, "cycles": 2}, "cycles: found cycles with type = 'S9'"),
    ({"type": "S10", "step": [{"torque_nm": float(k), "speed_rpm": 900.0, "lasts_s": 9.0} for k in range(5)]}, "step: found more than four different loads"),
    ({"type": "S10", "step": STEPS[:1]}, "step"),
], ids=range(10))
def test_duty_types_refused_in_words(values, match):
    with pytest.raises(InputError, match=match):
        recipe("duty-type", **values)


# -------------------------------------------------------- crane mechanisms
# Published: ISO 4301-1 as a classification sheet prints it, with the names of FEM section 9.
HOURS = [400, 800, 1600, 3200, 6300, 12500, 25000, 50000]
PER_DAY = [0.25, 0.5, 1, 2, 4, 8, 16, 24]
GROUPS = """
-  M1 M2 M3
M1 M2 M3 M4
M2 M3 M4 M5
M3 M4 M5 M6
M4 M5 M6 M7
M5 M6 M7 M8
M6 M7 M8 -
M7 M8 -  -
"""
FEM = {"M1": "1Dm", "M2": "1Cm", "M3": "1Bm", "M4": "1Am", "M5": "2m", "M6": "3m", "M7": "4m", "M8": "5m"}
CELLS = [(k, f"L{j + 1}", cell) for k, line in enumerate(GROUPS.split("\n")[1:9]) for j, cell in enumerate(line.split())]


@pytest.mark.parametrize("use, spectrum, group", CELLS)
def test_every_cell_of_the_table(use, spectrum, group):
    calls = ({"total_hours": HOURS[use]}, {"total_hours": (HOURS[use - 1] if use else 0) + 1}, {"hours_per_day": PER_DAY[use]}, {"hours_per_day": (PER_DAY[use - 1] if use else 0) + 0.01})
    for call in calls:
        if group == "-":
            with pytest.raises(RangeError, match=f"found {spectrum} with T{use + 1}; allowed: a pair for which the table has a group"):
                mechanism_group(spectrum, **call)
        else:
            found = mechanism_group(spectrum, **call)
            assert (found.use, found.spectrum, found.group, found.fem_name) == (f"T{use + 1}", spectrum, group, FEM[group])


def test_hours_a_day_and_in_all_agree():
    """Analytic: 1600 h over 10 years of 250 days are 0.64 h a day, which is T3 like 1600 h."""
    assert 1600 / (250 * 10) == 0.64
    assert mechanism_group("L2", hours_per_day=0.64) == mechanism_group("L2", total_hours=1600)
    assert mechanism_group("L2", total_hours=1600).use == "T3"


@pytest.mark.parametrize("call, match", [
    (lambda: mechanism_group("L5", total_hours=100), "spectrum: found 'L5'; allowed: one of L1, L2"), (lambda: mechanism_group("L1"), "neither total_hours nor"),
    (lambda: mechanism_group("L1", total_hours=1, hours_per_day=1), "both total_hours and"), (lambda: mechanism_group("L1", total_hours=50001), "total_hours: found 50001 h; allowed: 0 to 50000 h"),
    (lambda: mechanism_group("L1", hours_per_day=25), "hours_per_day: found 25 h"), (lambda: mechanism_group("L1", total_hours=0), "total_hours: found 0 h"),
    (lambda: structure_class(0), "cycles: found 0"), (lambda: load_spectrum([(0.5, 1.0)]), "shares that add up to 0.5"), (lambda: load_spectrum([(1.0, 0.0)]), "no load above zero"),
    (lambda: load_spectrum([(1.0, -1.0)]), r"load\[0\]: found -1"), (lambda: lift_usage(7), "usage_category: found 7"), (lambda: lift_usage(True), "found True"),
    (lambda: lift_usage_of_trips(-1), "trips_per_day: found -1")])
def test_classes_refuse_in_words(call, match):
    with pytest.raises(RangeError, match=match):
        call()


def test_structure_classes():
    """Published: U3 to U6 of ISO 4301-1; the others from memory."""
    assert [structure_class(n) for n in (125_000, 250_000, 500_000, 1_000_000)] == ["U3", "U4", "U5", "U6"]
    assert [structure_class(n) for n in (125_001, 1, 16_001, 63_000, 2_000_000, 4_000_000, 4_000_001)] == ["U4", "U0", "U1", "U2", "U7", "U8", "U9"]


def test_load_spectrum_by_hand():
    """Analytic; limits of the classes 1/8, 1/4, 1/2, 1 (ISO 4301-1, from memory): they are cubes of 0.5, 0.63, 0.794 and 1."""
    assert load_spectrum([(1.0, 350.0)]) == (1.0, "L4")
    assert load_spectrum([LoadShare(share=0.125, load=1.0), LoadShare(share=0.875, load=0.0)]) == (pytest.approx(0.125), "L1")
    assert load_spectrum([(0.2, 1.0), (0.8, 0.4)]) == (pytest.approx(0.2 + 0.8 * 0.064), "L3")
    assert load_spectrum([(0.1, 500.0), (0.9, 250.0)]) == (pytest.approx(0.2125), "L2")


# ------------------------------------------------------------ usage of lifts
def test_usage_categories():
    """Published: ISO 25745-2:2015, category 3 after environmental declarations, the rest from memory; VDI 4707-1 hours from memory."""
    table = [LIFT_USAGE[k] for k in range(1, 7)]
    assert [u.trips_per_day for u in table] == [50, 125, 300, 750, 1500, 2500]
    assert [u.travel_share for u in table] == [0.49, 0.49, 0.49, 0.44, 0.39, 0.32]
    assert [u.load_share for u in table] == [0.075, 0.075, 0.075, 0.09, 0.16, 0.20]
    assert [u.travel_hours for u in table[:5]] == [0.2, 0.5, 1.5, 3, 6] and table[5].travel_hours is None
    assert all(lift_usage_of_trips(u.trips_per_day) == u == lift_usage(u.category) for u in table)  # each lies in its own band
    bands = [(0, 1), (74.9, 1), (75, 2), (200, 2), (201, 3), (500, 3), (501, 4), (1000, 4), (1001, 5), (2000, 5), (2001, 6)]
    assert [lift_usage_of_trips(n).category for n, _ in bands] == [c for _, c in bands]
