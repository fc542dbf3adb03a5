// Light, dark, or as the system is set.

const startTheme = () => {
  const choice = byId("theme");
  show(choice);
  choice.addEventListener("change", (event) => {
    if (event.target.value) document.documentElement.dataset.theme = event.target.value;
    else delete document.documentElement.dataset.theme;
  });
};
