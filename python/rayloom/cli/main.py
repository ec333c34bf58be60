"""The group of commands, ``rayloom`` itself.

Each command reads its arguments, calls :mod:`rayloom.workflow` or :mod:`rayloom.demo`, and
prints what came of it. Heavy modules are imported when a command runs, so that ``--help``
is there at once.
"""

from __future__ import annotations

from typing import Final

import click

from rayloom import __version__
from rayloom.cli.appraise import appraise
from rayloom.cli.beginning import demo, init
from rayloom.cli.bodies import bodies
from rayloom.cli.checking import check
from rayloom.cli.compare import compare
from rayloom.cli.guard import GuardedGroup
from rayloom.cli.importing import import_model
from rayloom.cli.running import run
from rayloom.cli.stepping import export, invert, ratio, residuals
from rayloom.cli.tradeoff import tradeoff

_CONTEXT = {"help_option_names": ["-h", "--help"], "max_content_width": 92}


@click.group(cls=GuardedGroup, context_settings=_CONTEXT)
@click.version_option(__version__, "-V", "--version", prog_name="rayloom")
def main() -> None:
    """Three-dimensional velocity models from arrival picks of distant earthquakes.

    Start here:
      rayloom demo                 an invented survey, the whole job, the truth beside it
      rayloom init DIR ...         a run folder from your own three CSV files
      rayloom run DIR              everything still to do in it

    The run folder holds everything of one run: rayloom.toml, which you edit, and all
    results. Only what is missing or no longer matches its inputs and settings is done
    again; a job stopped with Ctrl-C goes on where it was.

    Exit codes: 0 done, 2 something for you to mend (the message says what and where),
    1 an error of the program (details in a log file), 130 stopped with Ctrl-C.
    """


COMMANDS: Final = (
    demo,
    init,
    check,
    run,
    residuals,
    invert,
    tradeoff,
    compare,
    appraise,
    bodies,
    export,
    import_model,
    ratio,
)
"""All commands in the order of the work."""

for command in COMMANDS:
    main.add_command(command)
