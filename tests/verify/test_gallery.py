"""The gallery: every file gives the verdicts that README.md speaks of."""

from __future__ import annotations

from pathlib import Path

import pytest

import settled.models.gallery
from settled.verify import check

GALLERY = Path(settled.models.gallery.__file__).parent
REFUTED: dict[str, set[str]] = {
    "clock_switch": set(),
    "clock_switch_plain": {"hazard-free"},
    "clock_switch_unruled": {"race-free"},
    "float_chatter": {"stable-states", "settles"},
    "level_latch": {"settles", "race-free", "hazard-free"},
    "level_latch_cured": set(),
    "sample_flip_flop": {"hazard-free", "essential-hazard-free"},
    "sample_flip_flop_isochronic": set(),
    "sample_flip_flop_wires": {"settles", "race-free"},
    "sluice_interlock": set(),
    "sluice_interlock_buttons": {"never both main contacts"},
    "wake_latch": set(),
    "wake_latch_unruled": {"settles", "race-free", "hazard-free"},
}


@pytest.mark.parametrize("name", REFUTED)
def test_verdicts(name: str) -> None:
    results = check(str(GALLERY / f"{name}.toml")).results
    assert {r.name for r in results if r.verdict == "refuted"} == REFUTED[name]
    assert {r.verdict for r in results} <= {"proved", "refuted"}
    assert not any(r.vacuous for r in results)


def test_every_file_has_its_row_in_the_readme() -> None:
    readme = (Path(__file__).resolve().parents[2] / "README.md").read_text()
    for path in GALLERY.glob("*.toml"):
        assert f"| `{path.stem}` |" in readme, path.stem
