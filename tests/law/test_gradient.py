"""The merit's gradient against central differences, block by block of the free numbers.

The points are fixed, so the merit is a smooth function of the lens but for rays that cross an edge of
zero width (critical angle, ends of a clip) within one difference: hence the small step and the
tolerance relative to the block.
"""

import functools
from dataclasses import fields, replace

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from inverse.profile import bspline
from inverse.profile.lens import shape
from inverse.refine import merit
from traced import BARE, BOX, DOMED, PMMA, points, problem, seed_lens, shaken, tracer

SOFTNESS = 0.2
STEP = 1e-6  # mm: truncation ~ STEP² and rounding ~ 1e-16/STEP are both below 1e-8
BELLY = -0.35  # mm; the flank's middle moves in, so its lower part stands steeper
SCENES = {"bare, spot": (BARE, "spot", 0.0), "dome, shape, stepped": (DOMED, "shape", -0.5)}


@functools.cache
def compiled(name):
    """lens -> ((merit, figures), gradient)."""
    emitter, target, _ = SCENES[name]
    given, u = problem(emitter, target), points(512)
    return jax.jit(jax.value_and_grad(lambda lens: merit.evaluate(lens, given, u, SOFTNESS), has_aux=True))


def usual(name):
    """A seed with every number shaken by 20 µm, so that nothing is straight or level by accident."""
    emitter, target, drop = SCENES[name]
    lens = seed_lens(emitter, drop, target=target)
    flank = shape(lens, BOX).flank
    # on six spans the lowest one is lit, so that the foot counts as well
    heights = lambda x: flank.at(flank.start + x * (flank.end - flank.start))[0]  # noqa: E731
    return shaken(replace(lens, flank=jnp.asarray(bspline.fit(heights, 6)[1:-1])), 4, 0.02)


def leaky(name):
    """The same with a bellied flank: part of it is met below the critical angle."""
    lens = usual(name)
    belly = np.sin(np.linspace(0.0, np.pi, lens.flank.shape[0]))
    return replace(lens, flank=lens.flank + jnp.asarray(BELLY * belly))


LENSES = [(name, make) for name in SCENES for make in (usual, leaky)]
CASES = [
    pytest.param(name, make, field, id=f"{name}, {make.__name__}: {field}")
    for name, make in LENSES
    for field in ("corner", "foot", "wall", "centre", "flank", "exit", "disc", "step")
    if "stepped" in name or field not in ("disc", "step")
]


@functools.cache
def gradient(name, make):
    (value, figures), slope = compiled(name)(make(name))
    return float(value), figures, slope


def central(name, lens, field):
    """Central differences with respect to every number of one block."""
    block = np.asarray(getattr(lens, field), float)
    out = np.empty(block.size)
    for i in range(block.size):
        move = STEP * np.eye(block.size)[i].reshape(block.shape)
        up, down = (float(compiled(name)(replace(lens, **{field: jnp.asarray(block + s * move)}))[0][0]) for s in (1, -1))
        out[i] = (up - down) / (2 * STEP)
    return out.reshape(block.shape)


@pytest.mark.parametrize("name, make, field", CASES)
def test_every_block_of_the_gradient_is_that_of_central_differences(name, make, field):
    """Each component within 1e-6 of the largest of its block (1e-9 to 6e-8 when written)."""
    slope = np.asarray(getattr(gradient(name, make)[2], field))
    expected = central(name, make(name), field)
    assert np.abs(expected).max() > 1e-6  # far above the floor below: the comparison is not empty
    np.testing.assert_allclose(slope, expected, rtol=0.0, atol=1e-6 * np.abs(expected).max() + 1e-9)


@pytest.mark.parametrize("name, make", LENSES)
def test_every_free_number_is_covered(name, make):
    """The blocks above are all the fields of a lens, and every gradient is finite."""
    lens = make(name)
    blocks = {f.name for f in fields(lens) if getattr(lens, f.name) is not None}
    assert blocks == {case.values[2] for case in CASES if case.values[:2] == (name, make)}
    assert all(np.all(np.isfinite(a)) for a in jax.tree_util.tree_leaves(gradient(name, make)[2]))


def test_the_bellied_flank_leaks():
    """Control: some light leaves the bellied lens by the flank below the critical angle, none the usual one."""
    leak = [float(tracer()(make("bare, spot"), points(), 1e-3, PMMA)[1]["flank leak"]) for make in (usual, leaky)]
    assert leak[0] == 0.0 and leak[1] > 5e-4
