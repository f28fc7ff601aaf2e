"""A dump, read back by a reader that knows nothing of the writer, is the run."""

from __future__ import annotations

import io

import pytest
from vcd.reader import TokenKind, tokenize

from settled.verify import check
from settled.verify.inputs import gallery
from settled.verify.renderers.waveform import files, to_vcd
from settled.verify.result import FileReport, Result, Step, Trace
from settled.verify.session import Session, Settings, load

Samples = list[dict[str, int]]


def read_back(text: str) -> Samples:
    """Values of all variables at each time of a dump, by scope and name (IEEE 1364, 18.2; recalled)."""
    words = text.split()
    names: dict[str, str] = {}
    scopes: list[str] = []
    now: dict[str, int] = {}
    samples: Samples = []
    i = 0
    while i < len(words):
        word = words[i]
        if word in ("$comment", "$date", "$version", "$timescale", "$scope", "$upscope", "$var", "$enddefinitions"):
            end = words.index("$end", i)
            body = words[i + 1 : end]
            if word == "$scope":
                scopes.append(body[1])
            elif word == "$upscope":
                scopes.pop()
            elif word == "$var":
                names[body[2]] = "/".join([*scopes, *body[3:]])
            i = end
        elif word[0] == "#":
            samples += [dict(now)] * (int(word[1:]) - len(samples))
        elif word[0] == "b":
            now[names[words[i + 1]]] = int(word[1:], 2)
            i += 1
        elif word[0] in "01":
            now[names[word[1:]]] = int(word[0])
        else:
            assert word in ("$dumpvars", "$end"), word
        i += 1
    return samples


def expected(trace: Trace, places: list[int]) -> Samples:
    samples = []
    for place in places:
        step = trace.steps[place]
        signals = {f"{trace.circuit}/{name}": value for name, value in step.state.items()}
        samples.append(signals | {"run/step": place, "run/stable": int(step.stable)})
    return samples


REFUTED = ("wake_latch_unruled", "level_latch", "float_chatter", "clock_switch_unruled", "sample_flip_flop_wires")


@pytest.mark.parametrize("name", REFUTED)
def test_a_dump_is_its_run(name: str) -> None:
    report = check(gallery()[name])
    written = files([report], {})
    traces = [trace for result in report.results for trace in result.traces]
    assert traces and len(written) == len(traces)
    for trace, text in zip(traces, written.values(), strict=True):
        places = list(range(len(trace.steps)))
        if trace.loop is not None:
            places += [*places[trace.loop :], trace.loop]
            assert f"The loop from step {trace.loop} on is shown twice." in text
        assert read_back(text) == expected(trace, places)


def test_names_of_any_kind_stay_apart() -> None:
    names = ("$end", "a>g", "u1.q", "d[3]", "\u00e9", "?e9?", "#1", "run", "q~")
    state = {name: i % 2 for i, name in enumerate(names)}
    trace = Trace("one", "run", (Step(state, (), (), True), Step({n: 1 - v for n, v in state.items()}, (), (), True)))
    text = to_vcd(trace, Result("a $end\n$scope b", "never", "refuted", "", "", 0.0))
    first, second = read_back(text)
    assert len(first) == len(names) + 2
    assert [v for k, v in first.items() if k.startswith("run/")] == [*state.values()]
    assert all(second[k] == 1 - v for k, v in first.items() if k.startswith("run/"))
    kinds = [token.kind for token in tokenize(io.BytesIO(text.encode("ascii")))]
    assert kinds.count(TokenKind.VAR) == len(names) + 2 and kinds.count(TokenKind.COMMENT) == 1


def test_equal_runs_give_equal_dumps_and_no_date() -> None:
    first, second = (files([check(gallery()["level_latch"])], {}) for _ in range(2))
    assert first == second and all("$date none $end" in text for text in first.values())


def test_files_of_properties_and_files_with_like_names_stay_apart() -> None:
    trace = Trace("one", "c", (Step({"q": 0}, (), (), True),))
    results = tuple(
        Result(name, "never", "refuted", "", "", 0.0, traces=(trace,) * count)
        for name, count in (("A b", 1), ("a/b", 2), ("../../..", 1), ("<script>", 1), ("x" * 300, 1))
    )
    reports = [FileReport(f"{folder}/same.toml", "", None, None, (), results) for folder in ("p", "q")]  # type: ignore[arg-type]
    first = ["A-b", "a-b_2-1", "a-b_2-2", "unnamed", "script", "x" * 60]
    wanted = [f"{folder}/{name}.vcd" for folder in ("same", "same_2") for name in first]
    assert list(files(reports, {})) == wanted


def test_files_of_a_numbered_name_do_not_meet_those_of_a_property_with_several_runs() -> None:
    trace = Trace("one", "c", (Step({"q": 0}, (), (), True),))
    results = tuple(
        Result(name, "never", "refuted", "", "", 0.0, traces=(trace,) * count) for name, count in (("a", 2), ("a-1", 1))
    )
    report = FileReport("a.toml", "", None, None, (), results)  # type: ignore[arg-type]
    assert list(files([report], {})) == ["a/a-1.vcd", "a/a-2.vcd", "a/a-1_2.vcd"]


def test_every_cause_has_its_dumps() -> None:
    session = Session(load(gallery()["clock_switch_plain"]), Settings(every=True, only=["hazard-free"]))
    report = session.report(list(session.results()))
    (result,) = report.results
    written = files([report], {})
    traces = (*result.traces, *result.further)
    assert [name.split("/")[1] for name in written] == [f"hazard-free-cause-{i + 1}.vcd" for i in range(len(traces))]
    assert len(traces) > 1
    for trace, text in zip(traces, written.values(), strict=True):
        assert read_back(text) == expected(trace, list(range(len(trace.steps))))
        assert "was late" in text
