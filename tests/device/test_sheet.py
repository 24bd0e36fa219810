"""Data sheets: digitised curves read, cleaned with nothing hidden, made into a module; what a sheet can get wrong."""

import importlib.util
import re
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.device import load_module, on_state_crossing_a, on_state_voltage_v, switching_energy_j
from mission.device.digitised import THINNED, RawCurve, Rules, clean_curve, read_points
from mission.device.sheet import sheet_to_module
from mission.errors import InputError

PROFILES = Path(__file__).parents[2] / "profiles"
SHEETS = ["swift-400-sheet", "osprey-450-sheet"]


# ------------------------------------------------------------------- cleaning
def raw_curve(x, y, quantities=("current", "energy")):
    return RawCurve("e.csv", quantities, np.array(x, float), np.array(y, float), tuple(f"line {k}" for k in range(2, len(x) + 2)))


def cleaned(x, y, quantities=("current", "energy"), **rules):
    return clean_curve(raw_curve(x, y, quantities), "switch.turn_on, 25 degC", "e.csv", Rules(**rules))


def replayed(raw, report):
    """The curve as the report alone tells it: every change applied to the points as read."""
    points = {p: [x, y] for p, x, y in zip(raw.places, raw.x.tolist(), raw.y.tolist())}
    for c in report.changes:
        if c.point == "added":
            points[c.point] = [c.x_after, c.after]
        elif c.after is None:
            del points[c.point]
        else:
            assert points[c.point] == [c.x, c.before]
            points[c.point] = [c.x_after, c.after]
    return np.array(sorted(points.values())).T


def staircase(y, weight):
    """The nearest curve that does not fall, by pooling neighbours: the twin of the library's."""
    pools = []
    for value, w in zip(y, weight):
        pools.append([value, w, 1])
        while len(pools) > 1 and pools[-2][0] > pools[-1][0]:
            b, a = pools.pop(), pools.pop()
            w = a[1] + b[1]
            pools.append([(a[0] * a[1] + b[0] * b[1]) / w, w, a[2] + b[2]])
    return np.concatenate([np.full(n, v) for v, _, n in pools])


@settings(max_examples=80, deadline=None)
@given(st.integers(5, 80), st.integers(0, 10**6), st.sampled_from([0.0, 0.001, 0.004, 0.01]), st.sampled_from([4, 12, 30, None]), st.booleans())
def test_nothing_is_hidden(n, seed, scatter, most, zero_start):
    """Whatever was scattered: the report replayed gives the written curve, which rises and stays near what was read."""
    rng = np.random.default_rng(seed)
    x = rng.uniform(5.0, 600.0, n) if seed % 2 else np.linspace(5.0, 600.0, n)
    y = 2e-5 * x + 3e-8 * x**2
    raw = raw_curve(x + scatter * 100.0 * rng.standard_normal(n), y + scatter * y.max() * rng.uniform(-1, 1, n))
    rules = Rules(largest_change=0.5, max_points=most, thin_within=0.003, zero_start=zero_start)
    try:
        new_x, new_y, report = clean_curve(raw, "c", "e.csv", rules)
    except InputError as err:
        assert re.search("at least 4 points|change of at most|one value there|at least 0|a jump", str(err))
        return
    told_x, told_y = replayed(raw, report)
    assert new_x == pytest.approx(told_x, rel=1e-4) and new_y == pytest.approx(told_y, rel=1e-4, abs=1e-12)
    assert (np.diff(new_x) > 0.0).all() and (np.diff(new_y) >= 0.0).all()
    assert report.points_read == n and report.points_written == new_x.size
    if most is not None:
        assert new_x.size <= most + zero_start * (most < 4) or new_x.size <= most
    text = report.to_text()
    for c in report.changes:
        number = int(c.point.split()[1]) if c.point != "added" else None
        assert c.why in text
        if c.why == THINNED:
            spans = [s.split("-") for s in re.findall(r"\d+-\d+|\d+", text.rsplit("%:", 1)[1])]
            assert any(int(s[0]) <= number <= int(s[-1]) for s in spans)
        else:
            assert c.point in text


def test_a_clean_curve_is_left_alone():
    x, y = [0.0, 100.0, 250.0, 400.0], [0.0, 0.002, 0.007, 0.014]
    new_x, new_y, report = cleaned(x, y)
    assert (new_x.tolist(), new_y.tolist()) == (x, y)
    assert report.changes == () and report.largest_change == report.thinned_within == 0.0


def test_points_are_sorted_and_a_falling_list_is_turned_round():
    x, y, report = cleaned([0, 200, 100, 300, 400], [0, 0.004, 0.001, 0.009, 0.016])
    assert x.tolist() == [0, 100, 200, 300, 400] and y.tolist() == [0, 0.001, 0.004, 0.009, 0.016]
    assert [(c.point, c.before, c.after) for c in report.changes] == [("line 4", 0.001, 0.001)] and "stood after 200 A" in report.changes[0].why
    x, y, report = cleaned([400, 300, 200, 100], [0.016, 0.009, 0.004, 0.001])
    assert x.tolist() == [100, 200, 300, 400] and report.changes == ()
    assert "turned round" in report.to_text()


def test_points_at_one_current_become_their_mean():
    x, y, report = cleaned([0, 100, 200, 200.2, 300], [0, 0.001, 0.0040, 0.0041, 0.009])
    # analytic: the means
    assert x[2] == pytest.approx(200.1) and y[2] == pytest.approx(0.00405)
    assert [(c.point, c.after) for c in report.changes] == [("line 4", pytest.approx(0.00405)), ("line 5", None)]
    with pytest.raises(InputError, match="e.csv, line (4|5): found .* beside .* two curves in one file"):
        cleaned([0, 100, 200, 200, 300], [0, 0.001, 0.004, 0.006, 0.009])


@settings(max_examples=40, deadline=None)
@given(st.lists(st.floats(0.0, 1.0), min_size=4, max_size=40))
def test_falling_values_are_levelled_as_least_squares_want_it(steps):
    y = 1.0 + np.cumsum(steps) / len(steps) + 0.02 * np.sin(7.0 * np.arange(len(steps)))
    _, new, report = cleaned(np.arange(len(y)) * 10.0, y, max_points=None, largest_change=0.5)
    # independent code: pooling neighbours; squares count by the value, none smaller than a tenth of the largest
    assert new == pytest.approx(staircase(y, 1.0 / np.maximum(y, 0.1 * y.max()) ** 2), rel=6e-5)
    touched = {int(c.point.split()[1]) - 2 for c in report.changes}
    assert set(np.flatnonzero(abs(new - y) > 6e-5 * y)) <= touched


def test_a_value_that_would_change_too_much_is_refused_by_its_line():
    with pytest.raises(InputError) as caught:
        cleaned([0, 100, 200, 300, 400, 500], [0, 0.001, 0.0062, 0.004, 0.0065, 0.009])
    text = str(caught.value)
    assert "e.csv, line 4" in text and "0.0062 J at 200 A" in text and "ask for about 0.0025 J" in text and "at most 5%" in text
    with pytest.raises(InputError, match="falls over many points"):
        cleaned([0, 100, 200, 300, 400, 500], [0.009, 0.008, 0.006, 0.004, 0.003, 0.001])
    _, y, report = cleaned([0, 100, 200, 300, 400, 500], [0, 0.001, 0.0042, 0.004, 0.0065, 0.009])
    assert y[2] == y[3] and report.largest_change == pytest.approx(0.027, abs=0.003)


def test_slips_of_the_decimal_point():
    with pytest.raises(InputError, match="line 6: found a jump from 0.008 J at 300 A to 0.11 J at 400 A"):
        cleaned([0, 100, 200, 300, 400], [0, 0.002, 0.005, 0.008, 0.11])
    # the knee of a diode is none
    x, v, report = cleaned(
        [0.5, 2, 50, 100, 200, 300, 400], [0.4, 0.75, 0.95, 1.1, 1.3, 1.5, 1.7], ("current", "voltage"), above_zero=True, max_points=None
    )
    assert report.changes == ()


def test_values_hardly_below_zero():
    x, y, report = cleaned([-0.8, 100, 200, 300], [-0.00002, 0.002, 0.005, 0.009])
    assert (x[0], y[0]) == (0.0, 0.0) and len(report.changes) == 2
    with pytest.raises(InputError, match="line 2: found -20 A; allowed: at least 0 A"):
        cleaned([-20, 100, 200, 300], [0, 0.002, 0.005, 0.009])
    with pytest.raises(InputError, match="line 2: found -0.001 J at 0 A; allowed: values of at least 0 J"):
        cleaned([0, 100, 200, 300], [-0.001, 0.002, 0.005, 0.009])


def test_the_origin_of_a_channel_is_left_out():
    x, v, report = cleaned([0, 100, 200, 300, 400], [0, 0.4, 0.8, 1.2, 1.6], ("current", "voltage"), above_zero=True, max_points=None)
    assert x.tolist() == [100, 200, 300, 400] and report.changes[0].after is None and "0 V left out" in report.to_text()
    with pytest.raises(InputError, match="line 4: found 0 V at 200 A"):
        cleaned([0, 100, 200, 300, 400], [0, 0.4, 0, 1.2, 1.6], ("current", "voltage"), above_zero=True)


def test_a_start_at_the_origin_on_demand():
    x, y, report = cleaned([50, 100, 200, 300], [0.0012, 0.002, 0.005, 0.009], zero_start=True)
    assert (x[0], y[0]) == (0.0, 0.0) and report.changes[-1].point == "added" and "put in" in report.to_text()
    assert cleaned([0, 100, 200, 300], [0, 0.002, 0.005, 0.009], zero_start=True)[2].changes == ()


@pytest.mark.parametrize(("most", "within"), [(30, 0.003), (30, 0.02), (5, 0.0), (4, 0.003)])
def test_thinned_points_lie_where_the_report_says(most, within):
    i = np.linspace(2.0, 800.0, 120)
    v = 0.7 + 0.04 * np.sqrt(i) + 8e-4 * i
    x, y, report = cleaned(i, v, ("current", "voltage"), max_points=most, thin_within=within)
    off = np.max(np.abs(np.interp(i, x, y) / v - 1.0))
    # independent code
    assert off == pytest.approx(report.thinned_within, abs=1e-4) and x.size <= most and (x[0], x[-1]) == (2.0, 800.0)
    assert off <= within or (x.size == most and "raise max_points" in report.to_text())
    assert len([c for c in report.changes if c.why == THINNED]) == 120 - x.size


# --------------------------------------------------------------- the demo sheets
@pytest.fixture(scope="module", params=SHEETS)
def demo(request):
    return request.param, sheet_to_module(PROFILES / request.param / "sheet.toml")


def script(name):
    spec = importlib.util.spec_from_file_location("make_curves", PROFILES / name / "make_curves.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.mark.parametrize("name", SHEETS)
def test_the_curves_come_from_their_script(name, tmp_path):
    script(name).main(tmp_path)
    made = {p.name: p.read_text(encoding="utf-8") for p in tmp_path.glob("*.csv")}
    kept = {p.name: p.read_text(encoding="utf-8") for p in (PROFILES / name).glob("*.csv")}
    assert made == kept and len(made) >= 13
    assert all("invented" in text for text in [*kept.values(), (PROFILES / name / "sheet.toml").read_text(encoding="utf-8")])


def test_module_written_and_read_again(demo, tmp_path):
    name, result = demo
    result.write(tmp_path / "mine.toml")
    assert load_module("mine.toml", tmp_path) == result.module
    assert "digitised curves" in result.module.source and "invented" in result.module.source
    assert sheet_to_module(PROFILES / name / "sheet.toml") == result  # no clock, no chance
    assert not [n for n in result.module.notes if "unusual" in n or "no failure mode" in n]


def test_every_touched_point_is_in_the_text(demo):
    _, result = demo
    text = result.report.to_text()
    assert len(result.report.changes) > 200
    for one in result.report.cleaning:
        assert f"{one.curve} ({one.source}): {one.points_read} points read" in text
        assert one.points_written <= 30 or "thermal" in one.curve
        assert one.thinned_within <= 0.004 and one.largest_change < 0.02
    for c in result.report.changes:
        assert c.why in text


def test_the_shipped_swift_is_what_its_sheet_makes():
    shipped = load_module("swift-400")
    assert shipped == sheet_to_module(PROFILES / "swift-400-sheet" / "sheet.toml").module
    assert "Made from profiles/swift-400-sheet by the command `mission sheet`" in (
        Path(sheet_to_module.__code__.co_filename).parent / "modules" / "swift-400.toml"
    ).read_text(encoding="utf-8")


def test_swift_is_the_device_that_was_drawn():
    """Analytic: the formulas that the curves were drawn from, within the scatter of the drawing (0.15 % of each axis, thinning 0.4 %)."""
    drawn, m = script("swift-400-sheet"), load_module("swift-400")
    i = np.linspace(50.0, 800.0, 31)
    for t, r in drawn.R_OHM.items():
        assert on_state_voltage_v(m.switch.on_state, i, t) == pytest.approx(drawn.channel_v(i, r), rel=0.008, abs=0.015)
        assert on_state_voltage_v(m.switch.reverse, i, t) == pytest.approx(drawn.reverse_v(i, r, drawn.BODY_V[t]), rel=0.01, abs=0.015)
        assert on_state_voltage_v(m.diode.on_state, i, t) == pytest.approx(drawn.body_diode_v(i, drawn.BODY_V[t]), rel=0.008)
    for curves, made, scale in (
        (m.switch.turn_on, drawn.E_ON_MJ, 1e-3),
        (m.switch.turn_off, drawn.E_OFF_MJ, 1e-3),
        (m.diode.recovery, drawn.E_RR_UJ, 1e-6),
    ):
        for t, f in made.items():
            assert switching_energy_j(curves, i, t) == pytest.approx(scale * f(i), rel=0.012, abs=0.004 * scale * f(840.0))
    assert m.switch.turn_on.voltage_exponent == pytest.approx(1.25, abs=0.02)
    # typical of the class: 4 milliohm cold, 7 at 150 degC, body diode between 3 and 4.1 V, 8 + 5 mJ
    assert float(on_state_voltage_v(m.switch.on_state, 400.0, 25.0)) / 400.0 == pytest.approx(4e-3, rel=0.01)
    assert float(on_state_voltage_v(m.switch.on_state, 400.0, 150.0)) / 400.0 == pytest.approx(7e-3, rel=0.01)
    assert 3.0 < float(on_state_voltage_v(m.diode.on_state, 400.0, 175.0)) < float(on_state_voltage_v(m.diode.on_state, 400.0, 25.0)) < 4.1
    assert on_state_crossing_a(m.switch.on_state) is None  # a channel drops more when hot at any current
    assert m.switch.turn_on.gate_resistor.factor(2.0) == 1.0
    assert m.switch.turn_on.gate_resistor.factor(10.0) == pytest.approx(0.62 + 0.19 * 10.0, rel=0.01)
    assert m.diode.recovery.gate_resistor.factor(10.0) == pytest.approx(1.35 / 2.75, rel=0.02)


def test_osprey_is_the_device_that_was_drawn():
    """Analytic: its formulas; decimal commas, millivolts, voltage first, one curve of turn-off only."""
    drawn, m = script("osprey-450-sheet"), sheet_to_module(PROFILES / "osprey-450-sheet" / "sheet.toml").module
    i = np.linspace(45.0, 900.0, 20)
    for curves, made in ((m.switch.on_state, drawn.SWITCH), (m.diode.on_state, drawn.DIODE)):
        for t, numbers in made.items():
            assert on_state_voltage_v(curves, i, t) == pytest.approx(drawn.on_state_v(i, *numbers), rel=0.008)
    off = drawn.E_OFF_MJ[150](i) * 1e-3
    assert switching_energy_j(m.switch.turn_off, i, 150.0) == pytest.approx(off, rel=0.012, abs=2e-4)
    # the typed coefficient, at the cold end and beyond both
    for t in (25.0, -10.0, 165.0):
        assert switching_energy_j(m.switch.turn_off, i, t) == pytest.approx(off * (1.0 + 0.00276 * (t - 150.0)), rel=0.012, abs=2e-4)
    assert m.switch.on_state.line[0].v0_v == 1.03 and len(m.switch.on_state.curve) == 3
    assert m.diode.thermal.r_k_per_w == (0.007, 0.028, 0.045, 0.022)
    assert (m.ratings.t_vj_overload_c, m.switching.stray_inductance_h, m.switch.parallel.chips) == (175.0, 20e-9, 3)


def test_thermal_fits_reproduce_what_was_drawn(demo):
    name, result = demo
    drawn, (one,) = script(name), result.report.fits
    t = np.geomspace(2e-4, 4.0, 50)
    true = sum(r * (1.0 - np.exp(-t / tau)) for r, tau in zip(drawn.R_K_PER_W, drawn.TAU_S))
    # analytic: the branches that the curve was drawn from; the points themselves scatter by 0.5 %
    assert one.fit.z_th_k_per_w(t) == pytest.approx(true, rel=0.005)
    assert one.fit.residual_relative < 0.01 and one.fit.r_total_k_per_w == pytest.approx(sum(drawn.R_K_PER_W), rel=0.005)
    assert one.r_th_k_per_w == pytest.approx(sum(drawn.R_K_PER_W)) and result.module.switch.thermal.tau_s == one.fit.tau_s


def test_inputs_are_never_written_over(tmp_path):
    folder = small_sheet(tmp_path)
    result = sheet_to_module(folder / "sheet.toml")
    for name in ("sheet.toml", "eon25.csv"):
        before = (folder / name).read_text(encoding="utf-8")
        with pytest.raises(InputError, match="made from"):
            result.write(folder / name)
        assert (folder / name).read_text(encoding="utf-8") == before
    with pytest.raises(InputError, match="cannot be written"):
        result.write(tmp_path / "nowhere" / "x.toml")


# ------------------------------------------------------------------- a small sheet
def table(x, y, header="", sep=",", comma=False, digits=6):
    rows = [f"{a:.{digits}g}{sep}{b:.{digits}g}" for a, b in zip(x, y)]
    text = "\n".join(([header] if header else []) + rows) + "\n"
    return text.replace(".", ",") if comma else text


I = np.linspace(0.0, 600.0, 13)  # noqa: E741
T_S = np.geomspace(1e-4, 4.0, 40)
Z = sum(r * (1 - np.exp(-T_S / tau)) for r, tau in zip((0.01, 0.04, 0.06), (1e-3, 2e-2, 0.3)))
CSVS = {
    "v25.csv": table(I, 0.8 + 0.03 * np.sqrt(I) + 5e-4 * I, "I,V"),
    "v150.csv": table(I, 0.6 + 0.03 * np.sqrt(I) + 2e-3 * I, "I,V"),
    "eon25.csv": table(I, 0.03 * I + 5e-5 * I**2, "I,E"),
    "eon150.csv": table(I, 0.04 * I + 7e-5 * I**2, "I,E"),
    "eoff.csv": table(I, 0.1 * I, "I (A),E (mJ)"),
    "rg.csv": table([1, 2, 5, 10], [16.5, 18.3, 23.7, 32.7], "R,E"),
    "vdc.csv": table([400, 500, 600, 700], 20 * (np.array([400, 500, 600, 700]) / 600) ** 1.3, "V,E"),
    "zth.csv": table(T_S, Z, "t,Z"),
}
SHEET = """
format = 1
name = "Small"
technology = "none"
kind = "igbt"
arrangement = "six-pack"
source = "invented for tests"

[units]
current = "A"
voltage = "V"
energy = "mJ"
resistance = "ohm"
dc_voltage = "V"
time = "s"
z_th = "K/W"

[ratings]
v_ces_v = 1200
i_nominal_a = 300
i_peak_repetitive_a = 600
t_vj_op_max_c = 150
t_vj_op_min_c = -40

[gate]
charge_c = 1.8e-6
v_on_v = 15
v_off_v = -8
r_internal_ohm = 2.5
r_on_ohm = 2.0
r_off_ohm = 2.0

[[switch.on_state.curve]]
t_vj_c = 25
file = "v25.csv"

[[switch.on_state.curve]]
t_vj_c = 150
file = "v150.csv"

[switch.turn_on]
v_ref_v = 600
over_voltage = { file = "vdc.csv" }
gate_resistor = { r_ref_ohm = 2.0, at_current_a = 300, at_t_vj_c = 150, file = "rg.csv" }

[[switch.turn_on.curve]]
t_vj_c = 25
file = "eon25.csv"

[[switch.turn_on.curve]]
t_vj_c = 150
file = "eon150.csv"

[switch.turn_off]
v_ref_v = 600
voltage_exponent = 1.35
temperature_coefficient_per_k = 0.003

[[switch.turn_off.curve]]
t_vj_c = 125
file = "eoff.csv"

[switch.thermal]
reference = "case"
file = "zth.csv"
r_th_k_per_w = 0.11

[[diode.on_state.line]]
t_vj_c = 25
v0_v = 0.9
r_ohm = 2.5e-3
current_end_a = 600

[[diode.on_state.line]]
t_vj_c = 150
v0_v = 0.8
r_ohm = 3.0e-3
current_end_a = 600

[diode.recovery]
v_ref_v = 600
voltage_exponent = 0.6

[[diode.recovery.curve]]
t_vj_c = 25
current_a = [0, 150, 300, 600]
energy_j = [0, 0.006, 0.010, 0.014]

[[diode.recovery.curve]]
t_vj_c = 150
current_a = [0, 150, 300, 600]
energy_j = [0, 0.012, 0.020, 0.028]

[diode.thermal]
reference = "case"
r_k_per_w = [0.02, 0.16]
tau_s = [0.001, 0.08]

[case_to_sink]
per = "module"
r_th_k_per_w = 0.01
"""


def small_sheet(tmp_path, sheet=SHEET, **files):
    folder = tmp_path / "sheet"
    folder.mkdir(exist_ok=True)
    for name, text in (CSVS | {k.replace("_csv", ".csv"): v for k, v in files.items()} | {"sheet.toml": sheet}).items():
        if isinstance(text, bytes):
            (folder / name).write_bytes(text)
        elif text is not None:
            (folder / name).write_text(text, encoding="utf-8")
    return folder


def module_of(tmp_path, sheet=SHEET, **files):
    return sheet_to_module(small_sheet(tmp_path, sheet, **files) / "sheet.toml").module


def swapped(old, new, text=SHEET):
    assert text.count(old) >= 1, old
    return text.replace(old, new, 1)


def test_the_small_sheet_worked_out(tmp_path):
    result = sheet_to_module(small_sheet(tmp_path) / "sheet.toml")
    m = result.module
    # analytic: the formulas of the files, at points that are in them
    assert float(on_state_voltage_v(m.switch.on_state, 300.0, 25.0)) == pytest.approx(0.8 + 0.03 * 300**0.5 + 0.15, rel=4e-3)
    assert float(switching_energy_j(m.switch.turn_on, 600.0, 150.0)) == pytest.approx(0.0492, rel=1e-4)
    assert m.switch.turn_on.voltage_exponent == pytest.approx(1.3, abs=1e-3)
    assert m.switch.turn_on.gate_resistor.factor(10.0) == pytest.approx(32.7 / 18.3, rel=1e-4)
    # 30 mJ at 300 A and 125 degC, 0.3 % of it per kelvin
    assert float(switching_energy_j(m.switch.turn_off, 300.0, 25.0)) == pytest.approx(0.030 * 0.7, rel=1e-4)
    assert float(switching_energy_j(m.switch.turn_off, 300.0, 150.0)) == pytest.approx(0.030 * 1.075, rel=1e-4)
    assert m.switch.thermal.r_k_per_w == pytest.approx((0.01, 0.04, 0.06), rel=2e-3)
    assert float(on_state_voltage_v(m.diode.on_state, 200.0, 150.0)) == pytest.approx(1.4)
    assert m.source == "invented for tests; made from 8 digitised curves and 2 typed (sheet.toml)"
    text = result.report.to_text()
    for fragment in (
        "the curve at 25 degC is that one times 0.7, from the typed 0.003 per K",
        "voltage exponent 1.3, fitted to 4 points from 400 to 700 V; largest residual 0.0%",
        "printed: 0.11 K/W (+0.0%)",
        "diode.recovery, 25 degC (typed): 4 points read, 4 written",
    ):
        assert fragment in text
    assert len(result.inputs) == 9


@pytest.mark.parametrize(
    ("sheet", "files"),
    [
        (
            swapped('energy = "mJ"', 'energy = "J"'),
            {n: table(I, f * 1e-3, "I,E") for n, f in (("eon25_csv", 0.03 * I + 5e-5 * I**2), ("eon150_csv", 0.04 * I + 7e-5 * I**2))}
            | {
                "eoff_csv": table(I, 1e-4 * I),
                "rg_csv": table([1, 2, 5, 10], [16.5e-3, 18.3e-3, 23.7e-3, 32.7e-3]),
                "vdc_csv": table([400, 500, 600, 700], 20e-3 * (np.array([4, 5, 6, 7]) / 6) ** 1.3),
            },
        ),
        (
            swapped('file = "eon25.csv"', 'file = "eon25.csv"\nunits = { energy = "uJ", current = "kA" }'),
            {"eon25_csv": table(I / 1e3, 1e3 * (0.03 * I + 5e-5 * I**2))},
        ),
        (
            swapped('voltage = "V"', 'voltage = "mV"'),
            {"v25_csv": table(I, 1e3 * (0.8 + 0.03 * np.sqrt(I) + 5e-4 * I)), "v150_csv": table(I, 1e3 * (0.6 + 0.03 * np.sqrt(I) + 2e-3 * I))},
        ),
        (swapped('time = "s"\nz_th = "K/W"', 'time = "us"\nz_th = "mK/W"'), {"zth_csv": table(1e6 * T_S, 1e3 * Z)}),
        (swapped('dc_voltage = "V"', 'dc_voltage = "kV"'), {"vdc_csv": table([0.4, 0.5, 0.6, 0.7], 20 * (np.array([4, 5, 6, 7]) / 6) ** 1.3)}),
        (
            swapped('file = "eon25.csv"', 'file = "eon25.csv"\ncsv = { delimiter = ";", decimal = "," }'),
            {"eon25_csv": table(I, 0.03 * I + 5e-5 * I**2, "I;E", ";", comma=True)},
        ),
        (swapped('file = "eon25.csv"', 'file = "eon25.csv"\ncsv = { delimiter = "\\t" }'), {"eon25_csv": table(I, 0.03 * I + 5e-5 * I**2, "", "\t")}),
        (swapped('file = "eon25.csv"', 'file = "eon25.csv"\ncsv = { delimiter = " " }'), {"eon25_csv": table(I, 0.03 * I + 5e-5 * I**2, "", "   ")}),
        (
            swapped('file = "v25.csv"', 'file = "v25.csv"\ncolumns = { current = 2, voltage = 1 }'),
            {"v25_csv": table(0.8 + 0.03 * np.sqrt(I) + 5e-4 * I, I)},
        ),
        (
            swapped('file = "v25.csv"', 'file = "v25.csv"\ncolumns = { current = "I_C", voltage = "V_CE" }'),
            {"v25_csv": "# drawn\n\nn,V_CE,I_C\n" + "".join(f"x,{0.8 + 0.03 * i**0.5 + 5e-4 * i:.6g},{i:g}\n" for i in I)},
        ),
        (swapped('file = "eon25.csv"', 'file = "eon25.csv"\ncsv = { encoding = "utf-16" }'), {"eon25_csv": CSVS["eon25.csv"].encode("utf-16")}),
        (SHEET, {"v25_csv": CSVS["v25.csv"].replace("\n", "\r\n"), "eon25_csv": "\ufeff" + CSVS["eon25.csv"]}),
        (
            swapped(
                't_vj_c = 25\nfile = "v25.csv"\n\n[[switch.on_state.curve]]\nt_vj_c = 150\nfile = "v150.csv"',
                't_vj_c = 150\nfile = "v150.csv"\n\n[[switch.on_state.curve]]\nt_vj_c = 25\nfile = "v25.csv"',
            ),
            {},
        ),
    ],
    ids=[
        "joules",
        "microjoules and kiloamperes",
        "millivolts",
        "microseconds and milli",
        "kilovolts",
        "decimal comma",
        "tabs",
        "blanks",
        "columns by number",
        "columns by name",
        "encoding",
        "line ends and mark",
        "temperatures out of order",
    ],
)
def test_the_same_module_from_other_units_and_forms(tmp_path, sheet, files):
    (tmp_path / "a").mkdir()
    (tmp_path / "b").mkdir()
    want, got = module_of(tmp_path / "a"), module_of(tmp_path / "b", sheet, **files)
    for place, curves in want.on_state_curves().items():
        for a, b in zip(curves.points, got.on_state_curves()[place].points):
            assert b.current_a == pytest.approx(a.current_a) and b.voltage_v == pytest.approx(a.voltage_v, rel=1e-4)
    for place, curves in want.energy_curves().items():
        for a, b in zip(curves.points, got.energy_curves()[place].points):
            assert b.current_a == pytest.approx(a.current_a) and b.energy_j == pytest.approx(a.energy_j, rel=1e-4)
    assert got.switch.thermal.r_k_per_w == pytest.approx(want.switch.thermal.r_k_per_w, rel=1e-3)
    assert got.switch.turn_on.voltage_exponent == pytest.approx(want.switch.turn_on.voltage_exponent, abs=2e-3)


def test_typed_points_are_cleaned_but_not_thinned(tmp_path):
    typed = swapped('file = "eon25.csv"', "current_a = [0, 100, 200, 200, 300, 600]\nenergy_j = [0, 0.004, 0.008, 0.0082, 0.012, 0.024]")
    result = sheet_to_module(small_sheet(tmp_path, typed) / "sheet.toml")
    c = result.module.switch.turn_on.curve[0]
    assert c.current_a == (0, 100, 200, 300, 600) and c.energy_j[2] == pytest.approx(0.0081)
    assert [x.point for x in result.report.changes if x.curve == "switch.turn_on, 25 degC"] == ["point 3", "point 4"]


def test_other_parts_of_a_sheet(tmp_path):
    """A hybrid without recovery, layers instead of a curve, a leg of three levels: what the module file takes, the sheet takes."""
    hybrid = re.sub(r"\[diode.recovery\].*?(?=\[diode.thermal\])", "", SHEET.replace('kind = "igbt"', 'kind = "igbt-schottky"'), flags=re.DOTALL)
    assert module_of(tmp_path, hybrid).diode.recovery is None
    layers = swapped(
        "r_k_per_w = [0.02, 0.16]\ntau_s = [0.001, 0.08]",
        'cells_per_layer = 8\n[[diode.thermal.layer]]\nmaterial = "silicon"\nthickness_mm = 0.12\nwidth_mm = 12\nlength_mm = 12',
    )
    assert module_of(tmp_path, layers).diode.thermal.cells_per_layer == 8
    leg = SHEET.replace('"six-pack"', '"t-type-leg"')
    inner = re.search(r"\[\[switch\.on_state.*?(?=\[\[diode)", SHEET, re.DOTALL)[0]
    typed = re.search(r"\[\[diode\.on_state.*?(?=\[case_to_sink)", SHEET, re.DOTALL)[0]
    leg += inner.replace("switch.", "inner_switch.") + typed.replace("diode.", "inner_diode.")
    result = sheet_to_module(small_sheet(tmp_path, leg) / "sheet.toml")
    # like chips in two places may share their curves; the report says so
    assert result.module.levels == 3 and result.module.inner_switch == result.module.switch
    assert "inner_switch.turn_on.curve[1]: the curve of switch.turn_on.curve[1]" in result.report.notes


def test_a_gate_resistor_other_than_that_of_the_curves_is_told(tmp_path):
    result = sheet_to_module(small_sheet(tmp_path, swapped("r_on_ohm = 2.0", "r_on_ohm = 5.0")) / "sheet.toml")
    assert f"the gate's resistor is 5 ohm, the energy curves belong to 2 ohm; energies are multiplied by {23.7 / 18.3:.4g}" in result.report.to_text()
    off = CSVS["rg.csv"].replace("18.3", "20.5").replace("16.5", "18.5")
    assert "only its shape is used" in sheet_to_module(small_sheet(tmp_path, rg_csv=off) / "sheet.toml").report.to_text()


def test_printed_resistance_beside_the_fit(tmp_path):
    text = sheet_to_module(small_sheet(tmp_path, swapped("r_th_k_per_w = 0.11", "r_th_k_per_w = 0.12")) / "sheet.toml").report.to_text()
    assert "the sheet prints 0.12 K/W (-8.3%); the branches count" in text


def test_scatter_that_no_branches_meet_is_stated(tmp_path):
    rng = np.random.default_rng(5)
    z = Z * (1.0 + 0.012 * rng.standard_normal(Z.size))
    result = sheet_to_module(small_sheet(tmp_path, zth_csv=table(T_S, z, "t,Z")) / "sheet.toml")
    fit = result.report.fits[0].fit
    assert 0.01 < fit.residual_relative < 0.05 and fit.message in result.report.to_text() and "the points scatter" in fit.message


# ------------------------------------------------------------------ what a sheet can get wrong
def line(name, number, new):
    lines = CSVS[name].splitlines()
    lines[number - 1] = new
    return {name.replace(".csv", "_csv"): "\n".join(lines) + "\n"}


def sheet(old, new, **files):
    return {"sheet": swapped(old, new), **files}


DROP_UNIT = 'energy = "mJ"\n'
EON = 'file = "eon25.csv"'
BROKEN_SHEETS = [
    ("no such file", sheet(EON, 'file = "eon52.csv"'), ["eon52.csv (switch.turn_on.curve[1])", "no such file", "did you mean 'eon25.csv'?"]),
    ("folder for a file", sheet(EON, 'file = "."'), ["a folder", "a CSV file"]),
    ("empty file", {"eon25_csv": "  \n"}, ["eon25.csv", "an empty file"]),
    ("header only", {"eon25_csv": "I,E\n"}, ["eon25.csv", "no row of numbers"]),
    ("not UTF-8", {"eon25_csv": b"I,E \xb5J\n0,1\n"}, ["eon25.csv", "line 1", "0xb5", "not utf-8", "switch.turn_on.curve[1].csv"]),
    ("binary", {"eon25_csv": b"\x00\x01\x02\x03"}, ["zero byte", "CSV text"]),
    ("unknown encoding", sheet(EON, EON + '\ncsv = { encoding = "utf-88" }'), ["csv.encoding", "utf-88", "cp1252"]),
    ("text in a row", line("eon25.csv", 4, "100,n/a"), ["eon25.csv", "line 4", "column 'E'", "value 'n/a'", "a finite number"]),
    ("nan in a row", line("eon25.csv", 4, "100,nan"), ["line 4", "column 'E'", "value 'nan'", "finite"]),
    ("infinite", line("eon25.csv", 4, "inf,5"), ["line 4", "column 'I'", "value 'inf'"]),
    ("nan in the first row without a header", {"eon25_csv": "nan,nan\n" + CSVS["eon25.csv"].split("\n", 1)[1]}, ["line 1", "value 'nan'"]),
    ("empty field", line("eon25.csv", 5, "150,"), ["line 5", "an empty field", "nothing is filled in"]),
    ("a field too few", line("eon25.csv", 5, "150"), ["line 5", "1 field;", "2 fields"]),
    ("a field too many", line("eon25.csv", 5, "150,5,6"), ["line 5", "3 fields", "decimal comma"]),
    ("decimal comma not stated", {"eon25_csv": table(I, 0.03 * I, "I;E", ";", comma=True)}, ["a single column", 'delimiter = ";"']),
    (
        "delimiter stated, comma not",
        sheet(EON, EON + '\ncsv = { delimiter = ";" }', eon25_csv="I;E\n0,5;1,5\n3;4\n"),
        ["line 2", "value '0,5'", 'decimal = ","'],
    ),
    ("comma twice", sheet(EON, EON + '\ncsv = { decimal = "," }'), ["',' as delimiter and as decimal sign", "two different signs"]),
    ("three columns", {"eon25_csv": "I,E,F\n1,2,3\n"}, ["3 columns (I, E, F)", "current and energy", "columns = { current = 1, energy = 2 }"]),
    ("no such column", sheet(EON, EON + '\ncolumns = { current = "I", energy = "Eon" }'), ["no column 'Eon'", "'I', 'E'"]),
    ("column number", sheet(EON, EON + "\ncolumns = { current = 1, energy = 3 }"), ["columns.energy", "column 3", "1 to 2"]),
    ("column twice", sheet(EON, EON + "\ncolumns = { current = 1, energy = 1 }"), ["one column for current and energy"]),
    (
        "column of something else",
        sheet(EON, EON + "\ncolumns = { curent = 1, energy = 2 }"),
        ["switch.turn_on.curve[1].columns", "curent", "did you mean 'current'?"],
    ),
    ("one column only", sheet(EON, EON + "\ncolumns = { current = 1 }"), ["no column for energy"]),
    (
        "name without a header",
        sheet(EON, EON + '\ncolumns = { current = "I", energy = "E" }', eon25_csv=CSVS["eon25.csv"].split("\n", 1)[1]),
        ["a file without a header"],
    ),
    ("quote left open", line("eon25.csv", 3, '"50,2'), ["line 3", "a quote that is not closed"]),
    ("separator line", {"eon25_csv": "sep=;\n" + CSVS["eon25.csv"]}, ["line 1", "sep=;", "delimiter"]),
    ("unit not stated", sheet(DROP_UNIT, ""), ["switch.turn_on.over_voltage.units.energy", "one of J, mJ, uJ", "none is assumed"]),
    ("unit unknown", sheet('energy = "mJ"', 'energy = "MJ"'), ["units.energy", "MJ", "one of J, mJ, uJ"]),
    (
        "header says another unit",
        sheet(
            'energy = "mJ"',
            'energy = "J"',
            eoff_csv=CSVS["eoff.csv"],
            **{n.replace(".csv", "_csv"): table(I, f, "I,E") for n, f in (("eon25.csv", 1e-4 * I), ("eon150.csv", 1.1e-4 * I))},
        ),
        ["eoff.csv", "column 'E (mJ)'", "unit mJ in the header, J stated"],
    ),
    (
        "energies a thousand times too high",
        sheet(EON, EON + '\nunits = { energy = "J" }'),
        ["eon25.csv", "36 J at 600 A and 600 V", "unit is stated as J"],
    ),
    (
        "energies a thousand times too low",
        sheet('file = "eoff.csv"', 'file = "eoff.csv"\nunits = { energy = "uJ" }', eoff_csv=table(I, 0.1 * I, "I,E")),
        ["eoff.csv", "6e-05 J at 600 A", "unit is stated as uJ"],
    ),
    (
        "typed energies in millijoules",
        sheet("energy_j = [0, 0.006, 0.010, 0.014]", "energy_j = [0, 6, 10, 14]"),
        ["field diode.recovery.curve[1]", "14 J at 600 A", "energy_j is in joules"],
    ),
    (
        "volts stated as millivolts",
        sheet('file = "v25.csv"', 'file = "v25.csv"\nunits = { voltage = "mV" }'),
        ["v25.csv", "0.0018", "0.1 to 20 V", "stated as mV"],
    ),
    (
        "columns exchanged",
        sheet('file = "v25.csv"', 'file = "v25.csv"\ncolumns = { current = 2, voltage = 1 }'),
        ["largest voltage of 600 V", "columns are exchanged"],
    ),
    (
        "current in kiloamperes",
        sheet('file = "eon25.csv"', 'file = "eon25.csv"\nunits = { current = "kA" }'),
        ["ends at 6e+05 A", "nominal current of 300 A", "unit of the current"],
    ),
    ("absurd value", line("eon25.csv", 14, "600,1e300"), ["line 14", "1e+297 J", "energy as a module can have it"]),
    ("curve that ends early", {"eon25_csv": table(I / 10, 0.3 * I / 10, "I,E")}, ["ends at 60 A", "at least 90 A"]),
    ("too few points", {"eon25_csv": "I,E\n0,0\n300,12\n600,36\n"}, ["eon25.csv", "3 points", "at least 4"]),
    ("all points at one current", {"eon25_csv": "I,E\n300,12\n300,12\n300,12\n300,12\n300,12\n"}, ["1 point of its own", "at least 4"]),
    (
        "a value that slipped",
        line("eon25.csv", 8, "300,3.5"),
        ["eon25.csv", "line 8", "0.0035 J at 300 A, where the points beside it ask for about 0.01363 J", "a change of at most 5%", "data sheet"],
    ),
    ("a decimal point that slipped", line("eon25.csv", 14, "600,360"), ["line 14", "a jump from", "0.36 J at 600 A", "decimal point"]),
    (
        "two curves in one file",
        {"eon25_csv": CSVS["eon25.csv"] + CSVS["eon150.csv"].split("\n", 1)[1]},
        ["eon25.csv", "beside", "two curves in one file"],
    ),
    ("negative current", line("eon25.csv", 2, "-50,0"), ["line 2", "-50 A", "at least 0 A", "conducting direction"]),
    ("negative energy", line("eon25.csv", 2, "0,-3"), ["line 2", "-0.003 J at 0 A", "at least 0 J"]),
    ("negative voltage", line("v25.csv", 6, "200,-1.3"), ["v25.csv", "line 6", "-1.3 V at 200 A", "above 0 V"]),
    (
        "the same file twice",
        sheet('file = "eon150.csv"', 'file = "eon25.csv"'),
        ["switch.turn_on.curve[2].file", "the file of switch.turn_on.curve[1] too", "temperature_coefficient_per_k = 0"],
    ),
    ("a copied file", {"eon150_csv": CSVS["eon25.csv"]}, ["eon150.csv", "the same points as switch.turn_on.curve[1]", "copied"]),
    (
        "one temperature twice",
        sheet('t_vj_c = 150\nfile = "v150.csv"', 't_vj_c = 25\nfile = "v150.csv"'),
        ["switch.on_state.curve[2].t_vj_c", "25 degC, as in curve 1"],
    ),
    ("temperature in kelvin", sheet("t_vj_c = 25\n", "t_vj_c = 298\n"), ["switch.on_state.curve[1].t_vj_c", "298 degC", "kelvin"]),
    (
        "one on-state curve",
        sheet('[[switch.on_state.curve]]\nt_vj_c = 150\nfile = "v150.csv"\n', ""),
        ["switch.on_state", "1 curve", "two or more junction temperatures"],
    ),
    (
        "one energy curve without a coefficient",
        sheet("temperature_coefficient_per_k = 0.003\n", ""),
        ["switch.turn_off", "1 curve", "temperature_coefficient_per_k", "0 where"],
    ),
    (
        "coefficient beside two curves",
        sheet("over_voltage = {", "temperature_coefficient_per_k = 0.003\nover_voltage = {"),
        ["switch.turn_on.temperature_coefficient_per_k", "beside 2 curves"],
    ),
    (
        "coefficient that leaves nothing",
        sheet("temperature_coefficient_per_k = 0.003", "temperature_coefficient_per_k = 0.008"),
        ["leaves nothing at -40 degC", "0.003 per K is common"],
    ),
    (
        "coefficient in percent",
        sheet("temperature_coefficient_per_k = 0.003", "temperature_coefficient_per_k = 0.3"),
        ["temperature_coefficient_per_k", "value 0.3", "at most 0.02"],
    ),
    ("no exponent", sheet("voltage_exponent = 1.35\n", ""), ["switch.turn_off", "neither voltage_exponent nor over_voltage"]),
    ("exponent twice", sheet("over_voltage = {", "voltage_exponent = 1.3\nover_voltage = {"), ["both voltage_exponent and over_voltage"]),
    (
        "no power of the voltage",
        {"vdc_csv": table([400, 500, 600, 700], [10, 11, 20, 21], "V,E")},
        ["vdc.csv", "no power of the voltage", "at most 10%"],
    ),
    (
        "falls with voltage",
        {"vdc_csv": table([400, 500, 600, 700], [20, 19, 18, 17], "V,E")},
        ["vdc.csv", "a fitted voltage exponent of -0.2", "0 to 3"],
    ),
    (
        "voltages elsewhere",
        {"vdc_csv": table([40, 50, 60, 70], [10, 12, 15, 18], "V,E")},
        ["vdc.csv", "40 to 70 V beside v_ref_v = 600 V", "unit of the voltage"],
    ),
    ("voltages all alike", {"vdc_csv": table([600, 620, 650], [20, 20.5, 21], "V,E")}, ["vdc.csv", "600 to 650 V only"]),
    ("gate resistor outside its curve", sheet("r_ref_ohm = 2.0", "r_ref_ohm = 20.0"), ["switch.turn_on.gate_resistor", "20 ohm", "1 to 10 ohm"]),
    ("gate resistor of the gate outside", sheet("r_on_ohm = 2.0", "r_on_ohm = 12.0"), ["gate.r_on_ohm", "12 ohm", "1 to 10 ohm"]),
    (
        "gate resistor curve in another unit",
        sheet('at_t_vj_c = 150, file = "rg.csv"', 'at_t_vj_c = 150, file = "rg.csv", units = { energy = "J" }'),
        ["switch.turn_on.gate_resistor", "18.3 J at 2 ohm beside 0.0183 J of the energy curves at 300 A", "within 30%"],
    ),
    (
        "gate resistor curve at an unknown current",
        sheet("at_current_a = 300, ", ""),
        ["switch.turn_on.gate_resistor", "only one of at_current_a and at_t_vj_c"],
    ),
    (
        "file beside typed points",
        sheet(EON, EON + "\ncurrent_a = [0, 600]\nenergy_j = [0, 0.03]"),
        ["switch.turn_on.curve[1]", "file beside current_a and energy_j"],
    ),
    ("neither file nor points", sheet(EON + "\n", ""), ["switch.turn_on.curve[1].file", "neither file nor current_a and energy_j"]),
    ("half of the typed points", sheet(EON, "current_a = [0, 600]"), ["switch.turn_on.curve[1].energy_j", "current_a without energy_j"]),
    (
        "typed points of unequal length",
        sheet("energy_j = [0, 0.006, 0.010, 0.014]", "energy_j = [0, 0.006, 0.010]"),
        ["diode.recovery.curve[1]", "4 values in current_a beside 3 in energy_j"],
    ),
    (
        "units beside typed points",
        sheet("energy_j = [0, 0.006, 0.010, 0.014]", 'energy_j = [0, 0.006, 0.010, 0.014]\nunits = { energy = "mJ" }'),
        ["diode.recovery.curve[1].units", "units without a file"],
    ),
    ("key misspelt", sheet("t_vj_c = 25\nfile", "t_vj = 25\nfile"), ["switch.on_state.curve[1]", "the unknown key 't_vj'", "did you mean 't_vj_c'?"]),
    ("section misspelt", sheet("[gate]", "[gates]"), ["unknown key 'gates'", "did you mean 'gate'?"]),
    ("kind not known", sheet('kind = "igbt"', 'kind = "ibgt"'), ["field kind", "ibgt", "did you mean 'igbt'?"]),
    ("part that the kind does not have", sheet('kind = "igbt"', 'kind = "mosfet"'), ["diode.thermal", "kind = 'mosfet'", "remove the section"]),
    ("another format", sheet("format = 1", "format = 2"), ["field format", "value 2"]),
    (
        "cleaning out of range",
        sheet("[ratings]", "[cleaning]\nlargest_change = 5\n\n[ratings]"),
        ["cleaning.largest_change", "value 5", "at most 0.2"],
    ),
    ("impedance that falls", {"zth_csv": table(T_S, Z[::-1], "t,Z")}, ["zth.csv", "line", "does not fall"]),
    ("impedance in milli", sheet('z_th = "K/W"', 'z_th = "mK/W"'), ["zth.csv", "largest z th of 0.00011 K/W", "stated as mK/W"]),
    ("times in milliseconds", {"zth_csv": table(1e6 * T_S, Z, "t,Z")}, ["zth.csv", "times from 100 to 4e+06 s", "stated as s"]),
    (
        "impedance of repeated pulses",
        {"zth_csv": table(np.geomspace(1e-6, 4, 40), 0.055 + 0.5 * np.interp(np.geomspace(1e-6, 4, 40), T_S, Z, left=0.0), "t,Z")},
        ["zth.csv", "starts on a level", "single pulse"],
    ),
    (
        "impedance too rough",
        {"zth_csv": table(T_S, Z * np.where(np.arange(T_S.size) % 14 == 7, 1.17, 1.0), "t,Z")},
        ["zth.csv", "line", "check the point"],
    ),
    ("impedance of five points", {"zth_csv": table(T_S[::8], Z[::8], "t,Z")}, ["zth.csv", "5 points", "at least 6"]),
    (
        "printed resistance of another part",
        sheet("r_th_k_per_w = 0.11", "r_th_k_per_w = 1.1"),
        ["switch.thermal.r_th_k_per_w", "1.1 K/W beside a curve that ends at 0.11 K/W"],
    ),
    (
        "curve beside branches",
        sheet('file = "zth.csv"', 'file = "zth.csv"\nr_k_per_w = [0.1]\ntau_s = [0.1]'),
        ["switch.thermal", "a curve beside r_k_per_w and tau_s"],
    ),
    (
        "branches asked of no curve",
        sheet("r_k_per_w = [0.02, 0.16]", "branches = 4\nr_k_per_w = [0.02, 0.16]"),
        ["diode.thermal.branches", "branches without a curve"],
    ),
    (
        "too few branches asked for",
        sheet('file = "zth.csv"', 'file = "zth.csv"\nbranches = 1'),
        ["zth.csv", "1 branches meet only within", "ask for more branches"],
    ),
]


@pytest.mark.parametrize(("change", "fragments"), [b[1:] for b in BROKEN_SHEETS], ids=[b[0] for b in BROKEN_SHEETS])
def test_message_names_file_place_value_and_remedy(change, fragments, tmp_path):
    folder = small_sheet(tmp_path, **change)
    with pytest.raises(InputError) as caught:
        sheet_to_module(folder / "sheet.toml")
    text = str(caught.value)
    assert str(folder) in text and "allowed:" in text
    missing = [f for f in fragments if f not in text]
    assert not missing, f"{missing} not in: {text}"


def test_names_are_different():
    names = [b[0] for b in BROKEN_SHEETS]
    assert len(set(names)) == len(names) >= 25


def test_reading_alone(tmp_path):
    (tmp_path / "e.csv").write_text("# drawn\nI (kA),E / mJ\n0,0\n\n+0.1,4e0\n", encoding="utf-8")
    raw = read_points(tmp_path / "e.csv", "e.csv", ("current", "energy"), ("kA", "mJ"))
    assert raw.x.tolist() == [0.0, 100.0] and raw.y == pytest.approx([0.0, 0.004]) and raw.places == ("line 3", "line 5")


# ------------------------------------------------------------ the other invented modules
@pytest.mark.parametrize(
    ("name", "kind", "arrangement", "chips"),
    [
        ("swift-400", "mosfet", "six-pack", 6),
        ("tern-300", "reverse-conducting-igbt", "six-pack", 6),
        ("plover-300", "igbt-schottky", "six-pack", 12),
        ("curlew-300", "igbt", "npc-leg", 30),
        ("dunlin-300", "igbt", "t-type-leg", 24),
    ],
)
def test_one_invented_module_of_every_kind(name, kind, arrangement, chips):
    m = load_module(name)
    assert (m.kind, m.arrangement, len(m.chip_names())) == (kind, arrangement, chips)
    assert "invented" in m.source and len(m.failure_mode) == 2
    assert not [n for n in m.notes if "unusual" in n or "data end" in n or "no failure mode" in n or "zero at" in n]
    for curves in (*m.on_state_curves().values(), *m.energy_curves().values()):
        assert curves.current_data_a[1] >= m.ratings.i_peak_repetitive_a


@pytest.mark.parametrize(
    ("name", "density_a_per_cm2", "effusivity"),
    [
        ("tern-300", 70.0, 14100.0),
        ("plover-300", 100.0, 14100.0),
        ("curlew-300", 160.0, 14100.0),
        ("dunlin-300", 100.0, 14100.0),
        ("swift-400", 190.0, 25000.0),
    ],
)
def test_first_branch_is_the_chip(name, density_a_per_cm2, effusivity):
    """Heat enters a chip as into a half-space: Z = 2 sqrt(t/pi)/(area effusivity), Carslaw and Jaeger 1959, 2.9.

    The current density of the class (common practice) gives the area; effusivity in W s^0.5 m^-2 K^-1, warm silicon and silicon carbide.
    """
    m = load_module(name)
    area_m2 = m.ratings.i_nominal_a / density_a_per_cm2 * 1e-4
    half_space = 2.0 * np.sqrt(0.5e-3 / np.pi) / (area_m2 * effusivity)
    th = m.switch.thermal
    z = sum(r * -np.expm1(-0.5e-3 / tau) for r, tau in zip(th.r_k_per_w, th.tau_s))
    assert 0.4 < z / half_space < 2.0


def test_devices_differ_as_their_classes_do():
    heron, swift, tern, plover = (load_module(n) for n in ("heron-300", "swift-400", "tern-300", "plover-300"))

    def at(curves, i, t=150.0):
        return float(switching_energy_j(curves, i, t))

    # a MOSFET switches 13 mJ at 400 A and 800 V where the IGBT pays about 90
    igbt = (at(heron.switch.turn_on, 400.0) + at(heron.switch.turn_off, 400.0)) * (800 / 600) ** 1.35
    assert at(swift.switch.turn_on, 400.0) + at(swift.switch.turn_off, 400.0) < 0.25 * igbt
    # no recovery to carry: turn-on falls by more than half
    assert at(plover.switch.turn_on, 300.0) < 0.5 * at(heron.switch.turn_on, 300.0)
    # one chip is better cooled than either of two, recovers worse, and drops more backwards
    assert sum(tern.switch.thermal.r_k_per_w) < sum(heron.switch.thermal.r_k_per_w)
    assert at(tern.diode.recovery, 300.0) > at(heron.diode.recovery, 300.0)
    assert float(on_state_voltage_v(tern.diode.on_state, 300.0, 150.0)) > float(on_state_voltage_v(heron.diode.on_state, 300.0, 150.0))
    curlew, dunlin = load_module("curlew-300"), load_module("dunlin-300")
    # 650 V chips drop less than 1200 V ones, and turn on against their own kind more cheaply
    assert float(on_state_voltage_v(dunlin.inner_switch.on_state, 300.0, 150.0)) < float(on_state_voltage_v(dunlin.switch.on_state, 300.0, 150.0))
    assert at(curlew.switch.turn_on, 300.0) < at(dunlin.inner_switch.turn_on, 300.0) < at(dunlin.switch.turn_on, 300.0)
