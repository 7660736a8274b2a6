"""The live plan and the tables used in a browser: pointer, wheel, keys, layers, sorting and filtering.

Needs playwright and a Chromium; where one is missing the tests are skipped and say so.
"""

from __future__ import annotations

import re
import shutil
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from tests.helpers import close
from tests.record.live_page import page
from tests.record.samples import grid_record, plane_record

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
sync_api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="no Chromium is installed")


def sample() -> dict[str, Any]:
    record = plane_record()
    ends = {frozenset(filter(None, (o["at"] or o["from"], o["to"]))) for o in record["observations"] if o["to"]}
    record["lines"] = [
        {"from": a, "to": b, "distance": 100.0 + i, "ellipse_confidence": None}
        for i, (a, b) in enumerate(sorted(sorted(pair) for pair in ends))
    ]
    return record


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    with sync_api.sync_playwright() as play:
        made = play.chromium.launch(executable_path=CHROMIUM, args=["--no-sandbox"])
        yield made
        made.close()


@pytest.fixture(scope="module")
def written(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("page") / "page.html"
    place.write_text(page(sample()), encoding="utf-8")
    return place


@pytest.fixture(params=[1280, 360])
def opened(browser: Any, written: Path, request: pytest.FixtureRequest) -> Iterator[Any]:
    """The page at two widths; no request but the page itself, no error and no message of the console."""
    tab = browser.new_page(viewport={"width": request.param, "height": 800})
    asked: list[str] = []
    wrong: list[str] = []
    tab.on("request", lambda one: asked.append(one.url))
    tab.on("pageerror", lambda one: wrong.append(str(one)))
    tab.on("console", lambda one: wrong.append(one.text))
    tab.goto(written.as_uri())
    tab.wait_for_timeout(250)
    yield tab
    tab.close()
    assert asked == [written.as_uri()]
    assert wrong == []


def at_rest(tab: Any) -> None:
    tab.wait_for_timeout(260)


def view(tab: Any) -> tuple[float, float, float]:
    """x, y and enlargement of the ground."""
    tab.evaluate("new Promise(done => requestAnimationFrame(() => requestAnimationFrame(done)))")
    text = tab.evaluate("document.getElementById('plan-ground').style.transform")
    text = text.replace("translate(0px)", "translate(0px, 0px)") or "translate(0px, 0px) scale(1)"
    x, y, s = (float(v) for v in re.findall(r"-?[\d.]+", text))
    return x, y, s


def middle(tab: Any) -> tuple[float, float]:
    tab.locator("#plan").scroll_into_view_if_needed()
    box = tab.locator("#plan").bounding_box()
    return box["x"] + box["width"] / 2, box["y"] + box["height"] / 2


def test_the_wheel_enlarges_about_the_pointer_and_a_drag_moves(opened: Any) -> None:
    x, y = middle(opened)
    before = opened.locator("[data-station='2'] use").bounding_box()
    assert view(opened)[2] == 1
    opened.mouse.move(before["x"] + before["width"] / 2, before["y"] + before["height"] / 2)
    opened.mouse.wheel(0, -200)
    assert view(opened)[2] > 1.3
    at_rest(opened)
    after = opened.locator("[data-station='2'] use").bounding_box()
    close(
        [after["x"] + after["width"] / 2, after["y"] + after["height"] / 2],
        [before["x"] + before["width"] / 2, before["y"] + before["height"] / 2],
        atol=1.0,
    )
    close(after["width"], before["width"], atol=1.0)  # symbols keep their size
    opened.mouse.move(x, y)
    opened.mouse.down()
    opened.mouse.move(x + 40, y + 25, steps=4)
    opened.mouse.up()
    at_rest(opened)
    moved = opened.locator("[data-station='2'] use").bounding_box()
    close([moved["x"] - after["x"], moved["y"] - after["y"]], [40, 25], atol=1.5)
    assert opened.locator(".chosen").count() == 0, "a drag chooses nothing"


def test_a_page_scrolls_on_over_a_plan_that_shows_all(opened: Any) -> None:
    x, y = middle(opened)
    opened.mouse.move(x, y)
    start = opened.evaluate("scrollY")
    opened.mouse.wheel(0, 200)
    at_rest(opened)
    assert opened.evaluate("scrollY") > start
    assert view(opened)[2] == 1


def test_keys_move_enlarge_and_show_all(opened: Any) -> None:
    opened.locator("#plan").focus()
    opened.keyboard.press("+")
    opened.keyboard.press("+")
    first = view(opened)
    assert first[2] == pytest.approx(1.96, abs=0.01)
    for key, axis, sign in (("ArrowRight", 0, -1), ("ArrowLeft", 0, 1), ("ArrowDown", 1, -1), ("ArrowUp", 1, 1)):
        before = view(opened)
        opened.keyboard.press(key)
        assert sign * (view(opened)[axis] - before[axis]) > 20, key
    opened.keyboard.press("-")
    assert view(opened)[2] == pytest.approx(1.4, abs=0.01)
    opened.keyboard.press("0")
    assert view(opened) == (0, 0, 1)


def test_stations_by_keys_are_said_and_lead_to_their_row_and_back(opened: Any) -> None:
    opened.locator("#plan").focus()
    opened.keyboard.press("n")
    opened.keyboard.press("n")
    first = opened.locator("#plan .chosen").get_attribute("data-station")
    said = opened.locator("#plan-said").inner_text()
    name = sample()["stations"][int(first)]["station"]
    assert said.startswith(f"{name}, ")
    assert said.endswith("2 of 8")
    assert opened.locator("#plan-said").get_attribute("aria-live") == "polite"
    opened.keyboard.press("p")
    assert opened.locator("#plan-said").inner_text().endswith("1 of 8")
    opened.keyboard.press("n")
    opened.keyboard.press("Enter")
    assert opened.evaluate("document.activeElement.id") == f"s{first}"
    assert "chosen" in (opened.locator(f"#s{first}").get_attribute("class") or "")
    opened.locator(f"#s{first} button.show").focus()
    opened.keyboard.press("Enter")
    assert opened.evaluate("document.activeElement.id") == "plan"
    assert opened.locator("#plan .chosen").get_attribute("data-station") == first
    opened.keyboard.press("l")
    assert opened.locator("#plan-said").inner_text().startswith("Line ")
    assert opened.locator("#lines tr.chosen").count() == 1
    opened.keyboard.press("Escape")
    assert opened.locator(".chosen").count() == 0


def test_rows_lead_to_the_plan_and_a_click_on_the_plan_to_rows(opened: Any) -> None:
    opened.locator("#l3 button.show").click()
    ends = opened.locator("#l3").get_attribute("data-ends")
    wanted = "-".join(sorted(ends.split("-"), key=int))
    assert opened.locator("#plan .line.chosen").get_attribute("data-ends") == wanted
    blamed = sample()["suspects"][0]["observation"]
    row = next(i for i, o in enumerate(sample()["observations"]) if o["id"] == blamed)
    opened.locator(f"#o{row} button.show").click()
    assert opened.locator("#plan .suspect.chosen").get_attribute("data-observation") == str(row)
    opened.locator("#plan [data-station='4'] use").click(force=True)
    assert "chosen" in (opened.locator("#s4").get_attribute("class") or "")
    opened.locator("#plan [data-station='4'] use").click(force=True)
    assert opened.evaluate("document.activeElement.id") == "s4"


def test_a_row_shows_its_station_even_where_its_layer_is_off(opened: Any) -> None:
    held = next(i for i, o in enumerate(sample()["stations"]) if o["role"] == "held")
    opened.locator("[data-toggles='control']").uncheck()
    assert not opened.locator(f"#plan [data-station='{held}']").is_visible()
    opened.locator(f"#s{held} button.show").click()
    assert opened.locator(f"#plan [data-station='{held}']").is_visible()
    assert opened.locator("[data-toggles='control']").is_checked()


def test_each_layer_can_be_switched_off_and_on(opened: Any) -> None:
    keys = [one.get_attribute("data-layer") for one in opened.locator("#plan [data-layer]").all()]
    assert len(keys) >= 8
    for key in keys:
        layer = opened.locator(f"#plan [data-layer='{key}']")
        assert layer.is_visible(), key
        opened.locator(f"[data-toggles='{key}']").uncheck()
        assert not layer.is_visible(), key
        opened.locator(f"[data-toggles='{key}']").check()
        assert layer.is_visible(), key


def test_the_slider_scales_ellipses_and_says_by_how_much(opened: Any) -> None:
    ellipse = opened.locator("#plan .ellipse").first
    before, words = ellipse.bounding_box(), opened.locator("#plan-ellipse-words").inner_text()
    slider = opened.locator("#plan-scale-of-ellipses")
    slider.focus()
    for _ in range(6):
        opened.keyboard.press("ArrowRight")
    after = ellipse.bounding_box()
    factor = 10**0.3
    close(after["width"] / before["width"], factor, atol=0.06)
    stated = float(opened.locator("#plan").get_attribute("data-magnification"))
    again = opened.locator("#plan-ellipse-words").inner_text()
    assert again != words
    close(float(re.search(r"drawn ([\d.]+) times", again)[1]), stated * factor, atol=0.01 * stated)  # type: ignore[index]
    bar = opened.locator("#plan-ellipses path").get_attribute("d")
    label = opened.locator("#plan-ellipses text").text_content()
    per = float(opened.locator("#plan-ellipses").get_attribute("data-per-unit"))
    length, end = float(label.split()[0]), float(re.search(r"H([\d.]+)", bar)[1])  # type: ignore[index]
    close(end * per / factor, length, atol=0.01 * length)


def test_names_and_bars_keep_their_size_when_enlarged(opened: Any) -> None:
    name = opened.locator("#plan .label text").first
    before = name.bounding_box()["height"]
    opened.locator("#plan").focus()
    for _ in range(3):
        opened.keyboard.press("+")
    at_rest(opened)
    close(name.bounding_box()["height"], before, atol=1.0)
    metres = float(opened.locator("#plan").get_attribute("data-metres"))
    label = opened.locator("#plan-scale text").text_content()
    end = float(re.search(r"H([\d.]+)", opened.locator("#plan-scale path").get_attribute("d"))[1])  # type: ignore[index]
    close(end * metres / view(opened)[2], float(label.split()[0]), atol=0.5)


def column(tab: Any, table: str, k: int) -> list[str]:
    found: list[str] = tab.evaluate(
        "([id, k]) => [...document.querySelectorAll(`#${id} tbody tr`)].filter(r => !r.hidden)"
        ".map(r => r.cells[k].dataset.value ?? r.cells[k].firstChild?.textContent ?? '')",
        [table, k],
    )
    return found


def test_tables_sort_up_down_and_back(opened: Any) -> None:
    head = opened.locator("#observations th").nth(5)
    initial = column(opened, "observations", 0)
    blamed = [one["observation"] for one in sample()["suspects"]]
    assert set(initial[: len(blamed)]) == set(blamed), "suspects stand first"
    head.locator("button").click()
    assert head.get_attribute("aria-sort") == "ascending"
    up = [float(v) for v in column(opened, "observations", 5)]
    assert up == sorted(up)
    assert up != sorted(up, reverse=True)
    head.locator("button").focus()
    opened.keyboard.press("Enter")
    assert head.get_attribute("aria-sort") == "descending"
    assert [float(v) for v in column(opened, "observations", 5)] == up[::-1]
    opened.keyboard.press("Enter")
    assert head.get_attribute("aria-sort") is None
    assert column(opened, "observations", 0) == initial
    opened.locator("#observations th button").first.click()
    ids = column(opened, "observations", 0)
    assert ids.index("distances.csv:9") < ids.index("distances.csv:10"), "figures in texts sort as figures"


def test_a_filter_keeps_the_rows_that_hold_all_words(opened: Any) -> None:
    field = opened.get_by_label("Filter observations")
    every = len(column(opened, "observations", 0))
    field.fill("distance  P4")
    opened.wait_for_timeout(80)
    kept = column(opened, "observations", 0)
    wanted = [o["id"] for o in sample()["observations"] if o["kind"] == "distance" and "P4" in (o["from"], o["to"])]
    assert sorted(kept) == sorted(wanted)
    assert 0 < len(kept) < every
    assert (
        opened.locator("#observations")
        .locator("xpath=preceding-sibling::div[1]")
        .inner_text()
        .endswith(f"{len(kept)} of {every} rows")
    )
    field.fill("show")
    opened.wait_for_timeout(80)
    assert column(opened, "observations", 0) == [], "the buttons are no text of the rows"
    field.fill("")
    opened.wait_for_timeout(80)
    assert len(column(opened, "observations", 0)) == every


def test_nothing_is_wider_than_the_screen(opened: Any) -> None:
    assert opened.evaluate("document.documentElement.scrollWidth <= innerWidth")


def test_two_fingers_enlarge(browser: Any, written: Path) -> None:
    context = browser.new_context(viewport={"width": 360, "height": 700}, has_touch=True)
    tab = context.new_page()
    tab.goto(written.as_uri())
    tab.wait_for_timeout(200)
    x, y = middle(tab)
    touch = context.new_cdp_session(tab)

    def send(kind: str, apart: float) -> None:
        fingers = [{"x": x - apart, "y": y, "id": 0}, {"x": x + apart, "y": y, "id": 1}]
        touch.send("Input.dispatchTouchEvent", {"type": kind, "touchPoints": fingers if kind != "touchEnd" else []})

    send("touchStart", 30)
    for apart in (40, 50, 60, 75, 90):
        send("touchMove", apart)
    send("touchEnd", 0)
    assert view(tab)[2] == pytest.approx(3, rel=0.25)
    context.close()


def test_without_script_everything_is_there(browser: Any, written: Path) -> None:
    context = browser.new_context(java_script_enabled=False, viewport={"width": 360, "height": 800})
    tab = context.new_page()
    tab.goto(written.as_uri())
    assert not tab.locator("#plan-controls").is_visible()
    assert all(one.is_visible() for one in tab.locator("#plan .station").all())
    assert tab.locator("#plan .label").count() == len(sample()["stations"])
    assert tab.locator("#observations tbody tr").count() == len(sample()["observations"])
    assert tab.locator("#plan-legend li").count() > 5
    context.close()


def test_more_names_come_when_a_large_plan_is_enlarged(browser: Any, tmp_path: Path) -> None:
    place = tmp_path / "grid.html"
    place.write_text(page(grid_record(20)), encoding="utf-8")
    tab = browser.new_page(viewport={"width": 1280, "height": 900})
    tab.goto(place.as_uri())
    tab.wait_for_timeout(300)
    few = named_in_sight(tab)
    tab.locator("#plan").focus()
    for _ in range(5):
        tab.keyboard.press("+")
    tab.wait_for_timeout(400)
    assert few < 0.8 < 0.85 < named_in_sight(tab)
    over = tab.evaluate(
        "(() => { const b = [...document.querySelectorAll('#plan .label text')].map(t => t.getBoundingClientRect());"
        "const inset = 2; return b.filter((a, i) => b.some((c, j) => j < i && a.left + inset < c.right - inset && "
        "a.right - inset > c.left + inset && a.top + inset < c.bottom - inset && "
        "a.bottom - inset > c.top + inset)).length })()"
    )
    assert over == 0, "names over each other"
    tab.close()


def named_in_sight(tab: Any) -> float:
    """Share of the stations in the frame that have their name beside them."""
    found: float = tab.evaluate(
        "(() => { const f = document.getElementById('plan').getBoundingClientRect();"
        "const inside = (o) => { const b = o.getBoundingClientRect(); return b.left > f.left && b.right < f.right "
        "&& b.top > f.top && b.bottom < f.bottom };"
        "const count = (s) => [...document.querySelectorAll(s)].filter(inside).length;"
        "return count('#plan .label') / count('#plan .station') })()"
    )
    return found
