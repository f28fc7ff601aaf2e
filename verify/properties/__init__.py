"""Property kinds: what must be asked, and when a run offends. One file each; it states `KIND`, found by listing.

A file is named like its check with underscores; what all kinds share is in this module.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from importlib import import_module
from pkgutil import iter_modules
from typing import Any

from settled.models.circuit import Circuit
from settled.models.specification import Shape
from settled.models.states import Behaviour, Run
from settled.verify.questions import Answer, Question

Options = Mapping[str, Any]


@dataclass(frozen=True)
class Kind:
    """One kind of property.

    * `name`: the word behind `check`; `shape`: the options it takes.
    * `question(circuit, options)`: what an engine is asked.
    * `claim(circuit, options)`: the sentence that `proved` stands for.
    * `offends(behaviour, question, answer)`: look at the runs of a refutation once more, by the executable meaning
      alone. Gives the sentence that the refutation stands for and further facts. Raises `ValueError` when the runs
      do not show a failure.
    * `standard`: whether it is asked when a file asks nothing itself, and at which place.
    * `anywhere`: its runs may begin outside the start states.
    * `walk(behaviour, question, run)`: how a run is walked when it is not one of the circuit in its environment; raises
      `ValueError`.
    * `compares_winners`: a refutation says whether simultaneous switching is needed for it.
    * `vacuous`: why there was nothing to range over, when that is so.
    """

    name: str
    shape: Shape
    question: Callable[[Circuit, Options], Question]
    claim: Callable[[Circuit, Options], str]
    offends: Callable[[Behaviour, Any, Answer], tuple[str, dict[str, Any]]]
    standard: int | None = None
    anywhere: bool = False
    walk: Callable[[Behaviour, Any, Run], object] | None = None
    compares_winners: bool = False
    vacuous: str = "no reachable stable total state has an allowed input change"


@cache
def kinds() -> dict[str, Kind]:
    """All property kinds by name."""
    found = [import_module(f"{__name__}.{m.name}").KIND for m in iter_modules(__path__)]
    return {k.name: k for k in found}


@cache
def shapes() -> dict[str, Shape]:
    """The options of all kinds, for the reader of property files."""
    return {name: kind.shape for name, kind in kinds().items()}


def standard() -> list[Kind]:
    """The kinds that are asked when a file asks nothing itself, in order."""
    return sorted((k for k in kinds().values() if k.standard is not None), key=lambda k: k.standard or 0)
