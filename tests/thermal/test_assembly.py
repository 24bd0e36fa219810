"""Joined networks: textbook cases on small ones, hand calculation on the inverter."""

import itertools

import numpy as np
import pytest
from scipy.integrate import simpson
from scipy.linalg import expm

from mission.device import load_module, module_from_dict
from mission.errors import InputError
from mission.thermal import (
    CauerLadder,
    FixedCooling,
    FosterCooling,
    FosterNetwork,
    NetworkBuilder,
    foster_to_cauer,
    inverter_network,
    sink_ladder,
    unreduced,
)

from ..device.factories import straight_line_data

HERON, KITE = load_module("heron-300"), load_module("kite-300")


# Published: NAFEMS, The Standard NAFEMS Benchmarks, rev. 3, 1990, test T3: 36.60 degC at 0.08 m after 32 s (exact series 36.6031).
@pytest.mark.parametrize(("cells", "tolerance_k"), [(50, 0.2), (200, 0.05)])
def test_nafems_t3(cells, tolerance_k):
    """The end is held at 100 sin(pi t/40) by heat through a resistance a million times smaller than a cell's."""
    dx, k, rho_c = 0.1 / cells, 35.0, 7200.0 * 440.5
    builder = NetworkBuilder()
    nodes = [builder.node(rho_c * dx) for _ in range(cells - 1)] + [builder.node(rho_c * dx / 2)]
    builder.to_coolant(nodes[0], dx / k)
    for a, b in itertools.pairwise(nodes):
        builder.resistance(a, b, dx / k)
    tiny = 1e-6 * dx / k
    builder.to_coolant(nodes[-1], tiny)
    at = nodes[round(0.8 * cells) - 1]
    net = unreduced(builder.build([nodes[-1]], [at]))
    lam, w, t = net.lam_shared_per_s, np.pi / 40, 32.0
    x = net.b_shared[:, 0] * 100.0 / tiny * (lam * np.sin(w * t) - w * np.cos(w * t) + w * np.exp(-lam * t)) / (lam**2 + w**2)
    assert net.c_shared[0] @ x == pytest.approx(100 * np.sin(w * t), abs=1e-3)
    assert net.c_case_shared[0] @ x == pytest.approx(36.60, abs=tolerance_k)


# Published: F. P. Incropera, D. P. DeWitt et al., "Fundamentals of Heat and Mass Transfer", Ex. 5.1 (from memory of the example;
# recomputed): thermocouple bead, 0.706 mm for a time constant of 1 s, 5.16 s from 25 to 199 degC in gas of 200 degC (book: 5.2).
def test_lumped_sphere():
    d = 0.70588e-3
    builder = NetworkBuilder()
    bead = builder.node(8500 * 400 * np.pi * d**3 / 6)
    builder.to_coolant(bead, 1 / (400 * np.pi * d**2))
    lam, junction, _, coolant = builder.build([bead], [bead]).modes()
    assert 1 / lam[0] == pytest.approx(1.0, rel=1e-5)
    # rise over the gas: starts at 25 - 200
    t_c = 200 + junction[0, 0] * coolant[0] * (25 - 200) * np.exp(-lam[0] * 5.1648)
    assert t_c == pytest.approx(199.0, abs=2e-4)


# Published: same book, ch. 3 (from memory; recomputed): chip of 1e4 W/m2, epoxy joint 0.9e-4 m2 K/W, 8 mm of aluminium,
# both faces in air of 25 degC with h = 100: chip at 75.3 degC.
@pytest.mark.parametrize("c_plate", [0.0, 100.0])
def test_chip_on_aluminium_cooled_on_both_sides(c_plate):
    builder = NetworkBuilder()
    chip, top, bottom = builder.node(50.0), builder.node(c_plate), builder.node(c_plate)
    builder.to_coolant(chip, 1 / 100)
    builder.resistance(chip, top, 0.9e-4)
    builder.resistance(top, bottom, 0.008 / 239)
    builder.to_coolant(bottom, 1 / 100)
    full = builder.build([chip], [bottom])
    rise = full.r_th_k_per_w()[0, 0] * 1e4
    assert 25 + rise == pytest.approx(75.31, abs=0.01)
    # heat up and heat down add to what is put in
    down = full.out_case[0] @ np.linalg.solve(full.g_w_per_k, full.out_junction[0]) * 1e4 * 100
    assert rise * 100 + down == pytest.approx(1e4, rel=1e-12)


def test_points_without_mass_are_eliminated_exactly():
    """The same network with vanishing capacity in place of none."""
    def build(c):
        builder = NetworkBuilder()
        a, b, m, n = builder.node(2.0), builder.node(5.0), builder.node(c), builder.node(c)
        for x, y, r in ((a, m, 0.1), (b, m, 0.3), (m, n, 0.2), (a, n, 0.7)):
            builder.resistance(x, y, r)
        builder.to_coolant(n, 0.05)
        return builder.build([a, b], [m, n])

    exact, near = build(0.0), build(1e-7)
    assert exact.c_j_per_k.size == 2
    np.testing.assert_allclose(exact.r_th_k_per_w(), near.r_th_k_per_w(), rtol=1e-9)
    np.testing.assert_allclose(exact.step_response_k_per_w([0.1, 1.0], 0), near.step_response_k_per_w([0.1, 1.0], 0), rtol=1e-5)
    steady = [full.out_case @ np.linalg.solve(full.g_w_per_k, full.out_junction.T) for full in (exact, near)]
    np.testing.assert_allclose(steady[0], steady[1], rtol=1e-9)


def test_heated_point_without_mass_is_refused():
    builder = NetworkBuilder()
    a, b = builder.node(), builder.node(1.0)
    builder.resistance(a, b, 1.0)
    builder.to_coolant(b, 1.0)
    with pytest.raises(InputError, match="without heat capacity"):
        builder.build([a], [b])


@pytest.mark.parametrize("joined", [False, True])
def test_heat_that_cannot_leave_is_refused(joined):
    """A network without a way to the coolant has no steady state; this must not end in a numerical accident."""
    builder = NetworkBuilder()
    a, b = builder.node(1.0), builder.node(0.0)
    if joined:
        builder.resistance(a, b, 1.0)
    with pytest.raises(InputError):
        builder.build([a], [b])


@pytest.mark.parametrize("r", [0.0, -0.1, np.nan])
def test_impossible_resistance_is_refused(r):
    builder = NetworkBuilder()
    a, b = builder.node(1.0), builder.node(1.0)
    with pytest.raises(InputError):
        builder.resistance(a, b, r)


def variant(arrangement, way):
    data = straight_line_data(arrangement=arrangement, reference="sink" if way == "sink" else "case")
    if way == "chips":
        data["case_to_sink"] = {"per": "switch-and-diode", "r_th_switch_k_per_w": 0.05, "r_th_diode_k_per_w": 0.08}
    return module_from_dict(data)


@pytest.mark.parametrize("cooling", [
    FixedCooling(kind="fixed", r_th_k_per_w=0.03), FixedCooling(kind="fixed", r_th_k_per_w=0.03, heat_capacity_j_per_k=2000.0),
    FosterCooling(kind="foster", r_k_per_w=[0.02, 0.01], tau_s=[60.0, 4.0]),
], ids=["bare", "capacity", "foster"])
@pytest.mark.parametrize("arrangement", ["six-pack", "half-bridge"])
@pytest.mark.parametrize("way", ["module", "chips", "sink"])
def test_steady_resistances_by_hand(way, arrangement, cooling):
    """Analytic: resistances in series along the way of the heat; what two chips share is what their ways share."""
    full = inverter_network(variant(arrangement, way), cooling)
    sink = 0.03
    own = np.array([0.11] * 6 + [0.18] * 6)  # sums of the branches of the factory
    want, case = np.full((12, 12), sink), np.full((12, 12), sink)
    leg = np.arange(12) % 6 // 2
    if way == "module":
        together = np.ones((12, 12), bool) if arrangement == "six-pack" else leg[:, None] == leg[None, :]
        want[together] += 0.01
        case[together] += 0.01
    elif way == "chips":
        under = np.array([0.05] * 6 + [0.08] * 6)
        own = own + under
        case += np.diag(under)
    want += np.diag(own)
    np.testing.assert_allclose(full.r_th_k_per_w(), want, rtol=1e-9)
    np.testing.assert_allclose(full.out_case @ np.linalg.solve(full.g_w_per_k, full.out_junction.T), case, rtol=1e-9)
    net = unreduced(full)
    np.testing.assert_allclose(net.r_th_k_per_w(), want, rtol=1e-8)
    np.testing.assert_allclose(net.r_case_k_per_w(), case, rtol=1e-8)


def test_all_chips_equal_gives_the_datasheet_sum():
    """Analytic: 100 W in every chip put 1200 W through paste and sink."""
    rise = inverter_network(HERON, FixedCooling(kind="fixed", r_th_k_per_w=0.02)).r_th_k_per_w() @ np.full(12, 100.0)
    np.testing.assert_allclose(rise, [100 * 0.110 + 1200 * 0.029] * 6 + [100 * 0.180 + 1200 * 0.029] * 6, rtol=1e-9)


@pytest.mark.parametrize("spread", [1e-2, 1e-3, 1e-4, 1e-6, 1e-9])
@pytest.mark.parametrize("branches", [2, 4, 6])
def test_nearly_equal_chip_branches_keep_the_resistance(spread, branches):
    """Fitted branches may have time constants close together. Analytic: the steady rise is the sum of the resistances all the same."""
    tau = [0.1 * (1 + spread * k) for k in range(branches)]
    module = module_from_dict(straight_line_data(r_switch_k_per_w=[0.02] * branches, tau_switch_s=tau))
    full = inverter_network(module, FixedCooling(kind="fixed", r_th_k_per_w=0.03, heat_capacity_j_per_k=3000.0))
    want = 0.02 * branches + 0.01 + 0.03
    assert full.r_th_k_per_w()[0, 0] == pytest.approx(want, rel=1e-4)
    lam, junction, _, _ = full.modes()
    assert (lam > 0).all()
    assert (junction[0] ** 2 / lam).sum() == pytest.approx(want, rel=1e-4)


def by_hand(r_th, c_sink):
    """Kite on a sink with capacity, as matrices of our own: twelve ladders into one node."""
    ladders = [foster_to_cauer(FosterNetwork(s.thermal.r_k_per_w, s.thermal.tau_s)) for s in [KITE.switch] * 6 + [KITE.diode] * 6]
    n = sum(x.r_k_per_w.size for x in ladders) + 1
    c, g = np.empty(n), np.zeros((n, n))
    heads, at = [], 0
    for ladder in ladders:
        size = ladder.r_k_per_w.size
        heads.append(at)
        c[at : at + size] = ladder.c_j_per_k
        for k in range(size):
            a, b = at + k, at + k + 1 if k + 1 < size else n - 1
            y = 1 / ladder.r_k_per_w[k]
            g[a, a] += y
            g[b, b] += y
            g[a, b] -= y
            g[b, a] -= y
        at += size
    c[-1] = c_sink
    g[-1, -1] += 1 / r_th
    return c, g, heads


def test_step_response_against_matrices_of_our_own():
    full = inverter_network(KITE, FixedCooling(kind="fixed", r_th_k_per_w=0.03, heat_capacity_j_per_k=500.0))
    c, g, heads = by_hand(0.03, 500.0)
    times = np.array([1e-4, 1e-2, 0.3, 5.0, 60.0])
    for chip in (2, 9):
        heat = np.zeros(c.size)
        heat[heads[chip]] = 1.0
        end = np.linalg.solve(g, heat)
        want = np.array([(end - expm(-g / c[:, None] * t) @ end)[heads] for t in times])
        np.testing.assert_allclose(full.step_response_k_per_w(times, chip), want, rtol=1e-6, atol=1e-12)


def test_sink_takes_the_heat_that_leaves_and_energy_closes():
    """Heat in = heat stored + heat through the sink's resistance, whose value the test knows."""
    r_th, c_sink = 0.03, 500.0
    full = inverter_network(KITE, FixedCooling(kind="fixed", r_th_k_per_w=r_th, heat_capacity_j_per_k=c_sink))
    p = np.random.default_rng(3).uniform(0, 300, 12)
    h, n = 0.02, 1000
    keep = expm(-full.g_w_per_k / full.c_j_per_k[:, None] * h)
    end = np.linalg.solve(full.g_w_per_k, full.out_junction.T @ p)
    y, surface = np.zeros(end.size), [0.0]
    for step in range(n):
        y = end + keep @ (y - end)
        surface.append(full.out_case[0] @ y)
        if step == 0:
            # after 20 ms hardly anything has left the chips: a sink fed with the input would be far warmer
            assert surface[-1] < 0.2 * p.sum() * h / c_sink
    through = simpson(surface, dx=h) / r_th
    assert through + full.c_j_per_k @ y == pytest.approx(p.sum() * h * n, rel=1e-6)
    assert through > 0.2 * p.sum() * h * n
    ladders = [foster_to_cauer(FosterNetwork(s.thermal.r_k_per_w, s.thermal.tau_s)) for s in (KITE.switch, KITE.diode)]
    assert full.c_j_per_k.sum() == pytest.approx(c_sink + 6 * sum(x.c_j_per_k.sum() for x in ladders), rel=1e-12)


def test_warming_and_symmetry():
    """Whatever is heated, nothing cools below the coolant, and mutual heating is mutual at every instant."""
    full = inverter_network(HERON, FosterCooling(kind="foster", r_k_per_w=[0.01, 0.02], tau_s=[5.0, 200.0]))
    t = np.geomspace(1e-3, 1e3, 30)
    responses = np.stack([full.step_response_k_per_w(t, chip) for chip in range(12)])
    assert (responses > -1e-12).all() and (np.diff(responses, axis=1) > -1e-12).all()
    np.testing.assert_allclose(responses, responses.transpose(2, 1, 0), rtol=1e-9, atol=1e-14)


def test_sink_ladders():
    assert sink_ladder(FixedCooling(kind="fixed", r_th_k_per_w=0.03)) == 0.03
    one = sink_ladder(FixedCooling(kind="fixed", r_th_k_per_w=0.03, heat_capacity_j_per_k=100.0))
    assert isinstance(one, CauerLadder) and one.r_k_per_w.tolist() == [0.03] and one.c_j_per_k.tolist() == [100.0]
    # analytic: R = 1, 1 and tau = 1, 2 give the ladder 9/5, 1/5 with 2/3, 25/3
    two = sink_ladder(FosterCooling(kind="foster", r_k_per_w=[1.0, 1.0], tau_s=[2.0, 1.0]))
    np.testing.assert_allclose(np.r_[two.r_k_per_w, two.c_j_per_k], [1.8, 0.2, 2 / 3, 25 / 3], rtol=1e-12)
    with pytest.raises(InputError, match="fixed or foster"):
        sink_ladder("fixed")
