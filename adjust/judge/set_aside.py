"""The job without the readings that were found in error, each set aside with its reason."""

from __future__ import annotations

from dataclasses import replace

from adjust.book.job import Aside, Job
from adjust.judge.assess import Judgement
from adjust.judge.rows import rows_in, without_rows
from adjust.judge.suspects import Suspect
from adjust.kinds import KINDS


def without_suspects(judgement: Judgement) -> Job:
    """The job without the suspects at the job's level; the same job where there are none."""
    job = replace(judgement.solution.job, without_suspects=True)
    found = judgement.blunders.rows
    grave = [s for s in judgement.suspects if s.row in found]
    if not grave:
        return job
    gone = rows_in(judgement.solution.network, job.network)[[s.row for s in grave]]
    asides = [_aside(judgement, s) for s in grave]
    return replace(job, network=without_rows(job.network, gone), left_out=(*job.left_out, *asides))


def _aside(judgement: Judgement, suspect: Suspect) -> Aside:
    network, r = judgement.solution.network, suspect.row
    block, i = network.blocks[network.rows.block[r]], int(network.rows.row[r])
    part = KINDS[block.kind].parts[network.rows.part[r]]
    name = f"{block.name(i)} {part}" if part else block.name(i)
    stations = tuple(network.stations.names[k] for k in block.stations[i])
    reason = f"suspect with a statistic of {abs(suspect.statistic):.1f}; left out as --without-suspects asks"
    return Aside(name, block.file, int(block.line[i]), block.kind, reason, stations)
