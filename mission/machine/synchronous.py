"""Currents of a synchronous machine: maximum torque per ampere, then field weakening.

Everything here is for positive speed and in rotor coordinates: i_q > 0 drives,
i_q < 0 brakes. Negative speed is the mirror image and is handled by the caller.
All functions are vectorised over operating points.

The formulas follow from the dq model

    v_d = R i_d - w L_q i_q,   v_q = R i_q + w (L_d i_d + psi),
    T = 3/2 p (psi + (L_d - L_q) i_d) i_q

by setting the derivative of the torque along the circle of constant current to zero.
A saturated machine has psi_d and psi_q in place of L_d i_d + psi and L_q i_q, from a table, and
T = 3/2 p (psi_d i_q - psi_q i_d); its places are searched.
"""

from __future__ import annotations

import numpy as np

from .saturation import flux_map
from .searching import close_in, first_fit, most_torque
from .spec import SynchronousMachine


def flux_linkages_wb(machine: SynchronousMachine, i_d_a, i_q_a):
    """Flux linkages psi_d, psi_q [Wb peak] of peak phase currents [A]; NaN outside a saturation table.

    Examples
    --------
    >>> m = SynchronousMachine(
    ...     kind="synchronous",
    ...     pole_pairs=4,
    ...     r_s_ohm=0.02,
    ...     saturation={"over": "current", "i_peak_a": [0, 200], "l_d_h": [4e-4, 3e-4], "l_q_h": [8e-4, 4e-4], "psi_pm_wb": [0.2, 0.2]},
    ... )
    >>> [round(float(x), 6) for x in flux_linkages_wb(m, 0.0, 100.0)]
    [0.2, 0.06]
    """
    if machine.saturation is not None:
        return flux_map(machine.saturation).flux_wb(i_d_a, i_q_a)
    return machine.l_d_h * np.asarray(i_d_a, float) + machine.psi_pm_wb, machine.l_q_h * np.asarray(i_q_a, float)


def dq_voltages_v(machine: SynchronousMachine, omega_rad_s, i_d_a, i_q_a):
    """Steady voltages in rotor coordinates.

    Parameters
    ----------
    machine : SynchronousMachine
    omega_rad_s : array_like
        Electrical angular speed, signed [rad/s].
    i_d_a, i_q_a : array_like
        Peak phase currents [A].

    Returns
    -------
    v_d_v, v_q_v : ndarray
        Peak phase voltages [V].
    """
    w, r = np.asarray(omega_rad_s, float), machine.r_s_warm_ohm
    i_d, i_q = np.asarray(i_d_a, float), np.asarray(i_q_a, float)
    psi_d, psi_q = flux_linkages_wb(machine, i_d, i_q)
    return r * i_d - w * psi_q, r * i_q + w * psi_d


def torque_of_currents_nm(machine: SynchronousMachine, i_d_a, i_q_a):
    """Air-gap torque [N m] of peak phase currents in rotor coordinates [A]."""
    i_d, i_q = np.asarray(i_d_a, float), np.asarray(i_q_a, float)
    if machine.saturation is not None:
        return 1.5 * machine.pole_pairs * flux_map(machine.saturation).cross(i_d, i_q)
    return 1.5 * machine.pole_pairs * (machine.psi_pm_wb + (machine.l_d_h - machine.l_q_h) * i_d) * i_q


def mtpa_from_current(machine: SynchronousMachine, i_peak_a):
    """Rotor-coordinate currents of the most torque for a current.

    Parameters
    ----------
    machine : SynchronousMachine
    i_peak_a : array_like
        Size of the current, peak phase [A], >= 0.

    Returns
    -------
    i_d_a, i_q_a : ndarray
        ``i_q_a`` >= 0; brake with ``-i_q_a``. NaN beyond a saturation table.

    Examples
    --------
    >>> m = SynchronousMachine(
    ...     kind="synchronous", pole_pairs=4, r_s_ohm=0.02, l_d_h=0.4e-3, l_q_h=0.4e-3, psi_pm_wb=0.2
    ... )
    >>> [float(x) for x in mtpa_from_current(m, 100.0)]
    [0.0, 100.0]
    """
    i = np.asarray(i_peak_a, float)
    if machine.saturation is not None:
        return flux_map(machine.saturation).on_line("size", i)
    dl = machine.l_q_h - machine.l_d_h
    # written without the difference of two nearly equal roots, so that dl = 0 is no special case
    below = machine.psi_pm_wb + np.sqrt(machine.psi_pm_wb**2 + 8.0 * dl**2 * i**2)
    i_d = np.divide(-2.0 * dl * i**2, below, out=np.zeros_like(i), where=below > 0.0) + 0.0
    return i_d, np.sqrt((i - i_d) * (i + i_d))


def mtpa_from_torque(machine: SynchronousMachine, torque_nm):
    """Rotor-coordinate currents of the least current for a torque.

    Along the line of most torque per ampere the torque is
    3/4 p i_q (psi + sqrt(psi^2 + 4 dL^2 i_q^2)) with dL = L_q - L_d. Cleared of
    the root this is a convex quartic in i_q; Newton from above cannot miss.

    Parameters
    ----------
    machine : SynchronousMachine
    torque_nm : array_like
        [N m], signed.

    Returns
    -------
    i_d_a, i_q_a : ndarray
        ``i_q_a`` has the sign of the torque. NaN beyond a saturation table.
    """
    torque = np.asarray(torque_nm, float)
    tau = np.abs(torque) / (1.5 * machine.pole_pairs)
    if machine.saturation is not None:
        i_d, i_q = flux_map(machine.saturation).on_line("cross", tau)
        return i_d, np.copysign(i_q, torque)
    psi, dl = machine.psi_pm_wb, abs(machine.l_q_h - machine.l_d_h)
    with np.errstate(divide="ignore", invalid="ignore"):
        i_q = np.minimum(tau / psi if psi > 0 else np.inf, np.sqrt(tau / dl) if dl > 0 else np.inf)
        i_q = np.where(tau > 0.0, i_q, 0.0)
        for _ in range(60):
            f = dl**2 * i_q**4 + tau * psi * i_q - tau**2
            step = np.where(tau > 0.0, f / (4.0 * dl**2 * i_q**3 + tau * psi), 0.0)
            i_q = i_q - step
            if not (np.abs(step) > 1e-15 * i_q).any():
                break
    signed_dl = machine.l_q_h - machine.l_d_h
    below = psi + np.sqrt(psi**2 + 4.0 * signed_dl**2 * i_q**2)
    i_d = np.divide(-2.0 * signed_dl * i_q**2, below, out=np.zeros_like(i_q), where=below > 0.0) + 0.0
    return i_d, np.copysign(i_q, torque)


def weaken_at_current(machine: SynchronousMachine, omega_rad_s, i_d_a, i_q_a, v_max_v):
    """Turn the current towards negative i_d until the voltage fits; its size stays.

    The first fitting angle is taken: it gives the most torque of all that fit.

    Parameters
    ----------
    machine : SynchronousMachine
    omega_rad_s : ndarray, shape (n,)
        Electrical, > 0 [rad/s].
    i_d_a, i_q_a : ndarray, shape (n,)
        Currents at which the voltage is too high [A].
    v_max_v : ndarray, shape (n,)
        Largest peak phase voltage [V].

    Returns
    -------
    i_d_a, i_q_a : ndarray, shape (n,)
        NaN where no angle fits.
    v_least_v : ndarray, shape (n,)
        Smallest voltage on the way (of the fitting angle where one was found) [V].
    """
    w, v_max = np.asarray(omega_rad_s, float), np.asarray(v_max_v, float)
    size, sign = np.hypot(i_d_a, i_q_a), np.where(np.signbit(i_q_a), -1.0, 1.0)
    start = np.arctan2(np.abs(i_q_a), i_d_a)
    end = np.full_like(start, np.pi)
    if machine.saturation is None and machine.l_d_h > machine.l_q_h:
        # beyond this i_d the torque would change its sign
        ratio = machine.psi_pm_wb / ((machine.l_d_h - machine.l_q_h) * np.where(size > 0.0, size, 1.0))
        end = np.arccos(-np.minimum(ratio, 1.0))

    def currents(place, rows):
        angle = start[rows] + (end - start)[rows] * place
        # at the end of the way the sine of pi is not quite zero
        return size[rows] * np.cos(angle), sign[rows] * size[rows] * np.abs(np.sin(angle))

    def load(place, rows):
        i_d, i_q = currents(place, rows)
        share = np.hypot(*dq_voltages_v(machine, w[rows], i_d, i_q)) / v_max[rows]
        if machine.saturation is None:
            return share
        against = sign[rows] * torque_of_currents_nm(machine, i_d, i_q) < -1e-9 * size[rows]
        return np.where(np.isnan(share) | against, np.inf, share)

    place, least = first_fit(load, size.size)
    return *currents(place, slice(None)), least * v_max


def weaken_at_torque(machine: SynchronousMachine, omega_rad_s, torque_nm, i_d_a, v_max_v):
    """Follow the curve of constant torque towards negative i_d until the voltage fits.

    Along that curve the square of the voltage is a convex function of i_d, so
    Newton from the starting point comes down on the first fitting i_d without
    jumping over it, or reaches the bottom and shows that there is none.

    Parameters
    ----------
    machine : SynchronousMachine
    omega_rad_s : ndarray, shape (n,)
        Electrical, > 0 [rad/s].
    torque_nm : ndarray, shape (n,)
        [N m]; negative brakes.
    i_d_a : ndarray, shape (n,)
        Starting points on the curve, where the voltage is too high [A].
    v_max_v : ndarray, shape (n,)
        Largest peak phase voltage [V].

    Returns
    -------
    i_d_a, i_q_a : ndarray, shape (n,)
        NaN where no point of the curve fits.
    """
    if machine.saturation is not None:
        return _weaken_saturated(machine, omega_rad_s, torque_nm, i_d_a, v_max_v)
    w, tau = np.asarray(omega_rad_s, float), np.asarray(torque_nm, float) / (1.5 * machine.pole_pairs)
    limit = np.asarray(v_max_v, float) ** 2
    r, l_d, l_q, psi = machine.r_s_warm_ohm, machine.l_d_h, machine.l_q_h, machine.psi_pm_wb
    dl = l_q - l_d
    i_d = np.array(i_d_a, float)
    lost = np.zeros(i_d.shape, bool)

    def i_q_at(x):
        # without torque there is no i_q, even where the torque per i_q is zero too
        return np.divide(tau, psi - dl * x, out=np.zeros_like(x), where=tau != 0.0)

    for _ in range(200):
        i_q = i_q_at(i_d)
        flux = psi + l_d * i_d
        # v^2 = (r^2 i^2) + (2 r w tau) + (w^2 flux^2)
        over = r**2 * (i_d**2 + i_q**2) + 2.0 * r * w * tau + w**2 * (flux**2 + (l_q * i_q) ** 2) - limit
        # d(i_q^2)/d i_d = 2 dl i_q^2 / (psi - dl i_d); i_q is zero where the denominator may be
        bend = np.divide(dl * i_q**2, psi - dl * i_d, out=np.zeros_like(i_d), where=i_q != 0.0)
        slope = 2.0 * (r**2 * (i_d + bend) + w**2 * (l_d * flux + l_q**2 * bend))
        open_ = (over > 1e-14 * limit) & ~lost
        lost |= open_ & (slope <= 0.0)
        open_ &= ~lost
        if not open_.any():
            break
        step = np.where(open_, over / np.where(slope > 0.0, slope, 1.0), 0.0)
        i_d = i_d - step
        lost |= open_ & (tau != 0.0) & (psi - dl * i_d <= 0.0)
    else:
        lost |= open_
    i_d = np.where(lost, np.nan, i_d)
    return i_d, np.where(lost, np.nan, i_q_at(np.where(lost, i_d_a, i_d)))


def _weaken_saturated(machine, omega_rad_s, torque_nm, i_d_a, v_max_v):
    """The same along the curve of constant torque of a table, whose i_q is searched for every i_d."""
    w, torque, v_max = (np.asarray(a, float) for a in (omega_rad_s, torque_nm, v_max_v))
    flux, tau, start = flux_map(machine.saturation), np.abs(torque) / (1.5 * machine.pole_pairs), np.array(i_d_a, float)

    def currents(place, rows):
        i_d, wanted = start[rows] + (flux.low_a - start[rows]) * place, tau[rows]
        top = flux.top_a(i_d)
        at_top = flux.cross(i_d, top)
        there = (wanted > 0.0) & (at_top >= wanted)
        share = np.zeros(i_d.shape)
        k = np.flatnonzero(there)
        share[k] = close_in(lambda u: wanted[k] - flux.cross(i_d[k], u * top[k]), np.zeros(k.size), np.ones(k.size))
        return i_d, np.where(there | (wanted == 0.0), np.copysign(share * top, torque[rows]), np.nan)

    def load(place, rows):
        share = np.hypot(*dq_voltages_v(machine, w[rows], *currents(place, rows))) / v_max[rows]
        return np.where(np.isnan(share), np.inf, share)

    # every place costs a search of its own: fewer of them
    return currents(first_fit(load, start.size, parts=16)[0], slice(None))


def largest_torque(machine: SynchronousMachine, omega_rad_s, torque_nm, v_max_v, i_peak_max_a):
    """Currents of the largest torque in a direction that voltage, current and table allow.

    Up to the speed at which the voltage runs short that is the most torque for the
    current; then voltage and current bind together; where the machine has such a speed, in the end
    the most torque for the voltage, with less than the full current.

    Parameters
    ----------
    machine : SynchronousMachine
    omega_rad_s : ndarray, shape (n,)
        Electrical, >= 0 [rad/s].
    torque_nm : ndarray, shape (n,)
        Only its sign counts: negative brakes.
    v_max_v : ndarray, shape (n,)
        Largest peak phase voltage [V].
    i_peak_max_a : float
        Largest peak phase current, may be infinite where the voltage binds [A].

    Returns
    -------
    i_d_a, i_q_a : ndarray, shape (n,)
        NaN where no current at all fits, or where the best lies on the edge of a saturation table.
    """
    w, v_max, sign = np.asarray(omega_rad_s, float), np.asarray(v_max_v, float), np.where(np.signbit(torque_nm), -1.0, 1.0)
    if machine.saturation is None:
        # the currents of one size of voltage are an ellipse
        r, x_d, x_q = machine.r_s_warm_ohm, w * machine.l_d_h, w * machine.l_q_h
        with np.errstate(divide="ignore", invalid="ignore"):
            det = r**2 + x_d * x_q
            middle, width = -w * x_q * machine.psi_pm_wb / det, np.hypot(r, x_q) * v_max / det
            outer = (np.hypot(r, x_d) * v_max - sign * r * w * machine.psi_pm_wb) / det
        still = det == 0.0
        low, high = (np.where(still, s * i_peak_max_a, np.clip(middle + s * width, -i_peak_max_a, i_peak_max_a)) for s in (-1.0, 1.0))
        outer = np.where(still, i_peak_max_a, np.minimum(outer, i_peak_max_a))

        def top(i_d, rows):
            return outer[rows]
    else:
        flux = flux_map(machine.saturation)
        low, high = (np.full(w.shape, np.clip(end, -i_peak_max_a, i_peak_max_a)) for end in (flux.low_a, flux.high_a))

        def top(i_d, rows):
            return np.minimum(flux.top_a(i_d), i_peak_max_a)

    def load(i_d, i_q, rows):
        share = np.hypot(*dq_voltages_v(machine, w[rows], i_d, sign[rows] * i_q)) / v_max[rows]
        return np.where(np.isnan(share), np.inf, np.maximum(share, np.hypot(i_d, i_q) / i_peak_max_a))

    i_d, i_q = most_torque(load, lambda i_d, i_q, rows: torque_of_currents_nm(machine, i_d, i_q), low, high, top)
    if machine.saturation is not None:
        # the end of the table is no limit of the machine
        lost = flux.on_edge(i_d, i_q)
        i_d, i_q = np.where(lost, np.nan, i_d), np.where(lost, np.nan, i_q)
    return i_d, sign * i_q
