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

  const MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"];
  const DAY_ONE = 719163; // 1 January 1970 counted from the first day of year 1, as the server counts days
  const clocks = new Map(); // zone -> its formatter

  function wallTime(zone, hours) {
    if (!clocks.has(zone)) {
      clocks.set(zone, new Intl.DateTimeFormat("en-GB", {
        timeZone: zone, hourCycle: "h23", year: "numeric", month: "numeric", day: "numeric", hour: "numeric", minute: "numeric",
      }));
    }
    const parts = clocks.get(zone).formatToParts(new Date(hours * 3.6e6));
    const of = Object.fromEntries(parts.map((part) => [part.type, Number(part.value)]));
    return { ...of, days: Date.UTC(of.year, of.month - 1, of.day) / 8.64e7 + DAY_ONE };
  }

  function wallTicks(zone, low, high, step) {
    const ticks = [];
    const two = (number) => String(number).padStart(2, "0");
    for (let n = Math.ceil(low * 4); n <= Math.floor(high * 4); n += 1) {
      const wall = wallTime(zone, n / 4);
      const hour = wall.hour + wall.minute / 60;
      if (step <= 24 ? hour % step === 0 : hour === 0 && wall.days % (step / 24) === 0) {
        ticks.push([n / 4, hour === 0 ? `${two(wall.day)} ${MONTHS[wall.month - 1]}` : `${two(wall.hour)}:${two(wall.minute)}`]);
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

  function timeTicks(clock, low, high, most) {
    const step = STEPS_H.find((s) => (high - low) / s <= most) ?? 672;
    return clock.zone ? wallTicks(clock.zone, low, high, step) : elapsedTicks(clock.origin, low, high, step);
  }

  const LABEL_PX = 62; // what a time takes on the axis, with room
  const LETTER_PX = 7.5;

  // The ticks that fit: the figure's own where there is room, else fewer; after a zoom, times of the span shown.
  function ticksFor(figure, range, length) {
    const own = figure.layout.xaxis;
    const all = own.tickvals.map((value, i) => [value, own.ticktext[i]]);
    if (figure.clock) {
      const whole = Math.abs(range[0] - own.range[0]) < 1e-6 && Math.abs(range[1] - own.range[1]) < 1e-6;
      const most = Math.min(9, Math.max(2, Math.floor(length / LABEL_PX)));
      return whole && all.length <= most ? all : timeTicks(figure.clock, range[0], range[1], most);
    }
    const widest = Math.max(1, ...own.ticktext.map((text) => text.length)) * LETTER_PX + 12;
    // By the room between two of them: few bars stand close together on an axis that is made for more.
    const span = Math.abs(range[1] - range[0]);
    const gap = all.length > 1 ? (Math.abs(all.at(-1)[0] - all[0][0]) / (all.length - 1) / span) * length : length;
    const every = Math.max(1, Math.ceil(widest / gap));
    return all.filter((_, i) => (all.length - 1 - i) % every === 0);
  }

  function fitTicks(box, figure) {
    const axis = box._fullLayout?.xaxis;
    if (!axis || !(axis._length > 0)) return;
    const ticks = ticksFor(figure, axis.range, axis._length);
    const texts = ticks.map((tick) => tick[1]);
    if (texts.join("|") === (axis.ticktext ?? []).join("|")) return;
    Plotly.relayout(box, { "xaxis.tickvals": ticks.map((tick) => tick[0]), "xaxis.ticktext": texts });
  }

  // A box changes its width with the window, and when the page around it is laid out anew.
  const widths = new WeakMap();
  const watcher = new ResizeObserver((entries) => {
    for (const { target: box, contentRect } of entries) {
      if (!drawn.has(box) || Math.abs((widths.get(box) ?? 0) - contentRect.width) < 1) continue;
      widths.set(box, contentRect.width);
      requestAnimationFrame(() => {
        if (box.isConnected && contentRect.width > 0) Plotly.Plots.resize(box)?.then?.(() => fitTicks(box, drawn.get(box)));
      });
    }
  });

  // --- mounting ---

  function mount(box) {
    const source = document.getElementById(box.dataset.chart);
    if (!source || drawn.has(box) || typeof Plotly === "undefined") return;
    const figure = JSON.parse(source.textContent);
    drawn.set(box, figure);
    const { data, layout } = inTheme(figure);
    Plotly.newPlot(box, data, { ...layout, transition: { duration: calm.matches ? 0 : 150 } }, figure.config);
    box.on("plotly_relayout", (change) => {
      if (!change["xaxis.tickvals"]) fitTicks(box, figure);
    });
    widths.set(box, box.clientWidth);
    watcher.observe(box);
    fitTicks(box, figure);
    box.querySelectorAll("svg.main-svg").forEach((svg) => svg.setAttribute("aria-hidden", "true")); // alt and table say it
    box.dataset.drawn = "yes";
  }

  function forget() {
    for (const box of drawn.keys()) {
      if (!box.isConnected) {
        watcher.unobserve(box);
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
      fitTicks(box, figure);
    }
  }

  night.addEventListener("change", redrawAll);
  new MutationObserver(redrawAll).observe(document.documentElement, { attributeFilter: ["data-theme"] });
  document.addEventListener("htmx:load", (event) => mountAll(event.detail.elt));
  document.addEventListener("htmx:beforeCleanupElement", () => queueMicrotask(forget));
  if (document.readyState === "loading") document.addEventListener("DOMContentLoaded", () => mountAll(document));
  else mountAll(document);
})();
