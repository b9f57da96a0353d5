// Charts: options come from Go; this module attaches names, theme and the marks that follow the sliders. Reads the page's charts and
// view.Results. Every label is text: formatters return plain strings for axes and elements for tool tips.
import { figure, minus, portion } from "./format.js";

// paperTheme is what is printed, whatever the screen shows.
const paperTheme = { ink: "#111111", soft: "#444444", line: "#cccccc", paper: "#ffffff", accent: "#134c57", band: "rgba(19, 76, 87, 0.14)", faint: "#777777" };

function screenTheme() {
  const css = getComputedStyle(document.documentElement);
  const v = (name) => css.getPropertyValue(name).trim();
  return { ink: v("--ink"), soft: v("--soft"), line: v("--line"), paper: v("--paper"), accent: v("--accent"), band: v("--band"), faint: v("--faint") };
}

export function clip(text, length) {
  const s = [...text];
  return s.length > length ? s.slice(0, length - 1).join("") + "…" : text;
}

export function mountCharts(page) {
  const still = matchMedia("(prefers-reduced-motion: reduce)");
  const dark = matchMedia("(prefers-color-scheme: dark)");
  const boxes = [...document.querySelectorAll(".chart[data-chart]")].filter((b) => page.charts_[b.dataset.chart] !== undefined);
  for (const b of document.querySelectorAll(".chart[data-chart]")) if (!boxes.includes(b)) b.closest("figure").hidden = true;
  let live = [];
  let theme = screenTheme;
  const cursors = [];

  function draw(printing) {
    theme = printing ? () => paperTheme : screenTheme;
    for (const { chart } of live) chart.dispose();
    live = boxes.map((box) => {
      const rows = Number(box.dataset.rows || 0);
      if (rows) box.style.height = `${Math.min(900, 60 + rows * 24)}px`;
      const chart = echarts.init(box, null, { renderer: "svg" });
      chart.setOption(optionFor(page, box, theme(), !printing && !still.matches));
      return { chart, box };
    });
    for (const [a, value] of cursors) moveCursor(a, value);
  }

  function moveCursor(a, value) {
    for (const { chart, box } of live) {
      if (Number(box.dataset.alternative) !== a || box.dataset.alternative === undefined) continue;
      const c = theme();
      const id = box.dataset.chart.endsWith("-path") ? "slope-0" : "error";
      const penalty = page.results.alternatives[a].tuning.parameter === "penalty";
      const line = { markLine: cursorLine(c, value > 0 || !penalty ? [{ xAxis: value }] : []) };
      const series = [{ id, ...line }];
      if (id === "error" && page.results.alternatives[a].tuning.resampled) series.push({ id: "chosen", ...line });
      chart.setOption({ series });
    }
  }

  draw(false);
  dark.addEventListener("change", () => draw(false));
  still.addEventListener("change", () => draw(false));
  const observer = new ResizeObserver((entries) => {
    for (const e of entries) {
      if (e.contentRect.width === 0) continue;
      const found = live.find((l) => l.box === e.target);
      if (found) found.chart.resize();
    }
  });
  for (const b of boxes) observer.observe(b);
  addEventListener("beforeprint", () => {
    draw(true);
    for (const { chart, box } of live) {
      chart.resize({ width: box.closest(".two") ? 310 : 640 });
      chart.getZr().flush();
    }
  });
  addEventListener("afterprint", () => draw(false));

  return {
    cursor(a, value) {
      const old = cursors.findIndex(([b]) => b === a);
      if (old >= 0) cursors.splice(old, 1);
      cursors.push([a, value]);
      moveCursor(a, value);
    },
    highlight() {
      for (const { chart, box } of live) {
        if (box.dataset.chart.endsWith("-path")) chart.setOption({ series: pathStyles(page, theme()) });
      }
    },
  };
}

function optionFor(page, box, c, animated) {
  const option = structuredClone(page.charts_[box.dataset.chart]);
  for (const part of ["color", "title", "toolbox"]) delete option[part];
  option.animation = animated;
  option.animationDuration = 300;
  option.textStyle = { color: c.ink, fontFamily: getComputedStyle(document.body).getPropertyValue("--sans") };
  option.legend = { show: false };
  option.aria = { enabled: true, label: { description: box.closest("figure").querySelector("figcaption").textContent } };
  option.grid = { left: 4, right: 18, top: 26, bottom: 6, outerBoundsMode: "same", outerBoundsContain: "all" };
  for (const axis of [...option.xAxis, ...option.yAxis]) styleAxis(axis, c);
  const name = box.dataset.chart;
  if (name === "shares" || name === "correlations") heat(page, box, option, name, c);
  else if (name === "folds") folds(page, option, c);
  else if (name.endsWith("-path")) path(page, box, option, c);
  else if (name.endsWith("-error")) error(page, box, option, c);
  return option;
}

function styleAxis(axis, c) {
  axis.axisLine = { show: true, lineStyle: { color: c.faint } };
  axis.axisTick = { show: false };
  axis.splitLine = { show: axis.type !== "category", lineStyle: { color: c.line, opacity: 0.6 } };
  axis.axisLabel = { color: c.soft, fontSize: 11, lineHeight: 16, hideOverlap: true };
  axis.nameTextStyle = { color: c.soft, fontSize: 11, align: axis.nameLocation ? undefined : "left" };
  if (axis.type !== "category") axis.axisLabel.formatter = (v) => figure(v, 3).replace(/(\.\d*?)0+$/, "$1").replace(/\.$/, "");
}

function tip(lines) {
  const box = document.createElement("div");
  box.style.maxWidth = "22rem";
  box.style.whiteSpace = "normal";
  for (const line of lines) {
    const p = document.createElement("div");
    p.textContent = line;
    box.append(p);
  }
  return box;
}

function tooltip(c, formatter) {
  return { show: true, trigger: "item", confine: true, backgroundColor: c.paper, borderColor: c.faint, textStyle: { color: c.ink, fontSize: 12 }, formatter };
}

function heat(page, box, option, name, c) {
  const d = page.results.diagnosis;
  const rows = name === "shares" ? d.varianceShares.coefficients : d.correlations.names;
  const columns = name === "shares" ? d.varianceShares.dimensions.map((v) => (v === null ? "exact" : figure(v, 3))) : d.correlations.names;
  const narrow = box.clientWidth < 560;
  const y = option.yAxis[0], x = option.xAxis[0];
  y.inverse = true;
  y.axisLabel.formatter = (i) => clip(rows[Number(i)], narrow ? 14 : 26);
  y.axisLabel.interval = 0;
  x.axisLabel.formatter = (i) => clip(columns[Number(i)], narrow ? 8 : 14);
  x.axisLabel.rotate = name === "correlations" ? (narrow || columns.length > 7 ? 60 : 0) : columns.length > 8 && narrow ? 60 : 0;
  x.splitArea = { show: false };
  option.grid.top = name === "correlations" && x.axisLabel.rotate ? 10 : 14;
  option.grid.bottom = 8;
  const map = Array.isArray(option.visualMap) ? option.visualMap[0] : option.visualMap;
  map.show = false;
  map.min = name === "shares" ? 0 : -1;
  map.max = 1;
  map.inRange = { color: name === "shares" ? [c.paper, c.accent] : [c.ink, c.paper, c.accent] };
  const series = option.series[0];
  series.itemStyle = { borderColor: c.line, borderWidth: 1 };
  const many = columns.length > (narrow ? 6 : 13);
  series.label = { show: !many, fontSize: 10.5, textBorderWidth: 0, formatter: (p) => {
    const v = p.value[2];
    if (Math.abs(v) < 0.05) return "";
    return minus(v.toFixed(Math.abs(v) >= 0.995 && Math.abs(v) < 1 ? 4 : 2)); // nearly one is not one
  } };
  series.data = series.data.map((d) => ({ value: d.value, label: { color: Math.abs(d.value[2]) > 0.55 ? c.paper : c.ink } }));
  series.emphasis = { itemStyle: { borderColor: c.accent, borderWidth: 2 } };
  option.tooltip = tooltip(c, (p) => tip([rows[p.value[1]], (name === "shares" ? "condition index " : "") + columns[p.value[0]], figure(p.value[2], 3)]));
}

function folds(page, option, c) {
  const labels = page.results.alternatives.slice(1).map((a) => a.label);
  const y = option.yAxis[0];
  y.inverse = true;
  y.axisLabel.formatter = (i) => clip(labels[Number(i)], 26);
  y.axisLabel.interval = 0;
  y.splitLine = { show: true, lineStyle: { color: c.line, opacity: 0.6 } };
  const s = option.series[0];
  s.symbolSize = 7;
  s.itemStyle = { color: c.ink, opacity: 0.35 };
  s.markLine = { silent: true, symbol: "none", label: { show: false }, lineStyle: { color: c.accent, type: "solid" }, data: [{ xAxis: 0 }] };
  option.tooltip = tooltip(c, (p) => tip([labels[p.value[1]], figure(p.value[0], 3)]));
}

function cursorLine(c, data) {
  return { silent: true, symbol: "none", animation: false, precision: 15, label: { show: false }, lineStyle: { color: c.accent, width: 2, type: "solid" }, data };
}

function pathStyles(page, c) {
  const choice = page.choices[page.state.choice];
  return page.results.diagnosis.regressors.map((g, j) => {
    const on = g.name === choice.name || choice.name === "effect of " + g.name;
    return { id: `slope-${j}`, z: on ? 5 : 2, lineStyle: { color: on ? c.accent : c.faint, width: on ? 2.6 : 1.1, opacity: on ? 1 : 0.8 }, itemStyle: { color: on ? c.accent : c.faint },
      endLabel: { show: false } };
  });
}

function path(page, box, option, c) {
  const styles = pathStyles(page, c);
  option.series.forEach((s, j) => {
    Object.assign(s, styles[j]);
    s.symbolSize = 5;
    s.triggerLineEvent = true;
    s.emphasis = { focus: "series" };
  });
  const names = page.results.diagnosis.regressors.map((g) => g.name);
  option.tooltip = tooltip(c, (p) => tip([names[p.seriesIndex] || "", p.value ? `${figure(p.value[0], 3)}: ${figure(p.value[1], 3)}` : ""]));
}

function error(page, box, option, c) {
  const t = page.results.alternatives[Number(box.dataset.alternative)].tuning;
  const s = option.series[0];
  s.lineStyle = { color: c.ink, width: 1.8 };
  s.itemStyle = { color: c.ink };
  s.symbolSize = 6;
  const from = t.path[t.asGoodAs.from].value, to = t.path[t.asGoodAs.to].value;
  s.markArea = { silent: true, itemStyle: { color: c.band }, data: [[{ xAxis: from > 0 || t.parameter !== "penalty" ? from : t.path[1].value }, { xAxis: to }]] };
  const ticks = t.candidates.map((k) => k.value).filter((v) => v > 0 || t.parameter !== "penalty");
  option.series.push({ type: "scatter", id: "candidates", symbol: "triangle", symbolSize: 8, itemStyle: { color: c.soft }, silent: true, data: ticks.map((v) => [v, nearest(t, v)]) });
  const bars = option.series.find((k) => k.id === "chosen");
  if (bars) chosen(option, bars, t, c);
  option.tooltip = tooltip(c, (p) => tip([figure(p.value[0], 3), p.seriesId === "chosen" ? `chosen in ${portion(p.value[1])} of the resamples` : "mean squared error " + figure(p.value[1], 4)]));
}

// chosen lays the columns out beneath the curve: both grids have the same sides and both axes the same ends, so that values stand under
// one another.
function chosen(option, bars, t, c) {
  const whole = t.parameter !== "penalty";
  const path = t.path.filter((p) => p.value > 0 || whole);
  const first = path[0].value, last = path[path.length - 1].value;
  const letters = Math.max(6, ...path.map((p) => figure(p.error, 3).length + 1));
  const sides = { left: 14 + Math.ceil(6.4 * letters), right: 18, outerBoundsMode: "none" };
  option.grid = [{ ...sides, top: 48, bottom: "42%" }, { ...sides, top: "69%", bottom: 46 }];
  const low = whole ? first - 0.5 : Math.pow(10, Math.floor(Math.log10(first)));
  const high = whole ? last + 0.5 : Math.pow(10, Math.ceil(Math.log10(last)));
  for (const axis of option.xAxis) {
    Object.assign(axis, { min: low, max: high });
    if (whole) Object.assign(axis.axisLabel, { showMinLabel: false, showMaxLabel: false });
  }
  option.xAxis[0].axisLabel.show = false;
  option.xAxis[0].name = "";
  option.xAxis[0].axisLine.onZero = false;
  for (const y of option.yAxis) y.axisLine = { show: false };
  const y = option.yAxis[1];
  Object.assign(y, { min: 0, splitNumber: 2 });
  y.axisLabel.formatter = (v) => minus(String(Math.round(1000 * v) / 10)) + " %";
  bars.itemStyle = { color: c.faint };
  bars.renderItem = (_, api) => {
    const [x, top] = api.coord([api.value(0), api.value(1)]);
    const step = (api.coord([last, 0])[0] - api.coord([first, 0])[0]) / Math.max(1, path.length - 1);
    const wide = Math.max(1, Math.min(24, 0.72 * step));
    const foot = api.coord([api.value(0), 0])[1];
    return { type: "rect", shape: { x: x - wide / 2, y: top, width: wide, height: foot - top }, style: { fill: c.faint }, emphasis: { style: { fill: c.ink } } };
  };
}

// nearest gives the error at the path's value nearest to v.
export function nearest(t, v) {
  let best = t.path[0];
  for (const p of t.path) if (Math.abs(p.value - v) < Math.abs(best.value - v)) best = p;
  return best.error;
}
