// Wafer maps: order of the overview, and the larger view that reads out dice.

const svgSpace = "http://www.w3.org/2000/svg";

const viewer = {
  dialog: null,
  maps: [], // what each picture means, by its data-map
  index: -1,
  column: 0,
  row: 0,
  svg: null,
  cursor: [],
  pixels: new Map(), // map index -> its picture's pixels
};

function startMaps() {
  viewer.dialog = document.getElementById("viewer");
  if (!viewer.dialog) return;
  viewer.maps = JSON.parse(document.getElementById("map-data").textContent);
  for (const button of document.querySelectorAll("button.map")) {
    button.addEventListener("click", () => openMap(Number(button.dataset.map)));
  }
  for (const button of document.querySelectorAll("button[data-order]")) {
    button.addEventListener("click", () => orderMaps(button));
  }
  for (const button of document.querySelectorAll("button[data-signs]")) {
    button.addEventListener("click", () => toggleSigns(button));
  }
  for (const button of viewer.dialog.querySelectorAll("[data-step]")) {
    button.addEventListener("click", () => stepMap(Number(button.dataset.step)));
  }
  viewer.dialog.querySelector("[data-close]").addEventListener("click", () => viewer.dialog.close());
  viewer.dialog.addEventListener("keydown", viewerKey);
  viewer.dialog.addEventListener("close", () => mapButton(viewer.index)?.focus());
  const plate = document.getElementById("viewer-map");
  plate.addEventListener("pointermove", (event) => pointAt(event));
  plate.addEventListener("pointerdown", (event) => pointAt(event));
}

// By wafer as the report has them, or by yield, lowest first.
function orderMaps(pressed) {
  for (const button of pressed.parentElement.querySelectorAll("button")) {
    button.setAttribute("aria-pressed", String(button === pressed));
  }
  const gallery = document.getElementById("gallery");
  const byLoss = pressed.dataset.order === "loss";
  const key = (figure) => {
    if (byLoss && figure.dataset.yield !== "") return Number(figure.dataset.yield);
    return byLoss ? Infinity : Number(figure.dataset.order);
  };
  const figures = [...gallery.children];
  figures.sort((a, b) => key(a) - key(b) || Number(a.dataset.order) - Number(b.dataset.order));
  gallery.append(...figures);
}

// The outlines of patterns on all maps, the larger view's too.
function toggleSigns(button) {
  const shown = button.getAttribute("aria-pressed") !== "true";
  button.setAttribute("aria-pressed", String(shown));
  document.body.classList.toggle("no-signs", !shown);
}

// The maps in the order in which the page shows them now.
function mapOrder() {
  return [...document.querySelectorAll("button.map")].map((button) => Number(button.dataset.map));
}

function mapButton(index) {
  return document.querySelector(`button.map[data-map="${index}"]`);
}

function stepMap(step) {
  const order = mapOrder();
  const next = order[(order.indexOf(viewer.index) + step + order.length) % order.length];
  openMap(next);
}

function openMap(index) {
  viewer.index = index;
  const map = viewer.maps[index];
  const plate = document.getElementById("viewer-map");
  viewer.svg = mapButton(index).querySelector("svg").cloneNode(true);
  viewer.cursor = ["cursor-halo", "cursor"].map((name) => {
    const rect = document.createElementNS(svgSpace, "rect");
    rect.setAttribute("class", name);
    rect.setAttribute("width", map.aspect);
    rect.setAttribute("height", 1);
    rect.setAttribute("visibility", "hidden");
    viewer.svg.append(rect);
    return rect;
  });
  plate.replaceChildren(viewer.svg);
  viewer.column = Math.floor(map.columns / 2);
  viewer.row = Math.floor(map.rows / 2);
  document.getElementById("viewer-title").textContent = map.title;
  document.getElementById("viewer-text").textContent = map.text;
  document.getElementById("viewer-die").textContent = "Point at a die, or go to the map and use the arrow keys.";
  showSigns(map);
  showLegend(map);
  if (!viewer.dialog.open) viewer.dialog.showModal();
}

function showSigns(map) {
  const list = document.getElementById("viewer-signs");
  list.replaceChildren();
  for (const text of map.signs) {
    const item = document.createElement("li");
    item.textContent = text;
    list.append(item);
  }
}

function showLegend(map) {
  const body = document.getElementById("viewer-legend");
  body.replaceChildren();
  for (const entry of map.legend) {
    const row = body.insertRow();
    const name = row.insertCell();
    name.append(swatch(entry.colour), entry.label);
    const dice = row.insertCell();
    dice.className = "n";
    dice.textContent = entry.dice;
  }
}

function swatch(colour) {
  const mark = document.createElement("i");
  mark.className = "swatch";
  mark.style.background = `rgb(${colour.join(",")})`;
  return mark;
}

function viewerKey(event) {
  const steps = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] };
  const step = steps[event.key];
  if (!step || event.altKey || event.ctrlKey || event.metaKey) return;
  if (event.target.id === "viewer-map") {
    const map = viewer.maps[viewer.index];
    const far = event.shiftKey ? 10 : 1;
    const inside = (v, n) => Math.max(0, Math.min(n - 1, v));
    showDie(inside(viewer.column + far * step[0], map.columns), inside(viewer.row + far * step[1], map.rows));
  } else if (step[0] !== 0) {
    stepMap(step[0]);
  } else {
    return; // up and down scroll the dialog
  }
  event.preventDefault();
}

// From the pointer to the picture's pixel: the drawing's own coordinates are
// die heights, and one die is as wide as the aspect says.
function pointAt(event) {
  const matrix = viewer.svg && viewer.svg.getScreenCTM();
  if (!matrix) return;
  const map = viewer.maps[viewer.index];
  const at = new DOMPoint(event.clientX, event.clientY).matrixTransform(matrix.inverse());
  const column = Math.floor(at.x / map.aspect);
  const row = Math.floor(at.y);
  if (column < 0 || row < 0 || column >= map.columns || row >= map.rows) return;
  showDie(column, row);
}

async function showDie(column, row) {
  viewer.column = column;
  viewer.row = row;
  const index = viewer.index;
  const map = viewer.maps[index];
  for (const rect of viewer.cursor) {
    rect.setAttribute("x", column * map.aspect);
    rect.setAttribute("y", row);
    rect.setAttribute("visibility", "visible");
  }
  const pixels = await mapPixels(index);
  if (viewer.index !== index || viewer.column !== column || viewer.row !== row) return;
  const at = 4 * (row * pixels.width + column);
  const entry = pixels.data[at + 3] === 0 ? null : legendOf(map, pixels.data, at);
  const out = document.getElementById("viewer-die");
  const place = document.createElement("b");
  place.textContent = diePlace(map, column, row);
  out.replaceChildren(place);
  if (entry) out.append(swatch(entry.colour), entry.label);
  else out.append("no die here");
}

function diePlace(map, column, row) {
  const last = map.step - 1;
  const x = map.x0 + column * map.step;
  const y = map.yDown ? map.y0 + row * map.step : map.y0 - row * map.step;
  if (last === 0) return `x ${x}, y ${y}`;
  return `x ${x} to ${x + last}, y ${y} to ${map.yDown ? y + last : y - last}`;
}

function legendOf(map, data, at) {
  return map.legend.find((e) => e.colour.every((v, i) => v === data[at + i]));
}

// Each picture is drawn once to a canvas of its own size, to read its colours.
function mapPixels(index) {
  if (!viewer.pixels.has(index)) viewer.pixels.set(index, readPixels(index));
  return viewer.pixels.get(index);
}

async function readPixels(index) {
  const image = new Image();
  image.src = mapButton(index).querySelector("image").getAttribute("href");
  await image.decode();
  const canvas = document.createElement("canvas");
  canvas.width = image.naturalWidth;
  canvas.height = image.naturalHeight;
  const context = canvas.getContext("2d", { willReadFrequently: true });
  context.drawImage(image, 0, 0);
  return context.getImageData(0, 0, canvas.width, canvas.height);
}
