"""The hierarchy of an elaborated Verilog design laid flat: its nets bit by bit, and its gates, assignments, instances.

A net is called by the path of instances and generate blocks that it is declared in, with dots, and a bit of a vector
by its index, as in `u1.d[3]`; escaped identifiers stand as they are, without their backslash. Whatever is neither
gates nor wiring is a problem.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

from pyslang import ast

from settled.models.problems import InputError, Problem, nearest
from settled.models.readers.liberty import Cell
from settled.models.readers.library_cells import refusal, unreadable
from settled.models.readers.verilog_elaborate import Design
from settled.models.source import Span

SIZE = 200_000
"""How many bits of nets, gates, assignments and instances a flat design may hold, taken together."""

_Kind = ast.SymbolKind
_Net = ast.NetType.NetKind
_WIRES = (_Net.Wire, _Net.Tri, _Net.UWire)
_SUPPLIES = (_Net.Supply0, _Net.Supply1)
_SILENT = (_Kind.Parameter, _Kind.Genvar, _Kind.EmptyMember, _Kind.DefParam, _Kind.TypeAlias, _Kind.ElabSystemTask)
_ACCEPTED = "accepted: gates, `assign`, nets, parameters, generate constructs and instances of modules and cells"
_BLOCKS = {"Initial": "initial", "Final": "final", "AlwaysComb": "always_comb", "AlwaysLatch": "always_latch"}
_NAMED = {
    _Kind.SpecifyBlock: ("specify-block", "a specify block is not accepted"),
    _Kind.Specparam: ("specify-block", "a specparam is not accepted"),
    _Kind.Subroutine: ("construct", "a function or task is not accepted"),
    _Kind.NetAlias: ("construct", "an alias statement is not accepted"),
}


Driving = ast.PrimitiveInstanceSymbol | ast.ContinuousAssignSymbol | ast.NetSymbol | ast.InstanceSymbol
"""What becomes gates, definitions or joined nets."""


@dataclass(eq=False)
class Owner:
    """An instance, and the names of the gates in it, those of inner instances included."""

    path: str
    module: str
    outer: Owner | None
    gates: list[str] = field(default_factory=list)

    def add(self, gate: str) -> None:
        owner: Owner | None = self
        while owner is not None:
            owner.gates.append(gate)
            owner = owner.outer


@dataclass(frozen=True)
class Item:
    """A gate, an assignment, a net with a driver of its own or an instance: its symbol, full name and owner."""

    symbol: Driving
    name: str
    owner: Owner


@dataclass
class Flat:
    """A flat design: the items in the order of the text, the nets with the names of their bits from the left."""

    items: list[Item] = field(default_factory=list)
    nets: dict[ast.Symbol, list[str]] = field(default_factory=dict)
    places: dict[str, ast.Symbol] = field(default_factory=dict)
    owners: list[Owner] = field(default_factory=list)
    problems: list[Problem] = field(default_factory=list)


_Members = Iterator[tuple[ast.Symbol, str]]


def flatten(design: Design, library: Mapping[str, Cell]) -> Flat:
    """Lay the design flat; problems are noted in the result. Raises `InputError` for a design without bound."""
    walk = _Walk(design, library)
    walk.run()
    return walk.flat


class _Walk:
    def __init__(self, design: Design, library: Mapping[str, Cell]) -> None:
        self.design = design
        self.library = library
        self.flat = Flat()
        self.size = 0
        self.paths: set[str] = set()
        top = Owner("", design.top.name, None)
        self.stack: list[tuple[_Members, str, Owner]] = [(_members(design.top.body), "", top)]

    def run(self) -> None:
        while self.stack:
            members, prefix, owner = self.stack[-1]
            member = next(members, None)
            if member is None:
                self.stack.pop()
            else:
                self._take(member[0], member[1], prefix, owner)

    def _take(self, symbol: ast.Symbol, name: str, prefix: str, owner: Owner) -> None:
        path = prefix + name
        if isinstance(symbol, (ast.PrimitiveInstanceSymbol, ast.ContinuousAssignSymbol)):
            self._add(Item(symbol, path, owner))
        elif isinstance(symbol, ast.NetSymbol):
            self._net(symbol, path, owner)
        elif isinstance(symbol, ast.VariableSymbol):
            self._variable(symbol, path)
        elif isinstance(symbol, ast.InstanceSymbol):
            self._instance(symbol, path, owner)
        elif isinstance(symbol, ast.InstanceArraySymbol):
            elements = [(e, f"{name}[{i}]") for i, e in enumerate(symbol.elements, symbol.range.lower)]
            self.stack.append((iter(elements), prefix, owner))
        elif isinstance(symbol, ast.GenerateBlockArraySymbol):
            entries = [(e, f"{symbol.externalName}[{int(e.arrayIndex)}]") for e in symbol.entries]
            self.stack.append((iter(entries), prefix, owner))
        elif isinstance(symbol, ast.GenerateBlockSymbol):
            if not symbol.isUninstantiated:
                self.stack.append((_members(symbol), f"{prefix}{name or symbol.externalName}.", owner))
        elif isinstance(symbol, (ast.PortSymbol, ast.MultiPortSymbol)):
            self._port(symbol)
        elif isinstance(symbol, ast.UninstantiatedDefSymbol):
            self._unknown(symbol, path)
        elif symbol.kind not in _SILENT:
            self._other(symbol)

    def _add(self, item: Item) -> None:
        self.flat.items.append(item)
        self._count(1)

    def _count(self, more: int) -> None:
        self.size += more
        if self.size > SIZE:
            message = f"the flat design is larger than the limit of {SIZE:,} nets, gates and instances"
            raise InputError(Problem("too-large", message, self._span(self.design.top.definition)))

    def _instance(self, symbol: ast.InstanceSymbol, path: str, owner: Owner) -> None:
        module = symbol.definition.name
        if not symbol.isModule:
            self._problem("construct", f"`{module}` is no module", symbol, _ACCEPTED)
            return
        inner = Owner(path, module, owner if owner.path else None)
        self._check_depth(symbol, inner)
        if path in self.paths:
            message = f"two instances of the flat design are called `{path}`"
            self._problem("duplicate-name", message, symbol, "rename one of them")
        self.paths.add(path)
        self.flat.owners.append(inner)
        self._add(Item(symbol, path, inner))
        self.stack.append((_members(symbol.body), path + ".", inner))

    def _check_depth(self, symbol: ast.InstanceSymbol, owner: Owner) -> None:
        """A module may hold itself with other parameters, but not without end."""
        modules, outer = [owner.module], owner.outer
        while outer is not None:
            modules.append(outer.module)
            outer = outer.outer
        if len(modules) > 100:
            again = modules[0] in modules[1:] or modules[0] == self.design.top.name
            message = f"module `{modules[0]}` contains itself" if again else "instances nest more than 100 levels deep"
            raise InputError(Problem("recursion", message, self._span(symbol), "instance"))

    def _net(self, symbol: ast.NetSymbol, path: str, owner: Owner) -> None:
        kind = symbol.netType.netKind
        if kind not in _WIRES + _SUPPLIES:
            help = "accepted: wire, tri, uwire, supply0 and supply1 nets"
            self._problem("net-type", f"`{symbol.name}` is a {symbol.netType.name} net", symbol, help)
        elif symbol.delay is not None and symbol.initializer is None:
            help = "give the delay to the gate or assignment that drives the net"
            self._problem("net-delay", f"net `{symbol.name}` has a delay of its own", symbol, help)
        self._declare(symbol, path)
        if symbol.initializer is not None or kind in _SUPPLIES:
            self._add(Item(symbol, path, owner))

    def _variable(self, symbol: ast.VariableSymbol, path: str) -> None:
        if symbol.initializer is not None:
            message = f"variable `{symbol.name}` is given an initial value"
            self._problem("initial-value", message, symbol, "every stable state may be a start; see `start`")
        self._declare(symbol, path)

    def _declare(self, symbol: ast.NetSymbol | ast.VariableSymbol, path: str) -> None:
        if symbol.type.isError:
            return
        self._count(symbol.type.bitstreamWidth)
        names = _bit_names(path, symbol.type)
        if names is None:
            help = "accepted: nets and variables of single bits and vectors of them"
            self._problem("construct", f"`{symbol.name}` is of type {symbol.type}", symbol, help)
            return
        self.flat.nets[symbol] = names
        for name in names:
            other = self.flat.places.setdefault(name, symbol)
            if other != symbol and other.parentScope != symbol.parentScope or other.name != symbol.name:
                self._clash(name, symbol, other)

    def _clash(self, name: str, symbol: ast.Symbol, other: ast.Symbol) -> None:
        place = self._span(other)
        note = f"the other one stands at {place.file}:{place.line}:{place.column}"
        message = f"two nets of the flat design are called `{name}`"
        self._problem("duplicate-name", message, symbol, "rename one of them", (note,))

    def _port(self, symbol: ast.PortSymbol | ast.MultiPortSymbol) -> None:
        if symbol.direction not in (ast.ArgumentDirection.In, ast.ArgumentDirection.Out):
            message = f"port `{symbol.name}` is neither input nor output"
            self._problem("inout", message, symbol, "accepted: input and output ports")

    def _unknown(self, symbol: ast.UninstantiatedDefSymbol, path: str) -> None:
        module = symbol.definitionName
        if module in self.library:
            cell = self.library[module]
            self.flat.problems.append(refusal(cell, path, unreadable(cell), self._span(symbol)))
            return
        message = f"module `{module}` of instance `{path}` is neither in the netlist nor a cell of a library"
        help = nearest(module, [*self.design.modules, *self.library])
        self._problem("unknown-module", message, symbol, help or "name the library that has the cell in `library`")

    def _other(self, symbol: ast.Symbol) -> None:
        if isinstance(symbol, ast.ProceduralBlockSymbol):
            word = symbol.procedureKind.name
            message = f"`{_BLOCKS.get(word, 'always')}` block is not made of gates"
            self._problem("procedural-block", message, symbol, _ACCEPTED)
            return
        otherwise = f"a construct of kind {symbol.kind.name} is not accepted"
        code, message = _NAMED.get(symbol.kind, ("construct", otherwise))
        self._problem(code, message, symbol, _ACCEPTED)

    def _span(self, symbol: ast.Symbol) -> Span:
        return self.design.text.span(symbol.location)

    def _problem(self, code: str, message: str, symbol: ast.Symbol, help: str, notes: tuple[str, ...] = ()) -> None:
        self.flat.problems.append(Problem(code, message, self._span(symbol), "", notes, help))


def _members(scope: ast.Scope | ast.InstanceBodySymbol | ast.GenerateBlockSymbol) -> _Members:
    return ((member, member.name) for member in scope)


def _bit_names(path: str, type: ast.Type) -> list[str] | None:
    """The names of the bits of a net from the left, `None` when it is no scalar and no vector."""
    names = [path]
    while type.canonicalType.kind in (_Kind.PackedArrayType, _Kind.FixedSizeUnpackedArrayType):
        area = type.canonicalType.fixedRange
        step = -1 if area.left > area.right else 1
        names = [f"{name}[{index}]" for name in names for index in range(area.left, area.right + step, step)]
        type = type.canonicalType.arrayElementType
    return names if type.canonicalType.kind == _Kind.ScalarType else None
