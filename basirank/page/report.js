// The list: rows from the page's own data, filtered, sorted, one page of them in the table; details when a row is opened.

const list = JSON.parse(byId("list-data").textContent);
const columns = Object.keys(list.rows);
const rows = list.rows[columns[0]].map((_, n) => {
  const row = { place: n };
  for (const name of columns) row[name] = list.rows[name][n];
  row.class = list.strings[row.class] ?? "";
  row.support = ["extrapolated", "supported"][row.support] ?? "";
  row.text = [row.name, row.smiles, row.class, row.message, row.more].join("\n").toLowerCase();
  return row;
});
// The details of the rows are packed, one line of JSON each; a line is read when its row is first shown.
const packed = Uint8Array.from(atob(byId("details").textContent), (letter) => letter.charCodeAt(0));
const unpacked = new Blob([packed]).stream().pipeThrough(new DecompressionStream("gzip"));
const details = (await new Response(unpacked).text()).split("\n");
function detail(place) {
  if (typeof details[place] === "string") details[place] = JSON.parse(details[place]);
  return details[place];
}

const chosen = { key: null, direction: 1, page: 0, phPlace: 0, rows, open: new Set() };
const filters = byId("filters"), body = byId("table").tBodies[0];
const state = (row) => row.states?.[chosen.phPlace] ?? null;
const charge = (row) => state(row)?.[0] ?? null;

const collator = new Intl.Collator("en", { numeric: true, sensitivity: "base" });
const keys = {
  rank: (row) => row.rank, name: (row) => row.name || row.smiles, pkah: (row) => row.pkah,
  class: (row) => row.class || null, charge, support: (row) => row.support || null,
};
function compare(a, b) {
  const [x, y] = [keys[chosen.key](a), keys[chosen.key](b)];
  if (x === null || y === null) return (x === null) - (y === null) || a.place - b.place; // what is missing stays last
  const order = typeof x === "string" ? collator.compare(x, y) : x - y;
  return chosen.direction * order || a.place - b.place;
}

function wanted() {
  const words = byId("text").value.toLowerCase().split(/\s+/).filter(Boolean);
  const low = byId("low").valueAsNumber, high = byId("high").valueAsNumber;
  const kind = byId("class").value, level = byId("charge").value, support = byId("support").value;
  return (row) => words.every((word) => row.text.includes(word))
    && (Number.isNaN(low) || (row.pkah !== null && row.pkah >= low))
    && (Number.isNaN(high) || (row.pkah !== null && row.pkah <= high))
    && (!kind || row.class === kind)
    && (!level || (charge(row) !== null && String(Math.round(charge(row)) + 0) === level))
    && (!support || (support === "none" ? row.pkah === null : row.support === support));
}

function renew() {
  chosen.phPlace = Math.max(byId("ph").selectedIndex, 0);
  chosen.rows = rows.filter(wanted());
  if (chosen.key) chosen.rows.sort(compare);
  chosen.page = 0;
  overview();
  show();
}

const wholeCurve = meanCurve(rows, list.grid);
function overview() {
  const found = chosen.rows, ph = list.ph[chosen.phPlace];
  const half = found.filter((row) => row.low !== null && row.high !== null).map((row) => (row.high - row.low) / 2).sort((a, b) => a - b);
  const facts = [
    ["compounds", found.length],
    ["with a pKaH", found.filter((row) => row.pkah !== null).length],
    ["supported", found.filter((row) => row.support === "supported").length],
    ["extrapolated", found.filter((row) => row.support === "extrapolated").length],
    ["no basic site", found.filter((row) => row.status === "no_basic_site").length],
    ["refused", found.filter((row) => row.status === "refused").length],
    ["median \u00b1 90 %", half.length ? fixed(half[Math.floor(half.length / 2)]) : "\u2013"],
  ];
  byId("counts").replaceChildren(...facts.map(([name, value]) => el("div", {}, el("dt", {}, name), el("dd", {}, value.toLocaleString("en")))));
  byId("histogram").replaceChildren(histogram(found));
  byId("curve").replaceChildren(shareCurve(wholeCurve, found.length === rows.length ? wholeCurve : meanCurve(found, list.grid), list.grid, ph));
}

function show() {
  const size = Number(byId("size").value), last = Math.max(Math.ceil(chosen.rows.length / size) - 1, 0);
  chosen.page = Math.min(Math.max(chosen.page, 0), last);
  const start = chosen.page * size, page = chosen.rows.slice(start, start + size);
  byId("ph-shown").textContent = list.ph[chosen.phPlace];
  body.replaceChildren(...page.flatMap((row) => (chosen.open.has(row.place) ? [tableRow(row), detailRow(row)] : [tableRow(row)])));
  const whole = rows.length.toLocaleString("en");
  byId("count").textContent = chosen.rows.length
    ? `Rows ${(start + 1).toLocaleString("en")} to ${(start + page.length).toLocaleString("en")} of ${chosen.rows.length.toLocaleString("en")}${chosen.rows.length < rows.length ? `, chosen from ${whole}` : ""}`
    : `No row of ${whole} fits these filters`;
  byId("page").textContent = `Page ${chosen.page + 1} of ${last + 1}`;
  byId("before").disabled = chosen.page === 0;
  byId("after").disabled = chosen.page === last;
  for (const heading of document.querySelectorAll("#table > thead th[data-key]")) {
    const active = heading.dataset.key === chosen.key;
    heading.setAttribute("aria-sort", active ? (chosen.direction > 0 ? "ascending" : "descending") : "none");
  }
}

const cell = (name, label, ...children) => el("td", { role: "cell", class: name, "data-label": label }, ...children);

function tableRow(row) {
  const title = row.name || row.smiles, now = state(row), open = chosen.open.has(row.place), drawn = detail(row.place).picture;
  const toggle = el("button", { type: "button", "aria-expanded": open, "aria-controls": `detail-${row.place}` }, title);
  const line = el("tr", { role: "row", "data-place": row.place },
    cell("rank number", null, row.rank === null ? "\u2013" : String(row.rank)),
    cell("structure", null, drawn ? picture(drawn, structureLabel(row), 0.72, 190, 130, true) : null),
    cell("compound", null, toggle, row.name ? el("div", { class: "smiles" }, row.smiles) : null));
  if (row.pkah === null) {
    const reason = row.status === "refused" ? `refused: ${row.message}` : row.message || "no basic site";
    line.append(el("td", { role: "cell", class: "message", colspan: now ? 2 : 4 }, reason));
  } else {
    line.append(
      cell("scale", "pKaH", el("span", { class: "value" }, fixed(row.pkah)), ` (${ends(row.low, row.high)})`, intervalBar(row, list.scale, list.ph[chosen.phPlace])),
      cell("class", "first site", row.class, el("div", { class: "message" }, `atom ${row.atom}`)));
  }
  if (now) {
    const bar = el("i");
    bar.style.width = percent(now[1]).replace(" ", "");
    line.append(cell("state", `at pH ${list.ph[chosen.phPlace]}`, `charge ${signed(now[0])}`,
      el("div", { class: "message" }, `${percent(now[1])} protonated`), el("span", { class: "share", "aria-hidden": "true" }, bar)));
  }
  if (row.pkah !== null || now) line.append(cell("support", null, row.support));
  toggle.addEventListener("click", () => {
    const opening = !chosen.open.delete(row.place);
    toggle.setAttribute("aria-expanded", opening);
    if (opening) {
      chosen.open.add(row.place);
      line.after(detailRow(row));
    } else {
      byId(`detail-${row.place}`).remove();
    }
  });
  return line;
}

const ends = (low, high) => `${low === null ? "\u2026" : fixed(low)} to ${high === null ? "\u2026" : fixed(high)}`;
const structureLabel = (row) => `Structure of ${row.name || row.smiles}${row.pkah === null ? "" : `, first pKaH ${fixed(row.pkah)} on atom ${row.atom}`}`;

function facts(caption, lines) {
  return el("table", { class: "facts" }, el("caption", {}, caption), el("tbody", {}, ...lines.map(([name, ...texts]) =>
    el("tr", {}, el("th", { scope: "row" }, name), ...texts.map((text) => (typeof text === "string" ? el("td", {}, text) : el("td", {}, text)))))));
}

const code = (text) => el("span", { class: "smiles" }, text);

function detailRow(row) {
  const told = detail(row.place);
  const root = told.picture && picture(told.picture, structureLabel(row), 1.25, 560, 420, false);
  const right = el("div", {});
  if (told.steps.length) {
    right.append(facts("Macroscopic constants, in the order of protonation", told.steps.map(([name, value, low, high, where]) =>
      [name, value === null ? "not within \u22125 to 16" : `${fixed(value)} (${ends(low, high)})`, where])));
  }
  if (row.states) {
    row.states.forEach((now, n) => right.append(facts(`At pH ${list.ph[n]}`, [
      ["mean net charge", signed(now[0])], ["base protonated", percent(now[1])], ["dominant form", code(told.forms[n][0])], ["its share", percent(told.forms[n][1])]])));
  }
  const own = [["SMILES", code(row.smiles)], ...(told.parent && told.parent !== row.smiles ? [["computed as", code(told.parent)]] : []),
    ...(told.above === null ? [] : [["more basic than the next by rank", `probability ${fixed(100 * told.above, 0)} %`]]),
    ...(row.message ? [["note", row.message]] : []), ...told.cells];
  right.append(facts("Compound", own));
  if (told.pairs.length) right.append(facts("Interaction W between sites", told.pairs.map(([a, b, w]) => [`site ${a}, site ${b}`, `${signed(w)} pK units`])));
  const sites = told.sites.map((site, n) => siteSection(site, told.picture, root, n === 0));
  return el("tr", { class: "detail", id: `detail-${row.place}`, role: "row" }, el("td", { colspan: 7, role: "cell" },
    el("div", { class: "columns" }, el("div", { class: "drawing" }, root ?? ""), right), ...sites));
}

// A site's increments as a waterfall, in a table that reads without the bars.
function siteSection(site, drawn, root, open) {
  const quantity = site.kind === "base" ? "pKaH" : "pKa";
  const terms = site.terms.map(([name, value, source, atoms, product]) => ({ name: list.strings[name], value, source: list.strings[source], atoms, product }));
  const sums = terms.reduce((all, term) => [...all, all.at(-1) + term.value], [0]);
  const from = Math.min(...sums.slice(1), site.value - site.half) - 0.2, to = Math.max(...sums.slice(1), site.value + site.half) + 0.2;
  const lines = terms.map((term, n) => {
    const name = term.name + (term.product ? ` (${term.product})` : "");
    const button = drawn && term.atoms.length ? el("button", { type: "button", "aria-pressed": "false", title: "show its atoms" }, name) : null;
    button?.addEventListener("click", () => {
      const on = button.getAttribute("aria-pressed") !== "true";
      for (const other of button.closest("td.detail, tr.detail").querySelectorAll(".terms button")) other.setAttribute("aria-pressed", "false");
      button.setAttribute("aria-pressed", on);
      shade(root, drawn, on ? [term] : terms.slice(1));
    });
    return el("tr", {}, el("td", {}, button ?? name, term.atoms.length ? el("span", { class: "message" }, ` atom${term.atoms.length > 1 ? "s" : ""} ${term.atoms.join(", ")}`) : null),
      el("td", { class: "bar" }, waterfallBar(sums[n], sums[n + 1], from, to, n === 0 ? "parent" : "term")),
      el("td", { class: "number" }, n === 0 ? fixed(term.value) : signed(term.value)), el("td", { class: "source" }, term.source));
  });
  const heads = el("tr", {}, ...["term", "", "adds", "source"].map((text, n) => el("th", { scope: "col", class: ["", "bar", "number", "source"][n] }, text)));
  const total = el("tr", {}, el("th", { scope: "row" }, `intrinsic ${quantity}, other sites neutral`), el("td", { class: "bar" }, waterfallBar(site.value, site.value, from, to, "total")),
    el("td", { class: "number" }, fixed(site.value)), el("td", { class: "source" }, `\u00b1 ${fixed(site.half)}, ${site.support}`));
  const moved = site.adjusted === null ? null : el("p", { class: "message" }, `The sum holds at 25 C and ionic strength 0; at the conditions of this list it is ${fixed(site.adjusted)}.`);
  const more = site.silent ? el("p", { class: "message" }, `${site.silent} more that add nothing`) : null;
  const section = el("details", {}, el("summary", {}, [...site.steps, `${site.class}, ${site.symbol} atom ${site.atom}`].join(": ") + ` (site ${site.number}, intrinsic ${quantity} ${fixed(site.value)})`),
    el("table", { class: "terms" }, el("thead", {}, heads), el("tbody", {}, ...lines), el("tfoot", {}, total)), moved, more, evidence(site.evidence));
  section.addEventListener("toggle", () => section.open && root && shade(root, drawn, terms.slice(1)));
  section.open = open;
  return section;
}

// The measured values behind a correction: lines that follow those of the rows in the packed details.
function evidence(found) {
  if (!found.length) return null;
  const heads = ["", "measured analogue", "value", "weight", "adds", "source"], kinds = ["", "", "number", "number", "number", "source"];
  return el("table", { class: "terms evidence" }, el("caption", {}, "Carried most by these measured values"),
    el("thead", {}, el("tr", {}, ...heads.map((text, n) => el("th", { scope: "col", class: kinds[n] }, text)))),
    el("tbody", {}, ...found.map(([number, weight, pull]) => {
      const one = detail(rows.length + number);
      const drawn = one.picture && picture(one.picture, `Structure of ${one.name || one.smiles}, measured ${one.quantity} ${fixed(one.value)}`, 0.62, 150, 90, true);
      return el("tr", {}, el("td", { class: "structure" }, drawn), el("td", {}, one.name, el("div", { class: "smiles" }, one.smiles)),
        el("td", { class: "number" }, `${one.quantity} ${fixed(one.value)}`), el("td", { class: "number", "data-label": "weight" }, fixed(weight)),
        el("td", { class: "number", "data-label": "adds" }, signed(pull)), el("td", { class: "source" }, one.source));
    })));
}

function fill(select, values, label = String) {
  select.append(...values.map((value) => el("option", { value }, label(value))));
}
const distinct = (values) => [...new Set(values)];
fill(byId("class"), distinct(rows.map((row) => row.class).filter(Boolean)).sort(collator.compare));
const charges = rows.flatMap((row) => (row.states ?? []).map((now) => Math.round(now[0]) + 0));
fill(byId("charge"), distinct(charges).sort((a, b) => a - b), (value) => `about ${signed(value, 0)}`);
fill(byId("ph"), list.ph);
byId("ph-choice").hidden = list.ph.length < 2;
byId("axis").replaceChildren(axis(list.scale));

filters.addEventListener("input", (event) => (event.target.id === "size" ? show() : renew()));
filters.addEventListener("submit", (event) => event.preventDefault());
filters.addEventListener("reset", () => setTimeout(renew));
byId("table").tHead.addEventListener("click", (event) => {
  const key = event.target.closest("th")?.dataset.key;
  if (!key || !event.target.closest("button")) return;
  const falling = ["pkah", "charge"].includes(key);
  chosen.direction = chosen.key === key ? -chosen.direction : falling ? -1 : 1;
  chosen.key = key;
  chosen.rows.sort(compare);
  chosen.page = 0;
  show();
});
for (const [id, by] of [["before", -1], ["after", 1]]) {
  byId(id).addEventListener("click", () => {
    chosen.page += by;
    show();
    byId("list").scrollIntoView();
    byId("list").focus({ preventScroll: true });
  });
}
renew();
Object.assign(document.documentElement.dataset, { ready: "yes", milliseconds: Math.round(performance.now()) });
