// The section of structures: a tab for each, one set of controls for all, and a second drawing beside on demand.

const structureSheets = []; // by structure: {structure, tab, panel, view}
let openSheet = 0;
let beside = null; // {sheet, view, parts} of the second drawing

const openStructure = () => structureSheets[openSheet].structure;

// What stands open or closed without scripts becomes the panel of a tab.
const panelOf = (structure) => {
  const details = byId(`structure-${structure.prefix}`);
  const panel = el("div", { class: "structure", role: "tabpanel", id: details.id,
    "aria-labelledby": `structure-tab-${structure.prefix}`, "data-structure": structure.name });
  details.querySelector("summary").remove();
  panel.append(...details.childNodes);
  details.replaceWith(panel);
  return panel;
};

const edgeRows = (structure) => {
  const rows = structure.edges.map((edge) => [edge.key, byId(`${structure.prefix}-r${edge.key}`)]);
  return new Map(rows.filter(([, row]) => row));
};

const tellsUnder = (panel, prefix) => {
  const told = el("p", { class: "told", id: `told-${prefix}`, "aria-live": "polite" }, STRIP_IDLE);
  const drawings = panel.querySelector(".drawings");
  if (drawings) drawings.after(told);
  return told;
};

const makeView = (structure, panel) => {
  const svg = panel.querySelector(".drawing svg");
  const told = tellsUnder(panel, structure.prefix);
  const rows = edgeRows(structure);
  if (svg) return viewOf(structure, structure.prefix, svg, told, rows);
  return { structure, svg: null, told, rows, arrows: new Map(), chips: new Map(), pinned: null };
};

// A row lights its arrow, and its button opens the tables of its pair.
const wireRow = (view, edge, row) => {
  const button = el("button", { type: "button", class: "link", "aria-label":
    `Tables of ${asText([attributeNamed(edge.parent), " and ", attributeNamed(edge.child)])}` }, "tables");
  button.addEventListener("click", () => openEdge(edge, button));
  row.append(el("td", {}, button));
  if (!view.svg) return;
  row.addEventListener("pointerenter", () => lightEdge(view, edge));
  row.addEventListener("pointerleave", () => unlight(view));
};

const wireRows = (view) => {
  for (const edge of view.structure.edges) {
    if (view.rows.has(edge.key)) wireRow(view, edge, view.rows.get(edge.key));
  }
  const head = [...view.rows.values()][0]?.closest("table").querySelector("thead tr");
  if (head) head.append(el("th", { scope: "col" }, el("span", { class: "unseen" }, "pair")));
};

const leavesOut = (view) => view.svg && (view.late || leftOut(view).length > 0);

const countWords = (view, count) => {
  const { edges, total, own } = view.structure;
  const unseen = view.svg && view.chips.size < own.length ? `; ${own.length - view.chips.size} attributes are not drawn, the table below holds their edges` : "";
  return total || edges.length ? `${count} of ${total} edges shown${unseen}` : "no edges";
};

const refreshStructures = () => {
  const least = leastShown();
  const views = [structureSheets[openSheet].view, ...(beside ? [beside.view] : [])];
  const all = byId("all-edges").checked;
  show(byId("all-edges-label"), views.some(leavesOut));
  for (const view of views) {
    if (view.svg) showLate(view, all);
  }
  const counts = views.map((view) => countWords(view, siftView(view, least)));
  const words = views.map((view, place) => (views.length > 1 ? `${view.structure.name}: ${counts[place]}` : counts[place]));
  byId("edges-shown").textContent = words.join("; ");
  markDifferences();
};

const markDifferences = () => {
  const view = structureSheets[openSheet].view;
  if (!beside) {
    if (view.svg) unmark(view);
    return;
  }
  const found = pairDifferences(view.structure, beside.view.structure);
  const turnedThere = found.turned.map((edge) => beside.view.structure.byPair.get(edge.pair));
  if (view.svg) markDifferent(view, found.onlyOne, found.turned);
  if (beside.view.svg) markDifferent(beside.view, found.onlyOther, turnedThere);
};

const closeBeside = () => {
  if (!beside) return;
  for (const part of beside.parts) part.remove();
  for (const two of document.querySelectorAll(".drawings.two")) two.classList.remove("two");
  beside = null;
};

const openBeside = (prefix) => {
  closeBeside();
  const sheet = structureSheets[openSheet];
  const other = structures.find((one) => one.prefix === prefix);
  if (!other || other === sheet.structure) return;
  const svg = structureSheets.find((one) => one.structure === other).view.svg;
  const words = differenceWords(sheet.structure, other);
  const view = { structure: other, svg: null, rows: new Map(), arrows: new Map(), chips: new Map() };
  beside = { view, parts: [words] };
  sheet.view.told.after(words);
  if (svg && sheet.view.svg) {
    const copy = copyDrawing(svg, `${prefix}-`, "beside-");
    const box = el("div", { class: "box drawing", tabindex: 0, role: "region", "aria-label": `Drawing of ${other.name}` }, copy);
    const drawings = sheet.panel.querySelector(".drawings");
    drawings.append(box);
    drawings.classList.add("two");
    beside.parts.push(box);
    watchBoxes(drawings);
    beside.view = viewOf(other, "beside", copy, sheet.view.told, new Map());
  }
};

const selectTab = (place, focus) => {
  openSheet = place;
  structureSheets.forEach(({ tab, panel }, number) => {
    tab.setAttribute("aria-selected", String(number === place));
    tab.tabIndex = number === place ? 0 : -1;
    show(panel, number === place);
  });
  if (focus) structureSheets[place].tab.focus();
  const choice = byId("beside");
  if (choice) {
    for (const option of choice.options) option.disabled = option.value === structureSheets[place].structure.prefix;
    if (choice.value === structureSheets[place].structure.prefix) choice.value = "";
    openBeside(choice.value);
  }
  refreshStructures();
};

const resetStructures = () => {
  for (const name of ["least-bits", "least-gain"]) {
    if (byId(name)) byId(name).value = byId(name).min;
  }
  byId("all-edges").checked = false;
  if (byId("beside")) byId("beside").value = "";
  closeBeside();
  for (const { view } of structureSheets) {
    if (view.pinned !== null) pinChip(view, view.pinned);
  }
  refreshStructures();
};

const wireControls = () => {
  for (const name of ["least-bits", "least-gain"]) {
    if (byId(name)) byId(name).addEventListener("input", refreshStructures);
  }
  byId("all-edges").addEventListener("change", refreshStructures);
  byId("structures-reset").addEventListener("click", resetStructures);
  if (!byId("beside")) return;
  byId("beside").addEventListener("change", (event) => {
    openBeside(event.target.value);
    refreshStructures();
  });
};

const startStructures = () => {
  for (const structure of structures) {
    const panel = panelOf(structure);
    const view = makeView(structure, panel);
    wireRows(view);
    structureSheets.push({ structure, panel, view, tab: byId(`structure-tab-${structure.prefix}`) });
  }
  structureSheets.forEach(({ tab }, place) => {
    tab.addEventListener("click", () => selectTab(place, false));
    tab.addEventListener("keydown", (event) => {
      const next = stepped(event.key, place, structureSheets.length);
      if (next < 0) return;
      event.preventDefault();
      selectTab(next, true);
    });
  });
  wireControls();
  for (const name of ["structure-tabs", "structure-controls"]) show(byId(name));
  selectTab(0, false);
};
