"""Input vectors with too few or too many stable internal states: the least of them, and what it shows."""

from __future__ import annotations

import numpy as np

from settled.encodings.packed import Packed
from settled.models.states import Run
from settled.verify.explicit.normal_form import reading
from settled.verify.explicit.oscillations import least_oscillation
from settled.verify.explicit.power_up import PowerUp, Sequenced
from settled.verify.limits import Limits


def least_miscount(packed: Packed, least: int, most: int | None) -> tuple[int, list[int]] | None:
    """The least admitted vector with fewer than `least` or more than `most` stable total states, and these in order.

    Looks at every total state.
    """
    words = np.arange(1 << packed.state_bits, dtype=np.uint64)
    vectors = words[: 1 << packed.inputs]
    stable = words[packed.excited(words) == 0]
    count = np.bincount((stable & packed.input_mask).astype(np.int64), minlength=len(vectors))
    wrong = vectors[packed.admits(vectors) & ((count < least) | (count > (len(words) if most is None else most)))]
    if not len(wrong):
        return None
    vector = wrong[np.argmin(reading(packed, wrong))]
    found = stable[stable & packed.input_mask == vector]
    return int(vector), found[np.argsort(reading(packed, found))].tolist()


def least_round(packed: Packed, vector: int, title: str, limits: Limits) -> Run:
    """The least fair run that goes round under a vector without a stable state. Raises `LimitReached`."""
    graph = PowerUp(Sequenced(packed.circuit, [vector]), limits)
    found = least_oscillation(graph)
    assert found is not None, "without a stable state something goes round"
    return Run(title, graph.run_states(found[0]), found[1], packed.circuit.name)
