"""Sinks reckoned from geometry: check values, balances, limits, operating points, and what is refused."""

import math
import subprocess
import sys
import tomllib

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.errors import InputError, RangeError
from mission.thermal import NetworkBuilder
from mission.thermal import fluids_data as fd
from mission.thermal import sinks
from mission.thermal.sinks import SinkSpec, natural_dependence, operating_curve, sink_point
from mission.tomlfile import FileModel, parse_model


class Wrapper(FileModel):
    cooling: SinkSpec


TABLE = {"kind": "flow-table", "flow_l_per_min": [2.0, 5.0, 10.0], "r_th_k_per_w": [0.04, 0.025, 0.018], "pressure_drop_pa": [2e3, 9e3, 3e4],
         "at_l_per_min": 5.0, "coolant_c": 65.0}
FAN_CURVE = {"flow_m3_per_h": [0.0, 100.0, 200.0, 300.0, 400.0], "pressure_pa": [250.0, 230.0, 180.0, 100.0, 0.0]}
FINS = {"base_mm": 10.0, "fin_count": 40, "fin_mm": 1.0, "gap_mm": 3.0, "fin_height_mm": 40.0, "length_mm": 150.0, "coolant_c": 40.0}
FAN = {"kind": "plate-fin-fan", **FINS, "fan": FAN_CURVE}
NATURAL = {"kind": "plate-fin-natural", **FINS, "fin_count": 14, "fin_mm": 2.0, "gap_mm": 9.0, "emissivity": 0.85, "heat_w": 60.0}
PLATE = {
    "kind": "liquid-plate",
    "channel_count": 20,
    "channel_width_mm": 2.0,
    "channel_height_mm": 6.0,
    "web_mm": 1.5,
    "base_mm": 4.0,
    "length_mm": 180.0,
    "fluid": "water-glycol",
    "glycol_mass_share": 0.5,
    "coolant_c": 65.0,
    "flow_l_per_min": 10.0,
}
PUMP = {"flow_l_per_min": [0.0, 10.0, 20.0, 30.0], "pressure_pa": [40e3, 36e3, 24e3, 0.0]}


def spec(data, **changes):
    return parse_model({"cooling": {k: v for k, v in {**data, **changes}.items() if v is not None}}, Wrapper, "study.toml").cooling


def pumped(**changes):
    return spec(PLATE, flow_l_per_min=None, pump=PUMP, **changes)


# --- check values -----------------------------------------------------------------------------------------------------


def test_entry_30_chip_cooled_from_both_faces():
    """Published: Incropera, DeWitt, Fundamentals of Heat and Mass Transfer, ch. 3 (example from memory): 75.3 degC."""
    area, film, joint, slab = 1e-4, 100.0, 0.9e-4, 0.008 / 239.0
    net = NetworkBuilder()
    chip, below = net.node(1.0), net.node()
    net.to_coolant(chip, 1 / (film * area))
    net.resistance(chip, below, (joint + slab) / area)
    net.to_coolant(below, 1 / (film * area))
    rise = net.build([chip], [below]).r_th_k_per_w()[0, 0] * 1e4 * area
    assert 25.0 + rise == pytest.approx(75.31, abs=0.005)


# Entry 46; independent only in the sense of another data collection, hence 2 %: rho, cp, k, mu, Pr.
ENTRY_46 = [
    ("water-glycol", 0.5, 25.0, (1062.21, 3338.1, 0.39225, 3.15618e-3, 26.859)),
    ("water-glycol", 0.5, 65.0, (1037.06, 3524.0, 0.41680, 1.25389e-3, 10.601)),
    ("water-glycol", 0.5, 70.0, (1033.57, 3544.0, 0.41980, 1.14774e-3, 9.689)),
    ("water", 0.0, 65.0, (980.59, 4187.1, 0.65563, 4.3293e-4, 2.765)),
]


@pytest.mark.parametrize(("name", "share", "t_c", "values"), ENTRY_46)
def test_entry_46_coolants(name, share, t_c, values):
    c = fd.coolant_state(name, t_c, share)
    assert (c.rho_kg_per_m3, c.cp_j_per_kg_k, c.k_w_per_m_k, c.mu_pa_s, c.pr) == pytest.approx(values, rel=2e-4)


def test_entry_46_weaker_mixture():
    c = fd.coolant_state("water-glycol", 65.0, 0.4)
    assert (c.rho_kg_per_m3, c.cp_j_per_kg_k, c.k_w_per_m_k, c.mu_pa_s) == pytest.approx((1025.81, 3686.5, 0.45898, 9.9093e-4), rel=2e-4)


# Entry 47; Shah and London 1978: aspect, polynomial, exact (from memory), for friction and for heat.
ENTRY_47 = [(1.0, 14.2296, 14.227, 3.61022, 3.608), (1 / 2, 15.5573, 15.548, 4.12581, 4.123), (1 / 3, 17.0949, 17.090, 4.79839, 4.795),
            (1 / 4, 18.2340, 18.233, 5.33267, 5.331), (1 / 8, 20.5898, 20.585, 6.49215, 6.490), (0.0, 24.0, 24.0, 8.235, 8.235)]


@pytest.mark.parametrize(("aspect", "f_re", "f_re_exact", "nusselt", "nusselt_exact"), ENTRY_47)
def test_entry_47_laminar_ducts(aspect, f_re, f_re_exact, nusselt, nusselt_exact):
    assert fd.fanning_f_re(aspect) == pytest.approx(f_re, rel=1e-5)
    assert fd.fanning_f_re(aspect) == pytest.approx(f_re_exact, rel=1e-3)
    assert fd.nusselt_developed(aspect) == pytest.approx(nusselt, rel=1e-5)
    assert fd.nusselt_developed(aspect) == pytest.approx(nusselt_exact, rel=1e-3)


@pytest.mark.parametrize(
    ("re", "pr", "darcy", "nusselt"), [(1e4, 0.7, 0.0314798, 29.8174), (1e4, 6.0, 0.0314798, 74.9820), (5e4, 5.0, 0.0209577, 285.173)]
)
def test_entry_48_turbulent_duct(re, pr, darcy, nusselt):
    """Gnielinski with friction after Petukhov; two methods agree."""
    assert fd.darcy_turbulent(re) == pytest.approx(darcy, rel=1e-4)
    assert fd.nusselt_turbulent(re, pr) == pytest.approx(nusselt, rel=1e-4)


def test_entry_50_plate_fins():
    """Published formula (Teertstra et al. 1999, from memory), recomputed value."""
    nu_air, pr, k_air = 15.89e-6, 0.707, 0.0263
    cp = 1007.0
    air = fd.FluidState(27.0, 101325.0, pr * k_air / cp / nu_air, cp, k_air, pr * k_air / cp)
    channel = fd.RectChannel(0.003, 0.040, 0.150)
    film, re, band = sinks.fin_film(4.0, channel, air)
    r, eta = sinks.finned_resistance(film, fin_count=40, fin_m=0.001, channel=channel, k_w_per_m_k=201.0)
    assert band == "laminar" and re == pytest.approx(4.0 * channel.hydraulic_m / nu_air)
    assert film * channel.width_m / k_air == pytest.approx(2.99964, rel=1e-5)
    assert (film, eta, r) == pytest.approx((26.2969, 0.879749, 0.0864593), rel=1e-5)


def test_optimum_gap_of_even_vertical_plates():
    """Published: Bar-Cohen and Rohsenow 1984 (from memory): thin even plates give off most at Rayleigh 54.3, Nusselt 1.31."""
    x = np.linspace(20.0, 120.0, 20001)
    best = x[np.argmax([sinks.bar_cohen_nusselt(v) / math.sqrt(v) for v in x])]
    assert best == pytest.approx(54.3, rel=0.01)
    assert sinks.bar_cohen_nusselt(best) == pytest.approx(1.31, rel=0.01)


@pytest.mark.parametrize("x_star", [0.0005, 0.002, 0.01, 0.05, 0.2])
def test_laminar_entrance_between_two_plates(x_star):
    """Published: Shah and London 1978, even heat flow, developed speed (from memory), mean Nusselt number; the joined rule claims 15 %."""
    published = 2.236 * x_star ** (-1 / 3) + 0.9 if x_star <= 0.01 else 8.235 + 0.0364 / x_star
    channel = fd.RectChannel(1e-3, 1e3, 1.0)
    re = 10.0
    pr = channel.length_m / (channel.hydraulic_m * re * x_star)  # large: the speed is developed long before the temperature
    assert pr > 200.0
    assert fd.nusselt_laminar(re, pr, channel) == pytest.approx(published, rel=0.10)


def test_laminar_entrance_of_a_tube_like_duct():
    """Independent code: library ht, circular tube at one temperature (Baehr, Stephan); a square duct with even flux lies 0 to 35 % above."""
    from ht.conv_internal import laminar_entry_Baehr_Stephan

    for length in (0.02, 0.1, 0.5):
        ours = fd.nusselt_laminar(1000.0, 5.0, fd.RectChannel(4e-3, 4e-3, length))
        assert 1.0 < ours / laminar_entry_Baehr_Stephan(1000.0, 5.0, length, 4e-3) < 1.35


def test_air_and_height():
    """Published: U.S. Standard Atmosphere 1976, 15 degC at sea level 1.2250 kg/m3; 2000 m 79 495 Pa (table by geopotential height) within 0.02 %."""
    assert fd.air_state(15.0).rho_kg_per_m3 == pytest.approx(1.2250, rel=1e-3)
    assert fd.air_pressure_pa(2000.0) == pytest.approx(79495.0, rel=2e-4)


EXAMPLES = """
[table]
kind = "flow-table"
flow_l_per_min = [2.0, 5.0, 10.0]
r_th_k_per_w = [0.040, 0.025, 0.018]
pressure_drop_pa = [2000.0, 9000.0, 30000.0]
at_l_per_min = 6.0
fluid = "water"
coolant_c = 60.0
heat_w = 1500.0

[fan]
kind = "plate-fin-fan"
base_mm = 10.0
fin_count = 40
fin_mm = 1.0
gap_mm = 3.0
fin_height_mm = 40.0
length_mm = 150.0
material = "aluminium"
altitude_m = 1000.0
coolant_c = 40.0
heat_w = 800.0
fan = {flow_m3_per_h = [0.0, 100.0, 200.0, 300.0, 400.0], pressure_pa = [250.0, 230.0, 180.0, 100.0, 0.0]}
duct = {width_mm = 160.0, height_mm = 60.0, length_mm = 300.0, loss_coefficient = 1.5}
footprint = {length_mm = 120.0, width_mm = 60.0, count = 2}

[natural]
kind = "plate-fin-natural"
base_mm = 10.0
fin_count = 14
fin_mm = 2.0
gap_mm = 9.0
fin_height_mm = 40.0
length_mm = 150.0
emissivity = 0.85
coolant_c = 40.0
heat_w = 60.0

[plate]
kind = "liquid-plate"
channel_count = 20
channel_width_mm = 2.0
channel_height_mm = 6.0
web_mm = 1.5
base_mm = 4.0
length_mm = 180.0
fluid = "water-glycol"
glycol_mass_share = 0.5
coolant_c = 65.0
heat_w = 2500.0
positions = 3
loop_pa = 15000.0
loop_l_per_min = 10.0
pump = {flow_l_per_min = [0.0, 10.0, 20.0, 30.0], pressure_pa = [40000.0, 36000.0, 24000.0, 0.0]}
"""


@pytest.mark.parametrize("name", ["table", "fan", "natural", "plate"])
def test_examples_work_as_they_are_written(name):
    point = sink_point(parse_model({"cooling": tomllib.loads(EXAMPLES)[name]}, Wrapper, "study.toml").cooling)
    assert 0.0 < point.r_th_k_per_w < 1.0 and point.surface_c == pytest.approx(point.inlet_c + point.heat_w * point.r_th_k_per_w)


# --- limits -----------------------------------------------------------------------------------------------------------


def test_very_long_channel_is_fully_developed():
    """Analytic limit."""
    channel = fd.RectChannel(2e-3, 6e-3, 1e4)
    assert fd.nusselt_laminar(500.0, 7.0, channel) == pytest.approx(fd.nusselt_developed(1 / 3), rel=1e-3)
    assert fd.darcy_laminar(500.0, channel) == pytest.approx(4 * fd.fanning_f_re(1 / 3) / 500.0, rel=1e-3)
    assert fd.nusselt_turbulent(1e4, 5.0, 1e-9) == pytest.approx(fd.nusselt_turbulent(1e4, 5.0), rel=1e-5)


def test_long_fins_saturate_at_the_heat_that_the_air_can_carry():
    """Analytic: fins of one temperature cannot warm the air beyond it."""
    point = sink_point(spec(FAN, length_mm=3000.0, gap_mm=1.0, fin_count=100, fan=None, flow_m3_per_h=20.0))
    assert point.r_th_k_per_w - point.r_base_k_per_w == pytest.approx(point.outlet_rise_k_per_w, rel=1e-12)
    assert any("as warm as the fins" in f for f in point.flags)


def test_zero_emissivity_is_convection_alone():
    """Analytic limit, and black enclosures of view factors that close."""
    bare, black = sink_point(spec(NATURAL, emissivity=0.0)), sink_point(spec(NATURAL, emissivity=1.0))
    assert bare.radiated_share == 0.0 and not any("enclosure" in s for s in bare.sources)
    assert 0.1 < black.radiated_share < 0.6 and black.r_th_k_per_w < bare.r_th_k_per_w
    k, air_c = 200.0, 40.0
    still = sinks._solve_fins(spec(NATURAL, emissivity=0.0), air_c, k, heat_w=60.0)
    assert still.radiated_w == 0.0 and still.rise_k / still.heat_w + bare.r_base_k_per_w == pytest.approx(bare.r_th_k_per_w, rel=1e-12)


def test_dull_channel_radiates_with_all_its_walls_and_a_black_one_with_its_opening():
    """Analytic limits of an enclosure of two surfaces."""
    channel = fd.RectChannel(0.009, 0.04, 0.15)
    walls = 0.15 * (2 * 0.04 + 0.009)
    assert sinks.channel_exchange_m2(channel, 1e-6) == pytest.approx(1e-6 * walls, rel=1e-4)
    opening = 0.15 * 0.009 + 2 * 0.04 * 0.009
    assert 0.8 * opening < sinks.channel_exchange_m2(channel, 1.0) < opening


@given(st.floats(0.05, 20.0), st.floats(0.05, 20.0), st.floats(0.05, 20.0))
def test_view_factors_of_a_box_close(a, b, c):
    """Analytic: what leaves one face of a closed box arrives on the other five."""
    total = sinks.view_factor_opposite(a, b, c) + 2 * sinks.view_factor_corner(a, b, c) + 2 * sinks.view_factor_corner(b, a, c)
    assert total == pytest.approx(1.0, abs=1e-9)


def test_perfect_metal_leaves_film_and_half_of_the_coolants_rise():
    """Analytic: with endless conductivity a liquid plate is its wetted faces, and half of the coolant's rise."""
    s = spec(PLATE, k_w_per_m_k=3000.0, base_mm=0.05)
    point = sink_point(s)
    area = 0.18 * (20 * 2e-3 + 2 * 19 * 6e-3)
    assert point.fin_efficiency > 0.97
    assert point.r_th_k_per_w == pytest.approx(1 / (point.film_w_per_m2_k * area) + 0.5 * point.outlet_rise_k_per_w, rel=0.03)


@pytest.mark.parametrize("re", [2300.0, 4000.0])
def test_bands_join_without_a_jump(re):
    channel = fd.RectChannel(2e-3, 6e-3, 0.18)
    for laminar, turbulent in [(lambda r: fd.nusselt_laminar(r, 10.0, channel), lambda r: fd.nusselt_turbulent(r, 10.0, 0.02)),
                               (lambda r: fd.darcy_laminar(r, channel), fd.darcy_turbulent)]:
        below, above = fd.by_band(re * (1 - 1e-9), laminar, turbulent)[0], fd.by_band(re * (1 + 1e-9), laminar, turbulent)[0]
        assert below == pytest.approx(above, rel=1e-6)


# --- balances ---------------------------------------------------------------------------------------------------------


def test_air_carries_the_heat():
    """Analytic: mass flow at the inlet, specific heat and rise give the heat back."""
    s = spec(FAN, heat_w=800.0, altitude_m=1500.0)
    point = sink_point(s)
    air = fd.air_state(40.0 + 0.5 * point.outlet_rise_k, fd.air_pressure_pa(1500.0))
    inlet = fd.air_state(40.0, fd.air_pressure_pa(1500.0))
    assert inlet.rho_kg_per_m3 * point.flow_m3_per_s * air.cp_j_per_kg_k * point.outlet_rise_k == pytest.approx(800.0, rel=1e-9)
    assert point.surface_c == pytest.approx(40.0 + 800.0 * point.r_th_k_per_w)
    assert point.r_th_k_per_w > point.outlet_rise_k_per_w


def test_positions_along_a_plate():
    """Analytic: each position gets the coolant with all heat upstream in it; the last one's own share leads to the outlet."""
    shares = [0.5, 0.3, 0.2]
    point = sink_point(spec(PLATE, positions=3, heat_shares=shares, heat_w=3000.0))
    per_w, rise = point.outlet_rise_k_per_w, point.outlet_rise_k
    liquid = fd.coolant_state("water-glycol", 65.0 + 0.5 * rise, 0.5)
    mass = fd.coolant_state("water-glycol", 65.0, 0.5).rho_kg_per_m3 * 10.0 / 60000.0
    assert mass * liquid.cp_j_per_kg_k * rise == pytest.approx(3000.0, rel=1e-9)
    assert [p.coolant_c for p in point.positions] == pytest.approx([65.0, 65.0 + 0.5 * rise, 65.0 + 0.8 * rise])
    assert point.positions[-1].coolant_rise_k_per_w + 0.2 * per_w == pytest.approx(per_w)
    local = [p.surface_rise_k_per_w - p.coolant_rise_k_per_w - 0.5 * s * per_w for p, s in zip(point.positions, shares)]
    assert [x / s for x, s in zip(local, shares)] == pytest.approx([local[0] / 0.5] * 3)
    assert point.r_th_k_per_w == pytest.approx(np.mean([p.surface_rise_k_per_w for p in point.positions]))


def test_even_positions_share_the_resistance_of_the_whole_plate():
    one, six = sink_point(spec(PLATE)), sink_point(spec(PLATE, positions=6))
    assert six.r_th_k_per_w == pytest.approx(one.r_th_k_per_w, rel=1e-12)
    rises = [p.surface_rise_k_per_w for p in six.positions]
    assert np.diff(rises) == pytest.approx(one.outlet_rise_k_per_w / 6)


def test_heat_and_surface_temperature_are_two_ways_to_the_same_state():
    by_heat = sink_point(spec(NATURAL))
    by_surface = sink_point(spec(NATURAL, heat_w=None, surface_c=by_heat.surface_c))
    assert by_surface.heat_w == pytest.approx(60.0, rel=1e-9) and by_surface.r_th_k_per_w == pytest.approx(by_heat.r_th_k_per_w, rel=1e-9)
    table = natural_dependence(spec(NATURAL), [10.0, by_heat.surface_c - 40.0, 90.0])
    assert table.heat_w[1] == pytest.approx(60.0, rel=1e-9) and (np.diff(table.r_th_k_per_w) < 0).all()
    assert table.rise_k / table.heat_w == pytest.approx(table.r_th_k_per_w)


def test_metal_gives_the_heat_capacity():
    """Analytic: volume times the shipped aluminium's density and specific heat."""
    point = sink_point(spec(FAN))
    volume = 0.15 * (0.157 * 0.01 + 40 * 0.001 * 0.04)
    assert point.heat_capacity_j_per_k == pytest.approx(volume * 2700.0 * 900.0, rel=0.02)
    assert sink_point(spec(FAN, heat_capacity_j_per_k=5.0)).heat_capacity_j_per_k == 5.0


# --- operating points -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "s",
    [
        spec(FAN),
        spec(FAN, heat_w=900.0, altitude_m=3000.0),
        pumped(),
        pumped(loop_pa=1e4, loop_l_per_min=8.0, heat_w=4000.0),
        spec(FAN, duct={"width_mm": 160.0, "height_mm": 60.0, "length_mm": 400.0, "loss_coefficient": 2.5}),
    ],
)
@pytest.mark.parametrize("speed", [1.0, 0.6])
def test_operating_point_lies_on_both_curves(s, speed):
    point, curve = sink_point(s, speed_ratio=speed), operating_curve(s, speed_ratio=speed, points=801)
    assert (curve.point_flow_m3_per_s, curve.point_pa) == pytest.approx((point.flow_m3_per_s, point.pressure_drop_pa), rel=1e-9)
    given_curve = s.fan if s.kind == "plate-fin-fan" else s.pump
    if s.kind == "plate-fin-fan":
        density = fd.air_state(40.0, fd.air_pressure_pa(s.altitude_m)).rho_kg_per_m3 / 1.2
    else:
        density = fd.coolant_state("water-glycol", 65.0, 0.5).rho_kg_per_m3 / 998.0
    on_mover = speed**2 * density * np.interp(point.flow_m3_per_s / speed, given_curve.flow_m3_per_s, given_curve.pressure_pa)
    assert point.pressure_drop_pa == pytest.approx(on_mover, rel=1e-8)
    assert np.interp(point.flow_m3_per_s, curve.flow_m3_per_s, curve.mover_pa) == pytest.approx(point.pressure_drop_pa, rel=1e-6)
    assert np.interp(point.flow_m3_per_s, curve.flow_m3_per_s, curve.system_pa) == pytest.approx(point.pressure_drop_pa, rel=1e-3)
    assert (np.diff(curve.system_pa) > 0).all() and curve.system_pa[0] == 0.0


def test_a_given_flow_has_a_system_curve_but_no_mover():
    curve = operating_curve(spec(PLATE))
    assert (
        curve.mover_pa is None and curve.point_flow_m3_per_s == pytest.approx(10.0 / 60000.0) and curve.flow_m3_per_s.shape == curve.system_pa.shape
    )


def test_curve_that_dips_is_taken_at_the_largest_flow_and_told():
    dip = {"flow_m3_per_h": [0.0, 40.0, 70.0, 130.0, 200.0], "pressure_pa": [60.0, 4.0, 4.0, 120.0, 0.0]}
    point = sink_point(spec(FAN, fan=dip))
    assert point.flow_m3_per_s * 3600.0 > 130.0 and any("meets the system 2 times" in f for f in point.flags)


def test_duct_and_altitude_cost_flow():
    free = sink_point(spec(FAN))
    duct = sink_point(spec(FAN, duct={"width_mm": 160.0, "height_mm": 50.0, "loss_coefficient": 5.0}))
    high = sink_point(spec(FAN, altitude_m=3000.0))
    assert duct.flow_m3_per_s < free.flow_m3_per_s and duct.r_th_k_per_w > free.r_th_k_per_w
    assert high.r_th_k_per_w > 1.1 * free.r_th_k_per_w


# --- what must hold for any input -------------------------------------------------------------------------------------

QUICK = settings(max_examples=40, deadline=None)


@QUICK
@given(st.floats(5.0, 1500.0), st.floats(1.001, 1.5), st.floats(1.0, 12.0), st.floats(20.0, 400.0))
def test_more_air_cools_better_and_costs_more(flow, factor, gap, length):
    """Across laminar, transition, turbulent and the edge of short channels."""
    s = spec(FAN, fan=None, flow_m3_per_h=flow, gap_mm=gap, length_mm=length)
    one, two = sink_point(s), sink_point(s, flow_m3_per_s=factor * flow / 3600.0)
    assert two.r_th_k_per_w < one.r_th_k_per_w * (1 + 1e-12) and two.pressure_drop_pa > one.pressure_drop_pa
    assert one.r_th_k_per_w >= one.outlet_rise_k_per_w


@QUICK
@given(st.floats(0.5, 80.0), st.floats(1.001, 1.5), st.floats(0.5, 8.0), st.floats(20.0, 400.0), st.floats(-20.0, 90.0))
def test_more_coolant_cools_better_and_costs_more(flow, factor, width, length, inlet_c):
    s = spec(PLATE, flow_l_per_min=flow, channel_width_mm=width, length_mm=length)
    one, two = sink_point(s, inlet_c=inlet_c), sink_point(s, inlet_c=inlet_c, flow_m3_per_s=factor * flow / 60000.0)
    assert two.r_th_k_per_w < one.r_th_k_per_w and two.pressure_drop_pa > one.pressure_drop_pa


@settings(max_examples=20, deadline=None)
@given(st.floats(5.0, 200.0), st.floats(1.05, 2.0), st.floats(0.0, 1.0))
def test_still_air_cools_better_the_hotter_and_the_blacker(heat, factor, emissivity):
    s = spec(NATURAL, emissivity=emissivity)
    cool, hot = sink_point(s, heat_w=heat), sink_point(s, heat_w=factor * heat)
    assert hot.r_th_k_per_w < cool.r_th_k_per_w and hot.surface_c > cool.surface_c
    assert sink_point(spec(NATURAL, emissivity=min(1.0, emissivity + 0.1)), heat_w=heat).r_th_k_per_w <= cool.r_th_k_per_w


@QUICK
@given(st.floats(2.0, 10.0))
def test_table_is_met_at_its_points_and_falls_between(flow):
    point = sink_point(spec(TABLE, at_l_per_min=flow))
    assert 0.018 <= point.r_th_k_per_w * (1 + 1e-12) and point.r_th_k_per_w <= 0.04 * (1 + 1e-12)
    assert 2e3 <= point.pressure_drop_pa * (1 + 1e-12) and point.pressure_drop_pa <= 3e4 * (1 + 1e-12)


def test_table_is_a_power_law_between_two_points():
    """Analytic: straight on logarithmic axes."""
    r = sink_point(spec(TABLE, at_l_per_min=math.sqrt(2.0 * 5.0))).r_th_k_per_w
    assert r == pytest.approx(math.sqrt(0.04 * 0.025), rel=1e-12)
    assert sink_point(spec(TABLE)).r_th_k_per_w == pytest.approx(0.025, rel=1e-12)
    air = sink_point(
        spec(TABLE, flow_l_per_min=None, flow_m3_per_h=[50.0, 100.0, 200.0], at_l_per_min=None, at_m3_per_h=100.0, fluid="air", heat_w=300.0)
    )
    assert air.flow_m3_per_s == pytest.approx(100 / 3600) and air.outlet_rise_k == pytest.approx(300.0 * air.outlet_rise_k_per_w)


# --- what the result says about itself --------------------------------------------------------------------------------


@pytest.mark.parametrize(("s", "band", "words"), [
    (spec(PLATE), "laminar", None),
    (spec(PLATE, fluid="water", glycol_mass_share=None, flow_l_per_min=7.0), "transition", "between 2300 and 4000"),
    (spec(PLATE, fluid="water", glycol_mass_share=None, flow_l_per_min=60.0), "turbulent", None),
    (spec(PLATE, flow_l_per_min=10.0, heat_w=12000.0), "laminar", "boiling"),
    (spec(FAN), "turbulent", None),
    (spec(FAN, fan=None, flow_m3_per_h=60.0), "laminar", None),
    (spec(FAN, gap_mm=8.0, fin_count=16, fan=None, flow_m3_per_h=70.0), "transition", "between 2300 and 4000"),
    (spec(FAN, gap_mm=8.0, fin_count=16, fan=None, flow_m3_per_h=900.0), "turbulent", None),
    (spec(FAN, gap_mm=8.0, fin_count=16, length_mm=10.0, fan=None, flow_m3_per_h=150.0), "edge", "boundary layers from their edge"),
    (spec(FAN, gap_mm=8.0, fin_count=16, length_mm=20.0, fan=None, flow_m3_per_h=48.0), "laminar", "where the rule was tested"),
    (spec(NATURAL, fin_height_mm=12.0), None, "lower than two gaps"),
])
def test_flags(s, band, words):
    point = sink_point(s)
    assert point.regime == band and point.sources
    assert (not point.flags) if words is None else any(words in f for f in point.flags), point.flags


def test_spreading_can_be_handed_over():
    seen = []

    def spreading(*args):
        seen.append(args)
        return 0.06

    s = spec(FAN, footprint={"length_mm": 60.0, "width_mm": 50.0, "count": 3})
    without, with_it = sink_point(s, spreading=False), sink_point(s, spreading=spreading)
    assert with_it.r_th_k_per_w == pytest.approx(without.r_th_k_per_w + 0.02) and with_it.r_spreading_k_per_w == pytest.approx(0.02)
    assert not with_it.flags and any("crowding of heat" in f and "38 %" in f for f in without.flags)
    source, tile, thickness, k, r_tile = seen[0]
    assert (source, tile, thickness, k) == pytest.approx((0.003, 0.157 * 0.15 / 3, 0.01, 200.0))
    assert r_tile == pytest.approx(3 * (without.r_th_k_per_w - without.r_base_k_per_w))


def test_spreading_in_the_base_is_that_of_the_closed_form():
    """Independent code: the closed form of Lee et al. in mission.thermal.spreading, itself held by CHECKS entry 32."""
    spreading = pytest.importorskip("mission.thermal.spreading")
    s = spec(FAN, footprint={"length_mm": 60.0, "width_mm": 50.0, "count": 3})
    without, with_it = sink_point(s, spreading=False), sink_point(s)
    r_tile = 3 * (without.r_th_k_per_w - without.r_base_k_per_w)
    expected = spreading.closed_form(3000.0, 150.0 * 157.0 / 3, 10.0, 200.0, r_tile)
    assert 3 * with_it.r_th_k_per_w == pytest.approx(expected.r_mean_k_per_w, rel=1e-9) and not with_it.flags
    plate = spec(PLATE, positions=3, footprint={"length_mm": 50.0, "width_mm": 40.0, "count": 3}, heat_w=500.0)
    bare, wide = sink_point(plate, spreading=False), sink_point(plate)
    assert [w.surface_rise_k_per_w - b.surface_rise_k_per_w for w, b in zip(wide.positions, bare.positions)] == pytest.approx(
        [wide.r_spreading_k_per_w] * 3
    )
    assert wide.surface_c == pytest.approx(65.0 + 500.0 * wide.r_th_k_per_w)


def test_libraries_are_loaded_on_use_only():
    code = ("import sys, mission, mission.thermal, mission.thermal.sinks\n"
            "print([m for m in ('ht', 'fluids', 'CoolProp', 'scipy') if m in sys.modules])")
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.strip() == "[]"


# --- what is refused --------------------------------------------------------------------------------------------------

BROKEN = [
    ("kind misspelt", {**FAN, "kind": "plate-fin-fun"}, ["kind", "'plate-fin-fun'", "plate-fin-fan"]),
    ("key misspelt", {**FAN, "gap_m": 0.003}, ["gap_m", "unknown key", "gap_mm"]),
    ("length in metres", {**FAN, "length_mm": 0.15}, ["length_mm", "0.15", "at least 5"]),
    ("one fin", {**FAN, "fin_count": 1}, ["fin_count", "1", "at least 2"]),
    ("half a fin", {**FAN, "fin_count": 12.5}, ["fin_count", "12.5", "whole number"]),
    ("negative gap", {**FAN, "gap_mm": -3.0}, ["gap_mm", "-3.0", "at least"]),
    ("fins wider than base", {**FAN, "width_mm": 120.0}, ["width_mm", "120 mm for 40 fins", "157 mm", "fin_count"]),
    ("fins on half of base", {**FAN, "width_mm": 300.0}, ["width_mm", "300 mm for 40 fins", "four fifths"]),
    ("footprint larger than base", {**FAN, "footprint": {"length_mm": 200.0, "width_mm": 60.0}}, ["footprint", "200 x 60 mm", "150 x 157 mm"]),
    ("fan and flow", {**FAN, "flow_m3_per_h": 100.0}, ["fan", "both fan and flow_m3_per_h", "one of the two"]),
    (
        "fan curve unsorted",
        {**FAN, "fan": {**FAN_CURVE, "flow_m3_per_h": [0.0, 200.0, 100.0, 300.0, 400.0]}},
        ["fan.flow_m3_per_h", "100 at point 3 after 200", "rise"],
    ),
    ("fan curve uneven", {**FAN, "fan": {**FAN_CURVE, "pressure_pa": [1.0, 0.0]}}, ["fan.pressure_pa", "2 values beside 5 flows"]),
    (
        "fan curve upside down",
        {**FAN, "fan": {**FAN_CURVE, "pressure_pa": [0.0, 10.0, 20.0, 30.0, 40.0]}},
        ["fan.pressure_pa", "0 Pa at the first", "falls"],
    ),
    (
        "fan curve in two units",
        {**FAN, "fan": {**FAN_CURVE, "flow_l_per_min": [0.0, 1.0]}},
        ["fan.flow_m3_per_h", "both flow_m3_per_h and flow_l_per_min"],
    ),
    ("altitude in feet", {**FAN, "altitude_m": 9000.0}, ["altitude_m", "9000", "at most 6000"]),
    ("NaN", {**FAN, "fin_mm": math.nan}, ["fin_mm", "nan", "finite"]),
    ("emissivity in percent", {**NATURAL, "emissivity": 85.0}, ["emissivity", "85", "at most 1"]),
    ("heat and surface", {**NATURAL, "surface_c": 80.0}, ["heat_w", "both heat_w and surface_c"]),
    ("glycol without share", {k: v for k, v in PLATE.items() if k != "glycol_mass_share"}, ["glycol_mass_share", "nothing", "0.1 to 0.6"]),
    ("water with share", {**PLATE, "fluid": "water"}, ["glycol_mass_share", "0.5 beside fluid = 'water'"]),
    ("share in percent", {**PLATE, "glycol_mass_share": 50.0}, ["glycol_mass_share", "50", "at most 0.6"]),
    ("coolant unknown", {**PLATE, "fluid": "oil"}, ["fluid", "'oil'", "water-glycol"]),
    ("channels wider than plate", {**PLATE, "width_mm": 50.0}, ["width_mm", "50 mm for 20 channels", "68.5 mm"]),
    ("loop without flow", {**PLATE, "loop_pa": 1e4}, ["loop_pa", "alone", "both or neither"]),
    ("shares miss one", {**PLATE, "positions": 3, "heat_shares": [0.5, 0.5]}, ["heat_shares", "2 shares for 3 positions"]),
    ("shares too large", {**PLATE, "positions": 2, "heat_shares": [0.5, 0.6]}, ["heat_shares", "1.1", "add up to 1"]),
    ("table rises", {**TABLE, "r_th_k_per_w": [0.04, 0.05, 0.018]}, ["r_th_k_per_w", "0.05 K/W at point 2 after 0.04"]),
    ("table uneven", {**TABLE, "r_th_k_per_w": [0.04, 0.03]}, ["r_th_k_per_w", "2 values beside 3 flows"]),
    ("outside the table", {**TABLE, "at_l_per_min": 12.0}, ["at_l_per_min", "12", "2 to 10"]),
    ("table in the other unit", {**TABLE, "at_m3_per_h": 0.3}, ["at_l_per_min", "at_m3_per_h beside a table in flow_l_per_min"]),
    ("number in quotes", {**TABLE, "at_l_per_min": "5"}, ["at_l_per_min", "'5'", "without quotes"]),
    ("share without fluid", {**TABLE, "glycol_mass_share": 0.4}, ["glycol_mass_share", "without a fluid"]),
]


@pytest.mark.parametrize(("cooling", "fragments"), [b[1:] for b in BROKEN], ids=[b[0] for b in BROKEN])
def test_broken_section_is_refused_with_its_place(cooling, fragments):
    with pytest.raises(InputError) as caught:
        parse_model({"cooling": cooling}, Wrapper, "study.toml")
    text = str(caught.value)
    assert text.startswith("study.toml, field cooling") and "allowed:" in text
    missing = [f for f in fragments if f not in text]
    assert not missing, f"{missing} not in: {text}"


REFUSED = [
    ("neither fan nor flow", InputError, lambda: sink_point(spec(FAN, fan=None)), ["neither flow_m3_per_h nor fan"]),
    ("neither pump nor flow", InputError, lambda: sink_point(spec(PLATE, flow_l_per_min=None)), ["neither flow_l_per_min nor pump"]),
    ("neither heat nor surface", InputError, lambda: sink_point(spec(NATURAL, heat_w=None)), ["neither surface_c nor heat_w"]),
    ("no inlet temperature", InputError, lambda: sink_point(spec(FAN, coolant_c=None)), ["coolant_c", "nothing"]),
    ("metal unknown", InputError, lambda: sink_point(spec(FAN, material="aluminum")), ["material", "'aluminum'", "did you mean 'aluminium'?"]),
    (
        "fan curve ends early",
        InputError,
        lambda: sink_point(spec(FAN, fan={"flow_m3_per_h": [0.0, 60.0], "pressure_pa": [250.0, 200.0]})),
        ["cooling.fan", "to spare at its end, 60 m3/h", "continue the curve"],
    ),
    (
        "fan curve begins late",
        InputError,
        lambda: sink_point(spec(FAN, fan={"flow_m3_per_h": [900.0, 1000.0], "pressure_pa": [5.0, 0.0]})),
        ["cooling.fan", "first point, 900 m3/h", "points at smaller flow"],
    ),
    ("heat too large for the air", RangeError, lambda: sink_point(spec(FAN), heat_w=1e6), ["heat_w", "1e+06 W", "raise the flow"]),
    ("heat too large for still air", RangeError, lambda: sink_point(spec(NATURAL), heat_w=1e5), ["heat_w", "100000 W", "larger sink"]),
    (
        "surface colder than air",
        RangeError,
        lambda: sink_point(spec(NATURAL, heat_w=None, surface_c=30.0)),
        ["surface_c", "30 degC", "warmer than the air"],
    ),
    (
        "surroundings too hot",
        RangeError,
        lambda: sink_point(spec(NATURAL, heat_w=None, surface_c=45.0, surroundings_c=150.0)),
        ["surroundings_c", "150 degC"],
    ),
    ("coolant frozen", RangeError, lambda: sink_point(spec(PLATE), inlet_c=-50.0), ["-50 degC", "freezes"]),
    ("water frozen", RangeError, lambda: fd.coolant_state("water", -1.0), ["water", "-1 degC"]),
    ("coolant too hot", RangeError, lambda: sink_point(spec(PLATE), heat_w=1e5), ["heat_w", "raise the flow"]),
    ("negative heat", RangeError, lambda: sink_point(spec(FAN), heat_w=-1.0), ["heat_w", "-1 W"]),
    ("no flow", RangeError, lambda: sink_point(spec(FAN), flow_m3_per_s=0.0), ["flow_m3_per_s", "0 m3/s"]),
    ("flow outside the table", RangeError, lambda: sink_point(spec(TABLE), flow_m3_per_s=1.0), ["flow_m3_per_s", "not continued"]),
    ("flow through still air", InputError, lambda: sink_point(spec(NATURAL), flow_m3_per_s=0.1), ["flow_m3_per_s", "plate-fin-natural"]),
    ("speed without a pump", InputError, lambda: sink_point(spec(PLATE), speed_ratio=0.5), ["speed_ratio", "0.5"]),
    ("picture of still air", InputError, lambda: operating_curve(spec(NATURAL)), ["'plate-fin-natural'", "liquid-plate"]),
    ("dependence of a fan sink", InputError, lambda: natural_dependence(spec(FAN)), ["'plate-fin-fan'", "operating_curve"]),
    ("rise below zero", RangeError, lambda: natural_dependence(spec(NATURAL), [-5.0]), ["rise_k[0]", "-5 K"]),
    (
        "cold walls, no rise",
        RangeError,
        lambda: natural_dependence(spec(NATURAL, surroundings_c=-60.0, k_w_per_m_k=1.0), [0.01]),
        ["surroundings_c", "0.01 K"],
    ),
    ("not a sink", InputError, lambda: sink_point("fan"), ["cooling.kind", "liquid-plate"]),
    ("height unknown", RangeError, lambda: fd.air_pressure_pa(2e4), ["altitude_m", "20000 m"]),
    ("coolant unknown", InputError, lambda: fd.coolant_state("watr", 20.0), ["'watr'", "did you mean 'water'?"]),
]


@pytest.mark.parametrize(("kind", "call", "fragments"), [b[1:] for b in REFUSED], ids=[b[0] for b in REFUSED])
def test_refused_with_reason(kind, call, fragments):
    with pytest.raises(kind) as caught:
        call()
    missing = [f for f in fragments if f not in str(caught.value)]
    assert not missing, f"{missing} not in: {caught.value}"
