"""QuakeML as tables of events and of picks.

References
----------
.. [1] QuakeML 1.2, basic event description.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any, Final

from rayloom.survey.formats.names import event_name
from rayloom.survey.formats.parsing import (
    Advance,
    code_cell,
    event_parser,
    number_cell,
    parsed_parts,
    time_cell,
)
from rayloom.survey.formats.xml_outline import Part, Shape
from rayloom.survey.notices import Notice, few
from rayloom.survey.problems import Problems
from rayloom.survey.text_table import TextTable
from rayloom.units import M_PER_KM

_EVENT_COLUMNS: Final = ("event", "time", "latitude", "longitude", "depth_km", "magnitude")
_PICK_COLUMNS: Final = ("event", "network", "station", "phase", "time", "uncertainty_s")
_NEVER_NEEDED: Final = (
    "amplitude",
    "stationMagnitude",
    "stationMagnitudeContribution",
    "focalMechanism",
    "comment",
    "creationInfo",
    "description",
    "originUncertainty",
    "quality",
    "compositeTime",
    "type",
)
_EVENT_SHAPE: Final = Shape(
    root="quakeml",
    parent="eventParameters",
    part="event",
    inside=frozenset(),
    dropped=frozenset({*_NEVER_NEEDED, "pick", "arrival"}),
)
_PICK_SHAPE: Final = Shape(
    root="quakeml",
    parent="eventParameters",
    part="event",
    inside=frozenset({"pick"}),
    dropped=frozenset({*_NEVER_NEEDED, "magnitude"}),
)

_Row = tuple[int, tuple[str, ...]]


def read_quake_ml_events(content: bytes, problems: Problems, advance: Advance) -> TextTable:
    """Take a QuakeML file as an events table: the preferred origin of each event.

    Where none is preferred, the first counts. Depths turn from metres to km.
    Events without an origin are left out with a notice.

    Raises
    ------
    FileProblemsError
        If it cannot be read.
    MissingExtraError
        If obspy is not installed.
    """
    rows: list[_Row] = []
    without: list[str] = []
    undecided: list[str] = []
    parse = event_parser(problems.source)
    for part, event in parsed_parts(content, _EVENT_SHAPE, parse, problems, advance):
        name = event_name(_identifier(event.resource_id))
        if not event.origins:
            without.append(name)
            continue
        origin = _preferred(event.origins, event.preferred_origin_id)
        if len(event.origins) > 1 and origin is None:
            undecided.append(name)
        rows.append((part.line, (name, *_origin_cells(event, origin or event.origins[0]))))
    remarks = _event_remarks(problems.source, without, undecided)
    return _table(rows, _EVENT_COLUMNS, "event with an origin", problems, remarks)


def read_quake_ml_picks(content: bytes, problems: Problems, advance: Advance) -> TextTable:
    """Take a QuakeML file as a picks table.

    The phase is that of the arrival of the preferred origin which refers to the
    pick, else of another origin's arrival, else the pick's own hint. The
    uncertainty is the stated one, else the mean of the lower and the upper; 0
    counts as not stated. Rejected picks and those of no phase are left out with a
    notice.

    Raises
    ------
    FileProblemsError
        If it cannot be read.
    MissingExtraError
        If obspy is not installed.
    """
    rows: list[_Row] = []
    rejected = nameless = 0
    parse = event_parser(problems.source)
    for part, event in parsed_parts(content, _PICK_SHAPE, parse, problems, advance):
        name = event_name(_identifier(event.resource_id))
        phases = _arrival_phases(event)
        for line, pick in zip(_pick_lines(part, event), event.picks, strict=True):
            phase = phases.get(_identifier(pick.resource_id)) or code_cell(pick.phase_hint)
            if pick.evaluation_status == "rejected":
                rejected += 1
            elif not phase:
                nameless += 1
            else:
                rows.append((line, (name, *_codes(pick), phase, *_time_cells(pick))))
    remarks = _pick_remarks(problems.source, rejected, nameless)
    return _table(rows, _PICK_COLUMNS, "pick with a phase", problems, remarks)


def _table(
    rows: list[_Row],
    names: tuple[str, ...],
    wanted: str,
    problems: Problems,
    remarks: list[Notice],
) -> TextTable:
    if not rows and not problems:
        told = "".join(f" ({notice.detail})" for notice in remarks)
        problems.add(0, f"the file holds no {wanted}; expected at least one{told}")
    problems.raise_if_any()
    cells = zip(*(values for _, values in rows), strict=True)
    columns = {name: list(column) for name, column in zip(names, cells, strict=True)}
    return TextTable(columns, [line for line, _ in rows], problems, remarks)


def _origin_cells(event: Any, origin: Any) -> tuple[str, ...]:
    depth_km = None if origin.depth is None else float(origin.depth) / M_PER_KM
    magnitudes = event.magnitudes
    magnitude = _preferred(magnitudes, event.preferred_magnitude_id)
    if magnitude is None and magnitudes:
        magnitude = magnitudes[0]
    return (
        time_cell(origin.time),
        number_cell(origin.latitude),
        number_cell(origin.longitude),
        number_cell(depth_km),
        number_cell(None if magnitude is None else magnitude.mag),
    )


def _preferred(found: Iterable[Any], preferred: Any) -> Any:
    """Return the one that the identifier names, None if there is none."""
    wanted = _identifier(preferred)
    named = (one for one in found if wanted and _identifier(one.resource_id) == wanted)
    return next(named, None)


def _arrival_phases(event: Any) -> dict[str, str]:
    """Return phase names by pick; the preferred origin's word is the last."""
    preferred = _preferred(event.origins, event.preferred_origin_id)
    phases: dict[str, str] = {}
    for origin in [*reversed(event.origins), preferred]:
        for arrival in [] if origin is None else origin.arrivals:
            phase = code_cell(arrival.phase)
            if phase:
                phases[_identifier(arrival.pick_id)] = phase
    return phases


def _pick_lines(part: Part, event: Any) -> list[int]:
    lines = part.lines.get("pick", [])
    return lines if len(lines) == len(event.picks) else [part.line] * len(event.picks)


def _codes(pick: Any) -> tuple[str, str]:
    stream = pick.waveform_id
    if stream is None:
        return "", ""
    return code_cell(stream.network_code), code_cell(stream.station_code)


def _time_cells(pick: Any) -> tuple[str, str]:
    errors = pick.time_errors
    stated = errors.uncertainty
    if stated is None and None not in (errors.lower_uncertainty, errors.upper_uncertainty):
        stated = (errors.lower_uncertainty + errors.upper_uncertainty) / 2.0
    return time_cell(pick.time), number_cell(stated or None)


def _identifier(resource: Any) -> str:
    return "" if resource is None else str(resource.id)


def _event_remarks(source: str, without: list[str], undecided: list[str]) -> list[Notice]:
    remarks = []
    if without:
        detail = f"{len(without)} events of {source} have no origin ({few(without)}); left out"
        remarks.append(Notice("warning", "events_without_origin", source, detail))
    if undecided:
        detail = (
            f"{len(undecided)} events of {source} have several origins and none preferred "
            f"({few(undecided)}); the first is taken"
        )
        remarks.append(Notice("info", "origin_undecided", source, detail))
    return remarks


def _pick_remarks(source: str, rejected: int, nameless: int) -> list[Notice]:
    remarks = []
    for count, what, why in (
        (rejected, "rejected_picks", "are marked as rejected"),
        (nameless, "picks_without_phase", "have neither an arrival nor a phase hint"),
    ):
        if count:
            detail = f"{count} picks of {source} {why}; left out"
            remarks.append(Notice("warning", what, source, detail))
    return remarks
