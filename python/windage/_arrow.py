"""Outcomes as Arrow tables. PyArrow is imported on use."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from ._outcome import Outcome


def outcome_table(outcome: Outcome) -> Any:
    """Return the outcome as a `pyarrow.Table` that shares the memory of its numbers."""
    import pyarrow as pa  # type: ignore[import-untyped]

    from ._outcome import STATUS

    columns: dict[str, Any] = {
        "trial": pa.array(np.arange(outcome.first, outcome.first + outcome.trials, dtype=np.int64))
    }
    columns |= {name: pa.array(values) for name, values in outcome.parameters.items()}
    columns |= {name: pa.array(values) for name, values in outcome.measures.items()}
    for i, label in enumerate(outcome.requirements):
        columns[f"slack of {label}"] = pa.array(outcome.slack[:, i])
    columns["passed"] = pa.array(outcome.passed)
    indices = pa.array(outcome.status.view(np.int8))
    columns["status"] = pa.DictionaryArray.from_arrays(indices, pa.array(STATUS))
    return pa.table(columns)
