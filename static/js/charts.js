// Mounts the figures of a page: <div data-chart="ID"> draws the JSON of <script type="application/json" id="ID">.
// Follows the theme, the size of its box, and htmx swaps; holds nothing back when it cannot draw (the table stays).
"use strict";

(() => {
  const calm = window.matchMedia("(prefers-reduced-motion: reduce)");
  const night = window.matchMedia("(prefers-color-scheme: dark)");
  const drawn = new Map(); // box -> the figure as it came
  const STEPS_H = [0.25, 0.5, 1, 2, 3, 4, 6, 12, 24, 48, 96, 168, 336];

  function isDark() {
    const chosen = document.documentElement.dataset.theme;
    return chosen === "dark" || (chosen !== "light" && night.matches);
  }

  // Colours are exact strings, so one walk over the figure gives the other theme.
  function recoloured(part, colours) {
    if (typeof part === "string") return colours[part] ?? part;
    if (Array.isArray(part)) return part.map((item) => recoloured(item, colours));
    if (part && typeof part === "object") {
      return Object.fromEntries(Object.entries(part).map(([key, value]) => [key, recoloured(value, colours)]));
    }
    return part;
  }

  function inTheme(figure) {
    return isDark() ? recoloured({ data: figure.data, layout: figure.layout }, figure.dark)
      : structuredClone({ data: figure.data, layout: figure.layout });
  }

  // --- time ticks after a zoom: wall clock of the unit's zone, or hours from admission ---

  function wallParts(zone, hours) {
    const format = new Intl.DateTimeFormat("en-GB", {
      timeZone: zone, hourCycle: "h23", day: "2-digit", month: "short", hour: "2-digit", minute: "2-digit",
    });
    return Object.fromEntries(format.formatToParts(new Date(hours * 3.6e6)).map((p) => [p.type, p.value]));
  }

  function wallTicks(zone, low, high, step) {
    const ticks = [];
    for (let n = Math.ceil(low * 4); n <= Math.floor(high * 4); n += 1) {
      const parts = wallParts(zone, n / 4);
      const hour = Number(parts.hour) + Number(parts.minute) / 60;
      const days = Math.floor(n / 96);
      if (step <= 24 ? hour % Math.min(step, 24) === 0 : hour === 0 && days % (step / 24) === 0) {
        ticks.push([n / 4, hour === 0 ? `${parts.day} ${parts.month}` : `${parts.hour}:${parts.minute}`]);
      }
    }
    return ticks;
  }

  function elapsedTicks(origin, low, high, step) {
    const ticks = [];
    for (let n = Math.ceil((low - origin) / step); n <= Math.floor((high - origin) / step); n += 1) {
      ticks.push([origin + n * step, String(Math.round(n * step * 100) / 100)]);
    }
    return ticks;
  }

  function timeTicks(clock, low, high) {
    const step = STEPS_H.find((s) => (high - low) / s <= 9) ?? 672;
    return clock.zone ? wallTicks(clock.zone, low, high, step) : elapsedTicks(clock.origin, low, high, step);
  }

  function retick(box, figure, change) {
    if (change["xaxis.tickvals"]) return; // our own
    const own = figure.layout.xaxis;
    const from = change["xaxis.range[0]"] ?? change["xaxis.range"]?.[0];
    const to = change["xaxis.range[1]"] ?? change["xaxis.range"]?.[1];
    if (from !== undefined) {
      const ticks = timeTicks(figure.clock, from, to);
      Plotly.relayout(box, { "xaxis.tickvals": ticks.map((t) => t[0]), "xaxis.ticktext": ticks.map((t) => t[1]) });
    } else if (change["xaxis.autorange"]) {
      Plotly.relayout(box, { "xaxis.range": own.range, "xaxis.tickvals": own.tickvals, "xaxis.ticktext": own.ticktext });
    }
  }

  // --- mounting ---

  function mount(box) {
    const source = document.getElementById(box.dataset.chart);
    if (!source || drawn.has(box) || typeof Plotly === "undefined") return;
    const figure = JSON.parse(source.textContent);
    drawn.set(box, figure);
    const { data, layout } = inTheme(figure);
    Plotly.newPlot(box, data, { ...layout, transition: { duration: calm.matches ? 0 : 150 } }, figure.config);
    if (figure.clock) box.on("plotly_relayout", (change) => retick(box, figure, change));
    box.querySelectorAll("svg.main-svg").forEach((svg) => svg.setAttribute("aria-hidden", "true")); // alt and table say it
    box.dataset.drawn = "yes";
  }

  function forget() {
    for (const box of drawn.keys()) {
      if (!box.isConnected) {
        Plotly.purge(box);
        drawn.delete(box);
      }
    }
  }

  function mountAll(root) {
    forget();
    root.querySelectorAll?.("[data-chart]").forEach(mount);
    if (root.matches?.("[data-chart]")) mount(root);
  }

  function redrawAll() {
    forget();
    for (const [box, figure] of drawn) {
      const { data, layout } = inTheme(figure);
      Plotly.react(box, data, layout, figure.config);
    }
  }

  night.addEventListener("change", redrawAll);
  new MutationObserver(redrawAll).observe(document.documentElement, { attributeFilter: ["data-theme"] });
  document.addEventListener("htmx:load", (event) => mountAll(event.detail.elt));
  document.addEventListener("htmx:beforeCleanupElement", () => queueMicrotask(forget));
  if (document.readyState === "loading") document.addEventListener("DOMContentLoaded", () => mountAll(document));
  else mountAll(document);
})();
