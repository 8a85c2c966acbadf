"""Reading one text file a person wrote: regular, small, UTF-8; everything else gets a sentence."""

import stat
from pathlib import Path

LARGEST = 1_000_000  # bytes; a brief of that size is a mistake, and reading one must not hang


class Unreadable(ValueError):
    """Why a file cannot be used; ``line`` where known, else None."""

    def __init__(self, message, line=None):
        super().__init__(message)
        self.line = line


def read_text(path):
    """The text of ``path``, line ends as ``\\n``. Raises Unreadable."""
    path = Path(path)
    try:
        state = path.stat()
        if stat.S_ISDIR(state.st_mode):
            raise Unreadable("is a folder, wanted a file")
        if not stat.S_ISREG(state.st_mode):
            raise Unreadable("is a device or pipe, wanted an ordinary file")
        with path.open("rb") as file:
            content = file.read(LARGEST + 1)
    except FileNotFoundError:
        raise Unreadable("does not exist") from None
    except (OSError, ValueError) as fault:
        if isinstance(fault, Unreadable):
            raise
        raise Unreadable(f"cannot be read: {getattr(fault, 'strerror', None) or fault}") from None
    if len(content) > LARGEST:
        raise Unreadable(f"is larger than {LARGEST} bytes, the most that is read")
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        line, byte = content[: fault.start].count(b"\n") + 1, content[fault.start]
        raise Unreadable(f"byte {byte:#04x} is not UTF-8 text, wanted a file saved as UTF-8", line) from None
    return text.replace("\r\n", "\n")
