"""linverify: a gate for linear models of nonlinear plants.

Public names are resolved on first use, so that a test run which does not need them pays nothing for their import.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .core.plant import Plant as Plant

__version__ = "0.1.0"
__all__ = ["Plant", "__version__"]

_HOME = {"Plant": ".core.plant"}


def __getattr__(name: str) -> Any:
    if name in _HOME:
        return getattr(import_module(_HOME[name], __name__), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
