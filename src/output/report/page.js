"use strict";
(() => {
  const data = JSON.parse(document.getElementById("data").textContent);
  const find = (id) => document.getElementById(id);
  const all = (query) => Array.from(document.querySelectorAll(query));
  const times = data.times;
  const shapes = all("#polygons path");
  const hatches = new Map(all("#hatches path").map((path) => [Number(path.dataset.polygon), path]));
  const stations = all("#stations > g");
  const names = ["vorticity", "divergence"];
  const units = ["vorticity, 10⁻⁵ s⁻¹ (positive: counter-clockwise)", "divergence, 10⁻⁵ s⁻¹ (negative: convergence)"];
  const why = new Map(data.why.map(([t, p, reason]) => [t * shapes.length + p, data.reasons[reason]]));
  const dark = matchMedia("(prefers-color-scheme: dark)");
  let quantity = 1, now = 0, chosen = 0, playing = 0, printing = false;

  // Values and their states.
  const usable = (t, p) => !"mf".includes(data.state[t][p]);
  const significant = (t, p, q) => {
    const code = data.state[t].charCodeAt(p);
    const first = code >= 115 ? 115 : code >= 97 ? 97 : 65;
    return ((code - first) >> q) & 1;
  };
  const value = (q, t, p) => data.value[q][t][p] / data.perSecond;
  const error = (q, t, p) => data.error[q][t][p] / data.perSecond;
  const clock = (t) => new Date(times[t] * 1000).toISOString().slice(0, 16).replace("T", " ") + " UTC";
  const fixed = (number, places) => number.toFixed(places).replace("-", "−");
  const measured = (q, t, p) => `${value(q, t, p) >= 0 ? "+" : ""}${fixed(1e5 * value(q, t, p), 1)} ± ${fixed(1e5 * error(q, t, p), 1)}`;

  function colour(part) {
    const stops = dark.matches && !printing ? data.dark : data.light;
    const at = Math.max(-1, Math.min(1, part)) * 3 + 3;
    const low = Math.min(5, Math.floor(at));
    const mix = stops[low].map((a, c) => Math.round(a + (at - low) * (stops[low + 1][c] - a)));
    return `rgb(${mix.join(",")})`;
  }

  function drawMap() {
    const limit = data.limits[quantity];
    shapes.forEach((shape, p) => {
      const there = usable(now, p);
      if (shape.classList.contains("polygon")) {
        shape.style.fill = there ? colour(value(quantity, now, p) / limit) : "var(--grey)";
        hatches.get(p).classList.toggle("on", there && !significant(now, p, quantity));
      }
      const text = there ? `${names[quantity]} ${measured(quantity, now, p)} 10⁻⁵ s⁻¹` : `no estimate: ${reason(p)}`;
      shape.firstElementChild.textContent = `${name(p)}: ${text}`;
    });
    stations.forEach((group, s) => {
      const packed = data.winds[now][s];
      const use = group.querySelector("use");
      group.classList.toggle("calm-or-none", packed < 0);
      if (packed < 0) {
        use.removeAttribute("href");
        return;
      }
      const speed = Math.floor(packed / data.turn) / data.perSpeed;
      const halves = Math.min(data.mostHalves, Math.round(speed / data.halfBarb));
      use.setAttribute("href", `#barb${halves}`);
      use.setAttribute("transform", halves ? `rotate(${packed % data.turn + Number(group.dataset.north)})` : "");
    });
    find("clock").textContent = clock(now);
    find("time").value = now;
    find("time").setAttribute("aria-valuetext", clock(now));
  }

  function drawLegend() {
    const stops = [];
    for (let k = 0; k <= 24; k += 1) stops.push(colour(k / 12 - 1));
    find("colours").style.background = `linear-gradient(to right, ${stops.join(",")})`;
    const limit = Number((1e5 * data.limits[quantity]).toPrecision(3));
    find("least").textContent = `−${limit}`;
    find("most").textContent = `+${limit}`;
    find("unit").textContent = units[quantity];
  }

  const name = (p) => find("polygon").options[p].textContent.replace(/, [^,]*$/, "");
  const reason = (p) => (why.get(now * shapes.length + p) || "none").replace("_", " ");

  function drawNow() {
    const there = usable(now, chosen);
    const rows = [["Time", clock(now)]];
    for (const q of [0, 1]) {
      const word = names[q][0].toUpperCase() + names[q].slice(1);
      const sure = significant(now, chosen, q) ? "differs from zero" : "not distinguishable from zero";
      rows.push([word, there ? `${measured(q, now, chosen)} · 10⁻⁵ s⁻¹, ${sure}` : "no estimate"]);
    }
    const flagged = why.has(now * shapes.length + chosen);
    rows.push(["Flag", flagged ? `${there ? "suspect" : "none"}: ${reason(chosen)}` : "pass"]);
    const list = find("now");
    list.replaceChildren();
    for (const [term, text] of rows) {
      list.append(Object.assign(document.createElement("dt"), { textContent: term }));
      list.append(Object.assign(document.createElement("dd"), { textContent: text }));
    }
  }

  // A chart of one quantity: 560 × 210, drawn as SVG.
  const box = { left: 52, right: 532, top: 22, bottom: 180 };
  const round = (step) => {
    const ten = 10 ** Math.floor(Math.log10(step));
    return [1, 2, 5, 10].map((m) => m * ten).find((m) => m >= step * 0.999999);
  };
  function drawSeries(q) {
    const values = times.map((_, t) => usable(t, chosen) ? [1e5 * value(q, t, chosen), 1.96e5 * error(q, t, chosen)] : null);
    const there = values.filter(Boolean);
    let low = Math.min(0, ...there.map(([v, e]) => v - e)), high = Math.max(0, ...there.map(([v, e]) => v + e));
    if (low === high) [low, high] = [-1, 1];
    const room = 0.05 * (high - low);
    [low, high] = [low - room, high + room];
    const span = Math.max(1, times[times.length - 1] - times[0]);
    const x = (t) => box.left + (times[t] - times[0]) / span * (box.right - box.left);
    const y = (v) => box.bottom - (v - low) / (high - low) * (box.bottom - box.top);
    const parts = [];
    const step = round((high - low) / 5);
    for (let k = Math.ceil(low / step); k * step <= high; k += 1) {
      const at = y(k * step).toFixed(1);
      parts.push(`<path class="grid" d="M${box.left} ${at}H${box.right}"/>`);
      const places = Math.max(0, -Math.floor(Math.log10(step)));
      parts.push(`<text x="${box.left - 6}" y="${Number(at) + 4}" text-anchor="end">${fixed(k * step, places)}</text>`);
    }
    const minutes = [1, 2, 5, 10, 15, 30, 60, 120, 180, 360, 720, 1440, 2880, 10080, 43200, 129600].find((m) => m * 60 * 7 >= span) || 525600;
    for (let at = Math.ceil(times[0] / 60 / minutes) * minutes * 60; at <= times[times.length - 1]; at += minutes * 60) {
      const text = new Date(at * 1000).toISOString();
      const label = text.slice(11, 16) === "00:00" ? text.slice(5, 10) : text.slice(11, 16);
      const place = (box.left + (at - times[0]) / span * (box.right - box.left)).toFixed(1);
      parts.push(`<path class="grid" d="M${place} ${box.top}V${box.bottom}"/><text x="${place}" y="${box.bottom + 16}" text-anchor="middle">${label}</text>`);
    }
    let line = "", band = "", piece = [];
    const close = () => {
      if (piece.length > 1) {
        const up = piece.map((t) => `${x(t).toFixed(1)} ${y(values[t][0] + values[t][1]).toFixed(1)}`);
        const down = piece.map((t) => `${x(t).toFixed(1)} ${y(values[t][0] - values[t][1]).toFixed(1)}`).reverse();
        band += `M${up.concat(down).join("L")}Z`;
      }
      const points = piece.map((t) => `${x(t).toFixed(1)} ${y(values[t][0]).toFixed(1)}`);
      if (points.length) line += `M${points.join("L")}${points.length === 1 ? "h3" : ""}`;
      piece = [];
    };
    values.forEach((found, t) => found ? piece.push(t) : close());
    close();
    const zero = `<path class="zero" d="M${box.left} ${y(0).toFixed(1)}H${box.right}"/>`;
    const edge = `<path class="edge" d="M${box.left} ${box.top}H${box.right}V${box.bottom}H${box.left}Z"/>`;
    const title = `<text class="name" x="${box.left}" y="14">${names[q]}</text>`;
    const none = there.length ? "" : `<text x="${box.left + 12}" y="${box.top + 20}">no estimate at any time</text>`;
    const chart = find(`series${q}`);
    chart.innerHTML = `${parts.join("")}<path class="band${q}" d="${band}"/>${zero}<path class="line${q}" d="${line}"/>${edge}${title}${none}<path class="cursor" d=""/>`;
    chart.dataset.span = span;
  }
  function drawCursor() {
    for (const q of [0, 1]) {
      const chart = find(`series${q}`);
      const at = (box.left + (times[now] - times[0]) / Number(chart.dataset.span) * (box.right - box.left)).toFixed(1);
      chart.querySelector(".cursor").setAttribute("d", `M${at} ${box.top}V${box.bottom}`);
    }
  }

  function go(t) {
    now = Math.max(0, Math.min(times.length - 1, t));
    drawMap();
    drawNow();
    drawCursor();
  }
  function choose(p) {
    if (!shapes[p]) return;
    chosen = p;
    find("polygon").value = p;
    find("chosen").setAttribute("d", shapes[p].getAttribute("d"));
    drawSeries(0);
    drawSeries(1);
    go(now);
  }
  function take(q) {
    quantity = q;
    all("input[name=quantity]").forEach((input) => { input.checked = Number(input.value) === q; });
    drawLegend();
    drawMap();
  }
  function stop() {
    clearInterval(playing);
    playing = 0;
    find("play").textContent = "Play";
    find("play").setAttribute("aria-pressed", "false");
  }
  function nearest(seconds) {
    let best = 0;
    times.forEach((time, t) => { if (Math.abs(time - seconds) < Math.abs(times[best] - seconds)) best = t; });
    return best;
  }

  if (!times.length) return;
  find("time").max = times.length - 1;
  find("time").addEventListener("input", (event) => { stop(); go(Number(event.target.value)); });
  find("back").addEventListener("click", () => { stop(); go(now - 1); });
  find("on").addEventListener("click", () => { stop(); go(now + 1); });
  find("play").addEventListener("click", () => {
    if (playing) { stop(); return; }
    find("play").textContent = "Pause";
    find("play").setAttribute("aria-pressed", "true");
    // The whole run takes some 30 s, and no step less than a tenth.
    playing = setInterval(() => go((now + 1) % times.length), Math.max(100, 30000 / times.length));
  });
  find("polygon").addEventListener("change", (event) => choose(Number(event.target.value)));
  find("polygons").addEventListener("click", (event) => {
    const shape = event.target.closest("path");
    if (shape) choose(Number(shape.dataset.polygon));
  });
  all("input[name=quantity]").forEach((input) => input.addEventListener("change", () => take(Number(input.value))));
  for (const q of [0, 1]) {
    find(`series${q}`).addEventListener("click", (event) => {
      const place = find(`series${q}`).getBoundingClientRect();
      const x = (event.clientX - place.left) / place.width * 560;
      stop();
      go(nearest(times[0] + (x - box.left) / (box.right - box.left) * Number(find(`series${q}`).dataset.span)));
    });
  }
  all("button[data-micros]").forEach((button) => button.addEventListener("click", () => {
    stop();
    now = nearest(Number(button.dataset.micros) / 1e6);
    take(Number(button.dataset.quantity));
    choose(Number(button.dataset.go));
    find("map-card").scrollIntoView({ block: "nearest" });
  }));
  dark.addEventListener("change", () => { drawLegend(); drawMap(); });
  addEventListener("beforeprint", () => { printing = true; stop(); drawLegend(); drawMap(); });
  addEventListener("afterprint", () => { printing = false; drawLegend(); drawMap(); });

  // The page opens at the strongest convergence.
  const first = document.querySelector("button[data-micros]");
  take(1);
  if (first) now = nearest(Number(first.dataset.micros) / 1e6);
  choose(first ? Number(first.dataset.go) : 0);
})();
