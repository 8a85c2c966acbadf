"""The order of travel, one line a stage: brief → limit → search → section → verify → files → report."""

from dataclasses import replace
from pathlib import Path

from inverse import limit
from inverse.outcome import BriefError, Stop

ROOM = 1.5  # clear radius over the least one: refined lenses come within 1 % of the limit there (reference k = 1.5)
PLACE = 2.2  # clear radius over pocket and wall: a flank needs about as much again
UNDATED = "2000-01-01"  # files carry no clock: equal briefs give equal bytes

# The stages are imported where they are used: `inverse limit` answers in a second and needs none of them.


def limits(brief) -> dict:
    """What no lens can beat, as the ``limit`` block of result.json. Takes a moment, optimises nothing."""
    return _limits(brief, brief.envelope, brief.target)[0]


def design(brief, folder, *, watch, resume=False, nearest=False) -> dict:
    """From a brief to a verified lens and its files in ``folder``. Raises BeyondLimit before any optimisation."""
    from inverse.export.atomic import write_text
    from inverse.profile import lens as lenses
    from inverse.profile import moulding
    from inverse.refine import merit, search
    from inverse.run import Run
    from inverse.trace import farfield

    watch.stage("limits")
    target = _possible(brief, nearest)
    box = _sized(brief, target)
    bound = _limits(brief, box, target)[1]
    run = Run(folder, brief.digest, resume)
    write_text(run.folder / "brief.toml", brief.resolved)
    scene = farfield.scene(brief.emitter, box, brief.index, brief.absorption, brief.surroundings, target)
    rules = tuple(moulding.limits(box, brief.emitter))
    problem = merit.Problem(scene, rules, bound.ceiling_with_losses, bound.etendue_ratio)
    found = search.find(problem, brief.plan, brief.index, record=run.record, watch=watch, memory=run)
    section = lenses.section(found.lens, box)
    tracer = found.score.share(found.lens, brief.plan.seed)
    search.forget_compiled()  # the verifier and the CAD kernel need the memory
    context = {
        "search": [
            {"family": t.words, "start_score": t.start, "end_score": t.score, "rounds": t.rounds, "kept": i == 0}
            for i, t in enumerate(found.trials)
        ],
        "screened": found.screened,
        "stopped": {"reason": found.stop.value, "advice": found.stop.advice},
        "tracer": {"share": tracer[0], "share_se": tracer[1]},
    }
    return _finish(brief, run.folder, box, target, section, context, run.rows, brief.plan.verify_rays, watch)


def verify(folder, *, watch, rays=None) -> dict:
    """Trace a finished run again from its files alone, and write result and report anew."""
    from inverse import brief as briefs
    from inverse.export import lens_json
    from inverse.run import read_log

    folder = Path(folder)
    brief = briefs.read(folder / "brief.toml")
    try:
        section, extra = lens_json.read(folder / "lens.json")
        context = extra["run"]
        target = _possible(brief, nearest=True)
        box = replace(brief.envelope, radius=context["radius_mm"])
        if (folder / "lens.step").is_file():
            section = _from_solid(folder, section, watch)
    except (ValueError, KeyError, TypeError) as fault:
        raise BriefError([f"{folder}: the lens cannot be read back: {fault}"]) from None
    log = folder / "log.csv"
    rows = read_log(log) if log.is_file() else []
    return _finish(brief, folder, box, target, section, context, rows, rays or brief.plan.verify_rays, watch)


def _finish(brief, folder, box, target, section, context, rows, rays, watch):
    """From the section to the verdict: verify what was exported, then write every file."""
    from inverse import report, result
    from inverse.export import folder as handover
    from inverse.export import table
    from inverse.run import Run
    from inverse.verify import Points, check_limit, compare, fly
    from inverse.verify.trail import trails

    watch.stage("verifying", 16)
    stamp = result.stamp(brief)
    table.write_profile(folder / "profile.csv", section, stamp=stamp)
    points = Points.read(folder / "profile.csv")
    led, glass = brief.emitter, (brief.index, brief.absorption)
    landing = fly(points, led, *glass, brief.surroundings, target, rays, brief.plan.seed, watch=watch)
    tracer = context["tracer"]["share"], context["tracer"]["share_se"]
    agreement = compare(*tracer, landing)
    block, bound = _limits(brief, box, target)
    holds = check_limit(landing, bound.ceiling).holds
    found = {
        "stamp": stamp,
        "name": brief.name,
        "asked": result.asked(brief, box, target),
        "emitter": result.emitter(brief),
        "limit": block,
        "search": context["search"],
        "stopped": context["stopped"],
        "constraints": result.constraints(section, box, led),
        **result.figures(brief, box, target, bound, landing, tracer, agreement, section),
    }
    watch.stage("writing files")
    files, notes = handover.hand_over(
        folder,
        section,
        name=brief.name,
        material_name=brief.material.name,
        density=brief.material.density or None,
        index=brief.index,
        wavelength=brief.wavelength,
        stamp=stamp,
        far_field=result.far_field(landing, led.flux),
        flux=led.flux,
        date=UNDATED,
        aperture_radius=box.radius,
        run=context | {"radius_mm": box.radius},
    )
    for note in notes:
        watch.note(note)
    found["files"] = ["brief.toml", "log.csv", *files, "result.json"]
    found["notes"] = [*brief.notes, *notes]
    found["verdict"] = result.verdict(found, Stop(context["stopped"]["reason"]), holds)
    drawn = report.write(folder, found, rows, section, trails(points, led, brief.index))
    found["files"] += drawn
    Run(folder, brief.digest).write_json("result.json", found)
    return found


def _limits(brief, box, target):
    """The ``limit`` block and the ``Bound`` behind it."""
    lens = (brief.emitter, box.radius, box.height, target, brief.surroundings, brief.index)
    found = limit.bound(*lens)
    return limit.answers(found, *lens), found


def _possible(brief, nearest):
    """The brief's target, or with ``nearest`` the nearest one physics allows. Raises BeyondLimit."""
    box, target = brief.envelope, brief.target
    lens = (brief.emitter, box.radius, box.height, target, brief.surroundings, brief.index)
    return limit.nearest_target(*lens) if nearest else limit.refuse_impossible(*lens) and target


def _sized(brief, target):
    """The envelope; where the aperture is a maximum and a share is asked, no larger than the share needs."""
    box = brief.envelope
    if not brief.aperture_is_maximum or target.share is None:
        return box
    least = limit.smallest_radius(
        brief.emitter, target, brief.surroundings, brief.index, target.share, height=box.height
    )
    emitter = brief.emitter
    pocket = PLACE * (emitter.keep_out + box.clearance + box.wall)
    return replace(box, radius=min(box.radius, max(ROOM * least, pocket)))


def _from_solid(folder, section, watch):
    """The section recovered from lens.step, or the one of lens.json when the CAD extra is missing."""
    from inverse.export import step
    from inverse.export.cad import CadMissing

    try:
        return step.read_section(folder / "lens.step")
    except CadMissing as fault:
        watch.note(f"Verified from lens.json; lens.step was not read. {fault}")
        return section
