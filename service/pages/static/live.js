// Follows designs that are not done: moves their bars as the service tells of progress, and shows
// the page anew once a state changes. Where events do not come, it shows the page anew every few
// seconds, as the page does by itself without scripts.

const ASK_MS = 3000;

function share(fraction) {
  return `${fraction < 1 ? Math.floor(100 * fraction) : 100}\u00a0%`;
}

function showProgress(element, { fraction, step }) {
  const bar = element.querySelector("progress");
  const said = element.querySelector(".step");
  if (bar) bar.value = fraction;
  if (said) said.textContent = share(fraction) + (step ? `, ${step}` : "");
}

function told({ data }) {
  const { id, state, progress } = JSON.parse(data);
  const element = document.querySelector(`[data-design="${CSS.escape(id ?? "")}"]`);
  if (!element) return;
  if (state !== element.dataset.state) location.reload();
  else if (progress) showProgress(element, progress);
}

for (const { dataset } of document.querySelectorAll("[data-events]")) {
  const events = new EventSource(dataset.events);
  for (const kind of ["message", "progress", "state"]) events.addEventListener(kind, told);
  events.addEventListener("error", () => {
    // A stream that broke is opened again by the browser; one that was refused is not.
    if (events.readyState === EventSource.CLOSED) setTimeout(() => location.reload(), ASK_MS);
  });
}
