"""The XML file formats of the Visualization Toolkit, as far as rayloom needs them.

Arrays follow the XML part in one appended raw section, each behind its length
in bytes as a 64-bit number. Text arrays stand in the XML part as character
codes, each text closed by a zero.

References
----------
Kitware, The VTK User's Guide, section "XML file formats".
"""

from __future__ import annotations

import sys
from collections.abc import Mapping
from pathlib import Path
from typing import Any
from xml.sax.saxutils import quoteattr

import numpy as np
import numpy.typing as npt

from rayloom.writing import replacing

Arrays = Mapping[str, npt.NDArray[Any]]

_TYPE_NAMES = {
    np.dtype(np.uint8): "UInt8",
    np.dtype(np.int32): "Int32",
    np.dtype(np.int64): "Int64",
    np.dtype(np.float32): "Float32",
    np.dtype(np.float64): "Float64",
}


class _Appended:
    """The arrays of the appended section and where each begins."""

    def __init__(self) -> None:
        self.arrays: list[npt.NDArray[Any]] = []
        self.offset = 0

    def element(self, name: str, array: npt.NDArray[Any]) -> str:
        """Return the XML element of an array of shape (n,) or (n, 3)."""
        if array.dtype.kind in "UOT":
            return _text_element(name, array)
        if array.dtype == np.bool_:
            array = array.astype(np.uint8)
        components = 1 if array.ndim == 1 else array.shape[1]
        element = (
            f'<DataArray type="{_TYPE_NAMES[array.dtype]}" Name={quoteattr(name)} '
            f'NumberOfComponents="{components}" NumberOfTuples="{len(array)}" '
            f'format="appended" offset="{self.offset}"/>'
        )
        self.arrays.append(np.ascontiguousarray(array))
        self.offset += 8 + array.nbytes
        return element

    def group(self, tag: str, arrays: Arrays) -> str:
        elements = "\n".join(self.element(name, array) for name, array in arrays.items())
        return f"<{tag}>\n{elements}\n</{tag}>"


def _text_element(name: str, texts: npt.NDArray[Any]) -> str:
    codes = " ".join(str(code) for text in texts for code in (*str(text).encode(), 0))
    return (
        f'<DataArray type="String" Name={quoteattr(name)} '
        f'NumberOfTuples="{len(texts)}" format="ascii">{codes}</DataArray>'
    )


def _write(
    path: str | Path, kind: str, whole: str, piece: str, groups: Mapping[str, Arrays]
) -> None:
    appended = _Appended()
    body = "\n".join(
        appended.group(tag, arrays) for tag, arrays in groups.items() if tag != "FieldData"
    )
    fields = appended.group("FieldData", groups["FieldData"])
    head = (
        '<?xml version="1.0"?>\n'
        f'<VTKFile type="{kind}" version="1.0" byte_order="{sys.byteorder.capitalize()}Endian" '
        f'header_type="UInt64">\n<{kind}{whole}>\n{fields}\n<Piece {piece}>\n{body}\n</Piece>\n'
        f'</{kind}>\n<AppendedData encoding="raw">\n_'
    )
    with replacing(path) as temporary, temporary.open("wb") as file:
        file.write(head.encode())
        for array in appended.arrays:
            file.write(np.uint64(array.nbytes).tobytes())
            file.write(array.tobytes())
        file.write(b"\n</AppendedData>\n</VTKFile>\n")


def write_structured_grid(
    path: str | Path,
    points: npt.NDArray[np.float64],
    *,
    cells: Arrays,
    fields: Arrays,
) -> None:
    """Write a structured grid (.vts).

    Parameters
    ----------
    path : str or Path
        The file.
    points : array, shape (ni, nj, nk, 3)
        Vertices; the first index runs fastest in the file.
    cells : mapping of name to array, shape (ni - 1, nj - 1, nk - 1)
        Cell data.
    fields : mapping of name to array, shape (m,)
        Data that belong to the whole file.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    extent = " ".join(f"0 {count - 1}" for count in points.shape[:3])
    groups = {
        "FieldData": fields,
        "Points": {"points": points.reshape(-1, 3, order="F")},
        "CellData": {name: array.ravel(order="F") for name, array in cells.items()},
    }
    _write(path, "StructuredGrid", f' WholeExtent="{extent}"', f'Extent="{extent}"', groups)


def write_poly_data(
    path: str | Path,
    points: npt.NDArray[Any],
    *,
    cell_ends: npt.NDArray[np.int64],
    as_lines: bool,
    cells: Arrays,
    fields: Arrays,
) -> None:
    """Write poly-lines or single points (.vtp).

    Parameters
    ----------
    path : str or Path
        The file.
    points : array, shape (n, 3)
        Points, those of one poly-line after each other.
    cell_ends : array of int64, shape (k,)
        One past the last point of each poly-line.
    as_lines : bool
        Poly-lines when true, otherwise vertices.
    cells : mapping of name to array, shape (k,)
        Cell data.
    fields : mapping of name to array, shape (m,)
        Data that belong to the whole file.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    count = len(cell_ends)
    lines, vertices = (count, 0) if as_lines else (0, count)
    piece = (
        f'NumberOfPoints="{len(points)}" NumberOfVerts="{vertices}" NumberOfLines="{lines}" '
        'NumberOfStrips="0" NumberOfPolys="0"'
    )
    groups: dict[str, Arrays] = {
        "FieldData": fields,
        "Points": {"points": points},
        "Lines" if as_lines else "Verts": {
            "connectivity": np.arange(len(points), dtype=np.int64),
            "offsets": cell_ends.astype(np.int64),
        },
        "CellData": cells,
    }
    _write(path, "PolyData", "", piece, groups)
