// The triangle of pairs: one stop of the Tab key, arrow keys move from cell to cell, and a strip tells the cell in hand.

const tri = { data: null, at: new Map(), row: -1, column: -1 };

const triMark = (row, column) => tri.at.get(row * tri.data.size + column) ?? -1;

const triPair = (mark) => tri.data.marks[mark][2];

const stripParts = (row) => {
  const word = (key) => pairWord(key, row);
  const names = structureNames(row);
  const joined = names.length ? `Joined by ${names.join(", ")}.` : "No structure joins them.";
  const counted = word("double_counted");
  const twice = counted === "–" ? "" : `Counted twice: ${counted} bits. `;
  const without = `${word("marginal")} without the class, which leaves it: ${word("outcome")}.`;
  const interval = `${word("bits")} bits given the class, 95 % interval less chance ${word("interval")}; ${without} `;
  return [verdictEl(word("verdict")), `. ${interval}${twice}${joined}`];
};

const tellCell = () => {
  const mark = triMark(tri.row, tri.column);
  const names = [tri.column, tri.row].map((place) => byId("triangle-names").children[place].querySelector("title").textContent);
  const parts = mark < 0 ? ["The comparison does not list this pair."] : stripParts(triPair(mark));
  byId("triangle-strip").replaceChildren(nameEl(names[0]), " ~ ", nameEl(names[1]), ": ", ...parts);
};

const lightCell = () => {
  const { cell } = tri.data;
  const [x, y, middle] = [tri.column * cell, tri.row * cell, cell / 2];
  const wires = `M${x + cell} ${y + middle}H${y + middle}M${x + middle} ${y}V${x + middle}`;
  const frame = { class: "lit-cell", x: x + 1, y: y + 1, width: cell - 2, height: cell - 2 };
  byId("triangle-lit").replaceChildren(svgEl("path", { class: "lit-wire", d: wires }), svgEl("rect", frame));
  [...byId("triangle-names").children].forEach((name, place) => {
    name.classList.toggle("lit", place === tri.row || place === tri.column);
  });
};

const goToCell = (row, column) => {
  if (row === tri.row && column === tri.column) return;
  [tri.row, tri.column] = [row, column];
  lightCell();
  tellCell();
};

const cellInSight = () => {
  const [box, frame] = ["triangle", "triangle-lit"].map((id) => byId(id).getBoundingClientRect());
  if (frame.left < box.left) byId("triangle").scrollLeft -= box.left - frame.left + 20;
  else if (frame.right > box.right) byId("triangle").scrollLeft += frame.right - box.right + 20;
  byId("triangle-lit").lastChild.scrollIntoView({ block: "nearest", inline: "nearest" });
};

const strongestCell = () => {
  const [row, column] = tri.data.marks.reduce((best, one) => (one[2] < best[2] ? one : best));
  goToCell(row, column);
};

const cellUnder = (event) => {
  const svg = byId("triangle").querySelector("svg.triangle").getBoundingClientRect();
  const scale = tri.data.cell * (svg.width / byId("triangle").querySelector("svg.triangle").viewBox.baseVal.width);
  const [row, column] = [Math.floor((event.clientY - svg.top) / scale), Math.floor((event.clientX - svg.left) / scale)];
  return column >= 0 && row < tri.data.size && column < row ? [row, column] : null;
};

const openCell = () => {
  const mark = triMark(tri.row, tri.column);
  if (mark >= 0) openPair(...pairNames(triPair(mark)), byId("triangle"));
};

const triangleKey = (event) => {
  const last = tri.data.size - 1;
  const moves = {
    ArrowLeft: () => goToCell(tri.row, Math.max(0, tri.column - 1)),
    ArrowRight: () => goToCell(tri.row, Math.min(tri.row - 1, tri.column + 1)),
    ArrowUp: () => goToCell(Math.max(tri.column + 1, tri.row - 1), tri.column),
    ArrowDown: () => goToCell(Math.min(last, tri.row + 1), tri.column),
    Home: () => goToCell(tri.row, 0),
    End: () => goToCell(tri.row, tri.row - 1),
  };
  if (event.ctrlKey || event.altKey || event.metaKey) return;
  if (event.key in moves) {
    event.preventDefault();
    moves[event.key]();
    cellInSight();
  } else if (event.key === "Enter" || event.key === " ") {
    event.preventDefault();
    openCell();
  }
};

const showMeasure = (number) => {
  const measure = tri.data.measures[number];
  const [marks, numbers] = ["triangle-marks", "triangle-numbers"].map((id) => byId(id));
  tri.data.middles.forEach(([x, y], mark) => {
    marks.children[mark].setAttribute("transform", `translate(${x} ${y}) scale(${measure.sides[mark]})`);
    if (numbers) numbers.children[mark].textContent = measure.numbers[mark];
  });
  for (const scale of document.querySelectorAll("svg.scale")) scale.toggleAttribute("hidden", scale.dataset.measure !== `${number}`);
  tell(`The marks show ${measure.label}.`);
};

const listenToTriangle = (box) => {
  box.addEventListener("keydown", triangleKey);
  box.addEventListener("focus", () => {
    if (tri.row < 0) strongestCell();
  });
  box.addEventListener("pointermove", (event) => {
    const cell = cellUnder(event);
    if (cell) goToCell(...cell);
  });
  box.addEventListener("click", (event) => {
    const cell = cellUnder(event);
    if (!cell) return;
    goToCell(...cell);
    openCell();
  });
};

const startTriangle = () => {
  tri.data = data("triangle");
  if (!tri.data) return;
  allPairs();
  tri.data.marks.forEach(([row, column], mark) => tri.at.set(row * tri.data.size + column, mark));
  const box = byId("triangle");
  box.setAttribute("role", "application");
  box.setAttribute("aria-label", "Triangle of pairs: arrow keys go from cell to cell, Enter opens the pair");
  for (const mark of byId("triangle-marks").children) mark.replaceChildren();
  show(byId("triangle-strip"));
  byId("triangle-strip").textContent = "Point at a cell, or come here with the Tab key and move with the arrow keys.";
  const controls = byId("triangle-controls");
  if (controls) {
    show(controls);
    controls.addEventListener("change", (event) => showMeasure(Number(event.target.value)));
  }
  listenToTriangle(box);
};
