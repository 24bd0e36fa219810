"""Operating points: what the duty asks of the inverter in every row.

Conventions. Phase current i = I_pk sin(theta), phase reference m sin(theta + phi),
theta growing in time; phi > 0: the current lags; |phi| > 90 degrees: generating.
m = 1 is a peak phase voltage of half the DC voltage.

The rotor's electrical angle (its d axis) falls in time when the speed is negative.
Phase a carries I_pk sin(theta_rotor + current_angle_rad) in both directions. For negative
speed theta in the formula above is then pi - (theta_rotor + current_angle_rad), and phases b
and c change places in time.

With an induction machine theta_rotor is the angle of the rotor flux, and with a plain voltage by
frequency that of the voltage (sine); "direction" is the sense in which they turn. It differs from that of the
shaft where a machine brakes more slowly than it slips.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from .induction import (
    VfRows,
    flux_at_current,
    flux_at_torque,
    induction_state,
    largest_flux_torque,
    torque_of_state_nm,
)
from .spec import DirectPoints, InductionMachine, MachineSpec, SynchronousMachine
from .synchronous import (
    dq_voltages_v,
    flux_map,
    largest_torque,
    mtpa_from_current,
    mtpa_from_torque,
    torque_of_currents_nm,
    weaken_at_current,
    weaken_at_torque,
)

if TYPE_CHECKING:
    from ..duty import ProfileBlock

_ROOT2 = np.sqrt(2.0)
#: Relative slack of the voltage limit: rounding only.
_SLACK = 1e-12


@dataclass(frozen=True)
class OperatingPoints:
    """One entry per profile row; every array float64, shape (n,).

    Attributes
    ----------
    frequency_hz : output frequency, >= 0 [Hz]
    direction : +1. or -1., the sense of rotation; +1. at standstill
    i_peak_a : peak phase current, >= 0 [A]
    mod_index : peak phase voltage over half the DC voltage
    phi_rad : displacement in time, (-pi, pi]; 0 without current or voltage
    current_angle_rad : phase a carries i_peak_a sin(theta_rotor + current_angle_rad); 0 for direct points
    i_d_a, i_q_a : rotor-coordinate peak currents [A], along and across the rotor flux of an induction machine; NaN for direct points
    torque_nm : air-gap torque [N m], torque times speed is power; NaN for direct points
    v_peak_v : peak phase voltage [V]
    torque_missing_nm : how much of the wanted torque is not there, >= 0; above 0 with ``beyond = "limit"`` only
    voltage_missing_v : how far a voltage by frequency lies above the DC link's, peak phase, >= 0; likewise
    """

    frequency_hz: np.ndarray
    direction: np.ndarray
    i_peak_a: np.ndarray
    mod_index: np.ndarray
    phi_rad: np.ndarray
    current_angle_rad: np.ndarray
    i_d_a: np.ndarray
    i_q_a: np.ndarray
    torque_nm: np.ndarray
    v_peak_v: np.ndarray
    torque_missing_nm: np.ndarray
    voltage_missing_v: np.ndarray

    def rows(self, which) -> OperatingPoints:
        """Some of the rows, picked by a slice, a mask or an index array."""
        return OperatingPoints(*(getattr(self, f.name)[which] for f in fields(self)))


def operating_points(
    block: ProfileBlock, machine: MachineSpec, *, dc_voltage_v: float | None, mod_index_max: float, where: str
) -> OperatingPoints:
    """Turn the rows of a duty into what the inverter must do.

    Parameters
    ----------
    block : ProfileBlock
        Machines need ``current_a`` or ``torque_nm``, and ``speed_rad_s``
        or ``frequency_hz`` (of the stator, the speed is then positive; not for ``induction``).
        Direct points need ``current_a``, ``frequency_hz``, ``mod_index`` and ``phi_rad``; ``speed_rad_s``,
        if there, only gives the sense of rotation.
    machine : SynchronousMachine, InductionMachine, InductionVf or DirectPoints
    dc_voltage_v : float or None
        DC voltage of the inverter [V]; a column ``dc_voltage_v`` of the duty goes before it.
    mod_index_max : float
        1 for sine modulation, 2/sqrt(3) with injection, 4/pi in six-step.
    where : str
        Start of messages, e.g. the duty's file.

    Returns
    -------
    OperatingPoints

    Raises
    ------
    InputError
        A column is missing or given twice over, or a row asks for more voltage than
        there is, or current; nothing is ever clipped. Names the row (1 is the first of the data), its
        time, what is wanted and what is available. With ``beyond = "limit"`` the torque of such a row
        is the largest there is, if there is any, and ``torque_missing_nm`` tells the rest.

    Notes
    -----
    From the current: its size is kept, its angle gives the most torque, turned into
    field weakening where the voltage is short. From the torque: the least current,
    then along the curve of constant torque. ``i_q_a`` has the sign of current times
    speed (of the current at standstill). The stator resistance is included throughout.
    Without current ``phi_rad`` is 0 and ``mod_index`` comes from the back-EMF alone.

    Induction machines: a negative current generates, at standstill it is the sign of the torque. Zero current is a machine that is
    switched off, without flux; zero torque is one that is magnetised (unless ``at_rest`` says otherwise for rows
    that also stand still).
    """
    n = block.time_s.size
    v_half = 0.5 * _dc_voltage(block, dc_voltage_v, where)
    if isinstance(machine, DirectPoints):
        return _direct(block, v_half, mod_index_max, where, n)
    rows = _Rows(block, machine, v_half, mod_index_max * v_half, where)
    if isinstance(machine, SynchronousMachine):
        return _synchronous(rows)
    return _induction(rows) if isinstance(machine, InductionMachine) else _induction_vf(rows)


@dataclass(frozen=True)
class Shortfall:
    """What ``beyond = "limit"`` left out: rows, time [s], and the largest amounts with their times.

    Examples
    --------
    >>> a = Shortfall(2, 10.0, 55.0, 120.0) + Shortfall(1, 5.0, 20.0, 300.0, 12.0, 305.0)
    >>> a.rows, a.time_s, a.torque_nm, a.torque_at_s, a.voltage_v, a.voltage_at_s
    (3, 15.0, 55.0, 120.0, 12.0, 305.0)
    >>> for words in a.words():
    ...     print(words)
    torque limited in 3 rows (15 s in all): up to 55 N m missing (t = 120 s)
    voltage by frequency limited: up to 12 V missing (peak phase, t = 305 s)
    """

    rows: int = 0
    time_s: float = 0.0
    torque_nm: float = 0.0
    torque_at_s: float = 0.0
    voltage_v: float = 0.0
    voltage_at_s: float = 0.0

    @classmethod
    def of(cls, points: OperatingPoints, time_s, dt_s) -> Shortfall:
        """Shortfall of some rows; ``time_s``, ``dt_s``: their beginnings and lengths [s]."""
        torque, voltage = np.nan_to_num(points.torque_missing_nm), np.nan_to_num(points.voltage_missing_v)
        if not (torque.any() or voltage.any()):
            return cls()
        short, t, v = torque > 0.0, int(np.argmax(torque)), int(np.argmax(voltage))
        return cls(int(short.sum()), float(np.asarray(dt_s)[short].sum()), float(torque[t]), float(time_s[t]) if short.any() else 0.0,
                   float(voltage[v]), float(time_s[v]) if voltage[v] > 0.0 else 0.0)

    def __add__(self, other: Shortfall) -> Shortfall:
        t = max(self, other, key=lambda s: s.torque_nm)
        v = max(self, other, key=lambda s: s.voltage_v)
        return Shortfall(self.rows + other.rows, self.time_s + other.time_s, t.torque_nm, t.torque_at_s, v.voltage_v, v.voltage_at_s)

    def words(self) -> tuple[str, ...]:
        """What to tell the user; nothing if nothing is missing."""
        out = ()
        if self.rows:
            out += (f"torque limited in {self.rows} row{'s' if self.rows > 1 else ''} ({self.time_s:g} s in all): "
                    f"up to {self.torque_nm:.4g} N m missing (t = {self.torque_at_s:g} s)",)
        if self.voltage_v:
            out += (f"voltage by frequency limited: up to {self.voltage_v:.4g} V missing (peak phase, t = {self.voltage_at_s:g} s)",)
        return out


def _row(block, where, k) -> str:
    return f"{where}, row {block.first_row + int(k) + 1} (t = {block.time_s[k]:g} s)"


def _column(block, name, where):
    a = np.asarray(block.columns[name], float)
    bad = ~np.isfinite(a)
    if bad.any():
        k = int(np.argmax(bad))
        raise InputError(f"{_row(block, where, k)}, {name}", f"{a[k]}", "a finite number", "correct the row")
    return a


#: What a user calls the columns under [duty.columns].
_USER_NAMES = {"speed_rad_s": "speed", "current_a": "current", "frequency_hz": "frequency", "mod_index": "mod_index", "phi_rad": "displacement"}


def _need(block, names, where, why):
    for name in names:
        if name not in block.columns:
            raise InputError(
                f"{where}, columns of the duty",
                f"no {name} among {', '.join(sorted(block.columns)) or 'none'}",
                f"{why} needs {', '.join(names)}",
                f"map a column to {_USER_NAMES[name]} under [duty.columns], or choose another kind of machine",
            )


def _dc_voltage(block, dc_voltage_v, where):
    if "dc_voltage_v" in block.columns:
        v = _column(block, "dc_voltage_v", where)
    elif dc_voltage_v is None:
        raise InputError(
            f"{where}",
            "no DC voltage",
            "a DC voltage of the inverter, or a column dc_voltage in the duty",
            "enter dc_voltage_v",
        )
    else:
        v = np.full(block.time_s.size, float(dc_voltage_v))
    bad = ~(v > 0.0)
    if bad.any():
        k = int(np.argmax(bad))
        raise InputError(
            f"{_row(block, where, k)}, dc_voltage_v", f"{v[k]:g} V", "a DC voltage above 0 V", "correct the value"
        )
    return v


def _direct(block, v_half, mod_index_max, where, n):
    _need(block, ("current_a", "frequency_hz", "mod_index", "phi_rad"), where, "machine kind 'direct'")
    current, f, m, phi = (_column(block, c, where) for c in ("current_a", "frequency_hz", "mod_index", "phi_rad"))
    for name, a, bad, allowed in (
        ("frequency_hz", f, f < 0.0, "at least 0 Hz; the sense of rotation comes from the speed"),
        ("mod_index", m, m < 0.0, "at least 0"),
        ("mod_index", m, m > mod_index_max * (1.0 + 1e-9), f"at most {mod_index_max:.6g} with this modulation"),
        # a negative current generates; a displacement that says it drives contradicts it
        (
            "current_a",
            current,
            (current < 0.0) & (np.cos(phi) > 1e-9),
            "a positive current, or a displacement beyond 90 degrees with a negative current (both say generating)",
        ),
    ):
        if bad.any():
            k = int(np.argmax(bad))
            raise InputError(
                f"{_row(block, where, k)}, {name}", f"{a[k]:g}", allowed, "correct the row or the column's meaning"
            )
    direction = np.ones(n)
    if "speed_rad_s" in block.columns:
        direction = np.where(_column(block, "speed_rad_s", where) < 0.0, -1.0, 1.0)
    nan = np.full(n, np.nan)
    return OperatingPoints(
        frequency_hz=f.copy(),
        direction=direction,
        i_peak_a=_ROOT2 * np.abs(current),
        mod_index=m.copy(),
        phi_rad=_wrap(phi),
        current_angle_rad=np.zeros(n),
        i_d_a=nan,
        i_q_a=nan.copy(),
        torque_nm=nan.copy(),
        v_peak_v=m * v_half,
        torque_missing_nm=np.zeros(n),
        voltage_missing_v=np.zeros(n),
    )


class _Rows:
    """The columns of a block that a machine reads, mirrored to positive speed.

    Attributes
    ----------
    mirror : -1. for rows with negative speed, which are reckoned as their mirror image
    omega_rad_s : electrical speed of the rotor, or stator frequency if ``by_frequency``; >= 0
    current_a : of the column, or None; negative brakes
    torque_nm : of the column, mirrored, or None; negative brakes
    """

    def __init__(self, block, machine, v_half, v_max, where):
        self.block, self.machine, self.v_half, self.v_max, self.where = block, machine, v_half, v_max, where
        have, kind = block.columns, machine.kind
        speeds = ("speed_rad_s",) if kind == "induction" else ("speed_rad_s", "frequency_hz")
        by_current = "current_a" in have
        if by_current == ("torque_nm" in have):
            self._one_of("current", "torque", by_current)
        if len(speeds) == 2 and ("speed_rad_s" in have) == ("frequency_hz" in have):
            self._one_of("speed", "frequency", "speed_rad_s" in have)
        if len(speeds) == 1:
            _need(block, speeds, where, f"machine kind '{kind}'")
        if by_current and machine.beyond == "limit":
            raise InputError(
                f"{where}, columns of the duty",
                "a current beside beyond = 'limit'",
                "a torque: a current that is given can only be met or refused",
                "map the torque, or take beyond out of the machine",
            )
        self.by_frequency = "speed_rad_s" not in have
        if self.by_frequency:
            w = 2.0 * np.pi * _column(block, "frequency_hz", where)
            if (w < 0.0).any():
                k = int(np.argmax(w < 0.0))
                raise InputError(
                    f"{_row(block, where, k)}, frequency_hz",
                    f"{w[k] / (2 * np.pi):g} Hz",
                    "at least 0 Hz",
                    "map the speed instead, if the machine reverses",
                )
        else:
            w = machine.pole_pairs * _column(block, "speed_rad_s", where)
        self.mirror, self.omega_rad_s = np.where(w < 0.0, -1.0, 1.0), np.abs(w)
        self.current_a = _column(block, "current_a", where) if by_current else None
        self.torque_nm = None if by_current else self.mirror * _column(block, "torque_nm", where)
        if by_current:
            self.sign = np.where(self.current_a < 0.0, -1.0, 1.0)
            over = np.abs(self.current_a) * _ROOT2 > machine.i_peak_max_a * (1.0 + 1e-9)
            if over.any():
                k = int(np.argmax(over))
                self.refuse(k, f"{abs(self.current_a[k]):g} A rms", f"at most current_max_a = {machine.current_max_a:g} A rms", "check the column's unit (rms or peak)")
        else:
            self.sign = np.where(self.torque_nm < 0.0, -1.0, 1.0)

    def _one_of(self, a, b, both):
        raise InputError(
            f"{self.where}, columns of the duty",
            f"{a} and {b}" if both else f"neither {a} nor {b}",
            f"{a} or {b}, one of them",
            "map one of the two under [duty.columns]",
        )

    def refuse(self, k, found, allowed, advice):
        """Raise the error of row k."""
        raise InputError(_row(self.block, self.where, k), found, allowed, advice)

    def wanted(self, k) -> str:
        """Load and speed of row k."""
        if self.current_a is not None:
            load = f"{abs(self.current_a[k]):g} A rms"
        else:
            load = f"{self.mirror[k] * self.torque_nm[k] + 0.0:g} N m"
        return f"{load} at {self.omega_rad_s[k] / (2 * np.pi):.4g} Hz"

    def available(self, k) -> str:
        """Voltage and current that row k may have."""
        limit = "" if self.machine.current_max_a is None else f" and {self.machine.current_max_a:g} A rms"
        return f"{_available_v(self.v_max[k], self.v_half[k])}{limit}"

    def points(self, current, voltage, omega, torque, *, i_peak=None, carried=0.0, voltage_missing=None) -> OperatingPoints:
        """Operating points of complex currents and voltages along and across the flux, all mirrored; ``omega``: stator frequency, signed.

        ``carried``: angle, not mirrored, from the d axis to the axis whose angle is carried instead.
        """
        v = np.abs(voltage)
        # field weakening ends on the limit to within rounding; on the limit means on it
        v = np.where((v > self.v_max) & (v <= self.v_max * (1.0 + 1e-9)), self.v_max, v)
        i_peak = np.abs(current) if i_peak is None else i_peak
        loaded = (i_peak > 0.0) & (v > 0.0)
        # a field that turns backwards sees time the other way round
        turn = np.where(omega < 0.0, -1.0, 1.0)
        phi = np.where(loaded, _wrap(turn * (np.angle(voltage) - np.angle(current))), 0.0)
        direction = np.where(omega == 0.0, 1.0, self.mirror * turn)
        # without current its angle is the limit of small currents: the q axis
        beta = np.where(i_peak > 0.0, self.mirror * np.angle(current) - carried, self.mirror * 0.5 * np.pi)
        missing = np.zeros(v.size)
        if self.torque_nm is not None:
            missing = np.maximum(np.abs(self.torque_nm) - self.sign * torque, 0.0)
            # only what was left out on purpose, no rounding
            missing[missing <= 1e-9 * np.abs(self.torque_nm)] = 0.0
        return OperatingPoints(
            frequency_hz=np.abs(omega) / (2.0 * np.pi),
            direction=direction,
            i_peak_a=i_peak,
            mod_index=v / self.v_half,
            phi_rad=phi,
            current_angle_rad=_wrap(beta + 0.5 * np.pi),
            i_d_a=current.real,
            i_q_a=self.mirror * current.imag,
            torque_nm=self.mirror * torque,
            v_peak_v=v,
            torque_missing_nm=missing,
            voltage_missing_v=np.zeros(v.size) if voltage_missing is None else voltage_missing,
        )


def _synchronous(rows: _Rows):
    machine, w, v_max = rows.machine, rows.omega_rad_s, rows.v_max
    by_current = rows.current_a is not None
    if by_current:
        size = _ROOT2 * np.abs(rows.current_a)
        i_d, i_q = mtpa_from_current(machine, size)
        i_q = rows.sign * i_q
    else:
        i_d, i_q = mtpa_from_torque(machine, rows.torque_nm)
    beyond_table = np.isnan(i_d)
    wanted_v = np.hypot(*dq_voltages_v(machine, w, i_d, i_q))
    short = np.flatnonzero(wanted_v > v_max * (1.0 + _SLACK))
    still = short[w[short] == 0.0]
    if still.size and machine.beyond == "refuse":
        k = still[0]
        rows.refuse(
            k,
            f"standstill, where the current drops {wanted_v[k]:.4g} V in the stator resistance",
            _available_v(v_max[k], rows.v_half[k]),
            "check r_s_ohm, the current and the DC voltage",
        )
    i_d[still], i_q[still] = np.nan, np.nan
    short = short[w[short] > 0.0]
    if by_current:
        if beyond_table.any():
            k = int(np.argmax(beyond_table))
            rows.refuse(k, f"{size[k]:.4g} A (peak)", f"what the section saturation holds: {flux_map(machine.saturation).words}", "add points to the section")
        if short.size:
            i_d[short], i_q[short], v = weaken_at_current(machine, w[short], i_d[short], i_q[short], v_max[short])
            if np.isnan(i_d[short]).any():
                at = int(np.argmax(np.isnan(i_d[short])))
                k = short[at]
                rows.refuse(
                    k,
                    f"{rows.wanted(k)}, which wants at least {v[at]:.4g} V even in full field weakening",
                    _available_v(v_max[k], rows.v_half[k]),
                    "check speed, machine data and DC voltage, or raise the current: weakening the field needs current",
                )
    else:
        if short.size:
            i_d[short], i_q[short] = weaken_at_torque(machine, w[short], rows.torque_nm[short], i_d[short], v_max[short])
        bad = np.flatnonzero(np.isnan(i_d) | (np.hypot(i_d, i_q) > machine.i_peak_max_a * (1.0 + _SLACK)))
        if bad.size:
            _limit_synchronous(rows, bad, i_d, i_q, wanted_v, beyond_table)

    v_d, v_q = dq_voltages_v(machine, w, i_d, i_q)
    return rows.points(i_d + 1j * i_q, v_d + 1j * v_q, w, torque_of_currents_nm(machine, i_d, i_q), i_peak=size if by_current else None)


def _limit_synchronous(rows, bad, i_d, i_q, wanted_v, beyond_table):
    """Put the currents of the largest torque into rows that cannot have theirs, or refuse the first of them."""
    machine, refusing = rows.machine, rows.machine.beyond == "refuse"
    looked = bad[:1] if refusing else bad
    most_d, most_q = largest_torque(machine, rows.omega_rad_s[looked], rows.torque_nm[looked], rows.v_max[looked], machine.i_peak_max_a)
    lost = np.isnan(most_d)
    if refusing or lost.any():
        at = int(np.argmax(lost))
        k = looked[at]
        most = rows.mirror[k] * float(torque_of_currents_nm(machine, most_d[at], most_q[at])) + 0.0
        if beyond_table[k]:
            wants = "which lies beyond the section saturation"
        elif np.isnan(i_d[k]):
            wants = f"which wants {wanted_v[k]:.4g} V; weakening the field does not bring that down far enough"
        else:
            wants = f"which wants {np.hypot(i_d[k], i_q[k]) / _ROOT2:.4g} A rms"
        if not lost[at]:
            allowed = f"{most:.4g} N m at this speed with {rows.available(k)}"
        elif machine.saturation is not None:
            allowed = f"what the section saturation ({flux_map(machine.saturation).words}) and {rows.available(k)} hold at this speed"
        else:
            allowed = f"nothing, not even without torque, at this speed with {rows.available(k)}"
        rows.refuse(k, f"{rows.wanted(k)}, {wants}", allowed, "check speed, torque, machine data and DC voltage")
    i_d[bad], i_q[bad] = most_d, most_q


def _induction(rows: _Rows):
    machine, w, n = rows.machine, rows.omega_rad_s, rows.omega_rad_s.size
    psi, y = np.zeros(n), np.zeros(n)
    on = np.flatnonzero(_switched_on(rows))
    if rows.current_a is not None:
        size = _ROOT2 * np.abs(rows.current_a[on])
        psi[on], y[on] = flux_at_current(machine, w[on], size, rows.sign[on], rows.v_max[on])
        if np.isnan(psi).any():
            k = int(np.argmax(np.isnan(psi)))
            rows.refuse(
                k,
                f"{rows.wanted(k)} (rotor)",
                f"a current between the magnetising one and breakdown with {rows.available(k)}; 0 A is a machine switched off",
                "check speed, machine data and DC voltage, or map the torque",
            )
    else:
        psi[on], y[on] = flux_at_torque(machine, w[on], rows.torque_nm[on], rows.v_max[on])
        bad = np.flatnonzero(np.isnan(psi))
        if bad.size:
            refusing = machine.beyond == "refuse"
            looked = bad[:1] if refusing else bad
            most_psi, most_y = largest_flux_torque(machine, w[looked], rows.torque_nm[looked], rows.v_max[looked])
            lost = np.isnan(most_psi)
            if refusing or lost.any():
                at = int(np.argmax(lost))
                _refuse_torque(rows, looked[at], 1.5 * machine.pole_pairs * most_psi[at] * most_y[at])
            psi[bad], y[bad] = most_psi, most_y
    state = induction_state(machine, psi, y)
    omega = w + state.slip_rad_s
    return rows.points(state.current_a, state.voltage_v(machine, omega), omega, torque_of_state_nm(machine, state))


def _induction_vf(rows: _Rows):
    machine, w, n = rows.machine, rows.omega_rad_s, rows.omega_rad_s.size
    limit = machine.beyond == "limit"
    ceiling = rows.v_max if limit else np.full(n, np.inf)
    law = VfRows(machine, w, ceiling, by_frequency=rows.by_frequency)
    on = _switched_on(rows)
    edge = law.edge_rad_s(rows.sign)
    quantity, wanted = ("current", _ROOT2 * np.abs(rows.current_a)) if rows.current_a is not None else ("torque", np.abs(rows.torque_nm))
    slip = np.where(on, law.slip_rad_s(quantity, wanted, edge), 0.0)
    bad = np.flatnonzero(np.isnan(slip))
    if bad.size:
        k = bad[0]
        if quantity == "current":
            rows.refuse(
                k,
                f"{rows.wanted(k)} ({'stator' if rows.by_frequency else 'rotor'})",
                "a current between that without load and breakdown; 0 A is a machine switched off",
                "check speed, machine data and the voltage by frequency, or map the torque",
            )
        looked = bad if limit else bad[:1]
        most = np.full(looked.size, np.nan)
        known = ~np.isnan(edge[looked])
        most[known] = law.most_rad_s("torque", edge[looked[known]], looked[known])
        lost = np.isnan(most)
        if lost.any() or not limit:
            at = int(np.argmax(lost))
            _refuse_torque(rows, looked[at], np.nan if lost[at] else float(torque_of_state_nm(machine, law.state(most[[at]], looked[[at]]))[0]))
        slip[bad] = most
    omega = law.stator_rad_s(slip)
    over = np.where(on, np.maximum(machine.law_v(omega) - rows.v_max, 0.0), 0.0)
    over[over <= 1e-9 * rows.v_max] = 0.0
    if over.any() and not limit:
        k = int(np.argmax(over > 0.0))
        rows.refuse(
            k,
            f"{rows.wanted(k)}, where the voltage by frequency is {machine.law_v(omega[k]):.4g} V",
            _available_v(rows.v_max[k], rows.v_half[k]),
            "check rated_voltage_v (between lines, rms) and the DC voltage, or let the voltage end there with beyond = 'limit'",
        )
    state = law.state(slip)
    current, voltage = (np.where(on, a, 0.0) for a in (state.current_a, state.voltage_v(machine, omega)))
    torque = np.where(on, torque_of_state_nm(machine, state), 0.0)
    # the voltage as a sine: a quarter turn behind its phasor
    return rows.points(current, voltage, omega, torque, carried=rows.mirror * np.angle(voltage) + 0.5 * np.pi, voltage_missing=over)


def _switched_on(rows: _Rows):
    if rows.current_a is not None:
        return rows.current_a != 0.0
    return (rows.torque_nm != 0.0) | (rows.omega_rad_s > 0.0) | (rows.machine.at_rest == "magnetised")


def _refuse_torque(rows, k, most):
    if not np.isnan(most):
        allowed = f"{rows.mirror[k] * most + 0.0:.4g} N m at this speed with {rows.available(k)}"
    elif rows.machine.saturation is not None:
        allowed = f"what the section saturation and {rows.available(k)} hold at this speed"
    else:
        allowed = f"nothing, not even without torque, at this speed with {rows.available(k)}"
    rows.refuse(
        k,
        f"{rows.wanted(k)} ({'stator' if rows.by_frequency else 'rotor'}), which the machine cannot make before breakdown"
        f" or the limits of {'inverter and saturation table' if rows.machine.saturation else 'the inverter'}",
        allowed,
        "check speed, torque, machine data and DC voltage",
    )


def _available_v(v_max, v_half):
    return f"at most {v_max:.4g} V (peak phase voltage, {2 * v_half:g} V DC)"


def _wrap(angle):
    """To (-pi, pi]."""
    return np.pi - np.mod(np.pi - angle, 2.0 * np.pi)
