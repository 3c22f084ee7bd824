var whatif = (function () {
  "use strict";
  /* Value between the points of a grid of counts[i] points along each dose; places are in cells from the corner. */
  function between(values, counts, places) {
    function read(axis, offset) {
      if (axis === counts.length) { return values[offset]; }
      var last = counts[axis] - 1;
      var place = Math.min(Math.max(places[axis], 0), last);
      var k = Math.min(Math.floor(place), last - 1);
      var part = place - k;
      var low = read(axis + 1, offset * counts[axis] + k);
      var high = read(axis + 1, offset * counts[axis] + k + 1);
      if (part === 0) { return low; }
      if (part === 1) { return high; }
      return low === null || high === null ? null : (1 - part) * low + part * high;
    }
    return read(0, 0);
  }
  /* A number with three figures, or all of a whole number with more. */
  function shown(value) {
    if (value === null) { return "-"; }
    var power = value === 0 ? 0 : parseInt(value.toExponential(2).split("e")[1], 10);
    return value.toFixed(Math.min(Math.max(2 - power, 0), 8));
  }
  function text(channel, value) {
    if (value === null) { return "not known"; }
    if (channel.kind === "calcite") {
      return Math.abs(value) < channel.nothing ? "in balance"
        : (value > 0 ? "deposits " : "dissolves ") + Math.abs(value).toFixed(channel.digits);
    }
    var said = value.toFixed(channel.digits);
    if (parseFloat(said) === 0) { said = said.replace("-", ""); }
    return (channel.kind === "signed" && said.charAt(0) !== "-" ? "+" : "") + said;
  }
  /* Whether a value is within its window, as far as the reading between points can tell. */
  function kept(channel, window, value) {
    if (value === null) { return "not known"; }
    var ends = [window.low, window.high].filter(function (end) { return end !== null; });
    var near = ends.some(function (end) { return Math.abs(value - end) <= channel.error; });
    if (channel.error > channel.close && near) { return "AT THE EDGE"; }
    var inside = (window.low === null || value >= window.low - channel.close) &&
      (window.high === null || value <= window.high + channel.close);
    return inside ? "kept" : "NOT KEPT";
  }
  /* Everything that one panel says, for sliders at these percents of the plan's doses. */
  function answer(grid, percents) {
    var counts = grid.moved.map(function (m) { return m.points; });
    var places = grid.moved.map(function (m, i) { return percents[i] / grid.largest * (m.points - 1); });
    var values = grid.channels.map(function (c) { return between(c.values, counts, places); });
    var windows = [];
    grid.channels.forEach(function (c, i) {
      c.windows.forEach(function (w) { windows.push({words: w.words, value: text(c, values[i]), state: kept(c, w, values[i])}); });
    });
    var doses = grid.moved.map(function (m, i) {
      var part = percents[i] / 100;
      var said = shown(part * m.dose) + " mg/L, " + shown(part * m.rate) + " " + m.unit + " (" + shown(part * m.us_rate) +
        " " + m.us_unit + ")";
      var set = m.settings && percents[i] > 0 ? between(m.settings, [m.points], [places[i]]) : undefined;
      if (set === null) { said += ", out of reach of its machine"; }
      return said + (typeof set === "number" ? ", " + m.knob + " " + shown(set) + " %" : "");
    });
    return {doses: doses, texts: grid.channels.map(function (c, i) { return text(c, values[i]); }), windows: windows};
  }
  function verdict(grid, found) {
    var lost = found.windows.filter(function (w) { return w.state !== "kept"; });
    var first = grid.channels[0];
    var said = first.label + " " + found.texts[0] + ". ";
    if (!found.windows.length) { return said + "Nothing is wanted of this water."; }
    if (!lost.length) { return said + "Every window is kept."; }
    return said + lost.map(function (w) { return w.words + ": " + w.state + " (" + w.value + ")"; }).join("; ") + ".";
  }
  function start(panel, grid) {
    var sliders = Array.from(panel.querySelectorAll("input"));
    var doses = Array.from(panel.querySelectorAll("[data-dose]"));
    var cells = Array.from(panel.querySelectorAll("[data-channel]"));
    var windows = Array.from(panel.querySelectorAll("[data-window]"));
    var said = panel.querySelector("[data-verdict]");
    function show() {
      var found = answer(grid, sliders.map(function (s) { return Number(s.value); }));
      doses.forEach(function (d, i) { d.textContent = found.doses[i]; sliders[i].setAttribute("aria-valuetext", found.doses[i]); });
      cells.forEach(function (c) { c.textContent = found.texts[Number(c.getAttribute("data-channel"))]; });
      windows.forEach(function (w, i) {
        w.textContent = found.windows[i].words + ": " + found.windows[i].state + " (" + found.windows[i].value + ")";
      });
      said.textContent = verdict(grid, found);
    }
    sliders.forEach(function (s) { s.addEventListener("input", show); });
    panel.querySelector("button").addEventListener("click", function () {
      sliders.forEach(function (s) { s.value = "100"; });
      show();
    });
    panel.hidden = false;
    show();
  }
  if (typeof document !== "undefined") {
    var grids = JSON.parse(document.getElementById("whatif-data").textContent);
    Array.from(document.querySelectorAll("[data-whatif]")).forEach(function (panel, i) { start(panel, grids[i]); });
    Array.from(document.querySelectorAll("details.curves")).forEach(function (part) { part.open = false; });
  }
  return {between: between, answer: answer, verdict: verdict, start: start};
})();
if (typeof module !== "undefined") { module.exports = whatif; }
