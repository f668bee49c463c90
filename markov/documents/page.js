"use strict";
// Search over all tables, and the rows that speak of whatever is picked in a picture. The page reads without it.
(() => {
  const field = document.getElementById("search");
  const count = document.getElementById("count");
  const panel = document.getElementById("picked");
  const words = document.body.dataset;
  const tables = [...document.querySelectorAll("main table")].map((table) => ({
    found: table.querySelector(".found"),
    rows: [...table.tBodies[0].rows].map((row) => ({ row, text: row.textContent.toLowerCase() })),
  }));

  function filter() {
    const wanted = field.value.toLowerCase().split(/\s+/).filter(Boolean);
    let shown = 0;
    let all = 0;
    for (const table of tables) {
      let here = 0;
      for (const { row, text } of table.rows) {
        row.hidden = !wanted.every((word) => text.includes(word));
        here += row.hidden ? 0 : 1;
      }
      table.found.textContent = wanted.length ? ` (${here} / ${table.rows.length})` : "";
      shown += here;
      all += table.rows.length;
    }
    count.textContent = wanted.length ? `${shown} / ${all} ${words.rows}` : "";
  }

  function firstFound(event) {
    event.preventDefault();
    filter();
    const first = field.value.trim() && document.querySelector("main tbody tr:not([hidden])");
    if (first) first.scrollIntoView({ block: "center" });
  }

  // A link may lead to a row that the search has hidden.
  function uncover() {
    const row = document.getElementById(decodeURIComponent(location.hash.slice(1)));
    if (row && row.hidden) {
      field.value = "";
      filter();
      row.scrollIntoView({ block: "center" });
    }
  }

  const copied = (row) => {
    const copy = row.cloneNode(true);
    copy.removeAttribute("id");
    copy.hidden = false;
    return copy;
  };

  // The rows of a table about `target`: its own first, then those that link to it, column by column.
  function collect(table, target) {
    const own = [...table.tBodies[0].rows].filter((row) => row.id === target);
    const groups = own.length ? [["", own]] : [];
    [...table.tHead.rows[0].cells].forEach((heading, place) => {
      const rows = [...table.tBodies[0].rows].filter(
        (row) => row.id !== target && row.cells[place].querySelector(`a[href="#${target}"]`),
      );
      if (rows.length) groups.push([heading.textContent, rows]);
    });
    return groups;
  }

  function pick(target, label, origin) {
    unpick();
    const body = panel.querySelector(".rows");
    for (const table of document.querySelectorAll("main table")) {
      for (const [heading, rows] of collect(table, target)) {
        const copy = table.cloneNode(false);
        copy.removeAttribute("id");
        const caption = copy.createCaption();
        caption.textContent = table.dataset.label + (heading ? ` · ${heading}: ${label}` : "") + ` (${rows.length})`;
        copy.append(table.querySelector("colgroup").cloneNode(true), table.tHead.cloneNode(true));
        copy.createTBody().append(...rows.map(copied));
        body.append(copy);
      }
    }
    panel.querySelector("h2").textContent = label;
    for (const part of document.querySelectorAll(`[data-target="${target}"]`)) part.classList.add("picked");
    panel.hidden = false;
    panel.origin = origin;
  }

  function unpick() {
    panel.hidden = true;
    panel.querySelector(".rows").replaceChildren();
    for (const part of document.querySelectorAll("[data-target].picked")) part.classList.remove("picked");
  }

  function close() {
    if (panel.hidden) return;
    unpick();
    if (panel.origin) panel.origin.focus();
  }

  for (const part of document.querySelectorAll("svg [data-target]")) {
    part.addEventListener("click", (event) => {
      event.preventDefault();
      pick(part.dataset.target, part.getAttribute("aria-label"), part);
      panel.querySelector("button").focus({ preventScroll: true });
    });
  }
  panel.querySelector("button").addEventListener("click", close);
  document.addEventListener("keydown", (event) => {
    if (event.key === "Escape") close();
  });
  field.addEventListener("input", filter);
  field.form.addEventListener("submit", firstFound);
  addEventListener("hashchange", uncover);
  document.documentElement.classList.add("live");
  if (field.value) filter();
})();
