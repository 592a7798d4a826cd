"""For longer than the loop needs to settle there is no usable data.

Holes in the log, manual operation and excluded stretches between the first and the last counted sample, longer than
the settling time: what would have happened there is not known, and nothing else is flagged there. It does not
depend on the rule, so every replay carries the same flags, one per hole; holes closer than the settling time are
one. It is always "watch", with a share of 1. Evidence: the length, and how long it takes after the interval until
samples count again.
"""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray
from auditor.dangers.base import Case, Evidence, Stretch
from auditor.dangers.interval import longer_than
from auditor.text import duration

CAUSE = "blind"
MEANING = "unusable data inside the horizon"


def find(case: Case) -> dict[str, BoolArray]:
    """Mark holes between the first and the last counted sample, the same for every lane."""
    if not case.counted:
        return {}
    first, last = min(span.start for span in case.counted), max(span.stop for span in case.counted)
    hole = ~(case.record.valid & case.in_span)
    hole[:first] = hole[last:] = False
    hole = longer_than(hole[:, None], case.settling)
    return {"hole": np.broadcast_to(hole, case.y.shape)}


def may_be_danger(case: Case, stretch: Stretch) -> bool:
    """Never: it says what is not known, not what would have happened."""
    return False


def describe(case: Case, stretch: Stretch) -> Evidence:
    """Tell how long."""
    resumes_s = int(np.argmax(case.is_counted[stretch.stop :])) * case.period
    detail = f"no usable data for {duration(stretch.duration_s)}; samples count again {duration(resumes_s)} later"
    return Evidence(detail, {"resumes_after_s": resumes_s})
