"""gridcool: where a reflective panel sends the most sunlight back out of the atmosphere."""

from __future__ import annotations

from typing import Any

__version__ = "0.1.0"
__all__ = ["__version__", "load_settings", "screen"]


def __getattr__(name: str) -> Any:
    """Load the public functions on first use, so that ``import gridcool`` stays light."""
    if name == "screen":
        from gridcool.parts import screen_dataset

        return screen_dataset
    if name == "load_settings":
        from gridcool.config import load_settings

        return load_settings
    raise AttributeError(f"module 'gridcool' has no attribute {name!r}")
