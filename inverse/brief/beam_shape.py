"""A beam named by its beam angle and field angle, as a table.

Symbols: θ angle from the axis; θ50, θ10 half of the beam and field angle (intensity 50 % and 10 %
of the peak, common practice in the trade).  The shape is

    I(θ) = exp(−ln 2 (θ/θ50)^p) ,      p = ln(ln 10 / ln 2) / ln(θ10/θ50) ,

which is 1 on the axis, 1/2 at θ50 and 1/10 at θ10 by construction; p = 2 is a Gaussian, large p a
flat top.  The table ends where I = 1/1000.  Condition: that end lies below 90°.
"""

import numpy as np

GAUSSIAN_RATIO = float(np.sqrt(np.log(10.0) / np.log(2.0)))  # field angle / beam angle for p = 2
LEAST_RATIO, GREATEST_RATIO = 1.02, 6.0  # p = 61 (an edge of 2 %) and p = 0.67 (a cusp)
END = 1e-3  # of the peak


def exponent(beam_angle, field_angle):
    """p from the two full angles, in any one unit."""
    return np.log(np.log(10.0) / np.log(2.0)) / np.log(field_angle / beam_angle)


def end_angle(beam_angle, field_angle):
    """Half-angle where the intensity has fallen to 1/1000, in the unit of the arguments."""
    return beam_angle / 2 * (-np.log2(END)) ** (1.0 / exponent(beam_angle, field_angle))


def table(beam_angle, field_angle):
    """Angles (k,) from 0 and intensities (k,), peak 1, zero added at the end; rad in, rad out.

    Equal steps in angle and in intensity are joined, so that a steep edge has rows too.
    """
    p, last = exponent(beam_angle, field_angle), end_angle(beam_angle, field_angle)
    levels = np.linspace(0.98, 0.02, 97)
    angles = np.union1d(np.linspace(0.0, last, 161), beam_angle / 2 * (-np.log2(levels)) ** (1.0 / p))
    return angles, np.exp(-np.log(2.0) * (angles / (beam_angle / 2)) ** p)
