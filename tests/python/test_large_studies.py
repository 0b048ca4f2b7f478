"""Cost grows with the size of a study and not with its square, and limits hold before anything is built."""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

import windage as wd
from windage import _loop, _measures, _plants, _study_text
from windage._describe import MOST_CORRELATED, MOST_DRAWN, Numbers
from windage._equations import LONGEST_TEXTS, MOST_INSTRUCTIONS
from windage._plants import MOST_AUXILIARIES, MOST_PARAMETERS, MOST_STATES
from windage._study_checks import MOST_MEASURES, MOST_REQUIREMENTS
from windage._study_file import LARGEST_FILE, from_toml, to_toml
from windage._toml_depth import DEEPEST_NESTING, check_depth

TUNING: dict[str, Any] = {"b0": 1.0, "controller_bandwidth": 3.0, "observer_bandwidth": 9.0}
LOOP = wd.Loop(
    plant=wd.FirstOrder(1.0, 1.0),
    controller=wd.ErrorADRC(1, **TUNING),
    sample_period=0.01,
    duration=1.0,
    reference=1.0,
    disturbances={"load": 0.0},
)
REQUIREMENT = wd.peak("error") <= 1.0


def with_signals(count: int) -> wd.Study:
    signals = {f"s{i}": f"error*{i + 1} + command" for i in range(count)}
    return wd.Study(LOOP.with_(signals=signals), [REQUIREMENT])


def with_parameters(count: int, correlated: int = 0) -> wd.Study:
    plant = wd.Plant({"x": 0.0}, {"x": "u"}, "u", "x", parameters={f"p{i}": wd.uniform(0, 1) for i in range(count)})
    correlations = {(f"plant.p{i}", f"plant.p{i + 1}"): 0.1 for i in range(correlated)}
    return wd.Study(LOOP.with_(plant=plant, disturbances={}), [REQUIREMENT], correlations=correlations or None)


def with_measures(count: int) -> wd.Study:
    return wd.Study(LOOP, measures=[wd.peak("error", after=i * 1e-5) for i in range(count)])


def with_requirements(count: int) -> wd.Study:
    return wd.Study(LOOP, [(wd.peak("error") <= wd.uniform(0, 1)).named(f"r{i}") for i in range(count)])


def with_table(count: int) -> wd.Study:
    table = wd.Table([i * 1e-3 for i in range(count)], [wd.uniform(0, 1)] * count)
    return wd.Study(LOOP.with_(reference=table), [REQUIREMENT])


def bound(study: wd.Study) -> wd.Study:
    """A study written, read and run once: every part of the way."""
    again = from_toml(to_toml(study))
    again.with_(loop=again.loop.with_(steps_per_sample=1)).run(1, progress=False)
    return again


def cpu_seconds(make: Callable[[], object]) -> float:
    best = float("inf")
    for _ in range(3):
        start = time.process_time()
        make()
        best = min(best, time.process_time() - start)
    return best


@pytest.mark.parametrize(
    ("make", "count"),
    [
        (with_signals, 100),
        (with_parameters, 300),
        (with_measures, 200),
        (with_requirements, 200),
        (with_table, 300),
    ],
)
def test_four_times_the_parts_cost_about_four_times_as_much(make: Callable[[int], wd.Study], count: int) -> None:
    few, many = (cpu_seconds(lambda n=n: bound(make(n))) for n in (count, 4 * count))  # type: ignore[misc]
    # Square cost would be 16 times.
    assert many < 8.0 * few + 0.02


def test_correlations_cost_as_much_as_there_are_pairs() -> None:
    groups = [{(f"plant.p{2 * i}", f"plant.p{2 * i + 1}"): 0.1 for i in range(count)} for count in (500, 2000)]
    study = with_parameters(4000)
    few, many = (cpu_seconds(lambda g=g: study.with_(correlations=g)) for g in groups)  # type: ignore[misc]
    assert many < 8.0 * few + 0.02


def test_every_expression_is_parsed_once(monkeypatch: pytest.MonkeyPatch) -> None:
    from windage import _equations

    parsed: list[object] = []
    parse = _equations.parse
    monkeypatch.setattr(_equations, "parse", lambda text, field: (parsed.append(text), parse(text, field))[1])
    with_signals(400)
    assert len(parsed) == 400


def chained(count: int) -> dict[str, str]:
    return {"s0": "error", **{f"s{i}": f"s{i - 1}*command + {i}" for i in range(1, count)}}


def test_expressions_that_read_each_other_are_bounded_together() -> None:
    LOOP.with_(signals=chained(200))
    with pytest.raises(wd.EquationError, match=f"at most {MOST_INSTRUCTIONS} operations altogether"):
        LOOP.with_(signals=chained(_loop.MOST_SIGNALS))


def test_programs_of_signals_are_those_of_each_alone() -> None:
    from windage._equations import compile_each, compile_equations

    texts = {"a": "sin(x) + u*u", "b": "a*a - u", "c": "2*sin(x)"}
    together = compile_each(texts, list(texts), ["x", "u"], field="f")
    for name in texts:
        assert together[name] == compile_equations({}, ["x", "u"], field="f", auxiliaries=texts, outputs=[name])


def long_texts(count: int) -> dict[str, str]:
    text = "x + 0"
    return {f"a{i}": text + " " * (LONGEST_TEXTS // 50 - len(text)) for i in range(count)}


TOO_MANY: list[tuple[Callable[[], object], str, int]] = [
    (lambda: wd.Plant({"x": 0.0}, {"x": "u"}, "u", "x", auxiliaries=long_texts(50)), "plant.equations", LONGEST_TEXTS),
    (lambda: LOOP.with_(signals=long_texts(51)), "loop.signals", LONGEST_TEXTS),
    (lambda: wd.Plant([f"x{i}" for i in range(MOST_STATES + 1)], {}, "u", "x0"), "plant.states", MOST_STATES),
    (lambda: with_parameters(MOST_PARAMETERS + 1), "plant.parameters", MOST_PARAMETERS),
    (lambda: with_measures(MOST_MEASURES + 1), "study.measures", MOST_MEASURES),
    (lambda: with_requirements(MOST_REQUIREMENTS + 1), "study.requirements", MOST_REQUIREMENTS),
    (lambda: with_signals(_loop.MOST_SIGNALS + 1), "loop.signals", _loop.MOST_SIGNALS),
    (lambda: with_table(MOST_DRAWN + 1), "reference.values", MOST_DRAWN),
    (lambda: with_parameters(MOST_CORRELATED + 1, MOST_CORRELATED), "study.correlations", MOST_CORRELATED),
    (
        lambda: wd.Plant(
            {"x": 0.0}, {"x": "u"}, "u", "x", auxiliaries={f"a{i}": "x" for i in range(MOST_AUXILIARIES + 1)}
        ),
        "plant.auxiliaries",
        MOST_AUXILIARIES,
    ),
]


@pytest.mark.parametrize(("make", "field", "most"), TOO_MANY)
def test_too_many_parts_are_refused_with_the_limit(make: Callable[[], object], field: str, most: int) -> None:
    with pytest.raises(wd.DescriptionError, match=f"(at most|1 to) {most}") as caught:
        make()
    assert caught.value.field.startswith(field)


def test_limits_are_where_users_read_them() -> None:
    documented = [
        (wd.Plant, MOST_STATES),
        (wd.Plant, MOST_PARAMETERS),
        (wd.Plant, MOST_AUXILIARIES),
        (wd.Loop, _loop.MOST_SIGNALS),
        (wd.Loop, MOST_INSTRUCTIONS),
        (wd.Loop, LONGEST_TEXTS),
        (wd.Plant, LONGEST_TEXTS),
        (wd.Study, MOST_MEASURES),
        (wd.Study, MOST_REQUIREMENTS),
        (wd.Study, MOST_DRAWN),
        (wd.Study, MOST_CORRELATED),
    ]
    for where, most in documented:
        assert f"{most:,}".replace(",", " " if most >= 10_000 else "") in str(where.__doc__), (where, most)
    assert (LARGEST_FILE, MOST_STATES, MOST_DRAWN) == (5_000_000, 100, 10_000)
    assert {_loop.MOST_SIGNALS, MOST_REQUIREMENTS, MOST_MEASURES} == {1000}
    words = (Path(__file__).parents[2] / "README.md").read_text(encoding="utf-8")
    stated = "at most 5 MB, 100 states, 1 000 signals, requirements and measures each, and 10 000 drawn parameters"
    assert stated in " ".join(words.split())


def refused(text: str, expected: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Refuse a file, and make none of its parts before."""

    def never(*_: object, **__: object) -> None:
        raise AssertionError("built before the limit was looked at")

    for place, name in ((_measures.Measure, "__post_init__"), (_plants.Plant, "__post_init__"), (Numbers, "take")):
        monkeypatch.setattr(place, name, never)
    start = time.process_time()
    with pytest.raises(wd.StudyFileError, match=expected) as caught:
        from_toml(text)
    assert time.process_time() - start < 2.0
    assert len(str(caught.value)) < 2_000


def test_files_with_too_much_are_refused_before_anything_is_built(monkeypatch: pytest.MonkeyPatch) -> None:
    head = "windage_study = 1\n"
    plant = '[loop.plant]\nkind = "Plant"\ninput = "u"\noutput = "x"\n[loop.plant.states]\nx = 0.0\n'
    loop = f"{head}[loop]\nsample_period = 0.1\nduration = 1.0\n{plant}"
    for part in ("measures", "requirements"):
        items = f'[[{part}]]\nmeasure = "peak"\nsignal = "error"\n' * 20_000
        refused(f"{head}{items}[loop]\n", f"{part}: found '20000 items'; expected at most 1000", monkeypatch)
    spread = '{ spread = "uniform", low = 0.0, high = 1.0 }'
    drawn = "".join(f"p{i} = {spread}\n" for i in range(30_000))
    refused(f"{loop}[loop.plant.parameters]\n{drawn}", f"at most {_study_text.MOST_KEYS}", monkeypatch)
    refused(head + "x" * LARGEST_FILE, f"at most {LARGEST_FILE}", monkeypatch)


DEEP = {
    "dotted header": "[" + ".".join("a" * 100_000) + "]\n",
    "dotted key": ".".join("a" * 500) + " = 1\n",
    "quoted dotted key": " . ".join(['"a.b"', "'c'"] * 250) + " = 1\n",
    "inline tables": "a = " + "{ a = " * 500,
    "lists": "a = " + "[" * 100_000,
    "after a text with quotes at its end": 'a = { b = """x"""", ' + ".".join("b" * 500) + ' = "" }',
    "after a comment": "# [[[\n" + ".".join("a" * 500) + " = 1\n",
}


@pytest.mark.parametrize("shape", DEEP)
def test_deep_files_are_refused_at_once(shape: str, monkeypatch: pytest.MonkeyPatch) -> None:
    refused("windage_study = 1\n" + DEEP[shape], f"TOML with at most {DEEPEST_NESTING}", monkeypatch)


def test_depth_is_that_of_keys_and_brackets_outside_of_texts() -> None:
    many = "[{." * 100
    for text in (f'"{many}"', f"'{many}'", f'"""{many}\n"x""{many}"""""', f"'''{many}\n'x''{many}'''''", f"1 #{many}"):
        check_depth(f"a = {text}\n[b.c]\n")
    check_depth("[a]\nb = [1.5, 2.5]\n" * 1000)
    check_depth("a.b.c = [[[1.0]]]\n" * 1000)
    check_depth('a = "open [[[')
    check_depth('a = """open' + "[" * 1000)


@pytest.mark.parametrize("digits", ["0x" + "f" * 5000, "1" * 5000, "1e999", "0b" + "1" * 5000])
def test_numbers_of_many_digits_are_refused_shortly(digits: str) -> None:
    text = to_toml(wd.Study(LOOP, [REQUIREMENT])).replace("seed = 0", f"seed = {digits}")
    with pytest.raises(wd.StudyFileError) as caught:
        from_toml(text)
    assert len(str(caught.value)) < 2_000
