"use strict";
(() => {
  const charts = JSON.parse(document.getElementById("charts").textContent);
  const INK = "#1d2430", QUIET = "#5a6472", LINE = "#d9dee5", ACCENT = "#a4460d";
  // Dark blue over grey to ochre: told apart without red and green, and by lightness alone on grey paper.
  const RAMP = [[18, 58, 107], [63, 86, 122], [103, 112, 128], [142, 137, 119], [183, 163, 98], [214, 189, 90]];
  const SERIES = ["#123a6b", "#a4460d", "#7d7f86", "#c29a1f", "#4f7fb5", "#5b2c0a", "#000000", "#9db4cf"];
  const DASHES = ["solid", "dash", "dot", "dashdot", "longdash", "longdashdot"];
  const SIGNS = ["circle", "diamond", "square", "triangle-up", "cross", "x"];
  const MOST_BEHIND = 24, FEW = 30, CIRCLES = 7, MANY = 4;
  // The library would offer to send a chart to its maker's server: never from here; the page's policy forbids it too.
  const CONFIG = {responsive: true, displaylogo: false, displayModeBar: matchMedia("(hover: none), (max-width: 40rem)").matches ? false : "hover", showSendToCloud: false, showEditInChartStudio: false, plotlyServerURL: "",
    modeBarButtonsToRemove: ["sendChartToCloud", "sendDataToCloud", "lasso2d", "select2d", "autoScale2d", "zoomIn2d", "zoomOut2d"]};

  const ramp = (share) => {
    const at = share * (RAMP.length - 1), low = Math.min(Math.floor(at), RAMP.length - 2), rest = at - low;
    return `rgb(${RAMP[low].map((c, k) => Math.round(c + (RAMP[low + 1][k] - c) * rest)).join(",")})`;
  };
  const axisName = (key) => key.unit ? `${key.name}, ${key.unit}` : key.name;
  const plain = (text) => String(text).replaceAll("&", "&amp;").replaceAll("<", "&lt;").replaceAll(">", "&gt;");
  const mode = (count) => count <= FEW ? "lines+markers" : "lines";
  const evenly = (list, most) => list.length <= most ? list :
    Array.from({length: most}, (_, k) => list[Math.round(k * (list.length - 1) / (most - 1))]);

  function layout(title, more) {
    return {
      title: {text: plain(title).replaceAll("\n", "<br>"), x: 0, xref: "paper", xanchor: "left", yref: "container", y: .97, font: {size: 13.5, color: INK}},
      font: {family: getComputedStyle(document.body).fontFamily, size: 12, color: INK}, paper_bgcolor: "#ffffff", plot_bgcolor: "#ffffff",
      margin: {l: 62, r: 14, t: 40, b: 48}, separators: ".", showlegend: false, hovermode: "closest", autosize: true,
      legend: {orientation: "h", x: 0, xref: "paper", y: 0, yref: "container", yanchor: "bottom", font: {size: 11.5}}, ...more,
    };
  }
  const axis = (title, more) => ({title: {text: plain(title), standoff: 8}, gridcolor: LINE, linecolor: QUIET, zerolinecolor: LINE, ticks: "outside",
    tickcolor: QUIET, automargin: true, ...more});
  const draw = (element, traces, how) => Plotly.react(element, traces, how, CONFIG);

  // Lines that stand as they are: calibration, levels, what was read over the run.
  function drawLines(element, chart) {
    const traces = chart.lines.map((line, k) => ({
      type: "scatter", name: plain(line.name), x: line.x, y: line.y, mode: mode(line.x.length),
      line: {color: SERIES[k % SERIES.length], width: 1.8, dash: DASHES[k % DASHES.length]}, marker: {size: 5, symbol: SIGNS[k % SIGNS.length]},
      hovertemplate: `${plain(line.name)}<br>%{x} ${plain(chart.x.split(", ")[1] || "")}<br>%{y:.5~g} ${plain(chart.y)}<extra></extra>`,
    }));
    const ends = chart.lines.flatMap((line) => line.x).filter((x) => x !== null);
    const across = [Math.min(...ends), Math.max(...ends)];
    for (const mark of chart.marks) {
      traces.push({type: "scatter", name: plain(mark.name), x: across, y: [mark.y, mark.y], mode: across[0] === across[1] ? "markers" : "lines",
        line: {color: INK, width: 1.2, dash: "dash"}, marker: {symbol: "line-ew-open", size: 30, color: INK},
        hovertemplate: `${plain(mark.name)} %{y:.5~g} ${plain(chart.y)}<extra></extra>`});
    }
    element.classList.toggle("mid", traces.length > MANY);
    draw(element, traces, layout(chart.title, {showlegend: traces.length > 1, xaxis: axis(chart.x), yaxis: axis(chart.y), margin: {l: 62, r: 14, t: 40, b: traces.length > MANY ? 112 : traces.length > 1 ? 78 : 48}}));
  }

  // Reflections become normalised impedances: z = (1 + G) / (1 - G).
  function impedance(re, im) {
    const d = (1 - re) ** 2 + im ** 2;
    return re === null || d === 0 || re ** 2 + im ** 2 >= 1 ? [null, null] : [(1 - re ** 2 - im ** 2) / d, 2 * im / d];
  }
  function smithTrace(polar, rows, more) {
    const z = rows.map((row) => impedance(polar.re[row], polar.im[row]));
    return {type: "scattersmith", real: z.map((one) => one[0]), imag: z.map((one) => one[1]), hoverinfo: "skip", ...more};
  }
  function circles(polar, rows) {
    const real = [], imag = [];
    for (const row of evenly(rows, CIRCLES)) {
      for (let k = 0; k <= 36 && polar.re[row] !== null; k += 1) {
        const z = impedance(polar.re[row] + polar.bound[row] * Math.cos(k * Math.PI / 18), polar.im[row] + polar.bound[row] * Math.sin(k * Math.PI / 18));
        real.push(z[0]); imag.push(z[1]);
      }
      real.push(null); imag.push(null);
    }
    return {type: "scattersmith", name: "bound: S22 lies inside", real, imag, mode: "lines", line: {color: ACCENT, width: 1, dash: "dot"}, hoverinfo: "skip"};
  }

  // Power that a passive load g takes: |b|^2 (1 - |g|^2), b = ((1 - s g)* B + t g* B*) / (|1 - s g|^2 - |t g|^2).
  function delivered(device, re, im) {
    const {b, s, t} = device, u = [1 - s[0] * re + s[1] * im, -s[0] * im - s[1] * re], v = [t[0] * re + t[1] * im, t[1] * re - t[0] * im];
    const wave = [u[0] * b[0] + u[1] * b[1] + v[0] * b[0] + v[1] * b[1], u[0] * b[1] - u[1] * b[0] + v[1] * b[0] - v[0] * b[1]];
    const under = u[0] ** 2 + u[1] ** 2 - v[0] ** 2 - v[1] ** 2;
    return (wave[0] ** 2 + wave[1] ** 2) / under ** 2 * (1 - re ** 2 - im ** 2);
  }

  class Explorer {
    constructor(element, chart) {
      Object.assign(this, {element, chart, along: chart.keys.findLastIndex((key) => key.values.length > 1)});
      if (this.along < 0) this.along = chart.keys.length - 1;
      this.chosen = chart.keys.map((key) => key.values.length - 1);
      const frequency = chart.keys.findIndex((key) => key.unit === "MHz");
      if (frequency >= 0) this.chosen[frequency] = Math.floor((chart.keys[frequency].values.length - 1) / 2);
      this.count = chart.keys[0].of.length;
      const there = this.rows(this.chosen).map((row) => chart.keys[this.along].of[row]);
      if (there.length && !there.includes(this.chosen[this.along])) this.chosen[this.along] = there[Math.floor((there.length - 1) / 2)];
      this.controls();
      this.draw();
    }
    varied() { return this.chart.keys.map((key, k) => k).filter((k) => this.chart.keys[k].values.length > 1); }
    controls() {
      const form = this.element.querySelector(".controls"), varied = this.varied();
      form.addEventListener("submit", (event) => event.preventDefault());
      if (varied.length < 2) return;
      form.hidden = false;
      const pick = (text, entries, value, take) => {
        const label = document.createElement("label"), select = document.createElement("select");
        entries.forEach(([number, name]) => select.add(new Option(name, number)));
        select.value = value;
        select.addEventListener("change", () => { take(Number(select.value)); this.show(); this.draw(); });
        label.append(`${text} `, select);
        form.append(label);
        return label;
      };
      pick("Show against", varied.map((k) => [k, this.chart.keys[k].name]), this.along, (k) => { this.along = k; });
      this.pickers = varied.map((k) => [k, pick("", this.chart.keys[k].texts.map((text, n) => [n, text]), this.chosen[k], (n) => { this.chosen[k] = n; })]);
      this.show();
    }
    show() { for (const [k, label] of this.pickers) label.firstChild.textContent = `${k === this.along ? "with a ring at" : "at"} ${this.chart.keys[k].name} `; }
    rows(chosen) {
      const keys = this.chart.keys, found = [];
      for (let row = 0; row < this.count; row += 1) {
        if (keys.every((key, k) => k === this.along || key.of[row] === chosen[k])) found.push(row);
      }
      return found.sort((a, b) => keys[this.along].of[a] - keys[this.along].of[b]);
    }
    behind() {
      // The other values of the first key that is not shown along: thin lines, dark to light.
      const first = this.varied().find((k) => k !== this.along);
      if (first === undefined) return {key: null, families: []};
      const all = this.chart.keys[first].values.map((_, n) => n), most = Math.max(all.length - 1, 1);
      const families = evenly(all, MOST_BEHIND).map((n) => ({text: this.chart.keys[first].texts[n], colour: ramp(n / most), rows: this.rows(this.chosen.map((c, k) => k === first ? n : c))}));
      return {key: this.chart.keys[first], families};
    }
    at() {
      return this.chart.keys.filter((key, k) => k !== this.along).map((key) => `${key.name} ${key.texts[this.chosen[this.chart.keys.indexOf(key)]]}`).join(", ");
    }
    draw() {
      const rows = this.rows(this.chosen), family = this.behind(), key = this.chart.keys[this.along], at = this.at();
      const mark = rows.find((row) => key.of[row] === this.chosen[this.along]);
      const view = {rows, family, key, at, mark, x: rows.map((row) => key.values[key.of[row]])};
      this.legend(view);
      for (const figure of this.element.querySelectorAll("figure")) {
        if (figure.dataset.part === "smith") this.smith(figure, view);
        if (figure.dataset.part === "plane") this.plane(figure, view);
        if (figure.dataset.part === "polar") this.polar(figure, view);
        if (figure.dataset.part === "loads") this.loads(figure, view);
        if (figure.dataset.part === "panel") this.panel(figure, this.chart.panels[Number(figure.dataset.panel)], view);
      }
    }
    legend(view) {
      const text = this.element.querySelector(".legend"), {key, families} = view.family;
      text.hidden = !view.at;
      text.textContent = `Thick: ${view.at}. Ring: ${view.key.name} ${view.key.texts[this.chosen[this.along]]}. `;
      if (families.length < 2) return;
      const bar = document.createElement("span");
      bar.className = "ramp";
      bar.style.background = `linear-gradient(to right, ${[0, .2, .4, .6, .8, 1].map(ramp).join(",")})`;
      text.append(`Thin: the other values of ${key.name}, ${families[0].text} `, bar, ` ${families.at(-1).text}.`);
    }
    place(view, row) { return `${plain(view.key.name)} ${plain(view.key.texts[view.key.of[row]])}${view.at ? "<br>" + plain(view.at) : ""}`; }
    smith(figure, view) {
      const {output_reflection: own, optimum_load_extrapolated: load} = this.chart.smith, traces = [];
      const say = (polar, name) => view.rows.map((row) => {
        const m = Math.hypot(polar.re[row], polar.im[row]), p = Math.atan2(polar.im[row], polar.re[row]) * 180 / Math.PI;
        const bound = polar.bound ? `<br>S22 within ${polar.bound[row]}` : "";
        return polar.re[row] === null ? "" : `${name}<br>${m.toFixed(4)} at ${p.toFixed(1)} deg${bound}<br>${this.place(view, row)}`;
      });
      const main = (polar, name, colour, dash, symbol) => smithTrace(polar, view.rows, {name, text: say(polar, name), hovertemplate: "%{text}<extra></extra>", hoverinfo: "text",
        mode: mode(view.rows.length), line: {color: colour, width: 2.6, dash}, marker: {size: 6, symbol}, connectgaps: false});
      if (own) {
        for (const one of view.family.families) traces.push(smithTrace(own, one.rows, {mode: mode(one.rows.length), line: {color: one.colour, width: 1}, marker: {size: 3}, showlegend: false}));
        if (own.bound && view.rows.length) traces.push(circles(own, view.rows));
        traces.push(main(own, "output reflection", ACCENT, "solid", "circle"));
      }
      if (own && view.mark !== undefined) traces.push(smithTrace(own, [view.mark], {mode: "markers", showlegend: false, marker: {size: 13, symbol: "circle-open", color: INK, line: {width: 2}}}));
      if (load) traces.push(main(load, "optimum load (extrapolated)", INK, "dash", "diamond-open"));
      const beyond = own ? view.rows.filter((row) => own.re[row] !== null && Math.hypot(own.re[row], own.im[row]) >= 1).length : 0;
      const title = `Output reflection against ${view.key.name}${beyond ? ` (${beyond} at 1 or above are outside)` : ""}`;
      const quietAxis = {gridcolor: LINE, linecolor: QUIET, tickfont: {size: 10, color: QUIET}};
      draw(figure, traces, layout(title, {showlegend: true, margin: {l: 24, r: 24, t: 52, b: 68},
        smith: {bgcolor: "#ffffff", realaxis: {...quietAxis, tickvals: [0.2, 0.5, 1, 2, 5]}, imaginaryaxis: {...quietAxis, tickvals: [-5, -2, -1, -0.5, -0.2, 0, 0.2, 0.5, 1, 2, 5]}}}));
    }
    plane(figure, view) {
      const own = this.chart.smith.output_reflection, pick = (rows) => ({x: rows.map((row) => own.re[row]), y: rows.map((row) => own.im[row])});
      const traces = view.family.families.map((one) => ({type: "scatter", ...pick(one.rows), mode: mode(one.rows.length), line: {color: one.colour, width: 1}, marker: {size: 3}, hoverinfo: "skip"}));
      const shapes = !own.bound ? [] : evenly(view.rows, CIRCLES).filter((row) => own.re[row] !== null && own.bound[row] !== null).map((row) => ({type: "circle", line: {color: ACCENT, width: 1, dash: "dot"},
        x0: own.re[row] - own.bound[row], x1: own.re[row] + own.bound[row], y0: own.im[row] - own.bound[row], y1: own.im[row] + own.bound[row]}));
      traces.push({type: "scatter", ...pick(view.rows), mode: mode(view.rows.length), line: {color: ACCENT, width: 2.6}, marker: {size: 6}, text: view.rows.map((row) => this.place(view, row)),
        hovertemplate: "%{x:.4f} %{y:+.4f} j<br>%{text}<extra></extra>"});
      if (view.mark !== undefined) traces.push({type: "scatter", ...pick([view.mark]), mode: "markers", hoverinfo: "skip", marker: {size: 13, symbol: "circle-open", color: INK, line: {width: 2}}});
      draw(figure, traces, layout(`Close-up${shapes.length ? "; S22 lies inside the dotted circles" : ""}`, {shapes, xaxis: axis("real part"), yaxis: axis("imaginary part", {scaleanchor: "x"})}));
    }
    loads(figure, view) {
      const n = 121, side = Array.from({length: n}, (_, k) => -1 + 2 * k / (n - 1)), row = view.mark, t = this.chart.polar, {output_reflection: s, optimum_load_extrapolated: best} = this.chart.smith;
      const where = [view.at, `${view.key.name} ${view.key.texts[this.chosen[this.along]]}`].filter(Boolean).join(", "), title = "Power into other loads, dB (extrapolated)";
      const range = {range: [-1.05, 1.05], zeroline: true}, edge = side.map((_, k) => 2 * Math.PI * k / (n - 1));
      const traces = [{type: "scatter", x: edge.map(Math.cos), y: edge.map(Math.sin), mode: "lines", line: {color: QUIET, width: 1}, hoverinfo: "skip"}];
      const known = row !== undefined && this.chart.source.re[row] !== null;
      if (known) {
        const angle = t.deg[row] * Math.PI / 180, device = {b: [this.chart.source.re[row], this.chart.source.im[row]], s: [s.re[row], s.im[row]], t: [t.r[row] * Math.cos(angle), t.r[row] * Math.sin(angle)]};
        const most = delivered(device, best.re[row], best.im[row]);
        const z = side.map((y) => side.map((x) => x * x + y * y < 1 ? 10 * Math.log10(delivered(device, x, y) / most) : null));
        traces.push({type: "contour", x: side, y: side, z, showscale: false, contours: {coloring: "none", showlabels: true, start: -3, end: -0.5, size: 0.5, labelfont: {size: 11, color: INK}}, line: {color: SERIES[0], width: 1.3},
          hovertemplate: "load %{x:.2f} %{y:+.2f} j<br>%{z:.2f} dB<extra></extra>"});
        traces.push({type: "scatter", x: [best.re[row]], y: [best.im[row]], mode: "markers", marker: {size: 10, symbol: "diamond-open", color: INK, line: {width: 2}},
          hovertemplate: "optimum load (extrapolated)<br>%{x:.3f} %{y:+.3f} j<extra></extra>"});
      }
      draw(figure, traces, layout(`${title}\n${where}${known ? "" : row === undefined ? ": not read" : ": no optimum load"}`, {margin: {l: 62, r: 14, t: 58, b: 48}, xaxis: axis("real part of the load", range), yaxis: axis("imaginary part", {...range, scaleanchor: "x"})}));
    }
    polar(figure, view) {
      const t = this.chart.polar, pick = (rows) => ({r: rows.map((row) => t.r[row]), theta: rows.map((row) => t.deg[row])});
      const traces = view.family.families.map((one) => ({type: "scatterpolar", ...pick(one.rows), mode: mode(one.rows.length), line: {color: one.colour, width: 1}, marker: {size: 3}, hoverinfo: "skip"}));
      traces.push({type: "scatterpolar", ...pick(view.rows), mode: mode(view.rows.length), line: {color: ACCENT, width: 2.6}, marker: {size: 6},
        text: view.rows.map((row) => this.place(view, row)), hovertemplate: "T22 %{r:.4f} at %{theta:.1f} deg<br>%{text}<extra></extra>"});
      const quietAxis = {gridcolor: LINE, linecolor: QUIET, tickfont: {size: 10, color: QUIET}};
      draw(figure, traces, layout(`T22 against ${view.key.name}`, {margin: {l: 44, r: 44, t: 62, b: 34},
        polar: {bgcolor: "#ffffff", radialaxis: {...quietAxis, rangemode: "tozero", angle: 90, tickangle: 90, nticks: 5}, angularaxis: {...quietAxis, ticksuffix: " deg", dtick: 45}}}));
    }
    panel(figure, panel, view) {
      const columns = this.chart.columns, traces = [], xs = (rows) => rows.map((row) => view.key.values[view.key.of[row]]);
      const [first, , bound] = panel.lines[0], pick = (name, rows) => rows.map((row) => columns[name][row]);
      for (const one of view.family.families) traces.push({type: "scatter", x: xs(one.rows), y: pick(first, one.rows), mode: mode(one.rows.length), line: {color: one.colour, width: 1}, marker: {size: 3}, hoverinfo: "skip", showlegend: false});
      if (bound) {
        const y = pick(first, view.rows), b = pick(bound, view.rows), edge = {type: "scatter", x: view.x, mode: "lines", line: {width: 0}, hoverinfo: "skip", showlegend: false};
        traces.push({...edge, y: y.map((v, k) => v === null ? null : Math.max(v - b[k], 0))}, {...edge, y: y.map((v, k) => v === null ? null : v + b[k]), name: "bound", showlegend: true, fill: "tonexty", fillcolor: "rgba(164,70,13,.14)"});
      }
      panel.lines.forEach(([column, name], k) => traces.push({type: "scatter", name: plain(name), x: view.x, y: pick(column, view.rows), mode: mode(view.rows.length),
        line: {color: k ? [INK, "#4f7fb5"][k - 1] : ACCENT, width: 2.4, dash: DASHES[k]}, marker: {size: 6, symbol: SIGNS[k]}, text: view.rows.map((row) => this.place(view, row)),
        hovertemplate: `${plain(name)} %{y:.5~g} ${plain(panel.unit)}<br>%{text}<extra></extra>`}));
      const amAm = panel.title === "Output power" && view.key.name === "drive" ? " (AM-AM)" : "", legend = panel.lines.length > 1 || Boolean(bound);
      draw(figure, traces, layout(`${panel.title} against ${view.key.name}${amAm}`, {showlegend: legend, xaxis: axis(axisName(view.key)), yaxis: axis(panel.unit),
        margin: {l: 62, r: 14, t: 40, b: legend ? 78 : 48}}));
    }
  }

  function drawAll() {
    document.documentElement.classList.add("drawn");
    for (const [name, chart] of Object.entries(charts)) {
      if (chart.kind === "lines") drawLines(document.getElementById(name), chart);
      else new Explorer(document.querySelector(`[data-chart="${name}"]`), chart);
    }
  }
  // On paper a chart has half the page's width; its script measures the screen, so it is told.
  const PAPER = {width: 340, fonts: {"title.font.size": 11.5, "legend.font.size": 9.5, "font.size": 10.5}}, SCREEN = {"title.font.size": 13.5, "legend.font.size": 11.5, "font.size": 12};
  const resize = (size) => document.querySelectorAll("figure.chart").forEach((figure) => figure.layout && Plotly.relayout(figure, size(figure)));
  window.addEventListener("beforeprint", () => resize((figure) => ({width: PAPER.width, height: figure.classList.contains("tall") ? 330 : figure.classList.contains("mid") ? 300 : 230, ...PAPER.fonts})));
  window.addEventListener("afterprint", () => resize(() => ({width: undefined, height: undefined, autosize: true, ...SCREEN})));

  async function unpack() {
    const packed = Uint8Array.from(atob(document.getElementById("plotting").textContent), (c) => c.charCodeAt(0));
    const text = await new Response(new Blob([packed]).stream().pipeThrough(new DecompressionStream("gzip"))).text();
    const script = document.createElement("script");
    script.textContent = text;
    document.head.append(script);
  }
  unpack().then(drawAll).catch((error) => {
    const told = document.createElement("p");
    told.className = "notice";
    told.textContent = `The charts could not be drawn in this browser (${error.message}); every number that they show is in the tables.`;
    document.querySelector("main").prepend(told);
  });
})();
