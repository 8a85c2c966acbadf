"""The refinement's tracer against the Monte Carlo that shares no code with it, on lenses as seeded.

Differential rays of the designed roads on graphs in JAX on one side; on the other the exported
section, every road followed by chance in NumPy.
"""

import jax.numpy as jnp
import numpy as np
import pytest

from inverse.profile.lens import section
from inverse.trace import farfield
from inverse.verify import Points, compare, fly
from traced import AIR, BARE, BOX, DOMED, PMMA, WATER, points, random_lens, scene, share

RAYS = 60_000
CASES = {"bare": (BARE, AIR, None), "dome": (DOMED, AIR, None), "water": (DOMED, WATER, None), "stepped": (BARE, AIR, -0.5)}


def traced(lens, given, index=PMMA):
    """Share by the designed roads and its standard error, from 16 shifts of 1024 points."""
    shifts = np.random.default_rng(2).random((16, 3))
    sets = [farfield.shifted(points(), jnp.asarray(s)) for s in shifts]
    found = [share(lens, given, u, index=index) for u in sets]
    return float(np.mean(found)), float(np.std(found, ddof=1) / 4.0)


def flown(lens, given, rays=RAYS):
    return fly(Points.of(section(lens, BOX)), given.emitter, PMMA, 2e-3, given.surroundings, given.target, rays)


@pytest.mark.parametrize("name", CASES)
def test_both_roads_lead_to_the_same_share(name):
    """Within 4 standard errors, both of them together below half a percent of the light."""
    emitter, surroundings, drop = CASES[name]
    lens, given = random_lens(7, drop, emitter=emitter), scene(emitter, surroundings=surroundings)
    agreement = compare(*traced(lens, given), flown(lens, given))
    assert agreement.agrees, agreement
    assert agreement.sigma < 2e-3


def test_an_index_wrong_by_one_per_cent_is_seen():
    """Control: the tracer with 1.01 n disagrees by far more than 4 standard errors."""
    lens, given = random_lens(7), scene()
    agreement = compare(*traced(lens, given, index=1.01 * PMMA), flown(lens, given))
    assert not agreement.agrees and agreement.deviations > 8.0
