"use strict";
// The spectra as a drawing, and reading values from it. `state`, `curves`, `chosen` and `quantity`
// are those of watch.js, which is loaded after this.

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

let drawn = []; // the curves as drawn, with the places of their points
let reading = null; // what is read: [curve, point]

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
  for (const line of drawn) svg.append(band(line, sx, (y) => sy(Math.min(top, Math.max(low, y)))));
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
      return `${sx(x).toFixed(1)} ${sy(y + sign * (error ?? 0)).toFixed(1)}`;
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
