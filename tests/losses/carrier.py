"""One inverter leg switched by a triangular carrier, its losses averaged over a fundamental period.

Independent code for the tests of the loss models: it takes the numbers of a
module, and nothing else from the package. Three references are formed, the one
of phase a is compared with the carrier, the crossings are solved for (natural
sampling), gates turn on late by the dead time, and what conducts is looked up
for every state and sign of the current. Each switching event is charged with
the current that flows at its instant.

Conventions: i = I sin(theta); references m sin(x), x = theta + phi, phases b and c
120 degrees later and earlier. The carrier has a minimum where the current starts, and for clamps
whose references jump where they jump: with a ratio that 6 divides all jumps then fall on
minima and maxima of the carrier, where a modulator would change its reference.

Assumed where data sheets are silent:

* MOSFET without reverse curves: with the gate on the channel conducts from source
  to drain as it does from drain to source, and the body diode lies in parallel. The two
  share the current so that both drops are equal; while the channel's drop stays below
  the voltage at which the diode's curve starts (at zero current), the diode carries nothing.
* During the dead time a freewheeling MOSFET conducts through its body diode alone.
* The diode that gives up its current recovers at every turn-on of the opposite
  switch, whether its own gate was on before or not.
* A gate pulse shorter than the dead time does not reach the gate.

What a finite carrier ratio N changes against the limit of an infinite one: conduction next to
nothing (natural sampling); of switching, one event more or less where a phase begins or ends to
switch, and events shifted by up to half a carrier: with N = 2000 some parts in a thousand
of a chip's switching loss.
"""

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.optimize import brentq

TURN = 2.0 * np.pi
MODULATIONS = ("sine", "third-harmonic", "third-harmonic-quarter", "space-vector", "clamp-60-voltage-peak", "clamp-60-current-peak",
               "clamp-30", "clamp-120-upper", "clamp-120-lower")
OVERMODULATED = MODULATIONS[:4]
SIX_STEP = 4.0 / np.pi
#: Pulses shorter than this share of half a carrier are rounding, not pulses.
_NO_PULSE = 1e-9


# ------------------------------------------------------------------ references

def linear_limit(modulation):
    """Largest modulation index whose reference of phase a stays within +-1; by looking."""
    if modulation in ("sine", "third-harmonic", "third-harmonic-quarter", "space-vector"):
        x = np.linspace(0.0, np.pi / 2, 2_000_001)
        return float(1.0 / _shape(modulation, x).max())
    return 2.0 / np.sqrt(3.0)  # line voltage of the full link


def _sines(x):
    a, half = np.sin(x), 0.5 * np.sqrt(3.0) * np.cos(x)
    return a, -0.5 * a - half, -0.5 * a + half  # sin x, sin(x - 120 deg), sin(x + 120 deg)


def _extremes(x):
    a, b, c = _sines(x)
    return a, np.maximum(np.maximum(a, b), c), np.minimum(np.minimum(a, b), c)


def _shape(modulation, x):
    """Reference of phase a per unit of modulation index, where it is proportional to it."""
    if modulation == "space-vector":
        a, largest, smallest = _extremes(x)
        return a - 0.5 * (largest + smallest)
    return np.sin(x) + {"sine": 0.0, "third-harmonic": 1.0 / 6.0, "third-harmonic-quarter": 1.0 / 4.0}[modulation] * np.sin(3.0 * x)


def window_shift(modulation, phi):
    """Angle by which the windows move from the peaks of the voltage [rad]."""
    if modulation != "clamp-60-current-peak":
        return 0.0
    folded = (phi + np.pi / 2) % np.pi - np.pi / 2  # [-90, 90): the largest current, whichever its sign
    if np.isclose(folded, -np.pi / 2):
        folded = np.pi / 2
    return float(np.clip(folded, -np.pi / 6, np.pi / 6))


def first_minimum(modulation, phi):
    """Angle theta at which the carrier has a minimum [rad]."""
    if modulation in ("clamp-60-voltage-peak", "clamp-60-current-peak", "clamp-30"):
        return window_shift(modulation, phi) - phi  # a jump; the others follow in steps of 30 or 60 degrees
    return 0.0


def _clamped(modulation, x, m, phi):
    """Reference of phase a when at every angle the largest of the three is held high or the smallest low."""
    a, largest, smallest = _extremes(x)
    if modulation in ("clamp-60-voltage-peak", "clamp-60-current-peak"):
        # the phase of which the moved sine is largest in magnitude; with at most 30 degrees it has the largest or smallest reference too
        _, high, low = _extremes(x - window_shift(modulation, phi))
        up = high > -low
    elif modulation == "clamp-30":
        up = largest < -smallest
    else:
        up = modulation == "clamp-120-upper"
    return np.where(up, m * (a - largest) + 1.0, m * (a - smallest) - 1.0)


_X = (np.arange(20_000) + 0.5) * (np.pi / 2) / 20_000


@lru_cache(maxsize=4096)
def clipped_amplitude(modulation, mod_index):
    """Factor before the shape at which the clipped reference has the fundamental ``mod_index``; infinite in six-step."""
    shape, sine = _shape(modulation, _X), np.sin(_X)

    def fundamental(log_amplitude):  # a quarter wave stands for the whole
        return 2.0 * np.mean(np.clip(np.exp(log_amplitude) * shape, -1.0, 1.0) * sine)

    if mod_index >= 2.0 * np.mean(sine) * (1.0 - 1e-9):
        return np.inf
    return float(np.exp(brentq(lambda a: fundamental(a) - mod_index, np.log(0.9), 30.0, xtol=1e-13)))


def make_reference(modulation, mod_index, phi, overmodulation=False):
    """Function of theta: reference of phase a within -1 .. 1."""
    if modulation in OVERMODULATED:
        amplitude = mod_index
        if mod_index > linear_limit_cached(modulation):
            if not overmodulation:
                raise ValueError(f"mod_index {mod_index} is beyond the linear range of {modulation}")
            amplitude = clipped_amplitude(modulation, mod_index)
        if np.isinf(amplitude):
            return lambda theta: np.sign(_shape(modulation, theta + phi))
        return lambda theta: np.clip(amplitude * _shape(modulation, theta + phi), -1.0, 1.0)
    if overmodulation and mod_index > linear_limit_cached(modulation):
        raise ValueError(f"{modulation} has no overmodulation")
    return lambda theta: np.clip(_clamped(modulation, theta + phi, mod_index, phi), -1.0, 1.0)


linear_limit_cached = lru_cache(maxsize=None)(linear_limit)


# ------------------------------------------------------------------ curves

def _along(points, currents):
    """Broken line through (x, y) with straight ends, never below zero."""
    x, y = np.asarray(points[0], float), np.asarray(points[1], float)
    out = np.interp(currents, x, y)
    out = np.where(currents > x[-1], y[-1] + (currents - x[-1]) * (y[-1] - y[-2]) / (x[-1] - x[-2]), out)
    out = np.where(currents < x[0], y[0] + (currents - x[0]) * (y[1] - y[0]) / (x[1] - x[0]), out)
    return np.maximum(out, 0.0)


def _points(curves):
    """[(temperature, currents, values)] of on-state or energy curves; lines only where there are no points."""
    if curves.curve:
        return [(c.t_vj_c, c.current_a, c.energy_j if hasattr(c, "energy_j") else c.voltage_v) for c in curves.curve]
    return [(k.t_vj_c, (0.0, k.current_end_a), (k.v0_v, k.v0_v + k.r_ohm * k.current_end_a)) for k in curves.line]


def at_temperature(curves, t_c):
    """(currents, values) whose plain interpolation is the curve at ``t_c``, far beyond its end."""
    sets = _points(curves)
    k = max(j for j in range(len(sets) - 1) if j == 0 or sets[j][0] <= t_c)
    (t0, x0, y0), (t1, x1, y1) = sets[k], sets[k + 1]
    grid = {0.0, 1e3 * max(x0[-1], x1[-1]), *x0, *x1}
    for x, y in ((x0, y0), (x1, y1)):  # where the extension towards zero current meets zero
        if y[1] > y[0]:
            foot = x[0] - y[0] * (x[1] - x[0]) / (y[1] - y[0])
            if foot > 0.0:
                grid.add(foot)
    grid = np.array(sorted(grid))
    cold, hot = _along((x0, y0), grid), _along((x1, y1), grid)
    return grid, cold + (hot - cold) * (t_c - t0) / (t1 - t0)


def in_parallel(one, two):
    """(currents, voltages) of two (currents, voltages) side by side: equal drops, currents add."""
    volts = np.unique(np.concatenate([one[1], two[1]]))
    volts = volts[volts <= min(one[1][-1], two[1][-1])]

    def carries(curve):
        i, v = curve
        return np.where(volts < v[0], 0.0, np.interp(volts, v, i))

    total = carries(one) + carries(two)
    start = np.flatnonzero(total > 0.0)[0] - 1  # no current below the lower of the two starting voltages
    return total[start:], volts[start:]


def resistor_factor(curves, r_ohm):
    """Energy at a gate resistor over that at the reference one."""
    part = curves.gate_resistor
    if part is None:
        return 1.0
    if not min(part.r_ohm) <= r_ohm <= max(part.r_ohm):
        raise ValueError(f"gate resistor {r_ohm} outside the data")
    return float(np.interp(r_ohm, part.r_ohm, part.energy_j) / np.interp(part.r_ref_ohm, part.r_ohm, part.energy_j))


# ------------------------------------------------------------------ legs

POSITIONS = {
    "two chips": ("S-up", "S-lo", "D-up", "D-lo"),
    "one chip": ("S-up", "S-lo"),
    "npc-leg": ("SO-up", "SO-lo", "SI-up", "SI-lo", "DO-up", "DO-lo", "DI-up", "DI-lo", "DC-up", "DC-lo"),
    "t-type-leg": ("SO-up", "SO-lo", "SI-up", "SI-lo", "DO-up", "DO-lo", "DI-up", "DI-lo"),
}
T1, T2, T3, T4 = "SO-up", "SI-up", "SI-lo", "SO-lo"
D1, D2, D3, D4, D5, D6 = "DO-up", "DI-up", "DI-lo", "DO-lo", "DC-up", "DC-lo"
#: state (how many of the leg's signals are high), current out of the leg positive -> elements that conduct
CONDUCTS = {
    "two-level": {(1, True): ("S-up",), (0, True): ("D-lo",), (1, False): ("D-up",), (0, False): ("S-lo",)},
    "npc-leg": {(2, True): (T1, T2), (1, True): (D5, T2), (0, True): (D3, D4), (2, False): (D1, D2), (1, False): (T3, D6), (0, False): (T3, T4)},
    "t-type-leg": {(2, True): (T1,), (1, True): (T2, D3), (0, True): (D4,), (2, False): (D1,), (1, False): (T3, D2), (0, False): (T4,)},
}
#: signal, current positive -> switch that turns on and off, diode that recovers
SWITCHES = {
    "two-level": {(0, True): ("S-up", "D-lo"), (0, False): ("S-lo", "D-up")},
    "npc-leg": {(0, True): (T1, D5), (0, False): (T3, D1), (1, True): (T2, D4), (1, False): (T4, D6)},
    "t-type-leg": {(0, True): (T1, D3), (0, False): (T3, D1), (1, True): (T2, D4), (1, False): (T4, D2)},
}
_SECTION = {"S": "switch", "D": "diode", "SO": "switch", "DO": "diode", "SI": "inner_switch", "DI": "inner_diode", "DC": "clamp_diode"}


class Leg:
    """What of a module the averaging needs, at given temperatures."""

    def __init__(self, module, t_vj_c):
        self.module = module
        self.levels = 3 if module.arrangement in ("npc-leg", "t-type-leg") else 2
        self.topology = module.arrangement if self.levels == 3 else "two-level"
        self.one_chip = module.kind in ("mosfet", "reverse-conducting-igbt")
        self.positions = POSITIONS["one chip" if self.one_chip else "two chips"] if self.levels == 2 else POSITIONS[module.arrangement]
        t = np.broadcast_to(np.asarray(t_vj_c, float), (len(self.positions),))
        self.t_c = dict(zip(self.positions, t.tolist()))
        self._tables = {}

    def position(self, element):
        """The chip that an element is on."""
        return element.replace("D-", "S-") if self.one_chip else element

    def part(self, element):
        return getattr(self.module, _SECTION[element.split("-")[0]])

    def voltage(self, element, backwards=False):
        """On-state (currents, volts): of a transistor, a diode, or (``backwards``) a MOSFET's channel from source to drain."""
        key = (element, backwards)
        if key not in self._tables:
            t_c = self.t_c[self.position(element)]
            if not backwards:
                self._tables[key] = at_temperature(self.part(element).on_state, t_c)
            elif self.module.switch.reverse is not None:
                self._tables[key] = at_temperature(self.module.switch.reverse, t_c)
            else:
                self._tables[key] = in_parallel(at_temperature(self.module.switch.on_state, t_c), at_temperature(self.module.diode.on_state, t_c))
        return self._tables[key]

    def energy_j(self, element, which, current, v_commutation_v, r_ohm):
        """Sum of the energies of events at these currents."""
        curves = getattr(self.part(element), which)
        if curves is None or current.size == 0:
            return 0.0
        key = (element, which)
        if key not in self._tables:
            self._tables[key] = at_temperature(curves, self.t_c[self.position(element)])
        scale = (v_commutation_v / curves.v_ref_v) ** curves.voltage_exponent * resistor_factor(curves, r_ohm)
        return float(np.interp(current, *self._tables[key]).sum() * scale)


@dataclass(frozen=True)
class SwitchedAverage:
    """Means over a fundamental period [W] by position, and the leg's fundamental over half the link (in phase, in quadrature)."""

    positions: tuple
    conduction_w: np.ndarray
    switching_w: np.ndarray
    fundamental: tuple
    events: int

    @property
    def total_w(self):
        return self.conduction_w + self.switching_w


class _Signal:
    """One pair of complementary gates over a period: asked-for edges by natural sampling."""

    def __init__(self, share, ratio, iterations):
        """``share``: of the upper state, a function of the angle from the carrier's first minimum."""
        half = np.arange(2 * ratio)
        self.width = np.pi / ratio
        self.rising = half % 2 == 0
        u = np.full(half.size, 0.5)
        for _ in range(iterations):
            s = share((half + np.clip(u, 1e-6, 1.0 - 1e-6)) * self.width)  # at the ends of a half carrier the next reference may hold
            u = np.where(self.rising, s, 1.0 - s)
        u = np.where(u < _NO_PULSE, 0.0, np.where(u > 1.0 - _NO_PULSE, 1.0, u))
        self.place = u
        self.crossing = ((half + u) * self.width)[(u > 0.0) & (u < 1.0)]
        # edges: where the asked-for state changes from one stretch to the next
        start = np.stack([half * self.width, (half + u) * self.width], axis=1).ravel()
        state = np.stack([self.rising, ~self.rising], axis=1).ravel()
        exists = np.stack([u > 0.0, u < 1.0], axis=1).ravel()
        start, state = start[exists], state[exists]
        before = np.roll(state, 1)
        self.rise, self.fall = start[state & ~before], start[~state & before]

    def asked(self, angle):
        half = np.minimum((angle / self.width).astype(int), self.place.size - 1)
        first = angle / self.width - half < self.place[half]
        return first == self.rising[half]

    @staticmethod
    def since(edges, angle):
        if edges.size == 0:
            return np.full(angle.shape, np.inf)
        return (angle - edges[np.searchsorted(edges, angle) - 1]) % TURN

    @staticmethod
    def until(edges, angle):
        if edges.size == 0:
            return np.full(angle.shape, np.inf)
        return (edges[np.searchsorted(edges, angle) % edges.size] - angle) % TURN


def switched_average(module, modulation, *, i_peak_a, mod_index, phi_rad, switching_frequency_hz, v_dc_v, t_vj_c=None, dead_time_s=0.0,
                     dead_time_compensated=False, overmodulation=False, r_gate_on_ohm=None, r_gate_off_ohm=None, carrier_ratio=2003):
    """Losses of one leg at one operating point, from its switched waveform.

    Parameters
    ----------
    module : PowerModule or Leg
        A leg comes with its temperatures; ``t_vj_c`` then goes without effect.
    modulation : str
        One of ``MODULATIONS``.
    i_peak_a, mod_index, phi_rad, switching_frequency_hz, v_dc_v, dead_time_s : float
    t_vj_c : float or sequence in the order of ``positions``
    dead_time_compensated : bool
        The leg's output is as asked for: the turn-on that takes the current over is commanded earlier by the
        dead time, so it happens when asked for.
    carrier_ratio : int
        Carrier periods in a fundamental period; the fundamental frequency is the switching frequency over it.
        A multiple of 6 for clamps that hold a phase for 60 or 30 degrees.

    Returns
    -------
    SwitchedAverage
    """
    leg = module if isinstance(module, Leg) else Leg(module, t_vj_c)
    module = leg.module
    start = first_minimum(modulation, phi_rad)  # all angles below count from there
    at = make_reference(modulation, float(mod_index), float(phi_rad), overmodulation)

    def reference(angle):
        return at(angle + start)

    dead = dead_time_s * switching_frequency_hz * TURN / carrier_ratio
    if dead_time_compensated and module.kind != "mosfet":
        dead = 0.0  # the same elements conduct and switch as without it
    iterations = 5 if overmodulation else 2  # an error of 0.5 becomes one of (m pi/2 ratio)^iterations/2
    if leg.levels == 2:
        shares = [lambda angle: 0.5 * (1.0 + reference(angle))]
    else:  # carriers one above the other, in phase
        shares = [lambda angle: np.clip(reference(angle), 0.0, 1.0), lambda angle: np.clip(1.0 + reference(angle), 0.0, 1.0)]
    signals = [_Signal(share, carrier_ratio, iterations) for share in shares]

    marks = [np.arange(2 * carrier_ratio + 1) * (np.pi / carrier_ratio), np.array([-start % TURN, (np.pi - start) % TURN])]
    for s in signals:
        marks.append(s.crossing)
        if dead > 0.0:
            edges = np.concatenate([s.rise, s.fall])
            marks.append((edges + dead) % TURN)
            if dead_time_compensated:
                marks.append((edges - dead) % TURN)
    marks = np.sort(np.concatenate(marks))
    marks[-1] = TURN
    marks = marks[np.concatenate([[True], np.diff(marks) > 1e-13])]
    length, middle = np.diff(marks), 0.5 * (marks[1:] + marks[:-1])
    outward = np.sin(middle + start) > 0.0

    highs, gated = [], np.ones(middle.shape, bool)
    for s in signals:
        high = asked = s.asked(middle)
        if dead > 0.0:
            if dead_time_compensated:
                upper = asked & (np.minimum(s.since(s.rise, middle), s.until(s.fall, middle)) > dead)
                lower = ~asked & (np.minimum(s.since(s.fall, middle), s.until(s.rise, middle)) > dead)
            else:
                upper = asked & (s.since(s.rise, middle) > dead)
                lower = ~asked & (s.since(s.fall, middle) > dead)
                high = np.where(outward, upper, ~lower)  # with both off the current takes the diode
            gated = np.where(outward, lower, upper)  # only looked at where the current freewheels
        highs.append(high)
    state = np.sum(highs, axis=0)

    # conduction: the middle of every stretch, none of which is longer than half a carrier
    current = i_peak_a * np.abs(np.sin(middle + start))
    weight = current * (length / TURN)
    conduction = dict.fromkeys(leg.positions, 0.0)
    for (level, positive), elements in CONDUCTS[leg.topology].items():
        here = (state == level) & (outward == positive)
        for element in elements:
            cases = [(here, False)]
            if module.kind == "mosfet" and element.startswith("D"):
                cases = [(here & ~gated, False), (here & gated, True)]
            for where, backwards in cases:
                v = np.interp(current[where], *leg.voltage(element, backwards))
                conduction[leg.position(element)] += float((v * weight[where]).sum())

    # switching: every change of a signal, the last stretch followed by the first
    r_on = module.gate.r_on_ohm if r_gate_on_ohm is None else r_gate_on_ohm
    r_off = module.gate.r_off_ohm if r_gate_off_ohm is None else r_gate_off_ohm
    v_commutation = v_dc_v / (leg.levels - 1)
    switching = dict.fromkeys(leg.positions, 0.0)
    per_period = switching_frequency_hz / carrier_ratio
    current_at = i_peak_a * np.abs(np.sin(marks[:-1] + start))
    events = 0
    for number, high in enumerate(highs):
        before = np.roll(high, 1)
        for positive in (True, False):
            switch, diode = SWITCHES[leg.topology][number, positive]
            on = high & ~before if positive else ~high & before  # the switch that carries the current when its signal asks for it
            off = ~high & before if positive else high & ~before
            i_on, i_off = current_at[on & (outward == positive)], current_at[off & (outward == positive)]
            events += i_on.size + i_off.size
            switching[leg.position(switch)] += per_period * (
                leg.energy_j(switch, "turn_on", i_on, v_commutation, r_on) + leg.energy_j(switch, "turn_off", i_off, v_commutation, r_off))
            switching[leg.position(diode)] += per_period * leg.energy_j(diode, "recovery", i_on, v_commutation, r_on)

    level = 2.0 * state / (leg.levels - 1) - 1.0
    x = marks + start + phi_rad
    fundamental = (float((level * -np.diff(np.cos(x))).sum() / np.pi), float((level * np.diff(np.sin(x))).sum() / np.pi))
    return SwitchedAverage(leg.positions, np.array([conduction[p] for p in leg.positions]), np.array([switching[p] for p in leg.positions]),
                           fundamental, events)
