"""The gallery's comparisons end as their heads say, and what settles without a race is equivalent to itself."""

from __future__ import annotations

from importlib.resources import files
from pathlib import Path

import pytest

from settled.models.specification import Property, Specification
from settled.verify import check
from settled.verify.comparing import comparison
from settled.verify.session import Session, Settings, load

GALLERY = Path(str(files("settled.models").joinpath("gallery")))
EXPECTED = {
    "equivalence_agreement": ["refuted"],
    "equivalence_first_trip": ["proved", "proved"],
    "equivalence_flip_flop": ["proved"],
    "equivalence_flip_flop_together": ["refuted"],
    "equivalence_level_latch": ["refuted"],
    "equivalence_level_select": ["proved", "refuted"],
    "equivalence_sample_flip_flop": ["proved"],
    "equivalence_trip_latch": ["proved"],
    "equivalence_trip_latch_unruled": ["refuted"],
}


@pytest.mark.parametrize("name", EXPECTED)
def test_a_comparison_ends_as_expected(name: str) -> None:
    results = check(str(GALLERY / f"{name}.toml")).results
    assert [r.verdict for r in results] == EXPECTED[name]
    assert not any(r.vacuous for r in results)


def test_every_comparison_of_the_gallery_is_here() -> None:
    assert {p.stem for p in GALLERY.glob("equivalence_*.toml")} == set(EXPECTED)


def test_the_broken_refactoring_takes_three_changes_to_show() -> None:
    (result,) = check(str(GALLERY / "equivalence_agreement.toml")).results
    assert result.facts["changes"] == "a+; b+; a-"


def test_the_lost_cover_is_named_by_its_term() -> None:
    _, result = check(str(GALLERY / "equivalence_level_select.toml")).results
    assert result.facts["lost_cover"] == "near & far"
    assert result.claim.endswith("has no hazard there, for its term near & far covers the change.")


def fundamental() -> list[str]:
    found = []
    for path in sorted(GALLERY.glob("*.toml")):
        spec = load(str(path))
        if spec.environment.mode == "fundamental" and spec.circuit.netlist.outputs:
            found.append(path.stem)
    return found


@pytest.mark.parametrize("name", fundamental())
def test_what_settles_without_a_race_is_equivalent_to_itself(name: str) -> None:
    path = str(GALLERY / f"{name}.toml")
    spec = comparison(path, path)
    asked = (Property("s", "settles"), Property("r", "race-free"), *spec.properties)
    whole = Specification(spec.path, spec.title, spec.circuit, spec.environment, asked, spec.spans)
    settles, races, itself = Session(whole, Settings()).results()
    if settles.verdict == "refuted":
        assert itself.verdict == "refuted"
    elif settles.verdict == races.verdict == "proved":
        assert itself.verdict == "proved", itself.claim
