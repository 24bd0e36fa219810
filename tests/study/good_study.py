"""A small study that is right in every part; tests break one thing at a time."""

import copy
import json

import mission.device

CSV = """t,I,n,T_in,what
0,0,0,40,idle
1,100,300,40,go
2,150,600,40,go
3,-80,400,41,brake
4,0,0,41,idle
"""

DUTY = {
    "file": "duty.csv",
    "columns": {
        "time": {"column": "t", "unit": "s"},
        "current": {"column": "I", "unit": "A rms"},
        "speed": {"column": "n", "unit": "rpm"},
        "coolant": {"column": "T_in", "unit": "degC"},
        "phase": {"column": "what"},
    },
}

# Duty of an inverter whose operating points are known, without a machine.
DIRECT_CSV = """t,I,f,m,cos_phi
0,0,0,0.05,1
1,100,30,0.5,0.85
2,150,50,0.8,0.85
3,0,0,0.05,1
"""

DIRECT_DUTY = {
    "file": "duty.csv",
    "columns": {
        "time": {"column": "t", "unit": "s"},
        "current": {"column": "I", "unit": "A rms"},
        "frequency": {"column": "f", "unit": "Hz"},
        "mod_index": {"column": "m"},
        "power_factor": {"column": "cos_phi"},
    },
}

STUDY = {
    "format": 1,
    "name": "a small study",
    "duty": DUTY,
    "machine": {"kind": "synchronous", "pole_pairs": 6, "r_s_ohm": 0.018, "l_d_h": 1.10e-3, "l_q_h": 1.90e-3, "psi_pm_wb": 0.74},
    "module": {"name": "heron-300"},
    "inverter": {"dc_voltage_v": 600, "switching_frequency_hz": 5000, "modulation": "space-vector"},
    "cooling": {"kind": "fixed", "r_th_k_per_w": 0.02},
    "lifetime": {"missions_per_year": 330},
}


def duty():
    """A fresh copy of the duty table."""
    return copy.deepcopy(DUTY)


def direct_duty():
    """A fresh copy of the duty table without a machine."""
    return copy.deepcopy(DIRECT_DUTY)


def study(**sections):
    """A fresh copy of the study; keywords replace whole sections, None takes one out."""
    data = copy.deepcopy(STUDY)
    for name, value in sections.items():
        data[name] = copy.deepcopy(value)
    return {k: v for k, v in data.items() if v is not None}


def direct_study(**sections):
    """The same without a machine."""
    return study(**{"duty": DIRECT_DUTY, "machine": {"kind": "direct"}, "cooling": {**STUDY["cooling"], "coolant_c": 40}, **sections})


def module_text(name="heron-300"):
    """Text of a shipped module file."""
    from pathlib import Path

    return (Path(mission.device.__file__).parent / "modules" / f"{name}.toml").read_text(encoding="utf-8")


def toml_text(data) -> str:
    """A dict as TOML, tables inside tables inline."""
    plain = [f"{_key(k)} = {_value(v)}" for k, v in data.items() if not isinstance(v, dict)]
    tables = [f"\n[{_key(k)}]\n" + "\n".join(f"{_key(n)} = {_value(v)}" for n, v in table.items()) for k, table in data.items() if isinstance(table, dict)]
    return "\n".join(plain + tables) + "\n"


def _key(key):
    return key if key.replace("_", "").replace("-", "").isalnum() and key.isascii() else json.dumps(key)


def _value(value):
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return json.dumps(value)
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(map(_value, value)) + "]"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{_key(k)} = {_value(v)}" for k, v in value.items()) + " }"
    return repr(value)


def write(folder, files):
    """Put files into a folder: bytes, text, or a callable that gets the path."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, content in files.items():
        path = folder / name
        if callable(content):
            content(path)
        elif isinstance(content, bytes):
            path.write_bytes(content)
        else:
            path.write_bytes(content.encode("utf-8"))
