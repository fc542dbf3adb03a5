// One panel for every pair: openPair(a, b, opener) shows what is known of two attributes, named in either order.
// It stands beside the page where there is room, and over it where there is not.

const panelData = data("panel");
const panelPlaces = new Map(panelData.names.map((name, place) => [name, place]));
const panelRows = new Map(panelData.pairs.map((row) => [pairKey(row[0], row[1]), row]));

const pairValues = (row) => {
  const figures = Object.fromEntries(panelData.figures.map(([key], place) => [key, row[place + 3]]));
  return { ...figures, less: figures.twice.replace("-", ""), p: figures.adjusted_p, class: { name: panelData.class },
    negligible: panelData.negligible };
};

const pairVerdict = (row) => {
  const [verdict, ...rest] = row[2].map((one) => asNodes(phrase(panelData.sentences[one], pairValues(row))));
  return [el("p", { class: "panel-verdict", id: "pair-panel-verdict" }, ...verdict),
    ...rest.map((words) => el("p", {}, ...words))];
};

const pairFigures = (row) => {
  const cells = panelData.figures.flatMap(([, label], place) => [el("dt", {}, label), el("dd", {}, row[place + 3])]);
  return [el("h3", {}, "Figures of the ledger"), el("dl", { class: "figures", id: "pair-panel-figures" }, ...cells)];
};

// What each structure makes of the pair, and what would change without the edge.
const pairInStructure = (structure, edge) => {
  const gains = edge.folds.length ? [foldDots(edge)] : [];
  return el("li", { "data-structure": structure.name }, el("b", {}, structure.name), ": ", ...asNodes(edgeEnds(edge)),
    `, ${edge.verdict}; chosen in ${edge.chosen} folds, stability ${edge.stability}. `,
    el("span", { class: "what-if" }, ...asNodes(whatIfWords(structure, edge))), ...gains);
};

const pairInStructures = (key) => {
  const joining = structures.filter((one) => one.byPair.has(key));
  const others = structures.filter((one) => !one.byPair.has(key)).map((one) => one.name);
  const heading = el("h3", {}, "What if this edge were left out");
  if (!joining.length) return [heading, el("p", {}, "No structure joins the two, so there is no edge to leave out.")];
  return [heading, el("ul", { class: "joining", id: "pair-panel-structures" },
    ...joining.map((one) => pairInStructure(one, one.byPair.get(key)))),
  ...(others.length ? [el("p", { class: "quiet" }, `Not joined in ${others.join(", ")}.`)] : [])];
};

const pairBody = (a, b) => {
  const row = panelRows.get(pairKey(a, b));
  const said = row ? pairVerdict(row) : [el("p", {}, "This page holds the strongest pairs only, and this is none of them.")];
  return [...said, ...pairInStructures(pairKey(a, b)), ...pairTables(pairKey(a, b)), ...(row ? pairFigures(row) : [])];
};

let panelOpener = null;

const openPair = (a, b, opener) => {
  const panel = byId("pair-panel");
  panelOpener = opener || document.activeElement;
  byId("pair-panel-title").replaceChildren(nameEl(a), " ~ ", nameEl(b));
  byId("pair-panel-body").replaceChildren(...pairBody(panelPlaces.get(a), panelPlaces.get(b)));
  if (panel.open) panel.close();
  if (window.matchMedia("(max-width: 62rem)").matches) panel.showModal();
  else panel.show();
  panel.scrollTop = 0;
  byId("pair-panel-title").focus({ preventScroll: true });
};

const closePair = () => {
  const panel = byId("pair-panel");
  if (!panel.open) return;
  panel.close();
  if (panelOpener && panelOpener.isConnected) panelOpener.focus({ preventScroll: true });
  panelOpener = null;
};

const startPairPanel = () => {
  byId("pair-panel-close").addEventListener("click", closePair);
  byId("pair-panel").addEventListener("cancel", (event) => {
    event.preventDefault();
    closePair();
  });
  document.addEventListener("keydown", (event) => {
    if (event.key === "Escape") closePair();
  });
};
