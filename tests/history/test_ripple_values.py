"""Half-sine power on a four-branch network: swing against output frequency.

*Two methods agree* (step propagation with 20 000 steps a period, and a series of 3000
harmonics): R = (0.008, 0.035, 0.045, 0.012) K/W, tau = (0.001, 0.015, 0.08, 0.6) s,
P = P_pk sin on the positive half wave with mean 200 W (P_pk = 628.319 W), case-relative.
A device whose on-state voltage is constant makes exactly this power at m = 0.
"""

from __future__ import annotations

import numpy as np
import pytest

from mission.device import module_from_dict
from mission.history import ElectrothermalMarch, MarchSettings
from mission.losses import Modulation, build_tables
from mission.thermal import FixedCooling, inverter_network, reduce_to_modes
from tests.device.factories import straight_line_data

from .marching import points

R, TAU = [0.008, 0.035, 0.045, 0.012], [0.001, 0.015, 0.08, 0.6]
SWING_MAX_MIN_K = {1.0: (53.0273, 54.4854, 1.4581), 5.0: (34.9101, 41.0133, 6.1032), 50.0: (10.1232, 25.6076, 15.4844)}
V0_V, P_PEAK_W = 3.0, 628.319


@pytest.fixture(scope="module")
def parts():
    data = straight_line_data(v_t0_v=V0_V, r_t_ohm=1e-12, e_switch_j=0.0, e_diode_j=0.0, reference="sink", r_switch_k_per_w=R, tau_switch_s=TAU)
    module = module_from_dict(data)
    # a sink that hardly warms: the values are relative to the case
    network = reduce_to_modes(inverter_network(module, FixedCooling(kind="fixed", r_th_k_per_w=1e-7)))
    return build_tables(module, Modulation.SINE), network


@pytest.mark.parametrize("frequency_hz", SWING_MAX_MIN_K)
@pytest.mark.parametrize("regime", ["as set", "along the angle"])
def test_half_sine(parts, frequency_hz, regime):
    tables, network = parts
    engine = ElectrothermalMarch(tables, network, MarchSettings(f_slow_hz=5.0 if regime == "as set" else 1e9, steps_per_period=256))
    op = points(10, frequency_hz=frequency_hz, i_peak_a=2.0 * P_PEAK_W / V0_V, mod_index=0.0, phi_rad=0.0)
    engine.start(0.0)
    rows = engine.add_block(op, dt_s=np.full(10, 2.0), phase_id=np.zeros(10, np.int16), coolant_c=np.zeros(10), switching_frequency_hz=0.0, dc_voltage_v=600.0)
    swing, high, low = SWING_MAX_MIN_K[frequency_hz]
    assert rows.loss_j[-1, 0] / 2.0 == pytest.approx(200.0, rel=1e-3)
    for chip in range(6):
        assert rows.t_max_c[-1, chip] == pytest.approx(high, rel=1e-3)
        assert rows.t_min_c[-1, chip] == pytest.approx(low, abs=1e-3 * swing)
