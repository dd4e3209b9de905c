// The page: reads the round from its own text, ties table, filter, map and popups together.
"use strict";

function showRound(map, groups, background) {
  var content = JSON.parse(document.getElementById("content").textContent);
  var crops = null;                      // parsed when the first popup asks for it
  var SVG = "http://www.w3.org/2000/svg";
  var rows = content.objects.map(function (values, index) {
    var row = { index: index };
    content.fields.forEach(function (name, i) { row[name] = values[i]; });
    row.half = row.diameter_m && row.diameter_hi_m !== null && row.diameter_lo_m !== null
      ? 100 * (row.diameter_hi_m - row.diameter_lo_m) / 2 / row.diameter_m : null;
    return row;
  });
  var chosen = null, shown = rows, names = [], LINE = 0.8;

  Marks.readColours();
  Marks.signs(document);
  map.options.gridCentre = content.centre;
  map.attributionControl.setPrefix("Leaflet");
  L.control.scale({ imperial: false }).addTo(map);
  var popup = L.popup({ maxWidth: Math.min(380, window.innerWidth - 60), autoPanPadding: [12, 12] });

  // -- marks ------------------------------------------------------------------------------
  // A layer that is switched off at the start is made when it is first switched on.
  function fill(group, make) {
    var empty = true;
    function once() {
      if (empty) { empty = false; make(); }
    }
    if (map.hasLayer(group)) { once(); } else { group.on("add", once); }
  }
  fill(groups.ellipses, function () {
    rows.forEach(function (row) {
      if (!row.spot || !(row.spot[2] > 0)) { return; }
      row.ellipse = new Marks.Ellipse(row.spot.slice(0, 2), row.spot[2], row.spot[3], row.spot[4]);
      row.ellipse.hidden = row.hidden;
      row.ellipse.addTo(groups.ellipses);
    });
  });
  fill(groups.sightlines, function () {
    content.sightlines.forEach(function (line) {
      var station = content.stations[line[0]], row = rows[line[1]];
      if (!station[0] || !row.spot) { return; }
      var drawn = L.polyline([station[0], row.spot.slice(0, 2)], { interactive: false, weight: 1,
        color: Marks.colours.line, opacity: row.hidden ? 0 : LINE });
      drawn.addTo(groups.sightlines);
      (row.lines = row.lines || []).push(drawn);
    });
  });
  content.stations.forEach(function (station) {
    if (!station[0]) { return; }
    var mark = new Marks.Station(station[0]);
    mark.words = station[1] + " " + station[2] + " · " + station[3] +
      (station[4] === null ? "" : " · sd " + station[4].toFixed(1) + " m");
    mark.addTo(groups.stations);
  });
  groups.stations.bindTooltip(function (mark) { return text("span", mark.words); },
    { direction: "top", offset: [0, -6] });
  rows.forEach(function (row) {
    row.hidden = false;
    if (!row.spot) { return; }
    var place = row.spot.slice(0, 2), half = row.diameter_m / 2;
    if (row.diameter_m) {
      row.section = new Marks.Ellipse(place, half, half, 0, row.verdict).addTo(groups.sections);
    }
    row.mark = new Marks.Sign(place, row.verdict).addTo(groups.objects);
    row.mark.row = row;
  });
  groups.objects.on("click", function (event) { choose(event.propagatedFrom.row, true); });
  map.on("overlayadd", function (event) {
    if (event.layer !== groups.objects) { groups.objects.bringToFront(); }
  });

  var grid = Marks.grid(map).addTo(map);
  background.on("add", function () { grid.remove(); });
  background.on("remove", function () { grid.addTo(map); });

  function bounds(some) {
    var box = L.latLngBounds([]);
    some.forEach(function (row) { if (row.spot) { box.extend(row.spot.slice(0, 2)); } });
    return box;
  }
  function everything() {
    var box = bounds(rows);
    content.stations.forEach(function (station) { if (station[0]) { box.extend(station[0]); } });
    return box;
  }
  function fit(box) {
    if (box.isValid()) { map.fitBounds(box, { padding: [36, 36], maxZoom: 21, animate: false }); }
  }

  // -- names beside the marks, when few enough are in sight ----------------------------------
  function label() {
    names.forEach(function (name) { name.remove(); });
    names = [];
    if (!map.hasLayer(groups.objects)) { return; }
    var box = map.getBounds(), taken = [];
    var seen = shown.filter(function (row) { return row.spot && box.contains(row.spot.slice(0, 2)); });
    if (seen.length > 150) { return; }
    var spots = seen.map(function (row) { return map.latLngToContainerPoint(row.spot.slice(0, 2)); });
    spots.forEach(function (at) { taken.push([at.x - 7, at.y - 7, at.x + 7, at.y + 7]); });
    seen.forEach(function (row, i) {
      var at = spots[i], name = row.object.length > 24 ? row.object.slice(0, 23) + "…" : row.object;
      var area = [at.x + 9, at.y - 8, at.x + 15 + 6.8 * name.length, at.y + 8];
      if (taken.some(function (t) {
        return area[0] < t[2] && area[2] > t[0] && area[1] < t[3] && area[3] > t[1];
      })) { return; }
      taken.push(area);
      names.push(L.tooltip({ permanent: true, direction: "right", offset: [8, 0],
        className: "name", interactive: false })
        .setLatLng(row.spot.slice(0, 2)).setContent(text("span", name)).addTo(map));
    });
  }
  map.on("moveend overlayadd overlayremove", label);

  // -- choosing -------------------------------------------------------------------------------
  var table = new Table(document.getElementById("list"), function (row) { choose(row, false); });
  function choose(row, onMap) {
    if (chosen && chosen.mark) { chosen.mark.chosen = false; chosen.mark.redraw(); }
    chosen = row;
    table.mark(row);
    if (!row.mark) {
      map.closePopup();
      lift(row);                         // it stands nowhere on the map, yet has its figures
      return;
    }
    row.mark.chosen = true;
    row.mark.bringToFront();
    row.mark.redraw();
    var place = L.latLng(row.spot[0], row.spot[1]);
    if (!onMap && !map.getBounds().pad(-0.15).contains(place)) {
      map.setView(place, Math.max(map.getZoom(), 18), { animate: false });
    }
    if (narrow.matches) { lift(row); }
    else { popup.setLatLng(place).setContent(card(row)).openOn(map); }
  }
  // On a narrow screen a popup would hide the map it stands on, so the card lies over the table.
  var narrow = window.matchMedia("(max-width: 760px)"), sheet = document.getElementById("sheet");
  function lift(row) {
    var close = text("button", "×");
    close.type = "button";
    close.setAttribute("aria-label", "Close");
    close.addEventListener("click", function () { sheet.hidden = true; close.blur(); });
    sheet.replaceChildren(close, card(row));
    sheet.hidden = false;
    sheet.scrollTop = 0;
    if (row.mark) {                      // keep the object in what the card leaves of the map
      var stage = map.getContainer().getBoundingClientRect();
      var free = Math.max(60, sheet.getBoundingClientRect().top - stage.top);
      var at = map.latLngToContainerPoint(row.spot.slice(0, 2));
      map.panBy([at.x - stage.width / 2, at.y - free / 2], { animate: false });
    }
  }
  document.addEventListener("keydown", function (event) {
    if (event.key === "Escape") { map.closePopup(); sheet.hidden = true; }
  });
  map.on("popupclose", function () {
    if (chosen && chosen.mark) { chosen.mark.chosen = false; chosen.mark.redraw(); }
  });

  function card(row) {
    var box = text("div", "", "card");
    var head = text("h2", row.object);
    var sign = document.createElementNS(SVG, "svg");
    sign.setAttribute("class", "sign");
    sign.setAttribute("viewBox", "-8 -8 16 16");
    sign.setAttribute("data-verdict", row.verdict);
    head.prepend(sign);
    box.append(head, text("p", [row.kind, row.label].filter(Boolean).join(" · "), "sub"));
    if (row.diameter_m !== null) {
      var big = text("p", row.diameter_m.toFixed(3) + " m", "big");
      if (row.diameter_lo_m !== null || row.diameter_hi_m !== null) {
        big.append(text("small", "95 %: " + end(row.diameter_lo_m) + " … " + end(row.diameter_hi_m)));
      }
      box.append(big);
    }
    box.append(text("p", row.verdict, "verdict"));
    if (row.reasons.length) {
      var list = text("ul", "", "reasons");
      row.reasons.forEach(function (reason) { list.append(text("li", reason)); });
      box.append(list);
    }
    box.append(views(row));
    var facts = text("dl", "");
    function fact(name, value) { if (value) { facts.append(text("dt", name), text("dd", value)); } }
    fact("Readings", row.reading_a_m === null && row.reading_b_m === null ? "" :
      metres(row.reading_a_m, 3) + " and " + metres(row.reading_b_m, 3) +
      (row.agreement === null ? "" : " (" + row.agreement.toFixed(1) + " sd apart)"));
    fact("Girth", metres(row.girth_m, 3));
    fact("At height", metres(row.ref_height_m, 2));
    fact("Height", plusMinus(row.height_m, row.height_sd_m, 2, " m"));
    fact("Lean", plusMinus(row.lean_deg, row.lean_sd_deg, 1, "°") +
      (row.lean_deg !== null && row.lean_to_deg !== null ? " to " + row.lean_to_deg.toFixed(0) + "°" : ""));
    fact("Position sd", metres(row.position_sd_m, 2));
    fact("Pair", row.pair);
    box.append(facts);
    Marks.signs(box);
    return box;
  }

  function views(row) {
    crops = crops || JSON.parse(document.getElementById("crops").textContent);
    var box = text("div", "", "views"), held = crops[row.index];
    if (!held.length) { return text("p", ""); }
    held.forEach(function (view) {
      var figure = text("figure", ""), svg = document.createElementNS(SVG, "svg");
      svg.setAttribute("viewBox", "0 0 " + view.width + " " + view.height);
      svg.setAttribute("role", "img");
      svg.setAttribute("aria-label", row.object + " in " + view.photo);
      function add(tag, attributes) {
        var made = document.createElementNS(SVG, tag);
        Object.keys(attributes).forEach(function (k) { made.setAttribute(k, attributes[k]); });
        svg.append(made);
      }
      add("image", { href: "data:image/jpeg;base64," + view.jpeg, width: view.width, height: view.height });
      view.outline.forEach(function (d) {
        add("path", { d: d, "class": "under" });
        add("path", { d: d, "class": "limb" });
      });
      if (view.section) {
        add("path", { d: view.section, "class": "under" });
        add("path", { d: view.section, "class": "cut" });
      }
      view.marks.forEach(function (mark) {
        var d = "M" + (mark[1] - 3) + " " + mark[2] + "h6M" + mark[1] + " " + (mark[2] - 3) + "v6";
        add("path", { d: d, "class": "under" });
        add("path", { d: d, "class": "mark" });
      });
      figure.append(svg, text("figcaption", view.photo));
      box.append(figure);
    });
    return box;
  }

  function end(value) { return value === null ? "open" : value.toFixed(3) + " m"; }
  function metres(value, digits) { return value === null ? "" : value.toFixed(digits) + " m"; }
  function plusMinus(value, sd, digits, unit) {
    if (value === null) { return ""; }
    return value.toFixed(digits) + unit + (sd === null ? "" : " ± " + sd.toFixed(digits) + unit + " (sd)");
  }
  // Text goes into the page as text, never as HTML: names come from people's sheets.
  function text(tag, words_, kind) {
    var made = document.createElement(tag);
    made.textContent = words_;
    if (kind) { made.className = kind; }
    return made;
  }

  // -- filter ---------------------------------------------------------------------------------
  var form = {};
  ["find", "label", "kind", "from", "to"].forEach(function (id) {
    form[id] = document.getElementById(id);
    form[id].addEventListener("input", filter);
  });
  var boxes = Array.from(document.querySelectorAll("input[name=verdict]"));
  boxes.forEach(function (box) { box.addEventListener("change", filter); });

  function filter() {
    var find = form.find.value.trim().toLowerCase(), label_ = form.label.value.trim().toLowerCase();
    var low = parseFloat(form.from.value), high = parseFloat(form.to.value), kind = form.kind.value;
    var verdicts = boxes.filter(function (b) { return b.checked; }).map(function (b) { return b.value; });
    shown = rows.filter(function (row) {
      var fits = row.object.toLowerCase().includes(find) &&
        (!label_ || row.label.toLowerCase().includes(label_)) &&
        (!kind || row.kind === kind) && verdicts.includes(row.verdict) &&
        (isNaN(low) || (row.diameter_m !== null && row.diameter_m >= low)) &&
        (isNaN(high) || (row.diameter_m !== null && row.diameter_m <= high));
      set(row, !fits);
      return fits;
    });
    table.show(shown);
    document.getElementById("shown").textContent =
      shown.length + " of " + rows.length + (rows.length === 1 ? " object" : " objects");
    label();
  }
  function set(row, hidden) {
    if (row.hidden === hidden) { return; }
    row.hidden = hidden;
    [row.mark, row.section, row.ellipse].forEach(function (mark) {
      if (mark) { mark.hidden = hidden; if (mark._map) { mark.redraw(); } }
    });
    (row.lines || []).forEach(function (line) { line.setStyle({ opacity: hidden ? 0 : LINE }); });
    if (hidden && chosen === row) { map.closePopup(); }
  }
  document.getElementById("fit").addEventListener("click", function () { fit(bounds(shown)); });
  document.getElementById("clear").addEventListener("click", function () {
    ["find", "label", "kind", "from", "to"].forEach(function (id) { form[id].value = ""; });
    boxes.forEach(function (box) { box.checked = true; });
    filter();
  });

  // -- light and dark, print, start -------------------------------------------------------------
  window.matchMedia("(prefers-color-scheme: dark)").addEventListener("change", repaint);
  function repaint() {
    Marks.readColours();
    groups.sightlines.setStyle({ color: Marks.colours.line });
    [groups.ellipses, groups.sections, groups.stations, groups.objects].forEach(function (group) {
      group.eachLayer(function (mark) { if (mark._map) { mark.redraw(); } });
    });
    grid.redraw();
  }
  var before = null;
  window.addEventListener("beforeprint", function () {
    before = { centre: map.getCenter(), zoom: map.getZoom() };
    document.getElementById("legend").open = true;
    document.documentElement.classList.add("printing");
    map.invalidateSize({ animate: false, pan: false });
    fit(bounds(shown).isValid() ? bounds(shown) : everything());
  });
  window.addEventListener("afterprint", function () {
    document.documentElement.classList.remove("printing");
    map.invalidateSize({ animate: false, pan: false });
    if (before) { map.setView(before.centre, before.zoom, { animate: false }); }
  });

  if (narrow.matches) {
    document.getElementById("legend").open = false;
    document.getElementById("filters").open = false;
  }
  map.invalidateSize({ animate: false });
  fit(everything());
  filter();
  var named = location.hash.replace(/^#object=/, "");
  try { named = decodeURIComponent(named); } catch (error) { /* a name with a bare % */ }
  var asked = location.hash && rows.find(function (row) { return row.object === named; });
  if (asked) { choose(asked, false); }
  document.documentElement.setAttribute("data-ready", "yes");
}
