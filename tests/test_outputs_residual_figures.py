from types import SimpleNamespace

import numpy as np
import pandas as pd
import pytest

from rayloom.errors import InputError
from rayloom.outputs import figure_misfit, figure_station_residuals
from rayloom.outputs.residual_figures import station_medians
from rayloom.survey import Stations

RESIDUAL_S = np.array([0.5, 0.3, 9.0, -0.2, -0.4, np.nan, 0.1])
STATION = np.array([0, 0, 1, 2, 2, 2, 3])


def make_data():
    stations = Stations(
        network=np.array(["VH", "VH", "VH", "VH", "VH"]),
        station=np.array(["AAA", "AAA", "BBB", "CCC", "DDD"]),
        latitude_deg=np.array([-31.0, -31.0, -30.0, -32.0, -31.5]),
        longitude_deg=np.array([179.0, 179.0, -179.5, 178.0, 179.0]),
        elevation_m=np.zeros(5),
    )
    return SimpleNamespace(
        stations=stations, station_index=STATION, relative_residual_s=RESIDUAL_S
    )


def test_medians_join_the_epochs_of_a_station():
    data = make_data()
    medians = station_medians(data.stations, STATION, RESIDUAL_S)
    assert medians.label.tolist() == ["VH.AAA", "VH.BBB", "VH.CCC"]
    assert medians.count.tolist() == [3, 2, 1]
    np.testing.assert_allclose(medians.median_s, [0.5, -0.3, 0.1])
    with pytest.raises(InputError, match="no finite residual"):
        station_medians(data.stations, STATION, np.full(7, np.nan))


def test_maps_show_the_medians_on_one_symmetric_scale():
    data = make_data()
    figure = figure_station_residuals(data, residual_after_s=0.1 * RESIDUAL_S)
    before, after = (axes for axes in figure.axes if axes.get_title())
    drawn = before.collections[0]
    assert sorted(drawn.get_array()) == pytest.approx([-0.3, 0.1, 0.5])
    assert sorted(after.collections[0].get_array()) == pytest.approx([-0.03, 0.01, 0.05])
    assert drawn.get_clim() == after.collections[0].get_clim() == (-0.5, 0.5)
    places = {tuple(np.round(place, 6)) for place in drawn.get_offsets()}
    shifted = {(lon % 360, lat) for lon, lat in places}
    assert shifted == {(179.0, -31.0), (180.5, -30.0), (178.0, -32.0)}
    assert np.ptp([lon for lon, _ in places]) == pytest.approx(2.5)


def test_late_station_is_red():
    """Red for late: common practice."""
    figure = figure_station_residuals(make_data())
    figure.draw_without_rendering()
    drawn = figure.axes[0].collections[0]
    late = drawn.get_facecolors()[int(np.argmax(drawn.get_array()))]
    early = drawn.get_facecolors()[int(np.argmin(drawn.get_array()))]
    assert late[0] > late[2]
    assert early[2] > early[0]


def test_histograms_count_every_finite_pick():
    rng = np.random.default_rng(6)
    before, after = rng.normal(0.0, 0.4, 500), rng.normal(0.0, 0.15, 500)
    before[0], after[1] = np.nan, np.nan
    history = pd.DataFrame({"iteration": [0, 1], "rms_s": [0.4, 0.15]})
    outlier = np.zeros(500, dtype=bool)
    outlier[5:9] = True
    figure = figure_misfit(history, before_s=before, after_s=after, suspected_outlier=outlier)
    course, bars = figure.axes
    np.testing.assert_allclose(course.lines[0].get_xydata(), [[0.0, 0.4], [1.0, 0.15]])
    low, high = bars.get_xlim()
    kept = np.isfinite(before) & np.isfinite(after)
    inside = kept & (before >= low) & (before <= high)
    counted = sum(bar.get_height() for bar in bars.containers[0])
    assert counted == inside.sum()
    trusted = kept & ~outlier
    labels = [text.get_text().replace("\n", " ") for text in bars.get_legend().get_texts()]
    for label, values in zip(labels, (before, after), strict=True):
        rms = np.sqrt(np.mean(values[trusted] ** 2))
        assert label.endswith(f"RMS {rms:.3f} s")
    assert "4 suspected" in bars.texts[0].get_text()


def test_nothing_to_draw_is_a_clear_error():
    history = pd.DataFrame({"iteration": [0], "rms_s": [0.4]})
    with pytest.raises(InputError, match="no finite residual"):
        figure_misfit(history, before_s=np.array([np.nan]), after_s=np.array([0.1]))
