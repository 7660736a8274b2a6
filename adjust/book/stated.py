"""The stated standard deviation of every reading: its own, or that of the instrument that took it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from adjust.book.cells import Cells
from adjust.book.lay import Lay
from adjust.book.settings import Settings
from adjust.book.sheet import Sheet
from adjust.book.toml_lines import line_of
from adjust.errors import nearest
from adjust.network import Array, Bools, Makeup, Source
from adjust.sigmas import EXAMPLES, Precision
from adjust.units import LONGEST_M, SMALLEST_SD

ZENITH_SD = "zenith"
"""Key of an instrument's figure for zenith angles, which reduced distances need beside their own."""
AS_BOOKED = "sd as booked"
"""What a standard deviation is made of that stands in the reading's own row."""


def stated_sds(
    settings: Settings, cells: Cells, sheet: Sheet, lay: Lay, held: Bools, use: list[int]
) -> tuple[Array, list[str], Makeup]:
    """Standard deviations (n,) from the column sd or the instrument, the label of their source, and their makeup."""
    kind = sheet.kind
    own = cells.sds(sheet.sd, kind.dimension, use)
    sd = own.copy()
    labels = ["sd"] * len(cells)
    # read for every row, also where a row's own sd makes them needless: what cannot be meant is a fault anyway
    sizes = {c: cells.values(c, use) for c in (kind.length_column, kind.setup_column, "count") if c} | sheet.sizes
    blank = cells.text(sheet.sd)
    lacking = [i for i in use if not blank[i] and not held[i]]
    sources = [Source(AS_BOOKED, np.nan_to_num(own))]
    by_model: dict[str, list[int]] = {}
    for i in lacking:
        name = cells.text("instrument")[i] or cells.table.instrument
        by_model.setdefault(name, []).append(i)
    for name, rows in by_model.items():
        found = _model(settings, cells, sheet, name, rows)
        if found:
            label, model = found
            given, root = _given(cells, sheet, model, lay.values, sizes, rows)
            zenith = settings.instruments[label].get(ZENITH_SD)
            sd[rows] = lay.sd(rows, model.sd(len(rows), **given) * root, zenith.sd(len(rows)) if zenith else 0.0)
            sources += _sources(label, model, zenith, lay, (len(cells), rows), given, root)
            for i in rows:
                labels[i] = label
    factor = cells.table.sd_factor
    sd *= factor
    for i in use:
        if not held[i] and (sd[i] < SMALLEST_SD or sd[i] >= LONGEST_M):
            hint = f"the standard deviation comes to {sd[i]:g} m or rad; look at the instrument, count and sd_factor"
            cells.fault(i, sheet.sd, blank[i], hint)
    sd[held] = 0.0
    made = tuple(replace(source, sd=source.sd * factor) for source in sources if source.sd.any())
    return sd, labels, Makeup(made, np.where(np.isin(np.arange(len(sd)), lacking), sizes["count"], np.nan), factor)


def _sources(
    label: str, model: Precision, zenith: Precision | None, lay: Lay, at: tuple[int, list[int]],
    given: dict[str, Array], root: Array,
) -> list[Source]:  # fmt: skip
    """The terms of an instrument's model in its rows, ``at`` = (n, rows), and the zenith angle's where one reduced."""
    n, rows = at

    def everywhere(sizes: Array) -> Array:
        whole = np.zeros(n)
        whole[rows] = sizes
        return whole

    slope = 1.0 if lay.by_slope is None else lay.by_slope[rows]
    found = [
        Source(f'"{term.text}" of {label}', everywhere(size * root * slope), model.linear, counted=True)
        for term, size in model.parts(len(rows), **given)
    ]
    if zenith and lay.by_zenith is not None:
        across = np.abs(lay.by_zenith[rows]) * zenith.sd(len(rows))
        found.append(Source(f'zenith angle, "{zenith.text}" of {label}', everywhere(across)))
    return found


def _model(settings: Settings, cells: Cells, sheet: Sheet, name: str, rows: list[int]) -> tuple[str, Precision] | None:
    """The instrument's error model for this kind; exactly one must fit where none is named."""
    kind = sheet.kind
    key = kind.instrument.name if kind.instrument else ""
    instruments = settings.instruments
    fitting = {n: keys[key] for n, keys in instruments.items() if key in keys}
    if name and name not in instruments:
        _unknown_instrument(settings, cells, name, rows[0])
    elif name and name not in fitting:
        _no_figure(cells, sheet, name, rows[0])
    elif name:
        return name, fitting[name]
    elif len(fitting) == 1:
        return next(iter(fitting.items()))
    elif fitting:
        hint = f"which instrument? {', '.join(fitting)} all have {key}; name one in [[book]] or in a column instrument"
        cells.fault(rows[0], "instrument", "", hint)
    else:
        _no_figure(cells, sheet, "NAME", rows[0])
    return None


def _no_figure(cells: Cells, sheet: Sheet, name: str, i: int) -> None:
    """Neither the row nor an instrument tells the standard deviation."""
    hint, kind = f"no standard deviation: add a column {sheet.sd}", sheet.kind
    if kind.instrument:
        figure = EXAMPLES[kind.instrument.dimension].partition(" or ")[0].removesuffix(" (sum)")
        hint += f", or for example {kind.instrument.name} = {figure} under [instruments.{name}] in job.toml"
    cells.fault(i, sheet.sd, "", hint)


def _unknown_instrument(settings: Settings, cells: Cells, name: str, i: int) -> None:
    """The name stands in the row, or else in the table's [[book]] block."""
    hint = f"no such instrument; add [instruments.{name}]; {nearest(name, settings.instruments)}"
    if cells.text("instrument")[i]:
        cells.fault(i, "instrument", name, hint)
    else:
        line = line_of(settings.lines, f"{cells.table.path}.instrument")
        cells.faults.add("job.toml", line, "book.instrument", name, hint)


def _given(
    cells: Cells, sheet: Sheet, model: Precision, values: Array, sizes: dict[str, Array], rows: list[int]
) -> tuple[dict[str, Array], Array]:
    """What a model asks of its rows, and the factor (rows,) of pointings and count."""
    kind = sheet.kind
    given: dict[str, Array] = {"distance": values[rows]}
    for need, column in (("length", kind.length_column), ("setup", kind.setup_column)):
        if column and need in model.needs:
            given[need] = sizes[column][rows]
            where, fill = sheet.wanting.get(column, (column, f"the {column} of the line; fill it or give sd"))
            for i in rows:
                if np.isnan(sizes[column][i]) and not cells.text(column)[i]:
                    cells.fault(i, where, "", f'the instrument\'s "{model.text}" needs {fill}')
    count = sizes["count"][rows]
    count = np.where(np.isnan(count), 1.0, count)
    return given, np.sqrt(kind.pointings / count)
