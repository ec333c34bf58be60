"""Where the parts of an XML file lie, found without building a tree or expanding entities.

The main function is :func:`outline`. It lets a large file be handed to a parser part
by part, without what is not needed, and tells the line of each part.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import suppress
from dataclasses import dataclass, field
from typing import Any, Final
from xml.parsers import expat

from rayloom.survey.problems import Problems

PIECE_BYTES: Final = 65_536
"""Parts are gathered into pieces of about this size."""

_DECLARATION: Final = re.compile(r"\s*<\?xml\b[^>]*?\?>")
_ENCODING: Final = re.compile(rb"""^\s*<\?xml\b[^>]*?\bencoding\s*=\s*["']([\w.-]{1,40})["']""")
_ENCODINGS: Final = {
    "utf-8": "utf-8-sig",
    "utf8": "utf-8-sig",
    "us-ascii": "ascii",
    "ascii": "ascii",
    "iso-8859-1": "latin-1",
    "latin1": "latin-1",
    "utf-16": "utf-16",
}
_UTF16: Final = (b"\xff\xfe", b"\xfe\xff")
_BOM: Final = b"\xef\xbb\xbf"
_TAG: Final = re.compile(rb"""<(?:[^>"']|"[^"]*"|'[^']*')*>""")


class _FoundError(Exception):
    """Ends the search for the root."""


class _DoctypeError(Exception):
    """Ends the reading of a file that declares a document type."""


@dataclass
class Part:
    """One element of use, for example an event, and where it lies.

    Parameters
    ----------
    line : int
        Line on which it starts.
    wrapping : tuple of bytes
        What to set before and after it to make it a document.
    pieces : list of bytes
        Its text without what is not needed.
    lines : dict of str to list of int
        Lines of the elements asked for inside, by name.
    """

    line: int
    wrapping: tuple[bytes, bytes]
    pieces: list[bytes] = field(default_factory=list)
    lines: dict[str, list[int]] = field(default_factory=dict)

    @property
    def size(self) -> int:
        """Length of its text in bytes."""
        return sum(map(len, self.pieces))


@dataclass(frozen=True)
class Shape:
    """Which elements of a format matter.

    Parameters
    ----------
    root, parent, part : str
        Names of the root, of its children that hold the parts, and of the parts.
    inside : frozenset of str
        Elements inside a part whose lines are wanted.
    dropped : frozenset of str
        Elements inside a part that are not needed.
    """

    root: str
    parent: str
    part: str
    inside: frozenset[str]
    dropped: frozenset[str]


def root_name(head: bytes) -> str | None:
    """Return the name of the root element from the first bytes of a file, None if not XML.

    An empty name stands for XML whose root cannot be told.
    """
    text = head.decode("utf-16" if head.startswith(_UTF16) else "utf-8-sig", errors="replace")
    if not text.lstrip().startswith("<"):
        return None
    found: list[str] = []

    def start(name: str, _attributes: dict[str, str]) -> None:
        found.append(_local(name))
        raise _FoundError

    def doctype(name: str, *_declared: Any) -> None:
        start(name, {})

    parser = expat.ParserCreate()
    parser.StartElementHandler = start
    parser.StartDoctypeDeclHandler = doctype
    with suppress(_FoundError, expat.ExpatError):
        parser.Parse(_DECLARATION.sub("", text, count=1).encode("utf-8", "replace"), False)
    return found[0] if found else ""


def outline(content: bytes, shape: Shape, problems: Problems) -> list[Part]:
    """Find the parts of an XML file.

    Parameters
    ----------
    content : bytes
        The file.
    shape : Shape
        What to look for.
    problems : Problems
        Gets what stops the reading.

    Returns
    -------
    list of Part
        In the order of the file, as UTF-8 without a declaration.

    Raises
    ------
    FileProblemsError
        If the file is not well-formed, declares a document type (and with it,
        perhaps, entities to expand) or has an encoding other than UTF-8, UTF-16,
        ASCII and ISO-8859-1.
    """
    text = _text(content, problems)
    declaration = _DECLARATION.match(text)
    body = text[declaration.end() :] if declaration else text
    plain = body.encode("utf-8")
    skipped = text[: declaration.end()].count("\n") if declaration else 0
    walk = _Walk(plain, shape, skipped)
    try:
        walk.parser.Parse(plain, True)
    except _DoctypeError:
        problems.add(
            skipped + walk.parser.CurrentLineNumber,
            "the file declares a document type (DOCTYPE), which may expand entities without "
            "end; expected XML without one (remove it)",
        )
    except expat.ExpatError as error:
        reason = expat.ErrorString(error.code)
        problems.add(
            skipped + error.lineno,
            f"not well-formed XML ({reason}); expected a complete file (was it cut off?)",
        )
    problems.raise_if_any()
    return walk.parts


def documents(parts: list[Part]) -> Iterator[tuple[bytes, list[Part]]]:
    """Gather parts into documents of moderate size, each with the parts that it holds."""
    gathered: list[Part] = []
    size = 0
    for part in parts:
        if gathered and (size > PIECE_BYTES or part.wrapping != gathered[0].wrapping):
            yield document(gathered), gathered
            gathered, size = [], 0
        gathered.append(part)
        size += part.size
    if gathered:
        yield document(gathered), gathered


def document(parts: list[Part]) -> bytes:
    """Make one document of parts that share a parent."""
    before, after = parts[0].wrapping
    return b"".join([before, *(piece for part in parts for piece in part.pieces), after])


class _Walk:
    """Follows the tags of a file and notes where the parts lie."""

    def __init__(self, content: bytes, shape: Shape, skipped_lines: int) -> None:
        self.content = content
        self.shape = shape
        self.skipped_lines = skipped_lines
        self.parts: list[Part] = []
        self.parser = expat.ParserCreate()
        self.parser.StartElementHandler = self._start
        self.parser.EndElementHandler = self._end
        self.parser.StartDoctypeDeclHandler = _refuse
        self._names: list[str] = []
        self._head: bytes | None = None
        self._wrapping = (b"", b"")
        self._from: int | None = None
        self._dropped_at = 0
        self._part_stop: int | None = None
        self._drop_stop: int | None = None

    def _start(self, name: str, _attributes: dict[str, str]) -> None:
        self._names.append(name)
        depth, local = len(self._names), _local(name)
        at = self.parser.CurrentByteIndex
        if depth == 2 and local == self.shape.parent:
            self._enter_parent(at)
        elif depth == 3 and local == self.shape.part and self._parent_fits():
            line = self.skipped_lines + self.parser.CurrentLineNumber
            self.parts.append(Part(line, self._wrapping))
            self._from, self._part_stop = at, self._stop_of_empty()
        elif depth > 3 and self._from is not None:
            if local in self.shape.dropped:
                self.parts[-1].pieces.append(self.content[self._from : at])
                self._from, self._dropped_at = None, depth
                self._drop_stop = self._stop_of_empty()
            elif local in self.shape.inside and depth == 4:
                line = self.skipped_lines + self.parser.CurrentLineNumber
                self.parts[-1].lines.setdefault(local, []).append(line)

    def _end(self, _name: str) -> None:
        depth = len(self._names)
        if depth == self._dropped_at:
            self._from, self._dropped_at = self._drop_stop or self._tag_end(), 0
        elif depth == 3 and self._from is not None:
            stop = self._part_stop or self._tag_end()
            self.parts[-1].pieces.append(self.content[self._from : stop])
            self._from = None
        self._names.pop()

    def _enter_parent(self, at: int) -> None:
        """Note what has to stand around the parts of this parent."""
        if self._head is None:
            self._head = self.content[:at]
        root, parent = self._names
        after = f"</{parent}></{root}>".encode()
        opening = self.content[at : self._tag_end()]
        self._wrapping = (self._head + opening, after)

    def _parent_fits(self) -> bool:
        return _local(self._names[1]) == self.shape.parent

    def _stop_of_empty(self) -> int | None:
        """Where the element that starts here ends, if its tag closes it at once."""
        end = self._tag_end()
        return end if self.content[end - 2 : end] == b"/>" else None

    def _tag_end(self) -> int:
        """Where the tag ends that the parser is at."""
        at = self.parser.CurrentByteIndex
        found = _TAG.match(self.content, at)
        return found.end() if found else len(self.content)


def _text(content: bytes, problems: Problems) -> str:
    """Decode a file as its declaration says, to be handed on in one encoding only."""
    declared = _ENCODING.match(content.removeprefix(_BOM)[:400])
    named = declared[1].decode().lower() if declared else "utf-8"
    encoding = "utf-16" if content.startswith(_UTF16) else _ENCODINGS.get(named)
    if encoding is None or (encoding == "utf-16") != content.startswith(_UTF16):
        problems.add(1, f"the encoding {named!r} is not read; save the file as UTF-8")
        problems.raise_if_any()
    try:
        return content.decode(encoding or "utf-8")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        problems.add(
            line,
            f"byte 0x{content[error.start]:02X} does not fit the encoding {named.upper()} of the "
            "file; save it with the encoding UTF-8",
        )
        problems.raise_if_any()
        raise


def _refuse(*_declared: Any) -> None:
    raise _DoctypeError


def _local(name: str) -> str:
    return name.rpartition(":")[2]
