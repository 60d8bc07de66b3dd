// One shared value for a unit: chi-square against it (part b), its interval (part d).

/** The fit of a unit, where one was made. @param {number} unit @returns {UnitFit|null} */
function fitOf(unit) {
  return (unit >= 0 && data.fits[unit]) || null;
}

/** @param {UnitFit} fit @param {number} value */
function onAxis(fit, value) {
  return fit.log ? Math.log10(value) : value;
}

/** @param {UnitFit} fit */
function parameterTitle(fit) {
  return fit.unit ? `${fit.parameter} (${fit.unit})` : fit.parameter;
}

/** Round ticks of a shared value. @param {UnitFit} fit @param {number} low @param {number} high @param {number} wanted */
function valueTicks(fit, low, high, wanted) {
  return fit.log && high / low > 6 ? logTicks(low, high, wanted) : ticksBetween(low, high, wanted);
}

/**
 * Interval as a bar with the unit's mark, residues alone as strokes; hollow marks, one a
 * residue, where one value is not enough. An open end runs to the edge as an arrow.
 * @param {number} unit
 * @param {{x: (v: number) => number, left: number, right: number, y: number}} at
 */
function intervalMarks(unit, { x, left, right, y }) {
  const fit = /** @type {UnitFit} */ (fitOf(unit));
  const colour = unitColour(unit);
  const free = numbers(fit.free).filter((v) => x(v) >= left - 1 && x(v) <= right + 1);
  if (fit.verdict === "distinct") {
    return free.map((v) => markAt(unit, x(v), y, 3.4, { fill: colour, hollow: true }));
  }
  const [openLow, openHigh] = fit.open;
  const from = fit.low === null ? left : Math.max(left, x(fit.low));
  const to = fit.high === null ? right : Math.min(right, x(fit.high));
  const bar = svg("path", { d: `M${short(from)} ${y}H${short(to)}`, stroke: colour, "stroke-width": 3, class: "interval" });
  const nodes = free.map((v) => svg("path", { d: `M${short(x(v))} ${y - 5}v10`, stroke: tokens.quiet, "stroke-width": 1, class: "alone" }));
  nodes.push(bar);
  if (openLow) nodes.push(arrowHead(left, y, -1, colour));
  if (openHigh) nodes.push(arrowHead(right, y, 1, colour));
  const told = fit.verdict === "shared" || fit.verdict === "shared by a subset";
  if (fit.value !== null) nodes.push(markAt(unit, x(fit.value), y, 4.2, { fill: colour, hollow: !told }));
  return nodes;
}

/** @param {number} x @param {number} y @param {number} side @param {string} colour */
function arrowHead(x, y, side, colour) {
  return svg("path", { d: `M${short(x + 5 * side)} ${y}l${-6 * side} -4v8Z`, fill: colour, class: "open-end" });
}

// --- chi-square against the shared value ---

/**
 * @param {number} unit
 * @param {{top: number, width: number, height: number}} place
 */
function misfitFigure(unit, place) {
  const fit = /** @type {UnitFit} */ (fitOf(unit));
  const wide = Math.round(place.width * (place.width < 420 ? 0.5 : 0.58));
  const figure = element("figure", { class: "misfit" });
  figure.style.cssText = `left:0;top:${place.top}px;width:${place.width}px;height:${place.height}px`;
  const about = `Chi-square against one ${plainText(fit.parameter)} for all residues of ${data.units[unit].name}. ${fit.figures}`;
  const high = place.height - 7;
  const picture = svg("svg", { width: wide, height: high, role: "img", "aria-label": about });
  picture.append(...misfitDrawing(unit, wide, high));
  const lines = fit.caption.map((line) => element("span", {}, ...rich(line)));
  figure.append(picture, element("figcaption", {}, ...lines));
  return figure;
}

/** @param {number} unit @param {number} width @param {number} height */
function misfitDrawing(unit, width, height) {
  const fit = /** @type {UnitFit} */ (fitOf(unit));
  const rejected = fit.verdict === "distinct";
  const [left, right, top, bottom] = [34, width - 14, 18, height - 36];
  const ends = [fit.x[0], fit.x[fit.x.length - 1]].map((v) => onAxis(fit, v));
  const pad = 0.03 * (ends[1] - ends[0]);
  const x = (/** @type {number} */ v) => left + ((onAxis(fit, v) - ends[0] + pad) / (ends[1] - ends[0] + 2 * pad)) * (right - left);
  const [low, high] = misfitRange(fit);
  const y = (/** @type {number} */ v) => bottom - 16 - ((v - low) / (high - low)) * (bottom - 16 - top);
  const nodes = [svgText(`χ², one ${fit.parameter} for all`, left, 10, "faint")];
  for (const tick of ticksBetween(low, high, Math.max(2, (bottom - top) / 34))) {
    nodes.push(svg("path", { d: `M${left} ${short(y(tick))}H${right}`, class: "grid" }));
    nodes.push(svgText(tickText(tick), left - 6, y(tick) + 4, "tick", "end"));
  }
  const atLeft = fit.open[1] && !fit.open[0];
  nodes.push(...levelLine(y(fit.each), { left, right, atLeft, text: "each alone", limit: false }));
  if (!rejected) nodes.push(...levelLine(y(fit.limit), { left, right, atLeft: false, text: "95\u00a0%", limit: true }));
  for (const v of rejected ? [fit.best] : [fit.low, fit.value, fit.high]) {
    if (v === null) continue;
    const from = v === fit.best ? fit.lowest : fit.limit;
    nodes.push(svg("path", { d: `M${short(x(v))} ${short(y(from))}V${bottom - 8}`, stroke: tokens.ink3, "stroke-width": 0.7 }));
  }
  nodes.push(svg("path", { d: misfitPath(fit, x, y, high), fill: "none", stroke: tokens.ink, "stroke-width": 1.6, class: "curve" }));
  nodes.push(...intervalMarks(unit, { x, left, right, y: bottom - 8 }));
  nodes.push(svg("path", { d: `M${left} ${bottom}H${right}`, class: "axis" }));
  for (const tick of valueTicks(fit, fit.x[0], fit.x[fit.x.length - 1], Math.max(2, (right - left) / 44))) {
    nodes.push(svg("path", { d: `M${short(x(tick))} ${bottom}v4`, class: "axis" }));
    nodes.push(svgText(tickText(tick), x(tick), bottom + 15, "tick", "middle"));
  }
  nodes.push(svgText(`shared ${parameterTitle(fit)}`, (left + right) / 2, bottom + 31, "faint", "middle"));
  return nodes;
}

/** What of chi-square is shown: from a value for each to well above the limit. @param {UnitFit} fit */
function misfitRange(fit) {
  const rise = fit.limit - fit.lowest;
  const low = Math.min(fit.each, fit.lowest);
  const gain = fit.lowest - low;
  const high = Math.min(Math.max(...fit.y), fit.lowest + Math.max(3 * rise, 1.2 * gain));
  const above = fit.verdict === "distinct" ? high : Math.max(high, fit.limit + 0.5 * rise);
  return [low, above > low ? above : low + 1];
}

/** The curve up to the top of the plot. @param {UnitFit} fit @param {(v: number) => number} x @param {(v: number) => number} y @param {number} high */
function misfitPath(fit, x, y, high) {
  let d = "";
  let inside = false;
  fit.y.forEach((v, i) => {
    const before = i ? fit.y[i - 1] : v;
    const share = (high - before) / (v - before);
    const crossing = i && before > high !== v > high ? x(fit.x[i - 1]) + share * (x(fit.x[i]) - x(fit.x[i - 1])) : null;
    if (crossing !== null) d += `${inside ? "L" : "M"}${short(crossing)} ${short(y(high))}`;
    if (v <= high) d += `${d && (inside || crossing !== null) ? "L" : "M"}${short(x(fit.x[i]))} ${short(y(v))}`;
    inside = v <= high;
  });
  return d;
}

/**
 * A level of chi-square with its name at an end.
 * @param {number} y
 * @param {{left: number, right: number, atLeft: boolean, text: string, limit: boolean}} how
 */
function levelLine(y, { left, right, atLeft, text, limit }) {
  return [
    svg("path", { d: `M${left} ${short(y)}H${right}`, stroke: tokens.ink2, "stroke-width": 1, "stroke-dasharray": limit ? "5 3" : "1 3", class: limit ? "limit" : "each" }),
    svgText(text, atLeft ? left : right, y - (limit ? 4 : 3), "faint halo", atLeft ? "start" : "end"),
  ];
}

// --- intervals of all units on one axis, in the table of units ---

/** Ends of the axis that all units share, null without fits. */
function sharedAxis() {
  const fits = /** @type {UnitFit[]} */ (data.fits.filter((fit) => fit !== null));
  if (!fits.length) return null;
  const shown = fits.flatMap((fit) => numbers([fit.value, fit.best, ...(fit.verdict === "distinct" ? [] : [fit.low, fit.high]), ...fit.free]));
  const at = shown.map((v) => onAxis(fits[0], v));
  const [low, high] = [Math.min(...at), Math.max(...at)];
  const least = fits[0].log ? 0.3 : 1;
  const room = Math.max(0, least - (high - low)) / 2 + 0.04 * Math.max(least, high - low);
  return { fit: fits[0], low: low - room, high: high + room };
}

/** Draw the interval of each unit above the words on its process. */
function drawIntervals() {
  const axis = sharedAxis();
  for (const old of document.querySelectorAll(".units .drawn-interval")) old.remove();
  if (!axis) return;
  const head = byId("process-head");
  const stacked = innerWidth <= 760 && !state.printing;
  const cells = /** @type {HTMLElement[]} */ ([...document.querySelectorAll("#unit-rows td.process")]);
  const widths = cells.map((cell) => cell.clientWidth - parseFloat(getComputedStyle(cell).paddingRight));
  const width = Math.min(260, ...widths);
  const [left, right] = [7, width - 7];
  const x = (/** @type {number} */ v) => left + ((onAxis(axis.fit, v) - axis.low) / (axis.high - axis.low)) * (right - left);
  const title = `one process: ${parameterTitle(axis.fit)}, 95\u00a0%`;
  head.replaceChildren(...rich(title), axisTicks(axis, x, width));
  cells.forEach((cell, i) => {
    const u = Number(cell.dataset.unit);
    if (!fitOf(u)) return;
    const last = i === cells.length - 1;
    const picture = svg("svg", { width, height: stacked && last ? 36 : 18, class: "drawn-interval", role: "img", "aria-label": intervalWords(u) });
    picture.append(svg("path", { d: `M${left} 9H${right}`, class: "grid" }), ...intervalMarks(u, { x, left, right, y: 9 }));
    cell.prepend(picture);
    if (stacked) cell.prepend(axisTicks(axis, x, width));
  });
}

/** @param {{fit: UnitFit, low: number, high: number}} axis @param {(v: number) => number} x @param {number} width */
function axisTicks(axis, x, width) {
  const [low, high] = [axis.low, axis.high].map((v) => (axis.fit.log ? 10 ** v : v));
  const picture = svg("svg", { width, height: 15, class: "drawn-interval", "aria-hidden": "true" });
  for (const tick of valueTicks(axis.fit, low, high, Math.max(2, width / 46))) picture.append(svgText(tickText(tick), x(tick), 12, "tick", "middle"));
  return picture;
}

/** @param {number} unit */
function intervalWords(unit) {
  const fit = /** @type {UnitFit} */ (fitOf(unit));
  const free = numbers(fit.free).sort((a, b) => a - b);
  const with_ = (/** @type {number} */ v) => `${threeFigures(v)} ${fit.unit}`.trim();
  const parts = [];
  if (fit.verdict !== "distinct") {
    if (fit.value !== null) parts.push(`one value ${with_(fit.value)}`);
    const ends = [fit.low === null ? "open below" : `from ${with_(fit.low)}`, fit.high === null ? "open above" : `to ${with_(fit.high)}`];
    parts.push(`95 % interval ${ends.join(", ")}`);
  }
  if (free.length) parts.push(`residues alone from ${with_(free[0])} to ${with_(free[free.length - 1])}`);
  return `${plainText(fit.parameter)}: ${parts.join("; ")}`;
}
