// What the page is fed. A report holds one document, embedded as JSON; a live
// page would be sent one too and then change it in place, and call the same
// draw functions again. Nothing here computes a figure: every number drawn
// stands in the document. Keys and units are those of the result format: _s
// seconds, _km kilometres, _bps bit/s; what cannot be said is absent or null.

export interface Doc {
  contract: 1;
  runs: Run[]; // the base first, then plans; of one seed
}

export interface Run {
  plan: string;
  seed: number;
  length_s: number;
  warm_up_s: number;
  periods: Period[];
  classes: { name: string }[]; // highest first
  sites?: Site[];
  fibres: Fibre[];
  circuits: Circuit[];
  cuts?: Cut[];
  loads?: Load[];
  tails?: Tail[];
  series?: Series[];
}

export interface Period { name: string; kind: string; from_s: number; to_s: number; act?: string }
export interface Site { name: string; x_km?: number; y_km?: number }
export interface Fibre {
  name: string; ends?: string[]; length_km: number; channels?: number; slots: number; slots_used: number; risk_groups?: string[];
}
export interface Turn { at_s: number; state: string; fibres: string[] }
export interface Circuit {
  name: string; ends?: string[]; carries?: string; recovery?: string; slots?: number; payload_bps: number; turns?: Turn[];
}
export interface Cut { fibre: string; where_km: number; from_s: number; to_s?: number; one_way?: string }
export interface Load { circuit: string; from: string; period: string; classes: { class: string; bps: number }[] }
export interface Tail { class: string; period: string; delay_s: number[]; at_least_ratio: number[] }
export interface Series {
  class: string; close?: boolean; from_s: number; width_s: number;
  offered_packets: number[]; delivered_packets: number[]; lost_packets: number[]; delivered_bits: number[];
  mean_delay_s: (number | null)[]; max_delay_s: (number | null)[];
}

// periodAt is the period that holds t, or none in the warm-up.
export function periodAt(run: Run, t: number): Period | undefined {
  return run.periods.find((p) => p.from_s <= t && t < p.to_s);
}

// turnAt is how a circuit stood at t.
export function turnAt(c: Circuit, t: number): Turn | undefined {
  let last: Turn | undefined;
  for (const turn of c.turns ?? []) if (turn.at_s <= t) last = turn;
  return last;
}
