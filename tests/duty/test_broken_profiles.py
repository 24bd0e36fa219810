"""Every broken duty ends in one InputError that names file, place, value and what is allowed."""

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from mission.duty import DutySpec, read_profile
from mission.errors import InputError
from mission.tomlfile import FileModel, parse_model

from ..study.good_study import CSV, write
from ..study.good_study import duty as good_duty
from .broken_profiles import BROKEN_PROFILES, PARQUET, parquet


class Study(FileModel):
    duty: DutySpec


def read(duty, folder):
    return read_profile(parse_model({"duty": duty}, Study, "study.toml").duty, folder)


@pytest.mark.parametrize("case", BROKEN_PROFILES, ids=[c.name for c in BROKEN_PROFILES])
def test_message_names_place_value_and_what_is_allowed(case, tmp_path):
    write(tmp_path, case.files)
    with pytest.raises(InputError) as caught:
        read(case.duty, tmp_path)
    text = str(caught.value)
    missing = [f for f in case.fragments if f not in text]
    assert not missing, f"{missing} not in: {text}"
    assert "allowed: " in text and len(text) < 1000 and text.isprintable()


def test_names_are_different_and_many():
    names = [c.name for c in BROKEN_PROFILES]
    assert len(set(names)) == len(names) >= 30


PIECES = st.one_of(st.binary(min_size=1, max_size=3), st.sampled_from([b"\x00", b'"', b",", b";", b"\r", b"\n", b"\xef\xbb\xbf", b"nan", b"1e999", b"\x0c", "\u00a0".encode()]))
DAMAGE = st.lists(st.tuples(st.floats(0, 1), st.integers(0, 6), PIECES), min_size=1, max_size=3)  # where, how many bytes go, what comes
SETTINGS = [{}, {"encoding": "cp1252"}, {"encoding": "utf-16"}, {"delimiter": ";", "decimal": ","}, {"last_row_lasts_s": 1.0},
            {"columns": {**good_duty()["columns"], "time": {"column": "t", "unit": "datetime"}}}, PARQUET]


@settings(max_examples=300, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(damage=DAMAGE, changes=st.sampled_from(SETTINGS))
def test_a_damaged_file_is_read_or_refused_and_nothing_else(damage, changes, tmp_path):
    name = changes.get("file", "duty.csv")
    write(tmp_path, parquet() if name == "duty.parquet" else {name: CSV})
    raw = bytearray((tmp_path / name).read_bytes())
    for where, gone, piece in damage:
        k = round(where * len(raw))
        raw[k:k + gone] = piece
    (tmp_path / name).write_bytes(bytes(raw))
    try:
        profile = read({**good_duty(), **changes}, tmp_path)
        assert sum(float(b.dt_s.sum()) for b in profile.blocks(3)) == pytest.approx(profile.duration_s, rel=1e-12)
    except InputError as err:
        assert (name in str(err) or "duty." in err.where) and str(err).isprintable()
