"use strict";
// The report's own script: map measures, a zone's row, and the fee slider. Without it the page
// shows the first measure and the tables; with it nothing is fetched and nothing is stored.
const data = JSON.parse(document.getElementById("page-data").textContent);
const WHOLE_FEES = 1000;
const all = (root, what) => Array.from(root.querySelectorAll(what));

// --- figures in words: as the page's own tables round them -----------------------------------

function grouped(value, step) {
  const decimals = Math.max(0, -Math.floor(Math.log10(step) + 1e-9));
  return value.toLocaleString("en-GB", {
    minimumFractionDigits: decimals, maximumFractionDigits: decimals,
  }).replace("-", "−");
}

function stepOf(low, high, value) {
  if (Number.isFinite(low) && Number.isFinite(high) && high - low > 1e-6 * Math.abs(value)) {
    return 10 ** (Math.floor(Math.log10(high - low)) - 1);
  }
  return value ? 10 ** (Math.floor(Math.log10(Math.abs(value))) - 2) : 1;
}

function stepped(value, step) {
  if (!Number.isFinite(value)) return "not known";
  const rounded = Math.round(value / step) * step;
  for (const [size, word] of [[1e12, "trillion"], [1e9, "billion"], [1e6, "million"]]) {
    if (Math.abs(rounded) >= size) return `${grouped(rounded / size, step / size)} ${word}`;
  }
  return grouped(rounded, step);
}

function interval(low, high, value) {
  if (!Number.isFinite(low) || !Number.isFinite(high)) return "no finite upper end";
  if (high - low <= 1e-6 * Math.abs(value)) return "–";
  const step = stepOf(low, high, value);
  const [from, unit] = stepped(low, step).split(" ");
  const [to, word] = stepped(high, step).split(" ");
  const ends = [unit === word ? from : [from, unit].filter(Boolean).join(" "), "to", to, word];
  return ends.filter(Boolean).join(" ");
}

// --- fees ------------------------------------------------------------------------------------

function atPrice(visits, price, fee) {
  const left = visits * Math.exp(price * fee);
  return {
    visits: left,
    revenue: left * fee,
    consumer_surplus: price < 0 ? left / -price : NaN,
    surplus_lost: price === 0 ? visits * fee : visits * Math.expm1(price * fee) / price,
  };
}

// Estimate, lower and upper end of a measure at a fee.
function response(model, measure, fee) {
  if (model.prices) {
    return model.prices.map((price) => atPrice(model.visits, price, fee)[measure]);
  }
  const at = nearest(model.fees, fee);
  return ["", "_ci_low", "_ci_high"].map((end) => model[measure + end][at] ?? NaN);
}

function nearest(fees, fee) {
  let best = 0;
  fees.forEach((other, i) => {
    if (Math.abs(other - fee) < Math.abs(fees[best] - fee)) best = i;
  });
  return best;
}

function showFee(tool, model, asked) {
  const fee = model.prices ? asked : model.fees[nearest(model.fees, asked)];
  for (const cell of all(tool, "data")) {
    const [value, low, high] = response(model, cell.dataset.measure, fee);
    cell.value = value.toFixed(2);
    cell.dataset.low = low.toFixed(2);
    cell.dataset.high = high.toFixed(2);
    cell.textContent = value === 0 ? "0" : stepped(value, stepOf(low, high, value));
    cell.closest("tr").lastElementChild.textContent = interval(low, high, value);
  }
  const slider = tool.querySelector("[type=range]");
  const words = `${data.currency} ${grouped(fee, +slider.max >= WHOLE_FEES ? 1 : 0.01)}`;
  slider.setAttribute("aria-valuetext", words);
  tool.querySelector("output").textContent = words;
  for (const mark of all(tool.parentElement, ".fee-mark")) {
    const { start, end, top } = mark.dataset;
    const x = +start + (+end - +start) * Math.min(1, fee / +top);
    mark.setAttribute("x1", x);
    mark.setAttribute("x2", x);
  }
}

for (const tool of all(document, ".fee-tool")) {
  const model = data.fees[tool.dataset.site];
  const slider = tool.querySelector("[type=range]");
  const typed = tool.querySelector("[type=number]");
  const show = (fee) => showFee(tool, model, fee);
  slider.addEventListener("input", () => {
    typed.value = slider.value;
    show(+slider.value);
  });
  typed.addEventListener("input", () => {
    const fee = Math.min(Math.max(+typed.value || 0, 0), +slider.max);
    slider.value = fee;
    show(fee);
  });
  tool.hidden = false;
  all(tool.parentElement, ".fee-mark").forEach((mark) => mark.removeAttribute("visibility"));
  show(+slider.value);
}

// --- map -------------------------------------------------------------------------------------

const CLASSES = { z: "zero", n: "none", 0: "c0", 1: "c1", 2: "c2", 3: "c3", 4: "c4" };

for (const figure of all(document, "[data-map]")) {
  const map = data.maps[figure.dataset.map];
  const zones = all(figure, ".zones.shapes > use:not(.over)");
  const pick = figure.querySelector(".pick");
  const picker = figure.querySelector("select");
  const row = figure.querySelector(".zone-row");

  const showMeasure = (name) => {
    const measure = map.measures[name];
    zones.forEach((zone, i) => zone.setAttribute("class", CLASSES[measure.classes[i]]));
    figure.querySelector(".map > title").textContent = measure.title;
    for (const legend of all(figure, ".legend")) legend.hidden = legend.dataset.measure !== name;
  };
  const showZone = (i) => {
    pick.setAttribute("href", i < 0 ? "#nowhere" : `#z${i}`);
    if (i < 0) {
      row.textContent = "";
      return;
    }
    const cells = map.rows[i].map((cell, column) => {
      const entry = document.createElement("div");
      entry.append(
        Object.assign(document.createElement("dt"), { textContent: map.heads[column] }),
        Object.assign(document.createElement("dd"), { textContent: cell }),
      );
      return entry;
    });
    row.replaceChildren(...cells);
  };
  for (const radio of all(figure, "[type=radio]")) {
    radio.addEventListener("change", () => showMeasure(radio.value));
  }
  if (map.rows) {
    map.names.forEach((name, i) => picker.add(new Option(name, i)));
    picker.addEventListener("change", () => showZone(+picker.value));
    zones.forEach((zone, i) => {
      zone.addEventListener("pointerenter", () => {
        picker.value = i;
        showZone(i);
      });
    });
  }
  for (const part of all(figure, ".map-tool")) part.hidden = false;
}

// --- print -----------------------------------------------------------------------------------

// Paper unfolds nothing: what is folded is opened for the print and folded again after it, but
// for a table of so many rows that nobody would read it on paper.
const MOST_ROWS = 200;
let unfolded = [];
window.addEventListener("beforeprint", () => {
  unfolded = all(document, "details:not([open])")
    .filter((part) => part.querySelectorAll("tr").length <= MOST_ROWS);
  for (const part of unfolded) part.open = true;
});
window.addEventListener("afterprint", () => {
  for (const part of unfolded) part.open = false;
});
