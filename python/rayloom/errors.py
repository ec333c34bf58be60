"""Errors that rayloom raises on purpose.

Each carries one clear message: what is wrong, where, what was expected, and
how to mend it. All share the base :class:`RayloomError`.
"""

from __future__ import annotations

from collections.abc import Sequence


class RayloomError(Exception):
    """Base of every error that rayloom raises on purpose."""


class InputError(RayloomError, ValueError):
    """A value, a file or a setting is not what was asked for.

    Parameters
    ----------
    message : str
        What is wrong, what was expected and how to mend it.
    where : str, optional
        The file and line, or the key, concerned.
    """

    def __init__(self, message: str, *, where: str | None = None) -> None:
        self.where = where
        super().__init__(f"{where}: {message}" if where else message)


class FileProblemsError(InputError):
    """Everything that is wrong with one file, gathered in one reading.

    Parameters
    ----------
    path : str
        The file.
    problems : sequence of str
        One line each: line number, column, value, what was expected.
    """

    SHOWN = 20

    def __init__(self, path: str, problems: Sequence[str]) -> None:
        self.path = path
        self.problems = tuple(problems)
        lines = list(self.problems[: self.SHOWN])
        hidden = len(self.problems) - len(lines)
        if hidden:
            lines.append(f"… and {hidden} more of the kind")
        count = len(self.problems)
        head = f"{path}: {count} problem{'s' if count != 1 else ''}"
        super().__init__("\n  ".join([head, *lines]))


class FileAccessError(RayloomError, OSError):
    """A file or folder cannot be read or written."""


class MissingExtraError(RayloomError, ImportError):
    """An optional dependency is needed and not installed.

    Parameters
    ----------
    purpose : str
        What needs it, as the subject of a sentence.
    extra : str
        The extra of rayloom that brings it.
    """

    def __init__(self, purpose: str, extra: str) -> None:
        super().__init__(
            f"{purpose} needs packages that are not installed; "
            f"install them with: pip install 'rayloom[{extra}]'"
        )
