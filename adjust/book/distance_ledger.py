"""Corrections of measured distances, one line each: done here, or declared as done in the instrument; never guessed.

In this order, with D as booked: the reflector's constant and the instrument's own are added, then the calibrated scale
and the atmosphere act on what is left of it,

    D1 = D + c_reflector + c_instrument        D2 = D1 (1 + s 1e-6)        D3 = D2 + first velocity correction

(adjust.atmosphere; with a ppm set by hand, D2 times that ppm). `applied` of the [[book]] block says which of them the
instrument has already made; with a reflector, weather, constant or scale in the job it must be said.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from adjust.atmosphere import Air, first_velocity, group_refractivity, refractivity
from adjust.book.cells import Cells
from adjust.book.lay import Lay
from adjust.book.reductions import LedgerLine
from adjust.book.settings import Settings
from adjust.book.toml_lines import line_of
from adjust.book.weather import Meter
from adjust.errors import nearest
from adjust.kinds.base import AIR
from adjust.kinds.base import REFLECTOR as REFLECTOR_COLUMN
from adjust.network import Array

REFLECTOR, CONSTANT, SCALE, ATMOSPHERE = "reflector", "constant", "scale", "atmosphere"
NAMES = {
    REFLECTOR: "reflector constant", CONSTANT: "instrument constant", SCALE: "calibrated scale",
    ATMOSPHERE: "atmosphere",
}  # fmt: skip
"""The corrections in their order, by the words that `applied` may hold."""
HERE, DONE = "here", "applied in the instrument"


@dataclass
class Corrected:
    """Distances (n,) with every correction (n,) by name, and the ledger."""

    values: Array
    corrections: list[tuple[str, Array]] = field(default_factory=list)
    lines: list[LedgerLine] = field(default_factory=list)


Named = Callable[[], list[str]]
"""Gives the names of the readings of all rows."""


def correct(settings: Settings, cells: Cells, named: Named, booked: Array, use: list[int]) -> Corrected:
    """Correct the distances ``booked`` (n,) of the rows ``use``."""
    out = Corrected(booked)
    if not _anything(settings, cells):
        return out
    givers = _Givers(settings, cells, use)
    if not givers.any and cells.table.applied is None:
        return out
    if cells.table.applied is None:
        cells.header_fault(
            givers.first, "", f"which corrections has the instrument made already? Add applied = [] (none) or some of "
            f"{', '.join(NAMES)} to the [[book]] block of {cells.rows.file}"
        )  # fmt: skip
        return out
    names = named()
    for key, name in NAMES.items():
        amount = np.zeros(len(booked))
        for i in use:
            source = givers.source(key, i)
            if key in cells.table.applied:
                out.lines.append(LedgerLine(names[i], name, 0.0, DONE, source))
            elif source:
                amount[i] = givers.amount(key, i, float(out.values[i]))
                out.lines.append(LedgerLine(names[i], name, float(amount[i]), HERE, source))
        out.values = out.values + amount
        if amount.any():
            out.corrections.append((name, amount))
    return out


def _anything(settings: Settings, cells: Cells) -> bool:
    """Whether a job says anything of corrections; most do not, and their rows need no look."""
    table = cells.table
    return bool(
        settings.reflectors or settings.meters or settings.weather.says or table.weather.says or table.reflector
        or table.applied is not None or any(cells.has(f.name) for f in (*AIR, REFLECTOR_COLUMN))
    )  # fmt: skip


class _Givers:
    """Where the figures of each row come from: its own cells, its table, the job, its reflector and instrument."""

    def __init__(self, settings: Settings, cells: Cells, use: list[int]) -> None:
        self.settings, self.cells = settings, cells
        own = {c: cells.values(c, use) for c in ("temperature", "pressure", "humidity", "ppm")}
        wider = cells.table.weather.over(settings.weather)
        self.airs: dict[int, Air] = {}
        self.reflectors: dict[int, str] = {}
        self.meters: dict[int, tuple[str, Meter]] = {}
        for i in use:
            cell = Air(*(None if np.isnan(column[i]) else float(column[i]) for column in own.values()))
            self.airs[i] = self._checked(i, cell, wider)
            self.reflectors[i] = self._reflector(i)
            self.meters[i] = self._meter(i)

    @property
    def any(self) -> bool:
        """Whether there is anything to correct with."""
        return any(self.source(key, i) for key in NAMES for i in self.airs)

    @property
    def first(self) -> str:
        """The column or key that asks for `applied`."""
        columns = [*("reflector", "temperature", "pressure", "humidity", "ppm")]
        return next((c for c in columns if self.cells.has(c)), "applied")

    def source(self, key: str, i: int) -> str:
        """The figures of a correction in words, '' where there are none."""
        name, meter = self.meters[i]
        if key == REFLECTOR:
            return f"reflector {self.reflectors[i]}" if self.reflectors[i] else ""
        if key == CONSTANT:
            return f"constant of {name}" if meter.constant else ""
        if key == SCALE:
            return f"{meter.scale_ppm:g} ppm of {name}" if meter.scale_ppm else ""
        return self.airs[i].words if self.airs[i].says else ""

    def amount(self, key: str, i: int, distance: float) -> float:
        """A correction in metres to a distance that has those before it."""
        _, meter = self.meters[i]
        if key == REFLECTOR:
            return self.settings.reflectors[self.reflectors[i]]
        if key == CONSTANT:
            return meter.constant
        if key == SCALE:
            return distance * meter.scale_ppm * 1e-6
        return self._atmosphere(i, distance, meter)

    def _atmosphere(self, i: int, distance: float, meter: Meter) -> float:
        air = self.airs[i]
        if air.ppm is not None:
            return distance * air.ppm * 1e-6
        if meter.wavelength_um is None or meter.zero_weather is None:
            name = self.meters[i][0] or "NAME"
            hint = (
                'the weather tells the correction only with wavelength = "..." and zero_weather = { temperature = ..., '
                f"pressure = ... }} under [instruments.{name}] (the instrument's manual has both); or give ppm"
            )
            self.cells.fault(i, "temperature", self.airs[i].words, hint)
            return 0.0
        group = group_refractivity(meter.wavelength_um)
        return first_velocity(distance, refractivity(group, meter.zero_weather), refractivity(group, air))

    def _checked(self, i: int, own: Air, wider: Air) -> Air:
        if own.ppm is not None and (own.temperature, own.pressure, own.humidity) != (None, None, None):
            self.cells.fault(i, "ppm", f"{own.ppm:g}", "give the weather or the ppm it comes to, not both")
        air = own.over(wider)
        if air.says and air.ppm is None:
            for column, value in (("temperature", air.temperature), ("pressure", air.pressure)):
                if value is None and not self.cells.text(column)[i]:
                    self.cells.fault(i, column, "", f"weather without {column}; fill it, or give ppm")
            if air.temperature is None or air.pressure is None:
                return Air()  # the fault is noted
        return air

    def _reflector(self, i: int) -> str:
        """The reflector of a row: its own, its table's, or the only one."""
        known = self.settings.reflectors
        own = self.cells.text("reflector")[i]
        name = own or self.cells.table.reflector
        hint = f"no such reflector; add [reflectors.{name}]; {nearest(name, known)}"
        if own and own not in known:
            self.cells.fault(i, "reflector", own, hint)
            return ""
        if name and name not in known:
            line = line_of(self.settings.lines, f"{self.cells.table.path}.reflector")
            self.cells.faults.add("job.toml", line, "book.reflector", name, hint)
            return ""
        if not name and len(known) > 1 and REFLECTOR not in (self.cells.table.applied or ()):
            hint = f"which reflector? {', '.join(known)}; name one in [[book]] or in a column reflector"
            self.cells.fault(i, "reflector", "", hint)
        return name or (next(iter(known)) if len(known) == 1 else "")

    def _meter(self, i: int) -> tuple[str, Meter]:
        """Name and distance meter of a row; an empty one where no instrument says anything of it."""
        name = self.cells.text("instrument")[i] or self.cells.table.instrument
        if name:
            return name, self.settings.meters.get(name, Meter())
        only = list(self.settings.meters)
        return (only[0], self.settings.meters[only[0]]) if len(only) == 1 else ("", Meter())


def ledger_in_order(corrected: Corrected, lay: Lay, named: Named, use: list[int]) -> list[LedgerLine]:
    """The lines of a table distance by distance, with what brought slopes to level at the end."""
    if not corrected.lines and not lay.corrections:
        return []
    lines, names = list(corrected.lines), named()
    for name, amount in lay.corrections:
        lines += [LedgerLine(names[i], name, float(amount[i]), HERE, "the zenith angle of the row") for i in use]
    order = {names[i]: i for i in use}
    return sorted(lines, key=lambda line: order[line.observation])
