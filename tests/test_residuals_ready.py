"""Residuals that others computed: read, screened and written again."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from rayloom.earth import ReferenceEarth
from rayloom.errors import FileAccessError, FileProblemsError
from rayloom.residuals import ResidualSettings, read_residuals
from rayloom.survey import Events, Stations, SurveySettings

HEAD = "event,network,station,phase,residual_s,uncertainty_s\n"
STATIONS = Stations(
    network=np.full(6, "XA"),
    station=np.array(list("ABCDEF")),
    latitude_deg=np.linspace(40.0, 42.0, 6),
    longitude_deg=np.linspace(10.0, 12.0, 6),
    elevation_m=np.linspace(0.0, 2000.0, 6),
)
EVENTS = Events(
    event=np.array(["e1", "e2"]),
    time=np.array(["2019-03-07T04:05:04", "2019-03-08T04:05:04"], dtype="datetime64[ns]"),
    latitude_deg=np.array([-6.0, 45.0]),
    longitude_deg=np.array([20.0, 16.0]),
    depth_km=np.array([10.0, 10.0]),
)
GOOD = HEAD + "".join(
    f"e1,XA,{name},P,{value},0.1\n"
    for name, value in zip("ABCDEF", (0.1, -0.2, 0.3, 8.5, 0.0, 0.2), strict=True)
)


@pytest.fixture(scope="module")
def earth() -> ReferenceEarth:
    return ReferenceEarth("ak135")


def written(folder: Path, content: str) -> Path:
    path = folder / "residuals.csv"
    path.write_text(content, encoding="utf-8")
    return path


def test_given_residuals_are_taken_as_they_are(tmp_path: Path, earth: ReferenceEarth) -> None:
    residuals = read_residuals(written(tmp_path, GOOD), STATIONS, EVENTS, earth)
    np.testing.assert_array_equal(residuals.residual_s, [0.1, -0.2, 0.3, 0.0, 0.2])
    np.testing.assert_allclose(residuals.relative_residual_s, [0.0, -0.3, 0.2, -0.1, 0.1])
    assert residuals.excluded.station.tolist() == ["D"]
    assert residuals.excluded.reason.tolist() == ["gross_residual"]
    assert (residuals.predicted_s > 400.0).all()


def test_written_residuals_read_back_the_same(tmp_path: Path, earth: ReferenceEarth) -> None:
    residuals = read_residuals(written(tmp_path, GOOD), STATIONS, EVENTS, earth)
    residuals.write_csv(tmp_path / "again.csv")
    again = read_residuals(tmp_path / "again.csv", STATIONS, EVENTS, earth)
    for name in residuals.column_names():
        np.testing.assert_array_equal(getattr(again, name), getattr(residuals, name))
    residuals.excluded.write_csv(tmp_path / "excluded.csv")
    table = pd.read_csv(tmp_path / "excluded.csv")
    assert table.columns.tolist() == ["event", "network", "station", "phase", "reason", "detail"]
    assert table.station.tolist() == ["D"]
    assert sorted(path.name for path in tmp_path.iterdir()) == [
        "again.csv",
        "excluded.csv",
        "residuals.csv",
    ]


def test_distance_window_holds_for_given_residuals(tmp_path: Path, earth: ReferenceEarth) -> None:
    near = "".join(f"e2,XA,{name},P,0.1,0.1\n" for name in "ABCDEF")
    residuals = read_residuals(written(tmp_path, GOOD + near), STATIONS, EVENTS, earth)
    assert residuals.excluded.counts()["outside_distance_window"] == 6


def test_all_problems_of_the_file_come_at_once(tmp_path: Path, earth: ReferenceEarth) -> None:
    text = HEAD + (
        "e1,XA,A,P,late,0.1\ne9,XA,B,P,0.1,0.1\ne1,XA,Z,P,0.1,0.1\ne1,XA,C,P,nan,0.1\n"
        "e1,XA,D,P,0.1,-1\n"
    )
    with pytest.raises(FileProblemsError) as caught:
        read_residuals(written(tmp_path, text), STATIONS, EVENTS, earth)
    found = [problem.split(":")[0] for problem in caught.value.problems]
    assert found == [
        "line 2, column residual_s",
        "line 3, column event",
        "line 4, column station",
        "line 5, column residual_s",
        "line 6, column uncertainty_s",
    ]


def test_uncertainty_defaults_quality_and_repeats(tmp_path: Path, earth: ReferenceEarth) -> None:
    rows = "".join(f"e1,XA,{name},P,0.1,{'A' if name < 'D' else ''}\n" for name in "ABCDEF")
    text = HEAD.replace("uncertainty_s", "quality") + rows + "e1,XA,A,P,0.1,A\n"
    residuals = read_residuals(
        written(tmp_path, text),
        STATIONS,
        EVENTS,
        earth,
        ResidualSettings(min_picks_per_event=3),
        survey_settings=SurveySettings(
            default_uncertainty_s=0.5, quality_uncertainty_s={"A": 0.05}
        ),
    )
    np.testing.assert_array_equal(residuals.uncertainty_s, [0.05] * 3 + [0.5] * 3)
    assert {notice.what for notice in residuals.notices} == {
        "default_uncertainty",
        "repeated_rows",
    }


def test_unwritable_place_is_told(tmp_path: Path, earth: ReferenceEarth) -> None:
    residuals = read_residuals(written(tmp_path, GOOD), STATIONS, EVENTS, earth)
    (tmp_path / "taken").write_text("no folder")
    with pytest.raises(FileAccessError, match="cannot be written"):
        residuals.write_csv(tmp_path / "taken" / "file.csv")
