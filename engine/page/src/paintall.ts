// All that lies over the ground, in its order.
import type { Posterior } from "../../client/web/leadline/v1/posterior_pb.js";
import { Status } from "../../client/web/leadline/v1/posterior_pb.js";
import type { Ground } from "./ground";
import { fix, past } from "./live";
import { begin, lay, drawArea, drawCircle, drawMark, drawTrack, type View } from "./paint";
import { drawBelief, type Placed } from "./paintbelief";
import { closed, corners, spot, spotRadiusM } from "./pointing";
import type { LonLat } from "./project";
import { dark } from "./settings";
import { radiiHold } from "./worry";

export function beginTop(canvas: HTMLCanvasElement, v: View, g: Ground, p: Posterior, belief: Placed | undefined, names: HTMLCanvasElement) {
  const [ctx, d] = [begin(canvas, v), dark.peek()];
  const at = (q: LonLat) => g.frame.forward(q);
  if (belief) drawBelief(ctx, v, belief, d);
  lay(ctx, names, v);
  drawTrack(ctx, v, past.peek().map((q) => (q.located ? at(q.at) : undefined)), d);
  const mean = at(p.mean as LonLat);
  if (p.radii) drawCircle(ctx, v, mean, p.radii.radius95M, radiiHold(p) ? [] : [3, 5], d);
  if (p.status === Status.LOCATED || p.modes.length < 2) drawMark(ctx, v, mean, "", "cross", d);
  // The likeliest is drawn last, so that it is on top.
  else [...p.modes].reverse().forEach((m, i) => drawMark(ctx, v, at(m.mean as LonLat), String(p.modes.length - i), "disc", d));
  const f = fix.peek();
  if (f) drawMark(ctx, v, at(f.at), "", "square", d);
  drawArea(ctx, v, corners.peek().map(at), closed.peek(), d);
  if (spot.peek()) {
    const q = at(spot.peek()!);
    drawArea(ctx, v, circle(spotRadiusM.peek()).map((c) => ({ e: q.e + c.e, n: q.n + c.n })), true, d);
  }
}

/** A circle as an area. */
export const circle = (radiusM: number) =>
  Array.from({ length: 48 }, (_, i) => ({ e: radiusM * Math.cos((2 * Math.PI * i) / 48), n: radiusM * Math.sin((2 * Math.PI * i) / 48) }));
