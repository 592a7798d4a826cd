"""`report.html`: one file that opens anywhere, offline, without scripts."""

from __future__ import annotations

import re
from collections.abc import Mapping
from html import escape
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from auditor.audit import Audit
from auditor.report import model_tables, tables
from auditor.report.as_json import usable_fraction
from auditor.report.content import Content, gather
from auditor.report.figures import draw_all, style
from auditor.report.figures.window import telling_window
from auditor.report.phrases import DECISIONS, clean, measured, rule_title, settings_text, whole
from auditor.report.tables import seconds, with_unit
from auditor.report.times import LocalClock, local_clock
from auditor.rules import RULES
from auditor.text import number, percent

_METADATA = re.compile(r"<metadata>.*?</metadata>", re.DOTALL)
_NAMESPACE = re.compile(r"\s+xmlns(?::\w+)?=\"[^\"]*\"")
_IDENTIFIER = re.compile(r"(\bid=\"|url\(#|href=\"#)")
_STYLE = re.compile(r"<style type=\"text/css\">.*?</style>", re.DOTALL)

ALTERNATIVES = {
    "trade-off": "RMS error against updates per hour for every rule, the slowed-down clock and the record",
    "record": "Measurement as recorded and as replayed over the whole record, and updates per hour along it",
    "window": "Measurement, updates and actuator, recorded and replayed, in the most telling window",
    "dangers": "Flags along time, one row per cause and one per further setting with danger flags",
    "spans": "Stretches of the record that were counted, used for warm-up, and not used",
    "step-response": "Answer of the likely plants to a step of the actuator",
    "draws": "Updates and RMS error under each of the likely plants",
}


def report_html(audit: Audit) -> str:
    """Write the whole report as one HTML page."""
    content = gather(audit)
    return render(content, {name: style.svg(figure) for name, figure in draw_all(content).items()})


def render(content: Content, drawn: Mapping[str, str]) -> str:
    """Write the page of `content` with its pictures, already drawn as SVG."""
    room = _environment()
    clock = local_clock(content.audit.record.zone, content.audit.record.period)
    inline = {name: inline_svg(name, text) for name, text in drawn.items()}
    page: str = room.get_template("report.html.jinja").render(
        style=_style_sheet(room), figures=inline, window=telling_window(content), **_facts(content, clock)
    )
    return page


def inline_svg(name: str, text: str) -> Markup:
    """Make a picture part of the page: its own names, a description, and nothing that points outside."""
    body = text[text.index("<svg") :]
    body = _STYLE.sub("", _METADATA.sub("", body))
    head, rest = body.split(">", 1)
    head = _NAMESPACE.sub("", head)
    label = escape(ALTERNATIVES.get(name, name), quote=True)
    body = f'{head} role="img" aria-label="{label}">{rest}'.replace("xlink:href", "href")
    return Markup(_IDENTIFIER.sub(lambda found: f"{found[1]}{name}-", body))


def _environment() -> Environment:
    room = Environment(
        loader=PackageLoader("auditor.report"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    room.filters |= {
        "number": number,
        "percent": percent,
        "seconds": seconds,
        "clean": clean,
        "unit": with_unit,
        "measured": measured,
        "whole": whole,
    }
    return room


def _style_sheet(room: Environment) -> Markup:
    assert room.loader is not None
    return Markup(room.loader.get_source(room, "style.css")[0])


def _facts(content: Content, clock: LocalClock) -> dict[str, Any]:
    audit = content.audit
    length, signals = len(audit.record), audit.loop.signals
    return {
        "content": content,
        "audit": audit,
        "loop": audit.loop,
        "clock": clock,
        "unit": clean(signals.measurement.unit),
        "actuator_unit": clean(signals.actuator.unit),
        "decision": DECISIONS.get(audit.verdict.decision, clean(audit.verdict.decision)),
        "choice": _choice(content),
        "first_time": clock.moment(int(audit.record.time_ns(0))) if length else None,
        "last_time": clock.moment(int(audit.record.time_ns(length - 1))) if length else None,
        "usable": usable_fraction(audit.record),
        "rules": _rules(content),
        **_tables(content, clock),
    }


def _choice(content: Content) -> dict[str, str] | None:
    """Name and settings of the replay the pages are about."""
    if content.replay is None:
        return None
    setting = content.replay.setting
    return {"rule": rule_title(setting), "settings": settings_text(setting, content.audit.loop, full=True)}


def _rules(content: Content) -> list[Any]:
    """The replayed rules that the program knows, with formula and source."""
    names = dict.fromkeys(replay.setting.rule for replay in content.audit.replays)
    return [RULES[name] for name in names if name in RULES]


def _tables(content: Content, clock: LocalClock) -> dict[str, tables.Table]:
    return {
        "decision_table": tables.decision_table(content),
        "replay_table": tables.replay_table(content),
        "flag_table": tables.flag_table(content, clock),
        "finding_table": tables.finding_table(content, clock),
        "lost_hours_table": tables.lost_hours_table(content),
        "period_table": tables.period_table(content),
        "conditions_table": model_tables.conditions_table(content),
        "controller_table": model_tables.controller_table(content),
        "plant_table": model_tables.plant_table(content),
        "evidence_table": model_tables.evidence_table(content),
        "input_table": model_tables.input_table(content),
    }
