"""One self-contained page that a person can read, print and pass on."""

from __future__ import annotations

import io
import re
from pathlib import Path

from . import figures as _figures
from .tables import BEYOND_YEARS, life_words, outside_words, unit_words
from .text import number

TEMPLATE = Path(__file__).with_name("report.html")
#: Rows of the ledger that stand open on the page, shared among the failure modes.
OPEN_ROWS = 8

#: Colours of the figures that follow the page from light to dark, by the name of their CSS variable.
_THEMED = {
    _figures.PAPER: "paper", _figures.INK: "ink", _figures.GREY: "grey", _figures.RULE: "rule",
    _figures.BLUE: "blue", _figures.LIGHT_BLUE: "blue-pale", _figures.RED: "red", _figures.LIGHT_RED: "red-pale",
    _figures.YELLOW: "yellow", _figures.LIGHT_YELLOW: "yellow-pale",
    **{colour: f"ramp-{k}" for k, colour in enumerate(_figures.RAMP, 1)},
}
_TITLES = {
    "temperatures": "Temperatures over the mission", "hot-stretch": "The hottest stretch, chip by chip", "life": "Lives",
    "damage-by-phase": "Where time and life go", "damage-by-swing": "Which swings do the damage", "cycle-map": "Cycles and their damage",
    "losses": "Losses", "cooling": "What the cooling did",
}
_WHERE = {"temperatures": "heat", "hot-stretch": "heat", "losses": "heat", "cooling": "heat", "life": "ledger"}
_RANGE_WORDS = {
    "range_k": ("swing", "K"), "mean_c": ("mean temperature", "°C"), "min_c": ("lowest temperature", "°C"), "max_c": ("highest temperature", "°C"),
    "heating_s": ("heating time", "s"), "current_per_foot_a": ("current per wire foot", "A"), "v_class": ("voltage class", "100 V"),
    "wire_diameter_um": ("wire diameter", "µm"), "aspect_ratio": ("aspect ratio of the wire loop", ""),
}


def report_html(result, figures, document: dict, *, date: str | None = None, drawn_svg: dict[str, str] | None = None) -> str:
    """The report of a result as one HTML page.

    Parameters
    ----------
    result : MissionResult
    figures : dict of str to matplotlib.figure.Figure
        Drawn into the page as SVG.
    document : dict
        ``build_document(result).model_dump(mode="json")``.
    date : str, optional
        Printed in the head as it stands. Left out by default, so that equal runs leave equal pages.

    Returns
    -------
    str
        Asks for nothing from outside, holds no script; all text from files is escaped.
    """
    from jinja2 import Environment, StrictUndefined

    environment = Environment(autoescape=True, trim_blocks=True, lstrip_blocks=True, undefined=StrictUndefined)
    environment.filters |= {"number": _number, "unit": unit_words, "span": span_words, "percent": _percent, "clock": clock_words, "life": life_words}
    captions = _figures.captions(result)
    drawn: dict[str, list] = {"heat": [], "ledger": [], "damage": []}
    for name, figure in figures.items():
        caption = captions.get(name, "")
        drawn[_WHERE.get(name, "damage")].append({
            "id": f"fig-{_identifier(name)}", "title": _TITLES.get(name, name), "caption": caption,
            "svg": figure_svg(figure, f"fig-{_identifier(name)}", f"{_TITLES.get(name, name)}. {caption}", (drawn_svg or {}).get(name)),
        })
    stated = {m["mode"]: bool(m["tested_range"]) for m in document["models"]}
    ledger = sorted(document["ledger"], key=lambda r: -r["damage_per_mission"])
    rows = [_ledger_row(row, stated[row["mode"]]) for row in ledger]
    worst = [next(r for r in rows if r["mode"] == m["mode"]) for m in document["models"] if any(r["mode"] == m["mode"] for r in rows)]
    worst.sort(key=lambda r: -r["damage_per_mission"])
    hot = max(document["chips"], key=lambda c: c["peak_c"]) if document["chips"] else None
    return environment.from_string(TEMPLATE.read_text(encoding="utf-8")).render(
        d=document, date=date, figures=drawn, rows=rows, short=_short(rows), worst=worst, hot=hot, verdict=_verdict(document, worst, hot),
        models=[_model(m) for m in document["models"]], rests=_rests(document), phases=_phases(document, worst), choices=_choices(rows),
        inputs=_inputs(document["inputs"]), heat_j=sum(c["energy_j"] for c in document["chips"]),
    )


# --- words ------------------------------------------------------------------
def _number(value, digits: int = 4) -> str:
    """For the page: thousands held together, powers of ten as people write them."""
    if value is None:
        return "without end"
    text = number(float(value), digits).replace(" ", "\N{NARROW NO-BREAK SPACE}") if not isinstance(value, str) else value
    mantissa, e, exponent = text.partition("e")
    if e and exponent.lstrip("+-").isdigit():
        return f"{mantissa} × 10{str(int(exponent)).translate(str.maketrans('-0123456789', '⁻⁰¹²³⁴⁵⁶⁷⁸⁹'))}"
    return text if text.startswith("without") else text.replace("-", "\N{MINUS SIGN}")


def span_words(seconds) -> str:
    """A length of time in the unit that people would use.

    Examples
    --------
    >>> span_words(86400.0), span_words(0.02), span_words(45.0)
    ('24 h', '20 ms', '45 s')
    """
    name, s = _figures.time_unit(float(seconds))
    return f"{_number(float(seconds) / s)} {name}" if seconds else "0 s"


def clock_words(seconds) -> str:
    """A time since the mission's start.

    Examples
    --------
    >>> clock_words(58223.2), clock_words(75.5), clock_words(3.25)
    ('16:10:23', '1:15.5 min', '3.25 s')
    """
    seconds = float(seconds)
    if seconds < 60.0:
        return f"{seconds:.4g} s"
    whole = round(seconds, 1)
    minutes, rest = divmod(whole, 60.0)
    if whole < 3600.0:
        return f"{int(minutes)}:{rest:04.1f} min"
    whole = int(whole)
    return f"{whole // 3600}:{whole // 60 % 60:02d}:{whole % 60:02d}"


def _percent(share) -> str:
    p = 100.0 * float(share)
    text = "0" if p == 0.0 else "< 0.1" if p < 0.1 else f"{p:.1f}" if p < 10.0 else f"{p:.0f}"
    return f"{text}\N{NO-BREAK SPACE}%"


def _counts(row) -> bool:
    """Whether the damage is more than rounding."""
    return row["life_years"] is not None and row["life_years"] <= BEYOND_YEARS


def _ledger_row(row, stated):
    phase = max(row["damage_by_phase"], key=row["damage_by_phase"].get) if _counts(row) else None
    return row | {
        "stated": stated, "counts": _counts(row), "outside": outside_words(row["outside_share"], stated) if _counts(row) else "–",
        "main_phase": phase, "main_share": row["damage_by_phase"][phase] / row["damage_per_mission"] if phase is not None else 0.0,
    }


def _short(rows):
    """The shortest lives, every failure mode with its fair number of rows."""
    modes = {r["mode"] for r in rows}
    left = dict.fromkeys(modes, max(2, OPEN_ROWS // max(len(modes), 1)))
    out = []
    for row in rows:
        if left[row["mode"]] > 0:
            left[row["mode"]] -= 1
            out.append(row)
    return out


def _verdict(document, worst, hot):
    """The sentence at the top, in parts that the template escapes."""
    missed = [e for e in document["limits"] if not e["met"]]
    parts = []
    for e in document["limits"]:
        unit = unit_words(e["unit"])
        if e["what"] == "life" and e["value"] is None and not e["met"]:
            parts.append(f"A life of {_number(e['limit'])} years is asked for, but cannot be judged: {e['where']}.")
        elif e["what"] == "life":
            value = "without end" if e["value"] is None else f"{life_words(e['value'])} years"
            parts.append(f"The shortest life is {value} ({e['where']}) against a target of {_number(e['limit'])} years.")
        elif e["what"].startswith("highest junction temperature"):
            side = "below" if e["met"] else "above"
            parts.append(f"The hottest junction reaches {e['value']:.1f} {unit}, {abs(e['margin']):.1f} K {side} its limit "
                         f"({hot['chip']} at {clock_words(hot['peak_time_s'])}, {hot['peak_phase']}).")
        elif not e["met"]:
            value = "not known" if e["value"] is None else f"{_number(e['value'])} {unit}".strip()
            parts.append(f"The {e['what']} is {value} against a limit of {_number(e['limit'])} {unit}".rstrip() + ".")
    has_target = any(e["what"] == "life" for e in document["limits"])
    if not document["models"] and not has_target:
        parts.append("No failure mode is given, so nothing is said about life.")
    elif not has_target and worst:
        first = worst[0]
        life = "without end, for no damage is done" if first["life_years"] is None else f"{life_words(first['life_years'])} years"
        parts.append(f"No target for life is set; the shortest is {life}" + (f" ({first['chip']}, {first['mode']})." if first["life_years"] is not None else "."))
    trust = []
    for row in worst:
        # a life a few times longer than the shortest decides as much once its model is in doubt
        if not _counts(row) or row["damage_per_mission"] < 0.2 * worst[0]["damage_per_mission"]:
            continue
        if not row["stated"]:
            trust.append(f"{row['mode']}: no tested range is stated for the model behind its life ({row['model']}).")
        elif row["outside_share"] > 0.0:
            trust.append(f"{row['mode']}: {row['outside']} of the damage to {row['chip']} comes from cycles outside the range in which the model "
                         f"was tested ({row['model']}).")
    if not document["complete"]:
        trust.append("The run was stopped early: everything here stands for the part that was marched.")
    if missed:
        word = "Missed"
        lead = "one limit is not kept." if len(missed) == 1 else f"{len(missed)} limits are not kept."
    else:
        word, lead = "Met", "every limit that was set is kept." if has_target or not document["models"] else "every limit that was set is kept; no life was asked for."
    return {"met": not missed, "word": word, "lead": lead, "sentences": parts, "trust": trust}


def _model(entry):
    ranges = [f"{_RANGE_WORDS.get(k, (k, ''))[0]} {_number(a)} to {_number(b)} {_RANGE_WORDS.get(k, (k, ''))[1]}".strip()
              for k, (a, b) in entry["tested_range"].items()]
    options = [f"{k} = {v if isinstance(v, str) else _number(v) if isinstance(v, (int, float)) else v}" for k, v in entry["options"].items()]
    return entry | {"ranges": ranges, "option_words": options}


def _rests(document):
    """The sentences, without those that the table of models says already."""
    told = tuple(f"{m['mode']}: {m['model']}, life = " for m in document["models"])
    return [text for text in document["rests_on"] if not (told and text.startswith(told))]


def _phases(document, worst):
    """One row per phase: time, and the share of damage of the worst chip of each mode."""
    total = sum(p["time_s"] for p in document["duty"]["phases"]) or 1.0
    out = []
    for p in document["duty"]["phases"]:
        shares = [w["damage_by_phase"].get(p["phase"], 0.0) / w["damage_per_mission"] if _counts(w) else 0.0 for w in worst]
        out.append({"phase": p["phase"], "time_s": p["time_s"], "time_share": p["time_s"] / total, "shares": shares})
    return sorted(out, key=lambda r: (-sum(r["shares"]), -r["time_s"]))


def _choices(rows):
    """For the worst row of each mode: the life had a choice of the model been made otherwise."""
    out, seen = [], set()
    for row in rows:
        if row["mode"] in seen or not row["damage_by_choice"] or not _counts(row):
            continue
        seen.add(row["mode"])
        for choice, damage in row["damage_by_choice"].items():
            out.append({"chip": row["chip"], "mode": row["mode"], "choice": choice, "now": row["life_years"],
                        "then": row["life_years"] * row["damage_per_mission"] / damage if damage > 0.0 else None})
    return out


def _inputs(inputs):
    """The study, section by section, as (field, value) rows."""
    sections = [("study", [(k, _value(v)) for k, v in inputs.items() if not isinstance(v, (dict, list))])]
    for name, value in inputs.items():
        if isinstance(value, dict) and value:
            sections.append((name, list(_flat(value))))
        elif isinstance(value, list) and value:
            sections.append((name, list(_flat({name: value}))))
    return [s for s in sections if s[1]]


def _flat(value, prefix=""):
    for key, item in value.items():
        name = f"{prefix}{key}"
        if isinstance(item, dict) and item:
            yield from _flat(item, f"{name}.")
        elif isinstance(item, list) and any(isinstance(x, dict) for x in item):
            for n, part in enumerate(item, 1):
                yield from _flat(part if isinstance(part, dict) else {"value": part}, f"{name}[{n}].")
        else:
            yield name, _value(item)


def _value(item):
    if isinstance(item, list):
        return ", ".join(_value(x) for x in item)
    if isinstance(item, bool):
        return "yes" if item else "no"
    return f"{item:g}" if isinstance(item, float) else str(item)


# --- figures -------------------------------------------------------------------
def _identifier(name) -> str:
    return re.sub(r"[^a-z0-9]+", "-", str(name).lower()).strip("-") or "figure"


def svg_text(figure, salt: str) -> str:
    """A figure as an SVG document; equal figures give equal text."""
    import matplotlib as mpl

    raw = io.StringIO()
    # text as outlines: the picture looks alike whatever fonts its reader has
    with mpl.rc_context({"svg.fonttype": "path", "svg.hashsalt": salt}):
        figure.savefig(raw, format="svg", metadata={"Date": None, "Creator": None, "Format": None, "Type": None})
    return raw.getvalue()


def figure_svg(figure, prefix: str, words: str, text: str | None = None):
    """A figure as SVG markup for a page: own identifiers, colours that follow the page, nothing from outside.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    prefix : str
        Makes the identifiers inside differ from those of other figures.
    words : str
        Alternative text; escaped here.
    text : str, optional
        What :func:`svg_text` gave for it, if it has been drawn already.
    """
    from markupsafe import Markup, escape

    svg = svg_text(figure, prefix) if text is None else text
    svg = svg[svg.index("<svg"):]
    svg = re.sub(r"<!--.*?-->", "", svg, flags=re.DOTALL)
    # a style inside would hold for the whole page; the template says the same for figures only
    svg = re.sub(r"<(metadata|style)\b.*?</\1>", "", svg, flags=re.DOTALL)
    svg = re.sub(r'\sd="([^"]*)"', _short_path, svg)
    svg = re.sub(r'\sxmlns(:\w+)?="[^"]*"', "", svg)
    svg = svg.replace("xlink:href=", "href=")
    svg = re.sub(r'\sid="([^"]*)"', rf' id="{prefix}-\1"', svg)
    svg = re.sub(r'href="#', f'href="#{prefix}-', svg)
    svg = re.sub(r"url\(#", f"url(#{prefix}-", svg)
    svg = re.sub(r'\s(fill|stroke)="(#[0-9a-f]{6})"', r' style="\1: \2"', svg)
    svg = re.sub(r"#[0-9a-f]{6}\b", lambda m: f"var(--f-{_THEMED[m[0]]})" if m[0] in _THEMED else m[0], svg)
    box = re.search(r'viewBox="([^"]*)"', svg)[1]
    width = float(box.split()[2])
    head = f'<svg viewBox="{box}" role="img" aria-label="{escape(words)}" style="max-width: {width * 4 / 3:.0f}px">'
    svg = head + svg[svg.index(">") + 1:]
    return Markup(re.sub(r"\n\s*", "\n", svg))


def _short_path(match):
    """Path data to a hundredth of a point: finer than any screen or print."""
    return f' d="{re.sub(r"-?[0-9]+[.][0-9]+", lambda n: f"{float(n[0]):.2f}".rstrip("0").rstrip("."), match[1])}"'
