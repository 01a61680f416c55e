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
  part.dataset.counts = fresh.dataset.counts;
  part.replaceChildren(...fresh.childNodes);
  if (focused) part.querySelector(`a[href="${CSS.escape(focused)}"]`)?.focus();
}

function soon() {
  waiting ||= setTimeout(showAnew, document.getElementById("live") ? PAUSE_MS : 0);
}

// Where one design stands.
function tellDesign({ data }) {
  const { id, state, progress } = JSON.parse(data);
  const element = document.querySelector(`[data-design="${CSS.escape(id)}"]`);
  if (!element) return;
  if (state === element.dataset.state) showProgress(element, progress);
  else soon();
}

// Where a batch stands: anew if the counts are no longer those shown.
function tellBatch({ data }) {
  const { queued, running, done, failed, cancelled } = JSON.parse(data).counts;
  const counts = [queued, running, done, failed, cancelled].join(" ");
  if (document.getElementById("live")?.dataset.counts !== counts) soon();
}

for (const { dataset } of document.querySelectorAll("[data-events]")) {
  const events = new EventSource(dataset.events);
  events.addEventListener("state", tellDesign);
  events.addEventListener("batch", tellBatch);
  events.addEventListener("error", () => {
    // A stream that broke is opened again by the browser; one that was refused is not.
    if (events.readyState === EventSource.CLOSED) setTimeout(() => location.reload(), ASK_MS);
  });
}
