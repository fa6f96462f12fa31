// Charts: drawn when they come into view; the others one by one while the page
// is idle, but for those in closed cards; all of them before printing.

// Width in pixels of a chart on paper, alone or beside another: what fits an A4
// or a letter page.
const paperWidth = 660;
const halfPaperWidth = 308;

const charts = new Map(); // element -> {chart, data}

function chartData(element) {
  return JSON.parse(document.getElementById(element.id + "-data").textContent);
}

function drawChart(element) {
  if (charts.has(element)) return;
  const data = chartData(element);
  const chart = echarts.init(element, null, { renderer: "svg" });
  data.option.tooltip.confine = true;
  data.option.tooltip.formatter = (items) => tip(data, items);
  chart.setOption(data.option);
  charts.set(element, { chart, data });
  if (data.logCounts && logCounts) applyCounts(element);
  element.dataset.drawn = "true";
}

// The row of numbers that an item of a series stands for.
function rowOf(data, item) {
  const series = data.series[item.seriesIndex];
  return data.rows[Math.floor((item.dataIndex - series.offset) / series.per)];
}

// What the pointer reads: names and numbers as they stand in the tables. Texts
// are set as text, never as markup.
function tip(data, items) {
  let row;
  for (const item of Array.isArray(items) ? items : [items]) {
    row = row || rowOf(data, item);
  }
  if (!row) return "";
  const table = document.createElement("table");
  table.className = "tip";
  row.forEach((field, i) => {
    if (field === "") return;
    const line = table.insertRow();
    line.insertCell().textContent = data.columns[i];
    line.insertCell().textContent = field;
  });
  return table;
}

// Counts on a log axis begin below one, where an empty bin then lies.
const emptyBin = 0.7;
let logCounts = false;

function applyCounts(element) {
  const { chart, data } = charts.get(element);
  const series = data.option.series.map((s) => ({
    data: s.data.map((d) => ({
      value: logCounts ? [d.value[0], Math.max(d.value[1], emptyBin)] : d.value,
    })),
  }));
  chart.setOption({
    yAxis: [{ ...data.option.yAxis[0], type: logCounts ? "log" : "value", min: logCounts ? emptyBin : 0 }],
    series,
  });
}

function setCounts(log) {
  logCounts = log;
  for (const [element, { data }] of charts) {
    if (data.logCounts) applyCounts(element);
  }
}

function startCharts() {
  const all = document.querySelectorAll(".chart");
  const seen = new IntersectionObserver(
    (entries) => {
      for (const entry of entries) {
        if (!entry.isIntersecting) continue;
        seen.unobserve(entry.target);
        drawChart(entry.target);
      }
    },
    { rootMargin: "300px" },
  );
  const sized = new ResizeObserver((entries) => {
    if (printing) return;
    for (const entry of entries) {
      const known = charts.get(entry.target);
      if (known && entry.contentRect.width > 0) known.chart.resize();
    }
  });
  for (const element of all) {
    seen.observe(element);
    sized.observe(element);
  }
  const waiting = [...all].filter((element) => !element.closest("details:not([open])"));
  const next = () => {
    const element = waiting.shift();
    if (!element) return;
    seen.unobserve(element);
    drawChart(element);
    setTimeout(next);
  };
  setTimeout(next);
}

let printing = false;

function chartsForPaper() {
  printing = true;
  for (const element of document.querySelectorAll(".chart")) {
    drawChart(element);
    const { chart } = charts.get(element);
    chart.resize({ width: element.closest(".test-charts, .columns") ? halfPaperWidth : paperWidth });
    chart.getZr().flush(); // the page is laid out for paper before the next frame
  }
}

function chartsForScreen() {
  printing = false;
  for (const { chart } of charts.values()) chart.resize({ width: "auto" });
}
