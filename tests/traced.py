"""Lenses and scenes for the tests of the tracer and the refinement, each compiled once a session.

Compiling costs far more than tracing here, so the tests share a handful of compiled functions and
small fixed sets of points.
"""

import functools
from dataclasses import replace

import jax
import jax.numpy as jnp
import numpy as np

from inverse.emitter import Disk, Dome, Emitter, Rectangle
from inverse.profile import moulding
from inverse.profile.envelope import Envelope
from inverse.refine import merit
from inverse.seed import flux_map
from inverse.target import Port, Surroundings, Target
from inverse.trace import farfield

PMMA = 1.49253  # Beadie et al., Appl. Opt. 54, F139 (2015), at 587.6 nm
BOX = Envelope(radius=10.0, height=14.0)
AIR = Surroundings()
WATER = Surroundings("water", 1.3334, Port(1.49253, 6.0, 1.5))  # Daimon & Masumura 2007; a PMMA port
SPOT = Target("spot", float(np.radians(7.0)))
SHAPE = Target(
    "shape",
    float(np.radians(14.0)),
    angles=np.radians([0.0, 5.0, 10.0, 14.0]),
    intensity=np.array([1.0, 0.9, 0.5, 0.1]),
)
TARGETS = {"spot": SPOT, "shape": SHAPE}
BARE = Emitter((Rectangle(1.0, 1.0),))
DOMED = Emitter((Rectangle(1.0, 1.0),), dome=Dome(1.3, 1.41))
ROUND = Emitter((Disk(0.55),))




@functools.cache
def seed_lens(emitter=BARE, drop=0.0, box=BOX, target="spot", pocket=1.6):
    """A lens of the seed families that exists in the box."""
    recipe = flux_map.Recipe(pocket, 1.6, 0.5 if target == "spot" else 0.0, False, drop)
    lens = flux_map.build(recipe, emitter, box, PMMA, TARGETS[target])
    assert lens is not None
    return lens


def shaken(lens, seed, size=0.01):
    """``lens`` with every free number moved a little: ``size`` mm, drafts only ever steeper."""
    rng = np.random.default_rng(seed)
    leaves, tree = jax.tree_util.tree_flatten(lens)
    moved = [a + size * jnp.asarray(rng.uniform(-1.0, 1.0, np.shape(a))) for a in leaves]
    wall = lens.wall + size * jnp.asarray(rng.uniform(0.0, 1.0, lens.wall.shape))
    return replace(jax.tree_util.tree_unflatten(tree, moved), wall=wall)


def random_lens(seed, drop=None, box=BOX, emitter=BARE):
    """A seed lens with every number shaken by up to 30 µm; ``drop`` None for a single exit face."""
    return shaken(seed_lens(emitter, drop or 0.0, box), seed, 0.03)


@functools.cache
def scene(emitter=BARE, absorption=2e-3, surroundings=AIR, target="spot", box=BOX):
    return farfield.scene(emitter, box, PMMA, absorption, surroundings, TARGETS[target])


def tracer(emitter=BARE, box=BOX, absorption=2e-3):
    """Compiled ``trace(lens, u, blur, index)`` of an emitter in a box; port and target come after it."""
    return _tracer(emitter, box, absorption)


@functools.cache
def _tracer(emitter, box, absorption):
    given = scene(emitter, absorption, box=box)

    def run(lens, u, blur, index):
        return farfield.trace(lens, replace(given, glass=given.glass._replace(index=index)), u, blur)

    return jax.jit(run)


def problem(emitter=BARE, target="spot", best=0.9):
    return merit.Problem(scene(emitter, target=target), tuple(moulding.limits(BOX, emitter)), best)


def share(lens, given, u, *, index=PMMA, edge=None):
    """Sharp-edged share inside the target (or ``edge``, rad) by the designed roads."""
    beam, _, _ = tracer(given.emitter, given.box, given.glass.absorption)(lens, u, 1e-6, index)
    q, weight, _ = farfield.land(beam, given, farfield.highest(lens, given.box))
    return float(jnp.sum(jnp.where(q < np.tan(edge or given.target.half_angle) ** 2, weight, 0.0)))


@functools.cache
def points(count=1024, seed=5):
    return jnp.asarray(farfield.points(count, seed))
