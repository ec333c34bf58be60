"""Checks of traced rays that anyone can run: :func:`check_rays`."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError
from rayloom.forward.local import trace
from rayloom.forward.rays import Rays
from rayloom.forward.settings import Quality
from rayloom.model import SlownessModel

Floats = NDArray[np.float64]

STEP = 1e-4
"""Relative change of slowness in the finite differences."""

MOST_SUM_S = 1e-5
"""Largest difference between a time and the sum over its path."""


@dataclass(frozen=True)
class CheckedQuantity:
    """One quantity over the rays checked.

    Attributes
    ----------
    name : str
        What was compared.
    unit : str
        Unit of the figures: ms, or % of the sum of absolute changes.
    count : int
        Number of rays.
    mean, p95, largest : float
        Mean, 95th percentile and maximum.
    limit : float or None
        What the largest may not exceed; None where the figures only inform.
    """

    name: str
    unit: str
    count: int
    mean: float
    p95: float
    largest: float
    limit: float | None = None

    @property
    def holds(self) -> bool:
        """Whether the limit is kept."""
        return self.limit is None or self.largest <= self.limit


@dataclass(frozen=True)
class RayCheck:
    """What :func:`check_rays` found; printed, it is a table.

    Attributes
    ----------
    sums : CheckedQuantity
        Times against path lengths times slowness plus the time outside.
    graph : CheckedQuantity
        How much later a ray is than the path of the coarse graph between its ends.
    reciprocity : CheckedQuantity
        Difference between tracing forth and back.
    gradient : CheckedQuantity
        Path lengths times a change of slowness against the change of the times:
        by Fermat's principle the derivative of a time by the slowness of a block is
        the length in it.
    """

    sums: CheckedQuantity
    graph: CheckedQuantity
    reciprocity: CheckedQuantity
    gradient: CheckedQuantity

    @property
    def quantities(self) -> tuple[CheckedQuantity, ...]:
        """All of them."""
        return (self.sums, self.graph, self.reciprocity, self.gradient)

    @property
    def holds(self) -> bool:
        """Whether every limit is kept."""
        return all(quantity.holds for quantity in self.quantities)

    def __str__(self) -> str:
        head = ("", "rays", "mean", "95 %", "largest", "limit", "unit")
        rows = [head] + [
            (
                one.name,
                str(one.count),
                f"{one.mean:.3g}",
                f"{one.p95:.3g}",
                f"{one.largest:.3g}",
                "" if one.limit is None else f"{one.limit:g}" + ("" if one.holds else " MISSED"),
                one.unit,
            )
            for one in self.quantities
        ]
        widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
        lines = [
            "  ".join(
                cell.rjust(width) if 0 < place < len(head) - 1 else cell.ljust(width)
                for place, (cell, width) in enumerate(zip(row, widths, strict=True))
            ).rstrip()
            for row in rows
        ]
        return "\n".join(lines)


def check_rays(
    model: SlownessModel,
    rays: Rays,
    *,
    count: int = 20,
    quality: Quality = "standard",
    threads: int | None = None,
    seed: int = 0,
) -> RayCheck:
    """Check bent rays against what must hold for them.

    The sums are checked for all rays. For the rest some rays are drawn and traced
    anew between their first and last point: along the graph, forth and back, and in
    two models whose slowness differs by ±0.01 % at random, block by block.

    Parameters
    ----------
    model : SlownessModel
        The model the rays were traced in.
    rays : Rays
        Bent rays, of distant events or between points inside.
    count : int
        Number of rays drawn.
    quality : {"standard", "thorough"}
        Quality of the new rays; that of `rays` to compare like with like.
    threads : int, optional
        Number of threads; all cores by default.
    seed : int
        Seed of the draw and of the changes.

    Returns
    -------
    RayCheck
        Figures in ms and percent; print it.

    Raises
    ------
    InputError
        If no ray was traced, or the rays run through other blocks.
    """
    if rays.grid.shape != model.grid.shape or not rays.traced.any():
        raise InputError("expected rays traced in the model", where="rays")
    random = np.random.default_rng(seed)
    drawn = np.sort(
        random.choice(
            np.flatnonzero(rays.traced), min(count, int(rays.traced.sum())), replace=False
        )
    )
    first, last = _ends(rays, drawn)
    pairs = np.column_stack([np.arange(drawn.size)] * 2)

    def times(model: SlownessModel, start: Floats, end: Floats, *, graph: bool = False) -> Rays:
        method = "graph" if graph else "bent"
        options = {"pairs": pairs, "quality": quality, "threads": threads}
        return trace(model, start, end, method=method, **options)  # type: ignore[arg-type]

    inside = (rays.time_s - rays.outside_time_s)[drawn]
    forth = times(model, first, last)
    later = inside - times(model, first, last, graph=True).time_s
    back = forth.time_s - times(model, last, first).time_s
    change = STEP * random.standard_normal(model.grid.shape)
    slowness = model.slowness_s_per_km
    late, early = (
        times(model.with_slowness(slowness * (1.0 + sign * change)), first, last).time_s
        for sign in (1.0, -1.0)
    )
    expected = forth.path_lengths @ (slowness * change).ravel()
    scale = forth.path_lengths @ (slowness * abs(change)).ravel()
    sums = (rays.predict_s(slowness) - rays.time_s)[rays.traced]
    return RayCheck(
        sums=_quantity("time − (G s + outside)", "ms", 1e3 * abs(sums), 1e3 * MOST_SUM_S),
        graph=_quantity(
            "later than the graph", "ms", 1e3 * np.maximum(later, 0.0), 1e3 * MOST_SUM_S
        ),
        reciprocity=_quantity("forth − back", "ms", 1e3 * abs(back)),
        gradient=_quantity(
            "G δs − change of time", "%", 100.0 * abs(0.5 * (late - early) - expected) / scale
        ),
    )


def _ends(rays: Rays, drawn: NDArray[np.int64]) -> tuple[Floats, Floats]:
    """First and last points of some rays, rounding beyond the blocks taken off."""
    grid = rays.grid
    edges = (grid.x_edges, grid.y_edges, grid.depth_edges_km)
    low, high = (np.array([axis[end] for axis in edges]) for end in (0, -1))
    starts, ends = rays.point_offsets[drawn], rays.point_offsets[drawn + 1] - 1
    first, last = (np.clip(rays.all_points[at], low, high) for at in (starts, ends))
    return first, last


def _quantity(name: str, unit: str, values: Floats, limit: float | None = None) -> CheckedQuantity:
    return CheckedQuantity(
        name,
        unit,
        values.size,
        float(values.mean()),
        float(np.percentile(values, 95.0)),
        float(values.max()),
        limit,
    )
