"""Active disturbance rejection controllers.

Linear, of any order from 1 to 8, with a current observer. Output form: G. Herbst, 2013, A simulative study on
active disturbance rejection control (ADRC) as a control tool for practitioners, Electronics 2(3):246-279,
doi 10.3390/electronics2030246. Error form: R. Madonski, G. Herbst, M. Stankovic, 2023, ADRC in output and
error form, Control Theory and Technology, doi 10.1007/s11768-023-00129-y.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import KW_ONLY, dataclass, field
from typing import TYPE_CHECKING, Any, ClassVar

from ._descriptions import Description
from ._errors import DescriptionError
from ._numbers import (
    ANY,
    NONZERO,
    POSITIVE,
    Number,
    Rule,
    checked_choice,
    checked_flag,
    checked_integer,
    checked_number,
    checked_numbers,
    takes,
)

if TYPE_CHECKING:
    from ._describe import Numbers

HIGHEST_ORDER = 8
_FACTOR: Rule = POSITIVE


@dataclass(frozen=True, repr=False)
class _LinearADRC(Description):
    """What both forms have in common."""

    form: ClassVar[str]

    order: int
    _: KW_ONLY
    b0: Number = field(metadata=takes(NONZERO))
    controller_bandwidth: Number | None = field(default=None, metadata=takes(POSITIVE))
    observer_bandwidth: Number | None = field(default=None, metadata=takes(POSITIVE))
    controller_gains: Sequence[Number] | None = None
    observer_gains: Sequence[Number] | None = None
    controller_gain_factor: Number = field(default=1.0, metadata=takes(_FACTOR))
    observer_gain_factor: Number = field(default=1.0, metadata=takes(_FACTOR))
    discretisation: str = "zero_order_hold"
    observer_input: str = "limited"
    observer_start: str = "zero"
    cancel_disturbance: bool = True

    def __post_init__(self) -> None:
        order = checked_integer(self.order, "controller.order", 1, HIGHEST_ORDER)
        self._put("order", order)
        self._put("b0", checked_number(self.b0, "controller.b0", NONZERO))
        self._one_of_two("controller", order)
        self._one_of_two("observer", order + 1)
        for name in ("controller_gain_factor", "observer_gain_factor"):
            self._put(name, checked_number(getattr(self, name), f"controller.{name}", _FACTOR))
        for name, words in (
            ("discretisation", ("zero_order_hold", "euler")),
            ("observer_input", ("limited", "commanded")),
            ("observer_start", ("zero", "measured")),
        ):
            self._put(name, checked_choice(getattr(self, name), f"controller.{name}", words))
        checked_flag(self.cancel_disturbance, "controller.cancel_disturbance")

    def _put(self, name: str, value: object) -> None:
        object.__setattr__(self, name, value)

    def _one_of_two(self, part: str, count: int) -> None:
        """Check that either the bandwidth or the gains of a part are given."""
        bandwidth, gains = f"{part}_bandwidth", f"{part}_gains"
        given, listed = getattr(self, bandwidth), getattr(self, gains)
        if (given is None) == (listed is None):
            found = "neither" if given is None else "both"
            expected = f"either {bandwidth} or {gains}"
            raise DescriptionError(f"controller.{bandwidth}", found, expected, "Give exactly one of the two.")
        if given is not None:
            self._put(bandwidth, checked_number(given, f"controller.{bandwidth}", POSITIVE))
        else:
            self._put(gains, checked_numbers(listed, f"controller.{gains}", ANY, count))

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        described: dict[str, Any] = {
            "form": self.form,
            "order": self.order,
            "discretisation": self.discretisation,
            "observer_input": self.observer_input,
            "observer_start": self.observer_start,
            "cancel_disturbance": self.cancel_disturbance,
        }
        for name in ("b0", "controller_gain_factor", "observer_gain_factor"):
            described[name] = numbers.take(getattr(self, name), f"controller.{name}")
        for name in ("controller_bandwidth", "observer_bandwidth"):
            if getattr(self, name) is not None:
                described[name] = numbers.take(getattr(self, name), f"controller.{name}")
        for name in ("controller_gains", "observer_gains"):
            if getattr(self, name) is not None:
                described[name] = numbers.take_all(getattr(self, name), f"controller.{name}")
        return described


@dataclass(frozen=True, repr=False)
class OutputADRC(_LinearADRC):
    """Linear ADRC in output form: the observer follows the measured output.

    Parameters
    ----------
    order : int
        Order n of the design model y^(n) = f + b0 u, 1 to 8.
    b0 : float or spread
        Critical gain, of the sign of the plant's input gain.
    controller_bandwidth, observer_bandwidth : float or spread, rad/s
        Bandwidths; all poles of the closed loop and of the observer are placed there.
    controller_gains, observer_gains : sequence of float or spread
        Instead of a bandwidth: k_1 ... k_n, and the correction gains l_1 ... l_(n+1) of the discrete current
        observer.
    controller_gain_factor, observer_gain_factor : float or spread
        Factors on all gains; 0.5 is the half-gain tuning (Herbst, Hempel, Goehrt, Streif 2020).
    discretisation : {"zero_order_hold", "euler"}
        How the observer is discretised; its poles are at exp(-observer_bandwidth * sample_period) either way.
    observer_input : {"limited", "commanded"}
        What the observer is told of the command: after limits, rate limit and resolution, or before.
    observer_start : {"zero", "measured"}
        All estimates zero, or the first one at the first measurement.
    reference_derivatives : int, optional
        How many derivatives of the reference are fed, 0 to n; all n by default. The command is
        u = (k_1 (r - x_1) + k_2 (r' - x_2) + ... + k_n (r^(n-1) - x_n) + r^(n) - x_(n+1)) / b0,
        in which the derivatives above that number count as zero: 0 feeds the reference alone, n - 1 leaves out
        the feedforward r^(n). They are those of the time function: a step has none, a table of straight lines
        has the first, a jerk-limited profile three.
    cancel_disturbance : bool
        False leaves the estimated total disturbance uncancelled.
    """

    form: ClassVar[str] = "output"

    reference_derivatives: int | None = field(default=None, kw_only=True)

    def __post_init__(self) -> None:
        super().__post_init__()
        place = "controller.reference_derivatives"
        if isinstance(self.reference_derivatives, bool):
            mend = "Write 0 to feed none; leave it out to feed all."
            raise DescriptionError(place, self.reference_derivatives, f"a whole number from 0 to {self.order}", mend)
        if self.reference_derivatives is not None:
            self._put("reference_derivatives", checked_integer(self.reference_derivatives, place, 0, self.order))

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        fed = self.order if self.reference_derivatives is None else self.reference_derivatives
        return {**super()._describe(numbers), "reference_derivatives": fed}


@dataclass(frozen=True, repr=False)
class ErrorADRC(_LinearADRC):
    """Linear ADRC in error form: the observer follows the control error, reference minus measured output.

    u = (k_1 x_1 + ... + k_n x_n + x_(n+1)) / b0 with x_1 ... x_n the estimates of the error and its derivatives.
    It needs no derivatives of the reference: they are part of those estimates, and what they would feed forward
    is part of the estimated total disturbance. Parameters as for `OutputADRC`, without `reference_derivatives`.
    """

    form: ClassVar[str] = "error"


Controller = OutputADRC | ErrorADRC
