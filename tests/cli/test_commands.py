"""The commands beside ``run`` and ``check``: what they write, print and return."""

import json

import pandas as pd
import pytest

from mission.cli import BAD_INPUT, FINE, MISSED, main
from mission.device import load_module

from ..study.good_study import CSV, study, toml_text, write


def two_studies(folder, **second):
    write(folder, {"duty.csv": CSV, "a.toml": toml_text(study()), "b.toml": toml_text(study(**{"module": {"name": "swift-400"}, **second}))})
    return [str(folder / "a.toml"), str(folder / "b.toml")]


def test_compare_writes_and_prints_both_sides(tmp_path, capsys):
    assert main(["compare", *two_studies(tmp_path), "--out", str(tmp_path / "out")]) == FINE
    text = capsys.readouterr().out
    assert "Heron 300" in text and "Swift 400" in text and "losses of a mission, kWh" in text
    table = pd.read_csv(tmp_path / "out" / "comparison.csv")
    assert list(table["name"]) == ["Heron 300", "Swift 400"] and (table["energy_kwh"] > 0.0).all()
    sides = json.loads((tmp_path / "out" / "comparison.json").read_text(encoding="utf-8"))["sides"]
    assert [s["name"] for s in sides] == ["Heron 300", "Swift 400"]
    assert {"comparison.png", "comparison.svg"} <= {p.name for p in (tmp_path / "out").iterdir()}


def test_compare_is_one_where_a_limit_is_missed(tmp_path):
    assert main(["compare", *two_studies(tmp_path, limits={"t_vj_max_c": 42}), "--out", str(tmp_path / "out"), "--quiet"]) == MISSED


@pytest.mark.parametrize(("change", "more", "words"), [
    ({"lifetime": {"missions_per_year": 7}}, [], "compare studies of the same duty"),
    ({}, ["--names", "one"], "2, one for every study"),
    ({"module": {"name": "swift-40"}}, [], "did you mean 'swift-400'?"),
])
def test_compare_refuses(tmp_path, capsys, change, more, words):
    assert main(["compare", *two_studies(tmp_path, **change), "--out", str(tmp_path / "out"), *more]) == BAD_INPUT
    err = capsys.readouterr().err
    assert words in err and "Traceback" not in err


def test_compare_needs_two(tmp_path, capsys):
    assert main(["compare", two_studies(tmp_path)[0], "--out", str(tmp_path / "out")]) == BAD_INPUT
    assert "two or more studies" in capsys.readouterr().err


def test_rating_writes_a_table_and_a_picture(tmp_path, capsys):
    a, _ = two_studies(tmp_path)
    assert main(["rating", a, "--out", str(tmp_path / "out"), "--coolant", "50", "--power-factor", "0.9"]) == FINE
    assert "standstill" in capsys.readouterr().out
    table = pd.read_csv(tmp_path / "out" / "rating.csv")
    assert (table["coolant_c"] == 50.0).all() and (table["t_vj_max_c"] <= 150.0 + 1e-6).all() and 0.0 in set(table["output_frequency_hz"])
    for flag, value, words in (("--power-factor", "3", "power_factor"), ("--mod-index", "2", "mod_index"), ("--coolant", "900", "coolant_c")):
        assert main(["rating", a, "--out", str(tmp_path / "out"), flag, value]) == BAD_INPUT
        assert words in capsys.readouterr().err


def test_module_prints_and_draws(tmp_path, capsys):
    assert main(["module", "heron-300", "--out", str(tmp_path / "out")]) == FINE
    text = capsys.readouterr().out
    assert "Heron 300" in text and "113 A" in text  # where the on-state curves cross
    assert {p.suffix for p in (tmp_path / "out").iterdir()} == {".png", ".svg", ".txt"}
    assert main(["module", "heron-30"]) == BAD_INPUT
    assert "did you mean 'heron-300'?" in capsys.readouterr().err
    assert main(["module", "heron-300", "--modulation", "space vector"]) == BAD_INPUT
    assert "did you mean 'space-vector'?" in capsys.readouterr().err
    for flag, value in (("--dc-voltage", "nan"), ("--dc-voltage", "1300"), ("--switching-frequency", "1e9"), ("--switching-frequency", "0")):
        assert main(["module", "heron-300", flag, value]) == BAD_INPUT
        out, err = capsys.readouterr()
        assert flag in err and out == ""


def test_sheet_makes_the_shipped_module(tmp_path, capsys):
    out = tmp_path / "swift.toml"
    assert main(["sheet", "profiles/swift-400-sheet/sheet.toml", "--out", str(out)]) == FINE
    assert "branches" in capsys.readouterr().out
    assert load_module(out) == load_module("swift-400")
    assert main(["sheet", "profiles/swift-400-sheet/none.toml", "--out", str(out)]) == BAD_INPUT
    assert "no such file" in capsys.readouterr().err
