"""Short names of events that carry a resource identifier."""

from __future__ import annotations

import re
from typing import Final

_IDENTIFIER: Final = re.compile(r"(?:smi|quakeml):", re.IGNORECASE)
_QUERY: Final = re.compile(r"(?:event|ev)id=([^&;#]+)", re.IGNORECASE)
_LAST_PART: Final = re.compile(r"([^/#]+)[/#]*$")


def event_name(identifier: str) -> str:
    """Return the part of a resource identifier that names the event; other names stay.

    ``smi:example.org/event/2019abcd`` becomes ``2019abcd``, and
    ``smi:example.org/query?eventid=42&format=xml`` becomes ``42``: the name under
    which tables and the text of web services list the same event.
    """
    if not _IDENTIFIER.match(identifier):
        return identifier
    found = _QUERY.search(identifier) or _LAST_PART.search(identifier.partition(":")[2])
    return found[1] if found else identifier
