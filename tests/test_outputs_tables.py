import csv
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy.sparse import load_npz, random_array

from rayloom.forward import Rays
from rayloom.inversion.result import Counts, InversionResult
from rayloom.inversion.state import Iteration
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.outputs import (
    OutputSettings,
    residual_table,
    write_exclusions_csv,
    write_figures,
    write_linear_system,
    write_model_files,
    write_report,
    write_tables,
)
from rayloom.outputs.report import CAUTION, render_report
from rayloom.residuals import Exclusions, Residuals
from rayloom.survey import Events, Stations

EVENT = np.array([0, 0, 0, 0, 1, 1, 1, 1, 1])
STATION = np.array([0, 1, 2, 3, 0, 1, 2, 3, 3])
BEFORE_S = np.array([0.5, 0.0, -0.25, 0.125, 0.25, 0.0, -0.5, 4.0, 0.0])
USED = np.array([True] * 8 + [False])


class StandInEarth:
    """The part of a reference Earth that outputs read."""

    name = "ak135"
    discontinuities_km = np.array([20.0, 35.0, 410.0])


def iteration(number, rms_s):
    values = {
        name: 0 if kind == "int" else 0.25 for name, kind in Iteration.__annotations__.items()
    }
    values |= {
        "iteration": number,
        "rms_s": rms_s,
        "rms_kept_s": 0.5 * rms_s,
        "chi2": 200.0 if number else np.nan,
        "chi2_expected": 100.0 if number else np.nan,
        "variance_reduction_percent": 62.5 * number,
        "solver_converged": True,
    }
    return Iteration(**values)


def straight_rays(grid, count):
    ends = np.array([[0.5, 0.5, 130.0], [0.1, 0.2, -1.0]])
    return Rays(
        grid=grid,
        time_s=np.full(count, 600.0),
        outside_time_s=np.full(count, 580.0),
        path_lengths=random_array(
            (count, grid.block_count), density=0.1, rng=np.random.default_rng(2)
        ).tocsr(),
        traced=np.ones(count, dtype=bool),
        point_offsets=2 * np.arange(count + 1),
        all_points=np.tile(ends, (count, 1)),
    )


def make_data():
    stations = Stations(
        network=np.array(["VH"] * 4),
        station=np.array(["AAA", "BBB", "CCC", "DDD"]),
        latitude_deg=np.array([-31.0, -30.5, -31.4, -30.8]),
        longitude_deg=np.array([12.0, 12.4, 11.7, 11.4]),
        elevation_m=np.array([900.0, 100.0, 1500.0, 2100.0]),
    )
    events = Events(
        event=np.array(["ev<1>", "ev2"]),
        time=np.array(["2020-01-01", "2020-02-01"], dtype="datetime64[ns]"),
        latitude_deg=np.array([20.0, -10.0]),
        longitude_deg=np.array([60.0, -50.0]),
        depth_km=np.array([33.0, 120.0]),
    )
    count = len(EVENT)
    return Residuals(
        stations=stations,
        events=events,
        earth=StandInEarth(),
        event_index=EVENT,
        station_index=STATION,
        phase=np.array(["P"] * count),
        wave=np.array(["P"] * count),
        residual_s=BEFORE_S,
        uncertainty_s=np.full(count, 0.1),
        distance_deg=np.full(count, 60.0),
        azimuth_deg=np.full(count, 10.0),
        back_azimuth_deg=np.full(count, 200.0),
        predicted_s=np.full(count, 608.3172345),
        ellipticity_s=np.full(count, -0.1),
        elevation_s=np.full(count, 0.2),
        excluded=Exclusions(
            *(np.array(side) for side in (["ev2"], ["VH"], ["BBB"], ["Pn"])),
            np.array(["unknown_phase"]),
            np.array(["Pn is not a phase of distant events"]),
        ),
    )


@pytest.fixture
def result():
    grid = BlockGrid(
        Frame(longitude=12.0, latitude=-31.0),
        np.linspace(-2.0, 2.0, 9),
        np.linspace(-2.0, 2.0, 9),
        [-4.0, 20.0, 35.0, 80.0, 140.0],
    )
    reference = np.full(grid.shape, 0.125)
    slowness = reference.copy()
    slowness[3, 4, 2] *= 1.04
    model = SlownessModel(grid, slowness, reference).with_fields(
        hits=np.full(grid.shape, 3.0), ray_length_km=np.full(grid.shape, 80.0)
    )
    after = np.where(USED, 0.5 * BEFORE_S, np.nan)
    return InversionResult(
        data=make_data(),
        model=model,
        history=(iteration(0, 0.4), iteration(1, 0.1)),
        station_terms_s={"P": np.array([0.1, -0.1, np.nan, 0.0])},
        mislocation_km=np.array([[1.0, 2.0, 3.0], [np.nan] * 3]),
        predicted_s=np.where(USED, 0.5 * BEFORE_S, np.nan),
        residual_after_s=after,
        weights=np.where(USED, 1.0, 0.0),
        standardised=after / 0.1,
        suspected_outlier=BEFORE_S > 3.0,
        used=USED,
        left_out_because=np.where(USED, "", "no ray reaches the station"),
        rays=straight_rays(grid, int(USED.sum())),
        ray_rows=np.flatnonzero(USED),
        stopped_because="converged: nothing <moves> any more",
        counts=Counts(data=8, groups=2, untraced=1, left_out_groups=()),
        state=None,
    )


def rows_of(path):
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def test_residuals_before_and_after_stand_side_by_side(result, tmp_path):
    write_tables(tmp_path, result)
    rows = rows_of(tmp_path / "residuals_after.csv")
    assert list(rows[0])[:5] == ["event", "network", "station", "phase", "wave"]
    assert [float(row["residual_s"]) for row in rows] == BEFORE_S.tolist()
    assert [float(row["residual_after_s"]) for row in rows[:8]] == (0.5 * BEFORE_S[:8]).tolist()
    assert [row["suspected_outlier"] for row in rows].count("true") == 1
    assert rows[7]["suspected_outlier"] == "true"
    assert rows[8]["residual_after_s"] == ""
    assert rows[8]["weight"] == "0"
    assert rows[8]["left_out_because"] == "no ray reaches the station"
    assert float(rows[0]["predicted_s"]) == pytest.approx(608.3172345, abs=1e-6)


def test_suspects_are_listed_with_flags_spelt_as_in_every_table(result, tmp_path):
    write_tables(tmp_path, result)
    (suspect,) = rows_of(tmp_path / "suspected_outliers.csv")
    (same,) = [
        row
        for row in rows_of(tmp_path / "residuals_after.csv")
        if row["suspected_outlier"] == "true"
    ]
    assert suspect == {name: same[name] for name in suspect}
    assert {row["solver_converged"] for row in rows_of(tmp_path / "history.csv")} == {"true"}


def test_residuals_before_an_inversion(result):
    table = residual_table(result.data)
    assert "residual_after_s" not in table
    assert len(table) == len(BEFORE_S)


def test_exclusions_name_their_reason(result, tmp_path):
    write_exclusions_csv(tmp_path / "before.csv", result.data)
    assert [row["reason"] for row in rows_of(tmp_path / "before.csv")] == ["unknown_phase"]
    write_exclusions_csv(tmp_path / "after.csv", result.data, result)
    first, second = rows_of(tmp_path / "after.csv")
    assert first["detail"] == "Pn is not a phase of distant events"
    assert second == {
        "event": "ev2",
        "network": "VH",
        "station": "DDD",
        "phase": "P",
        "reason": "left_out_of_inversion",
        "detail": "no ray reaches the station",
    }


def test_terms_shifts_and_history(result, tmp_path):
    written = write_tables(tmp_path, result)
    assert all(path.is_file() for path in written)
    terms = rows_of(tmp_path / "station_terms.csv")
    assert [(row["station"], float(row["term_s"])) for row in terms] == [
        ("AAA", 0.1),
        ("BBB", -0.1),
        ("DDD", 0.0),
    ]
    (shift,) = rows_of(tmp_path / "mislocations.csv")
    assert shift == {"event": "ev<1>", "east_km": "1", "north_km": "2", "down_km": "3"}
    history = pd.read_csv(tmp_path / "history.csv")
    assert history["rms_s"].tolist() == [0.4, 0.1]
    assert np.isnan(history["chi2"][0])


def test_model_files_of_a_run(result, tmp_path):
    written = write_model_files(tmp_path / "run", result)
    assert sorted(path.name for path in (tmp_path / "run").iterdir()) == sorted(
        path.name for path in written
    )
    back = SlownessModel.read_netcdf(tmp_path / "run" / "model.nc")
    np.testing.assert_array_equal(back.slowness_s_per_km, result.model.slowness_s_per_km)
    head = (tmp_path / "run" / "rays.vtp").read_bytes().split(b"<AppendedData")[0].decode()
    assert 'NumberOfLines="8"' in head
    for name in ("residual_row", "residual_before_s", "residual_after_s", "weight"):
        assert f'Name="{name}"' in head


def test_figures_of_a_run(result, tmp_path):
    settings = OutputSettings(dpi=50, slice_depths_km=(10.0, 50.0), figure_formats=("svg", "png"))
    figures = write_figures(tmp_path, result, settings)
    names = sorted(path.name for path in tmp_path.iterdir())
    stems = ["depth_slices", "misfit", "section_1", "section_2", "station_residuals"]
    assert names == sorted(f"{stem}.{end}" for stem in stems for end in ("png", "svg"))
    assert "A–A′" in figures[1].caption
    assert "discontinuities of ak135" in figures[1].caption


def test_report_tells_the_numbers_and_the_caution(result):
    text = render_report(result, settings_text="[grid]\nspacing_km = 20 # <b>", title="Vessandra")
    assert CAUTION in text
    assert "0.400 s → 0.100 s" in text
    assert "0.200 s → 0.050 s" in text
    assert "62.5 %" in text
    assert "The misfit is 2.0 times what the uncertainties promise" in text
    assert "8 × 8 × 4 blocks" in text
    assert "from −3.8 % to +0.0 %" in text
    assert "8 (8 P)" in text
    assert "no ray reaches the station" in text
    assert "VH.DDD" in text
    assert "+2.00" in text


@pytest.mark.parametrize(
    ("weight", "words"),
    [
        (0.0, "1 pick is suspected, without weight in the last model."),
        (0.3, "1 pick is suspected, with the weight that the robust loss leaves."),
    ],
)
def test_report_says_what_suspects_weigh_and_where_they_are_listed(result, weight, words):
    weights = np.where(result.suspected_outlier, weight, result.weights)
    text = render_report(replace(result, weights=weights))
    assert words in text
    assert "listed in suspected_outliers.csv" in text


def test_report_escapes_what_people_wrote(result):
    text = render_report(result, settings_text="spacing_km = 20 # <b>")
    assert "<b>" not in text
    assert "nothing &lt;moves&gt; any more" in text


def test_report_carries_its_figures_inside(result, tmp_path):
    figures = write_figures(tmp_path, result, OutputSettings(dpi=50, slice_depths_km=(10.0,)))
    write_report(
        tmp_path / "report.html", result, figures=figures, provenance={"rayloom": "0.1.0"}
    )
    text = (tmp_path / "report.html").read_text(encoding="utf-8")
    assert text.count('<img src="data:image/png;base64,') == len(figures)
    assert "http" not in text
    assert 'src="' not in text.replace('src="data:', "")


def test_report_without_losses_says_so(result):
    clean = InversionResult(
        **{
            **{name: getattr(result, name) for name in InversionResult.__annotations__},
            "used": np.ones(9, dtype=bool),
            "suspected_outlier": np.zeros(9, dtype=bool),
            "data": result.data.select(np.arange(9)),
        }
    )
    object.__setattr__(clean.data, "excluded", Exclusions())
    text = render_report(clean)
    assert "Nothing was left out." in text
    assert "<p>None.</p>" in text


def test_linear_system_leaves_the_residuals_of_the_last_model(result, tmp_path):
    write_linear_system(tmp_path / "linear_system", result)
    lengths_km = load_npz(tmp_path / "linear_system" / "G.npz")
    tables = {
        name: pd.read_csv(tmp_path / "linear_system" / f"{name}.csv")
        for name in ("rows", "d", "blocks")
    }
    blocks, rows = tables["blocks"], tables["rows"]
    change = blocks["slowness_s_per_km"] - blocks["reference_slowness_s_per_km"]
    left = tables["d"]["d_s"] - lengths_km @ change.to_numpy()
    np.testing.assert_allclose(left, result.residual_after_s[USED], atol=1e-9)
    assert rows["residual_row"].tolist() == np.flatnonzero(USED).tolist()
    assert rows["station"].tolist()[:4] == ["AAA", "BBB", "CCC", "DDD"]
    places = blocks[["x", "y", "depth_km"]].to_numpy()
    np.testing.assert_array_equal(result.model.grid.locate(places), blocks["block"])
