"""Shortcuts for spreading: published numbers, bounds that must hold, and how far off they are."""

from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.errors import InputError, RangeError
from mission.thermal import NetworkBuilder, stack_ladder, unreduced
from mission.thermal.fourier import FourierStack, PlateLayer, Source
from mission.thermal.spreading import (
    by_angle_k_per_w,
    closed_form,
    closed_form_of_stack,
    compare_spreading,
    straight_down_k_per_w,
    whole_footprint_k_per_w,
)


# Published: S. Lee, "Calculating spreading resistance in heat sinks", Electronics Cooling, Jan. 1998 (0.66 and 1.66 K/W, from memory; digits
# recomputed from the formula of S. Lee, S. Song, V. Au, K. P. Moran, ASME/JSME Thermal Eng. Conf. 1995, vol. 4, 199-206).
def test_published_worked_case():
    found = closed_form(625.0, 1e4, 1.3, 200.0, 1.0)
    assert found.wave_number_per_m == pytest.approx(95.683, abs=5e-4)
    assert found.spreading_max_k_per_w == pytest.approx(0.65658, abs=5e-6)
    assert found.spreading_max_k_per_w + 1.0 == pytest.approx(1.66, abs=0.005)
    # the article leaves out the plate itself
    assert found.r_max_k_per_w == pytest.approx(1.65658 + 1.3e-3 / (200 * 0.01), abs=1e-5)


def test_dimensionless_form_of_1995():
    """Analytic: Psi = sqrt(pi) k a R, at another point than the worked case."""
    a, b, t, k, outside = 0.004, 0.02, 0.006, 120.0, 0.3
    found = closed_form(np.pi * a**2 * 1e6, np.pi * b**2 * 1e6, t * 1e3, k, outside)
    eps, tau, bi = a / b, t / b, 1 / (np.pi * k * b * outside)
    lam = np.pi + 1 / (np.sqrt(np.pi) * eps)
    phi = (np.tanh(lam * tau) + lam / bi) / (1 + lam / bi * np.tanh(lam * tau))
    assert np.sqrt(np.pi) * k * a * found.spreading_mean_k_per_w == pytest.approx((1 - eps) ** 1.5 * phi / 2, rel=1e-12)
    assert np.sqrt(np.pi) * k * a * found.spreading_max_k_per_w == pytest.approx((1 - eps) * phi / np.sqrt(np.pi), rel=1e-12)


# Published channels of Y. S. Muzychka et al., J. Electron. Packag. 125 (2003) 178-185 (see test_fourier): spreading of the mean and at the centre.
@pytest.mark.parametrize(("plate", "source", "thick", "k", "r_area", "mean", "centre"), [
    ((100.0, 100.0), (25.0, 25.0), 1.3, 200.0, 1e4, 0.526325, 0.667074),
    ((60.0, 60.0), (12.5, 12.5), 3.0, 390.0, 360.0, 0.144600, 0.177529),
    ((122.0, 62.0), (12.0, 10.0), 3.0, 390.0, 200.0, 0.178568, 0.211850),
])
def test_closed_form_is_within_ten_percent_of_the_series(plate, source, thick, k, r_area, mean, centre):
    area = plate[0] * plate[1]
    found = closed_form(source[0] * source[1], area, thick, k, r_area / area)
    assert found.spreading_mean_k_per_w == pytest.approx(mean, rel=0.10)
    assert found.spreading_max_k_per_w == pytest.approx(centre, rel=0.10)


def test_no_spreading_left_when_the_source_covers_the_plate():
    found = closed_form(400.0, 400.0, 2.0, 100.0, 0.1)
    assert found.spreading_mean_k_per_w == found.spreading_max_k_per_w == 0.0
    assert found.r_mean_k_per_w == pytest.approx(0.1 + 2e-3 / (100 * 400e-6), rel=1e-12)


plates = st.builds(PlateLayer, st.floats(0.5, 500), st.just(8000.0), st.just(400.0), st.floats(0.05, 6.0), st.sampled_from([0.0, 2.0, 40.0]))


@settings(derandomize=True, max_examples=30, deadline=None)
@given(st.lists(plates, min_size=1, max_size=5), st.floats(0.05, 1.0), st.floats(0.05, 1.0), st.floats(0.0, 1.0), st.floats(1.0, 1e4))
def test_exact_mean_lies_between_column_and_footprint(layers, wide, long, place, r_area):
    """Analytic: walls only hinder, perfect conductors only help."""
    w, h = 50.0 * wide, 40.0 * long
    stack = FourierStack(50.0, 40.0, layers, (Source(w / 2 + place * (50.0 - w), h / 2 + place * (40.0 - h), w, h),), r_area)
    exact = stack.r_th_k_per_w()[0, 0]
    assert whole_footprint_k_per_w(stack) * (1 - 1e-9) <= exact <= straight_down_k_per_w(stack) * (1 + 1e-9)
    assert by_angle_k_per_w(stack, spread_deg=0.0) == pytest.approx(straight_down_k_per_w(stack), rel=1e-7)
    assert whole_footprint_k_per_w(stack) * (1 - 1e-7) <= by_angle_k_per_w(stack) <= straight_down_k_per_w(stack) * (1 + 1e-7)


def test_angle_by_hand():
    """Arithmetic: a square of 10 mm grows to 16 mm in 3 mm at 45 degrees, then stays below the edge of 18 mm."""
    stack = FourierStack(18.0, 18.0, (PlateLayer(390.0, 1.0, 1.0, 3.0, 7.0), PlateLayer(100.0, 1.0, 1.0, 4.0)), (Source(9.0, 9.0, 10.0, 10.0),), 30.0)
    want = 3e-3 / (390 * 0.010 * 0.016) + 7.0 / 16**2 + 1e-3 / (100 * 0.016 * 0.018) + 3e-3 / (100 * 0.018**2) + 30.0 / 18**2
    assert by_angle_k_per_w(stack) == pytest.approx(want, rel=1e-7)
    straight = by_angle_k_per_w(stack, spread_deg=[45.0, 0.0], outside="footprint")
    assert straight == pytest.approx(3e-3 / (390 * 0.010 * 0.016) + 7.0 / 256 + 4e-3 / (100 * 0.016**2) + 30.0 / 324, rel=1e-7)


def module(r_area):
    """Substrate on a base plate, one chip in the middle."""
    copper, base = PlateLayer(390.0, 8930.0, 385.0, 0.3), PlateLayer(390.0, 8930.0, 385.0, 3.0)
    layers = (copper, PlateLayer(24.0, 3780.0, 830.0, 0.38), copper, PlateLayer(57.0, 7370.0, 220.0, 0.2), base)
    return FourierStack(60.0, 40.0, layers, (Source(30.0, 20.0, 12.0, 10.0),), r_area)


@pytest.mark.parametrize(("r_area", "reached", "footprint"), [(1.0, 8, 7), (10.0, 10, -2), (50.0, 37, -14), (200.0, 130, -17)])
def test_error_of_45_degrees_in_a_module(r_area, reached, footprint):
    """Regression of the error in percent: moderate on a cold block, gross where the heat has far to go along the base plate."""
    table = compare_spreading(module(r_area)).set_index("method")
    found = table[table.rise == "mean"].difference_percent
    assert found["angle"] == pytest.approx(reached, abs=1)
    assert found["angle, then footprint"] == pytest.approx(footprint, abs=1)


def test_table():
    stack = module(50.0)
    table = compare_spreading(stack, spread_deg=40.0)
    assert list(table.columns) == ["method", "rise", "r_th_k_per_w", "difference_percent"] and len(table) == 8
    rows = {(m, r): (v, d) for m, r, v, d in table.itertuples(index=False)}
    exact = stack.r_th_k_per_w()[0, 0]
    assert rows["exact", "mean"] == pytest.approx((exact, 0.0)) and rows["exact", "maximum"][1] == 0.0
    assert rows["exact", "maximum"][0] == pytest.approx(stack.r_th_k_per_w("hottest")[0, 0], rel=1e-9)
    closed = closed_form_of_stack(stack)
    assert rows["closed form", "maximum"][0] == closed.r_max_k_per_w
    assert rows["angle", "mean"][1] == pytest.approx(100 * (by_angle_k_per_w(stack, spread_deg=40.0) / exact - 1))
    with pytest.raises(RangeError, match="chip: found 1; allowed: 0 to 0"):
        compare_spreading(stack, 1)


def test_closed_form_of_a_single_plate_needs_no_stand_in():
    stack = FourierStack(100.0, 100.0, (PlateLayer(200.0, 1.0, 1.0, 1.3),), (Source(50.0, 50.0, 25.0, 25.0),), 1e4)
    assert closed_form_of_stack(stack).spreading_max_k_per_w == pytest.approx(0.65658, abs=5e-6)


def test_slips_are_refused():
    with pytest.raises(RangeError, match="source_area_mm2: found 500 mm2; allowed: at most 400 mm2"):
        closed_form(500.0, 400.0, 1.0, 100.0, 1.0)
    with pytest.raises(RangeError, match="outside_k_per_w"):
        closed_form(100.0, 400.0, 1.0, 100.0, 0.0)
    with pytest.raises(RangeError, match="spread_deg: found 70 degrees"):
        by_angle_k_per_w(module(50.0), spread_deg=70.0)
    with pytest.raises(InputError, match="did you mean 'reached'"):
        by_angle_k_per_w(module(50.0), outside="reach")


# Published: NAFEMS, The Standard NAFEMS Benchmarks, rev. 3, 1990, test T3: 36.60 degC at 0.08 m after 32 s (exact series 36.6031).
def test_nafems_t3_on_a_layer():
    """The bar is one layer; its upper face is held at 100 sin(pi t/40) by heat through a resistance a million times smaller than a cell's."""
    bar = SimpleNamespace(material="bar", thickness_mm=100.0, width_mm=10.0, length_mm=10.0, spread_deg=0.0)
    ladder = stack_ladder([bar], {"bar": PlateLayer(35.0, 7200.0, 440.5, 100.0)}, cells=200).ladder
    builder = NetworkBuilder()
    top, tiny = builder.ladder(ladder, None), 1e-6 * ladder.r_k_per_w[0]
    builder.to_coolant(top, tiny)
    net = unreduced(builder.build([top], [top + 40]))
    lam, w, t = net.lam_shared_per_s, np.pi / 40, 32.0
    x = net.b_shared[:, 0] * 100.0 / tiny * (lam * np.sin(w * t) - w * np.cos(w * t) + w * np.exp(-lam * t)) / (lam**2 + w**2)
    assert net.c_case_shared[0] @ x == pytest.approx(36.60, abs=0.05)
