// Every pair that a sentence or a table names opens the panel of that pair.

const startLinks = () => {
  document.addEventListener("click", (event) => {
    const link = event.target.closest("button.pair-link");
    if (link) openPair(link.dataset.a, link.dataset.b, link);
  });
};
