"""Pictures of a result, as matplotlib figures that need no display.

Every figure carries its units, names its lines where they are, and never lets
colour be the only signal. Text from files is drawn as it stands.

The colours are the light and dark pairs of a published set that stays apart for
the common kinds of colour blindness and in grey print (P. Tol, "Colour schemes",
SRON technical note EPS/TN/09-002, medium-contrast scheme), with ink and greys of our own.
"""

from __future__ import annotations

import functools
import math
from pathlib import Path

import matplotlib as mpl
import numpy as np
from matplotlib import style
from matplotlib.colors import BoundaryNorm, ListedColormap
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties, findfont, get_font
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon
from matplotlib.ticker import FixedLocator, FuncFormatter, LogLocator, MaxNLocator, NullFormatter, NullLocator

from .tables import BEYOND_YEARS, life_words
from .text import number

STYLE_FILE = Path(__file__).with_name("kelvin.mplstyle")

PAPER, INK, GREY, RULE = "#ffffff", "#1d2530", "#5b6570", "#d9d6cc"
BLUE, LIGHT_BLUE = "#004488", "#6699cc"
RED, LIGHT_RED = "#994455", "#ee99aa"
YELLOW, LIGHT_YELLOW = "#997700", "#eecc66"
#: Pale to dark: share of damage.
RAMP = ("#f3e6c8", "#e8c98a", "#d79f5c", "#b8704a", "#8c4543", "#5c2038")
#: Colour, pale colour, hatch of the failure modes, in the order of the study.
_MODE_LOOKS = ((BLUE, LIGHT_BLUE, "////"), (RED, LIGHT_RED, "\\\\\\\\"), (YELLOW, LIGHT_YELLOW, "xxxx"), (INK, GREY, "----"))

#: A life is called extrapolated where more than this share of its damage lies outside the tested range.
MOSTLY = 0.5
_COLUMNS = 720
_LANES = 16


def styled(draw):
    """Draw in our style, whatever style the caller has set, and leave the caller's as it was."""

    @functools.wraps(draw)
    def inner(*args, **named) -> Figure:
        with style.context(str(STYLE_FILE)):
            figure = draw(*args, **named)
            _fix_ticks(figure)
        return figure

    return inner


def _fix_ticks(figure):
    # ticks are made when a figure is drawn, which is after our style has been left
    rc = mpl.rcParams
    for ax in figure.axes:
        for axis in "xy":
            t = f"{axis}tick"
            ax.tick_params(axis=axis, which="major", direction=rc[f"{t}.direction"], color=rc[f"{t}.color"], width=rc[f"{t}.major.width"],
                           labelcolor=rc[f"{t}.labelcolor"], grid_color=rc["grid.color"], grid_linewidth=rc["grid.linewidth"])


# --- helpers ------------------------------------------------------------------
def time_unit(span_s: float) -> tuple[str, float]:
    """Unit in which people would speak of such a stretch of time, and its seconds.

    Examples
    --------
    >>> time_unit(86400.0), time_unit(600.0), time_unit(3.0)
    (('h', 3600.0), ('min', 60.0), ('s', 1.0))
    """
    for least, name, seconds in ((20 * 86400.0, "d", 86400.0), (7200.0, "h", 3600.0), (180.0, "min", 60.0), (0.5, "s", 1.0)):
        if span_s >= least:
            return name, seconds
    return "ms", 1e-3


def plain(text, longest: int = 26, otherwise: str = "(name)") -> str:
    """One drawable line of a user's text: shortened, and replaced where the font lacks its letters."""
    line = " ".join(str(text).split())
    known = _known_letters()
    if not line or any(ord(c) not in known for c in line):
        return otherwise
    return line if len(line) <= longest else line[: longest - 1].rstrip() + "…"


@functools.lru_cache
def _known_letters():
    return frozenset(get_font(findfont(FontProperties(family="DejaVu Sans"))).get_charmap())


def _phase_words(phases, longest=26):
    return [plain(p, longest, f"phase {i}") for i, p in enumerate(phases, 1)]


def rows_by_mode(result) -> list[tuple[int, object, list]]:
    """(number, mode, its ledger rows with the worst first), shortest life first."""
    rows, out = iter(result.ledger.rows()), []
    for number_, mode in enumerate(result.study.modes):
        mine = [next(rows) for _ in mode.chip_numbers(result.ledger.diodes)]
        out.append((number_, mode, sorted(mine, key=lambda r: -r.damage_per_mission)))
    return sorted(out, key=lambda x: -x[2][0].damage_per_mission)


def trust(row, mode) -> str:
    """'tested', 'extrapolated' (most damage outside the tested range) or 'unstated' (the set states no range)."""
    if not mode.model.tested_range:
        return "unstated"
    return "extrapolated" if row.outside_share > MOSTLY else "tested"


def _three(value: float) -> str:
    """Three figures, trailing zeros kept, so that numbers in a row look alike."""
    return f"{value:#.3g}".rstrip(".") if 1e-2 <= abs(value) < 1000.0 else number(value, 3)


def _percent(share):
    """Share in words: no false digits."""
    p = 100.0 * share
    if p == 0.0:
        return "0 %"
    return "< 0.1 %" if p < 0.1 else f"{p:.1f} %" if p < 10.0 else f"{p:.0f} %"


def _note_figure(text, x_label, y_label):
    """Axes that stay empty, with the reason in them."""
    figure = Figure(figsize=(8.6, 2.4), layout="constrained")
    ax = figure.subplots()
    ax.set(xlabel=x_label, ylabel=y_label, xticks=[], yticks=[])
    ax.text(0.5, 0.5, text, ha="center", va="center", transform=ax.transAxes, color=INK)
    return figure


def _stopped(result, figure):
    if not result.complete:
        name, s = time_unit(result.history.duration_s)
        figure.suptitle(f"Run stopped at {number(result.history.duration_s / s)} {name}: only the part before is shown", fontsize=8.5, x=0.01,
                        ha="left", color=RED, weight="bold")


def _columns(history, first=0, last=None, most=_COLUMNS):
    """Starts of groups of buckets, so that no more columns are drawn than a page can show."""
    last = history.coolant_c.size if last is None else last
    step = max(1, math.ceil((last - first) / most))
    starts = np.arange(first, last, step)
    return starts, np.append(history.edge_s[starts], history.edge_s[last])


def _low(a, starts, last):
    return np.minimum.reduceat(a[:last], starts)


def _high(a, starts, last):
    return np.maximum.reduceat(a[:last], starts)


def _steps(edges, y):
    """A step line's points: each value holds from edge to edge."""
    return np.repeat(edges, 2)[1:-1], np.repeat(y, 2)


def _spread(levels, gap, low=0.0, high=1.0):
    """Move label heights apart to at least ``gap``, keeping their order."""
    order = np.argsort(levels)
    y = np.array(levels, float)[order]
    for k in range(1, y.size):
        y[k] = max(y[k], y[k - 1] + gap)
    if y.size and y[-1] > high:
        y[-1] = high
        for k in range(y.size - 2, -1, -1):
            y[k] = min(y[k], y[k + 1] - gap)
    out = np.empty_like(y)
    out[order] = np.maximum(y, low - 0.05)
    return out


def limit_c(result) -> float:
    """Junction limit that the result is held against [degC]."""
    from ..study.verdicts import junction_limit_c

    return junction_limit_c(result.study)


def _hottest_of(history, chips):
    chips = np.asarray(chips)
    return int(chips[np.argmax(history.peak_c[chips])])


PAIR_WORDS = {"switch": "switch", "diode": "diode", "inner_switch": "inner switch", "inner_diode": "inner diode", "clamp_diode": "clamp diode"}


def part_words(module, place) -> str:
    """What a section of the module file, or the pair of chips it stands for, is called: switch, diode; in three-level legs outer switch and so on."""
    return ("outer " if module.levels == 3 and place in ("switch", "diode") else "") + PAIR_WORDS[place]


def _kinds(result):
    """What is told apart by colour: words, chip numbers, dark and pale."""
    diodes = result.study.module.diode_chips()
    out = [("switch" if diodes.any() else "chip", np.flatnonzero(~diodes), BLUE, LIGHT_BLUE)]
    return out + ([("diode", np.flatnonzero(diodes), RED, LIGHT_RED)] if diodes.any() else [])


# --- 1: temperatures ----------------------------------------------------------
@styled
def temperature_figure(result) -> Figure:
    """Junction, case and coolant over the mission, with the phases of the duty below.

    The bands run from the lowest to the highest temperature of each stretch of time
    for the hottest switch and the hottest diode; lanes below show which phase of the
    duty runs when.
    """
    history, limit = result.history, limit_c(result)
    unit, s = time_unit(history.duration_s)
    starts, edges = _columns(history)
    last = history.coolant_c.size
    kinds, hot = _kinds(result), history.hottest
    shown = [(_hottest_of(history, chips), dark, pale, words) for words, chips, dark, pale in kinds]
    here = np.unique(history.phase_id)
    lanes = here if here.size <= _LANES else None
    n_lanes = min(here.size, _LANES)
    panels = len(shown)
    figure = Figure(figsize=(9.6, 1.2 + 2.2 * panels + 0.17 * n_lanes), layout="constrained")
    *tops, low = figure.subplots(panels + 1, 1, sharex=True, gridspec_kw={"height_ratios": [2.2] * panels + [0.17 * n_lanes + 0.12], "hspace": 0.03})
    x, coolant = _steps(edges / s, np.add.reduceat(history.coolant_c, starts) / np.diff(np.append(starts, last)))
    bottom = min(history.lowest_c[[one[0] for one in shown]].min(), history.coolant_c.min())
    top = max(limit, history.peak_c.max())
    span = max(top - bottom, 1.0)
    for ax, (chip, dark, pale, kind) in zip(tops, shown, strict=True):
        y0 = _steps(edges, _low(history.t_min_c[:, chip], starts, last))[1]
        y1 = _steps(edges, _high(history.t_max_c[:, chip], starts, last))[1]
        case = _steps(edges, _high(history.case_max_c[:, chip], starts, last))[1]
        ax.fill_between(x, y0, y1, color=pale, linewidth=0, alpha=0.75)
        ax.plot(x, y1, color=dark, lw=0.9)
        ax.plot(x, case, color=YELLOW, lw=1.0, ls=(0, (4, 1.5)))
        ax.plot(x, coolant, color=GREY, lw=1.1, ls=(0, (1, 1)))
        ax.axhline(limit, color=INK, lw=1.3, ls=(0, (7, 3)))
        ax.set_ylim(bottom - 0.05 * span, top + 0.22 * span)
        ax.set_ylabel("temperature, °C")
        ax.set_title(f"hottest {kind}, {history.chips[chip]}")
        ax.yaxis.set_major_locator(MaxNLocator(6))
        _margin_labels(ax, (
            (limit, f"limit {limit:g} °C", {"color": INK, "lw": 1.3, "ls": (0, (7, 3))}),
            (history.peak_c[chip], f"junction {history.peak_c[chip]:.1f} °C", {"color": dark, "lw": 1.6}),
            (history.case_peak_c[chip], f"case {history.case_peak_c[chip]:.1f} °C", {"color": YELLOW, "lw": 1.3, "ls": (0, (4, 1.5))}),
            (history.coolant_c.max(), f"coolant {history.coolant_c.max():.1f} °C", {"color": GREY, "lw": 1.3, "ls": (0, (1, 1))}),
        ))
    ax = next(ax for ax, (chip, *_) in zip(tops, shown, strict=True) if chip == hot)
    _mark_peak(ax, history, hot, s, unit)
    _draw_lanes(low, history, starts, edges / s, lanes, here, n_lanes, int(history.peak_phase_id[hot]))
    low.set_xlabel(f"time from the start of the mission, {unit}")
    low.set_xlim(edges[0] / s, edges[-1] / s)
    low.xaxis.set_major_locator(MaxNLocator(8, steps=[1, 2, 3, 6, 10] if unit in ("h", "min") else [1, 2, 5, 10]))
    _stopped(result, figure)
    return figure


def _margin_labels(ax, entries):
    """Names and highest values of the lines, right of the axes, at the height of those values."""
    y0, y1 = ax.get_ylim()
    at = _spread([(e[0] - y0) / (y1 - y0) for e in entries], 0.085)
    for (_, words, look), y in zip(entries, at, strict=True):
        ax.plot([1.006, 1.032], [y, y], transform=ax.transAxes, clip_on=False, **look)
        ax.text(1.038, y, words, transform=ax.transAxes, va="center", fontsize=8)
    ax.text(1.038, 1.02, "highest", transform=ax.transAxes, va="bottom", fontsize=7.5, color=GREY, style="italic")


def _mark_peak(ax, history, hot, s, unit):
    t, peak = history.peak_time_s[hot] / s, history.peak_c[hot]
    right = t > 0.6 * history.duration_s / s
    phase = plain(history.phases[int(history.peak_phase_id[hot])], 26, f"phase {int(history.peak_phase_id[hot]) + 1}")
    ax.plot([t], [peak], marker="v", ms=6, color=INK, mec=PAPER, mew=0.6, clip_on=False, zorder=5)
    ax.annotate(f"{peak:.1f} °C at {number(t)} {unit}, {phase}", (t, peak), xytext=(-10 if right else 10, 9), textcoords="offset points",
                ha="right" if right else "left", va="bottom", fontsize=8, weight="bold", zorder=6,
                bbox={"boxstyle": "square,pad=0.15", "fc": PAPER, "ec": "none"})


def _draw_lanes(ax, history, starts, edges, lanes, here, n_lanes, peak_phase):
    last = history.phase_id.size
    names = _phase_words(history.phases)
    if lanes is None:
        # too many phases for lanes of their own: the one of the peak and the longest ones keep theirs
        time = np.bincount(history.phase_id, weights=np.diff(history.edge_s), minlength=len(history.phases))
        time[peak_phase] = np.inf
        kept = np.sort(np.argsort(-time, kind="stable")[: n_lanes - 1])
        groups = [([p], names[p]) for p in kept] + [([p for p in here if p not in set(kept)], f"{here.size - kept.size} other phases")]
    else:
        groups = [([p], names[p]) for p in lanes]
    for lane, (members, _) in enumerate(groups):
        present = _high(np.isin(history.phase_id, members).astype(int), starts, last)
        change = np.flatnonzero(np.diff(np.concatenate([[0], present, [0]])))
        bars = [(edges[a], edges[b] - edges[a]) for a, b in zip(change[::2], change[1::2], strict=True)]
        mine = peak_phase in members
        ax.broken_barh(bars, (lane - 0.32, 0.64), facecolor=INK if mine else GREY, edgecolor=INK if mine else GREY, linewidth=0.4)
    ax.set_yticks(range(len(groups)), [f"{name} ▾" if peak_phase in members else name for members, name in groups], fontsize=7.5)
    ax.tick_params(axis="y", length=0)
    ax.set_ylim(len(groups) - 0.4, -0.6)
    ax.set_ylabel("phase (▾ peak)")
    ax.grid(axis="y", visible=False)


# --- 2: the hot stretch ---------------------------------------------------------
@styled
def hot_stretch_figure(result) -> Figure:
    """All chips around the highest temperature of the mission."""
    history = result.history
    hot = history.hottest
    at = history.peak_time_s[hot]
    width = min(history.duration_s, max(history.duration_s / 60.0, min(60.0, history.duration_s)))
    begin = min(max(at - 0.6 * width, 0.0), history.duration_s - width)
    n = history.coolant_c.size
    first = int(np.clip(np.searchsorted(history.edge_s, begin, side="right") - 1, 0, n - 1))
    last = int(np.clip(np.searchsorted(history.edge_s, begin + width, side="left"), first + 1, n))
    starts, edges = _columns(history, first, last, most=160)
    unit, s = time_unit(width)
    rows = len(history.chips) // 6
    figure = Figure(figsize=(9.6, 0.9 + 2.0 * rows), layout="constrained")
    axes = figure.subplots(rows, 6, sharex=True, sharey=True, squeeze=False)
    diodes = result.study.module.diode_chips()
    x = np.repeat((edges - at) / s, 2)[1:-1]
    highest = np.repeat(_high(history.t_max_c, starts, last), 2, axis=0)
    lowest = np.repeat(_low(history.t_min_c, starts, last), 2, axis=0)
    for chip, ax in enumerate(axes.flat):
        dark, pale = (RED, LIGHT_RED) if diodes[chip] else (BLUE, LIGHT_BLUE)
        kind = slice(chip - chip % 6, chip - chip % 6 + 6)
        ax.plot(x, highest[:, kind].max(axis=1), color=GREY, lw=0.6, zorder=1)
        ax.fill_between(x, lowest[:, chip], highest[:, chip], color=pale, linewidth=0, zorder=2)
        ax.plot(x, highest[:, chip], color=dark, lw=1.0, zorder=3)
        ax.axvline(0.0, color=GREY, lw=0.7, ls=(0, (2, 2)), zorder=1)
        ax.set_title(f"{'▾ ' if chip == hot else ''}{history.chips[chip]}  {highest[:, chip].max():.1f} °C", fontsize=8.5)
        ax.xaxis.set_major_locator(MaxNLocator(4))
        ax.yaxis.set_major_locator(MaxNLocator(5))
        if chip >= 6 * (rows - 1):
            ax.set_xlabel(f"{unit} from the peak")
    for row, pair in zip(axes, result.study.module.chip_pairs(), strict=True):
        row[0].set_ylabel(f"{part_words(result.study.module, pair.place)}{'es' if not pair.is_diode else 's'}: junction, °C")
    axes.flat[0].set_xlim(x[0], x[-1])
    _stopped(result, figure)
    return figure


# --- 3: cycles --------------------------------------------------------------------
def _centres(edges):
    e = np.array(edges, float)
    e[0] = e[1] - (e[2] - e[1]) if not np.isfinite(e[0]) else e[0]
    e[-1] = e[-2] + (e[-2] - e[-3]) if not np.isfinite(e[-1]) else e[-1]
    return 0.5 * (e[1:] + e[:-1])


def _class_shares(result, which, mode, row):
    """Cycles and share of the row's damage by class of swing and mean, shape (ranges, means) each."""
    chip = result.history.chips.index(row.chip)
    count = result.cycle_map.count[chip + (0 if mode.acts_on == "junction" else len(result.history.chips))]
    damage = result.cycle_map.damage[which, chip]
    total = damage.sum() if row.life_years <= BEYOND_YEARS else 0.0
    return count, damage / total if total > 0.0 else np.zeros_like(damage)


@styled
def cycle_figure(result) -> Figure:
    """Cycles by swing and mean temperature with their damage, for the worst chip of the two failure modes with the shortest lives."""
    from ..study.cyclemap import MEAN_EDGE_C, RANGE_EDGE_K

    labels = ("swing of the cycle, K", "mean temperature of the cycle, °C")
    ranked = rows_by_mode(result)[:2]
    if not ranked:
        return _note_figure("no failure mode given: cycles are not weighed", *labels)
    parts = [(mode, rows[0], *_class_shares(result, which, mode, rows[0])) for which, mode, rows in ranked]
    parts = [part for part in parts if part[2].any()]
    if not parts:
        return _note_figure("no cycles: the temperatures do not move", *labels)
    r, m = np.meshgrid(_centres(RANGE_EDGE_K), _centres(MEAN_EDGE_C), indexing="ij")
    figure = Figure(figsize=(9.6, 4.9), layout="constrained")
    axes = figure.subplots(1, len(parts), squeeze=False)[0]
    levels = _levels(max(100.0 * part[3].max() for part in parts))
    circles = None
    for ax, (mode, row, count, share) in zip(axes, parts, strict=True):
        some = count > 0.0
        ax.scatter(r[some], m[some], s=_mark_area(count[some]), marker="s", color=GREY, linewidths=0, alpha=0.75, zorder=2)
        circles = _damage_circles(ax, r, m, share, levels) or circles
        ax.set_xlim(0.0, max(5.0, 1.12 * r[some].max()))
        ax.set_ylim(m[some].min() - 10.0, m[some].max() + 16.0)
        inside = _tested_outline(ax, mode.model.tested_range)
        ax.set(xlabel=labels[0], ylabel=labels[1])
        ax.set_title(f"{row.chip}, {plain(mode.name, 32, 'failure mode')} ({mode.acts_on})")
        if not inside:
            words = "no tested range stated" if not mode.model.tested_range else "every cycle lies outside the tested range"
            ax.text(0.015, 0.985, words, transform=ax.transAxes, va="top", fontsize=8, style="italic")
    keys = [Line2D([], [], ls="", marker="s", ms=math.sqrt(_mark_area(c)), color=GREY, mec="none", label=w)
            for c, w in ((1.0, "1 cycle a mission"), (100.0, "100"), (1e4, "10 000"))]
    if circles is not None:
        bar = figure.colorbar(circles, ax=list(axes), spacing="uniform", fraction=0.04, pad=0.01, format=FuncFormatter(lambda v, _: f"{v:g}"))
        bar.set_label("damage: share of the chip's total in a class, %")
        bar.outline.set_linewidth(0.6)
        bar.ax.grid(visible=False)
        keys.append(Line2D([], [], ls="", marker="o", ms=8, mfc=RAMP[2], mec=INK, mew=0.5, label="damage, by size and shade"))
    figure.legend(handles=keys, loc="outside lower center", ncols=len(keys), handletextpad=0.1)
    _stopped(result, figure)
    return figure


def _mark_area(count):
    """Area of a count mark [pt^2]: three sizes a thousandfold apart stay readable."""
    return (1.2 + 1.1 * np.log10(1.0 + np.asarray(count, float))) ** 2


def _levels(top_percent):
    """Borders of the shades: about half a decade each, the last one above the highest share."""
    levels = [0.003, 0.01, 0.03, 0.1, 0.3, 1.0, 3.0, 10.0, 30.0, 100.0]
    end = next((k for k, v in enumerate(levels) if v >= top_percent * (1 - 1e-9)), len(levels) - 1)
    end = max(end, len(RAMP))
    return levels[end - len(RAMP): end + 1]


def _damage_circles(ax, r, m, share, levels):
    percent = 100.0 * share
    drawn = percent >= levels[0]
    if not drawn.any():
        ax.text(0.015, 0.93, "no damage worth naming", transform=ax.transAxes, va="top", fontsize=8)
        return None
    order = np.argsort(percent[drawn])[::-1]
    percent = percent[drawn][order]
    colours = ListedColormap(RAMP)
    return ax.scatter(r[drawn][order], m[drawn][order], s=8.0 + 300.0 * (percent / levels[-1]) ** 0.7, c=percent, cmap=colours,
                      norm=BoundaryNorm(levels, colours.N), edgecolors=INK, linewidths=0.5, zorder=3)


def _tested_outline(ax, tested):
    """Outline of the tested range as far as swing and temperature tell it; False if nothing of it is in view."""
    (x0, x1), (y0, y1) = ax.get_xlim(), ax.get_ylim()
    if "range_k" not in tested:
        return False
    a, b = tested["range_k"]
    # mean = min + range/2 = max - range/2
    named = next(((key, slope) for key, slope in (("mean_c", 0.0), ("min_c", 0.5), ("max_c", -0.5)) if key in tested), None)
    if named is None:
        corners = [(a, y0 - 1e3), (b, y0 - 1e3), (b, y1 + 1e3), (a, y1 + 1e3)]
    else:
        low, high = tested[named[0]]
        corners = [(a, low + named[1] * a), (b, low + named[1] * b), (b, high + named[1] * b), (a, high + named[1] * a)]
        y1 = max(y1, min(max(c[1] for c in corners), y1 + 40.0) + 6.0)
    x1 = max(x1, min(b, x1 * 1.6) * 1.03)
    ax.set_xlim(x0, x1)
    ax.set_ylim(y0, y1)
    ax.add_patch(Polygon(corners, closed=True, fill=False, ec=BLUE, lw=1.4, ls=(0, (6, 2)), zorder=4))
    if a >= x1:
        return False
    more = " (heating time apart)" if "heating_s" in tested else ""
    ax.annotate(f"tested range{more}", (max(a, x0), min(max(c[1] for c in corners), y1)), xytext=(3, 3), textcoords="offset points", color=BLUE,
                fontsize=8, zorder=5, annotation_clip=False)
    return True


# --- 4: damage by phase -------------------------------------------------------------
@styled
def damage_phase_figure(result) -> Figure:
    """Share of time and share of damage of every phase; the worst chip for each failure mode."""
    labels = ("share, %", "phase of the duty")
    time = np.asarray(result.study.profile.time_by_phase_s, float)
    ranked = [(k, mode, rows[0]) for k, mode, rows in rows_by_mode(result)][: len(_MODE_LOOKS) - 1]
    phases = result.study.profile.phases
    names = _phase_words(phases)
    shares = [np.array([row.damage_by_phase[p] for p in phases]) / (row.damage_per_mission if row.life_years <= BEYOND_YEARS else math.inf)
              for _, _, row in ranked]
    weight = sum(shares) if shares else time / max(time.sum(), 1e-300)
    order = np.lexsort((-time, -weight))
    columns = [time / max(time.sum(), 1e-300), *shares]
    if order.size > _LANES:
        rest = order[_LANES - 1:]
        order = order[: _LANES - 1]
        columns = [np.append(c[order], c[rest].sum()) for c in columns]
        words = [names[p] for p in order] + [f"{rest.size} other phases"]
    else:
        columns, words = [c[order] for c in columns], [names[p] for p in order]
    figure = Figure(figsize=(9.6, 1.3 + 0.27 * len(words)), layout="constrained")
    axes = np.atleast_1d(figure.subplots(1, len(columns), sharey=True))
    looks = [(GREY, RULE, "")] + [_MODE_LOOKS[k % len(_MODE_LOOKS)] for k, _, _ in ranked]
    titles = ["time"] + [f"{plain(mode.name, 30, f'failure mode {k + 1}')}\n{row.chip}, {life_words(row.life_years)} years" for k, mode, row in ranked]
    for ax, values, (dark, pale, hatch), title in zip(axes, columns, looks, titles, strict=True):
        ax.barh(range(len(words)), 100.0 * values, height=0.64, facecolor=pale, edgecolor=dark, linewidth=0.7, hatch=hatch)
        for y, value in enumerate(values):
            ax.annotate(_percent(value), (100.0 * value, y), xytext=(4, 0), textcoords="offset points", va="center", fontsize=7.5)
        ax.set_title(title, fontsize=8.5)
        ax.set_xlabel("share of the mission's time, %" if ax is axes[0] else "share of this chip's damage, %")
        ax.set_xlim(0.0, 1.3 * max(100.0 * values.max(), 1.0))
        ax.xaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))
        ax.grid(axis="y", visible=False)
        ax.tick_params(axis="y", length=0)
        if ax is not axes[0] and not values.any():
            ax.text(0.5, 0.5, "no damage worth naming", transform=ax.transAxes, ha="center", va="center")
    axes[0].set_yticks(range(len(words)), words)
    axes[0].set_ylim(len(words) - 0.5, -0.5)
    axes[0].set_ylabel(labels[1])
    _stopped(result, figure)
    return figure


# --- 5: damage by swing --------------------------------------------------------------
def swing_shares(result, which, mode, row):
    """Edges of swing classes [K] with the share of damage and of cycles of one ledger row in each; None without cycles."""
    from ..study.cyclemap import RANGE_EDGE_K

    count, damage = (a.sum(axis=1) for a in _class_shares(result, which, mode, row))
    if not count.any():
        return None
    edges = np.array(RANGE_EDGE_K, float)
    edges[-1] = edges[-2] + (edges[-2] - edges[-3])
    return edges, damage, count / count.sum()


def half_damage_k(edges, damage) -> float | None:
    """Swing above which half of the damage is done, on a straight line within its class.

    Examples
    --------
    >>> round(half_damage_k([0.0, 10.0, 20.0], [0.25, 0.75]), 6)
    13.333333
    """
    if not np.any(damage):
        return None
    total = np.concatenate([[0.0], np.cumsum(damage)]) / np.sum(damage)
    k = int(np.searchsorted(total, 0.5))
    return float(edges[k - 1] + (0.5 - total[k - 1]) / (total[k] - total[k - 1]) * (edges[k] - edges[k - 1]))


@styled
def damage_swing_figure(result) -> Figure:
    """Which swings do the damage of the worst chip of the two most pressing failure modes: by class, and added up from small to large."""
    labels = ("swing of the cycle, K", "share, %")
    parts = [(which, mode, rows[0], swing_shares(result, which, mode, rows[0])) for which, mode, rows in rows_by_mode(result)[:2]]
    parts = [part for part in parts if part[3] is not None]
    if not parts:
        return _note_figure("no cycles to weigh", *labels)
    figure = Figure(figsize=(9.6, 4.8), layout="constrained")
    axes = figure.subplots(2, len(parts), sharex="col", squeeze=False, gridspec_kw={"height_ratios": [1.2, 1.0]})
    for (up, low), (which, mode, row, found) in zip(axes.T, parts, strict=True):
        _swing_panels(up, low, *found, *_MODE_LOOKS[which % len(_MODE_LOOKS)])
        up.set_title(f"{row.chip}, {plain(mode.name, 32, 'failure mode')}")
        up.set_ylabel("smaller swings together, %")
        low.set_ylabel("damage in a class, %")
        low.set_xlabel(labels[0])
        _tested_swings((up, low), mode.model.tested_range)
    _stopped(result, figure)
    return figure


def _swing_panels(up, low, edges, damage, count, dark, pale, hatch):
    used = int(np.flatnonzero(count > 0.0)[-1]) + 1
    end = 1.03 * edges[used]
    x = np.append(edges[: used + 1], end)
    grown = np.concatenate([[0.0], 100.0 * np.cumsum(damage[:used]), [100.0 * damage.sum()]])
    cycles = np.concatenate([[0.0], 100.0 * np.cumsum(count[:used]), [100.0]])
    up.plot(x, cycles, color=GREY, lw=1.3, ls=(0, (4, 1.5)))
    k = min(int(np.searchsorted(cycles, 60.0)) + 1, used)
    up.annotate("number of cycles", (edges[k], cycles[k]), xytext=(8, -10), textcoords="offset points", color=GREY, weight="bold", va="top", fontsize=8)
    up.set_ylim(0.0, 108.0)
    low.bar(edges[:used], 100.0 * damage[:used], width=np.diff(edges[: used + 1]), align="edge", facecolor=pale, edgecolor=dark, linewidth=0.6, hatch=hatch)
    low.set_xlim(0.0, end)
    half = half_damage_k(edges, damage)
    if half is None:
        low.text(0.5, 0.5, "no damage worth naming", transform=low.transAxes, ha="center", va="center")
        low.set_ylim(0.0, 1.0)
        return
    up.plot(x, grown, color=dark, lw=1.6)
    up.plot([half], [50.0], marker="o", ms=5, color=dark, mec=PAPER)
    right = half < 0.6 * end
    up.annotate(f"half of the damage\nabove {half:.3g} K", (half, 50.0), xytext=(9 if right else -9, -5), textcoords="offset points", va="top",
                ha="left" if right else "right", fontsize=8)
    at = float(np.interp(22.0, grown, x))
    up.annotate("damage", (at, 22.0), xytext=(-7, 3), textcoords="offset points", ha="right", color=dark, weight="bold", fontsize=8)


def _tested_swings(axes, tested):
    if "range_k" not in tested:
        axes[1].text(0.01, 0.97, "no tested swings stated", transform=axes[1].transAxes, va="top", fontsize=8, style="italic")
        return
    a, b = tested["range_k"]
    end = axes[0].get_xlim()[1]
    for ax in axes:
        if a < end:
            ax.axvspan(a, min(b, end), facecolor=LIGHT_YELLOW, alpha=0.25, linewidth=0, zorder=0)
        for border in (a, b):
            if border < end:
                ax.axvline(border, color=YELLOW, lw=0.9, ls=(0, (6, 2)), zorder=1)
    where = (a, f"tested: {a:g} to {b:g} K", 4) if a < end else (0.0, f"tested from {a:g} K on: none of these swings", 4)
    axes[1].annotate(where[1], (where[0], 1.0), xycoords=("data", "axes fraction"), xytext=(where[2], -2), textcoords="offset points", va="top", fontsize=8,
                     color=YELLOW, bbox={"boxstyle": "square,pad=0.1", "fc": PAPER, "ec": "none", "alpha": 0.8})


# --- 6: lives ---------------------------------------------------------------------------
@styled
def life_figure(result) -> Figure:
    """Life of every chip under every failure mode, on a logarithmic axis.

    Filled: damage inside the tested range. Open: more than half of it outside.
    Diamond: the coefficient set states no tested range.
    """
    modes = rows_by_mode(result)
    if not modes:
        return _note_figure("no failure mode given: temperatures only", "life, years", "chip")
    target = result.study.spec.lifetime.target_years
    chips = result.history.chips
    lives = np.array([r.life_years for _, _, rows in modes for r in rows])
    finite = lives[np.isfinite(lives)]
    if finite.size == 0 and target is None:
        return _note_figure("no damage: every life is without end", "life, years", "chip")
    known = np.append(finite, [] if target is None else target)
    low = 0.6 * known.min()
    # lives beyond this are drawn at the edge: their exact size says nothing
    cap = min(2.0 * known.max(), max(1e4 * known.min(), 0.0 if target is None else 2.0 * target))
    n_cols = min(len(modes), 3)
    n_rows = math.ceil(len(modes) / n_cols)
    figure = Figure(figsize=(9.6, 0.7 + max(0.9 + 0.2 * len(chips), 2.4) * n_rows), layout="constrained")
    axes = figure.subplots(n_rows, n_cols, sharex=True, sharey=True, squeeze=False)
    for ax in axes.flat[len(modes):]:
        ax.remove()
    for ax, (which, mode, rows) in zip(axes.flat, modes, strict=False):
        dark, _, _ = _MODE_LOOKS[which % len(_MODE_LOOKS)]
        for row in rows:
            kind = trust(row, mode)
            y, beyond = chips.index(row.chip), row.life_years > cap
            ax.plot([min(row.life_years, cap)], [y], ls="", marker=">" if beyond else "D" if kind == "unstated" else "o", ms=5.5, mew=1.2, mec=dark,
                    mfc=dark if kind == "tested" else PAPER, clip_on=False, zorder=3)
            ax.annotate("no damage" if math.isinf(row.life_years) else life_words(row.life_years), (min(row.life_years, cap), y),
                        xytext=(7, 0), textcoords="offset points", va="center", fontsize=7.5, zorder=4,
                        bbox={"boxstyle": "square,pad=0.05", "fc": PAPER, "ec": "none"})
        if target is not None:
            ax.axvline(target, color=INK, lw=1.3, ls=(0, (7, 3)), zorder=2)
            ax.annotate(f"target {number(target)} years", (target, 1.0), xycoords=("data", "axes fraction"), xytext=(-3, 1), textcoords="offset points",
                        ha="right", va="bottom", fontsize=7.5)
        ax.set_title(plain(mode.name, 34, f"failure mode {which + 1}"), pad=14)
        ax.set_xscale("log")
        ax.set_xlabel("life, years (logarithmic)")
    axes.flat[0].set_xlim(low, cap * (cap / low) ** 0.22)
    wide = cap / low > 1e3
    axes.flat[0].xaxis.set_major_locator(LogLocator(subs=(1.0,) if wide else (1.0, 2.0, 5.0)))
    axes.flat[0].xaxis.set_major_formatter(FuncFormatter(lambda v, _: number(v, 3)))
    axes.flat[0].xaxis.set_minor_locator(NullLocator())
    axes.flat[0].xaxis.set_minor_formatter(NullFormatter())
    axes.flat[0].set_yticks(range(len(chips)), chips)
    axes.flat[0].set_ylim(len(chips) - 0.4, -0.6)
    for row in axes:
        row[0].set_ylabel("chip")
    keys = (("o", INK, "rests mostly on tested cycles"), ("o", PAPER, "rests mostly on cycles outside the tested range"), ("D", PAPER, "no tested range stated"))
    figure.legend(handles=[Line2D([], [], ls="", marker=m, mec=INK, mfc=f, mew=1.2, ms=5.5, label=w) for m, f, w in keys], loc="outside lower center", ncols=3,
                  handletextpad=0.1)
    _stopped(result, figure)
    return figure


# --- 7: losses -----------------------------------------------------------------------------
@styled
def cooling_figure(result) -> Figure:
    """Resistance of the sink over the mission, where it changed.

    Parameters
    ----------
    result : MissionResult

    Returns
    -------
    Figure
    """
    history, record = result.history, result.cooling
    unit, s = time_unit(history.duration_s)
    figure = Figure(figsize=(10.0, 3.0), layout="constrained")
    ax = figure.subplots()
    starts, edges = _columns(history)
    r = 1000.0 * history.r_sink_k_per_w
    low, high = np.minimum.reduceat(r, starts), np.maximum.reduceat(r, starts)
    x, top = _steps(edges / s, high)
    ax.fill_between(x, _steps(edges / s, low)[1], top, color=LIGHT_BLUE, lw=0)
    ax.plot(x, top, color=BLUE, lw=1.0)
    ax.set(xlim=(0.0, edges[-1] / s), xlabel=f"time from the start of the mission, {unit}", ylabel="sink surface to coolant, K/kW")
    ax.set_ylim(0.0, 1.08 * high.max())
    shown = sorted(record.used[:6], key=lambda u: u.state.r_th_k_per_w)
    heights = _spread([1000.0 * u.state.r_th_k_per_w / (1.08 * high.max()) for u in shown], 0.1)
    for one, height in zip(shown, heights):
        ax.text(1.01, height, f"{plain(one.state.words, 24)}: {_percent(one.time_s / history.duration_s)}", transform=ax.transAxes, va="center", fontsize=8, color=INK)
    ax.text(1.01, 1.04, "share of the time", transform=ax.transAxes, fontsize=8, color=GREY, style="italic")
    if len(record.used) > len(shown):
        ax.text(1.01, -0.12, f"and {len(record.used) - len(shown)} more levels", transform=ax.transAxes, va="center", fontsize=8, color=GREY)
    _stopped(result, figure)
    return figure


@styled
def loss_figure(result) -> Figure:
    """Mean loss of every chip over the mission, with its energy."""
    history = result.history
    mean = history.energy_j / history.duration_s
    joule, unit = (3.6e6, "kWh") if history.energy_j.max() >= 3.6e5 else (1e3, "kJ") if history.energy_j.max() >= 1e3 else (1.0, "J")
    pairs = result.study.module.chip_pairs()
    figure = Figure(figsize=(8.6 if len(pairs) < 3 else 9.6, 3.2 if len(pairs) < 3 else 4.2), layout="constrained")
    ax = figure.subplots()
    x = np.arange(6)
    pitch = {1: 0.5, 2: 0.48}.get(len(pairs), 0.86 / len(pairs))
    for number_of, pair in enumerate(pairs):
        offset = (number_of - 0.5 * (len(pairs) - 1)) * pitch
        chips = slice(6 * number_of, 6 * number_of + 6)
        dark, pale, hatch = (RED, LIGHT_RED, "////") if pair.is_diode else (BLUE, LIGHT_BLUE, "")
        ax.bar(x + offset, mean[chips], width=0.71 * pitch, facecolor=pale, edgecolor=dark, hatch=hatch, linewidth=0.8)
        for k, (w, e) in enumerate(zip(mean[chips], history.energy_j[chips] / joule, strict=True)):
            if len(pairs) < 3:
                words = f"{_three(w)} W\n{_three(e)} {unit}"
                words = f"{part_words(result.study.module, pair.place)}\n{words}" if k == 0 else words
            else:
                words = f"{pair.name} {_three(w)}" if k == 0 else _three(w)
            ax.annotate(words, (k + offset, w), xytext=(0, 2), textcoords="offset points", ha="center", va="bottom",
                        fontsize=7.5, color=dark, rotation=0 if len(pairs) < 3 else 90)
    ax.set_xticks(x, [c.split("-", 1)[1] for c in history.chips[:6]])
    ax.set_ylim(0.0, max(1.4 * mean.max(), 1e-6))
    ax.set_ylabel("mean loss over the mission, W")
    ax.set_xlabel("place in the bridge (phase, upper or lower); above the bars: mean loss" + (" and energy a mission" if len(pairs) < 3 else ", W; "
                  + ", ".join(f"{p.name} {part_words(result.study.module, p.place)}" for p in pairs)))
    ax.grid(axis="x", visible=False)
    ax.tick_params(axis="x", length=0)
    ax.yaxis.set_major_locator(MaxNLocator(5) if mean.max() > 0 else FixedLocator([0.0]))
    _stopped(result, figure)
    return figure


FIGURES = {
    "temperatures": temperature_figure,
    "hot-stretch": hot_stretch_figure,
    "life": life_figure,
    "damage-by-phase": damage_phase_figure,
    "damage-by-swing": damage_swing_figure,
    "cycle-map": cycle_figure,
    "losses": loss_figure,
    "cooling": cooling_figure,
}
_NEED_MODES = {"life", "damage-by-phase", "damage-by-swing", "cycle-map"}


def all_figures(result) -> dict[str, Figure]:
    """Every figure that the result has something for, by name.

    Parameters
    ----------
    result : MissionResult

    Returns
    -------
    dict of str to Figure
        In the order of the report. Without failure modes those about damage are left out, without changes that of the cooling.
    """
    return {name: draw(result) for name, draw in FIGURES.items()
            if (result.study.modes or name not in _NEED_MODES) and (result.cooling.n_changes or name != "cooling")}


def captions(result) -> dict[str, str]:
    """One or two sentences for each figure, with its numbers; they serve as alternative text too."""
    history = result.history
    hot = history.hottest
    unit, s = time_unit(history.duration_s)
    out = {
        "temperatures": f"Lowest to highest junction temperature of the hottest {' and the hottest '.join(k[0] for k in _kinds(result))} over the mission, with the case below and "
                        f"the coolant. The highest, {history.peak_c[hot]:.1f} °C, is that of {history.chips[hot]} at "
                        f"{number(history.peak_time_s[hot] / s)} {unit} in the phase ‘{history.phases[int(history.peak_phase_id[hot])]}’; "
                        f"the limit is {limit_c(result):g} °C. The lanes below say which phase of the duty runs when."
                        + ("" if np.unique(history.phase_id).size == len(history.phases) else " Phases too short for the width of the picture have no lane."),
        "hot-stretch": "The stretch around the highest temperature, every chip in its own panel, like chips in one row; "
                       "the band runs from the lowest to the highest temperature, the thin grey line follows the hottest chip of the same kind.",
        "losses": f"Mean loss of each chip. Together they turn {number(history.energy_j.sum() / 3.6e6)} kWh into heat in a mission.",
    }
    if result.cooling.n_changes:
        longest = result.cooling.used[0]
        out["cooling"] = (f"Resistance from the sink's surface to the coolant over the mission, {result.cooling.n_changes} changes; the longest level was "
                          f"‘{longest.state.words}’ with {number(1000.0 * longest.state.r_th_k_per_w)} K/kW.")
    ranked = rows_by_mode(result)
    if not ranked:
        return out
    _, mode, rows = ranked[0]
    worst = rows[0]
    life = "no damage is done" if worst.damage_per_mission == 0.0 else f"the shortest is {life_words(worst.life_years)} years ({worst.chip}, {mode.name})"
    target = result.study.spec.lifetime.target_years
    out["life"] = (f"Life of every chip under every failure mode: {life}. "
                   + ("" if target is None else f"The broken line is the target of {number(target)} years. ")
                   + "Open circles rest mostly on cycles outside the tested range; for diamonds no such range is stated.")
    out["damage-by-phase"] = ("Where the time goes and where the life goes: share of each phase in the mission's time and in the damage of the worst chip "
                              "of each failure mode." + (f" Only the {len(_MODE_LOOKS) - 1} failure modes with the shortest lives are drawn."
                                                         if len(ranked) >= len(_MODE_LOOKS) else ""))
    out["damage-by-swing"] = ("Damage by the swing of the cycles, in classes below and added up above, for the worst chip of "
                              + ("the failure mode." if len(ranked) == 1 else "the two failure modes with the shortest lives.") + _halves(result, ranked[:2]))
    out["cycle-map"] = ("Cycles by swing and mean temperature, for the same chips. Grey squares: how many a mission. "
                        "Circles: their share of the damage, larger for more, in the shades of the scale. The broken outline holds the cycles that were tested.")
    return out


def _halves(result, ranked):
    out = ""
    for which, mode, rows in ranked:
        found = swing_shares(result, which, mode, rows[0])
        half = None if found is None else half_damage_k(found[0], found[1])
        if half is not None:
            out += f" Half of the damage to {rows[0].chip} ({mode.name}) comes from swings above {half:.3g} K."
    return out
