"""The three commands. Each reads its input, calls one function of ``inverse.pipeline`` and shows the answer.

Everything slow is imported inside the commands, so that ``--help`` answers at once.
"""

import json
import sys
from enum import Enum
from pathlib import Path
from typing import Annotated, Optional

import typer

from inverse.cli import engine, watch
from inverse.cli.door import Refused, door, interruptible
from inverse.outcome import BeyondLimit, Exit
from inverse.refine.plan import EFFORTS

app = typer.Typer(
    add_completion=False,
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
    help="From a target beam to a TIR lens that can be moulded. Start with: inverse limit BRIEF",
)

EffortName = Enum("EffortName", {name: name for name in EFFORTS})
Brief = Annotated[Path, typer.Argument(metavar="BRIEF", help="The brief, a TOML file.", show_default=False)]
Json = Annotated[bool, typer.Option("--json", help="Write the result to the output as JSON.")]
Quiet = Annotated[bool, typer.Option("--quiet", "-q", help="No progress, one line at the end.")]
Debug = Annotated[bool, typer.Option("--debug", help="Show the traceback when something goes wrong.")]


def _page(stream):
    """A page on a stream: styles on a terminal only, never a control code elsewhere."""
    from rich.console import Console

    from inverse.cli.verdict import Page

    return Page(Console(file=stream, highlight=False, color_system="auto" if stream.isatty() else None))


def _watcher(quiet):
    """Live on a terminal, plain lines elsewhere, nothing when quiet."""
    if quiet:
        return watch.Silent()
    page = _page(sys.stderr)
    return watch.Live(page.console) if page.console.is_terminal else watch.Plain(page.line)


def _show_json(answer):
    """JSON on the output; a NaN in it is a defect and raises ValueError."""
    print(json.dumps(answer, indent=1, allow_nan=False))


def _read(path, effort=None):
    from inverse import brief as briefs

    return briefs.read(path, effort=effort.value if effort else None)


def _missing(wanted, found):
    """Why a design would be refused, with the nearest possible beams; [] when the limit allows it."""
    box, target = wanted.envelope, wanted.target
    if target.share is None or target.share <= found["ceiling_with_losses"]:
        return []
    from inverse import limit as physics

    try:
        physics.refuse_impossible(
            wanted.emitter, box.radius, box.height, target, wanted.surroundings, wanted.index
        )
    except BeyondLimit as fault:
        return [str(fault)]
    return []  # light that returns after two reflections can carry a lens a little over the uncoated faces


def _own_folder(out, name, resume):
    """``out``/``name``, made and tried for writing before minutes of work; and whether it was made here."""
    folder = out / name
    if resume and not folder.is_dir():
        sentence = f"{folder}: no run to resume there. Leave out --resume."
        raise Refused(Exit.BRIEF, "nothing to resume", [sentence])
    made = not folder.exists()
    folder.mkdir(parents=True, exist_ok=True)
    trial = folder / ".trial"
    trial.write_bytes(b"")
    trial.unlink()
    return folder, made


@app.command()
def limit(brief: Brief, as_json: Json = False, debug: Debug = False):
    """Say what no lens can beat: largest share, smallest lens, narrowest beam, largest candela.

    Takes a second and optimises nothing.

    Example: inverse limit configs/inspection_spot.toml
    """
    with door(debug=debug, as_json=as_json):
        wanted = _read(brief)
        from inverse import pipeline
        from inverse.cli import verdict

        engine.prepare_if_loaded()
        found = pipeline.limits(wanted)
        missing = _missing(wanted, found)
        code = int(Exit.BEYOND_LIMIT if missing else Exit.DONE)
        if as_json:
            stamp = {"name": wanted.name, "brief_sha256": wanted.digest, "notes": wanted.notes}
            _show_json({**stamp, "verdict": {"exit_code": code, "missing": missing}, "limit": found})
        else:
            page = _page(sys.stdout)
            verdict.limits(page, wanted, found)
            for sentence in [*wanted.notes, *missing]:
                page.line(sentence)
        raise SystemExit(code)


@app.command()
def design(
    brief: Brief,
    out: Annotated[Path, typer.Option(metavar="DIR", help="The run goes to DIR/<name>.")] = Path("outputs"),
    effort: Annotated[Optional[EffortName], typer.Option(help="Overrides search.effort.")] = None,
    resume: Annotated[bool, typer.Option("--resume", help="Carry on from the best lens of a run.")] = False,
    nearest: Annotated[bool, typer.Option("--nearest", help="If impossible, take the nearest.")] = False,
    quiet: Quiet = False,
    as_json: Json = False,
    debug: Debug = False,
):
    """Design, verify and write the lens a brief asks for.

    Ctrl-C once stops the search; the best lens so far is verified and written.

    Example: inverse design configs/inspection_spot.toml --effort quick
    """
    with door(debug=debug, as_json=as_json):
        wanted = _read(brief, effort)
        from inverse import pipeline

        folder, made = _own_folder(out, wanted.name, resume)
        try:
            engine.prepare()
            with _watcher(quiet) as watcher, interruptible(watcher.note):
                for sentence in wanted.notes:
                    watcher.note(sentence)
                result = pipeline.design(wanted, folder, watch=watcher, resume=resume, nearest=nearest)
        finally:
            if made and folder.is_dir() and not any(folder.iterdir()):
                folder.rmdir()
        _finish(result, folder, quiet, as_json)


@app.command()
def verify(
    run: Annotated[Path, typer.Argument(metavar="RUN", help="Folder of a run, outputs/<name>.")],
    rays: Annotated[
        Optional[int],
        typer.Option(min=10_000, max=1_000_000_000, help="Rays to trace, in place of the brief's."),
    ] = None,
    quiet: Quiet = False,
    as_json: Json = False,
    debug: Debug = False,
):
    """Check a written lens again, from its files alone, by the independent tracer.

    Example: inverse verify outputs/inspection_spot --rays 10000000
    """
    with door(debug=debug, as_json=as_json):
        from inverse import pipeline

        for name in ("brief.toml", "lens.json"):
            if not (run / name).is_file():
                sentence = f"{run}: not the folder of a run, {name} is missing."
                advice = "Run `inverse design BRIEF` first."
                raise Refused(Exit.BRIEF, "no run there", [sentence, advice])
        engine.prepare_if_loaded()
        with _watcher(quiet) as watcher, interruptible(watcher.note):
            result = pipeline.verify(run, watch=watcher, rays=rays)
        _finish(result, run, quiet, as_json)


def _finish(result, folder, quiet, as_json):
    """Show the result and end with its exit code."""
    from inverse.cli import verdict

    if as_json:
        _show_json(result)
    elif quiet:
        _page(sys.stdout).line(f"{result.get('name', folder.name)}: {result['verdict']['word']}, {folder}")
    else:
        verdict.run(_page(sys.stdout), result, folder)
    raise SystemExit(int(result["verdict"]["exit_code"]))


def _version(asked):
    if asked:
        from inverse import __version__

        print(f"inverse {__version__}")
        raise typer.Exit


@app.callback()
def _top(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Show the version.")
    ] = False,
):
    """Nothing but the options every command shares."""


def run():
    """The application; characters a stream cannot take are replaced instead of raising."""
    for stream in (sys.stdout, sys.stderr):
        stream.reconfigure(errors="replace")
    app(prog_name="inverse")
