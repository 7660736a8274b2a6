"""The pages of mathematics: every module with formulas has one, links lead somewhere, examples are right."""

from __future__ import annotations

import ast
import contextlib
import io
import re
from pathlib import Path

import pytest

from adjust.kinds import KINDS

ROOT = Path(__file__).parents[2]
ENTRY = ROOT / "docs" / "mathematics.md"
PAGES = sorted((ROOT / "docs" / "mathematics").glob("*.md"))
FORMULA = re.compile(r"\w\^[-\d]|\bsqrt\(|^ {4}.* = |[A-Za-z)\]] = [^=]|-> \w+ \w+ \+", re.M)
"""A power, a root, an equation, or a mapping in a docstring."""
ON_PAPER = ("record/",)
"""Stages whose formulas place things on paper and in files; nothing of the adjustment is computed there."""


def modules() -> dict[str, str]:
    """Docstring of every module under adjust/ by its path."""
    found = {}
    for path in sorted((ROOT / "adjust").rglob("*.py")):
        text = ast.get_docstring(ast.parse(path.read_text("utf-8")))
        found[path.relative_to(ROOT / "adjust").as_posix()] = text or ""
    return found


def named() -> dict[str, list[str]]:
    """Modules that the head of each page names, with the pages that do."""
    found: dict[str, list[str]] = {}
    for page in PAGES:
        head = page.read_text("utf-8").split("\n\n")[1]
        assert head.startswith("Code: "), f"{page.name} does not begin with its modules"
        for module in re.findall(r"\[`adjust/([\w/]+\.py)`\]\(\.\./\.\./adjust/\1\)", head):
            found.setdefault(module, []).append(page.name)
    return found


def test_every_module_with_a_formula_has_its_page():
    with_formula = {m for m, text in modules().items() if FORMULA.search(text) and not m.startswith(ON_PAPER)}
    assert len(with_formula) > 20, "the list is too short to be true"
    kinds = {f"kinds/{kind}.py" for kind in KINDS}
    assert sorted((with_formula | kinds) - set(named())) == [], "name it in the head of a page under docs/mathematics"


def test_every_page_names_modules_that_are_there_and_no_two_pages_the_same():
    found = named()
    assert sorted(set(found) - set(modules())) == []
    assert {module: pages for module, pages in found.items() if len(pages) > 1} == {}
    assert {page for pages in found.values() for page in pages} == {page.name for page in PAGES}


def test_the_entry_leads_to_every_page():
    assert sorted(set(re.findall(r"\(mathematics/([\w-]+\.md)\)", ENTRY.read_text("utf-8")))) == [p.name for p in PAGES]


@pytest.mark.parametrize("page", [ENTRY, *PAGES], ids=lambda p: p.stem)
def test_links_lead_somewhere(page):
    links = re.findall(r"\]\(([^)#:]+)\)", page.read_text("utf-8"))
    assert links
    assert [link for link in links if not (page.parent / link).exists()] == []


@pytest.mark.parametrize("page", PAGES, ids=lambda p: p.stem)
def test_the_worked_example_prints_what_the_page_says(page):
    text = page.read_text("utf-8")
    examples = re.findall(r"^```python\n(.*?)^```\n\n^```text\n(.*?)^```$", text, re.M | re.S)
    assert len(examples) == text.count("```python") == 1
    ((code, printed),) = examples
    out = io.StringIO()
    with contextlib.redirect_stdout(out):
        exec(compile(code, page.name, "exec"), {"__name__": "__main__"})
    assert re.search(r"\d", printed), "a worked example has numbers"
    assert out.getvalue() == printed


@pytest.mark.parametrize("page", PAGES, ids=lambda p: p.stem)
def test_every_page_has_its_derivation_example_and_sources(page):
    text = page.read_text("utf-8")
    assert re.findall(r"^## (Worked example|Sources)$", text, re.M) == ["Worked example", "Sources"]
    assert text.index("Code: ") < text.index("## Worked example")
