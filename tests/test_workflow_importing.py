"""A model of another solver made from linear_system/ and taken back, through the commands."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from click.testing import CliRunner
from scipy.sparse import load_npz
from scipy.sparse.linalg import lsqr

from rayloom.cli import main
from rayloom.model import SlownessModel
from rayloom.workflow import run_step
from run_folder_cases import write_run_folder, write_small_survey


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    files = write_small_survey(tmp_path_factory.mktemp("survey"))
    folder = write_run_folder(tmp_path_factory.mktemp("run") / "run", files)
    settings = folder / "rayloom.toml"
    settings.write_text(settings.read_text() + "linear_system = true\n")
    for step in ("residuals", "invert"):
        run_step(folder, step)
    return folder


def test_a_solution_of_scipy_goes_out_and_comes_back(folder: Path) -> None:
    """Damped least squares of G (s − s_ref) = d by scipy; it explains what scipy says."""
    system = folder / "linear_system"
    lengths = load_npz(system / "G.npz")
    explained_s = pd.read_csv(system / "d.csv")["d_s"].to_numpy()
    blocks = pd.read_csv(system / "blocks.csv")
    change = lsqr(lengths, explained_s, damp=500.0)[0]
    vector = folder / "mine.csv"
    pd.DataFrame({"block": blocks["block"], "slowness_change_s_per_km": change}).to_csv(
        vector, index=False
    )
    done = CliRunner().invoke(main, ["import-model", str(folder), str(vector), "--quiet"])
    assert done.exit_code == 0, done.output
    assert "variance reduction" in done.output
    model = SlownessModel.read_netcdf(folder / "imported" / "model.nc")
    found = (model.slowness_s_per_km - model.reference).ravel()
    np.testing.assert_allclose(found, change, atol=1e-12)
    after = pd.read_csv(folder / "imported" / "residuals_after.csv")
    rows = pd.read_csv(system / "rows.csv")["residual_row"].to_numpy()
    left = explained_s - lengths @ change
    theirs = after["residual_after_s"].to_numpy()[rows]
    assert np.corrcoef(left, theirs)[0, 1] > 0.9
    history = pd.read_csv(folder / "imported" / "history.csv")
    assert history["iteration"].tolist() == [0, 1]


def test_a_wrong_vector_is_told_in_one_line(folder: Path) -> None:
    vector = folder / "wrong.csv"
    vector.write_text("perturbation_percent\n1\n")
    done = CliRunner().invoke(main, ["import-model", str(folder), str(vector), "--quiet"])
    assert done.exit_code == 2
    assert "expected one value for each of" in done.output
    assert "Traceback" not in done.output


def test_the_results_of_the_run_stay_apart(folder: Path) -> None:
    vector = folder / "flat.npy"
    grid = SlownessModel.read_netcdf(folder / "model.nc").grid
    np.save(vector, np.zeros(grid.block_count))
    before = (folder / "model.nc").read_bytes()
    arguments = ["import-model", str(folder), str(vector), "--name", "flat", "--quiet"]
    assert CliRunner().invoke(main, arguments).exit_code == 0
    assert (folder / "model.nc").read_bytes() == before
    assert (folder / "flat" / "history.csv").exists()
    refused = CliRunner().invoke(main, [*arguments[:4], "../out", "--quiet"])
    assert refused.exit_code == 2
