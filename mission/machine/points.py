"""Operating points: what the duty asks of the inverter in every row.

Conventions. Phase current i = I_pk sin(theta), phase reference m sin(theta + phi),
theta growing in time; phi > 0: the current lags; |phi| > 90 degrees: generating.
m = 1 is a peak phase voltage of half the DC voltage.

The rotor's electrical angle (its d axis) falls in time when the speed is negative.
Phase a carries I_pk sin(theta_rotor + current_angle_rad) in both directions. For negative
speed theta in the formula above is then pi - (theta_rotor + current_angle_rad), and phases b
and c change places in time.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from .spec import DirectPoints, MachineSpec, SynchronousMachine
from .synchronous import (
    dq_voltages_v,
    largest_torque_nm,
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
    i_d_a, i_q_a : rotor-coordinate peak currents [A]; NaN for direct points
    torque_nm : air-gap torque [N m], torque times speed is power; NaN for direct points
    v_peak_v : peak phase voltage [V]
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
        Synchronous machines need ``current_a`` or ``torque_nm``, and ``speed_rad_s``
        or ``frequency_hz`` (then the speed is positive). Direct points need
        ``current_a``, ``frequency_hz``, ``mod_index`` and ``phi_rad``; ``speed_rad_s``,
        if there, only gives the sense of rotation.
    machine : SynchronousMachine or DirectPoints
    dc_voltage_v : float or None
        DC voltage of the inverter [V]; a column ``dc_voltage_v`` of the duty goes before it.
    mod_index_max : float
        1 for sine modulation, 2/sqrt(3) with injection.
    where : str
        Start of messages, e.g. the duty's file.

    Returns
    -------
    OperatingPoints

    Raises
    ------
    InputError
        A column is missing or given twice over, or a row asks for more voltage than
        there is; nothing is ever clipped. Names the row (1 is the first of the data), its
        time, what is wanted and what is available.

    Notes
    -----
    From the current: its size is kept, its angle gives the most torque, turned into
    field weakening where the voltage is short. From the torque: the least current,
    then along the curve of constant torque. ``i_q_a`` has the sign of current times
    speed (of the current at standstill). The stator resistance is included throughout.
    Without current ``phi_rad`` is 0 and ``mod_index`` comes from the back-EMF alone.
    """
    n = block.time_s.size
    v_half = 0.5 * _dc_voltage(block, dc_voltage_v, where)
    if isinstance(machine, DirectPoints):
        return _direct(block, v_half, mod_index_max, where, n)
    return _synchronous(block, machine, v_half, mod_index_max, where)


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
_USER_NAMES = {"current_a": "current", "frequency_hz": "frequency", "mod_index": "mod_index", "phi_rad": "displacement"}


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
    )


def _synchronous(block, machine: SynchronousMachine, v_half, mod_index_max, where):
    have = block.columns
    by_current = "current_a" in have
    if by_current == ("torque_nm" in have):
        raise InputError(
            f"{where}, columns of the duty",
            "current and torque" if by_current else "neither current nor torque",
            "current or torque, one of them",
            "map one of the two under [duty.columns]",
        )
    if ("speed_rad_s" in have) == ("frequency_hz" in have):
        raise InputError(
            f"{where}, columns of the duty",
            "speed and frequency" if "speed_rad_s" in have else "neither speed nor frequency",
            "speed or frequency, one of them",
            "map one of the two under [duty.columns]",
        )
    if "speed_rad_s" in have:
        w = machine.pole_pairs * _column(block, "speed_rad_s", where)
    else:
        w = 2.0 * np.pi * _column(block, "frequency_hz", where)
        if (w < 0.0).any():
            k = int(np.argmax(w < 0.0))
            raise InputError(
                f"{_row(block, where, k)}, frequency_hz",
                f"{w[k] / (2 * np.pi):g} Hz",
                "at least 0 Hz",
                "map the speed instead, if the machine reverses",
            )
    direction = np.where(w < 0.0, -1.0, 1.0)
    w = np.abs(w)
    v_max = mod_index_max * v_half

    # Mirrored to positive speed: i_q > 0 drives, i_q < 0 brakes.
    if by_current:
        current = _column(block, "current_a", where)
        size = _ROOT2 * np.abs(current)
        i_d, i_q = mtpa_from_current(machine, size)
        i_q = np.where(current < 0.0, -i_q, i_q)
    else:
        torque = direction * _column(block, "torque_nm", where)
        i_d, i_q = mtpa_from_torque(machine, torque)
    short = np.flatnonzero(np.hypot(*dq_voltages_v(machine, w, i_d, i_q)) > v_max * (1.0 + _SLACK))
    if short.size:
        still = short[w[short] == 0.0]
        if still.size:
            k = still[0]
            v = machine.r_s_ohm * np.hypot(i_d[k], i_q[k])
            raise InputError(
                _row(block, where, k),
                f"standstill, where the current drops {v:.4g} V in the stator resistance",
                _available_v(v_max[k], v_half[k]),
                "check r_s_ohm, the current and the DC voltage",
            )
        if by_current:
            i_d[short], i_q[short], v = weaken_at_current(machine, w[short], i_d[short], i_q[short], v_max[short])
            if np.isnan(i_d[short]).any():
                at = int(np.argmax(np.isnan(i_d[short])))
                k = short[at]
                raise InputError(
                    _row(block, where, k),
                    f"{abs(current[k]):g} A rms at {w[k] / (2 * np.pi):.4g} Hz, "
                    f"which wants at least {v[at]:.4g} V even in full field weakening",
                    _available_v(v_max[k], v_half[k]),
                    "check speed, machine data and DC voltage, or raise the current: weakening the field needs current",
                )
        else:
            wanted_v = np.hypot(*dq_voltages_v(machine, w[short], i_d[short], i_q[short]))
            i_d[short], i_q[short] = weaken_at_torque(machine, w[short], torque[short], i_d[short], v_max[short])
            if np.isnan(i_d[short]).any():
                at = int(np.argmax(np.isnan(i_d[short])))
                k = short[at]
                most = largest_torque_nm(machine, float(w[k]), float(v_max[k]), float(torque[k]))
                raise InputError(
                    _row(block, where, k),
                    f"{direction[k] * torque[k]:g} N m at {w[k] / (2 * np.pi):.4g} Hz, "
                    f"which wants {wanted_v[at]:.4g} V; weakening the field does not bring that down far enough",
                    f"{direction[k] * most:.4g} N m at this speed with {_available_v(v_max[k], v_half[k])}",
                    "check speed, torque, machine data and DC voltage",
                )

    v_d, v_q = dq_voltages_v(machine, w, i_d, i_q)
    v = np.hypot(v_d, v_q)
    # field weakening ends on the limit to within rounding; on the limit means on it
    v = np.where((v > v_max) & (v <= v_max * (1.0 + 1e-9)), v_max, v)
    i_peak = size if by_current else np.hypot(i_d, i_q)
    loaded = (i_peak > 0.0) & (v > 0.0)
    phi = np.where(loaded, _wrap(np.arctan2(v_q, v_d) - np.arctan2(i_q, i_d)), 0.0)
    # without current its angle is the limit of small currents: the q axis
    beta = np.where(i_peak > 0.0, np.arctan2(direction * i_q, i_d), direction * 0.5 * np.pi)
    return OperatingPoints(
        frequency_hz=w / (2.0 * np.pi),
        direction=direction,
        i_peak_a=i_peak,
        mod_index=v / v_half,
        phi_rad=phi,
        current_angle_rad=_wrap(beta + 0.5 * np.pi),
        i_d_a=i_d,
        i_q_a=direction * i_q,
        torque_nm=direction * torque_of_currents_nm(machine, i_d, i_q),
        v_peak_v=v,
    )


def _available_v(v_max, v_half):
    return f"at most {v_max:.4g} V (peak phase voltage, {2 * v_half:g} V DC)"


def _wrap(angle):
    """To (-pi, pi]."""
    return np.pi - np.mod(np.pi - angle, 2.0 * np.pi)
