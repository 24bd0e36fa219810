"""Pictures of heat: impedance curves, measurements with their fit, structure functions, where two curves part, the drop through a stack."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, FuncFormatter, LogLocator, MaxNLocator, NullFormatter

from ..checks import require_range
from ..errors import InputError
from ..thermal.assembly import FullNetwork
from ..thermal.cooling import sink_path
from ..thermal.layers import StackLadder
from ..thermal.measured import MeasuredImpedance, Separation, StructureFunction
from ..thermal.modes import ReducedNetwork
from .figures import BLUE, GREY, INK, LIGHT_BLUE, LIGHT_RED, LIGHT_YELLOW, PAPER, RED, YELLOW, _spread, plain, styled
from .module_figures import _layout
from .text import number

_BOX = {"boxstyle": "square,pad=0.12", "fc": PAPER, "ec": "none", "alpha": 0.85}
_SOLID, _DASHED, _DOTTED = "-", (0, (5, 2)), (0, (1, 1.2))
#: Colour and dashes of lines that stand together: told apart in grey print too.
_LOOKS = ((BLUE, _SOLID), (RED, _DASHED), (YELLOW, (0, (6, 1.5, 1, 1.5))), (INK, _DOTTED), (LIGHT_BLUE, _DASHED), (LIGHT_RED, _SOLID))
_LEAST_SHARE = 1e-4


# --- helpers ------------------------------------------------------------------
def step_response_k_per_w(network: FullNetwork | ReducedNetwork, time_s, chip: int) -> np.ndarray:
    """Junction rises per watt in one chip, from either kind of network.

    Parameters
    ----------
    network : FullNetwork or ReducedNetwork
    time_s : array_like, shape (m,)
        Time since the step [s], >= 0.
    chip : int
        Heated chip, from 0.

    Returns
    -------
    ndarray, shape (m, n)
        [K/W].

    Raises
    ------
    InputError
        A chip that is not there.
    RangeError
        Negative time.
    """
    t = require_range("time_s", time_s, low=0.0, unit="s")
    if isinstance(chip, bool) or chip not in range(network.n_chips):
        raise InputError("chip", f"{chip!r}", f"0 to {network.n_chips - 1}", "chips count from 0")
    if isinstance(network, FullNetwork):
        return network.step_response_k_per_w(t, chip)
    t = t[:, None]
    shared = -np.expm1(-t * network.lam_shared_per_s) / network.lam_shared_per_s
    out = shared @ (network.c_shared * network.b_shared[:, chip]).T
    if network.lam_local_per_s.size:
        lam = network.lam_local_per_s[:, chip]
        out[:, chip] += (-np.expm1(-t * lam) / lam) @ network.rho_local[:, chip]
    return out


def _time_words(v, _=None):
    for size, unit in ((1e-6, "µs"), (1e-3, "ms"), (1.0, "s"), (1e3, "ks")):
        if v < 999.5 * size:
            return f"{number(v / size, 3)} {unit}"
    return f"{number(v / 1e3, 3)} ks"


def _log_axis(axis, words=lambda v, _: f"{v:g}".replace("-", "−")):
    low, high = axis.get_view_interval()
    decades = np.log10(high / low)
    axis.set_major_locator(LogLocator(subs=(1.0,) if decades > 1.7 else (1.0, 2.0, 5.0), numticks=20 if decades < 14 else 8))
    axis.set_major_formatter(FuncFormatter(words))
    axis.set_minor_formatter(NullFormatter())


def _right_labels(ax, entries, gap=0.07):
    """Names right of the axes at the height of the lines' ends, each with a piece of its line."""
    y0, y1 = ax.get_ylim()
    log = ax.get_yscale() == "log"
    share = [(np.log(y / y0) / np.log(y1 / y0)) if log else (y - y0) / (y1 - y0) for y, _, _ in entries]
    for (_, words, look), y in zip(entries, _spread(np.clip(share, 0.0, 1.0), gap), strict=True):
        ax.plot([1.01, 1.045], [y, y], transform=ax.transAxes, clip_on=False, lw=1.5, **look)
        ax.text(1.055, y, words, transform=ax.transAxes, va="center", fontsize=8)


def _names(names, n, word):
    names = [f"{word} {k + 1}" for k in range(n)] if names is None else list(names)
    if len(names) != n:
        raise InputError("names", f"{len(names)} names for {n} {word}s", "one for each")
    return [plain(x, 26, f"{word} {k}") for k, x in enumerate(names, 1)]


# --- 1: impedance -----------------------------------------------------------------
@styled
def impedance_figure(
    network: FullNetwork | ReducedNetwork,
    *,
    chip: int = 0,
    others: Sequence[int] | None = None,
    names=None,
    time_s: tuple[float, float] | None = None,
) -> Figure:
    """Self and mutual impedance over time, both axes logarithmic.

    Parameters
    ----------
    network : FullNetwork or ReducedNetwork
    chip : int
        Heated chip, from 0.
    others : sequence of int, optional
        Chips whose rise is drawn too, five at most; without it those that rise most in the end,
        one for each of five groups that rise alike.
    names : sequence of str, optional
        One for every chip of the network.
    time_s : (float, float), optional
        First and last time [s]; without it from where the chip has reached a thousandth of its rise to where all has settled.

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        Chips that are not there, names that do not match, more than five others.
    """
    n = network.n_chips
    words = _names(names, n, "chip")
    trial = np.geomspace(1e-8, 1e7, 451)
    curve = step_response_k_per_w(network, trial, chip)[:, chip]
    end = network.r_th_k_per_w()[:, chip]
    alike: dict[int, int] = {}
    if others is None:
        ranked = [int(k) for k in np.argsort(-end, kind="stable") if k != chip and end[k] > _LEAST_SHARE * end[chip]]
        others = []
        courses = step_response_k_per_w(network, trial, chip)
        for k in ranked:
            twin = next((j for j in others if np.allclose(courses[:, k], courses[:, j], rtol=0.02, atol=2e-3 * end[chip])), None)
            if twin is not None:
                alike[twin] = alike.get(twin, 0) + 1
            elif len(others) < 5:
                others.append(k)
    others = list(others)
    if len(others) > 5 or any(isinstance(k, bool) or k not in range(n) or k == chip for k in others):
        raise InputError("others", f"{others}", f"at most five of 0 to {n - 1}, without {chip}")
    if time_s is None:
        low = float(trial[np.searchsorted(curve, 1e-3 * end[chip])])
        high = float(trial[min(np.searchsorted(curve, 0.999 * end[chip]), trial.size - 1)]) * 3.0
    else:
        low, high = (float(x) for x in require_range("time_s", time_s, low=0.0, low_open=True, unit="s"))
        if not low < high:
            raise InputError("time_s", f"{low:g} to {high:g} s", "a first time before the last")
    t = np.geomspace(low, high, 400)
    z = step_response_k_per_w(network, t, chip)
    figure = Figure(figsize=(8.6, 4.2), layout=_layout())
    ax = figure.subplots()
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.set_xlim(low, high)
    top, bottom = 2.0 * z[-1].max(), max(0.5 * z[0, chip], 1e-3 * z[-1, chip])
    ax.set_ylim(bottom, top)
    entries = []
    for k, (one, (colour, dashes)) in enumerate(zip([chip, *others], _LOOKS, strict=False)):
        seen = z[:, one] > 0.0
        ax.plot(t[seen], z[seen, one], color=colour, ls=dashes, lw=1.8 if k == 0 else 1.2)
        more = " itself" if k == 0 else f" and {alike[one]} alike" if one in alike else ""
        entries.append((max(z[-1, one], bottom), f"{words[one]}{more}\n{end[one]:.3g} K/W", {"color": colour, "ls": dashes}))
    _right_labels(ax, entries, 0.11)
    ax.set_xlabel("time since the step of power (logarithmic)")
    ax.set_ylabel("rise per watt, K/W (logarithmic)")
    ax.set_title(f"heat in {words[chip]}; right: rise at rest over the coolant")
    _log_axis(ax.xaxis, _time_words)
    _log_axis(ax.yaxis)
    return figure


# --- 2: a measured curve ------------------------------------------------------------
@styled
def measured_figure(measured: MeasuredImpedance, fit=None) -> Figure:
    """Samples, smooth curve and fit, with the residuals of the fit below.

    Parameters
    ----------
    measured : MeasuredImpedance
    fit : FosterFit or TimeConstantSpectrum, optional
        Anything with ``z_th_k_per_w(time_s)``.

    Returns
    -------
    Figure
    """
    m = measured
    figure = Figure(figsize=(8.6, 5.0 if fit is not None else 4.0), layout="constrained")
    if fit is None:
        ax, low = figure.subplots(), None
    else:
        ax, low = figure.subplots(2, 1, sharex=True, gridspec_kw={"height_ratios": [3.0, 1.2]})
    raw_t, raw = m.raw_time_s, m.raw_z_th_k_per_w
    every = np.unique(np.searchsorted(np.log(raw_t), np.linspace(np.log(raw_t[0]), np.log(raw_t[-1]), 500)).clip(0, raw_t.size - 1))
    seen = every[raw[every] > 0.0]
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.set_xlim(m.time_s[0], m.time_s[-1] * 1.05)
    ax.set_ylim(0.6 * m.z_th_k_per_w[0], 2.0 * m.z_th_k_per_w.max())
    ax.plot(raw_t[seen], raw[seen], ls="", marker="o", ms=2.6, mfc="none", mec=LIGHT_BLUE, mew=0.7)
    samples = ~m.extrapolated
    ax.plot(m.time_s[samples], m.z_th_k_per_w[samples], color=BLUE, lw=1.3)
    entries = [("○ samples", LIGHT_BLUE), ("— smooth curve", BLUE)]
    if m.extrapolated.any():
        ax.plot(m.time_s[: samples.argmax() + 1], m.z_th_k_per_w[: samples.argmax() + 1], color=INK, ls=_DOTTED, lw=1.5)
        entries.append(("⋯ square root of time", INK))
    if m.start is not None:
        ax.axvspan(*m.start.window_s, color=LIGHT_YELLOW, alpha=0.35, lw=0)
        entries.append((f"shaded: window of that law, {_time_words(m.start.window_s[0])} to {_time_words(m.start.window_s[1])}", YELLOW))
    if fit is not None:
        ax.plot(m.time_s, fit.z_th_k_per_w(m.time_s), color=RED, ls=_DASHED, lw=1.2)
        entries.append(("– – fit" + (f", {fit.n_branches} branches" if hasattr(fit, "n_branches") else ""), RED))
    for k, (words, colour) in enumerate(entries):
        ax.text(
            0.985,
            0.05 + 0.075 * (len(entries) - 1 - k),
            words,
            transform=ax.transAxes,
            ha="right",
            va="bottom",
            fontsize=8,
            color=INK if colour == LIGHT_BLUE else colour,
            bbox=_BOX,
        )
    ax.set_ylabel("rise per watt, K/W (logarithmic)")
    turned = ", turned round" if m.kind == "cooling" else ""
    ax.set_title(f"{plain(m.label, 50, 'record')}: {m.kind} curve{turned}, {number(m.z_th_k_per_w[-1], 4)} K/W at the end")
    _log_axis(ax.yaxis)
    bottom = ax if low is None else low
    if low is not None:
        # while the samples scatter more than the rise itself, a relative residual says nothing
        ok = np.interp(np.log(raw_t[every]), np.log(m.time_s), m.z_th_k_per_w) > 5.0 * m.noise_k_per_w
        some = every[ok]
        z_fit = fit.z_th_k_per_w(raw_t[some])
        low.plot(raw_t[some], 100.0 * (raw[some] / z_fit - 1.0), ls="", marker="o", ms=2.2, mfc="none", mec=LIGHT_BLUE, mew=0.6)
        smooth = 100.0 * (m.z_th_k_per_w / fit.z_th_k_per_w(m.time_s) - 1.0)
        low.plot(m.time_s, smooth, color=BLUE, lw=1.1)
        low.axhline(0.0, color=RED, ls=_DASHED, lw=1.0)
        # branches need not follow the law to where no sample counts
        reach = max(1.5 * np.percentile(np.abs(smooth[samples]), 98), 0.2)
        low.set_ylim(-reach, reach)
        low.yaxis.set_major_locator(MaxNLocator(4))
        low.set_ylabel("over the fit, %")
    bottom.set_xlabel("time since the step of power (logarithmic)")
    _log_axis(bottom.xaxis, _time_words)
    return figure


# --- 3: structure functions -------------------------------------------------------
@styled
def structure_figure(structures: Sequence[StructureFunction], *, parted: Separation | None = None, labels=None) -> Figure:
    """Cumulative structure functions: heat capacity met over resistance passed.

    Parameters
    ----------
    structures : sequence of StructureFunction
        One to four.
    parted : Separation, optional
        Marks where the curves part, by both ways.
    labels : sequence of str, optional
        Instead of the structures' own.

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        None or more than four, labels that do not match.
    """
    structures = list(structures)
    if not 1 <= len(structures) <= 4:
        raise InputError("structures", f"{len(structures)}", "one to four")
    words = _names([s.label for s in structures] if labels is None else labels, len(structures), "curve")
    figure = Figure(figsize=(8.6, 4.2), layout="constrained")
    ax = figure.subplots()
    ax.set_yscale("log")
    right = max(s.r_k_per_w[-1] for s in structures)
    ax.set_xlim(0.0, 1.03 * right)
    first = min(float(s.c_at_j_per_k(0.01 * right)) for s in structures)
    ends = [float(s.c_at_j_per_k(0.985 * s.r_k_per_w[-1])) for s in structures]
    ax.set_ylim(0.3 * first, 6.0 * max(ends))
    entries = []
    for s, name, end, (colour, dashes) in zip(structures, words, ends, _LOOKS, strict=False):
        # the first capacity sits at the junction itself
        r, c = np.append(0.0, s.r_k_per_w), np.append(s.c_j_per_k[0], s.c_j_per_k)
        ax.plot(r, c, color=colour, ls=dashes, lw=1.5, drawstyle="steps-pre" if s.r_k_per_w.size < 20 else "default")
        entries.append((end, f"{name}\n{number(s.r_k_per_w[-1], 3)} K/W in all", {"color": colour, "ls": dashes}))
    _right_labels(ax, entries, 0.12)
    if parted is not None and parted.separates:
        marks = [(parted.r_th_jc_k_per_w, "by the derivatives", "v"), (parted.r_structure_k_per_w, "by the structure functions", "D")]
        marks = [m for m in marks if m[0] is not None]
        left = max(m[0] for m in marks) > 0.55 * right
        beside = min(m[0] for m in marks) if left else max(m[0] for m in marks)
        for k, (r, how, mark) in enumerate(marks):
            c = float(parted.structures[1].c_at_j_per_k(r))
            ax.plot([r, r], [0.3 * first, c], color=INK, lw=0.9, ls=_DOTTED)
            ax.plot([r], [c], ls="", marker=mark, ms=6.5, mfc=PAPER, mec=INK, mew=1.2, zorder=5)
            ax.annotate(
                f"{'▽' if mark == 'v' else '◇'} {number(r, 3)} K/W {how}",
                (beside, 0.0),
                xycoords=("data", "axes fraction"),
                xytext=(-6 if left else 6, 19 - 14 * k),
                textcoords="offset points",
                ha="right" if left else "left",
                va="bottom",
                fontsize=8,
                bbox=_BOX,
            )
    elif parted is not None:
        ax.text(0.02, 0.97, "the curves do not part", transform=ax.transAxes, va="top", fontsize=8, color=RED, weight="bold", bbox=_BOX)
    ax.set_xlabel("thermal resistance passed from the junction on, K/W")
    ax.set_ylabel("heat capacity met, J/K (logarithmic)")
    ax.xaxis.set_major_locator(MaxNLocator(8))
    _log_axis(ax.yaxis)
    return figure


@styled
def separation_figure(parted: Separation) -> Figure:
    """Scaled difference of the derivatives against its threshold, over the impedance.

    Parameters
    ----------
    parted : Separation

    Returns
    -------
    Figure
    """
    p = parted
    figure = Figure(figsize=(8.6, 3.8), layout="constrained")
    ax = figure.subplots()
    ax.set_yscale("log")
    top = max(float(p.delta.max()), 3.0 * float(p.epsilon_line.max()))
    low = 0.05 * float(p.epsilon_line.min())
    ax.set_ylim(low, 2.0 * top)
    ax.set_xlim(0.0, 1.02 * float(p.mean_z_th_k_per_w.max()))
    ax.plot(p.mean_z_th_k_per_w, np.where(p.delta > low, p.delta, np.nan), color=BLUE, lw=1.3, marker="o", ms=2.6, mfc=PAPER, mec=BLUE)
    ax.plot(p.mean_z_th_k_per_w, p.epsilon_line, color=RED, lw=1.3, ls=_DASHED)
    points = {"color": BLUE, "marker": "o", "ms": 3, "mfc": PAPER}
    entries = [
        (max(float(p.delta[-3:].max()), low), "difference of da/dz\nover difference of ends", points),
        (float(p.epsilon_line[-1]), "threshold ε", {"color": RED, "ls": _DASHED}),
    ]
    _right_labels(ax, entries, 0.14)
    if p.r_th_jc_k_per_w is not None:
        r = p.r_th_jc_k_per_w
        ax.plot([r], [p.epsilon], ls="", marker="v", ms=7, mfc=PAPER, mec=INK, mew=1.3, zorder=5)
        span = ""
        if p.r_low_k_per_w and p.r_high_k_per_w:
            span = f"\n| with ε/2 and 2 ε: {number(p.r_low_k_per_w, 3)} and {number(p.r_high_k_per_w, 3)} K/W"
            ax.plot([p.r_low_k_per_w, p.r_high_k_per_w], [0.5 * p.epsilon, 2.0 * p.epsilon], ls="", marker="|", ms=9, color=INK, zorder=5)
        ax.text(0.02, 0.96, f"▽ {number(r, 3)} K/W, parted at {_time_words(p.time_s)}{span}", transform=ax.transAxes, va="top", fontsize=8, bbox=_BOX)
    else:
        ax.text(0.02, 0.96, "no crossing: the curves do not part", transform=ax.transAxes, va="top", fontsize=8, color=RED, weight="bold", bbox=_BOX)
    ax.set_xlabel("mean thermal impedance of the two curves, K/W")
    ax.set_ylabel("scaled difference (logarithmic)")
    ax.set_title(f"{plain(p.labels[0], 26, 'curve 1')} and {plain(p.labels[1], 26, 'curve 2')}")
    ax.xaxis.set_major_locator(MaxNLocator(8))
    _log_axis(ax.yaxis)
    return figure


# --- 4: drop through a stack ------------------------------------------------------------
@dataclass(frozen=True)
class StackDrop:
    """One part of the way from junction to coolant.

    Attributes
    ----------
    name : str
    upper_c, lower_c : float
        Temperatures of its hot and its cold face at rest [degC].
    inside : bool
        Part of the module, not of the way from case to coolant.
    """

    name: str
    upper_c: float
    lower_c: float
    inside: bool

    @property
    def drop_k(self) -> float:
        return self.upper_c - self.lower_c


def stack_drops(
    stack: StackLadder,
    names: Sequence[str],
    *,
    power_w: float,
    cooling,
    coolant_c: float,
    case_to_sink_k_per_w: float = 0.0,
    interface_power_w: float | None = None,
    sink_power_w: float | None = None,
) -> list[StackDrop]:
    """Temperatures at rest along the way of the heat of one chip.

    Parameters
    ----------
    stack : StackLadder
        From :func:`mission.thermal.stack_ladder`.
    names : sequence of str
        One for every layer, heated face first.
    power_w : float
        Heat of the chip [W], >= 0.
    cooling : FixedCooling, FosterCooling, SinkPath or float
        From sink surface to coolant: a cooling, a path with one ladder, or a resistance [K/W].
    coolant_c : float
        [degC], -60 to 150.
    case_to_sink_k_per_w : float
        Resistance between case and sink surface [K/W]; 0 leaves it out.
    interface_power_w, sink_power_w : float, optional
        Heat through that resistance and through the sink [W] where chips share them; that of the chip without it.

    Returns
    -------
    list of StackDrop
        Layers, interface, sink.

    Raises
    ------
    InputError
        Names that do not match the layers; a path with several sinks.
    RangeError
        Numbers out of range; less heat in a shared part than in the chip.

    Notes
    -----
    Steady and one chip wide: heat of neighbours within the stack is not in it.
    """
    power = float(require_range("power_w", power_w, low=0.0, unit="W"))
    coolant = float(require_range("coolant_c", coolant_c, low=-60.0, high=150.0, unit="degC"))
    r_interface = float(require_range("case_to_sink_k_per_w", case_to_sink_k_per_w, low=0.0, unit="K/W"))
    through = [
        power if p is None else float(require_range(n, p, low=power, unit="W"))
        for n, p in (("interface_power_w", interface_power_w), ("sink_power_w", sink_power_w))
    ]
    if len(names) != len(stack.r_layers_k_per_w):
        raise InputError("names", f"{len(names)} names for {len(stack.r_layers_k_per_w)} layers", "one for each layer")
    if isinstance(cooling, (int, float)):
        sinks = (float(require_range("cooling", cooling, low=0.0, unit="K/W")),)
    else:
        sinks = sink_path(cooling).r_th_k_per_w
    if len(sinks) != 1:
        raise InputError("cooling", f"{len(sinks)} sinks", "one", "hand over the resistance of the chip's own sink")
    r_sink = sinks[0]
    parts = [(plain(n, 22, f"layer {k}"), power * r, True) for k, (n, r) in enumerate(zip(names, stack.r_layers_k_per_w), 1)]
    if r_interface > 0.0:
        parts.append(("case to sink", through[0] * r_interface, False))
    parts.append(("sink to coolant", through[1] * r_sink, False))
    t = coolant + sum(d for _, d, _ in parts)
    out = []
    for name, drop, inside in parts:
        out.append(StackDrop(name, t, t - drop, inside))
        t -= drop
    return out


@styled
def stack_figure(drops: Sequence[StackDrop], *, title: str = "Temperature drop from junction to coolant") -> Figure:
    """Bars that hang from each part's hot face to its cold face, junction first.

    Parameters
    ----------
    drops : sequence of StackDrop
    title : str

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        No parts.
    """
    drops = list(drops)
    if not drops:
        raise InputError("drops", "no part", "at least one")
    n = len(drops)
    figure = Figure(figsize=(8.6, 1.5 + 0.34 * n), layout=_layout())
    ax = figure.subplots()
    top, bottom = max(d.upper_c for d in drops), min(d.lower_c for d in drops)
    span = max(top - bottom, 0.5)
    whole = sum(d.drop_k for d in drops)
    for k, d in enumerate(drops):
        pale, dark, hatch = (LIGHT_BLUE, BLUE, "") if d.inside else (LIGHT_YELLOW, YELLOW, "////")
        ax.barh(k, d.drop_k, left=d.lower_c, height=0.62, facecolor=pale, edgecolor=dark, hatch=hatch, linewidth=0.8)
        if k + 1 < n:
            ax.plot([d.lower_c, d.lower_c], [k + 0.31, k + 0.69], color=GREY, lw=0.7)
        share = f" ({100.0 * d.drop_k / whole:.0f} %)" if whole > 0.0 and d.drop_k >= 0.005 * whole else ""
        outside = d.lower_c - bottom > 0.2 * span
        ax.annotate(
            f"{number(d.drop_k, 3)} K{share}",
            (d.lower_c if outside else d.upper_c, k),
            xytext=(-5 if outside else 5, 0),
            textcoords="offset points",
            ha="right" if outside else "left",
            va="center",
            fontsize=8,
            bbox=_BOX,
        )
    faces = [(drops[0].upper_c, "junction", -0.5)]
    inner = [k for k, d in enumerate(drops) if d.inside]
    if inner and inner[-1] + 1 < n:
        faces.append((drops[inner[-1]].lower_c, "case" if inner[-1] + 2 < n else "sink", inner[-1] + 0.5))
        if inner[-1] + 2 < n:
            faces.append((drops[n - 1].upper_c, "sink", n - 1.5))
    for t, word, y in faces:
        ax.plot([t, top + 0.02 * span], [y, y], color=INK, lw=0.7, ls=_DOTTED)
        ax.text(top + 0.03 * span, y, f"{word} {t:.1f} °C", va="center", fontsize=8, weight="bold")
    ax.text(top + 0.03 * span, n - 0.5, f"coolant {bottom:.1f} °C", va="center", fontsize=8, weight="bold")
    ax.plot([bottom, top + 0.02 * span], [n - 0.5, n - 0.5], color=INK, lw=0.7, ls=_DOTTED)
    ax.set_xlim(bottom - 0.02 * span, top + 0.26 * span)
    ax.set_ylim(n - 0.25, -0.75)
    ax.set_yticks(range(n), [d.name for d in drops])
    ax.tick_params(axis="y", length=0)
    ax.grid(axis="y", visible=False)
    ticks = MaxNLocator(7).tick_values(bottom, bottom + span)
    ax.xaxis.set_major_locator(FixedLocator([v for v in ticks if bottom - 0.02 * span <= v <= top + 0.02 * span]))
    ax.set_xlabel("temperature, °C (hatched: outside the module)")
    ax.set_title(plain(title, 90, "stack"))
    return figure
