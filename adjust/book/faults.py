"""The collector of faults: reading goes on after a fault so that all of them come at once."""

from __future__ import annotations

from adjust.errors import Fault, InputError

MOST = 200
"""Faults printed; a table in the wrong unit would otherwise print one a row."""


class Faults:
    """Faults found so far, in the order in which the files are read."""

    def __init__(self) -> None:
        self.all: list[Fault] = []

    def add(self, file: str, line: int, column: str, found: object, hint: str) -> None:
        """Note one fault; ``found`` is shown as it was written."""
        self.all.append(Fault(file, line, column, str(found), hint))

    def stop(self) -> None:
        """Raise InputError if anything was found."""
        if self.all:
            self.all = list(dict.fromkeys(self.all))  # a row that holds several readings would say the same of each
            self._sort()
            kept = self.all[:MOST]
            if len(self.all) > MOST:
                last = self.all[MOST]
                kept.append(
                    Fault(last.file, last.line, "", "...", f"{len(self.all) - MOST} more faults; mend these first")
                )
            raise InputError(kept)

    def _sort(self) -> None:
        """job.toml first, then the files in the order in which they were met, each by line: the order of mending."""
        files = list(dict.fromkeys(["job.toml", *(fault.file for fault in self.all)]))
        self.all.sort(key=lambda fault: (files.index(fault.file), fault.line))
