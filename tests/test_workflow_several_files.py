"""Tables in several files: named in the settings, on the command line, for every input."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest
from click.testing import CliRunner

from rayloom.cli import main
from rayloom.errors import FileProblemsError
from rayloom.workflow import Reporter, RunFolder, run_step
from run_folder_cases import COARSE_GRID, SurveyFiles, write_small_survey


class Listener(Reporter):
    """Remembers why steps begin and what progress was told."""

    def __init__(self) -> None:
        self.reasons: dict[str, str] = {}
        self.heard: list[tuple[str, int, int]] = []

    def begin(self, step: str, reason: str) -> None:
        self.reasons[step] = reason

    def progress(self, label: str, done: int, total: int) -> None:
        self.heard.append((label, done, total))


@pytest.fixture(scope="module")
def files(tmp_path_factory: pytest.TempPathFactory) -> SurveyFiles:
    return write_small_survey(tmp_path_factory.mktemp("survey"))


def halves(table: Path, folder: Path) -> tuple[Path, Path]:
    """Write the rows of a table into two files."""
    rows = pd.read_csv(table, dtype=str)
    folder.mkdir(exist_ok=True)
    first, second = (folder / f"{table.stem}_{name}.csv" for name in ("a", "b"))
    rows.iloc[: len(rows) // 3].to_csv(first, index=False)
    rows.iloc[len(rows) // 3 :].to_csv(second, index=False)
    return first, second


def write_folder(folder: Path, **inputs: str) -> Path:
    folder.mkdir()
    named = "\n".join(f"{name} = {value}" for name, value in inputs.items())
    (folder / "rayloom.toml").write_text(f"[inputs]\n{named}\n\n{COARSE_GRID}", encoding="utf-8")
    return folder


def listed(paths: tuple[Path, ...]) -> str:
    return "[" + ", ".join(f'"{path.as_posix()}"' for path in paths) + "]"


@pytest.fixture(scope="module")
def whole(files: SurveyFiles, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = write_folder(
        tmp_path_factory.mktemp("whole") / "run",
        stations=f'"{files.stations.as_posix()}"',
        events=f'"{files.events.as_posix()}"',
        picks=f'"{files.picks.as_posix()}"',
    )
    run_step(folder, "residuals")
    return folder


def test_tables_in_two_files_each_give_the_same_residuals(
    files: SurveyFiles, whole: Path, tmp_path: Path
) -> None:
    parts = {
        name: listed(halves(getattr(files, name), tmp_path / "parts"))
        for name in ("stations", "events", "picks")
    }
    folder = write_folder(tmp_path / "run", **parts)
    listener = Listener()
    run_step(folder, "residuals", reporter=listener)
    assert (folder / "residuals.csv").read_bytes() == (whole / "residuals.csv").read_bytes()
    shares = [(done, total) for label, done, total in listener.heard if "reading" in label]
    assert shares[-1][0] == shares[-1][1] > 0
    assert shares == sorted(shares)


def test_the_file_that_changed_is_named_by_its_number(
    files: SurveyFiles, whole: Path, tmp_path: Path
) -> None:
    first, second = halves(files.picks, tmp_path / "parts")
    folder = write_folder(
        tmp_path / "run",
        stations=f'"{files.stations.as_posix()}"',
        events=f'"{files.events.as_posix()}"',
        picks=listed((first, second)),
    )
    run_step(folder, "residuals")
    lines = second.read_text(encoding="utf-8").splitlines()
    second.write_text("\n".join(lines[:-1]) + "\n", encoding="utf-8")
    listener = Listener()
    run_step(folder, "residuals", reporter=listener)
    assert listener.reasons == {"residuals": "picks 2 changed"}


def test_ready_residuals_come_in_several_files_too(
    files: SurveyFiles, whole: Path, tmp_path: Path
) -> None:
    folder = write_folder(
        tmp_path / "run",
        stations=f'"{files.stations.as_posix()}"',
        events=f'"{files.events.as_posix()}"',
        residuals=listed(halves(whole / "residuals.csv", tmp_path / "parts")),
    )
    run_step(folder, "residuals")
    again, before = (pd.read_csv(at / "residuals.csv") for at in (folder, whole))
    pd.testing.assert_frame_equal(again, before, rtol=1e-8)


def test_init_takes_an_option_several_times(files: SurveyFiles, tmp_path: Path) -> None:
    first, second = halves(files.picks, tmp_path / "parts")
    folder = tmp_path / "run"
    options = ["--stations", str(files.stations), "--events", str(files.events)]
    options += ["--picks", str(first), "--picks", str(second), "--copy"]
    result = CliRunner().invoke(main, ["init", str(folder), *options])
    assert result.exit_code == 0, result.output
    named = RunFolder(folder).read_settings().inputs
    assert named.picks == (Path("inputs/picks_a.csv"), Path("inputs/picks_b.csv"))
    assert named.stations == Path("inputs/stations.csv")
    assert (folder / "inputs" / "picks_b.csv").read_bytes() == second.read_bytes()


def test_faults_are_told_with_their_own_file(files: SurveyFiles, tmp_path: Path) -> None:
    first, second = halves(files.picks, tmp_path / "parts")
    second.write_text(second.read_text(encoding="utf-8").replace(",P,", ",,", 1), encoding="utf-8")
    folder = write_folder(
        tmp_path / "run",
        stations=f'"{files.stations.as_posix()}"',
        events=f'"{files.events.as_posix()}"',
        picks=listed((first, second)),
    )
    with pytest.raises(FileProblemsError, match=r"line 2 of .*picks_b\.csv, column phase"):
        run_step(folder, "residuals")


@pytest.mark.parametrize("given", ["[]", "[1, 2]", "7"])
def test_what_is_no_file_name_is_explained(given: str, tmp_path: Path) -> None:
    folder = write_folder(tmp_path / "run", stations='"s.csv"', events='"e.csv"', picks=given)
    with pytest.raises(FileProblemsError, match=r"inputs\.picks.*expected the name of a file"):
        RunFolder(folder).read_settings()
