"""A user's coefficient file in a failure mode, and a model that refuses beside a threshold."""

from dataclasses import replace

import numpy as np
import pytest

from mission.cycles import CycleCounter
from mission.device import load_module
from mission.errors import InputError, RangeError
from mission.lifetime import DamageLedger, FailureMode, Mode, load_model, resolve_modes

from . import twins
from .broken_sets import BROKEN_MODES, BROKEN_SETS, OWN_SET
from .factories import BAYERER, CHIPS, cycles

REFUSING = Mode("wires", "junction", "all", load_model("lesit-1997-refit", {"outside_range": "refuse"}))


def ledger_of(table, mode):
    ledger = DamageLedger([mode], CHIPS, ("day",), missions_per_year=1.0)
    ledger.add(table)
    return ledger


def mode_of(model, **more):
    return FailureMode(**{"name": "own", "acts_on": "junction", "chips": "switches", "model": model, **more})


def test_own_file_in_a_failure_mode(tmp_path):
    text = OWN_SET.replace("a = 3.0e5", "a = 302500.0").replace("-5.0", "-5.039").replace("9.9e-20", "9.891e-20")
    (tmp_path / "own.toml").write_text(text, encoding="utf-8")
    [mode] = resolve_modes([mode_of("own.toml")], load_module("heron-300"), folder=tmp_path)
    ledger = ledger_of(cycles([{"count": 7.0}, {"range_k": 35.0}]), mode)
    row = ledger.rows()[0]
    assert row.model == "works-2024" and not row.damage_by_choice
    # independent code; 35 K lies below the file's own range
    small = 1.0 / twins.lesit_refit(35.0, 80.0)
    assert row.damage_per_mission == pytest.approx(7.0 / twins.lesit_refit(50.0, 80.0) + small, rel=1e-9)
    assert row.outside_share == pytest.approx(small / row.damage_per_mission, rel=1e-9)
    assert any("works-2024 " in w and "outside range_k 40 to 90" in w for w in ledger.warnings())


def test_own_file_gets_what_the_module_knows(tmp_path):
    text = OWN_SET.replace("swing-and-mean", "sintered").replace("a = 3.0e5\nexponent = -5.0\nactivation_j = 9.9e-20", (
        "a = 3.4368e14\nalpha = -4.923\nbeta0 = 1.942\nbeta1_per_k = -9.012e-3\nc = 1.434\ngamma = -1.208\n"
        "activation_ev = 0.06606\ndiode_factor = 0.6204"))
    (tmp_path / "own.toml").write_text(text, encoding="utf-8")
    module = load_module("kite-300")
    [mode] = resolve_modes([mode_of("own.toml")], module, folder=tmp_path)
    assert mode.model.options["aspect_ratio"] == module.wires.loop_aspect_ratio


@pytest.mark.parametrize(("change", "fragments"), [b[1:] for b in BROKEN_SETS], ids=[b[0] for b in BROKEN_SETS])
def test_broken_file_in_a_failure_mode(change, fragments, tmp_path):
    (tmp_path / "own.toml").write_text(OWN_SET.replace(*change, 1), encoding="utf-8")
    with pytest.raises(InputError) as caught:
        resolve_modes([mode_of("own.toml")], load_module("heron-300"), folder=tmp_path, where="day.toml")
    text = str(caught.value)
    assert "own.toml" in text and "content" not in text
    assert not [f for f in fragments if f not in text], text


@pytest.mark.parametrize(("raw", "found"), [
    ("format = 1\n", "kind"), ("[content]\nkind = 1\n", "kind"), ("kind = 3\n", "kind"), ("kind = ['sintered']\n", "kind"),
    (OWN_SET.split("[coeff")[0] + "coefficients = 3\n[tested_range]\n", "field coefficients: found value 3")])
def test_messages_speak_of_the_file_not_of_us(raw, found, tmp_path):
    (tmp_path / "own.toml").write_text(raw, encoding="utf-8")
    with pytest.raises(InputError) as caught:
        load_model("own.toml", folder=tmp_path)
    text = str(caught.value)
    assert "own.toml" in text and found in text and "allowed:" in text
    assert "content" not in text.replace("unknown key 'content'", "")


def test_every_wrong_option_names_a_value_and_what_is_allowed():
    for name, model, options, _ in BROKEN_MODES:
        with pytest.raises(InputError) as caught:
            load_model(model, options)
        err = caught.value
        assert err.where and err.found and err.allowed and "content" not in str(err), name


@pytest.mark.parametrize("value", [float("nan"), float("-inf"), 0, -0.3, False, "0.3", [0.3]])
def test_no_odd_number_passes_for_an_option(value):
    with pytest.raises(InputError, match="option aspect_ratio: found value .*; allowed: a number above 0"):
        load_model("sintered-2013", {"aspect_ratio": value})


# --- refuse ---------------------------------------------------------------------------------

SMALL_AND_TESTED = [{"range_k": 5.0, "count": 100.0}, {"range_k": 50.0}]


def test_refusing_model_stops_the_ledger():
    with pytest.raises(RangeError, match="range_k 5, .*only cycles inside range_k 30 to 80"):
        ledger_of(cycles(SMALL_AND_TESTED), REFUSING)
    assert ledger_of(cycles(SMALL_AND_TESTED[1:]), REFUSING).rows()[0].damage_per_mission > 0.0


def test_what_a_threshold_leaves_out_is_not_refused():
    """Small swings are in every mission: with a threshold they are left out and told, as with a model that refuses nothing."""
    got = ledger_of(cycles(SMALL_AND_TESTED), replace(REFUSING, threshold_k=30.0))
    want = ledger_of(cycles(SMALL_AND_TESTED), replace(REFUSING, threshold_k=30.0, model=load_model("lesit-1997-refit")))
    assert got.rows() == want.rows() and got.warnings() == want.warnings()
    # independent code
    assert got.rows()[0].left_out_damage == pytest.approx(100.0 / twins.lesit_refit(5.0, 80.0), rel=1e-9)


@pytest.mark.parametrize("extra", [{"range_k": 81.0}, {"heating_s": 9.0}, {"range_k": 20.0}])
def test_what_is_charged_is_still_refused(extra):
    with pytest.raises(RangeError, match="only cycles inside"):
        ledger_of(cycles([*SMALL_AND_TESTED, extra]), replace(REFUSING, threshold_k=10.0))


def test_refusing_leaves_the_ledger_as_it_was():
    ledger = ledger_of(cycles([{}]), REFUSING)
    before = ledger.rows()
    with pytest.raises(RangeError):
        ledger.add(cycles(SMALL_AND_TESTED))
    assert ledger.rows() == before


# --- cycles -> ledger -------------------------------------------------------------------------

def test_counted_history_is_charged_once():
    """From samples to damage: 55 to 105 degC in 2 s, a hundred times; LESIT data, PEDS 1997, coefficients from memory: 536 710 cycles."""
    counter = CycleCounter(24)
    counter.push(3, [105.0, 55.0] * 100, np.arange(200.0) * 2.0)
    mode = Mode("wires", "junction", "all", load_model("lesit-1997-refit"))
    row = ledger_of(counter.finish("repeat", period_s=400.0), mode).rows()[3]
    assert row.cycles == 100.0 and row.outside_share == 0.0
    assert row.life_missions == pytest.approx(5_367.10, rel=1e-3)
    assert row.damage_by_kind["closed"] + row.damage_by_kind["residue"] == pytest.approx(row.damage_per_mission, rel=1e-12)




@pytest.mark.parametrize(("signal", "refused"), [(0, False), (6, True)])
def test_refusal_knows_switch_from_diode(signal, refused):
    """40 A per foot of the diodes lies outside the tested 3 to 23 A (R. Bayerer et al., CIPS 2008; range from memory)."""
    model = load_model("bayerer-2008-trench4", {**BAYERER, "diode_current_per_foot_a": 40.0, "outside_range": "refuse"})
    table = cycles([{"signal": signal, "range_k": 60.0}])
    mode = Mode("wires", "junction", "all", model, threshold_k=10.0)
    if refused:
        with pytest.raises(RangeError, match="diode_current_per_foot_a = 40 outside 3 to 23"):
            ledger_of(table, mode)
    else:
        assert ledger_of(table, mode).rows()[signal].damage_per_mission > 0.0
