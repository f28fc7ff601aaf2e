"""From a file to verdicts: the only module that knows every hop of the way.

property text -> netlist -> circuit under a delay model -> questions -> answers -> evidence walked again -> verdict
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from hashlib import sha256
from typing import Any

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, support, topological
from settled.models.problems import InputError, Problem, nearest
from settled.models.property_files.reader import read, read_circuit
from settled.models.specification import Property, Specification
from settled.models.states import Behaviour, Run
from settled.models.text_file import recording
from settled.verify.causes import explain
from settled.verify.causes.every import every_cause, grouped
from settled.verify.limits import Limits
from settled.verify.placing import placed
from settled.verify.properties import Kind, kinds, shapes, standard
from settled.verify.questions import Answer, Question, Task
from settled.verify.replay import replay
from settled.verify.result import FileReport, Result, Trace, trace
from settled.verify.shorten import shortened
from settled.verify.side_by_side import decide, release
from settled.verify.understood import beside, understood

WITHOUT_START = ("stable-states", "initialises")


@dataclass
class Settings:
    """What the user asked beside the files: names of properties, limits for one property, processes, a listener.

    `every`: of a race or hazard not only the least run is wanted, but every cause.
    """

    only: Sequence[str] = ()
    seconds: float = 60.0
    states: int = 4_000_000
    megabytes: int = 8_000
    jobs: int = 2
    report: Callable[[str], None] | None = None
    every: bool = False


@dataclass
class Session:
    """One file being checked. `results` comes property by property, so that an interruption loses nothing decided."""

    specification: Specification
    settings: Settings
    circuit: Circuit = field(init=False)

    def __post_init__(self) -> None:
        self.circuit = placed(self.specification.circuit)
        self._memory: dict[str, dict[str, Any]] = {}
        self.properties = chosen(self.specification, self.settings.only)
        check_inputs(self.specification, self.circuit, self.properties)
        self._questions = questions(self.circuit, self.properties)

    def understood(self) -> tuple[tuple[str, str], ...]:
        """The lines of the echo."""
        others = {c.name: c for question in self._questions.values() for c in question.circuits}
        lines = understood(self.specification.circuit, self.circuit, self.specification.environment)
        return lines + tuple(line for circuit in others.values() for line in beside(circuit))

    def results(self) -> Iterator[Result]:
        """Decide one property after the other."""
        try:
            for prop in self.properties:
                if self.settings.report is not None:
                    self.settings.report(prop.name)
                yield self.decide(prop)
        finally:
            for memory in self._memory.values():
                release(memory)

    def report(self, results: Sequence[Result]) -> FileReport:
        """All about the file."""
        spec = self.specification
        echo = self.understood()
        return FileReport(spec.path, spec.title, self.circuit, spec.environment, echo, tuple(results), spec.files)

    def decide(self, prop: Property) -> Result:
        """The verdict on one property, its evidence checked. Raises `ReplayFailed` when the evidence fails."""
        began = time.perf_counter()
        kind = kinds()[prop.check]
        options = prop.options
        question = self._questions[prop.name]
        answer = self.ask(self.circuit, question)
        claim, facts = kind.claim(self.circuit, options), dict(answer.facts)
        further: Sequence[Run] = ()
        if answer.verdict == "refuted":
            answer = shortened(self._task(self.circuit), question, answer)
            answer, claim, facts, further = self._explained(kind, question, answer)
            facts |= {k: v for k, v in answer.facts.items() if k in ("some_run_settles", "vector")}
            facts |= self._compare_winners(kind, question)
        known = {circuit.name: circuit for circuit in (*question.circuits, self.circuit)}

        def traces(runs: Sequence[Run]) -> tuple[Trace, ...]:
            return tuple(trace(c, run, _named(c, options)) for run in runs for c in [known[run.circuit]])

        return Result(
            name=prop.name,
            check=prop.check,
            verdict=answer.verdict,
            claim=claim,
            method=answer.method,
            seconds=time.perf_counter() - began,
            reason=answer.reason,
            traces=traces(answer.runs),
            further=traces(further),
            vacuous=answer.verdict == "proved" and not answer.exercised,
            ranged=answer.ranged,
            facts=facts,
            certificate=answer.certificate,
            scripts=answer.scripts,
            question=question,
        )

    def _explained(
        self, kind: Kind, question: Question, answer: Answer
    ) -> tuple[Answer, str, dict[str, Any], Sequence[Run]]:
        """A refutation walked again: answer, claim and facts, the cause among them; the runs of further causes."""
        behaviour = Behaviour(self.circuit, self.specification.environment)
        causes = every_cause(self._task(self.circuit), question) if self.settings.every else None
        if causes and causes.found:
            first = causes.found[0].answer
            answer = replace(answer, runs=first.runs, facts={**answer.facts, **first.facts})
        claim, facts = replay(kind, behaviour, question, answer)
        facts |= explain(behaviour, question, answer.runs, facts)
        if causes is None:
            return answer, claim, facts, ()
        runs, listed = grouped(kind, behaviour, question, causes)
        return answer, claim, facts | {"causes": listed, "causes_reason": causes.reason}, runs[len(answer.runs) :]

    def ask(self, circuit: Circuit, question: Question) -> Answer:
        """The first decision that an engine comes to; else why the last one came to none."""
        return decide(self._task(circuit), question, self.settings.jobs)

    def _task(self, circuit: Circuit) -> Task:
        s = self.settings
        limits = Limits(s.seconds, s.states, s.megabytes, s.report)
        return Task(circuit, self.specification.environment, limits, self._memory.setdefault(circuit.winners, {}))

    def _compare_winners(self, kind: Kind, question: Question) -> dict[str, bool]:
        if not kind.compares_winners or self.circuit.winners == "one":
            return {"needs_simultaneous": False} if kind.compares_winners else {}
        alone = self.ask(replace(self.circuit, winners="one"), question)
        return {} if alone.verdict == "undecided" else {"needs_simultaneous": alone.verdict == "proved"}


def load(path: str, text: str | None = None) -> Specification:
    """Read a property file or a netlist; without properties, the standard questions are put in."""
    with recording() as files:
        spec = _read(path, text)
    if text is not None:
        files[path] = sha256(text.encode()).hexdigest()
    spec = replace(spec, files=files)
    if spec.properties:
        return spec
    asked = [k for k in standard() if spec.environment.mode in ("fundamental", k.shape.mode) or k.shape.mode == "any"]
    if not spec.circuit.netlist.outputs:
        asked = [k for k in asked if not k.shape.watches]
    return replace(spec, properties=tuple(Property(k.name, k.name, {}) for k in asked))


def _read(path: str, text: str | None) -> Specification:
    if text is None and not path.endswith(".toml"):
        source = read_circuit(path)
        return Specification(path, source.netlist.name, source, Environment(), ())
    return read(path, kinds=shapes(), text=text)


def chosen(spec: Specification, only: Sequence[str]) -> tuple[Property, ...]:
    """The properties that are named in `only`, in the order of the file; all of them when it is empty."""
    known = [p.name for p in spec.properties]
    missing = [name for name in only if name not in known]
    if missing:
        raise InputError(
            [
                Problem("unknown-property", f"no property is called `{name}` in {spec.path}", help=nearest(name, known))
                for name in missing
            ]
        )
    return tuple(p for p in spec.properties if not only or p.name in only)


def questions(circuit: Circuit, properties: Sequence[Property]) -> dict[str, Question]:
    """The question of each property, by its name. Raises `InputError` with all that cannot be asked."""
    found: dict[str, Question] = {}
    problems: list[Problem] = []
    for prop in properties:
        try:
            check_nodes(circuit, prop)
            found[prop.name] = kinds()[prop.check].question(circuit, prop.options)
        except InputError as error:
            place = prop.spans.get("to", prop.span)
            problems += [p if p.span else replace(p, span=place, spot="asked here") for p in error.problems]
    if problems:
        raise InputError(problems)
    return found


def check_nodes(circuit: Circuit, prop: Property) -> None:
    """Raise `InputError` where a property speaks of the excitation of a signal that has no delay of its own."""
    problems = []
    for option, value in prop.options.items():
        leaves = topological([value]) if isinstance(value, Expr) else ()
        named = [e.name for e in leaves if e.op == "excited"] + (list(value) if option == "except" else [])
        for name in named:
            if name not in circuit.excitation:
                message = f"`{name}` carries no delay under `{circuit.delay}`, so it is never excited"
                problems.append(Problem("no-node", message, prop.spans.get(option), help=nearest(name, circuit.nodes)))
    if problems:
        raise InputError(problems)


def check_inputs(spec: Specification, circuit: Circuit, properties: Sequence[Property]) -> None:
    """Raise `InputError` when no input vector satisfies `assume`, or no total state the start that is needed."""
    from settled.verify.stable_states import satisfiable, start_conditions

    environment = spec.environment
    if environment.assume and not satisfiable(circuit, environment.assume):
        where = spec.spans.get("assume")
        raise InputError(Problem("impossible-assume", "no input vector satisfies `assume`", where, "the assumptions"))
    needed = [p for p in properties if p.check not in WITHOUT_START]
    if needed and not satisfiable(circuit, start_conditions(circuit, environment)):
        kind = "stable total state" if environment.mode == "fundamental" else "total state"
        raise InputError(
            Problem(
                "impossible-start",
                f"no {kind} satisfies `assume` and `start`, and `{needed[0].name}` begins there",
                spec.spans.get("start"),
                "the start",
                help="`stable-states` and `initialises` are the checks that do not begin in a start state",
            )
        )


def _named(circuit: Circuit, options: Mapping[str, Any]) -> list[str]:
    expressions = [e for e in options.values() if isinstance(e, Expr)]
    listed = [n for v in options.values() if isinstance(v, tuple) for n in v if isinstance(n, str)]
    return [n for n in [*listed, *support(*expressions)] if n in circuit.defined]


def check(
    path: str, *, only: Sequence[str] = (), seconds: float = 60.0, states: int = 4_000_000, text: str | None = None
) -> FileReport:
    """Check every property of a file (a property file or a netlist) and give the report.

    `only`: names of properties; `seconds`, `states`: limits for one property; `text`: the content instead of the
    file's. Raises `InputError` for input that cannot be used.
    """
    session = Session(load(path, text), Settings(only, seconds, states))
    return session.report(list(session.results()))
