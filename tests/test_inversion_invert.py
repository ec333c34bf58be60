"""The whole inversion on small problems whose rays are known functions of the model."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import least_squares
from threadpoolctl import threadpool_limits

from inversion_cases import (
    SLOWNESS,
    Case,
    Floats,
    StraightPaths,
    TracedPaths,
    plain_settings,
    shuffled,
    small_case,
    with_gross_errors,
)
from rayloom.errors import FileAccessError, InputError
from rayloom.inversion import (
    InversionResult,
    InversionSettings,
    InversionState,
    invert,
    load_state,
    matern_prior,
    save_state,
)
from rayloom.model import SlownessModel


def run(
    case: Case, settings: InversionSettings | None = None, **options: object
) -> InversionResult:
    return invert(case.data, case.model, settings, forward=case.forward, **options)  # type: ignore[arg-type]


def perturbation(result: InversionResult) -> Floats:
    model = result.model
    return (model.slowness_s_per_km / model.reference - 1.0).ravel()


def same_bits(one: InversionResult, other: InversionResult) -> bool:
    return (
        one.model.slowness_s_per_km.tobytes() == other.model.slowness_s_per_km.tobytes()
        and one.station_terms_s["P"].tobytes() == other.station_terms_s["P"].tobytes()
        and one.mislocation_km.tobytes() == other.mislocation_km.tobytes()
    )


@pytest.fixture(scope="module")
def case() -> Case:
    return small_case(curvature=0.1)


@pytest.fixture(scope="module")
def result(case: Case) -> InversionResult:
    return run(case)


def test_the_truth_comes_back_and_the_noise_is_left(case: Case, result: InversionResult) -> None:
    """Blocks crossed by many rays correlate with the truth; χ² meets its expectation."""
    crossed = result.model.fields["hits"].ravel() >= 10
    found = perturbation(result)[crossed]
    assert np.corrcoef(found, case.perturbation[crossed])[0, 1] > 0.6
    last = result.history[-1]
    assert last.chi2 == pytest.approx(last.chi2_expected, rel=0.35)
    assert last.variance_reduction_percent > 90.0
    assert result.stopped_because.startswith("converged")


def test_results_add_up(case: Case, result: InversionResult) -> None:
    data = case.data
    np.testing.assert_allclose(result.predicted_s + result.residual_after_s, data.residual_s)
    assert result.counts.data == 14 * 18
    assert result.counts.groups == 14
    assert abs(result.station_terms_s["P"].sum()) < 1e-12
    lengths = case.forward.lengths
    np.testing.assert_array_equal(
        result.model.fields["hits"].ravel(), np.bincount(lengths.indices, minlength=384)
    )
    frame = result.residual_frame()
    assert len(frame) == len(data.residual_s)
    assert frame["left_out_because"].eq("").all()
    assert len(result.history_frame()) == len(result.history)
    assert len(result.station_term_frame()) == 18
    assert len(result.mislocation_frame()) == 14


def test_the_minimum_of_the_curved_problem_is_reached() -> None:
    """Against scipy's dense nonlinear least squares on the same objective."""
    case = small_case(seed=3, events=6, stations=12, curvature=0.2)
    settings = plain_settings(
        model_tolerance=1e-5, misfit_tolerance=1e-9, max_iterations=30, solver_tolerance=1e-10
    )
    result = run(case, settings)
    prior = matern_prior(
        case.model.grid, standard_deviation=0.02, horizontal_km=60.0, vertical_km=60.0
    )
    data, lengths = case.data, case.forward.lengths
    group = np.eye(6)[data.event_index]
    project = np.eye(len(data.residual_s)) - group @ np.linalg.pinv(group)

    def residuals(white: Floats) -> Floats:
        change = SLOWNESS * (lengths @ prior.colour(white))
        left = data.residual_s - change + 0.2 * change**2
        return np.concatenate([project @ left / 0.05, white])

    columns = np.column_stack([prior.colour(white) for white in np.eye(prior.size)])
    seconds = SLOWNESS * (lengths @ columns)

    def slopes(white: Floats) -> Floats:
        slope = 2.0 * 0.2 * (seconds @ white) - 1.0
        return np.vstack([project @ (slope[:, None] * seconds) / 0.05, np.eye(prior.size)])

    best = least_squares(residuals, np.zeros(prior.size), jac=slopes, method="lm")
    assert result.history[-1].objective == pytest.approx(2.0 * best.cost, rel=1e-6)
    expected = prior.colour(best.x)
    np.testing.assert_allclose(perturbation(result), expected, atol=1e-3 * np.abs(expected).max())


def test_iterating_does_not_creep() -> None:
    """A linear problem is solved by its first step: the total model is regularised.

    Shaw & Orcutt (1985): jumping stays, creeping would go on to fit the noise.
    """
    case = small_case(seed=5)
    once = run(case, plain_settings(max_iterations=1))
    tight = plain_settings(model_tolerance=1e-9, misfit_tolerance=1e-12, max_iterations=5)
    often = run(case, tight)
    change = np.abs(perturbation(often) - perturbation(once)).max()
    assert change < 2e-4 * np.abs(perturbation(once)).max()


def test_shuffled_rows_give_the_same_bits(case: Case, result: InversionResult) -> None:
    order = np.random.default_rng(0).permutation(len(case.data.residual_s))
    other = run(shuffled(case, order))
    assert same_bits(result, other)
    np.testing.assert_array_equal(other.residual_after_s, result.residual_after_s[order])
    np.testing.assert_array_equal(other.weights, result.weights[order])


def test_one_and_two_threads_give_the_same_bits(case: Case) -> None:
    """Threads of the core and threads of the linear algebra library alike."""
    results = []
    for threads in (1, 2):
        with threadpool_limits(limits=threads):
            results.append(run(case, InversionSettings(threads=threads)))
    assert same_bits(*results)
    assert results[0].history[-1].chi2_expected == results[1].history[-1].chi2_expected


def test_gross_errors_are_named_and_hardly_move_the_model() -> None:
    clean = small_case(seed=7)
    rows = np.random.default_rng(1).choice(len(clean.data.residual_s), 8, replace=False)
    spoilt = with_gross_errors(clean, rows, 1.5)
    before, after = run(clean), run(spoilt)
    assert set(np.flatnonzero(after.suspected_outlier)) == set(rows)
    named = after.outlier_frame()
    assert len(named) == 8
    assert set(named["event"]) == {f"e{i:03d}" for i in clean.data.event_index[rows]}
    moved = np.linalg.norm(perturbation(after) - perturbation(before))
    plain = run(spoilt, InversionSettings(robust="none"))
    moved_plain = np.linalg.norm(perturbation(plain) - perturbation(before))
    assert moved < 0.5 * moved_plain


@dataclass
class Checkpoints:
    """Keeps every state, optionally interrupting after one of them."""

    states: list[InversionState]
    interrupt_after: int | None = None

    def __call__(self, state: InversionState) -> None:
        self.states.append(state)
        if state.iteration == self.interrupt_after:
            raise KeyboardInterrupt


def test_an_interrupted_run_goes_on_to_the_same_bits(
    case: Case, result: InversionResult, tmp_path: Path
) -> None:
    kept = Checkpoints([], interrupt_after=1)
    with pytest.raises(KeyboardInterrupt):
        run(case, checkpoint=kept)
    save_state(tmp_path / "state.npz", kept.states[-1])
    state = load_state(tmp_path / "state.npz")
    resumed = run(case, resume=state)
    assert same_bits(resumed, result)
    assert len(resumed.history) == len(result.history)
    assert resumed.history[-1].objective == result.history[-1].objective


def test_a_foreign_checkpoint_is_refused(case: Case, result: InversionResult) -> None:
    with pytest.raises(InputError, match="checkpoint belongs to other data"):
        run(case, InversionSettings(prior_std_percent=3.0), resume=result.state)


@pytest.mark.parametrize("content", [b"", b"\x00\x01binary", b"PK\x03\x04 cut short"])
def test_a_damaged_checkpoint_is_refused(content: bytes, tmp_path: Path) -> None:
    path = tmp_path / "state.npz"
    path.write_bytes(content)
    with pytest.raises(InputError, match="not a checkpoint"):
        load_state(path)


def test_a_missing_checkpoint_is_reported(tmp_path: Path) -> None:
    with pytest.raises(FileAccessError, match="cannot read"):
        load_state(tmp_path / "none.npz")


def test_progress_is_reported_and_may_interrupt(case: Case) -> None:
    stages = []
    run(case, progress=lambda stage, done, total: stages.append((stage, done, total)))
    expected = {"tracing", "choosing the prior", "solving", "errors of station terms"}
    assert {stage for stage, _, _ in stages} == expected

    def stop(stage: str, done: int, total: int) -> None:
        if stage == "solving":
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        run(case, progress=stop)


def test_rows_without_a_ray_are_left_out_and_listed(case: Case) -> None:
    whole_event = np.flatnonzero(case.data.event_index == 4).tolist()
    lost = (3, 40, *whole_event[:15])
    result = run(replace(case, forward=replace(case.forward, lost=lost)))
    assert result.counts.untraced == 2
    assert result.counts.data == 14 * 18 - 2 - 18
    assert result.counts.groups == 13
    (group,) = result.counts.left_out_groups
    assert (group.event, group.phase, group.picks) == ("e004", "P", 18)
    assert set(result.left_out_because[[3, 40]]) == {"no ray"}
    assert result.left_out_because[whole_event[-1]] == "3 of at least 5 picks have a ray"
    assert np.all(np.isnan(result.residual_after_s[list(lost)]))
    assert np.all(np.isnan(result.mislocation_km[4]))


def test_small_groups_and_other_waves_are_left_out(case: Case) -> None:
    data = case.data
    phase, wave = data.phase.copy(), data.wave.copy()
    event_two = data.event_index == 2
    phase[event_two], wave[event_two] = "S", "S"
    kept = np.flatnonzero((data.event_index != 5) | (data.station_index < 4))
    mixed = replace(data, phase=phase, wave=wave).select(kept)
    usable = kept[~event_two[kept] & (data.event_index[kept] != 5)]
    lengths = case.forward.lengths[usable]
    result = run(replace(case, data=mixed, forward=replace(case.forward, lengths=lengths)))
    reasons = {group.event: group.reason for group in result.counts.left_out_groups}
    assert reasons == {
        "e002": "the model is one of P waves",
        "e005": "4 of at least 5 picks",
    }
    assert result.counts.data == usable.size


def test_nothing_to_invert_is_explained(case: Case) -> None:
    with pytest.raises(InputError, match="min_picks_per_event"):
        run(case, InversionSettings(min_picks_per_event=19))
    every = tuple(range(len(case.data.residual_s)))
    with pytest.raises(InputError, match="rays could be traced"):
        run(replace(case, forward=replace(case.forward, lost=every)))
    s_model = SlownessModel(case.model.grid, case.model.reference, wave="S")
    with pytest.raises(InputError, match="no S residual"):
        run(replace(case, model=s_model))


@pytest.mark.parametrize(("column", "value"), [("residual_s", np.nan), ("uncertainty_s", 0.0)])
def test_bad_values_are_refused(case: Case, column: str, value: float) -> None:
    values = getattr(case.data, column).copy()
    values[17] = value
    with pytest.raises(InputError, match=f"{column}.* 17"):
        run(replace(case, data=replace(case.data, **{column: values})))


@dataclass(frozen=True)
class MisleadingPaths:
    """Paths whose derivative is three times too small: full steps overshoot."""

    inner: StraightPaths
    factor: float

    def __call__(
        self,
        model: SlownessModel,
        *,
        previous: object,
        progress: Callable[[int, int], None] | None,
    ) -> TracedPaths:
        true = self.inner(model, previous=previous, progress=progress)
        return replace(true, path_lengths=true.path_lengths * self.factor)


def test_steps_that_raise_the_objective_are_halved() -> None:
    case = small_case(seed=9)
    forward = MisleadingPaths(case.forward, 1.0 / 3.0)
    result = invert(case.data, case.model, plain_settings(prior_std_percent=3.0), forward=forward)
    objective = [row.objective for row in result.history]
    assert np.all(np.diff(objective) <= 0.0)
    assert min(row.step_length for row in result.history[1:]) <= 0.5
    assert objective[-1] < 0.5 * objective[0]


def test_a_direction_that_only_rises_stops_the_iterations() -> None:
    case = small_case(seed=9)
    forward = MisleadingPaths(case.forward, -1.0)
    result = invert(case.data, case.model, plain_settings(), forward=forward)
    assert "no step" in result.stopped_because
    assert len(result.history) == 1
    assert np.all(perturbation(result) == 0.0)


def test_the_iteration_limit_is_a_reason(case: Case) -> None:
    result = run(case, InversionSettings(max_iterations=1))
    assert result.stopped_because == "the limit of 1 iterations was reached"
    assert [row.iteration for row in result.history] == [0, 1]


def test_another_starting_model_leads_to_the_same_end() -> None:
    """The penalty is on the distance from the reference, wherever the iterations start."""
    case = small_case(seed=3, curvature=0.05)
    tight = plain_settings(
        model_tolerance=1e-4, misfit_tolerance=1e-8, max_iterations=20, solver_tolerance=1e-9
    )
    ratio = 1.0 + 0.5 * case.perturbation.reshape(case.model.grid.shape)
    moved = case.model.with_slowness(case.model.reference * ratio)
    one, other = run(case, tight), run(replace(case, model=moved), tight)
    scale = np.abs(perturbation(one)).max()
    np.testing.assert_allclose(perturbation(other), perturbation(one), atol=2e-3 * scale)


def test_classical_damping_and_smoothing_fits_as_well() -> None:
    case = small_case(seed=3)
    result = run(case, InversionSettings(prior="damping"))
    crossed = result.model.fields["hits"].ravel() >= 10
    found = perturbation(result)[crossed]
    assert np.corrcoef(found, case.perturbation[crossed])[0, 1] > 0.5
    assert result.history[-1].variance_reduction_percent > 90.0
