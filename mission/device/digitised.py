"""Digitised curves: reading them from CSV, and cleaning them with nothing hidden.

A curve that was clicked or traced off a drawing scatters: points stand out of order, twice, or
a little lower than their neighbours. What a module file needs (currents that rise, values that
do not fall, not too many points) is made from it here, and every point touched is listed.
"""

from __future__ import annotations

import codecs
import csv
import re
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from ..errors import InputError, near_match

#: Units that may be stated, with the factor to ours.
UNITS: dict[str, dict[str, float]] = {
    "current": {"A": 1.0, "kA": 1e3},
    "voltage": {"V": 1.0, "mV": 1e-3},
    "energy": {"J": 1.0, "mJ": 1e-3, "uJ": 1e-6},
    "time": {"s": 1.0, "ms": 1e-3, "us": 1e-6},
    "z_th": {"K/W": 1.0, "mK/W": 1e-3},
    "resistance": {"ohm": 1.0, "mohm": 1e-3},
    "dc_voltage": {"V": 1.0, "kV": 1e3},
    "temperature": {"degC": 1.0, "K": 1.0},
}
#: Below this share of a curve's largest value a change is measured against that share of it, not against the value.
SMALL = 0.1
_LARGEST_FILE, _MOST_POINTS = 20_000_000, 100_000
#: Points closer than this share of their current (time, ...) are one point.
_CLOSE = 0.002
_BLANKS = " \t\r\n"
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)(e[+-]?\d+)?", re.ASCII | re.IGNORECASE)
_NOT_FINITE = re.compile(r"[+-]?(nan|inf(inity)?)", re.ASCII | re.IGNORECASE)


@dataclass(frozen=True)
class RawCurve:
    """Points as they stand in the file, in our units.

    Attributes
    ----------
    label : str
        File, or field of typed points, for messages.
    quantities : (str, str)
        Keys of :data:`UNITS` for x and y.
    x, y : ndarray, shape (n,)
    places : tuple of str
        "line 12" or "point 3" for each.
    """

    label: str
    quantities: tuple[str, str]
    x: np.ndarray
    y: np.ndarray
    places: tuple[str, ...]

    @property
    def units(self) -> tuple[str, str]:
        """Our units of x and y."""
        return tuple(next(iter(UNITS[q])) for q in self.quantities)


@dataclass(frozen=True)
class PointChange:
    """One point that is not written as it was read.

    Attributes
    ----------
    curve : str
        Place of the curve in the module file, with its temperature.
    point : str
        Line of the file or number of the typed point; "added" for one that was not there.
    x, x_after : float
        Current, time or the like, before and after.
    before, after : float or None
        Value; ``before`` is None for an added point, ``after`` for one that was left out.
    why : str
    """

    curve: str
    point: str
    x: float
    x_after: float
    before: float | None
    after: float | None
    why: str


@dataclass(frozen=True)
class CleaningReport:
    """What became of one curve.

    Attributes
    ----------
    curve, source : str
        Place in the module file with temperature; file or "typed".
    x_unit, y_unit : str
    points_read, points_written : int
    x_range : (float, float)
        First and last point written.
    changes : tuple of PointChange
        Every point that was moved, merged, raised, lowered, added, thinned out or left out.
    largest_change : float
        Of a value, over the value (over a tenth of the curve's largest where it is smaller).
    thinned_within : float
        How far at most the lines through the written points pass from a point thinned out, measured alike.
    notes : tuple of str
    """

    curve: str
    source: str
    x_unit: str
    y_unit: str
    points_read: int
    points_written: int
    x_range: tuple[float, float]
    changes: tuple[PointChange, ...]
    largest_change: float
    thinned_within: float
    notes: tuple[str, ...] = ()

    def to_text(self) -> str:
        """A head line, the changed points one a line, the thinned ones together."""
        low, high = self.x_range
        lines = [
            f"{self.curve} ({self.source}): {self.points_read} points read, {self.points_written} written, {low:.4g} to {high:.4g} {self.x_unit}"
        ]
        lines += [f"  {note}" for note in self.notes]
        thinned = [c for c in self.changes if c.why == THINNED]
        for c in self.changes:
            if c.why == THINNED:
                continue
            x = f"{c.x:.5g} {self.x_unit}" if c.x == c.x_after else f"{c.x:.5g} -> {c.x_after:.5g} {self.x_unit}"
            if c.after is None:
                value = f"{c.before:.5g} {self.y_unit} left out"
            elif c.before is None:
                value = f"{c.after:.5g} {self.y_unit} put in"
            elif c.before == c.after:
                value = f"{c.after:.5g} {self.y_unit}"
            else:
                value = f"{c.before:.5g} -> {c.after:.5g} {self.y_unit}"
            lines.append(f"  {c.point}, at {x}: {value}: {c.why}")
        if self.largest_change:
            lines.append(f"  largest change of a value: {100 * self.largest_change:.2g} %")
        if thinned:
            lines.append(f"  {THINNED}, lines through the rest pass within {100 * self.thinned_within:.2g} %: {_spans([c.point for c in thinned])}")
        return "\n".join(lines)


#: Why a point was left out by :func:`clean_curve` where the lines between its neighbours do as well.
THINNED = "thinned out"


def _spans(points) -> str:
    """lines 3, 5-9, 12."""
    kinds = {p.split()[0] for p in points}
    numbers = sorted(int(p.split()[1]) for p in points if " " in p)
    runs: list[list[int]] = []
    for n in numbers:
        if runs and n == runs[-1][1] + 1:
            runs[-1][1] = n
        else:
            runs.append([n, n])
    word = next(iter(sorted(kinds))) + ("s" if len(numbers) > 1 else "")
    return f"{word} " + ", ".join(f"{a}" if a == b else f"{a}-{b}" for a, b in runs)


# ------------------------------------------------------------------- reading
def read_points(
    path, label, quantities, units, *, columns: Mapping[str, str | int] | None = None, delimiter=",", decimal=".", encoding="utf-8", field=""
) -> RawCurve:
    """Read two columns of a CSV file.

    Lines that start with # and blank lines are passed over. A first row without a number is the header.

    Parameters
    ----------
    path : path-like
    label : str
        Name of the file in messages.
    quantities : (str, str)
        Keys of :data:`UNITS` for x and y.
    units : (str, str)
        The file's own.
    columns : dict, optional
        Quantity -> name in the header, or number from 1. Without it the file must have two columns, x first.
    delimiter, decimal, encoding : str
    field : str
        Where in the sheet description the columns, units and so on are stated, for advice.

    Returns
    -------
    RawCurve

    Raises
    ------
    InputError
        First thing that is wrong, with file, line, column and value.
    """
    path = Path(path)
    rows = _rows(_text(path, label, encoding, field), label, delimiter, field)
    header = None
    if rows and not any(_is_number(v, ".") or _is_number(v, ",") or _NOT_FINITE.fullmatch(v.strip(_BLANKS)) for v in rows[0][1]):
        header = [h.strip(_BLANKS) for h in rows.pop(0)[1]]
    if not rows:
        raise InputError(label, "no row of numbers" if header else "no rows", "one point a line", "check the export of the curve")
    width = len(header) if header else len(rows[0][1])
    index = _column_numbers(label, header, width, quantities, columns, delimiter, rows, field)
    for q, unit in zip(quantities, units):
        if header:
            _refuse_other_unit(label, header[index[q]], q, unit, field)
    if len(rows) > _MOST_POINTS:
        raise InputError(label, f"{len(rows)} rows", f"at most {_MOST_POINTS} points for a curve", "is it the right file?")
    values: dict[str, list[float]] = {q: [] for q in quantities}
    for number, row in rows:
        if len(row) != width:
            advice = "complete the row, or cut it out"
            if len(row) > width and delimiter == "," and decimal == ".":
                advice = f"a decimal comma in a file divided by commas? state delimiter and decimal under {field}csv"
            raise InputError(f"{label}, line {number}", f"{len(row)} field{'' if len(row) == 1 else 's'}", f"{width} fields, as above", advice)
        for q in quantities:
            values[q].append(_number(row[index[q]], f"{label}, line {number}, {_column_name(header, index[q])}", decimal, field))
    x, y = (np.array(values[q]) * UNITS[q][u] for q, u in zip(quantities, units))
    return RawCurve(label, tuple(quantities), x, y, tuple(f"line {n}" for n, _ in rows))


def _text(path, label, encoding, field) -> str:
    try:
        codec = codecs.lookup(encoding).name
        "".encode(codec)
    except (LookupError, ValueError):
        raise InputError(f"{label}, {field}csv.encoding", f"'{encoding}'", "a text encoding such as utf-8, cp1252, latin-1") from None
    try:
        if path.is_dir():
            raise InputError(label, "a folder", "a CSV file", "name the file in it")
        if not path.exists():
            there = [p.name for p in path.parent.iterdir()] if path.parent.is_dir() else []
            raise InputError(label, "no such file", "a CSV file", near_match(path.name, there) or "paths count from the sheet description")
        if not path.is_file():
            raise InputError(label, "a device or pipe", "a CSV file")
        if path.stat().st_size > _LARGEST_FILE:
            raise InputError(
                label, f"a file of {path.stat().st_size / 1e6:.0f} MB", f"at most {_LARGEST_FILE / 1e6:.0f} MB for one curve", "is it the right file?"
            )
        raw = path.read_bytes()
    except (OSError, ValueError) as err:
        raise InputError(label, f"a file that cannot be read ({getattr(err, 'strerror', None) or err})", "a CSV file that can be read") from None
    if not raw.strip():
        raise InputError(label, "an empty file", "rows of numbers", "check the export of the curve")
    if b"\x00" in raw[:65536] and not codec.startswith(("utf-16", "utf-32")):
        known = raw.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE))
        raise InputError(
            label,
            "bytes that are no text (a zero byte)",
            f"text in {encoding}",
            f'state encoding = "utf-16" under {field}csv' if known else "export the curve as CSV text",
        )
    try:
        return raw.decode("utf-8-sig" if codec == "utf-8" else codec)
    except UnicodeDecodeError as err:
        line = raw[: err.start].count(b"\n") + 1
        raise InputError(
            f"{label}, line {line}",
            f"byte 0x{raw[err.start]:02x}, which is not {encoding}",
            f"text in {encoding}",
            f'state the file\'s encoding under {field}csv, e.g. encoding = "cp1252"',
        ) from None


def _rows(text, label, delimiter, field) -> list[tuple[int, list[str]]]:
    rows = []
    for number, line in enumerate(text.splitlines(), 1):
        if not line.strip(_BLANKS + "\f\v") or line.lstrip(_BLANKS).startswith("#"):
            continue
        if line.lower().startswith("sep="):
            raise InputError(
                f"{label}, line {number}", f"'{line[:20]}'", "a header or numbers", f"cut the line out, and state the delimiter under {field}csv"
            )
        if line.count('"') % 2:
            raise InputError(
                f"{label}, line {number}", "a quote that is not closed in its line", "quotes in pairs", "close the quote, or take it out"
            )
        bare = line.strip(" \r\n") if delimiter != "\t" else line.strip("\r\n")
        fields = bare.split() if delimiter == " " else next(csv.reader([bare], delimiter=delimiter))
        rows.append((number, fields))
    return rows


def _column_numbers(label, header, width, quantities, columns, delimiter, rows, field):
    if width == 1:
        first = ",".join(header) if header else ",".join(rows[0][1])
        other = [d for d in ";\t,| " if d != delimiter and d in first]
        sign = {"\t": "\\t"}.get(other[0], other[0]) if other else ""
        number = 1 if header else rows[0][0]
        raise InputError(
            f"{label}, line {number}",
            f"a single column '{first[:40]}'",
            f"columns divided by {delimiter!r}",
            f'state delimiter = "{sign}" under {field}csv' if other else "check the file",
        )
    if not columns:
        if width != 2:
            what = f" ({', '.join(header[:8])})" if header else ""
            raise InputError(
                label,
                f"{width} columns{what}",
                f"two columns, {quantities[0]} and {quantities[1]}, or {field}columns that says which",
                f"state {field}columns = {{ {quantities[0]} = 1, {quantities[1]} = 2 }}, with numbers or names of the header",
            )
        return {q: k for k, q in enumerate(quantities)}
    out = {}
    for q in quantities:
        wanted = columns[q]
        place = f"{field}columns.{q}"
        if isinstance(wanted, int):
            if wanted > width:
                raise InputError(f"{label}, {place}", f"column {wanted}", f"1 to {width}", "count from 1")
            out[q] = wanted - 1
        elif not header:
            raise InputError(
                f"{label}, {place}", f"the name '{wanted}' for a file without a header", f"a number, 1 to {width}", "count the columns from 1"
            )
        elif header.count(wanted) != 1:
            found = f"no column '{wanted}'" if wanted not in header else f"the column name '{wanted}' {header.count(wanted)} times"
            raise InputError(
                f"{label}, {place}",
                found,
                "one of " + ", ".join(f"'{h}'" for h in header[:20]),
                near_match(wanted, header) or "copy the name from the header",
            )
        else:
            out[q] = header.index(wanted)
    if len(set(out.values())) < len(out):
        raise InputError(f"{label}, {field}columns", f"one column for {quantities[0]} and {quantities[1]}", "a column of its own for each")
    return out


def _column_name(header, index) -> str:
    return f"column '{header[index]}'" if header else f"column {index + 1}"


def _refuse_other_unit(label, name, quantity, unit, field):
    """A header such as ``E (mJ)`` or ``E / mJ`` says the unit: what is stated must agree."""
    m = re.search(r"[(\[]\s*([^)\]]+?)\s*[)\]]|\s/\s*(\S+)\s*$", name)
    if not m:
        return
    said = (m[1] or m[2]).replace("µ", "u").replace("μ", "u").replace("Ω", "ohm").replace("Ω", "ohm")
    if said in UNITS[quantity] and UNITS[quantity][said] != UNITS[quantity][unit]:
        raise InputError(
            f"{label}, column '{name}'",
            f"unit {said} in the header, {unit} stated",
            "the same unit in both",
            f'state {field}units.{quantity} = "{said}", or correct the header',
        )


def _is_number(text, decimal) -> bool:
    text = text.strip(_BLANKS)
    if decimal == "," and "." in text:
        return False
    return _NUMBER.fullmatch(text.replace(decimal, ".")) is not None


def _number(text, place, decimal, field) -> float:
    if _is_number(text, decimal):
        value = float(text.strip(_BLANKS).replace(decimal, "."))
        if np.isfinite(value):
            return value
    bare = text.strip(_BLANKS)
    other = "," if decimal == "." else "."
    if not bare:
        raise InputError(place, "an empty field", "a number", "complete the row, or cut it out; nothing is filled in")
    advice = f'state decimal = "{other}" under {field}csv if the file has it so' if _is_number(bare, other) else "correct the row, or cut it out"
    raise InputError(place, f"value '{bare[:40]}'", "a finite number", advice)


# ------------------------------------------------------------------ cleaning
@dataclass(frozen=True)
class Rules:
    """How a curve is cleaned.

    Attributes
    ----------
    largest_change : float
        A value that would have to change by more is refused, see :class:`CleaningReport`.
    max_points : int or None
        Points written at most; None: no thinning.
    thin_within : float
        Points are thinned while lines through the rest pass within this of each of them.
    rising : bool
        Values may not fall.
    above_zero : bool
        Values at or below zero are left out, where they are hardly below and at the curve's start.
    zero_start : bool
        Put in a point at the origin where the curve starts later.
    logarithmic : bool
        x spans decades.
    fewest : int
        Points that the file must hold.
    """

    largest_change: float = 0.05
    max_points: int | None = 30
    thin_within: float = 0.003
    rising: bool = True
    above_zero: bool = False
    zero_start: bool = False
    logarithmic: bool = False
    fewest: int = 4


def clean_curve(raw: RawCurve, curve: str, source: str, rules: Rules) -> tuple[np.ndarray, np.ndarray, CleaningReport]:
    """Make a curve that a module file can hold, and list what was done to it.

    In this order: points are sorted; currents hardly below zero become zero, values hardly below zero
    become zero or are left out; points that stand nearly at one current become their mean; values
    that fall are made level (isotonic regression, squares weighted by the value); points are thinned
    to the fewest lines; five significant digits are kept.

    Parameters
    ----------
    raw : RawCurve
    curve : str
        Place in the module file with temperature, for report and messages.
    source : str
        File or "typed", for the report.
    rules : Rules

    Returns
    -------
    x, y : ndarray
    report : CleaningReport

    Raises
    ------
    InputError
        Too few points, a value that would have to change by more than the rules allow, a jump.

    Examples
    --------
    >>> places = ("line 1", "line 2", "line 3", "line 4")
    >>> raw = RawCurve("e.csv", ("current", "energy"), np.array([0.0, 100.0, 200.0, 300.0]), np.array([0.0, 0.0100, 0.0099, 0.02]), places)
    >>> x, y, report = clean_curve(raw, "switch.turn_on, 25 degC", "e.csv", Rules())
    >>> y.round(5).tolist(), [c.point for c in report.changes]
    ([0.0, 0.00995, 0.00995, 0.02], ['line 2', 'line 3'])
    """
    work = _Work(raw, curve, rules)
    work.few(raw.x.size)
    work.sort()
    work.signs()
    work.merge()
    work.few(work.x.size)
    if rules.rising:
        work.level()
        work.jumps()
    if rules.zero_start and work.x[0] > 0.0:
        work.note("added", 0.0, 0.0, None, 0.0, "the curve starts at the origin, as the sheet description asks")
        work.put_first("added", 0.0, 0.0)
    within = work.thin()
    x, y = _five_digits(work.x), _five_digits(work.y)
    x_unit, y_unit = raw.units
    report = CleaningReport(
        curve, source, x_unit, y_unit, raw.x.size, x.size, (float(x[0]), float(x[-1])), tuple(work.changes), work.largest, within, tuple(work.notes)
    )
    return x, y, report


def _five_digits(values):
    return np.array([float(f"{v:.5g}") + 0.0 for v in values])  # + 0.0: no minus before a zero


def _not_falling(y, measure):
    """The nearest curve that does not fall; distances count over ``measure``."""
    from scipy.optimize import isotonic_regression

    return isotonic_regression(y, weights=1.0 / measure**2).x


class _Work:
    """One curve on its way, with the list of what was done."""

    def __init__(self, raw, curve, rules):
        self.raw, self.curve, self.rules = raw, curve, rules
        self.x, self.y, self.places = raw.x.astype(float), raw.y.astype(float), list(raw.places)
        self.x_unit, self.y_unit = raw.units
        self.scale = float(np.max(np.abs(self.y))) if self.y.size else 0.0
        self.changes: list[PointChange] = []
        self.notes: list[str] = []
        self.largest = 0.0

    def note(self, place, x, x_after, before, after, why):
        self.changes.append(
            PointChange(
                self.curve, place, float(x), float(x_after), None if before is None else float(before), None if after is None else float(after), why
            )
        )
        if before is not None and after is not None:
            self.largest = max(self.largest, float(abs(after - before) / self.measure(before)))

    def measure(self, y):
        """What a change of ``y`` is compared with."""
        return np.maximum(np.abs(y), max(SMALL * self.scale, 1e-300))

    def refuse(self, k, found, allowed, advice):
        raise InputError(f"{self.raw.label}, {self.places[k]}", found, allowed, advice)

    def point(self, k):
        return f"{self.y[k]:.5g} {self.y_unit} at {self.x[k]:.5g} {self.x_unit}"

    def few(self, n):
        if n < self.rules.fewest:
            raise InputError(
                self.raw.label,
                f"{n} point{'' if n == 1 else 's'}{' of its own current or time' if n < self.raw.x.size else ''}",
                f"at least {self.rules.fewest} points",
                "digitise more of the curve",
            )

    def keep(self, which):
        self.x, self.y, self.places = self.x[which], self.y[which], [self.places[int(k)] for k in np.arange(len(self.places))[which]]

    def put_first(self, place, x, y):
        self.x, self.y = np.insert(self.x, 0, x), np.insert(self.y, 0, y)
        self.places.insert(0, place)

    def sort(self):
        step = np.diff(self.x)
        if np.sum(step < 0.0) > np.sum(step > 0.0):
            self.notes.append("the points stood in falling order; they were turned round")
            self.keep(np.arange(self.x.size)[::-1])
        top = np.maximum.accumulate(self.x)
        for k in np.flatnonzero(self.x < top):
            self.note(self.places[k], self.x[k], self.x[k], self.y[k], self.y[k], f"sorted: stood after {top[k]:.5g} {self.x_unit}")
        self.keep(np.argsort(self.x, kind="stable"))

    def signs(self):
        reach = float(np.max(np.abs(self.x)))
        for k in np.flatnonzero(self.x < 0.0):
            if self.rules.logarithmic or self.x[k] < -0.01 * reach:
                self.refuse(
                    k,
                    f"{self.x[k]:.5g} {self.x_unit}",
                    f"at least 0 {self.x_unit}",
                    "enter the curve of the conducting direction" if self.x_unit == "A" else "correct the point",
                )
            self.note(self.places[k], self.x[k], 0.0, self.y[k], self.y[k], "hardly below zero: taken for zero")
            self.x[k] = 0.0
        allowed = self.rules.largest_change * SMALL * self.scale
        out = np.zeros(self.x.size, bool)
        if self.rules.above_zero:
            for k in np.flatnonzero(self.y <= 0.0):
                if self.y[k] < -allowed or self.x[k] > 0.02 * reach:
                    self.refuse(k, self.point(k), f"values above 0 {self.y_unit}", "correct the point, or cut it out")
                self.note(
                    self.places[k],
                    self.x[k],
                    self.x[k],
                    self.y[k],
                    None,
                    f"not above zero: the curve starts at its next point, and its first line goes on below, down to 0 {self.y_unit}",
                )
                out[k] = True
        else:
            for k in np.flatnonzero(self.y < 0.0):
                if self.y[k] < -allowed:
                    self.refuse(k, self.point(k), f"values of at least 0 {self.y_unit}", "correct the sign, or cut the point out")
                self.note(self.places[k], self.x[k], self.x[k], self.y[k], 0.0, "hardly below zero: taken for zero")
                self.y[k] = 0.0
        if self.rules.logarithmic:
            for k in np.flatnonzero((self.x == 0.0) & ~out):
                if self.y[k] > self.rules.largest_change * self.scale:
                    self.refuse(k, self.point(k), f"0 {self.y_unit} at 0 {self.x_unit}", "cut the point out, or subtract the offset of the drawing")
                self.note(self.places[k], self.x[k], self.x[k], self.y[k], None, f"at 0 {self.x_unit}: says nothing")
                out[k] = True
        self.keep(~out)

    def merge(self):
        if not self.x.size:
            return
        reach = float(self.x[-1])
        close = _CLOSE * (self.x if self.rules.logarithmic else np.maximum(self.x, 0.02 * reach))
        groups, first = [[0]], 0
        for k in range(1, self.x.size):
            if self.x[k] - self.x[first] <= close[first]:
                groups[-1].append(k)
            else:
                groups.append([k])
                first = k
        kept_x, kept_y, places = [], [], []
        for g in groups:
            x, y = float(np.mean(self.x[g])), float(np.mean(self.y[g]))
            if len(g) > 1:
                worst = max(g, key=lambda k: abs(self.y[k] - y))
                if abs(self.y[worst] - y) > self.rules.largest_change * self.measure(y):
                    other = max(g, key=lambda k: abs(self.y[k] - self.y[worst]))
                    self.refuse(
                        other,
                        f"{self.point(other)} beside {self.point(worst)} ({self.places[worst]})",
                        f"one value there, within {self.rules.largest_change:.0%}",
                        "cut out the wrong one; two curves in one file must be parted",
                    )
                for k in g:
                    why = f"one point with {', '.join(self.places[j] for j in g if j != k)}: mean of {len(g)}"
                    self.note(self.places[k], self.x[k], x, self.y[k], y if k == g[0] else None, why)
                    self.largest = max(self.largest, float(abs(self.y[k] - y) / self.measure(y)))
            kept_x.append(x if len(g) > 1 else self.x[g[0]])
            kept_y.append(y if len(g) > 1 else self.y[g[0]])
            places.append(self.places[g[0]])
        self.x, self.y, self.places = np.array(kept_x), np.array(kept_y), places

    def level(self):
        if not (np.diff(self.y) < 0.0).any():
            return
        measure = self.measure(self.y)
        new = _not_falling(self.y, measure)
        change = np.abs(new - self.y) / measure
        k = int(np.argmax(change))
        if change[k] > self.rules.largest_change:
            self.refuse_falling(new, measure, k)
        for k in np.flatnonzero(np.abs(new - self.y) > 1e-9 * measure):
            self.note(self.places[k], self.x[k], self.x[k], self.y[k], new[k], "the curve fell here: made level")
        self.y = new

    def refuse_falling(self, new, measure, k):
        """Name the point without which the rest would do, if there is one."""
        allowed = f"a change of at most {self.rules.largest_change:.0%} for a curve that does not fall"
        pool = np.flatnonzero(new == new[k])
        left = {}
        for j in pool[np.argsort(-np.abs(new - self.y)[pool])][:40]:
            rest = np.arange(self.y.size) != j
            left[int(j)] = float(np.max(np.abs(_not_falling(self.y[rest], measure[rest]) - self.y[rest]) / measure[rest]))
        j = min(left, key=left.__getitem__)
        if left[j] <= self.rules.largest_change:
            rest = np.arange(self.y.size) != j
            wanted = float(np.interp(self.x[j], self.x[rest], self.y[rest]))
            self.refuse(
                j,
                f"{self.point(j)}, where the points beside it ask for about {wanted:.4g} {self.y_unit}",
                allowed,
                "check the point against the data sheet, and cut it out if it slipped",
            )
        self.refuse(
            k,
            f"{self.point(k)}, which would have to become {new[k]:.4g} {self.y_unit}",
            allowed,
            "the curve falls over many points: check that columns and file are the right ones",
        )

    def jumps(self):
        """A slip of the decimal point that leaves the curve rising."""
        rise, span = np.diff(self.y), np.diff(self.x)
        if self.rules.logarithmic or rise.size < 3 or self.y[-1] <= self.y[0]:
            return
        slope = rise / span
        usual = max(float(np.median(slope)), 1e-3 * float(slope.max()))
        late = self.x[1:] > 0.1 * self.x[-1]  # the knee of a junction is no jump
        wrong = late & (rise > 0.25 * (self.y[-1] - self.y[0])) & (rise > 0.5 * np.abs(self.y[:-1])) & (slope > 8.0 * usual)
        if wrong.any():
            k = int(np.flatnonzero(wrong)[0])
            self.refuse(
                k + 1,
                f"a jump from {self.point(k)} to {self.point(k + 1)}",
                "a curve that rises steadily",
                "check the decimal point, and that the file holds one curve only",
            )

    def thin(self) -> float:
        most, x, y = self.rules.max_points, np.log(self.x) if self.rules.logarithmic else self.x, self.y
        if most is None or x.size <= 2:
            return 0.0
        measure = self.measure(y)
        held = [0, x.size - 1]
        while True:
            held.sort()
            off = np.abs(np.interp(x, x[held], y[held]) - y) / measure
            k = int(np.argmax(off))
            if off[k] <= self.rules.thin_within or len(held) >= most:
                break
            held.append(k)
        out = np.ones(x.size, bool)
        out[held] = False
        for j in np.flatnonzero(out):
            self.note(self.places[j], self.x[j], self.x[j], self.y[j], None, THINNED)
        if off[k] > self.rules.thin_within:
            self.notes.append(
                f"{most} points do not follow the curve within {self.rules.thin_within:.2%}; raise max_points under [cleaning] if that matters"
            )
        self.keep(~out)
        return float(off[k])
