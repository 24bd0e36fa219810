"""Units that a profile's columns may have, and how they become ours."""

from __future__ import annotations

import math
from dataclasses import dataclass

from ..errors import InputError, near_match

ROOT2 = math.sqrt(2.0)
RAD_S_PER_RPM = math.pi / 30.0


@dataclass(frozen=True)
class Quantity:
    """What a column can mean.

    Attributes
    ----------
    column : str
        Our name, with unit.
    units : dict
        Unit as the user writes it -> (factor, offset): ours = factor * (theirs + offset).
        Empty: no unit is to be given.
    low, high : float
        What can be true at all, in our unit; outside it a row is refused.
    why : str
        Advice when it is not.
    """

    column: str
    units: dict[str, tuple[float, float]]
    low: float
    high: float
    why: str


QUANTITIES: dict[str, Quantity] = {
    "time": Quantity("time_s", {"s": (1.0, 0.0), "ms": (1e-3, 0.0), "min": (60.0, 0.0), "h": (3600.0, 0.0), "d": (86400.0, 0.0), "datetime": (1.0, 0.0)},
                     -1e12, 1e12, "check the unit"),
    "current": Quantity("current_a", {"A rms": (1.0, 0.0), "A peak": (1.0 / ROOT2, 0.0), "kA rms": (1e3, 0.0), "kA peak": (1e3 / ROOT2, 0.0),
                                      "mA rms": (1e-3, 0.0), "mA peak": (1e-3 / ROOT2, 0.0)},
                        -10e3, 10e3, "check the unit (A, kA; rms or peak)"),
    "torque": Quantity("torque_nm", {"N m": (1.0, 0.0), "Nm": (1.0, 0.0), "kN m": (1e3, 0.0), "kNm": (1e3, 0.0)}, -10e6, 10e6, "check the unit (N m, kN m)"),
    "speed": Quantity("speed_rad_s", {"rpm": (RAD_S_PER_RPM, 0.0), "1/min": (RAD_S_PER_RPM, 0.0), "rad/s": (1.0, 0.0), "1/s": (2.0 * math.pi, 0.0),
                                      "Hz": (2.0 * math.pi, 0.0)},
                      -2e4, 2e4, "check the unit (rpm, rad/s, 1/s)"),
    "frequency": Quantity("frequency_hz", {"Hz": (1.0, 0.0), "kHz": (1e3, 0.0)}, 0.0, 5e3, "output frequencies are not negative; the sign of the current says where energy flows"),
    "mod_index": Quantity("mod_index", {}, 0.0, 4.0 / math.pi * (1 + 1e-9), "peak phase voltage over half the DC voltage; 1.2732 is six-step, the most a bridge makes"),
    "displacement": Quantity("phi_rad", {"deg": (math.pi / 180.0, 0.0), "rad": (1.0, 0.0)}, -2.0 * math.pi, 2.0 * math.pi, "check the unit (deg, rad)"),
    "power_factor": Quantity("power_factor", {}, -1.0, 1.0, "cos(phi): positive motoring, negative generating"),
    "coolant": Quantity("coolant_c", {"degC": (1.0, 0.0), "K": (1.0, -273.15)}, -60.0, 150.0, "check the unit (degC, K)"),
    "flow": Quantity("flow_m3_per_s", {"l/min": (1.0 / 60000.0, 0.0), "m3/h": (1.0 / 3600.0, 0.0), "l/s": (1e-3, 0.0), "m3/s": (1.0, 0.0)}, 0.0, 10.0,
                     "flow of coolant or air, not negative; check the unit (l/min, m3/h)"),
    "dc_voltage": Quantity("dc_voltage_v", {"V": (1.0, 0.0), "kV": (1e3, 0.0)}, 1.0, 20e3, "check the unit (V, kV)"),
    "phase": Quantity("phase", {}, -math.inf, math.inf, ""),
}

#: Those, and what stands in other tables than a duty's own: a vehicle's speed on the road.
ALL_QUANTITIES: dict[str, Quantity] = {
    **QUANTITIES,
    "road_speed": Quantity("road_speed_m_per_s", {"m/s": (1.0, 0.0), "km/h": (1.0 / 3.6, 0.0), "mph": (0.44704, 0.0)}, 0.0, 150.0,
                           "speeds of the vehicle, forwards; check the unit (m/s, km/h, mph)"),
}


def near_name(word: str, choices) -> str:
    """Offer the closest name; capitals and blanks do not count.

    Examples
    --------
    >>> near_name("A RMS", ["A rms", "A peak"])
    "did you mean 'A rms'?"
    """
    plain = {"".join(str(c).split()).casefold(): c for c in choices}
    hit = plain.get("".join(word.split()).casefold())
    return f"did you mean '{hit}'?" if hit is not None else near_match(word, choices)


def conversion(quantity: str, unit: str | None, where: str) -> tuple[float, float]:
    """Factor and offset from a user's unit to ours.

    Raises
    ------
    InputError
        Unit missing, unknown, or given where there is none.

    Examples
    --------
    >>> conversion("speed", "1/s", "example")[0] == 2 * math.pi
    True
    """
    units = ALL_QUANTITIES[quantity].units
    if not units:
        if unit is not None:
            raise InputError(f"{where}.unit", f"'{unit}'", f"no unit: {quantity} has none", "remove it")
        return 1.0, 0.0
    if unit is None:
        raise InputError(where, "no unit", "unit = one of " + ", ".join(units), "add the unit; none is taken for granted")
    if unit not in units:
        raise InputError(f"{where}.unit", f"'{unit}'", "one of " + ", ".join(units), near_name(unit, units) or ("say whether rms or peak" if quantity == "current" else "copy one of these"))
    return units[unit]
