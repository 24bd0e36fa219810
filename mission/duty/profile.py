"""A duty as rows in blocks: checked once, read again for every use, never held whole."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

import numpy as np

from ..errors import InputError, RangeError
from .spec import ColumnSpec
from .units import ALL_QUANTITIES, QUANTITIES, conversion

WHOLE_MISSION = "whole mission"


def shown(value) -> str:
    """A value in quotes, as a message shows it: short, nothing invisible.

    Examples
    --------
    >>> shown("a\\ufeffb"), shown(2.5)
    ("'a\\\\ufeffb'", '2.5')
    """
    text = repr(value)
    return text if len(text) <= 60 else text[:57] + "..."


@dataclass(frozen=True)
class ProfileBlock:
    """Some rows of a duty, in our units.

    Attributes
    ----------
    time_s : ndarray, shape (n,)
        Start of each row, from the mission's start.
    dt_s : ndarray, shape (n,)
        How long each row holds, above zero.
    columns : dict of ndarray, shape (n,)
        ``current_a`` (rms, negative generating), ``torque_nm``, ``speed_rad_s``,
        ``frequency_hz``, ``mod_index``, ``phi_rad``, ``coolant_c``, ``flow_m3_per_s``, ``dc_voltage_v``: those that are there.
    phase_id : ndarray of int16, shape (n,)
        Index into the profile's phases.
    first_row : int
        Number of rows before this block.

    Examples
    --------
    >>> import numpy as np
    >>> block = ProfileBlock(np.array([0.0, 1.0]), np.array([1.0, 4.0]), {"current_a": np.array([100.0, 0.0])}, np.zeros(2, np.int16), 0)
    >>> float(block.dt_s @ block.columns["current_a"])  # ampere seconds: every row is held until the next
    100.0
    """

    time_s: np.ndarray
    dt_s: np.ndarray
    columns: dict[str, np.ndarray]
    phase_id: np.ndarray
    first_row: int


#: A source gives, anew at each call, blocks of raw columns: {quantity: array}. ``phase`` comes as (codes, words):
#: the word of row k is words[codes[k]]; so a word is looked at once a block, not once a row.
Source = Callable[[int], Iterator[dict]]


@dataclass(frozen=True)
class MissionProfile:
    """A checked duty.

    Attributes
    ----------
    name, source : str
    rows : int
        Rows that hold for a time (the closing row is not counted).
    duration_s : float
    phases : tuple of str
        In order of first appearance; ``("whole mission",)`` without a phase column.
    quantities : frozenset of str
        Our names of the columns that are there.
    ranges : dict
        Name -> (lowest, highest).
    time_by_phase_s : tuple of float
    longest_step_s, shortest_step_s : float
    notes : tuple of str
        What a result must repeat.

    Examples
    --------
    >>> import pandas as pd
    >>> from mission.duty import profile_from_frame
    >>> frame = pd.DataFrame({"t": [0.0, 1.0, 3.0], "I": [80.0, -40.0, 0.0], "what": ["haul", "lower", "lower"]})
    >>> duty = profile_from_frame(frame, {"time": {"column": "t", "unit": "s"}, "current": {"column": "I", "unit": "A rms"}, "phase": "what"})
    >>> duty.phases, duty.time_by_phase_s
    (('haul', 'lower'), (1.0, 2.0))
    >>> [b.columns["current_a"].tolist() for b in duty.blocks(rows=1)]
    [[80.0], [-40.0]]
    """

    name: str
    source: str
    rows: int
    duration_s: float
    phases: tuple[str, ...]
    quantities: frozenset
    ranges: dict[str, tuple[float, float]]
    time_by_phase_s: tuple[float, ...]
    longest_step_s: float
    shortest_step_s: float
    notes: tuple[str, ...]
    _reader: _Reader = field(repr=False)

    def blocks(self, rows: int = 65536) -> Iterator[ProfileBlock]:
        """The rows in order, at most ``rows`` at a time; a file is read again.

        Raises
        ------
        RangeError
            ``rows`` is not a whole number above zero.
        InputError
            The file is no longer what it was when it was checked.
        """
        if isinstance(rows, bool) or not isinstance(rows, (int, np.integer)) or rows < 1:
            raise RangeError("rows", f"{rows!r}", "a whole number of at least 1")
        return self._reader.blocks(int(rows), self.phases)

    def place(self, row: int) -> str:
        """Where row ``row`` (0 is the first) stands in the source: its line in a CSV file, else its number from 1."""
        return self._reader.place(int(row))

    def to_frame(self):
        """The whole duty in our units as a DataFrame, a row for each row that holds for a time."""
        import pandas as pd

        parts = [pd.DataFrame({"time_s": b.time_s, "dt_s": b.dt_s, **b.columns, "phase": np.array(self.phases, dtype=object)[b.phase_id]})
                 for b in self.blocks()]
        return pd.concat(parts, ignore_index=True)


class _Words:
    """Numbers words in the order in which they come, over all blocks."""

    def __init__(self, words):
        self.words = list(words)
        self._index = {w: k for k, w in enumerate(self.words)}

    def number(self, codes, words):
        """Numbers (n,) for a block's (codes, words); words that no row uses get none."""
        table = np.array([self._index.get(w, -1) for w in words], np.int64)
        if (table < 0).any():
            used, first = np.unique(codes, return_index=True)
            for code in used[np.argsort(first)]:
                if table[code] < 0:
                    table[code] = self._index[words[code]] = len(self.words)
                    self.words.append(words[code])
        return table[codes]


@dataclass(frozen=True)
class _Reader:
    """Turns raw blocks of a source into checked blocks."""

    source: Source
    label: str
    columns: dict  # quantity -> ColumnSpec
    place: Callable[[int], str]  # row number (0-based) -> words for a message
    longest_step_s: float
    last_row_lasts_s: float | None

    def blocks(self, rows: int, phases: tuple[str, ...] | None) -> Iterator[ProfileBlock]:
        """Checked blocks; with ``phases`` None the names are gathered in ``self.found``."""
        scales = {q: conversion(q, c.unit, f"duty.columns.{q}") for q, c in self.columns.items()}
        seen = _Words(phases or ())
        names = list(phases) if phases is not None else []
        held: dict[str, np.ndarray] | None = None
        origin = None
        before = 0
        for raw in self.source(rows):
            if raw["time"].size == 0:  # e.g. an empty row group
                continue
            block = self._convert(raw, scales, before if held is None else before + 1, seen)
            if origin is None:
                origin = block["time"][0]
            if held is not None:
                block = {q: np.concatenate([held[q], block[q]]) for q in block}
            n = block["time"].size
            if n < 2:
                held = block
                continue
            self._check_steps(block["time"], before)
            yield self._block(block, n - 1, origin, before, names, seen, phases is None, np.diff(block["time"]))
            before += n - 1
            held = {q: v[n - 1:] for q, v in block.items()}
        if held is None:
            raise InputError(self.label, "a header without rows", "at least two rows, or one with last_row_lasts_s", "check the export of the table")
        if self.last_row_lasts_s is not None:
            yield self._block(held, 1, origin, before, names, seen, phases is None, np.array([self.last_row_lasts_s]))
        elif before == 0:
            raise InputError(self.label, "a single row, which lasts for no time", "at least two rows (the last one closes the mission)",
                             "add a closing row, or give last_row_lasts_s under [duty]")
        if phases is None:
            object.__setattr__(self, "found", tuple(names) if "phase" in self.columns else (WHOLE_MISSION,))

    def whole(self) -> dict[str, np.ndarray]:
        """All columns in our units at once, checked, the closing row included."""
        scales = {q: conversion(q, c.unit, f"duty.columns.{q}") for q, c in self.columns.items()}
        parts: dict[str, list] = {q: [] for q in self.columns}
        before = 0
        for raw in self.source(65536):
            for q, values in self._convert(raw, scales, before, _Words(())).items():
                parts[q].append(values)
            before += raw["time"].size
        if before < 2:
            raise InputError(self.label, "a header without rows" if before == 0 else "a single row", "at least two rows", "check the export of the table")
        out = {q: np.concatenate(v) for q, v in parts.items()}
        self._check_steps(out["time"], 0)
        return out

    def _convert(self, raw, scales, first, seen):
        out = {}
        for quantity, (factor, offset) in scales.items():
            values = raw[quantity]
            if quantity == "phase":
                out[quantity] = seen.number(*values)
                continue
            bad = ~np.isfinite(values)
            if bad.any():
                self._refuse(quantity, first + int(np.flatnonzero(bad)[0]), f"value {values[np.flatnonzero(bad)[0]]:g}", "a finite number",
                             "correct the row or cut it out; nothing is filled in")
            limits = ALL_QUANTITIES[quantity]
            ours = values if factor == 1.0 and offset == 0.0 else factor * (values + offset)
            bad = (ours < limits.low) | (ours > limits.high)
            if bad.any():
                k = int(np.flatnonzero(bad)[0])
                unit = self.columns[quantity].unit
                low, high = limits.low / factor - offset, limits.high / factor - offset
                self._refuse(quantity, first + k, f"value {values[k]:.10g}{' ' + unit if unit else ''}",
                             f"{low:.6g} to {high:.6g}{' ' + unit if unit else ''}", limits.why)
            out[quantity] = ours
        return out

    def _check_steps(self, time, before):
        step = np.diff(time)
        if (step <= 0.0).any():
            k = int(np.flatnonzero(step <= 0.0)[0])
            words = f"time {self._instant(time[k + 1])} after {self._instant(time[k])}" if step[k] < 0.0 else f"the time {self._instant(time[k + 1])} twice"
            self._refuse("time", before + k + 1, words, "times that rise from row to row", "sort the rows, or cut the double")
        if (step > self.longest_step_s * (1.0 + 1e-9)).any():
            k = int(np.flatnonzero(step > self.longest_step_s * (1.0 + 1e-9))[0])
            self._refuse("time", before + k + 1, f"a step of {step[k]:.6g} s after {self._instant(time[k])}", f"steps up to {self.longest_step_s:g} s",
                         "fill the gap, or allow it on purpose with longest_step_s under [duty] (the row before it is then held); or check the unit of time")

    def _instant(self, time_s):
        """A time as the user's file has it."""
        unit = self.columns["time"].unit
        if unit == "datetime":
            stamp = np.datetime64(0, "us") + np.timedelta64(round(float(time_s) * 1e6), "us")
            return str(stamp).removesuffix("000").removesuffix(".000") + " (UTC)"
        return f"{time_s / QUANTITIES['time'].units[unit][0]:.10g} {unit}"

    def _block(self, block, n, origin, before, names, seen, gather, dt):
        columns = {}
        for quantity in self.columns:
            if quantity in ("time", "phase"):
                continue
            if quantity == "power_factor":
                columns["phi_rad"] = np.arccos(block[quantity][:n])
            else:
                columns[QUANTITIES[quantity].column] = block[quantity][:n]
        if "phase" in block:
            phase_id = self._phase_ids(block["phase"][:n], before, names, seen.words, gather)
        else:
            phase_id = np.zeros(n, np.int16)
        return ProfileBlock(block["time"][:n] - origin, dt, columns, phase_id, before)

    def _phase_ids(self, numbers, before, names, words, gather):
        """Words get numbers as they come, so those beyond ``names`` are new; a closing row's own word never gets here."""
        for number in range(len(names), int(numbers.max()) + 1):
            word = words[number]
            if not isinstance(word, str) or not word.strip():
                self._refuse("phase", before + int(np.argmax(numbers == number)), f"value {shown(word)}", "a word for what the drive is doing",
                             "name the phase in every row")
            if not gather:
                raise InputError(self.label, f"a phase {shown(word)} that was not there when the file was checked", "a file that does not change during a run")
            names.append(word)
            if len(names) > 200:
                self._refuse("phase", before + int(np.argmax(numbers == number)), "more than 200 different phases", "a few words for what the drive is doing",
                             "map another column, or none")
        return numbers.astype(np.int16)

    def _refuse(self, quantity, row, found, allowed, advice):
        raise InputError(f"{self.label}, {self.place(row)}, column '{self.columns[quantity].column}'", found, allowed, advice)


def checked(reader: _Reader, name: str) -> MissionProfile:
    """Read a duty through once, refuse it or sum it up."""
    ranges: dict[str, tuple[float, float]] = {}
    rows = 0
    longest, shortest, duration = 0.0, np.inf, 0.0
    time_by_phase = np.zeros(256)
    for block in reader.blocks(65536, None):
        rows += block.dt_s.size
        longest, shortest = max(longest, float(block.dt_s.max())), min(shortest, float(block.dt_s.min()))
        duration = float(block.time_s[-1] + block.dt_s[-1])
        time_by_phase += np.bincount(block.phase_id, weights=block.dt_s, minlength=256)
        for key, values in block.columns.items():
            low, high = float(values.min()), float(values.max())
            old = ranges.get(key, (low, high))
            ranges[key] = (min(low, old[0]), max(high, old[1]))
    notes = []
    for quantity, column in reader.columns.items():
        ours = QUANTITIES[quantity].column
        if quantity not in ("time", "phase"):
            notes.append(f"column '{column.column}'" + (f" in {column.unit}" if column.unit else "") + f" read as {'phi_rad' if quantity == 'power_factor' else ours}")
    if "power_factor" in reader.columns:
        notes.append("a power factor does not say whether the current lags or leads; it is taken as lagging")
    if longest > 10.0 * shortest:
        notes.append(f"uneven steps: {shortest:g} to {longest:g} s; every row is held until the next")
    if reader.last_row_lasts_s is None:
        notes.append("the last row closes the mission; its values are not used")
    else:
        notes.append(f"the last row lasts {reader.last_row_lasts_s:g} s, as told")
    phases = reader.found
    return MissionProfile(name, reader.label, rows, duration, phases, frozenset(ranges), ranges,
                          tuple(time_by_phase[: len(phases)].tolist()), longest, float(shortest), tuple(notes), replace(reader))


@dataclass(frozen=True)
class _HeldRows:
    """Raw blocks of a duty whose rows are held in memory."""

    columns: dict

    def __call__(self, rows):
        for a in range(0, self.columns["time"].size, rows):
            yield {q: (v[0][a:a + rows], v[1]) if q == "phase" else v[a:a + rows] for q, v in self.columns.items()}


def _row_number(row: int) -> str:
    return f"row {row + 1}"


def profile_from_rows(name, source, time_s, torque_nm, speed_rad_s, phase, *, notes=()) -> MissionProfile:
    """A duty from rows that were reckoned, checked like one from a file.

    Parameters
    ----------
    name, source : str
        Name of the duty, and what made it.
    time_s : array_like, shape (n + 1,)
        Start of each row, and the end of the last one. [s]
    torque_nm, speed_rad_s : array_like, shape (n,)
        At the motor's shaft; their product is the shaft's power.
    phase : tuple of (array_like of int, shape (n,)) and (sequence of str)
        Codes, and the words they stand for.
    notes : sequence of str
        What a result must repeat.

    Returns
    -------
    MissionProfile

    Raises
    ------
    InputError
        A value that cannot be, with row and column.

    Examples
    --------
    >>> duty = profile_from_rows("haul", "an example", [0.0, 2.0, 5.0], [40.0, 0.0], [10.0, 0.0], ([0, 1], ["haul", "rest"]))
    >>> duty.duration_s, duty.phases, duty.ranges["torque_nm"]
    (5.0, ('haul', 'rest'), (0.0, 40.0))
    """
    columns = {"time": np.array(time_s, float), "torque": np.append(np.asarray(torque_nm, float), 0.0),
               "speed": np.append(np.asarray(speed_rad_s, float), 0.0), "phase": (np.append(phase[0], phase[0][-1]), list(phase[1]))}
    for q, values in columns.items():
        (values[0] if q == "phase" else values).flags.writeable = False  # blocks are views of them
    units = {"time": "s", "torque": "N m", "speed": "rad/s", "phase": None}
    reader = _Reader(_HeldRows(columns), source, {q: ColumnSpec(column=q, unit=u) for q, u in units.items()}, _row_number, np.inf, None)
    return replace(checked(reader, name), notes=tuple(notes))
