"""Layer stacks against conduction textbooks."""

import itertools
from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad

from mission.device import LayerSpec, module_from_dict
from mission.errors import InputError, RangeError
from mission.thermal import FixedCooling, Material, conductivity_effect, inverter_network, load_materials, materials_at, shipped_materials, stack_ladder

from ..device.factories import straight_line_data
from .helpers import single


def material(k, rho=8933.0, c=385.0):
    return Material(k_w_per_m_k=k, rho_kg_per_m3=rho, c_j_per_kg_k=c, source="test", page_or_clause="none", tested_range="none")


def layer(name, thickness_mm, width_mm=None, length_mm=None, spread_deg=0.0):
    return SimpleNamespace(material=name, thickness_mm=thickness_mm, width_mm=width_mm, length_mm=length_mm, spread_deg=spread_deg)


# Analytic: H. S. Carslaw, J. C. Jaeger, "Conduction of Heat in Solids", 2nd ed., Oxford 1959, ch. 3; series recomputed.
SLAB = {0.1: 0.356823, 0.5: 0.763950, 1.0: 0.931260}


def slab_series(fo):
    n = 2 * np.arange(4000) + 1
    return 1 - 8 / np.pi**2 * (np.exp(-(n**2) * np.pi**2 * fo / 4) / n**2).sum()


def slab_share(fo, cells):
    """Front rise over q L/k of a copper slab 10 mm thick, 1 cm2, back held."""
    stack = stack_ladder([layer("m", 10.0, 10.0, 10.0)], {"m": material(401.0)}, cells=cells)
    diffusivity = 401.0 / (8933.0 * 385.0)
    return single(stack.ladder).step_response_k_per_w([fo * 1e-4 / diffusivity], 0)[0, 0] / (0.01 / (401.0 * 1e-4))


@pytest.mark.parametrize(("fo", "share"), SLAB.items())
def test_slab_transient(fo, share):
    assert slab_series(fo) == pytest.approx(share, abs=1e-6)
    assert slab_share(fo, 200) == pytest.approx(share, abs=1e-5)


@pytest.mark.parametrize("fo", [0.02, 0.05, 0.1, 0.5])
def test_slab_error_falls_with_the_square_of_the_cell(fo):
    errors = [abs(slab_share(fo, cells) - slab_series(fo)) for cells in (12, 24, 48, 96)]
    for coarse, fine in itertools.pairwise(errors):
        assert 3.5 < coarse / fine < 4.5


def test_six_cells_are_as_good_as_promised():
    """Below about one percent of the layer's share from a tenth of its time constant on (4/pi^2 of L^2/diffusivity): 1.06 % measured there."""
    for fo in 0.4 / np.pi**2 * np.array([1.0, 1.5, 2.0, 4.0, 10.0, 30.0]):
        assert slab_share(fo, 6) == pytest.approx(slab_series(fo), abs=0.011)


# Analytic: 2 q sqrt(t/(pi k rho c)) on a half-space (Carslaw, Jaeger 1959, ch. 2); 100 mm of copper are deep enough for 1 s.
def test_half_space_of_copper():
    stack = stack_ladder([layer("cu", 100.0, 100.0, 100.0)], {"cu": material(401.0)}, cells=400)
    assert single(stack.ladder).step_response_k_per_w([1.0], 0)[0, 0] * 1e6 * 0.01 == pytest.approx(30.3846, rel=2e-4)


# Published: Scientific Reports 13 (2023), s41598-023-46538-6, Table 1: 0.7, 0.8, 2.0, in all 3.5 mm2 K/W (rounded there).
def test_published_layer_table():
    materials = {"sic": material(490.0), "solder": material(36.0), "cu": material(394.0)}
    stack = stack_ladder([layer("sic", 0.35, 5.0, 5.0), layer("solder", 0.03), layer("cu", 0.8)], materials)
    found = np.array(stack.r_layers_k_per_w) * 25.0
    np.testing.assert_allclose(found, [0.71429, 0.83333, 2.03046], rtol=1e-5)  # arithmetic
    np.testing.assert_allclose(found, [0.7, 0.8, 2.0], rtol=0.045)  # one printed digit
    assert found.sum() == pytest.approx(3.5, rel=0.03)
    assert stack.ladder.r_k_per_w.sum() == pytest.approx(sum(stack.r_layers_k_per_w), rel=1e-12)


@pytest.mark.parametrize("cells", [1, 2, 6, 25])
def test_square_pyramid_at_45_degrees(cells):
    # analytic: t/(k a (a + 2 t)) for a square a growing at 45 degrees
    stack = stack_ladder([layer("m", 3.0, 10.0, 10.0, 45.0)], {"m": material(390.0)}, cells=cells)
    assert sum(stack.r_layers_k_per_w) == pytest.approx(3e-3 / (390.0 * 10e-3 * 16e-3), rel=1e-12)
    # analytic: volume of the truncated pyramid
    volume = 3e-3 / 3 * (10e-3**2 + 16e-3**2 + 10e-3 * 16e-3)
    assert stack.ladder.c_j_per_k.sum() + stack.c_end_j_per_k == pytest.approx(volume * 8933.0 * 385.0, rel=1e-12)


@settings(derandomize=True, max_examples=150, deadline=None)
@given(st.floats(1.0, 100.0), st.floats(1.0, 100.0), st.floats(0.01, 20.0), st.one_of(st.floats(0.0, 60.0), st.floats(0.0, 1e-6)), st.integers(1, 8))
def test_widening_slab_against_quadrature(a_mm, b_mm, t_mm, deg, cells):
    a, b, t, widen = a_mm * 1e-3, b_mm * 1e-3, t_mm * 1e-3, 2 * np.tan(np.radians(deg))
    want = quad(lambda z: 1 / (390.0 * (a + widen * z) * (b + widen * z)), 0.0, t, epsrel=1e-12, epsabs=0.0)[0]
    stack = stack_ladder([layer("m", t_mm, a_mm, b_mm, deg)], {"m": material(390.0)}, cells=cells)
    assert sum(stack.r_layers_k_per_w) == pytest.approx(want, rel=1e-6)


@pytest.mark.parametrize("aspect", [1.0, 1 + 1e-13, 1 + 1e-10, 1 + 3e-9, 1 + 1e-8, 1 + 1e-6, 1 + 1e-3])
def test_oblong_and_square_meet(aspect):
    def r(deg):
        return sum(stack_ladder([layer("m", 2.0, 10.0, 10.0 * aspect, deg)], {"m": material(390.0)}, cells=4).r_layers_k_per_w)

    assert r(45.0) == pytest.approx(2e-3 / (390.0 * 10e-3 * 14e-3), rel=1e-6 + (aspect - 1))
    angles = [0.0, 1e-12, 1e-9, 1e-8, 1e-7, 1e-6, 1e-4]
    for deg in angles:
        assert r(deg) == pytest.approx(2e-3 / (390.0 * 10e-3 * 10e-3 * aspect), rel=1e-6 + np.radians(deg))


def test_heat_goes_on_with_the_width_it_has_reached():
    materials = {"m": material(390.0)}
    joined = stack_ladder([layer("m", 4.0, 8.0, 12.0, 30.0)], materials)
    parted = stack_ladder([layer("m", 1.0, 8.0, 12.0, 30.0), layer("m", 3.0, spread_deg=30.0)], materials)
    assert sum(parted.r_layers_k_per_w) == pytest.approx(sum(joined.r_layers_k_per_w), rel=1e-12)


def test_a_wider_layer_does_not_spread_heat_for_nothing():
    """A plate of 60 mm under a chip of 10 mm: without an angle the heat must not use its whole face at once."""
    materials = {"m": material(390.0)}
    narrow = stack_ladder([layer("m", 1.0, 10.0, 10.0), layer("m", 3.0)], materials)
    wide = stack_ladder([layer("m", 1.0, 10.0, 10.0), layer("m", 3.0, 60.0, 60.0)], materials)
    assert sum(wide.r_layers_k_per_w) == pytest.approx(sum(narrow.r_layers_k_per_w), rel=1e-9)


def test_unknown_material_is_named_with_a_near_match():
    with pytest.raises(InputError) as caught:
        stack_ladder([layer("silicon", 0.1, 10.0, 10.0), layer("coper", 3.0)], shipped_materials(), where="switch.thermal.layer")
    text = str(caught.value)
    assert "switch.thermal.layer[2].material" in text and "'coper'" in text and "did you mean 'copper'?" in text and "alsic" in text


def test_no_footprint():
    with pytest.raises(InputError, match=r"layer\[1\]: found no footprint"):
        stack_ladder([layer("silicon", 0.1)], shipped_materials())


def test_every_shipped_material_says_where_it_comes_from():
    materials = shipped_materials()
    assert len(materials) >= 10
    for name, m in materials.items():
        for text in (m.source, m.page_or_clause, m.tested_range):
            assert len(text.strip()) > 3, name
        assert 0.3 <= m.k_w_per_m_k <= 500 and 1500 <= m.rho_kg_per_m3 <= 20_000 and 100 <= m.c_j_per_kg_k <= 1500, name


# Published: usual handbook ranges of packaging materials (W/(m K)), from memory of packaging-materials tables.
@pytest.mark.parametrize(("name", "low", "high"), [
    ("silicon", 140, 163), ("silicon-carbide", 370, 490), ("solder-snag", 55, 60), ("solder-snpb", 36, 50), ("silver-sintered", 130, 250),
    ("copper", 391, 400), ("aluminium", 180, 237), ("alumina-96", 20, 30), ("aluminium-nitride", 170, 280), ("silicon-nitride", 60, 90),
    ("alsic", 170, 180), ("thermal-paste", 0.8, 4.0),
])
def test_conductivities_are_usual(name, low, high):
    assert low <= shipped_materials()[name].k_w_per_m_k <= high


def test_own_materials_are_put_over_the_shipped_ones(tmp_path):
    path = tmp_path / "mine.toml"
    text = 'format = 1\n[material.copper]\nk_w_per_m_k = 380.0\nrho_kg_per_m3 = 8930.0\nc_j_per_kg_k = 385.0\nsource = "me"\n'
    path.write_text(text + 'page_or_clause = "none"\ntested_range = "none"\n', encoding="utf-8")
    merged = load_materials(path)
    assert merged["copper"].k_w_per_m_k == 380.0 and merged["silicon"] == shipped_materials()["silicon"]
    assert shipped_materials()["copper"].k_w_per_m_k == 394.0
    load_materials()["copper"] = None
    assert shipped_materials()["copper"] is not None
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputError, match="copper.page_or_clause"):
        load_materials(path)
    path.write_text(text.replace("380.0", "-380.0"), encoding="utf-8")
    with pytest.raises(InputError) as caught:
        load_materials(path)
    assert str(path) in str(caught.value)


def test_module_with_layers_has_the_resistances_of_its_layers():
    layers = [{"material": "silicon-hot", "thickness_mm": 0.12, "width_mm": 17.0, "length_mm": 17.0},
              {"material": "solder-snag", "thickness_mm": 0.1},
              {"material": "copper", "thickness_mm": 3.0, "spread_deg": 45.0}]
    data = straight_line_data()
    for side in ("switch", "diode"):
        data[side]["thermal"] = {"reference": "case", "layer": [dict(x) for x in layers], "cells_per_layer": 2}
    module = module_from_dict(data)
    assert isinstance(module.switch.thermal.layer[0], LayerSpec)
    full = inverter_network(module, FixedCooling(kind="fixed", r_th_k_per_w=0.03))
    own = 0.12e-3 / (102 * 17e-3**2) + 0.1e-3 / (57 * 17e-3**2) + 3e-3 / (394 * 17e-3 * 23e-3)  # analytic
    r = full.r_th_k_per_w()
    np.testing.assert_allclose(np.diag(r), own + 0.01 + 0.03, rtol=1e-9)
    assert r[0, 7] == pytest.approx(0.01 + 0.03, rel=1e-9)
    # all the heat capacity of the stacks is in the network, the half cells at the case too
    volume = {"si": 0.12e-3 * 17e-3**2, "solder": 0.1e-3 * 17e-3**2, "cu": 3e-3 / 3 * (17e-3**2 + 23e-3**2 + 17e-3 * 23e-3)}
    capacity = volume["si"] * 2330 * 750 + volume["solder"] * 7370 * 220 + volume["cu"] * 8930 * 385
    assert full.c_j_per_k.sum() == pytest.approx(12 * capacity, rel=1e-9)


# ------------------------------------------------------------------ conductivity over temperature
# Published: usual handbook values (W/(m K)), from memory of handbook tables at 400 and 500 K.
@pytest.mark.parametrize(("name", "t_k", "k", "within"), [
    ("silicon", 400.0, 105.0, 0.035), ("silicon", 500.0, 80.0, 0.055), ("copper", 400.0, 393.0, 0.02), ("copper", 250.0, 406.0, 0.02),
])
def test_laws_meet_handbook_values(name, t_k, k, within):
    assert shipped_materials()[name].at(t_k - 273.15).k_w_per_m_k == pytest.approx(k, rel=within)


def test_conductivity_at_a_temperature():
    shipped = shipped_materials()
    hot = materials_at(shipped, 125.0)
    # analytic: 148 (300/398.15)^1.3 and 394 (298.15/398.15)^0.07
    assert hot["silicon"].k_w_per_m_k == pytest.approx(148.0 * (300.0 / 398.15) ** 1.3, rel=1e-12)
    assert hot["copper"].k_w_per_m_k == pytest.approx(394.0 * (298.15 / 398.15) ** 0.07, rel=1e-12)
    assert hot["silicon"].k_w_per_m_k == pytest.approx(shipped["silicon-hot"].k_w_per_m_k, rel=0.005)
    assert hot["silicon-carbide"].k_w_per_m_k == pytest.approx(370.0 * (300.0 / 398.15) ** 1.3, rel=1e-12)
    assert {n for n, m in hot.items() if m != shipped[n]} == {"silicon", "silicon-carbide", "copper"}
    assert shipped["silicon"].at(26.85).k_w_per_m_k == pytest.approx(148.0, rel=1e-12)
    # the law goes with the material: a second temperature counts from the data, not from the first
    assert hot["silicon"].at(50.0).k_w_per_m_k == pytest.approx(shipped["silicon"].at(50.0).k_w_per_m_k, rel=1e-12)
    assert shipped["silicon"].k_over_t.t_ref_c == 26.85


@pytest.mark.parametrize(("t_c", "words"), [(231.0, "material silicon: conductivity: found 231 degC; allowed: -50 to 230 degC"), (-51.0, "found -51 degC"), (np.nan, "t_c: found nan")])
def test_no_conductivity_outside_the_tested_range(t_c, words):
    with pytest.raises(RangeError) as caught:
        materials_at(shipped_materials(), t_c)
    assert words in str(caught.value)


@pytest.mark.parametrize(("line", "words"), [
    ("t_ref_c = 300.0", ["copper.k_over_t", "300 degC", "0 to 200 degC"]), ("exponent = 20.0", ["copper.k_over_t.exponent", "20.0", "at most 3"]),
    ('source = ""\nunit = "K"', ["'unit'", "unknown key"]), ("t_max_c = nan", ["copper.k_over_t.t_max_c", "finite"]),
])
def test_own_law(tmp_path, line, words):
    path = tmp_path / "mine.toml"
    keys = {"t_ref_c": "25.0", "exponent": "0.5", "t_min_c": "0.0", "t_max_c": "200.0", "source": '"me"', "page_or_clause": '"none"'}

    def write():
        head = 'format = 1\n[material.copper]\nk_w_per_m_k = 380.0\nrho_kg_per_m3 = 8930.0\nc_j_per_kg_k = 385.0\nsource = "me"\npage_or_clause = "none"\ntested_range = "none"\n'
        path.write_text(head + "[material.copper.k_over_t]\n" + "\n".join(f"{k} = {v}" for k, v in keys.items()), encoding="utf-8")

    write()
    assert load_materials(path)["copper"].at(100.0).k_w_per_m_k == pytest.approx(380.0 * (298.15 / 373.15) ** 0.5, rel=1e-12)
    key, value = line.split(" = ", 1)
    keys[key] = value
    write()
    with pytest.raises(InputError) as caught:
        load_materials(path)
    missing = [w for w in words if w not in str(caught.value)]
    assert not missing, f"{missing} not in: {caught.value}"


def kirchhoff_rise(flux_length, k_ref, t_ref_k, n, cold_k):
    """Analytic: rise across a slab whose k = k_ref (t_ref/T)^n, by the transform of Kirchhoff: q L is the integral of k over T."""
    power = cold_k ** (1 - n) + flux_length * (1 - n) / (k_ref * t_ref_k**n)
    return power ** (1 / (1 - n)) - cold_k


@pytest.mark.parametrize(("rise_k", "too_large"), [(40.0, 0.00126), (120.0, 0.0115)])
def test_one_conductivity_against_the_exact_slab(rise_k, too_large):
    """What a constant taken at the mean of both faces leaves out, as said in the docstring; the exact slab also by quadrature of its own."""
    mean_k, n = 398.15, 1.3
    cold, hot = mean_k - rise_k / 2, mean_k + rise_k / 2
    flux_length = quad(lambda t: 148.0 * (300.0 / t) ** n, cold, hot, epsrel=1e-12)[0]
    assert kirchhoff_rise(flux_length, 148.0, 300.0, n, cold) == pytest.approx(rise_k, rel=1e-9)
    slab = [layer("silicon", 1.0, 10.0, 10.0)]  # heat flow = (q L) area/thickness

    def linearised(t_k):
        r = sum(stack_ladder(slab, materials_at(shipped_materials(), t_k - 273.15)).r_layers_k_per_w)
        return r * flux_length * 1e-4 / 1e-3

    error = linearised(mean_k) / rise_k - 1.0
    assert error == pytest.approx(too_large, rel=0.03)
    assert error == pytest.approx(n * (n + 1) / 24 * (rise_k / mean_k) ** 2, rel=0.03)
    assert linearised(mean_k - 20.0) / linearised(mean_k) - 1.0 == pytest.approx(-0.065, abs=5e-4)


def test_effect_of_a_temperature_layer_by_layer():
    stack = [layer("silicon", 0.15, 10.0, 10.0), layer("solder-snag", 0.1), layer("copper", 3.0, spread_deg=45.0)]
    effect = conductivity_effect(stack, load_materials(), 125.0)
    assert [row.material for row in effect.layers] == ["silicon", "solder-snag", "copper"] and effect.t_c == 125.0
    # analytic
    area, pyramid = 1e-4, 10e-3 * 16e-3
    data = [0.15e-3 / (148 * area), 0.1e-3 / (57 * area), 3e-3 / (394 * pyramid)]
    factor = [(398.15 / 300.0) ** 1.3, 1.0, (398.15 / 298.15) ** 0.07]
    np.testing.assert_allclose([row.r_data_k_per_w for row in effect.layers], data, rtol=1e-9)
    np.testing.assert_allclose([row.r_at_k_per_w for row in effect.layers], np.multiply(data, factor), rtol=1e-9)
    np.testing.assert_allclose([row.k_at_w_per_m_k for row in effect.layers], np.divide([148.0, 57.0, 394.0], factor), rtol=1e-12)
    np.testing.assert_allclose([row.change_percent for row in effect.layers], 100 * (np.array(factor) - 1), atol=1e-9)
    assert effect.total.r_data_k_per_w == pytest.approx(sum(data)) and effect.total.r_at_k_per_w == pytest.approx(np.dot(data, factor))
    assert effect.total.change_percent == pytest.approx(100 * (np.dot(data, factor) / sum(data) - 1))
    with pytest.raises(InputError, match="did you mean 'copper'"):
        conductivity_effect([layer("coper", 3.0, 1.0, 1.0)], load_materials(), 25.0)
    with pytest.raises(RangeError, match="material silicon"):
        conductivity_effect(stack, load_materials(), 300.0)
    assert conductivity_effect([layer("solder-snag", 0.1, 5.0, 5.0)], load_materials(), 300.0).total.change_percent == 0.0  # nothing in it has a law
