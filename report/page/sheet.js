"use strict";
// The page reads without this script. It adds: naming what is pointed at beside the
// picture, the same device in all pictures, and steps with the arrow keys.
(() => {
  const all = (sel, from = document) => [...from.querySelectorAll(sel)];
  const hint = "Point at a mark to read what it is; the arrow keys step through them.";
  const same = new Map();
  for (const p of all("svg.plot [data-d]")) {
    if (!same.has(p.dataset.d)) same.set(p.dataset.d, []);
    same.get(p.dataset.d).push(p);
  }
  let on = [];
  const show = (svg, mark) => {
    on.forEach((p) => p.classList.remove("on"));
    on = !mark ? [] : mark.dataset.d ? same.get(mark.dataset.d) : [mark];
    on.forEach((p) => p.classList.add("on"));
    const r = svg.closest("figure")?.querySelector(".readout");
    if (r) r.textContent = mark?.querySelector(":scope > title")?.textContent ?? hint;
  };
  // The mark nearest to the pointer within a few pixels.
  const near = (svg, x, y) => {
    for (const r of [0, 3, 6, 9]) {
      for (let k = 0; k < (r ? 8 : 1); k++) {
        const hit = document.elementFromPoint(x + r * Math.cos(k * Math.PI / 4), y + r * Math.sin(k * Math.PI / 4));
        if (hit?.tagName === "path" && svg.contains(hit) && hit.querySelector(":scope > title")) return hit;
      }
    }
    return null;
  };
  let frame = 0;
  for (const svg of all("svg.plot")) {
    svg.addEventListener("pointermove", (e) => {
      cancelAnimationFrame(frame);
      frame = requestAnimationFrame(() => show(svg, near(svg, e.clientX, e.clientY)));
    });
    svg.addEventListener("pointerleave", () => { cancelAnimationFrame(frame); show(svg, null); });
    const order = all("path", svg).filter((p) => p.querySelector(":scope > title"));
    if (!order.length) continue;
    let at = -1;
    svg.parentNode.addEventListener("keydown", (e) => {
      const step = { ArrowRight: 1, ArrowDown: 1, ArrowLeft: -1, ArrowUp: -1 }[e.key];
      if (step) {
        at = (at + step + order.length) % order.length;
        show(svg, order[at]);
        e.preventDefault();
      } else if (e.key === "Escape") {
        at = -1;
        show(svg, null);
      }
    });
  }
  all(".readout").forEach((r) => { r.hidden = false; r.textContent = hint; });
})();
