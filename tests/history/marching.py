"""Shared by the tests of the march: a module on a sink, run row by row."""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import lru_cache

import numpy as np

from mission.device import load_module
from mission.history import ElectrothermalMarch, MarchSettings
from mission.losses import Modulation, build_tables
from mission.machine import OperatingPoints
from mission.thermal import FixedCooling, FosterCooling, inverter_network, reduce_to_modes

F_SW_HZ, V_DC_V, COOLANT_C = 5000.0, 600.0, 40.0
SINK_R, SINK_TAU = [0.0035, 0.006, 0.0075], [0.8, 8.0, 45.0]


@lru_cache
def tables(module: str, modulation: str):
    return build_tables(load_module(module), Modulation(modulation))


@lru_cache
def network(module: str, sink: str):
    if sink == "foster":
        cooling = FosterCooling(kind="foster", r_k_per_w=SINK_R, tau_s=SINK_TAU)
    elif sink == "bare":
        cooling = FixedCooling(kind="fixed", r_th_k_per_w=0.017)
    else:
        cooling = FixedCooling(kind="fixed", r_th_k_per_w=0.017, heat_capacity_j_per_k=30.0)
    return reduce_to_modes(inverter_network(load_module(module), cooling))


def points(n: int, **values) -> OperatingPoints:
    """Operating points from scalars or arrays."""
    given = {"direction": 1.0, "current_angle_rad": 0.0, **values}
    return OperatingPoints(*(np.broadcast_to(np.asarray(given.get(f.name, np.nan), float), (n,)).copy() for f in fields(OperatingPoints)))


@dataclass
class Marched:
    """What a march left: envelope rows, turning points by signal, ripple blocks, the engine."""

    rows: object
    turning: dict
    ripple: list
    engine: ElectrothermalMarch


def march(op: OperatingPoints, dt_s, *, module="heron-300", modulation="space-vector", sink="foster", coolant_c=COOLANT_C, theta_rad=0.0,
          blocks=None, **settings) -> Marched:
    turning = {k: [] for k in range(60)}
    ripple = []
    table = tables(module, modulation)
    engine = ElectrothermalMarch(
        table, network(module, sink), MarchSettings(**settings),
        on_points=lambda p: turning[p.signal].append(tuple(np.array(v) for v in (p.t_c, p.time_s, p.half_period_s, p.ripple_k))),
        on_ripple=lambda r: ripple.append(tuple(np.array(v) for v in (r.range_k, r.mean_c, r.count, r.half_period_s))))
    dt_s = np.broadcast_to(np.asarray(dt_s, float), op.frequency_hz.shape)
    coolant = np.broadcast_to(np.asarray(coolant_c, float), dt_s.shape)
    engine.start(float(coolant[0]), theta_rad=theta_rad)
    parts = []
    edges = [0, dt_s.size] if blocks is None else [0, *blocks, dt_s.size]
    for a, b in zip(edges[:-1], edges[1:]):
        if b > a:
            parts.append(engine.add_block(op.rows(slice(a, b)), dt_s=dt_s[a:b], phase_id=np.zeros(b - a, np.int16), coolant_c=coolant[a:b],
                                          switching_frequency_hz=F_SW_HZ, dc_voltage_v=V_DC_V))
    engine.finish()
    rows = type(parts[0])(*(np.concatenate([getattr(p, f.name) for p in parts]) for f in fields(parts[0])))
    joined = {k: tuple(np.concatenate(c) for c in zip(*v)) for k, v in turning.items() if v}
    return Marched(rows, joined, ripple, engine)
