"""Help pages that keep their examples and lists as they are written.

Paragraphs of a docstring are wrapped to the terminal, except those with indented
lines after the first: these are examples and lists.
"""

from __future__ import annotations

import inspect
from typing import Any

import click

_AS_WRITTEN = "\b\n"
"""Mark by which click leaves a paragraph alone."""


class TaughtCommand(click.Command):
    """A command whose help keeps examples as they are written."""

    def __init__(self, name: str | None = None, **attributes: Any) -> None:
        attributes["help"] = keep_examples(attributes.get("help"))
        super().__init__(name, **attributes)


class TaughtGroup(click.Group):
    """A group whose help, and that of its commands, keeps examples as they are written."""

    command_class = TaughtCommand

    def __init__(self, name: str | None = None, **attributes: Any) -> None:
        attributes["help"] = keep_examples(attributes.get("help"))
        super().__init__(name, **attributes)

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Return the names of the commands in the order of the work."""
        return list(self.commands)


def keep_examples(text: str | None) -> str | None:
    """Mark the paragraphs that hold indented lines, so that they are not wrapped."""
    if text is None:
        return None
    paragraphs = inspect.cleandoc(text).split("\n\n")
    return "\n\n".join(
        f"{_AS_WRITTEN}{paragraph}" if _is_example(paragraph) else paragraph
        for paragraph in paragraphs
    )


def _is_example(paragraph: str) -> bool:
    lines = paragraph.splitlines()
    labelled = lines[0].startswith(("Reads:", "Writes:", "Example:"))
    return labelled or any(line.startswith(" ") for line in lines[1:])
