"""A flat Verilog design becomes a netlist: ports join nets; gates, assignments and cells drive them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass

from pyslang import ast, syntax

from settled.models.logic import FALSE, TRUE, Expr, var
from settled.models.netlist import Delay, Netlist
from settled.models.problems import InputError, Problem
from settled.models.readers import library_cells
from settled.models.readers.liberty import Cell
from settled.models.readers.library_cells import MUTEX
from settled.models.readers.verilog_elaborate import Design
from settled.models.readers.verilog_expressions import Bit, Bits, Expressions
from settled.models.readers.verilog_gates import MANY_OUTPUTS, check_kind, delay, function
from settled.models.readers.verilog_hierarchy import Flat, Item, Owner
from settled.models.readers.verilog_nets import Nets, User
from settled.models.source import Span

_PORTS = (ast.PortSymbol, ast.MultiPortSymbol)
_In = ast.ArgumentDirection.In
_FULL = ("(strong0,strong1)", "(strong1,strong0)")
_TYPICAL = "some gate delays are single values: each is taken as minimum and maximum, though it may be typical only"


@dataclass(frozen=True)
class _Port:
    """One bit of a port of an instance: the net inside, and what it is connected to outside, if it is."""

    pin: str
    inner: str
    outer: Bit | None
    is_input: bool


class Wiring:
    """Reads the items of a flat design in their order."""

    def __init__(self, design: Design, flat: Flat, library: Mapping[str, Cell], known: Sequence[Problem]) -> None:
        """`known`: what the elaborator says against the design."""
        self.design, self.flat, self.library = design, flat, library
        self.text = design.text
        self.expressions = Expressions(flat.nets, design.text, design.top)
        self.nets = Nets()
        self.ports: dict[ast.Symbol, list[_Port]] = {}
        self.fed: set[str] = set()
        self.cells: dict[str, tuple[str, ...]] = {}
        self.arbiters: dict[str, tuple[str, str]] = {}
        self.notes: dict[str, None] = {}
        self.unit = ""
        self.problems = [*known, *flat.problems]
        self.skipped: list[Span] = []

    def netlist(self) -> Netlist:
        """The netlist; it is good for nothing when `problems` is not empty afterwards."""
        for item in self.flat.items:
            if isinstance(item.symbol, ast.InstanceSymbol):
                self._bind(item, item.symbol)
        self.nets.joined_all()
        inputs, outputs = self._top_ports(_In), self._top_ports(ast.ArgumentDirection.Out)
        for name, span in inputs.items():
            with self._collect():
                self.nets.drive(name, User("an input of the top module", span))
        for name, span in outputs.items():
            self.nets.read(name, User("the top module as an output", span))
        for item in self.flat.items:
            with self._collect(item):
                self._read(item)
        self.problems += self.nets.loops()
        if not self.problems and self.skipped:
            message = "something here cannot be read as gates"
            self.problems += [Problem("elaboration", message, span) for span in self.skipped]
        if not self.problems:
            self._check_driven()
        return Netlist(
            name=self.design.top.name,
            inputs=tuple(inputs),
            gates=tuple(self.nets.gates),
            outputs=tuple(outputs),
            defined=self.nets.defined,
            cells=self.cells,
            groups=self._groups(),
            notes=tuple(self.notes),
            arbiters=self.arbiters,
        )

    @contextmanager
    def _collect(self, item: Item | None = None) -> Iterator[None]:
        """Note the problems of one item. One without a problem is something that the elaborator speaks against."""
        try:
            yield
        except InputError as error:
            self.problems += error.problems
            if not error.problems:
                self.skipped.append(self._span(item) if item else self.text.span(self.design.top.location))

    # ---- ports -------------------------------------------------------------------------------------------------

    def _top_ports(self, direction: ast.ArgumentDirection) -> dict[str, Span]:
        found: dict[str, Span] = {}
        for port in self.design.top.body.portList:
            if isinstance(port, _PORTS) and port.direction == direction:
                span = self.text.span(port.location)
                with self._collect():
                    found.update((name, span) for name in self._inside(port))
        return found

    def _inside(self, port: ast.Symbol) -> list[str]:
        """The bits of the net that a port is, seen from inside its module."""
        if isinstance(port, ast.MultiPortSymbol):
            return [name for part in port.ports for name in self._inside(part)]
        if not isinstance(port, ast.PortSymbol) or port.isNullPort:
            return []
        if port.internalSymbol is not None:
            return self.flat.nets.get(port.internalSymbol, [])
        return [] if port.internalExpr is None else self.expressions.target(port.internalExpr)

    def _bind(self, item: Item, symbol: ast.InstanceSymbol) -> None:
        """Join the nets inside an instance to those outside."""
        ports: list[_Port] = []
        self.ports[symbol] = ports
        for connection in symbol.portConnections:
            with self._collect(item):
                ports += self._connect(item, connection)
        by = User(f"instance `{item.name}`", self._span(item))
        for port in ports:
            if port.outer is not None and port.outer.plain and port.outer.value.op == "var":
                with self._collect(item):
                    self.nets.join(port.inner, port.outer.value.name, by)
            if port.is_input:
                self.fed.add(port.inner)

    def _connect(self, item: Item, connection: ast.PortConnection) -> list[_Port]:
        port, e = connection.port, connection.expression
        is_input = isinstance(port, _PORTS) and port.direction == _In
        names = self._inside(port)
        if e is None:
            if is_input and names:
                self._refuse_open(item, f"input `{port.name}` of instance `{item.name}`")
            return [_Port(port.name, name, None, is_input) for name in names]
        outer = self._outside(e, is_input)
        if len(outer) != len(names):
            raise InputError(())  # the elaborator reports widths
        return [_Port(port.name, name, bit, is_input) for name, bit in zip(names, outer, strict=True)]

    def _outside(self, e: ast.Expression, is_input: bool) -> Bits:
        if is_input:
            return self.expressions.bits(e)
        return [Bit(var(name), True) for name in self._target(e)]

    def _refuse_open(self, item: Item, what: str) -> None:
        help = "connect it to a net or a constant"
        raise InputError(Problem("unconnected-pin", f"{what} is connected to nothing", self._span(item), help=help))

    # ---- drivers -----------------------------------------------------------------------------------------------

    def _read(self, item: Item) -> None:
        match item.symbol:
            case ast.InstanceSymbol():
                self._instance(item, item.symbol)
            case ast.PrimitiveInstanceSymbol():
                self._primitive(item, item.symbol)
            case ast.ContinuousAssignSymbol():
                self._assign(item, item.symbol)
            case ast.NetSymbol():
                self._net(item, item.symbol)

    def _instance(self, item: Item, symbol: ast.InstanceSymbol) -> None:
        span = self._span(item)
        ports = self.ports[symbol]
        for port in ports:
            if port.inner in self.nets.alias:
                self.nets.defined[port.inner] = self.nets.joined[port.inner]
                if not port.is_input:
                    self.nets.read(port.inner, User(f"output `{port.pin}` of instance `{item.name}`", span))
            elif port.outer is not None:
                what = f"the connection of input `{port.pin}` of instance `{item.name}`"
                self._assign_bit(item.owner.outer, port.inner, port.outer, User(what, span), None)
        if symbol.definition.name in self.design.cells:
            self._check_named(item, symbol)
            self._cell(item, self.library[symbol.definition.name], ports)

    def _check_named(self, item: Item, symbol: ast.InstanceSymbol) -> None:
        """The order of the pins in a library says nothing about their order in a netlist; that of an arbiter does."""
        kinds = [getattr(c, "kind", None) for c in getattr(symbol.syntax, "connections", ())]
        if syntax.SyntaxKind.OrderedPortConnection in kinds and self.library[symbol.definition.name] is not MUTEX:
            message = f"pins of library cell `{symbol.definition.name}` are connected by their order"
            help = "connect them by name, as in `.A(net)`: a library gives its pins no order"
            raise InputError(Problem("ordered-pins", message, self._span(item), "instance", help=help))

    def _cell(self, item: Item, cell: Cell, ports: list[_Port]) -> None:
        span = self._span(item)
        nets = {port.pin: self.nets.name(port.inner) for port in ports}
        if len(nets) < len(cell.pins):
            raise InputError(())  # a pin has a problem of its own
        open_pins = {port.pin for port in ports if port.outer is None}
        made = library_cells.gates(cell, item.name, nets, open_pins, span)
        by = User(f"cell `{cell.name}` of instance `{item.name}`", span)
        for gate in made.gates:
            if gate.name not in nets.values() and gate.name in self.flat.places:
                message = f"`{gate.name}` is the name of a net, and of a node inside instance `{item.name}`"
                raise InputError(Problem("duplicate-name", message, span, help="rename the net"))
            self.nets.gate(gate.name, gate.function, by, item.owner)
        if cell is MUTEX:
            self.arbiters[item.name] = (nets["g1"], nets["g2"])
            made.notes.append(f"mutual-exclusion element {item.name}: at most one of {nets['g1']} and {nets['g2']}")
        if made.closed:
            self.cells[item.name] = tuple(gate.name for gate in made.gates)
        self.notes.update(dict.fromkeys(made.notes))

    def _primitive(self, item: Item, symbol: ast.PrimitiveInstanceSymbol) -> None:
        kind, span = symbol.primitiveType, self._span(item)
        check_kind(kind, span)
        pins = list(symbol.portConnections)
        outputs = max(1, len(pins) - 1) if kind.name in MANY_OUTPUTS else 1
        body = function(kind, [self._pin(kind.name, e) for e in pins[outputs:]])
        self._check_strength(item)
        bounds = self._delay(item, symbol.delay)
        for pin in pins[:outputs]:
            for net in self._target(pin):
                self.nets.gate(net, body, User(f"gate `{kind.name}`", span), item.owner, bounds)

    def _pin(self, kind: str, e: ast.Expression) -> Expr:
        """What an input pin of a gate is connected to: one bit, without operators."""
        bits = self.expressions.bits(e)
        if len(bits) == 1 and bits[0].plain:
            return bits[0].value
        what = "an expression with operators" if len(bits) == 1 else f"{len(bits)} bits"
        message = f"an input of gate `{kind}` is connected to {what}: `{self.text.words(e)}`"
        help = "connect one net or constant; give an expression a net of its own with `assign`"
        raise InputError(Problem("expression", message, self.text.of(e), help=help))

    def _assign(self, item: Item, symbol: ast.ContinuousAssignSymbol) -> None:
        e = symbol.assignment
        if not isinstance(e, ast.AssignmentExpression):
            raise InputError(())  # the elaborator reports why
        self._check_strength(item)
        bounds = self._delay(item, symbol.delay)
        self._assign_bits(item, self._target(e), self.expressions.bits(e.right), bounds)

    def _net(self, item: Item, symbol: ast.NetSymbol) -> None:
        """A net that is a supply or is assigned where it is declared."""
        names = self.flat.nets.get(symbol, [])
        if symbol.initializer is None:
            value = FALSE if symbol.netType.netKind == ast.NetType.NetKind.Supply0 else TRUE
            self._assign_bits(item, names, [Bit(value, True)] * len(names), None)
            return
        self._check_strength(item)
        bounds = self._delay(item, symbol.delay)
        self._assign_bits(item, names, self.expressions.bits(symbol.initializer), bounds)

    def _assign_bits(self, item: Item, names: list[str], bits: Bits, bounds: Delay | None) -> None:
        if len(names) != len(bits):
            raise InputError(())  # the elaborator reports widths
        by = User("an assignment", self._span(item))
        for name, bit in zip(names, bits, strict=True):
            self._assign_bit(item.owner, name, bit, by, bounds)

    def _assign_bit(self, owner: Owner | None, name: str, bit: Bit, by: User, bounds: Delay | None) -> None:
        """An operator makes a gate, and so does a delay; else the net is a constant or another net."""
        if bit.plain and (bounds is None or bit.value.op == "const"):
            self.nets.define(name, bit.value, by)
        else:
            self.nets.gate(name, bit.value, by, owner, bounds)

    def _target(self, e: ast.Expression) -> list[str]:
        """The bits that an assignment, or an output that is written as one, drives: no inputs of their module."""
        if not isinstance(e, ast.AssignmentExpression):
            raise InputError(())  # the elaborator reports why
        names = self.expressions.target(e.left)
        for name in names:
            if name in self.fed:
                message = f"`{name}` is an input of its module, and is driven inside it"
                raise InputError(Problem("driven-input", message, self.text.of(e.left), help="make it an output"))
        return names

    def _check_strength(self, item: Item) -> None:
        strength = getattr(item.symbol.syntax.parent, "strength", None)
        words = " ".join(str(strength or "").split())
        if words and words.replace(" ", "") not in _FULL:
            message = f"drive strength `{words}` is not accepted"
            raise InputError(Problem("strength", message, self._span(item), help="leave the strength out"))

    def _delay(self, item: Item, control: ast.TimingControl | None) -> Delay | None:
        if control is None:
            return None
        span = self._span(item)
        bounds, exact = delay(control, self.design.top, span)
        if not exact:
            self.notes[_TYPICAL] = None
        scale = item.symbol.parentScope.timeScale
        unit = str(scale and scale.base)
        self.unit = self.unit or unit
        if unit != self.unit:
            message = "delays of this design are in different units of time"
            raise InputError(Problem("mixed-timescale", message, span, help="give all modules one `` `timescale``"))
        return bounds

    # ---- the whole ---------------------------------------------------------------------------------------------

    def _check_driven(self) -> None:
        """Problems for nets that are read and not driven, one for each declaration."""
        missing: dict[ast.Symbol, list[str]] = {}
        for name in self.nets.readers:
            if name not in self.nets.drivers:
                missing.setdefault(self.flat.places[name], []).append(name)
        for symbol, names in missing.items():
            listed = ", ".join(f"`{name}`" for name in names[:8]) + (", ..." if len(names) > 8 else "")
            message = f"nothing drives net {listed}"
            note = f"it is read by {self.nets.readers[names[0]]}"
            help = "drive it by a gate or an assignment, or make it an input"
            span = self.text.span(symbol.location)
            self.problems.append(Problem("undriven-net", message, span, "net", (note,), help))

    def _groups(self) -> dict[str, tuple[tuple[str, ...], ...]]:
        groups: dict[str, dict[tuple[str, ...], None]] = {}
        for owner in self.flat.owners:
            for name in (owner.module, owner.path):
                groups.setdefault(name, {})[tuple(owner.gates)] = None
        return {name: tuple(filter(None, members)) for name, members in groups.items()}

    def _span(self, item: Item) -> Span:
        """An assignment as a whole; of a gate or an instance the name, or the kind when it has none."""
        symbol = item.symbol
        if isinstance(symbol, ast.ContinuousAssignSymbol):
            return self.text.of(symbol.syntax)
        if isinstance(symbol, ast.PrimitiveInstanceSymbol) and not symbol.arrayName:
            return self.text.span(symbol.syntax.parent.sourceRange.start)
        return self.text.span(symbol.location)
