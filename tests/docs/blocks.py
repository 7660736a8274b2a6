"""Code blocks of the Markdown pages: found, run in order, compared with what the page prints.

A mark is an HTML comment on the line before the fence. What a block may be:

| language | mark | meaning |
|---|---|---|
| sh, python | none | runs, in the order of the page, in one folder that holds a copy of networks/ |
| any | prints | what the block before it prints, to the letter; `prints, exit 1` where its code is 1 |
| csv, toml | file NAME | is written to that file of the folder |
| csv, toml | part of PATH | stands in that file of the project, line by line |
| toml | piece | keys of a job.toml, checked against the schema |
| sh | demo, tests, lint | run by .ci/run, which finds them by this mark |
| sh | set-up | installs or activates an environment: not run here |
| text | form | a pattern or formula; nothing to run. The mathematics pages need no mark for it |
| text | none, right after python | what that program prints: the worked examples of the mathematics pages |

Anything else is refused. `python -m tests.docs.refresh` writes the `prints` blocks anew.
"""

from __future__ import annotations

import contextlib
import io
import os
import re
import shlex
import shutil
import subprocess
import sys
import tomllib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import jsonschema

from adjust import cli
from adjust.record.schemas import job_schema

ROOT = Path(__file__).parents[2]
CI_MARKS = ("demo", "tests", "lint")
RUNS = ("sh", "python")
_PRINTS = re.compile(r"prints(?:, exit (\d+))?")
_META = re.compile(r"[|&;<>()$`*?#~]")
_END = "=== end of block, exit"


@dataclass(frozen=True)
class Block:
    """One fenced block: line of its fence (from 1), language, mark, text without the fences."""

    line: int
    language: str
    mark: str
    text: str
    last: int
    """Line of the closing fence."""

    @property
    def prints(self) -> bool:
        """Whether the block shows what the one before it prints."""
        return bool(_PRINTS.fullmatch(self.mark))

    @property
    def exit_code(self) -> int:
        """Exit code that the page states for the block before."""
        found = _PRINTS.fullmatch(self.mark)
        return int(found[1] or 0) if found else 0


def blocks(text: str) -> list[Block]:
    """The fenced blocks of a page."""
    lines, found, i = text.split("\n"), [], 0
    while i < len(lines):
        fence = re.match(r"(```+|~~~+) *(\S*) *$", lines[i])
        if not fence:
            i += 1
            continue
        end = next(k for k in range(i + 1, len(lines)) if lines[k].rstrip() == fence[1])
        mark = re.fullmatch(r"<!-- (.+) -->", lines[i - 1].strip()) if i else None
        word = mark[1] if mark else "prints" if fence[2] == "text" and _follows_program(found, i) else ""
        found.append(Block(i + 1, fence[2], word, "\n".join(lines[i + 1 : end]), end + 1))
        i = end + 1
    return found


def _follows_program(found: list[Block], fence: int) -> bool:
    """Whether the last block is Python and nothing but an empty line stands between it and this fence (from 0)."""
    return bool(found) and found[-1].language == "python" and found[-1].last == fence - 1


def faults(name: str, text: str) -> list[str]:
    """What is wrong with the blocks of a page before any of them runs."""
    found, before = [], None
    for block in blocks(text):
        why = _fault(name, block, before)
        if why:
            found.append(f"{name}:{block.line}: {why}")
        before = block
    return found


def _fault(name: str, block: Block, before: Block | None) -> str:
    form = block.language == "text" and (block.mark == "form" or "mathematics" in name)
    if block.prints:
        return "" if before and runs(before) else "shows what is printed, but no block that runs stands before it"
    if block.language == "sh" and block.mark in CI_MARKS:
        step = f"run_block {block.mark} {name}"
        return "" if step in (ROOT / ".ci" / "run").read_text("utf-8") else f".ci/run has no step {step}"
    if form or runs(block) or (block.language == "sh" and block.mark == "set-up"):
        return ""
    if block.language in ("csv", "toml") and block.mark.startswith("file "):
        return ""
    if block.language in ("csv", "toml") and block.mark.startswith("part of "):
        whole = (ROOT / block.mark.removeprefix("part of ")).read_text("utf-8")
        return "" if f"\n{block.text}\n" in f"\n{whole}" else "is not in that file as it stands here"
    if block.language == "toml" and block.mark == "piece":
        return _piece_fault(block.text)
    return f"a block `{block.language or 'without language'}` with mark `{block.mark}`: see tests/docs/blocks.py"


def _piece_fault(text: str) -> str:
    job = {"units": {"length": "m", "angle": "dms"}} | tomllib.loads(text)
    errors = [e.message for e in jsonschema.Draft202012Validator(job_schema()).iter_errors(job)]
    return "; ".join(errors)


def runs(block: Block) -> bool:
    """Whether a block is a command or program of the page's own session."""
    return block.language in RUNS and not block.mark


def in_words(code: int, output: str) -> str:
    """Output and exit code as one text, so that one comparison shows both."""
    return f"{output.rstrip()}\n(exit {code})"


# ---- running


@contextlib.contextmanager
def session(folder: Path) -> Iterator[None]:
    """A folder with the demo jobs as current folder and home; `brasscap` and Python of this environment come first."""
    shutil.copytree(ROOT / "networks", folder / "networks", ignore=shutil.ignore_patterns("record", "__pycache__"))
    home, old = os.getcwd(), dict(os.environ)
    os.environ.update(HOME=str(folder), LC_ALL="C.UTF-8", PYTHONIOENCODING="utf-8", PWD=str(folder))
    os.environ["PATH"] = os.pathsep.join([str(Path(sys.executable).parent), old.get("PATH", "")])
    os.chdir(folder)
    try:
        yield
    finally:
        os.chdir(home)
        os.environ.clear()
        os.environ.update(old)


def run(block: Block) -> tuple[int, str]:
    """Exit code and output of a block that runs or is written; nothing for others. The current folder is kept."""
    if block.mark.startswith("file "):
        target = Path(block.mark.removeprefix("file "))
        target.parent.mkdir(parents=True, exist_ok=True)
        target.write_text(block.text + "\n", encoding="utf-8")
        return 0, ""
    if not runs(block):
        return 0, ""
    if block.language == "python":
        return _python(block.text)
    lines = [line for line in block.text.split("\n") if line.strip()]
    if all(re.match(r"(brasscap|cd) ", line) and not _META.search(line) for line in lines):
        return _commands(lines)
    return _shell(block.text)


def _commands(lines: list[str]) -> tuple[int, str]:
    """Lines that call brasscap only, without a new process."""
    out, code = io.StringIO(), 0
    for line in lines:
        name, *rest = shlex.split(line)
        if name == "cd":
            os.chdir(rest[0])
            continue
        with contextlib.redirect_stdout(out), contextlib.redirect_stderr(out):
            code = cli.main(rest)
    return code, out.getvalue()


def _python(text: str) -> tuple[int, str]:
    out = io.StringIO()
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(out):
        exec(compile(text, "block", "exec"), {"__name__": "__main__"})
    return 0, out.getvalue()


def _shell(text: str) -> tuple[int, str]:
    """A block in a shell, after which the current folder is where it went."""
    where = Path(os.environ["HOME"]) / ".where"
    script = f'{text}\nexit_code=$?\npwd >"{where}"\nexit $exit_code\n'
    code, out = _bash(script)
    os.chdir(where.read_text("utf-8").rstrip("\n"))
    return code, out


def _bash(script: str) -> tuple[int, str]:
    done = subprocess.run(
        ["bash", "-c", script], stdout=subprocess.PIPE, stderr=subprocess.STDOUT, check=False, encoding="utf-8"
    )
    return done.returncode, done.stdout


def run_literally(page: list[Block]) -> list[tuple[int, str]]:
    """Every shell block of a page typed into one shell, as a reader does; outcomes in the order of the blocks."""
    typed = [block.text for block in page if runs(block) and block.language == "sh"]
    _, out = _bash("".join(f'{text}\nprintf "\\n{_END} %d\\n" $?\n' for text in typed))
    outcomes, kept = [], ""
    for line in out.splitlines(keepends=True):
        if line.startswith(_END):
            outcomes.append((int(line.removeprefix(_END)), kept))
            kept = ""
        else:
            kept += line
    return outcomes
