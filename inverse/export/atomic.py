"""Files that are either the old one or the whole new one, never half of it."""

import os
from contextlib import contextmanager
from pathlib import Path


@contextmanager
def replacing(path):
    """A temporary path in the same folder; renamed to ``path`` when the block ends well, else removed."""
    path = Path(path)
    part = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        yield part
        os.replace(part, path)
    finally:
        part.unlink(missing_ok=True)


def write_bytes(path, content):
    """Write ``content`` (bytes) whole or not at all. Raises OSError."""
    with replacing(path) as part:
        part.write_bytes(content)


def write_text(path, content):
    """Write ``content`` (str) as UTF-8, line ends as they are. Raises OSError."""
    write_bytes(path, content.encode("utf-8"))
