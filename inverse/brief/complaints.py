"""Every fault of a brief, each with its place: ``file:line: key: what came, what was wanted``.

Nothing stops at the first fault: each reader adds what it finds, and the door raises them all.
"""

from inverse.brief.lines import line_of
from inverse.brief.schema import NESTED, SECTIONS, known_keys
from inverse.brief.wanted import came, nearest, shown
from inverse.outcome import BriefError

VERY_LIKE = 0.8  # likeness (2 × common letters / all letters) that outweighs a key of another section
MOST_LISTED = 50  # more faults than this are counted, not listed: nobody reads further


def key_name(path):
    """A path as people read it: ``emitter.die #2.x_mm``; list items count from 1."""
    text = ""
    for part in path:
        text += f" #{part + 1}" if isinstance(part, int) else f".{shown(part)}" if text else shown(part)
    return text


def unknown_key(path):
    """What to say of a key nobody knows."""
    *table, key = path
    known = known_keys(table)
    places = [(), *((title,) for title in SECTIONS), *NESTED]
    elsewhere = {other: place for place in reversed(places) for other in known_keys(place)}
    very_like, like = nearest(key, known, VERY_LIKE), nearest(key, known)
    if very_like or (like and key not in elsewhere):
        return f"unknown key, did you mean {very_like or like}?"
    other = key if key in elsewhere else nearest(key, elsewhere)
    if other:
        place = elsewhere[other]
        home = f"[{'.'.join(place)}]" if place else "the first lines, before any section"
        return f"unknown key here, {other} belongs in {home}"
    return f"unknown key, known here: {', '.join(known)}"


class Complaints:
    """Faults found so far in ``file``; ``found`` maps paths to lines, as ``lines.positions`` makes it."""

    def __init__(self, file, found=None):
        self.file = str(file)
        self.found = found or {}
        self.entries = []  # (file, line or None, path, message or None for an unknown key)

    def add(self, path, message, *, line=None, file=None):
        """One fault at ``path``; the line is that of the path unless given."""
        line = line_of(self.found, path) if line is None and file is None else line
        self.entries.append((str(file or self.file), line, tuple(path), message))

    def about(self, section):
        """Whether any fault so far concerns the section."""
        return any(path[:1] == (section,) for _, _, path, _ in self.entries)

    def add_invalid(self, prefix, error):
        """Take over what pydantic found in the table at ``prefix``."""
        for fault in error.errors(include_url=False):
            path = (*prefix, *fault["loc"])
            if fault["type"] == "extra_forbidden":
                self.add(path, None)
            elif fault["type"] == "model_type":
                self.add(path, f"got {came(fault['input'])}, wanted a table [{key_name(path)}]")
            elif fault["type"] == "value_error":
                self.add(path, str(fault["ctx"]["error"]))
            else:  # a rule of pydantic's own that no sentence was written for
                self.add(path, f"got {came(fault['input'])}, wanted: {fault['msg']}")

    def raise_if_any(self):
        """Raises BriefError, one line a fault in the order of the file, the brief before its tables."""
        ordered = sorted(self.entries, key=lambda e: (e[0] != self.file, e[0], e[1] or 0))
        problems = []
        for file, line, path, message in ordered[:MOST_LISTED]:
            place = f"{file}:{line}" if line else file
            key = f"{key_name(path)}: " if path else ""
            problems.append(f"{place}: {key}{unknown_key(path) if message is None else message}")
        if len(ordered) > MOST_LISTED:
            problems.append(f"{self.file}: and {len(ordered) - MOST_LISTED} more faults")
        if problems:
            raise BriefError(problems)
