// Which pairs pass the filters, and in which order: ranks of exact figures decide, ties keep the first order.

const ledgerTexts = [];

// Both orders of the two names, so that "a ~ b" is found however it is typed.
const ledgerText = (row) => {
  if (ledgerTexts[row] === undefined) {
    const [a, b] = pairNames(row);
    ledgerTexts[row] = `${a} ~ ${b} ~ ${a}`.toLowerCase();
  }
  return ledgerTexts[row];
};

const joinedPasses = (joined, row) => {
  if (joined === "recommended") return isRecommended(row);
  if (joined === "any") return structuresOf(row).length > 0;
  return joined !== "none" || structuresOf(row).length === 0;
};

const passes = (choice, row) =>
  choice.verdicts.has(pairWord("verdict", row)) &&
  joinedPasses(choice.joined, row) &&
  (choice.attribute < 0 || pairsHeld.a[row] === choice.attribute || pairsHeld.b[row] === choice.attribute) &&
  choice.words.every((word) => ledgerText(row).includes(word));

// Compares rows by rank; pairs without a figure come last in both directions.
const byRank = (column, down) => {
  const { rank } = column;
  const blank = column.blank ? rank.reduce((most, one) => Math.max(most, one), 0) : -1;
  return (one, other) => {
    const [first, second] = [rank[one], rank[other]];
    if (first === second) return one - other;
    if (first === blank) return 1;
    if (second === blank) return -1;
    return down ? second - first : first - second;
  };
};

const chosenPairs = (choice) => {
  const rows = [];
  for (let row = 0; row < pairsHeld.rows; row += 1) if (passes(choice, row)) rows.push(row);
  return rows.sort(byRank(pairsHeld.columns.get(choice.column), choice.down));
};
