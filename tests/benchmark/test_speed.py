"""Ratios of speed, measured side by side in one run, warm, with their spread.

They judge nothing: they are printed and written to outputs/benchmark.json.

    pytest -m benchmark -s
"""

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from jax.flatten_util import ravel_pytree

from bench import note, ratio, side_by_side
from inverse.emitter import Disk, Emitter
from inverse.export import mesh
from inverse.profile import moulding
from inverse.profile.envelope import Envelope
from inverse.profile.lens import section
from inverse.refine import merit
from inverse.seed import flux_map
from inverse.target import Surroundings, Target
from inverse.trace import farfield

pytestmark = pytest.mark.benchmark
SINE = 0.0995
RAYS = 2048  # as the normal effort uses


def problem(k=1.0):
    """The reference case of size ``k``: a bare disk of radius 1 mm, sine of the half-angle 0.0995, radius k/0.0995."""
    emitter, box = Emitter((Disk(1.0),)), Envelope(radius=k / SINE, height=2 * k / SINE)
    scene = farfield.scene(emitter, box, 1.4918, 0.0, Surroundings(), Target("spot", float(np.arcsin(SINE))))
    return merit.Problem(scene, tuple(moulding.limits(box, emitter)), min(1.0, k * k))


def seed(given, drop=0.0):
    scene = given.scene
    return flux_map.build(
        flux_map.Recipe(1.25, 1.6, 0.5, False, drop), scene.emitter, scene.box, 1.4918, scene.target
    )


def steps(given, lens, rays=RAYS):
    """Compiled value, and value with gradient, of the merit with its limits, and the numbers to call them with."""
    x, unravel = ravel_pytree(lens)
    u, none = jnp.asarray(farfield.points(rays, 0)), jnp.zeros(len(given.limits))
    value = lambda x: merit.augmented(unravel(x), given, u, 0.1, none, 10.0)[0]  # noqa: E731
    return jax.jit(value), jax.jit(jax.value_and_grad(value)), x


@pytest.mark.parametrize("face, drop", [("single", 0.0), ("stepped", -0.5)])
def test_gradient_over_value(face, drop):
    """Value and gradient of the merit over its value alone (wanted: at most 3)."""
    given = problem()
    value, gradient, x = steps(given, seed(given, drop))
    note(f"gradient over value, {face}", **ratio(side_by_side(lambda: value(x), lambda: gradient(x)), 1, 0))


def test_twice_the_rays():
    """The gradient with twice the rays (wanted: at most 2.1)."""
    given = problem()
    lens = seed(given)
    (_, one, x), (_, two, _) = steps(given, lens), steps(given, lens, 2 * RAYS)
    note("twice the rays", **ratio(side_by_side(lambda: one(x), lambda: two(x)), 1, 0))


def test_four_times_the_knots(monkeypatch):
    """The gradient with 48 spans a curve over that with 12 (wanted: at most 1.3)."""
    given, calls = problem(), []
    for spans in (12, 48):
        monkeypatch.setattr(flux_map, "SPANS", dict.fromkeys(flux_map.SPANS, spans) | {"wall": 2})
        _, gradient, x = steps(given, seed(given))
        calls.append(lambda gradient=gradient, x=x: gradient(x))
    note("48 spans over 12", **ratio(side_by_side(*calls), 1, 0))


def test_paths_against_first_hits_on_a_mesh():
    """Full differentiated paths a second on all cores over first hits a second of a ray-mesh engine on one.

    The engine is embreex; the same lens as a mesh of about 200 000 triangles; rays from the emitter.
    """
    pytest.importorskip("embreex")
    trimesh = pytest.importorskip("trimesh")
    from trimesh.ray.ray_pyembree import RayMeshIntersector

    given = problem()
    lens = seed(given)
    _, gradient, x = steps(given, lens)
    paths = 2 * RAYS + RAYS // 4  # centre, flank and direct road
    corners = mesh.facets(section(lens, given.scene.box), 5.5e-4)
    engine = RayMeshIntersector(
        trimesh.Trimesh(corners.reshape(-1, 3), np.arange(3 * len(corners)).reshape(-1, 3), process=True)
    )
    rng = np.random.default_rng(1)
    count = 100_000
    rho, sine, (a, b) = np.sqrt(rng.random(count)), np.sqrt(rng.random(count)), 2 * np.pi * rng.random((2, count))
    starts = np.column_stack([rho * np.cos(a), rho * np.sin(a), np.full(count, 1e-3)])
    ways = np.column_stack([sine * np.cos(b), sine * np.sin(b), np.sqrt(1 - sine**2)])
    seconds = side_by_side(lambda: engine.intersects_first(starts, ways), lambda: gradient(x), turns=20)
    rates = np.array([count, paths]) / np.median(seconds, axis=0)
    note(
        "paths over first hits",
        triangles=len(corners),
        hits_per_s=float(rates[0]),
        paths_per_s=float(rates[1]),
        **ratio(seconds / np.array([count, paths]), 0, 1),
    )


def test_the_error_of_the_quadrature():
    """Exponent of the spread of the share over random shifts in the number of rays (wanted: at most −0.8)."""
    given = problem()
    lens, angles, spread, counts = seed(given), [given.target.half_angle], [], [512, 1024, 2048, 4096, 8192]
    blur = 1e-3 * given.scene.box.radius
    for rays in counts:
        base = jnp.asarray(farfield.points(rays, 0))
        turned = lambda shift, base=base: farfield.shifted(base, shift)  # noqa: E731
        share = jax.jit(lambda s, turned=turned: farfield.flux_inside(lens, given.scene, turned(s), angles, 0.1, blur)[0][0])
        shifts = np.random.default_rng(2).random((48, 3))
        spread.append(np.std([float(share(jnp.asarray(s))) for s in shifts], ddof=1))
    slope = np.polyfit(np.log(counts), np.log(spread), 1)[0]
    note("quadrature", exponent=float(slope), spread=[float(s) for s in spread], rays=counts)
