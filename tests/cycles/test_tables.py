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


def test_many_phases_stay_apart_from_signals():
    """A phase number may be as large as its type holds: it must not spill into the signal."""
    n = 3
    table = CycleTable.ripple(signal=np.array([1, 2, 23]), range_k=np.full(n, 5.0), mean_c=np.full(n, 50.0), heating_s=np.full(n, 0.01),
                              start_s=np.zeros(n), end_s=np.ones(n), phase_id=np.array([5000, 904, 32767]), count=np.full(n, 3.0))
    classes = RippleClasses()
    classes.add(table)
    merged = classes.to_table()
    assert list(zip(merged.signal.tolist(), merged.phase_id.tolist())) == [(1, 5000), (2, 904), (23, 32767)]


@pytest.mark.parametrize("step", [1, 7, 400, 2000])
def test_classes_do_not_depend_on_blocks(step):
    table = ripple(2_000, seed=4, signals=3)
    whole, cut = RippleClasses(), RippleClasses()
    whole.add(table)
    for a in range(0, 2_000, step):
        cut.add(table.select(slice(a, a + step)))
    for name in ("signal", "phase_id", "kind", "start_s", "end_s"):
        np.testing.assert_array_equal(getattr(whole.to_table(), name), getattr(cut.to_table(), name))
    for name in ("count", "range_k", "mean_c", "min_c", "max_c", "heating_s"):
        np.testing.assert_allclose(getattr(whole.to_table(), name), getattr(cut.to_table(), name), rtol=1e-12)


def test_classes_of_fresh_cycles_level_off():
    """New cycles for ever in a bounded field: classes by 2 %, 2 K and 5 % fill up and then grow no more."""
    classes, sizes = RippleClasses(), []
    for seed in range(12):
        rng = np.random.default_rng(seed)
        n = 40_000
        low = rng.uniform(40.0, 60.0, n)
        size = rng.uniform(10.0, 20.0, n)
        classes.add(CycleTable.ripple(signal=np.zeros(n, int), range_k=size, mean_c=low + 0.5 * size, heating_s=rng.uniform(0.01, 0.02, n),
                                      start_s=np.zeros(n), end_s=np.ones(n), phase_id=np.zeros(n, int), count=np.ones(n)))
        sizes.append(len(classes.to_table()))
    # analytic: ln 2/ln 1.02 = 35, 20 K/2 K = 10, ln 2/ln 1.05 = 14.2 classes, and one more for a cut edge of each
    assert sizes[-1] <= 37 * 11 * 16
    assert sizes[-1] - sizes[-2] < 0.001 * sizes[-1]
    assert classes.to_table().count.sum() == 12 * 40_000


@pytest.mark.parametrize("rows", [1, 200_001])
def test_file_that_cannot_be_written_to_its_end_is_absent(tmp_path, rows):
    """A signal without a name shows up when the block is written: at closing, or on the way."""
    with pytest.raises(Exception, match="out of bounds"), CycleWriter(tmp_path / "c.parquet", ["only one"], list("abcd")) as writer:
        table = ripple(rows)
        table.signal[:] = 3
        writer(table)
    assert list(tmp_path.iterdir()) == []


def test_earlier_file_survives_a_failed_one(tmp_path):
    path = tmp_path / "c.parquet"
    names = [f"s{k}" for k in range(12)]
    with CycleWriter(path, names, list("abcd")) as writer:
        writer(ripple(30))
    with pytest.raises(KeyboardInterrupt), CycleWriter(path, names, list("abcd")) as writer:
        writer(ripple(10))
        raise KeyboardInterrupt
    assert [p.name for p in tmp_path.iterdir()] == ["c.parquet"] and len(pd.read_parquet(path)) == 30


def test_file_and_frame_hold_the_same(tmp_path):
    """All columns, three kinds, several writes; single precision where the file keeps it."""
    table = ripple(450_000, seed=9)
    object.__setattr__(table, "kind", (np.arange(len(table)) % 3).astype(np.uint8))
    names, phases = [f"s{k}" for k in range(12)], ["α", "harbour, slow", "c", "d"]
    with CycleWriter(tmp_path / "c.parquet", names, phases) as writer:
        for a in range(0, len(table), 90_000):
            writer(table.select(slice(a, a + 90_000)))
    assert writer.cycles == len(table)
    got, want = pd.read_parquet(tmp_path / "c.parquet"), table.to_frame(names, phases)
    assert set(got.columns) == set(want.columns)
    for name in ("signal", "kind", "phase"):
        assert (got[name].astype(object) == want[name]).all(), name
    for name in ("range_k", "mean_c", "min_c", "max_c", "heating_s"):
        np.testing.assert_allclose(got[name], want[name], rtol=1e-6)
    for name in ("count", "start_s", "end_s"):
        np.testing.assert_array_equal(got[name], want[name])


def test_file_without_cycles_can_be_read(tmp_path):
    with CycleWriter(tmp_path / "c.parquet", ["a"], ["x"]):
        pass
    assert pd.read_parquet(tmp_path / "c.parquet").empty


def test_frame_in_numbers():
    frame = ripple(5).to_frame()
    assert frame["signal"].dtype.kind == frame["phase_id"].dtype.kind == "i" and "phase" not in frame.columns
