"""Update rates of the rules on signals for which they are known, through the compiled replay.

The signal stands in for the measurement and nothing reacts to it (the lane of the naive answer), so that what is
counted is the rule alone. The first value of a record is always sent and is not counted, here as in the tables.

Where each value comes from is said beside it: "derived here" needs a few lines of mathematics and no source, "formula
seen" was read in the source named, "from memory" was not and may be wrong in its citation. All were reproduced by
independent scripts before they were written down. Sampled signals are continuous in value, so that "more than" and "at
least" the threshold are the same; no threshold lies on a crest.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
import numpy.typing as npt
import pytest

from auditor.arrays import FloatArray
from auditor.controllers.pid import Pid
from auditor.identify.plant import Load, Plant
from auditor.logs.record import Record, Span
from auditor.replay.bench import make_bench
from auditor.replay.lanes import replay_lanes
from auditor.replay.types import Setting

pytestmark = pytest.mark.outside

WALK = 400_000
"""Steps of the random walk: 144 000 to 3 600 events, for 0.6 to 4 % in the mean interval at three deviations."""


@dataclass(frozen=True, eq=False)
class Sent:
    """Which samples were sent, and what the receiver held at each."""

    x: FloatArray
    at: npt.NDArray[np.int64]

    @property
    def events(self) -> int:
        """Updates after the first value."""
        return len(self.at) - 1

    @property
    def error(self) -> FloatArray:
        """Signal less held value, after a possible update."""
        last = np.searchsorted(self.at, np.arange(len(self.x)), side="right") - 1
        return self.x - self.x[self.at[last]]


def send(x: FloatArray, rule: str, period: float = 1.0, **values: float) -> Sent:
    """Let a rule watch a signal."""
    n = len(x)
    record = Record(
        period=period, start=0, y=x, r=np.zeros(n), u=np.zeros(n), w=np.zeros((0, n)), valid=np.ones(n, dtype=bool),
        spans=(Span(0, n),), log_step=period,
    )  # fmt: skip
    plant = Plant(
        A=np.array([[0.5]]), B0=np.array([0.5]), B1=np.zeros(1), C=np.ones(1), delay=0, structure="lags", delay_s=0.0,
        gain=1.0, gain_per_s=None, time_constants_s=(period,), load=Load(entry="input", phi=0.9, walk=0.0, noise=0.0),
    )  # fmt: skip
    bench = make_bench(record, Pid(gain=0.0), [plant], 0, period)
    lanes = replay_lanes(bench, Setting(rule=rule, signal="measurement", values=MappingProxyType(values)))
    naive = bench.draws
    assert np.array_equal(lanes.y[:, naive], x)
    return Sent(x=x, at=np.flatnonzero(lanes.updated[:, naive]))


@pytest.fixture(scope="module")
def walk() -> FloatArray:
    return np.cumsum(np.random.default_rng(11).standard_normal(WALK))


def total_variation(x: FloatArray) -> float:
    return float(np.sum(np.abs(np.diff(x))))


def mean_square(sent: Sent) -> tuple[float, float]:
    """Mean square of the held-value error over whole intervals, and its deviation, from interval to interval."""
    square = np.add.reduceat(sent.error**2, sent.at)[:-1]
    length = np.diff(sent.at)
    mean = float(np.sum(square) / np.sum(length))
    return mean, float(np.std(square - mean * length) / math.sqrt(len(length)) / np.mean(length))


# Derived here: the integral equation for a Gaussian walk, one deviation a step, checked once a step and set back to the
# value sent when it is c away; solved on a grid to 1e-6. Columns: c, mean steps between events, mean square error.
THRESHOLDS = (
    (1.0, 2.782927, 0.190596),
    (2.0, 6.913503, 0.859980),
    (3.0, 13.085649, 1.877922),
    (5.0, 31.415390, 4.922215),
    (10.0, 112.241363, 18.383986),
)


@pytest.mark.parametrize(("c", "interval", "square"), THRESHOLDS)
def test_send_on_delta_on_a_random_walk(walk: FloatArray, c: float, interval: float, square: float) -> None:
    sent = send(walk, "send-on-delta", delta=c)
    mean_interval = (sent.at[-1] - sent.at[0]) / sent.events
    # Derived here: the exit time of a Wiener process has relative deviation sqrt(2/3); three deviations of the mean.
    assert mean_interval == pytest.approx(interval, rel=3 * 0.8165 / math.sqrt(sent.events))
    error, deviation = mean_square(sent)
    assert abs(error - square) < 3 * deviation
    # Derived here (martingale of the fourth power, Jensen): no rule without foresight gets below this on average. Ours
    # stays above by the 0.17 to 0.23 that the overshoot costs.
    assert error > interval / 6 - 0.5
    # Derived here: every event takes more than c of the path.
    assert sent.events * c < total_variation(walk)


@pytest.mark.parametrize("c", [3.0, 5.0, 10.0])
def test_the_continuity_correction_predicts_the_interval(walk: FloatArray, c: float) -> None:
    # From memory: D. Siegmund, Adv. Appl. Prob. 11 (1979) 701, with β = −ζ(1/2)/√(2π) as in Broadie, Glasserman and
    # Kou, Math. Finance 7 (1997) 325; the terms ¼ + β² derived here. Equal to the exact values to 1e-3 from c = 3 on.
    beta = 0.5825971579
    sent = send(walk, "send-on-delta", delta=c)
    predicted = c**2 + 2 * beta * c + 0.25 + beta**2
    assert (sent.at[-1] - sent.at[0]) / sent.events == pytest.approx(predicted, rel=3 * 0.8165 / math.sqrt(sent.events))


@pytest.mark.parametrize(("every", "c"), [(7, 2.0), (31, 5.0)])
def test_an_event_rule_beats_the_clock_about_threefold_on_a_random_walk(walk: FloatArray, every: int, c: float) -> None:
    # Derived here: a clock of n steps leaves (n − 1)/2. From memory: in continuous time the ratio at equal rates is 3
    # (K. J. Åström and B. Bernhardsson, IFAC World Congress 1999); derived here for this clock 3.4382 at c = 2 and
    # 3.0896 at c = 5 (with (E N − 1)/2 for the mean interval E N).
    ratio = {2.0: 3.4382, 5.0: 3.0896}[c]
    clock, of_clock = mean_square(send(walk, "periodic", every=every))
    assert abs(clock - (every - 1) / 2) < 3 * of_clock
    sent = send(walk, "send-on-delta", delta=c)
    error, of_rule = mean_square(sent)
    at_this_rate = ((sent.at[-1] - sent.at[0]) / sent.events - 1) / 2
    # Three deviations of the error; those of the interval are as large and work the other way.
    assert at_this_rate / error == pytest.approx(ratio, rel=3 * of_rule / error + 3 * 0.8165 / math.sqrt(sent.events))


# Derived here: 4 ⌊A/δ⌋ per period from a zero crossing on, not 4 A/δ; the rate law in Sensors 6 (2006) 49 (formula
# seen in its abstract) is the upper bound E|ẋ|/δ. Overshoots of a whole quarter must stay below the rest of A/δ.
SINUSOID = ((0.07, 56, 20_000), (0.013, 304, 100_000))


@pytest.mark.parametrize("rule", ["send-on-delta", "level-crossing"])
@pytest.mark.parametrize(("delta", "per_period", "samples"), SINUSOID)
def test_events_of_a_sinusoid_are_whole_numbers(rule: str, delta: float, per_period: int, samples: int) -> None:
    # Cut a little before a zero crossing, so that no event lies on the cut.
    x = np.sin(2 * np.pi * np.arange(int(2.98 * samples)) / samples)
    name = "delta" if rule == "send-on-delta" else "spacing"
    sent = send(x, rule, **{name: delta})
    ends = np.searchsorted(sent.at, np.array([0.48, 1.48, 2.48]) * samples)
    assert np.diff(ends).tolist() == [per_period, per_period]
    assert sent.events * delta <= total_variation(x)  # derived here
    assert per_period < 4.0 / delta


def test_events_of_a_first_order_step_come_at_their_times() -> None:
    # Derived here: K = 1, T = 1 s, δ = 0.13: ⌊K/δ⌋ = 7 events at −T ln(1 − k δ/K): 0.139262, 0.301105, 0.494296 …
    # 2.407946 s. Each value sent lies beyond its level by less than the largest move between samples, which adds up.
    h, delta = 1e-5, 0.13
    t = h * np.arange(round(4.0 / h))
    sent = send(1.0 - np.exp(-t), "send-on-delta", period=h, delta=delta)
    k = np.arange(1, 8)
    level, exact = sent.x[sent.at[1:]], -np.log(1.0 - k * delta)
    assert sent.events == 7
    assert np.all((level > k * delta) & (level < k * (delta + h)))
    assert exact[[0, 1, 2, 6]] == pytest.approx([0.139262, 0.301105, 0.494296, 2.407946], abs=1e-6)
    assert np.all(t[sent.at[1:]] >= exact - 1e-12)
    assert np.all(t[sent.at[1:]] <= exact + (k * h) / (1.0 - k * delta) + 2 * h)


@pytest.mark.parametrize(("area", "law"), [(1e-4, 135.20), (1e-5, 427.53)])
def test_send_on_area_on_a_sinusoid(area: float, law: float) -> None:
    # Formula seen in part (M. Miskowicz, Sensors 7 (2007) 16, 10.3390/s7010016), values derived here: the mean rate is
    # E√|ẋ| / √(2 area), per period of 1 s √(2π) · 0.7627597635 / √(2 area).
    samples = 200_000
    x = np.sin(2 * np.pi * np.arange(3 * samples) / samples)
    sent = send(x, "send-on-area", period=1.0 / samples, area=area)
    rate = np.sum(sent.at >= samples) / 2
    assert law == pytest.approx(math.sqrt(2 * math.pi) * 0.7627597635 / math.sqrt(2 * area), abs=0.01)
    # The law is for small areas: crests take longer (0.4 % at the larger area); a sum in samples overshoots by up to
    # half a sample in some 500 (0.2 % at the smaller).
    assert rate == pytest.approx(law, rel=0.01)
    # Effectiveness against a clock of the same largest area, largest over mean √|ẋ|: 1.3110 for a sinusoid.
    assert math.sqrt(2 * math.pi) / math.sqrt(2 * area) / rate == pytest.approx(1.3110, rel=0.01)


def test_the_held_value_of_a_ramp_is_half_a_threshold_late() -> None:
    # Derived here: mean δ/2, mean square δ²/3, but for the samples' own step.
    step, delta = 1e-4, 0.1
    error = send(step * np.arange(50_000), "send-on-delta", delta=delta).error
    assert np.mean(error) == pytest.approx(delta / 2, abs=step)
    assert np.mean(error**2) == pytest.approx(delta**2 / 3, abs=step * delta)


@pytest.mark.parametrize("delta", [0.5, 0.2, 0.1])
def test_the_rate_law_is_an_upper_bound_on_a_smooth_random_signal(delta: float) -> None:
    # Derived here: for a Gaussian signal the law E|ẋ|/δ is σẋ √(2/π)/δ. An independent script counted 0.655, 0.806 and
    # 0.873 of it at these thresholds for a second-order spectrum (ω = 1, ζ = 0.7, σ = 1, sampled every 1 ms): the law
    # is approached from below, and slowly.
    share = {0.5: 0.655, 0.2: 0.806, 0.1: 0.873}[delta]
    h, n = 0.005, 400_000
    x = smooth_signal(h, n)
    sent = send(x, "send-on-delta", period=h, delta=delta)
    law = float(np.std(np.diff(x))) / h * math.sqrt(2 / math.pi) / delta
    # Sampled every 5 ms here: half a sample's move beyond the threshold costs up to 2 % at δ = 0.1. From record to
    # record of 2000 s the share varies by up to 0.008.
    assert sent.events / (n * h) / law == pytest.approx(share, abs=0.03)
    assert sent.events * delta <= total_variation(x)


def smooth_signal(h: float, n: int) -> FloatArray:
    """Return x of ẍ + 2 ζ ẋ + x = white noise with ζ = 0.7, variance 1, by its exact transition over h."""
    zeta = 0.7
    A = np.array([[0.0, 1.0], [-1.0, -2.0 * zeta]])
    values, vectors = np.linalg.eig(A * h)
    transition = np.real(vectors @ np.diag(np.exp(values)) @ np.linalg.inv(vectors))
    # Stationary covariance is the identity: both position and slope have variance 1.
    root = np.linalg.cholesky(np.eye(2) - transition @ transition.T)
    rng = np.random.default_rng(12)
    shocks = rng.standard_normal((n, 2)) @ root.T
    state, x = rng.standard_normal(2), np.empty(n)
    for k in range(n):
        x[k] = state[0]
        state = transition @ state + shocks[k]
    return x
