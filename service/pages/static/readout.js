// Tells the value under the pointer. Drawings that stand at addresses of their own are taken into
// the page, so that the pointer can be followed in them; figures come from the report as stored.

const SVG = "http://www.w3.org/2000/svg";
const source = document.querySelector('link[rel="alternate"][type="application/json"]')?.href;
let stored;

function report() {
  stored ??= fetch(source).then((answer) => {
    if (!answer.ok) throw new Error(`${answer.status} ${source}`);
    return answer.json();
  });
  return stored;
}

const minus = (text) => text.replace("-", "−");
const ohms = (value) => minus(value.toFixed(Math.abs(value) < 1000 ? 1 : 0));
const swr = (value) => (value >= 100 ? "> 100" : value.toFixed(value < 10 ? 2 : 0));
const degrees = (value) => minus(value.toFixed(1).replace(/\.0$/, ""));
const metres = (value) => value.toFixed(Math.abs(value) >= 5 ? 2 : 3);
const dbi = (value) => minus(value.toFixed(2));

// A scale as noted in the drawing: from a place in px to the value there, and back.
function scale(noted) {
  const [kind, ...numbers] = noted.split(" ");
  const [low, high, start, end] = numbers.map(Number);
  const [into, back] = kind === "log" ? [Math.log, Math.exp] : [(v) => v, (v) => v];
  const [from, to] = [into(low), into(high)];
  return {
    value: (px) => back(from + ((px - start) / (end - start)) * (to - from)),
    px: (value) => start + ((into(value) - from) / (to - from)) * (end - start),
  };
}

function nearest(points, distance) {
  return points.reduce((best, each) => (distance(each) < distance(best) ? each : best));
}

const along = (points, frequency) => nearest(points, (p) => Math.abs(p.frequency_mhz - frequency));

function reflected(point) {
  const angle = point.reflection_deg === null ? "" : ` at ${degrees(point.reflection_deg)}°`;
  return `|Γ| ${point.reflection.toFixed(3)}${angle}, SWR ${swr(point.swr)}`;
}

// What each kind of drawing tells of a place: words, and where the mark goes.
const READERS = {
  rx({ x }, found, at) {
    const over = scale(x);
    const point = along(found.sweep, over.value(at.x));
    const { frequency_mhz, resistance_ohm, reactance_ohm } = point;
    const told = `${frequency_mhz.toFixed(3)} MHz: R ${ohms(resistance_ohm)} Ω, X ${ohms(reactance_ohm)} Ω`;
    return { words: `${told}, ${reflected(point)}`, upright: over.px(frequency_mhz) };
  },
  swr({ x, band }, found, at) {
    const over = scale(x);
    const point = along(found.bands[band].grid, over.value(at.x));
    const far = point.transmitter_swr;
    const both = far === null ? "" : ` at the feed point, ${swr(far)} at the transmitter`;
    const words = `${point.frequency_mhz.toFixed(4)} MHz: SWR ${swr(point.swr)}${both}`;
    return { words, upright: over.px(point.frequency_mhz) };
  },
  current({ x, band }, found, at) {
    const over = scale(x);
    const { size, phase_deg } = found.bands[band].current;
    const step = found.length_m / (size.length - 1);
    const index = Math.min(size.length - 1, Math.max(0, Math.round(over.value(at.x) / step)));
    const words = `${metres(index * step)} m: |I| ${size[index].toFixed(3)} of the largest, phase ${degrees(phase_deg[index])}°`;
    return { words, upright: over.px(index * step) };
  },
  smith({ centre }, found, at) {
    const [cx, cy, radius] = centre.split(" ").map(Number);
    const place = ({ reflection, reflection_deg }) => {
      const angle = (reflection_deg * Math.PI) / 180;
      return { x: cx + radius * reflection * Math.cos(angle), y: cy - radius * reflection * Math.sin(angle) };
    };
    const away = ({ point }) => Math.hypot(place(point).x - at.x, place(point).y - at.y);
    const all = found.bands.flatMap(({ name, grid }) => grid.map((point) => ({ name, point })));
    const { name, point } = nearest(all, away);
    return { words: `${name}, ${point.frequency_mhz.toFixed(4)} MHz: ${reflected(point)}`, dot: place(point) };
  },
  pattern({ upper, lower, band }, found, at) {
    const { radiation } = found.bands[band];
    const [ux, uy, radius] = upper.split(" ").map(Number);
    const [lx, ly] = lower.split(" ").map(Number);
    const above = Math.abs(at.y - ly) > radius && at.y < uy + 0.15 * radius;
    const [cx, cy] = above ? [ux, uy] : [lx, ly];
    const turned = (Math.atan2(cy - at.y, at.x - cx) * 180) / Math.PI;
    const angle = above && turned < 0 ? (turned < -90 ? 180 : 0) : Math.abs(turned);
    const index = Math.round(angle / radiation.step_deg);
    const told = index * radiation.step_deg;
    const side = told > 90 ? 180 - told : told;
    const words = above
      ? `elevation ${degrees(side)}°: ${dbi(radiation.broadside_dbi[Math.round(side / radiation.step_deg)])} dBi across, ${dbi(radiation.end_on_dbi[index])} dBi along`
      : `azimuth ±${degrees(told)}°: ${dbi(radiation.around_dbi[index])} dBi`;
    const sign = !above && turned < 0 ? -1 : 1;
    const towards = (told * Math.PI) / 180;
    const tip = { x: cx + radius * Math.cos(towards), y: cy - sign * radius * Math.sin(towards) };
    return { words, ray: [{ x: cx, y: cy }, tip] };
  },
};

function mark(svg, { upright, dot, ray }) {
  svg.querySelector(".pointer")?.remove();
  const drawn = document.createElementNS(SVG, dot ? "circle" : "line");
  const box = svg.viewBox.baseVal;
  const [from, to] = ray ?? [{ x: upright, y: 0 }, { x: upright, y: box.height }];
  const places = dot
    ? { cx: dot.x, cy: dot.y, r: 6 }
    : { x1: from.x, y1: from.y, x2: to.x, y2: to.y };
  for (const [name, value] of Object.entries(places)) drawn.setAttribute(name, value.toFixed(1));
  drawn.setAttribute("class", "pointer");
  svg.append(drawn);
}

function follow(svg) {
  const told = document.createElement("output");
  told.className = "readout";
  svg.after(told);
  let last;
  svg.addEventListener("pointermove", async (event) => {
    last = event;
    const found = await report().catch(() => undefined);
    const place = svg.getScreenCTM();
    if (!found || !place || last !== event) return;
    const at = new DOMPoint(event.clientX, event.clientY).matrixTransform(place.inverse());
    const read = READERS[svg.dataset.read](svg.dataset, found, at);
    told.textContent = read.words;
    mark(svg, read);
  });
  svg.addEventListener("pointerleave", () => {
    last = undefined;
    told.textContent = "";
    svg.querySelector(".pointer")?.remove();
  });
}

async function takeIn(image) {
  const answer = await fetch(image.src);
  if (!answer.ok) return;
  const drawing = new DOMParser().parseFromString(await answer.text(), "image/svg+xml").documentElement;
  if (drawing.localName !== "svg") return;
  const svg = document.importNode(drawing, true);
  svg.removeAttribute("width");
  svg.removeAttribute("height");
  image.replaceWith(svg);
  follow(svg);
}

if (source) {
  for (const svg of document.querySelectorAll("svg[data-read]")) follow(svg);
  const seen = new IntersectionObserver((entries) => {
    for (const { target, isIntersecting } of entries) {
      if (!isIntersecting) continue;
      seen.unobserve(target);
      takeIn(target).catch(() => undefined); // the image stays as it is
    }
  }, { rootMargin: "200px" });
  for (const image of document.querySelectorAll("img.drawn")) seen.observe(image);
}
