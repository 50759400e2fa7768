"""The mode table, participation, zeros, gains and rules as Markdown."""

from __future__ import annotations

from typing import Any

import pytest

from linverify.report import modal
from linverify.report.details import blocks

PAIR = {
    "real": -0.2, "imag": 1.98997, "error": 2.5e-9, "natural_frequency": 2.0, "hertz": 0.31831, "damping": 0.1,
    "time_constant": 5.0, "time_to_half": 3.46574, "period": 3.15742, "cycles_to_half": 1.09765,
    "participation": {"pitch": 0.52, "rate": 0.475, "speed": 0.005},
}  # fmt: skip
ORIGIN = {"real": 0.0, "imag": 0.0, "error": 0.0, "natural_frequency": 0.0, "hertz": 0.0, "at_origin": "yes",
          "told_together": 2, "participation": {"heading": 1.0, "pitch": 0.0}}  # fmt: skip
GROWING = {"real": 0.05, "imag": 0.0, "error": 1e-9, "natural_frequency": 0.05, "hertz": 0.00795775, "damping": -1.0,
           "time_to_double": 13.8629, "participation": {"speed": 1.0}}  # fmt: skip


def told(details: dict[str, Any]) -> str:
    return "\n\n".join(blocks(details, {}, "s"))


def row(text: str, start: str) -> list[str]:
    """Cells of the first row that begins with `start`, and of its header."""
    lines = text.splitlines()
    place = next(at for at, line in enumerate(lines) if line.startswith(f"| {start}"))
    return [cell.strip() for cell in lines[place].strip("|").split("|")]


def test_the_mode_table_has_a_row_for_every_mode() -> None:
    text = told({"modes": [ORIGIN, GROWING, PAIR]})
    assert "Modes of the local model, per s:" in text
    header = row(text, "mode ")
    pair = dict(zip(header, row(text, "-0.2 +- 1.99j"), strict=True))
    assert pair["natural frequency, rad/s"] == "2"
    assert (pair["damping ratio"], pair["period, s"], pair["time to half, s"]) == ("0.1", "3.157", "3.466")
    assert (pair["cycles to half"], pair["known to"], pair["time to double, s"]) == ("1.098", "2.5e-9", "-")
    growing = dict(zip(header, row(text, "0.05"), strict=True))
    assert (growing["time to double, s"], growing["period, s"], growing["time constant, s"]) == ("13.86", "-", "-")
    origin = dict(zip(header, row(text, "0 "), strict=True))
    assert origin["note"] == "at the origin, 2 poles told together"
    assert origin["damping ratio"] == "-"


def test_participation_names_the_states_that_matter() -> None:
    text = told({"modes": [ORIGIN, PAIR]}).split("Participation of states in modes:")[1]
    header = row(text, "mode ")
    assert set(header[1:]) == {"heading", "pitch", "rate"}  # half a per cent of speed tells nothing
    pair = dict(zip(header, row(text, "-0.2 +- 1.99j"), strict=True))
    assert (pair["pitch"], pair["rate"], pair["heading"]) == ("52 %", "47.5 %", "")
    assert modal.PARTICIPATION in text


def test_anonymous_states_have_no_participation() -> None:
    text = told({"modes": [{key: value for key, value in PAIR.items() if key != "participation"}]})
    assert "Participation" not in text


def test_discrete_poles_show_z() -> None:
    text = told({"modes": [{**PAIR, "z_real": 0.9, "z_imag": 0.2}, {"z_real": 0.0, "z_imag": 0.0}]})
    assert "0.9 + 0.2j" in text
    assert row(text, "at z = 0")


def test_lines_zeros_gains_and_rules() -> None:
    text = told(
        {
            "mode_lines": [{"line": "heave", "modes": ["pole -0.2 +- 1.99j"]}, {"line": "a.yaml:3:5", "modes": []}],
            "zeros": [
                {"inputs": ["flap"], "outputs": ["pitch"], "zeros": [{"real": 0.5, "imag": 0.0, "error": 1e-9}]},
                {"inputs": ["flap"], "outputs": ["speed"], "zeros": []},
            ],
            "gains_at_rest": [{"input": "flap", "output": "pitch", "gain": 1.25, "unit": "deg/deg"}],
            "rules": [{"rule": "phugoid_level_1", "meaning": "m", "source": "MIL", "caution": "from memory: check"}],
        }
    )
    assert row(text, "heave") == ["heave", "pole -0.2 +- 1.99j"]
    assert row(text, "a.yaml:3:5") == ["a.yaml:3:5", "none"]
    assert row(text, "flap to pitch") == ["flap to pitch", "0.5", "1e-9"]
    assert row(text, "flap to speed") == ["flap to speed", "none", "-"]
    assert "1.25 deg/deg" in text
    assert row(text, "phugoid_level_1")
    assert "from memory: check" in text


@pytest.mark.parametrize("odd", [{"modes": "none"}, {"modes": [1, 2]}, {"zeros": {"a": 1}}, {"rules": []}])
def test_data_of_another_form_is_shown_plainly(odd: dict[str, Any]) -> None:
    assert isinstance(told(odd), str)
