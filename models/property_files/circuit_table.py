"""The `[circuit]` table, and files that hold a circuit: from either to a netlist with its delay model."""

from __future__ import annotations

import pkgutil
from collections.abc import Callable, Collection
from dataclasses import replace
from importlib import import_module
from pathlib import Path
from typing import Literal, TypeVar

from settled.models import readers
from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem
from settled.models.property_files.name_scope import Scope, names_among
from settled.models.property_files.toml_document import Spot, listed
from settled.models.property_files.toml_loading import SIZE_LIMIT, load
from settled.models.property_files.toml_readers import one_of, strings, table, text
from settled.models.readers import equations
from settled.models.readers.equations import find_cycle
from settled.models.source import Span
from settled.models.specification import CircuitSource
from settled.models.text_file import problem_of, read_text

T = TypeVar("T")

_FILE_KEYS = ("file", "top", "library", "closed")
_MODEL_KEYS = ("delay", "feedback", "winners", "isochronic")
KEYS = (*_FILE_KEYS, *_MODEL_KEYS, *equations.KEYS)


def read_file(path: str | Path, *, named_at: Span | None = None, chain: tuple[Path, ...] = ()) -> CircuitSource:
    """The circuit of a netlist file, by its suffix, or of the `[circuit]` table of a property file.

    `named_at` is the place that named the file; `chain` the property files on the way here. Raises `InputError`.
    """
    if Path(path).suffix != ".toml":
        span = named_at or Span(str(path), 1, 1)
        if unusable := problem_of(Path(path), span):
            raise InputError(unusable)
        return CircuitSource(_read_netlist(Path(path), None, (), span), span=named_at)
    text = read_text(path, limit=SIZE_LIMIT, named_at=named_at)
    if Path(path).resolve() in chain:
        message = f"`{path}` takes its circuit from itself"
        raise InputError(Problem("circular-file", message, named_at, "leads back to a file that is being read"))
    document = load(str(path), text)
    source = read_table(document.root, chain)
    document.finish()
    assert source is not None, "a circuit that cannot be read leaves a problem"
    return source


def read_table(root: Spot, chain: tuple[Path, ...] = ()) -> CircuitSource | None:
    """The circuit of the `circuit` table in `root`; `None` when a noted problem leaves none."""
    if not root.has("circuit"):
        root.problem("missing-key", "there is no `[circuit]` table", "no `[circuit]` in this file")
        return None
    return circuit(root.child("circuit"), (*chain, Path(root.document.file).resolve()))


def circuit(spot: Spot, chain: tuple[Path, ...] = ()) -> CircuitSource | None:
    """The circuit of one table that is like `[circuit]`; `None` when a noted problem leaves none."""
    if table(spot) is None:
        return None
    spot.only(KEYS, "a circuit")
    if spot.has("file"):
        return _from_file(spot, chain)
    if not spot.has("excitation") and not spot.has("arbiters"):
        spot.missing("excitation", "a circuit", help='give equations in `[circuit.excitation]`, or `file = "..."`')
    _refuse(spot, _FILE_KEYS, "belongs to a netlist file; this circuit is given by equations")
    netlist = equations.netlist(spot, Path(spot.document.file).stem if spot.document.file != "-" else "circuit")
    return _under_delays(spot, netlist, "feedback")


def _refuse(spot: Spot, keys: Collection[str], why: str) -> None:
    for key in keys:
        if spot.has(key):
            member = spot.child(key)
            member.problem("conflict", f"`{key}` {why}", "not for this circuit", at_key=True)


def _from_file(spot: Spot, chain: tuple[Path, ...]) -> CircuitSource | None:
    _refuse(spot, equations.KEYS, "belongs to equations; this circuit is read from a file")
    folder = Path(spot.document.file).parent
    name, top = spot.take("file", text), spot.take("top", text)
    library = spot.take("library", strings) or []
    if name is None:
        return None
    file = spot.child("file")
    if name.endswith(".toml"):
        others = [key for key in (*_FILE_KEYS, *_MODEL_KEYS) if key != "file"]
        _refuse(spot, others, f"stands in `{name}`, which says all about its circuit")
        return _guarded(file, lambda: read_file(folder / name, named_at=file.span, chain=chain))
    cells = tuple(folder / member.value for member in library)
    named = [(folder / name, file.span), *((cell, member.span) for cell, member in zip(cells, library, strict=True))]
    unusable = [bad for path, place in named if (bad := problem_of(path, place))]
    spot.document.note(*unusable)
    netlist = None if unusable else _guarded(file, lambda: _read_netlist(folder / name, top, cells, file.span))
    return _under_delays(spot, netlist, "gate")


def _guarded(file: Spot, read: Callable[[], T]) -> T | None:
    """What `read` returns; the problems of the other file are noted in this document, with a place in one of them."""
    try:
        return read()
    except InputError as error:
        problems = [problem if problem.span else replace(problem, span=file.span) for problem in error.problems]
    file.document.note(*problems)
    return None


def _read_netlist(path: Path, top: str | None, library: tuple[Path, ...], span: Span) -> Netlist:
    """The netlist of a file, by the reader that states its suffix."""
    known: list[str] = []
    for name in sorted(module.name for module in pkgutil.iter_modules(readers.__path__)):
        reader = import_module(f"{readers.__name__}.{name}")
        suffixes: tuple[str, ...] = getattr(reader, "SUFFIXES", ())
        if path.suffix.lower() in suffixes:
            netlist: Netlist = reader.read(str(path), top=top, library=[str(cells) for cells in library])
            return netlist
        known.extend(suffixes)
    message = f"`{path.name}` is no file that a circuit can be read from"
    help = f"circuits are read from files whose names end in {listed([*known, '.toml'])}"
    raise InputError(Problem("unknown-suffix", message, span, "named here", help=help))


# ---- the delay model ---------------------------------------------------------------------------------------------


def _under_delays(spot: Spot, netlist: Netlist | None, default: str) -> CircuitSource | None:
    """The netlist with the delay model of the table; without one the table is checked all the same."""
    scope = Scope.of(netlist) if netlist else None
    delay = (spot.take("delay", one_of("feedback", "gate", "wire")) if spot.has("delay") else default) or ""
    _check_delay_keys(spot, delay)
    winners = spot.take("winners", one_of("any", "one")) or "any"
    isochronic = spot.take("isochronic", names_among(_connected(scope) if scope else None, "net")) or ()
    closed: tuple[str, ...] | None = ()
    if spot.has("file"):
        closed = spot.take("closed", names_among(netlist.groups if netlist else None, "module or instance"))
    if netlist is None or scope is None:
        return None
    feedback = None if delay != "feedback" or netlist.equations else _feedback(spot, scope, netlist)
    return CircuitSource(netlist, delay, feedback, winners, _nets(isochronic, scope), closed or (), spot.span)


def _check_delay_keys(spot: Spot, delay: str) -> None:
    """Keys of one delay model are not given under another; under an unknown one anything goes."""
    if delay in ("feedback", "gate"):
        _refuse(
            spot,
            ("isochronic", "closed" if spot.has("file") else "cells"),
            f'needs `delay = "wire"`; the delay model is `{delay}`',
        )
    if not spot.has("file"):
        _refuse(spot, ("feedback",), "does not apply to equations: each line of `excitation` is a node")
    elif delay in ("gate", "wire"):
        _refuse(spot, ("feedback",), f'needs `delay = "feedback"`; the delay model is `{delay}`')


def _connected(scope: Scope) -> list[str]:
    """Names of inputs and gates, also in their other names."""
    return [name for name, kind in scope.signals.items() if kind != "defined signal" or scope.net(name) != name]


def _nets(names: tuple[str, ...], scope: Scope) -> tuple[str, ...]:
    return tuple(dict.fromkeys(scope.net(name) for name in names))


def _feedback(spot: Spot, scope: Scope, netlist: Netlist) -> tuple[str, ...] | Literal["auto"]:
    """The feedback lines, which must cut every loop; all that `auto` stands for is chosen later."""
    if not spot.has("feedback") or spot.value["feedback"] == "auto":
        return "auto"
    lines = spot.child("feedback")
    if isinstance(lines.value, str):
        lines.wrong_type('an array of gates or "auto"')
        return "auto"
    gates = [name for name in scope.signals if scope.net(name) in scope.gate_set]
    before = len(spot.document.problems)
    named = _nets(names_among(gates, "gate")(lines) or (), scope)
    if len(spot.document.problems) == before:
        _check_cut(lines, netlist, set(named))
    return named


def _check_cut(lines: Spot, netlist: Netlist, cut: set[str]) -> None:
    bodies = {**{gate.name: gate.function for gate in netlist.gates}, **netlist.defined}
    cycle = find_cycle({name: body for name, body in bodies.items() if name not in cut})
    if cycle:
        message = "a loop without a feedback line remains: " + " reads ".join(f"`{name}`" for name in cycle)
        lines.problem(
            "uncut-loop", message, "cuts not every loop", help='add one of them, or write `feedback = "auto"`'
        )
