"""What a run found, as plain numbers: the blocks of ``result.json`` (keys and units in DEVELOPERS.md)."""

import importlib.metadata
import math

import numpy as np

from inverse import limit, photometry
from inverse.outcome import Exit, Stop
from inverse.photometry import FarField
from inverse.profile import gauge
from inverse.target import Target
from inverse.units import deg

ACTIVE = 0.01  # mm or rad·scale: a limit this close is holding the design back
SHAPE_TOLERANCE = 0.15  # largest accepted rms deviation of a shaped beam, of its peak
MET, MISSED = "delivered", "missed"


def stamp(brief):
    """Where a file comes from: no path, no user, no clock."""
    version = importlib.metadata.version
    return {
        "version": version("inverse"),
        "brief_sha256": brief.digest,
        "seed": brief.plan.seed,
        "effort": brief.plan.effort,
        "jax": version("jax"),
        "numpy": version("numpy"),
        "precision": "float64",
    }


def asked(brief, box, target):
    """The ``asked`` block."""
    block = {
        "kind": target.kind,
        "half_angle_deg": deg(target.half_angle),
        "distance_mm": target.distance,
        "share": target.share,
        "aperture_mm": 2 * box.radius,
        "height_max_mm": box.height,
        "medium": brief.surroundings.name,
    }
    if target != brief.target:
        block["original"] = {"half_angle_deg": deg(brief.target.half_angle), "share": brief.target.share}
    return block


def emitter(brief):
    led = brief.emitter
    return {
        "flux_lm": led.flux,
        "reach_mm": led.reach,
        "area_mm2": led.area,
        "dome_radius_mm": led.dome.radius if led.dome else None,
        "above_board_mm": led.above_board,
    }


def constraints(section, box, led):
    """The ``constraints`` block, measured on the finished section; angles in degrees."""
    rows = []
    for r in gauge.readings(section, box, led):
        show = deg if r.unit == "rad" else float
        rows.append(
            {
                "name": r.name,
                "unit": "deg" if r.unit == "rad" else r.unit,
                "measured": show(r.measured),
                "lower": None if r.lower is None else show(r.lower),
                "upper": None if r.upper is None else show(r.upper),
                "slack": None if math.isinf(r.slack) else show(r.slack),
                "met": bool(r.met),
                "active": bool(r.slack < ACTIVE),
                "where": r.where,
            }
        )
    return rows


def far_field(landing, emitted):
    """The Monte Carlo's far field as an intensity table that starts on the axis.

    Straight lines between ring means do not keep the flux; the table is scaled so that it carries
    what the ledger says goes forward.  ``emitted`` in lm.
    """
    beam = landing.far_field
    theta = np.concatenate([[0.0], beam.angle])
    lead = lambda v: np.concatenate([v[:1], v])
    forward = emitted * (landing.ledger["in target"] + landing.ledger["forward outside target"])
    table = FarField(theta, lead(beam.candela), lead(beam.candela_se))
    scale = forward / table.flux if table.flux > 0 else 1.0
    return FarField(theta, scale * table.candela, scale * table.candela_se)


def _photometry(brief, landing):
    """The ``photometry`` block; figures that assume air are left open in water."""
    block = photometry.figures(far_field(landing, brief.emitter.flux), brief.emitter.flux)
    if brief.surroundings.name != "air":  # water absorbs and scatters: 2√I and I/d² do not hold
        block |= {"beam_distance_m": None, "spots": []}
    return block


def wanted_candela(target: Target, angle, lumens):
    """Intensity (cd) at ``angle`` of the wanted shape carrying ``lumens``."""
    edge = np.linspace(0.0, target.half_angle, 2001)
    shape = np.ones_like(edge) if target.kind == "spot" else np.interp(edge, target.angles, target.intensity)
    whole = 2 * np.pi * np.trapezoid(shape * np.sin(edge), edge)
    scale = lumens / whole if whole else 0.0
    return scale * np.interp(angle, edge, shape, right=0.0)


def deviation(beam, target: Target, lumens):
    """Rms of (I − wanted)/peak of wanted over the target, weighted by solid angle."""
    inside = beam.edges[1:] <= target.half_angle * (1 + 1e-9)
    wanted = wanted_candela(target, beam.angle, lumens)
    weight = beam.solid_angle[inside]
    error = (beam.candela - wanted)[inside] / wanted.max()
    return float(np.sqrt(np.sum(weight * error**2) / np.sum(weight)))


def figures(brief, box, target, bound, landing, tracer, agreement, section):
    """The blocks that come from the verification: got, agreement, ledger, beam, encircled, spot, part."""
    share, se = tracer
    lumens = landing.share * brief.emitter.flux
    beam, ring = landing.beam, landing.encircled
    got = {
        "share": landing.share,
        "share_se": landing.share_se,
        "share_of_ceiling": landing.share / bound.ceiling,
        "share_of_best": landing.share / bound.ceiling_with_losses,
        "designed_paths_share": landing.designed_paths_share,
        "designed_paths_share_se": landing.designed_paths_share_se,
        "tracer_share": share,
        "tracer_share_se": se,
    }
    if target.kind == "shape":
        got["shape_deviation"] = deviation(beam, target, lumens)
    ceiling = limit.ceiling_at(
        brief.emitter, box.radius, box.height, target, brief.surroundings, ring.angle
    ) * bound.transmission
    diameter, centre = gauge.inscribed_circle(section)
    outline = section.dense(400)[0]
    volume = section.volume
    edges = landing.spot.edges
    half = float(edges[-1])
    return {
        "got": got,
        "agreement": {
            "difference": agreement.difference,
            "sigma": agreement.sigma,
            "deviations": agreement.deviations,
            "agrees": agreement.agrees,
        },
        "ledger": landing.ledger,
        "ledger_se": landing.ledger_se,
        "paths": landing.paths,
        "photometry": _photometry(brief, landing),
        "beam": {
            "angle_deg": deg(beam.angle).tolist(),
            "candela": beam.candela.tolist(),
            "candela_se": beam.candela_se.tolist(),
            "wanted_candela": wanted_candela(target, beam.angle, lumens).tolist(),
        },
        "encircled": {
            "angle_deg": deg(ring.angle).tolist(),
            "share": ring.share.tolist(),
            "share_se": ring.share_se.tolist(),
            "ceiling": ceiling.tolist(),
        },
        "spot": {
            ("extent_mm" if landing.spot.in_plane else "extent_deg"): half if landing.spot.in_plane else deg(half),
            "grid": np.round(landing.spot.brightness, 4).tolist(),
            "distance_mm": target.distance,
        }
        | {"peak_lx" if landing.spot.in_plane else "peak_cd": float(landing.spot.brightness.max())},
        "part": {
            "diameter_mm": 2 * float(outline[:, 0].max()),
            "height_mm": float(np.ptp(outline[:, 1])),
            "volume_mm3": volume,
            "mass_g": volume * brief.material.density if brief.material.density else None,
            "thickest_mm": diameter,
            "thickest_at_mm": [float(v) for v in centre],
            "index": brief.index,
            "wavelength_um": brief.wavelength,
            "material": brief.material.name,
        },
    }


def verdict(result, stop, holds):
    """The ``verdict`` block: exit code, one word, and a sentence for everything that is missing."""
    missing, got, wanted = [], result["got"], result["asked"]
    if wanted["share"] is not None and got["share"] < wanted["share"] - 2 * got["share_se"]:
        missing.append(
            f"{got['share']:.2%} of the light in the target, {wanted['share'] - got['share']:.2%} less than the "
            f"{wanted['share']:.4g} asked for"
        )
    if wanted.get("original"):
        missing.append("the beam as asked is beyond the limit; this is the nearest possible one")
    if got.get("shape_deviation", 0.0) > SHAPE_TOLERANCE:
        missing.append(
            f"the beam differs from the wanted shape by {got['shape_deviation']:.1%} of its peak (rms), "
            f"more than {SHAPE_TOLERANCE:.0%}"
        )
    if "lens.json" in result["files"] and any("no sound solid" in note for note in result.get("notes", ())):
        missing.append("lens.step: the section makes no sound solid, see the notes")
    for row in result["constraints"]:
        if not row["met"]:
            bound = row["lower"] if row["lower"] is not None else row["upper"]
            missing.append(
                f"{row['name']} {row['measured']:.3f} {row['unit']}, wanted {bound:.3f}: "
                f"off by {-row['slack']:.3f} {row['unit']} at {row['where']}"
            )
    code, word = (Exit.MISSED, MISSED) if missing else (Exit.DONE, MET)
    if not result["agreement"]["agrees"]:
        agreement = result["agreement"]
        code, word = Exit.DISAGREEMENT, "not to be trusted"
        missing.insert(
            0, f"tracer and verifier differ by {agreement['difference']:+.5f}, {agreement['deviations']:.1f} standard errors"
        )
    if not holds:
        code, word = Exit.DISAGREEMENT, "not to be trusted"
        missing.insert(0, "the verified share exceeds the largest share physics allows: a defect in the tool")
    if stop is Stop.INTERRUPTED and code in (Exit.DONE, Exit.MISSED):
        code, word = Exit.INTERRUPTED, "interrupted"
    return {"exit_code": int(code), "word": word, "missing": missing}
