// Drawing a road that posts listen to, and what they hear on it.
import { create } from "@bufbuild/protobuf";
import { DrawMapResponseSchema } from "../../client/web/leadline/v1/draw_pb.js";
import type { HeardVehicle, RoadShape, TrafficPicture } from "../../client/web/leadline/v1/traffic_pb.js";
import { beliefScale, bins, css, ink } from "./colour";
import { sheet, type Ground } from "./ground";
import { toPx, type Ctx, type View } from "./paint";
import { Frame, type EN, type LonLat } from "./project";

/** A road for a drawing: its corners and how far along the road each is, m. */
export type Laid = { shape: RoadShape; ground: Ground; corners: EN[]; alongM: number[] };

let last: Laid | undefined;

/** Lays a road on a ground of its own, of which it is the only line. */
export function layRoad(name: string, shape: RoadShape): Laid {
  if (last?.shape === shape) return last;
  const frame = new Frame(shape.centreline[0] as LonLat);
  const corners = shape.centreline.map((p) => frame.forward(p as LonLat));
  const alongM = [0];
  for (let i = 1; i < corners.length; i++) alongM.push(alongM[i - 1] + Math.hypot(corners[i].e - corners[i - 1].e, corners[i].n - corners[i - 1].n));
  const scale = shape.lengthM / (alongM[alongM.length - 1] || 1);
  const cm = corners.map((p) => [Math.round(100 * p.e), Math.round(100 * p.n)]);
  const steps = (axis: 0 | 1) => cm.map((p, i) => p[axis] - (i ? cm[i - 1][axis] : 0));
  const drawing = create(DrawMapResponseSchema, { map: name, lines: [{ class: "primary", eastCm: steps(0), northCm: steps(1) }] });
  const whole = sheet(drawing);
  for (const p of shape.posts) {
    const at = frame.forward(p.at as LonLat);
    const b = whole.box;
    [b.west, b.east, b.south, b.north] = [Math.min(b.west, at.e), Math.max(b.east, at.e), Math.min(b.south, at.n), Math.max(b.north, at.n)];
  }
  const room = Math.max(40, (whole.box.east - whole.box.west) / 20, (whole.box.north - whole.box.south) / 20);
  whole.box = { west: whole.box.west - room, east: whole.box.east + room, south: whole.box.south - room, north: whole.box.north + room };
  return (last = { shape, ground: { map: name, frame, fingerprint: name, whole, trouble: "" }, corners, alongM: alongM.map((m) => m * scale) });
}

/** The place so many metres along a road, and the road's direction there as a unit vector. */
export function placeOn({ corners, alongM }: Laid, m: number): { at: EN; way: EN } {
  let i = 1;
  while (i < corners.length - 1 && alongM[i] < m) i++;
  const [a, b] = [corners[i - 1], corners[i]];
  const t = Math.min(1, Math.max(0, (m - alongM[i - 1]) / (alongM[i] - alongM[i - 1] || 1)));
  const long = Math.hypot(b.e - a.e, b.n - a.n) || 1;
  return { at: { e: a.e + t * (b.e - a.e), n: a.n + t * (b.n - a.n) }, way: { e: (b.e - a.e) / long, n: (b.n - a.n) / long } };
}

/** The places of a road between two distances, its corners among them. */
function stretch(r: Laid, fromM: number, toM: number): EN[] {
  const long = r.shape.lengthM;
  const [from, to] = [Math.min(Math.max(fromM, 0), long), Math.min(Math.max(toM, 0), long)];
  return [placeOn(r, from).at, ...r.corners.filter((_, i) => r.alongM[i] > from && r.alongM[i] < to), placeOn(r, to).at];
}

function trace(ctx: Ctx, v: View, points: EN[]) {
  ctx.beginPath();
  points.forEach((p, i) => {
    const { x, y } = toPx(v, p);
    if (i) ctx.lineTo(x, y);
    else ctx.moveTo(x, y);
  });
}

/** How many powers of ten of intensity the colours span, and the greatest, a kilometre: a vehicle in 100 m, or what there is. */
export const intensityDecades = 2;
export const densest = (p: TrafficPicture) => Math.max(10, ...p.intensityPerKm);

/** Which way a vehicle drives, if that is known with 95 %. */
export const wayOf = (u: HeardVehicle) => (u.forward >= 0.95 ? "forward" : u.forward <= 0.05 ? "backward" : "unknown");

export function paintTraffic(ctx: Ctx, v: View, r: Laid, p: TrafficPicture, marked: bigint | undefined, dark: boolean) {
  const c = ink(dark);
  ctx.setLineDash([]);
  ctx.lineJoin = "round";
  const side = postsSide(r);
  paintIntensity(ctx, v, r, p, -side, dark);
  paintPosts(ctx, v, r, dark);
  for (const l of p.lines) {
    const { at, way } = placeOn(r, l.atM);
    const { x, y } = toPx(v, at);
    const [dx, dy] = [way.n * 12, way.e * 12]; // across, on a screen
    for (const [colour, width] of [[c.halo, 5.5], [c.area, 2.6]] as const) {
      ctx.beginPath();
      ctx.moveTo(x - dx, y - dy);
      ctx.lineTo(x + dx, y + dy);
      ctx.strokeStyle = colour;
      ctx.lineWidth = width;
      ctx.stroke();
    }
    // Its name is on the far side of the ribbon.
    const [tx, ty] = [x + side * way.n * 40, y + side * way.e * 40];
    write(ctx, short(l.name), tx, ty, c.area, c.halo, "600 12px");
    write(ctx, `${l.forward} forward, ${l.backward} backward`, tx, ty + 15, c.area, c.halo);
  }
  const written: { x: number; y: number; w: number }[] = [];
  for (const u of p.vehicles) paintVehicle(ctx, v, r, u, u.label === marked, written, dark);
}

/** On which side of the road most posts are: 1 on the left of forward, -1 on the right. */
function postsSide(r: Laid): 1 | -1 {
  let sum = 0;
  for (const q of r.shape.posts) {
    const p = r.ground.frame.forward(q.at as LonLat);
    let [best, off] = [Infinity, 0];
    for (let i = 1; i < r.corners.length; i++) {
      const middle = placeOn(r, (r.alongM[i - 1] + r.alongM[i]) / 2);
      const [e, n] = [p.e - middle.at.e, p.n - middle.at.n];
      const far = Math.hypot(e, n);
      if (far < best) [best, off] = [far, middle.way.e * n - middle.way.n * e];
    }
    sum += Math.sign(off);
  }
  return sum >= 0 ? 1 : -1;
}

/** Draws the intensity as a ribbon beside the road, so that vehicles do not hide it. */
function paintIntensity(ctx: Ctx, v: View, r: Laid, p: TrafficPicture, side: number, dark: boolean) {
  const [n, most, scale] = [p.intensityPerKm.length, densest(p), beliefScale(dark)];
  const step = r.shape.lengthM / Math.max(n, 1);
  const off = 15 * side * v.mPerPx;
  const beside = (m: number) => {
    const { at, way } = placeOn(r, m);
    return { e: at.e - off * way.n, n: at.n + off * way.e };
  };
  ctx.lineCap = "butt";
  for (let i = 0; i < n; i++) {
    const t = 1 + Math.log10(p.intensityPerKm[i] / most) / intensityDecades;
    if (!(t >= 0)) continue;
    trace(ctx, v, [beside(i * step), beside((i + 1) * step + 0.5 * v.mPerPx)]);
    ctx.strokeStyle = css(scale[Math.min(bins - 1, Math.floor(t * bins))]);
    ctx.lineWidth = 9;
    ctx.stroke();
  }
}

function paintPosts(ctx: Ctx, v: View, r: Laid, dark: boolean) {
  const c = ink(dark);
  let writtenTo = -Infinity;
  for (const p of r.shape.posts) {
    const { x, y } = toPx(v, r.ground.frame.forward(p.at as LonLat));
    if (p.axisDeg !== undefined) {
      const a = (p.axisDeg * Math.PI) / 180;
      ctx.beginPath();
      ctx.moveTo(x - 13 * Math.sin(a), y + 13 * Math.cos(a));
      ctx.lineTo(x + 13 * Math.sin(a), y - 13 * Math.cos(a));
      ctx.strokeStyle = c.area;
      ctx.lineWidth = 1.6;
      ctx.stroke();
    }
    ctx.fillStyle = c.halo;
    ctx.fillRect(x - 6.5, y - 6.5, 13, 13);
    ctx.fillStyle = c.area;
    ctx.fillRect(x - 4.5, y - 4.5, 9, 9);
    const wide = 7 * Math.min(p.post.length, 16);
    if (x - wide / 2 < writtenTo) continue;
    writtenTo = x + wide / 2 + 6;
    write(ctx, short(p.post), x, y - 15, c.area, c.halo);
  }
}

function paintVehicle(ctx: Ctx, v: View, r: Laid, u: HeardVehicle, marked: boolean, written: { x: number; y: number; w: number }[], dark: boolean) {
  const c = ink(dark);
  const { at, way } = placeOn(r, u.positionM);
  const { x, y } = toPx(v, at);
  ctx.globalAlpha = 0.35 + 0.65 * u.existence;
  const reach = stretch(r, u.positionM - 2 * u.positionSigmaM, u.positionM + 2 * u.positionSigmaM);
  const ends = [reach[0], reach[reach.length - 1]].map((p) => toPx(v, p));
  for (const [colour, width] of [[c.halo, 5], [c.mark, 2]] as const) {
    trace(ctx, v, reach);
    ctx.strokeStyle = colour;
    ctx.lineWidth = width;
    ctx.stroke();
    for (const e of ends) {
      ctx.beginPath();
      ctx.moveTo(e.x + way.n * 6, e.y + way.e * 6);
      ctx.lineTo(e.x - way.n * 6, e.y - way.e * 6);
      ctx.stroke();
    }
  }
  ctx.beginPath();
  if (wayOf(u) === "unknown") ctx.arc(x, y, 6, 0, 2 * Math.PI);
  else {
    const s = wayOf(u) === "forward" ? 1 : -1;
    const [ax, ay] = [way.e * s, -way.n * s]; // ahead, on a screen
    ctx.moveTo(x + 10 * ax, y + 10 * ay);
    ctx.lineTo(x - 7 * ax - 6.5 * ay, y - 7 * ay + 6.5 * ax);
    ctx.lineTo(x - 7 * ax + 6.5 * ay, y - 7 * ay - 6.5 * ax);
    ctx.closePath();
  }
  ctx.strokeStyle = c.halo;
  ctx.lineWidth = 4;
  ctx.stroke();
  ctx.fillStyle = c.mark;
  ctx.fill();
  if (marked) {
    ctx.beginPath();
    ctx.arc(x, y, 16, 0, 2 * Math.PI);
    for (const [colour, width] of [[c.halo, 5], [c.track, 2.6]] as const) {
      ctx.strokeStyle = colour;
      ctx.lineWidth = width;
      ctx.stroke();
    }
  }
  const text = String(u.label);
  const label = { x, y: y - 19, w: 8 * text.length + 5 };
  while (written.some((o) => Math.abs(o.x - label.x) < (o.w + label.w) / 2 && Math.abs(o.y - label.y) < 14)) label.y -= 14;
  written.push(label);
  write(ctx, text, label.x, label.y, c.mark, c.halo, "600 13px");
  ctx.globalAlpha = 1;
}

const short = (name: string) => (name.length > 16 ? name.slice(0, 15) + "…" : name);

function write(ctx: Ctx, text: string, x: number, y: number, colour: string, halo: string, font = "12px") {
  ctx.font = `${font} system-ui, sans-serif`;
  ctx.textAlign = "center";
  ctx.textBaseline = "middle";
  ctx.lineJoin = "round";
  ctx.strokeStyle = halo;
  ctx.lineWidth = 4;
  ctx.strokeText(text, x, y);
  ctx.fillStyle = colour;
  ctx.fillText(text, x, y);
}
