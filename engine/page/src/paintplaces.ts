// Drawing places of the person's own.
import { ink } from "./colour";
import { toPx, type Ctx, type Taken, type View } from "./paint";
import type { EN } from "./project";
import type { Laid } from "./places";

/** Draws places: areas as outlines with a thin wash, lines, points as diamonds. */
export function drawPlaces(ctx: Ctx, v: View, places: Laid[], dark: boolean) {
  if (places.length === 0) return;
  const c = ink(dark);
  const trace = (points: EN[], path: Path2D, closed: boolean) => {
    points.forEach((p, i) => {
      const { x, y } = toPx(v, p);
      if (i) path.lineTo(x, y);
      else path.moveTo(x, y);
    });
    if (closed) path.closePath();
  };
  const [areas, lines, marks] = [new Path2D(), new Path2D(), new Path2D()];
  for (const p of places) {
    for (const rings of p.areas) for (const r of rings) trace(r, areas, true);
    for (const l of p.lines) trace(l, lines, false);
    for (const q of p.points) {
      const { x, y } = toPx(v, q);
      if (x < -9 || y < -9 || x > v.width + 9 || y > v.height + 9) continue;
      marks.moveTo(x, y - 6);
      for (const [dx, dy] of [[6, 0], [0, 6], [-6, 0]]) marks.lineTo(x + dx, y + dy);
      marks.closePath();
    }
  }
  ctx.save();
  ctx.lineJoin = ctx.lineCap = "round";
  ctx.globalAlpha = 0.12;
  ctx.fillStyle = c.place;
  ctx.fill(areas, "evenodd");
  ctx.globalAlpha = 1;
  for (const [colour, wider] of [[c.halo, 2.5], [c.place, 0]] as const) {
    ctx.strokeStyle = colour;
    ctx.lineWidth = 1.6 + wider;
    ctx.stroke(areas);
    ctx.setLineDash(wider ? [] : [7, 3]);
    ctx.stroke(lines);
    ctx.setLineDash([]);
    ctx.stroke(marks);
  }
  ctx.fillStyle = c.place;
  ctx.fill(marks);
  ctx.restore();
}

/** Writes the places' names where there is room, and notes where that is. */
export function namePlaces(ctx: Ctx, v: View, places: Laid[], dark: boolean, taken: Taken[]) {
  const c = ink(dark);
  ctx.font = "italic 12px system-ui, sans-serif";
  ctx.textBaseline = "middle";
  ctx.lineJoin = "round";
  let written = 0;
  for (const p of places) {
    if (!p.name) continue;
    const at = toPx(v, p.at);
    if (at.x < -40 || at.y < 0 || at.x > v.width + 40 || at.y > v.height) continue;
    const text = p.name.length > 40 ? p.name.slice(0, 39) + "…" : p.name;
    const w = ctx.measureText(text).width;
    const aside = p.points.length ? 10 : -w / 2;
    const middle = { x: at.x + aside + w / 2, y: at.y, r: w / 2 };
    if (taken.some((t) => Math.abs(t.y - middle.y) < 15 && Math.abs(t.x - middle.x) < t.r + middle.r + 6)) continue;
    taken.push(middle);
    ctx.textAlign = "left";
    ctx.strokeStyle = c.halo;
    ctx.lineWidth = 3.5;
    ctx.strokeText(text, at.x + aside, at.y);
    ctx.fillStyle = c.place;
    ctx.fillText(text, at.x + aside, at.y);
    if (++written >= 80) return;
  }
}
