// Every write of the pages goes through send(path, body). What cannot be sent now is kept on this
// phone and sent once: a body with a `key` is recorded once however often it arrives.

const KEPT = "dripleg.kept";
const PATIENCE_MS = 8000;
const LATE_MS = 5000; // a tap that arrives later says when it was
let memory = null; // the list, where the browser lets nothing be stored
let clockOffsetMs = 0;
const listeners = [];

// A key of one's own for one tap. getRandomValues is there also where randomUUID is not (http).
export function newKey() {
  const bytes = crypto.getRandomValues(new Uint8Array(12));
  return "page-" + Array.from(bytes, (b) => b.toString(16).padStart(2, "0")).join("");
}

// The daemon's clock against this phone's, which may be wrong.
export function serverSays(nowMs) {
  clockOffsetMs = nowMs - Date.now();
}

export function kept() {
  if (memory) return memory;
  try {
    return JSON.parse(localStorage.getItem(KEPT) || "[]");
  } catch {
    return [];
  }
}

export function whenKeptChanges(listener) {
  listeners.push(listener);
}

function keep(list) {
  try {
    localStorage.setItem(KEPT, JSON.stringify(list));
    memory = null;
  } catch {
    memory = list; // private browsing: kept for as long as the page is open
  }
  listeners.forEach((listener) => listener(list));
}

function change(id, changed) {
  keep(kept().flatMap((tap) => (tap.id === id ? (changed ? [{ ...tap, ...changed }] : []) : [tap])));
}

// Take a kept tap away: it will not be sent.
export function forget(id) {
  change(id, null);
}

// Whether the same is waiting already, but for its key: whoever taps again while the network is gone
// means the same tap.
export function isKept(path, body) {
  const said = ({ key, ...rest }) => JSON.stringify(rest);
  return kept().some((tap) => tap.path === path && said(tap.body) === said(body));
}

// Send a body as JSON. Gives {taken, answer}, or {refused: words}, or {kept: why}. One that is
// `dated` says when it was, in `at`, where it comes late.
export async function send(path, body, label = "", dated = false) {
  const tap = { id: newKey(), path, body, label, dated, at: Date.now(), tries: 0 };
  keep([...kept(), tap]);
  return attempt(tap);
}

// Try all kept taps again, in order; gives what became of those that are through.
let flushing = null;
export function flush() {
  flushing ??= (async () => {
    const through = [];
    try {
      for (const tap of kept()) {
        if (underway.has(tap.id) || !kept().some((still) => still.id === tap.id)) continue;
        const outcome = await attempt(tap);
        if (outcome.lost) break; // none of the others would arrive either
        if (!outcome.kept) through.push({ tap, outcome });
      }
    } finally {
      flushing = null;
    }
    return through;
  })();
  return flushing;
}

const underway = new Set();
async function attempt(tap) {
  underway.add(tap.id);
  try {
    const again = tap.tries > 0;
    change(tap.id, { tries: tap.tries + 1 });
    return await post(tap, again);
  } finally {
    underway.delete(tap.id);
  }
}

async function post(tap, again) {
  const body = { ...tap.body };
  if (tap.dated && Date.now() - tap.at > LATE_MS) {
    body.at = new Date(tap.at + (tap.offset ?? clockOffsetMs)).toISOString();
  }
  let response;
  try {
    response = await fetch(tap.path, {
      method: "POST",
      headers: { "content-type": "application/json" },
      body: JSON.stringify(body),
      signal: AbortSignal.timeout?.(PATIENCE_MS),
    });
  } catch {
    change(tap.id, { offset: tap.offset ?? clockOffsetMs });
    return { kept: "there is no connection", lost: true };
  }
  const answer = await response.json().catch(() => ({}));
  const done = again && answer.type === "/problems/nothing-to-acknowledge"; // by the first try
  if (response.ok || done) {
    forget(tap.id);
    return { taken: true, answer };
  }
  // what this phone's key may not do is refused at once; a tap that waited for a key waits on
  const waits = [401, 429].includes(response.status) || (again && response.status === 403);
  if (response.status >= 500 || waits) {
    change(tap.id, { why: words(answer), offset: tap.offset ?? clockOffsetMs });
    return { kept: words(answer) };
  }
  forget(tap.id);
  return { refused: words(answer) };
}

// A problem document in words.
function words(answer) {
  const points = (answer.errors || []).map((point) => (point.value ? `${point.value}: ` : "") + point.remedy);
  return points.join(" ") || answer.detail || answer.title || "it could not be taken";
}
