"""The inversion's least squares against certified regressions.

Data and certified values: NIST Statistical Reference Datasets (StRD), linear
regression: Norris, Longley, Wampler 1 to 5. The values below are from memory;
exact rational arithmetic on the data below reproduces every certified digit.

The intercept is the free mean of one group, which an inversion eliminates
exactly. The other coefficients are parameters with priors so broad
(10⁶ to 10⁷ times what one column needs to reach the data) that they do not
bear on the certified digits; the powers of Wampler's abscissa are given as
Legendre polynomials, as any solver in double precision would need them, and
the coefficients are converted back.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from numpy.polynomial import Legendre, Polynomial
from numpy.typing import NDArray
from scipy.sparse import csr_array

from rayloom.inversion import (
    GroupMeans,
    IndependentPrior,
    ParameterGroup,
    WhitenedSystem,
    group_standard_deviation,
    posterior_variance,
    solve,
)

Floats = NDArray[np.float64]

NORRIS_X = """
    0.2 337.4 118.2 884.6 10.1 226.5 666.3 996.3 448.6 777.0 558.2 0.4
    0.6 775.5 666.9 338.0 447.5 11.6 556.0 228.1 995.8 887.6 120.2 0.3
    0.3 556.8 339.1 887.2 999.0 779.0 11.1 118.3 229.2 669.1 448.9 0.5
"""
NORRIS_Y = """
    0.1 338.8 118.1 888.0 9.2 228.1 668.5 998.5 449.1 778.9 559.2 0.3
    0.1 778.1 668.8 339.3 448.9 10.8 557.7 228.3 998.0 888.8 119.6 0.3
    0.6 557.6 339.3 888.0 998.5 778.9 10.2 117.6 228.9 668.4 449.2 0.2
"""
LONGLEY = """
    60323 83.0 234289 2356 1590 107608 1947
    61122 88.5 259426 2325 1456 108632 1948
    60171 88.2 258054 3682 1616 109773 1949
    61187 89.5 284599 3351 1650 110929 1950
    63221 96.2 328975 2099 3099 112075 1951
    63639 98.1 346999 1932 3594 113270 1952
    64989 99.0 365385 1870 3547 115094 1953
    63761 100.0 363112 3578 3350 116219 1954
    66019 101.2 397469 2904 3048 117388 1955
    67857 104.6 419180 2822 2857 118734 1956
    68169 108.4 442769 2936 2798 120445 1957
    66513 110.8 444546 4681 2637 121950 1958
    68655 112.6 482704 3813 2552 123366 1959
    69564 114.2 502601 3931 2514 125368 1960
    69331 115.7 518173 4806 2572 127852 1961
    70551 116.9 554894 4007 2827 130081 1962
"""
LONGLEY_COEFFICIENTS = [
    15.0618722713733,
    -0.358191792925910e-01,
    -2.02022980381683,
    -1.03322686717359,
    -0.511041056535807e-01,
    1829.15146461355,
]
LONGLEY_ERRORS = [
    84.9149257747669,
    0.334910077722432e-01,
    0.488399681651699,
    0.214274163161675,
    0.226073200069370,
    455.478499142212,
]
WAMPLER_NOISE = """
    759 -2048 2048 -2048 2523 -2048 2048 -2048 1838 -2048 2048
    -2048 1838 -2048 2048 -2048 2523 -2048 2048 -2048 759
"""
WAMPLER_ERRORS = [
    2363.55173469681,
    779.343524331583,
    101.475507550350,
    5.64566512170752,
    0.112324854679312,
]


def numbers(text: str) -> Floats:
    return np.array(text.split(), dtype=np.float64)


@dataclass(frozen=True)
class Regression:
    """Coefficients without the intercept, their standard errors, and what is left."""

    coefficients: Floats
    intercept: float
    standard_errors: Floats
    residual_sd: float
    system: WhitenedSystem


def regress(columns: Floats, data: Floats) -> Regression:
    """Fit data by columns and a free mean, through the code of an inversion."""
    rows, count = columns.shape
    broad = 1e6 * np.linalg.norm(data) / np.linalg.norm(columns - columns.mean(0), axis=0)
    group = ParameterGroup("coefficients", csr_array(columns), IndependentPrior(broad))
    means = GroupMeans.of_rows(np.zeros(rows, dtype=np.int64), np.ones(rows))
    system = WhitenedSystem.of_groups([group], means)
    found = solve(system, system.whiten_rows(data), tolerance=1e-16, max_iterations=500)
    coefficients = system.parameters(found.white)[0]
    left = system.whiten_rows(data) - system.times(found.white)
    residual_sd = float(np.sqrt(left @ left / (rows - count - 1)))
    errors = group_standard_deviation(system, "coefficients", tolerance=1e-12)
    intercept = float(np.mean(data - columns @ coefficients))
    return Regression(coefficients, intercept, residual_sd * errors, residual_sd, system)


def test_norris() -> None:
    """A straight line through 36 points; 12 certified digits."""
    found = regress(numbers(NORRIS_X)[:, None], numbers(NORRIS_Y))
    np.testing.assert_allclose(found.coefficients, [1.00211681802045], rtol=1e-12)
    assert found.intercept == pytest.approx(-0.262323073774029, rel=1e-11)
    np.testing.assert_allclose(found.standard_errors, [0.429796848199937e-03], rtol=1e-11)
    assert found.residual_sd == pytest.approx(0.884796396144373, rel=1e-12)


def test_longley() -> None:
    """Six nearly collinear columns; 10 certified digits."""
    table = numbers(LONGLEY).reshape(16, 7)
    found = regress(table[:, 1:], table[:, 0])
    np.testing.assert_allclose(found.coefficients, LONGLEY_COEFFICIENTS, rtol=1e-10)
    assert found.intercept == pytest.approx(-3482258.63459582, rel=1e-10)
    np.testing.assert_allclose(found.standard_errors, LONGLEY_ERRORS, rtol=1e-10)
    assert found.residual_sd == pytest.approx(304.854073561965, rel=1e-11)


def wampler(coefficients: Floats, noise: float) -> tuple[Regression, Floats]:
    """Fit a polynomial of degree 5 at x = 0 … 20; its power coefficients as well."""
    x = np.arange(21.0)
    basis = [Legendre.basis(degree, domain=[0, 20]) for degree in range(6)]
    data = Polynomial(coefficients)(x) + noise * numbers(WAMPLER_NOISE)
    found = regress(np.column_stack([one(x) for one in basis[1:]]), data)
    return found, to_powers() @ np.append(found.intercept, found.coefficients)


def to_powers() -> Floats:
    """Matrix from Legendre coefficients on [0, 20] to those of the powers of x."""
    powers = np.zeros((6, 6))
    for degree in range(6):
        converted = Legendre.basis(degree, domain=[0, 20]).convert(
            kind=Polynomial, domain=[-1, 1], window=[-1, 1]
        )
        powers[: degree + 1, degree] = converted.coef
    return powers


@pytest.mark.parametrize(
    ("noise", "residual_sd"),
    [(1.0, 2360.14502379268), (1e2, 236014.502379268), (1e4, 23601450.2379268)],
)
def test_wampler_with_noise(noise: float, residual_sd: float) -> None:
    """Wampler 3, 4 and 5: all coefficients 1, noise up to 10⁴ times larger; 8 digits."""
    found, powers = wampler(np.ones(6), noise)
    np.testing.assert_allclose(powers, np.ones(6), rtol=2e-8)
    assert found.residual_sd == pytest.approx(residual_sd, rel=1e-12)
    prior = found.system.groups[0].prior
    rows = np.column_stack([prior.colour_adjoint(row) for row in to_powers()[1:, 1:]])
    errors = np.sqrt(posterior_variance(found.system, rows, tolerance=1e-12))
    certified = noise * np.array(WAMPLER_ERRORS)
    np.testing.assert_allclose(found.residual_sd * errors, certified, rtol=1e-9)


@pytest.mark.parametrize("base", [1.0, 0.1])
def test_wampler_without_noise(base: float) -> None:
    """Wampler 1 (all coefficients 1) and 2 (powers of 0.1): met exactly, 9 digits."""
    certified = base ** np.arange(6.0)
    found, powers = wampler(certified, 0.0)
    np.testing.assert_allclose(powers, certified, rtol=1e-9)
    assert found.residual_sd < 1e-8
