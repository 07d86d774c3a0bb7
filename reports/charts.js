/* Draws each <figure data-chart> from the rows in the page's <script id="data"> with the compiled templates.
   Classic script: file:// allows neither modules nor fetch. Nothing is evaluated: the interpreter walks syntax trees. */
(() => {
  "use strict";
  const source = document.getElementById("data");
  const given = source ? JSON.parse(source.textContent) : {};
  const decimal = given.decimal || ".";
  const figures = [...document.querySelectorAll("figure[data-chart]")];
  const embed = window.vegaEmbed;
  const templates = window.portfolioTemplates;
  const list = window.portfolioList;

  /* The short forms of data sets, written out as publishing/charts.py does. */
  const CURVE_POINTS = 61;
  const CURVE_REACH = 4.2;
  const curve = (mean, sigma, area) => Array.from({ length: CURVE_POINTS }, (_, i) => {
    const z = -CURVE_REACH + (2 * CURVE_REACH * i) / (CURVE_POINTS - 1);
    return { x: mean + sigma * z, n: (area * Math.exp(-0.5 * z * z)) / (sigma * Math.sqrt(2 * Math.PI)) };
  });
  const table = (columns) => {
    const marked = new Set(columns.s || []);
    let moment = 0;
    return columns.t.map((step, i) => {
      moment = i ? moment + 1000 * step : step;
      const row = {};
      for (const name of Object.keys(columns)) row[name] = columns[name][i];
      row.t = moment;
      if (columns.s) row.s = marked.has(i) ? 1 : 0;
      return row;
    });
  };
  const expanded = (data) => {
    if (Array.isArray(data)) return data;
    if (data.bins) {
      const [start, width, counts] = data.bins;
      return counts.map((n, i) => ({ x: start + i * width, b: start + (i + 1) * width, n }));
    }
    return data.normal ? curve(...data.normal) : table(data.columns);
  };
  const rows = {};
  for (const figure of figures) {
    const kind = figure.dataset.chart;
    rows[kind] = Object.fromEntries(Object.entries(given[kind] || {}).map(([name, data]) => [name, expanded(data)]));
  }
  if (rows.overview && list) {
    rows.overview.points = list.name.flatMap((_, i) => list.index[i] === null || list.after[i] === null ? []
      : [{ x: list.index[i], y: list.after[i], k: list.rank[i] === null ? "other" : "listed", i }]);
  }

  const filled = (kind, place) => {
    const spec = structuredClone(templates[kind]);
    for (const entry of spec.data) if (rows[kind][entry.name]) entry.values = rows[kind][entry.name];
    spec.width = Math.max(220, Math.floor(place.clientWidth));
    if (kind === "overview") spec.height = Math.min(340, Math.max(240, Math.floor(place.clientWidth * 0.5)));
    return spec;
  };
  const ERRORS_ONLY = 1; // an empty data set, such as no change of the level, is nothing to warn about
  const options = {
    logLevel: ERRORS_ONLY,
    mode: "vega", ast: true, actions: false, defaultStyle: false, renderer: "svg", tooltip: false,
    formatLocale: { decimal, thousands: "\u202f", grouping: [3], currency: ["", ""] },
  };

  const views = new Map();
  const draw = async (figure) => {
    const kind = figure.dataset.chart;
    const place = figure.querySelector(".plot");
    const caption = figure.querySelector("figcaption");
    if (views.has(figure)) views.get(figure).finalize();
    const result = await embed(place, filled(kind, place), options);
    views.set(figure, result);
    const svg = place.querySelector("svg");
    svg.setAttribute("role", "img");
    svg.setAttribute("aria-label", caption.textContent.trim().replace(/\s+/g, " "));
    if (kind === "overview") follow(result.view, figure);
    figure.dataset.drawn = "yes";
  };

  /* A point of the overview names its characteristic and opens its page. */
  const follow = (view, figure) => {
    const told = figure.querySelector(".told");
    const under = (item) => (item && item.datum && Number.isInteger(item.datum.i) ? item.datum.i : -1);
    view.addEventListener("mousemove", (_, item) => {
      const name = document.createElement("bdi");
      name.textContent = under(item) < 0 ? "" : list.name[under(item)];
      told.replaceChildren(name);
    });
    view.addEventListener("click", (_, item) => {
      if (under(item) >= 0) window.location.href = "c/" + list.page[under(item)];
    });
  };

  /* The numbers of a picture as a table, made when somebody opens it. */
  const when = (t) => new Date(t).toISOString().slice(0, 16).replace("T", " ");
  const limitAt = (limits, t) => limits.filter((limit) => limit.t <= t).pop() || limits[0] || {};
  const written = (value) => {
    if (value === null || value === undefined) return "";
    if (typeof value !== "number") return value;
    return String(Number(value.toPrecision(12))).replace(".", decimal).replace(/-/g, "\u2212");
  };
  const tables = {
    control: (own) => [["Time", "Value", "Lower control limit", "Upper control limit", "Signal"], own.points.map((p) => {
      const limit = limitAt(own.limits, p.t);
      return [when(p.t), p.v, limit.l, limit.u, p.s ? "yes" : ""];
    })],
    spread: (own) => [["Time", "Value", "Lower control limit", "Upper control limit", "Signal"], own.spreads.map((p) => {
      const limit = limitAt(own.spreadlimits, p.t);
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
      const shown = document.createElement("table");
      const row = (cells, tag) => {
        const tr = document.createElement("tr");
        for (const text of cells) {
          const cell = document.createElement(tag);
          if (tag === "th") cell.scope = "col";
          cell.className = "number";
          cell.textContent = written(text);
          tr.append(cell);
        }
        return tr;
      };
      shown.createTHead().append(row(heads, "th"));
      shown.createTBody().append(...lines.map((cells) => row(cells, "td")));
      const scroll = document.createElement("div");
      scroll.className = "scroll";
      scroll.tabIndex = 0;
      scroll.setAttribute("role", "group");
      scroll.setAttribute("aria-label", heads.join(", "));
      scroll.append(shown);
      details.append(scroll);
    });
  }

  const failed = (figure) => {
    figure.querySelector(".plot").textContent = "This picture could not be drawn: a script file of the folder is missing or damaged. Everything in words and numbers is complete.";
  };
  const all = async () => {
    let ready = "yes";
    for (const figure of figures) {
      try {
        await draw(figure);
      } catch (error) {
        console.error(error);
        failed(figure);
        ready = "failed";
      }
    }
    document.body.dataset.ready = ready;
  };
  if (!embed || !templates || (rows.overview && !list)) {
    figures.forEach(failed);
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
