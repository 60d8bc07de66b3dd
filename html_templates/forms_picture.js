// Several forms side by side: a picture each, all laid on one another, one view for all.

/**
 * One form: threads of the measured chains; coordinates in hundredths of Å.
 * @typedef {object} DrawnForm
 * @property {string} name
 * @property {number[]} place of each residue in the common numbering
 * @property {number[]} chain
 * @property {number[]} first whether it is of the first copy
 * @property {number[]} atoms
 * @property {string} letters a letter an atom
 * @property {number[]} xyz
 */

/**
 * Where the members of a unit stand in one form when it is laid out there.
 * @typedef {object} UnitInForm
 * @property {(number[]|null)[]} at
 * @property {number[]} mate image that each stands in, -1 in the molecule
 * @property {{matrix: number[], printed: string, shift: number[]}[]} mates
 * @property {number[][]} joined two members and the kind of their contact
 */

/**
 * A contact in one form, drawn from each of its residues; without `distance` broken.
 * @typedef {{distance: number|null, ends?: (number[][]|null)[], away?: boolean}} ContactInForm
 */

/**
 * @typedef {object} FormsPayload
 * @property {string[]} places
 * @property {number[]} sites
 * @property {DrawnForm[]} forms
 * @property {{name: string, members: number[], verdict: string, forms: UnitInForm[], said: string[][]}[]} units
 * @property {{places: number[], kind: string, units: number[], forms: (ContactInForm|null)[]}[]} contacts
 * @property {string} core
 * @property {Payload["view"]} view
 */

/**
 * @typedef {object} FormBead
 * @property {number} place
 * @property {number[]} at
 * @property {number} laid unit that it is laid out for, -1 for the molecule's own
 * @property {boolean} mate
 * @property {number} radius
 * @property {string} colour
 */

/**
 * @typedef {{from: number[], to: number[], made: boolean, ball: boolean, radius: number, colour: string, partner: number, text: string}} FormLine
 */

/**
 * @typedef {object} FormPicture
 * @property {number} form
 * @property {HTMLElement} box
 * @property {HTMLElement} over
 * @property {any} viewer
 * @property {any} beadModel
 * @property {any} behind
 * @property {any} thread
 * @property {any} copies of the chain in the same file
 * @property {any[]} extras
 * @property {FormBead[]} beads
 * @property {FormLine[]} lines
 */

const ATOM_OF_LETTER = /** @type {Record<string, string>} */ ({ A: "CA", 1: "OP1", 2: "OP2", 3: "O3'", 4: "C4'", 5: "O5'" });
const KIND_LATTICE = 2;
const BREAK = 3; // a step in residue numbers at which the thread ends
const REACH = 3; // residues of thread to both sides of a member in a neighbour

/** @type {FormsPayload} */
let forms = /** @type {any} */ (null);

const formsState = {
  /** @type {Set<number>} */
  chosen: new Set(),
  unit: -1,
  hovered: -1,
  contact: -1,
  contacts: true,
  behind: true,
  turnable: false,
};

/** @type {FormPicture[]} */
let pictures = [];
/** @type {Map<number, number[]>[]} where the bead of each place stands in each form */
let homes = [];

/** @param {number[]} hundredths */
function angstrom(hundredths) {
  return hundredths.map((v) => v / 100);
}

/** @param {number} f @param {number} atom */
function formAtom(f, atom) {
  return angstrom(forms.forms[f].xyz.slice(3 * atom, 3 * atom + 3));
}

/** First atoms and anchors of the residues of a form. @param {DrawnForm} form */
function residuesOf(form) {
  let atom = 0;
  return form.place.map((place, r) => {
    const first = atom;
    atom += form.atoms[r];
    const letters = form.letters.slice(first, atom);
    const anchor = [letters.indexOf("A"), letters.indexOf("P"), letters.indexOf("4"), 0].find((i) => i >= 0) || 0;
    return { place, first, last: atom, anchor: first + anchor, empty: atom === first };
  });
}

function findHomes() {
  homes = forms.forms.map((form, f) => {
    const found = new Map();
    residuesOf(form).forEach((residue, r) => {
      if (form.first[r] && !residue.empty) found.set(residue.place, formAtom(f, residue.anchor));
    });
    return found;
  });
}

/** The unit of each place, -1 for none. @param {number} place */
function unitOfPlace(place) {
  return forms.units.findIndex((unit) => unit.members.includes(place));
}

/** @param {number} f @returns {FormBead[]} */
function findFormBeads(f) {
  /** @type {FormBead[]} */
  const found = [];
  for (const place of forms.sites) {
    const at = homes[f].get(place);
    if (at) found.push({ place, at, laid: -1, mate: false, radius: 1, colour: "" });
  }
  forms.units.forEach((unit, u) => {
    unit.forms[f].at.forEach((hundredths, i) => {
      if (!hundredths) return;
      const at = angstrom(hundredths);
      const home = homes[f].get(unit.members[i]);
      const same = home && Math.hypot(at[0] - home[0], at[1] - home[1], at[2] - home[2]) < 0.1;
      if (!same) found.push({ place: unit.members[i], at, laid: u, mate: unit.forms[f].mate[i] >= 0, radius: 1, colour: "" });
    });
  });
  return found;
}

// --- making a picture ---

/** @param {number} f @param {boolean} webgl @returns {FormPicture} */
function makePicture(f, webgl) {
  const box = byId(`picture-${f}`);
  const canvas = /** @type {HTMLElement} */ (box.querySelector(".canvas"));
  const over = /** @type {HTMLElement} */ (box.querySelector(".over"));
  const beads = findFormBeads(f);
  /** @type {FormPicture} */
  const picture = { form: f, box, over, viewer: null, beadModel: null, behind: null, thread: null, copies: null, extras: [], beads, lines: [] };
  if (!webgl) return picture;
  const options = { backgroundColor: tokens.paper, nomouse: true, antialias: true, cartoonQuality: 8 };
  const viewer = library.createViewer(canvas, options);
  if (!viewer) return picture;
  viewer.divwatcher?.disconnect();
  viewer.intwatcher?.disconnect();
  viewer.setProjection("orthographic");
  viewer.setView(libraryView());
  picture.viewer = viewer;
  const first = (/** @type {number} */ form) => (/** @type {number} */ r) => Boolean(forms.forms[form].first[r]);
  if (f > 0) picture.behind = threadModel(viewer, 0, first(0));
  picture.thread = threadModel(viewer, f, first(f));
  if (forms.forms[f].first.includes(0)) picture.copies = threadModel(viewer, f, (r) => !first(f)(r));
  picture.beadModel = viewer.addModel();
  picture.beadModel.addAtoms(beads.map((bead, i) => plainAtom("C", "BEAD", bead.at, i, i, "B")));
  return picture;
}

/** @param {string} elem @param {string} atom @param {number[]} at @param {number} index @param {number} resi @param {string} chain */
function plainAtom(elem, atom, at, index, resi, chain) {
  const [x, y, z] = at;
  return { elem, atom, resn: "RES", x, y, z, serial: index, index, resi, chain, ss: "c", hetflag: false, bonds: [], bondOrder: [], style: {} };
}

/**
 * The thread of a form, or of some of its residues moved into a neighbour.
 * @param {any} viewer
 * @param {number} f
 * @param {(residue: number) => boolean} [wanted]
 * @param {number[]} [matrix]
 */
function threadModel(viewer, f, wanted = () => true, matrix = []) {
  const form = forms.forms[f];
  /** @type {any[]} */
  const atoms = [];
  let number = 0;
  let before = -1;
  residuesOf(form).forEach((residue, r) => {
    const joined = before >= 0 && r === before + 1 && form.chain[r] === form.chain[before] && residue.place === form.place[before] + 1;
    if (!wanted(r) || residue.empty) return;
    number += joined ? 1 : BREAK;
    before = r;
    for (let a = residue.first; a < residue.last; a++) {
      const letter = form.letters[a];
      const at = matrix.length ? movedBy(matrix, formAtom(f, a)) : formAtom(f, a);
      atoms.push(plainAtom(letter === "A" ? "C" : letter, ATOM_OF_LETTER[letter] || letter, at, atoms.length, number, "A"));
    }
  });
  const model = viewer.addModel();
  model.addAtoms(atoms);
  return model;
}

/** @param {number[]} m @param {number[]} p */
function movedBy(m, p) {
  return [0, 4, 8].map((r) => m[r] * p[0] + m[r + 1] * p[1] + m[r + 2] * p[2] + m[r + 3]);
}

/** @param {number} f @param {string} color @param {number} width */
function formTube(f, color, width) {
  const style = forms.forms[f].letters.includes("O") || forms.forms[f].letters.includes("P") ? "oval" : "trace";
  return { cartoon: { style, color, width, thickness: width, arrows: false, ribbon: false } };
}

/** Ground, fog, outline and threads of the theme. @param {FormPicture} picture */
function dressPicture(picture) {
  const { viewer, form } = picture;
  if (!viewer) return;
  viewer.setBackgroundColor(tokens.paper);
  const depth = data.view.depth + 24;
  viewer.setSlab(-depth - 20, depth + 10);
  viewer.enableFog?.({ fogStart: 0.4, fogEnd: 1 });
  viewer.setViewStyle(isDark() ? { style: "" } : { style: "outline", color: tokens.ink, width: 0.025 });
  picture.thread.setStyle({}, formTube(form, tokens.thread, 0.3));
  picture.copies?.setStyle({}, formTube(form, tokens.mate, 0.15));
  if (!picture.behind) return;
  picture.behind.setStyle({}, formTube(0, tokens.mate, 0.15));
  if (formsState.behind) picture.behind.show();
  else picture.behind.hide();
}

// --- how things look now ---

/** @param {FormBead} bead */
function formBeadShown(bead) {
  return bead.laid < 0 || bead.laid === formsState.unit;
}

/** Whether a bead is what is chosen, and not the same residue again. @param {FormPicture} picture @param {FormBead} bead */
function formBeadStands(picture, bead) {
  if (!formBeadShown(bead)) return false;
  const again = bead.laid < 0 && formsState.unit >= 0 && picture.beads.some((b) => b.laid === formsState.unit && b.place === bead.place);
  return !again;
}

/** @param {FormPicture} picture */
function restyleForm(picture) {
  const { chosen, unit } = formsState;
  for (const bead of picture.beads) {
    const own = bead.laid >= 0 ? bead.laid : unitOfPlace(bead.place);
    bead.radius = own >= 0 ? 1 : 0.62;
    let colour = own >= 0 ? unitColour(own) : tokens.quiet;
    if (!formBeadStands(picture, bead)) {
      bead.radius *= 0.62;
      colour = mix(colour, 0.64);
    } else if (chosen.size && !chosen.has(bead.place)) colour = mix(colour, unit < 0 && own >= 0 ? 0.4 : 0.64);
    bead.colour = colour;
  }
  picture.lines = formLines(picture.form);
  if (!picture.viewer) return;
  const atoms = picture.beadModel.selectedAtoms({});
  picture.beads.forEach((bead, i) => {
    atoms[i].style = formBeadShown(bead) ? { sphere: { radius: bead.radius, color: bead.colour } } : {};
  });
  if (atoms.length) picture.beadModel.setStyle({ serial: 0 }, atoms[0].style);
  drawExtras(picture);
}

/** Contacts as lines, and the thread round members in neighbours. @param {FormPicture} picture */
function drawExtras(picture) {
  const { viewer, form } = picture;
  for (const extra of picture.extras) {
    if (extra.selectedAtoms) viewer.removeModel(extra);
    else viewer.removeShape(extra);
  }
  picture.extras = [];
  if (formsState.unit >= 0) {
    const laid = forms.units[formsState.unit].forms[form];
    laid.mates.forEach(({ matrix }, m) => {
      const places = forms.units[formsState.unit].members.filter((_, i) => laid.mate[i] === m);
      const { place, first } = forms.forms[form];
      const near = (/** @type {number} */ r) => Boolean(first[r]) && places.some((p) => Math.abs(place[r] - p) <= REACH);
      const model = threadModel(viewer, form, near, matrix);
      model.setStyle({}, formTube(form, mix(tokens.thread, 0.3, tokens.mate), 0.22));
      picture.extras.push(model);
    });
  }
  /** @type {Map<string, any>} */
  const shapes = new Map();
  for (const line of picture.lines) {
    let shape = shapes.get(line.colour);
    if (!shape) shapes.set(line.colour, (shape = viewer.addShape({ color: line.colour })));
    const [start, end] = [line.from, line.to].map(([x, y, z]) => ({ x, y, z }));
    const { radius, colour: color } = line;
    if (line.made) shape.addCylinder({ start, end, radius, color, fromCap: 1, toCap: 1 });
    else shape.addDashedCylinder({ start, end, radius, color, dashLength: 0.7, gapLength: 0.6, fromCap: 1, toCap: 1 });
    if (line.ball) shape.addSphere({ center: end, radius: Math.max(0.28, 3 * radius), color });
  }
  picture.extras.push(...shapes.values());
}

/** The contacts that are drawn now in a form. @param {number} f @returns {FormLine[]} */
function formLines(f) {
  const { unit, chosen, contact } = formsState;
  if (!formsState.contacts) return [];
  if (unit >= 0) return unitLines(f, unit);
  const lines = forms.contacts.flatMap((row, c) => {
    const own = contact >= 0 ? c === contact : row.places.some((p) => chosen.has(p));
    if (chosen.size && !own) return [];
    const inside = row.units[0] >= 0 && row.units[0] === row.units[1] ? row.units[0] : -1;
    const colour = chosen.size ? tokens.ink : inside >= 0 ? unitColour(inside) : isDark() ? tokens.ink3 : tokens.rule2;
    return contactLine(f, c, colour, chosen.size ? 0.12 : 0.05);
  });
  return lines;
}

/** @param {number} f @param {number} c @param {string} colour @param {number} radius @returns {FormLine[]} */
function contactLine(f, c, colour, radius) {
  const row = forms.contacts[c];
  const here = row.forms[f];
  if (!here) return [];
  // Where it is broken the line ends where the partner stands in the form that has it.
  const source = here.ends ? here : row.forms.find((form) => form?.ends);
  const { away = false, ends = [null, null] } = source || {};
  const made = here.distance !== null;
  const chosen = row.places.map((p) => formsState.chosen.has(p));
  const both = away && chosen[0] && chosen[1];
  const sides = [0, 1].filter((side) => ends[side] && (both || chosen[side] || !(chosen[0] || chosen[1])));
  if (!sides.length) sides.push(...[0, 1].filter((side) => ends[side]));
  return (away && both ? sides : sides.slice(0, 1)).flatMap((side) => {
    const drawn = /** @type {number[][]} */ (ends[side]).map(angstrom);
    const from = here.ends ? drawn[0] : homes[f].get(row.places[side]);
    const to = here.ends || away ? drawn[1] : homes[f].get(row.places[1 - side]);
    if (!from || !to) return [];
    const text = made ? `${Number(here.distance).toFixed(1)}\u00a0Å` : "";
    return [{ from, to, made, ball: away, radius: made ? radius : 0.6 * radius, colour, partner: row.places[1 - side], text }];
  });
}

/** Contacts between members where the unit is laid out; dashed those of other forms alone. @param {number} f @param {number} u @returns {FormLine[]} */
function unitLines(f, u) {
  const unit = forms.units[u];
  const pairs = new Map(unit.forms.flatMap((form) => form.joined.map(([i, j]) => [`${i}/${j}`, [i, j]])));
  const made = new Map(unit.forms[f].joined.map(([i, j, kind]) => [`${i}/${j}`, kind]));
  return [...pairs].flatMap(([key, [i, j]]) => {
    const [from, to] = [unit.forms[f].at[i], unit.forms[f].at[j]];
    if (!from || !to) return [];
    const kind = made.get(key);
    const radius = kind === undefined ? 0.07 : kind === KIND_LATTICE ? 0.2 : 0.12;
    return [{ from: angstrom(from), to: angstrom(to), made: kind !== undefined, ball: false, radius, colour: unitColour(u), partner: -1, text: "" }];
  });
}
