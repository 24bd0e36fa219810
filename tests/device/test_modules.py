"""The shipped modules look like their class; files are found, written and read again; notes."""

import shutil
import tomllib
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

import mission.device
from mission.device import (
    load_module,
    module_from_dict,
    on_state_voltage_v,
    save_module,
    shipped_modules,
    switching_energy_j,
    to_toml,
)
from mission.errors import InputError

from .factories import straight_line_data, straight_line_module

SHIPPED = Path(mission.device.__file__).parent / "modules"
NAMES = ["heron-300", "kite-300"]


@pytest.mark.parametrize("name", NAMES)
def test_trends_an_expert_expects(name):
    """Common practice for 1200 V trench chips, no published source."""
    m = load_module(name)
    switch, diode = m.switch.on_state, m.diode.on_state
    cold, hot = switch.t_vj_c[0], switch.t_vj_c[-1]
    i = np.linspace(0.0, 600.0, 601)
    rise = on_state_voltage_v(switch, i, hot) - on_state_voltage_v(switch, i, cold)
    change = np.flatnonzero(np.diff(np.sign(rise)))
    assert rise[0] < 0.0 < rise[-1] and change.size == 1
    assert 0.2 < i[change[0]] / m.ratings.i_nominal_a < 0.6
    assert 0.6 < float(on_state_voltage_v(switch, 0.0, 25.0)) < 0.9  # an offset, not a resistor
    fall = on_state_voltage_v(diode, 30.0, cold) - on_state_voltage_v(diode, 30.0, hot)
    assert 1.5e-3 < fall / (hot - cold) < 3e-3  # volts per kelvin at low current
    for curves in (switch, diode):
        for c in curves.curve:
            assert len(c.current_a) >= 9 and (c.current_a[0], c.current_a[-1]) == (0.0, 600.0)
            slopes = np.diff(c.voltage_v) / np.diff(c.current_a)
            assert (np.diff(slopes) <= 1e-5).all()  # bends over only; 1e-5: the points are rounded to a millivolt
    for curves, bend in ((m.switch.turn_on, 1), (m.switch.turn_off, 0), (m.diode.recovery, -1)):
        at = {share: float(switching_energy_j(curves, share * 300.0, hot)) for share in (0.5, 1.0, 2.0)}
        growth = at[2.0] / at[1.0]
        assert {1: growth > 2.3, 0: 1.8 < growth < 2.1, -1: growth < 1.6}[bend]
        e = [float(switching_energy_j(curves, 300.0, t)) for t in curves.t_vj_c]
        assert len(e) == 3 and e[0] < e[1] < e[2]


def test_the_newer_class_is_better():
    old, new = load_module("heron-300"), load_module("kite-300")
    for i in (50.0, 300.0, 600.0):
        for t in (25.0, 150.0):
            assert on_state_voltage_v(new.switch.on_state, i, t) < on_state_voltage_v(old.switch.on_state, i, t)
            assert on_state_voltage_v(new.diode.on_state, i, t) < on_state_voltage_v(old.diode.on_state, i, t)
            for a, b in zip(new.energy_curves().values(), old.energy_curves().values()):
                assert switching_energy_j(a, i, t) < switching_energy_j(b, i, t)
    # to the same place: a pair of six heated together over the common paste
    paste = 6 * old.case_to_sink.r_th_k_per_w
    for a, b in ((new.switch, old.switch), (new.diode, old.diode)):
        assert sum(a.thermal.r_k_per_w) / (sum(b.thermal.r_k_per_w) + paste) == pytest.approx(0.75, abs=0.03)
    assert (sum(old.switch.thermal.r_k_per_w), sum(old.diode.thermal.r_k_per_w)) == pytest.approx((0.11, 0.18))


@pytest.mark.parametrize("name", NAMES)
def test_first_branch_is_the_silicon(name):
    """Heat enters silicon as into a half-space: Z = 2 sqrt(t/pi)/(area effusivity), Carslaw and Jaeger 1959, 2.9.

    The nominal current over a current density of 100 A/cm2 (common practice) gives the area.
    """
    m = load_module(name)
    area_m2 = m.ratings.i_nominal_a / 100.0 * 1e-4
    effusivity = np.sqrt(120.0 * 2330.0 * 710.0)  # silicon, warm
    t = 0.5e-3
    half_space = 2.0 * np.sqrt(t / np.pi) / (area_m2 * effusivity)
    th = m.switch.thermal
    z = sum(r * -np.expm1(-t / tau) for r, tau in zip(th.r_k_per_w, th.tau_s))
    assert 0.4 < z / half_space < 2.0


def test_shipped_names():
    assert {"heron-300", "kite-300"} < set(shipped_modules())
    heron, kite = load_module("heron-300"), load_module("kite-300")
    assert (heron.switch.thermal.reference, kite.switch.thermal.reference) == ("case", "sink")
    assert heron.case_to_sink.per == "module" and kite.case_to_sink is None
    assert (heron.ratings.t_vj_op_max_c, kite.ratings.t_vj_op_max_c) == (150.0, 175.0)
    assert [f.model for f in heron.failure_mode] == ["lesit-1997-refit", "coffin-manson"]
    assert [(f.acts_on, f.model) for f in kite.failure_mode] == [("junction", "sintered-2013")]


def test_wrong_name_offers_the_nearest():
    with pytest.raises(InputError, match="did you mean 'kite-300'"):
        load_module("kite300")
    with pytest.raises(InputError, match="heron-300, kite-300, .*or the path of a .toml file"):
        load_module("zzzzzz")


def test_own_modules_beside_a_study(tmp_path, monkeypatch):
    shutil.copy(SHIPPED / "kite-300.toml", tmp_path / "my-kite.toml")
    (tmp_path / "sub").mkdir()
    shutil.copy(SHIPPED / "kite-300.toml", tmp_path / "sub" / "other.toml")
    kite = load_module("kite-300")
    assert load_module("my-kite.toml", tmp_path) == load_module("my-kite", tmp_path) == kite
    assert load_module("sub/other.toml", tmp_path) == load_module(tmp_path / "my-kite.toml") == kite
    with pytest.raises(InputError, match="my-kite.toml"):
        load_module("my-kit.toml", tmp_path)  # no such file; the message offers the one that is there
    with pytest.raises(InputError, match="did you mean 'my-kite'"):
        load_module("my-kit", tmp_path)
    shutil.copy(SHIPPED / "heron-300.toml", tmp_path / "kite-300.toml")
    with pytest.raises(InputError, match="means one thing"):
        load_module("kite-300", tmp_path)
    assert load_module("kite-300.toml", tmp_path).name == "Heron 300"
    monkeypatch.chdir(tmp_path / "sub")
    assert load_module("other") == kite


@pytest.mark.parametrize(
    "module", [load_module("heron-300"), load_module("kite-300"), straight_line_module()], ids=[*NAMES, "straight line"]
)
def test_written_and_read_again(module, tmp_path):
    save_module(module, tmp_path / "again.toml")
    assert load_module("again.toml", tmp_path) == module
    assert [p.name for p in tmp_path.iterdir()] == ["again.toml"]


words = st.text(st.characters(exclude_categories=("Cs",)), min_size=1, max_size=12)
plain = st.one_of(
    st.booleans(),
    st.integers(-(10**12), 10**12),
    st.floats(allow_nan=False, allow_infinity=False),
    words,
    st.lists(st.floats(-1e9, 1e9), max_size=3),
)


@settings(max_examples=60, deadline=None)
@given(
    words,
    st.dictionaries(words, plain, max_size=3),
    st.floats(1e-300, 1e300),
    st.sampled_from(["module", "switch-and-diode"]),
)
def test_any_text_and_number_survives_writing(name, options, r_k_per_w, per):
    data = straight_line_data(
        failure_mode=[{"name": name, "acts_on": "case", "chips": "all", "model": name, "options": options}]
    )
    data |= {"name": name, "source": name[::-1]}
    data["case_to_sink"] = {"per": per} | (
        {"r_th_k_per_w": r_k_per_w}
        if per == "module"
        else {"r_th_switch_k_per_w": r_k_per_w, "r_th_diode_k_per_w": 0.1}
    )
    module = module_from_dict(data)
    again = module_from_dict(tomllib.loads(to_toml(module)))
    assert again == module
    assert [type(v) for v in again.failure_mode[0].options.values()] == [type(v) for v in options.values()]


def test_saving_where_nothing_can_be_saved(tmp_path):
    with pytest.raises(InputError, match="cannot be written"):
        save_module(straight_line_module(), tmp_path / "nowhere" / "x.toml")


def test_modules_are_frozen():
    m = straight_line_module()
    with pytest.raises(ValidationError):
        m.name = "other"
    with pytest.raises(ValidationError):
        m.switch.on_state.curve[0].current_a = (0.0, 1.0)


def test_notes_tell_what_is_extended():
    m = module_from_dict(straight_line_data(i_end_a=200.0))
    text = "\n".join(m.notes)
    assert "turn-on energy: data end at 200 A, below the peak rating of 300 A" in text
    assert "all curves: below 25 degC extended in a straight line over temperature (module rated from -40 degC)" in text
    assert "all curves: above 125 degC" in text
    assert "data end at 100 A, below the nominal current of 150 A" in "\n".join(
        straight_line_module(i_end_a=100.0).notes
    )
    data = straight_line_data()
    for c in data["switch"]["on_state"]["curve"]:
        c["current_a"][0], c["voltage_v"][0] = 20.0, 1.02
    data["diode"]["recovery"]["curve"].append({"t_vj_c": 150.0, "current_a": [0, 600], "energy_j": [0, 0.04]})
    text = "\n".join(module_from_dict(data).notes)
    assert "on-state voltage of the switch: below 20 A" in text
    assert "above 125 degC" in text and "recovery energy" not in text.split("above 125 degC")[0].splitlines()[-1]


def test_notes_tell_what_is_unusual():
    assert not [n for n in load_module("heron-300").notes if "unusual" in n or "no failure mode" in n]
    data = straight_line_data(v_t0_v=8.0, r_diode_k_per_w=(0.01, 0.02))
    for c in data["switch"]["turn_on"]["curve"][1:]:
        c["energy_j"] = [0.5 * e for e in c["energy_j"]]
    data["switch"]["turn_off"]["v_ref_v"] = 1100.0
    for c in data["diode"]["recovery"]["curve"]:
        c["energy_j"] = [0.0, 0.0]
    text = "\n".join(module_from_dict(data).notes)
    for fragment in (
        "at nominal current is unusual",
        "turn-on energy: falls with temperature",
        "1100 V is 92% of the blocking voltage",
        "recovery energy: zero",
        "much better cooled",
        "no failure mode",
    ):
        assert fragment in text


def test_on_grid_joins_the_currents_of_all_curves():
    data = straight_line_data()
    data["switch"]["on_state"]["curve"] = [
        {"t_vj_c": 25, "current_a": [0, 100, 400], "voltage_v": [0.8, 1.2, 2.0]},
        {"t_vj_c": 125, "current_a": [50, 300], "voltage_v": [0.9, 1.9]},
    ]
    curves = module_from_dict(data).switch.on_state
    t, i, v = curves.on_grid()
    assert t.tolist() == [25.0, 125.0] and i.tolist() == [0.0, 50.0, 100.0, 300.0, 400.0]
    # analytic: lines drawn by hand
    assert v == pytest.approx(np.array([[0.8, 1.0, 1.2, 1.2 + 0.8 * 2 / 3, 2.0], [0.7, 0.9, 1.1, 1.9, 2.3]]))
    assert curves.current_data_a == (50.0, 300.0)


def test_case_to_sink_per_chip():
    data = straight_line_data()
    data["case_to_sink"] = {"per": "switch-and-diode", "r_th_switch_k_per_w": 0.03, "r_th_diode_k_per_w": 0.05}
    m = module_from_dict(data)
    assert (m.case_to_sink.r_th_switch_k_per_w, m.case_to_sink.r_th_diode_k_per_w) == (0.03, 0.05)
    assert module_from_dict(straight_line_data(reference="sink")).case_to_sink is None


def test_wires_may_be_missing():
    data = straight_line_data()
    del data["wires"]
    assert module_from_dict(data).wires is None


def test_layers_instead_of_branches_survive_writing():
    data = straight_line_data()
    stack = [
        {"material": "silicon", "thickness_mm": 0.12, "width_mm": 12.0, "length_mm": 12.0},
        {"material": "copper", "thickness_mm": 3.0, "spread_deg": 45.0},
    ]
    for side in ("switch", "diode"):
        data[side]["thermal"] = {"reference": "case", "layer": stack}
    module = module_from_dict(data)
    assert module_from_dict(tomllib.loads(to_toml(module))) == module
    assert not [n for n in module.notes if "thermal" in n]  # nothing to judge without branches


@pytest.mark.parametrize("name", shipped_modules())
def test_every_shipped_module_goes_out_and_in_again(name, tmp_path):
    module = load_module(name)
    save_module(module, tmp_path / "copy.toml")
    assert load_module(tmp_path / "copy.toml") == module
    assert "invented" in module.source
