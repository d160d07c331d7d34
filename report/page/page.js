"use strict";
// The page reads without this script. It adds: naming a device when its curve,
// mark or row is pointed at, steps with the arrow keys, sorting and finding.
(() => {
  const all = (sel, from = document) => [...from.querySelectorAll(sel)];
  const table = document.getElementById("device-table");
  const rows = all("tbody tr", table);
  const heads = all("thead th", table);
  const rowOf = new Map(rows.map((r) => [r.dataset.d, r]));
  const marksOf = new Map();
  for (const p of all("svg [data-d]")) {
    if (!marksOf.has(p.dataset.d)) marksOf.set(p.dataset.d, []);
    marksOf.get(p.dataset.d).push(p);
  }
  const readouts = all(".readout");
  let shown = null;
  let pinned = null;

  const words = (row) => heads.slice(1, 9).map((h, i) => {
    const text = row.cells[i + 1].textContent.trim();
    if (!text || text === "–") return "";
    const label = h.querySelector("span").textContent.trim();
    const unit = h.querySelector("small");
    const number = row.cells[i + 1].classList.contains("r");
    return label + " " + text + (number && unit && text !== "n/a" && text !== "above" ? " " + unit.textContent.replace(/[()]/g, "") : "");
  }).filter(Boolean).join(" · ");

  const show = (d) => {
    if (d === shown) return;
    if (shown !== null) {
      rowOf.get(shown)?.classList.remove("on");
      marksOf.get(shown)?.forEach((p) => p.classList.remove("on"));
    }
    shown = d;
    const row = d === null ? null : rowOf.get(d);
    for (const r of readouts) {
      if (r.dataset.t) continue; // of a picture without devices
      r.replaceChildren();
      if (row) {
        const name = document.createElement("b");
        name.textContent = row.cells[0].textContent;
        r.append(name, words(row));
      } else {
        r.textContent = "Point at a curve, a mark or a row to name the device; the arrow keys step through them.";
      }
    }
    if (!row) return;
    row.classList.add("on");
    for (const p of marksOf.get(d) ?? []) {
      p.classList.add("on");
      // Drawn last is drawn on top; a mark that has the focus must stay where it is.
      if (!p.matches(":focus") && !p.hasAttribute("tabindex")) p.parentNode.append(p);
    }
  };

  // The curve nearest to the pointer within a few pixels.
  const near = (x, y) => {
    for (const r of [0, 3, 6, 9]) {
      for (let k = 0; k < (r ? 8 : 1); k++) {
        const hit = document.elementFromPoint(x + r * Math.cos(k * Math.PI / 4), y + r * Math.sin(k * Math.PI / 4));
        if (hit?.dataset?.d && hit.closest("svg")) return hit.dataset.d;
      }
    }
    return null;
  };

  // What a mark that is no device of this lot says of itself.
  const tipAt = (x, y) => {
    const hit = document.elementFromPoint(x, y);
    return hit?.closest("svg.plot") && hit.tagName === "path" && !hit.dataset.d ? hit.querySelector(":scope > title")?.textContent ?? "" : "";
  };
  let tipped = null;
  const tip = (svg, text) => {
    const r = svg.closest("figure")?.querySelector(".readout");
    if (tipped && (!text || tipped !== r)) {
      tipped.textContent = tipped.dataset.t ?? "";
      tipped = null;
      if (!text) { shown = undefined; }
    }
    if (!text || !r) return false;
    show(null);
    r.textContent = text;
    tipped = r;
    return true;
  };

  let frame = 0;
  for (const svg of all("svg.plot")) {
    svg.addEventListener("pointermove", (e) => {
      cancelAnimationFrame(frame);
      frame = requestAnimationFrame(() => {
        if (!tip(svg, tipAt(e.clientX, e.clientY))) show(near(e.clientX, e.clientY) ?? pinned);
      });
    });
    svg.addEventListener("pointerleave", () => { cancelAnimationFrame(frame); tip(svg, ""); show(pinned); });
    svg.addEventListener("click", (e) => { pinned = near(e.clientX, e.clientY); show(pinned); });
    svg.addEventListener("focusin", (e) => { if (e.target.dataset?.d) show(e.target.dataset.d); });
    // One stop for the Tab key in each picture, arrows for the rest.
    const order = all("[data-d]", svg);
    order.forEach((p) => p.removeAttribute("tabindex"));
    if (!order.length) continue;
    const box = svg.parentNode;
    let at = -1;
    box.addEventListener("keydown", (e) => {
      const step = { ArrowRight: 1, ArrowDown: 1, ArrowLeft: -1, ArrowUp: -1 }[e.key];
      if (step) {
        at = shown !== null && order.some((p) => p.dataset.d === shown) ? order.findIndex((p) => p.dataset.d === shown) : at;
        at = (at + step + order.length) % order.length;
        pinned = order[at].dataset.d;
        show(pinned);
        e.preventDefault();
      } else if (e.key === "Escape") {
        pinned = null;
        show(null);
      }
    });
  }
  for (const row of rows) {
    row.addEventListener("pointerenter", () => show(row.dataset.d));
    row.addEventListener("pointerleave", () => show(pinned));
  }
  readouts.forEach((r) => { r.hidden = false; r.textContent = r.dataset.t ?? ""; });
  shown = undefined;
  show(null);

  // Sorting: a button in every head but those of counts.
  const natural = new Intl.Collator("en", { numeric: true });
  const body = table.tBodies[0];
  heads.forEach((head, col) => {
    if (head.classList.contains("n")) return; // a count beside its number
    const button = document.createElement("button");
    button.type = "button";
    button.append(...head.childNodes);
    head.append(button);
    button.addEventListener("click", () => {
      const up = head.getAttribute("aria-sort") !== "ascending";
      heads.forEach((h) => h.removeAttribute("aria-sort"));
      head.setAttribute("aria-sort", up ? "ascending" : "descending");
      const numeric = head.hasAttribute("data-num");
      const value = (row) => numeric ? parseFloat(row.cells[col].dataset.v) : row.cells[col].textContent;
      const keyed = rows.map((row, i) => ({ row, i, v: value(row) }));
      keyed.sort((a, b) => {
        if (numeric) {
          // What has no number stays at the end, whichever way.
          const na = Number.isNaN(a.v), nb = Number.isNaN(b.v);
          if (na || nb) return na - nb || a.i - b.i;
          return (up ? a.v - b.v : b.v - a.v) || a.i - b.i;
        }
        return (up ? natural.compare(a.v, b.v) : natural.compare(b.v, a.v)) || a.i - b.i;
      });
      body.append(...keyed.map((k) => k.row));
    });
  });

  // Finding.
  const find = document.getElementById("find");
  const only = document.getElementById("only");
  const status = document.getElementById("shown");
  const texts = new Map(rows.map((r) => [r, r.cells[0].textContent.toLowerCase()]));
  const filter = () => {
    const want = find.value.trim().toLowerCase();
    let n = 0, last = null;
    for (const row of rows) {
      const ok = (!want || texts.get(row).includes(want)) && (!only.checked || row.classList.contains("flagged"));
      row.hidden = !ok;
      if (ok) { n++; last = row; }
    }
    status.textContent = n + " of " + rows.length + " shown";
    pinned = n === 1 ? last.dataset.d : null;
    show(pinned);
  };
  find.addEventListener("input", filter);
  only.addEventListener("change", filter);
  document.querySelector(".tools").hidden = false;
  status.textContent = rows.length + " devices";
})();
