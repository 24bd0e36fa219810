"""The ledger: what it books, where, and what it says about it."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.device import load_module
from mission.errors import InputError, RangeError
from mission.lifetime import DamageLedger, FailureMode, Mode, effect_of_choices, load_model, miner_sum, resolve_modes
from mission.tomlfile import parse_model

from . import twins
from .factories import BAYERER, CHIPS, cycles

LESIT = load_model("lesit-1997-refit")
PHASES = ("start", "cruise", "dock")
WIRES = Mode("wires", "junction", "all", LESIT)
PLATE = Mode("plate", "case", "all", load_model("coffin-manson", {"a": 5.12e9, "n": 3.0}))


def ledger_of(*tables, modes=(WIRES,), missions_per_year=100.0):
    ledger = DamageLedger(modes, CHIPS, PHASES, missions_per_year=missions_per_year)
    for table in tables:
        ledger.add(table)
    return ledger


def row_of(ledger, chip, mode="wires"):
    return next(r for r in ledger.rows() if r.chip == chip and r.mode == mode)


def test_miner_sum_of_three_swings():
    # M. A. Miner, J. Appl. Mech. 12, 1945, with LESIT lives (PEDS 1997 data, coefficients from memory); recomputed
    row = row_of(ledger_of(cycles([{"range_k": 30.0, "count": 1e6}, {"range_k": 50.0, "count": 1e5}, {"range_k": 80.0, "count": 1e4}])), "S-a-up")
    assert row.damage_per_mission == pytest.approx(0.527331, rel=1e-5)
    assert row.life_missions == pytest.approx(1.896343, rel=1e-5)
    assert row.life_years == pytest.approx(0.01896343, rel=1e-5)  # analytic: a hundred missions a year
    assert row.cycles == 1_110_000 and row.outside_share == 0.0 and row.model == "lesit-1997-refit"


def test_every_signal_finds_its_chip():
    table = cycles([{"signal": s, "range_k": 40.0 + s} for s in range(24)])
    ledger = ledger_of(table, modes=(WIRES, PLATE))
    for chip, name in enumerate(CHIPS):
        # independent code: the scalar twins
        assert row_of(ledger, name).damage_per_mission == pytest.approx(1.0 / twins.lesit_refit(40.0 + chip, 80.0), rel=1e-9)
        assert row_of(ledger, name, "plate").damage_per_mission == pytest.approx(1.0 / twins.coffin_manson(52.0 + chip, 5.12e9, 3.0), rel=1e-9)
    assert ledger.worst().mode == "plate" and ledger.worst().chip == "D-c-lo" == ledger.worst("wires").chip
    assert len(ledger.rows()) == len(ledger.to_frame()) == 24


def test_shared_case_point_is_booked_for_each_chip():
    rows = ledger_of(cycles([{"signal": s, "range_k": 33.0} for s in range(12, 24)]), modes=(PLATE,)).rows()
    assert [r.chip for r in rows] == list(CHIPS)
    assert len({r.damage_per_mission for r in rows}) == 1 and rows[0].damage_per_mission > 0.0


@pytest.mark.parametrize(("chips", "want"), [("all", CHIPS), ("switches", CHIPS[:6]), ("diodes", CHIPS[6:])])
def test_mode_looks_at_its_chips_only(chips, want):
    table = cycles([{"signal": s} for s in range(24)])
    ledger = DamageLedger([replace(WIRES, chips=chips)], CHIPS, PHASES, missions_per_year=1.0)
    booked = ledger.add(table)
    assert [r.chip for r in ledger.rows()] == list(want)
    assert [CHIPS[s] for s in np.flatnonzero(booked[0] > 0.0)] == list(want)


def test_diodes_wear_by_their_own_factor():
    # U. Scheuermann, R. Schmidt, PCIM Europe 2013: 0.6204 for freewheeling diodes (from memory)
    mode = Mode("wires", "junction", "all", load_model("sintered-2013", {"aspect_ratio": 0.31}))
    ledger = ledger_of(cycles([{"signal": 0, "range_k": 80.0}, {"signal": 6, "range_k": 80.0}]), modes=(mode,))
    assert row_of(ledger, "S-a-up").damage_per_mission / row_of(ledger, "D-a-up").damage_per_mission == pytest.approx(0.6204, rel=1e-9)


def test_damage_by_phase_and_by_time_scale():
    table = cycles([{"phase_id": 0, "kind": 0, "count": 3.0}, {"phase_id": 1, "kind": 2, "count": 500.0}, {"phase_id": 2, "kind": 1, "count": 0.5}])
    row = row_of(ledger_of(table), "S-a-up")
    one = 1.0 / twins.lesit_refit(50.0, 80.0)  # independent code
    assert row.damage_by_phase == pytest.approx({"start": 3 * one, "cruise": 500 * one, "dock": 0.5 * one}, rel=1e-9)
    assert row.damage_by_kind == pytest.approx({"closed": 3 * one, "residue": 0.5 * one, "ripple": 500 * one}, rel=1e-9)


def test_worst_swing_and_heaviest_class_are_not_the_same():
    table = cycles([{"range_k": 70.0, "start_s": 4.0, "heating_s": 1.5, "phase_id": 1}, {"range_k": 41.0, "count": 600.0, "phase_id": 2},
                    {"range_k": 44.0, "count": 400.0, "start_s": 9.0}])
    row = row_of(ledger_of(table), "S-a-up")
    assert (row.worst_range_k, row.worst_min_c, row.worst_max_c, row.worst_heating_s, row.worst_start_s, row.worst_phase) == (70.0, 45.0, 115.0, 1.5, 4.0, "cruise")
    # independent code
    assert row.worst_damage == pytest.approx(1.0 / twins.lesit_refit(70.0, 80.0), rel=1e-9)
    assert (row.heaviest_range_low_k, row.heaviest_range_high_k, row.heaviest_mean_low_c, row.heaviest_mean_high_c) == (40.0, 45.0, 80.0, 90.0)
    assert row.heaviest_cycles == 1000.0
    assert row.heaviest_damage == pytest.approx(600.0 / twins.lesit_refit(41.0, 80.0) + 400.0 / twins.lesit_refit(44.0, 80.0), rel=1e-9)


@pytest.mark.parametrize("swings", [(60.0, 61.0), (61.0, 60.0)])
def test_worst_swing_over_blocks(swings):
    row = row_of(ledger_of(*(cycles([{"range_k": r, "start_s": r}]) for r in swings)), "S-a-up")
    assert row.worst_range_k == row.worst_start_s == 61.0


def test_share_outside_and_its_warning():
    table = cycles([{"range_k": 90.0, "count": 2.0}, {"range_k": 50.0, "count": 4.0}, {"range_k": 60.0, "heating_s": 9.0}])
    ledger = ledger_of(table)
    row = row_of(ledger, "S-a-up")
    d = [2.0 / twins.lesit_refit(90.0, 80.0), 4.0 / twins.lesit_refit(50.0, 80.0), 1.0 / twins.lesit_refit(60.0, 80.0)]  # independent code
    assert row.outside_share == pytest.approx((d[0] + d[2]) / sum(d), rel=1e-9)
    assert row.outside_by == pytest.approx({"range_k": d[0] / sum(d), "mean_c": 0.0, "heating_s": d[2] / sum(d)}, rel=1e-9)
    [text] = ledger.warnings()
    assert text.startswith(f"wires: {row.outside_share:.0%} of the damage of S-a-up comes from cycles outside the tested range of lesit-1997-refit")
    assert "outside range_k 30 to 80" in text and "outside heating_s 0.6 to 4.8" in text and "mean_c" not in text


def test_small_share_is_not_called_none():
    [text] = ledger_of(cycles([{"range_k": 70.0, "count": 1000.0}, {"range_k": 20.0}])).warnings()
    assert "under 1%" in text and " 0%" not in text


def test_no_warning_where_all_was_tested():
    assert ledger_of(cycles([{}])).warnings() == []


def test_unstated_range_and_choices_are_warned_of():
    text = " | ".join(ledger_of(cycles([{"signal": 14}]), modes=(PLATE,)).warnings())
    assert "no tested range is stated for coffin-manson" in text
    mode = Mode("wires", "junction", "all", load_model("bayerer-2008-trench4", {**BAYERER, "wire_diameter_um": 600.0}))
    text = " | ".join(ledger_of(cycles([{}]), modes=(mode,)).warnings())
    assert "100% of the damage" in text and "wire_diameter_um = 600 outside 75 to 500" in text and "temperature term taken at the minimum" in text


def test_threshold_leaves_out_and_says_so():
    table = cycles([{"range_k": 10.0, "count": 1e4}, {"range_k": 20.0, "count": 10.0}, {"range_k": 50.0}])
    ledger = ledger_of(table, modes=(replace(WIRES, threshold_k=20.0),))
    row, full = row_of(ledger, "S-a-up"), row_of(ledger_of(table), "S-a-up")
    assert row.left_out_damage == pytest.approx(1e4 / twins.lesit_refit(10.0, 80.0), rel=1e-9)  # independent code; 20 K itself stays
    assert row.left_out_cycles == 1e4 and row.cycles == full.cycles == 10011.0
    assert row.damage_per_mission + row.left_out_damage == pytest.approx(full.damage_per_mission, rel=1e-12)
    assert full.left_out_damage == full.left_out_cycles == 0.0
    assert any("below 20 K are left out" in w for w in ledger.warnings())


def test_threshold_above_everything_still_speaks():
    ledger = ledger_of(cycles([{"range_k": 10.0}]), modes=(replace(WIRES, threshold_k=60.0),))
    row = row_of(ledger, "S-a-up")
    assert row.damage_per_mission == 0.0 and row.life_years == float("inf") and row.worst_phase == ""
    assert any("every swing lies below 60 K" in w for w in ledger.warnings())


def test_nothing_booked():
    ledger = ledger_of(cycles([]))
    assert all(r.life_years == float("inf") and r.damage_per_mission == 0.0 for r in ledger.rows())
    assert ledger.warnings() == [] and ledger_of(modes=()).worst() is None


@pytest.mark.parametrize(("bad", "fragment"), [
    ({"range_k": float("nan"), "min_c": 0.0, "max_c": 0.0}, r"cycles.range_k\[1\]"), ({"count": float("nan")}, r"cycles.count\[1\]"), ({"count": -1.0}, r"cycles.count\[1\]"),
    ({"heating_s": float("nan")}, r"cycles.heating_s\[1\]"), ({"signal": 24}, r"cycles.signal\[1\]"), ({"phase_id": 3}, r"cycles.phase_id\[1\]"),
    ({"phase_id": -1}, r"cycles.phase_id\[1\]"), ({"kind": 3}, r"cycles.kind\[1\]")])
def test_what_would_be_booked_wrong_is_refused(bad, fragment):
    with pytest.raises(RangeError, match=fragment):
        ledger_of(cycles([{}, bad]))


def test_ledger_refuses_nonsense():
    with pytest.raises(RangeError, match="missions_per_year"):
        DamageLedger([WIRES], CHIPS, PHASES, missions_per_year=0.0)
    with pytest.raises(RangeError, match="no names"):
        DamageLedger([WIRES], (), PHASES, missions_per_year=1.0)
    with pytest.raises(RangeError, match="phases"):
        DamageLedger([WIRES], CHIPS, (), missions_per_year=1.0)


ENTRY = st.fixed_dictionaries({
    "signal": st.sampled_from([0, 7, 12, 19]), "range_k": st.floats(0.0, 150.0), "mean_c": st.floats(-20.0, 150.0), "heating_s": st.floats(0.0, 1e4),
    "phase_id": st.integers(0, 2), "count": st.floats(0.0, 1e6), "kind": st.integers(0, 2)})
MODES = (WIRES, PLATE, Mode("by parameters", "junction", "all", load_model("bayerer-2008-trench4", BAYERER), threshold_k=12.0))


@settings(max_examples=40, deadline=None)
@given(st.lists(ENTRY, min_size=1, max_size=20), st.lists(st.integers(0, 20), max_size=4))
def test_damage_adds_over_any_split(entries, cuts):
    table = cycles(entries)
    edges = [0, *sorted(min(c, len(table)) for c in cuts), len(table)]
    whole = ledger_of(table, modes=MODES).rows()
    parts = ledger_of(*(table.select(slice(a, b)) for a, b in pairwise(edges)), modes=MODES).rows()
    for a, b in zip(whole, parts, strict=True):
        for name in ("damage_per_mission", "cycles", "outside_share", "left_out_damage", "left_out_cycles", "worst_damage", "heaviest_damage"):
            assert getattr(b, name) == pytest.approx(getattr(a, name), rel=1e-9, abs=1e-300), name
        assert b.damage_by_choice == pytest.approx(a.damage_by_choice, rel=1e-9)
        # the parts of one row add up to it
        assert sum(a.damage_by_phase.values()) == pytest.approx(a.damage_per_mission, rel=1e-9)
        assert sum(a.damage_by_kind.values()) == pytest.approx(a.damage_per_mission, rel=1e-9)
        assert 0.0 <= a.outside_share <= 1.0 + 1e-12


@settings(max_examples=40, deadline=None)
@given(st.lists(ENTRY, min_size=1, max_size=20), st.floats(1.01, 1.5))
def test_wider_swings_never_do_less(entries, factor):
    narrow = ledger_of(cycles(entries), modes=MODES[:2]).rows()
    wide = ledger_of(cycles([{**e, "range_k": e["range_k"] * factor} for e in entries]), modes=MODES[:2]).rows()
    for a, b in zip(narrow, wide, strict=True):
        assert b.damage_per_mission >= a.damage_per_mission * (1.0 - 1e-12)


def test_damage_of_each_entry_is_handed_back():
    table = cycles([{"count": 2.0}, {"signal": 13, "range_k": 20.0}, {"range_k": 0.0, "count": 7.0}])
    booked = DamageLedger((WIRES, PLATE), CHIPS, PHASES, missions_per_year=1.0).add(table)
    # independent code
    np.testing.assert_allclose(booked, [[2.0 / twins.lesit_refit(50.0, 80.0), 0.0, 0.0], [0.0, 20.0**3 / 5.12e9, 0.0]], rtol=1e-9)


def test_frame_holds_the_parts():
    frame = ledger_of(cycles([{"phase_id": 1}])).to_frame()
    row = frame.set_index("chip").loc["S-a-up"]
    assert row["damage in cruise"] == row["damage_per_mission"] == row["damage by closed cycles"] > 0.0
    assert row["damage with set = lesit-1997-print"] > 0.0 and row["share outside range_k"] == 0.0


# --- choices ---------------------------------------------------------------------------------

def test_effect_of_choices_on_one_swing():
    # R. Bayerer et al., CIPS 2008, coefficients from memory, recomputed: lives at 100 K from 50 degC, 1.5 s, 10 A, 1200 V, 300 um
    table = cycles([{"range_k": 100.0, "mean_c": 100.0, "heating_s": 1.5, "count": 1000.0}])
    got = {e.choice: e for e in effect_of_choices(table, load_model("bayerer-2008-trench4", BAYERER))}
    assert got["as chosen"].damage == pytest.approx(1000.0 / 101_850, rel=1e-3) and got["as chosen"].damage_ratio == 1.0
    assert got["temperature = maximum"].damage == pytest.approx(1000.0 / 39_796, rel=1e-3)
    assert got["set = bayerer-2008-standard"].damage == pytest.approx(1000.0 / 22_137, rel=1e-3)
    assert got["set = bayerer-2008-standard"].damage_ratio == pytest.approx(9.34 / 2.03, rel=1e-12)  # analytic
    assert got["heating_outside = extrapolate"].damage_ratio == pytest.approx(1.0)  # 1.5 s is inside
    assert got["heating_outside = power-0.3"].damage_ratio == pytest.approx(1.0)


def test_effect_of_choices_agrees_with_the_ledger():
    table = cycles([{"signal": s, "range_k": 20.0 + s, "heating_s": 0.02 * (s + 1), "count": 10.0} for s in range(12)])
    spec = FailureMode(name="w", acts_on="junction", chips="diodes", model="bayerer-2008-trench4", options=BAYERER, threshold_k=28.0)
    mode = Mode("w", "junction", "diodes", load_model("bayerer-2008-trench4", BAYERER), 28.0)
    rows = ledger_of(table, modes=(mode,)).rows()
    for given_as in (spec, mode):
        got = {e.choice: e.damage for e in effect_of_choices(table, given_as)}
        assert got.pop("as chosen") == pytest.approx(sum(r.damage_per_mission for r in rows), rel=1e-9)
        assert got == pytest.approx({c: sum(r.damage_by_choice[c] for r in rows) for c in rows[0].damage_by_choice}, rel=1e-9)


def test_effect_of_choices_of_an_incomplete_mode():
    with pytest.raises(InputError, match="failure mode 'w', option aspect_ratio"):
        effect_of_choices(cycles([{}]), FailureMode(name="w", acts_on="junction", model="sintered-2013"))


# --- failure modes of a module and of a study -------------------------------------------------

def test_shipped_modules_resolve():
    for name in ("heron-300", "kite-300"):
        modes = resolve_modes(None, load_module(name))
        assert modes and all(isinstance(m, Mode) for m in modes)


def test_module_answers_what_the_mode_leaves_open():
    module = load_module("heron-300")
    mode = FailureMode(name="w", acts_on="junction", model="bayerer-2008-trench4", threshold_k=3.0)
    [got] = resolve_modes([mode], module)
    o = got.model.options
    assert o["v_class"] == module.ratings.v_ces_v / 100.0 and o["wire_diameter_um"] == module.wires.diameter_um
    assert o["current_per_foot_a"] == module.ratings.i_nominal_a / module.wires.feet_per_switch
    assert o["diode_current_per_foot_a"] == module.ratings.i_nominal_a / module.wires.feet_per_diode
    assert got.threshold_k == 3.0
    [own] = resolve_modes([mode.model_copy(update={"options": {"current_per_foot_a": 8.0}})], module)
    assert own.model.options["current_per_foot_a"] == 8.0 and "diode_current_per_foot_a" not in own.model.options


@pytest.mark.parametrize(("change", "fragments"), [
    ({"model": "lesit-1997"}, ["lifetime.failure_mode[2]", "'lesit-1997'", "did you mean"]),
    ({"options": {"aspect": 1.0}}, ["lifetime.failure_mode[2]", "aspect", "unknown option"]),
    ({"name": "first"}, ["lifetime.failure_mode[2], name", "second failure mode named 'first'"]),
])
def test_wrong_mode_of_a_study_is_placed(change, fragments):
    good = {"acts_on": "junction", "model": "lesit-1997-refit"}
    modes = [FailureMode(**{"name": "first", **good}), FailureMode(**{"name": "second", **good, **change})]
    with pytest.raises(InputError) as caught:
        resolve_modes(modes, load_module("heron-300"), where="day.toml")
    assert not [f for f in ["day.toml", *fragments] if f not in str(caught.value)], str(caught.value)


@pytest.mark.parametrize(("change", "fragments"), [
    ({"acts_on": "junctoin"}, ["acts_on", "junctoin", "did you mean 'junction'?"]), ({"chips": "switch"}, ["chips", "switches"]),
    ({"treshold_k": 5}, ["treshold_k", "did you mean 'threshold_k'?"]), ({"threshold_k": -1}, ["threshold_k", "at least 0"]),
    ({"name": ""}, ["name", "empty"]), ({"options": 3}, ["options", "a section with keys"])])
def test_failure_mode_is_checked(change, fragments):
    with pytest.raises(InputError) as caught:
        parse_model({"name": "w", "acts_on": "junction", "model": "lesit-1997-refit", **change}, FailureMode, "day.toml")
    assert not [f for f in fragments if f not in str(caught.value)], str(caught.value)


@pytest.mark.parametrize(("counts", "lives"), [([-1.0], [10.0]), ([1.0], [0.0]), ([float("nan")], [10.0]), ([1.0], [float("nan")])])
def test_miner_sum_refuses_nonsense(counts, lives):
    with pytest.raises(RangeError):
        miner_sum(counts, lives)


def test_harmless_cycles_add_nothing():
    assert miner_sum([5.0, 1e9], [10.0, float("inf")]) == 0.5  # analytic
