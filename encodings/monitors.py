"""Deterministic observers beside a transition system: what has changed how often, what is still to come, and a state
that comes again.

They turn questions about runs into questions whether a state can be reached.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from settled.encodings.system import Observer, Restraint, System, system
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import FALSE, TRUE, Expr, and_, ite, not_, or_, var, xor


def counted(name: str, signal: Expr, reset: Expr, most: int) -> tuple[list[Observer], Expr]:
    """Observers that count the changes of `signal` since `reset` was last true, up to `most`; and the condition that
    it has changed more often. `name` tells them from others.

    After i changes the signal has its old value if i is even: a level is passed where its parity does not fit.
    """
    before = var(f"{name} before")
    levels = [TRUE, *(var(f"{name} changed {i}") for i in range(1, most + 1))]
    passed = [and_(level, xor(signal, before, FALSE if i % 2 == 0 else TRUE)) for i, level in enumerate(levels)]
    found = [Observer(before.name, signal, ite(reset, signal, before))]
    for i, level in enumerate(levels[1:]):
        found.append(Observer(level.name, FALSE, and_(not_(reset), or_(level, passed[i]))))
    return found, passed[most]


SAVED = "is saved"
SAVE = "saves now"
PENDING = "goal pending"


def waiting_for(source: Expr, target: Expr) -> tuple[Observer, Expr]:
    """An observer that is 1 when `source` has been true, and `target` false at that moment and ever since, the present
    state left out; and the condition that so it is and `target` is false now, too.

    A run has a last `source` without `target`, then or later, exactly when this condition holds from some state on.
    """
    pending = var(PENDING)
    return Observer(PENDING, FALSE, and_(or_(pending, source), not_(target))), and_(pending, not_(target))


def returning(circuit: Circuit, environment: Environment, nodes: Sequence[str]) -> tuple[System, Expr]:
    """The system in which an unstable state may be saved, whereupon inputs and all nodes but `nodes` are held; and the
    condition that it came round to the saved state by a fair run of `nodes`.

    Fair: for each of them there was a moment at which it was not excited with its saved value. This is the reduction
    of liveness to safety (Biere, Artho and Schuppan 2002, recalled).
    """
    saved, save = var(SAVED), var(SAVE)
    excited = {n: circuit.is_excited[n] for n in nodes}
    saving = and_(save, not_(saved), or_(*excited.values()))
    inside = set(nodes)
    held = {s: or_(saved, saving) for s in circuit.signals if s not in inside}
    made = system(circuit, environment, Restraint(held))
    observers = [Observer(SAVED, FALSE, or_(saved, saving))]
    back = [saved]
    for n in nodes:
        copy, calm = var(f"{n} {SAVED}"), var(f"{n} was calm")
        observers.append(Observer(copy.name, FALSE, ite(saving, var(n), copy)))
        now = not_(excited[n])
        moved = or_(calm, now, xor(var(n), copy))
        observers.append(Observer(calm.name, FALSE, ite(saving, now, and_(saved, moved))))
        back += [not_(xor(var(n), copy)), calm]
    return made.observed(observers, [SAVE]), and_(*back)


def evading(made: System, far: Expr, presses: Mapping[str, Expr]) -> tuple[System, Expr]:
    """The system in which a state with `far` true may be saved, which is forgotten when `far` is no longer true; and
    the condition that the saved state came again by a fair run, which may be to stay where it is.

    Fair: for each variable in `presses` there was a moment at which it did not press with its saved value. Liveness to
    safety, as in `returning`.
    """
    saved, save = var(SAVED), var(SAVE)
    saving = and_(save, not_(saved), far)
    observers = [Observer(SAVED, FALSE, or_(saving, and_(saved, far)))]
    back = [saved, far]
    for v in made.base:
        copy, calm = var(f"{v} {SAVED}"), var(f"{v} was calm")
        observers.append(Observer(copy.name, FALSE, ite(saving, var(v), copy)))
        back.append(not_(xor(var(v), copy)))
        if v in presses:
            now = not_(presses[v])
            moved = or_(calm, now, xor(var(v), copy))
            observers.append(Observer(calm.name, FALSE, ite(saving, now, and_(saved, moved))))
            back.append(calm)
    return made.observed(observers, [SAVE]), and_(*back)
