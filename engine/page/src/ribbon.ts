// A route as a ribbon, coloured by a radius.
import { beliefScale, css, ink, type RGB } from "./colour";
import { toPx, type View } from "./paint";
import type { EN } from "./project";

/** The colours of radii, by their logarithm from the least to the greatest. */
export function ribbonScale(radii: number[], dark: boolean): { least: number; most: number; colours: RGB[]; of(r: number): RGB } {
  const least = Math.max(Math.min(...radii), 0.01);
  const most = Math.max(...radii, least * 1.01);
  const colours = beliefScale(dark);
  const of = (r: number) => {
    const t = Math.log(Math.max(r, least) / least) / Math.log(most / least);
    return colours[Math.min(colours.length - 1, Math.floor(t * colours.length))];
  };
  return { least, most, colours, of };
}

/** Draws a ribbon; where the radius is beyond the limit it is wide, and edged. */
export function drawRibbon(ctx: CanvasRenderingContext2D, v: View, line: EN[], radii: number[], limitM: number, dark: boolean) {
  const scale = ribbonScale(radii, dark);
  const at = line.map((p) => toPx(v, p));
  const c = ink(dark);
  ctx.lineCap = "round";
  ctx.setLineDash([]);
  for (const layer of ["edge", "halo", "colour"] as const) {
    for (let i = 1; i < at.length; i++) {
      const beyond = radii[i] > limitM;
      if (layer === "edge" && !beyond) continue;
      ctx.beginPath();
      ctx.moveTo(at[i - 1].x, at[i - 1].y);
      ctx.lineTo(at[i].x, at[i].y);
      ctx.lineWidth = { edge: 15, halo: beyond ? 12 : 8, colour: beyond ? 10 : 5 }[layer];
      ctx.strokeStyle = { edge: c.mark, halo: c.halo, colour: css(scale.of(radii[i])) }[layer];
      ctx.stroke();
    }
  }
}
