// Point at a table row and the mark of the same lot or limit lights up in the figures, and the other way round.
(function () {
  "use strict";
  var lit = [];

  function light(key, scope) {
    lit.forEach(function (element) { element.classList.remove("lit"); });
    lit = key === null ? [] : Array.prototype.filter.call(scope.querySelectorAll("[data-key]"), function (element) {
      return element.getAttribute("data-key") === key;
    });
    lit.forEach(function (element) { element.classList.add("lit"); });
  }

  function turn(event) {
    var target = event.target.closest ? event.target.closest("[data-key]") : null;
    // In a pack every page is an article of its own.
    light(target ? target.getAttribute("data-key") : null, (target && target.closest("article")) || document);
  }

  document.addEventListener("pointerover", turn);
  document.addEventListener("focusin", turn);
})();
