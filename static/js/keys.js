(() => {
  "use strict";
  const typing = "input, textarea, select, [contenteditable]";

  function rows() {
    return [...document.querySelectorAll("table[data-keys] tbody tr")].filter((row) => row.querySelector("a[href]"));
  }

  function current(all) {
    return all.findIndex((row) => row.classList.contains("at") || row.contains(document.activeElement));
  }

  function goTo(all, index) {
    const row = all[Math.max(0, Math.min(all.length - 1, index))];
    if (!row) return;
    for (const other of all) other.classList.toggle("at", other === row);
    row.querySelector("a[href]").focus({ preventScroll: true });
    row.scrollIntoView({ block: "nearest" });
  }

  document.addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.metaKey || event.altKey) return;
    if (event.target.matches(typing)) {
      if (event.key === "Escape" && event.target.matches("[data-search]")) event.target.blur();
      return;
    }
    // Speech input types what was not meant as a key.
    if (document.documentElement.dataset.shortcuts === "off") return;
    if (event.key === "/") {
      const search = document.querySelector("[data-search]");
      if (!search) return;
      event.preventDefault();
      search.focus();
      search.select();
      return;
    }
    if (event.key !== "j" && event.key !== "k" && event.key !== "Enter") return;
    const all = rows();
    if (!all.length) return;
    const at = current(all);
    if (event.key === "Enter") {
      // Enter on a focused link or button keeps its own meaning.
      if (at >= 0 && !event.target.matches("a, button, summary")) all[at].querySelector("a[href]").click();
      return;
    }
    event.preventDefault();
    goTo(all, event.key === "j" ? at + 1 : at < 0 ? 0 : at - 1);
  });

  // Screen keyboards with inputmode=decimal have no minus: a button turns the sign of the field it names.
  document.addEventListener("click", (event) => {
    const button = event.target.closest("[data-sign-for]");
    if (!button) return;
    const field = document.getElementById(button.dataset.signFor);
    if (!field) return;
    const text = field.value.trim();
    field.value = /^[-−]/.test(text) ? text.slice(1) : `-${text.replace(/^\+/, "")}`;
    field.focus();
    field.setSelectionRange(field.value.length, field.value.length);
    field.dispatchEvent(new Event("input", { bubbles: true }));
  });
})();
