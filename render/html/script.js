"use strict";
// What a page can do more where scripts run: its contents follow the reader, tables can be
// sorted, copied and saved, and the marks of figures tell what they are. All of it is made
// here, so that a page without scripts shows nothing that does not work.
(() => {
  const root = document.documentElement;
  root.classList.add("live");
  const make = (tag, className, ...children) => {
    const e = document.createElement(tag);
    if (className) e.className = className;
    e.append(...children);
    return e;
  };
  const status = make("p", "unseen");
  status.setAttribute("role", "status");
  document.body.append(status);
  const say = (words) => { status.textContent = ""; setTimeout(() => { status.textContent = words; }, 50); };
  const later = (ms, f) => { let t = 0; return (...a) => { clearTimeout(t); t = setTimeout(() => f(...a), ms); }; };
  const button = (label, press) => {
    const b = make("button", "", label);
    b.type = "button";
    b.addEventListener("click", () => press(b));
    return b;
  };

  /* Contents */
  const nav = document.querySelector("body > nav");
  if (nav) {
    const details = nav.querySelector("details");
    const links = [...nav.querySelectorAll("a")];
    const here = make("span", "here");
    details.querySelector("summary").append(here);
    const narrow = matchMedia("(max-width: 69.99rem)");
    const fold = () => { details.open = !narrow.matches; };
    fold();
    narrow.addEventListener("change", fold);
    nav.addEventListener("click", (e) => { if (narrow.matches && e.target.closest("a")) details.open = false; });
    document.addEventListener("keydown", (e) => {
      if (e.key !== "Escape" || !narrow.matches || !details.open) return;
      details.open = false;
      details.querySelector("summary").focus();
    });

    // The section that stands a fifth below the top of the window is the current one.
    const list = details.querySelector("ol");
    const bySection = new Map();
    for (const a of links) {
      const target = document.getElementById(decodeURIComponent(a.hash.slice(1)));
      const section = target && target.closest("section");
      if (section && !bySection.has(section)) bySection.set(section, a);
    }
    const within = new Set();
    let current = null;
    const watch = new IntersectionObserver((entries) => {
      for (const e of entries) e.isIntersecting ? within.add(e.target) : within.delete(e.target);
      let found = null;
      for (const [section, a] of bySection) if (within.has(section)) found = a;
      if (found === current) return;
      if (current) current.removeAttribute("aria-current");
      current = found;
      here.textContent = current ? current.textContent : "";
      if (!current) return;
      current.setAttribute("aria-current", "location");
      if (narrow.matches) return;
      const top = current.offsetTop - list.offsetTop;
      if (top < list.scrollTop + 40 || top > list.scrollTop + list.clientHeight - 60) list.scrollTop = top - list.clientHeight / 3;
    }, { rootMargin: "-20% 0px -79% 0px" });
    for (const section of bySection.keys()) watch.observe(section);

    // A long list can be searched.
    if (links.length > 40) {
      const input = make("input");
      input.type = "search";
      input.id = "x_find";
      const label = make("label", "", "Find a section");
      label.htmlFor = input.id;
      const all = [...list.querySelectorAll("li")].reverse(); // what stands inside an entry comes before it
      input.addEventListener("input", later(80, () => {
        const words = input.value.toLowerCase().split(/\s+/).filter(Boolean);
        let shown = 0;
        for (const li of all) {
          const a = li.querySelector(":scope > a");
          const hit = a && words.every((w) => a.textContent.toLowerCase().includes(w));
          if (hit) shown++;
          li.hidden = !hit && !li.querySelector("li:not([hidden])");
        }
        say(words.length ? shown + " sections found" : "");
      }));
      list.before(make("div", "find", label, input));
    }
  }

  /* Tables */
  // What a cell says, without the digits that only align it and the calls of notes.
  // Numbers raised or lowered keep their place; other raised letters stand apart.
  const raised = "⁰¹²³⁴⁵⁶⁷⁸⁹", lowered = "₀₁₂₃₄₅₆₇₈₉";
  const text = (cell) => {
    const copy = cell.cloneNode(true);
    for (const e of copy.querySelectorAll(".pad, .call")) e.remove();
    for (const e of copy.querySelectorAll("sup, sub")) {
      const s = e.textContent, up = e.localName === "sup";
      if (/^[+\-\u2212]?\d+$/.test(s)) {
        e.replaceWith([...s].map((c) => c === "+" ? (up ? "⁺" : "₊") : c < "0" || c > "9" ? (up ? "⁻" : "₋") : (up ? raised : lowered)[c]).join(""));
      } else if (up) e.before(" ");
    }
    return copy.textContent.replace(/[ \t\r\n]+/g, " ").trim();
  };
  // The number at the beginning of a text: "< 0.001", "−1.5 to 2", "7 244 bytes".
  const numeral = /^([<>≤≥]?)\s*([+\-\u2212]?)(\d[\d\u2009\u202f]*)?(\.\d+)?(?:[eE]([+\-\u2212]?\d+))?/;
  const read = (s) => {
    const m = numeral.exec(s);
    if (!m || !m[3] && !m[4]) return null;
    const plain = (m[2] ? m[2].replace("\u2212", "-") : "") + (m[3] || "0").replace(/\D/g, "") + (m[4] || "") + (m[5] ? "e" + m[5].replace("\u2212", "-") : "");
    return { value: Number(plain), side: { "<": -1, ">": 1 }[m[1]] || 0, plain: m[0].trim() === s.trim() && !m[1] ? plain : null };
  };
  const order = new Intl.Collator(root.lang, { numeric: true });
  const blank = (s) => s === "" || s === "–" || s === "—";
  const compare = (a, b) => {
    const x = read(a), y = read(b);
    if (x && y) return x.value - y.value || x.side - y.side || order.compare(a, b);
    if (x || y) return x ? -1 : 1;
    return order.compare(a, b);
  };
  const name = (box) => {
    const label = box.querySelector("caption b");
    return label ? label.textContent : "the table";
  };

  const sortable = (box, table) => {
    const body = table.tBodies[0], head = [...table.tHead.rows].at(-1);
    const cells = [...head.cells], first = [...body.rows];
    cells.forEach((cell, column) => {
      if (cell.localName !== "th") return;
      const b = button("", () => {
        const next = { none: "ascending", ascending: "descending", descending: "none" }[cell.ariaSort];
        for (const c of cells) if (c.ariaSort) c.setAttribute("aria-sort", "none");
        const rows = [...first];
        if (next !== "none") {
          cell.setAttribute("aria-sort", next);
          const key = new Map(rows.map((r) => [r, r.cells[column] ? text(r.cells[column]) : ""]));
          const sign = next === "ascending" ? 1 : -1;
          rows.sort((r, q) => {
            const a = key.get(r), c = key.get(q);
            return blank(a) || blank(c) ? blank(a) - blank(c) : sign * compare(a, c);
          });
        }
        body.append(...rows);
        say(name(box) + (next === "none" ? " in its own order" : " sorted by " + text(cell) + ", " + next));
      });
      b.className = "sort";
      b.append(...cell.childNodes);
      cell.append(b);
      cell.setAttribute("aria-sort", "none");
    });
  };

  // Rows of texts: one of heads, then those of the body, with the row that heads them as
  // a column of its own.
  const rows = (table) => {
    const spread = (row) => [...row.cells].flatMap((c) => Array(c.colSpan).fill(text(c)));
    const heads = [...(table.tHead ? table.tHead.rows : [])].map(spread);
    const head = (heads.at(-1) || []).map((_, i) => [...new Set(heads.map((h) => h[i]).filter(Boolean))].join(" "));
    const grouped = table.querySelector("tr.group") !== null;
    const out = head.length ? [grouped ? ["Group", ...head] : head] : [];
    let group = "";
    for (const body of table.tBodies) for (const row of body.rows) {
      if (row.classList.contains("group")) { group = text(row.cells[0]); continue; }
      const cells = [...row.cells].flatMap((c) => [text(c), ...Array(c.colSpan - 1).fill("")]);
      out.push(grouped ? [group, ...cells] : cells);
    }
    return out;
  };
  // A number is one for any program; a text that a spreadsheet would compute is quoted.
  const harmless = (s) => {
    const n = read(s);
    if (n && n.plain !== null) return n.plain;
    return /^\s*[=+\-@\uff1d\uff0b\uff0d\uff20]/.test(s) ? "'" + s : s;
  };
  const csv = (table) => rows(table).map((row) => row.map(harmless).map((s) => /[",\r\n]/.test(s) ? '"' + s.replace(/"/g, '""') + '"' : s).join(",")).join("\r\n") + "\r\n";
  const tabbed = (table) => rows(table).map((row) => row.map((s) => harmless(s).replace(/\t/g, " ")).join("\t")).join("\n") + "\n";
  const bare = (table) => {
    const copy = table.cloneNode(true);
    for (const e of copy.querySelectorAll(".pad, .call")) e.remove();
    for (const e of copy.querySelectorAll("button.sort, a")) e.replaceWith(...e.childNodes);
    for (const e of [copy, ...copy.querySelectorAll("*")]) for (const a of ["class", "id", "aria-sort", "href", "role"]) e.removeAttribute(a);
    return copy.outerHTML;
  };
  const copied = async (table) => {
    const plain = tabbed(table);
    try {
      const item = (type, s) => ({ [type]: new Blob([s], { type }) });
      await navigator.clipboard.write([new ClipboardItem({ ...item("text/plain", plain), ...item("text/html", bare(table)) })]);
      return true;
    } catch { /* by the old road */ }
    const area = make("textarea");
    area.value = plain;
    document.body.append(area);
    area.select();
    const done = document.execCommand("copy");
    area.remove();
    return done;
  };
  const saved = (table, file) => {
    const a = make("a");
    a.download = file;
    a.href = "data:text/csv;charset=utf-8," + encodeURIComponent("\ufeff" + csv(table));
    document.body.append(a);
    a.click();
    a.remove();
  };
  const tools = (box, table) => {
    const line = make("p", "tools");
    const copy = button("Copy", async (b) => {
      const done = await copied(table);
      b.textContent = done ? "Copied" : "Not allowed here";
      say(done ? name(box) + " is copied" : "The browser does not allow it");
      b.focus();
      setTimeout(() => { b.textContent = "Copy"; }, 2000);
    });
    const save = button("Save as CSV", () => {
      saved(table, (name(box) === "the table" ? "table" : name(box).toLowerCase().replace(/[^a-z0-9]+/g, "-")) + ".csv");
      say(name(box) + " is saved");
    });
    for (const b of [copy, save]) b.append(make("span", "unseen", " " + name(box)));
    line.append(copy, save);
    box.append(line);
  };

  /* Marks of figures */
  const ns = "http://www.w3.org/2000/svg";
  const pointed = (plot) => {
    const svg = plot.querySelector("svg");
    const titles = [...svg.querySelectorAll("title")].filter((t) => t.parentNode !== svg);
    if (titles.length === 0) return;
    const marks = titles.map((t) => ({ element: t.parentNode, name: t.textContent }));
    for (const t of titles) t.remove(); // or the browser would show them as well
    const figure = plot.closest("figure");
    figure.classList.add("pointed");
    const label = plot.getAttribute("aria-label");
    plot.setAttribute("role", "application");
    plot.setAttribute("aria-label", label + ", " + marks.length + " marks: arrow keys name them");
    const tip = make("div", "tip");
    tip.hidden = true;
    figure.append(tip);
    const ring = document.createElementNS(ns, "rect");
    ring.setAttribute("class", "ring");
    let at = -1, boxes = null;
    const measure = () => { boxes = marks.map((m) => m.element.getBoundingClientRect()); };
    // A line is named only where nothing with a body is near.
    const lines = marks.map((m) => m.element.localName === "path" && getComputedStyle(m.element).fill === "none");
    const hide = () => { at = -1; tip.hidden = true; ring.remove(); };
    const show = (i) => {
      if (i === at) return;
      at = i;
      const box = marks[i].element.getBBox(), r = 2.5;
      for (const [k, v] of Object.entries({ x: box.x - r, y: box.y - r, width: box.width + 2 * r, height: box.height + 2 * r, rx: Math.min(box.width, box.height) > 20 ? 2 : (box.width + 2 * r) / 2 })) ring.setAttribute(k, v);
      svg.append(ring);
      tip.textContent = marks[i].name;
      tip.hidden = false;
      const to = marks[i].element.getBoundingClientRect(), on = figure.getBoundingClientRect();
      const middle = to.left + to.width / 2 - on.left;
      tip.style.left = Math.max(0, Math.min(middle - tip.offsetWidth / 2, on.width - tip.offsetWidth)) + "px";
      const above = to.top - on.top - tip.offsetHeight - 8;
      tip.style.top = (above > -20 ? above : to.bottom - on.top + 8) + "px";
    };
    const nearest = (x, y) => {
      let best = -1, least = 12, size = Infinity;
      boxes.forEach((b, i) => {
        const d = (lines[i] ? 11 : 0) + Math.hypot(Math.max(b.left - x, 0, x - b.right), Math.max(b.top - y, 0, y - b.bottom));
        if (d < least || d === least && b.width * b.height < size) [best, least, size] = [i, d, b.width * b.height];
      });
      return best;
    };
    const move = (e) => {
      if (!boxes) measure();
      const i = nearest(e.clientX, e.clientY);
      if (i >= 0) show(i); else if (!plot.matches(":focus-visible")) hide();
    };
    plot.addEventListener("pointerenter", measure);
    plot.addEventListener("pointermove", move);
    plot.addEventListener("pointerdown", move);
    figure.addEventListener("pointerleave", () => { if (!plot.matches(":focus-visible")) hide(); });
    plot.addEventListener("blur", hide);
    addEventListener("scroll", () => { boxes = null; }, { passive: true, capture: true });
    plot.addEventListener("keydown", (e) => {
      const last = marks.length - 1;
      const to = { ArrowRight: at + 1, ArrowDown: at + 1, ArrowLeft: at - 1, ArrowUp: at - 1, Home: 0, End: last, PageDown: at + 10, PageUp: at - 10 }[e.key];
      if (e.altKey || e.ctrlKey || e.metaKey) return;
      if (e.key === "Escape" && at >= 0) hide();
      else if (to !== undefined) {
        e.preventDefault();
        show(Math.max(0, Math.min(to, last)));
        say(marks[at].name);
      }
    });
  };

  // Tables and figures get what they need when the reader comes near: pages may be long.
  const fits = (region) => {
    if (region.getAttribute("role") === "application") return;
    if (region.scrollWidth > region.clientWidth + 1) region.tabIndex = 0; else region.removeAttribute("tabindex");
  };
  const sizes = new ResizeObserver((entries) => { for (const e of entries) fits(e.target); });
  const near = new IntersectionObserver((entries) => {
    for (const e of entries) {
      if (!e.isIntersecting) continue;
      near.unobserve(e.target);
      if (e.target.localName === "figure") {
        const plot = e.target.querySelector(".plot");
        if (plot) { pointed(plot); sizes.observe(plot); }
        continue;
      }
      const table = e.target.querySelector("table");
      if (table.classList.contains("sortable")) sortable(e.target, table);
      if (table.tHead && table.rows.length > 2) tools(e.target, table);
      sizes.observe(e.target.querySelector(".scroll"));
    }
  }, { rootMargin: "100% 0px" });
  for (const e of document.querySelectorAll("main .table, main figure")) near.observe(e);
})();
