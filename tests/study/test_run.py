"""The whole chain on the demo hour: what must hold whatever the numbers are."""

from __future__ import annotations

import dataclasses
import sys

import numpy as np
import pandas as pd
import pytest

import mission
from mission.errors import InputError
from mission.machine import DirectPoints, operating_points
from mission.study import Stopped


@pytest.fixture(scope="module")
def study():
    return mission.load_study("profiles/ferry-hour.toml")


@pytest.fixture(scope="module")
def result(study):
    return mission.run(study)


def test_mission_closes_on_itself(result):
    """It begins as warm as it ends; the residue that closes over the joint is counted."""
    swing = (result.history.peak_c - result.history.lowest_c).max()
    assert result.closes_within_k <= 0.002 * swing
    assert result.complete


def test_energy_of_the_chips_is_the_loss_of_the_history(result):
    h = result.history
    assert (h.loss_w * np.diff(h.edge_s)[:, None]).sum(axis=0) == pytest.approx(h.energy_j, rel=1e-9)


def test_same_operating_points_same_result(study, result):
    """The duty given as frequency, modulation index and displacement heats the chips like the duty given as speed.

    Direct points know no rotor, so the chip that holds a standstill may be another; the
    hottest of each kind and the total losses agree.
    """
    blocks = list(study.profile.blocks())
    points = [operating_points(b, study.spec.machine, dc_voltage_v=600.0, mod_index_max=study.spec.inverter.modulation.mod_index_max, where="test")
              for b in blocks]
    frame = pd.DataFrame({
        "t": np.concatenate([b.time_s for b in blocks] + [[study.profile.duration_s]]),
        **{name: np.append(np.concatenate([getattr(p, attribute) for p in points]), 0.0)
           for name, attribute in (("i", "i_peak_a"), ("f", "frequency_hz"), ("m", "mod_index"), ("phi", "phi_rad"))},
        "T": np.append(np.concatenate([b.columns["coolant_c"] for b in blocks]), 30.0)})
    duty = mission.profile_from_frame(frame, {
        "time": {"column": "t", "unit": "s"}, "current": {"column": "i", "unit": "A peak"}, "frequency": {"column": "f", "unit": "Hz"},
        "mod_index": {"column": "m"}, "displacement": {"column": "phi", "unit": "rad"}, "coolant": {"column": "T", "unit": "degC"}})
    direct_spec = study.spec.model_copy(update={"machine": DirectPoints(kind="direct")})
    direct = mission.run(dataclasses.replace(study, spec=direct_spec, profile=duty))
    assert direct.history.energy_j.sum() == pytest.approx(result.history.energy_j.sum(), rel=2e-3)
    for kind in (slice(0, 6), slice(6, 12)):
        assert direct.history.peak_c[kind].max() == pytest.approx(result.history.peak_c[kind].max(), abs=4.0)


def test_block_size_changes_nothing(study, result, monkeypatch):
    """Memory is bounded by blocks; the result does not know them."""
    monkeypatch.setattr(sys.modules["mission.study.run"], "BLOCK_ROWS", 777)
    again = mission.run(study)
    np.testing.assert_array_equal(again.history.peak_c, result.history.peak_c)
    np.testing.assert_allclose([r.damage_per_mission for r in again.ledger.rows()], [r.damage_per_mission for r in result.ledger.rows()], rtol=1e-9)


def test_a_run_can_be_stopped_without_losing_what_is_done(study):
    seen = []

    def stop(share, words):
        seen.append((share, words))
        raise Stopped("enough")

    part = mission.run(study, progress=stop)
    assert not part.complete
    assert len(seen) == 1 and 0.0 < seen[0][0] <= 1.0
    assert 0.0 < part.history.duration_s <= study.profile.duration_s
    assert part.history.peak_c.max() > 40.0


def test_cooler_coolant_lives_longer(study, result):
    """Halving the sink's resistance lowers every peak and lengthens every life."""
    better = mission.run(study.changed("cooling", r_k_per_w=[0.00175, 0.003, 0.00375]))
    assert np.all(better.history.peak_c < result.history.peak_c)
    for a, b in zip(better.ledger.rows(), result.ledger.rows()):
        assert a.life_years > b.life_years


def test_half_cycles_and_repetition_differ_only_in_the_residue(study, result):
    half = mission.run(study.changed("lifetime", residue="half"))
    for a, b in zip(half.ledger.rows(), result.ledger.rows()):
        assert a.damage_by_kind["closed"] == pytest.approx(b.damage_by_kind["closed"], rel=1e-12)
        assert a.damage_by_kind["ripple"] == pytest.approx(b.damage_by_kind["ripple"], rel=1e-12)


def test_changed_values_are_checked_like_a_file(study):
    with pytest.raises(InputError, match=r"switching_frequency_hz.*-5.*above 0"):
        study.changed("inverter", switching_frequency_hz=-5.0)
    with pytest.raises(InputError, match=r"section.*'inverte'"):
        study.changed("inverte", x=1)


def test_start_angle_moves_the_load_between_phases(study, result):
    """A third of a turn later phase b gets what phase a got: chips change places, up to the network's symmetry."""
    turned = mission.run(study.changed("march", start_angle_deg=120.0))
    a, b = result.history.peak_c, turned.history.peak_c
    # theta advanced by 120 degrees: phase b (theta - 120) is where phase a was
    np.testing.assert_allclose(b[[2, 3, 4, 5, 0, 1]], a[:6], atol=0.05)
    np.testing.assert_allclose(b[[8, 9, 10, 11, 6, 7]], a[6:], atol=0.05)


def test_no_current_no_damage(study):
    frame = pd.DataFrame({"t": [0.0, 30.0, 60.0], "i": 0.0, "n": 0.0, "T": 25.0})
    duty = mission.profile_from_frame(frame, {"time": {"column": "t", "unit": "s"}, "current": {"column": "i", "unit": "A rms"},
                                              "speed": {"column": "n", "unit": "rpm"}, "coolant": {"column": "T", "unit": "degC"}})
    idle = mission.run(study.with_profile(duty))
    assert idle.history.peak_c.max() == pytest.approx(25.0, abs=1e-4)
    assert all(r.life_years > 1e6 for r in idle.ledger.rows())
