from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from matplotlib.figure import Figure
from matplotlib.text import Text

from auditor.audit import Audit
from auditor.dangers.interval import Flag
from auditor.report.content import Content, gather
from auditor.report.figures import FIGURES, dangers, draws, style, trade_off, window
from auditor.report.figures.labels import PLACES, Label, place_labels
from tests.report import fake_audit


@pytest.fixture(scope="module")
def content(audit: Audit) -> Content:
    return gather(audit)


@pytest.fixture(autouse=True)
def _styled():
    with style.drawing():
        yield


def _svg(figure: Figure | None) -> str:
    assert figure is not None
    return style.svg(figure)


def test_curves_hold_the_answered_settings_and_their_undominated_edge(content: Content) -> None:
    curves = {curve.name: curve for curve in trade_off.curves_of(content)}
    assert set(curves) == {"periodic", "send-on-delta", "send-on-area", "error-area", "actuator-deadband"}
    assert curves["periodic"].clock
    assert curves["send-on-delta"].focus
    assert len(curves["send-on-delta"].rates) == 9  # one of ten is refused
    for curve in curves.values():
        for i in range(len(curve.rates)):
            beaten = ((curve.rates <= curve.rates[i]) & (curve.errors < curve.errors[i])).any()
            assert (i in curve.edge) == (not beaten)


def test_whiskers_are_the_intervals_in_updates_per_hour(content: Content) -> None:
    curve = next(c for c in trade_off.curves_of(content) if c.focus)
    replay = content.replay
    assert replay is not None
    at = int(np.flatnonzero(curve.rates == replay.measures.updates_per_hour)[0])
    low, high = replay.interval90["updates"]
    np.testing.assert_allclose(
        curve.rate_ends[at], (low / replay.measures.hours, high / replay.measures.hours), rtol=1e-15
    )


def test_the_trade_off_names_every_rule_the_record_and_the_choice(content: Content) -> None:
    text = _svg(trade_off.compose(content))
    for name in (
        "send-on-delta",
        "send-on-area",
        "the clock, slowed down",
        "the record",
        "recommended",
        "RMS error [m]",
    ):
        assert name in text
    kept = _svg(trade_off.compose(gather(fake_audit.kept(content.audit))))
    assert "best candidate" in kept
    assert "recommended" not in kept


def test_labels_do_not_cover_each_other() -> None:
    figure = style.new_figure(4.0)
    axes = figure.add_subplot()
    axes.set(xlim=(0, 1), ylim=(0, 1))
    style.settle(figure)
    labels = [Label(text=f"curve number {n}", x=0.5 + 0.01 * n, y=0.5, color=style.INK) for n in range(8)]
    place_labels(axes, labels, np.array([(label.x, label.y) for label in labels]))
    figure.draw_without_rendering()
    boxes = [Text.get_window_extent(text).get_points() for text in axes.texts]  # without leaders
    for i, one in enumerate(boxes):
        assert not any((one[0] < other[1]).all() and (other[0] < one[1]).all() for other in boxes[:i])
    assert len(PLACES) == len(set(PLACES))


def test_the_window_shows_the_most_severe_flag(content: Content) -> None:
    chosen = window.telling_window(content)
    assert chosen is not None
    own = [flag for flag in content.audit.flags if flag.replay == content.focus]
    assert chosen.flag is not None
    assert chosen.flag.values["share"] == max(flag.values["share"] for flag in own)
    assert chosen.start <= chosen.flag.start
    assert chosen.flag.stop <= chosen.stop


def test_without_flags_of_weight_the_window_shows_the_largest_error(content: Content) -> None:
    slight = [replace(flag, values={"share": 0.06}) for flag in content.audit.flags if flag.replay == content.focus]
    calm = gather(replace(content.audit, flags=tuple(slight)))
    chosen = window.telling_window(calm)
    assert chosen is not None
    assert calm.replay is not None
    assert calm.replay.series is not None
    error = np.abs(calm.audit.record.r - calm.replay.series.y)
    error[~calm.audit.record.in_span] = 0
    assert chosen.start <= int(np.argmax(error)) < chosen.stop
    assert 120 <= chosen.stop - chosen.start <= 900


def test_a_flag_longer_than_a_page_shows_from_its_start(content: Content) -> None:
    assert content.focus is not None
    long = Flag(
        replay=content.focus,
        start=3_000,
        stop=9_000,
        cause="growth",
        severity="danger",
        detail="",
        values={"share": 1.0},
    )
    chosen = window.telling_window(gather(replace(content.audit, flags=(long,))))
    assert chosen is not None
    assert chosen.start <= 3_000 < chosen.stop


def test_the_strip_has_a_row_per_cause_and_per_other_dangerous_setting(content: Content) -> None:
    rows = dangers.rows_of(content)
    own = {flag.cause for flag in content.audit.flags if flag.replay == content.focus}
    others = content.shown[1:]
    assert len(rows) == len(own) + len(others)
    assert [row.name.split(" ·")[0] for row in rows[len(own) :]] == [str(i) for i in others]
    assert all(flag.severity == "danger" for row in rows[len(own) :] for flag in row.flags)


def test_a_naive_answer_out_of_the_picture_is_named_at_its_edge(content: Content) -> None:
    text = _svg(draws.compose(content))
    replay = content.replay
    assert replay is not None
    assert replay.naive_updates > replay.interval90["updates"][1] * 1.1
    assert "without a model: " in text
    assert "→" in text


def test_every_picture_handles_missing_parts(audit: Audit) -> None:
    drawn = {}
    for name, case in (("model", fake_audit.without_model(audit)), ("answers", fake_audit.without_answers(audit))):
        content = gather(case)
        drawn[name] = {figure for figure, compose in FIGURES.items() if compose(content) is not None}
    assert drawn == {"model": {"record", "spans"}, "answers": {"record", "spans", "step-response"}}


def test_names_are_never_read_as_formulas(audit: Audit) -> None:
    signals = replace(
        audit.loop.signals, measurement=replace(audit.loop.signals.measurement, unit="$\\frac{m}{s$ <b> 液位")
    )
    content = gather(replace(audit, loop=replace(audit.loop, signals=signals)))
    text = _svg(trade_off.compose(content))
    assert "$\\frac{m}{s$ &lt;b&gt; 液位" in text
