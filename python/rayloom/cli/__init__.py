"""The command line: :func:`main` is ``rayloom``."""

from rayloom.cli.main import main

__all__ = ["main"]
