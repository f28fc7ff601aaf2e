"use strict";
(() => {
  const all = (selector, within = document) => [...within.querySelectorAll(selector)];

  function player(panel) {
    const article = panel.closest("article");
    const run = panel.dataset.run;
    const last = Number(panel.dataset.length) - 1;
    const controls = panel.querySelector(".controls");
    if (!controls) return;
    const output = controls.querySelector("output");
    const mine = all("[data-step]", article).filter((e) => e.dataset.runs.split(" ").includes(run));
    let step = null;

    function show(next) {
      step = Math.min(last, Math.max(0, next));
      all(".here", article).forEach((e) => e.classList.remove("here"));
      for (const e of mine) {
        if (Number(e.dataset.step) !== step) continue;
        e.classList.add("here");
        if (e.dataset.said) output.textContent = e.dataset.said;
      }
    }

    const moves = {
      first: () => 0,
      back: () => (step ?? last + 1) - 1,
      forward: () => (step ?? -1) + 1,
      last: () => last,
      part: () => Number(panel.dataset.parting),
    };
    const keys = { ArrowLeft: "back", ArrowRight: "forward", Home: "first", End: "last" };
    for (const button of all("button", controls)) button.addEventListener("click", () => show(moves[button.dataset.go]()));
    controls.addEventListener("keydown", (event) => {
      if (!keys[event.key] || event.altKey || event.ctrlKey || event.metaKey) return;
      event.preventDefault();
      show(moves[keys[event.key]]());
    });
    for (const column of all(".column", panel)) column.addEventListener("click", () => show(Number(column.dataset.step)));
    controls.hidden = false;
  }

  all(".panel[data-run]").forEach(player);
  addEventListener("beforeprint", () => all("details").forEach((e) => { e.open = true; }));
})();
