"""Pieces and promises of all plots: nothing of Matplotlib's state is touched."""

from __future__ import annotations

import inspect
import itertools
import subprocess
import sys
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

import windage as wd
from windage import _plots
from windage._plot_style import MOST_POINTS, StudyFigure, thinned, wrapped

sys.path.insert(0, str(Path(__file__).parent))
from plotted import TRIALS, servo


@pytest.fixture(scope="module")
def outcome() -> wd.Outcome:
    return servo().run(TRIALS, progress=False)


@pytest.mark.parametrize("kind", [wd.Outcome, wd.Replay])
def test_arguments_of_plot_are_in_its_signature_and_explained(kind: Any) -> None:
    parameters = inspect.signature(kind.plot).parameters
    names = [name for name in parameters if name != "self"]
    assert names
    for name in names:
        assert parameters[name].kind is inspect.Parameter.KEYWORD_ONLY
        assert name in kind.plot.__doc__
    function = _plots.plot_outcome if kind is wd.Outcome else _plots.plot_replay
    assert list(inspect.signature(function).parameters)[1:] == names


@given(
    arrays.arrays(
        np.float64,
        st.integers(1, 6 * MOST_POINTS),
        elements=st.floats(-1e6, 1e6, width=32),
        fill=st.floats(-1.0, 1.0, width=32),
    )
)
def test_thinning_keeps_every_extreme(values: Any) -> None:
    time = np.arange(float(len(values)))
    x, y = thinned(time, values)
    assert len(y) <= MOST_POINTS
    assert y.min() == values.min()
    assert y.max() == values.max()
    assert np.all(np.diff(x) > 0.0)
    np.testing.assert_array_equal(values[x.astype(int)], y)


@pytest.mark.parametrize(
    "text", ["disturbances.wind.intensity", "rms of torque <= 12.5", "a.b.c.d of x", "a_long_name_of_it"]
)
@pytest.mark.parametrize("width", [8, 12, 40])
def test_wrapping_breaks_between_parts_only(text: str, width: int) -> None:
    lines = wrapped(text, width).split("\n")
    assert "".join(lines).replace(" ", "") == text.replace(" ", "")
    for before, after in itertools.pairwise(lines):
        assert before.endswith(".") is after[0].isalpha() or not before.endswith(".")
        assert not before[-2:-1].isdigit() or not before.endswith(".")


def test_a_notebook_gets_a_picture(outcome: wd.Outcome) -> None:
    figure = outcome.plot(parameters=0)
    assert isinstance(figure, StudyFigure)
    assert figure._repr_png_().startswith(b"\x89PNG")


def test_same_outcome_same_picture(outcome: wd.Outcome) -> None:
    assert outcome.plot()._repr_png_() == outcome.plot()._repr_png_()


def test_settings_of_matplotlib_are_left_alone(outcome: wd.Outcome) -> None:
    before = dict(mpl.rcParams)
    outcome.plot()
    outcome.study.replay(0).plot()
    assert dict(mpl.rcParams) == before


def test_pyplot_is_never_imported() -> None:
    code = (
        "import sys, windage as wd\n"
        "from windage._demo import demo_study\n"
        "study = demo_study().with_(duration=6.0)\n"
        "study.run(32, progress=False).plot()._repr_png_()\n"
        "study.nominal().plot()._repr_png_()\n"
        "print('matplotlib.pyplot' in sys.modules)\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "False\n"


def test_without_matplotlib_the_error_says_how_to_get_it(outcome: wd.Outcome, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(_plots, "has_matplotlib", lambda: False)
    for plotted in (outcome, outcome.study.nominal()):
        with pytest.raises(wd.WindageError, match=r"pip install 'windage\[plots\]'"):
            plotted.plot()
