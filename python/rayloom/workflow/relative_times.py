"""What delays between stations come to, as tables of the run folder."""

from __future__ import annotations

from pathlib import Path

from rayloom.outputs import write_table
from rayloom.residuals.delays import read_delays, relative_times
from rayloom.survey import SurveySettings, read_events, read_stations
from rayloom.workflow.data import Tables
from rayloom.workflow.folder import RunFolder


def write_relative_times(folder: RunFolder, tables: Tables, survey: SurveySettings) -> list[Path]:
    """Write relative_times.csv and delay_closures.csv where delays are given.

    Parameters
    ----------
    folder : RunFolder
        The run folder.
    tables : Tables
        The person's tables.
    survey : SurveySettings
        Uncertainty by default and of each quality class.

    Returns
    -------
    list of pathlib.Path
        The files written: none without delays.
    """
    if tables.delays is None:
        return []
    stations, events = read_stations(tables.stations), read_events(tables.events)
    times = relative_times(read_delays(tables.delays, stations, events, settings=survey))
    files = [folder.file("relative_times.csv"), folder.file("delay_closures.csv")]
    write_table(files[0], times.to_frame(stations, events))
    write_table(files[1], times.delays_frame(stations, events))
    return files
