"""Which format a file has, told by its contents."""

from __future__ import annotations

import csv
from typing import Final, Literal

from rayloom.survey.formats.fdsn_text import fdsn_content
from rayloom.survey.formats.xml_outline import root_name

Content = Literal["stations", "events", "picks", "residuals"]
"""What a person wants to read."""

Format = Literal["CSV", "FDSN text", "StationXML", "QuakeML", "XML"]

HEAD_BYTES: Final = 65_536
"""How much of a file is looked at to recognise it."""

_ROOTS: Final[dict[str, Format]] = {"FDSNStationXML": "StationXML", "quakeml": "QuakeML"}
_HOLDS: Final[dict[Format, tuple[Content, ...]]] = {
    "StationXML": ("stations",),
    "QuakeML": ("events", "picks"),
}
_CSV_MARKS: Final[tuple[tuple[Content, set[str]], ...]] = (
    ("picks", {"event", "station", "phase", "time"}),
    ("residuals", {"event", "station", "phase", "residual_s"}),
    ("events", {"event", "time", "latitude", "longitude"}),
    ("stations", {"network", "station", "latitude", "longitude"}),
)


def recognise(head: bytes) -> Format:
    """Return the format of a file from its first bytes; what nothing else claims is CSV."""
    root = root_name(head)
    if root is not None:
        return _ROOTS.get(root, "XML")
    return "FDSN text" if fdsn_content(_text(head)) else "CSV"


def contents_of(form: Format, head: bytes) -> tuple[Content, ...]:
    """Return what a file of that format holds, as far as its first bytes tell."""
    if form in _HOLDS:
        return _HOLDS[form]
    if form == "FDSN text":
        found = fdsn_content(_text(head))
        return (found,) if found in ("stations", "events") else ()
    return _csv_contents(_text(head)) if form == "CSV" else ()


def _csv_contents(text: str) -> tuple[Content, ...]:
    for line in text.splitlines():
        if line.strip():
            try:
                names = {cell.strip().lower() for cell in next(csv.reader([line]), [])}
            except csv.Error:
                return ()
            return tuple(content for content, marks in _CSV_MARKS if marks <= names)[:1]
    return ()


def _text(head: bytes) -> str:
    return head.decode("utf-8-sig", errors="replace")
