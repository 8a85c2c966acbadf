"""The internal units (mm, rad, lm, cd, µm) and the few conversions made at the door."""

import math

RAD_PER_DEG = math.pi / 180.0


def rad(degrees):
    """Degrees (brief, command line, reports) to radians (everywhere inside)."""
    return degrees * RAD_PER_DEG


def deg(radians):
    """Radians to degrees, for people and files."""
    return radians / RAD_PER_DEG
