"""Open formats of stations, events and picks, turned into the tables of the survey.

The main function is :func:`read_table`. It takes CSV, StationXML, QuakeML and the
text of FDSN web services, from one file, several or a folder, and tells them apart
by their contents.
"""

from __future__ import annotations

from rayloom.survey.formats.reading import Paths, Progress, Source, read_table, total_bytes

__all__ = ["Paths", "Progress", "Source", "read_table", "total_bytes"]
