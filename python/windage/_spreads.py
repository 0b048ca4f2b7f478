"""Spreads: what is known about an uncertain number.

A spread stands wherever a number may stand. Each trial draws one value of it, as a function of the study's
seed, the trial's index and the place alone. Two arguments every spread has: `name`, the name of the drawn
parameter, and `nominal`, the value of the nominal unit (`Study.nominal`) where the drawing or the datasheet says
another one than the distribution suggests; it must lie within the spread and has no influence on any trial.
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
    nominal: float | None = None,
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
    nominal : float, optional
        Value of the nominal unit; by default the mean (moved to the nearer bound if it is cut off).

    Examples
    --------
    >>> normal(4200.0, 250.0, sigmas=3).low
    3450.0
    """
    return Normal(mean, sd, low, high, sigmas, name=name, stated_nominal=nominal)


@explained
def uniform(low: float, high: float, *, name: str | None = None, nominal: float | None = None) -> Uniform:
    """Spread a number evenly between two bounds. Nominal value, if none is stated: the middle.

    Examples
    --------
    >>> uniform(120.0, 260.0, nominal=180.0).nominal
    180.0
    """
    return Uniform(low, high, name=name, stated_nominal=nominal)


@explained
def triangular(
    low: float, mode: float, high: float, *, name: str | None = None, nominal: float | None = None
) -> Triangular:
    """Spread a number by a triangular density. Nominal value, if none is stated: the mode."""
    return Triangular(low, mode, high, name=name, stated_nominal=nominal)


@explained
def lognormal(median: float, sd_log: float, *, name: str | None = None, nominal: float | None = None) -> LogNormal:
    """Spread a positive number such that its natural logarithm is normal.

    Parameters
    ----------
    median : float
        Median, above 0; also the nominal value, if none is stated.
    sd_log : float
        Standard deviation of the natural logarithm; 0.1 is a spread of about 10 percent.
    name : str, optional
        Name of the drawn parameter.
    """
    return LogNormal(median, sd_log, name=name, stated_nominal=nominal)


@explained
def beta(
    a: float, b: float, low: float = 0.0, high: float = 1.0, *, name: str | None = None, nominal: float | None = None
) -> Beta:
    """Spread a number by a beta density with shapes a and b (0.001 to 1e9) from low to high.

    Nominal value, if none is stated: the mean.
    """
    return Beta(a, b, low, high, name=name, stated_nominal=nominal)


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
def choice(values: Any, probabilities: Any = None, *, name: str | None = None, nominal: float | None = None) -> Choice:
    """Draw one of several values.

    Parameters
    ----------
    values : sequence of float
        The values.
    probabilities : sequence of float, optional
        Their probabilities, adding up to 1; by default all the same. Nominal value, if none is stated: the most
        probable one, of several the first.
    name : str, optional
        Name of the drawn parameter.
    """
    return Choice(values, probabilities, name=name, stated_nominal=nominal)


@explained
def samples(values: Any, *, name: str | None = None, nominal: float | None = None) -> Samples:
    """Draw from observed values, each as likely as any other; their order has no meaning.

    Nominal value, if none is stated: their (lower) median. Nothing beyond the values is ever drawn: with few of
    them the tails are not known, and a verdict says so.
    """
    return Samples(values, name=name, stated_nominal=nominal)
