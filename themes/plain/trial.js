// Trial blend: shares in, composition, cost and limits out.  What the house rules keep apart never stands together.
(function () {
  "use strict";
  var MINUS = "\u2212", NEAR = 1e-9, ALL = 100;

  // A blend's value from its index value, as the blend rule says.
  function own(rule, index) {
    if (rule === "harmonic") return 1 / index;
    if (rule === "log") return Math.exp(index);
    if (rule === "loglog") return Math.exp(Math.exp(index)) - 0.8;
    if (rule === "flash") return 2414 / (Math.log10(index) + 6.1188) + 42.6 - 273.15;
    if (rule.indexOf("power:") === 0) return Math.pow(index, 1 / parseFloat(rule.slice(6)));
    return index;
  }

  function shown(value, places) {
    var text = value.toFixed(places);
    if (!/[1-9]/.test(text)) text = text.replace("-", "");
    return text.replace("-", MINUS);
  }

  // A share as its field shows it; what is reckoned with has all its digits until somebody types.
  function typed(share) {
    return String(Math.round(share * 1e3) / 1e3);
  }

  function make(tag, words, name) {
    var element = document.createElement(tag);
    if (words !== undefined) element.textContent = words;
    if (name) element.className = name;
    return element;
  }

  function button(words, label, act) {
    var element = make("button", words);
    element.type = "button";
    if (label) element.setAttribute("aria-label", label);
    element.addEventListener("click", act);
    return element;
  }

  function table(name, titles) {
    var element = make("table"), head = make("thead"), row = make("tr");
    element.appendChild(make("caption", name));
    titles.forEach(function (title) {
      var cell = make("th", title.text, title.isNumber ? "n" : "");
      cell.scope = "col";
      row.appendChild(cell);
    });
    head.appendChild(row);
    element.appendChild(head);
    element.appendChild(make("tbody"));
    return element;
  }

  // Shares are percent by position of the lot; nothing here touches the page.
  function judge(data, shares) {
    var used = Object.keys(shares).map(Number).filter(function (lot) { return shares[lot] > 0; });
    var sum = used.reduce(function (before, lot) { return before + shares[lot]; }, 0);
    var limits = data.limits.map(function (limit, k) {
      var above = 0, below = 0;
      used.forEach(function (lot) {
        above += shares[lot] * data.lots[lot].parts[k][0];
        below += shares[lot] * data.lots[lot].parts[k][1];
      });
      var value = below ? own(limit.rule, above / below) : null, slack = NEAR * Math.max(1, Math.abs(value || 0));
      var excess = 0;
      if (value !== null && limit.low !== null && value < limit.low - slack) excess = value - limit.low;
      if (value !== null && limit.high !== null && value > limit.high + slack) excess = value - limit.high;
      return { value: value, excess: excess };
    });
    var isPriced = used.every(function (lot) { return data.lots[lot].cost !== null; });
    var cost = null;
    if (isPriced && sum) {
      cost = used.reduce(function (before, lot) { return before + shares[lot] * data.lots[lot].cost; }, 0) / sum;
    }
    var rules = [];
    if (data.most !== null && used.length > data.most) rules.push("at most " + data.most + " lots");
    used.forEach(function (lot) {
      var it = data.lots[lot], share = shares[lot];
      if (it.least !== null && share < it.least - NEAR) rules.push(it.name + " at least " + it.least + " % if used");
    });
    data.apart.forEach(function (pair) {
      if (used.indexOf(pair[0]) >= 0 && used.indexOf(pair[1]) >= 0) {
        rules.push(data.lots[pair[0]].name + " apart from " + data.lots[pair[1]].name);
      }
    });
    var bounds = [], stock = [];
    data.lots.forEach(function (it, lot) {
      var share = shares[lot] || 0;
      if (it.min !== null && share < it.min - NEAR) bounds.push(it.name + " at least " + it.min + " %");
      if (it.max !== null && share > it.max + NEAR) bounds.push(it.name + " at most " + it.max + " %");
      if (it.stock !== null && data.amount !== null && share * data.amount / ALL > it.stock * (1 + NEAR)) stock.push(it.name);
    });
    return { sum: sum, limits: limits, cost: cost, rules: rules, bounds: bounds, stock: stock };
  }

  // A verdict's name where the trial has one, and what to say.
  function sentence(data, found) {
    var broken = data.limits.filter(function (limit, k) { return found.limits[k].excess !== 0; });
    if (Math.abs(found.sum - ALL) > 1e-6) {
      return ["none", "The shares sum to " + shown(found.sum, 2) + " %, not 100 %; the values below are in proportion."];
    }
    if (broken.length || found.bounds.length) {
      var names = broken.map(function (limit) { return limit.label; }).concat(found.bounds);
      return ["outside", "Outside the limits: " + names.join(", ") + "."];
    }
    if (found.rules.length) return ["barred", "Barred: within the limits, but not within the house rules (" + found.rules.join(", ") + ")."];
    if (found.stock.length) return ["short", "Short: within the limits, but the stock is too small (" + found.stock.join(", ") + ")."];
    return ["makeable", "Makeable: within all limits."];
  }

  function start(place) {
    var data = JSON.parse(place.querySelector("script").textContent);
    var shares = {}, fields = {};
    var titles = [{ text: "Lot" }, { text: "Share, %", isNumber: true }, { text: "Take out", isNumber: true }];
    var lots = table("Shares", titles);
    var values = table("Blend", [{ text: "Limit" }, { text: "Asked", isNumber: true }, { text: "Blend", isNumber: true }, { text: "Limit holds" }]);
    var told = make("p", "", "told-trial"), cost = make("p"), bar = make("div", undefined, "buttons");
    var pick = make("select"), label = make("label", "Further lot ");
    told.setAttribute("role", "status");

    function kept(lot) {
      var other = null;
      data.apart.forEach(function (pair) {
        if (pair[0] === lot && pair[1] in shares) other = pair[1];
        if (pair[1] === lot && pair[0] in shares) other = pair[0];
      });
      return other;
    }

    function tell() {
      var found = judge(data, shares), said = sentence(data, found);
      told.textContent = said[1];
      told.className = "told-trial v-" + (said[0] === "outside" ? "unreachable" : said[0]);
      place.setAttribute("data-verdict", said[0]);
      cost.textContent = data.money ? "Cost: " + (found.cost === null ? "unknown" : shown(found.cost, 2) + " " + data.money) : "";
      data.limits.forEach(function (limit, k) {
        var row = values.tBodies[0].rows[k], it = found.limits[k];
        row.cells[2].textContent = it.value === null ? "\u2013" : shown(it.value, limit.places + (it.excess ? 1 : 0));
        row.cells[3].textContent = it.value === null ? "" : it.excess < 0 ? "no, too low" : it.excess > 0 ? "no, too high" : "yes";
        row.cells[3].className = it.excess ? "bad" : "";
      });
    }

    function choices() {
      pick.textContent = "";
      data.lots.forEach(function (it, lot) {
        if (lot in shares) return;
        var other = kept(lot), option = make("option", other === null ? it.name : it.name + ", kept apart from " + data.lots[other].name);
        option.value = String(lot);
        option.disabled = other !== null;
        pick.appendChild(option);
      });
      var free = Array.prototype.filter.call(pick.options, function (option) { return !option.disabled; })[0];
      if (free) pick.value = free.value;
    }

    function set(lot, share) {
      shares[lot] = Math.min(ALL, Math.max(0, isFinite(share) ? share : 0));
      tell();
    }

    function add(lot, share) {
      if (lot in shares || kept(lot) !== null) return;
      var it = data.lots[lot], row = make("tr"), name = make("th", it.name), cell = make("td", undefined, "n"), last = make("td", undefined, "n");
      var field = make("input");
      name.scope = "row";
      row.setAttribute("data-key", "lot " + it.name);
      field.type = "number";
      field.min = "0";
      field.max = "100";
      field.step = "any";
      field.value = typed(share);
      field.setAttribute("aria-label", "Share of " + it.name + ", percent");
      field.addEventListener("input", function () { set(lot, parseFloat(field.value)); });
      function step(by) {
        return function () {
          set(lot, Math.round((shares[lot] + by) * 1e6) / 1e6);
          field.value = typed(shares[lot]);
        };
      }
      cell.appendChild(button(MINUS, "One percent less of " + it.name, step(-1)));
      cell.appendChild(field);
      cell.appendChild(button("+", "One percent more of " + it.name, step(1)));
      last.appendChild(button("\u00d7", "Take out " + it.name, function () {
        delete shares[lot];
        delete fields[lot];
        row.remove();
        choices();
        tell();
      }));
      [name, cell, last].forEach(function (part) { row.appendChild(part); });
      lots.tBodies[0].appendChild(row);
      fields[lot] = field;
      shares[lot] = share;
    }

    function load(recipe) {
      shares = {};
      fields = {};
      lots.tBodies[0].textContent = "";
      recipe.forEach(function (pair) { add(pair[0], pair[1]); });
      choices();
      tell();
    }

    data.limits.forEach(function (limit) {
      var row = make("tr"), name = make("th", limit.label);
      name.scope = "row";
      row.setAttribute("data-key", "limit " + limit.label);
      row.appendChild(name);
      row.appendChild(make("td", limit.asked, "n"));
      row.appendChild(make("td", "", "n"));
      row.appendChild(make("td"));
      values.tBodies[0].appendChild(row);
    });
    data.starts.forEach(function (recipe) {
      bar.appendChild(button(recipe.name, "", function () { load(recipe.shares); }));
    });
    bar.appendChild(button("Scale to 100 %", "", function () {
      var sum = judge(data, shares).sum;
      if (!sum) return;
      Object.keys(shares).forEach(function (lot) {
        shares[lot] = shares[lot] * ALL / sum;
        fields[lot].value = typed(shares[lot]);
      });
      tell();
    }));
    label.appendChild(pick);
    var adding = make("div", undefined, "buttons");
    adding.appendChild(label);
    adding.appendChild(button("Add", "", function () {
      if (pick.value === "") return;
      add(Number(pick.value), 0);
      choices();
      tell();
    }));
    var left = make("div"), right = make("div"), both = make("div", undefined, "beside");
    left.className = right.className = "scroll";
    left.appendChild(lots);
    left.appendChild(adding);
    right.appendChild(values);
    right.appendChild(cost);
    both.appendChild(left);
    both.appendChild(right);
    [bar, told, both].forEach(function (part) { place.appendChild(part); });
    load(data.starts.length ? data.starts[0].shares : []);
    place.closest("section").hidden = false;
    Array.prototype.forEach.call(document.querySelectorAll("[data-trial]"), function (item) { item.hidden = false; });
  }

  Array.prototype.forEach.call(document.querySelectorAll(".trial"), start);
})();
