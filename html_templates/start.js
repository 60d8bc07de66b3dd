// Theme, keys, pointer, tooltip, print and the first drawing.

// --- tooltip ---

/** @param {number} e */
function entryTip(e) {
  const { unit, membership, note } = data.entries;
  const lines = [element("b", {}, longName(e))];
  if (isMeasured(e)) {
    const first = element("span");
    if (unit[e] >= 0) {
      const share = membership[e] === null ? "" : `\u00a0${fixed(membership[e], 2)}`;
      first.append(inlineMark(unit[e]), `${data.units[unit[e]].name}${share}`);
      lines.push(first);
    }
    lines.push(element("span", {}, ...rich(valueText(e))), element("span", { class: "soft" }, baselineText(e)));
  } else {
    lines.push(element("span", { class: "soft" }, note[e] || "not measured"));
  }
  const numerals = [...new Set(touches[e].filter((t) => t.numeral).map((t) => t.numeral))];
  if (numerals.length) lines.push(element("span", { class: "soft" }, `touches a neighbour, contact ${numerals.join(", ")}`));
  return lines;
}

/** @param {number} contact */
function contactTip(contact) {
  const { a, b, distance, image, atomA, atomB } = data.contacts;
  const mate = image[contact] >= 0 ? data.images[image[contact]] : null;
  const names = `${data.residues.name[a[contact]]} – ${data.residues.name[b[contact]]}${mate ? "′" : ""}`;
  const lines = [element("b", {}, names), element("span", {}, `${distance[contact].toFixed(1)}\u00a0Å, ${atomA[contact]}–${atomB[contact]}`)];
  const numeral = data.contacts.numeral[contact];
  const how = mate ? `, ${mate.printed} (${mate.shift.map(minus).join(" ")})` : ", between molecules of the file";
  if (numeral) lines.push(element("span", { class: "soft" }, `contact ${numeral}${how}`));
  else if (mate) lines.push(element("span", { class: "soft" }, "of the assembly"));
  return lines;
}

/** @param {number} e @param {number} p */
function pointTip(e, p) {
  const profile = /** @type {Profile} */ (data.profile);
  const value = profile.value[e]?.[p] ?? null;
  const lines = [
    element("b", {}, longName(e)),
    element("span", {}, ...rich(`${profile.xName} ${threeFigures(profile.x[p])}\u00a0${profile.xUnit}: ${threeFigures(value)}\u00a0${profile.unit}`)),
  ];
  if (!profile.kept[p]) lines.push(element("span", { class: "soft" }, `left out: ${profile.reason[p]}`));
  return lines;
}

// --- the picture under pointer and keys ---

/** The nearest bead within 14 px of a point of the screen. @param {number} clientX @param {number} clientY */
function beadAt(clientX, clientY) {
  const rect = byId("picture").getBoundingClientRect();
  const [x, y] = [clientX - rect.left, clientY - rect.top];
  let best = { entry: -1, distance: 14, z: -Infinity };
  for (const bead of beads) {
    if (!beadShown(bead) || standsElsewhere(bead)) continue;
    const p = project(bead.at);
    const gap = Math.max(0, Math.hypot(p.x - x, p.y - y) - bead.radius * pixelsPerAngstrom());
    if (gap > 14) continue;
    const nearer = gap < best.distance - 2 || (Math.abs(gap - best.distance) <= 2 && p.z > best.z);
    if (nearer) best = { entry: bead.entry, distance: gap, z: p.z };
  }
  return best.entry;
}

/** The drawn contact within 5 px of a point. @param {number} clientX @param {number} clientY */
function dashAt(clientX, clientY) {
  const rect = byId("picture").getBoundingClientRect();
  const [x, y] = [clientX - rect.left, clientY - rect.top];
  let best = { contact: -1, distance: 5 };
  for (const { dash, ends } of shownDashes()) {
    const [a, b] = ends.map(project);
    const length = Math.hypot(b.x - a.x, b.y - a.y) || 1;
    const t = Math.max(0, Math.min(1, ((x - a.x) * (b.x - a.x) + (y - a.y) * (b.y - a.y)) / length ** 2));
    const gap = Math.hypot(a.x + t * (b.x - a.x) - x, a.y + t * (b.y - a.y) - y);
    if (gap < best.distance) best = { contact: dash.contact, distance: gap };
  }
  return best.contact;
}

function listenToPicture() {
  const box = byId("picture");
  /** @type {Map<number, {x: number, y: number}>} */
  const pointers = new Map();
  let moved = false;
  let button = 0;
  box.addEventListener("pointerdown", (event) => {
    pointers.set(event.pointerId, { x: event.clientX, y: event.clientY });
    if (pointers.size === 1) {
      moved = false;
      button = event.button;
    }
    if (mayTurn(event)) box.setPointerCapture(event.pointerId);
    hideTip();
  });
  box.addEventListener("pointermove", (event) => {
    const before = pointers.get(event.pointerId);
    if (!before) return lookAt(event);
    const [dx, dy] = [event.clientX - before.x, event.clientY - before.y];
    if (!moved && Math.hypot(dx, dy) <= 4) return;
    moved = true;
    if (!mayTurn(event)) return;
    box.classList.add("dragging");
    drag(dx, dy, button === 2 || event.shiftKey, pointers, event);
    pointers.set(event.pointerId, { x: event.clientX, y: event.clientY });
    showPicture();
  });
  const release = (/** @type {PointerEvent} */ event) => {
    const held = pointers.delete(event.pointerId);
    box.classList.remove("dragging");
    if (!held || event.type === "pointercancel") return;
    if (moved) return showPicture();
    if (button !== 0) return;
    const e = beadAt(event.clientX, event.clientY);
    if (e >= 0) chooseEntry(e, event);
    else choose([]);
  };
  box.addEventListener("pointerup", release);
  box.addEventListener("pointercancel", release);
  box.addEventListener("pointerleave", () => {
    hover(-1);
    hideTip();
  });
  box.addEventListener("contextmenu", (event) => event.preventDefault());
  box.addEventListener(
    "wheel",
    (event) => {
      if (document.activeElement !== box || state.flat) return;
      event.preventDefault();
      zoomView(Math.exp(event.deltaY * 0.0012));
      showPicture();
    },
    { passive: false },
  );
  box.addEventListener("keydown", pictureKey);
}

/** @param {PointerEvent} event */
function mayTurn(event) {
  return !state.flat && (event.pointerType !== "touch" || state.turnable);
}

/** @param {PointerEvent} event */
function lookAt(event) {
  if (event.pointerType === "touch") return;
  const e = beadAt(event.clientX, event.clientY);
  hover(e);
  const contact = e >= 0 ? -1 : dashAt(event.clientX, event.clientY);
  if (e >= 0) showTip(entryTip(e), event.clientX, event.clientY);
  else if (contact >= 0) showTip(contactTip(contact), event.clientX, event.clientY);
  else hideTip();
}

/**
 * @param {number} dx
 * @param {number} dy
 * @param {boolean} moving
 * @param {Map<number, {x: number, y: number}>} pointers
 * @param {PointerEvent} event
 */
function drag(dx, dy, moving, pointers, event) {
  if (pointers.size === 2) {
    const other = [...pointers].find(([id]) => id !== event.pointerId)?.[1];
    if (!other) return;
    const before = pointers.get(event.pointerId) || other;
    const was = Math.hypot(before.x - other.x, before.y - other.y) || 1;
    const now = Math.hypot(event.clientX - other.x, event.clientY - other.y) || 1;
    zoomView(was / now);
    moveView(dx / 2, dy / 2);
  } else if (moving) {
    moveView(dx, dy);
  } else {
    turnView([0, 1, 0], dx * 0.009);
    turnView([1, 0, 0], dy * 0.009);
  }
}

/** @param {KeyboardEvent} event */
function pictureKey(event) {
  if (state.flat || event.target !== byId("picture")) return;
  const turns = /** @type {Record<string, number[]>} */ ({ ArrowLeft: [0, 1, 0, -1], ArrowRight: [0, 1, 0, 1], ArrowUp: [1, 0, 0, -1], ArrowDown: [1, 0, 0, 1] });
  const turn = turns[event.key];
  if (turn) turnView(turn.slice(0, 3), turn[3] * 0.12);
  else if (event.key === "+" || event.key === "=") zoomView(0.87);
  else if (event.key === "-") zoomView(1.15);
  else if (event.key === "0") resetView();
  else return;
  event.preventDefault();
  event.stopPropagation();
  showPicture();
}

// --- controls ---

function markControls() {
  for (const button of document.querySelectorAll("[data-colour]")) {
    const on = button.getAttribute("data-colour") === state.colour;
    button.setAttribute("aria-checked", String(on));
    button.setAttribute("tabindex", on ? "0" : "-1");
  }
  const shown = /** @type {Record<string, boolean>} */ ({ neighbours: state.neighbours, contacts: state.contacts, sides: state.sides });
  for (const button of document.querySelectorAll("[data-show]")) {
    button.setAttribute("aria-pressed", String(shown[button.getAttribute("data-show") || ""]));
  }
}

function listenToControls() {
  const radios = /** @type {HTMLElement[]} */ ([...document.querySelectorAll("[data-colour]")]);
  const absent = radios.filter((r) => r.dataset.colour === "membership" && !data.quantity.membershipKnown);
  for (const radio of absent) radio.remove();
  const kept = radios.filter((r) => !absent.includes(r));
  kept.forEach((radio, i) => {
    radio.addEventListener("click", () => setColour(radio.dataset.colour || "unit"));
    radio.addEventListener("keydown", (event) => {
      const step = event.key === "ArrowRight" || event.key === "ArrowDown" ? 1 : event.key === "ArrowLeft" || event.key === "ArrowUp" ? -1 : 0;
      if (!step) return;
      event.preventDefault();
      const next = kept[(i + step + kept.length) % kept.length];
      setColour(next.dataset.colour || "unit");
      next.focus();
    });
  });
  for (const button of /** @type {NodeListOf<HTMLElement>} */ (document.querySelectorAll("[data-show]"))) {
    const what = button.dataset.show;
    if (what === "neighbours" && !data.images.length) button.remove();
    if (what === "contacts" && !dashes.length) button.remove();
    if (what === "sides" && state.flat) button.remove();
    button.addEventListener("click", () => {
      if (what === "neighbours") state.neighbours = !state.neighbours;
      if (what === "contacts") state.contacts = !state.contacts;
      if (what === "sides") state.sides = !state.sides;
      markControls();
      if (viewer && what === "neighbours") drawThreads();
      restyle();
      drawCaption();
      showPicture();
    });
  }
  byId("whole").addEventListener("click", () => {
    resetView();
    showPicture();
  });
  byId("closer").addEventListener("click", goCloser);
  byId("turn").addEventListener("click", () => {
    state.turnable = !state.turnable;
    byId("picture").classList.toggle("turning", state.turnable);
    byId("turn").setAttribute("aria-pressed", String(state.turnable));
    byId("turn").textContent = state.turnable ? "stop turning" : "turn";
  });
  byId("save").addEventListener("click", savePicture);
  byId("theme").addEventListener("click", () => {
    setTheme(isDark() ? "light" : "dark");
    writeAddress();
  });
  byId("copy-link").addEventListener("click", (event) => copyText(location.href, event, "copied"));
  if (state.flat) for (const id of ["whole", "turn"]) byId(id).hidden = true;
}

/** @param {string} colour */
function setColour(colour) {
  state.colour = /** @type {"value"|"unit"|"membership"} */ (colour);
  markControls();
  restyle();
  drawLegend();
  drawChain();
  showPicture();
}

/** @param {string} theme */
function setTheme(theme) {
  document.documentElement.dataset.theme = theme;
  byId("theme").textContent = theme === "dark" ? "light" : "dark";
  readTokens();
  if (!parts.length) return;
  if (viewer) {
    setSurroundings();
    drawThreads();
  }
  drawAll();
}

function listenToKeys() {
  document.addEventListener("keydown", (event) => {
    const target = /** @type {HTMLElement} */ (event.target);
    const typing = target.tagName === "INPUT";
    if (event.key === "Escape") {
      if (typing) target.blur();
      else choose([]);
    } else if (typing || event.ctrlKey || event.metaKey || event.altKey) {
      return;
    } else if (event.key === "/") {
      event.preventDefault();
      byId("find").focus();
    } else if (/^[1-9]$/.test(event.key) && Number(event.key) <= data.units.length) {
      chooseUnit(Number(event.key) - 1);
    }
  });
  addEventListener("hashchange", readAddress);
}

function listenForTips() {
  const follow = (/** @type {string} */ id) => {
    byId(id).addEventListener("pointermove", (event) => {
      if (event.pointerType === "touch") return;
      const point = /** @type {Element} */ (event.target).closest("[data-point]");
      const e = entryUnder(event);
      if (point) {
        const [entry, p] = (point.getAttribute("data-point") || "0/0").split("/").map(Number);
        showTip(pointTip(entry, p), event.clientX, event.clientY);
      } else if (e >= 0) {
        showTip(entryTip(e), event.clientX, event.clientY);
      } else {
        hideTip();
      }
    });
    byId(id).addEventListener("pointerleave", hideTip);
  };
  follow("chain");
  follow("panels");
}

// --- saving the picture ---

/** Save part a at three times its size on screen, with its writing and legend. */
async function savePicture() {
  const times = 3;
  const canvas = /** @type {HTMLCanvasElement} */ (element("canvas", { width: view.width * times, height: view.height * times }));
  const pen = canvas.getContext("2d");
  if (!pen) return;
  pen.fillStyle = tokens.paper;
  pen.fillRect(0, 0, canvas.width, canvas.height);
  if (viewer) {
    const sharp = await sharpPicture(times);
    pen.drawImage(sharp, 0, 0, canvas.width, canvas.height);
    fadeEdges(pen, canvas.width, canvas.height);
  }
  const over = await loadImage(overlayAddress(times));
  pen.drawImage(over, 0, 0, canvas.width, canvas.height);
  drawLegendInto(pen, times);
  const link = /** @type {HTMLAnchorElement} */ (element("a"));
  const choice = choiceText().replace(/[^A-Za-z0-9+.-]/g, "") || "all";
  link.download = `structmap-${data.id}-${choice}.png`;
  link.href = canvas.toDataURL("image/png");
  link.click();
}

/** Let the library draw larger for one frame. @param {number} times */
async function sharpPicture(times) {
  const box = byId("canvas");
  const ratio = Math.max(2, devicePixelRatio || 1);
  box.style.width = `${(view.width * times) / ratio}px`;
  box.style.height = `${(view.height * times) / ratio}px`;
  viewer.resize();
  viewer.render();
  const image = await loadImage(viewer.pngURI());
  box.style.width = "";
  box.style.height = "";
  viewer.resize();
  drawFrame(false);
  return image;
}

/** @param {string} address @returns {Promise<HTMLImageElement>} */
function loadImage(address) {
  return new Promise((resolve, reject) => {
    const image = new Image();
    image.onload = () => resolve(image);
    image.onerror = () => reject(new Error("the picture could not be drawn"));
    image.src = address;
  });
}

/** @param {CanvasRenderingContext2D} pen @param {number} w @param {number} h */
function fadeEdges(pen, w, h) {
  const clear = `${tokens.paper}00`;
  const side = (/** @type {number[]} */ line, /** @type {number[]} */ box) => {
    const fade = pen.createLinearGradient(line[0], line[1], line[2], line[3]);
    fade.addColorStop(0, tokens.paper);
    fade.addColorStop(1, clear);
    pen.fillStyle = fade;
    pen.fillRect(box[0], box[1], box[2], box[3]);
  };
  side([0, 0, 0.07 * w, 0], [0, 0, 0.07 * w, h]);
  side([w, 0, 0.93 * w, 0], [0.93 * w, 0, 0.07 * w, h]);
  side([0, 0, 0, 0.08 * h], [0, 0, w, 0.08 * h]);
  side([0, h, 0, 0.92 * h], [0, 0.92 * h, w, 0.08 * h]);
}

/** The writing as an image: styles are written into a copy. @param {number} times */
function overlayAddress(times) {
  const over = byId("over");
  const copy = /** @type {Element} */ (over.cloneNode(true));
  const wanted = ["font-family", "font-size", "font-weight", "fill", "stroke", "stroke-width", "paint-order", "stroke-linejoin"];
  const from = [...over.querySelectorAll("text, tspan")];
  [...copy.querySelectorAll("text, tspan")].forEach((node, i) => {
    const style = getComputedStyle(from[i]);
    for (const name of wanted) node.setAttribute(name, style.getPropertyValue(name));
  });
  copy.setAttribute("xmlns", SVG);
  copy.setAttribute("width", String(view.width * times));
  copy.setAttribute("height", String(view.height * times));
  const text = new XMLSerializer().serializeToString(copy);
  return `data:image/svg+xml;charset=utf-8,${encodeURIComponent(text)}`;
}

/** @param {CanvasRenderingContext2D} pen @param {number} times */
function drawLegendInto(pen, times) {
  const origin = byId("picture").getBoundingClientRect();
  pen.save();
  pen.scale(times, times);
  pen.textBaseline = "middle";
  for (const sign of byId("legend").querySelectorAll("svg rect, svg circle")) {
    const box = sign.getBoundingClientRect();
    pen.fillStyle = sign.getAttribute("fill") === "none" ? "rgba(0,0,0,0)" : sign.getAttribute("fill") || tokens.ink;
    if (sign.tagName === "rect") {
      pen.fillRect(box.left - origin.left, box.top - origin.top, box.width, box.height);
    } else {
      pen.beginPath();
      pen.arc(box.left - origin.left + box.width / 2, box.top - origin.top + box.height / 2, box.width / 2, 0, 7);
      pen.fill();
    }
  }
  for (const line of byId("legend").querySelectorAll("svg path")) {
    const box = /** @type {Element} */ (line.parentElement).getBoundingClientRect();
    pen.save();
    pen.translate(box.left - origin.left, box.top - origin.top);
    pen.strokeStyle = line.getAttribute("stroke") || tokens.ink;
    pen.lineWidth = Number(line.getAttribute("stroke-width")) || 1;
    pen.stroke(new Path2D(line.getAttribute("d") || ""));
    pen.restore();
  }
  const walker = document.createTreeWalker(byId("legend"), NodeFilter.SHOW_TEXT);
  for (let node = walker.nextNode(); node; node = walker.nextNode()) {
    const range = document.createRange();
    range.selectNodeContents(node);
    const box = range.getBoundingClientRect();
    const style = getComputedStyle(/** @type {Element} */ (node.parentElement));
    pen.fillStyle = tokens.ink2;
    pen.font = `${style.fontWeight} ${style.fontSize} ${style.fontFamily}`;
    pen.fillText(node.textContent || "", box.left - origin.left, box.top - origin.top + box.height / 2);
  }
  pen.restore();
}

// --- print ---

/** @type {{theme: string}|null} */
let beforePrint = null;

function startPrinting() {
  if (beforePrint) return;
  beforePrint = { theme: document.documentElement.dataset.theme || "light" };
  state.printing = true;
  document.body.classList.add("printing");
  document.documentElement.dataset.theme = "light";
  readTokens();
  layOut();
}

function endPrinting() {
  if (!beforePrint) return;
  state.printing = false;
  document.body.classList.remove("printing");
  document.documentElement.dataset.theme = beforePrint.theme;
  beforePrint = null;
  readTokens();
  layOut();
}

// --- drawing everything ---

/** Draw all parts anew at the present width. */
function layOut() {
  const shown = view.half / Math.max(1, view.width);
  const before = { width: view.width, height: view.height };
  measurePicture();
  if (before.width !== view.width || before.height !== view.height) {
    const [wide, high] = openingSize();
    const wanted = Math.max(wide, (high * view.width) / view.height);
    const then = Math.max(wide, (high * before.width) / before.height);
    view.half = (shown * before.width * wanted) / then;
  }
  if (viewer) {
    viewer.resize();
    setSurroundings();
    drawThreads();
  }
  drawAll();
}

function drawAll() {
  drawCaption();
  drawChain();
  restyle();
  drawLegend();
  drawProfiles();
  drawIntervals();
  markUnits();
  drawMap();
  sparkRange = null;
  drawSites();
  drawFrame(false);
}

async function start() {
  const wanted = new URLSearchParams(location.search).get("theme");
  setTheme(wanted === "dark" || wanted === "light" ? wanted : preferredTheme());
  document.documentElement.dataset.scripts = "1";
  data = await readData();
  prepareData();
  setScale();
  setDecimals();
  findCells();
  prepareSites();
  startPicture();
  listenToControls();
  markControls();
  parts.push(
    { name: "caption", choose: drawCaption },
    { name: "chain", choose: markColumns, hover: hoverColumn },
    { name: "picture", choose: restylePicture, hover: showPicture },
    { name: "profiles", choose: drawProfiles, hover: () => data.profile || drawProfiles() },
    { name: "units", choose: markUnits },
    { name: "sites", choose: markSites },
    { name: "map", choose: drawMap, hover: hoverMap },
  );
  listenToChain();
  listenToUnits();
  listenToMap();
  listenToSites();
  listenToPicture();
  listenToKeys();
  listenForTips();
  drawAll();
  readAddress();
  watchSize();
  matchMedia("(prefers-color-scheme: dark)").addEventListener("change", () => setTheme(preferredTheme()));
  addEventListener("beforeprint", startPrinting);
  addEventListener("afterprint", endPrinting);
  requestAnimationFrame(() => {
    document.documentElement.dataset.ready = "1";
  });
}

function restylePicture() {
  showAllOfLayout();
  restyle();
  showPicture();
}

function watchSize() {
  let waits = 0;
  let width = innerWidth;
  addEventListener("resize", () => {
    if (innerWidth === width || state.printing) return;
    width = innerWidth;
    clearTimeout(waits);
    waits = setTimeout(layOut, 120);
  });
}

start();
