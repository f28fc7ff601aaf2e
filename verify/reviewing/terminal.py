"""Walking through the runs of a result document in a terminal, by keys alone."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

from prompt_toolkit.application import Application
from prompt_toolkit.formatted_text import ANSI
from prompt_toolkit.key_binding import KeyBindings, KeyPressEvent
from prompt_toolkit.layout import Layout, Window
from prompt_toolkit.layout.controls import FormattedTextControl

from settled.verify.renderers.page import Page
from settled.verify.reviewing.document import Reviewed
from settled.verify.reviewing.reasons import Reasons
from settled.verify.reviewing.screen import screen
from settled.verify.reviewing.walk import Failure, Walk

MOVES: dict[tuple[str, ...], Callable[[Walk], None]] = {
    ("right", "down", "space", "enter", "j", "l"): lambda walk: walk.move(1),
    ("left", "up", "backspace", "k", "h"): lambda walk: walk.move(-1),
    ("home", "g"): lambda walk: walk.to(0),
    ("end", "G"): lambda walk: walk.to(-1),
    ("p",): Walk.part,
    ("r", "tab"): Walk.other,
    ("n", "pagedown"): lambda walk: walk.next(1),
    ("b", "pageup"): lambda walk: walk.next(-1),
}


def walk_through(files: Sequence[Reviewed], failures: list[Failure], page: Page) -> None:
    """Show one step after the other, as the keys say, until the reviewer leaves."""
    walk = Walk(failures)
    reasons = {id(file): Reasons(file) for file in files}

    def shown() -> ANSI:
        size = application.output.get_size()
        lines = screen(walk, reasons[id(walk.here.file)], replace(page, width=size.columns), size.rows)
        return ANSI("\n".join(lines))

    window = Window(FormattedTextControl(shown, show_cursor=False), always_hide_cursor=True)
    application: Application[None] = Application(Layout(window), key_bindings=_keys(walk), full_screen=True)
    application.run()


def _keys(walk: Walk) -> KeyBindings:
    bindings = KeyBindings()
    for names, move in MOVES.items():
        for name in names:
            bindings.add(name)(_handler(walk, move))
    for name in ("q", "Q", "c-c", "c-d"):
        bindings.add(name)(lambda event: event.app.exit())
    bindings.add("c-l")(lambda event: event.app.renderer.clear())
    return bindings


def _handler(walk: Walk, move: Callable[[Walk], None]) -> Callable[[KeyPressEvent], None]:
    def handle(_: KeyPressEvent) -> None:
        move(walk)

    return handle
