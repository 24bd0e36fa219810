"""The electrothermal march over a mission, block by block.

In: operating points of one block of rows. Out: turning points of every
junction and case point, ripple cycles, and a minimum/maximum envelope. Memory
does not grow with the length of the mission.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ..errors import InputError, NoStableTemperature
from ..losses import LossTables
from ..machine import OperatingPoints
from ..thermal import ReducedNetwork

CHIP_NAMES = tuple(f"{kind}-{leg}-{side}" for kind in "SD" for leg in "abc" for side in ("up", "lo"))
_POINT_CAPACITY = 32768
_LEVELS = 19


@dataclass(frozen=True)
class MarchSettings:
    """What steers the march.

    Attributes
    ----------
    f_slow_hz : float
        Below this output frequency the electrical angle itself is marched.
    steps_per_period : int
        Steps of the angle march in one fundamental period.
    settle_periods : float
        Periods that are marched by angle after a jump of the current in fast rotation.
    settle_above_k : float
        A jump is a change of the ripple by more than this.
    t_stop_c : float
        A junction above this is taken as runaway, not as a result.
    """

    f_slow_hz: float = 5.0
    steps_per_period: int = 128
    first_step_s: float = 2.0**-11
    longest_step_s: float = 16.0
    settle_periods: float = 2.0
    settle_above_k: float = 0.3
    t_stop_c: float = 500.0


@dataclass(frozen=True)
class PointBlock:
    """Turning points of one signal, in order of time; see ``cycles.CycleCounter.push``."""

    signal: int
    t_c: np.ndarray
    time_s: np.ndarray
    phase_id: np.ndarray
    half_period_s: np.ndarray
    ripple_k: np.ndarray


@dataclass(frozen=True)
class RippleBlock:
    """Output-frequency cycles beyond the one that the turning points carry; w windows, n chips."""

    range_k: np.ndarray  # (w, n)
    mean_c: np.ndarray  # (w, n)
    count: np.ndarray  # (w, n)
    half_period_s: np.ndarray  # (w,)
    start_s: np.ndarray  # (w,)
    end_s: np.ndarray  # (w,)
    phase_id: np.ndarray  # (w,)


@dataclass(frozen=True)
class RowEnvelope:
    """Extremes and heat of every row of a block; r rows, n chips."""

    start_s: np.ndarray
    end_s: np.ndarray
    phase_id: np.ndarray
    t_min_c: np.ndarray
    t_max_c: np.ndarray
    case_min_c: np.ndarray
    case_max_c: np.ndarray
    loss_j: np.ndarray
    coolant_c: np.ndarray


class ElectrothermalMarch:
    """Marches one inverter leg by leg, chip by chip.

    Parameters
    ----------
    tables : LossTables
    network : ReducedNetwork
        For twelve chips: six switches, then six diodes, a-upper, a-lower, b-upper ...
    settings : MarchSettings
    on_points, on_ripple : callable, optional
        Receive :class:`PointBlock` and :class:`RippleBlock` as they arise.
    """

    def __init__(self, tables: LossTables, network: ReducedNetwork, settings: MarchSettings | None = None, *,
                 on_points: Callable[[PointBlock], None] | None = None,
                 on_ripple: Callable[[RippleBlock], None] | None = None):
        from . import kernels as k

        if network.n_chips != k.N:
            raise InputError("thermal network", f"{network.n_chips} chips", "twelve: six switches and six diodes")
        self._k = k
        self.tables, self.network = tables, network
        self.settings = settings or MarchSettings()
        self._on_points, self._on_ripple = on_points, on_ripple
        if network.lam_local_per_s.shape[0] > k.L_MAX or network.lam_shared_per_s.size > k.S_MAX or tables.knot_c.size > k.K_MAX:
            raise InputError("march", f"{network.lam_local_per_s.shape[0]} local modes, {network.lam_shared_per_s.size} shared modes, "
                             f"{tables.knot_c.size} curve temperatures", f"at most {k.L_MAX}, {k.S_MAX} and {k.K_MAX}",
                             "reduce the network, or give all curves at the same few temperatures")
        s = self.settings
        self._settings = np.array([s.f_slow_hz, s.steps_per_period, s.first_step_s, s.longest_step_s, s.settle_periods, s.settle_above_k,
                                   s.t_stop_c], float)
        lam, rho, lam_s = network.lam_local_per_s, network.rho_local, network.lam_shared_per_s
        n_l, n_s = lam.shape[0], lam_s.size
        levels = np.empty((_LEVELS, 2 * n_l * k.N + k.N + 2 * n_s))
        for v in range(_LEVELS):
            k.step_factors(s.first_step_s * 2.0**v, lam, rho, lam_s, levels[v])
        group, group_kind, group_lam, group_rho = _ripple_groups(lam, rho, np.array([0] * 6 + [1] * 6))
        self._net = (n_l, n_s, np.ascontiguousarray(lam), np.ascontiguousarray(rho), np.ascontiguousarray(lam_s),
                     np.ascontiguousarray(network.g_coolant), np.ascontiguousarray(network.g_coolant_local), levels, np.empty(levels.shape[1]))
        self._groups = (group, group_kind, group_lam, group_rho)
        self._tables = (tables.knot_c, float(tables.i_step_a), tables.conduction_w, tables.energy_mean_j, tables.voltage_v,
                        tables.energy_j, tables.order, tables.amount, tables.modulation.code)
        cap = _POINT_CAPACITY
        self._count, self._rip_count = np.zeros(2 * k.N, np.int64), np.zeros(1, np.int64)
        self._points = (*(np.empty((2 * k.N, cap)) for _ in range(4)), np.empty((2 * k.N, cap), np.int16), self._count)
        self._ripple_out = (np.empty((cap // 2, k.N, 3)), np.empty((cap // 2, 4)), self._rip_count)

    def start(self, coolant_c: float, *, theta_rad: float = 0.0, states=None) -> None:
        """Begin a mission with everything at the coolant's temperature, or with the modes ``states`` of an earlier end."""
        k, net = self._k, self.network
        n_l, n_s = self._net[:2]
        w = np.zeros(k.W_SIZE)
        self._coolant_start = float(coolant_c)
        if states is not None:
            x_l, x_s, coolant_then = states
            w[k.X_L:k.X_L + n_l * k.N] = x_l - net.g_coolant_local.ravel() * (coolant_c - coolant_then)
            # the coolant may start elsewhere than it ended: temperatures stay
            w[k.X_S:k.X_S + n_s] = x_s - net.g_coolant * (coolant_c - coolant_then)
        for s in range(n_s):
            w[k.B_S + s:k.B_S + k.N * k.S_MAX:k.S_MAX] = net.b_shared[s]
        w[k.C_S:k.C_S + n_s * k.N] = net.c_shared.T.ravel()
        w[k.CASE_S:k.CASE_S + n_s * k.N] = net.c_case_shared.T.ravel()
        own = net.rho_local != 0.0
        w[k.CASE_L:k.CASE_L + n_l * k.N] = np.where(own, net.rho_case_local / np.where(own, net.rho_local, 1.0), 0.0).ravel()
        w[k.KNOT:k.KNOT + self.tables.knot_c.size] = self.tables.knot_c
        k.junctions(w, n_l, n_s, coolant_c)
        self._w = w
        self._now = np.zeros(k.N_NOW)
        self._now[k.COOLANT], self._now[k.THETA] = coolant_c, theta_rad
        self._op = np.zeros(k.N_ROW)
        self._op[k.DIRECTION] = 1.0
        self._ripple_op = np.zeros(k.N_ROW)
        groups = self._groups[1].size
        self._ripple, self._nodes = np.zeros((groups, 5)), np.zeros((groups, k.RIPPLE_NODES + 1, n_l))
        self._window = np.zeros((5, k.N))
        self._last, self._heading = np.zeros((2 * k.N, 5)), np.full(2 * k.N, 2, np.int64)
        self._count[:] = 0
        self._rip_count[0] = 0
        self._before_first = True

    @property
    def junction_c(self) -> np.ndarray:
        """Junction temperatures now, shape (12,) [degC] (in fast rotation: their mean over a period)."""
        return self._w[self._k.T:self._k.T + self._k.N].copy()

    def periodic_start(self, states_before, duration_s: float):
        """States that a mission would start with if it were repeated for ever, judged from one pass.

        Each mode forgets its start at its own known rate; what the losses add is taken
        from the pass. Exact for losses that do not depend on temperature, otherwise a
        step of a quickly closing iteration.
        """
        lam_l, lam_s = self._net[2].ravel(), self._net[4]
        x_l, x_s, coolant = self.states
        keep_l, keep_s = np.exp(-lam_l * duration_s), np.exp(-lam_s * duration_s)
        # the coolant may end elsewhere than it began; the next start takes its step again
        change = self._coolant_start - coolant
        step, step_l = self.network.g_coolant * change, self.network.g_coolant_local.ravel() * change
        new_l = (x_l - step_l - keep_l * states_before[0]) / -np.expm1(-lam_l * duration_s)
        new_s = (x_s - step - keep_s * states_before[1]) / -np.expm1(-lam_s * duration_s)
        return new_l, new_s, self._coolant_start

    @property
    def states(self):
        """Modes and coolant now; give them to :meth:`start` to go on from here."""
        k = self._k
        n_l, n_s = self._net[:2]
        return self._w[k.X_L:k.X_L + n_l * k.N].copy(), self._w[k.X_S:k.X_S + n_s].copy(), float(self._now[k.COOLANT])

    def add_block(self, points: OperatingPoints, *, dt_s, phase_id, coolant_c, energy_scale) -> RowEnvelope:
        """March one block.

        Parameters
        ----------
        points : OperatingPoints, n rows
        dt_s : ndarray, shape (n,)
        phase_id : ndarray of int16, shape (n,)
        coolant_c : ndarray, shape (n,)
        energy_scale : ndarray, shape (3, n)
            From :meth:`LossTables.energy_scale`.

        Raises
        ------
        NoStableTemperature
            A junction passes ``t_stop_c``.
        InputError
            A current beyond the reach of the loss tables.
        """
        k = self._k
        self._check_current(points)
        dt_s = np.asarray(dt_s, float)
        pieces = self._pieces(points, dt_s)
        rows = np.repeat(np.arange(dt_s.size), pieces)
        table = np.empty((rows.size, k.N_ROW))
        table[:, k.DT] = (dt_s / pieces)[rows]
        for column, values in ((k.FREQ, points.frequency_hz), (k.DIRECTION, points.direction), (k.I_PEAK, points.i_peak_a),
                               (k.MOD, points.mod_index), (k.PHI, points.phi_rad), (k.ANGLE_OFFSET, points.current_angle_rad),
                               (k.T_COOLANT, coolant_c), (k.S_ON, energy_scale[0]), (k.S_OFF, energy_scale[1]), (k.S_REC, energy_scale[2])):
            table[:, column] = np.broadcast_to(np.asarray(values, float), dt_s.shape)[rows]
        phases = np.asarray(phase_id, np.int16)[rows]
        temps = np.empty((rows.size, 4, k.N))
        temps[:, (0, 2)], temps[:, (1, 3)] = np.inf, -np.inf
        loss = np.zeros((rows.size, k.N))
        if self._before_first:
            self._sample_start(float(phases[0]))
        start = self._now[k.TIME]
        at = 0
        while at < rows.size:
            at, status = k.march_rows(
                at, table, phases, self._w, *self._net, *self._groups, *self._tables, self._settings, self._now, self._op,
                self._ripple_op, self._ripple, self._nodes, self._window, self._last, self._heading, *self._points, *self._ripple_out, temps, loss)
            if status == k.RUNAWAY:
                now = self.junction_c
                chip = int(np.argmax(np.where(np.isfinite(now), now, np.inf)))
                raise NoStableTemperature(
                    f"no stable temperature: {CHIP_NAMES[chip]} passes {self.settings.t_stop_c:g} degC at {self._now[k.TIME]:.6g} s "
                    f"into the mission (coolant {table[at, k.T_COOLANT]:g} degC, peak current {table[at, k.I_PEAK]:.4g} A). The losses grow "
                    "faster with temperature than the cooling carries away: lower current, frequency or coolant, or cool better")
            self._hand_over()
        ends = start + np.cumsum(table[:, k.DT])
        first = np.concatenate([[0], np.cumsum(pieces)[:-1]])
        t_end = ends[np.cumsum(pieces) - 1]
        return RowEnvelope(
            start_s=np.concatenate([[start], t_end[:-1]]), end_s=t_end, phase_id=np.asarray(phase_id),
            t_min_c=np.minimum.reduceat(temps[:, 0], first), t_max_c=np.maximum.reduceat(temps[:, 1], first),
            case_min_c=np.minimum.reduceat(temps[:, 2], first), case_max_c=np.maximum.reduceat(temps[:, 3], first),
            loss_j=np.add.reduceat(loss, first), coolant_c=np.broadcast_to(np.asarray(coolant_c, float), dt_s.shape),
        )

    def finish(self) -> None:
        """Close the mission: hand over what the turning-point filters still hold; states are physical afterwards."""
        k = self._k
        k.close_window(self._now, self._op, self._window, np.empty((2, k.N)), np.empty(2), np.empty(k.N),
                       self._last, self._heading, *self._points, *self._ripple_out)
        if self._now[k.REGIME] == k.MEAN:
            n_l = self._net[0]
            group, _, group_lam, group_rho = self._groups
            k.add_ripple(1.0, self._op, self._now[k.THETA], self._w, n_l, max(self.tables.knot_c.size - 1, 1), group, group_lam,
                         group_rho, self._ripple, self._nodes)
            self._now[k.REGIME] = k.ANGLE
        k.flush_points(self._last, self._heading, *self._points)
        self._hand_over()

    def _sample_start(self, phase):
        k, w = self._k, self._w
        n_l, n_s = self._net[:2]
        k.case_points(w, n_l, n_s, self._now[k.COOLANT])
        for first, place in ((0, k.T), (k.N, k.CASE)):
            k.feed(first, 1, w[place:place + k.N].reshape(1, k.N).copy(), np.zeros(1), 0.0, np.zeros(k.N), phase,
                   self._last, self._heading, *self._points)
        self._before_first = False

    def _pieces(self, points, dt_s):
        """How many pieces each row is cut into, so that its points fit the buffers."""
        slow = (points.i_peak_a > 0.0) & (points.frequency_hz > 0.0) & (points.frequency_hz < self.settings.f_slow_hz)
        steps = np.where(slow, np.maximum(points.frequency_hz * self.settings.steps_per_period, 50.0), 1.0) * dt_s
        pieces = np.maximum(1, np.ceil(steps / (0.5 * _POINT_CAPACITY)))
        # in fast rotation a long row is counted second by second, so that its ripple is charged at the temperature it has
        fast = (points.i_peak_a > 0.0) & (points.frequency_hz >= self.settings.f_slow_hz)
        return np.where(fast, np.clip(np.ceil(dt_s - 1e-9), pieces, 20000), pieces).astype(int)

    def _check_current(self, points):
        top = self.tables.i_max_a
        if points.i_peak_a.size and points.i_peak_a.max() > top:
            row = int(np.argmax(points.i_peak_a))
            raise InputError(f"operating point {row + 1} of the block", f"a peak current of {points.i_peak_a[row]:.4g} A",
                             f"at most {top:.4g} A (twice the end of the data-sheet curves)",
                             "scale the current, check its unit (rms or peak), or choose a larger module")

    def _hand_over(self):
        value, time, half, ripple, phase, count = self._points
        if self._on_points is not None:
            for signal in np.flatnonzero(count):
                m = count[signal]
                self._on_points(PointBlock(int(signal), value[signal, :m], time[signal, :m], phase[signal, :m],
                                           half[signal, :m], ripple[signal, :m]))
        rip, rip_row, _ = self._ripple_out
        m = int(self._rip_count[0])
        if m and self._on_ripple is not None:
            self._on_ripple(RippleBlock(rip[:m, :, 0], rip[:m, :, 1], rip[:m, :, 2], rip_row[:m, 0],
                                        rip_row[:m, 1], rip_row[:m, 2], rip_row[:m, 3].astype(np.int16)))
        count[:] = 0
        self._rip_count[0] = 0


def _ripple_groups(lam, rho, kind):
    """Chips of one kind whose local response agrees within half a percent share one ripple calculation."""
    time = np.geomspace(1e-4, 10.0, 60)
    response = np.stack([(rho[:, i] / lam[:, i] * -np.expm1(-np.outer(time, lam[:, i]))).sum(axis=1) for i in range(lam.shape[1])])
    group = np.full(kind.size, -1)
    members: list[int] = []
    for i in range(kind.size):
        for g, lead in enumerate(members):
            if kind[lead] == kind[i] and np.abs(response[i] - response[lead]).max() <= 0.005 * np.abs(response[lead]).max():
                group[i] = g
                break
        else:
            group[i] = len(members)
            members.append(i)
    return group, kind[members].copy(), np.ascontiguousarray(lam[:, members].T), np.ascontiguousarray(rho[:, members].T)
