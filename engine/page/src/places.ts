// Places of the person's own: a GeoJSON file, read and kept in the browser alone.
import { computed, effect, signal } from "@preact/signals";
import { some } from "./format";
import type { EN, Frame, LonLat } from "./project";

/** What a file's feature is, as far as it is drawn and found by name. */
export type Place = { name: string; points: LonLat[]; lines: LonLat[][]; /** Outer rings with their holes. */ areas: LonLat[][][] };

/** The file's name and what is in it. */
export const places = signal<{ file: string; all: Place[] } | undefined>(undefined);
export const placesTrouble = signal("");
export const placesHidden = signal(false);

// Bounds: what a browser keeps for an origin, and what is redrawn without delay.
const mostBytes = 4 * 1024 * 1024;
const mostPlaces = 5000;
const mostPoints = 100_000;

class Wrong extends Error {}

/** Reads GeoJSON (RFC 7946); what is wrong is one sentence. */
export function readPlaces(text: string): Place[] {
  let data: unknown;
  try {
    data = JSON.parse(text);
  } catch {
    throw new Wrong("is no JSON: give GeoJSON, such as a FeatureCollection of points with names");
  }
  let count = 0;
  const is = (v: unknown): v is Record<string, unknown> => typeof v === "object" && v !== null && !Array.isArray(v);
  const list = (v: unknown, where: string): unknown[] => {
    if (!Array.isArray(v)) throw new Wrong(`has no list of coordinates in ${where}`);
    return v;
  };
  const point = (v: unknown, where: string): LonLat => {
    if (!Array.isArray(v) || typeof v[0] !== "number" || typeof v[1] !== "number") throw new Wrong(`has a place without longitude and latitude in ${where}`);
    const [lon, lat] = v as number[];
    if (!(Math.abs(lon) <= 180 && Math.abs(lat) <= 90)) throw new Wrong(`has ${lon}, ${lat} in ${where}, which are no degrees: give longitude and latitude in WGS 84`);
    if (++count > mostPoints) throw new Wrong(`has more than ${mostPoints} points: thin it out`);
    return { lon, lat };
  };
  const line = (v: unknown, least: number, where: string): LonLat[] => {
    const out = list(v, where).map((p) => point(p, where));
    if (out.length < least) throw new Wrong(`has ${some(out.length, "point")} in ${where}, where there must be ${least} or more`);
    return out;
  };
  const add = (g: unknown, to: Place, where: string, depth = 0): void => {
    if (g === null) return; // a feature without a place
    if (!is(g)) throw new Wrong(`has no geometry in ${where}`);
    const c = g.coordinates;
    const area = (v: unknown) => list(v, where).map((r) => line(r, 4, where));
    switch (g.type) {
      case "Point":
        return void to.points.push(point(c, where));
      case "MultiPoint":
        return void to.points.push(...line(c, 0, where));
      case "LineString":
        return void to.lines.push(line(c, 2, where));
      case "MultiLineString":
        return list(c, where).forEach((l) => to.lines.push(line(l, 2, where)));
      case "Polygon":
        return void to.areas.push(area(c));
      case "MultiPolygon":
        return list(c, where).forEach((a) => to.areas.push(area(a)));
      case "GeometryCollection":
        if (depth > 3) throw new Wrong(`has collections within collections in ${where}`);
        return list(g.geometries, where).forEach((x) => add(x, to, where, depth + 1));
    }
    throw new Wrong(`has ${typeof g.type === "string" ? `the geometry ${g.type.slice(0, 30)}` : "no geometry"} in ${where}: give points, lines and polygons`);
  };
  const features = is(data) && data.type === "FeatureCollection" ? list(data.features, "its features") : [data];
  if (features.length > mostPlaces) throw new Wrong(`has ${features.length} features, and at most ${mostPlaces} are taken`);
  const out: Place[] = [];
  features.forEach((f, i) => {
    const place: Place = { name: "", points: [], lines: [], areas: [] };
    const where = `feature ${i + 1}`;
    if (is(f) && f.type === "Feature") {
      const name = is(f.properties) ? f.properties.name : undefined;
      if (typeof name === "string" || typeof name === "number") place.name = String(name).trim().slice(0, 200);
      add(f.geometry, place, where);
    } else if (is(f)) add(f, place, where);
    else throw new Wrong("is no GeoJSON: give a FeatureCollection, a Feature or a geometry");
    if (place.points.length + place.lines.length + place.areas.length > 0) out.push(place);
  });
  if (out.length === 0) throw new Wrong("has no place in it");
  return out;
}

const key = "leadline-places";

/** Takes a file in place of the one before; a bad one changes nothing but what is said. */
export async function takePlaces(f: File | undefined) {
  if (!f) return;
  placesTrouble.value = "";
  try {
    if (f.size > mostBytes) throw new Wrong(`has ${(f.size / 1024 / 1024).toFixed(1)} MiB, and places at most ${mostBytes / 1024 / 1024}: thin it out`);
    const all = readPlaces(await f.text());
    places.value = { file: f.name, all };
    placesHidden.value = false;
  } catch (e) {
    placesTrouble.value = e instanceof Wrong ? `The file ${f.name} ${e.message}.` : `The file ${f.name} cannot be read.`;
  }
}

try {
  const text = localStorage.getItem(key);
  if (text) places.value = JSON.parse(text) as typeof places.value;
} catch {
  // There are none, then.
}
let first = true;
effect(() => {
  const p = places.value;
  if (first) return void (first = false);
  try {
    if (p) localStorage.setItem(key, JSON.stringify(p));
    else localStorage.removeItem(key);
  } catch {
    localStorage.removeItem(key); // too many to be kept: they hold until the page is closed
  }
});

/** Those that have a name. */
export const named = computed(() => (places.value?.all ?? []).filter((p) => p.name));

/** The place that is meant: by its name, or by the only one that begins with or has these words. */
export function find(words: string): Place | undefined {
  const w = words.trim().toLowerCase();
  if (!w) return undefined;
  const by = (test: (name: string) => boolean) => named.value.filter((p) => test(p.name.toLowerCase()));
  const same = by((n) => n === w);
  if (same.length) return same[0];
  for (const some of [by((n) => n.startsWith(w)), by((n) => n.includes(w))]) if (some.length === 1) return some[0];
  return undefined;
}

/** A point of a place that stands for it. */
export function middle(p: Place): LonLat {
  if (p.points.length) return p.points[0];
  if (p.lines.length) return p.lines[0][p.lines[0].length >> 1];
  const ring = p.areas[0][0].slice(1);
  return { lon: ring.reduce((s, q) => s + q.lon, 0) / ring.length, lat: ring.reduce((s, q) => s + q.lat, 0) / ring.length };
}

/** A place in a frame. */
export type Laid = { name: string; at: EN; points: EN[]; lines: EN[][]; areas: EN[][][] };

let laidOf: unknown;
let laidIn: Frame | undefined;
let laid: Laid[] = [];

/** The places in a frame, as far as the frame reaches. */
export function layPlaces(frame: Frame): Laid[] {
  const p = placesHidden.value ? undefined : places.value;
  if (laidOf === p && laidIn === frame) return laid;
  // Far off a frame has no sensible metres.
  const near = (q: LonLat) => Math.abs(q.lat - frame.origin.lat) < 20 && Math.abs(((q.lon - frame.origin.lon + 540) % 360) - 180) < 20;
  const lay = (ps: LonLat[]) => ps.map((q) => frame.forward(q));
  laid = (p?.all ?? [])
    .filter((x) => [...x.points, ...x.lines.flat(), ...x.areas.flat(2)].every(near))
    .map((x) => ({ name: x.name, at: frame.forward(middle(x)), points: lay(x.points), lines: x.lines.map(lay), areas: x.areas.map((a) => a.map(lay)) }));
  [laidOf, laidIn] = [p, frame];
  return laid;
}
