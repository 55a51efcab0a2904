// Small helpers. Text always goes in as text, never as markup.

const space = "http://www.w3.org/2000/svg";

export type Attributes = Record<string, string | number>;

export function svg(tag: string, attributes: Attributes, ...inside: (Node | string)[]): SVGElement {
  const e = document.createElementNS(space, tag);
  for (const k in attributes) e.setAttribute(k, String(attributes[k]));
  e.append(...inside);
  return e;
}

export function html(tag: string, attributes: Attributes, ...inside: (Node | string)[]): HTMLElement {
  const e = document.createElement(tag);
  for (const k in attributes) e.setAttribute(k, String(attributes[k]));
  e.append(...inside);
  return e;
}

// colour is a colour of the palette, which the style sheet holds for light and
// dark.
export function colour(name: string): string {
  return getComputedStyle(document.documentElement).getPropertyValue("--" + name).trim();
}

// classColours is the number of colours for classes; further classes start
// again, and differ by their place and name.
export const classColours = 6;

const units = { s: ["s", "ms", "µs", "ns"], "bit/s": ["Gb/s", "Mb/s", "kb/s", "b/s"] };

// quantity writes a number with three significant digits in a unit of its size.
export function quantity(v: number, unit: "s" | "bit/s"): string {
  const names = units[unit];
  let size = unit === "s" ? 1 : 1e9;
  let i = 0;
  while (i < names.length - 1 && Math.abs(v) < size && v !== 0) {
    size /= 1e3;
    i++;
  }
  if (v === 0) return "0 " + (unit === "s" ? "s" : "b/s");
  return Number((v / size).toPrecision(3)) + " " + names[i];
}

// share writes a ratio as a percentage, or as a power of ten when it is small.
export function share(v: number): string {
  if (v === 0) return "0 %";
  return Number((v * 100).toPrecision(3)) + " %";
}
