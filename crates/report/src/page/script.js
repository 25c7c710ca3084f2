"use strict";
(function () {
  // The switch of colours: what the system says until somebody says otherwise.
  var root = document.documentElement, shade = document.getElementById("shade");
  var system = window.matchMedia("(prefers-color-scheme: dark)");
  function dark() {
    if (root.hasAttribute("data-dark")) return true;
    return !root.hasAttribute("data-light") && system.matches;
  }
  function name() { shade.textContent = dark() ? "light" : "dark"; shade.setAttribute("aria-label", "Switch to " + shade.textContent + " colours"); }
  shade.hidden = false;
  shade.addEventListener("click", function () {
    var to = dark() ? "data-light" : "data-dark";
    root.removeAttribute("data-light"); root.removeAttribute("data-dark");
    root.setAttribute(to, "");
    name();
  });
  system.addEventListener("change", name);
  name();

  // Values of charts, under the pointer and by arrow keys.
  document.querySelectorAll(".stage").forEach(function (stage) {
    var number = stage.dataset.figure;
    var data = JSON.parse(document.getElementById("values-" + number).textContent);
    var readout = stage.nextElementSibling, spot = stage.querySelector(".spot");
    var lines = data.lines.filter(function (l) { return l.points.length > 0; });
    if (lines.length === 0) return;
    // Arrow keys go along a line in the order of x.
    lines.forEach(function (l) { l.points.sort(function (a, b) { return a[0] - b[0]; }); });
    var line = 0, point = 0, shown = false;
    var hint = "Point at the chart for values; or focus it: left and right arrows go along a line, up and down change the line.";

    // Where the plot is inside the stage, in pixels.
    function plot() {
      var narrow = getComputedStyle(stage.querySelector(".narrow")).display !== "none";
      var svg = stage.querySelector(narrow ? ".narrow svg" : ".wide svg").getBoundingClientRect();
      var box = stage.getBoundingClientRect(), share = narrow ? data.narrow : data.wide;
      return {
        left: svg.left - box.left - stage.clientLeft + share[0] * svg.width, top: svg.top - box.top - stage.clientTop + share[1] * svg.height,
        width: (share[2] - share[0]) * svg.width, height: (share[3] - share[1]) * svg.height
      };
    }
    function place(p, area) {
      return [area.left + p[0] / 10000 * area.width, area.top + (1 - p[1] / 10000) * area.height];
    }
    function quantity(axis, text) { return axis[0] + " = " + text + (axis[1] ? " " + axis[1] : ""); }
    function show() {
      var p = lines[line].points[point], at = place(p, plot());
      spot.style.left = at[0] + "px"; spot.style.top = at[1] + "px";
      spot.hidden = false;
      readout.classList.remove("hint");
      readout.textContent = (lines[line].name ? lines[line].name + " · " : "") + quantity(data.x, p[2]) + " · " + quantity(data.y, p[3]);
      shown = true;
    }
    function clear() { spot.hidden = true; shown = false; readout.classList.add("hint"); readout.textContent = hint; }
    function nearest(x, y) {
      var area = plot(), best = Infinity;
      lines.forEach(function (l, i) {
        l.points.forEach(function (p, k) {
          var at = place(p, area), d = (at[0] - x) * (at[0] - x) + (at[1] - y) * (at[1] - y);
          if (d < best) { best = d; line = i; point = k; }
        });
      });
    }
    function pointed(event) {
      var box = stage.getBoundingClientRect();
      nearest(event.clientX - box.left - stage.clientLeft, event.clientY - box.top - stage.clientTop);
      show();
    }
    // Another line keeps the place along x.
    function change(by) {
      var x = lines[line].points[point][0];
      line = (line + by + lines.length) % lines.length;
      point = 0;
      lines[line].points.forEach(function (p, k) {
        if (Math.abs(p[0] - x) < Math.abs(lines[line].points[point][0] - x)) point = k;
      });
    }
    var keys = {
      ArrowRight: function () { point = Math.min(point + 1, lines[line].points.length - 1); },
      ArrowLeft: function () { point = Math.max(point - 1, 0); },
      ArrowUp: function () { change(-1); },
      ArrowDown: function () { change(1); },
      Home: function () { point = 0; },
      End: function () { point = lines[line].points.length - 1; }
    };
    stage.tabIndex = 0;
    stage.setAttribute("role", "application");
    stage.setAttribute("aria-label", "Values of figure " + number + ". Left and right arrows go along a line, up and down change the line.");
    stage.addEventListener("keydown", function (event) {
      if (event.key === "Escape") { clear(); return; }
      if (!keys.hasOwnProperty(event.key) || event.ctrlKey || event.metaKey || event.altKey) return;
      event.preventDefault();
      if (shown) keys[event.key]();
      show();
    });
    stage.addEventListener("pointermove", pointed);
    stage.addEventListener("pointerdown", pointed);
    stage.addEventListener("pointerleave", function (event) { if (event.pointerType === "mouse" && document.activeElement !== stage) clear(); });
    stage.addEventListener("blur", clear);
    window.addEventListener("resize", function () { if (shown) show(); });
    readout.hidden = false;
    clear();
  });
})();
