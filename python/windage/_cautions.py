"""What a verdict does not cover, in short lines that every verdict prints.

A verdict bounds one thing: the chance that a trial of the described loop passes. The lines say what lies
outside, so that the number is not read as more than it is.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_EVEN, Decimal
from typing import TYPE_CHECKING

from windage import _statistics

if TYPE_CHECKING:
    from windage._verdict import Verdict

REPEATED_LOOKS = (
    "Deciding again and again at this bound does not keep the confidence: plan the number of trials "
    "beforehand and use fresh trials (another seed)."
)
PERMISSION = (
    "Simulation is evidence, not permission: local codes, the applicable functional-safety standard and "
    "licensed practice decide."
)
#: What holds for trials that are no independent ones of a number fixed beforehand.
_OF_KIND = {
    "sample": "The confidence holds for one look, at a number of trials that was fixed beforehand.",
    "list": "A list was run, each row once, with one draw of whatever else varies: nothing is claimed of other units.",
    "one trial": "No spread and no noise: all trials are the same one, and their number is no evidence.",
    "interim": (
        "Whoever stops a run when it looks good gets a bound that is too good: no bound is given. What was observed "
        "so far is of those trials only."
    ),
}
#: Listed values that have to lie in the fraction that may fail; below, they say little about that fraction.
VALUES_IN_THE_TAIL = 10


def standing_cautions(verdict: Verdict) -> tuple[str, ...]:
    """Return the lines that every verdict carries: six sentences, fewer where another one says it already."""
    held = listed(verdict.not_varied) or "nothing was listed; a number without spread kept its value"
    kind = _OF_KIND[verdict.basis.kind] if verdict.looks == 1 or verdict.basis.kind != "sample" else ""
    lines = (
        "The claim is about the model and the stated spreads; the error of the model is in no bound.",
        f"Not varied: {held}.",
        f"Diverged trials count as failures ({grouped(verdict.diverged)} here); none is left out.",
        kind,
        "Hardware and software faults, misuse and human error are not covered.",
        PERMISSION,
    )
    return tuple(filter(None, lines))


def situational_cautions(verdict: Verdict, *, unfailed: bool = True) -> tuple[str, ...]:
    """Return the lines that this outcome calls for, in the order of their weight.

    Parameters
    ----------
    verdict : Verdict
        With what was observed.
    unfailed : bool
        Say what is left open where no failure was seen.
    """
    is_sample = verdict.basis.kind == "sample"
    lines = (
        no_failure_seen(verdict.failures, verdict.trials, verdict.confidence) if unfailed and is_sample else "",
        repeated_looks(verdict.looks) if is_sample else "",
        *(f"Advice: {line}." for line in verdict.advice),
        truncated_spreads(verdict.truncated),
        few_values(verdict.few_values) if is_sample else "",
    )
    return tuple(filter(None, lines))


def few_listed(values: Mapping[str, int], at_least: float) -> tuple[str, ...]:
    """Return the spreads that draw from too few listed values to tell of the fraction that a claim lets fail."""
    fraction = _statistics.complement(at_least)
    few = {name: count for name, count in values.items() if count * fraction < VALUES_IN_THE_TAIL}
    return tuple(f"{name} ({grouped(count)} value{'' if count == 1 else 's'})" for name, count in few.items())


def few_values(few: Sequence[str]) -> str:
    """Name the spreads that draw from few observed values; empty if there is none."""
    if not few:
        return ""
    return (
        f"Drawn from few observed values, nothing beyond them was tried and their tails are not known: {listed(few)}."
    )


def no_failure_seen(failures: int, trials: int, confidence: float) -> str:
    """Say what "no failure" leaves open, in words; empty if there was a failure or no trial.

    The bound is 1 - (1 - confidence)^(1/trials), said as "1 in N" with N rounded down, so that the words
    never promise more than the bound.
    """
    if failures or not trials:
        return ""
    bound = _statistics.zero_failure_upper(trials, confidence)
    share = f"1 in {grouped(int(1.0 / bound))}" if bound <= 0.5 else percent_above(bound)
    return f"No failure seen in {trials_in_words(trials)}: up to {share} could still fail."


def repeated_looks(looks: int) -> str:
    """Warn that the confidence does not hold after several looks; empty after one."""
    if looks <= 1:
        return ""
    judged = f"Trials of this study were judged {grouped(looks)} times; the stated confidence holds for one."
    return f"{judged} {REPEATED_LOOKS}"


def truncated_spreads(truncated: Sequence[str]) -> str:
    """Name the spreads with cut tails; empty if there is none."""
    if not truncated:
        return ""
    return f"Tails cut off, nothing beyond them was tried: {listed(truncated)}."


def grouped(count: int) -> str:
    """Write a count in groups of three digits; the no-break space keeps a line from ending inside it."""
    return f"{count:,}".replace(",", "\u00a0")


def trials_in_words(trials: int) -> str:
    """Write `1 trial` or `4 000 trials`."""
    return f"{grouped(trials)}\u00a0trial{'' if trials == 1 else 's'}"


def listed(names: Sequence[str], most: int = 12) -> str:
    """Join names by commas; beyond `most` of them say how many more there are."""
    shown = ", ".join(names[:most])
    return shown if len(names) <= most else f"{shown} and {len(names) - most} more"


def percent(probability: float) -> str:
    """Write a stated probability in percent, without trailing zeros."""
    return _percent(probability, _decimals(probability) + 2, ROUND_HALF_EVEN, trim=True)


def percent_below(probability: float) -> str:
    """Write a lower bound in percent, rounded down: the words never promise more than the number."""
    return _percent(probability, _decimals(probability), ROUND_FLOOR)


def percent_above(probability: float) -> str:
    """Write an upper bound in percent, rounded up."""
    return _percent(probability, _decimals(probability), ROUND_CEILING)


def percent_near(probability: float) -> str:
    """Write an estimate in percent, rounded to nearest."""
    return _percent(probability, _decimals(probability), ROUND_HALF_EVEN)


def _decimals(probability: float) -> int:
    """Return the decimals that show three digits of the smaller of pass and failure probability."""
    rare = 100 * min(Decimal(repr(probability)), 1 - Decimal(repr(probability)))
    return 2 if rare == 0 else min(max(2, 2 - rare.adjusted()), 14)


def _percent(probability: float, decimals: int, rounding: str, trim: bool = False) -> str:
    # The shortest decimal of the double is what was written or printed elsewhere; rounding starts from it.
    value = (100 * Decimal(repr(probability))).quantize(Decimal(1).scaleb(-decimals), rounding)
    text = f"{value:f}"
    if (trim or value in (0, 100)) and "." in text:
        text = text.rstrip("0").rstrip(".")
    return f"{text}\u00a0%"
