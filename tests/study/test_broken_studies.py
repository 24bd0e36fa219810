"""Every broken study ends in one InputError that names file, place, value and what is allowed."""

import pytest

from mission.errors import InputError
from mission.study import check_parts, check_rows, load_study

from .broken_studies import BROKEN_STUDIES
from .good_study import CSV, DIRECT_CSV, STUDY, direct_study, module_text, study, toml_text, write


@pytest.mark.parametrize("case", BROKEN_STUDIES, ids=[c.name for c in BROKEN_STUDIES])
def test_message_names_place_value_and_what_is_allowed(case, tmp_path):
    write(tmp_path, {"study.toml": case.content(), **case.files})
    with pytest.raises(InputError) as caught:
        check_rows(load_study(tmp_path / "study.toml"))
    text = str(caught.value)
    missing = [f for f in case.fragments if f not in text]
    assert not missing, f"{missing} not in: {text}"
    assert "allowed: " in text and len(text) < 1000 and text.isprintable()


def test_names_are_different_and_many():
    names = [c.name for c in BROKEN_STUDIES]
    assert len(set(names)) == len(names) >= 20


GOOD = {
    "machine": (study(), CSV),
    "direct": (direct_study(), DIRECT_CSV),
    "torque": (study(duty={**STUDY["duty"], "columns": {**{k: v for k, v in STUDY["duty"]["columns"].items() if k != "current"}, "torque": {"column": "I", "unit": "N m"}}}), CSV),
    "whole numbers where decimals may stand": (study(cooling={"kind": "fixed", "r_th_k_per_w": 1}), CSV),
}


@pytest.mark.parametrize("name", GOOD)
def test_good_studies_pass(name, tmp_path):
    data, csv = GOOD[name]
    write(tmp_path, {"study.toml": toml_text(data), "duty.csv": csv})
    good = load_study(tmp_path / "study.toml")
    check_rows(good)
    check_parts(good)
    assert good.profile.rows == csv.count("\n") - 2


def test_a_file_in_the_current_folder_does_not_change_what_a_name_means(tmp_path, monkeypatch):
    write(tmp_path / "here", {"heron-300.toml": module_text("kite-300"), "mine.toml": module_text()})
    write(tmp_path, {"study.toml": toml_text(study()), "duty.csv": CSV})
    monkeypatch.chdir(tmp_path / "here")
    assert load_study(tmp_path / "study.toml").module.name == "Heron 300"
    write(tmp_path, {"study.toml": toml_text(study(module={"name": "mine"}))})
    with pytest.raises(InputError, match="field module.name"):
        load_study(tmp_path / "study.toml")


@pytest.fixture
def good(tmp_path):
    write(tmp_path, {"study.toml": toml_text(study()), "duty.csv": CSV})
    return load_study(tmp_path / "study.toml")


def test_changed_studies_are_checked_like_the_file(good):
    assert good.changed("inverter", switching_frequency_hz=4000).spec.inverter.switching_frequency_hz == 4000.0
    assert good.spec.inverter.switching_frequency_hz == 5000.0
    for section, values, words in (
        ("inverter", {"dc_voltage_v": 1500.0}, "below the blocking voltage"), ("inverter", {"switching_frequency": 1.0}, "did you mean 'switching_frequency_hz'"),
        ("coolings", {}, "one of format"), ("name", {"x": 1}, "a single value"), ("format", {}, "a single value"),
    ):
        with pytest.raises(InputError, match=words):
            good.changed(section, **values)
