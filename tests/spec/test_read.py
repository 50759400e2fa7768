"""Nodes to a `Spec`: the whole language that is available, merging, sweeps, and where each value came from."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

from linverify.core.case import Setting
from linverify.core.errors import Place
from linverify.spec.layout import Entry, Quantity, Spec, matches
from linverify.spec.merge import BY_LANGUAGE
from linverify.spec.read import read
from linverify.spec.source import Block, Listing, Node, Scalar, parse
from linverify.spec.words import SPEC_WORDS, Row

LANGUAGE = Path(__file__).parent / "language"
WHOLE = (LANGUAGE / "whole.yaml").read_text(encoding="utf-8")
SHARED = (LANGUAGE / "shared.yaml").read_text(encoding="utf-8")
OVER = (LANGUAGE / "over.yaml").read_text(encoding="utf-8")
SMALL = "linverify: 1\nplant: plant.py:ferry\n"
TABLE = SMALL + "operating_points: {a: {sweep: {table: points.csv}}}\n"
POINT = "operating_points: {a: {hold: {speed: 30 kn}}}\n"


def spec_of(folder: Path, text: str, name: str = "ride.yaml") -> Spec:
    path = folder / name
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(text, encoding="utf-8")
    spec, problems = read(path, path.relative_to(folder).as_posix(), folder)
    assert problems == []
    assert spec is not None
    return spec


def place(text: str, piece: str, file: str = "ride.yaml") -> Place:
    """Where `piece`, which stands in `text` once, starts."""
    before, _ = text.split(piece)
    return Place(file, before.count("\n") + 1, len(before) - before.rfind("\n"))


def told(folder: Path, text: str, name: str = "ride.yaml") -> list[str]:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return [str(problem) for problem in read(path, name, folder)[1]]


TABLE_PLACE = place(TABLE, "points.csv")


def texts(entries: tuple[Entry[Quantity], ...]) -> dict[str, str]:
    return {entry.name: entry.value.text for entry in entries}


@pytest.fixture
def whole(tmp_path: Path) -> Spec:
    return spec_of(tmp_path, WHOLE)


def test_words_of_the_whole_spec(whole: Spec, tmp_path: Path) -> None:
    assert (whole.shown, whole.title) == ("ride.yaml", "Foilborne ride-height models")
    assert (whole.plant.file, whole.plant.object, whole.plant.folder) == ("plant.py", "ferry", tmp_path)
    assert whole.time == Quantity(0.0, "s", "0 s", place(WHOLE, "0 s\n"))
    assert (whole.complete, whole.mismatch, whole.accuracy, whole.slope_gap) == (0.8, "report", 1e-6, 0.1)
    assert [(entry.name, entry.value) for entry in whole.side] == [("reflux", "down")]
    assert whole.files == (tmp_path / "ride.yaml",)


def test_envelope_in_all_its_forms(whole: Spec) -> None:
    lines = {entry.name: entry.value for entry in whole.envelope}
    told = {
        name: tuple(side and side.text for side in (line.low, line.high, line.rate)) for name, line in lines.items()
    }
    assert told == {
        "speed": ("18 kn", "42 kn", None),
        "pitch": ("-6 deg", "6 deg", None),
        "heave": (None, "1", None),
        "fore_flap": ("-12 deg", "12 deg", "20 deg/s"),
    }
    assert lines["speed"].place == place(WHOLE, "[18 kn")


def test_a_point_is_complete_in_itself(whole: Spec) -> None:
    point = whole.points[0]
    assert (point.name, point.place) == ("kn30", place(WHOLE, "kn30:"))
    assert texts(point.hold) == {"speed": "30 kn", "ride_height": "0.9 m"}
    assert [word.text for word in point.find or ()] == ["pitch", "fore_flap", "aft_flap", "thrust"]
    assert (texts(point.start), point.start_place) == ({"pitch": "1 deg"}, place(WHOLE, "start:"))
    assert (texts(point.rates), [word.text for word in point.free]) == ({"altitude": "2 m/s"}, ["surge"])
    assert [(entry.name, entry.value) for entry in point.minimize] == [("aft_flap", 1.0)]
    assert texts(point.parameters) == {"mass": "43 t", "density": "1025"}
    thrust, pitch = (entry.value for entry in point.expect)
    assert (thrust.value.value, thrust.value.unit, thrust.tolerance.value) == (61.0, "kN", 2.0)
    assert thrust.tolerance.per_cent
    assert (pitch.value.value, pitch.tolerance.value, pitch.tolerance.per_cent) == (0.02, 0.001, False)


def test_a_set_of_drives(whole: Spec, tmp_path: Path) -> None:
    fast, slow = whole.points[1].drives
    assert (fast.name, fast.place) == ("fast", place(WHOLE, "fast:\n"))
    assert (fast.horizon.text, fast.every.text) == ("12 s", "50 ms")
    assert (fast.course, fast.count, fast.search) == ("straight", 100, 0)
    size, one_sided, until = (entry.value for entry in fast.amplitude)
    assert size.high is not None
    assert (size.low, size.high.text, size.until) == (None, "1.5 deg", None)
    assert one_sided.low is not None
    assert one_sided.high is not None
    assert (one_sided.low.text, one_sided.high.text) == ("0", "0.5 t/h")
    assert until.until is not None
    assert (until.low, until.high, until.until.name, until.until.value.text) == (None, None, "alpha", "2 deg")
    assert (texts(fast.rate), texts(fast.offsets)) == ({"fore_flap": "20 deg/s"}, {"pitch": "0.5 deg"})
    assert fast.discerns_delay is not None
    assert (fast.shapes, fast.discerns_gain, fast.discerns_delay.text) == (("step", "walk"), 0.1, "50 ms")
    assert [(word.text, word.folder) for word in fast.pinned] == [("pinned/*.json", tmp_path)]
    assert (slow.course, slow.count, slow.search, slow.discerns_gain, slow.pinned) == ("held", 300, 150, None, ())
    assert slow.shapes == ("step", "pulse", "doublet", "ramp", "sine", "sweep", "multisine", "walk")


def test_error_bands(whole: Spec) -> None:
    bands = {(band.drives, band.signal, band.kind): band for band in whole.points[1].bands}
    assert list(bands) == [
        (None, "ride_height", "peak"),
        (None, "ride_height", "rms"),
        (None, "ride_height", "relative"),
        (None, "pitch", "wider_of"),
        (None, "pitch", "final"),
        ("fast", "pitch_rate", "peak"),
    ]
    relative, wider = bands[None, "ride_height", "relative"], bands[None, "pitch", "wider_of"]
    assert (relative.limit, relative.fraction, relative.start) == (None, 0.2, None)
    assert wider.limit is not None
    assert wider.start is not None
    assert (wider.limit.text, wider.fraction, wider.start.text) == ("0.3 deg", 0.1, "0.2 s")
    assert wider.place == place(WHOLE, "[0.3 deg")
    assert wider.signal_place == place(WHOLE, "pitch: {wider_of")


def test_a_point_overrides_drives_and_bands_word_by_word(whole: Spec) -> None:
    point, other = whole.points
    sizes = [entry.value.high and entry.value.high.text for entry in point.drives[0].amplitude]
    assert sizes == ["1 deg", "0.5 t/h", None]
    assert point.drives[0].amplitude[1:] == other.drives[0].amplitude[1:]
    assert point.drives[0].horizon == other.drives[0].horizon
    assert point.drives[1] == other.drives[1]
    assert len(point.bands) == len(other.bands) + 1
    added = next(band for band in point.bands if (band.signal, band.kind) == ("pitch", "peak"))
    assert added.start == other.bands[3].start


def test_every_point_keeps_its_own_overrides(tmp_path: Path) -> None:
    points = "".join(
        f"  p{i}: {{drives: {{count: {i}}}, error_bands: {{pitch: {{peak: {i} deg}}}}}}\n" for i in range(1, 200)
    )
    drives = "drives: {horizon: 1 s, every: 1 s, offsets: {pitch: 1}}\nerror_bands: {pitch: {peak: 1 deg}}\n"
    spec = spec_of(tmp_path, SMALL + "operating_points:\n" + points + drives)
    for i, point in enumerate(spec.points, 1):
        assert point.drives[0].count == i
        limit = point.bands[0].limit
        assert limit is not None
        assert limit.text == f"{i} deg"
        told = {setting.word: setting.text for setting in point.settings}
        assert (told["drives.count"], told["error_bands.pitch.peak"]) == (str(i), f"{i} deg")


def test_what_the_user_wrote_is_printable_in_messages(tmp_path: Path) -> None:
    (problem,) = told(tmp_path, SMALL + 'operating_points: {a: {hold: {"\\a\\e[31m": [1]}}}\n')
    assert problem.isprintable()
    assert "`hold: \\x07\\x1b[31m`: a list is no value for this word" in problem


def test_cells_of_a_sweep_come_in_fixed_order_with_names_as_written(whole: Spec) -> None:
    cells = whole.points[1].cells
    combinations = [f"cruise-{speed}-{mass}" for speed in ("20kn", "30kn", "40kn") for mass in ("38t", "44t")]
    assert [cell.name for cell in cells] == combinations
    assert [cell.skipped and cell.skipped.text for cell in cells] == ["cruise-20kn-*"] * 2 + [None] * 4
    assert texts(cells[3].swept) == {"speed": "30 kn", "mass": "44 t"}
    assert cells[3].place == place(WHOLE, "cruise:")


def test_computed_values_have_the_six_digits_of_their_names(tmp_path: Path) -> None:
    text = SMALL + "operating_points: {a: {sweep: {speed: {from: 0 kn, to: 1 kn, count: 4}}}}\n"
    cells = spec_of(tmp_path, text).points[0].cells
    assert [cell.name for cell in cells] == ["a-0kn", "a-0.333333kn", "a-0.666667kn", "a-1kn"]
    assert [cell.swept[0].value.value for cell in cells] == [0.0, 0.333333, 0.666667, 1.0]


def test_characters_that_ids_cannot_hold_are_left_out_of_names(tmp_path: Path) -> None:
    text = SMALL + "operating_points: {climb: {sweep: {speed: [19.5 ft/s, -3], open: [5 %], mode: [1e3]}}}\n"
    names = [cell.name for cell in spec_of(tmp_path, text).points[0].cells]
    assert names == ["climb-19.5fts-5-1e3", "climb--3-5-1e3"]


def test_a_swept_value_takes_the_place_of_a_shared_hold(tmp_path: Path) -> None:
    text = SMALL + "every_point: {hold: {speed: 30 kn, pitch: 0}}\noperating_points: {a: {sweep: {speed: [20 kn]}}}\n"
    point = spec_of(tmp_path, text).points[0]
    assert texts(point.hold) == {"pitch": "0"}
    assert [setting.word for setting in point.settings] == ["sweep.speed", "hold.pitch"]


def test_a_table_makes_a_point_of_every_row(tmp_path: Path) -> None:
    rows = "# measured\nspeed [kn], mass ,pitch\n20,38 t,0.02\n\n  22.5 ,44 t,1e-3\n"
    (tmp_path / "points.csv").write_text(rows, encoding="utf-8-sig")
    spec = spec_of(tmp_path, TABLE)
    first, second = spec.points[0].cells
    assert (first.name, second.name) == ("a-20kn-38t-0.02", "a-22.5kn-44t-1e-3")
    assert [(entry.name, entry.value.value, entry.value.unit) for entry in second.swept] == [
        ("speed", 22.5, "kn"),
        ("mass", 44.0, "t"),
        ("pitch", 0.001, ""),
    ]
    assert second.place == Place("points.csv", 5, 1)
    assert second.swept[0].value.place == Place("points.csv", 5, 3)
    assert spec.files == (tmp_path / "ride.yaml", tmp_path / "points.csv")


@pytest.mark.parametrize(
    ("content", "expected"),
    [
        (b"", "points.csv:1:1: the table has no rows; a line of names and a line for each point are expected"),
        (b"speed\n", "points.csv:1:1: the table has no rows; a line of names and a line for each point are expected"),
        (b"speed\n\xff\n", f"{TABLE_PLACE}: `sweep: table`: the file 'points.csv' cannot be read as UTF-8 text"),
        (b"speed\n1,5\n", "points.csv:2:1: 2 values in this row; 1 are expected, as in the first line"),
        (b"speed\n010\n", "points.csv:2:1: `speed`: '010' is no number; write it without the leading zero"),
        (b"speed,\n1,2\n", "points.csv:1:7: '' is no name of a column; a name is expected, as in speed or speed [kn]"),
    ],
)
def test_mistakes_in_a_table_have_places_in_it(tmp_path: Path, content: bytes, expected: str) -> None:
    (tmp_path / "points.csv").write_bytes(content)
    assert told(tmp_path, TABLE) == [expected]


def test_a_folder_is_no_table(tmp_path: Path) -> None:
    (tmp_path / "points.csv").mkdir()
    (problem,) = told(tmp_path, TABLE)
    assert problem == f"{TABLE_PLACE}: `sweep: table`: the file 'points.csv' cannot be read"


def test_requirements(whole: Spec) -> None:
    (requirement,) = whole.requirements
    assert (requirement.name, requirement.source) == ("RH-12", "SSS-4 3.2")
    assert requirement.text == "Ride height is predicted within 4 cm."
    assert [word.text for word in requirement.checks] == ["kn30.follows.fast", "cruise-*.trims"]


def test_a_small_spec_stays_small(tmp_path: Path) -> None:
    spec = spec_of(tmp_path, SMALL + POINT)
    assert (spec.title, spec.time, spec.envelope, spec.requirements) == ("", None, (), ())
    assert (spec.complete, spec.mismatch, spec.accuracy, spec.slope_gap) == (0.9, "fail", 1e-8, 0.05)
    point = spec.points[0]
    assert (point.find, point.start_place, point.drives, point.bands) == (None, None, (), ())
    assert [cell.name for cell in point.cells] == ["a"]
    assert spec.check_names(point) == ("trims", "differentiable")


def test_check_names(whole: Spec, tmp_path: Path) -> None:
    assert whole.check_names(whole.points[0]) == ("trims", "differentiable", "follows.fast", "follows.slow")
    one = "drives: {horizon: 1 s, every: 1 s, offsets: {pitch: 1}}\nerror_bands: {pitch: {peak: 1}}\n"
    spec = spec_of(tmp_path, SMALL + POINT + one)
    assert spec.check_names(spec.points[0]) == ("trims", "differentiable", "follows")
    assert spec.points[0].drives[0].place == Place("ride.yaml", 4, 1)


@pytest.mark.parametrize(
    ("plant", "parts"),
    [
        ("plant.py:ferry", ("plant.py", "", "ferry")),
        ("../models/plant.py:box.ferry", ("../models/plant.py", "", "box.ferry")),
        ("package.module:ferry", ("", "package.module", "ferry")),
        ('"C:\\\\m\\\\plant.py:ferry"', ("C:\\m\\plant.py", "", "ferry")),
    ],
)
def test_plants_are_files_or_modules(tmp_path: Path, plant: str, parts: tuple[str, str, str]) -> None:
    ref = spec_of(tmp_path, f"linverify: 1\nplant: {plant}\n" + POINT).plant
    assert (ref.file, ref.module, ref.object) == parts


@pytest.mark.parametrize(
    "plant", ["plant.py", "ferry", ":ferry", "plant.py:", "plant.py:2", "a b:ferry", "plant.py:f()"]
)
def test_what_names_no_plant_is_refused(tmp_path: Path, plant: str) -> None:
    (problem,) = told(tmp_path, f"linverify: 1\nplant: '{plant}'\n" + POINT)
    assert problem.startswith(f"ride.yaml:2:8: `plant`: {plant!r} names no object in a file; ")


def test_defaults_are_merged_word_by_word_and_keep_their_places(tmp_path: Path) -> None:
    (tmp_path / "defaults.yaml").write_text(SHARED, encoding="utf-8")
    spec = spec_of(tmp_path, OVER, "foil/ride.yaml")
    point = spec.points[0]
    assert spec.files == (tmp_path / "foil" / "ride.yaml", tmp_path / "defaults.yaml")
    assert (spec.plant.file, spec.plant.folder) == ("models/plant.py", tmp_path)
    assert texts(point.parameters) == {"mass": "40 t", "density": "1025"}
    lines = {e.name: [s and s.text for s in (e.value.low, e.value.high, e.value.rate)] for e in spec.envelope}
    assert lines == {"pitch": ["-6 deg", "5 deg", None], "flap": ["-2", "2", "3"], "speed": ["18 kn", "42 kn", None]}
    assert (spec.complete, spec.mismatch) == (0.8, "report")
    assert texts(point.hold) == {"pitch": "0", "speed": "30 kn"}
    assert [word.text for word in point.find or ()] == ["flap"]
    drives = point.drives[0]
    assert (drives.horizon.text, drives.every.text, drives.count) == ("6 s", "50 ms", 50)
    thrust = next(entry.value.until for entry in drives.amplitude if entry.name == "thrust")
    assert thrust is not None
    assert thrust.name == "pitch"
    limits = [(band.kind, band.limit and band.limit.text) for band in point.bands]
    assert limits == [("peak", "2 deg"), ("rms", "0.5 deg")]
    origins = {setting.word: setting.origin for setting in (*spec.settings, *point.settings)}
    assert origins["error_bands.pitch.peak"] == str(place(OVER, "2 deg}}\nevery", "foil/ride.yaml"))
    assert origins["error_bands.pitch.rms"] == str(place(SHARED, "0.5 deg", "defaults.yaml"))
    assert origins["drives.horizon"] == str(place(OVER, "6 s", "foil/ride.yaml"))
    assert origins["drives.every"] == str(place(SHARED, "50 ms", "defaults.yaml"))
    assert origins["drives.search"] == BY_LANGUAGE
    assert origins["envelope.pitch.min"] == str(place(SHARED, "-6 deg", "defaults.yaml"))
    assert origins["exits.complete"] == str(place(SHARED, "80 %", "defaults.yaml"))
    assert origins["trims.accuracy"] == BY_LANGUAGE


def test_the_nearest_defaults_win_and_stop_at_the_root(tmp_path: Path) -> None:
    root = tmp_path / "root"
    (root / "deep" / "er").mkdir(parents=True)
    (tmp_path / "defaults.yaml").write_text("title: outside, and broken: [", encoding="utf-8")
    (root / "defaults.yaml").write_text("plant: a.py:far\ntime: 1 s\ntrims: {accuracy: 1e-5}\n", encoding="utf-8")
    (root / "deep" / "defaults.yaml").write_text("plant: b.py:near\ntime: 2 s\n", encoding="utf-8")
    (root / "deep" / "er" / "defaults.yaml").write_text("# nothing shared here\n", encoding="utf-8")
    spec = spec_of(root, "linverify: 1\ntime: 3 s\n" + POINT, "deep/er/ride.yaml")
    assert (spec.plant.file, spec.plant.folder, spec.accuracy) == ("b.py", root / "deep", 1e-5)
    assert spec.time is not None
    assert spec.time.text == "3 s"
    assert [path.parent for path in spec.files[1:]] == [root / "deep" / "er", root / "deep", root]


def test_a_mistake_in_defaults_is_told_even_where_the_spec_overrides_it(tmp_path: Path) -> None:
    (tmp_path / "defaults.yaml").write_text("time: 1:30\ndrives: {count: -1}\n", encoding="utf-8")
    assert told(tmp_path, SMALL + "time: 0 s\n" + POINT)[0].startswith("defaults.yaml:1:7: `time`: '1:30' is no number")


def test_settings_tell_every_word_with_its_place(tmp_path: Path) -> None:
    drives = "drives:\n  fast: {horizon: 2 s, every: 1 s, offsets: {pitch: 3}}\n"
    text = SMALL + POINT + drives + "error_bands: {fast: {pitch: {wider_of: [1, 5 %]}}}\n"
    spec = spec_of(tmp_path, text)
    assert spec.settings == (
        Setting("plant", "plant.py:ferry", str(place(text, "plant.py"))),
        Setting("time", "0 s", BY_LANGUAGE),
        Setting("exits.complete", "90 %", BY_LANGUAGE),
        Setting("exits.mismatch", "fail", BY_LANGUAGE),
        Setting("trims.accuracy", "1e-8", BY_LANGUAGE),
        Setting("local_models.source", "derive", BY_LANGUAGE),
        Setting("differentiable.slope_gap", "5 %", BY_LANGUAGE),
    )
    assert spec.points[0].settings == (
        Setting("hold.speed", "30 kn", str(place(text, "30 kn"))),
        Setting("drives.fast.horizon", "2 s", str(place(text, "2 s"))),
        Setting("drives.fast.every", "1 s", str(place(text, "1 s"))),
        Setting("drives.fast.offsets.pitch", "3", str(place(text, "3}}"))),
        Setting("drives.fast.course", "held", BY_LANGUAGE),
        Setting("drives.fast.shapes", "[step, pulse, doublet, ramp, sine, sweep, multisine, walk]", BY_LANGUAGE),
        Setting("drives.fast.count", "300", BY_LANGUAGE),
        Setting("drives.fast.search", "150", BY_LANGUAGE),
        Setting("error_bands.fast.pitch.wider_of", "[1, 5 %]", str(place(text, "[1, 5"))),
    )


def test_a_spec_with_mistakes_still_offers_what_could_be_read(tmp_path: Path) -> None:
    path = tmp_path / "ride.yaml"
    path.write_text(SMALL + "operating_points: {a: {hold: {speed: 30 kn, pitch: one}}}\n", encoding="utf-8")
    spec, problems = read(path, "ride.yaml", tmp_path)
    assert spec is not None
    assert texts(spec.points[0].hold) == {"speed": "30 kn", "pitch": ""}
    assert math.isnan(spec.points[0].hold[1].value.value)  # its name is still judged
    assert len(problems) == 1


def test_no_word_is_ever_passed_over(tmp_path: Path) -> None:
    """Every word of the language, misspelt where it stands, is told."""
    language = {row.word for row in rows_of(SPEC_WORDS)}
    found = [match for match in re.finditer(r"\b[a-z_]+(?=:)", WHOLE) if match.group() in language]
    assert len(found) > 60
    for match in found:
        text = WHOLE[: match.start()] + "q" + WHOLE[match.start() :]
        assert any(f"'q{match.group()}'" in problem for problem in told(tmp_path, text)), match.group()


def test_no_value_is_ever_passed_over(tmp_path: Path) -> None:
    """Every value of a valid spec, replaced by what no word takes, is told at its place."""
    whole, _ = parse(WHOLE.encode(), "ride.yaml")
    assert whole is not None
    free = {"title", "text", "source", "find", "pinned"}  # texts and names, which are free
    values = [scalar for word, scalar in scalars_of("", whole) if word not in free]
    assert len(values) > 60
    lines = WHOLE.split("\n")
    for value in values:
        changed = list(lines)
        before = changed[value.place.line - 1]
        at = value.place.column - 1
        length = len(value.text) + (0 if value.plain else 2)
        changed[value.place.line - 1] = before[:at] + "0x1F" + before[at + length :]
        assert any(problem.startswith(f"{value.place}: ") for problem in told(tmp_path, "\n".join(changed))), value


def scalars_of(word: str, node: Node) -> Iterator[tuple[str, Scalar]]:
    if isinstance(node, Block):
        for key, value in node.entries:
            yield from scalars_of(key.text, value)
    elif isinstance(node, Listing):
        for item in node.items:
            yield from scalars_of(word, item)
    elif isinstance(node, Scalar):
        yield word, node


def rows_of(rows: tuple[Row, ...]) -> Iterator[Row]:
    for row in rows:
        yield row
        yield from rows_of(row.of)


def test_a_missing_file_is_a_problem(tmp_path: Path) -> None:
    spec, problems = read(tmp_path / "gone.yaml", "gone.yaml", tmp_path)
    assert spec is None
    assert [str(each) for each in problems] == ["gone.yaml:1:1: the file cannot be read: No such file or directory"]


def test_reading_twice_gives_the_same(whole: Spec, tmp_path: Path) -> None:
    assert spec_of(tmp_path, WHOLE) == whole


@pytest.mark.parametrize(
    ("pattern", "name", "fits"),
    [
        ("kn30.trims", "kn30.trims", True), ("kn30", "kn30.trims", False), ("*.trims", "a.b.trims", True),
        ("*", "", True),
        ("a*a", "a", False), ("a*a", "aa", True), ("a*b*c", "axbyc", True), ("a*b*c", "ac", False), ("**", "x", True),
        ("*a*a*", "xay", False), ("[ab]", "a", False), ("a?", "ab", False), ("*-38t*", "c-20kn-38t.trims", True),
    ],
)  # fmt: skip
def test_patterns(pattern: str, name: str, fits: bool) -> None:
    assert matches(pattern, name) is fits
