// Fills the rest of a row in when its name is one that the series knows; what somebody typed stays.

function fill(row, known) {
  for (const [part, value] of Object.entries(known.dataset)) {
    const field = row.querySelector(`[name$="-${part}"]`);
    const untouched = field && (field.tagName === "SELECT" ? !field.dataset.touched : field.value.trim() === "");
    if (untouched && value !== "") field.value = value;
  }
}

document.addEventListener("change", (event) => {
  const field = event.target;
  if (field.tagName === "SELECT") field.dataset.touched = "yes";
  const names = field.list;
  const row = field.closest("fieldset.row");
  if (!names || !row) return;
  const known = [...names.options].find((option) => option.value === field.value.trim());
  if (known) fill(row, known);
});
