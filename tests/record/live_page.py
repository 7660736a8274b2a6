"""A small page around the live plan, the pictures and plain tables of a record: for tests in a browser, and to look at.

python -m tests.record.live_page RECORD.json PAGE.html
"""

from __future__ import annotations

import json
import sys
from html import escape
from importlib.resources import files
from pathlib import Path
from typing import Any

from adjust.record.live_plan import plan_svg
from adjust.record.live_texts import catalogue
from adjust.record.pictures import pictures

POLICY = "default-src 'none'; style-src 'unsafe-inline'; script-src 'unsafe-inline'; img-src data:"
BODY = "body{font:16px/1.45 system-ui,sans-serif;margin:1rem auto;max-width:1100px;padding:0 .6rem}"
TABLES = (
    "table{content-visibility:auto;contain-intrinsic-size:auto 600px;border-collapse:collapse;display:block;"
    "overflow-x:auto}td,th{padding:.15rem .5rem;text-align:left}"
)


def part(name: str) -> str:
    """A file of the page."""
    return (files("adjust.record") / "page" / name).read_text(encoding="utf-8")


def inside(value: Any) -> str:
    """JSON that may stand in a script element."""
    text = json.dumps(value, ensure_ascii=False)
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")


def cells(values: list[Any]) -> str:
    made = []
    for value in values:
        raw = f' data-value="{value!r}"' if isinstance(value, float) else ""
        shown = "" if value is None else f"{value:.4f}" if isinstance(value, float) else escape(str(value))
        made.append(f"<td{raw}>{shown}</td>")
    return "".join(made)


def table(key: str, heads: list[tuple[str, str]], rows: list[str]) -> str:
    head = "".join(f'<th scope="col" data-sort="{sort}">{text}</th>' for text, sort in heads)
    return (
        f'<h2>{key}</h2><table id="{key}" class="sortable" data-filter-label="Filter {key}">'
        f"<thead><tr>{head}</tr></thead><tbody>{''.join(rows)}</tbody></table>"
    )


def tables(record: dict[str, Any]) -> str:
    """Stations, lines and observations with the attributes that the scripts rely on."""
    place = {one["station"]: i for i, one in enumerate(record["stations"])}

    def ends(a: str | None, b: str | None) -> str:
        return f' data-ends="{place[a]}-{place[b]}"' if a in place and b in place else ""

    stations = [
        f'<tr id="s{i}" data-station="{i}">{cells([o["station"], o["role"], o["east"], o["north"], o["height"]])}</tr>'
        for i, o in enumerate(record["stations"])
    ]
    lines = [
        f'<tr id="l{i}" data-line="{i}"{ends(o["from"], o["to"])}>{cells([o["from"], o["to"], o["distance"]])}</tr>'
        for i, o in enumerate(record["lines"])
    ]
    blamed = {one["observation"] for one in record["suspects"]}
    readings = []
    for i, o in enumerate(record["observations"]):
        start, end = o["at"] or o["from"], o["to"] or o["first"]
        first = " data-first" if o["id"] in blamed else ""
        readings.append(
            f'<tr id="o{i}" data-observation="{i}"{ends(start, end)}{first}>'
            f"{cells([o['id'], o['kind'], start, end, o['residual'], o['statistic']])}</tr>"
        )
    return (
        table(
            "stations",
            [("station", "text"), ("role", "text"), ("east", "number"), ("north", "number"), ("height", "number")],
            stations,
        )
        + table("lines", [("from", "text"), ("to", "text"), ("distance", "number")], lines)
        + table(
            "observations",
            [
                ("id", "text"),
                ("kind", "text"),
                ("at or from", "text"),
                ("to or first", "text"),
                ("residual", "number"),
                ("statistic", "number"),
            ],
            readings,
        )
    )


def page(record: dict[str, Any]) -> str:
    """The whole page: nothing in it is fetched."""
    drawn = "".join(
        f'<figure class="picture" id="picture-{one.key}"><figcaption>{escape(one.title)}</figcaption>{one.svg}'
        f"<p>{escape(one.words)}</p></figure>"
        for one in pictures(record)
    )
    return (
        f'<!doctype html><html lang="en"><head><meta charset="utf-8">'
        f'<meta name="viewport" content="width=device-width">'
        f'<meta http-equiv="Content-Security-Policy" content="{POLICY}"><title>Try</title>'
        f"<style>{BODY}{TABLES}{part('plan.css')}{part('pictures.css')}</style></head><body><main>"
        f"<h1>{escape(record['job']['title'])}</h1>"
        f'<figure id="plan-figure">{plan_svg(record, {})}<div id="plan-controls" hidden></div></figure>{drawn}'
        f"{tables(record)}</main>"
        f'<script type="application/json" id="page-texts">{inside(catalogue())}</script>'
        f"<script>{part('page_texts.js')}\n{part('plan.js')}\n{part('tables.js')}</script></body></html>"
    )


if __name__ == "__main__":
    made = page(json.loads(Path(sys.argv[1]).read_text(encoding="utf-8")))
    Path(sys.argv[2]).write_text(made, encoding="utf-8")
