"""Settings files: what a person gets told, and that what is written reads back."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Literal

import pytest
from pydantic import BaseModel, ConfigDict, Field

from rayloom.errors import FileAccessError, FileProblemsError, InputError
from rayloom.settings.documentation import key_descriptions, summary
from rayloom.settings.toml_reading import read_settings
from rayloom.settings.toml_writing import settings_text


class Mark(BaseModel):
    """One mark."""

    model_config = ConfigDict(extra="forbid")

    name: str
    at_km: tuple[float, float] | None = None


class Paint(BaseModel):
    """How things are painted.

    Parameters
    ----------
    colour : str
        Which of the ``three`` colours.
    layers : int
        How many, one after
        the other.
    """

    model_config = ConfigDict(extra="forbid")

    colour: Literal["red", "green", "blue"] = "red"
    layers: int = Field(2, ge=1)
    gloss_percent: float | None = Field(None, description="Shine, in percent.")
    widths_km: dict[str, float] = Field(default_factory=dict)
    marks: tuple[Mark, ...] = ()


class Wall(BaseModel):
    """A wall."""

    model_config = ConfigDict(extra="forbid")

    height_km: float
    edges: list[float] = Field(default_factory=list)


class Whole(BaseModel):
    """Everything."""

    model_config = ConfigDict(extra="forbid")

    wall: Wall
    paint: Paint = Paint()


def problems_of(tmp_path: Path, text: str) -> list[str]:
    path = tmp_path / "settings.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(FileProblemsError) as caught:
        read_settings(path, Whole)
    return list(caught.value.problems)


def test_every_problem_has_its_own_line_and_key_path(tmp_path: Path) -> None:
    problems = problems_of(
        tmp_path,
        '[wall]\nheight_km = "tall"\n\n[paint]\ncolour = "gren"\nlayers = 0\nlayer = 3\n',
    )
    assert problems == [
        'line 2: wall.height_km: got "tall", expected a number',
        "line 5: paint.colour: got \"gren\", expected 'red', 'green' or 'blue'; "
        "did you mean 'green'?",
        "line 6: paint.layers: got 0, expected greater than or equal to 1",
        "line 7: paint.layer: is not a known key; did you mean 'layers'?",
    ]


def test_a_missing_section_and_an_unknown_one_are_named(tmp_path: Path) -> None:
    problems = problems_of(tmp_path, "[wal]\nheight_km = 2.0\n")
    assert "wall: is missing and has no default" in problems
    assert "line 1: wal: is not a known key; did you mean 'wall'?" in problems


def test_a_missing_key_is_placed_at_its_section(tmp_path: Path) -> None:
    assert problems_of(tmp_path, "\n[wall]\nedges = [1.0]\n") == [
        "line 2: wall.height_km: is missing and has no default"
    ]


def test_a_key_of_another_section_is_pointed_there(tmp_path: Path) -> None:
    (problem,) = problems_of(tmp_path, "[wall]\nheight_km = 1.0\ngloss_percent = 3.0\n")
    assert problem.endswith("is not a known key here; it belongs to [paint]")


def test_an_entry_of_a_list_is_counted_from_one(tmp_path: Path) -> None:
    (problem,) = problems_of(tmp_path, '[wall]\nheight_km = 1.0\nedges = [1.0, "x"]\n')
    assert problem == 'line 3: wall.edges[2]: got "x", expected a number'


def test_text_that_is_not_toml_names_the_place(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_text("[wall]\nheight_km = tall\n", encoding="utf-8")
    with pytest.raises(InputError, match=r"not valid TOML.*line 2"):
        read_settings(path, Whole)


def test_a_binary_file_is_told_apart(tmp_path: Path) -> None:
    path = tmp_path / "settings.toml"
    path.write_bytes(b"\x89HDF\r\n\xff\xfe\x00")
    with pytest.raises(InputError, match="not a text file in UTF-8"):
        read_settings(path, Whole)


def test_a_missing_file_is_named(tmp_path: Path) -> None:
    with pytest.raises(FileAccessError, match=r"absent\.toml"):
        read_settings(tmp_path / "absent.toml", Whole)


def test_what_is_written_reads_back_the_same(tmp_path: Path) -> None:
    settings = Whole(
        wall=Wall(height_km=2.5, edges=[0.1 * n for n in range(40)]),
        paint=Paint(
            colour="blue",
            widths_km={"a": 1.5},
            marks=(Mark(name="A", at_km=(1.0, 2.0)), Mark(name="B")),
        ),
    )
    path = tmp_path / "settings.toml"
    path.write_text(settings_text(settings, heading="Two\nlines"), encoding="utf-8")
    assert read_settings(path, Whole) == settings


def test_comments_teach_and_can_be_left_out() -> None:
    settings = Whole(wall=Wall(height_km=1.0), paint=Paint(layers=5))
    text = settings_text(settings)
    assert "# How things are painted." in text
    assert "# Which of the three colours." in text
    assert "# How many, one after the other (default: 2)." in text
    assert "# gloss_percent =" in text
    bare = settings_text(settings, comments=False, hidden={"paint": ["layers"]})
    assert "painted" not in bare
    assert "layers" not in tomllib.loads(bare)["paint"]


def test_no_line_of_a_long_list_is_long() -> None:
    text = settings_text(Whole(wall=Wall(height_km=1.0, edges=[float(n) for n in range(200)])))
    assert max(len(line) for line in text.splitlines()) <= 99


def test_descriptions_come_from_docstring_or_field() -> None:
    assert key_descriptions(Paint) == {
        "colour": "Which of the three colours.",
        "layers": "How many, one after the other.",
        "gloss_percent": "Shine, in percent.",
    }
    assert summary(Paint) == "How things are painted."
