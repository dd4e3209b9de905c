// The table beside the map: filtered, sorted, and only as many rows in the page as are in sight.
"use strict";

var Table = (function () {
  var COLUMNS = [
    { key: "verdict", head: "", sort: "verdict", wide: 30 },
    { key: "object", head: "Object", sort: "object", text: true },
    { key: "kind", head: "Kind", sort: "kind", wide: 64 },
    { key: "diameter_m", head: "Diameter, m", sort: "diameter_m", number: 3, wide: 88 },
    { key: "half", head: "± 95 %", sort: "half", number: 1, unit: " %", wide: 66 },
    { key: "height_m", head: "Height, m", sort: "height_m", number: 2, wide: 76 }
  ];

  function compare(a, b) {
    if (a === b) { return 0; }
    if (a === null || a === undefined) { return 1; }   // what is not known stands last
    if (b === null || b === undefined) { return -1; }
    if (typeof a === "number") { return a - b; }
    return a.localeCompare(b, "en", { numeric: true });
  }

  function Table(root, choose) {
    this.root = root;
    this.choose = choose;
    this.rows = [];
    this.chosen = null;
    this.by = null;
    this.down = false;
    this.head = element("div", "thead");
    this.head.setAttribute("role", "row");
    this.body = element("div", "tbody");
    this.space = element("div", "space");
    this.body.appendChild(this.space);
    root.appendChild(this.head);
    root.appendChild(this.body);
    var table = this;
    COLUMNS.forEach(function (column) {
      var cell = element("button", "c-" + column.key);
      cell.type = "button";
      cell.setAttribute("role", "columnheader");
      cell.textContent = column.head;
      cell.title = "Sort by " + (column.head || "verdict");
      cell.addEventListener("click", function () { table.sort(column.sort); });
      table.head.appendChild(cell);
    });
    root.addEventListener("scroll", function () { table.paint(); });
    window.addEventListener("resize", function () { table.paint(); });
    root.addEventListener("keydown", function (event) { table.key(event); });
  }

  Table.prototype.show = function (rows) {
    this.all = rows;
    this.rows = rows.slice();
    this.order();
    this.root.setAttribute("aria-rowcount", this.rows.length);
    this.paint(true);
  };

  Table.prototype.sort = function (by) {
    this.down = this.by === by ? !this.down : false;
    this.by = by;
    this.rows = this.all.slice();
    this.order();
    this.paint(true);
  };

  Table.prototype.order = function () {
    var by = this.by, sign = this.down ? -1 : 1;
    COLUMNS.forEach(function (column, i) {
      var cell = this.head.children[i];
      var on = column.sort === by;
      cell.setAttribute("aria-sort", on ? (this.down ? "descending" : "ascending") : "none");
    }, this);
    if (!by) { return; }
    this.rows.sort(function (a, b) {
      var known = (a[by] === null) - (b[by] === null);
      return known || sign * compare(a[by], b[by]) || a.index - b.index;
    });
  };

  Table.prototype.height = function () {
    return parseFloat(getComputedStyle(this.root).getPropertyValue("--row")) || 32;
  };

  Table.prototype.paint = function (anew) {
    var high = this.height(), top = Math.max(0, this.root.scrollTop);
    var first = Math.max(0, Math.floor(top / high) - 6);
    var last = Math.min(this.rows.length, first + Math.ceil(this.root.clientHeight / high) + 14);
    this.space.style.height = this.rows.length * high + "px";
    if (!anew && this.first === first && this.last === last) { return; }
    this.first = first;
    this.last = last;
    var part = document.createDocumentFragment();
    for (var i = first; i < last; i++) { part.appendChild(this.line(this.rows[i], i, high)); }
    this.space.replaceChildren(part);
    Marks.signs(this.space);
  };

  Table.prototype.line = function (row, i, high) {
    var line = element("div", "row" + (row === this.chosen ? " chosen" : ""));
    line.setAttribute("role", "row");
    line.setAttribute("aria-rowindex", i + 1);
    line.setAttribute("data-object", row.object);
    line.style.top = i * high + "px";
    var table = this;
    COLUMNS.forEach(function (column) {
      var cell = element("span", "c-" + column.key), value = row[column.key];
      cell.setAttribute("role", "cell");
      if (column.key === "verdict") {
        var sign = document.createElementNS("http://www.w3.org/2000/svg", "svg");
        sign.setAttribute("class", "sign");
        sign.setAttribute("viewBox", "-8 -8 16 16");
        sign.setAttribute("role", "img");
        sign.setAttribute("aria-label", value);
        sign.setAttribute("data-verdict", value);
        cell.appendChild(sign);
      } else if (column.number !== undefined) {
        cell.textContent = value === null ? "–" : value.toFixed(column.number) + (column.unit || "");
      } else {
        cell.textContent = value;
        if (column.key === "object" && row.label) {
          var label = element("small");
          label.textContent = row.label;
          cell.appendChild(label);
        }
        cell.title = column.key === "object" && row.label ? value + " – " + row.label : value;
      }
      line.appendChild(cell);
    });
    line.addEventListener("click", function () { table.choose(row); });
    return line;
  };

  Table.prototype.mark = function (row) {
    this.chosen = row;
    var i = this.rows.indexOf(row), high = this.height();
    if (i >= 0) {
      var room = this.root.clientHeight - this.head.offsetHeight;
      var top = this.root.scrollTop;
      if (i * high < top || (i + 1) * high > top + room) {
        this.root.scrollTop = i * high - room / 2;
      }
    }
    this.paint(true);
  };

  Table.prototype.key = function (event) {
    var step = { ArrowDown: 1, ArrowUp: -1, PageDown: 10, PageUp: -10 }[event.key];
    if (!step || !this.rows.length) { return; }
    event.preventDefault();
    var at = this.rows.indexOf(this.chosen);
    var to = at < 0 ? 0 : Math.min(this.rows.length - 1, Math.max(0, at + step));
    this.choose(this.rows[to]);
  };

  function element(tag, kind) {
    var made = document.createElement(tag);
    if (kind) { made.className = kind; }
    return made;
  }

  return Table;
})();
