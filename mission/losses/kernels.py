"""Losses of a leg for the march: plain arrays, no checks.

A loss at given current and operating point is a broken line of temperature,
kept as ``p[0] + p[1] * (t - knot[0]) + sum_k p[1 + k] * max(t - knot[k], 0)``. So a
loss is worked out at the corner temperatures of the curves only.

``point`` holds one operating point, ``drive`` what all of them share (places below),
``conduction`` and ``switching`` the rules of :class:`mission.losses.legs.LegPlan`.
"""

from __future__ import annotations

import numpy as np
from numba import njit

# places in ``point``; from SCALE on one factor for every energy curve [W/J]
PEAK, SIZE, SHIFT, PHI, CLIP_FIRST, CLIP_LAST, FSW, EDGE_RATE, SCALE = range(9)
# places in ``drive``
CODE, LEVELS, FOLLOWS_CURRENT, SYMMETRIC, DEAD_S, COMPENSATED, AT_ZERO = range(7)
_HALF, _TURN, _SIXTH, _TWELFTH = 0.5 * np.pi, 2.0 * np.pi, np.pi / 3.0, np.pi / 6.0
_ROOT3_2 = np.sqrt(3.0) / 2.0
# phase held at which rail: sectors of 60 and of 30 degrees
_PHASE_60, _RAIL_60 = np.array([1, 0, 2, 1, 0, 2]), np.array([-1.0, 1.0, -1.0, 1.0, -1.0, 1.0])
_PHASE_30 = np.array([2, 0, 1, 2, 0, 1, 2, 0, 1, 2, 0, 1])
_RAIL_30 = np.array([1.0, 1.0, -1.0, -1.0, 1.0, 1.0, -1.0, -1.0, 1.0, 1.0, -1.0, -1.0])
_GAUSS, _GAUSS_WEIGHT = np.polynomial.legendre.leggauss(5)
_PAIR = 0.5 / np.sqrt(3.0)
_TOP_QUARTER = np.arcsin(np.sqrt(7.0 / 12.0))  # highest point of the reference with a quarter of third harmonic
MOST_BORDERS = 128


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


@njit(cache=True, inline="always")
def wrap(angle):
    """Angle within one turn from zero."""
    return angle - _TURN * np.floor(angle / _TURN)


@njit(cache=True)
def set_point(point, drive, i_peak, size, phi, direction, clip_first, clip_last, fsw, f, v_dc, v_ref, exponent, gate):
    """Fill ``point`` for one operating point; turning backwards the angle of the current falls in time."""
    point[PEAK], point[SIZE] = i_peak, size
    point[PHI] = phi * direction
    point[CLIP_FIRST], point[CLIP_LAST], point[FSW] = clip_first, clip_last, fsw
    point[SHIFT] = 0.0
    if drive[FOLLOWS_CURRENT] > 0.0:
        folded = point[PHI] - np.pi * np.round(point[PHI] / np.pi)
        point[SHIFT] = min(max(folded, -_TWELFTH), _TWELFTH)
    # overmodulation: a reference that moves fast makes more edges its way than against it; in time it moves with the sense of rotation
    point[EDGE_RATE] = (drive[LEVELS] - 1.0) * _TURN * f * direction / (4.0 * fsw) if fsw > 0.0 and clip_first < _HALF else 0.0
    commutated = v_dc / (drive[LEVELS] - 1.0)
    for e in range(v_ref.size):
        point[SCALE + e] = gate[e] * (commutated / v_ref[e]) ** exponent[e] * fsw


@njit(cache=True, inline="always")
def reference_at(code, x, size, shift):
    """Reference of the phase at angle ``x``, not yet clipped, its slope over the angle, and whether a clamp holds that phase."""
    sin_x, cos_x = np.sin(x), np.cos(x)
    a, da = size * sin_x, size * cos_x
    if code == 0:
        return a, da, False
    if code == 1 or code == 2:
        third = size / 6.0 if code == 1 else size / 4.0
        return a + third * sin_x * (3.0 - 4.0 * sin_x * sin_x), da + 3.0 * third * cos_x * (4.0 * cos_x * cos_x - 3.0), False
    b = size * (-0.5 * sin_x - _ROOT3_2 * cos_x)
    db = size * (-0.5 * cos_x + _ROOT3_2 * sin_x)
    c, dc = -a - b, -da - db
    if code == 3:
        # half of the largest and the smallest off: half of the middle one on
        if (a >= b) == (a <= c):
            return 1.5 * a, 1.5 * da, False
        if (b >= a) == (b <= c):
            return a + 0.5 * b, da + 0.5 * db, False
        return a + 0.5 * c, da + 0.5 * dc, False
    phase, rail = 0, 1.0
    if code == 4:
        sector = min(int(wrap(x - shift) / _SIXTH), 5)
        phase, rail = _PHASE_60[sector], _RAIL_60[sector]
    elif code == 5:
        sector = min(int(wrap(x) / _TWELFTH), 11)
        phase, rail = _PHASE_30[sector], _RAIL_30[sector]
    elif code == 6:
        phase = min(int(wrap(x - _TWELFTH) / (2.0 * _SIXTH)), 2)
    else:
        phase = (min(int(wrap(x - _HALF) / (2.0 * _SIXTH)), 2) + 2) % 3
        rail = -1.0
    if phase == 0:
        return rail, 0.0, True
    if phase == 1:
        return a + rail - b, da - db, False
    return a + rail - c, da - dc, False


@njit(cache=True)
def add_losses(theta, weight, point, drive, conduction, switching, i_step, voltage, energy, out):
    """Losses of every position at the angle ``theta`` of the current, times ``weight``, added to ``out`` (positions, k)."""
    sin_t = np.sin(theta)
    flow = 0 if sin_t >= 0.0 else 1
    size = point[PEAK] * abs(sin_t)
    x = theta + point[PHI]
    r, slope, held = reference_at(int(drive[CODE]), x, point[SIZE], point[SHIFT])
    # at the very edge of the linear range the peak still switches; clipped stretches do not, nor a three-level leg at zero
    edge = 1.0 if point[CLIP_FIRST] < _HALF else 1.0 + 1e-9
    active = not held and abs(r) <= edge and (drive[LEVELS] == 2.0 or r != 0.0)
    r = min(max(r, -1.0), 1.0)
    dead = drive[DEAD_S] * point[FSW] if active else 0.0
    both_off_for = 2.0 * dead
    if dead > 0.0 and drive[COMPENSATED] == 0.0:
        above = 0.5 * (1.0 + r) if drive[LEVELS] == 2.0 else (r if r >= 0.0 else 1.0 + r)
        taking = above if flow == 0 else 1.0 - above
        if taking <= dead:
            # a pulse of the switch that takes the current over never comes if it is shorter than the dead time
            active = False
            both_off_for = taking + dead
    move = 0.0
    if drive[COMPENSATED] == 0.0:
        move = dead if flow == 1 else -dead
    at_p, at_z, at_n = 0.0, 0.0, 0.0
    if drive[LEVELS] == 2.0:
        at_p = min(max(0.5 * (1.0 + r) + move, 0.0), 1.0)
        at_n = 1.0 - at_p
    elif r >= 0.0:
        at_p = min(max(r + move, 0.0), 1.0)
        at_z = 1.0 - at_p
    else:
        at_z = min(max(1.0 + r + move, 0.0), 1.0)
        at_n = 1.0 - at_z
    both_off = min(both_off_for, at_n if flow == 0 else at_p)
    cell = size / i_step
    j = int(cell)
    last = voltage.shape[1] - 2
    if j > last:
        j = last
    u = cell - j
    n_k = voltage.shape[2]
    for rule in range(conduction.shape[0]):
        if conduction[rule, 2] != flow:
            continue
        where = conduction[rule, 3]
        if where == 0:
            share = at_p
        elif where == 1:
            share = at_z
        elif where == 2:
            share = at_n
        elif where == 3:
            share = at_p - both_off
        elif where == 4:
            share = at_n - both_off
        else:
            share = both_off
        if share <= 0.0:
            continue
        position, curve = conduction[rule, 0], conduction[rule, 1]
        p = weight * share * size
        for k in range(n_k):
            out[position, k] += p * ((1.0 - u) * voltage[curve, j, k] + u * voltage[curve, j + 1, k])
    if not active or point[PEAK] <= 0.0:
        return
    # edges in a switching period: one each; in overmodulation more the way the reference moves, never less than none
    lean = slope * point[EDGE_RATE]
    rising, falling = 1.0 + lean, 1.0 - lean
    if lean > 1.0:
        rising, falling = 2.0 * lean, 0.0
    elif lean < -1.0:
        rising, falling = 0.0, -2.0 * lean
    for rule in range(switching.shape[0]):
        if switching[rule, 2] != flow:
            continue
        side = switching[rule, 3]
        if (side == 1 and r < 0.0) or (side == 2 and r >= 0.0):
            continue
        position, curve = switching[rule, 0], switching[rule, 1]
        p = weight * point[SCALE + curve] * (rising if (switching[rule, 4] == 0) == (flow == 0) else falling)
        for k in range(n_k):
            out[position, k] += p * ((1.0 - u) * energy[curve, j, k] + u * energy[curve, j + 1, k])


@njit(cache=True)
def _crossings(level, code, point, out, n):
    """Angles of the voltage where the reference passes ``level``, into ``out`` from place ``n`` on; returns the next place."""
    size, shift = point[SIZE], point[SHIFT]
    for k in range(12):
        begin, middle_cut, end = shift + k * _TWELFTH, -1.0, shift + (k + 1) * _TWELFTH
        if code == 2:
            # the only one that turns inside a piece of 30 degrees
            for top in (_TOP_QUARTER, np.pi - _TOP_QUARTER, np.pi + _TOP_QUARTER, _TURN - _TOP_QUARTER):
                if begin < top < end:
                    middle_cut = top
        for half in range(2 if middle_cut > 0.0 else 1):
            low = begin if half == 0 else middle_cut
            high = end if half == 1 or middle_cut < 0.0 else middle_cut
            low, high = low + 1e-9, high - 1e-9
            begins = reference_at(code, low, size, shift)[0] >= level
            if begins == (reference_at(code, high, size, shift)[0] >= level):
                continue
            for _ in range(40):
                middle = 0.5 * (low + high)
                if (reference_at(code, middle, size, shift)[0] >= level) == begins:
                    low = middle
                else:
                    high = middle
            if n < MOST_BORDERS - 24:
                out[n] = 0.5 * (low + high)
                n += 1
    return n


@njit(cache=True)
def jumps(point, drive, out, at_zero):
    """Angles of the current within a turn where a loss jumps, into ``out``; returns how many.

    ``at_zero``: those at zero current too, where a switching energy does not vanish.
    """
    code = int(drive[CODE])
    n = 0
    shift = point[SHIFT]
    if code == 4:
        for k in range(6):
            out[n + k] = shift + k * _SIXTH
        n += 6
    elif code == 5:
        for k in range(12):
            out[n + k] = k * _TWELFTH
        n += 12
    elif code >= 6:
        begin = _TWELFTH if code == 6 else _HALF
        for k in range(3):
            out[n + k] = begin + 2.0 * k * _SIXTH
        n += 3
    for clip in (point[CLIP_FIRST], point[CLIP_LAST]):
        if clip < _HALF:
            out[n], out[n + 1], out[n + 2], out[n + 3] = clip, np.pi - clip, np.pi + clip, _TURN - clip
            n += 4
    three = drive[LEVELS] == 3.0
    if three:
        if code < 4:
            out[n], out[n + 1] = 0.0, np.pi
            n += 2
        else:
            n = _crossings(0.0, code, point, out, n)
    if drive[DEAD_S] > 0.0 and drive[COMPENSATED] == 0.0 and point[FSW] > 0.0:
        dead = drive[DEAD_S] * point[FSW]
        if three:
            n = _crossings(dead, code, point, out, n)
            n = _crossings(-dead, code, point, out, n)
            n = _crossings(1.0 - dead, code, point, out, n)
            n = _crossings(dead - 1.0, code, point, out, n)
        else:
            n = _crossings(1.0 - 2.0 * dead, code, point, out, n)
            n = _crossings(2.0 * dead - 1.0, code, point, out, n)
    for k in range(n):
        out[k] = wrap(out[k] - point[PHI])
    if at_zero and drive[AT_ZERO] > 0.0:
        out[n], out[n + 1] = 0.0, np.pi
        n += 2
    return n


@njit(cache=True)
def _sort(values, n):
    """Rising order in place; short lists."""
    for a in range(1, n):
        v = values[a]
        b = a - 1
        while b >= 0 and values[b] > v:
            values[b + 1] = values[b]
            b -= 1
        values[b + 1] = v


@njit(cache=True)
def period_means(point, drive, conduction, switching, i_step, voltage, energy, half, border, out):
    """Mean losses of every position over a period at the corner temperatures: ``out`` (positions, k).

    ``half`` like ``out`` and ``border`` (MOST_BORDERS,) are work space.
    """
    n = jumps(point, drive, border, True)
    for k in range(12):
        border[n + k] = wrap(point[SHIFT] + k * _TWELFTH - point[PHI])
    n += 12
    symmetric = drive[SYMMETRIC] > 0.0
    end = np.pi if symmetric else _TURN
    border[n], border[n + 1], border[n + 2] = 0.0, np.pi, end
    n += 3
    _sort(border, n)
    half[:] = 0.0
    for k in range(n - 1):
        a, b = border[k], border[k + 1]
        if b > end or b - a < 1e-10:
            continue
        for g in range(_GAUSS.size):
            theta = 0.5 * (a + b) + 0.5 * (b - a) * _GAUSS[g]
            add_losses(theta, (b - a) * _GAUSS_WEIGHT[g] / (2.0 * _TURN), point, drive, conduction, switching, i_step, voltage, energy, half)
    for position in range(out.shape[0]):
        for k in range(out.shape[1]):
            out[position, k] = half[position, k] + (half[position ^ 1, k] if symmetric else 0.0)


@njit(cache=True)
def angle_nodes(count, point, drive, conduction, switching, knot_c, i_step, voltage, energy, corner, border, nodes):
    """Losses of every position along a turn of the current as hinges ``nodes`` (count + 1, positions, k), linear in between.

    A node beside a jump holds the mean weighted with its share of the two cells around it, so that the
    broken line keeps the area of the true course.
    """
    n_positions, n_k = corner.shape
    spacing = _TURN / count
    symmetric = drive[SYMMETRIC] > 0.0
    many = count // 2 if symmetric else count
    n = jumps(point, drive, border, True)
    _sort(border, n)
    for j in range(many):
        middle = j * spacing
        broken = False
        for b in range(n):
            away = abs(border[b] - middle)
            if away < spacing or _TURN - away < spacing:
                broken = True
        for position in range(n_positions):
            for k in range(n_k):
                corner[position, k] = 0.0
        if not broken:
            add_losses(middle, 1.0, point, drive, conduction, switching, i_step, voltage, energy, corner)
        else:
            for side in (-1.0, 1.0):
                # cuts inside this cell, from the node outwards
                at = 0.0
                while at < spacing:
                    until = spacing
                    for b in range(n):
                        away = wrap(side * (border[b] - middle))
                        if at + 1e-9 < away < until:
                            until = away
                    if until > spacing - 1e-9:
                        until = spacing
                    for sign in (-1.0, 1.0):
                        d = 0.5 * (at + until) + sign * _PAIR * (until - at)
                        weight = 0.5 * (until - at) / spacing * (1.0 - d / spacing)
                        add_losses(middle + side * d, weight, point, drive, conduction, switching, i_step, voltage, energy, corner)
                    at = until
        for position in range(n_positions):
            before = 0.0
            nodes[j, position, 0] = corner[position, 0]
            for k in range(1, n_k):
                slope = (corner[position, k] - corner[position, k - 1]) / (knot_c[k] - knot_c[k - 1])
                nodes[j, position, k] = slope - before
                before = slope
    if symmetric:
        for j in range(many):
            for position in range(n_positions):
                for k in range(nodes.shape[2]):
                    nodes[j + many, position, k] = nodes[j, position ^ 1, k]
    for position in range(n_positions):
        for k in range(nodes.shape[2]):
            nodes[count, position, k] = nodes[0, position, k]
