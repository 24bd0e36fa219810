"""Figures of real results, ordinary and odd; what they must say and never do."""

from __future__ import annotations

import functools
import itertools
import math
import subprocess
import sys
import warnings
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from matplotlib.figure import Figure

from mission.duty import profile_from_frame
from mission.show import figures
from mission.show.figures import FIGURES, RAMP, all_figures, captions, half_damage_k, plain, rows_by_mode, swing_shares, time_unit
from mission.study import load_study, run
from mission.study.run import Stopped

PROFILES = Path(__file__).parents[2] / "profiles"
NASTY = '<script>alert(1)</script> & $\\frac{1}{0}$ "quoted"'
COLUMNS = {"time": {"column": "t", "unit": "s"}, "current": {"column": "i", "unit": "A rms"}, "speed": {"column": "n", "unit": "rpm"},
           "coolant": {"column": "c", "unit": "degC"}}


@functools.cache
def hour():
    return load_study(PROFILES / "ferry-hour.toml")


def duty(current_a, speed_rpm, *, step_s=2.0, coolant_c=40.0, phase=None):
    n = len(current_a)
    frame = pd.DataFrame({"t": step_s * np.arange(n), "i": current_a, "n": np.broadcast_to(speed_rpm, n), "c": coolant_c})
    columns = dict(COLUMNS)
    if phase is not None:
        frame["p"] = phase
        columns["phase"] = {"column": "p"}
    return profile_from_frame(frame, columns, name=NASTY, longest_step_s=step_s)


def stop_at(share):
    def progress(done, words):
        if done >= share:
            raise Stopped("enough")
    return progress


def named(study, name):
    return replace(study, spec=study.spec.model_copy(update={"name": name}))


def without_modes(study):
    return replace(study, modes=())


WORK = np.tile([0.0, 180.0, 180.0, 90.0, -120.0, 0.0], 20)


@functools.cache
def made(case):
    """A result for each odd case, by name."""
    study = hour()
    if case == "hour":
        return run(study)
    if case == "one phase, target":
        return run(study.with_profile(duty(WORK, 300.0)).changed("lifetime", target_years=10.0))
    if case == "nasty":
        phases = np.array([NASTY, "__proto__", "名前", "x" * 90])[np.arange(WORK.size) % 4]
        changed = study.changed("lifetime", target_years=1e7)
        return run(named(changed.with_profile(duty(WORK, 300.0, phase=phases)), NASTY))
    if case == "many phases":
        return run(study.with_profile(duty(WORK, 300.0, phase=[f"part {k // 4}" for k in range(WORK.size)])))
    if case == "one row":
        return run(study.with_profile(duty([150.0, 150.0], 300.0, step_s=3.0)))
    if case == "short":
        return run(study.with_profile(duty([150.0, 20.0, 150.0, 150.0], 300.0, step_s=0.01)))
    if case == "no current":
        return run(study.with_profile(duty(np.zeros(30), 0.0)).changed("lifetime", target_years=5.0))
    if case == "no current, no target":
        return run(study.with_profile(duty(np.zeros(30), 0.0)))
    if case == "no modes":
        return run(without_modes(study.with_profile(duty(WORK, 300.0))))
    if case == "stopped":
        big = duty(np.tile(WORK, 200), 300.0, phase=np.repeat(["first", "second"], 100 * WORK.size))
        return run(study.with_profile(big), progress=stop_at(0.3))
    if case == "too hot":
        return run(study.with_profile(duty(WORK, 300.0)).changed("limits", t_vj_max_c=50.0))
    raise KeyError(case)


CASES = ["hour", "one phase, target", "nasty", "many phases", "one row", "short", "no current", "no current, no target", "no modes", "stopped", "too hot"]


@functools.cache
def drawn(case):
    """The figures of a case; drawing is what takes the time of these tests."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")  # a missing letter, an empty log axis, a collapsed layout
        return {name: draw(made(case)) for name, draw in FIGURES.items()}


def texts(figure):
    """Everything written on a figure after drawing it."""
    from matplotlib.text import Text

    figure.draw_without_rendering()
    return [t.get_text() for t in figure.findobj(Text) if t.get_text() and t.get_visible()]


@pytest.mark.parametrize("name", FIGURES)
@pytest.mark.parametrize("case", CASES)
def test_every_case_is_drawn_with_labels_and_units(case, name):
    figure = drawn(case)[name]
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        words = texts(figure)
    assert isinstance(figure, Figure)
    x, y = [ax.get_xlabel() for ax in figure.axes], [ax.get_ylabel() for ax in figure.axes]
    assert any(x) and any(y)
    units = ("°C", "K", "%", "W", "years", ", h", ", min", ", s", ", ms", "from the peak")
    not_measured = {"", "chip", "phase of the duty", "phase (▾ peak)"}
    bare = [w for w in x + y if w not in not_measured and not any(u in w for u in units) and not w.startswith("place in the bridge")]
    assert not bare
    assert not [w for w in words if "nan" in w.lower().split() or w == "inf"]
    for ax in figure.axes:
        assert all(math.isfinite(v) for v in (*ax.get_xlim(), *ax.get_ylim()))
        # axes of a grid share the labels of its outer row and column
        spec = ax.get_subplotspec()
        if spec is not None and spec.is_last_row():
            assert ax.get_xlabel()
        if spec is not None and spec.is_first_col():
            assert ax.get_ylabel()


def test_no_mathtext_from_names_and_no_letters_that_the_font_lacks():
    result = made("nasty")
    words = " ".join(texts(figures.temperature_figure(result)) + texts(figures.damage_phase_figure(result)))
    assert "<script>alert(1)</script>"[:20] in words  # drawn as it stands, dollar signs and all
    assert "名" not in words and "phase 3" in words
    assert "x" * 40 not in words and "…" in words


def test_peak_is_marked_with_value_and_phase():
    result = made("hour")
    hot = result.history.hottest
    words = texts(figures.temperature_figure(result))
    mark = f"{result.history.peak_c[hot]:.1f} °C at {result.history.peak_time_s[hot] / 60:.4g} min, {result.history.phases[result.history.peak_phase_id[hot]]}"
    assert mark in words
    assert "limit 140 °C" in words


def test_drawn_band_keeps_the_extremes_though_it_has_fewer_columns():
    result = made("hour")
    figure = figures.temperature_figure(result)
    history, chip = result.history, int(np.argmax(result.history.peak_c[:6]))
    band = figure.axes[0].collections[0].get_paths()[0].vertices[:, 1]
    assert history.coolant_c.size > figures._COLUMNS
    assert band.max() == pytest.approx(history.t_max_c[:, chip].max(), abs=1e-9)
    assert band.min() == pytest.approx(history.t_min_c[:, chip].min(), abs=1e-9)


def test_damage_shares_add_up_and_match_the_ledger():
    # Analytic: the cycle map and the ledger are filled by the same damages, along different ways.
    result = made("hour")
    for which, mode, rows in rows_by_mode(result):
        chip = result.history.chips.index(rows[0].chip)
        assert result.cycle_map.damage[which, chip].sum() == pytest.approx(rows[0].damage_per_mission, rel=1e-9)
        assert rows[0].damage_per_mission == result.ledger.worst(mode.name).damage_per_mission
        _, damage, count = swing_shares(result, which, mode, rows[0])
        assert damage.sum() == pytest.approx(1.0) and count.sum() == pytest.approx(1.0)
    bars = [p.get_width() for ax in figures.damage_phase_figure(result).axes for p in ax.patches]
    assert sum(bars) == pytest.approx(100.0 * (1 + len(result.study.modes)), rel=1e-6)


def test_many_phases_are_gathered_not_dropped():
    result = made("many phases")
    figure = figures.damage_phase_figure(result)
    assert sum(p.get_width() for p in figure.axes[0].patches) == pytest.approx(100.0)
    assert any("other phases" in w for w in texts(figure))
    assert any("other phases" in w for w in texts(figures.temperature_figure(result)))


def test_half_of_the_damage():
    # Analytic.
    assert half_damage_k([0.0, 1.0, 2.0, 4.0], [0.0, 0.5, 0.5]) == pytest.approx(2.0)
    assert half_damage_k([0.0, 1.0, 2.0, 4.0], [0.0, 0.0, 3.0]) == pytest.approx(3.0)
    assert half_damage_k([0.0, 1.0], [0.0]) is None


def test_life_marks_say_what_they_rest_on():
    result = made("hour")
    marks = {}
    for ax in figures.life_figure(result).axes:
        for line in ax.lines:
            if line.get_linestyle() == "None":
                marks[ax.get_title(loc="left"), int(line.get_ydata()[0])] = (line.get_marker(), line.get_markerfacecolor())
    for row in result.ledger.rows():
        mode = next(m for m in result.study.modes if m.name == row.mode)
        marker, face = marks[row.mode, result.history.chips.index(row.chip)]
        assert marker in (("D", ">") if not mode.model.tested_range else ("o", ">"))
        filled = bool(mode.model.tested_range) and row.outside_share <= 0.5
        assert (face != figures.PAPER) is filled


def test_target_line_only_with_a_target():
    assert any(w == "target 10 years" for w in texts(figures.life_figure(made("one phase, target"))))
    assert not any(w.startswith("target") for w in texts(figures.life_figure(made("hour"))))


def test_stopped_run_says_so_on_every_figure():
    result = made("stopped")
    assert not result.complete
    for figure in drawn("stopped").values():
        assert any("stopped" in w for w in texts(figure))


def test_no_damage_is_said_not_drawn():
    result = made("no current")
    assert result.ledger.worst().life_years > 1e6
    for name in ("damage-by-phase", "life", "cycle-map", "damage-by-swing"):
        assert any("no damage" in w or "over a million" in w for w in texts(drawn("no current")[name])), name


def test_without_modes_only_figures_of_heat():
    result = made("no modes")
    assert set(all_figures(result)) == {"temperatures", "hot-stretch", "losses"} == set(captions(result))


def test_each_figure_has_a_caption_with_a_sentence():
    for case in CASES:
        result = made(case)
        words = captions(result)
        assert set(words) == (set(FIGURES) - {"cooling"} if result.study.modes else {"temperatures", "hot-stretch", "losses"})  # none of these coolings changes
        for name in words:
            assert words[name].endswith(".") and len(words[name]) > 40
            assert "nan" not in words[name].lower().split()


@pytest.mark.parametrize(("span", "unit"), [(0.04, "ms"), (5.0, "s"), (600.0, "min"), (86400.0, "h"), (30 * 86400.0, "d")])
def test_time_axis_in_the_unit_of_people(span, unit):
    assert time_unit(span)[0] == unit


def test_plain():
    assert plain("a\n b\t c") == "a b c"
    assert plain("", otherwise="phase 1") == "phase 1"
    assert len(plain("y" * 200, 26)) == 26


def test_style_of_the_caller_is_left_alone():
    import matplotlib as mpl

    before = dict(mpl.rcParams)
    figures.loss_figure(made("one row"))
    assert dict(mpl.rcParams) == before


def test_no_pyplot_and_no_display():
    code = "import os, sys; os.environ.pop('DISPLAY', None); import mission.show.figures; assert 'matplotlib.pyplot' not in sys.modules"
    subprocess.run([sys.executable, "-c", code], check=True, cwd=PROFILES.parent)


def _luminance(colour):
    c = np.array([int(colour[k:k + 2], 16) for k in (1, 3, 5)]) / 255.0
    c = np.where(c <= 0.04045, c / 12.92, ((c + 0.055) / 1.055) ** 2.4)
    return float(c @ [0.2126, 0.7152, 0.0722])


def contrast(a, b):
    """Contrast ratio after WCAG 2.1, success criterion 1.4.3."""
    high, low = sorted((_luminance(a), _luminance(b)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def test_text_colours_of_figures_can_be_read_and_the_ramp_stays_apart_in_grey():
    for colour in (figures.INK, figures.GREY, figures.BLUE, figures.RED, figures.YELLOW):
        limit = 4.0 if colour == figures.YELLOW else 4.5  # yellow: only lines and one note beside its own lines
        assert contrast(colour, figures.PAPER) >= limit, colour
    grey = [_luminance(c) for c in RAMP]
    assert all(a > 1.25 * b for a, b in itertools.pairwise(grey))


def test_a_target_far_off_is_still_drawn():
    figure = drawn("nasty")["life"]
    for ax in figure.axes:
        low, high = ax.get_xlim()
        assert low < made("nasty").study.spec.lifetime.target_years < high


def test_lane_of_the_peak_is_kept_among_many():
    result = made("many phases")
    peak = result.history.phases[int(result.history.peak_phase_id[result.history.hottest])]
    assert f"{peak} ▾" in texts(drawn("many phases")["temperatures"])
