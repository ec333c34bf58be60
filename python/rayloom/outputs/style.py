"""The common look of all figures: sizes, colours, the scale of a field, saving."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np
import numpy.typing as npt

from rayloom.errors import InputError
from rayloom.model import SlownessModel
from rayloom.writing import replacing

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.colors import Colormap
    from matplotlib.figure import Figure

PAGE_WIDTH_IN: Final = 7.1
"""Full text width of a journal page (180 mm)."""

COLUMN_WIDTH_IN: Final = 3.5
"""One column of a journal page (89 mm)."""

NO_DATA_COLOUR: Final = "#c4c4c4"
"""Blocks that no ray crosses: a grey clearly darker than the middle of the scale."""

INK: Final = "#262626"

_LOOK: Final[dict[Any, Any]] = {
    "font.family": "DejaVu Sans",
    "font.size": 7.0,
    "axes.titlesize": 7.5,
    "axes.labelsize": 7.5,
    "axes.linewidth": 0.6,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.labelsize": 6.5,
    "ytick.labelsize": 6.5,
    "xtick.direction": "out",
    "ytick.direction": "out",
    "xtick.major.size": 2.5,
    "ytick.major.size": 2.5,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "legend.fontsize": 6.5,
    "legend.frameon": False,
    "hatch.linewidth": 0.4,
    "svg.hashsalt": "rayloom",
    "pdf.fonttype": 42,
}


@contextmanager
def look() -> Iterator[None]:
    """Draw under the common look, whatever the person's own defaults are."""
    import matplotlib as mpl

    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(_LOOK)
        yield


def slow_red() -> Colormap:
    """Give the colours for perturbations of velocity: negative (slow) red, positive blue.

    References
    ----------
    Crameri, F. (2018), Scientific colour maps: `vik`, here reversed.
    """
    from cmcrameri import cm

    colours: Colormap = cm.vik_r
    return colours


def late_red() -> Colormap:
    """Give the colours for residuals: positive (late) red, negative blue (Crameri's `vik`)."""
    from cmcrameri import cm

    colours: Colormap = cm.vik
    return colours


def station_look(count: int, *, full_size: float = 2.8) -> dict[str, Any]:
    """Return the look of station triangles, smaller where there are many.

    Parameters
    ----------
    count : int
        Stations drawn.
    full_size : float
        Size of up to a hundred, in points.

    Returns
    -------
    dict
        Arguments of matplotlib's ``plot`` after the marker.
    """
    shrunk = full_size * min(1.0, (100.0 / max(count, 1)) ** 0.5)
    size = max(1.3, shrunk)
    return {
        "markersize": size,
        "markerfacecolor": "white",
        "markeredgecolor": INK,
        "markeredgewidth": 0.16 * size,
    }


@dataclass(frozen=True)
class ColourScale:
    """How numbers become colours.

    Attributes
    ----------
    label : str
        Label of the colour bar.
    lowest, highest : float
        Ends of the scale.
    colours : Colormap
        The colour map.
    ends : tuple of str
        Words above the ends of the colour bar.
    """

    label: str
    lowest: float
    highest: float
    colours: Colormap
    ends: tuple[str, str] = ("", "")


@dataclass(frozen=True)
class BlockField:
    """One value per block and how to draw it.

    Attributes
    ----------
    values : array, shape (nx, ny, nz)
        The values.
    shown : array of bool, shape (nx, ny, nz)
        False where the block is greyed.
    scale : ColourScale
        Colours of the values.
    hidden_label : str
        Why blocks are greyed.
    """

    values: npt.NDArray[np.float64]
    shown: npt.NDArray[np.bool_]
    scale: ColourScale
    hidden_label: str = "no rays"


def perturbation_field(
    model: SlownessModel, *, colour_limit_percent: float | None = None
) -> BlockField:
    """Prepare the velocity perturbation for drawing, on a symmetric scale.

    Blocks are shown where the model's field ``hits`` is positive, all of them
    where the model has no such field.

    Parameters
    ----------
    model : SlownessModel
        The model.
    colour_limit_percent : float, optional
        End of the colour scale; when None, the absolute perturbation
        that 0.3 % of the blocks shown exceed, rounded up to half a percent.

    Returns
    -------
    BlockField
        Perturbation in percent; slow is negative and red.

    Raises
    ------
    InputError
        The limit is not positive.
    """
    values = np.asarray(model.perturbation_percent)
    hits = model.fields.get("hits")
    shown = np.isfinite(values) if hits is None else np.asarray(hits) > 0
    limit = colour_limit_percent
    if limit is None:
        typical = np.quantile(np.abs(values[shown]), 0.997) if shown.any() else 0.0
        limit = max(0.5, float(np.ceil(2.0 * typical) / 2.0))
    if not limit > 0:
        raise InputError(f"colour_limit_percent is {limit:g}; expected a positive number")
    scale = ColourScale(
        label=f"dV{model.wave.lower()} relative to the regional mean (%)",
        lowest=-limit,
        highest=limit,
        colours=slow_red(),
        ends=("slow", "fast"),
    )
    return BlockField(values=values, shown=shown, scale=scale)


def draw_colour_bar(axes: Axes, scale: ColourScale) -> None:
    """Fill axes with a horizontal colour bar that is open at both ends."""
    from matplotlib.cm import ScalarMappable
    from matplotlib.colors import Normalize

    mappable = ScalarMappable(Normalize(scale.lowest, scale.highest), scale.colours)
    bar = axes.figure.colorbar(mappable, cax=axes, orientation="horizontal", extend="both")
    bar.set_label(scale.label, labelpad=2)
    bar.outline.set_linewidth(0.5)
    for share, word, side in ((0.0, scale.ends[0], "left"), (1.0, scale.ends[1], "right")):
        axes.annotate(
            word,
            (share, 1.0),
            xycoords="axes fraction",
            xytext=(0, 2),
            textcoords="offset points",
            ha=side,
            va="bottom",
            fontsize=6.5,
            fontstyle="italic",
        )


def legend_marks(*, has_stations: bool, hidden_label: str) -> list[Any]:
    """Make the marks of the legend below maps and sections."""
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    marks: list[Any] = [Patch(facecolor=NO_DATA_COLOUR, label=hidden_label)]
    if has_stations:
        marks.append(Line2D([], [], linestyle="", marker="^", label="station", **station_look(1)))
    return marks


def save_figure(
    figure: Figure,
    path: str | Path,
    *,
    formats: Sequence[str] = ("png",),
    dpi: int = 200,
) -> list[Path]:
    """Write a figure in one or several formats, each all or nothing.

    Parameters
    ----------
    figure : Figure
        The figure.
    path : str or Path
        The name without suffix.
    formats : sequence of str
        ``png``, ``pdf`` or ``svg``.
    dpi : int
        Dots per inch.

    Returns
    -------
    list of Path
        The files written.

    Raises
    ------
    FileAccessError
        A file cannot be written.
    """
    base = Path(path)
    written = []
    with look():
        for ending in formats:
            final = base.with_name(f"{base.name}.{ending}")
            metadata: dict[str, Any] = {} if ending == "png" else {_DATE_KEY[ending]: None}
            with replacing(final) as temporary:
                figure.savefig(temporary, format=ending, dpi=dpi, metadata=metadata)
            written.append(final)
    return written


_DATE_KEY: Final = {"pdf": "CreationDate", "svg": "Date"}
