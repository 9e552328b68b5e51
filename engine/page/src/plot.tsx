// A figure over time.
import { useEffect, useLayoutEffect, useRef } from "preact/hooks";
import uPlot from "uplot";
import { figure, length } from "./format";
import { dark, units } from "./settings";

export type Line = { label: string; values: (number | null)[]; dash?: number[]; colour: "first" | "second" | "quiet" };
type Props = { title: string; unit: string; times: number[]; lines: Line[]; band?: boolean; log?: boolean; says: string; over?: "the way" | "the road"; span?: boolean; mark?: number };

const colours = () =>
  dark.value
    ? { first: "#8fb4ff", second: "#ffb454", quiet: "#8b98a5", text: "#c3ccd4", grid: "#242b31", band: "rgba(143,180,255,.18)" }
    : { first: "#2456c9", second: "#a34a00", quiet: "#5d6670", text: "#33373b", grid: "#ece9e2", band: "rgba(36,86,201,.14)" };

/** Lines over time; with a band between the second and the third. */
export function Plot(props: Props) {
  const box = useRef<HTMLDivElement>(null);
  const plot = useRef<uPlot | undefined>(undefined);
  const mark = useRef(props.mark);
  const shape = JSON.stringify([dark.value, units.value, props.unit, props.band, props.log, props.lines.map((l) => l.label)]);
  // At once: an effect that waits for a quiet moment leaves a busy page without lines.
  useLayoutEffect(() => {
    const c = colours();
    const axis = { stroke: c.text, grid: { stroke: c.grid, width: 1 }, ticks: { stroke: c.grid, width: 1 }, font: "11px system-ui, sans-serif" };
    plot.current = new uPlot(
      {
        width: box.current!.clientWidth || 300,
        height: 120,
        legend: { show: false },
        cursor: { y: false, drag: { x: false, y: false }, points: { size: 5 } },
        tzDate: (s) => uPlot.tzDate(new Date(s * 1000), "UTC"),
        scales: { x: { time: !props.over }, y: props.log ? { distr: 3 } : { range: (_, a, b) => spread(a, b) } },
        axes: [
          { ...axis, space: 58, size: 26, gap: 3, values: (_, ts) => ts.map((t) => (props.over ? length(t) : new Date(t * 1000).toISOString().slice(11, 19))) },
          {
            ...axis,
            ...(props.log && { grid: { ...axis.grid, filter: tens }, ticks: { ...axis.ticks, filter: tens } }),
            size: 50,
            gap: 3,
            space: 24,
            values: (_, vs) => labels(vs),
          },
        ],
        series: [{}, ...props.lines.map((l) => ({ label: l.label, stroke: c[l.colour], width: l.colour === "quiet" ? 1 : 1.8, dash: l.dash, spanGaps: props.span, points: { show: false } }))],
        hooks: {
          draw: [
            (u) => {
              if (mark.current === undefined) return;
              const x = Math.round(u.valToPos(mark.current, "x", true)) + 0.5;
              u.ctx.strokeStyle = c.text;
              u.ctx.lineWidth = 1;
              u.ctx.setLineDash([]);
              u.ctx.beginPath();
              u.ctx.moveTo(x, u.bbox.top);
              u.ctx.lineTo(x, u.bbox.top + u.bbox.height);
              u.ctx.stroke();
            },
          ],
        },
        bands: props.band ? [{ series: [3, 2], fill: c.band }] : [],
      },
      [props.times, ...props.lines.map((l) => l.values)],
      box.current!,
    );
    const sized = new ResizeObserver(() => {
      const width = box.current?.clientWidth ?? 0;
      if (width > 0 && width !== plot.current?.width) plot.current?.setSize({ width, height: 120 });
    });
    sized.observe(box.current!);
    return () => {
      sized.disconnect();
      plot.current?.destroy();
    };
  }, [shape]);
  useEffect(() => {
    plot.current?.setData([props.times, ...props.lines.map((l) => l.values)]);
  }, [props.times, shape]);
  useEffect(() => {
    mark.current = props.mark;
    plot.current?.redraw(false);
  }, [props.mark, shape]);
  return (
    <figure class="plot">
      <figcaption>
        {props.title} <small>{props.unit}</small>
      </figcaption>
      <div ref={box} role="img" aria-label={`${props.title}, ${props.unit}, over ${props.over ?? "UTC"}: ${props.says}`} />
    </figure>
  );
}

/** Powers of ten, which alone have a line across. */
const tens = (_: uPlot, vs: number[]) => vs.map((v) => (Math.abs(Math.log10(v) - Math.round(Math.log10(v))) < 1e-9 ? v : null));

/** Figures beside an axis, with as many digits as tell them apart. */
function labels(vs: (number | null)[]): string[] {
  for (let digits = 3; ; digits++) {
    const out = vs.map((v) => (v === null ? "" : figure(v, digits)));
    const said = out.filter((t) => t);
    if (digits === 8 || new Set(said).size === said.length) return out;
  }
}

/** A range with room; never empty. */
function spread(a: number | null, b: number | null): [number, number] {
  const [low, high] = [a ?? 0, b ?? 1];
  const room = Math.max((high - low) * 0.08, Math.abs(high) * 1e-6, 1e-12);
  return [low - room, high + room];
}
