"""What is said of an effect common to many readings: its size, how sure it is, and a question on where it came from.

Questions only: nothing is corrected. Sizes that are asked after:

- a constant equal to the declared one (applied twice), to twice the declared one (wrong sign: the readings hold -c and
  got +c), to minus the declared one where `applied` says that the instrument had it (it had not);
- constants of reflectors differ by 17.5, 30 and 34.4 mm and the like (common practice);
- a scale equal to that of the atmosphere or of the calibration as corrected here (applied twice); 2.0 ppm between both
  feet; 30 to 400 ppm between ground, sea level and grid (157 ppm in 1000 m of height, from 1/R); the atmosphere takes
  about 1 ppm per degree C and per 3.6 hPa.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

from adjust.book.distance_ledger import ATMOSPHERE, DONE, HERE, NAMES, SCALE
from adjust.judge.effect_columns import (
    CONSTANT,
    DAY,
    DIMENSION,
    INDEX,
    INSTRUMENT,
    INSTRUMENT_HEIGHT,
    ORIENTATION,
    REFLECTOR,
    REFRACTION,
    SET_UP,
    STAFF,
    TABLE,
    TARGET_HEIGHT,
    Effect,
)
from adjust.solver.solution import Solution
from adjust.units import ANGLES, small_angle_unit, small_length

NONE_SEEN, SIGNIFICANT = "none seen", "significant"
TWICE, SIGN, NOT_DONE = "constant applied twice", "constant with the wrong sign", "constant not applied"
TIMES = 3.0
"""Standard deviations, and at the least the share below, within which an effect must be the declared one."""
SHARE = 0.1
KNOWN = (0.0175, 0.030, 0.0344)
"""Differences between constants of reflectors in metres (common practice)."""
NEAR = 0.0005
"""Metres within which a constant is near one of them, when its standard deviation is smaller."""
FEET = 2.0e-6
FEET_SURE = 0.5e-6
"""Standard deviation from which a scale is too unsure to be told from other small ones."""
LEVELS = (30e-6, 400e-6)

NOUN = {CONSTANT: "distances", "scale": "distances", REFRACTION: "zenith angles", INDEX: "zenith angles",
        STAFF: "levelled rises", ORIENTATION: "azimuths", INSTRUMENT_HEIGHT: "sights", TARGET_HEIGHT: "sights",
        }  # fmt: skip
TAKEN_UP = {
    CONSTANT: "the coordinates take it up; known points, or one line measured whole and in parts, would tell",
    "scale": "the size of the network takes it up; known points, or distances of another instrument, would tell",
    REFRACTION: "the heights take it up; sights from both ends, known heights or levelling would tell",
    INDEX: "the heights take it up; sights from both ends, known heights or levelling would tell",
    STAFF: "the heights take it up; known heights that differ, or rises of another staff, would tell",
    ORIENTATION: "the network turns with them; known points or other azimuths would tell",
    INSTRUMENT_HEIGHT: "the height of the station takes it up; sights to it from elsewhere would tell",
    TARGET_HEIGHT: "the height of the station takes it up; sights from it, or another target, would tell",
}
MORE = {CONSTANT: ("too long", "too short"), "scale": ("too long", "too short"), INDEX: ("too large", "too small"),
        STAFF: ("too large", "too small"), ORIENTATION: ("too large", "too small")}  # fmt: skip


@dataclass(frozen=True)
class Systematic:
    """What the test of one effect gave."""

    what: str
    """constant, scale, refraction, zenith index, staff scale, orientation."""
    of: str
    """Whose: reflector round, station-3, station-3 on 2026-05-14, distances.csv."""
    dimension: str
    """Of value and sd: length (metres), ratio (1e-6 is 1 ppm), angle (radians), number (a change of k)."""
    readings: int
    value: float | None
    """By how much the readings are too large; of refraction: what is to be added to k. None where it cannot be told."""
    sd: float | None
    statistic: float | None
    """Value over sd: normal, or Student's t where the scale is from residuals."""
    critical: float | None
    verdict: str
    """none seen, significant, cannot be told, explained by ..., rests on one reading, rests on single readings, not
    looked at."""
    sentence: str
    cause: str = ""
    """What the size was recognised as: constant applied twice, constant with the wrong sign, constant not applied,
    atmosphere applied twice, calibrated scale applied twice; '' for nothing."""
    rests_on: tuple[str, ...] = ()
    """Identifications of the readings that explain it."""


@dataclass(frozen=True)
class Finding:
    """The bare figures of an effect; None where it cannot be told."""

    effect: Effect
    value: float | None = None
    sd: float | None = None
    critical: float | None = None
    w: float = 0.0
    """|w| before any scaling, by which effects and single readings compare."""
    spare: bool = True
    """Whether there is a reading to spare for the test."""
    is_significant: bool = False
    by: Effect | None = None
    single: tuple[int, ...] = ()
    alike: tuple[tuple[Effect, float], ...] = ()
    """Other effects that explain the readings nearly as well, with their correlation."""

    @property
    def statistic(self) -> float | None:
        """Value over its standard deviation."""
        return None if self.value is None or self.sd is None else self.value / self.sd if self.sd else 0.0

    @property
    def above(self) -> bool:
        """Whether the test finds it."""
        return self.statistic is not None and self.critical is not None and abs(self.statistic) > self.critical

    @property
    def verdict(self) -> str:
        """In the words of ``Systematic``."""
        if self.value is None:
            return "cannot be told"
        if self.is_significant:
            return SIGNIFICANT
        if self.by is not None:
            return f"explained by {title(self.by)}"
        if self.single:
            return "rests on one reading" if len(self.single) == 1 else "rests on single readings"
        return NONE_SEEN

    def because(self, by: Effect | None = None, single: tuple[int, ...] = ()) -> Finding:
        """The same, explained by another effect or by the errors of single readings (scalar rows)."""
        return replace(self, by=by, single=single)

    def like(self, other: Effect, correlation: float) -> Finding:
        """The same, hard to tell from another."""
        return replace(self, alike=(*self.alike, (other, correlation)))

    def significant(self, alike: tuple[tuple[Effect, float], ...]) -> Finding:
        """The same, found."""
        return replace(self, is_significant=True, by=None, single=(), alike=alike)


def name(effect: Effect) -> str:
    """Whose effect it is: 'reflector round, which only station-3 measured to'."""
    own = f"reflector {effect.of}" if effect.by == REFLECTOR else effect.of or "the whole job"
    others = " and ".join(of for by, of in effect.also if by == INSTRUMENT)
    return f"{own}, which only {others} measured to" if others and effect.by == REFLECTOR else own


def title(effect: Effect) -> str:
    """'constant of reflector round'."""
    return f"{effect.what} of {name(effect)}"


def subject(effect: Effect) -> str:
    """'14 distances to reflector round'."""
    joint = {REFLECTOR: " to ", INSTRUMENT: " of ", TABLE: " in ", DAY: " of "}.get(effect.by)
    return f"{len(effect.rows)} {NOUN[effect.what]}{joint + name(effect) if joint else ''}"


class Sizes:
    """Sizes of an effect in the units of the job."""

    def __init__(self, solution: Solution, effect: Effect) -> None:
        self.units, self.dimension = solution.job.settings.units, DIMENSION[effect.what]

    def signed(self, size: float) -> str:
        """'+17.4 mm', '-2.1 ppm', '+8.2 sec', '+0.120'."""
        if self.dimension == "length":
            return small_length(size, self.units.length)
        if self.dimension == "ratio":
            return f"{round(size * 1e6, 1) + 0.0:+.1f} ppm"
        if self.dimension == "number":
            return f"{round(size, 3) + 0.0:+.3f}"
        unit = small_angle_unit(self.units.angle)
        return f"{round(size / ANGLES[unit], 1) + 0.0:+.1f} {unit}"

    def plain(self, size: float) -> str:
        """Without its sign."""
        return self.signed(abs(size)).lstrip("+")


def told(solution: Solution, f: Finding) -> Systematic:
    """A finding with its sentence."""
    cause, question = _question(solution, f) if f.is_significant else ("", "")
    names = tuple(_reading(solution, row) for row in f.single)
    e = f.effect
    figures = (f.value, f.sd, f.statistic, f.critical, f.verdict)
    text = _sentence(solution, f, question, names)
    return Systematic(e.what, name(e), DIMENSION[e.what], len(e.rows), *figures, text, cause, names)


def sentence_of_more(left_out: int, most: int) -> Systematic:
    """The entry for effects beyond the number that is tested."""
    text = (f"{left_out} more common effects, those of single days and of the fewest readings, were not looked at: "
            f"{most} are at most.")  # fmt: skip
    return Systematic("effects", f"{left_out} more", "number", 0, None, None, None, None, "not looked at", text)


def _reading(solution: Solution, row: int) -> str:
    rows = solution.network.rows
    return str(solution.network.blocks[rows.block[row]].name(int(rows.row[row])))


def _sentence(solution: Solution, f: Finding, question: str, names: tuple[str, ...]) -> str:
    e = f.effect
    who = subject(e)
    if f.value is None or f.sd is None or f.statistic is None:
        why = TAKEN_UP[e.what] if f.spare else "no reading is to spare for it"
        return f"{e.what[0].upper()}{e.what[1:]} of {who}: cannot be told; {why}."
    sizes = Sizes(solution, e)
    sure = f"standard deviation {sizes.plain(f.sd)}"
    if f.verdict == NONE_SEEN:
        return f"{e.what[0].upper()}{e.what[1:]} of {who}: none seen ({sizes.signed(f.value)}, {sure})."
    sure += f", {abs(f.statistic):.1f} times"
    if e.by == SET_UP:
        return _height(f, sizes, sure, names)
    if f.is_significant:
        return f"The {who} {_by_how_much(solution, f, sizes, 'are', 'ask for')} ({sure}){_alike(f)}: {question}"
    would = f"The {who} would {_by_how_much(solution, f, sizes, 'be', 'ask for')} ({sure})"
    if f.by is not None:
        return f"{would}, but not with the {title(f.by)} taken into account."
    alone, it = ("one reading", "it") if len(names) == 1 else ("single readings", "them")
    return f"{would}, but this rests on {alone}, {', '.join(names)}: without {it} nothing is seen."


def _height(f: Finding, sizes: Sizes, sure: str, names: tuple[str, ...]) -> str:
    """Of a height of instrument or target."""
    assert f.value is not None
    e, way = f.effect, "higher" if f.value > 0 else "lower"
    who = f"The {'instrument at' if e.what == INSTRUMENT_HEIGHT else 'target on'} {e.of}"
    if f.is_significant:
        return (f"{who} stood {sizes.plain(f.value)} {way} than booked ({sure}; {len(e.rows)} sights say so)"
                f"{_alike(f)}: was its height misread, or forgotten?")  # fmt: skip
    if f.by is not None:
        return f"{who} would have stood {way} than booked, but not with the {title(f.by)} taken into account."
    return f"{who} would have stood {way} than booked, but this rests on {', '.join(names)}."


def _by_how_much(solution: Solution, f: Finding, sizes: Sizes, be: str, ask: str) -> str:
    assert f.value is not None
    if f.effect.what == REFRACTION:
        k = _coefficient(solution)
        return f"{ask} a coefficient of refraction of {k + f.value:.2f} in place of {k:.2f}"
    return f"{be} {sizes.plain(f.value)} {MORE[f.effect.what][f.value < 0]}"


def _alike(f: Finding) -> str:
    """Effects that the readings do not tell from this one."""
    if not f.alike:
        return ""
    return ", hard to tell from " + " and from ".join(f"the {title(e)} (correlation {c:.2f})" for e, c in f.alike)


def _coefficient(solution: Solution) -> float:
    """k as it is in the adjusted readings."""
    found = [float(solution.groups[g]) for g, group in enumerate(solution.network.groups) if group.what == REFRACTION]
    return found[0] if found else solution.job.settings.frame.refraction.value


def _question(solution: Solution, f: Finding) -> tuple[str, str]:
    """What the size was recognised as, and the question to the surveyor."""
    what = f.effect.what
    if what == CONSTANT:
        return _constant(solution, f)
    if what == "scale":
        return _scale(solution, f)
    assert f.value is not None
    if what == REFRACTION:
        text = "was the air over these lines so? A refraction with +- under [frame] has it estimated from the readings."
        return "", text
    if what == INDEX:
        return "", "an index error, one face alone, or heights of instrument and targets that are all wrong?"
    if what == STAFF:
        size = small_length(10 * f.value, solution.job.settings.units.length).lstrip("+-")
        return (
            "",
            f"the scale of the staff, its temperature, or the sights up and down a slope? ({size} in 10 m of rise)",
        )
    return "", "from another north (grid, true, magnetic)? With a name in the column set their turn is estimated."


def _declared(solution: Solution, effect: Effect) -> dict[tuple[str, str], list[tuple[float, float]]]:
    """(amount, reading) of the corrections of the effect's readings by name and how, metres."""
    rows, blocks = solution.network.rows, solution.network.blocks
    lengths = {
        blocks[b].name(i): float(blocks[b].values[i, p])
        for b, i, p in zip(*(x[effect.rows].tolist() for x in (rows.block, rows.row, rows.part)), strict=True)
    }
    out: dict[tuple[str, str], list[tuple[float, float]]] = {}
    for line in solution.job.ledger:
        if line.observation in lengths:
            out.setdefault((line.name, line.how), []).append((line.amount, lengths[line.observation]))
    return out


def _is(f: Finding, wanted: float) -> bool:
    """Whether an effect is of a wanted size within its standard deviation or a tenth."""
    assert f.value is not None
    assert f.sd is not None
    return bool(wanted) and abs(f.value - wanted) <= max(TIMES * f.sd, SHARE * abs(wanted))


def _constant(solution: Solution, f: Finding) -> tuple[str, str]:
    unit = solution.job.settings.units.length
    declared = _declared(solution, f.effect)
    candidates: list[tuple[float, str, str]] = []
    for label in (REFLECTOR, CONSTANT):
        what = NAMES[label]
        for amount in dict.fromkeys(a for a, _ in declared.get((what, HERE), [])):
            size = small_length(amount, unit)
            added = f"the {what} {size} was added here"
            candidates.append((amount, TWICE, f"{added}: was the constant applied twice? If the instrument had applied "
                               "it already, say so in applied."))  # fmt: skip
            candidates.append((2 * amount, SIGN, f"{added}: has it the wrong sign?"))
        if (what, DONE) in declared:
            amount = _set_in_job(solution, f.effect, label)
            candidates.append((-amount, NOT_DONE, f"applied says that the instrument had made the {what} "
                               f"{small_length(amount, unit)} itself: had it?"))  # fmt: skip
    assert f.value is not None
    value = f.value
    fits = [c for c in candidates if _is(f, c[0])]
    if fits:
        _, cause, text = min(fits, key=lambda c: abs(value - c[0]))
        return cause, text
    assert f.sd is not None
    near = max(NEAR, TIMES * f.sd)
    if near < KNOWN[0] / 2 and any(abs(abs(value) - known) <= near for known in KNOWN):
        return "", ("a reflector constant left out, or that of another reflector? Known differences of constants are "
                    "near 17.5, 30 and 34.4 mm (common practice).")  # fmt: skip
    return "", "a constant of reflector or instrument left out, or that of another reflector?"


def _set_in_job(solution: Solution, effect: Effect, label: str) -> float:
    """The constant that job.toml has for the effect's reflector or instrument, metres; 0 for none or several."""
    settings = solution.job.settings
    names = [of for by, of in ((effect.by, effect.of), *effect.also)
             if by == (REFLECTOR if label == REFLECTOR else INSTRUMENT)]  # fmt: skip
    if label == REFLECTOR:
        return next((settings.reflectors[n] for n in names if n in settings.reflectors), 0.0)
    return next((settings.meters[n].constant for n in names if n in settings.meters), 0.0)


def _scale(solution: Solution, f: Finding) -> tuple[str, str]:
    declared = _declared(solution, f.effect)
    for label in (ATMOSPHERE, SCALE):
        lines = declared.get((NAMES[label], HERE), [])
        mean = sum(amount / length for amount, length in lines) / len(f.effect.rows)
        if lines and _is(f, mean):
            text = (f"the {NAMES[label]} of {mean * 1e6:+.1f} ppm was corrected here: was it applied twice? If the "
                    "instrument had applied it already, say so in applied.")  # fmt: skip
            return f"{NAMES[label]} applied twice", text
    assert f.value is not None
    assert f.sd is not None
    size = abs(f.value)
    if f.sd <= FEET_SURE and abs(size - FEET) <= TIMES * f.sd:
        return (
            "",
            "international and US survey feet are 2.0 ppm apart: which are these? Or is it the atmosphere?",
        )
    if LEVELS[0] <= size <= LEVELS[1]:
        return "", ("lengths on the ground, at sea level and on a map grid differ by as much (157 ppm in 1000 m of "
                    "height); are distances and known points of one kind?")  # fmt: skip
    if size < LEVELS[0]:
        return "", (f"the atmosphere? It takes about 1 ppm per degree C and per 3.6 hPa, so {size * 1e6:.0f} degrees C "
                    f"or {size * 3.6e6:.0f} hPa; or the scale of the distance meter?")  # fmt: skip
    return "", "another unit, or known points of another system?"
