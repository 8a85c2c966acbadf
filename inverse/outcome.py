"""Why something stopped, what to do about it, and the exit code the shell sees."""

import enum


class Exit(enum.IntEnum):
    """Exit codes of the command line. Documented in README.md; scripts rely on them."""

    DONE = 0  # asked-for beam delivered, every constraint met
    FAULT = 1  # a defect in the tool, or the disk, not in the brief
    BRIEF = 2  # the brief or a file it names cannot be used
    BEYOND_LIMIT = 3  # physics forbids the brief; nothing was optimised
    MISSED = 4  # a lens was written, but it misses the target or a constraint
    DISAGREEMENT = 5  # tracer and verifier disagree: do not use the lens
    INTERRUPTED = 130  # Ctrl-C; the best lens so far was verified and written


class Stop(enum.Enum):
    """Why the refinement stopped. ``advice`` says what a person could do next."""

    CONVERGED = "converged"
    STEPS_EXHAUSTED = "steps exhausted"
    INTERRUPTED = "interrupted"
    NOT_FINITE = "not finite"

    @property
    def advice(self):
        return {
            Stop.CONVERGED: "",
            Stop.STEPS_EXHAUSTED: "Still improving when the steps ran out. Raise search.effort, or accept.",
            Stop.INTERRUPTED: "Stopped by you. `inverse design BRIEF --resume` carries on from the best lens.",
            Stop.NOT_FINITE: "A value that is not a number reached the merit; the last good lens was kept. Report the brief as a defect.",
        }[self]


class BriefError(ValueError):
    """The brief cannot be used. ``problems`` holds one full line for every fault found."""

    def __init__(self, problems):
        self.problems = list(problems)
        super().__init__("\n".join(self.problems))


class BeyondLimit(ValueError):
    """Physics forbids the brief; the message names the nearest possible one."""
