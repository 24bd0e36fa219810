"""Module files with one mistake each, made from the shipped heron-300.toml.

Each entry: a name, what to do to the text (a pair old -> new, replaced once, or a function
of the text), and fragments that the message must hold.
"""

import re
from pathlib import Path

import mission.device

TEXT = (Path(mission.device.__file__).parent / "modules" / "heron-300.toml").read_text(encoding="utf-8")

CURRENTS = "current_a = [0, 10, 25, 50, 100, 150, 200, 300, 400, 500, 600]"
SWITCH_25 = "voltage_v = [0.70, 0.855, 0.962, 1.074, 1.233, 1.364, 1.482, 1.70, 1.906, 2.105, 2.30]"
TURN_ON_25 = "energy_j = [0, 0.00116, 0.00313, 0.00701, 0.0116, 0.0170, 0.0253, 0.0349, 0.0459]"


def broken_text(change, text=TEXT):
    """The text of the module file with the mistake in it."""
    if callable(change):
        new = change(text)
    else:
        old, by = change
        assert old in text, f"the shipped module no longer holds {old!r}"
        new = text.replace(old, by, 1)
    assert new != text
    return new


def _millijoules(text):
    return re.sub(
        r"energy_j = \[(.*)\]",
        lambda m: "energy_j = [" + ", ".join(str(1e3 * float(x)) for x in m[1].split(",")) + "]",
        text,
    )


def _one_temperature(text):
    """Only the first on-state curve of the switch stays."""
    first = text.index("[[switch.on_state.curve]]")
    second = text.index("[[switch.on_state.curve]]", first + 1)
    end = text.index("# Energies at 600 V")
    return text[:second] + text[end:]


BROKEN_MODULES = [
    (
        "unknown key with a near match",
        ("v_ces_v = 1200", "v_ces_v = 1200\nt_vj_op_max = 150"),
        ["ratings.t_vj_op_max", "unknown key", "t_vj_op_max_c"],
    ),
    ("unknown section", ("[gate]", "[gates]"), ["gates", "unknown key", "did you mean 'gate'?"]),
    ("missing key", ("v_ces_v = 1200\n", ""), ["ratings.v_ces_v", "required"]),
    (
        "number in quotes",
        ("i_nominal_a = 300", 'i_nominal_a = "300 A"'),
        ["ratings.i_nominal_a", "300 A", "a number", "without quotes"],
    ),
    ("not a number", ("i_nominal_a = 300", "i_nominal_a = nan"), ["ratings.i_nominal_a", "nan"]),
    (
        "infinite",
        ("i_peak_repetitive_a = 600", "i_peak_repetitive_a = inf"),
        ["ratings.i_peak_repetitive_a", "finite number"],
    ),
    ("negative rating", ("v_ces_v = 1200", "v_ces_v = -1200"), ["ratings.v_ces_v", "-1200", "above 0"]),
    (
        "peak below nominal",
        ("i_peak_repetitive_a = 600", "i_peak_repetitive_a = 200"),
        ["ratings", "200 A", "300 A", "at least the nominal current"],
    ),
    (
        "temperatures exchanged",
        ("t_vj_op_max_c = 150", "t_vj_op_max_c = -60"),
        ["ratings", "-60 degC", "above the lowest"],
    ),
    ("kelvin for celsius", ("t_vj_op_max_c = 150", "t_vj_op_max_c = 423"), ["ratings", "423 degC", "kelvin"]),
    ("curve in kelvin", ("t_vj_c = 25", "t_vj_c = 298"), ["switch.on_state.curve[1].t_vj_c", "298 degC", "kelvin"]),
    ("gate sign", ("v_off_v = -8", "v_off_v = 18"), ["gate", "18 V", "turn-on voltage above", "sign"]),
    ("gate charge in microcoulomb", ("charge_c = 1.8e-6", "charge_c = 1.8"), ["gate.charge_c", "1.8", "0.001"]),
    (
        "temperatures not rising",
        ("t_vj_c = 125", "t_vj_c = 25"),
        ["switch.on_state", "25 degC in curve 2", "rise from curve to curve"],
    ),
    ("one temperature only", _one_temperature, ["switch.on_state", "1 curve", "two or more junction temperatures"]),
    (
        "currents not rising",
        (CURRENTS, CURRENTS.replace("50, 100", "100, 50")),
        ["switch.on_state.curve[1].current_a", "50 A at point 5 after 100 A", "rise"],
    ),
    (
        "double current",
        (CURRENTS, CURRENTS.replace("50, 100", "100, 100")),
        ["switch.on_state.curve[1].current_a", "100 A at point 5"],
    ),
    (
        "negative current",
        (CURRENTS, CURRENTS.replace("[0,", "[-5,")),
        ["switch.on_state.curve[1].current_a", "-5 A at point 1"],
    ),
    (
        "voltage falls",
        (SWITCH_25, SWITCH_25.replace("1.233", "1.023")),
        ["switch.on_state.curve[1]", "1.074 to 1.023 V at point 5", "do not fall"],
    ),
    (
        "voltage zero",
        (SWITCH_25, SWITCH_25.replace("[0.70", "[0")),
        ["switch.on_state.curve[1]", "0 V at point 1", "above 0 V"],
    ),
    (
        "curves of unequal length",
        (SWITCH_25, SWITCH_25.replace(", 2.30", "")),
        ["switch.on_state.curve[1]", "10 values", "11 in current_a"],
    ),
    ("one point", (CURRENTS, "current_a = [100]"), ["switch.on_state.curve[1].current_a", "1 point", "at least 2"]),
    (
        "text in a curve",
        (SWITCH_25, SWITCH_25.replace("1.233", '"1,233"')),
        ["switch.on_state.curve[1].voltage_v[5]", "1,233", "a number"],
    ),
    (
        "negative energy",
        (TURN_ON_25, TURN_ON_25.replace("[0,", "[-0.001,")),
        ["switch.turn_on.curve[1]", "-0.001 J at point 1", "at least 0 J"],
    ),
    (
        "energy falls",
        (TURN_ON_25, TURN_ON_25.replace("0.0170", "0.0017")),
        ["switch.turn_on.curve[1]", "0.0116 to 0.0017 J at point 6"],
    ),
    ("energies in millijoules", _millijoules, ["45.9 J at 600 A", "switch.turn_on.curve[1]", "not millijoules"]),
    (
        "reference above blocking voltage",
        ("v_ref_v = 600", "v_ref_v = 6000"),
        ["switch.turn_on.v_ref_v = 6000 V", "1200 V", "below the blocking voltage"],
    ),
    (
        "negative resistance",
        ("r_k_per_w = [0.006,", "r_k_per_w = [-0.006,"),
        ["switch.thermal.r_k_per_w[1]", "-0.006", "above 0"],
    ),
    ("time constant zero", ("tau_s = [0.0008,", "tau_s = [0,"), ["switch.thermal.tau_s[1]", "value 0", "above 0"]),
    (
        "branches of unequal length",
        ("tau_s = [0.0008, 0.015,", "tau_s = [0.0008,"),
        ["switch.thermal", "3 values in tau_s", "4 in r_k_per_w"],
    ),
    (
        "time constants not rising",
        ("tau_s = [0.0008, 0.015,", "tau_s = [0.015, 0.0008,"),
        ["switch.thermal", "0.0008 s at branch 2", "rise"],
    ),
    (
        "unknown reference",
        ('reference = "case"', 'reference = "cases"'),
        ["switch.thermal.reference", "cases", "did you mean 'case'?"],
    ),
    (
        "two references",
        ('reference = "case"', 'reference = "sink"'),
        ["switch.thermal.reference = 'sink'", "diode.thermal.reference = 'case'", "the same reference"],
    ),
    (
        "no case to sink",
        lambda t: re.sub(r"\[case_to_sink\].*?\n\n", "", t, flags=re.DOTALL),
        ["no section case_to_sink", "end at the case"],
    ),
    (
        "case to sink twice",
        lambda t: t.replace('reference = "case"', 'reference = "sink"'),
        ["a section case_to_sink", "end at the sink", "remove the section"],
    ),
    ("case to sink per what", ('per = "module"', 'per = "modul"'), ["case_to_sink", "modul", "did you mean 'module'?"]),
    (
        "chips of a failure mode",
        ('chips = "all"', 'chips = "switch"'),
        ["failure_mode[1].chips", "switch", "did you mean 'switches'?"],
    ),
    (
        "two failure modes of one name",
        ('name = "baseplate joint"', 'name = "bond wires and chip joint"'),
        ["2 failure modes", "a name of its own"],
    ),
    ("option not finite", ("n = 3.0", "n = inf"), ["failure_mode[2].options", "inf for option 'n'", "finite"]),
    ("not TOML", ('kind = "igbt"', "kind = igbt"), ["not TOML", "line"]),
    ("another format", ("format = 1", "format = 2"), ["format", "value 2", "one of 1"]),
    ("kind not known", ('kind = "igbt"', 'kind = "igbt3"'), ["kind", "igbt3", "did you mean 'igbt'?"]),
]
