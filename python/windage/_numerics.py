"""What numerical error can change in a count of failures: what a verdict has to be told of it."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class Numerics:
    """What is known of the numerical error behind a count of failures.

    Attributes
    ----------
    text : str
        What was examined and what came of it, one line of the verdict.
    hidden : int
        Trials that passed and count as failed: under tighter integration they fail, or might.
    doubtful : int
        Trials that failed and do not count where a claim is refuted: under tighter integration they pass, or might.
    caution : str
        A sentence on what to do or to bear in mind; empty where there is nothing to say.
    is_open : bool
        Whether the examination is missing where it was wanted, so that nothing can be decided.
    is_stopped : bool
        Whether that is because it was interrupted.
    """

    text: str
    hidden: int = 0
    doubtful: int = 0
    caution: str = ""
    is_open: bool = False
    is_stopped: bool = False


#: Of counts whose origin is unknown.
UNKNOWN = Numerics(text="")
#: Of an outcome whose numerical error nobody wanted to know.
UNEXAMINED = Numerics(
    text="numerical error not examined", caution="Numerical error was not examined; it is in no bound."
)
