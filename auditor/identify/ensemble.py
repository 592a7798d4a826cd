"""Record and controller → the equally likely plants every replay runs over.

Two independent runs of the sampler, twelve draws each; the runs need not agree, and where they do not the width of
the answer says so. Draws under which the recorded loop would be unstable are dropped: it was not.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from threading import Lock

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.controllers.pid import Pid
from auditor.errors import CannotAnswerError, Problem
from auditor.identify import sampler
from auditor.identify.family import Family, family, to_plant
from auditor.identify.loop_math import closed_loop_time_constant, peak_sensitivity
from auditor.identify.plant import Plant
from auditor.identify.posterior import TEMPERATURE, chains_at, target
from auditor.identify.prior import tuning
from auditor.identify.spectrum import Spectrum, spectrum
from auditor.kernels import points
from auditor.kernels.prior import Tuning
from auditor.logs.record import Record
from auditor.progress import Progress, silent

RUNS = 2
DRAWS = 12  # per run
STAGE = "identifying the plant"


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Ensemble:
    """Equally likely plants.

    Attributes
    ----------
    plants : tuple of Plant
    best : int
        Index of the draw with the highest posterior.
    dropped : int
        Draws dropped because the recorded loop would be unstable under them.
    modes : int
        Distinct kinds among the plants (structure with its number of lags × load entry).
    masked : int
        Ordinates of the spectrum left out as lines (`auditor.identify.posterior.unspoilt`), first run.
    tau_cl_s : float
        Closed-loop time constant of the recorded loop under the best draw [s].
    peak_sensitivity : float
        Ms of the recorded loop under the best draw.
    """

    plants: tuple[Plant, ...]
    best: int
    dropped: int
    modes: int
    masked: int
    tau_cl_s: float
    peak_sensitivity: float


def estimate(
    record: Record,
    controller: Pid,
    *,
    plant: str | None,
    seed: int = 1,
    quick: bool = False,
    workers: int = 2,
    progress: Progress = silent,
) -> Ensemble:
    """Return plants that could have made the record with this controller.

    Parameters
    ----------
    record : Record
    controller : Pid
    plant : str or None
        Declared type of the plant, None when the log is to tell.
    seed : int
        The same seed gives the same plants, whatever the number of workers.
    quick : bool
        One run instead of two.
    workers : int
        Threads.
    progress : Progress

    Raises
    ------
    CannotAnswerError
        When the plant is declared unstable, when no span is long enough, when y or u stands still, or when no
        plausible plant makes the recorded loop stable.
    """
    family(plant, 1.0)  # a type that cannot be identified is told before the log is looked at
    spectra = spectrum(record, controller)
    kinds = family(plant, spectra.lowest_frequency)
    weights = tuning(controller, record.period, plant)
    seeds = np.random.SeedSequence(seed).spawn(RUNS)[: 1 if quick else RUNS]
    runs = _runs(spectra, kinds, weights, seeds, workers, progress)
    drawn = [_systematic(members, one) for members, one in zip(runs, seeds, strict=True)]
    x, kind = (np.concatenate(columns) for columns in zip(*drawn, strict=True))
    # One mask for all, so that posteriors of different runs can be compared.
    density = target(spectra, kinds, weights, runs[0].keep)
    log_posterior = chains_at(x, kind, TEMPERATURE, density).log_posterior
    plants = [
        to_plant(a, b, record.period, controller.gain, kinds, float(value))
        for a, b, value in zip(x, kind, log_posterior, strict=True)
    ]
    return _ensemble(plants, record.period, controller, int(np.sum(~runs[0].keep)))


def _runs(
    spectra: Spectrum,
    kinds: Family,
    weights: Tuning,
    seeds: Sequence[np.random.SeedSequence],
    workers: int,
    progress: Progress,
) -> list[sampler.Members]:
    """All runs, on threads (the compiled generations release the lock), in the order of their seeds."""
    done = np.zeros(len(seeds))
    lock = Lock()

    def one(number: int) -> sampler.Members:
        def observe(share: float) -> None:
            with lock:
                done[number] = share
                progress(STAGE, float(done.mean()))

        return sampler.run(spectra, kinds, weights, seeds[number], observe)

    with ThreadPoolExecutor(max_workers=max(1, min(workers, len(seeds)))) as pool:
        return list(pool.map(one, range(len(seeds))))


def _systematic(members: sampler.Members, seed: np.random.SeedSequence) -> tuple[FloatArray, IntArray]:
    """Evenly spaced members from a random first one, in order of kind and gain.

    In that order every kind is drawn as often as its share says; in the order of the chains, snapshots of the same
    few chains would come up again and again.
    """
    n = len(members.x)
    order = np.lexsort((members.x[:, points.LN_GAIN], members.kind[:, 1], members.kind[:, 0]))
    offset = np.random.default_rng(seed.spawn(1)[0]).random()
    index = order[np.minimum((np.arange(DRAWS) + offset) / DRAWS * n, n - 1).astype(np.int64)]
    return members.x[index], members.kind[index]


def _ensemble(drawn: list[Plant], period: float, controller: Pid, masked: int) -> Ensemble:
    constants = [closed_loop_time_constant(plant, controller, period) for plant in drawn]
    stable = [k for k, constant in enumerate(constants) if np.isfinite(constant)]
    if not stable:
        raise CannotAnswerError(_all_unstable(len(drawn)))
    plants = tuple(drawn[k] for k in stable)
    best = int(np.argmax([plant.log_posterior for plant in plants]))
    return Ensemble(
        plants=plants,
        best=best,
        dropped=len(drawn) - len(plants),
        modes=len({plant.parameters[-2:] for plant in plants}),
        masked=masked,
        tau_cl_s=constants[stable[best]],
        peak_sensitivity=peak_sensitivity(plants[best], controller, period),
    )


def _all_unstable(count: int) -> Problem:
    return Problem(
        what="Under every plant that fits the log the recorded loop would be unstable.",
        found=f"{count} of {count} draws",
        do="Check the controller's settings: with them the loop could not have made this log.",
    )
