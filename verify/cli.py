"""The command line. Heavy modules are imported inside the commands, so that help comes at once."""

from __future__ import annotations

import math
import os
import sys
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, NoReturn

import typer

if TYPE_CHECKING:
    from settled.models.problems import Problem
    from settled.models.specification import Specification
    from settled.verify.result import FileReport, Result
    from settled.verify.session import Session, Settings
    from settled.verify.terminal import Screen

BAD_INPUT, INTERNAL, INTERRUPTED = 2, 70, 130

app = typer.Typer(
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
)


def _version(asked: bool) -> None:
    if asked:
        from importlib.metadata import version

        typer.echo(f"settled {version('settled')}")
        raise typer.Exit


Version = Annotated[bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version.")]


@app.callback()
def root(version: Version = False) -> None:
    """Prove or refute properties of clockless (asynchronous) sequential circuits.

    \b
    Exit status: 0 all proved; 1 at least one refuted; 3 none refuted, at least one
    undecided or vacuous; 2 input or usage error; 70 internal error; 130 interrupted.
    """


def _seconds(value: float) -> float:
    if not (math.isfinite(value) and value > 0):
        raise typer.BadParameter("a number of seconds above 0 is needed")
    return value


def _directory(value: Path | None) -> Path | None:
    if value is not None:
        there = next(path for path in (value, *value.absolute().parents) if path.exists())
        if not there.is_dir() or not os.access(there, os.W_OK):
            raise typer.BadParameter(f"`{there}` is not a directory that can be written to")
    return value


_FILE = "A property file (.toml), a netlist (.v, .sv), `-` (a property file from standard input) or a gallery name."
File = Annotated[str, typer.Argument(metavar="FILE", show_default=False, help=_FILE)]
Files = Annotated[list[str], typer.Argument(metavar="FILE", show_default=False, help=_FILE)]
Json = Annotated[bool, typer.Option("--json", help="Print the result document and nothing else.")]
_OUT = "Write the document, a report for review, waveforms and test benches into DIR."
Out = Annotated[Path | None, typer.Option(metavar="DIR", callback=_directory, help=_OUT)]
Only = Annotated[list[str] | None, typer.Option(metavar="NAME", help="Check only the property NAME; repeatable.")]
Seconds = Annotated[float, typer.Option(metavar="N", callback=_seconds, help="Time limit for one property.")]
States = Annotated[int, typer.Option(metavar="N", min=1, help="Limit of total states for one property.")]
Memory = Annotated[int, typer.Option(metavar="N", min=1, help="Limit of memory for a process, in megabytes.")]
Jobs = Annotated[int, typer.Option(metavar="N", min=1, help="How many engines may work side by side.")]
Every = Annotated[bool, typer.Option("--all", help="Go on to every cause of a race or hazard.")]
Whole = Annotated[bool, typer.Option("--all-signals", help="Show also the nodes that play no part in a run.")]
Allow = Annotated[bool, typer.Option("--allow-vacuous", help="Let a vacuous proof count as any other.")]
Document = Annotated[
    str, typer.Argument(metavar="RESULT", show_default=False, help="A result.json, or the directory that holds it.")
]
_CIRCUIT = "A netlist, or a file with a [circuit] table; `-` and gallery names as for `check`."
Original = Annotated[str, typer.Argument(metavar="ORIGINAL", show_default=False, help=_CIRCUIT)]
Other = Annotated[str, typer.Argument(metavar="OTHER", show_default=False, help="The same.")]
Rules = Annotated[str | None, typer.Option("--environment", metavar="FILE", help="Take the environment of FILE.")]
Rename = Annotated[list[str] | None, typer.Option(metavar="A=B", help="Call the signal A of OTHER B; repeatable.")]
Transients = Annotated[bool, typer.Option("--transients", help="Refuse hazards that ORIGINAL does not have, too.")]
_FLOW = "Print the reduced flow table of what is reachable, as `realises` reads it."
Equations = Annotated[bool, typer.Option("--equations", help="Print excitations as minimal sums of products instead.")]
Flow = Annotated[bool, typer.Option("--flow", help=_FLOW)]
Outputs = Annotated[bool, typer.Option("--outputs", help="Print the values of the outputs behind each entry.")]


@app.command()
def check(
    files: Files,
    json: Json = False,
    out: Out = None,
    only: Only = None,
    every: Every = False,
    all_signals: Whole = False,
    seconds: Seconds = 60.0,
    states: States = 4_000_000,
    memory: Memory = 8_000,
    jobs: Jobs = 2,
    allow_vacuous: Allow = False,
) -> None:
    """Check every property of every file.

    A netlist, and a file without properties, is asked: stable-states, settles, race-free,
    hazard-free on the outputs, essential-hazard-free.
    """
    from settled.verify.session import Settings, load
    from settled.verify.terminal import Screen

    screen = Screen(json, all_signals)
    settings = Settings(tuple(only or ()), seconds, states, memory, jobs, screen.progress, every)
    outcome = Outcome()
    for name in files:
        if outcome.interrupted:
            outcome.left_out.append(name)
        else:
            _check_file(name, load, settings, screen, outcome)
    _finish(outcome, screen, json, out, allow_vacuous)


@app.command()
def equivalent(
    original: Original,
    other: Other,
    environment: Rules = None,
    rename: Rename = None,
    transients: Transients = False,
    all_signals: Whole = False,
    json: Json = False,
    out: Out = None,
    seconds: Seconds = 60.0,
    states: States = 4_000_000,
    memory: Memory = 8_000,
    jobs: Jobs = 2,
    allow_vacuous: Allow = False,
) -> None:
    """Prove or refute that two circuits agree on the outputs of ORIGINAL.

    Both get the same input changes, under the environment of FILE, else under that of ORIGINAL
    when it is a property file, else one input at a time from every stable state.
    """
    from settled.verify.comparing import comparison
    from settled.verify.session import Settings
    from settled.verify.terminal import Screen

    screen = Screen(json, all_signals)
    settings = Settings((), seconds, states, memory, jobs, screen.progress)
    outcome = Outcome()

    def load(_path: str, _text: str | None) -> Specification:
        return comparison(original, other, environment, rename or (), transients)

    _check_file(original, load, settings, screen, outcome)
    _finish(outcome, screen, json, out, allow_vacuous)


@dataclass
class Outcome:
    """What has become of the files so far. `left_out`: files that were not begun, or could not be used."""

    reports: list[FileReport] = field(default_factory=list)
    problems: list[Problem] = field(default_factory=list)
    left_out: list[str] = field(default_factory=list)
    broke: bool = False
    interrupted: bool = False


Load = Callable[[str, str | None], "Specification"]
"""From a path, and the text of standard input, to what is to be checked."""


def _check_file(name: str, load: Load, settings: Settings, screen: Screen, outcome: Outcome) -> None:
    """Check one file; whatever happens is shown and noted in `outcome`."""
    from settled.models.problems import InputError
    from settled.verify.inputs import locate
    from settled.verify.session import Session

    session: Session | None = None
    results: list[Result] = []
    text, why = None, ""
    try:
        path, text = locate(name)
        session = Session(load(path, text), settings)
        _decide(session, results, screen)
    except InputError as error:
        why = "its input cannot be used"
        outcome.problems += error.problems
        screen.refused(error.problems, {name: text})
    except KeyboardInterrupt:
        why, outcome.interrupted = "interrupted", True
    except BrokenPipeError:
        raise
    except Exception as error:
        why, outcome.broke = "an internal error ended the work on this file", True
        screen.broke(name, error)
    if session is None:
        outcome.left_out.append(name)
    else:
        _leave_open(session, results, why, screen)
        outcome.reports.append(session.report(results))


def _decide(session: Session, results: list[Result], screen: Screen) -> None:
    """Decide property by property, each verdict shown as it comes and put into `results`."""
    names = [p.name for p in session.properties]
    screen.opened(session)
    screen.progress.subject = names[0] if names else ""
    for result in session.results():
        results.append(result)
        screen.decided(session, result)
        screen.progress.subject = (names + [""])[len(results)]


def _leave_open(session: Session, results: list[Result], why: str, screen: Screen) -> None:
    """Say of the properties without a result that they are undecided, and why."""
    from settled.verify.properties import kinds
    from settled.verify.result import Result

    for prop in session.properties[len(results) :]:
        claim = kinds()[prop.check].claim(session.circuit, prop.options)
        results.append(Result(prop.name, prop.check, "undecided", claim, "none", 0.0, reason=why))
        screen.decided(session, results[-1])


def _finish(outcome: Outcome, screen: Screen, json: bool, out: Path | None, allow_vacuous: bool) -> NoReturn:
    """Deliver everything and leave with the exit status."""
    from settled.verify.result import exit_status

    written = _deliver(outcome, screen, json, out)
    if outcome.interrupted:
        raise typer.Exit(INTERRUPTED)
    if outcome.broke:
        raise typer.Exit(INTERNAL)
    raise typer.Exit(exit_status(outcome.reports, outcome.problems, allow_vacuous) if written else BAD_INPUT)


def _deliver(outcome: Outcome, screen: Screen, json: bool, out: Path | None) -> bool:
    """The end of the text, the document, the files; whether all could be written."""
    from settled.verify.renderers import write
    from settled.verify.renderers.problems import as_json
    from settled.verify.renderers.result_json import to_text
    from settled.verify.result import document

    if outcome.reports:
        screen.closed([r for report in outcome.reports for r in report.results], outcome.left_out)
    result = document(outcome.reports, as_json(outcome.problems))
    if json:
        print(to_text(result), end="", flush=True)
    try:
        if out is not None and outcome.reports:
            write(out, outcome.reports, result)
    except OSError as error:
        screen.warn(f"cannot write into {out}: {error.strerror}")
        return False
    return True


@app.command()
def review(result: Document, only: Only = None, all_signals: Whole = False) -> None:
    """Walk through the counterexamples of a result document.

    In a terminal, step by step with the keys shown at the bottom; into a pipe, all in full.
    """
    from settled.models.problems import InputError
    from settled.verify.reviewing import review as shown
    from settled.verify.terminal import Screen

    screen = Screen(whole=all_signals)
    try:
        shown(result, tuple(only or ()), screen)
    except InputError as error:
        screen.refused(error.problems, {result: ""})
        raise typer.Exit(BAD_INPUT) from None
    except BrokenPipeError:
        raise
    except Exception as error:
        screen.broke(result, error)
        raise typer.Exit(INTERNAL) from None


@app.command()
def table(file: File, outputs: Outputs = False, flow: Flow = False, equations: Equations = False) -> None:
    """Print the transition table of a small circuit.

    Input vectors (of at most 4 inputs) run across in Gray order, internal states (of at most
    6 nodes) down; each entry is the next internal state, a stable one in parentheses.
    """
    from settled.models.problems import InputError
    from settled.verify.flow_table import flow_table
    from settled.verify.inputs import locate
    from settled.verify.limits import Limits
    from settled.verify.placing import placed
    from settled.verify.renderers import flow_table_text
    from settled.verify.renderers.equations import render as as_equations
    from settled.verify.renderers.table import render
    from settled.verify.session import check_inputs, load
    from settled.verify.terminal import Screen, page
    from settled.verify.transition_table import transition_table

    screen, text = Screen(), None
    try:
        path, text = locate(file)
        spec = load(path, text)
        circuit = placed(spec.circuit)
        check_inputs(spec, circuit, ())
        if equations:
            screen.say(as_equations(circuit, spec.path, spec.title, page()))
        elif flow:
            screen.say(flow_table_text.render(flow_table(circuit, spec.environment, Limits())).rstrip())
        else:
            found = transition_table(circuit, spec.environment)
            screen.say(render(found, spec.path, spec.title, page(), outputs=outputs))
    except InputError as error:
        screen.refused(error.problems, {file: text})
        raise typer.Exit(BAD_INPUT) from None
    except BrokenPipeError:
        raise
    except Exception as error:
        screen.broke(file, error)
        raise typer.Exit(INTERNAL) from None


def main() -> None:
    """The command `settled`."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="backslashreplace")
    app()
