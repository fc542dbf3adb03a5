// The tables of a pair, one for each class: records, those that independence gives, and the residual of every cell.

const tablesData = data("tables");

const residualCell = ([observed, expected, residual, step]) => {
  const shade = step > 0 ? `more${step}` : step < 0 ? `fewer${-step}` : "near";
  return el("td", { class: `residual ${shade}` }, el("b", {}, residual), el("span", {}, observed),
    el("small", {}, `of ${expected}`));
};

const tableOfClass = (table, one) =>
  el("table", { class: "class-table" },
    el("caption", {}, nameEl(one.class), `: ${one.rows} records`,
      ...(one.odds ? [`; odds ratio, 95 % interval: ${one.odds}`] : [])),
    el("thead", {}, el("tr", {}, el("th", { scope: "col" }, nameEl(panelData.names[table.a]), " ↓, ",
      nameEl(panelData.names[table.b]), " →"),
    ...table.bLevels.map((level) => el("th", { scope: "col", class: "num" }, nameEl(level))))),
    el("tbody", {}, ...one.cells.map((cells, place) => el("tr", {}, el("th", { scope: "row" },
      nameEl(table.aLevels[place])), ...cells.map(residualCell)))));

const TABLE_KEY = "In every cell: the adjusted residual, in standard errors, with its sign; the records counted; the "
  + "records that independence within the class gives. Within ±2 is within reach of chance. The tint grows beyond 2, 4 "
  + "and 8: upright hatching where there are more records than independence gives, level where there are fewer.";

const commonOdds = (table) => (table.common.length
  ? [el("dl", { class: "figures" }, ...table.common.flatMap(([label, figure]) => [el("dt", {}, label), el("dd", {}, figure)]))]
  : []);

const pairTables = (key) => {
  const heading = el("h3", {}, "Records by class");
  const table = tablesData.tables[key];
  if (!table) return [heading, el("p", { class: "quiet" }, "This page has no table of this pair; bnx test with --strata prints it.")];
  const boxes = table.classes.map((one) => el("div", { class: "box", tabindex: 0, role: "region",
    "aria-label": `Records of ${one.class}` }, tableOfClass(table, one)));
  return [heading, el("p", { class: "quiet" }, TABLE_KEY), el("div", { id: "pair-panel-tables" }, ...boxes), ...commonOdds(table)];
};
