// What is drawn on the map: signs of fixed size, circles and ellipses true to scale, lines, grid.
"use strict";

var Marks = (function () {
  var SEMI_MAJOR = 6378137.0, ECCENTRICITY2 = 0.0066943799901413165;   // WGS 84

  // Degrees of longitude and latitude that one metre east and north is (ellipsoid).
  function degreesPerMetre(latitude) {
    var sin = Math.sin(latitude * Math.PI / 180), w2 = 1 - ECCENTRICITY2 * sin * sin;
    var prime = SEMI_MAJOR / Math.sqrt(w2) * Math.cos(latitude * Math.PI / 180);
    var meridian = SEMI_MAJOR * (1 - ECCENTRICITY2) / Math.pow(w2, 1.5);
    return [180 / Math.PI / Math.max(prime, 1), 180 / Math.PI / meridian];
  }

  // Outline of a verdict's sign about (0, 0), as steps for a canvas; the page's SVG uses it too.
  var SIGNS = {
    "accept": { circle: 5.2 },
    "remeasure": { points: [[0, -7], [6.6, 5], [-6.6, 5]] },
    "no result": { points: [[-5, -5], [5, -5], [5, 5], [-5, 5]], cross: 5, hollow: true }
  };

  function colours() {
    var style = getComputedStyle(document.documentElement);
    function of(name) { return style.getPropertyValue(name).trim(); }
    return {
      "accept": of("--accept"), "remeasure": of("--remeasure"), "no result": of("--none"),
      paper: of("--paper"), ink: of("--ink"), faint: of("--faint"), line: of("--sight")
    };
  }

  // A mark whose own `draw(ctx, colours)` paints it about (0, 0); `hidden` keeps it from eye and
  // pointer, `tiny` says that it is too small to be seen.
  var Mark = L.CircleMarker.extend({
    options: { interactive: false, bubblingMouseEvents: false },
    hidden: false,
    tiny: false,
    _updatePath: function () {
      if (this.hidden || this.tiny || !this._renderer._drawing || this._empty()) { return; }
      var ctx = this._renderer._ctx;
      ctx.save();
      ctx.globalAlpha = 1;               // the path drawn before leaves its own behind
      ctx.setLineDash([]);
      ctx.translate(this._point.x, this._point.y);
      this.draw(ctx, Marks.colours);
      ctx.restore();
    },
    _containsPoint: function (p) {
      return !this.hidden && L.CircleMarker.prototype._containsPoint.call(this, p);
    }
  });

  // Thousands of equal signs are painted from one small picture each, which is several times
  // quicker than stroking every outline anew.
  var SIZE = 26, stamps = {};
  function stamp(name, paint) {
    if (!stamps[name]) {
      var made = document.createElement("canvas"), fine = 3;
      made.width = made.height = SIZE * fine;
      var ctx = made.getContext("2d");
      ctx.scale(fine, fine);
      ctx.translate(SIZE / 2, SIZE / 2);
      paint(ctx, Marks.colours);
      stamps[name] = made;
    }
    return stamps[name];
  }

  function paintSign(verdict) {
    return function (ctx, colour) {
      var sign = SIGNS[verdict];
      ctx.beginPath();
      if (sign.circle) { ctx.arc(0, 0, sign.circle, 0, 2 * Math.PI); }
      else {
        sign.points.forEach(function (p, i) { ctx[i ? "lineTo" : "moveTo"](p[0], p[1]); });
        ctx.closePath();
      }
      ctx.lineJoin = "round";
      ctx.lineWidth = 4; ctx.strokeStyle = colour.paper; ctx.stroke();
      ctx.fillStyle = sign.hollow ? colour.paper : colour[verdict];
      ctx.fill();
      ctx.lineWidth = 1.6; ctx.strokeStyle = colour[verdict];
      if (sign.cross) {
        ctx.moveTo(-sign.cross, -sign.cross); ctx.lineTo(sign.cross, sign.cross);
        ctx.moveTo(-sign.cross, sign.cross); ctx.lineTo(sign.cross, -sign.cross);
      }
      ctx.stroke();
    };
  }

  var Sign = Mark.extend({
    options: { interactive: true, radius: 8 },
    initialize: function (place, verdict) {
      L.CircleMarker.prototype.initialize.call(this, place, {});
      this.verdict = verdict;
      this.chosen = false;
    },
    draw: function (ctx, colour) {
      if (this.chosen) {
        ctx.beginPath(); ctx.arc(0, 0, 12, 0, 2 * Math.PI);
        ctx.lineWidth = 3; ctx.strokeStyle = colour.ink; ctx.stroke();
      }
      ctx.drawImage(stamp(this.verdict, paintSign(this.verdict)), -SIZE / 2, -SIZE / 2, SIZE, SIZE);
    },
    _updateBounds: function () {         // room for the ring around the chosen one
      L.CircleMarker.prototype._updateBounds.call(this);
      this._pxBounds = L.bounds(this._pxBounds.min.subtract([7, 7]), this._pxBounds.max.add([7, 7]));
    }
  });

  function paintStation(ctx, colour) {
    ctx.beginPath();
    ctx.moveTo(0, -5); ctx.lineTo(4.6, 3.6); ctx.lineTo(-4.6, 3.6); ctx.closePath();
    ctx.lineJoin = "round";
    ctx.lineWidth = 3; ctx.strokeStyle = colour.paper; ctx.stroke();
    ctx.fillStyle = colour.ink; ctx.fill();
  }

  var Station = Mark.extend({
    options: { interactive: true, radius: 6 },
    draw: function (ctx) {
      ctx.drawImage(stamp("station", paintStation), -SIZE / 2, -SIZE / 2, SIZE, SIZE);
    }
  });

  // An ellipse given in metres and by the azimuth of its longer axis; a circle is one too.
  var Ellipse = Mark.extend({
    initialize: function (place, major, minor, azimuth, verdict) {
      L.CircleMarker.prototype.initialize.call(this, place, {});
      this.metres = [major, minor];
      this.turn = (azimuth - 90) * Math.PI / 180;
      this.verdict = verdict;
    },
    _project: function () {
      var zoom = this._map.getZoom();
      var perDegree = 256 * Math.pow(2, zoom) / 360;
      var perMetre = perDegree * degreesPerMetre(this._latlng.lat)[0];
      this.pixels = [this.metres[0] * perMetre, this.metres[1] * perMetre];
      this._radius = Math.max(this.pixels[0], 1);
      this.tiny = this.pixels[0] < 1.2;
      L.CircleMarker.prototype._project.call(this);
    },
    draw: function (ctx, colour) {
      ctx.beginPath();
      ctx.ellipse(0, 0, this.pixels[0], this.pixels[1], this.turn, 0, 2 * Math.PI);
      if (this.verdict) {
        ctx.globalAlpha = 0.22; ctx.fillStyle = colour[this.verdict]; ctx.fill();
        ctx.globalAlpha = 1; ctx.lineWidth = 1.5; ctx.strokeStyle = colour[this.verdict];
      } else {
        ctx.lineWidth = 1; ctx.setLineDash([5, 4]); ctx.strokeStyle = colour.ink;
        ctx.globalAlpha = 0.6;
      }
      ctx.stroke();
    }
  });

  // Light lines at round distances in metres, so that a plain page still has a measure.
  function grid(map) {
    var pane = map.createPane("grid");
    pane.style.zIndex = 150;
    var lines = L.layerGroup(), renderer = L.svg({ pane: "grid", padding: 0.5 });
    function draw() {
      lines.clearLayers();
      if (!map.hasLayer(lines)) { return; }
      var box = map.getBounds().pad(0.5), centre = map.options.gridCentre;
      var per = degreesPerMetre(centre[0]);
      var across = (box.getEast() - box.getWest()) / per[0];
      var step = nice(across / 12);
      var south = box.getSouth(), north = box.getNorth();
      var west = box.getWest(), east = box.getEast();
      var first = Math.ceil((west - centre[1]) / per[0] / step), x, y;
      var options = { renderer: renderer, pane: "grid", interactive: false, weight: 1,
        color: Marks.colours.faint };
      for (x = first; x < first + 60; x++) {
        var lng = centre[1] + x * step * per[0];
        if (lng > east) { break; }
        lines.addLayer(L.polyline([[south, lng], [north, lng]], options));
      }
      first = Math.ceil((south - centre[0]) / per[1] / step);
      for (y = first; y < first + 60; y++) {
        var lat = centre[0] + y * step * per[1];
        if (lat > north) { break; }
        lines.addLayer(L.polyline([[lat, west], [lat, east]], options));
      }
    }
    map.on("moveend", draw);
    lines.redraw = draw;
    lines.on("add", draw);
    return lines;
  }

  function nice(value) {
    var ten = Math.pow(10, Math.floor(Math.log(value) / Math.LN10)), part = value / ten;
    return ten * (part < 1.5 ? 1 : part < 3.5 ? 2 : part < 7.5 ? 5 : 10);
  }

  // The verdict signs of the page's own text, drawn from the same outlines.
  function signs(root) {
    root.querySelectorAll("svg.sign[data-verdict]").forEach(function (svg) {
      var verdict = svg.getAttribute("data-verdict"), sign = SIGNS[verdict];
      var shape = document.createElementNS("http://www.w3.org/2000/svg", "path");
      var r = sign.circle, d = sign.circle
        ? "M" + -r + " 0a" + r + " " + r + " 0 1 0 " + 2 * r + " 0a" + r + " " + r + " 0 1 0 " + -2 * r + " 0Z"
        : "M" + sign.points.map(function (p) { return p.join(" "); }).join("L") + "Z";
      if (sign.cross) {
        var c = sign.cross;
        d += "M" + -c + " " + -c + "L" + c + " " + c + "M" + -c + " " + c + "L" + c + " " + -c;
      }
      shape.setAttribute("d", d);
      shape.setAttribute("class", "v-" + verdict.replace(" ", "-"));
      svg.replaceChildren(shape);
    });
  }

  return { Sign: Sign, Station: Station, Ellipse: Ellipse, grid: grid, signs: signs,
    colours: null, readColours: function () { Marks.colours = colours(); stamps = {}; } };
})();
