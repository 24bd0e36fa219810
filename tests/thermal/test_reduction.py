"""The reduced network against the full one: the stated bound must hold, and be small enough."""

from functools import lru_cache

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.device import load_module
from mission.thermal import FixedCooling, FosterCooling, inverter_network, reduce_to_modes, unreduced

from .helpers import full_response, reduced_response

TOLERANCE = 1e-3


def foster(*tau_s):
    return FosterCooling(kind="foster", r_k_per_w=[0.03 / len(tau_s)] * len(tau_s), tau_s=list(tau_s))


COOLINGS = {
    "no capacity": FixedCooling(kind="fixed", r_th_k_per_w=0.03),
    "no capacity, strong": FixedCooling(kind="fixed", r_th_k_per_w=0.004),
    "capacity": FixedCooling(kind="fixed", r_th_k_per_w=0.03, heat_capacity_j_per_k=3000.0),
    "little capacity": FixedCooling(kind="fixed", r_th_k_per_w=0.03, heat_capacity_j_per_k=20.0),
    "0.1 s": foster(0.1),
    "3000 s": foster(3000.0),
    "0.1 and 3000 s": foster(0.1, 3000.0),
    "1, 30, 300 s": foster(1.0, 30.0, 300.0),
    "0.1 to 3000 s": foster(0.1, 3.0, 100.0, 3000.0),
    "2.0 to 2.3 s": foster(2.0, 2.1, 2.2, 2.3),
}
MODULES = ("heron-300", "kite-300")


@lru_cache
def networks(module, cooling):
    full = inverter_network(load_module(module), COOLINGS[cooling])
    return full, reduce_to_modes(full, relative_tolerance=TOLERANCE)


everything = pytest.mark.parametrize(("module", "cooling"), [
    pytest.param(m, c, marks=() if c in ("no capacity", "capacity", "1, 30, 300 s") else pytest.mark.slow) for m in MODULES for c in COOLINGS
])
some = pytest.mark.parametrize(("module", "cooling"), [(m, c) for m in MODULES for c in ("no capacity", "capacity", "1, 30, 300 s")])


@everything
def test_the_bound_meets_the_tolerance(module, cooling):
    assert networks(module, cooling)[1].relative_bound <= TOLERANCE


@everything
def test_the_coolant_bound_is_small(module, cooling):
    """Half a percent of a coolant step: the reduction takes a fifth of this bound against the tolerance."""
    assert networks(module, cooling)[1].coolant_bound <= 5 * TOLERANCE


@everything
def test_the_bound_is_no_smaller_than_the_norm(module, cooling):
    """L1 norm of the difference of impulse responses, on a finer grid of our own that starts at zero; 0.1 % for the two quadratures."""
    full, net = networks(module, cooling)
    lam, junction, _, _ = full.modes()
    t = np.concatenate([[0.0], np.geomspace(1e-6 / lam[-1], 60 / lam[0], 5000)])
    decay, decay_s = np.exp(-np.outer(t, lam)), np.exp(-np.outer(t, net.lam_shared_per_s))
    for j in (0, 3, 6, 11):
        error = decay @ (junction * junction[j]).T - decay_s @ (net.c_shared * net.b_shared[:, j]).T
        error[:, j] -= np.exp(-np.outer(t, net.lam_local_per_s[:, j])) @ net.rho_local[:, j]
        assert (net.bound_k_per_w[:, j] * 1.001 >= np.trapezoid(np.abs(error), t, axis=0)).all()
    steady = np.abs(full.r_th_k_per_w()).sum(axis=1)
    assert net.relative_bound == pytest.approx((net.bound_k_per_w.sum(axis=1) / steady).max(), rel=1e-6)


@everything
def test_steady_state_is_exact_on_the_diagonal_and_within_the_bound_beside_it(module, cooling):
    full, net = networks(module, cooling)
    want, found = full.r_th_k_per_w(), net.r_th_k_per_w()
    np.testing.assert_allclose(np.diag(found), np.diag(want), rtol=1e-8)
    assert (np.abs(found - want) <= net.bound_k_per_w * 1.001 + 1e-12).all()
    case = full.out_case @ np.linalg.solve(full.g_w_per_k, full.out_junction.T)
    # no bound is stated for case points; up to 0.3 % of their rise was measured
    assert (np.abs(net.r_case_k_per_w() - case).sum(axis=1) <= 5 * TOLERANCE * case.sum(axis=1)).all()


POWERS = st.lists(
    st.tuples(st.floats(-3.5, 2.5), st.lists(st.one_of(st.just(0.0), st.floats(0.0, 400.0)), min_size=12, max_size=12)), min_size=1, max_size=8)


@some
@settings(derandomize=True, max_examples=30, deadline=None)
@given(sequence=POWERS)
def test_no_power_sequence_beats_the_bound(module, cooling, sequence):
    full, net = networks(module, cooling)
    p, h = np.array([s[1] for s in sequence]), 10.0 ** np.array([s[0] for s in sequence])
    want, want_case = full_response(full, p, h)
    found, found_case = reduced_response(net, p, h)
    bound = net.error_bound_k(p.max(axis=0))
    assert (np.abs(found - want) <= bound + 1e-6).all()
    assert (np.abs(found_case - want_case) <= 2 * max(bound.max(), TOLERANCE * want.max()) + 1e-6).all()


@some
def test_the_worst_power_sequence_comes_close_but_not_over(module, cooling):
    """Every chip on exactly where the difference of responses helps the error most: the meanest input there is."""
    full, net = networks(module, cooling)
    lam, junction, _, _ = full.modes()
    edges = np.concatenate([[0.0], np.geomspace(1e-5, 20 / lam[0], 150)])
    ago = 0.5 * (edges[1:] + edges[:-1])
    i = 0
    gap = np.empty((ago.size, 12))
    for j in range(12):
        gap[:, j] = np.exp(-np.outer(ago, lam)) @ (junction[i] * junction[j]) - np.exp(-np.outer(ago, net.lam_shared_per_s)) @ (
            net.c_shared[i] * net.b_shared[:, j])
    gap[:, i] -= np.exp(-np.outer(ago, net.lam_local_per_s[:, i])) @ net.rho_local[:, i]
    p, h = np.where(gap > 0, 300.0, 0.0)[::-1], np.diff(edges)[::-1]
    error = full_response(full, p, h)[0][-1, i] - reduced_response(net, p, h)[0][-1, i]
    bound = net.error_bound_k(300.0)[i]
    assert 0.2 * bound < error <= bound * 1.001
    assert net.error_bound_k(np.full(12, 300.0))[i] == pytest.approx(bound, rel=1e-12)


def coolant_gaps(full, net):
    """Full less reduced after the coolant rose by 1 K with no losses: junctions and case points, (t, n) each, first row at once."""
    lam, junction, case, start = full.modes()
    t = np.concatenate([[0.0], np.geomspace(1e-4, 30 / lam[0], 300)])
    decay, decay_s = np.exp(-np.outer(t, lam)), np.exp(-np.outer(t, net.lam_shared_per_s))
    np.testing.assert_allclose(decay[0] @ (junction * start).T, 1.0, rtol=1e-6)  # everything starts 1 K below
    local = np.exp(-t[:, None, None] * net.lam_local_per_s) * net.g_coolant_local  # (t, L, n) at the junctions
    own = net.rho_local != 0.0
    at_case = np.where(own, net.rho_case_local / np.where(own, net.rho_local, 1.0), 0.0)
    return (decay @ (junction * start).T - decay_s @ (net.c_shared * net.g_coolant).T - local.sum(axis=1),
            decay @ (case * start).T - decay_s @ (net.c_case_shared * net.g_coolant).T - (local * at_case).sum(axis=1))


@everything
def test_coolant_step_at_the_junctions(module, cooling):
    full, net = networks(module, cooling)
    gap = np.abs(coolant_gaps(full, net)[0])
    assert gap.max() <= net.coolant_bound * 1.01 + 1e-6
    assert gap[0].max() <= 1e-3  # a jump of the coolant is no jump of a chip


@everything
def test_coolant_step_at_the_case_points(module, cooling):
    """The stated bound holds. It is small where the sink stores heat; without a capacity case points follow at once, in part."""
    full, net = networks(module, cooling)
    assert np.abs(coolant_gaps(full, net)[1]).max() <= net.case_coolant_bound * 1.02 + 1e-9
    assert net.case_coolant_bound <= (0.5 if cooling.startswith("no capacity") else 0.03)


def test_a_looser_tolerance_keeps_fewer_modes():
    full, fine = networks("heron-300", "1, 30, 300 s")
    coarse = reduce_to_modes(full, relative_tolerance=0.05)
    assert coarse.n_modes < fine.n_modes < fine.n_full * 12
    assert fine.relative_bound < coarse.relative_bound <= 0.05


def test_unreduced_has_no_error():
    full = networks("kite-300", "capacity")[0]
    net = unreduced(full)
    p = np.random.default_rng(5).uniform(0, 300, (4, 12))
    h = np.array([1e-3, 0.05, 2.0, 100.0])
    for found, want in zip(reduced_response(net, p, h), full_response(full, p, h)):
        np.testing.assert_allclose(found, want, rtol=1e-7, atol=1e-7)
    assert net.error_bound_k(300.0).max() == 0.0 and net.n_modes == net.n_full == full.c_j_per_k.size


def test_everything_is_finite_and_decays():
    for module in MODULES:
        net = networks(module, "1, 30, 300 s")[1]
        assert (net.lam_local_per_s > 0).all() and (net.lam_shared_per_s > 0).all()
        for a in (net.rho_local, net.rho_case_local, net.b_shared, net.c_shared, net.c_case_shared, net.g_coolant, net.bound_k_per_w):
            assert np.isfinite(a).all()


def test_nearly_equal_sink_branches():
    """Two fitted sink branches 10 ppm apart are one branch; nothing should get worse by them."""
    full = inverter_network(load_module("heron-300"), foster(10.0, 10.0001))
    net = reduce_to_modes(full, relative_tolerance=TOLERANCE)
    assert net.relative_bound <= TOLERANCE and net.coolant_bound <= 5 * TOLERANCE
