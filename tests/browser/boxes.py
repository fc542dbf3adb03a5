"""Text that leaves its box, is cut with no way to read it, or lies on other text; and what sticks out of the window."""

# What sticks out of the window although no box around it scrolls.
STICKING_OUT = """() => [...document.querySelectorAll('body *')].filter((one) => {
  const box = one.getBoundingClientRect();
  if (!box.width || !box.height || box.right <= innerWidth + 1) return false;
  for (let up = one; up && up !== document.body; up = up.parentElement) {
    const style = getComputedStyle(up);
    if (style.position === 'fixed' || up.matches('.unseen, .skip')) return false;
    if (['auto', 'scroll', 'hidden', 'clip'].includes(style.overflowX)) return false;
  }
  return true;
}).map((one) => `${one.tagName} ${one.className.baseVal ?? one.className} ${one.textContent.slice(0, 40)}`)"""

OUT_OF_CHIPS = """() => [...document.querySelectorAll('g.chip')].filter((chip) => {
  if (!chip.getClientRects().length) return false;
  const frame = chip.querySelector('path')?.getBBox();
  return frame && [...chip.querySelectorAll('text')].some((text) => {
    const box = text.getBBox();
    return box.x < frame.x - 1 || box.x + box.width > frame.x + frame.width + 1
      || box.y < frame.y - 1 || box.y + box.height > frame.y + frame.height + 1;
  });
}).map((chip) => chip.textContent.trim())"""

OUT_OF_DRAWINGS = """() => [...document.querySelectorAll('svg text')].filter((text) => {
  const [box, frame] = [text.getBoundingClientRect(), text.ownerSVGElement.getBoundingClientRect()];
  if (!box.width || !text.textContent.trim()) return false;
  return box.left < frame.left - 1.5 || box.right > frame.right + 1.5
    || box.top < frame.top - 1.5 || box.bottom > frame.bottom + 1.5;
}).map((text) => `${text.ownerSVGElement.getAttribute('class')}: ${text.textContent.trim().slice(0, 60)}`)"""

# Text of a cell, line or button that is cut or spills over; a box that scrolls shows it, and so does a title.
CUT = """() => [...document.querySelectorAll('body *')].filter((one) => {
  if (one instanceof SVGElement || !one.clientWidth || !one.checkVisibility()) return false;
  if (one.matches('.unseen, .unseen *, .skip, select, input')) return false;
  const style = getComputedStyle(one);
  if (['auto', 'scroll'].includes(style.overflowX) || style.display === 'inline') return false;
  const high = style.overflowY === 'hidden' && one.scrollHeight > one.clientHeight + 2;
  const over = high || one.scrollWidth > one.clientWidth + 1;
  return over && !one.closest('[title]') && !one.querySelector('.box, [title]');
}).map((one) => `${one.tagName} ${one.className} ${one.textContent.trim().slice(0, 60)}`)"""

# Where two texts lie on one another; what a box that scrolls does not show is left out. Lines may touch.
OVERLAPPING = """() => {
  const clipped = (box, own) => {
    let [left, top, right, bottom] = [box.left, box.top, box.right, box.bottom];
    for (let up = own; up && up !== document.body; up = up.parentElement) {
      if (up instanceof SVGElement || getComputedStyle(up).overflow === 'visible') continue;
      const frame = up.getBoundingClientRect();
      [left, top] = [Math.max(left, frame.left), Math.max(top, frame.top)];
      [right, bottom] = [Math.min(right, frame.right), Math.min(bottom, frame.bottom)];
    }
    const slack = 0.2 * (box.bottom - box.top);
    [top, bottom] = [top + slack, bottom - slack];
    return right - left > 2 && bottom > top ? { left, right, top, bottom } : null;
  };
  const boxes = [];
  const walker = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
  for (let text = walker.nextNode(); text; text = walker.nextNode()) {
    const own = text.parentElement;
    if (!text.data.trim() || own.closest('script, style, title, desc, select, .unseen, .skip, [hidden]')) continue;
    if (own.closest('nav.sections, thead, dialog') || !own.checkVisibility()) continue;
    const range = document.createRange();
    range.selectNodeContents(text);
    for (const one of range.getClientRects()) {
      const box = clipped(one, own);
      if (box) boxes.push({ ...box, text, words: text.data.trim().slice(0, 40) });
    }
  }
  boxes.sort((one, other) => one.top - other.top);
  const found = [];
  boxes.forEach((one, place) => {
    for (let next = place + 1; next < boxes.length && boxes[next].top < one.bottom - 1; next += 1) {
      const other = boxes[next];
      const across = Math.min(one.right, other.right) - Math.max(one.left, other.left);
      if (across > 2 && one.text !== other.text) found.push(`${one.words} | ${other.words}`);
    }
  });
  return found;
}"""
