"""The examples of the README run as they stand."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

from run_folder_cases import write_small_survey

README = Path(__file__).parent.parent / "README.md"


def python_examples() -> list[str]:
    return re.findall(r"^```python\n(.*?)^```", README.read_text(encoding="utf-8"), re.M | re.S)


def test_the_python_example_runs(tmp_path: Path) -> None:
    write_small_survey(tmp_path)
    (example,) = python_examples()
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", example],
        cwd=tmp_path,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert (tmp_path / "model.nc").exists()


def test_every_file_the_readme_shows_is_there() -> None:
    text = README.read_text(encoding="utf-8")
    for target in re.findall(r"\]\(([^)#:]+)\)", text):
        assert (README.parent / target).exists(), target
