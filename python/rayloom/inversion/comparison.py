"""Straight, reference and bent rays inverted to the same misfit.

Main function: :func:`compare_rays`. All three see the rows and the frozen robust
weights of one finished inversion, so that a difference of the models is one of the rays.
"""

from __future__ import annotations

import time
from dataclasses import dataclass, replace
from typing import Any, Final, Literal

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]

from rayloom.inversion.assembly import build_problem
from rayloom.inversion.elimination import GroupMeans
from rayloom.inversion.forward_map import Report
from rayloom.inversion.inverting import invert
from rayloom.inversion.linearised import linearise
from rayloom.inversion.problem import Problem
from rayloom.inversion.result import InversionResult
from rayloom.inversion.settings import InversionSettings
from rayloom.inversion.tradeoff import (
    Bidiagonal,
    MarginalSystem,
    bidiagonalise,
    prior_settings,
)
from rayloom.model import SlownessModel
from rayloom.residuals import Residuals

Floats = NDArray[np.float64]
Method = Literal["straight", "reference", "bent"]

METHODS: Final[tuple[Method, ...]] = ("straight", "reference", "bent")
EQUAL_CHI2: Final = 0.02
"""Share by which the χ² of two methods may differ and still count as equal."""

_WEAKEST = 1.0 / 16.0
_STRONGEST = (4.0, 32.0)
"""Multiples of the inversion's prior strength, the second where the first does not suffice."""
_TOLERANCE = 1e-5
_MOST_STEPS = 600
_BISECTIONS = 40
_MOST_INVERSIONS = 5


@dataclass(frozen=True)
class RayInversion:
    """What one kind of rays makes of the data.

    Attributes
    ----------
    method : {"straight", "reference", "bent"}
        The rays.
    model : SlownessModel
        The model, with the field ``hits``.
    prior_std_percent : float
        Standard deviation of the prior that gives this χ², percent.
    chi2, data_count : float and int
        Weighted squared residuals, and the rows with weight.
    rms_s : float
        Root mean square of what is left, s.
    variance_reduction_percent : float
        Of the weighted residuals.
    seconds, seconds_tracing : float
        Time taken in all, and by tracing, s.
    equal : bool
        Whether χ² per row agrees with that of the inversion within 2 %.
    """

    method: Method
    model: SlownessModel
    prior_std_percent: float
    chi2: float
    data_count: int
    rms_s: float
    variance_reduction_percent: float
    seconds: float
    seconds_tracing: float
    equal: bool


def compare_rays(
    result: InversionResult, settings: InversionSettings, *, progress: Report | None = None
) -> tuple[RayInversion, ...]:
    """Invert the data of a finished inversion with each kind of rays, at equal χ².

    The inversion itself stands for its own kind. For each other kind the prior's
    strength is changed until χ² per row agrees: exactly for rays that stay, and by
    inverting anew for bent ones.

    Parameters
    ----------
    result : InversionResult
        The inversion.
    settings : InversionSettings
        Its settings.
    progress : callable, optional
        Told (stage, done, total).

    Returns
    -------
    tuple of RayInversion
        Straight, reference, bent.
    """
    with threadpool_limits(limits=1):
        own = _own(result, settings)
        comparison = _Comparison(result, settings, own, progress)
        return tuple(
            own if method == settings.method else comparison.other(method) for method in METHODS
        )


def _own(result: InversionResult, settings: InversionSettings) -> RayInversion:
    linear = linearise(result, settings)
    left = linear.system.whiten_rows(np.nan_to_num(result.residual_after_s[linear.rows.data_row]))
    return RayInversion(
        method=settings.method,
        model=result.model,
        prior_std_percent=_std_percent(result, settings),
        seconds=float(sum(row.seconds for row in result.history)),
        seconds_tracing=float(sum(row.seconds_tracing for row in result.history)),
        equal=True,
        **_fit(left, linear.system.whiten_rows(linear.rows.residual_s), linear.system.means),
    )


def _std_percent(result: InversionResult, settings: InversionSettings) -> float:
    """Return the standard deviation of the blocks' prior, or what stands for it, percent."""
    if settings.prior == "damping":
        return 100.0 / settings.damping
    return result.prior_std_percent


class _Comparison:
    def __init__(
        self,
        result: InversionResult,
        settings: InversionSettings,
        own: RayInversion,
        progress: Report | None,
    ) -> None:
        self._own = own
        self._data = _weighted(result)
        self._model = result.model.with_slowness(result.model.reference)
        self._mean = linearise(result, settings).prior_mean
        self._settings = settings.model_copy(
            update={
                "robust": "none",
                "rescale_uncertainties": (),
                "prior_mean": "reference",
                "min_picks_per_event": 2,
                "trace_probes": 0,
                "station_term_errors": False,
            }
        )
        self._lengths = _lengths_km(settings)
        self._progress = progress

    def other(self, method: Method) -> RayInversion:
        settings = self._settings.model_copy(update={"method": method})
        return self._bent(settings) if method == "bent" else self._fixed(settings)

    def _fixed(self, settings: InversionSettings) -> RayInversion:
        """Solve the linear problem of rays that stay, at the χ² wanted."""
        began = time.perf_counter()
        unit = prior_settings(settings, 1.0, self._lengths)
        problem = build_problem(self._data, self._model, unit, report=self._progress)
        traced_after = time.perf_counter() - began
        system, target_s = _linear(problem, self._mean)
        wanted = self._own.chi2 / self._own.data_count * int(np.sum(problem.active))
        for multiple in _STRONGEST:
            strongest = self._own.prior_std_percent * multiple
            found = bidiagonalise(
                system,
                system.right_hand_side(target_s),
                damping=1.0 / strongest,
                tolerance=_TOLERANCE,
                max_steps=_MOST_STEPS,
            )
            least = system.final_residual(found.residual(1.0 / strongest))
            if least @ least <= wanted:
                break
        std = _strength_of_chi2(
            system, found, wanted, (self._own.prior_std_percent * _WEAKEST, strongest)
        )
        left = system.final_residual(found.residual(1.0 / std))
        white = system.unknowns(left, damping=1.0 / std)
        fractional = self._mean + system.blocks.parameters(white)[0]
        return self._entry(
            settings,
            model=_model(problem, fractional),
            std=std,
            seconds=(time.perf_counter() - began, traced_after),
            fit=_fit(
                left,
                system.blocks.whiten_rows(problem.rows.residual_s),
                system.blocks.means,
            ),
        )

    def _bent(self, settings: InversionSettings) -> RayInversion:
        """Invert with bent rays, the prior's strength changed until χ² is that wanted."""
        wanted = self._own.chi2 / self._own.data_count
        logs, excesses = [np.log(self._own.prior_std_percent)], list[float]()
        while True:
            std = float(np.exp(logs[-1]))
            tried = prior_settings(settings, std, self._lengths)
            entry = self._inverted(tried, std)
            excesses.append(float(np.log(entry.chi2 / entry.data_count / wanted)))
            if abs(excesses[-1]) < 0.5 * EQUAL_CHI2 or len(excesses) == _MOST_INVERSIONS:
                return entry
            logs.append(logs[-1] + _next_step(logs, excesses))

    def _inverted(self, settings: InversionSettings, std: float) -> RayInversion:
        found = invert(self._data, self._model, settings, progress=self._progress)
        own = _own(found, settings)
        return self._entry(
            settings,
            model=found.model,
            std=std,
            seconds=(own.seconds, own.seconds_tracing),
            fit={name: getattr(own, name) for name in _FIT},
        )

    def _entry(
        self,
        settings: InversionSettings,
        *,
        model: SlownessModel,
        std: float,
        seconds: tuple[float, float],
        fit: dict[str, Any],
    ) -> RayInversion:
        own = self._own.chi2 / self._own.data_count
        return RayInversion(
            method=settings.method,
            model=model,
            prior_std_percent=std,
            seconds=seconds[0],
            seconds_tracing=seconds[1],
            equal=abs(fit["chi2"] / fit["data_count"] / own - 1.0) <= EQUAL_CHI2,
            **fit,
        )


_FIT: Final = ("chi2", "data_count", "rms_s", "variance_reduction_percent")


def _fit(left: Floats, data: Floats, means: GroupMeans) -> dict[str, Any]:
    """Measure what is left of weighted data, both without group means."""
    root = means.root_weights
    active = root > 0.0
    seconds = left[active] / root[active]
    return {
        "chi2": float(left @ left),
        "data_count": int(np.sum(active)),
        "rms_s": float(np.sqrt(np.mean(seconds**2))),
        "variance_reduction_percent": 100.0 * (1.0 - float(left @ left) / float(data @ data)),
    }


def _weighted(result: InversionResult) -> Residuals:
    """Rows with weight, the robust weights taken into their uncertainties."""
    kept = result.used & (result.weights > 0.0)
    uncertainty_s = result.uncertainty_s[kept] / np.sqrt(result.weights[kept])
    return replace(result.data.select(kept), uncertainty_s=uncertainty_s)


def _linear(problem: Problem, prior_mean: Floats) -> tuple[MarginalSystem, Floats]:
    """Set up the linear problem of the reference model's rays."""
    reference = problem.explain(
        np.zeros(problem.unknown_count), problem.model, problem.reference_rays, problem.active
    )
    system = problem.system(reference, problem.active.astype(np.float64))
    target_s = problem.rows.residual_s - system.groups[0].matrix @ prior_mean
    marginal = MarginalSystem.of_system(system, threads=problem.settings.threads)
    return marginal, np.where(problem.active, target_s, 0.0)


def _strength_of_chi2(
    system: MarginalSystem, found: Bidiagonal, wanted: float, bounds: tuple[float, float]
) -> float:
    """Find the standard deviation, percent, at which χ² has a value; χ² falls as it grows."""
    low, high = np.log(bounds)
    for _ in range(_BISECTIONS):
        middle = 0.5 * (low + high)
        left = system.final_residual(found.residual(float(np.exp(-middle))))
        if left @ left > wanted:
            low = middle
        else:
            high = middle
    return float(np.exp(0.5 * (low + high)))


def _next_step(logs: list[float], excesses: list[float]) -> float:
    """Change of the logarithm of the strength: a secant, at first a usual slope."""
    slope = -0.4
    if len(logs) > 1 and excesses[-1] != excesses[-2]:
        secant = (excesses[-1] - excesses[-2]) / (logs[-1] - logs[-2])
        slope = min(secant, -0.05)
    return float(np.clip(-excesses[-1] / slope, -1.0, 1.0))


def _model(problem: Problem, fractional: Floats) -> SlownessModel:
    grid = problem.model.grid
    paths = problem.reference_rays.path_lengths
    hits = np.bincount(paths.indices, minlength=grid.block_count).astype(np.float64)
    slowness = problem.model.reference * (1.0 + fractional.reshape(grid.shape))
    return problem.model.with_slowness(slowness).with_fields(hits=hits.reshape(grid.shape))


def _lengths_km(settings: InversionSettings) -> tuple[float, float]:
    """Correlation lengths, or smoothing over damping, which stands for them."""
    if settings.prior == "damping":
        horizontal, vertical = (length / settings.damping for length in settings.smoothing_km)
        return (horizontal, vertical)
    return settings.correlation_km
