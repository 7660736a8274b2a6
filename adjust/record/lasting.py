"""A level network for the drawing: lasting marks, with the change points between them drawn together into one line."""

from __future__ import annotations

from adjust.record.net import HEIGHT_KINDS, pointed_lines
from adjust.record.shown import Entry


def between_marks(record: Entry) -> Entry:
    """The record with every chain of change points as one line between its ends; itself where there are none.

    A change point from which more than two lines go stays, as does a chain that leads back to where it began. A chain
    with a suspect reading stands for it.
    """
    private = {one["station"] for one in record["stations"] if one["change_point"]}
    if not private:
        return record
    lines = [one for one in record["observations"] if one["kind"] in HEIGHT_KINDS]
    touching: dict[str, list[int]] = {}
    for k, one in enumerate(lines):
        for name in {name for line in pointed_lines(one) for name in line}:
            touching.setdefault(name, []).append(k)
    inner = {name for name in private if len(touching.get(name, [])) == 2}
    suspects = {one["observation"] for one in record["suspects"]}
    merged, kept, done = [], set(private) - inner, set[int]()
    for k in range(len(lines)):
        if k in done:
            continue
        ends, found = _chain(lines, touching, inner, k)
        done |= set(found)
        if ends[0] == ends[1]:  # round to its own beginning: its change points stay
            merged += [lines[j] for j in found]
            kept |= {name for j in found for line in pointed_lines(lines[j]) for name in line}
            continue
        stands = next((j for j in found if lines[j]["id"] in suspects), found[0])
        merged.append({**lines[stands], "from": ends[0], "to": ends[1]})
    hidden = inner - kept
    others = [one for one in record["observations"] if one["kind"] not in HEIGHT_KINDS]
    return {
        **record,
        "stations": [one for one in record["stations"] if one["station"] not in hidden],
        "observations": [*others, *merged],
        "left_out": [one for one in record["left_out"] if not hidden & set(one["stations"])],
    }


def _chain(
    lines: list[Entry], touching: dict[str, list[int]], inner: set[str], first: int
) -> tuple[tuple[str, str], list[int]]:
    """Ends and line numbers of the chain that a line belongs to."""
    (start, end), *_ = pointed_lines(lines[first])
    found, ends = [first], [start, end]
    for side in (0, 1):
        here, last = ends[side], first
        while here in inner:
            onward = [k for k in touching[here] if k != last]
            if not onward or onward[0] in found:
                break
            last = onward[0]
            found.append(last)
            a, b = pointed_lines(lines[last])[0]
            here = b if a == here else a
        ends[side] = here
    return (ends[0], ends[1]), found
