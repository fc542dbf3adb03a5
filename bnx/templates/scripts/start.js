// Starts every part of the page.

for (const start of [startTheme, startPairPanel, startStructures, startLinks, startScores, startLedger, startTriangle, startBoxEdges]) {
  start();
}
document.documentElement.classList.add("scripted");
