"""The rig files and protocols that come with Haltere."""

from __future__ import annotations

import sysconfig
from pathlib import Path


def shipped_folder() -> Path:
    """`protocols/` beside the package in a checkout, else where the installer put it."""
    beside = Path(__file__).parents[1] / "protocols"
    if beside.is_dir():
        return beside
    return Path(sysconfig.get_path("data")) / "share" / "haltere" / "protocols"


def shipped_files() -> list[str]:
    """Names of the shipped files, without .toml."""
    return sorted(file.stem for file in shipped_folder().glob("*.toml"))


def find(name_or_path: str | Path) -> Path:
    """The file of that path, or else the shipped one of that name; the path itself if there is neither.

    A folder of that name (an earlier run's, say) does not hide the shipped file.
    """
    path = Path(name_or_path)
    if len(path.parts) > 1 or (path.exists() and not path.is_dir()):
        return path
    shipped = shipped_folder() / (path.name if path.suffix == ".toml" else f"{path.name}.toml")
    return shipped if shipped.is_file() else path
