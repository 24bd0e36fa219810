"""Short tables for the terminal."""

from __future__ import annotations

import unicodedata


def number(value: float, digits: int = 4) -> str:
    """A number as people write it: no exponents where they can be avoided.

    Examples
    --------
    >>> number(12345.678), number(0.000123), number(float("inf"))
    ('12 350', '1.23e-04', 'without end')
    """
    if value != value:
        return "not known"
    if value in (float("inf"), float("-inf")):
        return "without end"
    if value == 0.0:
        return "0"
    size = abs(value)
    if size < 1e-2 or size >= 1e9:
        return f"{value:.{max(digits - 2, 0)}e}"
    if size >= 1000.0:
        from math import floor, log10

        step = 10 ** max(floor(log10(size)) + 1 - digits, 0)
        return f"{round(value / step) * step:,.0f}".replace(",", " ")
    return f"{value:.{digits}g}"


def one_line(text, longest: int = 100) -> str:
    """One line of somebody's text, without characters that a terminal would act on.

    Examples
    --------
    >>> one_line("a  b\\n\\x1b[31mc"), one_line("abcdef", 4)
    ('a b ?[31mc', 'abc…')
    """
    line = " ".join("".join(" " if c.isspace() else "?" if unicodedata.category(c)[0] == "C" else c for c in str(text)).split())
    return line if len(line) <= longest else line[: longest - 1].rstrip() + "…"


def result_text(result) -> str:
    """Verdicts, the worst rows of the ledger and what to know about them."""
    from ..study.verdicts import stability

    history, study = result.history, result.study
    lines = [f"{study.name}", f"{study.module.name}; {study.profile.name}, {_span(history.duration_s)}; losses {number(history.energy_j.sum() / 3.6e6)} kWh a mission", ""]
    for v in result.verdicts:
        mark = "met   " if v.met else "MISSED"
        lines.append(f"  {mark}  {v.what:<38} {number(v.value):>10} {v.unit:<6} limit {number(v.limit):>8}   {v.where}")
    lines += ["", f"  {'failure mode':<28} {'worst chip':<11} {'life, years':>12} {'damage/mission':>15} {'outside range':>14}   most damage in"]
    for mode in study.modes:
        row = result.ledger.worst(mode.name)
        phase, share = _most(row)
        lines.append(f"  {mode.name:<28.28} {row.chip:<11} {number(row.life_years):>12} {row.damage_per_mission:>15.3e} {row.outside_share:>13.0%}   "
                     + (f"{phase} ({share:.0%})" if phase else "-"))
    if not study.modes:
        lines.append("  no failure mode given: temperatures only")
    lines += ["", *_cooling_lines(result)]
    from .document import NOT_CLOSED

    open_ends = () if result.closed else (NOT_CLOSED.format(result.closes_within_k, f"{result.passes} passes"),)
    lines += ["", "  to know:"] + [f"  - {w}" for w in (*open_ends, *result.shortfall.words(), stability(result).words, *result.ledger.warnings(), *(f"cooling: {f}" for f in result.cooling_flags))]
    lines += ["", "  An estimate; verify on the real device. High voltage, stored energy and hot surfaces: see the cautions in the report."]
    return "\n".join(lines)


def _cooling_lines(result):
    """Levels of the cooling that held, the longest four."""
    record = result.cooling
    for one in record.used[:4]:
        p = one.state.point
        more = "" if p is None or p.regime is None else f", {p.regime} flow"
        yield f"  cooling  {one.state.words}: {1000.0 * one.state.r_th_k_per_w:.4g} K/kW from surface to coolant{more}, for {_span(one.time_s)}"
    if len(record.used) > 4:
        yield f"           and {len(record.used) - 4} more levels; {record.n_changes} changes in all"


def check_text(study) -> str:
    """What was found usable."""
    p = study.profile
    lines = [f"{study.name}: usable",
             f"  duty    {p.source}: {p.rows} rows, {_span(p.duration_s)}, steps {p.shortest_step_s:g} to {p.longest_step_s:g} s, {len(p.phases)} phases",
             f"  module  {study.module.name} ({study.module.technology})"]
    plan = study.cooling_plan()
    first = plan.state(0)
    lines.append(f"  cooling {study.spec.cooling.kind}: {first.words}, {1000.0 * first.r_th_k_per_w:.4g} K/kW from surface to coolant"
                 + (f", the first of {len(plan.levels)} levels" if len(plan.levels) > 1 else ""))
    lines += [f"  life    {m.name}: {m.model.name}" for m in study.modes] or ["  life    no failure mode: temperatures only"]
    flags = first.point.flags if first.point is not None else ()
    lines += [f"  note    {n}" for n in (*study.module.notes, *p.notes, *(f"cooling: {f}" for f in flags))]
    return "\n".join(lines)


def _most(row):
    if row.damage_per_mission <= 0.0:
        return "", 0.0
    phase = max(row.damage_by_phase, key=row.damage_by_phase.get)
    return phase, row.damage_by_phase[phase] / row.damage_per_mission


def _span(seconds: float) -> str:
    if seconds >= 7200.0:
        return f"{seconds / 3600.0:.4g} h"
    if seconds >= 120.0:
        return f"{seconds / 60.0:.4g} min"
    return f"{seconds:.4g} s"
