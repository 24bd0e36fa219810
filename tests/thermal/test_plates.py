"""Chips with ladders of their own on a common plate: against finite elements, against the exact stack alone, and by what must hold for any plate."""

import dataclasses
import os
import subprocess
import sys
from functools import lru_cache
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from mission.device import load_module, module_from_dict
from mission.errors import InputError, RangeError
from mission.history import march as marching_limits
from mission.thermal import (
    CauerLadder,
    CoolingLevels,
    FixedCooling,
    FosterCooling,
    FourierStack,
    NetworkBuilder,
    PlateLayer,
    SinkPath,
    Source,
    inverter_modes,
    inverter_network,
    plate_body,
    plate_stack,
    reduce_coupled,
    stack_ladder,
    unreduced,
)
from mission.thermal.assembly import Spot
from mission.thermal.modes import MOST_LOCAL, MOST_SHARED, fewer_rates

from ..history import marching
from . import finite_elements
from .helpers import reduced_response

AVOCET = load_module("avocet-300")
FOSTER = FosterCooling(kind="foster", r_k_per_w=[0.0035, 0.006, 0.0075], tau_s=[0.8, 8.0, 45.0])
WITH_MASS = FixedCooling(kind="fixed", r_th_k_per_w=0.02, heat_capacity_j_per_k=400.0)
BARE = FixedCooling(kind="fixed", r_th_k_per_w=0.02)
COOLINGS = {"foster": FOSTER, "with mass": WITH_MASS, "bare": BARE}


@lru_cache
def avocet(cooling):
    return inverter_network(AVOCET, COOLINGS[cooling])


@lru_cache
def reduced(cooling, tolerance=1e-3):
    return reduce_coupled(avocet(cooling), relative_tolerance=tolerance)


def layer(k, rho_c, thick_mm):
    return PlateLayer(k, rho_c / 1000.0, 1000.0, thick_mm)


def on_sink(stack, columns, r_sink, c_sink, *, cells=6):
    """The network of chips on a plate on a sink; ``columns``: layers of every chip as (k, rho c, thickness [mm]) from the top, with no spreading."""
    builder = NetworkBuilder()
    surface = builder.ladder(CauerLadder([r_sink], [c_sink]), None)
    ladders = []
    for source, column in zip(stack.sources, columns):
        named = [SimpleNamespace(material=k, thickness_mm=c[2], width_mm=source.width_mm, length_mm=source.length_mm, spread_deg=0.0) for k, c in enumerate(column)]
        ladders.append(stack_ladder(named, {k: layer(*c) for k, c in enumerate(column)}, cells=cells))
    body = plate_body(stack.network(fastest_s=1e-4), [one.c_end_j_per_k for one in ladders])
    first = builder.body(body.c_j_per_k, body.g_w_per_k, surface)
    heated = [builder.ladder(one.ladder, Spot(first, row)) for one, row in zip(ladders, body.face)]
    return builder.build(heated, [Spot(first, row) for row in body.below], [surface])


# finite elements -------------------------------------------------------------------------------------------------------------------

SILICON, SOLDER, COPPER, CERAMIC = (110.0, 2330 * 750.0), (57.0, 7370 * 220.0), (390.0, 8930 * 385.0), (24.0, 3780 * 830.0)
COLUMN = [(*SILICON, 0.12), (*SOLDER, 0.08)]
PLATE = [(*COPPER, 0.3), (*CERAMIC, 0.4), (*COPPER, 2.5)]
#: Chips by x and y edges [mm], on a plate of 44 x 30 mm, on a sink.
CHIPS, PASTE_MM2, R_SINK, C_SINK = ((6.0, 18.0, 8.0, 18.0), (23.0, 32.0, 12.0, 24.0)), 60.0, 0.08, 40.0


@lru_cache
def both():
    sources = [Source((a + b) / 2, (c + d) / 2, b - a, d - c) for a, b, c, d in CHIPS]
    stack = FourierStack(44.0, 30.0, [layer(*p) for p in PLATE], sources, PASTE_MM2)
    x = finite_elements.graded(np.array([0, 6, 18, 23, 32, 44]) * 1e-3, [3, 6, 3, 5, 3])
    y = finite_elements.graded(np.array([0, 8, 12, 18, 24, 30]) * 1e-3, [3, 3, 4, 4, 3])
    model = finite_elements.chips_on_plate(
        x, y, [(k, c, t * 1e-3, n) for (k, c, t), n in zip(COLUMN, (2, 1))], [(k, c, t * 1e-3, n) for (k, c, t), n in zip(PLATE, (1, 2, 2))],
        [tuple(1e-3 * v for v in chip) for chip in CHIPS], PASTE_MM2 * 1e-6, R_SINK, C_SINK)
    return model, on_sink(stack, [COLUMN, COLUMN], R_SINK, C_SINK)


def test_print():
    model, full = both()
    r, case = model.steady()
    print(r, full.r_th_k_per_w() / r - 1, case, full.out_case @ np.linalg.solve(full.g_w_per_k, full.out_junction.T) / case - 1)
    t, want = model.step_response(2e-4, 5.0, 7, 12)
    found = np.stack([full.step_response_k_per_w(t, k) for k in range(2)], axis=2)
    for k in range(0, t.size, 5):
        print(t[k], want[k].ravel(), (found[k] / want[k] - 1).ravel())
