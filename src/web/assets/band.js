// Makes the time band easier to read: the value under the pointer or under the arrow keys in words, and
// a stretch of it chosen by dragging or with + and −. Without this script the table below the picture has
// the values and the links above it the stretches.
"use strict";
(() => {
  const probe = () => document.getElementById("probe");
  const say = (text) => { const at = document.getElementById("reading"); if (at && at.textContent !== text) at.textContent = text; };
  const picture = () => probe() && probe().querySelector("svg.band");
  let place = null, drag = null;
  const looks = new Map();

  // Columns and rows of the picture, and where they lie on the screen.
  const grid = () => {
    const at = probe(), cells = at && at.querySelector("svg.cells");
    if (!cells) return null;
    const box = cells.getBoundingClientRect();
    const { columns, rows, from, to, span, looks: address, unit, every } = at.dataset;
    return { at, box, columns: +columns, rows: +rows, from: Date.parse(from), to: Date.parse(to), span, address, unit, every: +every * 1000 };
  };
  const end = (g, column) => g.from + (g.to - g.from) * (column + 1) / g.columns;
  const names = () => [...document.querySelectorAll("#time table.dense thead th")].slice(1).map((th) => th.textContent);

  // The newest look of a column, as the server has it; asked for once.
  const look = (g, column) => {
    const to = new Date(end(g, column) + 1).toISOString();
    const since = new Date(end(g, column) - Math.max((g.to - g.from) / g.columns, 2 * g.every)).toISOString();
    const address = `${g.address}?span=${g.span}&from=${since}&to=${to}&most=1`;
    if (!looks.has(address)) {
      if (looks.size > 500) looks.clear();
      looks.set(address, fetch(address, { headers: { Accept: "application/json" } }).then((a) => a.ok ? a.json() : { items: [] }).catch(() => ({ items: [] })));
    }
    return looks.get(address);
  };

  const show = async () => {
    const g = grid();
    if (!g || !place) return;
    const { column, row } = place, name = names()[row];
    mark(g);
    const found = (await look(g, column)).items[0];
    if (!place || place.column !== column || place.row !== row) return;
    const time = new Date(end(g, column)).toLocaleString([], { timeZone: document.body.dataset.zone || undefined });
    const own = found && found.deviations.find((d) => d.source === name);
    const value = own && own.deviation !== null
      ? `${own.deviation > 0 ? "+" : own.deviation < 0 ? "−" : ""}${Math.abs(own.deviation).toPrecision(3)} ${g.unit}` : "no figure";
    const kind = own && found.named_level.includes(name) ? ", named" : "";
    say(`${name} until ${time}: ${value}${kind}`);
  };

  // A frame around the cell, drawn in the picture.
  const mark = (g) => {
    const svg = picture();
    let frame = svg.querySelector("rect.cursor");
    if (!frame) {
      frame = document.createElementNS("http://www.w3.org/2000/svg", "rect");
      frame.setAttribute("class", "cursor");
      svg.append(frame);
    }
    const body = g.at.querySelector("svg.cells"), top = +body.getAttribute("y"), height = body.getAttribute("height") / g.rows;
    const chosen = drag && drag.to !== drag.from ? [Math.min(drag.from, drag.to), Math.max(drag.from, drag.to)] : null;
    const [first, last] = chosen || [place.column, place.column];
    frame.setAttribute("x", `${first / g.columns * 100}%`);
    frame.setAttribute("width", `${(last - first + 1) / g.columns * 100}%`);
    frame.setAttribute("y", chosen ? top : top + place.row * height);
    frame.setAttribute("height", chosen ? height * g.rows : height);
  };

  const under = (event) => {
    const g = grid();
    if (!g) return null;
    const column = Math.floor((event.clientX - g.box.left) / g.box.width * g.columns);
    const row = Math.floor((event.clientY - g.box.top) / g.box.height * g.rows);
    return column >= 0 && column < g.columns && row >= 0 && row < g.rows ? { column, row } : null;
  };

  const stretch = (from, to) => {
    const g = grid(), now = Date.now();
    if (!g || to - from < 60000) return;
    const query = new URLSearchParams(location.search);
    query.set("from", new Date(from).toISOString());
    query.set("to", new Date(Math.min(to, now)).toISOString());
    location.href = `${location.pathname}?${query}#time`;
  };
  const zoom = (factor) => {
    const g = grid();
    if (!g) return;
    const middle = place ? end(g, place.column - 0.5) : (g.from + g.to) / 2, half = (g.to - g.from) * factor / 2;
    stretch(middle - half, middle + half);
  };

  const keys = {
    ArrowLeft: (g) => { place.column = Math.max(0, place.column - 1); },
    ArrowRight: (g) => { place.column = Math.min(g.columns - 1, place.column + 1); },
    ArrowUp: (g) => { place.row = Math.max(0, place.row - 1); },
    ArrowDown: (g) => { place.row = Math.min(g.rows - 1, place.row + 1); },
    Home: () => { place.column = 0; },
    End: (g) => { place.column = g.columns - 1; },
  };

  const wake = () => {
    const at = probe();
    if (!at || at.dataset.awake) return;
    at.dataset.awake = "yes";
    at.tabIndex = 0;
    at.setAttribute("role", "group");
    at.setAttribute("aria-label", "Time band. Arrow keys read values, plus and minus change the stretch of time.");
    at.addEventListener("keydown", (event) => {
      const g = grid();
      if (!g || event.ctrlKey || event.altKey || event.metaKey) return;
      if (event.key === "+" || event.key === "-") { event.preventDefault(); zoom(event.key === "+" ? 0.5 : 2); return; }
      const step = keys[event.key];
      if (!step) return;
      event.preventDefault();
      if (place) step(g); else place = { column: g.columns - 1, row: 0 };
      show();
    });
    at.addEventListener("pointermove", (event) => {
      const here = under(event);
      if (!here) return;
      if (drag) drag.to = here.column;
      if (!drag && place && place.column === here.column && place.row === here.row) return;
      place = here;
      show();
    });
    at.addEventListener("pointerdown", (event) => {
      const here = event.button === 0 && event.pointerType !== "touch" && under(event);
      if (here) { drag = { from: here.column, to: here.column }; event.preventDefault(); at.focus({ preventScroll: true }); }
    });
    addEventListener("pointerup", () => {
      const chosen = drag, g = grid();
      drag = null;
      if (chosen && g && Math.abs(chosen.to - chosen.from) > 1)
        stretch(end(g, Math.min(chosen.from, chosen.to) - 1), end(g, Math.max(chosen.from, chosen.to)));
    });
  };
  wake();
})();
