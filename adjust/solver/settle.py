"""From starting values to rest, and the refusal of what is free or fixed only just, with the movements as arrays.

What is free at one place may be so by chance of the starting values; what is free a little beside them too is free for
good. So where the factor breaks down at the start, the movements are looked for beside it, and where there are none
the iteration begins there.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from adjust.errors import Unsolvable
from adjust.graph.parts import listed
from adjust.graph.starts import Start
from adjust.network import Network
from adjust.solver import defects
from adjust.solver.cofactors import Cofactors
from adjust.solver.datum import PartDatum
from adjust.solver.defects import (
    DOUBTFUL_PIVOT,
    REFUSED,
    Freedom,
    Loose,
    Thin,
    as_moves,
    most_moves,
    null_vectors,
    thin_stations,
)
from adjust.solver.design import Design, State
from adjust.solver.engine import SingularPattern
from adjust.solver.gauss import GaussNewton, Linear, NotSettled, Outcome

GROSS_SD = 300.0
"""Standard deviations of misclosure from which a figure counts as bent by a gross error: sound readings stay below 5,
and a station that is fixed only just pulls its own readings to a few tens."""


@dataclass(frozen=True)
class Setting:
    """A network made ready to iterate."""

    network: Network
    parts: list[PartDatum]
    design: Design
    start: Start
    iteration: GaussNewton

    @property
    def begin(self) -> State:
        """The starting values."""
        return State(self.start.positions, self.start.groups)


def settle(ready: Setting) -> Outcome:
    """Iterate to rest; raises Loose where something is free or fixed only just, NotSettled."""
    try:
        outcome = ready.iteration.run(ready.begin)
    except SingularPattern:
        outcome = _from_beside(ready)
    except NotSettled as unsettled:
        _refuse_loose(ready, _sound(ready, unsettled.here))
        raise
    factor = outcome.cofactors.factor
    if factor is not None and factor.pivot_least < DOUBTFUL_PIVOT:
        _refuse_loose(ready, outcome.last)
    thin = _thin(ready, outcome.last)
    if thin:
        raise Loose(replace(freedom_at(ready, outcome.last), thin=thin))
    return outcome


def _thin(ready: Setting, here: Linear) -> tuple[Thin, ...]:
    """Stations fixed only just; none where a gross error has bent the figure, for then that is what to say."""
    if _gross(here):
        return ()
    return tuple(thin_stations(ready.design, ready.parts, here.whitened, here.state, REFUSED))


def _gross(here: Linear) -> bool:
    """Whether some misclosure shows a gross error."""
    return max((float(np.abs(w.reduced_l).max(initial=0.0)) for w in here.whitened), default=0.0) > GROSS_SD


def _sound(ready: Setting, here: Linear) -> Linear:
    """A state to look for freedoms at: a figure bent by a gross error may flex, which beside the start it does not."""
    return ready.iteration.at(beside(ready)) if _gross(here) else here


def _refuse_loose(ready: Setting, here: Linear) -> None:
    """Raise Loose if something is free at a state, or fixed only just."""
    freedom = replace(freedom_at(ready, here), thin=_thin(ready, here))
    if len(freedom.stations):
        raise Loose(freedom)


def _from_beside(ready: Setting) -> Outcome:
    """Begin again a little beside the starting values: what is free there is free anywhere, and is refused."""
    state = beside(ready)
    freedom = freedom_at(ready, ready.iteration.at(state))
    if len(freedom.stations):
        raise Loose(freedom)
    try:
        return ready.iteration.run(state)
    except NotSettled as unsettled:
        _refuse_loose(ready, _sound(ready, unsettled.here))
        raise
    except SingularPattern as lost:
        latest = ready.iteration.latest
        if latest is not None:
            _refuse_loose(ready, _sound(ready, latest))
            if _gross(latest):
                raise ready.iteration.stopped(ready.begin, latest) from None
        raise _barely_fixed(ready, lost) from None


def _barely_fixed(ready: Setting, lost: SingularPattern) -> Unsolvable:
    """Nothing moves freely, and yet the numbers are lost: the stations that looked thinnest at the start, or those
    whose pivots went."""
    begin = ready.iteration.at(ready.begin)
    thin = tuple(thin_stations(ready.design, ready.parts, begin.whitened, begin.state, 0.0))
    pivots = np.isin(ready.design.unknowns.coordinate, ready.iteration.kept[lost.unknowns])
    gone = np.asarray(pivots.any(axis=1))
    thin = tuple(t for t in thin if gone[t.station]) or thin
    if thin:
        return Loose(replace(freedom_at(ready, begin), thin=thin))
    who = listed(ready.network, np.flatnonzero(gone) if gone.any() else ready.parts[0].part.stations, 8)
    return Unsolvable(
        [f"{who}: fixed by a chain too long or too loose to compute; tie it to the rest by more readings"]
    )


def beside(ready: Setting) -> State:
    """The starting values, every unknown coordinate moved by up to a thousandth of the extent, seeded."""
    positions = ready.start.positions
    free = ready.design.unknowns.coordinate >= 0
    placed = positions[np.isfinite(positions[:, :2]).all(axis=1), :2]
    extent = float(np.ptp(placed, axis=0).max()) if len(placed) else 0.0
    moved = np.random.default_rng(11).uniform(-1e-3, 1e-3, positions.shape) * (extent or 1.0)
    return State(np.where(free, positions + moved, positions), ready.start.groups)


def freedom_at(ready: Setting, here: Linear) -> Freedom:
    """What is free at a state."""
    iteration, unknowns = ready.iteration, ready.design.unknowns
    vectors = (
        null_vectors(iteration.pattern, unknowns, iteration.kept, here.whitened)
        if len(iteration.kept) else np.zeros((unknowns.count, 0))
    )  # fmt: skip
    moves, count = as_moves(unknowns, vectors), len(iteration.kept)
    partial = count > defects.DENSE_MOST and moves.shape[2] >= most_moves(count)
    return Freedom(ready.network, np.nan_to_num(here.state.positions), moves, ready.parts, partial=partial)


def first_look(ready: Setting) -> tuple[Linear, Cofactors]:
    """Linearisation and cofactors at the starting values, or a little beside them; raises Loose."""
    here = ready.iteration.at(ready.begin)
    try:
        return here, ready.iteration.cofactors(here)
    except SingularPattern:
        here = ready.iteration.at(beside(ready))
        _refuse_loose(ready, here)
        return here, ready.iteration.cofactors(here)
