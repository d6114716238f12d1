// Adds zooming to the charts that carry their numbers. Without this file every chart is still there as a picture.
"use strict";

const STEP = 0.25; // share of the time shown by which a key moves or zooms

// The axis shows the network's standard clock: chart times are its seconds read as if they were UTC.
const clockOf = (seconds) => uPlot.tzDate(new Date(seconds * 1000), "Etc/UTC");

const MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"];

function timeLabels(chart, places) {
  const hours = chart.scales.x.max - chart.scales.x.min < 4 * 86400;
  let year = null;
  return places.map((seconds) => {
    const at = new Date(seconds * 1000);
    const day = `${at.getUTCDate()} ${MONTHS[at.getUTCMonth()]}`;
    const words = hours ? `${day}\n${String(at.getUTCHours()).padStart(2, "0")}:00` : day;
    const told = at.getUTCFullYear() === year ? words : `${words}\n${at.getUTCFullYear()}`;
    year = at.getUTCFullYear();
    return told;
  });
}

function spanAreas(spans) {
  return (chart) => {
    const pen = chart.ctx;
    pen.save();
    pen.fillStyle = "rgba(179, 71, 0, 0.13)";
    for (const [begin, end] of spans) {
      const left = Math.max(chart.valToPos(begin, "x", true), chart.bbox.left);
      const right = Math.min(chart.valToPos(end, "x", true), chart.bbox.left + chart.bbox.width);
      if (right > left) pen.fillRect(left, chart.bbox.top, right - left, chart.bbox.height);
    }
    pen.restore();
  };
}

function levelLines(levels, moments) {
  return (chart) => {
    const pen = chart.ctx;
    const { left, top, width, height } = chart.bbox;
    pen.save();
    pen.beginPath();
    pen.rect(left, top, width, height);
    pen.clip();
    pen.strokeStyle = "#59626d";
    pen.setLineDash([7, 4]);
    const stroke = (x1, y1, x2, y2) => {
      pen.beginPath();
      pen.moveTo(x1, y1);
      pen.lineTo(x2, y2);
      pen.stroke();
    };
    for (const level of levels) {
      const y = chart.valToPos(level, "y", true);
      stroke(left, y, left + width, y);
    }
    pen.strokeStyle = "#1f2328";
    pen.setLineDash([2, 3]);
    for (const moment of moments) {
      const x = chart.valToPos(moment, "x", true);
      stroke(x, top, x, top + height);
    }
    pen.restore();
  };
}

function makeChart(place, data) {
  const series = [{ label: "time", value: (_chart, s) => (s == null ? "–" : new Date(s * 1000).toISOString().slice(0, 16).replace("T", " ")) }];
  for (const one of data.series) {
    series.push({
      label: one.label,
      stroke: one.colour,
      width: 2,
      dash: one.dash ? one.dash.split(" ").map(Number) : undefined,
      spanGaps: false,
      value: (_chart, v) => (v == null ? "–" : String(v)),
    });
  }
  return new uPlot(
    {
      width: Math.max(320, place.clientWidth),
      height: 300,
      tzDate: clockOf,
      scales: { x: { time: true }, y: { range: (_chart, low, high) => (low == null ? data.yRange : [Math.min(low, data.yRange[0]), Math.max(high, data.yRange[1])]) } },
      axes: [{ label: data.clock, values: timeLabels, size: 56 }, { label: data.yLabel, size: 60 }],
      series,
      bands: data.bands.map((pair) => ({ series: pair, fill: "rgba(11, 83, 148, 0.18)" })),
      hooks: { drawClear: [spanAreas(data.spans)], draw: [levelLines(data.levels, data.moments)] },
    },
    [data.x, ...data.series.map((one) => one.values)],
    place,
  );
}

function withKeys(place, chart, all) {
  const show = (from, to) => {
    const least = 6 * 3600;
    const width = Math.min(Math.max(to - from, least), all[1] - all[0]);
    const begin = Math.min(Math.max(from, all[0]), all[1] - width);
    chart.setScale("x", { min: begin, max: begin + width });
  };
  const act = (key) => {
    const { min, max } = chart.scales.x;
    const part = (max - min) * STEP;
    if (key === "ArrowLeft") show(min - part, max - part);
    else if (key === "ArrowRight") show(min + part, max + part);
    else if (key === "+" || key === "=") show(min + part, max - part);
    else if (key === "-") show(min - part, max + part);
    else if (key === "0") show(all[0], all[1]);
    else return false;
    return true;
  };
  place.addEventListener("keydown", (event) => {
    if (act(event.key)) event.preventDefault();
  });
  return act;
}

function button(words, press) {
  const made = document.createElement("button");
  made.type = "button";
  made.className = "plain-button";
  made.textContent = words;
  made.addEventListener("click", press);
  return made;
}

function offerZoom(drawing) {
  const data = JSON.parse(document.getElementById(drawing.dataset.zoom).textContent);
  if (data.x.length < 2) return;
  const bar = document.createElement("div");
  bar.className = "no-print";
  const place = document.createElement("div");
  place.className = "zoomed no-print";
  place.tabIndex = 0;
  place.setAttribute("role", "group");
  place.setAttribute("aria-label", "Zoomable chart. Keys: plus and minus zoom, left and right move, 0 shows all.");
  place.hidden = true;
  let act = null;
  const keys = [["Closer", "+"], ["Wider", "-"], ["Earlier", "ArrowLeft"], ["Later", "ArrowRight"], ["All", "0"]].map(([words, key]) => button(words, () => act(key)));
  for (const one of keys) one.hidden = true;
  const toggle = button("Zoom", () => {
    const opening = place.hidden;
    place.hidden = !opening;
    drawing.querySelector(".wide").hidden = opening;
    drawing.querySelector(".narrow").hidden = opening;
    for (const one of keys) one.hidden = !opening;
    toggle.setAttribute("aria-expanded", String(opening));
    name(opening ? "Back to the picture" : "Zoom");
    if (opening && act === null) act = withKeys(place, makeChart(place, data), [data.x[0], data.x[data.x.length - 1]]);
    if (opening) place.focus();
  });
  toggle.setAttribute("aria-expanded", "false");
  const title = drawing.closest("figure").querySelector("h2, h3").textContent;
  const name = (words) => {
    toggle.textContent = words;
    toggle.setAttribute("aria-label", `${words}: ${title}`);
  };
  name("Zoom");
  bar.append(toggle, ...keys);
  drawing.after(bar);
  drawing.append(place);
}

for (const drawing of document.querySelectorAll("[data-zoom]")) offerZoom(drawing);
