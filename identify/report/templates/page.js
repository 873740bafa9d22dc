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

  // A link into a closed part opens it.
  const reveal = () => {
    const target = location.hash.length > 1 && document.getElementById(decodeURIComponent(location.hash.slice(1)));
    const part = target && target.closest("details");
    if (part) { part.open = true; target.scrollIntoView(); }
  };
  addEventListener("hashchange", reveal);
  reveal();

  // On paper, records and the reading guide are always open; candidates stay as the reader left them.
  let opened = [];
  addEventListener("beforeprint", () => {
    opened = [...document.querySelectorAll("details[data-print]:not([open])")];
    opened.forEach((part) => { part.open = true; });
  });
  addEventListener("afterprint", () => { opened.forEach((part) => { part.open = false; }); opened = []; });
})();
