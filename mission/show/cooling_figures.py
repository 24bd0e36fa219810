"""Pictures of cooling: where fan or pump and system meet, resistance over flow or rise, the map under a baseplate, ways to reckon spreading."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import ListedColormap
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.ticker import MaxNLocator
from matplotlib.transforms import Bbox

from ..checks import require_range
from ..errors import InputError, RangeError
from ..thermal.fourier import FourierStack
from ..thermal.sinks import NaturalSink, OperatingCurve, SinkPoint, SinkSpec, TableSink, natural_dependence, operating_curve, sink_point
from ..thermal.spreading import compare_spreading
from .figures import BLUE, GREY, INK, LIGHT_BLUE, LIGHT_YELLOW, PAPER, RED, YELLOW, _spread, plain, styled
from .module_figures import _layout
from .text import number
from .thermal_figures import _BOX, _DASHED, _DOTTED, _log_axis, _names

#: Pale to dark, even in grey: temperature.
_HEAT = ("#fdf8ea", "#f8ecc9", "#f2dca6", "#ebc987", "#e2b36d", "#d89b59", "#cc8149", "#bd673d")
_REGIMES = {"laminar": "laminar", "transition": "transition", "turbulent": "turbulent", "edge": "short channel,\nlaminar edge"}
_FLOWS = 90


# --- helpers ------------------------------------------------------------------
def _is_air(kind, spec=None):
    return kind == "plate-fin-fan" or (isinstance(spec, TableSink) and spec.flow_m3_per_h is not None)


def _flow_unit(air):
    return ("m³/h", 3600.0) if air else ("l/min", 60000.0)


def _pressure_unit(most_pa):
    return ("kPa", 1e-3) if most_pa >= 5000.0 else ("Pa", 1.0)


def _needs_flow(point):
    if point.flow_m3_per_s is None:
        raise InputError("point", f"a sink at work without a flow ({point.kind})", "one with a flow", "use resistance_over_rise_figure for still air")
    return point.flow_m3_per_s


def _r_words(r_k_per_w):
    return f"{r_k_per_w:.3g} K/W"


def _cut(xs, ys, top):
    """The part of a rising line below ``top``, its last point on it."""
    over = np.flatnonzero(ys > top)
    if not over.size or over[0] == 0:
        return xs, ys
    k = int(over[0])
    x = np.interp(top, ys[k - 1 : k + 1], xs[k - 1 : k + 1])
    return np.append(xs[:k], x), np.append(ys[:k], top)


# --- 1: fan or pump against system -------------------------------------------------
@styled
def operating_point_figure(spec: SinkSpec | OperatingCurve, point: SinkPoint, *, speed_ratios: Sequence[float] = (1.0,), title: str = "") -> Figure:
    """Pressure over flow: fan or pump, system, and where they meet.

    Parameters
    ----------
    spec : FanSink, LiquidPlate or OperatingCurve
        A curve stands for one speed; with a sink the curves are reckoned at the inlet temperature and the heat of ``point``.
    point : SinkPoint
        The sink at work; its flow and pressure are marked.
    speed_ratios : sequence of float
        Speeds of fan or pump over that of its curve, six at most; without a fan or pump they are not used.
    title : str
        What is drawn.

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        A kind that has no system to draw, a point without flow, another kind's point, curves that do not meet.
    RangeError
        Speeds out of range.
    """
    flow = _needs_flow(point)
    if isinstance(spec, OperatingCurve):
        curves = [(None, spec)]
    else:
        if getattr(spec, "kind", None) != point.kind:
            raise InputError("point", f"a point of kind '{point.kind}'", f"one of kind '{getattr(spec, 'kind', type(spec).__name__)}', as the sink")
        ratios = sorted({float(r) for r in require_range("speed_ratios", speed_ratios, low=0.05, high=2.0).ravel()}, reverse=True)
        if not 1 <= len(ratios) <= 6:
            raise InputError("speed_ratios", f"{len(ratios)} speeds", "one to six")
        moved = getattr(spec, "fan", None) is not None or getattr(spec, "pump", None) is not None
        curves = [(r, operating_curve(spec, inlet_c=point.inlet_c, heat_w=point.heat_w, speed_ratio=r)) for r in (ratios if moved else [1.0])]
    air = _is_air(point.kind)
    unit, per = _flow_unit(air)
    moving = [c for _, c in curves if c.mover_pa is not None]
    widest = max((c for _, c in curves), key=lambda c: c.flow_m3_per_s[-1])
    top = 1.12 * max([point.pressure_drop_pa or 0.0, *(c.mover_pa.max() for c in moving)] if moving else [float(widest.system_pa.max())])
    p_unit, p = _pressure_unit(top)
    figure = Figure(figsize=(8.6, 4.4), layout="constrained")
    ax = figure.subplots()
    right = per * max(widest.flow_m3_per_s[-1], 1.05 * flow)
    ax.set_xlim(0.0, 1.02 * right)
    ax.set_ylim(0.0, p * top)
    x, y = _cut(per * widest.flow_m3_per_s, p * widest.system_pa, p * top)
    ax.plot(x, y, color=BLUE, lw=1.6)
    # its name goes left above it, where points and other lines are farthest
    frame = np.array([1.02 * right, p * top])
    here = (per * flow, p * (point.pressure_drop_pa or 0.0))
    near = here[0] > 0.8 * 1.02 * right  # its words go to the left then
    words = [(here[0] + (-1 if near else 1) * share * frame[0], here[1]) for share in (0.0, 0.05, 0.1, 0.15)]
    busy = np.vstack([words] + [[per * c.point_flow_m3_per_s, p * c.point_pa] for _, c in curves]
                     + [np.column_stack([per * c.flow_m3_per_s, p * c.mover_pa]) for c in moving]) / frame
    spots = np.column_stack([x, y])[(np.linspace(0.3, 0.95, 14) * (x.size - 1)).astype(int)]
    k = int(np.argmax([np.hypot(*(busy - spot / frame + (0.05, 0.0)).T).min() for spot in spots]))
    ax.annotate("system", spots[k], xytext=(-7, 4), textcoords="offset points", ha="right", va="center", color=BLUE, fontsize=8, bbox=_BOX)
    word = "fan" if air else "pump"
    heights = _spread([c.mover_pa[0] / top for c in moving], 0.045)
    for n, (ratio, curve) in enumerate(curves):
        if curve.mover_pa is None:
            continue
        at, pressure = per * curve.flow_m3_per_s, p * curve.mover_pa
        ax.plot(at, pressure, color=RED, ls=_DASHED if n == 0 else (0, (4, 1.5, 1, 1.5)), lw=1.5 if n == 0 else 1.1)
        name = word
        if len(curves) > 1 or ratio not in (None, 1.0):
            name += f", {'full' if ratio == 1.0 else f'{100.0 * ratio:.3g} %'} speed: {number(per * curve.point_flow_m3_per_s, 3)} {unit}"
        ax.annotate(name, (at[0], heights[n]), xycoords=("data", "axes fraction"), xytext=(5, 3), textcoords="offset points", va="bottom", color=RED,
                    fontsize=8, bbox=_BOX)
        ax.plot([per * curve.point_flow_m3_per_s], [p * curve.point_pa], ls="", marker="o", ms=6, mfc=PAPER, mec=INK, mew=1.2, zorder=5)
    if point.pressure_drop_pa is not None:
        ax.plot([here[0], here[0], 0.0], [0.0, here[1], here[1]], color=GREY, lw=0.8, ls=_DOTTED, zorder=1)
        ax.plot(*([v] for v in here), ls="", marker="o", ms=7, color=INK, zorder=6)
        ax.annotate(f"{number(here[0], 3)} {unit}, {number(here[1], 3)} {p_unit}", here, xytext=(-11 if near else 11, 0), textcoords="offset points",
                    ha="right" if near else "left", va="center", fontsize=8, weight="bold", bbox=_BOX)
    ax.set_xlabel(f"flow, {unit} (at the inlet)")
    ax.set_ylabel(f"pressure, {p_unit}")
    ax.set_title(_title(title or ("fins" if air else "liquid plate") + (f" and {word}" if moving else ", flow as given"), point))
    return figure


def _title(words, point):
    inlet = "" if point.inlet_c is None else f"; coolant {number(point.inlet_c)} °C"
    heat = "" if point.heat_w is None else f", heat {number(point.heat_w, 4)} W"
    return f"{plain(words, 60, 'cooling')}{inlet}{heat}"


# --- 2: resistance over flow, over rise ---------------------------------------------
@styled
def resistance_over_flow_figure(spec: SinkSpec, point: SinkPoint, *, materials=None, spreading=None, title: str = "") -> Figure:
    """Resistance of a sink over its flow, with the kinds of flow or the ends of the table.

    Parameters
    ----------
    spec : TableSink, FanSink or LiquidPlate
    point : SinkPoint
        The sink at work; flows are reckoned at its inlet temperature and heat.
    materials, spreading
        As for :func:`mission.thermal.sinks.sink_point`.
    title : str

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        Still air, a point without flow, or of another kind.

    Notes
    -----
    Drawn from an eighth of the point's flow to three times it (to the end of the fan's or pump's curve, if that is less), as far as rules and
    properties go; a table to both of its ends.
    """
    flow = _needs_flow(point)
    if getattr(spec, "kind", None) != point.kind:
        raise InputError("point", f"a point of kind '{point.kind}'", f"one of kind '{getattr(spec, 'kind', type(spec).__name__)}', as the sink")
    air = _is_air(spec.kind, spec)
    unit, per = _flow_unit(air)
    figure = Figure(figsize=(8.6, 4.0), layout="constrained")
    ax = figure.subplots()
    ax.set_xscale("log")
    ax.set_yscale("log")
    if isinstance(spec, TableSink):
        at, r = per * spec.table_m3_per_s, np.array(spec.r_th_k_per_w)
        reach = (at[-1] / at[0]) ** 0.06
        ax.set_xlim(at[0] / reach, at[-1] * reach)
        ax.plot(at, r, color=BLUE, lw=1.5, marker="s", ms=4.5, mfc=PAPER, mec=BLUE)
        for x, way in ((at[0], "left"), (at[-1], "right")):
            ax.axvline(x, color=GREY, lw=0.9, ls=_DOTTED)
            ax.annotate("the table ends", (x, 0.03), xycoords=("data", "axes fraction"), xytext=(4 if way == "left" else -4, 0),
                        textcoords="offset points", ha=way, fontsize=8, color=GREY, bbox=_BOX)
    else:
        points, cut = _over_flow(spec, point, materials, spreading)
        at, r = np.array([per * q.flow_m3_per_s for q in points]), np.array([q.r_th_k_per_w for q in points])
        ax.set_xlim(at[0], at[-1])
        ax.plot(at, r, color=BLUE, lw=1.5)
        _regime_bands(ax, at, [q.regime for q in points])
        if cut:
            ax.annotate("smaller flows: outside\nrules or properties", (0.0, 0.04), xycoords="axes fraction", xytext=(5, 0),
                        textcoords="offset points", fontsize=8, color=GREY, bbox=_BOX)
    low, high = float(min(r.min(), point.r_th_k_per_w)), float(max(r.max(), point.r_th_k_per_w))
    spread = max(high / low, 1.2)
    ax.set_ylim(low / spread**0.22, high * spread**0.22)
    here = (per * flow, point.r_th_k_per_w)
    ax.plot(*([v] for v in here), ls="", marker="o", ms=7, color=INK, zorder=6)
    # right above and left below a falling line there is room
    left, right = ax.get_xlim()
    below = np.log(here[0] / left) > 0.72 * np.log(right / left)
    ax.annotate(f"{_r_words(here[1])} at {number(here[0], 3)} {unit}", here, xytext=(-8, -7) if below else (8, 7), textcoords="offset points",
                ha="right" if below else "left", va="top" if below else "bottom", fontsize=8, weight="bold", bbox=_BOX)
    ax.set_xlabel(f"flow, {unit} (at the inlet, logarithmic)")
    ax.set_ylabel("surface to inlet, K/W (logarithmic)")
    ax.set_title(_title(title or "sink resistance over flow", point))
    _log_axis(ax.xaxis)
    _log_axis(ax.yaxis)
    return figure


def _over_flow(spec, point, materials, spreading):
    """Points over flow, and whether small flows had to be left out."""
    flow = point.flow_m3_per_s
    mover = getattr(spec, "fan", None) or getattr(spec, "pump", None)
    last = 3.0 * flow if mover is None else max(min(3.0 * flow, float(mover.flow_m3_per_s[-1])), 1.2 * flow)
    grid = np.union1d(np.geomspace(flow / 8.0, last, _FLOWS), [flow])
    found, cut = [], False
    for v in grid:
        try:
            found.append(sink_point(spec, inlet_c=point.inlet_c, heat_w=point.heat_w, flow_m3_per_s=float(v), materials=materials,
                                    spreading=spreading))
        except InputError:
            # too little flow lets the coolant grow warmer than its properties are known for, too much makes air too fast
            if v > flow:
                break
            if v == flow:
                raise
            found, cut = [], True
    return found, cut


def _regime_bands(ax, at, regimes):
    """Shaded spans with the kind of flow written at their top; a narrow one is written upright."""
    borders = [0, *(k for k in range(1, len(regimes)) if regimes[k] != regimes[k - 1]), len(regimes)]
    edges = [at[0], *(float(np.sqrt(at[k - 1] * at[k])) for k in borders[1:-1]), at[-1]]
    whole = np.log(at[-1] / at[0])
    for n, (k, low, high) in enumerate(zip(borders, edges[:-1], edges[1:], strict=False)):
        if n % 2:
            ax.axvspan(low, high, color=LIGHT_YELLOW, alpha=0.28, lw=0)
        if n:
            ax.axvline(low, color=YELLOW, lw=0.8, ls=_DOTTED)
        share = np.log(high / low) / whole
        if share > 0.02:
            upright = share < 0.16
            ax.text(np.sqrt(low * high), 0.97, _REGIMES[regimes[k]].replace("\n", " " if upright else "\n"), transform=ax.get_xaxis_transform(),
                    ha="center", va="top", rotation=90 if upright else 0, fontsize=8, color=INK)


@styled
def resistance_over_rise_figure(spec: NaturalSink, point: SinkPoint, *, materials=None, title: str = "") -> Figure:
    """Still air: resistance over the rise of the surface, and below it the heat, convection and radiation apart.

    Parameters
    ----------
    spec : NaturalSink
    point : SinkPoint
        The sink at work.
    materials
        As for :func:`mission.thermal.sinks.sink_point`.
    title : str

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        Another kind of sink, or of point.

    Notes
    -----
    Spreading under a footprint does not depend on the rise: where the point has it, it is added to the curve, too. Surroundings warmer than
    the air let small rises drop out, where the sink would take up heat.
    """
    if not isinstance(spec, NaturalSink) or point.kind != spec.kind:
        raise InputError("spec", f"'{getattr(spec, 'kind', type(spec).__name__)}' with a point of '{point.kind}'", "plate-fin-natural for both")
    own = point.r_spreading_k_per_w or 0.0
    here_k = (point.r_th_k_per_w - own) * point.heat_w
    dependence = None
    for low in (0.15, 0.3, 0.5, 0.75, 0.9):
        try:
            dependence = natural_dependence(spec, np.linspace(low * here_k, max(100.0, 1.5 * here_k) if here_k < 200.0 else 300.0, 60),
                                            inlet_c=point.inlet_c, materials=materials)
            break
        except RangeError:
            continue
    if dependence is None:
        raise InputError("spec", f"a sink that gives no heat at a rise of {0.9 * here_k:.3g} K", "one that does", "check surroundings_c")
    rise = dependence.rise_k + own * dependence.heat_w
    figure = Figure(figsize=(8.6, 5.0), layout="constrained")
    ax, low = figure.subplots(2, 1, sharex=True, gridspec_kw={"height_ratios": [1.3, 1.0]})
    r = dependence.r_th_k_per_w + own
    ax.plot(rise, r, color=BLUE, lw=1.6)
    here = (point.r_th_k_per_w * point.heat_w, point.r_th_k_per_w)
    ax.plot(*([v] for v in here), ls="", marker="o", ms=7, color=INK, zorder=6)
    ax.annotate(f"{_r_words(here[1])} at a rise of {number(here[0], 3)} K", here, xytext=(9, 8), textcoords="offset points", va="bottom",
                fontsize=8, weight="bold", bbox=_BOX)
    ax.set_xlim(0.0, rise[-1])
    ax.set_ylim(0.0, 1.15 * r.max())
    ax.set_ylabel("surface to air, K/W")
    ax.set_title(_title(title or "fins in still air", point).replace("coolant", "air"))
    heat = dependence.heat_w
    radiated = dependence.radiated_share * heat
    low.fill_between(rise, 0.0, heat - radiated, facecolor=LIGHT_BLUE, alpha=0.55, lw=0)
    low.fill_between(rise, heat - radiated, heat, facecolor=LIGHT_YELLOW, alpha=0.7, lw=0, hatch="////", edgecolor=PAPER)
    low.plot(rise, heat, color=INK, lw=1.2)
    low.plot(rise, heat - radiated, color=BLUE, lw=1.0)
    low.plot([here[0]], [point.heat_w], ls="", marker="o", ms=7, color=INK, zorder=6)
    low.set_ylim(0.0, 1.12 * heat.max())
    low.text(0.985, 0.06, f"convection, {100.0 * (1.0 - dependence.radiated_share[-1]):.0f} % at the right end", transform=low.transAxes, ha="right",
             fontsize=8, color=BLUE, bbox=_BOX)
    low.text(0.015, 0.93, f"hatched: radiation, {100.0 * dependence.radiated_share[-1]:.0f} % at the right end", transform=low.transAxes, va="top",
             fontsize=8, color=YELLOW, bbox=_BOX)
    low.set_ylabel("heat, W")
    low.set_xlabel("rise of the mounting surface over the air, K")
    for axes in (ax, low):
        axes.yaxis.set_major_locator(MaxNLocator(5))
    return figure


# --- 3: map of the baseplate ------------------------------------------------------------
@styled
def plate_map_figure(stack: FourierStack, power_w, coolant_c: float, *, names: Sequence[str] | None = None, title: str = "", below: str = "coolant") -> Figure:
    """Temperature of the underside of the last plate, with the chips above it and the hottest point.

    Parameters
    ----------
    stack : FourierStack
    power_w : array_like, shape (n,)
        Heat of every source [W].
    coolant_c : float
        [degC], -60 to 150.
    names : sequence of str, optional
        One for every source; the stack's own names without it.
    title : str
    below : str
        What the stack ends at, where that is not the coolant.

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        Names that do not match.
    RangeError
        Powers that do not match, numbers out of range.
    """
    coolant = float(require_range("coolant_c", coolant_c, low=-60.0, high=150.0, unit="degC"))
    own = [s.name or f"chip {k}" for k, s in enumerate(stack.sources, 1)]
    words = _names(own if names is None else names, stack.n_sources, "chip")
    long_side, short_side = max(stack.width_mm, stack.length_mm), min(stack.width_mm, stack.length_mm)
    many, few = 161, int(np.clip(round(161 * short_side / long_side), 41, 161))
    n_x, n_y = (many, few) if stack.width_mm >= stack.length_mm else (few, many)
    x, y, t = stack.temperature_map_c(power_w, coolant, n_x=n_x, n_y=n_y)
    wide = min(8.6, 1.1 + 6.2 * stack.width_mm / stack.length_mm)
    tall = min(6.6, 1.2 + (wide - 0.8) * stack.length_mm / stack.width_mm)
    figure = Figure(figsize=(max(wide, 4.6), tall), layout="constrained")
    ax = figure.subplots()
    ax.set_aspect("equal")
    ax.set_xlim(0.0, stack.width_mm)
    ax.set_ylim(0.0, stack.length_mm)
    flat = float(np.ptp(t)) < 0.01
    if not flat:
        levels = MaxNLocator(8).tick_values(float(t.min()), float(t.max()))
        shade = np.linspace(0, len(_HEAT) - 1, levels.size - 1).round().astype(int)
        ax.contourf(x, y, t, levels=levels, cmap=ListedColormap([_HEAT[k] for k in shade]))
        lines = ax.contour(x, y, t, levels=levels, colors=INK, linewidths=0.7)
    inside = []
    for source in stack.sources:
        box = (source.x_mm - source.width_mm / 2, source.y_mm - source.length_mm / 2, source.width_mm, source.length_mm)
        ax.add_patch(Rectangle(box[:2], *box[2:], fc="none", ec=PAPER, lw=2.6, zorder=3))
        ax.add_patch(Rectangle(box[:2], *box[2:], fc="none", ec=INK, lw=1.2, ls=_DASHED, zorder=4))
        inside.append((box[0] + box[2] / 2, box[1] + 0.93 * box[3]))
    row, column = np.unravel_index(int(np.argmax(t)), t.shape)
    if not flat:
        ax.plot([x[column]], [y[row]], ls="", marker="x", ms=8, mew=2.0, color=INK, zorder=6)
    hottest = f"{number(float(t.max()), 4)} °C at x = {number(float(x[column]), 3)}, y = {number(float(y[row]), 3)} mm"
    ax.set_xlabel("x, mm; dashed: chips above")
    ax.set_ylabel("y, mm")
    ax.grid(visible=False)
    total = float(np.sum(power_w))
    extent = f"{number(float(t.min()), 4)} °C everywhere" if flat else f"hottest (×) {hottest}{chr(10) if wide < 5.5 else '; '}contours in °C"
    head = plain(title or "underside of the baseplate", 60, "underside")
    ax.set_title(f"{head}\n{extent}\n{number(total, 4)} W, {below} {number(coolant)} °C", fontsize=8.5)
    tags = _name_chips(figure, ax, stack, words, inside)
    if not flat:
        _label_contours(figure, ax, lines, tags, (x[column], y[row]))
    return figure


def _laid_out(figure):
    """Renderer of a figure with its layout done, so that texts can be measured."""
    canvas = FigureCanvasAgg(figure)
    figure.draw_without_rendering()
    return canvas.get_renderer()


def _name_chips(figure, ax, stack, words, inside):
    """Names in the chips; where they do not fit, numbers with a list below."""
    box = _BOX | {"boxstyle": "square,pad=0.02", "alpha": 0.6}
    tags = [ax.text(*spot, word, ha="center", va="top", fontsize=8, zorder=7, bbox=box) for spot, word in zip(inside, words, strict=True)]
    renderer = _laid_out(figure)
    scale = ax.transData.transform
    room = [scale((s.width_mm, s.length_mm)) - scale((0.0, 0.0)) for s in stack.sources]
    boxes = [tag.get_window_extent(renderer) for tag in tags]
    if any(b.width > 0.96 * w or b.height > 0.8 * h for b, (w, h) in zip(boxes, room, strict=True)):
        for k, (tag, source, box, (_, h)) in enumerate(zip(tags, stack.sources, boxes, room, strict=True), 1):
            tag.set_text(str(k))
            if box.height > 0.4 * h:
                # above the chip, or the hottest point would lie under the number
                tag.set_y(source.y_mm + source.length_mm / 2)
                tag.set_va("bottom")
        if words == [f"chip {k}" for k in range(1, len(words) + 1)]:
            return tags
        listed, line = [], ""
        for k, word in enumerate(words, 1):
            entry = f"{k} {word}"
            if line and len(line) + len(entry) > 14.0 * figure.get_figwidth():
                listed.append(line)
                line = entry
            else:
                line = f"{line}, {entry}" if line else entry
        ax.set_xlabel("x, mm; dashed: chips above\n" + ",\n".join([*listed, line]))
    return tags


def _label_contours(figure, ax, lines, tags, hottest):
    """Temperatures on the contours, but for those that would lie on a name, on the hottest point or on each other."""
    placed = ax.clabel(lines, fmt=lambda v: f"{v:g}".replace("-", "−"), fontsize=7.5, inline=False, colors=INK)
    for text in placed:
        text.set_bbox({"boxstyle": "square,pad=0.08", "fc": PAPER, "ec": "none", "alpha": 0.75})
        text.set_zorder(5)
        text.set_rotation(0.0)
    renderer = _laid_out(figure)
    mark = ax.transData.transform(hottest)
    taken = [*(tag.get_window_extent(renderer).expanded(1.1, 1.1) for tag in tags), Bbox([mark - 8.0, mark + 8.0])]
    page = ax.get_window_extent(renderer)
    for text in placed:
        box = text.get_window_extent(renderer).expanded(1.15, 1.15)
        if any(box.overlaps(other) for other in taken) or box.x0 < page.x0 or box.x1 > page.x1 or box.y0 < page.y0 or box.y1 > page.y1:
            text.set_visible(False)
        else:
            taken.append(box)


# --- 4: ways to reckon spreading ------------------------------------------------------------
_METHODS = {"exact": "exact", "straight down": "straight down", "whole footprint": "whole plate at once", "angle": "at an angle",
            "angle, then footprint": "at an angle, whole plate\nto the coolant", "closed form": "closed form\n(Lee et al. 1995)"}


@styled
def spreading_figure(stack: FourierStack, chip: int = 0, *, spread_deg=45.0, name: str = "", below: str = "coolant") -> Figure:
    """Steady resistance of one chip, heated alone, by the shortcuts and exactly.

    Parameters
    ----------
    stack : FourierStack
    chip : int
        Number of the source, from 0.
    spread_deg : float or sequence of float
        As for :func:`mission.thermal.spreading.by_angle_k_per_w`.
    name : str
        Of the chip; the stack's own name without it.
    below : str
        As for :func:`plate_map_figure`.

    Returns
    -------
    Figure

    Raises
    ------
    RangeError
        A chip that is not there, angles out of range.
    """
    table = compare_spreading(stack, chip, spread_deg=spread_deg)
    mean, most = (table[table["rise"] == kind].reset_index(drop=True) for kind in ("mean", "maximum"))
    places = [*range(len(mean)), *(len(mean) + 0.9 + k for k in range(len(most)))]
    rows = [*mean.itertuples(), *most.itertuples()]
    figure = Figure(figsize=(8.6, 4.6), layout=_layout())
    ax = figure.subplots()
    longest = float(table["r_th_k_per_w"].max())
    for place, row in zip(places, rows, strict=True):
        exact = row.method == "exact"
        ax.barh(place, row.r_th_k_per_w, height=0.66, facecolor=BLUE if exact else LIGHT_BLUE, edgecolor=BLUE, hatch="" if exact else "////",
                linewidth=0.8)
        off = "" if exact else f", {row.difference_percent:+.0f} %".replace("-", "−")
        ax.annotate(f"{_r_words(row.r_th_k_per_w)}{off}", (row.r_th_k_per_w, place), xytext=(5, 0), textcoords="offset points", va="center",
                    fontsize=8, weight="bold" if exact else "normal", bbox=_BOX | {"alpha": 1.0}, zorder=5)
    for rise, first, last in ((mean, -0.45, len(mean) - 0.55), (most, places[len(mean)] - 0.45, places[-1] + 0.45)):
        exact = float(rise.loc[rise["method"] == "exact", "r_th_k_per_w"].iloc[0])
        ax.plot([exact, exact], [first, last], color=INK, lw=1.0, ls=_DASHED, zorder=3)
    ax.set_yticks(places, [_METHODS[row.method].replace("coolant", below) for row in rows])
    ax.set_ylim(places[-1] + 0.6, -0.95)
    ax.set_xlim(0.0, 1.28 * longest)
    ax.tick_params(axis="y", length=0)
    ax.grid(axis="y", visible=False)
    for place, words in ((-0.55, "mean over the chip"), (places[len(mean)] - 0.5, "hottest point of the chip")):
        ax.text(0.995, place, words, transform=ax.get_yaxis_transform(), ha="right", va="bottom", fontsize=8, weight="bold")
    angle = np.unique(np.atleast_1d(np.asarray(spread_deg, float)))
    angles = f"{angle[0]:g}°" if angle.size == 1 else f"{angle[0]:g}° to {angle[-1]:g}°"
    called = plain(name or stack.sources[chip].name or f"chip {chip + 1}", 40, f"chip {chip + 1}")
    ax.set_xlabel(f"steady resistance, chip to {below}, K/W; dashed line: exact")
    ax.set_title(f"{called} heated alone; angle {angles}")
    return figure
