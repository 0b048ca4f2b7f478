"""Spreads: what is known about an uncertain number.

A spread stands wherever a number may stand. Each trial draws one value of it, as a function of the study's
seed, the trial's index and the place alone.
"""

from __future__ import annotations

from typing import Any

from ._arguments import explained
from ._distributions import Beta, Choice, LogNormal, Normal, Samples, Tolerance, Triangular, Uniform


@explained
def normal(
    mean: float,
    sd: float,
    low: float | None = None,
    high: float | None = None,
    sigmas: float | None = None,
    *,
    name: str | None = None,
) -> Normal:
    """Spread a number normally.

    Parameters
    ----------
    mean, sd : float
        Mean and standard deviation before truncation; `sd` at least 0.
    low, high : float, optional
        Bounds of a truncation: the distribution is cut off there and scaled up in between.
    sigmas : float, optional
        Instead of `low` and `high`: truncate at mean - sigmas * sd and mean + sigmas * sd.
    name : str, optional
        Name of the drawn parameter.

    Returns
    -------
    Normal
        Nominal value: the mean (moved to the nearer bound if it is cut off).

    Examples
    --------
    >>> normal(4200.0, 250.0, sigmas=3).low
    3450.0
    """
    return Normal(mean, sd, low, high, sigmas, name=name)


@explained
def uniform(low: float, high: float, *, name: str | None = None) -> Uniform:
    """Spread a number evenly between two bounds. Nominal value: the middle."""
    return Uniform(low, high, name=name)


@explained
def triangular(low: float, mode: float, high: float, *, name: str | None = None) -> Triangular:
    """Spread a number by a triangular density. Nominal value: the mode."""
    return Triangular(low, mode, high, name=name)


@explained
def lognormal(median: float, sd_log: float, *, name: str | None = None) -> LogNormal:
    """Spread a positive number such that its natural logarithm is normal.

    Parameters
    ----------
    median : float
        Median, above 0; also the nominal value.
    sd_log : float
        Standard deviation of the natural logarithm; 0.1 is a spread of about 10 percent.
    name : str, optional
        Name of the drawn parameter.
    """
    return LogNormal(median, sd_log, name=name)


@explained
def beta(a: float, b: float, low: float = 0.0, high: float = 1.0, *, name: str | None = None) -> Beta:
    """Spread a number by a beta density with shapes a and b (above 0) from low to high. Nominal: the mean."""
    return Beta(a, b, low, high, name=name)


@explained
def tolerance(nominal: float, percent: float, shape: str = "uniform", *, name: str | None = None) -> Tolerance:
    """Spread a number around its nominal value by a tolerance.

    Parameters
    ----------
    nominal : float
        Nominal value, not 0.
    percent : float
        Half width of the interval, in percent of the nominal value.
    shape : {"uniform", "normal"}
        Every value in the interval equally likely, or normal with a third of the half width as standard
        deviation, truncated at the tolerance.
    name : str, optional
        Name of the drawn parameter.
    """
    return Tolerance(nominal, percent, shape, name=name)


@explained
def choice(values: Any, probabilities: Any = None, *, name: str | None = None) -> Choice:
    """Draw one of several values.

    Parameters
    ----------
    values : sequence of float
        The values.
    probabilities : sequence of float, optional
        Their probabilities, adding up to 1; by default all the same. Nominal: the most probable value.
    name : str, optional
        Name of the drawn parameter.
    """
    return Choice(values, probabilities, name=name)


@explained
def samples(values: Any, *, name: str | None = None) -> Samples:
    """Draw from observed values, each as likely as any other. Nominal: their (lower) median."""
    return Samples(values, name=name)
