"""floor, round and mod in equations and signals, and constants that give no finite number."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._equations import compile_equations, evaluate_reference
from windage._loader import engine

Values = np.ndarray
INF, NAN = math.inf, math.nan


def same(a: Any, b: Any) -> None:
    """Equal to the bit, with one kind of undefined number."""
    a, b = np.broadcast_arrays(np.asarray(a, dtype=float), np.asarray(b, dtype=float))
    np.testing.assert_array_equal(a, b)
    defined = ~np.isnan(a)
    np.testing.assert_array_equal(np.signbit(a[defined]), np.signbit(b[defined]))


def of_engine(name: str, *columns: Any) -> Values:
    result: Values = engine().lane_function(name, *(np.ascontiguousarray(x, dtype=float) for x in columns))
    return result


WHOLE = [0.0, 0.3, 0.5, 0.7, 1.0, 1.5, 2.5, 2.0**51 + 0.5, 2.0**52 - 0.5, 2.0**52 + 1.0, 2.0**53, 1e300, 5e-324, INF]


def test_floor_and_round_are_those_of_numpy() -> None:
    x = np.concatenate([WHOLE, np.negative(WHOLE), [NAN], np.random.default_rng(1).normal(size=4000) * 100.0])
    x = np.concatenate([x, np.nextafter(x, INF), np.nextafter(x, -INF)])
    same(of_engine("floor", x), np.floor(x))
    same(of_engine("nearest_integer", x), np.rint(x))


def quotients() -> tuple[Values, Values]:
    """Numbers beside multiples of the divisor, ordinary ones, subnormal ones, and both signs of each."""
    rng = np.random.default_rng(3)
    n = 20_000
    divisor = rng.choice([-1.0, 1.0], 4 * n) * 10.0 ** rng.uniform(-3.0, 3.0, 4 * n)
    count = np.concatenate(
        [rng.integers(-5, 5, n), rng.integers(-(10**6), 10**6, n), rng.integers(-(2**49), 2**49, 2 * n)]
    )
    x = divisor * count
    x[::3] = np.nextafter(x[::3], INF)
    x[1::3] = np.nextafter(x[1::3], -INF)
    x[::5] += rng.uniform(-1.0, 1.0, len(x[::5])) * divisor[::5]
    tiny = 5e-324 * rng.integers(1, 1000, n)
    return np.concatenate([x, 777 * tiny + 5e-324]), np.concatenate([divisor, tiny])


def test_remainder_is_exact_and_has_the_sign_of_the_divisor() -> None:
    """NumPy's remainder is made of C's fmod, which is exact; no division enters it."""
    x, divisor = quotients()
    rest = of_engine("floored_remainder", x, divisor)
    same(rest, np.mod(x, divisor))
    assert np.all(np.signbit(rest) == np.signbit(divisor))
    assert np.all(np.abs(rest) <= np.abs(divisor))


def test_remainder_at_its_limits() -> None:
    x = np.array([5.0, -5.0, 0.0, -0.0, -1e-20, 1.0, 2.0**51, 2.0**51 - 1.0, 1e300, INF, NAN, 1.0, 3.0, -7.0])
    divisor = np.array([3.0, 3.0, -2.0, 2.0, 1.0, 0.0, 1.0, 1.0, 1.0, 2.0, 1.0, NAN, INF, -7.0])
    expected = [2.0, 1.0, -0.0, 0.0, 1.0, NAN, NAN, 0.0, NAN, NAN, NAN, NAN, NAN, -0.0]
    same(of_engine("floored_remainder", x, divisor), expected)


EQUATIONS = {
    "stairs": "floor(8*position)/8",
    "coded": "round(position/0.01)*0.01",
    "wrapped": "mod(position + pi, 2*pi) - pi",
    "saw": "mod(t, 0.3)",
    "backwards": "mod(position, -0.25)",
    "by_parameter": "mod(4*position, size) + floor(size) - round(size)",
}


def plant(**options: Any) -> wd.Plant:
    settings: dict[str, Any] = {
        "states": {"position": 0.0, "speed": 0.0},
        "equations": {"position": "speed", "speed": "torque - 0.5*speed - 0.2*round(position)"},
        "input": "torque",
        "output": "position",
        "parameters": {"size": wd.uniform(0.3, 1.7)},
        "auxiliaries": EQUATIONS,
    }
    return wd.Plant(**{**settings, **options})


def study(of: wd.Plant, **options: Any) -> wd.Study:
    adrc = wd.ErrorADRC(2, b0=1.0, controller_bandwidth=3.0, observer_bandwidth=20.0)
    loop = wd.Loop(of, adrc, 0.01, 2.0, wd.Sine(5.0, 1.5), steps_per_sample=4, **options)
    return wd.Study(loop, [wd.peak("error") <= 9.0], seed=4)


def test_signals_of_the_engine_are_those_of_the_reference_to_the_bit() -> None:
    case = study(plant())
    program = compile_equations(EQUATIONS, ["position", "size", "t"], field="test")
    for trial in (0, 5):
        replay = case.replay(trial)
        values = {"position": replay["position"], "size": replay.parameters["size"], "t": replay.time}
        assert np.ptp(replay["position"]) > 2.0
        for name, expected in zip(EQUATIONS, evaluate_reference(program, values), strict=True):
            same(replay[name], expected)


@pytest.mark.parametrize(("term", "jumps"), [("floor(position)", True), ("round(3*t)", True), ("mod(speed, 1)", True)])
def test_equations_with_a_rounding_may_jump(term: str, jumps: bool) -> None:
    rough = plant(equations={"position": "speed", "speed": f"torque - {term}"})
    smooth = plant(equations={"position": "speed", "speed": "torque - 0.1*speed"})
    assert rough.may_jump is jumps
    assert not smooth.may_jump


def folded(text: str) -> float:
    (instruction,) = compile_equations({"e": text}, ["x"], field="test").code
    assert instruction.op == "constant"
    return instruction.constant


@pytest.mark.parametrize("x", [*WHOLE[:-3], *(-x for x in WHOLE[:-3])])
def test_constants_are_folded_to_the_digits_of_the_engine(x: float) -> None:
    same(folded(f"floor({x!r})"), of_engine("floor", [x])[0])
    same(folded(f"round({x!r})"), of_engine("nearest_integer", [x])[0])
    for divisor in (0.7, -3.0, 1e6):
        if abs(x / divisor) < 2.0**51:
            same(folded(f"mod({x!r}, {divisor!r})"), of_engine("floored_remainder", [x], [divisor])[0])


REFUSED = [
    ("log(-1) + x", "log(-1)", 1, "above 0"),
    ("x + log(0)", "log(0)", 5, "above 0"),
    ("x*2**1024", "2**1024", 3, "1.8e308"),
    ("pow(2, 1024.5)", "pow(2, 1024.5)", 1, "1.8e308"),
    ("10**309", "10**309", 1, "1.8e308"),
    ("9**9**9", "9**9**9", 1, "1.8e308"),
    ("1/0", "1/0", 1, "a divisor other than 0"),
    ("x/(1 - 1)", "x/(1 - 1)", 1, "a divisor other than 0"),
    ("x/sin(0)", "x/sin(0)", 1, "a divisor other than 0"),
    ("mod(x, 0)", "mod(x, 0)", 1, "a divisor other than 0"),
    ("mod(1e300, 1)", "mod(1e300, 1)", 1, "2^51"),
    ("sqrt(-1)", "sqrt(-1)", 1, "not negative"),
    ("sqrt(cos(pi))", "sqrt(cos(pi))", 1, "not negative"),
    ("1e999", "1e999", 1, "1.8e308"),
    ("x + exp(710)", "exp(710)", 5, "1.8e308"),
    ("cosh(1000)", "cosh(1000)", 1, "1.8e308"),
    ("sinh(-800)", "sinh(-800)", 1, "1.8e308"),
    ("asin(2)", "asin(2)", 1, "from -1 to 1"),
    ("acos(-1 - exp(-30))", "acos(-1 - exp(-30))", 1, "from -1 to 1"),
    ("sin(2**31)", "sin(2**31)", 1, "2^30"),
    ("exp(exp(100))", "exp(exp(100))", 1, "1.8e308"),
    ("0**-0.5", "0**-0.5", 1, "a base other than 0"),
    ("(-8)**(1/3)", "(-8)**(1/3)", 1, "not negative under"),
    ("where(x > 0, log(-1), 0)", "log(-1)", 14, "above 0"),
    ("log(-1) if x > 0 else 0", "log(-1)", 1, "above 0"),
    ("log(min(-1, 2))", "log(min(-1, 2))", 1, "above 0"),
    ("log(not 1)", "log(not 1)", 1, "above 0"),
    ("log(where(1, -abs(3), 2))", "log(where(1, -abs(3), 2))", 1, "above 0"),
]


@pytest.mark.parametrize(("text", "part", "column", "expected"), REFUSED, ids=[text for text, *_ in REFUSED])
def test_constants_that_give_no_finite_number_are_refused_at_their_place(
    text: str, part: str, column: int, expected: str
) -> None:
    with pytest.raises(wd.EquationError) as caught:
        plant(equations={"position": "speed", "speed": text}, auxiliaries={"x": "position"})
    assert f"found '{part}' at column {column};" in str(caught.value)
    assert expected in str(caught.value)
    assert caught.value.field == "plant.equations['speed']"


@pytest.mark.parametrize(
    "text",
    ["log(1e-300)", "exp(-1000)", "2**1023", "exp(709)", "sin(2**30)", "asin(1)", "tan(pi/2)", "atan2(0, 0)", "0**0.5",
     "(-8)**3", "tanh(1e9)", "mod(-1e-20, 1)", "sqrt(-0.0)", "log(cos(pi/2))", "1/exp(700)"],
)  # fmt: skip
def test_constants_that_give_a_number_are_taken(text: str) -> None:
    program = compile_equations({"e": text}, ["x"], field="test")
    (value,) = evaluate_reference(program, {})
    assert np.isfinite(value)


def test_what_only_a_state_makes_undefined_fails_the_trial() -> None:
    case = study(plant(equations={"position": "speed", "speed": "torque + log(position - 3)"}))
    outcome = case.run(3, progress=False)
    assert len(outcome.diverged) == 3
    assert not outcome.passed.any()


@pytest.mark.parametrize(("text", "advice"), [("x % 2", "mod(x, divisor)"), ("x // 2", "floor(a / b)")])
def test_operators_of_other_languages_name_the_function(text: str, advice: str) -> None:
    with pytest.raises(wd.EquationError, match="Write") as caught:
        compile_equations({"e": text}, ["x"], field="test")
    assert advice in str(caught.value)
