"""Modules in a row: against the unsymmetric full system, stepped with matrix exponentials (*independent*), and steady by hand."""

import numpy as np
import pytest
from scipy.linalg import expm

from mission.device import load_module
from mission.thermal import CauerLadder, SinkPath, inverter_modes, inverter_network

RISE, R, C = 0.0016, 0.045, 700.0
HALF_BRIDGE = load_module("kite-300").model_copy(update={"arrangement": "half-bridge"})


def row(order, rise=RISE, ladder=True):
    one = CauerLadder(np.array([R]), np.array([C])) if ladder else R
    return SinkPath((one, one, one), coolant_rise_k_per_w=rise, first_to_last=order)


@pytest.mark.parametrize("module", ["half-bridge", "curlew-300"])
@pytest.mark.parametrize("ladder", [True, False])
def test_steady_rise_is_what_the_coolant_took_up(module, ladder):
    """By hand: every watt upstream lifts all chips and case points behind it by the coolant's rise."""
    module = HALF_BRIDGE if module == "half-bridge" else load_module(module)
    plain, behind = inverter_modes(module, row((2, 0, 1), 0.0, ladder)), inverter_modes(module, row((2, 0, 1), RISE, ladder))
    n = plain.n_chips
    leg = (np.arange(n) % 6) // 2
    place = np.array([1, 2, 0])[leg]  # c first, then a, then b
    want = RISE * (place[:, None] > place[None, :])
    np.testing.assert_allclose(behind.r_th_k_per_w() - plain.r_th_k_per_w(), want, atol=5e-4 * RISE)
    np.testing.assert_allclose(behind.r_case_k_per_w() - plain.r_case_k_per_w(), want, atol=5e-4 * RISE)
    assert behind.relative_bound < 0.003


def test_course_is_that_of_the_whole_system():
    """dT/dt of all nodes with local coolant temperatures that depend on the heat given off upstream, heat taken back included."""
    module = HALF_BRIDGE
    order = (0, 1, 2)
    full = inverter_network(module, row(order, 0.0))
    net = inverter_modes(module, row(order))
    m = full.c_j_per_k.size
    # heat that each sink gives to its coolant: (T_surface - T_local)/R; T_local = rise times what the sinks before gave
    give = np.zeros((3, m))
    g = full.g_w_per_k.copy()
    for k in range(3):
        give[k] = full.out_surface[k] / R - RISE / R * give[:k].sum(axis=0)
        g -= np.outer(full.out_surface[k], RISE / R * give[:k].sum(axis=0))
    a = -g / full.c_j_per_k[:, None]
    heat = np.zeros(12)
    heat[[0, 1, 6, 7]] = (300.0, 250.0, 90.0, 80.0)  # leg a only
    force = full.out_junction.T @ heat / full.c_j_per_k
    steady = np.linalg.solve(a, -force)
    seen = []
    for t in (0.3, 2.0, 8.0, 20.0, 45.0, 100.0, 400.0):
        y = steady - expm(a * t) @ steady
        grow = -np.expm1(-net.lam_local_per_s * t) / net.lam_local_per_s
        got = (net.rho_local * grow).sum(axis=0) * heat + net.c_shared @ ((net.b_shared @ heat) * -np.expm1(-net.lam_shared_per_s * t) / net.lam_shared_per_s)
        want = full.out_junction @ y
        behind = np.arange(12) % 6 >= 2
        assert np.abs(got - want)[behind].max() < 0.04 * RISE * heat.sum()  # what the middle module takes back on the way
        assert np.abs(got - want)[~behind].max() < 0.002 * want.max()
        seen.append(want[behind].max())
    assert seen[-1] == pytest.approx(RISE * heat.sum(), rel=1e-3)
    assert net.relative_bound < 0.003
