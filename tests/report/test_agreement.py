"""What `agrees` tells, as a reviewer reads it: every number with its unit, and nothing lost."""

from __future__ import annotations

import math

from linverify.report import agreement, details

UNITS = {"pitch": "rad", "flap": "rad", "height": "m", "thrust": "N"}


def table(word: str, rows: list[dict[str, object]]) -> list[list[str]]:
    """Cells of the one table that is made of `rows`, without the rule below its headers."""
    _, text = agreement.blocks({word: rows}, UNITS, "s")
    lines = [line for line in text.splitlines() if not set(line) <= set("|:-")]
    return [[cell.strip() for cell in line.strip("|").split("|")] for line in lines]


def test_claims_show_both_values_and_how_far_apart_they_are() -> None:
    row = {"signal": "pitch", "claimed": 0.0548, "trimmed": 0.0513, "unit": "rad", "nominal_sizes": 0.117}
    assert table("claimed_point", [row]) == [
        ["signal", "claimed", "trimmed", "off, of its nominal size"],
        ["pitch", "0.0548 rad", "0.0513 rad", "11.7 %"],
    ]


def test_entries_show_what_the_plant_is_known_to() -> None:
    row = {"entry": "A[q, u]", "delivered": 0.412, "plant": 0.397, "error": 2e-6, "unit": "1/(m s)", "share": 0.038}
    assert table("entries", [row])[1] == ["A\\[q, u\\]", "0.412", "0.397 +- 2e-6", "1/(m s)", "3.8 %"]


def test_responses_and_gains_have_units_of_output_per_input() -> None:
    row = {
        "input": "flap", "output": "height", "frequency": 2.5, "share": None, "error": 1e-9,
        "delivered_gain": 4.0, "plant_gain": 3.0, "delivered_phase": -90.0, "plant_phase": None,
    }  # fmt: skip
    cells = ["flap to height", "2.5 rad/s", "4 m per rad at -90 deg", "3 m per rad at -", "-"]
    assert table("response", [row])[1] == cells
    same = {"input": "flap", "output": "pitch", "delivered": 2.0, "plant": 1.5}
    assert table("static_gains", [same])[1] == ["flap to pitch", "2", "1.5"]


def test_poles_are_complex_numbers_and_an_unpaired_one_has_a_dash() -> None:
    rows = [
        {"delivered": {"real": -1.0, "imag": 2.0}, "plant": {"real": -3.0, "imag": 0.0}},
        {"delivered": None, "plant": None},
    ]
    assert table("poles_moved", rows)[1:] == [["-1 + 2j", "-3"], ["-", "-"]]


def test_the_split_of_an_error_names_its_parts() -> None:
    row = {
        "signal": "height", "kind": "peak", "total": -2.0, "nonlinearity": -1.5, "reduction": 0.0, "delivered": -0.5,
        "unit": "cm", "when": 3.0, "time_unit": "s", "drive": "abc",
    }  # fmt: skip
    assert table("error_split", [row])[1] == ["height (peak)", "-2 cm", "-1.5 cm", "0 cm", "-0.5 cm", "3 s"]


def test_what_has_another_form_stays_for_the_plain_one() -> None:
    rest = {"response": "not a table", "other": math.pi}
    assert agreement.blocks(rest, UNITS, "s") == []
    assert rest == {"response": "not a table", "other": math.pi}


def test_a_page_of_details_holds_them_once() -> None:
    made = "\n".join(
        details.blocks({"poles_moved": [{"delivered": {"real": -1.0, "imag": 0.0}, "plant": None}]}, {}, "h")
    )
    assert made.count("Poles, per h:") == 1
    assert "poles moved" not in made
