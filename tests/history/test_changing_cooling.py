"""Cooling that changes during the march, against the nodes of the full network stepped one by one with matrix exponentials (*independent*)."""

import numpy as np
import pytest
from scipy.linalg import expm

from mission.device import load_module, module_from_dict
from mission.history import ElectrothermalMarch, MarchSettings
from mission.losses import Modulation, build_tables
from mission.thermal import CoolingLevels, FixedCooling, LevelGroup, inverter_network, reduce_to_modes
from mission.thermal.levels import _move

from ..device.factories import straight_line_data
from .marching import points

R, C = (0.05, 0.03, 0.015), 1500.0
UP, DOWN = (52.0, 60.0), (46.0, 53.0)


def levels(module, groups=None, r=R, c=C):
    def build(k):
        full = inverter_network(module, FixedCooling(kind="fixed", r_th_k_per_w=r[k], heat_capacity_j_per_k=c))
        return full, reduce_to_modes(full)
    return CoolingLevels(build, len(r), groups)


@pytest.fixture(scope="module")
def even_module():
    """Losses that do not depend on temperature, so that a row's mean loss is its loss."""
    return module_from_dict(straight_line_data(r_switch_k_per_w=(0.01, 0.06, 0.03), tau_switch_s=(0.002, 0.05, 0.4),
                                               r_diode_k_per_w=(0.02, 0.08, 0.05), tau_diode_s=(0.002, 0.04, 0.4)))


def marched(cooling, module, duty, *, theta=0.7, start=None, **row):
    engine = ElectrothermalMarch(build_tables(module, Modulation.SPACE_VECTOR), cooling, MarchSettings())
    group = row.pop("group", None)
    dt = row.pop("dt_s")
    coolant = row.pop("coolant_c")
    engine.start(float(coolant[0]), theta_rad=theta, states=start)
    rows = engine.add_block(duty, dt_s=dt, phase_id=np.zeros(dt.size, np.int16), coolant_c=coolant, switching_frequency_hz=5000.0, dc_voltage_v=600.0, group=group)
    engine.finish()
    return rows, engine


def stepped(cooling, module, rows, coolant, level_of_row):
    """Junctions at the end of every row, from the losses that the march charged; node temperatures stay when the level changes."""
    fulls = [cooling.full(k) for k in range(cooling.count)]
    steps = {}
    y, known, out, surface = np.zeros(fulls[0].c_j_per_k.size), coolant[0], [], []
    for k in range(coolant.size):
        y = y - (coolant[k] - known)
        known = coolant[k]
        level = level_of_row(k, known + (fulls[0].out_surface @ y).max())
        full, dt = fulls[level], round(rows.end_s[k] - rows.start_s[k], 9)
        if (level, dt) not in steps:
            a = -full.g_w_per_k / full.c_j_per_k[:, None]
            both = expm(np.block([[a, np.eye(y.size)], [np.zeros((y.size, 2 * y.size))]]) * dt)
            steps[level, dt] = both[: y.size, : y.size], both[: y.size, y.size:]
        keep, gain = steps[level, dt]
        y = keep @ y + gain @ (full.out_junction.T @ (rows.loss_j[k] / dt) / full.c_j_per_k)
        out.append(known + full.out_junction @ y)
        surface.append(known + (full.out_surface @ y).max())
    return np.array(out), np.array(surface)


def test_stages_follow_the_sink_as_the_nodes_say(even_module):
    """Standstill currents and pauses, a coolant that wanders, three stages with hysteresis looked at once a second."""
    rng = np.random.default_rng(5)
    n = 1500
    current = np.repeat(rng.choice([0.0, 60.0, 150.0, 220.0], 60), 25)
    coolant = np.repeat(30.0 + np.cumsum(rng.normal(0.0, 1.0, 30)), 50)
    cooling = levels(even_module, (LevelGroup((0, 1, 2), UP, DOWN),))
    rows, engine = marched(cooling, even_module, points(n, frequency_hz=0.0, i_peak_a=current, mod_index=0.05, phi_rad=0.4), dt_s=np.ones(n), coolant_c=coolant)
    place, taken = 0, []

    def controller(k, surface):
        nonlocal place
        while place < 2 and surface > UP[place]:
            place += 1
        while place > 0 and surface < DOWN[place - 1]:
            place -= 1
        taken.append(place)
        return place

    want, _ = stepped(cooling, even_module, rows, coolant, controller)
    assert engine.n_changes >= 8 and set(taken) == {0, 1, 2}
    assert (rows.level == taken).mean() > 0.998  # a threshold passed within rounding may fall into the second beside
    np.testing.assert_allclose(engine.level_time_s.sum(), n)
    rise = want.max() - coolant.min()
    # at rest and at standstill the end of a row is its extreme; heating rows end at their highest, cooling rows at their lowest
    ends = np.where(np.diff(want, axis=0, prepend=coolant[0]) > 0.0, rows.t_max_c, rows.t_min_c)
    steady = np.abs(np.diff(want, axis=0, prepend=coolant[0])) > 0.02
    assert np.abs(ends - want)[steady].max() < 2e-3 * rise


def test_levels_that_cool_alike_change_nothing():
    """Every row another level, all of the same resistance: fast and slow rotation, ripple included, must not feel it."""
    module = load_module("heron-300")
    rng = np.random.default_rng(2)
    n = 200
    frequency = np.repeat(rng.choice([0.0, 0.7, 3.0, 12.0, 45.0], 40), 5)
    duty = points(n, frequency_hz=frequency, i_peak_a=np.repeat(rng.uniform(0.0, 350.0, 40), 5), mod_index=0.1 + 0.8 * frequency / 45.0, phi_rad=0.3)
    row = {"dt_s": np.full(n, 1.7), "coolant_c": np.full(n, 40.0)}
    cooling = levels(module, r=(0.02, 0.02, 0.02))
    one, _ = marched(cooling.network(0), module, duty, **row)
    many, engine = marched(cooling, module, duty, group=np.arange(n) % 3, **row)
    assert engine.n_changes == n - 1
    rise = one.t_max_c.max() - 40.0
    # a jump of the current in fast rotation is marched by angle where the cooling changes with it, by the mean where it is small and nothing else does
    for a, b in ((many.t_max_c, one.t_max_c), (many.t_min_c, one.t_min_c)):
        assert np.abs(a - b).max() < 0.008 * rise
        assert np.quantile(np.abs(a - b), 0.95) < 0.001 * rise
    np.testing.assert_allclose(many.loss_j.sum(), one.loss_j.sum(), rtol=1e-4)


def test_a_row_of_changes_at_one_moment_leaves_the_junctions(even_module):
    """Changes without time between them neither heat nor cool, and come back to where they began."""
    n = 40
    cooling = levels(even_module)
    _, engine = marched(cooling, even_module, points(n, frequency_hz=0.0, i_peak_a=200.0, mod_index=0.05, phi_rad=0.4),
                        dt_s=np.ones(n), coolant_c=np.full(n, 30.0), group=np.repeat([0, 2], n // 2))
    before = engine.junction_c
    for level in np.random.default_rng(1).integers(0, 3, 300).tolist():
        engine._change(level)
        assert np.abs(engine.junction_c - before).max() < 1e-3 * (before.max() - 30.0)


def test_a_stated_move_error_holds(even_module):
    """The stated error is that of the reduced state against the field: recomputed here from node temperatures."""
    cooling = levels(even_module)
    a, b = cooling.full(0), cooling.full(2)
    root = np.sqrt(a.c_j_per_k)
    worst = 0.0
    read = cooling.field(2)[3]
    net = cooling.network(2)
    for chip in range(12):
        y = np.linalg.solve(a.g_w_per_k, a.out_junction.T[:, chip])  # steady heat in one chip at level 0
        x = read @ (b.shapes()[1].T @ (root * y))
        cut = net.lam_local_per_s.size
        for t in (0.0, 0.01, 0.3, 4.0, 60.0):
            want = b.out_junction @ expm(-b.g_w_per_k / b.c_j_per_k[:, None] * t) @ y
            local = (x[:cut].reshape(net.lam_local_per_s.shape) * np.exp(-net.lam_local_per_s * t)).sum(axis=0)
            worst = max(worst, np.abs(local + net.c_shared @ (x[cut:] * np.exp(-net.lam_shared_per_s * t)) - want).max() / (a.out_junction @ y).max())
    assert 0.0 < worst <= 1.05 * cooling.move(0, 2).error
    assert cooling.move(0, 2).error < 0.003


def test_repeated_mission_closes_through_its_changes(even_module):
    """Start states extrapolated through the changes: the second pass of a slow sink already closes."""
    n = 120
    cooling = levels(even_module, c=60000.0)
    duty = points(n, frequency_hz=0.0, i_peak_a=np.where(np.arange(n) % 40 < 25, 200.0, 0.0), mod_index=0.05, phi_rad=0.4)
    row = {"dt_s": np.ones(n), "coolant_c": np.full(n, 30.0), "group": np.where(np.arange(n) // 30 % 2, 2, 0)}
    row["group"][-1] = 0
    states, starts = None, []
    for _ in range(3):
        engine = ElectrothermalMarch(build_tables(even_module, Modulation.SPACE_VECTOR), cooling, MarchSettings())
        engine.start(30.0, theta_rad=0.7, states=states)
        before, began = engine.states, engine.junction_c
        engine.add_block(duty, dt_s=row["dt_s"], phase_id=np.zeros(n, np.int16), coolant_c=row["coolant_c"], switching_frequency_hz=5000.0, dc_voltage_v=600.0, group=row["group"])
        engine.finish()
        starts.append(np.abs(engine.junction_c - began).max())
        states = engine.periodic_start(before, float(n))
    assert starts[0] > 1.0 and starts[1] < 0.02 * starts[0] and starts[2] < 0.02


def test_masses_that_differ_are_refused(even_module):
    from mission.errors import InputError

    one, other = levels(even_module, c=1500.0), levels(even_module, c=1600.0)
    with pytest.raises(InputError, match="same heat capacities"):
        _move(one._level(0), other._level(1))
