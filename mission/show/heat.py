"""The way of the heat of a study in words, files and pictures."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from ..study.heat import WARMED_BEFORE, HeatReview
from ..thermal.sinks import FanSink, LiquidPlate, NaturalSink, TableSink
from .cooling_figures import (
    _flow_unit, _is_air, operating_point_figure, plate_map_figure, resistance_over_flow_figure, resistance_over_rise_figure, spreading_figure,
)
from .figures import part_words, plain
from .text import number, one_line
from .thermal_figures import StackDrop, impedance_figure, stack_figure, step_response_k_per_w

#: Other chips that are listed, and speeds of fan or pump that are drawn.
_MOST_OTHERS, _MOST_SPEEDS = 5, 5


# --- words ----------------------------------------------------------------------
def heat_text(review: HeatReview) -> str:
    """Temperatures, drops, what warms what, the reduction and the cooling at work, for the terminal.

    Parameters
    ----------
    review : HeatReview

    Returns
    -------
    str
    """
    study, module = review.result.study, review.result.study.module
    lines = [f"{one_line(study.name)}: the way of the heat", f"  {one_line(module.name)}; {_losses_words(review)}", ""]
    lines.append(f"  {'hottest of its kind':<22} {'loss, W':>8} {'junction':>9} {'case':>9} {'sink':>9} {'coolant':>9}   degC")
    for way in review.ways:
        k = way.chip
        case = f"{review.case_c[k]:9.1f}" if module.case_to_sink is not None else f"{'-':>9}"
        lines.append(f"  {way.name + ', ' + part_words(module, way.place):<22} {way.loss_w:8.1f} {review.junction_c[k]:9.1f} {case} "
                     f"{review.surface_c[k]:9.1f} {review.coolant_at_c[k]:9.1f}")
    lines += [f"  to know: {one}" for one in _doubts(review)]
    for way in review.ways:
        lines += ["", *_way_lines(way)]
    effect = [line for way in review.ways for line in _conductivity_lines(way)]
    if effect:
        lines += ["", "  conductivity at each layer's own temperature instead of the one reckoned with", *effect]
    lines += ["", *_mutual_lines(review)]
    if review.plate is not None:
        lines += ["", *_spreading_lines(review)]
    lines += ["", *_reduction_lines(review), "", *_cooling_lines(review)]
    return "\n".join(lines)


def _losses_words(review):
    whole = f"{number(review.loss_w.sum())} W in all"
    if not review.held:
        return f"mean losses of the mission, {whole}, at its mean coolant temperature"
    point = review.result.hot_point
    turning = f"{number(point.frequency_hz, 3)} Hz" if point.frequency_hz > 0.0 else "standstill"
    load = f"{number(point.i_peak_a / 2**0.5, 3)} A rms, {turning}"
    return f"its hottest moment (at {point.end_s:.6g} s: {load}) held for ever, without ripple, {whole}"


def _doubts(review):
    low, high = review.result.tables.temperature_data_c
    if review.junction_c.max() > high or review.junction_c.min() < low:
        yield f"junctions stand outside {low:g} to {high:g} degC, the data sheet's curves; losses there are extended in straight lines"
    setting, rise = review.result.cooling.plan.levels[review.level].setting, review.surface_c[0] - review.coolant_c
    # a step of the resistance is less than a tenth of a rise, so only rises beyond the first and the last step are told
    if setting.what == "still air" and abs(rise / setting.value - 1.0) > 0.1:
        yield f"the sink stands {number(rise, 3)} K above the air; {number(setting.value, 3)} K is the nearest rise that still air is reckoned for"


def _way_lines(way):
    whole = sum(s.drop_k for s in way.steps)
    yield f"  {way.name:<28} {'heat, W':>8} {'K/kW':>8} {'K':>8} {'share':>7}"
    for s in way.steps:
        through = f"{s.heat_w:8.1f} {1000.0 * s.r_k_per_w:8.2f}" if s.heat_w == s.heat_w else " " * 17
        share = f"{s.drop_k / whole:7.1%}" if whole > 1e-6 else f"{'-':>7}"  # less is rounding
        yield f"    {one_line(s.name, 26):<26} {through} {s.drop_k:8.2f} {share}"
    yield f"    {'in all':<26} {' ' * 17} {whole:8.2f}"


def _conductivity_lines(way):
    rows = [layer for layer in way.layers if layer.has_law]
    if not rows:
        return
    yield f"  {way.name:<20} {'mean, degC':>11} {'reckoned':>9} {'there':>9} W/(m K) {'resistance':>11}"
    for row in rows:
        name = one_line(row.material, 12) + (" (plate)" if row.part == "plate" else "")
        there = "  outside the tested range of its law"
        if np.isfinite(row.k_there_w_per_m_k):
            there = f"{row.k_there_w_per_m_k:9.1f}         {row.change_percent:+10.1f} %"
        yield f"    {name:<20} {row.mean_c:9.1f} {row.k_w_per_m_k:9.1f} {there}"
    more = sum(row.drop_k * row.change_percent / 100.0 for row in rows if row.part == "chip" and np.isfinite(row.k_there_w_per_m_k))
    if any(row.part == "chip" for row in rows):
        yield f"    together {more:+.2f} K at the junction" + (", without the plate" if any(row.part == "plate" for row in rows) else "")


def _mutual_lines(review):
    hot, rise = review.hottest, review.r_junction_k_per_w[review.hottest] * review.loss_w
    module = review.result.study.module
    yield (f"  {review.chips[hot]} stands {rise.sum():.2f} K above the coolant at the inlet: {rise[hot]:.2f} K by its own heat "
           f"({review.r_junction_k_per_w[hot, hot]:.4g} K/W), {rise.sum() - rise[hot]:.2f} K by that of other chips")
    if module.plate is None and not module.coupling:
        return
    r = review.r_junction_k_per_w[hot].copy()
    r[hot] = -np.inf
    for k in np.argsort(-r, kind="stable")[: min(_MOST_OTHERS, r.size - 1)]:
        yield f"    {review.chips[k]:<10} {r[k]:8.4f} K/W {rise[k]:8.2f} K"


def _spreading_lines(review):
    table = review.plate.spreading
    yield f"  {review.chips[review.hottest]} heated alone on the plate, to the sink's surface: ways to reckon it"
    for row in table.itertuples():
        off = "" if row.method == "exact" else f"{row.difference_percent:+9.1f} %"
        yield f"    {row.method:<24} {row.rise:<8} {row.r_th_k_per_w:9.4f} K/W {off}"


def _reduction_lines(review):
    net = review.network
    yield (f"  reduction: {net.lam_local_per_s.shape[0]} modes of each chip and {net.lam_shared_per_s.size} shared ones stand for {net.n_full}; "
           f"built and reduced in {review.wall_s:.2g} s")
    if net.relative_bound == 0.0:
        yield "    exact"
        return
    yield (f"    a junction is off by at most {100.0 * net.relative_bound:.2g} % of its rise with all chips heated alike; "
           f"by {net.error_bound_k(review.loss_w).max():.2g} K as long as no chip loses more than here")


def _cooling_lines(review):
    state, spec = review.state, review.result.study.spec.cooling
    p = state.point
    row = " at the inlet, mean of a row of sinks" if state.path.first_to_last else ""
    yield (f"  cooling: {spec.kind}, {state.words}; {1000.0 * state.r_th_k_per_w:.4g} K/kW from surface to coolant{row}, "
           f"{number(review.loss_w.sum())} W through it")
    if review.wavers is not None:
        yield f"    it does not come to rest, but goes to and fro with {review.wavers.words}, {1000.0 * review.wavers.r_th_k_per_w:.4g} K/kW"
    if state.path.paste != 1.0:
        yield f"    grease: {state.path.paste:.3g} times the case-to-sink resistance of the module file"
    if p is None:
        yield "    given, not reckoned"
        return
    unit, per = _flow_unit(_is_air(p.kind, spec))
    facts = [
        ("flow", p.flow_m3_per_s, lambda v: f"{number(per * v)} {unit.replace('³', '3')}"),
        ("pressure", p.pressure_drop_pa, lambda v: f"{number(v)} Pa"),
        ("kind of flow", p.regime, lambda v: v + ("" if p.reynolds is None else f", Reynolds number {number(p.reynolds, 3)}")),
        ("reckoned for", p.inlet_c, lambda v: f"{number(v)} degC at the inlet" + ("" if p.heat_w is None else f" and {number(p.heat_w)} W")),
        ("coolant's own rise", p.outlet_rise_k_per_w, lambda v: f"{v * review.loss_w.sum():.2f} K at these losses"),
        ("film", p.film_w_per_m2_k, lambda v: f"{number(v, 3)} W/(m2 K)"), ("efficiency of the fins", p.fin_efficiency, lambda v: f"{v:.1%}"),
        ("base", p.r_base_k_per_w, lambda v: f"{1000.0 * v:.3g} K/kW of the above"),
        ("spreading in the base", p.r_spreading_k_per_w, lambda v: f"{1000.0 * v:.3g} K/kW of the above"),
        ("radiation", p.radiated_share, lambda v: f"{v:.0%} of the heat"),
    ]
    yield from (f"    {name:<22} {words(value)}" for name, value, words in facts if value is not None)
    yield from (f"    to know: {one_line(flag, 400)}" for flag in p.flags)
    yield from (f"    source: {one_line(source, 400)}" for source in p.sources)


# --- tables ---------------------------------------------------------------------
def heat_frames(review: HeatReview) -> dict:
    """Tables of a review.

    Parameters
    ----------
    review : HeatReview

    Returns
    -------
    dict of DataFrame
        ``resistances``: ``chip``, ``heated``, ``r_th_junction_k_per_w``, ``r_th_case_k_per_w``, steady and over the coolant at the inlet;
        ``impedance``: ``time_s`` and the rise of every junction per watt in the hottest chip, in columns such as ``S-a-up z_th_k_per_w``;
        ``layers``, if any: ``chip``, ``part``, ``material``, ``thickness_mm``, ``r_k_per_w``, ``upper_c``, ``lower_c``, ``drop_k`` (for each layer
        of a plate the faces of the whole), ``k_w_per_m_k``, ``k_there_w_per_m_k``, ``change_percent``.
    """
    import pandas as pd

    names, n, net = np.array(review.chips, dtype=object), len(review.chips), review.network
    own = net.rho_local != 0.0
    rates = np.concatenate([net.lam_local_per_s[own], net.lam_shared_per_s])
    t = np.geomspace(0.01 / rates.max(), 10.0 / rates.min(), 301)
    z = step_response_k_per_w(net, t, review.hottest)
    out = {
        "resistances": pd.DataFrame({
            "chip": np.repeat(names, n), "heated": np.tile(names, n), "r_th_junction_k_per_w": review.r_junction_k_per_w.ravel(),
            "r_th_case_k_per_w": review.r_case_k_per_w.ravel()}),
        "impedance": pd.DataFrame({"time_s": t, **{f"{name} z_th_k_per_w": z[:, k] for k, name in enumerate(names)}}),
    }
    columns = ("part", "material", "thickness_mm", "r_k_per_w", "upper_c", "lower_c", "drop_k", "k_w_per_m_k", "k_there_w_per_m_k", "change_percent")
    layers = [{"chip": way.name, **{name: getattr(row, name) for name in columns}} for way in review.ways for row in way.layers]
    if layers:
        out["layers"] = pd.DataFrame.from_records(layers)
    return out


# --- pictures and files ---------------------------------------------------------------
def heat_figures(review: HeatReview) -> dict:
    """Pictures of a review by the names of their files: those that the module and the cooling give something to draw for.

    Parameters
    ----------
    review : HeatReview

    Returns
    -------
    dict of Figure
        ``drop``, ``impedance``; with a curve of fan or pump ``working-point``; ``resistance-over-flow`` or ``resistance-over-rise`` where the
        resistance is reckoned; with a plate ``plate-map`` and ``spreading``.
    """
    study = review.result.study
    hot, spec, point, materials = review.hottest, study.spec.cooling, review.state.point, study.materials()
    way = next(w for w in review.ways if w.chip == hot)
    # what the coolant takes up before it reaches this sink belongs to other modules
    steps = [s for s in way.steps if s.name != WARMED_BEFORE]
    title = f"{way.name}, {number(way.loss_w, 3)} W, " + ("held for ever" if review.held else "mean of the mission")
    out = {"drop": stack_figure([StackDrop(plain(s.name, 26, "layer"), *s[1:4]) for s in steps], title=title),
           "impedance": impedance_figure(review.network, chip=hot, names=review.chips)}
    if point is not None and point.kind == spec.kind:
        if isinstance(spec, NaturalSink):
            out["resistance-over-rise"] = resistance_over_rise_figure(spec, point, materials=materials)
        elif isinstance(spec, (TableSink, FanSink, LiquidPlate)):
            if getattr(spec, "fan", None) is not None or getattr(spec, "pump", None) is not None:
                out["working-point"] = operating_point_figure(spec, point, speed_ratios=_speeds(review))
            out["resistance-over-flow"] = resistance_over_flow_figure(spec, point, materials=materials)
    if review.plate is not None:
        plate = review.plate
        out["plate-map"] = plate_map_figure(plate.stack, plate.power_w, plate.surface_c, below="sink surface")
        out["spreading"] = spreading_figure(plate.stack, plate.source, name=review.chips[hot], below="sink surface")
    return out


def _speeds(review):
    """Speeds of the levels that held, a few of them if there are many, and the one of the review."""
    plan = review.result.cooling.plan

    def speed(level):
        setting = plan.levels[level].setting
        return setting.value if setting.what == "speed" else 1.0

    used = sorted({speed(one.level) for one in review.result.cooling.used})
    few = np.unique(np.linspace(0, len(used) - 1, min(len(used), _MOST_SPEEDS)).round().astype(int))
    own = speed(review.level)
    return [own, *(used[k] for k in few if abs(used[k] - own) > 0.05 * own)]


def write_heat(review: HeatReview, folder) -> list[Path]:
    """Write heat.txt, resistances.csv, impedance.csv, layers.csv where there are layers, and the pictures.

    Parameters
    ----------
    review : HeatReview
    folder : path-like
        Made if it is not there.

    Returns
    -------
    list of Path
    """
    from .folder import ResultFolder

    target = ResultFolder(folder)
    tables = [target.text(f"{name}.csv", frame.to_csv(index=False, lineterminator="\n", float_format="%.7g"))
              for name, frame in heat_frames(review).items()]
    return [target.text("heat.txt", heat_text(review) + "\n"), *tables, *target.figures(heat_figures(review))[0]]
