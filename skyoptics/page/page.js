// The page itself: slider, cross, readings.

const at = (id) => document.getElementById(id);
const pictures = DATA.pictures;
const figures = pictures.map((_, place) => at(`picture-${place + 1}`));
const frames = figures.map((figure) => figure.querySelector(".frame"));
const drawSpectrum = spectrumGraph(at("spectrum"), DATA.bands);
const graph = curveGraph(at("curve"), DATA.curve);
const cross = document.createElementNS(SVG, "svg");
const state = { now: 0, column: pictures[0].start[1], row: pictures[0].start[0] };
let saying = 0;

function makeCross() {
  cross.setAttribute("class", "cross");
  cross.setAttribute("viewBox", "-16.5 -16.5 33 33");
  cross.setAttribute("aria-hidden", "true");
  const d = "M-15 0H-5M5 0H15M0 -15V-5M0 5V15";
  add(cross, "path", { class: "under", d });
  add(cross, "path", { class: "over", d });
}

function show(id, text, none) {
  at(id).textContent = text;
  at(id).classList.toggle("none", none);
}

// Azimuths turn over at 360 after rounding.
function azimuth(value, digits) {
  const rounded = Number(value.toFixed(digits));
  return `${write(rounded >= 360 ? 0 : rounded, digits)}° ${DATA.points[Math.round(value / 45) % 8]}`;
}

function read(speak) {
  const picture = pictures[state.now];
  const { width, height } = picture.grid;
  cross.style.left = `${(100 * (state.column + 0.5)) / width}%`;
  cross.style.top = `${(100 * (state.row + 0.5)) / height}%`;
  const found = reading(picture, state.column, state.row);
  const digits = picture.digits;
  const name = found && arcAt(picture, DATA.names, state.column, state.row);
  const seen = found && spectrumAt(picture, DATA.bands.edges.length, state.column, state.row);
  show("azimuth", found ? azimuth(found.azimuth, digits) : DATA.words.outside, !found);
  show("elevation", found ? `${write(found.elevation, digits)}°` : "–", !found);
  show("angle", found ? `${write(found.angle, digits)}°` : "–", !found);
  show("opposite", found ? `${write(180 - found.angle, digits)}°` : "–", !found);
  show("arc", found ? name || DATA.words.no_arc : "–", !name);
  drawSpectrum(seen ? seen.shape : null);
  at("peak").textContent = seen ? `${DATA.words.peak}: ${small(seen.peak)} W\u00a0m⁻²\u00a0sr⁻¹\u00a0nm⁻¹.` : "";
  graph.mark(found ? found.angle : null, digits);
  const words = !found ? DATA.words.outside : ["azimuth", "elevation", "angle", "arc"]
    .map((id) => `${DATA.words[id]} ${at(id).textContent}`).join(", ");
  frames[state.now].setAttribute("aria-label", `${DATA.words.cross}: ${words}`);
  clearTimeout(saying);
  if (speak) saying = setTimeout(() => { at("said").textContent = words; }, 250);
}

function choose(now) {
  state.now = now;
  figures.forEach((figure, place) => { figure.hidden = place !== now; });
  const { width, height } = pictures[now].grid;
  state.column = Math.min(state.column, width - 0.5);
  state.row = Math.min(state.row, height - 0.5);
  frames[now].append(cross);
  at("value").value = String(now);
  at("value").setAttribute("aria-valuetext", pictures[now].label);
  at("chosen").textContent = pictures[now].label;
  at("framed").hidden = !pictures[now].curve.framed;
  Array.from(at("ticks").children).forEach((tick, place) => tick.classList.toggle("now", place === now));
  graph.draw(pictures[now]);
  read(false);
}

function move(column, row, speak) {
  const { width, height } = pictures[state.now].grid;
  state.column = Math.min(width - 0.5, Math.max(-0.5, column));
  state.row = Math.min(height - 0.5, Math.max(-0.5, row));
  read(speak);
}

function pointed(event) {
  const { width, height } = pictures[state.now].grid;
  const box = frames[state.now].querySelector("img").getBoundingClientRect();
  move(((event.clientX - box.left) * width) / box.width - 0.5, ((event.clientY - box.top) * height) / box.height - 0.5, false);
}

function pressed(event) {
  if (event.ctrlKey || event.altKey || event.metaKey) return;
  const { width, height } = pictures[state.now].grid;
  const step = event.shiftKey ? 1 : Math.max(1, Math.round(width / 100));
  const { column, row } = state;
  const ways = {
    ArrowLeft: [column - step, row], ArrowRight: [column + step, row], ArrowUp: [column, row - step], ArrowDown: [column, row + step],
    Home: [0, row], End: [width - 1, row], PageUp: [column, 0], PageDown: [column, height - 1],
  };
  if (!(event.key in ways)) return;
  event.preventDefault();
  move(...ways[event.key], true);
}

// Ticks stand under the stops of the thumb; where they would overlap only some are written.
function placeTicks() {
  const ticks = Array.from(at("ticks").children);
  ticks.forEach((tick) => tick.classList.remove("dropped"));
  const widest = Math.max(...ticks.map((tick) => tick.getBoundingClientRect().width)) + 10;
  const room = at("ticks").getBoundingClientRect().width / Math.max(1, ticks.length - 1);
  const every = Math.max(1, Math.ceil(widest / room));
  const last = ticks.length - 1;
  ticks.forEach((tick, place) => {
    const crowded = place % every !== 0 || (place !== last && last - place < every);
    tick.classList.toggle("dropped", crowded && place !== last);
  });
}

function begin() {
  document.body.classList.add("live");
  makeCross();
  for (const id of ["readings", "scattering", "help"]) at(id).hidden = false;
  if (pictures.length > 1) {
    at("slider").hidden = false;
    pictures.forEach((picture, place) => {
      const tick = document.createElement("span");
      tick.textContent = picture.label;
      tick.style.left = `${(100 * place) / (pictures.length - 1)}%`;
      tick.classList.toggle("first", place === 0);
      tick.classList.toggle("last", place === pictures.length - 1);
      at("ticks").append(tick);
    });
    at("value").addEventListener("input", (event) => choose(Number(event.target.value)));
    placeTicks();
    addEventListener("resize", placeTicks);
  }
  frames.forEach((frame) => {
    frame.tabIndex = 0;
    frame.setAttribute("role", "application");
    frame.setAttribute("aria-describedby", "help");
    frame.addEventListener("pointerdown", pointed);
    frame.addEventListener("pointermove", pointed);
    frame.addEventListener("keydown", pressed);
  });
  choose(0);
}

begin();
