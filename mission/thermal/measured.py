"""Measured heating and cooling curves: from samples to thermal impedance, structure function and junction-to-case resistance.

A record of the chip's temperature after a step of power is cut, its start extrapolated with
the square root of time, and smoothed on an even grid of log time. Its derivative is taken
apart into a spectrum of time constants, whose ladder is the structure function: heat capacity
met over thermal resistance passed, from the junction outwards. Two records of one device
on two interfaces part where the device ends.

Sources: JESD51-14 (2010) for the square-root law and for the two ways to find the point of
separation; V. Szekely, "On the representation of infinite-length distributed RC one-ports",
IEEE Trans. Circuits Syst. 38 (1991) 711-719, and "Identification of RC networks by
deconvolution", IEEE Trans. Circuits Syst. I 45 (1998) 244-258, for the spectrum and the
iteration by Bayes' rule; W. H. Richardson, J. Opt. Soc. Am. 62 (1972) 55-59, for that
iteration itself; G. Golub, W. Kahan, SIAM J. Numer. Anal. 2 (1965) 205-224, for the
bidiagonal form. Sources named from memory; none of their text is used.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..checks import require_range
from ..device import digitised
from ..device.fitting import FosterFit, fit_foster
from ..errors import InputError, RangeError, near_match
from .networks import CauerLadder, FosterNetwork

#: Line of thresholds of JESD51-14 for the scaled difference of derivatives, slope [W/K] and start [1]; numbers from memory.
EPSILON_LINE = (0.0045, 0.003)
#: Share of the final difference from which two structure functions count as parted.
STRUCTURE_SHARE = 0.05
#: Two curves that end closer than this share of the larger one do not part.
_LEAST_DIFFERENCE = 0.01
#: Two curves of one device should agree within this before they part.
_ALIKE = 0.02
_FEWEST, _MOST = 12, 5_000_000
#: Points that a stretch of smoothing holds at least.
_FEWEST_LOCAL = 7
#: The temperature scale has no factor: only differences count.
_SIGNALS = ("temperature", "voltage")
_KINDS = ("heating", "cooling")


# ------------------------------------------------------------------ records
@dataclass(frozen=True)
class ThermalRecord:
    """Samples after a step of power, as temperatures.

    Attributes
    ----------
    label : str
    time_s : ndarray, shape (n,)
        Time since the step [s], rising, all above zero.
    temperature_c : ndarray, shape (n,)
        Temperature [degC]. From a voltage: a temperature whose zero lies where the voltage is
        zero; only differences of it mean anything.
    power_w : float
        Size of the step [W], above zero for heating and for cooling.
    kind : str
        "heating" (power switched on) or "cooling" (switched off).
    before_c : float or None
        Mean of the samples before the step, where there are at least three [degC].
    notes : tuple of str
    """

    label: str
    time_s: np.ndarray
    temperature_c: np.ndarray
    power_w: float
    kind: str
    before_c: float | None = None
    notes: tuple[str, ...] = ()

    @property
    def sign(self) -> float:
        """+1 where the temperature rises after the step, -1 where it falls."""
        return 1.0 if self.kind == "heating" else -1.0


def thermal_record(
    time_s,
    values,
    *,
    power_w: float,
    kind: Literal["heating", "cooling"],
    signal: Literal["temperature", "voltage"] = "temperature",
    k_factor_mv_per_k: float | None = None,
    step_at_s: float = 0.0,
    label: str = "record",
) -> ThermalRecord:
    """A record from samples.

    Parameters
    ----------
    time_s : array_like, shape (n,)
        Times of the samples [s], rising.
    values : array_like, shape (n,)
        Temperatures [degC] or [K], or voltages of the temperature-sensitive parameter [V].
    power_w : float
        Size of the step of power [W], > 0. For cooling: heating power minus what the sensing current makes.
    kind : {"heating", "cooling"}
    signal : {"temperature", "voltage"}
    k_factor_mv_per_k : float, optional
        Slope of the voltage over temperature [mV/K], usually negative; needed for a voltage.
        One slope stands for the whole range: a bent calibration must be applied beforehand.
    step_at_s : float
        Time of the step on the time axis of the samples [s].
    label : str
        Name for messages.

    Returns
    -------
    ThermalRecord

    Raises
    ------
    InputError
        Unknown kind or signal, slope missing or not wanted, lists of different length, times that
        do not rise, too few samples after the step, a curve that goes the wrong way or stands still.
    RangeError
        NaN or infinity, power or slope out of range.

    Examples
    --------
    >>> t = np.geomspace(1e-5, 10, 100)
    >>> record = thermal_record(t, 0.6 - 2e-3 * 30 * (1 - np.exp(-t)), power_w=20.0, kind="heating", signal="voltage", k_factor_mv_per_k=-2.0)
    >>> round(float(np.ptp(record.temperature_c)), 2)
    30.0
    """
    for name, value, allowed in (("kind", kind, _KINDS), ("signal", signal, _SIGNALS)):
        if value not in allowed:
            raise InputError(f"{label}, {name}", f"{value!r}", " or ".join(allowed), near_match(str(value), allowed))
    power = float(require_range("power_w", power_w, low=0.0, low_open=True, unit="W"))
    start = float(require_range("step_at_s", step_at_s, unit="s"))
    t, y = require_range("time_s", time_s, unit="s"), require_range("values", values)
    if t.ndim != 1 or t.shape != y.shape:
        raise InputError(label, f"times of shape {t.shape} and values of shape {y.shape}", "two lists of one length", "give one value for every time")
    if t.size > _MOST:
        raise InputError(label, f"{t.size} samples", f"at most {_MOST}", "average neighbouring samples at late times first")
    back = np.flatnonzero(np.diff(t) <= 0.0)
    if back.size:
        k = int(back[0]) + 1
        raise InputError(f"{label}, sample {k + 1}", f"{t[k]:g} s after {t[k - 1]:g} s", "times that rise", "sort them, remove doubles")
    if signal == "voltage":
        if k_factor_mv_per_k is None:
            raise InputError(
                f"{label}, k_factor_mv_per_k", "none", "the slope of the voltage over temperature in mV/K", "take it from the calibration"
            )
        slope = float(require_range("k_factor_mv_per_k", k_factor_mv_per_k, low=-1e3, high=1e3, unit="mV/K"))
        if abs(slope) < 1e-3:
            raise RangeError("k_factor_mv_per_k", f"{slope:g} mV/K", "at least 0.001 mV/K in size", "about -2 mV/K is usual for a pn junction")
        y = y * 1e3 / slope
    elif k_factor_mv_per_k is not None:
        raise InputError(
            f"{label}, k_factor_mv_per_k", f"{k_factor_mv_per_k:g} mV/K for temperatures", "none", 'state signal = "voltage", or leave the factor out'
        )
    t = t - start
    after = t > 0.0
    if after.sum() < _FEWEST:
        raise InputError(
            label,
            f"{int(after.sum())} samples after the step at {start:g} s",
            f"at least {_FEWEST}",
            "check step_at_s and the unit of the time, or record more of the curve",
        )
    before = float(np.mean(y[~after])) if (~after).sum() >= 3 else None
    t, y = t[after], y[after]
    if t[-1] < 100.0 * t[0]:
        raise InputError(
            label, f"samples from {t[0]:g} to {t[-1]:g} s", "at least two decades of time", "record from earlier on; the step must be at zero time"
        )
    sign = 1.0 if kind == "heating" else -1.0
    part = max(3, t.size // 20)
    first, last = float(np.median(y[:part])), float(np.median(y[-part:]))
    swing = float(np.ptp(y))
    if swing == 0.0:
        raise InputError(label, f"{y[0]:g} in every sample", "a curve that moves", "check the column")
    if sign * (last - first) < 0.2 * swing:
        moved = "rises" if last > first else "falls"
        slip = " or the sign of k_factor_mv_per_k" if signal == "voltage" else ""
        raise InputError(
            label,
            f"a temperature that {moved} from {first:.5g} to {last:.5g}, over a range of {swing:.3g} K",
            "one that rises after power is switched on" if sign > 0 else "one that falls after power is switched off",
            f"check kind{slip}",
        )
    return ThermalRecord(label, t, y, power, kind, before)


def read_record(
    path,
    *,
    power_w: float,
    kind: Literal["heating", "cooling"],
    signal: Literal["temperature", "voltage"] = "temperature",
    k_factor_mv_per_k: float | None = None,
    step_at_s: float = 0.0,
    units: tuple[str, str] | None = None,
    columns=None,
    delimiter: str = ",",
    decimal: str = ".",
    encoding: str = "utf-8",
) -> ThermalRecord:
    """Read a record from a CSV file of two columns, or two of its columns.

    Parameters
    ----------
    path : path-like
        Read as :func:`mission.device.digitised.read_points` does; at most 100 000 rows.
    power_w, kind, signal, k_factor_mv_per_k, step_at_s
        See :func:`thermal_record`.
    units : (str, str), optional
        Units of time (s, ms, us) and of the signal (degC, K, V, mV); s and degC or V without it.
    columns : dict, optional
        "time" and "temperature" or "voltage" -> name in the header, or number from 1.
    delimiter, decimal, encoding : str

    Returns
    -------
    ThermalRecord

    Raises
    ------
    InputError
        What is wrong first, with file, line, column and value.
    """
    from pathlib import Path

    label = Path(path).name
    if signal not in _SIGNALS:
        raise InputError(f"{label}, signal", f"{signal!r}", " or ".join(_SIGNALS), near_match(str(signal), _SIGNALS))
    units = units or ("s", "degC" if signal == "temperature" else "V")
    if len(units) != 2:
        raise InputError(f"{label}, units", f"{units!r}", "a unit for the time and one for the signal")
    for quantity, unit in zip(("time", signal), units):
        if unit not in digitised.UNITS[quantity]:
            raise InputError(
                f"{label}, units",
                f"'{unit}' for {quantity}",
                "one of " + ", ".join(digitised.UNITS[quantity]),
                near_match(unit, digitised.UNITS[quantity]),
            )
    if columns is not None:
        missing = [q for q in ("time", signal) if q not in columns]
        if missing:
            raise InputError(f"{label}, columns", f"no '{missing[0]}'", f"time and {signal}", "state both columns")
    raw = digitised.read_points(path, label, ("time", signal), units, columns=columns, delimiter=delimiter, decimal=decimal, encoding=encoding)
    return thermal_record(
        raw.x, raw.y, power_w=power_w, kind=kind, signal=signal, k_factor_mv_per_k=k_factor_mv_per_k, step_at_s=step_at_s, label=label
    )


# ------------------------------------------------------------------ early part
@dataclass(frozen=True)
class SquareRootStart:
    """Straight line of temperature over the square root of time.

    Attributes
    ----------
    window_s : (float, float)
        First and last time of the samples fitted [s].
    found : bool
        The program chose the window, not the user.
    start_c : float
        Temperature at the step, at zero time [degC].
    start_error_k : float
        Its standard error from the scatter, joined with what a bend of the line would change [K].
    slope_k_per_sqrt_s : float
        Of the rise, positive for cooling too [K/s^0.5].
    residual_rms_k, residual_max_k : float
        Of the samples in the window [K].
    n_samples : int
    """

    window_s: tuple[float, float]
    found: bool
    start_c: float
    start_error_k: float
    slope_k_per_sqrt_s: float
    residual_rms_k: float
    residual_max_k: float
    n_samples: int


def square_root_start(record: ThermalRecord, window_s: tuple[float, float] | None = None) -> SquareRootStart:
    """Fit T = T0 + k sqrt(t), the law of a half-space heated evenly at its face.

    It stands for the time in which heat has left the thin heated layer and has not yet reached
    the chip's far face (JESD51-14). A window that is not given is looked for: spans of 4, 8 and
    16 in time are moved through the first three decades; of those whose residual is no more than
    the scatter the one with the smallest error of T0 is taken.

    Parameters
    ----------
    record : ThermalRecord
    window_s : (float, float), optional
        First and last time of the fit [s].

    Returns
    -------
    SquareRootStart

    Raises
    ------
    InputError
        A window outside the record, with fewer than 4 samples, or in which the curve goes the
        wrong way; or no window found.

    Examples
    --------
    >>> t = np.geomspace(1e-5, 10, 300)
    >>> start = square_root_start(thermal_record(t, 25 + 8 * np.sqrt(t), power_w=10.0, kind="heating"), (1e-4, 1e-2))
    >>> round(start.start_c, 6), round(start.slope_k_per_sqrt_s, 6)
    (25.0, 8.0)
    """
    t, y = record.time_s, record.sign * record.temperature_c
    if window_s is not None:
        try:
            low, high = (float(w) for w in window_s)
        except (TypeError, ValueError):
            raise InputError(f"{record.label}, window_s", f"{window_s!r}", "a first and a last time in seconds") from None
        require_range("window_s", [low, high], low=0.0, unit="s")
        if not low < high:
            raise InputError(f"{record.label}, window_s", f"{low:g} to {high:g} s", "a first time before the last")
        inside = (t >= low) & (t <= high)
        if inside.sum() < 4:
            raise InputError(
                f"{record.label}, window_s",
                f"{int(inside.sum())} samples from {low:g} to {high:g} s",
                f"at least 4; the record runs from {t[0]:g} to {t[-1]:g} s",
                "widen the window",
            )
        line = _line(np.sqrt(t[inside]), y[inside])
        if line["slope"] <= 0.0:
            raise InputError(
                f"{record.label}, window_s",
                f"a curve that goes the wrong way from {low:g} to {high:g} s",
                "one that follows the step",
                "an electrical transient? begin the window later",
            )
        return _start(record, (low, high), False, line)
    scatter = _scatter(y)
    best = None
    for span in (4.0, 8.0, 16.0):
        for first in np.geomspace(t[0], min(1e3 * t[0], t[-1] / 30.0), 28):
            inside = slice(np.searchsorted(t, first * (1 - 1e-12)), np.searchsorted(t, first * span, side="right"))
            if inside.stop - inside.start < 5:
                continue
            line = _line(np.sqrt(t[inside]), y[inside])
            rise = line["slope"] * (np.sqrt(first * span) - np.sqrt(first))
            middle = np.searchsorted(t, first * np.sqrt(span))
            for part in (slice(inside.start, middle), slice(middle, inside.stop)):
                # a line that is straight by chance has halves that are not its own
                if part.stop - part.start >= 5:
                    half = _line(np.sqrt(t[part]), y[part])
                    line["error"] = float(np.hypot(line["error"], max(0.0, abs(half["start"] - line["start"]) - 2.0 * half["scatter"])))
            # bent by no more than what the scatter explains
            if line["slope"] <= 0.0 or rise < 2.0 * line["error"] or line["rms"] > max(1.6 * scatter, 0.01 * rise):
                continue
            if best is None or line["error"] < best[0]:
                best = (line["error"], (float(t[inside][0]), float(t[inside][-1])), line)
    if best is None:
        raise InputError(
            record.label,
            "no stretch in which the temperature goes with the square root of time",
            "a record that begins before heat reaches the chip's far face (usually within 0.1 to 1 ms)",
            "state window_s, or start_c where the temperature at the step is known",
        )
    return _start(record, best[1], True, best[2])


def _scatter(y):
    """Scatter of single samples: median of second differences, which a smooth curve hardly has."""
    return float(np.median(np.abs(y[:-2] - 2.0 * y[1:-1] + y[2:])) / 0.6745 / np.sqrt(6.0))


def _line(x, y):
    """Straight line with residuals, and the error of its start: scatter, and what a bend would change."""
    scale = x[-1]
    u = x / scale
    a = np.stack([np.ones_like(u), u], axis=1)
    (start, slope), *_ = np.linalg.lstsq(a, y, rcond=None)
    rest = y - a @ (start, slope)
    n = x.size
    error = np.sqrt(rest @ rest / max(n - 2, 1) * np.linalg.inv(a.T @ a)[0, 0])
    bend = 0.0
    if n > 4:
        bent, *_ = np.linalg.lstsq(np.stack([np.ones_like(u), u, u * u], axis=1), y, rcond=None)
        bend = bent[0] - start
    return {
        "start": float(start),
        "slope": float(slope / scale),
        "rms": float(np.sqrt(np.mean(rest**2))),
        "max": float(np.abs(rest).max()),
        "scatter": float(error),
        "error": float(np.hypot(error, bend)),
        "n": n,
    }


def _start(record, window, found, line):
    return SquareRootStart(window, found, record.sign * line["start"], line["error"], line["slope"], line["rms"], line["max"], line["n"])


def half_space_slope_k_per_sqrt_s(power_w: float, area_mm2: float, material) -> float:
    """Slope that a chip's heated area should show.

    Parameters
    ----------
    power_w : float
        Step of power [W].
    area_mm2 : float
        Evenly heated area [mm2].
    material : Material
        Of the chip, with ``k_w_per_m_k``, ``rho_kg_per_m3``, ``c_j_per_kg_k``.

    Returns
    -------
    float
        2 P / (A sqrt(pi k rho c)) [K/s^0.5] (H. S. Carslaw, J. C. Jaeger, "Conduction of Heat in Solids", 2nd ed., 1959, 2.9).

    Raises
    ------
    RangeError
        Power or area not above zero.

    Examples
    --------
    >>> from types import SimpleNamespace
    >>> copper = SimpleNamespace(k_w_per_m_k=401.0, rho_kg_per_m3=8933.0, c_j_per_kg_k=385.0)
    >>> round(half_space_slope_k_per_sqrt_s(1.0, 1.0, copper), 4)
    30.3846
    """
    power = float(require_range("power_w", power_w, low=0.0, low_open=True, unit="W"))
    area = float(require_range("area_mm2", area_mm2, low=0.0, low_open=True, unit="mm2")) * 1e-6
    return 2.0 * power / area / float(np.sqrt(np.pi * material.k_w_per_m_k * material.rho_kg_per_m3 * material.c_j_per_kg_k))


# ------------------------------------------------------------------ impedance
@dataclass(frozen=True)
class MeasuredImpedance:
    """Thermal impedance on an even grid of log time.

    Attributes
    ----------
    label : str
    time_s : ndarray, shape (m,)
        [s].
    z_th_k_per_w : ndarray, shape (m,)
        Rise per watt of a heating curve [K/W]; a cooling curve is turned round.
    slope_k_per_w : ndarray, shape (m,)
        Derivative by the natural log of time, da/dz [K/W].
    extrapolated : ndarray of bool, shape (m,)
        Points that come from the square-root law, not from samples.
    raw_time_s, raw_z_th_k_per_w : ndarray, shape (n,)
        Samples after the same correction of the start.
    noise_k_per_w : float
        Standard deviation of a sample about the smooth curve [K/W].
    start : SquareRootStart or None
        None where the temperature at the step was given.
    start_c : float
        Temperature at the step that all rises count from [degC].
    power_w : float
    kind : str
        Of the record: heating or cooling.
    method : str
        How it was smoothed, in words.
    notes : tuple of str
        What a reader must know.
    """

    label: str
    time_s: np.ndarray
    z_th_k_per_w: np.ndarray
    slope_k_per_w: np.ndarray
    extrapolated: np.ndarray
    raw_time_s: np.ndarray
    raw_z_th_k_per_w: np.ndarray
    noise_k_per_w: float
    start: SquareRootStart | None
    start_c: float
    power_w: float
    kind: str
    method: str
    notes: tuple[str, ...] = ()

    def to_text(self) -> str:
        """What was done, a fact a line."""
        lines = [
            f"{self.label}: {self.kind} curve, step of {self.power_w:g} W, {self.raw_time_s.size} samples from {self.raw_time_s[0]:.3g} to "
            f"{self.raw_time_s[-1]:.3g} s",
            f"  impedance at the end {self.z_th_k_per_w[-1]:.4g} K/W, a sample scatters by {self.noise_k_per_w:.2g} K/W (standard deviation)",
        ]
        if self.start is not None:
            s = self.start
            chosen = "found" if s.found else "given"
            lines.append(
                f"  start: {s.start_c:.5g} degC within {s.start_error_k:.2g} K, straight in the square root of time from {s.window_s[0]:.3g} to "
                f"{s.window_s[1]:.3g} s ({chosen}, {s.n_samples} samples, residual rms {s.residual_rms_k:.2g} K, largest {s.residual_max_k:.2g} K)"
            )
            lines.append(f"  before {s.window_s[0]:.3g} s the curve is that line, not the samples")
        else:
            lines.append(f"  start: {self.start_c:.5g} degC, as given")
        lines.append(f"  {self.method}")
        return "\n".join(lines + [f"  {note}" for note in self.notes])


def impedance(
    record: ThermalRecord,
    *,
    window_s: tuple[float, float] | None = None,
    start_c: float | None = None,
    first_s: float | None = None,
    points_per_decade: int = 20,
    half_width: float = 0.7,
) -> MeasuredImpedance:
    """Thermal impedance from a record: offset, early part, turning round, smoothing in log time.

    Parameters
    ----------
    record : ThermalRecord
    window_s : (float, float), optional
        Window of the square-root law [s]; without it one is looked for.
    start_c : float, optional
        Temperature at the step [degC] where it is known. Then nothing is extrapolated, and ``window_s`` may not be given.
    first_s : float, optional
        The square-root law is carried on down to this time [s]; a hundredth of the window's beginning without it.
    points_per_decade : int
        Of the grid, 5 to 100.
    half_width : float
        Smoothing reaches so far to either side, in the natural log of time, 0.1 to 2.5; more where
        fewer than seven samples lie in it. A tricube-weighted cubic is fitted around every grid
        point, which gives value and derivative at once. 0.7 (a third of a decade) bends the
        derivative of a single time constant by less than 0.5 % of its peak; more
        smoothing calms noise and blunts.

    Returns
    -------
    MeasuredImpedance

    Raises
    ------
    InputError
        Window and start both given, no window found, first time after the window.
    RangeError
        Numbers out of range.

    Examples
    --------
    >>> t = np.geomspace(1e-5, 10, 400)
    >>> z = impedance(thermal_record(t, 90 - 40 * (1 - np.exp(-t)), power_w=100.0, kind="cooling"), start_c=90.0)
    >>> round(float(np.interp(1.0, z.time_s, z.z_th_k_per_w)), 3)
    0.253
    """
    if isinstance(points_per_decade, bool) or points_per_decade not in range(5, 101):
        raise InputError("points_per_decade", f"{points_per_decade!r}", "a whole number, 5 to 100")
    reach = float(require_range("half_width", half_width, low=0.1, high=2.5))
    notes = list(record.notes)
    if start_c is not None:
        if window_s is not None:
            raise InputError(f"{record.label}, start_c", "a start and a window", "one of them", "the window gives the start by itself")
        start, zero = None, float(require_range("start_c", start_c, unit="degC"))
    else:
        start = square_root_start(record, window_s)
        zero = start.start_c
        rise_k = start.slope_k_per_sqrt_s * float(np.diff(np.sqrt(start.window_s))[0])
        if start.residual_rms_k > max(2.0 * _scatter(record.temperature_c), 0.01 * rise_k):
            notes.append(f"not straight in the window: residual rms {start.residual_rms_k:.2g} K of a rise by {rise_k:.2g} K; choose another")
        if record.before_c is not None and record.kind == "heating":
            apart = zero - record.before_c
            if abs(apart) > 3.0 * start.start_error_k + 0.01 * np.ptp(record.temperature_c):
                notes.append(
                    f"the start lies {apart:+.3g} K off the mean of the samples before the step: an offset of the sensing, or a step that came late"
                )
    t = record.time_s
    z = record.sign * (record.temperature_c - zero) / record.power_w
    noise_floor = 0.0
    early_t = early_z = np.zeros(0)
    if start is not None:
        begin = start.window_s[0]
        low = begin / 100.0 if first_s is None else float(require_range("first_s", first_s, low=0.0, low_open=True, unit="s"))
        if low > begin:
            raise InputError(f"{record.label}, first_s", f"{low:g} s", f"at most {begin:g} s, where the window begins")
        early_t = np.geomspace(low * np.exp(-reach), begin, max(8, int(40 * np.log10(begin / low * np.exp(reach)))), endpoint=False)
        early_z = start.slope_k_per_sqrt_s * np.sqrt(early_t) / record.power_w
        held = t >= begin
        noise_floor = start.start_error_k / record.power_w
    else:
        if first_s is not None:
            raise InputError(f"{record.label}, first_s", f"{first_s:g} s", "none where start_c is given: nothing is extrapolated")
        low, held = t[0], np.ones(t.size, bool)
    x = np.log(np.concatenate([early_t, t[held]]))
    y = np.concatenate([early_z, z[held]])
    n = int(np.ceil(np.log10(t[-1] / low) * points_per_decade)) + 1
    grid = np.linspace(np.log(low), np.log(t[-1]), n)
    value, slope = _local_cubic(grid, x, y, reach)
    at = np.log(t[held])
    rest = z[held] - _between(grid, value, slope, at)
    noise = float(1.4826 * np.median(np.abs(rest)))
    time = np.exp(grid)
    bad = value <= 0.0
    if bad.any():
        k = int(np.flatnonzero(bad)[-1])
        if k + 1 >= n // 2:
            raise InputError(
                record.label,
                f"an impedance of {value[k]:.3g} K/W at {time[k]:.3g} s",
                "values above zero",
                "the start is wrong: check start_c or window_s" if start is None or not start.found else "state window_s",
            )
        notes.append(f"the curve begins at {time[k + 1]:.3g} s: before, it lies below its start")
        time, value, slope, grid = (a[k + 1 :] for a in (time, value, slope, grid))
    if noise_floor > 0.02 * value[-1]:
        notes.append(f"the start is known within {noise_floor:.2g} K/W only, {100 * noise_floor / value[-1]:.2g} % of the end")
    late = slope[-max(3, points_per_decade // 4) :].mean() * np.log(10.0)
    if late > 0.03 * value[-1]:
        notes.append(f"not settled at the end: it still rises by about {100 * late / value[-1]:.2g} % a decade")
    extrapolated = time < (start.window_s[0] if start is not None else 0.0)
    method = (
        f"smoothed on {points_per_decade} points a decade of time, each by a cubic through the samples within a factor of {np.exp(reach):.2g} "
        "(tricube weights)"
    )
    return MeasuredImpedance(
        record.label, time, value, slope, extrapolated, t, z, noise, start, zero, record.power_w, record.kind, method, tuple(notes)
    )


def _local_cubic(grid, x, y, reach):
    """Value and derivative at ``grid`` of cubics fitted around each of its points; x rises."""
    value, slope = np.empty(grid.size), np.empty(grid.size)
    for k, centre in enumerate(grid):
        a, b = np.searchsorted(x, [centre - reach, centre + reach])
        wide = reach
        if b - a < _FEWEST_LOCAL:
            nearest = np.sort(np.abs(x[max(0, a - _FEWEST_LOCAL) : b + _FEWEST_LOCAL] - centre))
            wide = 1.05 * float(nearest[min(_FEWEST_LOCAL, nearest.size - 1)]) + 1e-12
            a, b = np.searchsorted(x, [centre - wide, centre + wide])
        u = (x[a:b] - centre) / wide
        w = (1.0 - np.minimum(np.abs(u), 1.0) ** 3) ** 3
        # every stretch of log time counts alike, however dense the samples
        w = np.sqrt(w * np.gradient(u)) if u.size > 1 else np.sqrt(w)
        basis = np.vander(u, 4, increasing=True) * w[:, None]
        found, *_ = np.linalg.lstsq(basis, w * y[a:b], rcond=1e-10)
        value[k], slope[k] = found[0], found[1] / wide
    return value, slope


def _between(grid, value, slope, at):
    from scipy.interpolate import CubicHermiteSpline

    return CubicHermiteSpline(grid, value, slope)(np.clip(at, grid[0], grid[-1]))


def fit_branches(measured: MeasuredImpedance, *, branches: int | None = None, good: float = 0.01) -> FosterFit:
    """Foster branches for the smooth curve, by :func:`mission.device.fitting.fit_foster`.

    Parameters
    ----------
    measured : MeasuredImpedance
    branches : int, optional
        1 to 8; without it as many as are needed.
    good : float
        Relative residual that is good enough.

    Returns
    -------
    FosterFit
        Its residuals count from the smooth curve, not from single samples. Where nothing is
        extrapolated it begins where the curve has risen to ten times the scatter of a sample.

    Raises
    ------
    InputError
        A curve that scatters too much, or is no step response at the place of the heat.
    """
    first = 0 if measured.start is not None else int(np.argmax(measured.z_th_k_per_w >= 10.0 * measured.noise_k_per_w))
    return fit_foster(measured.time_s[first:], measured.z_th_k_per_w[first:], branches=branches, good=good, where=measured.label)


# ------------------------------------------------------------------ spectrum
@dataclass(frozen=True)
class TimeConstantSpectrum:
    """Many Foster branches on an even grid of log time constants.

    Attributes
    ----------
    label : str
    tau_s, r_k_per_w : ndarray, shape (b,)
        Time constants, rising [s], and resistances, none negative [K/W].
    method : str
        In words.
    residual_rms, residual_max : float
        Of its impedance against the curve, over the curve, from the first point that no law extrapolates.
    """

    label: str
    tau_s: np.ndarray
    r_k_per_w: np.ndarray
    method: str
    residual_rms: float
    residual_max: float

    def foster(self) -> FosterNetwork:
        """Its branches above a billionth of the sum, as a network."""
        held = self.r_k_per_w > 1e-9 * self.r_k_per_w.sum()
        return FosterNetwork(self.r_k_per_w[held], self.tau_s[held])

    def z_th_k_per_w(self, time_s):
        """Thermal impedance [K/W] at ``time_s`` (any shape, [s])."""
        return self.foster().z_k_per_w(time_s)


def time_constant_spectrum(
    measured: MeasuredImpedance,
    *,
    method: Literal["bayes", "nnls"] = "bayes",
    iterations: int = 1000,
    smoothing: float = 1.0,
    points_per_decade: int = 15,
) -> TimeConstantSpectrum:
    """Take a curve apart into time constants.

    With z the log of time, da/dz is the spectrum convolved with exp(z - exp(z)).

    * ``bayes``: the derivative is taken apart by Bayes' rule, again and again. Resistances stay
      positive; more iterations sharpen, and raise noise.
    * ``nnls``: non-negative least squares on the impedance itself, with the second difference of
      the spectrum held small. It leaves many branches empty, and the ladder has fewer, larger steps.

    Parameters
    ----------
    measured : MeasuredImpedance
    method : {"bayes", "nnls"}
    iterations : int
        Of ``bayes``, 10 to 100 000.
    smoothing : float
        Weight of the second difference in ``nnls``, 0 to 1e6: with 1 a bend of a thousandth of the end
        counts as much as one point that is off by its standard error.
    points_per_decade : int
        Of time constants, 4 to 40.

    Returns
    -------
    TimeConstantSpectrum

    Raises
    ------
    InputError
        Unknown method; counts out of range.

    Notes
    -----
    Deconvolution has a resolution: two time constants closer than about half a decade come out
    as one hump, and steps of the structure function come out as slopes.

    Examples
    --------
    >>> t = np.geomspace(1e-4, 100, 400)
    >>> z = impedance(thermal_record(t, 20 + 50 * (1 - np.exp(-t)), power_w=100.0, kind="heating"), start_c=20.0)
    >>> spectrum = time_constant_spectrum(z)
    >>> round(float(spectrum.r_k_per_w.sum()), 2), round(float(np.exp(np.average(np.log(spectrum.tau_s), weights=spectrum.r_k_per_w))), 1)
    (0.5, 1.0)
    """
    if method not in ("bayes", "nnls"):
        raise InputError("method", f"{method!r}", "bayes or nnls", near_match(str(method), ("bayes", "nnls")))
    for name, number, low, high in (("iterations", iterations, 10, 100_000), ("points_per_decade", points_per_decade, 4, 40)):
        if isinstance(number, bool) or not isinstance(number, (int, np.integer)) or not low <= number <= high:
            raise InputError(name, f"{number!r}", f"a whole number, {low} to {high}")
    weight = float(require_range("smoothing", smoothing, low=0.0, high=1e6))
    t, z = measured.time_s, measured.z_th_k_per_w
    grid = np.log(t)
    # heat that comes before the first point or after the last needs branches there
    tau = np.exp(np.arange(grid[0] - 2.3, grid[-1] + 1.0, np.log(10.0) / points_per_decade))
    if method == "bayes":
        step = np.log(10.0) / points_per_decade
        tau = np.concatenate([np.exp(np.arange(np.log(tau[0]) - 6.9, np.log(tau[0]) - 0.5 * step, step)), tau])
        # before the first point the curve goes on with the power of time that it begins with: 1/2 for the square-root law, 1 for a lump
        ahead = np.arange(grid[0] - 9.2, grid[0], grid[1] - grid[0])
        target = np.maximum(measured.slope_k_per_w, 0.0)
        begin = slice(0, max(3, np.searchsorted(grid, grid[0] + 0.7)))
        power = float(np.clip(np.median(target[begin] / z[begin]), 0.5, 1.0))
        target = np.concatenate([power * z[0] * np.exp(power * (ahead - grid[0])), target])
        shift = np.concatenate([ahead, grid])[:, None] - np.log(tau)
        response = np.exp(shift - np.exp(np.minimum(shift, 6.0)))
        r = np.full(tau.size, z[-1] / tau.size)
        total = response.sum(axis=0)
        for _ in range(int(iterations)):
            r = r * (response.T @ (target / np.maximum(response @ r, 1e-300 + 1e-12 * z[-1]))) / total
        # the law has no fastest time constant; those beyond sight make one
        early = tau < t[0] / 10.0
        r_early = r[early].sum()
        tau_early = float((r * tau)[early].sum() / r_early) if r_early > 1e-12 * r.sum() else None
        tau, r = tau[~early], r[~early]
        if tau_early is not None:
            tau, r = np.append(tau_early, tau), np.append(r_early, r)
        words = f"Bayes' rule, {int(iterations)} iterations on da/dz"
    else:
        from scipy.optimize import nnls

        sigma = np.hypot(1e-3 * z, max(measured.noise_k_per_w, 1e-5 * z[-1]))
        a = -np.expm1(-t[:, None] / tau) / sigma[:, None]
        # beyond both ends the spectrum is empty
        bend = np.diff(np.pad(np.eye(tau.size), ((2, 2), (0, 0))), 2, axis=0) * weight / (1e-3 * z[-1])
        r, _ = nnls(np.vstack([a, bend]), np.concatenate([z / sigma, np.zeros(bend.shape[0])]), maxiter=100 * tau.size)
        words = f"non-negative least squares on the impedance, second difference weighted by {weight:g}"
    if not r.sum() > 0.0:
        raise InputError(measured.label, "a curve that does not rise", "a step response", "check the record")
    seen = ~measured.extrapolated
    relative = (-np.expm1(-t[seen, None] / tau) @ r) / z[seen] - 1.0
    return TimeConstantSpectrum(measured.label, tau, r, words, float(np.sqrt(np.mean(relative**2))), float(np.abs(relative).max()))


# ------------------------------------------------------------------ structure function
def many_branches_to_cauer(foster: FosterNetwork) -> CauerLadder:
    """Ladder of very many branches, in the machine's own numbers.

    The square roots of the decay rates, with the branches' shares as the first vector, are brought
    to bidiagonal form (G. Golub, W. Kahan 1965; every new vector is made orthogonal to all before,
    twice). Its entries are 1/sqrt(R C) of neighbours, so that R and C follow by products alone, with no
    differences to lose digits in. Agrees with :func:`mission.thermal.networks.foster_to_cauer`, which works in exact
    fractions, to 1e-12 over nine decades, and takes milliseconds where that takes minutes.

    Parameters
    ----------
    foster : FosterNetwork
        Up to 400 branches. Equal time constants are joined.

    Returns
    -------
    CauerLadder

    Raises
    ------
    InputError
        Too many branches.

    Examples
    --------
    >>> ladder = many_branches_to_cauer(FosterNetwork([1.0, 1.0], [1.0, 2.0]))
    >>> ladder.r_k_per_w.round(7).tolist(), ladder.c_j_per_k.round(7).tolist()
    ([1.8, 0.2], [0.6666667, 8.3333333])
    """
    if foster.tau_s.size > 400:
        raise InputError("branches", f"{foster.tau_s.size}", "at most 400", "use fewer points a decade")
    tau, which = np.unique(foster.tau_s, return_inverse=True)
    r = np.bincount(which, foster.r_k_per_w)
    rate = np.sqrt(1.0 / tau[::-1])
    share = np.sqrt(r[::-1]) * rate
    n = rate.size
    r_out, c_out = np.empty(n), np.empty(n)
    left, right = np.zeros((n, n)), np.zeros((n, n))
    size = np.sqrt(share @ share)
    v = share / size
    c_out[0] = 1.0 / size**2
    for k in range(n):
        right[k] = v
        u = rate * v
        for _ in range(2):
            u = u - (left[:k] @ u) @ left[:k]
        size = np.sqrt(u @ u)
        left[k] = u / size
        r_out[k] = 1.0 / (size**2 * c_out[k])
        if k + 1 == n:
            break
        v = rate * left[k]
        for _ in range(2):
            v = v - (right[: k + 1] @ v) @ right[: k + 1]
        size = np.sqrt(v @ v)
        v = v / size
        c_out[k + 1] = 1.0 / (size**2 * r_out[k])
    return CauerLadder(r_out, c_out)


@dataclass(frozen=True)
class StructureFunction:
    """Heat capacity met over thermal resistance passed, from the junction on.

    Attributes
    ----------
    label : str
    r_k_per_w, c_j_per_k : ndarray, shape (n,)
        Sums of the ladder's resistances [K/W] and capacities [J/K], both rising: capacity
        ``c_j_per_k[k]`` has been met before resistance up to ``r_k_per_w[k]`` has been passed.
    """

    label: str
    r_k_per_w: np.ndarray
    c_j_per_k: np.ndarray

    @property
    def differential(self) -> tuple[np.ndarray, np.ndarray]:
        """Resistance at the middle of each stage [K/W], and dC/dR there [W s/K2], shapes (n - 1,)."""
        r, c = self.r_k_per_w, self.c_j_per_k
        return 0.5 * (r[1:] + r[:-1]), np.diff(c) / np.diff(r)

    def r_at_k_per_w(self, c_j_per_k):
        """Resistance passed where a capacity has been met, straight in log capacity [K/W]."""
        return np.interp(np.log(c_j_per_k), np.log(self.c_j_per_k), self.r_k_per_w)

    def c_at_j_per_k(self, r_k_per_w):
        """Capacity met where a resistance has been passed, straight in log capacity [J/K]."""
        return np.exp(np.interp(r_k_per_w, self.r_k_per_w, np.log(self.c_j_per_k)))


def structure_function(source, *, label: str = "") -> StructureFunction:
    """Cumulative structure function.

    Parameters
    ----------
    source : TimeConstantSpectrum, MeasuredImpedance, FosterFit, FosterNetwork or CauerLadder
        A measured curve goes through :func:`time_constant_spectrum` with its usual settings.
    label : str
        Name; the source's own without it.

    Returns
    -------
    StructureFunction

    Raises
    ------
    InputError
        Something else.

    Notes
    -----
    It is the heat path's true order of things only where heat flows one way, from the junction to one far end.

    Examples
    --------
    >>> s = structure_function(CauerLadder([0.1, 0.2], [0.01, 1.0]))
    >>> s.r_k_per_w.round(3).tolist(), s.c_j_per_k.round(3).tolist()
    ([0.1, 0.3], [0.01, 1.01])
    """
    name = label or getattr(source, "label", "")
    if isinstance(source, MeasuredImpedance):
        source = time_constant_spectrum(source)
    if isinstance(source, TimeConstantSpectrum):
        source = source.foster()
    elif isinstance(source, FosterFit):
        source = FosterNetwork(np.array(source.r_k_per_w), np.array(source.tau_s))
    if isinstance(source, FosterNetwork):
        source = many_branches_to_cauer(source)
    if not isinstance(source, CauerLadder):
        raise InputError("structure function", f"{type(source).__name__}", "a measured curve, a spectrum, branches or a ladder")
    return StructureFunction(name, np.cumsum(source.r_k_per_w), np.cumsum(source.c_j_per_k))


# ------------------------------------------------------------------ two interfaces
@dataclass(frozen=True)
class Separation:
    """Where two curves of one device on two interfaces part.

    Attributes
    ----------
    separates : bool
        False: no resistance can be told, the fields below that are None say so.
    r_th_jc_k_per_w : float or None
        By the difference of derivatives [K/W].
    epsilon : float or None
        Threshold at that point [1].
    time_s : float or None
        Time at which they part [s].
    r_low_k_per_w, r_high_k_per_w : float or None
        The same with half and with twice the threshold [K/W].
    sensitivity : float or None
        d ln R / d ln epsilon between those two.
    r_structure_k_per_w : float or None
        By the difference of the structure functions [K/W].
    structure_share : float
        Share of the final difference from which they count as parted.
    r_structure_low_k_per_w, r_structure_high_k_per_w : float or None
        With half and twice that share [K/W].
    difference_k_per_w : float
        Between the ends of the curves [K/W].
    noise : float
        Scatter of the scaled difference before they part [1].
    mean_z_th_k_per_w, delta, epsilon_line : ndarray, shape (m,)
        Mean of the two curves [K/W], scaled difference of the derivatives, threshold: what was compared.
    structures : (StructureFunction, StructureFunction)
        Of the curve with the larger and of that with the smaller end.
    labels : (str, str)
        In the same order.
    message : str
        All this in sentences.
    """

    separates: bool
    r_th_jc_k_per_w: float | None
    epsilon: float | None
    time_s: float | None
    r_low_k_per_w: float | None
    r_high_k_per_w: float | None
    sensitivity: float | None
    r_structure_k_per_w: float | None
    structure_share: float
    r_structure_low_k_per_w: float | None
    r_structure_high_k_per_w: float | None
    difference_k_per_w: float
    noise: float
    mean_z_th_k_per_w: np.ndarray
    delta: np.ndarray
    epsilon_line: np.ndarray
    structures: tuple[StructureFunction, StructureFunction]
    labels: tuple[str, str]
    message: str


def separation(
    first: MeasuredImpedance,
    second: MeasuredImpedance,
    *,
    epsilon: float | None = None,
    structure_share: float = STRUCTURE_SHARE,
    spectrum_options: dict | None = None,
) -> Separation:
    """Junction-to-case resistance from two curves, with and without grease, say.

    Two ways (JESD51-14):

    * The derivatives da/dz are subtracted and divided by the difference of the ends, Delta. Where
      this reaches epsilon for good, the impedance is the resistance. Around the crossing
      the scaled difference is taken as an exponential of the impedance, which calms noise.
    * The structure functions are subtracted. Where their resistances at one heat capacity differ by a share of Delta
      for good, the resistance there is taken. Resistances are compared, not capacities: a thin
      interface holds hardly any heat, so that capacities part only behind the better of the two.

    Parameters
    ----------
    first, second : MeasuredImpedance
        In any order; same device, same power within reason.
    epsilon : float, optional
        Threshold, 1e-5 to 0.5; without it 0.0045 W/K of the impedance plus 0.003 (the standard's line, from memory).
    structure_share : float
        0.001 to 0.5.
    spectrum_options : dict, optional
        For :func:`time_constant_spectrum`.

    Returns
    -------
    Separation

    Raises
    ------
    InputError
        Curves that share less than two decades of time, or that are not alike at all.
    RangeError
        Thresholds out of range.

    Notes
    -----
    Both ways are estimates. On exact curves of six layered stacks (0.08 to 0.36 K/W, two interfaces, no noise) the first
    gave -17 to +1 %, the least where the resistance is small and the interfaces differ little; the
    second, blunted by deconvolution, gave 8 to 33 % too much. The true value often lies between. Where heat spreads in the
    case, it also depends on the interface itself: no method finds one number then.
    """
    if epsilon is not None:
        epsilon = float(require_range("epsilon", epsilon, low=1e-5, high=0.5))
    share = float(require_range("structure_share", structure_share, low=1e-3, high=0.5))
    low, high = max(first.time_s[0], second.time_s[0]), min(first.time_s[-1], second.time_s[-1])
    if not high > 100.0 * low:
        raise InputError(
            f"{first.label} and {second.label}",
            f"curves that share {low:.3g} to {high:.3g} s" if high > low else "curves that share no time",
            "two decades of time in common",
            "record both over the same span",
        )
    grid = np.linspace(np.log(low), np.log(high), int(np.ceil(20 * np.log10(high / low))) + 1)
    pairs = []
    for one in (first, second):
        at = np.log(one.time_s)
        pairs.append((_between(at, one.z_th_k_per_w, one.slope_k_per_w, grid), np.interp(grid, at, one.slope_k_per_w)))
    order = (first, second)
    if pairs[0][0][-1] < pairs[1][0][-1]:
        pairs, order = pairs[::-1], (second, first)
    (z_a, d_a), (z_b, d_b) = pairs
    labels = (order[0].label, order[1].label)
    mean = 0.5 * (z_a + z_b)
    end = float(np.mean(z_a[-5:] - z_b[-5:]))
    noise_k_per_w = float(np.hypot(first.noise_k_per_w, second.noise_k_per_w))
    structures = tuple(structure_function(time_constant_spectrum(one, **(spectrum_options or {})), label=one.label) for one in order)
    words = []
    line = np.full(grid.size, epsilon) if epsilon is not None else EPSILON_LINE[0] * mean + EPSILON_LINE[1]
    if end < max(_LEAST_DIFFERENCE * z_a[-1], 3.0 * noise_k_per_w / np.sqrt(5.0)):
        words.append(
            f"the curves do not part: their ends differ by {max(end, 0.0):.2g} K/W, {100 * max(end, 0.0) / z_a[-1]:.2g} % of {z_a[-1]:.4g} K/W; "
            "choose interfaces that differ more"
        )
        scaled = (d_a - d_b) / max(end, 1e-3 * z_a[-1])
        return Separation(
            False,
            None,
            None,
            None,
            None,
            None,
            None,
            None,
            share,
            None,
            None,
            end,
            float(np.std(scaled)),
            mean,
            scaled,
            line,
            structures,
            labels,
            "; ".join(words),
        )
    delta = (d_a - d_b) / end
    noise = _early_scatter(grid, delta)
    part = _crossing(mean, delta, line, noise)
    halves = [_crossing(mean, delta, factor * line, noise) for factor in (0.5, 2.0)]
    r = low_r = high_r = at_epsilon = at_time = steep = None
    if part is None:
        words.append("the scaled difference of the derivatives is above its threshold from the beginning: the curves are not alike before they part")
    else:
        r, at_epsilon, position = part
        at_time = float(np.exp(np.interp(position, np.arange(grid.size), grid)))
        low_r, high_r = (None if x is None else x[0] for x in halves)
        if low_r and high_r:
            steep = float(np.log(high_r / low_r) / np.log(4.0))
        # well before: heat has hardly come to the case
        before = grid < np.log(at_time) - 1.6
        words.append(
            f"junction to case {r:.4g} K/W by the difference of derivatives, parted at {at_time:.3g} s with epsilon {at_epsilon:.3g}"
            + (f" ({low_r:.4g} and {high_r:.4g} K/W with half and twice of it)" if low_r and high_r else "")
        )
        apart = np.abs(z_a / z_b - 1.0)[before & (grid > np.log(low) + 0.5)]
        if apart.size and apart.max() > _ALIKE:
            words.append(
                f"before they part the curves differ by up to {100 * apart.max():.2g} %: powers, slopes of the calibration or starts do not match"
            )
        if noise > at_epsilon / 3.0:
            words.append(
                f"the difference scatters by {noise:.2g} before they part, too much for that threshold: smooth more, or take a larger epsilon"
            )
    found = [_structures_part(*structures, end, factor * share) for factor in (1.0, 0.5, 2.0)]
    if found[0] is None:
        words.append("the structure functions do not part clearly")
    else:
        words.append(
            f"{found[0]:.4g} K/W by the structure functions, parted by {100 * share:.2g} % of {end:.3g} K/W"
            + (f" ({found[1]:.4g} and {found[2]:.4g} K/W with half and twice of it)" if None not in found else "")
        )
    return Separation(
        r is not None or found[0] is not None,
        r,
        at_epsilon,
        at_time,
        low_r,
        high_r,
        steep,
        found[0],
        share,
        found[1],
        found[2],
        end,
        noise,
        mean,
        delta,
        line,
        structures,
        labels,
        "; ".join(words),
    )


def _early_scatter(grid, delta):
    """Scatter of ``delta`` where heat has hardly come to the case, long before it reaches a tenth of its top."""
    top = int(np.argmax(delta))
    below = np.flatnonzero(delta[: top + 1] < 0.1 * delta[top])
    if not below.size:
        return float(np.std(delta))
    before = grid < grid[below[-1]] - 2.5
    return float(np.sqrt(np.mean(delta[before] ** 2))) if before.sum() > 4 else 0.0


def _crossing(z, delta, line, noise):
    """Impedance, threshold and place (in points) where ``delta`` goes above ``line`` for good, before its top; None where it always was."""
    top = int(np.argmax(delta))
    below = np.flatnonzero(delta[: top + 1] < line[: top + 1])
    if not below.size or below[-1] >= top:
        return None
    k = int(below[-1])
    a, b = delta[k] - line[k], delta[k + 1] - line[k + 1]
    place = k - a / (b - a)
    # an exponential of the impedance through the stretch that rises out of the noise, as far as it lasts
    floor = np.maximum(0.4 * line, 4.0 * noise)
    start = np.flatnonzero(delta[: top + 1] < floor[: top + 1])
    first = int(start[-1]) + 1 if start.size else 0
    near = np.arange(first, top + 1)
    near = near[delta[near] < np.minimum(3.0 * np.maximum(line[near], 2.0 * floor[near]), 0.6 * delta[top])]
    if near.size >= 4:
        rate, offset = np.polyfit(z[near], np.log(delta[near]), 1)
        trend = offset + rate * z - np.log(line)
        crossed = np.flatnonzero((trend[:-1] < 0.0) & (trend[1:] >= 0.0))
        if rate > 0.0 and crossed.size:
            j = int(crossed[0])
            place = j - trend[j] / (trend[j + 1] - trend[j])
    return tuple(float(np.interp(place, np.arange(z.size), v)) for v in (z, line)) + (float(place),)


def _structures_part(a, b, end, share):
    """Resistance from which on, at one capacity, structure function a lies beyond b by ``share * end``; None where it never does."""
    low, high = max(a.c_j_per_k[0], b.c_j_per_k[0]), min(a.c_j_per_k[-1], b.c_j_per_k[-1])
    if not high > low:
        return None
    c = np.geomspace(low, high, 4000)
    r_a, r_b = a.r_at_k_per_w(c), b.r_at_k_per_w(c)
    gap = (r_a - r_b) / end
    over = np.flatnonzero(gap > 0.5)
    if not over.size:
        return None
    below = np.flatnonzero(gap[: over[0]] < share)
    return float(r_b[below[-1]]) if below.size else None
