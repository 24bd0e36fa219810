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


def _swing_v(v_on_v, v_off_v):
    on, off = require_range("v_on_v", v_on_v, unit="V"), require_range("v_off_v", v_off_v, unit="V")
    return require_range("v_on_v - v_off_v", on - off, low=0.0, low_open=True, unit="V")
