// Drawing a belief: a picture of a plane's cells, made once; roads' cells pixel by
// pixel, in as few pieces as the view can tell apart.
import { fromBinary } from "@bufbuild/protobuf";
import { BeliefSchema, type Belief, type BeliefGrid } from "../../client/web/leadline/v1/belief_pb.js";
import { beliefScale, binOf, bins, type RGB } from "./colour";
import { metres, type Ctx, type View } from "./paint";
import type { Frame, LonLat } from "./project";

/** A belief in a frame: what does not depend on the view. */
export type Placed = { roads?: RoadCells; grid?: { picture: HTMLCanvasElement; west: number; south: number; width: number; height: number; cellM: number } };

/** Cells of roads, stretch after stretch. */
type RoadCells = {
  /** Of each cell's middle, m. */
  e: Float64Array;
  n: Float64Array;
  bin: Int8Array;
  /** Where each stretch begins; at the end, how many cells there are. */
  starts: Uint32Array;
  /** Of each stretch's cells, m. */
  cellM: Float32Array;
};

/** Reads a belief as it comes over the wire. */
export const readBelief = (bytes: Uint8Array): Belief => fromBinary(BeliefSchema, bytes);

const binsOf = Int8Array.from({ length: 256 }, (_, byte) => binOf(byte));

/** Places a belief in a frame. */
export const placeBelief = (b: Belief, frame: Frame, dark: boolean): Placed => (b.grid ? placeGrid(b.grid, frame, dark) : placeRoads(b));

const picture = document.createElement("canvas");

function placeGrid(g: BeliefGrid, frame: Frame, dark: boolean): Placed {
  const scale = beliefScale(dark);
  const table = new Uint8ClampedArray(4 * 256);
  for (let byte = 1; byte < 256; byte++) {
    const bin = binsOf[byte];
    if (bin >= 0) table.set([...scale[bin], 110 + (120 * bin) / bins], 4 * byte);
  }
  const image = new ImageData(g.columns, g.rows);
  const [from, to] = [new Uint32Array(table.buffer), new Uint32Array(image.data.buffer)];
  const { mass, runs } = g;
  let [at, told] = [0, 0];
  for (let run = 0; run + 1 < runs.length; run += 2) {
    at += runs[run];
    for (const end = at + runs[run + 1]; at < end; ) to[at++] = from[mass[told++]];
  }
  if (picture.width !== g.columns || picture.height !== g.rows) [picture.width, picture.height] = [g.columns, g.rows];
  picture.getContext("2d")!.putImageData(image, 0, 0);
  const [first, last] = [frame.forward(g.first as LonLat), frame.forward(g.last as LonLat)];
  const h = g.cellM / 2;
  return { grid: { picture, west: first.e - h, south: first.n - h, width: last.e - first.e + g.cellM, height: last.n - first.n + g.cellM, cellM: g.cellM } };
}

function placeRoads(b: Belief): Placed {
  const count = b.stretches.reduce((sum, s) => sum + s.mass.length, 0);
  const c: RoadCells = {
    e: new Float64Array(count),
    n: new Float64Array(count),
    bin: new Int8Array(count),
    starts: new Uint32Array(b.stretches.length + 1),
    cellM: Float32Array.from(b.stretches, (s) => s.cellM),
  };
  let i = 0;
  b.stretches.forEach((s, k) => {
    let [e, n] = [0, 0];
    for (let j = 0; j < s.mass.length; j++, i++) {
      c.e[i] = (e += s.eastCm[j]) / 100;
      c.n[i] = (n += s.northCm[j]) / 100;
      c.bin[i] = binsOf[s.mass[j]];
    }
    c.starts[k + 1] = i;
  });
  return { roads: c };
}

/** The mass that is not drawn: cells that are not told, and those thinner than the scale. */
export function leftOut(b: Belief): number {
  const known = lefts.get(b);
  if (known !== undefined) return known;
  const count = new Uint32Array(256);
  for (const s of b.grid ? [b.grid] : b.stretches) for (let i = 0; i < s.mass.length; i++) count[s.mass[i]]++;
  const sum = count.reduce((sum, n, byte) => (byte && binsOf[byte] < 0 ? sum + n * b.peakMass * Math.exp((byte - 255) / 16) : sum), b.rest);
  lefts.set(b, sum);
  return sum;
}
const lefts = new WeakMap<Belief, number>();

/** Draws a belief, the densest on top. */
export function drawBelief(ctx: Ctx, v: View, b: Placed, dark: boolean) {
  const g = b.grid;
  if (g) {
    metres(ctx, v, () => {
      // Cells that are seen one by one keep their edges.
      ctx.imageSmoothingEnabled = g.cellM / v.mPerPx < 3;
      ctx.drawImage(g.picture, g.west, g.south, g.width, g.height);
    });
  }
  if (b.roads) drawRoads(ctx, v, b.roads, dark);
}

/** What is shorter than this is drawn as one with its neighbours, as dense as the densest, px. */
const pieceLeast = 2;

/** As far as a piece goes on beyond its ends, so that bends show no gaps, px. */
const overlap = 0.75;

const sheet = document.createElement("canvas");
let image: ImageData | undefined;

/**
 * Draws cells pixel by pixel: strokes of a canvas take ten times as long where each
 * cell has a colour of its own.
 */
function drawRoads(ctx: Ctx, v: View, c: RoadCells, dark: boolean) {
  const ratio = devicePixelRatio || 1;
  const [width, height] = [Math.round(v.width * ratio), Math.round(v.height * ratio)];
  if (width === 0 || height === 0) return;
  if (image?.width !== width || image.height !== height) {
    image = new ImageData(width, height);
    [sheet.width, sheet.height] = [width, height];
  }
  image.data.fill(0);
  const pieces = cut(v, c, ratio, width, height);
  const scale = beliefScale(dark);
  // The densest come last.
  const order = new Uint32Array(pieces.count);
  const next = new Uint32Array(bins + 1);
  for (let k = 0; k < pieces.count; k++) next[pieces.bin[k] + 1]++;
  for (let b = 0; b < bins; b++) next[b + 1] += next[b];
  for (let k = 0; k < pieces.count; k++) order[next[pieces.bin[k]]++] = k;
  for (const k of order) {
    const bin = pieces.bin[k];
    stroke(image, pieces.ends.subarray(4 * k, 4 * k + 4), ((5 + (5 * bin) / bins) * ratio) / 2, scale[bin]);
  }
  sheet.getContext("2d")!.putImageData(image, 0, 0);
  ctx.imageSmoothingEnabled = false;
  ctx.drawImage(sheet, 0, 0, width / ratio, height / ratio);
}

/** The pieces that are in view: from x, y to x, y in pixels of the screen each, and their bins. */
function cut(v: View, c: RoadCells, ratio: number, width: number, height: number) {
  const out = { count: 0, ends: new Float64Array(8 * c.bin.length), bin: new Uint8Array(2 * c.bin.length) };
  const margin = 6 * ratio;
  const by = ratio / v.mPerPx;
  const x = (i: number) => width / 2 + (c.e[i] - v.e) * by;
  const y = (i: number) => height / 2 - (c.n[i] - v.n) * by;
  const add = (x0: number, y0: number, x1: number, y1: number, bin: number) => {
    if (Math.max(x0, x1) < -margin || Math.min(x0, x1) > width + margin || Math.max(y0, y1) < -margin || Math.min(y0, y1) > height + margin) return;
    out.ends.set([x0, y0, x1, y1], 4 * out.count);
    out.bin[out.count++] = bin;
  };
  for (let k = 0; k + 1 < c.starts.length; k++) {
    const [begin, end] = [c.starts[k], c.starts[k + 1]];
    // Cells meet half-way between their middles; outermost ones end half a cell on.
    const meet = (i: number, of: (i: number) => number, alone: number) => {
      if (i > begin && i < end) return (of(i - 1) + of(i)) / 2;
      if (end - begin === 1) return of(begin) + (i === begin ? -alone : alone);
      return i === begin ? (3 * of(begin) - of(begin + 1)) / 2 : (3 * of(end - 1) - of(end - 2)) / 2;
    };
    const half = (c.cellM[k] * by) / 2;
    let [x0, y0] = [meet(begin, x, half), meet(begin, y, 0)];
    for (let i = begin; i < end; ) {
      const first = i;
      let bin = -1;
      let [x1, y1] = [x0, y0];
      do {
        bin = Math.max(bin, c.bin[i]);
        i++;
        [x1, y1] = [meet(i, x, half), meet(i, y, 0)];
      } while (i < end && Math.abs(x1 - x0) + Math.abs(y1 - y0) < pieceLeast * ratio);
      if (bin >= 0) {
        if (i - first > 1) add(x0, y0, x1, y1, bin);
        else {
          const [xm, ym] = [x(first), y(first)];
          add(x0, y0, xm, ym, bin);
          add(xm, ym, x1, y1, bin);
        }
      }
      [x0, y0] = [x1, y1];
    }
  }
  return out;
}

/** Paints a straight piece over what is there, with smooth sides. */
function stroke(image: ImageData, [x0, y0, x1, y1]: Float64Array, half: number, [red, green, blue]: RGB) {
  const long = Math.hypot(x1 - x0, y1 - y0);
  const [ux, uy] = long > 0 ? [(x1 - x0) / long, (y1 - y0) / long] : [1, 0];
  const reach = half + overlap + 1;
  const [left, right] = [Math.max(0, Math.floor(Math.min(x0, x1) - reach)), Math.min(image.width - 1, Math.ceil(Math.max(x0, x1) + reach))];
  const [top, bottom] = [Math.max(0, Math.floor(Math.min(y0, y1) - reach)), Math.min(image.height - 1, Math.ceil(Math.max(y0, y1) + reach))];
  const data = image.data;
  for (let py = top; py <= bottom; py++) {
    const dy = py + 0.5 - y0;
    for (let px = left; px <= right; px++) {
      const dx = px + 0.5 - x0;
      const along = dx * ux + dy * uy;
      if (along < -overlap || along > long + overlap) continue;
      const cover = half + 0.5 - Math.abs(dx * uy - dy * ux);
      if (cover <= 0) continue;
      const i = 4 * (py * image.width + px);
      if (cover >= 1 || data[i + 3] === 0) {
        data[i] = red;
        data[i + 1] = green;
        data[i + 2] = blue;
        data[i + 3] = Math.max(data[i + 3], 255 * Math.min(1, cover));
        continue;
      }
      data[i] += (red - data[i]) * cover;
      data[i + 1] += (green - data[i + 1]) * cover;
      data[i + 2] += (blue - data[i + 2]) * cover;
      data[i + 3] = Math.max(data[i + 3], 255 * cover);
    }
  }
}
