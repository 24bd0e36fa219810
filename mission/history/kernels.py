"""The electrothermal march: plain arrays in, plain arrays out, no checks.

Three ways to cross a stretch of time, all with the exact exponential of every
mode and the loss read at the temperature of the middle of the step:

* idle: no current; steps double.
* mean (fast rotation): the mean over the period is marched, steps double; the
  periodic ripple is added in closed form.
* angle (slow rotation, standstill, and the first periods after a jump): the
  electrical angle is marched, every chip has its own loss.

Everything that a step touches lies in one flat work array at fixed places, so
that the compiler can see that nothing overlaps and uses vector instructions
across the chips. Local states are scaled with their output weight: a
junction temperature is the coolant plus the plain sum of its local states plus
the shared part.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from ..losses.kernels import MOST_BORDERS, SCALE, add_losses, jumps, angle_nodes, at_temperature, period_means, set_point, wrap

# Chips stand side by side in lanes, so that a vector instruction takes several at once. The number of lanes has to be known
# when the kernels are compiled; it comes in as the length of a tuple, and a bridge with fewer chips leaves some lanes cold.
LANES = (12, 30)
L_MAX, S_MAX, K_MAX = 16, 96, 8  # local modes a chip, shared modes, hinge coefficients; march.py checks them
LANE = 32  # from one row of lanes to the next
# places in the work array w
X_L, A_L, B_L = 0, 512, 1024  # [mode, chip]
X_S, A_S, W_S, HEAT = 1536, 1632, 1728, 1824  # [mode]
A_S_MANY, W_S_MANY = 1920, 2016  # [mode] factors of the shared modes over several steps at once
B_S = 2112  # [chip, S_MAX] heat input, one chip after the other
C_S = 5184  # [mode, chip] output
T, FREE, P, P_MID, ENERGY, D_SELF = 8256, 8288, 8320, 8352, 8384, 8416  # [chip]
SHARED, GAIN, BASE, P_SUM = 8448, 8480, 8512, 8544  # [chip] coolant plus shared part, its latest change, its value then; sum of losses since then
HINGE = 8576  # [coefficient, chip]
KNOT = 8832  # [corner]
CASE_L, CASE_S, CASE = 8848, 9360, 12432  # [mode, chip], [mode, chip], [chip]
W_SIZE = 12480

# The same places as unsigned numbers, for the innermost loops: an index that cannot be negative needs no check,
# and without the check the loops become vector instructions.
U_LANE, U_S_MAX, U_X_L, U_A_L, U_B_L, U_X_S, U_A_S, U_W_S, U_HEAT, U_SHARED, U_GAIN, U_BASE, U_P_SUM = (
    np.uint64(place) for place in (LANE, S_MAX, X_L, A_L, B_L, X_S, A_S, W_S, HEAT, SHARED, GAIN, BASE, P_SUM))
U_B_S, U_C_S, U_T, U_FREE, U_P, U_P_MID, U_ENERGY, U_D_SELF, U_HINGE, U_KNOT, U_CASE_L, U_CASE_S, U_CASE = (
    np.uint64(place) for place in (B_S, C_S, T, FREE, P, P_MID, ENERGY, D_SELF, HINGE, KNOT, CASE_L, CASE_S, CASE))
U_1, U_2, U_3, U_6, U_A_S_MANY, U_W_S_MANY = (np.uint64(v) for v in (1, 2, 3, 6, A_S_MANY, W_S_MANY))

# scalars carried from row to row
TIME, THETA, COOLANT, REGIME, SETTLE, LEVEL, WINDOW_CYCLES, WINDOW_START, H_LOADED, WINDOW_PHASE = range(10)
N_NOW = 10
# columns of the row table
DT, FREQ, DIRECTION, I_PEAK, MOD, PHI, ANGLE_OFFSET, T_COOLANT, CLIP_FIRST, CLIP_LAST, FSW, V_DC = range(12)
N_ROW = 12
# settings
F_SLOW, STEPS, H0, H_MAX, SETTLE_PERIODS, SETTLE_K, T_STOP, SHARED_EVERY_S, SURFACE_UP, SURFACE_DOWN, SURFACE_RISE = range(11)
IDLE, MEAN, ANGLE = 0, 1, 2
OK, RUNAWAY, CHANGE = 0, 1, 2
NODES, RIPPLE_NODES = 128, 64  # along a turn of the current
CHUNK = 256
U_NODE_LAST = np.uint64(NODES - 1)
TURN = 2.0 * np.pi
TINY_W = 1e-9  # keeps decaying states out of the denormal range, where the processor crawls
THIRD = 2.0 * np.pi / 3.0


@njit(cache=True)
def step_factors(h, lam_l, rho, lam_s, out):
    """Factors of an exact step of length ``h`` into ``out`` (2 L n + n + 2 S): keep, heat in (local), own rise, keep, gain (shared)."""
    n_l, n = lam_l.shape
    n_s = lam_s.size
    own = 2 * n_l * n
    for i in range(n):
        out[own + i] = 0.0
    for k in range(n_l):
        for i in range(n):
            e = np.expm1(-lam_l[k, i] * h)
            out[k * n + i] = 1.0 + e
            b = -rho[k, i] * e / lam_l[k, i]
            out[n_l * n + k * n + i] = b
            out[own + i] += b
    for s in range(n_s):
        e = np.expm1(-lam_s[s] * h)
        out[own + n + s] = 1.0 + e
        out[own + n + n_s + s] = -e / lam_s[s]


@njit(cache=True, inline="always")
def load_factors(lanes, w, n_l, n_s, factors):
    """Put the factors of a step into their places."""
    n = np.uint64(len(lanes))
    modes = np.uint64(n_l)
    m = modes * n
    s_first, s_many = m + m + n, np.uint64(n_s)
    for k in range(modes):
        for i in range(n):
            w[U_A_L + k * U_LANE + i] = factors[k * n + i]
            w[U_B_L + k * U_LANE + i] = factors[m + k * n + i]
    for i in range(n):
        w[U_D_SELF + i] = factors[m + m + i]
    for s in range(s_many):
        w[U_A_S + s] = factors[s_first + s]
        w[U_W_S + s] = factors[s_first + s_many + s]


@njit(cache=True, inline="always")
def hinge_losses(lanes, w, n_h, source, target):
    """Losses of all chips at the temperatures in ``source``, into ``target``."""
    n = np.uint64(len(lanes))
    for i in range(n):
        w[target + i] = w[U_HINGE + i] + w[U_HINGE + U_LANE + i] * (w[source + i] - w[U_KNOT])
    for k in range(U_1, np.uint64(n_h)):
        for i in range(n):
            d = w[source + i] - w[U_KNOT + k]
            d = d if d > 0.0 else 0.0
            w[target + i] += w[U_HINGE + U_LANE + U_LANE * k + i] * d
    for i in range(n):
        w[target + i] = w[target + i] if w[target + i] > TINY_W else TINY_W


@njit(cache=True, inline="always")
def local_step(lanes, w, n_l, n_h, part):
    """Local modes of all chips over one step, exact, loss at the predicted middle temperature.

    The shared part moves on by ``part`` of what its latest step added: enough for
    the temperature of the loss; :func:`shared_step` sets it right.
    """
    n = np.uint64(len(lanes))
    for i in range(n):
        w[U_SHARED + i] += part * w[U_GAIN + i]
        w[U_FREE + i] = w[U_SHARED + i]
    for k in range(np.uint64(n_l)):
        for i in range(n):
            w[U_X_L + k * U_LANE + i] *= w[U_A_L + k * U_LANE + i]
            w[U_FREE + i] += w[U_X_L + k * U_LANE + i]
    hinge_losses(lanes, w, n_h, U_T, U_P)
    for i in range(n):
        w[U_P_MID + i] = 0.5 * (w[U_T + i] + w[U_FREE + i] + w[U_D_SELF + i] * w[U_P + i])
    hinge_losses(lanes, w, n_h, U_P_MID, U_P)
    for i in range(n):
        w[U_T + i] = w[U_FREE + i] + w[U_D_SELF + i] * w[U_P + i]
    for k in range(np.uint64(n_l)):
        for i in range(n):
            w[U_X_L + k * U_LANE + i] += w[U_B_L + k * U_LANE + i] * w[U_P + i]


@njit(cache=True, inline="always")
def shared_step(lanes, w, n_s, factor, t_cool, keep, gain):
    """Shared modes over the time since their latest step, with the mean power ``factor * w[P_SUM]``, exact.

    ``keep`` and ``gain``: places of their factors.
    """
    n = np.uint64(len(lanes))
    for s in range(np.uint64(n_s)):
        w[U_HEAT + s] = 0.0
    for i in range(n):
        for s in range(np.uint64(n_s)):
            w[U_HEAT + s] += w[U_B_S + i * U_S_MAX + s] * w[U_P_SUM + i]
    for s in range(np.uint64(n_s)):
        w[U_X_S + s] = w[keep + s] * w[U_X_S + s] + w[gain + s] * factor * w[U_HEAT + s]
    for i in range(n):
        # what stands in SHARED is the extrapolation; T takes the difference, GAIN the true change
        w[U_FREE + i] = w[U_SHARED + i]
        w[U_SHARED + i] = t_cool
        w[U_P_SUM + i] = 0.0
    for s in range(np.uint64(n_s)):
        for i in range(n):
            w[U_SHARED + i] += w[U_C_S + s * U_LANE + i] * w[U_X_S + s]
    for i in range(n):
        w[U_T + i] += w[U_SHARED + i] - w[U_FREE + i]
        w[U_GAIN + i] = w[U_SHARED + i] - w[U_BASE + i]
        w[U_BASE + i] = w[U_SHARED + i]


@njit(cache=True)
def case_points(lanes, w, n_l, n_s, t_cool):
    """Case temperatures under the chips into their place."""
    n = np.uint64(len(lanes))
    for i in range(n):
        w[U_CASE + i] = t_cool
    for k in range(np.uint64(n_l)):
        for i in range(n):
            w[U_CASE + i] += w[U_CASE_L + k * U_LANE + i] * w[U_X_L + k * U_LANE + i]
    for s in range(np.uint64(n_s)):
        for i in range(n):
            w[U_CASE + i] += w[U_CASE_S + s * U_LANE + i] * w[U_X_S + s]


@njit(cache=True)
def shared_part(lanes, w, n_s, t_cool):
    """Coolant plus shared modes, seen at each chip; after a change from outside."""
    n = np.uint64(len(lanes))
    for i in range(n):
        w[U_SHARED + i] = t_cool
        w[U_GAIN + i] = 0.0
    for s in range(np.uint64(n_s)):
        for i in range(n):
            w[U_SHARED + i] += w[U_C_S + s * U_LANE + i] * w[U_X_S + s]
    for i in range(n):
        w[U_BASE + i] = w[U_SHARED + i]


@njit(cache=True)
def junctions(lanes, w, n_l, n_s, t_cool):
    """Junction temperatures from the states."""
    n = np.uint64(len(lanes))
    shared_part(lanes, w, n_s, t_cool)
    for i in range(n):
        w[U_T + i] = w[U_SHARED + i]
    for k in range(np.uint64(n_l)):
        for i in range(n):
            w[U_T + i] += w[U_X_L + k * U_LANE + i]


@njit(cache=True, inline="always")
def leg_losses(leg, psi, nodes, w):
    """Losses of one leg at the angle ``psi`` (within a turn) of its current.

    ``leg``: 0, 1, 2 as an unsigned number; ``nodes`` (NODES + 1, positions, k).
    """
    place = psi * (NODES / TURN)
    j = np.uint64(place)
    if j > U_NODE_LAST:
        j = U_NODE_LAST
    u = place - float(j)
    for position in range(np.uint64(nodes.shape[1])):
        chip = U_HINGE + U_6 * (position // U_2) + U_2 * leg + position % U_2
        for k in range(np.uint64(nodes.shape[2])):
            w[chip + U_LANE * k] = nodes[j, position, k] + u * (nodes[j + U_1, position, k] - nodes[j, position, k])


@njit(cache=True)
def exact_losses(leg, psi, point, drive, conduction, switching, knot_c, i_step, voltage, energy, corner, w):
    """Losses of one leg at the angle ``psi`` of its current, not read off a line between nodes: for losses that jump."""
    n_k = knot_c.size
    for position in range(corner.shape[0]):
        for k in range(n_k):
            corner[position, k] = 0.0
    add_losses(psi, 1.0, point, drive, conduction, switching, i_step, voltage, energy, corner)
    for position in range(corner.shape[0]):
        chip = HINGE + 6 * (position // 2) + 2 * leg + position % 2
        w[chip] = corner[position, 0]
        w[chip + LANE] = 0.0
        before = 0.0
        for k in range(1, n_k):
            slope = (corner[position, k] - corner[position, k - 1]) / (knot_c[k] - knot_c[k - 1])
            w[chip + LANE * k] = slope - before
            before = slope


@njit(cache=True)
def turn_stops(point, drive, jump_at, stops):
    """Angles within a turn at which a loss of one of the three legs jumps, rising, into ``stops``; returns how many."""
    # what jumps where the current changes its sign is small: no step needs to end there
    n = jumps(point, drive, jump_at, False)
    m = 0
    for k in range(n):
        for leg in range(3):
            stops[m] = wrap(jump_at[k] + THIRD * leg)
            m += 1
    stops[:m].sort()
    kept = 0
    for k in range(m):
        if kept == 0 or stops[k] - stops[kept - 1] > 1e-6:
            stops[kept] = stops[k]
            kept += 1
    return kept


@njit(cache=True)
def to_next_stop(theta, direction, stops, n_stops):
    """Angle to turn until the next stop lies behind, at least a little."""
    best = TURN
    for k in range(n_stops):
        away = wrap(direction * (stops[k] - theta))
        if away > 1e-7:
            best = min(best, away)
    return best


@njit(cache=True)
def feed(first, n_points, values, times, half, ripple, phase, last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count):
    """Feed samples ``values`` (points, n) of n signals from ``first`` on to their turning-point filters."""
    for i in range(values.shape[1]):
        signal = first + i
        head = heading[signal]
        newest = last[signal, 0]
        at = -1  # where in this feed the newest point stands; -1: it came with an earlier feed
        k = p_count[signal]
        for j in range(n_points):
            value = values[j, i]
            if value == newest and head != 2:
                continue
            up = 1 if value > newest else -1
            if up != head and head != 2:
                p_value[signal, k] = newest
                if at >= 0:
                    p_time[signal, k] = times[at]
                    p_half[signal, k] = half
                    p_ripple[signal, k] = ripple[i]
                    p_phase[signal, k] = np.int16(phase)
                else:
                    p_time[signal, k] = last[signal, 1]
                    p_half[signal, k] = last[signal, 2]
                    p_ripple[signal, k] = last[signal, 3]
                    p_phase[signal, k] = np.int16(last[signal, 4])
                k += 1
            head = up if head != 2 else 0
            newest = value
            at = j
        if at >= 0:
            last[signal, 0] = newest
            last[signal, 1] = times[at]
            last[signal, 2] = half
            last[signal, 3] = ripple[i]
            last[signal, 4] = phase
        heading[signal] = head
        p_count[signal] = k


@njit(cache=True)
def flush_points(last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count):
    """Hand over the newest point of every signal at the end of the mission."""
    for signal in range(heading.size):
        if heading[signal] != 2:
            k = p_count[signal]
            p_value[signal, k] = last[signal, 0]
            p_time[signal, k] = last[signal, 1]
            p_half[signal, k] = last[signal, 2]
            p_ripple[signal, k] = last[signal, 3]
            p_phase[signal, k] = np.int16(last[signal, 4])
            p_count[signal] = k + 1
            heading[signal] = 2


@njit(cache=True)
def ripple_of(position, flow, t_mean, op, turn_nodes, coarse, knot_c, lam, rho, nodes, result):
    """Periodic ripple of one chip about its mean temperature, its own feedback included.

    Power is a broken line over the angle, so the response of each mode is exact.
    ``coarse`` (ripple nodes + 1, positions, k): losses along a turn. ``flow``: which half of it loads
    the chip (0, 1; 2: both). ``result``: kappa (what the ripple adds to the mean loss, relative), lowest
    and highest ripple [K], loss at the mean temperature, that temperature, nodes of a turn. ``nodes``
    (ripple nodes + 1, L) gets the scaled states less their means, from the start of the loaded part on.
    """
    n = turn_nodes if flow == 2 else turn_nodes // 2
    begin = turn_nodes // 2 if flow == 1 else 0
    n_l = lam.size
    n_h = max(knot_c.size - 1, 1)
    f = op[FREQ]
    stride = 1
    if op[DIRECTION] < 0.0:
        # turning backwards the loaded part is crossed from its other end
        begin, stride = begin + n, -1
    dt = 1.0 / (f * turn_nodes)
    rest = 1.0 / f - n * dt if flow != 2 else 0.0
    a_k, w0, w1, over, x_k = np.empty(n_l), np.empty(n_l), np.empty(n_l), np.empty(n_l), np.empty(n_l)
    for k in range(n_l):
        z = lam[k] * dt
        a_k[k] = np.exp(-z)
        if z < 1e-5:
            w1[k] = dt * (0.5 - z / 6.0)
            w0[k] = dt * (0.5 - z / 3.0)
        else:
            mean = -np.expm1(-z) / z
            w1[k] = dt * (1.0 - mean) / z
            w0[k] = dt * (mean - a_k[k]) / z
        over[k] = np.exp(-lam[k] * rest) / -np.expm1(-lam[k] / f)
    tau = np.zeros(n + 1)
    p = np.empty(n + 1)
    mean_before = 0.0
    mean_p = 0.0
    for turn in range(3):
        mean_p = 0.0
        for j in range(n + 1):
            p[j] = at_temperature(coarse[begin + stride * j, position], knot_c, n_h, t_mean + tau[j])
            mean_p += p[j] if 0 < j < n else 0.5 * p[j]
        mean_p /= turn_nodes
        if turn == 0:
            mean_before = mean_p
        for k in range(n_l):
            x_k[k] = 0.0
        for j in range(n):
            for k in range(n_l):
                x_k[k] = a_k[k] * x_k[k] + w0[k] * p[j] + w1[k] * p[j + 1]
        for k in range(n_l):
            x_k[k] *= over[k]
            nodes[0, k] = rho[k] * (x_k[k] - mean_p / lam[k])
        for j in range(n):
            for k in range(n_l):
                x_k[k] = a_k[k] * x_k[k] + w0[k] * p[j] + w1[k] * p[j + 1]
                nodes[j + 1, k] = rho[k] * (x_k[k] - mean_p / lam[k])
        for j in range(n + 1):
            total = 0.0
            for k in range(n_l):
                total += nodes[j, k]
            tau[j] = total
    result[0] = mean_p / mean_before - 1.0 if mean_before > 0.0 else 0.0
    result[1], result[2] = tau[0], tau[0]
    for j in range(n + 1):
        result[1] = min(result[1], tau[j])
        result[2] = max(result[2], tau[j])
    result[3] = mean_before
    result[4] = t_mean
    result[5] = turn_nodes


@njit(cache=True)
def ripples(op, w, group, group_position, flows, group_lam, group_rho, turn_nodes, coarse, knot_c, nodes, out):
    """Ripple of every group of like chips at their mean temperature: ``nodes`` (G, ., L) and ``out`` (G, 6)."""
    for g in range(group_position.size):
        total, count = 0.0, 0
        for i in range(group.size):
            if group[i] == g:
                total += w[T + i]
                count += 1
        position = group_position[g]
        ripple_of(position, flows[position], total / count, op, turn_nodes, coarse, knot_c, group_lam[g], group_rho[g], nodes[g], out[g])


@njit(cache=True)
def small_change(op, made_for):
    """Whether a ripple made for one operating point serves another when scaled with the loss."""
    return (abs(op[FREQ] - made_for[FREQ]) <= 0.005 * made_for[FREQ] and op[DIRECTION] == made_for[DIRECTION]
            and abs(op[I_PEAK] - made_for[I_PEAK]) <= 0.03 * made_for[I_PEAK]
            and abs(op[MOD] - made_for[MOD]) <= 0.02 and abs(op[PHI] - made_for[PHI]) <= 0.03
            and abs(op[CLIP_FIRST] - made_for[CLIP_FIRST]) <= 0.02 and abs(op[CLIP_LAST] - made_for[CLIP_LAST]) <= 0.02
            and abs(op[FSW] - made_for[FSW]) <= 0.02 * made_for[FSW] and abs(op[V_DC] - made_for[V_DC]) <= 0.01 * made_for[V_DC])


@njit(cache=True)
def ripple_share(w, n_h, i, result):
    """A chip's loss over the loss that its group's ripple was made for."""
    if result[3] <= 0.0:
        return 1.0
    p = w[HINGE + i] + w[HINGE + LANE + i] * (w[T + i] - w[KNOT])
    for k in range(1, n_h):
        d = w[T + i] - w[KNOT + k]
        if d > 0.0:
            p += w[HINGE + LANE + LANE * k + i] * d
    return max(p, 0.0) / (result[3] * (1.0 + result[0]))


@njit(cache=True)
def add_ripple(sign, op, theta_rotor, w, n_l, n_h, group, group_position, flows, group_lam, group_rho, ripple, nodes):
    """Turn mean states into physical ones at the present angle (sign +1), or back (-1)."""
    f = op[FREQ]
    theta = theta_rotor + op[ANGLE_OFFSET]
    for i in range(group.size):
        g = group[i]
        flow = flows[2 * (i // 6) + i % 2]
        turn_nodes = int(ripple[g, 5])
        share = sign * ripple_share(w, n_h, i, ripple[g])
        # from the start of the part of the turn that loads the chip
        psi = theta - THIRD * ((i % 6) // 2)
        if flow == 1 or (flow == 2 and group_position[g] % 2 != i % 2):
            psi -= np.pi
        loaded = TURN if flow == 2 else np.pi
        if op[DIRECTION] < 0.0:
            psi = loaded - psi
        psi = wrap(psi)
        change = 0.0
        if psi < loaded:
            place = psi / TURN * turn_nodes
            j = min(int(place), turn_nodes - 1)
            u = place - j
            for k in range(n_l):
                d = share * ((1.0 - u) * nodes[g, j, k] + u * nodes[g, j + 1, k])
                w[X_L + k * LANE + i] += d
                change += d
        else:
            since = (psi - np.pi) / (TURN * f)
            for k in range(n_l):
                # after the half wave the state itself decays, its mean does not
                mean = group_rho[g, k] / group_lam[g, k] * ripple[g, 3] * (1.0 + ripple[g, 0])
                d = share * ((nodes[g, turn_nodes // 2, k] + mean) * np.exp(-group_lam[g, k] * since) - mean)
                w[X_L + k * LANE + i] += d
                change += d
        w[T + i] += change


@njit(cache=True)
def mean_hinges(w, means, knot_c, group, ripple):
    """Mean losses with the ripple's share, as hinges of every chip; ``means`` (positions, k) at the corner temperatures."""
    n_k = knot_c.size
    for i in range(group.size):
        position = 2 * (i // 6) + i % 2
        gain = 1.0 + ripple[group[i], 0]
        w[HINGE + i] = means[position, 0] * gain
        w[HINGE + LANE + i] = 0.0
        before = 0.0
        for k in range(1, n_k):
            slope = (means[position, k] - means[position, k - 1]) / (knot_c[k] - knot_c[k - 1])
            w[HINGE + LANE * k + i] = (slope - before) * gain
            before = slope


@njit(cache=True)
def cross(lanes, row, duration, regime, phase, op, w, n_l, n_s, lam_l, rho, lam_s, levels, odd,
          fine, stops, n_stops, point, drive, conduction, switching, i_step, voltage, energy, corner, knot_c, settings, now,
          t_buffer, t_time, c_buffer, c_time, no_ripple, extreme, envelope,
          last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count):
    """Cross ``duration`` in one regime (ANGLE with f = 0 is standstill).

    ``extreme`` (4, n) gets lowest temperature, its time, highest, its time;
    ``envelope`` (4, n): running junction and case extremes of the row.
    """
    n = len(lanes)
    n_u = np.uint64(n)
    n_k = knot_c.size
    n_h = max(n_k - 1, 1)
    t_cool = now[COOLANT]
    start = now[TIME]
    turning = regime == ANGLE and op[FREQ] > 0.0
    omega = 2.0 * np.pi * op[FREQ] * op[DIRECTION]
    theta = now[THETA] + op[ANGLE_OFFSET]
    h_angle = 1e30
    if turning:
        h_angle = min(1.0 / (op[FREQ] * settings[STEPS]), 0.02)
    elif regime == ANGLE:
        for leg in range(3):
            if n_stops > 0:
                exact_losses(leg, wrap(theta - THIRD * leg), point, drive, conduction, switching, knot_c, i_step, voltage, energy, corner, w)
            else:
                leg_losses(np.uint64(leg), wrap(theta - THIRD * leg), fine, w)
    stopping = turning and n_stops > 0
    reach = 0.0 if stopping else duration  # where an even run of steps ends: the next place where a loss jumps, or the end
    for i in range(n):
        extreme[0, i] = w[T + i]
        extreme[1, i] = start
        extreme[2, i] = w[T + i]
        extreme[3, i] = start
    used, h_even = 0.0, 0.0
    n_t, n_c, count = 0, 0, 0
    once = now[LEVEL] > 0.0
    h_before = 0.0
    many, since, count_even, done_even, begin_even = 1, 0, 0, 0, 0.0
    while used < duration:
        if used >= reach:
            reach = min(duration, used + to_next_stop(theta + omega * used, op[DIRECTION], stops, n_stops) / abs(omega))
            h_even = 0.0
        left = reach - used
        level = int(now[LEVEL])
        h = settings[H0] * 2.0**level
        if h_even == 0.0 and h < left * (1.0 - 1e-12) and h < h_angle and level + 1 < levels.shape[0]:
            if now[H_LOADED] != h:
                load_factors(lanes, w, n_l, n_s, levels[level])
                now[H_LOADED] = h
            # the first size is taken twice, then sizes double
            if once and 2.0 * h <= settings[H_MAX]:
                now[LEVEL] = level + 1.0
            once = True
        else:
            if turning:
                if h_even == 0.0:
                    many = min(8, max(1, int(settings[SHARED_EVERY_S] / h_angle)))
                    if left < h_angle * many:
                        many = max(1, int(np.ceil(left / h_angle - 1e-9)))
                    groups = max(1.0, np.ceil(left / (h_angle * many) - 1e-9))
                    h_even = left / (groups * many)
                    count_even = int(groups) * many
                    begin_even, done_even = used, 0
                    for s in range(n_s):
                        e = np.expm1(-lam_s[s] * h_even * many)
                        w[A_S_MANY + s] = 1.0 + e
                        w[W_S_MANY + s] = -e / lam_s[s]
                    # the change that GAIN holds belongs to the step before; stretch it to the new one
                    for i in range(n):
                        w[GAIN + i] *= h_even * many / h_before if h_before > 0.0 else 0.0
                h = h_even
            else:
                h = min(left, settings[H_MAX])
            if abs(now[H_LOADED] - h) > 1e-12 * h:
                step_factors(h, lam_l, rho, lam_s, odd)
                load_factors(lanes, w, n_l, n_s, odd)
                now[H_LOADED] = h
        if turning:
            middle = theta + omega * (used + 0.5 * h)
            if stopping:
                for leg in range(3):
                    exact_losses(leg, wrap(middle - THIRD * leg), point, drive, conduction, switching, knot_c, i_step, voltage, energy, corner, w)
            else:
                for leg in range(U_3):
                    leg_losses(leg, wrap(middle - THIRD * leg), fine, w)
        # the shared modes are slow: in even steps they move once in several of them, with the mean power
        even = h == h_even
        part = 0.0
        if h_before > 0.0:
            part = 1.0 / many if even else h / h_before
        local_step(lanes, w, n_l, n_h, part)
        for i in range(n_u):
            w[U_P_SUM + i] += w[U_P + i]
        since += 1
        if since == many or not even:
            shared_step(lanes, w, n_s, 1.0 / since, t_cool, U_A_S_MANY if even else U_A_S, U_W_S_MANY if even else U_W_S)
            h_before = h * since
            since = 0
        if even:
            done_even += 1
            used = begin_even + done_even * h_even if done_even < count_even else reach
        else:
            used = used + h if left - h > 1e-12 * duration else reach
        count += 1
        for i in range(n_u):
            w[U_ENERGY + i] += w[U_P + i] * h
            t_buffer[n_t, i] = w[U_T + i]
        t_time[n_t] = start + used
        n_t += 1
        if not turning or count % 8 == 0 or used >= duration:
            case_points(lanes, w, n_l, n_s, t_cool)
            for i in range(n):
                c_buffer[n_c, i] = w[CASE + i]
            c_time[n_c] = start + used
            n_c += 1
        if n_t == CHUNK or used >= duration:
            if regime == MEAN:
                for j in range(n_t):
                    for i in range(n):
                        v = t_buffer[j, i]
                        if v < extreme[0, i]:
                            extreme[0, i] = v
                            extreme[1, i] = t_time[j]
                        if v > extreme[2, i]:
                            extreme[2, i] = v
                            extreme[3, i] = t_time[j]
            else:
                for j in range(n_t):
                    for i in range(n):
                        v = t_buffer[j, i]
                        extreme[0, i] = v if v < extreme[0, i] else extreme[0, i]
                        extreme[2, i] = v if v > extreme[2, i] else extreme[2, i]
            hot = 0.0
            for i in range(n):
                hot = max(hot, t_buffer[n_t - 1, i]) if t_buffer[n_t - 1, i] == t_buffer[n_t - 1, i] else np.inf
            for j in range(n_c):
                for i in range(n):
                    envelope[2, i] = min(envelope[2, i], c_buffer[j, i])
                    envelope[3, i] = max(envelope[3, i], c_buffer[j, i])
            if regime != MEAN:
                feed(0, n_t, t_buffer, t_time, 0.0, no_ripple, phase, last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count)
            feed(n, n_c, c_buffer, c_time, 0.0, no_ripple, phase, last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count)
            n_t, n_c = 0, 0
            if not hot < settings[T_STOP]:
                now[TIME] = start + used
                return RUNAWAY
    now[TIME] = start + duration
    now[THETA] = wrap(now[THETA] + omega * duration)
    if regime != MEAN:
        for i in range(n):
            envelope[0, i] = min(envelope[0, i], extreme[0, i])
            envelope[1, i] = max(envelope[1, i], extreme[2, i])
    return OK


@njit(cache=True)
def close_window(now, op, window, pair, pair_time, pair_ripple,
                 last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count, rip, rip_row, rip_count):
    """Hand over the lowest and highest point since the window opened, and count the ripple beyond one cycle.

    ``window`` (5, n): lowest, its time, highest, its time, ripple range times cycles.
    """
    cycles = now[WINDOW_CYCLES]
    if cycles <= 0.0:
        return
    half = 0.5 / op[FREQ]
    phase = now[WINDOW_PHASE]
    r = rip_count[0]
    for i in range(pair.shape[1]):
        rising = window[1, i] <= window[3, i]
        pair[0, i] = window[0, i] if rising else window[2, i]
        pair[1, i] = window[2, i] if rising else window[0, i]
        pair_ripple[i] = window[4, i] / cycles
        rip[r, i, 0] = pair_ripple[i]
        rip[r, i, 1] = 0.5 * (window[0, i] + window[2, i])
        rip[r, i, 2] = max(cycles - 1.0, 0.0)
    # every chip has its own times of lowest and highest mean
    for i in range(pair.shape[1]):
        pair_time[0] = min(window[1, i], window[3, i])
        pair_time[1] = max(window[1, i], window[3, i])
        feed(i, 2, pair[:, i:i + 1], pair_time, half, pair_ripple[i:i + 1], phase, last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count)
    rip_row[r, 0] = half
    rip_row[r, 1] = now[WINDOW_START]
    rip_row[r, 2] = now[TIME]
    rip_row[r, 3] = phase
    rip_count[0] = r + 1
    now[WINDOW_CYCLES] = 0.0


@njit(cache=True)
def march_rows(lanes, begin, table, phases, w, n_l, n_s, lam_l, rho, lam_s, g_cool, g_local, surface_l, surface_s, levels, odd,
               group, group_position, flows, group_lam, group_rho,
               drive, conduction, switching, knot_c, i_step, voltage, energy, v_ref, exponent, gate, derate_c, derate_hz,
               settings, now, old, ripple_op, ripple, nodes, window, last, heading,
               p_value, p_time, p_half, p_ripple, p_phase, p_count, rip, rip_row, rip_count, row_temps, row_loss):
    """March rows from ``begin`` until the end of the block, until the point buffers are nearly full, or until the cooling changes.

    ``row_temps`` (rows, 4, n): junction minimum, maximum, case minimum, maximum;
    ``row_loss`` (rows, n) [J]. Returns (row to go on with, OK, RUNAWAY or CHANGE).
    """
    n = len(lanes)
    cap = p_value.shape[1]
    n_h = max(knot_c.size - 1, 1)
    t_buffer, t_time = np.empty((CHUNK, n)), np.empty(CHUNK)
    c_buffer, c_time = np.empty((CHUNK, n)), np.empty(CHUNK)
    no_ripple = np.zeros(n)
    extreme = np.empty((4, n))
    pair, pair_time, pair_ripple = np.empty((2, n)), np.empty(2), np.empty(n)
    fresh = np.zeros(ripple.shape)
    fresh_nodes = np.zeros(nodes.shape)
    n_positions = flows.size
    fine = np.zeros((NODES + 1, n_positions, max(knot_c.size, 2)))
    most_nodes = nodes.shape[1] - 1
    ripple_nodes = most_nodes
    coarse = np.zeros((most_nodes + 1, n_positions, max(knot_c.size, 2)))
    jump_at = np.empty(MOST_BORDERS)
    stops = np.empty(3 * MOST_BORDERS + 1)
    n_stops = -1  # places along a turn where a loss of one of the legs jumps; -1: not looked for yet
    means, corner, border = np.empty((n_positions, knot_c.size)), np.empty((n_positions, knot_c.size)), np.empty(MOST_BORDERS)
    point = np.zeros(SCALE + v_ref.size)
    fine_made = coarse_made = means_made = False  # whether the nodes stand for the latest operating point
    for row in range(begin, table.shape[0]):
        op = table[row]
        f = op[FREQ]
        left = op[DT]
        if row > begin:
            fullest = 0
            # angle steps, or doubling steps and the settling periods
            most = 64 + int(left / settings[H_MAX]) + int(settings[STEPS] * (settings[SETTLE_PERIODS] + 2.0))
            if op[I_PEAK] > 0.0 and 0.0 < f < settings[F_SLOW]:
                most += int(left * max(f * settings[STEPS], 50.0))
            for signal in range(2 * n):
                fullest = max(fullest, p_count[signal])
            if fullest + most > cap or rip_count[0] + 3 > rip.shape[0]:
                return row, OK
        phase = float(phases[row])
        change = op[T_COOLANT] - now[COOLANT]
        if change != 0.0:
            for s in range(n_s):
                w[X_S + s] -= g_cool[s] * change
            for k in range(n_l):
                for i in range(n):
                    w[X_L + k * LANE + i] -= g_local[k, i] * change
            now[COOLANT] = op[T_COOLANT]
            shared_part(lanes, w, n_s, now[COOLANT])
        if settings[SURFACE_UP] < np.inf or settings[SURFACE_DOWN] > -np.inf:
            hottest = -np.inf
            for m in range(surface_s.shape[0]):
                rise = 0.0
                for s in range(n_s):
                    rise += surface_s[m, s] * w[X_S + s]
                for k in range(n_l):
                    for i in range(n):
                        rise += surface_l[m, k, i] * w[X_L + k * LANE + i]
                hottest = max(hottest, rise)
            if settings[SURFACE_RISE] == 0.0:
                hottest += now[COOLANT]
            if hottest > settings[SURFACE_UP] or hottest < settings[SURFACE_DOWN]:
                return row, CHANGE
        if derate_c.size > 0:
            hot = w[T]
            for i in range(group.size):
                high = w[T + i]
                if now[REGIME] == MEAN:
                    high += ripple_share(w, n_h, i, ripple[group[i]]) * ripple[group[i], 2]
                hot = max(hot, high)
            op[FSW] = min(op[FSW], np.interp(hot, derate_c, derate_hz))
        changed = False
        for k in range(FREQ, N_ROW):
            if k != T_COOLANT and op[k] != old[k]:
                changed = True
        if changed or row == begin:
            set_point(point, drive, op[I_PEAK], op[MOD], op[PHI], op[DIRECTION], op[CLIP_FIRST], op[CLIP_LAST], op[FSW], op[FREQ], op[V_DC],
                      v_ref, exponent, gate)
            fine_made = coarse_made = means_made = False
            n_stops = -1
            # what a node smears lasts the longer the slower the rotation
            ripple_nodes = most_nodes if most_nodes <= RIPPLE_NODES or f < 20.0 else most_nodes // 4
        before = int(now[REGIME])
        want = ANGLE
        if op[I_PEAK] <= 0.0:
            want = IDLE
        elif f >= settings[F_SLOW] and f > 0.0 and (not changed or left * f >= settings[SETTLE_PERIODS]):
            # rows that change faster than a few periods have no periodic ripple: they go by angle
            want = MEAN
        small = want == MEAN and before == MEAN and small_change(op, ripple_op)
        if changed:
            # after a small change the first steps may be coarser
            now[LEVEL] = 6.0 if small else 0.0
        if want != MEAN:
            now[SETTLE] = 0.0
        if before == MEAN and want != MEAN:
            close_window(now, old, window, pair, pair_time, pair_ripple,
                         last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count, rip, rip_row, rip_count)
            add_ripple(1.0, old, now[THETA], w, n_l, n_h, group, group_position, flows, group_lam, group_rho, ripple, nodes)
            before = ANGLE
        renew = False
        if want == MEAN:
            renew = before != MEAN or (changed and not small)
            if not renew:
                for i in range(group.size):
                    renew = renew or abs(w[T + i] - ripple[group[i], 4]) > 8.0
        if renew:
            if not coarse_made:
                angle_nodes(ripple_nodes, point, drive, conduction, switching, knot_c, i_step, voltage, energy, corner, border, coarse)
                coarse_made = True
            ripples(op, w, group, group_position, flows, group_lam, group_rho, ripple_nodes, coarse, knot_c, fresh_nodes, fresh)
            if changed and before != ANGLE:
                # a jump is first marched by angle, from the temperatures that really stand there
                jump, largest = 0.0, 0.0
                for g in range(fresh.shape[0]):
                    then = ripple[g, 2] - ripple[g, 1] if before == MEAN else 0.0
                    largest = max(largest, then)
                    jump = max(jump, abs(fresh[g, 2] - fresh[g, 1] - then))
                if jump > max(settings[SETTLE_K], 0.15 * largest):
                    if before == MEAN:
                        close_window(now, old, window, pair, pair_time, pair_ripple,
                                     last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count, rip, rip_row, rip_count)
                        add_ripple(1.0, old, now[THETA], w, n_l, n_h, group, group_position, flows, group_lam, group_rho, ripple, nodes)
                    before = ANGLE
                    now[SETTLE] = settings[SETTLE_PERIODS] / f
            elif changed:
                # what was marched by angle has no such ripple yet
                largest = 0.0
                for g in range(fresh.shape[0]):
                    largest = max(largest, fresh[g, 2] - fresh[g, 1])
                if largest > settings[SETTLE_K]:
                    now[SETTLE] = settings[SETTLE_PERIODS] / f
            for g in range(fresh.shape[0]):
                for k in range(6):
                    ripple[g, k] = fresh[g, k]
                for j in range(ripple_nodes + 1):
                    for k in range(nodes.shape[2]):
                        nodes[g, j, k] = fresh_nodes[g, j, k]
            for k in range(N_ROW):
                ripple_op[k] = op[k]
        for k in range(N_ROW):
            old[k] = op[k]
        for i in range(n):
            w[ENERGY + i] = 0.0
        status = OK
        by_angle = left if want == ANGLE else min(left, now[SETTLE])
        # first what is idle or goes by angle, then what goes by the mean; one of the two is often empty
        for part in range(2):
            if part == 0:
                if want == IDLE:
                    regime, length = IDLE, left
                    for j in range(LANE * K_MAX):
                        w[HINGE + j] = 0.0
                else:
                    regime, length = ANGLE, by_angle
                    if length > 0.0 and n_stops < 0:
                        n_stops = turn_stops(point, drive, jump_at, stops)
                    if length > 0.0 and n_stops == 0 and not fine_made:
                        angle_nodes(NODES, point, drive, conduction, switching, knot_c, i_step, voltage, energy, corner, border, fine)
                        fine_made = True
            else:
                regime, length = MEAN, left
                if want != MEAN:
                    length = 0.0
                if length > 0.0:
                    if by_angle > 0.0:
                        if not coarse_made:
                            angle_nodes(ripple_nodes, point, drive, conduction, switching, knot_c, i_step, voltage, energy, corner, border, coarse)
                            coarse_made = True
                        ripples(op, w, group, group_position, flows, group_lam, group_rho, ripple_nodes, coarse, knot_c, nodes, ripple)
                    if changed or renew or before == ANGLE:
                        if not means_made:
                            period_means(point, drive, conduction, switching, i_step, voltage, energy, corner, border, means)
                            means_made = True
                        mean_hinges(w, means, knot_c, group, ripple)
                    if before == ANGLE:
                        add_ripple(-1.0, op, now[THETA], w, n_l, n_h, group, group_position, flows, group_lam, group_rho, ripple, nodes)
            if length <= 0.0 or status != OK:
                continue
            opened = now[WINDOW_CYCLES] == 0.0
            if regime == MEAN and opened:
                now[WINDOW_START] = now[TIME]
            now[REGIME] = regime
            status = cross(lanes, row, length, regime, phase, op, w, n_l, n_s, lam_l, rho, lam_s, levels, odd, fine,
                           stops, max(n_stops, 0), point, drive, conduction, switching, i_step, voltage, energy, corner,
                           knot_c, settings, now, t_buffer, t_time, c_buffer, c_time, no_ripple, extreme, row_temps[row],
                           last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count)
            if regime == ANGLE:
                before = ANGLE
                left -= length
                if left <= 1e-9 * op[DT]:
                    left = 0.0
                if want == MEAN:
                    now[SETTLE] = now[SETTLE] - length if now[SETTLE] - length >= 1e-9 / f else 0.0
            elif regime == MEAN:
                cycles = f * length
                for i in range(group.size):
                    g = group[i]
                    share = ripple_share(w, n_h, i, ripple[g])
                    lo = extreme[0, i] + share * ripple[g, 1]
                    hi = extreme[2, i] + share * ripple[g, 2]
                    row_temps[row, 0, i] = min(row_temps[row, 0, i], lo)
                    row_temps[row, 1, i] = max(row_temps[row, 1, i], hi)
                    if opened or lo < window[0, i]:
                        window[0, i] = lo
                        window[1, i] = extreme[1, i]
                    if opened or hi > window[2, i]:
                        window[2, i] = hi
                        window[3, i] = extreme[3, i]
                    rip_cycles = share * (ripple[g, 2] - ripple[g, 1]) * cycles
                    window[4, i] = rip_cycles if opened else window[4, i] + rip_cycles
                now[WINDOW_PHASE] = phase
                now[WINDOW_CYCLES] += cycles
                if now[WINDOW_CYCLES] >= 1.0:
                    close_window(now, op, window, pair, pair_time, pair_ripple,
                                 last, heading, p_value, p_time, p_half, p_ripple, p_phase, p_count, rip, rip_row, rip_count)
        for i in range(n):
            row_loss[row, i] = w[ENERGY + i]
        if status != OK:
            return row, status
    return table.shape[0], OK
