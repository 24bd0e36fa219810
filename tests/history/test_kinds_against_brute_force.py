"""The march of every kind of leg and every modulation against an independent time-resolved run (tests/brute_force).

All expected numbers here are *independent code*: dense matrix exponentials on the physical nodes, every
chip, losses from the curves by rules of its own, 3600 steps a period or steps of 100 microseconds
(a quarter of the step moves no extreme by more than 0.04 K).
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import lru_cache
from itertools import pairwise

import numpy as np
import pytest

from mission.cycles import CycleCounter, CycleTable
from mission.device import load_module
from mission.history import ElectrothermalMarch
from mission.lifetime import load_model
from mission.losses import Modulation, build_tables
from mission.thermal import FosterCooling, inverter_network, reduce_to_modes
from tests.brute_force import reference

from .marching import COOLANT_C, SINK_R, SINK_TAU, points

#: Module: peak current [A], link [V], carrier [Hz].
DRIVES = {
    "heron-300": (330.0, 600.0, 5e3), "swift-400": (360.0, 700.0, 1e4), "tern-300": (300.0, 600.0, 5e3),
    "plover-300": (280.0, 600.0, 8e3), "curlew-300": (300.0, 800.0, 6e3), "dunlin-300": (280.0, 800.0, 6e3),
}
QUICK_R, QUICK_TAU = [0.006, 0.010], [0.15, 0.6]  # a sink that settles soon


@lru_cache
def network(module, quick):
    cooling = FosterCooling(kind="foster", r_k_per_w=QUICK_R if quick else SINK_R, tau_s=QUICK_TAU if quick else SINK_TAU)
    return reduce_to_modes(inverter_network(load_module(module), cooling))


@lru_cache
def tables(module, modulation, dead_time_s):
    return build_tables(load_module(module), Modulation(modulation), dead_time_s=dead_time_s)


def brute(module, modulation, *, quick=False, dead_time_s=0.0):
    _, v_dc_v, carrier_hz = DRIVES[module]
    sink = (QUICK_R, QUICK_TAU) if quick else (SINK_R, SINK_TAU)
    return reference.params_from_module(load_module(module), *sink, COOLANT_C, carrier_hz, v_dc_v, modulation, dead_time_s=dead_time_s)


@dataclass
class Marched:
    """What a march left: rows, turning points by signal, blocks of ripple."""

    rows: object
    turning: dict
    ripple: list
    n_chips: int

    @property
    def damage(self):
        """Damage per chip by the package's own counting and lifetime stages."""
        n = self.n_chips
        counter = CycleCounter(2 * n)
        for signal, parts in self.turning.items():
            t, time, half, ripple = (np.concatenate(c) for c in zip(*parts))
            counter.push(signal, t, time, None, half, ripple)
        closed = counter.finish("repeat", period_s=float(self.rows.end_s[-1]))
        parts = [closed.select(closed.signal < n)]
        for range_k, mean_c, count, half in self.ripple:
            w = half.size
            parts.append(CycleTable.ripple(
                signal=np.tile(np.arange(n), w), range_k=range_k.ravel(), mean_c=mean_c.ravel(), heating_s=np.repeat(half, n),
                start_s=np.zeros(n * w), end_s=np.zeros(n * w), phase_id=np.zeros(n * w, int), count=count.ravel()))
        table = CycleTable.concat(parts)
        n_f, _ = load_model("lesit-1997-refit").cycles_to_failure(table.range_k, table.mean_c, table.min_c, table.max_c, table.heating_s)
        return np.bincount(table.signal, weights=table.count / n_f, minlength=n)


def march(module, modulation, duty, *, quick=False, dead_time_s=0.0, derating=None):
    """March the rows of the reference."""
    turning, ripple = {}, []
    _, v_dc_v, carrier_hz = DRIVES[module]
    engine = ElectrothermalMarch(
        tables(module, modulation, dead_time_s), network(module, quick), derating=derating,
        on_points=lambda p: turning.setdefault(p.signal, []).append(tuple(np.array(v) for v in (p.t_c, p.time_s, p.half_period_s, p.ripple_k))),
        on_ripple=lambda r: ripple.append(tuple(np.array(v) for v in (r.range_k, r.mean_c, r.count, r.half_period_s))))
    n = duty.dt_s.size
    coolant = np.full(n, COOLANT_C) if duty.coolant_c is None else duty.coolant_c
    op = points(n, frequency_hz=duty.f_hz, direction=duty.direction, i_peak_a=duty.i_peak_a, mod_index=duty.mod_index, phi_rad=duty.phi_rad,
                current_angle_rad=duty.current_angle_rad)
    engine.start(float(coolant[0]))
    rows = engine.add_block(op, dt_s=duty.dt_s, phase_id=np.zeros(n, np.int16), coolant_c=coolant, switching_frequency_hz=carrier_hz, dc_voltage_v=v_dc_v)
    engine.finish()
    return Marched(rows, turning, ripple, engine.n_chips)


# ------------------------------------------------------------------ steady operation

#: Modulation, dead time [s], modulation index (None: one of three in turn).
WAYS = [(m, 0.0, None) for m in reference.MODULATIONS] + [
    ("sine", 0.0, 1.22), ("third-harmonic", 0.0, 1.22), ("space-vector", 0.0, 1.22), ("sine", 2e-6, None), ("space-vector", 2e-6, None)]


def steady_cases():
    """Every module in every way; frequency, displacement, direction and modulation index change from case to case."""
    for a, module in enumerate(DRIVES):
        for b, (modulation, dead_time_s, mod_index) in enumerate(WAYS):
            turn = a + b
            frequency_hz = (0.5, 4.9, 6.0, 50.0)[turn % 4]
            phi_rad = (0.5, 2.7, -0.6, -2.5)[(turn + b // 4 + a // 2) % 4]  # motoring and generating, lagging and leading
            direction = (1.0, -1.0)[(turn // 4 + a) % 2]
            m = mod_index or (0.15, 0.6, 0.95)[(b + a // 2) % 3]
            dead = f"-dead-{dead_time_s * 1e6:g}us" if dead_time_s else ""
            name = f"{module}-{modulation}-{m}{dead}-{frequency_hz}Hz{'-backwards' if direction < 0 else ''}-phi{phi_rad}"
            yield pytest.param(module, modulation, dead_time_s, m, frequency_hz, phi_rad, direction, id=name)


@pytest.mark.parametrize("module, modulation, dead_time_s, mod_index, frequency_hz, phi_rad, direction", steady_cases())
def test_steady_extremes(module, modulation, dead_time_s, mod_index, frequency_hz, phi_rad, direction):
    """Lowest and highest temperature of every chip within 0.3 K, mean loss within 0.3 % (and 0.05 % of the most loaded chip)."""
    i_peak_a = DRIVES[module][0]
    last_s = max(20.0 / frequency_hz, 1.0) if frequency_hz > 1.0 else 2.0 / frequency_hz  # whole periods
    duty = reference.rows([150.0, 150.0, last_s], frequency_hz, direction, i_peak_a, mod_index, phi_rad)
    run = march(module, modulation, duty, quick=True, dead_time_s=dead_time_s)
    params = brute(module, modulation, quick=True, dead_time_s=dead_time_s)
    point = {"f_hz": frequency_hz, "i_peak_a": i_peak_a, "mod_index": mod_index, "phi_rad": phi_rad, "direction": direction}
    rough = reference.steady_extremes(params, **point, steps_per_period=360, tolerance_k=0.02)
    want = reference.steady_extremes(params, **point, tolerance_k=2e-3, guess_k=rough["state_k"])
    loss_w = run.rows.loss_j[-1] / last_s
    high, low = run.rows.t_max_c[-1] - want["max_c"], run.rows.t_min_c[-1] - want["min_c"]
    print(f"DEV {np.abs(high).max():.3f} {np.abs(low).max():.3f} {100 * np.abs(loss_w / np.maximum(want['loss_w'], 0.05 * want['loss_w'].max()) - want['loss_w']/np.maximum(want['loss_w'], 0.05 * want['loss_w'].max())).max():.3f}")
    np.testing.assert_allclose(loss_w, want["loss_w"], rtol=3e-3, atol=5e-4 * want["loss_w"].max())
    np.testing.assert_allclose(run.rows.t_max_c[-1], want["max_c"], atol=0.3)
    np.testing.assert_allclose(run.rows.t_min_c[-1], want["min_c"], atol=0.3)


# ------------------------------------------------------------------ duties

def duty(*phases, i_peak_a, coolant_c=None):
    """Rows from phases of (seconds, row length, from frequency, to frequency, direction, load, modulation index at the end, displacement)."""
    parts = []
    for seconds, row_s, f0, f1, direction, load, m1, phi in phases:
        n = round(seconds / row_s)
        f = f0 + (f1 - f0) * (np.arange(n) + 0.5) / n
        m = np.full(n, m1) if f1 == f0 else 0.08 + (m1 - 0.08) * f / max(f0, f1)
        parts.append(reference.rows(np.full(n, row_s), f, direction, load * i_peak_a, m, phi, 0.4 if phi < 1.6 else -2.0))
    joined = {k: np.concatenate([getattr(p, k) for p in parts]) for k in ("dt_s", "f_hz", "direction", "i_peak_a", "mod_index", "phi_rad", "current_angle_rad")}
    return reference.Rows(**joined, coolant_c=None if coolant_c is None else coolant_c(np.cumsum(joined["dt_s"])))


def start_to_stop(i_peak_a, coolant_c=None):
    """20 s: torque at standstill, breaking away, slow and fast rotation with jumps of the load, braking, standstill under load, a pause, backwards."""
    return duty(
        (2.0, 0.5, 0.0, 0.0, 1.0, 0.55, 0.03, 0.0), (2.5, 0.1, 0.3, 4.8, 1.0, 1.05, 0.25, 0.35), (3.0, 0.1, 5.0, 47.3, 1.0, 0.9, 0.95, 0.5),
        (1.5, 0.5, 47.3, 47.3, 1.0, 0.5, 0.95, 0.4), (1.5, 0.75, 47.3, 47.3, 1.0, 1.1, 0.95, 0.5), (0.7, 0.7, 47.3, 47.3, 1.0, 0.0, 0.9, 0.5),
        (1.3, 1.3, 43.1, 43.1, 1.0, 0.9, 0.85, 0.6), (2.0, 0.1, 43.1, 0.5, 1.0, 0.75, 0.85, 2.6), (1.5, 1.5, 0.0, 0.0, 1.0, 0.6, 0.03, 0.0),
        (1.0, 0.5, 0.0, 0.0, 1.0, 0.0, 0.0, 0.0), (1.5, 0.1, 0.5, 9.0, -1.0, 0.8, 0.3, 0.4), (1.5, 1.5, 11.3, 11.3, -1.0, 0.9, 0.4, -0.5),
        i_peak_a=i_peak_a, coolant_c=coolant_c)


def check(run, want, *, peak_k=0.5, energy=3e-3, chip_energy=5e-3, lowest_coolant_c=COOLANT_C):
    """Extremes, energy, and no junction colder than the coolant ever was."""
    high, low = run.rows.t_max_c.max(axis=0) - want["peak_c"], run.rows.t_min_c.min(axis=0) - want["lowest_c"]
    n = run.n_chips
    rh = run.rows.t_max_c - want["row_peak_c"][:, :n]
    rl = run.rows.t_min_c - want["row_lowest_c"][:, :n]
    loss = run.rows.loss_j.sum(axis=0)
    print(f"DEV peak {np.abs(high).max():.3f} low {np.abs(low).max():.3f} rows {np.abs(rh).max():.3f} {np.unravel_index(np.abs(rh).argmax(), rh.shape)} {np.abs(rl).max():.3f} {np.unravel_index(np.abs(rl).argmax(), rl.shape)} "
          f"energy {100*(loss.sum()/want['energy_j'].sum()-1):.4f} chip {100*np.abs(loss/want['energy_j']-1).max():.4f} coldest {run.rows.t_min_c.min()-lowest_coolant_c:.5f} hot {want['peak_c'].max():.1f}")
    np.testing.assert_allclose(run.rows.t_max_c.max(axis=0), want["peak_c"], atol=peak_k)
    np.testing.assert_allclose(run.rows.t_min_c.min(axis=0), want["lowest_c"], atol=peak_k)
    assert run.rows.loss_j.sum() == pytest.approx(want["energy_j"].sum(), rel=energy)
    np.testing.assert_allclose(run.rows.loss_j.sum(axis=0), want["energy_j"], rtol=chip_energy)
    assert run.rows.t_min_c.min() >= lowest_coolant_c - 1e-6


@pytest.mark.parametrize("module, modulation", [("tern-300", "space-vector"), ("swift-400", "clamp-30"), ("curlew-300", "clamp-120-upper")])
def test_transient(module, modulation):
    rows = start_to_stop(DRIVES[module][0])
    check(march(module, modulation, rows), reference.transient(brute(module, modulation), rows))


def test_coolant_in_steps():
    """The coolant steps while the drive idles and runs: no junction falls below its lowest temperature."""
    rows = start_to_stop(DRIVES["swift-400"][0], lambda end_s: np.select([end_s < 3.0, end_s < 9.0, end_s < 13.0], [60.0, 25.0, 45.0], 15.0))
    check(march("swift-400", "space-vector", rows), reference.transient(brute("swift-400", "space-vector"), rows), lowest_coolant_c=15.0)


@pytest.mark.parametrize("module, modulation", [("tern-300", "third-harmonic"), ("heron-300", "clamp-120-lower")])
def test_long_fast_rows(module, modulation):
    """Rows of many seconds while the module still warms up: extremes, heat and damage as if marched by angle."""
    rows = duty((12.0, 12.0, 23.0, 23.0, 1.0, 1.0, 0.45, 0.5), (9.0, 9.0, 37.0, 37.0, -1.0, 0.6, 0.7, 0.4), (7.3, 7.3, 11.0, 11.0, 1.0, 0.95, 0.3, 2.8),
                i_peak_a=DRIVES[module][0])
    run, want = march(module, modulation, rows), reference.transient(brute(module, modulation), rows)
    check(run, want)
    a = run.damage / reference.damage_per_chip(want)
    print("DEV damage", a.min(), a.max())
    n = run.n_chips
    np.testing.assert_allclose(run.rows.t_max_c, want["row_peak_c"][:, :n], atol=0.5)
    np.testing.assert_allclose(run.rows.loss_j, want["row_energy_j"], rtol=5e-3)
    np.testing.assert_allclose(run.damage, reference.damage_per_chip(want), rtol=0.03)


@pytest.mark.parametrize("module, modulation", [("tern-300", "sine"), ("curlew-300", "space-vector")])
def test_noisy_short_rows(module, modulation):
    """Rows of 10 ms at 20 Hz whose current changes by some percent: shorter than a period, so there is no periodic ripple."""
    n = 600
    noise = np.random.default_rng(3).normal(0.0, 0.05, n)
    i_peak_a = DRIVES[module][0] * (0.9 + noise)
    rows = reference.rows(np.full(n, 0.01), 20.0, 1.0, i_peak_a, 0.4 + 0.4 * noise, 0.5)
    run, want = march(module, modulation, rows), reference.transient(brute(module, modulation), rows)
    check(run, want)
    n = run.n_chips
    a = run.damage / reference.damage_per_chip(want)
    print("DEV damage", a.min(), a.max())
    np.testing.assert_allclose(run.damage, reference.damage_per_chip(want), rtol=0.03)


# ------------------------------------------------------------------ derating

@pytest.mark.parametrize("module, modulation", [("swift-400", "space-vector"), ("curlew-300", "sine")])
def test_derating_by_junction_temperature(module, modulation):
    """The carrier is set anew every 0.1 s from the hottest chip; the reference does so by the same rule."""
    derating = (np.array([80.0, 130.0]), np.array([DRIVES[module][2], 0.35 * DRIVES[module][2]]))
    rows = duty((1.0, 0.25, 0.0, 0.0, 1.0, 0.5, 0.03, 0.0), (2.0, 2.0, 2.3, 2.3, 1.0, 1.0, 0.2, 0.4), (3.0, 0.1, 2.3, 44.0, 1.0, 1.1, 0.9, 0.5),
                (5.0, 5.0, 44.0, 44.0, 1.0, 1.1, 0.9, 0.5), (1.0, 0.5, 44.0, 44.0, 1.0, 0.0, 0.9, 0.5), (2.0, 1.0, 44.0, 44.0, 1.0, 1.2, 0.9, 0.5),
                (1.5, 1.5, 8.3, 8.3, -1.0, 1.0, 0.3, 0.4), i_peak_a=DRIVES[module][0])
    want = reference.transient(brute(module, modulation), rows, derating=derating)
    free = reference.transient(brute(module, modulation), rows)
    print("DEV f_sw", want["f_sw_hz"].min(), want["f_sw_hz"].max(), "peak free", free["peak_c"].max(), want["peak_c"].max(), free["energy_j"].sum()/want["energy_j"].sum())
    run = march(module, modulation, rows, derating=derating)
    check(run, want)
