"""A picture of a duty: speed, torque or current, shaft power, and what the drive is doing, over time."""

from __future__ import annotations

import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from ..checks import require_range
from ..duty import MissionProfile
from ..errors import InputError
from .figures import BLUE, GREY, INK, LIGHT_BLUE, LIGHT_RED, RED, _phase_words, plain, styled, time_unit
from .text import number

_COLUMNS = 720
_LANES = 14
_RPM = 30.0 / np.pi
#: Column -> (label of the axis, factor of what is drawn).
_PANELS = {"speed_rad_s": ("speed, rpm", _RPM), "frequency_hz": ("output, Hz", 1.0), "torque_nm": ("torque, N m", 1.0), "current_a": ("current, A rms", 1.0)}


@styled
def duty_figure(profile: MissionProfile, *, from_s: float = 0.0, to_s: float | None = None, title: str = "") -> Figure:
    """A duty over time, or a stretch of it.

    Every row holds until the next one, so lines are steps. Where there are more rows than a page can show, a column of the
    picture spans from the lowest to the highest of its rows: no peak is lost. Where torque and speed are known the shaft's
    power is drawn too; what lies below zero generates.

    Parameters
    ----------
    profile : MissionProfile
        Of a file or of a recipe.
    from_s, to_s : float
        Stretch that is drawn; the whole duty unless given. [s]
    title : str
        In place of the duty's name.

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        A stretch outside the duty, or one without length.

    Examples
    --------
    >>> from mission.duty import recipe
    >>> duty = recipe("duty-type", type="S3", torque_nm=80, speed_rpm=1500, duty_factor=0.4).profile()
    >>> [ax.get_ylabel() for ax in duty_figure(duty).axes]
    ['speed, rpm', 'torque, N m', 'shaft, kW', 'phase']
    """
    require_range("from_s", from_s, low=0.0, high=profile.duration_s, high_open=True, unit="s")
    to_s = profile.duration_s if to_s is None else float(require_range("to_s", to_s, high=profile.duration_s, unit="s"))
    if to_s <= from_s:
        raise InputError("to_s", f"{to_s:g} s", f"above from_s = {from_s:g} s", "widen the stretch")
    panels = [q for q in _PANELS if q in profile.quantities]
    with_power = {"torque_nm", "speed_rad_s"} <= profile.quantities
    edges, bands, present = _columns(profile, from_s, to_s, panels, with_power)
    lanes, names = _lanes(profile, present)
    unit, s = time_unit(to_s - from_s)
    heights = [1.1] * len(bands) + [0.25 + 0.17 * len(lanes)]
    figure = Figure(figsize=(8.6, 0.8 + 1.15 * sum(heights)), layout="constrained")
    axes = figure.subplots(len(heights), 1, sharex=True, gridspec_kw={"height_ratios": heights})
    for ax, (quantity, (low, high)) in zip(axes, bands.items()):
        label, factor = ("shaft, kW", 1e-3) if quantity == "power" else _PANELS[quantity]
        _draw(ax, edges / s, factor * low, factor * high, quantity in ("power", "current_a"))
        ax.set_ylabel(label)
    for lane, members in enumerate(lanes):
        here = present[members].any(axis=0).astype(int)
        change = np.flatnonzero(np.diff(np.concatenate([[0], here, [0]])))
        axes[-1].broken_barh([(edges[a] / s, (edges[b] - edges[a]) / s) for a, b in zip(change[::2], change[1::2])], (lane - 0.34, 0.68), facecolor=GREY, edgecolor=GREY, linewidth=0.4)
    axes[-1].set_yticks(range(len(lanes)), names, fontsize=7.5)
    axes[-1].tick_params(axis="y", length=0)
    axes[-1].set_ylim(len(lanes) - 0.4, -0.6)
    axes[-1].set_ylabel("phase")
    axes[-1].grid(axis="y", visible=False)
    axes[-1].set_xlim(edges[0] / s, edges[-1] / s)
    axes[-1].set_xlabel(f"time, {unit}")
    figure.align_ylabels(axes[:-1])
    figure.suptitle(f"{plain(title or profile.name, 60, 'duty')}: {number((to_s - from_s) / s)} {unit}, {profile.rows:,} rows" + (" in all" if to_s - from_s < profile.duration_s else ""),
                    fontsize=9, x=0.01, ha="left", weight="bold")
    return figure


def _columns(profile, from_s, to_s, panels, with_power):
    """Edges of the picture's columns; lowest and highest value in each, by quantity; which phases each holds (phases, columns)."""
    parts = [(b.time_s[kept], [b.columns[q][kept] for q in panels], b.phase_id[kept]) for b in profile.blocks()
             if (kept := (b.time_s < to_s) & (b.time_s + b.dt_s > from_s)).any()]
    time = np.concatenate([p[0] for p in parts])
    values = {q: np.concatenate([p[1][k] for p in parts]) for k, q in enumerate(panels)}
    phase = np.concatenate([p[2] for p in parts])
    if with_power:
        values["power"] = values["torque_nm"] * values["speed_rad_s"]
    rows = np.append(np.maximum(time, from_s), to_s)
    if time.size <= _COLUMNS:
        edges, first, last = rows, np.arange(time.size), np.arange(1, time.size + 1)
    else:
        edges = np.linspace(from_s, to_s, _COLUMNS + 1)
        first = np.searchsorted(rows, edges[:-1], side="right") - 1
        last = np.maximum(np.searchsorted(rows[:-1], edges[1:], side="left"), first + 1)
    cuts = np.stack([first, last], axis=1).ravel()

    def over(reduce, a):
        # a row more, so that the last cut may be the end; every second piece lies between columns
        return reduce.reduceat(np.append(a, a[-1]), cuts)[::2]

    bands = {q: (over(np.minimum, v), over(np.maximum, v)) for q, v in values.items()}
    present = np.array([over(np.maximum, (phase == p).astype(int)) for p in range(len(profile.phases))], bool)
    return edges, bands, present


def _draw(ax, edges, low, high, two_ways):
    x = np.repeat(edges, 2)[1:-1]
    low, high = np.repeat(low, 2), np.repeat(high, 2)
    if two_ways:
        ax.fill_between(x, np.minimum(low, 0.0), 0.0, facecolor=LIGHT_RED, hatch="////", edgecolor=RED, linewidth=0.0)
        ax.fill_between(x, 0.0, np.maximum(high, 0.0), color=LIGHT_BLUE, linewidth=0)
        if low.min() < 0.0 < high.max():
            ax.set_title("above zero: drives; below, hatched: generates", fontsize=7.5, weight="normal", loc="right", pad=2)
    else:
        ax.fill_between(x, low, high, color=LIGHT_BLUE, linewidth=0)
    ax.plot(x, high, color=BLUE, lw=0.9)
    ax.plot(x, low, color=BLUE, lw=0.9)
    ax.axhline(0.0, color=INK, lw=0.6)
    ax.yaxis.set_major_locator(MaxNLocator(4))
    ax.margins(y=0.08)


def _lanes(profile, present):
    """Groups of phases, one a lane, and their names; the shortest ones share the last lane if there are many."""
    here = np.flatnonzero(present.any(axis=1))
    names = _phase_words(profile.phases)
    if here.size <= _LANES:
        return [[int(p)] for p in here], [names[p] for p in here]
    longest = sorted(here[np.argsort(-np.array(profile.time_by_phase_s)[here], kind="stable")[: _LANES - 1]].tolist())
    others = [int(p) for p in here if p not in longest]
    return [[p] for p in longest] + [others], [names[p] for p in longest] + [f"{len(others)} other phases"]
