"""Duties with one mistake each.

Each entry holds files to write (text, bytes, or a callable that gets the path), the duty
table of a study that reads them, and fragments that the message must hold: place, value,
what is allowed, what to do. Used by the tests of this stage and of the command line.
"""

from dataclasses import dataclass, field

from ..study.good_study import CSV, DIRECT_CSV, direct_duty, duty


@dataclass(frozen=True)
class BrokenProfile:
    """One mistake."""

    name: str
    fragments: tuple
    files: dict = field(default_factory=lambda: {"duty.csv": CSV})
    duty: dict = field(default_factory=duty)


def changed(old, new, text=CSV):
    """The files with a piece of the text replaced once."""
    assert old in text
    return {"duty.csv": text.replace(old, new, 1)}


def with_duty(base=duty, **changes):
    """The duty table with keys set; ``columns`` adds to the columns, None takes one out."""
    table = base()
    for key, value in changes.items():
        if key == "columns":
            table["columns"] = {k: v for k, v in {**table["columns"], **value}.items() if v is not None}
        else:
            table[key] = value
    return table


def parquet(**columns):
    """A writer of a Parquet file with the good columns, some exchanged for arrow arrays."""

    def write(path):
        import pyarrow as pa
        import pyarrow.parquet as pq

        good = {"t": [0.0, 1.0, 2.0, 3.0], "I": [0.0, 100.0, -80.0, 0.0], "n": [0.0, 300.0, 400.0, 0.0], "T_in": [40.0] * 4, "what": ["idle", "go", "brake", "idle"]}
        pq.write_table(pa.table({**good, **columns}), path)

    return {"duty.parquet": write}


def doubled_parquet(path):
    """A name twice in the schema."""
    import pyarrow as pa
    import pyarrow.parquet as pq

    numbers = pa.array([0.0, 1.0, 2.0])
    pq.write_table(pa.table([numbers] * 5 + [pa.array(["a", "a", "a"])], names=["t", "I", "I", "n", "T_in", "what"]), path)


def damaged_parquet(path):
    """Sound at the end, where the schema is, and broken in the middle."""
    parquet()["duty.parquet"](path)
    raw = bytearray(path.read_bytes())
    raw[4:120] = b"\xff" * 116
    path.write_bytes(bytes(raw))


def misnamed_parquet(path):
    """A name in the schema that is no UTF-8."""
    parquet()["duty.parquet"](path)
    raw = path.read_bytes()
    assert b"what" in raw
    path.write_bytes(raw.replace(b"what", b"wh\xb9t"))


def parquet_without_rows(path):
    """A schema and nothing else."""
    import pyarrow as pa
    import pyarrow.parquet as pq

    numbers = {k: pa.array([], pa.float64()) for k in ("t", "I", "n", "T_in")}
    pq.write_table(pa.table({**numbers, "what": pa.array([], pa.string())}), path)


PARQUET = {"file": "duty.parquet"}

BROKEN_PROFILES = [
    # values
    BrokenProfile("NaN", ("duty.csv, line 4, column 'I'", "nan", "a finite number", "nothing is filled in"), changed("2,150", "2,NaN")),
    BrokenProfile("infinite", ("duty.csv, line 5, column 'n'", "-inf", "a finite number"), changed("400", "-inf")),
    BrokenProfile("a number beyond all numbers", ("line 4, column 'I'", "inf", "a finite number"), changed("150", "1e400")),
    BrokenProfile("text in a number column", ("duty.csv, line 3, column 'n'", "'fast'", "a number", "cut it out"), changed("300", "fast")),
    BrokenProfile("thousands divided by a blank", ("line 3, column 'I'", "'1 000'", "a number"), changed("100", "1 000")),
    BrokenProfile("digits with underscore", ("line 3, column 'I'", "'1_00'", "a number"), changed("100", "1_00")),
    BrokenProfile("a no-break space behind a number", ("duty.csv, line 3, column 'I'", "'100\\xa0'", "a number"), changed("100", "100\u00a0")),
    BrokenProfile("a form feed behind a number", ("duty.csv, line 3, column 'I'", "'100\\x0c'", "a number"), changed("100", "100\f")),
    BrokenProfile("a no-break space before a worse row, with decimal comma", ("duty.csv, line 3, column 'I'", "'100\\xa0'", "a number"),
                  {"duty.csv": CSV.replace(",", ";").replace("100", "100\u00a0").replace("150", "x")}, with_duty(delimiter=";", decimal=",")),
    BrokenProfile("hexadecimal number", ("duty.csv, line 3, column 'I'", "'0x64'", "a number"), changed("100", "0x64")),
    BrokenProfile("empty field", ("duty.csv, line 3, column 'I'", "an empty field", "a number", "nothing is filled in"), changed("1,100,", "1,,")),
    BrokenProfile("blank field", ("duty.csv, line 3, column 'I'", "an empty field", "a number"), changed("1,100,", "1,  ,")),
    BrokenProfile("units in a row of their own", ("duty.csv, line 2, column 't'", "'s'", "a number"), changed("what\n", "what\ns,A,rpm,degC,-\n")),
    BrokenProfile("line number counts blank lines", ("duty.csv, line 6, column 'I'", "nan"), changed("1,100,300,40,go\n2,150", "\n1,100,300,40,go\n\n2,nan")),
    # time
    BrokenProfile("decreasing time", ("duty.csv, line 5, column 't'", "time 1.5 s after 2 s", "rise from row to row", "sort the rows"), changed("\n3,", "\n1.5,")),
    BrokenProfile("the same time twice", ("duty.csv, line 5, column 't'", "the time 2 s twice", "rise from row to row"), changed("\n3,", "\n2,")),
    BrokenProfile("gap", ("duty.csv, line 5, column 't'", "a step of 98 s after 2 s", "steps up to 60 s", "longest_step_s"),
                  {"duty.csv": CSV.replace("\n3,", "\n100,").replace("\n4,", "\n101,")}),
    BrokenProfile("hours taken for seconds", ("line 3, column 't'", "a step of 3600 s after 0 h", "steps up to 60 s", "unit of time"),
                  duty=with_duty(columns={"time": {"column": "t", "unit": "h"}})),
    BrokenProfile("decreasing time in minutes", ("line 5, column 't'", "time 0.5 min after 2 min", "rise"), changed("\n3,", "\n0.5,"),
                  with_duty(longest_step_s=100, columns={"time": {"column": "t", "unit": "min"}})),
    BrokenProfile("clock set back", ("line 3, column 't'", "2031-05-04T06:29:59 (UTC) after 2031-05-04T06:30:00 (UTC)", "rise"),
                  {"duty.csv": "t,I,n,T_in,what\n2031-05-04T06:30:00,0,0,40,a\n2031-05-04T06:29:59,0,0,40,a\n2031-05-04T06:30:02,0,0,40,a\n"},
                  with_duty(columns={"time": {"column": "t", "unit": "datetime"}})),
    BrokenProfile("a word for a time stamp", ("line 3, column 't'", "'now'", "ISO 8601", "2031-05-04T06:30:00"),
                  {"duty.csv": "t,I,n,T_in,what\n2031-05-04T06:30:00,0,0,40,a\nnow,0,0,40,a\n"}, with_duty(columns={"time": {"column": "t", "unit": "datetime"}})),
    BrokenProfile("an empty time stamp", ("line 3, column 't'", "an empty field", "ISO 8601"),
                  {"duty.csv": "t,I,n,T_in,what\n2031-05-04T06:30:00,0,0,40,a\n,0,0,40,a\n"}, with_duty(columns={"time": {"column": "t", "unit": "datetime"}})),
    BrokenProfile("seconds taken for time stamps", ("line 2, column 't'", "'0'", "ISO 8601", "give the column's unit"),
                  duty=with_duty(columns={"time": {"column": "t", "unit": "datetime"}})),
    BrokenProfile("a date that does not exist", ("line 3, column 't'", "2031-13-04", "ISO 8601"),
                  {"duty.csv": "t,I,n,T_in,what\n2031-05-04T06:30:00,0,0,40,a\n2031-13-04T06:30:01,0,0,40,a\n"}, with_duty(columns={"time": {"column": "t", "unit": "datetime"}})),
    BrokenProfile("single row", ("duty.csv", "a single row", "at least two rows", "last_row_lasts_s"), {"duty.csv": "".join(CSV.splitlines(True)[:2])}),
    BrokenProfile("header only", ("duty.csv", "a header without rows", "at least two rows"), {"duty.csv": "t,I,n,T_in,what\n"}),
    BrokenProfile("header only, without end of line", ("duty.csv", "a header without rows", "at least two rows"), {"duty.csv": "t,I,n,T_in,what"}),
    # units and columns
    BrokenProfile("missing unit", ("duty.columns.current", "no unit", "A rms, A peak", "none is taken for granted"), duty=with_duty(columns={"current": {"column": "I"}})),
    BrokenProfile("unknown unit", ("duty.columns.current.unit", "'A RMS'", "A rms, A peak", "did you mean"), duty=with_duty(columns={"current": {"column": "I", "unit": "A RMS"}})),
    BrokenProfile("bare ampere", ("duty.columns.current.unit", "'A'", "A rms, A peak", "say whether rms or peak"), duty=with_duty(columns={"current": {"column": "I", "unit": "A"}})),
    BrokenProfile("unit on a column that has none", ("duty.columns.phase.unit", "'s'", "no unit", "remove it"), duty=with_duty(columns={"phase": {"column": "what", "unit": "s"}})),
    BrokenProfile("missing column", ("duty.csv, field duty.columns.coolant.column", "no column 'Tin'", "'t', 'I', 'n', 'T_in', 'what'", "did you mean 'T_in'?"),
                  duty=with_duty(columns={"coolant": {"column": "Tin", "unit": "degC"}})),
    BrokenProfile("a sign that nobody sees in a name", ("duty.csv, field duty.columns.current.column", "no column 'I'", "'\\ufeffI'", "did you mean '\\ufeffI'?"),
                  changed("t,I", "t,\ufeffI")),
    BrokenProfile("a blank in front of a name", ("duty.csv, field duty.columns.current.column", "no column 'I'", "did you mean ' I'?"), changed("t,I", "t, I")),
    BrokenProfile("a quantity that is not known", ("duty.columns.curent", "unknown key", "did you mean 'current'?"),
                  duty=with_duty(columns={"curent": {"column": "I", "unit": "A rms"}, "current": None})),
    BrokenProfile("no time", ("duty.columns.time", "nothing", "required"), duty=with_duty(columns={"time": None})),
    BrokenProfile("column without a name", ("duty.columns.current.column", "an empty text", "at least 1 character"), duty=with_duty(columns={"current": {"column": "", "unit": "A rms"}})),
    BrokenProfile("column as a bare text", ("duty.columns.current", "'I'", "a section with keys"), duty=with_duty(columns={"current": "I"})),
    BrokenProfile("doubled header", ("duty.csv, line 1", "'I' 2 times", "every name once", "rename"), changed("t,I,n,", "t,I,I,"), with_duty(columns={"speed": None})),
    BrokenProfile("no header", ("duty.csv, line 1", "numbers (0, 0, 0, 40", "a header line"), {"duty.csv": "0,0,0,40\n1,100,300,40\n2,0,0,40\n"}),
    BrokenProfile("no header, with a text", ("duty.csv", "no column 't'", "line 1 looks like values"), {"duty.csv": CSV.split("\n", 1)[1]}),
    BrokenProfile("same column for two quantities", ("duty.columns.speed", "column 'I' used for current and speed", "a column of its own"),
                  duty=with_duty(columns={"speed": {"column": "I", "unit": "rpm"}})),
    BrokenProfile("displacement and power factor", ("duty.columns.power_factor", "both displacement and power_factor", "one of them"), {"duty.csv": DIRECT_CSV},
                  with_duty(direct_duty, columns={"displacement": {"column": "f", "unit": "deg"}})),
    BrokenProfile("neither current nor torque", ("duty.columns.current", "neither current nor torque", "a column for current or torque"), duty=with_duty(columns={"current": None})),
    # the text of the file
    BrokenProfile("wrong delimiter", ("duty.csv, line 1", "a single column 't;I;n;T_in;what'", "divided by ','", 'delimiter = ";"'), {"duty.csv": CSV.replace(",", ";")}),
    BrokenProfile("tabs", ("duty.csv, line 1", "a single column", "divided by ','", 'delimiter = "\\t"'), {"duty.csv": CSV.replace(",", "\t")}),
    BrokenProfile("decimal comma among commas", ("duty.csv, line 3", "6 fields", "5 fields, as in the header", "decimal comma"), changed("100", "100,5")),
    BrokenProfile("decimal comma among semicolons", ("duty.csv, line 3, column 'I'", "'100,5'", "a number", 'set decimal = ","'),
                  {"duty.csv": CSV.replace(",", ";").replace("100", "100,5")}, with_duty(delimiter=";")),
    BrokenProfile("decimal point where a comma is said", ("duty.csv, line 3, column 'I'", "'100.5'", "a number", 'set decimal = "."'),
                  {"duty.csv": CSV.replace(",", ";").replace("100", "100.5")}, with_duty(delimiter=";", decimal=",")),
    BrokenProfile("two plus signs with decimal comma", ("duty.csv, line 3, column 'I'", "'++100'", "a number"),
                  {"duty.csv": CSV.replace(",", ";").replace("100", "++100")}, with_duty(delimiter=";", decimal=",")),
    BrokenProfile("comma for both", ("duty.decimal", "for both delimiter and decimal", "two different signs"), duty=with_duty(decimal=",")),
    BrokenProfile("delimiter of two signs", ("duty.delimiter", "';;'", "one of ',' ';'"), duty=with_duty(delimiter=";;")),
    BrokenProfile("delimiter that is a quote", ("duty.delimiter", "'\"'", "one of ',' ';'"), duty=with_duty(delimiter='"')),
    BrokenProfile("delimiter that is no ASCII", ("duty.delimiter", "'→'", "one of ',' ';'"), duty=with_duty(delimiter="→")),
    BrokenProfile("decimal sign", ("duty.decimal", "'x'", "a point"), duty=with_duty(decimal="x")),
    BrokenProfile("too many fields", ("duty.csv, line 3", "6 fields", "5 fields"), changed("40,go", "40,go,again")),
    BrokenProfile("too few fields", ("duty.csv, line 4", "4 fields", "5 fields", "complete the row"), changed("600,40,go", "600,go")),
    BrokenProfile("line that a spreadsheet adds", ("duty.csv, line 1", "sep=,", "a header line", "cut the line out"), {"duty.csv": "sep=,\n" + CSV}),
    BrokenProfile("text after the table", ("duty.csv, line 7", "1 field", "5 fields"), {"duty.csv": CSV + "end of data\n"}),
    BrokenProfile("empty first line", ("duty.csv, line 1", "an empty line", "a header line"), {"duty.csv": "\n" + CSV}),
    BrokenProfile("empty file", ("duty.csv", "an empty file", "a header line and rows"), {"duty.csv": b""}),
    BrokenProfile("wrong encoding in the header", ("duty.csv, line 1", "byte 0xfc, which is not utf-8", "text in utf-8", 'encoding = "cp1252"'),
                  {"duty.csv": CSV.replace("T_in", "T_kühl").encode("cp1252")}, with_duty(columns={"coolant": {"column": "T_kühl", "unit": "degC"}})),
    BrokenProfile("wrong encoding in a row", ("duty.csv, line 5", "byte 0xfc, which is not utf-8", 'encoding = "cp1252"'), {"duty.csv": CSV.replace("brake", "zurück").encode("cp1252")}),
    BrokenProfile("a byte that the encoding does not have", ("duty.csv, line 5", "byte 0x81, which is not cp1252"), {"duty.csv": CSV.encode().replace(b"brake", b"br\x81ke")},
                  with_duty(encoding="cp1252")),
    BrokenProfile("unknown encoding", ("duty.encoding", "'utf-9'", "utf-8, cp1252"), duty=with_duty(encoding="utf-9")),
    BrokenProfile("encoding that is none of text", ("duty.encoding", "'hex'", "utf-8, cp1252"), duty=with_duty(encoding="hex")),
    BrokenProfile("UTF-16 read as UTF-8", ("duty.csv", "a zero byte", "text in utf-8", 'encoding = "utf-16"'), {"duty.csv": CSV.encode("utf-16")}),
    BrokenProfile("UTF-8 read as UTF-16", ("duty.csv", "not utf-16", "text in utf-16"), duty=with_duty(encoding="utf-16")),
    BrokenProfile("binary", ("duty.csv", "a zero byte", "text in utf-8"), {"duty.csv": bytes(range(256)) * 8}),
    BrokenProfile("zero byte far down", ("duty.csv, line 6002, column 'I'", "\\x00", "a number"),
                  {"duty.csv": b"t,I,n,T_in,what\n" + b"".join(b"%d,0,0,40,idle\n" % k for k in range(6000)) + b"6000,1\x002,0,40,idle\n6001,0,0,40,idle\n"}),
    BrokenProfile("a quote that is never closed", ("duty.csv, line 3", "a quote that is not closed", "quotes in pairs"), changed("go", '"go')),
    BrokenProfile("a quote that is never closed, in a column that nobody reads", ("duty.csv, line 3", "a quote that is not closed", "quotes in pairs"), changed("go", '"go'),
                  with_duty(columns={"phase": None})),
    # Parquet
    BrokenProfile("text file with the ending of Parquet", ("duty.parquet", "not Parquet", "a Parquet file"), {"duty.parquet": CSV}, with_duty(**PARQUET)),
    BrokenProfile("empty Parquet file", ("duty.parquet", "an empty file"), {"duty.parquet": b""}, with_duty(**PARQUET)),
    BrokenProfile("damaged Parquet", ("duty.parquet", "cannot be read", "undamaged"), {"duty.parquet": damaged_parquet}, with_duty(**PARQUET)),
    BrokenProfile("Parquet with a name that is no text", ("duty.parquet", "not Parquet", "export it anew"), {"duty.parquet": misnamed_parquet}, with_duty(**PARQUET)),
    BrokenProfile("Parquet without a phase", ("duty.parquet, row 2, column 'what'", "an empty value", "a value in every row"), parquet(what=["a", None, "b", "b"]),
                  with_duty(**PARQUET)),
    BrokenProfile("Parquet with a blank phase", ("duty.parquet, row 3, column 'what'", "value ' '", "a word for what the drive is doing"), parquet(what=["a", "a", " ", "b"]),
                  with_duty(**PARQUET)),
    BrokenProfile("Parquet without a value", ("duty.parquet, row 3, column 'I'", "an empty value", "a value in every row"), parquet(I=[0.0, 1.0, None, 2.0]), with_duty(**PARQUET)),
    BrokenProfile("Parquet with NaN", ("duty.parquet, row 2, column 'n'", "nan", "a finite number"), parquet(n=[0.0, float("nan"), 1.0, 2.0]), with_duty(**PARQUET)),
    BrokenProfile("Parquet with numbers as text", ("duty.parquet, column 'I'", "type string", "numbers", "convert the column"), parquet(I=["0", "1", "2", "3"]), with_duty(**PARQUET)),
    BrokenProfile("Parquet with numbers for phases", ("duty.parquet, column 'what'", "type int64", "text"), parquet(what=[1, 2, 3, 4]), with_duty(**PARQUET)),
    BrokenProfile("Parquet with decreasing time", ("duty.parquet, row 3, column 't'", "time 0.5 s after 1 s", "rise"), parquet(t=[0.0, 1.0, 0.5, 2.0]), with_duty(**PARQUET)),
    BrokenProfile("Parquet without the column", ("duty.parquet, field duty.columns.speed.column", "no column 'N'", "'t', 'I', 'n'"), parquet(),
                  with_duty(**PARQUET, columns={"speed": {"column": "N", "unit": "rpm"}})),
    BrokenProfile("Parquet with a name twice", ("duty.parquet", "'I' 2 times", "every name once"), {"duty.parquet": doubled_parquet}, with_duty(**PARQUET)),
    BrokenProfile("Parquet without rows", ("duty.parquet", "a header without rows", "at least two rows"),
                  {"duty.parquet": parquet_without_rows}, with_duty(**PARQUET)),
    # the file itself
    BrokenProfile("wrong ending", ("duty.xlsx", "'.xlsx'", ".csv, .txt, .tsv, .parquet"), {"duty.xlsx": CSV}, with_duty(file="duty.xlsx")),
    BrokenProfile("folder instead of a file", ("duty.csv", "a folder", "a CSV or Parquet file"), {"duty.csv": lambda path: path.mkdir()}),
    BrokenProfile("missing file", ("duti.csv", "no such file", "a CSV or Parquet file", "did you mean 'duty.csv'?"), duty=with_duty(file="duti.csv")),
    BrokenProfile("zero byte in the file's name", ("du\\x00ty.csv", "no such file", "did you mean 'duty.csv'?"), duty=with_duty(file="du\x00ty.csv")),
    BrokenProfile("row of delimiters at the end", ("duty.csv, line 7, column 't'", "an empty field", "a number"), {"duty.csv": CSV + ",,,,\n"}),
    BrokenProfile("file name too long", ("aaa.csv", "cannot be reached", "a CSV or Parquet file"), duty=with_duty(file="a" * 400 + ".csv")),
    BrokenProfile("no file", ("duty.file", "an empty text", "at least 1 character"), duty=with_duty(file="")),
    # impossible values
    BrokenProfile("power factor of 2", ("duty.csv, line 3, column 'cos_phi'", "value 2", "-1 to 1"), changed("0.5,0.85", "0.5,2", DIRECT_CSV), direct_duty()),
    BrokenProfile("negative frequency", ("duty.csv, line 3, column 'f'", "value -30 Hz", "0 to 5000 Hz", "not negative"), changed("30", "-30", DIRECT_CSV), direct_duty()),
    BrokenProfile("modulation index of 3", ("duty.csv, line 4, column 'm'", "value 3", "0 to 1.27324", "six-step"), changed("0.8,", "3,", DIRECT_CSV), direct_duty()),
    BrokenProfile("negative modulation index", ("duty.csv, line 4, column 'm'", "value -0.8", "0 to 1.27324"), changed("0.8,", "-0.8,", DIRECT_CSV), direct_duty()),
    BrokenProfile("coolant of 400 degC", ("duty.csv, line 5, column 'T_in'", "value 400 degC", "-60 to 150 degC", "check the unit (degC, K)"), changed("400,41", "400,400")),
    BrokenProfile("degrees Celsius said to be kelvin", ("duty.csv, line 2, column 'T_in'", "value 40 K", "213.15 to 423.15 K"),
                  duty=with_duty(columns={"coolant": {"column": "T_in", "unit": "K"}})),
    BrokenProfile("current of a megaampere", ("line 3, column 'I'", "value 100 kA rms", "-10 to 10 kA rms", "check the unit"),
                  duty=with_duty(columns={"current": {"column": "I", "unit": "kA rms"}})),
    BrokenProfile("speed of a dentist's drill", ("line 3, column 'n'", "value 300000 rpm", "190986 rpm", "check the unit"), changed("300", "300000")),
    BrokenProfile("DC voltage of zero", ("line 2, column 'T_in'", "value 0.5 V", "1 to 20000 V"), {"duty.csv": CSV.replace(",40,", ",0.5,")},
                  with_duty(columns={"coolant": None, "dc_voltage": {"column": "T_in", "unit": "V"}})),
    BrokenProfile("empty phase name", ("duty.csv, line 5, column 'what'", "value ''", "a word for what the drive is doing", "in every row"), changed("brake", "")),
    BrokenProfile("phase column that is a clock", ("line 202, column 'what'", "more than 200 different phases", "a few words"),
                  {"duty.csv": "t,I,n,T_in,what\n" + "".join(f"{k},0,0,40,at {k}\n" for k in range(400))}),
    # settings
    BrokenProfile("negative longest step", ("duty.longest_step_s", "-5", "above 0"), duty=with_duty(longest_step_s=-5)),
    BrokenProfile("longest step not a number", ("duty.longest_step_s", "nan", "a finite number"), duty=with_duty(longest_step_s=float("nan"))),
    BrokenProfile("longest step in quotes", ("duty.longest_step_s", "'60'", "a number", "without quotes"), duty=with_duty(longest_step_s="60")),
    BrokenProfile("last row lasts no time", ("duty.last_row_lasts_s", "value 0", "above 0"), duty=with_duty(last_row_lasts_s=0)),
]
