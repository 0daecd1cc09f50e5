"""The inverse question: the value of one factor that gives a situation exactly the target."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from calibrate.factors.response import Evaluation, Response

Array = npt.NDArray[np.float64]

REACH = 3.0
"""Factors are looked for from the lower bound over this to the upper bound times this."""
MAX_PASSES = 30
BETA_TOLERANCE = 1e-9
LONGEST_STEP = 0.4
NO_EFFECT = 1e-12


def required_factor(response: Response, name: str, target: float, at: Evaluation) -> Array:
    """Return, for every row, the value of one free factor with which beta equals the target.

    The other factors stay as they are. Newton's method on the exact derivative by the logarithm of the factor, in all
    rows at once, kept inside the bracket that each row has shown so far (inverse FORM; A. Der Kiureghian, Y. Zhang
    and C.-C. Li, J. Eng. Mech. 120(5), 1994, solve the same question by another iteration; source from memory).

    Parameters
    ----------
    response : Response
    name : str
        Of a free factor.
    target : float
        Target beta.
    at : Evaluation
        For the other factors; ``gamma`` of shape (f,).

    Returns
    -------
    array (N,)
        NaN where the factor has no effect, beta is undefined, or no value within reach gives the target.
    """
    index = [f.name for f in response.free].index(name)
    factor = response.free[index]
    low = np.full(at.beta.size, np.log(max(factor.lower, 1e-6 * factor.upper) / REACH))
    high = np.full(at.beta.size, np.log(factor.upper * REACH))
    gamma = np.repeat(at.gamma[:, None], at.beta.size, axis=1)
    here = at
    lost = ~at.valid
    for _ in range(MAX_PASSES):
        error = here.beta - target
        slope = here.jacobian[index] * gamma[index]
        lost |= ~np.isfinite(error) | ~(np.abs(slope) > NO_EFFECT)
        done = lost | (np.abs(error) <= BETA_TOLERANCE) | (high - low <= 1e-12)
        if done.all():
            break
        log = np.log(gamma[index])
        # Where beta lies above the target and grows with the factor, the answer lies below, and so on.
        below = (error > 0) == (slope > 0)
        high = np.where(~done & below, np.minimum(high, log), high)
        low = np.where(~done & ~below, np.maximum(low, log), low)
        with np.errstate(all="ignore"):
            step = np.clip(-error / slope, -LONGEST_STEP, LONGEST_STEP)
        next_log = log + step
        outside = (next_log <= low) | (next_log >= high)
        next_log = np.where(outside, 0.5 * (low + high), next_log)
        gamma[index] = np.where(done, gamma[index], np.exp(next_log))
        here = response(gamma, here)
    with np.errstate(invalid="ignore"):
        met = ~lost & (np.abs(here.beta - target) <= BETA_TOLERANCE * 100)
    return np.where(met, gamma[index], np.nan)
