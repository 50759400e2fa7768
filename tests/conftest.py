"""What all tests share: the fixture that runs pytest inside a test."""

from __future__ import annotations

from linverify.core.threads import one_thread

one_thread()  # as in every run of the gate; small matrices take many times longer with several threads
pytest_plugins = ["pytester"]
