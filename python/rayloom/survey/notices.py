"""Remarks on the inputs that do not stop the work."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Literal

Severity = Literal["info", "warning"]

_SHOWN: Final = 5


@dataclass(frozen=True)
class Notice:
    """One remark on the inputs.

    Parameters
    ----------
    severity : {"info", "warning"}
        ``"warning"`` for what deserves a look, ``"info"`` for what was done.
    what : str
        Short code of the remark, for example ``"remote_station"``.
    who : str
        The station, event or file concerned.
    detail : str
        The remark in one sentence that stands alone: who, and the numbers.
    """

    severity: Severity
    what: str
    who: str
    detail: str

    def __str__(self) -> str:
        return f"{self.severity}: {self.detail}"


def few(items: Sequence[object]) -> str:
    """Write out the first few items and how many more there are."""
    named = ", ".join(str(item) for item in items[:_SHOWN])
    rest = len(items) - _SHOWN
    return f"{named} and {rest} more" if rest > 0 else named
