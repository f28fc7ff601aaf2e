"""An environment that is a circuit, joined to the one in question."""

from __future__ import annotations

import json
import tomllib
from importlib.resources import files
from pathlib import Path

import pytest
from handshakes import pipeline
from jsonschema import Draft202012Validator

from settled.encodings.delays import Placement, place
from settled.encodings.packed import Packed
from settled.models.joining import join
from settled.models.logic import to_text, var
from settled.models.netlist import Gate, Netlist
from settled.models.problems import InputError
from settled.models.property_files.reader import read
from settled.verify import check
from settled.verify.explicit.graph import Graph
from settled.verify.limits import Limits
from settled.verify.properties import shapes
from settled.verify.session import placed

SCHEMA = json.loads(files("settled.models.property_files").joinpath("property-file.schema.json").read_text())
STAGES = """
[circuit]
inputs = ["req", "taken"]
[circuit.excitation]
c1 = "req & ~c2 | c1 & (req | ~c2)"
c2 = "c1 & ~taken | c2 & (c1 | ~taken)"
[environment]
mode = "input-output"
start = { c1 = 0, c2 = 0, START }
circuit = { CIRCUIT }
"""
ENDS = 'inputs = ["c1", "c2"], outputs = ["req", "taken"], excitation = { req = "~c1", taken = "c2" }'


def stages(circuit: str = ENDS, start: str = "req = 0, taken = 0") -> str:
    return STAGES.replace("CIRCUIT", circuit).replace("START", start)


def test_the_closed_loop_is_the_circuit_written_as_one() -> None:
    spec = read("stages.toml", kinds=shapes(), text=stages())
    graph = Graph(Packed(placed(spec.circuit), spec.environment), Limits())
    assert len(graph) == len(Graph(Packed(*pipeline(2)), Limits())) == 16
    assert placed(spec.circuit).inputs == ()
    speed, live, moves = check(
        "stages.toml",
        text=stages() + '[[property]]\ncheck = "speed-independent"\n[[property]]\ncheck = "deadlock-free"\n'
        '[[property]]\ncheck = "leads-to"\nfrom = "req"\nto = "c2"',
    ).results
    assert {speed.verdict, live.verdict, moves.verdict} == {"proved"}


def test_what_is_not_an_input_gets_a_name_of_its_own() -> None:
    slow = (
        'inputs = ["c1", "c2", "pause"], outputs = ["req", "taken"], '
        'excitation = { wait = "~c1 & ~pause", req = "wait", k = "c2" }, define = { taken = "k" }'
    )
    spec = read("stages.toml", kinds=shapes(), text=stages(slow, '"env.wait" = 0, pause = 0, taken = 0'))
    circuit = placed(spec.circuit)
    assert circuit.inputs == ("pause",)
    assert circuit.nodes == ("c1", "c2", "env.wait", "req", "env.k")
    assert to_text(circuit.excitation["env.wait"]) == "~c1 & ~pause"
    assert to_text(circuit.excitation["c2"]) == "c1 & ~env.k | c2 & (c1 | ~env.k)"


def test_each_gate_of_the_environment_carries_one_delay() -> None:
    circuit = Netlist("buffer", ("req",), (Gate("a", var("req")), Gate("ack", var("a"))), ("ack",))
    other = Netlist("client", ("ack",), (Gate("w", var("ack")), Gate("req", var("w"))), ("req",))
    whole = join(circuit, other)
    assert place(whole, "gate").nodes == ("a", "ack", "env.w", "req")
    assert place(whole, "feedback").nodes == ("env.w", "req")
    assert set(place(whole, "wire").nodes) == {"a", "ack", "env.w", "req", "req>a", "a>ack", "ack>env"}
    assert place(whole, "wire", Placement(isochronic=("ack",))).excitation["env.w"] is var("ack")


def test_a_protocol_in_a_file_of_its_own(tmp_path: Path) -> None:
    (tmp_path / "client.toml").write_text(
        '[circuit]\ninputs = ["ack"]\noutputs = ["req"]\nwinners = "one"\n[circuit.excitation]\nreq = "~ack"\n'
    )
    (tmp_path / "follower.toml").write_text(
        '[circuit]\ninputs = ["req"]\nexcitation = { ack = "req" }\n'
        '[environment]\nmode = "input-output"\nstart = { ack = 0 }\ncircuit = { file = "client.toml" }\n'
        '[[property]]\ncheck = "leads-to"\nfrom = "req"\nto = "ack & ~req"\n'
    )
    (result,) = check(str(tmp_path / "follower.toml")).results
    assert result.verdict == "proved"
    assert result.ranged["total_states"] == 4


def codes(text: str) -> list[str]:
    with pytest.raises(InputError) as error:
        read("stages.toml", kinds=shapes(), text=text)
    return [problem.code for problem in error.value.problems]


@pytest.mark.parametrize(
    ("circuit", "code"),
    [
        ('inputs = ["c1"], outputs = ["want"], excitation = { want = "~c1" }', "drives-nothing"),
        ('outputs = ["req"], excitation = { x = "x" }, define = { req = "req2" }', "unknown-name"),
        ('inputs = ["c1"], outputs = ["req"], excitation = { req = "~c1" }, winners = "one"', "conflict"),
        ('file = "no_such.v"', "file-not-found"),
        ('file = "stages.toml"', "circular-file"),
    ],
)
def test_what_cannot_be_joined(circuit: str, code: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    text = stages(circuit, "req = 0")
    (tmp_path / "stages.toml").write_text(text)
    assert codes(text) == [code]


def test_a_driven_input_is_no_input_any_more() -> None:
    assert codes(stages() + 'assume = ["~req"]') == ["not-an-input"]
    assert codes(stages() + 'inputs.req = { rises = "1" }') == ["unknown-name"]


def test_a_loop_needs_a_delay() -> None:
    text = """
[circuit]
inputs = ["req"]
excitation = { q = "req" }
define = { ack = "req & q" }
[environment]
circuit = { inputs = ["ack"], outputs = ["req"], define = { req = "~ack" }, excitation = { x = "ack" } }
"""
    assert codes(text) == ["definition-cycle"]


def test_circuits_are_not_compared_in_a_closed_loop() -> None:
    compared = '[[property]]\ncheck = "equivalent"\nto = { excitation = { c1 = "0" }, inputs = ["req", "taken"] }'
    assert codes(stages().replace('mode = "input-output"', "") + compared) == ["conflict"]


def test_names_that_are_taken() -> None:
    inner = Netlist("inner", ("req",), (Gate("env.k", var("req")),), ())
    other = Netlist("other", (), (Gate("k", var("k")), Gate("req", var("k"))), ("req",))
    with pytest.raises(InputError, match="names something of the circuit and of its environment"):
        join(inner, other)


def test_the_schema_admits_and_refuses_the_same() -> None:
    validator = Draft202012Validator(SCHEMA)
    assert validator.is_valid(tomllib.loads(stages()))
    assert not validator.is_valid(tomllib.loads(stages(ENDS + ', delay = "wire"')))
