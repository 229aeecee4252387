(() => {
  "use strict";
  const sheet = document.getElementById("sheet");
  if (!sheet) return;

  // One queue per sheet and person, kept on the device until the server has said that it holds each entry.
  // What the server did not take is kept beside it until somebody has read it.
  const KEY = `foundleft.sheet.${sheet.dataset.sheet}.${sheet.dataset.person}`;
  const waitingOnes = shelf(KEY);
  const refusedOnes = shelf(`${KEY}.refused`);
  const KEEPS_NOTHING = "This tablet keeps nothing: stay on this page until all is saved.";
  const RETRY_MS = 5000;
  // Browsers send no more than 64 KiB for a page that is being hidden.
  const PART_BYTES = 48000;
  const live = sheet.dataset.live === "yes";
  const state = document.getElementById("saving");
  const refusedBox = document.getElementById("refused");
  const device = `${deviceId()}.${Math.random().toString(36).slice(2, 10)}`;
  let sequence = 0;
  let failing = "";
  let calm = live ? state.textContent : "";
  let signedOut = false;
  let timer = 0;
  let flushing = false;
  let submitting = false;
  const typing = new Set();
  const handed = new Map();
  const waiting = new Map();

  // A sheet that has ended takes nothing more: what this device had not handed over by then is refused, and so shown.
  if (!live) {
    showRefused();
    flush();
    return;
  }

  // A list on the device; where the device is full or keeps nothing, it lives in this page alone.
  function shelf(key) {
    let here = null;
    let keeps = true;
    return {
      get keeps() {
        return keeps;
      },
      read() {
        if (here) return here;
        try {
          return JSON.parse(localStorage.getItem(key)) || [];
        } catch {
          return [];
        }
      },
      write(list) {
        try {
          if (list.length) {
            localStorage.setItem(key, JSON.stringify(list));
            keeps = true;
          } else localStorage.removeItem(key);
          here = null;
        } catch {
          here = list;
          keeps = false;
        }
      },
    };
  }

  function queue() {
    return waitingOnes.read();
  }

  function keep(entries) {
    waitingOnes.write(entries);
  }

  function deviceId() {
    const name = "foundleft.device";
    try {
      const known = localStorage.getItem(name);
      if (known) return known;
      const id = newId();
      localStorage.setItem(name, id);
      return id;
    } catch {
      return newId();
    }
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

  function say(kind, words) {
    state.className = kind ? `saving ${kind}` : "saving";
    if (state.textContent !== words) state.textContent = words;
  }

  function show(at) {
    if (!live) return;
    const kept = queue().length;
    const keeps = waitingOnes.keeps && refusedOnes.keeps;
    if (failing && (kept || signedOut)) {
      const where = keeps ? "kept on this device" : `on this page alone. ${KEEPS_NOTHING}`;
      say("failed", kept ? `${failing} ${kept} ${where}` : failing);
    } else if (kept) say("pending", keeps ? "Saving…" : `Saving… ${KEEPS_NOTHING}`);
    else if (typing.size) say("pending", keeps ? "Not saved yet" : `Not saved yet. ${KEEPS_NOTHING}`);
    else {
      if (at) calm = `All saved ${at}`;
      say(keeps ? "" : "pending", keeps ? calm : `${calm}. ${KEEPS_NOTHING}`);
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
    const before = queue();
    const refused = answer.refused.map((one) => ({ ...one, entry: before.find((entry) => entry.uuid === one.id) }));
    // What was typed over an entry that was not taken stands on what that one was typed over.
    const stoodOn = new Map(refused.filter((one) => one.entry).map((one) => [one.id, one.entry.base]));
    keep(
      before
        .filter((entry) => !gone.has(entry.uuid))
        .map((entry) => (stoodOn.has(entry.base) ? { ...entry, base: stoodOn.get(entry.base) } : entry)),
    );
    for (const seen of document.querySelectorAll('input[name^="seen."]')) {
      while (stoodOn.has(seen.value)) seen.value = stoodOn.get(seen.value);
    }
    failing = "";
    signedOut = false;
    const fresh = refused.filter((one) => one.entry && one.entry.field !== "present");
    if (fresh.length) {
      for (const { entry } of fresh) if (handed.get(entry.field) === entry.text) handed.delete(entry.field);
      const lines = fresh.map((one) => ({ id: one.id, what: one.what, why: one.why, text: one.entry.text }));
      refusedOnes.write([...refusedOnes.read(), ...lines]);
    }
    showRefused();
    show(answer.at);
  }

  function showRefused() {
    const list = refusedBox.querySelector("ul");
    list.replaceChildren(...refusedOnes.read().map(refusedLine));
    refusedBox.hidden = !list.children.length;
  }

  function refusedLine(one) {
    const line = document.createElement("li");
    const why = document.createElement("p");
    why.className = "errors";
    why.textContent = one.why;
    const text = document.createElement("p");
    text.className = "typed";
    text.textContent = one.text || "(emptied)";
    const button = document.createElement("button");
    button.type = "button";
    button.textContent = "Take it away";
    button.setAttribute("aria-label", `Take away what was typed at ${one.what}`);
    button.addEventListener("click", () => {
      refusedOnes.write(refusedOnes.read().filter((other) => other.id !== one.id));
      showRefused();
    });
    line.append(why, text, button);
    return line;
  }

  function failed(status) {
    signedOut = status === 401;
    if (signedOut) failing = "Signed out: sign in again in another window.";
    else if (status === 403) failing = "Not allowed any more: load the page again.";
    else if (status) failing = "The server did not take it.";
    else failing = "No connection.";
    show();
    if (!live) return;
    clearTimeout(timer);
    timer = setTimeout(flush, RETRY_MS);
  }

  function token() {
    const match = document.cookie.match(/(?:^|; )csrftoken=([^;]+)/);
    return match ? decodeURIComponent(match[1]) : JSON.parse(document.body.getAttribute("hx-headers"))["X-CSRFToken"];
  }

  function firstPart(entries) {
    let bytes = 0;
    const size = (entry) => new TextEncoder().encode(JSON.stringify(entry)).length + 1;
    const end = entries.findIndex((entry) => (bytes += size(entry)) > PART_BYTES);
    return end < 0 ? entries : entries.slice(0, Math.max(1, end));
  }

  function post(entries, keepalive) {
    return fetch(sheet.dataset.entries, {
      method: "POST",
      headers: { "Content-Type": "application/json", Accept: "application/json", "X-CSRFToken": token() },
      body: JSON.stringify({ entries }),
      keepalive,
    });
  }

  async function flush() {
    if (flushing || !queue().length) return;
    flushing = true;
    try {
      for (let left = queue().length; left; left = queue().length) {
        const answer = await post(firstPart(queue()), false);
        if (!answer.ok) return failed(answer.status);
        told(await answer.json());
        if (queue().length >= left) break;
      }
    } catch {
      failed(0);
    } finally {
      flushing = false;
    }
  }

  // A page that is being hidden may never run again: what it can still send, the browser sends for it.
  function flushOnLeaving() {
    const entries = queue();
    if (!entries.length || submitting) return;
    post(firstPart(entries), true)
      .then((answer) => (answer.ok ? answer.json().then(told) : failed(answer.status)))
      .catch(() => failed(0));
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
    if (document.visibilityState !== "hidden") return flush();
    leaveField(document.activeElement);
    flushOnLeaving();
  });
  window.addEventListener("pagehide", () => leaveField(document.activeElement));
  window.addEventListener("online", flush);
  window.addEventListener("pageshow", () => (submitting = false));
  window.addEventListener("beforeunload", (event) => {
    if (!waitingOnes.keeps && queue().length && !submitting) event.preventDefault();
  });

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
    submitting = true;
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
      const fields = [...document.querySelectorAll(`[data-field][name="${CSS.escape(entry.field)}"]`)];
      if (!fields.length) continue;
      for (const field of fields) {
        if (field.type === "checkbox" || field.type === "radio") field.checked = entry.text === field.value;
        else field.value = entry.text;
      }
      handed.set(entry.field, entry.text);
      const seen = seenOf(fields[0]);
      if (seen) seen.value = entry.uuid;
    }
    showRefused();
    show();
    flush();
  }

  function announce() {
    const key = `${KEY}.present`;
    try {
      if (Date.now() - Number(sessionStorage.getItem(key) || 0) < 600000) return;
      sessionStorage.setItem(key, String(Date.now()));
    } catch {
      // Kept nowhere: announced with each load.
    }
    sequence += 1;
    const entry = { uuid: newId(), field: "present", text: "", device, sequence, base: "" };
    keep([...queue(), { ...entry, typed_at: new Date().toISOString(), schema_version: 1 }]);
  }

  // An answer that never came leaves its entry in the queue; nothing stays there for long.
  setInterval(() => {
    const oldest = queue()[0];
    if (oldest && Date.now() - Date.parse(oldest.typed_at) > 2 * RETRY_MS) flush();
  }, RETRY_MS);

  // The answer to a step that was not gone on with stands at the address of the step; loaded again, it is the sheet.
  if (location.pathname !== sheet.dataset.page) history.replaceState(null, "", sheet.dataset.page);
  announce();
  takeUp();
})();
