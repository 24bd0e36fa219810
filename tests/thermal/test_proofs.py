"""What must hold of the networks whatever the input: heat is kept, the reduction stays within its bound, cells within their error."""

from functools import lru_cache
from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.device import load_module, module_from_dict
from mission.thermal import FixedCooling, FosterCooling, inverter_network, load_materials, reduce_to_modes, stack_ladder

from ..device.factories import straight_line_data
from .helpers import full_response, reduced_response, single

TOLERANCE = 1e-3
BARE = FixedCooling(kind="fixed", r_th_k_per_w=0.03)
CAPACITY = FixedCooling(kind="fixed", r_th_k_per_w=0.03, heat_capacity_j_per_k=800.0)
FOSTER = FosterCooling(kind="foster", r_k_per_w=[0.01, 0.015, 0.005], tau_s=[1.0, 12.0, 90.0])
COOLINGS = {"bare": BARE, "capacity": CAPACITY, "foster": FOSTER}


def layered_module(cells=3):
    layers = [{"material": "silicon", "thickness_mm": 0.15, "width_mm": 12.0, "length_mm": 12.0}, {"material": "solder-snag", "thickness_mm": 0.1},
              {"material": "copper", "thickness_mm": 0.3, "spread_deg": 45.0}, {"material": "alumina-96", "thickness_mm": 0.38, "spread_deg": 45.0},
              {"material": "copper", "thickness_mm": 3.0, "spread_deg": 45.0}]
    data = straight_line_data(arrangement="half-bridge")
    for side, width in (("switch", 12.0), ("diode", 8.0)):
        own = [{**layers[0], "width_mm": width}, *layers[1:]]
        data[side]["thermal"] = {"reference": "case", "layer": own, "cells_per_layer": cells}
    return module_from_dict(data)


@lru_cache
def module(name):
    if name == "layers":
        return layered_module()
    if name == "half-bridge":
        return module_from_dict(straight_line_data(arrangement="half-bridge"))
    if name == "chips on the sink":
        return module_from_dict(straight_line_data(reference="sink"))
    return load_module(name)


@lru_cache
def full_network(name, cooling):
    return inverter_network(module(name), COOLINGS[cooling])


# ------------------------------------------------------------------ energy
@pytest.mark.parametrize("cooling", list(COOLINGS))
@pytest.mark.parametrize("name", ["heron-300", "half-bridge", "chips on the sink", "layers", "curlew-300", "tern-300"])
def test_heat_put_in_is_stored_or_has_left(name, cooling):
    """Random powers and coolant steps, every mode stepped exactly: heat in = rise of what is stored + heat to the coolant.

    To the coolant goes what the conductances to it pass. With a single resistance to the coolant the surface's own output tells the same.
    """
    full = full_network(name, cooling)
    lam, junction, _, even = full.modes()
    rng = np.random.default_rng(11)
    steps = 150
    h = 10.0 ** rng.uniform(-4, 1.5, steps)
    power = rng.uniform(0.0, 400.0, (steps, full.n_chips)) * (rng.random((steps, 1)) < 0.7)
    coolant = np.repeat(rng.uniform(-20.0, 70.0, steps // 5), 5)
    to_coolant = full.g_w_per_k.sum(axis=1)
    assert (to_coolant > -1e-9 * np.diag(full.g_w_per_k)).all()
    root = np.sqrt(full.c_j_per_k)
    shape = full.shapes()[1] / root[:, None]
    x, lived = np.zeros(lam.size), np.zeros(lam.size)
    before = coolant[0]
    for p, t_coolant, dt in zip(power, coolant, h):
        x = x - even * (t_coolant - before)
        before = t_coolant
        end = junction.T @ p / lam
        new = end + np.exp(-lam * dt) * (x - end)
        # integral of a mode over the step, without a difference of nearly equal numbers
        lived += end * dt + (x - end) * -np.expm1(-lam * dt) / lam
        x = new
    heat_in = float((power.sum(axis=1) * h).sum())
    stored = float(full.c_j_per_k @ (shape @ x + coolant[-1] - coolant[0]))
    left = float(to_coolant @ (shape @ lived))
    throughput = heat_in + float(np.abs(np.diff(coolant)).sum()) * full.c_j_per_k.sum()
    assert stored + left == pytest.approx(heat_in, abs=1e-9 * throughput)
    assert abs(left) > 0.1 * heat_in and abs(stored) > 1e-4 * heat_in
    if cooling != "foster":
        surface = full.out_surface @ (shape @ lived)
        assert float(surface[0]) / 0.03 == pytest.approx(left, abs=1e-9 * throughput)


@pytest.mark.parametrize("cooling", list(COOLINGS))
@pytest.mark.parametrize("name", ["heron-300", "chips on the sink", "curlew-300"])
def test_reduced_network_passes_the_heat_on_within_its_bound(name, cooling):
    """A reduced network has no masses to ask. What it says of the case point, taken from the first watt to the last warmth, must be the heat put in.

    The rise of a case point over all times is the heat times the resistance from there on (six-pack: of all chips). ``case_bound`` says how
    far a steady rise is off with all chips heated alike; of heat of which no chip gets more than E, at most n E ``case_bound`` goes astray.
    """
    full = full_network(name, cooling)
    net = reduce_to_modes(full, relative_tolerance=TOLERANCE)
    rng = np.random.default_rng(12)
    n = net.n_chips
    h = 10.0 ** rng.uniform(-3, 1, 40)
    power = rng.uniform(0.0, 400.0, (40, n)) * (rng.random((40, n)) < 0.5)
    x_l, x_s = np.zeros_like(net.lam_local_per_s), np.zeros_like(net.lam_shared_per_s)
    case = np.zeros(n)
    for p, dt in [*zip(power, h), (np.zeros(n), 60.0 / net.lam_shared_per_s.min())]:
        for lam, x, heat, out in ((net.lam_local_per_s, x_l, p, None), (net.lam_shared_per_s, x_s, net.b_shared @ p, net.c_case_shared)):
            end = heat / lam
            lived = end * dt + (x - end) * -np.expm1(-lam * dt) / lam
            case += (net.rho_case_local * lived).sum(axis=0) if out is None else out @ lived
            x[:] = end + np.exp(-lam * dt) * (x - end)
    energy = (power * h[:, None]).sum(axis=0)
    per_chip = full.out_case @ np.linalg.solve(full.g_w_per_k, full.out_junction.T)
    if module(name).arrangement == "six-pack":
        paste = module(name).case_to_sink.r_th_k_per_w if module(name).case_to_sink is not None else 0.0
        np.testing.assert_allclose(per_chip, 0.03 + paste, rtol=1e-9)
    allowed = net.case_bound * energy.max() * per_chip.sum(axis=1)
    assert (np.abs(case - per_chip @ energy) <= allowed * 1.001 + 1e-9 * (per_chip @ energy)).all()
    assert net.case_bound <= 5 * TOLERANCE and energy.sum() > 0.3 * n * energy.max()
    assert np.abs(x_l).max() + np.abs(x_s).max() < 1e-9 * energy.max()


# ------------------------------------------------------------------ reduction
#: modules that the tests of the reduction itself leave out
KINDS = [("chips on the sink", "foster"), ("half-bridge", "bare"), ("half-bridge", "capacity"), ("layers", "capacity"), ("layers", "foster"), ("curlew-300", "capacity"),
         ("dunlin-300", "foster"), ("tern-300", "foster")]


@lru_cache
def pair(name, cooling):
    full = full_network(name, cooling)
    return full, reduce_to_modes(full, relative_tolerance=TOLERANCE)


@pytest.mark.parametrize(("name", "cooling"), KINDS)
@settings(derandomize=True, max_examples=10, deadline=None)
@given(data=st.data())
def test_bound_holds_for_any_powers(name, cooling, data):
    """Full network by matrix exponentials, reduced one mode by mode."""
    full, net = pair(name, cooling)
    n = full.n_chips
    steps = data.draw(st.integers(1, 6))
    rng = np.random.default_rng(data.draw(st.integers(0, 2**32 - 1)))
    share_on = data.draw(st.floats(0.05, 1.0))
    p = rng.uniform(0.0, 400.0, (steps, n)) * (rng.random((steps, n)) < share_on)
    h = 10.0 ** rng.uniform(-4.0, 2.0, steps)
    want, found = full_response(full, p, h)[0], reduced_response(net, p, h)[0]
    assert (np.abs(found - want) <= net.error_bound_k(p.max(axis=0)) * 1.001 + 1e-7).all()


@pytest.mark.parametrize(("name", "cooling"), KINDS)
def test_meanest_powers_stay_within_the_bound_and_come_near_it(name, cooling):
    """Each chip on exactly while that raises the error of one junction most: no sequence can do worse, and this one shows the bound is no idle number."""
    full, net = pair(name, cooling)
    lam, junction, _, _ = full.modes()
    n = full.n_chips
    edges = np.concatenate([[0.0], np.geomspace(1e-5, 20 / lam[0], 120)])
    ago = 0.5 * (edges[1:] + edges[:-1])
    i = n - 1
    gap = np.exp(-np.outer(ago, lam)) @ (junction[i] * junction).T - np.exp(-np.outer(ago, net.lam_shared_per_s)) @ (net.c_shared[i] * net.b_shared.T).T
    gap[:, i] -= np.exp(-np.outer(ago, net.lam_local_per_s[:, i])) @ net.rho_local[:, i]
    p, h = np.where(gap > 0, 300.0, 0.0)[::-1], np.diff(edges)[::-1]
    error = full_response(full, p, h)[0][-1, i] - reduced_response(net, p, h)[0][-1, i]
    bound = net.error_bound_k(300.0)[i]
    assert 0.15 * bound < error <= 1.001 * bound


# ------------------------------------------------------------------ cells
MATERIALS = load_materials()
layers = st.tuples(st.sampled_from(sorted(MATERIALS)), st.floats(-1.5, 1.0), st.sampled_from([0.0, 30.0, 45.0, 60.0]))


def z_of(stack, cells, time):
    made = stack_ladder(stack, MATERIALS, cells=cells)
    lam, junction, _, _ = single(made.ladder).modes()
    return (-np.expm1(-np.outer(time, lam)) / lam) @ junction[0] ** 2, made


@settings(derandomize=True, max_examples=40, deadline=None)
@given(st.lists(layers, min_size=1, max_size=4), st.floats(2.0, 30.0), st.floats(1.0, 3.0), st.integers(2, 9))
def test_cells_stay_within_the_stated_error(parts, width, aspect, cells):
    """Against twice and ten times as many cells, lower face held, over all times."""
    stack = [SimpleNamespace(material=m, thickness_mm=10.0**t, spread_deg=deg, width_mm=None if k else width, length_mm=None if k else width * aspect)
             for k, (m, t, deg) in enumerate(parts)]
    made = stack_ladder(stack, MATERIALS, cells=cells)
    r, c = made.ladder.r_k_per_w, made.ladder.c_j_per_k
    time = np.geomspace(1e-3 * (r * c).min() / cells, 20.0 * r.sum() * c.sum(), 200)
    coarse, double, fine = (z_of(stack, n, time) for n in (cells, 2 * cells, 10 * cells))
    for other in (double, fine):
        np.testing.assert_allclose(other[1].r_layers_k_per_w, made.r_layers_k_per_w, rtol=1e-7)
        assert np.abs(coarse[0] - other[0]).max() <= made.error_k_per_w
    assert double[1].error_k_per_w < made.error_k_per_w


def test_stated_error_of_cells_is_no_idle_number():
    """An even slab comes within a third of it."""
    slab = [SimpleNamespace(material="copper", thickness_mm=10.0, spread_deg=0.0, width_mm=10.0, length_mm=10.0)]
    time = np.geomspace(1e-5, 10.0, 400)
    coarse, fine = z_of(slab, 6, time), z_of(slab, 120, time)
    assert 0.66 < np.abs(coarse[0] - fine[0]).max() / coarse[1].error_k_per_w < 0.75


def test_cells_of_a_module():
    """Twice the cells: no self or mutual resistance moves, no step response of any chip by more than the stated error of the heated chip's stack.

    Here the lower faces float on paste and sink.
    """
    six, twelve = (inverter_network(layered_module(cells), CAPACITY) for cells in (6, 12))
    np.testing.assert_allclose(six.r_th_k_per_w(), twelve.r_th_k_per_w(), rtol=1e-9)
    time = np.geomspace(1e-5, 200.0, 120)
    for chip, thermal in ((2, layered_module(6).switch.thermal), (9, layered_module(6).diode.thermal)):
        stated = stack_ladder(thermal.layer, MATERIALS, cells=6).error_k_per_w
        gap = np.abs(six.step_response_k_per_w(time, chip) - twelve.step_response_k_per_w(time, chip))
        assert gap.max() <= stated <= 0.03 * six.r_th_k_per_w()[chip, chip]
        assert gap[:, np.arange(12) != chip].max() <= 0.02 * stated
