// One panel for every pair: openPair(a, b, opener) shows what is known of two attributes, named in either order.

const panelData = data("panel");
const panelRows = new Map();

const pairKey = (a, b) => (a < b ? `${a},${b}` : `${b},${a}`);

const panelRow = (a, b) => {
  if (!panelRows.size) {
    for (const row of panelData.pairs) panelRows.set(pairKey(row[0], row[1]), row.slice(2));
  }
  return panelRows.get(pairKey(a, b)) || null;
};

const panelFigures = (row) => {
  if (!row) return el("p", {}, "The comparison does not list this pair.");
  const cells = panelData.labels.flatMap((label, place) => [el("dt", {}, label), el("dd", {}, row[place])]);
  return el("dl", { class: "figures" }, ...cells);
};

let panelOpener = null;

const openPair = (a, b, opener) => {
  const panel = byId("pair-panel");
  const [first, second] = [a, b].map((name) => panelData.names.indexOf(name));
  panelOpener = opener || document.activeElement;
  byId("pair-panel-title").replaceChildren(nameEl(a), " ~ ", nameEl(b));
  byId("pair-panel-body").replaceChildren(panelFigures(panelRow(first, second)));
  if (panel.open) panel.close();
  if (window.matchMedia("(max-width: 70rem)").matches) panel.showModal();
  else panel.show();
  byId("pair-panel-title").focus();
};

const closePair = () => {
  byId("pair-panel").close();
  if (panelOpener && panelOpener.isConnected) panelOpener.focus();
  panelOpener = null;
};

const startPairPanel = () => {
  byId("pair-panel-close").addEventListener("click", closePair);
  byId("pair-panel").addEventListener("keydown", (event) => {
    if (event.key !== "Escape") return;
    event.preventDefault();
    closePair();
  });
};
