"""The ``[duty]`` section of a study."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from ..errors import RangeError
from ..tomlfile import FileModel
from .units import QUANTITIES

DELIMITERS = (",", ";", "\t", "|", " ")
_Positive = Annotated[float, Field(gt=0)]


class ColumnSpec(FileModel):
    """Which column of the file, in which unit.

    Examples
    --------
    >>> ColumnSpec(column="I_motor", unit="A peak").unit
    'A peak'
    """

    column: str = Field(min_length=1)
    unit: str | None = None


class ColumnMap(FileModel):
    """The user's columns by what they mean.

    Time, and current or torque, are always needed. What else is, the kind of machine decides; a study checks that.

    Examples
    --------
    >>> columns = ColumnMap(current={"column": "I", "unit": "A rms"}, time={"column": "t", "unit": "h"})
    >>> list(columns.given())
    ['time', 'current']
    """

    time: ColumnSpec
    current: ColumnSpec | None = None
    torque: ColumnSpec | None = None
    speed: ColumnSpec | None = None
    frequency: ColumnSpec | None = None
    mod_index: ColumnSpec | None = None
    displacement: ColumnSpec | None = None
    power_factor: ColumnSpec | None = None
    coolant: ColumnSpec | None = None
    flow: ColumnSpec | None = None
    dc_voltage: ColumnSpec | None = None
    phase: ColumnSpec | None = None

    def given(self) -> dict[str, ColumnSpec]:
        """Only those that are there, in our order."""
        return {q: c for q in QUANTITIES if (c := getattr(self, q)) is not None}

    @model_validator(mode="after")
    def _consistent(self):
        if self.displacement is not None and self.power_factor is not None:
            raise RangeError("power_factor", "both displacement and power_factor", "one of them", "take one out")
        if self.current is None and self.torque is None:
            raise RangeError("current", "neither current nor torque", "a column for current or torque", "map the column: current = { column = \"...\", unit = \"A rms\" }")
        seen: dict[str, str] = {}
        for quantity, spec in self.given().items():
            if spec.column in seen:
                raise RangeError(quantity, f"column '{spec.column}' used for {seen[spec.column]} and {quantity}", "a column of its own for each quantity")
            seen[spec.column] = quantity
        return self


class TableFile(FileModel):
    """How a table of a user is written: signs, encoding, the longest step that is no gap."""

    delimiter: str = ","
    decimal: str = "."
    encoding: str = "utf-8"
    longest_step_s: _Positive = 60.0

    @model_validator(mode="after")
    def _signs(self):
        if self.delimiter not in DELIMITERS:
            raise RangeError("delimiter", f"{self.delimiter!r}", "one of " + " ".join(repr(d) for d in DELIMITERS), "use the sign between the columns of the file")
        if self.decimal not in (".", ","):
            raise RangeError("decimal", f"{self.decimal!r}", "a point \".\" or a comma \",\"")
        if self.delimiter == self.decimal:
            raise RangeError("decimal", f"'{self.decimal}' for both delimiter and decimal", "two different signs")
        return self


class DutySpec(TableFile):
    """Where the duty comes from and how its columns are read.

    Examples
    --------
    >>> spec = DutySpec(file="day.csv", columns={"time": {"column": "t", "unit": "s"}, "torque": {"column": "M", "unit": "N m"}}, delimiter=";")
    >>> spec.delimiter, spec.decimal, spec.longest_step_s
    (';', '.', 60.0)
    """

    file: str = Field(min_length=1)
    columns: ColumnMap
    name: str | None = None
    last_row_lasts_s: _Positive | None = None
