"""What a long computation tells whoever is watching. The command line brings a live one."""


class Watcher:
    """Says nothing: the base for live progress, and what scripts and tests use."""

    def stage(self, name, total=None):
        """A new stage begins; ``total`` is its number of steps when known."""

    def step(self, done, text=""):
        """``done`` steps of the present stage are complete; ``text`` is a short live figure."""

    def note(self, text):
        """A sentence worth keeping on the screen."""
