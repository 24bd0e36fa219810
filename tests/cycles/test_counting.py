"""Counting against the standard's example, against two libraries and against lists (tests/cycles/twins.py)."""

from __future__ import annotations

from collections import Counter

import numpy as np
import pytest
import rainflow as rainflow_library
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.cycles import CycleCounter, rainflow_astm, rainflow_four_point, turning_points
from mission.errors import InputError, RangeError

from . import twins

# ASTM E1049-85 (2011), 5.4.4 with figure 6, worked example: exact, so no tolerance (published).
ASTM = [-2, 1, -3, 5, -1, 3, -4, 4, -2]
ASTM_CYCLES = [(3, -0.5, 0.5), (4, -1, 0.5), (4, 1, 1), (8, 1, 0.5), (9, 0.5, 0.5), (8, 0, 0.5), (6, 1, 0.5)]
ASTM_TOTALS = {3: 0.5, 4: 1.5, 6: 0.5, 8: 1.0, 9: 0.5}
# A second history with equal peaks; counted with a library and by an independent program.
SECOND = [0, 3, -4, 1, -3, 4, -5, 5, -1, 5, -4, 0]
SECOND_TOTALS = {3: 0.5, 4: 1.5, 6: 1, 7: 0.5, 8: 0.5, 9: 1, 10: 0.5}

walks = st.lists(st.integers(-6, 6), min_size=0, max_size=60)
floats = st.lists(st.floats(-100, 100, allow_nan=False).map(lambda x: round(x, 3)), min_size=2, max_size=80)


def totals(cycles):
    out = Counter()
    for size, _, count in cycles:
        out[float(size)] += float(count)
    return dict(out)


def test_astm_example():
    assert sorted(map(tuple, rainflow_astm(ASTM).tolist())) == sorted(map(tuple, np.array(ASTM_CYCLES, float).tolist()))
    assert totals(rainflow_astm(ASTM)) == ASTM_TOTALS


def test_second_history():
    assert totals(rainflow_astm(SECOND)) == SECOND_TOTALS
    cycles, rest = rainflow_four_point(SECOND)
    assert cycles.tolist() == [[4.0, -1.0], [6.0, 2.0]]
    assert rest.tolist() == [0, 3, -4, 4, -5, 5, -4, 0]


def test_four_point_and_repeated_residue():
    """One closed cycle; the residue repeated adds three (A. Amzallag et al., Int. J. Fatigue 16 (1994) 287-293)."""
    cycles, rest = rainflow_four_point(ASTM)
    assert cycles.tolist() == [[4.0, 1.0]]
    assert rest.tolist() == [-2, 1, -3, 5, -4, 4, -2]
    table = counted(ASTM, "repeat")
    again = table.select(table.kind == 1)
    assert sorted(zip(again.range_k.tolist(), again.mean_c.tolist())) == [(3.0, -0.5), (7.0, 0.5), (9.0, 0.5)]


def counted(series, residue, cuts=(), period_s=None, **attributes):
    counter = CycleCounter(1)
    x = np.asarray(series, float)
    time = np.arange(x.size, dtype=float)
    edges = [0, *sorted(c for c in cuts if 0 < c < x.size), x.size]
    for a, b in zip(edges, edges[1:]):
        if b > a:
            counter.push(0, x[a:b], time[a:b], **{k: np.asarray(v)[a:b] for k, v in attributes.items()})
    return counter.finish(residue, period_s=float(x.size if period_s is None else period_s))


@pytest.mark.parametrize("series", [[], [1.0], [1.0, 1.0, 1.0], [1.0, 2.0], [2.0, 1.0, 1.5]])
def test_nearly_nothing(series):
    cycles, rest = rainflow_four_point(series)
    assert len(cycles) == 0 and rest.tolist() == twins.reversals(series)
    table = counted(series, "half")
    assert len(table) == max(len(rest) - 1, 0)


@settings(max_examples=300, deadline=None, derandomize=True)
@given(series=walks)
def test_against_lists(series):
    """*Independent code*: lists with plateaus, equal peaks, very short histories."""
    cycles, rest = rainflow_four_point(series)
    want, want_rest = twins.four_point(series)
    assert Counter((m - r / 2, m + r / 2) for r, m in cycles.tolist()) == Counter(want)
    assert rest.tolist() == want_rest
    assert turning_points(series).tolist() == twins.reversals(series)


@settings(max_examples=150, deadline=None, derandomize=True)
@given(series=floats)
def test_against_the_rainflow_library(series):
    """*Independent code*: half and full cycles of the library ``rainflow`` (ASTM procedure), ranges by count."""
    if len(twins.reversals(series)) < 3:
        return  # the library counts nothing for a single swing; the standard's half cycle is checked elsewhere
    want = Counter()
    for size, _mean, count, _, _ in rainflow_library.extract_cycles(series):
        want[round(size, 6)] += count
    mine = Counter()
    for size, _, count in rainflow_astm(series):
        mine[round(float(size), 6)] += float(count)
    want.pop(0.0, None)
    assert mine == want


@settings(max_examples=100, deadline=None, derandomize=True)
@given(series=st.lists(st.integers(-50, 50), min_size=6, max_size=200).filter(lambda s: len(set(s)) > 3))
def test_against_fatpack(series):
    """*Independent code*: closed cycles of ``fatpack`` (four-point) plus its residue repeated."""
    import fatpack

    reversals = np.array(twins.reversals(series), float)
    if reversals.size < 4:
        return
    cycles, rest = fatpack.find_rainflow_cycles(reversals)
    want = Counter(np.abs(np.diff(cycles, axis=1)).ravel().tolist()) if len(cycles) else Counter()
    mine, my_rest = rainflow_four_point(series)
    assert Counter(mine[:, 0].tolist()) == want
    assert my_rest.tolist() == rest.tolist()


@settings(max_examples=200, deadline=None, derandomize=True)
@given(series=st.lists(st.integers(-9, 9), min_size=2, max_size=60).filter(lambda s: len(set(s)) > 1))
def test_repetition_is_the_closed_loop(series):
    """What closes when the mission repeats is what closes in the loop cut at its highest point."""
    table = counted(series, "repeat")
    mine = Counter(zip(table.min_c.tolist(), table.max_c.tolist()))
    assert mine == Counter(twins.closed_loop(series))
    assert table.count.tolist() == [1.0] * len(table)


@settings(max_examples=100, deadline=None, derandomize=True)
@given(series=st.lists(st.integers(-9, 9), min_size=2, max_size=60), cuts=st.lists(st.integers(0, 60), max_size=8), residue=st.sampled_from(["repeat", "half"]))
def test_blocks_change_nothing(series, cuts, residue):
    whole, cut = counted(series, residue), counted(series, residue, cuts)
    for name in ("range_k", "mean_c", "heating_s", "start_s", "end_s", "count", "kind"):
        np.testing.assert_array_equal(getattr(whole, name), getattr(cut, name))


@settings(max_examples=100, deadline=None, derandomize=True)
@given(series=st.lists(st.integers(-9, 9), min_size=2, max_size=60), offset=st.integers(-40, 40))
def test_half_cycles_use_every_reversal_once(series, offset):
    """Full cycles hold two swings, half cycles one: together all swings between reversals; an offset changes no range."""
    table = counted(series, "half")
    assert 2.0 * table.count.sum() == max(len(twins.reversals(series)) - 1, 0)
    if len(table):
        assert table.range_k.max() == max(series) - min(series)
    np.testing.assert_array_equal(counted([x + offset for x in series], "half").range_k, table.range_k)


def test_heating_time_of_a_rise_is_its_own():
    """Valley at 1 s, peak at 4 s, then deeper: the inner pair 5 -> 20 closes with the fall; three seconds."""
    table = counted_at([0.0, 30.0, 5.0, 20.0, -10.0], [0.0, 0.5, 1.0, 4.0, 9.0])
    row = table.select(table.range_k == 15.0)
    assert row.heating_s.tolist() == [3.0] and (row.start_s[0], row.end_s[0]) == (1.0, 4.0)


def test_heating_time_of_a_fall_is_that_of_the_rise_that_closes_it():
    """Peak 20, valley 5, rise to 35 in 6 s: level 20 is passed after 6 (20 - 5)/(35 - 5) = 3 s."""
    table = counted_at([0.0, 20.0, 5.0, 35.0], [0.0, 2.0, 4.0, 10.0])
    row = table.select(table.range_k == 15.0)
    assert row.heating_s.tolist() == [pytest.approx(3.0)] and row.kind.tolist() == [0]


def test_heating_time_across_the_joint():
    """The mission begins in a rise that belongs to the valley at its end: 10 at 8 s, period 10 s, peak 40 at 1 s of the next."""
    table = counted_at([20.0, 40.0, 10.0, 15.0], [0.0, 1.0, 8.0, 9.5], period_s=10.0)
    largest = table.select(table.range_k == 30.0)
    assert len(largest) == 1
    assert largest.heating_s[0] == pytest.approx(3.0) and largest.kind[0] == 1
    assert largest.phase_id[0] == 0


def counted_at(values, times, period_s=100.0, **attributes):
    counter = CycleCounter(1)
    counter.push(0, values, times, **attributes)
    return counter.finish("repeat", period_s=period_s)


def test_ripple_takes_half_a_period_as_heating_time():
    """Samples of fast rotation: a swing hardly above the ripple took half an output period, a larger one its own time."""
    half, ripple = np.full(6, 0.01), np.full(6, 10.0)
    table = counted_at([50.0, 62.0, 51.0, 61.0, 50.5, 90.0], [0.0, 1.0, 1.0, 2.0, 2.0, 3.0], half_period_s=half, ripple_k=ripple)
    small, large = table.select(table.range_k <= 12.5), table.select(table.range_k > 12.5)
    assert len(small) and np.all(small.heating_s == 0.01)
    assert np.all(large.heating_s > 0.5)


def test_a_cycle_is_charged_to_the_phase_of_its_peak():
    table = counted_at([0.0, 30.0, 10.0, 25.0, -5.0], [0, 1, 2, 3, 4], phase_id=[0, 1, 2, 3, 4])
    inner = table.select(table.range_k == 15.0)
    assert inner.phase_id.tolist() == [3]
    outer = table.select(table.range_k == 35.0)
    assert outer.phase_id.tolist() == [1]


def test_bad_input_is_refused():
    counter = CycleCounter(1)
    with pytest.raises(RangeError, match=r"t_c\[1\]: found nan"):
        counter.push(0, [1.0, np.nan], [0.0, 1.0])
    with pytest.raises(InputError, match="found 'twice'; allowed: repeat or half"):
        counter.finish("twice", period_s=1.0)
    with pytest.raises(RangeError, match="finite"):
        turning_points([0.0, np.inf])


def test_signals_are_apart():
    counter = CycleCounter(3)
    counter.push(0, ASTM, np.arange(9.0))
    counter.push(2, SECOND, np.arange(12.0))
    table = counter.finish("half", period_s=12.0)
    assert set(table.signal.tolist()) == {0, 2}
    first = table.select(table.signal == 0)
    assert totals(zip(first.range_k, first.mean_c, first.count)) == ASTM_TOTALS


@pytest.mark.slow
def test_speed_against_the_library(capsys):
    """Nanoseconds a sample and the ratio to the library ``rainflow`` (pure Python), in one run."""
    import time

    x = np.random.default_rng(3).standard_normal(2_000_000).cumsum()
    stamps = np.arange(x.size, dtype=float)
    counter = CycleCounter(1)
    counter.push(0, x[:1000], stamps[:1000])
    counter = CycleCounter(1)
    begin = time.perf_counter()
    for a in range(0, x.size, 50_000):
        counter.push(0, x[a:a + 50_000], stamps[a:a + 50_000])
        counter.drain()
    mine = (time.perf_counter() - begin) / x.size
    begin = time.perf_counter()
    list(rainflow_library.extract_cycles(x[:100_000]))
    library = (time.perf_counter() - begin) / 100_000
    with capsys.disabled():
        print(f"\nrainflow: {mine * 1e9:.0f} ns a sample with all attributes, {library / mine:.0f} times faster than the library", end="")
    assert library / mine > 10.0
