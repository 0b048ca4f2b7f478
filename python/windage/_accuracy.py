"""How many integration steps a study needs: chosen by comparison with a reference that needs no choice.

Pilot trials (`_pilots`) are run with 1, 2, 4, ... steps in a sample period. The smallest number is taken with which
every measure of every pilot that finishes under the reference lies within the difference that `_scales` allows,
which is a millionth of the signals that it reads or a thousandth of its limit, and with which no pilot that diverges
under the reference passes.

A pilot that fails under the reference may move so irregularly (a limit cycle, chaos) that no number of steps repeats
its path. Where that alone is in the way, failing pilots are compared coarsely: the same requirements missed, and
every measure within a tenth of its size. The verdict says so, and what is chosen here is examined again after the
run (`_audit`).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ._errors import DescriptionError
from ._loop import Loop
from ._pilots import Parts, Pilots, pilots_of
from ._reporter import Reporter
from ._runner import Columns
from ._scales import Values
from ._slack import slack_of

CANDIDATES = (1, 2, 4, 8, 16, 32, 64, 128, 256)
#: Steps where no pilot finishes under the reference, so that nothing can be compared.
UNCOMPARED_STEPS = 16
#: How near failing pilots have to come where nothing better can be had, of their size.
COARSE = 0.1


@dataclass(frozen=True)
class Choice:
    """The steps chosen, and what a verdict has to say of the choice; empty if nothing."""

    steps: int
    caution: str = ""


def chosen_steps(parts: Parts, reporter: Reporter | None = None) -> Choice:
    """Return the integration steps in a sample period.

    Parameters
    ----------
    parts : tuple
        Loop, requirements, measures, correlations and seed of the study.
    reporter : Reporter, optional
        Of the call that waits for the choice.

    Raises
    ------
    DescriptionError
        If 256 steps are not enough.
    KeyboardInterrupt
        If the reporter was asked to stop.
    """
    loop = parts[0]
    if isinstance(loop.steps_per_sample, int):
        return Choice(loop.steps_per_sample)
    if loop.plant.is_linear:
        return Choice(1)
    pilots = pilots_of(parts, reporter)
    if not pilots.finished.any():
        caution = (
            f"Every one of {len(pilots.trials)} pilot trials diverges, so the integration steps could not be chosen by "
            f"comparison; {UNCOMPARED_STEPS} a sample period were taken."
        )
        return Choice(UNCOMPARED_STEPS, caution)
    found: dict[int, Columns] = {}
    for steps in CANDIDATES:
        found[steps] = pilots.with_steps(steps, loop.integrator, reporter)
        worst = _complaint(pilots, found[steps], pilots.allowed)
        if not worst:
            return Choice(steps)
    coarse = _allowed_coarsely(pilots)
    for steps in CANDIDATES:
        if not _complaint(pilots, found[steps], coarse):
            caution = (
                "Some failing pilot trials move so irregularly that their paths depend on the integration steps; they "
                f"were compared to a tenth only, which {steps} steps a sample period meet."
            )
            return Choice(steps, caution)
    expected = f"at most {CANDIDATES[-1]} steps in a sample period to be enough"
    mend = f"With {CANDIDATES[-1]} steps {worst}. {_way_out(loop)}; or set steps_per_sample to a number of your own."
    raise DescriptionError("loop.steps_per_sample", "auto", expected, mend)


def _way_out(loop: Loop) -> str:
    """Say what is most likely the reason that no number of steps is enough."""
    if loop.integrator == "euler":
        return "Euler's method is of order 1: take integrator='rk4'"
    if loop.plant.may_jump:
        return "Jumps in the equations may be the reason (write tanh for sign)"
    return (
        "The equations do not jump, but a loop that swings between limits, of its actuator or of a max, min or clip, "
        "does not repeat itself: try a slower tuning, or another b0"
    )


def _allowed_coarsely(pilots: Pilots) -> Values:
    """Return the differences allowed where a failing pilot has to come near only."""
    failing = pilots.finished & ~(pilots.slack >= 0.0).all(axis=1)
    return np.where(failing, np.maximum(pilots.allowed, COARSE * pilots.size), pilots.allowed)


def _complaint(pilots: Pilots, columns: Columns, allowed: Values) -> str:
    """Say what is wrong with a candidate: the first other fate or the largest difference; nothing if all is well."""
    finished = pilots.finished
    slack = slack_of(pilots.sized.described, pilots.parts[1], columns.parameters, columns.measures, columns.status)
    other_fate = (columns.status != 0) & finished
    if other_fate.any():
        return f"trial {pilots.trials[np.argmax(other_fate)]} diverges, and with the reference it does not"
    passes = (columns.status == 0) & (slack >= 0.0).all(axis=1) & ~finished
    if passes.any():
        return f"trial {pilots.trials[np.argmax(passes)]} passes, and with the reference it diverges"
    excess = _excess(pilots, columns, allowed)
    if excess.size and float(np.max(excess)) > 1.0:
        row, place = np.unravel_index(int(np.argmax(excess)), excess.shape)
        difference = abs(float(columns.measures[row, place] - pilots.columns.measures[row, place]))
        label = pilots.sized.described.measures[int(row)].label
        return f"'{label}' of trial {pilots.trials[place]} differs from the reference by {difference:.3g}"
    # Where a difference is allowed that is wider than the slack, the requirement still has to come out the same.
    return _other_side(pilots, slack)


def _excess(pilots: Pilots, columns: Columns, allowed: Values) -> Values:
    """Return each difference as a multiple of what is allowed, 0 for pilots that cannot be compared."""
    own = slice(len(allowed))
    ours, theirs = columns.measures[own], pilots.columns.measures[own]
    with np.errstate(invalid="ignore", over="ignore"):  # an excess beyond all numbers is one
        same = (ours == theirs) | (np.isnan(ours) & np.isnan(theirs))
        excess = np.where(same, 0.0, np.abs(ours - theirs) / allowed)
    return np.where(pilots.finished, np.where(np.isnan(excess), np.inf, excess), 0.0)


def _other_side(pilots: Pilots, slack: Values) -> str:
    rows = list(pilots.sized.described.requirement_rows)
    clear: NDArray[np.bool_] = ~(np.abs(pilots.slack) <= pilots.allowed[rows].T)
    other = clear & ((slack >= 0.0) != (pilots.slack >= 0.0)) & pilots.finished[:, None]
    if not other.any():
        return ""
    place, number = np.argwhere(other)[0]
    return f"trial {pilots.trials[place]} comes out differently for '{pilots.parts[1][number].label}'"
