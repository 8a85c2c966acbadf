"""The second road: an independent Monte Carlo from the exported section."""

from inverse.verify.agreement import Agreement, LimitCheck, check_limit, compare
from inverse.verify.flight import fly
from inverse.verify.landing import Beam, Encircled, Landing, Spot
from inverse.verify.surface import Points

__all__ = [
    "Agreement",
    "Beam",
    "Encircled",
    "Landing",
    "LimitCheck",
    "Points",
    "Spot",
    "check_limit",
    "compare",
    "fly",
]
