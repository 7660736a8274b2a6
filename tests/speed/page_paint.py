"""First paint of the live plan and one step of panning and enlarging it, in a browser without a window.

    python -m tests.speed.page_paint [SIDE ...]

The page is the plan, the pictures and the three tables of a braced grid of SIDE² stations (tests.record.live_page), on
one tab of 1280 x 900. First paint is the browser's own "first-contentful-paint" from the start of loading the file;
"ready" is the end of the page's scripts (load event). A step is the time from a key to the second frame after it:
at least two frames of the screen, 33 ms, however little there is to draw. Medians of 21 steps.
"""

from __future__ import annotations

import shutil
import statistics
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

from adjust.record.live_plan import plan_svg
from tests.record.live_page import page
from tests.record.samples import grid_record

SIDES = (10, 32, 71)
STEPS = """async ([keys, times]) => {
  const plan = document.getElementById("plan");
  const frame = () => new Promise((done) => requestAnimationFrame(done));
  const found = [];
  for (let i = 0; i < times; i++) {
    await new Promise((done) => setTimeout(done, 30));
    await frame();
    const begin = performance.now();
    plan.dispatchEvent(new KeyboardEvent("keydown", { key: keys[i % keys.length], bubbles: true }));
    await frame();
    await frame();
    found.push(performance.now() - begin);
  }
  return found;
}"""


def measure(browser: Any, place: Path) -> tuple[float, float, float, float]:
    """First paint, ready, a step of panning and of enlarging (ms)."""
    tab = browser.new_page(viewport={"width": 1280, "height": 900})
    tab.goto(place.as_uri())
    tab.wait_for_timeout(1500)
    paint = tab.evaluate("performance.getEntriesByName('first-contentful-paint')[0]?.startTime ?? NaN")
    ready = tab.evaluate("performance.getEntriesByType('navigation')[0].loadEventEnd")
    tab.evaluate(STEPS, [["+", "+"], 2])
    pan = statistics.median(tab.evaluate(STEPS, [["ArrowLeft", "ArrowRight"], 21]))
    zoom = statistics.median(tab.evaluate(STEPS, [["+", "-"], 21]))
    tab.close()
    return paint, ready, pan, zoom


def main() -> None:
    """Print one line a size."""
    from playwright.sync_api import sync_playwright

    sides = [int(one) for one in sys.argv[1:]] or list(SIDES)
    with sync_playwright() as play, tempfile.TemporaryDirectory() as folder:
        browser = play.chromium.launch(executable_path=shutil.which("chromium"), args=["--no-sandbox"])
        for side in sides:
            record, place = grid_record(side), Path(folder) / f"{side}.html"
            begin = time.perf_counter()
            size = len(plan_svg(record, {}).encode())
            made = time.perf_counter() - begin
            place.write_text(page(record), encoding="utf-8")
            paint, ready, pan, zoom = measure(browser, place)
            print(
                f"{side * side} stations, {len(record['observations'])} lines: plan {size / 1e6:.2f} MB "
                f"in {made:.2f} s, "
                f"page {place.stat().st_size / 1e6:.1f} MB; first paint {paint:.0f} ms, ready {ready:.0f} ms, "
                f"pan {pan:.0f} ms, enlarge {zoom:.0f} ms",
                flush=True,
            )
        browser.close()


if __name__ == "__main__":
    main()
