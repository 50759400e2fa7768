"""Bad specs: one file a mistake, and beside it the whole text that its writer is told.

A new mistake needs `NAME.yaml` and `NAME.txt` in the folder `bad`; places in the text count from that folder.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from linverify.core.errors import SpecError
from linverify.spec import bind

BAD = Path(__file__).parent / "bad"
SPECS = sorted(path for path in BAD.rglob("*.yaml") if path.name != "defaults.yaml")


@pytest.mark.parametrize("path", SPECS, ids=lambda path: path.relative_to(BAD).with_suffix("").as_posix())
def test_the_whole_text_is_told(path: Path) -> None:
    with pytest.raises(SpecError) as caught:
        bind.load(path, BAD)
    assert str(caught.value) == path.with_suffix(".txt").read_text(encoding="utf-8").rstrip("\n")


def test_every_text_belongs_to_a_spec() -> None:
    assert sorted(path.with_suffix(".yaml") for path in BAD.rglob("*.txt")) == SPECS


def test_there_are_many() -> None:
    assert len(SPECS) >= 40
