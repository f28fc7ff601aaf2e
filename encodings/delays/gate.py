"""Delay model `gate`: every gate output is a node. Forks are isochronic: a promise that the layout has to keep."""

from __future__ import annotations

from settled.encodings.delays import Placement, functions
from settled.models.circuit import Circuit
from settled.models.netlist import Netlist

DELAY = "gate"


def place(netlist: Netlist, placement: Placement) -> Circuit:
    """One node for each gate."""
    gates, defined = functions(netlist)
    return Circuit(
        name=netlist.name,
        inputs=netlist.inputs,
        nodes=tuple(gates),
        excitation=gates,
        outputs=netlist.outputs,
        defined=defined,
        delay=DELAY,
        winners=placement.winners,
        exclusive=tuple(netlist.arbiters.values()),
        notes=netlist.notes,
    )
