"""A curve from record to branches: the cut at the case against exact ladders, and doubts that are spoken out."""

import numpy as np
import pytest

from mission.errors import InputError, RangeError
from mission.thermal import CauerLadder, FosterNetwork, cauer_to_foster, load_materials
from mission.thermal.evaluation import branches_up_to, evaluate_curve, ladder_up_to
from mission.thermal.measured import half_space_slope_k_per_sqrt_s, structure_function, thermal_record

LADDER = CauerLadder([0.02, 0.1, 0.3, 0.5], [0.005, 0.2, 8.0, 300.0])
WHOLE = structure_function(LADDER)
T = np.geomspace(1e-5, 300.0, 1500)


def test_a_cut_ladder_is_the_first_part():
    part = ladder_up_to(WHOLE, 0.25)
    np.testing.assert_allclose(part.r_k_per_w, [0.02, 0.1, 0.13], rtol=1e-12)
    np.testing.assert_allclose(part.c_j_per_k, [0.005, 0.2, 8.0], rtol=1e-12)
    # at a border nothing of the next stage is left over
    np.testing.assert_allclose(ladder_up_to(WHOLE, float(WHOLE.r_k_per_w[1])).r_k_per_w, [0.02, 0.1], rtol=1e-12)


def test_branches_of_a_cut_in_the_first_resistance_are_one_time_constant():
    """Analytic: R C of one stage."""
    fit = branches_up_to(WHOLE, 0.015, first_s=1e-6, branches=1)
    assert fit.r_k_per_w == (pytest.approx(0.015, rel=1e-9),) and fit.tau_s == (pytest.approx(0.015 * 0.005, rel=1e-3),)


def test_branches_of_a_cut_ladder():
    """Independent: eigenvalues of the two stages, from the quadratic equation of their impedance."""
    r1, r2, c1, c2 = 0.02, 0.06, 0.005, 0.2
    tau = 1.0 / np.roots([c1 * c2 * r1 * r2, c1 * (r1 + r2) + c2 * r2, 1.0])
    fit = branches_up_to(WHOLE, 0.08, first_s=1e-6, branches=2)
    np.testing.assert_allclose(sorted(fit.tau_s), sorted(-tau), rtol=5e-3)
    assert fit.r_total_k_per_w == pytest.approx(0.08, rel=1e-9)


@pytest.mark.parametrize(("make", "error", "word"), [
    (lambda: ladder_up_to(WHOLE, 0.0), RangeError, "r_k_per_w"),
    (lambda: ladder_up_to(WHOLE, 0.93), RangeError, "0.92"),
    (lambda: branches_up_to(WHOLE, 0.01, first_s=1e-3), RangeError, "begins too late"),
    (lambda: evaluate_curve(record(), case_at_k_per_w=-1.0, start_c=20.0), RangeError, "case_at_k_per_w"),
    (lambda: evaluate_curve(record(), case_at_k_per_w=5.0, start_c=20.0), RangeError, "where record ends"),
    (lambda: evaluate_curve(record(), record(), start_c=20.0), InputError, "for both, or for none"),
    (lambda: evaluate_curve(record(), against_start_c=20.0), InputError, "without a second record"),
    (lambda: evaluate_curve(record(), chip_area_mm2=100.0), InputError, "both or neither"),
    (lambda: evaluate_curve(record(), start_c=20.0, branches=0), InputError, "1 to 8"),
])
def test_broken_inputs(make, error, word):
    with pytest.raises(error, match=word):
        make()


def record(power_w=100.0, foster=None, stated_w=None, noise_k=0.0):
    foster = foster or cauer_to_foster(LADDER)
    rise = power_w * foster.z_k_per_w(T) + noise_k * np.random.default_rng(1).standard_normal(T.size)
    return thermal_record(T, 20.0 + rise, power_w=stated_w or power_w, kind="heating")


def test_case_of_an_exact_curve():
    """Stages a factor of 40 apart: cut where the third resistance begins; the branches against the exact ladder up to there."""
    found = evaluate_curve(record(), start_c=20.0, case_at_k_per_w=0.12)
    exact = cauer_to_foster(CauerLadder([0.02, 0.1], [0.005, 0.2]))
    t = np.geomspace(1e-4, 1.0, 50)
    # deconvolution turns the step of the structure function into a slope
    assert np.abs(found.case_fit.z_th_k_per_w(t) / exact.z_k_per_w(t) - 1.0).max() < 0.04
    assert found.case_why == "as stated" and found.case_fit.r_total_k_per_w == pytest.approx(0.12, rel=1e-9)
    assert found.fit.r_total_k_per_w == pytest.approx(0.92, rel=0.01) and found.parted is None and found.area_found_mm2 is None


def chip(seconds=1.0, area_mm2=200.0):
    """Branches close together whose sum grows with the square root of time up to ``seconds``, as silicon of that area does."""
    silicon = load_materials()["silicon"]
    slope = half_space_slope_k_per_sqrt_s(1.0, area_mm2, silicon)
    tau = np.geomspace(1e-9, seconds, 200)
    # sum of tau^(1/2) (1 - exp(-t/tau)) over d(ln tau) is 2 sqrt(pi) t^(1/2)
    r = slope / (2.0 * np.sqrt(np.pi)) * np.sqrt(tau) * np.log(tau[1] / tau[0])
    return FosterNetwork(r, tau), silicon


def test_heated_area_from_the_early_slope():
    foster, silicon = chip()
    good = evaluate_curve(record(foster=foster), chip_area_mm2=200.0, chip_material=silicon, window_s=(1e-5, 2e-4))
    assert good.area_found_mm2 == pytest.approx(200.0, rel=0.03) and not any("mm2" in d for d in good.doubts)
    # power a quarter too large: everything a fifth too small, which only the area can tell
    wrong = evaluate_curve(record(foster=foster, stated_w=125.0), chip_area_mm2=200.0, chip_material=silicon, window_s=(1e-5, 2e-4))
    assert wrong.area_found_mm2 == pytest.approx(250.0, rel=0.03) and any("power" in d and "mm2" in d for d in wrong.doubts)


def test_slopes_of_one_chip_must_agree():
    foster, _ = chip()
    longer = FosterNetwork(np.append(foster.r_k_per_w, 0.3 * foster.r_total_k_per_w), np.append(foster.tau_s, 20.0))
    one = record(foster=foster)
    pair = [evaluate_curve(one, record(foster=longer, stated_w=w), window_s=(1e-5, 2e-4)) for w in (100.0, 110.0)]
    assert not any("slopes per watt" in d for d in pair[0].doubts)
    assert any("slopes per watt differ by -9.1 %" in d for d in pair[1].doubts)
