"""The functions that make measures. Each is a reducer over a signal in a window, in seconds, both ends included."""

from __future__ import annotations

import math
from typing import Any

from ._arguments import explained
from ._errors import DescriptionError
from ._measures import Measure
from ._numbers import ANY, NON_NEGATIVE, POSITIVE, Rule, check_order, checked_number

#: A band wider than the change holds the initial value: whatever happens, it would be settled from the start.
_BAND = Rule("a fraction of the change above 0, at most 1 (2 % is 0.02)", low=0.0, open_low=True, high=1.0)
_FRACTION = Rule("a fraction of the change from 0 to 1", low=0.0, high=1.0)


@explained
def peak(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the largest magnitude of a signal in a window."""
    return Measure("peak", signal, after, before)


@explained
def minimum(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the smallest value of a signal in a window."""
    return Measure("minimum", signal, after, before)


@explained
def maximum(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the largest value of a signal in a window."""
    return Measure("maximum", signal, after, before)


@explained
def mean(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the mean of a signal over the samples in a window."""
    return Measure("mean", signal, after, before)


@explained
def rms(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the root mean square of a signal over the samples in a window."""
    return Measure("rms", signal, after, before)


@explained
def standard_deviation(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the root mean square of a signal about its mean in a window."""
    return Measure("standard_deviation", signal, after, before)


@explained
def final(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the last value of a signal in a window."""
    return Measure("final", signal, after, before)


@explained
def integral_absolute(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of the magnitude of a signal (trapezium rule over the samples)."""
    return Measure("integral_absolute", signal, after, before)


@explained
def integral_square(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of the square of a signal (trapezium rule over the samples)."""
    return Measure("integral_square", signal, after, before)


@explained
def integral_time_absolute(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of magnitude times the time since the window's start."""
    return Measure("integral_time_absolute", signal, after, before)


@explained
def total_variation(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the sum of the magnitudes of all changes of a signal from sample to sample."""
    return Measure("total_variation", signal, after, before)


@explained
def rms_change(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the root mean square of the change of a signal from sample to sample."""
    return Measure("rms_change", signal, after, before)


@explained
def time_outside(signal: str, low: Any, high: Any, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the time that a signal spends outside [low, high], in steps of the sample period."""
    low = checked_number(low, "time_outside.low", ANY)
    high = checked_number(high, "time_outside.high", ANY)
    check_order(low, high, "time_outside.low", strict=False)
    return Measure("time_outside", signal, after, before, low=low, high=high)


@explained
def peak_to_peak(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the largest value of a signal less its smallest one in a window."""
    return Measure("peak_to_peak", signal, after, before)


@explained
def reversals(signal: str, dead_band: Any = 0.0, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure how often a signal turns round: its changes from rising to falling and from falling to rising.

    Parameters
    ----------
    signal : str
        Name of the signal.
    dead_band : float or spread
        A turn counts once the signal has come back from its last extreme by more than this, in its own unit.
        Noise and rounding within it do not count.
    after, before : float or spread, s
        Window. The first direction in it is no turn; a signal that holds keeps its direction.
    """
    dead_band = checked_number(dead_band, "reversals.dead_band", NON_NEGATIVE)
    return Measure("reversals", signal, after, before, dead_band=dead_band)


@explained
def time_of_peak(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the time from the window's start to the first sample with the largest magnitude of a signal."""
    return Measure("time_of_peak", signal, after, before)


@explained
def difference(first: Any, second: Any) -> Measure:
    """Measure one measure less another: what `first - second` makes, as study files write it."""
    return Measure("difference", "", first=first, second=second)


@explained
def ratio(first: Any, second: Any) -> Measure:
    """Measure one measure over another: what `first / second` makes, as study files write it."""
    return Measure("ratio", "", first=first, second=second)


@explained
def overshoot(signal: str = "output", after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the largest excess over the final reference, as a fraction of the change.

    The change goes from the signal at the window's first sample to the reference at its last one (IEC
    60050-351:2013, 351-45-38). Where the window ends at the instant at which the reference jumps, it is the
    reference before the jump. Without a change the overshoot is infinite.
    """
    return Measure("overshoot", signal, after, before)


@explained
def undershoot(signal: str = "output", after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the largest move to the wrong side of the initial value, as a fraction of the change."""
    return Measure("undershoot", signal, after, before)


@explained
def rise_time(
    low: Any = 0.1, high: Any = 0.9, signal: str = "output", after: Any = 0.0, before: Any = math.inf
) -> Measure:
    """Measure the time from fraction `low` to `high` of the change (IEC 60050-351:2013, 351-45-36).

    The change is that of `overshoot`. Where there is none, or `high` is not reached, the rise time is infinite.
    """
    low = checked_number(low, "rise_time.low", _FRACTION)
    high = checked_number(high, "rise_time.high", _FRACTION)
    check_order(low, high, "rise_time.low")
    return Measure("rise_time", signal, after, before, low=low, high=high)


@explained
def settling_time(
    band: Any = None,
    tolerance: Any = None,
    signal: str | None = None,
    after: Any = 0.0,
    before: Any = math.inf,
) -> Measure:
    """Measure the time from the window's start until a signal stays within a band.

    Parameters
    ----------
    band : float or spread, optional
        Half width of the band around the final reference as a fraction of the change; 0.02 by default
        (IEC 60050-351:2013, 351-45-37). The signal is "output" by default.
    tolerance : float or spread, optional
        Instead of `band`: half width of the band about zero, in the unit of the signal, "error" by default.
    signal : str, optional
        Name of the signal.
    after, before : float or spread, s
        Window. A signal outside the band at its end gives infinity.
    """
    if band is not None and tolerance is not None:
        raise DescriptionError("settling_time.tolerance", tolerance, "either band or tolerance")
    if tolerance is not None:
        tolerance = checked_number(tolerance, "settling_time.tolerance", POSITIVE)
        return Measure("settling_time", "error" if signal is None else signal, after, before, tolerance=tolerance)
    band = checked_number(0.02 if band is None else band, "settling_time.band", _BAND)
    return Measure("settling_time", "output" if signal is None else signal, after, before, band=band)


@explained
def time_in_saturation(after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the time that the command spends at a limit of the actuator."""
    return Measure("time_in_saturation", "command", after, before)


@explained
def ise(after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of the squared error."""
    return Measure("ise", "error", after, before)


@explained
def iae(after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of the magnitude of the error."""
    return Measure("iae", "error", after, before)


@explained
def itae(after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of time since the window's start times the magnitude of the error."""
    return Measure("itae", "error", after, before)
