"""The model a device carries beside the plant: what both ends expect between two updates.

Letters: A, B0, B1, C of the device's own sampled plant; rows 0…n−1 of `device` are its state, rows n…2n−1 its answer to
a unit load since the last update.
"""

from __future__ import annotations

from auditor.arrays import FloatArray, IntArray
from auditor.kernels import rows as R
from auditor.kernels.jit import compiled


@compiled
def predict(now: FloatArray, device: FloatArray, offset: FloatArray, C: FloatArray) -> None:
    """ŷ of the device's model: its state (rows 0…n−1 of `device`) seen through C, plus the offset set at updates."""
    for lane in range(now.shape[1]):
        now[R.PREDICTED, lane] = offset[0, lane]
    for i in range(len(C)):
        c = C[i]
        for lane in range(now.shape[1]):
            now[R.PREDICTED, lane] += c * device[i, lane]


@compiled
def correct(
    now: FloatArray, which: IntArray, updates: int, device: FloatArray, offset: FloatArray, C: FloatArray, floor: float
) -> None:
    """At an update both ends learn y: set the offset, and blame a constant load for what the model missed.

    The missed part divided by the plant's response to a unit load since the last update is the load's step
    (Lunze & Lehmann 2010, disturbance estimator); the response is floored so that noise is not amplified.
    """
    n = len(C)
    for at in range(updates):
        lane = which[at]
        missed = now[R.MEASUREMENT, lane] - now[R.PREDICTED, lane]
        response = 0.0
        for i in range(n):
            response += C[i] * device[n + i, lane]
            device[n + i, lane] = 0.0
        response = response if abs(response) > abs(floor) else floor
        offset[0, lane] += missed
        offset[1, lane] += missed / response


@compiled
def advance_device(
    device: FloatArray, following: FloatArray, offset: FloatArray, new: FloatArray, old: FloatArray, u0: float, t: int,
    A: FloatArray, B0: FloatArray, B1: FloatArray, delay: int,
) -> None:  # fmt: skip
    """One period of the device's model, driven by the positions since the span began and by its load estimate.

    `new` and `old` are the positions d and d + 1 samples ago; before the span the model rests.
    """
    n, lanes = len(B0), device.shape[1]
    for i in range(n):
        b0, b1 = B0[i], B1[i]
        for lane in range(lanes):
            recent = new[lane] - u0 if t >= delay else 0.0
            before = old[lane] - u0 if t > delay else 0.0
            following[i, lane] = b0 * (recent + offset[1, lane]) + b1 * (before + offset[1, lane])
            following[n + i, lane] = b0 + b1
        for j in range(n):
            a = A[i, j]
            if a != 0.0:
                for lane in range(lanes):
                    following[i, lane] += a * device[j, lane]
                    following[n + i, lane] += a * device[n + j, lane]
    for i in range(2 * n):
        for lane in range(lanes):
            device[i, lane] = following[i, lane]
