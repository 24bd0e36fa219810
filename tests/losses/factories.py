"""Invented modules and an independent reckoning of their losses for the tests of this stage.

Nothing here calls the functions under test: curves are read with ``numpy.interp``,
references are formed anew, and the bridge is switched by a carrier.
"""

import numpy as np

from mission.device import module_from_dict

from ..device.factories import straight_line_data


def power_law_module(*, k_switch=1.0, k_diode=0.6, tc_switch=0.003, tc_diode=0.006, points=400, i_end_a=600.0):
    """Energies E (I/150 A)^k (1 + TC (T - 125 degC)) as a dense broken line.

    The points lie at the cubes of equal steps: dense near zero, where a power
    below one is steep.
    """
    data = straight_line_data()
    current = i_end_a * np.linspace(0.0, 1.0, points) ** 3

    def curves(energy_j, power, tc):
        return [
            {
                "t_vj_c": t,
                "current_a": current.tolist(),
                "energy_j": (energy_j * (current / 150.0) ** power * (1.0 + tc * (t - 125.0))).tolist(),
            }
            for t in (25.0, 125.0)
        ]

    for name in ("turn_on", "turn_off"):
        data["switch"][name]["curve"] = curves(0.015, k_switch, tc_switch)
    data["diode"]["recovery"]["curve"] = curves(0.010, k_diode, tc_diode)
    return module_from_dict(data, "power-law module")


def extended(x, xp, yp):
    """``numpy.interp`` with the end pieces carried on, never below zero."""
    xp, yp, x = np.asarray(xp), np.asarray(yp), np.asarray(x, float)
    y = np.interp(x, xp, yp)
    y = np.where(x > xp[-1], yp[-1] + (yp[-1] - yp[-2]) / (xp[-1] - xp[-2]) * (x - xp[-1]), y)
    y = np.where(x < xp[0], yp[0] + (yp[1] - yp[0]) / (xp[1] - xp[0]) * (x - xp[0]), y)
    return np.maximum(y, 0.0)


def curve_value(curves, current_a, t_c):
    """Value of a set of curves at currents (any shape) and one temperature."""
    t = [c.t_vj_c for c in curves.curve]
    k = min(max(int(np.searchsorted(t, t_c)) - 1, 0), len(t) - 2)
    cold, hot = (extended(current_a, c.current_a, c.values) for c in curves.curve[k : k + 2])
    return cold + (t_c - t[k]) / (t[k + 1] - t[k]) * (hot - cold)


def reference(modulation, x, m):
    """Phase reference of leg a, formed from the three sines (``modulation`` as text)."""
    legs = [m * np.sin(x - shift) for shift in (0.0, 2 * np.pi / 3, 4 * np.pi / 3)]
    if modulation == "sine":
        return legs[0]
    if modulation == "third-harmonic":
        return legs[0] + m / 6 * np.sin(3 * x)
    return legs[0] - 0.5 * (np.max(legs, axis=0) + np.min(legs, axis=0))


def averaged_losses_w(module, modulation, *, i_peak_a, mod_index, phi_rad, t_switch_c, t_diode_c, f_hz, v_dc_v, points=36_000):
    """Losses by the mean of duty times power over ``points`` angles of the whole period."""
    theta = (np.arange(points) + 0.5) * 2 * np.pi / points
    duty = 0.5 * (1 + reference(modulation, theta + phi_rad, mod_index))
    i = np.maximum(i_peak_a * np.sin(theta), 0.0)
    on, off, rec = module.switch.turn_on, module.switch.turn_off, module.diode.recovery

    def energy(curves, t_c):
        e = np.where(i > 0, curve_value(curves, i, t_c), 0.0)
        return f_hz * e.mean() * (v_dc_v / curves.v_ref_v) ** curves.voltage_exponent

    return {
        "switch_conduction": (curve_value(module.switch.on_state, i, t_switch_c) * i * duty).mean(),
        "switch_switching": energy(on, t_switch_c) + energy(off, t_switch_c),
        "diode_conduction": (curve_value(module.diode.on_state, i, t_diode_c) * i * (1 - duty)).mean(),
        "diode_switching": energy(rec, t_diode_c),
    }


def switched_losses_w(module, modulation, *, i_peak_a, mod_index, phi_rad, t_switch_c, t_diode_c, v_dc_v, carriers):
    """Losses of upper switch and lower diode from the edges of a natural-sampled triangle.

    ``carriers`` triangles in one fundamental period of one second, so the switching
    frequency is ``carriers`` Hz. Edges are solved for; between them the power is
    integrated by Simpson's rule.
    """
    width = 2 * np.pi / carriers
    start = np.arange(carriers) * width

    def power(curves, angle, t_c):
        i = np.maximum(i_peak_a * np.sin(angle), 0.0)
        return curve_value(curves, i, t_c) * i

    def integral(curves, a, b, t_c):
        mid = power(curves, 0.5 * (a + b), t_c)
        return ((b - a) / 6 * (power(curves, a, t_c) + 4 * mid + power(curves, b, t_c))).sum() / (2 * np.pi)

    u_on, u_off = np.full(carriers, 0.25), np.full(carriers, 0.75)
    for _ in range(12):  # the carrier is far steeper than the reference: converges by itself
        u_on = (1 - reference(modulation, start + u_on * width + phi_rad, mod_index)) / 4
        u_off = (3 + reference(modulation, start + u_off * width + phi_rad, mod_index)) / 4
    on, off = start + u_on * width, start + u_off * width

    def events(curves, angle, t_c):
        i = i_peak_a * np.sin(angle)
        e = np.where(i > 0, curve_value(curves, np.maximum(i, 0.0), t_c), 0.0)
        return e.sum() * (v_dc_v / curves.v_ref_v) ** curves.voltage_exponent

    s, d = module.switch, module.diode
    return {
        "switch_conduction": integral(s.on_state, on, off, t_switch_c),
        "switch_switching": events(s.turn_on, on, t_switch_c) + events(s.turn_off, off, t_switch_c),
        "diode_conduction": integral(d.on_state, start, on, t_diode_c) + integral(d.on_state, off, start + width, t_diode_c),
        "diode_switching": events(d.recovery, on, t_diode_c),
    }
