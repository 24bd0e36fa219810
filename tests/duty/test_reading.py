"""Good duties: what stands in the file is what comes out, whatever the file's form and the size of the blocks."""

import math
import subprocess
import sys
import textwrap
from decimal import Decimal
from fractions import Fraction
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from scipy import constants

import mission
from mission.duty import QUANTITIES, DutySpec, conversion, profile_from_frame, read_profile
from mission.errors import InputError, RangeError
from mission.tomlfile import parse_model

from ..study.good_study import CSV, DUTY, duty, write

FRAME = pd.DataFrame({
    "t": [0.0, 1.0, 2.5, 3.0, 4.0], "I": [0.0, 100.5, 150.25, -80.0, 0.0], "n": [0.0, 300.0, 600.0, -400.0, 0.0], "T_in": [40.0, 40.0, 40.5, 41.0, 41.0],
    "what": ["idle", "go", "go", "brake", "idle"],
})


def read(folder, name="duty.csv", **changes):
    table = {**duty(), "file": name, **changes}
    return read_profile(parse_model(table, DutySpec, "study.toml"), folder)


def joined(profile, rows):
    """All blocks as one: time, dt, columns, phase."""
    blocks = list(profile.blocks(rows))
    assert all(0 < b.dt_s.size <= rows for b in blocks)
    assert [b.first_row for b in blocks] == np.cumsum([0] + [b.dt_s.size for b in blocks])[:-1].tolist()
    out = {key: np.concatenate([b.columns[key] for b in blocks]) for key in blocks[0].columns}
    return {**out, **{key: np.concatenate([getattr(b, key) for b in blocks]) for key in ("time_s", "dt_s", "phase_id")}}


def same(a, b):
    assert a.keys() == b.keys()
    for key in a:
        assert a[key].dtype == b[key].dtype
        np.testing.assert_array_equal(a[key], b[key], err_msg=key)


# ------------------------------------------------------------ one duty, three doors
def test_csv_parquet_and_frame_are_the_same_duty(tmp_path):
    FRAME.to_csv(tmp_path / "duty.csv", index=False)
    FRAME.to_parquet(tmp_path / "duty.parquet", index=False)
    three = [read(tmp_path), read(tmp_path, "duty.parquet"), profile_from_frame(FRAME, DUTY["columns"])]
    for other in three[1:]:
        same(joined(three[0], 3), joined(other, 3))
        for name in ("rows", "duration_s", "phases", "quantities", "ranges", "time_by_phase_s", "longest_step_s", "shortest_step_s", "notes"):
            assert getattr(other, name) == getattr(three[0], name), name
    assert joined(three[0], 9)["current_a"].tolist() == [0.0, 100.5, 150.25, -80.0]
    assert three[0].to_frame().phase.tolist() == ["idle", "go", "go", "brake"]


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_any_block_size_joins_to_the_same_arrays(data, tmp_path_factory):
    n = data.draw(st.integers(2, 40))
    steps = data.draw(st.lists(st.sampled_from([0.125, 0.25, 1.0, 7.0]), min_size=n, max_size=n))
    frame = pd.DataFrame({
        "t": np.cumsum(steps), "I": data.draw(st.lists(st.floats(-500, 500), min_size=n, max_size=n)), "n": np.linspace(-900.0, 900.0, n),
        "T_in": 40.0, "what": data.draw(st.lists(st.sampled_from(["idle", "go", "brake, hard", "zurück"]), min_size=n, max_size=n)),
    })
    last = data.draw(st.sampled_from([None, 2.0]))
    folder = tmp_path_factory.mktemp("blocks")
    frame.to_csv(folder / "duty.csv", index=False)
    frame.to_parquet(folder / "duty.parquet", index=False, row_group_size=data.draw(st.integers(1, n)))
    extra = {} if last is None else {"last_row_lasts_s": last}
    whole = joined(profile_from_frame(frame, DUTY["columns"], last_row_lasts_s=last), 1000)
    assert whole["dt_s"].size == n - (last is None)
    np.testing.assert_array_equal(whole["current_a"], frame["I"].to_numpy()[: whole["dt_s"].size])
    words = frame["what"].tolist()[: whole["dt_s"].size]
    phases = tuple(dict.fromkeys(words))
    assert whole["phase_id"].tolist() == [phases.index(w) for w in words]
    rows = data.draw(st.integers(1, n + 3))
    for profile in (profile_from_frame(frame, DUTY["columns"], last_row_lasts_s=last), read(folder, **extra), read(folder, "duty.parquet", **extra)):
        same(joined(profile, rows), whole)
        assert profile.phases == phases


def test_last_row_closes_the_mission_or_lasts_as_told(tmp_path):
    write(tmp_path, {"duty.csv": CSV})
    closed, told = read(tmp_path), read(tmp_path, last_row_lasts_s=2.5)
    assert (closed.rows, closed.duration_s) == (4, 4.0) and (told.rows, told.duration_s) == (5, 6.5)
    assert joined(closed, 2)["dt_s"].tolist() == [1.0] * 4 and joined(told, 2)["dt_s"].tolist() == [1.0] * 4 + [2.5]
    assert "the last row closes the mission; its values are not used" in closed.notes and "the last row lasts 2.5 s, as told" in told.notes


def test_one_row_that_lasts_is_a_duty(tmp_path):
    write(tmp_path, {"duty.csv": "".join(CSV.splitlines(True)[:2])})
    assert read(tmp_path, last_row_lasts_s=3.0).duration_s == 3.0


def test_mission_time_begins_at_zero():
    frame = FRAME.assign(t=FRAME["t"] + 1e6)
    assert joined(profile_from_frame(frame, DUTY["columns"]), 2)["time_s"].tolist() == [0.0, 1.0, 2.5, 3.0]


def test_phases_are_in_order_of_first_appearance_and_their_times_add_up(tmp_path):
    FRAME.to_csv(tmp_path / "duty.csv", index=False)
    profile = read(tmp_path)
    assert profile.phases == ("idle", "go", "brake") and profile.time_by_phase_s == (1.0, 2.0, 1.0)
    assert joined(profile, 1)["phase_id"].tolist() == [0, 1, 1, 2] and joined(profile, 1)["phase_id"].dtype == np.int16


@pytest.mark.parametrize("rows", [1, 2, 9])
def test_phases_do_not_follow_the_order_in_which_a_file_stores_its_words(rows, tmp_path):
    frame = FRAME.assign(what=pd.Categorical(["go", "idle", "go", "brake", "idle"], categories=["never", "brake", "idle", "go"]))
    frame.to_parquet(tmp_path / "duty.parquet", index=False)
    for profile in (read(tmp_path, "duty.parquet"), profile_from_frame(frame, DUTY["columns"])):
        assert profile.phases == ("go", "idle", "brake") and joined(profile, rows)["phase_id"].tolist() == [0, 1, 0, 2]


@pytest.mark.parametrize("word", ["end", "", None, "go"])
def test_the_phase_of_the_closing_row_is_not_used(word):
    profile = profile_from_frame(FRAME.assign(what=["idle", "go", "go", "brake", word]), DUTY["columns"])
    assert profile.phases == ("idle", "go", "brake") and joined(profile, 2)["phase_id"].tolist() == [0, 1, 1, 2]


@pytest.mark.parametrize("rows", [1, 3, 1000])
def test_a_phase_that_was_not_there_at_the_check_is_refused(rows, tmp_path):
    write(tmp_path, {"duty.csv": CSV})
    profile = read(tmp_path)
    write(tmp_path, {"duty.csv": CSV.replace("brake", "other")})
    with pytest.raises(InputError, match="a phase 'other' that was not there when the file was checked"):
        list(profile.blocks(rows))


def test_without_a_phase_column_there_is_one_phase(tmp_path):
    write(tmp_path, {"duty.csv": CSV})
    table = duty()
    del table["columns"]["phase"]
    profile = read(tmp_path, columns=table["columns"])
    assert profile.phases == ("whole mission",) and joined(profile, 9)["phase_id"].tolist() == [0] * 4


def test_longest_step_is_a_limit_that_can_be_moved_on_purpose(tmp_path):
    write(tmp_path, {"duty.csv": "t,I,n,T_in,what\n0,1,0,40,a\n60,1,0,40,a\n121,1,0,40,a\n"})
    with pytest.raises(InputError, match="a step of 61 s after 60 s"):
        read(tmp_path)
    assert read(tmp_path, longest_step_s=61).duration_s == 121.0


# ------------------------------------------------------------ units
ROOT_HALF = math.sqrt(0.5)  # analytic: a sine's rms over its peak
EXACT = {  # (quantity, unit): (a number there, the same in our unit); exact by definition of the units
    ("time", "s"): (3, Fraction(3)), ("time", "ms"): (250, Fraction(1, 4)), ("time", "min"): (0.75, constants.minute * 0.75), ("time", "h"): (0.01, constants.hour * 0.01),
    ("time", "d"): (0.0005, constants.day * 0.0005),
    ("current", "A rms"): (100, Fraction(100)), ("current", "A peak"): (100, 100 * ROOT_HALF), ("current", "kA rms"): (0.1, Fraction(100)),
    ("current", "kA peak"): (0.1, 100 * ROOT_HALF), ("current", "mA rms"): (5000, Fraction(5)), ("current", "mA peak"): (5000, 5 * ROOT_HALF),
    ("torque", "N m"): (7, Fraction(7)), ("torque", "Nm"): (7, Fraction(7)), ("torque", "kN m"): (0.5, Fraction(500)), ("torque", "kNm"): (0.5, Fraction(500)),
    ("speed", "rpm"): (1500, 2 * math.pi * 1500 / constants.minute), ("speed", "1/min"): (-30, -math.pi), ("speed", "rad/s"): (12, Fraction(12)),
    ("speed", "1/s"): (25, 50 * math.pi), ("speed", "Hz"): (25, 50 * math.pi),
    ("frequency", "Hz"): (50, Fraction(50)), ("frequency", "kHz"): (0.05, Fraction(50)),
    ("displacement", "deg"): (30, math.pi / 6), ("displacement", "rad"): (-0.5, Fraction(-1, 2)),
    ("coolant", "degC"): (65, Fraction(65)), ("coolant", "K"): (338.15, 338.15 - constants.zero_Celsius),
    ("flow", "l/min"): (12, Fraction(12, 60000)), ("flow", "m3/h"): (36, Fraction(1, 100)), ("flow", "l/s"): (2, Fraction(2, 1000)), ("flow", "m3/s"): (0.5, Fraction(1, 2)),
    ("dc_voltage", "V"): (600, Fraction(600)), ("dc_voltage", "kV"): (0.6, Fraction(600)),
}


def test_every_unit_has_a_check():
    assert set(EXACT) == {(q, u) for q, quantity in QUANTITIES.items() for u in quantity.units if u != "datetime"}


@pytest.mark.parametrize(("quantity", "unit"), EXACT, ids=[f"{q} in {u}" for q, u in EXACT])
def test_units_become_ours(quantity, unit):
    theirs, ours = EXACT[quantity, unit]
    columns = {"time": {"column": "t", "unit": "s"}, "current": {"column": "I", "unit": "A rms"}}
    frame = pd.DataFrame({"t": [0.0, 1.0], "I": [1.0, 1.0], "x": [float(theirs)] * 2})
    if quantity == "time":
        frame, columns["time"] = frame.assign(x=[0.0, float(theirs)]), {"column": "x", "unit": unit}
        found = profile_from_frame(frame, columns).duration_s
    else:
        columns[quantity] = {"column": "x", "unit": unit}
        found = joined(profile_from_frame(frame, columns), 9)[QUANTITIES[quantity].column][0]
    # one multiplication and one addition of doubles
    assert found == pytest.approx(float(ours), rel=4e-16, abs=1e-13)


def test_power_factor_becomes_a_lagging_displacement():
    frame = pd.DataFrame({"t": [0.0, 1.0, 2.0, 3.0, 4.0], "I": 1.0, "pf": [1.0, 0.5, 0.0, -1.0, 0.0]})
    profile = profile_from_frame(frame, {"time": {"column": "t", "unit": "s"}, "current": {"column": "I", "unit": "A rms"}, "power_factor": "pf"})
    # analytic: arc cosines
    np.testing.assert_allclose(joined(profile, 2)["phi_rad"], [0.0, math.pi / 3, math.pi / 2, math.pi], atol=1e-15)
    assert any("taken as lagging" in n for n in profile.notes)


@pytest.mark.parametrize("quantity", ["time", "current", "torque", "speed", "frequency", "displacement", "coolant", "dc_voltage"])
def test_no_unit_is_taken_for_granted(quantity):
    with pytest.raises(InputError, match="no unit"):
        conversion(quantity, None, "here")


# ------------------------------------------------------------ forms of CSV

SEMICOLONS = CSV.replace(",", ";").replace("100", "100,5").replace(";150;", "; +1,5e2 ;")
VARIANTS = {
    "semicolons and decimal commas": ({"delimiter": ";", "decimal": ","}, SEMICOLONS.encode()),
    "tabs": ({"delimiter": "\t"}, CSV.replace(",", "\t").replace("100", "100.5").encode()),
    "byte-order mark": ({}, b"\xef\xbb\xbf" + CSV.replace("100", "100.5").encode()),
    "CR LF": ({}, CSV.replace("100", "100.5").replace("\n", "\r\n").encode()),
    "CR": ({}, CSV.replace("100", "100.5").replace("\n", "\r").encode()),
    "no end of line at the end": ({}, CSV.replace("100", "100.5").rstrip().encode()),
    "blank lines at the end": ({}, CSV.replace("100", "100.5").encode() + b"\n\r\n\n"),
    "blank lines between": ({}, CSV.replace("100", "100.5").replace("\n2", "\n\n2").encode()),
    "blanks around numbers": ({}, CSV.replace(",100,", ", 100.5 ,").encode()),
    "quoted numbers": ({}, CSV.replace(",100,", ',"100.5",').encode()),
    "exponents": ({}, CSV.replace(",100,", ",1.005E+02,").encode()),
    "UTF-16": ({"encoding": "utf-16"}, CSV.replace("100", "100.5").encode("utf-16")),
    "UTF-8 by another name": ({"encoding": "UTF_8"}, b"\xef\xbb\xbf" + CSV.replace("100", "100.5").encode()),
    "a column that nobody reads": ({}, CSV.replace("100", "100.5").replace("\n", ",\xe4?\n").encode("latin-1").replace(b"what,\xe4?", b"what,note")),
}


@pytest.mark.parametrize("name", VARIANTS)
def test_forms_of_csv(name, tmp_path):
    changes, raw = VARIANTS[name]
    write(tmp_path, {"duty.csv": raw})
    found = joined(read(tmp_path, **changes), 3)
    assert found["current_a"].tolist() == [0.0, 100.5, 150.0, -80.0] and found["coolant_c"].tolist() == [40.0, 40.0, 40.0, 41.0]
    assert found["dt_s"].tolist() == [1.0] * 4 and found["phase_id"].tolist() == [0, 1, 1, 2]


def test_umlauts_in_cp1252(tmp_path):
    write(tmp_path, {"duty.csv": CSV.replace("T_in", "T_Kühlmittel").replace("brake", "zurück").encode("cp1252")})
    table = duty()
    table["columns"]["coolant"]["column"] = "T_Kühlmittel"
    profile = read(tmp_path, encoding="cp1252", columns=table["columns"])
    assert profile.phases == ("idle", "go", "zurück") and profile.ranges["coolant_c"] == (40.0, 41.0)


def test_quoted_phase_names_may_hold_the_delimiter_and_quotes(tmp_path):
    write(tmp_path, {"duty.csv": CSV.replace("brake", '"brake, ""hard"""')})
    assert read(tmp_path).phases == ("idle", "go", 'brake, "hard"')


def test_time_stamps_in_three_doors(tmp_path):
    stamps = ["2031-05-04T06:30:00", "2031-05-04T06:30:00.25", "2031-05-04 06:30:01", "2031-05-04T08:30:02+02:00", "2031-05-04T06:30:03Z"]
    frame = FRAME.assign(t=stamps)
    frame.to_csv(tmp_path / "duty.csv", index=False)
    frame.assign(t=pd.to_datetime(stamps, format="ISO8601", utc=True)).to_parquet(tmp_path / "stamps.parquet")
    frame.to_parquet(tmp_path / "texts.parquet")
    columns = {**duty()["columns"], "time": {"column": "t", "unit": "datetime"}}
    profiles = [read(tmp_path, n, columns=columns) for n in ("duty.csv", "stamps.parquet", "texts.parquet")]
    profiles += [profile_from_frame(f, columns) for f in (frame, frame.assign(t=pd.to_datetime(stamps, format="ISO8601", utc=True)))]
    for profile in profiles:
        # seconds since 1970 in doubles are good to a quarter of a microsecond
        np.testing.assert_allclose(joined(profile, 2)["time_s"], [0.0, 0.25, 1.0, 2.0], atol=3e-7)


# ------------------------------------------------------------ forms of Parquet
NUMBERS = [0, 1, 2, 3]
KINDS = [pa.int8(), pa.int16(), pa.int32(), pa.int64(), pa.uint8(), pa.uint64(), pa.float16(), pa.float32(), pa.float64(), pa.decimal128(9, 2)]


@pytest.mark.parametrize("kind", KINDS, ids=str)
def test_number_types_of_parquet(kind, tmp_path):
    values = pa.array([Decimal(v) for v in NUMBERS] if pa.types.is_decimal(kind) else np.array(NUMBERS, kind.to_pandas_dtype()), kind)
    words = pa.array(["a", "a", "b", "b"]).dictionary_encode()
    pq.write_table(pa.table({"t": values, "I": values, "n": values, "T_in": values, "what": words}), tmp_path / "duty.parquet")
    found = joined(read(tmp_path, "duty.parquet"), 2)
    assert found["current_a"].tolist() == [0.0, 1.0, 2.0] and found["current_a"].dtype == float and found["phase_id"].tolist() == [0, 0, 1]


def row_groups(path, *sizes, values=range(100)):
    schema = pa.schema([("t", pa.float64()), ("I", pa.float64()), ("n", pa.float64()), ("T_in", pa.float64()), ("what", pa.string())])
    values = list(values)
    with pq.ParquetWriter(path, schema) as writer:
        for size in sizes:
            part, values = [float(v) for v in values[:size]], values[size:]
            writer.write_table(pa.table([part, [1.0] * size, [0.0] * size, [40.0] * size, ["a"] * size], schema=schema))


def test_empty_row_groups_of_parquet(tmp_path):
    row_groups(tmp_path / "duty.parquet", 0, 1, 0, 0, 3, 0)
    profile = read(tmp_path, "duty.parquet")
    assert profile.duration_s == 3.0 and joined(profile, 1)["time_s"].tolist() == [0.0, 1.0, 2.0]


def test_row_numbers_after_empty_row_groups(tmp_path):
    row_groups(tmp_path / "duty.parquet", 0, 2, 0, 2, values=[0, 1, 2, 1.5])
    with pytest.raises(InputError, match="row 4, column 't'"):
        read(tmp_path, "duty.parquet")


@pytest.mark.parametrize("rows", [1, 2, 3, 7, 1000])
def test_row_numbers_do_not_depend_on_blocks(rows, tmp_path):
    write(tmp_path, {"duty.csv": CSV})
    profile = read(tmp_path)
    write(tmp_path, {"duty.csv": CSV.replace("3,-80", "3,nan")})  # the file changes after the check
    with pytest.raises(InputError, match="duty.csv, line 5, column 'I'"):
        list(profile.blocks(rows))


# ------------------------------------------------------------ frames
def test_a_frame_may_change_afterwards():
    frame = FRAME.copy()
    profile = profile_from_frame(frame, DUTY["columns"])
    before = joined(profile, 9)
    frame.loc[:, "I"] = 0.0
    frame["n"].to_numpy(copy=False)
    same(joined(profile, 9), before)


def test_blocks_cannot_change_the_duty():
    profile = profile_from_frame(FRAME, DUTY["columns"])
    first = next(profile.blocks(2))
    with pytest.raises(ValueError, match="read-only"):
        first.columns["current_a"] *= 2.0


BROKEN_FRAMES = {
    "text": ({"I": ["0", "1", "x", "3", "4"]}, "row 1, column 'I'", "'0'"),
    "None": ({"I": [0.0, None, 1.0, 2.0, 3.0]}, "row 2, column 'I'", "nan"),
    "None among objects": ({"I": pd.Series([0.0, None, 1.0, 2.0, 3.0], dtype=object)}, "row 2, column 'I'", "None"),
    "missing value of a nullable type": ({"I": pd.array([0, None, 1, 2, 3], dtype="Int64")}, "row 2, column 'I'", "nan"),
    "booleans": ({"I": [True] * 5}, "row 1, column 'I'", "True"),
    "complex": ({"I": np.array([1j] * 5)}, "row 1, column 'I'", "1j"),
    "time differences": ({"t": pd.to_timedelta([0, 1, 2, 3, 4], unit="s")}, "row 1, column 't'", "Timedelta"),
    "no word for a phase": ({"what": ["a", None, "b", "c", "d"]}, "row 2, column 'what'", "a word"),
    "a list for a phase": ({"what": ["a", ["b"], "b", "c", "d"]}, "row 2, column 'what'", "['b']"),
    "an int beyond all doubles": ({"I": pd.Series([0, 10**400, 1, 2, 3], dtype=object)}, "row 2, column 'I'", "a finite number"),
    "numbers for phases": ({"what": [1, 2, 3, 4, 5]}, "row 1, column 'what'", "a word"),
    "decreasing": ({"t": [0.0, 1.0, 0.5, 2.0, 3.0]}, "row 3, column 't'", "rise"),
}


@pytest.mark.parametrize("name", BROKEN_FRAMES)
def test_broken_frames(name):
    changes, place, words = BROKEN_FRAMES[name]
    with pytest.raises(InputError) as caught:
        profile_from_frame(FRAME.assign(**changes), DUTY["columns"])
    assert str(caught.value).startswith(f"DataFrame, {place}") and words in str(caught.value)


@pytest.mark.parametrize(("frame", "columns", "words"), [(None, DUTY["columns"], "frame: found a NoneType"), ([1, 2], DUTY["columns"], "frame: found a list"),
                                                         (FRAME, None, "columns: found a NoneType"), (FRAME, ["t", "I"], "columns: found a list")])
def test_what_is_no_frame_or_no_map_is_refused(frame, columns, words):
    with pytest.raises(InputError, match=words):
        profile_from_frame(frame, columns)


def test_numbers_are_no_time_stamps():
    with pytest.raises(InputError, match="row 1, column 't'.*ISO 8601"):
        profile_from_frame(FRAME.assign(t=[20310504, 20310505, 20310506, 20310507, 20310508]), {**DUTY["columns"], "time": {"column": "t", "unit": "datetime"}})


def test_a_name_twice_in_a_frame():
    with pytest.raises(InputError, match="'I' 2 times"):
        profile_from_frame(pd.concat([FRAME, FRAME[["I"]]], axis=1), DUTY["columns"])


def test_column_names_that_are_numbers():
    frame = FRAME.rename(columns={"I": 7})
    assert profile_from_frame(frame, {**DUTY["columns"], "current": {"column": "7", "unit": "A rms"}}).ranges["current_a"] == (-80.0, 150.25)


def test_decimals_and_mixed_numbers_of_a_frame():
    frame = FRAME.assign(I=pd.Series([Decimal("0.5"), 1, 2.5, np.float32(3), np.int8(4)], dtype=object))
    assert joined(profile_from_frame(frame, DUTY["columns"]), 9)["current_a"].tolist() == [0.5, 1.0, 2.5, 3.0]


@pytest.mark.parametrize("values", [{"longest_step_s": -1.0}, {"longest_step_s": math.nan}, {"last_row_lasts_s": 0.0}, {"last_row_lasts_s": math.inf}])
def test_settings_of_a_frame_are_checked(values):
    with pytest.raises(RangeError, match=next(iter(values))):
        profile_from_frame(FRAME, DUTY["columns"], **values)


@pytest.mark.parametrize("rows", [0, -1, 2.5, True, None])
def test_blocks_need_a_size(rows):
    with pytest.raises(RangeError, match="at least 1"):
        list(profile_from_frame(FRAME, DUTY["columns"]).blocks(rows))


# ------------------------------------------------------------ long files
ROWS = 2_000_000
#: Peak resident memory over that of reading a short file [MB]. Read in one block the same file takes about 500 MB.
MEMORY_MB = 180

PROBE = """
    import sys, time
    from pathlib import Path
    from mission.duty import DutySpec, read_profile
    from mission.tomlfile import parse_model

    def go(name):
        spec = parse_model({"file": name, "columns": {"time": {"column": "t", "unit": "s"}, "current": {"column": "I", "unit": "A peak"},
                            "speed": {"column": "n", "unit": "rpm"}, "coolant": {"column": "T_in", "unit": "degC"}, "phase": {"column": "what"}}}, DutySpec, "x")
        begin = time.perf_counter()
        profile = read_profile(spec, Path(sys.argv[1]))
        check = time.perf_counter() - begin
        begin = time.perf_counter()
        rows = sum(b.dt_s.size for b in profile.blocks())
        return rows, check, time.perf_counter() - begin

    def peak_mb():
        # not ru_maxrss, which a child process takes over from its parent
        return int(next(line for line in Path("/proc/self/status").read_text().splitlines() if line.startswith("VmHWM")).split()[1]) / 1024

    go("short" + sys.argv[2])
    base = peak_mb()
    rows, check, read = go("long" + sys.argv[2])
    print(rows, check, read, peak_mb() - base)
"""


@pytest.mark.slow
@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="peak memory is read from Linux' /proc")
@pytest.mark.parametrize("ending", [".csv", ".parquet"])
def test_two_million_rows_in_bounded_memory(ending, tmp_path, capsys):
    import pyarrow.csv as pc

    for name, n in (("short", 1000), ("long", ROWS)):
        k = np.arange(n)
        words = np.array(["cruise out", "cruise back, against the current", "dock"], dtype=object)[k // 500 % 3]
        table = pa.table({"t": k * 0.5, "I": np.round(100 * np.sin(k / 50.0), 3), "n": np.round(600 * np.cos(k / 70.0), 2), "T_in": np.full(n, 40.5), "what": pa.array(words)})
        if ending == ".csv":
            pc.write_csv(table, tmp_path / f"{name}.csv")
        else:
            pq.write_table(table, tmp_path / f"{name}.parquet", row_group_size=200_000)
    found = subprocess.run([sys.executable, "-c", textwrap.dedent(PROBE), str(tmp_path), ending], capture_output=True, text=True, check=True,
                           cwd=Path(mission.__file__).parent.parent, timeout=300)
    rows, check, reading, more = map(float, found.stdout.split())
    with capsys.disabled():
        print(f"\n{ending}: checked at {ROWS / check:.3g} rows/s, read again at {ROWS / reading:.3g} rows/s, {more:.0f} MB over a short file")
    assert rows == ROWS - 1 and more < MEMORY_MB
