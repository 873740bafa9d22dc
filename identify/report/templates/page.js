"use strict";
(function () {
  // Convenience only: without it every part still opens by its own summary.
  const all = () => document.querySelectorAll("details");
  const answers = document.getElementById("answers").parentElement;
  const bar = document.createElement("p");
  bar.className = "controls";
  [["Open all parts", true], ["Close all parts", false]].forEach(([text, open]) => {
    const button = document.createElement("button");
    button.type = "button";
    button.textContent = text;
    button.addEventListener("click", () => all().forEach((part) => { part.open = open; }));
    bar.append(button);
  });
  answers.querySelector(".guide").before(bar);
})();
