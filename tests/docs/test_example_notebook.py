"""The example notebook runs from a clean start, and what it shows is what it prints then."""

from __future__ import annotations

import nbformat
import pytest

from adjust.caution import CAUTION, CAUTION_SHORT
from tests.docs.example_notebook import FILE, executed, texts
from tests.test_project import plain


@pytest.fixture(scope="module")
def kept():
    return nbformat.read(FILE, as_version=4)


@pytest.fixture(scope="module")
def fresh():
    return executed()


def test_the_outputs_are_those_of_a_run(kept, fresh):
    shown = texts(kept)
    assert len(shown) > 10
    assert shown == texts(fresh), "run python -m tests.docs.example_notebook and look at what changed"


def test_it_holds_nothing_of_the_machine_or_the_moment(kept):
    assert kept.metadata == {
        "kernelspec": {"display_name": "Python 3", "language": "python", "name": "python3"},
        "language_info": {"name": "python"},
    }
    assert [cell.id for cell in kept.cells] == [f"cell-{number}" for number in range(len(kept.cells))]
    assert [cell.metadata for cell in kept.cells] == [{}] * len(kept.cells)
    code = [cell for cell in kept.cells if cell.cell_type == "code"]
    assert [cell.execution_count for cell in code] == list(range(1, len(code) + 1))


def test_nothing_went_to_standard_error(fresh):
    assert [text for text in texts(fresh) if " stderr: " in text] == []


def test_it_carries_the_caution(kept):
    assert CAUTION in plain(kept.cells[0].source)
    assert sum(CAUTION_SHORT in text for text in texts(kept)) >= 1


def test_it_draws_a_picture_and_uses_every_public_function(kept):
    assert any(text.endswith("image/png: a picture") for text in texts(kept))
    source = "\n".join(cell.source for cell in kept.cells if cell.cell_type == "code")
    for name in ("read", "check", "solve", "assess", "write"):
        assert f"adjust.{name}(" in source
