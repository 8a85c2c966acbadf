"""Every photon followed through every surface, in no prescribed order, until it is absorbed or gone.

At each crossing of the body the Fresnel reflectance R decides: reflected with probability R,
transmitted otherwise, the weight unchanged, so that every road is followed in proportion to the
light on it.  Inside the material the weight falls by exp(−μ s) over a path s (mm); the difference
is booked as absorbed.  In air the board (the plane z = −``above_board``, as wide as the body; without
a body without end) and the LED absorb what reaches them.  Light that leaves in air with d_z > 0 goes
on to the port and the target; with d_z <= 0 it is backward.  Light whose last contact was with the
pocket or the foot, or that never met the body, and that leaves outside the target, has left below
the foot.

The first few numbers of chance after those of the source are quasi-random too: they settle the
refractions every photon meets.  The rest come from a pseudo-random generator of the replicate.
"""

import numpy as np
from scipy.stats import qmc

from inverse.verify import ledger, medium
from inverse.verify.crossing import first_crossing
from inverse.verify.landing import Grids, Tally, gather
from inverse.verify.optics import reflectance, reflected, transmitted
from inverse.verify.source import DIMENSIONS, emit, swallowed

REPLICATES = 16
BOUNCES = 30  # surfaces met; what is still under way then is a few parts per million in a clear lens
CHUNK = 2**15  # rays followed together: about 50 MB; a power of two keeps the quasi-random points even
CHANCES = 4  # quasi-random numbers for the first roulettes
ON_BOARD = 1e-9  # mm; a foot standing on the board is the board's own plane to rounding
FREE, BOARD, LED, UNFINISHED, LOST = range(5)


def fly(points, emitter, index, absorption, surroundings, target, rays=1_000_000, seed=1, *, watch=None):
    """Follow at least ``rays`` photons through the body and return the ``Landing``.

    ``points`` Points of the section or None (no lens); ``index`` of the body (air is 1); ``absorption``
    per mm; ``watch`` a Watcher that is told after each of the ``REPLICATES``.  The same ``seed`` gives the
    same figures to the last digit.  Raises ValueError for an index below 1, a negative absorption, too
    few rays, or surroundings and targets that make no sense.
    """
    if not index >= 1.0 or not absorption >= 0.0:
        raise ValueError(f"wanted index >= 1 and absorption >= 0 per mm, got {index} and {absorption}")
    if rays < 16 * REPLICATES:
        raise ValueError(f"wanted at least {16 * REPLICATES} rays, got {rays}")
    flight = _Flight(points, emitter, float(index), float(absorption), surroundings, target)
    each, tallies = -(-rays // REPLICATES), []
    for stream in np.random.SeedSequence(seed).spawn(REPLICATES):
        tallies.append(flight.replicate(each, stream))
        if watch is not None:
            watch.step(len(tallies), f"{each * len(tallies):,} rays")
    return gather(tallies, emitter.flux, each * REPLICATES)


class _Flight:
    """The fixed surroundings of all photons."""

    def __init__(self, points, emitter, index, absorption, surroundings, target):
        self.points, self.emitter, self.index, self.absorption = points, emitter, index, absorption
        self.surroundings, self.target = surroundings, target
        dome = emitter.dome.radius if emitter.dome else 0.0
        self.top = max(points.top if points else 0.0, dome)
        self.board_radius = points.radius if points else np.inf
        self.chain = points.chain if points else None
        names = points.names if points else ()
        self.road = ledger.Road(names)
        inner = [name in ledger.ENTRANCES or name == "foot" for name in names]
        self.pocket = np.array(inner + [bool(names)])  # last entry: nothing touched yet
        medium.check(surroundings, target, self.top)
        self.grids = Grids(target)

    def replicate(self, count, stream):
        scramble, chance = (np.random.default_rng(s) for s in stream.spawn(2))
        sobol = qmc.Sobol(DIMENSIONS + CHANCES, bits=52, seed=scramble)
        tally = Tally(self.grids)
        for start in range(0, count, CHUNK):  # whole powers of two, cut only at the end
            uniform = sobol.random(CHUNK)[: count - start]
            light = emit(self.emitter, uniform)
            tally.emitted += float(np.sum(light.weight))
            quasi = uniform[light.row, DIMENSIONS:]
            self._follow(tally, light.origin, light.direction, light.weight, quasi, chance)
        return tally.close()

    def _follow(self, tally, o, d, w, quasi, chance):
        """Book the whole life of one chunk: positions ``o`` (k, 3), directions ``d``, weights ``w``."""
        inside, code, last = np.zeros(len(w), bool), np.zeros(len(w), np.int64), np.full(len(w), -1)
        skew = o[:, 0] * d[:, 1] - o[:, 1] * d[:, 0]
        tally.skewness = [min(tally.skewness[0], skew.min()), max(tally.skewness[1], skew.max())]
        for event in range(BOUNCES + 1):
            t, u, curve = self._next(o, d, inside)
            stop, fate = self._stops(o, d, inside)
            done = ~(t < stop)
            if event == BOUNCES:
                fate, done = np.where(done, fate, UNFINISHED), np.ones_like(done)
            fate[done & inside & np.isinf(t)] = LOST
            self._close(tally, o[done], d[done], w[done], code[done], last[done], skew[done], fate[done])
            go = np.flatnonzero(~done)
            if not len(go):
                return
            o, d, w, t, u, last = o[go], d[go], w[go], t[go], u[go], curve[go]
            inside, code, skew, quasi = inside[go], code[go], skew[go], quasi[go]
            if self.absorption:
                taken = np.where(inside, -np.expm1(-self.absorption * t), 0.0)
                tally.book("absorbed in the material", w * taken)
                w = w * (1.0 - taken)
            o = o + t[:, None] * d
            uniform = quasi[:, event] if event < CHANCES else chance.random(len(w))
            d, inside, happening = self._interface(o, d, inside, u, last, uniform)
            code = self.road.after(code, event, last, happening)

    def _next(self, o, d, inside):
        if self.chain is None:
            return np.full(len(o), np.inf), None, None
        found = first_crossing(self.chain, o, d, inside)
        return found.t, found.u, found.curve

    def _stops(self, o, d, inside):
        """Distance (k,) to whatever absorbs in air, and which it is (``FREE`` with distance infinite)."""
        dz, height = d[:, 2], o[:, 2] + self.emitter.above_board
        board = np.where(dz == 0.0, np.inf, -height / np.where(dz == 0.0, 1.0, dz))
        reached = (board > -ON_BOARD) & (dz < 0.0) | (board > ON_BOARD) & (dz > 0.0)
        board = np.where(reached & ~inside, board, np.inf)
        if np.isfinite(self.board_radius):
            at = o[:, :2] + np.where(np.isfinite(board), board, 0.0)[:, None] * d[:, :2]
            board = np.where(np.hypot(*at.T) <= self.board_radius + ON_BOARD, board, np.inf)
        led = np.where(inside, np.inf, swallowed(self.emitter, o, d))
        stop = np.minimum(board, led)
        return stop, np.where(np.isinf(stop), FREE, np.where(led < board, LED, BOARD))

    def _interface(self, o, d, inside, u, curve, uniform):
        """New directions, sides and happenings at points ``o`` of the surface."""
        outward = self.chain.outward(u, curve, o)
        normal = np.where(inside, -1.0, 1.0)[:, None] * outward  # towards the side the ray comes from
        cosine = np.clip(-np.sum(d * normal, 1), 0.0, 1.0)
        before, behind = np.where(inside, self.index, 1.0), np.where(inside, 1.0, self.index)
        part, cosine_behind = reflectance(cosine, before, behind)
        back = uniform < part
        through = transmitted(d, normal, cosine, cosine_behind, before, behind)
        d = np.where(back[:, None], reflected(d, normal, cosine), through)
        happening = np.where(back, np.where(part == 1.0, ledger.TOTAL, ledger.PART), ledger.THROUGH)
        return d, inside ^ ~back, happening

    def _close(self, tally, o, d, w, code, last, skew, fate):
        """Book photons whose flight has ended."""
        if not len(w):
            return
        designed = tally.book_roads(self.road, code, w)
        for kind, account in (
            (BOARD, "absorbed in the board"),
            (LED, "absorbed in the emitter"),
            (UNFINISHED, "still bouncing"),
            (LOST, "lost numerically"),
        ):
            tally.book(account, w[fate == kind])
        under = self.pocket[last]
        back = (fate == FREE) & (d[:, 2] <= 0.0)
        tally.book("below the foot", w[back & under])
        tally.book("backward", w[back & ~under])
        k = np.flatnonzero((fate == FREE) & (d[:, 2] > 0.0))
        if not len(k):
            return
        arrival = medium.arrive(self.surroundings, self.target, self.top, o[k], d[k])
        tally.book("reflected by the port", w[k] * (1.0 - arrival.passed))
        landed = w[k] * arrival.passed
        wanted = arrival.theta <= self.target.half_angle
        tally.book("in target", landed[wanted])
        tally.book("below the foot", landed[~wanted & under[k]])
        tally.book("forward outside target", landed[~wanted & ~under[k]])
        tally.designed += float(np.sum(landed[wanted & designed[k]]))
        tally.drift = max(tally.drift, float(np.abs(arrival.skewness - skew[k]).max()))
        tally.land(arrival, landed)
