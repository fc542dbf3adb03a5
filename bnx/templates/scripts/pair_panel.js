// One panel for every pair: openPair(a, b, opener) shows what is known of two attributes, named in either order.
// It stands beside the page where there is room, and over it where there is not.

const panelData = data("panel");
const panelPlaces = new Map(panelData.names.map((name, place) => [name, place]));
const panelRows = new Map(panelData.pairs.map((row) => [pairKey(row[0], row[1]), row]));

// A figure as printed; those of few words are numbered.
const pairFigure = (row, key, place) => (panelData.words[key] ? panelData.words[key][row[place + 3]] : row[place + 3]);

const pairValues = (row) => {
  const figures = Object.fromEntries(panelData.figures.map(([key], place) => [key, pairFigure(row, key, place)]));
  return { ...figures, less: figures.twice.replace("-", ""), p: figures.adjusted_p, class: { name: panelData.class },
    negligible: panelData.negligible };
};

const pairVerdict = (row) => {
  const [verdict, ...rest] = row[2].map((one) => asNodes(phrase(panelData.sentences[one], pairValues(row))));
  return [el("p", { class: "panel-verdict", id: "pair-panel-verdict" }, ...verdict),
    ...rest.map((words) => el("p", {}, ...words))];
};

const pairFigures = (row) => {
  const cells = panelData.figures.flatMap(([key, label], place) => [el("dt", {}, label),
    el("dd", {}, pairFigure(row, key, place))]);
  return [el("h3", {}, "Figures of the ledger"), el("dl", { class: "figures", id: "pair-panel-figures" }, ...cells)];
};

// The structure whose tab is open, where it joins the two; else the first that does, the recommended one before all.
const toldFirst = (joining) => joining.find((one) => one === openStructure()) || joining[0];

const whatIfItem = (structure, edge) =>
  el("li", { "data-structure": structure.name }, ...asNodes(whatIfWords(structure, edge)));

const pairWhatIf = (key) => {
  const joining = structures.filter((one) => one.byPair.has(key));
  const heading = el("h3", {}, "What if this edge were left out");
  if (!joining.length) return [heading, el("p", {}, "No structure joins the two, so there is no edge to leave out.")];
  const first = toldFirst(joining);
  const open = openStructure();
  const elsewhere = open && open !== first
    ? [el("p", { class: "quiet" }, `${open.name}, which is shown, does not join the two. Where another structure does:`)] : [];
  const rest = joining.filter((one) => one !== first).map((one) => whatIfItem(one, one.byPair.get(key)));
  const more = el("details", {}, el("summary", { class: "quiet" }, "In the other structures that join the two"), el("ul", {}, ...rest));
  return [heading, ...elsewhere, el("p", { id: "pair-panel-what-if" }, ...asNodes(whatIfWords(first, first.byPair.get(key)))),
    ...(rest.length ? [more] : [])];
};

const pairBody = (a, b) => {
  const row = panelRows.get(pairKey(a, b));
  const key = pairKey(a, b);
  const said = row ? pairVerdict(row) : [el("p", {}, "This page holds the strongest pairs only, and this is none of them.")];
  return [...said, ...pairWhatIf(key), ...pairTables(key), ...pairByStructure(key), ...(row ? pairFigures(row) : [])];
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
  document.documentElement.classList.add("with-panel");
  watchBoxes(panel);
  panel.scrollTop = 0;
  byId("pair-panel-title").focus({ preventScroll: true });
};

const closePair = () => {
  const panel = byId("pair-panel");
  if (!panel.open) return;
  panel.close();
  document.documentElement.classList.remove("with-panel");
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
