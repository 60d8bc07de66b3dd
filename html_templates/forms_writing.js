// The writing over the pictures of several forms: rings, names, distances, operators.

/** @param {FormPicture} picture @param {boolean} place find places anew, or keep the last ones */
function drawFormOverlay(picture, place) {
  const stand = picture.beads.filter((bead) => formBeadStands(picture, bead));
  const seen = stand.map((bead) => ({ bead, ...project(bead.at), r: bead.radius * pixelsPerAngstrom() }));
  /** @type {Obstacles} */
  const obstacles = {
    beads: seen.filter((s) => unitOfPlace(s.bead.place) >= 0 || formsState.chosen.has(s.bead.place)),
    dashes: picture.lines.length > 40 ? [] : picture.lines.flatMap((line) => samples([line.from, line.to], 7)),
    own: [...homes[picture.form].values()].map((at) => project(at)).map(({ x, y }) => [x, y]),
    mates: [],
    taken: [],
  };
  picture.over.setAttribute("viewBox", `0 0 ${view.width} ${view.height}`);
  picture.over.replaceChildren(
    ...formRings(picture, seen),
    ...formNames(picture, seen, obstacles),
    ...mateTexts(picture, seen, obstacles, place),
    ...lineTexts(picture, obstacles),
  );
}

/** @typedef {{bead: FormBead, x: number, y: number, z: number, r: number}} SeenBead */

/** @param {FormPicture} picture @param {SeenBead[]} seen */
function formRings(picture, seen) {
  const nodes = [];
  const ringed = new Set();
  for (const s of seen) {
    const chosen = formsState.chosen.has(s.bead.place);
    if (!chosen && s.bead.place !== formsState.hovered) continue;
    ringed.add(s.bead.place);
    nodes.push(...ring(s.x, s.y, s.r + 3, chosen ? 1.6 : 1, ""));
  }
  for (const place of new Set([...formsState.chosen, formsState.hovered])) {
    const at = homes[picture.form].get(place);
    if (!at || ringed.has(place)) continue;
    const p = project(at);
    nodes.push(...ring(p.x, p.y, 7, formsState.chosen.has(place) ? 1.6 : 1, "3 2.5"));
  }
  return nodes;
}

/** @param {FormPicture} picture @param {SeenBead[]} seen @param {Obstacles} obstacles */
function formNames(picture, seen, obstacles) {
  const { chosen, hovered } = formsState;
  const nodes = [];
  const wanted = new Set(chosen.size <= 16 ? chosen : []);
  if (hovered >= 0) wanted.add(hovered);
  const named = new Set();
  for (const s of seen) {
    if (!wanted.has(s.bead.place)) continue;
    named.add(s.bead.place);
    nodes.push(written(forms.places[s.bead.place] + (s.bead.mate ? "′" : ""), s, s.bead.mate ? "mate-name" : "name"));
  }
  for (const place of wanted) {
    const at = homes[picture.form].get(place);
    if (at && !named.has(place)) nodes.push(written(forms.places[place], { ...project(at), r: 7 }, "name"));
  }
  if (chosen.size) return nodes;
  forms.units.forEach((unit, u) => {
    const own = seen.filter((s) => unitOfPlace(s.bead.place) === u);
    if (own.length) nodes.push(written(unit.name, own.reduce((a, b) => (b.z > a.z ? b : a)), "name"));
  });
  return nodes;

  /** @param {string} text @param {{x: number, y: number, r: number}} spot @param {string} kind */
  function written(text, spot, kind) {
    const at = besideBead(spot, textWidth(text), obstacles);
    return svgText(text, at.x, at.y, kind);
  }
}

/** Partner in a neighbour and length of the contacts of what is chosen. @param {FormPicture} picture @param {Obstacles} obstacles */
function lineTexts(picture, obstacles) {
  if (formsState.unit >= 0 || !formsState.chosen.size || picture.lines.length > 24) return [];
  /** @type {Node[]} */
  const nodes = [];
  /** @type {Set<string>} */
  const known = new Set();
  for (const line of picture.lines) {
    const p = project(line.to);
    const key = `${line.partner}/${Math.round(p.x / 6)}/${Math.round(p.y / 6)}`;
    const text = [line.ball ? `${forms.places[line.partner]}′` : forms.places[line.partner], line.text].filter(Boolean).join(" ");
    if (known.has(key) || (!line.ball && formsState.chosen.has(line.partner))) continue;
    known.add(key);
    nodes.push(...placedName(`${picture.form}/${key}`, "", [text], [[p.x, p.y]], obstacles, true));
  }
  return nodes;
}

/** Operator and shift of each neighbour that holds members of the chosen unit. @param {FormPicture} picture @param {SeenBead[]} seen @param {Obstacles} obstacles @param {boolean} place */
function mateTexts(picture, seen, obstacles, place) {
  if (formsState.unit < 0) return [];
  const { members, forms: inForms } = forms.units[formsState.unit];
  const laid = inForms[picture.form];
  return laid.mates.flatMap(({ printed, shift }, m) => {
    const own = seen.filter((s) => s.bead.laid === formsState.unit && laid.mate[members.indexOf(s.bead.place)] === m);
    if (!own.length || !printed) return [];
    const lines = view.width >= 460 ? [`${printed}  (${shift.map(minus).join(" ")})`] : [printed, `(${shift.map(minus).join(" ")})`];
    return placedName(`${picture.form}/${m}`, "", lines, own.map((s) => [s.x, s.y]), obstacles, place);
  });
}
