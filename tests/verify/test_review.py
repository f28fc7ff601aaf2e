"""`settled review`: result documents read back, walked through in a terminal and printed in full into a pipe."""

from __future__ import annotations

import json
import os
import re
import select
import struct
import subprocess
import sys
import termios
import time
from collections.abc import Callable
from fcntl import ioctl
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner

from settled.verify.cli import app
from settled.verify.renderers.page import Page, columns
from settled.verify.reviewing.document import Reviewed, read_document
from settled.verify.reviewing.reasons import Reasons
from settled.verify.reviewing.screen import screen
from settled.verify.reviewing.walk import Walk, failures

LATCH = """
title = "Level latch"
[circuit]
inputs = ["d", "g"]
outputs = ["q"]
[circuit.excitation]
n = "~g"
take = "d & g"
keep = "q & n"
q = "take | keep"
[[property]]
check = "settles"
[[property]]
name = "holds what it took"
check = "race-free"
[[property]]
check = "hazard-free"
[[property]]
check = "stable-states"
"""

SGR = re.compile(r"\x1b\[[0-9;]*m")


@pytest.fixture(scope="module")
def result(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A result document of the level latch, every cause in it, beside the file that it speaks of."""
    folder = tmp_path_factory.mktemp("review")
    source = folder / "latch.toml"
    source.write_text(LATCH)
    shown = CliRunner().invoke(app, ["check", "--all", "--json", str(source)])
    (folder / "result.json").write_text(shown.stdout)
    return folder / "result.json"


def review(*arguments: object) -> Any:
    return CliRunner().invoke(app, ["review", *map(str, arguments)])


# ---- in full ---------------------------------------------------------------------------------------------------------


def test_a_pipe_gets_every_verdict_as_it_was_first_shown(result: Path) -> None:
    first = CliRunner().invoke(app, ["check", "--all", str(result.with_name("latch.toml"))]).stdout
    again = review(result)
    assert again.exit_code == 0 and "\x1b" not in again.stdout
    seconds = re.compile(r"in [0-9.]+ s,\s")
    one, two = ("".join(seconds.sub("", shown).split()) for shown in (first, again.stdout))
    assert one == two and "everystabletotalstate" in one
    assert review(result.parent).stdout == again.stdout


def test_a_document_without_the_echo_is_shown_with_the_names_in_it(result: Path, tmp_path: Path) -> None:
    data = json.loads(result.read_text())
    del data["files"][0]["understood"]
    (tmp_path / "other.json").write_text(json.dumps(data))
    shown = review(tmp_path / "other.json")
    assert shown.exit_code == 0 and "  delay model  feedback\n" in shown.stdout


def test_only_some_properties(result: Path) -> None:
    shown = review(result, "--only", "holds what it took")
    assert shown.exit_code == 0 and "hazard-free" not in shown.stdout
    assert shown.stdout.count("refuted    holds what it took (race-free)") == 1
    wrong = review(result, "--only", "holds what it tok")
    assert wrong.exit_code == 2 and "did you mean `holds what it took`?" in wrong.stderr


def results(data: dict[str, Any]) -> list[dict[str, Any]]:
    return data["files"][0]["results"]


def second_state(data: dict[str, Any]) -> dict[str, int]:
    return results(data)[0]["traces"][0]["steps"][1]["state"]


DAMAGE: dict[str, tuple[Callable[[dict[str, Any]], object], str, str]] = {
    "older": (lambda d: d.update(format=0), "result-format", "an older format, 0; this version reads format 1"),
    "newer": (lambda d: d.update(format=2), "result-format", "a newer format, 2; this version reads format 1"),
    "no format": (lambda d: d.pop("format"), "no-result", "is no result document"),
    "a word as format": (lambda d: d.update(format="1"), "no-result", "is no result document"),
    "no verdicts": (lambda d: (d.pop("files"), d.update(errors=[{"message": "no"}])), "no-verdicts", "no verdicts"),
    "a key missing": (lambda d: results(d)[1].pop("claim"), "damaged-result", "results.1.claim"),
    "a value": (lambda d: second_state(d).update(q=2), "damaged-result", "steps.1.state.q"),
    "a signal missing": (lambda d: second_state(d).pop("n"), "damaged-result", "do not speak of the same signals"),
    "a loop": (lambda d: results(d)[0]["traces"][0].update(loop=99), "damaged-result", "begins at no step"),
    "a cause": (lambda d: results(d)[1]["facts"]["causes"][0].update(traces=[7]), "damaged-result", "a trace that is"),
    "a check": (lambda d: results(d)[0].update(check="smooth"), "damaged-result", "there is no check `smooth`"),
}


@pytest.mark.parametrize("name", DAMAGE)
def test_a_document_that_cannot_be_used_says_why(name: str, result: Path, tmp_path: Path) -> None:
    change, code, said = DAMAGE[name]
    data = json.loads(result.read_text())
    change(data)
    (tmp_path / "other.json").write_text(json.dumps(data))
    shown = review(tmp_path / "other.json")
    assert (shown.exit_code, shown.stdout) == (2, "")
    assert shown.stderr.startswith(f"error[{code}]") and said in shown.stderr and "Traceback" not in shown.stderr


def test_facts_that_do_not_fit_are_damage_too(result: Path, tmp_path: Path) -> None:
    data = json.loads(result.read_text())
    for cause in data["files"][0]["results"][2]["facts"]["causes"]:
        del cause["hazard"]
    (tmp_path / "other.json").write_text(json.dumps(data))
    shown = review(tmp_path / "other.json")
    assert shown.exit_code == 2 and shown.stderr.startswith("error[damaged-result]")


@pytest.mark.parametrize("text", ["", "{", "[1]", "null", "[" * 100_000, '{"settled": "0"}'])
def test_what_is_no_result_document(text: str, tmp_path: Path) -> None:
    (tmp_path / "other.json").write_text(text)
    shown = review(tmp_path / "other.json")
    assert shown.exit_code == 2 and shown.stderr.startswith("error[no-result]")


def test_a_file_that_is_not_there(tmp_path: Path) -> None:
    shown = review(tmp_path / "none.json")
    assert shown.exit_code == 2 and shown.stderr.startswith("error[file-not-found]")


# ---- the walk --------------------------------------------------------------------------------------------------------


def walk_of(result: Path, only: str) -> Walk:
    return Walk(failures(read_document(str(result), [only])))


def test_forward_and_back_and_round_a_loop(result: Path) -> None:
    walk = walk_of(result, "settles")
    last, loop = len(walk.trace.steps) - 1, walk.trace.loop
    assert loop is not None
    walk.move(-1)
    assert walk.step == 0
    walk.to(-1)
    assert walk.step == last
    walk.move(1)
    assert (walk.step, walk.said) == (loop, f"back to step {loop}: this goes round for ever")


def test_to_where_the_runs_part_and_from_one_to_the_other(result: Path) -> None:
    walk = walk_of(result, "holds what it took")
    walk.part()
    assert walk.step == walk.parting == 1
    walk.other()
    assert (walk.run, walk.step) == (1, 1)
    walk.to(-1)
    walk.other()
    assert (walk.run, walk.step) == (0, 2)
    alone = walk_of(result, "settles")
    alone.part()
    assert (alone.step, alone.said) == (0, "there is one run only")
    alone.other()
    assert (alone.run, alone.said) == (0, "there is one run only")


def test_from_failure_to_failure(result: Path) -> None:
    walk = Walk(failures(read_document(str(result))))
    assert [failure.result.check for failure in walk.failures] == ["settles", "race-free", "hazard-free", "hazard-free"]
    for _ in range(5):
        walk.next(1)
    assert (walk.failure, walk.said) == (3, "there is no further failure")
    assert "(2 of 2), explains 1 input change" in walk.here.heading
    for _ in range(5):
        walk.next(-1)
    assert (walk.failure, walk.said) == (0, "this is the first failure")


@pytest.mark.parametrize(("width", "height"), [(80, 24), (40, 14), (200, 60)])
def test_the_screen_fits_and_shows_the_present_step(result: Path, width: int, height: int) -> None:
    files = read_document(str(result))
    walk, reasons = Walk(failures(files)), Reasons(files[0])
    for number in range(len(walk.failures)):
        walk.failure, walk.run, walk.step = number, 0, 0
        for step in range(len(walk.trace.steps)):
            walk.to(step)
            for color in (False, True):
                lines = [SGR.sub("", line) for line in screen(walk, reasons, Page(width, color), height)]
                assert len(lines) == height and max(map(columns, lines)) <= width
                assert sum(line.startswith(f">{step:>5}") for line in lines) == 1
                assert lines[-1].endswith("q: quit")


def test_names_from_a_document_cannot_steer_the_terminal(result: Path, tmp_path: Path) -> None:
    text = result.read_text().replace("holds what it took", "\\u001b[2Jx").replace("Level latch", "\\u0007y")
    (tmp_path / "other.json").write_text(text)
    shown = review(tmp_path / "other.json").stdout
    assert "\x1b" not in shown and "\x07" not in shown and "\\u{1b}[2Jx" in shown
    files = read_document(str(tmp_path / "other.json"))
    walk = Walk(failures(files), failure=1)
    assert "\x1b" not in "".join(screen(walk, Reasons(files[0]), Page(80), 24))


# ---- reasons ---------------------------------------------------------------------------------------------------------


def reasons_in(file: Reviewed, step: int) -> dict[str, str]:
    walk = Walk(failures([file]), failure=2)
    return dict(Reasons(file).of(walk.trace, step))


def test_the_reason_names_the_gate_and_which_of_its_inputs_excited_it(result: Path) -> None:
    (file,) = read_document(str(result))
    assert reasons_in(file, 1) == {
        "n+": "due since step 1, by g-: n = ~g, g=0",
        "take-": "due since step 1, by g-: take = d & g, d=1 g=0",
    }
    assert reasons_in(file, 2)["keep+"] == "due since step 2, by n+: keep = q & n, q=1 n=1"


@pytest.mark.parametrize("what", ["changed", "gone"])
def test_without_the_file_the_document_says_what_it_knows(what: str, result: Path, tmp_path: Path) -> None:
    source = tmp_path / "latch.toml"
    text = result.read_text().replace(str(result.with_name("latch.toml")), str(source))
    (tmp_path / "result.json").write_text(text)
    if what == "changed":
        source.write_text(LATCH + "\n")
    (file,) = read_document(str(tmp_path / "result.json"))
    reasons = Reasons(file)
    walk = Walk(failures([file]), failure=2, step=1)
    assert dict(reasons.of(walk.trace, 1))["n+"] == "due since step 1, after g-"
    said = {"changed": f"{source} has changed since", "gone": f"{source} cannot be read any more"}[what]
    assert reasons.missing == said
    assert "no equations are shown" in " ".join(screen(walk, reasons, Page(100), 40))


def test_nodes_that_play_no_part_are_shown_on_request(tmp_path: Path) -> None:
    asked = ["check", "sample_flip_flop_wires", "--only", "race-free"]
    (tmp_path / "result.json").write_text(CliRunner().invoke(app, [*asked, "--json"]).stdout)
    for command in (asked, ["review", str(tmp_path)]):
        folded, whole = (CliRunner().invoke(app, [*command, *more]).stdout for more in ([], ["--all-signals"]))
        assert "12 more nodes keep their value" in folded and "keep their value" not in whole
        headers = re.findall(r"^ *step .*$", whole, re.MULTILINE), re.findall(r"^ *step .*$", folded, re.MULTILINE)
        assert len(" ".join(headers[0]).split()) > len(" ".join(headers[1]).split()) + 8


# ---- in a terminal ---------------------------------------------------------------------------------------------------


class Terminal:
    """The command at the other end of a pseudo-terminal."""

    def __init__(self, *arguments: object, term: str = "xterm", size: tuple[int, int] = (30, 90)) -> None:
        self.end, there = os.openpty()
        ioctl(there, termios.TIOCSWINSZ, struct.pack("HHHH", *size, 0, 0))
        command = [sys.executable, "-c", "from settled.verify.cli import main; main()", "review", *map(str, arguments)]
        environment = {**os.environ, "TERM": term, "NO_COLOR": ""}
        self.process = subprocess.Popen(command, stdin=there, stdout=there, stderr=there, env=environment)
        os.close(there)
        self.shown = ""

    def wait_for(self, text: str) -> str:
        """All that has come since the last key, once `text` is in it (without what only moves and paints)."""
        limit = time.monotonic() + 60
        while text not in (plain := re.sub(r"\x1b\[[0-9;?]*[A-Za-z]", "", self.shown)):
            assert time.monotonic() < limit, plain
            if select.select([self.end], [], [], 0.2)[0]:
                try:
                    self.shown += os.read(self.end, 65536).decode(errors="replace")
                except OSError:
                    assert text in self.shown, plain
        return plain

    def press(self, keys: str) -> None:
        """Keys, and one that has everything painted anew."""
        self.shown = ""
        os.write(self.end, (keys + "\x0c").encode())

    def left(self) -> int:
        """The exit status, once the command has ended."""
        status = self.process.wait(60)
        os.close(self.end)
        return status


def test_a_walk_by_keys_in_a_terminal(result: Path) -> None:
    terminal = Terminal(result, "--only", "holds what it took")
    terminal.wait_for("step 0 of 3")
    terminal.press("\x1b[C")
    assert "n = ~g, g=0" in terminal.wait_for("step 1 of 3")
    terminal.press("r\x1b[F")
    terminal.wait_for("run 2 of 2, another ordering: step 3 of 3")
    terminal.press("p")
    terminal.wait_for("run 2 of 2, another ordering: step 1 of 3")
    terminal.press("n")
    terminal.wait_for("there is no further failure")
    terminal.press("q")
    assert terminal.left() == 0


@pytest.mark.parametrize("key", ["\x03", "\x04", "Q"])
def test_the_ways_out(key: str, result: Path) -> None:
    terminal = Terminal(result)
    terminal.wait_for("step 0 of")
    terminal.press(key)
    assert terminal.left() == 0


def test_a_terminal_that_can_do_nothing_gets_it_in_full(result: Path) -> None:
    terminal = Terminal(result, term="dumb")
    assert "4 properties: 1 proved, 3 refuted" in terminal.wait_for('"Cautions".')
    assert terminal.left() == 0
