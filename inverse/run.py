"""The folder of a run: its log, its checkpoint, its result. Everything is written aside and renamed.

``checkpoint.npz`` holds the state of every job of the search (plain arrays, no code) and the
digest of the brief, so that a stopped run carries on to the lens it would have found.
"""

import csv
import io
import json
import zipfile
from pathlib import Path

import numpy as np

from inverse.export.atomic import write_bytes, write_text
from inverse.outcome import BriefError
from inverse.refine.search import Memory

CHECKPOINT = "checkpoint.npz"


class Run(Memory):
    """A run in ``folder`` for a brief of this ``digest``; ``resume`` takes up an earlier one."""

    def __init__(self, folder, digest, resume=False):
        self.folder, self.digest = Path(folder), digest
        self.rows, self.jobs = [], {}
        self.folder.mkdir(parents=True, exist_ok=True)
        if resume:
            self._take_up()

    def _take_up(self):
        path = self.folder / CHECKPOINT
        if not path.is_file():
            raise BriefError([f"{path}: no checkpoint to resume from. Leave out --resume."])
        try:
            # opened here: NumPy leaves a file it cannot read open
            with open(path, "rb") as file, np.load(file, allow_pickle=False) as saved:
                if str(saved["digest"]) != self.digest:
                    raise BriefError([f"{path}: made from another brief. Leave out --resume to start afresh."])
                for name in saved.files:
                    if name == "digest":
                        continue
                    job, part = name.rsplit("/", 1)
                    self.jobs.setdefault(job, {})[part] = saved[name]
        except (ValueError, KeyError, OSError, EOFError, zipfile.BadZipFile) as fault:
            if isinstance(fault, BriefError):
                raise
            raise BriefError([f"{path}: not a checkpoint of this version. Leave out --resume."]) from None
        log = self.folder / "log.csv"
        self.rows = read_log(log) if log.is_file() else []

    def recall(self, job):
        saved = self.jobs.get(job)
        if saved is None:
            return None
        leaves = [saved[str(i)] for i in range(len(saved) - 2)]
        return leaves, int(saved["step"]), bool(saved["finished"])

    def keep(self, job, leaves, step, finished):
        self.jobs[job] = {str(i): a for i, a in enumerate(leaves)} | {"step": step, "finished": finished}
        arrays = {f"{name}/{part}": a for name, parts in self.jobs.items() for part, a in parts.items()}
        buffer = io.BytesIO()
        np.savez(buffer, digest=self.digest, **arrays)
        write_bytes(self.folder / CHECKPOINT, buffer.getvalue())

    def record(self, row):
        """One more row of the convergence log, on disk at once."""
        self.rows.append(row)
        out = io.StringIO()
        writer = csv.DictWriter(out, fieldnames=list(self.rows[0]), lineterminator="\n", extrasaction="ignore")
        writer.writeheader()
        for each in self.rows:
            writer.writerow({k: f"{v:.7g}" if isinstance(v, float) else v for k, v in each.items()})
        write_text(self.folder / "log.csv", out.getvalue())

    def write_json(self, name, content):
        write_text(self.folder / name, json.dumps(content, indent=1, allow_nan=False) + "\n")


def read_log(path):
    """Rows of a log.csv, numbers as floats."""

    def number(text):
        try:
            return float(text)
        except ValueError:
            return text

    with open(path, newline="", encoding="utf-8") as file:
        return [{k: number(v) for k, v in row.items() if v is not None} for row in csv.DictReader(file)]
