"""record.html: one page that holds everything, for the client, the reviewing surveyor and the archive.

Nothing is fetched: style, scripts and record.json stand inside. All text is escaped by the templates (Jinja2 with
autoescape); what goes into scripts, style and the policy of the page is escaped here. The policy lets no script run but
ours, by its hash, so that even a text that came through as markup could do nothing.
"""

from __future__ import annotations

import base64
import hashlib
import json
import re
from collections.abc import Callable, Iterator
from functools import cache
from typing import TYPE_CHECKING, Any

from adjust.record import page_checks, page_close, page_cover, page_readings, page_results
from adjust.record.json_text import json_bytes
from adjust.record.page_blocks import FOLDER, Block, Grid, Part, slim
from adjust.record.page_rows import rows_markup
from adjust.record.page_summary import summary
from adjust.record.page_view import HASH_SHOWN, View, inputs_hash
from adjust.record.page_words import glossary
from adjust.record.shown import Entry, plain

if TYPE_CHECKING:
    from jinja2 import Environment

PARTS: tuple[tuple[str, Callable[[View], Iterator[Block]]], ...] = (
    ("cover", page_cover.cover),
    ("purpose", page_cover.purpose),
    ("frame", page_cover.frame),
    ("instruments", page_cover.instruments),
    ("methods", page_cover.methods),
    ("control", page_cover.control),
    ("readings", page_readings.readings),
    ("closures", page_checks.closures),
    ("free", page_checks.free),
    ("held", page_results.held),
    ("coordinates", page_results.coordinates),
    ("compliance", page_results.compliance),
    ("plan", page_results.plan),
    ("conclusions", page_close.conclusions),
    ("files", page_close.files),
    ("limits", page_close.limits),
)
"""The sixteen parts in their order: key of the catalogue (and fragment of the page), and what makes its blocks."""
TITLE_MOST = 90
"""Characters of the title at the foot of a printed page: what fits beside hash and page number on Letter."""


def record_page(record: Entry) -> str:
    """The whole page of a complete record as text."""
    from adjust.record.build import trimmed

    view = View.of(record)
    environment = _environment()
    parts = [Part(key, n + 1, view.texts(f"parts.{key}"), _blocks(make(view))) for n, (key, make) in enumerate(PARTS)]
    body = environment.get_template("body.j2").render(view=view, t=view.texts, parts=parts, summary=summary(view))
    script = "\n".join(path.read_text("utf-8") for path in sorted(FOLDER.glob("*.js")))
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    from markupsafe import Markup

    return environment.get_template("page.j2").render(
        t=view.texts,
        title=view.title(),
        policy=f"default-src 'none'; style-src 'unsafe-inline'; script-src 'sha256-{digest}'; img-src data:; "
        "base-uri 'none'; form-action 'none'",
        style=Markup(_style(view)),
        script=Markup(script),
        record=Markup(_in_script(json_bytes(trimmed(dict(record))).decode())),
        texts=Markup(_in_script(json.dumps(_script_texts(view), ensure_ascii=False, sort_keys=True))),
        body=Markup(body),
        glossary=glossary(view.texts, body),
    )


def _blocks(made: Iterator[Block]) -> tuple[Block, ...]:
    return tuple(slim(one) if isinstance(one, Grid) else one for one in made)


@cache
def _environment() -> Environment:
    """The templates, loaded where a page is written and only there."""
    from jinja2 import Environment, FileSystemLoader, StrictUndefined
    from markupsafe import Markup

    made = Environment(loader=FileSystemLoader(FOLDER), autoescape=True, undefined=StrictUndefined, trim_blocks=True,
                       lstrip_blocks=True, keep_trailing_newline=True)  # fmt: skip
    made.filters["rows"] = lambda grid: Markup(rows_markup(grid))
    return made


def _script_texts(view: View) -> dict[str, str]:
    """Texts that the scripts show, by dotted key."""
    return {f"{section}.{key}": text for section in ("plan", "tables") for key, text in
            view.texts.branch(section).items() if isinstance(text, str)}  # fmt: skip


def _in_script(text: str) -> str:
    """JSON that can stand inside a script element: nothing in it ends the element or a line of script."""
    for sign in "<>&\u2028\u2029":
        text = text.replace(sign, f"\\u{ord(sign):04x}")
    return text


def _style(view: View) -> str:
    """The style sheets, ours first, with what stands at the foot of every printed page."""
    first = FOLDER / "style.css"
    sheets = [first, *sorted(path for path in FOLDER.glob("*.css") if path != first)]
    style = "\n".join(path.read_text("utf-8") for path in sheets)
    digest = view.texts("page.inputs", digest=inputs_hash(view.record)[:HASH_SHOWN])
    for mark, text in (("TITLE", plain(view.title(), TITLE_MOST)), ("HASH", digest)):
        style = style.replace(f'"@{mark}@"', css_string(text))
    return style


def css_string(text: str) -> str:
    """The text as a string of CSS: every sign but letters, digits and blanks is written by its number."""
    return '"' + re.sub(r"[^A-Za-z0-9 ]", lambda sign: f"\\{ord(sign[0]):06x}", text) + '"'


def page_bytes(record: dict[str, Any]) -> bytes:
    """The page as it is written; a sign that no text may hold (half of a surrogate pair) becomes a question mark."""
    return record_page(record).encode("utf-8", "replace")
