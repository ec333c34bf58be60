"""A run that starts from a model of an earlier one."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from rayloom.errors import InputError
from rayloom.model import SlownessModel
from rayloom.workflow import Reporter, run_step
from run_folder_cases import SurveyFiles, write_run_folder, write_small_survey


@pytest.fixture(scope="module")
def files(tmp_path_factory: pytest.TempPathFactory) -> SurveyFiles:
    return write_small_survey(tmp_path_factory.mktemp("survey"))


@pytest.fixture(scope="module")
def first(files: SurveyFiles, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = write_run_folder(tmp_path_factory.mktemp("first") / "run", files)
    choose(folder, "")
    run_step(folder, "residuals")
    run_step(folder, "invert")
    return folder


def choose(folder: Path, choices: str) -> None:
    settings = folder / "rayloom.toml"
    text = settings.read_text(encoding="utf-8")
    choices = f"[inversion]\nprior_std_percent = 2.0\n{choices}"
    settings.write_text(text.replace("[inversion]", choices), encoding="utf-8")


def folder_that_starts_from(value: str, files: SurveyFiles, folder: Path) -> Path:
    write_run_folder(folder, files)
    choose(folder, f"starting_model = {value}")
    run_step(folder, "residuals")
    return folder


def history(folder: Path) -> pd.DataFrame:
    return pd.read_csv(folder / "history.csv")


def test_it_begins_where_the_earlier_model_ended(
    files: SurveyFiles, first: Path, tmp_path: Path
) -> None:
    """Two more iterations do no worse than the first two.

    Station terms and shifts begin at zero again, so the first misfit lies in between.
    """
    earlier = SlownessModel.read_netcdf(first / "model.nc")
    path = tmp_path / "start.nc"
    earlier.write_netcdf(path)
    folder = folder_that_starts_from('"../start.nc"', files, tmp_path / "run")
    run_step(folder, "invert")
    before, after = history(first), history(folder)
    assert after["rms_s"].iloc[0] < 0.9 * before["rms_s"].iloc[0]
    assert after["model_rms_percent"].iloc[0] == pytest.approx(
        before["model_rms_percent"].iloc[-1], rel=1e-6
    )
    assert after["objective"].iloc[-1] <= 1.001 * before["objective"].iloc[-1]


def test_another_file_means_another_inversion(
    files: SurveyFiles, first: Path, tmp_path: Path
) -> None:
    earlier = SlownessModel.read_netcdf(first / "model.nc")
    earlier.write_netcdf(tmp_path / "start.nc")
    folder = folder_that_starts_from('{ P = "../start.nc" }', files, tmp_path / "run")
    run_step(folder, "invert")
    assert not run_step(folder, "invert")
    earlier.with_slowness(earlier.reference).write_netcdf(tmp_path / "start.nc")
    reasons = {}

    class Listener(Reporter):
        def begin(self, step: str, reason: str) -> None:
            reasons[step] = reason

    assert run_step(folder, "invert", reporter=Listener())
    assert reasons == {"invert": "starting_model changed"}
    assert (folder / "model.nc").read_bytes() == (first / "model.nc").read_bytes()


def test_a_model_of_the_other_wave_is_refused_with_key_and_file(
    files: SurveyFiles, first: Path, tmp_path: Path
) -> None:
    grid = SlownessModel.read_netcdf(first / "model.nc").grid
    SlownessModel(grid, np.full(grid.shape, 0.2), wave="S").write_netcdf(tmp_path / "start.nc")
    folder = folder_that_starts_from('"../start.nc"', files, tmp_path / "run")
    with pytest.raises(InputError, match=r"inversion\.starting_model, .*start\.nc: .*S waves"):
        run_step(folder, "invert")
