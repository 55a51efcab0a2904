// Charts of time series and of the tails of delay distributions.

import uPlot from "./vendor/uplot/uPlot.esm.js";
import { Period, Run, Series, Tail } from "./contract";
import { colour, html, quantity, share } from "./dom";

// A look tells the base from a plan by colour and by stroke.
export interface Look { name: string; colour: string; dash?: number[]; width: number }

export function looks(runs: Run[]): Look[] {
  return runs.map((r, i) => ({
    name: r.plan, colour: colour(i === 0 && runs.length > 1 ? "base" : "plan"), dash: i === 0 && runs.length > 1 ? [5, 3] : undefined, width: i === 0 ? 1.5 : 1.75,
  }));
}

// what a panel shows over time.
export type Figure = "delay" | "loss" | "load";

export const figures: { id: Figure; title: string; unit: "s" | "share" | "bit/s" }[] = [
  { id: "delay", title: "Delay: mean, and greatest (thin)", unit: "s" },
  { id: "loss", title: "Lost share of what was sent", unit: "share" },
  { id: "load", title: "Delivered rate", unit: "bit/s" },
];

type Column = (number | null)[];

// column is a figure of a series; the last bin ends with the run.
function column(s: Series, figure: Figure | "most", end: number): Column {
  switch (figure) {
    case "delay": return s.mean_delay_s;
    case "most": return s.max_delay_s;
    case "loss": return s.offered_packets.map((n, i) => (n > 0 ? s.lost_packets[i] / n : null));
    case "load": return s.delivered_bits.map((b, i) => b / Math.min(s.width_s, end - s.from_s - i * s.width_s));
  }
}

const write = { s: (v: number) => quantity(v, "s"), share, "bit/s": (v: number) => quantity(v, "bit/s") };

// bands marks the periods as bands behind a chart, and acts as lines over it.
function bands(periods: Period[]): uPlot.Plugin {
  return {
    hooks: {
      drawClear: (u: uPlot) => {
        const { ctx } = u;
        const { left, top, width, height } = u.bbox;
        const x = (t: number) => Math.min(Math.max(u.valToPos(t, "x", true), left), left + width);
        ctx.save();
        for (const p of periods) {
          if (p.kind !== "normal") {
            ctx.fillStyle = colour("band-" + p.kind);
            ctx.fillRect(x(p.from_s), top, x(p.to_s) - x(p.from_s), height);
          }
        }
        ctx.restore();
      },
      draw: (u: uPlot) => {
        const { ctx } = u;
        ctx.save();
        ctx.strokeStyle = colour("act");
        ctx.lineWidth = 1.5 * devicePixelRatio;
        for (const p of periods) {
          if (!p.act || p.from_s < u.scales.x.min! || p.from_s > u.scales.x.max!) continue;
          const x = u.valToPos(p.from_s, "x", true);
          ctx.beginPath();
          ctx.moveTo(x, u.bbox.top);
          ctx.lineTo(x, u.bbox.top + u.bbox.height);
          ctx.stroke();
        }
        ctx.restore();
      },
    },
  };
}

function axes(x: (v: number) => string, y: (v: number) => string): uPlot.Axis[] {
  const both = { stroke: colour("quiet"), grid: { stroke: colour("grid"), width: 1 }, ticks: { stroke: colour("grid"), width: 1, size: 4 }, font: "11px system-ui, sans-serif" };
  return [
    { ...both, size: 26, gap: 2, space: 60, values: (_u: uPlot, v: (number | null)[]) => v.map((a) => (a === null ? "" : x(a))) },
    { ...both, size: 62, gap: 4, space: 26, values: (_u: uPlot, v: (number | null)[]) => v.map((a) => (a === null ? "" : y(a))) },
  ];
}

const seconds = (v: number) => String(Number(v.toFixed(6))) + " s";

export interface Panel { make(into: HTMLElement): uPlot }

// overTime is a panel of one figure of one class over from..to.
export function overTime(runs: Run[], all: Look[], cls: string, figure: Figure, from: number, to: number, close: boolean, sync: string): Panel {
  const unit = figures.find((f) => f.id === figure)!.unit;
  const xs: number[][] = [];
  const tables: uPlot.AlignedData[] = [];
  const series: uPlot.Series[] = [{ label: "sent", value: (_u: uPlot, v: number | null) => (v === null ? "" : seconds(v)) }];
  runs.forEach((run, i) => {
    const s = (run.series ?? []).find((x) => x.class === cls && !!x.close === close && x.from_s < to && x.from_s + x.width_s * x.offered_packets.length > from);
    if (!s) return;
    const x = s.offered_packets.map((_, k) => s.from_s + s.width_s * (k + 0.5));
    const columns: Column[] = [column(s, figure, run.length_s)];
    const value = (_u: uPlot, v: number | null) => (v === null ? "–" : write[unit](v));
    const stepped = figure !== "delay" && close ? uPlot.paths.stepped!({ align: 1 }) : undefined;
    series.push({ label: all[i].name, stroke: all[i].colour, width: all[i].width, dash: all[i].dash, points: { show: false }, value, paths: stepped });
    if (figure === "delay") {
      columns.push(column(s, "most", run.length_s));
      series.push({ label: all[i].name + " greatest", stroke: all[i].colour, width: 0.6, dash: all[i].dash, points: { show: false }, value });
    }
    xs.push(x);
    tables.push([x, ...columns] as uPlot.AlignedData);
  });
  const data = tables.length > 0 ? uPlot.join(tables) : ([[]] as unknown as uPlot.AlignedData);
  const last = runs[runs.length - 1];
  return {
    make: (into) => new uPlot({
      ...size(into), series, axes: axes(seconds, write[unit]), legend: { show: false }, plugins: [bands(last.periods), readout(into)],
      cursor: { sync: { key: sync }, drag: { x: true, y: false }, points: { size: 5 } },
      scales: { x: { time: false, range: (_u, lo, hi) => (lo === hi || lo === null ? [from, to] : [Math.max(lo, from), Math.min(hi, to)]) }, y: { range: (_u, _lo, hi) => [0, hi > 0 ? hi * 1.05 : 1] } },
    }, data, into),
  };
}

// tail is a panel of the delay distribution of one class in one period, of
// each run: the share of packets that took so long or longer.
export function tail(runs: Run[], all: Look[], cls: string, period: string): Panel {
  const tables: uPlot.AlignedData[] = [];
  const series: uPlot.Series[] = [{ label: "delay", value: (_u: uPlot, v: number | null) => (v === null ? "" : quantity(v, "s")) }];
  let [least, most] = [Infinity, 0];
  runs.forEach((run, i) => {
    const t: Tail | undefined = (run.tails ?? []).find((x) => x.class === cls && x.period === period);
    if (!t) return;
    const [x, y] = [[...t.delay_s], [...t.at_least_ratio]];
    for (let k = 1; k < x.length; k++) if (x[k] <= x[k - 1]) x[k] = x[k - 1] * (1 + 1e-9); // a scale wants them apart
    least = Math.min(least, x[0]);
    most = Math.max(most, x[x.length - 1]);
    tables.push([x, y]);
    series.push({ label: all[i].name, stroke: all[i].colour, width: all[i].width + 0.25, dash: all[i].dash, spanGaps: true, points: { show: false },
      value: (_u: uPlot, v: number | null) => (v === null ? "–" : share(v)) });
  });
  const data = tables.length > 0 ? uPlot.join(tables, tables.map((t) => t.map(() => 2))) : ([[]] as unknown as uPlot.AlignedData);
  const lines = axes((v) => quantity(v, "s"), share);
  lines[0].splits = (_u: uPlot, _a: number, lo: number, hi: number) => rounds(lo, hi);
  lines[1].splits = () => [1e-5, 1e-4, 1e-3, 1e-2, 1e-1, 1];
  for (const a of lines) a.filter = (_u: uPlot, v: number[]) => v;
  return {
    make: (into) => new uPlot({
      ...size(into, 170), series, axes: lines, legend: { show: false }, plugins: [readout(into)], cursor: { drag: { x: true, y: false }, points: { size: 5 } },
      scales: { x: { time: false, distr: 3, range: () => [least * 0.95, Math.max(most * 1.05, least * 1.2)] }, y: { distr: 3, range: () => [1e-5, 1] } },
    }, data, into),
  };
}

// rounds are a few round numbers between two.
function rounds(lo: number, hi: number): number[] {
  const out: number[] = [];
  const steps = hi / lo > 40 ? [1, 10] : hi / lo > 4 ? [1, 2, 5, 10] : undefined;
  if (steps) {
    for (let d = 10 ** Math.floor(Math.log10(lo)); d <= hi; d *= 10) for (const k of steps.slice(0, -1)) if (k * d >= lo && k * d <= hi) out.push(k * d);
    return out;
  }
  const rough = (hi - lo) / 4;
  const size = 10 ** Math.floor(Math.log10(rough));
  const step = size * [1, 2, 5, 10].find((k) => k * size >= rough)!;
  for (let k = Math.ceil(lo / step); k * step <= hi; k++) out.push(k * step);
  return out;
}

const size = (into: HTMLElement, height = 150) => ({ width: Math.max(into.clientWidth, 220), height });

// readout writes the values under the cursor into the caption of a chart.
function readout(into: HTMLElement): uPlot.Plugin {
  const out = html("output", { class: "readout" });
  into.before(out);
  return {
    hooks: {
      setLegend: (u: uPlot) => {
        const at = u.legend.idxs?.[0];
        if (at === null || at === undefined) {
          out.textContent = "";
          return;
        }
        out.textContent = (u.legend.values ?? []).map((v, i) => `${u.series[i].label} ${v["_"] ?? ""}`).join(" · ");
      },
      destroy: () => out.remove(),
    },
  };
}
