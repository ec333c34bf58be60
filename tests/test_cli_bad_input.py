"""Wrong files and settings, end to end: one clear message, exit code 2, never a traceback."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from rayloom.cli import main
from run_folder_cases import SurveyFiles, write_run_folder, write_small_survey


@pytest.fixture(scope="module")
def good(tmp_path_factory: pytest.TempPathFactory) -> SurveyFiles:
    return write_small_survey(tmp_path_factory.mktemp("survey"))


@pytest.fixture
def files(good: SurveyFiles, tmp_path: Path) -> SurveyFiles:
    for path in (good.stations, good.events, good.picks):
        shutil.copy(path, tmp_path / path.name)
    return SurveyFiles(*(tmp_path / f"{name}.csv" for name in ("stations", "events", "picks")))


def call(*arguments: object) -> Result:
    result = CliRunner().invoke(main, [str(argument) for argument in arguments])
    assert "Traceback" not in result.output
    return result


def initialise(files: SurveyFiles) -> Result:
    return call("init", files.picks.parent / "run", *files.options())


def replace_in(path: Path, old: str, new: str, *, count: int = 1) -> None:
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, count), encoding="utf-8")


def text_in_a_number(files: SurveyFiles) -> None:
    replace_in(files.stations, "-31.6000", "south")


def missing_column(files: SurveyFiles) -> None:
    replace_in(files.events, "depth_km", "how_deep")


def empty_file(files: SurveyFiles) -> None:
    files.picks.write_bytes(b"")


def binary_file(files: SurveyFiles) -> None:
    files.picks.write_bytes(bytes(range(256)) * 4)


def absent_file(files: SurveyFiles) -> None:
    files.stations.unlink()


def unknown_station(files: SurveyFiles) -> None:
    replace_in(files.picks, "E0,XX,S00", "E0,XX,NOWHERE")


def time_that_is_none(files: SurveyFiles) -> None:
    replace_in(files.events, "2021-03-01T", "the first of March ")


@pytest.mark.parametrize(
    ("spoil", "words"),
    [
        (text_in_a_number, ("stations.csv", "line 2", "latitude", "south")),
        (missing_column, ("events.csv", "depth_km")),
        (empty_file, ("picks.csv", "empty")),
        (binary_file, ("picks.csv", "the file is binary")),
        (absent_file, ("stations.csv", "cannot be read")),
        (unknown_station, ("picks.csv", "line 2", "NOWHERE")),
        (time_that_is_none, ("events.csv", "line 2", "the first of March")),
    ],
)
def test_a_wrong_table_is_named_with_its_place(
    files: SurveyFiles, spoil: Callable[[SurveyFiles], None], words: tuple[str, ...]
) -> None:
    spoil(files)
    result = initialise(files)
    assert result.exit_code == 2
    for word in words:
        assert word in result.stderr
    assert not (files.picks.parent / "run" / "rayloom.toml").exists()


def test_a_station_400_km_outside_is_warned_of(files: SurveyFiles) -> None:
    with files.stations.open("a", encoding="utf-8") as stream:
        stream.write("XX,FAR,-31.0,17.2,100\n")
    result = initialise(files)
    assert result.exit_code == 0
    assert "warning: station XX.FAR lies" in result.stderr
    assert "from its nearest neighbour" in result.stderr


def test_a_station_outside_the_blocks_is_left_out_with_the_reason(files: SurveyFiles) -> None:
    replace_in(files.stations, "S11,-30.4000,12.9000", "S11,-31.0000,23.0000")
    folder = write_run_folder(files.picks.parent / "run", files)
    settings = folder / "rayloom.toml"
    replace_in(
        settings, "max_iterations = 2", "max_iterations = 1\n[residuals]\nmax_residual_s = 900"
    )
    result = call("run", folder)
    assert result.exit_code == 0
    assert "10 rays missing: station outside the blocks" in result.stderr
    listed = (folder / "exclusions.csv").read_text(encoding="utf-8").splitlines()
    assert sum("XX,S11" in line for line in listed) == 10


def test_an_event_at_10_degrees_is_left_out_with_the_reason(files: SurveyFiles) -> None:
    with files.events.open("a", encoding="utf-8") as stream:
        stream.write("NEAR,2021-05-01T00:00:00Z,-21.0,12.0,10\n")
    with files.picks.open("a", encoding="utf-8") as stream:
        for station in range(12):
            stream.write(f"NEAR,XX,S{station:02d},P,2021-05-01T00:02:30Z,0.1\n")
    folder = write_run_folder(files.picks.parent / "run", files)
    result = call("residuals", folder)
    assert result.exit_code == 0
    assert "12 outside distance window" in result.stdout
    listed = (folder / "exclusions.csv").read_text(encoding="utf-8")
    assert listed.count("outside_distance_window") == 12


def test_only_near_events_leave_nothing_to_use(files: SurveyFiles) -> None:
    events = files.events.read_text(encoding="utf-8").splitlines()
    near = [line.split(",") for line in events[1:]]
    rows = [f"{name},{time},-21.0,12.0,10" for name, time, *_ in near]
    files.events.write_text("\n".join([events[0], *rows]), encoding="utf-8")
    result = initialise(files)
    assert result.exit_code == 2
    assert "no pick is left (120 outside_distance_window; for example E0" in result.stderr


def test_wrong_settings_are_listed_with_line_and_key(files: SurveyFiles) -> None:
    folder = write_run_folder(files.picks.parent / "run", files)
    settings = folder / "rayloom.toml"
    replace_in(settings, "max_iterations = 2", 'max_iteration = 2\nprior_std_percent = "large"')
    result = call("run", folder)
    assert result.exit_code == 2
    assert "inversion.max_iteration: is not a known key; did you mean 'max_iterations'?" in (
        result.stderr
    )
    assert (
        "inversion.prior_std_percent: got \"large\", expected 'auto' or a number" in result.stderr
    )
    assert "line " in result.stderr


def test_a_refused_item_is_not_told_twice(files: SurveyFiles) -> None:
    folder = write_run_folder(files.picks.parent / "run", files)
    replace_in(folder / "rayloom.toml", "dpi = 60", 'figure_formats = ["gif"]')
    result = call("run", folder)
    assert result.exit_code == 2
    assert "rayloom.toml: 1 problem\n" in result.stderr
    assert "outputs.figure_formats[1]: got \"gif\", expected 'png', 'pdf' or 'svg'" in (
        result.stderr
    )


def test_how_rays_are_traced_is_chosen_in_one_place(files: SurveyFiles) -> None:
    folder = write_run_folder(files.picks.parent / "run", files)
    replace_in(folder / "rayloom.toml", "max_iterations = 2", 'method = "straight"')
    result = call("run", folder)
    assert result.exit_code == 2
    assert "method" in result.stderr
    assert "[forward]" in result.stderr


def test_an_unknown_earth_is_named(files: SurveyFiles) -> None:
    result = call("init", files.picks.parent / "run", *files.options(), "--earth", "ak153")
    assert result.exit_code == 2
    assert "no Earth model 'ak153'; expected ak135, iasp91 or the name of a CSV file" in (
        result.stderr
    )


def test_a_folder_without_settings_says_how_to_make_one(tmp_path: Path) -> None:
    result = call("run", tmp_path)
    assert result.exit_code == 2
    assert "rayloom init" in result.stderr


def test_picks_or_residuals_are_wanted_one_of_them(files: SurveyFiles) -> None:
    options = files.options()[:4]
    result = call("init", files.picks.parent / "run", *options)
    assert result.exit_code == 2
    assert "--picks or --residuals" in result.stderr


def test_settings_are_not_overwritten_unasked(files: SurveyFiles) -> None:
    assert initialise(files).exit_code == 0
    result = initialise(files)
    assert result.exit_code == 2
    assert "--force" in result.stderr
    forced = call("init", files.picks.parent / "run", *files.options(), "--force")
    assert forced.exit_code == 0


def test_a_step_refuses_to_build_on_what_is_missing(files: SurveyFiles) -> None:
    folder = write_run_folder(files.picks.parent / "run", files)
    result = call("export", folder)
    assert result.exit_code == 2
    assert "'residuals', which is still to do" in result.stderr


@pytest.mark.parametrize("content", [b"foo\n", b"\xff\xfe\x00", b""])
def test_a_spoilt_list_of_exclusions_says_how_to_write_it_again(
    files: SurveyFiles, content: bytes
) -> None:
    folder = write_run_folder(files.picks.parent / "run", files)
    assert call("residuals", folder).exit_code == 0
    (folder / "exclusions.csv").write_bytes(content)
    result = call("invert", folder)
    assert result.exit_code == 2
    assert "exclusions.csv: cannot be read" in result.stderr
    assert "--again" in result.stderr


def test_no_demo_in_a_folder_that_holds_something_else(tmp_path: Path) -> None:
    (tmp_path / "thesis.txt").write_text("chapter one", encoding="utf-8")
    result = call("demo", tmp_path)
    assert result.exit_code == 2
    assert "not empty" in result.stderr
