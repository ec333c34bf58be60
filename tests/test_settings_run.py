"""The settings of a run: assembled from the rooms, one file, each choice in one place."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from rayloom.errors import FileProblemsError
from rayloom.settings import RunSettings, read_run_settings, run_settings_text
from rayloom.settings.documentation import key_descriptions
from run_folder_cases import COARSE_GRID

INPUTS = '[inputs]\nstations = "s.csv"\nevents = "e.csv"\npicks = "p.csv"\n\n'


def read(tmp_path: Path, text: str) -> RunSettings:
    path = tmp_path / "rayloom.toml"
    path.write_text(text, encoding="utf-8")
    return read_run_settings(path)


def test_inputs_and_grid_suffice(tmp_path: Path) -> None:
    settings = read(tmp_path, INPUTS + COARSE_GRID)
    assert settings.earth.model == "ak135"
    assert settings.inputs.residuals is None


def test_every_section_has_its_place_and_every_key_its_description(tmp_path: Path) -> None:
    settings = read(tmp_path, INPUTS + COARSE_GRID)
    for name in type(settings).model_fields:
        section = type(getattr(settings, name))
        described = key_descriptions(section)
        assert set(described) == set(section.model_fields), name


def test_the_written_file_reads_back_the_same(tmp_path: Path) -> None:
    settings = read(
        tmp_path,
        INPUTS
        + COARSE_GRID
        + '[forward]\nmethod = "straight"\nthreads = 2\n\n'
        + "[survey]\nquality_uncertainty_s = { A = 0.05, B = 0.2 }\n\n"
        + '[[outputs.sections]]\nname = "C"\nstart = [10.0, -31.0]\nend = [14.0, -31.0]\n',
    )
    text = run_settings_text(settings, heading="A run")
    assert read(tmp_path, text) == settings
    assert max(len(line) for line in text.splitlines()) <= 99


def test_tracing_is_chosen_in_forward_and_reaches_the_inversion(tmp_path: Path) -> None:
    settings = read(tmp_path, INPUTS + COARSE_GRID + '[forward]\nmethod = "reference"\n')
    assert settings.inversion_settings().method == "reference"
    written = tomllib.loads(run_settings_text(settings, heading=""))
    assert "method" in written["forward"]
    assert "method" not in written["inversion"]
    with pytest.raises(FileProblemsError, match=r"inversion: method belongs to \[forward\]"):
        read(tmp_path, INPUTS + COARSE_GRID + '[inversion]\nmethod = "straight"\n')


@pytest.mark.parametrize("extra", ["", 'residuals = "r.csv"\npicks = "p.csv"\n'])
def test_picks_or_residuals_one_of_them(tmp_path: Path, extra: str) -> None:
    text = '[inputs]\nstations = "s.csv"\nevents = "e.csv"\n' + extra
    wanted = "inputs: give either picks or residuals or delays"
    with pytest.raises(FileProblemsError, match=wanted):
        read(tmp_path, text + COARSE_GRID)


def test_edges_that_are_no_numbers_are_named(tmp_path: Path) -> None:
    text = COARSE_GRID.replace("[-3.0, 20.0", '[-3.0, "twenty"')
    with pytest.raises(FileProblemsError) as caught:
        read(tmp_path, INPUTS + text)
    assert any("grid.depth_edges_km[2]" in problem for problem in caught.value.problems)


def test_edges_that_fall_are_told_with_the_file(tmp_path: Path) -> None:
    text = COARSE_GRID.replace("[-3.0, 20.0", "[500.0, 20.0")
    with pytest.raises(FileProblemsError, match="grid: depth_edges_km: edges must rise"):
        read(tmp_path, INPUTS + text)
