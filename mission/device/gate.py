"""What the gate driver must deliver."""

from __future__ import annotations

from ..checks import require_range


def gate_drive_power_w(charge_c, v_on_v, v_off_v, switching_frequency_hz):
    """Mean power a driver delivers to one gate: Q_g (V_on - V_off) f_sw.

    Every charge that enters the gate comes from the driver's supply at the full
    swing, whatever the gate resistors.

    Parameters
    ----------
    charge_c : array_like
        Gate charge over the swing used [C], >= 0.
    v_on_v, v_off_v : array_like
        Driver voltages [V], ``v_on_v`` above ``v_off_v``.
    switching_frequency_hz : array_like
        [Hz], >= 0.

    Returns
    -------
    ndarray or float
        Power per switch [W].

    Raises
    ------
    RangeError
        Names the argument, the first bad index and value.

    Examples
    --------
    >>> round(float(gate_drive_power_w(1.4e-6, 15.0, -8.0, 8000.0)), 5)
    0.2576
    """
    q = require_range("charge_c", charge_c, low=0.0, unit="C")
    f = require_range("switching_frequency_hz", switching_frequency_hz, low=0.0, unit="Hz")
    return q * _swing_v(v_on_v, v_off_v) * f


def gate_peak_current_a(v_on_v, v_off_v, r_internal_ohm, r_external_ohm):
    """Upper bound of the gate current at a switching edge: (V_on - V_off)/(R_int + R_ext).

    Inductance of the gate loop keeps the real peak below this.

    Parameters
    ----------
    v_on_v, v_off_v : array_like
        Driver voltages [V], ``v_on_v`` above ``v_off_v``.
    r_internal_ohm, r_external_ohm : array_like
        Resistor inside the module and at the driver [ohm], >= 0 and not both zero.

    Returns
    -------
    ndarray or float
        Current [A].

    Raises
    ------
    RangeError
        Names the argument, the first bad index and value.

    Examples
    --------
    >>> float(gate_peak_current_a(15.0, -8.0, 2.5, 2.1))
    5.0
    """
    r_int = require_range("r_internal_ohm", r_internal_ohm, low=0.0, unit="ohm")
    r_ext = require_range("r_external_ohm", r_external_ohm, low=0.0, unit="ohm")
    total = require_range("r_internal_ohm + r_external_ohm", r_int + r_ext, low=0.0, low_open=True, unit="ohm")
    return _swing_v(v_on_v, v_off_v) / total


def turn_off_peak_v(dc_voltage_v, current_a, stray_inductance_h, fall_time_s):
    """Peak voltage over a switch that turns off: the link plus L di/dt, with di/dt = 0.8 I/t_f.

    Parameters
    ----------
    dc_voltage_v : array_like
        Voltage that is commutated [V].
    current_a : array_like
        Current that is turned off [A].
    stray_inductance_h : array_like
        Of the whole commutation loop: link, bus bars and module [H].
    fall_time_s : array_like
        From 90 to 10 % of the current [s].

    Returns
    -------
    ndarray or float
        [V]. A straight fall between 90 and 10 %; snappy devices go higher.

    Raises
    ------
    RangeError
        Negative voltage, current or inductance; a fall time that is not above zero.

    Examples
    --------
    >>> float(turn_off_peak_v(600.0, 500.0, 40e-9, 100e-9))
    760.0
    """
    v = require_range("dc_voltage_v", dc_voltage_v, low=0.0, unit="V")
    i = require_range("current_a", current_a, low=0.0, unit="A")
    inductance = require_range("stray_inductance_h", stray_inductance_h, low=0.0, unit="H")
    fall = require_range("fall_time_s", fall_time_s, low=0.0, low_open=True, unit="s")
    return v + inductance * 0.8 * i / fall


def _swing_v(v_on_v, v_off_v):
    on, off = require_range("v_on_v", v_on_v, unit="V"), require_range("v_off_v", v_off_v, unit="V")
    return require_range("v_on_v - v_off_v", on - off, low=0.0, low_open=True, unit="V")
