"""Each test counts looks at its trials from none, whatever other tests have judged in the same process."""

from __future__ import annotations

import pytest

from windage import _looks


@pytest.fixture(autouse=True)
def _no_looks_so_far(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(_looks, "_judged", {})
    monkeypatch.setattr(_looks, "_stopped", {})
