// The edges of every structure, and what is said of an edge or an attribute.

const edgesData = data("edges");
const attributeNamed = (place) => ({ name: edgesData.names[place] });

const edgeOf = (structure, row) => {
  const edge = Object.fromEntries(edgesData.columns.map((column, place) => [column, row[place]]));
  edge.key = `${structure.places.get(edge.parent)}-${structure.places.get(edge.child)}`;
  edge.pair = pairKey(edge.parent, edge.child);
  return edge;
};

// Two attributes, in either order.
const pairKey = (a, b) => (a < b ? `${a},${b}` : `${b},${a}`);

const structures = edgesData.structures.map((one) => {
  const structure = { ...one, places: new Map(one.own.map((place, number) => [place, number])) };
  structure.edges = one.edges.map((row) => edgeOf(structure, row));
  structure.byPair = new Map(structure.edges.map((edge) => [edge.pair, edge]));
  return structure;
});

const edgeEnds = (edge) => [attributeNamed(edge.parent), " → ", attributeNamed(edge.child)];

const edgeWords = (edge) => {
  const values = { ...edge, class: { name: edgesData.class }, given: inARow(edge.given.map(attributeNamed)) };
  const told = {
    ...edge,
    gate: edge.gate === "–" ? "" : edge.gate,
    stability: edge.stability === "–" ? "" : edge.stability,
    given: edge.given.length,
  };
  const clauses = Object.entries(edgesData.edgeClauses).filter(([figure]) => told[figure]);
  return [...edgeEnds(edge), ": ", ...inARow(clauses.map(([, words]) => phrase(words, values)), "; ").flat(), "."];
};

const namesOr = (places) => (places.length ? inARow(places.map(attributeNamed)) : ["none"]);

const chipWords = (structure, place) => {
  const values = {
    class: { name: edgesData.class },
    bits: edgesData.bits[place],
    levels: edgesData.levels[place],
    parents: namesOr(structure.edges.filter((edge) => edge.child === place).map((edge) => edge.parent)),
    children: namesOr(structure.edges.filter((edge) => edge.parent === place).map((edge) => edge.child)),
  };
  const clauses = Object.values(edgesData.chipSentences).map((words) => phrase(words, values));
  return [attributeNamed(place), ": ", ...inARow(clauses, "; ").flat(), "."];
};

const whatIfWords = (structure, edge) =>
  phrase(edgesData.whatIf[edge.whatIf], { ...edge, structure: structure.name });
