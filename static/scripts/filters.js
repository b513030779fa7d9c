// Filter lists without a reload. htmx does the fetching; this keeps the address short and says when it could not be read.
(() => {
  "use strict";
  const isFilter = (element) => element instanceof HTMLFormElement && "filters" in element.dataset;

  document.addEventListener("htmx:configRequest", (event) => {
    if (!isFilter(event.detail.elt)) return;
    const kept = event.detail.formData ?? event.detail.parameters;
    for (const [name, value] of Object.entries(event.detail.parameters)) {
      if (value === "") kept.delete ? kept.delete(name) : delete kept[name];
    }
  });

  // A plain submit (without htmx) drops empty fields too; they are given back if the page stays.
  document.addEventListener("submit", (event) => {
    if (!isFilter(event.target) || window.htmx) return;
    for (const control of event.target.elements) {
      if (control.name && control.value === "") control.disabled = true;
    }
  });

  const say = (text) => {
    const place = document.getElementById("messages");
    if (!place) return;
    const list = document.createElement("ul");
    list.className = "messages";
    const item = document.createElement("li");
    item.className = "message warning";
    item.textContent = text;
    list.append(item);
    place.replaceChildren(list);
  };
  document.addEventListener("htmx:sendError", () => {
    say("The list could not be read: no connection. Check the connection and press Show.");
  });
  document.addEventListener("htmx:responseError", (event) => {
    say(`The list could not be read (answer ${event.detail.xhr.status}). Load the page again.`);
  });

  // On a phone the filters start folded, so that the list is in sight.
  const fold = () => {
    if (!window.matchMedia("(max-width: 640px)").matches) return;
    for (const details of document.querySelectorAll("form.filters > details")) details.open = false;
  };
  document.addEventListener("DOMContentLoaded", fold);
})();
