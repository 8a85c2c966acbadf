"""From whatever went wrong to one sentence and one exit code; a traceback only on request."""

import contextlib
import errno
import json
import os
import signal
import sys
import threading
import traceback

from inverse.outcome import BeyondLimit, BriefError, Exit

DISK = {
    errno.ENOSPC: "The disk is full. Free some space and run again.",
    errno.EDQUOT: "Your disk quota is used up. Free some space and run again.",
    errno.EROFS: "The disk is read-only. Choose another folder with --out.",
    errno.EACCES: "No permission. Choose another folder with --out, or change its permissions.",
    errno.EPERM: "No permission. Choose another folder with --out, or change its permissions.",
    errno.ENOTDIR: "A file stands where a folder is wanted. Choose another folder with --out.",
    errno.EEXIST: "A file stands where a folder is wanted. Choose another folder with --out.",
    errno.EIO: "The disk reports an error.",
}


class Refused(Exception):
    """The command stops with ``code``; its sentences have still to be said."""

    def __init__(self, code, word, sentences):
        super().__init__(*sentences)
        self.code, self.word, self.sentences = code, word, list(sentences)


def refusal(fault):
    """The Refused for an exception; None for one that is a defect of the tool."""
    if isinstance(fault, Refused):
        return fault
    if isinstance(fault, BriefError):
        return Refused(Exit.BRIEF, "brief cannot be used", fault.problems)
    if isinstance(fault, BeyondLimit):
        hint = "Nothing was optimised. `--nearest` with `inverse design` goes for the nearest possible beam."
        return Refused(Exit.BEYOND_LIMIT, "beyond the limit", [str(fault), hint])
    if isinstance(fault, KeyboardInterrupt):
        return Refused(Exit.INTERRUPTED, "interrupted", ["Given up: nothing more is written."])
    if isinstance(fault, MemoryError):
        advice = "Not enough memory. Lower search.verify_rays or search.effort."
        return Refused(Exit.FAULT, "out of memory", [advice])
    if isinstance(fault, OSError):
        where = f"{fault.filename}: " if fault.filename else ""
        reason = DISK.get(fault.errno, "")
        return Refused(Exit.FAULT, "file trouble", [f"{where}{fault.strerror or fault}. {reason}".rstrip()])
    return None


@contextlib.contextmanager
def door(*, debug=False, as_json=False):
    """Everything a command does happens inside; whatever goes wrong leaves by SystemExit with its code."""
    try:
        try:
            yield
        finally:
            sys.stdout.flush()  # a reader that has gone is noticed here, not after the last line of Python
    except BrokenPipeError:
        _close_stdout()
        raise SystemExit(Exit.FAULT) from None
    except (Exception, KeyboardInterrupt) as fault:
        answer = refusal(fault)
        if answer is None:
            kind, text = type(fault).__name__, " ".join(str(fault).split())
            sentence = f"A defect in the tool, not in your brief: {kind}: {text[:300]}"
            answer = Refused(Exit.FAULT, "defect", [sentence])
            if not debug:
                answer.sentences.append("Run with --debug for the traceback.")
        if debug:
            traceback.print_exception(fault)
        for sentence in answer.sentences:
            print(sentence, file=sys.stderr)
        if as_json:
            verdict = {"exit_code": int(answer.code), "word": answer.word, "missing": answer.sentences}
            print(json.dumps({"verdict": verdict}, indent=1))
        raise SystemExit(int(answer.code)) from None


def _close_stdout():
    """The reader of our output has gone; say nothing more, and let the interpreter's last flush succeed."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


@contextlib.contextmanager
def interruptible(say):
    """Ctrl-C once: ``say`` what happens and raise KeyboardInterrupt where the work is; twice: give up.

    The work decides what to do with the first: a design keeps its best lens, verifies and writes it.
    """
    before = signal.getsignal(signal.SIGINT)
    if before is signal.SIG_IGN or threading.current_thread() is not threading.main_thread():
        yield  # started in the background, where Ctrl-C is not for us
        return
    presses = 0

    def pressed(number, frame):
        nonlocal presses
        presses += 1
        if presses == 1:
            say("Ctrl-C: finishing with the best lens so far. Press it again to give up at once.")
        raise KeyboardInterrupt

    signal.signal(signal.SIGINT, pressed)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)
