"""What no lens can beat: étendue, skewness, brightness and the faces' transmission, before any design."""

from inverse.limit.bound import (
    NEARLY_ALL,
    Bound,
    answers,
    bound,
    ceiling_at,
    narrowest_half_angle,
    nearest_target,
    refuse_impossible,
    smallest_radius,
)

__all__ = [
    "NEARLY_ALL",
    "Bound",
    "answers",
    "bound",
    "ceiling_at",
    "narrowest_half_angle",
    "nearest_target",
    "refuse_impossible",
    "smallest_radius",
]
