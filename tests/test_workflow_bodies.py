"""The command ``bodies`` on a small run folder, from the tables to the report."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from rayloom.cli import main
from rayloom.model import SlownessModel
from run_folder_cases import write_run_folder, write_small_survey

FAST = """
[appraisal]
probes = 4
samples = 12
bootstrap = 0
patterns = []

[bodies]
threshold_percent = 0.1
min_resolution = 0.02
min_volume_km3 = 1000.0
squeezing_size = 50
simulations = 100
most_cuts = 3
"""


def command(*words: str) -> str:
    found = CliRunner().invoke(main, [*words, "--quiet"])
    assert found.exit_code == 0, found.output
    return found.output


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    root = tmp_path_factory.mktemp("bodies")
    folder = write_run_folder(root / "run", write_small_survey(root / "tables"))
    settings = folder / "rayloom.toml"
    text = settings.read_text(encoding="utf-8") + FAST
    text = text.replace("max_iterations = 2", "max_iterations = 1\nstation_terms = false")
    settings.write_text(text, encoding="utf-8")
    command("run", str(folder))
    return folder


def test_bodies_need_the_samples_of_an_appraisal(folder: Path) -> None:
    found = CliRunner().invoke(main, ["bodies", str(folder), "--quiet"])
    assert found.exit_code == 2
    assert "rayloom appraise" in found.output


def test_everything_is_written_and_told(folder: Path) -> None:
    command("appraise", str(folder))
    said = command("bodies", str(folder))
    assert "slow 1" in said or "fast 1" in said
    assert "not a hazard assessment" in said
    for name in ("bodies.csv", "bodies.json", "squeezing.csv", "leaks.csv"):
        assert (folder / name).stat().st_size > 0
    for name in ("bodies", "squeezing", "demanded_outside", "leaks"):
        assert (folder / "figures" / f"{name}.png").read_bytes().startswith(b"\x89PNG")
    stored = SlownessModel.read_netcdf(folder / "squeezed.nc").fields
    assert stored["body_number"].max() >= 1
    assert np.all(stored["bodies_only_percent"][stored["body_number"] > 0] != 0.0)
    report = (folder / "report.html").read_text(encoding="utf-8")
    assert "Where the anomalies are" in report
    assert "up to date" in command("bodies", str(folder))
