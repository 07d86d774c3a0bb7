/* Draws each <figure data-chart> from the rows in the page's <script id="data"> with the compiled templates.
   Classic script: file:// allows neither modules nor fetch. Nothing is evaluated: the interpreter walks syntax trees. */
(() => {
  "use strict";
  const source = document.getElementById("data");
  const rows = source ? JSON.parse(source.textContent) : {};
  const figures = [...document.querySelectorAll("figure[data-chart]")];
  const embed = window.vegaEmbed;
  const templates = window.portfolioTemplates;

  const filled = (kind, place) => {
    const spec = structuredClone(templates[kind]);
    const own = rows[kind] || {};
    for (const entry of spec.data) if (own[entry.name]) entry.values = own[entry.name];
    spec.width = Math.max(220, Math.floor(place.clientWidth));
    if (kind === "overview") spec.height = Math.min(340, Math.max(240, Math.floor(place.clientWidth * 0.5)));
    return spec;
  };

  const draw = async (figure) => {
    const kind = figure.dataset.chart;
    const place = figure.querySelector(".plot");
    if (!rows[kind]) return;
    const caption = figure.querySelector("figcaption");
    const options = { mode: "vega", ast: true, actions: false, defaultStyle: false, renderer: "svg", tooltip: false };
    const result = await embed(place, filled(kind, place), options);
    const svg = place.querySelector("svg");
    if (svg) {
      svg.setAttribute("role", "img");
      svg.setAttribute("aria-label", caption ? caption.textContent.trim().replace(/\s+/g, " ") : kind);
    }
    if (kind === "overview") follow(result.view, figure);
    figure.dataset.drawn = "yes";
  };

  /* A point of the overview names its characteristic and opens its page. */
  const follow = (view, figure) => {
    const list = rows.names || [];
    const told = figure.querySelector(".told");
    view.addEventListener("mousemove", (_, item) => {
      const named = item && item.datum && list[item.datum.i];
      told.textContent = named ? named.n : "";
    });
    view.addEventListener("click", (_, item) => {
      const named = item && item.datum && list[item.datum.i];
      if (named) window.location.href = "c/" + named.p;
    });
  };

  /* The numbers of a picture as a table, made when somebody opens it. */
  const when = (t) => new Date(t).toISOString().slice(0, 16).replace("T", " ");
  const limitAt = (limits, t) => limits.filter((limit) => limit.t <= t).pop() || limits[0] || {};
  const tables = {
    control: (own) => [["Time", "Value", "Lower control limit", "Upper control limit", "Signal"], own.points.map((p) => {
      const limit = limitAt(own.limits, p.t);
      return [when(p.t), p.v, limit.l, limit.u, p.s ? "yes" : ""];
    })],
    histogram: (own) => [["From", "To", "Values"], own.bins.map((bin) => [bin.x, bin.b, bin.n])],
    history: (own) => [["Judged up to", "Index", "Lower bound", "Upper bound"], own.history.map((h) => [when(h.t), h.v, h.l, h.u])],
  };
  for (const details of document.querySelectorAll("details[data-table]")) {
    details.addEventListener("toggle", () => {
      const own = rows[details.dataset.table];
      if (!details.open || !own || details.querySelector("table")) return;
      const [heads, lines] = tables[details.dataset.table](own);
      const table = document.createElement("table");
      const row = (cells, tag) => {
        const tr = document.createElement("tr");
        for (const text of cells) {
          const cell = document.createElement(tag);
          if (tag === "th") cell.scope = "col";
          cell.className = "number";
          cell.textContent = text === null || text === undefined ? "" : String(text);
          tr.append(cell);
        }
        return tr;
      };
      table.createTHead().append(row(heads, "th"));
      table.createTBody().append(...lines.map((cells) => row(cells, "td")));
      const scroll = document.createElement("div");
      scroll.className = "scroll";
      scroll.append(table);
      details.append(scroll);
    });
  }

  const all = () => Promise.all(figures.map(draw)).then(() => { document.body.dataset.ready = "yes"; });
  if (!embed || !templates) {
    for (const figure of figures) {
      figure.querySelector(".plot").textContent = "The picture could not be drawn: a script file is missing. The numbers below it are complete.";
    }
    document.body.dataset.ready = "failed";
    return;
  }
  all();
  let waiting = 0;
  let width = document.body.clientWidth;
  window.addEventListener("resize", () => {
    if (document.body.clientWidth === width) return;
    width = document.body.clientWidth;
    window.clearTimeout(waiting);
    waiting = window.setTimeout(all, 150);
  });
})();
