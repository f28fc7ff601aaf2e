"""Engines side by side: the first decision wins, losers are stopped, failures and limits are told apart."""

from __future__ import annotations

import multiprocessing
import os
import time
from collections.abc import Callable, Iterator

import pytest

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import var
from settled.verify import side_by_side
from settled.verify.engines import Engine
from settled.verify.limits import Limits
from settled.verify.questions import Answer, Oscillates, Question, Task, undecided
from settled.verify.side_by_side import EngineFailed, decide, idle, release

Answers = Callable[[Task, Question], Answer]
LATCH = Circuit("latch", ("d",), ("q",), {"q": var("d")}, ("q",))


TASKS: list[Task] = []


def task(seconds: float = 20.0) -> Task:
    TASKS.append(Task(LATCH, Environment(), Limits(seconds=seconds)))
    return TASKS[-1]


def says(verdict: str, name: str) -> Answers:
    return lambda _task, _question: Answer(verdict, name, reason="no luck" if verdict == "undecided" else None)


def never_ends(asked: Task, _: Question) -> Answer:
    while True:
        time.sleep(0.01)
        asked.limits.check("turning")


def deaf(_: Task, __: Question) -> Answer:
    time.sleep(60)
    raise AssertionError("it should have been stopped")


def dies(_: Task, __: Question) -> Answer:
    os._exit(9)


def breaks(_: Task, __: Question) -> Answer:
    raise ValueError("a fault")


@pytest.fixture
def engines(monkeypatch: pytest.MonkeyPatch) -> Iterator[Callable[..., None]]:
    def use(*, home: Answers | None = None, **apart: Answers) -> None:
        made = [Engine("home", 1, {Oscillates: home or says("undecided", "home")})]
        made += [Engine(name, 9, {Oscillates: answer}, apart=True) for name, answer in apart.items()]
        monkeypatch.setattr(side_by_side, "able", lambda _question: made)

    yield use
    while TASKS:
        release(TASKS.pop().memory)
    assert not multiprocessing.active_children()


@pytest.mark.parametrize("jobs", [1, 2, 3])
def test_a_decision_at_home_needs_no_process(engines: Callable[..., None], jobs: int) -> None:
    engines(home=says("proved", "home"), other=breaks)
    assert decide(task(), Oscillates(), jobs).method == "home"


@pytest.mark.parametrize("jobs", [2, 3])
def test_a_decision_apart_ends_the_work_at_home(engines: Callable[..., None], jobs: int) -> None:
    calls = []

    def home(asked: Task, question: Question) -> Answer:
        calls.append(asked.limits.states)
        return undecided("quick", "home") if len(calls) == 1 else never_ends(asked, question)

    engines(home=home, quick=says("refuted", "quick"))
    began = time.monotonic()
    answer = decide(task(), Oscillates(), jobs)
    assert (answer.verdict, answer.method) == ("refuted", "quick")
    assert time.monotonic() - began < 15
    assert calls == [side_by_side.QUICK, 4_000_000]


def test_with_one_job_they_come_one_after_the_other(engines: Callable[..., None]) -> None:
    engines(first=says("undecided", "first"), second=says("proved", "second"), third=breaks)
    assert decide(task(), Oscillates(), 1).method == "second"


def test_the_losers_are_stopped(engines: Callable[..., None]) -> None:
    engines(slow=deaf, quick=says("proved", "quick"))
    assert decide(task(), Oscillates(), 3).method == "quick"


@pytest.mark.parametrize("jobs", [1, 2])
def test_a_process_that_decided_answers_the_next_question_with_what_it_knows(
    engines: Callable[..., None], jobs: int
) -> None:
    def counting(asked: Task, _: Question) -> Answer:
        asked.memory["asked"] = asked.memory.get("asked", 0) + 1
        return Answer("proved", f"{os.getpid()} {asked.memory['asked']}")

    engines(counting=counting)
    one = task()
    found = [decide(one, Oscillates(), jobs).method.split() for _ in range(3)]
    assert len({process for process, _ in found}) == 1
    assert [number for _, number in found] == ["1", "2", "3"]


def test_a_process_that_did_not_decide_is_not_kept(engines: Callable[..., None]) -> None:
    engines(unable=says("undecided", "unable"), able=says("proved", "able"))
    one = task()
    decide(one, Oscillates(), 2)
    assert list(idle(one)) == ["able"]


def test_a_process_that_dies_leaves_the_others_at_work(engines: Callable[..., None]) -> None:
    engines(lost=dies, quick=says("proved", "quick"))
    assert decide(task(), Oscillates(), 2).method == "quick"


def test_all_reasons_are_given(engines: Callable[..., None]) -> None:
    engines(lost=dies, late=never_ends)
    answer = decide(task(0.5), Oscillates(), 3)
    assert answer.verdict == "undecided"
    assert "home: no luck" in (answer.reason or "")
    assert "lost: its process ended without an answer" in (answer.reason or "")
    assert "late: time limit of 0.5 s reached turning" in (answer.reason or "")


def test_an_engine_that_does_not_look_at_the_clock_is_stopped(engines: Callable[..., None]) -> None:
    engines(deaf=deaf)
    began = time.monotonic()
    answer = decide(task(0.2), Oscillates(), 2)
    assert answer.verdict == "undecided" and "deaf: time limit" in (answer.reason or "")
    assert time.monotonic() - began < 15


@pytest.mark.parametrize("jobs", [1, 2])
def test_an_exception_is_a_fault_and_no_verdict(engines: Callable[..., None], jobs: int) -> None:
    engines(broken=breaks)
    with pytest.raises(EngineFailed, match="broken: ValueError: a fault"):
        decide(task(), Oscillates(), jobs)
