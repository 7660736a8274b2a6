"""Tables of observations turned into blocks; the same code reads every kind, from what the kind says of itself."""

from __future__ import annotations

import re

import numpy as np

from adjust.book import schema
from adjust.book.cells import Cells
from adjust.book.faults import Faults
from adjust.book.job import Aside
from adjust.book.marks import Marks
from adjust.book.settings import Settings
from adjust.book.toml_lines import line_of
from adjust.errors import nearest
from adjust.kinds import TABLES
from adjust.kinds.base import Kind
from adjust.network import Array, Block, Bools, Group, Ints
from adjust.sigmas import EXAMPLES, Precision
from adjust.units import LONGEST_M, SMALLEST_SD


class Observations:
    """The growing list of blocks, group unknowns, and rows set aside."""

    def __init__(self, settings: Settings, marks: Marks, faults: Faults, booked: dict[str, str]) -> None:
        self.settings, self.marks, self.faults, self.booked = settings, marks, faults, booked
        self.blocks: list[Block] = []
        self.groups: list[Group] = []
        self.left_out: list[Aside] = []
        self.planned: list[Aside] = []
        self._ids: dict[str, str] = {}
        self._setup_numbers: dict[tuple[str, str, str], int] = {}

    def add(self, cells: Cells) -> None:
        """Take over one table."""
        kind = TABLES[cells.table.kind]
        use = self._use(kind, cells)
        names = [cells.names(column, use, self.booked) for column in kind.stations]
        use = self._distinct(cells, kind, names, use)
        values = self._values(cells, kind, use)
        held = self._held(cells, use)
        sd, precision = self._sds(cells, kind, values, held, use)
        group = self._groups(cells, kind, names, use)
        setup = self._setups(cells, names[0])
        for column in names:
            for i in use:
                if column[i]:
                    self.marks.number(column[i])
        if self.faults.all:
            return
        chosen = np.array(use, dtype=np.int64)
        ids = cells.text("id")
        self.blocks.append(
            Block(
                kind=kind.name,
                file=cells.rows.file,
                stations=self._numbers(names, use),
                values=values[chosen, None],
                sd=sd[chosen, None],
                group=group[chosen],
                held=held[chosen],
                line=np.array(cells.rows.lines, dtype=np.int64)[chosen],
                ids=tuple(ids[i] for i in use) if any(ids) else (),
                precision=tuple(precision[i] for i in use),
                setup=np.array([setup[i] for i in use], dtype=np.int64),
                eccentric=self._eccentric(kind, [precision[i] for i in use]),
            )
        )

    def _numbers(self, names: list[list[str]], use: list[int]) -> Ints:
        index = self.marks.index
        return np.array([[index[column[i]] for column in names] for i in use], dtype=np.int64).reshape(
            len(use), len(names)
        )

    def _use(self, kind: Kind, cells: Cells) -> list[int]:
        """Rows that are used; the others are set aside. Identifications are checked for all."""
        everything = range(len(cells))
        use = cells.choices("use", everything)
        ids, reasons = cells.text("id"), cells.text("reason")
        for i in everything:
            place = f"{cells.rows.file}:{cells.rows.lines[i]}"
            if ids[i] and self._ids.setdefault(ids[i], place) != place:
                cells.fault(i, "id", ids[i], f"already the id of {self._ids[ids[i]]}; ids are unique in the job")
            if re.fullmatch(r".+\.\w+:\d+", ids[i]):
                cells.fault(i, "id", ids[i], "looks like FILE:LINE, the name of rows without an id; give another")
            if use[i] == "yes":
                continue
            aside = Aside(ids[i] or place, cells.rows.file, cells.rows.lines[i], kind.name, reasons[i])
            if use[i] == "no" and not reasons[i]:
                cells.fault(i, "reason", "", "a reading left out needs its reason")
            if use[i] == "planned" and any(cells.text(column)[i] for column in kind.value):
                cells.fault(
                    i, "use", "planned", "a planned reading has no value yet; remove the value or the word planned"
                )
            (self.left_out if use[i] == "no" else self.planned).append(aside)
        return [i for i in everything if use[i] == "yes"]

    def _distinct(self, cells: Cells, kind: Kind, names: list[list[str]], use: list[int]) -> list[int]:
        """A reading runs between different stations."""
        kept = []
        for i in use:
            here = [column[i] for column in names]
            again = next((k for k in range(1, len(here)) if here[k] in here[:k]), None)
            if all(here) and again is not None:
                *first, last = kind.stations
                number = {2: "", 3: "three "}.get(len(here), "")
                hint = f"{', '.join(first)} and {last} must be {number}different stations"
                cells.fault(i, kind.stations[again], here[again], hint)
            else:
                kept.append(i)
        return kept

    def _values(self, cells: Cells, kind: Kind, use: list[int]) -> Array:
        """The value of each row from the one of the kind's value columns that is filled."""
        if not any(cells.has(column) for column in kind.value):
            cells.header_fault(kind.value[0], "", f"a missing column: {' or '.join(kind.value)} holds the reading")
            return np.full(len(cells), np.nan)
        texts = [cells.text(column) for column in kind.value]
        for i in use:
            filled = sum(bool(text[i]) for text in texts)
            if filled == 0:
                hint = "a blank value; fill it, or set use = planned or use = no with a reason"
                cells.fault(i, next(c for c in kind.value if cells.has(c)), "", hint)
            elif filled > 1:
                cells.fault(i, kind.value[1], texts[1][i], f"give {' or '.join(kind.value)}, not both")
        columns = [cells.values(column, use) for column in kind.value]
        out = columns[0]
        for column in columns[1:]:
            out = np.where(np.isnan(out), column, out)
        return out

    def _held(self, cells: Cells, use: list[int]) -> Bools:
        if "role" not in cells.fields:
            return np.zeros(len(cells), dtype=bool)
        return np.array([role == "held" for role in cells.choices("role", use)], dtype=bool)

    def _sds(self, cells: Cells, kind: Kind, values: Array, held: Bools, use: list[int]) -> tuple[Array, list[str]]:
        """Standard deviations (n,) from the column sd or the instrument, and the label of their source."""
        sd = cells.sds("sd", kind.dimension, use)
        labels = ["sd"] * len(cells)
        # read for every row, also where a row's own sd makes them needless: what cannot be meant is a fault anyway
        sizes = {c: cells.values(c, use) for c in (kind.length_column, kind.setup_column, "count") if c}
        blank = cells.text("sd")
        lacking = [i for i in use if not blank[i] and not held[i]]
        by_model: dict[str, list[int]] = {}
        for i in lacking:
            name = cells.text("instrument")[i] or cells.table.instrument
            by_model.setdefault(name, []).append(i)
        for name, rows in by_model.items():
            found = self._model(cells, kind, name, rows)
            if found:
                label, model = found
                sd[rows] = self._model_sd(cells, kind, model, values, sizes, rows)
                for i in rows:
                    labels[i] = label
        sd *= cells.table.sd_factor
        for i in use:
            if not held[i] and (sd[i] < SMALLEST_SD or sd[i] >= LONGEST_M):
                hint = (
                    f"the standard deviation comes to {sd[i]:g} m or rad; look at the instrument, count and sd_factor"
                )
                cells.fault(i, "sd", blank[i], hint)
        sd[held] = 0.0
        return sd, labels

    def _model(self, cells: Cells, kind: Kind, name: str, rows: list[int]) -> tuple[str, Precision] | None:
        """The instrument's error model for this kind; exactly one must fit where none is named."""
        key = kind.instrument.name if kind.instrument else ""
        instruments = self.settings.instruments
        fitting = {n: keys[key] for n, keys in instruments.items() if key in keys}
        if name and name not in instruments:
            self._unknown_instrument(cells, name, rows[0])
        elif name and name not in fitting:
            self._no_figure(cells, kind, name, rows[0])
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
            self._no_figure(cells, kind, "NAME", rows[0])
        return None

    def _no_figure(self, cells: Cells, kind: Kind, name: str, i: int) -> None:
        """Neither the row nor an instrument tells the standard deviation."""
        hint = "no standard deviation: add a column sd"
        if kind.instrument:
            figure = EXAMPLES[kind.instrument.dimension].partition(" or ")[0].removesuffix(" (sum)")
            hint += f", or for example {kind.instrument.name} = {figure} under [instruments.{name}] in job.toml"
        cells.fault(i, "sd", "", hint)

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

    @staticmethod
    def _group(cells: Cells, kind: Kind, key: tuple[str, ...]) -> Group:
        assert kind.group is not None
        named = dict(zip(kind.group.by, key, strict=True))
        stations = " ".join(named[c] for c in kind.group.by if c in kind.stations)
        name = named.get("set", "")
        of = " ".join(
            x for x in (stations, f"set {name}" if name else "", "" if stations else f"of {cells.rows.file}") if x
        )
        return Group(kind.group.what, of, kind.group.shared, name)
