"""Compare tunings of a study on the same trials.

    python compare_tunings.py studies/multirotor_roll.toml
    python compare_tunings.py my_study.toml --try "b0=500" --try "b0=500 observer_bandwidth=300"
    python compare_tunings.py --check

The first line takes the tunings that `tunings.toml` lists for the study, the second your own; what is not
named stays as in the study file. Every tuning meets the same plants, delays and noise: trial 17 of one is
trial 17 of the other. The columns "lost" and "won" count the trials that only the study's own tuning or only
this one passes, so that few trials tell two tunings apart. `--check` runs every tuning of `tunings.toml` and
compares pass rates and nominal verdicts with the values kept there; the exit status is 1 if one is too far
off.
"""

from __future__ import annotations

import argparse
import math
import sys
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

import windage as wd

HERE = Path(__file__).resolve().parent
CONFIDENCE = 0.90


@dataclass(frozen=True)
class Tuning:
    """What differs from the study's own controller, and what is known about it."""

    name: str
    controller: Mapping[str, Any]
    shows: str = ""
    nominal_passes: bool = True
    reference_rate: float = math.nan
    reference_trials: int = 0


@dataclass(frozen=True)
class Case:
    """A study, the tunings to compare on it, and numbers of its nominal unit that are not a spread's own."""

    study: wd.Study
    tunings: Sequence[Tuning]
    nominal: Mapping[str, float] = field(default_factory=dict)


def listed_cases() -> dict[str, Case]:
    """Return the cases of `tunings.toml` by study file."""
    data = tomllib.loads((HERE / "tunings.toml").read_text(encoding="utf-8"))
    cases = {}
    for item in data.values():
        tunings = [Tuning(**tuning) for tuning in item["tunings"]]
        cases[item["study"]] = Case(wd.load(HERE / item["study"]), tunings, item["nominal"])
    return cases


def tuned(study: wd.Study, tuning: Tuning) -> wd.Study:
    """Return the study with the controller of a tuning."""
    return study.with_controller(study.loop.controller.with_(**tuning.controller))


def held(study: wd.Study, values: Mapping[str, float]) -> wd.Study:
    """Return the study with some numbers fixed, named as in its table of drawn parameters."""
    for name, value in values.items():
        loop = study.loop
        part, _, inner = name.rpartition(".")
        if not part:
            parameters = {**loop.plant.named_numbers, name: value}
            study = study.with_(plant=loop.plant.with_(parameters=parameters))
        elif part.startswith("disturbances."):
            which = part.removeprefix("disturbances.")
            changed = loop.disturbances[which].with_(**{inner: value})
            study = study.with_(disturbances={**loop.disturbances, which: changed})
        else:
            study = study.with_(**{part: getattr(loop, part).with_(**{inner: value})})
    return study


def nominal_passes(case: Case, tuning: Tuning) -> bool:
    """Tell whether the nominal unit meets every requirement."""
    passed: bool = held(tuned(case.study, tuning), case.nominal).nominal().passed
    return passed


def chance_of_split(lost: int, won: int) -> float:
    """Return the chance of a split at least this uneven if both tunings were equally good.

    Exact two-sided sign test on the trials that only one of the two passes (McNemar 1947, Psychometrika
    12:153-157, in its exact form; from memory).
    """
    discordant = lost + won
    tail = sum(math.comb(discordant, i) for i in range(min(lost, won) + 1))
    return min(1.0, float(2 * tail / 2**discordant))


def compare(case: Case, trials: int, threads: int, quantiles: bool) -> list[wd.Outcome]:
    """Run every tuning on the same trials and print what came out."""
    studies = [tuned(case.study, tuning) for tuning in case.tunings]
    heads = ("nominal", "pass", "at least", "diverged", "lost", "won", "chance")
    print(f"{'tuning':30}" + "".join(f"{head:>10}" for head in heads))
    outcomes: list[wd.Outcome] = []
    for tuning, study in zip(case.tunings, studies, strict=True):
        outcome = study.run(trials, threads=threads)
        if outcome.interrupted:
            raise KeyboardInterrupt
        outcomes.append(outcome)
        print(_row(case, tuning, outcome, outcomes[0]))
        _print_requirements(outcome, quantiles)
    print(f"\n{trials} trials. at least: exact lower bound of the pass rate at {CONFIDENCE:.0%} confidence;")
    print("chance: of so uneven a split of lost and won if the tunings were equally good (exact sign test)")
    return outcomes


def _row(case: Case, tuning: Tuning, outcome: wd.Outcome, first: wd.Outcome) -> str:
    nominal = "passes" if nominal_passes(case, tuning) else "fails"
    bound = wd.pass_probability_bounds(len(outcome.failures), outcome.trials, CONFIDENCE).lower
    rate, diverged = outcome.passed.mean(), len(outcome.diverged)
    row = f"{tuning.name:30}{nominal:>10}{rate:10.2%}{bound:10.2%}{diverged:10}"
    if outcome is first:
        return row
    lost = int((first.passed & ~outcome.passed).sum())
    won = int((outcome.passed & ~first.passed).sum())
    return row + f"{lost:10}{won:10}{chance_of_split(lost, won):10.2g}"


def _print_requirements(outcome: wd.Outcome, quantiles: bool) -> None:
    """Print how many trials miss each requirement and, if wanted, how its measure is spread."""
    for i, requirement in enumerate(outcome.study.requirements):
        text = f"    {requirement.label:30}{len(outcome.failed(i)):6} missed"
        if quantiles:
            values = outcome.measures[requirement.measure.label]
            # A diverged trial counts as the worst value there is.
            worst = math.inf if requirement.at_most is not None else -math.inf
            ordered = np.sort(np.where(np.isnan(values), worst, values))
            shown = (ordered[int(p * (len(ordered) - 1))] for p in (0.50, 0.95, 0.99, 1.0))
            text += "; median, 95 %, 99 %, largest:" + "".join(f"{value:11.4g}" for value in shown)
        print(text)


def allowed_difference(reference: float) -> float:
    """Return by how much a pass rate may differ from the reference: 1 point, 0.4 points above 99 %."""
    return 0.004 if reference > 0.99 else 0.01


def enough_trials(reference: float) -> int:
    """Return how many trials leave a third of the difference allowed as standard deviation, at least 4000."""
    deviation = allowed_difference(reference) / 3.0
    return max(4000, math.ceil(reference * (1.0 - reference) / deviation**2))


def check(trials: int | None, threads: int, quantiles: bool) -> bool:
    """Compare every listed tuning with its reference and print a table; tell whether all agree."""
    heads = ("trials", "pass", "reference", "differ by", "chance", "allowed")
    print(f"{'tuning':30}" + "".join(f"{head:>10}" for head in heads))
    agree = True
    for file, case in listed_cases().items():
        print(file)
        for tuning in case.tunings:
            count = trials or enough_trials(tuning.reference_rate)
            outcome = tuned(case.study, tuning).run(count, threads=threads)
            if outcome.interrupted:
                raise KeyboardInterrupt
            complaint, row = _compared(case, tuning, outcome)
            print(row + complaint, flush=True)
            agree = agree and not complaint
            if quantiles:
                _print_requirements(outcome, quantiles)
    print("\nDifferences in points. chance: standard deviation that the numbers of trials leave.")
    return agree


def _compared(case: Case, tuning: Tuning, outcome: wd.Outcome) -> tuple[str, str]:
    rate, reference = float(outcome.passed.mean()), tuning.reference_rate
    chance = math.hypot(_deviation(rate, outcome.trials), _deviation(reference, tuning.reference_trials))
    difference, allowed = rate - reference, allowed_difference(reference)
    row = f"  {tuning.name:28}{outcome.trials:10}{rate:10.2%}{reference:10.2%}"
    row += f"{100 * difference:+10.2f}{100 * chance:10.2f}{100 * allowed:10.1f}"
    complaint = "" if abs(difference) <= allowed else "  TOO FAR"
    if nominal_passes(case, tuning) != tuning.nominal_passes:
        complaint += "  THE NOMINAL VERDICT DIFFERS"
    return complaint, row


def _deviation(rate: float, trials: int) -> float:
    # One success and one failure are added, so that 0 of n and n of n are not certain.
    p = (rate * trials + 1) / (trials + 2)
    return math.sqrt(p * (1 - p) / trials)


def own_tuning(text: str) -> Tuning:
    """Return the tuning written as "b0=500 observer_bandwidth=300"."""
    changes: dict[str, float] = {}
    for pair in text.split():
        name, _, value = pair.partition("=")
        try:
            changes[name] = float(value)
        except ValueError:
            raise ValueError(f"--try: found {pair!r}; expected a name and a number such as b0=500") from None
    return Tuning(text, changes)


def chosen_case(file: Path, own: Sequence[str]) -> Case:
    """Return the case of a study file: with one's own tunings if there are any, else with those listed."""
    study = wd.load(file)
    if own:
        return Case(study, [Tuning("as in the study file", {}), *(own_tuning(text) for text in own)])
    for name, case in listed_cases().items():
        if (HERE / name).samefile(file):
            return case
    raise ValueError(f"{file}: tunings.toml lists no tunings for it; expected some as --try 'b0=500'")


def main() -> int:
    """Run the command line; return the exit status."""
    form = argparse.RawDescriptionHelpFormatter
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=form)
    parser.add_argument("study", nargs="?", type=Path, help="study file")
    parser.add_argument("--try", dest="own", action="append", default=[], metavar="TUNING", help="your own")
    parser.add_argument("--trials", type=int, help="trials of each tuning (2000; --check: enough)")
    parser.add_argument("--threads", type=int, default=0, help="0: every core")
    parser.add_argument("--quantiles", action="store_true", help="show how each measure is spread")
    parser.add_argument("--check", action="store_true", help="compare with the values in tunings.toml")
    given = parser.parse_args()
    try:
        if given.check:
            return 0 if check(given.trials, given.threads, given.quantiles) else 1
        if given.study is None:
            parser.error("name a study file, or use --check")
        case = chosen_case(given.study, given.own)
        compare(case, given.trials or 2000, given.threads, given.quantiles)
    except ValueError as error:  # those of windage are among them
        parser.error(str(error))
    except KeyboardInterrupt:
        print("stopped", file=sys.stderr)
        return 130
    return 0


if __name__ == "__main__":
    sys.exit(main())
