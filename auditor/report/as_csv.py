"""`replays.csv` and `flags.csv`: tables for a spreadsheet; UTF-8, comma, one header line, times in UTC."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import pandas as pd

from auditor.audit import Audit
from auditor.loop import Loop
from auditor.replay import Replay, Setting
from auditor.report.as_json import MEASURES, finite, flag_object, replay_object
from auditor.report.content import FlagCount, flag_counts
from auditor.report.phrases import settings_text
from auditor.sweep import INTERVALS

_STARTS_A_FORMULA = ("=", "+", "-", "@", "\t", "\r")
_PLAIN = (
    "answerable",
    "refusal",
    "trust",
    "naive_updates",
    "naive_rms_error",
    "against_periodic",
    "against_periodic_rest",
    "periodic_rms_error",
    "flags",
    "danger_flags",
    "flagged_s",
)


def replays_csv(audit: Audit) -> str:
    """Write one line per replay: settings, measures, intervals, and the measures on both parts."""
    return _table(_replay_rows(audit))


def flags_csv(audit: Audit) -> str:
    """Write one line per flag, all of them."""
    columns = ("replay", "rule", "link", "settings", "start", "end", "cause", "severity", "share", "detail", "values")
    return _table([_flag_row(audit, i) for i in range(len(audit.flags))], columns)


def replays_frame(audit: Audit) -> pd.DataFrame:
    """Return `replays.csv` as a table, with the same columns."""
    return pd.DataFrame(_replay_rows(audit))


def _replay_rows(audit: Audit) -> list[dict[str, Any]]:
    names = sorted({name for replay in audit.replays for name in replay.setting.settings})
    pairs = zip(audit.replays, flag_counts(audit), strict=True)
    return [{"replay": i, **_replay_row(r, c, names, audit.loop)} for i, (r, c) in enumerate(pairs)]


def _replay_row(replay: Replay, count: FlagCount, names: Sequence[str], loop: Loop) -> dict[str, Any]:
    facts = replay_object(replay, count)
    row = _setting_cells(replay.setting, loop)
    row |= {f"setting_{name}": replay.setting.settings.get(name) for name in names}
    for name in MEASURES:
        row[name] = facts[name]
        if name in INTERVALS:
            row |= _ends(name, facts["interval90"][name])
    row |= {name: facts[name] for name in _PLAIN}
    row |= _ends("rms_difference", facts["rms_difference90"] or (None, None))
    for part in ("first", "rest"):
        row |= {f"{part}_{name}": value for name, value in facts[part].items()}
    return row


def _setting_cells(setting: Setting, loop: Loop) -> dict[str, Any]:
    return {"rule": setting.rule, "link": setting.link, "settings": settings_text(setting, loop, full=True)}


def _ends(name: str, interval: Sequence[float | None]) -> dict[str, float | None]:
    return {f"{name}_low90": interval[0], f"{name}_high90": interval[1]}


def _flag_row(audit: Audit, i: int) -> dict[str, Any]:
    flag = audit.flags[i]
    facts = flag_object(flag, audit.record)
    values = facts.pop("values")
    facts |= _setting_cells(audit.replays[flag.replay].setting, audit.loop)
    listed = "; ".join(f"{name}={value!r}" for name, value in finite(values).items() if name != "share")
    return facts | {"share": values.get("share"), "values": listed}


def _table(rows: Sequence[Mapping[str, Any]], columns: Iterable[str] = ()) -> str:
    header = list(columns) or (list(rows[0]) if rows else ["replay", "rule", "link", "settings"])
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow([cell(name) for name in header])
    writer.writerows([cell(row[name]) for name in header] for row in rows)
    return text.getvalue()


def cell(value: Any) -> str:
    """Write one cell; a text that a spreadsheet would run as a formula is made plain text with a leading '."""
    known = finite(value)
    if known is None:
        return ""
    if isinstance(known, bool):
        return "true" if known else "false"
    if isinstance(known, str):
        # Characters that a spreadsheet skips must not hide a formula behind them.
        return f"'{known}" if known.lstrip(" \n\x00").startswith(_STARTS_A_FORMULA) else known.replace("\x00", " ")
    return repr(known)
