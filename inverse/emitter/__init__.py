"""The LED: dies, emission law, dome. Plain numbers only; every room may read them."""

from inverse.emitter.led import Dome, Emitter
from inverse.emitter.law import CosinePower, Table
from inverse.emitter.shapes import Disk, Rectangle

__all__ = ["CosinePower", "Disk", "Dome", "Emitter", "Rectangle", "Table"]
