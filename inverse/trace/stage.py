"""Cuts a long traced computation into pieces that XLA compiles each for itself.

XLA's CPU compiler fuses a chain of array operations into loops, and repeats cheap operations in
every loop that needs their result.  In the gradient of a ray trace, a chain of thousands of
operations, the repetitions multiply: the same arithmetic takes several times as long.  A function
marked ``stage`` stays a call of its own, forwards and in the gradient, so fusion ends at its
edges.  Values are the same to rounding; only time and memory change.
"""

import functools

import jax
from jax.experimental.xla_metadata import set_xla_metadata


def stage(function):
    """``function`` compiled apart. Arrays among its arguments are traced, everything else is static."""

    @functools.wraps(function)
    def call(*args, **options):
        leaves, tree = jax.tree_util.tree_flatten(args)
        arrays = [a for a in leaves if isinstance(a, jax.Array)]

        def body(*arrays):
            given = iter(arrays)
            full = [next(given) if isinstance(a, jax.Array) else a for a in leaves]
            return function(*jax.tree_util.tree_unflatten(tree, full), **options)

        with set_xla_metadata(inlineable="false"):
            return jax.jit(body)(*arrays)

    return call
