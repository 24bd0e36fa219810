"""One invented module of every device kind, with bent curves; no real part stands behind them.

On-state v0 + r i + k sqrt(i), sampled densely where it bends; energies a + b i + c i^2, some of
them above zero at no current; three unevenly spaced temperatures with unequal steps between their curves.
"""

import numpy as np

from mission.device import module_from_dict

T_DATA_C = (25.0, 100.0, 150.0)
I_NOMINAL_A = 200.0
I_END_A = 400.0


def on_state(v0_v, r_ohm, root, *, dv0=-1.2e-3, dr=3e-3, left_out=0):
    """On-state curves; offset falls and slope rises with temperature; the points nearest to zero may be left out."""
    current = (I_END_A * np.linspace(0.0, 1.0, 25) ** 2)[left_out:]

    def volts(d_k):
        return v0_v + dv0 * d_k + r_ohm * (1.0 + dr * d_k + 6e-6 * d_k**2) * current + root * np.sqrt(current)

    return {"curve": [{"t_vj_c": t, "current_a": current.tolist(), "voltage_v": volts(t - 25.0).tolist()} for t in T_DATA_C]}


def lines(v0_v, r_ohm, *, dv0=-1.5e-3, dr=2e-3):
    """On-state as the data sheet's straight lines only."""
    return {"line": [
        {"t_vj_c": 25.0 + d_k, "v0_v": v0_v + dv0 * d_k, "r_ohm": r_ohm * (1.0 + dr * d_k), "current_end_a": I_END_A} for d_k in (0.0, 125.0)
    ]}


def energy(at_rest_j, at_nominal_j, bend, *, tc=3e-3, v_ref_v=600.0, exponent=1.3, resistor=None):
    """Energy curves; ``bend`` is the share of the energy at nominal current that goes with the square of the current."""
    current = I_END_A * np.linspace(0.0, 1.0, 13) ** 2
    x = current / I_NOMINAL_A
    at_25c = at_rest_j + at_nominal_j * ((1.0 - bend) * x + bend * x**2)
    factor = {t: 1.0 + tc * (t - 25.0) + 4e-6 * (t - 25.0) ** 2 for t in T_DATA_C}
    out = {"v_ref_v": v_ref_v, "voltage_exponent": exponent, "curve": [
        {"t_vj_c": t, "current_a": current.tolist(), "energy_j": (at_25c * factor[t]).tolist()} for t in T_DATA_C]}
    if resistor is not None:
        r_ohm, relative, r_ref_ohm = resistor
        out["gate_resistor"] = {"r_ref_ohm": r_ref_ohm, "r_ohm": list(r_ohm), "energy_j": [at_nominal_j * f for f in relative]}
    return out


ON_RESISTOR = ((1.0, 2.0, 5.0, 10.0), (0.8, 1.0, 1.7, 2.9), 2.0)
OFF_RESISTOR = ((1.0, 3.0, 10.0), (0.95, 1.0, 1.3), 3.0)
RECOVERY_RESISTOR = ((1.0, 2.0, 5.0, 10.0), (1.15, 1.0, 0.75, 0.6), 2.0)
THERMAL = {"reference": "sink", "r_k_per_w": [0.02, 0.15], "tau_s": [0.002, 0.2]}


def _switch(on, turn_on, turn_off):
    return {"on_state": on, "turn_on": turn_on, "turn_off": turn_off, "thermal": dict(THERMAL)}


def _diode(on, recovery, thermal=True):
    out = {"on_state": on}
    if recovery is not None:
        out["recovery"] = recovery
    if thermal:
        out["thermal"] = dict(THERMAL)
    return out


def _igbt():
    return _switch(on_state(0.75, 2.2e-3, 0.045), energy(0.4e-3, 14e-3, 0.3, resistor=ON_RESISTOR),
                   energy(0.2e-3, 12e-3, -0.1, tc=2.5e-3, resistor=OFF_RESISTOR))


def _two_level(kind):
    data = {
        "format": 1, "name": f"Bent {kind}", "technology": "none", "kind": kind, "arrangement": "six-pack", "source": "invented for tests",
        "ratings": {"v_ces_v": 1200.0, "i_nominal_a": I_NOMINAL_A, "i_peak_repetitive_a": I_END_A, "t_vj_op_max_c": 150.0, "t_vj_op_min_c": -40.0},
        "gate": {"charge_c": 1.2e-6, "v_on_v": 15.0, "v_off_v": -8.0, "r_internal_ohm": 2.0, "r_on_ohm": 2.7, "r_off_ohm": 2.2},
        "switch": _igbt(),
        "diode": _diode(on_state(0.85, 1.5e-3, 0.035, dv0=-1.8e-3), energy(0.5e-3, 9e-3, -0.3, tc=6e-3, exponent=0.6, resistor=RECOVERY_RESISTOR)),
    }
    if kind == "igbt-schottky":
        data["diode"] = _diode(lines(0.95, 4.0e-3), None)
    if kind == "reverse-conducting-igbt":
        del data["diode"]["thermal"]
    if kind == "mosfet":
        # a channel without offset that reaches the body diode's threshold inside the data; the recovery small
        data["switch"] = _switch(on_state(0.02, 6.5e-3, 0.012, dv0=0.0, dr=5e-3, left_out=3),
                                 energy(0.3e-3, 4e-3, 0.25, tc=-0.5e-3, resistor=ON_RESISTOR),
                                 energy(0.1e-3, 2.5e-3, 0.4, tc=0.5e-3, resistor=OFF_RESISTOR))
        data["diode"] = _diode(on_state(0.95, 2.5e-3, 0.06, dv0=-2.0e-3, dr=1e-3), energy(0.1e-3, 0.8e-3, 0.1, tc=5e-3, exponent=0.7), thermal=False)
    return data


def _mosfet_with_reverse():
    data = _two_level("mosfet")
    data["switch"]["reverse"] = on_state(0.015, 4.6e-3, 0.010, dv0=0.0, dr=4e-3, left_out=2)
    return data


def _three_level(arrangement, kind):
    data = _two_level("igbt")
    data.update(name=f"Bent {arrangement} {kind}", kind=kind, arrangement=arrangement)
    data["inner_switch"] = _switch(on_state(0.62, 1.9e-3, 0.040), energy(0.3e-3, 8e-3, 0.2, v_ref_v=400.0, exponent=1.2, resistor=ON_RESISTOR),
                                   energy(0.2e-3, 9e-3, 0.0, v_ref_v=400.0, exponent=1.25, resistor=OFF_RESISTOR))
    data["inner_diode"] = _diode(on_state(0.80, 1.8e-3, 0.030),
                                 energy(0.3e-3, 6e-3, -0.3, tc=5e-3, v_ref_v=400.0, exponent=0.65, resistor=RECOVERY_RESISTOR))
    if arrangement == "npc-leg":
        data["clamp_diode"] = _diode(on_state(0.90, 1.1e-3, 0.050),
                                     energy(0.6e-3, 7e-3, -0.25, tc=4e-3, v_ref_v=400.0, exponent=0.55, resistor=RECOVERY_RESISTOR))
    if kind == "igbt-schottky":
        free = "clamp_diode" if arrangement == "npc-leg" else "inner_diode"
        data[free] = _diode(lines(0.92, 3.5e-3), None)
    return data


DATA = {
    "igbt": lambda: _two_level("igbt"),
    "igbt-schottky": lambda: _two_level("igbt-schottky"),
    "reverse-conducting-igbt": lambda: _two_level("reverse-conducting-igbt"),
    "mosfet": lambda: _two_level("mosfet"),
    "mosfet with reverse curves": _mosfet_with_reverse,
    "npc-leg": lambda: _three_level("npc-leg", "igbt"),
    "npc-leg with Schottky clamps": lambda: _three_level("npc-leg", "igbt-schottky"),
    "t-type-leg": lambda: _three_level("t-type-leg", "igbt"),
    "t-type-leg with Schottky midpoint": lambda: _three_level("t-type-leg", "igbt-schottky"),
}
MODULES = {name: module_from_dict(make(), name) for name, make in DATA.items()}
#: Modules whose energies all come with a curve over the gate resistor.
FREE_GATE = tuple(name for name, m in MODULES.items() if all(c.gate_resistor is not None for c in m.energy_curves().values()))
