"""Lives against numbers outside this project.

All grids below were recomputed by hand from coefficients known from memory of the publication named
beside them; the coefficients were not compared with the print. They check the arithmetic, the kelvin
conversion and the units, not the papers.
"""

import numpy as np
import pytest

from mission.lifetime import NORRIS_LANDZBERG_SAC, board_solder_term, load_model, miner_sum, norris_landzberg_factor

from . import twins
from .factories import BAYERER, life

# M. Held, P. Jacob, G. Nicoletti, P. Scacco, M.-H. Poech, "Fast power cycling test for IGBT modules in traction
# application", PEDS 1997, pp. 425-430 (data); coefficients from memory of later literature; arithmetic recomputed.
SWINGS_K = [30, 40, 50, 60, 70, 80]
LESIT_LIVES = {
    60: [23_797_629, 5_584_283, 1_814_002, 723_842, 332_888, 169_855],
    80: [7_041_016, 1_652_225, 536_710, 214_163, 98_492, 50_255],
    100: [2_373_737, 557_014, 180_941, 72_201, 33_205, 16_942],
}


@pytest.mark.parametrize("mean_c", LESIT_LIVES)
def test_lesit_grid(mean_c):
    n_f, outside = life(load_model("lesit-1997-refit"), SWINGS_K, mean_c)
    np.testing.assert_allclose(n_f, LESIT_LIVES[mean_c], rtol=1e-3)
    assert not outside.any()


def test_lesit_slope():
    # analytic: the same publication's exponent, 2^5.039
    n_f, _ = life(load_model("lesit-1997-refit"), [20.0, 40.0], 80.0)
    assert n_f[0] / n_f[1] == pytest.approx(2.0**5.039, rel=1e-12)
    assert n_f[0] / n_f[1] == pytest.approx(32.877, abs=5e-4)


# R. Bayerer, T. Herrmann, T. Licht, J. Lutz, M. Feller, "Model for power cycling lifetime of IGBT modules - various
# factors influencing lifetime", CIPS 2008; coefficients from memory; arithmetic recomputed.
# swing K, minimum degC, heating s, A per foot, V/100, um: K = 9.34e14, K = 2.03e14, K = 9.34e14 at the maximum
BAYERER_LIVES = [
    ((100, 50, 1.5, 10, 12, 300), 101_850, 22_137, 39_796),
    ((80, 70, 1.5, 10, 12, 400), 187_411, 40_733, 92_327),
    ((60, 40, 1.0, 5, 12, 300), 2_187_072, 475_349, 1_130_606),
    ((40, 60, 1.0, 10, 12, 300), 6_236_759, 1_355_527, 4_124_705),
]


@pytest.mark.parametrize(("point", "trench", "standard", "at_maximum"), BAYERER_LIVES)
def test_bayerer_points(point, trench, standard, at_maximum):
    swing, low, heat, amps, volts, wire = point
    options = {"current_per_foot_a": amps, "v_class": volts, "wire_diameter_um": wire}
    call = (swing, low + swing / 2, low, low + swing, heat)
    for name, more, want in (("bayerer-2008-trench4", {}, trench), ("bayerer-2008-standard", {}, standard),
                             ("bayerer-2008-trench4", {"temperature": "maximum"}, at_maximum)):
        n_f, outside = load_model(name, {**options, **more}).cycles_to_failure(*call)
        assert n_f == pytest.approx(want, rel=1e-3)
        assert bool(outside) == (swing < 45)  # the fourth point lies below the tested swings


# U. Scheuermann, R. Schmidt, "A new lifetime model for advanced power modules with sintered chips and optimized Al
# wire bonds", PCIM Europe 2013; coefficients from memory; arithmetic recomputed.
@pytest.mark.parametrize(("swing", "mean", "diode", "want"), [
    (64, 85, False, 757_700), (70, 90, False, 504_206), (80, 90, False, 290_370), (100, 100, False, 112_972), (80, 90, True, 180_146)])
def test_sintered_points(swing, mean, diode, want):
    n_f, outside = life(load_model("sintered-2013", {"aspect_ratio": 0.31}), swing, mean, 1.0, diode=diode)
    assert n_f == pytest.approx(want, rel=1e-3)
    assert not outside


# K. C. Norris, A. H. Landzberg, "Reliability of controlled collapse interconnections", IBM J. Res. Dev. 13(3), 1969,
# 266-271; exponents as a space-reliability handbook repeats them; arithmetic recomputed. Lead-free: from memory of
# Pan et al. 2005.
@pytest.mark.parametrize(("args", "constants", "want"), [
    ((100, 60, 24, 1, 100, 80), None, 1.134079),
    ((100, 60, 24, 1, 100, 80), NORRIS_LANDZBERG_SAC, 3.501149),
    ((165, 60, 24, 4, 125, 85), None, 5.592518),
    ((100, 40, 48, 2, 100, 60), None, 3.116076),
])
def test_norris_landzberg(args, constants, want):
    got = norris_landzberg_factor(*args) if constants is None else norris_landzberg_factor(*args, constants=constants)
    assert got == pytest.approx(want, rel=1e-5)


def test_norris_landzberg_factors_apart():
    # the three factors of the same source, one at a time
    assert norris_landzberg_factor(100, 60, 1, 1, 80, 80) == pytest.approx(2.639445, rel=1e-5)
    assert norris_landzberg_factor(60, 60, 24, 1, 80, 80) == pytest.approx(0.346681, rel=1e-5)
    assert norris_landzberg_factor(60, 60, 1, 1, 100, 80) == pytest.approx(1.239370, rel=1e-5)


def test_board_solder_term():
    # FIDES guide, solder joints (formula as transcribed); arithmetic recomputed: 2 cycles a day, longer than 2 h
    assert board_solder_term(2, 24.0, 2.0, 40.0, 60.0) == pytest.approx(4.895445, rel=1e-5)
    assert board_solder_term(2, 24.0, 9.0, 40.0, 60.0) == board_solder_term(2, 24.0, 2.0, 40.0, 60.0)
    assert board_solder_term(2, 24.0, 0.25, 40.0, 60.0) == pytest.approx(4.895445 / 2.0, rel=1e-5)  # analytic: (1/8)^(1/3)


def test_miner_with_mixed_swings():
    # M. A. Miner, J. Appl. Mech. 12, 1945, with the LESIT lives above; arithmetic recomputed
    n_f, _ = life(load_model("lesit-1997-refit"), [30.0, 50.0, 80.0], 80.0)
    damage = miner_sum([1e6, 1e5, 1e4], n_f)
    assert damage == pytest.approx(0.527331, rel=1e-5)
    assert 1.0 / damage == pytest.approx(1.896343, rel=1e-5)


def test_soldered_modules_lie_between_the_two_sets_of_bayerer():
    # published: about 30 000 cycles at 100 K for soldered, wire-bonded modules (glossary of a bond-testing service)
    lives = [float(load_model(f"bayerer-2008-{s}", BAYERER).cycles_to_failure(100, 100, 50, 150, 1.5)[0]) for s in ("standard", "trench4")]
    assert lives[0] < 30_000 < lives[1]


# --- twins: independent code ---------------------------------------------------------

RANGES, MEANS, HEATS = np.meshgrid([0.3, 7.0, 31.0, 64.0, 113.0, 150.0], [-20.0, 40.0, 85.0, 120.0], [0.02, 0.7, 1.0, 6.0, 15.0, 900.0], indexing="ij")


def _both(model, twin, **more):
    n_f, _ = life(model, RANGES.ravel(), MEANS.ravel(), HEATS.ravel(), **more)
    want = [twin(r, m, t) for r, m, t in zip(RANGES.ravel(), MEANS.ravel(), HEATS.ravel())]
    np.testing.assert_allclose(n_f, want, rtol=1e-6)


def test_lesit_against_twin():
    _both(load_model("lesit-1997-refit"), lambda r, m, t: twins.lesit_refit(r, m))
    # the file holds the molar energy of 7.8e4 J/mol as joules per particle, to nine digits
    _both(load_model("lesit-1997-print"), lambda r, m, t: twins.lesit_print(r, m))


def test_sintered_against_twin():
    model = load_model("sintered-2013", {"aspect_ratio": 0.25})
    _both(model, lambda r, m, t: twins.sintered(r, m, t, 0.25))
    _both(model, lambda r, m, t: twins.sintered(r, m, t, 0.25, diode=True), diode=True)


def test_coffin_manson_against_twin():
    _both(load_model("coffin-manson", {"a": 5.12e9, "n": 3.0}), lambda r, m, t: twins.coffin_manson(r, 5.12e9, 3.0))


@pytest.mark.parametrize("temperature", ["minimum", "maximum"])
@pytest.mark.parametrize("rule", ["clamp", "extrapolate", "power-0.3"])
@pytest.mark.parametrize(("name", "k"), [("bayerer-2008-standard", 2.03e14), ("bayerer-2008-trench4", 9.34e14)])
def test_bayerer_against_twin(temperature, rule, name, k):
    def twin(r, m, t):
        at = m - r / 2 if temperature == "minimum" else m + r / 2
        if rule == "power-0.3":  # N(t)/N(1.5 s) = (t/1.5)^-0.3 for 0.1 to 60 s; often quoted, from memory
            return twins.bayerer(r, at, 1.5, 7.0, 17.0, 375.0, k=k) * (min(max(t, 0.1), 60.0) / 1.5) ** -0.3
        return twins.bayerer(r, at, min(max(t, 1.0), 15.0) if rule == "clamp" else t, 7.0, 17.0, 375.0, k=k)

    _both(load_model(name, {"current_per_foot_a": 7, "v_class": 17, "wire_diameter_um": 375, "temperature": temperature, "heating_outside": rule}), twin)
