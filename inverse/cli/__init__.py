"""The command line: ``inverse limit``, ``inverse design``, ``inverse verify``.

The only room that prints, sets the precision of JAX and knows exit codes from the outside.
"""


def main():
    """Run the command line; ends the process with a code of ``inverse.outcome.Exit``."""
    from inverse.cli.commands import run

    run()
