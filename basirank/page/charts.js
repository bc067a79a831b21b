// Elements and pictures. Every text goes in as a text node and every number as an attribute: nothing is parsed as HTML.

const SVG = "http://www.w3.org/2000/svg";

function put(element, attributes, children) {
  for (const [name, value] of Object.entries(attributes)) {
    if (value !== null && value !== undefined) element.setAttribute(name, value);
  }
  element.append(...children.filter((child) => child !== null && child !== undefined));
  return element;
}
const el = (name, attributes = {}, ...children) => put(document.createElement(name), attributes, children);
const svg = (name, attributes = {}, ...children) => put(document.createElementNS(SVG, name), attributes, children);
const byId = (id) => document.getElementById(id);
const fixed = (value, digits = 2) => (value === null || value === undefined ? "" : (Math.round(value * 10 ** digits) / 10 ** digits + 0).toFixed(digits));
const signed = (value, digits = 2) => (Number(fixed(value, digits)) > 0 ? "+" : "") + fixed(value, digits).replace("-", "\u2212");
const percent = (share) => `${fixed(100 * share, 1)} %`;

// A structure from its geometry (see report.py): strokes, wedges, letters, marks of sites. `part` is the group for shades.
function picture(drawn, label, scale, width, height, small) {
  const [left, top, wide, high] = drawn.box;
  const ratio = Math.min(scale, width / wide, height / high);
  const root = svg("svg", {
    viewBox: drawn.box.join(" "), width: Math.round(wide * ratio), height: Math.round(high * ratio), role: "img", "aria-label": label,
  });
  root.append(svg("g", { class: "shades" }), svg("path", { class: "b-line", d: drawn.lines }));
  if (drawn.wedges) root.append(svg("path", { class: "b-wedge", d: drawn.wedges }));
  for (const [x, y, text, size] of drawn.letters) root.append(svg("text", { class: "b-letter", x, y, "font-size": size }, text));
  for (const mark of drawn.marks) {
    if (small && mark.minor) continue;
    const r = drawn.radius, { x, y } = mark;
    root.append(mark.kind === "base"
      ? svg("circle", { class: "b-mark", cx: x, cy: y, r })
      : svg("rect", { class: "b-mark", x: x - r + 1, y: y - r + 1, width: 2 * r - 2, height: 2 * r - 2 }));
    if (mark.lead) root.append(svg("path", { class: "b-lead", d: mark.lead }));
    root.append(svg("text", { class: "b-value", x: mark.at[0], y: mark.at[1] }, mark.label));
  }
  return root;
}

// Shade atoms of a picture by what they add: full rim and larger where a constant is raised, dashed rim where lowered.
function shade(root, drawn, terms) {
  const sums = new Map();
  for (const term of terms) for (const atom of term.atoms) sums.set(atom, (sums.get(atom) ?? 0) + term.value / term.atoms.length);
  const circles = [...sums].filter(([atom]) => drawn.atoms[atom]).map(([atom, value]) => svg("circle", {
    class: value > 0 ? "b-up" : "b-down", cx: drawn.atoms[atom][0], cy: drawn.atoms[atom][1], r: Math.min(4 + 7 * Math.sqrt(Math.abs(value)), 22),
  }));
  root.querySelector(".shades").replaceChildren(...circles);
}

const linear = (from, to, start, end) => (value) => start + ((value - from) / (to - from)) * (end - start);
function steps(from, to, count) {
  const step = [1, 2, 5, 10].find((size) => (to - from) / size <= count) ?? 20;
  const found = [];
  for (let value = Math.ceil(from / step) * step; value <= to; value += step) found.push(value);
  return found;
}

// The common scale of all intervals, for the heading of the column.
function axis([from, to]) {
  const x = linear(from, to, 6, 202);
  return svg("svg", { viewBox: "0 0 208 16", "aria-hidden": "true" },
    ...steps(from, to, 7).map((value) => svg("text", { class: "tick-text", x: x(value), y: 12 }, String(value).replace("-", "\u2212"))));
}

// One interval on the common scale: bar, dot, and the pH as an upright line.
function intervalBar(row, [from, to], ph) {
  const x = linear(from, to, 6, 202), open = row.support === "supported" ? "" : " open";
  const hold = (value) => Math.min(Math.max(value, from), to);
  return svg("svg", { viewBox: "0 0 208 22", "aria-hidden": "true" },
    ...steps(from, to, 7).map((value) => svg("path", { class: "tick", d: `M${x(value)} 0V22` })),
    ph >= from && ph <= to ? svg("path", { class: "at-ph", d: `M${x(ph)} 0V22` }) : null,
    svg("path", { class: "range" + open, d: `M${x(row.low === null ? from : hold(row.low))} 11H${x(row.high === null ? to : hold(row.high))}` }),
    svg("circle", { class: "dot" + open, cx: x(hold(row.pkah)), cy: 11, r: 4 }));
}

function frame(width, height, label) {
  return svg("svg", { viewBox: `0 0 ${width} ${height}`, role: "img", "aria-label": label });
}

// Counts per unit of pKaH: supported filled, extrapolated hatched on top.
function histogram(rows) {
  const valued = rows.filter((row) => row.pkah !== null);
  const bins = new Map();
  for (const row of valued) {
    const bin = bins.get(Math.floor(row.pkah)) ?? [0, 0];
    bin[row.support === "supported" ? 0 : 1] += 1;
    bins.set(Math.floor(row.pkah), bin);
  }
  const from = Math.min(0, ...bins.keys()), to = Math.max(13, ...bins.keys()) + 1;
  const most = Math.max(1, ...[...bins.values()].map(([a, b]) => a + b));
  const x = linear(from, to, 12, 388), y = linear(0, most, 132, 18);
  const mode = [...bins].sort((a, b) => b[1][0] + b[1][1] - a[1][0] - a[1][1])[0];
  const root = frame(400, 156, valued.length
    ? `${valued.length} compounds with a pKaH; most, ${mode[1][0] + mode[1][1]}, lie between ${mode[0]} and ${mode[0] + 1}` : "no compound with a pKaH");
  root.append(svg("defs", {}, svg("pattern", { id: "hatch", width: 5, height: 5, patternUnits: "userSpaceOnUse", patternTransform: "rotate(45)" },
    svg("path", { class: "hatch-line", d: "M0 0V5" }))));
  for (const value of steps(from, to, 9)) root.append(svg("text", { class: "tick-text", x: x(value), y: 150 }, String(value).replace("-", "\u2212")));
  root.append(svg("path", { class: "tick", d: "M12 132.5H388" }));
  for (const [bin, [supported, extrapolated]] of bins) {
    const left = x(bin) + 1.5, wide = x(bin + 1) - x(bin) - 3, total = supported + extrapolated;
    if (supported) root.append(svg("rect", { class: "column", x: left, width: wide, y: y(supported), height: 132 - y(supported) }));
    if (extrapolated) root.append(svg("rect", { class: "column hatch", x: left, width: wide, y: y(total), height: y(supported) - y(total) }));
    root.append(svg("text", { class: "tick-text", x: left + wide / 2, y: y(total) - 4 }, String(total)));
  }
  return root;
}

const meanCurve = (rows, grid) => {
  const curves = rows.filter((row) => row.curve).map((row) => row.curve);
  return curves.length ? grid.map((_, n) => curves.reduce((sum, curve) => sum + parseInt(curve.slice(2 * n, 2 * n + 2), 16), 0) / (255 * curves.length)) : null;
};

// Mean protonated share against pH: the rows that are shown, and the whole list dashed where that differs.
function shareCurve(whole, chosen, grid, ph) {
  const x = linear(grid[0], grid.at(-1), 34, 388), y = linear(0, 1, 132, 18);
  const path = (curve) => "M" + curve.map((value, n) => `${x(grid[n]).toFixed(1)} ${y(value).toFixed(1)}`).join("L");
  const at = chosen && chosen[grid.reduce((best, value, n) => (Math.abs(value - ph) < Math.abs(grid[best] - ph) ? n : best), 0)];
  const root = frame(400, 156, chosen ? `At pH ${ph} about ${percent(at)} of the molecules of the list are protonated` : "no compound with a base site");
  for (const share of [0, 0.5, 1]) {
    root.append(svg("path", { class: "tick", d: `M34 ${y(share)}H388` }),
      svg("text", { class: "tick-text", x: 16, y: y(share) + 4 }, `${100 * share}%`));
  }
  for (const value of steps(grid[0], grid.at(-1), 8)) root.append(svg("text", { class: "tick-text", x: x(value), y: 150 }, String(value)));
  if (ph >= grid[0] && ph <= grid.at(-1)) root.append(svg("path", { class: "at-ph", d: `M${x(ph)} 18V132` }), svg("text", { class: "tick-text", x: x(ph), y: 12 }, `pH ${ph}`));
  if (whole && whole !== chosen) root.append(svg("path", { class: "all", d: path(whole) }));
  if (chosen) root.append(svg("path", { class: "chosen", d: path(chosen) }));
  return root;
}

// One step of a waterfall: where the running sum stood, and where a term takes it.
function waterfallBar(before, after, from, to, kind) {
  const x = linear(from, to, 6, 250);
  const root = svg("svg", { viewBox: "0 0 256 26", preserveAspectRatio: "none", "aria-hidden": "true" });
  if (kind !== "total") root.append(svg("path", { class: "tick", d: `M${x(after)} 4V26` }));
  if (kind !== "parent") root.append(svg("path", { class: "tick", d: `M${x(before)} 0V22` }));
  if (kind === "term") {
    root.append(svg("rect", { class: after >= before ? "b-up" : "b-down", x: Math.min(x(before), x(after)), width: Math.max(Math.abs(x(after) - x(before)), 1), y: 5, height: 16 }));
  } else {
    root.append(svg("circle", { class: "dot", cx: x(after), cy: 13, r: 4.5 }));
  }
  return root;
}
