"""When, how fast and in which phase: what a counted cycle carries besides its range.

Compared with twins.closed_with_attributes, which looks the instants up in the raw samples.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.cycles import CycleCounter, CycleTable
from mission.errors import RangeError

from . import twins

COLUMNS = ("signal", "range_k", "mean_c", "min_c", "max_c", "heating_s", "start_s", "end_s", "phase_id", "count", "kind")


def counter_of(values, times, cuts=(), drain=False, **attributes):
    """A counter that was given the samples in pieces, and what it handed out on the way."""
    counter, out = CycleCounter(1), []
    edges = [0, *sorted({c for c in cuts if 0 < c < len(values)}), len(values)]
    for a, b in zip(edges, edges[1:]):
        counter.push(0, values[a:b], times[a:b], **{k: v[a:b] for k, v in attributes.items()})
        if drain:
            out.append(counter.drain())
    return counter, out


def counted(values, times, residue="repeat", period_s=100.0, **attributes):
    return counter_of(values, times, **attributes)[0].finish(residue, period_s=period_s)


def row(table, size):
    """The one cycle of that range, as a plain dict."""
    [at] = np.flatnonzero(np.isclose(table.range_k, size, rtol=0.0, atol=1e-9))
    return {n: getattr(table, n)[at].item() for n in COLUMNS}


# Levels at least 1 apart and no two equal, each held for one to three samples, at uneven times.
HISTORY = st.lists(st.tuples(st.integers(1, 3), st.integers(1, 9)), min_size=4, max_size=40).flatmap(
    lambda steps: st.permutations(range(len(steps))).map(lambda order: _samples(order, steps)))


def _samples(order, steps):
    values, times, now = [], [], 0.0
    for level, (held, dt) in zip(order, steps):
        for _ in range(held):
            # squares: no two differences of levels are equal by chance where it matters
            values.append(level * 1.25 + 0.001 * level * level)
            times.append(now)
            now += 0.5 * dt
    return np.array(values), np.array(times)


@settings(max_examples=200, deadline=None, derandomize=True)
@given(history=HISTORY, cuts=st.lists(st.integers(1, 100), max_size=6))
def test_closed_cycles_against_raw_samples(history, cuts):
    """*Independent code*: ends, phase and heating time of every closed cycle, plateaus included, wherever blocks end."""
    values, times = history
    phase = np.arange(values.size) % 7
    counter, out = counter_of(values, times, cuts, drain=True, phase_id=phase)
    table = CycleTable.concat(out)
    mine = sorted(zip(*(getattr(table, n).tolist() for n in ("min_c", "max_c", "phase_id", "start_s", "end_s", "heating_s"))))
    want = sorted(twins.closed_with_attributes(values.tolist(), times.tolist(), phase.tolist()))
    assert len(mine) == len(want)
    np.testing.assert_allclose(np.reshape(mine, (-1, 6)), np.reshape(want, (-1, 6)), rtol=0.0, atol=1e-9)


@settings(max_examples=150, deadline=None, derandomize=True)
@given(history=HISTORY, cuts=st.lists(st.integers(1, 100), max_size=6), drain=st.booleans(), residue=st.sampled_from(["repeat", "half"]))
def test_no_attribute_depends_on_where_blocks_end(history, cuts, drain, residue):
    values, times = history
    more = {"phase_id": np.arange(values.size) % 5, "half_period_s": np.where(np.arange(values.size) % 3, 0.02, 0.0), "ripple_k": values % 4.0}
    tables = []
    for pieces in ((), cuts):
        counter, out = counter_of(values, times, pieces, drain, **more)
        tables.append(CycleTable.concat([*out, counter.finish(residue, period_s=times[-1] + 1.0)]))
    for name in COLUMNS:
        np.testing.assert_array_equal(getattr(tables[0], name), getattr(tables[1], name), err_msg=name)


def test_long_series_in_one_push_or_many():
    """Beyond the size of the counter's own pieces, with a stack that must grow, for two signals in turn."""
    x = np.random.default_rng(11).standard_normal(70_000).cumsum()
    x[30_000:] += 5.0 * np.arange(40_000) * (-1.0) ** np.arange(40_000)  # swings that widen: a residue of tens of thousands
    stamps = np.arange(x.size, dtype=float)
    whole, cut = CycleCounter(2), CycleCounter(2)
    whole.push(0, x, stamps)
    whole.push(1, -x, stamps)
    for a in range(0, x.size, 999):
        for signal, sign in ((1, -1.0), (0, 1.0)):
            cut.push(signal, sign * x[a:a + 999], stamps[a:a + 999])
    assert whole.residue(0).size > 10_000
    one, two = (c.finish("repeat", period_s=float(x.size)) for c in (whole, cut))
    for signal in (0, 1):
        for name in COLUMNS:
            a, b = (getattr(t.select(t.signal == signal), name) for t in (one, two))
            np.testing.assert_array_equal(a, b, err_msg=name)  # order within a signal included
    # the mirrored signal has the same ranges, mirrored means
    up, down = (one.select(one.signal == s) for s in (0, 1))
    np.testing.assert_allclose(np.sort(up.range_k), np.sort(down.range_k), rtol=1e-12)
    assert up.mean_c.sum() == pytest.approx(-down.mean_c.sum(), abs=1e-3)


# --- heating time: all numbers below are *analytic*, read off straight lines ----------------------

def test_level_is_passed_between_the_two_samples_around_it():
    """From the valley at 0 s a slow rise to 9 in 9 s, then a jump of 10 in 1 s: 9.5 is passed at 9.05 s, not at half time."""
    table = counted([0.0, 9.5, 0.0, 9.0, 19.0], [-2.0, -1.0, 0.0, 9.0, 10.0])
    assert row(table, 9.5)["heating_s"] == pytest.approx(9.05, abs=1e-12)


def test_more_samples_on_the_same_line_change_nothing():
    few = counted([0.0, 20.0, 5.0, 35.0], [0.0, 2.0, 4.0, 10.0])
    many = counted([0.0, 5.0, 20.0, 10.0, 5.0, 10.0, 19.0, 34.0, 35.0], [0.0, 0.5, 2.0, 3.33, 4.0, 5.0, 6.8, 9.8, 10.0])
    for name in COLUMNS:
        np.testing.assert_allclose(getattr(few, name), getattr(many, name), atol=1e-12, err_msg=name)


def test_rise_to_exactly_the_earlier_peak_closes_it():
    table = counted([0.0, 20.0, 5.0, 20.0, 0.0], [0.0, 1.0, 2.0, 8.0, 9.0])
    assert row(table, 15.0)["heating_s"] == pytest.approx(6.0) and row(table, 15.0)["kind"] == 0


def test_two_nested_falls_closed_by_one_rise():
    """Peaks 30 and 20 over valleys 5 and 10; the rise 10 -> 40 takes 30 s from 100 s: it passes 20 after 10 s, 30 after 20 s."""
    table = counted([0.0, 30.0, 5.0, 20.0, 10.0, 40.0], [0.0, 1.0, 40.0, 60.0, 100.0, 130.0], period_s=200.0)
    assert row(table, 10.0)["heating_s"] == pytest.approx(10.0)
    # the valley of 30 -> 5 stands at 40 s; its level is passed at 120 s
    assert row(table, 25.0)["heating_s"] == pytest.approx(80.0)
    assert (row(table, 25.0)["start_s"], row(table, 25.0)["end_s"]) == (1.0, 40.0)


@pytest.mark.parametrize("rest_s", [0.0, 1.0, 600.0])
def test_rest_in_a_level_valley_is_not_heating(rest_s):
    """20 degC held, then 60 K in 2 s: two seconds, however long it was held, at the start or in the middle."""
    start = counted([20.0, 20.0, 80.0, 20.0], [0.0, rest_s, rest_s + 2.0, rest_s + 50.0], period_s=rest_s + 50.0)
    assert row(start, 60.0)["heating_s"] == pytest.approx(2.0)
    middle = counted([90.0, 20.0, 20.0, 80.0, 10.0, 95.0], [0.0, 5.0, 5.0 + rest_s, 7.0 + rest_s, 9.0 + rest_s, 20.0 + rest_s], period_s=700.0)
    assert row(middle, 60.0)["heating_s"] == pytest.approx(2.0)


def test_level_peak_counts_from_its_first_sample():
    table = counted([0.0, 50.0, 50.0, 10.0, 60.0], [0.0, 4.0, 30.0, 31.0, 36.0])
    inner = row(table, 40.0)
    assert inner["start_s"] == 4.0 and inner["heating_s"] == pytest.approx(4.0)  # 10 -> 50 of 10 -> 60 in 5 s


def test_fall_at_the_end_closed_by_the_first_rise_of_the_repetition():
    """Peak 40 at 8 s, end at 20 (9 s), which the repetition takes up: 20 at 10 s, 60 at 14 s. Level 40 is passed 2 s into that rise."""
    table = counted([20.0, 60.0, 10.0, 40.0, 20.0], [0.0, 4.0, 6.0, 8.0, 9.0], period_s=10.0)
    inner = row(table, 20.0)
    assert inner["kind"] == 1 and inner["heating_s"] == pytest.approx(2.0)
    outer = row(table, 50.0)
    assert outer["kind"] == 1 and outer["count"] == 1.0


def test_instant_rise_at_the_joint_is_never_negative():
    """The mission ends cold and begins hot; the given length falls short of the last sample by rounding."""
    end = 3600.0 * (1.0 + 1e-12)
    table = counted([80.0, 20.0], [0.0, end], period_s=3600.0)
    assert row(table, 60.0)["heating_s"] == 0.0


@pytest.mark.parametrize("period_s", [-1.0, float("nan"), float("inf"), 9.0])
def test_impossible_length_of_the_mission_is_refused(period_s):
    with pytest.raises(RangeError, match="period_s: found .* allowed: "):
        counted([3.0, 1.0, 2.0], [0.0, 5.0, 10.0], period_s=period_s)


def test_of_equal_peaks_the_first_ends_the_rise():
    """Fifty equal cycles of 2 s: the one that spans them all reached its peak in the first (*analytic*), in its phase."""
    table = counted([55.0, 105.0] * 50, np.arange(100.0) * 2.0, period_s=200.0, phase_id=np.arange(100))
    assert table.heating_s.tolist() == [2.0] * 50
    assert 1 in table.phase_id.tolist() and table.phase_id.max() < 100


# --- ripple ------------------------------------------------------------------------------------

@pytest.mark.parametrize(("swing", "half_s", "want"), [(12.5, 0.01, 0.01), (12.4, 0.01, 0.01), (12.6, 0.01, 3.0), (12.5, 0.0, 3.0)])
def test_reach_of_the_ripple_rule(swing, half_s, want):
    """Up to 1.25 times the local ripple of 10 K, and only in fast rotation; a rise 0 -> swing in 3 s between deeper points."""
    table = counted([50.0, 0.0, swing, -10.0], [0.0, 1.0, 4.0, 5.0], half_period_s=np.full(4, half_s), ripple_k=np.full(4, 10.0))
    assert row(table, swing)["heating_s"] == pytest.approx(want)


def test_ripple_is_judged_at_the_peak():
    """Fast rotation at the valley only, then at the peak only."""
    at_valley = counted([50.0, 0.0, 12.0, -10.0], [0, 1, 4, 5], half_period_s=np.array([0, 0.01, 0, 0]), ripple_k=np.array([0, 10.0, 0, 0]))
    at_peak = counted([50.0, 0.0, 12.0, -10.0], [0, 1, 4, 5], half_period_s=np.array([0, 0, 0.01, 0]), ripple_k=np.array([0, 0, 10.0, 0]))
    assert row(at_valley, 12.0)["heating_s"] == 3.0 and row(at_peak, 12.0)["heating_s"] == 0.01


def test_ripple_rule_across_the_joint_and_for_half_cycles():
    """The mission ends at 55 (5 s) and begins at 60 (10 s): 5 K over the joint, within the ripple; 52 -> 70 is not."""
    more = {"half_period_s": np.full(4, 0.004), "ripple_k": np.full(4, 9.0)}
    table = counted([60.0, 52.0, 70.0, 55.0], [0.0, 1.0, 4.0, 5.0], period_s=10.0, **more)
    assert row(table, 5.0)["kind"] == 1 and row(table, 5.0)["heating_s"] == 0.004
    assert row(counted([60.0, 52.0, 70.0, 55.0], [0.0, 1.0, 4.0, 5.0], period_s=10.0), 5.0)["heating_s"] == 5.0
    halves = counted([60.0, 52.0, 70.0, 55.0], [0.0, 1.0, 4.0, 5.0], "half", **more)
    assert row(halves, 8.0)["heating_s"] == 0.004 and row(halves, 18.0)["heating_s"] == 3.0


# --- half cycles ---------------------------------------------------------------------------------

def test_half_cycles_of_the_residue():
    """A fall is heated by the rise after it, the last one by the rise before it, each over the range of the fall."""
    table = counted([0.0, 30.0, -10.0, 40.0, 20.0], [0.0, 3.0, 5.0, 15.0, 16.0], "half", phase_id=np.array([4, 5, 6, 7, 8]))
    assert table.range_k.tolist() == [30.0, 40.0, 50.0, 20.0] and table.count.tolist() == [0.5] * 4 and table.kind.tolist() == [1] * 4
    np.testing.assert_allclose(table.heating_s, [3.0, 8.0, 10.0, 4.0])
    assert table.phase_id.tolist() == [5, 5, 7, 7]
    assert table.start_s.tolist() == [0.0, 3.0, 5.0, 15.0] and table.end_s.tolist() == [3.0, 5.0, 15.0, 16.0]
    np.testing.assert_allclose(table.max_c - table.min_c, table.range_k)


def test_single_fall_takes_its_own_time():
    table = counted([30.0, 10.0], [0.0, 4.0], "half")
    assert table.heating_s.tolist() == [4.0]


# --- doors -----------------------------------------------------------------------------------------

@pytest.mark.parametrize(("call", "text"), [
    ((0, [1.0, 2.0], [0.0, float("nan")]), r"time_s\[1\]: found nan; allowed: a finite time"),
    ((0, [1.0, float("inf")], [0.0, 1.0]), r"t_c\[1\]: found inf"),
    ((-1, [1.0], [0.0]), "signal: found -1; allowed: 0 to 1"), ((2, [1.0], [0.0]), "signal: found 2"),
    ((0, [[1.0, 2.0]], [[0.0, 1.0]]), "t_c: found shape"),
    ((0, [1.0, 2.0], [0.0]), r"time_s: found shape \(1,\)"), ((0, [1.0, 2.0], [0.0, 1.0], [1]), "phase_id: found shape")])
def test_doors_name_what_they_refuse(call, text):
    counter = CycleCounter(2)
    with pytest.raises(RangeError, match=text):
        counter.push(*call)
    assert counter.residue(0).size == 0  # nothing half taken


def test_finished_counter_begins_anew():
    counter = CycleCounter(1)
    for _ in range(2):
        counter.push(0, [1.0, 5.0, 2.0], [0.0, 1.0, 2.0])
        assert counter.finish(period_s=3.0).range_k.tolist() == [4.0]
    assert len(counter.finish(period_s=3.0)) == len(counter.drain()) == 0
