/* Sort and filter tables marked wb-sortable; details open for a link into them. Without it pages still read. */
(function () {
  "use strict";
  function key(cell) {
    var text = cell.getAttribute("data-sort") || cell.textContent.trim();
    var number = parseFloat(text.replace("−", "-"));
    return isNaN(number) ? text.toLowerCase() : number;
  }
  function sort(table, column, header) {
    var body = table.tBodies[0], up = header.getAttribute("aria-sort") !== "ascending";
    var rows = Array.prototype.slice.call(body.rows);
    rows.sort(function (a, b) {
      var x = key(a.cells[column]), y = key(b.cells[column]);
      if (typeof x !== typeof y) { x = String(x); y = String(y); }
      return (x < y ? -1 : x > y ? 1 : 0) * (up ? 1 : -1);
    });
    rows.forEach(function (row) { body.appendChild(row); });
    table.querySelectorAll("th").forEach(function (th) { th.removeAttribute("aria-sort"); });
    header.setAttribute("aria-sort", up ? "ascending" : "descending");
  }
  function filter(table, words) {
    var wanted = words.toLowerCase().split(/\s+/).filter(Boolean);
    Array.prototype.forEach.call(table.tBodies[0].rows, function (row) {
      var text = row.textContent.toLowerCase();
      row.hidden = !wanted.every(function (word) { return text.indexOf(word) >= 0; });
    });
  }
  function dress(table) {
    Array.prototype.forEach.call(table.tHead.rows[0].cells, function (th, column) {
      var button = document.createElement("button");
      button.type = "button";
      button.textContent = th.textContent;
      button.addEventListener("click", function () { sort(table, column, th); });
      th.textContent = "";
      th.appendChild(button);
    });
    var hint = table.getAttribute("data-filter");
    if (!hint) { return; }
    var box = document.createElement("input");
    box.type = "search";
    box.className = "wb-filter";
    box.placeholder = hint;
    box.setAttribute("aria-label", hint);
    box.addEventListener("input", function () { filter(table, box.value); });
    table.parentNode.parentNode.insertBefore(box, table.parentNode);
  }
  function openTarget() {
    var target = location.hash && document.getElementById(location.hash.slice(1));
    if (target && target.tagName === "DETAILS") { target.open = true; target.scrollIntoView(); }
  }
  document.querySelectorAll("table.wb-sortable").forEach(dress);
  window.addEventListener("hashchange", openTarget);
  openTarget();
})();
