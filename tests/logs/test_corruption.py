"""Clean logs damaged at random places: every kind of damage is told, and nothing else is."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from damage import DAMAGE, with_signal
from logs_in_memory import pool_log, pool_loop, with_rows

from auditor.logs.align import align
from auditor.logs.findings import CHECKS
from auditor.logs.log import Log
from auditor.logs.reader import read_log
from auditor.loop import Loop
from auditor.loopfile import read_loop

SAMPLES = sorted((Path(__file__).parents[2] / "sample_logs").glob("*.toml"))
POOLS = 8
ROUNDS = 2
RECALL = 0.95
"""Of the injections of one kind; what is looked for is large against the noise, so that one in twenty may hide."""

HOLES = {"gap", "bridged"}
ALSO_TRUE = {
    "stray-stamp": HOLES,  # the row is missing where it belongs
    "clock-step": HOLES,  # the instant that the clock steps over
    "clock-drift": HOLES,  # two rows share a period once, or one has none
    "jitter": HOLES,
    "mixed-period": {*HOLES, "coarse-log"},
    "bridged": {"bad-value"},
    "sentinel": {"bridged"},
    "out-of-range": {"bridged"},
    "interpolated": {"stale-hold", "stuck"},  # a line between two equal rounded values
    "unit-change": {"interpolated", "exception-reported"},  # no common step is left in a rounded signal
    "setpoint-ramp": {"quantised"},  # an even ramp has a step
}
"""Findings that the same damage may make true as well."""


@cache
def sample(path: Path) -> tuple[Log, Loop]:
    """Return 2,000 clean rows of a sample log; ranges are left out, as they would take away what is looked for."""
    loop = read_loop(path)
    log = with_rows(read_log(loop), np.arange(3000, 5000))
    loop = with_signal(loop, "measurement", low=None, high=None)
    return replace(log, texts={}), replace(loop, signals=replace(loop.signals, mode=None))


@cache
def pool(seed: int) -> tuple[Log, Loop]:
    return pool_log(rows=1500, seed=seed), pool_loop()


CLEAN = [*(lambda s=seed: pool(s) for seed in range(POOLS)), *(lambda p=path: sample(p) for path in SAMPLES)]


@cache
def before(number: int) -> frozenset[tuple[str, str]]:
    """Return kind and signal of what a clean log tells."""
    return frozenset((f.kind, f.signal) for f in align(*CLEAN[number]()).findings)


def test_every_check_is_tried():
    assert {*DAMAGE, "coverage"} == set(CHECKS)


@pytest.mark.parametrize("number", range(len(CLEAN)))
def test_a_clean_log_tells_how_it_is_stored_only(number):
    assert {kind for kind, _ in before(number)} <= {"coverage", "quantised"}


@pytest.mark.parametrize("kind", DAMAGE)
def test_damage_is_told_and_nothing_else_is(kind):
    told, others = [], []
    for number, clean in enumerate(CLEAN):
        if kind in {known for known, _ in before(number)}:
            continue
        for turn in range(ROUNDS if number >= POOLS else 1):
            rng = np.random.default_rng([number, turn, *kind.encode()])
            found = {(f.kind, f.signal) for f in align(*DAMAGE[kind](*clean(), rng)).findings}
            new = {name for name, _ in found - before(number)}
            told.append(kind in new)
            others += sorted(new - {kind} - ALSO_TRUE.get(kind, set()))
    assert len(told) >= POOLS
    assert np.mean(told) >= RECALL
    assert others == []


@pytest.mark.parametrize(
    "kind", ["spike", "sensor-reset", "stale-hold", "stuck", "unit-change", "setpoint-ramp", "manual"]
)
def test_it_is_told_when_it_was(kind):
    log, loop = pool(0)
    for seed in range(5):
        spoiled, changed = DAMAGE[kind](log, loop, np.random.default_rng(seed))
        names = {*spoiled.channels} if kind != "manual" else set()
        rows = [np.flatnonzero(spoiled.channels[name] != log.channels[name]) for name in names]
        at = np.concatenate(rows) if rows else np.flatnonzero(spoiled.texts["mode"] != "AUTO")
        found = next(f for f in align(spoiled, changed).findings if f.kind == kind)
        # A held value is already there in the row before the first that changed.
        assert log.time[at.min()] - found.start in (0, int(loop.period * 1e9))
        if kind not in ("unit-change", "setpoint-ramp"):
            assert found.end == log.time[at.max()]
