"""From what was found to guesses, each with its key, value, reason and how sure it is."""

from __future__ import annotations

import json
import os
import re
from collections.abc import Iterator, Sequence
from pathlib import Path

import numpy as np

from auditor.draft.clock import period_text
from auditor.draft.columns import Column
from auditor.draft.extent import Extent
from auditor.draft.guess import CHECK, LIKELY, SURE, Guess
from auditor.draft.ranges import actuator_range, constant_setpoint
from auditor.draft.roles import Roles, word_for
from auditor.draft.survey import Survey

_FOUND_ANYWAY = ("%d.%m.%Y", "%Y-", "%Y/", "%Y.", "%d-%b-%Y", "%d %b %Y")
_NO_ROLES = "fewer than two columns of numbers move, so that no loop can be seen: name it, or export more columns"


def quoted(text: str) -> str:
    """Write text as a TOML string."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def plain_number(value: float) -> str:
    """Write a number as TOML takes it, without a fraction when it is whole."""
    return f"{value:.12g}"


def loop_guesses(found: Survey, log: Path) -> Iterator[Guess]:
    """Guess `[loop]`."""
    name = re.sub(r"[^\w .+-]+", "-", log.name.split(".")[0], flags=re.ASCII).strip(" .-_") or "loop"
    yield Guess(key="loop.name", value=quoted(name), reason="taken from the log's own name", sure=LIKELY)
    order = found.order
    if order is None or order.gap <= 0:
        yield Guess(key="loop.period", value="", reason="no time column was found", sure=CHECK)
        return
    reason = (
        f"{100 * order.regular:.1f} % of the log's rows are {order.gap:.4g} s apart; "
        "state the loop's own period if it runs faster or slower than its log"
    )
    sure = LIKELY if order.regular > 0.9 else CHECK
    yield Guess(key="loop.period", value=quoted(period_text(order.gap)), reason=reason, sure=sure)


def log_guesses(found: Survey, log: Path, folder: Path) -> Iterator[Guess]:
    """Guess `[log]`; what is plain (UTF-8, comma, point) is left out."""
    yield Guess(key="log.path", value=quoted(_relative(log, folder)), reason="the log that was looked at", sure=SURE)
    if found.long is not None:
        reason = f"one row per time and tag; {found.long.tags} tags were seen"
        yield Guess(key="log.layout", value='"long"', reason=reason, sure=LIKELY)
    yield from _time_guesses(found)
    if found.long is not None:
        long = found.long
        yield Guess(
            key="log.tag", value=quoted(long.tag), reason="the column of few, often repeated texts", sure=LIKELY
        )
        yield Guess(key="log.value", value=quoted(long.value), reason="the only column of numbers", sure=LIKELY)
        if long.quality is not None:
            reason = "by its name; state good = […] to use only values of that quality"
            yield Guess(key="log.quality", value=quoted(long.quality), reason=reason, sure=LIKELY)
    yield from _dress_guesses(found)


def _relative(log: Path, folder: Path) -> str:
    try:
        return Path(os.path.relpath(log.absolute(), folder.absolute())).as_posix()
    except ValueError:
        return log.absolute().as_posix()


def _time_guesses(found: Survey) -> Iterator[Guess]:
    clock = found.clock
    if clock is None:
        reason = "no column reads as times that go forward; text times are best in ISO 8601 (2025-03-01T00:00:00Z)"
        yield Guess(key="log.time", value="", reason=reason, sure=CHECK)
        return
    yield _column(found, "log.time", clock.column, clock.reason, clock.sure)
    if clock.unit is not None:
        yield Guess(key="log.time_unit", value=quoted(clock.unit), reason="see time", sure=clock.sure)
    if clock.way is not None and (clock.other_way or not _is_found_anyway(clock.way)):
        reason = "the way the stamps are written" + (f"; {clock.other_way} fits as well" if clock.other_way else "")
        yield Guess(key="log.time_format", value=quoted(clock.way), reason=reason, sure=clock.sure)
    if found.zone is not None:
        value = quoted(found.zone.name) if found.zone.name else ""
        yield Guess(key="log.timezone", value=value, reason=found.zone.reason, sure=found.zone.sure)


def _is_found_anyway(way: str) -> bool:
    return way.startswith(_FOUND_ANYWAY) and "%M" in way and "%H.%M" not in way and "%Y%m" not in way


def _dress_guesses(found: Survey) -> Iterator[Guess]:
    dress = found.peek.dress
    if dress is None:
        return
    reason = "seen in the first lines"
    for key, value, usual in (
        ("delimiter", dress.delimiter, ","),
        ("decimal", dress.decimal, "."),
        ("encoding", dress.encoding, "utf-8"),
    ):
        if value != usual:
            yield Guess(key=f"log.{key}", value=quoted(value), reason=reason, sure=SURE)
    if dress.skip_rows:
        reason = "lines before the header" + ("; a line of units follows it" if dress.units else "")
        yield Guess(key="log.skip_rows", value=str(dress.skip_rows), reason=reason, sure=SURE)


def _column(found: Survey, key: str, name: str, reason: str, sure: str) -> Guess:
    own = found.written(name)
    if own:
        return Guess(key=key, value=quoted(own), reason=reason, sure=sure)
    if own is None:
        reason = f"{name} ({reason}), but two columns have this name: rename one of them"
    elif key == "log.time" and any(found.peek.written):
        return Guess(key=key, value='""', reason=f"the column without a name; {reason}", sure=sure)
    else:
        reason = f"{name} of the log ({reason}), but it has no name there: give it one in the header row"
    return Guess(key=key, value="", reason=reason, sure=sure)


def signal_guesses(found: Survey) -> Iterator[Guess]:
    """Guess `[signals]`: measurement, setpoint, actuator."""
    if found.roles is None:
        for role in ("measurement", "setpoint", "actuator"):
            yield Guess(key=f"signals.{role}.column", value="", reason=_NO_ROLES, sure=CHECK)
        return
    roles, columns = found.roles, found.candidates
    yield from _measurement(found, roles, columns)
    yield from _setpoint(found, roles, columns)
    yield from _actuator(found, roles, columns)


def _trust(roles: Roles, worded: bool) -> str:
    if roles.clear:
        return SURE
    ahead = roles.explained > 0.7 and roles.explained - roles.next_best > 0.1
    return LIKELY if ahead or worded else CHECK


def _measurement(found: Survey, roles: Roles, columns: Sequence[Column]) -> Iterator[Guess]:
    y, u = columns[roles.measurement], columns[roles.actuator]
    word = word_for(y.name, "measurement")
    law = (
        f"a control law on it explains {100 * roles.explained:.0f} % of the movement of {u.name} "
        f"(other choices at most {100 * roles.next_best:.0f} %)"
    )
    yield _column(
        found, "signals.measurement.column", y.name, _said(law, word), _trust(roles, _all_worded(roles, columns))
    )
    yield from _unit("measurement", y)


def _all_worded(roles: Roles, columns: Sequence[Column]) -> bool:
    y, u = columns[roles.measurement].name, columns[roles.actuator].name
    return word_for(y, "measurement") is not None and word_for(u, "actuator") is not None


def _said(reason: str, word: str | None) -> str:
    return f'{reason}; the name says "{word}"' if word else f"{reason}; the name says nothing about it"


def _unit(role: str, column: Column) -> Iterator[Guess]:
    if column.unit:
        reason = "stated in the log's header"
        yield Guess(key=f"signals.{role}.unit", value=quoted(column.unit), reason=reason, sure=SURE)


def _setpoint(found: Survey, roles: Roles, columns: Sequence[Column]) -> Iterator[Guess]:
    y = columns[roles.measurement]
    if roles.setpoint is None:
        value = plain_number(constant_setpoint(_extent(found).measurement))
        reason = f"no column behaves like a setpoint of {y.name}; this is where it stays on average"
        yield Guess(key="signals.setpoint.value", value=value, reason=reason, sure=CHECK)
        yield from _unit("setpoint", y)
        return
    r = columns[roles.setpoint]
    word = word_for(r.name, "setpoint")
    gained = roles.explained - roles.without_setpoint
    if gained > 0.05:
        reason = f"with it the law explains {100 * roles.explained:.0f} %, without {100 * roles.without_setpoint:.0f} %"
    else:
        reason = f"it moves seldom and {y.name} hovers around it"
    sure = SURE if gained > 0.15 or (word and gained > 0.05) else LIKELY if word or gained > 0.05 else CHECK
    yield _column(found, "signals.setpoint.column", r.name, _said(reason, word), sure)
    if r.unit and y.unit and r.unit != y.unit:
        return
    yield from _unit("setpoint", r)


def _actuator(found: Survey, roles: Roles, columns: Sequence[Column]) -> Iterator[Guess]:
    u = columns[roles.actuator]
    word = word_for(u.name, "actuator")
    reason = "it is what the law explains, see measurement"
    yield _column(
        found, "signals.actuator.column", u.name, _said(reason, word), _trust(roles, _all_worded(roles, columns))
    )
    yield from _unit("actuator", u)
    limits = actuator_range(_extent(found).actuator, u.unit)
    if limits.low is not None:
        yield Guess(key="signals.actuator.low", value=plain_number(limits.low), reason=limits.reason, sure=limits.sure)
    if limits.high is not None:
        reason = limits.reason if limits.low is None else limits.high_reason
        yield Guess(key="signals.actuator.high", value=plain_number(limits.high), reason=reason, sure=limits.sure)


def mode_guesses(found: Survey) -> Iterator[Guess]:
    """Guess `signals.mode`."""
    mode = found.mode
    if mode is None or not found.written(mode.column):
        return
    seen = ", ".join(mode.states)
    how = "one of them is a word for automatic" if mode.by_word else "the name speaks of a mode"
    sure = LIKELY if mode.by_word else CHECK
    yield Guess(key="signals.mode.column", value=quoted(mode.column), reason=f"it holds {seen}; {how}", sure=sure)
    values = f"[{', '.join(quoted(state) for state in mode.automatic)}]"
    reason = "other values are not replayed"
    yield Guess(key="signals.mode.automatic", value=values, reason=reason, sure=sure)


def hints(found: Survey) -> dict[str, str]:
    """Say what the record itself did, for the lines that only the owner can fill in."""
    if found.roles is None:
        return {}
    extent = _extent(found)
    unit = f" {found.candidates[found.roles.measurement].unit}".rstrip()
    where = "" if extent.whole else f", in the {extent.rows} rows looked at"
    where = (", in automatic" if extent.automatic_only else "") + where
    told = {
        "low": f"the record goes down to {np.min(extent.measurement):.5g}{unit}{where}",
        "high": f"the record goes up to {np.max(extent.measurement):.5g}{unit}{where}",
    }
    if len(extent.error):
        most = float(np.quantile(np.abs(extent.error), 0.99))
        told["band"] = f"99 % of the record's |error| is below {most:.3g}{unit}{where}"
    return told


def _extent(found: Survey) -> Extent:
    if found.extent is None:
        raise ValueError("a log without roles has no extent")
    return found.extent


def other_columns(found: Survey) -> list[Column]:
    """Return the columns of numbers that have no role: measured disturbances may be among them."""
    if found.roles is None:
        return []
    taken = {found.roles.measurement, found.roles.actuator, found.roles.setpoint}
    return [c for n, c in enumerate(found.candidates) if n not in taken and not c.constant]
