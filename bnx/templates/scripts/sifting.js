// Which edges are shown: at least so many bits, at least so much held-out gain, clear gains alone or all.

const leastOf = (name) => {
  const slider = byId(name);
  return slider && slider.value !== slider.min ? Number(slider.value) : -Infinity;
};

const edgePasses = (edge, least) => Number(edge.bits) >= least.bits && Number(edge.gain) >= least.gain;

const tellSlider = (name, digits) => {
  const slider = byId(name);
  if (!slider) return;
  const words = slider.value === slider.min ? "all" : `${Number(slider.value).toFixed(digits)} bits`;
  byId(`${name}-told`).textContent = words;
  slider.setAttribute("aria-valuetext", words);
};

// Hides arrows and marks rows; returns how many edges are in sight.
const siftView = (view, least) => {
  let count = 0;
  for (const edge of view.structure.edges) {
    const arrow = view.arrows.get(edge.key);
    const stays = edgePasses(edge, least) && (arrow ? !arrow.group.dataset.off : !view.svg);
    if (arrow) arrow.group.toggleAttribute("hidden", !stays);
    if (view.rows.has(edge.key)) view.rows.get(edge.key).classList.toggle("sifted", !stays);
    count += stays;
  }
  return count;
};

const leastShown = () => {
  tellSlider("least-bits", 3);
  tellSlider("least-gain", 4);
  return { bits: leastOf("least-bits"), gain: leastOf("least-gain") };
};
