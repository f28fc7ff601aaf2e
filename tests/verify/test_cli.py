"""The command line: which files are meant, what is printed where, and the exit status."""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from typer.testing import CliRunner, Result

from settled.models.specification import Property
from settled.verify import result, session
from settled.verify.cli import app
from settled.verify.replay import ReplayFailed
from settled.verify.session import Session

LATCH = """
title = "Wake latch"
[circuit]
inputs = ["s", "r"]
outputs = ["q"]
[circuit.excitation]
q = "s | ~r & q"
[[property]]
check = "settles"
[[property]]
check = "race-free"
"""
RING = """
[circuit]
outputs = ["z"]
[circuit.excitation]
z = "~z"
[[property]]
check = "stable-states"
"""
UNMOVED = LATCH + "[environment.inputs]\ns = { rises = '0', falls = '0' }\nr = { rises = '0', falls = '0' }\n"
ESSENTIAL = LATCH.replace('"settles"', '"essential-hazard-free"').replace('"race-free"', '"stable-states"')
BAD = LATCH.replace("~r & q", "~rr & q").replace('"settles"', '"settle"')


@pytest.fixture
def files(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    for name, text in {"latch": LATCH, "ring": RING, "unmoved": UNMOVED, "essential": ESSENTIAL, "bad": BAD}.items():
        Path(f"{name}.toml").write_text(text)
    return tmp_path


def run(*arguments: str, stdin: str = "") -> Result:
    return CliRunner().invoke(app, list(arguments), input=stdin, catch_exceptions=False)


@pytest.mark.parametrize(
    "arguments, status",
    [
        (["latch.toml"], 0),
        (["ring.toml"], 1),
        (["latch.toml", "ring.toml"], 1),
        (["unmoved.toml"], 3),
        (["unmoved.toml", "--allow-vacuous"], 0),
        (["unmoved.toml", "ring.toml"], 1),
        (["essential.toml", "--states", "1"], 3),
        (["bad.toml"], 2),
        (["bad.toml", "ring.toml"], 2),
        (["missing.toml"], 2),
        (["missing"], 2),
        (["."], 2),
        (["latch.toml", "--only", "hazard-free"], 2),
        (["latch.toml", "--seconds", "0"], 2),
        (["latch.toml", "--seconds", "nan"], 2),
        (["latch.toml", "--states", "0"], 2),
        (["latch.toml", "--unknown"], 2),
        ([], 2),
    ],
)
def test_the_exit_status(files: Path, arguments: list[str], status: int) -> None:
    assert run("check", *arguments).exit_code == status


def test_an_error_in_one_file_does_not_stop_the_others(files: Path) -> None:
    shown = run("check", "bad.toml", "missing.toml", "latch.toml")
    assert "proved     settles" in shown.stdout
    assert "not checked: bad.toml, missing.toml" in shown.stdout
    assert shown.stderr.count("error[") == 3
    assert "--> bad.toml:7:11" in shown.stderr and '7 | q = "s | ~rr & q"' in shown.stderr


def test_the_document_alone_stands_on_standard_output(files: Path) -> None:
    shown = run("check", "--json", "ring.toml", "latch.toml")
    document = json.loads(shown.stdout)
    assert [f["file"] for f in document["files"]] == ["ring.toml", "latch.toml"]
    assert [r["verdict"] for f in document["files"] for r in f["results"]] == ["refuted", "proved", "proved"]
    assert shown.stderr == "" and "errors" not in document


def test_input_errors_in_the_document(files: Path) -> None:
    shown = run("check", "--json", "bad.toml")
    document = json.loads(shown.stdout)
    assert set(document) == {"settled", "format", "errors"} and shown.stderr == ""
    assert document["errors"][0] == {
        "file": "bad.toml", "line": 7, "column": 11, "code": "unknown-name", "message": "unknown name `rr`",
        "help": "did you mean `r`?",
    }  # fmt: skip
    mixed = json.loads(run("check", "--json", "bad.toml", "latch.toml").stdout)
    assert len(mixed["errors"]) == 2 and [f["file"] for f in mixed["files"]] == ["latch.toml"]


def test_a_property_file_from_standard_input(files: Path) -> None:
    assert "-: Wake latch" in run("check", "-", stdin=LATCH).stdout
    refused = run("check", "-", stdin=BAD)
    assert refused.exit_code == 2 and '7 | q = "s | ~rr & q"' in refused.stderr


@pytest.mark.parametrize("name", ["wake_latch", "wake_latch.toml"])
def test_a_gallery_file_by_name(files: Path, name: str) -> None:
    shown = run("check", name, "--only", "settles")
    assert shown.exit_code == 0 and "wake_latch.toml" in shown.stdout


def test_a_file_here_comes_before_the_gallery(files: Path) -> None:
    Path("wake_latch.toml").write_text(RING)
    assert run("check", "wake_latch.toml").exit_code == 1


def test_a_directory_here_does_not_hide_the_gallery(files: Path) -> None:
    for _ in range(2):
        assert run("check", "level_latch_cured", "--out", "level_latch_cured", "--only", "settles").exit_code == 0
    (files / "other").mkdir()
    assert "`other` is a directory, not a file" in run("check", "other").stderr


def test_an_unknown_name_gets_the_nearest_one(files: Path) -> None:
    assert "did you mean `wake_latch`?" in run("check", "wake_lach").stderr


def test_only_the_named_properties(files: Path) -> None:
    results = json.loads(run("check", "--json", "latch.toml", "--only", "race-free").stdout)["files"][0]["results"]
    assert [r["name"] for r in results] == ["race-free"]


def test_out_gets_the_document(files: Path) -> None:
    shown = run("check", "ring.toml", "--json", "--out", "deep/er")
    assert (files / "deep/er/result.json").read_text() == shown.stdout


def test_bad_input_writes_nothing(files: Path) -> None:
    assert run("check", "bad.toml", "--out", "there").exit_code == 2
    assert not Path("there").exists()


def test_a_place_that_cannot_be_written_to_is_refused_before_the_work(files: Path) -> None:
    refused = run("check", "latch.toml", "--out", "latch.toml/there")
    assert refused.exit_code == 2 and refused.stdout == ""


def test_every_verdict_is_printed_as_soon_as_there_is_one(
    files: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    shown: list[str] = []

    def decide(self: Session, prop: Property) -> result.Result:
        shown.append(capsys.readouterr().out)
        return original(self, prop)

    original = Session.decide
    monkeypatch.setattr(Session, "decide", decide)
    with pytest.raises(SystemExit):
        app(["check", "latch.toml"])
    assert shown[0].startswith("latch.toml: Wake latch") and shown[1].startswith("proved     settles")


def failing(error: BaseException) -> Callable[[Session], Iterator[result.Result]]:
    """A session's `results` that comes to the second property of `latch.toml` and no further."""

    def results(self: Session) -> Iterator[result.Result]:
        for prop in self.properties:
            if prop.name == "race-free":
                raise error
            yield self.decide(prop)

    return results


def test_an_internal_error_is_one_plain_message_and_no_verdict(files: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(Session, "results", failing(ReplayFailed("race-free: no lawful move")))
    shown = run("check", "latch.toml", "ring.toml")
    assert shown.exit_code == 70
    assert shown.stderr.splitlines() == [
        "internal error at latch.toml: ReplayFailed: race-free: no lawful move",
        "This is a fault in settled and no verdict.",
    ]
    assert "3 properties: 1 proved, 1 refuted, 1 undecided, 0 vacuous" in shown.stdout


def test_any_other_exception_is_an_internal_error_too(files: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def load(*_: object) -> None:
        raise RecursionError

    monkeypatch.setattr(session, "load", load)
    for command in ("check", "table"):
        shown = run(command, "latch.toml")
        assert shown.exit_code == 70 and "Traceback" not in shown.stderr
        assert shown.stderr.startswith("internal error at latch.toml: RecursionError\n")


def test_an_interruption_keeps_what_was_decided(files: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(Session, "results", failing(KeyboardInterrupt()))
    shown = run("check", "latch.toml", "ring.toml")
    assert shown.exit_code == 130
    assert "proved     settles" in shown.stdout and "undecided  race-free" in shown.stdout
    assert "reason: interrupted" in shown.stdout and "not checked: ring.toml" in shown.stdout
    results = json.loads(run("check", "--json", "latch.toml").stdout)["files"][0]["results"]
    assert [(r["verdict"], r["reason"]) for r in results] == [("proved", None), ("undecided", "interrupted")]


# ---- the process -------------------------------------------------------------------------------------------------

SETTLED = [sys.executable, "-c", "from settled.verify.cli import main; main()"]


def test_the_version() -> None:
    assert run("--version").stdout == f"settled {result.version('settled')}\n"


def test_help_loads_nothing_heavy() -> None:
    heavy = "{'z3', 'pysat', 'pyslang', 'numpy', 'networkx', 'sympy', 'lark', 'tree_sitter', 'rich'}"
    code = f"import sys, settled.verify.cli as c\ntry: c.app(['--help'])\nfinally: print({heavy} & set(sys.modules))"
    shown = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert shown.stdout.endswith("set()\n") and "check" in shown.stdout


def test_a_reader_that_goes_away_is_no_news(files: Path) -> None:
    with subprocess.Popen(
        [*SETTLED, "check", "latch.toml"], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    ) as process:
        assert process.stdout is not None and process.stderr is not None
        process.stdout.close()
        assert process.stderr.read() == ""


def test_what_an_encoding_lacks_is_spelt_out(files: Path) -> None:
    text = LATCH.replace("Wake latch", "Flußpegel")
    shown = subprocess.run(
        [*SETTLED, "check", "-"], input=text.encode(), capture_output=True, env={"PYTHONIOENCODING": "ascii"}
    )
    assert shown.returncode == 0 and b"-: Flu\\xdfpegel\n" in shown.stdout
