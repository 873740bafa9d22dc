"use strict";
(function () {
  // Without this script the chart still shows the whole run with its largest peaks labelled and linked.
  const SVG = "http://www.w3.org/2000/svg";
  const make = (name, attributes) => {
    const node = document.createElementNS(SVG, name);
    Object.entries(attributes).forEach(([key, value]) => node.setAttribute(key, value));
    return node;
  };
  const clamp = (value, low, high) => Math.min(high, Math.max(low, value));

  const ticksOf = (low, high) => {
    const raw = (high - low) / 10, power = Math.pow(10, Math.floor(Math.log10(raw)));
    const step = [1, 2, 5, 10].map((n) => n * power).find((n) => n >= raw);
    const ticks = [];
    for (let k = Math.ceil(low / step); k * step <= high; k += 1) ticks.push(Number((k * step).toPrecision(8)));
    return ticks;
  };

  document.querySelectorAll("[data-chart]").forEach((frame) => {
    const data = JSON.parse(frame.querySelector("script").textContent);
    const svg = frame.querySelector("svg"), view = frame.querySelector(".chart-view");
    const [left, band, right, base] = data.box;
    const first = data.minutes[0], last = data.minutes[data.minutes.length - 1], most = Math.max(...data.total);
    let low = data.range[0], high = data.range[1], top = data.top;

    const x = (minutes) => left + (minutes - low) / (high - low) * (right - left);
    const y = (value) => base - Math.min(value / top, 4) * (base - band);

    const drawLine = () => {
      const from = Math.max(0, data.minutes.findIndex((t) => t >= low) - 1);
      let to = data.minutes.findIndex((t) => t > high);
      to = to < 0 ? data.minutes.length : to + 1;
      const pieces = Math.min(1100, to - from), points = [];
      for (let p = 0; p < pieces; p += 1) {
        const start = from + Math.floor(p * (to - from) / pieces), end = from + Math.floor((p + 1) * (to - from) / pieces);
        let least = start, greatest = start;
        for (let k = start; k < end; k += 1) {
          if (data.total[k] < data.total[least]) least = k;
          if (data.total[k] > data.total[greatest]) greatest = k;
        }
        [...new Set([Math.min(least, greatest), Math.max(least, greatest)])].forEach((k) => {
          points.push(`${x(data.minutes[k]).toFixed(1)} ${y(data.total[k]).toFixed(1)}`);
        });
      }
      svg.querySelector(".line").setAttribute("d", "M" + points.join("L"));
    };

    const drawTicks = () => {
      const group = svg.querySelector(".ticks"), ticks = ticksOf(low, high);
      group.replaceChildren(make("path", { d: ticks.map((t) => `M${x(t).toFixed(1)} ${base}v5`).join("") }));
      ticks.forEach((t) => {
        const word = make("text", { x: x(t).toFixed(1), y: base + 20, "text-anchor": "middle" });
        word.textContent = String(t);
        group.append(word);
      });
    };

    const drawLabels = () => {
      const group = svg.querySelector(".labels"), placed = [];
      const held = document.activeElement && group.contains(document.activeElement)
        ? document.activeElement.getAttribute("href") : null;
      data.marks.forEach((mark) => {
        if (mark[0] < low || mark[0] > high) return;
        const at = x(mark[0]);
        if (placed.every((other) => Math.abs(other.at - at) >= data.gap)) placed.push({ at, mark });
      });
      placed.sort((a, b) => a.at - b.at);
      group.replaceChildren(...placed.map(({ at, mark }) => {
        const link = make("a", { href: "#" + mark[4] }), title = make("title", {});
        title.textContent = mark[3];
        const foot = Math.max(band, y(mark[1]));
        const word = make("text", { transform: `translate(${(at + 4).toFixed(1)} ${band - 10}) rotate(-90)` });
        word.textContent = mark[2];
        link.append(title, make("path", { d: `M${at.toFixed(1)} ${band - 6}V${(foot - 3).toFixed(1)}` }), word);
        return link;
      }));
      if (held) [...group.children].find((link) => link.getAttribute("href") === held)?.focus();
    };

    const draw = () => {
      drawLine(); drawTicks(); drawLabels();
      frame.querySelector("output").textContent =
        `${low.toFixed(2)} to ${high.toFixed(2)} min, full height ${(100 * top / most).toPrecision(2)} % of the highest signal`;
    };
    const show = (from, to) => {
      const span = clamp(to - from, 0.05, last - first);
      low = clamp(from, first, last - span);
      high = low + span;
      const seen = data.total.filter((_, k) => data.minutes[k] >= low && data.minutes[k] <= high);
      top = Math.min(data.top, 1.05 * Math.max(...seen, most / 1e6));
      draw();
    };
    const acts = {
      in: () => show(low + (high - low) / 4, high - (high - low) / 4),
      out: () => show(low - (high - low) / 2, high + (high - low) / 2),
      left: () => show(low - (high - low) / 4, high - (high - low) / 4),
      right: () => show(low + (high - low) / 4, high + (high - low) / 4),
      up: () => { top = Math.max(most / 1e6, top / 1.6); draw(); },
      down: () => { top = Math.min(1.05 * most, top * 1.6); draw(); },
      all: () => { top = data.top; show(first, last); },
    };
    const controls = frame.querySelector(".chart-controls");
    controls.hidden = false;
    controls.querySelectorAll("button").forEach((button) => button.addEventListener("click", acts[button.dataset.do]));
    const keys = { "+": "in", "=": "in", "-": "out", ArrowLeft: "left", ArrowRight: "right", ArrowUp: "up", ArrowDown: "down", Home: "all" };
    view.addEventListener("keydown", (event) => {
      const act = event.ctrlKey || event.altKey || event.metaKey ? null : keys[event.key];
      if (act) { event.preventDefault(); acts[act](); }
    });

    // Dragging across the chart chooses a range.
    let start = null, box = null;
    const at = (event) => {
      const point = svg.createSVGPoint();
      point.x = event.clientX; point.y = event.clientY;
      return clamp(point.matrixTransform(svg.getScreenCTM().inverse()).x, left, right);
    };
    svg.addEventListener("pointerdown", (event) => {
      if (event.button !== 0 || event.pointerType === "touch" || event.target.closest("a")) return;
      start = at(event);
      box = make("rect", { class: "chosen", y: band, height: base - band, x: start, width: 0 });
      svg.append(box);
      svg.setPointerCapture(event.pointerId);
    });
    svg.addEventListener("pointermove", (event) => {
      if (start === null) return;
      const now = at(event);
      box.setAttribute("x", Math.min(start, now));
      box.setAttribute("width", Math.abs(now - start));
    });
    svg.addEventListener("pointerup", (event) => {
      if (start === null) return;
      const now = at(event), scale = (high - low) / (right - left);
      const from = low + (Math.min(start, now) - left) * scale, to = low + (Math.max(start, now) - left) * scale;
      box.remove();
      start = null;
      if ((to - from) / scale > 6) show(from, to);
    });
    svg.addEventListener("pointercancel", () => { if (box) box.remove(); start = null; });
    draw();
  });
})();
