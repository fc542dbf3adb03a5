// Starts every part of the page.

for (const start of [startTheme]) start();
document.documentElement.classList.add("scripted");
