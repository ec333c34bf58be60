"""Temperature ranges of velocity anomalies, against published partial derivatives."""

from __future__ import annotations

import pytest

from rayloom.appraisal.temperature import temperature_partials, temperature_range
from rayloom.errors import InputError


def test_deep_partials_are_those_of_cammarano() -> None:
    """Cammarano et al. (2003): −0.23 ± 0.05 % per 100 K at 800 km depth."""
    assert temperature_partials(800.0) == pytest.approx((-0.28, -0.18))


def test_shallow_partials_span_both_sources() -> None:
    """Goes et al. (2000, memory): −0.5 to −2 %; Cammarano's −0.75 ± 0.15 lies within."""
    for depth_km in (60.0, 200.0):
        assert temperature_partials(depth_km) == pytest.approx((-2.0, -0.5))


def test_published_middle_lies_inside_at_every_depth() -> None:
    """Halfway between 200 and 800 km the line through the published values gives −0.49."""
    for depth_km, middle in ((200.0, -0.75), (500.0, -0.49), (800.0, -0.23)):
        strongest, weakest = temperature_partials(depth_km)
        assert strongest < middle < weakest


def test_range_covers_every_quotient_by_hand() -> None:
    """−3 to −2 % at 100 km: −2/−2·100 = 100 °C at least, −3/−0.5·100 = 600 °C at most."""
    found = temperature_range((-2.0, -3.0), 100.0)
    assert (found.lowest_c, found.highest_c) == pytest.approx((100.0, 600.0))


def test_fast_is_cold_and_an_undecided_sign_stays_undecided() -> None:
    fast = temperature_range((1.0, 2.0), 150.0)
    assert fast.highest_c < 0.0
    either = temperature_range((-1.0, 1.0), 150.0)
    assert either.lowest_c == pytest.approx(-either.highest_c)


def test_sources_alternatives_and_limits_travel_with_the_numbers() -> None:
    found = temperature_range((-3.0, -2.0), 100.0)
    assert any("Cammarano" in source for source in found.sources)
    assert {"melt", "water", "composition"} <= set(
        " ".join(found.alternatives).replace(":", " ").split()
    )
    assert "not a hazard assessment" in found.caveat
    assert "observatory" in found.caveat
    assert "licensed practice" in found.caveat
    assert "not a hazard assessment" in str(found)


@pytest.mark.parametrize(
    ("dvp_percent", "depth_km", "wave", "complaint"),
    [
        ((-1.0, -2.0), 900.0, "P", "outside the depths"),
        ((-1.0, float("nan")), 100.0, "P", "finite"),
        ((-1.0, -2.0), 100.0, "S", "P velocity only"),
    ],
)
def test_what_the_sources_do_not_cover_is_refused(
    dvp_percent: tuple[float, float], depth_km: float, wave: str, complaint: str
) -> None:
    with pytest.raises(InputError, match=complaint):
        temperature_range(dvp_percent, depth_km, wave=wave)
