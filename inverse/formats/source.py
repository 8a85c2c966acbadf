"""A text file being read: its lines, its numbers, and complaints that name the line."""

import math
import os
import re

MOST_BYTES = 16_000_000  # far above any real photometric file; keeps a wrong file from filling memory
MOST_VALUES = 2_000_000  # candela values: a plane every half degree, an angle every 0.05°, and more
NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")


class Source:
    """Lines of one file; ``fault`` makes the ValueError that names file and line (counted from 1)."""

    def __init__(self, text, name):
        self.lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
        self.name = name

    @classmethod
    def read(cls, path):
        """Raises ValueError when the file is too large; OSError when it cannot be read."""
        size = os.path.getsize(path)
        if size > MOST_BYTES:
            raise ValueError(
                f"{path}: {size} bytes is too large for a photometric file (at most {MOST_BYTES})"
            )
        with open(path, "rb") as file:
            return cls(file.read(MOST_BYTES).decode("latin-1"), str(path))

    def fault(self, line, message):
        return ValueError(f"{self.name}:{line}: {message}")

    def number(self, word, line, what):
        """A finite number; a decimal comma, a NaN or a word is refused."""
        if not NUMBER.fullmatch(word):
            hint = ", write a decimal point" if re.fullmatch(r"[+-]?\d+,\d+", word) else ""
            raise self.fault(line, f"{what}: a number is wanted, got {word[:40]!r}{hint}")
        value = float(word)
        if not math.isfinite(value):
            raise self.fault(line, f"{what}: {word[:40]} is too large")
        return value

    def count(self, word, line, what, least, most):
        """A whole number between ``least`` and ``most``."""
        value = self.number(word, line, what)
        if value != int(value) or not least <= value <= most:
            raise self.fault(
                line, f"{what}: a whole number from {least} to {most} is wanted, got {word[:40]}"
            )
        return int(value)
