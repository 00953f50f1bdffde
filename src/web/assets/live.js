// Keeps a page current: when the server says that something changed, the page is asked for again and
// only what differs is swapped, so that nothing blinks and scroll, focus, open details and half-filled
// fields stay. Without this script every page is whole; it is merely as old as when it was loaded.
"use strict";
(() => {
  const main = () => document.getElementById("main");
  const say = (text) => { const at = document.getElementById("live-state"); if (at && at.textContent !== text) at.textContent = text; };
  // What the reader has changed and the server does not know.
  const kept = new Set(["open", "value"]);
  const readers = (node, name) => (name === "open" && node.localName === "details")
    || (name === "value" && node.localName === "input" && node.type !== "hidden");

  // What the time band's script has added.
  const own = new Set(["tabindex", "role", "aria-label", "data-awake"]);
  const attributes = (from, to) => {
    for (const { name } of [...from.attributes])
      if (!(from.id === "probe" && own.has(name)) && !to.hasAttribute(name) && !(kept.has(name) && readers(from, name))) from.removeAttribute(name);
    for (const { name, value } of to.attributes)
      if (from.getAttribute(name) !== value && !(kept.has(name) && readers(from, name))) from.setAttribute(name, value);
  };
  const alike = (a, b) => a.nodeType === b.nodeType && a.nodeName === b.nodeName && (a.id || "") === (b.id || "");
  const swap = (from, to) => {
    if (from.nodeType !== Node.ELEMENT_NODE) { if (from.nodeValue !== to.nodeValue) from.nodeValue = to.nodeValue; return; }
    if (from.id === "live-state" || from.id === "reading" || from.isEqualNode(to)) return;
    attributes(from, to);
    if (from.localName === "textarea") return;
    let old = from.firstChild;
    for (const next of [...to.childNodes]) {
      // Something with this id may stand further on: what is in between has gone.
      if (old && next.id && !alike(old, next)) {
        let found = old;
        while (found && !alike(found, next)) found = found.nextSibling;
        while (found && old !== found) { const gone = old; old = old.nextSibling; gone.remove(); }
      }
      if (old && alike(old, next)) { swap(old, next); old = old.nextSibling; }
      else from.insertBefore(document.importNode(next, true), old);
    }
    while (old) { const gone = old; old = old.nextSibling; gone.remove(); }
  };

  let asking = false, again = false, version = "";
  const refresh = async () => {
    if (asking) { again = true; return; }
    asking = true;
    try {
      const answer = await fetch(location.pathname + location.search, { headers: { Accept: "text/html", ...(version && { "Evenrow-At-Least": version }) }, redirect: "error" });
      if (!answer.ok) throw new Error(answer.statusText);
      const page = new DOMParser().parseFromString(await answer.text(), "text/html");
      const next = page.getElementById("main");
      if (next) { swap(main(), next); document.title = page.title; say(""); }
    } catch { say("Not live: the last answer failed, figures are from then."); }
    asking = false;
    if (again) { again = false; refresh(); }
  };

  let stream = null;
  const listen = () => {
    if (stream || document.hidden) return;
    stream = new EventSource(main().dataset.live);
    let lost = false;
    stream.addEventListener("changed", (event) => { version = event.data; refresh(); });
    stream.addEventListener("open", () => { if (lost) { version = ""; refresh(); } lost = false; say(""); });
    stream.addEventListener("error", () => {
      lost = true;
      say("Not live: connection lost, figures are from then.");
      // A refused stream is not tried again by the browser.
      if (stream && stream.readyState === EventSource.CLOSED) { stream = null; setTimeout(listen, 5000); }
    });
  };
  const rest = () => { if (stream) stream.close(); stream = null; };
  document.addEventListener("visibilitychange", () => { if (document.hidden) rest(); else { listen(); refresh(); } });
  addEventListener("pagehide", rest);
  addEventListener("pageshow", (event) => { if (event.persisted) { listen(); refresh(); } });
  listen();
})();
