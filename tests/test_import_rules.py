"""Import rules of the house that layers alone cannot express."""

import ast
import subprocess
import sys
from pathlib import Path

import rayloom

PACKAGE = Path(rayloom.__file__).parent
TOUCH_THE_CORE = {"earth", "forward", "inversion"}


def _imported_names(source: Path) -> set[str]:
    names: set[str] = set()
    for node in ast.walk(ast.parse(source.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names.update(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            names.add(node.module)
            names.update(f"{node.module}.{alias.name}" for alias in node.names)
    return names


def test_only_three_rooms_touch_the_rust_module():
    """The compiled module is invisible to the import linter."""
    users = {
        source.relative_to(PACKAGE).parts[0]
        for source in PACKAGE.rglob("*.py")
        if any(name.startswith("rayloom._core") for name in _imported_names(source))
    }
    assert users == TOUCH_THE_CORE


def test_importing_the_package_loads_no_heavy_library():
    script = (
        "import sys, rayloom; "
        "print(*{'numpy', 'scipy', 'pandas', 'xarray', 'matplotlib', 'obspy'} & set(sys.modules))"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, check=True
    )
    assert done.stdout.split() == []
