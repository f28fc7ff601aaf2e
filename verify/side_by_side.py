"""Engines side by side under one limit of time and memory: the first decision wins, the losers are stopped.

A small circuit is decided at once by the engines at home, which keep what they explored for the next property. What
they leave open after so many states or seconds goes to the engines apart, each in a process of its own, while the
engines at home go on under the full limits. With one job everything comes one after the other, each engine apart with
a share of the time. A process that decided waits for the next question with what it has found out; others are stopped.
"""

from __future__ import annotations

import os
import signal
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from multiprocessing import get_context
from multiprocessing.connection import Connection, wait
from types import TracebackType
from typing import Any

from settled.verify.engines import Engine, able, attempt
from settled.verify.limits import LimitReached, Limits
from settled.verify.questions import Answer, Question, Task, undecided

QUICK = 20_000
SOON = 2.0
GRACE = 2.0


class EngineFailed(Exception):
    """An engine ended with an exception: a fault in this program, never a verdict."""


class Preempted(LimitReached):
    """An engine apart has decided; the work at home is no longer needed."""


def decide(task: Task, question: Question, jobs: int) -> Answer:
    """The first decision that an engine comes to; else why each came to none. Raises `EngineFailed`."""
    home = [e for e in able(question) if not e.apart]
    apart = [e for e in able(question) if e.apart]
    if not apart:
        return at_home(task, question, home, [])
    answer = at_home(replace(task, limits=quick(task.limits, jobs)), question, home, [])
    if answer.verdict != "undecided":
        return answer
    if jobs == 1:
        return in_turn(task, question, home, apart)
    with Workers(task, question, apart, jobs - 1) as workers:
        listening = replace(task, limits=replace(task.limits, listen=workers.poll))
        answer = at_home(listening, question, home, [])
        return answer if answer.verdict != "undecided" else workers.finish(answer)


def quick(limits: Limits, jobs: int) -> Limits:
    """Limits for the quick attempt; with one job nothing in it depends on the clock before the time limit."""
    seconds = limits.seconds if jobs == 1 else min(limits.seconds, limits.spent() + SOON)
    return replace(limits, states=min(QUICK, limits.states), seconds=seconds)


def at_home(task: Task, question: Question, engines: Sequence[Engine], reasons: list[str]) -> Answer:
    """Ask engines in this process, one after the other."""
    for engine in engines:
        answer = attempt(engine, task, question)
        if answer.verdict != "undecided":
            return answer
        reasons.append(f"{engine.name}: {answer.reason}")
    return together(reasons, engines)


def in_turn(task: Task, question: Question, home: Sequence[Engine], apart: Sequence[Engine]) -> Answer:
    """Each engine apart in a process of its own, one after the other; then the engines at home."""
    reasons: list[str] = []
    for number, engine in enumerate(apart):
        share = task.limits.spent() + task.limits.left() / (len(apart) - number + 1)
        part = replace(task, limits=replace(task.limits, seconds=share))
        with Workers(part, question, [engine], 1) as workers:
            answer = workers.finish(undecided("", engine.name))
        if answer.verdict != "undecided":
            return answer
        reasons += workers.reasons
    return at_home(task, question, home, reasons)


def together(reasons: Sequence[str], engines: Sequence[Engine]) -> Answer:
    """The answer `undecided` with everybody's reason; the only engine's name goes without saying."""
    only = len(reasons) == 1
    text = "; ".join(r.split(": ", 1)[1] if only else r for r in reasons)
    method = ", ".join(e.name for e in engines) or "no engine"
    return undecided(text or "no engine answers this kind of question", method)


@dataclass
class Worker:
    """An engine at work in a process of its own, and the line on which questions go and answers come."""

    engine: Engine
    process: Any
    line: Connection

    def stop(self) -> None:
        """End the process, whatever it does."""
        self.process.kill()
        self.process.join()
        self.line.close()


def idle(task: Task) -> dict[str, Worker]:
    """The processes that wait for a question about the circuit of the task, by engine."""
    waiting: dict[str, Worker] = task.memory.setdefault("apart", {})
    return waiting


def release(memory: dict[str, Any]) -> None:
    """Stop the processes that wait in the memory of a task."""
    for worker in memory.pop("apart", {}).values():
        worker.stop()


class Workers:
    """Engines apart, at most `most` at a time; leaving the context stops those that have not decided."""

    def __init__(self, task: Task, question: Question, engines: Sequence[Engine], most: int) -> None:
        self.task, self.question, self.most = task, question, most
        self.waiting = list(engines)
        self.engines = list(engines)
        self.running: list[Worker] = []
        self.reasons: list[str] = []
        self.decided: Answer | None = None

    def __enter__(self) -> Workers:
        self._fill()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        for worker in self.running:
            worker.stop()

    def poll(self) -> None:
        """Take in what has come. Raises `Preempted` once an engine has decided."""
        self._take(0.0)
        if self.decided is not None:
            raise Preempted("another engine has decided")

    def finish(self, home: Answer) -> Answer:
        """Wait for a decision, until the time limit at the latest; `home`: what the engines at home came to.

        When a quarter of the time is over, their place goes to one more engine apart.
        """
        few, limits = self.most, self.task.limits
        while self.decided is None and self.running and limits.left() + GRACE > 0:
            self.most = few + (limits.spent() > limits.seconds / 4)
            self._take(min(0.2, self.task.limits.left() + GRACE))
            if self.task.limits.spent() > self.task.limits.seconds + GRACE:
                late = [f"{w.engine.name}: time limit of {self.task.limits.seconds:g} s reached" for w in self.running]
                self.reasons += late
                break
        if self.decided is not None:
            return self.decided
        methods = [home.method, *(e.name for e in self.engines if e.name not in home.method)]
        first = [f"{home.method}: {home.reason}"] if home.reason else []
        return undecided("; ".join([*first, *self.reasons]), ", ".join(methods))

    def _fill(self) -> None:
        asked = replace(self.task.limits, report=None, listen=None), self.task.limits.report is not None
        while self.waiting and len(self.running) < self.most:
            engine = self.waiting.pop(0)
            worker = idle(self.task).pop(engine.name, None) or started(engine, self.task)
            worker.line.send((self.question, *asked))
            self.running.append(worker)

    def _take(self, seconds: float) -> None:
        ready = wait([w.line for w in self.running], seconds)
        for worker in [w for w in self.running if w.line in ready]:
            self._hear(worker)
        self._fill()

    def _hear(self, worker: Worker) -> None:
        try:
            kind, said = worker.line.recv()
        except EOFError:
            kind, said = "lost", "its process ended without an answer, probably for want of memory"
        if kind == "progress":
            if self.task.limits.report is not None:
                self.task.limits.report(said)
            return
        self.running.remove(worker)
        if kind == "answer" and said.verdict != "undecided":
            self.decided = self.decided or said
            idle(self.task)[worker.engine.name] = worker
            return
        worker.stop()
        if kind == "failed":
            raise EngineFailed(f"{worker.engine.name}: {said}")
        self.reasons.append(f"{worker.engine.name}: {said if kind == 'lost' else said.reason}")


def started(engine: Engine, task: Task) -> Worker:
    """A process for an engine, waiting for questions about the circuit of the task."""
    here, there = get_context("fork").Pipe()
    process = get_context("fork").Process(
        target=work, args=(engine, replace(task, memory={}), there, os.getpid()), daemon=True
    )
    process.start()
    there.close()
    return Worker(engine, process, here)


def work(engine: Engine, task: Task, line: Connection, parent: int) -> None:
    """What a process apart does: answer one question after the other; it ends when nobody is there any more."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)

    def listen() -> None:
        if os.getppid() != parent:
            os._exit(1)

    while True:
        while not line.poll(1.0):
            listen()
        question, limits, reporting = line.recv()
        limits = replace(limits, report=reporter(line) if reporting else None, listen=listen)
        line.send(attempted(engine, replace(task, limits=limits), question))


def reporter(line: Connection) -> Callable[[str], None]:
    """Sends progress home, a few times a second."""
    last = [0.0]

    def report(progress: str) -> None:
        if time.monotonic() - last[0] > 0.2:
            last[0] = time.monotonic()
            line.send(("progress", progress))

    return report


def attempted(engine: Engine, task: Task, question: Question) -> tuple[str, Any]:
    """What an attempt comes to: `answer` with it, or `failed` with the exception."""
    try:
        return "answer", attempt(engine, task, question)
    except MemoryError:
        return "answer", undecided("out of memory", engine.name)
    except Exception as error:
        return "failed", f"{type(error).__name__}: {error}"
