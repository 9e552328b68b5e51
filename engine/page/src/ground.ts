// What lies under the vehicles: drawings of maps, fetched as they are needed.
import { signal, type Signal } from "@preact/signals";
import type { DrawMapResponse } from "../../client/web/leadline/v1/draw_pb.js";
import { calls, sentence, soon } from "./api";
import { Frame, type EN } from "./project";

export type Box = { west: number; south: number; east: number; north: number };

/** A drawing, with its lines made ready. */
export type Sheet = {
  drawing: DrawMapResponse;
  box: Box;
  /** By importance, the least first. */
  paths: { weight: number; tunnel: boolean; path: Path2D }[];
  lines: { name: string; weight: number; points: EN[] }[];
};

/** A map as far as it is known here. */
export type Ground = { map: string; frame: Frame; fingerprint: string; whole: Sheet; fine?: Sheet; trouble: string };

const weights: Record<string, number> = {
  motorway: 3, trunk: 3, primary: 3, motorway_link: 2, trunk_link: 2, primary_link: 2, secondary: 2, tertiary: 2, secondary_link: 1, tertiary_link: 1,
};

export function sheet(drawing: DrawMapResponse): Sheet {
  const box = { west: Infinity, south: Infinity, east: -Infinity, north: -Infinity };
  const groups = new Map<string, Sheet["paths"][number]>();
  const lines = drawing.lines.map((l) => {
    const weight = weights[l.class] ?? 1;
    const key = `${weight}${l.tunnel}`;
    let group = groups.get(key);
    if (!group) groups.set(key, (group = { weight, tunnel: l.tunnel, path: new Path2D() }));
    let [e, n] = [0, 0];
    const points = l.eastCm.map((d, i) => {
      e += d;
      n += l.northCm[i];
      const p = { e: e / 100, n: n / 100 };
      if (i === 0) group.path.moveTo(p.e, p.n);
      else group.path.lineTo(p.e, p.n);
      widen(box, p);
      return p;
    });
    return { name: l.name, weight, points };
  });
  const r = drawing.relief;
  if (r) {
    widen(box, { e: r.westM, n: r.southM });
    widen(box, { e: r.westM + (r.columns - 1) * r.stepM, n: r.southM + (r.rows - 1) * r.stepM });
  }
  return { drawing, box, lines, paths: [...groups.values()].sort((a, b) => a.weight - b.weight) };
}

function widen(b: Box, p: EN) {
  b.west = Math.min(b.west, p.e);
  b.east = Math.max(b.east, p.e);
  b.south = Math.min(b.south, p.n);
  b.north = Math.max(b.north, p.n);
}

const grounds = new Map<string, Signal<Ground | undefined>>();
/** Why a map cannot be drawn, by its name. */
export const groundTrouble = signal<Record<string, string>>({});

/** The ground of a map; undefined while it is on its way. */
export function ground(map: string): Signal<Ground | undefined> {
  let s = grounds.get(map);
  if (!s) {
    grounds.set(map, (s = signal(undefined)));
    void fetchWhole(map, s);
  }
  return s;
}

async function fetchWhole(map: string, s: Signal<Ground | undefined>) {
  for (let pause = 500; ; pause = Math.min(2 * pause, 8000)) {
    try {
      // A thousandth of its size is enough to begin with.
      const d = (await calls.describeMap({ map }, soon)).map!;
      const high = (d.northEast!.lat! - d.southWest!.lat!) * 111e3;
      const wide = (d.northEast!.lon! - d.southWest!.lon!) * 111e3 * Math.cos((d.northEast!.lat! * Math.PI) / 180);
      const drawing = await calls.drawMap({ map, detailM: Math.max(high, wide) / 1000 }, { timeoutMs: 60_000 });
      const whole = sheet(drawing);
      s.value = { map, frame: new Frame({ lon: drawing.origin!.lon!, lat: drawing.origin!.lat! }), fingerprint: drawing.fingerprint, whole, trouble: "" };
      groundTrouble.value = { ...groundTrouble.value, [map]: "" };
      return;
    } catch (e) {
      groundTrouble.value = { ...groundTrouble.value, [map]: `The map ${map} cannot be drawn. ${sentence(e)}` };
      await new Promise((resolve) => setTimeout(resolve, pause));
    }
  }
}

let refining = "";

/** Fetches what a view shows more finely than is known, if it needs to be. */
export async function refine(map: string, view: Box, detailM: number) {
  const s = ground(map);
  const g = s.value;
  if (!g) return;
  const enough = (x: Sheet | undefined) => x && x.drawing.detailM <= 1.6 * detailM && inside(view, x === g.whole ? undefined : x.box);
  if (enough(g.whole) || enough(g.fine)) return;
  const [w, h] = [view.east - view.west, view.north - view.south];
  const box = { west: view.west - w / 3, east: view.east + w / 3, south: view.south - h / 3, north: view.north + h / 3 };
  const corners = [g.frame.inverse({ e: box.west, n: box.south }), g.frame.inverse({ e: box.east, n: box.north })];
  if (!corners.every((c) => Number.isFinite(c.lon) && Number.isFinite(c.lat))) return;
  const asked = JSON.stringify([map, box, detailM]);
  refining = asked;
  try {
    const drawing = await calls.drawMap({ map, southWest: corners[0], northEast: corners[1], detailM }, soon);
    if (refining !== asked || drawing.fingerprint !== g.fingerprint) return;
    s.value = { ...g, fine: { ...sheet(drawing), box } };
  } catch {
    // What there is stays.
  }
}

const inside = (v: Box, b: Box | undefined) => !b || (v.west >= b.west && v.east <= b.east && v.south >= b.south && v.north <= b.north);
