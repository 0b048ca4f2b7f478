"""What a verdict does not cover, in short lines that every verdict prints.

A verdict bounds one thing: the chance that a trial of the described loop passes. The lines say what lies
outside, so that the number is not read as more than it is.
"""

from __future__ import annotations

from collections.abc import Sequence
from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_EVEN, Decimal

from windage import _statistics

REPEATED_LOOKS = (
    "Deciding again and again at this bound does not keep the confidence: plan the number of trials "
    "beforehand and use fresh trials (another seed)."
)
PERMISSION = (
    "Simulation is evidence, not permission: local codes, the applicable functional-safety standard and "
    "licensed practice decide."
)


def standing_cautions(diverged: int, not_varied: Sequence[str], looks: int) -> tuple[str, ...]:
    """Return the lines that every verdict carries.

    Parameters
    ----------
    diverged : int
        Trials that diverged.
    not_varied : sequence of str
        Names of the numbers that were held at one value.
    looks : int
        Times these trials have been judged, this one included.

    Returns
    -------
    tuple of str
        Six sentences.
    """
    held = listed(not_varied) if not_varied else "nothing was listed; a number without spread kept its value"
    return (
        "The claim is about the model and the stated spreads; the error of the model is in no bound.",
        f"Not varied: {held}.",
        f"Diverged trials count as failures ({grouped(diverged)} here); none is left out.",
        f"Interim results are no verdicts; looks at these trials so far: {grouped(looks)}.",
        "Hardware and software faults, misuse and human error are not covered.",
        PERMISSION,
    )


def situational_cautions(
    failures: int, trials: int, confidence: float, looks: int, truncated: Sequence[str]
) -> tuple[str, ...]:
    """Return the lines that this outcome calls for, in the order of their weight.

    Parameters
    ----------
    failures, trials : int
        What was observed.
    confidence : float
        Confidence of the bound.
    looks : int
        Times these trials have been judged, this one included.
    truncated : sequence of str
        Names of the spreads whose tails are cut off.

    Returns
    -------
    tuple of str
        Zero to three sentences.
    """
    lines = (
        no_failure_seen(failures, trials, confidence),
        repeated_looks(looks),
        truncated_spreads(truncated),
    )
    return tuple(line for line in lines if line)


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
    judged = f"These trials were judged {grouped(looks)} times; the stated confidence holds for one."
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
