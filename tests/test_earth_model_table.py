"""Model files of one's own: what is read and what is refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from rayloom.earth import ModelTable, ReferenceEarth
from rayloom.errors import FileAccessError, FileProblemsError, InputError

HEADER = "# a comment\ndepth_km,vp_km_s,vs_km_s,density,note\n"
ROWS = ["0,6,3.5,2.7,x", "2891,13,7,5.5,", "2891,8,0,9.9,", "6371,11,3.6,13,centre"]


def written(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "mine.csv"
    path.write_text(text, encoding="utf-8")
    return path


def test_reads_its_own_form(tmp_path: Path) -> None:
    earth = ReferenceEarth.from_csv(written(tmp_path, HEADER + "\n".join(ROWS)))
    assert earth.name == "mine"
    assert earth.core_depth_km == 2891.0
    assert earth.discontinuities_km == pytest.approx([2891.0])
    assert np.isfinite(earth.travel_time("P", 60.0))
    assert not earth.table.depth_km.flags.writeable


@pytest.mark.parametrize(
    ("row", "text", "message"),
    [
        (0, "1,6,3.5,2.7", "line 3, depth_km: expected 0 in the first row, got 1.0"),
        (1, "2891,thirteen,7,5.5", "line 4, vp_km_s: expected a number, got 'thirteen'"),
        (1, "2891,13,7", "line 4, density: expected a number, got ''"),
        (1, "2891,nan,7,5.5", "line 4, vp_km_s: expected a number, got 'nan'"),
        (1, "2891,-13,7,5.5", "line 4, vp_km_s: expected a positive number, got -13.0"),
        (1, "2891,13,-7,5.5", "line 4, vs_km_s: expected 0 \\(fluid\\) or more"),
        (1, "2891,13,7,0", "line 4, density: expected a positive number"),
        (2, "2890,8,0,9.9", "line 5, depth_km: expected 2891.0 or more, got 2890.0"),
        (2, "2900,8,0,9.9", "line 5, vs_km_s: 0 must begin at a discontinuity"),
        (2, "2891,8,2,9.9", "expected 0 in the fluid core, found it nowhere"),
        (0, "0,600,350,2.7", "line 3, vp_km_s: expected 0.2 to 20 km/s, got 600"),
        (0, "0,6,3.5,2700", "line 3, density: expected 0.5 to 20 g/cm³, got 2700"),
        (0, "0,6,0.01,2.7", "line 3, vs_km_s: expected 0.05 to 12 km/s, got 0.01"),
        (1, "2891,7,13.7,5.5", "line 4, vs_km_s: expected 0.05 to 12 km/s"),
        (0, "0,3.5,6,2.7", "line 3, vs_km_s: expected less than 0.866 of vp_km_s .3.5., got 6"),
        (1, "2891,1_3,7,5.5", "line 4, vp_km_s: expected a number, got '1_3'"),
        (1, "1e400,13,7,5.5", "line 4, depth_km: expected a number, got '1e400'"),
        (3, "6000,11,3.6,13", "line 6, depth_km: expected the Earth's centre"),
        (0, "0,1.5,0,1", "line 3, vs_km_s: expected a solid surface without water"),
    ],
)
def test_names_the_line(tmp_path: Path, row: int, text: str, message: str) -> None:
    rows = [*ROWS[:row], text, *ROWS[row + 1 :]]
    with pytest.raises(FileProblemsError, match=message):
        ModelTable.from_csv(written(tmp_path, HEADER + "\n".join(rows)))


def test_gathers_all_problems(tmp_path: Path) -> None:
    rows = ["0,6,3.5,x", "2891,y,7,5.5", *ROWS[2:]]
    with pytest.raises(FileProblemsError) as caught:
        ModelTable.from_csv(written(tmp_path, HEADER + "\n".join(rows)))
    assert len(caught.value.problems) == 2


def test_refuses_a_depth_given_three_times(tmp_path: Path) -> None:
    rows = [ROWS[0], ROWS[1], *ROWS[1:]]
    with pytest.raises(FileProblemsError, match="given three times"):
        ModelTable.from_csv(written(tmp_path, HEADER + "\n".join(rows)))


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "no header"),
        ("# only a comment\n", "no header"),
        ("depth,vp_km_s,vs_km_s,density\n", "column depth_km missing"),
        ("depth_kms,vp_km_s,vs_km_s,density\n", "did you mean 'depth_km' by 'depth_kms'"),
        ("depth_km,vp_km_s,vs_km_s,density,density\n", "line 1: column density stands 2 times"),
        (HEADER + "0,6\0,3.5,2.7\n", "not a text file"),
        (HEADER + "0," + "9" * 200_000 + ",3.5,2.7\n", "not a CSV table"),
        (HEADER, "expected two rows or more, got 0"),
    ],
)
def test_refuses_what_is_no_table(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(FileProblemsError, match=message):
        ModelTable.from_csv(written(tmp_path, text))


def test_refuses_binary_and_absent_files(tmp_path: Path) -> None:
    path = tmp_path / "model.csv"
    path.write_bytes(bytes([0xFF, 0xFE, 0x00, 0x81]))
    with pytest.raises(FileProblemsError, match="not a text file"):
        ModelTable.from_csv(path)
    with pytest.raises(FileAccessError, match="cannot be read"):
        ModelTable.from_csv(tmp_path / "absent.csv")


def test_arrays_are_checked_too() -> None:
    with pytest.raises(InputError, match="four of one length"):
        ModelTable.from_arrays([0.0, 1.0], [1.0], [1.0, 1.0], [1.0, 1.0])
    with pytest.raises(InputError, match="row 2, depth_km: expected the Earth's centre"):
        ModelTable.from_arrays([0.0, 6000.0], [6.0, 7.0], [3.0, 0.0], [3.0, 9.0])
