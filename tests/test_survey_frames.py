"""Pandas in and out: data frames give what the files they come from give."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import rayloom as rl
from rayloom.errors import FileProblemsError, InputError
from run_folder_cases import SurveyFiles, write_small_survey


@pytest.fixture(scope="module")
def files(tmp_path_factory: pytest.TempPathFactory) -> SurveyFiles:
    return write_small_survey(tmp_path_factory.mktemp("survey"))


def frames(files: SurveyFiles) -> dict[str, pd.DataFrame]:
    return {
        name: pd.read_csv(getattr(files, name), dtype={"event": str, "station": str})
        for name in ("stations", "events", "picks")
    }


def test_a_survey_of_frames_is_that_of_their_files(files: SurveyFiles) -> None:
    survey = rl.read_survey(**frames(files))
    expected = rl.read_survey(stations=files.stations, events=files.events, picks=files.picks)
    for name in ("stations", "events", "picks"):
        made, wanted = getattr(survey, name), getattr(expected, name)
        for column in wanted.column_names():
            np.testing.assert_array_equal(getattr(made, column), getattr(wanted, column))


def test_frames_with_times_as_times_are_the_same(files: SurveyFiles) -> None:
    given = frames(files)
    for name in ("events", "picks"):
        given[name]["time"] = pd.to_datetime(given[name]["time"], format="ISO8601")
    survey = rl.read_survey(**given)
    expected = rl.read_survey(stations=files.stations, events=files.events, picks=files.picks)
    np.testing.assert_array_equal(survey.picks.time, expected.picks.time)


def test_residuals_leave_as_a_frame_and_come_back(files: SurveyFiles) -> None:
    earth = rl.ReferenceEarth("ak135")
    survey = rl.read_survey(stations=files.stations, events=files.events, picks=files.picks)
    data = rl.compute_residuals(survey, earth)
    again = rl.read_residuals(data.to_frame(), survey.stations, survey.events, earth)
    np.testing.assert_array_equal(again.residual_s, data.residual_s)
    np.testing.assert_array_equal(again.uncertainty_s, data.uncertainty_s)


def test_a_fault_in_a_frame_is_told_by_row(files: SurveyFiles) -> None:
    given = frames(files)
    given["picks"].loc[3, "phase"] = None
    with pytest.raises(FileProblemsError, match=r"picks frame[\s\S]*row 4.*column phase"):
        rl.read_survey(**given)


@pytest.mark.parametrize("given", [None, 3, {"a": 1}])
def test_what_is_no_table_is_refused(given: object, files: SurveyFiles, tmp_path: Path) -> None:
    with pytest.raises(InputError, match="is no table; expected stations as CSV"):
        rl.read_survey(stations=given, events=files.events, picks=files.picks)  # type: ignore[arg-type]
