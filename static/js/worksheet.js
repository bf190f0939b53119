// Theme switch, keys, explanations in a dialog, and live parts that keep scroll, focus and what is open.
"use strict";

(() => {
  const root = document.documentElement;
  // htmx notes the address of the page there; an address names a patient, and the browser keeps nothing of one.
  sessionStorage.removeItem("htmx-current-path-for-history");

  // --- light and dark: follows the system until somebody chooses; the choice is kept with the account ---

  function isDark() {
    return root.dataset.theme ? root.dataset.theme === "dark" : matchMedia("(prefers-color-scheme: dark)").matches;
  }

  document.addEventListener("submit", (event) => {
    if (!event.target.matches("[data-theme-switch]")) return;
    event.preventDefault();
    root.dataset.theme = isDark() ? "light" : "dark";
    const body = new FormData(event.target);
    body.set("theme", root.dataset.theme);
    fetch(event.target.action, { method: "POST", body, headers: { "HX-Request": "true" } }).catch(() => {});
  });

  // --- keys: each belongs to a link or a button of the page that says so ---

  const typing = (element) => element.closest("input, select, textarea, [contenteditable], [role=textbox]");

  document.addEventListener("keydown", (event) => {
    if (event.ctrlKey || event.metaKey || event.altKey || typing(event.target)) return;
    if (document.querySelector("dialog[open]")) return;
    if (event.key === "?") {
      event.preventDefault();
      document.getElementById("keys").showModal();
      return;
    }
    const wanted = [...document.querySelectorAll("[data-key]")].find((e) => e.dataset.key === event.key);
    if (wanted) {
      event.preventDefault();
      wanted.click();
    } else if (event.key === "j" || event.key === "k") {
      step(event.key === "j" ? 1 : -1);
    }
  });

  function step(way) {
    const stops = [...document.querySelectorAll("[data-stop]")];
    if (!stops.length) return;
    const at = stops.indexOf(document.activeElement);
    const next = at < 0 ? (way > 0 ? 0 : stops.length - 1) : Math.min(Math.max(at + way, 0), stops.length - 1);
    stops[next].focus();
    stops[next].scrollIntoView({ block: "nearest" });
  }

  document.querySelectorAll("[data-keys-help]").forEach((button) => {
    button.hidden = false;
    button.addEventListener("click", () => document.getElementById("keys").showModal());
  });

  // --- explanations: links that open in the dialog, and stay links without this script ---

  document.addEventListener("htmx:afterSwap", (event) => {
    const dialog = document.getElementById("explain");
    if (event.target.id !== "explain-body" || dialog.open) return;
    dialog.showModal();
    dialog.scrollTop = 0;
  });

  // --- live parts: what did not change on the server is not touched here ---

  const seen = new Map(); // id -> the part as the server last sent it

  function parts(scope) {
    return [...scope.querySelectorAll("[data-part]")];
  }

  function remember(scope) {
    for (const part of parts(scope)) seen.set(part.id, part.outerHTML);
  }

  function openIds(part) {
    return [...part.querySelectorAll("details[open][id]")].map((d) => d.id);
  }

  function replacePart(old, fresh) {
    for (const id of openIds(old)) {
      const again = fresh.querySelector(`#${CSS.escape(id)}`);
      if (again) again.open = true;
    }
    old.replaceWith(fresh);
    htmx.process(fresh);
  }

  function inOrder(list, ids) {
    let place = list.querySelector(":scope > [data-part]");
    for (const id of ids) {
      const part = document.getElementById(id);
      if (part === place) place = place.nextElementSibling;
      else list.insertBefore(part, place);
    }
  }

  function anchor(live) {
    const kept = live.contains(document.activeElement) ? document.activeElement.closest("[data-part]") : null;
    const part = kept ?? parts(live).find((p) => p.getBoundingClientRect().bottom > 0);
    return part ? { id: part.id, top: part.getBoundingClientRect().top } : null;
  }

  function reconcile(live, text) {
    const fresh = new DOMParser().parseFromString(`<body>${text}</body>`, "text/html");
    const before = anchor(live);
    const focus = live.contains(document.activeElement) ? document.activeElement.id : "";
    const incoming = parts(fresh);
    const ids = new Set(incoming.map((p) => p.id));
    for (const old of parts(live)) if (!ids.has(old.id)) old.remove();
    for (const part of incoming) {
      const old = document.getElementById(part.id);
      const html = part.outerHTML;
      if (!old) live.querySelector(`#${CSS.escape(part.parentElement.id)}`)?.append(document.adoptNode(part));
      else if (seen.get(part.id) !== html) replacePart(old, document.adoptNode(part));
      seen.set(part.id, html);
    }
    const list = live.querySelector("[data-part-list]");
    if (list) inOrder(list, incoming.map((p) => p.id).filter((id) => list.contains(document.getElementById(id))));
    if (focus && document.activeElement.id !== focus) document.getElementById(focus)?.focus({ preventScroll: true });
    const now = before && document.getElementById(before.id);
    if (now) window.scrollBy(0, now.getBoundingClientRect().top - before.top);
  }

  function tell(live, words) {
    const place = live.querySelector("[data-live-said]");
    if (place && place.textContent !== words) place.textContent = words;
  }

  function onAnswer(event) {
    const { elt: live, xhr } = event.detail;
    if (!live.matches?.("[data-live]")) return;
    const loggedOut = [401, 403].includes(xhr.status) || (xhr.responseURL && new URL(xhr.responseURL).pathname !== location.pathname);
    if (loggedOut) tell(live, "Not updating: your session has ended. Log in again.");
    else if (xhr.status === 200) {
      live.dataset.etag = xhr.getResponseHeader("ETag") ?? "";
      reconcile(live, xhr.responseText);
      tell(live, "");
    } else if (xhr.status === 304) tell(live, "");
    else tell(live, `Not updated since ${live.dataset.since ?? "the page was opened"}: no answer from the server.`);
    if (xhr.status === 200 || xhr.status === 304) {
      live.dataset.since = new Date().toLocaleTimeString("en-GB", { hour: "2-digit", minute: "2-digit" });
    }
  }

  document.addEventListener("htmx:configRequest", (event) => {
    const { elt, headers } = event.detail;
    if (elt.matches?.("[data-live]") && elt.dataset.etag) headers["If-None-Match"] = elt.dataset.etag;
  });
  document.addEventListener("htmx:beforeRequest", (event) => {
    if (event.detail.elt.matches?.("[data-live]") && document.hidden) event.preventDefault();
  });
  document.addEventListener("htmx:afterRequest", onAnswer);
  document.querySelectorAll("[data-live]").forEach(remember);
})();
