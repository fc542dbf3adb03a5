// Two structures side by side: a second drawing, what only one of them joins marked, and the same in words.

const DIFFERENCE_SIGNS = { only: "+", turned: "⇄" };
const DIFFERENCES_LISTED = 30;

const pairDifferences = (one, other) => {
  const only = (from, to) => from.edges.filter((edge) => !to.byPair.has(edge.pair));
  const both = one.edges.filter((edge) => other.byPair.has(edge.pair));
  return {
    onlyOne: only(one, other),
    onlyOther: only(other, one),
    turned: both.filter((edge) => other.byPair.get(edge.pair).parent !== edge.parent),
    both: both.length,
  };
};

// Where on an arrow a sign is clear of the number beside it.
const clearOf = (path, number) => {
  const length = path.getTotalLength();
  const places = [0.4, 0.3, 0.6, 0.7].map((share) => path.getPointAtLength(length * share));
  if (!number) return places[0];
  const box = number.getBBox();
  const away = ({ x, y }) => Math.hypot(Math.max(box.x - x, x - box.x - box.width, 0), Math.max(box.y - y, y - box.y - box.height, 0));
  return places.reduce((best, one) => (away(best) < 9 && away(one) > away(best) ? one : best));
};

// A sign on a disc, on the arrow; the casing makes the arrow a double line.
const markArrow = (group, kind) => {
  const path = group.querySelector("path:not(.bnx-reach)");
  const width = Number(path.getAttribute("stroke-width") || 1);
  const casing = (extra, token) => svgEl("path", { d: path.getAttribute("d"), fill: "none", "stroke-width": width + extra,
    class: `casing bnx-stroke-${token}` });
  const at = clearOf(path, group.querySelector("text"));
  if (kind === "only") group.prepend(casing(5.6, "text"), casing(3.8, "frame"));
  group.append(svgEl("circle", { cx: at.x, cy: at.y, r: 6.5, class: "casing bnx-fill-text" }),
    svgEl("text", { x: at.x, y: at.y + 3.6, "text-anchor": "middle", "font-size": 11, "font-weight": 700,
      class: "casing bnx-fill-background" }, DIFFERENCE_SIGNS[kind]));
};

const unmark = (view) => {
  for (const part of view.svg.querySelectorAll(".casing")) part.remove();
};

const markDifferent = (view, only, turned) => {
  unmark(view);
  const mark = (edges, kind) => edges.forEach((edge) => {
    const arrow = view.arrows.get(edge.key);
    if (arrow) markArrow(arrow.group, kind);
  });
  mark(only, "only");
  mark(turned, "turned");
};

// Copies a drawing under ids of its own.
const copyDrawing = (svg, from, to) => {
  const copy = svg.cloneNode(true);
  for (const part of [copy, ...copy.querySelectorAll("[id]")]) {
    if (part.id) part.id = part.id.replace(from, to);
  }
  for (const part of copy.querySelectorAll(".casing, .late")) part.remove();
  for (const part of copy.querySelectorAll("[hidden]")) part.removeAttribute("hidden");
  return copy;
};

const pairButton = (edge) => {
  const button = el("button", { type: "button", class: "link" }, ...asNodes(edgeEnds(edge)));
  button.addEventListener("click", () => openEdge(edge, button));
  return button;
};

const differenceItem = (sign, words, edges) => {
  const items = edges.slice(0, DIFFERENCES_LISTED).map(pairButton);
  const more = edges.length > DIFFERENCES_LISTED ? ` and ${edges.length - DIFFERENCES_LISTED} more` : "";
  return [el("dt", {}, el("span", { class: "disc", "aria-hidden": "true" }, sign), `${words} (${edges.length})`),
    el("dd", {}, ...(edges.length ? items : ["none"]), more)];
};

const differenceWords = (one, other) => {
  const found = pairDifferences(one, other);
  const count = found.both === 1 ? "1 pair" : `${found.both} pairs`;
  return el("div", { class: "differences", id: "differences" },
    el("p", {}, `${one.name} and ${other.name} both join ${count}, ${found.turned.length} of them turned round; only in `
      + `${one.name}: ${found.onlyOne.length}; only in ${other.name}: ${found.onlyOther.length}.`),
    el("dl", {}, ...differenceItem(DIFFERENCE_SIGNS.only, `Only in ${one.name}`, found.onlyOne),
      ...differenceItem(DIFFERENCE_SIGNS.only, `Only in ${other.name}`, found.onlyOther),
      ...differenceItem(DIFFERENCE_SIGNS.turned, `Turned round in ${other.name}`, found.turned)));
};
