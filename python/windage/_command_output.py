"""What the command line prints and writes: verdicts, hints, errors in one block, files in one piece."""

from __future__ import annotations

import io
import json
import os
import shlex
import shutil
import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager, nullcontext, redirect_stdout
from pathlib import Path
from typing import TYPE_CHECKING, Any, BinaryIO

from ._command_screen import Screen
from ._drivers import FEW_FAILURES
from ._errors import DescriptionError, WindageError
from ._measures import FAILING
from ._plots import HOW_TO_INSTALL, has_matplotlib
from ._shown_text import one_line, shorten
from ._text_table import plainly_grouped
from ._written_file import is_written_in_place, written

if TYPE_CHECKING:
    from ._outcome import Outcome
    from ._replay import Replay
    from ._study import Study
    from ._verdict import Verdict

PICTURES = (".png", ".pdf", ".svg")
TABLES = (".parquet", ".csv")
HINTS = 3
MOST_INDICES = 1_000
_STYLES = {"pass": "bold green", "fail": "bold red", "inconclusive": "bold yellow"}


_screen = Screen()


def begin() -> None:
    """Forget what an earlier command could not write."""
    _screen.lost.clear()


def say(text: str = "", style: str = "") -> None:
    """Print a text as it is; what is longer than a line of the terminal goes on in an indented one."""
    _screen.show(text, style)


def say_command(text: str) -> None:
    """Print a line with a command to copy, in one piece."""
    _screen.show(text, folds=False)


@contextmanager
def kept() -> Iterator[None]:
    """Go on after something could not be written: the error is said, and the answer stays what it is."""
    try:
        yield
    except Exception as error:
        print_failure(error)


def is_lost() -> bool:
    """Tell whether something could not be printed."""
    return bool(_screen.lost)


def called_as() -> str:
    """Return how this command line was called, so that printed commands run as they are printed."""
    script = Path(sys.argv[0])
    if script.name == "__main__.py" and script.parent.name == "windage":
        return f"{_on_path(Path(sys.executable))} -m windage"
    return _on_path(script) if script.name == "windage" else "windage"


def _on_path(program: Path) -> str:
    """Return a program's name where that finds it, otherwise the path that it was called by."""
    found = shutil.which(program.name)
    is_found = found is not None and program.exists() and program.samefile(found)
    return program.name if is_found else shlex.quote(str(program))


def command_again(command: str, *arguments: object) -> str:
    """Return a command line of windage that can be copied."""
    return " ".join([called_as(), command, *(shlex.quote(one_line(str(argument))) for argument in arguments)])


@contextmanager
def on_error_stream(wanted: bool) -> Iterator[None]:
    """Print to the error stream meanwhile, if wanted: nothing is lost, and one line remains on the other."""
    with redirect_stdout(sys.stderr) if wanted else nullcontext():
        yield


def _print_short(outcome: Outcome, verdict: Verdict) -> None:
    """Print a verdict in one line."""
    counts = f"{plainly_grouped(len(outcome.failures))} of {plainly_grouped(outcome.trials)} trials failed"
    # The title comes last: no word of it can pass for the verdict.
    title = f" Study: {outcome.study.title}" if outcome.study.title else ""
    say(f"{verdict.headline} {counts}.{title}", _STYLES[verdict.decision])


def print_verdict(outcome: Outcome, verdict: Verdict, short: bool = False) -> None:
    """Print the counts, the verdict and hints, or one line."""
    if short:
        _print_short(outcome, verdict)
        return
    say(repr(outcome))
    say()
    head, _, body = str(verdict).partition("\n")
    say(head, _STYLES[verdict.decision])
    say(body)
    _print_hints(outcome)


def _print_hints(outcome: Outcome) -> None:
    """Print the drawn parameters that go most strongly along with failing, or with slack."""
    drivers = outcome.drivers()
    against = [FAILING] if drivers.failures >= FEW_FAILURES else list(outcome.requirements)
    for result in against:
        rows = [row for row in drivers.of(result) if row.is_clear][:HINTS]
        if not rows:
            continue
        name = "failing" if result == FAILING else f"the slack of: {result}"
        say(f"First hint, rank correlation of drawn parameters with {name} (clear among {len(drivers)})")
        for row in rows:
            say(f"  {row.correlation:+.2f}  ({row.low:+.2f} .. {row.high:+.2f})  {row.parameter}")
    if drivers.note and outcome.trials:
        say(drivers.note)


def print_advice(study: Study) -> None:
    """Print what looks wrong with a study but is allowed."""
    for line in study.warnings():
        say(f"Advice: {line}.")


def print_failure(error: BaseException) -> None:
    """Print an error in one block on the standard error stream."""
    title, rows = error_block(error)
    _screen.show(f"Error: {title}", "bold red", is_error=True)
    for label, text in rows:
        _screen.show(f"  {label:<9} {one_line(text)}", is_error=True)


def error_block(error: BaseException) -> tuple[str, list[tuple[str, str]]]:
    """Return the title of an error and its labelled lines."""
    if isinstance(error, DescriptionError):
        rows = [("found", shorten(error.found)), ("expected", error.expected)]
        rows += [("mend", error.mend)] if error.mend else []
        return error.field, rows
    if isinstance(error, WindageError):
        return str(error), []
    if isinstance(error, OSError):
        return error.strerror or str(error), [("found", str(error.filename))] if error.filename else []
    if isinstance(error, MemoryError):
        return "not enough memory", [
            ("mend", "ask for fewer trials, or count failures in flat memory with Study.count in Python")
        ]
    trace, place = error.__traceback__, ""
    while trace is not None:
        place = f"{Path(trace.tb_frame.f_code.co_filename).name}, line {trace.tb_lineno}"
        trace = trace.tb_next
    return "a defect in windage", [
        ("found", f"{type(error).__name__}: {str(error)[:300]}"),
        ("place", place),
        ("mend", "please report it with the command and the study file"),
    ]


def check_target(option: str, path: Path | None, suffixes: tuple[str, ...]) -> None:
    """Refuse a file that could not be written, before any trial is run."""
    if path is None:
        return
    try:
        is_in_place = not path.is_dir() and is_written_in_place(path)
    except (OSError, ValueError) as error:
        raise DescriptionError(option, str(path), "a file that can be written", f"{error}.") from error
    # A device or pipe may be called anything, as long as it is clear what goes into it.
    if path.suffix.lower() not in suffixes and not (is_in_place and len(suffixes) == 1):
        raise DescriptionError(option, str(path), "a file name that ends in " + " or ".join(suffixes))
    if path.is_dir():
        raise DescriptionError(option, str(path), "a file", "It is a folder.")
    if not is_in_place:
        _check_folder(option, path)
    if suffixes == PICTURES and not has_matplotlib():
        raise WindageError(HOW_TO_INSTALL)


def _check_folder(option: str, path: Path) -> None:
    folder = (Path(os.path.realpath(path)) if path.is_symlink() else path).parent
    if not folder.is_dir():
        raise DescriptionError(option, str(path), "a file in a folder that exists", f"Make {folder}.")
    if not os.access(folder, os.W_OK):
        raise DescriptionError(option, str(path), "a folder that can be written to")


@contextmanager
def in_one_piece(path: Path) -> Iterator[BinaryIO]:
    """Give a file that takes the place of the old one when it is complete, and say that it was written."""
    with written(path) as file:
        yield file
    if path.is_file():  # no words of ours into a pipe or a terminal
        say(f"Wrote {path}")


def write_picture(plotted: Outcome | Replay, path: Path, **options: Any) -> None:
    """Write the plot of an outcome or a replay."""
    figure = plotted.plot(**options)
    # Matplotlib hides the reason where it cannot write.
    whole = io.BytesIO()
    figure.savefig(whole, format=path.suffix[1:].lower(), dpi=120)
    with in_one_piece(path) as file:
        file.write(whole.getbuffer())


def write_table(table: Any, path: Path, kind: str) -> None:
    """Write an Arrow table as Parquet or CSV."""
    import pyarrow as pa  # type: ignore[import-untyped]
    import pyarrow.csv  # type: ignore[import-untyped]
    import pyarrow.parquet  # type: ignore[import-untyped]

    with in_one_piece(path) as file:
        if kind == ".parquet":
            pa.parquet.write_table(table, file)
        else:
            plain = [c.cast(pa.string()) if pa.types.is_dictionary(c.type) else c for c in table.columns]
            pa.csv.write_csv(pa.table(plain, names=table.column_names), file)


def outcome_table(outcome: Outcome) -> Any:
    """Return the table of an outcome, with the study in its metadata: it says by itself what it came from."""
    from ._study_file import to_toml

    study = outcome.study
    about = {"windage.study": to_toml(study), "windage.digest": study.digest, "windage.version": version()}
    return outcome.table().replace_schema_metadata(about)


def replay_table(replay: Replay) -> Any:
    """Return every signal of a replay, one row a sample instant."""
    import pyarrow as pa

    columns: dict[str, Any] = {name: replay[name] for name in replay.signals}
    columns.setdefault("total_disturbance", replay.total_disturbance)
    columns.setdefault("estimated_disturbance", replay.estimated_disturbance)
    return pa.table(columns)


def write_json(report: Mapping[str, Any], path: Path) -> None:
    """Write a report as JSON in its strict form: no infinities, no NaN, and escapes for all but ASCII."""
    text = json.dumps(report, indent=2, allow_nan=False)
    with in_one_piece(path) as file:
        file.write(f"{text}\n".encode())


def run_report(outcome: Outcome, verdict: Verdict, source: Path, code: int) -> dict[str, Any]:
    """Return what `windage run --json` writes."""
    worst = outcome.slack.argmin(axis=0) + outcome.first
    is_interim = outcome.interrupted or verdict.numerics.is_stopped
    return {
        "windage": version(),
        "study": {
            "file": source.name,
            "title": outcome.study.title,
            "digest": outcome.study.digest,
            "seed": outcome.study.seed,
        },
        "exit_code": code,
        "interim": is_interim,
        "trials": {
            "asked_for": outcome.requested,
            "run": outcome.trials,
            "failed": len(outcome.failures),
            "diverged": len(outcome.diverged),
        },
        "verdict": None if is_interim else verdict.to_dict(),
        "interim_verdict": verdict.to_dict() if is_interim else None,
        "requirements": [
            {"requirement": label, "missed": line.missed, "worst_trial": int(trial), **line.to_dict()}
            for label, line, trial in zip(outcome.requirements, outcome._lines, worst, strict=False)
        ],
        "first_failures": outcome.failures[:MOST_INDICES].tolist(),
        "drivers": [
            {
                "parameter": row.parameter,
                "against": row.against,
                "rank_correlation": row.correlation,
                "low": row.low,
                "high": row.high,
                "p_value": row.p_value,
                "clear": row.is_clear,
            }
            for row in outcome.drivers()
        ],
        "advice": outcome.study.warnings(),
    }


def version() -> str:
    """Return the version of windage."""
    import windage

    return windage.__version__
