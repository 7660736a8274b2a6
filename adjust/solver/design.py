"""The linearised observation equations v = A dx - l, row by row, with the pattern made once and the numbers refilled.

A scalar row has up to ``e`` slots: the coordinates of its stations and at most one shared unknown; ``columns`` (R, e)
holds the unknown of each slot (-1: known or empty) and ``coefficients`` (R, e) its partial. The partial by the row's
local unknown (an orientation) is kept apart, because it is eliminated inside the row's element.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from adjust.frames import LocalPlane, beside
from adjust.graph.parts import HEIGHT, PLANE, Part, row_groups
from adjust.kinds import KINDS
from adjust.network import HELD, WEIGHTED, Array, Block, Bools, Ints, Network, renumbered
from adjust.solver.centring import Vectors
from adjust.units import TURN

_NODE = np.array([PLANE, PLANE, HEIGHT])
HEIGHT_PART = 2


@dataclass(frozen=True)
class Unknowns:
    """Numbers of the unknowns: coordinates (n, 3) and shared group unknowns (g,), -1 where known or local."""

    coordinate: Ints
    shared: Ints
    count: int

    @classmethod
    def of(cls, network: Network, parts: list[Part], free: Bools) -> Unknowns:
        """Every touched coordinate that is not held; ``free`` (n, 3) marks where control is not to be held."""
        touched = np.zeros((len(network.stations), 2), dtype=bool)
        for part in parts:
            touched |= part.nodes
        wanted = touched[:, _NODE] & ((network.stations.role != HELD) | free)
        coordinate = np.full(wanted.shape, -1, dtype=np.int64)
        coordinate[wanted] = np.arange(wanted.sum())
        is_shared = np.array([group.shared for group in network.groups], dtype=bool)
        shared = np.full(len(is_shared), -1, dtype=np.int64)
        shared[is_shared] = wanted.sum() + np.arange(is_shared.sum())
        return cls(coordinate, shared, int(wanted.sum() + is_shared.sum()))


@dataclass(frozen=True)
class State:
    """Where an iteration stands: positions (n, 3) and group unknowns (g,)."""

    positions: Array
    groups: Array


@dataclass(frozen=True)
class Linearised:
    """Numbers of one linearisation: coefficients (R, e), by_local (R,), misclosure (R,) = observed - computed.

    Coefficients stand for known coordinates too; ``Design.columns`` says which slots are unknowns.
    """

    coefficients: Array
    by_local: Array
    misclosure: Array
    computed: Array
    local: Ints
    """(R,) local group of each row, -1 for none."""
    by_vector: Array
    """(R, v, 3) partials by the centring vectors; v = 0 where the network has none."""


@dataclass(frozen=True)
class Design:
    """The pattern of the observation equations of a network in a frame."""

    network: Network
    frame: LocalPlane
    unknowns: Unknowns
    coupled: Bools
    """(n,) stations whose plane and height belong to one part."""

    @cached_property
    def observed(self) -> Array:
        """Observed values (R,)."""
        return self._scalar([b.values for b in self.network.blocks])

    @cached_property
    def sd(self) -> Array:
        """Standard deviations (R,) before adjustment; 0 for rows held without error."""
        return self._scalar([b.sd for b in self.network.blocks])

    @cached_property
    def held(self) -> Bools:
        """Rows (R,) that are conditions."""
        return np.asarray(self.sd == 0.0)

    @cached_property
    def wraps(self) -> Bools:
        """Rows (R,) whose values lie on a circle."""
        return np.array([KINDS[b.kind].wraps for b in self.network.blocks], dtype=bool)[self.network.rows.block]

    @cached_property
    def group(self) -> Ints:
        """Group of each row (R,), -1 for none."""
        return row_groups(self.network)

    @cached_property
    def local(self) -> Ints:
        """Local group of each row (R,), -1 for none."""
        is_local = np.append([not g.shared for g in self.network.groups], False)
        return np.where(is_local[self.group], self.group, -1)

    def _scalar(self, parts: list[Array]) -> Array:
        rows = self.network.rows
        out = np.empty(len(rows))
        for b, values in enumerate(parts):
            here = rows.block == b
            out[here] = values[rows.row[here], rows.part[here]]
        return out

    @cached_property
    def vectors(self) -> Vectors:
        """Centring vectors of the rows."""
        return Vectors.of(self.network)

    @cached_property
    def columns(self) -> Ints:
        """Unknown of every slot (R, e), -1 where there is none."""
        rows, found = self.network.rows, []
        for b, block in enumerate(self.network.blocks):
            per_row = self._block_columns(block)
            here = rows.block == b
            found.append(per_row[rows.row[here]])
        width = max((f.shape[1] for f in found), default=0) + 1
        out = np.full((len(rows), width), -1, dtype=np.int64)
        for b, columns in enumerate(found):
            out[rows.block == b, : columns.shape[1]] = columns
        grouped = self.group >= 0
        out[grouped, -1] = self.unknowns.shared[self.group[grouped]]
        return out

    @cached_property
    def places(self) -> Ints:
        """Coordinate of every slot (R, e) as 3 station + component, known or not; -1 for slots without one."""
        rows = self.network.rows
        out = np.full(self.columns.shape, -1, dtype=np.int64)
        for b, block in enumerate(self.network.blocks):
            ends = [end for sight in KINDS[block.kind].sights for end in sight]
            if not ends:
                continue
            per_row = np.concatenate(
                [
                    3 * block.stations[:, [end]] + np.arange(3) if end >= 0 else np.full((len(block), 3), -1)
                    for end in ends
                ],
                axis=1,
            )
            here = rows.block == b
            out[here, : per_row.shape[1]] = per_row[rows.row[here]]
        return out

    def _block_columns(self, block: Block) -> Ints:
        """(m, slots) unknowns in the order of sights, ends, components."""
        kind = KINDS[block.kind]
        columns = [np.empty((len(block), 0), dtype=np.int64)]
        for ends in kind.sights:
            for end in ends:
                if end < 0:
                    columns.append(np.full((len(block), 3), -1))
                else:
                    columns.append(self._coordinates(block, end))
        return np.concatenate(columns, axis=1)

    def _coordinates(self, block: Block, end: int) -> Ints:
        """(m, 3) unknowns of one end."""
        found = self.unknowns.coordinate[block.stations[:, end]]
        if not self._asks_heights(block):
            found[~self.coupled[block.stations[:, end]], HEIGHT_PART] = -1
        return found

    @staticmethod
    def _asks_heights(block: Block) -> bool:
        """Whether a block depends on heights. A length at ground level takes them as they stand: they scale it by
        1.6e-7 a metre, which is no reading of a height; only where zenith angles or slopes tie plane and heights
        together anyway does it have its partials by them."""
        return not block.surface or "both" in KINDS[block.kind].touched(block.surface)

    @cached_property
    def unasked(self) -> Array:
        """(n, 3) coordinates that stand in where nothing is asked of a component: known heights, else the plane's."""
        out = np.zeros((len(self.network.stations), 3))
        known = self.network.stations.start[:, HEIGHT_PART]
        out[:, HEIGHT_PART] = np.where(np.isnan(known), self.frame.plane_height, known)
        return out

    def linearise(self, state: State) -> Linearised:
        """Values, partials and misclosures at a state."""
        rows = self.network.rows
        coefficients = np.zeros(self.columns.shape)
        by_group = np.zeros(len(rows))
        computed = np.empty(len(rows))
        by_vector = np.zeros((*self.vectors.of_row.shape, 3) if self.vectors.any else (len(rows), 0, 3))
        positions = np.where(np.isnan(state.positions), self.unasked, state.positions)
        for b, block in enumerate(self.network.blocks):
            here = rows.block == b
            i, p = rows.row[here], rows.part[here]
            with np.errstate(divide="ignore", invalid="ignore"):  # a sight of no length is reported by name later
                values, by_position, by_unknown = self._block(block, positions, state.groups)
            computed[here] = values[i, p]
            coefficients[here, : by_position.shape[2]] = by_position[i, p]
            by_group[here] = by_unknown[i, p]
            if self.vectors.any and block.eccentric is not None:
                ends = by_position[i, p].reshape(len(i), -1, 2, 3)  # (rows, sights, ends, components)
                by_vector[here, 0] = ends[:, :, 0].sum(axis=1)
                by_vector[here, 1 : 1 + ends.shape[1]] = ends[:, :, 1]
        coefficients[:, -1] = by_group
        l = self.observed - computed
        l[self.wraps] -= TURN * np.round(l[self.wraps] / TURN)
        return Linearised(coefficients, np.where(self.local >= 0, by_group, 0.0), l, computed, self.local, by_vector)

    def partials(self, block: Block, positions: Array, groups: Array) -> Array:
        """Partials (m, p, slots) of a block's values by its slots at positions (n, 3) without NaN."""
        return self._block(block, positions, groups)[1]

    def _block(self, block: Block, positions: Array, groups: Array) -> tuple[Array, Array, Array]:
        kind = KINDS[block.kind]
        ends = [
            (block.stations[:, i] if i >= 0 else np.full(len(block), -1), block.stations[:, j]) for i, j in kind.sights
        ]
        on = (block.surface, block.above)
        sights = [np.empty((len(block), 0, 4))]
        sights += [self.frame.sights(positions, i, j, *on)[:, None] for i, j in ends]
        by_offset = None
        if block.offset is not None:
            moved, by_offset = beside(sights[1][:, 0], block.offset)
            sights[1] = moved[:, None]
        values, by_sight, by_group = kind.on(block.surface)(
            np.concatenate(sights, axis=1), _group_values(block, groups)
        )
        if by_offset is not None:
            by_sight[:, :, 0] = by_sight[:, :, 0] @ by_offset
        carried = [np.empty((*values.shape, 0))]
        for s, (i, j) in enumerate(ends):
            by_ends = self.frame.carry(by_sight[:, :, s], self.frame.jacobian(positions, i, j, *on))
            if not self._asks_heights(block):
                for end, stations in enumerate((i, j)):
                    by_ends[~self.coupled[stations], :, end, HEIGHT_PART] = 0.0
            carried.append(by_ends.reshape(*values.shape, -1))
        return values, np.concatenate(carried, axis=2), by_group


def _group_values(block: Block, groups: Array) -> Array:
    constant = 0.0 if block.constant is None else block.constant
    return np.where(block.group >= 0, np.append(groups, 0.0)[block.group], constant)


def control_as_new(network: Network, free: Bools) -> Network:
    """The network without the weighted control rows of stations whose datum is free (n, 3)."""
    if not free.any() or not (network.stations.role == WEIGHTED).any():
        return network
    blocks, kept = [], np.ones(len(network.rows), dtype=bool)
    for b, block in enumerate(network.blocks):
        if not KINDS[block.kind].from_control:
            blocks.append(block)
            continue
        sd = np.where(free[block.stations[:, 0]], np.nan, block.sd)
        here = network.rows.block == b
        kept[here] = ~np.isnan(sd[network.rows.row[here], network.rows.part[here]])
        if not np.isnan(sd).all():
            blocks.append(replace(block, sd=sd))
    return replace(network, blocks=tuple(blocks), clusters=renumbered(network.clusters, kept))
