/* Texts of the page's catalogue, whether it is flat or by table; a missing one shows its key. */
function pageTexts() {
  "use strict";
  const found = {};
  const keep = (before, part) => {
    for (const [key, value] of Object.entries(part)) {
      if (value && typeof value === "object") keep(`${before}${key}.`, value);
      else found[before + key] = String(value);
    }
  };
  const source = document.getElementById("page-texts");
  if (source) keep("", JSON.parse(source.textContent));
  return (key, values = {}) =>
    (found[key] ?? key).replace(/\{(\w+)\}/g, (whole, name) => (name in values ? String(values[name]) : whole));
}
