// Where writing over a picture covers least.

const PLACES_X = 190;
const PLACES_Y = 120;

/**
 * @typedef {{x: number, y: number, w: number, h: number}} Box
 * @typedef {{beads: {x: number, y: number, r: number}[], dashes: number[][], own: number[][], mates: number[][], taken: Box[]}} Obstacles
 */

/** @type {Map<string, {x: number, y: number}>} offsets found last, kept while turning */
const lastPlaces = new Map();

/**
 * What a text would cover.
 * @param {Box} box
 * @param {Obstacles} obstacles
 */
function covering(box, obstacles) {
  const inside = (/** @type {number} */ x, /** @type {number} */ y, /** @type {number} */ m) =>
    x > box.x - m && x < box.x + box.w + m && y > box.y - m && y < box.y + box.h + m;
  let cost = 0;
  for (const b of obstacles.beads) if (inside(b.x, b.y, b.r * 0.8)) cost += 5;
  for (const [x, y] of obstacles.dashes) if (inside(x, y, 2)) cost += 1.2;
  for (const [x, y] of obstacles.own) if (inside(x, y, 3)) cost += 1.5;
  for (const [x, y] of obstacles.mates) if (inside(x, y, 2)) cost += 0.15;
  for (const t of obstacles.taken) {
    const apart = box.x > t.x + t.w + 6 || box.x + box.w + 6 < t.x || box.y > t.y + t.h || box.y + box.h < t.y;
    if (!apart) cost += 30;
  }
  const outside = box.x < 4 || box.y < 4 || box.x + box.w > view.width - 4 || box.y + box.h > view.height - 4;
  const legend = box.x < 210 && box.y + box.h > view.height - 40;
  return cost + (outside ? 60 : 0) + (legend ? 30 : 0);
}

/**
 * Best of eight places round a bead.
 * @param {{x: number, y: number, r: number}} bead
 * @param {number} width
 * @param {Obstacles} obstacles
 */
function besideBead(bead, width, obstacles) {
  let best = { cost: Infinity, x: 0, y: 0 };
  const h = 14;
  const gap = bead.r + 3;
  for (let k = 0; k < 8; k++) {
    const angle = (k * Math.PI) / 4;
    const cx = bead.x + Math.cos(angle) * (gap + width / 2);
    const cy = bead.y - Math.sin(angle) * (gap + h / 2);
    const box = { x: cx - width / 2, y: cy - h / 2, w: width, h };
    const cost = covering(box, obstacles) + k * 0.1;
    if (cost < best.cost) best = { cost, x: box.x, y: box.y };
  }
  obstacles.taken.push({ x: best.x, y: best.y, w: width, h });
  return { x: best.x, y: best.y + 11 };
}

/**
 * A bold word and lines after it, by points, where they cover least.
 * @param {string} key
 * @param {string} word
 * @param {string[]} lines
 * @param {number[][]} points
 * @param {Obstacles} obstacles
 * @param {boolean} place
 */
function placedName(key, word, lines, points, obstacles, place) {
  const first = word ? textWidth(word, "700 12px serif") + 9 : 0;
  const width = first + Math.max(...lines.map((l) => textWidth(l, '400 12px "Noto Sans", sans-serif')));
  const height = 1 + 14 * lines.length;
  const middle = points.reduce((m, p) => [m[0] + p[0] / points.length, m[1] + p[1] / points.length], [0, 0]);
  let offset = lastPlaces.get(key);
  if (place || !offset) {
    offset = bestPlace(middle, width, height, points, obstacles);
    lastPlaces.set(key, offset);
  }
  const box = { x: middle[0] + offset.x - width / 2, y: middle[1] + offset.y - height / 2, w: width, h: height };
  obstacles.taken.push(box);
  const nodes = leader(box, points);
  nodes.push(svgText(word, box.x, box.y + 12, "numeral"));
  lines.forEach((line, i) => nodes.push(svgText(line, box.x + first, box.y + 12 + 14 * i, "operator")));
  return nodes;
}

/**
 * @param {number[]} middle
 * @param {number} w
 * @param {number} h
 * @param {number[][]} points of its own dashes
 * @param {Obstacles} obstacles
 */
function bestPlace(middle, w, h, points, obstacles) {
  let best = { x: 0, y: 0, cost: Infinity };
  for (let ix = -10; ix <= 10; ix++) {
    for (let iy = -10; iy <= 10; iy++) {
      const x = (ix * PLACES_X) / 10;
      const y = (iy * PLACES_Y) / 10;
      const box = { x: middle[0] + x - w / 2, y: middle[1] + y - h / 2, w, h };
      const cost = covering(box, obstacles) + 0.1 * distanceToBox(box, points).distance;
      if (cost < best.cost) best = { x, y, cost };
    }
  }
  return { x: best.x, y: best.y };
}

/** @param {Box} box @param {number[][]} points */
function distanceToBox(box, points) {
  let best = { distance: Infinity, point: [0, 0], from: [0, 0] };
  for (const [x, y] of points) {
    const nx = Math.max(box.x, Math.min(box.x + box.w, x));
    const ny = Math.max(box.y, Math.min(box.y + box.h, y));
    const distance = Math.hypot(nx - x, ny - y);
    if (distance < best.distance) best = { distance, point: [x, y], from: [nx, ny] };
  }
  return best;
}

/** @param {Box} box @param {number[][]} points @returns {Node[]} */
function leader(box, points) {
  const near = distanceToBox(box, points);
  if (near.distance <= 8 || near.distance > 260) return [];
  const [x1, y1] = near.from;
  const [x2, y2] = near.point;
  return [svg("path", { d: `M${short(x1)} ${short(y1)}L${short(x2)} ${short(y2)}`, stroke: tokens.ink2, "stroke-width": 1, fill: "none" })];
}

/** @param {number[][]} ends @param {number} count */
function samples(ends, count) {
  const [a, b] = ends.map(project);
  return Array.from({ length: count }, (_, i) => {
    const t = (i + 0.5) / count;
    return [a.x + (b.x - a.x) * t, a.y + (b.y - a.y) * t];
  });
}
