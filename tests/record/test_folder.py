"""The record's folder: whole or not there, and only ever over our own record."""

from __future__ import annotations

import errno
import os
import resource
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from adjust.errors import OutputError
from adjust.record import folder
from adjust.record.folder import check_out, write_record

OLD = {"record.json": b'{"brasscap": "0.1.0", "format": 1}', "stations.csv": b"old"}
NEW = {"record.json": b'{"brasscap": "0.1.0", "format": 1, "new": true}', "record.html": b"<p>", "drawing.png": b"\x89"}


def contents(place: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in place.iterdir()}


def siblings(place: Path) -> list[str]:
    return sorted(path.name for path in place.parent.iterdir() if path != place)


@pytest.fixture
def old(tmp_path: Path) -> Path:
    """A folder with an older record."""
    place = tmp_path / "job" / "record"
    place.parent.mkdir()
    write_record(OLD, place)
    return place


def sentence(error: pytest.ExceptionInfo[OutputError]) -> str:
    assert len(error.value.sentences) == 1
    return error.value.sentences[0]


def test_a_new_folder_with_missing_parents(tmp_path: Path) -> None:
    out = tmp_path / "a" / "b" / "record"
    write_record(NEW, out)
    assert contents(out) == NEW
    assert siblings(out) == []


def test_an_older_record_is_replaced_as_a_whole(old: Path) -> None:
    write_record(NEW, old)
    assert contents(old) == NEW
    assert siblings(old) == []


def test_an_empty_folder_is_used(tmp_path: Path) -> None:
    write_record(NEW, tmp_path / "x")
    (tmp_path / "empty").mkdir()
    write_record(NEW, tmp_path / "empty")
    assert contents(tmp_path / "empty") == NEW


def test_the_folder_has_ordinary_permissions(tmp_path: Path) -> None:
    write_record(NEW, tmp_path / "record")
    (tmp_path / "ordinary").mkdir()
    assert (tmp_path / "record").stat().st_mode == (tmp_path / "ordinary").stat().st_mode


def test_a_link_keeps_pointing_at_the_record(old: Path, tmp_path: Path) -> None:
    link = tmp_path / "link"
    link.symlink_to(old)
    write_record(NEW, link)
    assert link.is_symlink()
    assert contents(old) == NEW


@pytest.mark.parametrize("call", [check_out, lambda out: write_record(NEW, out)], ids=["check_out", "write_record"])
class TestRefused:
    def refuse(self, call: Callable[[Path], None], out: Path) -> str:
        before = sorted(str(path) for path in out.parent.rglob("*"))
        with pytest.raises(OutputError) as error:
            call(out)
        assert sorted(str(path) for path in out.parent.rglob("*")) == before
        return sentence(error)

    def test_a_file(self, call: Callable[[Path], None], tmp_path: Path) -> None:
        (tmp_path / "out").write_text("mine")
        assert "out is a file" in self.refuse(call, tmp_path / "out")
        assert (tmp_path / "out").read_text() == "mine"

    def test_inside_a_file(self, call: Callable[[Path], None], tmp_path: Path) -> None:
        (tmp_path / "out").write_text("mine")
        assert "which is a file" in self.refuse(call, tmp_path / "out" / "record")

    def test_a_foreign_file_beside_a_record(self, call: Callable[[Path], None], old: Path) -> None:
        (old / "notes.txt").write_text("mine")
        assert "also holds notes.txt" in self.refuse(call, old)
        assert (old / "notes.txt").read_text() == "mine"

    def test_a_folder_named_like_a_file_of_the_record(self, call: Callable[[Path], None], old: Path) -> None:
        (old / "drawing.pdf").mkdir()
        assert "also holds drawing.pdf" in self.refuse(call, old)

    def test_a_link_named_like_a_file_of_the_record(self, call: Callable[[Path], None], old: Path) -> None:
        (old / "drawing.pdf").symlink_to(old / "record.json")
        assert "also holds drawing.pdf" in self.refuse(call, old)

    @pytest.mark.parametrize(
        "text", [b"[]", b"{}", b'{"format": 1}', b"not json", b"\xff\xfe\x00", b"[" * 100_000, b'"brasscap format"']
    )
    def test_a_record_json_of_another_program(self, call: Callable[[Path], None], tmp_path: Path, text: bytes) -> None:
        out = tmp_path / "out"
        out.mkdir()
        (out / "record.json").write_bytes(text)
        assert "no Brasscap record" in self.refuse(call, out)
        assert (out / "record.json").read_bytes() == text

    def test_our_tables_without_a_record(self, call: Callable[[Path], None], tmp_path: Path) -> None:
        out = tmp_path / "out"
        out.mkdir()
        (out / "stations.csv").write_text("station\nP1\n")
        assert "no Brasscap record" in self.refuse(call, out)

    def test_a_parent_without_permission(
        self, call: Callable[[Path], None], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        # simulated: tests may run as root, whom no permission stops
        monkeypatch.setattr(folder.os, "access", lambda path, mode: Path(path) != tmp_path)
        assert "no permission" in self.refuse(call, tmp_path / "out")


def test_check_out_accepts_what_write_record_accepts(old: Path, tmp_path: Path) -> None:
    check_out(old)
    check_out(tmp_path / "not" / "yet")
    assert not (tmp_path / "not").exists()


def test_names_outside_the_record_are_refused(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match=r"\.\./evil"):
        write_record({"../evil": b""}, tmp_path / "record")
    assert list(tmp_path.iterdir()) == []


def test_a_full_disk_leaves_the_old_record(old: Path) -> None:
    """A real failure of the system: the limit on file size stops the write half way."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (1000, hard))
    try:
        with pytest.raises(OutputError) as error:
            write_record({**NEW, "drawing.png": b"x" * 5000}, old)
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))
    assert "File too large" in sentence(error)
    assert contents(old) == OLD
    assert siblings(old) == []


def test_made_parents_are_taken_away_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(_: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(folder.os, "fsync", full)
    with pytest.raises(OutputError) as error:
        write_record(NEW, tmp_path / "a" / "b" / "record")
    assert "No space left on device" in sentence(error)
    assert list(tmp_path.iterdir()) == []


Call = Callable[..., Any]
STEPS = ("mkdir", "fsync", "rename", "unlink", "rmdir")
"""The calls that change the disk."""


def failing(
    real: Callable[..., Any], state: dict[str, int], at: int, error: BaseException, after: bool
) -> Callable[..., Any]:
    """The call, which fails once, the ``at``-th time any step is taken, before or after doing its work."""

    def call(*args: Any, **more: Any) -> Any:
        state["count"] += 1
        mine = state["count"] == at
        if mine and not after:
            raise error
        result = real(*args, **more)
        if mine:
            raise error
        return result

    return call


def run_with_failure(old: Path, monkeypatch: pytest.MonkeyPatch, at: int, error: BaseException, after: bool) -> int:
    """Write over the old record with one failing step; the number of steps taken."""
    state = {"count": 0}
    with monkeypatch.context() as patch:
        for name in STEPS:
            patch.setattr(folder.os, name, failing(getattr(os, name), state, at, error, after))
        try:
            write_record(NEW, old)
        except (OutputError, KeyboardInterrupt):
            pass
        else:
            assert state["count"] < at
    return state["count"]


def test_any_step_may_fail(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Whichever step fails or is interrupted, a whole record stands, and before the swap it is the old one."""
    seen = set()
    for kind in (OSError(errno.EIO, "Input/output error"), KeyboardInterrupt()):
        for after in (False, True) if isinstance(kind, KeyboardInterrupt) else (False,):
            for at in range(1, 99):
                old = tmp_path / f"{type(kind).__name__}-{after}-{at}" / "record"
                write_record(OLD, old)
                if run_with_failure(old, monkeypatch, at, kind, after) < at:
                    break
                now = contents(old)
                assert now in (OLD, NEW), f"step {at} left {sorted(now)}"
                seen.add("new" if now == NEW else "old")
                if at <= 1 + len(NEW):
                    assert now == OLD
                    assert siblings(old) == []
            assert at > 8  # the new folder, three files, two renames, the old files and folder
    assert seen == {"new", "old"}


def test_an_interrupt_between_the_renames_brings_the_old_record_back(
    old: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    steps_before = 1 + len(NEW)  # the new folder and its files
    with monkeypatch.context() as patch:
        state = {"count": 0}
        for name in STEPS:
            patch.setattr(
                folder.os, name, failing(getattr(os, name), state, steps_before + 1, KeyboardInterrupt(), True)
            )
        with pytest.raises(KeyboardInterrupt):
            write_record(NEW, old)
    assert contents(old) == OLD
    assert siblings(old) == []


def test_a_file_that_comes_in_at_the_last_moment_is_not_lost(old: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    real = os.rename

    def rename(source: Path, target: Path) -> None:
        if source == old:
            (old / "late.txt").write_text("mine")
        real(source, target)

    monkeypatch.setattr(folder.os, "rename", rename)
    with pytest.raises(OutputError) as error:
        write_record(NEW, old)
    assert "late.txt" in sentence(error)
    assert contents(old) == {**OLD, "late.txt": b"mine"}
    assert siblings(old) == []
