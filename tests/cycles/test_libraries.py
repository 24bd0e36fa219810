"""Random walks against two libraries, and the repeated residue against the doubled series."""

from __future__ import annotations

from collections import Counter

import fatpack
import numpy as np
import pytest
import rainflow as rainflow_library
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.cycles import CycleCounter, rainflow_astm, rainflow_four_point, turning_points

from . import twins

WALKS = st.tuples(st.integers(0, 2**32 - 1), st.integers(3, 800), st.sampled_from([0.0, 0.5, 0.98])).map(
    lambda seed_size_pull: _walk(*seed_size_pull))


def _walk(seed, size, pull):
    """Noise (0), a tethered walk, nearly a free one; values in hundredths so that sums are exact enough to compare."""
    step = np.random.default_rng(seed).standard_normal(size)
    out = np.zeros(size)
    for k in range(1, size):
        out[k] = pull * out[k - 1] + step[k]
    return np.round(out, 2)


def rounded(rows):
    """(range, mean) -> count."""
    out = Counter()
    for size, mean, count in rows:
        out[round(float(size), 6), round(float(mean), 6) + 0.0] += float(count)
    return out


@settings(max_examples=100, deadline=None, derandomize=True)
@given(walk=WALKS)
def test_walks_against_the_rainflow_library(walk):
    """*Independent code*: ``rainflow`` by the standard's procedure; ranges, means and counts."""
    if len(twins.reversals(walk.tolist())) < 3:
        return  # the library leaves a single swing out
    want = rounded(c[:3] for c in rainflow_library.extract_cycles(walk) if c[0] > 0.0)
    assert rounded(rainflow_astm(walk)) == want


@settings(max_examples=100, deadline=None, derandomize=True)
@given(walk=WALKS)
def test_walks_against_fatpack(walk):
    """*Independent code*: ``fatpack``, closed cycles in order of closing with their means, and the residue."""
    points = turning_points(walk)
    if points.size < 4:
        return
    cycles, rest = fatpack.find_rainflow_cycles(points)
    mine, my_rest = rainflow_four_point(walk)
    pairs = np.reshape(cycles, (-1, 2))
    np.testing.assert_allclose(mine[:, 0], np.abs(pairs[:, 1] - pairs[:, 0]), atol=1e-12)
    np.testing.assert_allclose(mine[:, 1], pairs.mean(axis=1), atol=1e-12)
    np.testing.assert_array_equal(my_rest, rest)


@settings(max_examples=100, deadline=None, derandomize=True)
@given(walk=WALKS)
def test_standard_and_four_points_agree_on_what_they_count(walk):
    """The standard's half cycles are the residue's swings, its full cycles the closed ones: with half cycles both counts are one."""
    counter = CycleCounter(1)
    counter.push(0, walk, np.arange(walk.size, dtype=float))
    table = counter.finish("half", period_s=float(walk.size))
    mine = Counter()
    for size, count in zip(table.range_k.tolist(), table.count.tolist()):
        mine[round(size, 6)] += count
    want = Counter()
    for size, _, count in rainflow_astm(walk):
        want[round(float(size), 6)] += float(count)
    assert mine == want


@settings(max_examples=200, deadline=None, derandomize=True)
@given(series=st.lists(st.integers(-9, 9), min_size=2, max_size=50).filter(lambda s: len(set(s)) > 1))
def test_repeated_residue_is_the_doubled_series_less_one_pass(series):
    """*Independent code*: lists; A. Amzallag et al., Int. J. Fatigue 16 (1994) 287-293."""
    want = Counter(twins.four_point(series + series)[0])
    want.subtract(Counter(twins.four_point(series)[0]))
    counter = CycleCounter(1)
    counter.push(0, series, np.arange(float(len(series))))
    table = counter.finish("repeat", period_s=float(len(series)))
    assert Counter(zip(table.min_c.tolist(), table.max_c.tolist())) == +want
    assert table.range_k.max() == max(series) - min(series)  # analytic: the largest swing is always among them


@pytest.mark.parametrize("rotation", range(12))
def test_repeated_mission_does_not_depend_on_where_it_begins(rotation):
    """A closed mission may be cut anywhere (*analytic*): same ranges and means.

    Heating times are not compared: of a rise that closes a cycle across the joint only its ends are known.
    """
    # a closed history of hand-made swings, one second a step
    series = [3.0, 8.0, 1.0, 6.0, 5.0, 9.0, 0.0, 7.0, 2.0, 7.5, 4.0, 8.5]
    turned = series[rotation:] + series[:rotation]
    tables = []
    for s in (series, turned):
        counter = CycleCounter(1)
        counter.push(0, [*s, s[0]], np.arange(13.0))
        t = counter.finish("repeat", period_s=12.0)
        tables.append(sorted(zip(t.range_k.tolist(), t.mean_c.tolist())))
    assert tables[0] == tables[1] and len(tables[0]) == 6
