// The console: a session while it runs. It is fed by server-sent events and
// draws the map with the drawing functions of the report; what a person does
// goes to the server as an act, and comes back in the next update.

import { Circuit, Cut, Fibre, Load, Run, Site } from "./contract";
import { classColours, html, quantity, share, svg } from "./dom";
import { draw, slotsAt } from "./map";

interface Ground {
  scenario: string; about?: string; plan: string; seed: number; length_s: number; warm_up_s: number;
  classes: string[]; sites: Site[]; fibres: Fibre[]; aggregates: string[]; circuits: { name: string; carries: string; slots: number }[];
}
interface ClassNow { name: string; delivered_packets: number; lost_packets: number; delivered_bits: number; mean_delay_s?: number }
interface Snapshot {
  at_s: number; from_s: number; over: boolean; acts: number; classes: ClassNow[];
  circuits: (Circuit & { state: string })[]; fibres: Fibre[]; cuts: Cut[] | null; loads: Load[] | null;
  steps: { act: string; subject: string; state: string; detail?: string }[] | null;
  events: { at_s: number; what: string; subject: string; detail?: string }[] | null;
  moved: { aggregate: string; carried_by: string[] }[] | null;
}
interface Pace { speed: number; paused: boolean; behind: boolean }
interface State { pace: Pace; snapshot: Snapshot }

const byId = (id: string) => document.getElementById(id)!;
const mostPoints = 300; // of a strip
const mostLines = 200; // of the log

let at = ""; // the address of the session
let ground: Ground;
let last: State | undefined;
const strips: Strip[] = [];

async function start(): Promise<void> {
  const list = await ask("GET", "/api/sessions") as { sessions: number[] } | undefined;
  const id = Number(location.hash.slice(1)) || list?.sessions[0];
  if (!id) return say("There is no session.");
  at = "/api/sessions/" + id;
  ground = await ask("GET", at) as Ground;
  if (!ground) return;
  byId("title").textContent = `${ground.scenario} under ${ground.plan}, seed ${ground.seed}`;
  byId("about").textContent = ground.about ?? "";
  controls();
  deeds();
  ground.classes.forEach((name, k) => strips.push(new Strip(name, k)));
  byId("strips").replaceChildren(...strips.map((s) => s.node));
  const stream = new EventSource(at + "/stream?after=0");
  stream.addEventListener("gap", () => strips.forEach((s) => s.clear()));
  stream.addEventListener("state", (e) => take(JSON.parse((e as MessageEvent<string>).data) as State));
  stream.addEventListener("error", () => say("The stream was interrupted; it is taken up again."));
}

function say(text: string): void {
  byId("said").textContent = text;
}

// ask talks to the server; what is refused is said and gives undefined.
async function ask(method: string, path: string, body?: unknown): Promise<unknown> {
  try {
    const answer = await fetch(path, { method, body: body === undefined ? undefined : JSON.stringify(body) });
    const data = await answer.json() as { error?: string };
    if (answer.ok) return data;
    say(data.error ?? answer.statusText);
  } catch (e) {
    say("The server does not answer: " + String(e));
  }
  return undefined;
}

async function act(words: Record<string, unknown>, text: string): Promise<void> {
  const done = await ask("POST", at + "/acts", words) as { at_s: number } | undefined;
  if (done) say(`${text} at ${Number(done.at_s.toFixed(6))} s` + (last?.pace.paused ? "; it happens once the clock runs" : ""));
}

// take shows an update.
let painting = false;
function take(s: State): void {
  last = s;
  const x = s.snapshot;
  const span = x.at_s - x.from_s;
  if (span > 0) x.classes.forEach((c, k) => strips[k].add(x.at_s, span, c));
  const log = byId("log");
  for (const e of x.events ?? []) log.prepend(html("li", {}, `${e.at_s.toFixed(4)} s  ${e.what} ${e.subject}` + (e.detail ? `: ${e.detail}` : "")));
  while (log.children.length > mostLines) log.lastChild!.remove();
  if (painting) return; // several updates, one picture
  painting = true;
  requestAnimationFrame(() => {
    painting = false;
    paint();
  });
}

function paint(): void {
  const { snapshot: x, pace } = last!;
  byId("clock").textContent = `${x.at_s.toFixed(3)} s of ${ground.length_s} s` + (x.over ? ", over" : pace.paused ? ", paused" : pace.behind ? ", behind its speed" : "");
  const pause = byId("pause");
  pause.textContent = pace.paused ? "Run" : "Pause";
  (byId("speed") as HTMLSelectElement).value = String(pace.speed);
  const run: Run = {
    plan: ground.plan, seed: ground.seed, length_s: ground.length_s, warm_up_s: 0, classes: ground.classes.map((name) => ({ name })),
    periods: [{ name: "now", kind: "normal", from_s: 0, to_s: Infinity }],
    sites: ground.sites, fibres: x.fibres, cuts: x.cuts ?? [], loads: x.loads ?? [],
    // What is being restored will be up: the drawing asks for a turn to come.
    circuits: x.circuits.map((c) => c.state === "restoring" ? { ...c, turns: [...(c.turns ?? []), { at_s: Infinity, state: "up", fibres: [] }] } : c),
  };
  const map = byId("map") as unknown as SVGSVGElement;
  draw(map, run, x.at_s, slotsAt(run, x.at_s));
  touch(map);
  strips.forEach((s) => s.paint());
  byId("moved").textContent = (x.moved ?? []).map((m) => `${m.aggregate} over ${m.carried_by.join(", ")}`).join("; ") || "nothing";
}

const dark = (fibre: string) => (last?.snapshot.cuts ?? []).some((k) => k.fibre === fibre && k.to_s === undefined);

// touch lays lines over the fibres that can be clicked and that the keyboard
// reaches. They stay where the map is drawn anew, so that neither a click nor
// the focus is lost.
let over: SVGGElement | undefined;
function touch(map: SVGSVGElement): void {
  if (!over) {
    over = svg("g", { class: "touch" }) as SVGGElement;
    const top = byId("over") as unknown as SVGSVGElement;
    for (const e of map.querySelectorAll<SVGGElement>("[data-fibre]")) {
      const bore = e.querySelector<SVGPathElement>(".fibre-bore")!;
      const [a, b] = [bore.getPointAtLength(0), bore.getPointAtLength(bore.getTotalLength())];
      over.append(touchable(top, e.dataset.fibre!, a, b));
    }
    top.append(over);
    top.setAttribute("viewBox", map.getAttribute("viewBox")!);
  }
  for (const e of over.children) {
    const name = (e as SVGElement).dataset.fibre!;
    const text = dark(name) ? `repair ${name}` : `cut ${name}`;
    if (e.getAttribute("aria-label") !== text) e.setAttribute("aria-label", text);
  }
}

function touchable(top: SVGSVGElement, name: string, a: DOMPoint, b: DOMPoint): SVGElement {
  const fibre = ground.fibres.find((f) => f.name === name)!;
  const line = svg("line", { x1: a.x, y1: a.y, x2: b.x, y2: b.y, "data-fibre": name, tabindex: 0, role: "button" });
  const go = (part: number) => {
    if (dark(name)) return void act({ repair: name }, `Repaired ${name}`);
    const km = Number((Math.min(Math.max(part, 0), 1) * fibre.length_km).toFixed(3));
    void act({ cut: name, where: `${km}km from ${fibre.ends![0]}` }, `Cut ${name} ${km} km from ${fibre.ends![0]}`);
  };
  line.addEventListener("click", (e) => {
    const p = new DOMPoint((e as MouseEvent).clientX, (e as MouseEvent).clientY).matrixTransform(top.getScreenCTM()!.inverse());
    const [dx, dy] = [b.x - a.x, b.y - a.y];
    go(((p.x - a.x) * dx + (p.y - a.y) * dy) / (dx * dx + dy * dy));
  });
  line.addEventListener("keydown", (e) => {
    const key = (e as KeyboardEvent).key;
    if (key !== "Enter" && key !== " ") return;
    e.preventDefault();
    go(0.5);
  });
  return line;
}

function button(text: string, go: () => void, id?: string): HTMLElement {
  const b = html("button", { type: "button", ...(id ? { id } : {}) }, text);
  b.addEventListener("click", go);
  return b;
}

function choice(label: string, id: string, options: [string, string][]): HTMLElement {
  return html("label", {}, label + " ", html("select", { id }, ...options.map(([value, text]) => html("option", { value }, text))));
}

const chosen = (id: string) => (byId(id) as HTMLSelectElement | HTMLInputElement).value;

function controls(): void {
  const pace = (body: unknown) => void ask("POST", at + "/pace", body);
  const speed = choice("speed", "speed", [["0.01", "0.01"], ["0.1", "0.1"], ["0.5", "0.5"], ["1", "1"], ["2", "2"], ["10", "10"], ["0", "as fast as possible"]]);
  speed.addEventListener("change", () => pace({ speed: Number(chosen("speed")) }));
  byId("controls").replaceChildren(
    button("Run", () => pace({ paused: !last?.pace.paused }), "pause"),
    button("Step 0.1 s", () => pace({ step_s: 0.1 }), "step"), speed,
    html("output", { id: "clock" }),
    html("a", { id: "save", href: at + "/acts", download: "session.yaml" }, "Save what was done"),
    html("a", { href: at + "/results", download: "result.json" }, "Save the result"),
  );
}

// deeds are the acts that are not done on the map.
function deeds(): void {
  const names = (list: string[]): [string, string][] => list.map((n) => [n, n]);
  const moved = ground.circuits.filter((c) => c.carries === "moved").map((c) => c.name);
  const field = (title: string, ...inside: Node[]) => html("fieldset", {}, html("legend", {}, title), ...inside);
  byId("acts").replaceChildren(
    field("Aggregate", choice("aggregate", "aggregate", names(ground.aggregates)), choice("circuit", "onto", names(moved)),
      button("Move", () => void act({ move: chosen("aggregate"), onto: [chosen("onto")] }, `Moved ${chosen("aggregate")}`), "move"),
      button("Return", () => void act({ return: chosen("aggregate") }, `Returned ${chosen("aggregate")}`), "return"),
      html("p", {}, "moved: ", html("span", { id: "moved" }))),
    field("Circuit", choice("circuit", "circuit", names(ground.circuits.map((c) => c.name))),
      button("Set up", () => void act({ "set-up": chosen("circuit") }, `Asked for ${chosen("circuit")}`), "set-up"),
      button("Tear down", () => void act({ "tear-down": chosen("circuit") }, `Tearing down ${chosen("circuit")}`), "tear-down"),
      html("label", {}, "slots ", html("input", { id: "slots", type: "number", min: 1, max: 80, value: 2 })),
      button("Resize", () => void act({ resize: chosen("circuit"), slots: Number(chosen("slots")) }, `Resizing ${chosen("circuit")}`), "resize")),
    field("Load", choice("class", "class", names(ground.classes)),
      html("label", {}, "per cent ", html("input", { id: "percent", type: "number", min: 0, max: 1000, value: 130 })),
      button("Scale", () => void act({ scale: chosen("class"), by: chosen("percent") + "%" }, `Scaled ${chosen("class")}`), "scale")),
  );
}

interface Point { t: number; rate: number; loss: number | undefined; delay: number | undefined }

// A Strip shows how a class fares: what is delivered, what is lost, how long it
// takes, over the last updates.
class Strip {
  readonly node: HTMLElement;
  private points: Point[] = [];
  private readonly lines: { path: SVGElement; now: HTMLElement; of: (p: Point) => number | undefined; text: (v: number) => string }[];

  constructor(readonly name: string, k: number) {
    const line = (title: string, of: (p: Point) => number | undefined, text: (v: number) => string) => {
      const path = svg("path", { class: "strip-line swatch-" + (k % classColours) });
      const now = html("output", { "data-figure": title });
      return { path, now, of, text, title };
    };
    const lines = [line("delivered", (p) => p.rate, (v) => quantity(v, "bit/s")), line("lost", (p) => p.loss, share), line("mean delay", (p) => p.delay, (v) => quantity(v, "s"))];
    this.lines = lines;
    this.node = html("div", { class: "strip", "data-class": name }, html("h3", {}, name),
      ...lines.map((l) => html("div", { class: "strip-part" }, html("span", { class: "quiet" }, l.title + " "), l.now,
        svg("svg", { viewBox: "0 0 300 40", preserveAspectRatio: "none", "aria-hidden": "true" }, l.path))));
  }

  add(t: number, span: number, c: ClassNow): void {
    const fates = c.delivered_packets + c.lost_packets;
    this.points.push({ t, rate: c.delivered_bits / span, loss: fates > 0 ? c.lost_packets / fates : undefined, delay: c.mean_delay_s });
    if (this.points.length > mostPoints) this.points.shift();
  }

  clear(): void {
    this.points = [];
  }

  paint(): void {
    if (this.points.length === 0) return;
    const from = this.points[0].t;
    const span = Math.max(this.points[this.points.length - 1].t - from, 1e-9);
    for (const l of this.lines) {
      const most = Math.max(...this.points.map((p) => l.of(p) ?? 0)) || 1;
      let d = "";
      let pen = false;
      for (const p of this.points) {
        const v = l.of(p);
        if (v !== undefined) d += `${pen ? "L" : "M"}${(((p.t - from) / span) * 300).toFixed(1)} ${(38 - (v / most) * 36).toFixed(1)}`;
        pen = v !== undefined;
      }
      l.path.setAttribute("d", d);
      const now = l.of(this.points[this.points.length - 1]);
      l.now.textContent = now === undefined ? "–" : l.text(now);
    }
  }
}

void start();
