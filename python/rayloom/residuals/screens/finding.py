"""One thing found amiss: :class:`Finding`."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, fields
from pathlib import Path
from typing import TYPE_CHECKING, Final, Literal

from rayloom.writing import write_frame

if TYPE_CHECKING:
    import pandas as pd

FindingSeverity = Literal["error", "warning", "note"]

SEVERITIES: Final[tuple[FindingSeverity, ...]] = ("error", "warning", "note")
"""Gravest first."""


@dataclass(frozen=True)
class Finding:
    """One thing found amiss in the arrivals of a survey.

    Parameters
    ----------
    severity : {"error", "warning", "note"}
        ``"error"`` for what is surely wrong and spoils results, ``"warning"`` for what
        deserves a look before an inversion, ``"note"`` for what is good to know.
    kind : str
        Short code, for example ``"cycle_skip"``.
    who : str
        Station, event, pick or other thing concerned.
    evidence : str
        What speaks for it, with numbers.
    value : float
        The number that decides, in the unit of ``unit``.
    unit : str
        Unit of the number.
    advice : str
        What to do about it.
    """

    severity: FindingSeverity
    kind: str
    who: str
    evidence: str
    value: float
    unit: str
    advice: str

    def __str__(self) -> str:
        return f"{self.severity}: {self.who}: {self.evidence}; {self.advice}"


def by_severity(findings: Iterable[Finding]) -> list[Finding]:
    """Sort findings: gravest first, then by kind, largest number first.

    Parameters
    ----------
    findings : iterable of Finding
        In any order.

    Returns
    -------
    list of Finding
    """
    return sorted(
        findings,
        key=lambda one: (SEVERITIES.index(one.severity), one.kind, -abs(one.value), one.who),
    )


def findings_frame(findings: Sequence[Finding]) -> pd.DataFrame:
    """Return a data frame with one row per finding.

    Parameters
    ----------
    findings : sequence of Finding
        The rows.

    Returns
    -------
    DataFrame
        Columns severity, kind, who, evidence, value, unit, advice.
    """
    import pandas as pd

    names = [field.name for field in fields(Finding)]
    return pd.DataFrame(
        [[getattr(one, name) for name in names] for one in findings], columns=names
    )


def write_findings_csv(path: str | Path, findings: Sequence[Finding]) -> None:
    """Write findings as CSV.

    Parameters
    ----------
    path : str or Path
        The file.
    findings : sequence of Finding
        The rows.

    Raises
    ------
    FileAccessError
        If the file cannot be written.
    """
    write_frame(findings_frame(findings), path)
