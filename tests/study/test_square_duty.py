"""A square duty with an exact solution, through the whole chain.

*Two methods* (closed form and 1 ms stepping, agreeing within 6e-6 K) gave the values: an
invented reference device without temperature dependence, 150 A peak, m 0.8, cos phi 0.85,
8 kHz, 560 V; 5 s on, 10 s off; branches R = (0.008, 0.035, 0.045, 0.012) K/W,
tau = (0.001, 0.015, 0.08, 0.6) s; sink 0.05 K/W, 60 s, driven by the module's losses; 40 degC.
The output frequency is put so high (2 kHz) that the ripple, which the values leave out, is small.
"""

import tomllib

import numpy as np
import pandas as pd
import pytest

import mission
from mission.device import module_from_dict, to_toml
from tests.losses.factories import power_law_module

R, TAU = [0.008, 0.035, 0.045, 0.012], [0.001, 0.015, 0.08, 0.6]
T_MAX_C, T_MIN_C, LOSS_SWITCH_W, LOSS_MODULE_W = 71.6971, 55.8968, 129.1765, 1039.097

STUDY = """
format = 1
name = "square duty"
[duty]
file = "duty.csv"
[duty.columns]
time = { column = "t", unit = "s" }
current = { column = "i", unit = "A peak" }
frequency = { column = "f", unit = "Hz" }
mod_index = { column = "m" }
power_factor = { column = "pf" }
[machine]
kind = "direct"
[module]
file = "module.toml"
[inverter]
dc_voltage_v = 560
switching_frequency_hz = 8000
modulation = "sine"
[cooling]
kind = "foster"
r_k_per_w = [0.05]
tau_s = [60.0]
coolant_c = 40
sink_sees = "chip-losses"
[lifetime]
missions_per_year = 2e6
"""


@pytest.fixture(scope="module")
def result(tmp_path_factory):
    folder = tmp_path_factory.mktemp("square")
    data = tomllib.loads(to_toml(power_law_module(tc_switch=0.0, tc_diode=0.0)))
    for kind in ("switch", "diode"):
        data[kind]["thermal"] = {"reference": "sink", "r_k_per_w": R, "tau_s": TAU}
    data.pop("case_to_sink", None)
    data["failure_mode"] = [{"name": "wires", "acts_on": "junction", "chips": "switches", "model": "lesit-1997-refit"}]
    (folder / "module.toml").write_text(to_toml(module_from_dict(data)), encoding="utf-8")
    pd.DataFrame({"t": [0.0, 5.0, 15.0], "i": [150.0, 0.0, 0.0], "f": 2000.0, "m": 0.8, "pf": 0.85}).to_csv(folder / "duty.csv", index=False)
    (folder / "study.toml").write_text(STUDY, encoding="utf-8")
    return mission.run(mission.load_study(folder / "study.toml"))


def test_losses(result):
    on = result.history.energy_j / 5.0
    assert on[0] == pytest.approx(LOSS_SWITCH_W, rel=1e-4)
    assert on.sum() == pytest.approx(LOSS_MODULE_W, rel=1e-4)


def test_periodic_extremes(result):
    """The mission is marched until it closes on itself; mean temperature within 0.01 K, ripple apart."""
    assert result.closes_within_k < 0.01
    # of the half-sine power of mean P a branch keeps a triangle-like ripple of at most P R pi/(2 pi f tau) peak to peak
    ripple = np.sum(LOSS_SWITCH_W * np.pi * np.array(R) / (2 * np.pi * 2000.0 * np.array(TAU)))
    assert T_MAX_C - 0.01 <= result.history.peak_c[0] <= T_MAX_C + 0.01 + ripple
    assert result.history.lowest_c[0] == pytest.approx(T_MIN_C, abs=0.01)


def test_life_is_far_outside_the_tested_range(result):
    """15.8 K lies below the 30 K from which the coefficients were tested: the life comes with a warning."""
    row = result.ledger.rows()[0]
    assert row.damage_by_kind["residue"] + row.damage_by_kind["closed"] == pytest.approx(1.0 / 4.72533e8, rel=0.1)
    assert row.outside_share == 1.0
    assert any("100% of the damage" in w for w in result.ledger.warnings())


def test_the_correct_joining_differs(result):
    """With the heat that leaves, the sink sees the pulse a little later."""
    right = mission.run(result.study.changed("cooling", sink_sees="heat-leaving"))
    assert right.history.peak_c[0] < result.history.peak_c[0]
    assert right.history.peak_c[0] == pytest.approx(result.history.peak_c[0], abs=1.5)
