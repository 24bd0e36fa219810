"""Saturated and limited synchronous machines against scans, SciPy's interpolation, and closed forms."""

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.interpolate import RegularGridInterpolator
from scipy.optimize import minimize_scalar

from mission.errors import InputError
from mission.machine import (
    CurrentTable,
    DqTable,
    Shortfall,
    SynchronousMachine,
    flux_linkages_wb,
    mtpa_from_current,
    mtpa_from_torque,
    torque_of_currents_nm,
)
from mission.tomlfile import parse_model

from .factories import M_MAX, V_DC, V_MAX, changed, points
from .test_operating_points import ASSISTED, RELUCTANCE, ROUND, WINCH, signed

I_D = np.linspace(-600.0, 100.0, 15)
I_Q = np.linspace(0.0, 600.0, 13)


def smooth_flux(i_d, i_q):
    """An invented machine whose q axis saturates, with a little of the one axis in the other."""
    return 0.74 + 1.1e-3 * i_d - 0.06 * (i_q / 600.0) ** 2, 0.76 * np.tanh(i_q / 400.0) * (1.0 + i_d / 6000.0)


PSI_D, PSI_Q = smooth_flux(I_D[:, None], I_Q[None, :])
BASE = {"kind": "synchronous", "pole_pairs": 6, "r_s_ohm": 0.018}
GRID = {"over": "dq", "i_d_a": I_D.tolist(), "i_q_a": I_Q.tolist(), "psi_d_wb": PSI_D.tolist(), "psi_q_wb": PSI_Q.tolist()}
MAPPED = SynchronousMachine(**BASE, saturation=GRID)
SIZES = [0.0, 100.0, 250.0, 450.0, 700.0]
LISTED = SynchronousMachine(
    **BASE,
    saturation={
        "over": "current",
        "i_peak_a": SIZES,
        "l_d_h": [1.2e-3, 1.15e-3, 1.1e-3, 1.0e-3, 0.95e-3],
        "l_q_h": [2.2e-3, 2.0e-3, 1.6e-3, 1.25e-3, 1.0e-3],
        "psi_pm_wb": [0.74, 0.74, 0.73, 0.71, 0.69],
    },
)
SATURATED = {"mapped": MAPPED, "listed": LISTED}


def flux(machine, i_d, i_q):
    """Independent code: SciPy's own bilinear and linear interpolation; NaN outside."""
    i_d, i_q = np.broadcast_arrays(np.asarray(i_d, float), np.asarray(i_q, float))
    if machine is MAPPED:
        at = np.stack([i_d, np.abs(i_q)], axis=-1)
        psi_d, psi_q = (RegularGridInterpolator((I_D, I_Q), t, bounds_error=False)(at) for t in (PSI_D, PSI_Q))
        return psi_d, np.sign(i_q) * psi_q
    table, size = machine.saturation, np.hypot(i_d, i_q)
    l_d, l_q, psi = (np.interp(size, SIZES, v, right=np.nan) for v in (table.l_d_h, table.l_q_h, table.psi_pm_wb))
    return psi + l_d * i_d, l_q * i_q


def torque(machine, i_d, i_q):
    psi_d, psi_q = flux(machine, i_d, i_q)
    return 1.5 * 6 * (psi_d * i_q - psi_q * i_d)


def volts(machine, w, i_d, i_q):
    psi_d, psi_q = flux(machine, i_d, i_q)
    return np.hypot(0.018 * i_d - w * psi_q, 0.018 * i_q + w * psi_d)


saturated = st.sampled_from(sorted(SATURATED))


# --- saturation -------------------------------------------------------------------------


def test_map_against_scipy():
    rng = np.random.default_rng(3)
    i_d, i_q = rng.uniform(-650, 150, 400), rng.uniform(-650, 650, 400)
    for machine in SATURATED.values():
        assert np.array(flux_linkages_wb(machine, i_d, i_q)) == pytest.approx(np.array(flux(machine, i_d, i_q)), rel=1e-12, abs=1e-15, nan_ok=True)


def test_inductances_and_fluxes_say_the_same():
    l_d = (PSI_D - 0.74) / np.where(I_D == 0.0, 1.0, I_D)[:, None]
    l_d[I_D == 0.0] = 1.1e-3
    l_q = np.where(I_Q > 0.0, PSI_Q / np.where(I_Q > 0.0, I_Q, 1.0), 1.9e-3)
    psi = PSI_D - l_d * I_D[:, None]
    table = {k: v for k, v in GRID.items() if k[:3] != "psi"} | {"l_d_h": np.abs(l_d).tolist(), "l_q_h": l_q.tolist(), "psi_pm_wb": (PSI_D - np.abs(l_d) * I_D[:, None]).tolist()}
    assert np.isfinite(psi).all()
    twin = SynchronousMachine(**BASE, saturation=table)
    at = np.array([-300.0, -20.0, 40.0]), np.array([10.0, 333.0, -200.0])
    assert np.array(flux_linkages_wb(twin, *at)) == pytest.approx(np.array(flux_linkages_wb(MAPPED, *at)), rel=1e-12)


@pytest.mark.parametrize("name", SATURATED)
@pytest.mark.parametrize("i_peak", [1.0, 60.0, 210.0, 380.0])
def test_mtpa_against_brute_force(name, i_peak):
    machine = SATURATED[name]
    angle = np.linspace(0.0, np.pi, 20001)
    best = np.nanmax(torque(machine, i_peak * np.cos(angle), i_peak * np.sin(angle)))
    i_d, i_q = mtpa_from_current(machine, i_peak)
    assert np.hypot(i_d, i_q) == pytest.approx(i_peak, rel=1e-12)
    # as documented: short of the best by less than 1e-5
    assert best * (1 - 1e-5) <= torque(machine, i_d, i_q) <= best * (1 + 1e-6)
    # and the least current for that torque
    for sign in (1.0, -1.0):
        j_d, j_q = mtpa_from_torque(machine, sign * best)
        assert np.hypot(j_d, j_q) == pytest.approx(i_peak, rel=2e-5)
        assert torque(machine, j_d, j_q) == pytest.approx(sign * best, rel=1e-9)


@settings(derandomize=True, max_examples=60, deadline=None)
@given(saturated, signed(1500.0), signed(110.0))
def test_saturated_torque_duty_against_a_scan(name, wanted, speed):
    """Independent code: all currents on a grid; none that makes the torque within the voltage is smaller."""
    machine, w, way = SATURATED[name], 6 * abs(speed), wanted * (-1.0 if speed < 0 else 1.0)
    i_d, i_q = np.meshgrid(np.linspace(-600, 100, 351), np.sign(way or 1.0) * np.linspace(0, 600, 301), indexing="ij")
    t, v = torque(machine, i_d, i_q), volts(machine, w, i_d, i_q)
    enough = (np.abs(t) >= abs(way)) & (v <= V_MAX)
    try:
        p = points(machine, torque_nm=wanted, speed_rad_s=speed)
    except InputError as err:
        assert "N m at" in str(err)
        # within a step of the grid, or beyond the end of the table
        far = (np.abs(t) >= 1.02 * abs(way) + 5.0) & (v <= 0.99 * V_MAX)
        assert not far.any()
        return
    assert p.torque_nm[0] == pytest.approx(wanted, rel=1e-6, abs=1e-9)
    assert torque(machine, p.i_d_a[0], p.i_q_a[0]) == pytest.approx(wanted, rel=1e-6, abs=1e-9)
    assert p.v_peak_v[0] <= V_MAX * (1 + 1e-12)
    assert p.v_peak_v[0] == pytest.approx(volts(machine, w, p.i_d_a[0], abs(p.i_q_a[0]) * np.sign(way)), rel=1e-9)
    if enough.any():
        assert p.i_peak_a[0] <= np.hypot(i_d, i_q)[enough].min() * (1 + 2e-5)
    # power of the terminals is copper loss and shaft
    power = 1.5 * p.v_peak_v[0] * p.i_peak_a[0] * np.cos(p.phi_rad[0])
    assert power == pytest.approx(1.5 * 0.018 * p.i_peak_a[0] ** 2 + wanted * speed, rel=1e-6, abs=1e-2)


@settings(derandomize=True, max_examples=60, deadline=None)
@given(saturated, signed(250.0), signed(100.0))
def test_saturated_current_duty_against_a_scan(name, current, speed):
    machine, w, size = SATURATED[name], 6 * abs(speed), np.sqrt(2.0) * abs(current)
    sign = -1.0 if current < 0 else 1.0
    start = np.arctan2(*mtpa_from_current(machine, size)[::-1])
    angle = np.linspace(start, np.pi, 4001)
    i_d, i_q = size * np.cos(angle), sign * size * np.sin(angle)
    v, t = volts(machine, w, i_d, i_q), sign * torque(machine, i_d, i_q)
    fits = v <= V_MAX
    assume(abs(np.nanmin(v) / V_MAX - 1.0) > 1e-3)
    if not fits.any():
        with pytest.raises(InputError, match="even in full field weakening"):
            points(machine, current_a=current, speed_rad_s=speed)
        return
    p = points(machine, current_a=current, speed_rad_s=speed)
    first = int(np.argmax(fits))
    step = abs(t[max(first - 1, 0)] - t[first]) + 1e-6 * abs(t[0]) + 1e-9
    assert t[first] - step <= abs(p.torque_nm[0]) <= t[first] + step
    assert p.v_peak_v[0] <= V_MAX * (1 + 1e-12) and p.i_peak_a[0] == pytest.approx(size)


@settings(derandomize=True, max_examples=60, deadline=None)
@given(st.sampled_from([WINCH, ROUND, ASSISTED]), st.sampled_from(["dq", "current"]), signed(250.0).filter(lambda v: abs(v) > 100.0), signed(100.0), st.sampled_from(["torque_nm", "current_a"]))
def test_table_of_constant_values_is_no_table(machine, over, load, speed, column):
    # 3000 A, so that the line of most torque has many points; on it the torque per ampere is the best within 1e-5
    if over == "dq":
        shape = (31, 31)
        table = {"i_d_a": np.linspace(-3000, 3000, 31).tolist(), "i_q_a": np.linspace(0, 3000, 31).tolist()}
    else:
        shape, table = (2,), {"i_peak_a": [0.0, 3000.0]}
    table |= {n: np.full(shape, getattr(machine, n)).tolist() for n in ("l_d_h", "l_q_h", "psi_pm_wb")} | {"over": over}
    twin = SynchronousMachine(kind="synchronous", pole_pairs=machine.pole_pairs, r_s_ohm=machine.r_s_ohm, saturation=table)
    try:
        p = points(machine, speed_rad_s=speed, **{column: load})
    except InputError:
        with pytest.raises(InputError):
            points(twin, speed_rad_s=speed, **{column: load})
        return
    q = points(twin, speed_rad_s=speed, **{column: load})
    # in cells of 100 to 200 A the line of most torque is coarse for a few amperes (up to 2 %), so loads start at 100
    assert q.torque_nm == pytest.approx(p.torque_nm, rel=1e-4, abs=1e-6)
    assert q.i_peak_a == pytest.approx(p.i_peak_a, rel=1e-4, abs=1e-6)
    assert q.v_peak_v == pytest.approx(p.v_peak_v, rel=5e-3, abs=1e-6)


def test_outside_the_table_is_refused():
    for machine, words in ((MAPPED, "i_d -600 to 100 A, i_q up to 600 A"), (LISTED, "up to 700 A")):
        with pytest.raises(InputError, match=rf"row 2 .*848\.5 A \(peak\).*{words}"):
            points(machine, current_a=[10.0, 600.0], speed_rad_s=1.0)
        for one in (machine, changed(machine, beyond="limit", current_max_a=900.0)):
            with pytest.raises(InputError, match=rf"row 2 .*90000 N m.*beyond the section saturation.*{words}"):
                points(one, torque_nm=[10.0, 90000.0], speed_rad_s=1.0)


@settings(derandomize=True, max_examples=30, deadline=None)
@given(saturated, st.floats(1.0, 1500.0), st.floats(1.001, 1.5))
def test_more_torque_wants_more_current(name, wanted, more):
    i_d, i_q = mtpa_from_torque(SATURATED[name], [wanted, wanted * more])
    assert np.hypot(i_d, i_q)[1] > np.hypot(i_d, i_q)[0]


# --- winding ------------------------------------------------------------------------------


def test_resistance_of_a_warm_winding():
    warm = changed(WINCH, winding_c=120.0)
    # analytic: 100 K times 0.00393 1/K
    assert warm.r_s_warm_ohm == pytest.approx(0.018 * 1.393)
    p, q = points(WINCH, current_a=100.0, speed_rad_s=0.0), points(warm, current_a=100.0, speed_rad_s=0.0)
    assert q.v_peak_v / p.v_peak_v == pytest.approx(1.393)
    r = points(changed(WINCH, r_s_ohm=0.018 * 1.393), torque_nm=[800.0, -300.0], speed_rad_s=[60.0, 100.0])
    s = points(warm, torque_nm=[800.0, -300.0], speed_rad_s=[60.0, 100.0])
    assert s.i_d_a == pytest.approx(r.i_d_a) and s.phi_rad == pytest.approx(r.phi_rad)


# --- limited torque -------------------------------------------------------------------------


def test_most_torque_for_the_voltage_in_closed_form():
    round_ = changed(ROUND, r_s_ohm=0.0, beyond="limit", current_max_a=1000.0)
    w = 4 * 900.0
    p = points(round_, torque_nm=[5000.0, -5000.0], speed_rad_s=[900.0, -900.0])
    # analytic, without resistance: i_d = -psi/L, T = 3/2 p psi V/(w L)
    assert p.torque_nm == pytest.approx(np.array([1, -1]) * 1.5 * 4 * 0.11 * V_MAX / (w * 0.5e-3), rel=1e-9)
    assert p.i_d_a == pytest.approx(-0.11 / 0.5e-3, rel=1e-5) and (p.i_peak_a < np.sqrt(2.0) * 1000.0).all()
    reluctance = changed(RELUCTANCE, r_s_ohm=0.0, beyond="limit")
    p = points(reluctance, torque_nm=5000.0, speed_rad_s=500.0)
    # analytic: both fluxes alike
    assert p.torque_nm == pytest.approx(3.0 * (8.0 - 1.2) * 1e3 / (8.0 * 1.2) * (V_MAX / 1000.0) ** 2 / 2.0, rel=1e-9)


def test_six_step_reaches_further():
    machine = changed(WINCH, beyond="limit", current_max_a=250.0)
    sine, injected, six = (points(machine, torque_nm=3000.0, speed_rad_s=90.0, mod_index_max=m) for m in (1.0, M_MAX, 4 / np.pi))
    assert sine.torque_nm < injected.torque_nm < six.torque_nm
    # analytic: fundamental of six-step
    assert six.v_peak_v == pytest.approx(2 / np.pi * V_DC) and six.mod_index == pytest.approx(4 / np.pi)


@pytest.mark.parametrize("machine", [WINCH, ASSISTED, ROUND, MAPPED, LISTED])
@pytest.mark.parametrize(("wanted", "speed"), [(9000.0, 20.0), (9000.0, 75.0), (-9000.0, 75.0), (9000.0, -110.0), (-9000.0, 0.0)])
def test_limited_torque_against_a_dense_scan(machine, wanted, speed):
    """Independent code: all currents on a grid within the limits of voltage and current."""
    limited = changed(machine, beyond="limit", current_max_a=280.0)
    p = points(limited, torque_nm=wanted, speed_rad_s=speed)
    top, w, way = np.sqrt(2.0) * 280.0, machine.pole_pairs * abs(speed), np.sign(wanted) * (-1.0 if speed < 0 else 1.0)
    size, angle = np.meshgrid(np.linspace(0, top, 801), np.linspace(0, np.pi, 1601), indexing="ij")
    i_d, i_q = size * np.cos(angle), way * size * np.sin(angle)
    if machine in (MAPPED, LISTED):
        t, v = torque(machine, i_d, i_q), volts(machine, w, i_d, i_q)
    else:
        psi_d, psi_q, r = machine.psi_pm_wb + machine.l_d_h * i_d, machine.l_q_h * i_q, machine.r_s_ohm
        t, v = 1.5 * machine.pole_pairs * (psi_d * i_q - psi_q * i_d), np.hypot(r * i_d - w * psi_q, r * i_q + w * psi_d)
    most = np.abs(t)[(v <= V_MAX) & (t * way >= 0.0)].max()
    assert most <= abs(p.torque_nm[0]) * (1 + 1e-6) and abs(p.torque_nm[0]) <= most * 1.005
    assert np.sign(p.torque_nm[0]) == np.sign(wanted)
    assert p.v_peak_v[0] <= V_MAX * (1 + 1e-12) and p.i_peak_a[0] <= top * (1 + 1e-12)
    assert p.torque_missing_nm[0] == pytest.approx(9000.0 - abs(p.torque_nm[0]))


def test_row_within_the_limits_is_left_alone():
    duty = {"torque_nm": [700.0, -500.0, 3000.0], "speed_rad_s": [70.0, -80.0, 90.0]}
    p = points(changed(WINCH, beyond="limit", current_max_a=280.0), **duty)
    q = points(WINCH, torque_nm=duty["torque_nm"][:2], speed_rad_s=duty["speed_rad_s"][:2])
    assert p.rows(slice(2)).i_d_a.tolist() == q.i_d_a.tolist() and p.torque_missing_nm[:2].tolist() == [0.0, 0.0]
    assert q.torque_missing_nm.tolist() == [0.0, 0.0]
    shortfall = Shortfall.of(p, np.array([10.0, 20.0, 30.0]), np.array([10.0, 10.0, 5.0]))
    assert (shortfall.rows, shortfall.time_s, shortfall.torque_at_s) == (1, 5.0, 30.0)
    assert Shortfall.of(q, np.array([10.0, 20.0]), np.array([10.0, 10.0])).words() == ()


@settings(derandomize=True, max_examples=40, deadline=None)
@given(st.sampled_from([WINCH, ROUND, ASSISTED, MAPPED]), st.floats(0.0, 120.0), st.floats(0.0, 40.0), st.sampled_from([1.0, -1.0]))
def test_faster_is_never_stronger(machine, speed, more, sign):
    # without resistance: with it, braking gains by speed
    machine = changed(machine, r_s_ohm=0.0, beyond="limit", current_max_a=260.0)
    try:
        p = points(machine, torque_nm=sign * 9000.0, speed_rad_s=[speed, speed + more])
    except InputError:
        assume(False)  # back-EMF beyond what the current weakens
    assert abs(p.torque_nm[1]) <= abs(p.torque_nm[0]) * (1 + 1e-6)


def test_limits_in_words():
    with pytest.raises(InputError, match=r"row 1 .*2000 N m .*wants 2\d\d\.?\d* A rms; allowed: \d+\.?\d* N m at this speed with at most 346\.4 V .* and 150 A rms"):
        points(changed(WINCH, current_max_a=150.0), torque_nm=2000.0, speed_rad_s=20.0)
    # the field cannot be weakened enough by the current there is, not even without torque
    with pytest.raises(InputError, match="row 1 .*nothing, not even without torque"):
        points(changed(WINCH, beyond="limit", current_max_a=30.0), torque_nm=10.0, speed_rad_s=150.0)
    with pytest.raises(InputError, match="beyond = 'limit'.*a torque"):
        points(changed(WINCH, beyond="limit"), current_a=10.0, speed_rad_s=1.0)


def test_limit_at_standstill():
    p = points(changed(WINCH, beyond="limit"), torque_nm=[3000.0, -3000.0], speed_rad_s=0.0, v_dc=8.0)
    # analytic: the current is what the voltage drives through the resistance; its torque the most for it
    size = M_MAX * 4.0 / 0.018
    best = minimize_scalar(lambda b: -torque_of_currents_nm(WINCH, size * np.cos(b), size * np.sin(b)), bounds=(0, np.pi), options={"xatol": 1e-10})
    assert p.torque_nm == pytest.approx([-best.fun, best.fun], rel=1e-8) and p.mod_index == pytest.approx(M_MAX)


# --- files -----------------------------------------------------------------------------------


def _without(*names, **values):
    return {k: v for k, v in (GRID | values).items() if k not in names}


@pytest.mark.parametrize(
    ("saturation", "fragments"),
    [
        (_without("psi_q_wb"), ["psi_d_wb and psi_q_wb, or"]),
        (_without("over"), ["saturation.over", "required"]),
        (_without(over="speed"), ["speed", "dq, current"]),
        (_without(i_d_a=I_D[::-1].tolist()), ["saturation.i_d_a", "rise from point to point"]),
        (_without(i_d_a=(I_D - 200).tolist()), ["saturation.i_d_a", "holds 0 A"]),
        (_without(i_q_a=(I_Q + 1).tolist()), ["saturation.i_q_a", "mirror image"]),
        (_without(psi_d_wb=PSI_D.T.tolist()), ["saturation.psi_d_wb", "13 rows of 15", "15 rows (i_d_a) of 13"]),
        (_without(psi_q_wb=PSI_D.tolist()), ["saturation.psi_q_wb", "where i_q is 0"]),
        (_without(psi_d_wb=PSI_D[::-1].tolist()), ["saturation.psi_d_wb", "rise with i_d"]),
        (_without(psi_q_wb=(-PSI_Q).tolist()), ["saturation.psi_q_wb", "rise with i_q"]),
        ({"over": "current", "i_peak_a": [0.0, 100.0], "l_d_h": [1e-3, 1e-3], "l_q_h": [1e-3], "psi_pm_wb": [0.1, 0.1]}, ["saturation.l_q_h", "1 values"]),
        ({"over": "current", "i_peak_a": [1.0, 100.0], "l_d_h": [1e-3, 1e-3], "l_q_h": [1e-3, 1e-3], "psi_pm_wb": [0.1, 0.1]}, ["saturation.i_peak_a", "0 A"]),
        ({"over": "current", "i_peak_a": [0.0, 50.0, 100.0], "l_d_h": [1e-3] * 3, "l_q_h": [2e-3, 2e-3, 1e-3], "psi_pm_wb": [0.1] * 3}, ["saturation.l_q_h", "rising flux"]),
        ({"over": "current", "i_peak_a": [0.0, 100.0], "l_d_h": [1e-3, 1e-3], "l_q_h": [20.0, 20.0], "psi_pm_wb": [0.1, 0.1]}, ["saturation.l_q_h", "henry"]),
    ],
)
def test_broken_tables(saturation, fragments):
    assert isinstance(parse_model({**BASE, "saturation": GRID}, SynchronousMachine, "study.toml").saturation, DqTable)
    assert isinstance(LISTED.saturation, CurrentTable)
    with pytest.raises(InputError) as caught:
        parse_model({**BASE, "saturation": saturation}, SynchronousMachine, "study.toml")
    for fragment in ["study.toml", *fragments]:
        assert fragment in str(caught.value)


def test_table_or_constants_but_not_both():
    with pytest.raises(InputError, match="field l_d_h.*nothing.*section saturation"):
        parse_model(BASE, SynchronousMachine, "study.toml")
    with pytest.raises(InputError, match=r"field l_d_h.*value 0\.001 beside a section saturation"):
        parse_model({**BASE, "l_d_h": 1e-3, "saturation": GRID}, SynchronousMachine, "study.toml")
