"""Where the files that travel with the package are: species data and example scenarios.

In a checkout they lie beside the package; in an installed copy the build has put them inside it.
"""

from __future__ import annotations

from pathlib import Path

__all__ = ["scenario_folder", "species_data_folder"]

_PACKAGE = Path(__file__).resolve().parent


def species_data_folder() -> Path:
    """Folder of the species files and their index. Raises FileNotFoundError when it is not installed."""
    return _shipped("species_data", must_hold="README.md")


def scenario_folder() -> Path:
    """Folder of the example scenarios. Raises FileNotFoundError when it is not installed."""
    return _shipped("scenarios")


def _shipped(name: str, must_hold: str = "") -> Path:
    # Inside the package first: beside an installed copy may lie a stranger's folder of the same name.
    inside = _PACKAGE / "shipped" / name
    for folder in (inside, _PACKAGE.parent / name):
        if (folder / must_hold).exists():
            return folder
    raise FileNotFoundError(
        f"this installation lacks its folder {name!r} (looked for {inside}); install it again"
    )
