"""Imports go down: which layer may import which, read from the source and held against the rule."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "linverify"
LAYERS = ("core", "numerics", "drives", "spec", "checks", "report", "derive", "run", "cli", "pytest_plugin")
MAY_IMPORT: dict[str, set[str]] = {
    "core": set(),
    "numerics": {"core"},
    "drives": {"core", "numerics"},
    "spec": {"core"},
    "checks": {"core", "numerics", "drives"},
    "report": {"core"},
    "provenance": {"core", "report"},
    "derive": {"core", "spec", "checks"},  # a study makes the models, the formats are those that specs read
    "run": {"core", "spec", "checks", "report", "provenance"},
    "cli": {"core", "spec", "checks", "report", "run", "derive", "provenance"},
    "pytest_plugin": {"core", "spec", "checks", "report", "run", "provenance"},
    "__init__": {"core"},
    "__main__": {"cli"},
}
# third-party packages beyond numpy, by module or folder
THIRD_PARTY: dict[str, set[str]] = {
    "core/units.py": {"pint"},
    "numerics": {"scipy"},
    "drives/search.py": {"hypothesis"},
    "spec/source.py": {"yaml"},
    "spec/write_binary.py": {"scipy"},  # scipy.io writes MAT files
    "report": {"tabulate"},
    "report/plots.py": {"matplotlib"},
    "pytest_plugin": {"pytest", "xdist"},
    "provenance.py": {"scipy", "pytest", "hypothesis", "pint", "yaml"},
}
GUARDED = {"scipy", "pytest", "_pytest", "xdist", "hypothesis", "yaml", "pint", "tabulate", "matplotlib"}
MODULES = sorted(PACKAGE.rglob("*.py"))


def layer_of(path: Path) -> str:
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def imported(path: Path) -> tuple[set[str], set[str]]:
    """Layers of ours and guarded third-party packages that a module imports anywhere, late imports included."""
    ours, theirs = set(), set()
    package = ("linverify", *path.relative_to(PACKAGE).parts[:-1])
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        names: list[str] = []
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            base = package[: len(package) - node.level + 1] if node.level else ()
            stem = ".".join([*base, *([node.module] if node.module else [])])
            names = [f"{stem}.{alias.name}" for alias in node.names]
        for name in names:
            parts = name.split(".")
            if parts[0] == "linverify":
                if len(parts) > 1 and parts[1] in MAY_IMPORT:
                    ours.add(parts[1])
            elif parts[0] in GUARDED:
                theirs.add(parts[0])
    return ours, theirs


@pytest.mark.parametrize("path", MODULES, ids=lambda path: path.relative_to(PACKAGE).as_posix())
def test_imports_go_down(path: Path) -> None:
    layer = layer_of(path)
    ours, theirs = imported(path)
    assert ours <= MAY_IMPORT[layer] | {layer}
    where = path.relative_to(PACKAGE).as_posix()
    allowed = set().union(*(names for key, names in THIRD_PARTY.items() if where == key or where.startswith(key + "/")))
    assert theirs <= allowed


def test_the_rule_sees_a_forbidden_import(tmp_path: Path) -> None:
    source = "from ..checks import study\nimport hypothesis\n"
    tree = ast.parse(source)
    assert any(isinstance(node, ast.ImportFrom) and node.level == 2 for node in ast.walk(tree))
    target = PACKAGE / "core" / "units.py"  # any module two levels deep resolves `..` alike
    package = ("linverify", *target.relative_to(PACKAGE).parts[:-1])
    assert package[: len(package) - 2 + 1] == ("linverify",)


def foreign_privates(source: str) -> list[str]:
    """Names with a leading underscore that a module takes from our other modules, or from objects of other classes."""
    tree = ast.parse(source)
    own = {node.attr for node in ast.walk(tree) if isinstance(node, ast.Attribute) and _on_itself(node)}
    own |= {node.name for node in ast.walk(tree) if isinstance(node, ast.FunctionDef)}
    found = []
    for node in ast.walk(tree):
        if isinstance(node, ast.ImportFrom) and node.level:
            found += [alias.name for alias in node.names if _is_private(alias.name)]
        elif isinstance(node, ast.Attribute) and _is_private(node.attr) and node.attr not in {*own, "_replace"}:
            found.append(node.attr)
    return found


def _on_itself(node: ast.Attribute) -> bool:
    return isinstance(node.value, ast.Name) and node.value.id in ("self", "cls")


def _is_private(name: str) -> bool:
    return name.startswith("_") and not name.endswith("__")


def test_private_names_stay_inside_their_module() -> None:
    found = {path.name: names for path in MODULES if (names := foreign_privates(path.read_text(encoding="utf-8")))}
    assert found == {}
    assert foreign_privates("from .closed import _largest\nfrom . import fine\nx = fine._around(1)\n") == [
        "_largest", "_around",
    ]  # fmt: skip


def test_no_module_outgrows_its_cap() -> None:
    long = {path.name: count for path in MODULES if (count := len(path.read_text(encoding="utf-8").splitlines())) > 400}
    assert long == {}
