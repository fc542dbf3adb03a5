// A box that holds more than it shows says so at the edge behind which the rest lies.

const markEdges = (box) => {
  const [before, after] = [Math.abs(box.scrollLeft), box.scrollWidth - box.clientWidth - Math.abs(box.scrollLeft)];
  box.classList.toggle("more-before", before > 1);
  box.classList.toggle("more-after", after > 1);
};

const boxSizes = new ResizeObserver((entries) => {
  for (const { target } of entries) markEdges(target.closest(".box"));
});

// The box and what stands in it: either may change its width.
const watchBoxes = (place) => {
  for (const box of place.querySelectorAll(".box")) {
    boxSizes.observe(box);
    if (box.firstElementChild) boxSizes.observe(box.firstElementChild);
  }
};

const startBoxEdges = () => {
  document.addEventListener("scroll", (event) => {
    if (event.target instanceof Element && event.target.matches(".box")) markEdges(event.target);
  }, { capture: true, passive: true });
  watchBoxes(document);
};
