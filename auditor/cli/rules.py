"""`auditor rules`: the trigger rules, each with formula, settings with units, source."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated

import typer

from auditor.cli.screen import paragraph, table

if TYPE_CHECKING:
    from auditor.rules import Rule


def register(app: typer.Typer) -> None:
    """Add the command."""

    @app.command("rules", help="The trigger rules, each with formula, settings with units, source.")
    def command(
        name: Annotated[str | None, typer.Argument(metavar="[NAME]", help="A rule; all when left out.")] = None,
    ) -> None:
        from auditor.rules import RULES, get_rule

        if name is not None:
            print(page(get_rule(name)))
            return
        print(table(["rule", "updates when"], [[r.name, r.formula] for r in RULES.values()]))
        print("\nGuards for every rule: min_gap, max_silence. `auditor rules NAME` tells more.")


def page(rule: Rule) -> str:
    """One rule in full."""
    rows = [
        [s.name, s.unit or "-", "must be given" if s.default is None else f"{s.default:g}", s.meaning]
        for s in rule.settings
    ]
    parts = [
        rule.name,
        "=" * len(rule.name),
        paragraph(f"updates when   {rule.formula}"),
        paragraph(f"source         {rule.source}"),
        paragraph(f"default link   {rule.link}"),
        "",
        table(["setting", "unit", "default", "meaning"], rows),
        "",
        paragraph(f"Wins: {rule.wins}"),
        paragraph(f"Loses: {rule.loses}"),
        "",
        paragraph(
            "Guards for every rule: min_gap (no update sooner; the request stays latched) and max_silence (an update "
            "at the latest then; inherited from limits.max_silence)."
        ),
    ]
    return "\n".join(parts)
