"""What matters most in a record, in sentences, the gravest first.

The order: blunders, or a scatter that none explains; control; effects common to many readings (these first where no
single reading is blamed); stated precision; what does not close; what nothing checks; what no test can tell apart.
Where nothing stands out that is said.
"""

from __future__ import annotations

from collections.abc import Iterator

from adjust.record.shown import Entry, Shown, count, plain, reading_in_words

MINOR = ("unchecked", "inseparable")
"""What a sound job has too; where nothing else is said, that all fits comes first."""
TOLD, NAMED = 3, 4
"""Sentences of one sort, and names in a list."""


def findings(record: Entry) -> list[dict[str, str]]:
    """Sentences with what they are about, the most important first."""
    shown = Shown.of(record)
    out = [{"about": about, "sentence": text} for about, text in _all(record, shown)]
    grave = any(one["about"] not in MINOR for one in out)
    return out if grave else [{"about": "all", "sentence": _all_clear(record)}, *out]


def _all(record: Entry, shown: Shown) -> Iterator[tuple[str, str]]:
    yield from (("blunder", text) for text in _blunders(record, shown))
    shared = [e["sentence"] for e in record["systematic"] if e["verdict"] == "significant"]
    if record["suspects"] or not shared:
        yield from (("scatter", text) for text in _scatter(record, shown))
        yield from (("control", text) for text in _control(record))
        yield from (("systematic", text) for text in shared)
    else:  # what many readings share explains what fails, and bends what control is compared with
        yield from (("systematic", text) for text in shared)
        yield from (("control", text) for text in _control(record))
    yield from (("weights", c["sentence"]) for c in record["variance_components"] if _off(record, c))
    yield from (("closure", text) for text in _closures(record))
    yield from (("unchecked", text) for text in _unchecked(record))
    yield from (("inseparable", text) for text in _chains(record))


def _names(names: list[str]) -> str:
    few = [plain(name, 40) for name in names[:NAMED]]
    rest = len(names) - len(few)
    return ", ".join(few) + (f" and {rest} more" if rest > 0 else "")


def _blunders(record: Entry, shown: Shown) -> Iterator[str]:
    """The suspects at the job's level; together what they do."""
    grave = [s for s in record["suspects"] if s["at_job_level"]]
    by_id = {one["id"]: one for one in record["observations"]}
    for s in grave[:TOLD]:
        yield _blunder(s, by_id[s["observation"]], shown)
    without = record["without_suspects"]
    if without and without["variance_factor"] is not None:
        which = "this reading" if len(grave) == 1 else f"these {len(grave)} readings"
        fits = "the rest fits" if without["overall_test"]["verdict"] == "met" else "the rest still does not fit"
        yield f"Without {which} {fits} (variance factor {shown.mark(format(without['variance_factor'], '.2f'))})."


def _blunder(suspect: Entry, observation: Entry, shown: Shown) -> str:
    size = shown.too_much(suspect["estimated_blunder"], suspect["sd"], observation["kind"])
    times = shown.mark(format(abs(suspect["statistic"]), ".1f"))
    sure = (
        f"{shown.uncertainty(suspect['sd'], observation['kind'])}, {times} times that"
        if suspect["sd"]
        else f"{times} times"
    )
    text = f"{_capital(reading_in_words(observation))} {size} ({sure}; {plain(suspect['observation'], 40)})"
    alike = [o["observation"] for o in suspect["cannot_be_told_from"]]
    text += f", or the error is in {_names(alike)}: no test here can tell." if alike else "."
    return f"{text} {likeliest(suspect)}".rstrip()


def likeliest(suspect: Entry) -> str:
    """'Likeliest slip: the minutes were misread, 43 for 33. Look at angles.csv:14.'; empty where no cause fits."""
    causes = suspect["likely_causes"]
    if not causes:
        return ""
    if len(causes) == 1:
        return f"Likeliest slip: {plain(causes[0]['sentence'], 160)}. Look at {plain(causes[0]['place'], 40)}."
    several = "; or ".join(plain(c["sentence"], 90) for c in causes)
    places = list(dict.fromkeys(plain(c["place"], 40) for c in causes))
    return f"Likeliest slips: {several}. Look at {' and '.join(places)}."


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _scatter(record: Entry, shown: Shown) -> Iterator[str]:
    """Parts that fail where no blunder explains it."""
    if record["without_suspects"]:
        return
    for part in record["solution"]["parts"]:
        if part["overall_test"]["verdict"] == "not met":
            factor = shown.mark(format(part["variance_factor"], ".2f"))
            yield (f"The readings of the {plain(part['what'], 60)} scatter more than stated (variance factor "
                   f"{factor}), and no few blunders explain it.")  # fmt: skip


def _control(record: Entry) -> list[str]:
    return list(record["control_report"]["sentences"])[:TOLD]


def _off(record: Entry, component: Entry) -> bool:
    """Whether a component asks for other standard deviations: worse than stated, by instruments."""
    return bool(component["verdict"] == "worse than stated")


def _closures(record: Entry) -> Iterator[str]:
    bad = [one for one in record["closures"] if one["verdict"] == "not met"]
    if bad:
        yield (f"{count(len(bad), 'closure')} of {len(record['closures'])} not met, the first "
               f"{bad[0]['kind']} {plain('-'.join(bad[0]['stations']), 60)}.")  # fmt: skip


def _unchecked(record: Entry) -> Iterator[str]:
    unchecked, shots = record["unchecked"], [s["station"] for s in record["side_shots"]]
    if unchecked:
        hang = f"; {_names(shots)} {'hangs' if len(shots) == 1 else 'hang'} on them alone" if shots else ""
        yield f"{count(len(unchecked), 'reading')} nothing would contradict if wrong{hang}."


def _chains(record: Entry) -> list[str]:
    return [one["sentence"] for one in record["chains"]][:1]


def _all_clear(record: Entry) -> str:
    """What holds where nothing grave was found; what could not be tested is not claimed."""
    verdicts = {part["overall_test"]["verdict"] for part in record["solution"]["parts"]}
    if "met" not in verdicts:
        return "Nothing here could be tested: no reading is to spare, or the scale is taken from the residuals."
    held = ["the readings fit as stated"]
    held += ["everything closes"] if record["closures"] else []
    held += ["the control agrees"] if any(m["verdict"] == "agrees" for m in record["control"]) else []
    held += [] if record["unchecked"] else ["every reading is checked by others"]
    said = held[0] if len(held) == 1 else ", ".join(held[:-1]) + " and " + held[-1]
    out = sum("--without-suspects" in one["reason"] for one in record["left_out"])
    return (
        f"With {count(out, 'suspect')} left out nothing stands out: {said}." if out else f"Nothing stands out: {said}."
    )
