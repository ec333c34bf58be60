"""The step ``appraise`` in a run folder."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from click.testing import CliRunner

from rayloom.cli.main import main
from rayloom.errors import InputError
from rayloom.model import SlownessModel
from rayloom.workflow import Reporter, run, run_step
from rayloom.workflow.sample_file import load_samples
from run_folder_cases import write_run_folder, write_small_survey

SETTINGS = """
[appraisal]
probes = 8
samples = 20
bootstrap = 4
jackknife = true
min_hits = 2
points = [[12.0, -31.0, 100.0]]

[[appraisal.patterns]]
name = "board"
kind = "checkerboard"
size_km = [150.0, 90.0]

[[appraisal.patterns]]
name = "one column"
kind = "bodies"
columns = [{ centre = [12.0, -31.0], radius_km = 80.0, depth_km = [35.0, 210.0], \
amplitude_percent = -4.0 }]
"""


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("appraised") / "run"
    write_run_folder(folder, write_small_survey(folder.parent / "survey"))
    settings = folder / "rayloom.toml"
    settings.write_text(settings.read_text(encoding="utf-8") + SETTINGS, encoding="utf-8")
    run(folder)
    return folder


@pytest.fixture(scope="module")
def appraised(finished: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = shutil.copytree(finished, tmp_path_factory.mktemp("a") / "run")
    done = CliRunner().invoke(main, ["appraise", str(folder)])
    assert done.exit_code == 0, done.output
    assert "standard error of dVp" in done.output
    return folder


def test_a_run_of_everything_leaves_it_out(finished: Path) -> None:
    assert not (finished / "appraisal.nc").exists()
    assert "appraise" not in json.loads((finished / "provenance.json").read_text())["steps"]


def test_fields_are_within_what_they_can_be(appraised: Path) -> None:
    """Shares lie between 0 and 1, errors under the prior's standard deviation."""
    model = SlownessModel.read_netcdf(appraised / "appraisal.nc")
    samples = load_samples(appraised / "posterior_samples.npz")
    share = model.fields["data_share"]
    assert share.min() >= 0.0
    assert 0.1 < share.max() <= 1.0
    bound = 100.0 * samples.prior_std.reshape(model.grid.shape)
    slope = (1.0 + samples.mean_fractional.reshape(model.grid.shape)) ** -2
    assert np.all(model.fields["sigma_dvp"] <= bound * slope * (1.0 + 1e-9))
    assert samples.count == 20
    np.testing.assert_allclose(model.fields["sigma_dvp"], samples.sigma_percent(), rtol=1e-9)
    for name in ("resolution", "directional_coverage", "fresnel_width_km", "smearing_x_km"):
        assert np.isfinite(model.fields[name]).any()
    assert {"bootstrap_error_percent", "jackknife_error_percent"} <= set(model.fields)
    assert set(np.sign(model.fields["put_in_one_column_percent"]).ravel()) == {-1.0, 0.0}


def test_tables_name_every_pattern_and_point(appraised: Path) -> None:
    restored = pd.read_csv(appraised / "restoration.csv")
    assert list(restored["pattern"].unique()) == ["board", "one column"]
    spread = pd.read_csv(appraised / "point_spread.csv")
    assert len(spread) == 1
    assert abs(spread["longitude"][0] - 12.0) < 0.6


def test_the_report_shows_it_and_export_is_up_to_date(appraised: Path) -> None:
    text = (appraised / "report.html").read_text(encoding="utf-8")
    assert "What the model is worth" in text
    assert "one column" in text
    assert text.count("<img") >= 4 + 7
    assert run(appraised) == []


def test_a_stopped_appraisal_goes_on_with_the_same_result(
    finished: Path, appraised: Path, tmp_path: Path
) -> None:
    class Stops(Reporter):
        def progress(self, label: str, done: int, total: int) -> None:
            if label == "resolution probes" and done:
                raise KeyboardInterrupt

    class Hears(Reporter):
        first: tuple[int, int] | None = None

        def progress(self, label: str, done: int, total: int) -> None:
            if label == "posterior samples" and self.first is None:
                self.first = (done, total)

    folder = shutil.copytree(finished, tmp_path / "run")
    with pytest.raises(KeyboardInterrupt):
        run_step(folder, "appraise", reporter=Stops())
    hears = Hears()
    run_step(folder, "appraise", reporter=hears)
    assert hears.first == (20, 20)
    before, after = (
        load_samples(place / "posterior_samples.npz") for place in (appraised, folder)
    )
    np.testing.assert_array_equal(before.fractional, after.fractional)
    assert not list((folder / "checkpoints").glob("appraise_*"))


def test_times_from_finer_blocks_restore_the_sign(finished: Path, tmp_path: Path) -> None:
    """A slow column traced in blocks half as wide comes back slow."""
    folder = shutil.copytree(finished, tmp_path / "run")
    settings = folder / "rayloom.toml"
    text = settings.read_text(encoding="utf-8")
    text = text.replace("jackknife = true", 'restoration_times = "finer_blocks"')
    first = text.index("[[appraisal.patterns]]")
    second = text.index("[[appraisal.patterns]]", first + 5)
    settings.write_text(text[:first] + text[second:], encoding="utf-8")
    run_step(folder, "appraise")
    last = pd.read_csv(folder / "restoration.csv").iloc[-1]
    assert last["similarity"] > 0.3
    assert 0.02 < last["restored_share"] < 1.2


def test_a_point_outside_is_named(finished: Path, tmp_path: Path) -> None:
    folder = shutil.copytree(finished, tmp_path / "run")
    settings = folder / "rayloom.toml"
    text = settings.read_text(encoding="utf-8").replace("[[12.0, -31.0, 100.0]]", "[[40, 0, 9]]")
    settings.write_text(text, encoding="utf-8")
    with pytest.raises(InputError, match=r"appraisal\.points.*outside the blocks"):
        run_step(folder, "appraise")
