"""Tables and figures of bodies, squeezing and leaks."""

from __future__ import annotations

import json
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pytest

from inversion_cases import plain_settings, small_case
from rayloom.appraisal import posterior_samples
from rayloom.appraisal.bodies import Body, BodyExtent, extent_of, find_bodies
from rayloom.appraisal.compressed import compress
from rayloom.appraisal.leaks import Leak, crust_source, leak_tests
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem, invert, linearise
from rayloom.outputs import perturbation_field, write_table
from rayloom.outputs.body_figures import MOST_BODIES, figure_bodies
from rayloom.outputs.body_tables import (
    MEASURES,
    body_table,
    leak_table,
    squeezing_table,
    write_bodies_json,
)
from rayloom.outputs.leak_figure import figure_leaks
from rayloom.outputs.squeezing_figure import figure_squeezing


@dataclass(frozen=True)
class Found:
    """A small problem with all that is found in it."""

    problem: LinearisedProblem
    bodies: tuple[Body, ...]
    extents: dict[str, BodyExtent]
    leaks: tuple[Leak, ...]


@pytest.fixture(scope="module")
def found() -> Found:
    case, settings = small_case(), plain_settings()
    problem = linearise(invert(case.data, case.model, settings, forward=case.forward), settings)
    bodies = find_bodies(
        problem,
        posterior_samples(problem, count=16, seed=3),
        threshold_percent=1.0,
        min_resolution=0.1,
        min_volume_km3=1.5e5,
        top_km=0.0,
    )
    compressed = compress(problem, size=80)
    extents = {
        body.name: extent_of(compressed, problem.model.grid, body, simulations=100)
        for body in bodies
    }
    source = crust_source(problem, centre=(160.0, 160.0), crust_km=45.0)
    return Found(problem, bodies, extents, leak_tests(problem, [source], crust_km=45.0))


def test_table_has_a_row_per_body_and_three_columns_per_measure(
    found: Found, tmp_path: Path
) -> None:
    """Read back with the csv reader of pandas."""
    import pandas as pd

    table = body_table(found.bodies, found.extents)
    write_table(tmp_path / "bodies.csv", table)
    read = pd.read_csv(tmp_path / "bodies.csv")
    assert read["body"].tolist() == [body.name for body in found.bodies]
    for measure in ("longitude_deg", "latitude_deg", *MEASURES):
        low, middle, high = (read[f"{measure}{end}"] for end in ("_low", "", "_high"))
        assert (low <= middle).all()
        assert (middle <= high).all()
    first = found.extents[found.bodies[0].name]
    assert read["base_p_value"][0] == pytest.approx(first.base_p_value)


def test_json_carries_sources_and_the_caveat(found: Found, tmp_path: Path) -> None:
    path = tmp_path / "bodies.json"
    write_bodies_json(path, found.bodies, found.extents)
    record = json.loads(path.read_text(encoding="utf-8"))
    assert len(record["bodies"]) == len(found.bodies)
    assert "not a hazard assessment" in record["temperature"]["caveat"]
    assert any("Cammarano" in source for source in record["temperature"]["sources"])
    assert "melt" in " ".join(record["temperature"]["alternatives"])


def test_json_has_null_where_nothing_is_known(found: Found, tmp_path: Path) -> None:
    """NaN is no JSON (RFC 8259, section 6)."""
    path = tmp_path / "bodies.json"
    write_bodies_json(path, found.bodies[:1], {})
    text = path.read_text(encoding="utf-8")
    assert "NaN" not in text
    assert json.loads(text)["bodies"][0]["demanded_base_km"] is None


def test_every_cut_of_every_squeezing_is_listed(found: Found) -> None:
    table = squeezing_table(found.extents)
    cuts = sum(
        extent.below.depth_km.size + extent.above.depth_km.size
        for extent in found.extents.values()
    )
    assert len(table) == cuts
    assert set(table["forbidden"]) == {"below", "above"}
    assert table["p_value"].between(0.0, 1.0, inclusive="right").all()


def test_leak_table_has_a_row_per_inversion(found: Found) -> None:
    table = leak_table(found.leaks, found.problem.model.grid)
    assert table["crust_free"].tolist() == [True, False]
    assert table["peak_over_contrast"].to_numpy() == pytest.approx(
        np.abs(table["peak_inside_percent"] / -3.0)
    )


def test_body_figure_has_a_map_and_two_sections_for_each_of_the_first_bodies(found: Found) -> None:
    grid = found.problem.model.grid
    figure = figure_bodies(
        grid, perturbation_field(found.problem.model), found.bodies, stations=[[160.0, 160.0, 0.0]]
    )
    assert len(found.bodies) > MOST_BODIES
    labels = [axes.get_label() for axes in figure.axes]
    for label in ("map", "along x", "along y"):
        assert labels.count(label) == MOST_BODIES
    figure.canvas.draw()


def test_outline_separates_core_from_the_rest(found: Found) -> None:
    """A core of one block is drawn as the four sides of that block."""
    grid = found.problem.model.grid
    core = np.zeros(grid.shape, dtype=bool)
    core[2, 3, 1] = True
    body = replace(found.bodies[0], core=core)
    figure = figure_bodies(grid, perturbation_field(found.problem.model), [body])
    (plan,) = figure.axes[0].collections[-1:]
    ends = {tuple(map(tuple, segment)) for segment in plan.get_segments()}
    x, y = grid.x_edges[[2, 3]], grid.y_edges[[3, 4]]
    assert ends == {
        ((x[0], y[0]), (x[0], y[1])),
        ((x[1], y[0]), (x[1], y[1])),
        ((x[0], y[0]), (x[1], y[0])),
        ((x[0], y[1]), (x[1], y[1])),
    }


def test_squeezing_figure_shows_the_p_values(found: Found) -> None:
    figure = figure_squeezing(found.extents)
    for axes, (name, extent) in zip(figure.axes, found.extents.items(), strict=False):
        assert axes.get_label() == name
        np.testing.assert_array_equal(axes.lines[0].get_xdata(), extent.below.p_value)
        np.testing.assert_array_equal(axes.lines[1].get_ydata(), extent.above.depth_km)
    figure.canvas.draw()


def test_leak_figure_shows_the_strongest_block_along_y(found: Found) -> None:
    figure = figure_leaks(found.problem.model.grid, found.leaks, crust_km=45.0)
    drawn = np.asarray(figure.axes[0].collections[0].get_array())
    values = found.leaks[0].inside_percent
    np.testing.assert_allclose(np.abs(drawn.reshape(6, 8).T), np.abs(values).max(axis=1))
    figure.canvas.draw()


def test_nothing_to_draw_is_said(found: Found) -> None:
    grid = found.problem.model.grid
    with pytest.raises(InputError, match="no body to draw"):
        figure_bodies(grid, perturbation_field(found.problem.model), [])
    with pytest.raises(InputError, match="no body was squeezed"):
        figure_squeezing({})
    with pytest.raises(InputError, match="no leak test"):
        figure_leaks(grid, [])
