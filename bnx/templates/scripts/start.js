// Starts every part of the page.

for (const start of [startTheme, startPairPanel, startStructures, startLedger, startTriangle]) start();
document.documentElement.classList.add("scripted");
