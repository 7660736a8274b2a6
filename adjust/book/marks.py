"""Stations as they are named: the control and stations tables, and every name met in an observation."""

from __future__ import annotations

import numpy as np

from adjust.book.cells import Cells
from adjust.book.faults import Faults
from adjust.network import HELD, NEW, PARTS, ROLES, WEIGHTED, Array, Block, Stations

_CODE = {name: code for code, name in enumerate(ROLES)}


class Marks:
    """The growing list of stations with what is known of each."""

    def __init__(self, faults: Faults, booked: dict[str, str]) -> None:
        self.faults, self.booked = faults, booked
        self.names: list[str] = []
        self.index: dict[str, int] = {}
        self.known: list[list[float]] = []
        self.known_sd: list[list[float]] = []
        self.role: list[list[int]] = []
        self.start: list[list[float]] = []
        self._seen: dict[tuple[str, str], str] = {}
        self._weighted: list[tuple[str, int, int]] = []

    def number(self, name: str) -> int:
        """The station's number, a new one where the name is new."""
        i = self.index.get(name)
        if i is None:
            i = self.index[name] = len(self.names)
            self.names.append(name)
            self.known.append([np.nan] * 3)
            self.known_sd.append([np.nan] * 3)
            self.role.append([NEW] * 3)
            self.start.append([np.nan] * 3)
        return i

    def add(self, cells: Cells) -> None:
        """Take over a control or stations table."""
        use = range(len(cells))
        names = cells.names("station", use, self.booked)
        xyz = np.stack([cells.values(part, use) for part in PARTS], axis=1)
        is_control = cells.table.kind == "control"
        sds = np.stack([cells.sds(f"sd_{part}", "length", use) for part in PARTS], axis=1) if is_control else xyz
        roles = self._roles(cells) if is_control else []
        for i in use:
            if not names[i]:
                continue
            place = f"{cells.rows.file}:{cells.rows.lines[i]}"
            first = self._seen.setdefault((cells.table.kind, names[i]), place)
            if first != place:
                cells.fault(i, "station", names[i], f"already given at {first}; keep one row")
                continue
            n = self.number(names[i])
            if is_control:
                self._control(cells, i, n, xyz[i], sds[i] * cells.table.sd_factor, roles[i])
            else:
                self.start[n] = [float(x) for x in xyz[i]]

    def _roles(self, cells: Cells) -> list[tuple[str, str]]:
        use = range(len(cells))
        plane = cells.choices("role", use)
        height = cells.choices("role_height", use)
        return [(p, h or p) for p, h in zip(plane, height, strict=True)]

    def _control(self, cells: Cells, i: int, n: int, xyz: Array, sds: Array, roles: tuple[str, str]) -> None:
        given = [part for part in PARTS if cells.has(part) and cells.text(part)[i]]
        if not given:
            cells.fault(
                i, "station", self.names[n], "a mark without coordinates; give east and north, height, or all three"
            )
        for part, role, x, sd in zip(range(3), (roles[0], roles[0], roles[1]), xyz, sds, strict=True):
            if np.isnan(x):
                continue
            column = f"sd_{PARTS[part]}"
            if role == "weighted" and not cells.text(column)[i]:
                cells.fault(
                    i, column, "", "a weighted coordinate needs its standard deviation; fill it or use role held"
                )
            self.known[n][part] = float(x)
            self.known_sd[n][part] = float(sd)
            self.role[n][part] = _CODE[role]
        self._weighted.append((cells.rows.file, cells.rows.lines[i], n))

    def has_datum(self) -> bool:
        """Whether any mark is held or weighted."""
        return any(code in (HELD, WEIGHTED) for roles in self.role for code in roles)

    def stations(self) -> Stations:
        """The stations as arrays; control wins over starting values."""
        n = len(self.names)
        known = np.array(self.known, dtype=float).reshape(n, 3)
        start = np.array(self.start, dtype=float).reshape(n, 3)
        return Stations(
            names=tuple(self.names),
            known=known,
            known_sd=np.array(self.known_sd, dtype=float).reshape(n, 3),
            role=np.array(self.role, dtype=np.int64).reshape(n, 3),
            start=np.where(np.isnan(known), start, known),
        )

    def weighted(self) -> list[Block]:
        """Weighted coordinates as observations, a block a control table."""
        blocks = []
        for file in dict.fromkeys(f for f, _, _ in self._weighted):
            rows = [(line, n) for f, line, n in self._weighted if f == file and WEIGHTED in self.role[n]]
            if not rows:
                continue
            n = np.array([r[1] for r in rows], dtype=np.int64)
            observed = np.array(self.role, dtype=np.int64)[n] == WEIGHTED
            blocks.append(
                Block(
                    kind="control",
                    file=file,
                    stations=n[:, None],
                    values=np.where(observed, np.array(self.known)[n], np.nan),
                    sd=np.where(observed, np.array(self.known_sd)[n], np.nan),
                    group=np.full(len(n), -1),
                    held=np.zeros(len(n), dtype=bool),
                    line=np.array([r[0] for r in rows], dtype=np.int64),
                    precision=("sd",) * len(n),
                )
            )
        return blocks
