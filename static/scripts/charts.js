// Draws every <div class="chart" data-chart="ID"> from the figure in <script type="application/json" id="ID">.
// Colours in a figure are names of the style sheet, "var(--p1)", and follow the theme. Without Plotly the table stays.
(() => {
  "use strict";
  if (window.halfnutCharts) return; // a list brought in anew brings this script along once more
  window.halfnutCharts = true;
  const library = document.currentScript.dataset.plotly;

  const CONFIG = {
    displaylogo: false,
    showSendToCloud: false,
    plotlyServerURL: "",
    responsive: true,
    showTips: false,
    modeBarButtons: [["zoom2d", "pan2d", "resetScale2d", "toImage"]],
    toImageButtonOptions: { format: "svg", filename: "halfnut" },
  };
  const calm = window.matchMedia("(prefers-reduced-motion: reduce)");
  // Under a thumb a chart is read and scrolled past; its tools are for a mouse, and show only over the chart.
  const narrow = window.matchMedia("(max-width: 640px), (hover: none)");
  const TOKEN = /^var\(\s*(--[\w-]+)\s*\)$/;

  const probe = document.createElement("span");
  probe.hidden = true;
  const colour = (name) => {
    probe.style.color = "";
    probe.style.color = `var(${name})`;
    return getComputedStyle(probe).color;
  };

  const resolved = (value) => {
    if (typeof value === "string") {
      const token = TOKEN.exec(value);
      return token ? colour(token[1]) : value;
    }
    if (Array.isArray(value)) return value.map(resolved);
    if (value && typeof value === "object") {
      return Object.fromEntries(Object.entries(value).map(([key, inner]) => [key, resolved(inner)]));
    }
    return value;
  };

  const titled = (title) => {
    if (!title) return title;
    const given = typeof title === "string" ? { text: title } : title;
    return { standoff: 10, ...given, font: { size: 14, ...given.font } };
  };

  const axis = (given) => ({
    gridcolor: "var(--hair)",
    linecolor: "var(--ink)",
    tickcolor: "var(--rule)",
    zerolinecolor: "var(--rule)",
    fixedrange: narrow.matches, // a thumb scrolls the page, not the axis
    automargin: true,
    ...given,
    title: titled(given?.title),
  });

  const laid = (given) => {
    const layout = {
      paper_bgcolor: "rgba(0,0,0,0)",
      plot_bgcolor: "rgba(0,0,0,0)",
      hovermode: "closest",
      dragmode: narrow.matches ? false : "zoom",
      separators: ".\u00a0",
      margin: { l: 56, r: 16, t: 12, b: 48 },
      legend: { orientation: "h", x: 0, y: 1.02, yanchor: "bottom", xanchor: "left" },
      ...given,
      font: { family: "Atkinson, system-ui, sans-serif", size: 14, color: "var(--soft)", ...given.font },
      hoverlabel: {
        bgcolor: "var(--sheet)",
        bordercolor: "var(--ink)",
        font: { family: "Atkinson, system-ui, sans-serif", size: 14, color: "var(--ink)" },
        ...given.hoverlabel,
      },
      modebar: { bgcolor: "rgba(0,0,0,0)", color: "var(--edge)", activecolor: "var(--blue)", orientation: "h" },
      autosize: true,
      transition: calm.matches ? { duration: 0 } : given.transition,
    };
    for (const fixed of ["template", "width", "height"]) delete layout[fixed]; // the style sheet decides
    for (const key of new Set(["xaxis", "yaxis", ...Object.keys(given)])) {
      if (/^[xy]axis\d*$/.test(key)) layout[key] = axis(given[key]);
    }
    return resolved(layout);
  };

  const figureOf = (host) => {
    const source = document.getElementById(host.dataset.chart);
    try {
      return source ? JSON.parse(source.textContent) : null;
    } catch {
      return null;
    }
  };

  const fall = (host) => {
    // no drawing: say so and open the table that holds the same figures
    const figure = host.closest(".figure");
    const words = document.createElement("p");
    words.className = "chart-missing";
    words.textContent = "The drawing could not be made; its figures stand in the table below.";
    host.replaceWith(words);
    figure?.querySelector(".figure-foot details")?.setAttribute("open", "");
  };

  const draw = (host) => {
    const figure = figureOf(host);
    const config = { ...CONFIG, displayModeBar: narrow.matches ? false : "hover" };
    if (!window.Plotly || !figure) {
      fall(host);
      return;
    }
    host.classList.add("chart-host");
    Promise.resolve()
      .then(() => window.Plotly.react(host, resolved(figure.data ?? []), laid(figure.layout ?? {}), config))
      // the sentence and the table are what a screen reader is given; the drawing's loose numbers would only disturb
      .then(() => host.querySelectorAll(".main-svg").forEach((svg) => svg.setAttribute("aria-hidden", "true")))
      .catch(() => fall(host));
  };

  const hosts = () => document.querySelectorAll("div.chart[data-chart]");
  const drawAll = () => hosts().forEach(draw);
  const drawAgain = () => window.Plotly && drawAll();

  const start = () => {
    document.body.append(probe);
    const script = document.createElement("script");
    script.src = library;
    script.addEventListener("load", drawAll);
    script.addEventListener("error", drawAll);
    document.head.append(script);
  };
  if (document.readyState === "loading") document.addEventListener("DOMContentLoaded", start);
  else start();

  // A list that htmx brought in anew may hold charts.
  document.addEventListener("htmx:afterSettle", (event) => {
    const place = event.detail.elt;
    if (window.Plotly && place instanceof Element) place.querySelectorAll("div.chart[data-chart]").forEach(draw);
  });

  window.matchMedia("(prefers-color-scheme: dark)").addEventListener("change", drawAgain);
  document.addEventListener("halfnut:theme", drawAgain);
  if (document.fonts?.status === "loading") document.fonts.ready.then(drawAgain); // widths were measured too early

  // Paper is light whatever the screen is.
  let before = null;
  window.addEventListener("beforeprint", () => {
    before = document.documentElement.dataset.theme ?? "";
    document.documentElement.dataset.theme = "light";
    document.documentElement.classList.add("printing");
    drawAgain();
  });
  window.addEventListener("afterprint", () => {
    if (before) document.documentElement.dataset.theme = before;
    else delete document.documentElement.dataset.theme;
    document.documentElement.classList.remove("printing");
    drawAgain();
  });
})();
