// Part d: the table of units. It stands in the page; here its marks follow the choice.

function markUnits() {
  for (const row of document.querySelectorAll("#unit-rows tr")) {
    row.classList.toggle("chosen", Number(row.getAttribute("data-unit")) === state.unit && state.unit >= 0);
  }
  for (const button of document.querySelectorAll("button.unit")) {
    button.setAttribute("aria-pressed", String(Number(button.getAttribute("data-unit")) === state.unit));
  }
  for (const button of document.querySelectorAll("#unit-rows button.name")) {
    const e = Number(button.getAttribute("data-entry"));
    button.setAttribute("aria-pressed", String(state.chosen.has(e)));
  }
}

function listenToUnits() {
  document.addEventListener("click", (event) => {
    const button = /** @type {Element} */ (event.target).closest("button.unit");
    if (button) {
      event.stopPropagation();
      chooseUnit(Number(button.getAttribute("data-unit")));
    }
  });
  byId("unit-rows").addEventListener("click", (event) => {
    const target = /** @type {Element} */ (event.target);
    const name = target.closest("button.name");
    const row = target.closest("tr");
    if (name) chooseEntry(Number(name.getAttribute("data-entry")), event);
    else if (row?.hasAttribute("data-unit") && !target.closest("button")) chooseUnit(Number(row.getAttribute("data-unit")));
  });
  byId("unit-rows").addEventListener("pointerover", (event) => {
    const name = /** @type {Element} */ (event.target).closest("button.name");
    hover(name ? Number(name.getAttribute("data-entry")) : -1);
  });
  byId("unit-rows").addEventListener("pointerleave", () => hover(-1));
  byId("copy-units").addEventListener("click", (event) => {
    const head = ["motional_unit", "n_sites", "sites", "how_sure", "holds_together", "one_process"];
    const lines = data.units.map((unit) => [
      unit.name,
      unit.members.length,
      unit.members.map((e) => data.entries.name[e]).join(" "),
      unit.sure.join("; "),
      unit.holds.map(plainText).join("; "),
      unit.process.map(plainText).join("; "),
    ]);
    copyLines([head, ...lines], event);
  });
}

/** @param {string} text */
function plainText(text) {
  return text.replace(/_\{([^}]*)\}/g, "$1");
}

/**
 * Copy rows as CSV and say so for two seconds.
 * @param {(string|number|null)[][]} rows the first is the heading
 * @param {Event} event
 */
async function copyLines(rows, event) {
  const cell = (/** @type {string|number|null} */ v) => {
    const text = String(v ?? "").replace(/[\u00a0\u202f]/g, " ").replace(/−/g, "-");
    return /[",\n]/.test(text) ? `"${text.replace(/"/g, '""')}"` : text;
  };
  const text = rows.map((row) => row.map(cell).join(",")).join("\n") + "\n";
  await copyText(text, event, `copied, ${rows.length - 1} row${rows.length === 2 ? "" : "s"}`);
}

/** @param {string} text @param {Event} event @param {string} said */
async function copyText(text, event, said) {
  const button = /** @type {HTMLElement} */ (event.currentTarget);
  const before = button.textContent;
  try {
    await navigator.clipboard.writeText(text);
    button.textContent = said;
  } catch {
    button.textContent = copyByHand(text) ? said : "could not copy";
  }
  setTimeout(() => (button.textContent = before), 2000);
}

/** The older way, for pages opened from disk. @param {string} text */
function copyByHand(text) {
  const area = /** @type {HTMLTextAreaElement} */ (element("textarea"));
  area.value = text;
  area.className = "skip";
  document.body.append(area);
  area.select();
  const done = document.execCommand("copy");
  area.remove();
  return done;
}
