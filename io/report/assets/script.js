(function () {
  "use strict";
  var map = document.getElementById("map"), stage = document.getElementById("stage");
  var out = document.getElementById("read"), cross = document.getElementById("cross");
  var w = +map.dataset.w, h = +map.dataset.h, n = +map.dataset.n, digits = +map.dataset.digits;
  var places = map.dataset.places ? map.dataset.places.split(" ").map(Number) : [];
  var bands = Array.from(map.querySelectorAll("#bands path")).reverse();
  var regions = Array.from(map.querySelectorAll("#regions path.region")).reverse();
  var at = { x: w / 2, y: h / 2 }, waiting = null;
  out.textContent = "Point at the map, or move to it with the Tab key and use the arrow keys, to read places.";

  // weights of the three nodes around t for a parabola through them
  function near(t) {
    var i = Math.min(Math.max(Math.round(t), 1), n - 2), d = t - i;
    return { i: i, w: [d * (d - 1) / 2, 1 - d * d, d * (d + 1) / 2] };
  }
  function place(x, y) {
    if (!places.length) { return null; }
    var a = near(x / w * (n - 1)), b = near(y / h * (n - 1)), lon = 0, lat = 0;
    for (var j = 0; j < 3; j++) {
      for (var i = 0; i < 3; i++) {
        var k = 2 * ((b.i + j - 1) * n + a.i + i - 1), c = a.w[i] * b.w[j];
        lon += c * places[k];
        lat += c * places[k + 1];
      }
    }
    return { lon: lon, lat: lat };
  }
  function degrees(v, positive, negative) {
    return Math.abs(v).toFixed(digits) + "° " + (v < 0 ? negative : positive);
  }
  function placeText(p) {
    if (!p) { return "no position here"; }
    if (map.dataset.placeless) { return "x " + p.lon.toPrecision(6) + ", y " + p.lat.toPrecision(6); }
    var lon = ((p.lon + 180) % 360 + 360) % 360 - 180;
    return degrees(p.lat, "N", "S") + ", " + degrees(lon, "E", "W");
  }
  function inside(list, x, y) {
    var q = map.createSVGPoint();
    q.x = x;
    q.y = y;
    for (var i = 0; i < list.length; i++) {
      if (list[i].isPointInFill(q)) { return list[i].dataset.text; }
    }
    return "";
  }
  function tell() {
    waiting = null;
    var band = inside(bands, at.x, at.y), region = inside(regions, at.x, at.y);
    out.textContent = placeText(place(at.x, at.y)) + ": " + (band || "below the lowest band shown") +
      (region ? "; inside the " + region : "; outside the regions");
  }
  function move(x, y) {
    at.x = Math.min(Math.max(x, 0), w);
    at.y = Math.min(Math.max(y, 0), h);
    if (!waiting) { waiting = requestAnimationFrame(tell); }
  }
  stage.addEventListener("pointermove", function (e) {
    var m = map.getScreenCTM();
    if (!m) { return; }
    var q = map.createSVGPoint();
    q.x = e.clientX;
    q.y = e.clientY;
    q = q.matrixTransform(m.inverse());
    if (q.x >= 0 && q.y >= 0 && q.x <= w && q.y <= h) { move(q.x, q.y); }
  });
  function showCross(on) {
    cross.setAttribute("class", on ? "" : "off");
    cross.setAttribute("transform", "translate(" + Math.round(at.x) + " " + Math.round(at.y) + ")");
  }
  stage.tabIndex = 0;
  stage.setAttribute("role", "application");
  stage.setAttribute("aria-label", "Map. Arrow keys move a cross, with Shift further; the place and the intensity there are read out.");
  stage.addEventListener("focus", function () { showCross(true); move(at.x, at.y); });
  stage.addEventListener("blur", function () { showCross(false); });
  stage.addEventListener("keydown", function (e) {
    var step = w / (e.shiftKey ? 16 : 96);
    var d = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] }[e.key];
    if (e.target !== stage || !d || e.ctrlKey || e.altKey || e.metaKey) { return; }
    e.preventDefault();
    move(at.x + d[0] * step, at.y + d[1] * step);
    showCross(true);
  });
})();
