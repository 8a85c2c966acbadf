"""What one value of a brief may be: each rule can judge a value and say in words what it wants.

A rule is called with the value that came and returns it converted, or raises ValueError whose text
reads "got ..., wanted ...".  The same words serve the error messages and the resolved brief, so a
range is written once.  TOML types are taken strictly: true is not 1, "22" is not 22.
"""

import datetime
import difflib
import re
from dataclasses import dataclass

LONGEST_TEXT = 200  # characters of a material or file name
LONGEST_SHOWN = 40  # characters of a foreign value or key repeated in a message
RESERVED = {"con", "prn", "aux", "nul"} | {f"{p}{i}" for p in ("com", "lpt") for i in range(1, 10)}  # Windows


def shown(text):
    """``text`` on one line and short enough for a message."""
    text = str(text) if str(text).isprintable() else ascii(str(text))[1:-1]
    return text if len(text) <= LONGEST_SHOWN else text[: LONGEST_SHOWN - 3] + "..."


def came(value):
    """A foreign TOML value in words."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f'"{shown(value)}"' if value.strip() else "an empty text"
    if isinstance(value, int):
        return str(value) if abs(value) < 10**18 else "a whole number of more than 18 digits"
    if isinstance(value, float):
        return repr(value)
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, (list, tuple)):
        return f"a list of {len(value)} value{'' if len(value) == 1 else 's'}"
    if isinstance(value, (datetime.date, datetime.time)):
        return f"the date or time {value}"
    raise TypeError(f"not a TOML value: {type(value)}")


def nearest(word, known, least=0.6):
    """The known word closest to ``word`` and at least so like it, or None."""
    close = difflib.get_close_matches(str(word)[:80].lower(), [k.lower() for k in known], 1, least)
    return next((k for k in known if k.lower() == close[0]), None) if close else None


def figure(number):
    """A limit as people write it: 500, 0.001, 1e+07."""
    return f"{number:g}"


@dataclass(frozen=True)
class Number:
    """A number from ``low`` to ``high``; ``open_low`` or ``open_high`` leave out that end itself."""

    low: float
    high: float
    unit: str = ""
    open_low: bool = False
    open_high: bool = False

    @property
    def words(self):
        low = f"above {figure(self.low)}" if self.open_low else f"from {figure(self.low)}"
        high = f"below {figure(self.high)}" if self.open_high else figure(self.high)
        return f"a number {low} to {high}{' ' if self.unit else ''}{self.unit}"

    def __call__(self, value):
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            quoted = isinstance(value, str) and re.fullmatch(r"\s*[-+]?[\d.]+([eE][-+]?\d+)?\s*", value)
            raise ValueError(f"got {came(value)}, wanted {self.words}{' (without quotes)' if quoted else ''}")
        low = self.low < value if self.open_low else self.low <= value
        high = value < self.high if self.open_high else value <= self.high
        if not (low and high):  # also when the value is nan
            raise ValueError(f"got {came(value)}, wanted {self.words}")
        return float(value) + 0.0  # -0.0 becomes 0.0


@dataclass(frozen=True)
class Whole:
    """A whole number from ``low`` to ``high``."""

    low: int
    high: int
    unit: str = ""

    @property
    def words(self):
        return f"a whole number from {self.low} to {self.high}"

    def __call__(self, value):
        if isinstance(value, bool) or not isinstance(value, int) or not self.low <= value <= self.high:
            raise ValueError(f"got {came(value)}, wanted {self.words}")
        return value


@dataclass(frozen=True)
class Choice:
    """One of a few words."""

    known: tuple[str, ...]
    unit: str = ""

    @property
    def words(self):
        return "one of " + ", ".join(f'"{k}"' for k in self.known)

    def __call__(self, value):
        if not isinstance(value, str) or value not in self.known:
            close = nearest(value, self.known) if isinstance(value, str) else None
            hint = f'; did you mean "{close}"?' if close else ""
            raise ValueError(f"got {came(value)}, wanted {self.words}{hint}")
        return value


@dataclass(frozen=True)
class Text:
    """A short text; ``what`` says of what."""

    what: str
    unit: str = ""

    @property
    def words(self):
        return f"{self.what}, in quotes, up to {LONGEST_TEXT} characters"

    def __call__(self, value):
        fits = isinstance(value, str) and value.strip() and value.isprintable()
        if not fits or len(value) > LONGEST_TEXT:
            raise ValueError(f"got {came(value)}, wanted {self.words}")
        return value


@dataclass(frozen=True)
class FolderName:
    """A name that is also a safe folder name on every system."""

    unit: str = ""

    @property
    def words(self):
        return "a folder name: a letter or digit, then up to 63 of a-z A-Z 0-9 _ - ."

    def __call__(self, value):
        fits = isinstance(value, str) and re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9_.-]{0,63}", value)
        if not fits or value.endswith(".") or value.split(".")[0].lower() in RESERVED:
            raise ValueError(f"got {came(value)}, wanted {self.words}")
        return value


@dataclass(frozen=True)
class Several:
    """A list of ``low`` to ``high`` entries; the entries have their own rule."""

    low: int
    high: int
    what: str
    unit: str = ""

    @property
    def words(self):
        return f"a list of {self.low} to {self.high} {self.what}"

    def __call__(self, value):
        if not isinstance(value, list) or not self.low <= len(value) <= self.high:
            raise ValueError(f"got {came(value)}, wanted {self.words}")
        return value


@dataclass(frozen=True)
class Row:
    """One row [angle_deg, relative intensity] of a table."""

    angle: Number = Number(0.0, 90.0, "deg")
    intensity: Number = Number(0.0, 1e9)
    unit: str = ""
    words: str = "a row [angle in deg from 0 to 90, relative intensity from 0 up]"

    def __call__(self, value):
        if not isinstance(value, (list, tuple)) or len(value) != 2:
            raise ValueError(f"got {came(value)}, wanted {self.words}")
        return self.angle(value[0]), self.intensity(value[1])
