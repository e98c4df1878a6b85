"use strict";
// Sorting: a click or a key on a heading sorts by that column, again turns the order round.
function sorted(rows, column, direction) {
  const key = row => row.cells[column].dataset.sort;
  const known = rows.every(row => key(row) === "" || !Number.isNaN(number(key(row))));
  return rows.map((row, place) => [row, place]).sort(([one, first], [other, second]) => {
    const a = key(one), b = key(other);
    if ((a === "") !== (b === "")) return a === "" ? 1 : -1;
    const order = known ? number(a) - number(b) : a.localeCompare(b);
    return (order > 0 ? direction : order < 0 ? -direction : 0) || first - second;
  }).map(([row]) => row);
}

function number(text) {
  return text === "inf" ? Infinity : text === "-inf" ? -Infinity : Number(text);
}

function sortBy(heading) {
  const body = heading.closest("table").tBodies[0];
  const direction = heading.getAttribute("aria-sort") === "ascending" ? "descending" : "ascending";
  for (const other of heading.parentElement.cells) other.setAttribute("aria-sort", "none");
  heading.setAttribute("aria-sort", direction);
  body.append(...sorted([...body.rows], heading.cellIndex, direction === "ascending" ? 1 : -1));
}

// Copying: raw names and all digits, a tab between cells. Without leave to use the clipboard the older command is
// tried, and then the text is shown, selected, to be copied by hand.
function tableText(table) {
  return [...table.rows].map(row => [...row.cells].map(cell => cell.dataset.copy).join("\t")).join("\n") + "\n";
}

async function copyTable(button) {
  const said = button.parentElement.querySelector(".copied");
  const text = tableText(document.getElementById(button.dataset.table));
  said.textContent = "";
  try {
    await navigator.clipboard.writeText(text);
    said.textContent = "Copied.";
  } catch {
    said.textContent = copyBySelection(button, text);
  }
}

function copyBySelection(button, text) {
  const figure = button.closest("figure");
  figure.querySelector("textarea")?.remove();
  const area = document.createElement("textarea");
  area.value = text;
  area.readOnly = true;
  area.rows = 6;
  area.setAttribute("aria-label", "the table as text");
  figure.append(area);
  area.select();
  let done = false;
  try { done = document.execCommand("copy"); } catch { done = false; }
  if (done) area.remove();
  return done ? "Copied." : "Copying is not allowed here: the text below is selected, copy it by hand.";
}

for (const button of document.querySelectorAll("button.sort")) {
  button.addEventListener("click", () => sortBy(button.closest("th")));
}
for (const button of document.querySelectorAll("button.copy")) {
  button.addEventListener("click", () => copyTable(button));
}
const box = document.getElementById("only-differences");
if (box) {
  const table = document.querySelector("table.options");
  const apply = () => table.classList.toggle("only-differences", box.checked);
  box.addEventListener("change", apply);
  apply();
}
