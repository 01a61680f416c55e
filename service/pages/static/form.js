// Has the form checked while it is being filled in, by the same contract that judges it when sent.
// Nothing is judged here, and without this file the form works all the same.

const PAUSE_MS = 400;

const form = document.querySelector("form[data-check]");
const standing = document.getElementById("standing");

// Faults are told of fields that were left, and of those the page came with faults for.
const seen = new Set(
  [...form.querySelectorAll("[aria-invalid]")].map((control) => control.name),
);
let waiting = 0;
let asking = null;

function put(element, text) {
  if (element && element.textContent !== text) element.textContent = text;
}

function show(answer) {
  const said = new Map();
  for (const { field, said: words } of answer.faults) {
    if (field) said.set(field, [...(said.get(field) ?? []), words]);
  }
  for (const control of form.elements) {
    if (!control.id || control.type === "submit") continue;
    put(document.getElementById(`${control.id}.shown`), answer.shown[control.id] ?? "");
    const words = seen.has(control.name) ? (said.get(control.name) ?? []) : [];
    put(document.getElementById(`${control.id}.fault`), words.join(" "));
    if (words.length) control.setAttribute("aria-invalid", "true");
    else control.removeAttribute("aria-invalid");
  }
  put(standing, answer.standing);
}

async function check() {
  asking?.abort();
  asking = new AbortController();
  const body = new URLSearchParams(new FormData(form));
  try {
    const answer = await fetch(form.dataset.check, { method: "POST", body, signal: asking.signal });
    if (answer.ok) show(await answer.json());
  } catch (error) {
    // Asked again in the meantime, or the service is away: sending the form will tell.
    if (error.name !== "AbortError") put(standing, "");
  }
}

function soon() {
  clearTimeout(waiting);
  waiting = setTimeout(check, PAUSE_MS);
}

form.addEventListener("input", soon);
form.addEventListener("focusout", ({ target }) => {
  if (!target.name || seen.has(target.name)) return;
  seen.add(target.name);
  soon();
});
// A page that was gone back to holds what was written: have it checked again.
addEventListener("pageshow", () => {
  if ([...form.querySelectorAll("input[inputmode]")].some((control) => control.value)) check();
});
