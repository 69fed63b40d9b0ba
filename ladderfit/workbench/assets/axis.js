// The ladder as navigation: one axis of log distance, a row per rung, a mark per object.
const SVG = "http://www.w3.org/2000/svg";
const WIDEST = 1000, HEIGHT = 96, LEFT = 22, RIGHT = 22, TOP = 3, ROW = 18, AXIS = 78;
const FIRST = 0, LAST = 9; // log10 of parsecs: 1 pc to 1 Gpc
const TICKS = ["1 pc", "10 pc", "100 pc", "1 kpc", "10 kpc", "100 kpc", "1 Mpc", "10 Mpc", "100 Mpc", "1 Gpc"];

let width = WIDEST;
const across = (place) =>
  LEFT + ((width - LEFT - RIGHT) * (Math.min(Math.max(place, FIRST), LAST) - FIRST)) / (LAST - FIRST);

function add(parent, tag, attributes = {}, text = null) {
  const node = document.createElementNS(SVG, tag);
  for (const [key, value] of Object.entries(attributes)) node.setAttribute(key, value);
  if (text !== null) node.textContent = text;
  parent.appendChild(node);
  return node;
}

function distance(place) {
  const parsecs = 10 ** place;
  const [value, unit] =
    parsecs < 1e3 ? [parsecs, "pc"] : parsecs < 1e6 ? [parsecs / 1e3, "kpc"] :
    parsecs < 1e9 ? [parsecs / 1e6, "Mpc"] : [parsecs / 1e9, "Gpc"];
  return `${Number(value.toPrecision(3))} ${unit}`;
}

const KINDS = { star: "parallax star", anchor: "geometric anchor", host: "galaxy", supernova: "supernova" };
const describe = (mark) =>
  `${mark.name}, ${KINDS[mark.kind]}, ${distance(mark.place)}, ${mark.used ? "takes part" : "off"}`;

function shape(kind, x, y) {
  if (kind === "anchor") return `M ${x} ${y - 4.6} l 4.6 4.6 l -4.6 4.6 l -4.6 -4.6 Z`;
  if (kind === "star") return `M ${x} ${y - 3} l 3 5.2 h -6 Z`;
  if (kind === "supernova") return `M ${x - 2.4} ${y - 2.4} h 4.8 v 4.8 h -4.8 Z`;
  return `M ${x - 2.8} ${y} a 2.8 2.8 0 1 0 5.6 0 a 2.8 2.8 0 1 0 -5.6 0 Z`;
}

function drawScale(svg, overlaps) {
  for (const [low, high] of overlaps)
    add(svg, "rect", { class: "lf-overlap", x: across(low), y: TOP, width: across(high) - across(low), height: AXIS - TOP });
  add(svg, "line", { class: "lf-scale", x1: across(FIRST), x2: across(LAST), y1: AXIS, y2: AXIS });
  TICKS.forEach((words, place) => {
    const x = across(place);
    add(svg, "line", { class: "lf-scale", x1: x, x2: x, y1: AXIS, y2: AXIS + 4 });
    add(svg, "text", { class: "lf-tick", x, y: AXIS + 15, "text-anchor": "middle" }, words);
  });
}

function drawRung(svg, rung, row, open) {
  const y = TOP + ROW * (row + 0.5) + 1;
  const group = add(svg, "g", { class: `lf-rung lf-rung-${rung.key}${open ? " lf-open" : ""}` });
  const low = across(rung.low), high = across(rung.high);
  const used = rung.marks.filter((mark) => mark.used).length;
  const segment = add(group, "g", {
    class: "lf-segment", role: "button", tabindex: open ? 0 : -1, "data-rung": rung.key,
    "aria-pressed": String(open),
    "aria-label": `${rung.words}: ${used} of ${rung.marks.length} objects, ${distance(rung.low)} to ${distance(rung.high)}`,
  });
  add(segment, "rect", { class: "lf-target", x: low - 8, y: y - ROW / 2 + 1, width: high - low + 16, height: ROW - 2, rx: 4 });
  add(segment, "line", { class: "lf-line", x1: low, x2: high, y1: y, y2: y });
  const name = add(segment, "text", { class: "lf-name", y: y + 4 }, rung.words);
  const wide = Math.max(name.getComputedTextLength(), 7.2 * rung.words.length); // as if it were bold
  const room = high + 15 + wide < width;
  name.setAttribute("x", room ? high + 13 : low - 13);
  name.setAttribute("text-anchor", room ? "start" : "end");
  for (const mark of rung.marks) {
    const node = add(group, "path", {
      class: `lf-mark${mark.used ? "" : " lf-off"}`, d: shape(mark.kind, across(mark.place), y), tabindex: -1,
      role: "img", "data-rung": rung.key, "aria-label": describe(mark),
    });
    add(node, "title", {}, describe(mark));
  }
}

function paint(el, model) {
  const palette = model.get("palette")[model.get("dark") ? "dark" : "light"];
  for (const [name, colour] of Object.entries(palette)) el.style.setProperty(`--lf-${name}`, colour);
}

function watchPage(el, model) {
  const read = () => {
    let node = el.parentElement, colour = "";
    while (node && !colour) {
      const found = getComputedStyle(node).backgroundColor;
      if (found && !/transparent|, 0\)$/.test(found)) colour = found;
      node = node.parentElement;
    }
    const rgb = (colour.match(/\d+(\.\d+)?/g) || [255, 255, 255]).slice(0, 3).map(Number);
    const dark = 0.299 * rgb[0] + 0.587 * rgb[1] + 0.114 * rgb[2] < 128;
    if (String(rgb) !== String(model.get("rgb")) || dark !== model.get("dark")) {
      model.set("rgb", rgb);
      model.set("dark", dark);
      model.save_changes();
    }
    paint(el, model);
  };
  const observer = new MutationObserver(() => setTimeout(read, 120));
  observer.observe(document.body, { attributes: true, attributeFilter: ["data-jp-theme-name", "data-jp-theme-light", "class"] });
  setTimeout(read, 0);
  return () => observer.disconnect();
}

// A figure keeps the Tab key to itself: leave it to the pointer, as the line below it does the same by keyboard.
// It may also lose what is drawn in its first half second: ask for it once more when it is there.
function openFigures(el, model) {
  let asked = false;
  const release = () => {
    const bench = el.closest(".lf-workbench") || document.body;
    for (const node of bench.querySelectorAll(".jupyter-matplotlib [tabindex='0'], .jupyter-matplotlib[tabindex='0']"))
      node.setAttribute("tabindex", "-1");
    if (!asked && bench.querySelector(".jupyter-matplotlib canvas")) {
      asked = true;
      setTimeout(() => { model.set("ready", model.get("ready") + 1); model.save_changes(); }, 700);
    }
  };
  const observer = new MutationObserver(release);
  setTimeout(() => {
    release();
    observer.observe(el.closest(".lf-workbench") || document.body, { childList: true, subtree: true });
  }, 0);
  return () => observer.disconnect();
}

function render({ model, el }) {
  el.classList.add("lf-axis");
  const svg = add(el, "svg", { height: HEIGHT, role: "group", "aria-label": "The ladder: one axis of distance. Arrows move, Enter opens a rung." });
  const hint = document.createElement("div");
  hint.className = "lf-hint";
  el.appendChild(hint);

  const segments = () => [...svg.querySelectorAll(".lf-segment")];
  const marksOf = (key) => [...svg.querySelectorAll(`.lf-mark[data-rung="${key}"]`)];
  const open = (key) => {
    if (key === model.get("rung")) return;
    model.set("rung", key);
    model.save_changes();
  };
  let shown = model.get("width");
  const draw = () => {
    const had = svg.contains(document.activeElement) ? document.activeElement.getAttribute("aria-label") : null;
    const focused = had === null ? null : document.activeElement.dataset.rung;
    svg.replaceChildren();
    width = shown;
    svg.setAttribute("width", width);
    drawScale(svg, model.get("overlaps"));
    model.get("rungs").forEach((rung, row) => drawRung(svg, rung, row, rung.key === model.get("rung")));
    if (had !== null) {
      const again = [...svg.querySelectorAll("[aria-label]")].find((node) => node.getAttribute("aria-label") === had);
      (again || segments().find((node) => node.dataset.rung === focused) || segments()[0])?.focus();
    }
    paint(el, model);
  };
  const step = (nodes, by) => {
    const place = nodes.indexOf(document.activeElement);
    nodes[(place + by + nodes.length) % nodes.length]?.focus();
  };
  svg.addEventListener("click", (event) => {
    const key = event.target.closest("[data-rung]")?.dataset.rung;
    if (key) open(key);
  });
  svg.addEventListener("keydown", (event) => {
    const node = document.activeElement, key = node?.dataset?.rung;
    if (!key) return;
    const onMark = node.classList.contains("lf-mark");
    const own = onMark ? marksOf(key) : segments();
    if (event.key === "ArrowRight") step(own, 1);
    else if (event.key === "ArrowLeft") step(own, -1);
    else if (event.key === "ArrowDown" && !onMark) marksOf(key)[0]?.focus();
    else if ((event.key === "ArrowUp" || event.key === "Escape") && onMark) segments().find((s) => s.dataset.rung === key)?.focus();
    else if (event.key === "Enter" || event.key === " ") open(key);
    else return;
    event.preventDefault();
    event.stopPropagation();
  });
  const tell = (event) => {
    const node = event.target.closest?.("[aria-label][data-rung]");
    hint.textContent = node ? node.getAttribute("aria-label") : "";
  };
  svg.addEventListener("focusin", tell);
  svg.addEventListener("mouseover", tell);
  svg.addEventListener("mouseleave", () => { hint.textContent = ""; });
  for (const name of ["rungs", "overlaps", "rung"]) model.on(`change:${name}`, draw);
  const refit = () => {
    const room = Math.floor(Math.min(el.clientWidth, WIDEST));
    if (room < 200 || room === shown) return;
    shown = room;
    draw();
    model.set("width", room);
    model.save_changes();
  };
  // while a theme is loaded the page has other widths for a moment: only one that lasts is taken
  let settling = null;
  const fit = new ResizeObserver(() => {
    if (settling === null) refit();
    clearTimeout(settling);
    settling = setTimeout(refit, 250);
  });
  fit.observe(el);
  draw();
  const stops = [watchPage(el, model), openFigures(el, model), () => { fit.disconnect(); clearTimeout(settling); }];
  return () => stops.forEach((stop) => stop());
}

export default { render };
