// Sentences with places for names and figures. A part is text, or {name} where a name of the table stands, so that a
// sentence can be shown with its names in their own writing direction, or spoken as plain text.

const phrase = (template, values) =>
  template
    .split(/(\{\w+\})/)
    .filter(Boolean)
    .flatMap((part) => (part.startsWith("{") ? values[part.slice(1, -1)] : part));

// Sets names or other lists of parts side by side.
const inARow = (items, between = ", ") => items.flatMap((item, place) => (place ? [between, item] : [item]));

const asNodes = (parts) => parts.map((part) => (part.name === undefined ? part : nameEl(part.name)));
const asText = (parts) => parts.map((part) => (part.name === undefined ? part : `\u2068${part.name}\u2069`)).join("");
