"""From a circuit as it was written to the circuit under the delay model that was asked for."""

from __future__ import annotations

from settled.encodings.delays import Placement, place
from settled.models.circuit import Circuit
from settled.models.specification import CircuitSource


def placed(source: CircuitSource) -> Circuit:
    """The circuit under the delay model that its source names. Raises `InputError` where the two do not fit."""
    feedback = "auto" if source.feedback is None else source.feedback
    return place(source.netlist, source.delay, Placement(source.winners, feedback, source.isochronic, source.closed))
