// The page: what the server wrote as text stands already; this draws the map
// and the charts from the document beside it, and lets a reader choose a plan.

import { figures, Look, looks, overTime, Panel, tail } from "./charts";
import { Doc, periodAt, Run } from "./contract";
import { html } from "./dom";
import { draw, slotsAt } from "./map";

const byId = (id: string) => document.getElementById(id)!;

let doc: Doc;
let chosen = 0; // the run of the plan that is shown
let charts: { destroy(): void }[] = [];

function start(): void {
  doc = JSON.parse(byId("document").textContent!) as Doc;
  chosen = Number(document.querySelector<HTMLElement>("[data-of]")?.dataset.of ?? 0);
  const from = location.hash.slice(1);
  for (const b of document.querySelectorAll<HTMLElement>("[data-choose]")) {
    const plan = encodeURIComponent(b.textContent!);
    if (plan === from) chosen = Number(b.dataset.choose);
    b.addEventListener("click", () => choose(Number(b.dataset.choose), plan));
  }
  matchMedia("(prefers-color-scheme: dark)").addEventListener("change", show);
  let wait = 0;
  let wide = document.body.clientWidth;
  addEventListener("resize", () => {
    if (document.body.clientWidth === wide) return;
    wide = document.body.clientWidth;
    clearTimeout(wait);
    wait = setTimeout(show, 150);
  });
  addEventListener("beforeprint", () => pending.splice(0).forEach((make) => make()));
  show();
}

function choose(run: number, plan: string): void {
  chosen = run;
  history.replaceState(null, "", "#" + plan);
  show();
}

// show draws everything anew.
function show(): void {
  for (const b of document.querySelectorAll<HTMLElement>("[data-choose]")) b.setAttribute("aria-pressed", String(Number(b.dataset.choose) === chosen));
  for (const e of document.querySelectorAll<HTMLElement>("[data-of]")) e.hidden = Number(e.dataset.of) !== chosen;
  for (const c of charts.splice(0)) c.destroy();
  pending = [];
  if (doc.runs.length <= chosen) return; // an interrupted study has none
  const runs = chosen === 0 ? [doc.runs[0]] : [doc.runs[0], doc.runs[chosen]];
  const all = looks(runs);
  showMap(runs);
  showTails(runs, all);
  showTimes(runs, all);
}

// The instant and the run that the map shows outlive a redraw.
let instant: number | undefined;
let mapped = -1;

function showMap(runs: Run[]): void {
  if (mapped < 0 || mapped >= runs.length) mapped = runs.length - 1;
  const last = runs[runs.length - 1];
  const controls = byId("map-controls");
  const slider = html("input", { type: "range", min: 0, max: last.length_s, step: 0.001, "aria-label": "instant shown" }) as HTMLInputElement;
  const said = html("output", { class: "instant" });
  instant ??= (last.periods[0]?.from_s ?? 0) + 1e-3;
  const go = (t: number) => {
    instant = t;
    slider.value = String(t);
    const run = runs[mapped];
    const p = periodAt(run, t);
    said.textContent = `${run.plan} at ${Number(t.toFixed(3))} s` + (p ? ` (${p.name})` : " (warm-up)");
    draw(byId("map") as unknown as SVGElement, run, t, slotsAt(run, t));
  };
  slider.addEventListener("input", () => go(Number(slider.value)));
  const stops = html("span", { class: "stops" }, "show ");
  const stop = (text: string, t: number) => {
    const b = html("button", { type: "button" }, text);
    b.addEventListener("click", () => go(t));
    stops.append(b, " ");
  };
  for (const p of last.periods) {
    if (p.kind === "hit") stop(`just after ${p.act ?? p.name}`, Math.min(p.from_s + 0.01, p.to_s));
    else stop(p.name, (p.from_s + p.to_s) / 2);
  }
  const plans = html("span", { class: "stops" }, "of ");
  runs.forEach((r, i) => {
    const b = html("button", { type: "button", "aria-pressed": String(i === mapped) }, r.plan);
    b.addEventListener("click", () => {
      mapped = i;
      [...plans.querySelectorAll("button")].forEach((x, k) => x.setAttribute("aria-pressed", String(k === i)));
      go(instant!);
    });
    plans.append(b, " ");
  });
  controls.replaceChildren(...(runs.length > 1 ? [plans] : []), stops, slider, said);
  go(instant);
}

function key(all: Look[]): HTMLElement {
  return html("p", { class: "key" }, ...all.map((l, i) => html("span", { class: i === 0 && all.length > 1 ? "key-base" : "key-plan" }, l.name)));
}

// Panels are made when they come near the window, or before printing.
let pending: (() => void)[] = [];

function place(into: HTMLElement, panel: Panel): void {
  const make = () => {
    seen.disconnect();
    pending = pending.filter((m) => m !== make);
    charts.push(panel.make(into));
  };
  const seen = new IntersectionObserver((entries) => {
    if (entries.some((e) => e.isIntersecting)) make();
  }, { rootMargin: "300px" });
  pending.push(make);
  seen.observe(into);
}

function figure(title: string, panel: Panel): HTMLElement {
  const into = html("div", { class: "plot" });
  const f = html("figure", { class: "panel" }, html("figcaption", {}, title), into);
  queueMicrotask(() => place(into, panel));
  return f;
}

function showTails(runs: Run[], all: Look[]): void {
  const last = runs[runs.length - 1];
  const grid = html("div", { class: "panels" });
  const periods = last.periods.filter((p) => (last.tails ?? []).some((t) => t.period === p.name));
  grid.style.setProperty("--columns", String(Math.min(periods.length, 3)));
  for (const c of last.classes) {
    grid.append(html("h3", {}, c.name));
    for (const p of periods) grid.append(figure(p.name + (p.act ? `: ${p.act}` : ""), tail(runs, all, c.name, p.name)));
  }
  byId("tails").replaceChildren(key(all), grid);
}

function showTimes(runs: Run[], all: Look[]): void {
  const last = runs[runs.length - 1];
  const parts: Node[] = [key(all)];
  const rows = (from: number, to: number, close: boolean, sync: string) => {
    const grid = html("div", { class: "panels" });
    grid.style.setProperty("--columns", "3");
    for (const c of last.classes) {
      grid.append(html("h3", {}, c.name));
      for (const f of figures) grid.append(figure(f.title, overTime(runs, all, c.name, f.id, from, to, close, sync)));
    }
    return grid;
  };
  parts.push(html("h3", { class: "part" }, "The whole run"), rows(0, last.length_s, false, "whole"));
  for (const hit of last.periods.filter((p) => p.kind === "hit")) {
    // Recovery is when the period has settled in every run that is drawn.
    const to = Math.max(...runs.map((r) => r.periods.find((p) => p.kind === "hit" && p.from_s === hit.from_s)?.to_s ?? 0));
    parts.push(html("h3", { class: "part" }, `Close up: ${hit.act ?? hit.name}, from 1 s before to recovery`),
      rows(Math.max(hit.from_s - 1, 0), Math.min(to + 0.2, hit.from_s + 2), true, "hit" + hit.from_s));
  }
  byId("times").replaceChildren(...parts);
}

start();
