// The page: the field in white light, and the spectrum of the place that was chosen.
"use strict";

const at = (id) => document.getElementById(id);
let run, place;

async function ask(path) {
  const answer = await fetch(path);
  if (!answer.ok) throw new Error((await answer.json()).error);
  return answer;
}

const say = (error) => { at("state").textContent = error.message; };

async function start() {
  run = await (await ask("/api/run")).json();
  at("name").textContent = run.object || run.name;
  at("verdict").textContent = run.verdict;
  place = { j: Math.floor(run.elements / 2), y: Math.floor(run.rows / 2) };
  await drawPicture();
  await drawSpectrum();
}

async function drawPicture() {
  const answer = await ask("/api/picture?layer=signal&sampled=1");
  const low = Number(answer.headers.get("X-Low")), high = Number(answer.headers.get("X-High"));
  const values = new Float32Array(await answer.arrayBuffer());
  const canvas = at("picture");
  canvas.width = run.elements;
  canvas.height = run.rows;
  canvas.style.aspectRatio = (run.elements * run.arcsec_element) / (run.rows * run.arcsec_row);
  const pen = canvas.getContext("2d"), image = pen.createImageData(run.elements, run.rows);
  for (let i = 0; i < values.length; i++) {
    const row = run.rows - 1 - Math.floor(i / run.elements);
    const to = 4 * (row * run.elements + (i % run.elements));
    const grey = 255 * Math.min(1, Math.max(0, (values[i] - low) / (high - low)));
    image.data.fill(grey, to, to + 3);
    image.data[to + 3] = Number.isNaN(values[i]) ? 0 : 255;
  }
  pen.putImageData(image, 0, 0);
}

async function drawSpectrum() {
  const radius = Number(at("radius").value);
  at("place").textContent = `Element ${place.j}, row ${place.y}`;
  const s = await (await ask(`/api/spectrum?shape=circle&j=${place.j}&y=${place.y}&r_arcsec=${radius}`)).json();
  const good = s.wavelength_nm.map((nm, l) => l).filter((l) => s.signal[l] !== null);
  const first = s.wavelength_nm[0], last = s.wavelength_nm[s.wavelength_nm.length - 1];
  const low = Math.min(0, ...good.map((l) => s.signal[l] - s.error[l])), high = Math.max(...good.map((l) => s.signal[l] + s.error[l]));
  const x = (l) => (800 * (s.wavelength_nm[l] - first)) / (last - first);
  const y = (v) => 300 - (300 * (v - low)) / (high - low);
  const along = (sign, list) => list.map((l) => `${x(l)},${y(s.signal[l] + sign * s.error[l])}`).join(" ");
  const shape = (kind, points) => {
    const e = document.createElementNS("http://www.w3.org/2000/svg", kind === "error" ? "polygon" : "polyline");
    e.setAttribute("class", kind);
    e.setAttribute("points", points);
    return e;
  };
  at("spectrum").replaceChildren(shape("error", along(1, good) + " " + along(-1, good.slice().reverse())), shape("line", along(0, good)));
  at("caption").textContent = `${first.toFixed(1)} to ${last.toFixed(1)} nm (vacuum), ${low.toPrecision(3)} to ${high.toPrecision(3)} ${s.unit}; grey: standard error`;
  at("state").textContent = "";
}

at("picture").addEventListener("click", (event) => {
  const box = event.target.getBoundingClientRect();
  place = {
    j: Math.floor(((event.clientX - box.left) / box.width) * run.elements),
    y: run.rows - 1 - Math.floor(((event.clientY - box.top) / box.height) * run.rows),
  };
  drawSpectrum().catch(say);
});

at("picture").addEventListener("keydown", (event) => {
  const step = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] }[event.key];
  if (step) {
    event.preventDefault();
    place.j = Math.min(run.elements - 1, Math.max(0, place.j + step[0]));
    place.y = Math.min(run.rows - 1, Math.max(0, place.y + step[1]));
    at("place").textContent = `Element ${place.j}, row ${place.y}`;
  }
  if (event.key === "Enter") drawSpectrum().catch(say);
});

start().catch(say);
