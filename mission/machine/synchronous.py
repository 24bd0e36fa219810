"""Currents of a synchronous machine: maximum torque per ampere, then field weakening.

Everything here is for positive speed and in rotor coordinates: i_q > 0 drives,
i_q < 0 brakes. Negative speed is the mirror image and is handled by the caller.
All functions are vectorised over operating points.

The formulas follow from the dq model

    v_d = R i_d - w L_q i_q,   v_q = R i_q + w (L_d i_d + psi),
    T = 3/2 p (psi + (L_d - L_q) i_d) i_q

by setting the derivative of the torque along the circle of constant current to zero.
"""

from __future__ import annotations

import numpy as np

from .spec import SynchronousMachine


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
    w = np.asarray(omega_rad_s, float)
    i_d, i_q = np.asarray(i_d_a, float), np.asarray(i_q_a, float)
    return machine.r_s_ohm * i_d - w * machine.l_q_h * i_q, machine.r_s_ohm * i_q + w * (
        machine.l_d_h * i_d + machine.psi_pm_wb
    )


def torque_of_currents_nm(machine: SynchronousMachine, i_d_a, i_q_a):
    """Air-gap torque [N m] of peak phase currents in rotor coordinates [A]."""
    i_d, i_q = np.asarray(i_d_a, float), np.asarray(i_q_a, float)
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
        ``i_q_a`` >= 0; brake with ``-i_q_a``.

    Examples
    --------
    >>> m = SynchronousMachine(
    ...     kind="synchronous", pole_pairs=4, r_s_ohm=0.02, l_d_h=0.4e-3, l_q_h=0.4e-3, psi_pm_wb=0.2
    ... )
    >>> [float(x) for x in mtpa_from_current(m, 100.0)]
    [0.0, 100.0]
    """
    i = np.asarray(i_peak_a, float)
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
        ``i_q_a`` has the sign of the torque.
    """
    torque = np.asarray(torque_nm, float)
    tau = np.abs(torque) / (1.5 * machine.pole_pairs)
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
    if machine.l_d_h > machine.l_q_h:
        # beyond this i_d the torque would change its sign
        ratio = machine.psi_pm_wb / ((machine.l_d_h - machine.l_q_h) * np.where(size > 0.0, size, 1.0))
        end = np.arccos(-np.minimum(ratio, 1.0))

    def volts(angle, rows=slice(None)):
        return np.hypot(
            *dq_voltages_v(machine, w[rows], size[rows] * np.cos(angle), sign[rows] * size[rows] * np.sin(angle))
        )

    # The voltage need not fall all the way (braking with a large resistance): look along the
    # whole way for the first angle that fits, then close in on it.
    low = start.copy()
    high = np.full_like(start, np.nan)
    best, best_v = start.copy(), volts(start)
    parts = 48
    for k in range(1, parts + 1):
        angle = start + (end - start) * (k / parts)
        v = volts(angle)
        fits = np.isnan(high) & (v <= v_max)
        high[fits] = angle[fits]
        low = np.where(np.isnan(high), angle, low)
        better = v < best_v
        best, best_v = np.where(better, angle, best), np.where(better, v, best_v)
    missed = np.flatnonzero(np.isnan(high))
    if missed.size:
        # a window narrower than one part: look at the lowest point itself (golden section)
        width = (end[missed] - start[missed]) / parts
        a, b = np.maximum(best[missed] - width, start[missed]), np.minimum(best[missed] + width, end[missed])
        gold = (np.sqrt(5.0) - 1.0) / 2.0
        for _ in range(40):
            c, d = b - gold * (b - a), a + gold * (b - a)
            left = volts(c, missed) < volts(d, missed)
            a, b = np.where(left, a, c), np.where(left, d, b)
        middle = 0.5 * (a + b)
        v = volts(middle, missed)
        better = v < best_v[missed]
        best_v[missed] = np.where(better, v, best_v[missed])
        fits = v <= v_max[missed]
        high[missed[fits]] = middle[fits]
        low[missed[fits]] = np.maximum(best[missed] - width, start[missed])[fits]
    found = np.flatnonzero(~np.isnan(high))
    if found.size:
        high[found] = _close_in(lambda x: volts(x, found) - v_max[found], low[found], high[found])
        best_v[found] = volts(high[found], found)
    # at the end of the way the sine of pi is not quite zero
    return size * np.cos(high), sign * size * np.abs(np.sin(high)), best_v


def _close_in(excess, low, high):
    """Root between ``low`` (excess > 0) and ``high`` (excess <= 0), from the side that fits.

    False position with the weight of a stuck end halved (Illinois), all rows at once.
    """
    f_low, f_high = excess(low), excess(high)
    side = np.zeros(low.shape, int)
    for _ in range(80):
        with np.errstate(divide="ignore", invalid="ignore"):
            x = (low * f_high - high * f_low) / (f_high - f_low)
        x = np.where((x > low) & (x < high), x, 0.5 * (low + high))
        f = excess(x)
        fits = f <= 0.0
        f_low = np.where(fits & (side == 1), 0.5 * f_low, f_low)
        f_high = np.where(~fits & (side == -1), 0.5 * f_high, f_high)
        high, f_high = np.where(fits, x, high), np.where(fits, f, f_high)
        low, f_low = np.where(fits, low, x), np.where(fits, f_low, f)
        side = np.where(fits, 1, -1)
        if ((high - low) <= 4e-16 * np.abs(high)).all() or (f_high == 0.0).all():
            break
    return high


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
    w, tau = np.asarray(omega_rad_s, float), np.asarray(torque_nm, float) / (1.5 * machine.pole_pairs)
    limit = np.asarray(v_max_v, float) ** 2
    r, l_d, l_q, psi = machine.r_s_ohm, machine.l_d_h, machine.l_q_h, machine.psi_pm_wb
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


def largest_torque_nm(machine: SynchronousMachine, omega_rad_s: float, v_max_v: float, wanted_nm: float) -> float:
    """How much of ``wanted_nm`` the voltage allows at this speed, whatever the current [N m]."""
    low, high = 0.0, 1.0
    for _ in range(60):
        middle = 0.5 * (low + high)
        torque = np.array([middle * wanted_nm])
        i_d, i_q = mtpa_from_torque(machine, torque)
        v = np.hypot(*dq_voltages_v(machine, omega_rad_s, i_d, i_q))
        if v[0] > v_max_v:
            i_d, _ = (
                weaken_at_torque(machine, np.array([omega_rad_s]), torque, i_d, np.array([v_max_v]))
                if omega_rad_s > 0
                else (np.array([np.nan]), None)
            )
        low, high = (low, middle) if np.isnan(i_d[0]) else (middle, high)
    return low * wanted_nm
