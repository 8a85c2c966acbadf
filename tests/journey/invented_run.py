"""An INVENTED run for testing the report: no lens was designed, traced or measured for these figures.

The shape is a textbook collimator: a Cartesian centre lens, the flank that collimates a point
source behind a cylindrical pocket wall (closed forms), a stepped flat exit.  The rays are traced
through it by Snell's law in the plane; every other figure is made up, chosen to be plausible and
to agree with its neighbours (the ledger sums to 1, the share at the target edge is the ledger's).
"""

import numpy as np
from scipy.interpolate import make_interp_spline

from inverse.profile.section import MECHANICAL, REFLECTING, REFRACTING, Curve, Section, line

INDEX, DOME_INDEX, DOME, REACH = 1.4925, 1.41, 1.5, 0.79
FLUX, HALF_ANGLE, TRANSMISSION = 320.0, 5.74, 0.9234
LEDGER = {
    "in target": 0.8132,
    "forward outside target": 0.0768,
    "backward": 0.0412,
    "below the foot": 0.0264,
    "absorbed in the board": 0.0101,
    "absorbed in the emitter": 0.0050,
    "absorbed in the material": 0.0272,
    "reflected by the port": 0.0,
    "still bouncing": 0.0001,
    "lost numerically": 0.0,
}


def section():
    """A collimator of 20 mm clear diameter with a flange."""
    a, n = 3.0, INDEX
    theta = np.radians(np.linspace(96.0, 35.6, 24))
    s = np.cos(theta) / n
    t = (a + n - a / np.sin(theta) + n * a / np.tan(theta)) / (n * (1 - s))
    flank = np.column_stack([a + t * np.sqrt(1 - s**2), a / np.tan(theta) + t * s])
    turn = np.radians(np.linspace(0.0, 36.0, 16))
    focus = a / np.sin(turn[-1]) * (n * np.cos(turn[-1]) - 1) / (n - 1)
    distance = focus * (n - 1) / (n * np.cos(turn) - 1)
    centre = distance[:, None] * np.column_stack([np.sin(turn), np.cos(turn)])
    centre[0, 0] = 0.0
    foot, shoulder = (a + 0.06, flank[0, 1]), tuple(flank[-1])
    edge, top, step, dip = 11.2, shoulder[1] + 1.0, 3.55, shoulder[1] - 1.6
    return Section(
        (
            _spline("centre lens", REFRACTING, centre),
            line("pocket wall", REFRACTING, centre[-1], foot),
            line("foot", MECHANICAL, foot, flank[0]),
            _spline("flank", REFLECTING, flank),
            line("flange underside", MECHANICAL, shoulder, (edge, shoulder[1])),
            line("flange edge", MECHANICAL, (edge, shoulder[1]), (edge - 0.02, top)),
            line("flange top", MECHANICAL, (edge - 0.02, top), (shoulder[0], top)),
            line("exit ring", REFRACTING, (shoulder[0], top), (step, top)),
            line("step", MECHANICAL, (step, top), (step - 0.06, dip)),
            line("exit disc", REFRACTING, (step - 0.06, dip), (0.0, dip)),
        )
    )


def _spline(name, role, points):
    length = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(points, axis=0).T))])
    fit = make_interp_spline(length / length[-1], points, k=3)
    control = fit.c.copy()
    control[0], control[-1] = points[0], points[-1]
    return Curve(name, role, 3, fit.t, control)


def rays(lens, count=13):
    """Paths of ``count`` rays each from the centre and from the edge of the die."""
    angles = np.radians(np.linspace(-84.0, 84.0, count))
    return {
        "centre": [_path(lens, (0.0, 0.0), t) for t in angles],
        "edge": [_path(lens, (REACH, 0.0), t) for t in angles],
    }


def _path(lens, start, theta):
    points = np.concatenate([c.at(np.linspace(0, 1, 500)) for c in lens.curves])
    loop = np.concatenate([points, points[::-1] * (-1, 1)])
    a, b = loop[:-1], loop[1:]
    keep = np.hypot(*(b - a).T) > 1e-9  # mm; points met twice where curves join
    a, b = a[keep], b[keep]
    p, d = np.array(start), np.array([np.sin(theta), np.cos(theta)])
    path, inside = [p], False
    reach = -p @ d + np.sqrt((p @ d) ** 2 - p @ p + DOME**2)
    p = p + reach * d
    path.append(p)
    d = _refract(d, p / DOME, DOME_INDEX)
    for _ in range(8):
        e = b - a
        cross = d[0] * e[:, 1] - d[1] * e[:, 0]
        cross = np.where(np.abs(cross) < 1e-14, np.inf, cross)  # parallel: no crossing
        w = a - p
        along = (w[:, 0] * e[:, 1] - w[:, 1] * e[:, 0]) / cross
        where = (w[:, 0] * d[1] - w[:, 1] * d[0]) / cross
        hit = (along > 1e-7) & (where >= 0) & (where <= 1)  # mm; leave the surface just met
        if not hit.any():
            break
        i = np.argmin(np.where(hit, along, np.inf))
        p = p + along[i] * d
        path.append(p)
        normal = np.array([e[i, 1], -e[i, 0]]) / np.hypot(*e[i])
        normal = normal if normal @ d > 0 else -normal
        bent = _refract(d, normal, INDEX if inside else 1 / INDEX)
        if bent is None:
            d = d - 2 * (d @ normal) * normal
        else:
            d, inside = bent, not inside
    path.append(p + 14.0 * d)
    return np.array(path)


def _refract(d, normal, mu):
    c = d @ normal
    k = 1 - mu**2 * (1 - c**2)
    return None if k < 0 else mu * d + (np.sqrt(k) - mu * c) * normal


def _beam(theta):
    """Candela at ``theta`` (deg): a flat core with a soft edge over weak spill, scaled to the ledger."""
    core, spill = np.exp(-np.log(2) * (theta / 5.15) ** 8), np.exp(-((theta / 24.0) ** 2))
    fine = np.linspace(0, 90, 20001)
    ring = 2 * np.pi * np.sin(np.radians(fine)) * np.radians(fine[1])
    pair = [np.exp(-np.log(2) * (fine / 5.15) ** 8) * ring, np.exp(-((fine / 24.0) ** 2)) * ring]
    inner = fine <= HALF_ANGLE
    matrix = np.array([[p[inner].sum() for p in pair], [p.sum() for p in pair]])
    forward = LEDGER["in target"] + LEDGER["forward outside target"]
    a, b = np.linalg.solve(matrix, FLUX * np.array([LEDGER["in target"], forward]))
    return a * core + b * spill, np.cumsum(a * pair[0] + b * pair[1]) / FLUX, fine


def log():
    """Rows of an invented convergence log in internal units; steps restart with each stage."""
    rng, rows = np.random.default_rng(3), []
    for stage, steps, first, last in (
        ("round 1, start 1: edge ray, stepped exit", 300, 0.60, 0.755),
        ("round 1, start 2: flux map, single exit", 300, 0.58, 0.74),
        ("round 1, start 3: edge ray, single exit", 300, 0.61, 0.77),
        ("round 2, start 1: edge ray, single exit", 500, 0.77, 0.791),
        ("round 2, start 2: edge ray, stepped exit", 500, 0.755, 0.801),
        ("round 3, start 1: edge ray, stepped exit", 900, 0.801, 0.8133),
    ):
        for step in range(10, steps + 1, 10):
            done = 1 - np.exp(-4 * step / steps)
            share = first + (last - first) * done + rng.normal(0, 0.003) * (1 - done)
            rows.append(
                {
                    "stage": stage,
                    "step": step,
                    "merit": 0.95 * (1 - share) + 0.004,
                    "share": share,
                    "share_over_ceiling": share / 0.9230,
                    "pocket draft": np.radians(1.5 + 0.6 * np.exp(-len(rows) / 60)),
                    "pocket clearance": 0.40 + 0.5 * np.exp(-len(rows) / 30) - 0.05 * np.exp(-len(rows) / 25),
                    "least wall": 0.80 - 0.35 * np.exp(-len(rows) / 12) + 0.002,
                    "height": 10.04 - 0.5 * np.exp(-len(rows) / 40),
                    "gradient_norm": 0.2 * np.exp(-len(rows) / 50),
                    "rays": 8192,
                    "seconds": 0.4 * len(rows),
                }
            )
    return rows


def result():
    """A complete result with every optional part."""
    theta = np.arange(0.125, 90, 0.25)
    candela, cumulated, fine = _beam(theta)
    edges = np.concatenate([np.arange(0, 15, 0.25), np.arange(15, 91, 1.0)])
    edges = np.unique(np.append(edges, HALF_ANGLE))
    share = np.interp(edges, fine, cumulated)
    ratio = (np.sin(np.radians(edges)) / np.sin(np.radians(HALF_ANGLE))) ** 2
    wall = np.linspace(-20, 20, 161)
    away = np.hypot(*np.meshgrid(wall, wall))
    return {
        "stamp": {
            "version": "0.1.0",
            "brief_sha256": "7d1c0f6b2e9a4c58b3d47a10e65f92cc0e4b1a8d93f7265c41be08a9d37f5e62",
            "seed": 1,
            "effort": "normal",
            "jax": "0.10.2",
            "numpy": "2.4.0",
            "precision": "float64",
        },
        "name": "Workbench spot, 20 mm",
        "verdict": {"exit_code": 0, "word": "delivered", "missing": []},
        "stopped": {"reason": "converged", "advice": ""},
        "asked": {
            "kind": "spot",
            "half_angle_deg": HALF_ANGLE,
            "distance_mm": None,
            "share": 0.80,
            "aperture_mm": 20.0,
        },
        "emitter": {"flux_lm": FLUX, "reach_mm": REACH, "dome_radius_mm": DOME, "above_board_mm": 0.6},
        "limit": {
            "ceiling": 0.9996,
            "ceiling_with_losses": 0.9230,
            "etendue_ratio": 1.27,
            "skewness_ceiling": 0.9996,
            "brightness_ceiling": 1.0,
            "transmission": TRANSMISSION,
            "smallest_aperture_mm": 17.75,
            "narrowest_half_angle_deg": 5.09,
            "largest_candela": 11940.0,
            "source_etendue_mm2sr": 7.77,
            "target_etendue_mm2sr": 9.87,
        },
        "search": [
            {"family": "edge ray, stepped exit", "start_score": 0.600, "end_score": 0.8133, "kept": True},
            {"family": "edge ray, single exit", "start_score": 0.610, "end_score": 0.791, "kept": False},
            {"family": "flux map, single exit", "start_score": 0.580, "end_score": 0.740, "kept": False},
        ],
        "got": {
            "share": 0.8132,
            "share_se": 0.00039,
            "share_of_ceiling": 0.8132 / 0.9996,
            "share_of_best": 0.8132 / 0.9230,
            "designed_paths_share": 0.8094,
            "designed_paths_share_se": 0.00040,
            "tracer_share": 0.8097,
            "tracer_share_se": 0.00052,
        },
        "agreement": {
            "difference": -0.0003,
            "sigma": 0.00066,
            "deviations": -0.45,
            "agrees": True,
            "mean_transmittance": 0.9178,
        },
        "constraints": [
            _constraint("pocket draft", "deg", 1.5, 1.5, None, True, "pocket wall"),
            _constraint("pocket clearance", "mm", 0.4004, 0.4, None, True, "centre lens, r = 0.00 mm"),
            _constraint("least wall", "mm", 0.802, 0.8, None, True, "foot"),
            _constraint("height", "mm", 10.03, None, 13.0, False, "flange top"),
        ],
        "ledger": dict(LEDGER),
        "ledger_se": {k: float(np.sqrt(v * (1 - v) / 1e6)) for k, v in LEDGER.items()},
        "paths": {
            "pocket wall → flank → exit": 0.5423,
            "centre lens → exit": 0.3134,
            "pocket wall → exit": 0.0214,
            "under the foot": 0.0264,
            "pocket wall → flank → through the step": 0.0113,
            "reflected off the centre lens": 0.0142,
        },
        "photometry": {
            "flux_lm": 284.8,
            "flux_se_lm": 0.2,
            "efficiency": 0.89,
            "peak_cd": float(candela.max()),
            "peak_cd_per_lm": float(candela.max()) / FLUX,
            "beam_angle_deg": 10.3,
            "field_angle_deg": 12.2,
            "beam_distance_m": 2 * float(candela.max()) ** 0.5,
            "ring_contrast": 0.012,
            "ring_contrast_se": 0.007,
            "spots": [
                {"distance_m": 1.0, "illuminance_lx": 10600.0, "diameter_half_flux_mm": 152.0,
                 "diameter_nine_tenths_flux_mm": 214.0},
                {"distance_m": 10.0, "illuminance_lx": 106.0, "diameter_half_flux_mm": 1520.0,
                 "diameter_nine_tenths_flux_mm": None},
            ],
        },
        "beam": {
            "angle_deg": theta.tolist(),
            "candela": candela.tolist(),
            "candela_se": (0.006 * candela + 4 / np.sqrt(theta)).tolist(),
            "wanted_candela": np.where(theta <= HALF_ANGLE, FLUX * 0.923 / 0.0315, 0).tolist(),
        },
        "encircled": {
            "angle_deg": edges.tolist(),
            "share": share.tolist(),
            "share_se": np.sqrt(share * (1 - share) / 1e6).tolist(),
            "ceiling": (TRANSMISSION * np.minimum(1, 1.27 * ratio)).tolist(),
        },
        "spot": {"extent_deg": 20.0, "grid": _beam(away)[0].tolist(), "distance_mm": None},
        "part": {
            "diameter_mm": 22.4,
            "height_mm": 10.03,
            "volume_mm3": section().volume,
            "mass_g": section().volume * 1.19e-3,
            "thickest_mm": 7.05,
            "index": INDEX,
            "material": "PMMA",
        },
        "files": [
            "brief.toml",
            "log.csv",
            "lens.json",
            "profile.csv",
            "lens.step",
            "lens.dxf",
            "beam.ies",
            "beam.ldt",
            "result.json",
            "report.html",
        ],
    }


def _constraint(name, unit, measured, lower, upper, active, where):
    below = np.inf if lower is None else measured - lower
    slack = min(below, np.inf if upper is None else upper - measured)
    return {
        "name": name,
        "unit": unit,
        "measured": measured,
        "lower": lower,
        "upper": upper,
        "slack": float(slack),
        "met": bool(slack >= -1e-9),  # rounding of the subtraction
        "active": active,
        "where": where,
    }
