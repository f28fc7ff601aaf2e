"""A report for the terminal: what was understood, then each verdict with what it rests on, then the count."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from settled.models.circuit import Circuit
from settled.verify.properties import kinds
from settled.verify.renderers import cause_text, power_up_text
from settled.verify.renderers.page import Page, columns, pad
from settled.verify.renderers.trace_text import tables
from settled.verify.result import Result

VERDICTS = ("proved", "refuted", "undecided")
MARGIN = " " * 4
_STYLE = {"proved": "good", "refuted": "bad", "undecided": "open"}

CAUTION = 'Each verdict rests on its environment, start states and delay model: see README.md, "Cautions".'


def opening(file: str, title: str, lines: Iterable[tuple[str, str]], page: Page) -> str:
    """The head of a file's report and the echo of what was understood of it, in two columns."""
    lines = list(lines)
    label = max(columns(what) for what, _ in lines) + 2
    text = [page.paint("strong", line) for line in page.wrap(f"{file}: {title}" if title else file)] + [""]
    for what, said in lines:
        text += page.wrap(said, f"  {pad(what, label)}")
    return "\n".join(text) + "\n"


def verdict(result: Result, circuit: Circuit, page: Page) -> str:
    """One property: verdict, name, claim, method and extent, remarks, runs."""
    word = page.paint(_STYLE[result.verdict], result.verdict)
    name = result.name if result.name == result.check else f"{result.name} ({result.check})"
    first, *rest = page.wrap(name, result.verdict.ljust(11), MARGIN)
    lines = [word + first[len(result.verdict) :], *rest]
    lines += page.wrap(("asked: " if result.verdict == "undecided" else "") + result.claim, MARGIN)
    lines += page.wrap(basis(result, circuit), MARGIN)
    for remark in remarks(result, circuit):
        lines += page.wrap(remark, MARGIN, MARGIN + "  ")
    if result.facts.get("causes"):
        lines += _causes(result, circuit, page)
    elif result.traces:
        lines += ["", *tables(result, circuit, page, MARGIN)]
    return "\n".join(lines) + "\n"


def _causes(result: Result, circuit: Circuit, page: Page) -> list[str]:
    """Each cause under its heading, with its runs."""
    lines = []
    for heading, group in cause_text.groups(result):
        lines += ["", *(page.paint("strong", line) for line in page.wrap(heading, MARGIN))]
        for said in [*([group.claim] if group.claim != result.claim else []), *cause_text.faults(group)]:
            lines += page.wrap(said, MARGIN, MARGIN + "  ")
        lines += ["", *tables(group, circuit, page, MARGIN)]
    return lines


def basis(result: Result, circuit: Circuit) -> str:
    """How it was decided, over what, and under which delay model."""
    model = f"under {circuit.delay} delays{', one node switching at a time' if circuit.winners == 'one' else ''}"
    tried = result.verdict == "undecided"
    how = f"{'tried' if tried else 'by'} {result.method}" if result.method != "none" else "not tried"
    counts = [counted(number, what.replace("_", " ")) for what, number in result.ranged.items()]
    over = f" over {', '.join(counts)}" if counts else ""
    return f"{model}, in {result.seconds:.3f} s, {how}{over}"


def counted(number: int, plural: str) -> str:
    """`12,000 input changes`, `1 input change`."""
    return f"{number:,} {plural.removesuffix('s') if number == 1 else plural}"


def remarks(result: Result, circuit: Circuit) -> list[str]:
    """What more there is to say: the reason, an empty range, facts about the failure, a certificate."""
    facts, said = result.facts, []
    if result.reason:
        said.append(f"reason: {result.reason}")
    if result.vacuous:
        said.append(f"vacuous: nothing to range over: {kinds()[result.check].vacuous}")
    if "hazard" in facts:
        said.append(_hazard(facts["hazard"]["class"], facts["hazard"]["kind"]))
    said += cause_text.faults(result)
    if facts.get("causes_reason"):
        said.append(f"there may be further causes: {facts['causes_reason']}")
    if "some_run_settles" in facts:
        some = facts["some_run_settles"]
        said.append("possible under some delays: another ordering settles" if some else "persists under every ordering")
    if "needs_simultaneous" in facts and circuit.winners == "any":
        alone = "also when nodes switch one at a time"
        together = "only when two nodes switch at exactly the same moment"
        said.append(together if facts["needs_simultaneous"] else alone)
    said += power_up_text.remarks(facts)
    if result.certificate:
        entries = result.certificate.items()
        more = ", ".join(counted(n, what.replace("_", " ")) for what, n in entries if isinstance(n, int))
        said.append(f"certificate: {result.certificate['kind']}{f' ({more})' if more else ''}")
    return said


def _hazard(sort: str | None, kind: str | None) -> str:
    named = f"{sort} hazard" if sort else "hazard without a class, as the run shown never settles"
    why = {
        "logic": "a logic hazard, made by the gates and not by the function",
        "function": "a function hazard, which no other gates for the same function remove",
    }
    return f"{named}: {why.get(kind or '', 'function or logic is not told apart in a circuit with feedback')}"


def closing(results: Sequence[Result], left_out: Sequence[str], page: Page) -> str:
    """The count of verdicts, the files without any, and what the verdicts rest on."""
    vacuous = sum(r.vacuous for r in results)
    count = {word: sum(r.verdict == word for r in results) for word in VERDICTS}
    found = ", ".join(f"{count[word]} {word}" for word in VERDICTS)
    total = "1 property" if len(results) == 1 else f"{len(results)} properties"
    lines = page.wrap(f"{total}: {found}, {vacuous} vacuous")
    lines += page.wrap(f"not checked: {', '.join(left_out)}") if left_out else []
    return "\n".join([*lines, *page.wrap(CAUTION)])
