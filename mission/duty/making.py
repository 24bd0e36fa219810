"""What every recipe has: the rows that it collects, its door, and the sharing of loads over cycles.

Torque and speed are those of the motor's shaft, and their product is its power: above zero the motor drives, below zero
it generates. The rows hold (zero-order hold); while the speed changes they are means, see ``moves.Move.rows``.
"""

from __future__ import annotations

import math
from abc import abstractmethod
from typing import Annotated

import numpy as np
from pydantic import Field

from ..errors import RangeError, near_match
from ..tomlfile import FileModel, parse_model
from .moves import NOTHING_S
from .profile import MissionProfile, profile_from_rows

Positive = Annotated[float, Field(gt=0)]
NotNegative = Annotated[float, Field(ge=0)]
Efficiency = Annotated[float, Field(gt=0, le=1)]
#: Standard acceleration of free fall [m/s2]; exact by convention (3rd General Conference on Weights and Measures, 1901).
GRAVITY_M_PER_S2 = 9.80665
RAD_S_PER_RPM = math.pi / 30.0
#: More rows than this are a slip of a step or of a duration, not a duty.
MOST_ROWS = 20_000_000


class Rows:
    """Rows in the order in which they come.

    Examples
    --------
    >>> rows = Rows()
    >>> rows.add(2.0, 30.0, 5.0, "haul")
    >>> rows.add([0.5, 0.5], [10.0, 5.0], 0.0, "rest")
    >>> rows.duration_s, rows.count
    (3.0, 3)
    """

    def __init__(self):
        self._codes: dict[str, int] = {}
        self._parts: list = []
        self.duration_s, self.count = 0.0, 0
        self._lost_s = 0.0  # what rounding took from the sum (Kahan), so that a day of many rows stays a day

    def add(self, dt_s, torque_nm, speed_rad_s, phase):
        """Add rows; ``dt_s`` a number or an array (n,), the others likewise or one for all. A row that lasts for no time is left out."""
        dt = np.atleast_1d(np.asarray(dt_s, float))
        kept = dt > NOTHING_S
        torque, speed = (np.broadcast_to(np.asarray(v, float), dt.shape)[kept] for v in (torque_nm, speed_rad_s))
        if isinstance(phase, str):
            codes = np.full(dt.shape, self._codes.setdefault(phase, len(self._codes)))
        else:
            codes = np.array([self._codes.setdefault(p, len(self._codes)) for p in phase], int)
        self._join(dt[kept], torque, speed, codes[kept])

    def extend(self, rows: Rows):
        """Add all rows of another collection."""
        table = np.array([self._codes.setdefault(p, len(self._codes)) for p in rows._codes], int)
        for _, dt, torque, speed, codes in rows._parts:
            self._join(dt, torque, speed, table[codes])

    def rest_until(self, time_s, phase):
        """A row without torque and speed up to ``time_s`` from the start."""
        self.add(time_s - self.duration_s, 0.0, 0.0, phase)

    def _join(self, dt, torque, speed, codes):
        self.count += dt.size
        if self.count > MOST_ROWS:
            raise RangeError("field duty.step_s", f"more than {MOST_ROWS:,} rows", "fewer", "choose a longer step, or a shorter duty that is repeated")
        if dt.size:
            self._parts.append((self.duration_s, dt, torque, speed, codes.astype(np.int16)))
            more = float(dt.sum()) + self._lost_s
            end = self.duration_s + more
            self.duration_s, self._lost_s = end, more - (end - self.duration_s)

    def profile(self, name, source, notes) -> MissionProfile:
        """The rows as a checked duty."""
        starts, lasts, *columns = zip(*self._parts)
        time = np.concatenate([start + np.cumsum(dt) - dt for start, dt in zip(starts, lasts)] + [[self.duration_s]])
        torque, speed, codes = (np.concatenate(c) for c in columns)
        return profile_from_rows(name, source, np.round(time, 9), torque, speed, (codes, list(self._codes)), notes=notes)


class Recipe(FileModel):
    """A duty that is made, not recorded.

    ``step_s`` is the longest row while the speed changes; stretches in which nothing changes are one row.
    """

    recipe: str
    name: str | None = None
    step_s: Annotated[float, Field(gt=0, le=60)] = 0.1

    def profile(self, folder=".") -> MissionProfile:
        """Make the duty.

        Parameters
        ----------
        folder : path-like
            Files that the recipe names count from here.

        Returns
        -------
        MissionProfile
            Torque [N m] and speed [rad/s] at the motor's shaft, with the names of the phases.

        Raises
        ------
        InputError
            What the recipe gets wrong.
        """
        rows, notes = self._rows(folder)
        notes = (f"made by recipe = '{self.recipe}': torque and speed at the motor's shaft", *notes)
        return rows.profile(self.name or self.recipe, f"recipe '{self.recipe}'", notes)

    def scaled(self, **factors) -> Recipe:
        """The same recipe with some of its numbers multiplied, checked anew.

        Parameters
        ----------
        **factors : float
            Field -> factor; a list of numbers is multiplied number by number.

        Returns
        -------
        Recipe

        Raises
        ------
        InputError
            No such field, a field without a number, or a result that is not allowed.
        """
        data = self.model_dump(exclude_none=True)
        for field, factor in factors.items():
            if field not in data:
                raise RangeError(field, "no such field, or one that is not set", "one of " + ", ".join(data), near_match(field, data))
            if isinstance(factor, bool) or not isinstance(factor, (int, float, np.integer, np.floating)) or not math.isfinite(factor):
                raise RangeError(field, f"a factor {factor!r}", "a finite number")
            data[field] = _times(data[field], float(factor), field)
        return parse_model(data, type(self), f"recipe '{self.recipe}'")

    @abstractmethod
    def _rows(self, folder) -> tuple[Rows, tuple[str, ...]]: ...


def _times(value, factor, field):
    if isinstance(value, (tuple, list)):
        return [_times(v, factor, field) for v in value]
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise RangeError(field, f"{'a section' if isinstance(value, dict) else repr(value)}", "a number, or a list of numbers", "set it anew instead of scaling it")
    out = value * factor
    return int(out) if isinstance(value, int) and out == int(out) else out


class LoadShare(FileModel):
    """One load of a spectrum: the share of cycles that have it, and its size as a share of the largest one.

    Examples
    --------
    >>> LoadShare(share=0.25, load=1.0).share
    0.25
    """

    share: Annotated[float, Field(gt=0, le=1)]
    load: Annotated[float, Field(ge=0, le=1.5)]


FULL_LOAD = (LoadShare(share=1.0, load=1.0),)


def check_spectrum(spectrum):
    """Raise ``RangeError`` unless the shares add up to 1."""
    total = sum(s.share for s in spectrum)
    if abs(total - 1.0) > 1e-6:
        raise RangeError("spectrum", f"shares that add up to {total:g}", "shares that add up to 1", "complete the spectrum")


def loads_in_turn(spectrum, count):
    """Loads of ``count`` cycles, as evenly mixed as their shares allow: no load is ever a whole cycle behind its share.

    Returns
    -------
    ndarray of int, shape (count,)
        Index into the spectrum.

    Notes
    -----
    Cycle j of a load may come once its share has grown to j - 1 cycles and is due when it has grown to j; the one that is due
    first comes. With a single row of turns this keeps every load within one cycle of its share.

    References
    ----------
    .. [1] S. K. Baruah, N. K. Cohen, C. G. Plaxton, D. A. Varvel, "Proportionate progress: a notion of fairness in resource
       allocation", Algorithmica 15, 1996 (from memory).

    Examples
    --------
    >>> loads_in_turn((LoadShare(share=0.75, load=0.4), LoadShare(share=0.25, load=1.0)), 8).tolist()
    [0, 0, 0, 1, 0, 0, 0, 1]
    """
    share = np.array([s.share for s in spectrum])
    given, out = np.zeros(share.size), np.empty(count, int)
    for k in range(count):
        may = given < share * (k + 1) - 1e-9
        due = np.where(may, (given + 1.0) / share, np.inf)
        out[k] = int(np.argmin(due))
        given[out[k]] += 1.0
    return out


def whole_number(field, value, what, advice) -> int:
    """A product that must be a whole number of at least 1, else ``RangeError``."""
    if value < 1.0 - 1e-9 or abs(value - round(value)) > 1e-6 * value:
        raise RangeError(field, f"{value:.6g} {what}", f"a whole number of {what}, at least 1", advice)
    return round(value)


