"""result.json, the files of a result and the text of the command."""

from __future__ import annotations

import json

import numpy as np
import pandas as pd
import pytest

import mission
from mission.show import SCHEMA_VERSION, ResultDocument, build_document, save_result
from mission.show.text import number, result_text


@pytest.fixture(scope="module")
def result():
    return mission.run(mission.load_study("profiles/ferry-hour.toml"))


@pytest.fixture(scope="module")
def folder(result, tmp_path_factory):
    folder = tmp_path_factory.mktemp("result")
    save_result(result, folder)
    return folder


def test_document_fits_its_own_published_schema(result):
    """*Independent code*: the jsonschema library judges the document by the schema that ``mission schema`` prints."""
    import jsonschema

    document = json.loads(build_document(result).model_dump_json())
    jsonschema.validate(document, ResultDocument.model_json_schema())
    assert document["schema_version"] == SCHEMA_VERSION == 1
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate({**document, "chips": "none"}, ResultDocument.model_json_schema())


def test_the_numbers_of_the_document_are_those_of_the_result(result):
    document = build_document(result)
    assert [c.peak_c for c in document.chips] == pytest.approx(result.history.peak_c.tolist())
    assert len(document.ledger) == 24
    for entry, row in zip(document.ledger, result.ledger.rows()):
        assert entry.damage_per_mission == row.damage_per_mission
        assert sum(entry.damage_by_phase.values()) == pytest.approx(row.damage_per_mission, rel=1e-9)
        assert sum(entry.damage_by_kind.values()) == pytest.approx(row.damage_per_mission, rel=1e-9)
    assert document.network.modes_full > document.network.local_modes_per_chip + document.network.shared_modes
    assert any("tested range" in line for line in document.rests_on)
    assert any("repeats" in line for line in document.rests_on)
    assert any("lethal voltage" in line for line in document.cautions)


def test_every_file_is_there_and_agrees(result, folder):
    names = {p.name for p in folder.iterdir()}
    assert {"result.json", "ledger.csv", "cycles.parquet", "history.parquet", "report.html"} <= names
    assert sum(n.endswith(".png") for n in names) == sum(n.endswith(".svg") for n in names) >= 5
    assert not any(n.endswith(".part") for n in names)
    document = json.loads((folder / "result.json").read_text(encoding="utf-8"))
    cycles = pd.read_parquet(folder / "cycles.parquet")
    history = pd.read_parquet(folder / "history.parquet")
    ledger = pd.read_csv(folder / "ledger.csv")
    assert len(ledger) == 24
    assert history["S-a-up t_vj_max_c"].max() == pytest.approx(document["chips"][0]["peak_c"], abs=1e-6)
    assert history["end_s"].iloc[-1] == pytest.approx(document["duty"]["duration_s"])
    own = cycles[cycles["signal"] == "S-a-up"]
    assert own["count"].sum() == pytest.approx(document["ledger"][0]["cycles"], rel=1e-6)
    largest = own.loc[own["range_k"].idxmax()]
    assert largest["max_c"] == pytest.approx(document["chips"][0]["peak_c"], abs=0.01)


def test_ripple_and_cruise_are_counted(result):
    """Periods of the duty and cycles of a chip: every output period above the slow limit is a cycle somewhere."""
    rows = result.study.profile.to_frame()
    f = 6 * rows["speed_rad_s"].abs() / (2 * np.pi)
    periods = (f * rows["dt_s"])[(f >= 5.0) & (rows["current_a"].abs() > 0.0)].sum()
    cycles = result.cycles
    counted = cycles.count[cycles.signal == 0].sum()
    assert counted == pytest.approx(periods, rel=0.05)


def test_text_names_the_worst_chip_and_warns(result):
    text = result_text(result)
    worst = result.ledger.worst("bond wires and chip joint")
    assert worst.chip in text and "outside the tested range" in text and "High voltage" in text


@pytest.mark.parametrize("value, words", [(0.0, "0"), (13.654, "13.65"), (1234.5, "1 234"), (float("inf"), "without end"), (float("nan"), "not known"), (2.5e-7, "2.50e-07")])
def test_number(value, words):
    assert number(value) == words
