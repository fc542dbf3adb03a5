// All pairs of the page, by column: what is printed, and the rank of the exact figure; no number is read from text.

let pairsHeld = null;

const pairsOpened = (raw) => {
  const pairs = { ...raw, rows: raw.a.length, columns: new Map(), place: new Map() };
  for (const column of raw.columns) {
    const at = column.at || column.rank;
    const words = column.runs ? column.words.flatMap((word, k) => Array(column.runs[k]).fill(word)) : column.words;
    pairs.columns.set(column.key, { ...column, word: (row) => words[at[row]] });
  }
  for (let row = 0; row < pairs.rows; row += 1) pairs.place.set(pairCode(raw, raw.a[row], raw.b[row]), row);
  return pairs;
};

const pairCode = (raw, a, b) => Math.min(a, b) * raw.names.length + Math.max(a, b);

// The pairs, opened when first asked for; null on a page without any.
const allPairs = () => {
  if (!pairsHeld && byId("data-pairs")) pairsHeld = pairsOpened(data("pairs"));
  return pairsHeld;
};

const pairNames = (row) => [pairsHeld.names[pairsHeld.a[row]], pairsHeld.names[pairsHeld.b[row]]];
const pairWord = (key, row) => pairsHeld.columns.get(key).word(row);
const structuresOf = (row) => pairsHeld.sets[pairsHeld.set[row]];
const structureNames = (row) => structuresOf(row).map((number) => pairsHeld.structures[number]);
const isRecommended = (row) => structuresOf(row).includes(pairsHeld.recommended);

// The row of two attributes, named in either order; -1 where the page does not hold the pair.
const pairRow = (a, b) => {
  const [first, second] = [a, b].map((name) => allPairs().names.indexOf(name));
  return pairsHeld.place.get(pairCode(pairsHeld, first, second)) ?? -1;
};

const VERDICT_MARKS = new Map([
  ["dependent", "full"],
  ["detected, but negligible", "hollow"],
  ["negligible", "dot"],
  ["not enough data", "open"],
]);

// A verdict of a pair with its sign, as the templates draw it.
const verdictEl = (word) => {
  const mark = VERDICT_MARKS.get(word);
  const use = svgEl("use", { href: `#pair-${mark}`, transform: `translate(6 6) scale(${mark === "dot" ? 4 : 9})` });
  const sign = svgEl("svg", { class: "sign small", viewBox: "0 0 12 12", "aria-hidden": "true" }, use);
  return el("span", { class: "verdict" }, sign, word);
};
