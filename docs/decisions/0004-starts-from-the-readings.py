"""How rough may starting coordinates be before Gauss-Newton goes astray? And without any?

python docs/decisions/0004-starts-from-the-readings.py [NETWORKS]     from the folder of the checkout
"""

from __future__ import annotations

import sys
import tempfile
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path.append(str(Path(__file__).parents[2]))
import adjust
from adjust.book.job import Job
from adjust.errors import BrasscapError
from adjust.network import NEW
from adjust.solver.design import State
from adjust.solver.engine import SingularPattern
from adjust.solver.gauss import NotSettled
from adjust.solver.solve import Setting, prepare
from adjust.solver.threads import one_thread
from tests.networks import random_job

KINDS = (("distances", "angles"), ("distances",), ("distances", "azimuths"))
OFF = (1, 10, 30, 100)


def arrives(ready: Setting, off: float, wanted: float, rng: np.random.Generator) -> bool:
    """Whether the iteration comes to the same v'Pv from places that are off by this many metres in each part."""
    new = ready.network.stations.role == NEW
    places = ready.start.positions + np.where(new, off * rng.standard_normal(new.shape), 0.0)
    try:
        outcome = ready.iteration.run(State(places, ready.start.groups))
    except (BrasscapError, NotSettled, SingularPattern, np.linalg.LinAlgError):
        return False
    return abs(outcome.last.merit - wanted) < 1e-6 * max(wanted, 1.0)


def without_starts(job: Job, wanted: float) -> str:
    """What comes out when the job has no starting coordinates at all."""
    stations = job.network.stations
    bare = replace(stations, start=np.where(stations.role == NEW, np.nan, stations.start))
    try:
        solution = adjust.solve(replace(job, network=replace(job.network, stations=bare)))
    except BrasscapError as refusal:
        return "two equal answers, both printed:" if "equally well" in str(refusal) else "refused:"
    return "the same answer:" if abs(solution.total.square_sum - wanted) < 1e-6 * max(wanted, 1.0) else "another:"


count = int(sys.argv[1]) if len(sys.argv) > 1 else 30
reached, outcomes = dict.fromkeys(OFF, 0), {}
with tempfile.TemporaryDirectory() as name, one_thread():
    for k in range(count):
        rng = np.random.default_rng([4, k])
        folder = Path(name) / str(k)
        random_job(rng, folder, int(rng.integers(6, 41)), KINDS[k % len(KINDS)], "held")
        job = adjust.read(folder)
        ready = prepare(job)
        wanted = ready.iteration.run(ready.start).last.merit
        for off in OFF:
            reached[off] += arrives(ready, float(off), wanted, rng)
        what = without_starts(job, wanted)
        outcomes[what] = outcomes.get(what, 0) + 1
print(f"{count} networks of 6 to 40 stations about 120 m apart: the same answer from starts that are off by")
for off in OFF:
    print(f"  {off:4d} m (standard deviation a part): {100 * reached[off] / count:.0f} %")
print("without any starting coordinates:", ", ".join(f"{what} {n}" for what, n in sorted(outcomes.items())))
