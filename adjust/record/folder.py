"""The record's folder: written beside the old one and swapped in by renames, so that it is whole or not there.

    out ──rename──> old sibling          a new sibling holds every file before anything is moved;
    new sibling ──rename──> out          what stands in ``out`` at any moment is one whole record
    old sibling removed                  (between the two renames, for an instant, none)

A folder is replaced only if it is empty or holds our record and nothing else; files are removed by name, never a tree.
What has happened is read from the disk and not from variables, because an interrupt may fall between a rename and the
line that would note it.
"""

from __future__ import annotations

import contextlib
import json
import os
import secrets
from collections.abc import Iterator, Mapping
from pathlib import Path

from adjust.errors import OutputError

RECORD_FILES = frozenset(
    {"record.json", "record.html", "stations.csv", "observations.csv", "drawing.svg", "drawing.png", "drawing.pdf"}
)
"""Every file name a record may hold; a folder with any other entry is not ours to replace."""


def check_out(out: Path) -> None:
    """Raise OutputError unless ``out`` can be made, or is a folder that may be replaced."""
    place = _real(out)
    with _in_words(out):
        if not place.exists():
            _check_parent(place, out)
        elif not place.is_dir():
            raise OutputError([f"{out} is a file; give the record a folder of its own with --out"])
        else:
            _check_replaceable(place, out)
            _check_parent(place, out)


def write_record(files: Mapping[str, bytes], out: Path) -> None:
    """Write the files (name: content) as the folder ``out``, replacing an older record there as a whole.

    Missing parents are created. Raises OutputError, leaving everything as it was, where ``out`` may not be replaced
    or cannot be written; an interrupt leaves the old or the new record, and no temporary folder.
    """
    strange = sorted(set(files) - RECORD_FILES)
    if strange:
        raise ValueError(f"not a file of the record: {', '.join(strange)}")
    check_out(out)
    place = _real(out)
    token = secrets.token_hex(8)
    new, old = (place.parent / f".brasscap-{token}.{what}" for what in ("new", "old"))
    with _in_words(out), _parents(place.parent):
        try:
            _fill(new, files)
            _swap(new, old, place, out)
        finally:
            _tidy(new, old, place)


def _real(out: Path) -> Path:
    """Where ``out`` really is: a link keeps pointing at the record, so the folder behind it is the one replaced."""
    return Path(os.path.realpath(out))


@contextlib.contextmanager
def _in_words(out: Path) -> Iterator[None]:
    """Say an error of the system as one sentence about the folder."""
    try:
        yield
    except OSError as error:
        why = error.strerror or str(error)
        sentence = f"{out} cannot be written ({why}); nothing there was changed: make room or choose another --out"
        raise OutputError([sentence]) from error


@contextlib.contextmanager
def _parents(parent: Path) -> Iterator[None]:
    """Make the missing parents; take those made away again when the record does not come to stand in them."""
    missing = [folder for folder in (parent, *parent.parents) if not folder.exists()]
    try:
        if missing:
            parent.mkdir(parents=True, exist_ok=True)
        yield
    except BaseException:
        for folder in missing:
            with contextlib.suppress(OSError):
                folder.rmdir()  # only ever an empty folder, and only one that was not there before
        raise


def _check_parent(place: Path, out: Path) -> None:
    """The nearest parent that exists must be a folder in which we may write."""
    parent = next(folder for folder in place.parents if folder.exists())
    if not parent.is_dir():
        raise OutputError([f"{out} would lie inside {parent}, which is a file; choose another --out"])
    if not os.access(parent, os.W_OK | os.X_OK):
        raise OutputError([f"{out} cannot be written: no permission in {parent}; choose another --out"])


def _check_replaceable(place: Path, out: Path) -> None:
    names = sorted(os.listdir(place))
    if not names:
        return
    for name in names:
        if name not in RECORD_FILES or (place / name).is_symlink() or not (place / name).is_file():
            raise OutputError(
                [f"{out} also holds {name}, which is no part of a record; move it or choose another --out"]
            )
    if not _is_record(place / "record.json"):
        raise OutputError([f"{out} holds files but no Brasscap record; empty it or choose another --out"])
    if not os.access(place, os.W_OK | os.X_OK):
        raise OutputError([f"{out} cannot be replaced: no permission to remove its files; choose another --out"])


def _is_record(path: Path) -> bool:
    try:
        value = json.loads(path.read_bytes())
    except (FileNotFoundError, ValueError, RecursionError):  # absent, not UTF-8 JSON, or nested beyond reason
        return False
    return isinstance(value, dict) and "brasscap" in value and "format" in value


def _fill(folder: Path, files: Mapping[str, bytes]) -> None:
    """Make the folder with all files, on the disk before anything is renamed."""
    os.mkdir(folder)
    for name in sorted(files):
        with open(folder / name, "xb") as stream:
            stream.write(files[name])
            stream.flush()
            os.fsync(stream.fileno())


def _swap(new: Path, old: Path, place: Path, out: Path) -> None:
    if place.exists():
        os.rename(place, old)
        _check_replaceable(old, out)  # once more: a file may have come in since, and nobody can reach it now
    os.rename(new, place)


def _tidy(new: Path, old: Path, place: Path) -> None:
    """Bring back the old record if no new one stands, and remove the siblings."""
    if old.exists() and not place.exists():
        os.rename(old, place)
    for folder in (new, old):
        if folder.exists():
            _remove(folder)


def _remove(folder: Path) -> None:
    for name in sorted(RECORD_FILES & set(os.listdir(folder))):
        os.unlink(folder / name)
    os.rmdir(folder)
