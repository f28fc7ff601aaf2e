"""Verilog text parsed and elaborated by pyslang, with its diagnostics as problems.

Modules are elaborated as IEEE 1364-2005 and IEEE 1800 say: parameters, generate loops, instance arrays. What of the
result is gates, and what is not, is for `verilog_hierarchy` to say.
"""

from __future__ import annotations

import re
from bisect import bisect_right
from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from functools import cached_property

import pyslang
from pyslang import ast, syntax

from settled.models.problems import InputError, Problem, nearest
from settled.models.readers.verilog_text import PROBLEMS, scan
from settled.models.source import Span

_PREFIX = '`begin_keywords "1364-2005"\n'
_FIRST_PIECE = 200_000
_CODES = {
    "ImplicitNet": ("implicit-net", "declare the net before it is used"),
    "Redefinition": ("redefined-name", "give each net one declaration"),
    "RedefinitionDifferentType": ("redefined-name", "give each net one declaration"),
    "DuplicateDefinition": ("redefined-name", "give each module one definition"),
    **dict.fromkeys(
        ("WidthExpand", "WidthTruncate", "PortWidthExpand", "PortWidthTruncate", "BitwiseOpMismatch")
        + ("ArithOpMismatch", "ComparisonMismatch", "ConstantConversion", "PortConnArrayMismatch"),
        ("width-mismatch", "give both sides the same number of bits"),
    ),
    **dict.fromkeys(
        ("IndexOOB", "RangeOOB", "RangeWidthOOB", "CannotIndexScalar"),
        ("index-out-of-range", "select bits that the net has"),
    ),
    "UnsizedInConcat": ("width-mismatch", "write the constant with its width, such as 1'b0"),
    "ParameterDoesNotExist": ("unknown-name", ""),
    "UndeclaredIdentifier": ("unknown-name", "declare the net before it is used"),
    "TypoIdentifier": ("unknown-name", ""),
    "UsedBeforeDeclared": ("unknown-name", "declare the net before it is used"),
    "CouldNotResolveHierarchicalPath": ("unknown-name", ""),
    "PortDoesNotExist": ("unknown-port", ""),
    "InvalidPrimitivePortConn": ("unconnected-pin", "connect every pin of a gate"),
    "InfinitelyRecursiveHierarchy": ("recursion", "a module must not contain itself"),
    "MaxInstanceDepthExceeded": ("recursion", "instances nest at most 100 levels deep"),
    "ParseTreeTooDeep": ("too-deep", "name inner parts as nets of their own"),
}
"""Diagnostics that have a code of their own here; those among them that are mere warnings count as errors."""
_MESSAGES = {"unconnected-pin": "a pin of a gate is connected to nothing, or by name"}


@dataclass(frozen=True)
class Text:
    """The user's text, and how places of the parser become places in it."""

    file: str
    text: str
    manager: pyslang.SourceManager
    prefix: str

    @cached_property
    def _bytes(self) -> bytes:
        return self.text.encode()

    @cached_property
    def _lines(self) -> list[int]:
        return [0, *(m.end() for m in re.finditer(rb"\n", self._bytes))]

    def span(self, start: pyslang.SourceLocation, end: pyslang.SourceLocation | None = None) -> Span:
        """The span from `start` to `end`, without `end` that of the word at `start`; for macros, of their use."""
        first = self._offset(start)
        line = bisect_right(self._lines, first) - 1
        stop = self._lines[line + 1] - 1 if line + 1 < len(self._lines) else len(self._bytes)
        last = min(stop, self._offset(end) if end else self._word_end(first))
        column = len(self._bytes[self._lines[line] : first].decode(errors="replace")) + 1
        return Span(self.file, line + 1, column, max(1, len(self._bytes[first:last].decode(errors="replace"))))

    def of(self, node: ast.Expression | syntax.SyntaxNode) -> Span:
        """The span of an expression or of a piece of syntax."""
        return self.span(node.sourceRange.start, node.sourceRange.end)

    def words(self, e: ast.Expression) -> str:
        """The user's own words for an expression, shortened to one line."""
        area = e.sourceRange
        piece = self._bytes[self._offset(area.start) : self._offset(area.end)].decode(errors="replace")
        line = " ".join(piece.split())
        return line if len(line) <= 40 else line[:37] + "..."

    def _offset(self, place: pyslang.SourceLocation) -> int:
        offset = self.manager.getFullyExpandedLoc(place).offset - len(self.prefix)
        return max(0, min(offset, len(self._bytes)))

    def _word_end(self, first: int) -> int:
        word = re.compile(rb"\\?[\w$]+|\\\S+").match(self._bytes, first)
        return word.end() if word else first + 1


@dataclass(frozen=True)
class Design:
    """An elaborated design: its top instance, and the modules that stand for library cells."""

    text: Text
    compilation: ast.Compilation
    top: ast.InstanceSymbol
    cells: frozenset[str]
    modules: tuple[str, ...]

    def problems(self) -> list[Problem]:
        """What the elaborator says against the design."""
        return _problems(self.text, list(self.compilation.getAllDiagnostics()))


def elaborate(text: str, file: str, top: str | None, stubs: Mapping[str, str], legacy: bool) -> Design:
    """Parse `text` and elaborate the module `top`, by default the only one that no other one instantiates.

    `stubs` gives the empty Verilog module of each library cell, by name; a module of the user's goes before it.
    `legacy`: the keywords are those of IEEE 1364-2005. Raises `InputError`.
    """
    words = scan(text, file)
    prefix = _PREFIX if legacy else ""
    if len(text) > _FIRST_PIECE:
        _parse(text[: text.rfind("\n", 0, _FIRST_PIECE) + 1], file, prefix, PROBLEMS)
    source, bag, tree = _parse(text, file, prefix)
    modules = _modules(source, tree)
    _check_top(source, modules, top)
    used = [name for name in stubs if name in words and name not in modules]
    bag.compilationOptions = _options(top)
    compilation = ast.Compilation(bag)
    compilation.addSyntaxTree(tree)
    cells = source.manager.assignText("library cells", "\n".join(stubs[name] for name in used))
    compilation.addSyntaxTree(syntax.SyntaxTree.fromBuffer(cells, source.manager, bag))
    instance = _choose(source, compilation, modules)
    return Design(source, compilation, instance, frozenset(used), tuple(modules))


def _parse(text: str, file: str, prefix: str, tolerated: int = 0) -> tuple[Text, pyslang.Bag, syntax.SyntaxTree]:
    """The syntax tree of `text`; more than `tolerated` errors raise `InputError` with the first of them."""
    manager = pyslang.SourceManager()
    bag = pyslang.Bag()
    source = Text(file, text, manager, prefix)
    buffer = manager.assignText("netlist", prefix + text + "\n")
    tree = syntax.SyntaxTree.fromBuffer(buffer, manager, bag)
    errors = [d for d in tree.diagnostics if d.isError()]
    if len(errors) > tolerated:
        raise InputError(_problems(source, errors[:PROBLEMS], "syntax"))
    return source, bag, tree


def _options(top: str | None) -> ast.CompilationOptions:
    options = ast.CompilationOptions()
    options.flags = ast.CompilationFlags.IgnoreUnknownModules
    options.errorLimit = PROBLEMS
    options.topModules = {top} if top is not None else set()
    return options


def _modules(source: Text, tree: syntax.SyntaxTree) -> dict[str, Span]:
    """Each module of the text with its place; anything else that stands outside modules is a problem."""
    found: dict[str, Span] = {}
    problems = []
    for member in tree.root.members:  # type: ignore[attr-defined]
        if member.kind == syntax.SyntaxKind.ModuleDeclaration:
            name = member.header.name
            found.setdefault(name.valueText, source.span(name.location))
        elif member.kind not in (syntax.SyntaxKind.UdpDeclaration, syntax.SyntaxKind.EmptyMember):
            message = "something other than a module or a primitive stands outside the modules"
            help = "accepted: modules and combinational primitives"
            problems.append(Problem("construct", message, source.of(member), "found here", help=help))
        if len(problems) == PROBLEMS:
            break
    if problems:
        raise InputError(problems)
    return found


def _check_top(source: Text, modules: Collection[str], top: str | None) -> None:
    start = Span(source.file, 1, 1)
    if not modules:
        raise InputError(Problem("no-module", f"`{source.file}` holds no module", start))
    if top is not None and top not in modules:
        help = nearest(top, modules) or "modules: " + ", ".join(f"`{m}`" for m in list(modules)[:20])
        raise InputError(Problem("unknown-top", f"there is no module `{top}` in `{source.file}`", start, help=help))


def _choose(source: Text, compilation: ast.Compilation, modules: Mapping[str, Span]) -> ast.InstanceSymbol:
    tops: list[ast.InstanceSymbol] = [i for i in compilation.getRoot().topInstances if i.name in modules]
    if len(tops) == 1:
        return tops[0]
    if not tops:
        message = "every module is instantiated by another one, so none is the top"
        help = "say which one is meant with `top`"
        raise InputError(Problem("recursion", message, next(iter(modules.values())), "one of them", help=help))
    chosen = {instance.name for instance in tops}
    names = [name for name in modules if name in chosen]
    listed = ", ".join(f"`{name}`" for name in names[:10]) + (", ..." if len(names) > 10 else "")
    message = f"{len(names)} modules are instantiated by no other one: {listed}"
    notes = [f"`{n}` is defined at {modules[n].file}:{modules[n].line}:{modules[n].column}" for n in names[1:10]]
    help = "say which one is meant with `top`"
    raise InputError(Problem("several-tops", message, modules[names[0]], "one of them", tuple(notes), help))


def _problems(source: Text, found: Iterable[pyslang.Diagnostic], otherwise: str = "elaboration") -> list[Problem]:
    engine = pyslang.DiagnosticEngine(source.manager)
    problems = []
    for d in found:
        known = _CODES.get(str(d.code).removeprefix("DiagCode(").removesuffix(")"))
        if known or d.isError():
            code, help = known or (otherwise, "")
            message = _MESSAGES.get(code, re.sub(r"'([^']+)'", r"`\1`", engine.formatMessage(d)))
            problems.append(Problem(code, message, source.span(d.location), help=help))
    return problems
