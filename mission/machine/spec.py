"""The machine of a study, as its file describes it."""

from __future__ import annotations

from typing import Annotated, Literal

import numpy as np
from pydantic import Field, model_validator

from ..errors import RangeError
from ..tomlfile import FileModel

_Positive = Annotated[float, Field(strict=True, gt=0)]
_NotNegative = Annotated[float, Field(strict=True, ge=0)]
_Grid = tuple[tuple[float, ...], ...]

#: Copper's change of resistance with temperature, of the value at 20 degC [1/K]; IEC 60028 (1925), from memory.
COPPER_PER_K = 0.00393


def _rising(name, values, unit):
    if len(values) < 2:
        raise RangeError(name, f"{len(values)} values", "at least two", "a table needs two points to lie between")
    for k, (a, b) in enumerate(zip(values, values[1:]), 2):
        if b <= a:
            raise RangeError(name, f"{b:g} {unit} at point {k} after {a:g} {unit}", "values that rise from point to point", "sort the points")


def _henry(name, values):
    if np.max(values) > 10.0 or np.min(values) <= 0.0:
        worst = np.max(values) if np.max(values) > 10.0 else np.min(values)
        raise RangeError(name, f"{worst:g} H", "above 0 and at most 10 H", "inductances are in henry, not millihenry")


class DqTable(FileModel):
    """Flux of a synchronous machine over both currents; straight lines in between (bilinear), nothing beyond.

    Row k, column j of a table belong to ``i_d_a[k]``, ``i_q_a[j]`` (peak phase values). ``i_q_a`` starts at 0: the
    machine is taken as symmetric. Either the flux linkages ``psi_d_wb``, ``psi_q_wb`` (peak, magnets included), or
    ``l_d_h``, ``l_q_h``, ``psi_pm_wb``, from which psi_d = psi_pm + l_d i_d, psi_q = l_q i_q is made at the points.
    """

    over: Literal["dq"]
    i_d_a: tuple[float, ...]
    i_q_a: tuple[float, ...]
    psi_d_wb: _Grid | None = None
    psi_q_wb: _Grid | None = None
    l_d_h: _Grid | None = None
    l_q_h: _Grid | None = None
    psi_pm_wb: _Grid | None = None

    @model_validator(mode="after")
    def _sensible(self):
        _rising("i_d_a", self.i_d_a, "A")
        _rising("i_q_a", self.i_q_a, "A")
        if not self.i_d_a[0] <= 0.0 <= self.i_d_a[-1]:
            raise RangeError("i_d_a", f"{self.i_d_a[0]:g} to {self.i_d_a[-1]:g} A", "a range that holds 0 A", "add the points without current")
        if self.i_q_a[0] != 0.0:
            raise RangeError("i_q_a", f"{self.i_q_a[0]:g} A at point 1", "0 A", "give the half with positive i_q; the other one is its mirror image")
        given = {n for n in ("psi_d_wb", "psi_q_wb", "l_d_h", "l_q_h", "psi_pm_wb") if getattr(self, n) is not None}
        if given not in ({"psi_d_wb", "psi_q_wb"}, {"l_d_h", "l_q_h", "psi_pm_wb"}):
            raise RangeError("over", f"over = 'dq' with {', '.join(sorted(given)) or 'no table'}", "psi_d_wb and psi_q_wb, or l_d_h, l_q_h and psi_pm_wb",
                             "complete one of the two")
        shape = len(self.i_d_a), len(self.i_q_a)
        for name in sorted(given):
            table = getattr(self, name)
            if len(table) != shape[0] or any(len(row) != shape[1] for row in table):
                raise RangeError(name, f"{len(table)} rows of {' or '.join(str(n) for n in sorted({len(row) for row in table}))} values",
                                 f"{shape[0]} rows (i_d_a) of {shape[1]} values (i_q_a)", "correct the table")
            if name in ("l_d_h", "l_q_h"):
                _henry(name, table)
        psi_d, psi_q = self.flux_wb()
        if np.abs(psi_q[:, 0]).max() > 1e-6 * np.abs(psi_q).max():
            raise RangeError("psi_q_wb", f"{np.abs(psi_q[:, 0]).max():g} Wb where i_q is 0", "0 Wb there", "put the d axis on the magnets")
        if (np.diff(psi_d, axis=0) <= 0.0).any():
            raise RangeError("l_d_h" if "l_d_h" in given else "psi_d_wb", "a flux that does not rise with i_d", "a rise from row to row", "rows belong to i_d_a")
        if (np.diff(psi_q, axis=1) <= 0.0).any():
            raise RangeError("l_q_h" if "l_q_h" in given else "psi_q_wb", "a flux that does not rise with i_q", "a rise along every row", "columns belong to i_q_a")
        return self

    def flux_wb(self):
        """Flux linkages at the points, two arrays over (i_d, i_q) [Wb]."""
        if self.psi_d_wb is not None:
            return np.array(self.psi_d_wb), np.array(self.psi_q_wb)
        return (np.array(self.psi_pm_wb) + np.array(self.l_d_h) * np.array(self.i_d_a)[:, None], np.array(self.l_q_h) * np.array(self.i_q_a))


class CurrentTable(FileModel):
    """Inductances and magnet flux over the size of the current (peak phase); straight lines in between, nothing beyond."""

    over: Literal["current"]
    i_peak_a: tuple[float, ...]
    l_d_h: tuple[_Positive, ...]
    l_q_h: tuple[_Positive, ...]
    psi_pm_wb: tuple[_NotNegative, ...]

    @model_validator(mode="after")
    def _sensible(self):
        _rising("i_peak_a", self.i_peak_a, "A")
        if self.i_peak_a[0] != 0.0:
            raise RangeError("i_peak_a", f"{self.i_peak_a[0]:g} A at point 1", "0 A", "add the values without current")
        for name in ("l_d_h", "l_q_h", "psi_pm_wb"):
            values = getattr(self, name)
            if len(values) != len(self.i_peak_a):
                raise RangeError(name, f"{len(values)} values", f"{len(self.i_peak_a)}, one for each in i_peak_a", "complete the shorter list")
            if name != "psi_pm_wb":
                _henry(name, values)
                if (np.diff(np.multiply(values, self.i_peak_a)) <= 0.0).any():
                    raise RangeError(name, "inductance times current that does not rise with the current", "a rising flux", "check the points")
        return self


class _Machine(FileModel):
    """What every machine has.

    ``r_s_ohm`` is a phase's resistance at 20 degC, that of copper at ``winding_c``. ``current_max_a``: the most that the
    drive gives (rms). ``beyond = "limit"``: where voltage or current do not reach, the torque is limited and what is
    missing is kept; otherwise such a row is refused.
    """

    pole_pairs: Annotated[int, Field(strict=True, ge=1, le=200)]
    r_s_ohm: _NotNegative
    winding_c: Annotated[float, Field(ge=-60, le=250)] = 20.0
    current_max_a: _Positive | None = None
    beyond: Literal["refuse", "limit"] = "refuse"

    @property
    def r_s_warm_ohm(self) -> float:
        """Resistance of a phase at ``winding_c`` [ohm]."""
        return self.r_s_ohm * (1.0 + COPPER_PER_K * (self.winding_c - 20.0))

    @property
    def i_peak_max_a(self) -> float:
        """Largest peak phase current that the drive gives; infinite without a limit [A]."""
        return np.inf if self.current_max_a is None else np.sqrt(2.0) * self.current_max_a


class SynchronousMachine(_Machine):
    """Synchronous machine in rotor coordinates, amplitude-invariant (peak phase values).

    The d axis lies along the magnets; without magnets it is the axis of the
    smaller inductance. Either ``l_d_h``, ``l_q_h``, ``psi_pm_wb``, or a section
    ``saturation``. Iron and friction losses are left out.
    """

    kind: Literal["synchronous"]
    l_d_h: _Positive | None = None
    l_q_h: _Positive | None = None
    psi_pm_wb: _NotNegative | None = None
    saturation: Annotated[DqTable | CurrentTable, Field(discriminator="over")] | None = None

    @model_validator(mode="after")
    def _makes_torque(self):
        for name in ("l_d_h", "l_q_h", "psi_pm_wb"):
            value = getattr(self, name)
            if (value is None) == (self.saturation is None):
                raise RangeError(
                    name,
                    "nothing" if value is None else f"value {value:g} beside a section saturation",
                    "l_d_h, l_q_h and psi_pm_wb, or a section saturation that holds them",
                    "add it" if value is None else "take one of the two out",
                )
        if self.saturation is not None:
            return self
        if self.psi_pm_wb == 0.0 and self.l_q_h <= self.l_d_h:
            raise RangeError(
                "psi_pm_wb",
                f"psi_pm_wb = 0 with l_q_h = {self.l_q_h:g} not above l_d_h = {self.l_d_h:g}",
                "magnets, or l_q_h above l_d_h",
                "without magnets the d axis is the one of the smaller inductance",
            )
        if max(self.l_d_h, self.l_q_h) > 10.0:
            raise RangeError(
                "l_d_h",
                f"l_d_h = {self.l_d_h:g} H, l_q_h = {self.l_q_h:g} H",
                "at most 10 H",
                "inductances are in henry, not millihenry",
            )
        return self


class DirectPoints(FileModel):
    """No machine model: the duty itself gives frequency, modulation index and displacement."""

    kind: Literal["direct"]


class MagnetisingTable(FileModel):
    """Main inductance over the magnetising current [A rms].

    The main flux is a broken line from nothing through the points; nothing beyond the last.
    """

    current_a: tuple[_Positive, ...]
    l_m_h: tuple[_Positive, ...]

    @model_validator(mode="after")
    def _sensible(self):
        _rising("current_a", self.current_a, "A")
        if len(self.l_m_h) != len(self.current_a):
            raise RangeError("l_m_h", f"{len(self.l_m_h)} values", f"{len(self.current_a)}, one for each in current_a", "complete the shorter list")
        _henry("l_m_h", self.l_m_h)
        if (np.diff(np.multiply(self.current_a, self.l_m_h)) <= 0.0).any():
            raise RangeError("l_m_h", "inductance times current that does not rise with the current", "a rising main flux", "check the points")
        return self


class _Induction(_Machine):
    """Equivalent circuit of a phase, rotor values seen from the stator.

    ``winding_c`` concerns the stator only; ``r_r_ohm`` is that of the running machine. Either ``l_m_h`` or a section
    ``saturation``. Leakage does not saturate. A row without torque and speed keeps the machine magnetised, or
    with ``at_rest = "off"`` carries no current.
    """

    r_r_ohm: _Positive
    l_s_sigma_h: _NotNegative
    l_r_sigma_h: _NotNegative
    l_m_h: _Positive | None = None
    saturation: MagnetisingTable | None = None
    at_rest: Literal["magnetised", "off"] = "magnetised"

    @model_validator(mode="after")
    def _whole_circuit(self):
        if (self.l_m_h is None) == (self.saturation is None):
            raise RangeError("l_m_h", "neither l_m_h nor a section saturation" if self.l_m_h is None else "l_m_h beside a section saturation", "one of the two")
        if self.l_m_h is not None:
            _henry("l_m_h", self.l_m_h)
        if not 0.0 < self.l_s_sigma_h + self.l_r_sigma_h <= 1.0:
            raise RangeError("l_s_sigma_h", f"l_s_sigma_h = {self.l_s_sigma_h:g} H, l_r_sigma_h = {self.l_r_sigma_h:g} H", "together above 0 and at most 1 H",
                             "inductances are in henry, not millihenry")
        return self

    def magnetising_curve(self):
        """Main flux [Wb peak] and magnetising current [A peak] at the points, from nothing on, and whether the last line goes on."""
        if self.saturation is None:
            return np.array([0.0, self.l_m_h]), np.array([0.0, 1.0]), True
        i = np.sqrt(2.0) * np.array(self.saturation.current_a)
        return np.concatenate([[0.0], np.array(self.saturation.l_m_h) * i]), np.concatenate([[0.0], i]), False


class InductionMachine(_Induction):
    """Induction machine whose drive holds the rotor flux; above the voltage limit it weakens it.

    Rated flux by ``rotor_flux_wb`` (peak), or by ``magnetising_current_a`` (rms, without load).
    """

    kind: Literal["induction"]
    magnetising_current_a: _Positive | None = None
    rotor_flux_wb: _Positive | None = None

    @model_validator(mode="after")
    def _flux(self):
        if (self.magnetising_current_a is None) == (self.rotor_flux_wb is None):
            raise RangeError("magnetising_current_a", "neither magnetising_current_a nor rotor_flux_wb" if self.rotor_flux_wb is None
                             else "both magnetising_current_a and rotor_flux_wb", "one of the two")
        psi, i, goes_on = self.magnetising_curve()
        if not goes_on:
            for name, value, end, unit in (("magnetising_current_a", self.magnetising_current_a, i[-1] / np.sqrt(2.0), "A"), ("rotor_flux_wb", self.rotor_flux_wb, psi[-1], "Wb")):
                if value is not None and value > end * (1.0 + 1e-9):
                    raise RangeError(name, f"{value:g} {unit}", f"at most {end:.4g} {unit}, where the section saturation ends", "add points to the section")
        return self

    @property
    def rated_flux_wb(self) -> float:
        """Rotor flux that is held below the voltage limit [Wb peak]."""
        if self.rotor_flux_wb is not None:
            return self.rotor_flux_wb
        psi, i, goes_on = self.magnetising_curve()
        asked = np.sqrt(2.0) * self.magnetising_current_a
        return float(asked * psi[1] if goes_on else np.interp(asked, i, psi))


class InductionVf(_Induction):
    """Induction machine on a plain voltage by frequency, without control of its flux.

    The voltage (rms between lines, fundamental) rises in a straight line from ``boost_v`` at standstill to
    ``rated_voltage_v`` at ``rated_frequency_hz``, and stays there above.
    With ``beyond = "limit"`` it also stops at what the DC link gives, and what is missing is kept.
    """

    kind: Literal["induction-vf"]
    rated_voltage_v: _Positive
    rated_frequency_hz: Annotated[float, Field(gt=0, le=5000)]
    boost_v: _NotNegative = 0.0

    @model_validator(mode="after")
    def _boost(self):
        if self.boost_v >= self.rated_voltage_v:
            raise RangeError("boost_v", f"{self.boost_v:g} V", f"below rated_voltage_v = {self.rated_voltage_v:g} V", "boost is the voltage at standstill, between lines")
        return self

    def law_v(self, omega_rad_s):
        """Peak phase voltage that the law gives at an electrical stator frequency, either sign [V]."""
        share = np.minimum(np.abs(omega_rad_s) / (2.0 * np.pi * self.rated_frequency_hz), 1.0)
        return np.sqrt(2.0 / 3.0) * (self.boost_v + (self.rated_voltage_v - self.boost_v) * share)


#: What a study's ``[machine]`` table may be.
MachineSpec = Annotated[SynchronousMachine | DirectPoints | InductionMachine | InductionVf, Field(discriminator="kind")]
