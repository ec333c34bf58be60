"""The steps tradeoff and compare in a run folder, and the word of the former applied."""

from __future__ import annotations

import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from rayloom.errors import InputError
from rayloom.model import SlownessModel
from rayloom.settings import change_run_settings, read_run_settings
from rayloom.workflow import RunFolder, run, run_step
from rayloom.workflow.compare import tell_comparison
from rayloom.workflow.tradeoff import apply_recommendation, tell_tradeoff
from run_folder_cases import write_run_folder, write_small_survey

TRIED = "[tradeoff]\nprior_std_percent = [0.5, 1.0, 2.0]\ncorrelation_km = [[60.0, 60.0]]\n"


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Path:
    files = write_small_survey(tmp_path_factory.mktemp("survey"))
    folder = write_run_folder(tmp_path_factory.mktemp("finished") / "run", files)
    settings = folder / "rayloom.toml"
    text = settings.read_text(encoding="utf-8").replace(
        "[inversion]\n", "[inversion]\n# chosen by eye\nprior_std_percent = 3.0\n"
    )
    settings.write_text(f"{text}\n{TRIED}", encoding="utf-8")
    run(folder)
    return folder


@pytest.fixture
def folder(finished: Path, tmp_path: Path) -> Path:
    return shutil.copytree(finished, tmp_path / "run")


def test_a_run_leaves_the_steps_on_request_out(finished: Path) -> None:
    assert not (finished / "tradeoff.csv").exists()
    assert not (finished / "ray_comparison.csv").exists()
    assert tell_tradeoff(RunFolder(finished)) == []


def test_the_recommendation_reaches_the_settings_and_the_next_run(folder: Path) -> None:
    with pytest.raises(InputError, match="holds no trade-off to apply"):
        apply_recommendation(RunFolder(folder))
    assert run_step(folder, "tradeoff")
    assert not run_step(folder, "tradeoff")
    table = pd.read_csv(folder / "tradeoff.csv")
    best = table[table["recommended"]].iloc[0]
    said = tell_tradeoff(RunFolder(folder))
    assert said[0].startswith(f"recommended: {best['prior_std_percent']:g} %")
    for name in ("tradeoff.png", "tradeoff_sign.png"):
        assert (folder / "figures" / name).stat().st_size > 0
    fields = SlownessModel.read_netcdf(folder / "tradeoff.nc").fields
    assert set(np.unique(fields["sign_kept"])) <= {-1.0, 0.0, 1.0}
    told = apply_recommendation(RunFolder(folder))
    assert f"prior_std_percent = {best['prior_std_percent']:g}" in told
    text = (folder / "rayloom.toml").read_text(encoding="utf-8")
    assert "# chosen by eye" in text
    assert (
        read_run_settings(folder / "rayloom.toml").inversion.prior_std_percent
        == (best["prior_std_percent"])
    )
    assert apply_recommendation(RunFolder(folder)) == "rayloom.toml has this prior already"
    assert "invert" in run(folder)


def test_all_kinds_of_rays_fit_alike(folder: Path) -> None:
    """χ² per row within 2 % of the inversion's for every kind of rays."""
    assert run_step(folder, "compare")
    table = pd.read_csv(folder / "ray_comparison.csv").set_index("rays")
    assert list(table.index) == ["straight", "reference", "bent"]
    per_row = table["chi2"] / table["data_count"]
    np.testing.assert_allclose(per_row, per_row["bent"], rtol=0.02)
    assert table["equal_chi2"].all()
    for method in table.index:
        model = SlownessModel.read_netcdf(folder / f"model_{method}_rays.nc")
        assert np.abs(model.perturbation_percent).max() > 0.0
    assert (folder / "figures" / "ray_comparison.png").exists()
    assert len(tell_comparison(RunFolder(folder))) == 3
    run_step(folder, "export")
    report = (folder / "report.html").read_text(encoding="utf-8")
    assert "Straight, reference and bent rays" in report


def test_changing_a_key_keeps_everything_else(folder: Path) -> None:
    path = folder / "rayloom.toml"
    before = path.read_text(encoding="utf-8")
    change_run_settings(path, "inversion", {"prior_std_percent": 1.5})
    after = path.read_text(encoding="utf-8")
    assert after == before.replace("prior_std_percent = 3.0", "prior_std_percent = 1.5")
    change_run_settings(path, "forward", {"quality": "thorough"})
    assert read_run_settings(path).forward.quality == "thorough"
