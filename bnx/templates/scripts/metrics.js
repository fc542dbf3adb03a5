// Scores: one metric, one structure's classes or a few columns at a time; without this script everything stands there.

// Shows, of parts that carry a name, those that the chosen radio button asks for.
const startChoice = (id, parts, wanted, word) => {
  const choice = byId(id);
  if (!choice) return;
  const choose = () => {
    const picked = choice.querySelector("input:checked");
    for (const part of document.querySelectorAll(parts)) show(part, wanted(part, picked.value));
    tell(`${word}: ${picked.nextElementSibling.textContent}`);
  };
  show(choice);
  choice.addEventListener("change", choose);
  choose();
};

const startColumns = () => {
  const box = byId("all-columns");
  show(box.closest(".controls"));
  box.addEventListener("change", () => byId("score-table").classList.toggle("every", box.checked));
};

const startScores = () => {
  startColumns();
  startChoice("metric-choice", "[data-metric]", (part, value) => part.dataset.metric === value, "Folds by");
  const fixed = byId("class-choice") ? byId("class-choice").dataset.baseline : "";
  startChoice(
    "class-choice",
    "[data-classes]",
    (part, value) => part.dataset.classes === value || part.dataset.classes === fixed,
    "Classes by",
  );
  byId("told").textContent = "";
};
