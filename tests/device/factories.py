"""Invented modules for tests of this and later stages."""

from mission.device import module_from_dict

T_DATA_C = (25.0, 125.0)


def straight_line_data(
    *,
    v_t0_v=0.90,
    r_t_ohm=6.0e-3,
    v_d0_v=0.95,
    r_d_ohm=4.5e-3,
    e_switch_j=0.030,
    e_diode_j=0.010,
    i_ref_a=150.0,
    v_ref_v=600.0,
    i_end_a=600.0,
    points=2,
    reference="case",
    r_switch_k_per_w=(0.01, 0.1),
    tau_switch_s=(0.001, 0.1),
    r_diode_k_per_w=(0.02, 0.16),
    tau_diode_s=(0.001, 0.08),
    arrangement="six-pack",
    voltage_exponent_switch=1.35,
    voltage_exponent_diode=0.6,
    failure_mode=(),
    turn_on_share=0.5,
):
    """The dict behind :func:`straight_line_module`."""
    current = [i_end_a * k / (points - 1) for k in range(points)]

    def curves(values, name, **extra):
        return {**extra, "curve": [{"t_vj_c": t, "current_a": list(current), name: list(values)} for t in T_DATA_C]}

    def energy(e_j, exponent):
        return curves([e_j * i / i_ref_a for i in current], "energy_j", v_ref_v=v_ref_v, voltage_exponent=exponent)

    data = {
        "format": 1,
        "name": "Straight line",
        "technology": "none",
        "kind": "igbt",
        "arrangement": arrangement,
        "source": "invented for tests",
        "ratings": {
            "v_ces_v": 1200.0,
            "i_nominal_a": i_ref_a,
            "i_peak_repetitive_a": 2 * i_ref_a,
            "t_vj_op_max_c": 150.0,
            "t_vj_op_min_c": -40.0,
        },
        "gate": {
            "charge_c": 1.4e-6,
            "v_on_v": 15.0,
            "v_off_v": -8.0,
            "r_internal_ohm": 2.5,
            "r_on_ohm": 2.1,
            "r_off_ohm": 2.1,
        },
        "switch": {
            "on_state": curves([v_t0_v + r_t_ohm * i for i in current], "voltage_v"),
            "turn_on": energy(turn_on_share * e_switch_j, voltage_exponent_switch),
            "turn_off": energy((1.0 - turn_on_share) * e_switch_j, voltage_exponent_switch),
            "thermal": {"reference": reference, "r_k_per_w": list(r_switch_k_per_w), "tau_s": list(tau_switch_s)},
        },
        "diode": {
            "on_state": curves([v_d0_v + r_d_ohm * i for i in current], "voltage_v"),
            "recovery": energy(e_diode_j, voltage_exponent_diode),
            "thermal": {"reference": reference, "r_k_per_w": list(r_diode_k_per_w), "tau_s": list(tau_diode_s)},
        },
        "wires": {"diameter_um": 300.0, "feet_per_switch": 24, "feet_per_diode": 20, "loop_aspect_ratio": 0.3},
        "failure_mode": [dict(f) for f in failure_mode],
    }
    if reference == "case":
        data["case_to_sink"] = {"per": "module", "r_th_k_per_w": 0.01}
    return data


def straight_line_module(**changes):
    """The invented reference device of the published loss checks.

    VT0 0.90 V, rT 6 mOhm, VD0 0.95 V, rD 4.5 mOhm, Eon + Eoff 30 mJ and Err 10 mJ at
    150 A and 600 V, proportional to current; no temperature dependence.
    Keywords change single values, see :func:`straight_line_data`.
    """
    return module_from_dict(straight_line_data(**changes), "straight-line module")
