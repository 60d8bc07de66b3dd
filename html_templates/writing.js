// The writing over the picture: names, contacts, rings; and the picture drawn flat.

/**
 * Draw rings and writing anew.
 * @param {boolean} place find places anew, or keep the last ones
 */
function drawOverlay(place) {
  const over = byId("over");
  const nodes = [];
  if (state.flat) nodes.push(drawFlat());
  const seen = beads.map((bead) => ({ bead, ...project(bead.at), r: bead.radius * pixelsPerAngstrom() }));
  const obstacles = findObstacles(seen);
  const names = [...unitNames(seen, obstacles), ...residueNames(seen, obstacles)];
  nodes.push(...rings(seen), ...contactNames(obstacles, place), ...distances(obstacles), ...names);
  over.setAttribute("viewBox", `0 0 ${view.width} ${view.height}`);
  over.replaceChildren(...nodes);
}

/** @param {{bead: Bead, x: number, y: number, z: number, r: number}[]} seen @returns {Obstacles} */
function findObstacles(seen) {
  const shown = seen.filter((s) => beadShown(s.bead));
  const joining = shownDashes().filter((s) => s.dash.unit >= 0);
  return {
    beads: shown.map(({ x, y, r }) => ({ x, y, r })),
    dashes: joining.flatMap((s) => samples(s.ends, 9)),
    own: threadPoints(-1),
    mates: state.neighbours ? data.images.flatMap((_, i) => threadPoints(i)) : [],
    taken: [],
  };
}

/** @type {Map<number, number[][]>} */
const threadPointsNow = new Map();
let threadPointsView = "";

/** Where the thread runs on the screen, found once for each view. @param {number} image */
function threadPoints(image) {
  if (threadPointsView !== viewText()) threadPointsNow.clear();
  threadPointsView = viewText();
  let found = threadPointsNow.get(image);
  if (!found) threadPointsNow.set(image, (found = findThreadPoints(image)));
  return found;
}

/** @param {number} image */
function findThreadPoints(image) {
  const ranges = image < 0 ? [[0, data.residues.name.length]] : data.images[image].drawn;
  const points = [];
  for (const [from, to] of ranges) {
    const step = to - from > 600 ? 3 : 1;
    for (let r = from; r < to; r += step) {
      const p = project(residueAt(r, image));
      if (p.x > 0 && p.x < view.width && p.y > 0 && p.y < view.height) points.push([p.x, p.y]);
    }
  }
  return points;
}

/**
 * The name of each unit at its largest bead.
 * @param {{bead: Bead, x: number, y: number, r: number}[]} seen
 * @param {Obstacles} obstacles
 */
function unitNames(seen, obstacles) {
  if (state.chosen.size) return [];
  return data.units.flatMap((unit, u) => {
    const own = seen.filter((s) => s.bead.image < 0 && data.entries.unit[s.bead.entry] === u);
    if (!own.length) return [];
    const largest = own.reduce((a, b) => (b.bead.radius > a.bead.radius ? b : a));
    const at = besideBead(largest, textWidth(unit.name), obstacles);
    return [svgText(unit.name, at.x, at.y, "name")];
  });
}

/**
 * Names of the chosen residues, up to 16, and of the one under the pointer.
 * @param {{bead: Bead, x: number, y: number, r: number}[]} seen
 * @param {Obstacles} obstacles
 */
function residueNames(seen, obstacles) {
  const wanted = new Set(state.chosen.size <= 16 ? state.chosen : []);
  if (state.hovered >= 0) wanted.add(state.hovered);
  const nodes = [];
  const named = new Set();
  for (const s of seen) {
    if (!wanted.has(s.bead.entry) || !beadStands(s.bead)) continue;
    const mate = s.bead.image >= 0;
    if (mate && (!state.neighbours || state.unit < 0)) continue;
    named.add(s.bead.entry);
    const text = data.residues.name[s.bead.residue] + (mate ? "′" : "");
    const at = besideBead(s, textWidth(text), obstacles);
    nodes.push(svgText(text, at.x, at.y, mate ? "mate-name" : "name"));
  }
  for (const e of wanted) {
    if (named.has(e)) continue;
    const p = project(residueAt(data.entries.residue[e]));
    const at = besideBead({ ...p, r: 6 }, textWidth(data.entries.name[e]), obstacles);
    nodes.push(svgText(data.entries.name[e], at.x, at.y, "name"));
  }
  return nodes;
}

/** @param {{bead: Bead, x: number, y: number, r: number}[]} seen */
function rings(seen) {
  const nodes = [];
  const ringed = new Set();
  for (const s of seen) {
    const chosen = state.chosen.has(s.bead.entry);
    const hovered = s.bead.entry === state.hovered;
    const stands = beadStands(s.bead) && (s.bead.image < 0 || s.bead.laid !== undefined);
    if (!stands || !(chosen || hovered)) continue;
    ringed.add(s.bead.entry);
    nodes.push(...ring(s.x, s.y, s.r + 3, chosen ? 1.6 : 1, ""));
  }
  for (const e of new Set([...state.chosen, state.hovered])) {
    if (e < 0 || ringed.has(e)) continue;
    const p = project(residueAt(data.entries.residue[e]));
    nodes.push(...ring(p.x, p.y, 7, state.chosen.has(e) ? 1.6 : 1, "3 2.5"));
  }
  return nodes;
}

/**
 * Numeral, operator and shift at each contact that joins a unit.
 * @param {Obstacles} obstacles
 * @param {boolean} place
 */
function contactNames(obstacles, place) {
  if (laidOut()) return laidNames(obstacles, place);
  /** @type {Map<number, {dash: Dash, ends: number[][]}[]>} */
  const sides = new Map();
  for (const shown of shownDashes()) {
    if (shown.dash.unit < 0) continue;
    const list = sides.get(shown.dash.image) || [];
    list.push(shown);
    sides.set(shown.dash.image, list);
  }
  return [...sides].flatMap(([image, list]) => contactName(image, list, obstacles, place));
}

/**
 * @param {number} image
 * @param {{dash: Dash, ends: number[][]}[]} list
 * @param {Obstacles} obstacles
 * @param {boolean} place
 * @param {string} [numeral]
 */
function contactName(image, list, obstacles, place, numeral = data.contacts.numeral[list[0].dash.contact]) {
  const { printed, shift } = image < 0 ? { printed: "x, y, z", shift: [0, 0, 0] } : imageOf(image);
  const shifts = `(${shift.map(minus).join(" ")})`;
  const oneLine = view.width >= 620;
  const lines = oneLine ? [`${printed}  ${shifts}`] : [printed, shifts];
  return placedName(`${image}`, numeral, lines, list.flatMap((s) => samples(s.ends, 9)), obstacles, place);
}

// Lengths of the dashes, written above them in the close look.
/** @param {Obstacles} obstacles */
function distances(obstacles) {
  if (!state.sides || !state.chosen.size) return [];
  const length = (/** @type {{dash: Dash}} */ s) => data.contacts.distance[s.dash.contact];
  const own = shownDashes().filter((s) => (state.unit >= 0 ? s.dash.unit === state.unit : s.colour === tokens.ink || s.radius === 0.09));
  const nodes = [];
  for (const s of own.sort((p, q) => length(p) - length(q))) {
    const [a, b] = s.ends.map(project);
    const [x, y] = [(a.x + b.x) / 2, (a.y + b.y) / 2 - 5];
    const box = { x: x - 18, y: y - 11, w: 36, h: 13 };
    const free = obstacles.taken.every((t) => box.x > t.x + t.w || box.x + box.w < t.x || box.y > t.y + t.h || box.y + box.h < t.y);
    if (!free) continue;
    obstacles.taken.push(box);
    nodes.push(svgText(`${length(s).toFixed(1)}\u00a0Å`, x, y, "distance", "middle"));
  }
  return nodes;
}

// --- flat ---

/** The opening view as threads, beads and dashes in the order of their depth. */
function drawFlat() {
  const group = svg("g", { class: "flat" });
  const reach = data.view.depth + 4;
  /** @type {{z: number, node: SVGElement}[]} */
  const items = [];
  const fade = (/** @type {number} */ z) => 0.34 * Math.max(0, Math.min(1, 0.5 - z / (2 * reach)));
  if (state.neighbours) data.images.forEach((_, i) => threadPieces(i, tokens.mate, 1.6, -60));
  for (const { image, ranges, colour, width } of laidStretches()) threadPieces(image, colour, 11 * width, -20, ranges);
  threadPieces(-1, tokens.thread, 4.5, 0);
  for (const { dash, colour, radius, ends } of shownDashes()) {
    if (dash.unit < 0 && !state.chosen.size) continue;
    const [a, b] = ends.map(project);
    items.push({
      z: (a.z + b.z) / 2,
      node: svg("path", {
        d: `M${short(a.x)} ${short(a.y)}L${short(b.x)} ${short(b.y)}`,
        stroke: colour,
        "stroke-width": radius > 0.15 ? 2.4 : 1.4,
        "stroke-dasharray": "5 3",
        fill: "none",
      }),
    });
  }
  for (const bead of beads) {
    if (!beadShown(bead)) continue;
    const p = project(bead.at);
    const r = bead.radius * pixelsPerAngstrom();
    items.push({
      z: p.z + 0.5,
      node: svg("circle", { cx: short(p.x), cy: short(p.y), r: short(r), fill: mix(bead.colour, fade(p.z)), stroke: tokens.paper, "stroke-width": 1 }),
    });
  }
  items.sort((a, b) => a.z - b.z);
  group.append(...items.map((item) => item.node));
  return group;

  /** @param {number} image @param {string} colour @param {number} width @param {number} lower @param {number[][]} [ranges] */
  function threadPieces(image, colour, width, lower, ranges = image < 0 ? [[0, data.residues.name.length]] : data.images[image].drawn) {
    for (const [from, to] of ranges) {
      for (let r = from + 1; r < to; r++) {
        if (data.residues.chain[r] !== data.residues.chain[r - 1]) continue;
        const [pa, pb] = [residueAt(r - 1, image), residueAt(r, image)];
        if (Math.hypot(pa[0] - pb[0], pa[1] - pb[1], pa[2] - pb[2]) > 9) continue;
        const [a, b] = [project(pa), project(pb)];
        const z = (a.z + b.z) / 2;
        items.push({
          z: z + lower,
          node: svg("path", { d: `M${short(a.x)} ${short(a.y)}L${short(b.x)} ${short(b.y)}`, stroke: mix(colour, fade(z)), "stroke-width": width, "stroke-linecap": "round", fill: "none" }),
        });
      }
    }
  }
}

// --- the legend ---

function drawLegend() {
  const rows = [];
  const { quantity } = data;
  /** @param {string} colour @param {number} r */
  const dot = (colour, r) => svg("svg", { width: 2 * r + 1, height: 2 * r + 1 }, svg("circle", { cx: r + 0.5, cy: r + 0.5, r, fill: colour }));
  const thread = svg("svg", { width: 22, height: 8 }, svg("path", { d: "M1 5C4 0 8 0 11 4S18 8 21 3", stroke: tokens.thread, "stroke-width": 2.4, fill: "none" }));
  if (state.colour === "value") {
    rows.push(valueLegend());
    rows.push(element("div", {}, item(thread, ["no bead: not measured"])));
  } else {
    const first = element("div");
    if (data.entries.moves.some((m, e) => m && data.entries.unit[e] < 0)) {
      first.append(item(dot(tokens.ink2, 4.5), ["moves, in no unit"]));
    }
    if (data.entries.moves.some((m, e) => !m && isMeasured(e) && data.entries.unit[e] < 0)) {
      first.append(item(dot(tokens.quiet, 3.5), ["baseline"]));
    }
    const what = state.colour === "membership" ? ["membership"] : rich(sizedByDistance() ? `${quantity.name} from the baseline` : quantity.name);
    rows.push(first, element("div", {}, item(thread, ["no bead: not measured; bead size: ", ...what])));
  }
  if (state.flat) {
    rows.push(element("div", {}, "Drawn flat: this browser offers no WebGL, so the picture cannot be turned."));
  }
  byId("legend").replaceChildren(...rows);

  /** @param {Node} sign @param {(Node|string)[]} words */
  function item(sign, words) {
    return element("span", { class: "item" }, sign, element("span", {}, ...words));
  }
}

function valueLegend() {
  const { quantity } = data;
  const width = 168;
  const band = quantity.band;
  const centre = scale.signed && band ? (band[0] + band[1]) / 2 : 0;
  const reach = Math.max(scale.high - centre, centre - scale.low);
  const [low, high] = scale.signed ? [centre - reach, centre + reach] : [0, scale.high];
  const steps = 48;
  const bar = svg("svg", { width: width + 12, height: 27 });
  for (let i = 0; i < steps; i++) {
    const colour = valueColour(low + ((i + 0.5) / steps) * (high - low));
    bar.append(svg("rect", { x: (i * width) / steps, y: 1, width: width / steps + 0.4, height: 8, fill: colour }));
  }
  bar.append(svg("rect", { x: 0.5, y: 1, width: width - 1, height: 8, fill: "none", stroke: tokens.ink, "stroke-width": 0.6 }));
  for (const tick of ticksBetween(low, high, 4)) {
    const x = ((tick - low) / (high - low)) * width;
    bar.append(svgText(tickText(tick), Math.max(3, x), 22, "tick", x < 6 ? "start" : "middle"));
  }
  const name = quantity.unit ? `${quantity.name} (${quantity.unit})` : quantity.name;
  const note = scale.signed ? "; blue below, brown above the baseline (vik)" : "";
  return element("div", {}, element("span", {}, ...rich(name + note), bar));
}
