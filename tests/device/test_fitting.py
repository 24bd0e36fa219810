"""Foster branches: networks found again, bodies that are no networks, scatter, and curves that are refused."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import expm

from mission.device.fitting import FosterFit, fit_foster, foster_z_th_k_per_w
from mission.errors import InputError, RangeError

# A four-branch network of a module's size.
R_K_PER_W, TAU_S = (0.008, 0.035, 0.045, 0.012), (0.001, 0.015, 0.08, 0.6)
TIME_S = np.geomspace(1e-4, 5.0, 60)


def step_response(time_s, r_k_per_w, tau_s):
    """One number at a time: the twin of the array code."""
    return np.array([sum(r * (1.0 - np.exp(-t / tau)) for r, tau in zip(r_k_per_w, tau_s)) for t in time_s])


def test_impedance_against_single_numbers():
    t = np.array([0.0, 1e-6, 1e-3, 0.05, 3.0])
    # independent code
    assert foster_z_th_k_per_w(t, R_K_PER_W, TAU_S) == pytest.approx(step_response(t, R_K_PER_W, TAU_S), rel=1e-9, abs=1e-15)
    assert foster_z_th_k_per_w(t.reshape(5, 1), R_K_PER_W, TAU_S).shape == (5, 1)
    assert float(foster_z_th_k_per_w(0.05, R_K_PER_W, TAU_S)) == pytest.approx(step_response([0.05], R_K_PER_W, TAU_S)[0])
    with pytest.raises(RangeError, match="time_s"):
        foster_z_th_k_per_w([-1.0], R_K_PER_W, TAU_S)


def test_a_network_is_found_again():
    fit = fit_foster(TIME_S, step_response(TIME_S, R_K_PER_W, TAU_S))
    # analytic: the curve is this network; five digits are kept
    assert fit.r_k_per_w == pytest.approx(R_K_PER_W, rel=1e-3)
    assert fit.tau_s == pytest.approx(TAU_S, rel=1e-3)
    assert fit.n_branches == 4 and fit.residual_relative < 1e-3
    assert fit.r_total_k_per_w == pytest.approx(0.1, rel=1e-4)
    assert "4 branches meet 60 points from 0.0001 to 5 s" in fit.message


def test_a_ladder_of_cauer_is_found_as_its_foster_network():
    """A three-stage ladder integrated as a state space; its Foster form is published with a network-conversion library."""
    r, c = np.array([0.1, 0.5, 1.2]), np.array([0.3, 0.8, 2.0])
    # stage k: capacity c_k, resistance r_k to the next node, the last to ground
    a = np.zeros((3, 3))
    for k in range(3):
        a[k, k] -= 1.0 / (r[k] * c[k])
        if k:
            a[k, k] -= 1.0 / (r[k - 1] * c[k])
            a[k, k - 1] = 1.0 / (r[k - 1] * c[k])
        if k < 2:
            a[k, k + 1] = 1.0 / (r[k] * c[k])
    b = np.array([1.0 / c[0], 0.0, 0.0])
    t = np.geomspace(1e-3, 40.0, 80)
    z = np.array([np.linalg.solve(a, (expm(a * x) - np.eye(3)) @ b)[0] for x in t])
    fit = fit_foster(t, z)
    # published: R 1.54750524, 0.20208871, 0.05040605; tau 3.93801938, 0.34050260, 0.02147802
    assert fit.r_k_per_w == pytest.approx([0.05040605, 0.20208871, 1.54750524], rel=2e-3)
    assert fit.tau_s == pytest.approx([0.02147802, 0.34050260, 3.93801938], rel=2e-3)


def test_a_slab_has_the_branches_of_its_series():
    """A slab heated on one face, the other held: an endless network, r_n = 8/(pi (2n+1))^2 R, tau_n = 4 T/(pi (2n+1))^2."""
    n = np.arange(4000)
    r, tau = 8.0 / (np.pi * (2 * n + 1)) ** 2 * 0.1, 4.0 / (np.pi * (2 * n + 1)) ** 2 * 0.05
    t = np.geomspace(1e-6, 0.3, 90)
    z = -np.expm1(-t[:, None] / tau) @ r
    fit = fit_foster(t, z)
    assert fit.residual_relative <= 0.01 and 3 <= fit.n_branches <= 6
    assert fit.r_total_k_per_w == pytest.approx(0.1, rel=0.01)
    # analytic (Carslaw and Jaeger 1959, 3.3): followed closely, the slowest branch is that of the slab
    fit = fit_foster(t, z, good=0.002)
    assert fit.residual_relative <= 0.002
    assert fit.r_k_per_w[-1] == pytest.approx(8.0 / np.pi**2 * 0.1, rel=0.03)
    assert fit.tau_s[-1] == pytest.approx(4.0 / np.pi**2 * 0.05, rel=0.03)


networks = st.integers(1, 8).flatmap(
    lambda n: st.tuples(
        st.lists(st.floats(-4.0, 1.0), min_size=n, max_size=n),
        st.lists(st.floats(0.005, 0.1), min_size=n, max_size=n),
        st.floats(-5.5, -4.0),
        st.floats(0.8, 2.0),
        st.integers(45, 200),
    )
)


@settings(max_examples=60, deadline=None)
@given(networks)
def test_any_network_of_up_to_eight_branches_within_one_percent(network):
    log_tau, r, first, last, points = network
    t = np.geomspace(10.0**first, 10.0**last, points)
    z = step_response(t, r, 10.0 ** np.array(log_tau))
    fit = fit_foster(t, z)
    # independent code: the residual is what it says, and within one percent
    again = np.max(np.abs(step_response(t, fit.r_k_per_w, fit.tau_s) / z - 1.0))
    assert again == pytest.approx(fit.residual_relative, abs=1e-9)
    assert fit.residual_relative <= 0.01
    assert min(fit.r_k_per_w) > 0.0 and fit.n_branches == len(fit.tau_s) <= 8
    assert all(b / a > 1.499 for a, b in zip(fit.tau_s, fit.tau_s[1:]))


@pytest.mark.parametrize("growth", [1.0, 1.5, 2.0, 3.0, 5.0])
def test_eight_branches_a_decade_apart(growth):
    """The widest curve there is: where six branches leave more, seven and eight are tried."""
    tau = 10.0 ** np.arange(-6, 2)
    r = growth ** np.arange(8.0) / np.sum(growth ** np.arange(8.0))
    t = np.geomspace(2e-7, 100.0, 200)
    fit = fit_foster(t, step_response(t, r, tau))
    assert fit.residual_relative <= 0.01
    assert fit.n_branches > 6 and "6 branches left more than 1 %" in fit.message


@pytest.mark.parametrize("noise", [0.002, 0.005, 0.01, 0.02])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_scatter_is_not_followed(noise, seed):
    rng = np.random.default_rng(seed)
    true = step_response(TIME_S, R_K_PER_W, TAU_S)
    fit = fit_foster(TIME_S, true * (1.0 + noise * rng.standard_normal(TIME_S.size)))
    # analytic: closer to the truth than the points are, and no more branches than the truth has, give or take one
    assert np.sqrt(np.mean((fit.z_th_k_per_w(TIME_S) / true - 1.0) ** 2)) < 0.7 * noise
    assert 3 <= fit.n_branches <= 5
    assert fit.rms < 1.3 * noise
    if fit.residual_relative > 0.01:
        assert "more branches do no better" in fit.message


def test_one_slip_does_not_bend_the_rest():
    true = step_response(TIME_S, R_K_PER_W, TAU_S)
    slipped = true.copy()
    slipped[30] *= 1.04
    fit = fit_foster(TIME_S, slipped)
    assert fit.residual_at_s == pytest.approx(TIME_S[30])
    assert np.max(np.abs(fit.z_th_k_per_w(TIME_S) / true - 1.0)) < 0.01


def test_how_densely_a_stretch_was_digitised_does_not_matter():
    """Even steps of time put nearly all points at the end; the beginning counts nevertheless."""
    t = np.linspace(0.0, 5.0, 4001)
    fit = fit_foster(t, step_response(t, R_K_PER_W, TAU_S))
    assert fit.residual_relative < 0.002
    dense = np.concatenate([np.geomspace(1e-4, 1.0, 40), np.linspace(1.001, 5.0, 3000)])
    fit = fit_foster(dense, step_response(dense, R_K_PER_W, TAU_S))
    assert fit.residual_relative < 0.002 and fit.tau_s[0] == pytest.approx(0.001, rel=0.05)


@settings(max_examples=15, deadline=None)
@given(st.floats(0.01, 100.0), st.floats(0.01, 100.0))
def test_scaling_time_and_resistance_scales_the_branches(by_time, by_resistance):
    z = step_response(TIME_S, R_K_PER_W, TAU_S)
    fit = fit_foster(TIME_S * by_time, z * by_resistance)
    assert fit.r_k_per_w == pytest.approx(np.multiply(R_K_PER_W, by_resistance), rel=2e-3)
    assert fit.tau_s == pytest.approx(np.multiply(TAU_S, by_time), rel=2e-3)


def test_number_of_branches_asked_for():
    z = step_response(TIME_S, R_K_PER_W, TAU_S)
    largest = [fit_foster(TIME_S, z, branches=n).residual_relative for n in (1, 2, 3, 4)]
    assert largest == sorted(largest, reverse=True) and largest[0] > 0.4 and largest[-1] < 1e-3
    assert "with the number of branches asked for" in fit_foster(TIME_S, z, branches=2).message
    many = fit_foster(TIME_S, z, branches=7)
    assert many.n_branches < 7 and "came out empty" in many.message and many.residual_relative < 1e-3
    for wrong in (0, 9, True, 2.5):
        with pytest.raises(InputError, match="branches"):
            fit_foster(TIME_S, z, branches=wrong)


def test_neighbouring_time_constants_keep_their_distance():
    t = np.geomspace(1e-3, 10.0, 80)
    z = step_response(t, [0.03, 0.03, 0.03, 0.03], [0.05, 0.07, 0.1, 0.14])
    fit = fit_foster(t, z, smallest_ratio=3.0)
    assert all(b / a > 2.999 for a, b in zip(fit.tau_s, fit.tau_s[1:])) and fit.residual_relative <= 0.01
    with pytest.raises(RangeError, match="smallest_ratio"):
        fit_foster(t, z, smallest_ratio=1.0)


def test_a_curve_cut_short_says_what_is_not_in_it():
    t = np.geomspace(1e-5, 0.2, 60)
    fit = fit_foster(t, step_response(t, R_K_PER_W, TAU_S))
    assert fit.residual_relative <= 0.01 and "still rises at its end" in fit.message


def test_a_curve_for_rare_pulses_is_told():
    """Duty 0.05: the curve starts at 5 % of the resistance, which then rises; only the beginning shows it."""
    t = np.geomspace(1e-5, 5.0, 60)
    fit = fit_foster(t, 0.05 * 0.1 + 0.95 * step_response(t, R_K_PER_W, TAU_S))
    assert "0.005 K/W of it have risen before the first point" in fit.message and "single pulse" in fit.message


def test_few_points_and_a_point_at_zero():
    fit = fit_foster([0.0, 1e-3, 1e-2, 1e-1, 1.0], [0.0, 0.01, 0.03, 0.06, 0.1])
    assert isinstance(fit, FosterFit) and fit.n_branches <= 2
    assert fit_foster(TIME_S, step_response(TIME_S, R_K_PER_W, TAU_S)) == fit_foster(list(TIME_S), list(step_response(TIME_S, R_K_PER_W, TAU_S)))


GOOD_Z = step_response(TIME_S, R_K_PER_W, TAU_S)


def changed(k, value):
    z = GOOD_Z.copy()
    z[k] = value
    return z


NO_STEP_RESPONSES = [
    ("nan", TIME_S, changed(7, np.nan), [r"z_th_k_per_w\[7\]", "nan"]),
    ("negative time", TIME_S - 0.5, GOOD_Z, [r"time_s\[0\]", "at least 0 s"]),
    ("lengths", TIME_S[:-1], GOOD_Z, ["two lists of one length"]),
    ("three points", TIME_S[:3], GOOD_Z[:3], ["3 points", "at least 4 points"]),
    ("times not rising", TIME_S[::-1], GOOD_Z[::-1], ["point 2", "times that rise"]),
    ("twice one time", np.insert(TIME_S, 4, TIME_S[4]), np.insert(GOOD_Z, 4, GOOD_Z[4]), ["point 6", "remove doubles"]),
    ("zero", TIME_S, changed(0, 0.0), ["point 1", "above 0 K/W"]),
    ("offset at zero", np.insert(TIME_S, 0, 0.0), np.insert(GOOD_Z, 0, 0.03), ["0.03 K/W at 0 s", "offset"]),
    ("falling", TIME_S, GOOD_Z[::-1], ["falls from 0.0999971 to", "cooling down"]),
    ("cooling at the end", TIME_S, np.where(TIME_S > 1.0, GOOD_Z * 0.93, GOOD_Z), ["falls from", "rises from nothing"]),
    ("a point far too low", TIME_S, changed(40, 0.8 * GOOD_Z[40]), ["point 41", "falls from", "check the point"]),
    ("level", TIME_S, np.full(60, 0.1), ["hardly rises, from 0.1 to 0.1"]),
    (
        "repeated pulses",
        TIME_S,
        0.05 + 0.5 * GOOD_Z[-1] * (TIME_S > 0.01) * (1 - np.exp(-(TIME_S - 0.01))),
        ["starts on a level (0.05 K/W at 0.0001 s", "duty zero"],
    ),
    (
        "duty 0.5",
        np.geomspace(1e-6, 5, 60),
        0.05 + 0.5 * step_response(np.geomspace(1e-6, 5, 60), R_K_PER_W, TAU_S),
        ["starts on a level", "single pulse"],
    ),
    ("delayed", TIME_S, 0.1 * np.exp(-0.05 / TIME_S) + 1e-12, ["faster than in proportion to time", "neighbour"]),
    ("square of time", TIME_S, TIME_S**2, ["faster than in proportion to time"]),
]


@pytest.mark.parametrize(("t", "z", "fragments"), [c[1:] for c in NO_STEP_RESPONSES], ids=[c[0] for c in NO_STEP_RESPONSES])
def test_what_is_no_step_response_is_refused_in_words(t, z, fragments):
    import re

    with pytest.raises(InputError) as caught:
        fit_foster(t, z, where="zth.csv")
    text = str(caught.value)
    assert "allowed:" in text
    missing = [f for f in fragments if not re.search(f if "\\" in f else re.escape(f), text)]
    assert not missing, f"{missing} not in: {text}"
