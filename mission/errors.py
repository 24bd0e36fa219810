"""The errors a user can meet, and how they are worded.

Every message says where (file, row or field), what stands there, what is
allowed and what to do next. ``InputError`` ends a command with exit code 2.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable


class MissionError(Exception):
    """Base of all errors raised on purpose by this package."""


class InputError(MissionError):
    """Something the user gave cannot be used.

    Parameters
    ----------
    where : str
        File and row, or file and field, or the name of the argument.
    found : str
        What stands there, as a short phrase that quotes the value.
    allowed : str
        What would be right.
    advice : str, optional
        What to do next.

    Examples
    --------
    >>> print(InputError("day.csv, row 12, column 'amps'", "value 'n/a'",
    ...                  "a finite number", "correct the row or cut it out"))
    day.csv, row 12, column 'amps': found value 'n/a'; allowed: a finite number. What to do: correct the row or cut it out.
    """

    def __init__(self, where: str, found: str, allowed: str, advice: str = ""):
        self.where, self.found, self.allowed, self.advice = where, found, allowed, advice
        text = f"{where}: found {found}; allowed: {allowed}."
        if advice:
            text += f" What to do: {advice}" + ("" if advice[-1] in ".?!" else ".")
        super().__init__(text)

    def at(self, prefix: str) -> InputError:
        """The same error with a file or section named in front of its place."""
        return type(self)(f"{prefix}: {self.where}", self.found, self.allowed, self.advice)


class RangeError(InputError, ValueError):
    """A number passed to a function lies outside the range the function stands for."""


class NoStableTemperature(MissionError):
    """The losses rise faster with temperature than the cooling carries away."""


def near_match(word: str, choices: Iterable[str]) -> str:
    """Offer the closest allowed name, or an empty string.

    Examples
    --------
    >>> near_match("coolnig", ["cooling", "duty"])
    "did you mean 'cooling'?"
    >>> near_match("zzz", ["cooling", "duty"])
    ''
    """
    hit = difflib.get_close_matches(str(word), [str(c) for c in choices], n=1, cutoff=0.6)
    return f"did you mean '{hit[0]}'?" if hit else ""
