// Starts every part of the page.

for (const start of [startTheme, startPairPanel]) start();
document.documentElement.classList.add("scripted");
