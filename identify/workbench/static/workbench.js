"use strict";
// Convenience only: every form and link works without this file.
(function () {
  const $ = (selector, root) => (root || document).querySelector(selector);
  const all = (selector, root) => [...(root || document).querySelectorAll(selector)];

  // Drop files anywhere on the work list.
  const drop = document.getElementById("drop");
  if (drop) {
    let depth = 0;
    const over = (on) => document.body.classList.toggle("dropping", on);
    addEventListener("dragenter", (event) => { event.preventDefault(); depth += 1; over(true); });
    addEventListener("dragleave", () => { depth -= 1; if (depth <= 0) over(false); });
    addEventListener("dragover", (event) => event.preventDefault());
    addEventListener("drop", (event) => {
      event.preventDefault(); depth = 0; over(false);
      if (!event.dataTransfer.files.length) return;
      $("input[name=files]", drop).files = event.dataTransfer.files;
      drop.requestSubmit();
    });
  }

  // While there is work in the background, its list and the queries are fetched again; not under somebody who types in them.
  const refresh = async () => {
    let isOld = false;
    try {
      const answer = await fetch(location.href);
      if (!answer.ok) return;
      const page = new DOMParser().parseFromString(await answer.text(), "text/html");
      ["jobs", "list"].forEach((id) => {
        const old = document.getElementById(id), fresh = page.getElementById(id);
        if (!old || !fresh || old.innerHTML === fresh.innerHTML) return;
        const focus = old.contains(document.activeElement) ? document.activeElement : null;
        if (focus && focus.matches("input")) { isOld = true; return; }
        const address = focus && focus.getAttribute("href");
        old.innerHTML = fresh.innerHTML;
        old.toggleAttribute("data-busy", fresh.hasAttribute("data-busy"));
        const again = address && $(`a[href="${CSS.escape(address)}"]`, old);
        if (again) again.focus();
      });
    } catch { /* the server is gone; the page stays as it is */ }
    if (isOld || $("#jobs[data-busy]")) setTimeout(refresh, 1000);
  };
  if ($("#jobs[data-busy]")) setTimeout(refresh, 700);

  all("[data-print-page]").forEach((button) => button.addEventListener("click", () => print()));

  // Only what a decision needs is asked for.
  const decision = $("form.decision");
  if (decision) {
    const accepting = $(".accepting", decision);
    const show = () => {
      const kind = $("input[name=kind]:checked", decision);
      if (accepting) accepting.hidden = !kind || kind.value !== "accept";
    };
    decision.addEventListener("change", show);
    show();
  }

  // Single keys, which can be switched off.
  const choice = document.getElementById("single-keys");
  let on = true;
  try { on = localStorage.getItem("single-keys") !== "off"; } catch { /* storage is closed */ }
  if (choice) {
    choice.checked = on;
    choice.addEventListener("change", () => {
      on = choice.checked;
      try { localStorage.setItem("single-keys", on ? "on" : "off"); } catch { /* storage is closed */ }
    });
  }
  let leading = false, place = -1;
  const step = (by) => {
    const lines = all("[data-rows] tbody tr").filter((line) => $("a", line));
    if (!lines.length) return;
    place = Math.max(0, Math.min(lines.length - 1, place + by));
    all("tr.at").forEach((line) => line.classList.remove("at"));
    lines[place].classList.add("at");
    $("a", lines[place]).focus();
  };
  const follow = (selector) => { const link = $(selector); if (link) link.click(); };
  addEventListener("keydown", (event) => {
    if (!on || event.ctrlKey || event.metaKey || event.altKey) return;
    if (event.target.matches("input, textarea, select") || event.target.isContentEditable) return;
    const key = event.key;
    if (leading) {
      leading = false;
      const link = $(`nav a[data-key="${CSS.escape(key)}"]`);
      if (link) { event.preventDefault(); link.click(); }
      return;
    }
    const keys = {
      g: () => { leading = true; },
      j: () => step(1),
      k: () => step(-1),
      n: () => follow("a[rel=next]"),
      p: () => follow("a[rel=prev]"),
      d: () => { const head = document.getElementById("decide-head"); if (head) { location.hash = "decide"; head.focus(); } },
      "/": () => { const field = $("[data-find]"); if (field) field.focus(); },
    };
    if (keys[key]) { event.preventDefault(); keys[key](); }
  });
})();
