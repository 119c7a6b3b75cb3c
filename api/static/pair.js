// Keeps the key of a pairing link on this phone, and forgets it again. The key comes in the address's
// fragment, which no browser sends anywhere; it is taken out of the address bar before all else.
const ROUND_AFTER_MS = 2500;
const said = document.getElementById("pairing");

// A link that is opened while this page is there changes the fragment alone, and loads nothing.
addEventListener("hashchange", takeKey);
takeKey();

function takeKey() {
  const key = location.hash.slice(1);
  if (!key.includes(".")) return;
  history.replaceState(null, "", "/pair");
  keep(key);
}

document.getElementById("forget")?.addEventListener("submit", async (event) => {
  event.preventDefault();
  const answer = await post("/api/v1/pairing/forget", {});
  if (answer.ok) location.replace("/pair");
  else say(answer.why, true);
});

async function keep(key) {
  say("Pairing this phone ...");
  const answer = await post("/api/v1/pairing", { key });
  if (!answer.ok) {
    say(answer.why, true);
    return;
  }
  const meaning = JSON.parse(said.dataset.meaning);
  const may = answer.body.may.map((scope) => meaning[scope]).join("; ");
  document.getElementById("standing").hidden = true;
  say(`Paired as ${answer.body.name}. This phone may now ${may}.`);
  const onward = document.createElement("a");
  onward.className = "button";
  onward.href = "/round";
  onward.textContent = "To the round";
  said.after(onward);
  setTimeout(() => location.replace("/round"), ROUND_AFTER_MS);
}

async function post(path, body) {
  try {
    const response = await fetch(path, {
      method: "POST",
      headers: { "content-type": "application/json" },
      body: JSON.stringify(body),
    });
    const answer = response.status === 204 ? {} : await response.json();
    return { ok: response.ok, body: answer, why: answer.detail };
  } catch {
    return { ok: false, why: "dripleg does not answer: come nearer, and open the link again." };
  }
}

function say(text, wrong = false) {
  said.classList.toggle("wrong", wrong);
  said.textContent = text;
}
