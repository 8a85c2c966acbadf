"""How hard to search: tuning only, never what is wanted."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Plan:
    """``effort`` scales the number of starts and steps; ``seed`` fixes every random choice."""

    effort: str = "normal"  # "quick", "normal", "thorough"
    seed: int = 1
    exit_face: str = "auto"  # "auto", "single" or "stepped"
    verify_rays: int = 1_000_000
EFFORTS = ("quick", "normal", "thorough")
