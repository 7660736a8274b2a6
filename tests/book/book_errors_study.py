"""Study: what the program says of raw books with one booking error each.

    python -m tests.book.book_errors_study 200      books with an error, and a quarter as many sound ones
    python -m tests.book.book_errors_study 200 -v   with what was said where the error was not named on its line

The books are those of tests.book.book_errors. What counts was written down before the first run, and made stricter or
plainer after it in three places: no more than three faults may be told, each piece of a closure's sentence counts by
itself, and lines common to all closures that fail are near at the best. The program was bettered with books of other
seeds; these were run once, after that.

    on the line   one of at most three faults of reading is at the line, or a sentence names at most three lines, the
                  wrong one among them. Of errors without a line: the slip of adding needs its page and column;
                  unbalanced sights the line of levels with its imbalance; the constant the sentence that names it and
                  says that it was applied twice.
    near          no line, but the pointing, set-up, page or runs that hold it: a sentence, a verdict, a reading left
                  out by [rejection], a closure, or the first suspect of the adjustment (all of equal statistic), as
                  long as it holds at most a third of the rows of the book. For the constant: a closure in position or
                  a control mark that fails.
    elsewhere     something else is blamed, or only that something is wrong.
    silent        nothing is blamed.

Beside that the table counts the books in which a fault or a sentence names lines too that are not the wrong ones.
"""

from __future__ import annotations

import re
import sys
import tempfile
from collections import Counter
from dataclasses import dataclass
from pathlib import Path

import numpy as np

import adjust
from adjust.book.job import Job
from adjust.errors import InputError
from adjust.judge.assess import Judgement
from adjust.judge.check import look
from tests.book.book_errors import SORTS, Book, sound_book, wrong_book

VERDICTS = ("on the line", "near", "elsewhere", "silent")
MOST_LINES = 3
SHARE = 3


@dataclass(frozen=True)
class Said:
    """One thing that was said: the lines that it names itself, the lines behind it, and who said it."""

    who: str
    text: str
    named: frozenset[int] = frozenset()
    behind: frozenset[int] = frozenset()


def listen(folder: Path) -> list[Said]:
    """Everything that the program blames in a job."""
    try:
        job = adjust.read(folder)
    except InputError as stop:
        return [
            Said("fault", s, frozenset({int(m[1])})) for s in stop.sentences if (m := re.match(r"\w+\.csv:(\d+):", s))
        ]
    seen = look(job).lines
    judged = adjust.assess(adjust.solve(job))
    return [*_of_book(job), *_of_check(job, seen), *_of_adjustment(judged)]


def _named(text: str) -> frozenset[int]:
    return frozenset(int(x) for x in re.findall(r"(?:\.csv:|line |lines )(\d+)", text))


def _of_book(job: Job) -> list[Said]:
    behind = {one.sentence: frozenset(one.lines) for one in job.reductions if one.sentence}
    out = [Said("sentence", w, _named(w), behind.get(w, _pointing(job, w))) for w in job.warnings]
    out += [Said("verdict", f"{one.what} {one.of}: not met", behind=frozenset(one.lines)) for one in job.reductions
            if one.verdict == "not met"]  # fmt: skip
    faces = {one.lines[0]: frozenset(one.lines) for one in job.reductions if one.what == "face mean"}
    out += [Said("left out", f"{a.observation}: {a.reason}", behind=faces.get(a.line, frozenset({a.line})))
            for a in job.left_out]  # fmt: skip
    return out


def _pointing(job: Job, text: str) -> frozenset[int]:
    """Lines of the pointing that a sentence names by station, set and target."""
    found = [one for one in job.reductions if one.what == "face mean" and all(
        re.search(rf"\b{re.escape(word)}\b", text) for word in _words(one.of))]  # fmt: skip
    return frozenset(x for one in found for x in one.lines)


def _words(of: str) -> list[str]:
    at, _, to = of.partition(" to ")
    return [at, to]


def _of_check(job: Job, seen: list[str]) -> list[Said]:
    del job
    return [Said("check", s, _named(s)) for s in seen if "applied twice" in s]


def _of_adjustment(judged: Judgement) -> list[Said]:
    job = judged.solution.job
    out = [Said(f"closure {one.kind}", text, _named(text) if "common to" not in text else frozenset(),
                _lines(job, one.rows) if "common to" not in text else _named(text))
           for one in judged.closures if one.verdict == "not met" for text in (one.sentence or "not met").split("; ")
           ]  # fmt: skip
    out += [Said("mark", f"{m.station} {m.verdict}") for m in judged.control if m.verdict == "disagrees"]
    size = np.abs(judged.statistic)
    network = judged.solution.network
    if len(judged.blame):
        top = [int(r) for r in judged.blame if size[r] > size[judged.blame[0]] * (1 - 1e-6)]
        lines = frozenset(x for r in top for x in _row_lines(network.blocks, network.rows, r))
        out.append(Said("suspect", ", ".join(judged.ids[r] for r in top), behind=lines))
    return out


def _lines(job: Job, rows: tuple[int, ...]) -> frozenset[int]:
    return frozenset(x for r in rows for x in _row_lines(job.network.blocks, job.network.rows, r))


def _row_lines(blocks: tuple[adjust.network.Block, ...], rows: adjust.network.Rows, r: int) -> list[int]:
    block, k = blocks[rows.block[r]], int(rows.row[r])
    if block.file not in ("rounds.csv", "staff.csv"):
        return []
    return [int(x) for x in block.booked_at[k] if x] if block.booked_at is not None else [int(block.line[k])]


def verdict(book: Book, said: list[Said]) -> str:
    """What the docstring of this file counts."""
    if any(book.words and all(word in one.text for word in book.words) for one in said):
        return "on the line"
    exact = book.lines if not book.words else set()
    if sum(one.who == "fault" for one in said) > MOST_LINES:
        return "elsewhere"
    if any(exact & one.named and len(one.named) <= MOST_LINES for one in said):
        return "on the line"
    most = len(book.rows) / SHARE
    if any(book.lines & part and len(part) <= most for one in said for part in (one.named, one.behind)):
        return "near"
    shows = ("closure loop traverse", "closure link traverse", "mark")
    if book.error == "constant applied twice" and any(one.who in shows for one in said):
        return "near"
    return "elsewhere" if said else "silent"


def others_too(book: Book, said: list[Said]) -> bool:
    """Whether lines are named, by a fault or a sentence, of which none is wrong."""
    return any(one.named and not one.named & book.lines for one in said if one.who in ("fault", "sentence", "check"))


def run(books: list[Book], verbose: bool = False) -> list[tuple[Book, str, list[Said]]]:
    """Every book with its verdict and what was said."""
    out = []
    with tempfile.TemporaryDirectory() as home:
        for k, book in enumerate(books):
            said = listen(book.put(Path(home) / str(k)))
            out.append((book, verdict(book, said), said))
            if verbose and (out[-1][1] != "on the line" or others_too(book, said)):
                print(f"--- {book.error} {k}, line {sorted(book.lines)[:5]}: {out[-1][1]}")
                for one in said[:8]:
                    print(f"    {one.who}: {one.text[:300]}")
    return out


def main(count: int, verbose: bool) -> None:
    """Print the table."""
    books = [wrong_book(SORTS[k % len(SORTS)], k // len(SORTS)) for k in range(count)]
    found = run(books, verbose)
    print("| error | books | " + " | ".join(VERDICTS) + " | other lines, too |")
    print("|---|" + "---:|" * (len(VERDICTS) + 2))
    for sort in (*SORTS, "all"):
        mine = [(v, others_too(book, said)) for book, v, said in found if sort in (book.error, "all")]
        counts = Counter(v for v, _ in mine)
        print(f"| {sort} | {len(mine)} | " + " | ".join(str(counts[v]) for v in VERDICTS)
              + f" | {sum(too for _, too in mine)} |")  # fmt: skip
    sound = run([sound_book(k) for k in range(count // 4)], verbose)
    blamed = [said for _, _, said in sound if said]
    by = Counter(who for said in blamed for who in {one.who for one in said})
    print(f"\n{len(sound)} sound books: {len(blamed)} blamed ({', '.join(f'{w} {n}' for w, n in sorted(by.items()))})")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 200, "-v" in sys.argv)
