"""What a trade-off says, in sentences for a person.

Main function: :func:`explain`.
"""

from __future__ import annotations

import math

import numpy as np

from rayloom.inversion.tradeoff.sweep import CurveChoice, Tradeoff

_UNCERTAINTIES_OFF = 1.2
_UNSEEN_OFF = 2.0
_HARDLY_A_CHOICE = 0.6


def explain(tradeoff: Tradeoff) -> list[str]:
    """Say which prior is recommended, why, what is as good and what to doubt.

    Parameters
    ----------
    tradeoff : Tradeoff
        What :func:`sweep` found.

    Returns
    -------
    list of str
        One sentence or two each; the first is the recommendation.
    """
    return [_recommended(tradeoff), _range(tradeoff), _other_rules(tradeoff), *_doubts(tradeoff)]


def _recommended(tradeoff: Tradeoff) -> str:
    row = tradeoff.recommended
    head = (
        f"recommended: {row.prior_std_percent:g} % and "
        f"{row.correlation_horizontal_km:g} × {row.correlation_vertical_km:g} km"
    )
    if not tradeoff.validated:
        return f"{head}: under this prior the data are most probable"
    return (
        f"{head}: of all priors that predict events left out as well as the best within one "
        "standard error it makes the data most probable; of those events it leaves a mean "
        f"square of {row.cross_validation:.3f} ± {row.cross_validation_error:.3f} in units of "
        "the uncertainties (1 if only noise were left)"
    )


def _range(tradeoff: Tradeoff) -> str:
    alike = tradeoff.equally_good
    if len(alike) == 1:
        return f"none of the other {len(tradeoff.rows) - 1} priors is as good"
    std = sorted(row.prior_std_percent for row in alike)
    reach = sorted(row.correlation_horizontal_km for row in alike)
    share = 100.0 * tradeoff.share_of_sign_kept
    return (
        f"{len(alike)} of {len(tradeoff.rows)} priors are as good, "
        f"{std[0]:g} to {std[-1]:g} % and {reach[0]:g} to {reach[-1]:g} km (horizontal); "
        f"{share:.0f} % of the volume crossed by rays keeps its sign in all of them"
    )


def _other_rules(tradeoff: Tradeoff) -> str:
    row = tradeoff.recommended
    lengths = (row.correlation_horizontal_km, row.correlation_vertical_km)
    choice = next(entry for entry in tradeoff.choices if entry.correlation_km == lengths)
    rules = ", ".join(
        f"{label} {_percent(getattr(choice, name))}"
        for name, label in (
            ("cross_validation", "cross-validation"),
            ("gcv", "GCV"),
            ("evidence", "evidence"),
            ("discrepancy", "expected χ²"),
            ("corner", "corner of the L-curve"),
        )
    )
    return f"with these lengths each rule would take: {rules}"


def _doubts(tradeoff: Tradeoff) -> list[str]:
    doubts = []
    reach = [choice.correlation_km[0] for choice in tradeoff.choices]
    at_end = tradeoff.recommended.correlation_horizontal_km in (min(reach), max(reach))
    if len(reach) > 1 and at_end:
        doubts.append(
            "the correlation lengths recommended lie at an end of those tried: look whether "
            "others between are as good, or try more ([tradeoff] correlation_km)"
        )
    if tradeoff.at_edge:
        doubts.append(
            "the prior recommended lies at an end of those tried: try more "
            "([tradeoff] prior_std_percent)"
        )
    if not tradeoff.converged:
        doubts.append("not all solutions converged: leave out the largest prior_std_percent")
    unseen = tradeoff.recommended.cross_validation
    if unseen > _UNSEEN_OFF:
        doubts.append(
            f"events left out are missed by {math.sqrt(unseen):.1f} times their uncertainties: "
            "these are too small, or the events tell of structure that the others do not see"
        )
    if len(tradeoff.equally_good) > _HARDLY_A_CHOICE * len(tradeoff.rows):
        doubts.append(
            "most priors are as good: the data hardly choose, and the map of signs says more "
            "than any one model"
        )
    scale = tradeoff.noise_scale
    if not 1.0 / _UNCERTAINTIES_OFF < scale < _UNCERTAINTIES_OFF:
        doubts.append(
            f"residuals scatter {scale:.2f} times as much as their uncertainties say; "
            "the choice does not hang on it, error bars do"
        )
    if _gcv_disagrees(tradeoff):
        doubts.append(
            "GCV would take another strength by more than a factor of 1.6: the structure "
            "is unlike a random field of one size, or errors are shared among stations"
        )
    return doubts


def _gcv_disagrees(tradeoff: Tradeoff) -> bool:
    choice: CurveChoice = next(
        entry
        for entry in tradeoff.choices
        if entry.correlation_km[0] == tradeoff.recommended.correlation_horizontal_km
    )
    ratio = choice.gcv / tradeoff.recommended.prior_std_percent
    return bool(abs(np.log(ratio)) > np.log(1.6))


def _percent(value: float) -> str:
    return "no answer" if math.isnan(value) else f"{value:.3g} %"
