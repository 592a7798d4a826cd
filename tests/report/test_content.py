from __future__ import annotations

from dataclasses import replace

import pytest

from auditor.audit import SHOWN_DANGERS, Audit
from auditor.dangers.interval import Flag
from auditor.objections import accepted_rms_error
from auditor.report.content import SHOWN_FLAGS, flag_counts, gather
from tests.report import fake_audit


def _flag(replay: int, start: int, stop: int, severity: str = "watch", share: float = 0.3) -> Flag:
    return Flag(
        replay=replay, start=start, stop=stop, cause="limit", severity=severity, detail="", values={"share": share}
    )


def test_the_pages_are_about_the_recommended_replay(audit: Audit) -> None:
    content = gather(audit)
    assert content.recommended
    assert content.focus == audit.recommendation.replay == content.shown[0]
    assert [option.role for option in content.options] == [
        "recommended",
        "runner-up",
        "present clock",
        "slowed-down clock",
    ]


def test_without_a_recommendation_the_best_candidate_is_within_the_accepted_error(audit: Audit) -> None:
    content = gather(fake_audit.kept(audit))
    assert not content.recommended
    best = content.replay
    assert best is not None
    limit = accepted_rms_error(audit.loop, audit.baseline)
    assert limit is not None
    assert best.interval90["rms_error"][1] <= limit
    rivals = [
        r
        for r in audit.replays
        if r.answerable and r.setting.rule != "periodic" and r.interval90["rms_error"][1] <= limit
    ]
    assert best.measures.saved_fraction == max(r.measures.saved_fraction for r in rivals)


def test_a_choice_that_is_not_decided_is_a_candidate(audit: Audit) -> None:
    undecided = gather(replace(audit, verdict=replace(audit.verdict, decision="undecided")))
    assert undecided.focus == audit.recommendation.replay
    assert not undecided.recommended
    assert undecided.options[0].role == "best candidate"


def test_with_too_strict_an_error_the_candidate_still_saves_what_is_wanted(audit: Audit) -> None:
    strict = replace(audit.loop, accept=replace(audit.loop.accept, max_rms_error=1e-6, min_saved_fraction=0.9))
    best = gather(replace(fake_audit.kept(audit), loop=strict)).replay
    assert best is not None
    assert best.measures.saved_fraction >= 0.9


def test_the_slowed_down_clock_uses_no_more_updates(audit: Audit) -> None:
    options = {option.role: option for option in gather(audit).options}
    clock, chosen = options["slowed-down clock"], options["recommended"]
    assert clock.measures.updates <= chosen.measures.updates
    fewer = [r for r in audit.replays if r.setting.rule == "periodic" and r.measures.updates <= chosen.measures.updates]
    assert clock.measures.rms_error == min(r.measures.rms_error for r in fewer)


def test_the_runner_up_is_another_rule(audit: Audit) -> None:
    options = {option.role: option for option in gather(audit).options}
    first, second = options["recommended"].replay, options["runner-up"].replay
    assert first is not None
    assert second is not None
    assert first.setting.rule != second.setting.rule
    assert second.setting.rule != "periodic"


def test_no_answers_leave_the_record_alone(audit: Audit) -> None:
    for bare in (fake_audit.without_model(audit), fake_audit.without_answers(audit)):
        content = gather(bare)
        assert content.focus is None
        assert [option.role for option in content.options] == ["present clock"]
        assert content.shown == ()


def test_flagged_time_counts_overlaps_once(audit: Audit) -> None:
    flags = (_flag(2, 10, 20), _flag(2, 15, 30, "danger"), _flag(2, 16, 18), _flag(2, 40, 41), _flag(5, 0, 3))
    counts = flag_counts(replace(audit, flags=flags))
    assert (counts[2].watch, counts[2].danger) == (3, 1)
    assert counts[2].flagged_s == 21 * fake_audit.PERIOD
    assert counts[5].flagged_s == 3 * fake_audit.PERIOD
    assert counts[0].flagged_s == 0.0


def test_hundreds_of_dangerous_replays_are_told_but_not_all_shown(audit: Audit) -> None:
    content = gather(fake_audit.many(audit))
    replays = content.audit.replays
    dangerous = {
        flag.replay for flag in content.audit.flags if flag.severity == "danger" and replays[flag.replay].answerable
    }
    assert len(content.shown) == 1 + SHOWN_DANGERS
    assert content.hidden == len(dangerous - {content.focus}) - SHOWN_DANGERS
    assert content.hidden > 100


def test_flags_are_shown_most_severe_first_and_the_rest_counted(audit: Audit) -> None:
    focus = audit.recommendation.replay
    assert focus is not None
    flags = (*tuple(_flag(focus, k, k + 1, share=k / 1000) for k in range(100)), _flag(focus, 500, 501, "danger", 0.6))
    content = gather(replace(audit, flags=flags))
    assert len(content.flags) == SHOWN_FLAGS
    assert content.flags_left_out == 101 - SHOWN_FLAGS
    assert content.flags[0].severity == "danger"
    shares = [flag.values["share"] for flag in content.flags[1:]]
    assert shares == sorted(shares, reverse=True)


def test_own_flags_come_before_those_of_others(audit: Audit) -> None:
    focus = audit.recommendation.replay
    assert focus is not None
    flags = (_flag(39, 1, 9, "danger", 1.0), _flag(focus, 5, 6, share=0.1))
    assert [flag.replay for flag in gather(replace(audit, flags=flags)).flags] == [focus, 39]


def test_the_accepted_error_is_the_stated_one_or_a_quarter_more_than_the_record(audit: Audit) -> None:
    assert audit.baseline is not None
    assert accepted_rms_error(audit.loop, audit.baseline) == pytest.approx(1.25 * audit.baseline.rms_error, rel=1e-15)
    stated = replace(audit.loop, accept=replace(audit.loop.accept, max_rms_error=0.05))
    assert accepted_rms_error(stated, audit.baseline) == 0.05
    assert accepted_rms_error(audit.loop, None) is None
