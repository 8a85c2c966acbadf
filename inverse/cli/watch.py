"""Live progress: a bar with a time estimate on a terminal, plain lines anywhere else.

Both write to the error stream, so the output stream holds the result only.
"""

import time

from inverse.progress import Watcher

EVERY = 10.0  # s between plain lines of one stage: a log stays short and still shows life


def duration(seconds):
    """Seconds as people say them: 45 s, 3 min 20 s, 2 h 05 min."""
    seconds = round(seconds)
    if seconds < 60:
        return f"{seconds} s"
    if seconds < 3600:
        return f"{seconds // 60} min {seconds % 60:02d} s"
    return f"{seconds // 3600} h {seconds % 3600 // 60:02d} min"


class Plain(Watcher):
    """One line at the start of a stage, one every ten seconds, one at its end; no control codes."""

    def __init__(self, write, clock=time.monotonic):
        self.write, self.clock = write, clock
        self.name, self.total, self.started, self.last = "", None, clock(), clock()

    def __enter__(self):
        return self

    def __exit__(self, *exception):
        return None

    def stage(self, name, total=None):
        self.name, self.total = name, total
        self.started = self.last = self.clock()
        self.write(f"{name}: {total} steps" if total else name)

    def step(self, done, text=""):
        now = self.clock()
        ended = self.total is not None and done >= self.total
        if not ended and now - self.last < EVERY:
            return
        self.last = now
        parts = [f"{self.name}: {done}" + (f" of {self.total}" if self.total else "")]
        if text:
            parts.append(text)
        if ended:
            parts.append(duration(now - self.started))
        elif self.total and done > 0:
            parts.append(f"about {duration((now - self.started) * (self.total - done) / done)} left")
        self.write(", ".join(parts))

    def note(self, text):
        self.write(text)


class Live(Watcher):
    """A bar per stage, kept on the screen when the stage is over."""

    def __init__(self, console):
        from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn, TimeRemainingColumn

        self.progress = Progress(
            TextColumn("{task.description}", markup=False),
            BarColumn(bar_width=24),
            TextColumn("{task.fields[count]}", markup=False),
            TimeElapsedColumn(),
            TimeRemainingColumn(),
            TextColumn("{task.fields[text]}", markup=False),
            console=console,
        )
        self.task = self.total = None

    def __enter__(self):
        self.progress.start()
        return self

    def __exit__(self, *exception):
        self.close_stage()
        self.progress.stop()

    def close_stage(self):
        """Stop the clock of the present stage; a stage of unknown length counts as complete."""
        if self.task is None:
            return
        if self.total is None:
            self.progress.update(self.task, total=1, completed=1)
        self.progress.stop_task(self.task)
        self.task = None

    def stage(self, name, total=None):
        self.close_stage()
        self.total = total
        self.task = self.progress.add_task(name, total=total, count="", text="")

    def step(self, done, text=""):
        if self.task is not None:
            count = f"{done}/{self.total}" if self.total else str(done)
            self.progress.update(self.task, completed=done, count=count, text=text)

    def note(self, text):
        self.progress.console.print(text, markup=False, highlight=False)


class Silent(Watcher):
    """For --quiet: as the base class, with the manners of the other two."""

    def __enter__(self):
        return self

    def __exit__(self, *exception):
        return None
