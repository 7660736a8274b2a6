"""Writes what the pages print anew: `python -m tests.docs.refresh [PAGE ...]`, from the folder of the checkout.

Generated pages, the key tables of docs/record.md and every block marked `prints` come from the program as it is now.
Read the differences before you commit them: a page that prints something else is a change for users. What only a
person can write (the meaning of a new message, of a new key) is listed at the end.
"""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path

from adjust.record.format_pages import pages as generated
from tests.docs import messages, record_page
from tests.docs.blocks import ROOT, Block, blocks, run, runs, session

DOCS = ROOT / "docs"


def refreshed(text: str) -> str:
    """The page with its `prints` blocks as the commands print them now; to be called within a session."""
    lines = text.split("\n")
    found = blocks(text)
    outcome, edits = (0, ""), []
    for block in found:
        if block.prints:
            edits.append((block, outcome))
        elif runs(block) or block.mark.startswith("file "):
            outcome = run(block)
    for block, (code, output) in reversed(edits):
        if lines[block.line - 2].startswith("<!--"):
            lines[block.line - 2] = _mark(code)
        lines[block.line : block.last - 1] = output.rstrip().split("\n")
    return "\n".join(lines)


def _mark(code: int) -> str:
    return f"<!-- prints, exit {code} -->" if code else "<!-- prints -->"


def runs_something(page: list[Block]) -> bool:
    """Whether a page has blocks to run."""
    return any(runs(block) for block in page)


def main(names: list[str]) -> None:
    """Refresh the named pages, or all."""
    for file, text in generated().items():
        (DOCS / file).write_text(text, encoding="utf-8")
    record_page.PAGE.write_text(record_page.refreshed(record_page.PAGE.read_text("utf-8")), encoding="utf-8")
    for path in [Path(n).resolve() for n in names] or [ROOT / "README.md", *sorted(DOCS.rglob("*.md"))]:
        text = path.read_text("utf-8")
        if runs_something(blocks(text)):
            with tempfile.TemporaryDirectory() as folder, session(Path(folder).resolve()):
                new = refreshed(text)
            print(path.relative_to(ROOT), "changed" if new != text else "as it was")
            path.write_text(new, encoding="utf-8")
    for line in [*messages.differences(), *record_page.gaps()]:
        print(line)


if __name__ == "__main__":
    main(sys.argv[1:])
