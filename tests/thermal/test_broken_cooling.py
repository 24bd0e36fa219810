"""Every broken cooling section ends in one InputError that names field, value and what is allowed."""

import numpy as np
import pytest

from mission.errors import InputError
from mission.thermal import CoolingSpec, FixedCooling, FosterCooling
from mission.tomlfile import FileModel, parse_model


class Wrapper(FileModel):
    cooling: CoolingSpec


FIXED = {"kind": "fixed", "r_th_k_per_w": 0.02, "heat_capacity_j_per_k": 3000.0, "coolant_c": 65.0}
FOSTER = {"kind": "foster", "r_k_per_w": [0.01, 0.02], "tau_s": [1.0, 20.0]}


def fixed(**changes):
    return {**FIXED, **changes}


def foster(**changes):
    return {**FOSTER, **changes}


def without(data, key):
    return {k: v for k, v in data.items() if k != key}


BROKEN = [
    ("negative resistance", fixed(r_th_k_per_w=-0.02), ["r_th_k_per_w", "-0.02", "above 0"]),
    ("no resistance", fixed(r_th_k_per_w=0), ["r_th_k_per_w", "value 0", "above 0"]),
    ("negative capacity", fixed(heat_capacity_j_per_k=-3.0), ["heat_capacity_j_per_k", "-3.0", "above 0"]),
    ("negative time constant", foster(tau_s=[1.0, -20.0]), ["tau_s[2]", "-20.0", "above 0"]),
    ("NaN", fixed(r_th_k_per_w=np.nan), ["r_th_k_per_w", "nan", "a finite number"]),
    ("NaN in a list", foster(r_k_per_w=[np.nan, 0.1]), ["r_k_per_w[1]", "nan", "a finite number"]),
    ("infinite", fixed(heat_capacity_j_per_k=np.inf), ["heat_capacity_j_per_k", "inf", "a finite number"]),
    ("kind misspelt", fixed(kind="fixd"), ["cooling", "'fixd'", "fixed, foster", "did you mean 'fixed'?"]),
    ("kind in capitals", foster(kind="Foster"), ["cooling", "'Foster'", "did you mean 'foster'?"]),
    ("kind unknown", fixed(kind="water"), ["cooling", "'water'", "fixed, foster"]),
    ("kind missing", without(FIXED, "kind"), ["cooling", "kind", "required"]),
    ("key misspelt", {**without(FIXED, "r_th_k_per_w"), "r_th_k_per_W": 0.02}, ["r_th_k_per_W", "did you mean 'r_th_k_per_w'?", "unknown key"]),
    ("key unknown", fixed(watter=True), ["'watter'", "unknown key", "r_th_k_per_w"]),
    ("key of another kind", fixed(fan={}), ["'fan'", "plate-fin-fan", "r_th_k_per_w"]),
    ("one stage", fixed(stage=[{"r_th_k_per_w": 0.02}]), ["stage", "one stage", "two or more"]),
    ("stage without setting", fixed(stage=[{"up_above_c": 50.0}, {"r_th_k_per_w": 0.02, "down_below_c": 40.0}]), ["stage[1]", "no setting", "one of speed_ratio"]),
    ("stage with two settings", fixed(stage=[{"up_above_c": 50.0, "r_th_k_per_w": 0.03, "flow_l_per_min": 3.0}, {"r_th_k_per_w": 0.02, "down_below_c": 40.0}]),
     ["stage[1]", "flow_l_per_min and r_th_k_per_w"]),
    ("first stage goes down", fixed(stage=[{"up_above_c": 50.0, "down_below_c": 30.0, "r_th_k_per_w": 0.03}, {"r_th_k_per_w": 0.02, "down_below_c": 40.0}]),
     ["stage[1].down_below_c", "every stage but the first"]),
    ("last stage goes up", fixed(stage=[{"up_above_c": 50.0, "r_th_k_per_w": 0.03}, {"r_th_k_per_w": 0.02, "down_below_c": 40.0, "up_above_c": 60.0}]),
     ["stage[2].up_above_c", "every stage but the last"]),
    ("no way up", fixed(stage=[{"r_th_k_per_w": 0.03}, {"r_th_k_per_w": 0.02, "down_below_c": 40.0}]), ["stage[1].up_above_c", "nothing"]),
    ("stages without a gap", fixed(stage=[{"up_above_c": 50.0, "r_th_k_per_w": 0.03}, {"r_th_k_per_w": 0.02, "down_below_c": 50.0}]), ["stage[2].down_below_c", "0.2 K less"]),
    ("stages and a law", fixed(stage=[{"up_above_c": 50.0, "r_th_k_per_w": 0.03}, {"r_th_k_per_w": 0.02, "down_below_c": 40.0}],
                               law={"watch": "surface", "at_c": [40.0, 60.0], "speed_ratio": [0.5, 1.0]}), ["law", "stages or a law"]),
    ("law with a short list", fixed(law={"watch": "surface", "at_c": [40.0, 60.0], "speed_ratio": [0.5, 0.7, 1.0]}), ["law.speed_ratio", "3 values beside 2"]),
    ("law unsorted", fixed(law={"watch": "surface", "at_c": [60.0, 40.0], "speed_ratio": [0.5, 1.0]}), ["law.at_c", "rise from point to point"]),
    ("law that falls", fixed(law={"watch": "surface", "at_c": [40.0, 60.0], "speed_ratio": [1.0, 0.5]}), ["law.speed_ratio", "does not fall with temperature"]),
    ("hysteresis over the coolant", fixed(law={"watch": "coolant", "at_c": [40.0, 60.0], "speed_ratio": [0.5, 1.0], "hysteresis_k": 2.0}), ["law.hysteresis_k", "watch = 'coolant'"]),
    ("thresholds that fall", fixed(stage=[{"up_above_c": 70.0, "r_th_k_per_w": 0.05}, {"r_th_k_per_w": 0.03, "down_below_c": 30.0, "up_above_c": 60.0}, {"r_th_k_per_w": 0.02, "down_below_c": 40.0}]),
     ["stage[2].up_above_c", "rise from stage to stage"]),
    ("law in percent", fixed(law={"watch": "surface", "at_c": [40.0, 60.0], "speed_ratio": [50.0, 100.0]}), ["law.speed_ratio", "50.0", "at most 2"]),
    ("fault that ends before it begins", fixed(fault=[{"at_s": 60.0, "until_s": 30.0}], stopped={"r_th_k_per_w": 1.0}), ["fault[1].until_s", "after the beginning"]),
    ("faults that overlap", fixed(fault=[{"at_s": 60.0}, {"at_s": 90.0}], stopped={"r_th_k_per_w": 1.0}), ["fault", "one after the other"]),
    ("fault that leaves nothing", fixed(fault=[{"at_s": 60.0}]), ["stopped", "no section stopped"]),
    ("stopped twice", fixed(fault=[{"at_s": 60.0}], stopped={"r_th_k_per_w": 1.0, "emissivity": 0.8}), ["stopped", "both r_th_k_per_w and emissivity"]),
    ("grease that shrinks", fixed(grease={"growth": -0.1, "per_h": 1000.0}), ["grease.growth", "-0.1", "at least 0"]),
    ("chip losses with stages", fixed(sink_sees="chip-losses", stage=[{"up_above_c": 50.0, "r_th_k_per_w": 0.03}, {"r_th_k_per_w": 0.02, "down_below_c": 40.0}]),
     ["sink_sees", "'chip-losses'", "'heat-leaving'"]),
    ("key missing", without(FIXED, "r_th_k_per_w"), ["r_th_k_per_w", "required", "add it"]),
    ("list missing", without(FOSTER, "tau_s"), ["tau_s", "required", "add it"]),
    ("lengths differ", foster(tau_s=[1.0]), ["tau_s", "1 values beside 2 resistances", "one time constant for every resistance"]),
    ("empty list", foster(r_k_per_w=[], tau_s=[]), ["r_k_per_w", "[]", "at least 1"]),
    ("too many branches", foster(r_k_per_w=[0.01] * 9, tau_s=[1.0 * k for k in range(1, 10)]), ["r_k_per_w", "at most 8"]),
    ("number for a list", foster(r_k_per_w=0.03), ["r_k_per_w", "0.03", "a list"]),
    ("list for a number", fixed(r_th_k_per_w=[0.02]), ["r_th_k_per_w", "[0.02]", "a number"]),
    ("coolant in kelvin", fixed(coolant_c=338.15), ["coolant_c", "338.15", "150"]),
    ("coolant too cold", fixed(coolant_c=-200.0), ["coolant_c", "-200.0", "-60"]),
    ("text in a number", fixed(r_th_k_per_w="small"), ["r_th_k_per_w", "'small'", "a number", "without quotes"]),
    ("number with its unit", fixed(coolant_c="65 degC"), ["coolant_c", "'65 degC'", "a number", "without quotes"]),
    ("number in quotes", fixed(r_th_k_per_w="0.02"), ["r_th_k_per_w", "'0.02'", "a number", "without quotes"]),
    ("number in quotes in a list", foster(tau_s=["1", 20.0]), ["tau_s[1]", "'1'", "a number", "without quotes"]),
    ("true for a number", fixed(r_th_k_per_w=True), ["r_th_k_per_w", "True", "a number"]),
    ("not a section", "fixed", ["cooling", "'fixed'", "section"]),
]


@pytest.mark.parametrize(("cooling", "fragments"), [b[1:] for b in BROKEN], ids=[b[0] for b in BROKEN])
def test_message_names_field_value_and_what_is_allowed(cooling, fragments):
    with pytest.raises(InputError) as caught:
        parse_model({"cooling": cooling}, Wrapper, "study.toml")
    text = str(caught.value)
    assert text.startswith("study.toml, field cooling") and "allowed:" in text
    missing = [f for f in fragments if f not in text]
    assert not missing, f"{missing} not in: {text}"


def test_field_is_named_as_it_stands_in_the_file():
    """The file says [cooling] r_th_k_per_w; there is no section cooling.fixed."""
    with pytest.raises(InputError) as caught:
        parse_model({"cooling": fixed(r_th_k_per_w=-1.0)}, Wrapper, "study.toml")
    assert caught.value.where == "study.toml, field cooling.r_th_k_per_w"


def test_wrong_kind_names_the_key_kind():
    with pytest.raises(InputError) as caught:
        parse_model({"cooling": fixed(kind="water")}, Wrapper, "study.toml")
    assert caught.value.where == "study.toml, field cooling.kind"


@pytest.mark.parametrize(("cooling", "key"), [(fixed(tau_s=[1.0]), "tau_s"), (foster(heat_capacity_j_per_k=300.0), "heat_capacity_j_per_k")])
def test_a_key_of_the_other_kind_is_not_offered_again(cooling, key):
    """'unknown key tau_s; did you mean tau_s?' helps nobody: say that it belongs to the other kind."""
    with pytest.raises(InputError) as caught:
        parse_model({"cooling": cooling}, Wrapper, "study.toml")
    assert f"did you mean '{key}'?" not in str(caught.value) and key not in caught.value.allowed


def test_good_ones_pass():
    one = parse_model({"cooling": FIXED}, Wrapper, "study.toml").cooling
    two = parse_model({"cooling": FOSTER}, Wrapper, "study.toml").cooling
    three = parse_model({"cooling": {"kind": "fixed", "r_th_k_per_w": 1}}, Wrapper, "study.toml").cooling
    assert isinstance(one, FixedCooling) and one.coolant_c == 65.0 and isinstance(two, FosterCooling) and two.coolant_c is None
    assert three.r_th_k_per_w == 1.0 and three.heat_capacity_j_per_k is None
