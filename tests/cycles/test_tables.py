"""Tables of cycles, classes of ripple, the Parquet file."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from mission.cycles import CycleTable, CycleWriter, RippleClasses


def ripple(n, seed=1, signals=12):
    rng = np.random.default_rng(seed)
    return CycleTable.ripple(
        signal=rng.integers(0, signals, n), range_k=rng.uniform(0.5, 30.0, n), mean_c=rng.uniform(20.0, 120.0, n), heating_s=rng.uniform(0.005, 0.1, n),
        start_s=np.arange(n, dtype=float), end_s=np.arange(n) + 1.0, phase_id=rng.integers(0, 4, n), count=rng.uniform(1.0, 80.0, n))


def test_ripple_leaves_out_what_is_no_cycle():
    table = CycleTable.ripple(signal=np.array([0, 1, 2]), range_k=np.array([5.0, 0.0, 5.0]), mean_c=np.array([50.0] * 3), heating_s=np.array([0.01] * 3),
                              start_s=np.zeros(3), end_s=np.ones(3), phase_id=np.zeros(3, int), count=np.array([10.0, 10.0, 0.0]))
    assert table.signal.tolist() == [0] and table.kind.tolist() == [2]
    assert (table.min_c[0], table.max_c[0]) == (47.5, 52.5)


def test_classes_keep_counts_and_means():
    """*Analytic*: count-weighted sums are the same before and after, for every signal and phase."""
    table = ripple(20_000)
    classes = RippleClasses()
    for a in range(0, 20_000, 3_000):
        classes.add(table.select(slice(a, a + 3_000)))
    merged = classes.to_table()
    assert len(merged) < len(table)
    for signal in range(12):
        for phase in range(4):
            one, two = (t.select((t.signal == signal) & (t.phase_id == phase)) for t in (table, merged))
            assert two.count.sum() == pytest.approx(one.count.sum(), rel=1e-12)
            for name in ("range_k", "mean_c", "min_c", "max_c", "heating_s"):
                assert (two.count * getattr(two, name)).sum() == pytest.approx((one.count * getattr(one, name)).sum(), rel=1e-12)
    assert merged.start_s.min() == 0.0 and merged.end_s.max() == 20_000.0


def test_classes_hold_only_like_cycles():
    """Damage goes with a high power of the range: within a class it may differ by 2 % at most."""
    table = ripple(5_000, signals=1)
    classes = RippleClasses()
    classes.add(table)
    merged = classes.to_table()
    one, two = ((t.count * t.range_k**5).sum() for t in (table, merged))
    assert two == pytest.approx(one, rel=1e-3)


def test_classes_are_bounded():
    """Ten times the mission does not make ten times the classes."""
    few, many = RippleClasses(), RippleClasses()
    steady = ripple(2_000, signals=1)
    few.add(steady)
    for _ in range(10):
        many.add(steady)
    assert len(many.to_table()) == len(few.to_table())
    assert many.to_table().count.sum() == pytest.approx(10 * steady.count.sum())


def test_file_is_whole_or_absent(tmp_path):
    path = tmp_path / "cycles.parquet"
    with pytest.raises(RuntimeError), CycleWriter(path, [f"s{k}" for k in range(12)], list("abcd")) as writer:
        writer(ripple(10))
        raise RuntimeError("stop")
    assert list(tmp_path.iterdir()) == []
    table = ripple(1000)
    with CycleWriter(path, [f"s{k}" for k in range(12)], list("abcd")) as writer:
        writer(table.select(slice(0, 400)))
        writer(table.select(slice(400, 1000)))
        writer(CycleTable.empty())
    assert [p.name for p in tmp_path.iterdir()] == ["cycles.parquet"]
    frame = pd.read_parquet(path)
    assert frame["signal"].tolist() == [f"s{k}" for k in table.signal]
    assert frame["phase"].tolist() == ["abcd"[k] for k in table.phase_id]
    assert set(frame["kind"]) == {"ripple"}
    np.testing.assert_allclose(frame["range_k"], table.range_k, rtol=1e-6)
    np.testing.assert_array_equal(frame["start_s"], table.start_s)


def test_frame_in_words():
    frame = ripple(5).to_frame([f"chip {k}" for k in range(12)], ["w", "x", "y", "z"])
    assert {"signal", "range_k", "count", "kind", "phase"} <= set(frame.columns)
    assert frame["kind"].unique().tolist() == ["ripple"] and frame["signal"].str.startswith("chip ").all()


def test_nothing_is_nothing():
    assert len(CycleTable.concat([])) == 0 and len(RippleClasses().to_table()) == 0
    assert CycleTable.empty().to_frame().empty
