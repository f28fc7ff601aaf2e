"""Mutual-exclusion elements: how they are written beside equations, and what they mean under each delay model."""

from __future__ import annotations

import json
import tomllib
from importlib.resources import files

import pytest
from jsonschema import Draft202012Validator

from settled.encodings.delays import Placement, place
from settled.models.circuit import Circuit
from settled.models.logic import to_text
from settled.models.problems import InputError
from settled.models.property_files.reader import read
from settled.models.readers.verilog import read_text
from settled.models.states import successors
from settled.verify import check
from settled.verify.properties import shapes

SCHEMA = json.loads(files("settled.models.property_files").joinpath("property-file.schema.json").read_text())
TWO = """
[circuit]
inputs = ["r1", "r2"]
outputs = ["busy"]
delay = "DELAY"
[circuit.arbiters]
ME = { requests = ["r1", "r2"], grants = ["g1", "g2"] }
[circuit.define]
busy = "g1 | g2"
"""


def circuit(text: str, delay: str = "gate") -> Circuit:
    return place(read("two.toml", kinds=shapes(), text=text.replace("DELAY", delay)).circuit.netlist, delay)


def codes(text: str) -> list[str]:
    with pytest.raises(InputError) as error:
        read("two.toml", kinds=shapes(), text=text)
    return [problem.code for problem in error.value.problems]


def valid(text: str) -> bool:
    return bool(Draft202012Validator(SCHEMA).is_valid(tomllib.loads(text)))


@pytest.mark.parametrize("delay", ["gate", "feedback"])
def test_each_grant_is_a_node_excited_by_its_request_and_not_the_other_grant(delay: str) -> None:
    two = circuit(TWO, delay)
    assert {n: to_text(e) for n, e in two.excitation.items()} == {"g1": "r1 & ~g2", "g2": "r2 & ~g1"}
    assert two.exclusive == (("g1", "g2"),)
    assert valid(TWO.replace("DELAY", delay))


def test_either_grant_may_come_but_not_both_in_one_step() -> None:
    two = circuit(TWO)
    asked = 0b0011
    assert sorted(successors(two, asked)) == [asked | 1 << two.place["g1"], asked | 1 << two.place["g2"]]


def test_under_wire_delays_it_is_a_closed_cell() -> None:
    assert set(circuit(TWO, "wire").nodes) == {"r1>", "r2>", "r1>ME", "r2>ME", "g1", "g2"}


def test_it_withdraws_an_excitation_only_between_its_two_grants() -> None:
    text = (
        TWO.replace("DELAY", "gate")
        + """
[environment]
mode = "input-output"
start = { r1 = 0, r2 = 0, g1 = 0, g2 = 0 }
inputs.r1 = { rises = "~g1", falls = "g1", must = true }
inputs.r2 = { rises = "~g2", falls = "g2", must = true }
[[property]]
check = "speed-independent"
[[property]]
check = "speed-independent"
except = ["g1", "g2"]
[[property]]
check = "never"
expr = "r1 & g1 & r2 & g2"
[[property]]
check = "leads-to"
from = "r1 | r2"
to = "busy"
[[property]]
check = "leads-to"
from = "r1"
to = "g1"
"""
    )
    whole, excepted, exclusion, some, fair = check("two.toml", text=text).results
    assert whole.facts["withdrawn"] in (["g1"], ["g2"])
    assert excepted.verdict == exclusion.verdict == "proved"
    assert some.verdict == "proved"
    assert fair.verdict == "refuted" and fair.traces[0].loop is not None, "the other client may win again and again"


SOUND = 'arbiters = { M = { requests = ["a", "b"], grants = ["g", "h"] } }'
BASE = '[circuit]\ninputs = ["a", "b"]\nexcitation = { q = "a" }\n'


@pytest.mark.parametrize(
    ("line", "code"),
    [
        ('arbiters = { M = { requests = ["a", "b"], grants = ["g", "h", "i"] } }', "bad-value"),
        ('arbiters = { M = { requests = ["a"], grants = ["g", "h"] } }', "bad-value"),
        ('arbiters = { M = { requests = ["a", "c"], grants = ["g", "h"] } }', "unknown-name"),
        ('arbiters = { M = { requests = ["a", "b"], grants = ["g", "g"] } }', "duplicate-name"),
        ('arbiters = { M = { requests = ["a", "b"], grants = ["q", "h"] } }', "duplicate-name"),
        ('arbiters = { M = { requests = ["a", "b"], grants = ["stable", "h"] } }', "reserved-name"),
        ('arbiters = { M = { requests = ["a", "b"] } }', "missing-key"),
        ('arbiters = { M = { grants = ["g", "h"] } }', "missing-key"),
        ('arbiters = { M = { requests = ["a", "b"], grants = ["g", "h"], grant = 1 } }', "unknown-key"),
        ('arbiters = { M = { requests = ["a", "b"], grants = 1 } }', "wrong-type"),
        ('arbiters = { M = ["a", "b"] }', "wrong-type"),
        ("arbiters = {}", "bad-value"),
        ("arbiters = 1", "wrong-type"),
        (f'delay = "wire"\n{SOUND}\ncells = {{ c = ["g"] }}', "conflict"),
        (f'delay = "wire"\n{SOUND}\ncells = {{ M = ["q"] }}', "duplicate-name"),
    ],
)  # fmt: skip
def test_what_cannot_be_read(line: str, code: str) -> None:
    assert codes(BASE + line) == [code]


def test_what_the_schema_can_see_it_refuses() -> None:
    for line in ('arbiters = { M = { requests = ["a"], grants = ["g", "h"] } }', "arbiters = 1"):
        assert not valid(BASE + line)
    assert valid(BASE + SOUND)
    assert not valid('[circuit]\nfile = "x.v"\n' + SOUND)


def test_an_arbiter_may_read_what_another_one_grants() -> None:
    text = """
[circuit]
inputs = ["a", "b", "c"]
[circuit.arbiters]
inner = { requests = ["a", "b"], grants = ["ga", "gb"] }
outer = { requests = ["either", "c"], grants = ["ge", "gc"] }
[circuit.define]
either = "ga | gb"
"""
    found = circuit(text)
    assert to_text(found.excitation["ge"]) == "(ga | gb) & ~gc"
    assert found.nodes == ("ga", "gb", "ge", "gc")


# ---- in netlists -----------------------------------------------------------------------------------------------------

SHARED = """
module shared (input a, b, output x, y);
  wire early;
  buf (early, a);
  INSTANCE
endmodule
"""


def netlist(instance: str, more: str = "") -> Circuit:
    return place(read_text(SHARED.replace("INSTANCE", instance) + more, "shared.v", top="shared"), "gate")


@pytest.mark.parametrize(
    "instance", ["settled_mutex m (.r1(early), .r2(b), .g1(x), .g2(y));", "settled_mutex m (early, b, x, y);"]
)
def test_a_netlist_may_use_it_without_a_definition(instance: str) -> None:
    found = netlist(instance)
    assert {n: to_text(e) for n, e in found.excitation.items()} == {"early": "a", "x": "early & ~y", "y": "b & ~x"}
    assert found.exclusive == (("x", "y"),)


def test_a_grant_that_is_connected_to_nothing_is_still_there() -> None:
    found = netlist("settled_mutex m (.r1(early), .r2(b), .g1(x)); assign y = 1'b0;")
    assert found.exclusive == (("x", "m.g2"),)


def test_in_a_netlist_it_is_a_closed_cell_called_after_its_instance() -> None:
    text = SHARED.replace("INSTANCE", "settled_mutex m (early, b, x, y);")
    nodes = place(read_text(text, "shared.v"), "wire").nodes
    assert {"early>m", "b>m"} < set(nodes) and not {"x>m", "y>m", "x>y", "y>x"} & set(nodes)


@pytest.mark.parametrize("feedback", ["auto", ("early",)])
def test_both_grants_carry_a_delay_when_only_feedback_lines_do(feedback: str | tuple[str, ...]) -> None:
    text = SHARED.replace("INSTANCE", "settled_mutex m (early, b, x, y);")
    found = place(read_text(text, "shared.v"), "feedback", Placement(feedback=feedback))
    assert set(found.nodes) - {"early"} == {"x", "y"}


def test_a_module_of_that_name_in_the_file_goes_first() -> None:
    own = "module settled_mutex (input r1, r2, output g1, g2); and (g1, r1, r2); or (g2, r1, r2); endmodule"
    found = netlist("settled_mutex m (early, b, x, y);", own)
    assert found.exclusive == () and to_text(found.excitation["x"]) == "early & b"
