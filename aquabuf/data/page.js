"use strict";
(function () {
  function value(row, column) {
    var cell = row.cells[column];
    var text = cell.getAttribute("data-value") || cell.textContent.trim();
    var number = parseFloat(text.replace(/\u2212/g, "-").replace(/[ ,]/g, ""));
    return isNaN(number) || /[a-z]{3}/i.test(text) ? text.toLowerCase() : number;
  }
  function order(a, b) {
    if (typeof a === typeof b) { return a < b ? -1 : a > b ? 1 : 0; }
    return typeof a === "number" ? -1 : 1;
  }
  document.querySelectorAll("table.sortable").forEach(function (table) {
    table.querySelectorAll("thead th").forEach(function (head, column) {
      var button = document.createElement("button");
      button.type = "button";
      button.title = "Sort by this column";
      while (head.firstChild) { button.appendChild(head.firstChild); }
      head.appendChild(button);
      button.addEventListener("click", function () {
        var up = head.getAttribute("aria-sort") !== "ascending";
        table.querySelectorAll("thead th").forEach(function (other) { other.removeAttribute("aria-sort"); });
        head.setAttribute("aria-sort", up ? "ascending" : "descending");
        var body = table.tBodies[0];
        Array.from(body.rows).map(function (row, k) { return [value(row, column), k, row]; })
          .sort(function (a, b) { var d = order(a[0], b[0]); return (up ? d : -d) || a[1] - b[1]; })
          .forEach(function (part) { body.appendChild(part[2]); });
      });
    });
  });
  window.addEventListener("beforeprint", function () {
    document.querySelectorAll("details").forEach(function (part) { part.open = true; });
  });
})();
