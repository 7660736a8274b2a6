"""The job without the readings that were found in error, each set aside with its reason."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from adjust.book.job import Aside, Job
from adjust.judge.assess import Judgement
from adjust.kinds import KINDS
from adjust.network import CHECK, Ints, Network, renumbered


def without_suspects(judgement: Judgement) -> Job:
    """The job without the suspects at the job's level; the same job where there are none."""
    job = replace(judgement.solution.job, without_suspects=True)
    rows = [s.row for s in judgement.suspects if s.at_job_level] if judgement.blunders.rows else []
    if not rows:
        return job
    mine = judgement.solution.network.rows
    asides, gone = [], []
    for s in judgement.suspects:
        if s.row in rows:
            reason = f"suspect with a statistic of {abs(s.statistic):.1f}; left out as --without-suspects asks"
            b, i, p = int(mine.block[s.row]), int(mine.row[s.row]), int(mine.part[s.row])
            asides.append(_aside(judgement, b, i, p, reason))
            gone.append(_row_in(job, judgement, b, i, p))
    network = without_rows(job.network, np.array(gone, dtype=np.int64))
    return replace(job, network=network, left_out=(*job.left_out, *asides))


def _aside(judgement: Judgement, b: int, i: int, p: int, reason: str) -> Aside:
    network = judgement.solution.network
    block = network.blocks[b]
    part = KINDS[block.kind].parts[p]
    name = f"{block.name(i)} {part}" if part else block.name(i)
    stations = tuple(network.stations.names[k] for k in block.stations[i])
    return Aside(name, block.file, int(block.line[i]), block.kind, reason, stations)


def _row_in(job: Job, judgement: Judgement, b: int, i: int, p: int) -> int:
    """Number in the job's own network: a free datum may have set weighted control aside since."""
    lines = judgement.solution.network.blocks[b].line
    own = next(k for k, block in enumerate(job.network.blocks) if block.line is lines)
    rows = job.network.rows
    return int(np.flatnonzero((rows.block == own) & (rows.row == i) & (rows.part == p))[0])


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
