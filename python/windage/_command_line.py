"""The command line: demo, run, replay and config; the exit code says what came out."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Annotated, cast

import typer

from . import _command_help as teach
from . import _command_output as output
from ._command_changes import arguments_of, changed
from ._command_usage import explained_usage
from ._demo import DEMO_AT_LEAST, DEMO_CONFIDENCE, DEMO_TRIALS, demo_study
from ._errors import DescriptionError, WindageError
from ._loader import show_config
from ._outcome import Outcome
from ._plots import HOW_TO_INSTALL, has_matplotlib
from ._stopping import heard_like_ctrl_c
from ._study import Study
from ._study_file import load, save
from ._verdict import Verdict, judge

PASS, FAIL, INCONCLUSIVE, WRONG, INTERRUPTED, DEFECT, UNWRITTEN = range(7)
CODES = {"pass": PASS, "fail": FAIL, "inconclusive": INCONCLUSIVE}
#: What Typer returns after a Ctrl-C that no call of ours heard; its older releases raise Abort.
UNHEARD = 130
DEMO_FILE, DEMO_PICTURE = "dish.toml", "windage-demo.png"

#: Root of the errors in how a command was written; BadParameter is the one of them that Typer makes public.
UsageError = cast(type[Exception], typer.BadParameter.__bases__[0])

app = typer.Typer(
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode="rich",
    context_settings={"help_option_names": ["-h", "--help"]},
    epilog=teach.EXIT_CODES,
)

StudyFile = Annotated[Path, typer.Argument(metavar="STUDY.toml", help="The study file.", show_default=False)]
Trials = Annotated[int, typer.Option("--trials", metavar="N", help="How many trials to run.")]
Threads = Annotated[int, typer.Option("--threads", metavar="N", help="0: every core. Digits do not depend on it.")]
Seed = Annotated[
    int | None,
    typer.Option("--seed", metavar="N", help="Another seed than that of the file: fresh trials.", show_default=False),
]
Changes = Annotated[
    list[str] | None,
    typer.Option("--set", metavar="PATH=VALUE", help="Change a number of the study; may be given again."),
]
Plot = Annotated[Path | None, typer.Option("--plot", metavar="FILE", help="Draw a picture: .png, .pdf or .svg.")]


@app.callback(invoke_without_command=True, help=teach.WINDAGE)
def windage(
    context: typer.Context,
    version: Annotated[bool, typer.Option("--version", help="Print the version.")] = False,
) -> None:
    """Print the version, or the help if no command is given."""
    if version:
        output.say(f"windage {output.version()}")
    elif context.invoked_subcommand is None:
        output.say(context.get_help())


@app.command(help=teach.DEMO, epilog=teach.EXIT_CODES)
def demo(
    trials: Trials = DEMO_TRIALS,
    folder: Annotated[
        Path, typer.Option("--output", metavar="FOLDER", help="Where the study file and the picture go.")
    ] = Path(),
    threads: Threads = 0,
) -> int:
    """Run the demonstration study, write it and its picture."""
    study, file, picture = demo_study(), folder / DEMO_FILE, folder / DEMO_PICTURE
    _check_demo_folder(study, folder, file)
    output.say("Demonstration: the azimuth drive of a dish antenna in gusting wind. All numbers are invented.")
    output.say(repr(study))
    output.print_advice(study)
    save(study, file)
    outcome = study.run(trials, threads)
    if not outcome.trials:
        raise KeyboardInterrupt
    verdict, code = _judged(outcome, DEMO_AT_LEAST, DEMO_CONFIDENCE)
    output.print_verdict(outcome, verdict)
    output.say(f"Wrote {file}")
    if has_matplotlib():
        with output.kept():
            output.write_picture(outcome, picture, verdict=verdict)
    else:
        output.say(f"No picture. {HOW_TO_INSTALL}")
    _print_next_steps(outcome, file)
    return code


@app.command(help=teach.RUN, epilog=teach.EXIT_CODES)
def run(
    study_file: StudyFile,
    trials: Trials = 20_000,
    at_least: Annotated[
        float, typer.Option("--at-least", metavar="P", help="Claim: this fraction of all trials passes.")
    ] = 0.95,
    confidence: Annotated[
        float, typer.Option("--confidence", metavar="C", help="Confidence of the verdict, from 0.5 on.")
    ] = 0.95,
    threads: Threads = 0,
    plot: Plot = None,
    table: Annotated[
        Path | None,
        typer.Option("--table", metavar="FILE", help="Write one row a trial: .parquet or .csv."),
    ] = None,
    report: Annotated[
        Path | None, typer.Option("--json", metavar="FILE", help="Write verdict and counts as JSON.")
    ] = None,
    seed: Seed = None,
    changes: Changes = None,
    short: Annotated[
        bool, typer.Option("--short", help="One line on the standard output; advice goes to the error stream.")
    ] = False,
) -> int:
    """Run a study file, print the verdict and write what is asked for."""
    output.check_target("--plot", plot, output.PICTURES)
    output.check_target("--table", table, output.TABLES)
    output.check_target("--json", report, (".json",))
    # Arguments of the verdict are checked on an empty outcome, before any trial is run.
    judge(0, 0, 0, at_least, confidence)
    study = changed(load(study_file), changes or (), seed)
    with output.on_error_stream(short):
        output.print_advice(study)
    outcome = study.run(trials, threads)
    if not outcome.trials:
        raise KeyboardInterrupt
    verdict, code = _judged(outcome, at_least, confidence)
    # What other programs read comes first: nothing on the screen can be in its way.
    if report is not None:
        with output.on_error_stream(short), output.kept():
            output.write_json(output.run_report(outcome, verdict, study_file, code), report)
    output.print_verdict(outcome, verdict, short)
    with output.on_error_stream(short):
        _write(outcome, verdict, plot, table)
    if len(outcome.failures) and not short:
        again = output.command_again("replay", study_file, *arguments_of(changes or (), seed))
        output.say_command(f"See the first failing trial: {again} --trial {outcome.failures[0]}")
    return code


def _write(outcome: Outcome, verdict: Verdict, plot: Path | None, table: Path | None) -> None:
    if table is not None:
        with output.kept():
            output.write_table(output.outcome_table(outcome), table, table.suffix.lower())
    if plot is not None:
        with output.kept():
            output.write_picture(outcome, plot, verdict=verdict)


@app.command(help=teach.REPLAY, epilog=teach.REPLAY_CODES)
def replay(
    study_file: StudyFile,
    trial: Annotated[
        int | None, typer.Option("--trial", metavar="N", help="Index of the trial.", show_default=False)
    ] = None,
    nominal: Annotated[
        bool, typer.Option("--nominal", help="Instead: the nominal unit, every spread at its nominal value.")
    ] = False,
    plot: Plot = None,
    after: Annotated[float, typer.Option(metavar="S", help="Plot from this time on, s.")] = 0.0,
    before: Annotated[
        float | None, typer.Option(metavar="S", help="Plot until this time, s.", show_default=False)
    ] = None,
    onset: Annotated[
        bool, typer.Option("--onset", help="Plot around the instant at which a requirement is first missed.")
    ] = False,
    signals: Annotated[
        list[str] | None,
        typer.Option("--signal", metavar="NAME", help="Plot a further signal; may be given again."),
    ] = None,
    csv: Annotated[
        Path | None, typer.Option("--csv", metavar="FILE", help="Write every signal, one row a sample.")
    ] = None,
    parquet: Annotated[
        Path | None, typer.Option("--parquet", metavar="FILE", help="The same as a Parquet file.")
    ] = None,
    seed: Seed = None,
    changes: Changes = None,
) -> int:
    """Run one trial again and write its signals."""
    if (trial is None) != nominal:
        found = "neither" if trial is None else "both"
        raise DescriptionError("--trial", found, "either --trial N or --nominal")
    given = {"--after": after != 0.0, "--before": before is not None, "--onset": onset, "--signal": bool(signals)}
    for option, is_given in given.items():
        if is_given and plot is None:
            raise DescriptionError(option, "no --plot", "--plot FILE beside it", "It says what the picture shows.")
    output.check_target("--plot", plot, output.PICTURES)
    output.check_target("--csv", csv, (".csv",))
    output.check_target("--parquet", parquet, (".parquet",))
    study = changed(load(study_file), changes or (), seed)
    replayed = study.nominal() if trial is None else study.replay(trial)
    output.say(repr(replayed))
    for name, value in replayed.parameters.items():
        output.say(f"  drawn   {name} = {value!r}")
    for path in (csv, parquet):
        if path is not None:
            output.write_table(output.replay_table(replayed), path, path.suffix.lower())
    if plot is not None:
        output.write_picture(replayed, plot, after=after, before=before, onset=onset, signals=signals or ())
    return UNWRITTEN if output.is_lost() else 0


@app.command(help=teach.CONFIG, epilog=teach.CONFIG_CODES)
def config() -> int:
    """Print what `windage.show_config` tells."""
    shown = show_config()
    width = max(map(len, shown))
    for name, value in shown.items():
        output.say(f"{name:<{width}}  {value}")
    return UNWRITTEN if output.is_lost() else 0


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit code.

    Parameters
    ----------
    arguments : sequence of str, optional
        By default those of the process.
    """
    output.begin()
    with heard_like_ctrl_c():
        return _run(arguments)


def _run(arguments: Sequence[str] | None) -> int:
    try:
        code = app(arguments, prog_name=output.called_as(), standalone_mode=False)
        if code == UNHEARD:
            raise KeyboardInterrupt
    except UsageError as error:
        written = sys.argv[1:] if arguments is None else arguments
        output.print_failure(explained_usage(error, written, output.called_as()))
        return WRONG
    except (KeyboardInterrupt, typer.Abort):
        output.print_failure(WindageError("interrupted; what is not printed above was not finished"))
        return INTERRUPTED
    except OSError as error:  # what cannot be read is no OSError of ours
        output.print_failure(error)
        return UNWRITTEN
    except (WindageError, MemoryError) as error:
        output.print_failure(error)
        return WRONG
    except Exception as error:
        output.print_failure(error)
        return DEFECT
    return code if isinstance(code, int) else 0


def _judged(outcome: Outcome, at_least: float, confidence: float) -> tuple[Verdict, int]:
    """Return the verdict and the exit code."""
    verdict = outcome.verdict(at_least, confidence)
    is_interim = outcome.interrupted or verdict.numerics.is_stopped
    return verdict, INTERRUPTED if is_interim else CODES[verdict.decision]


def _check_demo_folder(study: Study, folder: Path, file: Path) -> None:
    if folder.exists() and not folder.is_dir():
        raise DescriptionError("--output", str(folder), "a folder", "It is a file.")
    folder.mkdir(parents=True, exist_ok=True)
    if file.exists() and not _holds(file, study):
        mend = "It holds another study, perhaps one that you changed; choose another folder or move it."
        raise DescriptionError("--output", str(file), f"a folder without a {DEMO_FILE} of its own", mend)


def _holds(file: Path, study: Study) -> bool:
    try:
        return load(file) == study
    except WindageError:
        return False


def _print_next_steps(outcome: Outcome, file: Path) -> None:
    steps = [(output.command_again("run", file, "--at-least", "0.99"), "claim more")]
    if len(outcome.failures):
        trial = outcome.failures[0]
        picture = file.with_name(f"trial-{trial}.png")
        again = output.command_again("replay", file, "--trial", trial, "--plot", picture)
        steps.insert(0, (again, "see a failing trial"))
    width = max(len(command) for command, _ in steps)
    output.say("\nNext:")
    for command, reason in steps:
        output.say_command(f"  {command:<{width}}  {reason}")
    output.say(f"  Change {file}, for example observer_bandwidth, and run it again.")


if __name__ == "__main__":
    sys.exit(main())
