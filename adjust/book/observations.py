"""Tables of observations turned into blocks; the same code reads every kind, from what the kind says of itself."""

from __future__ import annotations

import re
from collections.abc import Callable
from functools import partial

import numpy as np

from adjust.book import schema
from adjust.book.cells import Cells
from adjust.book.distance_ledger import Corrected, correct, ledger_in_order
from adjust.book.faults import Faults
from adjust.book.job import Aside
from adjust.book.lay import lay_of
from adjust.book.marks import Marks
from adjust.book.reductions import LedgerLine, Reduction
from adjust.book.rules import Tolerance
from adjust.book.settings import Settings
from adjust.book.sheet import Sheet
from adjust.book.stated import stated_sds
from adjust.book.toml_lines import line_of
from adjust.kinds import KINDS, TABLES
from adjust.kinds.base import OFFSET, GroupUnknown, Kind
from adjust.network import Array, Block, Bools, Group, Ints

END_COLUMNS = ("at", "from", "to", "back", "fore", "first", "second")
"""Columns of a reading's stations in any table, the standpoint first."""


class Observations:
    """The growing list of blocks, group unknowns, and rows set aside."""

    def __init__(self, settings: Settings, marks: Marks, faults: Faults, booked: dict[str, str]) -> None:
        self.settings, self.marks, self.faults, self.booked = settings, marks, faults, booked
        self.tolerance = Tolerance()
        self.blocks: list[Block] = []
        self.groups: list[Group] = []
        self.left_out: list[Aside] = []
        self.planned: list[Aside] = []
        self.reductions: list[Reduction] = []
        self.ledger: list[LedgerLine] = []
        self.warnings: list[str] = []
        self._ids: dict[str, str] = {}
        self._of_setting: dict[str, int] = {}
        """Number of the group unknown of each setting that is estimated."""
        self._setup_numbers: dict[tuple[str, str, str], int] = {}

    def add(self, cells: Cells) -> None:
        """Take over one table."""
        kind = TABLES[cells.table.kind]
        use = self.used(kind.name, kind.value, cells)
        sheet = Sheet.of(kind)
        self.take(cells, sheet, use, lambda rows: self.values(cells, sheet, rows), self._held(cells, use))

    def take(
        self, cells: Cells, sheet: Sheet, use: list[int], values: Callable[[list[int]], Array], held: Bools
    ) -> None:
        """Take over the rows ``use`` of a table; ``values`` gives (n,) values, ``held`` (n,) those without error."""
        kind = sheet.kind
        names = sheet.names or tuple(cells.names(column, use, self.booked) for column in sheet.stations)
        use = self._distinct(cells, sheet, names, use)
        named = partial(self._row_names, cells, sheet)  # most tables have no ledger and need no names
        raw = values(use)
        corrected = correct(self.settings, cells, named, raw, use) if kind.says == "length" else Corrected(raw)
        lay = lay_of(cells, kind, corrected.values, use, self.settings.frame.refraction.value)
        sd, precision, makeup = stated_sds(self.settings, cells, sheet, lay, held, use)
        group = self._groups(cells, kind, names, use)
        setup = self._setups(cells, names[0])
        offset = _offsets(cells, kind, use)
        for column in names:
            for i in use:
                if column[i]:
                    self.marks.number(column[i])
        if self.faults.all:
            return
        self.ledger += ledger_in_order(corrected, lay, named, use)
        chosen = np.array(use, dtype=np.int64)
        setting = self.settings.frame.refraction if kind.group and kind.group.setting else None
        self.blocks.append(
            Block(
                kind=kind.name,
                file=cells.rows.file,
                stations=self._numbers(names, use),
                values=lay.values[chosen, None],
                sd=sd[chosen, None],
                group=group[chosen],
                held=held[chosen],
                line=np.array(cells.rows.lines, dtype=np.int64)[chosen],
                ids=self._row_ids(cells, sheet, use),
                precision=tuple(precision[i] for i in use),
                surface=lay.surface,
                above=None if lay.above is None else lay.above[chosen],
                offset=offset,
                constant=np.full(len(use), setting.value) if setting else None,
                corrections=tuple(
                    (name, amount[chosen]) for name, amount in (*corrected.corrections, *lay.corrections)
                ),
                booked=() if cells.table.kind == kind.table else sheet.value,
                setup=np.array([setup[i] for i in use], dtype=np.int64),
                eccentric=self._eccentric(kind, [precision[i] for i in use]),
                walked=_walked(cells, sheet, use),
                makeup=makeup.cut(chosen),
                labels=self._labels(cells, kind, [precision[i] for i in use], use),
            )
        )

    @staticmethod
    def _row_ids(cells: Cells, sheet: Sheet, use: list[int]) -> tuple[str, ...]:
        """Given identifications; of a row that holds several readings with the word for this one."""
        ids = cells.text("id")
        if not sheet.what:
            return tuple(ids[i] for i in use) if any(ids) else ()
        names = Observations._row_names(cells, sheet)
        return tuple(names[i] for i in use)

    @staticmethod
    def _row_names(cells: Cells, sheet: Sheet) -> list[str]:
        """What the reading of every row is called: its identification, else FILE:LINE."""
        ids, what = cells.text("id"), f" {sheet.what}" if sheet.what else ""
        file = cells.rows.file
        return [f"{own or f'{file}:{line}'}{what}" for own, line in zip(ids, cells.rows.lines, strict=True)]

    def settings_blocks(self) -> list[Block]:
        """Settings that are observations of their own: the coefficient of refraction, where a reading needs it."""
        setting, path = self.settings.frame.refraction, "frame.refraction"
        return [
            Block(
                kind=kind.name,
                file="job.toml",
                stations=np.empty((1, 0), dtype=np.int64),
                values=np.array([[setting.value]]),
                sd=np.array([[setting.sd]]),
                group=np.array([self._of_setting[kind.group.setting]]),
                held=np.zeros(1, dtype=bool),
                line=np.array([line_of(self.settings.lines, path)]),
                precision=("sd",),
            )
            for kind in KINDS.values()
            if not kind.stations and kind.group and kind.group.setting in self._of_setting
        ]

    def _numbers(self, names: tuple[list[str], ...], use: list[int]) -> Ints:
        index = self.marks.index
        return np.array([[index[column[i]] for column in names] for i in use], dtype=np.int64).reshape(
            len(use), len(names)
        )

    def used(self, kind: str, value: tuple[str, ...], cells: Cells) -> list[int]:
        """Rows that are used, by the columns of their values; the others are set aside. All have their ids checked."""
        everything = range(len(cells))
        use = cells.choices("use", everything)
        ids, reasons = cells.text("id"), cells.text("reason")
        ends = [cells.text(column) for column in END_COLUMNS if cells.has(column)]
        for i in everything:
            place = f"{cells.rows.file}:{cells.rows.lines[i]}"
            if ids[i] and self._ids.setdefault(ids[i], place) != place:
                cells.fault(i, "id", ids[i], f"already the id of {self._ids[ids[i]]}; ids are unique in the job")
            if re.fullmatch(r".+\.\w+:\d+", ids[i]):
                cells.fault(i, "id", ids[i], "looks like FILE:LINE, the name of rows without an id; give another")
            if use[i] == "yes":
                continue
            stations = tuple(self.booked.get(column[i], column[i]) for column in ends if column[i])
            aside = Aside(ids[i] or place, cells.rows.file, cells.rows.lines[i], kind, reasons[i], stations)
            if use[i] == "no" and not reasons[i]:
                cells.fault(i, "reason", "", "a reading left out needs its reason")
            if use[i] == "planned" and any(cells.text(column)[i] for column in value):
                cells.fault(
                    i, "use", "planned", "a planned reading has no value yet; remove the value or the word planned"
                )
            (self.left_out if use[i] == "no" else self.planned).append(aside)
        return [i for i in everything if use[i] == "yes"]

    def _distinct(self, cells: Cells, sheet: Sheet, names: tuple[list[str], ...], use: list[int]) -> list[int]:
        """A reading runs between different stations."""
        kept = []
        for i in use:
            here = [column[i] for column in names]
            again = next((k for k in range(1, len(here)) if here[k] in here[:k]), None)
            if all(here) and again is not None:
                *first, last = sheet.stations
                number = {2: "", 3: "three "}.get(len(here), "")
                hint = f"{', '.join(first)} and {last} must be {number}different stations"
                cells.fault(i, sheet.stations[again], here[again], hint)
            else:
                kept.append(i)
        return kept

    def values(self, cells: Cells, sheet: Sheet, use: list[int]) -> Array:
        """The value of each row from the one of the kind's value columns that is filled."""
        if not any(cells.has(column) for column in sheet.value):
            cells.header_fault(sheet.value[0], "", f"a missing column: {' or '.join(sheet.value)} holds the reading")
            return np.full(len(cells), np.nan)
        texts = [cells.text(column) for column in sheet.value]
        for i in use:
            filled = sum(bool(text[i]) for text in texts)
            if filled == 0:
                hint = "a blank value; fill it, or set use = planned or use = no with a reason"
                cells.fault(i, next(c for c in sheet.value if cells.has(c)), "", hint)
            elif filled > 1:
                cells.fault(i, sheet.value[1], texts[1][i], f"give {' or '.join(sheet.value)}, not both")
        columns = [cells.values(column, use) for column in sheet.value]
        out = columns[0]
        for column in columns[1:]:
            out = np.where(np.isnan(out), column, out)
        return out

    def _held(self, cells: Cells, use: list[int]) -> Bools:
        if "role" not in cells.fields:
            return np.zeros(len(cells), dtype=bool)
        return np.array([role == "held" for role in cells.choices("role", use)], dtype=bool)

    def _setups(self, cells: Cells, standing: list[str]) -> list[int]:
        """Number of each row's set-up: by station and name through the job, else one a station and table."""
        named = cells.text("setup")
        keys = [(at, name, "" if name else cells.rows.file) for at, name in zip(standing, named, strict=True)]
        return [self._setup_numbers.setdefault(key, len(self._setup_numbers)) for key in keys]

    def _eccentric(self, kind: Kind, labels: list[str]) -> Array | None:
        """Standard deviations (m, 3) of centring, target and heights; a row with its own sd has its share in it."""
        if not kind.occupies:
            return None
        sizes = {"sd": (0.0, 0.0, 0.0)}
        for name, keys in self.settings.instruments.items():
            models = [keys.get(field.name) for field in schema.CENTRING]
            sizes[name] = tuple(float(model.sd(1)[0]) if model else 0.0 for model in models)  # type: ignore[assignment] # three fields, three sizes
        out = np.array([sizes[label] for label in labels], dtype=float).reshape(len(labels), 3)
        return out if out.any() else None

    def _labels(self, cells: Cells, kind: Kind, precision: list[str], use: list[int]) -> dict[str, tuple[str, ...]]:
        """Names of instrument, reflector, day and crew: the row's own, its table's, or the only one."""
        table, only = cells.table, self.settings.reflectors if len(self.settings.reflectors) == 1 else {}
        model = ["" if label == "sd" else label for label in precision]
        found = {
            "instrument": [own or table.instrument or m for own, m in zip(_of(cells, "instrument", use), model,
                                                                          strict=True)],
            "day": _of(cells, "day", use), "crew": _of(cells, "crew", use),
        }  # fmt: skip
        if kind.says == "length":
            found["reflector"] = [own or table.reflector or next(iter(only), "")
                                  for own in _of(cells, "reflector", use)]  # fmt: skip
        return {of: tuple(names) for of, names in found.items() if any(names)}

    def _groups(self, cells: Cells, kind: Kind, names: tuple[list[str], ...], use: list[int]) -> Ints:
        """Number of each row's group unknown; groups are told apart by file and the kind's columns."""
        out = np.full(len(cells), -1, dtype=np.int64)
        if kind.group is None:
            return out
        if kind.group.setting:
            if self.settings.frame.refraction.sd is not None and use:
                out[use] = self._setting_group(kind.group)
            return out
        by = [names[kind.stations.index(c)] if c in kind.stations else cells.text(c) for c in kind.group.by]
        needed = cells.text(kind.group.optional) if kind.group.optional else None
        numbers: dict[tuple[str, ...], int] = {}
        for i in use:
            if needed is not None and not needed[i]:
                continue
            key = tuple(column[i] for column in by)
            if key not in numbers:
                numbers[key] = len(self.groups)
                self.groups.append(self._group(cells, kind, key))
            out[i] = numbers[key]
        return out

    def _setting_group(self, unknown: GroupUnknown) -> int:
        """Number of the one unknown of the job that a setting gives."""
        if unknown.setting not in self._of_setting:
            self._of_setting[unknown.setting] = len(self.groups)
            self.groups.append(Group(unknown.what, "the job", unknown.shared, turns="turn" in unknown.absorbs))
        return self._of_setting[unknown.setting]

    @staticmethod
    def _group(cells: Cells, kind: Kind, key: tuple[str, ...]) -> Group:
        assert kind.group is not None
        named = dict(zip(kind.group.by, key, strict=True))
        stations = " ".join(named[c] for c in kind.group.by if c in kind.stations)
        name = named.get("set", "")
        of = " ".join(
            x for x in (stations, f"set {name}" if name else "", "" if stations else f"of {cells.rows.file}") if x
        )
        return Group(kind.group.what, of, kind.group.shared, name, "turn" in kind.group.absorbs)


def _of(cells: Cells, column: str, use: list[int]) -> list[str]:
    texts = cells.text(column)
    return [texts[i] for i in use]


def _offsets(cells: Cells, kind: Kind, use: list[int]) -> Array | None:
    """Offsets (m, 2) of the targets beyond and right of their marks; None where there are none."""
    names = [field.name for field in OFFSET if field in kind.columns and cells.has(field.name)]
    if not names:
        return None
    columns = [cells.values(f.name, use)[use] if f.name in names else np.zeros(len(use)) for f in OFFSET]
    out = np.nan_to_num(np.stack(columns, axis=1))
    return out if out.any() else None


def _walked(cells: Cells, sheet: Sheet, use: list[int]) -> Array | None:
    """Lengths in metres and set-ups (m, 2) of levelled lines as far as they were booked; None for other kinds."""
    columns = (sheet.kind.length_column, sheet.kind.setup_column)
    if not all(columns):
        return None
    sizes = [sheet.sizes[c] if c in sheet.sizes else cells.values(c, use) for c in columns]
    return np.stack([size[use] for size in sizes], axis=1).reshape(len(use), 2)
