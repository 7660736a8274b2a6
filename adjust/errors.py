"""What can go wrong, as a tree.

BrasscapError
├── InputError       the files say something that cannot be meant: one Fault each, all at once      exit 2
├── Unsolvable       the readings do not determine the answer: sentences by station and movement    exit 2
├── NotConverged     the iteration did not settle                                                   exit 2
└── OutputError      the record cannot be written where it was asked for                            exit 2
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, order=True)
class Fault:
    """One fault of the input: where it stands, what was found, and what to do about it."""

    file: str
    line: int
    column: str
    found: str
    hint: str

    def __str__(self) -> str:
        place = f"{self.file}:{self.line}" if self.line else self.file
        column = f" column {self.column}:" if self.column else ""
        found = self.found if len(self.found) <= 80 else self.found[:77] + "..."
        return one_line(f'{place}:{column} "{found}": {self.hint}')


class BrasscapError(Exception):
    """Base of every error Brasscap raises on purpose; ``sentences`` are the lines to print."""

    exit_code = 2

    def __init__(self, sentences: Iterable[str]) -> None:
        self.sentences = list(sentences)
        super().__init__("\n".join(self.sentences))


class InputError(BrasscapError):
    """The job's files hold faults; ``faults`` lists them all in the order of the files."""

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults = list(faults)
        super().__init__(str(fault) for fault in self.faults)


class Unsolvable(BrasscapError):
    """The readings leave something free; the sentences name stations and movements."""


class NotConverged(BrasscapError):
    """Gauss-Newton with damping did not come to rest."""


class OutputError(BrasscapError):
    """The place for the results cannot be used; nothing was written."""


def one_line(text: str) -> str:
    """The text with every control character shown as an escape, so that a fault stays one line."""
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)


MOST_NAMES = 20
"""Names listed where none is near: every column of a table, but not every station of a network."""


def nearest(name: str, known: Iterable[str]) -> str:
    """'did you mean X?' for the known name nearest to ``name`` (capitals aside), else the list of known names."""
    names = list(known)
    folded = {n.casefold(): n for n in reversed(names)}
    close = difflib.get_close_matches(name.casefold(), list(folded), n=1, cutoff=0.6)
    if close:
        return f"did you mean {folded[close[0]]}?"
    if not names:
        return "none is known here"
    more = f" and {len(names) - MOST_NAMES} more" if len(names) > MOST_NAMES else ""
    return "known here: " + ", ".join(names[:MOST_NAMES]) + more
