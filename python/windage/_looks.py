"""How often the trials of a study have been judged, counted over all outcomes and tallies of a process.

A verdict's confidence is that of one look at a number of trials that was fixed beforehand. Whoever runs on until a
verdict pleases, or picks the range of trials that does, has another chance of error with each look. Looks are therefore
counted by the study, not by the object that holds its trials: another range of trials of the same study is a further
look, whether it comes from `extend`, from a longer run, from a batch or from a tally, and the same range again is none.
A stopped run that was judged is a look as soon as its study is judged at another end than the one planned then. What
an outcome has seen travels with it to another process. A new seed, loop or limit is another study; a further measure
or another name is not.
"""

from __future__ import annotations

from collections.abc import Iterable

#: Index of the first trial, number of trials that were run, and number asked for: larger for a run that was stopped.
Look = tuple[int, int, int]
#: By what the study claims: at which trials it was judged, and which it was stopped after and shown.
_judged: dict[str, set[Look]] = {}
_stopped: dict[str, set[Look]] = {}


def look(claim: str, first: int, trials: int, known: Iterable[Look] = ()) -> frozenset[Look]:
    """Note that trials were judged.

    Parameters
    ----------
    claim : str
        What the study claims, `Study._claim`.
    first, trials : int
        Index of the first trial, and their number.
    known : iterable of Look
        What was judged of the study elsewhere.

    Returns
    -------
    frozenset of Look
        All looks at the study so far.
    """
    judged = _judged.setdefault(claim, set())
    judged.update(known)
    judged.update(stop for stop in _stopped.get(claim, ()) if (stop[0], stop[2]) != (first, trials))
    judged.add((first, trials, trials))
    return frozenset(judged)


def stopped(claim: str, first: int, trials: int, requested: int) -> None:
    """Note that trials of a stopped run were shown."""
    if trials:
        _stopped.setdefault(claim, set()).add((first, trials, requested))
