"""The same scalar rows in several networks of one job, and networks without some of them."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from adjust.kinds import KINDS
from adjust.network import CHECK, Ints, Network, renumbered


def rows_in(one: Network, network: Network) -> Ints:
    """Number of each scalar row of a network in another one of the same job, that may hold more."""
    place = {key: r for r, key in enumerate(_keys(network))}
    return np.array([place[key] for key in _keys(one)], dtype=np.int64)


def _keys(network: Network) -> Iterator[tuple[str, str, str, int]]:
    """What tells a scalar row from all others of its job: table, kind, name and part."""
    rows, blocks = network.rows, network.blocks
    for b, i, part in zip(rows.block.tolist(), rows.row.tolist(), rows.part.tolist(), strict=True):
        yield blocks[b].file, blocks[b].kind, blocks[b].name(i), part


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
