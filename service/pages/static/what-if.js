// Moves a candidate by hand: each change asks for the page anew and takes its answer over.
// Without scripts the form does the same by its button.

const WAIT_MS = 60;
const AGAIN_MS = 400;
const form = document.querySelector("form[data-what-if]");
let asking;
let waiting;

async function ask() {
  asking?.abort();
  const mine = (asking = new AbortController());
  const address = `${form.action}?${new URLSearchParams(new FormData(form))}`;
  try {
    const answer = await fetch(address, { signal: mine.signal, headers: { Accept: "text/html" } });
    const text = await answer.text();
    if (mine.signal.aborted) return;
    if (answer.status === 503) {
      soon(AGAIN_MS); // others were before; what is shown stays until then
      return;
    }
    const found = new DOMParser().parseFromString(text, "text/html").querySelector("#answer");
    if (!found) return;
    document.querySelector("#answer").replaceWith(document.adoptNode(found));
    history.replaceState(null, "", address);
  } catch (error) {
    if (error.name !== "AbortError") soon(AGAIN_MS * 5);
  }
}

function soon(after) {
  clearTimeout(waiting);
  waiting = setTimeout(ask, after);
}

// A slider below each number that says between what.
function slide(number) {
  const { low, high, step } = number.dataset;
  const slider = document.createElement("input");
  Object.assign(slider, { type: "range", min: low, max: high, step, value: number.value });
  slider.setAttribute("aria-label", number.labels[0].textContent);
  slider.addEventListener("input", () => {
    number.value = slider.value;
    soon(WAIT_MS);
  });
  number.addEventListener("input", () => {
    slider.value = number.value;
  });
  number.after(slider);
}

if (form) {
  for (const number of form.querySelectorAll("input[data-low]")) slide(number);
  form.addEventListener("input", (event) => {
    if (event.target.type !== "range" && form.checkValidity()) soon(4 * WAIT_MS);
  });
  form.addEventListener("submit", (event) => {
    event.preventDefault();
    soon(0);
  });
}
