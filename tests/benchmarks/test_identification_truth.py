"""What the estimator is worth on loops whose truth is known: error and coverage of replayed answers.

Random loops (`truth.py`); send-on-delta with thresholds for true update rates of 4, 12, 35 and 70 %. The answer is
the median over the draws, its interval their 5–95 % range, each side widened by 0.2 % of the answer and by a quarter
of the range but at most 5 % of the answer. Errors are |answer / truth − 1|.
"""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest

from auditor.controllers.pid import Pid
from auditor.identify.ensemble import estimate
from auditor.logs.record import Record, Span
from tests.benchmarks import truth

RATES = (0.04, 0.12, 0.35, 0.70)
LOOPS = 8
FIRST_SEED = 500
NOTHING = SimpleNamespace(A=np.zeros((1, 1)), B0=np.zeros(1), B1=np.zeros(1), C=np.zeros(1), delay=0)


def identified(loop: truth.TruthLoop, y: np.ndarray, u: np.ndarray, seed: int):
    N = len(y)
    record = Record(
        period=60.0, start=0, y=y, u=u, r=loop.setpoint, w=np.zeros((0, N)), valid=np.ones(N, dtype=bool),
        spans=(Span(0, N),),
    )  # fmt: skip
    controller = Pid(gain=loop.gain, integral_time=60.0 * loop.integral_time)
    return estimate(record, controller, plant=None, seed=seed).plants


def answer(values: np.ndarray) -> tuple[float, float, float]:
    """Low end, median and high end."""
    values = np.sort(values)
    low, middle, high = np.interp([0.05, 0.5, 0.95], (np.arange(len(values)) + 0.5) / len(values), values)
    wider = 0.002 * middle + min(0.25 * (high - low), 0.05 * middle)
    return low - wider, middle, high + wider


def judged(seed: int, moves: int) -> list[list[float]]:
    """Per rate: error of count and RMS error, whether the interval holds the truth, the same errors without a model."""
    loop = truth.random_loop(seed, moves)
    y, u = truth.recorded(loop)
    plants = identified(loop, y, u, seed)
    rows = []
    for rate in RATES:
        delta = truth.delta_for_rate(loop, rate)
        true = truth.truth_run(loop, delta)[2:]
        draws = np.array([truth.replayed(plant, loop, y, u, delta) for plant in plants])
        naive = truth.replayed(NOTHING, loop, y, u, delta)
        row = []
        for which in (0, 1):
            low, middle, high = answer(draws[:, which])
            held = low <= true[which] <= high
            row += [abs(middle / true[which] - 1.0), held, abs(naive[which] / true[which] - 1.0)]
        rows.append(row)
    return rows


@pytest.mark.benchmark
@pytest.mark.parametrize(
    ("moves", "median", "ninetieth"),
    # Twice what 40 other loops of the same kind gave (0.3, 0.2 and 6.0, 3.3 %; 0.1, 0.1 and 1.8, 1.9 %), for the 32
    # scenarios of 8 loops scatter that much; medians at least 0.4 %, a few updates of a thousand.
    [(0, (0.006, 0.005), (0.12, 0.07)), (8, (0.004, 0.004), (0.036, 0.038))],
    ids=["no setpoint change", "eight setpoint steps"],
)
def test_replayed_answers_against_the_truth(
    moves: int, median: tuple[float, float], ninetieth: tuple[float, float], record_property
) -> None:
    rows = np.array([row for k in range(LOOPS) for row in judged(FIRST_SEED + k, moves)])
    for name, which in (("count", 0), ("rms error", 3)):
        errors, held, naive = rows[:, which], rows[:, which + 1], rows[:, which + 2]
        found = {
            "median": np.median(errors), "p90": np.quantile(errors, 0.9), "coverage": held.mean(),
            "naive p90": np.quantile(naive, 0.9),
        }  # fmt: skip
        record_property(name, found)
        print(f"{moves} moves, {name}: " + ", ".join(f"{key} {value:.4f}" for key, value in found.items()))
        assert found["median"] < median[which // 3]
        assert found["p90"] < ninetieth[which // 3]
        assert found["p90"] < found["naive p90"]
        # 90 % intervals; loops, not scenarios, are independent: one loop of eight may miss all of its four.
        assert found["coverage"] >= 0.85
