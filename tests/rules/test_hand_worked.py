"""Each rule on a short series worked out by hand; the series stands in the test, the answer beside it."""

from __future__ import annotations

import numpy as np
import pytest

from auditor.errors import RuleError
from auditor.kernels import rows as R
from auditor.rules import RULES, get_rule
from auditor.rules.base import Rule


def drive(
    rule: Rule,
    values: dict[str, float],
    x: list[float],
    *,
    period: float = 1.0,
    y_hat: list[float] | None = None,
    e: list[float] | None = None,
) -> list[int]:
    """Feed a rule's compiled function sample by sample; return where it asks to update."""
    values = rule.complete(values)
    packed = np.ascontiguousarray(np.array(rule.pack(values, period), dtype=float)[:, None])
    memory = np.zeros((rule.memory_rows(values, period), 1))
    now, sent = np.zeros((R.SIGNALS, 1)), np.zeros((R.SIGNALS, 1))
    since = np.zeros(1, dtype=np.int64)
    out = np.zeros(1, dtype=np.uint8)
    fired = []
    for k, value in enumerate(x):
        now[R.WATCHED] = now[R.MEASUREMENT] = value
        now[R.ERROR] = value if e is None else e[k]
        now[R.PREDICTED] = 0.0 if y_hat is None else y_hat[k]
        rule.fires(now, sent, since, memory, packed, out)
        update = k == 0 or bool(out[0])
        if update:
            sent[:] = now
            if k:
                fired.append(k)
        since[0] = 1 if update else since[0] + 1
    return fired


def test_periodic_counts_samples_and_starts_with_its_phase() -> None:
    assert drive(RULES["periodic"], {"every": 3}, [0.0] * 10) == [3, 6, 9]
    assert drive(RULES["periodic"], {"every": 3, "phase": 1}, [0.0] * 9) == [1, 4, 7]


def test_send_on_delta_compares_with_what_was_sent_and_needs_more_than_delta() -> None:
    # 0.5 away is not more than 0.5; 0.6 is. Then 0.6 is the value sent: 0.2 is 0.4 away, 0.0 is 0.6 away.
    assert drive(RULES["send-on-delta"], {"delta": 0.5}, [0.0, 0.5, 0.6, 0.2, 0.0]) == [2, 4]


def test_actuator_deadband_is_send_on_delta_on_the_command() -> None:
    assert RULES["actuator-deadband"].link == "actuator"
    assert drive(RULES["actuator-deadband"], {"delta": 1.0}, [10.0, 11.0, 11.5, 12.4, 12.6]) == [2, 4]


def test_level_crossing_moves_its_line_by_whole_spacings() -> None:
    # Line 0. 0.9: none. 1.0: line 1 reached. 0.1: 0.9 away, none. −0.2: 1.2 away, line 0. 2.7: line 2. 2.9: none.
    assert drive(RULES["level-crossing"], {"spacing": 1.0}, [0.0, 0.9, 1.0, 0.1, -0.2, 2.7, 2.9]) == [2, 4, 5]


def test_level_crossing_hysteresis_asks_for_further_travel() -> None:
    assert drive(RULES["level-crossing"], {"spacing": 1.0, "hysteresis": 0.3}, [0.0, 1.2, 1.3, 0.1, -0.4]) == [2, 4]


def test_send_on_area_sums_since_the_update_in_units_times_seconds() -> None:
    # h = 2 s: sums 2·(0.1, 0.3, 0.6) = 0.2, 0.6, 1.2 > 1.0 at sample 3; restarts: 2·0.4, 2·0.8 = 1.6 > 1 at sample 5.
    assert drive(RULES["send-on-area"], {"area": 1.0}, [0.0, 0.1, 0.2, 0.3, 0.7, 0.7], period=2.0) == [3, 5]


def test_error_area_sums_the_error_itself() -> None:
    # Constant error 0.4, h = 1: 0.4, 0.8, 1.2 > 1 at sample 3, and again three later.
    assert drive(RULES["error-area"], {"area": 1.0}, [0.4] * 7) == [3, 6]


def test_error_area_also_sends_a_move_larger_than_delta() -> None:
    assert drive(RULES["error-area"], {"area": 100.0, "delta": 0.5}, [0.0, 0.4, 0.6, 0.7]) == [2]


def test_linear_prediction_follows_a_ramp_silently() -> None:
    # At the start the slope is not known and taken as zero: the ramp is 3 away after 3 samples (> 2.5). The slope of
    # the two samples before is 1 per sample: the line is followed until the ramp stops at 6; 9 − 6 = 3 at sample 9.
    ramp = [0.0, 1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 6.0, 6.0, 6.0]
    assert drive(RULES["linear-prediction"], {"delta": 2.5, "window_s": 2.0}, ramp) == [3, 9]


def test_model_prediction_compares_with_the_model() -> None:
    assert drive(RULES["model-prediction"], {"delta": 0.5}, [0.0, 1.0, 1.2], y_hat=[0.0, 0.6, 0.6]) == [2]


def test_unknown_rule_names_the_nearest() -> None:
    with pytest.raises(RuleError, match="did you mean 'send-on-delta'"):
        get_rule("send_on_delta")


def test_unknown_missing_and_negative_settings_are_told_together() -> None:
    with pytest.raises(RuleError) as caught:
        RULES["linear-prediction"].complete({"dleta": 1.0, "window_s": -2.0})
    text = str(caught.value)
    assert "no setting 'dleta'" in text
    assert "did you mean 'delta'" in text
    assert "needs the setting 'delta'" in text
    assert "'window_s' of rule 'linear-prediction' is out of range" in text


@pytest.mark.parametrize("rule", RULES.values(), ids=list(RULES))
def test_every_rule_tells_people_what_they_need(rule: Rule) -> None:
    assert rule.formula
    assert rule.source
    assert rule.wins
    assert rule.loses
    assert all(s.meaning for s in rule.settings)
