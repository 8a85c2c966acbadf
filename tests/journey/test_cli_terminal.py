"""The command line as a process: on a terminal, in a pipe, interrupted, with a stand-in for the pipeline."""

import json
import os
import pty
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from inverse.cli.watch import Plain, duration
from inverse.outcome import Exit

ROOT = Path(__file__).parents[2]

BRIEF = """\
name = "lamp"
[emitter]
shape = "disk"
diameter_mm = 2.0
[lens]
aperture_mm = 20.0
[target]
half_angle_deg = 6.0
"""

STAND_IN = """
import sys, time, types
import inverse

def result(code, word):
    verdict = {"exit_code": code, "word": word, "missing": []}
    return {"name": "lamp", "verdict": verdict, "got": {"share": 0.5, "share_se": 0.002}}

def design(brief, folder, *, watch, resume=False, nearest=False):
    watch.stage("starts", 4)
    try:
        for i in range(STEPS):
            time.sleep(PAUSE)
            watch.step(min(i + 1, 4), "share 0.5 [bold]")
    except KeyboardInterrupt:
        watch.stage("verify")
        print("READY AGAIN", file=sys.stderr, flush=True)
        time.sleep(LAST)
        return result(130, "interrupted, best so far written")
    return result(0, "done")

def limits(brief):
    import jax
    found = jax.config.jax_enable_x64, jax.config.jax_compilation_cache_dir
    return {"ceiling": 1.0, "ceiling_with_losses": 0.92, "jax": list(found)}

fake = types.ModuleType("inverse.pipeline")
fake.design, fake.limits = design, limits
sys.modules["inverse.pipeline"] = inverse.pipeline = fake
from inverse.cli import main
main()
"""


def stand_in(steps=4, pause=0.02, last=0.0):
    return STAND_IN.replace("STEPS", str(steps)).replace("PAUSE", str(pause)).replace("LAST", str(last))


def start(folder, code, *arguments, **more):
    (folder / "lamp.toml").write_text(BRIEF)
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "XDG_CACHE_HOME": str(folder / "cache")}
    environment.pop("PYTHONUNBUFFERED", None)  # as it is on most desks: output waits in a buffer
    environment |= {"TERM": "xterm", "COLUMNS": "100", **more.pop("environment", {})}
    return subprocess.Popen([sys.executable, "-c", code, *arguments], cwd=folder, env=environment, **more)


def piped(folder, code, *arguments, **more):
    process = start(folder, code, *arguments, stdout=subprocess.PIPE, stderr=subprocess.PIPE, **more)
    out, err = process.communicate(timeout=60)
    return process.returncode, out, err


def on_terminal(folder, code, *arguments):
    """Exit code and everything a terminal receives."""
    master, slave = pty.openpty()
    process = start(folder, code, *arguments, stdout=slave, stderr=slave, stdin=slave)
    os.close(slave)
    received = b""
    while True:
        try:
            piece = os.read(master, 65536)
        except OSError:  # how Linux says that the other side has closed
            break
        if not piece:
            break
        received += piece
    os.close(master)
    return process.wait(timeout=60), received.decode()


def interrupted(folder, code, times):
    """Exit code and error stream of a design that gets Ctrl-C ``times`` times."""
    pipes = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE, "text": True}
    process = start(folder, code, "design", "lamp.toml", **pipes)
    seen = []
    for piece in ("starts: 4 steps", "READY AGAIN")[:times]:
        while piece not in "".join(seen):
            line = process.stderr.readline()
            assert line, seen
            seen.append(line)
        time.sleep(0.1)  # into the sleep that the signal is to break
        process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=60)
    return process.returncode, out, "".join(seen) + err


def test_a_terminal_gets_a_live_bar(tmp_path):
    """On a terminal progress is drawn in place, with the count and the live figure as they came."""
    code, received = on_terminal(tmp_path, stand_in(), "design", "lamp.toml")
    assert code == Exit.DONE
    assert all(piece in received for piece in ("\x1b[", "4/4", "share 0.5 [bold]", "lamp: done"))


def test_a_pipe_gets_no_control_codes(tmp_path):
    """The same run into pipes: plain text only, the result apart from the progress."""
    code, out, err = piped(tmp_path, stand_in(), "design", "lamp.toml")
    assert code == Exit.DONE and b"\x1b" not in out + err and b"\r" not in out + err
    assert b"lamp: done" in out and b"starts: 4 of 4" in err


def test_a_stream_without_unicode_gets_ascii(tmp_path):
    """PYTHONIOENCODING=ascii: no crash on a degree or plus-minus sign."""
    ascii_only = {"PYTHONIOENCODING": "ascii"}
    code, out, err = piped(tmp_path, stand_in(), "design", "lamp.toml", environment=ascii_only)
    assert code == Exit.DONE and b"50.0 +/- 0.2 %" in out and b"?" not in out


def test_one_interrupt_lets_the_run_finish(tmp_path):
    """Ctrl-C once: told what happens, the pipeline keeps its best lens, code 130 and the verdict."""
    code, out, err = interrupted(tmp_path, stand_in(1000, 0.05), 1)
    assert code == Exit.INTERRUPTED and "interrupted, best so far written" in out
    assert "Press it again to give up" in err and "Traceback" not in err


def test_a_second_interrupt_gives_up(tmp_path):
    """Ctrl-C twice: out at once with 130, no verdict, no traceback."""
    code, out, err = interrupted(tmp_path, stand_in(1000, 0.05, last=50.0), 2)
    assert code == Exit.INTERRUPTED and out == "" and "Given up" in err and "Traceback" not in err


@pytest.mark.parametrize("options", [(), ("--json",)])
def test_a_closed_pipe_ends_quietly(tmp_path, options):
    """`inverse limit ... | head -0`: no complaint about the reader that left."""
    pipes = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE}
    process = start(tmp_path, stand_in(), "limit", "lamp.toml", *options, **pipes)
    process.stdout.close()
    err = process.stderr.read()
    process.stderr.close()
    process.wait(timeout=60)
    assert err == b""


@pytest.mark.parametrize("cache, used", [("cache", True), ("taken/by/a/file", False)])
def test_jax_is_in_double_precision_with_a_cache_of_its_own(tmp_path, cache, used):
    """64 bit always; compiled code in the user's cache folder, and without one when it cannot be made."""
    (tmp_path / "taken").write_text("")
    code, place = "import jax\n" + stand_in(), tmp_path / cache
    environment = {"XDG_CACHE_HOME": str(place)}
    ended, out, err = piped(tmp_path, code, "limit", "lamp.toml", "--json", environment=environment)
    assert (ended, err) == (Exit.DONE, b"")
    assert json.loads(out)["limit"]["jax"] == [True, str(place / "inverse" / "compiled") if used else None]


def test_the_module_is_the_command_line(tmp_path):
    """python -m inverse answers like the installed command."""
    command = [sys.executable, "-m", "inverse", "limit", "none.toml"]
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    done = subprocess.run(command, cwd=tmp_path, capture_output=True, text=True, env=environment)
    assert (done.returncode, done.stdout, done.stderr) == (Exit.BRIEF, "", "none.toml: does not exist\n")


def test_plain_progress_estimates_what_is_left():
    """20 s for 2 of 10 steps leaves 80 s; lines come at most every 10 s, and the last step always."""
    lines, now = [], [0.0]
    watcher = Plain(lines.append, clock=lambda: now[0])
    watcher.stage("fine", 10)
    for done in range(1, 11):
        now[0] += 4.0 if done > 2 else 10.0
        watcher.step(done, "share 0.8")
    assert lines == [
        "fine: 10 steps",
        "fine: 1 of 10, share 0.8, about 1 min 30 s left",
        "fine: 2 of 10, share 0.8, about 1 min 20 s left",
        "fine: 5 of 10, share 0.8, about 32 s left",
        "fine: 8 of 10, share 0.8, about 11 s left",
        "fine: 10 of 10, share 0.8, 52 s",
    ]


@pytest.mark.parametrize("seconds, words", [
    (0.2, "0 s"), (59.4, "59 s"), (60, "1 min 00 s"), (3599.6, "1 h 00 min"), (7500, "2 h 05 min")
])
def test_durations_are_said_as_people_do(seconds, words):
    """Seconds, minutes with seconds, hours with minutes."""
    assert duration(seconds) == words
