"""What the programs in Python share."""

from __future__ import annotations

import math


def observer_gains(bandwidth: float, ts: float) -> tuple[float, float, float]:
    """Return the correction gains of the current observer of order 2 with zero-order hold.

    All poles at exp(-bandwidth * ts); Miklosovic, Radke, Gao, Discrete implementation and generalization of the
    extended state observer, American Control Conference 2006.
    """
    z = math.exp(-bandwidth * ts)
    return 1.0 - z**3, 1.5 * (1.0 - z) ** 2 * (1.0 + z) / ts, (1.0 - z) ** 3 / ts**2
