"""Figures of a trade-off: its curves, and what all equally good models have in common."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from rayloom.inversion.tradeoff import Tradeoff, TriedPrior
from rayloom.outputs.slices import figure_depth_slices
from rayloom.outputs.style import (
    INK,
    PAGE_WIDTH_IN,
    BlockField,
    ColourScale,
    look,
    slow_red,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from rayloom.survey import Stations

Measure = Callable[[TriedPrior], float]
_HEIGHT_IN = 4.6
_FAR_ABOVE_BEST = 6.0


def figure_tradeoff(tradeoff: Tradeoff) -> Figure:
    """Draw the L-curve, cross-validation, GCV and evidence of all priors tried.

    Parameters
    ----------
    tradeoff : Tradeoff
        From :func:`rayloom.inversion.tradeoff.sweep`.

    Returns
    -------
    Figure
        One line per pair of correlation lengths; dots are equally good priors, the
        star is the one recommended.
    """
    from matplotlib.figure import Figure

    with look():
        figure = Figure(figsize=(PAGE_WIDTH_IN, _HEIGHT_IN))
        axes = figure.subplots(2, 2)
        figure.subplots_adjust(0.08, 0.17, 0.985, 0.95, wspace=0.25, hspace=0.38)
        _draw_l_curve(axes[0, 0], tradeoff)
        validated = not np.isnan(tradeoff.recommended.cross_validation)
        measures: list[tuple[str, Measure]] = [
            ("GCV", lambda row: row.gcv),
            ("Log evidence below the best", _below_best(tradeoff)),
        ]
        if validated:
            measures.insert(0, ("Mean square of events left out", _cross_validation))
        panels = [axes[0, 1], axes[1, 0], axes[1, 1]]
        for panel, (label, measure) in zip(panels, measures, strict=False):
            _draw_measure(panel, tradeoff, label, measure)
        for panel in panels[len(measures) :]:
            panel.set_axis_off()
        if validated:
            _draw_error(panels[0], tradeoff)
        for number, panel in enumerate([axes[0, 0], *panels[: len(measures)]]):
            panel.set_title(f"({chr(97 + number)})", loc="left", fontweight="bold", pad=4)
            panel.spines[["top", "right"]].set_visible(False)
        _legend(figure, tradeoff)
    return figure


def agreement_field(tradeoff: Tradeoff) -> BlockField:
    """Prepare the weakest perturbation among equally good models for drawing.

    Blocks whose sign differs among them, and blocks without rays, are grey.

    Parameters
    ----------
    tradeoff : Tradeoff
        From :func:`rayloom.inversion.tradeoff.sweep`.
    """
    least = tradeoff.agreement.least_percent
    shown = (tradeoff.agreement.sign != 0.0) & (tradeoff.model.fields["hits"] > 0)
    typical = np.quantile(np.abs(least[shown]), 0.997) if shown.any() else 0.0
    limit = max(0.5, float(np.ceil(2.0 * typical) / 2.0))
    scale = ColourScale(
        label=f"Weakest dV{tradeoff.model.wave.lower()} of {len(tradeoff.equally_good)} "
        "equally good models (%)",
        lowest=-limit,
        highest=limit,
        colours=slow_red(),
        ends=("slow", "fast"),
    )
    return BlockField(
        values=least, shown=shown, scale=scale, hidden_label="sign differs, or no rays"
    )


def figure_agreement(
    tradeoff: Tradeoff,
    *,
    stations: Stations | npt.ArrayLike | None = None,
    depths_km: Sequence[float] | None = None,
) -> Figure:
    """Draw maps of what keeps its sign in all equally good models.

    Parameters
    ----------
    tradeoff : Tradeoff
        From :func:`rayloom.inversion.tradeoff.sweep`.
    stations : Stations or array-like, shape (n, 3), optional
        Stations, or points x, y, depth_km in the frame.
    depths_km : sequence of float, optional
        Depths wanted; see :func:`rayloom.outputs.slices.choose_layers`.

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        A depth lies outside the grid.
    """
    return figure_depth_slices(
        tradeoff.model, stations=stations, depths_km=depths_km, field=agreement_field(tradeoff)
    )


def _cross_validation(row: TriedPrior) -> float:
    return row.cross_validation


def _below_best(tradeoff: Tradeoff) -> Measure:
    best = max(row.log_evidence for row in tradeoff.rows)
    return lambda row: best - row.log_evidence


def _curves(tradeoff: Tradeoff) -> list[list[TriedPrior]]:
    """Rows of each pair of correlation lengths, standard deviations rising."""
    return [
        sorted(
            (
                row
                for row in tradeoff.rows
                if (row.correlation_horizontal_km, row.correlation_vertical_km)
                == choice.correlation_km
            ),
            key=lambda row: row.prior_std_percent,
        )
        for choice in tradeoff.choices
    ]


def _colours(count: int) -> list[tuple[float, float, float, float]]:
    from cmcrameri import cm

    return [tuple(cm.batlow(share)) for share in np.linspace(0.02, 0.8, count)]


def _draw_l_curve(axes: Axes, tradeoff: Tradeoff) -> None:
    _draw_lines(axes, tradeoff, lambda row: row.block_norm, lambda row: row.block_misfit_norm)
    axes.set_xscale("log")
    axes.set_yscale("log")
    axes.set_xlabel("Norm of the model, in its prior of 1 %")
    axes.set_ylabel("Norm of the misfit")
    _plain_ticks(axes.xaxis)
    _plain_ticks(axes.yaxis)


def _draw_measure(axes: Axes, tradeoff: Tradeoff, label: str, measure: Measure) -> None:
    _draw_lines(axes, tradeoff, lambda row: row.prior_std_percent, measure)
    values = np.array([measure(row) for row in tradeoff.rows])
    best = float(values.min())
    near = np.sort([min(map(measure, curve)) for curve in _curves(tradeoff)])
    spread = max(float(near[-1]) - best, 0.012 * abs(best), 20.0 if best == 0.0 else 0.0)
    axes.set_ylim(best - 0.6 * spread, best + _FAR_ABOVE_BEST * spread)
    axes.set_xscale("log")
    axes.set_xlabel("Prior standard deviation (%)")
    axes.set_ylabel(label)
    _plain_ticks(axes.xaxis)


def _draw_lines(axes: Axes, tradeoff: Tradeoff, across: Measure, up: Measure) -> None:
    curves = _curves(tradeoff)
    for curve, colour in zip(curves, _colours(len(curves)), strict=True):
        axes.plot([*map(across, curve)], [*map(up, curve)], "-", color=colour, linewidth=1.0)
        alike = [row for row in curve if row.equally_good]
        axes.plot([*map(across, alike)], [*map(up, alike)], "o", color=colour, markersize=3.2)
    best = tradeoff.recommended
    axes.plot(
        across(best),
        up(best),
        "*",
        markersize=9,
        markerfacecolor="white",
        markeredgecolor=INK,
        markeredgewidth=0.8,
        zorder=5,
    )


def _draw_error(axes: Axes, tradeoff: Tradeoff) -> None:
    """Shade the scores within one standard error of the best."""
    best = min(tradeoff.rows, key=_cross_validation)
    top = best.cross_validation + best.cross_validation_error
    axes.axhspan(best.cross_validation, top, color="0.9", zorder=0)


def _plain_ticks(axis: object) -> None:
    from matplotlib.axis import Axis
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

    if isinstance(axis, Axis):
        axis.set_major_locator(LogLocator(subs=(1.0, 1.5, 2.0, 3.0, 5.0, 7.0)))
        axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
        axis.set_minor_formatter(NullFormatter())


def _legend(figure: Figure, tradeoff: Tradeoff) -> None:
    from matplotlib.lines import Line2D

    colours = _colours(len(tradeoff.choices))
    marks = [
        Line2D([], [], color=colour, label=_lengths(choice.correlation_km))
        for choice, colour in zip(tradeoff.choices, colours, strict=True)
    ]
    marks.append(Line2D([], [], linestyle="", marker="o", color="0.4", label="equally good"))
    marks.append(
        Line2D(
            [],
            [],
            linestyle="",
            marker="*",
            markersize=8,
            markerfacecolor="white",
            markeredgecolor=INK,
            label="recommended",
        )
    )
    figure.legend(
        handles=marks,
        loc="lower center",
        ncols=min(len(marks), 8),
        title="Correlation lengths, horizontal × vertical",
        title_fontsize=6.5,
        columnspacing=1.2,
        handlelength=1.6,
    )


def _lengths(pair: tuple[float, float]) -> str:
    return f"{pair[0]:g} × {pair[1]:g} km"
