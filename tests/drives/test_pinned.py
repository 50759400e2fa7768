"""Drive files: exact round trip, whole or not at all, and clear words on what cannot be used."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from declared_sets import limits

from linverify.core.drive import Drive
from linverify.core.errors import DriveFileError
from linverify.drives import pinned

DRIVE = limits().drive(np.random.default_rng(4).normal(size=(24, 2)), {"pitch": 0.1})


def test_a_drive_comes_back_to_the_last_bit(tmp_path: Path) -> None:
    path = pinned.write(tmp_path / "evidence", DRIVE, {"item": "a::b::follows"})
    back, about = pinned.read(path)
    assert path.name == f"{DRIVE.digest}.json"
    assert back.digest == DRIVE.digest
    assert np.array_equal(back.values, DRIVE.values)
    assert about["item"] == "a::b::follows"
    assert [one.name for one in path.parent.iterdir()] == [path.name]


def test_the_same_finding_gives_the_same_bytes(tmp_path: Path) -> None:
    first = pinned.write(tmp_path, DRIVE, {"b": 1, "a": 2}, "first").read_bytes()
    second = pinned.write(tmp_path, DRIVE, {"a": 2, "b": 1}, "second").read_bytes()
    assert first == second


def test_what_cannot_be_written_leaves_nothing_behind(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="JSON"):
        pinned.write(tmp_path, DRIVE, {"worst": float("nan")})
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    "text, words",
    [
        ("{", "is no JSON"),
        ("[1]", "the word 'linverify_drive' is missing"),
        ('{"linverify_drive": 9}', "has format 9; this version reads format 1"),
        ('{"linverify_drive": 1}', "holds no usable drive"),
        (
            '{"linverify_drive": 1, "drive": {"every": 1, "inputs": ["f"], "course": "held", "values": [[NaN]]}}',
            "finite",
        ),
        ('{"linverify_drive": 1, "drive": {"every": 1, "inputs": ["f"], "course": "bent", "values": [[1]]}}', "course"),
    ],
)
def test_a_broken_file_is_named_with_what_is_wrong(tmp_path: Path, text: str, words: str) -> None:
    path = tmp_path / "old.json"
    path.write_text(text)
    with pytest.raises(DriveFileError, match=r"^old\.json: ") as caught:
        pinned.read(path)
    assert words in str(caught.value)


def test_a_missing_file_is_an_error_of_ours(tmp_path: Path) -> None:
    with pytest.raises(DriveFileError, match=r"^gone\.json: cannot be read"):
        pinned.read(tmp_path / "gone.json")


def test_names_that_are_gone_and_strangers_are_told_with_what_to_do() -> None:
    names = (("flap", "reflux"), ("pitch", "speed"))
    assert pinned.misfits("a.json", DRIVE, limits(), *names) == ()
    old = Drive(0.1, ("flaps",), np.zeros((24, 1)), offsets={"trim": 1.0})
    assert pinned.misfits("a.json", old, limits(), *names) == (
        "pinned drive a.json: the plant has no input 'flaps', did you mean 'flap'?; rename it in the file or remove "
        "the file",
        "pinned drive a.json: the plant has no state 'trim'; rename it in the file or remove the file",
    )
    large = Drive(0.1, ("flap",), np.full((24, 1), 2.0))
    assert pinned.misfits("a.json", large, limits(), *names) == (
        "pinned drive a.json: flap goes from +2 to +2 about trim; the set allows -1.5 to +1; "
        "widen the set or remove the file",
    )


def test_a_drive_of_one_input_is_fitted_into_the_set() -> None:
    alone = Drive(0.1, ("reflux",), np.full((24, 1), 0.5))
    fitted = pinned.fitted(alone, limits())
    assert fitted.inputs == ("flap", "reflux")
    assert fitted.values[3].tolist() == [0.0, 0.5]
