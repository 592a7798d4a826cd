"""The whole job: the rooms in order, nothing else."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from auditor.dangers.interval import Flag
from auditor.identify.plant import Model
from auditor.logs.record import Record, Span
from auditor.loop import Loop
from auditor.replay import Measures, Replay
from auditor.verdict import Recommendation, Verdict


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Provenance:
    """What is needed to run the same audit again."""

    auditor_version: str
    packages: Mapping[str, str]
    seed: int
    created: str
    command: str


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Audit:
    """Everything an audit found.

    Attributes
    ----------
    model : Model or None
        None when the log carries no loop to identify (then there are no replays and the verdict is "undecided").
    baseline : Measures or None
        The record itself; `baseline_first`, `baseline_rest` on the two parts.
    counted : tuple of Span
        Spans less warm-up: what every measure covers.
    """

    loop: Loop
    record: Record
    model: Model | None
    counted: tuple[Span, ...]
    baseline: Measures | None
    baseline_first: Measures | None
    baseline_rest: Measures | None
    replays: tuple[Replay, ...]
    flags: tuple[Flag, ...]
    recommendation: Recommendation
    verdict: Verdict
    provenance: Provenance
