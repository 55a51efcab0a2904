// The map: two decks, one above the other. On the lower deck sites stand at
// their places and fibres run between them, as wide as they have channels and
// filled as far as their slots are taken. On the upper deck stand the routers;
// circuits run over the fibres they use, and inside a circuit ribbons show the
// load of each class, each way on its own side.

import { Circuit, Cut, Fibre, periodAt, Run, turnAt } from "./contract";
import { classColours, quantity, share, svg } from "./dom";

type Point = [number, number];

const width = 1000;
const margin = 70;
const gap = 100; // between the decks

interface Ground {
  at: Map<string, Point>; // sites on the lower deck
  lift: number; // from the lower deck up to the other
  height: number;
  crowded: boolean; // many fibres: less is written
  fine: number; // by which what is drawn is smaller than in a small network
}

// ground lays the sites out: where the scenario says, else on an ellipse.
function ground(run: Run): Ground {
  const sites = run.sites ?? [];
  const placed = sites.every((s) => s.x_km !== undefined && s.y_km !== undefined);
  const raw: Point[] = sites.map((s, i) => {
    const a = (2 * Math.PI * i) / Math.max(sites.length, 1);
    return placed ? [s.x_km!, s.y_km!] : [500 * Math.cos(a), 500 * Math.sin(a)];
  });
  const xs = raw.map((p) => p[0]);
  const ys = raw.map((p) => p[1]);
  const [x0, x1, y0, y1] = [Math.min(...xs), Math.max(...xs), Math.min(...ys), Math.max(...ys)];
  const crowded = run.fibres.length > 12;
  const deckHeight = crowded ? 420 : 250;
  // Decks lean back as far as they must to fit, within reason.
  let scale = (width - 2 * margin) / Math.max(x1 - x0, 1);
  const tilt = Math.min(Math.max(deckHeight / (Math.max(y1 - y0, 1) * scale), 0.45), 0.8);
  scale = Math.min(scale, deckHeight / tilt / Math.max(y1 - y0, 1));
  const deck = Math.max((y1 - y0) * scale * tilt, 40);
  const lift = deck + gap;
  const at = new Map<string, Point>();
  sites.forEach((s, i) => {
    at.set(s.name, [
      width / 2 + (raw[i][0] - (x0 + x1) / 2) * scale,
      margin + lift + (raw[i][1] - y0) * scale * tilt,
    ]);
  });
  return { at, lift, height: margin + lift + deck + 60, crowded, fine: Math.min(Math.max(Math.sqrt(10 / Math.max(run.fibres.length, 1)), 0.45), 1) };
}

const raise = (p: Point, by: number): Point => [p[0], p[1] - by];
const mix = (a: Point, b: Point, t: number): Point => [a[0] + (b[0] - a[0]) * t, a[1] + (b[1] - a[1]) * t];

function normal(a: Point, b: Point): Point {
  const d = Math.hypot(b[0] - a[0], b[1] - a[1]) || 1;
  return [-(b[1] - a[1]) / d, (b[0] - a[0]) / d];
}

// aside moves a polyline to its side, by offsets[i] along segment i; corners
// are mitred.
function aside(points: Point[], offsets: number[]): Point[] {
  return points.map((p, i) => {
    const before = i > 0 ? normal(points[i - 1], p) : undefined;
    const after = i < points.length - 1 ? normal(p, points[i + 1]) : undefined;
    if (!before || !after) {
      const n = (before ?? after)!;
      const by = offsets[before ? i - 1 : i];
      return [p[0] + n[0] * by, p[1] + n[1] * by];
    }
    const [bo, ao] = [offsets[i - 1], offsets[i]];
    const cross = before[0] * after[1] - before[1] * after[0];
    if (Math.abs(cross) < 0.2) {
      const by = (bo + ao) / 2;
      return [p[0] + ((before[0] + after[0]) / 2) * by, p[1] + ((before[1] + after[1]) / 2) * by];
    }
    // where the two lines moved aside meet
    return [
      p[0] + (bo * after[1] - ao * before[1]) / cross,
      p[1] + (ao * before[0] - bo * after[0]) / cross,
    ];
  });
}

// lane is a polyline moved aside that still begins and ends where the line
// does: at the routers, from which it fans out.
function lane(line: Point[], offsets: number[]): Point[] {
  const points = aside(line, offsets);
  const draw = (end: number, next: number) => {
    const d = Math.hypot(points[next][0] - points[end][0], points[next][1] - points[end][1]) || 1;
    points[end] = mix(points[end], points[next], Math.min(30 / d, 0.3));
  };
  const last = points.length - 1;
  draw(0, 1);
  draw(last, last - 1);
  return [line[0], ...points, line[last]];
}

const path = (points: Point[]) => "M" + points.map((p) => p[0].toFixed(1) + " " + p[1].toFixed(1)).join("L");

// other is the end of a fibre that is not the given one.
const other = (f: Fibre, site: string) => (f.ends![0] === site ? f.ends![1] : f.ends![0]);

// route lists the sites that a circuit passes at t.
function route(fibres: Map<string, Fibre>, c: Circuit, along: string[]): string[] {
  const sites = [c.ends![0]];
  for (const name of along) {
    const f = fibres.get(name);
    if (!f?.ends) return [];
    sites.push(other(f, sites[sites.length - 1]));
  }
  return sites;
}

// The look of a circuit: what has become of it at t.
export type Look = "up" | "detoured" | "broken" | "restoring" | "draining" | "none";

export function lookOf(run: Run, c: Circuit, t: number): Look {
  const now = turnAt(c, t);
  if (!now || now.fibres.length === 0) return "none";
  if (now.state === "draining") return "draining";
  const dark = (run.cuts ?? []).some((k) => k.from_s <= t && t < (k.to_s ?? Infinity) && now.fibres.includes(k.fibre));
  if (now.state === "down" || dark) {
    const again = (c.turns ?? []).some((turn) => turn.at_s > t && turn.state === "up");
    return again && c.recovery !== "none" ? "restoring" : "broken";
  }
  const first = (c.turns ?? []).find((turn) => turn.fibres.length > 0)!;
  return first.fibres.join() === now.fibres.join() ? "up" : "detoured";
}

const words: Record<Look, string> = {
  up: "up", detoured: "on a detour", broken: "broken", restoring: "broken, being restored", draining: "draining", none: "not set up",
};

// draw fills a drawing with the network of run as it stood at t.
export function draw(into: SVGElement, run: Run, t: number, used: Map<string, number>): void {
  if (!run.sites?.length) {
    into.replaceChildren();
    return;
  }
  const g = ground(run);
  into.setAttribute("viewBox", `0 0 ${width} ${Math.round(g.height)}`);
  into.replaceChildren(decks(g), stems(g), lower(run, g, t, used), upper(run, g, t));
}

// slotsAt counts the slots that circuits hold on each fibre at t.
export function slotsAt(run: Run, t: number): Map<string, number> {
  const used = new Map<string, number>();
  for (const c of run.circuits) {
    const now = turnAt(c, t);
    if (!now || c.slots === undefined) continue;
    for (const f of now.fibres) used.set(f, (used.get(f) ?? 0) + c.slots);
  }
  return used;
}

function decks(g: Ground): SVGElement {
  const top = margin + g.lift - 34;
  const deck = (y: number, height: number, label: string) => {
    const lean = 26;
    return [
      svg("path", { class: "deck", d: path([[lean, y], [width - lean, y], [width - 4, y + height], [4, y + height]]) + "Z" }),
      svg("text", { class: "deck-name", x: 20, y: y + height - 10 }, label),
    ];
  };
  const height = g.height - top - 8;
  return svg("g", {}, ...deck(top, height, "Fibres and slots"), ...deck(top - g.lift, height - 12, "Routers and circuits"));
}

function stems(g: Ground): SVGElement {
  return svg("g", {}, ...[...g.at.values()].map((p) => {
    const q = raise(p, g.lift);
    return svg("line", { class: "stem", x1: p[0], y1: p[1], x2: q[0], y2: q[1] });
  }));
}

// bore is how wide a fibre is drawn.
const bore = (f: Fibre) => Math.min(8 + 1.2 * Math.sqrt(f.channels ?? 1), 20);

function lower(run: Run, g: Ground, t: number, used: Map<string, number>): SVGElement {
  const layer = svg("g", { class: "lower" });
  const groups = [...new Set(run.fibres.flatMap((f) => f.risk_groups ?? []))];
  for (const f of run.fibres) {
    if (!f.ends) continue;
    const [a, b] = [g.at.get(f.ends[0])!, g.at.get(f.ends[1])!];
    const taken = used.get(f.name) ?? 0;
    const full = f.slots > 0 ? Math.min(taken / f.slots, 1) : 0;
    const w = bore(f) * g.fine;
    const item = svg("g", { "data-fibre": f.name }, svg("title", {}, `${f.name}: ${f.length_km} km, ${f.channels ?? 0} channels, ${taken} of ${f.slots} slots taken` +
      (f.risk_groups ? `; shares ${f.risk_groups.join(", ")}` : "")));
    item.append(svg("path", { class: "fibre-wall", d: path([a, b]), "stroke-width": w + 2 }));
    item.append(svg("path", { class: "fibre-bore", d: path([a, b]), "stroke-width": w }));
    // The fill lies along the lower wall and rises as slots are taken.
    if (full > 0) {
      const fill = Math.max(w * full, 1.6);
      item.append(svg("path", { class: "fibre-fill", d: path(aside([a, b], [(a[0] <= b[0] ? 1 : -1) * (w - fill) / 2])), "stroke-width": fill }));
    }
    for (const name of f.risk_groups ?? []) {
      const k = groups.indexOf(name);
      item.append(svg("path", { class: "risk", d: path([a, b]), "stroke-width": w + 8, "stroke-dasharray": `1.6 ${7 + 5 * k}` }));
    }
    const m = mix(a, b, 0.5);
    const n = normal(a[0] <= b[0] ? a : b, a[0] <= b[0] ? b : a);
    const steep = Math.abs(n[0]) > 0.35;
    item.append(svg("text", { class: "small", x: m[0] + n[0] * 24 * g.fine, y: m[1] + n[1] * 24 * g.fine + 4, "text-anchor": steep ? (n[0] < 0 ? "end" : "start") : "middle" },
      (g.crowded ? "" : `${f.length_km} km · `) + `${taken}/${f.slots}` + (f.risk_groups ? ` · ${f.risk_groups.join(", ")}` : "")));
    layer.append(item);
  }
  for (const k of run.cuts ?? []) if (k.from_s <= t && t < (k.to_s ?? Infinity)) layer.append(cutMark(run, g, k));
  for (const [name, p] of g.at) {
    layer.append(svg("ellipse", { class: "site", cx: p[0], cy: p[1], rx: 11 * g.fine, ry: 7 * g.fine }));
    layer.append(svg("text", { class: "site-name", x: p[0], y: p[1] + 12 + 13 * g.fine, "text-anchor": "middle" }, name));
  }
  return layer;
}

// cutMark is a cross at the place of a cut, with the distances to both ends.
function cutMark(run: Run, g: Ground, k: Cut): SVGElement {
  const f = run.fibres.find((x) => x.name === k.fibre)!;
  const [a, b] = [g.at.get(f.ends![0])!, g.at.get(f.ends![1])!];
  const p = mix(a, b, k.where_km / f.length_km);
  const r = 11;
  const mark = svg("g", { class: "cut" }, svg("title", {}, `${k.fibre} cut ${k.where_km.toFixed(0)} km from ${f.ends![0]}`));
  mark.append(svg("circle", { class: "cut-ground", cx: p[0], cy: p[1], r: r + 3 }));
  mark.append(svg("path", { class: "cut-cross", d: `M${p[0] - r} ${p[1] - r}l${2 * r} ${2 * r}M${p[0] + r} ${p[1] - r}l${-2 * r} ${2 * r}` }));
  mark.append(svg("text", { class: "cut-text", x: p[0], y: p[1] - r - 8, "text-anchor": "middle" },
    `cut ${k.where_km.toFixed(0)} km from ${f.ends![0]}` + (k.one_way ? `, only from ${k.one_way}` : "")));
  return mark;
}

const widest = 24; // width of a circuit, casing included

function upper(run: Run, g: Ground, t: number): SVGElement {
  const fibres = new Map(run.fibres.map((f) => [f.name, f]));
  const period = periodAt(run, t);
  const band = widest * g.fine;
  const layer = svg("g", { class: "upper" });
  // Circuits over one fibre lie side by side: each has a lane on it.
  const lanes = new Map<string, Circuit[]>();
  const shown = run.circuits.filter((c) => c.ends && lookOf(run, c, t) !== "none");
  for (const c of shown) for (const f of turnAt(c, t)!.fibres) lanes.set(f, [...(lanes.get(f) ?? []), c]);
  const labels: SVGElement[] = [];
  for (const c of shown) {
    const look = lookOf(run, c, t);
    const along = turnAt(c, t)!.fibres;
    const sites = route(fibres, c, along);
    if (sites.length < 2) continue;
    const line = sites.map((s) => raise(g.at.get(s)!, g.lift));
    const offsets = along.map((f, i) => {
      const peers = lanes.get(f)!;
      const sign = fibres.get(f)!.ends![0] === sites[i] ? 1 : -1; // a lane is a side of the fibre, not of the way
      return sign * (peers.indexOf(c) - (peers.length - 1) / 2) * (band + 3);
    });
    const centre = lane(line, offsets);
    const item = svg("g", { class: "circuit " + look }, svg("title", {}, describe(run, c, look, period?.name)));
    item.append(svg("path", { class: "casing", d: path(centre), "stroke-width": band }));
    item.append(svg("path", { class: "inside", d: path(centre), "stroke-width": band - Math.min(4, band / 4) }));
    if (look === "up" || look === "detoured" || look === "draining") ribbons(item, run, c, line, offsets, band, period?.name);
    if (look === "detoured" || look === "broken" || look === "restoring") {
      item.append(svg("path", { class: "state", d: path(centre), "stroke-width": look === "detoured" ? 2 : 4 }));
    }
    layer.append(item);
    labels.push(label(run, c, look, centre, along, g.crowded, period?.name));
  }
  layer.append(...labels);
  for (const [name, p] of g.at) {
    const q = raise(p, g.lift);
    layer.append(svg("rect", { class: "router", x: q[0] - 15 * g.fine, y: q[1] - 10 * g.fine, width: 30 * g.fine, height: 20 * g.fine, rx: 4 }));
    layer.append(svg("text", { class: "site-name", x: q[0], y: q[1] - 8 - 10 * g.fine, "text-anchor": "middle" }, name));
  }
  return layer;
}

// loadOf is what a circuit carried from a site in a period.
function loadOf(run: Run, c: Circuit, from: string, period: string | undefined): { class: string; bps: number }[] {
  return (run.loads ?? []).find((l) => l.circuit === c.name && l.from === from && l.period === period)?.classes ?? [];
}

const sum = (classes: { bps: number }[]) => classes.reduce((a, x) => a + x.bps, 0);

// ribbons draws the load of each class: from the first end on the one side of
// the middle, to it on the other; a ribbon that filled its side would fill the
// circuit.
function ribbons(item: SVGElement, run: Run, c: Circuit, line: Point[], offsets: number[], band: number, period: string | undefined): void {
  const side = (band - Math.min(5, band / 3)) / 2;
  item.append(svg("path", { class: "middle", d: path(lane(line, offsets)) }));
  c.ends!.forEach((from, way) => {
    let at = 0.5;
    for (const load of loadOf(run, c, from, period)) {
      const wide = (load.bps / c.payload_bps) * (side - 0.5);
      if (wide < 0.25) continue;
      const by = (at + wide / 2) * (way === 0 ? 1 : -1);
      const k = run.classes.findIndex((x) => x.name === load.class) % classColours;
      item.append(svg("path", { class: "ribbon class-" + k, d: path(lane(line, offsets.map((o) => o + by))), "stroke-width": wide.toFixed(2) }));
      at += wide;
    }
  });
}

function describe(run: Run, c: Circuit, look: Look, period: string | undefined): string {
  const ways = c.ends!.map((from) => {
    const loads = loadOf(run, c, from, period);
    return `from ${from}: ` + (loads.length ? loads.map((l) => `${l.class} ${quantity(l.bps, "bit/s")}`).join(", ") : "nothing");
  });
  return `${c.name}, ${words[look]}, ${quantity(c.payload_bps, "bit/s")}` + (c.carries === "moved" ? ", carries what is moved onto it" : "") + "\n" + ways.join("\n");
}

// label names a circuit in the middle of its longest stretch.
function label(run: Run, c: Circuit, look: Look, centre: Point[], along: string[], crowded: boolean, period: string | undefined): SVGElement {
  let best = 1;
  let length = 0;
  for (let i = 1; i <= along.length; i++) { // the first and the last stretch fan out
    const d = Math.hypot(centre[i + 1][0] - centre[i][0], centre[i + 1][1] - centre[i][1]);
    if (d > length) [best, length] = [i, d];
  }
  // Circuits that share a stretch have their names beside each other.
  const m = mix(centre[best], centre[best + 1], along.length > 1 ? 0.28 : 0.5);
  const most = Math.max(...c.ends!.map((from) => sum(loadOf(run, c, from, period)))) / c.payload_bps;
  const text = crowded && look === "up" ? share(Number((most).toFixed(2))) : look === "broken" || look === "restoring" ? `${c.name} ${look}` : `${c.name} ${share(Number(most.toPrecision(2)))}` + (look === "detoured" ? " detour" : "");
  const wide = 7 * text.length + 8;
  return svg("g", { class: "tag " + look },
    svg("rect", { x: m[0] - wide / 2, y: m[1] - 9, width: wide, height: 18, rx: 9 }),
    svg("text", { x: m[0], y: m[1] + 4, "text-anchor": "middle" }, text));
}
