"""Studies with one mistake each, whose duty file is right or wrong only together with the study.

Each entry holds the study as a dict, or its text or bytes, further files to write, and
fragments that the message must hold: place, value, what is allowed, what to do. Used by the
tests of this stage and of the command line.
"""

from dataclasses import dataclass, field

from .good_study import CSV, DIRECT_CSV, STUDY, direct_duty, direct_study, duty, module_text, study, toml_text


@dataclass(frozen=True)
class BrokenStudy:
    """One mistake; ``study`` is a dict, text or bytes, or a callable that gets the path."""

    name: str
    fragments: tuple
    study: object
    files: dict = field(default_factory=lambda: {"duty.csv": CSV})

    def content(self):
        """What to write as study.toml."""
        return toml_text(self.study) if isinstance(self.study, dict) else self.study


def part(section, **keys):
    """The good study with keys of a section set; None takes one out."""
    table = {k: v for k, v in {**STUDY[section], **keys}.items() if v is not None}
    return study(**{section: table})


def mode(**keys):
    """The good study with a failure mode of its own."""
    one = {"name": "wires", "acts_on": "junction", "model": "lesit-1997-refit", **keys}
    return part("lifetime", failure_mode=[{k: v for k, v in one.items() if v is not None}])


def columns(csv=CSV, base=duty, **keys):
    """Study with columns set or taken out."""
    table = base()
    table["columns"] = {k: v for k, v in {**table["columns"], **keys}.items() if v is not None}
    return table


def with_module(old, new):
    """Files with a module of the user's that has a mistake."""
    text = module_text()
    assert old in text
    return {"duty.csv": CSV, "mine.toml": text.replace(old, new, 1)}


OWN_MODULE = study(module={"file": "mine.toml"})
DIRECT = {"duty.csv": DIRECT_CSV}
SPEED = {"column": "n", "unit": "rpm"}

BROKEN_STUDIES = [
    # the file
    BrokenStudy("empty study", ("study.toml", "an empty file", "a TOML file", "start from a demo file"), b""),
    BrokenStudy("blank study", ("study.toml", "an empty file", "a TOML file"), " \n\n"),
    BrokenStudy("only a remark", ("study.toml, field format", "nothing", "required", "more problems in this file"), "# to be written\n"),
    BrokenStudy("study is a folder", ("study.toml", "a folder", "a TOML file", "name the file in it"), lambda path: path.mkdir()),
    BrokenStudy("not UTF-8", ("study.toml, line 2", "byte 0xfc, which is not UTF-8", "UTF-8 text", "save the file as UTF-8"), 'format = 1\nname = "Fähre"\n'.replace("ä", "ü").encode("cp1252")),
    BrokenStudy("not TOML", ("study.toml", "not TOML", "line 5", "strings need quotes"), "format = 1\nname = \"x\"\n\n[duty]\nfile = duty.csv\n"),
    BrokenStudy("a section twice", ("study.toml", "not TOML", "twice"), toml_text(STUDY) + "\n[cooling]\nkind = \"fixed\"\n"),
    BrokenStudy("a decimal comma", ("study.toml", "not TOML", "decimals a point"), toml_text(STUDY).replace("0.02", "0,02")),
    BrokenStudy("brackets without end", ("study.toml", "nested beyond measure", "valid TOML"), "format = " + "[" * 5000),
    BrokenStudy("a number without end", ("study.toml", "not TOML", "digits"), "format = " + "1" * 5000),
    # keys and types
    BrokenStudy("format of tomorrow", ("study.toml, field format", "value 2", "one of 1"), study(format=2)),
    BrokenStudy("no format", ("study.toml, field format", "nothing", "required"), study(format=None)),
    BrokenStudy("unknown section", ("field coolnig", "unknown key 'coolnig'", "did you mean 'cooling'?"), {**study(cooling=None), "coolnig": STUDY["cooling"]}),
    BrokenStudy("section missing", ("field inverter", "nothing", "required"), study(inverter=None)),
    BrokenStudy("unknown key", ("field inverter.switching_frequency_khz", "unknown key", "one of dc_voltage_v", "did you mean 'switching_frequency_hz'?"),
                part("inverter", switching_frequency_khz=5, switching_frequency_hz=None)),
    BrokenStudy("unknown key deep down", ("field duty.columns.current.units", "unknown key 'units'", "column, unit", "did you mean 'unit'?"),
                study(duty=columns(current={"column": "I", "units": "A rms"}))),
    BrokenStudy("key missing", ("field inverter.switching_frequency_hz", "nothing", "required", "add it"), part("inverter", switching_frequency_hz=None)),
    BrokenStudy("number in quotes", ("field inverter.dc_voltage_v", "'600'", "a number", "without quotes"), part("inverter", dc_voltage_v="600")),
    BrokenStudy("number with its unit", ("field cooling.r_th_k_per_w", "'0.02 K/W'", "a number", "the unit is in the key's name"), part("cooling", r_th_k_per_w="0.02 K/W")),
    BrokenStudy("true for a number", ("field lifetime.missions_per_year", "True", "a number"), part("lifetime", missions_per_year=True)),
    BrokenStudy("list for a number", ("field inverter.dc_voltage_v", "[600]", "a number"), part("inverter", dc_voltage_v=[600])),
    BrokenStudy("number for a text", ("field name", "value 7", "a text in quotes"), study(name=7)),
    BrokenStudy("value for a section", ("field machine", "'synchronous'", "a section with keys"), "machine = \"synchronous\"\n" + toml_text(study(machine=None))),
    BrokenStudy("not a number", ("field inverter.dc_voltage_v", "nan", "a finite number"), part("inverter", dc_voltage_v=float("nan"))),
    BrokenStudy("half a pole pair", ("field machine.pole_pairs", "2.5", "a whole number", "without a decimal point"), part("machine", pole_pairs=2.5)),
    BrokenStudy("empty name", ("field name", "an empty text", "at least 1 character"), study(name="")),
    # machine
    BrokenStudy("negative stator resistance", ("field machine.r_s_ohm", "-0.018", "at least 0"), part("machine", r_s_ohm=-0.018)),
    BrokenStudy("inductance in millihenry", ("field machine.l_d_h", "1100", "at most 10 H", "not millihenry"), part("machine", l_d_h=1100.0, l_q_h=1900.0)),
    BrokenStudy("machine without torque", ("field machine.psi_pm_wb", "psi_pm_wb = 0", "magnets, or l_q_h above l_d_h"), part("machine", psi_pm_wb=0.0, l_q_h=1.0e-3)),
    BrokenStudy("unknown machine", ("field machine.kind", "'synchronus'", "synchronous, direct", "did you mean 'synchronous'?"), part("machine", kind="synchronus")),
    BrokenStudy("machine of no kind", ("field machine.kind", "nothing", "required"), part("machine", kind=None)),
    BrokenStudy("key of the other machine", ("field machine.pole_pairs", "which belongs to kind = 'induction' or kind = 'induction-vf' or kind = 'synchronous'", "remove it"),
                direct_study(machine={"kind": "direct", "pole_pairs": 6}), DIRECT),
    # inverter and module
    BrokenStudy("unknown modulation", ("field inverter.modulation", "'space vector'", "sine, third-harmonic, third-harmonic-quarter, space-vector", "did you mean 'space-vector'?"),
                part("inverter", modulation="space vector")),
    BrokenStudy("no DC voltage", ("study.toml, section inverter", "no DC-link voltage", "inverter.dc_voltage_v", "add dc_voltage_v"), part("inverter", dc_voltage_v=None)),
    BrokenStudy("DC voltage above the blocking voltage", ("field inverter.dc_voltage_v", "1500 V", "below the blocking voltage of Heron 300, 1200 V"), part("inverter", dc_voltage_v=1500)),
    BrokenStudy("DC voltage of the duty above the blocking voltage", ("duty.csv, column 'U'", "1250 V", "below the blocking voltage of Heron 300, 1200 V"),
                study(inverter={k: v for k, v in STUDY["inverter"].items() if k != "dc_voltage_v"}, duty=columns(phase=None, dc_voltage={"column": "U", "unit": "V"})),
                {"duty.csv": "t,I,n,T_in,U\n0,0,0,40,600\n1,0,0,40,1250\n2,0,0,40,600\n"}),
    BrokenStudy("DC voltage twice", ("field inverter.dc_voltage_v", "600 V beside a dc_voltage column", "one of the two"), study(duty=columns(phase=None, dc_voltage={"column": "U", "unit": "V"})),
                {"duty.csv": "t,I,n,T_in,U\n0,0,0,40,600\n1,0,0,40,600\n"}),
    BrokenStudy("switching frequency zero", ("field inverter.switching_frequency_hz", "value 0", "above 0"), part("inverter", switching_frequency_hz=0)),
    BrokenStudy("unknown module", ("field module.name", "'heron-30'", "heron-300, kite-300", "did you mean 'heron-300'?"), study(module={"name": "heron-30"})),
    BrokenStudy("module with ending", ("field module.name", "'mine.toml'", "heron-300, kite-300", 'file = "..."'), study(module={"name": "mine.toml"}), with_module("format", "format")),
    BrokenStudy("module without a name", ("field module.name", "''", "heron-300, kite-300"), study(module={"name": ""})),
    BrokenStudy("module by name and file", ("field module", "both name and file", "either name", "or file"), study(module={"name": "heron-300", "file": "mine.toml"})),
    BrokenStudy("module by empty name and file", ("field module", "both name and file"), study(module={"name": "", "file": "mine.toml"})),
    BrokenStudy("no module at all", ("field module", "neither name nor file", "either name", "or file"), "module = {}\n" + toml_text(study(module=None))),
    BrokenStudy("module file missing", ("mein.toml", "no such file", "did you mean 'mine.toml'?"), study(module={"file": "mein.toml"}), with_module("format", "format")),
    BrokenStudy("module file is a folder", ("mine.toml", "a folder", "a TOML file"), OWN_MODULE, {"duty.csv": CSV, "mine.toml": lambda path: path.mkdir()}),
    BrokenStudy("module file with a zero in its name", ("no file can have", "a TOML file"), study(module={"file": "mi\x00ne.toml"})),
    BrokenStudy("temperatures of a module not rising", ("mine.toml, field switch.on_state", "t_vj_c = 25 degC in curve 2 after 25 degC", "rise from curve to curve"), OWN_MODULE,
                with_module("t_vj_c = 125", "t_vj_c = 25")),
    BrokenStudy("negative resistance of a module", ("mine.toml, field switch.thermal.r_k_per_w[1]", "-0.006", "above 0"), OWN_MODULE, with_module("r_k_per_w = [0.006", "r_k_per_w = [-0.006")),
    BrokenStudy("number in quotes in a module", ("mine.toml, field ratings.v_ces_v", "'1200'", "a number", "without quotes"), OWN_MODULE, with_module("v_ces_v = 1200", 'v_ces_v = "1200"')),
    # cooling
    BrokenStudy("negative resistance", ("field cooling.r_th_k_per_w", "-0.02", "above 0", "correct the value"), part("cooling", r_th_k_per_w=-0.02)),
    BrokenStudy("cooling without coolant temperature", ("study.toml, section cooling", "no coolant temperature", "cooling.coolant_c, or a coolant column", "add coolant_c"),
                study(duty=columns(coolant=None))),
    BrokenStudy("coolant twice", ("field cooling.coolant_c", "65 degC beside a coolant column", "one of the two", "remove coolant_c"), part("cooling", coolant_c=65)),
    BrokenStudy("coolant in kelvin", ("field cooling.coolant_c", "338", "at most 150"), study(duty=columns(coolant=None), cooling={**STUDY["cooling"], "coolant_c": 338})),
    BrokenStudy("unknown cooling", ("field cooling.kind", "'Fixed'", "fixed, foster", "did you mean 'fixed'?"), part("cooling", kind="Fixed")),
    BrokenStudy("key of the other cooling", ("field cooling.tau_s", "belongs to kind = 'foster'", "choose the other kind"), part("cooling", tau_s=[1.0])),
    BrokenStudy("cooling with a time constant too few", ("field cooling.tau_s", "1 values beside 2 resistances", "one time constant for every resistance"),
                study(cooling={"kind": "foster", "r_k_per_w": [0.01, 0.01], "tau_s": [1.0]})),
    # lifetime, limits, march
    BrokenStudy("no missions", ("field lifetime.missions_per_year", "value 0", "above 0"), part("lifetime", missions_per_year=0)),
    BrokenStudy("unknown lifetime model", ("lifetime.failure_mode[1]", "'lesit-1997'", "lesit-1997-refit", "did you mean 'lesit-1997-"), mode(model="lesit-1997")),
    BrokenStudy("option missing", ("lifetime.failure_mode[1], option a", "nothing", "a number", "add it to the options"), mode(model="coffin-manson", options={"n": 3.0})),
    BrokenStudy("option unknown", ("lifetime.failure_mode[1], option aspekt_ratio", "unknown option", "did you mean 'aspect_ratio'?"), mode(model="sintered-2013", options={"aspekt_ratio": 0.3})),
    BrokenStudy("option in quotes", ("lifetime.failure_mode[1], option a", "'5e9'", "a number above 0"), mode(model="coffin-manson", options={"a": "5e9", "n": 3.0})),
    BrokenStudy("option not finite", ("field lifetime.failure_mode[1].options.n", "inf", "a finite number"), mode(model="coffin-manson", options={"a": 5e9, "n": float("inf")})),
    BrokenStudy("failure mode on nothing known", ("field lifetime.failure_mode[1].acts_on", "'cases'", "junction, case", "did you mean 'case'?"), mode(acts_on="cases")),
    BrokenStudy("failure mode without a model", ("field lifetime.failure_mode[1].model", "nothing", "required"), mode(model=None)),
    BrokenStudy("failure mode with a file that is not there", ("own.toml", "no such file", "a TOML file"), mode(model="own.toml")),
    BrokenStudy("limit beyond reason", ("field limits.t_vj_max_c", "value 423", "at most 300"), study(limits={"t_vj_max_c": 423})),
    BrokenStudy("march without steps", ("field march.steps_per_period", "value 1", "at least 32"), study(march={"steps_per_period": 1})),
    BrokenStudy("start of the march", ("field march.start", "'repeated'", "repeat, coolant", "did you mean 'repeat'?"), study(march={"start": "repeated"})),
    # duty and machine together
    BrokenStudy("machine without speed", ("study.toml, section duty.columns", "no column for speed", "machine.kind = 'synchronous'"), study(duty=columns(speed=None))),
    BrokenStudy("current and torque", ("study.toml, section duty.columns", "both current and torque", "one of them"),
                study(duty=columns(coolant=None, torque={"column": "T_in", "unit": "N m"}), cooling={**STUDY["cooling"], "coolant_c": 40})),
    BrokenStudy("direct points without frequency", ("section duty.columns", "no column for frequency", "machine.kind = 'direct'"), direct_study(duty=columns(base=direct_duty, frequency=None)), DIRECT),
    BrokenStudy("direct points without displacement", ("section duty.columns", "no column for displacement or power_factor"), direct_study(duty=columns(base=direct_duty, power_factor=None)), DIRECT),
    BrokenStudy("a column that would be ignored", ("section duty.columns", "a column for mod_index", "would ignore it", "take it out"),
                study(duty=columns(coolant=None, mod_index={"column": "m"}), cooling={**STUDY["cooling"], "coolant_c": 40}), {"duty.csv": CSV.replace("T_in", "m").replace("40", "0.5").replace("41", "0.5")}),
    BrokenStudy("a speed that direct points would ignore", ("section duty.columns", "a column for speed", "would ignore it"),
                direct_study(duty=columns(base=direct_duty, speed={"column": "n", "unit": "rpm"})), {"duty.csv": "\n".join(line + (",n" if k == 0 else ",100") for k, line in enumerate(DIRECT_CSV.splitlines()))}),
    BrokenStudy("modulation index beyond the modulation", ("duty.csv", "mod_index", "1.1", "at most 1 with modulation = 'sine'"),
                direct_study(inverter={**STUDY["inverter"], "modulation": "sine"}), {"duty.csv": DIRECT_CSV.replace("0.8,", "1.1,")}),
    BrokenStudy("direct points that contradict themselves", ("duty.csv, line 4 (t = 2 s)", "-150", "both say generating"), direct_study(), {"duty.csv": DIRECT_CSV.replace("150", "-150")}),
    BrokenStudy("operating point beyond the voltage", ("duty.csv, line 4 (t = 2 s)", "150 A rms at 240 Hz", "at most 144.3 V (peak phase voltage, 250 V DC)", "check speed"),
                part("inverter", dc_voltage_v=250), {"duty.csv": CSV.replace("600", "2400")}),
    BrokenStudy("operating point beyond the voltage, after blank lines", ("duty.csv, line 6 (t = 2 s)",), part("inverter", dc_voltage_v=250), {"duty.csv": CSV.replace("600", "2400").replace("\n1,", "\n\n\n1,")}),
    BrokenStudy("current beyond the tables", ("duty.csv, line 4 (t = 2 s)", "a peak current of 2121 A", "at most 1200 A", "rms or peak"),
                direct_study(), {"duty.csv": DIRECT_CSV.replace("150", "1500")}),
]
