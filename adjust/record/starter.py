"""The small commented job that `brasscap start` writes."""

from __future__ import annotations

from importlib import resources
from pathlib import Path

from adjust.errors import OutputError


def write_starter(folder: str | Path) -> list[str]:
    """Copy the starter job into a new folder; returns the names of its files.

    Raises OutputError if the folder exists or cannot be made.
    """
    target = Path(folder)
    if target.exists():
        raise OutputError([f"{target}: is already there; name a new folder"])
    source = resources.files("adjust") / "starter"
    files = sorted((f for f in source.iterdir() if f.is_file()), key=lambda f: f.name)
    try:
        target.mkdir(parents=True)
        for file in files:
            (target / file.name).write_bytes(file.read_bytes())
    except OSError as error:
        raise OutputError([f"{target}: cannot be written: {error.strerror}"]) from None
    return [file.name for file in files]
