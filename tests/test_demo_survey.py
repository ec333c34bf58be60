"""The demo writes files that the survey room reads, the same for the same seed."""

from __future__ import annotations

import csv
import json
import warnings

import numpy as np
import pytest

from rayloom.demo import DemoTruth, Scenario, write_survey
from rayloom.demo.invention import invent
from rayloom.demo.times import standard_time_s, structure_delay_s
from rayloom.earth import ReferenceEarth
from rayloom.errors import FileAccessError, InputError
from rayloom.residuals import compute_residuals
from rayloom.survey import Picks, Survey, read_survey

with warnings.catch_warnings():
    warnings.simplefilter("ignore", DeprecationWarning)
    from obspy.geodetics import locations2degrees
    from obspy.taup import TauPyModel

SMALL = Scenario(seed=7, station_count=12, event_count=10, spacing_km=40.0, method="reference")


@pytest.fixture(scope="module")
def invention():
    return invent(SMALL)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    folder = tmp_path_factory.mktemp("demo")
    write_survey(folder, scenario=SMALL)
    return folder


@pytest.fixture(scope="module")
def survey(folder):
    return read_survey(
        stations=folder / "stations.csv",
        events=folder / "events.csv",
        picks=folder / "picks.csv",
    )


def contents(folder):
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def test_same_seed_same_files(folder, tmp_path):
    write_survey(tmp_path, scenario=SMALL)
    assert contents(tmp_path) == contents(folder)
    assert set(contents(folder)) == {"stations.csv", "events.csv", "picks.csv", "truth.json"}


def test_another_seed_other_picks_same_stations(folder, tmp_path):
    write_survey(tmp_path, scenario=SMALL, seed=8)
    mine, other = contents(folder), contents(tmp_path)
    assert mine["stations.csv"] == other["stations.csv"]
    assert mine["events.csv"] != other["events.csv"]
    assert mine["picks.csv"] != other["picks.csv"]


def test_survey_room_reads_the_files_without_complaint(survey, invention):
    assert (len(survey.stations), len(survey.events)) == (12, 10)
    assert len(survey.picks) == len(invention.recordings.event_index) == 102
    assert not [notice for notice in survey.notices if notice.severity != "info"]
    assert set(survey.picks.uncertainty_s) == {0.06, 0.09, 0.14}
    np.testing.assert_array_equal(survey.events.event, invention.seismicity.true.event)


def test_picks_are_true_origin_plus_travel_time_to_the_millisecond(survey, invention):
    order = np.lexsort((survey.picks.station_index, survey.picks.event_index))
    picks = survey.picks.select(order)
    origin = invention.seismicity.true.time[invention.recordings.event_index]
    travel_s = (picks.time - origin) / np.timedelta64(1, "s")
    np.testing.assert_allclose(travel_s, invention.travel_s, atol=0.6e-3)


def test_residuals_at_the_true_hypocentres_are_structure_plus_errors(invention):
    """The residual room, given the truth, finds exactly what the demo put in."""
    true, recordings, errors = invention.seismicity.true, invention.recordings, invention.errors
    travel = np.round(invention.travel_s * 1e9).astype("timedelta64[ns]")
    good = errors.outlier_s == 0.0
    picks = Picks(
        event_index=recordings.event_index[good],
        station_index=recordings.station_index[good],
        phase=np.full(good.sum(), "P"),
        time=(true.time[recordings.event_index] + travel)[good],
        uncertainty_s=errors.uncertainty_s[good],
    )
    earth = ReferenceEarth("ak135")
    residuals = compute_residuals(Survey(invention.stations, true, picks, []), earth)
    pairs = np.column_stack([residuals.event_index, residuals.station_index])
    assert len(pairs) == good.sum()
    delay_s = structure_delay_s(
        invention.model, earth, true, invention.stations, pairs, method="reference"
    )
    expected_s = delay_s + invention.station_terms_s[residuals.station_index]
    row_of = {
        pair: row
        for row, pair in enumerate(
            zip(recordings.event_index, recordings.station_index, strict=True)
        )
    }
    rows = [row_of[pair] for pair in zip(*pairs.T, strict=True)]
    np.testing.assert_allclose(residuals.residual_s, expected_s + errors.noise_s[rows], atol=2e-3)
    assert 0.1 < delay_s.std() < 1.0


def test_bent_rays_lose_less_in_the_slow_column(invention):
    """Fermat's principle: rays that may choose their way are delayed less, not more.

    Both methods start from the same times in the reference model.
    """
    pairs = np.array([[event, station] for event in (1, 4, 8) for station in range(12)])
    bent_s, reference_s = (
        structure_delay_s(
            invention.model,
            ReferenceEarth("ak135"),
            invention.seismicity.true,
            invention.stations,
            pairs,
            method=method,
        )
        for method in ("bent", "reference")
    )
    assert bent_s.mean() < reference_s.mean() - 0.005
    late = reference_s > 0.3
    assert late.sum() >= 3
    assert np.all(bent_s[late] < reference_s[late])


def test_standard_times_agree_with_obspy_taup(invention):
    """P of ak135 from obspy.taup, plus h√(1/v² − p²/R²) for the elevation.

    What is left is ellipticity, below 1 s for P (Kennett & Gudmundsson 1996).
    """
    taup = TauPyModel("ak135")
    true, stations = invention.seismicity.true, invention.stations
    pairs = np.array([[0, 0], [3, 5], [6, 2], [9, 11]])
    times_s = standard_time_s(ReferenceEarth("ak135"), true, stations, pairs)

    def geocentric(latitude_deg):
        return np.degrees(
            np.arctan((1 - 1 / 298.257223563) ** 2 * np.tan(np.radians(latitude_deg)))
        )

    for time_s, (event, station) in zip(times_s, pairs, strict=True):
        distance_deg = locations2degrees(
            geocentric(true.latitude_deg[event]),
            true.longitude_deg[event],
            geocentric(stations.latitude_deg[station]),
            stations.longitude_deg[station],
        )
        arrival = taup.get_travel_times(true.depth_km[event], distance_deg, ["P"])[0]
        vertical = np.sqrt(1.0 / 5.8**2 - (arrival.ray_param / 6371.0) ** 2)
        expected_s = arrival.time + stations.elevation_m[station] / 1000.0 * vertical
        assert abs(time_s - expected_s) < 1.0


def test_outliers_stand_out_in_the_files(folder, survey):
    truth = DemoTruth.read_json(folder / "truth.json")
    assert len(truth.outliers) == 3
    residuals = compute_residuals(survey, ReferenceEarth("ak135"))
    names = [
        (str(residuals.events.event[event]), str(residuals.stations.station[station]))
        for event, station in zip(residuals.event_index, residuals.station_index, strict=True)
    ]
    for outlier in truth.outliers:
        row = names.index((outlier.event, outlier.station))
        assert residuals.relative_residual_s[row] * np.sign(outlier.shift_s) > 0.0


def test_truth_round_trip_and_content(folder, invention):
    truth = DemoTruth.read_json(folder / "truth.json")
    assert truth == DemoTruth.of(invention)
    assert truth.pick_count == 102
    assert len(truth.station_terms_s) == 12
    assert len(truth.event_errors) == 10
    assert truth.slow.peak_percent == pytest.approx(-4.0, abs=0.2)
    assert truth.fast.peak_percent == pytest.approx(2.5, abs=0.2)


def test_event_errors_lead_from_catalogue_to_truth(folder, invention):
    with (folder / "events.csv").open() as lines:
        rows = list(csv.DictReader(lines))
    truth = DemoTruth.read_json(folder / "truth.json")
    for row, error, depth_km in zip(
        rows, truth.event_errors, invention.seismicity.true.depth_km, strict=True
    ):
        assert row["event"] == error.event
        assert float(row["depth_km"]) - error.depth_km == pytest.approx(depth_km, abs=0.06)


def test_truth_model_is_written_on_request(tmp_path):
    from rayloom.model import SlownessModel

    write_survey(tmp_path, scenario=SMALL, truth_netcdf=True)
    model = SlownessModel.read_netcdf(tmp_path / "truth.nc")
    assert -6.0 < model.perturbation_percent.min() < -3.5


def test_progress_reaches_the_end(tmp_path):
    seen = []
    write_survey(tmp_path, scenario=SMALL, progress=lambda done, total: seen.append((done, total)))
    assert seen[-1] == (102, 102)
    assert [done for done, _ in seen] == sorted(done for done, _ in seen)


def test_broken_truth_file_is_refused(folder, tmp_path):
    record = json.loads((folder / "truth.json").read_text())
    del record["slow"]["depth_km"]
    broken = tmp_path / "truth.json"
    broken.write_text(json.dumps(record))
    with pytest.raises(InputError, match=r"slow\.depth_km"):
        DemoTruth.read_json(broken)
    with pytest.raises(FileAccessError):
        DemoTruth.read_json(tmp_path / "absent.json")
