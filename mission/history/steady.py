"""Where the temperatures settle if an operating point lasts for ever, and whether they settle at all.

Losses rise with temperature and temperatures with losses. Small disturbances grow by
the loop gain: the largest eigenvalue of (steady thermal resistances) times (slope of every
chip's loss over its own temperature). Below one they die out. Between the temperatures of
the data sheet the slope is constant, so the gain is a staircase; beyond the last one the
last straight piece goes on.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..losses import LossTables
from ..thermal import ReducedNetwork

#: Beyond this no temperature of a power chip has a meaning [degC].
BEYOND_C = 1000.0


@dataclass(frozen=True)
class SteadyState:
    """An operating point that lasts for ever; n chips.

    Attributes
    ----------
    exists : bool
        Whether a stable temperature exists below 1000 degC.
    t_vj_c, loss_w : ndarray, shape (n,)
        Means over a fundamental period; NaN where none exists.
    loop_gain : float
        At that state; at 1000 degC where none exists.
    """

    exists: bool
    t_vj_c: np.ndarray
    loss_w: np.ndarray
    loop_gain: float


class HeldPoint:
    """One operating point on one network.

    Parameters
    ----------
    tables : LossTables
    network : ReducedNetwork
    i_peak_a, mod_index, phi_rad, frequency_hz, direction, switching_frequency_hz, dc_voltage_v : float
        As in :class:`mission.machine.OperatingPoints`.
    theta_rad : float
        Angle of the current of phase a at standstill [rad]; by default phase a stands at its peak, which
        is the worst there is.
    """

    def __init__(self, tables: LossTables, network: ReducedNetwork, *, i_peak_a, mod_index, phi_rad, frequency_hz, switching_frequency_hz, dc_voltage_v,
                 direction=1.0, theta_rad=0.5 * np.pi):
        self.knot_c = tables.knot_c
        self.r_k_per_w = network.r_th_k_per_w()
        point = {"i_peak_a": i_peak_a, "mod_index": mod_index, "phi_rad": phi_rad, "frequency_hz": frequency_hz, "direction": direction,
                 "switching_frequency_hz": switching_frequency_hz, "dc_voltage_v": dc_voltage_v}
        n = network.n_chips
        chips = np.arange(n)
        position, leg = 2 * (chips // 6) + chips % 2, (chips % 6) // 2
        if frequency_hz > 0.0:
            self._corner_w = tables.corner_means_w(**point)[position]
        else:
            by_leg = np.stack([tables.corner_losses_w(theta_rad - 2.0 * np.pi / 3.0 * k, **point) for k in range(3)])
            self._corner_w = by_leg[leg, position]

    def loss_w(self, t_vj_c) -> np.ndarray:
        """Loss of every chip at its temperature, shape (n,) [W]."""
        return np.maximum(self._corner_w[np.arange(len(t_vj_c)), self._piece(t_vj_c)] + self._slopes(t_vj_c) * (t_vj_c - self.knot_c[self._piece(t_vj_c)]), 0.0)

    def loop_gain(self, t_vj_c) -> float:
        """Loop gain with the chips at given temperatures, shape (n,)."""
        return float(np.abs(np.linalg.eigvals(self.r_k_per_w * self._slopes(np.asarray(t_vj_c, float)))).max())

    def settle(self, coolant_c: float) -> SteadyState:
        """Temperatures that the point settles at, coming from the coolant's.

        Notes
        -----
        Newton steps solve each straight piece exactly; where they fail, plain repetition
        decides whether the temperatures run away.
        """
        n = self.r_k_per_w.shape[0]
        t = np.full(n, float(coolant_c))
        for _ in range(60):
            want = coolant_c + self.r_k_per_w @ self.loss_w(t)
            step = want - t
            if np.abs(step).max() < 1e-9 * max(1.0, np.abs(t).max()):
                break
            if self.loop_gain(t) < 1.0:
                # inside one piece this is the exact answer
                step = np.linalg.solve(np.eye(n) - self.r_k_per_w * self._slopes(t), step)
                # do not fly over a corner: a piece further on may be steeper
                limit = self._to_next_corner(t, step)
                step = step * limit
            t = t + step
            if not t.max() < BEYOND_C:
                break
        if not t.max() < BEYOND_C:
            return SteadyState(False, np.full(n, np.nan), np.full(n, np.nan), self.loop_gain(np.full(n, BEYOND_C)))
        for _ in range(20000):
            new = coolant_c + self.r_k_per_w @ self.loss_w(t)
            done = np.abs(new - t).max() < 1e-7
            t = new
            if done or not t.max() < BEYOND_C:
                break
        gain = self.loop_gain(t) if t.max() < BEYOND_C else np.inf
        if gain >= 1.0:
            return SteadyState(False, np.full(n, np.nan), np.full(n, np.nan), self.loop_gain(np.full(n, BEYOND_C)))
        return SteadyState(True, t, self.loss_w(t), gain)

    def runaway_coolant_c(self, coolant_c: float) -> float | None:
        """Coolant temperature from which on no stable temperature exists [degC]; None if there is none below 1000 degC."""
        low, high = -273.0, BEYOND_C - 1.0
        if self.settle(high).exists or self.loop_gain(np.full(self.r_k_per_w.shape[0], BEYOND_C)) < 1.0:
            return None
        if self.settle(coolant_c).exists:
            low = coolant_c
        else:
            high = coolant_c
        if not self.settle(low).exists:
            return low
        while high - low > 0.01:
            middle = 0.5 * (low + high)
            if self.settle(middle).exists:
                low = middle
            else:
                high = middle
        return 0.5 * (low + high)

    def _piece(self, t):
        return np.clip(np.searchsorted(self.knot_c, t, side="right") - 1, 0, max(self.knot_c.size - 2, 0))

    def _slopes(self, t):
        k = self._piece(t)
        if self.knot_c.size < 2:
            return np.zeros(len(t))
        chip = np.arange(len(t))
        slope = (self._corner_w[chip, k + 1] - self._corner_w[chip, k]) / (self.knot_c[k + 1] - self.knot_c[k])
        # a loss that would go below zero stays at zero
        return np.where(self._corner_w[chip, k] + slope * (t - self.knot_c[k]) > 0.0, slope, 0.0)

    def _to_next_corner(self, t, step):
        """Share of a step that brings the first chip to its next corner, at most 1."""
        up = np.searchsorted(self.knot_c, t, side="right")
        share = 1.0
        for i in range(t.size):
            if step[i] > 0.0 and up[i] < self.knot_c.size:
                share = min(share, (self.knot_c[up[i]] - t[i] + 1e-9) / step[i])
        return max(share, 1e-3)
