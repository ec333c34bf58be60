"""Uncertainties rescaled by class of picks."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from inversion_cases import Case, Floats, small_case, with_gross_errors
from rayloom.inversion import (
    InversionResult,
    InversionSettings,
    InversionState,
    invert,
    linearise,
    load_state,
    save_state,
)

TRUE_FACTOR = {"AA": 1.0, "BB": 2.5, "CC": 0.5}
SETTINGS = InversionSettings.model_validate(
    {
        "prior_std_percent": 2.0,
        "rescale_uncertainties": ["phase", "network"],
        "station_term_errors": False,
    }
)


def standard_noise(rows: int) -> Floats:
    return np.random.default_rng(7).standard_normal(rows)


@pytest.fixture(scope="module")
def case() -> Case:
    """Three networks whose errors are 1, 2.5 and 0.5 times what is stated; three gross errors."""
    case = small_case(seed=11, events=50, noise_s=1e-9)
    names = np.array(["AA", "BB", "CC"])[np.arange(18) % 3]
    data = case.data
    network = names[data.station_index]
    noise = 0.05 * standard_noise(network.size)
    noise *= np.array([TRUE_FACTOR[name] for name in network.tolist()])
    data = replace(
        data,
        stations=replace(data.stations, network=names),
        residual_s=data.residual_s + noise,
        uncertainty_s=np.full(network.size, 0.05),
    )
    return with_gross_errors(replace(case, data=data), np.array([5, 100, 333]), 3.0)


@pytest.fixture(scope="module")
def result(case: Case) -> InversionResult:
    return invert(case.data, case.model, SETTINGS, forward=case.forward)


def test_factors_of_networks_come_back(case: Case, result: InversionResult) -> None:
    """Within 10 % of the standard deviation of the noise that was added to each network."""
    frame = result.uncertainty_frame()
    network = np.asarray(case.data.stations.network)[case.data.station_index]
    for name, factor in TRUE_FACTOR.items():
        drawn = factor * np.std(standard_noise(network.size)[network == name])
        found = frame.loc[frame["network"] == name, "factor"].to_numpy()
        np.testing.assert_allclose(found, drawn, rtol=0.1)
    last = result.history[-1]
    assert last.chi2 == pytest.approx(last.chi2_expected, rel=0.1)
    assert result.stopped_because.startswith("converged")
    assert set(np.flatnonzero(result.suspected_outlier)) >= {5, 100, 333}


def test_the_model_gains_by_it(case: Case, result: InversionResult) -> None:
    plain = invert(
        case.data,
        case.model,
        SETTINGS.model_copy(update={"rescale_uncertainties": ()}),
        forward=case.forward,
    )
    errors = [
        np.linalg.norm(one.model.slowness_s_per_km / one.model.reference - 1.0 - truth)
        for one in (result, plain)
        for truth in [case.perturbation.reshape(one.model.grid.shape)]
    ]
    assert errors[0] < errors[1]
    assert plain.uncertainty_factor is None
    assert len(plain.uncertainty_frame()) == 0


def test_the_frozen_problem_has_the_new_uncertainties(result: InversionResult) -> None:
    problem = linearise(result, SETTINGS)
    np.testing.assert_array_equal(
        problem.rows.uncertainty_s, result.uncertainty_s[problem.rows.data_row]
    )


def test_an_interrupted_run_goes_on_with_the_same_uncertainties(
    case: Case, result: InversionResult, tmp_path: Path
) -> None:
    kept: list[InversionState] = []
    invert(case.data, case.model, SETTINGS, forward=case.forward, checkpoint=kept.append)
    middle = next(state for state in kept if state.history[-1].uncertainty_change_percent > 0.0)
    save_state(tmp_path / "state.npz", middle)
    again = invert(
        case.data,
        case.model,
        SETTINGS,
        forward=case.forward,
        resume=load_state(tmp_path / "state.npz"),
    )
    np.testing.assert_array_equal(again.uncertainty_s, result.uncertainty_s)
    np.testing.assert_array_equal(again.model.slowness_s_per_km, result.model.slowness_s_per_km)
