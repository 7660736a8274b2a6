"""Sections of record.json about the judgement: blunders, separability, control, common effects, weights, findings."""

from __future__ import annotations

from adjust.fields import Field


def keys(*rows: tuple[str, str, str]) -> tuple[Field, ...]:
    """Fields that are always present, from rows of name, type and meaning."""
    return tuple(Field(name, kind, meaning, required=True) for name, kind, meaning in rows)


JUDGED: dict[str, tuple[Field, ...]] = {
    "cause": keys(
        ("slip", "text", "key of the slip, as in the table of slips"),
        ("sentence", "text", "the slip in words"),
        ("would_read", "text?", "what the book would read; null where the slip is none of the text"),
        ("support", "number", "probability among the slips of the table and some other amount"),
        ("place", "text", "file and line where to look"),
    ),
    "confusable": keys(
        ("observation", "text", "id"),
        ("correlation", "number", "of the two statistics"),
        ("chance_of_wrong", "number", "that the wrong one of the two is blamed for an error of the size found"),
    ),
    "cleared": keys(
        ("observation", "text", "id"),
        ("statistic", "number", "one-reading statistic with all readings"),
        ("statistic_without", "number", "the same without the blunders"),
    ),
    "removal": keys(
        ("action", "text", "left out, taken back, exchanged, set apart by a robust estimate, adjusted without them"),
        ("observations", "texts", "ids of the readings that the step is about"),
        ("instead_of", "text?", "reading that returned in exchange"),
        ("statistic", "number?", "one-reading statistic that decided; null for several readings"),
        ("critical", "number?", "limit of it, at the level of the whole job"),
        ("before", "object fit", "fit before the step"),
        ("after", "object fit", "fit after it"),
        ("largest_shift", "object? external_effect", "coordinate that the step moved most"),
    ),
    "fit": keys(
        ("variance_factor", "number?", "weighted square sum over degrees of freedom; null without any"),
        ("largest", "text?", "id of the reading with the largest statistic"),
        ("statistic", "number?", "that statistic"),
    ),
    "without_suspects": keys(
        ("observations", "texts", "ids of the readings left out"),
        ("degrees_of_freedom", "integer", "what is left of them"),
        ("weighted_square_sum", "number", "v'Pv"),
        ("variance_factor", "number?", "weighted_square_sum over degrees_of_freedom"),
        ("overall_test", "object overall_test", "chi-square test of the weighted square sum"),
        ("largest", "text?", "id of the reading with the largest statistic"),
        ("statistic", "number?", "that statistic"),
        ("shifts", "list shift", "by how much the coordinates would move: without minus with"),
    ),
    "shift": keys(
        ("station", "text", "station"),
        ("east", "number?", "shift"),
        ("north", "number?", "shift"),
        ("height", "number?", "shift"),
    ),
    "effect": keys(
        (
            "what",
            "text",
            "constant, scale, refraction, zenith index, staff scale, orientation, instrument height, "
            "target height; unit, station occupied, station sighted: slips that many readings share",
        ),
        ("of", "text", "reflector, instrument, day, table, station or sight"),
        ("readings", "integer", "how many it would be in"),
        ("dimension", "text", "length, ratio (1e-6 is 1 ppm), angle, number: of value and sd"),
        ("value", "number?", "its size; null where it cannot be told"),
        ("sd", "number?", "standard deviation"),
        ("statistic", "number?", "value over sd; from residuals Student's t"),
        ("critical", "number?", "limit at the level of one reading"),
        ("verdict", "text", "none seen, significant, cannot be told, explained by ..., rests on one reading, ..."),
        ("cause", "text", "correction that the size is exactly that of, or the key of a slip; empty where none"),
        ("rests_on", "texts", "ids of the single readings that carry it"),
        ("sentence", "text", "the same in words"),
    ),
    "inseparable": keys(
        ("observations", "texts", "ids"),
        ("correlation", "number", "least correlation of two of their statistics, absolute"),
        ("chance_of_wrong", "number", "of blaming a wrong one for a smallest detectable error"),
    ),
    "finding": keys(
        ("about", "text", "blunder, scatter, control, systematic, weights, closure, unchecked, inseparable, all"),
        ("sentence", "text", "the sentence"),
    ),
    "share": keys(
        ("what", "text", "term of the instrument's figure, centring, heights, the sd booked, ..."),
        ("sd", "number", "its own standard deviation"),
        ("share", "number", "of the variance of the reading; they sum to 1"),
        ("linear", "flag", "adds to the other linear ones before the squares are added"),
    ),
    "chain": keys(
        ("stations", "texts", "as walked"),
        ("observations", "texts", "ids of the lines"),
        ("tie", "texts", "ends of the one more line that would split it best; empty where none can"),
        ("split", "numbers", "lines on both sides of it"),
        ("sentence", "text", "the same in words"),
    ),
    "control_report": keys(
        ("consistent", "texts", "marks that agree with the readings and each other"),
        ("released", "texts", "marks that disagree with these"),
        ("cannot_tell", "list doubtful", "groups of marks of which one is wrong, and nothing tells which"),
        ("scale", "object? control_scale", "common scale of the control where that explains what disagrees"),
        ("sentences", "texts", "the most important of it in words"),
    ),
    "doubtful": keys(("marks", "texts", "marks, or a common scale")),
    "control_scale": keys(
        ("ppm", "number", "known over measured lengths less one, parts per million"),
        ("sd_ppm", "number", "its standard deviation"),
        ("cause", "text", "feet-and-metres, foot-and-us-foot, ground-and-grid; empty where not recognised"),
        ("sentence", "text", "the same in words"),
    ),
    "component": keys(
        ("by", "text", "instrument, day, crew or centring: how the readings were grouped"),
        ("group", "text", "the group"),
        ("readings", "integer", "its readings"),
        ("redundancy", "number", "its share of the degrees of freedom"),
        ("factor", "number", "variance over the stated one; 1 where it is not estimated"),
        ("sd_factor", "number", "its root: what sd_factor of a [[book]] block would be"),
        ("sd", "number?", "standard deviation of sd_factor; null where it is not estimated"),
        ("interval", "numbers?", "interval of sd_factor at the job's confidence"),
        ("verdict", "text", "as stated, worse than stated, better than stated, cannot be told"),
        ("sentence", "text", "the same in words"),
        ("paste", "texts", "lines for job.toml that would apply it; nothing is applied by itself"),
    ),
    "budget": keys(
        ("station", "text", "station"),
        ("part", "text", "east, north or height"),
        ("sd", "number", "standard deviation of the coordinate"),
        ("shares", "list budget_share", "of its variance, the largest first"),
    ),
    "budget_share": keys(("group", "text", "group of readings"), ("share", "number", "of the variance")),
}
