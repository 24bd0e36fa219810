"""Doors for duties: CSV, Parquet, DataFrame."""

from __future__ import annotations

import codecs
import csv
import re
import sys
from collections.abc import Mapping
from datetime import date
from decimal import Decimal
from pathlib import Path

import numpy as np

from ..checks import require_range
from ..errors import InputError
from ..tomlfile import parse_model
from .profile import MissionProfile, _Reader, checked, shown
from .spec import ColumnMap, DutySpec, TableFile
from .units import conversion, near_name

_LONGEST_LINE = 1 << 20
_ALL_BUT_QUOTES_AND_ENDS = bytes(b for b in range(256) if b not in b'"\n\r')
_ISO_DATE = re.compile(r"\d{4}-\d\d-\d\d", re.ASCII)
_NUMBER = re.compile(r"[+-]?((\d+\.?\d*|\.\d+)(e[+-]?\d+)?|nan|inf(inity)?)", re.ASCII | re.IGNORECASE)
#: What may stand around a number: the same as pyarrow takes, so that both ways through a file agree.
_BLANKS = " \t"
_CSV_ENDINGS, _PARQUET_ENDINGS = (".csv", ".txt", ".tsv"), (".parquet", ".pq")


def read_profile(spec, folder=".") -> MissionProfile:
    """Read, or make, and check the duty that ``[duty]`` of a study names.

    Parameters
    ----------
    spec : DutySpec or Recipe
    folder : path-like
        A relative path counts from here (the study's folder).

    Returns
    -------
    MissionProfile

    Raises
    ------
    InputError
        First thing that is wrong, with file, line, column and value.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> spec = DutySpec.model_validate({"file": "day.csv", "columns": {"time": {"column": "t", "unit": "min"}, "current": {"column": "I", "unit": "A rms"},
    ...                                                                "speed": {"column": "n", "unit": "1/s"}}})
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     _ = (Path(folder) / "day.csv").write_text("t,I,n\\n0,100,5\\n0.5,-40,5\\n1,0,0\\n")
    ...     duty = read_profile(spec, folder)
    >>> duty.rows, duty.duration_s, duty.ranges["current_a"]
    (2, 60.0, (-40.0, 100.0))
    """
    if not isinstance(spec, DutySpec):
        return spec.profile(folder)
    path = Path(folder) / spec.file
    return checked(table_reader(path, spec, spec.columns.given(), spec.last_row_lasts_s), spec.name or path.stem)


def table_reader(path: Path, spec: TableFile, columns: dict, last_row_lasts_s: float | None = None) -> _Reader:
    """A file that is there and has the columns, ready to be read; ``columns``: quantity -> ColumnSpec."""
    label = _printable(str(path))
    try:
        is_folder, is_there, size = path.is_dir(), path.exists(), path.stat().st_size if path.is_file() else None
    except OSError as err:
        raise InputError(label, f"a file that cannot be reached ({err.strerror})", "a CSV or Parquet file") from None
    if is_folder:
        raise InputError(label, "a folder", "a CSV or Parquet file", "name the file in it")
    if not is_there:
        there = [p.name for p in path.parent.iterdir() if p.suffix.lower() in _CSV_ENDINGS + _PARQUET_ENDINGS] if path.parent.is_dir() else []
        raise InputError(label, "no such file", "a CSV or Parquet file", _printable(near_name(path.name, there)) or "paths count from the study file")
    ending = path.suffix.lower()
    if ending not in _CSV_ENDINGS + _PARQUET_ENDINGS:
        raise InputError(label, f"the ending '{path.suffix}'", ", ".join(_CSV_ENDINGS + _PARQUET_ENDINGS), "name the file by what it holds")
    if size is None:
        raise InputError(label, "a device or pipe, which cannot be read twice", "a CSV or Parquet file")
    if size == 0:
        raise InputError(label, "an empty file", "a header line and rows", "check the export of the table")
    for quantity, column in columns.items():
        conversion(quantity, column.unit, f"field duty.columns.{quantity}")
    if ending in _PARQUET_ENDINGS:
        source, place = _parquet_source(path, label, columns), _row_place
    else:
        source, place = _csv_source(path, label, columns, spec), _LinePlace(path, spec)
    return _Reader(source, label, columns, place, spec.longest_step_s, last_row_lasts_s)


def profile_from_frame(frame, columns, *, name: str = "duty", longest_step_s: float = 60.0, last_row_lasts_s: float | None = None) -> MissionProfile:
    """A duty from a pandas DataFrame.

    Parameters
    ----------
    frame : pandas.DataFrame
    columns : dict or ColumnMap
        Quantity -> column name, or {"column": ..., "unit": ...}, as in a study file.
    name : str
    longest_step_s, last_row_lasts_s : float
        As in a study file.

    Returns
    -------
    MissionProfile
        With a copy of the columns that were named: the frame may change afterwards.

    Raises
    ------
    InputError
        First thing that is wrong, with row (1 is the first), column and value.

    Examples
    --------
    >>> import pandas as pd
    >>> frame = pd.DataFrame({"t": [0.0, 5.0, 15.0], "I": [150.0, 0.0, 0.0], "n": [600.0, 0.0, 0.0]})
    >>> duty = profile_from_frame(frame, {"time": {"column": "t", "unit": "s"}, "current": {"column": "I", "unit": "A peak"},
    ...                                   "speed": {"column": "n", "unit": "rpm"}})
    >>> duty.rows, duty.duration_s, round(duty.ranges["current_a"][1], 4)
    (2, 15.0, 106.066)
    """
    import pandas as pd

    if not isinstance(frame, pd.DataFrame):
        raise InputError("frame", f"a {type(frame).__name__}", "a pandas DataFrame", "make one of it, or write it to a file and read that")
    if not isinstance(columns, (Mapping, ColumnMap)):
        raise InputError("columns", f"a {type(columns).__name__}", 'a dict such as {"time": {"column": "t", "unit": "s"}, ...}')
    given = parse_model({q: {"column": c} if isinstance(c, str) else c for q, c in dict(columns).items()}, ColumnMap, "columns").given()
    for quantity, column in given.items():
        conversion(quantity, column.unit, f"columns.{quantity}")
    require_range("longest_step_s", longest_step_s, low=0.0, low_open=True, unit="s")
    if last_row_lasts_s is not None:
        require_range("last_row_lasts_s", last_row_lasts_s, low=0.0, low_open=True, unit="s")
    there = [str(c) for c in frame.columns]
    _need_columns("DataFrame", given, there, field="columns")
    raw = {}
    for quantity, column in given.items():
        series = frame.iloc[:, there.index(column.column)]
        if quantity == "phase":
            raw[quantity], words = _words(series, column.column)
        elif quantity == "time" and column.unit == "datetime":
            raw[quantity] = _datetimes(series, "DataFrame", column.column, _row_place)
        else:
            raw[quantity] = _numbers(series, "DataFrame", column.column)
    for values in raw.values():
        values.flags.writeable = False  # blocks are views of them

    def source(rows):
        n = len(frame)
        for a in range(0, n, rows):
            yield {q: (v[a:a + rows], words) if q == "phase" else v[a:a + rows] for q, v in raw.items()}

    return checked(_Reader(source, "DataFrame", given, _row_place, longest_step_s, last_row_lasts_s), name)


def _numbers(series, label, column):
    """A copy as float64, so that a later change of the frame does not change the duty."""
    import pandas as pd

    kinds = pd.api.types
    if kinds.is_bool_dtype(series) or kinds.is_complex_dtype(series) or not kinds.is_numeric_dtype(series):
        for k, value in enumerate(series):
            if isinstance(value, bool) or not isinstance(value, (int, float, np.integer, np.floating, Decimal)):
                raise InputError(f"{label}, row {k + 1}, column '{column}'", f"value {value!r}", "a number", "convert the column to numbers")
    try:
        return series.to_numpy(dtype=float, na_value=np.nan, copy=True)
    except OverflowError:  # an int of Python's beyond the doubles
        k = next(k for k, value in enumerate(series) if isinstance(value, int) and abs(value) > sys.float_info.max)
        raise InputError(f"{label}, row {k + 1}, column '{column}'", f"value {shown(series.iloc[k])}", "a finite number", "correct the row") from None


def _words(series, column):
    """(codes, words) of a column of texts."""
    import pandas as pd

    try:
        codes, words = pd.factorize(series.to_numpy(dtype=object), use_na_sentinel=False)
    except TypeError:  # lists and the like, which nothing can be looked up by
        k = next(k for k, value in enumerate(series) if not isinstance(value, str))
        raise InputError(f"DataFrame, row {k + 1}, column '{column}'", f"value {shown(series.iloc[k])}", "a word for what the drive is doing",
                         "name the phase in every row") from None
    return codes, list(words)


def _datetimes(series, label, column, place):
    """Seconds since 1970, UTC where the stamp has no zone."""
    import pandas as pd

    def refuse(k):
        value = series.iloc[k]
        found = "an empty field" if value is None or value == "" or value is pd.NaT or value is pd.NA else f"value {shown(value)}"
        raise InputError(f"{label}, {place(k)}, column '{column}'", found, "an ISO 8601 date and time such as 2031-05-04T06:30:00",
                         "correct the row, or give the column's unit: s, ms, min, h, d")

    if pd.api.types.is_datetime64_any_dtype(series):
        stamps = pd.to_datetime(series, utc=True)
    else:
        # words such as 'now', bare years and numbers would be taken for dates
        wrong = ~series.map(lambda v: isinstance(v, (date, np.datetime64)) or (isinstance(v, str) and _ISO_DATE.match(v) is not None)).to_numpy(dtype=bool)
        if wrong.any():
            refuse(int(np.flatnonzero(wrong)[0]))
        try:
            stamps = pd.to_datetime(series, format="ISO8601", utc=True)
        except (ValueError, TypeError, OverflowError):
            for k, value in enumerate(series):
                try:
                    pd.to_datetime(value, format="ISO8601", utc=True)
                except (ValueError, TypeError, OverflowError):
                    refuse(k)
            raise InputError(f"{label}, column '{column}'", "mixed time stamps", "ISO 8601 dates and times") from None
    if stamps.isna().any():
        refuse(int(np.flatnonzero(stamps.isna().to_numpy())[0]))
    return (stamps - pd.Timestamp(0, tz="UTC")).dt.total_seconds().to_numpy(dtype=float, copy=True)


def _row_place(row: int) -> str:
    return f"row {row + 1}"


def _need_columns(label, columns, there, field="duty.columns"):
    for quantity, column in columns.items():
        if column.column not in there:
            names = ", ".join(f"'{_printable(c)}'" for c in there[:40]) + (f" and {len(there) - 40} more" if len(there) > 40 else "")
            hint = _printable(near_name(column.column, there)) or "copy the name from the file's header"
            if there and sum(_is_number(c, ".") for c in there) > len(there) // 2:
                hint = "line 1 looks like values: put a header line with the names of the columns on top"
            raise InputError(f"{label}, field {field}.{quantity}.column", f"no column '{_printable(column.column)}'", f"one of {names}", hint)
        if there.count(column.column) > 1:
            raise InputError(f"{label}, field {field}.{quantity}.column", f"the column name '{column.column}' {there.count(column.column)} times", "every name once",
                             "rename one of the columns")


# ---------------------------------------------------------------- Parquet
def _parquet_source(path, label, columns):
    import pyarrow as pa
    import pyarrow.parquet as pq

    try:
        file = pq.ParquetFile(path)
        there, kinds = file.schema_arrow.names, {f.name: f.type for f in file.schema_arrow}
        file.close()
    except (pa.ArrowException, OSError, ValueError) as err:  # ValueError: names in the schema that are not UTF-8
        raise InputError(label, f"a file that is not Parquet ({_first_line(err)})", "a Parquet file", "export it anew, or give it the ending of what it holds") from None
    _need_columns(label, columns, there)
    for quantity, column in columns.items():
        kind = kinds[column.column]
        number = pa.types.is_integer(kind) or pa.types.is_floating(kind) or pa.types.is_decimal(kind)
        text = pa.types.is_string(kind) or pa.types.is_large_string(kind) or pa.types.is_string_view(kind) or pa.types.is_dictionary(kind)
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
        done = 0
        try:
            words = [c.column for q, c in columns.items() if q == "phase"]
            with pq.ParquetFile(path, read_dictionary=words) as file:
                for batch in file.iter_batches(batch_size=rows, columns=[c.column for c in columns.values()]):
                    yield {q: _arrow_values(batch.column(c.column), q, c, label, done, _row_place) for q, c in columns.items()}
                    done += batch.num_rows
        except (pa.ArrowException, OSError, ValueError) as err:
            raise InputError(f"{label}, after row {done}", f"data that cannot be read ({_first_line(err)})", "an undamaged Parquet file", "export it anew") from None

    return source


def _first_line(err) -> str:
    text = (str(err).splitlines() or [type(err).__name__])[0][:160]
    return "".join(c if c.isprintable() else "?" for c in text)


def _printable(text) -> str:
    """Signs that nobody sees are spelt out."""
    return text if text.isprintable() else "".join(c if c.isprintable() else repr(c)[1:-1] for c in text)


def _arrow_values(column, quantity, spec, label, first, place):
    import pyarrow as pa

    if column.null_count:
        k = int(np.flatnonzero(column.is_null().to_numpy(zero_copy_only=False))[0])
        raise InputError(f"{label}, {place(first + k)}, column '{spec.column}'", "an empty value", "a value in every row", "nothing is filled in: correct the row or cut it out")
    if quantity == "phase":
        coded = column if pa.types.is_dictionary(column.type) else column.dictionary_encode()
        return coded.indices.to_numpy(zero_copy_only=False), coded.dictionary.to_pylist()
    if quantity == "time" and spec.unit == "datetime":
        import pandas as pd

        series = column.to_pandas() if pa.types.is_timestamp(column.type) else pd.Series(column.to_numpy(zero_copy_only=False), dtype=object)
        return _datetimes(series, label, spec.column, lambda k: place(first + k))
    return column.cast(pa.float64(), safe=False).to_numpy(zero_copy_only=False)


# -------------------------------------------------------------------- CSV
def _csv_source(path, label, columns, spec):
    encoding = _encoding(spec)
    header = _csv_header(path, label, spec)
    wanted = [c.column for c in columns.values()]
    if header[0].lower().startswith("sep="):
        raise InputError(f"{label}, line 1", f"'{spec.delimiter.join(header)[:60]}'", "a header line with the names of the columns",
                         "cut the line out, and set delimiter under [duty] to the sign it names")
    if len(header) == 1:
        other = [d for d in ";\t,|" if d != spec.delimiter and d in header[0]]
        sign = {"\t": "\\t"}.get(other[0], other[0]) if other else ""
        raise InputError(f"{label}, line 1", f"a single column {shown(header[0])}", f"columns divided by {spec.delimiter!r}",
                         f'set delimiter = "{sign}" under [duty]' if other else "check the file")
    if any(header) and all(_is_number(h, spec.decimal) for h in header if h):
        raise InputError(f"{label}, line 1", f"numbers ({', '.join(header[:4])} ...)", "a header line with the names of the columns", "put a header line on top")
    doubled = sorted({h for h in header if header.count(h) > 1 and h in wanted})
    if doubled:
        raise InputError(f"{label}, line 1", f"the column name '{doubled[0]}' {header.count(doubled[0])} times", "every name once", "rename one of the columns")
    _need_columns(label, columns, header)
    _refuse_open_quotes(path, label, spec)
    place = _LinePlace(path, spec)

    def source(rows):
        import pyarrow as pa
        import pyarrow.csv as pc

        # with a decimal comma the numbers come as text: pyarrow then refuses blanks and plus signs, which it takes with a point
        as_text = spec.decimal == ","
        types = {c.column: pa.string() if as_text or _is_text(q, c) else pa.float64() for q, c in columns.items()}
        types.update({c.column: pa.dictionary(pa.int32(), pa.string()) for q, c in columns.items() if q == "phase"})
        done = 0
        held: list = []
        waiting = 0
        try:
            with pc.open_csv(
                path, read_options=pc.ReadOptions(block_size=1 << 20, encoding="utf8" if encoding in ("utf-8", "utf-8-sig") else encoding),
                parse_options=pc.ParseOptions(delimiter=spec.delimiter, newlines_in_values=False, ignore_empty_lines=True),
                convert_options=pc.ConvertOptions(column_types=types, include_columns=wanted, null_values=[], strings_can_be_null=False,
                                                  quoted_strings_can_be_null=False)) as reader:
                for batch in reader:
                    held.append(batch)
                    waiting += batch.num_rows
                    while waiting >= rows:
                        table = pa.Table.from_batches(held)
                        yield _csv_values(table.slice(0, rows), columns, label, done, place, as_text)
                        done += rows
                        waiting -= rows
                        held = table.slice(rows).to_batches()
            if waiting:
                yield _csv_values(pa.Table.from_batches(held), columns, label, done, place, as_text)
        except (pa.ArrowException, UnicodeError, OSError) as err:
            _find_fault(path, label, columns, spec, header)
            if "Empty CSV file" in str(err):
                return
            raise InputError(label, f"text that cannot be read as CSV ({_first_line(err)})", "one row a line, numbers and names as the header promises") from None

    return source


def _is_text(quantity, column) -> bool:
    return quantity == "phase" or column.unit == "datetime"


def _csv_values(table, columns, label, done, place, as_text):
    out = {}
    for q, c in columns.items():
        values = table.column(c.column).combine_chunks()
        if as_text and not _is_text(q, c):
            values = _from_decimal_comma(values)
        out[q] = _arrow_values(values, q, c, label, done, place)
    return out


def _from_decimal_comma(values):
    """Numbers from text with a decimal comma; what is none raises ``ArrowInvalid``."""
    import pyarrow as pa
    import pyarrow.compute as pc

    bare = pc.utf8_trim(values, characters=_BLANKS)
    if pc.any(pc.match_substring(bare, ".")).as_py():
        raise pa.ArrowInvalid("a point in a number with decimal comma")
    return pc.replace_substring(pc.replace_substring_regex(bare, r"^\+(\d)", r"\1"), ",", ".").cast(pa.float64())


def _encoding(spec) -> str:
    """The codec's own name."""
    try:
        found = codecs.lookup(spec.encoding)
        "".encode(found.name)  # refuses codecs that are not for text, such as hex
        return found.name
    except (LookupError, ValueError):
        raise InputError("field duty.encoding", f"'{spec.encoding}'", "a text encoding such as utf-8, cp1252, latin-1") from None


def _lines(path, spec):
    """Lines with their numbers from 1, split as an editor does; a byte that is none of the encoding comes as a lone surrogate."""
    encoding = _encoding(spec)
    wide = encoding.startswith(("utf-16", "utf-32", "utf-7"))
    with open(path, encoding="utf-8-sig" if encoding == "utf-8" else encoding, errors="replace" if wide else "surrogateescape", newline=None) as file:
        number = 0
        while line := file.readline(_LONGEST_LINE):
            number += 1
            yield number, line


def _refuse_bytes(label, number, line, spec):
    bad = next((ch for ch in line if "\udc80" <= ch <= "\udcff"), None)
    if bad is not None:
        raise InputError(f"{label}, line {number}", f"byte 0x{ord(bad) - 0xdc00:02x}, which is not {spec.encoding}", f"text in {spec.encoding}",
                         "name the file's encoding under [duty], e.g. encoding = \"cp1252\"")


def _refuse_open_quotes(path, label, spec):
    """A quote without its partner would swallow the rows up to the next one, in a column that nobody looks at too."""
    if not _encoding(spec).startswith(("utf-16", "utf-32")) and not _open_quotes(path):
        return
    try:
        for number, line in _lines(path, spec):
            if line.count('"') % 2:
                raise InputError(f"{label}, line {number}", "a quote that is not closed in its line", "quotes in pairs, one row a line", "close the quote, or take it out")
    except UnicodeError as err:
        raise InputError(label, f"bytes that are not {spec.encoding} ({err})", f"text in {spec.encoding}", "name the file's encoding under [duty]") from None


def _open_quotes(path) -> bool:
    """Whether a line ends inside quotes, found by counting bytes: the one at a line's end must be even."""
    count = 0
    with open(path, "rb") as file:
        for piece in iter(lambda: file.read(1 << 20), b""):
            if count % 2 == 0 and b'"' not in piece:
                continue
            signs = np.frombuffer(piece.translate(None, _ALL_BUT_QUOTES_AND_ENDS), np.uint8)
            so_far = count + np.cumsum(signs == 34)
            if (so_far[signs != 34] % 2).any():
                return True
            count = int(so_far[-1]) if so_far.size else count
    return count % 2 == 1


class _LinePlace:
    """Row number -> the line of the file, blank lines counted as an editor counts them."""

    def __init__(self, path, spec):
        self._path, self._spec = path, spec

    def __call__(self, row: int) -> str:
        filled = -1  # the header is no row
        try:
            for number, line in _lines(self._path, self._spec):
                if line.rstrip("\n"):
                    if filled == row:
                        return f"line {number}"
                    filled += 1
        except (OSError, UnicodeError):
            pass
        return f"line {row + 2}"


def _csv_header(path, label, spec):
    try:
        with open(path, "rb") as file:
            start = file.read(1 << 16)
        if b"\x00" in start and not _encoding(spec).startswith(("utf-16", "utf-32")):
            known = start.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE))
            raise InputError(label, "bytes that are no text (a zero byte near the start)", f"text in {spec.encoding}",
                             'set encoding = "utf-16" under [duty]' if known else "export the table as CSV text, or name its encoding")
        _, line = next(_lines(path, spec), (1, ""))
    except OSError as err:
        raise InputError(label, f"a file that cannot be read ({err.strerror})", "a file that can be read") from None
    except UnicodeError as err:
        raise InputError(f"{label}, line 1", f"bytes that are not {spec.encoding} ({err})", f"text in {spec.encoding}", "name the file's encoding under [duty]") from None
    _refuse_bytes(label, 1, line, spec)
    if len(line) >= _LONGEST_LINE:
        raise InputError(f"{label}, line 1", f"a line of more than {_LONGEST_LINE} characters", "a header line with the names of the columns")
    rows = _split(line, spec)
    if not rows or not any(h.strip() for h in rows):
        raise InputError(f"{label}, line 1", "an empty line", "a header line with the names of the columns", "put the header on the first line")
    return rows


def _split(line, spec) -> list[str]:
    try:
        return next(csv.reader([line.rstrip("\n")], delimiter=spec.delimiter), [])
    except csv.Error:
        return line.rstrip("\n").split(spec.delimiter)


def _is_number(text, decimal) -> bool:
    text = text.strip(_BLANKS)
    if decimal == "," and "." in text:
        return False
    return _NUMBER.fullmatch(text.replace(decimal, ".")) is not None


def _find_fault(path, label, columns, spec, header):
    """Go through the file line by line for the first thing that is wrong, and say it."""
    index = {q: header.index(c.column) for q, c in columns.items()}
    try:
        for number, line in _lines(path, spec):
            _refuse_bytes(label, number, line, spec)
            if number == 1 or not line.rstrip("\n"):
                continue
            if len(line) >= _LONGEST_LINE:
                raise InputError(f"{label}, line {number}", f"a line of more than {_LONGEST_LINE} characters", "one row a line")
            fields = _split(line, spec)
            if len(fields) != len(header):
                raise InputError(f"{label}, line {number}", f"{len(fields)} field{'s' if len(fields) != 1 else ''}", f"{len(header)} fields, as in the header",
                                 _fields_advice(fields, header, spec))
            for quantity, column in columns.items():
                value = fields[index[quantity]]
                if not _is_text(quantity, column) and not _is_number(value, spec.decimal):
                    raise InputError(f"{label}, line {number}, column '{column.column}'", f"value {shown(value)}" if value.strip() else "an empty field", "a number",
                                     _number_advice(value, spec))
    except (OSError, UnicodeError) as err:
        raise InputError(label, f"text that cannot be read ({err})", f"text in {spec.encoding}", "check the file and its encoding") from None


def _fields_advice(fields, header, spec) -> str:
    if not any(f.strip() for f in fields):
        return "cut the line out"
    if len(fields) < len(header):
        return "complete the row"
    if spec.delimiter == "," and spec.decimal == ".":
        return "a decimal comma in a file divided by commas? set delimiter and decimal under [duty]; texts that hold a comma need quotes"
    return f"a text that holds the delimiter {spec.delimiter!r} needs quotes"


def _number_advice(value, spec) -> str:
    if spec.decimal == "." and _is_number(value, ","):
        return 'set decimal = "," under [duty] if the file has decimal commas'
    if spec.decimal == "," and _is_number(value, "."):
        return 'set decimal = "." under [duty]'
    return "correct the row or cut it out; nothing is filled in"
