"use strict";
// What the page asks for, progress, doubtful points and the choice of curves; watch_plot.js draws.
// Every text that comes from the run is put in as text, never as markup.

const KINDS = ["converged", "coarse", "not converged", "failed", "running", "waiting"];
const MOST = MARKERS.length;

let state = null; // the last answer of /state
let curves = []; // the last answer of /curves
let chosen = []; // which set is drawn in each colour; null where none is
let ages = []; // since when, by colour
let touched = false; // whether the reader has chosen them
let quantity = null; // "ext", "abs", "sca" or "all"
let asked = ""; // what the curves on the page were asked with

// --- asking ----------------------------------------------------------------------------------

async function ask(path) {
  const answer = await fetch(path, { cache: "no-store", signal: AbortSignal.timeout(20000) });
  if (!answer.ok) throw new Error(String(answer.status));
  return answer.json();
}

async function update() {
  let wait = 2;
  try {
    const found = await ask("state").catch(() => null); // nobody answers
    if (found === null) ended();
    else if (found.error) news(found.error, true);
    else {
      wait = found.wait;
      state = found;
      show();
      await updateCurves();
    }
  } finally {
    setTimeout(update, 1000 * wait);
  }
}

function ended() {
  const since = state ? ` The figures are from ${state.now}.` : "";
  news(`The server of this page has ended; the run is not affected.${since}`, true);
}

async function updateCurves() {
  choose();
  const sets = chosen.filter((set) => set !== null);
  const path = "curves?" + sets.map((set) => `set=${set}`).join("&");
  if (asked === path + state.version) return;
  const found = await ask(path).catch(() => null);
  if (!found?.curves) return; // the next update tells why
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
    const there = state.sets.flatMap((set, number) => (set.there ? [number] : []));
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
    updateCurves();
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

$("filter").addEventListener("input", () => {
  const words = $("filter").value.toLowerCase().split(/\s+/);
  for (const line of $("sets").children) {
    const text = line.textContent.toLowerCase();
    line.hidden = !line.querySelector("input").checked && !words.every((word) => text.includes(word));
  }
});
new ResizeObserver(() => { if (state) draw(); }).observe($("plot"));
update();
