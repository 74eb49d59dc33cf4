"use strict";
(() => {
  // What a cell says, without the digits that only align it.
  const text = (cell) => {
    const copy = cell.cloneNode(true);
    copy.querySelectorAll(".pad, .call").forEach((n) => n.remove());
    return copy.textContent.replace(/\s+/g, " ").trim();
  };
  const number = (s) => {
    const plain = s.replace(/\u2212/g, "-").replace(/[\s\u2009\u202f<>≤≥]/g, "");
    return plain !== "" && Number.isFinite(Number(plain)) ? Number(plain) : null;
  };
  const button = (label, press) => {
    const b = document.createElement("button");
    b.type = "button";
    b.textContent = label;
    b.addEventListener("click", () => press(b));
    return b;
  };

  const order = new Intl.Collator(document.documentElement.lang, { numeric: true });
  const compare = (a, b) => {
    const x = number(a), y = number(b);
    if (x !== null && y !== null) return x - y;
    if ((a === "") !== (b === "")) return a === "" ? 1 : -1;
    return order.compare(a, b);
  };

  for (const table of document.querySelectorAll("table.sortable")) {
    const body = table.tBodies[0];
    const head = table.tHead && table.tHead.rows[table.tHead.rows.length - 1];
    if (!body || !head || table.tBodies.length > 1) continue;
    const cells = [...head.cells];
    if (cells.some((c) => c.colSpan > 1)) continue;
    const first = [...body.rows];
    cells.forEach((cell, column) => {
      if (cell.tagName !== "TH") return;
      const press = () => {
        const next = { ascending: "descending", descending: "" }[cell.ariaSort || ""] ?? "ascending";
        cells.forEach((c) => c.removeAttribute("aria-sort"));
        const rows = [...first];
        if (next) {
          cell.setAttribute("aria-sort", next);
          const key = new Map(rows.map((r) => [r, r.cells[column] ? text(r.cells[column]) : ""]));
          const sign = next === "ascending" ? 1 : -1;
          rows.sort((a, b) => sign * compare(key.get(a), key.get(b)));
        }
        body.append(...rows);
      };
      const b = button("", press);
      b.className = "sort";
      b.title = "Sort by this column";
      b.append(...cell.childNodes);
      cell.append(b);
    });
  }

  const quote = (s) => {
    const n = number(s);
    if (n !== null && !/[<>≤≥]/.test(s)) s = s.replace(/\u2212/g, "-").replace(/[\u2009\u202f]/g, "");
    else if (/^[=+@\-\t]/.test(s)) s = "'" + s; // no formula for a spreadsheet
    return /[",\n]/.test(s) ? '"' + s.replace(/"/g, '""') + '"' : s;
  };
  const csv = (table) => [...table.rows].map((row) => [...row.cells].flatMap((c) =>
    [quote(text(c)), ...Array(c.colSpan - 1).fill("")]).join(",")).join("\r\n") + "\r\n";
  const copy = async (s) => {
    if (navigator.clipboard) {
      try { await navigator.clipboard.writeText(s); return true; } catch { /* by the old road */ }
    }
    const area = document.createElement("textarea");
    area.value = s;
    document.body.append(area);
    area.select();
    const done = document.execCommand("copy");
    area.remove();
    return done;
  };
  for (const box of document.querySelectorAll(".table")) {
    const table = box.querySelector("table");
    if (!table.tHead || table.rows.length < 4) continue; // short enough to type
    const line = document.createElement("p");
    line.className = "tools";
    line.append(button("Copy as CSV", async (b) => {
      b.textContent = (await copy(csv(table))) ? "Copied" : "Not allowed here";
      setTimeout(() => { b.textContent = "Copy as CSV"; }, 2000);
    }));
    box.append(line);
  }
})();
