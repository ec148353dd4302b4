"""Distributions by their moments: conversions, quantiles, and what no distribution has."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from ngm.engine.distributions import ARGUMENTS, SamplingError, natural_parameters, quantile


def moments(mean, sd):
    return {"mean": mean, "sd": sd}


# Published formulas, values recomputed elsewhere to ten digits.
@pytest.mark.parametrize(
    ("name", "mean", "sd", "expected", "upper_quantile"),
    [
        ("lognormal", 0.2, 0.04, {"log_mean": -1.629048269, "log_sd": 0.1980422004}, 0.2891260032),
        ("gamma", 0.2, 0.04, {"shape": 25, "scale": 0.008}, 0.2856807808),
        ("beta", 0.7, 0.1, {"alpha": 14, "beta": 6}, 0.8742393641),
    ],
)
def test_conversions(name, mean, sd, expected, upper_quantile):
    assert natural_parameters(name, moments(mean, sd)) == pytest.approx(expected, rel=1e-9)
    assert float(quantile(name, moments(mean, sd), 0.975)) == pytest.approx(upper_quantile, rel=1e-9)


# By hand: quarters of a uniform; a triangle from 0 over 2 to 8 holds a quarter below its mode, F = x^2/16 there and
# 1 - (8 - x)^2/48 beyond.
def test_bounded_by_hand():
    assert quantile("uniform", {"low": -1, "high": 3}, [0, 0.25, 1]).tolist() == [-1, 0, 3]
    triangle = {"low": 0, "mode": 2, "high": 8}
    u = [0, 1 / 16, 0.25, 1 - 12 / 48, 1]
    assert quantile("triangular", triangle, u) == pytest.approx([0, 1, 2, 8 - math.sqrt(12), 8], rel=1e-15)
    assert quantile("triangular", {"low": 0, "mode": 0, "high": 1}, 0.75) == pytest.approx(0.5)
    assert quantile("triangular", {"low": 0, "mode": 1, "high": 1}, 0.25) == pytest.approx(0.5)


# By hand: mean 0.5 and variance 1/12 are those of the uniform distribution, alpha = beta = 1; a share in per cent is the
# same hundredfold; the exponential distribution is gamma with sd = mean.
def test_special_cases_by_hand():
    u = np.array([0.1, 0.5, 0.95])
    assert quantile("beta", moments(0.5, math.sqrt(1 / 12)), u) == pytest.approx(u, rel=1e-12)
    assert quantile("beta", moments(70, 10), u, upper=100) == pytest.approx(
        100 * quantile("beta", moments(0.7, 0.1), u)
    )
    assert quantile("gamma", moments(3, 3), u) == pytest.approx(-3 * np.log1p(-u), rel=1e-12)


def reference(name, arguments):
    """Return scipy.stats' own distribution with these moments or bounds: the second route, by its own conversions."""
    if name == "uniform":
        return stats.uniform(arguments["low"], arguments["high"] - arguments["low"])
    if name == "triangular":
        width = arguments["high"] - arguments["low"]
        return stats.triang((arguments["mode"] - arguments["low"]) / width, arguments["low"], width)
    mean, sd = arguments["mean"], arguments["sd"]
    if name == "normal":
        return stats.norm(mean, sd)
    if name == "lognormal":
        s2 = math.log(1 + sd**2 / mean**2)
        return stats.lognorm(math.sqrt(s2), scale=mean * math.exp(-s2 / 2))
    if name == "gamma":
        return stats.gamma(mean**2 / sd**2, scale=sd**2 / mean)
    size = mean * (1 - mean) / sd**2 - 1
    return stats.beta(mean * size, (1 - mean) * size)


@st.composite
def distributions(draw):
    name = draw(st.sampled_from(list(ARGUMENTS)))
    a, b, c = sorted(draw(st.lists(st.floats(0, 10), min_size=3, max_size=3)))
    if name in ("uniform", "triangular"):
        return name, {"low": a, "high": c + 0.1} | ({"mode": b} if name == "triangular" else {})
    if name == "beta":
        mean = draw(st.floats(0.02, 0.98))
        return name, moments(mean, draw(st.floats(0.02, 0.9)) * math.sqrt(mean * (1 - mean)))
    mean = draw(st.floats(1e-3, 1e3))
    return name, moments(mean, draw(st.floats(0.01, 2)) * mean)


@given(distribution=distributions(), u=st.lists(st.floats(0.001, 0.999), min_size=1, max_size=5))
def test_second_route(distribution, u):
    name, arguments = distribution
    found, other = quantile(name, arguments, u), reference(name, arguments)
    assert np.allclose(found, other.ppf(u), rtol=1e-9, atol=1e-12)
    # The moments asked for are those of the quantity itself.
    if "mean" in arguments:
        assert other.mean() == pytest.approx(arguments["mean"], rel=1e-9)
        assert other.std() == pytest.approx(arguments["sd"], rel=1e-6)
    # Each entry by itself: chunks change nothing.
    assert [float(quantile(name, arguments, share)) for share in u] == found.tolist()


# Second route: the incomplete gamma function at 40 digits. The shape decides which formula is used: both sides of 1e5.
@pytest.mark.parametrize("shape", [0.99e5, 1.01e5, 1e6])
@pytest.mark.parametrize("u", [1e-9, 1e-6, 0.025, 0.3, 0.975])
def test_gamma_of_large_shape(shape, u):
    x = float(quantile("gamma", moments(shape, math.sqrt(shape)), u))
    with mpmath.workdps(40):
        below = mpmath.gammainc(mpmath.mpf(shape), 0, mpmath.mpf(x), regularized=True)
    # Rounding of x, half an ulp, is 7e-12 near 1e5: times the hazard, 0.02 at most, 1.4e-13 of u. Without the last term of
    # the expansion 1e-10 would be missing at u = 1e-9.
    assert float(below) == pytest.approx(u, rel=1e-11, abs=0)


# By hand: at a coefficient of variation of 1e-6 a gamma variable is normal to (z^2 - 1)/3 of a millionth of its sd.
def test_narrow_gamma_is_normal():
    u = np.array([1e-9, 0.2, 0.5, 1 - 1e-9])
    z = (quantile("gamma", moments(1, 1e-6), u) - 1) / 1e-6
    assert z == pytest.approx(stats.norm.ppf(u), abs=2e-5)
    assert quantile("gamma", moments(1, 1e-6), [0.0, 1.0]).tolist() == [0, math.inf]


@pytest.mark.parametrize(
    ("name", "arguments", "words"),
    [
        ("weibull", moments(1, 1), "'weibull' is not a distribution that is known here: uniform, triangular"),
        ("gamma", {"mean": 1}, "gamma: sd is missing. It takes mean, sd."),
        ("gamma", {"mean": 1, "sd": 1, "shape": 1}, "gamma: 'shape' is not an argument. It takes mean, sd."),
        ("normal", moments(math.nan, 1), "normal: mean = nan is not finite."),
        ("uniform", {"low": 2, "high": 2}, "uniform: low = 2 is not below high = 2."),
        ("triangular", {"low": 2, "mode": 2, "high": 1}, "triangular: low = 2 is not below high = 1."),
        ("triangular", {"low": 0, "mode": 3, "high": 1}, "triangular: mode = 3 lies outside low to high (0 to 1)."),
        ("normal", moments(1, 0), "normal: sd = 0 is not positive."),
        ("lognormal", moments(0, 1), "lognormal: mean = 0 is not positive."),
        ("gamma", moments(-1, 1), "gamma: mean = -1 is not positive."),
        ("gamma", moments(1, 1e-170), "gamma: the arguments lie too far apart, or too close together"),
        ("lognormal", moments(1e-200, 1), "lognormal: the arguments lie too far apart"),
        ("uniform", {"low": -1e308, "high": 1e308}, "uniform: the arguments lie too far apart"),
        ("beta", moments(1, 0.1), "beta: mean = 1 is not below 1."),
        ("beta", moments(0.7, 0.46), "beta: sd = 0.46 is too large for a mean of 0.7: it stays below 0.458258."),
    ],
)
def test_refused_in_words(name, arguments, words):
    with pytest.raises(SamplingError) as caught:
        quantile(name, arguments, 0.5)
    assert words in str(caught.value)


@pytest.mark.parametrize("u", [-0.1, 1.1, math.nan, [0.5, math.nan]])
def test_shares_outside_are_refused(u):
    with pytest.raises(SamplingError, match=r"no number in \[0, 1\]"):
        quantile("uniform", {"low": 0, "high": 1}, u)


def test_upper_of_beta_is_in_the_message():
    with pytest.raises(SamplingError, match=r"sd = 46 is too large for a mean of 70: it stays below 45\.8258"):
        quantile("beta", moments(70, 46), 0.5, upper=100)
    with pytest.raises(SamplingError, match="upper = 0 is not positive"):
        quantile("beta", moments(70, 46), 0.5, upper=0)
