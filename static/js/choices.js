// The choices are kept in cookies, so that the server draws the next page in them from the first paint.
(() => {
  "use strict";
  const YEAR = 31536000;

  function keep(name, value, shown) {
    const secure = location.protocol === "https:" ? "; Secure" : "";
    document.cookie = `${name}=${value}; Path=/; Max-Age=${value ? YEAR : 0}; SameSite=Lax${secure}`;
    if (value) document.documentElement.dataset[shown] = value;
    else delete document.documentElement.dataset[shown];
  }

  document.addEventListener("change", (event) => {
    if (event.target.matches("[data-theme-choice]")) keep("theme", event.target.value, "theme");
    if (event.target.matches("[data-keys-choice]")) keep("shortcuts", event.target.value, "shortcuts");
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
