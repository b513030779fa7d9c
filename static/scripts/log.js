// Shows the log form step by step, for one thumb; without this file the same form stands on one page.
(() => {
  "use strict";

  const form = document.querySelector("form[data-log]");
  const once = form || document.querySelector("form[data-once]");
  if (once) sendOnce(once);
  if (!form) return;

  const whereStep = form.querySelector('[data-step="where"]');
  const finishStep = form.querySelector('[data-step="finish"]');
  const heading = form.querySelector("[data-heading]");
  const finishHeading = form.querySelector("[data-finish-heading]");
  const well = form.querySelector(".log-well");
  const wellBox = well.querySelector("input");
  const positions = [...form.querySelectorAll("[data-position]")];
  const onward = form.querySelector("[data-onward]").parentElement;
  const next = form.querySelector("[data-next]").parentElement;
  const another = form.querySelector("[data-another]");
  const noSpare = form.querySelector("[data-no-spare]");
  const counter = form.querySelector('[name="strokes"]');
  const issue = form.querySelector("[data-issue]");
  const order = ["outcome", "because", "mode", "cause"];
  const outOfOrder = ["failed", "worn to limit", "planned"];
  let step = { at: "where" };

  const part = (position, name) => position.querySelector(`[data-part="${name}"]`);
  const chosen = (scope) => scope && scope.querySelector("input:checked");
  const outcome = (position) => chosen(part(position, "outcome"))?.value || "";
  const faulty = (scope) => Boolean(scope.querySelector(".fault"));
  const fits = (element, said) => !element.dataset.when || element.dataset.when.split("|").includes(said);
  const named = (id) => positions.find((position) => position.dataset.position === id);
  const takesPart = (position) => part(position, "in") && fits(part(position, "in"), outcome(position));
  const words = (scope) => chosen(scope)?.closest(".tile").textContent.trim() || "";

  function said(position) {
    const what = outcome(position);
    if (!what) return "";
    const mode = part(position, "mode");
    const how = mode && fits(mode, what) && chosen(mode) && chosen(mode).value !== "not known" ? words(mode) : "";
    const why = what === "planned" ? words(part(position, "because")).toLowerCase() : "";
    return [words(part(position, "outcome")).toLowerCase(), how, why].filter(Boolean).join(", ");
  }

  // The parts of a position that its outcome asks for, in order.
  function asked(position) {
    const what = outcome(position);
    return order.filter((name) => {
      const piece = part(position, name);
      if (!piece) return false;
      if (name === "outcome") return true;
      return fits(piece, what) && piece.querySelectorAll(".tile:not([hidden])").length > 1;
    });
  }

  function show(to) {
    step = to;
    const inPart = to.at === "part";
    const atFinish = to.at === "finish";
    heading.hidden = inPart || (atFinish && !positions.some(outcome));
    heading.textContent = atFinish ? "This visit" : "What did you work on?";
    well.hidden = inPart || (atFinish && !faulty(well));
    finishHeading.textContent = wellBox.checked ? "All well: the counter" : "Counter";
    finishStep.hidden = !atFinish;
    next.hidden = !inPart;
    onward.hidden = to.at !== "where" || !positions.some(outcome);
    noSpare.hidden = !positions.some((position) => outOfOrder.includes(outcome(position)));
    if (issue) issue.hidden = !positions.some(takesPart) && !faulty(issue);
    positions.forEach((position) => showPosition(position, to));
    document.body.classList.toggle("log-in-part", inPart);
  }

  function showPosition(position, to) {
    const what = outcome(position);
    const mine = to.position === position.dataset.position;
    position.querySelector("[data-said]").textContent = said(position);
    position.classList.toggle("chosen", Boolean(what));
    position.hidden = (to.at === "part" && !mine) || (to.at === "finish" && !what && !faulty(position));
    position.open = to.at !== "where";
    position.querySelector("summary").hidden = to.at === "part";
    position.querySelectorAll(":scope > [data-part]").forEach((piece) => {
      const name = piece.dataset.part;
      if (to.at === "part") piece.hidden = name !== to.part;
      else piece.hidden = !((name === "in" && fits(piece, what)) || name === "more" || faulty(piece));
    });
    position.querySelectorAll(".log-details > [data-when]").forEach((piece) => {
      piece.hidden = !fits(piece, what) && !faulty(piece);
    });
  }

  function go(to) {
    history.pushState({ log: to }, "");
    show(to);
    settle(to);
  }

  // Where the hand goes next: the counter at the end, else the question just asked.
  function settle(to) {
    if (to.at === "finish") {
      counter.focus({ preventScroll: true });
      counter.closest(".field").scrollIntoView({ block: "center" });
      return;
    }
    const target = to.at === "part" ? part(named(to.position), to.part).querySelector("legend") : heading;
    window.scrollTo(0, 0);
    target.focus({ preventScroll: true });
  }

  function openPosition(position) {
    go({ at: "part", position: position.dataset.position, part: "outcome" });
  }

  function advance() {
    const position = named(step.position);
    if (step.part === "outcome") {
      if (!outcome(position)) return go({ at: "where" });
      wellBox.checked = false;
      offerCauses(position);
    }
    const names = asked(position);
    const after = names[names.indexOf(step.part) + 1];
    return go(after ? { at: "part", position: step.position, part: after } : { at: "finish" });
  }

  // Only what came out in this visit can have taken another part along; a single failure is the likely cause.
  function offerCauses(position) {
    const cause = part(position, "cause");
    if (!cause || outcome(position) !== "taken with another") return;
    const out = positions.filter((other) => other !== position && part(other, "in") && fits(part(other, "in"), outcome(other)));
    const keys = out.map((other) => other.dataset.position.slice(1));
    cause.querySelectorAll(".tile").forEach((tile) => {
      const value = tile.querySelector("input").value;
      tile.hidden = keys.length > 0 && value !== "not known" && !keys.includes(value);
    });
    const failed = out.filter((other) => ["failed", "worn to limit"].includes(outcome(other)));
    if (failed.length === 1 && !chosen(cause)) {
      cause.querySelector(`input[value="${failed[0].dataset.position.slice(1)}"]`).checked = true;
    }
  }

  // A tap chooses and goes on; arrows and space only choose, so that a keyboard can look around.
  form.addEventListener("click", (event) => {
    const summary = event.target.closest(".log-position > summary");
    if (summary) {
      event.preventDefault();
      openPosition(summary.parentElement);
      return;
    }
    const tile = event.target.closest(".tile");
    if (!tile || event.detail === 0) return;
    const input = tile.querySelector("input");
    if (event.target !== input) {
      event.preventDefault();
      input.checked = input.type === "radio" || !input.checked;
    }
    if (input === wellBox) tickWell();
    else if (step.at === "part" && tile.closest("[data-part]")) advance();
  });

  function tickWell() {
    if (!wellBox.checked) return;
    positions.forEach((position) => {
      const choice = chosen(part(position, "outcome"));
      if (choice) choice.checked = false;
    });
    go({ at: "finish" });
  }

  form.addEventListener("keydown", (event) => {
    const choosing = event.target.matches('input[type="radio"], input[type="checkbox"]');
    if (event.key !== "Enter" || !choosing) return;
    event.preventDefault();
    if (event.target === wellBox) {
      wellBox.checked = true;
      tickWell();
    } else if (step.at === "part") advance();
  });
  form.querySelector("[data-next]").addEventListener("click", advance);
  form.querySelector("[data-back]").addEventListener("click", () => history.back());
  form.querySelector("[data-onward]").addEventListener("click", () => go({ at: "finish" }));
  another.addEventListener("click", () => go({ at: "where" }));
  window.addEventListener("popstate", (event) => {
    show(event.state?.log || { at: "where" });
    settle(step);
  });

  form.classList.add("stepped");
  form.querySelectorAll("[data-script]").forEach((element) => (element.hidden = false));
  const returned = document.querySelector(".summary[role=alert]");
  const begin = returned && (positions.some(outcome) || wellBox.checked) ? { at: "finish" } : { at: "where" };
  history.replaceState({ log: begin }, "");
  show(begin);
  const question = form.querySelector(".log-question") || form.querySelector(".log-counter .fault");
  if (question) question.scrollIntoView({ block: "center" });

  // A second tap while the first is under way sends nothing; the entry key on the server decides the rest.
  // The book is asked first whether it can be reached: without signal a browser would put its own page over the entry.
  function sendOnce(target) {
    target.addEventListener("submit", (event) => {
      if (target.dataset.reached) return;
      event.preventDefault();
      if (target.dataset.sent) return;
      target.dataset.sent = "yes";
      target.classList.add("sending");
      reach(target, event.submitter);
    });
    window.addEventListener("pageshow", () => ready(target));
  }

  function ready(target) {
    delete target.dataset.sent;
    delete target.dataset.reached;
    target.classList.remove("sending");
  }

  function reach(target, submitter) {
    const late = new AbortController();
    const clock = setTimeout(() => late.abort(), 10000);
    fetch("/health", { cache: "no-store", signal: late.signal })
      .then(() => {
        target.dataset.reached = "yes";
        target.requestSubmit(submitter);
      })
      .catch(() => {
        ready(target);
        sayNoSignal(target, submitter);
      })
      .finally(() => clearTimeout(clock));
  }

  function sayNoSignal(target, submitter) {
    const said = target.querySelector(".no-signal") || document.createElement("p");
    said.className = "message warning no-signal";
    said.setAttribute("role", "alert");
    const button = submitter || target.querySelector("button");
    said.textContent = `No signal: nothing was sent. What you entered stays on this page. Press “${button.textContent.trim()}” again where there is signal.`;
    button.parentElement.before(said);
    said.scrollIntoView({ block: "center" });
  }
})();
