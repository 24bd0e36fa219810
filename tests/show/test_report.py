"""The page: parsed, not eyed. What it must hold and what must never get into it."""

from __future__ import annotations

import functools
import re
from html.parser import HTMLParser

import pytest

from mission.show import build_document
from mission.show.figures import all_figures, captions
from mission.show.report import TEMPLATE, clock_words, report_html, span_words
from mission.show.tables import ledger_frame, result_html

from .test_figures import NASTY, contrast, drawn, made

#: The cases that a page shows in its own way; the others only differ in their figures.
CASES = ["hour", "one phase, target", "nasty", "one row", "no current", "no modes", "stopped", "too hot"]
VOID = {"meta", "br", "img", "link", "input", "hr", "circle", "path", "rect", "use", "col"}


class Page(HTMLParser):
    """Tags with attributes, text by tag, and whether every tag is closed in order."""

    def __init__(self, text):
        super().__init__()
        self.tags, self.stack, self.wrong, self.words, self.rows = [], [], [], [], []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        if tag == "tr":
            self.rows.append(0)
        if tag in ("th", "td"):
            self.rows[-1] += int(dict(attrs).get("colspan", 1))
        if tag not in VOID:
            self.stack.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        if tag in VOID:
            return
        if not self.stack or self.stack.pop() != tag:
            self.wrong.append(tag)

    def handle_data(self, data):
        if not self.stack or self.stack[-1] not in ("style", "script"):
            self.words.append(data)

    def all(self, tag):
        return [a for t, a in self.tags if t == tag]

    @property
    def text(self):
        return " ".join(" ".join(self.words).split())


@functools.cache
def page(case):
    result = made(case)
    figures = {name: drawn(case)[name] for name in captions(result)}
    return report_html(result, figures, build_document(result).model_dump(mode="json"))


@functools.cache
def parsed(case):
    return Page(page(case))


@pytest.mark.parametrize("case", CASES)
def test_page_is_well_formed_and_tables_have_headers(case):
    p = parsed(case)
    assert not p.wrong and not p.stack
    ids = [a["id"] for _, a in p.tags if "id" in a]
    assert len(ids) == len(set(ids))
    targets = [a["href"] for _, a in p.tags if "href" in a]
    assert targets and all(t.startswith("#") and t[1:] in set(ids) for t in targets)
    assert set(re.findall(r"url\(#([^)]*)\)", page(case))) <= set(ids)
    assert all(a.get("scope") in ("row", "col", "rowgroup") for a in p.all("th"))
    assert len(p.all("caption")) == len(p.all("table")) > 0
    assert len(p.all("h1")) == 1 and p.all("html")[0]["lang"] == "en" and p.all("title")
    labelled = [a for t, a in p.tags if a.get("aria-labelledby")]
    assert all(a["aria-labelledby"] in ids for a in labelled)


@pytest.mark.parametrize("case", CASES)
def test_rows_of_a_table_are_equally_long(case):
    for table in re.findall(r"<table.*?</table>", page(case), flags=re.DOTALL):
        assert len(set(Page(table).rows)) == 1


@pytest.mark.parametrize("case", CASES)
def test_page_asks_for_nothing_from_outside_and_holds_no_script(case):
    p = parsed(case)
    text = page(case)
    # what a user wrote may hold anything, but only as text
    assert not {t for t, _ in p.tags} & {"script", "iframe", "object", "embed", "link", "img", "base", "form", "image", "foreignobject"}
    for _, attrs in p.tags:
        for key, value in attrs.items():
            assert not key.startswith("on") and key not in ("src", "srcset", "action", "data", "poster"), key
            if key != "aria-label":
                assert "//" not in (value or "") and "http" not in (value or "")
    assert not re.search(r"https?:|@import|javascript:", text)
    assert not re.search(r"url\((?!#)", text)
    assert len(re.findall(r"<style\b", text)) == 1


@pytest.mark.parametrize("case", CASES)
def test_every_drawing_has_words_and_a_caption(case):
    p = parsed(case)
    drawings = [a for a in p.all("svg") if a.get("role") == "img"]
    result = made(case)
    assert len(drawings) == len(captions(result)) == len(p.all("figcaption"))
    assert all(len(a["aria-label"]) > 40 for a in drawings)
    # the rest are the small marks beside a word
    assert all(a.get("aria-hidden") == "true" for a in p.all("svg") if a.get("role") != "img")


def test_text_from_files_is_escaped_everywhere():
    text, p = page("nasty"), parsed("nasty")
    assert "<script" not in text and "&lt;script&gt;alert(1)&lt;/script&gt;" in text
    assert NASTY in p.text  # and the reader still sees it as it was written
    short = result_html(made("nasty"))
    assert "<script" not in short and NASTY in Page(short).text


@pytest.mark.parametrize("case", CASES)
def test_verdict_in_words_at_the_top(case):
    result, p = made(case), parsed(case)
    first = p.text.split("Limits and target")[0]
    assert ("Met:" if result.ok else "Missed:") in first
    assert ("Missed:" if result.ok else "Met:") not in first
    assert f"{result.history.peak_c.max():.1f} °C" in first
    assert "estimate" in first
    if result.study.spec.lifetime.target_years is not None:
        assert "against a target of" in first
    elif result.study.modes:
        assert "No target for life is set" in first
    else:
        assert "nothing is said about life" in first
    if not result.complete:
        assert "stopped early" in first
    # our own words; the sentences of the document are its own
    own = p.text
    for sentence in build_document(result).rests_on:
        own = own.replace(" ".join(sentence.split()), "")
    assert not re.search(r"\b(nan|inf|None|Undefined)\b", own)


def test_rounding_is_not_called_damage():
    p = parsed("no current")
    assert "no damage worth naming" in p.text and "e+" not in p.text and "The shortest life is without end" in p.text


def test_missed_limits_are_marked_by_word_and_shape():
    text, p = page("too hot"), parsed("too hot")
    assert p.text.count("missed") == 1 and "one limit is not kept" in p.text
    assert "above its limit" in p.text
    # the mark of a missed limit has another shape, not only another colour
    shapes = {m[1]: m[2] for m in re.finditer(r'class="(?:mark )?(yes|no)"><svg class="icon".*?><(circle|path)', text)}
    assert shapes == {"yes": "circle", "no": "path"}


def test_ledger_lists_worst_first_and_every_row():
    result, text = made("hour"), page("hour")
    tables = [t for t in re.findall(r"<table.*?</table>", text, flags=re.DOTALL) if "life, years" in t and "failure mode" in t and "heating time" in t]
    short, whole = ([re.findall(r'<th scope="row">(.*?)</th><td>(.*?)</td>', t) for t in tables])
    order = sorted(result.ledger.rows(), key=lambda r: -r.damage_per_mission)
    assert whole == [(r.chip, r.mode) for r in order]
    assert short[0] == (order[0].chip, order[0].mode) and {m for _, m in short} == {m.name for m in result.study.modes}
    assert "<details><summary>All 24 rows</summary>" in text


def test_page_says_what_it_rests_on():
    result, p = made("hour"), parsed("hour")
    for mode in result.study.modes:
        assert mode.model.name in p.text and " ".join(mode.model.source.split()) in p.text
    rests = build_document(result).rests_on
    told = [t for t in rests if " ".join(t.split()) in p.text]
    # the sentences that name a model stand in the table of models instead
    assert len(told) == len(rests) - len(result.study.modes)
    for word in ("lethal voltage", "hot enough to burn", "Local codes", "numpy", "switching_frequency_hz", "K/kW"):
        assert word in p.text


def test_no_tested_range_is_not_called_tested():
    result = made("hour")
    bare = {m.name for m in result.study.modes if not m.model.tested_range}
    assert bare  # the demo module has such a mode
    frame = ledger_frame(result)
    assert frame.loc[frame.failure_mode.isin(bare), "damage_share_outside_tested_range"].isna().all()
    assert "not stated" in parsed("hour").text


def test_equal_results_leave_equal_pages_and_a_date_only_when_given():
    result = made("one row")
    document = build_document(result).model_dump(mode="json")
    assert report_html(result, all_figures(result), document) == report_html(result, all_figures(result), document)
    dated = report_html(result, {}, document, date="3 May, <noon>")
    assert "3 May, &lt;noon&gt;" in dated and "<noon>" not in dated


def test_colours_can_be_read_light_and_dark():
    css = TEMPLATE.read_text(encoding="utf-8")
    light, dark = (dict(re.findall(r"--([a-z0-9-]+): (#[0-9a-f]{6})", block)) for block in re.findall(r":root \{\n.*?\n\s*\}", css, flags=re.DOTALL)[:2])
    for theme in (light, dark):
        for name in ("text", "soft", "good", "bad", "link", "f-ink", "f-grey", "f-blue", "f-red", "f-yellow"):
            assert contrast(theme[name], theme["page"]) >= 4.5, (name, theme[name])
    assert contrast(light["margin"], light["page"]) >= 4.5 and contrast("#dd8f87", dark["page"]) >= 4.5
    assert set(light) == set(dark)
    assert "@media print" in css


def test_every_colour_of_the_figures_follows_the_theme():
    for case in ("hour", "nasty"):
        drawings = re.findall(r'<svg [^>]*role="img".*?</svg>', page(case), flags=re.DOTALL)
        fixed = {c for d in drawings for c in re.findall(r"(?:fill|stroke): (#[0-9a-f]{6}|white|black)(?!; stroke-opacity: 0)", d)}
        assert not fixed


def test_ledger_frame_has_units_and_adds_up():
    result = made("hour")
    frame = ledger_frame(result)
    assert len(frame) == len(result.ledger.rows())
    assert {"life_years", "worst_swing_range_k", "worst_swing_min_c", "worst_swing_heating_s"} <= set(frame)
    by_phase = frame[[c for c in frame if c.startswith("damage_in_phase: ")]].sum(axis=1)
    by_kind = frame[["damage_by_closed_cycles", "damage_by_residue_cycles", "damage_by_ripple_cycles"]].sum(axis=1)
    for total in (by_phase, by_kind):
        assert total.to_numpy() == pytest.approx(frame.damage_per_mission.to_numpy(), rel=1e-9)
    assert frame.life_years.to_numpy() == pytest.approx(1.0 / (frame.damage_per_mission * 4600).to_numpy(), rel=1e-9)


@pytest.mark.parametrize("case", CASES)
def test_short_view_for_notebooks(case):
    result = made(case)
    p = Page(result_html(result))
    assert not p.wrong and not p.stack and not {t for t, _ in p.tags} & {"script", "style", "img"}
    assert ("every limit is met" if result.ok else "a limit is missed") in p.text
    assert all(a.get("scope") for a in p.all("th"))
    assert len(ledger_frame(result)) == len(result.ledger.rows())


@pytest.mark.parametrize(("seconds", "words"), [(86400.0, "24 h"), (0.0, "0 s"), (0.02, "20 ms"), (90.0, "90 s"), (240.0, "4 min")])
def test_span_words(seconds, words):
    assert span_words(seconds) == words


@pytest.mark.parametrize(("seconds", "words"), [(3.25, "3.25 s"), (3599.99, "1:00:00"), (58223.2, "16:10:23"), (119.97, "2:00.0 min")])
def test_clock_words(seconds, words):
    assert clock_words(seconds) == words
