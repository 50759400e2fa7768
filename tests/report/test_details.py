"""Details of checks as Markdown: known words in tables of their own, anything else readable and never an error."""

from __future__ import annotations

import math
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from linverify.report import forms
from linverify.report.details import ENTRIES, blocks
from linverify.report.forms import cell
from linverify.report.wire import plain, restored

SIGNALS = {"states": [["speed", "m/s"], ["angle", "rad"]], "inputs": [["thrust", "N"]], "outputs": [["height", "m"]]}
KEYS = st.text(max_size=8).filter(lambda key: not key.startswith("$"))
VALUES = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=60),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(KEYS, inner, max_size=3),
    max_leaves=10,
)
WORDS = st.sampled_from(
    ["states", "inputs", "outputs", "errors", "poles", "A", "B", "C", "D", "statistics", "smallest_visible", "x"]
)


def squeezed(text: str) -> list[list[str]]:
    """Cells of a grid, without its rule."""
    rows = [[part.strip() for part in line.strip("|").split("|")] for line in text.splitlines()]
    return [rows[0], *rows[2:]]


def test_trimmed_values_stand_in_the_plants_order_with_units() -> None:
    made = blocks({"inputs": {"thrust": 61000.0}, "states": {"angle": 0.05, "speed": 15.4333333}}, SIGNALS)
    assert len(made) == 1
    assert squeezed(made[0])[1:] == [
        ["speed", "state", "15.4333 m/s"],
        ["angle", "state", "0.05 rad"],
        ["thrust", "input", "61000 N"],
    ]


def test_trimmed_values_are_told_with_what_they_are_known_to() -> None:
    details = {"states": {"speed": 15.0, "angle": 0.05}, "errors": {"speed": 2.345e-9}}
    assert squeezed(blocks(details, SIGNALS)[0])[1:] == [
        ["speed", "state", "15 m/s", "2.3e-9 m/s"],
        ["angle", "state", "0.05 rad", "-"],
    ]


def test_trimmed_values_stand_in_the_unit_of_the_spec_with_the_plants_beside() -> None:
    details = {
        "states": {
            "speed": {"value": 30.0, "unit": "kn", "in_plant": {"value": 15.43333, "unit": "m/s"}},
            "angle": {"value": 0.05, "unit": "rad"},
        },
        "errors": {"speed": {"value": 0.0, "unit": "kn"}, "angle": {"value": 1.234e-9, "unit": "rad"}},
    }
    assert squeezed(blocks(details, SIGNALS)[0]) == [
        ["signal", "kind", "trimmed value", "in the plant's unit", "known to"],
        ["speed", "state", "30 kn", "15.4333 m/s", "-"],  # held: there is nothing to be known better
        ["angle", "state", "0.05 rad", "-", "1.2e-9 rad"],
    ]


def test_an_output_that_is_a_state_is_told_once() -> None:
    made = blocks({"states": {"speed": 15.0}, "outputs": {"speed": 15.0, "height": 0.9}}, SIGNALS)
    assert [row[:2] for row in squeezed(made[0])[1:]] == [["speed", "state"], ["height", "output"]]


@pytest.mark.parametrize(
    ("value", "shown"), [({"value": 3.0, "unit": "kn"}, "3 kn"), (3.0, "3"), (math.nan, "-"), ("free", "free")]
)
def test_values_may_bring_their_unit(value: object, shown: str) -> None:
    assert squeezed(blocks({"states": {"foreign": value}}, {})[0])[1] == ["foreign", "state", shown]


def test_eigenvalues_show_frequency_and_damping() -> None:
    pole = {
        "damping": 0.36,
        "natural_frequency": 2.2,
        "hertz": None,
        "imag": -2.1,
        "real": -0.8,
        "time_constant": 1.25,
        "slow": True,
    }
    caption, table = blocks({"poles": [pole]}, SIGNALS, "s")
    assert caption == "Eigenvalues of the local model, per s:"
    assert squeezed(table) == [
        ["eigenvalue", "natural frequency, rad/s", "frequency, Hz", "damping ratio", "time constant, s", "slow"],
        ["-0.8 - 2.1j", "2.2", "-", "0.36", "1.25", "yes"],
    ]


def test_eigenvalues_of_a_difference_equation_show_both_planes() -> None:
    poles = [
        {"real": -1.0, "imag": 0.0, "z_real": 0.9, "z_imag": 0.0},
        {"real": None, "imag": 3.0, "z_real": 0.0, "z_imag": -0.5},
        "at zero",
    ]
    assert squeezed(blocks({"poles": poles}, {})[1]) == [
        ["eigenvalue", "z"],
        ["-1", "0.9"],
        ["- + 3j", "0 - 0.5j"],
        ["at zero", "-"],
    ]


def test_matrices_carry_names_where_they_fit() -> None:
    found = {"A": [[0.0, 1.0], [-2.0, -3.0]], "B": [[1.0], [2.0]], "C": [[7.0]], "error_of_A": [[1e-9]]}
    note, caption, *made = blocks(found, SIGNALS, "s")
    assert note == ENTRIES
    assert caption == "A of the local model, rates of states by states:"
    assert squeezed(made[0]) == [
        ["", "speed (m/s)", "angle (rad)"],
        ["speed (m/s per s)", "0", "1"],
        ["angle (rad per s)", "-2", "-3"],
    ]
    assert squeezed(made[2]) == [["", "thrust (N)"], ["speed (m/s per s)", "1"], ["angle (rad per s)", "2"]]
    assert squeezed(made[4]) == [["", "1"], ["height (m)", "7"]]
    assert len(made) == 5


def test_entries_show_what_they_are_known_to() -> None:
    found = {"A": [[0.0, 1.0], [-2.0, -3.0]], "error_of_A": [[0.0, 1.23e-9], [2e-7, 0.0]]}
    _, caption, table = blocks(found, SIGNALS, "s", discrete=True)
    assert caption == "A of the local model, next states by states:"
    assert squeezed(table)[1:] == [
        ["speed (m/s)", "0", "1 +- 1.2e-9"],
        ["angle (rad)", "-2 +- 2e-7", "-3"],
    ]


def test_other_words_have_a_plain_form() -> None:
    made = blocks(
        {
            "random_drives": 300,
            "statistics": "a sentence that is longer than what fits well into a short cell",
            "exits": [{"signal": "a|b", "count": 2}],
            "seen": {"gain": 0.1},
            "corners": ["one", "two"],
            "empty": [],
            "error_90": [0.1, 0.2],
            "residuals": {"coil_current": 1e-9},
        },
        {},
    )
    text = "\n".join(made)
    assert "random drives" in made[0]
    assert "statistics: a sentence" in text
    assert "- one\n- two" in text
    assert r"a\|b" in text
    assert "empty" not in text
    assert squeezed(made[0])[1] == [forms.label("error_90"), "0.1, 0.2"]
    assert "coil_current" in text  # a name stays a name


def test_numbers_with_units_are_one_cell() -> None:
    (table,) = blocks({"accuracy": {"value": 6e-7, "unit": "nominal sizes per min"}}, {})
    assert squeezed(table)[1] == ["accuracy of the trim (largest scaled residual)", "6e-7 nominal sizes per min"]
    made = blocks({"integration": {"nodes": 8, "error_90": {"rms error of pitch": {"value": 2e-5, "unit": "deg"}}}}, {})
    assert squeezed(made[1])[1] == ["samples between two instants", "8"]
    assert squeezed(made[-1])[1] == ["rms error of pitch", "2e-5 deg"]


def test_cells() -> None:
    assert [cell(value) for value in (None, True, False, 0.1, "x", [1, 2], {"b_c": 1, "a": 2})] == [
        "-", "yes", "no", "0.1", "x", "1, 2", "a 2, b_c 1",
    ]  # fmt: skip


@settings(deadline=None, derandomize=True, max_examples=300)
@given(st.dictionaries(WORDS, VALUES, max_size=4))
def test_no_details_break_the_report(details: dict[str, Any]) -> None:
    told = restored(plain(details))
    assert all(isinstance(block, str) for block in blocks(told, SIGNALS, "s"))


def test_statistics_are_told_in_words() -> None:
    found = {"text": "0 of 59 random drives broke a band | 4.95 %.", "sampler": "steps and walks", "bound": 0.0495}
    assert blocks({"statistics": found}, {}) == [
        r"0 of 59 random drives broke a band \| 4.95 %.",
        "Sampler: steps and walks",
    ]


def test_what_drives_can_see_is_a_table() -> None:
    signals = {"height": {"gain": math.inf, "delay": 0.05}, "angle": {"gain": 0.125, "delay": math.inf}}
    (table,) = blocks({"smallest_visible": {"gain": 0.101, "delay": 0.0123456, "signals": signals}}, {}, "s")
    assert squeezed(table)[1:] == [
        ["all together", "10.1 %", "0.01235 s"],
        ["angle", "12.5 %", "none shows"],
        ["height", "none shows", "0.05 s"],
    ]
