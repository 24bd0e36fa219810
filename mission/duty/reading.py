"""Doors for duties: CSV, Parquet, DataFrame."""

from __future__ import annotations

import codecs
import csv
import io
from pathlib import Path

import numpy as np

from ..errors import InputError, near_match
from ..tomlfile import parse_model
from .profile import MissionProfile, _Reader, checked
from .spec import ColumnMap, DutySpec
from .units import conversion

_CSV_ENDINGS, _PARQUET_ENDINGS = (".csv", ".txt", ".tsv"), (".parquet", ".pq")


def read_profile(spec: DutySpec, folder=".") -> MissionProfile:
    """Read and check the duty that ``[duty]`` of a study names.

    Parameters
    ----------
    spec : DutySpec
    folder : path-like
        A relative path counts from here (the study's folder).

    Returns
    -------
    MissionProfile

    Raises
    ------
    InputError
        First thing that is wrong, with file, line, column and value.
    """
    path = Path(spec.file) if Path(spec.file).is_absolute() else Path(folder) / spec.file
    label = str(path)
    if path.is_dir():
        raise InputError(label, "a folder", "a CSV or Parquet file")
    if not path.exists():
        there = [p.name for p in path.parent.iterdir() if p.suffix.lower() in _CSV_ENDINGS + _PARQUET_ENDINGS] if path.parent.is_dir() else []
        raise InputError(label, "no such file", "a CSV or Parquet file", near_match(path.name, there) or "paths count from the study file")
    ending = path.suffix.lower()
    if ending not in _CSV_ENDINGS + _PARQUET_ENDINGS:
        raise InputError(label, f"the ending '{path.suffix}'", ", ".join(_CSV_ENDINGS + _PARQUET_ENDINGS), "name the file by what it holds")
    if path.stat().st_size == 0:
        raise InputError(label, "an empty file", "a header line and rows")
    columns = spec.columns.given()
    for quantity, column in columns.items():
        conversion(quantity, column.unit, f"field duty.columns.{quantity}")
    if ending in _PARQUET_ENDINGS:
        source, place = _parquet_source(path, label, columns), _row_place
    else:
        source, place = _csv_source(path, label, columns, spec), _line_place
    reader = _Reader(source, label, columns, place, spec.longest_step_s, spec.last_row_lasts_s)
    return checked(reader, spec.name or path.stem)


def profile_from_frame(frame, columns, *, name: str = "duty", longest_step_s: float = 60.0, last_row_lasts_s: float | None = None) -> MissionProfile:
    """A duty from a pandas DataFrame.

    Parameters
    ----------
    frame : pandas.DataFrame
    columns : dict
        Quantity -> column name, or {"column": ..., "unit": ...}, as in a study file.
    name : str
    longest_step_s, last_row_lasts_s : float
        As in a study file.

    Examples
    --------
    >>> import pandas as pd
    >>> frame = pd.DataFrame({"t": [0.0, 5.0, 15.0], "I": [150.0, 0.0, 0.0], "n": [600.0, 0.0, 0.0]})
    >>> duty = profile_from_frame(frame, {"time": {"column": "t", "unit": "s"}, "current": {"column": "I", "unit": "A peak"},
    ...                                   "speed": {"column": "n", "unit": "rpm"}})
    >>> duty.rows, duty.duration_s, round(duty.ranges["current_a"][1], 4)
    (2, 15.0, 106.066)
    """
    given = parse_model({q: {"column": c} if isinstance(c, str) else c for q, c in dict(columns).items()}, ColumnMap, "columns").given()
    for quantity, column in given.items():
        conversion(quantity, column.unit, f"columns.{quantity}")
    _need_columns("DataFrame", given, [str(c) for c in frame.columns])
    raw = {}
    for quantity, column in given.items():
        series = frame[column.column]
        if quantity == "phase":
            raw[quantity] = series.to_numpy(dtype=object)
        elif quantity == "time" and column.unit == "datetime":
            raw[quantity] = _datetimes(series, "DataFrame", column.column, _row_place)
        else:
            raw[quantity] = _numbers(series, "DataFrame", column.column)

    def source(rows):
        n = len(frame)
        for a in range(0, n, rows):
            yield {q: v[a:a + rows] for q, v in raw.items()}

    return checked(_Reader(source, "DataFrame", given, _row_place, longest_step_s, last_row_lasts_s), name)


def _numbers(series, label, column):
    import pandas as pd

    if pd.api.types.is_bool_dtype(series) or not pd.api.types.is_numeric_dtype(series):
        for k, value in enumerate(series):
            if isinstance(value, bool) or not isinstance(value, (int, float, np.number)):
                raise InputError(f"{label}, row {k + 1}, column '{column}'", f"value {value!r}", "a number", "convert the column to numbers")
    return series.to_numpy(dtype=float, na_value=np.nan)


def _datetimes(series, label, column, place):
    import pandas as pd

    try:
        stamps = pd.to_datetime(series, format="ISO8601", utc=True)
    except (ValueError, TypeError):
        for k, value in enumerate(series):
            try:
                pd.to_datetime(value, format="ISO8601", utc=True)
            except (ValueError, TypeError):
                raise InputError(f"{label}, {place(k)}, column '{column}'", f"value {value!r}", "an ISO 8601 date and time such as 2031-05-04T06:30:00") from None
        raise InputError(f"{label}, column '{column}'", "mixed time stamps", "ISO 8601 dates and times") from None
    # NaT becomes NaN and is refused with its row
    return (stamps - pd.Timestamp(0, tz="UTC")).dt.total_seconds().to_numpy(dtype=float, na_value=np.nan)


def _row_place(row: int) -> str:
    return f"row {row + 1}"


def _line_place(row: int) -> str:
    return f"line {row + 2}"


def _need_columns(label, columns, there):
    for quantity, column in columns.items():
        if column.column not in there:
            raise InputError(f"{label}, field duty.columns.{quantity}.column", f"no column '{column.column}'", "one of " + ", ".join(f"'{c}'" for c in there[:40]),
                             near_match(column.column, there) or "copy the name from the file's header")


# ---------------------------------------------------------------- Parquet
def _parquet_source(path, label, columns):
    import pyarrow as pa
    import pyarrow.parquet as pq

    try:
        file = pq.ParquetFile(path)
        there, kinds = file.schema_arrow.names, {f.name: f.type for f in file.schema_arrow}
        file.close()
    except (pa.ArrowInvalid, OSError) as err:
        raise InputError(label, f"a file that is not Parquet ({str(err).splitlines()[0]})", "a Parquet file") from None
    _need_columns(label, columns, there)
    for quantity, column in columns.items():
        kind = kinds[column.column]
        number = pa.types.is_integer(kind) or pa.types.is_floating(kind) or pa.types.is_decimal(kind)
        text = pa.types.is_string(kind) or pa.types.is_large_string(kind) or pa.types.is_dictionary(kind)
        stamp = pa.types.is_timestamp(kind)
        if quantity == "phase":
            right = text
        elif quantity == "time" and column.unit == "datetime":
            right = stamp or text
        else:
            right = number
        if not right:
            wanted = "text" if quantity == "phase" else ("time stamps" if column.unit == "datetime" else "numbers")
            raise InputError(f"{label}, column '{column.column}'", f"values of type {kind}", wanted, "convert the column")

    def source(rows):
        with pq.ParquetFile(path) as file:
            done = 0
            for batch in file.iter_batches(batch_size=rows, columns=[c.column for c in columns.values()]):
                yield {q: _arrow_values(batch.column(c.column), q, c, label, done, _row_place) for q, c in columns.items()}
                done += batch.num_rows

    return source


def _arrow_values(column, quantity, spec, label, first, place):
    import pyarrow as pa

    if column.null_count:
        k = int(np.flatnonzero(column.is_null().to_numpy(zero_copy_only=False))[0])
        raise InputError(f"{label}, {place(first + k)}, column '{spec.column}'", "an empty value", "a value in every row", "nothing is filled in: correct the row or cut it out")
    if quantity == "phase":
        return column.to_numpy(zero_copy_only=False)
    if quantity == "time" and spec.unit == "datetime":
        import pandas as pd

        series = column.to_pandas() if pa.types.is_timestamp(column.type) else pd.Series(column.to_numpy(zero_copy_only=False))
        if pa.types.is_timestamp(column.type):
            series = pd.to_datetime(series, utc=True)
            return (series - pd.Timestamp(0, tz="UTC")).dt.total_seconds().to_numpy(dtype=float)
        return _datetimes(series, label, spec.column, lambda k: place(first + k))
    return column.cast(pa.float64(), safe=False).to_numpy(zero_copy_only=False)


# -------------------------------------------------------------------- CSV
def _csv_source(path, label, columns, spec):
    try:
        codecs.lookup(spec.encoding)
    except LookupError:
        raise InputError("field duty.encoding", f"'{spec.encoding}'", "a text encoding such as utf-8, cp1252, latin-1") from None
    header = _csv_header(path, label, spec)
    wanted = [c.column for c in columns.values()]
    if len(header) == 1 and len(columns) > 1:
        other = [d for d in ";\t,|" if d != spec.delimiter and d in header[0]]
        sign = {"\t": "\\t"}.get(other[0], other[0]) if other else ""
        raise InputError(f"{label}, line 1", f"a single column '{header[0][:60]}'", f"columns divided by '{spec.delimiter}'",
                         f'set delimiter = "{sign}" under [duty]' if other else "check the file")
    if all(_is_number(h, spec.decimal) for h in header if h):
        raise InputError(f"{label}, line 1", f"numbers ({', '.join(header[:4])} ...)", "a header line with the names of the columns", "put a header line on top")
    doubled = sorted({h for h in header if header.count(h) > 1 and h in wanted})
    if doubled:
        raise InputError(f"{label}, line 1", f"the column name '{doubled[0]}' {header.count(doubled[0])} times", "every name once", "rename one of the columns")
    _need_columns(label, columns, header)

    def source(rows):
        import pyarrow as pa
        import pyarrow.csv as pc

        types = {c.column: pa.string() if q == "phase" or c.unit == "datetime" else pa.float64() for q, c in columns.items()}
        done = 0
        held: list = []
        waiting = 0
        try:
            with pc.open_csv(
                path, read_options=pc.ReadOptions(block_size=4 << 20, encoding=spec.encoding),
                parse_options=pc.ParseOptions(delimiter=spec.delimiter, newlines_in_values=False, ignore_empty_lines=True),
                convert_options=pc.ConvertOptions(column_types=types, include_columns=wanted, null_values=[], strings_can_be_null=False,
                                                  quoted_strings_can_be_null=False, decimal_point=spec.decimal)) as reader:
                for batch in reader:
                    held.append(batch)
                    waiting += batch.num_rows
                    while waiting >= rows:
                        table = pa.Table.from_batches(held)
                        yield _csv_values(table.slice(0, rows), columns, label, done)
                        done += rows
                        waiting -= rows
                        held = table.slice(rows).to_batches()
            if waiting:
                yield _csv_values(pa.Table.from_batches(held), columns, label, done)
        except (pa.ArrowInvalid, pa.ArrowKeyError, UnicodeDecodeError, OSError) as err:
            _find_fault(path, label, columns, spec, header)
            raise InputError(label, f"text that cannot be read as CSV ({str(err).splitlines()[0][:160]})", "one row a line, numbers and names as the header promises") from None

    return source


def _csv_values(table, columns, label, done):
    return {q: _arrow_values(table.column(c.column).combine_chunks(), q, c, label, done, _line_place) for q, c in columns.items()}


def _csv_header(path, label, spec):
    with open(path, "rb") as file:
        start = file.read(1 << 16)
    if b"\x00" in start and not spec.encoding.lower().replace("-", "").startswith("utf16"):
        raise InputError(label, "bytes that are no text (a zero byte near the start)", f"text in {spec.encoding}", "export the table as CSV text, or name its encoding")
    line = start.split(b"\n", 1)[0]
    try:
        text = line.decode("utf-8-sig" if spec.encoding.lower().replace("_", "-") in ("utf-8", "utf8") else spec.encoding)
    except UnicodeDecodeError as err:
        raise InputError(f"{label}, line 1", f"byte 0x{line[err.start]:02x}, which is not {spec.encoding}", f"text in {spec.encoding}",
                         "name the file's encoding under [duty], e.g. encoding = \"cp1252\"") from None
    rows = list(csv.reader([text.rstrip("\r")], delimiter=spec.delimiter))
    if not rows or not rows[0]:
        raise InputError(f"{label}, line 1", "an empty line", "a header line with the names of the columns")
    return rows[0]


def _is_number(text, decimal):
    try:
        float(text.replace(decimal, ".") if decimal != "." else text)
    except ValueError:
        return False
    return True


def _find_fault(path, label, columns, spec, header):
    """Go through the file line by line for the first thing that is wrong, and say it."""
    index = {q: header.index(c.column) for q, c in columns.items()}
    encoding = "utf-8-sig" if spec.encoding.lower().replace("_", "-") in ("utf-8", "utf8") else spec.encoding
    with open(path, "rb") as raw:
        for number, line in enumerate(raw, 1):
            try:
                text = line.decode(encoding if number == 1 or encoding != "utf-8-sig" else "utf-8")
            except UnicodeDecodeError as err:
                raise InputError(f"{label}, line {number}", f"byte 0x{line[err.start]:02x}, which is not {spec.encoding}", f"text in {spec.encoding}",
                                 "name the file's encoding under [duty], e.g. encoding = \"cp1252\"") from None
            if number == 1 or not text.strip("\r\n"):
                continue
            fields = next(csv.reader(io.StringIO(text), delimiter=spec.delimiter), [])
            if len(fields) != len(header):
                advice = "a decimal comma in a file divided by commas? set delimiter and decimal under [duty]" if len(fields) > len(header) else "complete the row"
                raise InputError(f"{label}, line {number}", f"{len(fields)} fields", f"{len(header)} fields, as in the header", advice)
            for quantity, column in columns.items():
                if quantity == "phase" or column.unit == "datetime":
                    continue
                value = fields[index[quantity]]
                if not _is_number(value.strip(), spec.decimal) or (spec.decimal == "," and "." in value):
                    advice = "correct the row or cut it out; nothing is filled in"
                    if "," in value and spec.decimal == ".":
                        advice = "set decimal = \",\" under [duty] if the file has decimal commas"
                    elif "." in value and spec.decimal == ",":
                        advice = "set decimal = \".\" under [duty]"
                    raise InputError(f"{label}, line {number}, column '{column.column}'", f"value '{value}'" if value else "an empty field", "a number", advice)
