// A chosen unit in one piece: each residue once, in the image where it meets the others.

/**
 * Where a unit that is not in one chain alone stands; images are numbered past those that
 * touch this molecule.
 * @typedef {object} Layout
 * @property {number[]} members
 * @property {number[]} residues
 * @property {number[]} images of each member, -1 in this molecule
 * @property {number[][]} joined contact and the images of its two residues
 * @property {number[][]} onward the same, out to the next copy of the unit
 * @property {number[][]} again images of each member in other copies of the unit
 * @property {string} closes
 * @property {boolean} ring
 */

const STRETCH = 8; // residues of thread drawn to both sides of a member

/** @type {{joined: Dash[], onward: Dash[]}[]} */
let laidDashes = [];
/** @type {any[]} */
let laidModels = [];

/** The layout that is drawn now. @returns {Layout|null} */
function laidOut() {
  if (state.unit < 0 || !state.neighbours) return null;
  return data.units[state.unit].layout;
}

/** Beads of laid-out members in images, and of the copies that the unit goes on in. */
function findLaidBeads() {
  const { copies } = data;
  const atomOf = new Map(copies.entry.map((entry, i) => [`${entry}/${copies.residue[i]}`, copies.atom[i]]));
  /** @type {Bead[]} */
  const found = [];
  data.units.forEach((unit, u) => {
    const { layout } = unit;
    if (!layout) return;
    layout.members.forEach((entry, i) => {
      add(entry, layout.residues[i], layout.images[i], u, false);
      for (const images of layout.again) add(entry, layout.residues[i], images[i], u, true);
    });
  });
  return found;

  /** @param {number} entry @param {number} residue @param {number} image @param {number} laid @param {boolean} again */
  function add(entry, residue, image, laid, again) {
    if (image < 0) return;
    const at = atomAt(atomOf.get(`${entry}/${residue}`) ?? data.residues.anchor[residue], image);
    found.push({ entry, residue, image, at, radius: 1, colour: "", laid, again });
  }
}

function findLaidDashes() {
  laidDashes = data.units.map((unit, u) => ({
    joined: (unit.layout?.joined || []).map((step) => laidDash(step, u)),
    onward: (unit.layout?.onward || []).map((step) => laidDash(step, u)),
  }));
}

/** @param {number[]} step @param {number} unit @returns {Dash} */
function laidDash([contact, imageA, imageB], unit) {
  const { a, b, atomA, atomB } = data.contacts;
  const [residue, other] = [a[contact], b[contact]];
  return {
    contact,
    residue,
    other,
    image: imageB >= 0 ? imageB : imageA,
    from: imageA,
    to: imageB,
    unit,
    ends: [residueAt(residue, imageA), residueAt(other, imageB)],
    atoms: [atomAt(namedAtom(residue, atomA[contact]), imageA), atomAt(namedAtom(other, atomB[contact]), imageB)],
    nearest: false,
  };
}

/** Whether a bead is drawn now: of a unit laid out each residue once. @param {Bead} bead */
function beadShown(bead) {
  const laid = laidOut();
  if (bead.laid !== undefined) return laid !== null && bead.laid === state.unit;
  return bead.image < 0 || (state.neighbours && !laid);
}

/** A residue of this molecule that is drawn laid out elsewhere. @param {Bead} bead */
function standsElsewhere(bead) {
  const laid = laidOut();
  if (!laid || bead.laid !== undefined || data.entries.unit[bead.entry] !== state.unit) return false;
  return !laid.residues.some((r, i) => r === bead.residue && laid.images[i] < 0);
}

/** Whether a bead is one of the chosen, to be ringed and named. @param {Bead} bead */
function beadStands(bead) {
  return beadShown(bead) && !bead.again && !standsElsewhere(bead);
}

/** @returns {{dash: Dash, colour: string, radius: number, ends: number[][]}[]} */
function shownLaidDashes() {
  const colour = unitColour(state.unit);
  const drawn = (/** @type {Dash} */ dash) => (state.sides ? dash.atoms : dash.ends);
  const { joined, onward } = laidDashes[state.unit];
  return [
    ...joined.map((dash) => ({ dash, colour, radius: state.sides ? 0.09 : 0.2, ends: drawn(dash) })),
    ...onward.map((dash) => ({ dash: { ...dash, onward: true }, colour: mix(colour, 0.3), radius: 0.08, ends: drawn(dash) })),
  ];
}

/**
 * Residues of each image round the members in it, as half-open ranges; of next copies too.
 * @returns {{image: number, ranges: number[][], colour: string, width: number}[]}
 */
function laidStretches() {
  const laid = laidOut();
  if (!laid) return [];
  const chain = data.residues.chain;
  const own = new Set(laid.images);
  const all = new Set([...laid.images, ...laid.again.flat()]);
  return [...all].filter((image) => image >= 0).map((image) => {
    const inside = new Set();
    laid.residues.forEach((residue, i) => {
      if (laid.images[i] !== image && !laid.again.some((images) => images[i] === image)) return;
      for (let r = residue - STRETCH; r <= residue + STRETCH; r++) if (chain[r] === chain[residue]) inside.add(r);
    });
    const rising = [...inside].sort((p, q) => p - q);
    /** @type {number[][]} */
    const ranges = [];
    for (const r of rising) {
      const last = ranges[ranges.length - 1];
      if (last && last[1] === r && chain[r] === chain[r - 1]) last[1] = r + 1;
      else ranges.push([r, r + 1]);
    }
    // Between this molecule and its neighbours in weight; next copies like neighbours.
    const colour = own.has(image) ? mix(tokens.thread, 0.3, tokens.mate) : tokens.mate;
    return { image, ranges, colour, width: own.has(image) ? 0.22 : 0.15 };
  });
}

function drawStretches() {
  for (const model of laidModels) viewer.removeModel(model);
  laidModels = laidStretches().map(({ image, ranges, colour, width }) => {
    const model = backboneModel(ranges, image);
    model.setStyle({}, threadStyle(colour, width));
    return model;
  });
}

/** Numeral, operator and shift by each image that holds members; what the unit closes to. @param {Obstacles} obstacles @param {boolean} place */
function laidNames(obstacles, place) {
  const laid = laidOut();
  if (!laid) return [];
  const drawn = (/** @type {Dash} */ dash) => ({ dash, ends: state.sides ? dash.atoms : dash.ends });
  const { joined, onward } = laidDashes[state.unit];
  const images = [...new Set(laid.images)].filter((image) => image >= 0);
  const nodes = images.flatMap((image) => {
    const list = joined.filter((dash) => dash.from === image || dash.to === image).map(drawn);
    const { numeral, printed } = imageOf(image);
    return list.length && printed ? contactName(image, list, obstacles, place, numeral) : [];
  });
  if (!images.length && joined.some((dash) => data.contacts.numeral[dash.contact])) {
    nodes.push(...contactName(-1, joined.map(drawn), obstacles, place));
  }
  if (laid.closes) {
    const points = (onward.length ? onward : joined).flatMap((dash) => samples(drawn(dash).ends, 9));
    const [first, rest] = [data.units[state.unit].name, ` ${laid.closes}`];
    nodes.push(...placedName("closes", first, [rest], points.length ? points : [[view.width / 2, 20]], obstacles, place));
  }
  return nodes;
}

/** Bring a unit that reaches out of the picture into it. */
function showAllOfLayout() {
  const laid = laidOut();
  if (!laid) return;
  const wanted = (/** @type {Bead} */ bead) => beadStands(bead) || (laid.ring && bead.again && beadShown(bead));
  const stand = beads.filter((bead) => wanted(bead) && state.chosen.has(bead.entry));
  const outside = stand.some((bead) => {
    const p = project(bead.at);
    return p.x < 0.07 * view.width || p.x > 0.93 * view.width || p.y < 0.08 * view.height || p.y > 0.92 * view.height;
  });
  if (outside) frame([...stand.map((bead) => bead.at), ...data.copies.residue.map((r) => residueAt(r))], 5);
}

/** @param {Layout} laid @returns {(Node|string)[]} */
function laidCaption(laid) {
  /** @type {Map<number, string[]>} */
  const there = new Map();
  laid.members.forEach((entry, i) => {
    const image = laid.images[i];
    there.set(image, [...(there.get(image) || []), data.entries.name[entry] + (image < 0 ? "" : "′")]);
  });
  const where = [...there].sort(([p], [q]) => p - q).map(([image, names]) => {
    if (image < 0) return `${listing(names)} of this molecule`;
    const { printed, shift, numeral } = imageOf(image);
    const what = numeral ? "neighbour" : "copy";
    return `${listing(names)} of the ${printed ? `${what} at ${printed} (${shift.map(minus).join(" ")})` : "mate in the assembly"}`;
  });
  const last = where.pop();
  const words = [`Each residue is drawn once, where it meets the others: ${where.length ? `${where.join(", ")} and ${last}` : last}. `];
  if (there.size > 1) words.push("Pale beads in this molecule: the same residues. ");
  if (laid.closes) words.push(`The unit ${laid.closes}${laid.again.length ? `; its ${laid.ring ? "other" : "next"} copies are pale` : ""}. `);
  return words;
}
