"""The lines of job.toml that would give a group of readings another standard deviation; nothing applies them."""

from __future__ import annotations

import json
import re
from collections.abc import Iterable

import numpy as np

from adjust.book import schema
from adjust.book.lay import REDUCED
from adjust.book.stated import ZENITH_SD
from adjust.judge.groupings import Grouping
from adjust.kinds import KINDS
from adjust.network import Ints
from adjust.sigmas import three_figures
from adjust.solver.solution import Solution

OWN = "sd"
Model = tuple[str, str]
"""Instrument and key of an error model."""


def lines_to_paste(solution: Solution, grouping: Grouping, group: int, factor: float) -> tuple[str, ...]:
    """Lines that make the standard deviations of a group ``factor`` times as large; () where none can.

    A factor for every table whose rows all belong to the group; where a table mixes groups, the instruments' error
    models with their numbers scaled, if nothing else is read from them.
    """
    if group == len(grouping.names):
        keys = [f.name for f in schema.CENTRING]
        return _models(solution, {(label, key) for label in _labels(solution) for key in keys}, factor)
    rows = np.flatnonzero(grouping.of_row == group)
    tables = _tables(solution, grouping, rows)
    by_file = {t.file: t for t in solution.job.tables}
    if solution.job.settings.books is not None and tables and all(tables.values()):
        return tuple(
            line for file in tables
            for line in ("[[book]]", f"file = {json.dumps(file, ensure_ascii=False)}",
                         f"sd_factor = {three_figures(by_file[file].sd_factor * factor)}")
        )  # fmt: skip
    own = _asked(solution, rows)
    others = _asked(solution, np.flatnonzero((grouping.of_row != group) & (grouping.of_row >= 0)))
    if any(instrument == OWN for instrument, _ in own) or own & others:
        return ()
    return _models(solution, own, factor)


def _labels(solution: Solution) -> list[str]:
    """Instruments in the order of job.toml whose readings are in the adjustment."""
    used = {label for b in solution.network.blocks for label in b.precision}
    return [name for name in solution.job.settings.instruments if name in used]


def _tables(solution: Solution, grouping: Grouping, rows: Ints) -> dict[str, bool]:
    """Tables with rows of the group: whether sd_factor scales nothing but them."""
    network = solution.network
    files = np.array([b.file for b in network.blocks])[network.rows.block]
    group = grouping.of_row[rows[0]] if len(rows) else -1
    scaled = {t.file for t in solution.job.tables if t.kind != "control"}
    return {
        file: file in scaled and bool((grouping.of_row[(files == file) & (grouping.of_row >= 0)] == group).all())
        for file in dict.fromkeys(files[rows].tolist())
    }


def _asked(solution: Solution, rows: Ints) -> set[Model]:
    """Error models behind the standard deviations of scalar rows; (OWN, '') for rows with their own."""
    network, found = solution.network, set()
    for b, i in zip(network.rows.block[rows].tolist(), network.rows.row[rows].tolist(), strict=True):
        block = network.blocks[b]
        label, key = block.precision[i], KINDS[block.kind].instrument
        if label == OWN or key is None:
            found.add((OWN, ""))
            continue
        found.add((label, key.name))
        if any(name == REDUCED for name, _ in block.corrections):
            found.add((label, ZENITH_SD))
    return found


def _models(solution: Solution, wanted: Iterable[Model], factor: float) -> tuple[str, ...]:
    """The wanted error models scaled, instrument by instrument."""
    lines: list[str] = []
    for name, keys in solution.job.settings.instruments.items():
        scaled = [f"{key} = {model.scaled(factor)}" for key, model in keys.items() if (name, key) in set(wanted)]
        lines += [f"[instruments.{_key(name)}]", *scaled] if scaled else []
    return tuple(lines)


def _key(name: str) -> str:
    """A TOML key, in quotes where it needs them."""
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else json.dumps(name, ensure_ascii=False)
