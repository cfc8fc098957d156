"use strict";
// Every candidate stands in the page already: this only chooses which are shown, sorts the list and filters it.
document.documentElement.classList.add("script");
document.addEventListener("DOMContentLoaded", () => {
  const regions = [...document.querySelectorAll(".scroll")];
  // A region that does not scroll is no stop for the keyboard.
  const settle = () => {
    for (const region of regions) {
      if (region.scrollWidth > region.clientWidth + 1 || region.scrollHeight > region.clientHeight + 1) region.tabIndex = 0;
      else region.removeAttribute("tabindex");
    }
  };
  window.addEventListener("resize", settle);

  const list = document.getElementById("candidates");
  if (!list) { settle(); return; }
  const body = list.tBodies[0];
  const rows = [...body.rows];
  const panels = document.getElementById("panels");
  const articles = new Map([...panels.children].map((a) => [a.id.replace("candidate-", ""), a]));
  const beside = document.getElementById("beside");
  const radios = new Map();
  let shown = "";

  const mark = (element, key) => {
    const other = beside ? beside.value : "";
    element.classList.toggle("shown", key === shown);
    element.classList.toggle("other", key === other && key !== shown);
  };
  const draw = () => {
    articles.forEach((article, key) => mark(article, key));
    rows.forEach((row) => mark(row, row.dataset.key));
    const other = beside ? articles.get(beside.value) : null;
    panels.classList.toggle("two", Boolean(other) && beside.value !== shown);
    // The chosen one stands first, whatever its key.
    panels.prepend(articles.get(shown));
    if (other && beside.value !== shown) articles.get(shown).after(other);
    settle();
  };
  const choose = (key, remember = true) => {
    if (!articles.has(key)) return;
    shown = key;
    if (radios.has(key)) radios.get(key).checked = true;
    if (remember) history.replaceState(null, "", "#candidate-" + key);
    draw();
  };

  if (rows.length > 1) {
    for (const row of rows) {
      const radio = document.createElement("input");
      const label = document.createElement("label");
      radio.type = "radio";
      radio.name = "chosen";
      radio.id = "choose-" + row.dataset.key;
      label.htmlFor = radio.id;
      label.textContent = row.cells[0].textContent.trim();
      radio.setAttribute("aria-controls", "candidate-" + row.dataset.key);
      row.cells[0].append(radio, label);
      radio.addEventListener("change", () => choose(row.dataset.key));
      row.addEventListener("click", (event) => {
        if (event.target.closest("a, label, input")) return;
        radio.focus({preventScroll: true});
        choose(row.dataset.key);
      });
      radios.set(row.dataset.key, radio);
    }
  } else {
    rows[0].cells[0].append(rows[0].cells[0].textContent.trim());
  }
  if (beside) beside.addEventListener("change", draw);

  const sorted = (row, column) => {
    const cell = row.cells[column];
    const value = cell.dataset.sort ?? cell.textContent;
    const number = Number(value === "inf" ? Infinity : value);
    return Number.isNaN(number) ? value : number;
  };
  [...list.tHead.rows[0].cells].forEach((head, column) => {
    const button = document.createElement("button");
    button.type = "button";
    button.textContent = head.textContent;
    head.replaceChildren(button);
    button.addEventListener("click", () => {
      const down = head.getAttribute("aria-sort") === "ascending";
      for (const other of list.tHead.rows[0].cells) other.removeAttribute("aria-sort");
      head.setAttribute("aria-sort", down ? "descending" : "ascending");
      const order = rows.map((row) => [sorted(row, column), rows.indexOf(row), row]);
      const compare = (a, b) => (a < b ? -1 : a > b ? 1 : 0);
      order.sort((a, b) => (down ? -1 : 1) * compare(a[0], b[0]) || a[1] - b[1]);
      body.append(...order.map((entry) => entry[2]));
    });
  });
  list.tHead.rows[0].cells[0].setAttribute("aria-sort", "ascending");

  const text = document.getElementById("filter-text");
  const most = document.getElementById("filter-drift");
  const network = document.getElementById("filter-network");
  const heads = [...list.tHead.rows[0].cells].map((cell) => cell.textContent);
  const drift = heads.indexOf("drift");
  const kind = heads.indexOf("network");
  const filter = () => {
    const wanted = text.value.trim().toLowerCase().split(/\s+/).filter(Boolean);
    const limit = most.value === "" ? Infinity : Number(most.value) / 100;
    let count = 0;
    for (const row of rows) {
      const words = [...row.cells].slice(1).map((cell) => cell.textContent).join(" ").toLowerCase().replace(/\s+/g, " ");
      const fits = wanted.every((word) => (" " + words).includes(" " + word))
        && Number(row.cells[drift].dataset.sort) <= limit
        && (!network || !network.value || row.cells[kind].textContent.trim() === network.value);
      row.hidden = !fits;
      count += fits;
    }
    document.getElementById("shown").textContent = count + " of " + rows.length + " listed";
  };
  for (const field of [text, most, network]) if (field) field.addEventListener("input", filter);
  document.querySelector("form").addEventListener("submit", (event) => event.preventDefault());

  const named = () => location.hash.replace("#candidate-", "");
  window.addEventListener("hashchange", () => choose(named(), false));
  choose(articles.has(named()) ? named() : list.dataset.first, false);
  filter();
});
