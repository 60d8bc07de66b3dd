// Part e: who touches whom, inside the molecule above the line, in the crystal below it.

const CANVAS_ABOVE = 400;

/** @type {{row: number, column: number, unit: number, kind: number, contact: number}[]} */
let cells = [];
/** @type {{size: number, left: number, top: number, cell: number}} */
let mapPlan = { size: 0, left: 28, top: 18, cell: 4 };

/** Contacts as cells of the map, each pair and kind once. */
function findCells() {
  const { contacts, residues, entries } = data;
  const known = new Set();
  cells = [];
  contacts.a.forEach((a, contact) => {
    const kind = contacts.kind[contact];
    for (const e of entriesOfResidue.get(residues.first[a]) || []) {
      for (const f of entriesOfResidue.get(residues.first[contacts.b[contact]]) || []) {
        const [low, high] = [Math.min(e, f), Math.max(e, f)];
        const key = `${low}/${high}/${kind}`;
        if (low === high || known.has(key)) continue;
        known.add(key);
        const unit = entries.unit[e] >= 0 && entries.unit[e] === entries.unit[f] ? entries.unit[e] : -1;
        const below = kind === contacts.lattice;
        cells.push({ row: below ? high : low, column: below ? low : high, unit, kind, contact });
      }
    }
  });
}

function drawMap() {
  const box = byId("map");
  const count = data.entries.name.length;
  const across = Math.min(330, box.clientWidth || 330);
  const left = Math.ceil(8 + Math.max(...[data.entries.number[0], data.entries.number[count - 1]].map((n) => textWidth(minus(n), "400 11px sans-serif"))));
  const room = across - left - 2;
  mapPlan = { size: room, left, top: 18, cell: 0 };
  mapPlan.cell = mapPlan.size / count;
  const height = mapPlan.top + mapPlan.size + 2;
  const picture = svg("svg", { width: across, height, role: "img", "aria-label": mapSentence() });
  picture.append(...mapFrame());
  if (count > CANVAS_ABOVE) {
    box.replaceChildren(cellsOnCanvas(across, height), picture);
    box.style.position = "relative";
    picture.style.cssText = "position:absolute;inset:0";
  } else {
    picture.append(...cells.map(cellMark));
    box.replaceChildren(picture);
  }
  crossHairNode = svg("g", {}, ...crossHair());
  picture.append(crossHairNode);
  drawMapKey();
}

let crossHairNode = svg("g");

/** Follow the pointer; large maps only move the cross-hair. */
function hoverMap() {
  if (data.entries.name.length <= CANVAS_ABOVE) return drawMap();
  crossHairNode.replaceChildren(...crossHair());
}

function mapSentence() {
  const across = cells.filter((c) => c.kind === data.contacts.lattice).length;
  return `Map of contacts: ${cells.length - across} inside the molecule or assembly above the diagonal, ${across} only in the crystal below it. The numbers stand in the table of sites.`;
}

function mapFrame() {
  const { size, left, top, cell } = mapPlan;
  const nodes = [];
  const step = [10, 20, 50, 100, 200, 500].find((s) => s * cell >= 32) || 1000;
  data.entries.number.forEach((number, e) => {
    if (number % step !== 0 || data.entries.insertion[e]) return;
    const at = (e + 0.5) * cell;
    nodes.push(svg("path", { d: `M${short(left + at)} ${top}v${size}M${left} ${short(top + at)}h${size}`, class: "grid" }));
    const [x, y] = [svgText(minus(number), left + at, top - 5, "tick", "middle"), svgText(minus(number), left - 5, top + at + 4, "tick", "end")];
    nodes.push(x, y);
  });
  for (const chain of data.chains.slice(1)) {
    const at = chain.first * cell;
    nodes.push(svg("path", { d: `M${short(left + at)} ${top}v${size}M${left} ${short(top + at)}h${size}`, class: "axis" }));
  }
  const lower = `M${left} ${top}L${left + size} ${top + size}`;
  const edge = hasLattice() ? `M${left} ${top}h${size}v${size}h${-size}Z` : `M${left} ${top}h${size}v${size}Z`;
  nodes.push(svg("path", { d: edge + lower, class: "axis", fill: "none" }));
  return nodes;
}

function hasLattice() {
  return cells.some((c) => c.kind === data.contacts.lattice);
}

/** @param {{row: number, column: number}} cell */
function isFaint(cell) {
  const small = data.entries.name.length <= CANVAS_ABOVE;
  const focus = small && state.hovered >= 0 ? new Set([state.hovered]) : state.chosen;
  if (!focus.size) return false;
  if (state.unit >= 0 && state.hovered < 0) return !(focus.has(cell.row) && focus.has(cell.column));
  return !(focus.has(cell.row) || focus.has(cell.column));
}

/** @param {{row: number, column: number, unit: number, kind: number, contact: number}} cell */
function cellMark(cell) {
  const { left, top, cell: size } = mapPlan;
  const across = cell.kind === data.contacts.lattice;
  const r = (Math.max(2.2, size * 0.86) * (cell.unit >= 0 ? 1.3 : 1)) / 2;
  const x = left + (cell.column + 0.5) * size;
  const y = top + (cell.row + 0.5) * size;
  const colour = cell.unit >= 0 ? unitColour(cell.unit) : tokens.quiet;
  const hollow = across && cell.unit < 0;
  const group = svg("g", { opacity: isFaint(cell) ? 0.3 : undefined, "data-contact": cell.contact });
  group.append(svg("rect", { x: short(x - r), y: short(y - r), width: short(2 * r), height: short(2 * r), fill: hollow ? tokens.paper : colour, stroke: hollow ? colour : "none", "stroke-width": hollow ? 0.9 : 0 }));
  if (cell.kind === data.contacts.complex) {
    group.append(svg("circle", { cx: short(x), cy: short(y), r: short(r * 0.42), fill: tokens.paper }));
  }
  return group;
}

/** @param {number} width @param {number} height */
function cellsOnCanvas(width, height) {
  const canvas = /** @type {HTMLCanvasElement} */ (element("canvas", { width: 2 * width, height: 2 * height, "aria-hidden": "true" }));
  canvas.style.cssText = `width:${width}px;height:${height}px`;
  const pen = canvas.getContext("2d");
  if (!pen) return canvas;
  pen.scale(2, 2);
  const { left, top, cell: size } = mapPlan;
  for (const cell of cells) {
    const r = Math.max(0.8, size * 0.9) * (cell.unit >= 0 ? 1.3 : 1);
    pen.globalAlpha = isFaint(cell) ? 0.3 : 1;
    pen.fillStyle = cell.unit >= 0 ? unitColour(cell.unit) : tokens.quiet;
    pen.fillRect(left + (cell.column + 0.5) * size - r / 2, top + (cell.row + 0.5) * size - r / 2, r, r);
  }
  return canvas;
}

function crossHair() {
  const { size, left, top, cell } = mapPlan;
  const at = state.hovered >= 0 ? state.hovered : state.unit < 0 && state.chosen.size === 1 ? [...state.chosen][0] : -1;
  if (at < 0) return [];
  const place = short((at + 0.5) * cell);
  return [svg("path", { d: `M${left + place} ${top}v${size}M${left} ${top + place}h${size}`, stroke: tokens.ink, "stroke-width": 0.8, fill: "none", "pointer-events": "none" })];
}

function drawMapKey() {
  const sign = (/** @type {Record<string, any>} */ how, /** @type {boolean} */ dot) => {
    const made = svg("svg", { width: 12, height: 10 }, svg("rect", { x: 2, y: 1.5, width: 7, height: 7, ...how }));
    if (dot) made.append(svg("circle", { cx: 5.5, cy: 5, r: 1.6, fill: tokens.paper }));
    return made;
  };
  const row = (/** @type {Node} */ mark, /** @type {string} */ text) => element("span", { class: "item" }, mark, text);
  const nodes = [row(sign({ fill: tokens.quiet }, false), "above the line: inside the molecule")];
  if (cells.some((c) => c.kind === data.contacts.complex)) nodes.push(row(sign({ fill: tokens.quiet }, true), "with a dot: between parts of the assembly"));
  if (hasLattice()) nodes.push(row(sign({ fill: "none", stroke: tokens.quiet }, false), "below it: only in the crystal"));
  byId("key-e").replaceChildren(...nodes);
}

function listenToMap() {
  const box = byId("map");
  const under = (/** @type {MouseEvent} */ event) => {
    const rect = box.getBoundingClientRect();
    const column = Math.floor((event.clientX - rect.left - mapPlan.left) / mapPlan.cell);
    const row = Math.floor((event.clientY - rect.top - mapPlan.top) / mapPlan.cell);
    const count = data.entries.name.length;
    return column >= 0 && row >= 0 && column < count && row < count ? { row, column } : null;
  };
  const nearest = (/** @type {{row: number, column: number}} */ at) => {
    const reach = Math.max(1, 3 / mapPlan.cell);
    const close = cells.filter((c) => Math.abs(c.row - at.row) <= reach && Math.abs(c.column - at.column) <= reach);
    close.sort((a, b) => Math.hypot(a.row - at.row, a.column - at.column) - Math.hypot(b.row - at.row, b.column - at.column));
    return close[0];
  };
  box.addEventListener("pointermove", (event) => {
    const at = event.pointerType === "touch" ? null : under(event);
    const cell = at && nearest(at);
    hover(at ? at.row : -1);
    if (cell) showTip(contactTip(cell.contact), event.clientX, event.clientY);
    else hideTip();
  });
  box.addEventListener("pointerleave", () => {
    hover(-1);
    hideTip();
  });
  box.addEventListener("click", (event) => {
    const at = under(event);
    const cell = at && nearest(at);
    if (cell) choose([cell.row, cell.column].sort((a, b) => a - b), -1, cell.row);
    else if (at) chooseEntry(at.row, event);
  });
}
