// What every page does: send forms in the background, keep what cannot be sent, stay fresh without
// losing what is typed. Without this script the forms are ordinary ones and the page stands still.
import { flush, forget, isKept, kept, newKey, send, serverSays, whenKeptChanges } from "./send.js";

const FRESH_MS = 15000;
const RETRY_MS = 5000;
const BY = "dripleg.by";
const TOLD_MS = 600000; // so long an answer stays on the page
const net = document.getElementById("net");
let trouble = ""; // why the page is not fresh

// ---- forms ----

// The JSON of a form: a field's name is the body's; `data-number` makes a number of it; what is
// empty is left out, and so is what only goes `data-with` a field that is.
function bodyOf(form, button) {
  const body = {};
  const fields = new FormData(form, button);
  for (const [name, text] of fields) {
    const said = String(text).trim();
    const field = form.elements[name];
    const needs = field?.dataset?.with;
    if (["token", "key"].includes(name) || said === "") continue;
    if (needs && !String(fields.get(needs) ?? "").trim()) continue;
    body[name] = field?.dataset?.number === undefined ? said : numberIn(field, said);
  }
  if (form.dataset.keyed !== undefined) body.key = newKey();
  return body;
}

class NotANumber extends Error {}

function numberIn(field, said) {
  const figure = said.replace(",", ".");
  const wrong = !/^[+-]?(\d+\.?\d*|\.\d+)$/.test(figure);
  field.setAttribute("aria-invalid", String(wrong));
  if (wrong) {
    field.focus();
    throw new NotANumber(`"${said}" is not a number. Write it like ${field.dataset.number || "12.5"}.`);
  }
  return Number(figure);
}

// A form's answer goes to its own output, or to the one that it names (`data-says`).
function outputOf(form) {
  return form.querySelector("output") ?? document.getElementById(form.dataset.says);
}

function say(form, text, wrong = false) {
  const output = outputOf(form);
  if (!output) return;
  output.classList.toggle("wrong", wrong);
  output.textContent = text;
  output.dataset.at = String(Date.now());
}

document.addEventListener("submit", async (event) => {
  const form = event.target;
  if (form.dataset.send === undefined) return;
  event.preventDefault();
  if (form.dataset.busy !== undefined) return; // a second tap while the first is on its way
  const button = event.submitter;
  let body;
  try {
    body = bodyOf(form, button);
  } catch (error) {
    if (!(error instanceof NotANumber)) throw error;
    say(form, error.message, true);
    return;
  }
  if (body.by) rememberBy(body.by);
  if (isKept(form.dataset.send, body)) {
    say(form, "It is kept on this phone already. It is sent by itself, once.", true);
    return;
  }
  form.dataset.busy = "";
  say(form, "Sending ...");
  const outcome = await send(
    form.dataset.send, body, labelOf(form, button), form.dataset.dated !== undefined,
  );
  delete form.dataset.busy;
  told(form, outcome);
  if (outcome.taken) {
    form.reset();
    fillBy(document);
    const said = outputOf(form)?.id;
    await refresh(form);
    document.getElementById(said)?.scrollIntoView({ block: "nearest" });
  }
});

function told(form, outcome) {
  if (outcome.taken) say(form, outcome.answer.said || form.dataset.done || "Recorded.");
  else if (outcome.refused) {
    say(form, `Not recorded. ${outcome.refused[0].toUpperCase()}${outcome.refused.slice(1)}`, true);
    form.querySelector("[data-number]")?.setAttribute("aria-invalid", "true");
  } else say(form, `Kept on this phone, as ${outcome.kept}. It is sent by itself, once.`, true);
}

function labelOf(form, button) {
  return [form.dataset.label, button?.textContent].filter(Boolean).join(": ").trim();
}

// ---- initials ----

function rememberBy(by) {
  try {
    localStorage.setItem(BY, by);
  } catch {
    // then they are typed each time
  }
}

function fillBy(root) {
  let by = null;
  try {
    by = localStorage.getItem(BY);
  } catch {
    return;
  }
  if (!by) return;
  for (const field of root.querySelectorAll('input[name="by"]')) {
    if (!field.value) field.value = by;
  }
}

document.addEventListener("change", (event) => {
  const field = event.target;
  if (field.name !== "by" || !field.value.trim()) return;
  rememberBy(field.value.trim());
  for (const other of document.querySelectorAll('input[name="by"]')) other.value = field.value.trim();
});

document.addEventListener("input", (event) => event.target.removeAttribute?.("aria-invalid"));

// ---- staying fresh ----

// `sent` was just sent: that somebody is still in one of its fields keeps nothing from being renewed.
async function refresh(sent = null) {
  let text;
  try {
    const response = await fetch(location.href, { signal: AbortSignal.timeout?.(8000) });
    if (response.status >= 500) throw new Error(String(response.status));
    if (response.status === 401 || response.status === 403) trouble = "This phone may no longer read.";
    if (!response.ok) return; // what was asked for cannot be: the page says so already
    text = await response.text();
  } catch {
    trouble = "No connection.";
    return;
  } finally {
    tellNet();
  }
  trouble = "";
  const page = new DOMParser().parseFromString(text, "text/html");
  for (const old of document.querySelectorAll("[data-fresh]")) {
    const made = page.getElementById(old.id);
    if (!made || isTyping(old, sent) || asSent(made) === shown.get(old.id)) continue;
    shown.set(old.id, asSent(made));
    renew(old, made);
  }
  readClock();
  tellNet();
}

// What was shown last, so that what has not changed is not touched (nor read aloud again).
const shown = new Map();

function asSent(part) {
  return part.outerHTML.replace(/value="form-[0-9a-f]+"/g, "");
}

function isTyping(part, sent) {
  const field = document.activeElement;
  if (!part.contains(field) || (sent && field.form === sent)) return false;
  return field.matches("input:not([type=radio]), select, textarea");
}

// What somebody typed, chose, opened or is told stays, by the ids of the elements.
function renew(old, made) {
  const focused = old.contains(document.activeElement) ? document.activeElement.id : "";
  for (const was of old.querySelectorAll("[id]")) {
    const now = made.querySelector(`#${CSS.escape(was.id)}`);
    if (!now) continue;
    if (was.matches("output") && was.textContent && !now.textContent) {
      if (Date.now() - Number(was.dataset.at ?? 0) > TOLD_MS) continue;
      now.textContent = was.textContent;
      now.className = was.className;
      now.dataset.at = was.dataset.at;
    } else if (was.matches("details")) now.open = was.open || now.open;
    else if (was.matches("[type=radio], [type=checkbox]")) now.checked = was.checked;
    else if (was.matches("select")) now.value = was.value;
    else if (was.matches("input:not([type=hidden])") && was.value !== was.defaultValue) {
      now.value = was.value;
    }
  }
  old.replaceWith(document.adoptNode(made));
  fillBy(made);
  if (focused) document.getElementById(focused)?.focus();
}

function readClock() {
  const made = document.getElementById("made");
  if (made) serverSays(Number(made.dataset.now));
}

// A figure that was typed into the address grows old: a phone opens the same address days later.
function dateTyped() {
  const said = new URLSearchParams(location.search);
  if (!said.get("surface") || said.has("at")) return;
  said.set("at", document.getElementById("made").dataset.now);
  history.replaceState(null, "", `?${said}${location.hash}`);
}

// ---- the network ----

function tellNet() {
  const waiting = kept().filter((tap) => tap.tries > 0);
  const parts = [];
  if (trouble) {
    const then = document.getElementById("made").dataset.time;
    parts.push(paragraph(`${trouble} The page shows what was so at ${then}.`));
  }
  for (const tap of waiting) {
    const line = paragraph(`Kept on this phone, to be sent once: ${tap.label || tap.path}. ${tap.why || ""} `);
    const button = document.createElement("button");
    button.type = "button";
    button.textContent = "Do not send it";
    button.addEventListener("click", () => forget(tap.id));
    line.append(button);
    parts.push(line);
  }
  const same = parts.map((part) => part.textContent).join() === [...net.children].map((part) => part.textContent).join();
  if (!same) net.replaceChildren(...parts);
}

function paragraph(text) {
  const made = document.createElement("p");
  made.textContent = text;
  return made;
}

async function retry() {
  if (!kept().length) return;
  const through = await flush();
  for (const { tap, outcome } of through) {
    const form = [...document.querySelectorAll("form[data-send]")].find((one) => one.dataset.send === tap.path);
    if (form) told(form, outcome);
  }
  if (through.length) await refresh();
}

whenKeptChanges(tellNet);
addEventListener("online", retry);
document.addEventListener("visibilitychange", () => document.visibilityState === "visible" && refresh());
setInterval(retry, RETRY_MS);
setInterval(() => document.visibilityState === "visible" && refresh(), FRESH_MS);
for (const part of document.querySelectorAll("[data-fresh]")) shown.set(part.id, asSent(part));
readClock();
dateTyped();
fillBy(document);
tellNet();
retry();
