// Elements, marks, colours and numbers that all parts share.

const SVG = "http://www.w3.org/2000/svg";
const SHAPES = ["circle", "square", "triangle", "diamond", "circle", "square"];
const VIRIDIS =
  "440154 482475 414487 355f8d 2a788e 21918c 22a884 44bf70 7ad151 bddf26 fde725".split(" ");
// Crameri's vik: blue to brown through near-white, for signed values.
const VIK = "001261 033e7d 1e6f9d 71a8c4 c9dde7 eacebd d39774 be6533 8b2706 590008".split(" ");

/**
 * @param {string} tag
 * @param {Record<string, any>} [attributes]
 * @param {(Node|string)[]} children
 * @returns {HTMLElement}
 */
function element(tag, attributes = {}, ...children) {
  const made = document.createElement(tag);
  setAttributes(made, attributes);
  made.append(...children);
  return made;
}

/**
 * @param {string} tag
 * @param {Record<string, any>} [attributes]
 * @param {(Node|string)[]} children
 * @returns {SVGElement}
 */
function svg(tag, attributes = {}, ...children) {
  const made = /** @type {SVGElement} */ (document.createElementNS(SVG, tag));
  setAttributes(made, attributes);
  made.append(...children);
  return made;
}

/**
 * @param {Element} made
 * @param {Record<string, any>} attributes
 */
function setAttributes(made, attributes) {
  for (const [name, value] of Object.entries(attributes)) {
    if (value !== undefined && value !== null) made.setAttribute(name, String(value));
  }
}

/**
 * Text with `_{…}` as subscripts, for HTML.
 * @param {string} text
 * @returns {(Node|string)[]}
 */
function rich(text) {
  return text
    .split(/_\{([^}]*)\}/)
    .map((piece, i) => (i % 2 ? element("sub", {}, piece) : piece));
}

/**
 * The same for SVG text.
 * @param {string} text
 * @returns {Node[]}
 */
function richSvg(text) {
  let lowered = false;
  return text.split(/_\{([^}]*)\}/).flatMap((piece, i) => {
    if (!piece) return [];
    const low = i % 2 === 1;
    const dy = low ? 3 : lowered ? -3 : undefined;
    lowered = low;
    return [svg("tspan", { dy, "font-size": low ? "0.75em" : undefined }, piece)];
  });
}

/**
 * @param {string} text
 * @param {number} x
 * @param {number} y
 * @param {string} [kind] class
 * @param {string} [anchor]
 */
function svgText(text, x, y, kind = "", anchor = "start") {
  return svg("text", { x: short(x), y: short(y), class: kind, "text-anchor": anchor }, ...richSvg(text));
}

/** @param {number} value */
function short(value) {
  return Math.round(value * 100) / 100;
}

// --- numbers ---

/** @param {string|number} text */
function minus(text) {
  return String(text).replace("-", "−");
}

let decimals = 1;

/** Fix the decimals of values from their errors. */
function setDecimals() {
  const { error, value } = data.entries;
  const errors = numbers(error).filter((v) => v > 0);
  const size = errors.length ? median(errors) : Math.max(...numbers(value).map(Math.abs), 1) / 100;
  decimals = Math.max(0, Math.min(6, -Math.floor(Math.log10(size))));
}

/** @param {(number|null)[]} values @returns {number[]} */
function numbers(values) {
  return /** @type {number[]} */ (values.filter((v) => v !== null));
}

/** @param {number[]} values */
function median(values) {
  const sorted = [...values].sort((a, b) => a - b);
  return sorted[Math.floor(sorted.length / 2)];
}

/** @param {number|null} value @param {number} [digits] */
function fixed(value, digits = decimals) {
  if (value === null) return "";
  const text = value.toFixed(digits);
  return minus(/^-0\.?0*$/.test(text) ? text.slice(1) : text);
}

/** @param {number|null} value */
function threeFigures(value) {
  if (value === null) return "";
  return minus(Number(value.toPrecision(3)).toString());
}

const NUMBER_WORDS =
  "no one two three four five six seven eight nine ten eleven twelve".split(" ");

/** @param {number} count */
function inWords(count) {
  return NUMBER_WORDS[count] || String(count);
}

/**
 * Round ticks that cover a range.
 * @param {number} low
 * @param {number} high
 * @param {number} wanted at most about so many
 */
function ticksBetween(low, high, wanted) {
  const rough = (high - low) / Math.max(1, wanted) || 1;
  const power = 10 ** Math.floor(Math.log10(rough));
  const steps = [0.5, 1, 2, 2.5, 5, 10].map((m) => m * power);
  let at = steps.findIndex((s) => s >= rough * 0.999);
  const from = (/** @type {number} */ step) => Math.ceil(low / step - 1e-9);
  const last = (/** @type {number} */ step) => Math.floor(high / step + 1e-6);
  if (at > 0 && last(steps[at]) - from(steps[at]) < 1) at--;
  const step = steps[at] || rough;
  const ticks = [];
  for (let n = from(step); n <= last(step); n++) ticks.push(Number((n * step).toPrecision(8)));
  return ticks;
}

/** @param {number} low @param {number} high @param {number} wanted */
function logTicks(low, high, wanted) {
  const all = [];
  for (let p = Math.floor(Math.log10(low)); p <= Math.ceil(Math.log10(high)); p++) {
    for (const m of [1, 2, 5]) all.push(Number((m * 10 ** p).toPrecision(6)));
  }
  const inside = all.filter((t) => t >= low * 0.999 && t <= high * 1.001);
  if (inside.length <= wanted) return inside;
  return inside.filter((t) => Math.log10(t) % 1 === 0);
}

/** @param {number} value */
function tickText(value) {
  const text = Math.abs(value) >= 10000 ? grouped(value) : String(Number(value.toPrecision(6)));
  return minus(text);
}

/** @param {number} value */
function grouped(value) {
  return String(Math.round(value)).replace(/\B(?=(\d{3})+$)/g, "\u202f");
}

// --- the scale of the values ---

const scale = { low: 0, high: 1, extent: 1, signed: false };

/** Fix the scale of the values, from 0 to a round number above the largest. */
function setScale() {
  const { value, error } = data.entries;
  let high = 0;
  let low = 0;
  let largest = 0;
  value.forEach((v, e) => {
    if (v === null) return;
    const spread = error[e] || 0;
    high = Math.max(high, v + Math.min(spread, Math.abs(v)));
    low = Math.min(low, v - Math.min(spread, Math.abs(v)));
    largest = Math.max(largest, Math.abs(v));
  });
  scale.signed = data.quantity.signed;
  scale.high = high > 0 ? roundUp(high) : 0;
  scale.low = scale.signed && low < 0 ? -roundUp(-low) : low;
  if (scale.high === scale.low) scale.high = 1;
  // Noise alone must not make large beads.
  const band = data.quantity.band;
  scale.extent = Math.max(largest, band ? 2 * (band[1] - band[0]) : 0) || 1;
}

/** @param {number} value */
function roundUp(value) {
  const power = 10 ** Math.floor(Math.log10(value));
  const step = [1, 1.2, 1.5, 2, 2.5, 3, 4, 5, 6, 8, 10].find((m) => m * power >= value * 0.999);
  return Number(((step || 10) * power).toPrecision(6));
}

// --- colours ---

/** @type {Record<string, string>} */
let tokens = {};

/** Read the colours of the theme from the style sheet. */
function readTokens() {
  const style = getComputedStyle(document.documentElement);
  const names = "paper ink ink2 ink3 quiet rule2 rule band wash thread mate u0 u1 u2 u3 u4 u5";
  tokens = {};
  for (const name of names.split(" ")) tokens[name] = style.getPropertyValue(`--${name}`).trim();
}

function isDark() {
  return document.documentElement.dataset.theme === "dark";
}

/** @param {string} hex @returns {number[]} */
function channels(hex) {
  const text = hex.replace("#", "");
  return [0, 2, 4].map((i) => parseInt(text.slice(i, i + 2), 16));
}

/**
 * Mix a colour with another.
 * @param {string} colour
 * @param {number} share of the other
 * @param {string} [other] the paper when not given
 */
function mix(colour, share, other = tokens.paper) {
  const [from, to] = [channels(colour), channels(other)];
  const mixed = from.map((v, i) => Math.round(v + (to[i] - v) * share));
  return `#${mixed.map((v) => v.toString(16).padStart(2, "0")).join("")}`;
}

/** @param {string[]} map @param {number} at from 0 to 1 */
function along(map, at) {
  const place = Math.max(0, Math.min(1, at)) * (map.length - 1);
  const i = Math.min(map.length - 2, Math.floor(place));
  return mix(`#${map[i]}`, place - i, `#${map[i + 1]}`);
}

/** @param {number} value */
function valueColour(value) {
  if (!scale.signed) return along(VIRIDIS, value / scale.high);
  const band = data.quantity.band;
  const centre = band ? (band[0] + band[1]) / 2 : 0;
  const reach = Math.max(scale.high - centre, centre - scale.low);
  return along(VIK, 0.5 + (value - centre) / (2 * reach));
}

/** @param {number} unit */
function unitColour(unit) {
  return tokens[`u${unit % 6}`];
}

/**
 * Membership spread over 0 to 1 for the eye: the data as measured alone put members at 0.7
 * or more, others at 0.3 or less.
 * @param {number} e
 */
function certainty(e) {
  const { unit, membership } = data.entries;
  const p = membership[e] ?? (unit[e] >= 0 ? 1 : 0);
  return p < 0.7 ? 2 * p : 0.4 + 2 * (p - 0.7);
}

/**
 * Colour of a residue's bead, bar, point and dot.
 * @param {number} e
 * @param {string} [by]
 */
function entryColour(e, by = state.colour) {
  const { unit, moves, value } = data.entries;
  if (by === "value") return valueColour(value[e] || 0);
  if (unit[e] >= 0) {
    const colour = unitColour(unit[e]);
    if (by !== "membership") return colour;
    return mix(colour, 0.75 * (1 - certainty(e)));
  }
  return moves[e] ? tokens.ink2 : tokens.quiet;
}

// --- marks ---

/**
 * Path of a mark centred on a point.
 * @param {string} shape
 * @param {number} x
 * @param {number} y
 * @param {number} r
 */
function markPath(shape, x, y, r) {
  const s = short;
  if (shape === "square") return `M${s(x - r)} ${s(y - r)}h${s(2 * r)}v${s(2 * r)}h${s(-2 * r)}Z`;
  if (shape === "triangle") {
    return `M${s(x)} ${s(y - 1.15 * r)}L${s(x + 1.15 * r)} ${s(y + 0.9 * r)}H${s(x - 1.15 * r)}Z`;
  }
  if (shape === "diamond") {
    const d = 1.25 * r;
    return `M${s(x)} ${s(y - d)}L${s(x + d)} ${s(y)}L${s(x)} ${s(y + d)}L${s(x - d)} ${s(y)}Z`;
  }
  return `M${s(x - r)} ${s(y)}a${s(r)} ${s(r)} 0 1 0 ${s(2 * r)} 0a${s(r)} ${s(r)} 0 1 0 ${s(-2 * r)} 0Z`;
}

/** @param {number} unit -1 for none */
function shapeOf(unit) {
  return unit < 0 ? "circle" : SHAPES[unit % 6];
}

/**
 * @param {number} unit -1 for none
 * @param {number} x
 * @param {number} y
 * @param {number} r
 * @param {{fill?: string, hollow?: boolean, fade?: boolean}} [how]
 */
function markAt(unit, x, y, r, how = {}) {
  const colour = how.fill || (unit >= 0 ? unitColour(unit) : tokens.quiet);
  const hollow = how.hollow || unit >= SHAPES.length;
  const pale = unit >= 0 && unit % 6 >= 3 && !isDark();
  return svg("path", {
    d: markPath(shapeOf(unit), x, y, r),
    fill: hollow ? tokens.paper : colour,
    stroke: hollow ? colour : pale ? tokens.ink : "none",
    "stroke-width": hollow ? 1.3 : pale ? 0.8 : 0,
    opacity: how.fade ? 0.36 : undefined,
  });
}

/**
 * The mark of a unit in a line of text.
 * @param {number} unit
 */
function inlineMark(unit) {
  const hollow = unit >= SHAPES.length ? " hollow" : "";
  return svg(
    "svg",
    { class: `mark u${unit % 6}${hollow}`, viewBox: "0 0 12 12", "aria-hidden": "true" },
    svg("path", { d: markPath(shapeOf(unit), 6, shapeOf(unit) === "triangle" ? 6.4 : 6, 4.7) }),
  );
}

/**
 * A line of diagonal strokes clipped to a box: what was not measured, or borderline.
 * @param {number} x
 * @param {number} y
 * @param {number} w
 * @param {number} h
 * @param {string} colour
 * @param {number} [gap]
 * @param {number} [width]
 */
function hatch(x, y, w, h, colour, gap = 5, width = 1) {
  let d = "";
  for (let at = x - h; at < x + w; at += gap) {
    const from = Math.max(x, at);
    const to = Math.min(x + w, at + h);
    if (to > from) d += `M${short(from)} ${short(y + h - (from - at))}L${short(to)} ${short(y + h - (to - at))}`;
  }
  return svg("path", { d, stroke: colour, "stroke-width": width, fill: "none" });
}

/** @type {CanvasRenderingContext2D|null} */
let ruler = null;

/**
 * Width of a text in pixels.
 * @param {string} text
 * @param {string} [font]
 */
function textWidth(text, font = '600 12px "Noto Sans", "Segoe UI", sans-serif') {
  ruler ||= document.createElement("canvas").getContext("2d");
  if (!ruler) return text.length * 7;
  ruler.font = font;
  return ruler.measureText(text.replace(/_\{([^}]*)\}/g, "$1")).width;
}

/** @param {number} cx @param {number} cy @param {number} r @param {number} width @param {string} dash */
function ring(cx, cy, r, width, dash) {
  const at = { cx: short(cx), cy: short(cy), r: short(r), fill: "none" };
  return [
    svg("circle", { ...at, stroke: tokens.paper, "stroke-width": width + 2.4 }),
    svg("circle", { ...at, stroke: tokens.ink, "stroke-width": width, "stroke-dasharray": dash || undefined }),
  ];
}

/** @param {Node[]} lines @param {number} x @param {number} y */
function showTip(lines, x, y) {
  const tip = byId("tip");
  tip.replaceChildren(...lines.map((line) => element("div", {}, line)));
  tip.hidden = false;
  const box = tip.getBoundingClientRect();
  const left = x + 16 + box.width > innerWidth ? x - 14 - box.width : x + 16;
  const top = y + 18 + box.height > innerHeight ? y - 12 - box.height : y + 18;
  tip.style.left = `${Math.max(2, left)}px`;
  tip.style.top = `${Math.max(2, top)}px`;
}

function hideTip() {
  byId("tip").hidden = true;
}
