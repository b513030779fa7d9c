// The head of every page: the screen in sight, and a menu that closes by itself.
(() => {
  "use strict";
  // On a phone the row of screens scrolls sideways; the current one starts in sight.
  document.addEventListener("DOMContentLoaded", () => {
    const row = document.querySelector(".screens ul");
    const current = row?.querySelector("[aria-current]");
    if (!current) return;
    row.scrollLeft = current.offsetLeft - (row.clientWidth - current.offsetWidth) / 2;
  });

  // A sheet made for paper has a button that prints it; without scripts the browser's own menu does.
  document.addEventListener("DOMContentLoaded", () => {
    for (const button of document.querySelectorAll("button[data-print]")) {
      button.hidden = false;
      button.addEventListener("click", () => window.print());
    }
  });

  // A menu in the head closes by Escape or by a press elsewhere.
  document.addEventListener("click", (event) => {
    for (const menu of document.querySelectorAll("details.person[open]")) {
      if (!menu.contains(event.target)) menu.open = false;
    }
  });
  document.addEventListener("keydown", (event) => {
    if (event.key !== "Escape") return;
    for (const menu of document.querySelectorAll("details.person[open]")) {
      menu.open = false;
      menu.querySelector("summary").focus();
    }
  });
})();
