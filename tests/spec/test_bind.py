"""A spec bound to its plant: every quantity in the plant's units, every count made, every default stated."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Callable
from pathlib import Path

import pytest

from linverify.core.case import Amplitude, Band, Case, CheckAsk, Interval, Requirement, Setting, SlopeAsk
from linverify.core.errors import Place, SpecError
from linverify.spec import bind

PLANT = (Path(__file__).parent / "bad" / "plant.py").read_text(encoding="utf-8")
FULL = (Path(__file__).parent / "good" / "tank.yaml").read_text(encoding="utf-8")

Load = Callable[[str], tuple[Case, ...]]


@pytest.fixture
def load(tmp_path: Path) -> Load:
    """Writes a spec beside the plant, two folders below the root, and binds it."""
    folder = tmp_path / "specs" / "tank"
    folder.mkdir(parents=True)
    (folder / "plant.py").write_text(PLANT, encoding="utf-8")

    def loaded(text: str) -> tuple[Case, ...]:
        (folder / "level.yaml").write_text(text, encoding="utf-8")
        return bind.load(folder / "level.yaml", tmp_path)

    return loaded


@pytest.fixture
def half(load: Load) -> Case:
    return load(FULL)[0]


@pytest.fixture
def drift(load: Load) -> Case:
    return load(FULL)[1]


def about(values: dict[str, float]) -> object:
    return pytest.approx(values, rel=1e-12, abs=1e-12)


def test_cases_are_named_and_placed(load: Load) -> None:
    assert [(case.spec, case.point, case.title, case.place) for case in load(FULL)] == [
        ("specs/tank/level.yaml", "half", "A heated tank", Place("specs/tank/level.yaml", 16, 3)),
        ("specs/tank/level.yaml", "drift", "A heated tank", Place("specs/tank/level.yaml", 22, 3)),
    ]


def test_points_of_the_scale_are_temperatures(half: Case) -> None:
    assert dict(half.trim.hold) == about({"temperature": 76.85, "angle": math.pi / 6, "level": 1.0})
    assert half.envelope["temperature"] == Interval(5.0, math.inf)
    assert half.parameters == about({"area": 0.02, "ambient": 20.0})


def test_deviations_are_differences_of_temperatures(half: Case) -> None:
    fast = half.drive_set("fast")
    assert dict(fast.offsets) == about({"temperature": 1.0})
    assert fast.amplitude["pump"].until == ("temperature", pytest.approx(5.0))
    assert {band.signal: band.limit for band in half.bands if band.kind in ("rms", "wider_of")} == about(
        {"temperature": 0.5, "excess": 0.5}
    )


def test_times_are_in_the_time_unit_of_the_plant(half: Case) -> None:
    fast, slow = half.drives
    assert half.time == 120.0
    assert (fast.every, fast.intervals) == (pytest.approx(0.5 / 60.0), 120)
    assert (slow.every, slow.intervals, slow.horizon) == (1.0, 60, 60.0)
    assert fast.discerns_delay == pytest.approx(0.05)
    assert next(band.start for band in half.bands if band.signal == "level") == 0.5


def test_rates_are_per_time_unit_of_the_plant(half: Case, drift: Case) -> None:
    rpm_a_second = 2.0 * math.pi / 60.0 * 60.0
    assert dict(half.rate_limits) == about({"pump": rpm_a_second, "inflow": 3.6})
    assert dict(half.drive_set("fast").rate) == about({"inflow": 3.6, "pump": rpm_a_second, "heat": 60.0})
    assert dict(half.drive_set("slow").rate) == {}
    assert dict(drift.trim.rates) == about({"angle": 2.0 * math.pi})


def test_accuracy_is_per_second_and_becomes_one_per_time_unit(half: Case) -> None:
    assert half.trim.accuracy == pytest.approx(6e-8)


def test_unknowns_by_default_are_all_that_is_not_held(half: Case) -> None:
    assert half.trim.find == ("inflow", "heat", "pump")
    assert dict(half.trim.start) == about({"inflow": 3.6})
    assert half.trim.free == ()
    assert dict(half.trim.minimize) == {}


def test_unknowns_as_listed_come_in_the_order_of_the_plant(drift: Case) -> None:
    assert drift.trim.find == ("inflow", "heat", "pump")
    assert drift.trim.free == ("level",)
    assert dict(drift.trim.minimize) == {"pump": 2.0}
    assert drift.trim.hold["share"] == 40.0


def test_expectations(half: Case) -> None:
    expected = {name: (value.value, value.tolerance) for name, value in half.trim.expect.items()}
    assert expected == {
        "heat": (14.0, pytest.approx(0.28)),
        "excess": (330.0, pytest.approx(1.0)),
        "temperature": (76.85, pytest.approx(0.5)),
        "share": (50.0, 0.5),
    }
    assert half.trim.expect["heat"].place == Place("specs/tank/level.yaml", 19, 20)


def test_sets_of_drives(half: Case) -> None:
    fast, slow = half.drives
    assert fast.amplitude["inflow"] == Amplitude(pytest.approx(-3.6), pytest.approx(7.2))
    assert fast.amplitude["heat"] == Amplitude(-2.0, 2.0)  # the point's own
    assert slow.amplitude["heat"] == Amplitude(-0.5, 0.5)
    assert (slow.course, slow.shapes, slow.count, slow.search) == ("straight", ("ramp",), 59, 0)
    assert (fast.course, fast.count, fast.search, fast.discerns_gain) == ("held", 300, 150, 0.1)


def test_a_point_keeps_what_it_does_not_override(drift: Case) -> None:
    assert drift.drive_set("fast").amplitude["heat"] == Amplitude(-1.0, 1.0)
    assert drift.drive_set("fast").amplitude["inflow"].high == pytest.approx(7.2)


def test_bands(half: Case) -> None:
    told = [(band.signal, band.kind, band.drives, band.fraction) for band in half.bands]
    assert told[:2] == [
        ("level", "peak", None, pytest.approx(math.nan, nan_ok=True)),
        ("excess", "wider_of", None, 0.1),
    ]
    assert [band.kind for band in half.bands_for("slow")] == ["peak", "wider_of"]
    assert [band.kind for band in half.bands_for("fast")] == ["peak", "wider_of", "rms", "relative"]
    relative = half.bands[-1]
    assert (relative.fraction, math.isnan(relative.limit), relative.place.line) == (0.2, True, 41)
    assert all(isinstance(band, Band) for band in half.bands)


def test_checks_in_order(half: Case) -> None:
    assert [check.name for check in half.checks] == ["trims", "differentiable", "follows.fast", "follows.slow"]
    assert half.checks[0] == CheckAsk("trims", half.place)
    assert half.checks[2].place == half.drives[0].place


def test_requirements_name_the_checks_of_their_point(half: Case, drift: Case) -> None:
    text = "The level is predicted."
    assert half.requirements == (Requirement("R-1", text, "SSS 3", ("trims", "follows.fast")),)
    assert drift.requirements == (
        Requirement("R-1", text, "SSS 3", ("follows.fast",)),
        Requirement("R-2", "Trim exists.", "SSS 4", ("trims",)),
    )


def test_the_rest_of_the_spec(half: Case, tmp_path: Path) -> None:
    assert (half.exits.complete, half.exits.mismatch) == (0.8, "report")
    assert half.slopes == SlopeAsk(0.02, {"inflow": "up"})
    folder = tmp_path / "specs" / "tank"
    assert half.files == (folder / "level.yaml", folder / "plant.py")
    assert half.skipped == ""


def test_nominal_sizes_come_from_plant_envelope_or_one(half: Case) -> None:
    assert dict(half.nominal) == about(
        {
            "level": 2.25,
            "temperature": 1.0,
            "angle": 1.0,
            "inflow": 1.0,
            "heat": 3.0,
            "pump": 2.0 * math.pi,
            "excess": 1.0,
            "share": 1.0,
        }
    )
    for setting in (
        Setting("nominal.heat", "3 kW", "plant"),
        Setting("nominal.level", "2.25 m", "half the width of the envelope"),
        Setting("nominal.angle", "1 rad", "default of the language"),
    ):
        assert setting in half.settings


def test_the_effective_spec_tells_where_each_word_comes_from(half: Case, drift: Case) -> None:
    words = {setting.word: (setting.text, setting.origin) for setting in half.settings}
    assert words["trims.accuracy"] == ("1e-9", "specs/tank/level.yaml:12:19")
    assert words["parameters.area"] == ("200 cm^2", "specs/tank/level.yaml:4:20")
    assert words["parameters.ambient"] == ("293.15 K", "specs/tank/level.yaml:20:27")
    assert Setting("parameters.ambient", "20 degC", "plant") in drift.settings
    assert Setting("start.pump", "0 rad/s", "middle of the envelope") in drift.settings
    assert words["drives.fast.rate.pump"] == ("1 rpm/s", "specs/tank/level.yaml:9:42")
    assert words["drives.fast.rate.heat"] == ("1 kW/s", "specs/tank/level.yaml:33:18")
    assert len({setting.word for setting in half.settings}) == len(half.settings)


def test_pinned_drives_are_found_beside_the_spec(load: Load, tmp_path: Path) -> None:
    folder = tmp_path / "specs" / "tank" / "pinned"
    assert load(FULL)[0].drives[0].pinned == ()
    folder.mkdir()
    for name in ("b.json", "a.json", "a.txt"):
        (folder / name).write_text("{}")
    assert load(FULL)[0].drives[0].pinned == (folder / "a.json", folder / "b.json")


def test_values_of_a_case_cannot_be_changed(half: Case) -> None:
    with pytest.raises(TypeError):
        half.trim.hold["level"] = 2.0  # type: ignore[index]
    with pytest.raises(dataclasses.FrozenInstanceError):
        half.time = 3.0  # type: ignore[misc]


SWEPT = """\
linverify: 1
plant: plant.py:tank
envelope: {level: [0 m, 4 m]}
every_point: {hold: {temperature: 60 degC, angle: 0}}
operating_points:
  low:
    sweep: {level: {from: 100 cm, to: 2 m, count: 3}, area: [2 m^2, 4]}
    skip: ["low-2m-*"]
"""


def test_a_sweep_makes_one_case_a_combination(load: Load) -> None:
    cases = load(SWEPT.replace("to: 2 m", "to: 200 cm").replace("low-2m-*", "low-200cm-*"))
    assert [(case.point, case.trim.hold["level"], case.parameters["area"], case.skipped) for case in cases] == [
        ("low-100cm-2m2", 1.0, 2.0, ""),
        ("low-100cm-4", 1.0, 4.0, ""),
        ("low-150cm-2m2", 1.5, 2.0, ""),
        ("low-150cm-4", 1.5, 4.0, ""),
        ("low-200cm-2m2", 2.0, 2.0, "skipped by `skip: low-200cm-*`, specs/tank/level.yaml:8:12"),
        ("low-200cm-4", 2.0, 4.0, "skipped by `skip: low-200cm-*`, specs/tank/level.yaml:8:12"),
    ]
    assert all(case.trim.find == ("inflow", "heat", "pump") for case in cases)
    assert {case.family for case in cases} == {4}
    words = {setting.word: setting.text for setting in cases[2].settings}
    assert (words["hold.level"], words["parameters.area"]) == ("150 cm", "2 m^2")


def test_ends_of_a_sweep_in_two_units_convert(load: Load) -> None:
    cases = load(SWEPT.replace(", area: [2 m^2, 4]", "").replace('"low-2m-*"', "low-2m"))
    assert [(case.point, case.trim.hold["level"]) for case in cases] == [
        ("low-100cm", 1.0),
        ("low-150cm", 1.5),
        ("low-2m", 2.0),
    ]


def test_a_table_makes_one_case_a_row(load: Load, tmp_path: Path) -> None:
    table = tmp_path / "specs" / "tank" / "points.csv"
    table.write_text("level [cm],area\n100,2 m^2\n250,3\n")
    sweep = 'sweep: {level: {from: 100 cm, to: 2 m, count: 3}, area: [2 m^2, 4]}\n    skip: ["low-2m-*"]'
    cases = load(SWEPT.replace(sweep, "sweep: {table: points.csv}"))
    assert [(case.point, case.trim.hold["level"], case.parameters["area"]) for case in cases] == [
        ("low-100cm-2m2", 1.0, 2.0),
        ("low-250cm-3", 2.5, 3.0),
    ]
    assert cases[1].place == Place("specs/tank/points.csv", 3, 1)
    assert table in cases[0].files


COUNTER = """\
linverify: 1
plant: plant.py:counter
time: 60 ms
operating_points:
  rest: {hold: {speed: 0 m/s, position: 0 m}, rates: {position: free}}
  glide: {hold: {position: 0 m}, rates: {position: 2 m/s}}
drives: {horizon: 3 s, every: 40 ms, amplitude: {push: 1 N}}
error_bands: {position: {peak: 1 cm}}
"""


def test_a_difference_equation_counts_steps(load: Load) -> None:
    rest, glide = load(COUNTER)
    assert rest.time == 3.0
    assert (rest.drives[0].every, rest.drives[0].intervals) == (0.04, 75)
    assert dict(glide.trim.rates) == about({"position": 0.04})  # the change a step
    assert rest.trim.accuracy == 1e-8
    assert [check.name for check in rest.checks] == ["trims", "differentiable", "follows"]


@pytest.mark.parametrize(
    "hold, rest",
    [
        ("level: 1 m, temperature: 60 degC", "minimize: {angle: 1}, start: {angle: 0}"),
        ("level: 1 m, temperature: 60 degC", "find: [inflow, heat, pump], start: {angle: 0}"),
        ("level: 1 m, temperature: 60 degC, angle: 0, inflow: 1", "rates: {level: free}"),
        ("level: 1 m, temperature: 60 degC, share: 50", "minimize: {}"),
        ("excess: 40 K, share: 50, level: 1 m, temperature: 60 degC", "rates: {angle: free}"),
    ],
)
def test_counts_that_match(load: Load, hold: str, rest: str) -> None:
    text = f"linverify: 1\nplant: plant.py:tank\noperating_points:\n  low: {{hold: {{{hold}}}, {rest}}}\n"
    if rest == "minimize: {}":
        text = text.replace(", minimize: {}", "")
    (case,) = load(text)
    held_outputs = [name for name in case.trim.hold if name in ("excess", "share")]
    assert len(case.trim.find) >= 3 - len(case.trim.free) + len(held_outputs)


def test_defaults_beside_the_spec_are_part_of_it(load: Load, tmp_path: Path) -> None:
    shared = tmp_path / "specs" / "defaults.yaml"
    shared.write_text("envelope: {level: [0 m, 3 m]}\ntrims: {accuracy: 1e-6}\n")
    (case,) = load(
        "linverify: 1\nplant: plant.py:tank\ntrims: {accuracy: 1e-7}\n"
        "operating_points: {low: {hold: {level: 1 m, temperature: 60 degC, angle: 0}}}\n"
    )
    assert case.envelope["level"] == Interval(0.0, 3.0)
    assert case.trim.accuracy == pytest.approx(6e-6)
    assert shared in case.files
    words = {setting.word: setting.origin for setting in case.settings}
    assert words["envelope.level"] == "specs/defaults.yaml:1:19"
    assert words["trims.accuracy"] == "specs/tank/level.yaml:3:19"


def test_a_plant_that_cannot_be_had_is_told_with_the_mistakes_of_the_reader(load: Load) -> None:
    with pytest.raises(SpecError) as caught:
        load("linverify: 1\nplant: plant.py:tnak\ntitel: x\noperating_points: {low: {hold: {level: 1 m}}}\n")
    assert [problem.place.line for problem in caught.value.problems] == [2, 3]


def test_the_spec_is_shown_from_the_root(load: Load, tmp_path: Path) -> None:
    assert load(SWEPT.replace("to: 2 m", "to: 200 cm").replace("low-2m-*", "low-2*"))[0].spec == "specs/tank/level.yaml"
    (case, *_) = bind.load(tmp_path / "specs" / "tank" / "level.yaml", tmp_path / "specs")
    assert case.spec == "tank/level.yaml"
