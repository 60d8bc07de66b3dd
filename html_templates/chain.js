// Part c: a column a residue, along the measured chains.

const WIDEST = 26;
const COMFORTABLE = 15;
const NARROWEST = 9;
const ROWS_AT_MOST = 4;
const LABELS = 44;

/** @type {Map<number, {pick: SVGElement, letter: SVGElement, option: SVGElement}>} */
const columns = new Map();

function drawChain() {
  columns.clear();
  const box = byId("chain");
  const labels = innerWidth <= 760 && !state.printing ? 30 : LABELS;
  const width = box.clientWidth - labels;
  const plans = data.chains.map((chain) => ({ chain, ...planRows(chain.count, width) }));
  const total = plans.reduce((sum, plan) => sum + plan.rows, 0);
  const tall = total === 1 && (innerWidth > 760 || state.printing);
  const scrolling = total > ROWS_AT_MOST && !state.printing && plans.some((p) => p.rows > ROWS_AT_MOST || total > 8);
  const nodes = [];
  if (scrolling) nodes.push(overviewLine(box.clientWidth, labels));
  for (const plan of plans) {
    if (plans.length > 1) nodes.push(element("div", { class: "block-name", "aria-hidden": "true" }, `chain ${plan.chain.name}`));
    for (let row = 0; row < plan.rows; row++) {
      const first = plan.chain.first + row * plan.perRow;
      const count = Math.min(plan.perRow, plan.chain.first + plan.chain.count - first);
      nodes.push(chainRow({ first, count, column: plan.column, labels, bars: tall ? 78 : 56, last: plan.chain.first + plan.chain.count, lead: row === 0 }));
    }
  }
  box.classList.toggle("scrolling", scrolling);
  box.replaceChildren(...nodes);
  markColumns();
  drawChainHead();
}

/** @param {number} count @param {number} width */
function planRows(count, width) {
  const narrowest = state.printing ? NARROWEST : COMFORTABLE;
  let rows = Math.ceil((count * narrowest) / width);
  if (rows > ROWS_AT_MOST) rows = Math.max(ROWS_AT_MOST, Math.ceil((count * NARROWEST) / width));
  rows = Math.max(1, rows);
  const perRow = Math.ceil(count / rows);
  return { rows, perRow, column: Math.min(WIDEST, width / perRow) };
}

/** @param {number} e the first unit whose edge it stands at, -1 for none */
function nearUnit(e) {
  const counts = new Map();
  for (const t of touches[e]) {
    const unit = t.entry >= 0 ? data.entries.unit[t.entry] : -1;
    if (unit >= 0) counts.set(unit, (counts.get(unit) || 0) + 1);
  }
  const best = [...counts].sort((a, b) => b[1] - a[1] || a[0] - b[0])[0];
  return best ? best[0] : -1;
}

/**
 * @param {{first: number, count: number, column: number, labels: number, bars: number, last: number, lead: boolean}} row
 */
function chainRow(row) {
  const { first, count, column, labels, bars } = row;
  const top = row.lead ? 17 : 12;
  const low = lowest();
  const y = (/** @type {number} */ v) => top + bars * (1 - (v - low) / (scale.high - low));
  const foot = top + bars;
  const crystal = data.contacts.kind.some((k) => k === data.contacts.lattice);
  const lines = { letter: foot + 13, number: foot + 25, secondary: foot + 37, unit: foot + 59, crystal: foot + 66 };
  const height = (crystal ? foot + 74 : foot + 62) + (bars < 78 ? 12 : 0);
  const width = labels + count * column;
  const picture = svg("svg", { width: short(width), height, class: "chain-row" });
  picture.append(...rowGround(row, y, width));
  if (row.lead && data.quantity.unit) picture.append(svgText(data.quantity.unit, labels - 6, 8, "tick", "end"));
  if (labels >= LABELS) {
    if (data.units.length) picture.append(svgText("unit", labels - 7, lines.unit - 3, "tick", "end"));
    if (crystal) picture.append(svgText("crystal", labels - 7, lines.crystal + 5, "tick", "end"));
  }
  for (let e = first; e < first + count; e++) {
    picture.append(chainColumn(e, labels + (e - first) * column, column, y, lines, height));
  }
  picture.append(svg("path", { d: `M${labels} ${short(y(0))}H${short(width)}`, class: "axis", "pointer-events": "none" }));
  picture.append(...cutAxis(row, y(0)), ...secondaryLine(row, lines.secondary));
  return picture;
}

/** Foot of the bars: zero, or lower where values or the baseline are. */
function lowest() {
  const band = data.quantity.band;
  const foot = band ? Math.max(band[0], -0.15 * scale.high) : 0;
  return Math.min(0, scale.low, foot);
}

/** @param {{labels: number, lead: boolean}} row @param {(v: number) => number} y @param {number} width */
function rowGround(row, y, width) {
  const nodes = [];
  const band = data.quantity.band;
  if (band) {
    const [bottom, from] = [Math.max(band[0], lowest()), Math.min(scale.high, band[1])];
    nodes.push(svg("rect", { x: row.labels, y: short(y(from)), width: short(width - row.labels), height: short(Math.max(2, y(bottom) - y(from))), fill: tokens.band }));
  }
  for (const tick of ticksBetween(scale.signed ? scale.low : Math.min(0, scale.low), scale.high, 2.4)) {
    const at = short(y(tick));
    if (tick !== 0) nodes.push(svg("path", { d: `M${row.labels} ${at}H${short(width)}`, class: "grid" }));
    nodes.push(svgText(tickText(tick), row.labels - 7, at + 4, "tick", "end"));
  }
  return nodes;
}

/** The axis is cut where nothing was measured. @param {{first: number, count: number, column: number, labels: number}} row @param {number} y */
function cutAxis(row, y) {
  const nodes = [];
  for (let e = row.first; e < row.first + row.count; e++) {
    if (isMeasured(e)) continue;
    const x = row.labels + (e - row.first) * row.column;
    nodes.push(svg("path", { d: `M${short(x + 0.5)} ${short(y)}h${short(row.column - 1)}`, stroke: tokens.paper, "stroke-width": 2.2, "pointer-events": "none" }));
  }
  return nodes;
}

/**
 * @param {number} e
 * @param {number} x
 * @param {number} column
 * @param {(v: number) => number} y
 * @param {{letter: number, number: number, secondary: number, unit: number, crystal: number}} lines
 * @param {number} height
 */
function chainColumn(e, x, column, y, lines, height) {
  const middle = x + column / 2;
  const pick = svg("rect", { x: short(x), y: 0, width: short(column), height: height - 4, fill: "transparent" });
  const option = svg("g", { role: "option", id: `column-${e}`, "data-entry": e, "aria-selected": "false", "aria-label": columnLabel(e) });
  option.append(pick, ...columnBar(e, x, column, y));
  const size = column < 14 ? Math.max(7.5, column - 0.5) : 12.5;
  const letter = svg(
    "text",
    { x: short(middle), y: lines.letter, "text-anchor": "middle", "font-size": size, "font-weight": isMeasured(e) ? 600 : 400, style: undefined },
    data.entries.letter[e],
  );
  letter.style.fill = isMeasured(e) ? tokens.ink : tokens.ink3;
  option.append(letter, ...columnNumber(e, middle, column, lines.number), ...columnUnit(e, x, column, lines.unit), ...columnCrystal(e, middle, column, lines.crystal));
  columns.set(e, { pick, letter, option });
  return option;
}

/** @param {number} e @param {number} x @param {number} column @param {(v: number) => number} y */
function columnBar(e, x, column, y) {
  const { value, error } = data.entries;
  const middle = x + column / 2;
  if (!isMeasured(e)) return [hatch(x + 1, y(0) - 13, column - 2, 13, tokens.quiet, column < 14 ? 4 : 5)];
  const v = Math.max(scale.low, Math.min(scale.high, Number(value[e])));
  const width = Math.max(4, Math.min(11, column * 0.55));
  const [from, to] = [Math.min(y(v), y(0)), Math.max(y(v), y(0))];
  const edged = state.colour === "value" || (data.entries.unit[e] % 6 >= 3 && !isDark());
  const nodes = [
    svg("rect", { x: short(middle - width / 2), y: short(from), width: short(width), height: short(Math.max(1, to - from)), fill: entryColour(e), stroke: edged ? tokens.ink : "none", "stroke-width": edged ? 0.6 : 0 }),
  ];
  const spread = error[e];
  if (spread) {
    const [a, b] = [Math.max(y(scale.high) - 3, y(v + spread)), Math.min(y(Math.min(scale.low, 0)) + 5, y(v - spread))];
    nodes.push(svg("path", { d: `M${short(middle)} ${short(a)}V${short(b)}`, stroke: tokens.ink, "stroke-width": 1, "stroke-dasharray": data.quantity.errorsGiven ? undefined : "2 2" }));
  }
  return nodes;
}

/** @param {number} e @param {number} middle @param {number} column @param {number} y */
function columnNumber(e, middle, column, y) {
  const { number, insertion } = data.entries;
  const narrow = column < 14;
  const before = e > 0 && data.entries.chain[e - 1] === data.entries.chain[e] && insertion[e - 1] !== "";
  const inserted = insertion[e] !== "";
  const first = data.chains.some((c) => c.first === e);
  const wanted = inserted ? !narrow || !before : number[e] % (narrow ? 10 : 5) === 0 || (first && !narrow);
  if (!wanted) return [];
  const text = inserted && before ? insertion[e] : `${number[e]}${insertion[e]}`;
  const made = svgText(minus(text), middle, y, "tick", "middle");
  made.setAttribute("font-size", "10");
  return [made];
}

/** @param {number} e @param {number} x @param {number} column @param {number} bottom */
function columnUnit(e, x, column, bottom) {
  const { unit } = data.entries;
  const p = certainty(e);
  if (unit[e] >= 0) {
    const height = Math.max(2, 11 * p);
    const colour = unitColour(unit[e]);
    const hollow = unit[e] >= SHAPES.length;
    const nodes = [svg("rect", { x: short(x), y: short(bottom - height), width: short(column + 0.2), height: short(height), fill: hollow ? tokens.paper : colour, stroke: hollow ? colour : "none", "stroke-width": hollow ? 1.2 : 0 })];
    if (height >= 6) {
      const r = Math.min(2.9, column / 3.6);
      nodes.push(svg("path", { d: markPath(shapeOf(unit[e]), x + column / 2, bottom - height / 2, r), fill: hollow ? colour : tokens.paper }));
    }
    return nodes;
  }
  if (p < 0.1) return [];
  const near = nearUnit(e);
  return near < 0 ? [] : [hatch(x, bottom - Math.max(3, 11 * p), column, Math.max(3, 11 * p), unitColour(near), 3.4, 1.3)];
}

/** @param {number} e @param {number} middle @param {number} column @param {number} y */
function columnCrystal(e, middle, column, y) {
  const numerals = [...new Set(touches[e].filter((t) => t.numeral).map((t) => t.numeral))];
  const unit = data.entries.unit[e];
  const step = Math.min(8, column / Math.max(1, numerals.length));
  return numerals.map((numeral, i) => {
    const x = middle + (i - (numerals.length - 1) / 2) * step;
    const joins = unit >= 0 && touches[e].some((t) => t.numeral === numeral && data.units[unit].contacts.includes(t.contact));
    const r = Math.min(3.8, column / 2.6);
    return svg("path", { d: `M${short(x - r)} ${y}h${short(2 * r)}l${short(-r)} ${short(1.6 * r)}Z`, fill: joins ? unitColour(unit) : tokens.ink3 });
  });
}

/** @param {{first: number, count: number, column: number, labels: number, last: number}} row @param {number} y */
function secondaryLine(row, y) {
  const { secondary } = data.entries;
  const nodes = [];
  for (let e = row.first; e < row.first + row.count; e++) {
    const kind = secondary[e];
    let end = e;
    while (end + 1 < row.first + row.count && secondary[end + 1] === kind && end + 1 < row.last) end++;
    const x1 = row.labels + (e - row.first) * row.column + 1;
    const x2 = row.labels + (end + 1 - row.first) * row.column - 1;
    const whole = end + 1 >= row.last || secondary[end + 1] !== kind;
    nodes.push(...secondaryPiece(kind, x1, x2, y, whole));
    e = end;
  }
  return nodes;
}

/** @param {string} kind @param {number} x1 @param {number} x2 @param {number} y @param {boolean} ends */
function secondaryPiece(kind, x1, x2, y, ends) {
  const line = { stroke: tokens.ink2, fill: "none", "pointer-events": "none" };
  if (kind === "H") {
    const waves = Math.max(1, Math.round((x2 - x1) / 13));
    const step = (x2 - x1) / waves / 2;
    let d = `M${short(x1)} ${y}`;
    for (let i = 0; i < 2 * waves; i++) d += `q${short(step / 2)} ${i % 2 ? 5.4 : -5.4} ${short(step)} 0`;
    return [svg("path", { d, ...line, "stroke-width": 1.5 })];
  }
  if (kind === "E") {
    const tip = ends ? 6 : 0;
    const nodes = [svg("path", { d: `M${short(x1)} ${y}H${short(x2 - tip + 1)}`, ...line, "stroke-width": 4 })];
    if (ends) nodes.push(svg("path", { d: `M${short(x2 - 6)} ${y - 5}L${short(x2)} ${y}L${short(x2 - 6)} ${y + 5}Z`, fill: tokens.ink2, "pointer-events": "none" }));
    return nodes;
  }
  return [svg("path", { d: `M${short(x1)} ${y}H${short(x2)}`, ...line, stroke: tokens.rule2, "stroke-width": 1 })];
}

/** The whole chain in one line, above rows that scroll. @param {number} width @param {number} labels */
function overviewLine(width, labels) {
  const count = data.entries.name.length;
  const step = (width - labels) / count;
  const picture = svg("svg", { width, height: 30, class: "chain-overview", "aria-hidden": "true" });
  data.entries.value.forEach((v, e) => {
    if (v === null) return;
    const h = Math.max(0.6, (24 * Math.abs(v)) / Math.max(scale.high, -scale.low));
    picture.append(svg("rect", { x: short(labels + e * step), y: short(27 - h), width: short(Math.max(0.7, step * 0.8)), height: short(h), fill: entryColour(e), "data-entry": e }));
  });
  picture.append(svg("path", { d: `M${labels} 27H${width}`, class: "axis" }));
  picture.style.cssText = `position:sticky;top:0;background:${tokens.paper}`;
  return picture;
}

/** @param {number} e */
function columnLabel(e) {
  if (!isMeasured(e)) return `${longName(e)}, not measured`;
  const { value, error, unit } = data.entries;
  const spread = error[e] === null ? "" : ` plus or minus ${fixed(error[e])}`;
  const where = unit[e] >= 0 ? `, ${data.units[unit[e]].name}` : "";
  const crystal = touches[e].some((t) => t.numeral) ? ", touches a crystal neighbour" : "";
  return `${longName(e)}, ${fixed(value[e])}${spread}${where}${crystal}`;
}

function drawChainHead() {
  const { quantity } = data;
  byId("about-c").replaceChildren(...rich(quantity.about === quantity.name ? quantity.name : `${quantity.name}, ${quantity.about}`));
  const item = (/** @type {Node} */ sign, /** @type {string} */ text) => element("span", { class: "item" }, sign, text);
  const box = (/** @type {Node[]} */ ...inner) => {
    const made = svg("svg", { width: 20, height: 10 });
    made.append(...inner);
    return made;
  };
  const nodes = [];
  if (quantity.band) nodes.push(item(box(svg("rect", { x: 2, y: 2.5, width: 16, height: 6, fill: tokens.band })), "baseline of the molecule"));
  if (data.entries.value.some((v) => v === null)) nodes.push(item(box(hatch(4, 0, 14, 10, tokens.quiet)), "not measured"));
  if (touches.some((list) => list.some((t) => t.numeral))) {
    nodes.push(item(box(svg("path", { d: "M9 2h9l-4.5 6.5Z", fill: tokens.ink3 })), "touches a crystal neighbour"));
  }
  byId("key-c").replaceChildren(...nodes);
}

/** Show what is chosen, what the pointer is over, and where the keys stand. */
function markColumns() {
  for (const e of new Set([...markedColumns, ...state.chosen])) markColumn(e);
  markedColumns = new Set(state.chosen);
  const box = byId("chain");
  if (columns.has(state.cursor)) box.setAttribute("aria-activedescendant", `column-${state.cursor}`);
}

/** @type {Set<number>} */
let markedColumns = new Set();
let hoveredColumn = -1;

/** @param {number} e */
function markColumn(e) {
  const column = columns.get(e);
  if (!column) return;
  const chosen = state.chosen.has(e);
  column.pick.style.fill = chosen ? "var(--pick)" : e === state.hovered ? "var(--wash)" : "transparent";
  column.letter.style.textDecoration = chosen ? "underline" : "";
  column.option.setAttribute("aria-selected", String(chosen));
}

function hoverColumn() {
  markColumn(hoveredColumn);
  hoveredColumn = state.hovered;
  markColumn(hoveredColumn);
}

/** @param {Event} event @returns {number} */
function entryUnder(event) {
  const found = /** @type {Element} */ (event.target).closest?.("[data-entry]");
  return found ? Number(found.getAttribute("data-entry")) : -1;
}

function listenToChain() {
  const box = byId("chain");
  box.addEventListener("click", (event) => {
    const e = entryUnder(event);
    if (e >= 0) chooseEntry(e, event);
  });
  box.addEventListener("pointerover", (event) => {
    if (event.pointerType !== "touch") hover(entryUnder(event));
  });
  box.addEventListener("pointerleave", () => hover(-1));
  box.addEventListener("keydown", (event) => {
    const steps = /** @type {Record<string, number>} */ ({ ArrowLeft: -1, ArrowRight: 1, ArrowUp: -1, ArrowDown: 1, Home: -1e9, End: 1e9 });
    if (event.key === "Enter" || event.key === " ") {
      event.preventDefault();
      chooseEntry(state.cursor, event);
    } else if (event.key in steps) {
      event.preventDefault();
      const to = Math.max(0, Math.min(data.entries.name.length - 1, state.cursor + steps[event.key]));
      state.cursor = to;
      if (event.shiftKey) chooseEntry(to, { shiftKey: true });
      else hover(to);
      markColumns();
      columns.get(to)?.option.scrollIntoView?.({ block: "nearest" });
    }
  });
  box.addEventListener("blur", () => hover(-1));
}
