"""Pictures of cooling: what they say against sums made another way, and that nothing overlaps or leaves the page."""

from __future__ import annotations

import functools
import re

import numpy as np
import pytest
from matplotlib.colors import to_rgb
from matplotlib.text import Text

from mission.errors import InputError, RangeError
from mission.show import cooling_figures
from mission.show.cooling_figures import (
    operating_point_figure,
    plate_map_figure,
    resistance_over_flow_figure,
    resistance_over_rise_figure,
    spreading_figure,
)
from mission.thermal.fourier import FourierStack, PlateLayer, Source
from mission.thermal.sinks import operating_curve, sink_point

from ..thermal.test_sinks import FAN, NATURAL, PLATE, TABLE, pumped, spec
from .pages import check_texts, drawn, tick_labels

NASTY = '<script>alert(1)</script> & $\\frac{1}{0}$ "quoted" and long'
COPPER, CERAMIC = (390.0, 8930.0, 385.0), (24.0, 3780.0, 830.0)
PLATES = (PlateLayer(*COPPER, 0.3), PlateLayer(*CERAMIC, 0.38), PlateLayer(*COPPER, 0.3), PlateLayer(*COPPER, 3.0))


@functools.cache
def at_work(name, **more):
    made = {"fan": lambda: spec(FAN), "natural": lambda: spec(NATURAL), "plate": lambda: spec(PLATE), "table": lambda: spec(TABLE), "pump": pumped,
            "air table": lambda: spec(TABLE, flow_l_per_min=None, at_l_per_min=None, flow_m3_per_h=[50.0, 100.0, 200.0], at_m3_per_h=190.0),
            "warm walls": lambda: spec(NATURAL, heat_w=None, surface_c=120.0, surroundings_c=60.0,
                                       footprint={"length_mm": 40.0, "width_mm": 40.0})}[name]()
    return made, sink_point(made, **more)


def six_pack():
    sources = [Source(20 + 40 * leg, 18 + 24 * row, 12, 12, f"S-{'abc'[leg]}-{('up', 'lo')[row]}") for leg in range(3) for row in range(2)]
    sources += [Source(34 + 40 * leg, 18 + 24 * row, 8, 10, f"D-{'abc'[leg]}-{('up', 'lo')[row]}") for leg in range(3) for row in range(2)]
    return FourierStack(122.0, 62.0, PLATES, tuple(sources), 80.0)


def half_bridge():
    return FourierStack(40.0, 60.0, PLATES, (Source(20, 15, 12, 12, "switch"), Source(20, 42, 4, 4, "a small diode")), 60.0)


def crowd():
    return FourierStack(180.0, 60.0, PLATES, tuple(Source(8 + 18 * k, 12 + 18 * j, 6, 6) for k in range(10) for j in range(3)), 80.0)


FIGURES = {
    "fan": lambda: operating_point_figure(*at_work("fan", heat_w=500.0)),
    "fan speeds": lambda: operating_point_figure(*at_work("fan", heat_w=500.0, speed_ratio=0.7), speed_ratios=(0.5, 1.0, 0.7), title=NASTY),
    "pump": lambda: operating_point_figure(*at_work("pump", heat_w=3000.0)),
    "pump speeds": lambda: operating_point_figure(*at_work("pump", heat_w=3000.0), speed_ratios=(1.0, 0.9, 0.8, 0.6, 0.2, 0.1)),
    "flow given": lambda: operating_point_figure(*at_work("plate", heat_w=3000.0)),
    "curve": lambda: operating_point_figure(operating_curve(at_work("fan")[0]), at_work("fan")[1]),
    "over fan flow": lambda: resistance_over_flow_figure(*at_work("fan", heat_w=500.0)),
    "over pump flow": lambda: resistance_over_flow_figure(*at_work("pump", heat_w=3000.0), title="名前"),
    "small flows cut": lambda: resistance_over_flow_figure(*at_work("plate", heat_w=20000.0)),
    "table": lambda: resistance_over_flow_figure(*at_work("table")), "air table": lambda: resistance_over_flow_figure(*at_work("air table")),
    "still air": lambda: resistance_over_rise_figure(*at_work("natural")), "warm walls": lambda: resistance_over_rise_figure(*at_work("warm walls")),
    "map": lambda: plate_map_figure(six_pack(), [150.0] * 6 + [60.0] * 6, 65.0),
    "tall map": lambda: plate_map_figure(half_bridge(), [200.0, 40.0], -20.0, title=NASTY),
    "names": lambda: plate_map_figure(half_bridge(), [200.0, 40.0], 25.0, names=("名前", NASTY)),
    "crowd": lambda: plate_map_figure(crowd(), np.arange(30.0) + 30.0, 65.0), "cold": lambda: plate_map_figure(half_bridge(), [0.0, 0.0], 25.0),
    "spreading": lambda: spreading_figure(half_bridge()),
    "angles": lambda: spreading_figure(six_pack(), 7, spread_deg=(45.0, 30.0, 45.0, 45.0), name=NASTY),
}
UNITS = ("m³/h", "l/min", "Pa", "K/W", "heat, W", "mm")


def words(figure):
    return [t.get_text() for t in figure.findobj(Text) if t.get_visible() and t.get_text().strip()]


@pytest.mark.parametrize("name", FIGURES)
def test_texts_stay_on_the_page_and_apart(name, tmp_path):
    figure = drawn(FIGURES[name], tmp_path)
    check_texts(figure, tick_labels)
    for ax in figure.axes:
        assert any(u in ax.get_xlabel() + ax.get_ylabel() for u in UNITS)


@pytest.mark.parametrize(("name", "heat_w", "per", "unit", "p"), [("fan", 500.0, 3600.0, "m³/h", 1.0), ("pump", 3000.0, 60000.0, "l/min", 1e-3)])
def test_the_working_point_is_where_the_lines_cross(name, heat_w, per, unit, p):
    """Independent: the crossing of the two lines that are drawn, by hand on their points."""
    made, point = at_work(name, heat_w=heat_w)
    curve = operating_curve(made, inlet_c=point.inlet_c, heat_w=heat_w, points=2001)
    gap = curve.mover_pa - curve.system_pa
    k = int(np.flatnonzero(gap > 0.0)[-1])
    share = gap[k] / (gap[k] - gap[k + 1])
    flow = curve.flow_m3_per_s[k] + share * (curve.flow_m3_per_s[k + 1] - curve.flow_m3_per_s[k])
    pressure = float(np.interp(flow, curve.flow_m3_per_s, curve.system_pa))
    said = next(re.fullmatch(rf"([\d.]+) {unit}, ([\d.]+) k?Pa", w) for w in words(FIGURES[name]()) if re.match(rf"[\d.]+ {unit}, ", w))
    assert float(said[1]) == pytest.approx(per * flow, rel=5e-3) and float(said[2]) == pytest.approx(p * pressure, rel=5e-3)


def test_speeds_are_named_with_their_flows():
    said = words(FIGURES["fan speeds"]())
    made, _ = at_work("fan")
    for ratio, name in ((1.0, "full"), (0.7, "70 %"), (0.5, "50 %")):
        flow = 3600.0 * sink_point(made, heat_w=500.0, speed_ratio=ratio).flow_m3_per_s
        assert f"fan, {name} speed: {flow:.3g} m³/h" in said


def test_kinds_of_flow_change_at_their_reynolds_numbers():
    """2300 and 4000, the borders that the rules state; the picture may be off by the distance of its points, 4 % of the flow."""
    made, point = at_work("pump", heat_w=3000.0)
    figure = FIGURES["over pump flow"]()
    borders = sorted(line.get_xdata()[0] for line in figure.axes[0].lines if len(set(line.get_xdata())) == 1 and len(line.get_xdata()) == 2)
    found = [sink_point(made, heat_w=3000.0, flow_m3_per_s=b / 60000.0).reynolds for b in borders]
    np.testing.assert_allclose(found, [2300.0, 4000.0], rtol=0.04)
    said = words(figure)
    assert [w for w in ("laminar", "transition", "turbulent") if w in said] == ["laminar", "transition", "turbulent"]
    assert f"{point.r_th_k_per_w:.3g} K/W at {60000 * point.flow_m3_per_s:.3g} l/min" in said


def test_the_table_shows_its_ends_and_nothing_beyond():
    figure = FIGURES["table"]()
    assert words(figure).count("the table ends") == 2 and "0.025 K/W at 5 l/min" in words(figure)
    line = figure.axes[0].lines[0]
    assert line.get_xdata() == pytest.approx([2.0, 5.0, 10.0])
    assert "m³/h" in FIGURES["air table"]().axes[0].get_xlabel()


def test_flows_that_the_properties_refuse_are_told():
    assert any("smaller flows" in w for w in words(FIGURES["small flows cut"]()))
    assert not any("smaller flows" in w for w in words(FIGURES["over fan flow"]()))


@pytest.mark.parametrize("name", ["natural", "warm walls"])
def test_still_air_point_lies_on_both_curves(name):
    """Spreading of a footprint included: the point is reckoned by heat or surface temperature, the curve by rise."""
    _, point = at_work(name)
    figure = resistance_over_rise_figure(*at_work(name))
    rise = point.r_th_k_per_w * point.heat_w
    for ax, value in zip(figure.axes, (point.r_th_k_per_w, point.heat_w), strict=True):
        line = ax.lines[0]
        assert np.interp(rise, line.get_xdata(), line.get_ydata()) == pytest.approx(value, rel=5e-3)


def test_hottest_point_of_a_chip_in_the_middle_is_the_middle():
    """Analytic: by symmetry."""
    stack = FourierStack(50.0, 30.0, PLATES, (Source(25.0, 15.0, 10.0, 10.0, "S"),), 100.0)
    said = plate_map_figure(stack, [100.0], 40.0).axes[0].get_title("left")
    assert re.search(r"at x = 25, y = 15 mm", said) and "100 W, coolant 40 °C" in said


def test_map_of_a_plate_heated_all_over_is_flat():
    """Analytic: 100 W through 100 mm2 K/W of 1500 mm2 make 6.67 K everywhere."""
    stack = FourierStack(50.0, 30.0, PLATES, (Source(25.0, 15.0, 50.0, 30.0, "all"),), 100.0)
    assert "46.67 °C everywhere" in plate_map_figure(stack, [100.0], 40.0).axes[0].get_title("left")


def test_contours_carry_their_temperature():
    """Every label that is shown lies where the stack has that temperature."""
    stack, power = six_pack(), [150.0] * 6 + [60.0] * 6
    figure = FIGURES["map"]()
    labels = [t for t in figure.axes[0].texts if re.fullmatch(r"[\d.]+", t.get_text())]
    assert sum(t.get_visible() for t in labels) >= 8
    for t in labels:
        x, y = t.get_position()
        assert 65.0 + stack.rise_k(power, [x], [y], layer=-1, depth_mm=3.0)[0, 0] == pytest.approx(float(t.get_text()), abs=0.3)


def test_names_that_do_not_fit_become_numbers_with_a_list():
    assert {"S-a-up", "D-c-lo"} <= set(words(FIGURES["map"]()))
    figure = FIGURES["tall map"]()
    assert {"1", "2"} <= set(words(figure)) and "1 switch, 2 a small diode" in figure.axes[0].get_xlabel()


def test_the_ramp_falls_in_grey():
    """Luminance by the usual weights of red, green and blue."""
    light = [np.dot(to_rgb(c), (0.2126, 0.7152, 0.0722)) for c in cooling_figures._HEAT]
    assert (np.diff(light) < -0.02).all()


def test_spreading_bars_have_their_lengths():
    """Analytic: straight down is thickness over conductivity and chip area, the whole plate the same over its area."""
    figure = FIGURES["spreading"]()
    through = 60.0 + 1e3 * (3.6 / 390.0 + 0.38 / 24.0)
    by_name = dict(zip((t.get_text() for t in figure.axes[0].get_yticklabels()), (bar.get_width() for bar in figure.axes[0].patches), strict=True))
    assert by_name["straight down"] == pytest.approx(through / 144.0, rel=1e-9)
    assert by_name["whole plate at once"] == pytest.approx(through / 2400.0, rel=1e-9)
    assert by_name["whole plate at once"] < by_name["exact"] < by_name["straight down"]
    said = words(figure)
    assert f"{through / 144.0:.3g} K/W" in " ".join(said) and "switch heated alone; angle 45°" in said
    assert "angle 30° to 45°" in " ".join(words(FIGURES["angles"]()))


@pytest.mark.parametrize(("make", "error", "word"), [
    (lambda: operating_point_figure(*at_work("natural")), InputError, "resistance_over_rise_figure"),
    (lambda: operating_point_figure(at_work("fan")[0], at_work("pump")[1]), InputError, "plate-fin-fan"),
    (lambda: operating_point_figure(*at_work("table")), InputError, "only these have a system"),
    (lambda: operating_point_figure(*at_work("fan"), speed_ratios=(9.0,)), RangeError, "speed_ratios"),
    (lambda: operating_point_figure(*at_work("fan"), speed_ratios=()), InputError, "one to six"),
    (lambda: operating_point_figure(*at_work("fan"), speed_ratios=[0.1 * k for k in range(1, 9)]), InputError, "one to six"),
    (lambda: resistance_over_flow_figure(*at_work("natural")), InputError, "resistance_over_rise_figure"),
    (lambda: resistance_over_flow_figure(at_work("fan")[0], at_work("table")[1]), InputError, "plate-fin-fan"),
    (lambda: resistance_over_rise_figure(*at_work("fan")), InputError, "plate-fin-natural"),
    (lambda: plate_map_figure(half_bridge(), [1.0], 25.0), RangeError, "power_w"),
    (lambda: plate_map_figure(half_bridge(), [1.0, np.nan], 25.0), RangeError, "power_w"),
    (lambda: plate_map_figure(half_bridge(), [1.0, 1.0], 250.0), RangeError, "coolant_c"),
    (lambda: plate_map_figure(half_bridge(), [1.0, 1.0], 25.0, names=["a"]), InputError, "1 names"),
    (lambda: spreading_figure(half_bridge(), 2), RangeError, "0 to 1"),
    (lambda: spreading_figure(half_bridge(), spread_deg=80.0), RangeError, "spread_deg"),
])
def test_broken_inputs(make, error, word):
    with pytest.raises(error, match=word):
        make()
