"""Structural Verilog: IEEE 1364-2005 in `.v` files, the same subset of IEEE 1800 in `.sv` files.

What is read, and as what:

* The hierarchy is laid flat. A net is called by its path with dots, `u1.q`; vectors are read bit by bit, `d[3]`;
  escaped identifiers stand without their backslash. Nets that ports join are one net with the name on the highest
  level; the inner names stay usable as defined signals.
* Each gate primitive (and nand or nor xor xnor buf not, arrays of them, combinational primitives of the user) is one
  gate, called by the net that it drives.
* Each bit of an assignment with an operator is one gate, however large: a complex gate. The same holds for an operator
  in the connection of an input of an instance; that gate is called by the net inside. An assignment of nets or
  constants has no delay and is a definition, unless it is written with a delay: then it is a gate too.
* An instance of a module that the text does not define is a cell of one of the Liberty libraries, see `library_cells`.
* `settled_mutex (input r1, r2, output g1, g2)` is known without a definition: the mutual-exclusion element, two gates
  in one closed cell.
* `#(...)` of gates and assignments gives bounds in the design's unit of time: minimum and maximum of the rising and of
  the falling output.
* Modules and instances other than the top are groups that can be closed cells.

Everything else is an error with its place: blocks and functions, primitives with state, tri-state and switches, pulls
and strengths, x and z, specify blocks, inouts, arithmetic, undriven and multiply driven nets, implicit nets, and
widths that do not match.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path

from settled.models.netlist import Netlist
from settled.models.problems import InputError, Problem
from settled.models.readers.liberty import Cell, read_cells
from settled.models.readers.library_cells import MUTEX, stub, unreadable
from settled.models.readers.verilog_elaborate import elaborate
from settled.models.readers.verilog_hierarchy import flatten
from settled.models.readers.verilog_text import PROBLEMS
from settled.models.readers.verilog_wiring import Wiring
from settled.models.text_file import read_text as text_of_file

SUFFIXES = (".v", ".sv")
LARGEST = 10_000_000
"""How many bytes a netlist may have."""


def read(path: str, *, top: str | None = None, library: Sequence[str] = ()) -> Netlist:
    """The netlist of the module `top` (default: the only one that no other one instantiates) of a Verilog file.

    `library` names Liberty files with the cells that the file instantiates. Raises `InputError` with every problem.
    """
    problems: list[Problem] = []
    cells: dict[str, Cell] = {}
    for name in library:
        try:
            _add(cells, read_cells(name), problems)
        except InputError as error:
            problems += error.problems
    if problems:
        raise InputError(problems)
    return read_text(text_of_file(path, limit=LARGEST), path, top=top, cells=cells)


def read_text(text: str, path: str, *, top: str | None = None, cells: Mapping[str, Cell] | None = None) -> Netlist:
    """The netlist of Verilog text; `path` names it in problems, and its suffix says which standard it follows."""
    cells = {MUTEX.name: MUTEX, **(cells or {})}
    stubs = {name: stub(cell) for name, cell in cells.items() if not unreadable(cell)}
    design = elaborate(text, path, top, stubs, legacy=Path(path).suffix.lower() == ".v")
    flat = flatten(design, cells)
    found = design.problems()
    if any(problem.code == "duplicate-name" for problem in flat.problems):
        raise InputError(_ordered(found + flat.problems))  # names do not say which net is meant
    wiring = Wiring(design, flat, cells, found)
    netlist = wiring.netlist()
    if wiring.problems:
        raise InputError(_ordered(wiring.problems))
    return netlist


def _add(cells: dict[str, Cell], more: Mapping[str, Cell], problems: list[Problem]) -> None:
    """Add the cells of another library; the same cell may stand in several if it means the same."""
    for name, cell in more.items():
        first = cells.setdefault(name, cell)
        if first != cell:
            note = f"the first one stands at {first.span.file}:{first.span.line}:{first.span.column}"
            message = f"cell `{name}` is defined differently in two libraries"
            problems.append(Problem("duplicate-name", message, cell.span, "the second one", (note,)))


def _ordered(problems: Sequence[Problem]) -> list[Problem]:
    """The problems in the order of the text, one for each place."""
    places: dict[object, Problem] = {}
    for problem in problems:
        span = problem.span
        places.setdefault((span.file, span.line, span.column) if span else problem, problem)
    order = sorted(places.values(), key=lambda p: (p.span.file, p.span.line, p.span.column) if p.span else ("", 0, 0))
    return order[:PROBLEMS]
