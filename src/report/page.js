// The page, in the order in which it is read.
function buildPage() {
  document.querySelector("#contents ol").replaceChildren();
  if (curve && dampings.length) {
    buildCurve(section("curve", "Trade-off curve", null));
    buildCriteria();
    buildExplorer();
    listenToKeys();
  }
  buildProbe();
  buildTest();
  if (run.observations || run.binned) {
    buildResiduals();
    buildModel();
  }
  buildPlan();
  buildReliability();
  buildCover();
  buildConvergence();
  buildInputs();
  buildCautions();
}

buildPage();
document.documentElement.dataset.ready = "yes";
