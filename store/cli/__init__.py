"""The command line: each command parses, calls one function of the library, and prints."""

from driftbook.store.cli.app import main

__all__ = ["main"]
