"""The command line: :func:`main` is ``rayloom``."""

from rayloom.cli.commands import main

__all__ = ["main"]
