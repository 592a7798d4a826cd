"""The documentation against the code: links, rules, detectors, findings, loop file keys, fields of `audit.json`."""

from __future__ import annotations

import ast
import re
import tomllib
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any, get_args

import pytest
import typer
from pydantic import BaseModel

import auditor
from auditor.cli.app import app
from auditor.dangers import DETECTORS
from auditor.logs.findings import CHECKS
from auditor.loopfile import read_loop
from auditor.loopfile.faults import fields_of
from auditor.loopfile.schema import TABLES, RuleTable
from auditor.report.figures import FIGURES
from auditor.rules import RULES
from auditor.rules.base import Rule
from auditor.schema import audit_schema
from auditor.verdict import CAUTIONS

ROOT = Path(__file__).resolve().parent.parent
DOCS = ROOT / "docs"
PAGES = [ROOT / "README.md", ROOT / "DEVELOPERS.md", *sorted(DOCS.rglob("*.md"))]

_LINK = re.compile(r"\]\(([^)\s]+)\)")
_BLOCK = re.compile(r"^```(\w+)\n(.*?)^```", re.DOTALL | re.MULTILINE)
_HEADING = re.compile(r"^#+ +(.+?) *$", re.MULTILINE)


def text(name: str) -> str:
    return (DOCS / name).read_text("utf-8")


def prose(page: str) -> str:
    """A page without its code blocks."""
    return _BLOCK.sub("", page)


def anchor(heading: str) -> str:
    """The name a heading can be linked by: lower case, signs dropped, blanks as hyphens."""
    return re.sub(r"[^\w\- ]", "", heading.lower()).replace(" ", "-")


def blocks(page: str, language: str) -> list[str]:
    return [body for kind, body in _BLOCK.findall(page) if kind == language]


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.relative_to(ROOT).as_posix())
def test_relative_links_resolve(page: Path) -> None:
    for link in _LINK.findall(prose(page.read_text("utf-8"))):
        if "://" in link:
            continue
        path, _, place = link.partition("#")
        target = (page.parent / path).resolve() if path else page
        assert target.is_file(), f"{link} leads nowhere"
        if place:
            headings = _HEADING.findall(prose(target.read_text("utf-8")))
            assert place in map(anchor, headings), f"{link} names no heading"


def test_every_page_can_be_reached_from_the_readme() -> None:
    seen, waiting = set(), [ROOT / "README.md"]
    while waiting:
        page = waiting.pop()
        if page in seen or page.suffix != ".md":
            continue
        seen.add(page)
        links = (link.partition("#")[0] for link in _LINK.findall(prose(page.read_text("utf-8"))) if "://" not in link)
        waiting += [(page.parent / link).resolve() for link in links if link]
    assert set(PAGES) <= seen


@pytest.mark.parametrize("rule", RULES.values(), ids=list(RULES))
def test_every_rule_has_a_page_with_its_formula_and_settings(rule: Rule) -> None:
    page = text(f"rules/{rule.name}.md")
    assert rule.formula in page
    assert all(f"| `{setting.name}` |" in page for setting in rule.settings)
    flat = " ".join(page.split())
    assert f"**Wins.** {rule.wins}" in flat
    assert f"**Loses.** {rule.loses}" in flat
    assert "**Worked example.**" in page
    assert f"../rules/{rule.name}.md" in text("rooms/rules.md")


def test_every_danger_is_on_its_page() -> None:
    page = text("rooms/dangers.md")
    assert [d.CAUSE for d in DETECTORS if f"| `{d.CAUSE}` |" not in page] == []


def test_every_finding_is_on_its_page_in_order() -> None:
    kinds = re.findall(r"^\| `([a-z-]+)` \|", text("findings.md"), re.MULTILINE)
    assert kinds[: len(CHECKS)] == list(CHECKS)


def test_every_command_figure_and_caution_is_described() -> None:
    commands = typer.main.get_command(app).commands  # type: ignore[attr-defined]
    assert all(f"| `auditor {name}" in text("rooms/commands.md") for name in commands)
    assert all(f"`{name}`" in text("rooms/report.md") for name in FIGURES)
    told = " ".join(text("rooms/verdict.md").split())
    assert all(caution in told for caution in CAUTIONS)


def keys_of(model: type[BaseModel]) -> Iterator[str]:
    """Every key of a table and of the tables in it."""
    for key, field in fields_of(model).items():
        yield key
        for inner in models_in(field.annotation):
            yield from keys_of(inner)


def models_in(annotation: Any) -> Iterator[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    for part in get_args(annotation):
        yield from models_in(part)


@pytest.mark.parametrize("name", [*TABLES, "rules"])
def test_every_key_of_the_loop_file_is_described(name: str) -> None:
    page = text("loop-file.md")
    assert f"[{name}]" in page
    model = RuleTable if name == "rules" else TABLES[name]
    written = set(re.findall(r"[a-z_]+", " ".join(re.findall(r"`([^`\n]+)`", page))))
    assert [key for key in keys_of(model) if key not in written] == []


def test_toml_examples_parse_and_the_whole_ones_are_accepted(tmp_path: Path) -> None:
    examples = [*blocks((ROOT / "README.md").read_text("utf-8"), "toml"), *blocks(text("loop-file.md"), "toml")]
    assert len(examples) >= 2
    for number, example in enumerate(examples):
        if "loop" in tomllib.loads(example):
            path = tmp_path / f"{number}.toml"
            path.write_text(example, "utf-8")
            read_loop(path)


def test_python_examples_use_public_names() -> None:
    for example in blocks((ROOT / "README.md").read_text("utf-8"), "python"):
        used = {
            node.attr
            for node in ast.walk(ast.parse(example))
            if isinstance(node, ast.Attribute) and isinstance(node.value, ast.Name) and node.value.id == "au"
        }
        assert used
        assert used <= set(auditor.__all__)


def fields_in(schema: Mapping[str, Any]) -> Iterator[str]:
    """Every property name of a JSON Schema."""
    for key, value in schema.items():
        if key == "properties":
            yield from value
        for inner in value if isinstance(value, list) else [value]:
            if isinstance(inner, Mapping):
                yield from fields_in(inner)


def test_every_field_of_audit_json_is_described() -> None:
    written = set(re.findall(r"\w+", " ".join(re.findall(r"`([^`\n]+)`", text("audit-json.md")))))
    assert sorted(set(fields_in(audit_schema())) - written) == []


def test_sections_and_equations_cited_in_the_code_exist() -> None:
    method = text("method.md")
    headings = {h.split()[0].rstrip(".") for h in _HEADING.findall(method)}
    for path in (ROOT / "auditor").rglob("*.py"):
        source = path.read_text("utf-8")
        for section in re.findall(r"[Mm]ethod,? §([0-9.]*[0-9])", source):
            assert section in headings, f"{path.name} cites method, §{section}"
        for equation in re.findall(r"equations? \(?([0-9]\.[0-9])", source):
            assert f"({equation})" in method, f"{path.name} cites equation {equation}"
