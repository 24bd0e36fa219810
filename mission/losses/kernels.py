"""Loss look-ups for the march: plain arrays, no checks.

A loss at given current and operating point is a broken line of temperature,
kept as ``p[0] + p[1] * (t - knot[0]) + sum_k p[1 + k] * max(t - knot[k], 0)``.
"""

from __future__ import annotations

import numpy as np
from numba import njit


@njit(cache=True, inline="always")
def to_hinges(corner_w, knot_c, n_knots, out):
    """Values at the corner temperatures (k,) -> hinge coefficients ``out`` (k,) (at least 2)."""
    out[0] = corner_w[0]
    if n_knots == 1:
        out[1] = 0.0
        return
    before = 0.0
    for k in range(n_knots - 1):
        slope = (corner_w[k + 1] - corner_w[k]) / (knot_c[k + 1] - knot_c[k])
        out[1 + k] = slope - before
        before = slope


@njit(cache=True, inline="always")
def at_temperature(hinge, knot_c, n_hinges, t_c):
    """Loss [W] at a temperature; never below zero."""
    p = hinge[0] + hinge[1] * (t_c - knot_c[0])
    for k in range(1, n_hinges):
        d = t_c - knot_c[k]
        if d > 0.0:
            p += hinge[1 + k] * d
    return p if p > 0.0 else 0.0


@njit(cache=True)
def period_mean_corners(kind, i_peak, mod_index, phi, scale, i_step, conduction, energy_mean, order, amount, out):
    """Mean loss of kind 0 (switch) or 1 (diode) at every corner temperature: ``out`` (k,).

    ``scale`` (3,): watts per joule for turn-on, turn-off and recovery, in this order.
    """
    cell = i_peak / i_step
    j = int(cell)
    last = conduction.shape[1] - 2
    if j > last:
        j = last
    u = cell - j
    sign = 1.0 - 2.0 * kind
    n_knots = conduction.shape[2]
    for k in range(n_knots):
        out[k] = (1.0 - u) * conduction[kind, j, k, 0] + u * conduction[kind, j + 1, k, 0]
        if kind == 0:
            for e in range(2):
                out[k] += scale[e] * ((1.0 - u) * energy_mean[e, j, k] + u * energy_mean[e, j + 1, k])
        else:
            out[k] += scale[2] * ((1.0 - u) * energy_mean[2, j, k] + u * energy_mean[2, j + 1, k])
    for h in range(order.size):
        turn = sign * mod_index * amount[h] * np.cos(order[h] * phi)
        for k in range(n_knots):
            out[k] += turn * ((1.0 - u) * conduction[kind, j, k, 1 + h] + u * conduction[kind, j + 1, k, 1 + h])


@njit(cache=True)
def instant_corners(kind, current, share, scale, i_step, voltage, energy, out):
    """Loss of kind 0 or 1 at a current [A] with its conducting ``share``, at every corner temperature: ``out`` (k,)."""
    cell = current / i_step
    j = int(cell)
    last = voltage.shape[1] - 2
    if j > last:
        j = last
    u = cell - j
    for k in range(voltage.shape[2]):
        v = (1.0 - u) * voltage[kind, j, k] + u * voltage[kind, j + 1, k]
        p = v * current * share
        if kind == 0:
            p += scale[0] * ((1.0 - u) * energy[0, j, k] + u * energy[0, j + 1, k])
            p += scale[1] * ((1.0 - u) * energy[1, j, k] + u * energy[1, j + 1, k])
        else:
            p += scale[2] * ((1.0 - u) * energy[2, j, k] + u * energy[2, j + 1, k])
        out[k] = p


@njit(cache=True, inline="always")
def zero_sequence(modulation, a, b, c):
    """What is added to all three references (a, b, c include the modulation index)."""
    if modulation == 0:
        return 0.0
    if modulation == 1:
        # m/6 sin 3x = (m/6)(3 s - 4 s^3) with s = a/m; written with the product a b c = -m^3/4 sin 3x
        m2 = (a * a + b * b + c * c) / 1.5
        if m2 < 1e-24:
            return 0.0
        return -4.0 / 6.0 * a * b * c / m2
    high = a if a > b else b
    high = high if high > c else c
    low = a if a < b else b
    low = low if low < c else c
    return -0.5 * (high + low)
