"use strict";
(() => {
  const byId = id => document.getElementById(id);
  const root = document.documentElement;

  // Light or dark: what the system says, until the reader says otherwise.
  const theme = byId("theme");
  const dark = matchMedia("(prefers-color-scheme: dark)");
  const kept = () => { try { return localStorage.getItem("theme"); } catch { return null; } };
  const keep = name => { try { localStorage.setItem("theme", name); } catch { /* a browser that keeps nothing */ } };
  const isDark = () => (root.dataset.theme || (dark.matches ? "dark" : "light")) === "dark";
  const tell = () => theme.setAttribute("aria-pressed", String(isDark()));
  if (["light", "dark"].includes(kept())) root.dataset.theme = kept();
  theme.addEventListener("click", () => {
    root.dataset.theme = isDark() ? "light" : "dark";
    keep(root.dataset.theme);
    tell();
  });
  dark.addEventListener("change", tell);
  tell();

  const table = byId("table");
  const rows = table ? [...table.tBodies[0].rows] : [];
  const details = table ? JSON.parse(byId("details").textContent) : { cells: [], kinds: {} };
  const numberOf = row => Number(row.id.slice("cell-".length));
  const made = (name, text, attributes = {}) => {
    const element = document.createElement(name);
    if (text) element.textContent = text;
    for (const [key, value] of Object.entries(attributes)) element.setAttribute(key, value);
    return element;
  };

  // Opening a row.
  const pictureOf = ([figure, thumbnail, mesh, samples], file) => {
    const told = made("div", "", { class: "picture" });
    if (thumbnail) {
      const image = made("img", "", { src: thumbnail, alt: `Attenuation map of ${file}` });
      if (figure) told.append(made("a", "", { href: figure })); else told.append(image);
      if (figure) told.lastChild.append(image);
    }
    const line = made("p");
    for (const [words, href] of [["figure", figure], ["mesh", mesh], ["table by sample", samples]]) {
      if (href) line.append(made("a", words, { href }), " ");
    }
    told.append(line);
    return told;
  };
  const opened = row => {
    const [file, links, findings, reasons] = details.cells[numberOf(row)];
    const inside = made("div", "", { class: "opened" });
    const words = made("div");
    words.append(made("p", file));
    if (reasons.length) words.append(made("p", `Stands out: ${reasons.join("; ")}.`));
    if (!findings.length) words.append(made("p", "No findings."));
    const list = made("ul");
    for (const [severity, code, sentence] of findings) {
      const [title, effect] = details.kinds[code] || [code, ""];
      const item = made("li");
      item.append(made("b", `${severity}, ${title}`, { class: severity }), `: ${sentence} `, made("small", effect));
      list.append(item);
    }
    if (findings.length) words.append(list);
    if (!links.length) words.append(made("p", "No figure: morphotone map draws it, and report --maps links it."));
    else inside.append(pictureOf(links, file));
    inside.append(words);
    const place = made("td", "", { colspan: row.cells.length });
    place.append(inside);
    const more = made("tr", "", { class: "more", id: `more-${numberOf(row)}` });
    more.append(place);
    return more;
  };
  const isOpen = row => row.nextElementSibling?.className === "more";
  const open = (row, wanted) => {
    if (wanted === isOpen(row)) return;
    if (wanted) row.after(opened(row)); else row.nextElementSibling.remove();
    const button = row.cells[0].firstElementChild;
    button.setAttribute("aria-expanded", String(wanted));
    if (wanted) button.setAttribute("aria-controls", row.nextElementSibling.id);
    else button.removeAttribute("aria-controls");
  };

  // Sorting: what is no number goes last, either way round; equal rows keep the order they had.
  let order = rows;
  const sort = (head, column) => {
    const down = head.getAttribute("aria-sort") === "ascending";
    const isNumber = head.classList.contains("n");
    const value = row => {
      const text = row.cells[column].textContent;
      return isNumber ? (text ? Number(text) : NaN) : text;
    };
    const words = new Intl.Collator("en", { numeric: true });
    const compare = isNumber ? (a, b) => (a < b ? -1 : a > b ? 1 : 0) : words.compare;
    const isEmpty = one => (isNumber ? Number.isNaN(one) : !one);
    order = order.map(row => [value(row), row]).sort(([a], [b]) =>
      isEmpty(a) || isEmpty(b) ? isEmpty(a) - isEmpty(b) : down ? compare(b, a) : compare(a, b)
    ).map(([, row]) => row);
    for (const other of table.tHead.rows[0].cells) other.removeAttribute("aria-sort");
    head.setAttribute("aria-sort", down ? "descending" : "ascending");
    table.tBodies[0].append(...order.flatMap(row => (isOpen(row) ? [row, row.nextElementSibling] : [row])));
    show();
  };

  // Choosing.
  const fields = ["text", "grade", "group", "code"].map(byId).filter(Boolean);
  const texts = rows.map(row => row.textContent.toLowerCase());
  const codes = details.cells.map(([, , findings]) => findings.map(([, code]) => code));
  const column = name => (name === "group" ? 1 : byId("group") ? 2 : 1);
  const fits = (row, wanted) =>
    (!wanted.text || texts[numberOf(row)].includes(wanted.text.trim().toLowerCase())) &&
    ["grade", "group"].every(name => !wanted[name] || row.cells[column(name)].textContent === wanted[name]) &&
    (!wanted.code || codes[numberOf(row)].includes(wanted.code));
  const slice = Number(table?.dataset.slice);
  let most = slice;
  const show = () => {
    const wanted = Object.fromEntries(fields.map(each => [each.id, each.value]));
    let left = 0;
    for (const row of order) {
      row.hidden = !fits(row, wanted) || ++left > most;
      if (row.hidden) open(row, false);
    }
    const cells = rows.length === 1 ? "cell" : "cells";
    byId("count").value = `${left} of ${rows.length} ${cells}${left > most ? `, the first ${most} shown` : ""}`;
    byId("rest").hidden = left <= most;
  };
  const choose = () => { most = slice; show(); };
  const showAll = () => { most = Infinity; show(); };
  const everything = () => { fields.forEach(each => { each.value = ""; }); choose(); };

  // Paper has no folds: everything is open and shown while it prints.
  let before = [[], slice];
  addEventListener("beforeprint", () => {
    before = [[...document.querySelectorAll("details:not([open])")], most];
    before[0].forEach(each => { each.open = true; });
    if (table) showAll();
  });
  addEventListener("afterprint", () => {
    before[0].forEach(each => { each.open = false; });
    most = before[1];
    if (table) show();
  });

  // Links to rows and to folded places.
  const visit = () => {
    const target = location.hash && byId(decodeURIComponent(location.hash.slice(1)));
    if (!target) return;
    const fold = target.closest("details");
    if (fold) fold.open = true;
    if (rows.includes(target)) {
      if (target.hidden) everything();
      if (target.hidden) showAll();
      open(target, true);
      target.cells[0].firstElementChild.focus({ preventScroll: true });
    }
    target.scrollIntoView();
  };
  addEventListener("hashchange", visit);

  if (table) {
    [...table.tHead.rows[0].cells].forEach((head, index) =>
      head.firstElementChild.addEventListener("click", () => sort(head, index)));
    table.tBodies[0].addEventListener("click", event => {
      const button = event.target.closest("th button");
      if (button) open(button.closest("tr"), button.getAttribute("aria-expanded") === "false");
    });
    fields.forEach(each => each.addEventListener(each.tagName === "SELECT" ? "change" : "input", choose));
    byId("all").addEventListener("click", everything);
    byId("rest").addEventListener("click", showAll);
    document.querySelectorAll(".pick").forEach(button => button.addEventListener("click", () => {
      fields.forEach(each => { each.value = each.id === "code" ? button.dataset.code : ""; });
      choose();
      location.hash = "cells";
      byId("code").focus({ preventScroll: true });
    }));
    document.querySelectorAll("circle[data-row]").forEach(dot => {
      const row = byId(`cell-${dot.dataset.row}`);
      const name = document.createElementNS("http://www.w3.org/2000/svg", "title");
      name.textContent = details.cells[dot.dataset.row][0];
      dot.append(name);
      dot.addEventListener("click", () => {
        if (location.hash === `#${row.id}`) visit(); else location.hash = row.id;
      });
    });
    choose();
  }
  visit();
})();
