"""Which steps a run folder still needs, and that what it holds belongs together."""

from __future__ import annotations

import json
import os
import shutil
import tomllib
from pathlib import Path

import numpy as np
import pytest

from rayloom.errors import FileAccessError, InputError
from rayloom.model import SlownessModel
from rayloom.settings import read_run_settings
from rayloom.workflow import Reporter, RunFolder, Tables, initialise, run, run_step, summarise
from rayloom.workflow.data import read_back_residuals, read_earth
from rayloom.workflow.record import content_hash
from rayloom.workflow.result_file import load_result, save_result
from run_folder_cases import SurveyFiles, write_run_folder, write_small_survey


class Listener(Reporter):
    """Remembers what it hears."""

    def __init__(self) -> None:
        self.reasons: dict[str, str] = {}
        self.notes: list[str] = []

    def begin(self, step: str, reason: str) -> None:
        self.reasons[step] = reason

    def note(self, text: str) -> None:
        self.notes.append(text)


@pytest.fixture(scope="module")
def files(tmp_path_factory: pytest.TempPathFactory) -> SurveyFiles:
    return write_small_survey(tmp_path_factory.mktemp("survey"))


@pytest.fixture(scope="module")
def finished(files: SurveyFiles, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = write_run_folder(tmp_path_factory.mktemp("finished") / "run", files)
    assert run(folder) == ["residuals", "invert", "export"]
    return folder


@pytest.fixture
def folder(finished: Path, tmp_path: Path) -> Path:
    return shutil.copytree(finished, tmp_path / "run")


def reasons_of(folder: Path) -> dict[str, str]:
    listener = Listener()
    run(folder, reporter=listener)
    return listener.reasons


def edit(folder: Path, old: str, new: str) -> None:
    path = folder / "rayloom.toml"
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")


def test_a_copied_folder_is_up_to_date_whatever_its_dates(folder: Path) -> None:
    for number, path in enumerate(sorted(folder.rglob("*"))):
        os.utime(path, (1e9 + number, 1e9 + number))
    assert reasons_of(folder) == {}


def test_a_missing_result_is_made_again_and_nothing_else(folder: Path) -> None:
    before = content_hash(folder / "model.vts")
    (folder / "model.vts").unlink()
    assert reasons_of(folder) == {"export": "model.vts is missing"}
    assert content_hash(folder / "model.vts") == before


def test_a_changed_setting_names_its_key_and_both_values(folder: Path) -> None:
    edit(folder, "dpi = 60", "dpi = 70")
    assert reasons_of(folder) == {"export": "outputs.dpi changed from 60 to 70"}


def test_figures_of_earlier_settings_do_not_stay(folder: Path) -> None:
    assert (folder / "figures" / "section_2.png").exists()
    one = '[{name = "A", start = [11.0, -31.0], end = [13.0, -31.0]}]'
    edit(folder, "dpi = 60", f"dpi = 60\nsections = {one}")
    assert set(reasons_of(folder)) == {"export"}
    assert (folder / "figures" / "section_1.png").exists()
    assert not (folder / "figures" / "section_2.png").exists()


def test_a_setting_that_does_not_touch_the_result_changes_nothing(folder: Path) -> None:
    edit(folder, "[inversion]", "[forward]\nthreads = 1\n\n[inversion]")
    assert reasons_of(folder) == {}


def test_a_changed_table_is_named_and_later_steps_follow(
    finished: Path, files: SurveyFiles, tmp_path: Path
) -> None:
    folder = shutil.copytree(finished, tmp_path / "run")
    picks = tmp_path / "picks.csv"
    lines = files.picks.read_text(encoding="utf-8").splitlines()
    picks.write_text("\n".join(lines[:-1]) + "\n", encoding="utf-8")
    edit(folder, files.picks.as_posix(), "../picks.csv")
    reasons = reasons_of(folder)
    assert reasons["residuals"] == "picks changed"
    assert reasons["invert"] == "residuals.csv changed"
    assert set(reasons) == {"residuals", "invert", "export"}


def test_rows_removed_by_hand_stay_removed(folder: Path) -> None:
    table = folder / "residuals.csv"
    kept = table.read_text(encoding="utf-8").splitlines()[:-3]
    table.write_text("\n".join(kept) + "\n", encoding="utf-8")
    reasons = reasons_of(folder)
    assert reasons["invert"] == "residuals.csv changed"
    assert "residuals" not in reasons
    assert table.read_text(encoding="utf-8").splitlines() == kept


def test_one_step_at_a_time(files: SurveyFiles, tmp_path: Path) -> None:
    folder = write_run_folder(tmp_path / "run", files)
    with pytest.raises(InputError, match=r"'invert' builds on 'residuals'.*not done yet"):
        run_step(folder, "invert")
    assert run_step(folder, "residuals")
    assert not run_step(folder, "residuals")
    assert run_step(folder, "residuals", again=True)
    assert not (folder / "model.nc").exists()


def test_provenance_tells_what_made_the_results(finished: Path) -> None:
    steps = json.loads((finished / "provenance.json").read_text(encoding="utf-8"))["steps"]
    assert list(steps) == ["residuals", "invert", "export"]
    invert = steps["invert"]
    assert invert["seeds"] == {"trace_probes": 20}
    assert invert["inputs"]["residuals.csv"] == content_hash(finished / "residuals.csv")
    assert invert["outputs"]["model.nc"] == content_hash(finished / "model.nc")
    assert {"python", "rayloom", "numpy", "scipy"} <= set(invert["versions"])
    assert invert["machine"]["cpu_features"]
    assert invert["remarks"]["stopped_because"]


def test_a_record_that_cannot_be_read_says_what_to_do(folder: Path) -> None:
    (folder / "provenance.json").write_text("{half", encoding="utf-8")
    with pytest.raises(FileAccessError, match="Delete it to do every step again"):
        run(folder)


def test_settings_used_hold_every_default_and_read_back(finished: Path) -> None:
    used = finished / "settings_used.toml"
    assert read_run_settings(used) == read_run_settings(finished / "rayloom.toml")
    assert tomllib.loads(used.read_text(encoding="utf-8"))["forward"]["method"] == "bent"


def test_a_stored_result_is_the_result_bit_for_bit(finished: Path, tmp_path: Path) -> None:
    folder = RunFolder(finished)
    settings = folder.read_settings()
    data = read_back_residuals(folder, read_earth(folder, settings.earth.model), settings)
    model = SlownessModel.read_netcdf(folder.file("model.nc"))
    result = load_result(folder.file("inversion.npz"), data, model)
    save_result(tmp_path / "again.npz", result)
    again = load_result(tmp_path / "again.npz", data, model)
    assert repr(again.history) == repr(result.history)
    assert again.state.fingerprint == result.state.fingerprint
    np.testing.assert_array_equal(again.state.white, result.state.white)
    np.testing.assert_array_equal(again.residual_after_s, result.residual_after_s)
    assert (again.rays.path_lengths != result.rays.path_lengths).nnz == 0
    hits = np.bincount(result.rays.path_lengths.indices, minlength=model.grid.block_count)
    np.testing.assert_array_equal(hits.reshape(model.grid.shape), model.fields["hits"])


def test_the_inversion_lowers_the_misfit_and_the_summary_says_so(finished: Path) -> None:
    folder = RunFolder(finished)
    rows = (folder.file("history.csv")).read_text(encoding="utf-8").splitlines()
    column = rows[0].split(",").index("rms_s")
    first, last = (float(rows[row].split(",")[column]) for row in (1, -1))
    assert last < 0.5 * first
    told = summarise(finished)
    assert "120 at 12 stations from 10 events" in told
    assert "variance reduction" in told


def test_init_names_tables_relative_to_the_folder_or_copies_them(
    files: SurveyFiles, tmp_path: Path
) -> None:
    tables = Tables(files.stations, files.events, files.picks)
    listener = Listener()
    initialise(tmp_path / "named", tables, reporter=listener)
    settings = RunFolder(tmp_path / "named").read_settings()
    assert not settings.inputs.picks.is_absolute()
    assert (tmp_path / "named" / settings.inputs.picks).samefile(files.picks)
    assert any("padding" in note.lower() for note in listener.notes)

    initialise(tmp_path / "copied", tables, copy=True)
    settings = RunFolder(tmp_path / "copied").read_settings()
    assert settings.inputs.picks == Path("inputs/picks.csv")
    copied = tmp_path / "copied" / "inputs" / "picks.csv"
    assert copied.read_bytes() == files.picks.read_bytes()


def test_ready_residuals_give_the_same_model_as_their_picks(
    finished: Path, files: SurveyFiles, tmp_path: Path
) -> None:
    folder = write_run_folder(tmp_path / "run", files)
    edit(
        folder,
        f'picks = "{files.picks.as_posix()}"',
        f'residuals = "{(finished / "residuals.csv").as_posix()}"',
    )
    run_step(folder, "residuals")
    run_step(folder, "invert")
    assert (folder / "model.nc").read_bytes() == (finished / "model.nc").read_bytes()


def test_the_linear_system_is_written_on_request(folder: Path) -> None:
    edit(folder, "dpi = 60", "dpi = 60\nlinear_system = true")
    assert set(reasons_of(folder)) == {"invert", "export"}
    names = {path.name for path in (folder / "linear_system").iterdir()}
    assert names == {"G.npz", "rows.csv", "d.csv", "blocks.csv"}
