// Forms that people type into: keeps what is typed on the server, survives a lost connection and an ended session,
// sends each form once, and moves on with Enter. Nothing about a patient is kept in the browser's storage.
"use strict";

(() => {
  const PAUSE = 1200; // ms without a key before what is typed is kept
  const RETRY = 5000; // ms between tries while there is no connection
  const PATIENCE = 15000; // ms for one answer
  const state = { changed: false, kept: true, busy: false, waiting: false, ended: false, resend: null, timer: 0 };

  const form = () => document.querySelector("[data-typed-form]");
  const byId = (id) => document.getElementById(id);

  function say(words, kind = "") {
    const line = byId("form-status");
    if (!line) return;
    if (line.textContent !== words) line.textContent = words;
    line.dataset.kind = kind;
  }

  function help(...parts) {
    const box = byId("form-help");
    if (!box) return;
    box.replaceChildren(...parts);
    box.hidden = parts.length === 0;
  }

  // --- talking to the server ---

  class Ended extends Error {}

  async function ask(address, body) {
    const options = { headers: { "X-Worksheet-Form": "1" }, credentials: "same-origin", cache: "no-store" };
    if (body) Object.assign(options, { method: "POST", body });
    return fetch(address, { ...options, signal: AbortSignal.timeout(PATIENCE) });
  }

  // A fresh form token, or Ended when nobody is logged in (the answer is then the login page, or a refusal).
  async function renew() {
    const answer = await ask(form().dataset.token);
    const isData = (answer.headers.get("Content-Type") ?? "").includes("json");
    if (answer.status >= 500) throw new TypeError("server error");
    if (answer.redirected || !answer.ok || !isData) throw new Ended();
    const { token } = await answer.json();
    document.querySelectorAll("input[name=csrfmiddlewaretoken]").forEach((input) => { input.value = token; });
  }

  async function post(address, button) {
    const body = () => {
      const data = new FormData(form());
      if (button?.name) data.append(button.name, button.value);
      return data;
    };
    let answer = await ask(address, body());
    if (answer.redirected || answer.status === 401 || answer.status === 403) {
      await renew();
      answer = await ask(address, body());
      if (answer.redirected) throw new Ended();
    }
    return answer;
  }

  // --- what is said when it does not work ---

  function lost() {
    if (!state.waiting) setTimeout(again, RETRY);
    state.waiting = true;
    const what = state.resend ? "Nothing was saved yet." : "What you typed is not kept on the server yet.";
    say(`No connection. ${what} It stays in this page and is sent when the connection is back. Do not close the page.`, "bad");
    help();
  }

  function ended() {
    state.ended = true;
    state.resend = null;
    const link = Object.assign(document.createElement("a"), { textContent: "Log in (opens a new tab)", target: "_blank", rel: "noopener" });
    link.href = `${form().dataset.login}?next=${encodeURIComponent(location.pathname)}`;
    const retry = Object.assign(document.createElement("button"), { type: "button", textContent: "Go on" });
    retry.className = "button-quiet";
    retry.addEventListener("click", resume);
    say("Your session has ended. Nothing is lost: what you typed is still here. Log in, come back to this page and save.", "bad");
    help(link, " ", retry);
  }

  function failed(problem) {
    if (problem instanceof Ended) ended();
    else lost();
  }

  async function again() {
    if (!state.waiting) return;
    state.waiting = false;
    if (state.resend) await save(state.resend.button);
    else await keep();
  }

  async function resume() {
    if (!state.ended || !form()) return;
    try {
      await renew();
    } catch (problem) {
      if (!(problem instanceof Ended)) failed(problem);
      return;
    }
    state.ended = false;
    help();
    say("You are logged in again. Nothing was lost; press Save.", "good");
    if (form().dataset.draft) await keep();
  }

  // --- keeping what is typed ---

  async function keep() {
    const address = form()?.dataset.draft;
    if (!address || state.busy || state.ended || state.kept) return;
    state.kept = true; // a key pressed meanwhile sets it back
    try {
      const answer = await post(address);
      const { saved, problem } = await answer.json();
      if (saved) say(`Kept on the server at ${saved}, not recorded yet.`, "good");
      else say(problem ?? "What you typed could not be kept on the server.", "bad");
      help();
    } catch (problem) {
      state.kept = false;
      failed(problem);
    }
  }

  function typed(event) {
    const input = event.target;
    if (!input.form?.matches("[data-typed-form]") || input.id === "pasted") return;
    state.changed = true;
    state.kept = false;
    state.resend = null;
    if (!state.ended && !state.waiting) say("Not saved.");
    clearTimeout(state.timer);
    state.timer = setTimeout(keep, PAUSE);
    if (input.name !== "confirm") input.form.dispatchEvent(new CustomEvent("typed"));
  }

  // --- saving ---

  async function save(button) {
    if (state.busy) return;
    state.busy = true;
    state.resend = { button };
    clearTimeout(state.timer);
    say("Saving …");
    help();
    try {
      await answered(await post(form().getAttribute("action"), button));
    } catch (problem) {
      failed(problem);
    } finally {
      state.busy = false;
    }
  }

  async function answered(answer) {
    state.resend = null;
    const onward = answer.headers.get("X-Worksheet-Go");
    if (onward) {
      state.changed = false;
      state.kept = true;
      location.assign(onward);
    } else if (answer.headers.get("X-Worksheet-Form")) {
      show(await answer.text());
    } else if (answer.status === 403) {
      say("The server refused: you may not record here. What you typed is still in this page.", "bad");
    } else {
      say(`The server could not save this (error ${answer.status}). What you typed is still here; save again in a moment.`, "bad");
    }
  }

  function show(html) {
    const fresh = new DOMParser().parseFromString(html, "text/html").querySelector("[data-typed-page]");
    const here = document.querySelector("[data-typed-page]");
    here.replaceWith(document.adoptNode(fresh));
    window.htmx?.process(fresh);
    (byId("summary") ?? byId("filled") ?? byId("clock"))?.focus();
    state.kept = false;
    keep();
  }

  // --- keys ---

  function stops() {
    const all = form().querySelectorAll("input:not([type=hidden],[type=checkbox],.line-date), select.line-wide, textarea.line-wide");
    const seen = new Set();
    return [...all].filter((input) => {
      if (!input.checkVisibility()) return false;
      if (input.type !== "radio") return true;
      const group = [...form().querySelectorAll(`input[name="${input.name}"]`)];
      if (seen.has(input.name)) return false;
      const chosen = group.find((radio) => radio.checked);
      if (chosen && chosen !== input) return false;
      seen.add(input.name);
      return true;
    });
  }

  function next(input) {
    const list = stops();
    const after = list.find((stop) => stop.name !== input.name && input.compareDocumentPosition(stop) & Node.DOCUMENT_POSITION_FOLLOWING);
    const target = after ?? form().querySelector("button[value=save]");
    target?.focus();
    if (target?.matches("input.line-value, input.line-wide")) target.select();
  }

  function keys(event) {
    const input = event.target;
    if (event.key !== "Enter" || event.isComposing || !input.form?.matches("[data-typed-form]")) return;
    if (event.ctrlKey || event.metaKey) {
      event.preventDefault();
      save(form().querySelector("button[value=save]"));
    } else if (input.matches("input")) {
      event.preventDefault();
      if (input.type !== "checkbox") next(input);
    }
  }

  function pasted(event) {
    const text = event.clipboardData?.getData("text/plain") ?? "";
    const box = byId("pasted");
    if (!box || event.target === box || !event.target.matches("input.line-value, input.line-wide") || !text.trim().includes("\t")) return;
    event.preventDefault();
    box.value = text;
    save(form().querySelector("button[value=paste]"));
  }

  // --- the live part ---

  function settled(event) {
    if (event.target.id !== "entry-live") return;
    document.querySelectorAll(".said[id$='-said']").forEach((box) => {
      const input = byId(box.id.replace(/-said$/, ""));
      if (!input) return;
      if (box.querySelector(".said-impossible")) input.setAttribute("aria-invalid", "true");
      else input.removeAttribute("aria-invalid");
    });
    const words = event.target.querySelector("[data-said]")?.textContent ?? "";
    const line = byId("follows-said");
    if (line && line.textContent !== words) line.textContent = words;
  }

  // Only an answer of the form itself may replace a part of it: never a login page or an error page.
  function guard(event) {
    if (event.detail.target?.id !== "entry-live") return;
    if (event.detail.xhr.getResponseHeader("X-Worksheet-Form") !== "live") event.detail.shouldSwap = false;
  }

  function showKind() {
    const kind = form()?.querySelector("input[name=kind]:checked")?.value;
    form()?.querySelectorAll("[data-for-kind]").forEach((part) => { part.hidden = !part.dataset.forKind.split(" ").includes(kind ?? ""); });
  }

  document.addEventListener("input", typed);
  document.addEventListener("change", (event) => {
    if (event.target.name === "kind") showKind();
  });
  document.addEventListener("keydown", keys);
  document.addEventListener("paste", pasted);
  document.addEventListener("htmx:afterSettle", settled);
  document.addEventListener("htmx:beforeSwap", guard);
  document.addEventListener("submit", (event) => {
    if (!event.target.matches("[data-typed-form]")) return;
    event.preventDefault();
    save(event.submitter);
  });
  window.addEventListener("online", again);
  window.addEventListener("focus", resume);
  document.addEventListener("visibilitychange", () => { if (document.visibilityState === "visible") resume(); });
  window.addEventListener("pagehide", () => {
    const address = form()?.dataset.draft;
    if (address && !state.kept) navigator.sendBeacon(address, new FormData(form()));
  });
  window.addEventListener("beforeunload", (event) => {
    const unkept = form()?.dataset.draft ? !state.kept : state.changed;
    if (unkept && (state.waiting || state.ended || !form()?.dataset.draft)) event.preventDefault();
  });
  showKind();
})();
