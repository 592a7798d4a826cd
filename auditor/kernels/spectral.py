"""Whittle likelihood of a plant and its load over frequency bins of one closed-loop record.

With Y, U the spectra of measurement and actuator, G the plant, C the controller and Phi the spectrum of load and
noise as seen at y, ``Y − G U`` has spectrum Phi while the loop maps it onto Y with the sensitivity S = 1/(1 + G C).
Per bin with n ordinates

    E = (Syy − 2 Re(conj(G) Suy) + |G|² Suu) / Phi
    log L = −N ln(Σ n E / N) − Σ n (ln Phi + f ln |S|²),   N = Σ n

where f is the share of time in which the loop was closed (automatic, actuator off its limits); the scale of Phi is
profiled out (Whittle 1953; Ljung, System Identification, 2nd ed., §13.4 on the loop's Jacobian).
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np

from auditor.arrays import ComplexArray, FloatArray
from auditor.kernels import points
from auditor.kernels.jit import compiled
from auditor.kernels.zero_order_hold import difference_equation

IMPOSSIBLE = -1e300
"""Stands for log 0; finite, so that differences of it stay numbers."""

_TINY = 1e-12  # keeps the random walk's spectrum finite at w = 0

# Rows of the workspace.
_G_RE, _G_IM, _A_RE, _A_IM, _B_RE, _B_IM, _LOAD, _PHI, _SENS = range(9)
WORK_ROWS = 9


class Bins(NamedTuple):
    """Binned cross-spectra and the controller on the same frequencies; all arrays have one column per bin.

    Attributes
    ----------
    measured : ndarray, shape (5, K)
        Syy, Suu, Re Suy, Im Suy, and n (effective ordinates; 0 in bins that only show the loop's shape).
    controller : ndarray, shape (2, K)
        Real and imaginary part of C.
    cosine, sine : ndarray, shape (7, K)
        cos(i w), sin(i w) for the plant's polynomials.
    delay_cosine, delay_sine : ndarray, shape (D, K)
        cos((d + 1) w), sin((d + 1) w) in row d.
    closed : float
        Share of time in which the loop was closed.
    """

    measured: FloatArray
    controller: FloatArray
    cosine: FloatArray
    sine: FloatArray
    delay_cosine: FloatArray
    delay_sine: FloatArray
    closed: float


@compiled
def polynomial(c: FloatArray, cosine: FloatArray, sine: FloatArray, re: FloatArray, im: FloatArray) -> None:
    """Value of Σ c_i q^i at q = e^{−jw}."""
    for k in range(len(re)):
        re[k] = c[0]
        im[k] = 0.0
    for i in range(1, len(c)):
        scale = c[i]
        row_cosine = cosine[i]
        row_sine = sine[i]
        for k in range(len(re)):
            re[k] += scale * row_cosine[k]
            im[k] -= scale * row_sine[k]


@compiled
def turn(re: FloatArray, im: FloatArray, cosine: FloatArray, sine: FloatArray) -> None:
    """Multiply by e^{−jd}, the delay, in place."""
    for k in range(len(re)):
        real = re[k]
        re[k] = real * cosine[k] + im[k] * sine[k]
        im[k] = im[k] * cosine[k] - real * sine[k]


@compiled
def divide(
    over_re: FloatArray, over_im: FloatArray, under_re: FloatArray, under_im: FloatArray, re: FloatArray, im: FloatArray
) -> None:
    """Complex quotient."""
    for k in range(len(re)):
        scale = 1.0 / (under_re[k] * under_re[k] + under_im[k] * under_im[k])
        re[k] = (over_re[k] * under_re[k] + over_im[k] * under_im[k]) * scale
        im[k] = (over_im[k] * under_re[k] - over_re[k] * under_im[k]) * scale


@compiled
def undelayed_power(load: FloatArray, bins: Bins, work: FloatArray) -> None:
    """|load(q)/a(q)|² into the load's row; a(q) is in the workspace."""
    re, im, out = work[_B_RE], work[_B_IM], work[_LOAD]
    polynomial(load, bins.cosine, bins.sine, re, im)
    a_re, a_im = work[_A_RE], work[_A_IM]
    for k in range(len(out)):
        out[k] = (re[k] * re[k] + im[k] * im[k]) / (a_re[k] * a_re[k] + a_im[k] * a_im[k])


@compiled
def multiply_lag_power(pole: float, gain: float, times: int, cosine: FloatArray, out: FloatArray) -> None:
    """Multiply `out` by |gain/(1 − pole q)|² `times` times."""
    for k in range(len(out)):
        power = gain * gain / (1.0 + pole * pole - 2.0 * pole * cosine[k])
        for _ in range(times):
            out[k] *= power


@compiled
def partial_power(x: FloatArray, m: int, entry: int, cosine: FloatArray, out: FloatArray) -> None:
    """|H|² of a load that joins mid-plant or at the output."""
    for k in range(len(out)):
        out[k] = math.exp(2.0 * x[points.LN_GAIN])
    if entry in (points.AFTER_SHORT_LAGS, points.BETWEEN_SHORT_LAGS):
        p = math.exp(x[points.LN_POLE])
        multiply_lag_power(math.exp(-p), -math.expm1(-p) / p, 1, cosine, out)
    follow = m if entry == points.AFTER_LONG_LAG else (m // 2 if entry == points.BETWEEN_SHORT_LAGS else 0)
    if follow > 0:
        rate = m / math.exp(x[points.LN_LAGS])
        multiply_lag_power(math.exp(-rate), -math.expm1(-rate), follow, cosine, out)


@compiled
def load_spectrum(x: FloatArray, entry: int, cosine: FloatArray, out: FloatArray, phi: FloatArray) -> None:
    """Phi = |H|² (1/|1 − φq|² + g/|1 − q|²) + R kv²; with entry 5 the walk joins at the output with power kv² g."""
    squared_gain = math.exp(2.0 * x[points.LN_GAIN])
    pole = 1.0 - math.exp(x[points.LN_CORNER])
    walk = math.exp(x[points.LN_WALK])
    noise = math.exp(x[points.LN_NOISE]) * squared_gain
    if entry == points.AT_BOTH_ENDS:
        walk *= squared_gain
        for k in range(len(phi)):
            ar = out[k] / (1.0 + pole * pole - 2.0 * pole * cosine[k])
            phi[k] = ar + walk / (2.0 - 2.0 * cosine[k] + _TINY) + noise
    else:
        for k in range(len(phi)):
            ar = 1.0 / (1.0 + pole * pole - 2.0 * pole * cosine[k])
            phi[k] = out[k] * (ar + walk / (2.0 - 2.0 * cosine[k] + _TINY)) + noise


@compiled
def respond(x: FloatArray, m: int, entry: int, bins: Bins, work: FloatArray) -> None:
    """Fill the workspace with G and Phi at `x`, structure m, load entry."""
    d, a, b, load = difference_equation(x, m)
    polynomial(a, bins.cosine, bins.sine, work[_A_RE], work[_A_IM])
    polynomial(b, bins.cosine, bins.sine, work[_B_RE], work[_B_IM])
    divide(work[_B_RE], work[_B_IM], work[_A_RE], work[_A_IM], work[_G_RE], work[_G_IM])
    turn(work[_G_RE], work[_G_IM], bins.delay_cosine[d], bins.delay_sine[d])
    if entry in (points.AT_INPUT, points.AT_BOTH_ENDS):
        undelayed_power(load, bins, work)
    else:
        partial_power(x, m, entry, bins.cosine[1], work[_LOAD])
    load_spectrum(x, entry, bins.cosine[1], work[_LOAD], work[_PHI])


@compiled
def close_loop(controller: FloatArray, work: FloatArray) -> None:
    """G C into the rows of b(q), |S|² into its own."""
    g_re, g_im, l_re, l_im = work[_G_RE], work[_G_IM], work[_B_RE], work[_B_IM]
    c_re, c_im = controller[0], controller[1]
    for k in range(len(g_re)):
        l_re[k] = g_re[k] * c_re[k] - g_im[k] * c_im[k]
        l_im[k] = g_re[k] * c_im[k] + g_im[k] * c_re[k]
    sensitivity = work[_SENS]
    for k in range(len(g_re)):
        sensitivity[k] = 1.0 / ((1.0 + l_re[k]) * (1.0 + l_re[k]) + l_im[k] * l_im[k])


@compiled
def crossings(re: FloatArray, im: FloatArray) -> int:
    """Net crossings of the real axis left of −1: 0 for a stable loop around a stable plant."""
    net = 0
    for k in range(1, len(re)):
        if re[k] < 0.0 and re[k - 1] < 0.0 and (im[k] > 0.0) != (im[k - 1] > 0.0):
            share = im[k] / (im[k] - im[k - 1])
            if re[k] + share * (re[k - 1] - re[k]) < -1.0:
                net += 1 if im[k] > 0.0 else -1
    return net


@compiled
def misfit(measured: FloatArray, work: FloatArray) -> tuple[float, float]:
    """Σ n E and Σ n over all bins."""
    yy, uu, re, im, n = measured[0], measured[1], measured[2], measured[3], measured[4]
    g_re, g_im, phi, out = work[_G_RE], work[_G_IM], work[_PHI], work[_LOAD]
    for k in range(len(out)):
        cross = g_re[k] * re[k] + g_im[k] * im[k]
        out[k] = n[k] * (yy[k] - 2.0 * cross + (g_re[k] * g_re[k] + g_im[k] * g_im[k]) * uu[k]) / phi[k]
    total = 0.0
    count = 0.0
    for k in range(len(out)):
        total += out[k]
        count += n[k]
    return total, count


@compiled
def log_determinant(n: FloatArray, closed: float, phi: FloatArray, sensitivity: FloatArray) -> float:
    """Σ n (ln Phi + f ln |S|²)."""
    total = 0.0
    if closed == 1.0:
        for k in range(len(n)):
            total += n[k] * math.log(phi[k] * sensitivity[k])
    else:
        for k in range(len(n)):
            total += n[k] * (math.log(phi[k]) + closed * math.log(sensitivity[k]))
    return total


@compiled
def log_likelihood(x: FloatArray, m: int, entry: int, bins: Bins, work: FloatArray) -> tuple[float, float]:
    """Log likelihood (up to a constant of the record) and peak sensitivity; `IMPOSSIBLE` where the loop is unstable."""
    respond(x, m, entry, bins, work)
    close_loop(bins.controller, work)
    peak = math.sqrt(np.max(work[_SENS]))
    if crossings(work[_B_RE], work[_B_IM]) != 0:
        return IMPOSSIBLE, peak
    total, count = misfit(bins.measured, work)
    if not total > 0.0 or not math.isfinite(peak):
        return IMPOSSIBLE, peak
    value = -count * math.log(total / count)
    value -= log_determinant(bins.measured[4], bins.closed, work[_PHI], work[_SENS])
    return (value if math.isfinite(value) else IMPOSSIBLE), peak


def response_of(work: FloatArray) -> tuple[ComplexArray, FloatArray]:
    """G and Phi from a workspace that `respond` filled."""
    return work[_G_RE] + 1j * work[_G_IM], work[_PHI].copy()
