"""Distributions by their moments or bounds, as functions from (0, 1): what turns a design into draws.

Every function of this file works entry by entry, so that draws come out the same however they are split.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np
import numpy.typing as npt

__all__ = ["ARGUMENTS", "SamplingError", "natural_parameters", "quantile"]

FloatArray = npt.NDArray[np.float64]

#: The arguments of each distribution, in the order in which they are written.
ARGUMENTS: dict[str, tuple[str, ...]] = {
    "uniform": ("low", "high"),
    "triangular": ("low", "mode", "high"),
    "normal": ("mean", "sd"),
    "lognormal": ("mean", "sd"),
    "gamma": ("mean", "sd"),
    "beta": ("mean", "sd"),
}

#: From this shape on a gamma quantile comes from its expansion about the normal one: there the terms left out are below
#: 1e-14 of it, while the routine of scipy loses digits in the lower tail (a fifth of the sd at a shape of 1e10).
_LARGE_SHAPE = 1e5


class SamplingError(ValueError):
    """What is asked for cannot be drawn: no such distribution, design or correlation."""


def natural_parameters(name: str, arguments: Mapping[str, float], *, upper: float = 1.0) -> dict[str, float]:
    """Return the parameters in which a distribution's formulas are written, from its moments.

    With m the mean and s the standard deviation of the quantity itself:

    - lognormal: log_sd^2 = ln(1 + s^2/m^2), log_mean = ln m - log_sd^2/2
    - gamma: shape = m^2/s^2, scale = s^2/m
    - beta on [0, upper], with M = m/upper and S = s/upper: alpha = M (M (1 - M)/S^2 - 1), beta the same with 1 - M in
      place of the first M; needs S^2 < M (1 - M)
    - uniform, triangular and normal: their arguments as they are.

    Parameters
    ----------
    name : str
        One of `ARGUMENTS`.
    arguments : mapping of str to float
        Exactly the arguments of that distribution, in the quantity's own unit.
    upper : float, > 0
        Where a beta distribution ends, in the quantity's own unit: 1 for a share, 100 for one in per cent. The others
        do not use it.

    Returns
    -------
    dict of str to float
        `log_mean` and `log_sd` have no unit (logarithms of the number), `scale` has that of the quantity, `shape`,
        `alpha` and `beta` have none.

    Raises
    ------
    SamplingError
        An unknown distribution, an argument missing, unknown or not finite, moments that no such distribution has, or
        ones so far apart that the parameters are no doubles.

    References
    ----------
    Johnson, Kotz & Balakrishnan (1994, 1995) Continuous Univariate Distributions, chapters 14, 17, 25 (from memory)

    Examples
    --------
    >>> natural_parameters("gamma", {"mean": 8, "sd": 4})
    {'shape': 4.0, 'scale': 2.0}
    >>> natural_parameters("beta", {"mean": 0.5, "sd": 0.5})
    Traceback (most recent call last):
    ngm.engine.distributions.SamplingError: beta: sd = 0.5 is too large for a mean of 0.5: it stays below 0.5.
    """
    given = _checked_arguments(name, arguments)
    if name == "uniform":
        if not given["low"] < given["high"]:
            raise SamplingError(f"uniform: low = {given['low']:g} is not below high = {given['high']:g}.")
        return _finite(name, given, given["high"] - given["low"])
    if name == "triangular":
        low, mode, high = given["low"], given["mode"], given["high"]
        if not low < high:
            raise SamplingError(f"triangular: low = {low:g} is not below high = {high:g}.")
        if not low <= mode <= high:
            raise SamplingError(f"triangular: mode = {mode:g} lies outside low to high ({low:g} to {high:g}).")
        return _finite(name, given, high - low)
    mean, sd = given["mean"], given["sd"]
    if not sd > 0:
        raise SamplingError(f"{name}: sd = {sd:g} is not positive.")
    if name == "normal":
        return given
    if not mean > 0:
        raise SamplingError(f"{name}: mean = {mean:g} is not positive.")
    if name == "beta":
        return _beta_parameters(mean, sd, upper)
    ratio = sd / mean
    if name == "gamma":
        quotient = mean / sd
        shape = quotient * quotient
        return _finite(name, {"shape": shape, "scale": sd * ratio}, shape, sd * ratio)
    if ratio > 1e150:
        raise _too_far(name)
    variance = math.log1p(ratio * ratio)
    return _finite(name, {"log_mean": math.log(mean) - variance / 2, "log_sd": math.sqrt(variance)}, variance)


def quantile(name: str, arguments: Mapping[str, float], u: npt.ArrayLike, *, upper: float = 1.0) -> FloatArray:
    """Return the values below which a distribution holds the shares u: draws, where u is uniform.

    - uniform: low + u (high - low)
    - triangular: low + sqrt(u (high - low)(mode - low)) below the mode, mirrored above it
    - normal: mean + sd z, z the standard normal quantile of u
    - lognormal: exp(log_mean + log_sd z)
    - gamma: scale P^-1(shape, u), beta: upper I^-1(alpha, beta; u), the inverse incomplete gamma and beta functions

    Parameters
    ----------
    name, arguments, upper
        As for `natural_parameters`.
    u : array of float in [0, 1]
        Shares, of any shape. At 0 and 1 the ends of the distribution, infinite where it has none.

    Returns
    -------
    array of float
        Of the shape of u, in the quantity's own unit. Each entry depends on its own u alone.

    Raises
    ------
    SamplingError
        As for `natural_parameters`; a share that is no number or outside [0, 1].

    References
    ----------
    Gamma from a shape of 1e5 on: Cornish & Fisher (1938) Rev. Int. Stat. Inst. 5:307-320, the expansion about the normal
    quantile in powers of shape^(-1/2) (coefficients from the cumulants, from memory; checked at 40 digits).

    Examples
    --------
    >>> quantile("triangular", {"low": 0, "mode": 2, "high": 8}, [0, 0.25, 1]).tolist()
    [0.0, 2.0, 8.0]
    """
    shares = np.asarray(u, dtype=float)
    if shares.size and not (shares.min() >= 0 and shares.max() <= 1):
        raise SamplingError("a share u is no number in [0, 1].")
    own = natural_parameters(name, arguments, upper=upper)
    if name == "uniform":
        return np.asarray(own["low"] + shares * (own["high"] - own["low"]))
    if name == "triangular":
        return _triangular(own["low"], own["mode"], own["high"], shares)
    from scipy import special

    if name == "gamma":
        if own["shape"] >= _LARGE_SHAPE:
            return own["scale"] * _large_gamma(own["shape"], np.asarray(special.ndtri(shares)))
        return np.asarray(own["scale"] * special.gammaincinv(own["shape"], shares))
    if name == "beta":
        return np.asarray(upper * special.betaincinv(own["alpha"], own["beta"], shares))
    z = np.asarray(special.ndtri(shares))
    if name == "normal":
        return np.asarray(own["mean"] + own["sd"] * z)
    with np.errstate(over="ignore"):
        return np.asarray(np.exp(own["log_mean"] + own["log_sd"] * z))


def _checked_arguments(name: str, arguments: Mapping[str, float]) -> dict[str, float]:
    if name not in ARGUMENTS:
        raise SamplingError(f"'{name}' is not a distribution that is known here: {', '.join(ARGUMENTS)}.")
    wanted = ARGUMENTS[name]
    missing = [argument for argument in wanted if argument not in arguments]
    extra = [argument for argument in arguments if argument not in wanted]
    if missing or extra:
        what = f"{missing[0]} is missing" if missing else f"'{extra[0]}' is not an argument"
        raise SamplingError(f"{name}: {what}. It takes {', '.join(wanted)}.")
    given = {argument: float(arguments[argument]) for argument in wanted}
    for argument, value in given.items():
        if not math.isfinite(value):
            raise SamplingError(f"{name}: {argument} = {value:g} is not finite.")
    return given


def _beta_parameters(mean: float, sd: float, upper: float) -> dict[str, float]:
    if not (upper > 0 and math.isfinite(upper)):
        raise SamplingError(f"beta: upper = {upper:g} is not positive and finite.")
    share, spread = mean / upper, sd / upper
    if not share < 1:
        raise SamplingError(f"beta: mean = {mean:g} is not below {upper:g}.")
    # One difference only: as the two terms meet, alpha and beta go to 0.
    left = share * (1 - share) - spread * spread
    if not left > 0:
        most = upper * math.sqrt(share * (1 - share))
        raise SamplingError(f"beta: sd = {sd:g} is too large for a mean of {mean:g}: it stays below {most:.6g}.")
    square = spread * spread
    size = left / square if square > 0 else math.inf
    return _finite("beta", {"alpha": share * size, "beta": (1 - share) * size}, share * size, (1 - share) * size)


def _finite(name: str, parameters: dict[str, float], *positive: float) -> dict[str, float]:
    if not all(0 < value < math.inf for value in positive):
        raise _too_far(name)
    return parameters


def _too_far(name: str) -> SamplingError:
    return SamplingError(f"{name}: the arguments lie too far apart, or too close together, to compute with.")


def _triangular(low: float, mode: float, high: float, u: FloatArray) -> FloatArray:
    width = high - low
    # Both branches measure from their own end, so that neither tail is a difference.
    rising = low + np.sqrt(u * width * (mode - low))
    falling = high - np.sqrt((1 - u) * width * (high - mode))
    return np.asarray(np.where(u * width < mode - low, rising, falling))


def _large_gamma(shape: float, z: FloatArray) -> FloatArray:
    """Return the quantile of the unit gamma distribution: k + sqrt(k) z + (z^2 - 1)/3 + (z^3 - 7z)/(36 sqrt k) - ..."""
    root = math.sqrt(shape)
    with np.errstate(invalid="ignore"):
        x = shape + root * z + (z**2 - 1) / 3 + (z**3 - 7 * z) / (36 * root)
        x += ((9 * z**5 + 256 * z**3 - 433 * z) / (24 * root) - (6 * z**4 + 14 * z**2 - 32)) / (1620 * shape)
    return np.asarray(np.where(np.isinf(z), np.where(z > 0, np.inf, 0.0), x))
