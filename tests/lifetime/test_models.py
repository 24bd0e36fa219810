"""Coefficient files, options, tested ranges and units of the lifetime models."""

import tomllib
import warnings
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import mission.lifetime
from mission.errors import InputError, RangeError
from mission.lifetime import load_model, load_set, shipped_sets

from .broken_sets import BROKEN_MODES, BROKEN_SETS, OWN_SET
from .factories import BAYERER, life

OPTIONS = {"bayerer-2008-standard": BAYERER, "bayerer-2008-trench4": BAYERER, "sintered-2013": {"aspect_ratio": 0.31},
           "coffin-manson": {"a": 5.12e9, "n": 3.0, "tested_range_k": [40, 80]}}


def model_of(name, **more):
    return load_model(name, {**OPTIONS.get(name, {}), **more})


def test_every_set_that_must_be_there_is():
    assert set(shipped_sets()) == {"lesit-1997-refit", "lesit-1997-print", "bayerer-2008-standard", "bayerer-2008-trench4", "sintered-2013", "coffin-manson"}


@pytest.mark.parametrize("name", shipped_sets())
def test_shipped_set_says_what_it_rests_on(name):
    raw = tomllib.loads((Path(mission.lifetime.__file__).parent / "coefficients" / f"{name}.toml").read_text(encoding="utf-8"))
    model = model_of(name)
    assert raw["name"] == name == model.name
    assert "from memory" in raw["source"] and raw["life_means"] and raw["page_or_clause"] and raw["technology"]
    assert model.tested_range, "a range, be it the user's"


# --- broken files and options ------------------------------------------------------------

@pytest.mark.parametrize(("change", "fragments"), [b[1:] for b in BROKEN_SETS], ids=[b[0] for b in BROKEN_SETS])
def test_broken_set(change, fragments, tmp_path):
    old, new = change
    assert old in OWN_SET
    (tmp_path / "own.toml").write_text(OWN_SET.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(InputError) as caught:
        load_model("own.toml", folder=tmp_path)
    text = str(caught.value)
    assert str(tmp_path / "own.toml") in text and "allowed:" in text and "content" not in text
    assert not [f for f in fragments if f not in text], text


@pytest.mark.parametrize(("raw", "fragment"), [(b"", "empty file"), (b"\xff\xfe\x00", "not UTF-8"), (b"format = 1\n", "kind")])
def test_files_that_are_no_set(raw, fragment, tmp_path):
    (tmp_path / "own.toml").write_bytes(raw)
    with pytest.raises(InputError, match=fragment):
        load_model("own.toml", folder=tmp_path)


@pytest.mark.parametrize(("model", "options", "fragments"), [b[1:] for b in BROKEN_MODES], ids=[b[0] for b in BROKEN_MODES])
def test_broken_mode(model, options, fragments, tmp_path):
    with pytest.raises(InputError) as caught:
        load_model(model, options, folder=tmp_path, where="day.toml, lifetime.failure_mode[1]")
    text = str(caught.value)
    assert ("day.toml, lifetime.failure_mode[1]" in text or ".toml: found" in text) and "allowed:" in text
    assert not [f for f in fragments if f not in text], text


# --- a user's own set ---------------------------------------------------------------------

def test_own_set_counts_from_the_folder(tmp_path):
    (tmp_path / "sets").mkdir()
    (tmp_path / "sets" / "own.toml").write_text(OWN_SET, encoding="utf-8")
    model = load_model("sets/own.toml", folder=tmp_path)
    assert model.name == "works-2024" and model.life_means == "B10" and model.tested_range == {"range_k": (40.0, 90.0), "mean_c": (50.0, 110.0)}
    assert load_model(str(tmp_path / "sets" / "own.toml"), folder="elsewhere").name == "works-2024"
    # analytic: a dT^-5 exp(E/kT)
    n_f, outside = life(model, 50.0, 80.0)
    assert n_f == pytest.approx(3.0e5 * 50.0**-5 * np.exp(9.9e-20 / (1.380649e-23 * 353.15)), rel=1e-12)
    assert not outside and not model.alternatives()  # the shipped sets are no alternative to an own one


def test_own_power_law_may_hold_its_numbers(tmp_path):
    text = OWN_SET.replace("swing-and-mean", "power-law").replace("a = 3.0e5\nexponent = -5.0\nactivation_j = 9.9e-20", "a = 1e9\nn = 2.0")
    (tmp_path / "own.toml").write_text(text, encoding="utf-8")
    assert life(load_model("own.toml", folder=tmp_path), 50.0, 80.0)[0] == pytest.approx(1e9 / 2500.0)  # analytic
    assert life(load_model("own.toml", {"n": 3.0}, folder=tmp_path), 50.0, 80.0)[0] == pytest.approx(1e9 / 125000.0)
    with pytest.raises(InputError, match="option n"):
        load_model("own.toml", {"n": "3"}, folder=tmp_path)


# --- tested ranges ------------------------------------------------------------------------

INSIDE = {"range_k": 70.0, "mean_c": 85.0, "min_c": 50.0, "max_c": 120.0, "heating_s": 2.0}


def _borders():
    # published ranges (from memory of the sources in the coefficient files), typed a second time
    ranges = {
        "lesit-1997-refit": {"range_k": (30, 80), "mean_c": (60, 100), "heating_s": (0.6, 4.8)},
        "lesit-1997-print": {"range_k": (30, 80), "mean_c": (60, 100), "heating_s": (0.6, 4.8)},
        "bayerer-2008-standard": {"range_k": (45, 150), "min_c": (20, 120), "heating_s": (1, 15)},
        "bayerer-2008-trench4": {"range_k": (45, 150), "min_c": (20, 120), "heating_s": (1, 15)},
        "sintered-2013": {"range_k": (64, 113), "mean_c": (32.5, 122), "heating_s": (0.07, 63)},
        "coffin-manson": {"range_k": (40, 80)},
    }
    return [(name, q, low, high) for name, part in ranges.items() for q, (low, high) in part.items()]


@pytest.mark.parametrize(("name", "quantity", "low", "high"), _borders())
def test_ends_belong_to_the_range(name, quantity, low, high):
    model = model_of(name)
    values = np.array([low, np.nextafter(low, -np.inf), high, np.nextafter(high, np.inf)], float)
    _, outside = model.cycles_to_failure(**{**INSIDE, quantity: values})
    assert outside.tolist() == [False, True, False, True]
    apart = model.outside_by(**{**INSIDE, quantity: values})
    assert apart[quantity].tolist() == outside.tolist()
    assert not any(mask.any() for other, mask in apart.items() if other != quantity)


# R. Bayerer et al., CIPS 2008, and U. Scheuermann, R. Schmidt, PCIM 2013: ranges from memory
@pytest.mark.parametrize(("name", "option", "low", "high"), [
    ("bayerer-2008-trench4", "current_per_foot_a", 3.0, 23.0), ("bayerer-2008-trench4", "v_class", 6.0, 33.0),
    ("bayerer-2008-trench4", "wire_diameter_um", 75.0, 500.0), ("sintered-2013", "aspect_ratio", 0.19, 0.42)])
def test_fixed_options_have_ranges_too(name, option, low, high):
    for value, want in ((low, False), (low * 0.999, True), (high, False), (high * 1.001, True)):
        model = model_of(name, **{option: value})
        assert bool(model.cycles_to_failure(**INSIDE)[1]) == want
        assert any(option in note for note in model.notes) == want


def test_diode_may_have_another_current_per_foot():
    model = model_of("bayerer-2008-trench4", diode_current_per_foot_a=40.0)
    n_f, outside = model.cycles_to_failure(**INSIDE, diode=[False, True])
    assert n_f[0] / n_f[1] == pytest.approx(4.0**0.716, rel=1e-12)  # analytic: exponent -0.716 of the current
    assert outside.tolist() == [False, True] and "diode_current_per_foot_a = 40 outside 3 to 23" in model.notes


@pytest.mark.parametrize("name", shipped_sets())
def test_refuse_names_the_first_cycle_outside(name):
    model = model_of(name, outside_range="refuse")
    assert np.isfinite(model.cycles_to_failure(**INSIDE)[0])
    with pytest.raises(RangeError, match=f"{name}.*range_k 12.*only cycles inside range_k"):
        model.cycles_to_failure(**{**INSIDE, "range_k": np.array([70.0, 12.0])})


# --- what comes in, what goes out -----------------------------------------------------------

@pytest.mark.parametrize("name", shipped_sets())
def test_zero_swing_lives_for_ever_and_says_nothing(name):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        n_f, _ = model_of(name).cycles_to_failure(np.array([0.0, 0.05, 70.0]), 85.0, 50.0, 120.0, np.array([0.0, 0.0, 2.0]))
        empty, _ = model_of(name).cycles_to_failure(*[np.zeros(0)] * 5)
    assert np.isposinf(n_f[0]) and np.isfinite(n_f[1:]).all() and empty.size == 0


@pytest.mark.parametrize("name", shipped_sets())
def test_nan_stays_where_it_is(name):
    n_f, _ = model_of(name).cycles_to_failure(np.array([70.0, np.nan, 70.0]), 85.0, 50.0, 120.0, 2.0)
    assert np.isnan(n_f).tolist() == [False, True, False]


@pytest.mark.parametrize(("quantity", "value"), [("range_k", -1.0), ("heating_s", -0.1), ("mean_c", -273.15), ("min_c", -300.0)])
def test_impossible_cycles_are_refused(quantity, value):
    with pytest.raises(RangeError, match=rf"{quantity}\[1\]"):
        model_of("lesit-1997-refit").cycles_to_failure(**{**INSIDE, quantity: np.array([INSIDE[quantity], value])})


@given(st.floats(1.0, 140.0), st.floats(1.0001, 2.0), st.floats(20.0, 120.0), st.floats(0.01, 200.0))
def test_a_larger_swing_never_lives_longer(swing, factor, low, heat):
    for name in shipped_sets():
        n_f, _ = life(model_of(name), [swing, swing * factor], low, heat)
        assert n_f[1] < n_f[0], name


@given(st.floats(5.0, 150.0), st.floats(0.0, 100.0), st.floats(1.0, 40.0), st.floats(0.1, 60.0))
def test_a_hotter_joint_never_lives_longer(swing, mean, hotter, heat):
    for name in shipped_sets():
        n_f, _ = life(model_of(name), swing, [mean, mean + hotter], heat)
        assert (n_f[1] < n_f[0]) or name == "coffin-manson" and n_f[1] == n_f[0]


def test_units():
    lesit, bayerer = model_of("lesit-1997-refit"), model_of("bayerer-2008-trench4", heating_outside="extrapolate")
    # analytic: the temperature enters in kelvin; a mean of 0 degC is 273.15 K, not a division by zero
    n_f, _ = life(lesit, 50.0, [0.0, 80.0])
    assert np.log(n_f[0] / n_f[1]) == pytest.approx(9.891e-20 / 1.380649e-23 * (1 / 273.15 - 1 / 353.15), rel=1e-12)
    # analytic: time in seconds, current in amperes, voltage in hundreds of volts, wire in micrometres
    base = bayerer.cycles_to_failure(**INSIDE)[0]
    assert bayerer.cycles_to_failure(**{**INSIDE, "heating_s": 20.0})[0] / base == pytest.approx(10.0**-0.463, rel=1e-12)
    for option, exponent in (("current_per_foot_a", -0.716), ("v_class", -0.761), ("wire_diameter_um", -0.5)):
        double = model_of("bayerer-2008-trench4", **{option: 2.0 * BAYERER[option]})
        assert double.cycles_to_failure(**INSIDE)[0] / base == pytest.approx(2.0**exponent, rel=1e-12)


def test_heating_rules_meet_where_they_must():
    # often quoted, from memory: N(t)/N(1.5 s) = (t/1.5)^-0.3; all three rules agree at 1.5 s
    at = {rule: model_of("bayerer-2008-trench4", heating_outside=rule) for rule in ("clamp", "extrapolate", "power-0.3")}
    t = np.array([0.01, 0.1, 1.0, 1.5, 15.0, 60.0, 500.0])
    n_f = {rule: m.cycles_to_failure(**{**INSIDE, "heating_s": t})[0] for rule, m in at.items()}
    np.testing.assert_allclose([v[3] for v in n_f.values()], n_f["clamp"][3], rtol=1e-12)
    assert n_f["clamp"][0] == n_f["clamp"][2] and n_f["clamp"][6] == n_f["clamp"][4]
    np.testing.assert_allclose(n_f["clamp"][2:5], n_f["extrapolate"][2:5], rtol=1e-12)
    assert n_f["extrapolate"][0] > n_f["power-0.3"][0] == n_f["power-0.3"][1] > n_f["clamp"][0]
    assert n_f["power-0.3"][5] == n_f["power-0.3"][6]


def test_maximum_temperature_shortens_the_life_as_the_literature_says():
    # the effect of that choice lies between 1.5 and 2.6 at the four points of Bayerer et al. 2008 (recomputed)
    low, high = (model_of("bayerer-2008-trench4", temperature=w) for w in ("minimum", "maximum"))
    assert any("minimum" in note for note in low.notes) and any("maximum" in note for note in high.notes)
    for swing, start in ((100, 50), (80, 70), (60, 40), (40, 60)):
        call = (swing, start + swing / 2, start, start + swing, 1.5)
        assert 1.5 < low.cycles_to_failure(*call)[0] / high.cycles_to_failure(*call)[0] < 2.6


def test_alternatives_differ_in_one_choice_only():
    model = model_of("bayerer-2008-trench4", outside_range="refuse")
    other = model.alternatives()
    assert set(other) == {"temperature = maximum", "heating_outside = extrapolate", "heating_outside = power-0.3", "set = bayerer-2008-standard"}
    for choice, one in other.items():
        assert one.outside_range == "use"
        changed = {k for k in BAYERER.keys() | {"temperature", "heating_outside"} if one.options[k] != model.options[k]}
        assert changed == ({choice.split(" = ")[0]} if not choice.startswith("set") else set())
    assert other["set = bayerer-2008-standard"].name == "bayerer-2008-standard"


def test_loading_a_shipped_set_twice_is_the_same():
    assert load_set("sintered-2013") == load_set("sintered-2013")
