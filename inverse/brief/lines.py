"""On which line of a TOML file each key and each value stands.

``tomllib`` forgets positions.  This scanner walks a text that ``tomllib`` has already accepted and
notes, for every path (keys and list indices, for instance ``("emitter", "die", 1, "x_mm")``), the
line it starts on.  It reads structure only, never values, so it need not know dates or numbers.

Source of the grammar: TOML 1.0.0, sections Keys, String, Array, Inline Table, Table, Array of Tables.
"""

import bisect
import re
import tomllib

BARE = re.compile(r"[A-Za-z0-9_-]+")
SCALAR_END = re.compile(r"[,\]}#\n]|\Z")
BLANK = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")


def positions(text):
    """Map path -> line (from 1) for every table, key and list item of a valid TOML ``text``."""
    scanner = _Scanner(text)
    scanner.document()
    return scanner.found


def line_of(found, path):
    """Line of ``path``, or of the nearest table that holds it; 1 when nothing is known."""
    path = tuple(path)
    while path and path not in found:
        path = path[:-1]
    return found.get(path, 1)


class _Scanner:
    def __init__(self, text):
        self.text = text
        self.at = 0
        self.found = {}
        self.last_item = {}  # path of an array of tables -> index of its newest table
        self.breaks = [i for i, c in enumerate(text) if c == "\n"]

    def line(self):
        return bisect.bisect_left(self.breaks, self.at) + 1

    def skip(self):
        self.at = BLANK.match(self.text, self.at).end()

    def starts(self, mark):
        return self.text.startswith(mark, self.at)

    def document(self):
        table = ()
        self.skip()
        while self.at < len(self.text):
            if self.starts("["):
                table = self.header()
            else:
                self.pair(table)
            self.skip()

    def header(self):
        line, many = self.line(), self.starts("[[")
        self.at += 2 if many else 1
        parts = self.key()
        self.at += 2 if many else 1
        path = ()
        for i, part in enumerate(parts):
            path += (part,)
            self.found.setdefault(path, line)
            if i < len(parts) - 1 and path in self.last_item:
                path += (self.last_item[path],)
        if many:
            self.last_item[path] = self.last_item.get(path, -1) + 1
            path += (self.last_item[path],)
        self.found[path] = line
        return path

    def pair(self, table):
        line = self.line()
        path = table
        for part in self.key():
            path += (part,)
            self.found.setdefault(path, line)
        self.at += 1  # the equals sign
        self.skip()
        self.value(path)

    def key(self):
        """Parts of a possibly dotted key; stops at the closing bracket or the equals sign."""
        parts = []
        while True:
            self.skip()
            if self.text[self.at] in "\"'":
                start = self.at
                self.string()
                parts.append(tomllib.loads("k=" + self.text[start : self.at])["k"])
            else:
                bare = BARE.match(self.text, self.at)
                parts.append(bare.group())
                self.at = bare.end()
            self.skip()
            if not self.starts("."):
                return parts
            self.at += 1

    def string(self):
        quote = self.text[self.at]
        fence = quote * 3 if self.starts(quote * 3) else quote
        self.at += len(fence)
        while not self.starts(fence):
            self.at += 2 if quote == '"' and self.starts("\\") else 1
        self.at += len(fence)
        while len(fence) == 3 and self.starts(quote):  # up to two quotes may precede the fence
            self.at += 1

    def value(self, path):
        self.found.setdefault(path, self.line())
        first = self.text[self.at]
        if first in "\"'":
            self.string()
        elif first == "[":
            self.items(path)
        elif first == "{":
            self.inline(path)
        else:
            self.at = SCALAR_END.search(self.text, self.at).start()

    def items(self, path):
        self.at += 1
        self.skip()
        index = 0
        while not self.starts("]"):
            self.value(path + (index,))
            index += 1
            self.comma()
        self.at += 1

    def inline(self, path):
        self.at += 1
        self.skip()
        while not self.starts("}"):
            self.pair(path)
            self.comma()
        self.at += 1

    def comma(self):
        self.skip()
        if self.starts(","):
            self.at += 1
            self.skip()
