// The script of the pages: it renews what the server has drawn, sends orders, and reads a cursor off the charts.
// Everything is there without it; only orders and the cursor need it.
"use strict";
(() => {
const $ = (q, from = document) => from.querySelector(q), all = (q, from = document) => [...from.querySelectorAll(q)];
const page = document.body.dataset.page;
let frozen = false, busy = false, reference = "", shown = 0;
let next = () => {}; // exchanges the charts of this page, if it has any

// Names and orders.
const who = $("#who");
if (who) {
  try { who.value = localStorage.getItem("lapwing-who") || ""; } catch { /* a browser that keeps nothing */ }
  who.addEventListener("change", () => { try { localStorage.setItem("lapwing-who", who.value); } catch { /* likewise */ } });
}
document.addEventListener("submit", async e => {
  const form = e.target;
  if (!form.classList.contains("order")) return;
  e.preventDefault();
  const out = $("output", form), order = {verb: form.dataset.verb, by: who ? who.value.trim() : ""};
  if (!order.by) { out.textContent = "Say who you are first."; if (who) who.focus(); return; }
  for (const k of ["key", "from", "to"]) if (form.dataset[k]) order[k] = form.dataset[k];
  for (const [k, v] of new FormData(form)) if (v) order[k] = k === "for_s" || k === "last_s" ? Number(v) : v;
  out.textContent = "…";
  try {
    const r = await fetch("/api/v1/orders", {method: "POST", headers: {"Content-Type": "application/json", "Lapwing-Order": "page"}, body: JSON.stringify(order)});
    const text = await r.text();
    let said = text.trim();
    try { const j = JSON.parse(text); said = (j.accepted ? "Done: " : "Refused: ") + j.said; } catch { /* plain words */ }
    out.textContent = said;
    if (r.ok) setTimeout(renew, 1500, true);
  } catch { out.textContent = "The monitor does not answer: nothing was done."; }
});

// Renewal: the same page is asked for again and its live parts are exchanged, save where somebody is working.
async function renew(force) {
  if (busy || document.hidden) return;
  busy = true;
  try {
    const u = new URL(location);
    if (shown) u.searchParams.set("turn", shown); // the numbers of the turn that the charts show
    const r = await fetch(u, {headers: {Accept: "text/html"}});
    if (!r.ok) return;
    const fresh = new DOMParser().parseFromString(await r.text(), "text/html");
    document.title = fresh.title;
    const parts = all("[data-live]"), same = parts.length === all("[data-live]", fresh).length;
    if (!same && !typing()) { $("main").replaceChildren(...$("main", fresh).childNodes); restore(); return; }
    for (const old of parts) {
      const neu = $(`[data-live="${old.dataset.live}"]`, fresh);
      if (!neu || old.outerHTML === neu.outerHTML || old.contains(document.activeElement) && !force || typing(old)) continue;
      const open = all("details[open]", old).map(d => d.dataset.keep), scroll = all(".wide", old).map(w => w.scrollLeft);
      old.replaceWith(neu);
      for (const d of all("details", neu)) if (open.includes(d.dataset.keep)) d.open = true;
      all(".wide", neu).forEach((w, i) => { w.scrollLeft = scroll[i] || 0; });
    }
  } catch { /* the stream tells when nobody answers */ } finally { busy = false; }
}
const typing = (within = document) => all("form.order input", within).some(i => i.value && i.type !== "hidden") || !!getSelection().toString();
function restore() { const w = $("#who"); if (w && who) w.value = who.value; }

// The stream of what has changed.
let told = 0;
function listen() {
  const s = new EventSource("/api/v1/events");
  s.addEventListener("now", e => {
    $("#offline").hidden = true;
    const n = JSON.parse(e.data), now = Date.now();
    if (now - told < 1800) return;
    const mine = n.refresh.includes(page) || n.refresh.includes("machine");
    if (mine && !frozen) { told = now; Promise.resolve(next()).then(() => renew(false)); }
  });
  s.onerror = () => { $("#offline").hidden = false; };
  addEventListener("pagehide", () => s.close());
}
listen();

// Charts: pictures are exchanged when the new ones have come, so that nothing flickers.
const tools = $("#tools");
if (!tools) return;
tools.hidden = false;
const wait = img => new Promise(done => { img.onload = img.onerror = () => done(); });
async function exchange(edit) {
  for (const fig of all(".chart")) {
    const img = $("img", fig), pic = $("picture", fig), ready = wait(img);
    for (const el of [...all("source", pic), img]) {
      const key = el === img ? "src" : "srcset", u = new URL(el.getAttribute(key), location);
      edit(u);
      el.setAttribute(key, u.pathname + u.search);
    }
    for (const a of all("figcaption a", fig)) { const u = new URL(a.getAttribute("href"), location); edit(u); a.setAttribute("href", u.pathname + u.search); }
    await Promise.race([ready, new Promise(d => setTimeout(d, 4000))]);
  }
}
const freeze = $("#freeze");
freeze.addEventListener("click", () => { frozen = !frozen; freeze.setAttribute("aria-pressed", frozen); freeze.textContent = frozen ? "Frozen: go on" : "Freeze"; if (!frozen) told = 0; });

let drawing = false;
async function signal() {
  if (drawing || document.hidden) return;
  drawing = true;
  await exchange(u => u.searchParams.set("at", Date.now()));
  drawing = false;
}
if (page === "channel") next = signal;
if (page !== "cylinder") return;

// One throw: the numbers behind the charts, one cursor for all of them.
const throwID = document.body.dataset.throw, slider = $("#angle"), readout = $("#readout"), said = $("#said"), over = $("#over");
let look = null, areas = {};
const chart = (kind, q) => `/api/v1/throws/${encodeURIComponent(throwID)}/charts/${kind}.json?${q}`;
async function turn(number) {
  if (drawing || document.hidden) return;
  drawing = true;
  try {
    const r = await fetch(`/api/v1/throws/${encodeURIComponent(throwID)}/look` + (number ? `?turn=${number}` : ""));
    if (r.ok) {
      const news = await r.json();
      await exchange(u => { u.searchParams.set("turn", news.turn); if (reference) u.searchParams.set("reference", reference); else u.searchParams.delete("reference"); });
      look = news;
      shown = look.turn;
      slider.min = Math.max(0, look.from_deg);
      await measureCharts();
      point();
    } else if (r.status !== 503) said.textContent = await r.text();
  } catch { /* the stream tells */ } finally { drawing = false; }
}
async function measureCharts() {
  for (const fig of all(".chart")) {
    const u = new URL($("img", fig).currentSrc || $("img", fig).src);
    const r = await fetch(u.pathname.replace(/\.svg$/, ".json") + u.search);
    if (r.ok) areas[fig.dataset.kind] = await r.json();
    else { const why = (await r.text()).trim(); said.textContent = why; if (reference) { reference = ""; over.value = ""; } return; }
  }
}
const place = (v, [a, b], log) => log ? Math.log(v / a) / Math.log(b / a) : (v - a) / (b - a);
function mark(fig, cls, x, y, box) {
  const d = document.createElement("div");
  d.className = cls;
  d.style.left = 100 * x + "%";
  d.style.top = 100 * y + "%";
  if (box) d.style.height = 100 * (box[3] - box[1]) + "%";
  $(".paper", fig).append(d);
}
const figure = (v, n = 2) => v === null || v === undefined ? "–" : v.toFixed(n).replace("-", "−");
function point() {
  all(".hair, .dot").forEach(d => d.remove());
  if (!look) return;
  const deg = Number(slider.value), i = Math.round((deg - look.from_deg) / look.step_deg);
  for (const fig of all(".chart")) {
    const kind = fig.dataset.kind;
    for (const a of areas[kind] || []) {
      const [l, t, r, b] = a.box;
      if (kind === "angle" || kind === "load") {
        const x = place(deg, a.x, false);
        if (x >= 0 && x <= 1) mark(fig, "hair", l + x * (r - l), t, a.box);
        continue;
      }
      for (const e of look.ends) {
        if (e.p_bar_abs[i] == null) continue;
        const x = place(e.v_litres[i], a.x, a.log), y = place(e.p_bar_abs[i], a.y, a.log);
        if (x >= 0 && x <= 1 && y >= 0 && y <= 1) mark(fig, "dot " + e.end, l + x * (r - l), b - y * (b - t));
      }
    }
  }
  const parts = [["at", figure(deg, 1) + "°"]], inside = [];
  for (const e of look.ends) {
    parts.push([e.end, figure(e.p_bar_abs[i]) + " bar, " + figure(e.v_litres[i]) + " l"]);
    for (const w of e.windows) if (w.low_deg != null && [0, 360, -360].some(k => deg + k >= w.low_deg && deg + k <= w.high_deg)) inside.push(`${e.end}.${w.event}${w.shared ? " (shared)" : ""}${w.found ? "" : " (moved by the model)"}`);
  }
  for (const v of look.vibration) parts.push([v.channel, figure(v.peak_g[i], 1) + " g"]);
  if (look.rod_load) parts.push(["rod", figure(look.rod_load.pin_kn[i], 1) + " kN"]);
  parts.push(["window", inside.join(", ") || "none"]);
  readout.hidden = false;
  readout.replaceChildren(...parts.map(([name, v]) => { const b = document.createElement("b"), s = document.createElement("span"); s.textContent = name + " "; b.append(s, v); return b; }));
  slider.setAttribute("aria-valuetext", parts.map(p => p.join(" ")).join(", "));
}
slider.addEventListener("input", point);
document.addEventListener("pointermove", e => {
  const fig = e.target.closest && e.target.closest(".chart"), a = fig && (areas[fig.dataset.kind] || [])[0];
  if (!a || fig.dataset.kind !== "angle" && fig.dataset.kind !== "load") return;
  const r = $("img", fig).getBoundingClientRect(), x = (e.clientX - r.left) / r.width;
  if (x < a.box[0] || x > a.box[2]) return;
  const deg = a.x[0] + (x - a.box[0]) / (a.box[2] - a.box[0]) * (a.x[1] - a.x[0]);
  slider.value = Math.round(((deg % 360) + 360) % 360 * 2) / 2;
  point();
});
over.addEventListener("change", () => { reference = over.value; said.textContent = reference === "clip" ? "A turn of the reference clip is being looked up…" : ""; turn(frozen && look ? look.turn : 0).then(() => { if (reference) said.textContent = "Grey and dotted: the reference."; }); });
$("#hold").addEventListener("click", () => {
  if (!look) return;
  const o = document.createElement("option");
  o.value = look.turn;
  o.textContent = "turn " + look.turn;
  over.append(o);
  over.value = o.value;
  over.dispatchEvent(new Event("change"));
});
next = () => turn();
turn();
})();
