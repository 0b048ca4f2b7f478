"""Exact statements from counts and sorted values: pass probability, numbers of trials, quantiles.

Everything here holds for independent trials and a number of trials that was fixed beforehand. The numbers
come from the compiled module `_statistics`; this module checks arguments and explains.
"""

from __future__ import annotations

import operator
from collections.abc import Callable, Collection
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from windage import _statistics
from windage._errors import DescriptionError

from ._arguments import explained

Method = Literal["clopper-pearson", "wilson", "jeffreys"]
Side = Literal["lower", "upper", "two-sided"]

LARGEST_COUNT = 2**53
SMALLEST_PROBABILITY = 1e-12


@dataclass(frozen=True, slots=True)
class PassBounds:
    """Bounds of the pass probability.

    Attributes
    ----------
    lower, upper : float
        Bounds of the pass probability; 0 or 1 on the side that was not asked for.
    failure_lower, failure_upper : float
        The same bounds said of the failure probability, with all digits even when it is tiny.
    estimate : float
        Observed pass fraction; NaN without trials.
    failures, trials : int
        What was observed.
    confidence : float
        Confidence of the statement: of each bound for one side, of the interval for two sides.
    method, side : str
        How the bounds were computed, and which were asked for.
    """

    lower: float
    upper: float
    failure_lower: float
    failure_upper: float
    estimate: float
    failures: int
    trials: int
    confidence: float
    method: str
    side: str


@dataclass(frozen=True, slots=True)
class ToleranceBound:
    """A value that bounds a stated fraction of all trials.

    Attributes
    ----------
    value : float
        The bound, in the unit of the values; infinite if too many values were not finite.
    rank : int
        Place of the bound among the sorted values: 1 is the best (smallest for an upper bound, largest for a
        lower one), `trials` the worst.
    trials : int
        Number of values.
    content, confidence : float
        Fraction of all trials and confidence that were asked for.
    attained_confidence : float
        Confidence of the statement; above `confidence` because ranks are whole numbers.
    side : str
        `"upper"`: the content lies at or below the value; `"lower"`: at or above.
    """

    value: float
    rank: int
    trials: int
    content: float
    confidence: float
    attained_confidence: float
    side: str


_Bound = Callable[[int, int, float], float]
_Interval = Callable[[int, int, float], tuple[float, float]]

_METHODS: dict[str, tuple[_Bound, _Bound, _Interval]] = {
    "clopper-pearson": (
        _statistics.clopper_pearson_lower,
        _statistics.clopper_pearson_upper,
        _statistics.clopper_pearson_interval,
    ),
    "wilson": (_statistics.wilson_lower, _statistics.wilson_upper, _statistics.wilson_interval),
    "jeffreys": (_statistics.jeffreys_lower, _statistics.jeffreys_upper, _statistics.jeffreys_interval),
}


@explained
def pass_probability_bounds(
    failures: int,
    trials: int,
    confidence: float,
    method: Method = "clopper-pearson",
    side: Side = "lower",
) -> PassBounds:
    """Bound the probability that a trial passes.

    Parameters
    ----------
    failures : int
        Failed trials, diverged ones included; 0 to `trials`.
    trials : int
        Trials run; 0 to 2^53. Without trials the bounds are 0 and 1.
    confidence : float
        Confidence of the statement, above 0 and below 1.
    method : {"clopper-pearson", "wilson", "jeffreys"}
        Clopper-Pearson is exact: it is wrong with at most 1 - confidence whatever the true probability, and
        verdicts use no other. Wilson and Jeffreys hold on average only and are meant for display.
    side : {"lower", "upper", "two-sided"}
        One-sided bounds carry the whole risk on their side, two-sided ones half on each: a two-sided 95 %
        interval and a one-sided 95 % bound are different numbers.

    Returns
    -------
    PassBounds
        Bounds of the pass and of the failure probability.

    Raises
    ------
    DescriptionError
        If a count, the confidence, the method or the side is not among those named above.

    Notes
    -----
    Clopper & Pearson 1934, Biometrika 26:404-413; Wilson 1927, J. Am. Stat. Assoc. 22:209-212; Jeffreys as in
    Brown, Cai & DasGupta 2001, Stat. Sci. 16:101-133.

    Examples
    --------
    >>> round(pass_probability_bounds(0, 4000, 0.90).lower, 5)
    0.99942
    """
    failures, trials = checked_counts(failures, trials)
    confidence = checked_probability("confidence", confidence)
    bounds = _METHODS[_checked_choice("method", method, _METHODS)]
    side_name = _checked_choice("side", side, ("lower", "upper", "two-sided"))
    lower, upper = _both_sides(bounds, failures, trials, confidence, side_name)
    # The failure probability with the roles exchanged: 1 - lower would lose the digits of a small one.
    mirrored = {"lower": "upper", "upper": "lower"}.get(side_name, side_name)
    failure_lower, failure_upper = _both_sides(bounds, trials - failures, trials, confidence, mirrored)
    return PassBounds(
        lower=lower,
        upper=upper,
        failure_lower=failure_lower,
        failure_upper=failure_upper,
        estimate=(trials - failures) / trials if trials else float("nan"),
        failures=failures,
        trials=trials,
        confidence=confidence,
        method=method,
        side=side_name,
    )


def _both_sides(
    bounds: tuple[_Bound, _Bound, _Interval], failures: int, trials: int, confidence: float, side: str
) -> tuple[float, float]:
    lower, upper, interval = bounds
    if side == "two-sided":
        return interval(failures, trials, confidence)
    if side == "lower":
        return lower(failures, trials, confidence), 1.0
    return 0.0, upper(failures, trials, confidence)


@explained
def trials_needed(at_least: float, confidence: float, allowed_failures: int = 0) -> int:
    """Return the smallest number of trials that can prove a pass probability.

    Parameters
    ----------
    at_least : float
        Pass probability to prove, above 0 and below 1.
    confidence : float
        Confidence of the proof, above 0 and below 1.
    allowed_failures : int
        Failures that shall not spoil the proof; 0 or more.

    Returns
    -------
    int
        Trials: if at most `allowed_failures` of them fail, the claim is proved.

    Raises
    ------
    DescriptionError
        If an argument is out of range, or more than 2^53 trials would be needed.

    Notes
    -----
    Smallest N with P[X <= allowed_failures] <= 1 - confidence for X binomial(N, 1 - at_least): Hanson &
    Beard 2010, NASA/TP-2010-216447. The customary "2 000 runs for three sigma" is 99.73 % at 90 % with two
    failures allowed: 1970.

    Examples
    --------
    >>> trials_needed(0.95, 0.95), trials_needed(0.9973, 0.90, allowed_failures=2)
    (59, 1970)
    """
    at_least = checked_probability("at_least", at_least)
    confidence = checked_probability("confidence", confidence)
    allowed = checked_count("allowed_failures", allowed_failures, 0, LARGEST_COUNT - 1)
    try:
        return _statistics.trials_to_demonstrate(at_least, confidence, allowed)
    except ValueError:
        raise DescriptionError(
            "allowed_failures",
            allowed,
            f"a claim of {at_least!r} at confidence {confidence!r} that needs at most 2^53 trials",
            "Allow fewer failures, or claim less.",
        ) from None


def failures_allowed(trials: int, at_least: float, confidence: float) -> int | None:
    """Return the most failures with which a number of trials still proves a pass probability.

    Parameters
    ----------
    trials : int
        Trials planned; 0 to 2^53.
    at_least, confidence : float
        The claim, as for `trials_needed`.

    Returns
    -------
    int or None
        Failures allowed, or None if the trials are too few even without any failure.

    Raises
    ------
    DescriptionError
        If an argument is out of range.

    Examples
    --------
    >>> failures_allowed(2000, 0.9973, 0.90), failures_allowed(58, 0.95, 0.95)
    (2, None)
    """
    trials = checked_count("trials", trials, 0, LARGEST_COUNT)
    at_least = checked_probability("at_least", at_least)
    return _statistics.allowed_failures(trials, at_least, checked_probability("confidence", confidence))


def chance_of_pass(trials: int, at_least: float, confidence: float, true_pass_probability: float) -> float:
    """Return how likely a planned number of trials ends in the verdict "pass".

    Parameters
    ----------
    trials : int
        Trials planned; 0 to 2^53.
    at_least, confidence : float
        The claim, as for `trials_needed`.
    true_pass_probability : float
        Pass probability that the loop is assumed to have; 0 to 1.

    Returns
    -------
    float
        Probability of "pass". At a true probability below `at_least` this is the false-accept rate and is at
        most 1 - confidence.

    Raises
    ------
    DescriptionError
        If an argument is out of range.

    Examples
    --------
    >>> round(chance_of_pass(1970, 0.9973, 0.90, true_pass_probability=0.9995), 3)
    0.922
    """
    allowed = failures_allowed(trials, at_least, confidence)
    assumed = _as_float("true_pass_probability", true_pass_probability)
    if not 0.0 <= assumed <= 1.0:
        raise DescriptionError("true_pass_probability", true_pass_probability, "a number from 0 to 1")
    if allowed is None:
        return 0.0
    return _statistics.binomial_at_most(allowed, operator.index(trials), _statistics.complement(assumed))


def trials_for_accuracy(accuracy: float, confidence: float) -> int:
    """Return the trials after which an observed pass fraction is this accurate, whatever its probability.

    Parameters
    ----------
    accuracy : float
        Largest distance of the observed fraction from the probability, 1e-7 up to but not including 1.
    confidence : float
        Confidence that the distance is kept, above 0 and below 1.

    Returns
    -------
    int
        ceil(ln(2 / (1 - confidence)) / (2 accuracy^2)).

    Raises
    ------
    DescriptionError
        If an argument is out of range.

    Notes
    -----
    Hoeffding 1963, J. Am. Stat. Assoc. 58:13-30; Okamoto 1958, Ann. Inst. Stat. Math. 10:29-35. Near a pass
    probability of 1 this is far too many: `trials_needed` answers "at least" claims with far fewer.

    Examples
    --------
    >>> trials_for_accuracy(0.01, 0.95)
    18445
    """
    distance = _as_float("accuracy", accuracy)
    if not 1e-7 <= distance < 1.0:
        raise DescriptionError("accuracy", accuracy, "a number from 1e-7 up to, but not including, 1")
    return _statistics.chernoff_trials(distance, checked_probability("confidence", confidence))


@explained
def tolerance_bound(
    values: npt.ArrayLike, content: float, confidence: float, side: Literal["upper", "lower"] = "upper"
) -> ToleranceBound:
    """Bound a measure for a stated fraction of all trials, without assuming a distribution.

    Parameters
    ----------
    values : array_like, shape (trials,), float
        One value of the measure a trial. A value that is not finite (a trial that diverged, an event that
        never came) counts as the worst; none is dropped.
    content : float
        Fraction of all trials that the bound shall cover, above 0 and below 1.
    confidence : float
        Confidence of the statement, above 0 and below 1.
    side : {"upper", "lower"}
        `"upper"` where small values are good (an error), `"lower"` where large ones are (a margin).

    Returns
    -------
    ToleranceBound
        The bound with its rank and the confidence attained.

    Raises
    ------
    DescriptionError
        If an argument is out of range, the values are not numbers along one axis, or there are too few of
        them; the message then tells how many trials would do.

    Notes
    -----
    Order statistics: Wilks 1941, Ann. Math. Stat. 12:91-96; ISO 16269-6. The trials must be independent, so
    values from Latin hypercube or low-discrepancy samples do not qualify.

    Examples
    --------
    >>> bound = tolerance_bound(range(1, 94), content=0.95, confidence=0.95)
    >>> bound.value, bound.rank, round(bound.attained_confidence, 5)
    (92.0, 92, 0.95002)
    """
    content = checked_probability("content", content)
    confidence = checked_probability("confidence", confidence)
    side_name = _checked_choice("side", side, ("upper", "lower"))
    badness = _as_values(values) * (1.0 if side_name == "upper" else -1.0)
    trials = len(badness)
    found = _statistics.tolerance_rank(trials, content, confidence) if trials else None
    if found is None:
        needed = trials_needed(content, confidence)
        raise DescriptionError(
            "values",
            trials,
            f"at least {needed} trials to bound {content!r} of all trials at confidence {confidence!r}",
            "Run more trials, or ask for less content or confidence.",
        )
    rank, attained = found
    badness[~np.isfinite(badness)] = np.inf
    worst = float(np.partition(badness, rank - 1)[rank - 1])
    return ToleranceBound(
        value=worst if side_name == "upper" else -worst,
        rank=rank,
        trials=trials,
        content=content,
        confidence=confidence,
        attained_confidence=attained,
        side=side_name,
    )


def checked_probability(field: str, value: object) -> float:
    """Return the value as a float, or explain why it is no probability that a claim may state.

    Parameters
    ----------
    field : str
        Name to put into the message.
    value : object
        Anything.

    Raises
    ------
    DescriptionError
        Unless the value is a number above 0 and below 1, by at least 1e-12.
    """
    number = _as_float(field, value)
    if SMALLEST_PROBABILITY <= number <= 1.0 - SMALLEST_PROBABILITY:
        return number
    mend = ""
    if 1.0 < number < 100.0:
        mend = f"Percent are written as a fraction: {number:g} % is {number / 100:g}."
    elif number == 1.0:
        mend = "No number of trials proves certainty; claim for example 0.9999."
    raise DescriptionError(field, value, "a number above 0 and below 1, and at least 1e-12 from both", mend)


def checked_count(field: str, value: object, least: int, most: int) -> int:
    """Return the value as an int, or explain why it is no count between the limits.

    Parameters
    ----------
    field : str
        Name to put into the message.
    value : object
        Anything; NumPy integers count as whole numbers, truth values do not.
    least, most : int
        Limits, both allowed.

    Raises
    ------
    DescriptionError
        Unless the value is a whole number from `least` to `most`.
    """
    expected = f"a whole number from {least} to {'2^53' if most == LARGEST_COUNT else most}"
    number = _as_index(value)
    if number is None or not least <= number <= most:
        raise DescriptionError(field, value, expected)
    return number


def checked_counts(failures: object, trials: object) -> tuple[int, int]:
    """Return failures and trials as ints, or explain which is wrong.

    Parameters
    ----------
    failures, trials : object
        Anything.

    Raises
    ------
    DescriptionError
        Unless 0 <= failures <= trials <= 2^53, both whole.
    """
    run = checked_count("trials", trials, 0, LARGEST_COUNT)
    failed = _as_index(failures)
    if failed is None or not 0 <= failed <= run:
        raise DescriptionError("failures", failures, f"a whole number from 0 to the {run} trials")
    return failed, run


def _as_index(value: Any) -> int | None:
    if isinstance(value, (bool, np.bool_)):
        return None
    try:
        return operator.index(value)
    except Exception:  # TypeError, or whatever a foreign object raises
        return None


def _as_float(field: str, value: Any) -> float:
    # Text would be read by float(), and a truth value is a slip of the pen.
    if not isinstance(value, (bool, np.bool_, str, bytes)):
        try:
            return float(value)
        except Exception:  # TypeError, ValueError, OverflowError, or whatever a foreign object raises
            pass
    raise DescriptionError(field, value, "a number")


def _as_values(values: npt.ArrayLike) -> npt.NDArray[np.float64]:
    try:
        raw = np.asarray(values if hasattr(values, "__array__") else list(values))  # type: ignore[arg-type]
        if raw.dtype.kind not in "fiu":
            raise TypeError
        array = raw.astype(np.float64)
    except (TypeError, ValueError):
        raise DescriptionError("values", values, "numbers along one axis, one a trial") from None
    if array.ndim != 1:
        raise DescriptionError("values", f"an array of shape {array.shape}", "one axis, one value a trial")
    return array


def _checked_choice(field: str, value: object, known: Collection[str]) -> str:
    if isinstance(value, str) and value in known:
        return value
    listed = ", ".join(repr(name) for name in known)
    import difflib  # costs import time and is seldom needed

    near = difflib.get_close_matches(value, list(known), n=1) if isinstance(value, str) else []
    raise DescriptionError(field, value, f"one of {listed}", f"Did you mean {near[0]!r}?" if near else "")
