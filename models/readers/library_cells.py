"""What the cells of a library mean as gates, and as Verilog modules without a body.

* A cell with functions only is one gate for each output.
* A `latch` is one gate that reads itself: it follows `data_in` while `enable` is true, and holds otherwise.
* An `ff` is two such gates, a master that follows while `clocked_on` is false and a slave that follows the master
  while it is true, in one closed cell: both see the same clock.
* `clear` and `preset` go before everything else, in master and slave alike. What happens when both are active is
  what `clear_preset_var1` (for the state) and `clear_preset_var2` (for its complement) say; a cell that has both
  without saying so is not guessed at.
* `MUTEX` stands in every library: the mutual-exclusion element, see `arbiter`.
* An output whose function is the state itself is the storing gate; an output with another function of the state is a
  gate of its own, in the same closed cell.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field

from settled.models import arbiter
from settled.models.logic import Expr, and_, const, ite, not_, or_, rename, support, var
from settled.models.netlist import Gate
from settled.models.problems import InputError, Problem
from settled.models.readers.liberty import Cell, Pin, Storage
from settled.models.readers.liberty_functions import Words, parse
from settled.models.source import Span

_NEEDS = {"latch": ("enable", "data_in"), "ff": ("clocked_on", "next_state")}
_BEYOND = {"latch": ("enable_also", "data_in_also"), "ff": ("clocked_on_also",)}
_BOTH = ("clear_preset_var1", "clear_preset_var2")
_EXPRESSIONS = ("enable", "data_in", "clear", "preset", "clocked_on", "next_state")
_BUILT_IN = Span("settled", 1, 1)
MUTEX = Cell(
    arbiter.NAME,
    (
        Pin("r1", "input", None),
        Pin("r2", "input", None),
        Pin("g1", "output", Words("r1 & !g2", _BUILT_IN)),
        Pin("g2", "output", Words("r2 & !g1", _BUILT_IN)),
    ),
    (),
    (),
    _BUILT_IN,
)
_PIN_BEYOND = ("three_state", "state_function", "internal_node", "x_function")


@dataclass
class CellGates:
    """The gates of one instance, whether they form one closed cell, and a sentence about its storage."""

    gates: list[Gate] = field(default_factory=list)
    closed: bool = False
    notes: list[str] = field(default_factory=list)


def stub(cell: Cell) -> str:
    """An empty Verilog module with the pins of a readable cell."""
    pins = ", ".join(f"{pin.direction} \\{pin.name} " for pin in cell.pins)
    return f"module \\{cell.name} ({pins}); endmodule"


def unreadable(cell: Cell) -> list[str]:
    """All that keeps the cell from being read as gates, as clauses of a sentence."""
    reasons = [f"it has a {kind} group" for kind in cell.beyond]
    for name, count in Counter(pin.name for pin in cell.pins).items():
        reasons += [f"it has {count} pins `{name}`"] if count > 1 else []
    for pin in cell.pins:
        reasons += [f"pin `{pin.name}` has `{word}`" for word in _PIN_BEYOND if word in pin.attributes]
        if pin.direction not in ("input", "output"):
            reasons.append(f"pin `{pin.name}` is neither input nor output")
        elif pin.direction == "output" and pin.function is None and not reasons:
            reasons.append(f"output `{pin.name}` has no function")
    for storage in cell.storage:
        reasons += _storage_reasons(storage)
    return reasons


def refusal(cell: Cell, instance: str, reasons: Sequence[str], span: Span) -> Problem:
    """The problem of an instance of a cell that cannot be read."""
    message = f"library cell `{cell.name}` of instance `{instance}` cannot be read: " + "; ".join(reasons)
    note = f"the cell stands at {cell.span.file}:{cell.span.line}:{cell.span.column}"
    help = "accepted: pins that are inputs or outputs, with `function`, and `latch` and `ff` groups"
    return Problem("unreadable-cell", message, span, "instance", (note,), help)


def gates(cell: Cell, instance: str, nets: Mapping[str, str], open_pins: Collection[str], span: Span) -> CellGates:
    """The gates of an instance of a readable cell, whose pins are at `nets`.

    An output among `open_pins` is connected to nothing: it is left out unless another function reads it.
    Raises `InputError`.
    """
    return _Instance(cell, instance, nets, open_pins, span).read()


def _storage_reasons(storage: Storage) -> list[str]:
    given = storage.attributes
    reasons = [f"its `{storage.kind}` has `{word}`" for word in _BEYOND[storage.kind] if word in given]
    needs = [word for word in _NEEDS[storage.kind] if word not in given]
    if needs and not (storage.kind == "latch" and len(needs) == 2 and ("clear" in given or "preset" in given)):
        reasons.append(f"its `{storage.kind}` has no `{needs[0]}`")
    if "clear" in given and "preset" in given:
        state = given["clear_preset_var1"].text.upper() if "clear_preset_var1" in given else ""
        if state not in ("L", "H", "N"):
            reasons.append(f"its `{storage.kind}` has clear and preset, and no `clear_preset_var1` of L, H or N")
    return reasons


class _Instance:
    def __init__(
        self, cell: Cell, instance: str, nets: Mapping[str, str], open_pins: Collection[str], span: Span
    ) -> None:
        self.cell, self.instance, self.nets, self.open_pins, self.span = cell, instance, nets, open_pins, span
        states = [name for storage in cell.storage for name in storage.names]
        self.known = [*(pin.name for pin in cell.pins), *states]
        self.outputs = {p: self._parse(p.function) for p in cell.pins if p.direction == "output" and p.function}
        self.meaning = {pin: var(net) for pin, net in nets.items()}
        self.storing: set[str] = set()
        self.made = CellGates()

    def read(self) -> CellGates:
        for storage in self.cell.storage:
            self._name_states(storage)
        for storage in self.cell.storage:
            self._store(storage)
        for pin, function in self.outputs.items():
            if pin.name not in self.storing and self._is_wanted(pin):
                self._gate(self.nets[pin.name], self._resolve(function))
        self.made.closed = bool(self.cell.storage) and len(self.made.gates) > 1
        return self.made

    def _is_wanted(self, pin: Pin) -> bool:
        reads = (name for function in self.outputs.values() for name in support(function))
        return pin.name not in self.open_pins or pin.name in {*reads, *self._read_by_storage()}

    def _read_by_storage(self) -> set[str]:
        words = [w for s in self.cell.storage for key, w in s.attributes.items() if key in _EXPRESSIONS]
        return {name for w in words for name in support(self._parse(w))}

    def _name_states(self, storage: Storage) -> None:
        """The state is called after the net of the first output that is the state, connected ones first."""
        state, *complement = storage.names
        same = [pin for pin, function in self.outputs.items() if function is var(state)]
        same.sort(key=lambda pin: pin.name in self.open_pins)
        self.storing |= {pin.name for pin in same[:1]}
        self.meaning[state] = var(self.nets[same[0].name] if same else f"{self.instance}.{state}")
        for name in complement:
            self.meaning[name] = self._complement(storage, self.meaning[state])

    def _complement(self, storage: Storage, state: Expr) -> Expr:
        clear, preset = self._function(storage, "clear"), self._function(storage, "preset")
        if clear is None or preset is None:
            return not_(state)
        ends = [storage.attributes[key].text.upper() for key in _BOTH if key in storage.attributes]
        if ends in (["L", "H"], ["H", "L"], ["N", "N"]):
            return not_(state)
        if len(ends) == 2 and ends[1] in ("L", "H"):
            return ite(and_(clear, preset), const(ends[1] == "H"), not_(state))
        if not any(name in support(*self.outputs.values()) for name in storage.names[1:]):
            return not_(state)
        reason = f"its `{storage.kind}` does not say in `clear_preset_var2` what `{storage.names[1]}` is"
        raise InputError(refusal(self.cell, self.instance, [reason], self.span))

    def _store(self, storage: Storage) -> None:
        state = self.meaning[storage.names[0]]
        if storage.kind == "latch":
            enable, data = self._function(storage, "enable"), self._function(storage, "data_in")
            follows = state if enable is None or data is None else ite(enable, data, state)
            self._gate(state.name, self._forced(storage, follows, state))
            note = (
                f"latch cell `{self.cell.name}` of `{self.instance}`: node `{state.name}` follows while it is enabled"
            )
            self.made.notes.append(note + " and holds otherwise")
            return
        single = len(self.cell.storage) == 1
        master = var(f"{self.instance}.master" if single else f"{self.instance}.{storage.names[0]}.master")
        clock, data = self._function(storage, "clocked_on"), self._function(storage, "next_state")
        assert clock is not None and data is not None
        self._gate(master.name, self._forced(storage, ite(clock, master, data), master))
        self._gate(state.name, self._forced(storage, ite(clock, master, state), state))
        nodes = f"master `{master.name}` and slave `{state.name}`"
        self.made.notes.append(f"ff cell `{self.cell.name}` of `{self.instance}`: {nodes}, one closed cell")

    def _forced(self, storage: Storage, follows: Expr, state: Expr) -> Expr:
        """`follows` under clear and preset."""
        clear, preset = self._function(storage, "clear"), self._function(storage, "preset")
        if clear is None:
            return follows if preset is None else or_(preset, follows)
        if preset is None:
            return and_(not_(clear), follows)
        both = storage.attributes["clear_preset_var1"].text.upper()
        if both == "H":
            return or_(preset, and_(not_(clear), follows))
        cleared = and_(not_(clear), or_(preset, follows))
        return cleared if both == "L" else ite(and_(clear, preset), state, cleared)

    def _gate(self, name: str, function: Expr) -> None:
        self.made.gates.append(Gate(name, function, self.span))

    def _function(self, storage: Storage, key: str) -> Expr | None:
        words = storage.attributes.get(key)
        return None if words is None else self._resolve(self._parse(words))

    def _parse(self, words: Words) -> Expr:
        return parse(words, self.known)

    def _resolve(self, e: Expr) -> Expr:
        return rename([e], self.meaning)[0]
