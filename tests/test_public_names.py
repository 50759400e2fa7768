"""What `linverify` offers to importers, and that importing it costs nothing but itself."""

from __future__ import annotations

import subprocess
import sys

import linverify


def test_every_public_name_resolves() -> None:
    assert {name: getattr(linverify, name) for name in linverify.__all__}.keys() == set(linverify.__all__)
    assert dir(linverify) == sorted(linverify.__all__)


def test_importing_the_package_imports_nothing_heavy() -> None:
    code = "import sys, linverify; print(sorted({m.split('.')[0] for m in sys.modules} & {'numpy', 'scipy', 'pytest', 'yaml', 'pint', 'hypothesis'}))"  # noqa: E501
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
