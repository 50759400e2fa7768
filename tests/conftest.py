"""What all tests share: the fixture that runs pytest inside a test."""

from __future__ import annotations

pytest_plugins = ["pytester"]
