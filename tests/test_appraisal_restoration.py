"""Patterns put in, and how their restoration is judged."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from pydantic import ValidationError

from appraisal_cases import problem_of_matrix, small_problem
from rayloom.appraisal import (
    AppraisalSettings,
    ColumnSettings,
    PatternSettings,
    SlabSettings,
    pattern_percent,
    restore,
)
from rayloom.appraisal.restoration import block_means, default_regions_km, halved, judge
from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, SlownessModel

GRID = BlockGrid(
    Frame.flat(), np.linspace(0, 400, 41), np.linspace(0, 400, 41), np.linspace(0, 200, 21)
)
SPHERE = BlockGrid(
    Frame(longitude=10.0, latitude=60.0, azimuth_deg=25.0),
    np.linspace(-3, 3, 121),
    np.linspace(-3, 3, 121),
    np.linspace(0, 300, 31),
)


def points(*places: tuple[float, float, float]) -> np.ndarray:
    return np.array(places, dtype=np.float64)


def test_a_checkerboard_changes_sign_from_cell_to_cell() -> None:
    pattern = PatternSettings(
        name="c", kind="checkerboard", size_km=(40.0, 50.0), amplitude_percent=2.0
    )
    here = pattern_percent(pattern, GRID, points((210, 210, 10)))[0]
    assert abs(here) == 2.0
    for step in ((40, 0, 0), (0, 40, 0), (0, 0, 50)):
        there = pattern_percent(pattern, GRID, points((210, 210, 10)) + step)[0]
        assert there == -here
    diagonal = pattern_percent(pattern, GRID, points((250, 250, 10)))[0]
    assert diagonal == here


def test_gaps_between_cells_are_empty() -> None:
    """Cells of 20 km with gaps of 20 km fill an eighth of the space."""
    pattern = PatternSettings(
        name="s", kind="spikes", size_km=(20.0, 20.0), gap_km=(20.0, 20.0), amplitude_percent=5.0
    )
    values = pattern_percent(pattern, GRID, GRID.centres)
    assert set(np.unique(values)) == {-5.0, 0.0, 5.0}
    assert np.mean(values != 0.0) == pytest.approx(1.0 / 8.0)


def test_a_column_has_the_volume_of_a_cylinder() -> None:
    """π r² h, to the volume of the blocks at its rim; on the sphere at mid-depth radius."""
    column = ColumnSettings(
        centre=(10.5, 60.2), radius_km=60.0, depth_km=(100.0, 200.0), amplitude_percent=-4.0
    )
    pattern = PatternSettings(name="b", kind="bodies", columns=(column,))
    values = pattern_percent(pattern, SPHERE, SPHERE.centres)
    volume = SPHERE.volumes_km3.ravel()[values == -4.0].sum()
    assert volume == pytest.approx(np.pi * 60.0**2 * 100.0, rel=0.02)
    longitude, latitude = SPHERE.frame.geographic_coordinates(*SPHERE.centres[:, :2].T)
    inside = values != 0.0
    assert np.mean(longitude[inside]) == pytest.approx(10.5, abs=0.03)
    assert np.mean(latitude[inside]) == pytest.approx(60.2, abs=0.02)


def test_a_slab_dips_to_the_right_of_its_strike() -> None:
    """Strike north, dip 45°: one kilometre further east for each kilometre down."""
    slab = SlabSettings(
        centre=(100.0, 200.0),
        strike_deg=0.0,
        dip_deg=45.0,
        length_km=200.0,
        thickness_km=20.0,
        depth_km=(0.0, 150.0),
        amplitude_percent=3.0,
    )
    pattern = PatternSettings(name="b", kind="bodies", slabs=(slab,))
    on = points((100, 200, 0.1), (150, 200, 50), (240, 290, 140))
    off = points((60, 200, 50), (150, 320, 50), (255, 200, 155), (150 + 16, 200, 50))
    np.testing.assert_array_equal(pattern_percent(pattern, GRID, on), 3.0)
    np.testing.assert_array_equal(pattern_percent(pattern, GRID, off), 0.0)
    np.testing.assert_array_equal(pattern_percent(pattern, GRID, points((150 + 13, 200, 50))), 3.0)


def test_a_slab_keeps_its_geographic_strike_in_a_turned_frame() -> None:
    """Along an azimuth of 70° from the centre, in a frame turned by 25°."""
    slab = SlabSettings(
        centre=(10.0, 60.0),
        strike_deg=70.0,
        dip_deg=90.0,
        length_km=300.0,
        thickness_km=30.0,
        depth_km=(0.0, 100.0),
        amplitude_percent=3.0,
    )
    pattern = PatternSettings(name="b", kind="bodies", slabs=(slab,))
    north, east = np.cos(np.radians(70.0)), np.sin(np.radians(70.0))
    latitude = 60.0 + 100.0 * north / 111.4
    longitude = 10.0 + 100.0 * east / (111.4 * np.cos(np.radians(60.15)))
    x, y = SPHERE.frame.local_coordinates(longitude, latitude)
    along = points((float(x), float(y), 50.0))
    x, y = SPHERE.frame.local_coordinates(longitude, 60.0 - 100.0 * north / 111.4)
    mirrored = points((float(x), float(y), 50.0))
    assert pattern_percent(pattern, SPHERE, along)[0] == 3.0
    assert pattern_percent(pattern, SPHERE, mirrored)[0] == 0.0


def test_a_model_as_pattern_is_read_at_its_place() -> None:
    frame = Frame(longitude=10.0, latitude=60.0)
    other = BlockGrid(frame, [-1.0, 0.0, 1.0], [-1.0, 0.0, 1.0], [0.0, 100.0, 200.0])
    model = SlownessModel(other, np.full(other.shape, 0.125))
    slower = model.slowness_s_per_km * np.where(other.centres[:, 0] > 0, 1.04, 1.0).reshape(
        other.shape
    )
    model = model.with_slowness(slower)
    pattern = PatternSettings(name="m", kind="model", file=Path("m.nc"))
    x, y = SPHERE.frame.local_coordinates([10.5, 9.5, 14.0], [60.1, 60.1, 60.1])
    values = pattern_percent(
        pattern, SPHERE, np.column_stack([x, y, [50.0, 50.0, 50.0]]), model=model
    )
    np.testing.assert_allclose(values, [100.0 * (1 / 1.04 - 1), 0.0, 0.0], atol=1e-9)
    with pytest.raises(InputError, match="needs its model"):
        pattern_percent(pattern, SPHERE, points((0, 0, 10)))


def test_halved_blocks_fill_the_same_box() -> None:
    grid = BlockGrid(SPHERE.frame, SPHERE.x_edges[::8], SPHERE.y_edges[::6], [0.0, 35.0, 80.0])
    fine = halved(grid)
    assert fine.shape == tuple(2 * size for size in grid.shape)
    assert fine.volumes_km3.sum() == pytest.approx(grid.volumes_km3.sum(), rel=1e-12)
    everywhere = PatternSettings(
        name="c", kind="checkerboard", size_km=(1e5, 1e5), amplitude_percent=2.0
    )
    np.testing.assert_allclose(np.abs(block_means(everywhere, grid, None)), 2.0)


def test_judgement_of_a_damped_copy_and_of_noise() -> None:
    """A third of the truth: share 1/3, similarity 1; an unrelated pattern: near 0."""
    random = np.random.default_rng(5)
    truth = random.standard_normal(GRID.shape)
    covered = np.ones(GRID.shape, dtype=bool)
    regions = default_regions_km(GRID)
    for judged in judge(GRID, truth, truth / 3.0, regions_km=regions, covered=covered):
        assert judged.restored_share == pytest.approx(1.0 / 3.0)
        assert judged.similarity == pytest.approx(1.0)
    noise = random.standard_normal(GRID.shape)
    last = judge(GRID, truth, noise, regions_km=regions, covered=covered)[-1]
    assert last.blocks == GRID.block_count
    assert abs(last.similarity) < 5.0 / np.sqrt(GRID.block_count)


def test_regions_without_structure_or_blocks_say_so() -> None:
    empty = np.zeros(GRID.shape)
    covered = np.zeros(GRID.shape, dtype=bool)
    nothing = judge(GRID, empty, empty, regions_km=[(0.0, 50.0)], covered=covered)
    assert nothing[0].blocks == 0
    flat = judge(GRID, empty, empty, regions_km=[(0.0, 50.0)], covered=~covered)
    assert np.isnan(flat[0].restored_share)
    assert np.isnan(flat[0].similarity)


def test_perfect_data_restore_everything_and_no_data_nothing() -> None:
    """One ray in each block and a wide prior, or rays in one block alone."""
    shape = (6, 6, 4)
    count = int(np.prod(shape))
    pattern = PatternSettings(
        name="c", kind="checkerboard", size_km=(1.0, 1.0), amplitude_percent=3.0
    )
    perfect = problem_of_matrix(1e4 * np.eye(count), shape, prior_std=1.0)
    covered = np.ones(shape, dtype=bool)
    regions = default_regions_km(perfect.model.grid)
    whole = restore(pattern, perfect, regions_km=regions, covered=covered, seed=3).judgements[-1]
    assert whole.restored_share == pytest.approx(1.0, abs=2e-3)
    assert whole.similarity == pytest.approx(1.0, abs=1e-4)
    blind = problem_of_matrix(1e4 * np.eye(count)[:1], shape, prior_std=1.0)
    rest = covered.copy()
    rest[0, 0, 0] = False
    nothing = restore(pattern, blind, regions_km=regions, covered=rest, seed=3)
    np.testing.assert_array_equal(nothing.restored_percent[rest], 0.0)


def test_noise_lowers_the_similarity_and_a_seed_fixes_it() -> None:
    problem = small_problem()
    covered = np.ones(problem.model.grid.shape, dtype=bool)
    pattern = PatternSettings(name="c", kind="checkerboard", size_km=(80.0, 80.0))
    regions = default_regions_km(problem.model.grid)

    def similarity(noise: str, seed: int) -> float:
        found = restore(
            pattern,
            problem,
            regions_km=regions,
            covered=covered,
            noise=noise,  # type: ignore[arg-type]
            seed=seed,
        )
        return found.judgements[-1].similarity

    clean = similarity("none", 1)
    assert 0.2 < clean < 1.0
    assert np.mean([similarity("uncertainties", seed) for seed in range(5)]) < clean
    assert similarity("uncertainties", 2) == similarity("uncertainties", 2)


@pytest.mark.parametrize(
    ("given", "said"),
    [
        ({"patterns": [{"name": "a", "kind": "bodies"}]}, "needs columns or slabs"),
        ({"patterns": [{"name": "a", "kind": "model"}]}, "needs it"),
        ({"patterns": [{"name": "a", "kind": "spikes"}] * 2}, "names must differ"),
        ({"regions_km": [[100.0, 50.0]]}, "does not go downwards"),
    ],
)
def test_settings_that_contradict_themselves_are_refused(
    given: dict[str, object], said: str
) -> None:
    with pytest.raises(ValidationError, match=said):
        AppraisalSettings.model_validate(given)
