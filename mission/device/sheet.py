"""From a data sheet to a module: a sheet description (TOML) and digitised curves (CSV) -> ``PowerModule``.

A sheet description is laid out like a module file. What differs:

- A curve names a file instead of points: ``file``, with ``columns`` (quantity -> name in the header, or
  number from 1; without it the first column is the current, resistor, voltage or time), ``units`` and
  ``csv`` (``delimiter``, ``decimal``, ``encoding``). ``[units]`` and ``[csv]`` at the top serve all
  curves. A unit is never assumed: current "A", "kA"; voltage "V", "mV"; energy "J", "mJ", "uJ"; time
  "s", "ms", "us"; z_th "K/W", "mK/W"; resistance "ohm", "mohm"; dc_voltage "V", "kV". A few points may
  be typed instead, with the keys of a module file (``current_a``, ``voltage_v`` ...), in their units.
- Straight lines (``[[switch.on_state.line]]``) as in a module file.
- Energies: one temperature and a typed ``temperature_coefficient_per_k`` (of the energy at the curve's
  ``t_vj_c``) instead of two curves; ``start = "origin"`` to begin at 0 A and 0 J; the
  ``voltage_exponent`` typed, or fitted to ``[....over_voltage]``, energies over the DC voltage;
  ``[....gate_resistor]`` with ``r_ref_ohm``, energies over the gate resistor, and ``at_current_a`` and
  ``at_t_vj_c`` where they were measured, so that they can be compared with the energy curves.
- Thermal: the impedance curve of the single pulse (a file, or ``time_s`` and ``z_th_k_per_w``), fitted with
  Foster branches; ``branches`` asks for their number, ``r_th_k_per_w`` is the printed resistance, compared with
  the fit. Branches or layers may stand there as in a module file.
- ``[cleaning]``: ``largest_change``, ``max_points``, ``thin_within``, ``largest_residual``.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any, ClassVar, Literal

import numpy as np
from pydantic import Field, field_validator, model_validator

from ..errors import InputError, RangeError, near_match
from ..tomlfile import FileModel, read_model
from .curves import switching_energy_j
from .digitised import UNITS, CleaningReport, PointChange, RawCurve, Rules, clean_curve, read_points
from .files import module_from_dict, save_module
from .fitting import MOST, FosterFit, fit_foster
from .module import (
    CaseToSink,
    FailureMode,
    Gate,
    LayerSpec,
    Number,
    Numbers,
    NotNegative,
    OnStateLine,
    ParallelChips,
    Positive,
    PowerModule,
    Ratings,
    SwitchingData,
    Text,
    Wires,
    _plausible_temperature,
)
from .plate import PlateSpec

#: What the largest value of a curve may lie between; outside it the unit is wrong, or the columns are exchanged.
_PLAUSIBLE = {"voltage": (0.1, 20.0), "z_th": (0.001, 20.0)}
#: Largest energy of a curve over (reference voltage x its current) [s]: real chips 0.01 to 3 microseconds,
#: recovery of silicon carbide down to nanoseconds.
_ENERGY_TIME_S = {"turn_on": (0.5e-9, 20e-6), "turn_off": (0.5e-9, 20e-6), "recovery": (5e-12, 20e-6)}
#: No current, voltage, energy, time or resistance of a module is larger, in any unit.
_ABSURD = 1e12
#: How far a gate-resistor curve may be from the energy curves before it is refused, and before it is said.
_FAR, _OFF = 0.3, 0.05
#: Points of a fitted voltage exponent may be off by this much.
_EXPONENT_OFF = 0.10
#: Printed thermal resistance against the fit: said beyond this.
_R_TH_OFF = 0.03


# ------------------------------------------------------------ the description
class CsvForm(FileModel):
    """How a CSV file is written."""

    delimiter: Literal[",", ";", "\t", "|", " "] | None = None
    decimal: Literal[".", ","] | None = None
    encoding: Text | None = None


class SheetUnits(FileModel):
    """Units of the columns."""

    current: Literal["A", "kA"] | None = None
    voltage: Literal["V", "mV"] | None = None
    energy: Literal["J", "mJ", "uJ"] | None = None
    time: Literal["s", "ms", "us"] | None = None
    z_th: Literal["K/W", "mK/W"] | None = None
    resistance: Literal["ohm", "mohm"] | None = None
    dc_voltage: Literal["V", "kV"] | None = None


class CleaningSpec(FileModel):
    """How curves are cleaned, see ``Rules``; ``largest_residual`` of a thermal fit."""

    largest_change: Annotated[float, Field(strict=True, gt=0, le=0.2)] = 0.05
    max_points: Annotated[int, Field(strict=True, ge=4, le=1000)] = 30
    thin_within: Annotated[float, Field(strict=True, ge=0, le=0.05)] = 0.003
    largest_residual: Annotated[float, Field(strict=True, gt=0, le=0.2)] = 0.05


class _Points(FileModel):
    """A curve: a file, or typed points."""

    quantities: ClassVar[tuple[str, str]]
    keys: ClassVar[tuple[str, str]]

    file: Text | None = None
    columns: dict[str, Annotated[int, Field(strict=True, ge=1, le=1000)] | Text] = Field(default_factory=dict)
    units: SheetUnits = SheetUnits()
    csv: CsvForm = CsvForm()

    @field_validator("columns")
    @classmethod
    def _both(cls, value):
        for q in value:
            if q not in cls.quantities:
                raise RangeError("columns", f"a column for '{q}'", " and ".join(cls.quantities), near_match(q, cls.quantities) or "remove it")
        if len(value) == 1:
            missing = next(q for q in cls.quantities if q not in value)
            raise RangeError("columns", f"no column for {missing}", " and ".join(cls.quantities), "name both columns, or none")
        return value

    @model_validator(mode="after")
    def _one_way(self):
        x, y = self.keys
        typed = [k for k in self.keys if getattr(self, k) is not None]
        if self.file is None and len(typed) == 1:
            missing = y if typed == [x] else x
            raise RangeError(missing, f"{typed[0]} without {missing}", "both lists", "add the missing one")
        if self.file is not None and typed:
            raise RangeError(typed[0], f"file beside {' and '.join(typed)}", "a file or typed points, one of the two", "remove one of them")
        if self.file is None and not typed and self.needed:
            raise RangeError("file", f"neither file nor {x} and {y}", "a file or typed points", "name the CSV file of the curve")
        stated = [n for n in ("columns", "units", "csv") if n in self.model_fields_set]
        if self.file is None and stated:
            raise RangeError(
                stated[0],
                f"{stated[0]} without a file",
                "no such key beside typed points",
                f"typed points are in the units of their keys ({x}, {y}): remove it",
            )
        for key in typed:
            n, m = len(getattr(self, x)), len(getattr(self, y))
            if n != m:
                raise RangeError(key, f"{n} values in {x} beside {m} in {y}", "one value for each", "complete the shorter list")
        return self

    @property
    def needed(self) -> bool:
        """Whether the section is nothing without points."""
        return True


class _AtTemperature(_Points):
    t_vj_c: Number

    @field_validator("t_vj_c")
    @classmethod
    def _celsius(cls, value):
        _plausible_temperature("t_vj_c", value)
        return value


class SheetOnStateCurve(_AtTemperature):
    """On-state voltage over current at one temperature."""

    quantities: ClassVar = ("current", "voltage")
    keys: ClassVar = ("current_a", "voltage_v")

    current_a: Numbers | None = None
    voltage_v: Numbers | None = None


class SheetEnergyCurve(_AtTemperature):
    """Switching energy over current at one temperature."""

    quantities: ClassVar = ("current", "energy")
    keys: ClassVar = ("current_a", "energy_j")

    current_a: Numbers | None = None
    energy_j: Numbers | None = None


class SheetGateResistor(_Points):
    """Energy over the external gate resistor."""

    quantities: ClassVar = ("resistance", "energy")
    keys: ClassVar = ("r_ohm", "energy_j")

    r_ref_ohm: NotNegative
    at_current_a: Positive | None = None
    at_t_vj_c: Number | None = None
    r_ohm: Numbers | None = None
    energy_j: Numbers | None = None

    @model_validator(mode="after")
    def _where(self):
        if (self.at_current_a is None) != (self.at_t_vj_c is None):
            raise RangeError("at_current_a", "only one of at_current_a and at_t_vj_c", "both, or none of them", "add the missing one")
        return self


class SheetOverVoltage(_Points):
    """Energy over the DC voltage."""

    quantities: ClassVar = ("dc_voltage", "energy")
    keys: ClassVar = ("voltage_v", "energy_j")

    voltage_v: Numbers | None = None
    energy_j: Numbers | None = None


class SheetOnState(FileModel):
    """On-state curves by temperature, or straight lines."""

    curve: tuple[SheetOnStateCurve, ...] = ()
    line: tuple[OnStateLine, ...] = ()


class SheetEnergies(FileModel):
    """Energy curves, and how they depend on voltage, temperature and gate resistor."""

    v_ref_v: Positive
    voltage_exponent: Annotated[float, Field(strict=True, ge=0, le=3)] | None = None
    over_voltage: SheetOverVoltage | None = None
    temperature_coefficient_per_k: Annotated[float, Field(strict=True, ge=-0.02, le=0.02)] | None = None
    start: Literal["as-digitised", "origin"] = "as-digitised"
    curve: Annotated[tuple[SheetEnergyCurve, ...], Field(min_length=1)]
    gate_resistor: SheetGateResistor | None = None

    @model_validator(mode="after")
    def _sensible(self):
        if (self.voltage_exponent is None) == (self.over_voltage is None):
            both = self.over_voltage is not None
            raise RangeError(
                "voltage_exponent",
                "both voltage_exponent and over_voltage" if both else "neither voltage_exponent nor over_voltage",
                "one of the two",
                "remove one of them"
                if both
                else "type the exponent, or give energies over voltage; about 1.3 is common for turn-on and turn-off, 0.6 for recovery",
            )
        n = len(self.curve)
        if self.temperature_coefficient_per_k is not None and n > 1:
            raise RangeError(
                "temperature_coefficient_per_k",
                f"temperature_coefficient_per_k beside {n} curves",
                "one curve with a coefficient, or curves at two or more temperatures",
                "remove the coefficient: the curves say it",
            )
        if self.temperature_coefficient_per_k is None and n == 1:
            raise RangeError(
                "curve",
                "1 curve",
                "curves at two or more junction temperatures, or one with temperature_coefficient_per_k",
                "add a curve, or type the coefficient (0 where the energy does not depend on temperature)",
            )
        return self


class SheetThermal(_Points):
    """An impedance curve to be fitted; or branches; or layers."""

    quantities: ClassVar = ("time", "z_th")
    keys: ClassVar = ("time_s", "z_th_k_per_w")

    reference: Literal["case", "sink", "plate"]
    time_s: Numbers | None = None
    z_th_k_per_w: Numbers | None = None
    branches: Annotated[int, Field(strict=True, ge=1, le=MOST)] | None = None
    r_th_k_per_w: Positive | None = None
    r_k_per_w: tuple[Positive, ...] = ()
    tau_s: tuple[Positive, ...] = ()
    layer: tuple[LayerSpec, ...] = ()
    cells_per_layer: Annotated[int, Field(strict=True, ge=2, le=40)] | None = None

    @property
    def needed(self) -> bool:
        """Branches and layers are points enough."""
        return not (self.r_k_per_w or self.tau_s or self.layer)

    @property
    def fitted(self) -> bool:
        """Whether there is a curve."""
        return self.file is not None or self.time_s is not None

    @model_validator(mode="after")
    def _one_kind(self):
        ways = [
            n
            for n, given in (("a curve", self.fitted), ("r_k_per_w and tau_s", bool(self.r_k_per_w or self.tau_s)), ("layer", bool(self.layer)))
            if given
        ]
        if len(ways) > 1:
            raise RangeError("", " beside ".join(ways), "a curve, branches or layers, one of the three", "remove the others")
        if not self.fitted:
            for key in ("branches", "r_th_k_per_w"):
                if getattr(self, key) is not None:
                    raise RangeError(key, f"{key} without a curve", f"{key} only where a curve is fitted", "remove it")
        return self


class SheetSwitch(FileModel):
    """One switch."""

    on_state: SheetOnState
    reverse: SheetOnState | None = None
    turn_on: SheetEnergies
    turn_off: SheetEnergies
    thermal: SheetThermal
    parallel: ParallelChips | None = None


class SheetDiode(FileModel):
    """One diode."""

    on_state: SheetOnState
    recovery: SheetEnergies | None = None
    thermal: SheetThermal | None = None
    parallel: ParallelChips | None = None


class SheetDescription(FileModel):
    """A sheet description; see the module's documentation."""

    format: Literal[1]
    name: Text
    technology: Text
    kind: Text
    arrangement: Text
    source: Text
    units: SheetUnits = SheetUnits()
    csv: CsvForm = CsvForm()
    cleaning: CleaningSpec = CleaningSpec()
    ratings: Ratings
    gate: Gate
    switching: SwitchingData | None = None
    switch: SheetSwitch
    diode: SheetDiode
    inner_switch: SheetSwitch | None = None
    inner_diode: SheetDiode | None = None
    clamp_diode: SheetDiode | None = None
    case_to_sink: CaseToSink | None = None
    plate: PlateSpec | None = None
    wires: Wires | None = None
    failure_mode: tuple[FailureMode, ...] = ()


# ------------------------------------------------------------------ the result
@dataclass(frozen=True)
class ThermalFit:
    """A fitted impedance curve.

    Attributes
    ----------
    place : str
        E.g. "switch.thermal".
    fit : FosterFit
    r_th_k_per_w : float or None
        The resistance that the sheet prints.
    """

    place: str
    fit: FosterFit
    r_th_k_per_w: float | None


@dataclass(frozen=True)
class SheetReport:
    """What was done to the curves of a sheet.

    Attributes
    ----------
    name, sheet : str
        Module; file of the description.
    cleaning : tuple of CleaningReport
        One for every curve.
    fits : tuple of ThermalFit
    notes : tuple of str
        Values made from typed coefficients, fitted exponents, comparisons.
    module_notes : tuple of str
        What results with this module repeat.
    """

    name: str
    sheet: str
    cleaning: tuple[CleaningReport, ...]
    fits: tuple[ThermalFit, ...]
    notes: tuple[str, ...]
    module_notes: tuple[str, ...]

    @property
    def changes(self) -> tuple[PointChange, ...]:
        """Every point of every curve that is not written as it was read."""
        return tuple(c for one in self.cleaning for c in one.changes)

    def to_text(self) -> str:
        """The report for people, every changed point in it."""
        read, written = sum(c.points_read for c in self.cleaning), sum(c.points_written for c in self.cleaning)
        lines = [
            f"{self.name}, from {self.sheet}: {len(self.cleaning)} curves, {read} points read, {written} written; five significant digits are kept",
            "",
        ]
        lines += [one.to_text() for one in self.cleaning]
        if self.fits:
            lines += ["", "thermal branches"]
            for f in self.fits:
                lines.append(f"{f.place}: {f.fit.message}")
                lines += [f"  {r:.4g} K/W with {tau:.4g} s" for r, tau in zip(f.fit.r_k_per_w, f.fit.tau_s)]
                printed = (
                    "" if f.r_th_k_per_w is None else f"; printed: {f.r_th_k_per_w:.4g} K/W ({f.fit.r_total_k_per_w / f.r_th_k_per_w - 1.0:+.1%})"
                )
                lines.append(f"  {f.fit.r_total_k_per_w:.4g} K/W in all{printed}")
        for title, notes in (("notes", self.notes), ("what results with this module repeat", self.module_notes)):
            if notes:
                lines += ["", title, *(f"- {n}" for n in notes)]
        return "\n".join(lines)


@dataclass(frozen=True)
class SheetResult:
    """A module made from a sheet, and the report of its making.

    Attributes
    ----------
    module : PowerModule
    report : SheetReport
    inputs : tuple of Path
        The files it was made from.
    """

    module: PowerModule
    report: SheetReport
    inputs: tuple[Path, ...]

    def write(self, path) -> None:
        """Write the module file, whole or not at all; the files it was made from are never written over."""
        path = Path(path)
        for one in self.inputs:
            if path.resolve() == one.resolve():
                raise InputError(str(path), "a file that the module is made from", "another name", "choose a name that is not in use")
        save_module(self.module, path)


# -------------------------------------------------------------------- the road
def sheet_to_module(path) -> SheetResult:
    """Read a sheet description with its curves, clean and fit them, and make a module.

    Parameters
    ----------
    path : path-like
        The sheet description; files of curves count from its folder.

    Returns
    -------
    SheetResult

    Raises
    ------
    InputError
        First thing that is wrong, with file, field or line, value, what is allowed and what to do.
    """
    path = Path(path)
    work = _Conversion(path, read_model(path, SheetDescription))
    return work.result()


def _plain(model):
    return model.model_dump(mode="python", exclude_none=True)


class _Conversion:
    """One sheet on its way to a module."""

    def __init__(self, path: Path, sheet: SheetDescription):
        self.path, self.sheet = path, sheet
        self.cleaning: list[CleaningReport] = []
        self.fits: list[ThermalFit] = []
        self.notes: list[str] = []
        self.inputs = [path]
        self.typed = 0
        #: (file, columns) or points -> (field, role) of their uses, to find a curve that is used twice
        self.used: dict[tuple, list[tuple[str, str]]] = {}

    def at(self, field) -> str:
        return f"{self.path}, field {field}"

    def result(self) -> SheetResult:
        s = self.sheet
        data: dict[str, Any] = {k: getattr(s, k) for k in ("format", "name", "technology", "kind", "arrangement")}
        data["source"] = ""
        data |= {"ratings": _plain(s.ratings), "gate": _plain(s.gate)}
        for name in ("switch", "inner_switch"):
            part = getattr(s, name)
            if part is not None:
                data[name] = self.switch(name, part)
        for name in ("diode", "inner_diode", "clamp_diode"):
            part = getattr(s, name)
            if part is not None:
                data[name] = self.diode(name, part)
        for name in ("switching", "case_to_sink", "plate", "wires"):
            if getattr(s, name) is not None:
                data[name] = _plain(getattr(s, name))
        if s.failure_mode:
            data["failure_mode"] = [_plain(f) for f in s.failure_mode]
        files = len(self.cleaning) - self.typed
        made = (
            f"made from {files} digitised curve{'' if files == 1 else 's'}" + (f" and {self.typed} typed" if self.typed else "")
            if files
            else "made from typed points"
        )
        data["source"] = f"{s.source}; {made} ({self.path.name})"
        module = module_from_dict(data, str(self.path))
        self.compare_gate_resistors(module)
        report = SheetReport(module.name, self.path.name, tuple(self.cleaning), tuple(self.fits), tuple(self.notes), module.notes)
        return SheetResult(module, report, tuple(self.inputs))

    def switch(self, place, part):
        out = {"on_state": self.on_state(f"{place}.on_state", part.on_state)}
        out["turn_on"] = self.energies(f"{place}.turn_on", part.turn_on, "turn_on")
        out["turn_off"] = self.energies(f"{place}.turn_off", part.turn_off, "turn_off")
        out["thermal"] = self.thermal(f"{place}.thermal", part.thermal)
        if part.reverse is not None:
            out["reverse"] = self.on_state(f"{place}.reverse", part.reverse)
        if part.parallel is not None:
            out["parallel"] = _plain(part.parallel)
        return out

    def diode(self, place, part):
        out = {"on_state": self.on_state(f"{place}.on_state", part.on_state)}
        if part.recovery is not None:
            out["recovery"] = self.energies(f"{place}.recovery", part.recovery, "recovery")
        if part.thermal is not None:
            out["thermal"] = self.thermal(f"{place}.thermal", part.thermal)
        if part.parallel is not None:
            out["parallel"] = _plain(part.parallel)
        return out

    # ---------------------------------------------------------------- points
    def points(self, field, spec, curve, **rules) -> tuple[np.ndarray, np.ndarray, str, RawCurve]:
        """Read, judge and clean one curve; x, y, label of the source for messages, raw points."""
        raw, source = self.read(field, spec)
        self.refuse_twice(field, spec, raw)
        for q, values in zip(raw.quantities, (raw.x, raw.y)):
            low, high = _PLAUSIBLE.get(q, (0.0, np.inf))
            top = float(np.max(np.abs(values))) if values.size else 0.0
            if top > _ABSURD:
                k = int(np.argmax(np.abs(values)))
                raise InputError(
                    f"{raw.label}, {raw.places[k]}",
                    f"{values[k]:.4g} {next(iter(UNITS[q]))}",
                    f"{q.replace('_', ' ')} as a module can have it",
                    "correct the value or the unit",
                )
            if values.size and not low <= top <= high:
                unit = next(iter(UNITS[q]))
                advice = (
                    f"the unit is stated as {self.unit(spec, q)}: correct it" if spec.file else f"{spec.keys[1]} is in {unit}: correct the values"
                )
                if q == "voltage":
                    advice += (
                        "; or the columns are exchanged (drawings of on-state curves have the voltage along the bottom): state columns"
                        if spec.file
                        else "; or the lists are exchanged"
                    )
                raise InputError(raw.label, f"a largest {q.replace('_', ' ')} of {top:.4g} {unit}", f"{low:g} to {high:g} {unit}", advice)
        c = self.sheet.cleaning
        if spec.file is None:
            # typed on purpose: nothing is thinned
            rules = {"fewest": 2} | rules | {"max_points": None}
        else:
            rules = {"max_points": c.max_points} | rules
        x, y, report = clean_curve(raw, curve, source, Rules(largest_change=c.largest_change, thin_within=c.thin_within, **rules))
        self.cleaning.append(report)
        self.typed += spec.file is None
        return x, y, raw.label, raw

    def read(self, field, spec) -> tuple[RawCurve, str]:
        if spec.file is None:
            x, y = (np.array(getattr(spec, k), float) for k in spec.keys)
            return RawCurve(self.at(field), spec.quantities, x, y, tuple(f"point {k}" for k in range(1, x.size + 1))), "typed"
        form = {
            k: getattr(spec.csv, k) or getattr(self.sheet.csv, k) or default
            for k, default in (("delimiter", ","), ("decimal", "."), ("encoding", "utf-8"))
        }
        if form["delimiter"] == form["decimal"]:
            raise InputError(
                self.at(f"{field}.csv"),
                f"'{form['delimiter']}' as delimiter and as decimal sign",
                "two different signs",
                'files with decimal commas are mostly divided by ";"',
            )
        units = tuple(self.unit(spec, q) for q in spec.quantities)
        for q, unit in zip(spec.quantities, units):
            if unit is None:
                raise InputError(
                    self.at(f"{field}.units.{q}"),
                    "nothing",
                    "one of " + ", ".join(UNITS[q]),
                    f"state the unit of the {q.replace('_', ' ')} here or under [units]; none is assumed",
                )
        name = Path(spec.file)
        full = self.path.parent / name
        raw = read_points(full, f"{full} ({field})", spec.quantities, units, columns=spec.columns, field=f"{field}.", **form)
        self.inputs.append(full)
        key = (full.resolve(), tuple(sorted((q, str(v)) for q, v in spec.columns.items())))
        other = self.other_use(field, spec, key)
        if other:
            raise InputError(
                self.at(f"{field}.file"),
                f"'{spec.file}', the file of {other} too",
                "a curve of its own",
                "name the file of this curve; for an energy that does not depend on temperature give one curve and temperature_coefficient_per_k = 0",
            )
        return raw, spec.file

    def other_use(self, field, spec, key) -> str:
        """Where a curve serves already, if that is a mistake: like chips in two places of a leg may share one."""
        part, what = field.split(".", 1)
        role = f"{what.split('[')[0]} {getattr(spec, 't_vj_c', '')}"
        uses = self.used.setdefault(key, [])
        wrong = [f for f, r in uses if r != role or f.split(".")[0] == part]
        if uses and not wrong and len(key) == 2:
            self.notes.append(f"{field}: the curve of {uses[0][0]}")
        uses.append((field, role))
        return wrong[0] if wrong else ""

    def unit(self, spec, quantity):
        return getattr(spec.units, quantity) or getattr(self.sheet.units, quantity)

    def refuse_twice(self, field, spec, raw):
        if spec.file is None or raw.x.size < 4:
            return  # typed twice is on purpose
        other = self.other_use(field, spec, (raw.quantities, raw.x.tobytes(), raw.y.tobytes()))
        if other:
            raise InputError(raw.label, f"the same points as {other}", "a curve of its own", "was a file copied under another name?")

    # -------------------------------------------------------------- on state
    def on_state(self, place, part):
        out: dict[str, Any] = {}
        if part.curve:
            order = self.by_temperature(place, part.curve)
            out["curve"] = []
            for k in order:
                spec, field = part.curve[k], f"{place}.curve[{k + 1}]"
                x, y, label, _ = self.points(field, spec, f"{place}, {spec.t_vj_c:g} degC", above_zero=True)
                self.enough_current(label, x, spec)
                out["curve"].append({"t_vj_c": spec.t_vj_c, "current_a": x.tolist(), "voltage_v": y.tolist()})
        if part.line:
            out["line"] = [_plain(line) for line in part.line]
        return out

    def by_temperature(self, place, curves):
        t = [c.t_vj_c for c in curves]
        for k, one in enumerate(t):
            if one in t[:k]:
                raise InputError(
                    self.at(f"{place}.curve[{k + 1}].t_vj_c"),
                    f"{one:g} degC, as in curve {t.index(one) + 1}",
                    "a temperature of its own for each curve",
                    "correct the temperature, or remove a curve",
                )
        order = sorted(range(len(t)), key=t.__getitem__)
        if order != list(range(len(t))):
            self.notes.append(f"{place}: curves sorted from cold to hot")
        return order

    def enough_current(self, label, current_a, spec):
        nominal = self.sheet.ratings.i_nominal_a
        top = float(current_a[-1])
        if top < 0.3 * nominal or top > 20.0 * nominal:
            advice = (
                "check the unit of the current, and whether the columns are exchanged: state columns"
                if spec.file
                else "check the currents and the ratings"
            )
            raise InputError(
                label,
                f"a curve that ends at {top:.4g} A",
                f"about the nominal current of {nominal:g} A or beyond (at least {0.3 * nominal:g} A)",
                advice,
            )

    # -------------------------------------------------------------- energies
    def energies(self, place, part, kind):
        out: dict[str, Any] = {"v_ref_v": part.v_ref_v}
        if part.voltage_exponent is not None:
            out["voltage_exponent"] = part.voltage_exponent
        else:
            out["voltage_exponent"] = self.exponent(f"{place}.over_voltage", part.over_voltage, part.v_ref_v)
        curves = []
        for k in self.by_temperature(place, part.curve):
            spec, field = part.curve[k], f"{place}.curve[{k + 1}]"
            x, y, label, _ = self.points(field, spec, f"{place}, {spec.t_vj_c:g} degC", zero_start=part.start == "origin")
            self.enough_current(label, x, spec)
            low, high = (v * part.v_ref_v * float(x[-1]) for v in _ENERGY_TIME_S[kind])
            if not low <= y[-1] <= high:
                advice = f"the unit is stated as {self.unit(spec, 'energy')}: correct it" if spec.file else "energy_j is in joules, not millijoules"
                raise InputError(
                    label, f"{y[-1]:.4g} J at {x[-1]:.4g} A and {part.v_ref_v:g} V", f"{low:.3g} to {high:.3g} J for such a chip", advice
                )
            curves.append({"t_vj_c": spec.t_vj_c, "current_a": x.tolist(), "energy_j": y.tolist()})
        if part.temperature_coefficient_per_k is not None:
            curves = self.second_temperature(place, curves[0], part.temperature_coefficient_per_k)
        out["curve"] = curves
        if part.gate_resistor is not None:
            g, field = part.gate_resistor, f"{place}.gate_resistor"
            x, y, label, _ = self.points(field, g, field, rising=False, fewest=2)
            if y[0] <= 0.0 or (y <= 0.0).any():
                raise InputError(label, "an energy of 0 J", "energies above 0 J", "correct the point, or cut it out")
            out["gate_resistor"] = {"r_ref_ohm": g.r_ref_ohm, "r_ohm": x.tolist(), "energy_j": y.tolist()}
        return out

    def second_temperature(self, place, curve, per_k):
        r, t_ref = self.sheet.ratings, curve["t_vj_c"]
        for t in (r.t_vj_op_min_c, r.t_vj_op_max_c):
            if 1.0 + per_k * (t - t_ref) <= 0.0:
                raise InputError(
                    self.at(f"{place}.temperature_coefficient_per_k"),
                    f"{per_k:g} per K of the energy at {t_ref:g} degC, which leaves nothing at {t:g} degC",
                    "energies above zero within the ratings",
                    "check the coefficient; 0.003 per K is common at 125 degC for silicon",
                )
        other = max((25.0, r.t_vj_op_max_c), key=lambda t: abs(t - t_ref))
        factor = 1.0 + per_k * (other - t_ref)
        second = {"t_vj_c": other, "current_a": list(curve["current_a"]), "energy_j": [float(f"{factor * e:.5g}") for e in curve["energy_j"]]}
        self.notes.append(
            f"{place}: measured at {t_ref:g} degC only; the curve at {other:g} degC is that one times {factor:.4g}, from the typed {per_k:g} per K"
        )
        return sorted((curve, second), key=lambda c: c["t_vj_c"])

    def exponent(self, field, spec, v_ref_v):
        v, e, label, _ = self.points(field, spec, field, rising=False, fewest=2, max_points=None)
        if (v <= 0.0).any() or (e <= 0.0).any():
            raise InputError(label, "a point at zero", "voltages above 0 V and energies above 0 J", "cut the point out")
        if v[-1] < 1.2 * v[0]:
            raise InputError(
                label, f"voltages from {v[0]:.4g} to {v[-1]:.4g} V only", "voltages that span at least a fifth", "digitise more of the curve"
            )
        if not 0.5 * v[0] <= v_ref_v <= 2.0 * v[-1]:
            raise InputError(
                label,
                f"voltages from {v[0]:.4g} to {v[-1]:.4g} V beside v_ref_v = {v_ref_v:g} V",
                "voltages around the reference voltage",
                "check the unit of the voltage" if spec.file else "check the voltages",
            )
        a = np.log(v / v_ref_v)
        slope, offset = np.polyfit(a, np.log(e), 1)
        off = np.abs(np.exp(offset + slope * a) / e - 1.0)
        k = int(np.argmax(off))
        if off[k] > _EXPONENT_OFF:
            raise InputError(
                label,
                f"energies that no power of the voltage meets: {off[k]:.1%} off at {v[k]:.4g} V",
                f"at most {_EXPONENT_OFF:.0%} off",
                "leave out voltages far from the reference voltage, or type voltage_exponent",
            )
        exponent = float(f"{slope:.4g}")
        if not 0.0 <= exponent <= 3.0:
            raise InputError(label, f"a fitted voltage exponent of {exponent:g}", "0 to 3", "check the columns and units of the curve")
        self.notes.append(
            f"{field}: voltage exponent {exponent:g}, fitted to {v.size} points from {v[0]:.4g} to {v[-1]:.4g} V; "
            f"largest residual {off[k]:.1%} at {v[k]:.4g} V"
        )
        return exponent

    def compare_gate_resistors(self, module):
        """The curve over the gate resistor must agree with the energy curves where both say something."""
        for place, curves in module.energy_curves().items():
            part, kind = place.split(".")
            spec = getattr(getattr(self.sheet, part), kind).gate_resistor
            if spec is None:
                continue
            applied = module.gate_resistor_ohm(place)
            if applied != spec.r_ref_ohm:
                self.notes.append(
                    f"{place}: the gate's resistor is {applied:g} ohm, the energy curves belong to {spec.r_ref_ohm:g} ohm; "
                    f"energies are multiplied by {curves.gate_resistor.factor(applied):.4g}"
                )
            if spec.at_current_a is None:
                continue
            here = float(np.interp(spec.r_ref_ohm, curves.gate_resistor.r_ohm, curves.gate_resistor.energy_j))
            there = float(switching_energy_j(curves, spec.at_current_a, spec.at_t_vj_c))
            off = here / there - 1.0 if there > 0.0 else np.inf
            where = f"{here:.4g} J at {spec.r_ref_ohm:g} ohm beside {there:.4g} J of the energy curves"
            where += f" at {spec.at_current_a:g} A and {spec.at_t_vj_c:g} degC"
            if abs(off) > _FAR:
                raise InputError(
                    self.at(f"{place}.gate_resistor"),
                    where,
                    f"the same within {_FAR:.0%}",
                    "check r_ref_ohm, the unit of the energy, and at_current_a and at_t_vj_c",
                )
            if abs(off) > _OFF:
                self.notes.append(f"{place}.gate_resistor: {where} ({off:+.1%}); only its shape is used")

    # --------------------------------------------------------------- thermal
    def thermal(self, place, part):
        out: dict[str, Any] = {"reference": part.reference}
        if not part.fitted:
            if part.layer:
                out["layer"] = [_plain(layer) for layer in part.layer]
            else:
                out |= {"r_k_per_w": list(part.r_k_per_w), "tau_s": list(part.tau_s)}
            if part.cells_per_layer is not None:
                out["cells_per_layer"] = part.cells_per_layer
            return out
        t, z, label, _ = self.points(place, part, place, logarithmic=True, max_points=None, fewest=6)
        if not 1e-3 <= t[-1] <= 1e4 or t[0] > 1.0:
            advice = f"the unit is stated as {self.unit(part, 'time')}: correct it" if part.file else "time_s is in seconds"
            raise InputError(label, f"times from {t[0]:.3g} to {t[-1]:.3g} s", "the rise of a module, from milliseconds or less to seconds", advice)
        fit = fit_foster(t, z, branches=part.branches, where=label)
        largest = self.sheet.cleaning.largest_residual
        if fit.residual_relative > largest:
            raise InputError(
                label,
                f"a curve that {fit.n_branches} branches meet only within {fit.residual_relative:.1%} (at {fit.residual_at_s:.3g} s)",
                f"at most {largest:.0%}",
                "check the points there" + ("" if part.branches is None else ", or ask for more branches"),
            )
        if part.r_th_k_per_w is not None:
            off = fit.r_total_k_per_w / part.r_th_k_per_w - 1.0
            if abs(off) > 0.5:
                raise InputError(
                    self.at(f"{place}.r_th_k_per_w"),
                    f"{part.r_th_k_per_w:g} K/W beside a curve that ends at {fit.r_total_k_per_w:.4g} K/W",
                    "the resistance that the curve rises to",
                    "check both, and their units",
                )
            if abs(off) > _R_TH_OFF:
                self.notes.append(
                    f"{place}: the branches add up to {fit.r_total_k_per_w:.4g} K/W, "
                    f"the sheet prints {part.r_th_k_per_w:.4g} K/W ({off:+.1%}); the branches count"
                )
        self.fits.append(ThermalFit(place, fit, part.r_th_k_per_w))
        out |= {"r_k_per_w": list(fit.r_k_per_w), "tau_s": list(fit.tau_s)}
        return out
