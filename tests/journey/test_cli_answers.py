"""What the commands say and with which code they end, with a stand-in for the pipeline.

The stand-in returns figures made up here; what is tested is the door, not the physics.
"""

import errno
import json
import types

import pytest
from typer.testing import CliRunner

import inverse
from inverse.cli import engine
from inverse.cli.commands import app
from inverse.outcome import BeyondLimit, BriefError, Exit

BRIEF = """\
name = "lamp"
[emitter]
shape = "disk"
diameter_mm = 2.0
[lens]
aperture_mm = 20.0
[target]
half_angle_deg = 6.0
share = 0.7
"""
LIMIT = {
    "ceiling": 0.812,
    "ceiling_with_losses": 0.7498,
    "etendue_ratio": 1.0927,
    "skewness_ceiling": 0.9996,
    "brightness_ceiling": 1.0,
    "transmission": 0.92343,
    "smallest_aperture_mm": 17.75,
    "narrowest_half_angle_deg": 5.09,
    "largest_candela": 11940.0,
}
RESULT = {
    "name": "lamp",
    "verdict": {"exit_code": 4, "word": "misses", "missing": ["share 0.691, wanted 0.7"]},
    "stopped": {"reason": "steps exhausted", "advice": "Raise search.effort, or accept."},
    "asked": {"kind": "spot", "half_angle_deg": 6.0, "distance_mm": None, "share": 0.7, "aperture_mm": 20.0},
    "limit": LIMIT,
    "got": {"share": 0.69132, "share_se": 0.00046, "share_of_ceiling": 0.8514},
    "agreement": {"difference": 0.0002, "sigma": 0.0006, "deviations": 0.33, "agrees": True},
    "constraints": [
        {"name": "least wall", "unit": "mm", "measured": 0.71, "lower": 0.8, "upper": None, "slack": -0.09,
         "met": False, "active": False, "where": "foot"},
        {"name": "pocket draft", "unit": "deg", "measured": 1.5, "lower": 1.5, "upper": None, "slack": 0.0,
         "met": True, "active": True, "where": "pocket wall"},
    ],
    "photometry": {"beam_angle_deg": 10.3, "peak_cd": 8812.4},
    "part": {"diameter_mm": 20.3},
    "files": ["lens.step", "report.html"],
}


class Bench:
    """A folder with a brief, a stand-in pipeline, and the command line in front of them."""

    def __init__(self, folder, pipeline):
        self.folder, self.pipeline, self.seen = folder, pipeline, {}
        self.brief = folder / "lamp.toml"
        self.brief.write_text(BRIEF)
        pipeline.limits = self.limits
        pipeline.design = self.design
        pipeline.verify = self.verify

    def limits(self, brief):
        self.seen["limits"] = brief
        return dict(LIMIT)

    def design(self, brief, folder, *, watch, resume=False, nearest=False):
        self.seen["design"] = (brief, folder, resume, nearest)
        watch.stage("starts", 3)
        watch.note("a note [with brackets]")
        watch.step(3, "share 0.70")
        (folder / "lens.json").write_text("{}")
        (folder / "brief.toml").write_text(brief.resolved)
        return dict(RESULT)

    def verify(self, folder, *, watch, rays=None):
        self.seen["verify"] = (folder, rays)
        return dict(RESULT)

    def run(self, *arguments):
        return CliRunner().invoke(app, [str(a) for a in arguments])

    def design_run(self, *options):
        return self.run("design", self.brief, "--out", self.folder / "out", *options)

    def fail_with(self, fault):
        def design(brief, folder, *, watch, resume=False, nearest=False):
            raise fault

        self.pipeline.design = design
        return self.design_run()


@pytest.fixture
def bench(tmp_path, monkeypatch):
    pipeline = types.ModuleType("inverse.pipeline")
    monkeypatch.setitem(__import__("sys").modules, "inverse.pipeline", pipeline)
    monkeypatch.setattr(inverse, "pipeline", pipeline, raising=False)
    monkeypatch.setattr(engine, "prepare", lambda: None)  # it would set JAX up for all tests of the process
    return Bench(tmp_path, pipeline)


@pytest.mark.parametrize("command", ["limit", "design", "verify"])
def test_every_command_explains_itself_with_an_example(command):
    """The help of a command holds a line that can be typed as it stands."""
    done = CliRunner().invoke(app, [command, "--help"])
    assert done.exit_code == 0 and f"Example: inverse {command} " in done.stdout


def test_the_version_is_the_package_s():
    """--version prints name and version."""
    assert CliRunner().invoke(app, ["--version"]).stdout == f"inverse {inverse.__version__}\n"


@pytest.mark.parametrize("arguments", [["limit"], ["design", "x.toml", "--effort", "heroic"], ["desing", "x"],
                                       ["verify", "x", "--rays", "10"], ["limit", "a", "--fast"]])
def test_wrong_usage_ends_with_the_code_of_a_bad_brief(arguments):
    """Missing or unknown words end with 2 on the error stream, without a traceback."""
    done = CliRunner().invoke(app, arguments)
    assert done.exit_code == Exit.BRIEF and "Usage: " in done.stderr and "Traceback" not in done.stderr


def test_limit_prints_what_no_lens_can_beat(bench):
    """Ceiling, transmission, smallest lens, narrowest beam and largest candela, each with its unit."""
    done = bench.run("limit", bench.brief)
    assert done.exit_code == Exit.DONE and done.stderr == ""
    for piece in ("81.20 %", "92.34 %", "17.75 mm", "5.090°", "11940 cd".replace("11940", "11 940")):
        assert piece in done.stdout, piece


def test_limit_says_when_the_brief_is_beyond_it(bench):
    """More than uncoated faces pass ends with 3, with the figures and the nearest possible share."""
    bench.brief.write_text(BRIEF.replace("0.7", "0.95"))
    done = bench.run("limit", bench.brief)
    assert done.exit_code == Exit.BEYOND_LIMIT and "92.34 %" in done.stdout
    assert "a share of 0.95 within 6 deg is impossible" in done.stdout and "Ask for a share of" in done.stdout


def test_limit_as_json_is_one_document(bench):
    """The limit block under its name, with the digest of the brief and the code."""
    answer = json.loads(bench.run("limit", bench.brief, "--json").stdout)
    assert answer["limit"] == LIMIT and answer["name"] == "lamp"
    assert answer["verdict"] == {"exit_code": 0, "missing": []}
    assert answer["brief_sha256"] == bench.seen["limits"].digest


def test_design_shows_asked_limit_got_and_the_files(bench):
    """The table, the unmet constraint with its values, the verdict, the advice, the paths; code 4."""
    done = bench.design_run()
    folder = bench.folder / "out" / "lamp"
    assert done.exit_code == Exit.MISSED
    lines = [" ".join(line.split()) for line in done.stdout.splitlines()]
    assert "share in the target 70.00 % 74.98 % 69.13 ± 0.05 %" in lines
    assert "clear diameter 20.00 mm 17.75 mm -" in lines
    assert "1 of 2 constraints met; at their limit: pocket draft" in lines
    assert "not met: least wall 0.710 mm, wanted >= 0.800 mm, at foot" in lines
    assert "tracer and independent check agree (0.3 standard errors apart)" in lines
    assert lines[lines.index("lamp: misses") + 1 :] == [
        "share 0.691, wanted 0.7", "Raise search.effort, or accept.", str(folder / "lens.step"),
        str(folder / "report.html"),
    ]


def test_design_hands_everything_on(bench):
    """Brief, folder, --resume and --nearest reach the pipeline; --effort overrides the brief."""
    bench.design_run("--effort", "thorough", "--nearest")
    brief, folder, resume, nearest = bench.seen["design"]
    assert (brief.name, brief.plan.effort, resume, nearest) == ("lamp", "thorough", False, True)
    assert folder == bench.folder / "out" / "lamp"
    bench.design_run("--resume")
    assert bench.seen["design"][2:] == (True, False)


def test_progress_goes_to_the_error_stream_in_plain_lines(bench):
    """Off a terminal: stage, note and step as plain lines; the output holds the result only."""
    done = bench.design_run()
    lines = done.stderr.splitlines()
    assert lines[0] == "starts: 3 steps" and lines[1] == "a note [with brackets]"
    assert lines[2].startswith("starts: 3 of 3, share 0.70, ") and len(lines) == 3
    assert "\x1b" not in done.output and "\r" not in done.output


def test_quiet_leaves_one_line(bench):
    """--quiet: no progress, one line of result."""
    done = bench.design_run("--quiet")
    assert done.stderr == "" and done.stdout == f"lamp: misses, {bench.folder / 'out' / 'lamp'}\n"


def test_the_result_as_json_is_the_result(bench):
    """--json prints what the pipeline returned, progress stays on the error stream."""
    done = bench.design_run("--json")
    assert json.loads(done.stdout) == RESULT and done.exit_code == Exit.MISSED


def test_json_never_holds_a_nan(bench):
    """NaN is no JSON: it is reported as a defect."""
    bench.pipeline.limits = lambda brief: {**LIMIT, "largest_candela": float("nan")}
    done = bench.run("limit", bench.brief, "--json")
    assert done.exit_code == Exit.FAULT and "A defect in the tool" in done.stderr


def test_verify_reads_a_run(bench):
    """The folder of an earlier design and --rays reach the pipeline."""
    bench.design_run()
    folder = bench.folder / "out" / "lamp"
    assert bench.run("verify", folder, "--rays", "20000").exit_code == Exit.MISSED
    assert bench.seen["verify"] == (folder, 20000)


@pytest.mark.parametrize("leave", [(), ("brief.toml",), ("lens.json",)])
def test_verify_refuses_a_folder_without_a_run(bench, leave):
    """Code 2 and the name of the missing file; the pipeline is not asked."""
    for name in leave:
        (bench.folder / name).write_text("")
    done = bench.run("verify", bench.folder)
    assert done.exit_code == Exit.BRIEF and "is missing" in done.stderr and bench.seen == {}


def test_a_bad_brief_is_answered_on_the_error_stream(bench):
    """Every fault on its own line, code 2, nothing on the output, no folder made."""
    bench.brief.write_text(BRIEF.replace("20.0", "-20.0").replace("half_angle_deg", "half_angle"))
    for command in ("limit", "design"):
        done = bench.run(command, bench.brief)
        assert done.exit_code == Exit.BRIEF and done.stdout == ""
        assert [line.split(": ")[0] for line in done.stderr.splitlines()] == [
            f"{bench.brief}:6", f"{bench.brief}:7", f"{bench.brief}:8"]
    assert bench.seen == {} and [p.name for p in bench.folder.iterdir()] == ["lamp.toml"]


def test_a_bad_brief_as_json_has_a_verdict(bench):
    """With --json a script finds code and sentences on the output."""
    bench.brief.write_text("")
    verdict = json.loads(bench.run("limit", bench.brief, "--json").stdout)["verdict"]
    assert verdict["exit_code"] == Exit.BRIEF and "the brief is empty" in verdict["missing"][0]


def test_nothing_to_resume_is_said(bench):
    """--resume without an earlier lens is code 2 and leaves no folder."""
    done = bench.design_run("--resume")
    assert done.exit_code == Exit.BRIEF and "no run to resume" in done.stderr
    assert not (bench.folder / "out").exists()


@pytest.mark.parametrize("fault, code, piece", [
    (BriefError(["x.toml:3: lens: bad"]), Exit.BRIEF, "x.toml:3: lens: bad"),
    (BeyondLimit("at least 21.3 mm are needed."), Exit.BEYOND_LIMIT, "at least 21.3 mm are needed."),
    (OSError(errno.ENOSPC, "No space left on device", "lens.step"), Exit.FAULT, "lens.step: No space left"),
    (OSError(errno.EROFS, "Read-only file system", "a"), Exit.FAULT, "The disk is read-only"),
    (PermissionError(errno.EACCES, "Permission denied", "a"), Exit.FAULT, "No permission"),
    (MemoryError(), Exit.FAULT, "Not enough memory"),
    (ZeroDivisionError("division by zero"), Exit.FAULT, "A defect in the tool, not in your brief: ZeroDiv"),
    (ValueError("two\nlines"), Exit.FAULT, "ValueError: two lines"),
    (KeyboardInterrupt(), Exit.INTERRUPTED, "Given up"),
])
def test_every_failure_is_a_sentence_and_a_code(bench, fault, code, piece):
    """No traceback, a sentence on the error stream, the documented code, and no empty folder left behind."""
    done = bench.fail_with(fault)
    assert done.exit_code == code and piece in done.stderr and done.stdout == ""
    assert "Traceback" not in done.stderr
    assert not (bench.folder / "out" / "lamp").exists()


def test_a_traceback_comes_only_on_request(bench):
    """--debug adds the traceback of a defect."""
    bench.pipeline.limits = lambda brief: 1 / 0
    assert "Run with --debug" in bench.run("limit", bench.brief).stderr
    assert "Traceback" in bench.run("limit", bench.brief, "--debug").stderr


def test_a_file_in_place_of_the_folder_is_said_before_the_work(bench):
    """--out that is a file ends with 1 and a sentence; nothing is computed."""
    (bench.folder / "out").write_text("")
    done = bench.design_run()
    assert done.exit_code == Exit.FAULT and "A file stands where a folder is wanted" in done.stderr
    assert bench.seen == {}


def test_a_result_with_holes_is_shown_with_dashes(bench):
    """Only the verdict is compulsory: missing figures are left out, never made up."""
    bench.pipeline.design = lambda brief, folder, **rest: {
        "verdict": {"exit_code": 5, "word": "tracers disagree", "missing": []}, "agreement": {"agrees": False,
        "deviations": -9.1}, "asked": {"share": 0.7}}
    done = bench.design_run()
    lines = [" ".join(line.split()) for line in done.stdout.splitlines()]
    assert done.exit_code == Exit.DISAGREEMENT
    assert lines == [
        "asked limit got",
        "share in the target 70.00 % - -",
        "tracer and independent check DISAGREE: do not use this lens (9.1 standard errors apart)",
        "lamp: tracers disagree",
    ]
