(function () {
  "use strict";
  var holder = document.getElementById("pointing-data");
  var picture = document.querySelector("#figure-map .drawing");
  var told = document.getElementById("pointing");
  if (!holder || !picture || !told) { return; }
  var map = JSON.parse(holder.textContent);
  var at = null;
  var mark = document.createElement("span");
  mark.className = "pointed";
  mark.hidden = true;
  picture.appendChild(mark);
  picture.tabIndex = 0;
  told.hidden = false;

  function scaled(axis, value) { return axis.log ? Math.log(value) : value; }

  function share(axis, value) {
    var low = scaled(axis, axis.ends[0]), high = scaled(axis, axis.ends[1]);
    return (scaled(axis, value) - low) / (high - low);
  }

  function nearest(axis, wanted) {
    var best = 0;
    axis.levels.forEach(function (level, i) {
      if (Math.abs(share(axis, level) - wanted) < Math.abs(share(axis, axis.levels[best]) - wanted)) {
        best = i;
      }
    });
    return best;
  }

  function per_cent(mille) {
    if (mille === 0) { return "under 0.1 %"; }
    return mille === 1000 ? "over 99.9 %" : (mille / 10).toFixed(1) + " %";
  }

  function tell(panel, i, j) {
    var p = panel.p[j][i];
    var where = [panel.x.texts[i], panel.y.texts[j]].concat(panel.held).join(", ");
    at = { panel: panel, i: i, j: j };
    told.textContent = where + ": " +
      (p === null ? "not allowed" : per_cent(p) + (map.chance ? " probable that " : " of ") + map.says);
    mark.hidden = false;
    mark.style.left = 100 * (panel.box[0] + panel.box[2] * share(panel.x, panel.x.levels[i])) + "%";
    mark.style.top = 100 * (panel.box[1] + panel.box[3] * (1 - share(panel.y, panel.y.levels[j]))) + "%";
  }

  function point(event) {
    var size = picture.getBoundingClientRect();
    var x = (event.clientX - size.left) / size.width, y = (event.clientY - size.top) / size.height;
    map.panels.forEach(function (panel) {
      var across = (x - panel.box[0]) / panel.box[2], down = (y - panel.box[1]) / panel.box[3];
      if (across >= 0 && across <= 1 && down >= 0 && down <= 1) {
        tell(panel, nearest(panel.x, across), nearest(panel.y, 1 - down));
      }
    });
  }

  var moves = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] };

  function step(event) {
    var move = moves[event.key];
    if (!move) { return; }
    event.preventDefault();
    var panel = at ? at.panel : map.panels[0];
    var i = at ? at.i + move[0] : Math.floor(panel.x.levels.length / 2);
    var j = at ? at.j + move[1] : Math.floor(panel.y.levels.length / 2);
    tell(panel, Math.min(Math.max(i, 0), panel.x.levels.length - 1),
      Math.min(Math.max(j, 0), panel.y.levels.length - 1));
  }

  picture.addEventListener("pointermove", point);
  picture.addEventListener("pointerdown", point);
  picture.addEventListener("keydown", step);
}());
