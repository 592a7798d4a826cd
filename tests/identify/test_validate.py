"""Free runs and setpoint moves, on records where the answer is known."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.signal import lfilter

from auditor.identify import validate
from auditor.identify.family import family, to_plant
from auditor.logs.record import Span
from tests.identify.spectral_cases import CONTROLLER, DELAY, GAIN, LAG, PERIOD, loop_record, record_of

TRUTH = np.array([np.log(GAIN / LAG * 2.0), -np.log(LAG), 0.0, DELAY, -4.0, -14.0, 0.0, 0.0])
PLANT = to_plant(TRUTH, (0, 0), PERIOD, 2.0, family("self-regulating", 0.01))


def test_free_run_is_the_filtered_input() -> None:
    u = np.random.default_rng(1).normal(size=300)
    a, late = np.exp(-1 / LAG), np.exp(-0.5 / LAG)
    b = np.concatenate([np.zeros(7), GAIN * np.array([1 - late, late - a])])
    # Same sums in another order.
    np.testing.assert_allclose(validate.free_run(PLANT, u), lfilter(b, [1, -a], u - u.mean()), atol=1e-14)


def test_a_record_made_by_the_plant_alone_is_explained() -> None:
    u = np.repeat(np.random.default_rng(1).normal(size=40), 50)
    y = 20.0 + validate.free_run(PLANT, u)
    record = record_of(y, u + 3.0)
    # ŷ starts from rest at the mean of u as y did.
    assert validate.explained_percent(PLANT, record) == pytest.approx(100.0, abs=1e-9)
    noisy = replace(record, y=y + np.std(y) * np.random.default_rng(2).normal(size=len(y)))
    # ‖y − ŷ‖ / ‖y − ȳ‖ = 1/√2; deviation of the noise's own over 2000 samples about 1 %.
    assert validate.explained_percent(PLANT, noisy) == pytest.approx(100.0 * (1.0 - np.sqrt(0.5)), abs=2.0)


def test_a_plant_of_the_wrong_sign_explains_less_than_nothing() -> None:
    u = np.repeat(np.random.default_rng(1).normal(size=40), 50)
    record = record_of(validate.free_run(PLANT, u), u)
    wrong = replace(PLANT, C=-PLANT.C)
    assert validate.explained_percent(wrong, record) == pytest.approx(-100.0, abs=1e-9)


def test_nothing_moves_nothing_to_explain() -> None:
    assert validate.explained_percent(PLANT, record_of(np.ones(100), np.ones(100))) is None


def test_held_out_part_of_a_loop_driven_by_its_setpoint_is_explained() -> None:
    record = loop_record(moves=30)
    found = validate.held_out_percent(record, CONTROLLER, plant=None)
    truth = validate.explained_percent(PLANT, validate.split(record, 0.6)[1])
    # The load the truth cannot explain either; the fitted plant comes close to it.
    assert truth > 30.0
    assert found == pytest.approx(truth, abs=10.0)


def test_a_short_record_has_no_held_out_figure() -> None:
    assert validate.held_out_percent(loop_record(N=1200), CONTROLLER, plant=None) is None
    assert validate.held_out_percent(loop_record(N=2000), CONTROLLER, plant="unstable") is None


def test_split_cuts_time_inside_spans() -> None:
    record = replace(loop_record(N=1000), spans=(Span(0, 400), Span(500, 600), Span(700, 1000)))
    first, rest = validate.split(record, 0.6)
    assert first.spans == (Span(0, 400), Span(500, 580))
    assert rest.spans == (Span(580, 600), Span(700, 1000))


def moves(r: np.ndarray, **more: object) -> int:
    y = r + 0.1 * np.random.default_rng(1).normal(size=len(r))
    return validate.setpoint_moves(replace(record_of(y, y, r), **more))


def test_steps_beyond_two_deviations_count() -> None:
    r = np.zeros(2000)
    r[500:], r[900:], r[1300:] = 1.0, 1.1, -1.0  # the step of 0.1 is one deviation
    assert moves(r) == 2


def test_a_ramp_within_the_window_is_one_move_and_a_slow_one_none() -> None:
    quick = np.interp(np.arange(2000), [500, 515], [0.0, 1.0])
    slow = np.interp(np.arange(2000), [500, 1500], [0.0, 1.0])
    assert moves(quick) == 1
    assert moves(slow) == 0


def test_a_step_across_a_hole_is_no_move() -> None:
    r = np.where(np.arange(2000) < 1000, 0.0, 1.0)
    assert moves(r, spans=(Span(0, 1000), Span(1000, 2000))) == 0
    assert moves(r, spans=()) == 0
