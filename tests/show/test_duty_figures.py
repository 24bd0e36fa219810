"""The picture of a duty: no peak is lost, power has its sign, and nothing overlaps or leaves the page."""


import numpy as np
import pandas as pd
import pytest

from mission.duty import profile_from_frame, profile_from_rows, recipe
from mission.errors import InputError
from mission.show.duty_figures import duty_figure

from ..duty.test_recipes import ALL
from .pages import check_texts, drawn, tick_labels

NASTY = '<script>alert(1)</script> & $\\frac{1}{0}$ "quoted" and long'


def recorded():
    t = np.arange(3000.0)
    frame = pd.DataFrame({"t": t, "I": np.where(t == 1234, 400.0, 50 * np.sin(t / 200)), "n": 900 * np.cos(t / 300), "what": [f"{NASTY} {int(k) % 30}" for k in t]})
    return profile_from_frame(frame, {"time": {"column": "t", "unit": "s"}, "current": {"column": "I", "unit": "A rms"}, "speed": {"column": "n", "unit": "rpm"}, "phase": "what"}, name=NASTY)


FIGURES = {kind: (lambda kind=kind: duty_figure(recipe(kind, **ALL[kind]).profile())) for kind in ALL}
FIGURES |= {"stretch": lambda: duty_figure(recipe("lift", **ALL["lift"]).profile(), from_s=100.0, to_s=400.0, title="名前"), "recorded": lambda: duty_figure(recorded()),
            "nothing happens": lambda: duty_figure(profile_from_rows("still", "here", [0.0, 9.0], [0.0], [0.0], ([0], ["rest"])))}


@pytest.mark.parametrize("name", FIGURES)
def test_texts_stay_on_the_page_and_apart(name, tmp_path):
    figure = drawn(FIGURES[name], tmp_path)
    last = figure.axes[-1]
    assert len(check_texts(figure, lambda f: tick_labels(f, lambda ax: (ax.xaxis,) if ax is last else (ax.xaxis, ax.yaxis), minor=False))) >= 6


@pytest.mark.parametrize(("profile", "panel", "column", "factor"), [
    (recipe("lift", **ALL["lift"]).profile(), 1, "torque_nm", 1.0), (recipe("lift", **ALL["lift"]).profile(), 0, "speed_rad_s", 30 / np.pi), (recorded(), 1, "current_a", 1.0)])
def test_no_peak_is_lost_in_many_rows(profile, panel, column, factor):
    figure = duty_figure(profile)
    high, low = (line.get_ydata() for line in figure.axes[panel].lines[:2])
    assert profile.rows > high.size / 2
    assert (low.min(), high.max()) == pytest.approx([factor * v for v in profile.ranges[column]])
    # independent: every column against the rows that it spans, found one by one
    frame, edges = profile.to_frame(), np.unique(figure.axes[panel].lines[0].get_xdata())
    scale = profile.duration_s / edges[-1]
    for k in range(0, edges.size - 1, 37):
        a, b = edges[k] * scale, edges[k + 1] * scale
        here = frame[(frame.time_s < b - 1e-6) & (frame.time_s + frame.dt_s > a + 1e-6)][column]
        assert (low[2 * k], high[2 * k]) == pytest.approx((factor * here.min(), factor * here.max()))


def test_a_stretch_of_few_rows_is_drawn_row_by_row():
    """By hand: S3 at 40 % from 200 s to 300 s: load up to 240 s, 80 N m at 1500 rpm being 12.566 kW."""
    duty = recipe("duty-type", type="S3", torque_nm=80, speed_rpm=1500, duty_factor=0.4).profile()
    figure = duty_figure(duty, from_s=200.0, to_s=300.0)
    line = figure.axes[2].lines[0]
    assert line.get_xdata().tolist() == pytest.approx([200, 240, 240, 300]) and line.get_ydata().tolist() == pytest.approx([12.566, 12.566, 0, 0], rel=1e-4)
    assert figure.axes[0].lines[0].get_ydata().tolist() == pytest.approx([1500, 1500, 0, 0])
    assert [t.get_text() for t in figure.axes[-1].get_yticklabels()] == ["load", "rest"] and figure.get_suptitle() == "duty-type: 100 s, 2 rows in all"


def test_refusals():
    duty = recipe("duty-type", type="S3", torque_nm=80, speed_rpm=1500, duty_factor=0.4).profile()
    for values, match in [({"from_s": 600.0}, "from_s: found 600 s"), ({"to_s": 601.0}, "to_s: found 601 s; allowed: at most 600 s"), ({"from_s": 9.0, "to_s": 9.0}, "to_s: found 9 s; allowed: above from_s")]:
        with pytest.raises(InputError, match=match):
            duty_figure(duty, **values)
