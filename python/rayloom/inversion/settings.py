"""Settings of the inversion."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Literal, Self

from pydantic import BaseModel, ConfigDict, Field, model_validator

from rayloom.inversion.robust import Huber, LeastSquares, Rejecting, RobustLoss, StudentT

Positive = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]
Finite = Annotated[float, Field(allow_inf_nan=False)]
NotNegative = Annotated[float, Field(ge=0.0, allow_inf_nan=False)]


class InversionSettings(BaseModel):
    """What is inverted for, what is believed beforehand, and when to stop."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    method: Literal["bent", "reference", "straight"] = Field(
        default="bent",
        description="Rays: bent (retraced in every model), reference (traced once in the "
        "one-dimensional model) or straight (chords).",
    )
    quality: Literal["standard", "thorough"] = Field(
        default="standard", description="How hard the tracer looks for the earliest ray."
    )
    threads: int | None = Field(
        default=None, ge=1, description="Threads for rays and products; all cores if not given."
    )

    prior: Literal["correlated", "damping"] = Field(
        default="correlated",
        description="correlated: perturbations have the standard deviation and correlation "
        "lengths below; damping: classical damping and smoothing.",
    )
    prior_std_percent: Literal["auto"] | Positive = Field(
        default="auto",
        description="Expected size of the perturbations: one standard deviation, percent; "
        "auto: the value at which the data are most probable.",
    )
    correlation_km: tuple[Positive, Positive] = Field(
        default=(60.0, 60.0),
        description="Distances at which the correlation of two perturbations falls to 1/e: "
        "horizontal and vertical, km.",
    )
    prior_mean: Literal["reference", "starting_model"] = Field(
        default="reference",
        description="What the model falls back to where data are silent: the reference, or the "
        "starting model.",
    )
    prior_factor_by_depth: tuple[tuple[Finite, Positive], ...] = Field(
        default=(),
        description="Pairs of depth, km, and factor of the standard deviation there, linear in "
        "between, such as [[0, 1.5], [200, 1.0], [660, 0.5]].",
    )
    decoupled_depths_km: tuple[Finite, ...] = Field(
        default=(),
        description="Depths across which perturbations hardly correlate, such as [410, 660]; "
        "edges of blocks, km.",
    )
    decoupled_share: Annotated[float, Field(ge=0.0, le=1.0)] = Field(
        default=0.1,
        description="Share of the coupling left there: 0 cuts it, 1 leaves it whole.",
    )
    damping: Positive = Field(
        default=50.0,
        description="For prior = damping: weight of the size of a fractional perturbation "
        "(50 alone stands for 2 %).",
    )
    smoothing_km: tuple[NotNegative, NotNegative] = Field(
        default=(3000.0, 3000.0),
        description="For prior = damping: weight of the first differences per km, horizontal "
        "and vertical, km.",
    )

    station_terms: bool = Field(
        default=True, description="Solve for one delay per station and phase (they sum to zero)."
    )
    station_term_std_s: Positive | dict[Literal["P", "S"], Positive] = Field(
        default=0.2,
        description="Expected size of the station terms, s: one number, or one per wave "
        "such as { P = 0.2, S = 0.5 }.",
    )
    station_term_errors: bool = Field(
        default=True,
        description="Work out the standard error of each station term about the last model.",
    )
    mislocation: bool = Field(
        default=True, description="Solve for the shift of each event from its catalogue position."
    )
    mislocation_std_km: Positive = Field(
        default=10.0, description="Expected size of each component of that shift, km."
    )
    min_picks_per_event: int = Field(
        default=5,
        ge=2,
        description="Fewest picks of an event and phase; smaller groups are left out.",
    )

    rescale_uncertainties: tuple[Literal["phase", "network", "station"], ...] = Field(
        default=(),
        description="Multiply uncertainties by one factor per class of picks, as their residuals "
        'ask; ["phase", "network"] makes a class of each phase at each network.',
    )

    robust: Literal["huber", "student_t", "none"] = Field(
        default="huber", description="How large residuals lose weight."
    )
    huber_k: Positive = Field(
        default=1.345, description="Standard deviations beyond which Huber weights fall."
    )
    student_degrees_of_freedom: Positive = Field(
        default=4.0, description="Degrees of freedom of Student's t: few mean heavy tails."
    )
    outlier_std: Positive = Field(
        default=4.0,
        description="Standard deviations beyond which a pick is listed as a suspected outlier.",
    )
    reject_outliers: bool = Field(
        default=True,
        description="Suspected outliers lose all weight once the model has nearly settled "
        "(with robust = none they keep it).",
    )

    max_iterations: int = Field(default=8, ge=1, description="Most models solved for.")
    retrace_change_s: NotNegative = Field(
        default=0.0,
        description="Trace only those bent rays anew along which the slowness changed by more "
        "than this since they were traced, s; 0 traces all in every model.",
    )
    reweightings: int = Field(
        default=3,
        ge=1,
        description="Most rounds of robust weighting per model, between retracings.",
    )
    model_tolerance: Positive = Field(
        default=0.03,
        description="Stop once a step changes less than this share of the model …",
    )
    misfit_tolerance: Positive = Field(
        default=0.005, description="… and lowers the objective by less than this share."
    )
    max_halvings: int = Field(
        default=3, ge=0, description="How often a step that raises the objective is halved."
    )
    solver_tolerance: Positive = Field(
        default=1e-5, lt=1.0, description="Relative accuracy asked of the least-squares solver."
    )
    solver_max_iterations: int = Field(
        default=3000, ge=1, description="Most steps of the least-squares solver."
    )
    trace_probes: int = Field(
        default=2,
        ge=0,
        description="Random probes per iteration for the expected misfit; 0 leaves it out.",
    )
    seed: int = Field(default=20, ge=0, description="Seed of the random probes.")

    @model_validator(mode="after")
    def _outliers_are_downweighted(self) -> Self:
        if self.robust == "huber" and self.outlier_std <= self.huber_k:
            raise ValueError(
                f"outlier_std ({self.outlier_std:g}) must exceed huber_k ({self.huber_k:g})"
            )
        return self

    @model_validator(mode="after")
    def _depths_rise(self) -> Self:
        depths = [depth for depth, _ in self.prior_factor_by_depth]
        if any(below <= above for above, below in pairwise(depths)):
            raise ValueError("the depths of prior_factor_by_depth must rise")
        if depths and self.prior == "damping":
            raise ValueError("prior_factor_by_depth needs prior = correlated")
        return self

    def loss(self, *, rejecting: bool) -> RobustLoss:
        """Return the loss that the settings choose.

        Parameters
        ----------
        rejecting : bool
            Whether suspected outliers lose all weight.
        """
        if self.robust == "none":
            return LeastSquares()
        loss: RobustLoss
        loss = (
            Huber(self.huber_k)
            if self.robust == "huber"
            else StudentT(self.student_degrees_of_freedom)
        )
        return Rejecting(loss, self.outlier_std) if rejecting else loss

    @property
    def rejects_outliers(self) -> bool:
        """Whether suspected outliers lose all weight in the end."""
        return self.reject_outliers and self.robust != "none"

    @property
    def starting_prior_std_percent(self) -> float:
        """Standard deviation of the perturbations, percent; where the search starts for auto."""
        return 1.0 if self.prior_std_percent == "auto" else self.prior_std_percent

    @property
    def chooses_prior(self) -> bool:
        """Whether the data choose the standard deviation of the perturbations."""
        return self.prior == "correlated" and self.prior_std_percent == "auto"

    def with_prior_std_percent(self, std_percent: float) -> Self:
        """Return the same settings with the standard deviation that was chosen."""
        return self.model_copy(update={"prior_std_percent": std_percent})

    def station_term_std_of(self, wave: str) -> float:
        """Return the expected size of a wave's station terms, s (the other wave's if unset)."""
        chosen = self.station_term_std_s
        if not isinstance(chosen, dict):
            return chosen
        sizes = {str(key): value for key, value in chosen.items()}
        return sizes[wave] if wave in sizes else next(iter(sizes.values()), 0.2)
