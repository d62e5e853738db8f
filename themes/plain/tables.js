// Sort and filter tables.  Pages are complete without it.
(function () {
  "use strict";
  var LEAST_SORTED = 8, LEAST_FILTERED = 12;

  // A cell as a number: true minus, grouped digits, "<" before a value; NaN where it is text.
  function number(text) {
    var plain = text.replace(/[\u2009\u202f\u00a0\u2007\u2008\s]/g, "").replace(/\u2212/g, "-").replace(",", ".");
    var match = /^[<>≤≥≈]?([+-]?\d+(?:\.\d+)?)/.exec(plain);
    return match ? parseFloat(match[1]) : NaN;
  }

  function text(row, column) {
    var cell = row.cells[column];
    return cell ? cell.textContent.trim() : "";
  }

  function compare(column, isNumber) {
    return function (one, other) {
      var a = text(one, column), b = text(other, column);
      if (!isNumber) return a.localeCompare(b, "en", { numeric: true });
      var x = number(a), y = number(b);
      if (isNaN(x) || isNaN(y)) return isNaN(x) ? (isNaN(y) ? 0 : Infinity) : -Infinity;
      return x - y;
    };
  }

  function sorter(table, rows) {
    var body = table.tBodies[0], heads = table.tHead.rows[0].cells;
    Array.prototype.forEach.call(heads, function (head, column) {
      var button = document.createElement("button");
      button.type = "button";
      button.className = "sort";
      while (head.firstChild) button.appendChild(head.firstChild);
      head.appendChild(button);
      button.addEventListener("click", function () {
        var isDown = head.getAttribute("aria-sort") === "ascending", sign = isDown ? -1 : 1;
        var by = compare(column, head.classList.contains("n"));
        Array.prototype.forEach.call(heads, function (other) { other.removeAttribute("aria-sort"); });
        head.setAttribute("aria-sort", isDown ? "descending" : "ascending");
        rows.slice().sort(function (one, other) {
          var order = by(one, other);
          return Math.abs(order) === Infinity ? order : sign * order;
        }).forEach(function (row) { body.insertBefore(row, total(table)); });
      });
    });
  }

  function total(table) {
    return table.tBodies[0].querySelector("tr.total");
  }

  function filter(table, rows) {
    var box = document.createElement("div"), label = document.createElement("label");
    var field = document.createElement("input"), told = document.createElement("span");
    box.className = "filter";
    field.type = "search";
    field.autocomplete = "off";
    told.setAttribute("role", "status");
    label.appendChild(document.createTextNode("Show rows with "));
    label.appendChild(field);
    box.appendChild(label);
    box.appendChild(told);
    table.parentNode.parentNode.insertBefore(box, table.parentNode);
    field.addEventListener("input", function () {
      var words = field.value.toLowerCase().split(/\s+/), shown = 0;
      rows.forEach(function (row) {
        var all = row.textContent.toLowerCase();
        var fits = words.every(function (word) { return all.indexOf(word) >= 0; });
        row.hidden = !fits;
        if (fits) shown += 1;
      });
      if (total(table)) total(table).hidden = shown < rows.length;
      told.textContent = field.value.trim() ? shown + " of " + rows.length + " rows" : "";
    });
  }

  Array.prototype.forEach.call(document.querySelectorAll("main .scroll > table"), function (table) {
    var rows = Array.prototype.filter.call(table.tBodies[0].rows, function (row) {
      return !row.classList.contains("total");
    });
    if (rows.length >= LEAST_SORTED) sorter(table, rows);
    // Beside another table or a figure a field would push the two out of line.
    if (rows.length >= LEAST_FILTERED && !table.closest(".beside")) filter(table, rows);
  });
})();
