"""What the slips are asked with and what they answer."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

from adjust.book.raw_texts import RawText
from adjust.network import Block
from adjust.solver.design import State
from adjust.solver.solution import Solution

if TYPE_CHECKING:
    from adjust.judge.leaving_out import Model

FARTHEST = 2.5
"""Standard deviations by which a form may miss the blunder; 1 in 80 right ones misses by more."""


class Written(Protocol):
    """What the slips of text ask of a reading."""

    @property
    def raws(self) -> tuple[RawText, ...]:
        """The texts behind it."""

    @property
    def kind(self) -> str:
        """Its kind."""

    @property
    def noun(self) -> str:
        """What a surveyor calls it."""

    @property
    def wraps(self) -> bool:
        """Whether it is of a circle."""


@dataclass(frozen=True)
class Slipped:
    """One suspect reading, and the network without the blunders."""

    solution: Solution
    state: State
    """Where the network lies without the blunders."""
    block: Block
    i: int
    raws: tuple[RawText, ...]
    kind: str
    noun: str
    """'distance', 'rise', 'angle', ... as a surveyor calls the reading."""
    wraps: bool
    blunder: float
    sd: float
    suspects: frozenset[str] = frozenset()
    """Identifications of all suspects."""
    model: Model | None = None
    """All readings linearised at ``state``; None where a network has not been searched."""
    left_out: tuple[int, ...] = ()
    """Scalar rows without which the blunder was estimated, its own first."""
    weight: float = 1.0
    """Likelihood of its being the one in error against the suspect's, times the ratio of their standard deviations."""
    instead: bool = False
    """Whether it is not the suspect but a reading that cannot be told from it."""
    sight: tuple[str, ...] = ()
    """Identifications of the other readings of its sight, if all of them are suspects too."""

    @property
    def stations(self) -> tuple[str, ...]:
        """Names of its stations."""
        return tuple(self.solution.names[int(s)] for s in self.block.stations[self.i])


@dataclass(frozen=True)
class Form:
    """One form that a slip can take in a reading."""

    would: str
    """What the book would read; '' where the slip is none of the text."""
    change: float
    """How much larger the reading is as booked, metres or radians."""
    told: str
    """The form in words, where the sentence of the slip asks for them."""
    line: int
    booked: str = ""
    weight: float = 1.0
    """Factor on the prior weight of this form, for what else speaks for or against it."""
    sd: float = 0.0
    """Standard deviation of ``change``, where it comes from another reading."""
    miss_sd: float | None = None
    """Standard deviation of the blunder minus ``change``, where the two hang together; None: they do not."""
    any_amount: bool = False
    """Whether the form explains every amount alike, as a sight to an unknown point does."""
