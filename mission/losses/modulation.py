"""Modulation of a bridge: what is added to the sine reference, and when a phase is held.

Phase reference: m sin(x) + zero sequence, x = theta + phi. Duty of the upper
switch of a two-level leg (1 + reference)/2; a three-level leg connects to P
for the share ``reference`` while it is positive, to N for ``-reference`` while
it is negative, and to the midpoint for the rest.
"""

from __future__ import annotations

import enum
from functools import lru_cache

import numpy as np

from ..checks import require_range
from ..errors import RangeError

MOD_INDEX_INJECTED_MAX = 2.0 / np.sqrt(3.0)
#: Fundamental of six-step operation.
MOD_INDEX_SIX_STEP = 4.0 / np.pi
_LARGEST_REFERENCE = 1e6
_THIRD = 2.0 * np.pi / 3.0


class Modulation(enum.StrEnum):
    """How the phase references are formed.

    ``SINE``: plain sine. ``THIRD_HARMONIC``, ``THIRD_HARMONIC_QUARTER``: a sixth or a quarter of third
    harmonic added. ``SPACE_VECTOR``: centred space vector (half of the largest and smallest reference
    taken off all three). Clamps hold one phase at a time at a rail, where it does not switch:
    ``CLAMP_60_VOLTAGE``: 60 degrees at each peak of the phase voltage; ``CLAMP_60_CURRENT``: moved towards
    the peaks of the phase current, by 30 degrees at most; ``CLAMP_30``: four times 30 degrees beside the
    voltage peaks; ``CLAMP_120_UPPER``, ``CLAMP_120_LOWER``: 120 degrees at one rail only, so that upper
    and lower chips are loaded differently.
    """

    SINE = "sine"
    THIRD_HARMONIC = "third-harmonic"
    THIRD_HARMONIC_QUARTER = "third-harmonic-quarter"
    SPACE_VECTOR = "space-vector"
    CLAMP_60_VOLTAGE = "clamp-60-voltage-peak"
    CLAMP_60_CURRENT = "clamp-60-current-peak"
    CLAMP_30 = "clamp-30"
    CLAMP_120_UPPER = "clamp-120-upper"
    CLAMP_120_LOWER = "clamp-120-lower"

    @property
    def code(self) -> int:
        """Number that the kernels know it by; both 60-degree clamps share one, with a shift."""
        return {"sine": 0, "third-harmonic": 1, "third-harmonic-quarter": 2, "space-vector": 3, "clamp-60-voltage-peak": 4,
                "clamp-60-current-peak": 4, "clamp-30": 5, "clamp-120-upper": 6, "clamp-120-lower": 7}[self.value]

    @property
    def mod_index_max(self) -> float:
        """Largest modulation index without overmodulation."""
        if self is Modulation.SINE:
            return 1.0
        if self is Modulation.THIRD_HARMONIC_QUARTER:
            # highest point of sin x + sin(3x)/4, where sin^2 x = 7/12
            return 1.0 / (7.0 / 6.0 * np.sqrt(7.0 / 12.0))
        return MOD_INDEX_INJECTED_MAX

    @property
    def holds(self) -> bool:
        """Whether phases are held at a rail in the linear range."""
        return self.code >= 4

    @property
    def half_wave_symmetric(self) -> bool:
        """Whether upper and lower chips carry the same losses half a period apart."""
        return self not in (Modulation.CLAMP_120_UPPER, Modulation.CLAMP_120_LOWER)

    def shift_rad(self, phi_rad):
        """By how much the held stretches follow the current: phi folded into +-90 degrees, at most 30 [rad]."""
        phi = np.asarray(phi_rad, float)
        if self is not Modulation.CLAMP_60_CURRENT:
            return np.zeros_like(phi)
        folded = phi - np.pi * np.round(phi / np.pi)
        return np.clip(folded, -np.pi / 6.0, np.pi / 6.0)

    def harmonics(self) -> dict[int, float]:
        """Sine harmonics of the phase reference per unit of modulation index, for the four that hold no phase.

        The zero sequence of the centred space vector is half a sine around each zero
        crossing; its series is cut after the 45th harmonic, which leaves less than
        2e-6 of the conduction loss.

        Raises
        ------
        RangeError
            For clamps, whose zero sequence is not proportional to the modulation index.
        """
        if self is Modulation.SINE:
            return {1: 1.0}
        if self is Modulation.THIRD_HARMONIC:
            return {1: 1.0, 3: 1.0 / 6.0}
        if self is Modulation.THIRD_HARMONIC_QUARTER:
            return {1: 1.0, 3: 0.25}
        if self is not Modulation.SPACE_VECTOR:
            raise RangeError("modulation", f"'{self.value}'", "a modulation that holds no phase", "use leg_losses_w, which takes every modulation")
        series = {1: 1.0}
        for h in range(3, 46, 6):
            series[h] = 3.0 / np.pi * (np.sin((h - 1) * np.pi / 6) / (h - 1) - np.sin((h + 1) * np.pi / 6) / (h + 1))
        return series


#: Which phase (0, 1, 2) is held at which rail, by sectors of the angle: 60 degrees from zero, and 30 degrees from zero.
_HELD_60 = ((1, -1), (0, 1), (2, -1), (1, 1), (0, -1), (2, 1))
_HELD_30 = ((2, 1), (0, 1), (1, -1), (2, -1), (0, 1), (1, 1), (2, -1), (0, -1), (1, 1), (2, 1), (0, -1), (1, -1))
#: Largest and smallest of the three references by sectors of 120 degrees from 30 and from 90 degrees.
_HELD_UP, _HELD_LOW = ((0, 1), (1, 1), (2, 1)), ((2, -1), (0, -1), (1, -1))


def held_phase(modulation: Modulation, x_rad, phi_rad=0.0):
    """Phase that a clamp holds at the angle ``x_rad`` of phase a, and its rail.

    Returns
    -------
    phase, rail : ndarray of int
        0, 1, 2 for a, b, c; +1 or -1.
    """
    turn = np.mod(np.asarray(x_rad, float) - modulation.shift_rad(phi_rad), 2.0 * np.pi)
    if modulation.code == 4:
        table, sector = _HELD_60, turn / (np.pi / 3)
    elif modulation.code == 5:
        table, sector = _HELD_30, turn / (np.pi / 6)
    elif modulation.code == 6:
        table, sector = _HELD_UP, np.mod(turn - np.pi / 6, 2.0 * np.pi) / _THIRD
    elif modulation.code == 7:
        table, sector = _HELD_LOW, np.mod(turn - np.pi / 2, 2.0 * np.pi) / _THIRD
    else:
        raise RangeError("modulation", f"'{modulation.value}'", "a modulation that holds a phase")
    at = np.array(table)[np.minimum(sector.astype(int), len(table) - 1)]
    return at[..., 0], at[..., 1]


def phase_reference(modulation: Modulation, x_rad, mod_index, phi_rad=0.0):
    """Reference of phase a with its zero sequence, between -1 and 1 in the linear range.

    Parameters
    ----------
    modulation : Modulation
    x_rad : array_like
        Angle of the voltage reference, theta + phi [rad].
    mod_index : array_like
        Peak of the sine part; beyond the linear range the result has to be clipped to +-1.
    phi_rad : array_like
        Displacement [rad]; only the clamp at the current peaks asks for it.

    Examples
    --------
    >>> round(float(phase_reference(Modulation.SPACE_VECTOR, 1.0471975512, 1.1547005384)), 6)
    1.0
    """
    x = np.asarray(x_rad, float)
    m = np.asarray(mod_index, float)
    a = m * np.sin(x)
    if modulation is Modulation.SINE:
        return a
    if modulation is Modulation.THIRD_HARMONIC:
        return a + m / 6.0 * np.sin(3.0 * x)
    if modulation is Modulation.THIRD_HARMONIC_QUARTER:
        return a + m / 4.0 * np.sin(3.0 * x)
    b, c = m * np.sin(x - _THIRD), m * np.sin(x + _THIRD)
    if modulation is Modulation.SPACE_VECTOR:
        return a - 0.5 * (np.maximum(np.maximum(a, b), c) + np.minimum(np.minimum(a, b), c))
    phase, rail = held_phase(modulation, x, phi_rad)
    return np.where(phase == 0, rail, a + rail - np.where(phase == 1, b, c))


def _highest_angle(modulation) -> float:
    """Where in the first quarter wave the reference is highest [rad]."""
    return {"sine": np.pi / 2, "third-harmonic": np.pi / 3, "third-harmonic-quarter": float(np.arcsin(np.sqrt(7.0 / 12.0))),
            "space-vector": np.pi / 3}[modulation.value]


def clip_angles_rad(modulation: Modulation, reference):
    """Between which angles of the first quarter wave a reference lies beyond +-1.

    Parameters
    ----------
    modulation : Modulation
        One that holds no phase.
    reference : ndarray
        Peak of the sine part of the reference, above the linear limit.

    Returns
    -------
    first, last : ndarray
        [rad]; ``last`` is pi/2 where the reference stays beyond 1 to the middle of the half wave.
    """
    size = np.asarray(reference, float)
    top = _highest_angle(modulation)

    def crossing(low, high, rising):
        for _ in range(60):
            middle = 0.5 * (low + high)
            beyond = phase_reference(modulation, middle, size) >= 1.0
            low, high = np.where(beyond == rising, low, middle), np.where(beyond == rising, middle, high)
        return 0.5 * (low + high)

    first = crossing(np.zeros_like(size), np.full_like(size, top), True)
    inside = phase_reference(modulation, np.full_like(size, np.pi / 2), size) >= 1.0
    last = crossing(np.full_like(size, top), np.full_like(size, np.pi / 2), False) if top < np.pi / 2 else np.full_like(size, np.pi / 2)
    return first, np.where(inside, np.pi / 2, last)


def _fundamental(modulation, size):
    """Fundamental of the clipped reference, ``size`` (n,)."""
    first, last = clip_angles_rad(modulation, size)
    nodes, weights = np.polynomial.legendre.leggauss(40)
    fixed = np.full_like(size, np.pi / 6)
    borders = np.sort(np.stack([np.zeros_like(size), fixed, first, last, np.full_like(size, np.pi / 2)]), axis=0)
    total = np.zeros_like(size)
    for a, b in zip(borders[:-1], borders[1:]):
        x = 0.5 * (a + b) + 0.5 * (b - a) * nodes[:, None]
        total += 0.5 * (b - a) * (weights[:, None] * np.minimum(phase_reference(modulation, x, size), 1.0) * np.sin(x)).sum(axis=0)
    return 4.0 / np.pi * total


@lru_cache(maxsize=8)
def _overmodulation_table(modulation):
    """Fundamental over the inverse of the reference, from the linear limit to six-step."""
    limit = modulation.mod_index_max
    share = np.sin(np.linspace(0.0, np.pi / 2, 1201))  # fine where six-step is near
    size = limit / np.maximum(1.0 - share, limit / _LARGEST_REFERENCE)
    return size, _fundamental(modulation, size)


def reference_for(modulation: Modulation, mod_index):
    """Peak of the sine part of the reference that makes a fundamental, with the angles where it is clipped.

    Parameters
    ----------
    modulation : Modulation
    mod_index : array_like
        Wanted fundamental peak phase voltage over half the DC voltage; up to 4/pi for
        the modulations that hold no phase.

    Returns
    -------
    reference, first_rad, last_rad : ndarray
        In the linear range the modulation index itself, pi/2 and pi/2. Six-step has a reference of a million.

    Raises
    ------
    RangeError
        Beyond six-step, or beyond the linear range of a clamp.

    Notes
    -----
    The three references are scaled up together and cut at the rails (for sine and centred
    space vector the common way into six-step).
    """
    m = np.atleast_1d(np.asarray(mod_index, float))
    limit = modulation.mod_index_max
    most = limit if modulation.holds else MOD_INDEX_SIX_STEP
    require_range("mod_index", m, low=0.0, high=most * (1.0 + 1e-9))
    size, first, last = m.copy(), np.full(m.shape, np.pi / 2), np.full(m.shape, np.pi / 2)
    beyond = m > limit * (1.0 + 1e-9)
    if beyond.any():
        sizes, fundamentals = _overmodulation_table(modulation)
        wanted = np.minimum(m[beyond], fundamentals[-1])
        low = np.searchsorted(fundamentals, wanted, side="right").clip(1, fundamentals.size - 1)
        # the inverse of the reference is nearly straight between two entries of the table; a few secant steps make it exact
        a, b = 1.0 / sizes[low - 1], 1.0 / sizes[low]
        f_a, f_b = fundamentals[low - 1] - wanted, fundamentals[low] - wanted
        for _ in range(4):
            slope = np.where(f_b != f_a, (b - a) / np.where(f_b != f_a, f_b - f_a, 1.0), 0.0)
            a, f_a, b = b, f_b, np.clip(b - f_b * slope, 1.0 / _LARGEST_REFERENCE, 1.0 / limit)
            f_b = _fundamental(modulation, 1.0 / b) - wanted
        size[beyond] = 1.0 / b
        first[beyond], last[beyond] = clip_angles_rad(modulation, size[beyond])
    return size, first, last
