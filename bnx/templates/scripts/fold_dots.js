// The held-out gain of one edge in every fold: a dot a fold around a line at 0, and the figures as a list.

const DOTS = { width: 300, height: 34, left: 10, right: 10, middle: 14 };

const dotScale = (figures) => {
  const values = figures.map(Number);
  const [low, high] = [Math.min(0, ...values), Math.max(0, ...values)];
  const unit = (DOTS.width - DOTS.left - DOTS.right) / (high - low || 1);
  return (figure) => DOTS.left + (Number(figure) - low) * unit;
};

// Folds that stand close are shifted up and down in turn, so that none hides another.
const foldDot = (place, x, told) => svgEl("circle", { cx: x.toFixed(1), cy: DOTS.middle + ((place % 3) - 1) * 5, r: 3.6,
  class: "fold-point" }, svgEl("title", {}, told));

const foldWords = (figure, place) => `fold ${place + 1}: ${figure ? `${figure} bits` : "not joined"}`;

const foldDots = (edge) => {
  const found = edge.folds.filter(Boolean);
  if (!found.length) return el("p", { class: "quiet" }, "No fold joins the two.");
  const at = dotScale(found);
  const [first, last] = [found.reduce((a, b) => (Number(b) < Number(a) ? b : a)),
    found.reduce((a, b) => (Number(b) > Number(a) ? b : a))];
  const words = `Held-out gain by fold, from ${first} to ${last} bits; right of 0 the edge helps`;
  const picture = svgEl("svg", { class: "chart fold-dots", viewBox: `0 0 ${DOTS.width} ${DOTS.height}`, width: DOTS.width,
    height: DOTS.height, role: "img", "aria-label": words },
  svgEl("line", { class: "zero", x1: at(0), x2: at(0), y1: 2, y2: 24 }),
  svgEl("text", { class: "faint tiny", x: at(0), y: 33, "text-anchor": at(0) < 40 ? "start" : at(0) > 260 ? "end" : "middle" }, "0"),
  ...edge.folds.map((figure, place) => (figure ? foldDot(place, at(figure), foldWords(figure, place)) : null)));
  const list = el("ul", { class: "fold-list" }, ...edge.folds.map((figure, place) => el("li", {}, foldWords(figure, place))));
  return el("div", { class: "by-fold" }, el("p", { class: "quiet" }, `${words}.`), picture,
    el("details", {}, el("summary", { class: "quiet" }, "The figures"), list));
};
