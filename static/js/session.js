// Warns before a login ends, covers the page when it has ended, and keeps what was typed. Asking never extends the login.
"use strict";

(() => {
  const box = document.getElementById("session");
  const main = document.getElementById("content");
  if (!box || !main) return;
  const WARN = 120; // [s] long enough to react (WCAG 2.2.1)
  let ends = Date.now() + 1000 * Number(box.dataset.secondsLeft);
  let state = "";

  const left = () => Math.round((ends - Date.now()) / 1000);

  function show(wanted) {
    if (wanted === state) return;
    state = wanted;
    main.hidden = wanted === "ended";
    box.querySelectorAll("[data-when]").forEach((part) => { part.hidden = part.dataset.when !== wanted; });
    const title = box.querySelector("h2");
    if (wanted) title.textContent = title.dataset[wanted];
    if (wanted && !box.open) box.showModal();
    if (!wanted && box.open) box.close();
    if (wanted) (box.querySelector("form:not([hidden]) button") ?? title).focus();
  }

  function count() {
    const seconds = Math.max(left(), 0);
    const words = seconds > 90 ? "two minutes" : seconds > 50 ? "one minute" : "less than a minute";
    const place = box.querySelector("[data-session-count]");
    if (place.textContent !== words) place.textContent = words;
  }

  async function ask(options) {
    try {
      const answer = await fetch(box.dataset.address, { headers: { Accept: "application/json" }, ...options });
      if (answer.redirected || !answer.ok) return { seconds: 0, name: "" };
      return await answer.json();
    } catch {
      return null; // no connection: the clock of this page goes on
    }
  }

  async function look(options) {
    const told = await ask(options);
    if (!told) return;
    if (told.name && told.name !== box.dataset.name) location.reload(); // somebody else logged in meanwhile
    ends = Date.now() + 1000 * told.seconds;
  }

  async function tick() {
    if (left() <= WARN && state === "") await look(); // another tab may have extended it
    if (left() <= 0 && state === "ending") await look();
    show(left() <= 0 ? "ended" : left() <= WARN ? "ending" : "");
    count();
  }

  box.addEventListener("cancel", (event) => { if (state === "ended") event.preventDefault(); });
  box.addEventListener("submit", async (event) => {
    event.preventDefault();
    await look({ method: "POST", body: new FormData(event.target) });
    tick();
  });
  box.querySelector("[data-session-again]").addEventListener("click", async () => {
    await look();
    tick();
  });
  setInterval(tick, 5000);
})();
