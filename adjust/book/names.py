"""Names that are probably one station written two ways: TP1 and TP01, O and 0, l and 1, case and spaces.

The pairs of look-alikes are common practice, not from a standard.
"""

from __future__ import annotations

import re
from collections import defaultdict
from collections.abc import Iterable

_ALIKE = str.maketrans({"o": "0", "l": "1", "i": "1"})


def alike_key(name: str) -> str:
    """A key that is equal for names a reader could take for one another."""
    folded = re.sub(r"[\s._/-]+", "", name.casefold())
    return re.sub(r"(?<!\d)0+(?=\d)", "", folded.translate(_ALIKE))


def near_duplicates(names: Iterable[str]) -> list[tuple[str, ...]]:
    """Groups of different names with the same key, in the order of first appearance."""
    groups: dict[str, list[str]] = defaultdict(list)
    for name in names:
        if name not in groups[alike_key(name)]:
            groups[alike_key(name)].append(name)
    return [tuple(group) for group in groups.values() if len(group) > 1]
