// Past runs: drives that the server keeps, and results of a study.
import { AlarmKind } from "../../client/web/leadline/v1/posterior_pb.js";
import { Status } from "../../client/web/leadline/v1/posterior_pb.js";
import { calls, soon } from "./api";
import { figure, millis, utcTime } from "./format";
import { alarms } from "./live";
import type { LonLat } from "./project";
import { alarmWords, statusWords } from "./worry";

/** What a run said at a time. What is not known is NaN. */
export type Moment = { ms: number; at: LonLat; located: boolean; status: string; radius95M: number; protectionM: number; errorM: number; truth?: LonLat };

export type Event = { ms: number; what: string };

export type Run = { name: string; map: string; limitM: number; moments: Moment[]; events: Event[]; /** Whether it was on roads, where its file says so. */ roads?: boolean; fingerprint?: string; /** What it was chosen by. */ key?: string };

/** As many moments as a run keeps: of each that go together the worst. */
const mostMoments = 4000;

/** How bad a moment is: by the error where it is known, by the radius else. */
export const badness = (m: Moment) => (Number.isFinite(m.errorM) ? m.errorM : m.radius95M);

function thinned(all: Moment[]): Moment[] {
  const every = Math.ceil(all.length / mostMoments);
  if (every <= 1) return all;
  const out: Moment[] = [];
  for (let i = 0; i < all.length; i += every) out.push(all.slice(i, i + every).reduce((a, b) => (badness(b) > badness(a) ? b : a)));
  return out;
}

/** The moment at a time: the last one before it, the first one at the earliest. */
export function momentAt(r: Run, ms: number): Moment {
  let [lo, hi] = [0, r.moments.length];
  while (hi - lo > 1) {
    const mid = (lo + hi) >> 1;
    if (r.moments[mid].ms <= ms) lo = mid;
    else hi = mid;
  }
  return r.moments[lo];
}

/** How long a stretch is that is looked at for the worst, ms. */
const stretchMs = 30_000;

/** The middle of the stretch of half a minute that is the worst on average. */
export function worst(r: Run): number {
  let [best, at, sum, from] = [-1, r.moments[0].ms, 0, 0];
  r.moments.forEach((m, i) => {
    sum += badness(m);
    while (m.ms - r.moments[from].ms > stretchMs) sum -= badness(r.moments[from++]);
    const mean = sum / (i - from + 1);
    if (mean > best) [best, at] = [mean, (m.ms + r.moments[from].ms) / 2];
  });
  return at;
}

/** The drive of a vehicle as the server keeps it, with its alarms. */
export async function ofVehicle(vehicle: string, drive = ""): Promise<Run> {
  const trail = await calls.trail({ vehicle, drive }, soon);
  const name = drive ? `${vehicle}, drive ${drive}` : vehicle;
  if (trail.points.length === 0) throw new Error(`Nothing has been kept of ${name}.`);
  const moments = trail.points.map((t) => ({
    ms: millis(t.time!),
    at: t.mean as LonLat,
    located: t.status === Status.LOCATED,
    status: statusWords[t.status],
    radius95M: t.radius95M,
    protectionM: NaN,
    errorM: NaN,
  }));
  const known = trail.alarms.length ? trail.alarms : [...alarms.peek().values()].filter((a) => a.vehicle === vehicle && a.drive === trail.drive);
  const events = known.filter((a) => a.alarm?.raised && a.alarm.kind !== AlarmKind.UNSPECIFIED).map((a) => ({ ms: millis(a.alarm!.raised!), what: alarmWords(a.alarm) }));
  return { name, map: trail.map, limitM: trail.alertLimitM, moments, events };
}

/** A result of a replay in the server's folder. */
export async function ofResult(name: string): Promise<Run> {
  const { result, moments, alarms } = await calls.readResult({ name }, { timeoutMs: 120_000 });
  const ms = (t?: { seconds: bigint; nanos: number }) => millis(t!);
  return {
    name, map: "", fingerprint: result!.mapFingerprint, limitM: result!.alertLimitM,
    moments: moments.map((m) => ({
      ms: ms(m.time), status: m.status,
      at: m.position as LonLat,
      located: m.status === "located",
      radius95M: m.radius95M, protectionM: m.protectionM ?? NaN, errorM: m.errorM ?? NaN,
      ...(m.truth && { truth: m.truth as LonLat }),
    })),
    events: alarms.map((a) => ({ ms: ms(a.raised), what: `${a.what}, ${a.cleared ? `until ${utcTime(a.cleared).slice(11)}` : "to the end"}` })),
  };
}

/** The largest table that is read. */
const largestTable = 64 << 20;

const wanted = ["time", "status", "lon_deg", "lat_deg", "truth_lon_deg", "truth_lat_deg", "error_m", "radius95_m", "protection_m"] as const;

const fieldsOf = (line: string) => [...line.matchAll(/("(?:[^"]|"")*"|[^,]*)(?:,|$)/g)].map((m) => (m[1].startsWith('"') ? m[1].slice(1, -1).replaceAll('""', '"') : m[1]));

/** Reads a track.csv, a piece at a time, so that the page goes on meanwhile. */
export async function ofTable(f: File): Promise<Run> {
  if (f.size > largestTable) throw new Error(`The file ${f.name} has ${figure(f.size / 2 ** 20)} MiB, and at most 64 are read: replay a part of the drive.`);
  const lines = (await f.text()).split("\n");
  const head = fieldsOf(lines[0].trim());
  const at = wanted.map((w) => head.indexOf(w));
  const missing = wanted.filter((_, i) => at[i] < 0);
  if (missing.length) throw new Error(`The file ${f.name} is no track.csv: there is no column ${missing[0]}. Give one that leadline replay --out wrote.`);
  const all: Moment[] = [];
  const events: Event[] = [];
  const edge = head.indexOf("edge");
  let roads = false;
  let before = "";
  for (let i = 1; i < lines.length; i++) {
    if (i % 5000 === 0) await new Promise((resolve) => setTimeout(resolve));
    if (!lines[i].trim()) continue;
    const fields = fieldsOf(lines[i].trim());
    const [time, status] = [fields[at[0]] ?? "", fields[at[1]] ?? ""];
    const n = at.map((k) => (fields[k] ? Number(fields[k]) : NaN));
    const ms = Date.parse(time.replace(/(\.\d{3})\d+/, "$1"));
    if (![ms, n[2], n[3], n[7]].every(Number.isFinite)) throw new Error(`The file ${f.name} has no time, place and radius in line ${i + 1}: make it again with leadline replay --out.`);
    if (all.length && ms < all[all.length - 1].ms) throw new Error(`The file ${f.name} goes back in time in line ${i + 1}: make it again with leadline replay --out.`);
    all.push({
      ms, status,
      at: { lon: n[2], lat: n[3] },
      located: status === "located",
      radius95M: n[7], protectionM: n[8], errorM: n[6],
      ...(Number.isFinite(n[4]) && { truth: { lon: n[4], lat: n[5] } }),
    });
    roads ||= !!fields[edge];
    if (status !== before && status === "contradicted") events.push({ ms, what: "Contradicted from here on" });
    before = status;
  }
  if (all.length === 0) throw new Error(`The file ${f.name} has no lines beside its first.`);
  return { name: f.name, map: "", limitM: 0, moments: thinned(all), events, roads };
}
