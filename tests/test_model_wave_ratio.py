"""P and S models side by side: the ratio against its definition, and its mask."""

from __future__ import annotations

import numpy as np
import pytest
import xarray

from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, SlownessModel, wave_ratio

SHAPE = (3, 2, 2)


def pair(change_p, change_s, hits_p=9.0, hits_s=9.0):
    grid = BlockGrid(Frame(longitude=12.0, latitude=-31.0), [0, 1, 2, 3], [0, 1, 2], [0, 50, 90])
    models = []
    for wave, speed, change, hits in (
        ("P", 8.0, change_p, hits_p),
        ("S", 4.5, change_s, hits_s),
    ):
        reference = np.full(SHAPE, 1.0 / speed)
        slowness = reference / (1.0 + np.broadcast_to(change, SHAPE))
        model = SlownessModel(grid, slowness, reference, wave)
        models.append(model.with_fields(hits=np.broadcast_to(hits, SHAPE)))
    return models


def test_the_ratio_is_that_of_logarithms():
    """By definition d ln v = ln(v / v_ref)."""
    change_p = np.linspace(-0.06, -0.01, 12).reshape(SHAPE)
    change_s = np.linspace(-0.09, 0.02, 12).reshape(SHAPE)
    ratio = wave_ratio(*pair(change_p, change_s))
    expected = np.log1p(change_s) / np.log1p(change_p)
    np.testing.assert_allclose(ratio.dlnvs_dlnvp, expected, rtol=1e-12)
    expected = 8.0 * (1.0 + change_p) / (4.5 * (1.0 + change_s))
    np.testing.assert_allclose(ratio.vp_vs, expected, rtol=1e-12)
    assert ratio.resolved.all()


def test_blocks_with_few_rays_or_a_small_change_have_no_ratio():
    change_p = np.full(SHAPE, 0.02)
    change_p[0, 0, 0] = 0.004
    hits_p, hits_s = np.full(SHAPE, 9.0), np.full(SHAPE, 9.0)
    hits_p[1, 0, 0] = hits_s[2, 1, 1] = 4.0
    ratio = wave_ratio(*pair(change_p, 0.03, hits_p, hits_s))
    out = {(0, 0, 0), (1, 0, 0), (2, 1, 1)}
    assert {tuple(block) for block in np.argwhere(~ratio.resolved).tolist()} == out
    assert np.isnan(ratio.dlnvs_dlnvp[~ratio.resolved]).all()
    assert np.isfinite(ratio.vp_vs[0, 0, 0])
    assert ratio.median == pytest.approx(np.log1p(0.03) / np.log1p(0.02))


def test_nothing_resolved_is_no_number():
    ratio = wave_ratio(*pair(0.0, 0.03))
    assert np.isnan(ratio.median)


def test_the_file_carries_ratio_and_mask(tmp_path):
    ratio = wave_ratio(*pair(np.linspace(-0.03, 0.03, 12).reshape(SHAPE), 0.04))
    ratio.write_netcdf(tmp_path / "ratio.nc")
    with xarray.open_dataset(tmp_path / "ratio.nc", engine="h5netcdf") as read:
        assert read["dlnvs_dlnvp"].dims == ("depth", "y", "x")
        np.testing.assert_array_equal(
            read["dlnvs_dlnvp"].transpose("x", "y", "depth").values, ratio.dlnvs_dlnvp
        )
        assert "5 rays or more" in read.attrs["resolved"]
        assert read["dvs"].attrs["units"] == "percent"


def test_models_that_do_not_belong_together_are_refused():
    p_model, s_model = pair(0.02, 0.03)
    with pytest.raises(InputError, match="got S and P"):
        wave_ratio(s_model, p_model)
    other = BlockGrid(p_model.grid.frame, [0, 1, 2, 4], [0, 1, 2], [0, 50, 90])
    with pytest.raises(InputError, match="different blocks"):
        wave_ratio(p_model, SlownessModel(other, s_model.slowness_s_per_km, wave="S"))
    bare = SlownessModel(s_model.grid, s_model.slowness_s_per_km, wave="S")
    with pytest.raises(InputError, match="no field hits"):
        wave_ratio(p_model, bare)
