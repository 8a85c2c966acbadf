"""The settled brief as TOML again: every default written out, every unit beside its number.

Reading the text gives the same brief, and resolving that gives the same text, byte for byte; its
SHA-256 is therefore the identity of a brief, whatever the order, spelling or comments of the original.
"""

import json

from inverse.brief.schema import Section

HEAD = """\
# The brief with every default written out. It can be used as a brief itself.
# Emitter plane z = 0, axis +z; the lens stands in air.
"""
LEFT_OPEN = {  # what it means that an optional key is absent
    "lens.height_max_mm": "",
    "target.share": "as much as possible",
    "target.distance_mm": "far field",
    "mould.thickest_mm": "free",
}


def text(name, sections, remarks):
    """TOML of settled ``sections`` (name -> model); ``remarks`` maps a key path to a computed aside."""
    parts = [HEAD, f"name = {_plain(name)}\n"]
    for title, section in sections.items():
        parts += _table((title,), section, remarks)
    return "".join(parts)


def _table(path, section, remarks, many=False):
    title = ".".join(path)
    parts, below = [f"\n[[{title}]]\n" if many else f"\n[{title}]\n"], []
    for key, field in type(section).model_fields.items():
        value, place = getattr(section, key), f"{title}.{key}"
        comment = ", ".join(c for c in (field.description, remarks.get(place)) if c)
        if value is None:
            if place in LEFT_OPEN:
                parts.append(f"# {key} is left open: {LEFT_OPEN[place]}\n")
        elif isinstance(value, Section):
            below += _table((*path, key), value, remarks)
        elif key == "die":
            for die in value:
                below += _table((*path, key), die, remarks, many=True)
        elif isinstance(value, tuple):
            rows = "".join(f"  [{a!r}, {b!r}],\n" for a, b in value)
            parts.append(f"{key} = [  # {comment}\n{rows}]\n")
        else:
            parts.append(f"{key} = {_plain(value)}  # {comment}\n")
    return parts + below


def _plain(value):
    """A number or text as TOML: repr keeps every digit; JSON writes texts as TOML does (none holds DEL)."""
    return json.dumps(value) if isinstance(value, str) else repr(value)
