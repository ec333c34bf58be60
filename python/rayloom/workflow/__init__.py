"""Run folders: made from a person's tables, and filled step by step.

:func:`initialise` makes one, :func:`run` does everything still to do in it,
:func:`run_step` one step, :func:`summarise` tells what came of it; a
:class:`Reporter` hears what happens meanwhile.
"""

from rayloom.workflow.data import Tables
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.initialise import initialise
from rayloom.workflow.reporting import Reporter
from rayloom.workflow.running import run, run_step
from rayloom.workflow.summary import summarise

__all__ = ["Reporter", "RunFolder", "Tables", "initialise", "run", "run_step", "summarise"]
