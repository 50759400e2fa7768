"""README.md says what is so: its example runs as shown, and its table of the language is the one in the code.

After a change of the language, `python -m tests.test_readme` writes the table anew.
"""

from __future__ import annotations

import re
import shutil
from pathlib import Path

import pytest

import linverify
from linverify.spec.words import reference

README = Path(__file__).parents[1] / "README.md"
BEGIN = "<!-- language: made by linverify.spec.words, checked by tests/test_readme.py -->\n"
END = "<!-- end of language -->\n"
BLOCK = re.compile(r"```(\w+)\n(.*?)```", re.DOTALL)


def language_table() -> str:
    """The reference table; the words of `every_point` are those of a point and are not repeated."""
    lines = ["| word | what stands behind it | default | meaning |", "| --- | --- | --- | --- |"]
    for word, behind, default, meaning in reference():
        if not word.startswith("every_point."):
            behind = behind.replace("nothing in this version", "not available in this version")
            meaning = meaning.replace("|", "\\|")  # of |G|, which would end a cell
            lines.append(f"| `{word}` | {behind} | {default} | {meaning} |")
    return "\n".join(lines) + "\n"


def with_table(text: str) -> str:
    """README's text with the table as the code has it."""
    before, after = text.split(BEGIN)[0], text.split(END)[1]
    return f"{before}{BEGIN}{language_table()}{END}{after}"


def blocks(language: str) -> list[str]:
    return [body for found, body in BLOCK.findall(README.read_text(encoding="utf-8")) if found == language]


def shape(line: str) -> str:
    """A line without its figures, digests and spacing: what must not depend on the processor."""
    line = re.sub(r"\b[0-9a-f]{12}\b", "DIGEST", line)
    line = re.sub(r"[-+]?\d+(\.\d+)?(e[-+]?\d+)?", "N", line)
    return re.sub(r"[\s-]+", " ", line).strip(" =")


def test_the_table_of_the_language_is_that_of_the_code() -> None:
    text = README.read_text(encoding="utf-8")
    assert with_table(text) == text


def test_every_public_name_is_in_readme() -> None:
    text = README.read_text(encoding="utf-8")
    assert [name for name in linverify.__all__ if name not in text and not name.startswith("__")] == []


@pytest.fixture
def rinse(pytester: pytest.Pytester) -> pytest.Pytester:
    folder = pytester.mkdir("rinse")
    (folder / "plant.py").write_text(blocks("python")[0], encoding="utf-8")
    (folder / "level.yaml").write_text(blocks("yaml")[0], encoding="utf-8")
    return pytester


def change(pytester: pytest.Pytester, file: str, old: str, new: str) -> None:
    path = pytester.path / "rinse" / file
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new), encoding="utf-8")


def assert_shown(printed: str, block: str) -> None:
    """Every line of a README block was printed, figures apart; wrapped lines are compared as one text."""
    flat = shape(" ".join(printed.split()))
    for line in block.splitlines():
        # a slow machine says in between that a check is still running, which breaks pytest's line of dots
        if (wanted := shape(line)) and "%]" not in line:
            assert wanted in flat, line


def test_the_first_run_is_as_shown(rinse: pytest.Pytester) -> None:
    result = rinse.runpytest_subprocess("--linverify", "rinse/")
    assert result.ret == 0
    assert_shown(result.stdout.str(), blocks("text")[0])


def test_a_tighter_requirement_fails_as_shown(rinse: pytest.Pytester) -> None:
    change(rinse, "level.yaml", "peak: 12 cm", "peak: 4 cm")
    result = rinse.runpytest_subprocess("--linverify", "rinse/")
    assert result.ret == 1
    assert_shown(result.stdout.str(), blocks("text")[1])


def test_a_changed_plant_fails_as_shown(rinse: pytest.Pytester) -> None:
    change(rinse, "plant.py", "(0.0021,", "(0.0017,")
    result = rinse.runpytest_subprocess("--linverify", "rinse/", "-k", "trims")
    assert result.ret == 1
    assert_shown(result.stdout.str(), blocks("text")[2])
    assert_shown(result.stdout.str(), blocks("text")[3])


def test_the_plant_change_is_stopped_as_shown(pytester: pytest.Pytester) -> None:
    shutil.copytree(README.parent / "specs" / "foil_ferry", pytester.path / "specs" / "foil_ferry")
    before, after = (line[1:] for line in blocks("diff")[0].splitlines())
    plant = pytester.path / "specs" / "foil_ferry" / "plant.py"
    text = plant.read_text(encoding="utf-8")
    assert before.strip() in text
    plant.write_text(text.replace(before.strip(), after.strip()), encoding="utf-8")
    result = pytester.runpytest_subprocess("--linverify", "specs/foil_ferry", "-k", "kn24 and agrees")
    assert result.ret == 1
    assert_shown(result.stdout.str(), blocks("text")[4])


@pytest.fixture
def looped(rinse: pytest.Pytester) -> pytest.Pytester:
    """The tank with the loop around it."""
    (text,) = [block for block in blocks("yaml") if "Level loop of the rinse tank" in block]
    (rinse.path / "rinse" / "loop.yaml").write_text(text, encoding="utf-8")
    return rinse


def test_the_loop_passes_as_shown(looped: pytest.Pytester) -> None:
    result = looped.runpytest_subprocess("--linverify", "rinse/loop.yaml")
    assert result.ret == 0
    assert_shown(result.stdout.str(), blocks("text")[5])


def test_a_later_measurement_fails_as_shown(looped: pytest.Pytester) -> None:
    change(looped, "loop.yaml", "delay: 10 s", "delay: 60 s")
    result = looped.runpytest_subprocess("--linverify", "rinse/loop.yaml", "-k", "margins")
    assert result.ret == 1
    assert_shown(result.stdout.str(), blocks("text")[6])


def test_a_turned_sign_fails_as_shown(looped: pytest.Pytester) -> None:
    change(looped, "loop.yaml", "kp: -2", "kp: 2")
    change(looped, "loop.yaml", "ki: -0.4", "ki: 0.4")
    result = looped.runpytest_subprocess("--linverify", "rinse/loop.yaml", "-k", "margins")
    assert result.ret == 1
    assert_shown(result.stdout.str(), blocks("text")[7])


if __name__ == "__main__":
    README.write_text(with_table(README.read_text(encoding="utf-8")), encoding="utf-8")
