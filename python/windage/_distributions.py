"""The distributions behind the spreads: bounds, nominal value, checks, and the engine's form of each."""

from __future__ import annotations

import math
from dataclasses import KW_ONLY, dataclass, field
from typing import Any, ClassVar

from ._errors import DescriptionError
from ._numbers import Spread, checked_choice, checked_label, checked_sequence, plain_number

#: Smallest part of a normal distribution that a truncation may leave.
LEAST_MASS = 1e-12
MOST_VALUES = 10_000_000
#: No draw is farther from a mean than this many standard deviations (the uniform number is at least 2^-53).
FARTHEST = 8.21
#: Where the logarithm of a draw may lie: above it there is no double, below it one with fewer digits.
LARGEST_LOGARITHM = 708.0
#: Shapes for which the engine inverts the beta distribution to 1e-9 of its standard deviation.
BETA_SHAPES = (1e-3, 1e9)
#: The field of a nominal value that is stated; as an argument it is called `nominal`.
STATED: dict[str, Any] = {"argument": "nominal"}


class Distribution(Spread):
    """A spread whose nominal value may be stated: the drawing's number need not be the middle."""

    _kind: ClassVar[str]
    stated_nominal: Any

    @property
    def nominal(self) -> float:
        """The value that was stated, else the one that the distribution suggests."""
        return float(self._usual_nominal() if self.stated_nominal is None else self.stated_nominal)

    def _usual_nominal(self) -> float:
        raise NotImplementedError

    def _check_nominal(self, place: str = "") -> None:
        if self.stated_nominal is not None:
            value = checked_nominal(self, self.stated_nominal, place or f"{self._kind}.nominal")
            object.__setattr__(self, "stated_nominal", value)


def checked_nominal(spread: Distribution, value: object, place: str) -> float:
    """Return a stated nominal value that is within the spread, so that what holds for trials holds for it."""
    plain = plain_number(value, place)
    below = plain < spread.low or (plain == spread.low and spread._excludes_low())
    if below or plain > spread.high:
        expected = f"a number within the spread, from {spread.low:g} to {spread.high:g}"
        raise DescriptionError(place, value, expected, "Widen the spread until it holds the nominal unit.")
    return plain


@dataclass(frozen=True, repr=False)
class Normal(Distribution):
    """Normal distribution, possibly truncated. Made by `normal`."""

    _kind: ClassVar[str] = "normal"
    mean: float
    sd: float
    low: Any = None
    high: Any = None
    sigmas: Any = None
    _: KW_ONLY
    name: str | None = None
    stated_nominal: Any = field(default=None, metadata=STATED)

    def __post_init__(self) -> None:
        mean, sd = plain_number(self.mean, "normal.mean"), _non_negative(self.sd, "normal.sd")
        low = -math.inf if _is_open(self.low) else plain_number(self.low, "normal.low")
        high = math.inf if _is_open(self.high) else plain_number(self.high, "normal.high")
        if self.sigmas is not None:
            sigmas = _positive(self.sigmas, "normal.sigmas")
            if math.isfinite(low) or math.isfinite(high):
                mend = "Give sigmas, or low and high."
                raise DescriptionError("normal.sigmas", self.sigmas, "no other truncation beside it", mend)
            low, high = mean - sigmas * sd, mean + sigmas * sd
        _check_truncation(mean, sd, low, high)
        reach = (max(low, mean - FARTHEST * sd), min(high, mean + FARTHEST * sd))
        if not all(map(math.isfinite, reach)):
            raise DescriptionError("normal.sd", self.sd, "a distribution whose draws double precision can hold")
        _set(self, mean=mean, sd=sd, low=low, high=high, sigmas=None, name=_name(self))
        self._check_nominal()

    def _usual_nominal(self) -> float:
        # The mean, or the bound nearest to it where the mean itself is cut off.
        return float(min(max(self.mean, self.low), self.high))

    def _varies(self) -> bool:
        return self.sd > 0.0

    def _engine_form(self) -> tuple[str, list[float]]:
        return "normal", [self.mean, self.sd, self.low, self.high]

    def _is_truncated(self) -> bool:
        return math.isfinite(self.low) or math.isfinite(self.high)


@dataclass(frozen=True, repr=False)
class Uniform(Distribution):
    """Every value between two bounds is equally likely. Made by `uniform`."""

    _kind: ClassVar[str] = "uniform"
    low: float
    high: float
    _: KW_ONLY
    name: str | None = None
    stated_nominal: Any = field(default=None, metadata=STATED)

    def __post_init__(self) -> None:
        low, high = plain_number(self.low, "uniform.low"), plain_number(self.high, "uniform.high")
        _check_bounds("uniform", low, high)
        _set(self, low=low, high=high, name=_name(self))
        self._check_nominal()

    def _usual_nominal(self) -> float:
        # The middle.
        return _middle(self.low, self.high)

    def _engine_form(self) -> tuple[str, list[float]]:
        return "uniform", [self.low, self.high]


@dataclass(frozen=True, repr=False)
class Triangular(Distribution):
    """Triangular distribution. Made by `triangular`."""

    _kind: ClassVar[str] = "triangular"
    low: float
    mode: float
    high: float
    _: KW_ONLY
    name: str | None = None
    stated_nominal: Any = field(default=None, metadata=STATED)

    def __post_init__(self) -> None:
        low, mode, high = (plain_number(getattr(self, n), f"triangular.{n}") for n in ("low", "mode", "high"))
        _check_bounds("triangular", low, high)
        if not low <= mode <= high:
            raise DescriptionError("triangular.mode", self.mode, f"a number from low = {low:g} to high = {high:g}")
        _set(self, low=low, mode=mode, high=high, name=_name(self))
        self._check_nominal()

    def _usual_nominal(self) -> float:
        # The mode.
        return self.mode

    def _engine_form(self) -> tuple[str, list[float]]:
        return "triangular", [self.low, self.mode, self.high]


@dataclass(frozen=True, repr=False)
class LogNormal(Distribution):
    """Lognormal distribution. Made by `lognormal`."""

    _kind: ClassVar[str] = "lognormal"
    median: float
    sd_log: float
    _: KW_ONLY
    name: str | None = None
    stated_nominal: Any = field(default=None, metadata=STATED)
    low: float = field(init=False, default=0.0)
    high: float = field(init=False, default=math.inf)

    def __post_init__(self) -> None:
        median, sd_log = _positive(self.median, "lognormal.median"), _non_negative(self.sd_log, "lognormal.sd_log")
        if not abs(math.log(median)) + FARTHEST * sd_log <= LARGEST_LOGARITHM:
            expected = "a distribution whose draws double precision can hold"
            mend = "It is the standard deviation of the natural logarithm; 0.1 is a spread of about 10 percent."
            raise DescriptionError("lognormal.sd_log", self.sd_log, expected, mend)
        _set(self, median=median, sd_log=sd_log, name=_name(self))
        self._check_nominal()

    def _usual_nominal(self) -> float:
        # The median.
        return self.median

    def _excludes_low(self) -> bool:
        return True

    def _varies(self) -> bool:
        return self.sd_log > 0.0

    def _engine_form(self) -> tuple[str, list[float]]:
        return "lognormal", [self.median, self.sd_log]


@dataclass(frozen=True, repr=False)
class Beta(Distribution):
    """Beta distribution between two bounds. Made by `beta`."""

    _kind: ClassVar[str] = "beta"
    a: float
    b: float
    low: float = 0.0
    high: float = 1.0
    _: KW_ONLY
    name: str | None = None
    stated_nominal: Any = field(default=None, metadata=STATED)

    def __post_init__(self) -> None:
        a, b = _shape(self.a, "beta.a"), _shape(self.b, "beta.b")
        low, high = plain_number(self.low, "beta.low"), plain_number(self.high, "beta.high")
        _check_bounds("beta", low, high)
        _set(self, a=a, b=b, low=low, high=high, name=_name(self))
        self._check_nominal()

    def _usual_nominal(self) -> float:
        # The mean.
        return min(max(self.low + (self.high - self.low) * (self.a / (self.a + self.b)), self.low), self.high)

    def _engine_form(self) -> tuple[str, list[float]]:
        return "beta", [self.a, self.b, self.low, self.high]


@dataclass(frozen=True, repr=False)
class Tolerance(Spread):
    """A nominal value with a tolerance in percent. Made by `tolerance`."""

    _kind: ClassVar[str] = "tolerance"
    nominal: float
    percent: float
    shape: str = "uniform"
    _: KW_ONLY
    name: str | None = None
    low: float = field(init=False, default=0.0)
    high: float = field(init=False, default=0.0)

    def __post_init__(self) -> None:
        nominal = plain_number(self.nominal, "tolerance.nominal")
        percent = _non_negative(self.percent, "tolerance.percent")
        shape = checked_choice(self.shape, "tolerance.shape", ("uniform", "normal"))
        if nominal == 0.0 and percent > 0.0:
            mend = "Write uniform(low, high)."
            raise DescriptionError("tolerance.nominal", self.nominal, "a number other than 0", mend)
        width = abs(nominal) * (percent / 100.0)
        low, high = nominal - width, nominal + width
        _check_bounds("tolerance", low, high)
        _set(self, nominal=nominal, percent=percent, shape=shape, name=_name(self), low=low, high=high)

    def _engine_form(self) -> tuple[str, list[float]]:
        if self.shape == "uniform":
            return "uniform", [self.low, self.high]
        return "normal", [self.nominal, (self.high - self.low) / 6.0, self.low, self.high]

    def _is_truncated(self) -> bool:
        return self.shape == "normal" and self.percent > 0.0


@dataclass(frozen=True, repr=False)
class Choice(Distribution):
    """One of several values. Made by `choice`."""

    _kind: ClassVar[str] = "choice"
    values: tuple[float, ...]
    probabilities: Any = None
    _: KW_ONLY
    name: str | None = None
    stated_nominal: Any = field(default=None, metadata=STATED)

    def __post_init__(self) -> None:
        values = _finite_values(self.values, "choice.values")
        probabilities = None
        if self.probabilities is not None:
            probabilities = _finite_values(self.probabilities, "choice.probabilities")
            _check_probabilities(probabilities, len(values))
        _set(self, values=values, probabilities=probabilities, name=_name(self))
        self._check_nominal()

    @property
    def low(self) -> float:
        """Smallest value with a probability above 0."""
        return min(self._values())

    @property
    def high(self) -> float:
        """Largest value with a probability above 0."""
        return max(self._values())

    def _usual_nominal(self) -> float:
        # The most probable value, of several the first.
        weights = self._weights()
        return self.values[weights.index(max(weights))]

    def _weights(self) -> list[float]:
        count = len(self.values)
        return [1.0 / count] * count if self.probabilities is None else list(self.probabilities)

    def _values(self) -> tuple[float, ...]:
        return tuple(v for v, p in zip(self.values, self._weights(), strict=True) if p > 0.0)

    def _engine_form(self) -> tuple[str, list[float]]:
        return "choice", [*self.values, *self._weights()]


@dataclass(frozen=True, repr=False)
class Samples(Distribution):
    """Observed values, each as likely as any other. Made by `samples`."""

    _kind: ClassVar[str] = "samples"
    values: tuple[float, ...]
    _: KW_ONLY
    name: str | None = None
    stated_nominal: Any = field(default=None, metadata=STATED)

    def __post_init__(self) -> None:
        _set(self, values=_finite_values(self.values, "samples.values"), name=_name(self))
        self._check_nominal()

    @property
    def low(self) -> float:
        """Smallest value."""
        return min(self.values)

    @property
    def high(self) -> float:
        """Largest value."""
        return max(self.values)

    def _usual_nominal(self) -> float:
        # The median, of an even number of values the lower one of the two in the middle.
        return lower_median(self.values)

    def _values(self) -> tuple[float, ...]:
        return self.values

    def _engine_form(self) -> tuple[str, list[float]]:
        return "samples", list(self.values)


def lower_median(values: tuple[float, ...]) -> float:
    """Return the median that is itself one of the values."""
    return sorted(values)[(len(values) - 1) // 2]


def _set(spread: Any, **values: Any) -> None:
    for key, value in values.items():
        object.__setattr__(spread, key, value)


def _name(spread: Any) -> str | None:
    return checked_label(spread.name, f"{spread._kind}.name")


def _is_open(bound: object) -> bool:
    return bound is None or (isinstance(bound, float) and math.isinf(bound))


def _positive(value: object, place: str) -> float:
    plain = plain_number(value, place, "a number above 0")
    if plain <= 0.0:
        raise DescriptionError(place, value, "a number above 0")
    return plain


def _shape(value: object, place: str) -> float:
    plain = _positive(value, place)
    least, most = BETA_SHAPES
    if plain < least:
        raise DescriptionError(place, value, f"a shape of at least {least:g}", "Write choice([low, high], [...]).")
    if plain > most:
        raise DescriptionError(place, value, f"a shape of at most {most:g}", "Write normal(mean, sd, low, high).")
    return plain


def _non_negative(value: object, place: str) -> float:
    plain = plain_number(value, place, "a number of at least 0")
    if plain < 0.0:
        raise DescriptionError(place, value, "a number of at least 0")
    return plain


def _check_bounds(kind: str, low: float, high: float) -> None:
    if low > high:
        raise DescriptionError(f"{kind}.low", low, f"a number not above high = {high:g}", "Swap low and high.")
    if not math.isfinite(high - low):
        raise DescriptionError(f"{kind}.high", high, "bounds whose distance double precision can hold")


def _middle(low: float, high: float) -> float:
    return min(max(low + 0.5 * (high - low), low), high)


def _check_truncation(mean: float, sd: float, low: float, high: float) -> None:
    if low > high or (low == high and sd > 0.0):
        mend = "Swap low and high." if low > high else "Write the number instead of a spread."
        raise DescriptionError("normal.low", low, f"a number below high = {high:g}", mend)
    if sd == 0.0:
        if not low <= mean <= high:
            raise DescriptionError("normal.mean", mean, f"a mean from low = {low:g} to high = {high:g}")
        return
    below, above = (low - mean) / sd, (high - mean) / sd
    # The difference of two tails on the side where both are small.
    root = math.sqrt(2.0)
    if below > 0.0:
        mass = 0.5 * (math.erfc(below / root) - math.erfc(above / root))
    else:
        mass = 0.5 * (math.erfc(-above / root) - math.erfc(-below / root))
    if mass <= LEAST_MASS:
        mend = f"Less than {LEAST_MASS:g} of it is between {low:g} and {high:g}; check mean, sd and bounds."
        raise DescriptionError("normal.low", low, "bounds that leave some of the distribution", mend)


def _finite_values(values: object, place: str) -> tuple[float, ...]:
    items = checked_sequence(values, place, "a list of numbers")
    if not items:
        raise DescriptionError(place, "an empty list", "at least one number")
    if len(items) > MOST_VALUES:
        raise DescriptionError(place, f"{len(items)} numbers", f"at most {MOST_VALUES} numbers")
    return tuple(plain_number(item, f"{place}[{i}]") for i, item in enumerate(items))


def _check_probabilities(probabilities: tuple[float, ...], count: int) -> None:
    place = "choice.probabilities"
    if len(probabilities) != count:
        raise DescriptionError(place, f"{len(probabilities)} numbers", f"{count} numbers, one a value")
    for i, p in enumerate(probabilities):
        if p < 0.0:
            raise DescriptionError(f"{place}[{i}]", p, "a number of at least 0")
    if abs(math.fsum(probabilities) - 1.0) > 1e-9:
        raise DescriptionError(place, math.fsum(probabilities), "numbers that add up to 1", "This is their sum.")
