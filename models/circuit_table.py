"""The `[circuit]` table, and files that hold a circuit: from either to a netlist with its delay model."""

from __future__ import annotations

import pkgutil
from collections.abc import Callable
from importlib import import_module
from pathlib import Path
from typing import Literal, TypeVar

from settled.models import readers
from settled.models.name_scope import Scope, names_among
from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem
from settled.models.readers import equations
from settled.models.readers.equations import find_cycle
from settled.models.source import Span
from settled.models.specification import CircuitSource
from settled.models.text_file import check_file, read_text
from settled.models.toml_document import Spot, listed
from settled.models.toml_loading import SIZE_LIMIT, load
from settled.models.toml_readers import one_of, strings, table, text

T = TypeVar("T")

_FILE_KEYS = ("file", "top", "library", "closed")
_MODEL_KEYS = ("delay", "feedback", "winners", "isochronic")
_WIRE_KEYS = ("isochronic", "closed", "cells")
KEYS = (*_FILE_KEYS, *_MODEL_KEYS, *equations.KEYS)


def read_file(path: str | Path, *, named_at: Span | None = None, chain: tuple[Path, ...] = ()) -> CircuitSource:
    """The circuit of a netlist file, by its suffix, or of the `[circuit]` table of a property file.

    `named_at` is the place that named the file; `chain` the property files on the way here. Raises `InputError`.
    """
    if Path(path).suffix != ".toml":
        span = named_at or Span(str(path), 1, 1)
        return CircuitSource(_read_netlist(Path(path), None, (), span), span=named_at)
    if Path(path).resolve() in chain:
        message = f"`{path}` takes its circuit from itself"
        raise InputError(Problem("circular-file", message, named_at, "leads back to a file that is being read"))
    document = load(str(path), read_text(path, limit=SIZE_LIMIT, named_at=named_at))
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
    if not spot.has("excitation"):
        spot.missing("excitation", "a circuit", help='give equations in `[circuit.excitation]`, or `file = "..."`')
        return None
    _refuse(spot, _FILE_KEYS, "belongs to a netlist file; this circuit is given by equations")
    _refuse(spot, ("feedback",), "does not apply to equations: each line of `excitation` is a node")
    netlist = equations.netlist(spot, Path(spot.document.file).stem if spot.document.file != "-" else "circuit")
    return None if netlist is None else _under_delays(spot, netlist, "feedback")


def _refuse(spot: Spot, keys: tuple[str, ...], why: str, code: str = "conflict") -> None:
    for key in keys:
        if spot.has(key):
            member = spot.child(key)
            member.problem(code, f"`{key}` {why}", "not for this circuit", span=member.key_span)


def _from_file(spot: Spot, chain: tuple[Path, ...]) -> CircuitSource | None:
    _refuse(spot, equations.KEYS, "belongs to equations; this circuit is read from a file")
    name = spot.take("file", text)
    folder = Path(spot.document.file).parent
    library = [(member.value, member.span) for member in spot.take("library", strings) or ()]
    top = spot.take("top", text)
    if name is None:
        return None
    span = spot.child("file").span
    if name.endswith(".toml"):
        others = tuple(key for key in (*_FILE_KEYS, *_MODEL_KEYS) if key != "file")
        _refuse(spot, others, f"stands in `{name}`, which says all about its circuit")
        return _guarded(spot, lambda: read_file(folder / name, named_at=span, chain=chain))
    netlist = _guarded(spot, lambda: _read_netlist(folder / name, top, _libraries(folder, library), span))
    return None if netlist is None else _under_delays(spot, netlist, "gate")


def _guarded(spot: Spot, read: Callable[[], T]) -> T | None:
    """What `read` returns; the problems of another file are noted in this document."""
    try:
        return read()
    except InputError as error:
        spot.document.problems.extend(error.problems)
        return None


def _libraries(folder: Path, names: list[tuple[str, Span]]) -> tuple[Path, ...]:
    for name, span in names:
        check_file(folder / name, span)
    return tuple(folder / name for name, _ in names)


def _read_netlist(path: Path, top: str | None, library: tuple[Path, ...], span: Span) -> Netlist:
    """The netlist of a file, by the reader that states its suffix."""
    known: list[str] = []
    for name in sorted(module.name for module in pkgutil.iter_modules(readers.__path__)):
        reader = import_module(f"{readers.__name__}.{name}")
        suffixes: tuple[str, ...] = getattr(reader, "SUFFIXES", ())
        if path.suffix.lower() in suffixes:
            check_file(path, span)
            netlist: Netlist = reader.read(path, top=top, library=library)
            return netlist
        known.extend(suffixes)
    check_file(path, span)
    message = f"`{path.name}` is no file that a circuit can be read from"
    help = f"circuits are read from files whose names end in {listed([*known, '.toml'])}"
    raise InputError(Problem("unknown-suffix", message, span, "named here", help=help))


# ---- the delay model ---------------------------------------------------------------------------------------------


def _under_delays(spot: Spot, netlist: Netlist, default: str) -> CircuitSource:
    scope = Scope.of(netlist)
    delay = (spot.take("delay", one_of("feedback", "gate", "wire")) if spot.has("delay") else default) or "wire"
    if delay != "wire":
        _refuse(spot, _WIRE_KEYS, f'needs `delay = "wire"`; the delay model is `{delay}`')
    if delay != "feedback" and not netlist.equations:
        _refuse(spot, ("feedback",), f'needs `delay = "feedback"`; the delay model is `{delay}`')
    nets = [*scope.inputs, *scope.gates, *(name for name in scope.defined if scope.net(name) not in scope.defined)]
    closed = {} if netlist.equations else netlist.groups
    return CircuitSource(
        netlist=netlist,
        delay=delay,
        feedback=None if delay != "feedback" or netlist.equations else _feedback(spot, scope, netlist),
        winners=spot.take("winners", one_of("any", "one")) or "any",
        isochronic=_nets(spot.take("isochronic", names_among(nets, "net")) or (), scope),
        closed=spot.take("closed", names_among(closed, "module or instance")) or (),
        span=spot.span,
    )


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
    gates = [name for name in scope.signals if scope.net(name) in scope.gates]
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
