"""What stands out in the data of a module and must be repeated with results."""

from __future__ import annotations

import numpy as np

from .curves import on_state_voltage_v, switching_energy_j

_PARTS = {"switch": "switch", "diode": "diode", "inner_switch": "inner switch", "inner_diode": "inner diode", "clamp_diode": "clamp diode"}
_WHAT = {"on_state": "on-state voltage", "reverse": "reverse on-state voltage", "turn_on": "turn-on energy", "turn_off": "turn-off energy",
         "recovery": "recovery energy"}


def curve_name(place: str) -> str:
    """What a set of curves is called in a sentence.

    Examples
    --------
    >>> curve_name("diode.on_state"), curve_name("switch.turn_on"), curve_name("inner_switch.turn_on")
    ('on-state voltage of the diode', 'turn-on energy', 'turn-on energy of the inner switch')
    """
    part, what = place.split(".")
    plain = place in ("switch.turn_on", "switch.turn_off", "diode.recovery")
    return _WHAT[what] if plain else f"{_WHAT[what]} of the {_PARTS[part]}"


def module_notes(module) -> tuple[str, ...]:
    """Extensions of the curves inside the ratings, then data that are possible but unusual.

    Parameters
    ----------
    module : PowerModule

    Returns
    -------
    tuple of str
        One sentence each; empty when nothing stands out.
    """
    return (*_extensions(module), *_oddities(module))


def _extensions(module):
    r = module.ratings
    every = module.on_state_curves() | module.energy_curves()
    for place, curves in every.items():
        what = curve_name(place)
        first, last = curves.current_data_a
        if first > 0.0:
            yield f"{what}: below {first:g} A the line through the first two points is used, not below zero"
        if last < r.i_nominal_a:
            rating = f"nominal current of {r.i_nominal_a:g} A"
        elif last < r.i_peak_repetitive_a:
            rating = f"peak rating of {r.i_peak_repetitive_a:g} A"
        else:
            continue
        yield f"{what}: data end at {last:g} A, below the {rating}; extended in a straight line"
    how = "extended in a straight line over temperature"
    for t_c, names in _grouped(every, lambda c: c.points[0].t_vj_c, lambda t: t > r.t_vj_op_min_c):
        yield f"{names}: below {t_c:g} degC {how} (module rated from {r.t_vj_op_min_c:g} degC)"
    for t_c, names in _grouped(every, lambda c: c.points[-1].t_vj_c, lambda t: t < r.t_vj_op_max_c):
        yield f"{names}: above {t_c:g} degC {how} (module rated to {r.t_vj_op_max_c:g} degC)"


def _grouped(every, temperature, concerns):
    """One entry for all curve sets that end at the same temperature."""
    groups: dict[float, list[str]] = {}
    for place, curves in every.items():
        if concerns(temperature(curves)):
            groups.setdefault(temperature(curves), []).append(curve_name(place))
    return [(t, "all curves" if len(names) == len(every) else ", ".join(names)) for t, names in groups.items()]


def _oddities(module):
    r = module.ratings
    i = r.i_nominal_a
    for place, curves in module.on_state_curves().items():
        v = np.array([float(on_state_voltage_v(curves, i, t)) for t in curves.t_vj_c])
        if (v < 0.5).any() or (v > 6.0).any():
            span = f"{v.min():.3g} to {v.max():.3g} V"
            yield f"{curve_name(place)}: {span} at nominal current is unusual; 1 to 4 V are common"
    for place, curves in module.energy_curves().items():
        t = curves.t_vj_c
        e = np.array([float(switching_energy_j(curves, i, x)) for x in t])
        if (np.diff(e) < 0.0).any():
            yield f"{curve_name(place)}: falls with temperature at nominal current, which is unusual"
        if e.max() == 0.0:
            yield f"{curve_name(place)}: zero at nominal current"
        ratio = curves.v_ref_v / r.v_ces_v
        if not 0.25 <= ratio <= 0.8:
            ref = f"reference voltage {curves.v_ref_v:g} V"
            yield f"{curve_name(place)}: {ref} is {ratio:.0%} of the blocking voltage; about half is common"
    totals = {}
    for pair in module.chip_pairs():
        name, thermal = _PARTS[pair.place], pair.thermal
        # given as layers there are no branches to look at
        total = totals[name] = sum(thermal.r_k_per_w)
        if total > 5.0:
            yield f"thermal resistance of the {name}: {total:.3g} K/W is unusually high"
        if thermal.tau_s and thermal.tau_s[-1] > 30.0:
            slowest = f"a time constant of {thermal.tau_s[-1]:g} s"
            yield f"thermal branches of the {name}: {slowest} is long for a module; does it hold a sink?"
    diode, switch = totals.get("diode", 0.0), totals["switch"]
    if 0.0 < diode < 0.7 * switch:
        yield "thermal resistance: the diode is much better cooled than the switch, which is unusual"
    for place, curves in module.on_state_curves().items():
        if not curves.curve:
            yield f"{curve_name(place)}: straight lines instead of points; a real curve bends, so small currents are charged too much or too little"
    if module.kind == "mosfet" and module.switch.reverse is None:
        yield "reverse conduction: no curves; the channel is taken to conduct alike both ways, with the body diode beside it"
    if not module.failure_mode:
        yield "no failure mode in the module file: temperatures can be computed, a life cannot"
