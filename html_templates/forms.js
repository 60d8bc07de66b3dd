// The page of several forms: choosing in one picture or table is followed by all.

let formsWait = false;
let formsView = "";

/** @param {Iterable<number>} places @param {number} [unit] @param {number} [contact] */
function chooseForms(places, unit = -1, contact = -1) {
  formsState.chosen = new Set(places);
  formsState.unit = unit;
  formsState.contact = contact;
  for (const picture of pictures) restyleForm(picture);
  showForms(true);
  drawFormsCaption();
  markForms();
  const address = unit >= 0 ? forms.units[unit].name : [...formsState.chosen].map(placeKey).join("+");
  try {
    const path = location.pathname + location.search + (address ? `#${encodeURI(address)}` : "");
    history.replaceState(null, "", path);
  } catch {
    // A sandboxed frame has no address of its own; the choice still holds.
  }
}

/** @param {number} place */
function placeKey(place) {
  return forms.places[place].replace("\u00a0", "");
}

/** @param {number} unit */
function chooseFormsUnit(unit) {
  if (unit === formsState.unit) return chooseForms([]);
  chooseForms(forms.units[unit].members, unit);
  showWholeUnit();
}

/** Bring members that stand outside the picture into it. */
function showWholeUnit() {
  const places = pictures.flatMap((p) => p.beads.filter((b) => formBeadStands(p, b) && formsState.chosen.has(b.place)));
  const outside = places.some(({ at }) => {
    const p = project(at);
    return p.x < 12 || p.y < 12 || p.x > view.width - 12 || p.y > view.height - 12;
  });
  if (!outside) return;
  frame([...places.map((b) => b.at), ...homes.flatMap((home) => [...home.values()])], 5);
  showForms();
}

/** @param {number} place @param {{ctrlKey?: boolean, metaKey?: boolean}} [keys] */
function choosePlace(place, keys = {}) {
  const alone = formsState.unit < 0 && formsState.chosen.size === 1 && formsState.chosen.has(place);
  if (keys.ctrlKey || keys.metaKey) {
    const next = new Set(formsState.chosen);
    if (!next.delete(place)) next.add(place);
    chooseForms(next);
  } else chooseForms(alone ? [] : [place]);
}

function readFormsAddress() {
  const text = decodeURI(location.hash.slice(1));
  const unit = forms.units.findIndex((u) => u.name === text);
  if (unit >= 0) {
    if (unit !== formsState.unit) chooseFormsUnit(unit);
    return;
  }
  const wanted = new Set(text.split("+").filter(Boolean));
  const found = forms.places.flatMap((name, place) => (name && wanted.has(placeKey(place)) ? [place] : []));
  if (found.length) chooseForms(found);
}

// --- words ---

function drawFormsCaption() {
  byId("caption").replaceChildren(element("span", {}, ...formsCaption()));
  byId("closer").hidden = !pictures.length || formsState.chosen.size === 0;
}

/** @returns {(Node|string)[]} */
function formsCaption() {
  const { unit, chosen } = formsState;
  const bold = (/** @type {string} */ text) => element("b", {}, text);
  if (unit >= 0) {
    const { name, verdict, said } = forms.units[unit];
    const each = forms.forms.map((form, f) => `in ${form.name} ${said[f].join(", ")}`).join("; ");
    return [bold(`${name}: ${verdict}.`), ` Laid out in each form where its residues meet: ${each}. Solid lines: contacts between its residues; dashed: made in another form alone.`];
  }
  if (chosen.size) {
    const all = forms.contacts.filter((row) => row.places.some((p) => chosen.has(p)));
    const own = formsState.contact >= 0 ? [forms.contacts[formsState.contact]] : all;
    const names = [...chosen].map((p) => forms.places[p]).join(" ");
    if (!own.length) return [bold(`${names} chosen.`), " None of its listed contacts opens or closes between the forms."];
    const more = own.length > 6 ? `; ${own.length - 6} more in c` : "";
    return [bold(`${names} chosen.`), ` ${own.slice(0, 6).map(contactWords).join("; ")}${more}.`];
  }
  const keys = Math.min(9, forms.units.length);
  const choose = keys ? ` ${keys === 1 ? "Key 1 takes the unit" : `Keys 1 to ${keys} take a unit`}, a bead or a name one residue; Escape clears.` : "";
  return [`${forms.core} Lines join residues whose contact opens or closes: solid where it is made, dashed where it is broken; a line into a neighbour ends in a ball where the partner stands.${choose}`];
}

/** A contact in all forms: where it is made, then where it is broken. @param {FormsPayload["contacts"][number]} row */
function contactWords(row) {
  const named = (/** @type {(form: ContactInForm|null) => boolean} */ wanted) => forms.forms.map((form) => form.name).filter((_, f) => wanted(row.forms[f]));
  const made = row.forms.flatMap((form, f) => (form && form.distance !== null ? [`${form.distance.toFixed(1)}\u00a0Å in ${forms.forms[f].name}`] : []));
  const broken = named((form) => form !== null && form.distance === null);
  const missing = named((form) => form === null);
  if (broken.length) made.push(`broken in ${broken.join(" and ")}`);
  if (missing.length) made.push(`not modelled in ${missing.join(" and ")}`);
  return `${row.places.map((p) => forms.places[p]).join(" – ")} (${row.kind}): ${made.join(", ")}`;
}

/** Words above each picture. */
function drawSaid() {
  forms.forms.forEach((_, f) => {
    const said = byId(`said-${f}`);
    said.replaceChildren();
    if (formsState.unit >= 0) said.append(element("b", {}, forms.units[formsState.unit].said[f][0]));
  });
}

function markForms() {
  drawSaid();
  for (const button of document.querySelectorAll("[data-unit].unit")) {
    button.setAttribute("aria-pressed", String(Number(button.getAttribute("data-unit")) === formsState.unit));
  }
  for (const row of document.querySelectorAll("tr[data-unit]")) {
    row.classList.toggle("chosen", Number(row.getAttribute("data-unit")) === formsState.unit);
  }
  for (const row of document.querySelectorAll("tr[data-contact]")) {
    const { places, units } = forms.contacts[Number(row.getAttribute("data-contact"))];
    const { unit, chosen, contact } = formsState;
    const all = unit >= 0 ? units.every((u) => u === unit) : contact >= 0 ? row.getAttribute("data-contact") === String(contact) : places.some((p) => chosen.has(p));
    row.classList.toggle("chosen", all);
  }
  for (const button of document.querySelectorAll("button[data-place]")) {
    button.setAttribute("aria-pressed", String(formsState.chosen.has(Number(button.getAttribute("data-place")))));
  }
}

// --- drawing ---

/** Ask for a frame of all pictures. @param {boolean} [changed] whether more than the view did */
function showForms(changed = false) {
  if (changed) formsView = "";
  if (formsWait) return;
  formsWait = true;
  requestAnimationFrame(() => {
    formsWait = false;
    drawForms();
  });
}

function drawForms() {
  const now = viewText();
  for (const picture of pictures) {
    if (picture.viewer && now !== formsView) {
      picture.viewer.setView(libraryView());
      picture.viewer.render();
    }
    drawFormOverlay(picture, !document.querySelector(".picture.dragging"));
  }
  formsView = now;
}

function measureForms() {
  const box = pictures.length ? pictures[0].box : byId("picture-0");
  view.width = Math.max(1, box.clientWidth);
  view.height = Math.max(1, box.clientHeight);
}

function layOutForms() {
  if (!pictures.length) return;
  const before = view.width;
  measureForms();
  view.half *= Math.max(0.5, Math.min(2, view.width / before)) ** 0.5;
  for (const picture of pictures) {
    picture.viewer.resize();
    dressPicture(picture);
    restyleForm(picture);
  }
  showForms(true);
}

/** @param {string} theme */
function setFormsTheme(theme) {
  document.documentElement.dataset.theme = theme;
  byId("theme").textContent = theme === "dark" ? "light" : "dark";
  readTokens();
  for (const picture of pictures) {
    dressPicture(picture);
    restyleForm(picture);
  }
  if (pictures.length) showForms(true);
}

// --- pointer and keys ---

/** @param {FormPicture} picture @param {PointerEvent} event */
function formBeadAt(picture, event) {
  const rect = picture.box.getBoundingClientRect();
  const [x, y] = [event.clientX - rect.left, event.clientY - rect.top];
  let best = { place: -1, gap: 14, z: -Infinity };
  for (const bead of picture.beads) {
    if (!formBeadShown(bead)) continue;
    const p = project(bead.at);
    const gap = Math.max(0, Math.hypot(p.x - x, p.y - y) - bead.radius * pixelsPerAngstrom());
    if (gap < best.gap - 2 || (gap < 14 && Math.abs(gap - best.gap) <= 2 && p.z > best.z)) best = { place: bead.place, gap, z: p.z };
  }
  return best.place;
}

/** @param {FormPicture} picture */
function listenToForm(picture) {
  const { box } = picture;
  /** @type {Map<number, {x: number, y: number}>} */
  const held = new Map();
  let moved = false;
  const mayTurnForm = (/** @type {PointerEvent} */ event) => event.pointerType !== "touch" || formsState.turnable;
  box.addEventListener("pointerdown", (event) => {
    held.set(event.pointerId, { x: event.clientX, y: event.clientY });
    if (held.size === 1) moved = false;
    if (mayTurnForm(event)) box.setPointerCapture(event.pointerId);
    hideTip();
  });
  box.addEventListener("pointermove", (event) => {
    const before = held.get(event.pointerId);
    if (!before) return lookAtForm(picture, event);
    const [dx, dy] = [event.clientX - before.x, event.clientY - before.y];
    if (!moved && Math.hypot(dx, dy) <= 4) return;
    moved = true;
    if (!mayTurnForm(event)) return;
    box.classList.add("dragging");
    const other = [...held].find(([id]) => id !== event.pointerId)?.[1];
    if (other) {
      const was = Math.hypot(before.x - other.x, before.y - other.y) || 1;
      zoomView(was / (Math.hypot(event.clientX - other.x, event.clientY - other.y) || 1));
      moveView(dx / 2, dy / 2);
    } else if (event.buttons === 2 || event.shiftKey) moveView(dx, dy);
    else {
      turnView([0, 1, 0], dx * 0.009);
      turnView([1, 0, 0], dy * 0.009);
    }
    held.set(event.pointerId, { x: event.clientX, y: event.clientY });
    showForms();
  });
  const release = (/** @type {PointerEvent} */ event) => {
    const was = held.delete(event.pointerId);
    box.classList.remove("dragging");
    if (!was || moved || event.button !== 0 || event.type === "pointercancel") return;
    const place = formBeadAt(picture, event);
    if (place >= 0) choosePlace(place, event);
    else chooseForms([]);
  };
  box.addEventListener("pointerup", release);
  box.addEventListener("pointercancel", release);
  box.addEventListener("pointerleave", () => {
    hoverForms(-1);
    hideTip();
  });
  box.addEventListener("contextmenu", (event) => event.preventDefault());
  box.addEventListener(
    "wheel",
    (event) => {
      if (document.activeElement !== box) return;
      event.preventDefault();
      zoomView(Math.exp(event.deltaY * 0.0012));
      showForms();
    },
    { passive: false },
  );
  box.addEventListener("keydown", formKey);
}

/** @param {FormPicture} picture @param {PointerEvent} event */
function lookAtForm(picture, event) {
  if (event.pointerType === "touch") return;
  const place = formBeadAt(picture, event);
  hoverForms(place);
  if (place < 0) return hideTip();
  const unit = unitOfPlace(place);
  const count = forms.contacts.filter((row) => row.places.includes(place)).length;
  const lines = [element("b", {}, forms.places[place])];
  if (unit >= 0) lines.push(element("span", {}, inlineMark(unit), forms.units[unit].name));
  lines.push(element("span", { class: "soft" }, `${inWords(count)} of its contacts ${count === 1 ? "opens or closes" : "open or close"}`));
  showTip(lines, event.clientX, event.clientY);
}

/** @param {number} place */
function hoverForms(place) {
  if (place === formsState.hovered) return;
  formsState.hovered = place;
  showForms();
}

/** @param {KeyboardEvent} event */
function formKey(event) {
  const turns = /** @type {Record<string, number[]>} */ ({ ArrowLeft: [0, 1, 0, -1], ArrowRight: [0, 1, 0, 1], ArrowUp: [1, 0, 0, -1], ArrowDown: [1, 0, 0, 1] });
  const turn = turns[event.key];
  if (turn) turnView(turn.slice(0, 3), turn[3] * 0.12);
  else if (event.key === "+" || event.key === "=") zoomView(0.87);
  else if (event.key === "-") zoomView(1.15);
  else if (event.key === "0") resetView();
  else return;
  event.preventDefault();
  event.stopPropagation();
  showForms();
}

function listenToFormsPage() {
  const shown = () => {
    for (const button of document.querySelectorAll("[data-show]")) {
      button.setAttribute("aria-pressed", String(button.getAttribute("data-show") === "behind" ? formsState.behind : formsState.contacts));
    }
  };
  for (const button of document.querySelectorAll("[data-show]")) {
    button.addEventListener("click", () => {
      if (button.getAttribute("data-show") === "behind") formsState.behind = !formsState.behind;
      else formsState.contacts = !formsState.contacts;
      shown();
      for (const picture of pictures) {
        dressPicture(picture);
        restyleForm(picture);
      }
      showForms(true);
    });
  }
  shown();
  byId("whole").addEventListener("click", () => {
    resetView();
    showForms();
  });
  byId("closer").addEventListener("click", () => {
    const points = pictures.flatMap((p) => p.beads.filter((b) => formBeadStands(p, b) && formsState.chosen.has(b.place)).map((b) => b.at));
    const lines = formsState.unit < 0 ? pictures.flatMap((p) => p.lines.flatMap((line) => [line.from, line.to])) : [];
    if (points.length + lines.length) frame([...points, ...lines], 5);
    showForms();
  });
  byId("turn").addEventListener("click", () => {
    formsState.turnable = !formsState.turnable;
    for (const { box } of pictures) box.classList.toggle("turning", formsState.turnable);
    byId("turn").setAttribute("aria-pressed", String(formsState.turnable));
    byId("turn").textContent = formsState.turnable ? "stop turning" : "turn";
  });
  byId("theme").addEventListener("click", () => setFormsTheme(isDark() ? "light" : "dark"));
  document.addEventListener("click", (event) => {
    const target = /** @type {Element} */ (event.target);
    const place = target.closest("button[data-place]");
    if (place) return choosePlace(Number(place.getAttribute("data-place")), event);
    const unit = target.closest("[data-unit]");
    if (unit) return chooseFormsUnit(Number(unit.getAttribute("data-unit")));
    const row = target.closest("tr[data-contact]");
    if (!row) return;
    const contact = Number(row.getAttribute("data-contact"));
    if (contact === formsState.contact) chooseForms([]);
    else chooseForms(forms.contacts[contact].places, -1, contact);
  });
  document.addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.metaKey || event.altKey) return;
    if (event.key === "Escape") chooseForms([]);
    else if (/^[1-9]$/.test(event.key) && Number(event.key) <= forms.units.length) chooseFormsUnit(Number(event.key) - 1);
  });
  addEventListener("hashchange", readFormsAddress);
}

async function startForms() {
  const wanted = new URLSearchParams(location.search).get("theme");
  setFormsTheme(wanted === "dark" || wanted === "light" ? wanted : preferredTheme());
  document.documentElement.dataset.scripts = "1";
  data = await readData();
  forms = /** @type {any} */ (data);
  findHomes();
  const webgl = offersWebGl();
  if (webgl) {
    measureForms();
    resetView();
    pictures = forms.forms.map((_, f) => makePicture(f, true)).filter((picture) => picture.viewer);
  }
  const drawn = pictures.length === forms.forms.length;
  document.documentElement.dataset.gl = drawn ? "1" : "0";
  if (!drawn) {
    pictures = [];
    byId("side").classList.add("flat");
  }
  for (const picture of pictures) {
    dressPicture(picture);
    restyleForm(picture);
    listenToForm(picture);
  }
  listenToFormsPage();
  drawFormsCaption();
  markForms();
  drawForms();
  readFormsAddress();
  let width = innerWidth;
  let waits = 0;
  addEventListener("resize", () => {
    if (innerWidth === width) return;
    width = innerWidth;
    clearTimeout(waits);
    waits = setTimeout(layOutForms, 120);
  });
  matchMedia("(prefers-color-scheme: dark)").addEventListener("change", () => setFormsTheme(preferredTheme()));
  let screenTheme = "light";
  addEventListener("beforeprint", () => {
    screenTheme = document.documentElement.dataset.theme || "light";
    setFormsTheme("light");
    drawForms();
  });
  addEventListener("afterprint", () => setFormsTheme(screenTheme));
  requestAnimationFrame(() => {
    document.documentElement.dataset.ready = "1";
  });
}

startForms();
