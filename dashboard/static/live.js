// Renews the page of the present. If the source is lost, the page says so by itself within seconds.
"use strict";
(() => {
  const EVERY_MS = 2000;
  const PATIENCE_MS = 3000;
  const live = document.getElementById("live");
  const lost = document.getElementById("lost");
  const spoken = document.getElementById("spoken");
  let lastGood = Date.now();
  let shown = Date.now();

  const clock = (ms) => new Date(ms).toISOString().slice(11, 19) + " UTC";

  const duration = (seconds) => {
    const s = Math.max(0, Math.floor(seconds));
    if (s < 120) return s + " s";
    if (s < 7200) return Math.floor(s / 60) + " min";
    if (s < 172800) return Math.floor(s / 3600) + " h " + Math.floor((s % 3600) / 60) + " min";
    return Math.floor(s / 86400) + " days";
  };

  const ages = () => {
    for (const age of document.querySelectorAll("[data-age]")) {
      age.textContent = duration(Number(age.dataset.age) + (Date.now() - shown) / 1000);
    }
  };

  // The reader's own time beside UTC, where it is another.
  const local = () => {
    for (const one of document.querySelectorAll("[data-utc]")) {
      const when = new Date(one.dataset.utc);
      if (when.getTimezoneOffset() !== 0) one.textContent = " (" + when.toLocaleTimeString() + " where you are)";
    }
  };

  // A choice that a person is making is not taken away while they make it.
  const busy = (part) => part.contains(document.activeElement) && document.activeElement.matches("select");

  const renew = (html) => {
    const fresh = new DOMParser().parseFromString(html, "text/html");
    const parts = [...fresh.querySelectorAll("[data-part]")];
    if (!parts.some((part) => part.id === "head")) throw new Error("not the monitor's answer");
    for (const part of parts) {
      const old = document.getElementById(part.id);
      for (const fold of part.querySelectorAll("details[id]")) {
        fold.open = document.getElementById(fold.id)?.open ?? false;
      }
      if (!old || old.outerHTML === part.outerHTML || busy(old)) continue;
      const focus = old.contains(document.activeElement) ? document.activeElement.id : "";
      old.replaceWith(document.adoptNode(part));
      if (focus) document.getElementById(focus)?.focus({ preventScroll: true });
    }
    shown = Date.now();
    local();
    const text = document.getElementById("head").dataset.spoken;
    if (spoken.textContent !== text) spoken.textContent = text;
  };

  const say = (trouble) => {
    lost.hidden = !trouble;
    live.classList.toggle("old", Boolean(trouble));
    if (!trouble) return;
    const text = "This page has lost its source since " + clock(lastGood) +
      ". What stands below is old; this says nothing about the field.";
    if (lost.textContent !== text) lost.textContent = text;
  };

  const round = async () => {
    try {
      const answer = await fetch(live.dataset.partUrl, {
        cache: "no-store", signal: AbortSignal.timeout(PATIENCE_MS),
      });
      if (!answer.ok) throw new Error(String(answer.status));
      renew(await answer.text());
      lastGood = Date.now();
      say(false);
    } catch (error) {
      say(true);
    }
    setTimeout(round, EVERY_MS);
  };

  local();

  // After sleep of the machine or the tab the old figures must not pass for new ones.
  setInterval(() => {
    ages();
    if (Date.now() - lastGood > EVERY_MS + PATIENCE_MS + 1000) say(true);
  }, 1000);
  setTimeout(round, EVERY_MS);
})();
