// What every structure makes of a pair: its edge, and the held-out gain of it in every fold, a dot a fold around a line
// at 0, all on one scale; the figures of the folds stand below as a list.

const DOTS = { width: 170, height: 30, margin: 8, middle: 13 };

const dotScale = (figures) => {
  const values = figures.map(Number);
  const [low, high] = [Math.min(0, ...values), Math.max(0, ...values)];
  const unit = (DOTS.width - 2 * DOTS.margin) / (high - low || 1);
  return (figure) => DOTS.margin + (Number(figure) - low) * unit;
};

const foldWords = (figure, place) => `fold ${place + 1}: ${figure ? `${figure} bits` : "not joined"}`;

// Dots of folds that follow one another are shifted up and down in turn, so that none hides another.
const foldDot = (place, x, told) => svgEl("circle", { cx: x.toFixed(1), cy: DOTS.middle + ((place % 3) - 1) * 5, r: 3.4,
  class: "fold-point" }, svgEl("title", {}, told));

const foldDots = (edge, at) =>
  svgEl("svg", { class: "chart fold-dots", viewBox: `0 0 ${DOTS.width} ${DOTS.height}`, width: DOTS.width,
    height: DOTS.height, role: "img", "aria-label": `Held-out gain by fold: ${edge.folds.map(foldWords).join(", ")}` },
  svgEl("line", { class: "axis", x1: 0, x2: DOTS.width, y1: DOTS.middle, y2: DOTS.middle }),
  svgEl("line", { class: "zero", x1: at("0"), x2: at("0"), y1: 1, y2: 25 }),
  ...edge.folds.map((figure, place) => (figure ? foldDot(place, at(figure), foldWords(figure, place)) : null)));

const joiningRow = (structure, edge, at) =>
  el("tr", { "data-structure": structure.name }, el("th", { scope: "row" }, structure.name, el("span", { class: "role" },
    ...asNodes(edgeEnds(edge)))),
  el("td", { class: "num" }, `${edge.gain} ${edge.interval}`, el("span", { class: "role" }, edge.verdict)),
  el("td", {}, edge.folds.length ? foldDots(edge, at) : "–"), el("td", { class: "num" }, edge.chosen,
    el("span", { class: "role" }, edge.stability)));

const foldItem = (structure, edge) =>
  el("li", {}, el("b", {}, structure.name), `: ${edge.folds.map(foldWords).join("; ")}.`);

const pairByStructure = (key) => {
  const joining = structures.filter((one) => one.byPair.has(key)).map((one) => [one, one.byPair.get(key)]);
  const others = structures.filter((one) => !one.byPair.has(key)).map((one) => one.name);
  const left = others.length ? [el("p", { class: "quiet" }, `Not joined in ${others.join(", ")}.`)] : [];
  const heading = el("h3", {}, "In the structures");
  if (!joining.length) return [heading, ...left];
  const at = dotScale(joining.flatMap(([, edge]) => edge.folds.filter(Boolean)));
  const heads = [["structure", ""], ["held-out gain, bits", "num"], ["by fold, around 0", ""],
    ["folds; halves", "num"]];
  const table = el("table", { id: "pair-panel-structures" }, el("thead", {}, el("tr", {},
    ...heads.map(([words, kind]) => el("th", { scope: "col", class: kind }, words)))),
  el("tbody", {}, ...joining.map(([one, edge]) => joiningRow(one, edge, at))));
  return [heading, el("p", { class: "quiet" }, "A dot is one fold; right of the upright line at 0 the edge helps there. "
    + "Last column: folds that chose it, and the share of random halves in which learning joins the two again."),
  el("div", { class: "box", tabindex: 0, role: "region", "aria-label": "The pair in the structures" }, table), ...left,
  el("details", {}, el("summary", { class: "quiet" }, "The figures fold by fold"), el("ul", { class: "fold-list" },
    ...joining.filter(([, edge]) => edge.folds.length).map(([one, edge]) => foldItem(one, edge))))];
};
