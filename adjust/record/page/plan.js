/* The plan moved, enlarged, and tied to the tables. Everything is there without this script; it only adds. */
(() => {
  "use strict";
  const plan = document.getElementById("plan");
  const ground = document.getElementById("plan-ground");
  if (!plan || !ground) return;

  const SVG = "http://www.w3.org/2000/svg";
  const box = plan.viewBox.baseVal;
  const MOST = 60; // enlargement at which a pixel is less than anything measured
  const NAME_PX = 12.5; // height of names on the screen
  const MANY = 1500; // symbols above which sizes follow only when a movement ends
  const AT_ONCE = 1000; // rows that get their buttons when the page opens
  const texts = pageTexts();
  const view = { s: 1, x: 0, y: 0 };
  const stations = [...plan.querySelectorAll(".station")];
  const type = plan.querySelector(".names.smaller") ? 15 : 18;
  let asked = false; // a frame is on its way
  let resting = 0; // timer of the end of a movement
  let times = 1; // factor of the slider on the ellipses
  let chosen = null;
  let chosenRow = null;

  function make(tag, attributes = {}, text = "") {
    const made = document.createElement(tag);
    for (const [key, value] of Object.entries(attributes)) made.setAttribute(key, value);
    if (text) made.textContent = text; // names are text, never markup
    return made;
  }

  /* ---- moving and enlarging: one transform a frame ---- */

  /* Where the drawing lies on the screen: a = pixels to a unit, e and f its corner. The frame may be wider than it. */
  function onScreen() {
    return plan.getScreenCTM() ?? { a: 1, e: 0, f: 0 };
  }

  function pixels() {
    return onScreen().a || 1;
  }

  function ask() {
    if (!asked) {
      asked = true;
      requestAnimationFrame(draw);
    }
  }

  function draw() {
    asked = false;
    // as a style: an attribute would have every line laid out again
    ground.style.transform = `translate(${view.x.toFixed(3)}px, ${view.y.toFixed(3)}px) scale(${view.s.toFixed(5)})`;
    if (stations.length <= MANY) sizes();
    window.clearTimeout(resting);
    resting = window.setTimeout(rest, 160);
  }

  let sized = 0;
  function sizes() {
    const k = NAME_PX / (type * pixels() * view.s);
    if (Math.abs(k / sized - 1) < 0.001) return; // a mere movement: no style changes
    sized = k;
    plan.style.setProperty("--k", k.toPrecision(5));
    plan.style.setProperty("--f", (NAME_PX / (17 * pixels())).toPrecision(5));
  }

  /* What follows once a movement has ended: sizes of large networks, scale bars, further names. */
  function rest() {
    sizes();
    scaleBars();
    names();
    plan.classList.toggle("zoomed", view.s > 1.001);
  }

  function keepIn() {
    view.s = Math.min(Math.max(view.s, 1), MOST);
    // the ground never leaves the frame altogether: a quarter of it always stays covered
    const spare = 0.75;
    const least = (size) => size * (1 - view.s) - size * spare * (view.s > 1 ? 1 : 0);
    const most = (size) => size * spare * (view.s > 1 ? 1 : 0);
    view.x = Math.min(Math.max(view.x, least(box.width)), most(box.width));
    view.y = Math.min(Math.max(view.y, least(box.height)), most(box.height));
  }

  function moveBy(dx, dy) {
    view.x += dx;
    view.y += dy;
    keepIn();
    ask();
  }

  function zoomAt(factor, at = [box.width / 2, box.height / 2]) {
    const before = view.s;
    view.s = Math.min(Math.max(before * factor, 1), MOST);
    const real = view.s / before;
    view.x = at[0] - (at[0] - view.x) * real;
    view.y = at[1] - (at[1] - view.y) * real;
    if (view.s < 1.001) Object.assign(view, { s: 1, x: 0, y: 0 });
    keepIn();
    ask();
  }

  function showAll() {
    Object.assign(view, { s: 1, x: 0, y: 0 });
    ask();
  }

  function unitsAt(event) {
    const { a, e, f } = onScreen();
    return [(event.clientX - e) / a, (event.clientY - f) / a];
  }

  /* ---- pointers: drag with one, pinch with two ---- */

  const held = new Map();
  let dragged = false;

  function down(event) {
    if (event.button > 0) return;
    if (held.size === 0) dragged = false;
    held.set(event.pointerId, unitsAt(event));
  }

  function moved(event) {
    const before = held.get(event.pointerId);
    if (!before) return;
    const now = unitsAt(event);
    const others = [...held].filter(([id]) => id !== event.pointerId);
    if (!dragged && Math.hypot(now[0] - before[0], now[1] - before[1]) * pixels() < 4) return; // a click may tremble
    if (!dragged) {
      dragged = true;
      plan.setPointerCapture(event.pointerId);
      plan.classList.add("moving");
    }
    held.set(event.pointerId, now);
    if (others.length === 1) pinch(before, now, others[0][1]);
    else if (others.length === 0) moveBy(now[0] - before[0], now[1] - before[1]);
  }

  function pinch(before, now, other) {
    const apart = (one) => Math.hypot(one[0] - other[0], one[1] - other[1]) || 1;
    zoomAt(apart(now) / apart(before), [(now[0] + other[0]) / 2, (now[1] + other[1]) / 2]);
    moveBy((now[0] - before[0]) / 2, (now[1] - before[1]) / 2);
  }

  function up(event) {
    held.delete(event.pointerId);
    if (held.size === 0) plan.classList.remove("moving");
  }

  /* A page that is being scrolled over the plan goes on scrolling, and so does one that would only zoom out further. */
  let scrolled = 0;
  function wheelElsewhere(event) {
    if (!plan.contains(event.target)) scrolled = event.timeStamp;
  }

  function wheel(event) {
    const passing = event.timeStamp - scrolled < 250 && !event.ctrlKey;
    if (passing || (view.s <= 1 && event.deltaY > 0)) {
      if (passing) scrolled = event.timeStamp;
      return;
    }
    event.preventDefault();
    const step = event.deltaMode === 1 ? event.deltaY * 20 : event.deltaY;
    zoomAt(Math.exp(-Math.max(-240, Math.min(240, step)) * 0.0025), unitsAt(event));
  }

  /* ---- keys ---- */

  const STEP = 0.12;
  const KEYS = {
    ArrowLeft: () => moveBy(STEP * box.width, 0),
    ArrowRight: () => moveBy(-STEP * box.width, 0),
    ArrowUp: () => moveBy(0, STEP * box.height),
    ArrowDown: () => moveBy(0, -STEP * box.height),
    "+": () => zoomAt(1.4),
    "=": () => zoomAt(1.4), // the same key without shift
    "-": () => zoomAt(1 / 1.4),
    0: showAll,
    n: () => step(1),
    p: () => step(-1),
    l: nextLine,
    Enter: toRow,
    Escape: letGo,
  };

  function pressed(event) {
    const act = KEYS[event.key];
    if (!act || event.ctrlKey || event.altKey || event.metaKey) return;
    event.preventDefault();
    act();
  }

  function step(by) {
    const now = chosen && chosen.classList.contains("station") ? stations.indexOf(chosen) : by > 0 ? -1 : 0;
    if (stations.length) choose(stations[(now + by + stations.length) % stations.length], true);
  }

  function nextLine() {
    const station = chosen && (chosen.dataset.station ?? chosen.dataset.walked);
    if (station == null) return step(1);
    const lines = [...plan.querySelectorAll(".line")].filter((one) => one.dataset.ends.split("-").includes(station));
    if (!lines.length) return;
    const next = lines[(lines.indexOf(chosen) + 1) % lines.length];
    next.dataset.walked = station; // the next l goes on around the same station
    choose(next, true);
  }

  /* ---- choosing, on the plan and in the tables ---- */

  function say(text) {
    said.textContent = text;
  }

  function titleOf(element) {
    const title = element.querySelector("title");
    return title ? title.textContent : "";
  }

  function nameOf(station) {
    const found = byStation().get(String(station));
    return found ? titleOf(found) : "";
  }

  let stationMap = null;
  function byStation() {
    stationMap ??= new Map(stations.map((one) => [one.dataset.station, one]));
    return stationMap;
  }

  let markMap = null;
  function byObservation() {
    markMap ??= new Map([...plan.querySelectorAll("[data-observation]")].map((one) => [one.dataset.observation, one]));
    return markMap;
  }

  let lineMap = null;
  function byEnds() {
    if (!lineMap) {
      lineMap = new Map();
      for (const one of plan.querySelectorAll("[data-layer='left-out'] [data-ends], .line")) lineMap.set(one.dataset.ends, one);
    }
    return lineMap;
  }

  function sortedEnds(ends) {
    return (ends ?? "").split("-").map(Number).sort((a, b) => a - b).join("-");
  }

  function describe(element) {
    const { station, ends, observation, closure } = element.dataset;
    if (station != null) {
      const role = ["held", "weighted", "check", "unchecked", "new"].find((one) => element.classList.contains(one));
      const values = { name: titleOf(element), role: texts(`plan.${role}`), number: stations.indexOf(element) + 1, all: stations.length };
      return texts("plan.station_chosen", values);
    }
    if (observation != null || closure != null) return titleOf(element);
    const [one, other] = ends.split("-").map(nameOf);
    return texts("plan.line_chosen", { one, other });
  }

  function choose(element, look = false) {
    mark(element);
    say(describe(element));
    if (look) bringIn(element);
  }

  function mark(element) {
    letGo();
    chosen = element;
    element.classList.add("chosen");
    if (element.dataset.station != null) {
      const ring = document.createElementNS(SVG, "circle");
      ring.setAttribute("class", "ring");
      ring.setAttribute("r", "17");
      element.append(ring);
    }
    chosenRow = rowOf(element);
    if (chosenRow) chosenRow.classList.add("chosen");
  }

  function letGo() {
    if (chosen) {
      chosen.classList.remove("chosen");
      chosen.querySelector(".ring")?.remove();
    }
    chosenRow?.classList.remove("chosen");
    chosen = chosenRow = null;
    say(texts("plan.nothing_chosen"));
  }

  /* Where an element lies in units of the drawing, whatever its shape. */
  function placeOf(element) {
    const { a, e, f } = onScreen();
    const own = element.getBoundingClientRect();
    return [(own.left + own.width / 2 - e) / a, (own.top + own.height / 2 - f) / a];
  }

  /* Bring what was chosen into the frame, moving only when it is near the edge or outside. */
  function bringIn(element) {
    const [x, y] = placeOf(element);
    const near = (value, size) => value < 0.08 * size || value > 0.92 * size;
    if (view.s > 1 && (near(x, box.width) || near(y, box.height))) moveBy(box.width / 2 - x, box.height / 2 - y);
  }

  function rowOf(element) {
    const { station, ends, observation, closure } = element.dataset;
    if (station != null) return document.getElementById(`s${station}`);
    if (observation != null) return document.getElementById(`o${observation}`);
    if (closure != null) return document.getElementById(`c${closure}`);
    return rowsByEnds().get(ends) ?? null;
  }

  let rowMap = null;
  function rowsByEnds() {
    if (!rowMap) {
      rowMap = new Map();
      for (const row of document.querySelectorAll("#observations tr[data-ends], #lines tr[data-ends]")) {
        const key = sortedEnds(row.dataset.ends);
        // a row of the lines says more of a line than that of one of its readings
        if (!rowMap.has(key) || row.dataset.line != null) rowMap.set(key, row);
      }
    }
    return rowMap;
  }

  function toRow() {
    if (!chosen) return;
    if (!chosenRow) return say(texts("plan.no_row"));
    for (let fold = chosenRow.closest("details"); fold; fold = fold.parentElement.closest("details")) fold.open = true;
    chosenRow.hidden = false; // a filter may have put it away
    chosenRow.tabIndex = -1;
    chosenRow.focus({ preventScroll: true });
    chosenRow.scrollIntoView({ block: "center" });
  }

  function clicked(event) {
    if (dragged) return;
    const element = event.target.closest("[data-station], [data-observation], [data-closure], [data-ends]");
    if (!element || !plan.contains(element)) return letGo();
    const again = element === chosen;
    choose(element);
    if (again) toRow(); // the first click says what it is, the second goes to its row
  }

  /* ---- rows to the plan ---- */

  function elementOf(row) {
    if (row.dataset.station != null) return byStation().get(row.dataset.station) ?? null;
    return byObservation().get(row.dataset.observation) ?? byEnds().get(sortedEnds(row.dataset.ends)) ?? null;
  }

  const dressed = new WeakSet(); // rows that have their button, or nothing to show
  function addButton(row) {
    if (dressed.has(row)) return;
    dressed.add(row);
    const element = elementOf(row);
    const cell = row.cells[0];
    if (!element || !cell) return;
    const about = row.dataset.station != null ? titleOf(element) : describe(element);
    const button = make("button", { type: "button", class: "show", "aria-label": texts("plan.show_of", { name: about }) }, texts("plan.show"));
    cell.append(button);
  }

  /* Thousands of buttons at once would delay the page, and watching thousands of rows every frame: with many rows those
     get their buttons that come into the window, and the rows around them, whichever way the table is sorted. */
  function buttons() {
    const rows = document.querySelectorAll("tr[data-station], tr[data-ends]");
    if (rows.length <= AT_ONCE) return rows.forEach(addButton);
    let waiting = 0;
    const soon = () => {
      window.clearTimeout(waiting);
      waiting = window.setTimeout(inWindow, 60);
    };
    for (const kind of ["scroll", "resize"]) window.addEventListener(kind, soon, { passive: true });
    for (const kind of ["toggle", "input", "click"]) document.addEventListener(kind, soon, true);
    document.addEventListener("focusin", (event) => {
      const table = event.target.closest?.("table") ?? event.target.closest?.(".filter")?.nextElementSibling?.closest("table");
      if (table?.tBodies.length && event.target.closest("thead, .filter")) around(table.tBodies[0].rows[0]);
    });
    soon();
  }

  function inWindow() {
    for (let y = 10; y < window.innerHeight; y += 120) {
      for (const x of [30, window.innerWidth / 2]) around(document.elementFromPoint(x, y)?.closest("tbody tr"));
    }
  }

  function around(row) {
    for (const side of ["previousElementSibling", "nextElementSibling"]) {
      for (let one = row, left = 30; one && left > 0; one = one[side]) {
        addButton(one);
        left -= !one.hidden;
      }
    }
  }

  function shown(event) {
    const button = event.target.closest("button.show");
    const row = button?.closest("tr");
    const element = row && elementOf(row);
    if (!element) return;
    const away = element.closest("[data-layer].off");
    if (away) toggle(away.dataset.layer, true); // what is asked for is shown
    mark(element);
    chosenRow?.classList.remove("chosen");
    chosenRow = row; // Enter goes back to the row one came from
    row.classList.add("chosen");
    say(describe(element));
    bringIn(element);
    plan.focus({ preventScroll: true });
    plan.scrollIntoView({ block: "nearest" });
  }

  /* ---- scale bars and further names once the plan rests ---- */

  function roundLength(most) {
    const power = 10 ** Math.floor(Math.log10(most));
    return [5, 2, 1].find((one) => one * power <= most * 1.000001) * power;
  }

  function scaleBars() {
    for (const bar of plan.querySelectorAll(".furniture .bar")) {
      const enlarged = bar.id === "plan-ellipses" ? view.s * times : view.s;
      const per = Number(bar.dataset.perUnit) / enlarged;
      const length = roundLength(0.24 * Number(bar.dataset.share) * box.width * per);
      const end = (length / per).toFixed(2);
      bar.querySelector("path").setAttribute("d", `M0-5V5M0 0H${end}M${end}-5V5`);
      bar.querySelector("g").setAttribute("transform", `translate(${end} 0)`);
      const figure = String(Number(length.toPrecision(3))).replace(".", plan.dataset.decimal || ".");
      bar.querySelector("text").textContent = `${figure} ${bar.dataset.of}`;
    }
  }

  /* Names keep the place that the drawing gave them where at this size it is free; the others, and those that found none
     at first, are placed anew around their station as enlarging makes room: off each other, off the symbols in sight. */
  const SIDES = [[1, 0.35], [-1, 0.35], [1, -0.5], [1, 1.2], [-1, -0.5], [-1, 1.2], [0, -0.8], [0, 1.7]];
  const MOST_NAMED = 400; // stations in sight up to which all are tried
  const layer = plan.querySelector("[data-layer='names']");
  const firstNames = new Map([...plan.querySelectorAll(".label")].map((one) => [one.dataset.of, one]));
  let added = null;

  function names() {
    added?.remove();
    if (!layer) return;
    const sight = inSight();
    const all = sight.length <= MOST_NAMED;
    const taken = all ? sight.map((one) => [one.x - 5, one.y - 5, one.x + 5, one.y + 5]) : [];
    taken.push(...boxes(".furniture > g"));
    const homeless = new Set(covered(taken));
    added = document.createElementNS(SVG, "g");
    for (const one of all ? sight : []) {
      if (!firstNames.has(one.station) || homeless.has(one.station)) addName(one, taken);
    }
    layer.append(added);
  }

  /* First names that at this size cover something or leave the frame: they are put away, and their stations told. */
  function covered(taken) {
    for (const one of firstNames.values()) one.classList.remove("covered");
    const own = boxes(".label > text"); // all are measured before any is changed: one layout
    const found = [];
    [...firstNames].forEach(([station, label], i) => {
      if (fits(own[i], taken)) taken.push(own[i]);
      else found.push(station);
    });
    for (const station of found) firstNames.get(station).classList.add("covered");
    return found;
  }

  function fits(box_, taken) {
    const [left, top, right, bottom] = box_;
    const per = pixels();
    if (left < 1 || top < 1 || right > box.width * per - 1 || bottom > box.height * per - 1) return false;
    return !taken.some((t) => left < t[2] && right > t[0] && top < t[3] && bottom > t[1]);
  }

  /* Stations inside the frame with their place in pixels from its corner. */
  function inSight() {
    const per = pixels();
    const found = [];
    for (const one of stations) {
      const at = one.transform.baseVal.getItem(0).matrix;
      const [x, y] = [(view.x + view.s * at.e) * per, (view.y + view.s * at.f) * per];
      if (x > 0 && y > 0 && x < box.width * per && y < box.height * per) {
        found.push({ x, y, e: at.e, f: at.f, station: one.dataset.station, name: titleOf(one) });
      }
    }
    return found;
  }

  /* Boxes on the screen, in pixels from the drawing's corner, a little narrower than their type. */
  function boxes(which) {
    const { e, f } = onScreen();
    return [...plan.querySelectorAll(which)].map((one) => {
      const own = one.getBoundingClientRect();
      return [own.left - e + 1, own.top - f + 2, own.right - e - 1, own.bottom - f - 2];
    });
  }

  function addName(one, taken) {
    const name = one.name.length > 18 ? `${one.name.slice(0, 17)}…` : one.name;
    const width = name.length * NAME_PX * 0.62;
    for (const [side, below] of SIDES) {
      const left = one.x + (side > 0 ? 8 : side < 0 ? -8 - width : -width / 2);
      const base = one.y + below * NAME_PX;
      const own = [left, base - 0.8 * NAME_PX, left + width, base + 2];
      if (fits(own, taken)) {
        taken.push(own);
        added.append(newName(one, name, side, below));
        return;
      }
    }
  }

  function newName(one, name, side, below) {
    const group = document.createElementNS(SVG, "g");
    group.setAttribute("class", "label");
    group.setAttribute("transform", `translate(${one.e} ${one.f})`);
    const text = document.createElementNS(SVG, "text");
    const unit = type / NAME_PX; // a pixel in units of the names
    text.setAttribute("x", (8 * side * unit).toFixed(1));
    text.setAttribute("y", (below * NAME_PX * unit).toFixed(1));
    if (side <= 0) text.setAttribute("text-anchor", side < 0 ? "end" : "middle");
    text.textContent = name;
    group.append(text);
    return group;
  }

  /* ---- controls ---- */

  const said = make("p", { id: "plan-said", "aria-live": "polite" });

  function controls() {
    let place = document.getElementById("plan-controls");
    if (!place) {
      place = make("div", { id: "plan-controls" });
      (document.getElementById("plan-figure") ?? plan.parentElement).append(place);
    }
    place.append(said, buttonsOfMove(), ...slider(), layers(), make("p", { class: "keys" }, texts("plan.keys")));
    place.hidden = false;
  }

  function buttonsOfMove() {
    const row = make("div", { class: "move", role: "group", "aria-label": texts("plan.move") });
    const add = (sign, key, act) => {
      const button = make("button", { type: "button", "aria-label": texts(key) }, sign);
      button.addEventListener("click", act);
      row.append(button);
    };
    add("+", "plan.zoom_in", () => zoomAt(1.4));
    add("−", "plan.zoom_out", () => zoomAt(1 / 1.4));
    const all = make("button", { type: "button" }, texts("plan.all"));
    all.addEventListener("click", showAll);
    row.append(all);
    return row;
  }

  function slider() {
    if (!plan.dataset.magnification && !plan.dataset.relative) return [];
    const bars = plan.querySelector(".ellipse.bar") !== null;
    const input = make("input", { type: "range", id: "plan-scale-of-ellipses", min: "-1.5", max: "1.5", step: "0.05", value: "0" });
    const output = make("output", { for: "plan-scale-of-ellipses" });
    const label = make("label", {}, texts(bars ? "plan.ellipse_scale_bars" : "plan.ellipse_scale"));
    label.append(input);
    const row = make("div", { class: "move" });
    row.append(label, output);
    const words = ["plan-ellipse-words", "plan-relative-words"].map((id) => document.getElementById(id));
    const first = words.map((one) => one?.textContent ?? "");
    const values = [plan.dataset.magnification, plan.dataset.relative];
    const change = () => {
      times = 10 ** Number(input.value);
      plan.style.setProperty("--e", times.toPrecision(4));
      const said = (value) => String(Number((Number(value) * times).toPrecision(3)));
      output.textContent = texts("plan.ellipse_times", { times: said(values[0] ?? values[1]) });
      input.setAttribute("aria-valuetext", output.textContent);
      // the legend states the size that is drawn: the figure in its sentence is the only such one
      words.forEach((one, i) => one && (one.textContent = first[i].replace(shownTimes(values[i]), said(values[i]))));
      scaleBars();
    };
    input.addEventListener("input", change);
    change();
    return [row];
  }

  function shownTimes(value) {
    return Number(value) < 1e5 ? String(Number(value)) : Number(value).toFixed(0);
  }

  function layers() {
    const frame = make("fieldset");
    frame.append(make("legend", {}, texts("plan.layers")));
    for (const one of [...plan.querySelectorAll("[data-layer]")].reverse()) {
      const key = one.dataset.layer;
      const box = make("input", { type: "checkbox", "data-toggles": key });
      box.checked = true;
      box.addEventListener("change", () => toggle(key, box.checked));
      const label = make("label");
      label.append(box, texts(`plan.layer_${key.replace(/-/g, "_")}`));
      frame.append(label);
    }
    return frame;
  }

  function toggle(key, on) {
    plan.querySelector(`[data-layer="${CSS.escape(key)}"]`)?.classList.toggle("off", !on);
    const box = document.querySelector(`[data-toggles="${CSS.escape(key)}"]`);
    if (box) box.checked = on;
  }

  /* ---- begin ---- */

  plan.classList.add("live");
  plan.setAttribute("role", "application"); // arrows and letters are for the plan while it has the focus
  controls();
  letGo();
  plan.addEventListener("pointerdown", down);
  plan.addEventListener("pointermove", moved);
  for (const end of ["pointerup", "pointercancel"]) window.addEventListener(end, up);
  plan.addEventListener("wheel", wheel, { passive: false });
  window.addEventListener("wheel", wheelElsewhere, { passive: true });
  plan.addEventListener("keydown", pressed);
  plan.addEventListener("click", clicked);
  document.addEventListener("click", shown);
  window.addEventListener("beforeprint", () => {
    showAll();
    draw();
    plan.style.removeProperty("--k"); // paper has its own sizes
    plan.style.removeProperty("--f");
    sized = 0;
  });
  window.addEventListener("afterprint", ask);
  if ("ResizeObserver" in window) new ResizeObserver(() => { sized = 0; ask(); }).observe(plan);
  sizes();
  if (stations.length <= MANY) rest(); // else once the page is painted: the observer of its size asks for it
  buttons();
})();
