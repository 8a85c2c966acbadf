"""The box the lens must fit and the rules of the mould: given numbers, no geometry yet."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Envelope:
    """Lengths in mm, angles in rad. ``height`` is that of the whole part, foot to highest point."""

    radius: float  # clear radius of the exit face
    height: float  # largest height of the part
    foot: float = -0.4  # z of the foot, measured from the emitter plane
    clearance: float = 0.4  # least gap between emitter (or dome) and pocket
    draft: float = 0.02617993877991494  # 1.5°, least draft of every wall
    wall: float = 0.8  # least wall thickness
    rim: float = 0.5  # thickness of the rim edge, or of the flange
    thickest: float | None = None  # greatest thickness along z, None = free
    corner_radius: float = 0.0  # least radius of curvature of the optical curves; joints stay sharp, 0 = free
    flange: float = 0.0  # width of the flange outside the clear radius, 0 = none
