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
        Angle of the current of phase a at standstill [rad]; see :func:`worst_standstill_rad`.
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
        """Loop gain with the chips at given temperatures, shape (n,); negative where losses fall with temperature."""
        return float(np.linalg.eigvals(self.r_k_per_w * self._slopes(np.asarray(t_vj_c, float))).real.max())

    def settle(self, coolant_c: float) -> SteadyState:
        """Temperatures that the point settles at, coming from the coolant's.

        Notes
        -----
        Newton steps solve each straight piece exactly. Where the gain is above one the temperatures
        follow the losses upwards, until a flatter piece or the end.
        """
        n = self.r_k_per_w.shape[0]
        t = np.full(n, float(coolant_c))
        gain, settled = np.inf, False
        for _ in range(500):
            gap = coolant_c + self.r_k_per_w @ self.loss_w(t) - t
            gain = self.loop_gain(t)
            settled = bool(np.abs(gap).max() < 1e-8 * max(1.0, np.abs(t).max()))
            if settled or not t.max() < BEYOND_C:
                break
            if gain < 1.0:
                # inside one straight piece this is the exact answer; a step ends at the first corner on its way
                step = np.linalg.solve(np.eye(n) - self.r_k_per_w * self._slopes(t), gap)
                step = step * self._to_next_corner(t, step)
            else:
                step = gap
            t = t + step
        if not settled or gain >= 1.0 or not t.max() < BEYOND_C:
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
        share = 1.0
        for i in range(t.size):
            # the first and the last corner end no piece: beyond them the line goes on
            inner = self.knot_c[1:-1]
            ahead = inner[inner > t[i]] - t[i] if step[i] > 0.0 else t[i] - inner[inner < t[i]][::-1]
            if ahead.size and abs(step[i]) > ahead[0] + 1e-9:
                share = min(share, (ahead[0] + 1e-9) / abs(step[i]))
        return max(share, 1e-6)


def worst_standstill_rad(tables: LossTables, network: ReducedNetwork, *, t_vj_c: float, **point) -> float:
    """Angle of the current of phase a at which a standstill heats its hottest chip most.

    Parameters
    ----------
    tables : LossTables
    network : ReducedNetwork
    t_vj_c : float
        Temperature at which the losses are weighed, e.g. the junction limit [degC].
    **point
        As for :class:`HeldPoint`, without ``theta_rad``.

    Returns
    -------
    float
        [rad]. Every three degrees are tried, and both sides of every angle where a held phase changes: which phase
        is held decides as much as the peak of the current.
    """
    angles = np.radians(np.arange(0.0, 360.0, 3.0))
    jumps = tables.jump_angles_rad(**point)
    third = 2.0 * np.pi / 3.0
    beside = np.concatenate([jumps + side + third * leg for side in (-1e-6, 1e-6) for leg in range(3)]) if jumps.size else jumps
    angles = np.concatenate([angles, np.mod(beside, 2.0 * np.pi)])
    corner = np.array([tables.corner_losses_w(theta, **point) for theta in np.concatenate([angles - third * leg for leg in range(3)])])
    knot = tables.knot_c
    k = int(np.clip(np.searchsorted(knot, t_vj_c, side="right") - 1, 0, max(knot.size - 2, 0)))
    at = corner[..., k] + (t_vj_c - knot[k]) / (knot[k + 1] - knot[k]) * (corner[..., k + 1] - corner[..., k]) if knot.size > 1 else corner[..., 0]
    by_leg = np.maximum(at, 0.0).reshape(3, angles.size, -1)
    chips = np.arange(network.n_chips)
    loss = by_leg[(chips % 6) // 2, :, 2 * (chips // 6) + chips % 2]  # (chips, angles)
    return float(angles[np.argmax((network.r_th_k_per_w() @ loss).max(axis=0))])
