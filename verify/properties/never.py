"""`never`: an expression is false in every reachable total state, or in every stable one."""

from __future__ import annotations

from settled.models.circuit import Circuit
from settled.models.logic import to_text
from settled.models.specification import Shape
from settled.verify.properties import Kind, Options
from settled.verify.properties.always import VACUOUS, offends, where
from settled.verify.questions import Reaches


def _question(_: Circuit, options: Options) -> Reaches:
    return Reaches(options["expr"], options.get("when") == "stable")


def _claim(_: Circuit, options: Options) -> str:
    return f"{to_text(options['expr'])} is false in {where(options)}."


KIND = Kind("never", Shape(required={"expr"}, optional={"when"}), _question, _claim, offends, vacuous=VACUOUS)
