"""record.html: everything that a record must say, text that stays text, and nothing that is fetched."""

from __future__ import annotations

import base64
import csv
import hashlib
import io
import itertools
import json
import os
import re
import subprocess
import sys
import tomllib
import webbrowser
from collections import Counter
from functools import cache
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import pytest

import adjust
from adjust.book.schema import RECORD as KEYS
from adjust.caution import CAUTION
from adjust.cli import main
from adjust.record import page_view
from adjust.record.build import build
from adjust.record.page import FOLDER, PARTS, css_string, record_page
from adjust.record.page_blocks import NAME_MOST, catalogue
from adjust.record.page_view import inputs_hash, reading_order
from adjust.record.shown import Shown, plain

NETWORKS = Path(__file__).resolve().parents[2] / "networks"
DEMOS = sorted(path.parent.name for path in NETWORKS.glob("*/job.toml"))
VOID = {"meta", "br", "hr", "img", "input", "link", "col", "wbr", "base", "source"}


class Page(HTMLParser):
    """What a browser would see: text by element, elements with their attributes, scripts apart."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.open: list[tuple[str, dict[str, str]]] = []
        self.elements: list[tuple[str, dict[str, str]]] = []
        self.texts: list[tuple[tuple[str, ...], str]] = []
        self.by_id: dict[str, str] = {}
        self.wrong: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        given = {name: value or "" for name, value in attrs}
        self.elements.append((tag, given))
        if tag not in VOID:
            self.open.append((tag, given))

    def handle_endtag(self, tag: str) -> None:
        if not self.open or self.open[-1][0] != tag:
            self.wrong.append(f"</{tag}> within {[one for one, _ in self.open[-2:]]}")
        else:
            self.open.pop()

    def handle_data(self, data: str) -> None:
        tags = tuple(tag for tag, _ in self.open)
        self.texts.append((tags, data))
        for _, given in self.open:
            if "id" in given:
                self.by_id[given["id"]] = self.by_id.get(given["id"], "") + data

    def visible(self) -> str:
        return "".join(data for tags, data in self.texts if not {"script", "style"} & set(tags))

    def count(self, tag: str) -> int:
        return sum(one == tag for one, _ in self.elements)


def record_of(job: Path) -> dict[str, Any]:
    return build(adjust.assess(adjust.solve(adjust.read(job))))


@cache
def demo(name: str) -> tuple[dict[str, Any], str]:
    record = record_of(NETWORKS / name)
    return record, record_page(record)


HEAD = '[units]\nlength = "m"\nangle = "dms"\n[instruments.level-1]\nlevelling = "1.2 mm*sqrt(km)"\n'


def bare_job(folder: Path, more: str = "") -> Path:
    (folder / "job.toml").write_text(HEAD + more, "utf-8")
    (folder / "control.csv").write_text("station,height\nM1,10.0\n", "utf-8")
    (folder / "levelled.csv").write_text("from,to,rise,length\nM1,P1,1.0004,200\nP1,M1,-1.0010,210\n", "utf-8")
    return folder


def sound(page: Page) -> None:
    """Elements nest, ids are unique, links lead somewhere, regions and tables are named."""
    assert page.wrong == []
    assert page.open == []
    ids = Counter(given["id"] for _, given in page.elements if "id" in given)
    assert [one for one, n in ids.items() if n > 1] == []
    assert page.count("h1") == page.count("main") == 1
    for tag, given in page.elements:
        assert not any(name.startswith("on") for name in given), (tag, given)
        assert "style" not in given or page.count("svg"), (tag, given)
        if tag == "a":
            assert given["href"].startswith("#"), given
            assert given["href"][1:] in ids, given
        for name in ("aria-labelledby",):
            assert name not in given or given[name] in ids, given
        assert "src" not in given, given
    assert page.count("caption") == page.count("table")
    assert all("scope" in given for tag, given in page.elements if tag == "th")
    scripts = [given for tag, given in page.elements if tag == "script"]
    assert [one.get("type", "") for one in scripts] == ["application/json", "application/json", ""]


@pytest.mark.parametrize("name", DEMOS)
def test_every_part_is_there_in_its_order(name: str) -> None:
    record, text = demo(name)
    page = Page(text)
    sound(page)
    sections = [given["id"] for tag, given in page.elements if tag == "section"]
    assert sections == ["summary", *(f"part-{key}" for key, _ in PARTS), "glossary"]
    assert len(PARTS) == 16
    for key, _ in PARTS:
        title = catalogue()(f"parts.{key}")
        said = page.by_id[f"part-{key}"].replace(title, "", 1)
        assert len(said.split()) > 2, f"{key} says nothing"
    assert CAUTION in page.visible()
    assert record["findings"][0]["sentence"] in page.by_id["summary"]
    assert all(caution in page.by_id["part-limits"] for caution in catalogue().branch("cautions").values())
    for one in record["job"]["inputs"]:
        assert one["sha256"] in page.by_id["part-files"]
    assert inputs_hash(record)[:12] in text[: text.index("</style>")]


@pytest.mark.parametrize("name", DEMOS)
def test_coordinates_and_verdicts_are_those_of_the_record(name: str) -> None:
    record, text = demo(name)
    page, shown = Page(text), Shown.of(record)
    for i, one in enumerate(record["stations"]):
        row = page.by_id[f"s{i}"]
        assert one["station"] in row
        for axis in ("east", "north", "height"):
            if one[axis] is not None:
                assert shown.coordinate(one[axis], one[f"sd_{axis}"]) in row
    for i, one in enumerate(record["observations"]):
        assert plain(one["booked"], 60) in page.by_id[f"o{i}"]
    for i, one in enumerate(record["closures"]):
        assert one["verdict"] in page.by_id[f"c{i}"]
    factor = record["solution"]["variance_factor"]
    assert f"{factor:.2f}".replace(".", shown.decimal) in page.by_id["part-held"]


@pytest.mark.parametrize("name", DEMOS)
def test_nothing_is_fetched(name: str) -> None:
    text = demo(name)[1]
    outside = text.replace("http://www.w3.org/2000/svg", "").replace("http://www.w3.org/1999/xlink", "")
    assert re.findall(r"https?:|@import|url\(|fetch\(|XMLHttpRequest|import\(|WebSocket|<link", outside) == []
    policy = next(given["content"] for tag, given in Page(text).elements if "http-equiv" in given)
    script = text.rpartition("<script>")[2].partition("</script>")[0]
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    assert "default-src 'none'" in policy
    assert f"script-src 'sha256-{digest}';" in policy


def test_the_record_inside_is_the_record() -> None:
    record, text = demo("access-road")
    assert json.loads(Page(text).by_id["record"]) == json.loads(json.dumps(record))
    keys = json.loads(Page(text).by_id["page-texts"])
    assert all(key.startswith(("plan.", "tables.")) for key in keys)


def test_same_bytes_twice_and_with_another_hash_seed(tmp_path: Path) -> None:
    record, text = demo("loop-traverse-feet")
    assert record_page(json.loads(json.dumps(record))) == text
    source = tmp_path / "record.json"
    source.write_text(json.dumps(record), "utf-8")
    child = (
        "import json, sys\nfrom adjust.record.page import page_bytes\n"
        "sys.stdout.buffer.write(page_bytes(json.load(open(sys.argv[1], encoding='utf-8'))))"
    )
    out = subprocess.run(
        [sys.executable, "-c", child, source],
        capture_output=True,
        check=True,
        env={**os.environ, "PYTHONHASHSEED": "4711"},
    )
    assert out.stdout == text.encode()


def test_what_a_bare_job_does_not_say_is_not_supplied(tmp_path: Path) -> None:
    record = record_of(bare_job(tmp_path))
    assert set(record["particulars"].values()) == {None}
    page = Page(record_page(record))
    sound(page)
    missing = catalogue()("page.not_supplied")
    for key in ("cover", "purpose", "frame", "instruments", "methods", "control", "conclusions", "limits"):
        assert missing in page.by_id[f"part-{key}"], key
    assert page.visible().count(missing) >= len(KEYS)
    assert catalogue()("page.untitled") in page.visible()


def test_what_the_job_says_of_itself_is_shown_and_nothing_else_changes(tmp_path: Path) -> None:
    said = "\n".join(f'{f.name} = "Said of {f.name}."' for f in KEYS)
    record = record_of(bare_job(tmp_path, f"[record]\n{said}\n"))
    assert record["particulars"] == {f.name: f"Said of {f.name}." for f in KEYS}
    page = Page(record_page(record))
    for f in KEYS:
        assert f"Said of {f.name}." in page.visible()
    places = {"accuracy": "purpose", "geoid": "frame", "calibration": "instruments", "criteria": "methods",
              "conclusions": "conclusions", "limits": "limits", "licence": "cover", "control": "control"}  # fmt: skip
    for key, part in places.items():
        assert f"Said of {key}." in page.by_id[f"part-{part}"]
    plainly = record_of(bare_job(tmp_path))
    assert {**record, "particulars": 0, "job": 0} == {**plainly, "particulars": 0, "job": 0}


def test_paragraphs_days_and_blanks(tmp_path: Path) -> None:
    more = '[record]\nissued = 2026-05-20\nmethods = """First,\nsecond.\n\nThird."""\nplace = "  "\n'
    record = record_of(bare_job(tmp_path, more))
    assert record["particulars"]["issued"] == "2026-05-20"
    assert record["particulars"]["place"] is None
    page = Page(record_page(record))
    shown = [data for tags, data in page.texts if tags[-1:] == ("dd",)]
    assert "First, second." in shown
    assert "Third." in shown


@pytest.mark.parametrize(
    ("line", "fault"),
    [
        ("purpose = 3", 'job.toml:7: column record.purpose: "3": must be a text in quotes'),
        ("purpos = 'x'", 'job.toml:7: column record.purpos: "purpos": an unknown key; did you mean purpose?'),
        ("issued = 20260520", 'job.toml:7: column record.issued: "20260520": write a day like 2026-05-14'),
        ("surveyor = ['A', 'B']", 'job.toml:7: column record.surveyor: "["A", "B"]": must be a text in quotes'),
        ("[record.place]", 'job.toml:7: column record.place: "{}": must be a text in quotes'),
    ],
)
def test_slips_in_the_record_block_are_faults(tmp_path: Path, line: str, fault: str) -> None:
    with pytest.raises(adjust.errors.InputError) as caught:
        adjust.read(bare_job(tmp_path, f"[record]\n{line}\n"))
    assert str(caught.value) == fault


def test_a_record_that_is_no_table_is_a_fault(tmp_path: Path) -> None:
    bare_job(tmp_path)
    (tmp_path / "job.toml").write_text('record = "all of it"\n' + HEAD, "utf-8")
    with pytest.raises(adjust.errors.InputError) as caught:
        adjust.read(tmp_path)
    assert str(caught.value) == 'job.toml:1: column record: "all of it": must be a table: [record]'


HOSTILE = (
    "<script>alert(1)</script>", "</script><script>alert(2)</script>", "<img src=x onerror=alert(3)>",
    '"><svg onload=alert(4)>', "' onmouseover='alert(5)", "</td></tr></table><h1>6</h1>", "<!-- 7", "]]> <![CDATA[8",
    "&lt;b&gt;9&amp;", "&#60;script&#62;", "=cmd|' /C calc'!A0", "@SUM(1+1)", "{{ 7 * 7 }}", "{% raw %}", "</style>*{}",
    "javascript:alert(16)", "مَحَطّة ١٧", "שלט 18", "🧭📐 9️⃣", "long-" + "x" * 10_000,
)  # fmt: skip


def hostile_job(folder: Path) -> Path:
    """Twenty names in one loop of levels, and the same texts wherever a job may say something."""

    def quoted(text: str) -> str:
        return json.dumps(text, ensure_ascii=False)

    texts = "".join(f"{f.name} = {quoted(HOSTILE[k % len(HOSTILE)])}\n" for k, f in enumerate(KEYS))
    control = "\\u202e\\u0000\\u0007\\u001b[31m\\u2028\\uFEFF"
    top = f"title = {quoted(HOSTILE[1])}\nclient = {quoted(HOSTILE[2])}\nsurveyed = {quoted(HOSTILE[3])}\n"
    levels = f"[instruments.{quoted(HOSTILE[0])}]\nlevelling = '1.2 mm*sqrt(km)'\n[record]\n{texts}"
    head = HEAD.partition("[instruments")[0]
    (folder / "job.toml").write_text(top + head + levels.replace(quoted(HOSTILE[6]), f'"{control}"'), "utf-8")
    rows: list[list[str]] = [["from", "to", "rise", "length", "id", "use", "reason", "note"]]
    way = ["M1", *HOSTILE, "M1"]
    for k, (a, b) in enumerate(itertools.pairwise(way)):
        rise = "0.0100" if k else "-0.2"
        rows.append([a, b, rise, "100", HOSTILE[k % 19] + str(k), "yes", "", HOSTILE[k % 20]])
    rows.append([HOSTILE[0], HOSTILE[5], "0.03", "80", "", "no", HOSTILE[2], ""])
    table = io.StringIO()
    csv.writer(table).writerows(rows)
    (folder / "levelled.csv").write_text(table.getvalue(), "utf-8")
    (folder / "control.csv").write_text("station,height\nM1,10.0\n", "utf-8")
    return folder


def test_hostile_names_and_texts_stay_text(tmp_path: Path) -> None:
    record = record_of(hostile_job(tmp_path))
    text = record_page(record)
    page = Page(text)
    sound(page)
    assert len(set(HOSTILE)) == 20
    for i, one in enumerate(record["stations"]):
        assert plain(one["station"], NAME_MOST) in page.by_id[f"s{i}"]
    seen = page.visible()
    for hostile in HOSTILE:
        assert plain(hostile, NAME_MOST) in seen
    assert plain(record["left_out"][0]["reason"], 400) in page.by_id["left-out"]
    for said in record["particulars"].values():
        assert plain(" ".join(said.split()), 10 * len(said)) in seen, "the surveyor's own texts are shown whole"
    assert not re.search(r"[\x00-\x08\x0b-\x1f\u202a-\u202e\u2066-\u2069\ufeff]", seen), "no control or direction marks"
    assert {tag for tag, _ in page.elements} <= {
        "html", "head", "meta", "title", "style", "body", "a", "header", "main", "nav", "section", "footer", "h1", "h2",
        "h3", "h4", "p", "ul", "ol", "li", "dl", "dt", "dd", "div", "span", "bdi", "table", "caption", "thead", "tbody",
        "tr", "th", "td", "details", "summary", "pre", "script", "figure", "figcaption", "strong", "svg",
        *(tag for tag, _ in page.elements if page.count("svg")),
    }  # fmt: skip
    assert json.loads(page.by_id["record"]) == json.loads(json.dumps(record))
    assert "</style>" not in text.partition("<style>")[2].partition("\n</style>\n</head>")[0]


def test_a_title_cannot_leave_its_string_in_the_style() -> None:
    assert css_string('a"b\\</style>\n') == '"a\\000022b\\00005c\\00003c\\00002fstyle\\00003e\\00000a"'


def test_suspects_and_unchecked_readings_come_first_and_many_are_cut(monkeypatch: pytest.MonkeyPatch) -> None:
    record, _ = demo("weir-levels")
    n = len(record["observations"])
    assert reading_order(record) == tuple(range(n)), "a clean job keeps the order of its book"
    blamed, unseen = record["observations"][5]["id"], record["observations"][3]["id"]
    blunder = {"observation": blamed, "estimated_blunder": 0.01, "sd": 0.001, "statistic": 10.0, "at_job_level": True,
               "likely_causes": [], "cannot_be_told_from": []}  # fmt: skip
    spoiled = {**record, "suspects": [blunder], "unchecked": [{"observation": unseen, "why": "invented here"}]}
    assert reading_order(spoiled)[:2] == (5, 3)
    page = Page(record_page(spoiled))
    assert "data-first" in next(given for tag, given in page.elements if given.get("id") == "o5")
    assert blamed in page.by_id["suspects"]
    assert "invented here" in page.by_id["unchecked"]
    monkeypatch.setattr(page_view, "ROWS_MOST", 4)
    rest = reading_order(spoiled)[2:]
    worst = sorted((i for i in range(n) if i not in (3, 5)), key=lambda i: -abs(record["observations"][i]["statistic"]))
    assert list(rest) == worst[:2]
    cut = Page(record_page(spoiled))
    assert f"4 of {n} readings" in cut.by_id["part-readings"]
    assert "observations.csv" in cut.by_id["part-readings"]
    assert f"o{worst[2]}" not in cut.by_id


def test_a_job_with_a_blunder_says_so_first(tmp_path: Path) -> None:
    for file in ("job.toml", "control.csv", "levelled.csv"):
        (tmp_path / file).write_bytes((NETWORKS / "weir-levels" / file).read_bytes())
    lines = (tmp_path / "levelled.csv").read_text("utf-8").splitlines()
    k = next(i for i, line in enumerate(lines) if re.match(r"[A-Z]\w*,", line) and not line.startswith("from"))
    cells = lines[k].split(",")
    rise = next(i for i, cell in enumerate(lines[k].split(",")) if re.fullmatch(r"-?\d+\.\d{3,}", cell))
    cells[rise] = f"{float(cells[rise]) + 0.1:.4f}"
    lines[k] = ",".join(cells)
    (tmp_path / "levelled.csv").write_text("\n".join(lines) + "\n", "utf-8")
    record = record_of(tmp_path)
    page = Page(record_page(record))
    assert record["suspects"][0]["observation"] == f"levelled.csv:{k + 1}"
    assert f"levelled.csv:{k + 1}" in page.by_id["summary"]
    assert "not met" in page.by_id["summary"]
    assert f"levelled.csv:{k + 1}" in page.by_id["suspects"]
    assert "field book" in page.by_id["summary"]


def test_every_text_of_the_page_is_in_the_catalogue() -> None:
    for template in FOLDER.glob("*.j2"):
        bare = re.sub(r"{%.*?%}|{{.*?}}|<[^>]*>", " ", template.read_text("utf-8"), flags=re.S)
        assert bare.split() == [], template.name
    tree = tomllib.loads((FOLDER / "texts.toml").read_text("utf-8"))
    assert set(tree["parts"]) == {key for key, _ in PARTS}
    assert set(tree["said"]) >= {f.name for f in KEYS}


def test_the_command_writes_names_and_opens_the_page(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    opened: list[str] = []
    monkeypatch.setattr(webbrowser, "open", opened.append)
    job, out = bare_job(tmp_path), tmp_path / "a record"
    assert main(["adjust", str(job), "--out", str(out)]) == 0
    page = out / "record.html"
    assert str(page) in capsys.readouterr().out
    assert opened == []
    assert page.read_text("utf-8") == record_page(record_of(job))
    assert main(["adjust", str(job), "--out", str(out), "--open", "--quiet"]) == 0
    assert opened == [page.resolve().as_uri()]
    assert main(["adjust", str(job), "--json", "--open"]) == 2
    assert "--open has no page to open" in capsys.readouterr().err
    assert len(opened) == 1


def test_templates_are_loaded_only_where_a_page_is_written(tmp_path: Path) -> None:
    child = (
        "import sys\nfrom adjust.cli import main\n"
        "for words in (['check'], ['adjust', '--json'], ['adjust', '--quiet']):\n"
        "    main([*words, sys.argv[1]])\n"
        "    print('jinja2' in sys.modules, 'webbrowser' in sys.modules, file=sys.stderr)"
    )
    job = str(bare_job(tmp_path))
    run = subprocess.run([sys.executable, "-c", child, job], capture_output=True, text=True, check=True)
    assert run.stderr.splitlines() == ["False False", "False False", "True False"]
