"""`Plant` and `Model`: what identification hands to the replay.

Textbook letters: A, B, C of the sampled plant; d whole samples of delay; the fractional part is inside B0, B1
(method, §2, equation 2.1): ``x[k+1] = A x[k] + B0 u[k−d] + B1 u[k−d−1]``, ``y = C x``.
"""

from __future__ import annotations

from dataclasses import dataclass

from auditor.arrays import FloatArray
from auditor.controllers.pid import Pid


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Load:
    """The disturbance as identification sees it: AR(1) plus random walk entering somewhere, and white noise.

    Attributes
    ----------
    entry : str
        Where the load enters: "input", "output", "after the short lags" …
    phi : float
        Pole of the AR(1) part on the base period.
    walk : float
        Power of the random walk against the AR(1) part.
    noise : float
        Power of the measurement noise against the AR(1) part, before the plant.
    """

    entry: str
    phi: float
    walk: float
    noise: float


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Plant:
    """One likely plant, sampled at the base period.

    Attributes
    ----------
    A : ndarray, shape (n, n)
    B0, B1, C : ndarray, shape (n,)
        Units: `C x` is in measurement units when the input is in actuator units.
    delay : int
        Whole samples d ≥ 0; an input at k acts on y at k + d + 1 at the earliest.
    structure : str
        "lags" or "oscillatory".
    order : int
        Number of states n.
    delay_s : float
        Dead time of the plant [s], fractional part included.
    gain : float or None
        Static gain [measurement unit / actuator unit]; None when integrating.
    gain_per_s : float or None
        Ramp per unit of actuator [measurement unit / (actuator unit · s)]; None unless integrating.
    time_constants_s : tuple of float
        Lags [s], longest first; an integrator is not listed.
    damping : float or None
        Damping ratio of an oscillatory plant.
    zero_s : float
        Time constant of the zero [s], negative for inverse response, 0 for none.
    log_posterior : float
        Log posterior of the draw, for ranking draws of one log only.
    load : Load
    parameters : tuple of float
        The point it came from: eight coordinates (`auditor.kernels.points`), structure, load entry.
    """

    A: FloatArray
    B0: FloatArray
    B1: FloatArray
    C: FloatArray
    delay: int
    structure: str
    delay_s: float
    gain: float | None
    gain_per_s: float | None
    time_constants_s: tuple[float, ...]
    load: Load
    damping: float | None = None
    zero_s: float = 0.0
    log_posterior: float = 0.0
    parameters: tuple[float, ...] = ()

    @property
    def order(self) -> int:
        """Number of states."""
        return len(self.C)

    @property
    def integrating(self) -> bool:
        """True when the plant holds no static gain within the log's horizon."""
        return self.gain is None


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Model:
    """The identified loop: its controller and equally weighted plants that could have made the record.

    Attributes
    ----------
    plants : tuple of Plant
        The draws; every replay runs over all of them.
    best : int
        Index of the most likely draw.
    controller : Pid
    controller_source : str
        "file" or "log".
    skew_samples : int
        Samples by which the actuator column is late (+) or early (−) in the log; the record is shifted by it.
    null_replay : float
        std(replay − record) / std(error) when every sample updates, no injection (method, §2).
    injected : bool
        True when the unexplained part of the actuator is injected into replays.
    explained_by_error : float
        Share of the unexplained actuator's variance that the error, its sum and declared inputs account for.
    period : float
        Base period [s].
    tau_cl_s : float
        Closed-loop time constant of the recorded loop under the best draw [s].
    peak_sensitivity : float
        Ms of the recorded loop under the best draw.
    modes : int
        Distinct kinds of plant kept among the draws (structure × entry).
    dropped : int
        Draws dropped because the recorded loop would be unstable under them.
    explained_percent, explained_held_out_percent : float or None
        100·(1 − ‖y − ŷ‖/‖y − ȳ‖) of the free run over the record, and over its last part by a plant fitted on the
        first.
    pure_regulation : bool
        True when the log holds no usable setpoint move.
    trust : str
        "good", "limited" or "none"; replays narrow it further by the width of their own interval.
    reasons : tuple of str
    seed : int
    quick : bool
    """

    plants: tuple[Plant, ...]
    best: int
    controller: Pid
    controller_source: str
    skew_samples: int
    null_replay: float
    injected: bool
    explained_by_error: float
    period: float
    tau_cl_s: float
    peak_sensitivity: float
    modes: int
    dropped: int
    explained_percent: float | None
    explained_held_out_percent: float | None
    pure_regulation: bool
    trust: str
    reasons: tuple[str, ...]
    seed: int = 1
    quick: bool = False

    @property
    def likeliest(self) -> Plant:
        """The most likely draw."""
        return self.plants[self.best]

    @property
    def settling_s(self) -> float:
        """Settling time of the recorded loop, 4 tau_cl [s] (method, §1)."""
        return 4.0 * self.tau_cl_s
