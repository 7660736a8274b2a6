"""The datum: which freedoms of the network nothing fixes, and what is done about them.

The movements that leave every distance ratio and angle alone are shift east, shift north, turn and scale in the plane
and the shift in height. With coordinates reduced to the middle of the part and divided by its extent s they move a
station at (E, N) by

    shift east (1, 0)   shift north (0, 1)   turn (N, -E)   scale (E, N)        and an orientation by 1 for the turn.

Where plane and heights hang together the scale carries the heights along; that sights see the Earth's curvature fixes
it by so little (one part in millions of the readings' own weight) that it counts as free.

A freedom is taken away by a kind of reading (a distance fixes the scale) or by control; what is left is the null space
of those conditions. A free part ends with C'(x - x_ref) = 0 over its datum stations, which is the minimum-norm
(Moore-Penrose) solution over them (Koch 1999, section 3.3): with a solution x_m, cofactors Q_m on minimal constraints,
null space G at x and C = G at x_ref restricted to the datum stations

    x = x_m - G (C'G)^-1 C'(x_m - x_ref),      Q = S Q_m S',   S = I - G (C'G)^-1 C'      (Baarda's S-transformation).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import qr

from adjust.errors import Unsolvable
from adjust.graph.parts import HEIGHT, PLANE, Part, listed
from adjust.kinds import KINDS
from adjust.network import HELD, WEIGHTED, Array, Bools, Ints, Network
from adjust.solver.design import Unknowns

RANK_LEAST = 1e-8
"""Singular values of the normalised conditions below this share of the largest count as zero: marks that lie together
within 1e-8 of the network's extent give no orientation."""


@dataclass(frozen=True)
class PartDatum:
    """The datum of one part: free or not, and its missing freedoms in words and as null vectors."""

    part: Part
    free: bool
    missing: tuple[str, ...]
    null: Array
    """(f, d) null vectors in terms of the part's freedoms."""
    stations: Ints
    """Datum stations of a free part."""
    spare: int = 0
    """Control coordinates beyond what the datum needs."""


@dataclass(frozen=True)
class Datum:
    """The datum of all parts together for the solver."""

    parts: list[PartDatum]
    constraint: Array
    """C (u, d) at the reference positions."""
    reference: Array
    """x_ref (u,)."""
    fixed: Ints
    """Unknowns held at zero step in the minimal constraints, d of them."""

    @property
    def defect(self) -> int:
        """Number of missing freedoms."""
        return int(self.constraint.shape[1])


def freedoms(part: Part) -> tuple[str, ...]:
    """Names of the movements a part could make."""
    plane = ("shift east", "shift north", "turn", "scale") if part.nodes[:, PLANE].any() else ()
    return plane + (("height",) if part.nodes[:, HEIGHT].any() else ())


def movements(part: Part, positions: Array) -> Array:
    """Movement (n, 3, f) of every station of the part for each of its freedoms, in units of the part's extent."""
    names = freedoms(part)
    out = np.zeros((*positions.shape, len(names)))
    if "turn" in names:
        here = part.nodes[:, PLANE]
        xy = positions[here, :2]
        xy = xy - xy.mean(axis=0)
        xy /= np.abs(xy).max() or 1.0
        out[here, 0, 0] = out[here, 1, 1] = 1.0
        out[here, 0, 2], out[here, 1, 2] = xy[:, 1], -xy[:, 0]
        out[here, :2, 3] = xy
    if "height" in names:
        up = part.nodes[:, HEIGHT]
        out[up, 2, -1] = 1.0
        if "scale" in names:
            out[up, 2, 3] = (positions[up, 2] - positions[up, 2].mean()) / _extent(part, positions)
    return out


def find_datum(
    network: Network, parts: list[Part], kind: str, chosen: tuple[str, ...], start: Array
) -> list[PartDatum]:
    """The datum of every part; ``kind`` control, free or '' (control where a part has some).

    Raises Unsolvable with a sentence for every freedom that nothing fixes where the part is not free.
    """
    out, sentences = [], []
    for part in parts:
        control = _control(network, part)
        free = kind == "free" or (kind == "" and not control.any())
        null = _null(network, part, start, control & (not free))
        missing = tuple(name for name, v in zip(freedoms(part), null, strict=True) if np.abs(v).max(initial=0) > 1e-6)
        if missing and not free:
            sentences += _missing_words(network, part, missing, control)
        spare = 0 if free else int(control.sum()) - _null(network, part, start, np.zeros_like(control)).shape[1]
        out.append(PartDatum(part, free, missing, null, _datum_stations(network, part, chosen), spare))
    if sentences:
        raise Unsolvable(sentences)
    return out


def _control(network: Network, part: Part) -> Bools:
    """Coordinates (n, 3) of the part that are held or weighted."""
    role = network.stations.role
    return np.asarray(((role == HELD) | (role == WEIGHTED)) & part.nodes[:, [PLANE, PLANE, HEIGHT]])


def _null(network: Network, part: Part, positions: Array, control: Bools) -> Array:
    """Null vectors (f, d): combinations of freedoms that neither kinds of reading nor control fix."""
    names = freedoms(part)
    rows = [movements(part, positions)[control]]
    for name in _fixed_by_kinds(network, part) & set(names):
        rows.append(np.eye(len(names))[[names.index(name)]])
    matrix = np.concatenate(rows)
    if not len(matrix):
        return np.eye(len(names))
    _, s, vt = np.linalg.svd(matrix)
    rank = int((s > RANK_LEAST * s[0]).sum())
    return np.asarray(vt[rank:].T)


def _fixed_by_kinds(network: Network, part: Part) -> set[str]:
    """Freedoms that the part's readings take away; a row whose group unknown absorbs a freedom does not fix it."""
    fixed: set[str] = set()
    rows = network.rows
    for b in np.unique(rows.block[part.rows]):
        block = network.blocks[b]
        kind = KINDS[block.kind]
        if kind.from_control:
            continue
        here = rows.row[part.rows & (rows.block == b)]
        absorbed = kind.group.absorbs if kind.group and (block.group[here] >= 0).all() else frozenset()
        fixed |= kind.fixes - absorbed
    return fixed


def _datum_stations(network: Network, part: Part, chosen: tuple[str, ...]) -> Ints:
    """The chosen stations of the part, where it has none of them those with starting values, else all."""
    inside = part.stations
    if chosen:
        wanted = {network.stations.index[name] for name in chosen}
        found = np.array([i for i in inside if i in wanted], dtype=np.int64)
        if len(found):
            return found
    given = ~np.isnan(network.stations.start[inside])
    started = inside[
        (given[:, :2].all(axis=1) & part.nodes[inside, PLANE]) | (given[:, 2] & part.nodes[inside, HEIGHT])
    ]
    return started if len(started) else inside


def _missing_words(network: Network, part: Part, missing: tuple[str, ...], control: Bools) -> list[str]:
    """One sentence for each movement that nothing fixes."""
    who, held = listed(network, part.stations), np.flatnonzero(control.any(axis=1))
    cure = 'give control there, or set [datum] kind = "free"'
    words = []
    if "height" in missing:
        words.append(f"nothing fixes the height of {who}: no bench mark with a known height; {cure}")
    in_plane = np.flatnonzero(control[:, :2].any(axis=1))
    if not len(in_plane) and "shift east" in missing:
        words.append(f"nothing fixes the position of {who}: no mark with known east and north; {cure}")
    elif "turn" in missing or "scale" in missing:
        about = f" about {listed(network, held)}" if len(held) else ""
        for name, need in (
            ("turn", "a second known mark or an azimuth"),
            ("scale", "a second known mark or a distance"),
        ):
            if name in missing:
                words.append(f"nothing fixes the {name} of {who}{about}: it needs {need}")
    elif "shift east" in missing or "shift north" in missing:
        words.append(f"nothing fixes the position of {who} in one direction: the known coordinates are too few; {cure}")
    return words


def assemble_datum(
    network: Network, parts: list[PartDatum], unknowns: Unknowns, positions: Array, groups: Array
) -> Datum:
    """Constraint, reference and minimal constraints of the free parts at the reference positions."""
    vectors = null_space(network, parts, unknowns, positions)
    constraint = np.zeros_like(vectors)
    column = 0
    fixed: list[Ints] = []
    for one in parts:
        d = one.null.shape[1] if one.free else 0
        if not d:
            continue
        at = unknowns.coordinate[one.stations]
        at = at[(at >= 0) & one.part.nodes[one.stations][:, [PLANE, PLANE, HEIGHT]]]
        constraint[at, column : column + d] = vectors[at, column : column + d]
        fixed.append(_pick(network, one, at, constraint[at, column : column + d]))
        column += d
    return Datum(
        parts, constraint, state_vector(unknowns, positions, groups), np.concatenate([np.empty(0, np.int64), *fixed])
    )


def _pick(network: Network, one: PartDatum, at: Ints, rows: Array) -> Ints:
    """d coordinates of datum stations whose holding fixes the freedoms best (QR with pivoting)."""
    d = rows.shape[1]
    if len(at) >= d:
        _, r, order = qr(rows.T, mode="economic", pivoting=True)
        if abs(r[d - 1, d - 1]) > RANK_LEAST * abs(r[0, 0]):
            return at[order[:d]]
    who = listed(network, one.stations)
    raise Unsolvable(
        [f"the datum stations {who} cannot carry the datum of {one.part.what}: name more stations, farther apart"]
    )


def null_space(network: Network, parts: list[PartDatum], unknowns: Unknowns, positions: Array) -> Array:
    """G (u, d): movements of all unknowns for the missing freedoms of the free parts at the positions."""
    columns = [np.zeros((unknowns.count, 0))]
    for one in parts:
        if not one.free or not one.null.shape[1]:
            continue
        moved = movements(one.part, np.nan_to_num(positions)) @ one.null
        vectors = np.zeros((unknowns.count, one.null.shape[1]))
        numbered = unknowns.coordinate >= 0
        vectors[unknowns.coordinate[numbered]] = moved[numbered]
        turning = np.array([group.turns for group in network.groups], dtype=bool)
        shared = np.flatnonzero((unknowns.shared >= 0) & one.part.groups & turning)
        if len(shared) and "turn" in freedoms(one.part):
            extent = _extent(one.part, positions)
            vectors[unknowns.shared[shared]] = one.null[freedoms(one.part).index("turn")] / extent
        columns.append(vectors)
    return np.concatenate(columns, axis=1)


def _extent(part: Part, positions: Array) -> float:
    xy = positions[part.nodes[:, PLANE], :2]
    return float(np.abs(xy - xy.mean(axis=0)).max()) or 1.0


def state_vector(unknowns: Unknowns, positions: Array, groups: Array) -> Array:
    """The unknowns (u,) at a state."""
    x = np.zeros(unknowns.count)
    numbered = unknowns.coordinate >= 0
    x[unknowns.coordinate[numbered]] = positions[numbered]
    shared = unknowns.shared >= 0
    x[unknowns.shared[shared]] = groups[shared]
    return x
