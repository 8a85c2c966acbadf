"""Laws that hold for any lens: energy, skewness, reversal, scale, turning, chance."""

import numpy as np
import pytest

from inverse.emitter import Disk, Dome, Emitter, Rectangle
from inverse.progress import Watcher
from inverse.target import Port, Surroundings, Target
from inverse.verify import Points, fly
from inverse.verify.crossing import first_crossing
from inverse.verify.flight import REPLICATES
from inverse.verify.optics import reflectance, reflected, transmitted
from lens_samples import PMMA, moulded

AIR = Surroundings()
WATER = Surroundings("water", 1.3334, Port(1.49253, 6.0, 1.5))
LED = Emitter((Rectangle(1.0, 0.7, 0.1, -0.2), Disk(0.3, -0.6, 0.5)), dome=Dome(1.5, 1.41))
BARE = Emitter((Disk(0.5),))
RAYS = 20_000
PARTS = {
    "plain": Points.of(moulded()),
    "stepped": Points.of(moulded(stepped=True)),
    "flanged": Points.of(moulded(stepped=True, flanged=True)),
}
CASES = [
    ("plain", AIR, Target("spot", 0.12)),
    ("stepped", WATER, Target("spot", 0.12)),
    ("flanged", WATER, Target("spot", 0.12, distance=500.0)),
]


@pytest.fixture(scope="module", params=CASES, ids=lambda c: c[0])
def landing(request):
    part, around, target = request.param
    return fly(PARTS[part], LED, PMMA, 2e-3, around, target, RAYS)


def test_every_photon_ends_in_one_account(landing):
    """The ledger sums to 1 to rounding, no entry is negative, and next to nothing is lost numerically."""
    assert sum(landing.ledger.values()) == pytest.approx(1.0, abs=1e-12)
    assert min(landing.ledger.values()) >= 0.0
    assert landing.ledger["lost numerically"] < 1e-5


def test_every_photon_took_one_road(landing):
    """The roads and what the material swallowed sum to 1."""
    whole = sum(landing.paths.values()) + landing.ledger["absorbed in the material"]
    assert whole == pytest.approx(1.0, abs=1e-12)


def test_skewness_is_conserved_by_a_body_of_revolution(landing):
    """n (x d_y − y d_x) of every ray that lands is that at the source, to 1e-9 mm, port included."""
    assert landing.skewness_drift < 1e-9
    low, high = landing.skewness
    assert low < -0.5 and high > 0.5  # the source is skew indeed: the law is not empty


def test_figures_hang_together(landing):
    """Designed roads are part of the share; the encircled curve grows, and meets the share at the edge."""
    assert 0.0 < landing.designed_paths_share <= landing.share <= 1.0
    assert np.all(np.diff(landing.encircled.share) >= 0.0)
    at_edge = np.interp(0.12, landing.encircled.angle, landing.encircled.share)
    assert at_edge == pytest.approx(landing.share, abs=1e-9)
    forward = landing.ledger["in target"] + landing.ledger["forward outside target"]
    forward += landing.ledger["below the foot"]
    for beam in (landing.beam, landing.far_field):
        assert np.sum(beam.candela * beam.solid_angle) / LED.flux == pytest.approx(forward, abs=1e-9)


def _route(chain, place, direction, inside, index, steps):
    """Follow rays that always pass unless totally reflected; returns all places, directions and sides."""
    legs = []
    for _ in range(steps):
        found = first_crossing(chain, place, direction, inside)
        ok = np.isfinite(found.t)
        place, direction, inside = (x[ok] for x in (place, direction, inside))
        legs = [tuple(x[ok] for x in leg) for leg in legs]
        place = place + found.t[ok, None] * direction
        out = chain.outward(found.u[ok], found.curve[ok], place)
        N = np.where(inside, -1.0, 1.0)[:, None] * out
        c = -np.sum(direction * N, 1)
        n1, n2 = np.where(inside, index, 1.0), np.where(inside, 1.0, index)
        R, c2 = reflectance(c, n1, n2)
        total = R == 1.0
        turned = reflected(direction, N, c)
        direction = np.where(total[:, None], turned, transmitted(direction, N, c, c2, n1, n2))
        inside = np.where(total, inside, ~inside)
        legs.append((place, direction, inside, c))
    return legs


def test_light_finds_its_way_back():
    """Rays followed in through pocket, flank and exit, then reversed, return to where they started."""
    chain, rng = PARTS["plain"].chain, np.random.default_rng(8)
    count = 4000
    start = np.column_stack([rng.uniform(-0.5, 0.5, (count, 2)), np.zeros(count)])
    d = rng.normal(size=(count, 3))
    d[:, 2] = np.abs(d[:, 2])
    d /= np.linalg.norm(d, axis=1)[:, None]
    legs = _route(chain, start, d, np.zeros(count, bool), PMMA, 2)
    # Two events: in by the pocket, and out or totally reflected.  Now turn every ray round.
    (first, inner, _, c1), (last, out, side, c2) = legs
    steep = (c1 > 0.05) & (c2 > 0.05)  # grazing light magnifies rounding without bound
    first, last, out, side = first[steep], last[steep], out[steep], side[steep]
    assert len(first) > 3000 and 0.2 < side.mean() < 0.9  # both kinds are there
    there = last + np.where(side, 1e-6, 1.0)[:, None] * out
    back = _route(chain, there, -out, side, PMMA, 2)
    np.testing.assert_allclose(back[0][0], last, atol=1e-9)
    np.testing.assert_allclose(back[1][0], first, atol=1e-8)


def test_doubling_every_length_changes_no_share():
    """Same seed, all lengths × 2, absorption / 2: powers of two are exact, so every fraction is equal."""
    half = Emitter((Rectangle(1.0, 1.0),), dome=Dome(1.25, 1.5), above_board=0.5)
    full = Emitter((Rectangle(2.0, 2.0),), dome=Dome(2.5, 1.5), above_board=1.0)
    one, two = PARTS["stepped"], PARTS["stepped"].scaled(2.0)
    a = fly(one, half, PMMA, 4e-3, AIR, Target("spot", 0.1, distance=400.0), RAYS)
    b = fly(two, full, PMMA, 2e-3, AIR, Target("spot", 0.1, distance=800.0), RAYS)
    assert a.paths == b.paths
    for account in a.ledger:
        assert b.ledger[account] == pytest.approx(a.ledger[account], abs=1e-12)


def test_turning_the_led_about_the_axis_turns_nothing_that_counts():
    """A die turned by 90° gives the same shares within 4 σ: the lens cannot tell azimuths apart."""
    lying, standing = Rectangle(1.5, 0.5, 0.3, 0.1), Rectangle(0.5, 1.5, -0.1, 0.3)
    a, b = (
        fly(PARTS["plain"], Emitter((die,)), PMMA, 0.0, AIR, Target("spot", 0.1), RAYS, seed)
        for die, seed in ((lying, 1), (standing, 2))
    )
    assert abs(a.share - b.share) <= 4.0 * np.hypot(a.share_se, b.share_se)


def test_chance_is_fixed_by_the_seed_alone():
    """The same seed gives the same figures to the last digit; another seed gives others."""
    target = Target("spot", 0.1)
    runs = [fly(PARTS["plain"], BARE, PMMA, 1e-3, AIR, target, 5000, seed=s) for s in (3, 3, 4)]
    assert runs[0].ledger == runs[1].ledger and runs[0].paths == runs[1].paths
    np.testing.assert_array_equal(runs[0].spot.fraction, runs[1].spot.fraction)
    assert runs[0].share != runs[2].share


def test_whoever_watches_is_told_after_each_replicate():
    """Progress counts to the number of replicates, with the rays drawn so far."""
    told = []

    class Listener(Watcher):
        def step(self, done, text=""):
            told.append((done, text))

    fly(PARTS["plain"], BARE, PMMA, 0.0, AIR, Target("spot", 0.1), 16_000, watch=Listener())
    assert [done for done, _ in told] == list(range(1, REPLICATES + 1))
    assert told[0][1] == "1,000 rays" and told[-1][1] == "16,000 rays"


def test_standard_errors_are_honest():
    """Sixteen flights scatter as much as they say: ratio of scatter to stated error within its own spread."""
    asked = PARTS["plain"], BARE, PMMA, 0.0, AIR, Target("spot", 0.1), 1024
    flights = [fly(*asked, seed) for seed in range(16)]
    share, se = np.array([f.share for f in flights]), np.array([f.share_se for f in flights])
    ratio = share.std(ddof=1) / np.sqrt(np.mean(se**2))
    # A sample deviation from 16 values has a relative error of 1/√30 = 0.18; 4 of them.
    assert 0.28 < ratio < 1.73


def test_the_error_falls_as_the_rays_grow():
    """16 times the rays: the error falls by 4 at least (plain chance), here by more (quasi-random points)."""
    few, many = (fly(PARTS["plain"], BARE, PMMA, 0.0, AIR, Target("spot", 0.1), n) for n in (4096, 65_536))
    # Each error is known to 1/√30 = 18 %; 4 of their combined spread is a factor 2.
    assert many.share_se < few.share_se / 2.0
    assert many.share_se < 0.7 * np.sqrt(many.share * (1.0 - many.share) / 65_536)  # beats counting


@pytest.mark.parametrize("change, complaint", [
    (dict(index=0.9), "index >= 1"),
    (dict(index=np.nan), "index >= 1"),
    (dict(absorption=-0.1), "absorption >= 0"),
    (dict(rays=100), "at least 256 rays"),
])
def test_bad_requests_are_refused(change, complaint):
    """One sentence says what came and what was wanted."""
    asked = dict(index=PMMA, absorption=0.0, surroundings=AIR, target=Target("spot", 0.1), rays=1000)
    with pytest.raises(ValueError, match=complaint):
        fly(PARTS["plain"], BARE, **{**asked, **change})
