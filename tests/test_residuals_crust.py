"""Local crust below stations: the table, its faults, and what it does to predictions."""

from __future__ import annotations

import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import rayloom as rl
from rayloom.errors import FileProblemsError, InputError
from rayloom.residuals import ResidualSettings, compute_residuals, crust_frame, read_crust
from rayloom.survey import Notice
from rayloom.workflow import Reporter, RunFolder, Tables, initialise, run_step
from run_folder_cases import SurveyFiles, write_run_folder, write_small_survey

TABLE = """\
network,station,crust_thickness_km,vp_km_s,vs_km_s,column,remark
XX,S00,60,6.2,3.5,,plateau
XX,S01,28,,,,stretched
XX,S02,,,,basin.csv,measured
"""
BASIN = "depth_km,vp_km_s,vs_km_s\n-1.2,2.4,1.1\n3,2.4,1.1\n3,6.0,3.5\n38,6.9,3.9\n38,8.05,4.5\n"


@pytest.fixture(scope="module")
def files(tmp_path_factory: pytest.TempPathFactory) -> SurveyFiles:
    return write_small_survey(tmp_path_factory.mktemp("survey"))


@pytest.fixture(scope="module")
def survey(files: SurveyFiles):
    return rl.read_survey(stations=files.stations, events=files.events, picks=files.picks)


def write_crust(folder: Path, table: str = TABLE, basin: str = BASIN) -> Path:
    folder.mkdir(exist_ok=True)
    (folder / "basin.csv").write_text(basin, encoding="utf-8")
    path = folder / "crust.csv"
    path.write_text(table, encoding="utf-8")
    return path


def plain_delay_s(layers, reference, ray_parameter_s: float) -> float:
    """Σ h √(1/v² − p²/r²) of thin layers, both columns cut into pieces of 10 m."""
    total = 0.0
    for sign, column in ((1.0, layers), (-1.0, reference)):
        for top, bottom, at_top, at_bottom in column:
            count = max(1, round((bottom - top) / 0.01))
            depth = top + (np.arange(count) + 0.5) * (bottom - top) / count
            speed = at_top + (at_bottom - at_top) * (depth - top) / (bottom - top)
            flat = ray_parameter_s / (6371.0 - depth)
            total += sign * float(
                np.sum(np.sqrt(1.0 / speed**2 - flat**2)) * (bottom - top) / count
            )
    return total


AK135 = [(-1.2, 20, 5.8, 5.8), (20, 35, 6.5, 6.5)]
"""Kennett, Engdahl & Buland (1995), its top speed continued up to the station."""

LOWER = (8.04, 8.045)
"""ak135 at 35 and 77.5 km."""


def mantle(top: float, bottom: float) -> tuple[float, float, float, float]:
    slope = (LOWER[1] - LOWER[0]) / 42.5
    return top, bottom, LOWER[0] + slope * (top - 35.0), LOWER[0] + slope * (bottom - 35.0)


@pytest.mark.parametrize(
    ("station", "layers", "bottom"),
    [
        ("S00", [(-1.2, 58.8, 6.2, 6.2)], 58.8),
        (
            "S01",
            [
                (-1.2, -1.2 + 16, 5.8, 5.8),
                (-1.2 + 16, 26.8, 6.5, 6.5),
                (26.8, 35.0, 8.04, 8.04),
            ],
            35.0,
        ),
        ("S02", [(-1.2, 3, 2.4, 2.4), (3, 38, 6.0, 6.9)], 38.0),
    ],
)
def test_each_kind_of_row_against_plain_sums(
    survey, tmp_path: Path, station: str, layers: list, bottom: float
) -> None:
    """Every station is 1200 m high; thickness counts from there."""
    crust = read_crust(write_crust(tmp_path / "crust"), survey.stations)
    data = compute_residuals(survey, rl.ReferenceEarth("ak135"), crust=crust)
    reference = [*AK135, *([mantle(35.0, bottom)] if bottom > 35.0 else [])]
    rows = data.stations.station[data.station_index] == station
    assert rows.sum() == 10
    parameter_s = data.earth.ray_parameter("P", data.distance_deg[rows], 33.0)
    expected_s = [plain_delay_s(layers, reference, value) for value in parameter_s]
    np.testing.assert_allclose(data.crust_s[rows], expected_s, atol=2e-5)


def test_the_correction_is_part_of_the_prediction_and_can_be_switched_off(
    survey, tmp_path: Path
) -> None:
    crust = read_crust(write_crust(tmp_path / "crust"), survey.stations)
    earth = rl.ReferenceEarth("ak135")
    bare = compute_residuals(survey, earth)
    data = compute_residuals(survey, earth, crust=crust)
    off = compute_residuals(survey, earth, ResidualSettings(crust=False), crust=crust)
    np.testing.assert_allclose(data.predicted_s, bare.predicted_s + data.crust_s, rtol=1e-14)
    np.testing.assert_allclose(data.residual_s, bare.residual_s - data.crust_s, atol=1e-9)
    np.testing.assert_array_equal(off.residual_s, bare.residual_s)
    corrected = np.isin(data.stations.station[data.station_index], ["S00", "S01", "S02"])
    np.testing.assert_array_equal(data.crust_s[~corrected], 0.0)
    assert np.all(data.crust_s[corrected] != 0.0)


def test_the_listing_names_each_station_with_its_seconds(survey, tmp_path: Path) -> None:
    crust = read_crust(write_crust(tmp_path / "crust"), survey.stations)
    data = compute_residuals(survey, rl.ReferenceEarth("ak135"), crust=crust)
    listed = crust_frame(data, crust).set_index("station")
    assert list(listed.index) == ["S00", "S01", "S02"]
    assert listed.loc["S00", "moho_km"] == pytest.approx(58.8)
    assert listed.loc["S02", "moho_km"] == 38.0
    rows = data.stations.station[data.station_index] == "S01"
    assert listed.loc["S01", "mean_p_s"] == pytest.approx(data.crust_s[rows].mean())
    assert listed.loc["S01", "picks_p"] == 10
    assert listed.loc["S01", "picks_s"] == 0
    assert np.isnan(listed.loc["S01", "mean_s_s"])
    vertical_s = 60.0 / 6.2 - 21.2 / 5.8 - 15.0 / 6.5 - 23.8 / 8.0414
    assert listed.loc["S00", "vertical_p_s"] == pytest.approx(vertical_s, abs=1e-4)


def test_stations_without_a_row_and_rows_without_a_station_are_remarked(
    survey, tmp_path: Path
) -> None:
    table = TABLE + "YY,FAR,35,,,,\n"
    notices: list[Notice] = []
    read_crust(write_crust(tmp_path / "crust", table), survey.stations, notices=notices)
    told = {notice.what: notice.detail for notice in notices}
    assert "YY.FAR" in told["crust_of_unknown_station"]
    assert "9 of 12 stations have no row" in told["station_without_crust"]


@pytest.mark.parametrize(
    ("row", "message"),
    [
        ("XX,S03,400,,,,", r"line 5, column crust_thickness_km: '400'; expected a number from 1"),
        ("XX,S03,thick,,,,", "line 5, column crust_thickness_km: 'thick'"),
        ("XX,S03,,,,,", "line 5, expected either crust_thickness_km or column"),
        ("XX,S03,30,,,basin.csv,", "line 5, expected either crust_thickness_km or column"),
        ("XX,S03,,6.1,,basin.csv,", "line 5, vp_km_s and vs_km_s stand in the column file"),
        ("XX,S03,30,3.5,6.1,,", "line 5, column vs_km_s"),
        ("XX,S03,30,4.0,3.9,,", "line 5, column vs_km_s: expected less than 0.866 of vp_km_s"),
        ("XX,S00,30,,,,", "line 5, the station stands in an earlier row already"),
        ("XX,S03,,,,absent.csv,", r"line 5, column absent\.csv: .*cannot be read"),
        (",S03,30,,,,", "line 5, column network: blank"),
    ],
)
def test_faults_of_the_table_are_named_by_line(
    survey, tmp_path: Path, row: str, message: str
) -> None:
    path = write_crust(tmp_path / "crust", f"{TABLE}{row}\n")
    with pytest.raises(FileProblemsError, match=message):
        read_crust(path, survey.stations)


@pytest.mark.parametrize(
    ("basin", "message"),
    [
        (BASIN.replace("3,6.0", "2,6.0"), "line 4, column basin.csv: line 4, depth_km"),
        (BASIN.replace("6.0,3.5", "6.0,5.5"), "line 4, column basin.csv: line 4, vs_km_s"),
        (BASIN.replace("-1.2", "5"), "expected 0 in the first row"),
        (BASIN.replace("vp_km_s", "vp_kms"), "did you mean 'vp_km_s' by 'vp_kms'"),
        (BASIN.replace("38,", "800,"), "to 400 km at most"),
        ("depth_km,vp_km_s,vs_km_s\n0,6,3.5\n", "two rows or more"),
    ],
)
def test_faults_of_a_column_stand_at_the_row_that_names_it(
    survey, tmp_path: Path, basin: str, message: str
) -> None:
    path = write_crust(tmp_path / "crust", basin=basin)
    with pytest.raises(FileProblemsError, match=message):
        read_crust(path, survey.stations)


def test_a_table_without_either_column_says_so(survey, tmp_path: Path) -> None:
    path = write_crust(tmp_path / "crust", "network,station,thickness\nXX,S00,30\n")
    with pytest.raises(FileProblemsError, match="crust_thickness_km or column is missing"):
        read_crust(path, survey.stations)


def test_an_earth_without_a_moho_cannot_take_a_thickness(survey, tmp_path: Path) -> None:
    from rayloom.earth import ModelTable

    smooth = ModelTable.from_arrays(
        [0, 2891, 2891, 6371], [6, 13.7, 8, 11], [3.4, 7.3, 0, 3.6], [2.7, 5.5, 9.9, 13]
    )
    crust = read_crust(write_crust(tmp_path / "crust"), survey.stations)
    with pytest.raises(InputError, match="its crust cannot be replaced"):
        compute_residuals(survey, rl.ReferenceEarth.from_table(smooth), crust=crust)


class Listener(Reporter):
    """Remembers why steps begin and what was noted."""

    def __init__(self) -> None:
        self.reasons: dict[str, str] = {}
        self.notes: list[str] = []

    def begin(self, step: str, reason: str) -> None:
        self.reasons[step] = reason

    def note(self, text: str) -> None:
        self.notes.append(text)


def test_a_run_folder_lists_it_and_tells_what_changed(files: SurveyFiles, tmp_path: Path) -> None:
    path = write_crust(tmp_path / "crust")
    folder = write_run_folder(tmp_path / "run", files)
    settings = folder / "rayloom.toml"
    text = settings.read_text(encoding="utf-8").replace(
        "[inputs]", f'[inputs]\ncrust = "{path.as_posix()}"'
    )
    settings.write_text(text, encoding="utf-8")
    run_step(folder, "residuals")
    listed = pd.read_csv(folder / "station_crust.csv")
    assert list(listed["station"]) == ["S00", "S01", "S02"]
    residuals = pd.read_csv(folder / "residuals.csv").set_index(["event", "station"])
    mean_s = residuals.loc[(slice(None), "S02"), "crust_s"].mean()
    assert listed.set_index("station").loc["S02", "mean_p_s"] == pytest.approx(mean_s)

    basin = path.parent / "basin.csv"
    basin.write_text(BASIN.replace("2.4,1.1", "2.5,1.1"), encoding="utf-8")
    listener = Listener()
    run_step(folder, "residuals", reporter=listener)
    assert listener.reasons == {"residuals": "crust column basin.csv changed"}

    settings.write_text(f"{text}\n[residuals]\ncrust = false\n", encoding="utf-8")
    run_step(folder, "residuals")
    assert not (folder / "station_crust.csv").exists()
    assert (pd.read_csv(folder / "residuals.csv")["crust_s"] == 0.0).all()


def test_init_names_or_copies_it_with_its_columns(files: SurveyFiles, tmp_path: Path) -> None:
    path = write_crust(tmp_path / "crust", TABLE.replace("basin.csv", "columns/basin.csv"))
    (path.parent / "columns").mkdir()
    shutil.move(path.parent / "basin.csv", path.parent / "columns" / "basin.csv")
    tables = Tables(files.stations, files.events, files.picks, crust=path)
    initialise(tmp_path / "run", tables, copy=True)
    assert RunFolder(tmp_path / "run").read_settings().inputs.crust == Path("inputs/crust.csv")
    assert (tmp_path / "run" / "inputs" / "columns" / "basin.csv").exists()
    run_step(tmp_path / "run", "residuals")


def test_ready_residuals_are_left_as_they_are(files: SurveyFiles, tmp_path: Path) -> None:
    folder = write_run_folder(tmp_path / "first", files)
    run_step(folder, "residuals")
    path = write_crust(tmp_path / "crust")
    again = write_run_folder(tmp_path / "second", files)
    settings = again / "rayloom.toml"
    text = settings.read_text(encoding="utf-8")
    ready = (folder / "residuals.csv").as_posix()
    text = text.replace(f'picks = "{files.picks.as_posix()}"', f'residuals = "{ready}"')
    settings.write_text(
        text.replace("[inputs]", f'[inputs]\ncrust = "{path.as_posix()}"'), encoding="utf-8"
    )
    listener = Listener()
    run_step(again, "residuals", reporter=listener)
    assert any(
        "inputs.crust bears on their predicted times only" in note for note in listener.notes
    )
    first, second = (pd.read_csv(at / "residuals.csv") for at in (folder, again))
    np.testing.assert_allclose(second["residual_s"], first["residual_s"], atol=1e-9)
