// What the page knows, what is chosen, and the parts that follow a choice.

/**
 * @typedef {object} Entries
 * @property {string[]} name
 * @property {number[]} residue
 * @property {string[]} letter
 * @property {string[]} component
 * @property {number[]} number
 * @property {string[]} insertion
 * @property {string[]} chain
 * @property {string[]} atom
 * @property {string} secondary
 * @property {number[]} unit
 * @property {(number|null)[]} membership
 * @property {(number|null)[]} value
 * @property {(number|null)[]} error
 * @property {(number|null)[]} deviation
 * @property {boolean[]} moves
 * @property {string[]} note
 * @property {(number|null)[]} exposed
 * @property {number[]} contacts
 * @property {(number|null)[]} mate
 */

/**
 * @typedef {object} Unit
 * @property {string} name
 * @property {number[]} members
 * @property {number[][]} pieces
 * @property {string} verdict
 * @property {string} lattice
 * @property {number[]} contacts
 * @property {string[]} numerals
 * @property {string[]} sure
 * @property {string[]} holds
 * @property {string[]} process
 * @property {string} sentence
 * @property {Layout|null} layout
 */

/**
 * How the members of a unit are laid on one another: 0 the lowest of the curve, 1 its height.
 * @typedef {object} Scaled
 * @property {string} verdict
 * @property {boolean} apart one curve a residue
 * @property {number[]} members
 * @property {number[]|null} low
 * @property {number[]|null} height
 */

/**
 * One shared value fitted to a unit; `y` is chi-square over `x` near its lowest.
 * @typedef {object} UnitFit
 * @property {string} parameter
 * @property {string} unit
 * @property {boolean} log
 * @property {string} verdict
 * @property {number|null} value
 * @property {number} best
 * @property {number|null} low
 * @property {number|null} high
 * @property {boolean[]} open
 * @property {number[]} x
 * @property {number[]} y
 * @property {number} lowest
 * @property {number} limit
 * @property {number} each
 * @property {number[]} members
 * @property {(number|null)[]} free
 * @property {string[]} caption
 * @property {string} figures
 */

/**
 * @typedef {object} Profile
 * @property {string} name
 * @property {string} unit
 * @property {number[]} x
 * @property {string} xName
 * @property {string} xUnit
 * @property {boolean} log
 * @property {boolean[]} kept
 * @property {string[]} reason
 * @property {((number|null)[]|null)[]} value
 * @property {((number|null)[]|null)[]} error
 * @property {((number|null)[]|null)[]} above
 * @property {{x: number[], y: (number[]|null)[], band: (number[]|null)[], alone: (number[]|null)[], scaled: Scaled[]}|null} curve
 */

/**
 * @typedef {object} Image
 * @property {string} operator
 * @property {string} printed
 * @property {string} assembly
 * @property {number[]} shift
 * @property {string} numeral
 * @property {number} inverse
 * @property {number[]} matrix
 * @property {number[][]} drawn
 */

/**
 * @typedef {object} Payload
 * @property {string} version
 * @property {string} id
 * @property {boolean} crystal
 * @property {{name: string[], first: number[], chain: number[], anchor: number[], atoms: number[]}} residues
 * @property {Entries} entries
 * @property {{name: string, first: number, count: number}[]} chains
 * @property {{name: string, about: string, unit: string, band: number[]|null, signed: boolean, errorsGiven: boolean, threshold: number, membershipKnown: boolean, secondaryKnown: boolean}} quantity
 * @property {{name: string, unit: string, value: (number|null)[]}[]} columns
 * @property {Unit[]} units
 * @property {(UnitFit|null)[]} fits
 * @property {Profile|null} profile
 * @property {{a: number[], b: number[], kind: number[], distance: number[], image: number[], numeral: string[], atomA: string[], atomB: string[], complex: number, lattice: number}} contacts
 * @property {Image[]} images
 * @property {{printed: string, shift: number[], numeral: string, matrix: number[]}[]} beyond
 * @property {{entry: number[], residue: number[], atom: number[]}} copies
 * @property {any[][]} calls
 * @property {{centre: number[], quaternion: number[], half_width: number, half_height: number, depth: number}} view
 */

/**
 * One residue that an entry touches.
 * @typedef {object} Meeting
 * @property {number} contact
 * @property {number} own residue of this molecule that touches
 * @property {number} residue
 * @property {number} entry first entry of that residue, -1 when it is not listed
 * @property {number} kind
 * @property {number} image -1 in this molecule
 * @property {number} distance
 * @property {string} numeral
 */

/**
 * @typedef {object} Part
 * @property {string} name
 * @property {() => void} [choose]
 * @property {() => void} [hover]
 * @property {() => void} [layout]
 */

/** @type {Payload} */
let data = /** @type {any} */ (null);

const state = {
  /** @type {Set<number>} */
  chosen: new Set(),
  unit: -1,
  hovered: -1,
  anchor: -1,
  cursor: 0,
  /** @type {"value"|"unit"|"membership"} */
  colour: "unit",
  neighbours: true,
  contacts: true,
  sides: false,
  turnable: false,
  printing: false,
  flat: false,
};

/** @type {Part[]} */
const parts = [];

/** @type {Map<number, number[]>} */
const entriesOfResidue = new Map();
/** @type {Map<string, number>} */
const entryOfKey = new Map();
/** @type {Meeting[][]} */
let touches = [];

/**
 * Read the data block, unpacking it where it is packed.
 * @returns {Promise<Payload>}
 */
async function readData() {
  const read = JSON.parse(byId("data").textContent || "{}");
  if (!read.gzip) return read;
  const packed = Uint8Array.from(atob(read.gzip), (c) => c.charCodeAt(0));
  const stream = new Blob([packed]).stream().pipeThrough(new DecompressionStream("gzip"));
  return new Response(stream).json();
}

/** Lay the tables out so that the parts can look things up. */
function prepareData() {
  const { entries, contacts, residues, images } = data;
  entries.residue.forEach((residue, e) => {
    const there = entriesOfResidue.get(residue);
    if (there) there.push(e);
    else entriesOfResidue.set(residue, [e]);
    entryOfKey.set(entryKey(e), e);
  });
  touches = entries.name.map(() => []);
  contacts.a.forEach((a, contact) => {
    const image = contacts.image[contact];
    const back = image < 0 ? -1 : images[image].inverse;
    addTouch(contact, a, contacts.b[contact], image);
    addTouch(contact, contacts.b[contact], a, back);
  });
  for (const list of touches) list.sort((s, t) => s.distance - t.distance);
  state.cursor = 0;

  /**
   * @param {number} contact
   * @param {number} own
   * @param {number} other
   * @param {number} image
   */
  function addTouch(contact, own, other, image) {
    const kind = contacts.kind[contact];
    const first = residues.first[other];
    const there = (first >= 0 && entriesOfResidue.get(first)) || [-1];
    const numeral = contacts.numeral[contact];
    for (const e of entriesOfResidue.get(residues.first[own]) || []) {
      const known = touches[e].find(
        (t) => t.residue === other && t.kind === kind && t.numeral === numeral,
      );
      if (known && known.distance <= contacts.distance[contact]) continue;
      const touch = { contact, own, residue: other, entry: there[0], kind, image, numeral };
      const found = { ...touch, distance: contacts.distance[contact] };
      if (known) Object.assign(known, found);
      else touches[e].push(found);
    }
  }
}

/**
 * Name of an entry in the address.
 * @param {number} e
 */
function entryKey(e) {
  const { chain, number, insertion, atom, residue } = data.entries;
  const shared = (entriesOfResidue.get(residue[e]) || []).length > 1;
  return `${chain[e]}${number[e]}${insertion[e]}${shared || atom[e] ? (atom[e] ? `.${atom[e]}` : "") : ""}`;
}

/**
 * @param {number} e
 */
function isMeasured(e) {
  return data.entries.value[e] !== null;
}

/**
 * Long name of an entry, for tables and tooltips.
 * @param {number} e
 */
function longName(e) {
  const { component, number, insertion, chain, atom } = data.entries;
  const where = data.chains.length > 1 ? `${chain[e]} ` : "";
  const at = atom[e] ? ` ${atom[e]}` : "";
  return `${where}${component[e]} ${minus(number[e])}${insertion[e]}${at}`;
}

/**
 * Choose residues, or a unit, or nothing; every part follows.
 * @param {Iterable<number>} chosen
 * @param {number} [unit]
 * @param {number} [anchor]
 */
function choose(chosen, unit = -1, anchor = -1) {
  state.chosen = new Set(chosen);
  state.unit = unit;
  state.anchor = anchor;
  if (anchor >= 0) state.cursor = anchor;
  for (const part of parts) part.choose?.();
  writeAddress();
}

/**
 * Choose a unit, or let it go when it was chosen.
 * @param {number} unit
 */
function chooseUnit(unit) {
  if (unit === state.unit || !data.units[unit]) choose([]);
  else choose(data.units[unit].members, unit, data.units[unit].members[0]);
}

/**
 * Choose one residue, adding to the others or ranging from the last where asked.
 * @param {number} e
 * @param {{ctrlKey?: boolean, metaKey?: boolean, shiftKey?: boolean}} [keys]
 */
function chooseEntry(e, keys = {}) {
  if (keys.shiftKey && state.anchor >= 0) {
    const low = Math.min(state.anchor, e);
    const high = Math.max(state.anchor, e);
    const range = Array.from({ length: high - low + 1 }, (_, i) => low + i);
    choose(range, -1, state.anchor);
    state.cursor = e;
  } else if (keys.ctrlKey || keys.metaKey) {
    const next = new Set(state.chosen);
    if (!next.delete(e)) next.add(e);
    choose(next, -1, e);
  } else if (state.unit < 0 && state.chosen.size === 1 && state.chosen.has(e)) {
    choose([]);
  } else {
    choose([e], -1, e);
  }
}

/**
 * Say which residue the pointer is over.
 * @param {number} e -1 for none
 */
function hover(e) {
  if (e === state.hovered) return;
  state.hovered = e;
  for (const part of parts) part.hover?.();
}

/** How a choice is written, in the address and in file names. */
function choiceText() {
  if (state.unit >= 0) return data.units[state.unit].name;
  return Array.from(state.chosen, entryKey).join("+");
}

function writeAddress() {
  const address = choiceText();
  const theme = document.documentElement.dataset.theme;
  const query = theme === preferredTheme() ? "" : `?theme=${theme}`;
  const path = location.pathname + query + (address ? `#${encodeURI(address)}` : "");
  try {
    history.replaceState(null, "", path);
  } catch {
    // A sandboxed frame has no address of its own; the choice still holds.
  }
}

/** Take the choice from the address. */
function readAddress() {
  const text = decodeURI(location.hash.slice(1));
  const unit = data.units.findIndex((u) => u.name === text);
  if (unit >= 0) {
    if (unit !== state.unit) chooseUnit(unit);
    return;
  }
  const found = text.split("+").map((key) => entryOfKey.get(key));
  const known = /** @type {number[]} */ (found.filter((e) => e !== undefined));
  if (known.length) choose(known, -1, known[0]);
}

/** @returns {"light"|"dark"} */
function preferredTheme() {
  return matchMedia("(prefers-color-scheme: dark)").matches ? "dark" : "light";
}

/** @param {string} id */
function byId(id) {
  const found = document.getElementById(id);
  if (!found) throw new Error(`no element ${id}`);
  return found;
}
