"""A power module in pictures and words: on-state curves, energies, and how the losses of a leg divide.

Temperatures are told apart by shade, by the shape of the marks and by the name at the end
of each line; drawn lines go through the points of the data sheet, dotted ones are extensions.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from matplotlib.colors import to_hex, to_rgb
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from matplotlib.textpath import TextPath
from matplotlib.ticker import MaxNLocator

from ..checks import require_range
from ..device import (
    PowerModule,
    gate_drive_power_w,
    gate_peak_current_a,
    on_state_crossing_a,
    on_state_voltage_v,
    switching_energy_j,
    temperature_coefficient_v_per_k,
)
from ..errors import RangeError
from ..losses import Modulation, leg_losses_w
from .figures import BLUE, GREY, INK, LIGHT_BLUE, LIGHT_RED, LIGHT_YELLOW, PAPER, RED, YELLOW, _spread, part_words, plain, styled
from .text import number
from .text import one_line as _line

#: Marks of the temperatures from cold on; the hottest is filled.
_MARKS = ("o", "s", "^", "D", "v", "P")
_DOTTED, _BROKEN = (0, (1, 1.6)), (0, (5, 2.5))
#: Edge and face of the chips in stacked losses; a second pair of a kind is dark where the first is pale.
_CHIP_LOOKS = {"S": (BLUE, LIGHT_BLUE), "SO": (BLUE, LIGHT_BLUE), "SI": (LIGHT_BLUE, BLUE), "D": (RED, LIGHT_RED), "DO": (RED, LIGHT_RED),
               "DI": (LIGHT_RED, RED), "DC": (YELLOW, LIGHT_YELLOW)}
_DRAWN = 240
_SMALL = 7.5
#: Bands that never reach this share of the losses are left out of the stack's names.
_SLIGHT = 5e-4


def _layout():
    """Room at the edges for text that comes out wider at another resolution than the one it was laid out for."""
    return ConstrainedLayoutEngine(w_pad=0.09, h_pad=0.05)


# --- words ------------------------------------------------------------------------
def _part_words(module, part) -> str:
    """What a section of the module file is called here."""
    if module.kind == "mosfet" and part == "diode":
        return "body diode"
    return part_words(module, part)


def _on_state_words(module, place) -> str:
    part, what = place.split(".")
    words = _part_words(module, part)
    if what == "reverse":
        return f"{words}, source to drain, gate on"
    if module.kind == "mosfet" and part == "switch":
        return f"{words}, drain to source"
    if module.kind == "reverse-conducting-igbt":
        return "chip forwards (switch)" if part == "switch" else "chip backwards (diode)"
    return words


def _energy_words(module, place) -> str:
    part, what = place.split(".")
    return f"{_part_words(module, part)}, {what.replace('_', '-')}"


@dataclass(frozen=True)
class Sharing:
    """How the coldest and the hottest on-state curve lie to each other inside their common points.

    Attributes
    ----------
    crossing_a : float or None
        :func:`mission.device.on_state_crossing_a` [A].
    hot_carries : str
        What a hot chip carries beside cold ones: 'more' (below a crossing only, if there is one), 'less' everywhere,
        'alike' where both curves are the same, 'mixed' where they change places in another way.
    """

    crossing_a: float | None
    hot_carries: str


def sharing(curves) -> Sharing:
    """What the on-state curves say about parallel chips of different temperature.

    Examples
    --------
    >>> from mission.device import load_module
    >>> s = sharing(load_module("heron-300").switch.on_state)
    >>> round(s.crossing_a, 1), s.hot_carries
    (112.5, 'more')
    >>> sharing(load_module("swift-400").switch.on_state)
    Sharing(crossing_a=None, hot_carries='less')
    """
    crossing = on_state_crossing_a(curves)
    first, last = curves.current_data_a
    _, current, values = curves.on_grid()
    gap = values[-1] - values[0]
    inside = (current >= first) & (current <= last)
    size = np.abs(gap[inside]).max(initial=0.0)
    slight = 0.01 * size  # a digitised curve trembles by more than nothing
    if size == 0.0:
        return Sharing(None, "alike")
    below, above = inside.copy(), inside.copy()
    if crossing is not None:
        below, above = inside & (current < crossing), inside & (current > crossing)
        regular = (gap[below] <= slight).all() and (gap[above] >= -slight).all()
        return Sharing(crossing, "more" if regular else "mixed")
    if (gap[inside] >= -slight).all():
        return Sharing(None, "less")
    return Sharing(None, "more" if (gap[inside] <= slight).all() else "mixed")


def _sharing_lines(curves) -> list[str]:
    """The same in a few short lines."""
    found = sharing(curves)
    if found.hot_carries == "alike":
        return ["coldest and hottest curve", "are the same"]
    if found.crossing_a is None:
        if found.hot_carries == "mixed":
            return ["the hotter curve does not", "stay on one side"]
        return ["no crossing inside the data:", f"a hot chip carries {found.hot_carries}", "at every current"]
    at = number(found.crossing_a, 3)
    if found.hot_carries == "mixed":
        return ["curves cross more than once,", f"for the last time at {at} A"]
    return [f"curves cross at {at} A:", "below it a hot chip carries", "more, above it less"]


def _sharing_words(curves, degree="degC") -> str:
    found = sharing(curves)
    if found.crossing_a is None or found.hot_carries == "mixed":
        return " ".join(_sharing_lines(curves))
    cold, hot = curves.t_vj_c[[0, -1]]
    return f"curves of {cold:g} and {hot:g} {degree} cross at {number(found.crossing_a, 3)} A: below it a hot chip carries more, above it less"


# --- parts of a drawing --------------------------------------------------------------
def _shades(dark, pale, n):
    """Pale for the coldest to dark for the hottest."""
    a, b = np.array(to_rgb(pale)), np.array(to_rgb(dark))
    return [to_hex(a + (b - a) * (k / max(n - 1, 1))) for k in range(n)]


def _looks(n, dark, pale):
    """Line and mark of each temperature."""
    out = []
    for k, colour in enumerate(_shades(dark, pale, n)):
        hottest = k == n - 1
        out.append({"color": colour, "marker": _MARKS[k % len(_MARKS)], "ms": 3.4, "mew": 0.9, "mec": colour, "mfc": colour if hottest else PAPER})
    return out


def _end_labels(ax, entries, gap):
    """Names right of the axes at the height of the lines' ends, each with its mark."""
    y0, y1 = ax.get_ylim()
    at = _spread([(y - y0) / (y1 - y0) for y, _, _ in entries], gap)
    for (_, words, look), y in zip(entries, at, strict=True):
        ax.plot([1.025, 1.05, 1.075], [y] * 3, transform=ax.transAxes, clip_on=False, lw=1.2, markevery=[1], **look)
        ax.text(1.09, y, words, transform=ax.transAxes, va="center", fontsize=_SMALL)


def _clear_spot(curves, limits, wide, high):
    """Corner of the axes whose text box of a size (in shares of the axes) stays farthest from the curves: x, y, ha, va."""
    (x0, x1), (y0, y1) = limits
    best = None
    for ha, va in (("right", "bottom"), ("left", "top"), ("right", "top"), ("left", "bottom")):
        left = 0.03 if ha == "left" else 0.98 - wide
        low = 0.04 if va == "bottom" else 0.97 - high
        room = 1.0
        for x, y in curves:
            fx = (np.asarray(x, float) - x0) / (x1 - x0)
            at = np.linspace(max(left - 0.02, fx[0]), min(left + wide + 0.02, fx[-1]), 40)
            fy = (np.interp(at, fx, y) - y0) / (y1 - y0)
            room = min(room, float(np.maximum(low - fy, fy - (low + high)).min()))
        if best is None or room > best[0] + 0.02:
            best = (room, 0.03 if ha == "left" else 0.98, 0.04 if va == "bottom" else 0.97, ha, va)
    return best[1:]


def _point_note(ax, curves, point, lines, size_in):
    """Text in the emptiest corner, with a thin line to the point it speaks of."""
    wide = (max(TextPath((0, 0), line, size=_SMALL).get_extents().width for line in lines) + 6.0) / 72.0 / size_in[0]
    high = (len(lines) * 1.22 * _SMALL + 2.0) / 72.0 / size_in[1]
    x, y, ha, va = _clear_spot(curves, (ax.get_xlim(), ax.get_ylim()), wide, high)
    words = "\n".join(lines)
    box = {"boxstyle": "square,pad=0.12", "fc": PAPER, "ec": "none", "alpha": 0.85}
    if point is None:
        ax.text(x, y, words, transform=ax.transAxes, ha=ha, va=va, fontsize=_SMALL, bbox=box)
        return
    anchor = (x - (0.5 * wide if ha == "right" else -0.5 * wide), y + (high if va == "bottom" else -high))
    ax.annotate("", point, xytext=anchor, textcoords="axes fraction",
                arrowprops={"arrowstyle": "-", "color": INK, "lw": 0.7, "shrinkA": 1.0, "shrinkB": 4.0})
    ax.text(x, y, words, transform=ax.transAxes, ha=ha, va=va, fontsize=_SMALL, bbox=box)
    ax.plot(*[[v] for v in point], ls="", marker="o", ms=6.5, mfc="none", mec=INK, mew=1.1, zorder=5)


def _curve_lines(ax, curves, read, scale, end_a, looks):
    """Draw curves through their points, dotted where extended; returns what was drawn as (x, y) with the ends."""
    drawn = []
    for one, look in zip(curves.points, looks, strict=True):
        first, last = one.current_a[0], one.current_a[-1]
        ax.plot(one.current_a, scale * np.array(one.values), lw=1.3, zorder=3, clip_on=False, **look)
        for a, b in ((0.0, first), (last, end_a)):
            if b > a:
                x = np.linspace(a, b, _DRAWN)
                ax.plot(x, scale * read(curves, x, one.t_vj_c), color=look["color"], lw=1.3, ls=_DOTTED, zorder=2)
        x = np.unique(np.concatenate([np.linspace(0.0, max(end_a, last), _DRAWN), one.current_a]))
        drawn.append((x, scale * read(curves, x, one.t_vj_c)))
    return drawn


def _current_axis(ax, module, end_a):
    r = module.ratings
    ax.set_xlim(0.0, end_a)
    ax.xaxis.set_major_locator(_even(5))
    ax.plot([r.i_nominal_a], [0.0], transform=ax.get_xaxis_transform(), marker="^", ms=5, color=INK, clip_on=False, zorder=6, ls="")
    ax.set_xlabel(f"current, A (▴ nominal {r.i_nominal_a:g} A)")


def _end_a(module, curves):
    return max(module.ratings.i_peak_repetitive_a, max(c.current_a[-1] for c in curves.points))


def _extended(module, every):
    return any(c.current_a[0] > 0.0 or c.current_a[-1] < _end_a(module, curves) for curves in every.values() for c in curves.points)


def _key(module, every, *more) -> str:
    """What the kinds of line mean, as far as there are any."""
    dotted = "dotted: extended in a straight line beyond the points" if _extended(module, every) else ""
    marks = "marks: points of the data sheet"
    if not all(c.curve for c in every.values()):
        marks += ", ends of the lines where only straight-line parameters are given"
    return "; ".join(w for w in (marks, dotted, *more) if w)


def _headline(figure, *parts):
    figure.suptitle("\n".join(parts), fontsize=8.5, x=0.01, ha="left")


def _colours(part):
    return (BLUE, LIGHT_BLUE) if part.endswith("switch") else (RED, LIGHT_RED)


# --- 1: on-state ------------------------------------------------------------------------
@styled
def characteristic_figure(module: PowerModule) -> Figure:
    """On-state voltage over current, one panel for each set of curves, with the crossing of cold and hot.

    Parameters
    ----------
    module : PowerModule

    Returns
    -------
    Figure
        Straight-line parameters stand beside the points as thin broken lines where the file has both.
    """
    every = module.on_state_curves()
    columns = 3 if len(every) in (3, 5, 6) else 2
    rows = math.ceil(len(every) / columns)
    size_in = (9.6 / columns - 1.1, 2.5 if columns == 3 else 2.7)
    figure = Figure(figsize=(9.6, 0.5 + rows * (size_in[1] + 0.75)), layout=_layout())
    axes = figure.subplots(rows, columns, squeeze=False)
    for ax in axes.flat[len(every):]:
        ax.remove()
    for ax, (place, curves) in zip(axes.flat, every.items(), strict=False):
        _on_state_panel(ax, module, place, curves, size_in)
    beside = "thin broken: straight-line parameters" if any(c.line and c.curve for c in every.values()) else ""
    _headline(figure, f"{plain(module.name, 60, 'module')}: on-state voltage by junction temperature", _key(module, every, beside))
    return figure


def _on_state_panel(ax, module, place, curves, size_in):
    end = _end_a(module, curves)
    looks = _looks(len(curves.points), *_colours(place.split(".")[0]))
    drawn = _curve_lines(ax, curves, on_state_voltage_v, 1.0, end, looks)
    lines = []
    if curves.curve:
        shades = dict(zip(curves.t_vj_c, looks, strict=True))
        for one in curves.line:
            x = np.array([0.0, one.current_end_a])
            nearest = min(shades, key=lambda t: abs(t - one.t_vj_c))
            ax.plot(x, one.v0_v + one.r_ohm * x, color=shades[nearest]["color"], lw=0.9, ls=_BROKEN, zorder=2)
            lines.append((x, one.v0_v + one.r_ohm * x))
    top = max(y.max() for _, y in drawn + lines)
    ax.set_ylim(0.0, 1.06 * top)
    _current_axis(ax, module, end)
    ax.yaxis.set_major_locator(_even(6))
    ax.set_ylabel("on-state voltage, V")
    ax.set_title(_on_state_words(module, place) + ("" if curves.curve else ", straight-line parameters only"))
    _end_labels(ax, [(y[-1], f"{t:g} °C", look) for (_, y), t, look in zip(drawn, curves.t_vj_c, looks, strict=True)], 0.14 / size_in[1])
    crossing = on_state_crossing_a(curves)
    point = None if crossing is None else (crossing, float(on_state_voltage_v(curves, crossing, curves.t_vj_c[-1])))
    _point_note(ax, drawn + lines, point, _sharing_lines(curves), size_in)


# --- 2: energies ---------------------------------------------------------------------------
@styled
def energy_figure(module: PowerModule) -> Figure:
    """Switching energies over current by temperature, and over the gate resistor where the file says how they depend on it.

    Parameters
    ----------
    module : PowerModule

    Returns
    -------
    Figure
        Energies are those of the file: at its reference voltage and with the gate resistor of its curves.
    """
    every = module.energy_curves()
    places = list(every)
    columns = 2 if len(places) == 2 else 3
    grid, heights = [], []
    for k in range(0, len(places), columns):
        row = places[k:k + columns]
        grid.append([(p, False) for p in row])
        heights.append(2.3)
        if any(every[p].gate_resistor is not None for p in row):
            grid.append([(p, True) for p in row])
            heights.append(1.45)
    figure = Figure(figsize=(9.6, 0.5 + sum(heights) + 0.72 * len(heights)), layout=_layout())
    axes = figure.subplots(len(grid), columns, squeeze=False, gridspec_kw={"height_ratios": heights})
    width = 9.6 / columns - 1.1
    for axes_row, row, high in zip(axes, grid, heights, strict=True):
        for ax in axes_row[len(row):]:
            ax.remove()
        for ax, (place, resistor) in zip(axes_row, row, strict=False):
            if resistor and every[place].gate_resistor is None:
                ax.remove()
            elif resistor:
                _resistor_panel(ax, module, place, every[place], (width, high))
            else:
                _energy_panel(ax, module, place, every[place], high)
    none = [name for name in ("diode", "inner_diode", "clamp_diode") if getattr(module, name) is not None and getattr(module, name).recovery is None]
    without = f"no recovery energy: {', '.join(_part_words(module, n) for n in none)} (silicon carbide Schottky)" if none else ""
    _headline(figure, f"{plain(module.name, 60, 'module')}: energy of one switching event by junction temperature", _key(module, every, without))
    return figure


def _curve_resistor_ohm(module, place, curves):
    """Resistor that the curves belong to."""
    return module.gate_resistor_ohm(place) if curves.gate_resistor is None else curves.gate_resistor.r_ref_ohm


def _energy_panel(ax, module, place, curves, high):
    end = _end_a(module, curves)
    looks = _looks(len(curves.points), *_colours(place.split(".")[0]))
    drawn = _curve_lines(ax, curves, switching_energy_j, 1e3, end, looks)
    ax.set_ylim(0.0, 1.06 * max(max(y.max() for _, y in drawn), 1e-9))
    _current_axis(ax, module, end)
    ax.yaxis.set_major_locator(_even(6))
    ax.set_ylabel("energy, mJ")
    ax.set_title(f"{_energy_words(module, place)}\nat {curves.v_ref_v:g} V, gate resistor {_curve_resistor_ohm(module, place, curves):g} Ω")
    _end_labels(ax, [(y[-1], f"{t:g} °C", look) for (_, y), t, look in zip(drawn, curves.t_vj_c, looks, strict=True)], 0.14 / high)


def _resistor_panel(ax, module, place, curves, size_in):
    table = curves.gate_resistor
    dark = _colours(place.split(".")[0])[0]
    r, e = np.array(table.r_ohm), 1e3 * np.array(table.energy_j)
    ax.plot(r, e, color=dark, lw=1.3, marker="o", ms=3.2, mfc=PAPER, mec=dark, mew=0.9)
    used = module.gate_resistor_ohm(place)
    at_ref = float(np.interp(table.r_ref_ohm, r, e))
    here = table.factor(used) * at_ref
    ax.set_xlim(0.0, 1.04 * r[-1])
    ax.set_ylim(0.0, 1.12 * e.max())
    ax.set_xlabel("external gate resistor, Ω")
    ax.set_ylabel("energy, mJ")
    ax.xaxis.set_major_locator(_even(6))
    ax.yaxis.set_major_locator(_even(4))
    lines = [f"in use: {used:g} Ω, {number(here, 3)} mJ"]
    if used != table.r_ref_ohm:
        lines.append(f"curves above × {number(table.factor(used), 3)}")
        ax.plot([table.r_ref_ohm], [at_ref], ls="", marker="s", ms=5, mfc=PAPER, mec=INK, mew=1.1, zorder=4)
        lines.append(f"□ curves above: {table.r_ref_ohm:g} Ω")
    _point_note(ax, [(r, e)], (used, here), lines, size_in)


# --- 3: how the losses divide ------------------------------------------------------------------
@dataclass(frozen=True)
class LossBand:
    """One part of a leg's losses.

    Attributes
    ----------
    words : str
        Chip and cause, e.g. 'switch, conduction'.
    edge, face, hatch : str
        Look.
    upper_w, lower_w : ndarray, shape (n,)
        Of the upper and the lower chip of the leg [W].
    """

    words: str
    edge: str
    face: str
    hatch: str
    upper_w: np.ndarray
    lower_w: np.ndarray

    @property
    def leg_w(self) -> np.ndarray:
        """Both together [W]."""
        return self.upper_w + self.lower_w


def loss_bands(module: PowerModule, losses) -> list[LossBand]:
    """The losses of a leg by kind of chip and by cause, in the order of the stack.

    Parameters
    ----------
    module : PowerModule
    losses : LegLosses
        Of this module.
    """
    out = []
    for k, pair in enumerate(module.chip_pairs()):
        edge, face = _CHIP_LOOKS[pair.name]
        words = "chip" if module.one_chip else _part_words(module, pair.place)
        for cause, watts, hatch in (("conduction", losses.conduction_w, ""), ("switching", losses.switching_w, 5 * "\\")):
            out.append(LossBand(f"{words}, {cause}", edge, face, hatch, watts[2 * k], watts[2 * k + 1]))
    return out


@dataclass(frozen=True)
class _Point:
    """What the three panels have in common."""

    modulation: Modulation
    current_a: float
    fsw_hz: float
    fixed: dict

    def bands(self, module, **other):
        """Bands with something else than the common values."""
        modulation = other.pop("modulation", self.modulation)
        given = {"i_peak_a": math.sqrt(2.0) * self.current_a, "switching_frequency_hz": self.fsw_hz, **self.fixed, **other}
        return loss_bands(module, leg_losses_w(module, modulation, **given))


@styled
def loss_split_figure(module: PowerModule, *, modulation: Modulation, dc_voltage_v: float, switching_frequency_hz: float,
                      current_a_rms: float | None = None, mod_index: float = 0.8, power_factor: float = 0.85, t_vj_c: float | None = None,
                      dead_time_s: float = 0.0, dead_time_compensated: bool = False, r_gate_on_ohm: float | None = None,
                      r_gate_off_ohm: float | None = None) -> Figure:
    """Losses of one leg by kind of chip and by cause: over current, over switching frequency, and by modulation.

    Parameters
    ----------
    module : PowerModule
    modulation : Modulation
    dc_voltage_v : float
        Whole DC voltage, also of a three-level leg [V].
    switching_frequency_hz : float
    current_a_rms : float, optional
        Phase current [A]; default the nominal current as its peak.
    mod_index : float
        Fundamental peak phase voltage over half the DC voltage.
    power_factor : float
        -1 to 1, the current lagging; negative when generating.
    t_vj_c : float, optional
        Junction temperature of all chips [degC]; default 125, or the hottest on-state curve if that is colder.
    dead_time_s, dead_time_compensated, r_gate_on_ohm, r_gate_off_ohm
        As for :func:`mission.losses.leg_losses_w`.

    Returns
    -------
    Figure

    Raises
    ------
    RangeError
        A value outside its range, a modulation index beyond the linear range, a DC voltage that the chips do not block.
    """
    point = _checked_point(module, modulation, dc_voltage_v, switching_frequency_hz, current_a_rms, mod_index, power_factor, t_vj_c,
                           {"dead_time_s": dead_time_s, "dead_time_compensated": dead_time_compensated, "r_gate_on_ohm": r_gate_on_ohm,
                            "r_gate_off_ohm": r_gate_off_ohm})
    here = point.bands(module)
    figure = Figure(figsize=(9.6, 7.0), layout=_layout())
    top, bottom = figure.subfigures(2, 1, height_ratios=[3.0, 3.2])
    over_current, over_frequency = top.subplots(1, 2)
    by_modulation = bottom.subplots()
    i_words, f_words = f"{number(point.current_a, 3)} A", f"{number(point.fsw_hz / 1e3, 3)} kHz"
    end = max(module.ratings.i_peak_repetitive_a / math.sqrt(2.0), 1.1 * point.current_a)
    amps = np.linspace(0.0, end, 61)
    swept = point.bands(module, i_peak_a=math.sqrt(2.0) * amps)
    total = float(sum(b.leg_w[0] for b in here))
    _stack(over_current, amps, swept)
    _point_line(over_current, point.current_a, i_words)
    _stack_labels(over_current, swept, [number(float(b.leg_w[0]), 3) for b in here], f"W at {i_words}, in all {number(total, 3)}")
    over_current.set_xlabel("phase current, A rms")
    over_current.set_title("over current")
    hertz = np.linspace(0.0, max(2.0 * point.fsw_hz, 1000.0), 41)
    swept = point.bands(module, switching_frequency_hz=hertz)
    _stack(over_frequency, hertz / 1e3, swept)
    _point_line(over_frequency, point.fsw_hz / 1e3, f_words)
    _stack_labels(over_frequency, swept, [f"{100.0 * float(b.leg_w[0]) / total:.0f} %" if total > 0.0 else "-" for b in here], f"share at {f_words}")
    over_frequency.set_xlabel("switching frequency, kHz")
    over_frequency.set_title("over switching frequency")
    for ax in (over_current, over_frequency):
        ax.set_ylabel("losses of one leg, W")
        ax.xaxis.set_major_locator(_even(6))
        ax.yaxis.set_major_locator(_even(6))
    _modulation_bars(by_modulation, module, point, float(mod_index))
    t = point.fixed["t_vj_c"]
    dead = f", dead time {1e6 * dead_time_s:g} µs{' compensated' if dead_time_compensated else ''}" if dead_time_s else ""
    gate = "".join(f", {w} gate resistor {r:g} Ω" for w, r in (("turn-on", r_gate_on_ohm), ("turn-off", r_gate_off_ohm)) if r is not None)
    _headline(figure, f"{plain(module.name, 60, 'module')}: losses of one leg by chip and cause; hatched: switching",
              f"{point.modulation.value}, {i_words} rms, {f_words}, link {dc_voltage_v:g} V, modulation index {mod_index:g}, "
              f"power factor {power_factor:g}, junctions {t:g} °C{dead}{gate}")
    return figure


def _checked_point(module, modulation, dc_voltage_v, switching_frequency_hz, current_a_rms, mod_index, power_factor, t_vj_c, more):
    modulation = Modulation(modulation)
    v = float(require_range("dc_voltage_v", dc_voltage_v, low=0.0, low_open=True, unit="V"))
    blocks = module.v_dc_limit_v
    if v >= blocks:
        raise RangeError("dc_voltage_v", f"{v:g} V", f"below {blocks:g} V, what {module.name} blocks", "lower it, or choose another module")
    fsw = float(require_range("switching_frequency_hz", switching_frequency_hz, low=0.0, unit="Hz"))
    current = module.ratings.i_nominal_a / math.sqrt(2.0) if current_a_rms is None else current_a_rms
    current = float(require_range("current_a_rms", current, low=0.0, unit="A"))
    require_range("mod_index", mod_index, low=0.0, high=modulation.mod_index_max * (1.0 + 1e-9))
    cos_phi = float(require_range("power_factor", power_factor, low=-1.0, high=1.0))
    hottest = min(float(c.t_vj_c[-1]) for c in module.on_state_curves().values())
    t = float(require_range("t_vj_c", min(125.0, hottest) if t_vj_c is None else t_vj_c, unit="degC"))
    return _Point(modulation, current, fsw, {"mod_index": mod_index, "phi_rad": math.acos(cos_phi), "t_vj_c": t, "v_dc_v": v, **more})


def _stack(ax, x, bands):
    low = np.zeros_like(x)
    for band in bands:
        high = low + band.leg_w
        if (band.leg_w > 0.0).any():
            ax.fill_between(x, low, high, facecolor=band.face, edgecolor=band.edge, hatch=band.hatch, linewidth=0.5)
        low = high
    ax.set_xlim(x[0], x[-1])
    ax.set_ylim(0.0, 1.05 * max(float(low.max()), 1e-6))
    ax.plot(x, low, color=INK, lw=1.2)


def _even(most):
    """Ticks at round numbers."""
    return MaxNLocator(most, steps=[1, 2, 2.5, 5, 10])


def _point_line(ax, x, words):
    ax.axvline(x, color=INK, lw=1.0, ls=(0, (6, 2.5)), zorder=4)
    right = x > 0.7 * ax.get_xlim()[1]
    ax.annotate(words, (x, 0.97), xycoords=("data", "axes fraction"), xytext=(-4 if right else 4, 0), textcoords="offset points", va="top",
                ha="right" if right else "left", fontsize=8, bbox={"boxstyle": "square,pad=0.1", "fc": PAPER, "ec": "none", "alpha": 0.85})


def _stack_labels(ax, bands, values, head):
    """Names of the bands right of the axes, at the height where each ends, with a value each."""
    y1 = ax.get_ylim()[1]
    total = sum(b.leg_w for b in bands)
    most = float(total.max())
    low, entries = 0.0, []
    for band, value in zip(bands, values, strict=True):
        size = float(band.leg_w[-1])
        if (band.leg_w > _SLIGHT * most).any():
            entries.append(((low + 0.5 * size) / y1, band, value))
        low += size
    for y, (_, band, value) in zip(_spread([e[0] for e in entries], 0.062), entries, strict=True):
        ax.fill_between([1.022, 1.062], y - 0.019, y + 0.019, transform=ax.transAxes, clip_on=False, facecolor=band.face, edgecolor=band.edge,
                        hatch=band.hatch, linewidth=0.6)
        ax.text(1.075, y, f"{band.words}  {value}", transform=ax.transAxes, va="center", fontsize=_SMALL)
    ax.text(1.022, 1.03, head, transform=ax.transAxes, va="bottom", fontsize=_SMALL, color=GREY, style="italic")


def _modulation_bars(ax, module, point, mod_index):
    """Half a leg a bar; where upper and lower chips differ, one for each."""
    ends = []
    for y, modulation in enumerate(Modulation):
        if mod_index > modulation.mod_index_max * (1.0 + 1e-9):
            ax.annotate(f"modulation index {mod_index:g} is beyond its linear range", (0.0, y), xytext=(4, 0), textcoords="offset points",
                        va="center", fontsize=_SMALL, color=GREY, style="italic")
            continue
        bands = point.bands(module, modulation=modulation)
        whole = float(sum(b.leg_w[0] for b in bands))
        halves = [("", 0.0, 0.62, [0.5 * float(b.leg_w[0]) for b in bands])]
        if not modulation.half_wave_symmetric:
            halves = [("upper ", -0.21, 0.34, [float(b.upper_w[0]) for b in bands]), ("lower ", 0.21, 0.34, [float(b.lower_w[0]) for b in bands])]
        for words, shift, high, watts in halves:
            left = 0.0
            for band, w in zip(bands, watts, strict=True):
                if w > 0.0:
                    ax.barh(y + shift, w, left=left, height=high, facecolor=band.face, edgecolor=band.edge, hatch=band.hatch, linewidth=0.7)
                left += w
            ends.append(left)
            ax.annotate(f"{words}{number(left, 3)} W", (left, y + shift), xytext=(4, 0), textcoords="offset points", va="center", fontsize=_SMALL)
        ax.text(1.0, y, f"{number(whole, 3)} W", transform=ax.get_yaxis_transform(), va="center", ha="right", fontsize=_SMALL)
    ax.text(1.0, 1.03, "whole leg", transform=ax.transAxes, va="bottom", ha="right", fontsize=_SMALL, color=GREY, style="italic")
    ax.set_yticks(range(len(Modulation)), [f"▸ {m.value}" if m is point.modulation else m.value for m in Modulation])
    ax.set_ylim(len(Modulation) - 0.45, -0.55)
    ax.set_xlim(0.0, 1.3 * max(*ends, 1e-6))
    ax.set_xlabel("losses of half a leg (its upper or its lower chips), W")
    ax.set_ylabel("modulation (▸ in the panels above)")
    ax.set_title("by modulation, in the order and look of the bands above")
    ax.grid(axis="y", visible=False)
    ax.tick_params(axis="y", length=0)
    ax.xaxis.set_major_locator(_even(7))


# --- all of it -------------------------------------------------------------------------------------
def module_figures(module: PowerModule, *, modulation: Modulation, dc_voltage_v: float, switching_frequency_hz: float, **more) -> dict[str, Figure]:
    """The three pictures of a module, by name.

    Parameters
    ----------
    module : PowerModule
    modulation, dc_voltage_v, switching_frequency_hz, **more
        As for :func:`loss_split_figure`.
    """
    return {
        "on-state": characteristic_figure(module),
        "energies": energy_figure(module),
        "loss-split": loss_split_figure(module, modulation=modulation, dc_voltage_v=dc_voltage_v,
                                        switching_frequency_hz=switching_frequency_hz, **more),
    }


def module_captions(module: PowerModule) -> dict[str, str]:
    """A sentence or two for each picture, with its numbers; they serve as alternative text too."""
    on_state = module.on_state_curves()
    crossings = [f"{_on_state_words(module, place)}: {_sharing_words(curves, '°C')}" for place, curves in on_state.items()]
    beside = any(c.line and c.curve for c in on_state.values())
    i, place = module.ratings.i_nominal_a, "switch.turn_on"
    curves = module.energy_curves()[place]
    hot = float(curves.t_vj_c[-1])
    resistors = any(c.gate_resistor is not None for c in module.energy_curves().values())
    return {
        "on-state": "On-state voltage over current, one line for each junction temperature with the points of the data sheet as marks; "
                    "dotted lines are extensions. " + ("Thin broken lines are the straight-line parameters. " if beside else "")
                    + ". ".join(c[0].upper() + c[1:] for c in crossings) + ".",
        "energies": "Energy of one switching event over current, one line for each junction temperature, at the voltage and gate resistor "
                    f"in the titles. At {i:g} A and {hot:g} °C turning on costs {number(1e3 * float(switching_energy_j(curves, i, hot)), 3)} mJ."
                    + (" The lower panels show how energies follow the external gate resistor, with the one in use marked." if resistors else ""),
        "loss-split": "Losses of one leg by kind of chip and by cause, hatched for switching: over the phase current, over the switching "
                      "frequency, and for every modulation as half a leg; where a modulation loads upper and lower chips differently they are "
                      "shown apart.",
    }


def write_module(module: PowerModule, folder, *, modulation: Modulation, dc_voltage_v: float, switching_frequency_hz: float, **more) -> list[Path]:
    """Write the pictures as PNG and SVG, and module.txt.

    Parameters
    ----------
    module : PowerModule
    folder : path-like
        Made if it is not there.
    modulation, dc_voltage_v, switching_frequency_hz, **more
        As for :func:`loss_split_figure`.

    Returns
    -------
    list of Path
    """
    from .folder import ResultFolder

    figures = module_figures(module, modulation=modulation, dc_voltage_v=dc_voltage_v, switching_frequency_hz=switching_frequency_hz, **more)
    target = ResultFolder(folder)
    return [*target.figures(figures)[0], target.text("module.txt", module_text(module) + "\n")]


# --- text ----------------------------------------------------------------------------------------------
_KIND_WORDS = {"igbt": "IGBT with diodes", "igbt-schottky": "IGBT with silicon carbide Schottky diodes",
               "reverse-conducting-igbt": "reverse-conducting IGBT (one chip is switch and diode)", "mosfet": "MOSFET (one chip with its body diode)"}


def module_text(module: PowerModule) -> str:
    """What a module is, for the terminal.

    Ratings; on-state voltages at nominal current with their temperature coefficient and crossing; straight-line
    parameters; energies at nominal current; gate drive; thermal resistances; notes.
    """
    r = module.ratings
    three = "" if module.arrangement == "six-pack" else "; three of them make the bridge"
    lines = [_line(module.name), f"  {_line(module.technology)}", f"  {_KIND_WORDS[module.kind]}, {module.arrangement}{three}",
             f"  ratings   {r.v_ces_v:g} V, {r.i_nominal_a:g} A nominal, {r.i_peak_repetitive_a:g} A repetitive peak, "
             f"junction {r.t_vj_op_min_c:g} to {r.t_vj_op_max_c:g} degC"]
    if r.t_vj_overload_c is not None:
        share = f"{100.0 * r.overload_share:g} % of the time"
        lines.append(f"            overload to {r.t_vj_overload_c:g} degC for at most {r.overload_longest_s:g} s, {share}")
    lines += ["", *_on_state_text(module), "", *_line_text(module), "", *_energy_text(module), "", *_gate_text(module), "", *_thermal_text(module)]
    lines += ["", "  to know:", *(f"  - {_line(n, 400)}" for n in module.notes or ("nothing stands out in the data",))]
    return "\n".join(lines)


def _on_state_text(module):
    i = module.ratings.i_nominal_a
    yield f"  on-state voltage at nominal current, {i:g} A"
    for place, curves in module.on_state_curves().items():
        volts = ", ".join(f"{float(on_state_voltage_v(curves, i, t)):.3g} V at {t:g} degC" for t in curves.t_vj_c)
        cold, hot = (float(t) for t in curves.t_vj_c[-2:])
        slope = 1e3 * float(temperature_coefficient_v_per_k(curves, i, hot))
        means = "a hot chip carries less" if slope > 0.01 else "a hot chip carries more" if slope < -0.01 else "temperature hardly matters"
        yield f"    {_on_state_words(module, place)}: {volts}"
        yield f"      {slope:+.2f} mV/K between {cold:g} and {hot:g} degC: there {means}"
        yield f"      {_sharing_words(curves)}"


def fitted_line(curves, i_nominal_a: float, t_vj_c: float) -> tuple[float, float]:
    """Straight line through the on-state voltages at half nominal and nominal current, for show only.

    Returns
    -------
    v0_v, r_ohm : float

    Examples
    --------
    >>> from mission.device import load_module
    >>> [round(v, 5) for v in fitted_line(load_module("heron-300").switch.on_state, 300.0, 25.0)]
    [1.028, 0.00224]
    """
    half, full = (float(on_state_voltage_v(curves, share * i_nominal_a, t_vj_c)) for share in (0.5, 1.0))
    slope = (full - half) / (0.5 * i_nominal_a)
    return full - slope * i_nominal_a, slope


def _line_text(module):
    i = module.ratings.i_nominal_a
    at = (0.25 * i, i)
    yield "  straight line V0 + r i; line and points at a quarter of nominal and at nominal current, V"
    yield f"    {'':<34} {'degC':>5} {'V0, V':>7} {'r, mohm':>8} {f'at {at[0]:g} A':>17} {f'at {at[1]:g} A':>17}"
    for place, curves in module.on_state_curves().items():
        given = [(one.t_vj_c, one.v0_v, one.r_ohm) for one in curves.line]
        fitted = [(float(t), *fitted_line(curves, i, float(t))) for t in curves.t_vj_c]
        for k, (t, v0, ohm) in enumerate(given or fitted):
            pairs = [f"{v0 + ohm * x:.3f} / {float(on_state_voltage_v(curves, x, t)):.3f}" for x in at]
            name = _on_state_words(module, place) if k == 0 else ""
            yield f"    {name:<34} {t:>5g} {v0:>7.3f} {1e3 * ohm:>8.3f} {pairs[0]:>17} {pairs[1]:>17}" + ("" if given else "  fit")
    if any(not c.line for c in module.on_state_curves().values()):
        yield f"    fit: drawn here through the points at {0.5 * i:g} and {i:g} A, for show only; losses are reckoned with the points"


def _energy_text(module):
    i = module.ratings.i_nominal_a
    yield f"  energies at {i:g} A"
    for place, curves in module.energy_curves().items():
        values = ", ".join(f"{number(1e3 * float(switching_energy_j(curves, i, t)), 3)} mJ at {t:g} degC" for t in curves.t_vj_c)
        ref = _curve_resistor_ohm(module, place, curves)
        yield f"    {_energy_words(module, place)}: {values} ({curves.v_ref_v:g} V, {ref:g} ohm; goes with V^{curves.voltage_exponent:g})"
        used = module.gate_resistor_ohm(place)
        if used != ref:
            yield f"      with the {used:g} ohm in use: times {number(curves.gate_resistor.factor(used), 3)}"
    for name in ("diode", "inner_diode", "clamp_diode"):
        part = getattr(module, name)
        if part is not None and part.recovery is None:
            yield f"    {_part_words(module, name)}: no recovery energy (silicon carbide Schottky)"


def _gate_text(module):
    g = module.gate
    per_khz = float(gate_drive_power_w(g.charge_c, g.v_on_v, g.v_off_v, 1000.0))
    on, off = (float(gate_peak_current_a(g.v_on_v, g.v_off_v, g.r_internal_ohm, ohm)) for ohm in (g.r_on_ohm, g.r_off_ohm))
    yield f"  gate of one switch: {1e6 * g.charge_c:.3g} µC from {g.v_off_v:g} to {g.v_on_v:g} V"
    yield f"    driver power {1e3 * per_khz:.3g} mW per kHz of switching frequency"
    yield (f"    peak current at most {on:.3g} A on ({g.r_on_ohm:g} ohm) and {off:.3g} A off ({g.r_off_ohm:g} ohm), "
           f"{g.r_internal_ohm:g} ohm inside the module included")


def _thermal_text(module):
    pairs = module.chip_pairs()
    yield f"  heat, junction to {pairs[0].thermal.reference}, of one chip position"
    for pair in pairs:
        name = "chip" if module.one_chip else _part_words(module, pair.place)
        if pair.thermal.layer:
            layers = ", ".join(f"{_line(layer.material, 30)} {layer.thickness_mm:g} mm" for layer in pair.thermal.layer)
            yield f"    {name}: layers {layers}"
            continue
        branches = " + ".join(f"{ohm:.3g} ({_time(tau)})" for ohm, tau in zip(pair.thermal.r_k_per_w, pair.thermal.tau_s, strict=True))
        yield f"    {name}: {sum(pair.thermal.r_k_per_w):.3g} K/W = {branches}"
    if module.plate is not None:
        layers = ", ".join(f"{_line(layer.material, 30)} {layer.thickness_mm:g} mm" for layer in module.plate.layer)
        yield f"    plate under {'all chips' if module.arrangement == 'six-pack' else 'the chips of a leg'}: {module.plate.width_mm:g} x {module.plate.length_mm:g} mm, {layers}"
    paste = module.case_to_sink
    if paste is None:
        yield "    case to sink: in the branches"
    elif paste.per == "module":
        yield f"    case to sink: {paste.r_th_k_per_w:g} K/W under the whole module"
    else:
        diode = "" if paste.r_th_diode_k_per_w is None else f", {paste.r_th_diode_k_per_w:g} K/W under a diode"
        yield f"    case to sink: {paste.r_th_switch_k_per_w:g} K/W under a {'chip' if module.one_chip else 'switch'}{diode}"


def _time(seconds):
    return f"{1e3 * seconds:.3g} ms" if seconds < 1.0 else f"{seconds:.3g} s"
