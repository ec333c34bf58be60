"""XML files through obspy, part by part."""

from __future__ import annotations

import io
import warnings
from collections.abc import Callable, Iterator
from typing import Any, Final

import numpy as np

from rayloom.errors import MissingExtraError
from rayloom.survey.formats.xml_outline import Part, Shape, document, documents, outline
from rayloom.survey.problems import Problems

EXTRA: Final = "formats"

Advance = Callable[[float], None]
"""Hears the share of a file that is read, 0 to 1."""

Parse = Callable[[bytes], list[Any]]
"""Gives what obspy makes of each part of a document."""


def parsed_parts(
    content: bytes, shape: Shape, parse: Parse, problems: Problems, advance: Advance
) -> Iterator[tuple[Part, Any]]:
    """Parse a file part by part; a part that cannot be parsed is a problem.

    Parameters
    ----------
    content : bytes
        The file.
    shape : Shape
        Which of its elements matter.
    parse : callable
        Parses one document.
    problems : Problems
        Gets the parts that cannot be parsed.
    advance : callable
        Hears how far the reading is.

    Yields
    ------
    Part, object
        Each part with what obspy made of it.

    Raises
    ------
    FileProblemsError
        If the file is not XML that may be read.
    """
    parts = outline(content, shape, problems)
    done = 0
    for whole, gathered in documents(parts):
        yield from _parsed(whole, gathered, parse, problems)
        done += len(gathered)
        advance(done / len(parts))


def _parsed(
    whole: bytes, parts: list[Part], parse: Parse, problems: Problems
) -> list[tuple[Part, Any]]:
    """Parse one document; if that fails, its parts singly to find the faulty one."""
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            made = parse(whole)
        if len(made) != len(parts):
            raise ValueError(f"{len(made)} of {len(parts)} elements understood")
    except Exception as error:  # the parser raises whatever it stumbles over
        if len(parts) == 1:
            problems.add(
                parts[0].line,
                f"an element that cannot be understood ({type(error).__name__}: "
                f"{' '.join(str(error).split())[:200]}); "
                "expected what the standard of the format says",
            )
            return []
        singly = [_parsed(document([part]), [part], parse, problems) for part in parts]
        return [pair for pairs in singly for pair in pairs]
    return list(zip(parts, made, strict=True))


def station_parser(source: str) -> Parse:
    """Return what parses StationXML.

    Raises
    ------
    MissingExtraError
        If obspy is not installed.
    """
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            from obspy import read_inventory
    except ImportError as error:
        raise MissingExtraError(f"{source}: reading StationXML", EXTRA) from error

    def parse(document: bytes) -> list[Any]:
        read = read_inventory(io.BytesIO(document), format="STATIONXML", level="channel")
        return [(network, station) for network in read for station in network]

    return parse


def event_parser(source: str) -> Parse:
    """Return what parses QuakeML.

    Raises
    ------
    MissingExtraError
        If obspy is not installed.
    """
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            from obspy import read_events
    except ImportError as error:
        raise MissingExtraError(f"{source}: reading QuakeML", EXTRA) from error

    def parse(document: bytes) -> list[Any]:
        return list(read_events(io.BytesIO(document), format="QUAKEML"))

    return parse


def number_cell(value: Any) -> str:
    """Write a number, or nothing for None, so that it is read back the same."""
    return "" if value is None else repr(float(value))


def time_cell(moment: Any) -> str:
    """Write a time of obspy, or nothing for None, to the nanosecond."""
    if moment is None:
        return ""
    try:
        return f"{np.datetime64(moment.ns, 'ns')}"
    except (OverflowError, ValueError):
        return str(moment)


def code_cell(value: Any) -> str:
    """Write a code, or nothing for None."""
    return "" if value is None else str(value).strip()
