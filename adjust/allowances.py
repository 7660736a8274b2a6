"""How large a misclosure may be: "12 mm*sqrt(km)", "10 sec*sqrt(n)", "5 mm*sqrt(setup)", "1:10000", and sums of these.

A term is a constant, a constant times the root of the length (km, mi), of the number of angles (n) or of set-ups, or a
part of the length (ppm, or a ratio 1:m). Terms joined by + add up; of a list the smallest counts, as rules do that
ask for "whichever is smaller".
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from adjust.sigmas import TERM
from adjust.units import ANGLES, LENGTHS, BadValue, parse_number

EXAMPLES = {
    "length": '"12 mm*sqrt(km)", "5 mm*sqrt(setup)" or "1:10000"',
    "angle": '"10 sec*sqrt(n)" or "30 sec"',
}
"""How an allowance of each dimension is written."""
_RATIO = re.compile(r"1\s*:\s*([\d.]+)")


@dataclass(frozen=True)
class Term:
    """``size`` metres or radians, times nothing (''), a root ('length' of metres, 'n', 'setup') or metres ('part')."""

    size: float
    per: str = ""


@dataclass(frozen=True)
class Allowance:
    """Sums of terms, of which the smallest counts."""

    sums: tuple[tuple[Term, ...], ...]
    text: str

    def allowable(self, length: float | None = None, n: int | None = None, setups: int | None = None) -> float | None:
        """Largest misclosure in metres or radians for a length (metres), number of angles and of set-ups.

        None where the rule asks for a figure that is not known.
        """
        known = {"": 1.0, "length": _root(length), "n": _root(n), "setup": _root(setups), "part": length}
        totals = []
        for terms in self.sums:
            factors = [known[term.per] for term in terms]
            if any(factor is None for factor in factors):
                return None
            totals.append(sum(t.size * f for t, f in zip(terms, factors, strict=True) if f is not None))
        return min(totals)


def _root(value: float | None) -> float | None:
    return None if value is None else math.sqrt(value)


def parse_allowance(value: object, dimension: str) -> Allowance:
    """Read an allowance of a ``dimension``, length or angle; a list means the smallest of its parts.

    Raises BadValue saying which part is wrong.
    """
    texts = [value] if isinstance(value, str) else value
    if not isinstance(texts, list) or not texts or not all(isinstance(t, str) for t in texts):
        raise BadValue(f"not an allowance; write it like {EXAMPLES[dimension]}")
    sums = tuple(tuple(_term(t.strip(), dimension) for t in re.split(r"\s\+\s", text)) for text in texts)
    if any(not any(term.size > 0 for term in terms) for terms in sums):
        raise BadValue("an allowance of zero; no field work meets it")
    return Allowance(
        sums, " or the smaller of ".join(texts[:1]) if len(texts) == 1 else "smallest of " + ", ".join(texts)
    )


def _term(text: str, dimension: str) -> Term:
    ratio = _RATIO.fullmatch(text)
    if ratio:
        if dimension != "length" or not float(ratio[1]) > 0:
            raise BadValue(f'"{text}": a ratio is a part of the length of a traverse; write {EXAMPLES[dimension]}')
        return Term(1.0 / float(ratio[1]), "part")
    match = TERM.fullmatch(text)
    if not match:
        raise BadValue(f'"{text}" is no number with a unit; write it like {EXAMPLES[dimension]}')
    size, unit, root = parse_number(match[1]), match[2], match[3]
    if size < 0:
        raise BadValue(f'"{text}" is below zero; give the largest size that is allowed')
    if unit == "ppm" and dimension == "length" and not root:
        return Term(size * 1e-6, "part")
    table = ANGLES if dimension == "angle" else LENGTHS
    if unit not in table:
        raise BadValue(f"{unit} is no unit of {dimension}; use one of {', '.join(table)}")
    return _rooted(size * table[unit], root)


def _rooted(size: float, root: str | None) -> Term:
    """A constant, or one times a root."""
    if not root:
        return Term(size)
    if root in ("n", "setup"):
        return Term(size, root)
    if root not in LENGTHS:
        raise BadValue(f"sqrt({root}): use sqrt(km), sqrt(mi), sqrt(n) for angles or sqrt(setup)")
    return Term(size / math.sqrt(LENGTHS[root]), "length")
