"""Operating points of the synchronous machine against other ways to get them."""

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq, minimize_scalar

from mission.errors import InputError
from mission.machine import (
    DirectPoints,
    SynchronousMachine,
    mtpa_from_current,
    mtpa_from_torque,
    torque_of_currents_nm,
)
from mission.tomlfile import parse_model

from .factories import M_MAX, V_DC, V_MAX, points

WINCH = SynchronousMachine(
    kind="synchronous", pole_pairs=6, r_s_ohm=0.018, l_d_h=1.10e-3, l_q_h=1.90e-3, psi_pm_wb=0.74
)
ROUND = SynchronousMachine(kind="synchronous", pole_pairs=4, r_s_ohm=0.010, l_d_h=0.5e-3, l_q_h=0.5e-3, psi_pm_wb=0.11)
RELUCTANCE = SynchronousMachine(
    kind="synchronous", pole_pairs=2, r_s_ohm=0.03, l_d_h=1.2e-3, l_q_h=8.0e-3, psi_pm_wb=0.0
)
ASSISTED = SynchronousMachine(
    kind="synchronous", pole_pairs=3, r_s_ohm=0.02, l_d_h=0.6e-3, l_q_h=2.4e-3, psi_pm_wb=0.06
)
INVERSE = SynchronousMachine(kind="synchronous", pole_pairs=4, r_s_ohm=0.02, l_d_h=1.5e-3, l_q_h=0.9e-3, psi_pm_wb=0.3)
LOSSY = SynchronousMachine(  # so much resistance that braking bends the voltage limit
    kind="synchronous", pole_pairs=4, r_s_ohm=0.9, l_d_h=2.0e-3, l_q_h=2.5e-3, psi_pm_wb=0.5
)
MACHINES = {
    "lossy": LOSSY,
    "winch": WINCH,
    "round": ROUND,
    "reluctance": RELUCTANCE,
    "assisted": ASSISTED,
    "inverse": INVERSE,
}


def voltage(machine, omega, current):
    """Peak voltage phasor along the d axis; ``current`` is i_d + j i_q. Twin of the dq equations, by flux linkage."""
    flux = machine.psi_pm_wb + machine.l_d_h * current.real + 1j * machine.l_q_h * current.imag
    return machine.r_s_ohm * current + 1j * omega * flux


def torque_by_flux(machine, current):
    """Cross product of flux and current, [N m]."""
    flux = machine.psi_pm_wb + machine.l_d_h * current.real + 1j * machine.l_q_h * current.imag
    return 1.5 * machine.pole_pairs * (np.conj(flux) * current).imag


def signed(limit):
    """Both signs and zero; nothing so small that it drowns in the rounding of floats."""
    return st.floats(-limit, limit).map(lambda x: x if abs(x) > 1e-6 else 0.0)


any_machine = st.sampled_from(sorted(MACHINES)).map(MACHINES.get)


# --- most torque per ampere ------------------------------------------------------------


@pytest.mark.parametrize("name", MACHINES)
@pytest.mark.parametrize("i_peak", [0.5, 40.0, 300.0])
def test_mtpa_from_current_against_a_search_over_the_angle(name, i_peak):
    machine = MACHINES[name]
    # independent code: bounded search, both quadrants that drive
    best = minimize_scalar(
        lambda b: -torque_by_flux(machine, i_peak * np.exp(1j * b)), bounds=(0.0, np.pi), options={"xatol": 1e-10}
    )
    i_d, i_q = mtpa_from_current(machine, i_peak)
    assert np.hypot(i_d, i_q) == pytest.approx(i_peak, rel=1e-12)
    assert torque_of_currents_nm(machine, i_d, i_q) == pytest.approx(-best.fun, rel=1e-9)
    # 1e-5: the search stands on a flat top
    assert np.arctan2(i_q, i_d) == pytest.approx(best.x, abs=1e-5)


@pytest.mark.parametrize("name", MACHINES)
@pytest.mark.parametrize("torque", [-900.0, -1.0, 1e-6, 20.0, 700.0])
def test_mtpa_from_torque_against_a_root_of_the_current_size(name, torque):
    machine = MACHINES[name]

    def best_torque(i_peak):
        found = minimize_scalar(
            lambda b: -torque_by_flux(machine, i_peak * np.exp(1j * b)), bounds=(0.0, np.pi), options={"xatol": 1e-11}
        )
        return -found.fun

    # independent code: the size whose best torque is the wanted one
    size = brentq(lambda i: best_torque(i) - abs(torque), 0.0, 1e4, xtol=1e-12, rtol=1e-12)
    i_d, i_q = mtpa_from_torque(machine, torque)
    assert np.hypot(i_d, i_q) == pytest.approx(size, rel=1e-7)
    assert torque_by_flux(machine, i_d + 1j * i_q) == pytest.approx(torque, rel=1e-10)
    assert np.sign(i_q) == np.sign(torque)


def test_round_rotor_needs_no_d_current():
    i_d, i_q = mtpa_from_torque(ROUND, 132.0)
    # analytic: T = 3/2 p psi i_q
    assert (i_d, i_q) == (0.0, pytest.approx(132.0 / (1.5 * 4 * 0.11)))


def test_reluctance_machine_stands_at_45_degrees():
    i_d, i_q = mtpa_from_current(RELUCTANCE, 100.0)
    # analytic
    assert (-i_d, i_q) == (pytest.approx(100.0 / np.sqrt(2.0)), pytest.approx(100.0 / np.sqrt(2.0)))


def test_most_torque_of_nothing_is_nothing():
    for machine in MACHINES.values():
        assert [float(x) for x in (*mtpa_from_current(machine, 0.0), *mtpa_from_torque(machine, 0.0))] == [0.0] * 4


# --- any speed, current and torque, both signs -------------------------------------------


@settings(derandomize=True, max_examples=150, deadline=None)
@given(any_machine, signed(900.0), signed(250.0))
def test_current_duty_against_a_dense_scan(machine, current, speed):
    """Independent code: of all angles that fit the voltage and drive as wanted, the one with the most torque."""
    omega, size = machine.pole_pairs * abs(speed), np.sqrt(2.0) * abs(current)
    way = 1.0 if current >= 0 else -1.0
    start = np.arctan2(*mtpa_from_current(machine, size)[::-1])
    angle = np.linspace(start, np.pi, 4001)
    i = size * (np.cos(angle) + 1j * way * np.sin(angle))
    v, t = np.abs(voltage(machine, omega, i)), way * torque_by_flux(machine, i)
    fits = (v <= V_MAX) & (t >= -1e-9)
    assume(abs(v.min() / V_MAX - 1.0) > 1e-3)  # the scan cannot judge a hair's breadth
    if not fits.any():
        with pytest.raises(InputError, match="row 1"):
            points(machine, current_a=current, speed_rad_s=speed)
        return
    p = points(machine, current_a=current, speed_rad_s=speed)
    assert p.i_peak_a[0] == pytest.approx(size, rel=1e-12)
    assert np.hypot(p.i_d_a[0], p.i_q_a[0]) == pytest.approx(size, rel=1e-12)
    assert p.v_peak_v[0] <= V_MAX * (1 + 1e-12) and p.mod_index[0] <= M_MAX * (1 + 1e-12)
    assert p.frequency_hz[0] == pytest.approx(omega / (2 * np.pi)) and p.direction[0] == (-1.0 if speed < 0 else 1.0)
    if size > 0.0:
        got = abs(p.torque_nm[0])
        # between two angles of the scan
        first = np.argmax(fits)
        steps = abs(t[max(first - 1, 0)] - t[first])
        assert t[first] - 1e-9 * t[0] <= got <= t[first] + steps + 1e-9 * t[0]
        assert np.sign(p.i_q_a[0]) == way * p.direction[0] or abs(p.i_q_a[0]) < 1e-9 * size


@settings(derandomize=True, max_examples=150, deadline=None)
@given(any_machine, signed(1500.0), signed(300.0))
def test_torque_duty_gives_the_torque_with_the_least_current(machine, torque, speed):
    omega, wanted = machine.pole_pairs * abs(speed), torque * (-1.0 if speed < 0 else 1.0)
    tau = wanted / (1.5 * machine.pole_pairs)
    start = float(mtpa_from_torque(machine, wanted)[0])
    dl = machine.l_q_h - machine.l_d_h

    def v(i_d):
        i_q = tau / (machine.psi_pm_wb - dl * i_d) if tau else 0.0
        return abs(voltage(machine, omega, i_d + 1j * i_q))

    # independent code: lowest point of the voltage along the curve, then the root this side of it
    end = start - 20.0 * (machine.psi_pm_wb / machine.l_d_h + np.sqrt(abs(tau) / abs(dl)) if dl else 1e4) - 1.0
    if dl < 0:
        end = max(end, machine.psi_pm_wb / dl * (1 - 1e-9))
    lowest = minimize_scalar(lambda x: v(x) ** 2, bounds=(end, start), options={"xatol": 1e-9, "maxiter": 500})
    least = min(v(lowest.x), v(start))
    assume(abs(least / V_MAX - 1.0) > 1e-4 and abs(v(start) / V_MAX - 1.0) > 1e-9)
    if v(start) <= V_MAX:
        i_d = start
    elif least < V_MAX:
        i_d = brentq(lambda x: v(x) - V_MAX, lowest.x, start, xtol=1e-11, rtol=1e-14)
    else:
        with pytest.raises(InputError, match="row 1 .*(wants .* V.*N m at this speed|standstill)"):
            points(machine, torque_nm=torque, speed_rad_s=speed)
        return
    p = points(machine, torque_nm=torque, speed_rad_s=speed)
    assert p.torque_nm[0] == pytest.approx(torque, rel=1e-6, abs=1e-9)
    assert p.i_d_a[0] == pytest.approx(i_d, rel=1e-6, abs=1e-6)
    assert p.v_peak_v[0] <= V_MAX * (1 + 1e-12)
    assert p.v_peak_v[0] == pytest.approx(v(i_d), rel=1e-7, abs=1e-9)


@settings(derandomize=True, max_examples=100, deadline=None)
@given(any_machine, signed(300.0), signed(100.0))
def test_power_at_the_terminals_is_copper_loss_and_shaft(machine, current, speed):
    p = points(machine, v_dc=1e5, current_a=current, speed_rad_s=speed)
    at_terminals = 1.5 * p.v_peak_v * p.i_peak_a * np.cos(p.phi_rad)
    copper = 1.5 * machine.r_s_ohm * p.i_peak_a**2
    # analytic: no iron losses in the model
    assert at_terminals[0] == pytest.approx((copper + p.torque_nm * speed)[0], rel=1e-9, abs=1e-6)
    # |phi| beyond 90 degrees exactly when energy flows back, copper loss paid
    assume(abs(copper[0] + p.torque_nm[0] * speed) > 1e-6)
    assert (abs(p.phi_rad[0]) > np.pi / 2) == (copper[0] + p.torque_nm[0] * speed < 0)


@settings(derandomize=True, max_examples=100, deadline=None)
@given(any_machine, signed(200.0), st.floats(0.01, 250.0), st.sampled_from(["current_a", "torque_nm"]))
def test_reversed_rotation_is_the_mirror_image(machine, load, speed, kind):
    try:
        ahead = points(machine, speed_rad_s=speed, **{kind: load})
    except InputError:
        with pytest.raises(InputError):
            points(machine, speed_rad_s=-speed, **{kind: load if kind == "current_a" else -load})
        return
    back = points(machine, speed_rad_s=-speed, **{kind: load if kind == "current_a" else -load})
    for name in ("frequency_hz", "i_peak_a", "mod_index", "phi_rad", "i_d_a", "v_peak_v"):
        assert getattr(back, name) == pytest.approx(getattr(ahead, name), rel=1e-12, abs=1e-15), name
    for name in ("direction", "i_q_a", "torque_nm"):
        assert getattr(back, name) == pytest.approx(-getattr(ahead, name), rel=1e-12, abs=1e-15), name


# --- waves in time ---------------------------------------------------------------------


@pytest.mark.parametrize("speed", [70.0, -70.0, 45.0, -3.0])
@pytest.mark.parametrize("current", [180.0, -180.0])
def test_waves_in_time_show_m_and_phi(speed, current):
    """Three phases built from rotor coordinates by the inverse Park transformation."""
    p = points(WINCH, current_a=current, speed_rad_s=speed)
    omega = WINCH.pole_pairs * speed  # signed
    t = np.linspace(0.0, 3.0 * 2 * np.pi / abs(omega), 6001)
    rotor = omega * t + 0.3
    i_dq = p.i_d_a[0] + 1j * p.i_q_a[0]
    u_dq = voltage(WINCH, omega, i_dq)
    shifts = [0.0, -2 * np.pi / 3, 2 * np.pi / 3]  # where the windings sit
    i_abc = [(i_dq * np.exp(1j * (rotor + s))).real for s in shifts]
    u_abc = [(u_dq * np.exp(1j * (rotor + s))).real for s in shifts]
    amplitude, size = p.mod_index[0] * V_DC / 2.0, p.i_peak_a[0]
    for k, (i, u) in enumerate(zip(i_abc, u_abc, strict=True)):
        # the instant of a rising zero of the current starts the current's own time phase
        rising = np.flatnonzero((i[:-1] < 0) & (i[1:] >= 0))[0]
        start = t[rising] - i[rising] * (t[rising + 1] - t[rising]) / (i[rising + 1] - i[rising])
        theta = abs(omega) * (t - start)
        # 1e-5: the zero is found on a straight line between two samples
        assert i == pytest.approx(size * np.sin(theta), abs=1e-5 * size), k
        assert u == pytest.approx(amplitude * np.sin(theta + p.phi_rad[0]), abs=1e-5 * amplitude), k
    # from the rotor's angle, as the documentation of OperatingPoints says
    angle = rotor + p.current_angle_rad[0]
    assert i_abc[0] == pytest.approx(size * np.sin(angle), abs=1e-9 * size)
    theta = angle if speed > 0 else np.pi - angle
    assert u_abc[0] == pytest.approx(amplitude * np.sin(theta + p.phi_rad[0]), abs=1e-9 * amplitude)
    # power of the waves is copper loss and shaft
    power = sum(i * u for i, u in zip(i_abc, u_abc, strict=True))
    assert power == pytest.approx(1.5 * WINCH.r_s_ohm * size**2 + p.torque_nm[0] * speed, rel=1e-9)
    assert np.sign(p.torque_nm[0] * speed) == np.sign(current)
    assert (abs(p.phi_rad[0]) > np.pi / 2) == (current < 0)


# --- corners ---------------------------------------------------------------------------


def test_standstill_takes_the_resistive_drop_only():
    p = points(WINCH, current_a=[150.0, -150.0, 0.0], speed_rad_s=0.0)
    # analytic: m = R I / (V_dc/2)
    drop = 0.018 * np.sqrt(2.0) * 150.0
    assert p.mod_index == pytest.approx([drop / 300.0, drop / 300.0, 0.0])
    assert p.phi_rad == pytest.approx(0.0, abs=1e-12) and p.frequency_hz.tolist() == [0.0] * 3
    assert p.direction.tolist() == [1.0] * 3
    # the sign of the current is that of the torque here
    assert p.torque_nm[0] == -p.torque_nm[1] > 0 and p.i_q_a[0] > 0 > p.i_q_a[1]


def test_without_current_the_back_emf_stands_at_the_terminals():
    p = points(WINCH, current_a=0.0, speed_rad_s=[40.0, -40.0])
    # analytic: w psi
    assert p.v_peak_v == pytest.approx(6 * 40.0 * 0.74)
    assert p.mod_index == pytest.approx(6 * 40.0 * 0.74 / 300.0)
    assert p.phi_rad.tolist() == [0.0, 0.0] and p.i_peak_a.tolist() == [0.0, 0.0]


def test_no_torque_above_base_speed_needs_weakening_current():
    p = points(WINCH, torque_nm=0.0, speed_rad_s=100.0)
    # analytic, resistance apart: w (psi + L_d i_d) = V_max
    assert p.i_d_a[0] == pytest.approx((V_MAX / 600.0 - 0.74) / 1.1e-3, rel=2e-3) and p.i_q_a[0] == 0.0
    assert p.v_peak_v[0] == pytest.approx(V_MAX, rel=1e-12) and abs(p.phi_rad[0]) == pytest.approx(np.pi / 2, abs=0.05)


def test_zero_speed_is_the_limit_of_slow_rotation():
    slow, still = (points(WINCH, current_a=-150.0, speed_rad_s=s) for s in (1e-9, 0.0))
    for name in ("i_d_a", "i_q_a", "mod_index", "current_angle_rad", "torque_nm"):
        assert getattr(slow, name) == pytest.approx(getattr(still, name), rel=1e-6), name


def test_frequency_instead_of_speed():
    a = points(WINCH, current_a=150.0, frequency_hz=30.0)
    b = points(WINCH, current_a=150.0, speed_rad_s=2 * np.pi * 30.0 / 6)
    assert a.phi_rad == pytest.approx(b.phi_rad) and a.mod_index == pytest.approx(b.mod_index)


def test_dc_voltage_of_the_duty_goes_first():
    p = points(WINCH, current_a=100.0, speed_rad_s=30.0, dc_voltage_v=[600.0, 500.0], v_dc=999.0)
    # analytic: same volts over another half voltage
    assert p.mod_index[1] / p.mod_index[0] == pytest.approx(600.0 / 500.0)
    assert (
        points(WINCH, current_a=100.0, speed_rad_s=30.0, dc_voltage_v=600.0, v_dc=None).mod_index[0] == p.mod_index[0]
    )


def test_rows_do_not_depend_on_their_neighbours():
    rng = np.random.default_rng(5)
    current, speed = rng.uniform(-200, 200, 300), rng.uniform(-62, 62, 300)
    whole = points(WINCH, current_a=current, speed_rad_s=speed)
    for k in (0, 17, 299):
        alone = points(WINCH, current_a=current[k], speed_rad_s=speed[k])
        assert alone.phi_rad[0] == pytest.approx(whole.phi_rad[k], rel=1e-12)


# --- what cannot be is refused -------------------------------------------------------------


def test_current_that_cannot_weaken_enough():
    with pytest.raises(InputError) as caught:
        points(WINCH, current_a=[100.0, 30.0], speed_rad_s=[10.0, 150.0], first_row=100)
    text = str(caught.value)
    for fragment in ("day.csv, row 102 (t = 0.5 s)", "30 A rms", "143.2 Hz", "at least", "346.4 V", "600 V DC"):
        assert fragment in text, text
    # analytic, resistance apart: w (psi - L_d I) is the least
    least = float(text.split("at least ")[1].split(" V")[0])
    assert least == pytest.approx(900 * (0.74 - 1.1e-3 * np.sqrt(2.0) * 30.0), rel=2e-3)


def test_torque_beyond_what_the_voltage_gives():
    with pytest.raises(InputError) as caught:
        points(WINCH, torque_nm=[0.0, -3000.0], speed_rad_s=[0.0, 150.0], first_row=7)
    text = str(caught.value)
    assert "row 9 (t = 0.5 s)" in text and "-3000 N m" in text and "346.4 V" in text
    most = float(text.split("allowed: ")[1].split(" N m")[0])
    # the torque named as available is available, and a little more is not
    assert points(WINCH, torque_nm=0.999 * most, speed_rad_s=150.0).torque_nm[0] == pytest.approx(0.999 * most)
    with pytest.raises(InputError):
        points(WINCH, torque_nm=1.002 * most, speed_rad_s=150.0)


def test_back_emf_beyond_the_voltage_without_current():
    with pytest.raises(InputError, match=r"0 A rms at 95.49 Hz, which wants at least 444 V"):
        points(WINCH, current_a=0.0, speed_rad_s=100.0)


def test_standstill_beyond_the_voltage():
    with pytest.raises(InputError, match=r"row 1 .*standstill.*2.546 V.*1.155 V"):
        points(WINCH, current_a=100.0, speed_rad_s=0.0, v_dc=2.0)


@pytest.mark.parametrize(
    ("columns", "v_dc", "fragment"),
    [
        ({"speed_rad_s": 1.0}, 600.0, "neither current nor torque"),
        ({"speed_rad_s": 1.0, "current_a": 1.0, "torque_nm": 1.0}, 600.0, "current and torque"),
        ({"current_a": 1.0}, 600.0, "neither speed nor frequency"),
        ({"current_a": 1.0, "speed_rad_s": 1.0, "frequency_hz": 1.0}, 600.0, "speed and frequency"),
        ({"current_a": 1.0, "frequency_hz": [1.0, -1.0]}, 600.0, "row 2 .*frequency_hz.*-1 Hz"),
        ({"current_a": 1.0, "speed_rad_s": 1.0}, None, "no DC voltage"),
        ({"current_a": 1.0, "speed_rad_s": 1.0, "dc_voltage_v": [600.0, 0.0]}, None, "row 2 .*dc_voltage_v.*0 V"),
        ({"current_a": [1.0, np.nan], "speed_rad_s": 1.0}, 600.0, "row 2 .*current_a.*nan"),
        ({"torque_nm": 1.0, "speed_rad_s": np.inf}, 600.0, "row 1 .*speed_rad_s.*inf"),
    ],
)
def test_duties_that_do_not_fit(columns, v_dc, fragment):
    with pytest.raises(InputError, match=fragment):
        points(WINCH, v_dc=v_dc, **columns)


GOOD = {"kind": "synchronous", "pole_pairs": 4, "r_s_ohm": 0.02, "l_d_h": 1e-3, "l_q_h": 2e-3, "psi_pm_wb": 0.2}


@pytest.mark.parametrize(
    ("change", "fragments"),
    [
        ({"l_q_h": -1e-3}, ["l_q_h", "-0.001", "above 0"]),
        ({"pole_pairs": 2.5}, ["pole_pairs", "2.5"]),
        ({"r_s_ohm": "20 mOhm"}, ["r_s_ohm", "a number"]),
        ({"psi_pm": 0.2}, ["psi_pm", "unknown key", "psi_pm_wb"]),
        ({"psi_pm_wb": 0.0, "l_q_h": 1e-3}, ["psi_pm_wb = 0", "magnets"]),
        ({"l_q_h": 20.0}, ["henry"]),
        ({"kind": "synchronus"}, ["synchronus", "did you mean 'synchronous'?"]),
    ],
)
def test_broken_machines(change, fragments):
    from pydantic import Field

    from mission.machine import MachineSpec
    from mission.tomlfile import FileModel

    class Study(FileModel):
        machine: MachineSpec = Field()

    assert parse_model({"machine": GOOD}, Study, "study.toml").machine.pole_pairs == 4
    assert isinstance(parse_model({"machine": {"kind": "direct"}}, Study, "study.toml").machine, DirectPoints)
    with pytest.raises(InputError) as caught:
        parse_model({"machine": GOOD | change}, Study, "study.toml")
    for fragment in ["study.toml", "machine", *fragments]:
        assert fragment in str(caught.value)


# --- direct points --------------------------------------------------------------------------

DIRECT = DirectPoints(kind="direct")


def test_direct_points_pass_through():
    p = points(
        DIRECT,
        current_a=[100.0, -50.0, 0.0],
        frequency_hz=[50.0, 10.0, 0.0],
        mod_index=[0.9, 0.2, 0.0],
        phi_rad=[0.5, 3.0 - 2 * np.pi, 0.0],
        speed_rad_s=[5.0, -5.0, 0.0],
    )
    assert p.i_peak_a == pytest.approx(np.sqrt(2.0) * np.array([100.0, 50.0, 0.0]))
    assert p.phi_rad == pytest.approx([0.5, 3.0, 0.0]) and p.direction.tolist() == [1.0, -1.0, 1.0]
    assert p.v_peak_v == pytest.approx([270.0, 60.0, 0.0]) and p.current_angle_rad.tolist() == [0.0] * 3
    assert np.isnan(p.torque_nm).all() and np.isnan(p.i_d_a).all() and np.isnan(p.i_q_a).all()


@pytest.mark.parametrize(
    ("change", "fragment"),
    [
        ({"mod_index": [0.5, 1.2]}, r"row 2 \(t = 0.5 s\), mod_index: found 1.2; allowed: at most 1.1547"),
        ({"mod_index": -0.1}, "mod_index.*at least 0"),
        ({"frequency_hz": -1.0}, "frequency_hz.*sense of rotation"),
        ({"current_a": -10.0}, "current_a.*both say generating"),
        ({"phi_rad": np.nan}, "row 1 .*phi_rad.*nan"),
    ],
)
def test_direct_points_that_cannot_be(change, fragment):
    good = {"current_a": 10.0, "frequency_hz": 5.0, "mod_index": 0.5, "phi_rad": 0.3}
    with pytest.raises(InputError, match=fragment):
        points(DIRECT, **(good | change))


def test_direct_points_name_the_missing_column():
    with pytest.raises(InputError, match="no phi_rad among current_a, frequency_hz, mod_index"):
        points(DIRECT, current_a=10.0, frequency_hz=5.0, mod_index=0.5)
