// The caption: in words, what the picture shows now.

function drawCaption() {
  byId("caption").replaceChildren(element("span", {}, ...captionWords()));
  byId("closer").hidden = state.flat || state.chosen.size === 0;
}

/** @returns {(Node|string)[]} */
function captionWords() {
  if (state.unit >= 0) return unitCaption(state.unit);
  const chosen = [...state.chosen];
  if (chosen.length === 1) return siteCaption(chosen[0]);
  if (chosen.length) return severalCaption(chosen);
  return nothingCaption();
}

/** @param {string} text */
function lead(text) {
  return element("b", {}, text);
}

function nothingCaption() {
  const words = [];
  const mates = data.images.length;
  if (mates && state.neighbours) {
    const crystal = data.images.some((i) => i.numeral);
    const kind = crystal ? "crystal neighbour" : "mate";
    words.push(`The molecule amid its ${inWords(mates)} ${kind}${mates === 1 ? "" : "s"}, drawn thin. `);
    if (crystal && state.contacts) {
      words.push("Dashed lines join residues that touch across a crystal contact");
      const joined = data.units.some((u) => u.contacts.length);
      words.push(joined ? ", in a unit’s colour where the unit rests on that contact. " : ". ");
    }
  } else if (!data.crystal) {
    words.push("The molecule alone: the file has no crystal, so contacts are those inside the molecule or assembly. ");
  } else {
    words.push("The molecule without its neighbours. ");
  }
  if (!state.printing) {
    const keys = Math.min(9, data.units.length);
    const take = keys === 1 ? "key 1 takes the unit" : `keys 1 to ${keys} take a unit`;
    words.push(`Choose a bead, a column, a ${data.profile ? "curve" : "point"} or a row and everything follows; ${keys ? `${take}, ` : ""}Escape clears.`);
  }
  return words;
}

/** @param {number} u @returns {(Node|string)[]} */
function unitCaption(u) {
  const unit = data.units[u];
  const names = (/** @type {number[]} */ list) => list.map((e) => data.entries.name[e]).join(" ");
  /** @type {(Node|string)[]} */
  const words = [lead(`${unit.name} chosen.`), " "];
  const laid = laidOut();
  if (laid) {
    words.push(...laidCaption(laid));
  } else if (unit.lattice.startsWith("lattice")) {
    const [first, ...rest] = unit.pieces;
    const image = shownImages(u)[0];
    const where = image ? `the neighbour at ${image.printed}` : "another molecule of the file";
    words.push(`${names(first)} of this molecule ${first.length === 1 ? "meets" : "meet"} ${rest.map(names).join(" and ")} of ${where}`);
    words.push(shownImages(u).length > 1 ? "; the same contact returns on the other side. " : ". ");
  } else {
    const some = unit.members.length > 12 ? `${unit.members.length} residues` : names(unit.members);
    words.push(`${some} ${unit.lattice === "interface" ? "bridge the assembly" : "touch inside the molecule"}. `);
  }
  const untested = unit.process.length === 1 && unit.process[0] === "not tested";
  words.push(...rich(untested ? "Whether one process explains them was not tested. " : `${capital(unit.process.join(", "))}. `));
  if (data.crystal) {
    const left = unit.holds.find((line) => / without /.test(line)) || unit.holds[unit.holds.length - 1];
    words.push(unit.lattice.startsWith("lattice") ? `Without neighbours: ${left.replace(/ without it/, "")}.` : `${capital(left)}.`);
  }
  return words;
}

/** Images across which a unit is joined, each once. @param {number} u */
function shownImages(u) {
  const found = new Map();
  for (const dash of dashes) if (dash.unit === u && dash.image >= 0) found.set(dash.image, data.images[dash.image]);
  return [...found.values()];
}

/** @param {string} text */
function capital(text) {
  return text.charAt(0).toUpperCase() + text.slice(1);
}

/** @param {number} e @returns {(Node|string)[]} */
function siteCaption(e) {
  const { name, unit } = data.entries;
  /** @type {(Node|string)[]} */
  const words = [lead(`${name[e]} chosen.`), " "];
  if (isMeasured(e)) {
    words.push(...rich(valueText(e)), ", ", baselineText(e));
    if (unit[e] >= 0) words.push("; ", membershipText(e));
    words.push(". ");
  } else {
    words.push("Not measured, which says nothing about its motion. ");
  }
  words.push(...touchText(e), surroundingsText(e));
  return words;
}

/** Helix or strand, how open the residue lies, the nearest crystal mate. @param {number} e */
function surroundingsText(e) {
  const { exposed, mate } = data.entries;
  const said = [];
  const kind = secondaryName(e);
  if (kind) said.push(`in a ${kind}`);
  const share = exposed[e];
  if (share !== null) said.push(`${fixed(percent(share), 0)}\u00a0% of its surface open`);
  const gap = mate[e];
  if (gap !== null) said.push(`${fixed(gap, 1)}\u00a0Å to the nearest crystal mate`);
  return said.length ? ` ${capital(said.join(", "))}.` : "";
}

/** @param {number} e */
function valueText(e) {
  const { value, error } = data.entries;
  const unit = data.quantity.unit ? `\u00a0${data.quantity.unit}` : "";
  const spread = error[e] === null ? "" : ` ± ${fixed(error[e])}`;
  return `${data.quantity.name} ${fixed(value[e])}${spread}${unit}`;
}

/** @param {number} e */
function baselineText(e) {
  const { deviation, moves } = data.entries;
  if (!moves[e]) return "within the baseline";
  const errors = Number(deviation[e]);
  const size = Math.abs(errors);
  const count = size < 10 ? size.toFixed(1) : String(Math.round(size));
  return `${count} errors ${errors < 0 ? "below" : "above"} the baseline`;
}

/** @param {number} e */
function membershipText(e) {
  const { unit, membership } = data.entries;
  const name = data.units[unit[e]].name;
  if (membership[e] === null) return `in ${name}`;
  return `in ${name} with a probability of ${fixed(membership[e], 2)}`;
}

/** @param {number} e @returns {(Node|string)[]} */
function touchText(e) {
  const { chain, complex, lattice } = kindsOf(e);
  const inside = [...chain.map(residueName), ...complex.map((t) => `${residueName(t)}${t.image >= 0 ? "′" : ""}`)];
  const words = [];
  if (inside.length) words.push(`Touches ${listing(inside)}`);
  if (lattice.length) {
    words.push(inside.length ? ", and " : "Touches ");
    const by = new Map();
    for (const t of lattice) by.set(t.numeral, [...(by.get(t.numeral) || []), residueName(t)]);
    words.push([...by].map(([numeral, names]) => `${names.join(" ")} across contact ${numeral}`).join(", "));
  }
  if (words.length) words.push(".");
  return words;
}

/** @param {string[]} names */
function listing(names) {
  return names.length > 14 ? `${names.slice(0, 12).join(" ")} and ${names.length - 12} more` : names.join(" ");
}

/** @param {Meeting} touch */
function residueName(touch) {
  return touch.entry >= 0 ? data.entries.name[touch.entry] : data.residues.name[touch.residue];
}

/** Touches of an entry by kind, in the order of the chain. @param {number} e */
function kindsOf(e) {
  const { complex, lattice } = data.contacts;
  const sorted = [...touches[e]].sort((s, t) => s.residue - t.residue);
  const of = (/** @type {number} */ kind) => {
    const seen = new Set();
    return sorted.filter((t) => {
      const key = `${residueName(t)}/${t.numeral}`;
      return t.kind === kind && !seen.has(key) && seen.add(key);
    });
  };
  return { chain: of(0), complex: of(complex), lattice: of(lattice) };
}

/** @param {number[]} chosen @returns {(Node|string)[]} */
function severalCaption(chosen) {
  const measured = chosen.filter(isMeasured).length;
  const units = new Set(chosen.map((e) => data.entries.unit[e]).filter((u) => u >= 0));
  const names = [...units].sort((a, b) => a - b).map((u) => data.units[u].name);
  const all = measured === chosen.length ? "all measured" : `${measured} of them measured`;
  const where = names.length ? ` They reach into ${names.join(" and ")}.` : "";
  return [lead(`${chosen.length} residues chosen`), `, ${all}.${where}`];
}
