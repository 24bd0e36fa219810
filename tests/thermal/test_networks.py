"""Foster branches, Cauer ladders, and the textbook cases that end in a closed form."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.signal import lfilter

from mission.errors import InputError, RangeError
from mission.thermal import CauerLadder, FosterNetwork, cauer_to_foster, foster_to_cauer, reduce_to_modes, unreduced
from mission.thermal.measured import many_branches_to_cauer

from .helpers import foster_impedance, full_response, ladder_impedance, single

FOUR = FosterNetwork([0.008, 0.035, 0.045, 0.012], [0.001, 0.015, 0.08, 0.6])


# Analytic: continued fractions of small rationals, done by hand (9/5, 1/5, 2/3, 25/3).
@pytest.mark.parametrize(("r", "tau", "cauer_r", "cauer_c"), [
    ([1.0, 1.0], [1.0, 2.0], [9 / 5, 1 / 5], [2 / 3, 25 / 3]),
    ([0.1, 0.2], [0.01, 0.1], [0.14117647, 0.15882353], [0.083333333, 0.53518519]),
    ([0.3], [6.0], [0.3], [20.0]),
])
@pytest.mark.parametrize("turn", [1, -1])
def test_foster_to_cauer(r, tau, cauer_r, cauer_c, turn):
    ladder = foster_to_cauer(FosterNetwork(r[::turn], tau[::turn]))
    np.testing.assert_allclose(ladder.r_k_per_w, cauer_r, rtol=5e-8)
    np.testing.assert_allclose(ladder.c_j_per_k, cauer_c, rtol=5e-8)


# Input set as in the documentation of a network-conversion library; values by two methods (eigenproblem, continued fraction back).
def test_cauer_to_foster_and_back():
    ladder = CauerLadder([0.1, 0.5, 1.2], [0.3, 0.8, 2.0])
    foster = cauer_to_foster(ladder)
    np.testing.assert_allclose(foster.r_k_per_w, [1.54750524, 0.20208871, 0.05040605], rtol=2e-7)
    np.testing.assert_allclose(foster.tau_s, [3.93801938, 0.34050260, 0.02147802], rtol=2e-7)
    back = foster_to_cauer(foster)
    np.testing.assert_allclose(back.r_k_per_w, ladder.r_k_per_w, rtol=1e-8)
    np.testing.assert_allclose(back.c_j_per_k, ladder.c_j_per_k, rtol=1e-8)


def test_one_stage_to_foster():
    foster = cauer_to_foster(CauerLadder([0.3], [20.0]))
    assert foster.r_k_per_w.tolist() == pytest.approx([0.3]) and foster.tau_s.tolist() == pytest.approx([6.0])


BRANCHES = st.lists(st.tuples(st.floats(1e-3, 1.0), st.floats(-4.0, 2.0)), min_size=1, max_size=8)


@settings(derandomize=True, max_examples=150, deadline=None)
@given(BRANCHES)
def test_ladder_has_the_impedance_of_the_branches(branches):
    """Compared on the imaginary and the real axis: no inversion of the algorithm is used."""
    r, tau = np.array([b[0] for b in branches]), 10.0 ** np.array([b[1] for b in branches])
    ladder = foster_to_cauer(FosterNetwork(r, tau))
    assert ladder.r_k_per_w.sum() == pytest.approx(r.sum(), rel=1e-12)
    assert 1 / ladder.c_j_per_k[0] == pytest.approx((r / tau).sum(), rel=1e-12)  # analytic: Z(s) -> 1/(s C1) far up
    rate = np.geomspace(1e-4, 1e6, 60)
    for s in (1j * rate, rate + 0j):
        np.testing.assert_allclose(ladder_impedance(ladder.r_k_per_w, ladder.c_j_per_k, s), foster_impedance(r, tau, s), rtol=1e-10)


@settings(derandomize=True, max_examples=100, deadline=None)
@given(st.lists(st.tuples(st.floats(0.01, 1.0), st.floats(0.3, 0.85)), min_size=1, max_size=8))
def test_round_trip_over_six_decades(branches):
    """Time constants at least a factor of two apart: there and back to eight digits."""
    r = np.array([b[0] for b in branches])
    tau = 10.0 ** (np.cumsum([b[1] for b in branches]) - 4.0)
    back = cauer_to_foster(foster_to_cauer(FosterNetwork(r, tau)))
    np.testing.assert_allclose(back.tau_s[::-1], tau, rtol=1e-8)
    np.testing.assert_allclose(back.r_k_per_w[::-1], r, rtol=1e-8)


# Analytic: n equal stages R, C with the far end held; rates 4/(RC) sin^2((2k - 1) pi/(2 (2n + 1))), shapes are cosines.
@pytest.mark.parametrize("n", [1, 2, 7, 90, 300])
def test_even_line(n):
    foster = cauer_to_foster(CauerLadder(np.full(n, 0.02), np.full(n, 3.0)))
    angle = (2 * np.arange(1, n + 1) - 1) * np.pi / (2 * (2 * n + 1))
    rate = 4 / (0.02 * 3.0) * np.sin(angle) ** 2
    np.testing.assert_allclose(foster.tau_s, 1 / rate, rtol=1e-11)
    np.testing.assert_allclose(foster.r_k_per_w, 4 / (2 * n + 1) * np.cos(angle) ** 2 / 3.0 / rate, rtol=1e-9, atol=1e-17)


@settings(derandomize=True, max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(60, 120), st.floats(0.0, 10.0), st.sampled_from(["rough", "finer downwards", "coarser downwards"]))
def test_long_ladders_over_many_decades(seed, n, decades, order):
    """The impedance of the branches is that of the ladder, evaluated from its far end up (sums of positive terms only on the real axis)."""
    rng = np.random.default_rng(seed)
    r, c = 10.0 ** rng.uniform(-0.5 * decades, 0.5 * decades, (2, n))
    if order != "rough":
        r, c = (np.sort(v)[:: -1 if order == "finer downwards" else 1] for v in (r, c))
    foster = cauer_to_foster(CauerLadder(r, c))
    assert foster.r_k_per_w.sum() == pytest.approx(r.sum(), rel=1e-12)
    assert (foster.r_k_per_w / foster.tau_s).sum() * c[0] == pytest.approx(1.0, rel=1e-12)
    rate = np.geomspace(1e-3 / foster.tau_s.max(), 1e3 / foster.tau_s.min(), 100)
    for s in (1j * rate, rate + 0j):
        np.testing.assert_allclose(foster_impedance(foster.r_k_per_w, foster.tau_s, s), ladder_impedance(r, c, s), rtol=1e-10)


@pytest.mark.parametrize("decades", [9, 12, 18])
def test_ninety_branches_there_and_back(decades):
    """Independent code on the way there: bidiagonal form of the branches, without an eigenproblem."""
    rng = np.random.default_rng(decades)
    r, tau = 10 ** rng.uniform(-2, 0, 90), np.sort(10 ** rng.uniform(-0.5 * decades, 0.5 * decades, 90))
    back = cauer_to_foster(many_branches_to_cauer(FosterNetwork(r, tau)))
    np.testing.assert_allclose(back.tau_s[::-1], tau, rtol=1e-11)
    np.testing.assert_allclose(back.r_k_per_w[::-1], r, rtol=1e-8)


def test_stages_that_no_number_holds_are_refused():
    with pytest.raises(InputError, match="check resistances and heat capacities for wrong units"):
        cauer_to_foster(CauerLadder([1e-200, 1e200], [1e-200, 1e200]))


@pytest.mark.parametrize("seed", range(12))
def test_far_beyond_any_real_ladder_it_is_right_or_refused(seed):
    """Stages strewn over a hundred decades: some of these lose the slow branches, and must say so."""
    r, c = 10.0 ** np.random.default_rng(seed).uniform(-25, 25, (2, 90))
    try:
        foster = cauer_to_foster(CauerLadder(r, c))
    except InputError as refused:
        assert "that the machine's numbers can hold together" in str(refused)
        return
    s = np.array([1e-3 / foster.tau_s.max(), 1e3 / foster.tau_s.min()]) + 0j
    np.testing.assert_allclose(foster_impedance(foster.r_k_per_w, foster.tau_s, s), ladder_impedance(r, c, s), rtol=1e-8)


def test_equal_time_constants_are_one_branch():
    ladder = foster_to_cauer(FosterNetwork([0.1, 0.2, 0.3], [5.0, 1.0, 5.0]))
    assert ladder.r_k_per_w.size == 2
    s = 1j * np.geomspace(1e-3, 1e3, 20)
    np.testing.assert_allclose(ladder_impedance(ladder.r_k_per_w, ladder.c_j_per_k, s), foster_impedance([0.2, 0.4], [1.0, 5.0], s), rtol=1e-12)


@pytest.mark.parametrize("spread", [1e-2, 1e-3, 1e-4, 1e-6, 1e-9])
@pytest.mark.parametrize("branches", [2, 4, 6])
def test_nearly_equal_time_constants_keep_the_resistance(spread, branches):
    """Fitted data-sheet branches may lie close together; the steady rise must still be the sum of the resistances."""
    tau = 0.1 * (1 + spread * np.arange(branches))
    full = single(foster_to_cauer(FosterNetwork(np.full(branches, 0.02), tau)))
    assert full.r_th_k_per_w()[0, 0] == pytest.approx(0.02 * branches, rel=1e-6)
    lam, junction, _, _ = full.modes()
    assert (lam > 0).all()
    assert (junction[0] ** 2 / lam).sum() == pytest.approx(0.02 * branches, rel=1e-6)
    want = 0.02 * -np.expm1(-0.2 / tau).sum()
    assert full.step_response_k_per_w([0.2], 0)[0, 0] == pytest.approx(want, rel=1e-6)


@settings(derandomize=True, max_examples=60, deadline=None)
@given(BRANCHES.filter(lambda b: np.all(np.diff(sorted(x[1] for x in b)) > 0.05)), st.floats(-5.0, 3.0))
def test_step_response_of_the_ladder_network(branches, log_t):
    r, tau = np.array([b[0] for b in branches]), 10.0 ** np.array([b[1] for b in branches])
    foster = FosterNetwork(r, tau)
    t = 10.0**log_t
    want = (r * (1 - np.exp(-np.longdouble(t) / tau))).sum()  # the branches as they are defined
    assert float(foster.z_k_per_w(t)) == pytest.approx(float(want), rel=1e-11)
    assert single(foster_to_cauer(foster)).step_response_k_per_w([t], 0)[0, 0] == pytest.approx(float(want), rel=1e-6)


def modes_of(foster, reduced):
    """Decay rates and weights of one chip, straight from the network that the march would get."""
    full = single(foster_to_cauer(foster))
    net = reduce_to_modes(full, relative_tolerance=1e-6) if reduced else unreduced(full)
    lam = np.concatenate([net.lam_local_per_s[:, 0], net.lam_shared_per_s])
    weight = np.concatenate([net.rho_local[:, 0], net.c_shared[0] * net.b_shared[:, 0]])
    return lam, weight


# Analytic: 400 W half of the time; swing = sum P R tanh(T/(4 tau)).
@pytest.mark.parametrize(("foster", "f_hz", "swing_k"), [
    (FOUR, 0.5, 38.4747), (FOUR, 5.0, 27.5463), (FOUR, 50.0, 8.86442),
    (FosterNetwork([0.1], [0.08]), 0.5, 39.9997), (FosterNetwork([0.1], [0.08]), 5.0, 22.1840), (FosterNetwork([0.1], [0.08]), 50.0, 2.49675),
])
@pytest.mark.parametrize("reduced", [False, True])
def test_square_power(foster, f_hz, swing_k, reduced):
    lam, weight = modes_of(foster, reduced)
    keep = np.exp(-lam * 0.5 / f_hz)
    x = np.zeros_like(lam)
    for _ in range(int(20 * f_hz) + 10):  # 20 s: over thirty times the slowest time constant
        x = keep * x + (1 - keep) / lam * 400.0
        top = (weight * x).sum()
        x = keep * x
        bottom = (weight * x).sum()
    assert top - bottom == pytest.approx(swing_k, rel=2e-6)
    assert top + bottom == pytest.approx(400.0 * foster.r_total_k_per_w, rel=2e-6)  # by symmetry


# Independent code: exact propagation with 20 000 steps a period against a series of 3000 harmonics.
@pytest.mark.parametrize(("f_hz", "swing_k", "max_k", "min_k"), [
    (1.0, 53.0273, 54.4854, 1.4581), (5.0, 34.9101, 41.0133, 6.1032), (50.0, 10.1232, 25.6076, 15.4844),
])
@pytest.mark.parametrize("reduced", [False, True])
def test_half_sine_power(f_hz, swing_k, max_k, min_k, reduced):
    lam, weight = modes_of(FOUR, reduced)
    n = 20_000
    h = 1 / (f_hz * n)
    p = 200 * np.pi * np.maximum(np.sin(2 * np.pi * (np.arange(n) + 0.5) / n), 0.0)
    rise = np.zeros(n)
    for rate, w in zip(lam, weight):
        a = np.exp(-rate * h)
        forced = lfilter([(1 - a) / rate], [1, -a], p)  # from rest; then the periodic start is added
        start = forced[-1] / -np.expm1(-rate / f_hz)
        rise += w * (forced + start * a ** np.arange(1, n + 1))
    assert rise.mean() == pytest.approx(20.0, rel=1e-4)
    assert [np.ptp(rise), rise.max(), rise.min()] == pytest.approx([swing_k, max_k, min_k], rel=1e-3, abs=0)


@settings(derandomize=True, max_examples=25, deadline=None)
@given(st.lists(st.tuples(st.floats(0.0, 500.0), st.floats(1e-4, 5.0)), min_size=1, max_size=6), st.floats(0.05, 0.95))
def test_linear_and_unchanged_by_splitting_a_step(steps, share):
    full = single(foster_to_cauer(FOUR))
    p, h = np.array([[s[0]] for s in steps]), np.array([s[1] for s in steps])
    whole = full_response(full, p, h)[0][-1]
    twice = full_response(full, 2 * p, h)[0][-1]
    split = full_response(full, np.repeat(p, 2, axis=0), np.ravel([h * share, h * (1 - share)], order="F"))[0][-1]
    assert twice == pytest.approx(2 * whole, rel=1e-9, abs=1e-12) and split == pytest.approx(whole, rel=1e-9, abs=1e-12)
    # superposition of the branches' own step responses: the network has no other memory
    left = np.cumsum(h[::-1])[::-1]
    want = sum(pk[0] * (FOUR.z_k_per_w(a) - FOUR.z_k_per_w(a - hk)) for pk, hk, a in zip(p, h, left))
    assert whole[0] == pytest.approx(float(want), rel=1e-7, abs=1e-9)


@pytest.mark.parametrize(("make", "word"), [
    (lambda: FosterNetwork([0.1, -0.1], [1.0, 2.0]), r"r_k_per_w\[1\]: found -0.1 K/W; allowed: above 0"),
    (lambda: FosterNetwork([0.1], [0.0]), r"tau_s\[0\]"), (lambda: FosterNetwork([0.1, 0.2], [1.0]), "1 values beside 2 resistances"),
    (lambda: FosterNetwork([np.nan], [1.0]), "r_k_per_w"), (lambda: FosterNetwork([], []), "resistance"),
    (lambda: CauerLadder([0.1], [0.0]), r"c_j_per_k\[0\]"), (lambda: CauerLadder([0.1, 0.1], [1.0]), "one capacity"),
    (lambda: CauerLadder([[0.1]], [[1.0]]), "c_j_per_k"),
])
def test_bad_networks(make, word):
    with pytest.raises(RangeError, match=word):
        make()
