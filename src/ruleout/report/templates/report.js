"use strict";
(() => {
  const table = document.getElementById("variant-table");
  const form = document.getElementById("filters");

  const key = (row, column, numeric) => {
    const text = row.cells[column].dataset.sort ?? row.cells[column].textContent.trim();
    if (!numeric) return text;
    return text === "" ? NaN : Number(text);
  };

  const compare = (a, b, numeric, sign) => {
    if (!numeric) return sign * a.localeCompare(b, undefined, { numeric: true });
    if (Number.isNaN(a) || Number.isNaN(b)) return Number.isNaN(a) - Number.isNaN(b);
    return sign * (a - b);
  };

  const sort = (header) => {
    const sign = header.getAttribute("aria-sort") === "ascending" ? -1 : 1;
    const column = header.cellIndex;
    const numeric = header.dataset.type === "number";
    for (const other of header.parentNode.cells) other.removeAttribute("aria-sort");
    header.setAttribute("aria-sort", sign > 0 ? "ascending" : "descending");
    const body = table.tBodies[0];
    const rows = [...body.rows];
    rows.sort((a, b) => compare(key(a, column, numeric), key(b, column, numeric), numeric, sign));
    body.append(...rows);
  };

  const admits = (row) => {
    const verdict = form.elements.verdict.value;
    if (verdict && row.dataset.verdict !== verdict) return false;
    const chosen = row.dataset.choices.split(";");
    for (const select of form.querySelectorAll("select[data-of]")) {
      if (select.value && !chosen.includes(`${select.dataset.of}=${select.value}`)) return false;
    }
    const text = form.elements.text.value.trim().toLowerCase();
    return !text || row.textContent.toLowerCase().includes(text);
  };

  const filter = () => {
    const rows = [...table.tBodies[0].rows];
    for (const row of rows) row.hidden = !admits(row);
    const shown = rows.filter((row) => !row.hidden).length;
    document.getElementById("shown").textContent = `${shown} of ${rows.length} shown`;
    document.getElementById("none-shown").hidden = shown > 0;
  };

  if (table && form) {
    for (const button of table.querySelectorAll("thead button")) {
      button.addEventListener("click", () => sort(button.closest("th")));
    }
    for (const event of ["input", "change"]) form.addEventListener(event, filter);
    form.addEventListener("submit", (event) => event.preventDefault());
    form.addEventListener("reset", () => setTimeout(filter));
    filter();
  }

  const evidence = () => [...document.querySelectorAll("details.evidence")];
  const openNamed = () => {
    const named = document.getElementById(decodeURIComponent(location.hash.slice(1)));
    if (named && named.matches("details")) {
      named.open = true;
      named.scrollIntoView();
    }
  };
  addEventListener("hashchange", openNamed);
  // A click on the link of the place where one already is changes no hash.
  for (const link of document.querySelectorAll("a[href^='#']")) link.addEventListener("click", () => setTimeout(openNamed));
  openNamed();

  const setAll = (open) => () => evidence().forEach((part) => { part.open = open; });
  document.getElementById("open-all")?.addEventListener("click", setAll(true));
  document.getElementById("close-all")?.addEventListener("click", setAll(false));

  let before = [];
  addEventListener("beforeprint", () => {
    before = evidence().filter((part) => !part.open);
    before.forEach((part) => { part.open = true; });
  });
  addEventListener("afterprint", () => before.forEach((part) => { part.open = false; }));
})();
