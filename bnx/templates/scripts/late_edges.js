// Edges that the drawing leaves out, drawn on demand as plain curves between the chips that are there.

const EDGE_DASHES = { gains: null, undecided: "5 2", loses: "1 5", "not judged": null };
const EDGE_TOKENS = { gains: "gain", undecided: "undecided", loses: "loss", "not judged": "unjudged" };

const chipBox = (chip) => {
  const { x, y, width, height } = chip.group.querySelector("path").getBBox();
  return { x: x + width / 2, y: y + height / 2, halfWidth: width / 2, halfHeight: height / 2 };
};

// Where the line from the middle of a box towards a point leaves the box.
const leavingBox = (box, towards) => {
  const [x, y] = [towards.x - box.x, towards.y - box.y];
  const share = Math.min(box.halfWidth / Math.abs(x || 1e-9), box.halfHeight / Math.abs(y || 1e-9));
  return { x: box.x + x * share, y: box.y + y * share };
};

// A curve leans to its right, so that it seldom lies on a line that is already there.
const curveBetween = (from, to) => {
  const bend = { x: (from.x + to.x) / 2 - (to.y - from.y) * 0.14, y: (from.y + to.y) / 2 + (to.x - from.x) * 0.14 };
  return { start: leavingBox(from, bend), bend, end: leavingBox(to, bend) };
};

const headAt = (curve, size) => {
  const length = Math.hypot(curve.end.x - curve.bend.x, curve.end.y - curve.bend.y) || 1;
  const [x, y] = [(curve.end.x - curve.bend.x) / length, (curve.end.y - curve.bend.y) / length];
  const back = { x: curve.end.x - x * size, y: curve.end.y - y * size };
  const corners = [curve.end, { x: back.x - y * size * 0.35, y: back.y + x * size * 0.35 },
    { x: back.x + y * size * 0.35, y: back.y - x * size * 0.35 }];
  return { back, points: corners.map((corner) => `${corner.x.toFixed(1)},${corner.y.toFixed(1)}`).join(" ") };
};

const lateGroup = (view, edge) => {
  const [from, to] = [edge.parent, edge.child].map((place) => chipBox(view.chips.get(place)));
  const width = Math.min(9, 0.8 + 26 * Number(edge.bits));
  const curve = curveBetween(from, to);
  const head = headAt(curve, 10 * (0.5 + 0.025 * width));
  const points = [curve.start, curve.bend, head.back].map((one) => `${one.x.toFixed(1)} ${one.y.toFixed(1)}`);
  const d = `M${points[0]}Q${points[1]} ${points[2]}`;
  const token = EDGE_TOKENS[edge.verdict];
  return svgEl("g", { id: `${view.prefix}-e${edge.key}`, class: `edge arrow late ${edge.verdict.replace(" ", "-")}` },
    svgEl("path", { d, fill: "none", stroke: "transparent", "stroke-width": 16, class: "bnx-reach" }),
    svgEl("path", { d, fill: "none", "stroke-width": width, "stroke-dasharray": EDGE_DASHES[edge.verdict],
      class: `bnx-stroke-${token}` }),
    svgEl("polygon", { points: head.points, class: `bnx-fill-${token}` }));
};

const canDraw = (view, edge) => view.chips.has(edge.parent) && view.chips.has(edge.child);
const leftOut = (view) => view.structure.edges.filter((edge) => !view.arrows.has(edge.key) && canDraw(view, edge));

// Draws what is missing, under the chips, and returns the new groups by edge.
const drawLate = (view) => {
  const under = view.svg.querySelector(".node");
  return leftOut(view).map((edge) => {
    const group = lateGroup(view, edge);
    under.parentNode.insertBefore(group, under);
    return { edge, group };
  });
};
