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
    ("key unknown", fixed(fan=True), ["'fan'", "unknown key", "r_th_k_per_w"]),
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
