"""The ledger as a table, and a result as a notebook shows it."""

from __future__ import annotations

from .text import number

#: Rows of the ledger in a notebook's short view.
TOP_ROWS = 6


def ledger_frame(result):
    """The ledger, one row per chip and failure mode, units in the column names.

    Parameters
    ----------
    result : MissionResult

    Returns
    -------
    pandas.DataFrame
        In the order of the failure modes and chips. A life without damage is infinite. What a column
        says about cycles stands for one mission. ``damage_in_phase: ...`` columns add up to
        ``damage_per_mission``, as do ``damage_by_..._cycles``.
    """
    import pandas as pd

    stated = {}
    for mode in result.study.modes:
        stated[mode.name] = bool(mode.model.tested_range)
    records = []
    for row in result.ledger.rows():
        record = {
            "chip": row.chip, "failure_mode": row.mode, "acts_on": row.acts_on, "model": row.model,
            "life_years": row.life_years, "life_missions": row.life_missions, "damage_per_mission": row.damage_per_mission,
            "cycles_per_mission": row.cycles, "tested_range_stated": stated[row.mode],
            "damage_share_outside_tested_range": row.outside_share if stated[row.mode] else float("nan"),
            "worst_swing_range_k": row.worst_range_k, "worst_swing_min_c": row.worst_min_c, "worst_swing_max_c": row.worst_max_c,
            "worst_swing_heating_s": row.worst_heating_s, "worst_swing_start_s": row.worst_start_s,
            "worst_swing_phase": row.worst_phase if row.worst_damage > 0.0 else "", "worst_swing_damage": row.worst_damage,
            "damage_left_out_below_threshold": row.left_out_damage,
        }
        record |= {f"damage_by_{kind}_cycles": value for kind, value in row.damage_by_kind.items()}
        record |= {f"damage_in_phase: {phase}": value for phase, value in row.damage_by_phase.items()}
        record |= {f"damage_if: {choice}": value for choice, value in row.damage_by_choice.items()}
        records.append(record)
    return pd.DataFrame.from_records(records)


def outside_words(share: float, stated: bool) -> str:
    """Share of damage outside the tested range, or that no such range is known."""
    return f"{share:.0%}".replace("%", "\N{NO-BREAK SPACE}%") if stated else "not stated"


#: A longer life is no statement about a device any more; its damage is rounding, its shares mean nothing.
BEYOND_YEARS = 1e6


def life_words(years) -> str:
    """A life in years with three figures; what lies beyond any use is not dressed up as a number.

    Examples
    --------
    >>> life_words(13.653), life_words(21.0), life_words(3e34), life_words(None)
    ('13.7', '21.0', 'over a million', 'without end')
    """
    if years is None or years == float("inf"):
        return "without end"
    if years > BEYOND_YEARS:
        return "over a million"
    return f"{years:#.3g}".rstrip(".") if 1e-2 <= abs(years) < 1000.0 else number(years, 3)


def unit_words(unit: str) -> str:
    """Units as people print them."""
    return {"degC": "°C", "K": "K"}.get(unit, unit)


_SHORT = """\
<div>
<p><strong>{{ name }}</strong>: {{ word }}{% if not complete %}; the run was stopped early{% endif %}</p>
<table>
<caption>Limits and target</caption>
<thead><tr><th scope="col">what</th><th scope="col">result</th><th scope="col">limit</th><th scope="col">unit</th><th scope="col">verdict</th>\
<th scope="col">where</th></tr></thead>
<tbody>{% for v in verdicts %}<tr><th scope="row">{{ v.what }}</th><td>{{ (v.value | life) if v.what == "life" else (v.value | number) }}</td><td>{{ v.limit | number }}</td><td>{{ v.unit | unit }}</td>\
<td>{{ "met" if v.met else "missed" }}</td><td>{{ v.where }}</td></tr>{% endfor %}</tbody>
</table>
{% if rows %}<table>
<caption>Shortest lives{% if total > rows|length %} ({{ rows|length }} of {{ total }}; all in result.ledger.to_frame()){% endif %}</caption>
<thead><tr><th scope="col">chip</th><th scope="col">failure mode</th><th scope="col">life, years</th><th scope="col">damage a mission</th>\
<th scope="col">damage outside tests</th><th scope="col">worst swing, K</th></tr></thead>
<tbody>{% for r in rows %}<tr><th scope="row">{{ r.chip }}</th><td>{{ r.mode }}</td><td>{{ r.life_years | life }}</td>\
<td>{{ r.damage_per_mission | number }}</td><td>{{ r.outside }}</td><td>{{ r.worst_range_k | number }}</td></tr>{% endfor %}</tbody>
</table>{% else %}<p>No failure mode is given: temperatures only.</p>{% endif %}
<p><small>An engineering estimate. Verify on the real device; high voltage, stored energy and hot surfaces: see the cautions of the report.</small></p>
</div>"""


def result_html(result) -> str:
    """Short view of a result for notebooks: verdict, limits, the shortest lives. Text from files is escaped.

    Parameters
    ----------
    result : MissionResult

    Returns
    -------
    str
        HTML without scripts, styles or anything from outside.
    """
    from jinja2 import Environment

    stated = {mode.name: bool(mode.model.tested_range) for mode in result.study.modes}
    rows = sorted(result.ledger.rows(), key=lambda r: -r.damage_per_mission)
    top = [{"chip": r.chip, "mode": r.mode, "life_years": r.life_years, "damage_per_mission": r.damage_per_mission,
            "worst_range_k": r.worst_range_k, "outside": outside_words(r.outside_share, stated[r.mode])} for r in rows[:TOP_ROWS]]
    environment = Environment(autoescape=True)
    environment.filters |= {"number": number, "unit": unit_words, "life": life_words}
    return environment.from_string(_SHORT).render(
        name=result.study.name, word="every limit is met" if result.ok else "a limit is missed", complete=result.complete,
        verdicts=result.verdicts, rows=top, total=len(rows))
