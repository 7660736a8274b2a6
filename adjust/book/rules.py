"""Closure rules as dated data: which misclosure is allowed, by which rule, edition and section, and how sure that is.

A rule is a TOML file with title, body, edition and one [[limit]] a class and subject. Those of the folder adjust/rules
come with the program; a file of the same form in the job's folder is a rule of its own. `[tolerance] rule` names
"NAME: CLASS"; the allowances that stand in [tolerance] itself win over it.
"""

from __future__ import annotations

import hashlib
import tomllib
from dataclasses import dataclass, field
from importlib import resources
from pathlib import Path
from typing import Any

from adjust.allowances import Allowance, parse_allowance
from adjust.book.faults import Faults
from adjust.errors import nearest
from adjust.units import BadValue

SUBJECTS = {
    "level sections": "length", "level runs": "length", "level loops": "length",
    "height loops": "length", "height runs": "length",
    "traverse angles": "angle", "traverse position": "length", "triangles": "angle",
}  # fmt: skip
"""What a limit can be of, with its dimension."""
OF_KEYS = {
    "levelling": ("level sections", "level runs", "level loops"),
    "heights": ("height runs", "height loops"),
    "traverse": ("traverse position",),
    "angular": ("traverse angles", "triangles"),
}
"""The keys of [tolerance] and what they are allowances of."""
CONFIDENCES = {
    "read": "read in a public text",
    "partly": "partly read, partly from memory: check it in the rule itself",
    "memory": "from memory: check it in the rule itself",
    "own": "the job's own",
}
"""How sure a figure is, in words that stand wherever it is shown."""
_TEXTS = ("title", "body", "edition")


@dataclass(frozen=True)
class Limit:
    """One allowance with where it comes from."""

    of: str
    allowance: Allowance
    source: str
    """The rule with edition, section and class."""
    confidence: str

    @property
    def words(self) -> str:
        """The allowance with its source, and how sure that is where it was not read."""
        sure = "" if self.confidence in ("read", "own") else f" ({CONFIDENCES[self.confidence]})"
        return f"{self.allowance.text}, {self.source}{sure}"


@dataclass(frozen=True)
class Tolerance:
    """The limits of a job by subject; none where nothing was declared."""

    limits: dict[str, Limit] = field(default_factory=dict)


@dataclass(frozen=True)
class Rule:
    """One rule file."""

    name: str
    title: str
    body: str
    edition: str
    note: str
    limits: tuple[tuple[str, Limit], ...]
    """(class, limit) in the order of the file."""

    @property
    def classes(self) -> list[str]:
        """The classes in the order of the file."""
        return list(dict.fromkeys(name for name, _ in self.limits))


class BadRule(ValueError):
    """A rule file that cannot be used; the text says why."""


def built_in() -> list[str]:
    """Names of the rules that come with the program."""
    folder = resources.files("adjust.rules")
    return sorted(f.name.removesuffix(".toml") for f in folder.iterdir() if f.name.endswith(".toml"))


def built_in_rule(name: str) -> Rule:
    """A rule that comes with the program."""
    return parse_rule((resources.files("adjust.rules") / f"{name}.toml").read_text("utf-8"), name)


def parse_rule(text: str, name: str) -> Rule:
    """A rule from its TOML text.

    Raises BadRule saying what is wrong.
    """
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise BadRule(f"not TOML: {error}") from None
    for key in _TEXTS:
        if not isinstance(data.get(key), str) or not data[key]:
            raise BadRule(f'{key} is missing; write {key} = "..." at the top')
    unknown = set(data) - {*_TEXTS, "note", "limit"}
    if unknown:
        raise BadRule(f"unknown key {min(unknown)}; {nearest(min(unknown), [*_TEXTS, 'note', 'limit'])}")
    rows = data.get("limit")
    if not isinstance(rows, list) or not rows:
        raise BadRule("no [[limit]] block; a rule needs one a class and subject")
    return Rule(name, data["title"], data["body"], data["edition"], str(data.get("note", "")),
                tuple(_limit(row, data) for row in rows))  # fmt: skip


def _limit(row: dict[str, Any], data: dict[str, Any]) -> tuple[str, Limit]:
    keys = ("class", "of", "formula", "section", "confidence")
    for key in row:
        if key not in keys:
            raise BadRule(f"[[limit]] has an unknown key {key}; {nearest(key, keys)}")
    for key in keys[:3]:
        if key not in row:
            raise BadRule(f"a [[limit]] without {key}; add it")
    if row["of"] not in SUBJECTS:
        raise BadRule(f'of = "{row["of"]}": {nearest(str(row["of"]), SUBJECTS)}')
    confidence = row.get("confidence", "own")
    if confidence not in CONFIDENCES:
        raise BadRule(f'confidence = "{confidence}": {nearest(str(confidence), CONFIDENCES)}')
    try:
        allowance = parse_allowance(row["formula"], SUBJECTS[row["of"]])
    except BadValue as bad:
        raise BadRule(f"formula: {bad}") from None
    section = f", section {row['section']}" if row.get("section") else ""
    source = f"{data['title']}, {data['body']}, edition {data['edition']}{section}, {row['class']}"
    return str(row["class"]), Limit(row["of"], allowance, source, confidence)


def resolve(
    own: dict[str, Allowance], named: tuple[str, ...], line: int, folder: Path, faults: Faults
) -> tuple[Tolerance, list[tuple[str, str]]]:
    """The limits of a job, and (file, sha256) of every rule file of its own; ``line`` is that of the key rule."""
    limits: dict[str, Limit] = {}
    inputs: list[tuple[str, str]] = []
    for text in named:
        name, _, wanted = (part.strip() for part in text.partition(":"))
        rule = _find(name, folder, line, faults, inputs)
        if rule is None:
            continue
        wanted = wanted or (rule.classes[0] if len(rule.classes) == 1 else "")
        found = [limit for of_class, limit in rule.limits if of_class == wanted]
        if not found:
            classes = ", ".join(f'"{name}: {c}"' for c in rule.classes)
            hint = f"name one of its classes: {classes}"
            faults.add("job.toml", line, "tolerance.rule", text, hint)
        for limit in found:
            if limit.of in limits:
                hint = f"{limit.of} have a limit by {limits[limit.of].source} already; name one rule for them"
                faults.add("job.toml", line, "tolerance.rule", text, hint)
            limits[limit.of] = limit
    for key, allowance in own.items():
        limits |= {of: Limit(of, allowance, f"[tolerance] {key} of the job", "own") for of in OF_KEYS[key]}
    return Tolerance(limits), inputs


def _find(name: str, folder: Path, line: int, faults: Faults, inputs: list[tuple[str, str]]) -> Rule | None:
    """A rule of the program, or of a TOML file in the job's folder."""
    if name in built_in():
        return built_in_rule(name)
    file = name if name.endswith(".toml") else f"{name}.toml"
    path = folder / file
    if "/" in file or "\\" in file or file == "job.toml" or not path.is_file():
        hint = f"no such rule, and no such file in the job folder; {nearest(name, built_in())}"
        faults.add("job.toml", line, "tolerance.rule", name, hint)
        return None
    data = path.read_bytes()
    inputs.append((file, hashlib.sha256(data).hexdigest()))
    try:
        return parse_rule(data.decode("utf-8-sig"), name.removesuffix(".toml"))
    except (BadRule, UnicodeDecodeError) as bad:
        faults.add(file, 0, "", "", str(bad) if isinstance(bad, BadRule) else "not UTF-8; save it as UTF-8")
        return None
