"use strict";
(function () {
  var table = document.getElementById("all");
  if (!table) { return; }
  var body = table.tBodies[0];
  var rows = Array.prototype.slice.call(body.rows);
  var heads = table.tHead.rows[table.tHead.rows.length - 1].cells;
  document.querySelector(".tools").hidden = false;

  // "1.2·10⁻⁵" and "−0.3 %" back to numbers; a dash sorts last.
  var raised = "⁰¹²³⁴⁵⁶⁷⁸⁹";
  function value(text) {
    var plain = text.replace(/\u2212/g, "-").replace(/\u202f/g, "");
    plain = plain.replace(/·10(⁻?)([⁰¹²³⁴⁵⁶⁷⁸⁹]+)/, function (_, sign, digits) {
      return "e" + (sign ? "-" : "") + digits.split("").map(function (d) { return raised.indexOf(d); }).join("");
    });
    var number = parseFloat(plain);
    return text === "–" ? null : isNaN(number) ? text : number;
  }
  function sort(index, button) {
    var down = button.getAttribute("aria-sort") === "ascending";
    Array.prototype.forEach.call(heads, function (h) { h.removeAttribute("aria-sort"); });
    button.setAttribute("aria-sort", down ? "descending" : "ascending");
    var keyed = rows.map(function (row) { return [value(row.cells[index].textContent), row]; });
    keyed.sort(function (a, b) {
      if (a[0] === null || b[0] === null) { return (a[0] === null) - (b[0] === null); }
      var both = typeof a[0] === "number" && typeof b[0] === "number";
      var order = both ? a[0] - b[0] : String(a[0]).localeCompare(String(b[0]));
      return down ? -order : order;
    });
    keyed.forEach(function (pair) { body.appendChild(pair[1]); });
  }
  Array.prototype.forEach.call(heads, function (head, index) {
    head.tabIndex = 0;
    head.title = "Sort by this column";
    head.addEventListener("click", function () { sort(index, head); });
    head.addEventListener("keydown", function (event) {
      if (event.key === "Enter" || event.key === " ") { event.preventDefault(); sort(index, head); }
    });
  });

  var filter = document.getElementById("filter");
  var shown = document.getElementById("shown");
  function apply() {
    var words = filter.value.toLowerCase().split(/\s+/).filter(Boolean);
    var count = 0;
    rows.forEach(function (row) {
      var text = row.textContent.toLowerCase();
      var keep = words.every(function (w) { return text.indexOf(w) !== -1; });
      row.hidden = !keep;
      count += keep;
    });
    shown.textContent = words.length ? count + " of " + rows.length + " rows" : "";
  }
  filter.addEventListener("input", apply);
  ["ga", "gp"].forEach(function (name) {
    var box = document.getElementById("show-" + name);
    box.checked = false;
    function toggle() { table.classList.toggle("no-" + name, !box.checked); }
    box.addEventListener("change", toggle);
    toggle();
  });
}());
