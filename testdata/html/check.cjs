"use strict";
// Opens pages of reports in a browser and tells what is wrong with them, as JSON:
//
//	node check.cjs MODULES BROWSER PAGE… > faults.json
//	node check.cjs MODULES BROWSER --measure PAGE… > measures.json
//
// MODULES is the folder node_modules that holds puppeteer-core and axe-core. Each page is
// judged by axe in light and dark, wide and narrow; what it asks for, complains of and
// lets overflow is told; its tables, marks and contents are used as a reader would.
const path = require("path");
const fs = require("fs");
const [modules, executablePath, ...args] = process.argv.slice(2);
const measured = args[0] === "--measure";
const files = measured ? args.slice(1) : args;
const puppeteer = require(path.resolve(modules, "puppeteer-core"));
const axe = fs.readFileSync(path.join(modules, "axe-core", "axe.min.js"), "utf8");
const rules = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"];

async function open(browser, file, faults, setting) {
  const page = await browser.newPage();
  await page.setBypassCSP(setting.bypass === true);
  await page.setViewport({ width: setting.width, height: 900 });
  await page.emulateMediaFeatures([{ name: "prefers-color-scheme", value: setting.scheme || "light" }]);
  if (setting.scripts === false) await page.setJavaScriptEnabled(false);
  const told = (what) => (x) => faults.push(what + ": " + x);
  page.on("dialog", (d) => { told("dialog")(d.message()); d.dismiss(); });
  page.on("pageerror", (e) => told("error")(e.message));
  page.on("console", (m) => told("console")(m.text()));
  page.on("request", (r) => { if (!/^(file|data):/.test(r.url())) told("request")(r.url()); });
  await page.goto("file://" + file, { waitUntil: "load", timeout: 120000 });
  return page;
}

// What overflows its window, or hides what no key can reach.
const overflow = () => {
  const out = [];
  const wider = document.documentElement.scrollWidth - innerWidth;
  if (wider > 0) {
    const e = [...document.querySelectorAll("body *")].find((e) => e.getBoundingClientRect().right > innerWidth + 1 && !e.closest(".scroll, .plot, pre, .unseen, .skip"));
    out.push(wider + " pixels wider than the window" + (e ? ": <" + e.localName + "> " + e.textContent.slice(0, 60) : ""));
  }
  for (const e of document.querySelectorAll(".scroll, .plot, pre")) {
    if (e.scrollWidth > e.clientWidth + 1 && e.tabIndex !== 0) out.push("no key scrolls " + e.className + " " + e.textContent.slice(0, 60));
  }
  return out;
};

// Brings everything into view once, so that what is made late is made.
const walk = async () => {
  for (let y = 0; y < document.documentElement.scrollHeight; y += 800) {
    scrollTo({ top: y, behavior: "instant" });
    await new Promise((done) => requestAnimationFrame(() => done()));
  }
  scrollTo({ top: 0, behavior: "instant" });
  await new Promise((done) => setTimeout(done, 100));
};

// Uses tables, marks and contents; tells what does not do as it should.
async function use(page) {
  const out = [];
  const say = (s) => out.push(s);
  const sorted = await page.evaluate(() => {
    const value = (s) => {
      const m = /^[<>≤≥]?\s*([+\-\u2212]?[\d\u2009\u202f]*\.?\d+(?:e[+-]?\d+)?)/.exec(s);
      return m ? Number(m[1].replace(/\u2212/, "-").replace(/[\u2009\u202f]/g, "")) : null;
    };
    const faults = [];
    let tables = 0;
    for (const table of [...document.querySelectorAll("table")].slice(0, 200)) {
      const buttons = [...table.querySelectorAll("button.sort")];
      if (table.querySelector("tr.group, tr.ruled") && buttons.length) faults.push("a table with groups sorts");
      if (!buttons.length) continue;
      tables++;
      const before = [...table.tBodies[0].rows];
      for (const b of buttons) {
        const cell = b.closest("th");
        const column = cell.cellIndex;
        const read = () => [...table.tBodies[0].rows].map((r) => {
          const c = r.cells[column].cloneNode(true);
          c.querySelectorAll(".pad, sup").forEach((e) => e.remove());
          return c.textContent.trim();
        }).filter((s) => s !== "" && s !== "–");
        for (const [state, sign] of [["ascending", 1], ["descending", -1]]) {
          b.click();
          if (cell.getAttribute("aria-sort") !== state) faults.push("aria-sort is " + cell.getAttribute("aria-sort") + " where it should be " + state);
          const values = read().map(value);
          if (values.every((v) => v !== null)) values.forEach((v, i) => { if (i && sign * (v - values[i - 1]) < 0) faults.push("not " + state + ": " + read().join(" ")); });
        }
        b.click();
        if (cell.getAttribute("aria-sort") !== "none" || before.some((r, i) => table.tBodies[0].rows[i] !== r)) faults.push("the third press does not bring the order back");
      }
    }
    return { faults: faults.slice(0, 10), tables };
  });
  out.push(...sorted.faults);

  // By keyboard: a head is reached, pressed and says its state.
  const head = await page.$("button.sort");
  if (head) {
    await head.focus();
    await page.keyboard.press("Enter");
    if (await head.evaluate((b) => b.closest("th").getAttribute("aria-sort")) !== "ascending") say("Enter does not sort");
    await page.keyboard.press("Space");
    if (await head.evaluate((b) => b.closest("th").getAttribute("aria-sort")) !== "descending") say("Space does not sort");
    await page.keyboard.press("Enter");
  }

  // A mark tells its name to the keyboard and to the pointer, and one stop serves a figure.
  const plot = await page.$(".pointed .plot");
  if (plot) {
    await plot.evaluate((p) => p.scrollIntoView({ block: "center", behavior: "instant" }));
    await plot.focus();
    await page.keyboard.press("ArrowRight");
    const tip = await page.evaluate(() => [...document.querySelectorAll(".tip")].filter((t) => !t.hidden).map((t) => t.textContent));
    if (tip.length !== 1 || !tip[0]) say("an arrow key names " + JSON.stringify(tip));
    await new Promise((done) => setTimeout(done, 120));
    if (await page.$eval("[role=status]", (s) => s.textContent) !== tip[0]) say("the name of a mark is not announced");
    await page.keyboard.press("Escape");
    if (await page.evaluate(() => [...document.querySelectorAll(".tip")].some((t) => !t.hidden))) say("Escape leaves the name");
    const at = await plot.evaluate((p) => {
      p.blur();
      const shape = p.querySelector("svg circle, svg g path");
      const b = shape.getBoundingClientRect();
      return { x: b.left + b.width / 2, y: b.top + b.height / 2 };
    });
    await page.mouse.move(at.x, at.y);
    await page.mouse.move(at.x + 1, at.y);
    if (!await page.evaluate(() => [...document.querySelectorAll(".tip")].some((t) => !t.hidden))) say("the pointer gets no name");
    const stops = await page.evaluate(() => Math.max(0, ...[...document.querySelectorAll(".plot")].map((p) => p.querySelectorAll("[tabindex]").length)));
    if (stops > 0) say(stops + " stops inside a figure");
    await page.mouse.move(0, 0);
  }

  // The contents mark the section in view.
  const section = await page.evaluate(async () => {
    const links = [...document.querySelectorAll("nav a")];
    const a = links[Math.floor(links.length / 2)];
    if (!a) return "";
    const target = document.getElementById(decodeURIComponent(a.hash.slice(1)));
    target.scrollIntoView({ block: "start", behavior: "instant" });
    // Where a section begins with one of its own, that is the one in view.
    const right = () => {
      const marked = [...document.querySelectorAll("nav [aria-current]")];
      return marked.length === 1 && (a.parentElement.contains(marked[0]) || scrollY + innerHeight >= document.documentElement.scrollHeight - 2);
    };
    for (let i = 0; i < 40 && !right(); i++) {
      await new Promise((done) => setTimeout(done, 50));
      target.scrollIntoView({ block: "start", behavior: "instant" });
    }
    return right() ? "" : document.querySelectorAll("nav [aria-current]").length + " sections are marked, and not " + a.textContent;
  });
  if (section) say(section);

  // What is saved is CSV whose cells no spreadsheet computes.
  const csv = await page.evaluate(() => {
    const b = [...document.querySelectorAll(".tools button")].filter((b) => b.textContent.startsWith("Save"));
    const got = [];
    const click = HTMLAnchorElement.prototype.click;
    HTMLAnchorElement.prototype.click = function () { got.push({ name: this.download, text: decodeURIComponent(this.href.slice(this.href.indexOf(",") + 1)) }); };
    b.forEach((x) => x.click());
    HTMLAnchorElement.prototype.click = click;
    return got;
  });
  for (const { name, text } of csv) {
    if (!/^[a-z0-9-]+\.csv$/.test(name) || text[0] !== "\ufeff") say("saved as " + name);
    const lines = [];
    let row = [""], quoted = false;
    for (const c of text.slice(1)) {
      if (c === '"') { quoted = !quoted; continue; }
      if (!quoted && c === ",") row.push("");
      else if (!quoted && c === "\n") { lines.push(row); row = [""]; } else if (quoted || c !== "\r") row[row.length - 1] += c;
    }
    if (lines.some((l) => l.length !== lines[0].length)) say(name + " has rows of unlike length");
    for (const cell of lines.flat()) if (/^\s*[=+\-@]/.test(cell) && !/^[+-]?[\d.]+(e[+-]?\d+)?$/.test(cell)) say(name + " computes " + cell.slice(0, 40));
  }
  return { faults: out, sorts: sorted.tables, saves: csv.length, marks: plot ? 1 : 0 };
}

async function check(browser, file) {
  const faults = [];
  const report = { file, faults, nodes: 0, load: 0 };
  // As a reader has it: with the policy of the page.
  const start = Date.now();
  const page = await open(browser, file, faults, { width: 1280 });
  report.load = Date.now() - start;
  await page.evaluate(walk);
  report.nodes = await page.evaluate(() => document.getElementsByTagName("*").length);
  for (const width of [1280, 320]) {
    await page.setViewport({ width, height: 900 });
    await page.evaluate(walk);
    faults.push(...(await page.evaluate(overflow)).map((s) => "at " + width + ": " + s));
  }
  await page.setViewport({ width: 1280, height: 900 });
  const used = await use(page);
  faults.push(...used.faults);
  Object.assign(report, { sorts: used.sorts, saves: used.saves, marks: used.marks });
  await page.close();

  // Ink and paper of the figures are those of the scheme.
  const colours = {};
  for (const scheme of ["light", "dark"]) {
    const p = await open(browser, file, faults, { width: 1280, scheme, bypass: true });
    await p.evaluate(walk);
    colours[scheme] = await p.evaluate(() => {
      const svg = document.querySelector("figure svg");
      const text = svg && [...svg.querySelectorAll("text")].find((t) => t.closest("[fill=currentColor]"));
      return { body: getComputedStyle(document.body).color, paper: getComputedStyle(document.body).backgroundColor, ink: text ? getComputedStyle(text).fill : "" };
    });
    if (colours[scheme].ink && colours[scheme].ink !== colours[scheme].body) faults.push(scheme + ": figures are written in " + colours[scheme].ink + ", the text in " + colours[scheme].body);
    await p.evaluate(axe);
    for (const width of scheme === "light" ? [1280, 320] : [1280]) {
      await p.setViewport({ width, height: 900 });
      await p.evaluate(walk);
      // Colours do not depend on the width, and take most of the time.
      const result = await p.evaluate((tags, contrast) => axe.run(document, { runOnly: tags, rules: { "color-contrast": { enabled: contrast } }, resultTypes: ["violations"] }), rules, width > 320);
      for (const v of result.violations) faults.push("axe, " + scheme + " at " + width + ": " + v.id + ": " + v.help + ": " + v.nodes.slice(0, 3).map((n) => n.html.slice(0, 200) + (n.failureSummary || "").replace(/\s+/g, " ").slice(0, 200)).join(" | "));
      report.passes = (report.passes || 0) + result.passes.length;
    }
    await p.close();
  }
  if (colours.light.body === colours.dark.body || colours.light.paper === colours.dark.paper) faults.push("light and dark are alike");

  // Without scripts all of it is there, and nothing that does not work.
  const still = await open(browser, file, faults, { width: 1280, scripts: false });
  const without = await still.evaluate(() => ({
    text: document.querySelector("main").innerText.trim().length, buttons: document.querySelectorAll("button").length,
    files: document.querySelectorAll("a.attachment[download]").length, contents: document.querySelectorAll("nav a").length,
    shown: document.querySelector("nav ol") ? document.querySelector("nav ol").getBoundingClientRect().height : 0,
  }));
  if (!without.text || without.buttons || without.contents && !without.shown) faults.push("without scripts: " + JSON.stringify(without));
  report.files = without.files;
  await still.pdf({ path: file.replace(/\.html$/, "") + "-printed.pdf", preferCSSPageSize: true, timeout: 180000 });
  await still.close();
  return report;
}

// How long a page takes to open, to jump to its end and to search its contents.
async function measure(browser, file) {
  const faults = [];
  const start = Date.now();
  const page = await open(browser, file, faults, { width: 1280 });
  const load = Date.now() - start;
  const nodes = await page.evaluate(() => document.getElementsByTagName("*").length);
  const jump = await page.evaluate(async () => {
    const t = performance.now();
    const last = [...document.querySelectorAll("nav a")].at(-1);
    document.documentElement.style.scrollBehavior = "auto";
    last.click();
    await new Promise((done) => requestAnimationFrame(() => setTimeout(done, 0)));
    const target = document.getElementById(last.hash.slice(1)).getBoundingClientRect();
    return { ms: performance.now() - t, seen: target.top < innerHeight && target.bottom > 0 };
  });
  if (!jump.seen) faults.push("the last entry of the contents does not lead to its section");
  const find = await page.evaluate(async () => {
    const input = document.querySelector("nav input");
    if (!input) return { all: 0, shown: 0 };
    input.value = "metabolite 37";
    input.dispatchEvent(new Event("input"));
    await new Promise((done) => setTimeout(done, 300));
    const links = [...document.querySelectorAll("nav a")];
    return { all: links.length, shown: links.filter((a) => a.offsetParent && a.textContent.includes("37")).length, others: links.filter((a) => a.offsetParent && !a.textContent.includes("37")).length };
  });
  await page.close();
  return { file, faults, load, nodes, jump: Math.round(jump.ms), find };
}

(async () => {
  const browser = await puppeteer.launch({
    executablePath, protocolTimeout: 300000,
    args: ["--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-component-update", "--disable-sync", "--disable-dev-shm-usage"],
  });
  try {
    const out = [];
    for (const file of files) out.push(await (measured ? measure : check)(browser, path.resolve(file)));
    process.stdout.write(JSON.stringify(out, null, 1) + "\n");
  } finally {
    await browser.close();
  }
})().catch((e) => { console.error(e); process.exit(1); });
