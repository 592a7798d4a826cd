from __future__ import annotations

import re
from html.parser import HTMLParser
from pathlib import Path

import pytest

from auditor.audit import Audit
from auditor.report.as_html import inline_svg, report_html
from tests.report import fake_audit

VOID = {"meta", "br", "link", "img", "input", "hr"}
SELF_CLOSING = {"path", "use", "rect", "line", "circle"}


class Page(HTMLParser):
    """Tags, attributes, identifiers and text of a page; complains about tags left open."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.attributes: list[tuple[str, str, str]] = []
        self.tags: list[str] = []
        self.texts: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.attributes += [(tag, name, value or "") for name, value in attrs]
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.attributes += [(tag, name, value or "") for name, value in attrs]

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.texts.append(data)

    @property
    def text(self) -> str:
        return " ".join(" ".join(self.texts).split())


@pytest.fixture(scope="module")
def page(written: Path) -> Page:
    return Page((written / "report.html").read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def evil(audit: Audit) -> Page:
    return Page(report_html(fake_audit.hostile(audit)))


def test_the_page_is_one_small_file_that_asks_for_nothing(written: Path, page: Page) -> None:
    text = (written / "report.html").read_text(encoding="utf-8")
    assert len(text.encode()) < 5_000_000
    assert page.open == []
    assert not re.search(r"https?://", text)
    assert not {"script", "link", "iframe", "object"} & set(page.tags)
    pointers = [value for _, name, value in page.attributes if name in ("src", "href", "srcset", "data", "action")]
    assert all(value.startswith("#") for value in pointers)
    assert not re.search(r"@import|url\((?!#)", text)


def test_names_inside_the_pictures_do_not_collide(page: Page) -> None:
    names = [value for _, name, value in page.attributes if name == "id"]
    assert len(names) == len(set(names))
    pointers = {value[1:] for _, name, value in page.attributes if name == "href"}
    assert pointers <= set(names)


def test_the_verdict_comes_first_with_its_three_numbers(page: Page, audit: Audit) -> None:
    chosen = audit.replays[audit.recommendation.replay or 0].measures
    start = page.text.index("Switch this loop")
    assert start < page.text.index("What fewer updates cost")
    head = page.text[start : start + 900]
    assert f"{100 * chosen.saved_fraction:.0f} %" in head
    assert f"{chosen.rms_error:.4f} m" in head
    assert "longest silence 30 min" in head
    for reason in audit.verdict.reasons:
        assert reason in page.text


def test_the_zone_is_named_and_its_times_are_used(page: Page) -> None:
    assert "2025-03-24 00:00 to 2025-04-06 22:19, Europe/Amsterdam time" in page.text


def test_all_chapters_and_pictures_are_there(page: Page) -> None:
    assert page.tags.count("svg") == 7
    assert page.tags.count("h2") == 11
    labels = [value for tag, name, value in page.attributes if tag == "svg" and name == "aria-label"]
    assert len(set(labels)) == 7


def test_what_the_file_assumes_or_ignores_is_said(page: Page) -> None:
    assert "assumed: 1.25 times the record's" in page.text
    assert "[energy]" in page.text
    assert "MOC-2025-118" in page.text


def test_a_refused_setting_shows_its_reason_and_no_numbers(page: Page) -> None:
    assert "not answered: delta 0.004 m is 2.0 resolution steps" in page.text


def test_hostile_names_are_text(evil: Page) -> None:
    assert "script" not in evil.tags
    assert "b" not in evil.tags
    assert '<script src="http://evil.example/x.js">alert(1)</script>$\\frac{1}{0}$&"' in evil.text
    assert not any("evil" in value for _, _, value in evil.attributes)
    assert "\x07" not in "".join(evil.texts)
    assert evil.open == []


def test_without_a_model_the_page_tells_findings_and_baseline_only(audit: Audit) -> None:
    page = Page(report_html(fake_audit.without_model(audit)))
    assert "Undecided" in page.text
    assert "the actuator never moved in automatic" in page.text
    assert "no rows for 4 h" in page.text
    assert "The log carries no loop that could be identified" in page.text
    assert page.tags.count("svg") == 2


def test_without_answers_every_refusal_is_told(audit: Audit) -> None:
    page = Page(report_html(fake_audit.without_answers(audit)))
    assert page.text.count("the log's steps are too coarse") == len(audit.replays)
    assert "Without a band and at least one process limit no verdict is given" in page.text
    assert "None of the 40 settings can be answered" in page.text


def test_a_picture_keeps_no_pointer_outside() -> None:
    drawn = (
        '<?xml version="1.0"?><!DOCTYPE svg><svg xmlns="http://www.w3.org/2000/svg" width="9">'
        '<metadata>http://x</metadata><style type="text/css">*{a}</style>'
        '<g id="a"/><use xlink:href="#a" clip-path="url(#a)"/></svg>'
    )
    text = str(inline_svg("p", drawn))
    assert text.startswith('<svg width="9" role="img" aria-label="p">')
    assert text.endswith('<g id="p-a"/><use href="#p-a" clip-path="url(#p-a)"/></svg>')


def test_the_same_audit_is_the_same_page(audit: Audit, written: Path) -> None:
    assert report_html(audit) == (written / "report.html").read_text(encoding="utf-8")
