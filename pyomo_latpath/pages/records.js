"use strict";
// The table of all records: sorted and filtered by index, and only the rows in view are drawn.
(() => {
  const SPARE = 12; // rows drawn beyond either edge of the view
  const PRINTED = 2000; // rows on paper, at most
  const { columns, filters } = JSON.parse(document.getElementById("data").textContent);
  const shown = columns.filter((column) => column.shown);
  const size = columns[0].values.length;
  const find = (id) => document.getElementById(id);
  const region = find("records-region");
  const body = region.querySelector("tbody");
  const [above, below] = body.querySelectorAll(".space");
  const headings = [...region.querySelectorAll("thead th")];
  const digits = new Intl.NumberFormat("en", { maximumSignificantDigits: 10 });
  const drawn = new Map(); // place in the order -> its row element
  let order = Array.from({ length: size }, (_, i) => i);
  let sorted = { column: null, falling: false };
  let rowHeight = 34;
  let current = 0; // the place whose button the Tab key reaches

  const words = (column, i) => {
    const value = column.values[i];
    if (value === null) return "–";
    return column.number ? digits.format(value) : value;
  };

  // Long names differ at their ends: the middle is left out.
  const shortened = (name) =>
    (name.length <= 40 ? name : `${name.slice(0, 14)}…${name.slice(-25)}`);

  // A column as numbers to sort by: a number itself, a text's place among all texts of the column.
  const keysOf = (column) => {
    if (!column.keys) {
      let place = (value) => value;
      if (!column.number) {
        const collator = new Intl.Collator("en", { numeric: true });
        const texts = [...new Set(column.values)].filter((text) => text !== null);
        const places = new Map(texts.sort(collator.compare).map((text, k) => [text, k]));
        place = (text) => places.get(text);
      }
      column.keys = Float64Array.from(column.values, (v) => (v === null ? NaN : place(v)));
    }
    return column.keys;
  };

  const search = columns[0].values.map((_, i) =>
    columns.filter((column) => !column.number).map((column) => column.values[i] ?? "")
      .join("\n").toLowerCase());

  // Which records pass all filters, in the order of the sorted column; what is not known comes last.
  const arrange = () => {
    const wanted = find("search").value.toLowerCase().split(/\s+/).filter(Boolean);
    const choices = filters.map((k) => [columns[k].values, find(`filter-${k}`).value])
      .filter(([, value]) => value !== "");
    order = [];
    for (let i = 0; i < size; i += 1) {
      if (choices.every(([values, value]) => (values[i] ?? "–") === value)
        && wanted.every((word) => search[i].includes(word))) order.push(i);
    }
    if (sorted.column) {
      const keys = keysOf(sorted.column);
      const sign = sorted.falling ? -1 : 1;
      order.sort((a, b) => {
        const x = keys[a], y = keys[b];
        if (x === y || (x !== x && y !== y)) return a - b;
        if (x !== x) return 1;
        if (y !== y) return -1;
        return x < y ? -sign : sign;
      });
    }
    for (const place of drawn.values()) place.remove();
    drawn.clear();
    current = 0;
    region.scrollTop = 0;
    region.querySelector("table").setAttribute("aria-rowcount", order.length + 1);
    tell("");
    draw();
  };

  const tell = (rest) => {
    const count = (k) => k.toLocaleString("en");
    find("count").textContent = `${count(order.length)} of ${count(size)} instances${rest}`;
  };

  const row = (place) => {
    const i = order[place];
    const tr = document.createElement("tr");
    tr.setAttribute("aria-rowindex", place + 2);
    shown.forEach((column, k) => {
      const cell = document.createElement(k ? "td" : "th");
      if (column.number) cell.className = "number";
      if (k) {
        cell.textContent = words(column, i);
      } else {
        cell.scope = "row";
        const button = document.createElement("button");
        button.type = "button";
        button.className = "open name";
        button.dataset.place = place;
        button.textContent = shortened(words(column, i));
        button.ariaLabel = button.title = words(column, i);
        cell.append(button);
      }
      tr.append(cell);
    });
    return tr;
  };

  const show = (from, to) => {
    // Before rows go: the browser lays out the page when one with the focus is taken away, and a
    // table that is too short at that moment moves the view.
    const focused = Number(document.activeElement.dataset.place ?? from);
    if (focused < from || focused >= to) region.focus({ preventScroll: true });
    above.firstChild.style.height = `${from * rowHeight}px`;
    below.firstChild.style.height = `${Math.max(0, order.length - to) * rowHeight}px`;
    for (const [place, tr] of drawn) {
      if (place >= from && place < to) continue;
      tr.remove();
      drawn.delete(place);
    }
    let next = below;
    for (let place = to - 1; place >= from; place -= 1) {
      if (!drawn.has(place)) {
        drawn.set(place, row(place));
        body.insertBefore(drawn.get(place), next);
      }
      next = drawn.get(place);
    }
    if (current < from || current >= to) current = from;
    for (const [place, tr] of drawn) tr.querySelector("button").tabIndex = place === current ? 0 : -1;
  };

  const draw = () => {
    const first = Math.floor(region.scrollTop / rowHeight) - SPARE;
    const from = Math.max(0, Math.min(first, order.length));
    const to = first + Math.ceil(region.clientHeight / rowHeight) + 2 * SPARE;
    show(from, Math.max(from, Math.min(to, order.length)));
    const sample = body.querySelector("tr:not(.space)");
    const height = sample ? sample.getBoundingClientRect().height : 0;
    if (height && Math.abs(height - rowHeight) > 0.01) {
      rowHeight = height;
      draw();
    }
  };

  const goTo = (place) => {
    current = Math.max(0, Math.min(place, order.length - 1));
    const top = current * rowHeight;
    const room = region.clientHeight - headings[0].offsetHeight - rowHeight;
    if (top < region.scrollTop) region.scrollTop = top;
    if (top > region.scrollTop + room) region.scrollTop = top - room;
    draw();
    drawn.get(current)?.querySelector("button").focus({ preventScroll: true });
  };

  const open = (i) => {
    const list = find("record-fields");
    list.replaceChildren();
    for (const column of columns) {
      if (column.values[i] === null) continue;
      const title = document.createElement("dt");
      title.textContent = column.title;
      const value = document.createElement("dd");
      value.textContent = words(column, i);
      list.append(title, value);
    }
    find("record-name").textContent = columns[0].values[i];
    find("record").showModal();
  };

  headings.forEach((heading, k) => {
    heading.querySelector("button").addEventListener("click", () => {
      const column = shown[k];
      sorted = { column, falling: sorted.column === column && !sorted.falling };
      for (const other of headings) other.removeAttribute("aria-sort");
      heading.setAttribute("aria-sort", sorted.falling ? "descending" : "ascending");
      arrange();
    });
  });
  body.addEventListener("click", (event) => {
    const button = event.target.closest("button");
    if (!button) return;
    current = Number(button.dataset.place);
    open(order[current]);
  });
  body.addEventListener("keydown", (event) => {
    const page = Math.max(1, Math.floor(region.clientHeight / rowHeight) - 2);
    const places = {
      ArrowDown: current + 1, ArrowUp: current - 1, PageDown: current + page,
      PageUp: current - page, Home: 0, End: order.length - 1,
    };
    if (!(event.key in places)) return;
    event.preventDefault();
    goTo(places[event.key]);
  });
  find("search").addEventListener("input", arrange);
  for (const k of filters) find(`filter-${k}`).addEventListener("change", arrange);
  find("controls").addEventListener("submit", (event) => event.preventDefault());
  find("controls").addEventListener("reset", () => setTimeout(arrange));
  region.addEventListener("scroll", draw, { passive: true });
  new ResizeObserver(draw).observe(region);
  window.addEventListener("beforeprint", () => {
    if (order.length > PRINTED) tell(`; on paper the first ${PRINTED.toLocaleString("en")}`);
    show(0, Math.min(PRINTED, order.length));
  });
  window.addEventListener("afterprint", () => {
    tell("");
    draw();
  });
  find("all").hidden = false;
  arrange();
})();
