"use strict";
// Every text that comes from the run is put in as text, never as markup.

const KINDS = ["converged", "coarse", "not converged", "failed", "running", "waiting"];
const QUANTITIES = { ext: "extinction", abs: "absorption", sca: "scattering" };
const DASHES = { ext: "", abs: "7 4", sca: "2 4" };
const MARKERS = [
  (x, y, r) => `M${x - r} ${y}a${r} ${r} 0 1 0 ${2 * r} 0a${r} ${r} 0 1 0 ${-2 * r} 0`,
  (x, y, r) => `M${x - r} ${y - r}h${2 * r}v${2 * r}h${-2 * r}z`,
  (x, y, r) => `M${x} ${y - 1.2 * r}l${1.2 * r} ${2.1 * r}h${-2.4 * r}z`,
  (x, y, r) => `M${x} ${y - 1.4 * r}l${1.4 * r} ${1.4 * r}l${-1.4 * r} ${1.4 * r}l${-1.4 * r} ${-1.4 * r}z`,
  (x, y, r) => `M${x} ${y + 1.2 * r}l${1.2 * r} ${-2.1 * r}h${-2.4 * r}z`,
  (x, y, r) => `M${x - r} ${y - r}l${2 * r} ${2 * r}m0 ${-2 * r}l${-2 * r} ${2 * r}`,
];
const MOST = MARKERS.length;

let state = null; // the last answer of /state
let curves = []; // the last answer of /curves
let chosen = []; // which set is drawn in each colour; null where none is
let ages = []; // since when, by colour
let touched = false; // whether the reader has chosen them
let quantity = null; // "ext", "abs", "sca" or "all"
let drawn = []; // the curves as drawn, with the places of their points
let reading = null; // what is read: [curve, point]
let asked = ""; // what the curves on the page were asked with

const $ = (id) => document.getElementById(id);

function make(name, attributes = {}, ...inner) {
  const vector = ["svg", "path", "line", "text", "g", "rect"].includes(name);
  const node = vector
    ? document.createElementNS("http://www.w3.org/2000/svg", name)
    : document.createElement(name);
  for (const [key, value] of Object.entries(attributes)) node.setAttribute(key, value);
  node.append(...inner);
  return node;
}

// --- asking ----------------------------------------------------------------------------------

async function ask(path) {
  const answer = await fetch(path, { cache: "no-store", signal: AbortSignal.timeout(20000) });
  if (!answer.ok) throw new Error(String(answer.status));
  return answer.json();
}

async function update() {
  let wait = 2;
  try {
    const found = await ask("state");
    wait = found.wait;
    if (found.error) {
      news(found.error, true);
    } else {
      state = found;
      show();
      await updateCurves();
    }
  } catch {
    const since = state ? ` The figures are from ${state.now}.` : "";
    news(`The server of this page has ended: the run is not affected.${since}`, true);
  }
  setTimeout(update, 1000 * wait);
}

async function updateCurves() {
  choose();
  const sets = chosen.filter((set) => set !== null);
  const path = "curves?" + sets.map((set) => `set=${set}`).join("&");
  if (asked === path + state.version) return;
  const found = await ask(path);
  if (found.error) return;
  asked = path + state.version;
  curves = found.curves;
  draw();
}

// --- progress --------------------------------------------------------------------------------

function news(text, bad) {
  const place = $("news");
  if (place.textContent !== text) place.textContent = text;
  place.hidden = !text;
  place.classList.toggle("bad", bad);
}

function show() {
  const share = state.total ? Math.floor((100 * state.done) / state.total) : 0;
  document.title = `${state.title} · ${share} %`;
  $("title").textContent = state.title;
  $("folder").textContent = state.folder;
  $("headline").textContent = state.headline;
  $("holder").textContent = state.holder;
  $("updated").textContent = `as of ${state.now}`;
  if (state.held) news("", false);
  else if (state.done === state.total) news("The run has ended: every point has been computed.", false);
  else news(`Nobody is running it; ${state.next}`, true);
  showBar();
  $("tasks").replaceChildren(...state.tasks.map((t) => make("li", {}, `${t.place}, for ${time(t.seconds)}`)));
  showSets();
  showDoubts();
}

const time = (seconds) => (seconds < 90 ? `${seconds.toFixed(0)} s` : `${(seconds / 60).toFixed(1)} min`);
const cssName = (kind) => kind.replace(" ", "-");

function showBar() {
  const bar = $("bar");
  bar.setAttribute("aria-valuemax", state.total);
  bar.setAttribute("aria-valuenow", state.done);
  const there = KINDS.filter((kind) => state.counts[kind] && kind !== "waiting");
  bar.replaceChildren(
    ...there.map((kind) => {
      const part = make("span", { class: cssName(kind) });
      part.style.flex = `0 1 ${(100 * state.counts[kind]) / state.total}%`;
      return part;
    })
  );
  const told = KINDS.filter((kind) => state.counts[kind] || ["converged", "failed", "waiting"].includes(kind));
  $("counts").replaceChildren(
    ...told.map((kind) =>
      make("li", { "data-kind": kind },
        make("span", { class: `swatch ${cssName(kind)}` }), make("b", {}, String(state.counts[kind])), ` ${kind}`)
    )
  );
}

function showDoubts() {
  $("doubts").hidden = !state.doubts.length;
  $("no-doubts").hidden = state.doubts.length > 0;
  const rows = state.doubts.map((doubt) =>
    make("tr", {},
      make("td", {}, String(doubt.number)),
      make("td", {}, doubt.place),
      make("td", {}, make("span", { class: `swatch ${cssName(doubt.kind)}` }), doubt.kind),
      make("td", {}, doubt.reason))
  );
  $("doubts").tBodies[0].replaceChildren(...rows);
  const more = state.doubtful - state.doubts.length;
  $("more-doubts").textContent = more > 0 ? `and ${more} more; the table of the run has them all` : "";
}

// --- which curves ----------------------------------------------------------------------------

// Until the reader chooses: sets that have points, evenly spread over the sweep.
function choose() {
  if (!touched) {
    const there = state.sets.flatMap((set, number) => (set.done ? [number] : []));
    const from = there.length ? there : state.sets.map((_, number) => number);
    const count = Math.min(MOST, from.length);
    const places = Array.from({ length: count }, (_, i) =>
      count > 1 ? Math.round((i * (from.length - 1)) / (count - 1)) : 0);
    chosen = places.map((place) => from[place]);
  }
  chosen = chosen.map((number) => (number !== null && number < state.sets.length ? number : null));
  if (quantity === null) quantity = state.sets.length > 1 ? "ext" : "all";
  markSets();
  showQuantities();
}

function showQuantities() {
  const place = $("quantities");
  if (place.children.length) return;
  for (const [key, name] of Object.entries({ ...QUANTITIES, all: "all three" })) {
    const button = make("input", { type: "radio", name: "quantity", value: key });
    button.checked = key === quantity;
    button.addEventListener("change", () => { quantity = key; reading = null; draw(); });
    place.append(make("label", {}, button, ` ${name}`));
  }
}

function showSets() {
  const names = JSON.stringify(state.sets.map((set) => set.name));
  const list = $("sets");
  const several = state.sets.length > 1;
  $("legend").textContent = several ? `Curves, ${MOST} at most` : "Curves";
  if (list.dataset.names !== names) {
    list.dataset.names = names;
    list.replaceChildren(...(several ? state.sets.map(setLine) : Object.keys(QUANTITIES).map(quantityLine)));
    $("filter").hidden = state.sets.length < 13;
  }
  if (several) state.sets.forEach((set, number) => {
    list.children[number].querySelector("small").textContent = `${set.done} of ${set.total}`;
  });
  $("more-sets").textContent = state.more_sets ? `and ${state.more_sets} more sets, not listed here` : "";
}

function setLine(set, number) {
  const box = make("input", { type: "checkbox" });
  box.addEventListener("change", () => {
    touched = true;
    if (box.checked) take(number);
    else chosen[chosen.indexOf(number)] = null;
    reading = null;
    markSets();
    updateCurves().catch(() => {}); // the next update tells that the server has ended
  });
  return make("li", {}, make("label", {}, box, make("svg", { viewBox: "0 0 36 20" }),
    make("span", {}, set.name, " ", make("small"))));
}

// Give a set the first free colour, or that of the set which has been drawn longest.
function take(number) {
  while (chosen.length < MOST) chosen.push(null);
  let place = chosen.indexOf(null);
  if (place < 0) {
    const since = chosen.map((_, n) => ages[n] ?? 0);
    place = since.indexOf(Math.min(...since));
  }
  chosen[place] = number;
  ages[place] = Date.now();
}

function quantityLine(key, number) {
  const key_ = make("svg", { viewBox: "0 0 36 20", width: 36, height: 20 });
  swatch(key_, `var(--c${number})`, DASHES[key], number);
  return make("li", {}, make("label", {}, make("span"), key_, make("span", {}, QUANTITIES[key])));
}

function markSets() {
  if (state.sets.length < 2) return;
  [...$("sets").children].forEach((line, number) => {
    const place = chosen.indexOf(number);
    const box = line.querySelector("input");
    box.checked = place >= 0;
    line.style.order = place < 0 ? 1 : 0; // what is drawn stands first: it is the legend
    swatch(line.querySelector("svg"), place < 0 ? null : `var(--c${place})`, "", place);
  });
}

function swatch(svg, colour, dash, marker) {
  svg.replaceChildren();
  if (!colour) return;
  svg.append(make("path", { d: "M1 10H35", stroke: colour, "stroke-width": 2, "stroke-dasharray": dash }));
  svg.append(make("path", { d: MARKERS[marker](18, 10, 4), fill: colour, stroke: colour }));
}

// --- drawing ---------------------------------------------------------------------------------

function lines() {
  const keys = quantity === "all" ? Object.keys(QUANTITIES) : [quantity];
  const alone = state.sets.length < 2;
  return curves.flatMap((curve) => keys.map((key) => {
    const look = alone ? Object.keys(QUANTITIES).indexOf(key) : chosen.indexOf(curve.set);
    return {
      id: `${curve.set} ${key}`, name: state.sets[curve.set]?.name ?? "", key, marker: look,
      colour: `var(--c${look})`, dash: alone || keys.length > 1 ? DASHES[key] : "",
      points: [...curve.points].sort((a, b) => a.x - b.x)
        .map((point) => ({ x: point.x, y: point[key][0], error: point[key][1], kind: point.kind })),
    };
  })).filter((line) => line.marker >= 0);
}

function ticks(low, high, count) {
  const rough = (high - low) / Math.max(1, count);
  const power = 10 ** Math.floor(Math.log10(rough));
  const step = [1, 2, 5, 10].map((n) => n * power).find((n) => n >= rough * 0.999);
  const found = [];
  for (let n = Math.ceil(low / step - 1e-9); n * step <= high + step * 1e-9; n++) found.push(n * step);
  return found;
}

function number(value) {
  if (value === 0) return "0";
  const size = Math.abs(value);
  return size >= 1e6 || size < 1e-3 ? value.toExponential(1).replace("e+", "e") : String(+value.toPrecision(4));
}

function draw() {
  const place = $("plot");
  const width = Math.max(260, place.clientWidth);
  const height = Math.round(Math.min(460, Math.max(260, 0.52 * width)));
  const svg = make("svg", { viewBox: `0 0 ${width} ${height}`, width, height, "aria-hidden": "true" });
  const found = lines();
  const all = found.flatMap((line) => line.points.filter((point) => point.y !== null));
  place.setAttribute("aria-label", all.length ? describe(found) : "no spectrum yet");
  if (!all.length) {
    svg.append(make("text", { x: width / 2, y: height / 2, "text-anchor": "middle", class: "empty" },
      curves.length ? "no point of these curves is finished yet" : "no curve is chosen"));
    place.replaceChildren(svg);
    drawn = [];
    read(null);
    return;
  }
  let [x0, x1] = [Math.min(...all.map((p) => p.x)), Math.max(...all.map((p) => p.x))];
  if (x0 === x1) [x0, x1] = [x0 - 10, x1 + 10];
  const top = Math.max(...all.map((p) => p.y + Math.min(p.error ?? 0, Math.abs(p.y)))) * 1.06 || 1;
  const low = Math.min(0, ...all.map((p) => p.y));
  const side = 14 + 7.5 * Math.max(...ticks(low, top, height / 60).map((t) => number(t).length));
  const box = { left: side + 18, right: width - 12, top: 12, bottom: height - 44 };
  const sx = (x) => box.left + 8 + ((x - x0) / (x1 - x0)) * (box.right - box.left - 16);
  const sy = (y) => box.bottom - ((y - low) / (top - low)) * (box.bottom - box.top);
  svg.append(axes(box, sx, sy, [x0, x1], [low, top], width, height));
  drawn = found.map((line) => ({ ...line,
    places: line.points.map((p) => (p.y === null ? null : [sx(p.x), sy(p.y)])) }));
  for (const line of drawn) svg.append(band(line, sx, sy));
  for (const line of drawn) svg.append(curve(line));
  svg.append(make("g", { id: "cross" }));
  place.replaceChildren(svg);
  drawn.box = box;
  if (reading) read(reading);
}

function axes(box, sx, sy, xs, ys, width, height) {
  const group = make("g");
  for (const y of ticks(...ys, height / 60)) {
    group.append(make("line", { x1: box.left, x2: box.right, y1: sy(y), y2: sy(y), class: "grid" }));
    group.append(make("text", { x: box.left - 7, y: sy(y) + 4, "text-anchor": "end" }, number(y)));
  }
  for (const x of ticks(...xs, width / 75)) {
    group.append(make("line", { x1: sx(x), x2: sx(x), y1: box.bottom, y2: box.bottom + 5, class: "axis" }));
    group.append(make("text", { x: sx(x), y: box.bottom + 20, "text-anchor": "middle" }, number(x)));
  }
  group.append(make("path", { d: `M${box.left} ${box.top}V${box.bottom}H${box.right}`, class: "axis" }));
  group.append(make("text", { x: (box.left + box.right) / 2, y: height - 5, "text-anchor": "middle" }, "vacuum wavelength (nm)"));
  const middle = (box.top + box.bottom) / 2;
  group.append(make("text", { x: 14, y: middle, "text-anchor": "middle", transform: `rotate(-90 14 ${middle})` },
    "cross section (nm²)"));
  return group;
}

// Pieces without a failed point in between.
function pieces(line) {
  const found = [[]];
  line.points.forEach((point, i) => {
    if (point.y === null) found.push([]);
    else found[found.length - 1].push(i);
  });
  return found.filter((piece) => piece.length);
}

function band(line, sx, sy) {
  const group = make("g", { fill: line.colour, opacity: 0.2 });
  for (const piece of pieces(line)) {
    const edge = (sign) => (i) => {
      const { x, y, error } = line.points[i];
      const reach = Math.min(error ?? 0, 2 * Math.abs(y));
      return `${sx(x).toFixed(1)} ${sy(y + sign * reach).toFixed(1)}`;
    };
    const there = [...piece.map(edge(1)), ...[...piece].reverse().map(edge(-1))];
    group.append(make("path", { d: `M${there.join("L")}z` }));
  }
  return group;
}

function curve(line) {
  const group = make("g", { fill: "none", stroke: line.colour, "stroke-width": 2, "data-curve": line.id });
  for (const piece of pieces(line)) {
    const there = piece.map((i) => line.places[i].map((v) => v.toFixed(1)).join(" "));
    group.append(make("path", { d: `M${there.join("L")}`, "stroke-dasharray": line.dash, "stroke-linejoin": "round" }));
  }
  const small = line.points.length > 60;
  // A long curve has a marker here and there; a point without a neighbour needs one to be seen.
  const every = Math.ceil(line.points.length / 40);
  const alone = (i) => !line.places[i - 1] && !line.places[i + 1];
  line.points.forEach((point, i) => {
    if (point.y === null) return;
    const [x, y] = line.places[i];
    const hollow = point.kind === "preview";
    if (hollow || alone(i) || (i + line.marker) % every === 0) {
      const fill = hollow ? "var(--page)" : line.colour;
      group.append(make("path", { d: MARKERS[line.marker](x, y, small ? 2.6 : 3.2), fill, "stroke-width": 1.4 }));
    }
    if (["coarse", "not converged"].includes(point.kind)) {
      const stroke = point.kind === "coarse" ? "var(--coarse)" : "var(--doubt)";
      group.append(make("path", { d: MARKERS[0](x, y, small ? 5 : 7), stroke, "stroke-width": 1.8 }));
    }
  });
  return group;
}

function describe(found) {
  const tops = found.filter((line) => line.points.some((p) => p.y !== null)).map((line) => {
    const best = line.points.reduce((a, b) => ((b.y ?? -1) > (a.y ?? -1) ? b : a));
    return `${[line.name, QUANTITIES[line.key]].filter(Boolean).join(", ")}: largest ${number(best.y)} nm² at ${number(best.x)} nm`;
  });
  return `Spectra. ${tops.join("; ")}`;
}

// --- reading values --------------------------------------------------------------------------

function read(which) {
  reading = which;
  const cross = document.getElementById("cross");
  const [line, i] = which ? [drawn.find((l) => l.id === which[0]), which[1]] : [];
  if (!line?.places[i]) {
    $("reading").hidden = true;
    cross?.replaceChildren();
    reading = null;
    return;
  }
  const point = line.points[i];
  const [x, y] = line.places[i];
  const { top, bottom } = drawn.box;
  cross.replaceChildren(
    make("line", { x1: x, x2: x, y1: top, y2: bottom, class: "cross" }),
    make("path", { d: MARKERS[0](x, y, 5), fill: line.colour, stroke: "var(--page)", "stroke-width": 2 }));
  const error = point.error === null ? "" : ` ± ${number(+point.error.toPrecision(2))}`;
  const texts = [line.name, `${number(point.x)} nm`, `${QUANTITIES[line.key]} ${number(point.y)}${error} nm²`];
  if (point.kind !== "converged") texts.push(point.kind === "preview" ? "coarse answer, in advance" : point.kind);
  const note = $("reading");
  note.replaceChildren(...texts.filter(Boolean).map((text) => make("p", {}, text)));
  note.hidden = false;
  const scale = $("plot").clientWidth / $("plot").firstChild.viewBox.baseVal.width;
  const left = x * scale > $("plot").clientWidth / 2 ? x * scale - note.offsetWidth - 14 : x * scale + 14;
  note.style.left = `${Math.max(0, left)}px`;
  note.style.top = `${Math.max(0, y * scale - note.offsetHeight - 10)}px`;
}

function nearest(event) {
  const area = $("plot").getBoundingClientRect();
  const svg = $("plot").firstChild;
  if (!svg || !drawn.length) return null;
  const scale = svg.viewBox.baseVal.width / area.width;
  const [x, y] = [(event.clientX - area.left) * scale, (event.clientY - area.top) * scale];
  let [best, distance] = [null, Infinity];
  for (const line of drawn) {
    line.places.forEach((place, i) => {
      if (!place) return;
      const d = Math.hypot(place[0] - x, (place[1] - y) * 0.6);
      if (d < distance) [best, distance] = [[line.id, i], d];
    });
  }
  return best;
}

function walk(event) {
  const there = drawn.filter((line) => line.places.some(Boolean));
  const steps = { ArrowRight: [0, 1], ArrowLeft: [0, -1], ArrowUp: [-1, 0], ArrowDown: [1, 0] };
  if (event.key === "Escape") return read(null);
  const step = steps[event.key];
  if (!step || !there.length) return;
  event.preventDefault();
  let row = there.findIndex((line) => line.id === reading?.[0]);
  let i = reading?.[1] ?? -1;
  if (row < 0) [row, i] = [0, there[0].places.findIndex(Boolean)];
  else if (step[0]) {
    const x = there[row].points[i].x;
    row = (row + step[0] + there.length) % there.length;
    const apart = there[row].points.map((p, n) => (there[row].places[n] ? Math.abs(p.x - x) : Infinity));
    i = apart.indexOf(Math.min(...apart));
  } else {
    let next = i + step[1];
    while (there[row].places[next] === null) next += step[1];
    if (there[row].places[next]) i = next;
  }
  read([there[row].id, i]);
  $("spoken").textContent = [...$("reading").children].map((p) => p.textContent).join(", ");
}

$("plot").addEventListener("pointermove", (event) => read(nearest(event)));
$("plot").addEventListener("pointerdown", (event) => read(nearest(event)));
$("plot").addEventListener("pointerleave", (event) => { if (event.pointerType === "mouse") read(null); });
$("plot").addEventListener("keydown", walk);
$("filter").addEventListener("input", () => {
  const words = $("filter").value.toLowerCase().split(/\s+/);
  for (const line of $("sets").children) {
    const text = line.textContent.toLowerCase();
    line.hidden = !line.querySelector("input").checked && !words.every((word) => text.includes(word));
  }
});
new ResizeObserver(() => { if (state) draw(); }).observe($("plot"));
update();
