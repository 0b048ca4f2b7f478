"""How often the trials of a study have been judged, counted over all outcomes and tallies of a process.

A verdict's confidence is that of one look at a number of trials that was fixed beforehand. Whoever runs on until a
verdict pleases has another chance of error with each look. Looks are therefore counted by the study, not by the
object that holds its trials: another number of trials of the same study is a further look, whether it comes from
`extend`, from a longer run or from a tally, and the same number again is none. What an outcome has seen travels with
it to another process. A new seed, loop or requirement is another study.
"""

from __future__ import annotations

from collections.abc import Iterable

#: By the digest of the study and the index of the first trial: after how many trials they were judged.
_judged: dict[tuple[str, int], set[int]] = {}


def look(digest: str, first: int, trials: int, known: Iterable[int] = ()) -> frozenset[int]:
    """Note that trials were judged.

    Parameters
    ----------
    digest : str
        Of the study.
    first, trials : int
        Index of the first trial, and their number.
    known : iterable of int
        Numbers of trials at which they were judged elsewhere.

    Returns
    -------
    frozenset of int
        All numbers of trials at which these, from the same first one on, have been judged so far.
    """
    judged = _judged.setdefault((digest, first), set())
    judged.update(known)
    judged.add(trials)
    return frozenset(judged)
