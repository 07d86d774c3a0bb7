/* The list: search, filter, sort and page through all characteristics; its state lives in the address, so that it can
   be linked and "back" works. Short keys for every page, which can be switched off. */
(() => {
  "use strict";
  const PAGE = 100;
  const data = window.portfolioList;
  const table = document.getElementById("all");
  const escapeCsv = (text) => (/^[=+\-@\t\r]/.test(text) && Number.isNaN(Number(text)) ? "'" + text : text);

  if (data && table) {
    const body = table.querySelector("tbody");
    const status = document.getElementById("found");
    const controls = [...document.querySelectorAll("[data-filter]")];
    const heads = [...table.querySelectorAll("th[data-column]")];
    const folded = data.name.map((name, i) => [name, data.site[i], data.part[i], data.feature[i], data.owner[i]].join(" ").toLowerCase());
    let state = {};

    const read = () => {
      state = Object.fromEntries(new URLSearchParams(window.location.hash.slice(1)));
      for (const control of controls) control.value = state[control.dataset.filter] || "";
    };
    const write = (replace) => {
      const kept = Object.entries(state).filter(([, value]) => value);
      const hash = "#" + new URLSearchParams(kept).toString();
      window.history[replace ? "replaceState" : "pushState"](null, "", hash);
      show();
    };
    const chosen = () => {
      const words = (state.search || "").toLowerCase().split(/\s+/).filter(Boolean);
      const rows = [];
      for (let i = 0; i < data.name.length; i += 1) {
        if (words.every((word) => folded[i].includes(word)) &&
            ["site", "cell", "route", "class", "owner", "centering"].every((key) => !state[key] || data[key][i] === state[key]) &&
            (!state.alarm || data.alarm[i].split(" ").includes(state.alarm))) rows.push(i);
      }
      const column = data[state.sort] ? state.sort : "rank";
      const down = state.order === "down" ? -1 : 1;
      const values = data[column];
      rows.sort((a, b) => {
        const x = values[a], y = values[b];
        if (x === null || x === "") return y === null || y === "" ? a - b : 1;
        if (y === null || y === "") return -1;
        return (typeof x === "number" ? x - y : x.localeCompare(y, "en", { numeric: true })) * down || a - b;
      });
      return rows;
    };
    const cell = (text, kind) => {
      const td = document.createElement("td");
      if (kind) td.className = kind;
      td.textContent = text;
      return td;
    };
    const show = () => {
      const rows = chosen();
      const pages = Math.max(1, Math.ceil(rows.length / PAGE));
      const page = Math.min(pages, Math.max(1, Number(state.page) || 1));
      const part = rows.slice((page - 1) * PAGE, page * PAGE);
      body.replaceChildren(...part.map((i) => {
        const tr = document.createElement("tr");
        const name = document.createElement("th");
        name.scope = "row";
        const link = document.createElement("a");
        link.href = "c/" + data.page[i];
        const held = document.createElement("bdi");
        held.textContent = data.name[i];
        link.append(held);
        name.append(link);
        tr.append(cell(data.rank[i] === null ? "" : String(data.rank[i]), "number"), name, cell(data.site[i]), cell(data.cellText[i], "mark " + data.cell[i].replace(/[, ]+/g, "-")),
          cell(data.indexText[i], "number"), cell(data.boundsText[i], "number"), cell(data.afterText[i], "number"),
          cell(data.chanceText[i], "number"), cell(data.route[i]));
        return tr;
      }));
      const total = data.name.length;
      status.textContent = rows.length === 0 ? "Nothing matches. Clear the search or a filter."
        : `${rows.length} of ${total} characteristics` + (pages > 1 ? `, page ${page} of ${pages}` : "");
      for (const head of heads) {
        const on = (state.sort || "rank") === head.dataset.column;
        if (on) head.setAttribute("aria-sort", state.order === "down" ? "descending" : "ascending");
        else head.removeAttribute("aria-sort");
      }
      document.getElementById("earlier").disabled = page <= 1;
      document.getElementById("later").disabled = page >= pages;
      document.body.dataset.ready = "yes";
    };
    for (const control of controls) {
      const typed = control.type === "search";
      control.addEventListener(typed ? "input" : "change", () => {
        state[control.dataset.filter] = control.value;
        delete state.page;
        write(typed);
      });
    }
    for (const head of heads) {
      head.querySelector("button").addEventListener("click", () => {
        const same = (state.sort || "rank") === head.dataset.column;
        state.order = same && state.order !== "down" ? "down" : "";
        state.sort = head.dataset.column;
        delete state.page;
        write(false);
      });
    }
    const turn = (by) => () => { state.page = String((Number(state.page) || 1) + by); write(false); table.scrollIntoView(); };
    document.getElementById("earlier").addEventListener("click", turn(-1));
    document.getElementById("later").addEventListener("click", turn(1));
    document.getElementById("clear").addEventListener("click", () => { state = {}; write(false); read(); });
    document.getElementById("save").addEventListener("click", () => {
      const columns = ["name", "site", "part", "feature", "unit", "cell", "index", "indexLow", "indexHigh", "after", "chance", "route", "rank"];
      const quoted = (value) => `"${escapeCsv(value === null ? "" : String(value)).replaceAll('"', '""')}"`;
      const lines = [columns.join(","), ...chosen().map((i) => columns.map((key) => quoted(data[key][i])).join(","))];
      const link = document.createElement("a");
      link.href = "data:text/csv;charset=utf-8," + encodeURIComponent("\ufeff" + lines.join("\n") + "\n");
      link.download = "characteristics-shown.csv";
      link.click();
    });
    window.addEventListener("popstate", () => { read(); show(); });
    window.addEventListener("hashchange", () => { read(); show(); });
    read();
    show();
  }

  /* Keys. They rest while somebody types, and "?" opens the help where they can be switched off. */
  const made = (tag, text, ...inside) => {
    const node = document.createElement(tag);
    node.append(text, ...inside);
    return node;
  };
  let offHere = false; // where the browser stores nothing, the choice lasts for the page
  const off = () => { try { return window.localStorage.getItem("portfolio-keys") === "off"; } catch { return offHere; } };
  const switched = (on) => {
    offHere = !on;
    try { window.localStorage.setItem("portfolio-keys", on ? "on" : "off"); } catch { /* see offHere */ }
  };
  const help = (() => {
    const pairs = made("dl", "");
    pairs.className = "pairs";
    for (const [keys, what] of [["/", "search"], ["n", "next characteristic"], ["p", "previous characteristic"], ["u", "up to the list"], ["?", "this help"]]) {
      pairs.append(made("dt", "", made("kbd", keys)), made("dd", what));
    }
    const box = document.createElement("input");
    box.type = "checkbox";
    box.checked = !off();
    box.addEventListener("change", () => switched(box.checked));
    const close = made("button", "Close");
    close.type = "button";
    const title = made("h2", "Keys");
    title.id = "keys-title";
    const dialog = made("dialog", "", title, pairs, made("p", "", made("label", "", box, " Single-letter keys are on")), made("p", "", close));
    dialog.setAttribute("aria-labelledby", title.id);
    close.addEventListener("click", () => dialog.close());
    document.body.append(dialog);
    return dialog;
  })();
  const opener = made("button", "Keys");
  opener.type = "button";
  opener.id = "open-keys";
  opener.className = "quiet";
  opener.addEventListener("click", () => help.showModal());
  document.querySelector("footer p").append(" ", opener);
  const go = (relation) => { const link = document.querySelector(`a[rel="${relation}"]`); if (link) link.click(); };
  document.addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.metaKey || event.altKey || help.open) return;
    if (/^(INPUT|SELECT|TEXTAREA)$/.test(event.target.tagName)) return;
    if (event.key === "?") { help.showModal(); event.preventDefault(); return; }
    if (off()) return;
    if (event.key === "/") { const box = document.querySelector("input[type=search]"); if (box) { box.focus(); event.preventDefault(); } }
    if (event.key === "n") go("next");
    if (event.key === "p") go("prev");
    if (event.key === "u") go("up");
  });
  if (!document.querySelector("figure[data-chart]")) document.body.dataset.ready = "yes";
})();
