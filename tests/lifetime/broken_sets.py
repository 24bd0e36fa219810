"""Coefficient files with one mistake each, and wrong options; each with fragments its message must hold.

``BROKEN_SETS``: name, (old, new) in the text of a user's file, fragments.
``BROKEN_MODES``: name, model, options, fragments.
"""

OWN_SET = """\
format = 1
name = "works-2024"
kind = "swing-and-mean"
life_means = "B10"
source = "own tests, report 17"
page_or_clause = "table 2"
technology = "soldered"

[coefficients]
a = 3.0e5
exponent = -5.0
activation_j = 9.9e-20

[tested_range]
range_k = [40, 90]
mean_c = [50, 110]
"""

BROKEN_SETS = [
    ("no source", ('source = "own tests, report 17"\n', ""), ["source", "required"]),
    ("empty source", ('"own tests, report 17"', '""'), ["source", "at least 1"]),
    ("what the life means is missing", ('life_means = "B10"\n', ""), ["life_means", "required"]),
    ("unknown kind", ('"swing-and-mean"', '"swing-and-man"'), ["kind", "swing-and-man", "did you mean 'swing-and-mean'?"]),
    ("no kind", ('kind = "swing-and-mean"\n', ""), ["kind", "required"]),
    ("positive exponent", ("exponent = -5.0", "exponent = 5.0"), ["coefficients.exponent", "5.0", "below 0"]),
    ("number in quotes", ("a = 3.0e5", 'a = "3.0e5"'), ["coefficients.a", "3.0e5", "a number", "without quotes"]),
    ("not a number", ("a = 3.0e5", "a = nan"), ["coefficients.a", "nan"]),
    ("unknown coefficient", ("activation_j = 9.9e-20", "activation_ev = 0.6"), ["activation_ev", "unknown key", "activation_j"]),
    ("coefficient missing", ("exponent = -5.0\n", ""), ["coefficients.exponent", "required"]),
    ("range the wrong way round", ("[40, 90]", "[90, 40]"), ["tested_range", "[90, 40]", "lower value first"]),
    ("range with one end", ("[40, 90]", "[40]"), ["tested_range.range_k"]),
    ("range of an unknown quantity", ("mean_c = [50, 110]", "mean_k = [50, 110]"), ["tested_range", "mean_k", "did you mean 'mean_c'?"]),
    ("range of a choice of words", ("mean_c = [50, 110]", "temperature = [50, 110]"), ["tested_range", "temperature"]),
    ("range of another form's option", ("mean_c = [50, 110]", "aspect_ratio = [0.1, 0.2]"), ["tested_range", "aspect_ratio"]),
    ("no tested range", ("[tested_range]\nrange_k = [40, 90]\nmean_c = [50, 110]\n", ""), ["tested_range", "required"]),
    ("later format", ("format = 1", "format = 2"), ["format", "2"]),
    ("not TOML", ("[coefficients]", "[coefficients"), ["not TOML"]),
]

_B = {"current_per_foot_a": 10.0, "v_class": 12.0, "wire_diameter_um": 300.0}

BROKEN_MODES = [
    ("unknown model", "lesit-1997-refitt", {}, ["'lesit-1997-refitt'", "did you mean 'lesit-1997-refit'?"]),
    ("unlike any model", "zzz", {}, ["'zzz'", "sintered-2013", ".toml"]),
    ("no such file", "own/nowhere.toml", {}, ["nowhere.toml", "no such file"]),
    ("unknown option", "lesit-1997-refit", {"outside_rang": "use"}, ["outside_rang", "did you mean 'outside_range'?"]),
    ("option of another form", "lesit-1997-refit", {"aspect_ratio": 0.3}, ["aspect_ratio", "outside_range"]),
    ("current per foot missing", "bayerer-2008-trench4", {"v_class": 12, "wire_diameter_um": 300}, ["current_per_foot_a", "nothing", "needs it"]),
    ("voltage class missing", "bayerer-2008-trench4", {"current_per_foot_a": 10, "wire_diameter_um": 300}, ["v_class", "nothing"]),
    ("wire diameter missing", "bayerer-2008-standard", {"current_per_foot_a": 10, "v_class": 12}, ["wire_diameter_um", "nothing"]),
    ("negative wire", "bayerer-2008-trench4", {**_B, "wire_diameter_um": -300}, ["wire_diameter_um", "-300", "above 0"]),
    ("number in quotes", "bayerer-2008-trench4", {**_B, "v_class": "12"}, ["v_class", "'12'", "a number"]),
    ("infinite current", "bayerer-2008-trench4", {**_B, "current_per_foot_a": float("inf")}, ["current_per_foot_a", "inf"]),
    ("true for one", "bayerer-2008-trench4", {**_B, "diode_current_per_foot_a": True}, ["diode_current_per_foot_a", "True"]),
    ("unknown temperature", "bayerer-2008-trench4", {**_B, "temperature": "minimun"}, ["temperature", "'minimun'", "did you mean 'minimum'?"]),
    ("unknown heating rule", "bayerer-2008-trench4", {**_B, "heating_outside": 0.3}, ["heating_outside", "0.3", "clamp, extrapolate, power-0.3"]),
    ("unknown outside rule", "sintered-2013", {"aspect_ratio": 0.3, "outside_range": "clamp"}, ["outside_range", "'clamp'", "use, refuse"]),
    ("outside rule as a list", "sintered-2013", {"aspect_ratio": 0.3, "outside_range": ["use"]}, ["outside_range", "use, refuse"]),
    ("aspect ratio missing", "sintered-2013", {}, ["aspect_ratio", "nothing"]),
    ("no numbers of the user's", "coffin-manson", {}, ["option a", "nothing", "needs it"]),
    ("exponent missing", "coffin-manson", {"a": 1e9}, ["option n", "nothing"]),
    ("exponent with its sign", "coffin-manson", {"a": 1e9, "n": -3}, ["option n", "-3", "above 0"]),
    ("tested range with one end", "coffin-manson", {"a": 1e9, "n": 3, "tested_range_k": [40]}, ["tested_range_k", "two numbers"]),
    ("tested range reversed", "coffin-manson", {"a": 1e9, "n": 3, "tested_range_k": [80, 40]}, ["tested_range_k", "lower first"]),
    ("tested range without end", "coffin-manson", {"a": 1e9, "n": 3, "tested_range_k": [40, float("inf")]}, ["tested_range_k", "inf"]),
]
