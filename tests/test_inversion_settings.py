"""Settings of the inversion."""

from __future__ import annotations

import numpy as np
import pytest
from pydantic import ValidationError

from inversion_cases import small_case, with_gross_errors
from rayloom.inversion import InversionSettings, invert


@pytest.mark.parametrize(
    ("values", "named"),
    [
        ({"correlation": (60.0, 60.0)}, "correlation"),
        ({"prior_std_percent": 0.0}, "prior_std_percent"),
        ({"correlation_km": (60.0, -1.0)}, "correlation_km"),
        ({"mislocation_std_km": float("nan")}, "mislocation_std_km"),
        ({"station_term_std_s": {"Q": 0.2}}, "station_term_std_s"),
        ({"min_picks_per_event": 1}, "min_picks_per_event"),
        ({"robust": "l1"}, "robust"),
        ({"outlier_std": 1.0}, "outlier_std"),
        ({"prior_factor_by_depth": [[100, 2.0], [50, 1.0]]}, "prior_factor_by_depth"),
        ({"prior_factor_by_depth": [[0, -2.0]]}, "prior_factor_by_depth"),
        ({"prior_factor_by_depth": [[0, 2.0]], "prior": "damping"}, "prior_factor_by_depth"),
        ({"decoupled_share": 1.5}, "decoupled_share"),
    ],
)
def test_values_outside_their_range_are_refused_by_name(
    values: dict[str, object], named: str
) -> None:
    with pytest.raises(ValidationError, match=named):
        InversionSettings.model_validate(values)


def test_station_terms_may_differ_by_wave() -> None:
    assert InversionSettings(station_term_std_s=0.3).station_term_std_of("S") == 0.3
    settings = InversionSettings.model_validate({"station_term_std_s": {"P": 0.1, "S": 0.5}})
    assert settings.station_term_std_of("P") == 0.1
    assert settings.station_term_std_of("S") == 0.5


@pytest.mark.parametrize("term", ["station_terms", "mislocation"])
def test_each_group_of_terms_can_be_left_out(term: str) -> None:
    case = small_case(stations=8, events=5)
    settings = InversionSettings.model_validate({term: False, "max_iterations": 1})
    result = invert(case.data, case.model, settings, forward=case.forward)
    assert (len(result.station_term_frame()) == 0) == (term == "station_terms")
    assert (len(result.mislocation_frame()) == 0) == (term == "mislocation")


@pytest.mark.parametrize("robust", ["huber", "student_t", "none"])
@pytest.mark.parametrize("reject", [True, False])
def test_every_kind_of_weight_runs(robust: str, reject: bool) -> None:
    case = with_gross_errors(small_case(stations=10, events=6), np.array([7]), 3.0)
    settings = InversionSettings.model_validate(
        {"robust": robust, "reject_outliers": reject, "prior_std_percent": 2.0}
    )
    result = invert(case.data, case.model, settings, forward=case.forward)
    assert result.history[-1].variance_reduction_percent > 60.0
    if robust == "none":
        assert result.weights[7] == 1.0
    elif reject:
        assert result.weights[7] == 0.0
    else:
        assert 0.0 < result.weights[7] < 0.3
