(() => {
  "use strict";
  const sheet = document.getElementById("sheet");
  if (!sheet || sheet.dataset.live !== "yes") return;

  // One queue per sheet and person, kept on the device until the server has said that it holds each entry.
  const KEY = `foundleft.sheet.${sheet.dataset.sheet}.${sheet.dataset.person}`;
  const RETRY_MS = 5000;
  const state = document.getElementById("saving");
  const refusedBox = document.getElementById("refused");
  const device = `${deviceId()}.${Math.random().toString(36).slice(2, 10)}`;
  let sequence = 0;
  let failing = "";
  let calm = state.textContent;
  let signedOut = false;
  let timer = 0;
  let flushing = false;
  const typing = new Set();
  const handed = new Map();
  const waiting = new Map();

  function deviceId() {
    let id = localStorage.getItem("foundleft.device");
    if (!id) {
      id = newId();
      localStorage.setItem("foundleft.device", id);
    }
    return id;
  }

  function newId() {
    if (crypto.randomUUID) return crypto.randomUUID();
    // Plain http away from localhost has no randomUUID.
    const bytes = crypto.getRandomValues(new Uint8Array(16));
    bytes[6] = (bytes[6] & 0x0f) | 0x40;
    bytes[8] = (bytes[8] & 0x3f) | 0x80;
    const hex = [...bytes].map((byte) => byte.toString(16).padStart(2, "0")).join("");
    return hex.replace(/^(.{8})(.{4})(.{4})(.{4})(.{12})$/, "$1-$2-$3-$4-$5");
  }

  function queue() {
    try {
      return JSON.parse(localStorage.getItem(KEY)) || [];
    } catch {
      return [];
    }
  }

  function keep(entries) {
    if (entries.length) localStorage.setItem(KEY, JSON.stringify(entries));
    else localStorage.removeItem(KEY);
  }

  function say(kind, words) {
    state.className = kind ? `saving ${kind}` : "saving";
    if (state.textContent !== words) state.textContent = words;
  }

  function show(at) {
    const kept = queue().length;
    if (failing && (kept || signedOut)) say("failed", kept ? `${failing} ${kept} kept on this device` : failing);
    else if (kept) say("pending", "Saving…");
    else if (typing.size) say("pending", "Not saved yet");
    else {
      if (at) calm = `All saved ${at}`;
      say("", calm);
    }
  }

  function textOf(field) {
    if (field.type === "checkbox") return field.checked ? field.value : "";
    return field.value.trim();
  }

  function seenOf(field) {
    return field.form && field.form.elements[`seen.${field.name}`];
  }

  function entryOf(field) {
    const seen = seenOf(field);
    sequence += 1;
    const entry = {
      uuid: newId(),
      field: field.name,
      text: textOf(field),
      device,
      sequence,
      base: (seen && seen.value) || "",
      typed_at: new Date().toISOString(),
      schema_version: 1,
    };
    if (seen) seen.value = entry.uuid;
    keep([...queue(), entry]);
    handed.set(field.name, entry.text);
    return entry;
  }

  function told(answer) {
    const gone = new Set([...answer.saved, ...answer.refused.map((one) => one.id)]);
    keep(queue().filter((entry) => !gone.has(entry.uuid)));
    failing = "";
    signedOut = false;
    if (answer.refused.length) {
      refusedBox.hidden = false;
      for (const one of answer.refused) {
        const line = document.createElement("p");
        line.className = "errors";
        line.textContent = `Not taken: ${one.why}`;
        refusedBox.append(line);
      }
    }
    show(answer.at);
  }

  function failed(status) {
    signedOut = status === 401;
    if (signedOut) failing = "Signed out: sign in again in another window.";
    else if (status === 403) failing = "Not allowed any more: load the page again.";
    else if (status) failing = "The server did not take it.";
    else failing = "No connection.";
    show();
    clearTimeout(timer);
    timer = setTimeout(flush, RETRY_MS);
  }

  function token() {
    const match = document.cookie.match(/(?:^|; )csrftoken=([^;]+)/);
    return match ? decodeURIComponent(match[1]) : JSON.parse(document.body.getAttribute("hx-headers"))["X-CSRFToken"];
  }

  async function flush() {
    const entries = queue();
    if (flushing || !entries.length) return;
    flushing = true;
    try {
      const answer = await fetch(sheet.dataset.entries, {
        method: "POST",
        headers: { "Content-Type": "application/json", Accept: "application/json", "X-CSRFToken": token() },
        body: JSON.stringify({ entries }),
        keepalive: true,
      });
      if (answer.ok) told(await answer.json());
      else failed(answer.status);
    } catch {
      failed(0);
    } finally {
      flushing = false;
    }
  }

  // The entry is kept before htmx hears of the change: its request may have to wait, the entry may not.
  document.addEventListener(
    "change",
    (event) => {
      const field = event.target;
      if (!field.matches("[data-field]")) return;
      typing.delete(field.name);
      if (!waiting.has(field)) waiting.set(field, []);
      waiting.get(field).push(entryOf(field));
      show();
    },
    true,
  );

  document.addEventListener("input", (event) => {
    if (!event.target.matches("[data-field]")) return;
    typing.add(event.target.name);
    show();
  });

  // One reading in focus: the screen keyboard takes the lower half, so the reading goes to the middle of what is left.
  document.addEventListener("focusin", (event) => {
    const reading = event.target.closest("[data-reading]");
    if (reading && event.target.matches("[data-field]")) reading.scrollIntoView({ block: "center" });
  });

  // "change" does not come when a page is hidden with the field still open, nor after a button wrote into the field,
  // nor when what was typed is what stood there before; only in the last case is there nothing to save.
  function leaveField(field) {
    if (!field || !field.matches("[data-field]") || !typing.has(field.name)) return;
    const known = handed.has(field.name) ? handed.get(field.name) : (field.defaultValue || "").trim();
    if (textOf(field) !== known) return field.dispatchEvent(new Event("change", { bubbles: true }));
    typing.delete(field.name);
    show();
  }

  document.addEventListener("focusout", (event) => leaveField(event.target));

  document.addEventListener("visibilitychange", () => {
    if (document.visibilityState === "hidden") leaveField(document.activeElement);
    else flush();
  });
  window.addEventListener("pagehide", () => leaveField(document.activeElement));
  window.addEventListener("online", flush);

  document.addEventListener("htmx:configRequest", (event) => {
    const detail = event.detail;
    const elt = detail.elt;
    detail.headers["X-CSRFToken"] = token();
    if (elt.id === "news") detail.parameters.device = device;
    if (!elt.matches("[data-field]")) return;
    const entry = (waiting.get(elt) || []).shift();
    if (!entry) return event.preventDefault();
    for (const name of Object.keys(entry)) detail.parameters[name] = entry[name];
  });
  // Signed out: the page must stay, with what is typed in it.
  document.addEventListener("htmx:beforeOnLoad", (event) => {
    if (event.detail.xhr.status !== 401) return;
    event.preventDefault();
    failed(401);
  });
  document.addEventListener("entries-told", (event) => {
    told(event.detail);
    if (event.target.matches && event.target.matches("[data-reload]")) location.reload();
  });
  document.addEventListener("htmx:sendError", (event) => {
    if (event.detail.elt.matches("[data-field]")) failed(0);
  });
  document.addEventListener("htmx:responseError", (event) => {
    if (event.detail.elt.matches("[data-field]")) failed(event.detail.xhr.status);
  });

  // What still waits goes with the form, under the same numbers: sent twice, stored once.
  document.addEventListener("submit", (event) => {
    const form = event.target;
    if (!form.matches(".sheet-form")) return;
    let field = form.elements.queue;
    if (!field) {
      field = document.createElement("input");
      field.type = "hidden";
      field.name = "queue";
      form.append(field);
    }
    field.value = JSON.stringify({ entries: queue() });
  });

  // Enter on the pad goes to the next field instead of closing the run.
  document.addEventListener("keydown", (event) => {
    const field = event.target;
    if (event.key !== "Enter" || !field.matches("input[data-field]:not([type=checkbox], [type=radio])")) return;
    event.preventDefault();
    const all = [...field.form.querySelectorAll("input[data-field]:not([type=checkbox], [type=radio])")];
    const next = all[all.indexOf(field) + 1];
    if (next) next.focus();
    else field.blur();
  });

  // What an earlier load of this page could not hand over is shown again and sent first.
  function takeUp() {
    for (const entry of queue()) {
      const field = document.querySelector(`[data-field][name="${CSS.escape(entry.field)}"]`);
      if (!field) continue;
      if (field.type === "checkbox") field.checked = entry.text === field.value;
      else if (field.type !== "radio") field.value = entry.text;
      handed.set(entry.field, entry.text);
      const seen = seenOf(field);
      if (seen) seen.value = entry.uuid;
    }
    show();
    flush();
  }

  function announce() {
    const key = `${KEY}.present`;
    const last = Number(sessionStorage.getItem(key) || 0);
    if (Date.now() - last < 600000) return;
    sessionStorage.setItem(key, String(Date.now()));
    sequence += 1;
    const entry = { uuid: newId(), field: "present", text: "", device, sequence, base: "" };
    keep([...queue(), { ...entry, typed_at: new Date().toISOString(), schema_version: 1 }]);
  }

  // An answer that never came leaves its entry in the queue; nothing stays there for long.
  setInterval(() => {
    const oldest = queue()[0];
    if (oldest && Date.now() - Date.parse(oldest.typed_at) > 2 * RETRY_MS) flush();
  }, RETRY_MS);

  announce();
  takeUp();
})();
