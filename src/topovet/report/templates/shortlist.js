"use strict";
// Sorts, filters and draws the shortlist. Text is set as text, never as markup; nothing is requested.
(() => {
  const data = JSON.parse(document.getElementById("data").textContent);
  const rows = data.rows;
  const el = (id) => document.getElementById(id);
  const MARKS = { nontrivial: "●", trivial: "○", metal: "◇", undetermined: "×" };
  const SEVERITIES = [["error", "■", "error"], ["warning", "▲", "warning"], ["info", "●", "note"]];
  const DESCENDING_FIRST = new Set(["direct", "proved", "indirect", "radius", "merit", "flags"]);
  const state = { key: "rank", down: false, page: 0, size: Number(el("page-rows").value), kept: rows };

  function make(tag, attributes, ...content) {
    const node = document.createElement(tag);
    for (const [name, value] of Object.entries(attributes || {})) {
      if (value !== null && value !== undefined) node.setAttribute(name, value);
    }
    node.append(...content);
    return node;
  }

  // ---- numbers -------------------------------------------------------------------------------
  const grouped = new Intl.NumberFormat("en");
  function number(value, decimals) {
    return value.toFixed(decimals).replace(/^-(?=.*[1-9])/, "−").replace(/^-/, "");
  }
  function mev(value) {
    if (value === null) return "–";
    const size = Math.abs(value);
    if (size < 0.005) return size > 0 ? "< 0.01" : "0";
    return number(value, size >= 10 ? 0 : size >= 1 ? 1 : 2);
  }
  const points = (value) => (value === null ? "–" : number(value, 1));

  // ---- filters -------------------------------------------------------------------------------
  const fields = Object.fromEntries(
    ["text", "class", "grade", "agreement", "gap", "flag", "with", "without"].map((n) => [n, el("f-" + n)]));

  for (const row of rows) {
    row.severity = Object.fromEntries(SEVERITIES.map(([name]) => [name, 0]));
    for (const [, severity] of row.flags) row.severity[severity] += 1;
    row.hay = [row.name, row.formula, row.group ? row.group[1] : "", row.title, row.class,
      ...row.flags.map((f) => f[0])].join("\n").toLowerCase();
  }

  function choices(select, values, words) {
    const counts = new Map();
    for (const value of values) counts.set(value, (counts.get(value) || 0) + 1);
    const sorted = [...counts].sort((a, b) => b[1] - a[1] || (a[0] < b[0] ? -1 : 1));
    for (const [value, count] of sorted) {
      select.append(make("option", { value }, `${words(value)} (${grouped.format(count)})`));
    }
  }
  const blanks = (text) => text.replaceAll("-", " ");
  choices(fields.class, rows.map((r) => r.title), (t) => t);
  choices(fields.agreement, rows.map((r) => r.agreement), blanks);
  choices(fields.flag, rows.flatMap((r) => [...new Set(r.flags.map((f) => f[0]))]), blanks);

  const symbols = (text) => text.match(/[A-Za-z]+/g)?.map((s) => s[0].toUpperCase() + s.slice(1).toLowerCase()) || [];

  function passes() {
    const words = fields.text.value.toLowerCase().split(/\s+/).filter(Boolean);
    const [group, grade, agreement, flag] =
      ["class", "grade", "agreement", "flag"].map((n) => fields[n].value);
    const least = fields.gap.value === "" ? null : Number(fields.gap.value);
    const all = symbols(fields.with.value), none = symbols(fields.without.value);
    return (row) =>
      words.every((w) => row.hay.includes(w)) &&
      (group === "" || row.title === group) &&
      (grade === "" || row.grade <= grade) &&
      (agreement === "" || row.agreement === agreement) &&
      (least === null || (row.indirect !== null && row.indirect >= least)) &&
      (flag === "" || (flag === "-" ? row.severity.error + row.severity.warning === 0
        : row.flags.some((f) => f[0] === flag))) &&
      // a formula that cannot be read is neither with nor without an element
      (all.length + none.length === 0 || row.elements !== null) &&
      all.every((s) => row.elements.includes(s)) &&
      !none.some((s) => row.elements.includes(s));
  }

  // ---- order ---------------------------------------------------------------------------------
  const VALUES = {
    group: (r) => (r.group ? r.group[0] : null),
    indices: (r) => r.indices || null,
    flags: (r) => r.severity.error * 1e6 + r.severity.warning * 1e3 + r.severity.info,
  };
  const collator = new Intl.Collator("en", { numeric: true, sensitivity: "base" });

  function sorted(list, key, down) {
    const value = VALUES[key] || ((r) => r[key]);
    const keyed = list.map((row) => [value(row), row]);
    const sign = down ? -1 : 1;
    keyed.sort(([a, r], [b, s]) => {
      if (a === null || b === null) return (a === null) - (b === null) || r.rank - s.rank;
      const order = typeof a === "string" ? collator.compare(a, b) : a - b;
      return sign * order || r.rank - s.rank;
    });
    return keyed.map(([, row]) => row);
  }

  // ---- table ---------------------------------------------------------------------------------
  const body = el("rows");
  const lines = new Map(); // row of the data -> its table row, kept once it is made
  const shown = new Map(); // and back

  function flagCounts(row) {
    const cell = make("td", { class: "counts" });
    for (const [severity, mark, word] of SEVERITIES) {
      const n = row.severity[severity];
      if (n === 0) continue;
      const codes = row.flags.filter((f) => f[1] === severity).map((f) => f[0]).join(", ");
      cell.append(make("span", { class: severity, title: `${word}: ${codes}`, role: "img",
        "aria-label": `${n} ${word}${n === 1 ? "" : "s"}: ${codes}` }, `${mark} ${n}`));
    }
    if (!cell.hasChildNodes()) cell.append("–");
    return cell;
  }

  function formula(text) {
    return text.split(/(\d+)/).filter(Boolean).map((p) => (/^\d/.test(p) ? make("sub", {}, p) : p));
  }

  function tableRow(row) {
    if (!lines.has(row)) lines.set(row, newTableRow(row));
    return lines.get(row);
  }

  function newTableRow(row) {
    const toggle = make("button", { type: "button", class: "toggle", tabindex: "-1",
      "aria-expanded": "false", "aria-label": "Reasons", title: "Reasons" });
    const name = row.link ? make("a", { href: row.link, tabindex: "-1" }, row.name) : row.name;
    const line = make("tr", { class: `row ${row.tier}`, tabindex: "-1" },
      make("td", { class: "num" }, toggle, grouped.format(row.rank)),
      make("th", { scope: "row" }, name),
      make("td", { class: "formula" }, ...formula(row.formula)),
      make("td", { class: "short" }, row.group ? row.group[1] : "–"),
      make("td", { class: "class" }, make("span", { class: `mark ${row.tier}`, "aria-hidden": "true" }, MARKS[row.tier]),
        " ", row.title),
      make("td", { class: "indices" }, row.indices || "–"),
      make("td", {}, blanks(row.agreement)),
      make("td", { class: "mid" }, row.grade),
      make("td", { class: "num" }, mev(row.direct)),
      make("td", { class: "num proved" }, mev(row.proved)),
      make("td", { class: "num" }, mev(row.indirect)),
      make("td", { class: "num" }, mev(row.radius)),
      make("td", { class: "num merit" }, points(row.merit)),
      flagCounts(row));
    shown.set(line, row);
    return line;
  }

  function partBars(row) {
    const grid = make("div", { class: "parts" });
    for (const [name, got, weight, measured] of row.parts) {
      const fill = make("span", { class: "fill" });
      fill.style.width = weight > 0 ? `${(100 * got) / weight}%` : "0";
      grid.append(make("span", {}, name), make("div", { class: "track" }, fill),
        make("span", { class: "num" }, `${points(got)} of ${points(weight)}${measured ? "" : ", not measured"}`));
    }
    return grid;
  }

  function detail(row) {
    const list = make("ul", {}, ...row.reasons.map((r) => make("li", {}, r)));
    const flags = make("ul", { class: "flags" }, ...row.flags.map(([code, severity, summary]) => {
      const [, mark, word] = SEVERITIES.find(([name]) => name === severity);
      return make("li", { class: severity }, make("b", { class: "tag" }, `${mark} ${word[0].toUpperCase()}${word.slice(1)}`),
        " ", make("span", { class: "code" }, code), " ", summary);
    }));
    const cell = make("td", { colspan: "14" }, make("div", { class: "why" }, list, partBars(row)));
    if (row.flags.length) cell.append(flags);
    return make("tr", { class: "detail" }, cell);
  }

  const unfolded = new Set();

  function fold(line) {
    if (!unfolded.delete(line)) return;
    line.nextElementSibling.remove();
    line.querySelector(".toggle").setAttribute("aria-expanded", "false");
  }

  function toggleDetail(line) {
    if (unfolded.has(line)) {
      fold(line);
    } else {
      line.after(detail(shown.get(line)));
      unfolded.add(line);
      line.querySelector(".toggle").setAttribute("aria-expanded", "true");
    }
  }

  const rowsInReach = () => body.querySelectorAll("tr.row[tabindex='0']"); // of the Tab key: one

  function drawTable(everything) {
    const size = everything ? state.kept.length : state.size;
    const pages = Math.max(1, Math.ceil(state.kept.length / Math.max(1, size)));
    state.page = Math.min(state.page, pages - 1);
    const start = everything ? 0 : state.page * size;
    const part = state.kept.slice(start, start + size);
    const made = part.map(tableRow);
    for (const line of [...unfolded]) fold(line);
    for (const line of rowsInReach()) line.tabIndex = -1;
    body.replaceChildren(...made);
    if (made.length) made[0].tabIndex = 0;
    body.parentElement.parentElement.scrollTop = 0;
    el("nothing").hidden = part.length > 0;
    el("previous").disabled = everything || state.page === 0;
    el("next").disabled = everything || state.page >= pages - 1;
    const n = grouped.format(state.kept.length);
    const of = state.kept.length === rows.length ? `${n} cases` : `${n} of ${grouped.format(rows.length)} cases`;
    const range = part.length < state.kept.length
      ? `, rows ${grouped.format(start + 1)} to ${grouped.format(start + part.length)}` : "";
    el("status").textContent = of + range;
  }

  function refresh() {
    state.kept = sorted(rows.filter(passes()), state.key, state.down);
    state.page = 0;
    for (const head of document.querySelectorAll("#table th[data-key]")) {
      if (head.dataset.key === state.key) {
        head.setAttribute("aria-sort", state.down ? "descending" : "ascending");
      } else head.removeAttribute("aria-sort");
    }
    drawTable(false);
    showPoints();
  }

  // ---- plot ----------------------------------------------------------------------------------
  const SVG = "http://www.w3.org/2000/svg";
  const BOX = { width: 760, height: 380, left: 58, right: 18, top: 12, bottom: 46 };
  const SMALLEST_RADIUS = 0.1; // meV: what lies below is drawn here
  const LABELLED = 14;
  const SHAPES = {
    nontrivial: "M-4.6,0a4.6,4.6 0 1,0 9.2,0a4.6,4.6 0 1,0 -9.2,0",
    trivial: "M-4,0a4,4 0 1,0 8,0a4,4 0 1,0 -8,0",
    metal: "M0,-5L5,0L0,5L-5,0Z",
    undetermined: "M-4,-4L4,4M4,-4L-4,4",
  };
  const MANY = 400; // points, above which they are drawn smaller
  const FEW = 40; // points, up to which lesser cases are named too
  const CERTAIN = 5; // names that are shown even over points of lesser cases
  const lettered = []; // boxes of text that stands in the plot anyway
  let names = null;
  const dots = []; // [node, row, x, y]

  function svg(tag, attributes, ...content) {
    const node = document.createElementNS(SVG, tag);
    for (const [name, value] of Object.entries(attributes)) node.setAttribute(name, value);
    node.append(...content);
    return node;
  }

  function scales(plotted) {
    const radii = plotted.map((r) => Math.max(r.radius, SMALLEST_RADIUS));
    const gaps = plotted.map((r) => r.indirect);
    const extent = (list) => list.reduce(([a, b], v) => [Math.min(a, v), Math.max(b, v)], [Infinity, -Infinity]);
    const [r0, r1] = extent(radii), [g0, g1] = extent([...gaps, 0, 2 * data.kT]);
    const bend = (gap) => Math.asinh(gap / data.kT); // even in kT near 0, logarithmic far from it
    const spare = Math.max(0.12, (1 - Math.log10(r1 / r0)) / 2); // at least one decade
    const x0 = Math.log10(r0) - spare, x1 = Math.log10(r1) + spare;
    const y0 = bend(g0) - 0.25, y1 = bend(g1) + 0.25;
    const { width, height, left, right, top, bottom } = BOX;
    return {
      x: (radius) => left + ((Math.log10(Math.max(radius, SMALLEST_RADIUS)) - x0) / (x1 - x0)) * (width - left - right),
      y: (gap) => height - bottom - ((bend(gap) - y0) / (y1 - y0)) * (height - top - bottom),
      rangeX: [10 ** x0, 10 ** x1], rangeY: [Math.sinh(y0) * data.kT, Math.sinh(y1) * data.kT],
    };
  }

  function ticks([low, high], both) {
    const steps = [0.1, 0.3, 1, 3, 10, 30, 100, 300, 1000, 3000, 10000];
    const all = both ? [...steps.filter((s) => s >= 30).map((s) => -s), 0, ...steps.filter((s) => s >= 30)] : steps;
    return all.filter((t) => t >= low && t <= high);
  }

  function frame(chart, s) {
    const taken = lettered;
    const { width, height, left, right, top, bottom } = BOX;
    const inner = { x0: left, x1: width - right, y0: height - bottom, y1: top };
    if (s.rangeY[0] < 0) {
      chart.append(svg("rect", { class: "overlap", x: inner.x0, y: s.y(0), width: inner.x1 - inner.x0, height: inner.y0 - s.y(0) }));
    }
    for (const t of ticks(s.rangeX, false)) {
      chart.append(svg("line", { class: "grid", x1: s.x(t), x2: s.x(t), y1: inner.y0, y2: inner.y1 }),
        svg("text", { x: s.x(t), y: inner.y0 + 17, "text-anchor": "middle" }, String(t)));
    }
    for (const t of ticks(s.rangeY, true)) {
      chart.append(svg("line", { class: t === 0 ? "zero" : "grid", x1: inner.x0, x2: inner.x1, y1: s.y(t), y2: s.y(t) }),
        svg("text", { x: inner.x0 - 8, y: s.y(t) + 4, "text-anchor": "end" }, String(t).replace("-", "−")));
    }
    const samples = Array.from({ length: 60 }, (_, i) =>
      s.rangeX[0] * (s.rangeX[1] / s.rangeX[0]) ** (i / 59)).filter((r) => 2 * r <= s.rangeY[1]);
    const line = samples.map((r, i) => `${i ? "L" : "M"}${s.x(r).toFixed(1)},${s.y(2 * r).toFixed(1)}`).join("");
    if (line) chart.append(svg("path", { class: "limit", d: line }));
    chart.append(
      svg("line", { class: "kt", x1: inner.x0, x2: inner.x1, y1: s.y(data.kT), y2: s.y(data.kT) }),
      svg("text", { class: "kt-name", x: inner.x1 - 4, y: s.y(data.kT) - 5, "text-anchor": "end" }, `kT at 300 K, ${data.kT.toFixed(2)} meV`),
      svg("path", { class: "frame", d: `M${inner.x0},${inner.y1}V${inner.y0}H${inner.x1}` }),
      svg("text", { class: "axis-name", x: (inner.x0 + inner.x1) / 2, y: height - 6, "text-anchor": "middle" }, "Robustness radius, half of the direct gap (meV)"),
      svg("text", { class: "axis-name", transform: `translate(14 ${(inner.y0 + inner.y1) / 2}) rotate(-90)`, "text-anchor": "middle" }, "Indirect gap (meV)"));
    if (s.rangeY[0] < -data.kT) {
      chart.append(svg("text", { x: inner.x1 - 4, y: inner.y0 - 7, "text-anchor": "end" }, "below 0: bands overlap, the bulk conducts"));
      taken.push([inner.x1 - 240, inner.y0 - 19, inner.x1, inner.y0 - 2]);
    }
    if (line) {
      const at = samples[Math.floor(0.5 * samples.length)]; // no point can lie on that side of it
      const [x, y] = [Math.max(s.x(at) - 12, inner.x0 + 125), s.y(2 * at) - 8];
      chart.append(svg("text", { class: "over", x, y, "text-anchor": "end" }, "indirect = direct gap"));
      taken.push([x - 125, y - 12, x, y + 3]);
    }
    taken.push([inner.x1 - 170, s.y(data.kT) - 17, inner.x1, s.y(data.kT) - 1]);
  }

  function drawPlot() {
    const plotted = rows.filter((r) => r.radius !== null && r.indirect !== null);
    const left = rows.length - plotted.length;
    const small = plotted.filter((r) => r.radius < SMALLEST_RADIUS).length;
    el("unplotted").textContent = [
      left ? `${grouped.format(left)} case${left === 1 ? "" : "s"} without a computed gap not drawn.` : "",
      small ? `${grouped.format(small)} with a radius below ${SMALLEST_RADIUS} meV drawn at ${SMALLEST_RADIUS} meV.` : "",
    ].filter(Boolean).join(" ");
    if (plotted.length === 0) {
      el("plot").hidden = true;
      return;
    }
    const chart = svg("svg", { viewBox: `0 0 ${BOX.width} ${BOX.height}`, role: "group",
      "aria-label": "Scatter plot of the indirect gap against the robustness radius; the table below holds the same numbers" });
    const s = scales(plotted);
    frame(chart, s);
    const layer = svg("g", { class: plotted.length > MANY ? "many" : "" });
    for (const row of plotted.slice().reverse()) { // the best on top
      const [x, y] = [s.x(row.radius), s.y(row.indirect)];
      const node = svg(row.link ? "a" : "g", { class: `point ${row.tier}`, tabindex: "-1",
        transform: `translate(${x.toFixed(1)} ${y.toFixed(1)})` }, svg("path", { d: SHAPES[row.tier] }));
      if (row.link) node.setAttribute("href", row.link);
      node.setAttribute("aria-label", `${row.name}, ${row.title}`);
      dots.push([node, row, x, y]);
      layer.append(node);
    }
    dots.reverse();
    names = svg("g", {});
    chart.append(layer, names);
    el("chart").append(chart);
    plotTips(layer);
  }

  function plotTips(layer) {
    const byNode = new Map(dots.map((d) => [d[0], d]));
    const tip = make("div", { class: "tip", hidden: "" });
    el("plot").append(tip);
    layer.addEventListener("pointerover", (event) => {
      const found = byNode.get(event.target.closest(".point"));
      if (!found) return;
      const [node, row] = found;
      tip.replaceChildren(make("b", {}, row.name), `${row.title}${row.indices ? `, ${row.indices}` : ""}`, make("br"),
        `rank ${row.rank}, grade ${row.grade}, indirect gap ${mev(row.indirect)} meV, radius ${mev(row.radius)} meV`);
      tip.hidden = false;
      const [at, home] = [node.getBoundingClientRect(), el("plot").getBoundingClientRect()];
      const room = home.width - tip.offsetWidth;
      tip.style.left = `${Math.max(0, Math.min(room, at.left - home.left + 14))}px`;
      tip.style.top = `${at.bottom - home.top + 8}px`;
    });
    layer.addEventListener("pointerout", () => { tip.hidden = true; });
  }

  function showPoints() {
    if (names === null) return;
    const kept = new Set(state.kept);
    for (const [node, row] of dots) {
      if (kept.has(row)) node.removeAttribute("display");
      else node.setAttribute("display", "none");
    }
    nameTheBest(dots.filter(([, row]) => kept.has(row)));
  }

  // Names beside the best of the points in view, where they cover neither each other nor, but for
  // the very best, any point.
  function nameTheBest(visible) {
    names.replaceChildren();
    const best = visible.filter(([, row]) => row.tier === "nontrivial");
    const others = visible.filter(([, row]) => row.tier === "trivial" || row.tier === "metal");
    const listed = (best.length && visible.length > FEW ? best : [...best, ...others]).slice(0, 60);
    const boxes = (list) => list.slice(0, 1500).map(([, , x, y]) => [x - 5, y - 5, x + 5, y + 5]);
    const points = boxes(visible);
    const firm = [...lettered, ...boxes(listed.slice(0, CERTAIN))];
    const clear = ([a, b, c, d], others) => a > BOX.left && c < BOX.width - 4 && b > 2 &&
      d < BOX.height - BOX.bottom && !others.some(([e, f, g, h]) => a < g && c > e && b < h && d > f);
    let shownNames = 0;
    for (const [i, [, row, x, y]] of listed.entries()) {
      if (shownNames === LABELLED) break;
      const text = row.name.length > 22 ? `${row.name.slice(0, 21)}…` : row.name;
      const wide = 6.2 * text.length;
      const spots = [[x + 8, y + 4, "start"], [x - 8, y + 4, "end"], [x, y - 9, "middle"], [x, y + 18, "middle"]]
        .map(([tx, ty, anchor]) => {
          const start = anchor === "start" ? tx : anchor === "end" ? tx - wide : tx - wide / 2;
          return { tx, ty, anchor, box: [start, ty - 10, start + wide, ty + 3] };
        });
      const spot = spots.find(({ box }) => clear(box, firm) && clear(box, points)) ||
        (i < CERTAIN && spots.find(({ box }) => clear(box, firm)));
      if (!spot) continue;
      firm.push(spot.box);
      names.append(svg("text", { class: "name", x: spot.tx, y: spot.ty, "text-anchor": spot.anchor }, text));
      shownNames += 1;
    }
  }

  // ---- keys, clicks, views -------------------------------------------------------------------
  function focusRow(line) {
    if (!line) return;
    for (const other of rowsInReach()) other.tabIndex = -1;
    line.tabIndex = 0;
    line.focus();
  }
  function neighbour(line, way) {
    let next = line[way];
    while (next && !next.classList.contains("row")) next = next[way];
    return next;
  }
  body.addEventListener("keydown", (event) => {
    const line = event.target;
    if (!line.classList.contains("row") || event.altKey || event.ctrlKey || event.metaKey) return;
    const lines = body.querySelectorAll("tr.row");
    const actions = {
      ArrowDown: () => focusRow(neighbour(line, "nextElementSibling")),
      ArrowUp: () => focusRow(neighbour(line, "previousElementSibling")),
      Home: () => focusRow(lines[0]),
      End: () => focusRow(lines[lines.length - 1]),
      Enter: () => line.querySelector("th a")?.click(),
      " ": () => toggleDetail(line),
    };
    if (!(event.key in actions)) return;
    event.preventDefault();
    actions[event.key]();
  });
  body.addEventListener("click", (event) => {
    const toggle = event.target.closest(".toggle");
    if (toggle) toggleDetail(toggle.closest("tr"));
  });
  function mark(event, on) {
    const row = shown.get(event.target.closest("tr.row"));
    const dot = row && dots.find((d) => d[1] === row);
    if (dot) dot[0].classList.toggle("here", on);
  }
  for (const [name, on] of [["mouseover", true], ["mouseout", false], ["focusin", true], ["focusout", false]]) {
    body.addEventListener(name, (event) => mark(event, on));
  }

  document.querySelector("#table thead").addEventListener("click", (event) => {
    const key = event.target.closest("th")?.dataset.key;
    if (!key || !event.target.closest("button")) return;
    state.down = state.key === key ? !state.down : DESCENDING_FIRST.has(key);
    state.key = key;
    refresh();
  });
  el("filters").addEventListener("input", refresh);
  el("clear").addEventListener("click", () => { el("filters").reset(); refresh(); });
  el("filters").addEventListener("submit", (event) => event.preventDefault());
  el("previous").addEventListener("click", () => { state.page -= 1; drawTable(false); });
  el("next").addEventListener("click", () => { state.page += 1; drawTable(false); });
  el("page-rows").addEventListener("change", (event) => {
    state.size = Number(event.target.value);
    state.page = 0;
    drawTable(false);
  });
  window.addEventListener("beforeprint", () => drawTable(true));
  window.addEventListener("afterprint", () => drawTable(false));

  function showView() {
    const wanted = document.getElementById(location.hash.slice(1));
    const view = wanted?.closest(".view") || el("ranking");
    for (const other of document.querySelectorAll(".view")) other.hidden = other !== view;
    for (const tab of document.querySelectorAll(".tabs a")) {
      if (tab.getAttribute("href") === `#${view.id}`) tab.setAttribute("aria-current", "page");
      else tab.removeAttribute("aria-current");
    }
  }
  window.addEventListener("hashchange", () => { showView(); window.scrollTo(0, 0); });

  document.documentElement.classList.add("scripted");
  el("table").classList.toggle("unproved", rows.every((r) => r.proved === null));
  el("page-rows").closest(".pager").hidden = rows.length <= data.pageRows[0];
  drawPlot();
  showView();
  refresh();
})();
