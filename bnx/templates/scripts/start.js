// Starts every part of the page.

for (const start of [startTheme, startPairPanel, startLedger, startTriangle]) start();
document.documentElement.classList.add("scripted");
