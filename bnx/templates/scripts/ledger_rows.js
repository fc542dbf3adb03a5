// A window on a long table: only rows in sight stand in the page, and the row in hand stays, so that focus is never lost.

const SPARE_ROWS = 24; // more than a window of rows on either side, so that none is missing while it scrolls fast
const PRINTED_ROWS = 40;

// body: the element of rows; make(row, place): one row. Rows are numbers; show(rows) takes them in the order to show.
const windowOn = (box, table, make) => {
  const body = table.tBodies[0];
  const made = new Map();
  let rows = [];
  let height = 0;
  let held = -1;
  let printing = false;
  let asked = 0;

  const gap = (count) => {
    const cell = el("td", { colspan: table.tHead.rows[0].cells.length });
    cell.style.height = `${count * height}px`;
    return el("tr", { class: "gap", "aria-hidden": "true" }, cell);
  };

  const wanted = () => {
    if (printing) return rows.slice(0, PRINTED_ROWS).map((_, place) => place);
    const first = Math.max(0, Math.floor(box.scrollTop / height) - SPARE_ROWS);
    const last = Math.min(rows.length, Math.ceil((box.scrollTop + box.clientHeight) / height) + SPARE_ROWS);
    const places = Array.from({ length: Math.max(0, last - first) }, (_, k) => first + k);
    if (held >= last) places.push(held);
    else if (held >= 0 && held < first) places.unshift(held);
    return places;
  };

  // Rows that stay are not touched: moving the one in focus would take the focus from it.
  const place = () => {
    const places = wanted();
    const staying = new Set(places);
    for (const child of [...body.children]) {
      if (!staying.has(Number(child.dataset.place))) child.remove();
    }
    for (const key of [...made.keys()]) if (!staying.has(key)) made.delete(key);
    let next = body.firstElementChild;
    let before = 0;
    for (const one of places) {
      if (one > before && !printing) body.insertBefore(gap(one - before), next);
      if (!made.has(one)) made.set(one, make(rows[one], one));
      const row = made.get(one);
      if (row === next) next = row.nextElementSibling;
      else body.insertBefore(row, next);
      before = one + 1;
    }
    if (before < rows.length && !printing) body.append(gap(rows.length - before));
  };

  const measured = () => {
    const row = body.querySelector("tr:not(.gap)");
    return row ? row.getBoundingClientRect().height : 0;
  };

  const fresh = () => {
    made.clear();
    body.replaceChildren();
    place();
  };

  const draw = () => {
    asked = 0;
    place();
  };

  const drawSoon = () => {
    if (!asked) asked = requestAnimationFrame(draw);
  };

  // The height of a row is the style sheet's; it differs on narrow screens.
  const settle = () => {
    const now = measured();
    if (!now || now === height) return;
    const top = height ? Math.floor(box.scrollTop / height) : 0;
    height = now;
    box.scrollTop = top * height;
    fresh();
  };

  const print = (on) => {
    printing = on;
    fresh();
  };

  box.addEventListener("scroll", drawSoon, { passive: true });
  new ResizeObserver(() => {
    settle();
    drawSoon();
  }).observe(box);
  window.addEventListener("beforeprint", () => print(true));
  window.matchMedia("print").addEventListener("change", (event) => print(event.matches));
  window.addEventListener("afterprint", () => print(false));

  return {
    show(chosen) {
      rows = chosen;
      held = -1;
      box.scrollTop = 0;
      height = height || 34;
      fresh();
      settle();
    },
    hold(one) {
      held = one;
    },
    // Brings a place into sight below the head of the table, and gives its row.
    reach(one) {
      const head = table.tHead.offsetHeight;
      const top = one * height;
      if (top < box.scrollTop) box.scrollTop = top;
      else if (top + height > box.scrollTop + box.clientHeight - head) {
        box.scrollTop = top + height - box.clientHeight + head;
      }
      held = one;
      place();
      return made.get(one);
    },
    page: () => Math.max(1, Math.floor((box.clientHeight - table.tHead.offsetHeight) / height) - 1),
  };
};
