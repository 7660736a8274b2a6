"""Each page against what it describes, both ways: commands, record, messages, glossary, decisions, index."""

from __future__ import annotations

import argparse
import ast
import functools
import json
import re
import subprocess
import sys
from pathlib import Path

import pytest

import adjust
from adjust import cli
from adjust.book import schema
from adjust.caution import CAUTION
from adjust.record.build import build
from adjust.record.keys import RECORD
from tests.docs import messages, record_page
from tests.docs.blocks import ROOT

DOCS = ROOT / "docs"


def plain(text: str) -> str:
    """The text in one line, without the marks of quotations."""
    return re.sub(r"\s+", " ", re.sub(r"^> ?", "", text, flags=re.M))


# ---- commands


def commands() -> dict[str, argparse.ArgumentParser]:
    """Every command with its parser."""
    for action in cli.parser()._actions:
        if isinstance(action, argparse._SubParsersAction):
            return dict(action.choices)
    raise AssertionError("no commands")


def cells(page: str, head: str) -> list[list[str]]:
    """Rows of the table with this first head."""
    table = re.search(rf"^\| {head} \|.*\n\|.*\n((?:\|.*\n)+)", page, re.M)
    assert table, f"no table with {head}"
    return [[cell.strip() for cell in line.split("|")[1:-1]] for line in table[1].splitlines()]


def test_every_command_has_its_page_and_no_other():
    assert {p.stem for p in (DOCS / "commands").glob("*.md")} == set(commands())


@pytest.mark.parametrize("command", sorted(commands()))
def test_every_argument_is_documented_and_no_other(command):
    page = (DOCS / "commands" / f"{command}.md").read_text("utf-8")
    documented = {tuple(re.findall(r"`([^`]+)`", row[0])) for row in cells(page, "argument")}
    actions = commands()[command]._actions
    assert documented == {tuple(a.option_strings) or (str(a.metavar),) for a in actions}
    assert all(len(row[1]) > 5 for row in cells(page, "argument"))
    usage = re.search(r"```text\n(brasscap .+)\n```", page)
    assert usage
    shown = set(re.findall(r"--[\w-]+", usage[1]))
    assert shown == {o for a in actions for o in a.option_strings if o.startswith("--")} - {"--help"}
    assert usage[1].split()[1] == command


def test_the_options_of_the_program_itself_stand_in_the_index():
    rows = cells((DOCS / "README.md").read_text("utf-8"), "option")
    actions = [a for a in cli.parser()._actions if a.option_strings]
    assert {tuple(re.findall(r"`([^`]+)`", row[0])) for row in rows} == {tuple(a.option_strings) for a in actions}


def test_every_exit_code_is_documented_and_no_other():
    codes = {cli.DONE, cli.FAILED, cli.REFUSED, cli.INTERNAL, cli.INTERRUPTED}
    of = {c: {int(r[0]) for r in cells((DOCS / "commands" / f"{c}.md").read_text("utf-8"), "exit code")}
          for c in commands()}  # fmt: skip
    assert of == {c: codes - {cli.FAILED} if c == "start" else codes for c in commands()}
    assert re.search("Exit codes: 0 .*1 .*2 .*70 .*130 ", plain((DOCS / "formats.md").read_text("utf-8")))


# ---- the record


def test_the_record_page_has_every_key_with_type_meaning_unit_and_null():
    text = record_page.PAGE.read_text("utf-8")
    assert record_page.gaps(text) == []
    assert record_page.refreshed(text) == text, "run python -m tests.docs.refresh"
    assert {(s, k) for s, k in record_page.notes(text)} == {
        (record_page.section_name(s), f.name) for s, fields in RECORD.items() for f in fields
    }


def test_the_record_page_would_not_pass_with_a_key_missing_or_a_false_null():
    text = record_page.PAGE.read_text("utf-8")
    row = next(line for line in text.splitlines() if line.startswith("| `semi_major` |"))
    assert record_page.gaps(text.replace(row + "\n", "")) != []
    assert record_page.gaps(text.replace(row, row.replace("| m |", "|  |"))) != []
    factor = next(line for line in text.splitlines() if line.startswith("| `variance_factor` | number? |"))
    assert record_page.gaps(text.replace("no degree of freedom | 1 is", " | 1 is")) != []
    assert record_page.refreshed(text.replace(factor, factor.replace("null without any", "whatever"))) == text


def test_units_of_the_record_are_those_of_the_page():
    """A demo in feet and degrees: what the page calls m and rad is metres and radians."""
    record = build(adjust.assess(adjust.solve(adjust.read(ROOT / "networks" / "loop-traverse-feet"))))
    units = {key: note[0] for (section, key), note in record_page.notes(record_page.PAGE.read_text("utf-8")).items()
             if section in ("station", "line")}  # fmt: skip
    assert units["east"] == units["distance"] == "m"
    assert units["azimuth"] == "rad"
    first = next(s for s in record["stations"] if s["station"] == "T1")
    assert abs(first["north"] - 10000 * 0.3048) < 1e-6
    assert all(0 <= line["azimuth"] < 6.2832 for line in record["lines"])


@pytest.mark.parametrize("factor", ["given", "from-residuals"])
def test_what_the_record_page_says_of_null_where_nothing_is_to_spare(factor, tmp_path):
    """One point from two distances: no degree of freedom, no more control than the datum needs."""
    toml = '[units]\nlength = "m"\nangle = "dms"\n[instruments.tape]\ndistance = "5 mm"\n[tests]\n'
    (tmp_path / "job.toml").write_text(f'{toml}variance_factor = "{factor}"\n')
    (tmp_path / "control.csv").write_text("station,east,north\nW1,100,100\nW2,160,100\n")
    (tmp_path / "stations.csv").write_text("station,east,north\nN1,130,130\n")
    (tmp_path / "distances.csv").write_text("from,to,distance\nW1,N1,43.215\nW2,N1,38.902\n")
    record = build(adjust.assess(adjust.solve(adjust.read(tmp_path))))
    new = next(s for s in record["stations"] if s["station"] == "N1")
    reading = record["observations"][0]
    assert record["solution"]["variance_factor"] is record["solution"]["overall_test"]["interval"] is None
    assert record["free"] is record["solution"]["parts"][0]["variance_factor"] is None
    assert [reading[k] for k in ("statistic", "smallest_detectable", "external_effect", "set", "part")] == [None] * 5
    assert (reading["critical"] is None) == (factor == "from-residuals")
    line = record["lines"][0]
    scaled = [new["ellipse"], new["ellipse_confidence"], new["sd_east"], line["ellipse"], line["sd_distance"]]
    assert [value is None for value in scaled] == [factor == "from-residuals"] * 5
    assert new["height"] is new["sd_height"] is new["covariance"][2][2] is None


# ---- messages


def test_every_message_is_explained_and_no_other():
    assert messages.differences() == []


def test_every_explanation_says_something():
    lines = messages.PAGE.read_text("utf-8").split("\n")
    bullets = [messages._bullet(lines, i) for i, line in enumerate(lines) if line.startswith("- `")]
    assert len(bullets) > 100
    assert [b for b in bullets if len(re.findall(r"\w+", b.partition(" — ")[2])) < 2] == []


NEW = '''
"""A docstring is no message."""
def f(name, n):
    """Nor is this one."""
    raise Unsolvable([f"{name} is a new refusal: " + ("so it is" if n else f"and {n} others") + more])
    x = Field("a", "text", "the meaning of a key")
    parser.add_argument("--x", help="what it does")
'''


def test_a_new_message_is_seen_wherever_it_stands(monkeypatch):
    seen = [named for _, named in messages._texts(ast.parse(NEW)) if messages._is_message(named)]
    assert seen == ["‹name› is a new refusal: ‹n›‹more›", "so it is", "and ‹n› others"]
    new = messages.Text("adjust/units.py", 7, "a new ‹x› message")
    code = [*messages.in_code(), new]
    monkeypatch.setattr(messages, "in_code", lambda: code)
    (line,) = messages.differences()
    assert line.startswith('adjust/units.py:7: not in docs/messages.md; add under "Values":  - `a new ‹x› message`')


def test_a_message_that_is_gone_is_seen(monkeypatch):
    gone = messages.in_code()[3]
    code = [t for t in messages.in_code() if (t.module, t.plain) != (gone.module, gone.plain)]
    monkeypatch.setattr(messages, "in_code", lambda: code)
    (line,) = messages.differences()
    assert gone.plain in line
    assert "remove it" in line


def test_exceptions_to_the_list_of_messages_are_current():
    assert [m for m in messages.OTHER_PAGES if not (ROOT / m).is_file()] == []
    assert "adjust/record/drawing.py" in messages.drawn()
    assert all((ROOT / "adjust" / f"{m}.py").is_file() for m in messages.SAYS)
    code = "".join(p.read_text("utf-8") for p in sorted((ROOT / "adjust").rglob("*.py")))
    parts = {t: [p for p in t.split(messages.HOLE) if p.strip()] for t in messages.NOT_SHOWN}
    assert [t for t, found in parts.items() if not all(p in code for p in found)] == []


# ---- glossary


TRADE = (
    "adjusted", "azimuth", "bearing", "booked", "check mark", "chance", "checked share", "confidence", "control",
    "datum", "degrees of freedom", "ellipse", "estimated blunder", "external effect", "free", "held", "likely cause",
    "misfit", "observed", "orientation", "overall test", "redundancy number", "refraction", "residual", "scale", "set",
    "side shot", "smallest detectable", "standard deviation", "station", "statistic", "suspect", "to spare", "turn",
    "unchecked", "variance factor", "verdict", "weighted", "critical value", "mirror image", "centring",
    "relative ellipse", "significance", "power", "tau",
    "allowable", "change point", "collimation", "compass rule", "face", "horizon closure", "index",
    "misclosure", "rejection", "section", "sight balance", "tolerance", "transit rule", "two-peg test", "weather",
)  # fmt: skip
"""Words of the trade that the record and what is printed use."""


@functools.cache
def terms() -> dict[str, str]:
    """The terms of the glossary with their definitions."""
    text = (DOCS / "glossary.md").read_text("utf-8")
    return {t: " ".join(d.split()) for t, d in re.findall(r"^- \*\*(.+?)\*\* — (.+?)(?=^- |\Z)", text, re.M | re.S)}


@functools.cache
def spoken() -> str:
    """All that the program says: messages, and meanings of keys and columns."""
    fields = [f for part in (*schema.SECTIONS.values(), *RECORD.values()) for f in part]
    fields += [f for table in schema.table_names() for f in schema.columns_of(table)]
    texts = [t.named for t in messages.in_code()] + [f"{f.name} {f.meaning} {' '.join(f.choices)}" for f in fields]
    return " ".join(texts).replace("_", " ").casefold()


def uses(term: str, text: str) -> bool:
    """Whether a text has the term, or its plural."""
    stem = re.escape(term.casefold().removesuffix("s"))
    return bool(re.search(rf"(?<![a-z]){stem}(s|ed|es)?(?![a-z])", text))


@pytest.mark.parametrize("term", TRADE)
def test_words_that_the_program_uses_are_defined(term):
    assert term in terms()
    assert uses(term, spoken()), "nobody says that any more; take it from the list"


def test_the_record_s_own_figures_are_defined():
    """Keys of an observation and a suspect that are words of the trade, by their names."""
    keys = {f.name for s in ("observation", "suspect", "mark", "solution") for f in RECORD[s] if "number" in f.type}
    words = {k.replace("_", " ") for k in keys} - {"weighted square sum", "sd", "sd adjusted"}
    assert {w for w in words if not any(uses(w, t) or uses(t, w) for t in terms())} == set()


def test_every_term_is_used_outside_the_glossary_and_in_order():
    pages = [p for p in (ROOT / "README.md", *sorted(DOCS.rglob("*.md"))) if p.name != "glossary.md"]
    text = " ".join(p.read_text("utf-8") for p in pages).casefold()
    text = " ".join(text.replace("_", " ").split())
    assert [t for t in terms() if not (uses(t, spoken()) or uses(t, text))] == []
    assert list(terms()) == sorted(terms(), key=str.casefold)
    assert [d for d in terms().values() if len(d.split()) < 2] == []


# ---- decisions


SCRIPTS = sorted((DOCS / "decisions").glob("*.py"))
REDUCED = {"0001": ["20", "60"], "0003": ["3"], "0004": ["2"], "0005": ["200"], "0007": ["9"], "0008": ["1"]}
"""Arguments of the short run; others are short as they are."""


def test_decisions_are_numbered_and_what_they_measured_can_be_measured_again():
    records = sorted((DOCS / "decisions").glob("*.md"))
    assert [p.name[:4] for p in records] == [f"{i:04d}" for i in range(1, len(records) + 1)]
    for record in records:
        text = record.read_text("utf-8")
        assert text.startswith(f"# {record.name[:4]}: ")
        measured = re.findall(r"\*\*Measured\*\* by `python (\S+)`", text)
        assert measured == ([f"docs/decisions/{record.stem}.py"] if record.with_suffix(".py") in SCRIPTS else [])
        assert measured or "measured" not in text.casefold()
        assert "**Price.**" in text or "The price:" in text
    assert {p.stem for p in SCRIPTS} <= {p.stem for p in records}


@pytest.mark.parametrize("script", [s for s in SCRIPTS if s.name[:4] != "0006"], ids=lambda p: p.name[:4])
def test_the_scripts_of_the_decisions_run(script):
    done = subprocess.run(
        [sys.executable, str(script), *REDUCED.get(script.name[:4], [])],
        capture_output=True, text=True, encoding="utf-8", cwd=ROOT, check=False,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert len(done.stdout.splitlines()) >= 2


def test_the_table_of_the_moved_mark_0006_is_what_its_script_prints():
    script = DOCS / "decisions" / "0006-readings-alone-before-control.py"
    done = subprocess.run([sys.executable, str(script)], capture_output=True, text=True, cwd=ROOT, check=True)
    page = script.with_suffix(".md").read_text("utf-8")
    assert [f"| {line.strip()} |" in page for line in done.stdout.splitlines()[1:]] == [True] * 5


# ---- the index


def linked(page: Path) -> set[Path]:
    """Files that a page links to."""
    links = re.findall(r"\]\(([^)\s:]+?)(?:#[\w-]*)?\)", page.read_text("utf-8"))
    return {(page.parent / link).resolve() for link in links}


def test_a_newcomer_finds_every_page_from_the_index():
    every = {p.resolve() for p in DOCS.rglob("*") if p.suffix in (".md", ".json", ".txt", ".ipynb")}
    reached, new = set(), {(DOCS / "README.md").resolve()}
    while new:
        page = new.pop()
        reached.add(page)
        if page.suffix == ".md" and page.exists():
            new |= linked(page) - reached
    assert every - reached == set()
    assert (DOCS / "README.md").resolve() in linked(ROOT / "README.md")


PAGES = [ROOT / "README.md", ROOT / "DEVELOPERS.md", *sorted(DOCS.rglob("*.md"))]


@pytest.mark.parametrize("page", PAGES, ids=lambda p: p.relative_to(ROOT).as_posix())
def test_links_lead_to_files_and_headings_that_exist(page):
    for link, anchor in re.findall(r"\]\(([^)\s:#]*)(?:#([\w-]*))?\)", page.read_text("utf-8")):
        target = (page.parent / link).resolve() if link else page
        assert target.exists(), link
        if anchor:
            heads = re.findall(r"^#+ (.+)$", target.read_text("utf-8"), re.M)
            slugs = {re.sub(r"[^\w\- ]", "", h.lower()).replace(" ", "-") for h in heads}
            assert anchor in slugs, f"{link}#{anchor}"


@pytest.mark.parametrize("page", ["README.md", "tutorial.md", "record.md", "formats.md", "commands/adjust.md"])
def test_pages_that_show_results_carry_the_caution(page):
    assert CAUTION in plain((DOCS / page).read_text("utf-8"))


def test_the_schema_named_in_the_pages_is_the_record_s():
    titles = json.loads((DOCS / "record.schema.json").read_text("utf-8"))
    assert set(titles["properties"]) == {f.name for f in RECORD[""]}
