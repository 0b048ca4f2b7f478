"""Slack: the signed distance of a measure to its limit."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from ._describe import Described
from ._measures import Requirement

Values = NDArray[np.float64]


def slack_of(
    described: Described,
    requirements: Sequence[Requirement],
    parameters: Values,
    measures: Values,
    status: NDArray[np.uint8],
) -> Values:
    """Return the slack of each requirement in each trial.

    Parameters
    ----------
    described : Described
        Tells the measure and the limit of each requirement.
    requirements : sequence of Requirement
        The requirements.
    parameters, measures : ndarray, shape (parameters, trials) and (measures, trials)
        Columns of a run; a drawn limit is that of its trial.
    status : ndarray of uint8, shape (trials,)
        0: finished.

    Returns
    -------
    ndarray, shape (trials, requirements)
        At least 0 where met; -infinity where the trial diverged or the measure is undefined. Each requirement
        is contiguous in memory.
    """
    slack = np.empty((len(requirements), len(status)))
    for i, requirement in enumerate(requirements):
        values = measures[described.requirement_rows[i]]
        limit = described.limits[i]
        bound = parameters[limit[1]] if isinstance(limit, tuple) else limit
        slack[i] = bound - values if requirement.at_most is not None else values - bound
        slack[i, (status != 0) | np.isnan(values)] = -np.inf
    slack.flags.writeable = False
    return slack.T
