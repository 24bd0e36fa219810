"""Second, independent implementation: every chip, every instant, small steps.

A two-level three-phase bridge, averaged over the switching period and resolved
over the angle of the output current. It shares no code with the package: losses
come straight from the curves, the thermal network is a ladder of real nodes
(no modes), time is marched with a dense matrix exponential.

Chips 0..5: switches a-upper, a-lower, b-upper, b-lower, c-upper, c-lower; 6..11: diodes likewise.
Phase k (0 a, 1 b, 2 c) carries I sin(alpha - 2 pi k/3); the reference leads it in time by ``phi``.
Temperatures in degrees Celsius (``_c``), differences in kelvin (``_k``).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np
import rainflow
from numba import njit
from scipy.integrate import solve_ivp
from scipy.linalg import block_diag, expm

MODULATIONS = ("sine", "third-harmonic", "space-vector")
CHIPS = tuple(f"{kind}-{leg}-{side}" for kind in "SD" for leg in "abc" for side in ("up", "lo"))
HYSTERESIS_K = 1e-9  # swings below this are rounding, not temperature


# --------------------------------------------------------------------------------------------------
# Raw numbers


@dataclass(frozen=True)
class Curves:
    """One quantity over current, a curve for each of at least two temperatures.

    Energies carry ``v_ref_v`` and ``voltage_exponent``; on-state voltages leave them at 1 and 0.
    """

    t_vj_c: tuple
    current_a: tuple  # of 1-D arrays
    value: tuple  # of 1-D arrays
    v_ref_v: float = 1.0
    voltage_exponent: float = 0.0

    def at(self, current_a, t_vj_c, v_dc_v=1.0):
        """Straight lines along current, then between temperatures, both extended beyond their ends; broadcasts."""
        i, t = np.broadcast_arrays(np.asarray(current_a, float), np.asarray(t_vj_c, float))
        by_t = np.array([_line_along(i, c, v) for c, v in zip(self.current_a, self.value)])
        k = np.clip(np.searchsorted(self.t_vj_c, t) - 1, 0, len(self.t_vj_c) - 2)
        nodes = np.asarray(self.t_vj_c, float)
        a = (t - nodes[k]) / (nodes[k + 1] - nodes[k])
        low = np.take_along_axis(by_t, k[None], 0)[0]
        high = np.take_along_axis(by_t, k[None] + 1, 0)[0]
        return (low + a * (high - low)) * (v_dc_v / self.v_ref_v) ** self.voltage_exponent


def _line_along(x, xp, fp):
    xp, fp = np.asarray(xp, float), np.asarray(fp, float)
    y = np.interp(x, xp, fp)
    below = fp[0] + (x - xp[0]) * (fp[1] - fp[0]) / (xp[1] - xp[0])
    above = fp[-1] + (x - xp[-1]) * (fp[-1] - fp[-2]) / (xp[-1] - xp[-2])
    return np.where(x < xp[0], below, np.where(x > xp[-1], above, y))


@dataclass(frozen=True)
class Params:
    """Everything the simulation needs, as plain numbers.

    ``case_of_chip[k]`` is the index of the case node under chip k into ``r_case_sink_k_per_w``;
    -1: the chip's ladder ends at the sink. Sink: Foster branches; a tau of 0 is a plain resistance.
    ``sink_input``: "leaving" (the sink gets the heat that leaves the ladders) or "junction"
    (the sink is heated by the junction power at once; Foster branches are simply added).
    """

    switch_on_state: Curves
    switch_turn_on: Curves
    switch_turn_off: Curves
    diode_on_state: Curves
    diode_recovery: Curves
    switch_r_k_per_w: tuple
    switch_tau_s: tuple
    diode_r_k_per_w: tuple
    diode_tau_s: tuple
    sink_r_k_per_w: tuple
    sink_tau_s: tuple
    coolant_c: float
    f_sw_hz: float
    v_dc_v: float
    modulation: str = "sine"
    case_of_chip: tuple = (-1,) * 12
    r_case_sink_k_per_w: tuple = ()
    sink_input: str = "leaving"


@dataclass(frozen=True)
class Rows:
    """A duty with zero-order hold, all arrays (n,). ``phi_rad`` is the displacement as seen in time.

    Phase-a current = i_peak sin(theta_rotor + current_angle); theta_rotor advances by direction 2 pi f dt.
    ``coolant_c`` and ``v_dc_v`` replace the values of ``Params`` where given.
    """

    dt_s: np.ndarray
    f_hz: np.ndarray
    direction: np.ndarray
    i_peak_a: np.ndarray
    mod_index: np.ndarray
    phi_rad: np.ndarray
    current_angle_rad: np.ndarray
    coolant_c: np.ndarray | None = None
    v_dc_v: np.ndarray | None = None

    @property
    def time_s(self):
        """Start of each row, (n,)."""
        return np.concatenate(([0.0], np.cumsum(self.dt_s)[:-1]))

    def cut(self, first, last):
        """Rows first .. last-1. The rotor angle starts at zero again."""
        return Rows(**{k: (v if v is None else v[first:last]) for k, v in self.__dict__.items()})


def rows(dt_s, f_hz, direction, i_peak_a, mod_index, phi_rad, current_angle_rad=0.0, coolant_c=None, v_dc_v=None):
    """Rows from scalars or arrays, broadcast against each other."""
    given = (dt_s, f_hz, direction, i_peak_a, mod_index, phi_rad, current_angle_rad)
    a = np.broadcast_arrays(*map(np.atleast_1d, given))
    a = [np.array(x, float) for x in a]
    extra = [None if x is None else np.array(np.broadcast_to(x, a[0].shape), float) for x in (coolant_c, v_dc_v)]
    return Rows(*a, *extra)


def params_from_module(module, sink_r_k_per_w, sink_tau_s, coolant_c, f_sw_hz, v_dc_v, modulation="sine"):
    """Raw numbers from a module object; nothing of the package's own look-up is used."""

    def curves(data, what):
        return Curves(
            tuple(float(c.t_vj_c) for c in data.curve),
            tuple(np.array(c.current_a, float) for c in data.curve),
            tuple(np.array(getattr(c, what), float) for c in data.curve),
            float(getattr(data, "v_ref_v", 1.0)),
            float(getattr(data, "voltage_exponent", 0.0)),
        )

    sw, di = module.switch, module.diode
    joint = getattr(module, "case_to_sink", None)
    if joint is None:
        case_of_chip, r_cs = (-1,) * 12, ()
    elif joint.per == "module":
        # A half-bridge module holds one leg: chips 0, 1, 6, 7 are leg a.
        leg = tuple((k % 6) // 2 for k in range(12))
        case_of_chip = (0,) * 12 if module.arrangement == "six-pack" else leg
        r_cs = (float(joint.r_th_k_per_w),) * (max(case_of_chip) + 1)
    else:
        case_of_chip = tuple(range(12))
        r_cs = (float(joint.r_th_switch_k_per_w),) * 6 + (float(joint.r_th_diode_k_per_w),) * 6
    ends = [sw.thermal.reference] * 6 + [di.thermal.reference] * 6
    case_of_chip = tuple(-1 if end == "sink" else c for end, c in zip(ends, case_of_chip))
    if any(end == "case" and c < 0 for end, c in zip(ends, case_of_chip)):
        raise ValueError("reference 'case' needs case_to_sink")
    return Params(
        curves(sw.on_state, "voltage_v"), curves(sw.turn_on, "energy_j"), curves(sw.turn_off, "energy_j"),
        curves(di.on_state, "voltage_v"), curves(di.recovery, "energy_j"),
        tuple(sw.thermal.r_k_per_w), tuple(sw.thermal.tau_s), tuple(di.thermal.r_k_per_w), tuple(di.thermal.tau_s),
        tuple(np.atleast_1d(sink_r_k_per_w).astype(float)), tuple(np.atleast_1d(sink_tau_s).astype(float)),
        float(coolant_c), float(f_sw_hz), float(v_dc_v), modulation, case_of_chip, r_cs,
    )  # fmt: skip


# --------------------------------------------------------------------------------------------------
# Losses at an instant, plain NumPy (used by the solve_ivp route and to check the compiled march)


def references(alpha_rad, mod_index, phi_rad, modulation, direction=1.0):
    """Phase references u_k, shape (3,). Backwards the voltage leads in time, so it trails in angle."""
    beta = alpha_rad + direction * phi_rad
    u = mod_index * np.sin(beta - 2 * np.pi / 3 * np.arange(3))
    if modulation == "third-harmonic":
        return u + mod_index / 6 * np.sin(3 * beta)
    if modulation == "space-vector":
        return u - (u.max() + u.min()) / 2
    if modulation == "sine":
        return u
    raise ValueError(f"modulation {modulation!r}: one of {MODULATIONS}")


def losses_w(params, alpha_rad, i_peak_a, mod_index, phi_rad, t_vj_c, direction=1.0, v_dc_v=None):
    """Losses of the twelve chips at one angle, shape (12,)."""
    v_dc = params.v_dc_v if v_dc_v is None else v_dc_v
    t = np.asarray(t_vj_c, float)
    i = i_peak_a * np.sin(alpha_rad - 2 * np.pi / 3 * np.arange(3))
    size, upper = np.abs(i), (i > 0).astype(float)
    duty = (1 + references(alpha_rad, mod_index, phi_rad, params.modulation, direction)) / 2
    p = np.zeros(12)
    for side, on in ((0, upper), (1, 1 - upper)):
        share = duty if side == 0 else 1 - duty
        t_s, t_d = t[side:6:2], t[6 + side :: 2]
        energy = params.switch_turn_on.at(size, t_s, v_dc) + params.switch_turn_off.at(size, t_s, v_dc)
        p[side:6:2] = on * (share * size * params.switch_on_state.at(size, t_s) + params.f_sw_hz * energy)
        recovery = params.f_sw_hz * params.diode_recovery.at(size, t_d, v_dc)
        p[6 + side :: 2] = (1 - on) * (share * size * params.diode_on_state.at(size, t_d) + recovery)
    return p if i_peak_a > 0 else np.zeros(12)


# --------------------------------------------------------------------------------------------------
# Thermal network


def foster_to_cauer(r_k_per_w, tau_s):
    """Continued fraction of Z(s) = sum R/(1 + s tau) in exact rationals.

    Returns
    -------
    r, c : (n,) arrays, junction side first; c[k] hangs before r[k]. Branches of equal tau are merged.
    """
    merged = {}
    for r, tau in zip(r_k_per_w, tau_s):
        merged[Fraction(tau)] = merged.get(Fraction(tau), Fraction(0)) + Fraction(r)
    taus, rs = list(merged), list(merged.values())
    if min(taus) <= 0:
        raise ValueError("a Foster branch needs tau > 0")

    def times(poly, tau):  # lowest power first
        return [a + b for a, b in zip(poly + [Fraction(0)], [Fraction(0)] + [tau * x for x in poly])]

    den = [Fraction(1)]
    for tau in taus:
        den = times(den, tau)
    num = [Fraction(0)] * len(taus)
    for k, r in enumerate(rs):
        part = [r]
        for j, tau in enumerate(taus):
            if j != k:
                part = times(part, tau)
        num = [a + b for a, b in zip(num, part)]
    r_out, c_out = [], []
    while num:
        c = den[-1] / num[-1]
        den = [a - c * b for a, b in zip(den, [Fraction(0)] + num)][:-1]  # Y - s C
        r = num[-1] / den[-1]
        num = [a - r * b for a, b in zip(num, den)][:-1]  # 1/(Y - s C) - R
        c_out.append(float(c))
        r_out.append(float(r))
    return np.array(r_out), np.array(c_out)


@dataclass(frozen=True)
class Network:
    """Rise above coolant: dx/dt = a x + b p, signals y = c x (12 junctions, then the case nodes or the sink)."""

    a: np.ndarray  # (n, n)
    b: np.ndarray  # (n, 12)
    c: np.ndarray  # (12 + n_case, n)


def build_network(params):
    """Assemble conductances of all nodes, then take the nodes without capacity out."""
    chips = [(params.switch_r_k_per_w, params.switch_tau_s)] * 6 + [(params.diode_r_k_per_w, params.diode_tau_s)] * 6
    if params.sink_input == "junction":
        return _added_branches(params, chips)
    links, capacity = [], []  # (node, node or -1 for coolant, conductance)

    def node(c=0.0):
        capacity.append(c)
        return len(capacity) - 1

    def ladder(r, c, first, end):
        here = first
        for k in range(len(r)):
            capacity[here] += c[k]
            following = end if k + 1 == len(r) else node()
            links.append((here, following, 1 / r[k]))
            here = following

    sink, inner = node(), [(r, t) for r, t in zip(params.sink_r_k_per_w, params.sink_tau_s) if t > 0]
    bare = sum(r for r, t in zip(params.sink_r_k_per_w, params.sink_tau_s) if t == 0)
    start = sink
    if bare > 0 and inner:  # Z(infinity) = bare: a resistance before the ladder
        start = node()
        links.append((sink, start, 1 / bare))
    elif bare > 0:
        links.append((sink, -1, 1 / bare))
    if inner:
        ladder(*foster_to_cauer(*zip(*inner)), start, -1)
    cases = [node() for _ in params.r_case_sink_k_per_w]
    for case, r in zip(cases, params.r_case_sink_k_per_w):
        links.append((case, sink, 1 / r))
    junctions = []
    for (r, tau), case in zip(chips, params.case_of_chip):
        junctions.append(node())
        ladder(*foster_to_cauer(r, tau), junctions[-1], sink if case < 0 else cases[case])

    n = len(capacity)
    g = np.zeros((n, n))
    for here, there, y in links:
        g[here, here] += y
        if there >= 0:
            g[there, there] += y
            g[here, there] -= y
            g[there, here] -= y
    cap = np.array(capacity)
    heavy = np.flatnonzero(cap > 0)
    light = np.array([k for k in range(n) if cap[k] == 0 and g[k, k] > 0], int)
    to_all = np.zeros((n, len(heavy)))  # all node temperatures from those with capacity
    to_all[heavy, np.arange(len(heavy))] = 1
    if len(light):
        to_all[light] = -np.linalg.solve(g[np.ix_(light, light)], g[np.ix_(light, heavy)])
    a = -(g @ to_all)[heavy] / cap[heavy, None]
    b = np.zeros((n, 12))
    b[junctions, np.arange(12)] = 1
    return Network(a, b[heavy] / cap[heavy, None], to_all[junctions + (cases or [sink])])


def _added_branches(params, chips):
    if params.r_case_sink_k_per_w:
        raise ValueError("sink_input 'junction' is written for ladders that end at the sink")
    n_sink = len(params.sink_tau_s)
    taus = np.concatenate([np.asarray(t, float) for _, t in chips] + [np.asarray(params.sink_tau_s, float)])
    b = block_diag(*[np.array(r, float)[:, None] for r, _ in chips])
    b = np.vstack([b, np.outer(params.sink_r_k_per_w, np.ones(12))]) / taus[:, None]
    c = block_diag(*[np.ones((1, len(r))) for r, _ in chips], np.ones((1, n_sink)))
    c[:12, -n_sink:] = 1
    return Network(np.diag(-1 / taus), b, c)


def _step_matrices(net, h_s, cache=None):
    """Exact response to power held over a step: x+ = ad x + bd p."""
    if cache is not None and h_s in cache:
        return cache[h_s]
    n = len(net.a)
    big = expm(np.block([[net.a, net.b], [np.zeros((12, n + 12))]]) * h_s)
    ad, bd = big[:n, :n], big[:n, n:]
    out = tuple(np.ascontiguousarray(m.T) for m in (ad, bd, net.c, net.c @ bd))
    if cache is not None:
        cache[h_s] = out
    return out


def _tables(params, v_dc_v, cache=None):
    """All curves on the union of their currents and temperatures: exact, as all are straight between points.

    Order: switch voltage, diode voltage, switch power f_sw (E_on + E_off), diode power f_sw E_rec.
    """
    if cache is not None and v_dc_v in cache:
        return cache[v_dc_v]
    p = params
    sets = (p.switch_on_state, p.switch_turn_on, p.switch_turn_off, p.diode_on_state, p.diode_recovery)
    i = np.unique(np.concatenate([np.asarray(c, float) for s in sets for c in s.current_a]))
    t = np.unique(np.concatenate([np.asarray(s.t_vj_c, float) for s in sets]))
    on, e_on, e_off, d_on, e_rec = (s.at(i[None, :], t[:, None], v_dc_v) for s in sets)
    out = i, t, np.array([on, d_on, params.f_sw_hz * (e_on + e_off), params.f_sw_hz * e_rec])
    if cache is not None:
        cache[v_dc_v] = out
    return out


# --------------------------------------------------------------------------------------------------
# Compiled march. Not cached on disk: a cached kernel keeps the name this file was imported under, and tests use two.


@njit
def _cell(x, nodes):
    low, high = 0, len(nodes) - 1
    while high - low > 1:
        mid = (low + high) // 2
        if x < nodes[mid]:
            high = mid
        else:
            low = mid
    return low


@njit
def _look(table, ki, ai, t, t_nodes):
    kt = _cell(t, t_nodes)
    at = (t - t_nodes[kt]) / (t_nodes[kt + 1] - t_nodes[kt])
    low = table[kt, ki] + ai * (table[kt, ki + 1] - table[kt, ki])
    high = table[kt + 1, ki] + ai * (table[kt + 1, ki + 1] - table[kt + 1, ki])
    return low + at * (high - low)


@njit
def _losses(alpha, beta, i_pk, m, kind, t_c, i_nodes, t_nodes, tables, p):
    third = 2.0943951023931953
    u0, u1, u2 = m * math.sin(beta), m * math.sin(beta - third), m * math.sin(beta - 2 * third)
    zero = 0.0
    if kind == 1:
        zero = m / 6 * math.sin(3 * beta)
    elif kind == 2:
        zero = -0.5 * (max(u0, u1, u2) + min(u0, u1, u2))
    for k in range(12):
        p[k] = 0.0
    if i_pk == 0.0:
        return
    for k in range(3):
        i = i_pk * math.sin(alpha - k * third)
        u = u0 if k == 0 else (u1 if k == 1 else u2)
        duty = 0.5 * (1 + u + zero)
        size = abs(i)
        ki = _cell(size, i_nodes)
        ai = (size - i_nodes[ki]) / (i_nodes[ki + 1] - i_nodes[ki])
        if i > 0:
            switch, diode, share = 2 * k, 7 + 2 * k, duty
        else:
            switch, diode, share = 2 * k + 1, 6 + 2 * k, 1 - duty
        ts, td = t_c[switch], t_c[diode]
        p[switch] = share * size * _look(tables[0], ki, ai, ts, t_nodes) + _look(tables[2], ki, ai, ts, t_nodes)
        p[diode] = (1 - share) * size * _look(tables[1], ki, ai, td, t_nodes) + _look(tables[3], ki, ai, td, t_nodes)


@njit
def _march(
    n_steps, h, omega, alpha0, lead, i_pk, m, kind, coolant, i_nodes, t_nodes, tables, ad_t, bd_t, c_t, cb_t,
    x, energy, low, high, area, slope, extreme, t_extreme, t0, points, times, n_points, hysteresis,
):  # fmt: skip
    """March one row. ``x`` and the arrays after it are changed in place; matrices are transposed."""
    n, ns = len(x), c_t.shape[1]
    xn, y, yf, last = np.zeros(n), np.zeros(ns), np.zeros(ns), np.zeros(ns)
    t_mid, p = np.zeros(12), np.zeros(12)
    for j in range(n):
        for s in range(ns):
            y[s] += c_t[j, s] * x[j]
    last[:] = y
    for step in range(n_steps):
        xn[:] = 0.0
        for j in range(n):
            xj = x[j]
            for k in range(n):
                xn[k] += ad_t[j, k] * xj
        yf[:] = 0.0
        for j in range(n):
            for s in range(ns):
                yf[s] += c_t[j, s] * xn[j]
        alpha = alpha0 + omega * h * (step + 0.5)
        for k in range(12):  # predictor: go on as in the last step
            t_mid[k] = coolant + y[k] + 0.5 * (y[k] - last[k])
        _losses(alpha, alpha + lead, i_pk, m, kind, t_mid, i_nodes, t_nodes, tables, p)
        for k in range(12):  # corrector: middle of old and new
            t_mid[k] = 0.0
        for j in range(12):
            if p[j] != 0.0:
                for k in range(12):
                    t_mid[k] += cb_t[j, k] * p[j]
        for k in range(12):
            t_mid[k] = coolant + 0.5 * (y[k] + yf[k] + t_mid[k])
        _losses(alpha, alpha + lead, i_pk, m, kind, t_mid, i_nodes, t_nodes, tables, p)
        last[:] = y
        y[:] = yf
        x[:] = xn
        for j in range(12):
            if p[j] != 0.0:
                energy[j] += p[j] * h
                for k in range(n):
                    x[k] += bd_t[j, k] * p[j]
                for s in range(ns):
                    y[s] += cb_t[j, s] * p[j]
        now = t0 + (step + 1) * h
        for s in range(ns):
            v = coolant + y[s]
            area[s] += h * 0.5 * (v + coolant + last[s])
            low[s] = min(low[s], v)
            high[s] = max(high[s], v)
            gap = v - extreme[s]
            if gap * slope[s] > 0 or (slope[s] != 0 and gap == 0):
                extreme[s], t_extreme[s] = v, now
            elif abs(gap) > hysteresis:
                points[s, n_points[s]], times[s, n_points[s]] = extreme[s], t_extreme[s]
                n_points[s] += 1
                slope[s] = 1.0 if gap > 0 else -1.0
                extreme[s], t_extreme[s] = v, now


class _Run:
    """State and records of a march over rows."""

    def __init__(self, params, net=None):
        self.params, self.net = params, net or build_network(params)
        self.kind = MODULATIONS.index(params.modulation)
        self.step_cache, self.table_cache = {}, {}
        ns = len(self.net.c)
        self.energy, self.area = np.zeros(12), np.zeros(ns)
        self.low, self.high = np.full(ns, np.inf), np.full(ns, -np.inf)
        self.slope, self.extreme, self.t_extreme = np.zeros(ns), np.zeros(ns), np.zeros(ns)
        self.buffer = self.stamps = np.zeros((ns, 0))
        self.points, self.times = [[] for _ in range(ns)], [[] for _ in range(ns)]

    def start(self, x, coolant_c):
        y = coolant_c + self.net.c @ x
        self.low, self.high, self.extreme = y.copy(), y.copy(), y.copy()

    def row(self, x, n_steps, h, omega, alpha0, lead, i_pk, m, coolant, v_dc, t0=0.0, keep=True):
        ns = len(self.net.c)
        if self.buffer.shape[1] < n_steps + 1:
            self.buffer, self.stamps = np.zeros((ns, n_steps + 1)), np.zeros((ns, n_steps + 1))
        count = np.zeros(ns, np.int64)
        _march(
            n_steps, h, omega, alpha0, lead, float(i_pk), float(m), self.kind, float(coolant),
            *_tables(self.params, v_dc, self.table_cache), *_step_matrices(self.net, h, self.step_cache),
            x, self.energy, self.low, self.high, self.area, self.slope, self.extreme, self.t_extreme, t0,
            self.buffer, self.stamps, count, HYSTERESIS_K,
        )  # fmt: skip
        if keep:
            for s in np.flatnonzero(count):
                self.points[s].append(self.buffer[s, : count[s]].copy())
                self.times[s].append(self.stamps[s, : count[s]].copy())


# --------------------------------------------------------------------------------------------------
# Runs


def steady_extremes(
    params, f_hz, i_peak_a, mod_index, phi_rad, modulation=None, *, direction=1.0, theta0_rad=0.0,
    steps_per_period=3600, tolerance_k=1e-7, max_rounds=400,
):  # fmt: skip
    """Periodic state at one operating point, losses reading the temperature of their own instant.

    One period is marched from a guess; the guess then moves by (1 - exp(a T))^-1 (end - start), which would hit
    the periodic state at once if losses did not depend on temperature. ``f_hz`` = 0: standstill at ``theta0_rad``.

    Returns
    -------
    dict of (12,) arrays ``min_c``, ``max_c``, ``mean_c``, ``loss_w``; ``case_min_c``, ``case_max_c``,
    ``case_mean_c`` (n_case,) (the sink if there is no case node); ``state_k`` (n,) at theta = 0; ``rounds``.

    Raises
    ------
    RuntimeError
        If there is no periodic state within ``max_rounds`` (thermal runaway).
    """
    if modulation is not None:
        params = replace(params, modulation=modulation)
    net = build_network(params)
    tables = _tables(params, params.v_dc_v)
    still = f_hz == 0
    if still:
        gain = -np.linalg.solve(net.a, net.b)
        x, p, y = np.zeros(len(net.a)), np.zeros(12), np.zeros(len(net.c))
        for rounds in range(max_rounds):
            alpha, lead = theta0_rad, direction * phi_rad
            _losses(alpha, alpha + lead, float(i_peak_a), float(mod_index), MODULATIONS.index(params.modulation),
                    params.coolant_c + y[:12], *tables, p)  # fmt: skip
            new = gain @ p
            gap, x = np.abs(new - x).max(), new
            y = net.c @ x
            if gap < tolerance_k:
                t = params.coolant_c + y
                return _steady_dict(t, t, t, p.copy(), x, rounds)
            _stop_if_wild(gap)
        raise RuntimeError("no steady temperature: thermal runaway")
    h = 1 / (f_hz * steps_per_period)
    jump = np.linalg.inv(np.eye(len(net.a)) - expm(net.a / f_hz))
    x0 = np.zeros(len(net.a))
    for rounds in range(max_rounds):
        run, x = _Run(params, net), x0.copy()
        run.start(x, params.coolant_c)
        run.row(x, steps_per_period, h, direction * 2 * np.pi * f_hz, theta0_rad, direction * phi_rad, i_peak_a,
                mod_index, params.coolant_c, params.v_dc_v, keep=False)  # fmt: skip
        move = jump @ (x - x0)
        gap = np.abs(move).max()
        if gap < tolerance_k:
            return _steady_dict(run.low, run.high, run.area * f_hz, run.energy * f_hz, x, rounds)
        _stop_if_wild(gap)
        x0 = x0 + move
    raise RuntimeError("no periodic temperature: thermal runaway")


def _stop_if_wild(gap):
    if not gap < 1e5:
        raise RuntimeError("no steady temperature: thermal runaway")


def _steady_dict(low, high, mean, loss, x, rounds):
    return {
        "min_c": low[:12].copy(), "max_c": high[:12].copy(), "mean_c": mean[:12].copy(), "loss_w": loss,
        "case_min_c": low[12:].copy(), "case_max_c": high[12:].copy(), "case_mean_c": mean[12:].copy(),
        "state_k": x.copy(), "rounds": rounds,
    }  # fmt: skip


def transient(params, duty, *, step_s=1e-4, state_k=None, theta0_rad=0.0, net=None):
    """March a duty through every angle.

    Parameters
    ----------
    duty : Rows
    step_s : float
        Longest step; each row is cut into equal steps not longer than this.
    state_k : (n,) array, optional
        Rises above the first row's coolant; default: everything at coolant temperature.

    Returns
    -------
    dict: ``peak_c``, ``lowest_c``, ``energy_j`` (12,); ``mean_c`` (12,) time mean; ``points`` list of 12 arrays of
    turning points (first and last sample included) with ``times_s``; the same as ``case_*``; ``row_end_c``
    (rows, 12 + n_case) at the end of each row; ``state_k`` at the end; ``theta_rad``; ``steps``.
    """
    run = _Run(params, net)
    coolant = np.full(len(duty.dt_s), params.coolant_c) if duty.coolant_c is None else duty.coolant_c
    v_dc = np.full(len(duty.dt_s), params.v_dc_v) if duty.v_dc_v is None else duty.v_dc_v
    x = np.zeros(len(run.net.a)) if state_k is None else np.array(state_k, float)
    run.start(x, coolant[0])
    theta, t, steps, ends = theta0_rad, 0.0, 0, []
    for k, dt in enumerate(duty.dt_s):
        if k and coolant[k] != coolant[k - 1]:
            x += coolant[k - 1] - coolant[k]  # nodes keep their temperature, the zero moves
        n = max(1, math.ceil(dt / step_s - 1e-9))
        omega = duty.direction[k] * 2 * np.pi * duty.f_hz[k]
        run.row(x, n, round(dt / n, 15), omega, theta + duty.current_angle_rad[k], duty.direction[k] * duty.phi_rad[k],
                duty.i_peak_a[k], duty.mod_index[k], coolant[k], v_dc[k], t)  # fmt: skip
        theta = math.remainder(theta + omega * dt, 2 * math.pi)
        t += dt
        steps += n
        ends.append(coolant[k] + run.net.c @ x)
    points = [np.concatenate([*a, [last]]) for a, last in zip(run.points, run.extreme)]
    times = [np.concatenate([*a, [last]]) for a, last in zip(run.times, run.t_extreme)]
    return {
        "peak_c": run.high[:12], "lowest_c": run.low[:12], "energy_j": run.energy, "mean_c": run.area[:12] / t,
        "points": points[:12], "times_s": times[:12],
        "case_peak_c": run.high[12:], "case_lowest_c": run.low[12:], "case_points": points[12:],
        "case_times_s": times[12:], "row_end_c": np.array(ends), "state_k": x, "theta_rad": theta, "steps": steps,
    }  # fmt: skip


def transient_solve_ivp(
    params, duty, *, method="RK45", max_step_s=2e-4, rtol=1e-6, atol=1e-6, state_k=None, theta0_rad=0.0
):
    """The plain route: scipy's ``solve_ivp`` row by row over NumPy losses. Slow; for short windows and benchmarks.

    Returns
    -------
    dict: ``time_s`` (n,), ``t_vj_c`` (12, n), ``peak_c``, ``lowest_c``, ``energy_j`` (12,), ``steps``, ``evaluations``.
    """
    net = build_network(params)
    n = len(net.a)
    coolant = np.full(len(duty.dt_s), params.coolant_c) if duty.coolant_c is None else duty.coolant_c
    v_dc = np.full(len(duty.dt_s), params.v_dc_v) if duty.v_dc_v is None else duty.v_dc_v
    z = np.concatenate([np.zeros(n) if state_k is None else state_k, np.zeros(12)])
    theta, t, stamps, temps, calls = theta0_rad, 0.0, [np.zeros(1)], [coolant[0] + net.c[:12] @ z[:n, None]], 0
    for k, dt in enumerate(duty.dt_s):
        if k:
            z[:n] += coolant[k - 1] - coolant[k]
        omega = duty.direction[k] * 2 * np.pi * duty.f_hz[k]

        def slope(tau, z, k=k, omega=omega, base=theta + duty.current_angle_rad[k]):
            t_vj = coolant[k] + net.c[:12] @ z[:n]
            p = losses_w(params, base + omega * tau, duty.i_peak_a[k], duty.mod_index[k], duty.phi_rad[k], t_vj,
                         duty.direction[k], v_dc[k])  # fmt: skip
            return np.concatenate([net.a @ z[:n] + net.b @ p, p])

        out = solve_ivp(slope, (0, dt), z, method=method, max_step=max_step_s, rtol=rtol, atol=atol)
        if not out.success:
            raise RuntimeError(out.message)
        stamps.append(t + out.t[1:])
        temps.append(coolant[k] + net.c[:12] @ out.y[:n, 1:])
        z, calls = out.y[:, -1].copy(), calls + out.nfev
        theta, t = theta + omega * dt, t + dt
    t_vj = np.hstack(temps)
    return {
        "time_s": np.concatenate(stamps), "t_vj_c": t_vj, "peak_c": t_vj.max(1), "lowest_c": t_vj.min(1),
        "energy_j": z[n:], "steps": t_vj.shape[1] - 1, "evaluations": calls,
    }  # fmt: skip


# --------------------------------------------------------------------------------------------------
# Cycles and life


def rainflow_cycles(points_c, residue="repeat"):
    """Cycles of one signal by the third-party ``rainflow`` package, as rows (range, mean, count).

    "repeat": two passes minus one, so the residue is closed by the next mission; counts of the first pass come
    negative. "half": one pass, the residue as half cycles.
    """
    points = np.asarray(points_c, float)

    def count(series):
        out = [(r, m, n) for r, m, n, _, _ in rainflow.extract_cycles(series)]
        return np.array(out).reshape(-1, 3)

    once = count(points)
    if residue == "half":
        return once
    twice = count(np.concatenate([points, points]))
    once[:, 2] *= -1
    return np.vstack([twice, once])


def lesit_cycles_to_failure(range_k, mean_c):
    """Refitted LESIT form A dT^a exp(Ea/(kB Tm)): coefficients from memory of later literature on Held et al. 1997."""
    kelvin = np.asarray(mean_c, float) + 273.15
    return 302500.0 * np.asarray(range_k, float) ** -5.039 * np.exp(9.891e-20 / (1.380649e-23 * kelvin))


def lesit_damage(points_c, residue="repeat"):
    """Miner sum of one signal's turning points over one mission."""
    cycles = rainflow_cycles(points_c, residue)
    cycles = cycles[cycles[:, 0] > 0]
    return float(np.sum(cycles[:, 2] / lesit_cycles_to_failure(cycles[:, 0], cycles[:, 1])))


def damage_per_chip(result, residue="repeat"):
    """Damage of the twelve chips of a :func:`transient` result, (12,)."""
    return np.array([lesit_damage(p, residue) for p in result["points"]])


# --------------------------------------------------------------------------------------------------
# The duty that the package is judged on


def issue_transient_rows(row_s=0.5, i_nominal_a=300.0):
    """300 s in three rounds of 100 s: breakaway, ramp, cruise, generative stop, torque at standstill, pause.

    The second round turns backwards. Deterministic; smooth ramps sampled at the middle of each row.
    Currents scale with ``i_nominal_a`` (device rating, A); the heaviest moment is 1.2 times the rating, peak.
    """
    per_round = round(100 / row_s)
    t = (np.arange(3 * per_round) + 0.5) * row_s
    turn, s = np.divmod(t, 100.0)
    load = np.array([1.0, 0.85, 0.93])[turn.astype(int)]

    def ramp(begin, end):
        u = np.clip((s - begin) / (end - begin), 0, 1)
        return u * u * (3 - 2 * u)

    f = 0.3 + 39.7 * ramp(5, 20) - 39.5 * ramp(60, 72)
    f = np.where(s > 72, 0.0, f)
    level = 1.2 * ramp(-1, 2) - 0.15 * ramp(5, 12) - 0.30 * ramp(16, 22)
    level += 0.08 * np.sin(2 * np.pi * s / 13) * ramp(22, 26)
    level = np.where(s >= 60, 0.75 - 0.08 * ramp(60, 66) + 0.28 * ramp(71, 73), level)
    level *= 1 - ramp(77, 78.5)
    level = np.where(s > 78.5, 0.0, level * load)
    phi = 0.25 + 0.2 * ramp(5, 20)
    phi = np.where(s >= 60, np.pi - 0.4, phi)
    phi = np.where(s > 72, 0.0, phi)
    mod = 0.03 * level + 0.021 * f
    return Rows(
        np.full(len(t), row_s), f, np.where((turn == 1) & (f > 0), -1.0, 1.0), i_nominal_a * level, mod, phi,
        np.where(phi > 2, -np.pi / 2 - 0.1, np.pi / 2 + 0.1) * np.where(turn == 1, -1, 1) + np.pi / 2,
    )  # fmt: skip
