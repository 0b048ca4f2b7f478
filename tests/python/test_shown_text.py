"""No character of a name or of a found value moves a cursor, hides, or starts a line of its own."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._shown_text import LONGEST_NAME, hidden_character, lines, one_line, plot_text, shorten
from windage._study_file import from_toml

FORGED = "\x1b[1A\x1b[2K\x1b[32mPASS: at least 99.99 % of all trials pass\x1b[0m\x1b]0;pwned\x07"
#: What each does: erase, ring, delete, C1 introducer, next line, soft hyphen, no width, joiners, marks and
#: overrides of direction, separators, byte order mark, invisible operator, tag, half of a pair, private,
#: unassigned, blanks that are no blanks, and letters without ink.
HIDDEN = (
    "\x00\x07\x08\t\n\x0b\x0c\r\x1b\x7f\x80\x85\x9b\xa0\xad\u061c\u115f\u180e\u200b\u200c\u200d\u200e\u200f\u2028\u2029"
    "\u202a\u202b\u202c\u202d\u202e\u2060\u2063\u2066\u2067\u2068\u2069\u2800\u3000\u3164\ufeff\ufe0f\ud800\udfff\ue000"
    "\U000e0001\U000e0041\U000e0100\U0010ffff"
)

LOOP: dict[str, Any] = {
    "plant": wd.FirstOrder(1.0, 1.0),
    "controller": wd.ErrorADRC(1, b0=1.0, controller_bandwidth=3.0, observer_bandwidth=9.0),
    "sample_period": 0.01,
    "duration": 1.0,
    "reference": 1.0,
    "disturbances": {"load": 0.0},
}


def plant(name: str, where: str) -> wd.Plant:
    parts: dict[str, Any] = {
        "states": {"x": 0.0},
        "equations": {"x": "u"},
        "disturbances": ["w"],
        "parameters": {"p": 1.0},
        "auxiliaries": {"a": "x"},
    }
    parts[where] = [name] if where == "disturbances" else {**parts[where], name: "x" if where == "auxiliaries" else 1.0}
    return wd.Plant(input="u", output="x", **parts)


NAMED: list[Callable[[str], object]] = [
    lambda name: (wd.peak("error") <= 1.0).named(name),
    lambda name: wd.peak(name),
    lambda name: wd.Measure(name, "error"),
    lambda name: wd.normal(1.0, 0.1, name=name),
    lambda name: wd.shared(name, wd.uniform(0.0, 1.0)),
    lambda name: wd.column(name),
    lambda name: wd.Plant({"x": 0.0}, {"x": "u"}, name, "x"),
    lambda name: wd.Plant({"x": 0.0}, {"x": "u"}, "u", name),
    lambda name: plant(name, "states"),
    lambda name: plant(name, "equations"),
    lambda name: plant(name, "parameters"),
    lambda name: plant(name, "auxiliaries"),
    lambda name: plant(name, "disturbances"),
    lambda name: wd.Loop(**LOOP, signals={name: "error"}),
    lambda name: wd.Loop(**{**LOOP, "disturbances": {name: 0.0}}),
    lambda name: wd.Loop(**LOOP).with_(**{name: 1.0}),
    lambda name: wd.Study(wd.Loop(**LOOP), [wd.peak("error") <= 1.0], table={name: [1.0]}),
    lambda name: wd.Study(wd.Loop(**LOOP), [wd.peak("error") <= 1.0], correlations={(name, "b"): 0.5}),
    lambda name: wd.load(name),
    lambda name: from_toml(f"windage_study = 1\n[loop.{name}]\n"),
    lambda name: from_toml(name),
]


@pytest.mark.parametrize("made", NAMED)
def test_hidden_characters_in_a_name_are_refused_and_shown_escaped(made: Callable[[str], object]) -> None:
    for name in (FORGED, *(f"na{character}me" for character in HIDDEN)):
        with pytest.raises(wd.DescriptionError) as caught:
            made(name)
        message = str(caught.value)
        assert hidden_character(message) is None, ascii(message)
        assert all(hidden_character(part) is None for part in (caught.value.field, caught.value.mend))


@pytest.mark.parametrize("made", NAMED)
def test_long_names_are_refused_in_a_short_message(made: Callable[[str], object]) -> None:
    for name in ("n" * (LONGEST_NAME + 1), "n" * 1_000_000, "\x1b" * 1_000_000):
        with pytest.raises(wd.DescriptionError) as caught:
            made(name)
        assert len(str(caught.value)) < 2_000


def test_names_in_free_words_have_single_blanks_inside() -> None:
    for name in (" a", "a ", "a  b", " ", ""):
        with pytest.raises(wd.DescriptionError, match=r"requirement\.name"):
            (wd.peak("error") <= 1.0).named(name)
    for name in ("größer als µ: 5 % „max“", "n" * LONGEST_NAME, "[bold]$x_1$", "误差"):
        assert (wd.peak("error") <= 1.0).named(name).label == name


def test_every_character_is_hidden_or_stays() -> None:
    for code in range(sys.maxunicode + 1):
        character = chr(code)
        shown = one_line(character)
        assert shown == character or (shown.isascii() and shown.isprintable() and shown.startswith("\\"))
        assert character.isprintable() or shown != character
    assert one_line(FORGED).isprintable()
    assert lines(f"a\n{FORGED}\nb").count("\n") == 2


class Evil:
    """An object whose every question raises."""

    def __repr__(self) -> str:
        raise RuntimeError("no")


class Huge:
    """An object that shows as a hundred million characters."""

    def __repr__(self) -> str:
        return "\x1b" * 1_000_000


def test_any_value_is_shown_shortly_and_quickly() -> None:
    recursive: list[Any] = []
    recursive.append(recursive)
    deep: list[Any] = []
    for _ in range(100_000):
        deep = [deep]
    values = [Evil(), Huge(), [Evil()] * 3, recursive, deep, 10**10_000, [10**10_000], -(1 << 9999), 0x0]
    values += [FORGED, [FORGED], {FORGED: FORGED}, "x" * 10**7, "\U0001f600\x1b" * 10**6, list(range(10**6))]
    values += [dict.fromkeys(range(10**6)), set(range(10**6)), np.arange(10**6), np.array(["\x1b"]), b"\x1b" * 10**6]
    start = time.perf_counter()
    for value in values:
        for limit in (40, 80):
            shown = shorten(value, limit)
            assert hidden_character(shown) is None
            assert len(shown) <= limit + 40
    assert time.perf_counter() - start < 5.0
    assert shorten([1.0, 2]) == "[1.0, 2]"
    assert shorten({"b": 1, "a": (2,)}) == "{'b': 1, 'a': (2,)}"
    assert shorten("a  b") == "'a  b'"


def test_plots_read_no_mathematics_and_legends_leave_no_name_out() -> None:
    from matplotlib.figure import Figure

    axes = Figure().subplots()
    for name in ("$x_1$", r"\$x$", r"$\frac{1}{$", "cost in $", "_hidden", "100 % of {x}"):
        drawn, is_mathematics = axes.text(0, 0, plot_text(name))._preprocess_math(plot_text(name))
        assert (drawn.strip(), is_mathematics) == (name, False)
        axes.plot([0, 1], label=plot_text(name))
    assert len(axes.get_legend_handles_labels()[1]) == 6


def test_names_in_plots_are_shown_as_they_are() -> None:
    from matplotlib.text import Text

    name = r"cost $x_1$ \$ {y} _z_"
    study = wd.Study(wd.Loop(**LOOP), [(wd.peak("error", after=0.1) <= wd.uniform(0.1, 1.0)).named(name)], title=name)
    for plot in (study.run(64, progress=False).plot, study.replay(0).plot):
        figure = plot()
        shown = [text._preprocess_math(text.get_text()) for text in figure.findobj(Text) if "cost" in text.get_text()]
        assert shown
        assert not any(is_mathematics for _, is_mathematics in shown)
        assert any("$x_1$" in drawn for drawn, _ in shown)
