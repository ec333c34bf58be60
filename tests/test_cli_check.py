"""The command check, the lists of what to drop and keep, and run folders with delays."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from click.testing import CliRunner, Result

from rayloom.cli import main
from run_folder_cases import COARSE_GRID, SurveyFiles, write_run_folder, write_small_survey

DELAYED = "XX.S05"


def call(*arguments: object) -> Result:
    result = CliRunner().invoke(main, [str(argument) for argument in arguments])
    assert "Traceback" not in result.output
    return result


@pytest.fixture
def files(tmp_path: Path) -> SurveyFiles:
    return write_small_survey(tmp_path / "survey")


def shift_picks(files: SurveyFiles, station: str, seconds: float, events: list[str]) -> None:
    table = pd.read_csv(files.picks)
    rows = (table["station"] == station) & table["event"].isin(events)
    moved = pd.to_datetime(table.loc[rows, "time"]) + pd.to_timedelta(seconds, unit="s")
    table.loc[rows, "time"] = moved.dt.strftime("%Y-%m-%dT%H:%M:%S.%fZ")
    table.to_csv(files.picks, index=False)


def test_clean_tables(files: SurveyFiles, tmp_path: Path) -> None:
    run = write_run_folder(tmp_path / "run", files)
    result = call("check", run)
    assert result.exit_code == 0
    table = pd.read_csv(run / "findings.csv")
    assert set(table["kind"]) == {"thin_sector"}, "ten events leave most sectors thin"
    assert list(table.columns) == [
        "severity",
        "kind",
        "who",
        "evidence",
        "value",
        "unit",
        "advice",
    ]


def test_findings_are_printed_and_written(files: SurveyFiles, tmp_path: Path) -> None:
    shift_picks(files, "S05", 1.0, ["E3"])
    run = write_run_folder(tmp_path / "run", files)
    result = call("check", run)
    assert result.exit_code == 0
    table = pd.read_csv(run / "findings.csv")
    found = table[table["kind"] == "cycle_skip"]
    assert found["who"].tolist() == [f"E3 {DELAYED} P"]
    assert abs(found["value"].iloc[0] - 1.0) < 0.3
    assert "cycle skip" in result.output
    assert "drop_picks" in result.output
    assert not (run / "residuals.csv").exists()


def test_unreadable_tables_stop_the_check(files: SurveyFiles, tmp_path: Path) -> None:
    run = write_run_folder(tmp_path / "run", files)
    files.picks.write_text("event,network\n", encoding="utf-8")
    assert call("check", run).exit_code == 2
    assert call("check", tmp_path / "nowhere").exit_code == 2


def test_settings_drop_and_keep(files: SurveyFiles, tmp_path: Path) -> None:
    """What a person drops is listed with that reason; what is kept passes the limits."""
    shift_picks(files, "S05", 20.0, ["E3"])
    run = write_run_folder(tmp_path / "run", files)
    settings = run / "rayloom.toml"
    settings.write_text(
        settings.read_text()
        + '\n[residuals]\ndrop_events = ["E1"]\ndrop_stations = ["XX.S02"]\n'
        + f'drop_picks = ["E4 {DELAYED} P", "E9 XX.NONE P"]\nkeep = ["E3 {DELAYED} P"]\n'
    )
    result = call("residuals", run)
    assert result.exit_code == 0
    assert "E9 XX.NONE P" in result.output
    left_out = pd.read_csv(run / "exclusions.csv")
    assert set(left_out["reason"]) == {"dropped_by_settings"}
    assert (left_out["event"] == "E1").sum() == 12
    assert (left_out["station"] == "S02").sum() == 10
    assert len(left_out) == 12 + 9 + 1
    kept = pd.read_csv(run / "residuals.csv")
    assert kept[(kept["event"] == "E3") & (kept["station"] == "S05")]["residual_s"].item() > 15.0


def test_gross_error_is_left_out_unless_kept(files: SurveyFiles, tmp_path: Path) -> None:
    shift_picks(files, "S05", 20.0, ["E3"])
    run = write_run_folder(tmp_path / "run", files)
    assert call("residuals", run).exit_code == 0
    assert pd.read_csv(run / "exclusions.csv")["reason"].tolist() == ["gross_residual"]


def write_delays(files: SurveyFiles) -> Path:
    picks = pd.read_csv(files.picks, parse_dates=["time"])
    path = files.picks.with_name("delays.csv")
    with path.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.writer(stream)
        header = "event,network_a,station_a,network_b,station_b,delay_s,uncertainty_s"
        writer.writerow(header.split(","))
        for event, rows in picks.groupby("event"):
            seconds = (rows["time"] - rows["time"].min()).dt.total_seconds().to_numpy()
            names = rows["station"].to_numpy()
            for a, b in zip(*np.triu_indices(len(rows), k=1), strict=True):
                delay = f"{seconds[a] - seconds[b]:.4f}"
                writer.writerow([event, "XX", names[a], "XX", names[b], delay, "0.1"])
    return path


def test_delays_in_place_of_picks(files: SurveyFiles, tmp_path: Path) -> None:
    """Residuals of delays equal those of the picks they were made of, but for their level."""
    run = write_run_folder(tmp_path / "run", files)
    assert call("residuals", run).exit_code == 0
    other = tmp_path / "other"
    other.mkdir()
    (other / "rayloom.toml").write_text(
        f'[inputs]\nstations = "{files.stations.as_posix()}"\n'
        f'events = "{files.events.as_posix()}"\ndelays = "{write_delays(files).as_posix()}"\n\n'
        f"{COARSE_GRID}"
    )
    assert call("residuals", other).exit_code == 0
    keys = ["event", "station"]
    both = pd.merge(
        pd.read_csv(run / "residuals.csv"), pd.read_csv(other / "residuals.csv"), on=keys
    )
    assert len(both) == len(pd.read_csv(run / "residuals.csv"))
    gap = both["relative_residual_s_x"] - both["relative_residual_s_y"]
    assert gap.abs().max() < 1e-4
    assert len(pd.read_csv(other / "relative_times.csv")) == len(both)
    assert not pd.read_csv(other / "delay_closures.csv")["suspected"].any()
    assert call("check", other).exit_code == 0
