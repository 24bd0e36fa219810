"""Mutual heating given as curves: against bodies solved as a whole, and what a file may say."""

import textwrap
import tomllib

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import eigh
from scipy.signal import lsim

from mission.device import load_module, module_from_dict, to_toml
from mission.errors import InputError, RangeError
from mission.thermal import (
    CoolingLevels,
    FixedCooling,
    FosterCooling,
    FosterNetwork,
    MutualBranches,
    NetworkBuilder,
    inverter_modes,
    inverter_network,
    matrix_modes,
    module_mutual,
    reduce_to_modes,
    with_mutual,
)

from ..device.factories import straight_line_data
from .helpers import full_response, reduced_response

SINK = FixedCooling(kind="fixed", r_th_k_per_w=0.02, heat_capacity_j_per_k=400.0)
CURVE = {"r_k_per_w": [-0.001, 0.012, 0.02], "tau_s": [0.02, 0.2, 1.5]}


def coupled(*entries, **changes):
    return module_from_dict({**straight_line_data(**changes), "coupling": [{**CURVE, **e} for e in entries]})


def body():
    """Three chips on one plate of four masses, and the plate on the coolant."""
    builder = NetworkBuilder()
    chips = [builder.node(c) for c in (0.05, 0.08, 0.02)]
    plate = [builder.node(c) for c in (2.0, 3.0, 1.0, 20.0)]
    for chip, mass, r in zip(chips, plate, (0.1, 0.07, 0.2)):
        builder.resistance(chip, mass, r)
    for a, b, r in ((0, 1, 0.3), (1, 2, 0.5), (0, 3, 0.05), (1, 3, 0.04), (2, 3, 0.1)):
        builder.resistance(plate[a], plate[b], r)
    builder.to_coolant(plate[3], 0.03)
    return builder.build(chips, chips)


def partial_fractions(full):
    """Matrix of branches, by the generalised eigenproblem: self ones above zero, mutual ones of both signs."""
    lam, shape = eigh(full.g_w_per_k, np.diag(full.c_j_per_k))
    ends = full.out_junction @ shape
    n = full.n_chips
    return [[FosterNetwork(ends[i] ** 2 / lam, 1 / lam) if i == j else MutualBranches(ends[i] * ends[j] / lam, 1 / lam) for j in range(n)] for i in range(n)]


def test_matrix_of_curves_is_the_body_they_come_from():
    """Independent: the body as a whole by matrix exponentials. The curves' fractions meet it exactly, mutual heat arrives late."""
    full = body()
    net = matrix_modes(partial_fractions(full))
    rng = np.random.default_rng(4)
    p, h = rng.uniform(0, 300, (40, 3)), 10 ** rng.uniform(-3.5, 1.0, 40)
    want, found = full_response(full, p, h)[0], reduced_response(net, p, h)[0]
    np.testing.assert_allclose(found, want, rtol=1e-9, atol=1e-9 * want.max())
    np.testing.assert_allclose(net.r_th_k_per_w(), full.r_th_k_per_w(), rtol=1e-10)
    assert net.error_bound_k(300.0).max() == 0.0
    early = reduced_response(net, np.array([[1.0, 0.0, 0.0]]), np.array([1e-4]))[0][0]
    assert early[0] > 1e-3 and 0.0 <= early[1] < 1e-3 * early[0]


def test_added_branches_against_a_simulation_in_time():
    """Independent: each pair's branches as a first-order system each, by scipy's lsim with held power; heat flows both ways."""
    full = inverter_network(load_module("kite-300"), SINK)
    plain = reduce_to_modes(full)
    mutual = {(0, 7): MutualBranches([-0.0007, 0.01], [0.03, 0.4]), (5, 2): FosterNetwork([0.004, 0.006], [0.03, 3.0]), (0, 2): FosterNetwork([0.003], [0.4])}
    net = with_mutual(plain, mutual)
    rng = np.random.default_rng(8)
    h, steps = 0.01, 600
    p = np.repeat(rng.uniform(0, 400, (steps // 20, 12)), 20, axis=0)
    extra = reduced_response(net, p, np.full(steps, h))[0] - reduced_response(plain, p, np.full(steps, h))[0]
    want = np.zeros((steps, 12))
    t = h * np.arange(steps + 1)
    for (i, j), b in mutual.items():
        for heated, felt in ((i, j), (j, i)):
            held = np.append(p[:, heated], p[-1, heated])
            for r, tau in zip(b.r_k_per_w, b.tau_s):
                want[:, felt] += lsim(([r], [tau, 1.0]), held, t, interp=False)[1][1:]
    np.testing.assert_allclose(extra, want, atol=1e-9 * want.max())
    assert want.max() > 3.0
    np.testing.assert_array_equal(net.bound_k_per_w, plain.bound_k_per_w)
    # heat that leaves, case points and coolant steps stay those of the own branches
    np.testing.assert_allclose(reduced_response(net, p, np.full(steps, h))[1], reduced_response(plain, p, np.full(steps, h))[1], rtol=1e-12)
    assert not net.g_coolant[-net.n_mutual:].any()
    # three time constants: (0, 7) and (5, 2) share the first, (0, 7) and (0, 2) the second, the third has one pair
    assert net.n_mutual == net.lam_shared_per_s.size - plain.lam_shared_per_s.size == 4 + 2 + 2


@settings(derandomize=True, max_examples=60, deadline=None)
@given(st.lists(st.tuples(st.integers(0, 11), st.integers(0, 11), st.floats(1e-6, 1.0), st.sampled_from([0.01, 0.3, 4.0])), min_size=1, max_size=60))
def test_modes_are_the_matrix(parts):
    """Analytic: steady matrix and its slope at every time constant come back; a coupling adds nothing to a chip's own response."""
    mutual = {}
    for i, j, r, tau in parts:
        if i < j:
            mutual[i, j] = FosterNetwork([r], [tau])
    alone = matrix_modes([[FosterNetwork([1.0], [1.0]) if i == j else None for j in range(12)] for i in range(12)])
    net = with_mutual(alone, mutual)
    assert net.n_mutual <= 36
    for tau in (0.01, 0.3, 4.0):
        want = np.zeros((12, 12))
        for (i, j), b in mutual.items():
            want[i, j] = want[j, i] = b.r_k_per_w[0] if b.tau_s[0] == tau else 0.0
        mode = net.lam_shared_per_s == 1 / tau
        found = (net.c_shared[:, mode] * tau) @ net.b_shared[mode]
        np.testing.assert_allclose(found, want, atol=1e-8 * max(want.max(), 1e-300))


# ------------------------------------------------------------------ module files
UP = {"heated": "S-up", "felt": "D-up"}


@pytest.mark.parametrize("sees", ["heat-leaving", "chip-losses"])
@pytest.mark.parametrize("arrangement", ["six-pack", "half-bridge"])
def test_a_coupling_holds_in_every_leg_and_both_ways(arrangement, sees):
    cooling = SINK.model_copy(update={"sink_sees": sees})
    plain = inverter_modes(module_from_dict(straight_line_data(arrangement=arrangement)), cooling)
    net = inverter_modes(coupled(UP, {"heated": "D-lo", "felt": "S-lo", "r_k_per_w": [0.01], "tau_s": [0.2]}, arrangement=arrangement), cooling)
    want = np.zeros((12, 12))
    for leg in range(3):
        upper, lower = 2 * leg, 2 * leg + 1
        want[upper, 6 + upper] = want[6 + upper, upper] = 0.031
        want[lower, 6 + lower] = want[6 + lower, lower] = 0.01
    np.testing.assert_allclose(net.r_th_k_per_w() - plain.r_th_k_per_w(), want, atol=1e-12)
    np.testing.assert_allclose(net.r_case_k_per_w(), plain.r_case_k_per_w(), rtol=1e-12)


def test_letters_name_one_chip_of_a_six_pack():
    module = coupled({"heated": "S-a-up", "felt": "S-b-lo"}, UP)
    assert set(module_mutual(module)) == {(0, 3), (0, 6), (2, 8), (4, 10)}
    assert set(module_mutual(coupled({"heated": "S-up", "felt": "S-lo"}))) == {(0, 1), (2, 3), (4, 5)}


def test_one_chip_and_three_level_modules():
    for name, entry, pairs in (("tern-300", {"heated": "S-up", "felt": "S-lo"}, {(0, 1), (2, 3), (4, 5)}),
                               ("curlew-300", {"heated": "SI-up", "felt": "DC-up"}, {(6, 24), (8, 26), (10, 28)})):
        data = load_module(name).model_dump(mode="json", exclude_none=True)
        data["coupling"] = [{**CURVE, **entry}]
        assert set(module_mutual(module_from_dict(data))) == pairs


def test_the_way_back_with_the_same_numbers_counts_once():
    twice = coupled(UP, {"heated": "D-up", "felt": "S-up"})
    np.testing.assert_allclose(inverter_modes(twice, SINK).r_th_k_per_w(), inverter_modes(coupled(UP), SINK).r_th_k_per_w(), rtol=1e-12)


def test_file_and_back():
    module = coupled({**UP, "source": "measured"}, {"heated": "S-a-up", "felt": "S-b-up"})
    assert module_from_dict(tomllib.loads(to_toml(module))) == module
    assert load_module("heron-300").coupling == () and module_mutual(load_module("heron-300")) == {}


def test_the_example_of_the_docstring_is_right():
    from mission.device import coupling

    example = tomllib.loads(textwrap.dedent(coupling.__doc__.split("\n\n", 1)[1]))
    assert module_from_dict({**straight_line_data(), **example}).coupling[0].felt == "D-up"


BROKEN = [
    ("unknown chip", [{"heated": "S-upp", "felt": "D-up"}], {}, ["coupling[1].heated", "'S-upp'", "S-up, S-lo, D-up, D-lo", "did you mean 'S-up'?"]),
    ("diode of a one-chip device", [UP], {"one_chip": True}, ["coupling[1].felt", "'D-up'", "S-up, S-lo", "S-a-up"]),
    ("letter in a half-bridge", [{"heated": "S-a-up", "felt": "D-a-up"}], {"arrangement": "half-bridge"}, ["'S-a-up'", "half-bridge", "without a leg's letter", "alike"]),
    ("letter and none", [{"heated": "S-a-up", "felt": "D-up"}], {}, ["coupling[1].felt", "'S-a-up'", "'D-up'", "both with a leg's letter"]),
    ("itself", [{"heated": "S-up", "felt": "S-up"}], {}, ["coupling[1].felt", "'S-up'", "another chip"]),
    ("twice", [UP, UP], {}, ["coupling[2]", "coupling[1] gives already", "remove one"]),
    ("twice, once by letter", [UP, {"heated": "S-c-up", "felt": "D-c-up"}], {}, ["coupling[2]", "S-c-up to D-c-up", "coupling[1]"]),
    ("other numbers back", [UP, {"heated": "D-up", "felt": "S-up", "r_k_per_w": [0.01], "tau_s": [1.0]}], {}, ["coupling[2]", "coupling[1]", "the same both ways", "mean of both"]),
    ("more than the own", [{**UP, "r_k_per_w": [0.12], "tau_s": [1.0]}], {}, ["coupling[1].r_k_per_w", "0.12", "0.11", "0.18", "smaller of the two"]),
    ("too early", [{**UP, "r_k_per_w": [0.06], "tau_s": [1e-4]}], {}, ["coupling[1].tau_s", "S-a-up and D-a-up", "after switching on", "their unit"]),
    ("all together", [{"heated": a, "felt": b, "r_k_per_w": [0.09], "tau_s": [1.0]} for a, b in (("S-a-up", "S-b-up"), ("S-a-up", "S-c-up"), ("S-a-up", "S-a-lo"), ("S-a-up", "S-b-lo"))],
     {}, ["coupling", "S-a-up", "S-b-lo", "positive definite"]),
    ("no branch", [{**UP, "r_k_per_w": [], "tau_s": []}], {}, ["coupling[1]", "r_k_per_w", "empty list"]),
    ("lengths", [{**UP, "r_k_per_w": [0.01], "tau_s": [0.1, 0.2]}], {}, ["coupling[1]", "tau_s", "2 values in tau_s beside 1"]),
    ("zero", [{**UP, "r_k_per_w": [0.0, 0.01], "tau_s": [0.1, 0.2]}], {}, ["coupling[1]", "r_k_per_w", "branch 1"]),
    ("time constants fall", [{**UP, "r_k_per_w": [0.01, 0.01], "tau_s": [0.2, 0.1]}], {}, ["coupling[1]", "tau_s", "0.1 s at branch 2 after 0.2 s"]),
    ("negative time constant", [{**UP, "r_k_per_w": [0.01], "tau_s": [-0.1]}], {}, ["coupling[1].tau_s[1]", "-0.1", "above 0"]),
    ("cools", [{**UP, "r_k_per_w": [-0.01], "tau_s": [0.1]}], {}, ["coupling[1]", "r_k_per_w", "-0.01", "cools no other"]),
    ("dips", [{**UP, "r_k_per_w": [-0.01, 0.02], "tau_s": [0.1, 1.0]}], {}, ["coupling[1]", "r_k_per_w", "falls to", "stays above zero"]),
    ("not a number", [{**UP, "r_k_per_w": ["0.01"], "tau_s": [0.1]}], {}, ["coupling[1].r_k_per_w[1]", "'0.01'", "a number"]),
    ("nan", [{**UP, "r_k_per_w": [np.nan], "tau_s": [0.1]}], {}, ["coupling[1].r_k_per_w[1]", "nan", "finite"]),
    ("unknown key", [{**UP, "sorce": "x"}], {}, ["coupling[1]", "'sorce'", "did you mean 'source'?"]),
    ("empty name", [{"heated": "", "felt": "S-up"}], {}, ["coupling[1].heated"]),
]


@pytest.mark.parametrize(("entries", "changes", "words"), [b[1:] for b in BROKEN], ids=[b[0] for b in BROKEN])
def test_refused_with_place_value_and_advice(entries, changes, words):
    changes = dict(changes)
    data = load_module("tern-300").model_dump(mode="json", exclude_none=True) if changes.pop("one_chip", False) else straight_line_data(**changes)
    with pytest.raises(InputError) as caught:
        module_from_dict({**data, "coupling": [{**CURVE, **e} for e in entries]}, "own.toml")
    text = str(caught.value)
    missing = [w for w in ("own.toml", *words) if w not in text]
    assert not missing, f"{missing} not in: {text}"


def layered(r_mutual):
    layers = [{"material": "silicon", "thickness_mm": 0.15, "width_mm": 12.0, "length_mm": 12.0}, {"material": "copper", "thickness_mm": 3.0, "spread_deg": 45.0}]
    data = straight_line_data()
    for side in ("switch", "diode"):
        data[side]["thermal"] = {"reference": "case", "layer": layers}
    return module_from_dict({**data, "coupling": [{**UP, "r_k_per_w": [r_mutual], "tau_s": [0.5]}]})


def test_layers_are_checked_where_their_resistance_is_known():
    own = 0.15e-3 / (148 * 12e-3**2) + 3e-3 / (394 * 12e-3 * 18e-3)  # analytic
    plain = inverter_modes(layered(0.9 * own), SINK)
    assert plain.r_th_k_per_w()[0, 6] == pytest.approx(0.03 + 0.9 * own, rel=1e-3)
    with pytest.raises(RangeError, match=r"coupling\[1\].r_k_per_w: found a mutual resistance .* between S-a-up and D-a-up"):
        inverter_modes(layered(1.01 * own), SINK)


def test_a_plate_makes_its_own_coupling():
    layers = [{"material": "silicon", "thickness_mm": 0.15, "width_mm": 8.0, "length_mm": 8.0}]
    data = straight_line_data(arrangement="half-bridge")
    for side in ("switch", "diode"):
        data[side]["thermal"] = {"reference": "plate", "layer": layers}
    chips = [{"name": f"{c}-{s}", "x_mm": 10.0 + 20.0 * k, "y_mm": 10.0 + 20.0 * m} for k, c in enumerate("SD") for m, s in enumerate(("up", "lo"))]
    data["plate"] = {"width_mm": 60.0, "length_mm": 60.0, "layer": [{"material": "copper", "thickness_mm": 3.0}], "chip": chips}
    module_from_dict(data)
    with pytest.raises(InputError, match="couplings beside a section plate"):
        module_from_dict({**data, "coupling": [{**CURVE, **UP}]})


OWN, OTHER = FosterNetwork([0.1], [0.5]), FosterNetwork([0.02], [2.0])


@pytest.mark.parametrize(("call", "words"), [
    (lambda: matrix_modes([]), "no chip"), (lambda: matrix_modes([[OWN], [None, OWN]]), r"branches\[0\]: found 1 entries"),
    (lambda: matrix_modes([[OWN, OTHER], [OTHER, None]]), r"branches\[1\]\[1\]: found no own curve"),
    (lambda: matrix_modes([[OWN, OTHER], [FosterNetwork([0.03], [2.0]), OWN]]), r"branches\[1\]\[0\]: found other branches"),
    (lambda: matrix_modes([[OWN, FosterNetwork([0.11], [2.0])], [None, OWN]]), "0.11 K/W between chip 0 and chip 1"),
    (lambda: with_mutual(matrix_modes([[OWN]]), {(0, 1): OTHER}), "chips 0 and 1"), (lambda: with_mutual(matrix_modes([[OWN]]), {(0, 0): OTHER}), "two different chips"),
    (lambda: with_mutual(matrix_modes([[OWN, None], [None, OWN]]), {(0, 1): OTHER, (1, 0): OTHER}), "twice"),
    (lambda: MutualBranches([0.1, 0.1], [1.0]), "1 values in tau_s"), (lambda: MutualBranches([-0.1], [1.0]), "a sum of -0.1"),
    (lambda: MutualBranches([0.1, 0.1], [1.0, 1.0]), "rise from branch to branch"), (lambda: MutualBranches([np.nan], [1.0]), "r_k_per_w"),
])
def test_plain_functions_refuse(call, words):
    with pytest.raises(InputError, match=words):
        call()


# ------------------------------------------------------------------ in the march
def marched(module, net, dt_s, *, f_slow_hz=5.0, group=None, **values):
    from mission.history import ElectrothermalMarch, MarchSettings
    from mission.losses import Modulation, build_tables

    from ..history.marching import points

    dt_s = np.asarray(dt_s, float)
    engine = ElectrothermalMarch(build_tables(module, Modulation("space-vector")), net, MarchSettings(f_slow_hz=f_slow_hz))
    engine.start(40.0, theta_rad=np.pi / 2)
    return engine.add_block(points(dt_s.size, **values), dt_s=dt_s, phase_id=np.zeros(dt_s.size, np.int16), coolant_c=np.full(dt_s.size, 40.0),
                            switching_frequency_hz=5000.0, dc_voltage_v=560.0, group=group)


def test_march_against_the_closed_form():
    """A module whose losses do not change with temperature stands still, rests, and stands again: sums of exponentials, branch by branch.

    The chips that carry no current show the mutual branches and the sink alone.
    """
    module = coupled(UP, {"heated": "S-a-up", "felt": "S-b-up", "r_k_per_w": [0.03], "tau_s": [0.3]}, reference="sink")
    cooling = FosterCooling(kind="foster", r_k_per_w=[0.004, 0.008], tau_s=[0.6, 9.0], sink_sees="chip-losses")
    dt = np.array([0.05, 0.7, 0.05, 0.45, 0.05, 0.8])
    current = np.array([260.0, 260.0, 0.0, 0.0, 260.0, 260.0])
    rows = marched(module, inverter_modes(module, cooling), dt, frequency_hz=0.0, i_peak_a=current, mod_index=0.05, phi_rad=0.0)
    loss = rows.loss_j / dt[:, None]
    own = {True: ([0.01, 0.1], [0.001, 0.1]), False: ([0.02, 0.16], [0.001, 0.08])}
    z = [[[([0.004, 0.008], [0.6, 9.0])] for _ in range(12)] for _ in range(12)]
    for i in range(12):
        z[i][i].append(own[i < 6])
    for i, j in ((0, 6), (2, 8), (4, 10)):
        for a, b in ((i, j), (j, i)):
            z[a][b].append((CURVE["r_k_per_w"], CURVE["tau_s"]))
    for a, b in ((0, 2), (2, 0)):
        z[a][b].append(([0.03], [0.3]))
    want = np.full((dt.size, 12), 40.0)
    end = np.cumsum(dt)
    for row in range(dt.size):
        for k in range(row + 1):
            late, soon = end[row] - end[k] + dt[k], end[row] - end[k]
            for i in range(12):
                for j in range(12):
                    for r, tau in z[i][j]:
                        want[row, i] += loss[k, j] * (np.asarray(r) * (np.exp(-soon / np.asarray(tau)) - np.exp(-late / np.asarray(tau)))).sum()
    assert loss[0, 0] > 200.0 and (loss[:, [2, 6, 9]] < 1.0).all()
    assert want[1, 6] - want[1, 9] > 3.0  # idle diodes: beside the loaded switch, and beside an idle one
    for row in (0, 1, 4, 5):
        np.testing.assert_allclose(rows.t_max_c[row, [0, 1, 3, 7]], want[row, [0, 1, 3, 7]], atol=0.02)
    np.testing.assert_allclose(rows.t_max_c[[1, 5]][:, [2, 6, 9]], want[[1, 5]][:, [2, 6, 9]], atol=0.02)
    np.testing.assert_allclose(rows.t_min_c[3, [0, 3, 7]], want[3, [0, 3, 7]], atol=0.02)  # what was loaded cools while it rests


def test_fast_rotation_treats_equal_chips_alike():
    """By symmetry upper and lower switches get equally hot; modes of a coupling that do not cancel in the ripple would part them."""
    data = load_module("heron-300").model_dump(mode="json", exclude_none=True)
    curve = {"r_k_per_w": [-0.0015, 0.01, 0.012], "tau_s": [0.01, 0.08, 0.5]}
    data["coupling"] = [{"heated": a, "felt": b, **curve} for a, b in (("S-up", "D-up"), ("S-lo", "D-lo"), ("S-up", "D-lo"), ("S-lo", "D-up"), ("S-up", "S-lo"), ("D-up", "D-lo"))]
    module = module_from_dict(data)
    net = inverter_modes(module, FixedCooling(kind="fixed", r_th_k_per_w=0.017, heat_capacity_j_per_k=30.0))
    rows = marched(module, net, np.ones(20), frequency_hz=8.0, i_peak_a=300.0, mod_index=0.4, phi_rad=0.5)
    assert np.ptp(rows.t_max_c[-1, :6]) < 0.05 and np.ptp(rows.t_max_c[-1, 6:]) < 0.05
    # against the same along the angle: the ripple of a chip leaves out what its neighbours' ripple does to it
    slow = marched(module, net, np.ones(20), f_slow_hz=1e9, frequency_hz=8.0, i_peak_a=300.0, mod_index=0.4, phi_rad=0.5)
    assert np.abs(rows.t_max_c[-1] - slow.t_max_c[-1]).max() < 0.2 and np.abs(rows.t_min_c[-1] - slow.t_min_c[-1]).max() < 1.0


def test_another_cooling_level_leaves_the_mutual_rise_where_it_is():
    """Analytic: two idle diodes, one beside the loaded switch, differ by the mutual branches alone, whatever the fan does meanwhile."""
    module = coupled(UP, reference="sink")
    specs = [FixedCooling(kind="fixed", r_th_k_per_w=r, heat_capacity_j_per_k=400.0) for r in (0.02, 0.05)]
    levels = CoolingLevels(lambda k: (inverter_network(module, specs[k]), inverter_modes(module, specs[k])), 2)
    dt = np.array([0.4, 0.02, 0.3, 0.02, 2.0])
    rows = marched(module, levels, dt, group=np.array([0, 1, 1, 0, 0]), frequency_hz=0.0, i_peak_a=260.0, mod_index=0.05, phi_rad=0.0)
    p = rows.loss_j[:, 0] / dt
    np.testing.assert_allclose(p, p[0], rtol=1e-9)
    r, tau = np.array(CURVE["r_k_per_w"]), np.array(CURVE["tau_s"])
    want = p[0] * (r * -np.expm1(-np.cumsum(dt)[:, None] / tau)).sum(axis=1)
    np.testing.assert_allclose(rows.t_max_c[:, 6] - rows.t_max_c[:, 9], want, atol=0.01)
    assert want[1] > 3.0
