"""The electrothermal march over a mission, block by block.

In: operating points of one block of rows. Out: turning points of every
junction and case point, ripple cycles, and a minimum/maximum envelope. Memory
does not grow with the length of the mission.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from ..errors import InputError, NoStableTemperature
from ..losses import LossTables, reference_for
from ..machine import OperatingPoints
from ..thermal import SLOW_MODES, CoolingLevels, ReducedNetwork
from ..thermal.modes import fewer_rates
from .steady import HeldPoint

_POINT_CAPACITY = 32768
_LEVELS = 19
#: A switching frequency that follows the temperature is set anew this often [s].
DERATE_EVERY_S = 0.1
#: A cooling that follows the temperature of the sink looks at it this often [s].
LOOK_EVERY_S = 1.0
#: Changes of the cooling that are kept with their time.
_CHANGES_KEPT = 1000
#: Pieces that a block may have: memory goes with them, so callers cut their rows by :meth:`ElectrothermalMarch.pieces`.
MOST_PIECES = 65536
#: Nodes along a turn for the ripple where losses jump.
RIPPLE_NODES_JUMPS = 512
#: In even steps shared modes move at least this often [s], and ten times within the shortest of their time constants.
SHARED_WITHIN_S = 0.012
#: A chip feels its own ripple through shared modes faster than this too [1/s].
RIPPLES_ABOVE_PER_S = 0.5


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
    watch_c : float
        Time above this junction temperature is counted.
    """

    f_slow_hz: float = 5.0
    steps_per_period: int = 128
    first_step_s: float = 2.0**-11
    longest_step_s: float = 16.0
    settle_periods: float = 2.0
    settle_above_k: float = 0.3
    t_stop_c: float = 500.0
    watch_c: float = np.inf


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
    """Extremes and heat of every row of a block; r rows, n chips.

    ``switching_hz`` (r,): as it was at the end of the row, derating included. ``theta_rad`` (r,): angle of the current of
    phase a there. ``level`` (r,): level of the cooling there. ``piece_s`` (p,), ``piece_above`` (p, n): stretches of up to a second and whether the junction
    passed the watched temperature in them; empty if none is watched.
    """

    start_s: np.ndarray
    end_s: np.ndarray
    phase_id: np.ndarray
    t_min_c: np.ndarray
    t_max_c: np.ndarray
    case_min_c: np.ndarray
    case_max_c: np.ndarray
    loss_j: np.ndarray
    coolant_c: np.ndarray
    switching_hz: np.ndarray
    theta_rad: np.ndarray
    level: np.ndarray
    piece_s: np.ndarray
    piece_above: np.ndarray


class MarchState(NamedTuple):
    """Modes, coolant and level of the cooling at one moment; see :attr:`ElectrothermalMarch.states`.

    ``local`` (L n,): local modes, scaled with their output weight; ``shared`` (S,); ``field`` (K,): modes of the full network,
    kept where the cooling has several levels. ``places``: which of its stages the cooling holds, as shares of the last.
    """

    local: np.ndarray
    shared: np.ndarray
    coolant_c: float
    level: int = 0
    field: np.ndarray | None = None
    places: dict | None = None


#: Room of the kernels: local modes a chip, shared modes, corner temperatures.
L_MAX, S_MAX, K_MAX = 16, 96, 8


def check_fit(tables: LossTables, network: ReducedNetwork) -> None:
    """Refuse more modes or curve temperatures than the march has room for."""
    found = (network.lam_local_per_s.shape[0], network.lam_shared_per_s.size, tables.knot_c.size)
    if any(a > b for a, b in zip(found, (L_MAX, S_MAX, K_MAX))):
        raise InputError("module", f"{found[0]} local and {found[1]} shared thermal modes, curves at {found[2]} different temperatures",
                         f"at most {L_MAX}, {S_MAX} and {K_MAX}", "give all curves at the same few temperatures, fewer thermal branches or layers, or couplings that share their time constants")


class ElectrothermalMarch:
    """Marches one inverter leg by leg, chip by chip.

    Parameters
    ----------
    tables : LossTables
    network : ReducedNetwork or CoolingLevels
        For the six chips of every pair of the leg's positions: a-upper, a-lower, b-upper ... With levels the cooling changes
        during the mission, exactly between the changes.
    settings : MarchSettings
    derating : tuple of ndarray, optional
        Junction temperatures of the hottest chip, rising [degC], and the switching frequencies that they allow
        at most [Hz]; read at the start of every row (long rows are cut into pieces).
    on_points, on_ripple : callable, optional
        Receive :class:`PointBlock` and :class:`RippleBlock` as they arise.
    """

    def __init__(self, tables: LossTables, network: ReducedNetwork | CoolingLevels, settings: MarchSettings | None = None, *, derating=None,
                 on_points: Callable[[PointBlock], None] | None = None,
                 on_ripple: Callable[[RippleBlock], None] | None = None):
        from . import kernels as k

        self._levels = network if isinstance(network, CoolingLevels) else CoolingLevels.fixed(network)
        self._controlled = any(len(g.levels) > 1 for g in self._levels.groups)
        network = self._levels.network(0)
        n_chips = 3 * len(tables.plan.positions)
        if network.n_chips != n_chips:
            raise InputError("thermal network", f"{network.n_chips} chips", f"{n_chips}: six for every pair of positions of the leg")
        self.n_chips = n_chips
        self.chip_names = _chip_names(tables.plan.positions)
        self._k = k
        self.tables = tables
        self.settings = settings or MarchSettings()
        self._on_points, self._on_ripple = on_points, on_ripple
        self._lanes = next(n for n in k.LANES if n >= n_chips)
        self._bundles: dict[int, tuple] = {}
        self._bundle(0)
        derate = (np.empty(0), np.empty(0)) if derating is None else tuple(np.ascontiguousarray(v, float) for v in derating)
        self._derates = derating is not None
        self._tables = (*tables.kernel_arrays(), *derate)
        lanes = self._lanes
        self._lane_tuple = (0,) * lanes
        cap = _POINT_CAPACITY
        self._count, self._rip_count = np.zeros(2 * lanes, np.int64), np.zeros(1, np.int64)
        self._points = (*(np.empty((2 * lanes, cap)) for _ in range(4)), np.empty((2 * lanes, cap), np.int16), self._count)
        self._ripple_out = (np.empty((cap // 2, lanes, 3)), np.empty((cap // 2, 4)), self._rip_count)

    def _bundle(self, level: int) -> tuple:
        """What the kernels need of a level: settings, network and ripple groups as plain arrays."""
        if level in self._bundles:
            return self._bundles[level]
        k, s, tables, network = self._k, self.settings, self.tables, self._levels.network(level)
        check_fit(tables, network)
        n_chips, lanes = self.n_chips, self._lanes
        settings = np.array([s.f_slow_hz, s.steps_per_period, s.first_step_s, s.longest_step_s, s.settle_periods, s.settle_above_k,
                             s.t_stop_c, min(SHARED_WITHIN_S, 0.1 / network.lam_shared_per_s.max(initial=1.0)), np.inf, -np.inf, 0.0], float)
        lam, rho = _padded(network.lam_local_per_s, lanes, 1.0), _padded(network.rho_local, lanes, 0.0)
        lam_s = network.lam_shared_per_s
        n_l, n_s = lam.shape[0], lam_s.size
        steps = np.empty((_LEVELS, 2 * n_l * lanes + lanes + 2 * n_s))
        for v in range(_LEVELS):
            k.step_factors(s.first_step_s * 2.0**v, lam, rho, lam_s, steps[v])
        position = 2 * (np.arange(n_chips) // 6) + np.arange(n_chips) % 2
        like = position if not tables.modulation.half_wave_symmetric else position - position % 2
        group, members, group_lam, group_rho = _ripple_groups(*_own_response(network), like)
        if self._controlled:
            rows = self._levels.surface(level)
            local = np.stack([_padded(row[:n_l * n_chips].reshape(n_l, n_chips), lanes, 0.0) for row in rows])
            surface = local, np.ascontiguousarray(rows[:, n_l * n_chips:])
        else:
            surface = np.empty((0, n_l, lanes)), np.empty((0, n_s))
        net = (n_l, n_s, lam, rho, np.ascontiguousarray(lam_s), np.ascontiguousarray(network.g_coolant),
               _padded(network.g_coolant_local, lanes, 0.0), *surface, steps, np.empty(steps.shape[1]))
        self._bundles[level] = settings, net, (group, position[members], tables.plan.flows, group_lam, group_rho)
        return self._bundles[level]

    def _enter(self, level: int, local, shared) -> None:
        """Put a level's network and a state of its modes in place."""
        k = self._k
        self.level, self.network = level, self._levels.network(level)
        self._settings, self._net, self._groups = self._bundle(level)
        net, n, w = self.network, self.n_chips, self._w
        n_l, n_s = self._net[:2]
        self._local(k.X_L)[:] = local.reshape(n_l, n)
        w[k.X_S:k.X_S + n_s] = shared
        for s in range(n_s):
            w[k.B_S + s:k.B_S + n * k.S_MAX:k.S_MAX] = net.b_shared[s]
        for place, rows in ((k.C_S, net.c_shared), (k.CASE_S, net.c_case_shared)):
            w[place:place + n_s * k.LANE].reshape(n_s, k.LANE)[:, :n] = rows.T
        self._local(k.CASE_L)[:] = net.case_share_local
        self._now[k.H_LOADED] = 0.0  # factors of the steps are those of the network before
        k.junctions(self._lane_tuple, w, n_l, n_s, self._now[k.COOLANT])
        groups = self._groups[1].size
        ripple_nodes = RIPPLE_NODES_JUMPS if self.tables.jumps else k.RIPPLE_NODES
        self._ripple, self._nodes = np.zeros((groups, 6)), np.zeros((groups, ripple_nodes + 1, self._groups[3].shape[1]))

    def _local(self, place):
        """Room of the local modes in the work array, shape (modes, chips)."""
        k, n_l = self._k, self._net[0]
        return self._w[place:place + n_l * k.LANE].reshape(n_l, k.LANE)[:, :self.n_chips]

    def start(self, coolant_c: float, *, theta_rad: float = 0.0, states: MarchState | None = None, group: int = 0) -> None:
        """Begin a mission with everything at the coolant's temperature and the first level of a ``group`` of the cooling, or with the ``states`` of an earlier end."""
        k = self._k
        self._w, self._now = np.zeros(k.W_SIZE), np.zeros(k.N_NOW)
        self._w[k.KNOT:k.KNOT + self.tables.knot_c.size] = self.tables.knot_c
        self._coolant_start = float(coolant_c)
        self._now[k.COOLANT], self._now[k.THETA] = coolant_c, theta_rad
        if states is None:
            level = self._levels.groups[group].levels[0]
            net = self._levels.network(level)
            local, shared = np.zeros(net.lam_local_per_s.shape), np.zeros(net.lam_shared_per_s.size)
        else:
            level, net = states.level, self._levels.network(states.level)
            # the coolant may start elsewhere than it ended: temperatures stay
            step = coolant_c - states.coolant_c
            local, shared = states.local.reshape(net.g_coolant_local.shape) - net.g_coolant_local * step, states.shared - net.g_coolant * step
        self._enter(level, local, shared)
        self._op = np.zeros(k.N_ROW)
        self._op[k.DIRECTION] = 1.0
        self._ripple_op = np.zeros(k.N_ROW)
        self._window = np.zeros((5, self._lanes))
        self._last, self._heading = np.zeros((2 * self._lanes, 5)), np.full(2 * self._lanes, 2, np.int64)
        self._count[:] = 0
        self._rip_count[0] = 0
        self._before_first = True
        #: Time spent at each level [s], and the first changes: (time [s], level entered).
        self.level_time_s, self.changes, self.n_changes = np.zeros(self._levels.count), [], 0
        self._entered_s, self._level_start = 0.0, level
        # the group in force, the place of its level, and the places last held among levels that follow temperature, and those that follow the rise
        self._group, self._at = -1, 0
        self._places: dict[bool, float] = {} if states is None or states.places is None else dict(states.places)
        self._field = self._mean_state = self._memory = None
        if self._levels.count > 1:
            lam, _, _, read = self._levels.field(level)
            self._field = np.zeros(lam.size) if states is None else states.field - self._levels.field(level)[2] * (coolant_c - states.coolant_c)
            self._mean_state = read @ self._field  # what the reduced modes would be if every row had its mean loss
            self._memory = np.eye(min(SLOW_MODES, lam.size))  # of the slowest modes at the start
            self._field_coolant = float(coolant_c)

    def _follow(self, dt_s, coolant_c, loss_j) -> None:
        """Take the full network through rows that were marched, with the mean loss of each: exact, because its modes are."""
        net = self.network
        lam, heat, even, _ = self._levels.field(self.level)
        step = np.diff(coolant_c, prepend=self._field_coolant)
        self._field_coolant = float(coolant_c[-1])
        rate = net.rates_per_s
        power = loss_j / dt_s[:, None]
        for a in range(0, dt_s.size, 4096):
            rows = slice(a, a + 4096)
            h = dt_s[rows]
            left = h.sum() - np.cumsum(h)  # from the end of each row to the end of the stretch

            def taken(rates, inflow, evenly, now, h=h, left=left, step=step[rows]):
                """State at the end: what is left of it, of every coolant step and of every row's heat."""
                fade = np.exp(-np.outer(left, rates))
                within = np.exp(-np.outer(h, rates))
                grown = (inflow * (fade * -np.expm1(-np.outer(h, rates)))).sum(axis=0) / rates
                return now * np.exp(-rates * h.sum()) + grown - evenly * (step @ (fade * within))

            self._field = taken(lam, power[rows] @ heat, even, self._field)
            local = np.tile(power[rows], net.rho_local.shape[0]) * net.rho_local.ravel()
            self._mean_state = taken(rate, np.hstack([local, power[rows] @ net.b_shared.T]),
                                     net.g_state, self._mean_state)
        slow = self._memory.shape[0]
        self._memory = np.exp(-lam[:slow] * dt_s.sum())[:, None] * self._memory

    def _change(self, level: int) -> None:
        """Go on at another level of the cooling: every temperature of the masses stays."""
        k = self._k
        self._to_physical_states()
        move = self._levels.move(self.level, level)
        rest = np.concatenate(self.states[:2]) - self._mean_state
        self._field = move.turn @ self._field
        mean, own = self._levels.field(level)[3] @ self._field, self._mean_state.size - self.network.n_mutual
        mean[mean.size - self.network.n_mutual:] = self._mean_state[own:]
        self._mean_state = mean
        x = self._mean_state + move.rest @ rest
        slow = self._memory.shape[0]
        self._memory = move.turn[:slow, :slow] @ self._memory
        now = float(self._now[k.TIME])
        self.level_time_s[self.level] += now - self._entered_s
        self._entered_s = now
        if self.n_changes < _CHANGES_KEPT:
            self.changes.append((now, level))
        self.n_changes += 1
        cut = self._levels.network(level).lam_local_per_s.size
        self._enter(level, x[:cut], x[cut:])

    def _set_look(self, group: int) -> None:
        """Tell the kernel at which temperature of the sink the level of a group gives way."""
        k, one, place = self._k, self._levels.groups[group], self._at
        if len(one.levels) > 1:
            self._places[one.on_rise] = place / (len(one.levels) - 1)
        self._settings[k.SURFACE_UP] = one.up_c[place] if place < len(one.up_c) else np.inf
        self._settings[k.SURFACE_DOWN] = one.down_c[place - 1] if place > 0 else -np.inf
        self._settings[k.SURFACE_RISE] = float(one.on_rise)

    def surface_c(self, states: MarchState | None = None) -> float:
        """Hottest sink surface now, or with other ``states`` [degC]; only where the cooling has more than one level."""
        states = self.states if states is None else states
        return float(states.coolant_c + (self._levels.surface(states.level) @ np.concatenate(states[:2])).max())

    @property
    def angle_rad(self) -> float:
        """Electrical angle of the rotor now, within a turn [rad]."""
        return float(self._now[self._k.THETA])

    @property
    def loaded(self) -> bool:
        """Whether current flows in the row just marched."""
        return bool(self._op[self._k.I_PEAK] > 0.0)

    @property
    def junction_c(self) -> np.ndarray:
        """Junction temperatures now, shape (chips,) [degC] (in fast rotation: their mean over a period)."""
        return self._w[self._k.T:self._k.T + self.n_chips].copy()

    def periodic_start(self, states_before: MarchState, duration_s: float, far: float = 1.0) -> MarchState:
        """States that a mission would start with if it were repeated for ever, judged from one pass.

        Each mode forgets its start at its own known rate; what the losses add is taken
        from the pass. Exact for losses that do not depend on temperature, otherwise a
        step of a quickly closing iteration. Where the cooling changed its level, the changes are taken to come at the same
        times again, which they do not if they follow the temperature: ``far`` says how much of the way to go (0: the end itself).
        """
        net, now = self.network, self.states
        x = np.concatenate(now[:2])
        change = self._coolant_start - now.coolant_c
        # the coolant may end elsewhere than it began; the next start takes its step again
        x = x - net.g_state * change
        field = None
        if self._field is None:
            rate = net.rates_per_s
            x = (x - np.exp(-rate * duration_s) * np.concatenate(states_before[:2])) / -np.expm1(-rate * duration_s)
        else:
            _, _, even, read = self._levels.field(self.level)
            field = self._field - even * change
            before = states_before.field
            slow = self._memory.shape[0]
            memory = self._memory
            if self.level != self._level_start:
                turn = self._levels.move(self._level_start, self.level).turn
                before, memory = turn @ before, memory @ turn[:slow, :slow].T
            more = np.zeros(field.size)
            more[:slow] = far * memory @ np.linalg.solve(np.eye(slow) - memory, (field - before)[:slow])
            field, x = field + more, x + read @ more
        cut = net.lam_local_per_s.size
        return MarchState(x[:cut], x[cut:], self._coolant_start, self.level, field, dict(self._places))

    @property
    def states(self) -> MarchState:
        """Modes, coolant and level now; give them to :meth:`start` to go on from here."""
        k = self._k
        n_s = self._net[1]
        return MarchState(self._local(k.X_L).ravel(), self._w[k.X_S:k.X_S + n_s].copy(), float(self._now[k.COOLANT]), self.level,
                          None if self._field is None else self._field.copy(), dict(self._places))

    def add_block(self, points: OperatingPoints, *, dt_s, phase_id, coolant_c, switching_frequency_hz, dc_voltage_v, group=None) -> RowEnvelope:
        """March one block.

        Parameters
        ----------
        points : OperatingPoints, n rows
        dt_s : ndarray, shape (n,)
        phase_id : ndarray of int16, shape (n,)
        coolant_c : ndarray, shape (n,)
        switching_frequency_hz, dc_voltage_v : float or ndarray, shape (n,)
        group : ndarray of int, shape (n,), optional
            Which group of the cooling's levels every row belongs to; default: the first.

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
        pieces = self.pieces(points, dt_s)
        rows = np.repeat(np.arange(dt_s.size), pieces)
        table = np.empty((rows.size, k.N_ROW))
        table[:, k.DT] = (dt_s / pieces)[rows]
        reference, clip_first, clip_last = reference_for(self.tables.modulation, points.mod_index)
        for column, values in ((k.FREQ, points.frequency_hz), (k.DIRECTION, points.direction), (k.I_PEAK, points.i_peak_a),
                               (k.MOD, reference), (k.PHI, points.phi_rad), (k.ANGLE_OFFSET, points.current_angle_rad),
                               (k.T_COOLANT, coolant_c), (k.CLIP_FIRST, clip_first), (k.CLIP_LAST, clip_last),
                               (k.FSW, switching_frequency_hz), (k.V_DC, dc_voltage_v)):
            table[:, column] = np.broadcast_to(np.asarray(values, float), dt_s.shape)[rows]
        phases = np.asarray(phase_id, np.int16)[rows]
        temps = np.empty((rows.size, 4, self._lanes))
        temps[:, (0, 2)], temps[:, (1, 3)] = np.inf, -np.inf
        loss = np.zeros((rows.size, self._lanes))
        if self._before_first:
            self._sample_start(float(phases[0]))
        start, theta = self._now[k.TIME], self._now[k.THETA]
        groups = np.zeros(rows.size, int) if group is None else np.asarray(group)[rows]
        level = np.empty(rows.size, np.int16)
        borders = np.concatenate([np.flatnonzero(np.diff(groups)) + 1, [rows.size]])
        at = 0
        for end in borders.tolist():
            self._belong(int(groups[at]))
            while at < end:
                before = at
                # the kernel looks at the room in its buffers before every row but the first
                if self._count.max() > _POINT_CAPACITY // 2 or self._rip_count[0] > _POINT_CAPACITY // 4:
                    self._hand_over()
                at, status = k.march_rows(
                    self._lane_tuple, at, table[:end], phases, self._w, *self._net, *self._groups, *self._tables, self._settings, self._now, self._op,
                    self._ripple_op, self._ripple, self._nodes, self._window, self._last, self._heading, *self._points, *self._ripple_out, temps, loss)
                level[before:at] = self.level
                if self._field is not None and at > before:
                    self._follow(table[before:at, k.DT], table[before:at, k.T_COOLANT], loss[before:at, :self.n_chips])
                if status == k.RUNAWAY:
                    now = self.junction_c
                    chip = int(np.argmax(np.where(np.isfinite(now), now, np.inf)))
                    raise NoStableTemperature(self._runaway_words(chip, table[at], float(points.mod_index[rows[at]])))
                if status == k.CHANGE:
                    self._step_level(int(groups[at]))
                elif at < end:
                    self._hand_over()
        self._hand_over()
        ends = start + np.cumsum(table[:, k.DT])
        first = np.concatenate([[0], np.cumsum(pieces)[:-1]])
        t_end = ends[np.cumsum(pieces) - 1]
        temps, loss = temps[:, :, :self.n_chips], loss[:, :self.n_chips]
        watching = np.isfinite(self.settings.watch_c)
        last = np.cumsum(pieces) - 1
        turned = theta + 2.0 * np.pi * np.cumsum(points.frequency_hz * points.direction * dt_s)
        return RowEnvelope(
            start_s=np.concatenate([[start], t_end[:-1]]), end_s=t_end, phase_id=np.asarray(phase_id),
            t_min_c=np.minimum.reduceat(temps[:, 0], first), t_max_c=np.maximum.reduceat(temps[:, 1], first),
            case_min_c=np.minimum.reduceat(temps[:, 2], first), case_max_c=np.maximum.reduceat(temps[:, 3], first),
            loss_j=np.add.reduceat(loss, first), coolant_c=np.broadcast_to(np.asarray(coolant_c, float), dt_s.shape),
            switching_hz=table[last, k.FSW], theta_rad=turned + points.current_angle_rad, level=level[last],
            piece_s=table[:, k.DT].copy() if watching else np.empty(0),
            piece_above=temps[:, 1] > self.settings.watch_c if watching else np.empty((0, self.n_chips), bool),
        )

    def _belong(self, group: int) -> None:
        """Go over to a group of levels, if it is not the present one, and set its thresholds."""
        one = self._levels.groups[group]
        if group != self._group:
            self._group, self._at = group, self._place(one)
            if one.levels[self._at] != self.level:
                self._change(one.levels[self._at])
        self._set_look(group)

    def _place(self, group) -> int:
        """Which of a group's levels holds: the one that held when such a group was last in force, as far as the sink's temperature lets it."""
        if len(group.levels) == 1:
            return 0
        low, high = group.allowed(self.surface_c(), float(self._now[self._k.COOLANT]))
        share = self._places.get(group.on_rise)
        return low if share is None else min(max(round(share * (len(group.levels) - 1)), low), high)

    def _step_level(self, group: int) -> None:
        """The sink has passed a threshold: the level that its temperature asks for, at least the next one up or down."""
        one, k = self._levels.groups[group], self._k
        surface, coolant = self.surface_c(), float(self._now[k.COOLANT])
        low, high = one.allowed(surface, coolant)
        if (surface - coolant if one.on_rise else surface) > self._settings[k.SURFACE_UP]:
            self._at = max(self._at + 1, low)
        else:
            self._at = min(self._at - 1, high)
        self._change(one.levels[self._at])
        self._set_look(group)

    def _runaway_words(self, chip, op, mod_index):
        """Why a march ended beyond ``t_stop_c``: no stable temperature at all, or one that no chip survives."""
        k, stop = self._k, self.settings.t_stop_c
        held = HeldPoint(self.tables, self.network, i_peak_a=op[k.I_PEAK], mod_index=mod_index, phi_rad=op[k.PHI], theta_rad=self._now[k.THETA] + op[k.ANGLE_OFFSET],
                         frequency_hz=op[k.FREQ], direction=op[k.DIRECTION], switching_frequency_hz=op[k.FSW],
                         dc_voltage_v=op[k.V_DC])
        state = held.settle(op[k.T_COOLANT])
        kept = " and the cooling of this moment" if self._levels.count > 1 else ""
        where = (f"{self.chip_names[chip]} passes {stop:g} degC at {self._now[k.TIME]:.6g} s into the mission (coolant {op[k.T_COOLANT]:g} degC, "
                 f"peak current {op[k.I_PEAK]:.4g} A, output frequency {op[k.FREQ]:.4g} Hz)")
        if state.exists:
            return (f"far too hot: {where}. Held for ever, this operating point{kept} would settle with a mean of {state.t_vj_c.max():.0f} degC in its hottest chip; "
                    "no device lives there: lower current, frequency or coolant, or cool better")
        limit = held.runaway_coolant_c(op[k.T_COOLANT])
        known = "at no coolant temperature" if limit is None or limit < -200.0 else f"only with a coolant below {limit:.0f} degC"
        return (f"no stable temperature exists: {where}. The losses grow faster with temperature than the cooling carries away (loop gain "
                f"{state.loop_gain:.2f}, stable below 1); held for ever, this operating point{kept} is stable {known}: lower current, frequency or coolant, or cool better")

    def finish(self) -> None:
        """Close the mission: hand over what the turning-point filters still hold; states are physical afterwards."""
        k = self._k
        self._to_physical_states()
        self.level_time_s[self.level] += float(self._now[k.TIME]) - self._entered_s
        k.flush_points(self._last, self._heading, *self._points)
        self._hand_over()

    def _to_physical_states(self) -> None:
        """Close the counting window of fast rotation and put the ripple of this moment into the modes."""
        k = self._k
        k.close_window(self._now, self._op, self._window, np.empty((2, self._lanes)), np.empty(2), np.empty(self._lanes),
                       self._last, self._heading, *self._points, *self._ripple_out)
        if self._now[k.REGIME] == k.MEAN:
            n_l = self._net[0]
            group, group_position, flows, group_lam, group_rho = self._groups
            k.add_ripple(1.0, self._op, self._now[k.THETA], self._w, n_l, max(self.tables.knot_c.size - 1, 1), group, group_position, flows, group_lam,
                         group_rho, self._ripple, self._nodes)
            self._now[k.REGIME] = k.ANGLE

    def _sample_start(self, phase):
        k, w = self._k, self._w
        n_l, n_s = self._net[:2]
        k.case_points(self._lane_tuple, w, n_l, n_s, self._now[k.COOLANT])
        lanes = self._lanes
        for first, place in ((0, k.T), (lanes, k.CASE)):
            k.feed(first, 1, w[place:place + lanes].reshape(1, lanes).copy(), np.zeros(1), 0.0, np.zeros(lanes), phase,
                   self._last, self._heading, *self._points)
        self._before_first = False

    def pieces(self, points: OperatingPoints, dt_s) -> np.ndarray:
        """How many pieces each row is cut into, so that its points fit the buffers."""
        slow = (points.i_peak_a > 0.0) & (points.frequency_hz > 0.0) & (points.frequency_hz < self.settings.f_slow_hz)
        steps = np.where(slow, np.maximum(points.frequency_hz * self.settings.steps_per_period, 50.0), 1.0) * dt_s
        pieces = np.maximum(1, np.ceil(steps / (0.5 * _POINT_CAPACITY)))
        # in fast rotation a long row is counted second by second, so that its ripple is charged at the temperature it has
        fast = (points.i_peak_a > 0.0) & (points.frequency_hz >= self.settings.f_slow_hz)
        pieces = np.where(fast, np.clip(np.ceil(dt_s - 1e-9), pieces, 20000), pieces)
        if self._derates:
            # the switching frequency follows the temperature from piece to piece
            pieces = np.where(points.i_peak_a > 0.0, np.maximum(pieces, np.clip(np.ceil(dt_s / DERATE_EVERY_S - 1e-9), 1, 200000)), pieces)
        if self._controlled:
            pieces = np.maximum(pieces, np.clip(np.ceil(dt_s / LOOK_EVERY_S - 1e-9), 1, 200000))
        if np.isfinite(self.settings.watch_c):
            pieces = np.maximum(pieces, np.clip(np.ceil(dt_s - 1e-9), 1, 20000))
        return pieces.astype(int)

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
            for lane in np.flatnonzero(count):
                case, chip = divmod(int(lane), self._lanes)
                if chip >= self.n_chips:
                    continue
                m, signal = count[lane], case * self.n_chips + chip
                self._on_points(PointBlock(signal, value[lane, :m], time[lane, :m], phase[lane, :m],
                                           half[lane, :m], ripple[lane, :m]))
        rip, rip_row, _ = self._ripple_out
        m = int(self._rip_count[0])
        if m and self._on_ripple is not None:
            self._on_ripple(RippleBlock(*(rip[:m, :self.n_chips, column] for column in range(3)), rip_row[:m, 0],
                                        rip_row[:m, 1], rip_row[:m, 2], rip_row[:m, 3].astype(np.int16)))
        count[:] = 0
        self._rip_count[0] = 0


def _chip_names(positions):
    return tuple(f"{pair.removesuffix('-up')}-{leg}-{side}" for pair in positions[::2] for leg in "abc" for side in ("up", "lo"))


def _own_response(network):
    """Rates and weights of each chip's response to its own heat, for the ripple: local modes first, then what it sees of itself through shared modes.

    Shared modes that are too slow to ripple are left out; where more than ten are left, ten rates stand for them.
    """
    lam, rho = network.lam_local_per_s, network.rho_local
    # modes of one rate count together: those of a coupling cancel in a chip's own response
    rate, which = np.unique(network.lam_shared_per_s, return_inverse=True)
    own = np.zeros((rate.size, network.n_chips))
    np.add.at(own, which, network.c_shared.T * network.b_shared)
    fast = (rate > RIPPLES_ABOVE_PER_S) & (np.abs(own) > 1e-9 * np.abs(own).max(initial=0.0)).any(axis=1)
    if not fast.any():
        return lam, rho
    rate, own = fewer_rates(rate[fast], own[fast], 10)
    return np.vstack([lam, np.repeat(rate[:, None], own.shape[1], axis=1)]), np.vstack([rho, own])


def _padded(values, lanes, filler):
    """Columns for the lanes that no chip uses."""
    out = np.full((values.shape[0], lanes), filler)
    out[:, :values.shape[1]] = values
    return out


def _ripple_groups(lam, rho, kind):
    """Chips of one ``kind`` (n,) whose local response agrees within half a percent share one ripple calculation."""
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
    return group, np.array(members), np.ascontiguousarray(lam[:, members].T), np.ascontiguousarray(rho[:, members].T)
