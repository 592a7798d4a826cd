"""Numbers that decide about a recovered controller, each with its reason.

"Relative residual" is what a controller leaves of the actuator's own movement: 0 for an exact log, 1 for nothing
explained.
"""

from __future__ import annotations

NULL_GOOD = 0.01
"""Null replay up to this is good: 1 % of the error's deviation costs the answers less than 1 % (method, §2)."""

NULL_LIMIT = 0.10
"""From here on a replay is about another controller than the recorded one: at most limited trust (method, §2)."""

NOTHING_LEFT = 1e-9
"""Null replays below this differ by floating point only."""

DIVERGED = 1e6
"""A replay this many deviations of the error away from the record would not have been stable (method, §8)."""

EXPLAINED_SHARE = 0.90
"""Above `NULL_LIMIT` an answer needs this share of the unexplained actuator to have a known origin (method, §2)."""

LONGEST_SKEW = 3
"""Samples by which the actuator's column may be early or late; further shifts mean another clock."""

UNEXPLAINED_LIMIT = 0.3
"""A controller that leaves this much of the actuator's movement is none. Cascades logged 60 times too coarsely leave
0.6–1.0 of it, single fast loops logged so 0.15–0.48 (Tennessee Eastman logs); the null replay is above `NULL_LIMIT`
long before this."""

UNEXPLAINED_LEVEL = 0.1
"""The same for an actuator whose own noise hides its movement between samples: what is left of its level."""

NOISE_PERSISTENCE = 0.7
"""Correlation of neighbouring residuals up to which what is left of a level counts as the actuator's own noise; what is
left after a wrong fit through a shutdown keeps its sign for hours."""

EXACT = 1e-6
"""Relative residual below which a log counts as exact: such a log has no rounding that could matter."""

LAG_BETTER = 0.9
"""A shift of the actuator farther from none must bring the residual down to this share: signals that hardly move within
a sample fit every lag alike."""

BETTER = 20.0
"""Gain in 2·log-likelihood, in units of ln n, that one more term of the controller must bring. One unit is the usual
information criterion; residuals of real logs are correlated, which makes that criterion ten times too eager."""

DERIVATIVE_BETTER = 0.7
"""A derivative must also bring the residual down to this share: any coloured rest likes one more delayed error."""

OWN_LAW = 1e-3
"""Relative residual below which the actuator is a static function of the measurement, rounding of the log included."""

EITHER_WAY = 0.1
"""The same for a law found in the log, when white noise is all that lies between it and the record: noise of a
measurement that follows its actuator at once leaves as much. A flow against its own valve leaves 0.01–0.09
(Tennessee Eastman logs, stream 1), and nothing else in such a log says which of the two answers the other."""

HEAVY_TAIL = 0.2
"""Median over rms of the residual below which rare large moves decide a least-squares fit (0.67 for normal noise)."""

SCHEME_BETTER = 0.9
"""Another anti-windup or integral form than the one at hand must leave at most this share of what that one leaves."""

DEAD_RUN = 20
"""Samples in a row without any movement of measurement, setpoint and actuator that are taken for a dead loop: they hold
nothing about the controller, and their perfect fit would speak for any."""

ROWS_NEEDED = 50
"""Samples away from limits below which nothing is recovered: four coefficients need an order more rows than that."""

SCAN_SAMPLES = 60_000
"""Longest part of a record in which lag and kind of controller are looked for."""

SCAN_ROWS = 6_000
"""Rows that are enough to find the lag and the kind of controller; the gains then come from all rows."""

SEARCH_ROWS = 24_000
"""Rows that are enough to search a derivative's filter."""

CAUSE_HALVES = 0.5
"""A change counts as the cause of a bad null replay when it brings the null replay down to this share."""

RETUNED = 0.1
"""Gains of the log's thirds that differ by more than this share of the whole log's are a retuning."""

FEEDFORWARD_SHARE = 0.3
"""Share of the unexplained movement that declared disturbances must account for to be named as feedforward."""
