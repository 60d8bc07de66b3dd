// Part a: the molecule amid its neighbours, beads on a thread.

/**
 * @typedef {object} Bead
 * @property {number} entry
 * @property {number} residue
 * @property {number} image -1 in this molecule
 * @property {number[]} at
 * @property {number} radius
 * @property {string} colour
 * @property {number} [laid] unit that it is laid out for, only drawn when that is chosen
 * @property {boolean} [again] in another copy of the unit
 */

/**
 * A contact as it is drawn, from this molecule into a neighbour.
 * @typedef {object} Dash
 * @property {number} contact
 * @property {number} residue in this molecule
 * @property {number} other residue in the neighbour
 * @property {number} image
 * @property {number} unit that it joins, -1 for none
 * @property {number[][]} ends bead to bead
 * @property {number[][]} atoms atom to atom
 * @property {boolean} nearest of its residue and image
 * @property {number} [from] image of the residue where a unit is laid out
 * @property {number} [to] image of the other one
 * @property {boolean} [onward] out to the next copy of a unit
 */

const ALLOWED_CALLS = new Set(["addModel", "setProjection"]);
const BACKBONE = new Set(["N", "CA", "C", "O", "P", "OP1", "OP2", "O5'"]);

/** @type {any} */
let viewer = null;
/** @type {any} */
let moleculeModel = null;
/** @type {any[]} */
let mateModels = [];
/** @type {any} */
let beadModel = null;
/** @type {any} */
let sideModel = null;
/** @type {any[]} */
let dashShapes = [];
/** @type {Bead[]} */
let beads = [];
/** @type {Dash[]} */
let dashes = [];
let pictureWaits = false;
let sceneChanged = false;
let lastView = "";

/** Make the picture, flat where the browser offers no WebGL. */
function startPicture() {
  readAtoms();
  dashes = findDashes();
  beads = [...findBeads(), ...findLaidBeads()];
  findLaidDashes();
  measurePicture();
  resetView();
  if (offersWebGl()) {
    try {
      makeViewer();
    } catch (problem) {
      viewer = null;
      byId("canvas").replaceChildren();
    }
  }
  state.flat = !viewer;
  if (viewer) {
    setSurroundings();
    drawThreads();
  }
}

function makeViewer() {
  viewer = library.createViewer(byId("canvas"), {
    backgroundColor: tokens.paper,
    nomouse: true,
    antialias: true,
    cartoonQuality: data.residues.name.length > 1500 ? 4 : 9,
  });
  if (!viewer) return;
  // We lay the picture out ourselves; the library's watchers would only draw it again.
  viewer.divwatcher?.disconnect();
  viewer.intwatcher?.disconnect();
  applyView();
  for (const [name, ...values] of data.calls) {
    if (ALLOWED_CALLS.has(name)) viewer[name](...values);
  }
  moleculeModel = viewer.getModel(0);
  data.images.forEach((image, i) => mateModels.push(backboneModel(image.drawn, i)));
  beadModel = viewer.addModel();
  beadModel.addAtoms(beads.map(beadAtom));
}

/**
 * The backbone of a neighbour, or of stretches of it, as a model of its own.
 * @param {number[][]} ranges of residues
 * @param {number} index
 */
function backboneModel(ranges, index) {
  const own = moleculeModel.selectedAtoms({});
  const kept = [];
  for (const [from, to] of ranges) {
    for (let a = firstAtom[from]; a < firstAtom[to]; a++) {
      if (BACKBONE.has(atomNames[a])) kept.push(movedAtom(own[a], a, index));
    }
  }
  const model = viewer.addModel();
  model.addAtoms(kept);
  return model;
}

/**
 * @param {any} atom
 * @param {number} index
 * @param {number} image
 */
function movedAtom(atom, index, image) {
  const [x, y, z] = atomAt(index, image);
  return { ...atom, x, y, z, index, style: {}, bonds: [...atom.bonds] };
}

/** @param {Bead} bead @param {number} i */
function beadAtom(bead, i) {
  const [x, y, z] = bead.at;
  return { elem: "C", atom: "BEAD", resn: "BEAD", x, y, z, serial: i, index: i, resi: i, chain: "B", hetflag: true, bonds: [], bondOrder: [], style: {} };
}

/** Beads of this molecule, and of members that join a unit from a neighbour. */
function findBeads() {
  const { copies } = data;
  /** @type {Bead[]} */
  const found = copies.entry.map((entry, i) => ({
    entry,
    residue: copies.residue[i],
    image: -1,
    at: atomAt(copies.atom[i]),
    radius: 1,
    colour: "",
  }));
  const known = new Set();
  for (const dash of dashes) {
    const key = `${dash.other}/${dash.image}`;
    if (dash.unit < 0 || dash.image < 0 || known.has(key)) continue;
    known.add(key);
    const first = data.residues.first[dash.other];
    const there = entriesOfResidue.get(first) || [];
    const entry = there.find((e) => data.entries.unit[e] === dash.unit);
    if (entry === undefined) continue;
    found.push({ entry, residue: dash.other, image: dash.image, at: dash.ends[1], radius: 1, colour: "" });
  }
  return found;
}

/** Lattice contacts, both ways: from each partner in this molecule. */
function findDashes() {
  const { contacts, images, units } = data;
  /** @type {Dash[]} */
  const found = [];
  const unitOf = new Map();
  units.forEach((unit, u) => unit.contacts.forEach((c) => unitOf.set(c, u)));
  contacts.a.forEach((a, c) => {
    const image = contacts.image[c];
    if (contacts.kind[c] !== contacts.lattice) return;
    const unit = unitOf.has(c) ? unitOf.get(c) : -1;
    add(c, a, contacts.b[c], image, unit, contacts.atomA[c], contacts.atomB[c]);
    const back = image < 0 ? -1 : images[image].inverse;
    if (back >= 0 && !(back === image && a === contacts.b[c])) {
      add(c, contacts.b[c], a, back, unit, contacts.atomB[c], contacts.atomA[c]);
    }
  });
  const best = new Map();
  for (const dash of found) {
    const key = `${dash.residue}/${dash.image}`;
    const before = best.get(key);
    if (!before || contacts.distance[dash.contact] < contacts.distance[before.contact]) best.set(key, dash);
  }
  for (const dash of best.values()) dash.nearest = true;
  return found;

  /**
   * @param {number} contact
   * @param {number} residue
   * @param {number} other
   * @param {number} image
   * @param {number} unit
   * @param {string} atomOwn
   * @param {string} atomOther
   */
  function add(contact, residue, other, image, unit, atomOwn, atomOther) {
    found.push({
      contact,
      residue,
      other,
      image,
      unit,
      ends: [residueAt(residue), residueAt(other, image)],
      atoms: [atomAt(namedAtom(residue, atomOwn)), atomAt(namedAtom(other, atomOther), image)],
      nearest: false,
    });
  }
}

// --- how things look now ---

/** @param {string} color @param {number} width */
function threadStyle(color, width) {
  const style = atomNames.includes("O") || atomNames.includes("P") ? "oval" : "trace";
  return { cartoon: { style, color, width, thickness: width, arrows: false, ribbon: false } };
}

/** Colours of the threads; they change with the theme alone. */
function drawThreads() {
  const backbone = { atom: [...BACKBONE] };
  moleculeModel.setStyle({}, {});
  moleculeModel.setStyle(backbone, threadStyle(tokens.thread, 0.3));
  for (const model of mateModels) {
    model.setStyle(backbone, threadStyle(tokens.mate, 0.15));
    if (state.neighbours) model.show();
    else model.hide();
  }
}

/** Ground, fog and outline. */
function setSurroundings() {
  viewer.setBackgroundColor(tokens.paper);
  const depth = data.view.depth + 24;
  viewer.setSlab(-depth - 20, depth + 10);
  viewer.enableFog?.({ fogStart: 0.4, fogEnd: 1 });
  viewer.setViewStyle(
    isDark() ? { style: "" } : { style: "outline", color: tokens.ink, width: 0.025 },
  );
}

/** Draw beads, contacts and side chains anew after a choice. */
function restyle() {
  styleBeads();
  if (!viewer) return;
  const atoms = beadModel.selectedAtoms({});
  beads.forEach((bead, i) => {
    atoms[i].style = beadShown(bead) ? { sphere: { radius: bead.radius, color: bead.colour } } : {};
  });
  // Setting one style through the library makes it draw the model anew.
  if (atoms.length) beadModel.setStyle({ serial: 0 }, atoms[0].style);
  drawStretches();
  drawSideChains();
  drawDashes();
  sceneChanged = true;
}

function styleBeads() {
  const kin = kinOfChosen();
  for (const bead of beads) {
    bead.radius = beadRadius(bead.entry) * (state.sides ? 0.45 : 1);
    let colour = entryColour(bead.entry);
    if (bead.again || standsElsewhere(bead)) {
      colour = mix(colour, 0.64);
      bead.radius *= 0.62;
    } else if (bead.image >= 0 && bead.laid === undefined) colour = mix(colour, 0.45);
    if (state.chosen.size && !state.chosen.has(bead.entry)) {
      colour = mix(colour, kin.has(bead.entry) ? 0.3 : 0.64);
    }
    bead.colour = colour;
  }
}

/** @param {number} e */
function beadRadius(e) {
  const { value } = data.entries;
  if (state.colour === "membership") return 0.45 + 1.25 * Math.sqrt(certainty(e));
  return 0.62 + 1.05 * Math.sqrt(Math.max(0, sizeOf(value[e] || 0)));
}

/** Whether the size of a bead shows the distance from the baseline, not the value. */
function sizedByDistance() {
  const band = data.quantity.band;
  return scale.signed || (band !== null && (band[0] > 0 || band[1] < 0));
}

/** @param {number} value @returns {number} from 0 to 1 */
function sizeOf(value) {
  if (!sizedByDistance()) return value / scale.extent;
  const band = data.quantity.band;
  const centre = band ? (band[0] + band[1]) / 2 : 0;
  return Math.abs(value - centre) / Math.max(scale.high - centre, centre - scale.low);
}

/** Residues of the same unit as a chosen site, or touching it. */
function kinOfChosen() {
  /** @type {Set<number>} */
  const kin = new Set();
  if (state.unit >= 0) return kin;
  for (const e of state.chosen) {
    for (const touch of touches[e] || []) kin.add(touch.entry);
    const unit = data.entries.unit[e];
    if (unit >= 0) for (const member of data.units[unit].members) kin.add(member);
  }
  return kin;
}

/**
 * The contacts that are drawn now, with colour and width.
 * @returns {{dash: Dash, colour: string, radius: number, ends: number[][]}[]}
 */
function shownDashes() {
  if (!state.contacts) return [];
  if (laidOut()) return shownLaidDashes();
  const shown = [];
  const sites = state.unit < 0 && state.chosen.size > 0;
  const chosenResidues = new Set(Array.from(state.chosen, (e) => data.entries.residue[e]));
  for (const dash of dashes) {
    if (dash.image >= 0 && !state.neighbours) continue;
    const own =
      sites &&
      (chosenResidues.has(data.residues.first[dash.residue]) ||
        (dash.unit >= 0 && chosenResidues.has(data.residues.first[dash.other])));
    const ends = state.sides && dash.unit >= 0 ? dash.atoms : dash.ends;
    if (dash.unit >= 0) {
      if (state.unit >= 0 && dash.unit !== state.unit) continue;
      const colour = unitColour(dash.unit);
      const radius = state.sides ? 0.09 : 0.2;
      shown.push({ dash, colour: sites && !own ? mix(colour, 0.4) : colour, radius, ends });
    } else if (sites) {
      if (own) shown.push({ dash, colour: tokens.ink, radius: state.sides ? 0.07 : 0.13, ends: state.sides ? dash.atoms : ends });
    } else if (state.unit < 0 && dash.nearest) {
      shown.push({ dash, colour: tokens.rule2, radius: 0.055, ends });
    }
  }
  return shown;
}

function drawDashes() {
  for (const shape of dashShapes) viewer.removeShape(shape);
  dashShapes = [];
  /** @type {Map<string, any>} */
  const shapes = new Map();
  for (const { colour, radius, ends } of shownDashes()) {
    let shape = shapes.get(colour);
    if (!shape) {
      shape = viewer.addShape({ color: colour });
      shapes.set(colour, shape);
      dashShapes.push(shape);
    }
    const [start, end] = ends.map(([x, y, z]) => ({ x, y, z }));
    const thin = radius < 0.1;
    shape.addDashedCylinder({
      start,
      end,
      radius,
      color: colour,
      dashLength: thin ? 0.55 : 0.7,
      gapLength: 0.5,
      fromCap: 1,
      toCap: 1,
    });
  }
}

/**
 * Residues whose side chains are drawn: [residue, image].
 * @returns {number[][]}
 */
function sideResidues() {
  /** @type {Map<string, number[]>} */
  const wanted = new Map();
  const chosen = state.chosen.size ? [...state.chosen] : data.units.flatMap((u) => u.members);
  const first = new Set(chosen.map((e) => data.entries.residue[e]));
  data.residues.first.forEach((r, residue) => {
    if (first.has(r)) wanted.set(`${residue}/-1`, [residue, -1]);
  });
  const laid = laidOut();
  laid?.residues.forEach((r, i) => wanted.set(`${r}/${laid.images[i]}`, [r, laid.images[i]]));
  for (const { dash } of laid ? [] : shownDashes()) {
    if (dash.unit >= 0 || state.chosen.size) {
      wanted.set(`${dash.other}/${dash.image}`, [dash.other, dash.image]);
    }
  }
  return [...wanted.values()];
}

function drawSideChains() {
  if (sideModel) viewer.removeModel(sideModel);
  sideModel = null;
  if (!state.sides) return;
  const own = moleculeModel.selectedAtoms({});
  sideModel = viewer.addModel();
  for (const [residue, image] of sideResidues()) {
    const kept = [];
    for (let a = firstAtom[residue]; a < firstAtom[residue + 1]; a++) {
      if (!BACKBONE.has(atomNames[a]) || atomNames[a] === "CA") kept.push(a);
    }
    const color = image >= 0 ? mix(tokens.ink3, 0.4) : tokens.ink3;
    const ball = image >= 0 ? mix(tokens.ink, 0.4) : tokens.ink;
    const moved = kept.map((a) => {
      const atom = movedAtom(own[a], a, image);
      const polar = ["N", "O", "S"].includes(atomElements[a]);
      atom.style = { stick: { radius: 0.14, color } };
      if (polar) atom.style.sphere = { radius: 0.34, color: ball };
      return atom;
    });
    sideModel.addAtoms(moved);
  }
}

// --- drawing ---

function measurePicture() {
  const box = byId("picture");
  view.width = Math.max(1, box.clientWidth);
  view.height = Math.max(1, box.clientHeight);
}

/** Ask for a frame; several requests make one. */
function showPicture() {
  if (pictureWaits) return;
  pictureWaits = true;
  requestAnimationFrame(() => {
    pictureWaits = false;
    drawFrame(true);
  });
}

/** Hand the view to the library, which draws at once. */
function applyView() {
  lastView = viewText();
  viewer.setView(libraryView());
}

let framesSinceWriting = 0;

/** @param {boolean} withWriting */
function drawFrame(withWriting) {
  if (viewer) {
    if (viewText() !== lastView) applyView();
    if (sceneChanged) viewer.render();
    sceneChanged = false;
  }
  framesSinceWriting++;
  const moving = byId("picture").classList.contains("dragging");
  if (withWriting && moving && framesSinceWriting % 4 !== 0) {
    drawOverlay(false);
  } else {
    drawOverlay(true);
  }
  document.documentElement.dataset.gl = viewer ? "1" : "0";
}

/** Frame what is chosen; of a unit across the crystal one side. */
function goCloser() {
  const points = [];
  const laid = laidOut();
  for (const bead of beads) {
    const wanted = laid ? beadStands(bead) : bead.image < 0;
    if (wanted && state.chosen.has(bead.entry)) points.push(bead.at);
  }
  for (const e of state.chosen) {
    if (!isMeasured(e)) points.push(residueAt(data.entries.residue[e]));
  }
  const joining = laid ? [] : shownDashes().filter((s) => s.dash.unit >= 0 && s.dash.unit === state.unit);
  if (joining.length) {
    const image = joining[0].dash.image;
    const side = joining.filter((s) => s.dash.image === image);
    frame(side.flatMap((s) => s.dash.ends), 6);
  } else if (points.length) {
    frame(points, points.length > 1 ? 6 : 12);
  } else {
    return;
  }
  showPicture();
}
