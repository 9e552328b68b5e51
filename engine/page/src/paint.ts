// Drawing on a canvas, in the metres of a map's frame.
import type { Relief } from "../../client/web/leadline/v1/draw_pb.js";
import { ground as groundColour, ink } from "./colour";
import type { Box, Ground, Sheet } from "./ground";
import { namePlaces, drawPlaces } from "./paintplaces";
import { layPlaces } from "./places";
import type { EN } from "./project";

/** Where the canvas looks: its middle, the metres of a pixel, its size in pixels. */
export type View = { e: number; n: number; mPerPx: number; width: number; height: number };

export const toPx = (v: View, p: EN) => ({ x: v.width / 2 + (p.e - v.e) / v.mPerPx, y: v.height / 2 - (p.n - v.n) / v.mPerPx });
export const toEN = (v: View, x: number, y: number): EN => ({ e: v.e + (x - v.width / 2) * v.mPerPx, n: v.n - (y - v.height / 2) * v.mPerPx });
export const boxOf = (v: View): Box => {
  const [w, h] = [(v.width / 2) * v.mPerPx, (v.height / 2) * v.mPerPx];
  return { west: v.e - w, east: v.e + w, south: v.n - h, north: v.n + h };
};

export type Ctx = CanvasRenderingContext2D;

/** Sets a canvas up for a view, cleared, in pixels of the page. */
export function begin(canvas: HTMLCanvasElement, v: View): Ctx {
  const ratio = devicePixelRatio || 1;
  const [w, h] = [Math.round(v.width * ratio), Math.round(v.height * ratio)];
  if (canvas.width !== w || canvas.height !== h) [canvas.width, canvas.height] = [w, h];
  const ctx = canvas.getContext("2d")!;
  ctx.setTransform(ratio, 0, 0, ratio, 0, 0);
  ctx.clearRect(0, 0, v.width, v.height);
  return ctx;
}

/** Draws in metres, north up, around the middle of a view. */
export function metres(ctx: Ctx, v: View, draw: () => void) {
  ctx.save();
  ctx.translate(v.width / 2, v.height / 2);
  ctx.scale(1 / v.mPerPx, -1 / v.mPerPx);
  ctx.translate(-v.e, -v.n);
  draw();
  ctx.restore();
}

const reliefs = new WeakMap<Relief, Map<string, HTMLCanvasElement>>();

/** A relief as a picture, its colours spanning the heights from low to high. */
function reliefPicture(r: Relief, low: number, high: number, dark: boolean): HTMLCanvasElement {
  const key = `${low} ${high} ${dark}`;
  let of = reliefs.get(r);
  if (!of) reliefs.set(r, (of = new Map()));
  const known = of.get(key);
  if (known) return known;
  const table = Array.from({ length: 256 }, (_, b) => {
    const h = r.lowestM + ((b - 1) / 254) * (r.highestM - r.lowestM);
    return groundColour(high > low ? (h - low) / (high - low) : 0.5, h < 0, dark);
  });
  const image = new ImageData(r.columns, r.rows);
  for (let i = 0; i < r.height.length; i++) {
    const b = r.height[i];
    if (b === 0) continue;
    // Low contrast: the belief is what must be seen.
    const light = 1 + (r.shade[i] / 255 - Math.SQRT1_2) * (dark ? 0.7 : 0.32);
    const [red, green, blue] = table[b];
    image.data.set([red * light, green * light, blue * light, 255], 4 * i);
  }
  const canvas = document.createElement("canvas");
  [canvas.width, canvas.height] = [r.columns, r.rows];
  canvas.getContext("2d")!.putImageData(image, 0, 0);
  of.set(key, canvas);
  return canvas;
}

const widths = [0, 3, 4.5, 6]; // of a road by weight, px

/** Where a name is written, px: its middle, and how far it reaches. */
export type Taken = { x: number; y: number; r: number };

/** Draws the ground: relief, roads, places. */
export function drawGround(canvas: HTMLCanvasElement, v: View, g: Ground, dark: boolean) {
  const ctx = begin(canvas, v);
  const colours = ink(dark);
  ctx.fillStyle = colours.paper;
  ctx.fillRect(0, 0, v.width, v.height);
  const all = g.whole.drawing.relief;
  for (const s of [g.whole, g.fine]) {
    const r = s?.drawing.relief;
    if (!r || !all) continue;
    metres(ctx, v, () => {
      ctx.imageSmoothingEnabled = true;
      ctx.drawImage(reliefPicture(r, all.lowestM, all.highestM, dark), r.westM - r.stepM / 2, r.southM - r.stepM / 2, r.columns * r.stepM, r.rows * r.stepM);
    });
  }
  const s = bestSheet(g, v);
  // Far off, roads are thinner.
  const thin = Math.min(1, Math.max(0.35, 4 / v.mPerPx));
  metres(ctx, v, () => {
    ctx.lineJoin = ctx.lineCap = "round";
    for (const casing of [true, false]) {
      for (const p of s.paths) {
        ctx.strokeStyle = casing ? colours.casing : p.tunnel ? colours.tunnel : colours.road;
        ctx.lineWidth = (widths[p.weight] * thin + (casing ? 1.6 : 0)) * v.mPerPx;
        ctx.setLineDash(p.tunnel && casing ? [5 * v.mPerPx, 4 * v.mPerPx] : []);
        if (p.tunnel && casing) ctx.lineCap = "butt";
        ctx.stroke(p.path);
        ctx.lineCap = "round";
      }
    }
  });
  drawPlaces(ctx, v, layPlaces(g.frame), dark);
}

/** Writes the names of places and roads, on a canvas that is laid over what must not hide them. */
export function writeNames(canvas: HTMLCanvasElement, v: View, g: Ground, dark: boolean) {
  const ctx = begin(canvas, v);
  const taken: Taken[] = [];
  namePlaces(ctx, v, layPlaces(g.frame), dark, taken);
  drawNames(ctx, v, bestSheet(g, v), dark, taken);
}

/** Lays one canvas of a view over another. */
export function lay(ctx: Ctx, canvas: HTMLCanvasElement, v: View) {
  if (canvas.width > 0 && canvas.height > 0) ctx.drawImage(canvas, 0, 0, v.width, v.height);
}

function bestSheet(g: Ground, v: View): Sheet {
  const [f, b] = [g.fine, boxOf(v)];
  const covers = f && b.west >= f.box.west && b.east <= f.box.east && b.south >= f.box.south && b.north <= f.box.north;
  return f && covers && f.drawing.detailM < g.whole.drawing.detailM ? f : g.whole;
}

/** Writes each road's name once, along its longest straight part in view, where there is room. */
function drawNames(ctx: Ctx, v: View, s: Sheet, dark: boolean, taken: Taken[]) {
  const longest = new Map<string, { px: number; x: number; y: number; angle: number; weight: number }>();
  for (const l of s.lines) {
    if (!l.name) continue;
    for (let i = 1; i < l.points.length; i++) {
      const [a, b] = [toPx(v, l.points[i - 1]), toPx(v, l.points[i])];
      const [x, y] = [(a.x + b.x) / 2, (a.y + b.y) / 2];
      if (x < 20 || y < 12 || x > v.width - 20 || y > v.height - 12) continue;
      const px = Math.hypot(b.x - a.x, b.y - a.y);
      if (px <= (longest.get(l.name)?.px ?? 0)) continue;
      let angle = Math.atan2(b.y - a.y, b.x - a.x);
      if (Math.abs(angle) > Math.PI / 2) angle -= Math.sign(angle) * Math.PI;
      longest.set(l.name, { px, x, y, angle, weight: l.weight });
    }
  }
  ctx.font = "12px system-ui, sans-serif";
  ctx.textAlign = "center";
  ctx.textBaseline = "middle";
  ctx.lineJoin = "round";
  let written = 0;
  for (const [name, at] of [...longest].sort((a, b) => b[1].weight - a[1].weight || b[1].px - a[1].px)) {
    const text = name.length > 40 ? name.slice(0, 39) + "…" : name;
    const w = ctx.measureText(text).width;
    if (w > 1.4 * at.px || taken.some((t) => Math.hypot(t.x - at.x, t.y - at.y) < t.r + w / 2)) continue;
    taken.push({ x: at.x, y: at.y, r: w / 2 });
    ctx.save();
    ctx.translate(at.x, at.y);
    ctx.rotate(at.angle);
    ctx.strokeStyle = ink(dark).halo;
    ctx.lineWidth = 3.5;
    ctx.strokeText(text, 0, -9);
    ctx.fillStyle = ink(dark).name;
    ctx.fillText(text, 0, -9);
    ctx.restore();
    if (++written >= 60) return;
  }
}

/** Draws a line through places, broken where one is not known. */
export function drawTrack(ctx: Ctx, v: View, points: (EN | undefined)[], dark: boolean, colour: "track" | "area" = "track") {
  ctx.beginPath();
  points.forEach((p, i) => {
    if (!p) return;
    const { x, y } = toPx(v, p);
    if (points[i - 1]) ctx.lineTo(x, y);
    else ctx.moveTo(x, y);
  });
  ctx.lineJoin = "round";
  ctx.strokeStyle = ink(dark)[colour];
  ctx.lineWidth = 1.8;
  ctx.setLineDash([1, 3.5]);
  ctx.lineCap = "round";
  ctx.stroke();
  ctx.setLineDash([]);
}

/** Draws a circle of so many metres. */
export function drawCircle(ctx: Ctx, v: View, at: EN, radiusM: number, dash: number[], dark: boolean) {
  const { x, y } = toPx(v, at);
  const r = radiusM / v.mPerPx;
  if (!Number.isFinite(r) || r > 1e5) return;
  for (const [colour, width] of [[ink(dark).halo, 4], [ink(dark).mark, 1.6]] as const) {
    ctx.beginPath();
    ctx.arc(x, y, Math.max(r, 2), 0, 2 * Math.PI);
    ctx.strokeStyle = colour;
    ctx.lineWidth = width;
    ctx.setLineDash(dash);
    ctx.stroke();
  }
  ctx.setLineDash([]);
}

/** Draws a mark with a text: a disc, or a square for what a satellite said. */
export function drawMark(ctx: Ctx, v: View, at: EN, text: string, shape: "disc" | "cross" | "square", dark: boolean) {
  const { x, y } = toPx(v, at);
  const c = ink(dark);
  const colour = shape === "square" ? c.fix : c.mark;
  const trace = () => {
    ctx.beginPath();
    if (shape === "square") ctx.rect(x - 6, y - 6, 12, 12);
    else if (shape === "disc") ctx.arc(x, y, 9, 0, 2 * Math.PI);
    else {
      ctx.moveTo(x - 9, y);
      ctx.lineTo(x + 9, y);
      ctx.moveTo(x, y - 9);
      ctx.lineTo(x, y + 9);
    }
  };
  trace();
  ctx.strokeStyle = c.halo;
  ctx.lineWidth = 6;
  ctx.stroke();
  trace();
  if (shape === "disc") {
    ctx.fillStyle = colour;
    ctx.fill();
  } else {
    ctx.strokeStyle = colour;
    ctx.lineWidth = 2.4;
    ctx.stroke();
  }
  if (!text) return;
  ctx.font = "600 11px system-ui, sans-serif";
  ctx.textAlign = "center";
  ctx.textBaseline = "middle";
  if (shape !== "disc") {
    ctx.strokeStyle = c.halo;
    ctx.lineWidth = 4;
    ctx.strokeText(text, x, y - 14);
  }
  ctx.fillStyle = shape === "disc" ? c.halo : colour;
  ctx.fillText(text, x, shape === "disc" ? y + 0.5 : y - 14);
}

/** Draws an area, or its outline as far as it goes. */
export function drawArea(ctx: Ctx, v: View, corners: EN[], closed: boolean, dark: boolean) {
  if (corners.length === 0) return;
  ctx.beginPath();
  corners.forEach((p, i) => {
    const { x, y } = toPx(v, p);
    if (i) ctx.lineTo(x, y);
    else ctx.moveTo(x, y);
  });
  if (closed) ctx.closePath();
  ctx.lineJoin = "round";
  ctx.strokeStyle = ink(dark).halo;
  ctx.lineWidth = 4.5;
  ctx.stroke();
  ctx.strokeStyle = ink(dark).area;
  ctx.lineWidth = 2.2;
  ctx.stroke();
  for (const p of closed ? [] : corners) {
    const { x, y } = toPx(v, p);
    ctx.fillStyle = ink(dark).area;
    ctx.fillRect(x - 3, y - 3, 6, 6);
  }
}
