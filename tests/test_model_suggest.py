"""Suggested grids: extent, blocks, padding, wishes and refusals."""

from dataclasses import replace

import numpy as np
import pytest

from rayloom.earth import ReferenceEarth
from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, GridSettings, SuggestionSettings, suggest_grid
from rayloom.survey import Events, Picks, Stations, Survey
from rayloom.units import KM_PER_DEGREE


@pytest.fixture(scope="module")
def earth():
    return ReferenceEarth("ak135")


def make_survey(
    *, longitude=-179.0, latitude=65.0, half_deg=3.0, sites=60, distances=(30, 45, 60, 80), seed=8
):
    """Stations scattered over a square, events around it; every station picks every event."""
    generator = np.random.default_rng(seed)
    frame = Frame(longitude=longitude, latitude=latitude)
    corners = np.array([[-1, -1], [1, 1], [-1, 1], [1, -1]]) * half_deg
    inner = generator.uniform(-half_deg, half_deg, (sites - 4, 2))
    x, y = np.concatenate([corners, inner]).T
    station_longitude, station_latitude = frame.geographic_coordinates(x, y)
    stations = Stations(
        network=np.full(sites, "XX"),
        station=np.array([f"S{i:03d}" for i in range(sites)]),
        latitude_deg=station_latitude,
        longitude_deg=station_longitude,
        elevation_m=generator.uniform(0.0, 2310.0, sites),
    )
    distance = np.radians(np.asarray(distances, dtype=float))
    azimuth = np.arange(distance.size) * 2.4
    event_x = np.degrees(np.arctan2(np.sin(distance) * np.sin(azimuth), np.cos(distance)))
    event_y = np.degrees(np.arcsin(np.sin(distance) * np.cos(azimuth)))
    event_longitude, event_latitude = frame.geographic_coordinates(event_x, event_y)
    count = distance.size
    events = Events(
        event=np.array([f"E{i}" for i in range(count)]),
        time=np.full(count, "2020-01-01", dtype="datetime64[ns]"),
        latitude_deg=event_latitude,
        longitude_deg=event_longitude,
        depth_km=np.full(count, 30.0),
    )
    event_index, station_index = (axis.ravel() for axis in np.indices((count, sites)))
    picks = Picks(
        event_index=event_index,
        station_index=station_index,
        phase=np.full(count * sites, "P"),
        time=np.full(count * sites, "2020-01-01T00:10", dtype="datetime64[ns]"),
        uncertainty_s=np.full(count * sites, 0.1),
    )
    return Survey(stations, events, picks)


def station_coordinates(survey, grid):
    return grid.frame.local_coordinates(
        survey.stations.longitude_deg, survey.stations.latitude_deg
    )


SURVEYS = {
    "regional": {},
    "volcano": {"half_deg": 0.2, "sites": 20, "longitude": 15.0, "latitude": 37.7},
    "continental": {"half_deg": 13.0, "sites": 374, "longitude": -87.0, "latitude": 38.0},
    "south": {"half_deg": 1.5, "sites": 30, "longitude": 170.0, "latitude": -77.0},
}


@pytest.fixture(scope="module", params=SURVEYS)
def suggested(request, earth):
    survey = make_survey(**SURVEYS[request.param])
    return survey, suggest_grid(survey, earth)


def test_stations_lie_inside_and_well_off_the_sides(suggested):
    survey, suggestion = suggested
    grid = suggestion.grid
    x, y = station_coordinates(survey, grid)
    points = np.stack([x, y, survey.stations.depth_km], axis=-1)
    assert np.all(grid.locate(points) >= 0)
    assert min(x.min() - grid.x_edges[0], grid.x_edges[-1] - x.max()) >= 1.5
    assert min(y.min() - grid.y_edges[0], grid.y_edges[-1] - y.max()) >= 1.5


def test_top_is_a_round_number_above_the_highest_station(suggested):
    survey, suggestion = suggested
    top = suggestion.grid.depth_edges_km[0]
    assert top < survey.stations.depth_km.min()
    assert top == round(top)
    assert top > survey.stations.depth_km.min() - 1.1


def test_base_follows_the_aperture(suggested):
    survey, suggestion = suggested
    x, y = station_coordinates(survey, suggestion.grid)
    aperture = max(np.ptp(x), np.ptp(y)) * KM_PER_DEGREE
    base = suggestion.grid.depth_edges_km[-1]
    assert 150.0 <= base <= 660.0
    if 150.0 < base < 660.0:
        assert 0.7 * aperture < base < 1.0 * aperture


def test_blocks_are_thin_with_edges_on_discontinuities(suggested, earth):
    _, suggestion = suggested
    edges = suggestion.grid.depth_edges_km
    assert np.diff(edges).max() <= 20.0
    assert np.diff(edges).min() >= 4.0
    depths = earth.discontinuities_km
    inside = depths[(depths > edges[0]) & (depths < edges[-1])]
    assert inside.size >= 2
    assert set(inside) <= set(edges)


def test_inner_blocks_are_equal_and_padding_widens(suggested):
    survey, suggestion = suggested
    grid = suggestion.grid
    coordinates = station_coordinates(survey, grid)
    steps = []
    for edges, values in zip((grid.x_edges, grid.y_edges), coordinates, strict=True):
        widths = np.diff(edges)
        reach = np.abs(values).max()
        over_stations = (edges[1:] > -reach) & (edges[:-1] < reach)
        steps.append(widths[over_stations])
        step = steps[-1].mean()
        np.testing.assert_allclose(steps[-1], step, rtol=1e-9)
        np.testing.assert_allclose(edges, -edges[::-1], atol=1e-12)
        outward = widths[edges[:-1] >= reach]
        assert np.all(np.diff(outward) > -0.011)
        assert outward.max() <= 2.5 * step + 0.011
    assert steps[0].mean() == pytest.approx(steps[1].mean())


def test_budget_is_kept(suggested):
    _, suggestion = suggested
    assert 1_000 < suggestion.grid.block_count <= 60_000


def test_settings_build_the_same_grid(suggested):
    _, suggestion = suggested
    again = GridSettings.model_validate_json(suggestion.settings.model_dump_json())
    assert BlockGrid.from_spec(again) == suggestion.grid


def test_reasons_name_the_numbers(suggested):
    _, suggestion = suggested
    text = "\n".join(suggestion.reasons)
    assert f"Base at {suggestion.grid.depth_edges_km[-1]:g} km" in text
    assert f"{suggestion.grid.block_count} blocks" in text


def test_longitude_does_not_matter(earth):
    """The same network across the antimeridian and on the Greenwich meridian."""
    across = suggest_grid(make_survey(longitude=-179.0), earth).grid
    survey = make_survey(longitude=-179.0)
    moved = replace(
        survey,
        stations=replace(survey.stations, longitude_deg=survey.stations.longitude_deg + 179.0),
        events=replace(survey.events, longitude_deg=survey.events.longitude_deg + 179.0),
    )
    greenwich = suggest_grid(moved, earth).grid
    assert greenwich.frame.longitude_deg == pytest.approx(0.0, abs=0.05)
    np.testing.assert_array_equal(across.x_edges, greenwich.x_edges)
    np.testing.assert_array_equal(across.y_edges, greenwich.y_edges)


def test_stations_without_picks_do_not_stretch_the_grid(earth):
    survey = make_survey()
    stations = survey.stations
    longitude = stations.longitude_deg.copy()
    longitude[5] += 40.0
    kept = survey.picks.station_index != 5
    picks = Picks(
        **{
            name: getattr(survey.picks, name)[kept]
            for name in ("event_index", "station_index", "phase", "time", "uncertainty_s")
        }
    )
    strayed = Survey(replace(stations, longitude_deg=longitude), survey.events, picks)
    same = Survey(stations, survey.events, picks)
    assert suggest_grid(strayed, earth).grid == suggest_grid(same, earth).grid


def test_padding_follows_the_shallowest_rays(earth):
    widths = [
        suggest_grid(make_survey(distances=[near, near + 2, near + 4]), earth).grid.x_edges[-1]
        for near in (30, 50, 80)
    ]
    assert widths[0] > widths[1] > widths[2]


def test_wishes_are_kept(earth):
    wishes = SuggestionSettings(
        spacing_km=0.2 * KM_PER_DEGREE,
        depth_km=300.0,
        padding_km=400.0,
        block_thickness_km=15.0,
        block_budget=1_000,
        padding_growth=1.0,
        azimuth_deg=30.0,
    )
    survey = make_survey()
    grid = suggest_grid(survey, earth, wishes).grid
    assert grid.frame.azimuth_deg == 30.0
    assert grid.depth_edges_km[-1] == 300.0
    assert np.diff(grid.depth_edges_km).max() <= 15.0
    np.testing.assert_allclose(np.diff(grid.x_edges), 0.2, atol=1e-9)
    x, _ = station_coordinates(survey, grid)
    assert grid.x_edges[-1] - np.abs(x).max() == pytest.approx(400.0 / KM_PER_DEGREE, abs=0.2)


def test_smaller_budget_gives_wider_blocks(earth):
    survey = make_survey()
    counts = [
        suggest_grid(survey, earth, SuggestionSettings(block_budget=budget)).grid.block_count
        for budget in (5_000, 20_000)
    ]
    assert 3_500 < counts[0] <= 5_000
    assert 15_000 < counts[1] <= 20_000


def test_ocean_bottom_stations_leave_the_top_at_sea_level(earth):
    survey = make_survey()
    sunk = replace(survey.stations, elevation_m=survey.stations.elevation_m - 5_000.0)
    grid = suggest_grid(replace(survey, stations=sunk), earth).grid
    assert grid.depth_edges_km[0] == 0.0


def only(survey, rows):
    names = ("event_index", "station_index", "phase", "time", "uncertainty_s")
    picks = Picks(**{name: getattr(survey.picks, name)[rows] for name in names})
    return replace(survey, picks=picks)


def test_surveys_that_tell_too_little_are_refused(earth):
    survey = make_survey()
    with pytest.raises(InputError, match="no station has picks"):
        suggest_grid(only(survey, np.zeros(0, dtype=int)), earth)
    with pytest.raises(InputError, match="2 site"):
        suggest_grid(only(survey, survey.picks.station_index < 2), earth)
    with pytest.raises(InputError, match="at 25° or more"):
        suggest_grid(make_survey(distances=[5, 10, 15]), earth)
    with pytest.raises(InputError, match="span"):
        suggest_grid(make_survey(half_deg=60.0), earth)


def test_shared_sites_do_not_shrink_the_blocks(earth):
    """A second sensor beside each station leaves the spacing of the sites as it was."""
    survey = make_survey()
    stations, picks = survey.stations, survey.picks
    twice = Stations(
        network=np.concatenate([stations.network, np.full(60, "YY")]),
        station=np.tile(stations.station, 2),
        latitude_deg=np.tile(stations.latitude_deg, 2),
        longitude_deg=np.tile(stations.longitude_deg, 2),
        elevation_m=np.tile(stations.elevation_m, 2),
    )
    more = Picks(
        event_index=np.tile(picks.event_index, 2),
        station_index=np.concatenate([picks.station_index, picks.station_index + 60]),
        phase=np.tile(picks.phase, 2),
        time=np.tile(picks.time, 2),
        uncertainty_s=np.tile(picks.uncertainty_s, 2),
    )
    doubled = Survey(twice, survey.events, more)
    assert suggest_grid(doubled, earth).grid == suggest_grid(survey, earth).grid
