"""The same scalar rows in several networks of one job, and networks without some of them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from adjust.kinds import KINDS
from adjust.network import CHECK, Ints, Network, renumbered


def rows_in(one: Network, network: Network) -> Ints:
    """Number of each scalar row of a network in another one of the same job; a free datum sets control aside."""
    number = {id(block.line): b for b, block in enumerate(network.blocks)}
    mine, theirs = one.rows, network.rows
    place = {(b, i, p): r for r, (b, i, p) in enumerate(zip(theirs.block.tolist(), theirs.row.tolist(),
                                                            theirs.part.tolist(), strict=True))}  # fmt: skip
    block = [number[id(one.blocks[b].line)] for b in mine.block.tolist()]
    return np.array([place[b, i, p] for b, i, p in zip(block, mine.row.tolist(), mine.part.tolist(), strict=True)],
                    dtype=np.int64)  # fmt: skip


def without_rows(network: Network, rows: Ints) -> Network:
    """The network without some scalar rows; a weighted coordinate left out is compared afterwards."""
    kept = np.ones(len(network.rows), dtype=bool)
    kept[rows] = False
    blocks, role = [], network.stations.role.copy()
    for b, block in enumerate(network.blocks):
        gone = np.zeros(block.sd.shape, dtype=bool)
        here = (network.rows.block == b) & ~kept
        gone[network.rows.row[here], network.rows.part[here]] = True
        if KINDS[block.kind].from_control:
            at, part = np.nonzero(gone)
            role[block.stations[at, 0], part] = CHECK
        sd = np.where(gone, np.nan, block.sd)
        left = np.flatnonzero(~np.isnan(sd).all(axis=1))
        if len(left):
            blocks.append(replace(block, sd=sd).kept(left))
    stations = replace(network.stations, role=role)
    return replace(network, stations=stations, blocks=tuple(blocks), clusters=renumbered(network.clusters, kept))
