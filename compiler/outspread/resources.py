"""Finds the files that travel with the program: schema/, templates/ and models/; it does not read them.

A wheel carries these folders inside the package; an editable install or a plain checkout has them at the
top of the repository. Both look the same from here.
"""

from __future__ import annotations

from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path

_REPOSITORY = Path(__file__).resolve().parents[2]


def resource(folder: str, *names: str) -> Traversable:
    """The file or folder `folder/names...`, for example `resource("schema", "model-1.schema.json")`.

    Raises FileNotFoundError, naming the folder, where the installation lacks it.
    """
    packaged = files("outspread").joinpath(folder)
    found: Traversable = packaged if packaged.is_dir() else _REPOSITORY / folder
    if not found.is_dir():
        raise FileNotFoundError(f"this installation of outspread lacks its folder {folder!r}")
    for name in names:
        found = found.joinpath(name)
    return found


def read_text(folder: str, *names: str) -> str:
    """The text of a shipped file (UTF-8)."""
    return resource(folder, *names).read_text(encoding="utf-8")
