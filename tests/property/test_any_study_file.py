"""Whatever stands in a study file: it loads, or one short windage error says what is wrong."""

from __future__ import annotations

import random
import time
from collections.abc import Callable
from pathlib import Path

import pytest

import windage as wd
from windage._demo import demo_study
from windage._shown_text import hidden_character
from windage._study_file import from_toml, to_toml

SEED = 20261201
MUTANTS = 250
STUDIES = sorted((Path(__file__).parents[2] / "notebooks-examples" / "studies").glob("*.toml"))

#: Values that belong nowhere, or nearly.
VALUES = (
    "true", "0", "-1", "1e308", "5e-324", "inf", "nan", "-0.0", "0x" + "f" * 5000, "9" * 400, "9" * 5000, "1e400",
    "''", '"word"', r'"\u001b[2K\u202e"', '"' + "x" * 5000 + '"', '"""a\nb"""', "1979-05-27", "07:32:00",
    "1979-05-27T07:32:00Z", "[]", "[[]]", "[1, 'a', true]", "[1.0, 2.0]", "[[1.0, 2.0], [3.0]]", "{}", "{ a = 1 }",
    '{ spread = "uniform" }', '{ spread = "uniform", low = 0.0, high = 1.0 }', '{ spread = "normal", mean = 1 }',
    '{ spread = 1 }', '{ spread = ["uniform"] }', '{ column = "c" }', '{ column = "c", d = 1 }', '{ shared = "s" }',
    '{ kind = "Step", amplitude = 1.0 }', '{ kind = "Nothing" }', '{ kind = [] }', '{ kind = {} }', '{ "" = 1 }',
    '{ measure = "peak" }', '{ between = 1 }', "[" * 100, "[" * 30 + "]" * 30, "{ a = " * 30 + "1" + " }" * 30,
    '"__import__(\'os\').system(\'true\')"', '"' + "(" * 5000 + '"', '"x" * 3', "",
)  # fmt: skip
KEYS = (
    "kind", "spread", "shared", "column", "measure", "name", "", '""', "a.b.c", '"a b"', '"\\u001b"', "__class__",
    "self", "loop", "seed", "windage_study", "states", "signals", "table", "correlations", "x" * 5000,
)  # fmt: skip
Mutation = Callable[[random.Random, str], str]


def byte(dice: random.Random, text: str) -> str:
    """Change, remove or insert some characters."""
    for _ in range(dice.randint(1, 4)):
        at = dice.randrange(len(text))
        new = dice.choice(
            ["", chr(dice.randrange(0x80)), chr(dice.randrange(0x80)) + text[at], "\x00", "\u202e", "\ufeff"]
        )
        text = text[:at] + new + text[at + 1 :]
    return text


def value(dice: random.Random, text: str) -> str:
    """Put another value behind a key."""
    return _at_line(dice, text, lambda line: f"{line.split('=')[0]}= {dice.choice(VALUES)}" if "=" in line else line)


def key(dice: random.Random, text: str) -> str:
    """Put another key before a value."""
    return _at_line(dice, text, lambda line: f"{dice.choice(KEYS)} ={line.split('=', 1)[1]}" if "=" in line else line)


def number(dice: random.Random, text: str) -> str:
    """Change a number inside a line."""
    digits = [i for i, c in enumerate(text) if c.isdigit()]
    at = dice.choice(digits)
    return text[:at] + dice.choice(["1e9", "1e-9", "-", "0", "e", "_", "9" * 50, "nan"]) + text[at + 1 :]


def lines(dice: random.Random, text: str) -> str:
    """Remove, repeat or exchange lines."""
    rows = text.split("\n")
    a, b = dice.randrange(len(rows)), dice.randrange(len(rows))
    change = dice.randrange(3)
    if change == 0:
        del rows[a]
    elif change == 1:
        rows.insert(b, rows[a])
    else:
        rows[a], rows[b] = rows[b], rows[a]
    return "\n".join(rows)


def heading(dice: random.Random, text: str) -> str:
    """Put a part under another heading."""
    headings = [line for line in text.split("\n") if line.startswith("[")]
    new = dice.choice(
        [*headings, "[[loop]]", "[requirements]", "[loop.plant.states.x]", "[a.b.c.d.e]", "[loop.signals]"]
    )
    return text.replace(dice.choice(headings), new, 1)


def _at_line(dice: random.Random, text: str, change: Callable[[str], str]) -> str:
    rows = text.split("\n")
    at = dice.randrange(len(rows))
    rows[at] = change(rows[at])
    return "\n".join(rows)


MUTATIONS: tuple[Mutation, ...] = (byte, value, key, number, lines, heading)


def check(text: str, load: Callable[[str], wd.Study] = from_toml) -> None:
    start = time.process_time()
    try:
        study = load(text)
    except wd.WindageError as error:
        message = str(error)
        assert len(message) < 2_000, text
        assert hidden_character(message) is None, text
    except Exception as error:
        raise AssertionError(f"{type(error).__name__}: {error}\n{text}") from error
    else:
        assert from_toml(to_toml(study)) == study
    assert time.process_time() - start < 5.0, text


@pytest.mark.parametrize("mutate", MUTATIONS)
def test_changed_files_load_or_are_explained(mutate: Mutation) -> None:
    texts = [path.read_text(encoding="utf-8") for path in STUDIES] + [to_toml(demo_study())]
    dice = random.Random(f"{SEED} {mutate.__name__}")
    for _ in range(MUTANTS):
        text = dice.choice(texts)
        for _ in range(dice.randint(1, 3)):
            text = mutate(dice, text)
        check(text)


def test_mixed_changes_load_or_are_explained() -> None:
    text = to_toml(demo_study())
    dice = random.Random(SEED)
    for _ in range(2 * MUTANTS):
        changed = text
        for _ in range(dice.randint(1, 6)):
            changed = dice.choice(MUTATIONS)(dice, changed)
        check(changed)


def test_files_that_are_no_text_are_explained(tmp_path: Path) -> None:
    dice = random.Random(SEED)
    text = to_toml(demo_study()).encode()
    file = tmp_path / "study.toml"
    for _ in range(MUTANTS):
        changed = bytearray(text)
        for _ in range(dice.randint(1, 3)):
            changed[dice.randrange(len(changed))] = dice.randrange(256)
        file.write_bytes(changed)
        check(changed.decode(errors="backslashreplace"), lambda _: wd.load(file))
