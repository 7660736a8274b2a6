"""Tables of observations turned into blocks; the same code reads every kind, from what the kind says of itself."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from adjust.book import schema
from adjust.book.cells import Cells
from adjust.book.faults import Faults
from adjust.book.job import Aside
from adjust.book.lay import Lay, lay_of
from adjust.book.marks import Marks
from adjust.book.settings import Settings
from adjust.book.toml_lines import line_of
from adjust.errors import nearest
from adjust.kinds import KINDS, TABLES
from adjust.kinds.base import OFFSET, GroupUnknown, Kind
from adjust.network import Array, Block, Bools, Group, Ints
from adjust.sigmas import EXAMPLES, Precision
from adjust.units import LONGEST_M, SMALLEST_SD

ZENITH_SD = "zenith"
"""Key of an instrument's figure for zenith angles, which reduced distances need beside their own."""


@dataclass(frozen=True)
class Sheet:
    """Where readings of a kind stand in a table, and what was found of them so far."""

    kind: Kind
    stations: tuple[str, ...]
    """Columns of its stations."""
    value: tuple[str, ...]
    """Columns of which one holds the value."""
    sd: str = "sd"
    what: str = ""
    """Added to the name of a row that holds several readings."""

    @classmethod
    def of(cls, kind: Kind) -> Sheet:
        """The kind's own table."""
        return cls(kind, kind.stations, kind.value)


END_COLUMNS = ("at", "from", "to", "back", "fore", "first", "second")
"""Columns of a reading's stations in any table, the standpoint first."""


class Observations:
    """The growing list of blocks, group unknowns, and rows set aside."""

    def __init__(self, settings: Settings, marks: Marks, faults: Faults, booked: dict[str, str]) -> None:
        self.settings, self.marks, self.faults, self.booked = settings, marks, faults, booked
        self.blocks: list[Block] = []
        self.groups: list[Group] = []
        self.left_out: list[Aside] = []
        self.planned: list[Aside] = []
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
        names = [cells.names(column, use, self.booked) for column in sheet.stations]
        use = self._distinct(cells, sheet, names, use)
        lay = lay_of(cells, kind, values(use), use, self.settings.frame.refraction.value)
        sd, precision = self._sds(cells, sheet, lay, held, use)
        group = self._groups(cells, kind, names, use)
        setup = self._setups(cells, names[0])
        offset = _offsets(cells, kind, use)
        for column in names:
            for i in use:
                if column[i]:
                    self.marks.number(column[i])
        if self.faults.all:
            return
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
                corrections=tuple((name, amount[chosen]) for name, amount in lay.corrections),
                booked=() if cells.table.kind == kind.table else sheet.value,
                setup=np.array([setup[i] for i in use], dtype=np.int64),
                eccentric=self._eccentric(kind, [precision[i] for i in use]),
            )
        )

    @staticmethod
    def _row_ids(cells: Cells, sheet: Sheet, use: list[int]) -> tuple[str, ...]:
        """Given identifications; of a row that holds several readings with the word for this one."""
        ids = cells.text("id")
        if not sheet.what:
            return tuple(ids[i] for i in use) if any(ids) else ()
        return tuple(f"{ids[i] or f'{cells.rows.file}:{cells.rows.lines[i]}'} {sheet.what}" for i in use)

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

    def _numbers(self, names: list[list[str]], use: list[int]) -> Ints:
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

    def _distinct(self, cells: Cells, sheet: Sheet, names: list[list[str]], use: list[int]) -> list[int]:
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

    def _sds(self, cells: Cells, sheet: Sheet, lay: Lay, held: Bools, use: list[int]) -> tuple[Array, list[str]]:
        """Standard deviations (n,) from the column sd or the instrument, and the label of their source."""
        kind = sheet.kind
        sd = cells.sds(sheet.sd, kind.dimension, use)
        labels = ["sd"] * len(cells)
        # read for every row, also where a row's own sd makes them needless: what cannot be meant is a fault anyway
        sizes = {c: cells.values(c, use) for c in (kind.length_column, kind.setup_column, "count") if c}
        blank = cells.text(sheet.sd)
        lacking = [i for i in use if not blank[i] and not held[i]]
        by_model: dict[str, list[int]] = {}
        for i in lacking:
            name = cells.text("instrument")[i] or cells.table.instrument
            by_model.setdefault(name, []).append(i)
        for name, rows in by_model.items():
            found = self._model(cells, sheet, name, rows)
            if found:
                label, model = found
                own = self._model_sd(cells, kind, model, lay.values, sizes, rows)
                zenith = self.settings.instruments[label].get(ZENITH_SD)
                sd[rows] = lay.sd(rows, own, zenith.sd(len(rows)) if zenith else 0.0)
                for i in rows:
                    labels[i] = label
        sd *= cells.table.sd_factor
        for i in use:
            if not held[i] and (sd[i] < SMALLEST_SD or sd[i] >= LONGEST_M):
                hint = (
                    f"the standard deviation comes to {sd[i]:g} m or rad; look at the instrument, count and sd_factor"
                )
                cells.fault(i, sheet.sd, blank[i], hint)
        sd[held] = 0.0
        return sd, labels

    def _model(self, cells: Cells, sheet: Sheet, name: str, rows: list[int]) -> tuple[str, Precision] | None:
        """The instrument's error model for this kind; exactly one must fit where none is named."""
        kind = sheet.kind
        key = kind.instrument.name if kind.instrument else ""
        instruments = self.settings.instruments
        fitting = {n: keys[key] for n, keys in instruments.items() if key in keys}
        if name and name not in instruments:
            self._unknown_instrument(cells, name, rows[0])
        elif name and name not in fitting:
            self._no_figure(cells, sheet, name, rows[0])
        elif name:
            return name, fitting[name]
        elif len(fitting) == 1:
            return next(iter(fitting.items()))
        elif fitting:
            hint = (
                f"which instrument? {', '.join(fitting)} all have {key}; name one in [[book]] or in a column instrument"
            )
            cells.fault(rows[0], "instrument", "", hint)
        else:
            self._no_figure(cells, sheet, "NAME", rows[0])
        return None

    def _no_figure(self, cells: Cells, sheet: Sheet, name: str, i: int) -> None:
        """Neither the row nor an instrument tells the standard deviation."""
        hint, kind = f"no standard deviation: add a column {sheet.sd}", sheet.kind
        if kind.instrument:
            figure = EXAMPLES[kind.instrument.dimension].partition(" or ")[0].removesuffix(" (sum)")
            hint += f", or for example {kind.instrument.name} = {figure} under [instruments.{name}] in job.toml"
        cells.fault(i, sheet.sd, "", hint)

    def _unknown_instrument(self, cells: Cells, name: str, i: int) -> None:
        """The name stands in the row, or else in the table's [[book]] block."""
        hint = f"no such instrument; add [instruments.{name}]; {nearest(name, self.settings.instruments)}"
        if cells.text("instrument")[i]:
            cells.fault(i, "instrument", name, hint)
        else:
            line = line_of(self.settings.lines, f"{cells.table.path}.instrument")
            self.faults.add("job.toml", line, "book.instrument", name, hint)

    def _model_sd(
        self, cells: Cells, kind: Kind, model: Precision, values: Array, sizes: dict[str, Array], rows: list[int]
    ) -> Array:
        given: dict[str, Array] = {"distance": values[rows]}
        for need, column in (("length", kind.length_column), ("setup", kind.setup_column)):
            if column and need in model.needs:
                given[need] = sizes[column][rows]
                blank = cells.text(column)
                for i in rows:
                    if not blank[i]:
                        hint = f'the instrument\'s "{model.text}" needs the {column} of the line; fill it or give sd'
                        cells.fault(i, column, "", hint)
        count = sizes["count"][rows]
        count = np.where(np.isnan(count), 1.0, count)
        return model.sd(len(rows), **given) * np.sqrt(kind.pointings / count)

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

    def _groups(self, cells: Cells, kind: Kind, names: list[list[str]], use: list[int]) -> Ints:
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


def _offsets(cells: Cells, kind: Kind, use: list[int]) -> Array | None:
    """Offsets (m, 2) of the targets beyond and right of their marks; None where there are none."""
    names = [field.name for field in OFFSET if field in kind.columns and cells.has(field.name)]
    if not names:
        return None
    columns = [cells.values(f.name, use)[use] if f.name in names else np.zeros(len(use)) for f in OFFSET]
    out = np.nan_to_num(np.stack(columns, axis=1))
    return out if out.any() else None
