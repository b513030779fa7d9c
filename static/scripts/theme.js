// The person's choice of light or dark, kept on this device. Runs before the page is drawn, so it does not flash.
(() => {
  "use strict";
  const KEY = "halfnut-theme";
  const root = document.documentElement;
  const read = () => {
    try {
      return localStorage.getItem(KEY) || "";
    } catch {
      return ""; // storage may be refused; then the device decides
    }
  };
  const show = (theme) => {
    if (theme === "light" || theme === "dark") root.dataset.theme = theme;
    else delete root.dataset.theme;
    document.dispatchEvent(new CustomEvent("halfnut:theme"));
  };
  show(read());
  document.addEventListener("DOMContentLoaded", () => {
    const choice = document.querySelector("fieldset.theme");
    if (!choice) return;
    choice.hidden = false;
    for (const radio of choice.querySelectorAll("input")) {
      radio.checked = radio.value === read();
      radio.addEventListener("change", () => {
        try {
          localStorage.setItem(KEY, radio.value);
        } catch {
          // shown for this page only
        }
        show(radio.value);
      });
    }
  });
})();
