// Follows designs that are not done: moves their bars as the service tells of progress, and shows
// what changed once a state does. Where events do not come, the page is shown anew every few
// seconds, as it is by itself without scripts.

const ASK_MS = 3000;
const PAUSE_MS = 1000;

let waiting = 0;

function share(fraction) {
  return `${fraction < 1 ? Math.floor(100 * fraction) : 100}\u00a0%`;
}

function showProgress(element, { fraction, step }) {
  const bar = element.querySelector("progress");
  const said = element.querySelector(".step");
  if (bar) bar.value = fraction;
  if (said) said.textContent = share(fraction) + (step ? `, ${step}` : "");
}

// A page with a part of many designs has that part replaced, so that reader and focus stay.
async function showAnew() {
  waiting = 0;
  const part = document.getElementById("live");
  if (!part) return location.reload();
  const answer = await fetch(location.href, { headers: { Accept: "text/html" } });
  const page = new DOMParser().parseFromString(await answer.text(), "text/html");
  const fresh = page.getElementById("live");
  if (!fresh?.dataset.events) return location.reload();
  const focused = document.activeElement?.getAttribute("href");
  part.replaceChildren(...fresh.childNodes);
  if (focused) part.querySelector(`a[href="${CSS.escape(focused)}"]`)?.focus();
}

function soon() {
  waiting ||= setTimeout(showAnew, document.getElementById("live") ? PAUSE_MS : 0);
}

function told({ data }) {
  const { id, state, progress } = JSON.parse(data);
  const element = document.querySelector(`[data-design="${CSS.escape(id ?? "")}"]`);
  if (element && state === element.dataset.state) showProgress(element, progress);
  else soon();
}

for (const { dataset } of document.querySelectorAll("[data-events]")) {
  const events = new EventSource(dataset.events);
  for (const kind of ["message", "progress", "state", "design"]) {
    events.addEventListener(kind, told);
  }
  events.addEventListener("error", () => {
    // A stream that broke is opened again by the browser; one that was refused is not.
    if (events.readyState === EventSource.CLOSED) setTimeout(() => location.reload(), ASK_MS);
  });
}
