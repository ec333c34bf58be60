"""How a running job tells what it does; silent unless someone listens.

The main type is :class:`Reporter`.
"""

from __future__ import annotations

from collections.abc import Callable


class Reporter:
    """Hears what a job does and says nothing.

    The command line listens through a subclass; a script may pass its own.
    """

    def begin(self, step: str, reason: str) -> None:
        """Hear that a step begins, and why it has to be done."""

    def note(self, text: str) -> None:
        """Hear something worth knowing about the step at work."""

    def progress(self, label: str, done: int, total: int) -> None:
        """Hear that ``done`` of ``total`` units of something are done."""

    def finish(self, step: str, seconds: float) -> None:
        """Hear that a step is finished, and after how many seconds."""

    def counter(self, label: str) -> Callable[[int, int], None]:
        """Return a ``progress(done, total)`` for a long call."""

        def hear(done: int, total: int) -> None:
            self.progress(label, done, total)

        return hear
