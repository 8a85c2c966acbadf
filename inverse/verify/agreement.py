"""Do the two roads to a figure agree, and does the figure respect the limit?

With a from the refinement tracer (standard error σ_a) and b from the Monte Carlo (σ_b) the
difference a − b has the standard error σ = √(σ_a² + σ_b²).  They agree when |a − b| <= 4 σ: for
normal errors a false alarm once in 16 000, for the 16 replicates of the Monte Carlo (Student's t
with 15 degrees of freedom) once in 900.  Like is compared with like: the tracer follows the designed roads
only, so it is set against the share by designed roads.
"""

from dataclasses import dataclass

import numpy as np

DEVIATIONS = 4.0
# Two sums of a million weights differ by rounding even when both standard errors are zero.
ROUNDING = 1e-9


@dataclass(frozen=True)
class Agreement:
    """``difference`` is tracer − Monte Carlo, ``sigma`` its standard error, ``deviations`` their ratio."""

    difference: float
    sigma: float
    deviations: float
    agrees: bool


@dataclass(frozen=True)
class LimitCheck:
    """``excess`` share − ceiling (negative is good); ``holds`` is False when physics would be broken."""

    excess: float
    sigma: float
    holds: bool


def compare(tracer_share, tracer_se, landing):
    """Tracer against Monte Carlo on the designed roads; ValueError when a figure is not finite."""
    return _between(tracer_share, tracer_se, landing.designed_paths_share, landing.designed_paths_share_se)


def check_limit(landing, ceiling):
    """The whole share in the target, stray light included, against the largest share physics allows."""
    within = _between(landing.share, landing.share_se, ceiling, 0.0)
    return LimitCheck(within.difference, within.sigma, bool(within.agrees or within.difference < 0.0))


def _between(a, a_se, b, b_se):
    if not np.all(np.isfinite([a, a_se, b, b_se])) or min(a_se, b_se) < 0.0:
        raise ValueError(f"wanted finite shares and errors >= 0, got {a} ± {a_se} and {b} ± {b_se}")
    difference, sigma = float(a - b), float(np.hypot(a_se, b_se))
    beyond = max(abs(difference) - ROUNDING, 0.0)
    deviations = beyond / sigma if sigma > 0.0 else (np.inf if beyond else 0.0)
    return Agreement(difference, sigma, float(deviations), bool(deviations <= DEVIATIONS))
