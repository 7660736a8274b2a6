"""Rows of rounds whose face is mixed up, told by the circle alone: which row it is, where the book can say.

The circle turns by half between the faces. Two readings of one target in one set and one face that lie half a circle
apart are of two faces, and two of different faces that do not are of one. Which of them has the wrong face is told by
the other targets: with H' = H - 180 in face 2, the angle H'(target) - H'(other) is that of the other sets, or half a
circle off. Where there is no other set, the fewer of the target's own readings are wrong; of one against one the rows
before and after tell, since half a set is read in one face.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence

import numpy as np

from adjust.network import Array
from adjust.units import TURN, wrap

MISLABELLED = np.deg2rad(20.0)
"""Circle readings of one target in one face that differ by a half circle to within this are of two faces; collimation
is minutes at the most, two targets at a station are seldom opposite to within it (common practice)."""
Key = tuple[str, str, str]
"""(station, set, target)."""


def mixed_faces(
    groups: Mapping[Key, list[int]], face: Sequence[int], circle: Array, lines: Sequence[int]
) -> Iterator[tuple[int, str]]:
    """Rows with a wrong face, and what to do; ``groups`` holds the rows of each set to each target."""
    free = [math.nan if not f else float(h) - (f == 2) * TURN / 2 for f, h in zip(face, circle.tolist(), strict=True)]
    mixed = {key for key, rows in groups.items() if _differ([free[i] for i in rows])}
    clean = {key: first for key, rows in groups.items() if key not in mixed and (first := _first(free, rows))}
    for key in groups:
        if key not in mixed:
            continue
        rows = [i for i in groups[key] if not math.isnan(free[i])]
        odd = [i for i in rows if _off_by_half(key, free[i], clean)]
        for look in (_fewer(rows, free), [i for i in rows if _beside_others(i, face, key, groups)]):
            odd = odd if 0 < len(odd) < len(rows) else look
        one_face = len({face[i] for i in rows}) == 1
        what = (
            "the circle turned by half, but the rows are of one face" if one_face
            else "one circle reading in two faces; the second must lie half a circle on"
        )  # fmt: skip
        if 0 < len(odd) < len(rows):
            for i in odd:
                rest = ", ".join(str(lines[k]) for k in rows if k not in odd)
                yield i, f"{what} (beside line {rest}): this face is mixed up; write {3 - face[i]}"
        else:
            yield rows[-1], f"{what}; correct a face in line {' or '.join(str(lines[k]) for k in rows)}"


def _differ(readings: list[float]) -> bool:
    found = [r for r in readings if not math.isnan(r)]
    return any(abs(abs(wrap(r - found[0])) - TURN / 2) < MISLABELLED for r in found[1:])


def _first(free: list[float], rows: list[int]) -> tuple[float] | None:
    """The first reading of a pointing, in a tuple so that zero is one, too."""
    return next(((free[i],) for i in rows if not math.isnan(free[i])), None)


def _off_by_half(key: Key, reading: float, clean: Mapping[Key, tuple[float]]) -> bool:
    """Whether most of the other targets and sets put a reading half a circle off."""
    at, in_set, to = key
    votes = []
    for (here, other_set, same), (there,) in clean.items():
        if here != at or same != to or other_set == in_set:
            continue
        for (place, own_set, other), (mine,) in clean.items():
            theirs = clean.get((at, other_set, other))
            if place == at and own_set == in_set and other != to and theirs:
                votes.append(abs(wrap(reading - mine - there + theirs[0])) > TURN / 4)
    return 2 * sum(votes) > len(votes)


def _fewer(rows: list[int], free: list[float]) -> list[int]:
    """The rows of a pointing that lie half a circle off most of its others; none where as many lie on either side."""
    off = [i for i in rows if abs(wrap(free[i] - free[rows[0]])) > TURN / 4]
    rest = [i for i in rows if i not in off]
    return [] if len(off) == len(rest) else min(off, rest, key=len)


def _beside_others(i: int, face: Sequence[int], key: Key, groups: Mapping[Key, list[int]]) -> bool:
    """Whether the rows of the set before and after a row are of the other face; the first and last have one of them."""
    of_set = {k for other, rows in groups.items() if other[:2] == key[:2] for k in rows}
    beside = [face[k] for k in (i - 1, i + 1) if k in of_set]
    return bool(beside) and all(f == 3 - face[i] for f in beside)
