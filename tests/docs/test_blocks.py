"""Every code block of README, DEVELOPERS and docs runs, and prints what the page says it prints."""

from __future__ import annotations

import os
from collections.abc import Iterator
from itertools import zip_longest
from pathlib import Path

import pytest

from tests.docs.blocks import ROOT, Block, blocks, faults, in_words, run, run_literally, runs, session

PAGES = [ROOT / "README.md", ROOT / "DEVELOPERS.md", *sorted((ROOT / "docs").rglob("*.md"))]
LITERAL = ROOT / "docs" / "tutorial.md"


def name(path: Path) -> str:
    return path.relative_to(ROOT).as_posix()


def text(path: Path) -> str:
    return path.read_text("utf-8")


ELSEWHERE = ROOT / "docs" / "mathematics"
"""Its worked examples run in tests/docs/test_mathematics.py."""
RUNNING = [p for p in PAGES if any(map(runs, blocks(text(p)))) and p != LITERAL and p.parent != ELSEWHERE]
STALE = "prints something else now; run python -m tests.docs.refresh, and read what changed"


@pytest.mark.parametrize("page", PAGES, ids=name)
def test_every_block_says_what_it_is(page):
    assert faults(name(page), text(page)) == []


def test_the_worked_examples_that_do_not_run_here_run_there():
    assert not ELSEWHERE.exists() or (Path(__file__).parent / "test_mathematics.py").exists()


def compared(page: list[Block], outcomes: Iterator[tuple[int, str]]) -> int:
    """Compare what blocks did with what the page shows after them; nothing shown means done, and nothing printed."""
    shown = 0
    for block, following in zip_longest(page, page[1:]):
        if runs(block) or block.mark.startswith("file "):
            wanted = (following.exit_code, following.text) if following and following.prints else (0, "")
            assert in_words(*next(outcomes)) == in_words(*wanted), f"block at line {block.line}: {STALE}"
            shown += wanted != (0, "")
    return shown


@pytest.mark.parametrize("page", RUNNING, ids=name)
def test_blocks_run_and_print_what_the_page_shows(page, tmp_path):
    found = blocks(text(page))
    with session(tmp_path):
        assert compared(found, (run(b) for b in found if runs(b) or b.mark.startswith("file "))) > 0


def test_the_tutorial_typed_literally_into_a_shell(tmp_path):
    """One shell, the command on the path as the README's set-up leaves it, nothing from this process."""
    page = blocks(text(LITERAL))
    with session(tmp_path):
        outcomes = iter(run_literally(page))
        assert compared(page, outcomes) >= 8
        assert next(outcomes, None) is None


BAD = {
    "```\nx\n```": "without language",
    "```yaml\nx\n```": "a block `yaml`",
    "```text\nx\n```": "a block `text`",
    "<!-- prints -->\n```text\nx\n```": "no block that runs",
    "<!-- tests -->\n```sh\nx\n```": ".ci/run has no step",
    "<!-- part of networks/access-road/job.toml -->\n```toml\ntitle = 1\n```": "not in that file",
    "<!-- piece -->\n```toml\n[tests]\nconfidnce = 0.9\n```": "confidnce",
    "```csv\na,b\n```": "a block `csv`",
    "```python\nprint(1)\n```\n\nand\n\n```text\n1\n```": "a block `text`",
}


@pytest.mark.parametrize("bad", BAD)
def test_a_block_that_could_drift_is_refused(bad):
    (fault,) = faults("docs/page.md", bad)
    assert BAD[bad] in fault


def test_output_right_after_a_program_needs_no_mark():
    page = blocks("```python\nprint(1)\n```\n\n```text\n1\n```")
    assert compared(page, iter([(0, "1\n")])) == 1
    with pytest.raises(AssertionError, match="line 1"):
        compared(page, iter([(0, "2\n")]))


def test_the_runner_keeps_folder_code_and_both_streams(tmp_path):
    def sh(line: str) -> tuple[int, str]:
        return run(Block(1, "sh", "", line, 3))

    with session(tmp_path):
        assert sh("mkdir -p ~/a/b\ncd ~/a/b") == (0, "")
        assert Path(os.getcwd()) == tmp_path / "a" / "b"
        assert sh("echo one; echo two >&2; false") == (1, "one\ntwo\n")
        assert sh("brasscap start job") == sh("rm -r job\nbrasscap start job")
        code, out = sh("brasscap check nowhere")
        assert code == 2
        assert "no such folder" in out
        assert run(Block(1, "python", "", "print(6 * 7)", 3)) == (0, "42\n")
        literal = run_literally([Block(1, "sh", "", t, 3) for t in ("cd ..; printf x", "pwd; exit_code=3; (exit 3)")])
        assert literal == [(0, "x\n"), (3, f"{tmp_path}/a\n\n")]
