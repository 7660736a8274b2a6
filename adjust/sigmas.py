"""Error models of instruments: "1.5 mm + 2 ppm" (linear sum), ["1.5 mm", "2 ppm"] (root of the sum of squares).

A term is NUMBER UNIT with, for levelling, *sqrt(km), *sqrt(mi) or *sqrt(setup). The linear sum is how makers of
distance meters state their figures (common practice); the root-sum-square is the propagation of independent parts.
"""

from __future__ import annotations

import json
import re
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from adjust.units import ANGLES, LENGTHS, SMALLEST_SD, BadValue, parse_number

Array = NDArray[np.float64]

TERM = re.compile(r"([-+]?[\d.,]+(?:[eE][-+]?\d+)?)\s*([A-Za-z-]+)\s*(?:[*·x]\s*sqrt\(\s*([A-Za-z-]+)\s*\))?")


EXAMPLES = {
    "length": '"1.5 mm + 2 ppm" (sum) or ["1.5 mm", "2 ppm"] (root of the sum of squares)',
    "angle": '"2 sec"',
    "offset": '"1.5 mm"',
    "rise": '"1.2 mm*sqrt(km)" or "0.4 mm*sqrt(setup)"',
}
"""How an error model of each dimension is written."""


@dataclass(frozen=True)
class Term:
    """A size in metres or radians, times nothing (''), the distance ('ppm'), or a root ('length', 'setup')."""

    size: float
    per: str = ""
    text: str = field(default="", compare=False)
    """As written: 1.5 mm."""


@dataclass(frozen=True)
class Precision:
    """An error model: its terms and whether they add linearly or by the root of the sum of squares."""

    terms: tuple[Term, ...]
    linear: bool
    text: str

    @property
    def needs(self) -> set[str]:
        """What a reading must tell for this model: a subset of {'ppm', 'length', 'setup'}."""
        return {term.per for term in self.terms if term.per}

    def sd(self, m: int, **given: Array) -> Array:
        """Standard deviations (m,) in metres or radians; ``given`` holds distance, length (metres), setup (count)."""
        total = np.zeros(m)
        for _, part in self.parts(m, **given):
            total = total + (part if self.linear else part * part)
        return total if self.linear else np.sqrt(total)

    def parts(self, m: int, **given: Array) -> list[tuple[Term, Array]]:
        """Each term with its own standard deviations (m,)."""
        out = []
        for term in self.terms:
            factor: Array = np.ones(m)
            if term.per == "ppm":
                factor = np.abs(given["distance"])
            elif term.per:
                factor = np.sqrt(given[term.per])
            out.append((term, term.size * factor))
        return out

    def scaled(self, factor: float) -> str:
        """The model ``factor`` times as large as a value of job.toml, numbers to three figures."""
        texts = [TERM.sub(lambda m: three_figures(float(m[1]) * factor) + m[0][len(m[1]) :], t.text)
                 for t in self.terms]  # fmt: skip
        return json.dumps(" + ".join(texts) if self.linear else texts, ensure_ascii=False)


def three_figures(x: float) -> str:
    """A number with three figures: 0.0312, 2.1, 1230."""
    return f"{float(f'{x:.3g}'):.15g}"


def parse_precision(value: object, dimension: str, decimal: str = ".") -> Precision:
    """Read an error model of a ``dimension``: length, angle, or rise (a length per root distance or set-up).

    Raises BadValue saying which part is wrong.
    """
    if isinstance(value, str):
        texts, linear = re.split(r"\s\+\s|(?<=[A-Za-z)])\s*\+\s*", value), True
    elif isinstance(value, list) and value and all(isinstance(v, str) for v in value):
        texts, linear = list(value), False
    else:
        raise BadValue(f"not an error model; write it like {EXAMPLES[dimension]}")
    terms = tuple(_term(text.strip(), dimension, decimal) for text in texts)
    if not any(term.size >= SMALLEST_SD for term in terms):
        raise BadValue("an error model of zero; give the instrument's standard deviation")
    return Precision(terms, linear, value if isinstance(value, str) else " (+) ".join(texts))


def _term(text: str, dimension: str, decimal: str) -> Term:
    match = TERM.fullmatch(text)
    if not match:
        raise BadValue(f'"{text}" is no number with a unit; write it like {EXAMPLES[dimension]}')
    if "," in match[1]:  # the decimal mark of [units] is that of the tables
        raise BadValue(f'"{text}": a comma; job.toml has decimal points, as in "{text.replace(",", ".")}"')
    size, unit, root = parse_number(match[1], decimal), match[2], match[3]
    if size < 0:
        raise BadValue(f'"{text}" is below zero; give the size of the standard deviation')
    if unit == "ppm" and dimension == "length" and not root:
        return Term(size * 1e-6, "ppm", text)
    table = ANGLES if dimension == "angle" else LENGTHS
    if unit not in table:
        raise BadValue(
            f"{unit} is no unit of {'angle' if dimension == 'angle' else 'length'}; use one of {', '.join(table)}"
        )
    size *= table[unit]
    if not root:
        return Term(size, "", text)
    if dimension != "rise":
        raise BadValue(f'"{text}": a root belongs to levelling only')
    if root == "setup":
        return Term(size, "setup", text)
    if root not in LENGTHS:
        raise BadValue(f"sqrt({root}): use sqrt(km), sqrt(mi) or sqrt(setup)")
    return Term(size / LENGTHS[root] ** 0.5, "length", text)
