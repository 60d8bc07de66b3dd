// Part b: profiles laid on one another, a panel a residue, or values in order of size.

const AT_MOST_PANELS = 12;
const NEIGHBOURS_SHOWN = 8;

/**
 * @typedef {{x: (v: number) => number, y: (v: number) => number, left: number, right: number, top: number, bottom: number, low: number, high: number}} Axes
 */

function drawProfiles() {
  const box = byId("panels");
  const narrow = innerWidth <= 760 && !state.printing;
  const fitted = data.fits.some(Boolean);
  box.style.height = narrow && data.profile ? `${Math.max(fitted ? 510 : 420, 120 * data.units.length + 60)}px` : "";
  if (state.printing && fitOf(state.unit)) box.style.height = "340px";
  byId("name-b").textContent = data.profile ? "Profiles" : "Values";
  const width = box.clientWidth;
  const height = box.clientHeight;
  box.style.overflowY = "";
  const chosen = [...state.chosen].sort((a, b) => a - b);
  const misfit = fitOf(state.unit) ? misfitHeight(width, height) : 0;
  if (!data.profile) drawRanked(box, width, height - misfit);
  else if (!chosen.length) drawOverview(box, width, height);
  else if (chosen.length === 1 && state.unit < 0) drawSite(box, width, height, chosen[0]);
  else drawMembers(box, width, height - misfit, chosen);
  if (misfit) box.append(misfitFigure(state.unit, { top: height - misfit, width, height: misfit }));
}

/** Room for the plot of chi-square under the panels. @param {number} width @param {number} height */
function misfitHeight(width, height) {
  if (width < 420) return state.printing ? 128 : 160;
  return Math.max(124, Math.round(height * 0.32));
}

/** @param {(Node|string)[]} words */
function aboutProfiles(...words) {
  byId("about-b").replaceChildren(...words);
}

/**
 * A part of b that can be pressed.
 * @param {{left: number, top: number, width: number, height: number, label: string}} place
 * @param {() => void} act
 * @param {Node[]} drawn
 */
function panel(place, act, drawn) {
  const made = element("button", { type: "button", class: "panel", "aria-label": place.label });
  made.style.left = `${place.left}px`;
  made.style.top = `${place.top}px`;
  made.style.width = `${place.width}px`;
  made.style.height = `${place.height}px`;
  const picture = svg("svg", { width: place.width, height: place.height, "aria-hidden": "true" });
  picture.append(...drawn);
  made.append(picture);
  made.addEventListener("click", act);
  return made;
}

/** @param {number[]} members of which entries */
function profileRange(members) {
  const profile = /** @type {Profile} */ (data.profile);
  return rangeOf(members, profile.value, profile.error);
}

/**
 * @param {number[]} members
 * @param {((number|null)[]|null)[]} values
 * @param {((number|null)[]|null)[]|null} errors
 */
function rangeOf(members, values, errors) {
  let low = Infinity;
  let high = -Infinity;
  for (const e of members) {
    (values[e] || []).forEach((v, p) => {
      if (v === null) return;
      const spread = errors?.[e]?.[p] || 0;
      low = Math.min(low, v - spread);
      high = Math.max(high, v + spread);
    });
  }
  if (!(low < high)) return [0, 1];
  const pad = 0.06 * (high - low);
  return [low - pad, high + pad];
}

/**
 * @param {number} left
 * @param {number} top
 * @param {number} width
 * @param {number} height
 * @param {number[]} range
 * @returns {Axes}
 */
function axesIn(left, top, width, height, range) {
  const profile = /** @type {Profile} */ (data.profile);
  const at = profile.log ? Math.log10 : (/** @type {number} */ v) => v;
  const first = at(profile.x[0]);
  const last = at(profile.x[profile.x.length - 1]);
  const pad = 0.045 * (last - first || 1);
  const span = last - first + 2 * pad;
  const [low, high] = range;
  return {
    x: (v) => left + ((at(v) - first + pad) / span) * width,
    y: (v) => top + height - ((v - low) / (high - low)) * height,
    left,
    right: left + width,
    top,
    bottom: top + height,
    low,
    high,
  };
}

/**
 * Grid, axis, ticks and the bands of points left out.
 * @param {Axes} axes
 * @param {{ticks?: boolean, yTicks?: number, named?: boolean, reason?: "above"|"inside"|""}} how
 */
function drawAxes(axes, how) {
  const profile = /** @type {Profile} */ (data.profile);
  const nodes = [...leftOutBands(axes, how.reason || "")];
  for (const tick of how.yTicks ? ticksBetween(axes.low, axes.high, how.yTicks) : []) {
    const y = short(axes.y(tick));
    nodes.push(svg("path", { d: `M${axes.left} ${y}H${axes.right}`, class: "grid" }));
    if (axes.left > 20) nodes.push(svgText(tickText(tick), axes.left - 6, y + 4, "tick", "end"));
  }
  nodes.push(svg("path", { d: `M${axes.left} ${short(axes.bottom)}H${axes.right}`, class: "axis" }));
  const first = profile.x[0];
  const last = profile.x[profile.x.length - 1];
  const wanted = Math.max(2, Math.floor((axes.right - axes.left) / 20));
  const ticks = profile.log ? logTicks(first, last, wanted) : ticksBetween(first, last, wanted);
  for (const tick of ticks) {
    const x = short(axes.x(tick));
    nodes.push(svg("path", { d: `M${x} ${short(axes.bottom)}v4`, class: "axis" }));
    if (how.ticks) nodes.push(svgText(tickText(tick), x, axes.bottom + 15, "tick", "middle"));
  }
  if (how.named) nodes.push(svgText(xTitle(), (axes.left + axes.right) / 2, axes.bottom + 36, "faint", "middle"));
  return nodes;
}

function xTitle() {
  const profile = /** @type {Profile} */ (data.profile);
  return profile.xUnit ? `${profile.xName} (${profile.xUnit})` : profile.xName;
}

/** @param {Axes} axes @param {string} reason */
function leftOutBands(axes, reason) {
  const { kept, x, reason: reasons } = /** @type {Profile} */ (data.profile);
  const nodes = [];
  for (let p = 0; p < x.length; p++) {
    if (kept[p]) continue;
    let last = p;
    while (last + 1 < x.length && !kept[last + 1] && reasons[last + 1] === reasons[p]) last++;
    const from = p ? (axes.x(x[p - 1]) + axes.x(x[p])) / 2 : axes.left;
    const to = last + 1 < x.length ? (axes.x(x[last]) + axes.x(x[last + 1])) / 2 : axes.right;
    const x1 = Math.max(axes.left, from, axes.x(x[p]) - 8);
    const x2 = Math.min(axes.right, to, axes.x(x[last]) + 8);
    nodes.push(svg("rect", { x: short(x1), y: axes.top, width: short(x2 - x1), height: axes.bottom - axes.top, fill: tokens.band }));
    const text = `left out, ${shortReason(reasons[p])}`.replace(/, $/, "");
    const middle = (x1 + x2) / 2;
    const wide = textWidth(text, "400 11px sans-serif");
    const shown = wide < axes.right - axes.left - 40 ? text : "left out";
    const at = Math.min(middle, axes.right + (reason === "above" ? 24 : 0) - (shown === text ? wide : 40) / 2);
    if (reason) nodes.push(svgText(shown, Math.max(at, axes.left + 24), axes.top + (reason === "above" ? -4 : 12), "faint", "middle"));
    p = last;
  }
  return nodes;
}

/** @param {string} reason */
function shortReason(reason) {
  if (/half/.test(reason)) return "½ν_{r}";
  if (/twice|2 ?×/.test(reason)) return "2ν_{r}";
  if (/rate|spinning|resonance/.test(reason) && reason.length > 24) return "ν_{r}";
  return reason.length > 26 ? "" : reason;
}

/**
 * Points of one residue; those left out are hollow.
 * @param {Axes} axes
 * @param {number} e
 * @param {{values: ((number|null)[]|null)[], errors?: ((number|null)[]|null)[], size: number, fade?: boolean}} how
 */
function drawPoints(axes, e, how) {
  const { kept, x } = /** @type {Profile} */ (data.profile);
  const colour = entryColour(e, "unit");
  const unit = data.entries.unit[e];
  /** @type {SVGElement[]} */
  const nodes = [];
  const dashed = data.quantity.errorsGiven ? undefined : "2 2";
  (how.values[e] || []).forEach((v, p) => {
    if (v === null) return;
    const [px, py] = [axes.x(x[p]), axes.y(v)];
    const spread = how.errors?.[e]?.[p];
    if (spread) {
      const [a, b] = [axes.y(v - spread), axes.y(v + spread)];
      nodes.push(svg("path", { d: `M${short(px)} ${short(a)}V${short(b)}`, stroke: colour, "stroke-width": 1, "stroke-dasharray": dashed, opacity: how.fade ? 0.4 : undefined }));
    }
    const mark = markAt(unit, px, py, how.size, { fill: colour, hollow: !kept[p], fade: how.fade });
    mark.setAttribute("data-point", `${e}/${p}`);
    nodes.push(mark);
  });
  return nodes;
}

/**
 * A fitted curve, where there is one.
 * @param {Axes} axes
 * @param {number[]} x
 * @param {number[]|null|undefined} y
 * @param {string} colour
 * @param {string} [dash]
 */
function drawCurve(axes, x, y, colour, dash) {
  if (!y) return [];
  const d = y.map((v, i) => `${i ? "L" : "M"}${short(axes.x(x[i]))} ${short(axes.y(v))}`).join("");
  return [svg("path", { d, fill: "none", stroke: colour, "stroke-width": dash ? 1 : 1.6, "stroke-dasharray": dash })];
}

/**
 * The 95 % band of a fitted curve, cut at the edges of its axes.
 * @param {Axes} axes
 * @param {number[]} x
 * @param {number[]|null} y
 * @param {number[]|null} half
 */
function drawBand(axes, x, y, half) {
  if (!y || !half) return [];
  const at = (/** @type {number} */ i, /** @type {number} */ side) => {
    const v = Math.max(axes.low, Math.min(axes.high, y[i] + side * half[i]));
    return `${short(axes.x(x[i]))} ${short(axes.y(v))}`;
  };
  const places = x.map((_, i) => i);
  const d = `M${places.map((i) => at(i, 1)).join("L")}L${places.reverse().map((i) => at(i, -1)).join("L")}Z`;
  return [svg("path", { d, fill: tokens.ink, "fill-opacity": 0.22, class: "curve-band" })];
}

// --- nothing chosen ---

/** @param {HTMLElement} box @param {number} width @param {number} height */
function drawOverview(box, width, height) {
  const profile = /** @type {Profile} */ (data.profile);
  const unitText = profile.unit ? ` (${profile.unit})` : "";
  const laid = layOnOneAnother();
  if (laid) aboutProfiles("residues of a unit laid on one another; 0 foot of the curve, 1 its height");
  else aboutProfiles("residues of a unit laid on one another, ", ...rich(`${profile.name} less the baseline${unitText}`));
  const groups = data.units.map((unit, u) => ({ unit: u, members: unit.members }));
  const movers = data.entries.moves.flatMap((m, e) => (m ? [e] : []));
  if (!groups.length) groups.push({ unit: -1, members: movers.length ? movers : measuredEntries() });
  const row = Math.max(state.printing ? 78 : groups.length > 4 ? 84 : 96, Math.min(groups.length > 2 ? 138 : 190, (height - 22) / groups.length));
  const whole = row * groups.length + 22;
  if (whole > height + 1) box.style.overflowY = "auto";
  const values = laid || profile.above;
  const [low, high] = rangeOf(groups.flatMap((g) => g.members), values, null);
  const range = laid ? [Math.min(low, -0.2), Math.max(high, 1.2)] : [low, high];
  const side = state.printing ? 142 : Math.min(150, Math.max(134, width * 0.27));
  const nodes = groups.map((group, i) => {
    const axes = axesIn(34, 14, width - 34 - side - 16, row - 46, range);
    const last = i === groups.length - 1;
    const drawn = drawAxes(axes, { ticks: true, yTicks: 2, named: last, reason: i ? "" : "above" });
    if (laid) drawn.push(...laidCurves(axes, group.unit));
    for (const e of group.members) drawn.push(...drawPoints(axes, e, { values, size: 2.1 }));
    drawn.push(...overviewText(group, axes.right + 16));
    const name = group.unit >= 0 ? data.units[group.unit].name : "residues that move";
    const place = { left: 0, top: i * row, width, height: row + (last ? 22 : 0), label: `${name}, ${group.members.length} residues` };
    return panel(place, () => group.unit >= 0 && chooseUnit(group.unit), drawn);
  });
  box.replaceChildren(...nodes);
}

/**
 * Values of the members of units, scaled so that one curve fits all if one process does.
 * @returns {((number|null)[]|null)[]|null} null where no model was fitted
 */
function layOnOneAnother() {
  const profile = /** @type {Profile} */ (data.profile);
  if (!profile.curve || !profile.curve.scaled.every((s) => s.low && s.height)) return null;
  /** @type {((number|null)[]|null)[]} */
  const laid = profile.value.map(() => null);
  for (const { members, low, height } of profile.curve.scaled) {
    members.forEach((e, i) => {
      const [from, size] = [Number(low?.[i]), Number(height?.[i])];
      laid[e] = (profile.value[e] || []).map((v) => {
        const at = v === null ? null : (v - from) / size;
        return at === null || at < -0.6 || at > 2.2 ? null : at;
      });
    });
  }
  return laid;
}

/** The shared curve in ink, or one thin curve a residue where several are needed. @param {Axes} axes @param {number} unit */
function laidCurves(axes, unit) {
  const curve = data.profile?.curve;
  if (!curve || unit < 0) return [];
  const { apart, members, low, height } = curve.scaled[unit];
  const source = apart ? curve.alone : curve.y;
  return members.slice(0, apart ? members.length : 1).flatMap((e, i) => {
    const scaledY = source[e]?.map((v) => (v - Number(low?.[i])) / Number(height?.[i]));
    const drawn = drawCurve(axes, curve.x, scaledY, apart ? unitColour(unit) : tokens.ink);
    if (apart) for (const node of drawn) node.setAttribute("stroke-width", "1");
    return drawn;
  });
}

/** @param {{unit: number, members: number[]}} group @param {number} x */
function overviewText(group, x) {
  const count = `${group.members.length} residue${group.members.length === 1 ? "" : "s"}`;
  if (group.unit < 0) {
    const moving = data.entries.moves[group.members[0]];
    return [svgText(count, x, 24, "strong"), svgText(moving ? "move, in no unit" : "none moves", x, 41, "soft")];
  }
  const unit = data.units[group.unit];
  const untested = unit.process.length === 1 && unit.process[0] === "not tested";
  const lines = untested ? ["one process: not tested"] : unit.process.filter((line) => !line.startsWith("describes only")).flatMap((line) => line.split(/ \((?=.*\)$)/).map((piece) => piece.replace(/\)$/, "")));
  return [
    markAt(group.unit, x + 5, 20, 4.6),
    svgText(`${unit.name}, ${count}`, x + 15, 24, "strong"),
    ...lines.slice(0, 4).map((line, i) => svgText(line, x, 41 + 16 * i, i < 2 && lines.length > 1 ? "soft" : "faint")),
  ];
}

function measuredEntries() {
  return data.entries.value.flatMap((v, e) => (v === null ? [] : [e]));
}

// --- a unit, or several residues ---

/** @param {HTMLElement} box @param {number} width @param {number} height @param {number[]} chosen */
function drawMembers(box, width, height, chosen) {
  const profile = /** @type {Profile} */ (data.profile);
  const measured = chosen.filter(isMeasured);
  if (!measured.length) {
    aboutProfiles();
    return box.replaceChildren(element("p", {}, "None of these residues was measured."));
  }
  const shown = measured.slice(0, AT_MOST_PANELS);
  const unitText = profile.unit ? ` (${profile.unit})` : "";
  const some = shown.length < measured.length ? `; first ${shown.length} of ${measured.length}` : "";
  const about = `${profile.name}${unitText}${curveText()}`;
  const room = textWidth(`${about}${hollowText()}${some}`, state.printing ? "400 9.5px sans-serif" : "400 12px sans-serif") < width;
  aboutProfiles(...rich(`${about}${room ? hollowText() : ""}${some}`));
  const fit = fitOf(state.unit);
  const many = fit && shown.length > 6 && width > 400 ? 4 : 3;
  const columns = shown.length === 1 ? 1 : shown.length <= 4 && !(fit && shown.length === 3) ? 2 : many;
  const rows = Math.ceil(shown.length / columns);
  const middle = Math.min(Math.floor((columns - 1) / 2), (shown.length - 1) % columns);
  const range = profileRange(shown);
  const foot = 40;
  const panelWidth = (width - 34 - 14 * (columns - 1)) / columns;
  const panelHeight = (height - foot) / rows;
  const nodes = shown.map((e, i) => {
    const column = i % columns;
    const row = Math.floor(i / columns);
    const left = column === 0 ? 34 : 0;
    const bottomRow = i + columns >= shown.length;
    const axes = axesIn(left, 18, panelWidth, panelHeight - 26, range);
    const drawn = drawAxes(axes, { ticks: bottomRow, yTicks: panelHeight > 120 ? 3 : 2, named: bottomRow && row === rows - 1 && column === middle });
    drawn.push(...siteCurves(axes, e), ...drawPoints(axes, e, { values: profile.value, errors: profile.error, size: 2.6 }));
    drawn.push(svgText(data.entries.name[e], left, 11, "strong"));
    if (fit) drawn.push(...aloneText(fit, e, left + panelWidth, panelWidth));
    const place = {
      left: column === 0 ? 0 : 34 + column * (panelWidth + 14),
      top: row * panelHeight,
      width: panelWidth + left,
      height: panelHeight + (bottomRow ? foot : 0),
      label: `profile of ${longName(e)}`,
    };
    return panel(place, () => chooseEntry(e), drawn);
  });
  box.replaceChildren(...nodes);
}

/** What the lines of a chosen unit are. */
function curveText() {
  const curve = data.profile?.curve;
  if (!curve) return ", one scale for all";
  const fit = fitOf(state.unit);
  const band = [...state.chosen].some((e) => curve.band[e]) ? ", 95\u00a0% band" : "";
  if (!fit) return `; line: one value for all${band}; dotted: each alone`;
  return `; line: one ${fit.parameter} for all${band}; dotted: each alone${fit.unit ? ` (${fit.unit})` : ""}`;
}

/** The value of a residue alone, right of its name. @param {UnitFit} fit @param {number} e @param {number} right @param {number} width */
function aloneText(fit, e, right, width) {
  const value = fit.free[fit.members.indexOf(e)];
  if (value === undefined || value === null) return [];
  const text = minus(value >= 999.5 ? threeFigures(value) : value.toPrecision(3));
  const room = width - textWidth(data.entries.name[e]) - 7;
  return textWidth(text, "400 11px sans-serif") < room ? [svgText(text, right, 11, "faint", "end")] : [];
}

function hollowText() {
  return data.profile?.kept.some((k) => !k) ? "; hollow: left out" : "";
}

/** @param {Axes} axes @param {number} e */
function siteCurves(axes, e) {
  const curve = data.profile?.curve;
  if (!curve) return [];
  return [
    ...drawBand(axes, curve.x, curve.y[e], curve.band[e]),
    ...drawCurve(axes, curve.x, curve.alone?.[e], tokens.quiet, "2 2"),
    ...drawCurve(axes, curve.x, curve.y[e], tokens.ink),
  ];
}

// --- one residue ---

/** @param {HTMLElement} box @param {number} width @param {number} height @param {number} e */
function drawSite(box, width, height, e) {
  const profile = /** @type {Profile} */ (data.profile);
  if (!isMeasured(e)) {
    aboutProfiles();
    const note = data.entries.note[e];
    const reason = note && note !== "not measured" ? ` (${note})` : "";
    return box.replaceChildren(
      element("p", {}, `Not measured: ${data.entries.name[e]}${reason}. There is no profile to show, and nothing follows about its motion.`),
    );
  }
  const unitText = profile.unit ? ` (${profile.unit})` : "";
  const band = profile.curve?.band[e] ? "; grey: 95\u00a0% band of the fitted curve" : "";
  aboutProfiles(...rich(`${profile.name}${unitText}, one scale for all${band}`));
  const near = nearestMeasured(e);
  const shown = near.slice(0, NEIGHBOURS_SHOWN);
  const range = profileRange([e, ...shown.map((t) => t.entry)]);
  const top = shown.length ? Math.round(height * 0.56) : height;
  const axes = axesIn(34, 18, width - 34, top - 62, range);
  const drawn = drawAxes(axes, { ticks: true, yTicks: 3, named: true, reason: "inside" });
  drawn.push(...siteCurves(axes, e), ...drawPoints(axes, e, { values: profile.value, errors: profile.error, size: 3.2 }));
  drawn.push(svgText(data.entries.name[e], 34, 11, "strong"));
  const label = `profile of ${longName(e)}`;
  const nodes = [panel({ left: 0, top: 0, width, height: top, label }, () => choose([]), drawn)];
  if (shown.length) nodes.push(...drawNear(width, height, top, near.length, shown, range));
  box.replaceChildren(...nodes);
}

/** Residues that touch one and were measured, those across the crystal first. @param {number} e */
function nearestMeasured(e) {
  const seen = new Set([e]);
  const list = touches[e].filter((t) => {
    if (t.entry < 0 || seen.has(t.entry) || !isMeasured(t.entry)) return false;
    seen.add(t.entry);
    return true;
  });
  const across = (/** @type {Meeting} */ t) => (t.kind === data.contacts.lattice ? 0 : 1);
  return list.sort((s, t) => across(s) - across(t) || s.distance - t.distance);
}

/**
 * @param {number} width
 * @param {number} height
 * @param {number} top
 * @param {number} total
 * @param {Meeting[]} shown
 * @param {number[]} range
 */
function drawNear(width, height, top, total, shown, range) {
  const profile = /** @type {Profile} */ (data.profile);
  const count = total > shown.length ? `nearest ${shown.length} of ${total}` : `${total}`;
  const across = shown.some((t) => t.image >= 0) ? "; ′ across a crystal contact" : "";
  const head = element("div", { class: "about" }, `residues it touches, ${count}${across}`);
  head.style.cssText = `position:absolute;left:34px;top:${top - 2}px`;
  const columns = 4;
  const rows = Math.ceil(shown.length / columns);
  const w = (width - 34 - 12 * (columns - 1)) / columns;
  const h = Math.min(64, (height - top - 22) / rows);
  const nodes = shown.map((touch, i) => {
    const left = 34 + (i % columns) * (w + 12);
    const y = top + 18 + Math.floor(i / columns) * (h + 6);
    const axes = axesIn(0, 16, w, h - 22, range);
    const drawn = drawAxes(axes, {});
    drawn.push(...siteCurves(axes, touch.entry), ...drawPoints(axes, touch.entry, { values: profile.value, size: 1.5 }));
    const mate = touch.image >= 0;
    drawn.push(svgText(data.entries.name[touch.entry] + (mate ? "′" : ""), 0, 11, "strong"));
    if (touch.numeral) drawn.push(svgText(touch.numeral, w, 11, "faint", "end"));
    const label = `profile of ${longName(touch.entry)}, which it touches`;
    return panel({ left, top: y, width: w, height: h, label }, () => chooseEntry(touch.entry), drawn);
  });
  return [head, ...nodes];
}

// --- one number a site ---

/** @param {HTMLElement} box @param {number} width @param {number} height */
function drawRanked(box, width, height) {
  const { value, error, moves } = data.entries;
  aboutProfiles("one number a residue, in order of size");
  const measured = measuredEntries().sort((a, b) => Number(value[b]) - Number(value[a]));
  const moving = measured.filter((e) => moves[e]);
  const still = measured.filter((e) => !moves[e]);
  const band = data.quantity.band;
  const [low, high] = rankedRange(measured, band);
  const [left, right, bottom] = [12, width - 10, height - 46];
  const x = (/** @type {number} */ v) => left + ((v - low) / (high - low)) * (right - left);
  const picture = svg("svg", { width, height, role: "img", "aria-label": "values in order of size; the numbers stand in the table of sites" });
  if (band) {
    picture.append(svg("rect", { x: short(x(band[0])), y: 0, width: short(x(band[1]) - x(band[0])), height: bottom, fill: tokens.band }));
  }
  for (const tick of ticksBetween(low, high, Math.max(3, width / 80))) {
    picture.append(svg("path", { d: `M${short(x(tick))} 0V${bottom}`, class: "grid" }));
    picture.append(svgText(tickText(tick), x(tick), bottom + 15, "tick", "middle"));
  }
  const { name, unit } = data.quantity;
  picture.append(svgText(unit ? `${name} (${unit})` : name, (left + right) / 2, bottom + 36, "faint", "middle"));
  const room = !still.length ? 0 : moving.length ? Math.max(40, Math.min(60, bottom * 0.16)) : bottom - 24;
  const row = Math.min(14, (bottom - room - 8) / Math.max(1, moving.length));
  const upper = moving.filter((e) => !band || Number(value[e]) >= (band[0] + band[1]) / 2);
  const lower = moving.filter((e) => !upper.includes(e));
  let y = 4;
  for (const e of upper) picture.append(rankedRow(e, x, (y += row) - row / 2, row, width));
  const start = y + (still.length ? 7 : 0);
  const step = still.length ? Math.min(moving.length ? 2.4 : 14, room / still.length) : 0;
  still.forEach((e, i) => picture.append(rankedRow(e, x, start + (i + 1) * step, step, width)));
  if (still.length) {
    const middle = start + (still.length * step) / 2;
    const at = band ? x(band[1]) + 8 : x(Number(value[still[0]])) + 14;
    const text = `${still.length} residue${still.length === 1 ? "" : "s"} within the baseline`;
    const wide = textWidth(text, "400 11.5px sans-serif");
    const fits = at + wide < width;
    picture.append(svgText(text, fits ? at : Math.max(4, x(band ? band[0] : low) - 8), middle + 4, "soft", fits ? "start" : "end"));
  }
  y = start + still.length * step + (still.length ? 7 : 0);
  for (const e of lower) picture.append(rankedRow(e, x, (y += row) - row / 2, row, width));
  picture.addEventListener("click", (event) => {
    const row2 = /** @type {Element} */ (event.target).closest("[data-entry]");
    if (row2) chooseEntry(Number(row2.getAttribute("data-entry")), event);
  });
  picture.addEventListener("pointerover", (event) => {
    const over = /** @type {Element} */ (event.target).closest("[data-entry]");
    hover(over ? Number(over.getAttribute("data-entry")) : -1);
  });
  picture.addEventListener("pointerleave", () => hover(-1));
  box.replaceChildren(picture);
  void error;
}

/** @param {number[]} measured @param {number[]|null} band */
function rankedRange(measured, band) {
  const { value, error } = data.entries;
  let low = band ? band[0] : Infinity;
  let high = band ? band[1] : -Infinity;
  for (const e of measured) {
    const spread = Math.min(error[e] || 0, Math.abs(scale.high - scale.low));
    low = Math.min(low, Number(value[e]) - spread);
    high = Math.max(high, Number(value[e]) + spread);
  }
  if (!(low < high)) return [0, 1];
  const name = 0.12 * (high - low);
  return [low - name, high + 0.03 * (high - low)];
}

/**
 * @param {number} e
 * @param {(v: number) => number} x
 * @param {number} y
 * @param {number} row
 * @param {number} width
 */
function rankedRow(e, x, y, row, width) {
  const { value, error, unit, moves, name } = data.entries;
  const v = Number(value[e]);
  const faded = state.chosen.size > 0 && !state.chosen.has(e);
  const colour = entryColour(e, "unit");
  const group = svg("g", { "data-entry": e, opacity: faded ? 0.36 : undefined });
  group.append(svg("rect", { x: 0, y: y - row / 2, width, height: row, fill: "transparent" }));
  const spread = error[e] || 0;
  const left = Math.max(0, x(v - spread));
  group.append(svg("path", { d: `M${short(left)} ${short(y)}H${short(Math.min(width, x(v + spread)))}`, stroke: colour, "stroke-width": 1, "stroke-dasharray": data.quantity.errorsGiven ? undefined : "2 2" }));
  group.append(markAt(unit[e], x(v), y, moves[e] ? 3.1 : 1.7, { fill: colour }));
  if (state.hovered === e || (moves[e] && row >= 9) || state.chosen.has(e)) {
    const bold = state.chosen.has(e) ? "strong" : "soft";
    group.append(svgText(name[e], left - 5, y + 4, bold, left > 60 ? "end" : "start"));
  }
  return group;
}
