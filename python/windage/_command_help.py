"""What `--help` says: what a command is for, examples to copy, and what to do next."""

from __future__ import annotations

from collections.abc import Sequence

EXIT_CODES = (
    "Exit codes: 0 pass, 1 fail, 2 inconclusive (or nothing varies), 3 wrong description or usage, 4 interrupted, "
    "5 a defect in windage, 6 nothing came out, since it could not be written."
)
REPLAY_CODES = (
    "Exit codes: 0 replayed, 3 wrong description or usage, 4 interrupted, 5 a defect in windage, "
    "6 not all could be written."
)
CONFIG_CODES = "Exit codes: 0 shown, 3 an environment variable is wrong, 6 it could not be written."


def _help(text: str, examples: Sequence[str]) -> str:
    """Return paragraphs without line breaks; the examples, one a line, come before the last of them."""
    *first, then = [" ".join(paragraph.split()) for paragraph in text.strip().split("\n\n")]
    listed = "\n".join(["Examples:", *(f"  {line}" for line in examples)])
    return "\n\n".join([*first, listed, f"Next: {then}"])


WINDAGE = _help(
    """
    Does an active disturbance rejection control tuning still hold on every unit that leaves the factory?

    Describe plant, loop, spreads and requirements once, in Python or in a study file; run many thousand
    trials on every core; read a verdict with an exact bound; replay any trial to the last digit.

    begin with the demo: it leaves a study file to change and to run.
    """,
    ["windage demo", "windage run dish.toml --trials 20000", "windage run --help"],
)
DEMO = _help(
    """
    Run the demonstration: the azimuth drive of a dish antenna in gusting wind.

    Prints the verdict on the claim "at least 95 % of all trials pass, at confidence 95 %" and a first hint at
    what makes trials fail, and writes dish.toml (the study) and windage-demo.png (the outcome). All numbers
    are invented.

    replay the failing trial that it names; change a number in dish.toml and give it to windage run.
    """,
    ["windage demo", "windage demo --trials 2000 --output first-look"],
)
RUN = _help(
    """
    Run a study and judge the claim that at least a fraction P of all trials passes.

    A trial passes if it finishes and meets every requirement. Fix the number of trials beforehand: running
    again and again until the verdict is the wanted one does not keep the confidence. Ctrl-C, or a request to
    terminate, keeps what is done: it is printed as interim, neither a pass nor a fail, and the exit code is 4.

    windage replay shows a failing trial; in continuous integration the exit code decides.
    """,
    [
        "windage run dish.toml",
        "windage run dish.toml --trials 100000 --at-least 0.99",
        "windage run dish.toml --plot outcome.png --table trials.parquet",
        "windage run dish.toml --set controller.b0=0.09 --set actuator.delay=0.01 --seed 7",
        "windage run dish.toml --short --json verdict.json || exit 1",
    ],
)
REPLAY = _help(
    """
    Run one trial again, with every signal: the same digits as in the run it comes from.

    A trial is a function of study and index alone, whatever machine or number of threads it was found with.

    look for what the drawn values of failing trials have in common; windage run --plot shows all of them.
    """,
    [
        "windage replay dish.toml --trial 48 --plot trial-48.png",
        "windage replay dish.toml --trial 48 --plot onset.png --onset --signal wind",
        "windage replay dish.toml --trial 48 --plot start.png --before 2",
        "windage replay dish.toml --nominal --csv nominal.csv",
    ],
)
CONFIG = _help(
    """
    Show what this installation is made of: version, instruction set and why, compiler, threads.

    WINDAGE_INSTRUCTION_SET chooses another instruction set (v2, v3 or v4 on x86-64, neon on Arm),
    WINDAGE_THREADS the number of threads. Neither changes a digit of any result.

    give its output with every report of a defect.
    """,
    ["windage config", "WINDAGE_INSTRUCTION_SET=v2 windage config"],
)
