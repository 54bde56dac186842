"""The command line: each command parses, calls one function of the library, and prints."""

import sys


def main() -> None:
    """Runs the program and ends the process with its exit code."""
    try:
        from driftbook.store.cli.app import main as program
    except KeyboardInterrupt:  # while what a command needs is being loaded
        sys.stderr.write("driftbook: interrupted; the book is unchanged.\n")
        sys.exit(130)
    program()
