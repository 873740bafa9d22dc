"use strict";
// Closed parts, of a report and of the workbench: every part still opens by its own summary without this file.
(function () {
  // A link into a closed part opens it.
  const reveal = () => {
    const target = location.hash.length > 1 && document.getElementById(decodeURIComponent(location.hash.slice(1)));
    const part = target && target.closest("details");
    if (part) { part.open = true; target.scrollIntoView(); }
  };
  addEventListener("hashchange", reveal);
  reveal();

  // On paper, records and reading guides are always open; candidates stay as the reader left them.
  let opened = [];
  addEventListener("beforeprint", () => {
    opened = [...document.querySelectorAll("details[data-print]:not([open])")];
    opened.forEach((part) => { part.open = true; });
  });
  addEventListener("afterprint", () => { opened.forEach((part) => { part.open = false; }); opened = []; });
})();
