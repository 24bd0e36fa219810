"""Modulation of a two-level bridge: what is added to the sine reference.

Phase reference: m sin(x) + zero sequence, x = theta + phi; duty of the upper
switch (1 + reference)/2.
"""

from __future__ import annotations

import enum

import numpy as np

MOD_INDEX_INJECTED_MAX = 2.0 / np.sqrt(3.0)


class Modulation(enum.StrEnum):
    """How the phase references are formed.

    ``SINE``: plain sine; ``THIRD_HARMONIC``: a sixth of third harmonic added;
    ``SPACE_VECTOR``: centred space vector (half of the largest and smallest
    reference taken off all three).
    """

    SINE = "sine"
    THIRD_HARMONIC = "third-harmonic"
    SPACE_VECTOR = "space-vector"

    @property
    def code(self) -> int:
        """Number that the kernels know it by."""
        return {"sine": 0, "third-harmonic": 1, "space-vector": 2}[self.value]

    @property
    def mod_index_max(self) -> float:
        """Largest modulation index without overmodulation."""
        return 1.0 if self is Modulation.SINE else MOD_INDEX_INJECTED_MAX

    def harmonics(self) -> dict[int, float]:
        """Sine harmonics of the phase reference per unit of modulation index.

        The third harmonic enters as +1/6 sin 3x. The zero sequence of the centred
        space vector is half a sine around each zero crossing; its series is cut
        after the 45th harmonic, which leaves less than 2e-6 of the conduction loss.
        """
        if self is Modulation.SINE:
            return {1: 1.0}
        if self is Modulation.THIRD_HARMONIC:
            return {1: 1.0, 3: 1.0 / 6.0}
        series = {1: 1.0}
        for h in range(3, 46, 6):
            series[h] = 3.0 / np.pi * (np.sin((h - 1) * np.pi / 6) / (h - 1) - np.sin((h + 1) * np.pi / 6) / (h + 1))
        return series


def phase_reference(modulation: Modulation, x_rad, mod_index):
    """Reference of phase a with its zero sequence, between -1 and 1 in the linear range.

    Parameters
    ----------
    modulation : Modulation
    x_rad : array_like
        Angle of the voltage reference, theta + phi [rad].
    mod_index : array_like

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
    b, c = m * np.sin(x - 2 * np.pi / 3), m * np.sin(x + 2 * np.pi / 3)
    return a - 0.5 * (np.maximum(np.maximum(a, b), c) + np.minimum(np.minimum(a, b), c))
