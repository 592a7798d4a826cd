from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from auditor.audit import Audit
from auditor.identify.plant import Plant
from auditor.report.parameters import lag_intervals, parameter_interval, step_responses
from tests.report.fake_audit import DELAY, GAIN, LAG, PERIOD


def _plain_step(plant: Plant, samples: int) -> np.ndarray:
    """Equation 2.1 taken one sample at a time."""
    x, answer = np.zeros(plant.order), []
    for k in range(samples):
        answer.append(plant.C @ x)
        x = plant.A @ x + plant.B0 * (k - plant.delay >= 0) + plant.B1 * (k - plant.delay - 1 >= 0)
    return np.array(answer)


@pytest.mark.parametrize("period_share", [1.0, 0.1])
def test_the_step_response_is_equation_2_1(audit: Audit, period_share: float) -> None:
    assert audit.model is not None
    plant = replace(
        audit.model.likeliest,
        A=np.array([[0.97, 0.02], [0.0, 0.9]]),
        B0=np.array([0.001, 0.03]),
        B1=np.array([0.002, 0.01]),
        C=np.array([1.0, 0.2]),
        delay=3,
    )
    model = replace(audit.model, plants=(plant,), best=0, period=PERIOD * period_share)
    answers = step_responses(model)
    samples = np.rint(answers.seconds / model.period).astype(int)
    plain = _plain_step(plant, samples[-1] + 1)[samples]
    # Powers of the matrix instead of single steps: rounding of a few hundred products.
    np.testing.assert_allclose(answers.likeliest, plain, rtol=1e-10, atol=1e-14)


def test_a_first_order_plant_ends_at_its_gain_after_its_dead_time(audit: Audit) -> None:
    assert audit.model is not None
    answers = step_responses(audit.model)
    assert answers.all.shape == (24, len(answers.seconds))
    assert (answers.likeliest[answers.seconds <= DELAY * PERIOD] == 0).all()
    # Five lags after the dead time 1 − e⁻⁵ = 0.9933 of the gain is reached.
    assert answers.likeliest[-1] == pytest.approx(
        GAIN * (1 - np.exp(-(answers.seconds[-1] - DELAY * PERIOD) / LAG)), rel=1e-6
    )


def test_intervals_over_the_draws(audit: Audit) -> None:
    assert audit.model is not None
    gains = [plant.gain for plant in audit.model.plants]
    assert parameter_interval(audit.model, "gain") == tuple(np.quantile(gains, (0.05, 0.95)))
    assert parameter_interval(audit.model, "gain_per_s") is None
    lags = [plant.time_constants_s[0] for plant in audit.model.plants]
    assert lag_intervals(audit.model) == [tuple(np.quantile(lags, (0.05, 0.95)))]
    assert parameter_interval(None, "gain") is None
    assert lag_intervals(None) == []
