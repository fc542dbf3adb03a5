"""Text that stands out too little from what lies below it, also in drawings and on hatched ground.

Source: WCAG 2.2, success criterion 1.4.3 and its definitions of relative luminance and contrast ratio.
"""

TOO_FAINT = """() => {
  const numbers = (text) => text.match(/-?[0-9.]+(?:e-?[0-9]+)?/g).map(Number);
  const parsed = (text) => {
    const part = numbers(text);
    if (text.startsWith('color(')) return [...part.slice(0, 3).map((one) => one * 255), part[3] ?? 1];
    return [...part.slice(0, 3), part[3] ?? 1];
  };
  const colours = (text) => (text.match(/(?:rgba?|color)\\([^()]*\\)/g) ?? []).map(parsed);
  const over = (top, ground) => [0, 1, 2].map((k) => top[3] * top[k] + (1 - top[3]) * ground[k]);
  const light = (colour) => {
    const [red, green, blue] = colour.map((one) => one / 255)
      .map((one) => (one <= 0.04045 ? one / 12.92 : ((one + 0.055) / 1.055) ** 2.4));
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue;
  };
  const contrast = (one, other) => {
    const [low, high] = [light(one), light(other)].sort((a, b) => a - b);
    return (high + 0.05) / (low + 0.05);
  };
  // All colours that an element may lay under what stands on it; null where it lets everything through.
  const layers = (one) => {
    const style = getComputedStyle(one);
    if (one instanceof SVGElement) {
      const shape = one instanceof SVGGeometryElement && !(one instanceof SVGLineElement);
      if (!shape || style.fill === 'none' || style.fill.startsWith('url')) return [];
      return colours(style.fill).map((fill) => [...fill.slice(0, 3), fill[3] * style.fillOpacity * style.opacity]);
    }
    return [...colours(style.backgroundImage), ...colours(style.backgroundColor)].filter((colour) => colour[3] > 0);
  };
  const grounds = (stack) => {
    let below = [[255, 255, 255]];
    for (const one of [...stack].reverse()) {
      const tops = layers(one);
      if (tops.length) below = tops.flatMap((top) => below.map((ground) => over(top, ground)));
    }
    return below;
  };
  const faint = [];
  const walker = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
  let checked = 0;
  for (let text = walker.nextNode(); text; text = walker.nextNode()) {
    const own = text.parentElement;
    if (!text.data.trim() || own.closest('script, style, title, desc, option, .unseen, .skip, [hidden]')) continue;
    const range = document.createRange();
    range.selectNodeContents(text);
    const box = [...range.getClientRects()].find((one) => one.width > 1 && one.height > 1);
    if (!box) continue;
    const at = [box.left + Math.min(box.width / 2, 8), box.top + box.height / 2];
    const stack = document.elementsFromPoint(...at);
    const place = stack.indexOf(own);
    if (place < 0) continue;
    const style = getComputedStyle(own);
    const svg = own instanceof SVGElement;
    const ink = colours(svg ? style.fill : style.color)[0];
    const size = parseFloat(style.fontSize);
    const least = size >= 24 || (size >= 18.66 && Number(style.fontWeight) >= 700) ? 3 : 4.5;
    const under = grounds(stack.slice(svg ? place + 1 : place));
    const worst = Math.min(...under.map((ground) => contrast(over(ink, ground), ground)));
    checked += 1;
    const words = `${own.tagName} ${own.className.baseVal ?? own.className}: ${text.data.trim().slice(0, 30)}`;
    if (worst < least - 0.005) faint.push(`${worst.toFixed(2)} ${words}`);
  }
  return [checked, [...new Set(faint)]];
}"""
