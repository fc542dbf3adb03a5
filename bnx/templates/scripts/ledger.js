// The ledger of pairs: filters, sorting and rows that open the panel of their pair.

const ledger = { choice: { column: "bits", down: true }, rows: [], window: null, current: 0 };

const ledgerCell = (column, row) => {
  const kinds = [column.numeric ? "num" : "", column.brief ? "" : "extra"].join(" ").trim();
  const word = column.word(row);
  const cell = el("td", { class: kinds || null });
  if (column.key === "verdict") cell.append(verdictEl(word));
  else if (column.key === "joined" && isRecommended(row)) {
    cell.append(el("span", { class: "framed" }, word, el("span", { class: "unseen" }, ", the recommended one too")));
  } else cell.append(word);
  if (column.key === "joined") cell.title = structureNames(row).join(", ");
  else if (!column.numeric) cell.title = word;
  return cell;
};

const ledgerRow = (row, place) => {
  const [a, b] = pairNames(row);
  const open = el("button", { type: "button", class: "pair-open", title: `${a} ~ ${b}` });
  open.append(nameEl(a), el("span", { class: "tilde" }, "~"), nameEl(b));
  open.tabIndex = place === ledger.current ? 0 : -1;
  const cells = [...pairsHeld.columns.values()].slice(1).map((column) => ledgerCell(column, row));
  const head = el("th", { scope: "row" }, open);
  return el("tr", { "aria-rowindex": place + 2, "data-place": place }, head, ...cells);
};

const ledgerCount = () => {
  const [shown, every] = [ledger.rows.length, pairsHeld.rows].map((count) => count.toLocaleString("en"));
  const column = pairsHeld.columns.get(ledger.choice.column);
  const order = column.orders[ledger.choice.down ? 1 : 0];
  byId("pair-count").textContent = `${shown} of ${every} pairs, by ${column.label}: ${order}`;
  show(byId("pair-none"), !ledger.rows.length);
};

const drawLedger = () => {
  ledger.rows = chosenPairs(ledger.choice);
  ledger.current = 0;
  byId("pair-table").setAttribute("aria-rowcount", ledger.rows.length + 1);
  ledger.window.show(ledger.rows);
  ledgerCount();
};

const markOrder = () => {
  for (const head of byId("pair-table").tHead.rows[0].cells) {
    const column = pairsHeld.columns.get(head.dataset.column);
    if (!column.orders.length) continue;
    const isOn = column.key === ledger.choice.column;
    if (isOn) head.setAttribute("aria-sort", ledger.choice.down ? "descending" : "ascending");
    else head.removeAttribute("aria-sort");
    head.querySelector(".way path").setAttribute("d", isOn && !ledger.choice.down ? "M0 8L4.5 1 9 8z" : "M0 1L4.5 8 9 1z");
    head.querySelector(".unseen").textContent = isOn ? `, ${column.orders[ledger.choice.down ? 1 : 0]}` : "";
  }
};

const sortBy = (column) => {
  const { choice } = ledger;
  choice.down = choice.column === column.key ? !choice.down : column.falls;
  choice.column = column.key;
  markOrder();
  drawLedger();
};

const addSortButtons = () => {
  for (const head of byId("pair-table").tHead.rows[0].cells) {
    const column = pairsHeld.columns.get(head.dataset.column);
    if (!column.orders.length) continue;
    const way = svgEl("svg", { class: "way", viewBox: "0 0 9 9", "aria-hidden": "true" }, svgEl("path"));
    const button = el("button", { type: "button", class: "sort" }, column.label, way, el("span", { class: "unseen" }));
    button.addEventListener("click", () => sortBy(column));
    head.replaceChildren(button);
  }
};

const readFilters = () => {
  const { choice } = ledger;
  choice.words = byId("pair-search").value.toLowerCase().split(/\s+/).filter(Boolean);
  choice.attribute = byId("pair-attribute").value === "" ? -1 : Number(byId("pair-attribute").value);
  choice.joined = byId("pair-joined").value;
  choice.verdicts = new Set([...byId("pair-verdicts").querySelectorAll("input:checked")].map((box) => box.value));
};

const filterLedger = () => {
  readFilters();
  drawLedger();
};

const resetFilters = () => {
  for (const id of ["pair-search", "pair-attribute", "pair-joined"]) byId(id).value = "";
  for (const box of byId("pair-verdicts").querySelectorAll("input")) box.checked = true;
  filterLedger();
};

const goTo = (place) => {
  const before = byId("pair-table").querySelector('.pair-open[tabindex="0"]');
  if (before) before.tabIndex = -1;
  ledger.current = place;
  const open = ledger.window.reach(place).querySelector(".pair-open");
  open.tabIndex = 0;
  open.focus({ preventScroll: true });
};

const ledgerKey = (event) => {
  const row = event.target.closest("tbody tr[data-place]");
  if (!row || event.key === "ArrowLeft" || event.key === "ArrowRight") return;
  const [place, last] = [Number(row.dataset.place), ledger.rows.length - 1];
  const pages = { PageDown: ledger.window.page(), PageUp: -ledger.window.page() };
  const next = event.key in pages ? place + pages[event.key] : stepped(event.key, place, last + 1);
  if (next === -1 && !(event.key in pages)) return;
  event.preventDefault();
  goTo(Math.min(last, Math.max(0, next)));
};

const listenToLedger = () => {
  const table = byId("pair-table");
  const controls = byId("pair-controls");
  controls.addEventListener("input", filterLedger);
  byId("pair-all-columns").addEventListener("input", (event) => {
    event.stopPropagation();
    table.classList.toggle("brief", !event.target.checked);
  });
  byId("pair-reset").addEventListener("click", resetFilters);
  table.addEventListener("click", (event) => {
    const row = event.target.closest("tbody tr[data-place]");
    if (!row || window.getSelection().toString()) return;
    openPair(...pairNames(ledger.rows[Number(row.dataset.place)]), row.querySelector(".pair-open"));
  });
  table.addEventListener("keydown", ledgerKey);
  table.addEventListener("focusin", (event) => {
    const row = event.target.closest("tbody tr[data-place]");
    if (row) ledger.window.hold(Number(row.dataset.place));
  });
};

const MOST_SIGNS_IN_LINE = 24;

const hasLongNames = () => {
  for (let row = 0; row < pairsHeld.rows; row += 1) {
    if (pairNames(row).join("").length > MOST_SIGNS_IN_LINE) return true;
  }
  return false;
};

const startLedger = () => {
  if (!allPairs()) return;
  const table = byId("pair-table");
  table.classList.add("held-table", "brief");
  table.classList.toggle("stacked", hasLongNames());
  pairsHeld.names.forEach((name, number) => byId("pair-attribute").append(el("option", { value: number }, name)));
  ledger.window = windowOn(byId("pair-box"), table, ledgerRow);
  addSortButtons();
  markOrder();
  listenToLedger();
  show(byId("pair-controls"));
  filterLedger();
};
