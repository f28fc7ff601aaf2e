"""Timing diagrams of runs: a lane a signal, a column a step, hatched where a node is excited.

A step number is circled when its total state is stable. Long runs are drawn in several pieces, one below the other.
"""

from __future__ import annotations

from dataclasses import dataclass
from xml.etree.ElementTree import Element

from settled.verify.renderers.svg import add, canvas, number, to_text
from settled.verify.result import Trace

COLUMN, LANE, WAVE = 38, 30, 15
HEAD, CAPTION, TAIL = 34, 22, 8
LETTER = 8.2
"""Width of a letter of a label, in pixels."""

BESIDE, MOST_LABEL = 12, 320
"""Labels of at most so many letters stand beside their lanes, longer ones above, up to so many pixels."""


@dataclass(frozen=True)
class Lanes:
    """Signals under a caption, such as the inputs."""

    caption: str
    signals: tuple[str, ...]


@dataclass(frozen=True)
class Stretch:
    """The part of a run that one diagram shows.

    * `first`, `last`: the steps shown, `last` not included.
    * `marks`: where the failure shows, as steps and signals; they are ringed.
    * `runs`: the numbers of the runs that pass here, by which the step controls find the columns.
    """

    trace: Trace
    first: int
    last: int
    groups: tuple[Lanes, ...]
    inputs: frozenset[str]
    runs: str
    marks: frozenset[tuple[int, str]] = frozenset()

    @property
    def signals(self) -> list[str]:
        """All signals, from the top."""
        return [s for group in self.groups for s in group.signals]


def pieces(stretch: Stretch, most: int) -> list[str]:
    """The diagram as drawings of at most `most` steps each."""
    size = stretch.last - stretch.first
    step = -(-size // -(-size // most))
    bounds = range(stretch.first, stretch.last, step)
    return [to_text(_Piece(stretch, begin, min(begin + step, stretch.last)).draw()) for begin in bounds]


class _Piece:
    """One drawing: the steps from `begin` to `end`."""

    def __init__(self, stretch: Stretch, begin: int, end: int) -> None:
        self.stretch, self.begin, self.end = stretch, begin, end
        longest = max(map(len, stretch.signals), default=0)
        self.above = longest > BESIDE
        self.left = 14.0 if self.above else max(52.0, longest * LETTER + 14)
        self.lane = LANE + (16 if self.above else 0)
        least = min(longest * LETTER + 8, MOST_LABEL) if self.above else 0
        self.width = max(least, self.left + (end - begin) * COLUMN + 10)
        self.height = HEAD + len(stretch.groups) * CAPTION + len(stretch.signals) * self.lane + TAIL

    def draw(self) -> Element:
        what = f"Timing diagram of steps {self.begin} to {self.end - 1}; the table of steps says the same in words"
        drawing = canvas(self.width, self.height, what)
        for i in range(self.begin, self.end):
            self._column(drawing, i)
        self._loop(drawing)
        y = float(HEAD)
        for group in self.stretch.groups:
            add(drawing, "line", "rule", x1=0, x2=self.width, y1=y + 3, y2=y + 3)
            add(drawing, "text", "caption", group.caption, x=2, y=y + 16)
            y += CAPTION
            for signal in group.signals:
                self._signal(drawing, signal, y)
                y += self.lane
        return drawing

    def x(self, step: int) -> float:
        """The left edge of a column."""
        return self.left + (step - self.begin) * COLUMN

    def _column(self, drawing: Element, i: int) -> None:
        x, step = self.x(i), self.stretch.trace.steps[i]
        where = {"data-step": str(i), "data-runs": self.stretch.runs}
        add(drawing, "rect", "column", x=x, y=2, width=COLUMN, height=self.height - 4, rx=3, **where)
        if i > 0:
            arrival = any(s in self.stretch.inputs for s in step.switched)
            add(drawing, "line", "arrival" if arrival else "grid", x1=x, x2=x, y1=HEAD, y2=self.height - TAIL)
        middle = x + COLUMN / 2
        if step.stable:
            add(drawing, "circle", "stable", cx=middle, cy=15, r=10)
        add(drawing, "text", "number", str(i), x=middle, y=19)

    def _loop(self, drawing: Element) -> None:
        """A bracket under the numbers of the steps that are gone round."""
        loop = self.stretch.trace.loop
        if loop is None or loop >= self.end:
            return
        left, right = self.x(max(loop, self.begin)) + COLUMN / 2, self.x(self.end) - 4
        opens = f"M{number(left - 3)} 30l3-3l3 3m-3-3v5" if loop >= self.begin else f"M{number(left)} 32"
        add(drawing, "path", "loop", d=f"{opens}H{number(right)}{'v-5' if self.end == self.stretch.last else ''}")

    def _signal(self, drawing: Element, signal: str, y: float) -> None:
        if self.above:
            add(drawing, "text", "name", _middle(signal, int((self.width - 8) / LETTER)), x=4, y=y + 12)
            y += 16
        else:
            add(drawing, "text", "name end", signal, x=self.left - 10, y=y + 20)
        steps = self.stretch.trace.steps
        values = [steps[i].state[signal] for i in range(self.begin, self.end)]
        before = steps[self.begin - 1].state[signal] if self.begin else values[0]
        low, high = y + 7 + WAVE, y + 7
        self._excited(drawing, signal, y + 7)
        path = f"M{number(self.left - (7 if self.begin else 0))} {number(high if before else low)}"
        for i, value in enumerate(values, self.begin):
            path += f"H{number(self.x(i))}V{number(high if value else low)}"
        kind = "wave input" if signal in self.stretch.inputs else "wave"
        add(drawing, "path", kind, d=f"{path}H{number(self.x(self.end))}")
        for i in range(self.begin, self.end):
            if (i, signal) in self.stretch.marks:
                moved = i > 0 and steps[i - 1].state[signal] != steps[i].state[signal]
                middle = self.x(i) if moved else self.x(i) + COLUMN / 2
                add(drawing, "circle", "mark", cx=middle, cy=y + 7 + WAVE / 2, r=12)

    def _excited(self, drawing: Element, signal: str, top: float) -> None:
        """A hatched stretch for every spell of excitation."""
        begun: int | None = None
        for i in range(self.begin, self.end + 1):
            step = self.stretch.trace.steps[i] if i < self.end else None
            if begun is not None and (step is None or signal not in step.excited or signal in step.switched):
                width = (i - begun) * COLUMN
                add(drawing, "rect", "excited", x=self.x(begun), y=top, width=width, height=WAVE)
                begun = None
            if begun is None and step is not None and signal in step.excited:
                begun = i


def _middle(name: str, most: int) -> str:
    """A name with its middle left out when it is longer than `most` letters."""
    keep = max(4, most - 1)
    return name if len(name) <= most else f"{name[: keep // 2]}\N{HORIZONTAL ELLIPSIS}{name[-(keep - keep // 2) :]}"
