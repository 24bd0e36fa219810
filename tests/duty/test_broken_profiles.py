"""Every broken duty ends in one InputError that names file, place, value and what is allowed."""

import pytest

from mission.duty import DutySpec, read_profile
from mission.errors import InputError
from mission.tomlfile import FileModel, parse_model

from ..study.good_study import write
from .broken_profiles import BROKEN_PROFILES


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
