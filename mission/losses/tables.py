"""Loss look-ups of one module for the march: built once, read at every step.

Curves are linear between the temperatures of the data sheet, so every loss is
a broken line of temperature with its corners there. A step therefore needs
the loss at a few corner temperatures only.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..device import PowerModule, switching_energy_j
from ..device.notes import curve_name
from ..errors import InputError, RangeError
from .legs import ChannelWithBody, LegPlan, leg_plan, voltage_v
from .modulation import Modulation, reference_for
from .periods import gate_factors

#: Table range over the end of the data-sheet curves. Beyond that a straight-line
#: extrapolation is no estimate any more and a run is refused.
CURRENT_REACH = 2.0
#: Table currents are at most this share of the nominal current apart.
STEP_SHARE = 1.0 / 150.0
#: Corner temperatures that the march has room for.
MOST_CORNERS = 8
#: Longest dead time as a share of the switching period.
DEAD_SHARE_MAX = 0.1


@dataclass(frozen=True)
class LossTables:
    """Plain arrays for the kernels; k corner temperatures, n currents.

    Attributes
    ----------
    knot_c : ndarray, shape (k,)
        Corner temperatures, rising [degC].
    i_step_a : float
        Distance of the table currents [A]; the first is zero.
    voltage_v : ndarray, shape (curves, n, k)
        On-state voltages in the order of ``plan.voltages``.
    energy_j : ndarray, shape (energies, n, k)
        Energies in the order of ``plan.energies``, at their reference voltage and gate resistor.
    plan : LegPlan
    gate_factor, v_ref_v, voltage_exponent : ndarray, shape (energies,)
    modulation : Modulation
    drive : ndarray
        What all operating points share, see ``kernels.py``.
    jumps : bool
        Whether losses may jump along the angle: held or clipped phases, three levels, pulses that vanish.
    current_data_end_a : float
        Where the first of the curves ends [A].
    temperature_data_c : tuple of float
        Temperatures that all curves cover [degC].
    """

    knot_c: np.ndarray
    i_step_a: float
    voltage_v: np.ndarray
    energy_j: np.ndarray
    plan: LegPlan
    gate_factor: np.ndarray
    v_ref_v: np.ndarray
    voltage_exponent: np.ndarray
    modulation: Modulation
    drive: np.ndarray
    jumps: bool
    current_data_end_a: float
    temperature_data_c: tuple[float, float]

    @property
    def i_max_a(self) -> float:
        """Largest peak current of the table [A]."""
        return self.i_step_a * (self.voltage_v.shape[1] - 1)

    def kernel_arrays(self) -> tuple:
        """What the kernels read, in their order."""
        return (self.drive, self.plan.conduction, self.plan.switching, self.knot_c, float(self.i_step_a), self.voltage_v, self.energy_j,
                self.v_ref_v, self.voltage_exponent, self.gate_factor)

    def _point(self, i_peak_a, mod_index, phi_rad, frequency_hz, switching_frequency_hz, dc_voltage_v, direction):
        from . import kernels

        point = np.zeros(kernels.SCALE + self.v_ref_v.size)
        size, first, last = (v[0] for v in reference_for(self.modulation, mod_index))
        kernels.set_point(point, self.drive, float(i_peak_a), size, float(phi_rad), float(direction), first, last, float(switching_frequency_hz),
                          float(frequency_hz), float(dc_voltage_v), self.v_ref_v, self.voltage_exponent, self.gate_factor)
        return kernels, point, np.zeros((len(self.plan.positions), self.knot_c.size))

    def corner_means_w(self, *, i_peak_a, mod_index, phi_rad, frequency_hz, switching_frequency_hz, dc_voltage_v, direction=1.0) -> np.ndarray:
        """Mean losses over a fundamental period of every position at the corner temperatures, shape (positions, k) [W]."""
        kernels, point, out = self._point(i_peak_a, mod_index, phi_rad, frequency_hz, switching_frequency_hz, dc_voltage_v, direction)
        kernels.period_means(point, self.drive, self.plan.conduction, self.plan.switching, self.i_step_a, self.voltage_v, self.energy_j,
                             np.empty_like(out), np.empty(kernels.MOST_BORDERS), out)
        return out

    def jump_angles_rad(self, **point) -> np.ndarray:
        """Angles of the current, within a turn, where a loss of the leg jumps; arguments as for :meth:`corner_means_w` [rad]."""
        kernels, place, _ = self._point(**{"direction": 1.0, **point})
        border = np.empty(kernels.MOST_BORDERS)
        return np.sort(border[:kernels.jumps(place, self.drive, border, True)])

    def corner_losses_w(self, theta_rad, *, i_peak_a, mod_index, phi_rad, frequency_hz, switching_frequency_hz, dc_voltage_v, direction=1.0) -> np.ndarray:
        """Losses of every position of a leg at one angle of its current, at the corner temperatures, shape (positions, k) [W]."""
        kernels, point, out = self._point(i_peak_a, mod_index, phi_rad, frequency_hz, switching_frequency_hz, dc_voltage_v, direction)
        kernels.add_losses(float(theta_rad), 1.0, point, self.drive, self.plan.conduction, self.plan.switching, self.i_step_a, self.voltage_v,
                           self.energy_j, out)
        return out


def build_tables(module: PowerModule, modulation: Modulation, *, dead_time_s: float = 0.0, dead_time_compensated: bool = False,
                 r_gate_on_ohm: float | None = None, r_gate_off_ohm: float | None = None, overmodulation: bool = False) -> LossTables:
    """Tabulate ``module`` for ``modulation``.

    Parameters
    ----------
    module : PowerModule
    modulation : Modulation
    dead_time_s, dead_time_compensated, r_gate_on_ohm, r_gate_off_ohm, overmodulation
        As for :func:`mission.losses.leg_losses_w`.

    Raises
    ------
    InputError
        When a curve goes negative at a corner temperature, which only a
        straight-line extension over temperature can do; a gate resistor outside the data.
    """
    if not 0.0 <= dead_time_s <= 1e-3:
        raise RangeError("dead_time_s", f"{dead_time_s:g} s", "0 to 0.001 s", "dead time is in seconds, not microseconds")
    plan = leg_plan(module)
    every = plan.voltages + plan.energies
    knots = np.unique([c.t_vj_c for curves in every for c in curves.points]).astype(float)
    if any(isinstance(c, ChannelWithBody) for c in plan.voltages):
        # a channel with its body diode beside it is not straight between the temperatures of the data sheet
        knots = _filled(knots, MOST_CORNERS)
    end = min(c.current_a[-1] for curves in (*module.on_state_curves().values(), *plan.energies) for c in curves.points)
    reach = current_reach_a(module)
    current = np.linspace(0.0, reach, max(600, int(np.ceil(reach / (STEP_SHARE * module.ratings.i_nominal_a)))) + 1)
    voltage = np.stack([np.stack([voltage_v(c, current, t) for t in knots], axis=1) for c in plan.voltages])
    energy = np.stack([np.stack([switching_energy_j(c, current, t) for t in knots], axis=1) for c in plan.energies])
    places = {id(c): p for p, c in (module.on_state_curves() | module.energy_curves()).items()}
    for curves, table in zip(every, (*voltage, *energy)):
        if (table < 0.0).any():
            j, k = np.argwhere(table < 0.0)[0]
            place = places.get(id(curves))
            raise InputError(f"module '{module.name}', {place or 'reverse conduction'}",
                             f"a value below zero at {current[j]:.4g} A and {knots[k]:g} degC, where its curves are extended in a straight line",
                             "curves whose extension stays positive", "give all curves at the same temperatures"
                             if place is None else f"give the {curve_name(place)} at the same temperatures as the others")
    at_zero = bool((energy[:, 0] > 0.0).any())
    drive = np.array([modulation.code, plan.levels, modulation is Modulation.CLAMP_60_CURRENT, modulation.half_wave_symmetric, dead_time_s,
                      dead_time_compensated, at_zero], float)
    return LossTables(
        knot_c=knots, i_step_a=float(current[1]), voltage_v=voltage, energy_j=energy, plan=plan,
        gate_factor=gate_factors(module, plan.energy_places, r_gate_on_ohm, r_gate_off_ohm),
        v_ref_v=np.array([c.v_ref_v for c in plan.energies]), voltage_exponent=np.array([c.voltage_exponent for c in plan.energies]),
        modulation=modulation, drive=drive,
        jumps=modulation.holds or plan.levels == 3 or overmodulation or (dead_time_s > 0.0 and not dead_time_compensated), current_data_end_a=float(end),
        temperature_data_c=(float(max(curves.points[0].t_vj_c for curves in every)), float(min(curves.points[-1].t_vj_c for curves in every))),
    )


def _filled(knots, most):
    """More corner temperatures where they lie far apart, up to ``most``."""
    knots = knots.tolist()
    while len(knots) < most:
        k = int(np.argmax(np.diff(knots)))
        knots.insert(k + 1, 0.5 * (knots[k] + knots[k + 1]))
    return np.array(knots)


def current_reach_a(module: PowerModule) -> float:
    """Largest peak current that a run accepts: twice the end of the longest curve, or of five times the peak rating if that is less [A]."""
    every = (*module.on_state_curves().values(), *module.energy_curves().values())
    longest = max(c.current_a[-1] for curves in every for c in curves.points)
    return CURRENT_REACH * min(longest, 5.0 * module.ratings.i_peak_repetitive_a)
