"""Importing the plant that a spec names: what is found, what is told, and that plants do not meet each other."""

from __future__ import annotations

import importlib
import sys
import textwrap
from pathlib import Path

import pytest

from linverify.core.errors import Place, Problem
from linverify.spec.layout import PlantRef
from linverify.spec.plants import Loaded, load_plant

PLACE = Place("ride.yaml", 2, 8)
PLANT = """
from linverify import Plant
{extra}
def dynamics(t, x, u, p):
    return {rate} * x
tank = Plant(states={{"level": "m"}}, inputs={{"inflow": "m^3/s"}}, dynamics=dynamics)
"""


def write(folder: Path, rate: str = "-1", extra: str = "", name: str = "plant.py") -> None:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / name).write_text(PLANT.format(rate=rate, extra=textwrap.dedent(extra)))


def file_ref(folder: Path, file: str = "plant.py", name: str = "tank") -> PlantRef:
    return PlantRef(file, "", name, folder, f"{file}:{name}", PLACE)


def loaded(ref: PlantRef, root: Path) -> Loaded:
    result = load_plant(ref, root)
    assert isinstance(result, Loaded), str(result)
    return result


def told(ref: PlantRef, root: Path) -> str:
    result = load_plant(ref, root)
    assert isinstance(result, Problem)
    return str(result)


def rate_of(result: Loaded) -> float:
    return float(result.plant.dynamics(0.0, 1.0, 0.0, {}))


def test_a_file_beside_the_spec(tmp_path: Path) -> None:
    write(tmp_path)
    result = loaded(file_ref(tmp_path), tmp_path)
    assert tuple(result.plant.states) == ("level",)
    assert result.files == (tmp_path / "plant.py",)


def test_the_same_file_is_loaded_once(tmp_path: Path) -> None:
    write(tmp_path)
    write(tmp_path / "other")
    assert (
        loaded(file_ref(tmp_path), tmp_path).plant
        is loaded(file_ref(tmp_path / "other", "../plant.py"), tmp_path).plant
    )


def test_a_changed_file_is_loaded_anew(tmp_path: Path) -> None:
    for rate in ("-1", "-2", "-3"):  # the same size within the same second
        write(tmp_path, rate)
        assert rate_of(loaded(file_ref(tmp_path), tmp_path)) == float(rate)


def test_two_files_of_one_name_do_not_meet(tmp_path: Path) -> None:
    for rate in ("-1", "-2"):
        write(tmp_path / rate, rate)
    assert [rate_of(loaded(file_ref(tmp_path / rate), tmp_path)) for rate in ("-1", "-2")] == [-1.0, -2.0]


def test_each_plant_finds_its_own_neighbours(tmp_path: Path) -> None:
    for rate in ("-3", "-4"):
        folder = tmp_path / rate
        write(folder, "aero.RATE", "import aero\nfrom parts.deep import SIZE")
        (folder / "aero.py").write_text(f"RATE = {rate}\n")
        (folder / "parts").mkdir()
        (folder / "parts" / "deep.py").write_text("SIZE = 1\n")
    before = (list(sys.path), set(sys.modules))
    results = [loaded(file_ref(tmp_path / rate), tmp_path) for rate in ("-3", "-4")]
    assert [rate_of(result) for result in results] == [-3.0, -4.0]
    names = [file.relative_to(tmp_path / "-3").as_posix() for file in results[0].files]
    assert names == ["plant.py", "aero.py", "parts/deep.py"]
    assert sys.path == before[0]
    assert {name for name in sys.modules if not name.startswith("linverify_plant_")} <= before[1]


def test_a_module_of_that_name_from_elsewhere_comes_back(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    foreign = type(sys)("aero")
    monkeypatch.setitem(sys.modules, "aero", foreign)
    write(tmp_path, "aero.RATE", "import aero")
    (tmp_path / "aero.py").write_text("RATE = -5\n")
    assert rate_of(loaded(file_ref(tmp_path), tmp_path)) == -5.0
    assert sys.modules["aero"] is foreign


def test_a_package_that_is_in_use_is_shared(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    package = tmp_path / "pack_in_use"
    package.mkdir()
    (package / "__init__.py").write_text("")
    (package / "later.py").write_text("RATE = -6\n")
    monkeypatch.syspath_prepend(str(tmp_path))
    in_use = importlib.import_module("pack_in_use")
    write(tmp_path, "later.RATE", "from pack_in_use import later")
    assert rate_of(loaded(file_ref(tmp_path), tmp_path)) == -6.0
    assert sys.modules["pack_in_use"] is in_use
    assert sys.modules.pop("pack_in_use.later") is in_use.later
    del sys.modules["pack_in_use"]


def test_dataclasses_in_a_plant_file_find_their_module(tmp_path: Path) -> None:
    extra = """
    from __future__ import annotations
    from dataclasses import dataclass
    @dataclass
    class Wing:
        area: float = 2.0
    """
    write(tmp_path, "Wing().area", extra)
    (tmp_path / "plant.py").write_text(
        (tmp_path / "plant.py").read_text().replace("from linverify import Plant", "", 1)
    )
    text = (tmp_path / "plant.py").read_text().replace("tank =", "from linverify import Plant\ntank =")
    (tmp_path / "plant.py").write_text(text)
    assert rate_of(loaded(file_ref(tmp_path), tmp_path)) == 2.0


def test_an_object_within_an_object(tmp_path: Path) -> None:
    write(tmp_path, extra="class box: pass")
    with (tmp_path / "plant.py").open("a") as file:
        file.write("box.tank = tank\n")
    assert loaded(file_ref(tmp_path, name="box.tank"), tmp_path).plant.states["level"] == "m"


def test_a_module_on_the_path_or_under_the_root(tmp_path: Path) -> None:
    write(tmp_path / "rig_of_the_root", name="plant_one.py")
    ref = PlantRef("", "rig_of_the_root.plant_one", "tank", tmp_path, "rig_of_the_root.plant_one:tank", PLACE)
    result = loaded(ref, tmp_path)
    assert result.files == (tmp_path / "rig_of_the_root" / "plant_one.py",)
    assert str(tmp_path) not in sys.path


@pytest.mark.parametrize(
    "source, name, message",
    [
        ("tank = nope\n", "tank", "plant.py line 1 raised NameError: name 'nope' is not defined"),
        ("x = 1\ntank = = 2\n", "tank", "plant.py line 2 is no Python: invalid syntax"),
        ("import sys\nsys.exit(3)\n", "tank", "plant.py line 2 raised SystemExit: 3"),
        (
            "import missing_neighbour\n",
            "tank",
            "plant.py line 1 raised ModuleNotFoundError: No module named 'missing_neighbour'",
        ),
        (
            "from linverify import Plant\nPlant(states={}, inputs={}, dynamics=abs)\n",
            "tank",
            "plant.py line 2 raised DefinitionError: a plant needs at least one state",
        ),
        ("tank = {}\n", "tank", "'tank' in plant.py is a dict, no Plant; plant.py holds no plant"),
        ("class tank: pass\n", "tank", "'tank' in plant.py is a class, no Plant; plant.py holds no plant"),
        (
            "class A:\n  @property\n  def b(self): raise ValueError('no')\na = A()\n",
            "a.b",
            "'a.b' in plant.py raised ValueError: no; a Plant is expected",
        ),
        (PLANT.format(rate=1, extra=""), "tnak", "plant.py has no 'tnak'; plant.py holds tank; did you mean 'tank'?"),
        (
            PLANT.format(rate=1, extra=""),
            "tank.size",
            "plant.py has no 'tank.size'; plant.py holds tank; did you mean 'tank'?",
        ),
        (
            PLANT.format(rate=1, extra=""),
            "dynamics",
            "'dynamics' in plant.py is a function, no Plant; plant.py holds tank",
        ),
    ],
)
def test_what_is_told_of_a_file_without_the_plant(tmp_path: Path, source: str, name: str, message: str) -> None:
    (tmp_path / "plant.py").write_text(source)
    assert told(file_ref(tmp_path, name=name), tmp_path) == f"ride.yaml:2:8: {message}"
    assert told(file_ref(tmp_path, name=name), tmp_path) == f"ride.yaml:2:8: {message}"  # the failure is kept, too


def test_a_missing_file(tmp_path: Path) -> None:
    write(tmp_path)
    expected = (
        "ride.yaml:2:8: there is no file 'plnt.py'; a path relative to this file is expected; did you mean 'plant.py'?"
    )
    assert told(file_ref(tmp_path, "plnt.py"), tmp_path) == expected
    assert not (tmp_path / "plnt.py").exists()


def test_an_unreadable_file_is_told(tmp_path: Path) -> None:
    (tmp_path / "plant.py").write_bytes(b"x = '\xff'\n")
    assert told(file_ref(tmp_path), tmp_path).startswith("ride.yaml:2:8: plant.py ")


@pytest.mark.parametrize(
    "module, source, message",
    [
        ("no_such_rig.plant", "", "there is no module 'no_such_rig'"),
        (
            "broken_rig",
            "import nothing_there\n",
            "module broken_rig raised ModuleNotFoundError: No module named 'nothing_there'",
        ),
        ("raising_rig", "1 / 0\n", "module raising_rig raised ZeroDivisionError: division by zero"),
    ],
)
def test_what_is_told_of_a_module(tmp_path: Path, module: str, source: str, message: str) -> None:
    if source:
        (tmp_path / f"{module}.py").write_text(source)
    ref = PlantRef("", module, "tank", tmp_path, f"{module}:tank", PLACE)
    assert told(ref, tmp_path) == f"ride.yaml:2:8: {message}"
