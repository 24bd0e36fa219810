"""Loss tables of one module for the march: built once, looked up at every step.

Curves are linear between the temperatures of the data sheet, so every loss is
a broken line of temperature with its corners there. A step therefore needs
the loss at a few corner temperatures only.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..device import PowerModule, on_state_voltage_v, switching_energy_j
from ..errors import InputError
from .modulation import Modulation
from .periods import conduction_integrals_w, mean_energy_j

#: Table range over the end of the data-sheet curves. Beyond that a straight-line
#: extrapolation is no estimate any more and a run is refused.
CURRENT_REACH = 2.0
CELLS = 600


@dataclass(frozen=True)
class LossTables:
    """Plain arrays for the kernels; k corner temperatures, n currents, two kinds (0 switch, 1 diode).

    Attributes
    ----------
    knot_c : ndarray, shape (k,)
        Corner temperatures, rising [degC].
    i_step_a : float
        Distance of the table currents [A]; the first is zero.
    conduction_w : ndarray, shape (2, n, k, 1 + h)
        A and B_h of the period means.
    energy_mean_j : ndarray, shape (3, n, k)
        Period means of turn-on, turn-off, recovery energy at reference voltage.
    voltage_v : ndarray, shape (2, n, k)
        On-state voltage.
    energy_j : ndarray, shape (3, n, k)
        Energy at a current.
    order, amount : ndarray, shape (h,)
        Harmonics of the phase reference per unit of modulation index.
    v_ref_v, voltage_exponent : ndarray, shape (3,)
    modulation : Modulation
    current_data_end_a : float
        Where the first of the curves ends [A].
    temperature_data_c : tuple of float
        Temperatures that all curves cover [degC].
    """

    knot_c: np.ndarray
    i_step_a: float
    conduction_w: np.ndarray
    energy_mean_j: np.ndarray
    voltage_v: np.ndarray
    energy_j: np.ndarray
    order: np.ndarray
    amount: np.ndarray
    v_ref_v: np.ndarray
    voltage_exponent: np.ndarray
    modulation: Modulation
    current_data_end_a: float
    temperature_data_c: tuple[float, float]

    @property
    def i_max_a(self) -> float:
        """Largest peak current of the table [A]."""
        return self.i_step_a * (self.voltage_v.shape[1] - 1)

    def energy_scale(self, v_dc_v, switching_frequency_hz) -> np.ndarray:
        """Factors (3, n) from table energies to watts at the given link voltage and switching frequency."""
        v = np.atleast_1d(np.asarray(v_dc_v, float))
        f = np.atleast_1d(np.asarray(switching_frequency_hz, float))
        return (v[None, :] / self.v_ref_v[:, None]) ** self.voltage_exponent[:, None] * f[None, :]


def build_tables(module: PowerModule, modulation: Modulation) -> LossTables:
    """Tabulate ``module`` for ``modulation``.

    Raises
    ------
    InputError
        When a curve goes negative at a corner temperature, which only a
        straight-line extension over temperature can do.
    """
    on_states = (module.switch.on_state, module.diode.on_state)
    energies = (module.switch.turn_on, module.switch.turn_off, module.diode.recovery)
    every = on_states + energies
    knots = np.unique([c.t_vj_c for curves in every for c in curves.curve]).astype(float)
    end = min(c.current_a[-1] for curves in every for c in curves.curve)
    reach = CURRENT_REACH * max(c.current_a[-1] for curves in every for c in curves.curve)
    current = np.linspace(0.0, reach, CELLS + 1)
    series = modulation.harmonics()
    orders = list(series)
    shape = (current.size, knots.size)
    conduction = np.empty((2, *shape, 1 + len(orders)))
    voltage = np.empty((2, *shape))
    energy_mean, energy = np.empty((3, *shape)), np.empty((3, *shape))
    for k, t in enumerate(knots):
        for which, curves in enumerate(on_states):
            conduction[which, :, k] = conduction_integrals_w(curves, current, t, orders)
            voltage[which, :, k] = on_state_voltage_v(curves, current, t)
        for which, curves in enumerate(energies):
            energy_mean[which, :, k] = mean_energy_j(curves, current, t)
            energy[which, :, k] = switching_energy_j(curves, current, t)
    places = (*module.on_state_curves(), *module.energy_curves())
    for place, table in zip(places, (*voltage, *energy)):
        if (table < 0.0).any():
            j, k = np.argwhere(table < 0.0)[0]
            raise InputError(f"module '{module.name}', {place}", f"a value below zero at {current[j]:.4g} A and {knots[k]:g} degC, where its curves are extended in a straight line",
                             "curves whose extension stays positive", "give all curves at the same temperatures")
    return LossTables(
        knot_c=knots, i_step_a=float(current[1]), conduction_w=conduction, energy_mean_j=energy_mean,
        voltage_v=voltage, energy_j=energy, order=np.array(orders, float), amount=np.array(list(series.values())),
        v_ref_v=np.array([c.v_ref_v for c in energies]), voltage_exponent=np.array([c.voltage_exponent for c in energies]),
        modulation=modulation, current_data_end_a=float(end),
        temperature_data_c=(float(max(curves.curve[0].t_vj_c for curves in every)), float(min(curves.curve[-1].t_vj_c for curves in every))),
    )
