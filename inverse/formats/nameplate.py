"""What a photometric file says about the lens, beside the numbers, and how it is spelt."""

import unicodedata
from dataclasses import dataclass, field

# fmt: off
SPELT = {
    "ß": "ss", "ø": "o", "Ø": "O", "æ": "ae", "Æ": "AE", "œ": "oe", "Œ": "OE", "ł": "l", "Ł": "L",
    "đ": "d", "Đ": "D", "ð": "d", "Ð": "D", "þ": "th", "Þ": "Th", "ı": "i", "µ": "u", "μ": "u",
    "°": " deg", "×": "x", "–": "-", "—": "-", "−": "-", "’": "'", "‘": "'", "“": '"', "”": '"',
    "…": "...", "±": "+-", "≤": "<=", "≥": ">=", "ä": "ae", "ö": "oe", "ü": "ue", "Ä": "Ae", "Ö": "Oe",
    "Ü": "Ue",
}
# fmt: on


@dataclass(frozen=True)
class Nameplate:
    """Plain facts for the head of a file."""

    name: str  # of the lens
    date: str  # ISO date of issue; an argument, so that equal runs write equal files
    lamp: str  # the LED in words
    lamp_flux: float  # lm the LED emits
    aperture_radius: float  # mm, of the luminous opening
    height: float = 0.0  # mm, of the part
    watts: float = 0.0  # electrical; 0 = not stated
    maker: str = ""
    stamp: dict = field(default_factory=dict)  # where the file came from, word → value


def ascii_line(text):
    """One line of printable ASCII: letters transliterated, accents dropped, the unknown as '?'."""
    spelt = "".join(SPELT.get(c, c) for c in unicodedata.normalize("NFC", str(text)))
    bare = "".join(c for c in unicodedata.normalize("NFKD", spelt) if not unicodedata.combining(c))
    plain = "".join(c if " " <= c <= "~" else " " if c.isspace() else "?" for c in bare)
    return " ".join(plain.split())
