"""The trade-off against dense algebra, plain loops and truths drawn from the prior."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from inversion_cases import plain_settings, small_case, with_gross_errors
from rayloom.inversion import (
    InversionSettings,
    LinearisedProblem,
    block_prior,
    invert,
    linearise,
)
from rayloom.inversion.tradeoff import (
    Accuracy,
    Agreement,
    Curve,
    EventScores,
    MarginalSystem,
    TradeoffSettings,
    cross_validate,
    explain,
    measure_curve,
    prior_settings,
    recommend,
    sweep,
)

Floats = NDArray[np.float64]
SETTINGS = plain_settings(
    station_terms=True, mislocation=True, robust="huber", prior_std_percent=2.0, threads=1
)
TIGHT = Accuracy(tolerance=1e-9, probes=100)
DAMPING = np.array([0.25, 1.0, 4.0])


@pytest.fixture(scope="module")
def problem() -> LinearisedProblem:
    case = with_gross_errors(small_case(events=10, stations=14), np.array([3, 17]), 3.0)
    return linearise(invert(case.data, case.model, SETTINGS, forward=case.forward), SETTINGS)


def dense(problem: LinearisedProblem) -> tuple[Floats, Floats]:
    """Columns of the blocks and of all other groups, whitened and freed of means."""
    columns = np.column_stack(
        [problem.system.times(unit) for unit in np.eye(problem.system.shape[1])]
    )
    blocks = problem.system.groups[0].size
    return columns[:, :blocks], columns[:, blocks:]


def test_strength_of_the_blocks_alone_changes(problem: LinearisedProblem) -> None:
    """Data covariance K = I + T Tᵀ + B Bᵀ/λ², solved densely (textbook Gaussian algebra)."""
    blocks, terms = dense(problem)
    data = problem.right_hand_side
    system = MarginalSystem.of_system(problem.system, threads=1)
    curve, found = measure_curve(
        system, problem.target_s, DAMPING, free_count=problem.free_count, accuracy=TIGHT
    )
    outside = data.size - problem.free_count
    unit = np.eye(data.size) + terms @ terms.T
    for index, damping in enumerate(DAMPING.tolist()):
        covariance = unit + blocks @ blocks.T / damping**2
        residual = np.linalg.solve(covariance, data)
        trace = float(np.trace(np.linalg.inv(covariance))) - outside
        volume = np.linalg.slogdet(covariance)[1] - np.linalg.slogdet(unit)[1]
        noise = data @ residual / problem.free_count
        evidence = -0.5 * (problem.free_count * (1.0 + np.log(noise)) + volume)
        assert curve.chi2[index] == pytest.approx(residual @ residual, rel=1e-6)
        assert curve.objective[index] == pytest.approx(data @ residual, rel=1e-6)
        assert curve.chi2_expected[index] == pytest.approx(trace, rel=0.05)
        assert curve.log_evidence[index] == pytest.approx(evidence, abs=5.0)
        final = system.final_residual(found.residual(damping))
        np.testing.assert_allclose(
            system.unknowns(final, damping=damping), blocks.T @ residual / damping**2, atol=1e-6
        )
        np.testing.assert_allclose(system.terms.white(final), terms.T @ residual, atol=1e-6)


def test_cross_validation_equals_fits_without_the_events(problem: LinearisedProblem) -> None:
    """Each fold refitted densely with free means; its events' own shifts estimated anew."""
    grid = problem.model.grid
    priors = [block_prior(grid, prior_settings(SETTINGS, 1.0, (60.0, 60.0)))]
    damping = np.array([0.5, 1.0])
    system = MarginalSystem.of_system(problem.system, threads=1)
    scores = cross_validate(problem, system, priors, damping, folds=3, accuracy=TIGHT)
    names, event = np.unique(problem.rows.event, return_inverse=True)
    fold = np.random.default_rng(TIGHT.seed).permutation(names.size) % 3
    expected = sum(
        left_of_fold(problem, system.with_prior(priors[0]), fold[event] == number, damping)
        for number in range(3)
    )
    np.testing.assert_allclose(scores.squares.sum(axis=0)[0], expected, rtol=1e-6)
    assert scores.freedom.sum() == problem.free_count


def left_of_fold(
    problem: LinearisedProblem,
    system: MarginalSystem,
    tested: NDArray[np.bool_],
    damping: Floats,
) -> Floats:
    """Squared residuals of the events left out, by dense least squares."""
    root = problem.system.means.root_weights
    group = problem.system.groups[0]
    blocks = np.column_stack([group.matrix @ e for e in np.eye(group.size)])
    coloured = np.array([system.blocks.groups[0].prior.colour_adjoint(row) for row in blocks])
    others = np.hstack(
        [
            np.array([g.prior.colour_adjoint(row) for row in g.matrix.toarray()])
            for g in problem.system.groups[1:]
        ]
    )
    means = (problem.rows.group[:, None] == np.arange(problem.rows.group.max() + 1)) * 1.0
    stations = problem.system.groups[1].size
    sums = []
    for strength in damping.tolist():
        columns = np.hstack([coloured / strength, others, means])
        penalty = np.concatenate([np.ones(columns.shape[1] - means.shape[1]), 0 * means[0]])
        seen = np.where(tested, 0.0, root)[:, None] * columns
        found = np.linalg.lstsq(
            np.vstack([seen, np.diag(penalty)]),
            np.concatenate([np.where(tested, 0.0, root) * problem.target_s, 0 * penalty]),
            rcond=None,
        )[0]
        known = found.copy()
        known[coloured.shape[1] + stations :] = 0.0
        rest = np.where(tested, root, 0.0) * (problem.target_s - columns @ known)
        own = np.where(tested, root, 0.0)[:, None] * columns[:, coloured.shape[1] + stations :]
        ridge = np.diag(penalty[coloured.shape[1] + stations :])
        again = np.linalg.lstsq(
            np.vstack([own, ridge]), np.concatenate([rest, np.zeros(len(ridge))]), rcond=None
        )[0]
        sums.append(float(np.sum((rest - own @ again) ** 2) + np.sum((ridge @ again) ** 2)))
    return np.array(sums)


def test_recommended_models_are_nearly_the_best() -> None:
    """Ten truths drawn from the prior: error at most 1.1 times the sweep's least in nine."""
    settings = InversionSettings.model_validate(
        {
            "robust": "none",
            "trace_probes": 0,
            "prior_std_percent": 2.0,
            "mislocation": False,
            "station_term_errors": False,
            "threads": 1,
        }
    )
    tried = TradeoffSettings(
        prior_std_percent=(0.5, 0.7, 1.0, 1.4, 2.0, 2.8, 4.0),
        correlation_km=((30.0, 30.0), (60.0, 60.0), (120.0, 120.0)),
        probes=4,
    )
    close = 0
    for seed in range(1, 11):
        case = small_case(seed=seed)
        found = invert(case.data, case.model, settings, forward=case.forward)
        linear = linearise(found, settings)
        truth = 100.0 * (1.0 / (1.0 + case.perturbation) - 1.0)
        errors = [
            float(np.linalg.norm(percent.ravel() - truth))
            for percent in models_of(linear, settings, tried)
        ]
        model = sweep(linear, settings, tried).model
        error = float(np.linalg.norm(model.perturbation_percent.ravel() - truth))
        close += error <= 1.1 * min(errors)
    assert close >= 9


def models_of(
    problem: LinearisedProblem, settings: InversionSettings, tried: TradeoffSettings
) -> list[Floats]:
    """Linear estimates under every prior, by dense algebra in the space of the rows."""
    system = problem.system
    root, means = system.means.root_weights, system.means
    blocks = np.array([means.project(c) for c in (root[:, None] * block_columns(problem)).T]).T
    terms = np.column_stack(
        [system.times(unit) for unit in np.eye(system.shape[1])[system.groups[0].size :]]
    )
    unit = np.eye(len(blocks)) + terms @ terms.T
    models = []
    for pair in tried.lengths_km((60.0, 60.0)):
        prior = block_prior(problem.model.grid, prior_settings(settings, 1.0, pair))
        columns = np.array([prior.colour_adjoint(row) for row in blocks])
        gram = columns @ columns.T
        for std in tried.prior_std_percent:
            residual = np.linalg.solve(unit + std**2 * gram, problem.right_hand_side)
            fractional = prior.colour(std**2 * columns.T @ residual)
            models.append(100.0 * (1.0 / (1.0 + fractional) - 1.0))
    return models


def block_columns(problem: LinearisedProblem) -> Floats:
    return np.asarray(problem.system.groups[0].matrix.toarray())


def test_a_sweep_tells_everything(problem: LinearisedProblem) -> None:
    tried = TradeoffSettings(prior_std_percent=(0.5, 1.0, 2.0, 4.0), folds=4, probes=3)
    steps: list[tuple[int, int]] = []
    found = sweep(
        problem, SETTINGS, tried, progress=lambda _, done, total: steps.append((done, total))
    )
    assert len(found.rows) == 4 * 5
    assert steps[-1][0] == steps[-1][1] == 5 * (1 + 3 + 4)
    assert sum(row.recommended for row in found.rows) == 1
    assert found.recommended in found.equally_good
    assert found.validated
    assert list(found.frame()["prior_std_percent"][:4]) == [4.0, 2.0, 1.0, 0.5]
    assert explain(found)[0].startswith(f"recommended: {found.recommended.prior_std_percent:g} %")
    fields = found.model.fields
    percent = found.model.perturbation_percent
    assert np.all(fields["lowest_percent"] <= percent + 1e-9)
    assert np.all(percent <= fields["highest_percent"] + 1e-9)


def test_without_cross_validation_the_evidence_decides(problem: LinearisedProblem) -> None:
    tried = TradeoffSettings(prior_std_percent=(0.5, 1.0, 2.0), folds=0, probes=3)
    found = sweep(problem, SETTINGS, tried)
    assert not found.validated
    assert found.recommended.log_evidence == max(row.log_evidence for row in found.rows)
    assert np.isnan(found.recommended.cross_validation)


def test_damping_and_smoothing_stand_for_the_same_sizes() -> None:
    """Weights 50 and 3000 km stand for 2 % and 60 km (the defaults of the settings)."""
    damped = InversionSettings(prior="damping")
    changed = prior_settings(damped, 1.0, (60.0, 30.0))
    assert changed.damping == pytest.approx(100.0)
    assert changed.smoothing_km == pytest.approx((6000.0, 3000.0))


def curve_with(log_evidence: list[float]) -> Curve:
    values = np.array(log_evidence)
    ones = np.ones_like(values)
    return Curve(
        damping=np.arange(1.0, values.size + 1.0),
        chi2=ones,
        chi2_expected=50.0 * ones,
        solution_norm=ones,
        marginal_norm=ones,
        objective=ones,
        resolved=ones,
        gcv=ones,
        log_evidence=values,
        noise_scale=ones,
        curvature=ones,
        free_count=100,
        converged=True,
    )


def test_the_evidence_decides_among_priors_that_predict_equally_well() -> None:
    """The one-standard-error rule of Breiman et al. (1984) bounds the choice."""
    per_event = np.array([[9.0, 5.0, 5.2, 5.4]] * 6) + np.array([-1, 1, -1, 1, -1, 1])[:, None]
    scores = EventScores(squares=per_event[:, None, :], freedom=np.full(6, 5.0))
    chosen = recommend([curve_with([9.0, 5.0, 6.0, 7.0])], scores)
    assert chosen.equally_good.tolist() == [[False, True, True, True]]
    assert (chosen.curve, chosen.damping) == (0, 3)
    assert chosen.at_edge


def test_a_standard_error_comes_from_the_spread_among_events() -> None:
    """√(Σ(x − x̄)²/(n(n − 1))), the standard error of a mean (textbook)."""
    per_event = np.array([3.0, 5.0, 4.0, 8.0])
    scores = EventScores(squares=per_event[:, None, None] * 2.0, freedom=np.full(4, 2.0))
    assert scores.score[0, 0] == pytest.approx(5.0)
    assert scores.standard_error[0, 0] == pytest.approx(np.std(per_event, ddof=1) / 2.0)


def test_signs_agree_only_where_all_models_do() -> None:
    one = np.array([[[1.0, -2.0, 0.5, 0.0]]])
    two = np.array([[[3.0, -1.0, -0.5, 1.0]]])
    agreement = Agreement.of_models([one, two])
    assert agreement.sign.ravel().tolist() == [1.0, -1.0, 0.0, 0.0]
    assert agreement.least_percent.ravel().tolist() == [1.0, -1.0, 0.0, 0.0]
