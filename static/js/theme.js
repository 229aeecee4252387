// The choice is kept in a cookie, so that the server draws the next page in it from the first paint.
(() => {
  "use strict";
  const YEAR = 31536000;

  function choose(theme) {
    const secure = location.protocol === "https:" ? "; Secure" : "";
    document.cookie = `theme=${theme}; Path=/; Max-Age=${theme ? YEAR : 0}; SameSite=Lax${secure}`;
    if (theme) document.documentElement.dataset.theme = theme;
    else delete document.documentElement.dataset.theme;
  }

  document.addEventListener("change", (event) => {
    if (event.target.matches("[data-theme-choice]")) choose(event.target.value);
  });

  // A menu closes when another place is touched or Escape is pressed.
  document.addEventListener("click", (event) => {
    for (const menu of document.querySelectorAll("details.menu[open]")) {
      if (!menu.contains(event.target)) menu.open = false;
    }
  });
  document.addEventListener("keydown", (event) => {
    if (event.key !== "Escape") return;
    const menu = document.querySelector("details.menu[open]");
    if (!menu) return;
    menu.open = false;
    menu.querySelector("summary").focus();
  });
})();
