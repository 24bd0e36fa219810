"""Every broken module file ends in one InputError that names file, place, value and what is allowed."""

import pytest

from mission.device import load_module
from mission.errors import InputError

from .broken_modules import BROKEN_MODULES, broken_text


@pytest.mark.parametrize(("change", "fragments"), [b[1:] for b in BROKEN_MODULES], ids=[b[0] for b in BROKEN_MODULES])
def test_message_names_file_place_value_and_remedy(change, fragments, tmp_path):
    path = tmp_path / "mine.toml"
    path.write_text(broken_text(change), encoding="utf-8")
    with pytest.raises(InputError) as caught:
        load_module("mine.toml", tmp_path)
    text = str(caught.value)
    assert str(path) in text and "allowed:" in text
    missing = [f for f in fragments if f not in text]
    assert not missing, f"{missing} not in: {text}"


def test_names_are_different():
    names = [b[0] for b in BROKEN_MODULES]
    assert len(set(names)) == len(names) >= 12


@pytest.mark.parametrize(
    ("raw", "fragment"),
    [(b"", "empty file"), (b"\xff\xfe\x00", "not UTF-8"), (b"format = 1\n", "required")],
    ids=["empty", "encoding", "nearly empty"],
)
def test_files_that_are_no_module(raw, fragment, tmp_path):
    (tmp_path / "mine.toml").write_bytes(raw)
    with pytest.raises(InputError, match=fragment):
        load_module("mine.toml", tmp_path)
