"""Model files that were cut off or damaged: an error that names the file, or the model."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rayloom.errors import RayloomError
from rayloom.model import BlockGrid, Frame, SlownessModel

quick = settings(
    max_examples=40,
    deadline=None,
    derandomize=True,
    database=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)


@pytest.fixture(scope="module")
def model() -> SlownessModel:
    grid = BlockGrid(Frame(longitude=12.0, latitude=-31.0), [0, 1, 2], [0, 1, 2], [0, 20, 50])
    return SlownessModel(grid, np.full(grid.shape, 0.125)).with_fields(hits=np.ones(grid.shape))


@pytest.fixture(scope="module")
def good(model: SlownessModel, tmp_path_factory: pytest.TempPathFactory) -> bytes:
    path = tmp_path_factory.mktemp("good") / "model.nc"
    model.write_netcdf(path)
    return path.read_bytes()


def read(folder: Path, content: bytes) -> SlownessModel | None:
    path = folder / "model.nc"
    path.write_bytes(content)
    try:
        return SlownessModel.read_netcdf(path)
    except RayloomError as error:
        message = str(error)
    assert str(path) in message
    return None


@quick
@given(share=st.floats(0.0, 0.999))
def test_truncated_files_are_refused(tmp_path: Path, good: bytes, share: float) -> None:
    assert read(tmp_path, good[: int(share * len(good))]) is None


@quick
@given(content=st.binary(max_size=300))
def test_random_bytes_are_refused(tmp_path: Path, content: bytes) -> None:
    assert read(tmp_path, content) is None


@quick
@given(places=st.lists(st.floats(0.0, 0.9999), min_size=1, max_size=4), byte=st.integers(0, 255))
def test_damaged_bytes_are_refused_or_do_not_matter(
    tmp_path: Path, good: bytes, model: SlownessModel, places: list[float], byte: int
) -> None:
    """The format guards its structure with checksums; a value that changes must be seen."""
    content = bytearray(good)
    for place in places:
        content[int(place * len(content))] = byte
    found = read(tmp_path, bytes(content))
    if found is not None:
        np.testing.assert_array_equal(found.slowness_s_per_km, model.slowness_s_per_km)
