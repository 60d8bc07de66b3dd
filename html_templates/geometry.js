// Where things stand: atoms, images, and how they fall on the screen.

/** @type {Float64Array} x, y, z of the atoms that the page carries */
let atomXyz = new Float64Array(0);
/** @type {string[]} */
let atomNames = [];
/** @type {string[]} */
let atomElements = [];
/** @type {number[]} first atom of each residue, and one past the last at the end */
let firstAtom = [];

const library = /** @type {any} */ (window).$3Dmol;
const HALF_ANGLE = (20 * Math.PI) / 180; // of the library's camera
const CAMERA = 150;

const view = {
  centre: [0, 0, 0],
  /** @type {number[][]} rows are the axes of the screen */
  turn: [
    [1, 0, 0],
    [0, 1, 0],
    [0, 0, 1],
  ],
  quaternion: [0, 0, 0, 1],
  half: 30,
  width: 1,
  height: 1,
};

/** Take the atoms from the call that builds the molecule. */
function readAtoms() {
  const call = data.calls.find((c) => c[0] === "addModel");
  const lines = call ? String(call[1]).split("\n") : [];
  atomXyz = new Float64Array(3 * lines.length);
  atomNames = lines.map((line) => line.slice(12, 16).trim());
  atomElements = lines.map((line) => line.slice(76, 78).trim());
  lines.forEach((line, i) => {
    for (let k = 0; k < 3; k++) atomXyz[3 * i + k] = Number(line.slice(30 + 8 * k, 38 + 8 * k));
  });
  firstAtom = [0];
  for (const count of data.residues.atoms) firstAtom.push(firstAtom[firstAtom.length - 1] + count);
}

/** An image by number: those that touch this molecule, then those beyond. @param {number} image */
function imageOf(image) {
  return data.images[image] || data.beyond[image - data.images.length];
}

/**
 * Position of an atom in an image.
 * @param {number} atom
 * @param {number} [image] -1 for this molecule
 * @returns {number[]}
 */
function atomAt(atom, image = -1) {
  const p = [atomXyz[3 * atom], atomXyz[3 * atom + 1], atomXyz[3 * atom + 2]];
  if (image < 0) return p;
  const m = imageOf(image).matrix;
  return [0, 4, 8].map((r) => m[r] * p[0] + m[r + 1] * p[1] + m[r + 2] * p[2] + m[r + 3]);
}

/**
 * Where the bead of a residue stands.
 * @param {number} residue
 * @param {number} [image]
 */
function residueAt(residue, image = -1) {
  return atomAt(data.residues.anchor[residue], image);
}

/**
 * An atom of a residue by name, else its anchor.
 * @param {number} residue
 * @param {string} name
 */
function namedAtom(residue, name) {
  for (let a = firstAtom[residue]; a < firstAtom[residue + 1]; a++) {
    if (atomNames[a] === name) return a;
  }
  return data.residues.anchor[residue];
}

/** Go back to the opening view. */
function resetView() {
  view.centre = [...data.view.centre];
  setQuaternion(data.view.quaternion);
  fitView(...openingSize());
}

/** What must fit in, with room for the edges that fade. @returns {[number, number]} */
function openingSize() {
  return [data.view.half_width / 0.86, data.view.half_height / 0.84];
}

/** @param {number[]} q */
function setQuaternion(q) {
  const norm = Math.hypot(...q);
  const [x, y, z, w] = q.map((v) => v / norm);
  view.quaternion = [x, y, z, w];
  view.turn = [
    [1 - 2 * (y * y + z * z), 2 * (x * y - z * w), 2 * (x * z + y * w)],
    [2 * (x * y + z * w), 1 - 2 * (x * x + z * z), 2 * (y * z - x * w)],
    [2 * (x * z - y * w), 2 * (y * z + x * w), 1 - 2 * (x * x + y * y)],
  ];
}

/**
 * Turn about an axis of the screen.
 * @param {number[]} axis
 * @param {number} angle
 */
function turnView(axis, angle) {
  const s = Math.sin(angle / 2);
  const [ax, ay, az, aw] = [axis[0] * s, axis[1] * s, axis[2] * s, Math.cos(angle / 2)];
  const [x, y, z, w] = view.quaternion;
  setQuaternion([
    aw * x + ax * w + ay * z - az * y,
    aw * y - ax * z + ay * w + az * x,
    aw * z + ax * y - ay * x + az * w,
    aw * w - ax * x - ay * y - az * z,
  ]);
}

/**
 * Move what is in the middle by pixels.
 * @param {number} dx
 * @param {number} dy
 */
function moveView(dx, dy) {
  const perPixel = (2 * view.half) / view.width;
  for (let k = 0; k < 3; k++) {
    view.centre[k] -= (dx * view.turn[0][k] - dy * view.turn[1][k]) * perPixel;
  }
}

/** @param {number} factor */
function zoomView(factor) {
  view.half = Math.max(3, Math.min(400, view.half * factor));
}

/**
 * @param {number} halfWidth
 * @param {number} halfHeight
 */
function fitView(halfWidth, halfHeight) {
  view.half = Math.max(halfWidth, (halfHeight * view.width) / view.height, 4);
}

/**
 * Frame points.
 * @param {number[][]} points
 * @param {number} margin
 */
function frame(points, margin) {
  const low = [Infinity, Infinity, Infinity];
  const high = [-Infinity, -Infinity, -Infinity];
  for (const p of points) {
    view.turn.forEach((axis, i) => {
      const at = axis[0] * p[0] + axis[1] * p[1] + axis[2] * p[2];
      low[i] = Math.min(low[i], at);
      high[i] = Math.max(high[i], at);
    });
  }
  const middle = low.map((v, i) => (v + high[i]) / 2);
  view.centre = [0, 1, 2].map((k) =>
    view.turn.reduce((sum, axis, i) => sum + axis[k] * middle[i], 0),
  );
  fitView((high[0] - low[0]) / 2 + margin, (high[1] - low[1]) / 2 + margin);
}

/**
 * A point on the screen in pixels; z is nearness in Å.
 * @param {number[]} p
 */
function project(p) {
  const d = [p[0] - view.centre[0], p[1] - view.centre[1], p[2] - view.centre[2]];
  const s = pixelsPerAngstrom();
  const [u, v, n] = view.turn.map((axis) => axis[0] * d[0] + axis[1] * d[1] + axis[2] * d[2]);
  return { x: view.width / 2 + u * s, y: view.height / 2 - v * s, z: n };
}

function pixelsPerAngstrom() {
  return view.width / (2 * view.half);
}

function viewText() {
  return [...view.centre, ...view.quaternion, view.half, view.width, view.height].join(" ");
}

/** The view as the library takes it. */
function libraryView() {
  const distance = view.half / Math.tan(HALF_ANGLE);
  const [cx, cy, cz] = view.centre;
  return [-cx, -cy, -cz, CAMERA - distance, ...view.quaternion];
}

function offersWebGl() {
  const canvas = document.createElement("canvas");
  return Boolean(canvas.getContext("webgl2") || canvas.getContext("webgl"));
}
