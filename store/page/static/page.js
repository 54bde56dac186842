"use strict";
// What a script adds to sheets that can be read without it: a grid to walk through, a filter, the level line, news.

function grid(table) {
  const filter = document.getElementById("filter");
  const count = document.getElementById("count");
  const sort = document.getElementById("sort");
  const body = table.tBodies[0];
  const inOrder = [...body.rows];
  const names = inOrder.map((row) => row.textContent.toLowerCase());
  let current = null;

  table.setAttribute("role", "grid");
  document.querySelector(".tools").hidden = false;

  const visible = () => [...body.rows].filter((row) => !row.hidden);

  function mark(cell) {
    if (current) current.tabIndex = -1;
    current = cell;
    if (cell) cell.tabIndex = 0;
  }

  function go(row, column) {
    if (!row) return;
    mark(row.cells[Math.max(0, Math.min(column, row.cells.length - 1))]);
    current.focus();
    current.scrollIntoView({ block: "nearest" });
  }

  function narrow() {
    const words = filter.value.toLowerCase().split(/\s+/).filter(Boolean);
    inOrder.forEach((row, at) => { row.hidden = !words.every((word) => names[at].includes(word)); });
    const left = visible();
    count.textContent = words.length ? `${left.length} of ${inOrder.length} series` : "";
    if (!current || current.parentElement.hidden) mark(left.length ? left[0].cells[0] : null);
  }

  function order() {
    const first = sort.getAttribute("aria-pressed") !== "true";
    sort.setAttribute("aria-pressed", String(first));
    const need = (row) => Number(row.dataset.look || 0);
    const rows = first ? [...inOrder].sort((a, b) => need(b) - need(a)) : inOrder;
    body.append(...rows);
  }

  const steps = {
    ArrowDown: (rows, at) => [at + 1, null], ArrowUp: (rows, at) => [at - 1, null],
    PageDown: (rows, at) => [Math.min(at + 10, rows.length - 1), null], PageUp: (rows, at) => [Math.max(at - 10, 0), null],
    ArrowRight: (rows, at, column) => [at, column + 1], ArrowLeft: (rows, at, column) => [at, column - 1],
    Home: (rows, at, column, all) => [all ? 0 : at, 0], End: (rows, at, column, all) => [all ? rows.length - 1 : at, 99],
  };

  table.addEventListener("keydown", (event) => {
    const cell = event.target.closest("td, th");
    if (!cell || event.altKey || event.metaKey) return;
    const rows = visible();
    const at = rows.indexOf(cell.parentElement);
    const link = cell.parentElement.querySelector("a");
    if (event.key in steps) {
      const [row, column] = steps[event.key](rows, at, cell.cellIndex, event.ctrlKey);
      if (row < 0) filter.focus(); else go(rows[row], column === null ? cell.cellIndex : column);
      event.preventDefault();
    } else if (event.key === "Enter" && link && event.target !== link) {
      link.click();
      event.preventDefault();
    }
  });
  table.addEventListener("focusin", (event) => {
    const cell = event.target.closest("tbody td, tbody th");
    if (cell) mark(cell);
  });
  document.addEventListener("keydown", (event) => {
    const inField = event.target.closest("input, textarea, select, details");
    if (event.key === "Escape" && (event.target === filter || !inField)) {
      filter.value = "";
      narrow();
      if (event.target === filter && current) current.focus();
    } else if (event.target === filter && (event.key === "ArrowDown" || event.key === "Enter")) {
      go(visible()[0], 0);
      event.preventDefault();
    } else if (!inField && event.key.length === 1 && !event.ctrlKey && !event.metaKey && !event.altKey) {
      if (event.key === "!") { order(); event.preventDefault(); }
      else if (event.key !== " ") filter.focus();
    }
  });
  filter.addEventListener("input", narrow);
  sort.addEventListener("click", order);
  for (const row of inOrder) for (const cell of row.cells) cell.tabIndex = -1;
  for (const link of body.querySelectorAll("a")) link.tabIndex = -1;
  if (inOrder.length) mark(inOrder[0].cells[0]);
  narrow();
}

function level(section) {
  const figure = section.querySelector("figure");
  const pictures = [...figure.querySelectorAll("svg")];
  const lines = pictures.map((picture) => picture.querySelector(".level_marks line"));
  const field = section.querySelector("input[name=level]");
  const output = section.querySelector("output");
  const [low, high, height] = ["low", "high", "height"].map((name) => Number(figure.dataset[name]));
  const values = figure.dataset.values.split(" ").map(Number);
  const times = figure.dataset.times.split(" ");

  function sentence(at) {
    let up = 0, down = 0, last = null;
    for (let k = 1; k < values.length; k += 1) {
      const before = values[k - 1] >= at, now = values[k] >= at;
      if (before !== now) { last = k; if (now) up += 1; else down += 1; }
    }
    const latest = values[values.length - 1];
    const away = Number(Math.abs(latest - at).toPrecision(4));
    const there = `the last value is ${latest >= at ? "above" : "below"} it by ${away} ${figure.dataset.unit}`.trimEnd();
    if (last === null) return `Not crossed in the window; ${there}.`;
    const often = up + down === 1 ? "once" : `${up + down} times`;
    return `Crossed ${often} in the window, ${up} up and ${down} down, last on ${times[last].replaceAll("_", " ")}; ${there}.`;
  }

  function move(at) {
    const y = height * (1 - (at - low) / (high - low));
    for (const line of lines) {
      const across = line.transform.baseVal.consolidate().matrix.e;
      line.setAttribute("transform", `translate(${across},${y})`);
    }
    output.textContent = sentence(at);
  }

  function follow(event) {
    const plot = event.currentTarget.querySelector(".background").getBoundingClientRect();
    const down = Math.max(0, Math.min(1, (event.clientY - plot.top) / plot.height));
    field.value = Number((low + (high - low) * (1 - down)).toPrecision(5));
    move(Number(field.value));
  }

  field.step = "any";
  const step = Number(field.getAttribute("data-step"));
  field.addEventListener("keydown", (event) => {
    const way = { ArrowUp: 1, ArrowDown: -1 }[event.key];
    if (!way) return;
    event.preventDefault();
    field.value = Number((Number(field.value) + way * step).toPrecision(12));
    move(Number(field.value));
  });
  field.addEventListener("input", () => { if (field.value !== "") move(Number(field.value)); });
  for (const picture of pictures) {
    picture.addEventListener("pointerdown", (event) => { picture.setPointerCapture(event.pointerId); follow(event); });
    picture.addEventListener("pointermove", (event) => { if (event.buttons) follow(event); });
  }
  section.querySelector("form").addEventListener("submit", (event) => event.preventDefault());
  const button = section.querySelector("form button");
  if (button) button.hidden = true;
}

function news(shown) {
  const line = document.getElementById("newer");
  async function ask() {
    if (document.hidden || line.textContent) return;
    try {
      const { run } = await (await fetch("/newest.json")).json();
      if (run <= shown) return;
      const link = document.createElement("a");
      link.href = location.href;
      link.textContent = "Show it";
      line.append(`Run ${run} is there. `, link);
    } catch { /* the page was closed at its other end; what is shown stays */ }
  }
  setInterval(ask, 20000);
  addEventListener("focus", ask);
}

function picker(details) {
  details.addEventListener("keydown", (event) => {
    if (event.key !== "Escape") return;
    details.open = false;
    details.querySelector("summary").focus();
  });
}

for (const table of document.querySelectorAll("#series")) grid(table);
for (const section of document.querySelectorAll(".past-values")) level(section);
for (const details of document.querySelectorAll(".picker")) picker(details);
if (document.body.dataset.run !== undefined) news(Number(document.body.dataset.run));
