"use strict";
(function () {
  var table = document.getElementById("class");
  var body = table.tBodies[0];
  var status = document.getElementById("sorted");
  var heads = Array.prototype.slice.call(table.tHead.rows[0].cells);
  document.getElementById("how-to-sort").hidden = false;

  function key(row, column, kind) {
    var text = row.cells[column].getAttribute("data-key");
    if (kind === "text") { return text.toLocaleLowerCase("en"); }
    return text === "" ? NaN : Number(text);
  }

  function compare(a, b, kind, down) {
    // What is missing stands last in either direction.
    var noA = kind === "text" ? a === "" : isNaN(a);
    var noB = kind === "text" ? b === "" : isNaN(b);
    if (noA || noB) { return noA === noB ? 0 : (noA ? 1 : -1); }
    var order = kind === "text" ? a.localeCompare(b, "en", { numeric: true }) : a - b;
    return down ? -order : order;
  }

  function sort(column) {
    var head = heads[column];
    var kind = head.getAttribute("data-sort");
    var down = head.getAttribute("aria-sort") === "ascending";
    var rows = Array.prototype.slice.call(body.rows).map(function (row, place) {
      return { row: row, key: key(row, column, kind), place: place };
    });
    rows.sort(function (a, b) { return compare(a.key, b.key, kind, down) || a.place - b.place; });
    rows.forEach(function (item) { body.appendChild(item.row); });
    heads.forEach(function (other) { other.removeAttribute("aria-sort"); });
    head.setAttribute("aria-sort", down ? "descending" : "ascending");
    status.textContent = "Sorted by " + head.textContent + ", " + (down ? "descending." : "ascending.");
  }

  heads.forEach(function (head, column) {
    var button = document.createElement("button");
    button.type = "button";
    while (head.firstChild) { button.appendChild(head.firstChild); }
    button.addEventListener("click", function () { sort(column); });
    head.appendChild(button);
  });
})();
