"""Steps in time of the rate-type law: many cells at once where the step is mild, else one by one.

With e the strain counted from zero stress, s' the effective stress and R = ds'/dt::

    de/dt = Cd R + (e/s' - Cd) r_ref [e / (s' Ca)]^(-1/b)

The equation is stiff: the bracket carries a power of 30 to 200. Two changes of variable take all of
the stiffness out. First z = [e/(s' Ca)]^(1/b), the reference rate over the rate at which the rock
now creeps::

    dz/dt = (q/b) (r_ref - R z),     q = 1/s' - Cd/e

Second a clock tau that runs with the creep, d tau = (q/b) dt. While R is constant::

    z(tau)          = z0 exp(-R tau) + r_ref [1 - exp(-R tau)] / R                     exactly
    d tau/d lambda  = [1 - (Cd/Ca) z(tau)^(-b)] / b,   lambda = int dt/s' = ln(s1'/s0') / R

What is left to integrate is the speed of the clock, which only changes with z^b = e/(s' Ca), that
is by a few per cent over most steps: an explicit pair of order 5(4) with error control does it in
one substep per pressure step nearly always.

`mild_steps` is that one substep without a branch or a call of the mathematical library, so that
the compiler works on several cells in one instruction; a cell whose step leaves the range of its
series, or whose error is too large, is left to `other_steps`.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

__all__ = ["mild_steps", "other_steps"]

_TOLERANCE = 2e-10
"""Error of one substep, as a share of the strain counted from zero stress."""
_WIDEST = 32.0
"""Largest |ln z| of a mild step."""


# The series are summed in pairs, pairs of pairs and so on: a processor waits for each link of the
# plain nested form.


@njit(inline="always")
def _exp(x):  # type: ignore[no-untyped-def]
    """exp(x) for |x| <= 1/2: Taylor, the first term left out is 2e-14."""
    x2 = x * x
    x4 = x2 * x2
    return (((1.0 + x) + (1 / 2 + 1 / 6 * x) * x2)
            + ((1 / 24 + 1 / 120 * x) + (1 / 720 + 1 / 5040 * x) * x2) * x4
            + ((1 / 40320 + 1 / 362880 * x) + 1 / 3628800 * x2) * (x4 * x4))


@njit(inline="always")
def _filled(x):  # type: ignore[no-untyped-def]
    """[1 - exp(-x)]/x for |x| <= 1: Taylor, the first term left out is 3e-15."""
    x2 = x * x
    x4 = x2 * x2
    return (((1.0 - 0.5 * x) + (1 / 6 - 1 / 24 * x) * x2)
            + ((1 / 120 - 1 / 720 * x) + (1 / 5040 - 1 / 40320 * x) * x2) * x4
            + (((1 / 362880 - 1 / 3628800 * x) + (1 / 39916800 - 1 / 479001600 * x) * x2)
               + ((1 / 6227020800 - 1 / 87178291200 * x)
                  + (1 / 1307674368000 - 1 / 20922789888000 * x) * x2) * x4) * (x4 * x4))


@njit(inline="always")
def _atanh(s):  # type: ignore[no-untyped-def]
    """atanh(s)/s for |s| <= 1/4: Taylor, the first term left out is 1e-15."""
    q = s * s
    q2 = q * q
    q4 = q2 * q2
    return (((1.0 + 1 / 3 * q) + (1 / 5 + 1 / 7 * q) * q2)
            + ((1 / 9 + 1 / 11 * q) + (1 / 13 + 1 / 15 * q) * q2) * q4
            + ((1 / 17 + 1 / 19 * q) + 1 / 21 * q2) * (q4 * q4))


@njit(inline="always")
def _mild_clock(tau, step, far):  # type: ignore[no-untyped-def]
    """(d tau/d lambda, ln z/z0, z0/z, how far out in the series) when the clock shows `tau`."""
    longest, slope, inflow, b, per_b, share = step
    tau = min(max(tau, 0.0), longest)
    x = slope * tau
    grown = tau * _filled(x) * (inflow - slope)  # z/z0 - 1
    s = grown / (2.0 + grown)
    rise = 2.0 * s * _atanh(s)  # ln[(1 + s)/(1 - s)]
    speed = max(1.0 - share * _exp(-b * rise), 0.0) * per_b
    return speed, rise, 1.0 / (1.0 + grown), max(far, max(abs(x), 4.0 * abs(s)))


@njit(cache=True, nogil=True, error_model="numpy")
def mild_steps(y: np.ndarray, kappa: np.ndarray, exponent: np.ndarray, rate: np.ndarray,
               stress0: np.ndarray, stress1: np.ndarray, seconds: float, after: np.ndarray) -> None:
    """ln z (cell,) `after` a linear change of stress; NaN where the step is not mild."""
    per_second = 1.0 / seconds
    for cell in range(y.size):
        b = exponent[cell]
        per_b, per_stress = 1.0 / b, 1.0 / stress0[cell]
        before = y[cell]
        change = stress1[cell] - stress0[cell]
        slope, growth = change * per_second, change * per_stress
        shrink = 1.0 / (2.0 + growth)
        half = growth * shrink
        # seconds/s' x ln(1 + growth)/growth
        h = seconds * per_stress * (2.0 * shrink) * _atanh(half)
        small = _exp(min(max(-before, -_WIDEST), _WIDEST) / 128.0)
        small *= small
        small *= small
        small *= small
        small *= small
        small *= small
        small *= small
        small *= small
        aged = _exp(-0.25 * b * before)
        aged *= aged
        inflow, share = rate[cell] * small, kappa[cell] * (aged * aged)
        far = max(max(abs(before) * (1.0 / _WIDEST), abs(0.5 * b * before)), 4.0 * abs(half))
        step = (h * per_b, slope, inflow, b, per_b, share)
        k1 = max(1.0 - share, 0.0) * per_b
        k2, _, _, far = _mild_clock(h * (0.2 * k1), step, far)
        k3, _, _, far = _mild_clock(h * (3 / 40 * k1 + 9 / 40 * k2), step, far)
        k4, _, _, far = _mild_clock(h * (44 / 45 * k1 - 56 / 15 * k2 + 32 / 9 * k3), step, far)
        k5, _, _, far = _mild_clock(h * (19372 / 6561 * k1 - 25360 / 2187 * k2 + 64448 / 6561 * k3
                                         - 212 / 729 * k4), step, far)
        k6, _, _, far = _mild_clock(h * (9017 / 3168 * k1 - 355 / 33 * k2 + 46732 / 5247 * k3
                                         + 49 / 176 * k4 - 5103 / 18656 * k5), step, far)
        tau = h * (35 / 384 * k1 + 500 / 1113 * k3 + 125 / 192 * k4 - 2187 / 6784 * k5
                   + 11 / 84 * k6)
        k7, rise, fallen, far = _mild_clock(tau, step, far)
        difference = _difference(h, tau, k1, k3, k4, k5, k6, k7)
        error = difference * b * abs(inflow * fallen - slope) * (1.0 / _TOLERANCE)
        # written so that a NaN, and an infinity on the way, is not mild
        mild = (far <= 1.0) & (error <= 1.0)
        after[cell] = before + rise if mild else math.nan


@njit(inline="always")
def _difference(h, tau, k1, k3, k4, k5, k6, k7):  # type: ignore[no-untyped-def]
    """Error of the clock after a substep `h`, for the pair of Dormand & Prince (1980)."""
    return h * max(
        abs(71 / 57600 * k1 - 71 / 16695 * k3 + 71 / 1920 * k4 - 17253 / 339200 * k5
            + 22 / 525 * k6 - 1 / 40 * k7),
        # the pair's own estimate can vanish by chance where the speed bends inside the
        # step; the cubic through four of the stages then does not
        0.02 * abs(tau / h - 1 / 12 * k1 - 10 / 21 * k3 - 5 / 12 * k4 - 1 / 42 * k7))


@njit(cache=True, nogil=True, error_model="numpy")
def other_steps(y: np.ndarray, kappa: np.ndarray, exponent: np.ndarray, rate: np.ndarray,
                stress0: np.ndarray, stress1: np.ndarray, seconds: float,
                after: np.ndarray) -> None:
    """The same for the cells that `mild_steps` left out: ln z `after` in place of the NaN."""
    for cell in range(y.size):
        if math.isnan(after[cell]):
            after[cell] = _any_step(y[cell], kappa[cell], exponent[cell], rate[cell],
                                    stress0[cell], stress1[cell], seconds)


@njit(cache=True, nogil=True, error_model="numpy")
def _any_step(y: float, kappa: float, b: float, rate: float, stress0: float, stress1: float,
             seconds: float) -> float:
    """ln z after a linear change of stress; the pair of Dormand & Prince (1980), order 5(4)."""
    slope = (stress1 - stress0) / seconds
    growth = (stress1 - stress0) / stress0
    left = seconds / stress0  # lambda
    if abs(growth) > 1e-14:
        left *= math.log1p(growth) / growth
    # keeps exp(R tau) inside the range of floats, for tau <= lambda/b
    longest = 500.0 * b / abs(slope) if slope != 0.0 else math.inf
    h = min(left, longest)
    while left > 0.0:
        # of this substep's start: r_ref/z0 and (Cd/Ca) z0^-b
        inflow, share = rate * math.exp(-y), kappa * math.exp(-b * y)
        k1 = max(1.0 - share, 0.0) / b
        while True:
            k2 = _clock(h * k1 / 5, h, slope, inflow, b, share)[1]
            k3 = _clock(h * (3 * k1 + 9 * k2) / 40, h, slope, inflow, b, share)[1]
            k4 = _clock(h * (44 / 45 * k1 - 56 / 15 * k2 + 32 / 9 * k3),
                        h, slope, inflow, b, share)[1]
            k5 = _clock(h * (19372 / 6561 * k1 - 25360 / 2187 * k2 + 64448 / 6561 * k3
                             - 212 / 729 * k4), h, slope, inflow, b, share)[1]
            k6 = _clock(h * (9017 / 3168 * k1 - 355 / 33 * k2 + 46732 / 5247 * k3 + 49 / 176 * k4
                             - 5103 / 18656 * k5), h, slope, inflow, b, share)[1]
            tau = h * (35 / 384 * k1 + 500 / 1113 * k3 + 125 / 192 * k4 - 2187 / 6784 * k5
                       + 11 / 84 * k6)
            rise, k7 = _clock(tau, h, slope, inflow, b, share)
            difference = _difference(h, tau, k1, k3, k4, k5, k6, k7)
            # as a share of the strain: de/e = b dz/z
            error = difference * b * abs(inflow * math.exp(-rise) - slope) / _TOLERANCE
            if not error > 1.0:
                break
            h *= max(0.1, 0.9 * error ** -0.2)
        y += rise
        left -= h
        h = min(left, longest, h * min(8.0, 0.9 * max(error, 1e-10) ** -0.2))
    return y


@njit(cache=True, nogil=True, error_model="numpy")
def _clock(tau: float, h: float, slope: float, inflow: float, b: float,
           share: float) -> tuple[float, float]:
    """(ln z/z0, d tau/d lambda) when the clock shows `tau`, z = z0 at 0.

    The clock never runs backwards nor faster than 1/b: a stage of the pair that says so, where the
    speed changes abruptly, is put right.
    """
    tau = min(max(tau, 0.0), h / b)
    x = slope * tau
    # exp(-x), and (1 - exp(-x))/slope without cancellation where x is small, nor in exp(-x) where
    # it is large
    if abs(x) < 1e-12:
        decay, filled = 1.0 - x, tau
    elif abs(x) < 0.5:
        lost = math.expm1(-x)
        decay, filled = 1.0 + lost, -lost / slope
    else:
        decay = math.exp(-x)
        filled = (1.0 - decay) / slope
    rise = math.log(decay + inflow * filled)
    return rise, max(1.0 - share * math.exp(-b * rise), 0.0) / b
