"""Models of other solvers, traced and judged here."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.sparse.linalg import lsqr

from inversion_cases import Case, plain_settings, small_case
from rayloom.errors import FileAccessError, InputError
from rayloom.inversion import InversionSettings, adopt_model, invert
from rayloom.workflow.importing import read_block_vector

SETTINGS = InversionSettings(prior_std_percent=2.0)


@pytest.fixture(scope="module")
def case() -> Case:
    return small_case(curvature=0.1)


def test_our_own_model_explains_as_much_when_it_comes_back(case: Case) -> None:
    """The same blocks, their terms solved for again: the same misfit (consistency)."""
    found = invert(case.data, case.model, SETTINGS, forward=case.forward)
    back = adopt_model(case.data, found.model, SETTINGS, forward=case.forward)
    ours, theirs = found.history[-1], back.history[-1]
    np.testing.assert_array_equal(back.model.slowness_s_per_km, found.model.slowness_s_per_km)
    assert theirs.prior_misfit == pytest.approx(ours.prior_misfit, rel=0.02)
    assert theirs.chi2 == pytest.approx(ours.chi2, rel=0.02)
    assert theirs.chi2_expected == pytest.approx(ours.chi2_expected, rel=0.05)
    np.testing.assert_allclose(back.station_terms_s["P"], found.station_terms_s["P"], atol=0.01)
    assert len(back.history) == 2


def test_a_damped_solution_of_scipy_is_judged(case: Case) -> None:
    """LSQR of scipy on path lengths with the event means taken off by hand."""
    data, lengths = case.data, case.forward.lengths
    event = np.eye(14)[data.event_index]
    mean_free = np.eye(len(data.residual_s)) - event @ np.linalg.pinv(event)
    change = lsqr(mean_free @ lengths.toarray(), mean_free @ data.residual_s, damp=300.0)[0]
    model = case.model.with_slowness(case.model.reference + change.reshape(8, 8, 6))
    settings = plain_settings(prior_std_percent=2.0)
    result = adopt_model(data, model, settings, forward=case.forward)
    predicted = lengths @ change
    predicted = predicted - 0.1 * predicted**2
    left = mean_free @ (data.residual_s - predicted)
    np.testing.assert_allclose(result.residual_after_s, left, atol=1e-9)
    assert result.history[-1].chi2 == pytest.approx(np.sum((left / 0.05) ** 2), rel=1e-9)


@pytest.mark.parametrize("quantity", ["percent", "slowness", "slowness-change"])
@pytest.mark.parametrize("ending", [".npy", ".csv"])
def test_vectors_of_every_kind_are_read(
    case: Case, tmp_path: Path, quantity: str, ending: str
) -> None:
    model = case.model
    slowness = model.reference * (1.0 + 0.02 * np.sin(np.arange(384)).reshape(8, 8, 6))
    column, values = {
        "percent": ("perturbation_percent", 100.0 * (model.reference / slowness - 1.0)),
        "slowness": ("slowness_s_per_km", slowness),
        "slowness-change": ("slowness_change_s_per_km", slowness - model.reference),
    }[quantity]
    path = tmp_path / f"vector{ending}"
    if ending == ".npy":
        np.save(path, values.ravel())
    else:
        rows = [f"{block},{value!r}" for block, value in enumerate(values.ravel().tolist())]
        path.write_text("\n".join([f"block,{column}", *rows[::-1]]))
    read = read_block_vector(path, model, quantity=quantity)
    np.testing.assert_allclose(read.slowness_s_per_km, slowness, rtol=1e-13)


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ("block,dv\n0,1\n", "expected one of perturbation_percent"),
        ("perturbation_percent\n1\n2\n", "one value for each of 384 blocks"),
        ("block,perturbation_percent\n" + "0,1\n" * 384, "does not name each of 0 to 383 once"),
        ("perturbation_percent\n" + "nan\n" * 384, "block 0 has no finite value"),
        ("perturbation_percent\n" + "-100\n" * 384, "leaves no velocity"),
        ("slowness_change_s_per_km\n" + "-1\n" * 384, "expected positive ones"),
        ("perturbation_percent\n" + "slow\n" * 384, "cannot be read as one value per block"),
    ],
)
def test_faults_of_a_vector_are_named(case: Case, tmp_path: Path, content: str, said: str) -> None:
    path = tmp_path / "vector.csv"
    path.write_text(content)
    with pytest.raises(InputError, match=said):
        read_block_vector(path, case.model)


def test_a_missing_vector_is_reported(case: Case, tmp_path: Path) -> None:
    with pytest.raises(FileAccessError, match="cannot be read"):
        read_block_vector(tmp_path / "none.npy", case.model)
