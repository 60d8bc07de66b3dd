// Part f: the table of sites, searched, sorted and copied.

const DRAW_AS_SCROLLED_ABOVE = 1000;

/**
 * @typedef {object} Column
 * @property {string} key
 * @property {string} head
 * @property {boolean} [numeric]
 * @property {(e: number) => number|string|null} value for sorting and copying
 * @property {(e: number) => Node} cell
 * @property {boolean} [drawn] left out in print and in the copy
 */

/** @type {Column[]} */
let siteColumns = [];
/** @type {number[]} */
let shownSites = [];
/** @type {string[]} words that the search looks through */
let searchText = [];
const order = { key: "residue", falling: false };

function prepareSites() {
  siteColumns = makeColumns();
  searchText = data.entries.name.map((_, e) => searchWords(e));
  orderSites();
}

/** @returns {Column[]} */
function makeColumns() {
  const { entries, quantity } = data;
  const name = quantity.unit ? `${quantity.name} (${quantity.unit})` : quantity.name;
  const number = (/** @type {(e: number) => string} */ text, /** @type {string} */ kind) => (/** @type {number} */ e) => element("td", { class: `number ${kind}` }, text(e));
  /** @type {Column[]} */
  const made = [
    { key: "residue", head: "residue", value: (e) => e, cell: nameCell },
    { key: "value", head: name, numeric: true, value: (e) => entries.value[e], cell: number((e) => (isMeasured(e) ? fixed(entries.value[e]) : "–"), "") },
    { key: "error", head: "±\u00a0error", numeric: true, value: (e) => entries.error[e], cell: number((e) => fixed(entries.error[e]), "soft") },
    { key: "axis", head: "on one axis", drawn: true, value: (e) => entries.value[e], cell: axisCell },
  ];
  data.columns.forEach((column, i) => {
    const head = column.unit ? `${column.name} (${column.unit})` : column.name;
    made.push({ key: `column${i}`, head, numeric: true, value: (e) => column.value[e], cell: number((e) => threeFigures(column.value[e]), "") });
  });
  if (data.profile) made.push({ key: "profile", head: "profile", drawn: true, value: (e) => entries.value[e], cell: profileCell });
  made.push({ key: "deviation", head: "errors\u00a0above baseline", numeric: true, value: (e) => entries.deviation[e], cell: number((e) => fixed(entries.deviation[e], 1), "") });
  if (data.units.length) made.push({ key: "unit", head: "unit", value: (e) => (entries.unit[e] < 0 ? null : entries.unit[e]), cell: unitCell });
  if (quantity.membershipKnown) made.push({ key: "membership", head: "membership", numeric: true, value: (e) => entries.membership[e], cell: number((e) => fixed(entries.membership[e], 2), "") });
  if (quantity.secondaryKnown) made.push({ key: "secondary", head: "helix, strand", value: (e) => secondaryName(e) || null, cell: (e) => element("td", { class: "soft" }, secondaryName(e)) });
  if (numbers(entries.exposed).length) made.push({ key: "exposed", head: "surface open\u00a0(%)", numeric: true, value: (e) => percent(entries.exposed[e]), cell: number((e) => fixed(percent(entries.exposed[e]), 0), "") });
  made.push({ key: "contacts", head: "residues touched", numeric: true, value: (e) => entries.contacts[e], cell: number((e) => String(entries.contacts[e]), "") });
  if (numbers(entries.mate).length) made.push({ key: "mate", head: "crystal mate\u00a0(Å)", numeric: true, value: (e) => entries.mate[e], cell: number((e) => fixed(entries.mate[e], 1), "") });
  if (hasLattice()) made.push({ key: "crystal", head: "across a crystal contact", value: (e) => kindsOf(e).lattice.length || null, cell: crystalCell });
  made.push({ key: "note", head: "note", value: (e) => entries.note[e] || null, cell: (e) => element("td", { class: "note" }, entries.note[e]) });
  return made;
}

/** @param {number} e */
function secondaryName(e) {
  return { H: "helix", E: "strand" }[data.entries.secondary[e]] || "";
}

/** @param {number|null} share */
function percent(share) {
  return share === null ? null : Math.round(1000 * share) / 10;
}

/** @param {number} e */
function nameCell(e) {
  const button = element("button", { type: "button", class: "name", "data-entry": e, "aria-pressed": state.chosen.has(e) }, longName(e));
  return element("th", { scope: "row" }, button);
}

/** @param {number} e */
function axisCell(e) {
  const { value, error, unit } = data.entries;
  const width = 122;
  const picture = svg("svg", { width, height: 16, "aria-hidden": "true" });
  const band = data.quantity.band;
  const low = Math.min(scale.low, band ? band[0] : 0);
  const x = (/** @type {number} */ v) => 2 + ((Math.max(low, Math.min(scale.high, v)) - low) / (scale.high - low)) * (width - 6);
  if (band) picture.append(svg("rect", { x: short(x(band[0])), y: 1, width: short(x(band[1]) - x(band[0])), height: 14, fill: tokens.band }));
  if (isMeasured(e)) {
    const v = Number(value[e]);
    const spread = error[e] || 0;
    const colour = entryColour(e, "unit");
    picture.append(svg("path", { d: `M${short(x(v - spread))} 8H${short(x(v + spread))}`, stroke: colour, "stroke-width": 1 }), markAt(unit[e], x(v), 8, 3, { fill: colour }));
  }
  return element("td", { class: "drawn" }, picture);
}

/** @type {number[]|null} */
let sparkRange = null;

/** @param {number} e */
function profileCell(e) {
  const profile = /** @type {Profile} */ (data.profile);
  const td = element("td", { class: "drawn" });
  const values = profile.value[e];
  if (!values) return td;
  sparkRange ||= profileRange(measuredEntries());
  const axes = axesIn(0, 1, 86, 16, sparkRange);
  const picture = svg("svg", { width: 86, height: 18, "aria-hidden": "true" });
  let d = "";
  values.forEach((v, p) => {
    if (v === null || !profile.kept[p]) return;
    const [x, y] = [short(axes.x(profile.x[p])), short(axes.y(v))];
    d += `${d ? "L" : "M"}${x} ${y}`;
    picture.append(svg("circle", { cx: x, cy: y, r: 1.1, fill: tokens.ink2 }));
  });
  picture.prepend(svg("path", { d, fill: "none", stroke: tokens.quiet, "stroke-width": 0.8 }));
  td.append(picture);
  return td;
}

/** @param {number} e */
function unitCell(e) {
  const unit = data.entries.unit[e];
  const td = element("td");
  if (unit >= 0) td.append(inlineMark(unit), `${data.units[unit].name}`);
  return td;
}

/** @param {number} e */
function crystalCell(e) {
  const td = element("td", { class: "crystal" });
  const by = new Map();
  for (const t of kindsOf(e).lattice) by.set(t.numeral, [...(by.get(t.numeral) || []), residueName(t)]);
  for (const [numeral, names] of by) {
    td.append(element("span", { class: "numeral" }, numeral), `\u00a0${names.join(" ")} `);
  }
  return td;
}

/** @param {number} e */
function searchWords(e) {
  const { name, unit, moves, note } = data.entries;
  const across = kindsOf(e).lattice.flatMap((t) => [t.numeral, residueName(t)]);
  const words = [name[e], longName(e), data.entries.number[e], entryKey(e), unit[e] >= 0 ? data.units[unit[e]].name : "", moves[e] ? "moves" : "", isMeasured(e) ? "measured" : "not measured", secondaryName(e), note[e], ...across];
  return words.join(" ").toLowerCase().replace(/\u00a0/g, " ");
}

/** Filter and sort; empty values come last either way. */
function orderSites() {
  const input = /** @type {HTMLInputElement} */ (byId("find"));
  const wanted = input.value.trim().toLowerCase().split(/\s+/).filter(Boolean);
  const fits = (/** @type {number} */ e) => {
    const words = searchText[e].split(/\s+/);
    return wanted.every((w) => (/^(u\d+|[ivx]+|\d+[a-z]?)$/.test(w) ? words.includes(w) : searchText[e].includes(w)));
  };
  shownSites = data.entries.name.map((_, e) => e).filter(fits);
  const column = siteColumns.find((c) => c.key === order.key) || siteColumns[0];
  const sign = order.falling ? -1 : 1;
  shownSites.sort((a, b) => {
    const [x, y] = [column.value(a), column.value(b)];
    if (x === null || y === null) return Number(x === null) - Number(y === null) || a - b;
    if (typeof x === "string" || typeof y === "string") return sign * String(x).localeCompare(String(y)) || a - b;
    return sign * (x - y) || a - b;
  });
}

function drawSites() {
  drawSiteHead();
  drawSiteRows();
  const measured = shownSites.filter(isMeasured).length;
  const count = shownSites.length;
  byId("count").textContent = `${count} residue${count === 1 ? "" : "s"}, ${measured} measured`;
}

function drawSiteHead() {
  const cells = siteColumns.map((column) => {
    const sorted = column.key === order.key;
    const arrow = sorted ? (order.falling ? "\u00a0↓" : "\u00a0↑") : "";
    const button = element("button", { type: "button", "data-key": column.key }, ...rich(column.head), arrow);
    const named = column.key === "note" || column.key === "crystal" ? column.key : "";
    const kind = `${column.numeric ? "number" : ""} ${column.drawn ? "drawn" : ""} ${named}`.trim();
    return element("th", { scope: "col", class: kind || undefined, "aria-sort": sorted ? (order.falling ? "descending" : "ascending") : undefined }, button);
  });
  byId("site-head").replaceChildren(element("tr", {}, ...cells));
}

function drawSiteRows() {
  const body = byId("site-rows");
  if (!shownSites.length) {
    const text = /** @type {HTMLInputElement} */ (byId("find")).value.trim();
    const example = data.entries.name.find((_, e) => isMeasured(e)) || "N31";
    const unit = data.units.length ? `, or ${data.units[0].name}` : "";
    const said = `No residue fits “${text}”. Try a number, a name such as ${example}${unit}.`;
    body.replaceChildren(element("tr", { class: "empty" }, element("td", { colspan: siteColumns.length }, said)));
    return;
  }
  const [from, to] = rowsInView();
  const rows = shownSites.slice(from, to).map(siteRow);
  const pad = (/** @type {number} */ n) => {
    const row = element("tr", { "aria-hidden": "true" });
    const cell = element("td", { colspan: siteColumns.length });
    cell.style.height = `${n * 24}px`;
    row.append(cell);
    return row;
  };
  if (from > 0) rows.unshift(pad(from));
  if (to < shownSites.length) rows.push(pad(shownSites.length - to));
  body.replaceChildren(...rows);
}

/** Past a thousand rows only those near the window are drawn. */
function rowsInView() {
  if (shownSites.length <= DRAW_AS_SCROLLED_ABOVE || state.printing) return [0, shownSites.length];
  const first = Math.max(0, Math.floor(byId("scroll").scrollTop / 24) - 20);
  return [first, Math.min(shownSites.length, first + 80)];
}

/** @param {number} e */
function siteRow(e) {
  const row = element("tr", { "data-entry": e });
  row.className = `${isMeasured(e) ? "" : "unmeasured"} ${state.chosen.has(e) ? "chosen" : ""}`.trim();
  row.append(...siteColumns.map((column) => column.cell(e)));
  return row;
}

/** Mark what is chosen and bring its first row into view. */
function markSites() {
  for (const row of byId("site-rows").children) {
    const e = Number(row.getAttribute("data-entry"));
    const chosen = row.hasAttribute("data-entry") && state.chosen.has(e);
    row.classList.toggle("chosen", chosen);
    row.querySelector("button")?.setAttribute("aria-pressed", String(chosen));
  }
  const first = shownSites.findIndex((e) => state.chosen.has(e));
  const box = byId("scroll");
  if (first >= 0) {
    const row = /** @type {HTMLElement|null} */ (box.querySelector(`tr[data-entry="${shownSites[first]}"]`));
    const at = row ? row.offsetTop : first * 24;
    if (at < box.scrollTop + 40 || at > box.scrollTop + box.clientHeight - 40) box.scrollTop = Math.max(0, at - 80);
  }
}

function listenToSites() {
  byId("site-head").addEventListener("click", (event) => {
    const key = /** @type {Element} */ (event.target).closest("button")?.getAttribute("data-key");
    const column = siteColumns.find((c) => c.key === key);
    if (!column) return;
    const firstFalling = Boolean(column.numeric) || column.key === "axis" || column.key === "profile" || column.key === "crystal";
    order.falling = order.key === column.key ? !order.falling : firstFalling;
    order.key = column.key;
    orderSites();
    drawSites();
    /** @type {HTMLElement|null} */ (byId("site-head").querySelector(`[data-key="${key}"]`))?.focus();
  });
  byId("site-rows").addEventListener("click", (event) => {
    const e = entryUnder(event);
    if (e >= 0) chooseEntry(e, event);
  });
  byId("site-rows").addEventListener("pointerover", (event) => {
    if (event.pointerType !== "touch") hover(entryUnder(event));
  });
  byId("site-rows").addEventListener("pointerleave", () => hover(-1));
  byId("find").addEventListener("input", () => {
    orderSites();
    byId("scroll").scrollTop = 0;
    drawSites();
  });
  byId("scroll").addEventListener("scroll", () => {
    if (shownSites.length > DRAW_AS_SCROLLED_ABOVE) drawSiteRows();
  });
  byId("copy-sites").addEventListener("click", (event) => {
    const copied = siteColumns.filter((c) => !c.drawn);
    const heads = copied.map((c) => plainText(c.head));
    const lines = shownSites.map((e) => copied.map((c) => copyCell(c, e)));
    copyLines([heads, ...lines], event);
  });
}

/** @param {Column} column @param {number} e */
function copyCell(column, e) {
  if (column.key === "residue") return longName(e);
  if (column.key === "unit") return data.entries.unit[e] < 0 ? "" : data.units[data.entries.unit[e]].name;
  if (column.key === "crystal") {
    return kindsOf(e).lattice.map((t) => `${t.numeral} ${residueName(t)} ${data.images[t.image]?.operator || ""} [${(data.images[t.image]?.shift || []).join(" ")}]`).join("; ");
  }
  return column.value(e);
}
