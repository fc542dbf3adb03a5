// One drawing of a structure that answers: pointing at an arrow or an attribute, or moving to it with the keyboard,
// tells its evidence below the drawing and lights it; Enter opens the tables of a pair, or keeps an attribute lit.

const STRIP_IDLE = "Point at an arrow or an attribute, or move to it with the Tab key: its evidence is told here. "
  + "Enter opens the tables of a pair, or keeps the arrows of an attribute lit.";

const lightWidth = (group) => {
  for (const path of group.querySelectorAll("path:not(.bnx-reach)")) {
    path.style.setProperty("--line", path.getAttribute("stroke-width") || "1");
  }
};

const setLit = (view, arrows, chips, rowKey) => {
  view.svg.classList.toggle("has-lit", arrows.size + chips.size > 0);
  for (const [key, { group }] of view.arrows) group.classList.toggle("lit", arrows.has(key));
  for (const [place, { group }] of view.chips) group.classList.toggle("lit", chips.has(place));
  for (const [key, row] of view.rows) row.classList.toggle("lit", key === rowKey);
};

const lightEdge = (view, edge) => {
  setLit(view, new Set([edge.key]), new Set([edge.parent, edge.child]), edge.key);
  view.told.replaceChildren(...asNodes(edgeWords(edge)));
};

const lightChip = (view, place) => {
  const own = view.structure.edges.filter((edge) => edge.parent === place || edge.child === place);
  const chips = new Set([place, ...own.flatMap((edge) => [edge.parent, edge.child])]);
  setLit(view, new Set(own.map((edge) => edge.key)), chips, null);
  view.told.replaceChildren(...asNodes(chipWords(view.structure, place)));
};

const unlight = (view) => {
  if (view.pinned !== null) {
    lightChip(view, view.pinned);
    return;
  }
  setLit(view, new Set(), new Set(), null);
  view.told.textContent = STRIP_IDLE;
};

const pinChip = (view, place) => {
  view.pinned = view.pinned === place ? null : place;
  for (const [one, { group }] of view.chips) group.setAttribute("aria-pressed", String(one === view.pinned));
  if (view.pinned === null) unlight(view);
  else lightChip(view, place);
};

// Makes a part of the drawing answer to pointer and keyboard alike.
const makeAnswer = (view, group, words, light, press) => {
  group.setAttribute("tabindex", "0");
  group.setAttribute("role", "button");
  group.setAttribute("aria-label", asText(words));
  group.addEventListener("pointerenter", light);
  group.addEventListener("focus", light);
  group.addEventListener("pointerleave", () => unlight(view));
  group.addEventListener("blur", () => unlight(view));
  group.addEventListener("click", press);
  group.addEventListener("keydown", (event) => {
    if (event.key === "Escape" && view.pinned !== null) pinChip(view, view.pinned);
    if (event.key !== "Enter" && event.key !== " ") return;
    event.preventDefault();
    press();
  });
};

const addArrow = (view, edge, group) => {
  view.arrows.set(edge.key, { edge, group });
  lightWidth(group);
  makeAnswer(view, group, edgeWords(edge), () => lightEdge(view, edge), () =>
    openEdge(edge, group));
};

const addChip = (view, place, group) => {
  view.chips.set(place, { place, group });
  group.setAttribute("aria-pressed", "false");
  makeAnswer(view, group, chipWords(view.structure, place), () => lightChip(view, place), () => pinChip(view, place));
};

// A view is one drawing on the page; ids of its parts begin with its prefix.
const viewOf = (structure, prefix, svg, told, rows) => {
  const view = { structure, prefix, svg, told, rows, arrows: new Map(), chips: new Map(), pinned: null, late: false };
  for (const edge of structure.edges) {
    const group = byId(`${prefix}-e${edge.key}`);
    if (group) addArrow(view, edge, group);
  }
  structure.own.forEach((place, number) => {
    const group = byId(`${prefix}-n${number}`);
    if (group) addChip(view, place, group);
  });
  svg.style.setProperty("--natural", `${svg.getAttribute("width")}px`);
  svg.closest(".box").style.setProperty("--share", svg.getAttribute("width"));
  return view;
};

const showLate = (view, all) => {
  if (all && !view.late) {
    for (const { edge, group } of drawLate(view)) addArrow(view, edge, group);
    view.late = true;
  }
  for (const { group } of view.arrows.values()) {
    if (group.classList.contains("late")) group.dataset.off = all ? "" : "late";
  }
};
