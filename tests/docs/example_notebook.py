"""Run docs/example.ipynb from a clean start, as a reader would, and keep its outputs without anything that changes.

`python -m tests.docs.example_notebook` runs it and writes the outputs back; test_example_notebook.py compares them.
"""

from __future__ import annotations

import os
import re
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

FILE = Path(__file__).parents[2] / "docs" / "example.ipynb"
SECONDS_MOST = 300
"""For one cell; only a hanging kernel takes that long."""


@contextmanager
def _own_folders() -> Iterator[None]:
    """Settings and history of whoever runs this stay out of it, and are not written to."""
    with tempfile.TemporaryDirectory() as folder:
        names = ("IPYTHONDIR", "JUPYTER_CONFIG_DIR", "JUPYTER_DATA_DIR", "JUPYTER_RUNTIME_DIR")
        own = {name: str(Path(folder) / name.lower()) for name in names} | {"JUPYTER_PLATFORM_DIRS": "1"}
        before = {name: os.environ.get(name) for name in own}
        os.environ.update(own)
        try:
            yield
        finally:
            for name, value in before.items():
                if value is None:
                    del os.environ[name]
                else:
                    os.environ[name] = value


def executed(file: Path = FILE) -> Any:
    """The notebook with fresh outputs; an error in a cell is raised."""
    with _own_folders():
        import nbformat
        from nbclient import NotebookClient

        notebook = nbformat.read(file, as_version=4)
        client = NotebookClient(notebook, timeout=SECONDS_MOST, kernel_name="python3", record_timing=False,
                                resources={"metadata": {"path": str(file.parent)}})  # fmt: skip
        client.execute()
    return tidy(notebook)


def tidy(notebook: Any) -> Any:
    """Without versions, ids by chance and whatever else depends on the machine."""
    notebook.metadata = {
        "kernelspec": {"display_name": "Python 3", "language": "python", "name": "python3"},
        "language_info": {"name": "python"},
    }
    for number, cell in enumerate(notebook.cells):
        cell.id, cell.metadata = f"cell-{number}", {}
        for output in cell.get("outputs", []):
            if "metadata" in output:
                output.metadata = {}
    return notebook


def texts(notebook: Any) -> list[str]:
    """What a reader reads: streams, plain text and tables of all outputs, each with its cell's number."""
    found = []
    for number, cell in enumerate(notebook.cells):
        for output in cell.get("outputs", []):
            if output.output_type == "stream":
                found.append(f"{number} {output.name}: {output.text}")
            for mime, data in sorted(output.get("data", {}).items()):
                found.append(f"{number} {mime}: {plain(data) if mime.startswith('text/') else 'a picture'}")
    return found


def plain(text: str) -> str:
    """The text without the style that pandas puts before its tables."""
    return re.sub(r"<style scoped>.*?</style>\n?", "", text, flags=re.S)


def main() -> None:
    """Run and write back."""
    import nbformat

    FILE.write_text(nbformat.writes(executed()) + "\n", "utf-8", newline="\n")


if __name__ == "__main__":
    main()
