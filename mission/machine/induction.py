"""Induction machine: currents, fluxes and voltages of its equivalent circuit, and what its drive sets.

Peak phase values, phasors that turn with the field. The states of a machine are told by the rotor flux psi (real, along
the d axis) and the torque-making rotor current y (of either sign); everything else follows without iteration, saturated or not:

    I_r = -j y,  T = 3/2 p psi y,  w_slip = R_r y / psi,
    main flux psi_m = psi + j L_rs y,  I_m = psi_m / L_m,  I_s = I_m + j y,
    psi_s = psi_m + L_ss I_s,  V = R_s I_s + j w psi_s

with w = w_rotor + w_slip, leakages L_ss and L_rs, and L_m that of the main flux. (W. Leonhard, Control of Electrical
Drives, Springer, 1985, chapters 10 and 12: the same equations; from memory.)

Everything here is for positive speed of the rotor; the caller mirrors.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .searching import close_in, first_fit, highest, most_torque
from .spec import InductionMachine, InductionVf

#: A load from which on a limit is taken as reached; the searches come nearer than that.
_BINDS = 1.0 - 1e-5

@dataclass(frozen=True)
class InductionState:
    """States of the machine; arrays of one shape.

    Attributes
    ----------
    rotor_flux_wb, y_a : rotor flux and torque-making rotor current
    slip_rad_s : electrical angular frequency of the rotor's currents, signed
    current_a, stator_flux_wb : complex, along and across the rotor flux; NaN beyond a saturation table
    """

    rotor_flux_wb: np.ndarray
    y_a: np.ndarray
    slip_rad_s: np.ndarray
    current_a: np.ndarray
    stator_flux_wb: np.ndarray

    def voltage_v(self, machine, omega_rad_s):
        """Complex stator voltage at an electrical stator frequency, signed [V]."""
        return machine.r_s_warm_ohm * self.current_a + 1j * omega_rad_s * self.stator_flux_wb


def magnetising_current_a(machine: InductionMachine | InductionVf, main_flux_wb):
    """Peak magnetising current of a peak main flux; NaN beyond a saturation table [A].

    Examples
    --------
    >>> m = InductionMachine(kind="induction", pole_pairs=2, r_s_ohm=0.1, r_r_ohm=0.1, l_s_sigma_h=1e-3, l_r_sigma_h=1e-3,
    ...                      l_m_h=0.03, magnetising_current_a=20)
    >>> float(magnetising_current_a(m, 0.6))
    20.0
    """
    psi, i, goes_on = machine.magnetising_curve()
    flux = np.asarray(main_flux_wb, float)
    if goes_on:
        return flux / psi[1]
    return np.where(flux <= psi[-1] * (1.0 + 1e-12), np.interp(flux, psi, i), np.nan)


def induction_state(machine: InductionMachine | InductionVf, rotor_flux_wb, y_a) -> InductionState:
    """State of a rotor flux [Wb peak] and a torque-making rotor current [A peak]; without flux there is none of it."""
    psi, y = np.broadcast_arrays(np.asarray(rotor_flux_wb, float), np.asarray(y_a, float))
    main = psi + 1j * machine.l_r_sigma_h * y
    size = np.abs(main)
    # where there is no flux, no current flows
    i_m = np.divide(magnetising_current_a(machine, size) * main, size, out=np.zeros(main.shape, complex), where=size > 0.0)
    current = i_m + 1j * y
    slip = np.divide(machine.r_r_ohm * y, psi, out=np.zeros(psi.shape), where=psi > 0.0)
    return InductionState(psi, y, slip, current, main + machine.l_s_sigma_h * current)


def torque_of_state_nm(machine: InductionMachine | InductionVf, state: InductionState):
    """Air-gap torque [N m]."""
    return 1.5 * machine.pole_pairs * state.rotor_flux_wb * state.y_a


def _breakdown_share(machine):
    """Torque-making current over rotor flux that is surely beyond breakdown [1/H]."""
    psi, i, _ = machine.magnetising_curve()
    return (1.0 + machine.l_s_sigma_h * (i[1:] / psi[1:]).max()) / (machine.l_s_sigma_h + machine.l_r_sigma_h)


def _load(machine, psi, y, omega_rotor, v_max, i_max):
    """Largest of voltage, current and breakdown over what is allowed.

    Breakdown: the stator flux leads the rotor flux by 45 degrees, the most torque of a stator flux.
    """
    state = induction_state(machine, psi, y)
    voltage = np.abs(state.voltage_v(machine, omega_rotor + state.slip_rad_s)) / v_max
    along, across = state.stator_flux_wb.real, np.abs(state.stator_flux_wb.imag)
    lead = np.divide(across, along, out=np.where(across > 0.0, np.inf, 0.0), where=along > 0.0)
    share = np.maximum(np.maximum(voltage, np.abs(state.current_a) / i_max), lead)
    return np.where(np.isnan(share), np.inf, share)


def flux_at_torque(machine: InductionMachine, omega_rotor_rad_s, torque_nm, v_max_v):
    """Rotor flux and torque-making current of a torque: rated flux, or the largest that voltage and current allow.

    Parameters
    ----------
    machine : InductionMachine
    omega_rotor_rad_s : ndarray, shape (n,)
        Electrical, >= 0 [rad/s].
    torque_nm : ndarray, shape (n,)
        [N m]; negative brakes.
    v_max_v : ndarray, shape (n,)
        Largest peak phase voltage [V].

    Returns
    -------
    rotor_flux_wb, y_a : ndarray, shape (n,)
        NaN where the torque cannot be had.
    """
    rated, k = machine.rated_flux_wb, 1.5 * machine.pole_pairs
    torque = np.asarray(torque_nm, float)
    end = np.minimum(np.sqrt(np.abs(torque) / k / _breakdown_share(machine)), rated)

    def place(u, rows):
        psi = rated + (end[rows] - rated) * u
        return psi, np.divide(torque[rows] / k, psi, out=np.zeros(psi.shape), where=psi > 0.0)

    def load(u, rows):
        return _load(machine, *place(u, rows), omega_rotor_rad_s[rows], v_max_v[rows], machine.i_peak_max_a)

    return _first(place, load, torque.size)


def flux_at_current(machine: InductionMachine, omega_rotor_rad_s, i_peak_a, sign, v_max_v):
    """Rotor flux and torque-making current of a size of the current: rated flux, or the largest that the voltage allows.

    Parameters
    ----------
    machine : InductionMachine
    omega_rotor_rad_s : ndarray, shape (n,)
        Electrical, >= 0 [rad/s].
    i_peak_a : ndarray, shape (n,)
        Peak phase current, > 0 [A].
    sign : ndarray, shape (n,)
        1. drives, -1. brakes.
    v_max_v : ndarray, shape (n,)
        Largest peak phase voltage [V].

    Returns
    -------
    rotor_flux_wb, y_a : ndarray, shape (n,)
        NaN where no flux fits, or where the current is too small to keep the flux that the voltage would allow.
    """
    size = np.asarray(i_peak_a, float)
    psi_points, i_points, goes_on = machine.magnetising_curve()
    alone = size * psi_points[1] if goes_on else np.interp(size, i_points, psi_points)
    start = np.minimum(machine.rated_flux_wb, alone)

    def place(u, rows):
        psi, wanted = start[rows] * (1.0 - u), size[rows]

        def excess(share):
            now = np.abs(induction_state(machine, psi, (1.0 - share) * wanted).current_a)
            # beyond the table the current is surely larger
            return np.where(np.isnan(now), np.inf, now - wanted)

        share = 1.0 - close_in(excess, np.zeros(psi.shape), np.ones(psi.shape))
        return psi, sign[rows] * share * wanted

    def load(u, rows):
        psi, y = place(u, rows)
        # the table may end before the current is reached
        short = np.abs(induction_state(machine, psi, y).current_a) < size[rows] * (1.0 - 1e-9)
        return np.where(short, np.inf, _load(machine, psi, y, omega_rotor_rad_s[rows], v_max_v[rows], np.inf))

    psi, y = _first(place, load, size.size)
    small = (alone < machine.rated_flux_wb * (1.0 - 1e-9)) & (psi >= start)
    return np.where(small, np.nan, psi), np.where(small, np.nan, y)


def _first(place, load, n):
    # the rated flux does for most rows: look there first, along the way only for the others
    every = np.arange(n)
    at = np.zeros(n)
    short = np.flatnonzero(~(load(at, every) <= 1.0 + 1e-12))
    if short.size:
        at[short], least = first_fit(lambda u, rows: load(u, short[rows]), short.size)
        # where nothing binds but the end of the saturation table, the flux is not the one that the drive would set
        at[short[least < _BINDS]] = np.nan
    psi, y = place(np.nan_to_num(at), every)
    return np.where(np.isnan(at), np.nan, psi), np.where(np.isnan(at), np.nan, y)


def largest_flux_torque(machine: InductionMachine, omega_rotor_rad_s, torque_nm, v_max_v):
    """Rotor flux and torque-making current of the largest torque in a direction that voltage, current and breakdown allow.

    Parameters and results as :func:`flux_at_torque`; only the sign of the torque counts.
    """
    sign, share = np.where(np.signbit(torque_nm), -1.0, 1.0), _breakdown_share(machine)
    n = sign.size

    def load(psi, y, rows):
        return _load(machine, psi, sign[rows] * y, omega_rotor_rad_s[rows], v_max_v[rows], machine.i_peak_max_a)

    psi, y = most_torque(load, lambda psi, y, rows: psi * y, np.zeros(n), np.full(n, machine.rated_flux_wb), lambda psi, rows: psi * share)
    # the end of a saturation table is no limit of the machine
    points, _, goes_on = machine.magnetising_curve()
    lost = np.zeros(n, bool) if goes_on else ~(np.hypot(psi, machine.l_r_sigma_h * y) < _BINDS * points[-1])
    return np.where(lost, np.nan, psi), np.where(lost, np.nan, sign * y)


# --- plain voltage by frequency ---------------------------------------------------------


def state_at_voltage(machine: InductionVf, v_peak_v, omega_rad_s, slip_rad_s) -> InductionState:
    """State that a voltage [V peak] of a frequency makes at a slip, both electrical and signed [rad/s].

    For a given slip and frequency the voltage is a broken line over the main flux, as the magnetising curve is: the piece that
    holds the voltage is found, and a quadratic equation gives the place on it.
    """
    v, w, slip = np.broadcast_arrays(np.asarray(v_peak_v, float), np.asarray(omega_rad_s, float), np.asarray(slip_rad_s, float))
    psi, i, goes_on = machine.magnetising_curve()
    # over the main flux (real here): y is -I_r turned back to the rotor flux
    minus_i_r = 1j * slip / (machine.r_r_ohm + 1j * slip * machine.l_r_sigma_h)

    def volts(main, i_m):
        current = i_m + minus_i_r[..., None] * main
        return machine.r_s_warm_ohm * current + 1j * w[..., None] * (main + machine.l_s_sigma_h * current)

    at = volts(psi, i)
    k = np.clip((np.abs(at) < v[..., None]).sum(axis=-1) - 1, 0, psi.size - 2)
    a = np.take_along_axis(at, k[..., None], -1)[..., 0]
    d = np.take_along_axis(at, k[..., None] + 1, -1)[..., 0] - a
    # |a + t d| = v
    aa, ad, dd = np.abs(a) ** 2 - v**2, (a * d.conj()).real, np.abs(d) ** 2
    with np.errstate(divide="ignore", invalid="ignore"):
        t = np.where(aa < 0.0, -aa / (ad + np.sqrt(np.maximum(ad**2 - dd * aa, 0.0))), 0.0)
    if not goes_on:
        t = np.where(t > 1.0 + 1e-12, np.nan, t)
    main = psi[k] + t * (psi[k + 1] - psi[k])
    rotor = main * np.abs(1.0 - machine.l_r_sigma_h * minus_i_r)
    return induction_state(machine, rotor, rotor * slip / machine.r_r_ohm)


class VfRows:
    """Rows of a machine on a plain voltage by frequency, with either the speed or the frequency given.

    Parameters
    ----------
    machine : InductionVf
    omega_rad_s : ndarray, shape (n,)
        Electrical, >= 0: of the rotor, or of the stator if ``by_frequency`` [rad/s].
    ceiling_v : ndarray, shape (n,)
        The law's voltage stops here [V peak].
    """

    def __init__(self, machine: InductionVf, omega_rad_s, ceiling_v, *, by_frequency: bool):
        self.machine, self._w, self._ceiling, self._by_frequency = machine, omega_rad_s, ceiling_v, by_frequency

    def stator_rad_s(self, slip, rows=slice(None)):
        """Stator frequency of a slip, signed."""
        return self._w[rows] + (0.0 if self._by_frequency else slip)

    def state(self, slip, rows=slice(None), stretch=1.0) -> InductionState:
        """State of a slip; ``stretch`` changes the slip at unchanged stator frequency."""
        w = self.stator_rad_s(slip, rows)
        return state_at_voltage(self.machine, np.minimum(self.machine.law_v(w), self._ceiling[rows]), w, stretch * slip)

    def _size(self, quantity, slip, rows):
        state = self.state(slip, rows)
        return np.abs(torque_of_state_nm(self.machine, state) if quantity == "torque" else state.current_a)

    def _fits(self, slip, rows):
        """Whether more slip at the same frequency makes more torque, and the current is within its limit."""
        state, more = self.state(slip, rows), self.state(slip, rows, 1.0 + 1e-5)
        stable = np.abs(torque_of_state_nm(self.machine, more)) >= np.abs(torque_of_state_nm(self.machine, state))
        return stable & (np.abs(state.current_a) <= self.machine.i_peak_max_a)

    def edge_rad_s(self, sign):
        """Slip up to which the machine runs: breakdown, the limit of its current, or the end of its saturation table.

        ``sign``, shape (n,): 1. for slip that drives, -1. for one that brakes. NaN where the current is too large without slip.
        """
        every = np.arange(sign.size)
        inside, outside = np.zeros(sign.size), sign * 1.1 * self.machine.r_r_ohm * _breakdown_share(self.machine)
        no_load = self._size("current", inside, every)
        for _ in range(24):
            middle = 0.5 * (inside + outside)
            fits = self._fits(middle, every)
            inside, outside = np.where(fits, middle, inside), np.where(fits, outside, middle)
        return np.where(no_load <= self.machine.i_peak_max_a, inside, np.nan)

    def most_rad_s(self, quantity, edge, rows):
        """Slip up to the edge at which the size of ``quantity`` ("torque" or "current") is largest; ``edge`` of the rows.

        NaN where that is the end of the saturation table, which is no limit of the machine.
        """
        parts = 32
        at = [edge * (k / parts) for k in range(parts + 1)]
        sizes = np.array([self._size(quantity, slip, rows) for slip in at])
        best, k = np.argmax(sizes, axis=0), np.arange(rows.size)
        low, high = np.array(at)[np.maximum(best - 1, 0), k], np.array(at)[np.minimum(best + 1, parts), k]
        slip, size = highest(lambda x: self._size(quantity, x, rows), low, high)
        slip = np.where(size > sizes[best, k], slip, np.array(at)[best, k])
        return np.where(np.isnan(self._size(quantity, slip * (1.0 + 1e-4), rows)), np.nan, slip)

    def slip_rad_s(self, quantity, wanted, edge):
        """Slip at which ``quantity`` has a size [N m or A peak]; NaN where that is not between no load and the edge."""
        every = np.arange(wanted.size)
        no_load = self._size(quantity, np.zeros(wanted.size), every)
        slip = np.where(np.isnan(edge) | (np.abs(wanted - no_load) > 1e-9 * no_load), np.nan, 0.0)
        open_ = np.flatnonzero(np.isnan(slip) & (wanted > no_load) & ~np.isnan(edge))
        end = edge[open_]
        short = np.flatnonzero(self._size(quantity, end, open_) < wanted[open_])
        if short.size:
            # the largest is not always at the edge: a frequency near zero lies on the way of a machine that brakes
            most = self.most_rad_s(quantity, end[short], open_[short])
            end[short] = np.where(np.isnan(most), end[short], most)
        enough = self._size(quantity, end, open_) >= wanted[open_]
        open_, end = open_[enough], end[enough]
        if open_.size:
            slip[open_] = end * close_in(lambda u: wanted[open_] - self._size(quantity, u * end, open_), np.zeros(end.size), np.ones(end.size))
        return slip
