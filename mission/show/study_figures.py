"""Pictures that stand above a single run: largest currents of a module on its cooling, and results side by side."""

from __future__ import annotations


import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator

from .figures import BLUE, GREY, INK, LIGHT_BLUE, LIGHT_RED, PAPER, RED, plain, styled
from .tables import BEYOND_YEARS, life_words
from .text import number


@styled
def rating_figure(over_switching, over_output, *, title: str) -> Figure:
    """Largest current over switching frequency and over output frequency, down to standstill.

    Parameters
    ----------
    over_switching, over_output : sequence of Rating
        From :class:`mission.study.RatingBench`; the second may begin with the standstill.
    title : str
        What is rated, e.g. module and cooling.
    """
    figure = Figure(figsize=(9.6, 4.3), layout="constrained")
    left, right = figure.subplots(1, 2, sharey=True)
    khz = np.array([r.point.switching_frequency_hz for r in over_switching]) / 1e3
    _current_line(left, khz, over_switching)
    left.set_xscale("log")
    left.xaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    left.xaxis.set_major_formatter(FuncFormatter(lambda v, _: number(v, 3)))
    left.xaxis.set_minor_formatter(FuncFormatter(lambda v, _: ""))
    left.set_xlabel("switching frequency, kHz (logarithmic)")
    left.set_ylabel("largest phase current for ever, A rms")
    p = over_switching[0].point
    left.set_title(f"at {p.frequency_hz:g} Hz output")
    still = [r for r in over_output if r.point.frequency_hz == 0.0]
    turning = [r for r in over_output if r.point.frequency_hz > 0.0]
    hz = np.array([r.point.frequency_hz for r in turning])
    _current_line(right, hz, turning)
    right.set_xscale("log")
    right.xaxis.set_major_locator(LogLocator(subs=(1.0,)))
    right.xaxis.set_major_formatter(FuncFormatter(lambda v, _: number(v, 3)))
    right.set_xlabel("output frequency, Hz (logarithmic)")
    right.set_title(f"at {over_output[0].point.switching_frequency_hz / 1e3:g} kHz switching")
    if still:
        right.axhline(still[0].current_a, color=INK, lw=1.1, ls=(0, (7, 3)))
        right.annotate(f"standstill at its worst angle: {number(still[0].current_a, 3)} A", (0.99, still[0].current_a), xycoords=("axes fraction", "data"),
                       xytext=(0, -3), textcoords="offset points", ha="right", va="top", fontsize=8)
    top = max(r.current_a for r in (*over_switching, *over_output))
    left.set_ylim(0.0, 1.15 * max(top, 1e-6))
    left.yaxis.set_major_locator(MaxNLocator(6))
    figure.suptitle(f"{plain(title, 70, 'module')}: coolant {p.coolant_c:g} °C, link {p.dc_voltage_v:g} V, power factor {p.power_factor:g}; "
                    "○ limited by the peak current rating", fontsize=8.5, x=0.01, ha="left")
    return figure


def _kind(chip):
    """What limits, in a word: the kind of the hottest chip."""
    return {"S": "switch", "D": "diode", "SO": "outer switch", "SI": "inner switch", "DO": "outer diode", "DI": "inner diode",
            "DC": "clamp diode"}[chip.rsplit("-", 2)[0]]


def _current_line(ax, x, ratings):
    y = np.array([r.current_a for r in ratings])
    ax.plot(x, y, color=BLUE, lw=1.5)
    free = np.array([r.limited_by != "junction temperature" for r in ratings])
    ax.plot(x[~free], y[~free], ls="", marker="o", ms=4, color=BLUE, mec=BLUE)
    ax.plot(x[free], y[free], ls="", marker="o", ms=5, mfc=PAPER, mec=BLUE, mew=1.2)
    for k in (0, len(ratings) - 1):
        below = k > 0 and y[k] < y[k - 1]  # a falling line ends with its name under it
        ax.annotate(f"{number(y[k], 3)} A\n{_kind(ratings[k].chip)}", (x[k], y[k]), xytext=(-6, -6) if below else (0, 7), textcoords="offset points",
                    ha="left" if k == 0 else "right", va="top" if below else "bottom", fontsize=8, color=BLUE)


@styled
def comparison_figure(comparison) -> Figure:
    """Energy, highest temperature and shortest life of each side of a comparison."""
    sides = comparison.sides
    n = len(sides)
    figure = Figure(figsize=(9.6, 1.7 + 0.62 * n), layout="constrained")
    energy, heat, life = figure.subplots(1, 3, sharey=True)
    y = np.arange(n)
    switch = np.array([s.switch_energy_kwh for s in sides])
    diode = np.array([s.diode_energy_kwh for s in sides])
    energy.barh(y, switch, height=0.5, facecolor=LIGHT_BLUE, edgecolor=BLUE, linewidth=0.8)
    if diode.any():
        energy.barh(y, diode, left=switch, height=0.5, facecolor=LIGHT_RED, edgecolor=RED, hatch="////", linewidth=0.8)
    most = float((switch + diode).max())
    for k, s in enumerate(sides):
        energy.annotate(number(s.energy_kwh, 3), (s.energy_kwh, k), xytext=(4, 0), textcoords="offset points", va="center", fontsize=8)
    energy.set_xlim(0.0, 1.22 * most if most > 0 else 1.0)
    energy.set_xlabel("losses of a mission, kWh")
    energy.set_title("hatched: diodes", fontsize=8.5, weight="normal")
    for k, s in enumerate(sides):
        heat.plot([s.limit_c, s.limit_c], [k - 0.36, k + 0.36], color=INK, lw=1.4)
        heat.plot([s.peak_c], [k], ls="", marker="o", ms=6, mfc=BLUE if s.peak_c <= s.limit_c else PAPER, mec=BLUE, mew=1.4)
        heat.annotate(f"{s.peak_c:.0f} °C, {s.hottest}", (s.peak_c, k), xytext=(0, 8), textcoords="offset points", ha="center", va="bottom", fontsize=8)
    low, high = min(min(s.peak_c, s.limit_c) for s in sides), max(max(s.peak_c, s.limit_c) for s in sides)
    heat.set_xlim(low - 0.3 * max(high - low, 20.0), high + 0.3 * max(high - low, 20.0))
    heat.set_xlabel("highest junction, °C")
    heat.set_title("bar: limit; hollow: beyond it", fontsize=8.5, weight="normal")
    years = np.array([s.shortest_years for s in sides])
    known = np.isfinite(years) & (years < BEYOND_YEARS)
    if known.any():
        life.set_xscale("log")
        cap = 3.0 * years[known].max()
        drawn = np.where(known, years, cap)
        for k, s in enumerate(sides):
            if np.isnan(s.shortest_years):
                life.annotate("no failure mode", (years[known].min(), k), va="center", fontsize=8, color=GREY)
                continue
            life.plot([drawn[k]], [k], ls="", marker="o" if known[k] else ">", ms=6, mfc=BLUE if s.outside_share < 0.5 else PAPER, mec=BLUE, mew=1.4)
            life.annotate(f"{life_words(s.shortest_years)}", (drawn[k], k), xytext=(0, 8), textcoords="offset points", ha="center", va="bottom", fontsize=8)
        life.set_xlim(0.35 * years[known].min(), 3.0 * cap)
        life.xaxis.set_major_locator(LogLocator(subs=(1.0,) if cap > 100.0 * years[known].min() else (1.0, 2.0, 5.0)))
        life.xaxis.set_major_formatter(FuncFormatter(lambda v, _: number(v, 3)))
        life.xaxis.set_minor_formatter(FuncFormatter(lambda v, _: ""))
    life.set_xlabel("shortest life, years (logarithmic)")
    life.set_title("hollow: rests mostly on untested cycles", fontsize=8.5, weight="normal")
    energy.set_yticks(y, [plain(s.name, 24, f"side {k}") for k, s in enumerate(sides, 1)])
    energy.set_ylim(n - 0.35, -0.65)
    for ax in (energy, heat, life):
        ax.grid(axis="y", visible=False)
        ax.tick_params(axis="y", length=0)
    for ax in (energy, heat):
        ax.xaxis.set_major_locator(MaxNLocator(4))
    return figure


def comparison_text(comparison) -> str:
    """A table for the terminal, one column per side."""
    sides = comparison.sides
    width = max(14, *(min(len(s.name), 28) + 2 for s in sides))
    modes = list(dict.fromkeys(m for s in sides for m in s.life_years))
    rows = [("", [s.name[:28] for s in sides]),
            ("losses of a mission, kWh", [number(s.energy_kwh) for s in sides]),
            ("losses of a year, kWh", [number(s.energy_year_kwh) for s in sides]),
            ("  of the switches, kWh a mission", [number(s.switch_energy_kwh) for s in sides]),
            ("  of the diodes, kWh a mission", [number(s.diode_energy_kwh) for s in sides]),
            ("highest junction, degC", [f"{s.peak_c:.1f}" for s in sides]),
            ("  limit, degC", [f"{s.limit_c:g}" for s in sides]),
            ("  chip", [s.hottest for s in sides]),
            ("largest swing of a chip, K", [f"{s.largest_swing_k:.1f}" for s in sides]),
            ("loop gain", [f"{s.loop_gain:.2f}" for s in sides])]
    rows += [(f"life, years: {m}"[:38], [life_words(s.life_years[m]) if m in s.life_years else "-" for s in sides]) for m in modes]
    rows.append(("limits missed", [str(len(s.missed)) if s.missed else "none" for s in sides]))
    lines = [f"{what:<38}" + "".join(f"{v:>{width}}" for v in values) for what, values in rows]
    for s in sides:
        lines += [f"  {s.name} misses: {what}" for what in s.missed]
    if comparison.notes:
        lines += ["", "  they differ in more than the module:" if len({s.module for s in sides}) > 1 else "  they differ in:"] + [f"  - {n}" for n in comparison.notes]
    lines += ["", "  An estimate; verify on the real device. High voltage, stored energy and hot surfaces: take the usual precautions."]
    return "\n".join(lines)


def rating_frame(ratings):
    """One row per rated point."""
    import pandas as pd

    return pd.DataFrame.from_records([
        {"output_frequency_hz": r.point.frequency_hz, "switching_frequency_hz": r.point.switching_frequency_hz, "coolant_c": r.point.coolant_c,
         "dc_voltage_v": r.point.dc_voltage_v, "mod_index": r.point.modulation_index(), "power_factor": r.point.power_factor,
         "largest_current_a_rms": r.current_a, "limited_by": r.limited_by, "hottest_chip": r.chip, "t_vj_max_c": r.t_vj_max_c,
         "cooling": r.cooling} for r in ratings])


def rating_text(ratings, title: str) -> str:
    """A table for the terminal."""
    lines = [title, f"  {'output, Hz':>10} {'switching, Hz':>14} {'largest current, A rms':>24} {'junction, degC':>15}   limited by"]
    for r in ratings:
        lines.append(f"  {r.point.frequency_hz:>10g} {r.point.switching_frequency_hz:>14g} {r.current_a:>24.1f} {r.t_vj_max_c:>15.1f}   {r.limited_by} ({r.chip})"
                     + ("" if r.cooling == "as given" else f"; cooling {r.cooling}"))
    lines.append("  Held for ever, ripple included, without faults of the cooling; 0 Hz: standstill at its worst angle.")
    return "\n".join(lines)
