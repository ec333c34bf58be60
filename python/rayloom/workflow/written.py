"""What a step with a section of its own in the report leaves behind: :class:`Written`."""

from __future__ import annotations

from dataclasses import dataclass

from rayloom.outputs.report_section import ReportSection
from rayloom.workflow.plan import Files


@dataclass(frozen=True)
class Written:
    """What was written.

    Attributes
    ----------
    files : dict
        Paths by their names in the run folder.
    section : ReportSection
        The part of the report.
    """

    files: Files
    section: ReportSection
