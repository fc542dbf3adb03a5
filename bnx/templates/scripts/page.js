// What every other script of the page builds on: the page's data, and elements made without reading markup.

const byId = (id) => document.getElementById(id);

// Reads a block of data written into the page; null where the page has none of that name.
const data = (name) => {
  const block = byId(`data-${name}`);
  return block ? JSON.parse(block.textContent) : null;
};

const SVG = "http://www.w3.org/2000/svg";

const filled = (node, attributes, children) => {
  for (const [key, value] of Object.entries(attributes)) {
    if (value === true) node.setAttribute(key, "");
    else if (value !== false && value !== null && value !== undefined) node.setAttribute(key, value);
  }
  node.append(...children.filter((child) => child !== null && child !== undefined));
  return node;
};

// Makes an element; children are elements or text, which is never read as markup.
const el = (tag, attributes = {}, ...children) => filled(document.createElement(tag), attributes, children);
const svgEl = (tag, attributes = {}, ...children) => filled(document.createElementNS(SVG, tag), attributes, children);

// A name of the table: it stands alone in its own writing direction.
const nameEl = (text) => el("bdi", { class: "name" }, text);

const show = (node, shown = true) => {
  node.hidden = !shown;
};

// Tells a screen reader, politely, what a control has changed.
const tell = (words) => {
  byId("told").textContent = words;
};

// Moves along a list of elements by the arrow keys, Home and End; returns the next index, or -1 for other keys.
const stepped = (key, index, length, across = 1) => {
  const steps = { ArrowRight: 1, ArrowLeft: -1, ArrowDown: across, ArrowUp: -across };
  if (key === "Home") return 0;
  if (key === "End") return length - 1;
  return key in steps ? Math.min(length - 1, Math.max(0, index + steps[key])) : -1;
};
