"""Two files and an environment made into one specification with one question: are the circuits equivalent?"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from settled.models.environment import Environment
from settled.models.logic import support
from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem, nearest
from settled.models.property_files.reader import read, read_circuit
from settled.models.renaming import read_names, renamed
from settled.models.source import Span
from settled.models.specification import CircuitSource, Property, Specification
from settled.models.text_file import recording
from settled.verify.inputs import locate
from settled.verify.properties import shapes

NAME = "equivalent"


def comparison(
    original: str, other: str, environment: str | None = None, names: Sequence[str] = (), transients: bool = False
) -> Specification:
    """The specification that asks whether `other` agrees with `original`.

    The environment is that of the file `environment`, else that of `original` when it is a property file. `names`
    renames signals of `other`, each `old=new`. Raises `InputError`.
    """
    with recording() as files:
        source, to = circuit_of(original), circuit_of(other)
        rules = rules_of(environment or original)
    to = renamed(to, read_names(names, to))
    problems = list(_unknown_names(rules, source.netlist, environment or original))
    if rules.mode != "fundamental":
        message = "`equivalent` is a property of fundamental mode; this environment is in input-output mode"
        problems.append(Problem("wrong-mode", message, Span(environment or original, 1, 1)))
    if problems:
        raise InputError(problems)
    options = {"to": to} | ({"transients": True} if transients else {})
    title = f"{source.netlist.name} against {to.netlist.name} ({other})"
    return Specification(locate(original)[0], title, source, rules, (Property(NAME, NAME, options),), files=files)


def circuit_of(name: str) -> CircuitSource:
    """The circuit in a netlist or property file, or in a gallery file of that name."""
    path, text = locate(name)
    return read_circuit(path) if text is None else read(path, kinds=shapes(), text=text).circuit


def rules_of(name: str) -> Environment:
    """The environment of a property file; of a netlist, the default one."""
    path, text = locate(name)
    if text is None and not path.endswith(".toml"):
        return Environment()
    return read(path, kinds=shapes(), text=text).environment


def _unknown_names(rules: Environment, netlist: Netlist, file: str) -> Iterator[Problem]:
    """What the environment speaks of and the original does not have; another file may have been written for another."""
    known = {*netlist.inputs, *(g.name for g in netlist.gates), *netlist.defined}
    guards = [e for guard in rules.guards.values() for e in (guard.rises, guard.falls)]
    for name in dict.fromkeys([*support(*rules.assume, *guards), *rules.start, *rules.guards]):
        if name not in known:
            message = f"the environment speaks of `{name}`, which `{netlist.name}` does not have"
            yield Problem("unknown-name", message, Span(file, 1, 1), "this environment", help=nearest(name, known))
