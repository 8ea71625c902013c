(function () {
  "use strict";
  var strip = document.getElementById("strip");
  var pinned = null;

  function all(selector) { return Array.prototype.slice.call(document.querySelectorAll(selector)); }
  function kindOf(element) { return element.hasAttribute("data-line") ? "line" : "phase"; }
  function valueOf(element) { return element.getAttribute("data-" + kindOf(element)); }
  function row(kind, value) { return document.getElementById(kind + "-" + value); }

  // The parts that belong to a line: its row and its marks. To a phase: its row, its place on the axis, its lines.
  function parts(kind, value) {
    var found = all("[data-" + kind + "='" + value + "']");
    if (kind === "phase") {
      all("tr[data-claims]").forEach(function (line) {
        if (line.getAttribute("data-claims").split(" ").indexOf(value) >= 0) {
          found = found.concat(all("[data-line='" + line.getAttribute("data-line") + "']"));
        }
      });
    } else {
      (row("line", value).getAttribute("data-claims") || "").split(" ").filter(Boolean).forEach(function (phase) {
        found = found.concat(all("[data-phase='" + phase + "']"));
      });
    }
    return found;
  }

  function clear() {
    all(".lit").forEach(function (element) { element.classList.remove("lit"); });
    all(".dimmed").forEach(function (element) { element.classList.remove("dimmed"); });
    all("button.pick[aria-pressed='true']").forEach(function (b) { b.setAttribute("aria-pressed", "false"); });
  }

  function show(kind, value) {
    clear();
    if (kind === null) { strip.hidden = true; strip.textContent = ""; return; }
    parts(kind, value).forEach(function (element) { element.classList.add("lit"); });
    all("figure").forEach(function (figure) { figure.classList.add("dimmed"); });
    var own = row(kind, value);
    strip.textContent = own.getAttribute("data-say");
    strip.hidden = false;
    if (pinned && pinned[0] === kind && pinned[1] === value) {
      own.querySelector("button.pick").setAttribute("aria-pressed", "true");
    }
  }

  function rest() { if (pinned) { show(pinned[0], pinned[1]); } else { show(null); } }

  function toggle(kind, value) {
    pinned = pinned && pinned[0] === kind && pinned[1] === value ? null : [kind, value];
    if (pinned) { show(kind, value); } else { rest(); }
  }

  function target(event) {
    var element = event.target.closest ? event.target.closest("[data-line], [data-phase]") : null;
    return element && row(kindOf(element), valueOf(element)) ? element : null;
  }

  document.addEventListener("pointerover", function (event) {
    if (event.pointerType === "touch") { return; }
    var element = target(event);
    if (element) { show(kindOf(element), valueOf(element)); } else { rest(); }
  });
  document.addEventListener("click", function (event) {
    var element = target(event);
    if (element) { toggle(kindOf(element), valueOf(element)); }
  });
  document.addEventListener("focusin", function (event) {
    var element = target(event);
    if (element) { show(kindOf(element), valueOf(element)); }
  });
  document.addEventListener("keydown", function (event) {
    if (event.key === "Escape") { pinned = null; show(null); return; }
    var step = { ArrowDown: 1, ArrowRight: 1, ArrowUp: -1, ArrowLeft: -1 }[event.key];
    if (!step) { return; }
    var figure = event.target.closest("figure[data-steps]");
    var button = event.target.closest("button.pick");
    if (figure) {
      var kind = figure.getAttribute("data-steps");
      var rows = all("tr[id^='" + kind + "-']");
      var now = pinned && pinned[0] === kind ? rows.indexOf(row(kind, pinned[1])) : (step > 0 ? -1 : 0);
      var next = rows[(now + step + rows.length) % rows.length];
      if (next) { pinned = [kind, valueOf(next)]; show(kind, valueOf(next)); event.preventDefault(); }
    } else if (button) {
      var buttons = all("button.pick").filter(function (b) { return b.closest("table") === button.closest("table"); });
      var other = buttons[buttons.indexOf(button) + step];
      if (other) { other.focus(); event.preventDefault(); }
    }
  });
}());
